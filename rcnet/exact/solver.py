"""Choosing the way to solve a network from its topology, and solving it for any drive at any s."""

from __future__ import annotations

import weakref
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, PartArrays, explain, troubles
from ..errors import UnsolvableError
from . import large, nodal
from .elimination import Factors, Pattern, analyse, eliminate, substitute
from .nodal import Numbers
from .span import span_of
from .windings import contradiction

# A pass of elimination is a Python loop over nodes; beyond this many products the sparse factorisation wins.
_MOST_WORK = 1_500_000
_BLOCK_BYTES = 64 * 1024 * 1024
_LOOP_GAIN_ONE = 1e14  # condition number from which on no digit of an answer can be trusted


@dataclass(frozen=True)
class Drive:
    """What drives the network.

    sources: complex (parts,): the value of each independent source in its row, zero elsewhere
    currents: (nodes, block) amperes put into each node from outside, or None
    """

    sources: npt.NDArray[np.complex128]
    currents: Numbers | None = None


@dataclass(frozen=True)
class Solution:
    """What a network does at each s of a block.

    voltages: (nodes, block), volts, rows as in `Network.nodes`
    source_currents: (parts, block), amperes, or None
    A source's current flows from its first node through it to its second (a battery that delivers shows a
    negative one). Rows not asked for, and rows of parts that are no voltage sources, are undefined.
    """

    voltages: Numbers
    source_currents: Numbers | None


class Solver:
    """Solves one network. Made by `solver_for`, which keeps it as long as the network is unchanged."""

    def __init__(self, network: Network) -> None:
        # The table of solvers must not keep a network alive.
        self._network = weakref.ref(network)
        self.arrays = network.arrays()
        self.span = span_of(network)
        self.middle = self.span.middle
        self.stiff = _stiff_tree(network, self.arrays)
        codes = self.arrays.kinds
        self.admittance_rows = np.flatnonzero((codes == ord("R")) | (codes == ord("C")))
        self.is_resistor = codes[self.admittance_rows] == ord("R")

    @cached_property
    def pattern(self) -> Pattern | None:
        """How to eliminate the inner nodes one by one; None where the network does not allow it."""
        if self.stiff is None:
            return None
        ends = self.arrays.nodes[self.admittance_rows, :2]
        return analyse(self.arrays.node_count, ends, self.stiff.nodes, _MOST_WORK)

    @cached_property
    def kernel(self) -> large.LargeKernel | None:
        """The compiled kernel, loaded at first use; None without numba or where it does not apply."""
        if self.stiff is None:
            return None
        rows, arrays = self.admittance_rows, self.arrays
        ends, values = arrays.nodes[rows, :2], arrays.values[rows]
        return large.kernel_for(arrays.node_count, ends, self.is_resistor, values, self.stiff.nodes)

    @cached_property
    def _size(self) -> tuple[int, int]:
        """The inner nodes, and the admittances between them."""
        free = np.ones(self.arrays.node_count, dtype=bool)
        free[list(self.stiff.nodes if self.stiff is not None else ())] = False
        ends = self.arrays.nodes[self.admittance_rows, :2]
        return int(free.sum()), int((free[ends].all(axis=1) & (ends[:, 0] != ends[:, 1])).sum())

    def _pays(self, points: int) -> bool:
        few = self.stiff is not None and len(self.stiff.controlled) < large.MOST_COLUMNS
        return few and large.pays(*self._size, points) and self.kernel is not None

    @property
    def network(self) -> Network:
        """The network this solver was made for; whoever solves must hold on to it."""
        network = self._network()
        assert network is not None
        return network

    @property
    def eliminates(self) -> bool:
        """True where the subtraction-free way applies."""
        return self._pays(1) or self.pattern is not None

    def solve(
        self,
        s: Numbers,
        drive: Drive,
        wanted: Sequence[int] | None = None,
        values: npt.NDArray[np.float64] | None = None,
        currents_too: bool = False,
    ) -> Solution:
        """Voltages of the `wanted` nodes (all where None) at each s, rad/s, complex or real.

        values: (parts,) or (parts, block): other part values, one column for each s. The topology must
            allow a solution (`require_solvable`)
        Raises UnsolvableError where controlled sources make the equations singular.
        """
        # An R = 0 or a loop of gain one shows as a division by zero; it is caught by looking at the result.
        with np.errstate(all="ignore"):
            if not currents_too and self._compiles(s, values):
                chosen = list(range(self.arrays.node_count)) if wanted is None else list(wanted)
                found = self._compiled(s, drive, chosen, values)
                solution = Solution(np.empty((self.arrays.node_count, len(s)), found.dtype), None)
                solution.voltages[chosen] = found
            elif self.pattern is None:
                solution = self._nodal(s, drive, values)
            else:
                solution = self._eliminated(s, drive, wanted, values, currents_too)
        rows = slice(None) if wanted is None else list(wanted)
        if not np.isfinite(solution.voltages[rows]).all():
            raise nodal.singular(self._controlled)
        return solution

    def voltages_of(
        self,
        s: Numbers,
        drive: Drive,
        wanted: Sequence[int],
        values: npt.NDArray[np.float64] | None = None,
    ) -> Numbers:
        """Voltages of the `wanted` nodes alone, (wanted, points), in blocks where memory asks for it.

        values: (parts,), other part values, or None. For drives without currents. Errors as for `solve`.
        """
        if self._compiles(s, values):
            with np.errstate(all="ignore"):
                answer = self._compiled(s, drive, wanted, values)
            if not np.isfinite(answer).all():
                raise nodal.singular(self._controlled)
            return answer
        answer = np.empty((len(wanted), len(s)), dtype=np.complex128)
        step = self.block()
        for start in range(0, len(s), step):
            part = slice(start, start + step)
            answer[:, part] = self.solve(s[part], drive, wanted, values).voltages[list(wanted)]
        return answer

    def sample_voltages(
        self,
        s: Numbers,
        drive: Drive,
        wanted: Sequence[int],
        values: npt.NDArray[np.float64],
        samples: int | None = None,
        out: Numbers | None = None,
    ) -> Numbers:
        """Voltages of the `wanted` nodes for many samples of part values, (wanted, samples, points).

        values: (parts, samples); samples: how many there are in all, where these are only some of them
        out: where the voltages go, complex, or None for an array of its own
        """
        count, points = values.shape[1], len(s)
        answer = np.empty((len(wanted), count, points), dtype=np.complex128) if out is None else out
        if self._compiles(s, None) or self.pattern is None:
            for k in range(count):
                answer[:, k] = self.voltages_of(s, drive, wanted, values[:, k])
            return answer
        if self._samples_pay(s, values, samples or count):
            with np.errstate(all="ignore"):
                if not self._compiled_samples(s, drive, wanted, values, answer):
                    raise nodal.singular(self._controlled)
            return answer
        step = max(1, self.block() // max(points, 1))
        for start in range(0, count, step):
            part = values[:, start : start + step]
            columns = np.repeat(part, points, axis=1)
            solved = self.solve(np.tile(s, part.shape[1]), drive, wanted, columns).voltages[list(wanted)]
            answer[:, start : start + step] = solved.reshape(len(wanted), -1, points)
        return answer

    def block(self) -> int:
        """How many s to solve at once so that memory stays bounded."""
        if self._pays(1):
            return max(1, _BLOCK_BYTES // (16 * self.arrays.node_count))
        if self.pattern is None:
            return 1 << 16
        rows = 2 * len(self.pattern.slot_ends) + (1 + len(self.stiff_columns)) * self.arrays.node_count
        return max(1, _BLOCK_BYTES // (16 * max(rows, 1)))

    @property
    def stiff_columns(self) -> tuple[int, ...]:
        """The rows of the E sources, each a column of its own in the elimination."""
        return self.stiff.controlled if self.stiff is not None else ()

    @property
    def _controlled(self) -> tuple[str, ...]:
        return nodal.culprits(self.network)

    # -- general networks

    def _nodal(self, s: Numbers, drive: Drive, values: npt.NDArray[np.float64] | None) -> Solution:
        if values is not None and values.ndim == 2:
            return _side_by_side(
                self._nodal(s[k : k + 1], _column(drive, k), np.ascontiguousarray(values[:, k]))
                for k in range(len(s))
            )
        above = np.abs(s) > self.middle
        if above.any() and not above.all():
            return self._split(s, drive, values, above)
        eqs = nodal.equations(self.network, values, high=bool(above.any()))
        rhs = nodal.right_hand_side(self.network, eqs, drive.sources, drive.currents, len(s))
        answer = nodal.solve(eqs, s, rhs)
        voltages = np.vstack([np.zeros((1, len(s)), answer.dtype), answer[: eqs.node_count - 1]])
        currents_of = np.zeros((len(self.arrays.kinds), len(s)), answer.dtype)
        currents_of[list(eqs.branch_of)] = eqs.currents(answer)
        return Solution(voltages, currents_of)

    def _split(
        self, s: Numbers, drive: Drive, values: npt.NDArray[np.float64] | None, above: npt.NDArray[np.bool_]
    ) -> Solution:
        """The points below the middle of the span, then those above, put back in order."""
        groups = [np.flatnonzero(~above), np.flatnonzero(above)]
        joined = _side_by_side(self._nodal(s[group], _column(drive, group), values) for group in groups)
        back = np.argsort(np.concatenate(groups))
        assert joined.source_currents is not None
        return Solution(joined.voltages[:, back], joined.source_currents[:, back])

    # -- passive networks between fixed potentials

    def factors(self, s: Numbers, values: npt.NDArray[np.float64] | None = None) -> Factors:
        """The inner nodes eliminated at each s (passive networks between fixed potentials only)."""
        assert self.pattern is not None
        rows = self.admittance_rows
        numbers = (self.arrays.values if values is None else values)[rows]
        if numbers.ndim == 1:
            numbers = numbers[:, None]
        resistors = self.is_resistor[:, None]
        conductance = np.where(resistors, 1.0 / numbers, 0.0)
        capacitance = np.where(resistors, 0.0, numbers)
        return eliminate(self.pattern, conductance + capacitance * s)

    def _eliminated(
        self,
        s: Numbers,
        drive: Drive,
        wanted: Sequence[int] | None,
        values: npt.NDArray[np.float64] | None,
        currents_too: bool,
    ) -> Solution:
        assert self.stiff is not None
        factors = self.factors(s, values)
        stiff, count = self.stiff, self.arrays.node_count
        dtype = np.result_type(s.dtype, np.complex128 if drive.sources.imag.any() else np.float64)
        if drive.currents is not None:
            dtype = np.result_type(dtype, drive.currents.dtype)
        gains = self._gains(values)
        controls = self.arrays.nodes[list(stiff.controlled)][:, 2:4]
        seen = range(count) if wanted is None else [*wanted, *controls.ravel().tolist()]
        columns = np.zeros((count, 1 + len(stiff.controlled), len(s)), dtype=dtype)
        stiff.fill(columns, drive.sources if dtype == np.complex128 else drive.sources.real)
        inflow = self._inflow(drive, columns.shape, dtype)
        substitute(factors, columns, inflow, seen)
        voltages, arriving = columns[:, 0], None if inflow is None else inflow[:, 0]
        if stiff.controlled:
            weights = _closure(columns, controls, gains)
            if weights is None:
                raise nodal.singular(self._controlled)
            voltages = np.einsum("ncs,cs->ns", columns, weights)
            arriving = None if inflow is None else np.einsum("ncs,cs->ns", inflow, weights)
        if not currents_too:
            return Solution(voltages, None)
        return Solution(voltages, self._source_currents(factors, voltages, arriving))

    def _compiles(self, s: Numbers, values: npt.NDArray[np.float64] | None) -> bool:
        """True if the compiled kernel is to answer."""
        if (values is not None and values.ndim == 2) or not self._pays(len(s)):
            return False
        extent = self._extent if values is None else self._extent_of(values)
        return large.in_range(extent, s)

    @cached_property
    def _extent(self) -> large.Extent:
        return self._extent_of(self.arrays.values)

    def _extent_of(self, values: npt.NDArray[np.float64]) -> large.Extent:
        return large.extent(self.is_resistor, values[self.admittance_rows])

    def _compiled(
        self, s: Numbers, drive: Drive, wanted: Sequence[int], values: npt.NDArray[np.float64] | None
    ) -> Numbers:
        assert self.stiff is not None and self.kernel is not None
        controls = self.arrays.nodes[list(self.stiff_columns)][:, 2:4]
        numbers = None if values is None else values[self.admittance_rows]
        seen, back = np.unique([*wanted, *controls.ravel().tolist()], return_inverse=True)
        potentials, injected = self._driven(drive)
        columns = self.kernel.solve(
            s.astype(np.complex128), potentials, injected, drive.currents, seen.tolist(), numbers
        )[back]
        found = self._closed(columns, len(wanted), self._gains(values))
        given = np.result_type(s, np.float64 if drive.currents is None else drive.currents)
        return found if given == np.complex128 or drive.sources.imag.any() else found.real

    def _driven(self, drive: Drive) -> tuple[npt.NDArray[np.complex128], dict[int, complex]]:
        """The fixed nodes' potentials, (nodes, 1 + E sources), and the amperes put into each node."""
        assert self.stiff is not None
        potentials = np.zeros((self.arrays.node_count, 1 + len(self.stiff_columns), 1), dtype=np.complex128)
        self.stiff.fill(potentials, drive.sources)
        injected: dict[int, complex] = {}
        for row in np.flatnonzero((self.arrays.kinds == ord("I")) & (drive.sources != 0)).tolist():
            for node, sign in zip(self.arrays.nodes[row, :2].tolist(), (-1, 1), strict=True):
                injected[node] = injected.get(node, 0) + sign * complex(drive.sources[row])
        return potentials[:, :, 0], injected

    def _closed(self, columns: Numbers, wanted: int, gains: Numbers) -> Numbers:
        """The voltages from columns (wanted and controls, 1 + E sources, points)."""
        controls = wanted + np.arange(2 * len(self.stiff_columns)).reshape(-1, 2)
        weights = _closure(columns, controls, gains)
        if weights is None:
            raise nodal.singular(self._controlled)
        return np.asarray(np.einsum("ncs,cs->ns", columns[:wanted], weights))

    def _samples_pay(self, s: Numbers, values: npt.NDArray[np.float64], samples: int) -> bool:
        if self.pattern is None or not large.samples_pay(len(self.pattern.steps), samples, len(s)):
            return False
        return large.in_range(self._extent_of(values), s) and self._program is not None

    @cached_property
    def _program(self) -> Any:
        """The pattern as the compiled kernel reads it; None without numba."""
        try:
            from . import sample_kernel
        except ImportError:
            return None
        assert self.pattern is not None
        return sample_kernel.program(self.pattern)

    def _compiled_samples(
        self,
        s: Numbers,
        drive: Drive,
        wanted: Sequence[int],
        values: npt.NDArray[np.float64],
        answer: Numbers,
    ) -> bool:
        """Fill `answer`, (wanted, samples, points); False if a number in it is not finite."""
        from . import sample_kernel

        assert self.stiff is not None
        controls = self.arrays.nodes[list(self.stiff_columns)][:, 2:4]
        potentials, injected = self._driven(drive)
        currents = np.zeros_like(potentials)
        for node, amount in injected.items():
            currents[node, 0] = amount
        seen = [*wanted, *controls.ravel().tolist()]
        shape = (len(seen), 1 + len(controls), *answer.shape[1:])
        columns = np.empty(shape, dtype=np.complex128) if len(controls) else answer[:, None]
        numbers, points = values[self.admittance_rows], s.astype(np.complex128)
        finite = sample_kernel.solve(
            self._program, self.is_resistor, numbers, points, potentials, currents, seen, columns
        )
        if len(controls):
            gains = np.repeat(values[list(self.stiff_columns)], len(s), axis=1)
            closed = self._closed(columns.reshape(*shape[:2], -1), len(wanted), gains)
            answer[:] = closed.reshape(answer.shape)
            finite = bool(np.isfinite(answer).all())
        return finite

    def _gains(self, values: npt.NDArray[np.float64] | None) -> Numbers:
        numbers = (self.arrays.values if values is None else values)[list(self.stiff_columns)]
        return numbers[:, None] if numbers.ndim == 1 else numbers

    def _inflow(self, drive: Drive, shape: tuple[int, ...], dtype: Any) -> Numbers | None:
        independent = np.flatnonzero((self.arrays.kinds == ord("I")) & (drive.sources != 0))
        if drive.currents is None and not len(independent):
            return None
        inflow = np.zeros(shape, dtype=dtype)
        if drive.currents is not None:
            inflow[:, 0] += drive.currents
        for row in independent:
            amount = drive.sources[row] if np.dtype(dtype) == np.complex128 else drive.sources[row].real
            a, b = self.arrays.nodes[row, :2]
            inflow[a, 0] -= amount
            inflow[b, 0] += amount
        return inflow

    def _source_currents(self, factors: Factors, voltages: Numbers, arriving: Numbers | None) -> Numbers:
        """Currents of V and E sources: what each fixed node feeds into the network, summed up the tree."""
        assert self.stiff is not None
        fed = np.zeros_like(voltages)
        fixed = set(self.stiff.nodes)
        for number, (a, b) in enumerate(factors.pattern.slot_ends.tolist()):
            if a in fixed and b in fixed:
                flow = factors.reduced[number] * (voltages[a] - voltages[b])
                fed[a] += flow
                fed[b] -= flow
        if arriving is not None:
            fed -= arriving
        currents = np.zeros((len(self.arrays.kinds), voltages.shape[1]), voltages.dtype)
        for node, parent, row, _ in reversed(self.stiff.edges):
            # The current into the part of the tree beyond `node` comes through this source.
            currents[row] = -fed[node] if self.arrays.nodes[row, 0] == node else fed[node]
            fed[parent] += fed[node]
        return currents


def _column(drive: Drive, which: int | npt.NDArray[np.int64]) -> Drive:
    currents = drive.currents
    return Drive(drive.sources, None if currents is None else currents[:, np.atleast_1d(which)])


def _side_by_side(parts: Iterable[Solution]) -> Solution:
    listed = list(parts)
    currents = [part.source_currents for part in listed if part.source_currents is not None]
    return Solution(np.hstack([part.voltages for part in listed]), np.hstack(currents))


def _closure(columns: Numbers, controls: npt.NDArray[np.int64], gains: Numbers) -> Numbers | None:
    """The weight of each column: 1 for the independent sources, then the E sources' own voltages.

    An E source's voltage u_e = g_e (v_c1 - v_c2), and every v is linear in all u: (1 - g M) u = g r. None
    where a loop gain is one to working precision, which shows as a great componentwise condition number (R.
    Skeel, J. ACM 26(3):494-526, 1979).
    """
    block = columns.shape[2]
    count = len(controls)
    if count == 0:
        return np.ones((1, block), dtype=columns.dtype)
    sensed = columns[controls[:, 0]] - columns[controls[:, 1]]
    scaled = np.moveaxis(gains[:, None, :] * sensed, 2, 0)
    matrix = np.eye(count) - scaled[..., 1:]
    try:
        inverse = np.linalg.inv(matrix)
    except np.linalg.LinAlgError:
        return None
    inner = inverse @ scaled[..., :1]
    sizes = np.abs(inner)
    amplified = np.abs(inverse) @ ((np.eye(count) + np.abs(scaled[..., 1:])) @ sizes)
    if not np.isfinite(amplified).all() or (amplified > _LOOP_GAIN_ONE * sizes).any():
        return None
    return np.vstack([np.ones((1, block), dtype=columns.dtype), inner[..., 0].T])


@dataclass(frozen=True)
class _StiffTree:
    """The nodes whose potentials V and E sources fix from ground, as a tree.

    nodes: the fixed nodes, ground first
    edges: (node, parent, part row, sign): v(node) = v(parent) + sign x the source's voltage; parents first
    controlled: part rows of the E sources, in column order
    """

    nodes: tuple[int, ...]
    edges: tuple[tuple[int, int, int, int], ...]
    controlled: tuple[int, ...]

    def fill(self, columns: Numbers, sources: Numbers) -> None:
        """Write the fixed nodes' rows of `columns` (nodes, 1 + E sources, block)."""
        place = {row: 1 + k for k, row in enumerate(self.controlled)}
        for node, parent, row, sign in self.edges:
            columns[node] = columns[parent]
            if row in place:
                columns[node, place[row]] += sign
            else:
                columns[node, 0] += sign * sources[row]


def _stiff_tree(network: Network, arrays: PartArrays) -> _StiffTree | None:
    """The tree, or None where the network holds more than R, C, V, I, E or a voltage source floats."""
    letters = {chr(code) for code in set(arrays.kinds.tobytes())}
    if letters - set("RCVIE"):
        return None
    rows = np.flatnonzero((arrays.kinds == ord("V")) | (arrays.kinds == ord("E"))).tolist()
    around: dict[int, list[tuple[int, int, int]]] = {}
    for row in rows:
        a, b = int(arrays.nodes[row, 0]), int(arrays.nodes[row, 1])
        around.setdefault(b, []).append((a, row, 1))
        around.setdefault(a, []).append((b, row, -1))
    nodes, edges, used = [0], [], set()
    for node in nodes:
        for other, row, sign in around.get(node, ()):
            if row not in used:
                used.add(row)
                nodes.append(other)
                edges.append((other, node, row, sign))
    if len(used) != len(rows):
        return None
    controlled = tuple(row for row in rows if chr(arrays.kinds[row]) == "E")
    return _StiffTree(tuple(nodes), tuple(edges), controlled)


_solvers: weakref.WeakKeyDictionary[Network, tuple[PartArrays, Solver]] = weakref.WeakKeyDictionary()


def solver_for(network: Network) -> Solver:
    """The solver of a network, made once and kept while the network is unchanged."""
    arrays = network.arrays()
    kept = _solvers.get(network)
    if kept is None or kept[0] is not arrays:
        kept = (arrays, Solver(network))
        _solvers[network] = kept
    return kept[1]


_sound: weakref.WeakKeyDictionary[Network, tuple[PartArrays, set[bool]]] = weakref.WeakKeyDictionary()


def require_solvable(network: Network, *, dc: bool = False) -> None:
    """Raise UnsolvableError, naming parts and nodes, unless the graph allows one solution.

    CircuitError where couplings contradict each other.
    """
    arrays = network.arrays()
    kept = _sound.get(network)
    if kept is None or kept[0] is not arrays:
        kept = _sound[network] = (arrays, set())
    if dc in kept[1]:
        return
    found = troubles(network, dc=dc)
    if not found:
        kept[1].add(dc)
    if found:
        remedy = (
            "Add a resistor to ground, or leave the operating point out."
            if dc
            else "Connect them, or remove them."
        )
        if found[0].kind == "loop":
            remedy = "Put a resistance in the loop, or remove one of its parts."
        if found[0].kind == "coupling":
            raise contradiction(found[0].parts)
        raise UnsolvableError(explain(found[0], dc=dc), remedy=remedy)
