"""The natural modes of a network and what each contributes to an output."""

from __future__ import annotations

import math
import weakref
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, PartArrays
from ..errors import CircuitError, UndecidedError
from . import twofold
from .ac import dc_solvable, node_pair
from .branches import Branches, branches_of
from .contour import expanded, member_residues, pole_places
from .passive_modes import PassiveModes, passive_modes
from .reduction import fixed_potentials, reduced_modes
from .solver import Drive, require_solvable, solver_for

Complex = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]  # float64 where every pole is real, else complex128
Pair = tuple[int, int]
Driver = str | tuple[tuple[str, float], ...]  # a source, or several at once, each so many times its unit

MOST_NODES = 1000  # inner nodes of a passive network up to which every mode is listed
FULL_NODES = 300  # beyond, a model of fewer modes with the same response is faster and as good
_MOST_KEPT = 32  # systems of one network
_ROUNDING = 4e-15  # of the greatest voltage anywhere: what the exact response of a general network may lack
_AGREES = 1e-11  # of the greatest response: how far the sum over modes may lie from the exact response


@dataclass(frozen=True)
class Modes:
    """A transfer function as H(s) = direct + sum_k residues[k] / (s - poles[k]).

    poles: rad/s, (modes,), slowest first, float64 where all are real, else complex128
    residues: 1/s times the unit of the response, (modes,); a mode that does not reach the output has about 0
    direct: the response at infinite frequency
    """

    poles: Numbers
    residues: Numbers
    direct: float

    def response(self, s: npt.ArrayLike) -> Complex:
        """H at complex frequencies s, rad/s, any shape."""
        points = np.asarray(s, dtype=np.complex128)
        return np.asarray(self.direct + (self.residues / (points[..., None] - self.poles)).sum(axis=-1))


@dataclass(frozen=True)
class ModalSystem:
    """The transfer functions from sources to outputs as sums over terms, real parts meant:

    H(s) = direct + sum_k residues[k] / (s - poles[k])  (a term off the real axis stands for its conjugate
    too)

    poles: (terms,); residues: (sources, outputs, terms); real where all poles are
    static, direct: (sources, outputs), the responses at zero and at infinite frequency, no rounding of the
    sum in either; static leaves out terms with a pole at exactly 0
    """

    poles: Numbers
    residues: Numbers
    static: Float
    direct: Float

    @property
    def weights(self) -> Numbers:
        """Residues over -poles: what each term lacks of `static` just after a step; 0 for poles at 0."""
        moving = self.poles != 0
        return np.asarray(np.where(moving, self.residues, 0.0) / -np.where(moving, self.poles, 1.0))

    @property
    def integrating(self) -> npt.NDArray[np.bool_]:
        """(sources, outputs): True where a steady input makes the output grow for ever."""
        return np.asarray((self.residues[..., self.poles == 0] != 0).any(axis=-1))

    def at(self, s: Complex) -> Complex:
        """The sum at each s: (sources, outputs, points)."""
        above = 1 / (s - self.poles[:, None])
        if np.iscomplexobj(self.poles):
            paired = np.einsum("sot,tp->sop", self.residues, above)
            other = np.einsum("sot,tp->sop", np.conj(self.residues), 1 / (s - np.conj(self.poles)[:, None]))
            return np.asarray(self.direct[..., None] + (paired + other) / 2)
        return np.asarray(self.direct[..., None] + np.einsum("sot,tp->sop", self.residues, above))


def modes(network: Network, of: str, source: str | None = None) -> Modes:
    """The poles, residues and direct term of one output.

    of: a node or a pair `"a b"`; source: the source the response is per unit of, by default the one that
    carries ac, else the one that has a waveform
    Raises UndecidedError where poles coincide so that residues do not exist, or beyond the stated sizes.
    """
    pair = node_pair(network, of)
    driving = source if source is not None else step_source(network)
    if driving not in network.sources:
        raise CircuitError(f"there is no source called {driving!r}.", remedy="Name one of the sources.")
    branches = branches_of(network)
    if branches is not None and len(branches.inner) > MOST_NODES:
        raise _too_many()
    system = modal_system(network, [pair], [driving], every=True)
    poles, residues = system.poles, system.residues[0, 0]
    if np.iscomplexobj(poles):
        poles, residues = _listed(network, pair, driving)
    order = np.lexsort((np.imag(poles), np.abs(poles), np.abs(np.real(poles))))
    return Modes(poles[order], residues[order], float(system.direct[0, 0]))


def _too_many() -> UndecidedError:
    return UndecidedError(f"the network has more than {MOST_NODES} inner nodes, too many to list every mode.")


def _listed(network: Network, pair: Pair, source: str) -> tuple[Numbers, Numbers]:
    """Every pole of a general network with its residue, conjugates too; none stands for several."""
    poles: list[complex] = []
    residues: list[complex] = []

    def response(s: Complex) -> Complex:
        return sampled(network, [pair], [source], s)

    for place in pole_places(network):
        if place.count == 1 or place.pole == 0:
            found, shares = expanded((place,), response)
            shares = shares[0, 0] / (2 if place.pole.imag else 1)
        elif place.members:
            found, shares = np.array(place.members), member_residues(place, response)[0, 0]
        else:
            raise UndecidedError(
                f"{place.count} poles lie together near {place.pole.real:.6g} rad/s,"
                " so they have no residues of their own.",
                remedy="Its response over time and its measures are computed all the same.",
            )
        poles.extend(found.tolist())
        residues.extend(shares.tolist())
        if place.centre.imag:
            poles.extend(np.conj(found).tolist())
            residues.extend(np.conj(shares).tolist())
    listed, shares = np.array(poles), np.array(residues)
    return (listed, shares) if listed.imag.any() else (listed.real, shares.real)


def step_source(network: Network) -> str:
    """The source a response over time is per unit of: the one with ac, else the one with a waveform."""
    for names in (
        [name for name, source in network.sources.items() if source.ac],
        [name for name, source in network.sources.items() if source.waveform is not None],
    ):
        if len(names) == 1:
            return names[0]
        if names:
            raise UndecidedError(f"{len(names)} sources drive the network: {', '.join(names[:8])}.")
    raise CircuitError("no source carries ac or a waveform.", remedy="Give one source ac = 1.")


def natural_rates(network: Network) -> Complex:
    """The natural frequencies, rad/s, of the network with its sources dead, poles taken together as often."""
    require_solvable(network)
    branches = branches_of(network)
    if branches is None:
        return np.array(
            [place.pole for place in pole_places(network) for _ in range(place.count)], dtype=complex
        )
    if len(branches.inner) > MOST_NODES:
        raise UndecidedError(
            f"the network has more than {MOST_NODES} inner nodes, too many to list every mode."
        )
    return np.asarray(0.0 - passive_modes(branches, solver_for(network).span.low).rates, dtype=np.complex128)


def drive_of(network: Network, source: Driver) -> Complex:
    """(parts,): one unit of a source, or of several at once, in their rows; zero elsewhere."""
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, times in ((source, 1.0),) if isinstance(source, str) else source:
        drive[network.part_index(name)] = times
    return drive


def modal_system(
    network: Network, of: Sequence[Pair], sources: Sequence[Driver], *, every: bool = False
) -> ModalSystem:
    """The transfer functions from each source to each output, checked against the exact response.

    sources: names, or several sources that act as one with the given multiples of their units
    every: with all modes, also in a large network, where fewer would give the same responses
    Raises UnsolvableError, and UndecidedError where the modes cannot be had to the accuracy promised.
    """
    kept = _kept(network)
    key = (tuple(of), tuple(sources), every)
    if key not in kept:
        if len(kept) >= _MOST_KEPT:
            kept.clear()
        kept[key] = _built(network, of, sources, every=every)
    return kept[key]


Key = tuple[tuple[Pair, ...], tuple[Driver, ...], bool]
_systems: weakref.WeakKeyDictionary[Network, tuple[PartArrays, dict[Key, ModalSystem]]] = (
    weakref.WeakKeyDictionary()
)


def _kept(network: Network) -> dict[Key, ModalSystem]:
    """What has been computed for a network while it is unchanged; a unit of each source is meant."""
    arrays = network.arrays()
    entry = _systems.get(network)
    if entry is None or entry[0] is not arrays:
        entry = (arrays, {})
        _systems[network] = entry
    return entry[1]


def _built(network: Network, of: Sequence[Pair], sources: Sequence[Driver], *, every: bool) -> ModalSystem:
    require_solvable(network)
    branches = branches_of(network)
    poles: Numbers
    residues: Numbers
    if branches is None:
        poles, residues = expanded(pole_places(network), lambda s: sampled(network, of, sources, s))
    elif len(branches.inner) > FULL_NODES and not every:
        found = reduced_modes(network, branches, of, [drive_of(network, each) for each in sources])
        poles, residues = _passive_residues(network, branches, found, of, sources)
    else:
        found = passive_modes(branches, solver_for(network).span.low)
        poles, residues = _passive_residues(network, branches, found, of, sources)
    if np.iscomplexobj(poles) and not poles.imag.any():
        poles, residues = poles.real, residues.real
    # A passive network has no pole at exactly zero unless charge cannot drain.
    drained = bool(poles.all()) if branches is not None else dc_solvable(network)
    static, direct = _limits(network, of, sources, 0.0 if drained else solver_for(network).span.far_below)
    system = ModalSystem(poles, residues, static, direct)
    integrating = system.integrating
    if integrating.any():
        regular = direct + system.weights.real.sum(axis=-1)
        system = ModalSystem(poles, residues, np.where(integrating, regular, static), direct)
    system = _checked(network, of, sources, system)
    if every:
        return system
    # A mode no source reaches or no output shows may grow as it likes.
    kept = (system.residues != 0).any(axis=(0, 1))
    return ModalSystem(poles[kept], system.residues[..., kept], system.static, system.direct)


def sampled(network: Network, of: Sequence[Pair], sources: Sequence[Driver], s: Complex) -> Complex:
    """The exact responses at any s: (sources, outputs, points)."""
    return _differences(_voltages(network, of, sources, s), of)


def _voltages(network: Network, of: Sequence[Pair], sources: Sequence[Driver], s: Numbers) -> Numbers:
    solver = solver_for(network)
    everything = list(range(network.arrays().node_count))
    wanted = sorted({node for pair in of for node in pair}) if solver.eliminates else everything
    rows = []
    for name in sources:
        drive = drive_of(network, name)
        block = solver.block()
        blocks = [
            solver.solve(s[start : start + block], Drive(drive), wanted).voltages
            for start in range(0, len(s), block)
        ]
        rows.append(np.hstack(blocks) if len(blocks) > 1 else blocks[0])
    return np.array(rows)


def _gross(network: Network, of: Sequence[Pair], source: Driver, s: Float) -> Float:
    """About what several sources would do if none could cancel another, (outputs, points), s real."""
    drive, arrays = np.abs(drive_of(network, source)), network.arrays()
    currents = np.zeros((arrays.node_count, len(s)))
    for row in np.flatnonzero((drive != 0) & (arrays.kinds == ord("I"))).tolist():
        currents[arrays.nodes[row, :2]] += drive[row].real
        drive[row] = 0.0
    voltages = np.abs(solver_for(network).solve(s, Drive(drive, currents)).voltages)
    a, b = np.array(of, dtype=np.int64).T
    return np.asarray(voltages[a] + voltages[b])


def _differences(voltages: Numbers, of: Sequence[Pair]) -> Numbers:
    a, b = np.array(of, dtype=np.int64).T
    return np.asarray(voltages[:, a] - voltages[:, b])


def _limits(
    network: Network, of: Sequence[Pair], sources: Sequence[Driver], low: float
) -> tuple[Float, Float]:
    """The responses at `low` and at infinite frequency, zero where no more than rounding is left of a
    difference.
    """
    if not solver_for(network).eliminates and not all(isinstance(source, str) for source in sources):
        # So far out, pivoting keeps its digits only where a fixed node is at one volt or at none.
        drives = np.array([drive_of(network, source).real for source in sources])
        used = np.flatnonzero(drives.any(axis=0))
        names = [network.names[row] for row in used.tolist()]
        static, direct = _limits(network, of, names, low)
        return drives[:, used] @ static, drives[:, used] @ direct
    far = solver_for(network).span.far_above
    points = np.array([low, far, min(far * 1e8, 1e158)])
    voltages = np.real(_voltages(network, of, sources, points))
    values = _differences(voltages, of)
    a, b = np.array(of, dtype=np.int64).T
    size = np.minimum(np.abs(voltages[:, a]), np.abs(voltages[:, b]))
    if not solver_for(network).eliminates:
        size = np.maximum(size, np.abs(voltages).max(axis=1, keepdims=True))
    for number, source in enumerate(sources):
        if not isinstance(source, str):  # several may cancel one another, and leave what rounding leaves
            size[number] = np.maximum(size[number], _gross(network, of, source, points))
    values = np.where(np.abs(values) <= 64 * np.finfo(float).eps * size, 0.0, values)
    near, further = np.abs(values[..., 1]), np.abs(values[..., 2])
    if (further > 1e4 * near).any():
        raise UndecidedError(
            "the output follows the rate of change of a source, so an edge would make it infinite."
        )
    return values[..., 0], np.where(further < 1e-4 * near, 0.0, values[..., 1])


def _passive_residues(
    network: Network, branches: Branches, found: PassiveModes, of: Sequence[Pair], sources: Sequence[Driver]
) -> tuple[Float, Float]:
    row = np.full(network.arrays().node_count, -1)
    row[branches.inner] = np.arange(len(branches.inner))
    a, b = row[np.array(of, dtype=np.int64).T]
    high, low = twofold.subtract(_rows(found.shapes, a), _rows(found.shapes, b))
    seen = high + low
    driven = np.array([_driven(network, branches, found, row, name) for name in sources])
    return 0.0 - found.rates, driven[:, None, :] * (seen / found.stored)


def _rows(shapes: twofold.Twofold, rows: npt.NDArray[np.int64]) -> twofold.Twofold:
    """Rows of the shapes; row -1, a fixed node, does not move."""
    if not len(shapes[0]):  # every node is fixed
        nothing = np.zeros((len(rows), shapes[0].shape[1]))
        return nothing, nothing
    still = (rows >= 0)[:, None]
    return np.where(still, shapes[0][rows], 0.0), np.where(still, shapes[1][rows], 0.0)


def _driven(
    network: Network, branches: Branches, found: PassiveModes, row: npt.NDArray[np.int64], source: Driver
) -> Float:
    """v_k . (b_G - rate_k b_C + j): how strongly a unit of a source drives each mode."""
    drive, arrays = drive_of(network, source).real, network.arrays()
    total = np.zeros(found.shapes[0].shape[1])
    for part in np.flatnonzero((drive != 0) & (arrays.kinds == ord("I"))).tolist():
        a, b = row[arrays.nodes[part, :2]]
        high, low = twofold.subtract(_rows(found.shapes, np.array([b])), _rows(found.shapes, np.array([a])))
        total += drive[part] * (high + low)[0]
    level = fixed_potentials(network, drive)[branches.held] * (branches.held >= 0)
    used = np.flatnonzero(level)
    if not len(used):
        return total
    capacitive = branches.capacitance[used, None] > 0
    flow = _rows(found.shapes, branches.ends[used].max(axis=1))
    flow = twofold.times(flow, ((branches.conductance + branches.capacitance) * level)[used, None])
    if capacitive.any():
        flow = twofold.times(flow, np.where(capacitive, -found.rates, 1.0))
    high, low = twofold.sum_rows(flow)
    return np.asarray(total + (high + low))


def _checked(
    network: Network, of: Sequence[Pair], sources: Sequence[Driver], system: ModalSystem
) -> ModalSystem:
    """The system, compared with the exact response at frequencies over the whole span.

    What rounding left of residues at outputs a source does not reach is taken away. Raises UndecidedError
    where the two differ.
    """
    moving = np.abs(system.poles[system.poles != 0])
    if not len(moving) or not len(sources) or not len(of):
        return system
    low, high = moving.min() / 11, moving.max() * 13  # no point falls on an undamped pole
    count = min(60, max(5, math.ceil(2 * math.log10(high / low)) + 1))
    s = 1j * low * (high / low) ** np.linspace(0.0, 1.0, count)
    voltages = _voltages(network, of, sources, s)
    exact = _differences(voltages, of)
    reached = (exact != 0).any(axis=-1) | (system.static != 0) | (system.direct != 0)
    residues = np.where(reached[..., None], system.residues, 0.0)
    system = ModalSystem(system.poles, residues, system.static, system.direct)
    error = np.abs(system.at(s) - exact).max(axis=-1)
    # A difference of nearly equal voltages has fewer digits in the exact response than in the modes.
    a, b = np.array(of, dtype=np.int64).T
    rounding = 1e-14 * np.minimum(np.abs(voltages[:, a]), np.abs(voltages[:, b])).max(axis=-1)
    if not solver_for(network).eliminates:  # pivoting leaves rounding of the greatest unknown
        rounding = rounding + _ROUNDING * np.abs(voltages).max(axis=(1, 2))[:, None]
    for number, source in enumerate(sources):
        if not isinstance(source, str):
            rounding[number] = rounding[number] + 1e-14 * _gross(network, of, source, np.abs(s)).max(axis=-1)
    size = np.maximum(np.abs(exact).max(axis=-1), np.abs(system.static))
    worst = error > _AGREES * size + rounding
    if worst.any():
        share = float((error / np.where(size > 0, size, 1.0)).max())
        raise UndecidedError(
            f"the natural modes give the response only to {share:.1e} of its greatest value;"
            f" {_AGREES:.0e} is asked.",
        )
    return system
