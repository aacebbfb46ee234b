"""The exact response to a unit step, and the natural response of a network cut off from its sources."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Source
from ..errors import UndecidedError
from .branches import branches_between
from .decay import Decay
from .modes import MOST_NODES, ModalSystem, modal_system, step_source
from .passive_modes import passive_modes
from .span import span_of

Float = npt.NDArray[np.float64]
Pair = tuple[int, int]


def step_response(network: Network, of: Pair, source: str | None = None) -> Decay:
    """The output after a step of one volt or ampere at t = 0, from rest.

    source: by default the one that carries ac, else the one that has a waveform
    Raises UndecidedError where the output never settles.
    """
    name = source if source is not None else step_source(network)
    system = modal_system(network, [of], [name])
    _require_settling(system)
    moving = system.poles != 0
    return Decay(float(system.static[0, 0]), system.poles[moving], -system.weights[0, 0][moving])


def _require_settling(system: ModalSystem) -> None:
    if system.integrating.any():
        raise UndecidedError("the source charges nodes that nothing drains, so the output settles nowhere.")
    poles = system.poles[(np.abs(system.residues[0, 0]) > 0) & (system.poles != 0)]
    if (np.real(poles) >= 0).any():
        raise UndecidedError("the circuit is unstable: a natural mode does not die away.")


def disconnected(network: Network) -> Network:
    """The network with every independent source taken out; both its nodes stay, open.

    A voltage source of value zero that an F or H senses is a meter, not a source, and stays as the wire it
    is.
    """
    sensed = {part.senses for part in network.parts if part.senses}
    left = Network(network.title)
    for part in network.parts:
        if part.kind in "VI":
            source = network.sources[part.name]
            if part.name in sensed and source.waveform is None and not source.ac and not source.dc:
                left.add_source(Source(source.name, source.nodes))
            continue
        left.add_part(part)
    return left


def discharge(network: Network, part: str, voltages: dict[str, float]) -> Decay:
    """A capacitor's voltage after every source has been disconnected.

    voltages: of every capacitor at that moment, V
    Charge kept by capacitors that nothing drains is the sum's base. Raises UndecidedError for networks of
    more than R, C, V and I, and where a capacitor's own first node is asked of a network too large for its
    modes.
    """
    if any(other.kind not in "RCVI" for other in network.parts):
        raise UndecidedError("the discharge is computed for networks of resistors and capacitors only.")
    left = disconnected(network)
    # Nothing flows between parts of the network that are not joined: one node of each may be called ground.
    branches = branches_between(left, _one_each(left))
    if len(branches.inner) > MOST_NODES:
        raise UndecidedError(
            f"the network has more than {MOST_NODES} inner nodes, too many to list every mode."
        )
    found = passive_modes(branches, span_of(left).low)
    row = np.full(left.arrays().node_count, -1)
    row[branches.inner] = np.arange(len(branches.inner))
    padded = [np.vstack([shape, np.zeros((1, shape.shape[1]))]) for shape in found.shapes]

    def across(name: str) -> Float:
        a, b = (row[left.node_index(node)] for node in left.part(name).nodes)
        return np.asarray((padded[0][a] - padded[0][b]) + (padded[1][a] - padded[1][b]))

    charge = np.zeros(len(found.rates))
    for name, volts in voltages.items():
        charge += left.part(name).value * volts * across(name)
    weights = across(part) * charge / found.stored
    moving = found.rates > 0
    return Decay(float(weights[~moving].sum()), -found.rates[moving], weights[moving])


def _one_each(network: Network) -> list[int]:
    """One node of each connected piece of a network, ground where it is among them."""
    arrays = network.arrays()
    label = np.arange(arrays.node_count)
    ends = arrays.nodes[:, :2]
    import scipy.sparse
    import scipy.sparse.csgraph

    graph = scipy.sparse.coo_matrix(
        (np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(len(label), len(label))
    )
    count, piece = scipy.sparse.csgraph.connected_components(graph, directed=False)
    return [int(np.flatnonzero(piece == k)[0]) for k in range(count)]
