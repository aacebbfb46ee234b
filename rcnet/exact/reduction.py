"""A small model of a large passive network with the same behaviour at its outputs.

Congruence with the solutions at many real frequencies keeps the network passive and its poles real (A.
Odabasioglu, M. Celik, L. Pileggi, IEEE Trans. CAD 17(8):645-654, 1998); the frequencies lie evenly over the
logarithm of the whole span, where rational Krylov spaces converge geometrically for symmetric pencils (V.
Druskin, L. Knizhnerman, M. Zaslavsky, SIAM J. Sci. Comput. 31(5):3760-3780, 2009).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from .branches import Branches, Float
from .passive_modes import right_vectors
from .solver import Drive, solver_for
from .span import span_of

PER_DECADE = 4  # solutions per decade of the span, for each source and for each output
_MOST_NUMBERS = 60_000_000  # of node voltages held at once
_CUT = 1e-11  # a solution of which less than this share is new adds nothing
_ORTHOGONAL = 1e-14
_PASSES = 6


def reduced_system(
    network: Network, branches: Branches, of: Sequence[tuple[int, int]], sources: Sequence[str]
) -> tuple[Float, Float]:
    """Poles (terms,) and residues (sources, outputs, terms) of a model with the network's own responses.

    The caller compares it with the exact response. Raises UndecidedError where the network is too large to
    hold the solutions.
    """
    space = _energy_basis(branches, _solutions(network, branches, of, sources))
    stored = branches.across(space) * np.sqrt(branches.capacitance)[:, None]
    shapes = space @ right_vectors(np.linalg.qr(stored, mode="r"))
    across = branches.across(shapes)
    charge = (branches.capacitance[:, None] * across**2).sum(axis=0)
    power = (branches.conductance[:, None] * across**2).sum(axis=0)
    moving = charge > 1e-24 * charge.max(initial=0.0)
    shapes, rates, charge = shapes[:, moving], power[moving] / charge[moving], charge[moving]
    row = np.full(network.arrays().node_count, -1)
    row[branches.inner] = np.arange(len(branches.inner))
    padded = np.vstack([shapes, np.zeros((1, shapes.shape[1]))])
    a, b = row[np.array(of, dtype=np.int64).T]
    seen = padded[a] - padded[b]
    driven = np.array([_driven(network, branches, padded, rates, row, name) for name in sources])
    order = np.argsort(rates)
    return -rates[order], (driven[:, None, :] * (seen / charge))[..., order]


def _solutions(
    network: Network, branches: Branches, of: Sequence[tuple[int, int]], sources: Sequence[str]
) -> Float:
    """The inner voltages at real frequencies, fast ones first, for each source and for a current into each output."""
    span, solver = span_of(network), solver_for(network)
    decades = math.log10(span.high / span.low) + 2
    points = span.high * 10 / 10 ** np.linspace(0, decades, math.ceil(decades * PER_DECADE) + 1)
    columns = len(points) * (len(sources) + len(of))
    if columns * len(branches.inner) > _MOST_NUMBERS:
        raise UndecidedError(
            f"the network has {len(branches.inner)} inner nodes, too many for its response over time.",
        )
    nodes = network.arrays().node_count
    found = []
    for which in (*sources, *of):
        drive, currents = np.zeros(len(network), dtype=np.complex128), None
        if isinstance(which, str):
            drive[network.part_index(which)] = 1.0
        else:
            currents = np.zeros((nodes, len(points)))
            currents[which[0]] += 1.0
            currents[which[1]] -= 1.0
        blocks = [
            solver.solve(
                points[part], Drive(drive, None if currents is None else currents[:, part].copy())
            ).voltages[branches.inner]
            for part in _blocks(len(points), solver.block())
        ]
        found.append(np.hstack(blocks).real)
    # Side by side by frequency: the solutions at one frequency are of one kind.
    return np.stack(found, axis=2).reshape(len(branches.inner), -1)


def _blocks(count: int, size: int) -> list[slice]:
    return [slice(start, start + size) for start in range(0, count, size)]


def _energy_basis(branches: Branches, solutions: Float) -> Float:
    """A basis of the solutions whose columns dissipate one watt each and share none, faster modes first.

    Gram-Schmidt, repeated until nothing is left to take away; the currents are taken from the voltages anew
    each time, so that neither drifts from the other.
    """
    weight = np.sqrt(branches.conductance)

    def flow_of(shape: Float) -> Float:
        return np.asarray(branches.across(shape[:, None])[:, 0] * weight)

    forms, flows = np.empty(solutions.T.shape), np.empty((solutions.shape[1], len(weight)))
    count = 0
    for shape in solutions.T:
        flow = flow_of(shape)
        size = math.sqrt(float(flow @ flow))
        left = 1.0
        for _ in range(_PASSES):
            if size == 0:
                break
            shape, flow = shape / size, flow / size
            share = flows[:count] @ flow
            if np.abs(share).max(initial=0.0) < _ORTHOGONAL:
                break
            shape = shape - share @ forms[:count]
            flow = flow_of(shape)
            size = math.sqrt(float(flow @ flow))
            left *= size
            if left < _CUT:
                break
        if size > 0 and left >= _CUT and np.abs(flows[:count] @ flow).max(initial=0.0) < _ORTHOGONAL:
            forms[count], flows[count] = shape, flow
            count += 1
    return forms[:count].T


def _driven(
    network: Network,
    branches: Branches,
    padded: Float,
    rates: Float,
    row: npt.NDArray[np.int64],
    name: str,
) -> Float:
    source = network.sources[name]
    a, b = (int(row[network.node_index(node)]) for node in source.nodes)
    if source.kind == "I":
        return np.asarray(padded[b] - padded[a])
    level = fixed_potentials(network, name)[branches.held] * (branches.held >= 0)
    used = np.flatnonzero(level)
    shape = padded[branches.ends[used].max(axis=1)]
    direct = (branches.conductance * level)[used] @ shape
    return np.asarray(direct - rates * ((branches.capacitance * level)[used] @ shape))


def fixed_potentials(network: Network, name: str) -> Float:
    """(nodes,): the potentials of the nodes that voltage sources hold, the source `name` at one volt, others at zero."""
    stiff = solver_for(network).stiff
    assert stiff is not None
    unit = np.zeros(len(network))
    unit[network.part_index(name)] = 1.0
    potential = np.zeros((network.arrays().node_count, 1, 1))
    stiff.fill(potential, unit)
    return np.asarray(potential[:, 0, 0])
