"""Modified nodal analysis with pivoting, for any linear network.

C.-W. Ho, A. Ruehli, P. Brennan, IEEE Trans. Circuits Syst. CAS-22(6):504-509, 1975. Unknowns are the voltages
of all nodes but ground, then the currents of V, E, H, L (from their first node through them to the second):

    [ Y   B ] [v]   [j]
    [ D  -Z ] [i] = [e],        matrix = A0 + s A1

Coupled inductors have the unknowns and equations of `windings` instead.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, loose_groups
from ..errors import UnsolvableError
from .residual import Residual
from .windings import Windings, windings_of

Numbers = npt.NDArray[Any]

DENSE_LIMIT = 80  # unknowns; above this a sparse factorisation is faster than a batched dense one
_BATCH_BYTES = 64 * 1024 * 1024
_RESIDUAL_BYTES = 600  # what one entry needs at one point while residuals are computed
_MOST_REFINEMENTS = 12
_SETTLED = 2.0**-51  # a correction below this, relative to the answer, changes nothing any more
_REFUSED = 1e-11  # one still above this at the end says that the answer is not determined


@dataclass(frozen=True)
class Equations:
    """The network's equations as triplets, for all s at once.

    rows, columns: (entries,); constant, slope: (entries,): matrix = constant + s slope at each place
    size: unknowns; node_count: ground included; branch_of: part row -> its current's unknown
    gather: (gathered, 2), row and node: the currents that enter a node count in each of its rows
    controlled: what may leave the equations without one solution, see `culprits`
    windings: the groups of coupled inductors, whose unknowns are not their currents
    """

    rows: npt.NDArray[np.int64]
    columns: npt.NDArray[np.int64]
    constant: npt.NDArray[np.float64]
    slope: npt.NDArray[np.float64]
    size: int
    node_count: int
    branch_of: dict[int, int]
    gather: npt.NDArray[np.int64]
    controlled: tuple[str, ...] = ()
    windings: tuple[Windings, ...] = ()

    def currents(self, answer: Numbers) -> Numbers:
        """The currents of the parts in `branch_of`, in that order, amperes, (branches, points).

        answer: (size, points). Of transposed equations: what a volt in series with each part does.
        """
        found: Numbers = answer[self.node_count - 1 :].copy()
        for group in self.windings:
            at = self._places(group)
            found[at] = group.currents(found[at])
        return found

    def in_series(self, volts: Numbers) -> Numbers:
        """The right-hand side (size, points) of volts in series with the parts in `branch_of`.

        volts: (parts, points). Transposed: amperes that the parts' currents are weighted with in the output.
        """
        rhs: Numbers = np.zeros((self.size, volts.shape[1]), dtype=volts.dtype)
        rows = rhs[self.node_count - 1 :]
        rows += volts[list(self.branch_of)]
        for group in self.windings:
            at = self._places(group)
            rows[at] = group.volts(rows[at])
        return rhs

    def _places(self, group: Windings) -> list[int]:
        return [self.branch_of[row] - self.node_count + 1 for row in group.rows]

    def dense(self, part: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
        """`constant` or `slope` as a full matrix (size, size)."""
        matrix = np.zeros((self.size, self.size))
        np.add.at(matrix, (self.rows, self.columns), part)
        return matrix


class _Triplets:
    """Collects stamps; node indices count from ground = -1, whose row and column are dropped.

    `groups` are sets of nodes that only weak parts tie to ground. The current balance of each group's first
    node is replaced by that of the whole group, in which the strong parts inside cancel on paper, not by
    rounding.
    """

    def __init__(self, groups: Sequence[Sequence[int]]) -> None:
        self.entries: list[tuple[int, int, float, float]] = []
        self.group_of = {node - 1: group[0] - 1 for group in groups for node in group}
        self.first = {group[0] - 1 for group in groups}

    def balances(self, node: int, other: int) -> list[int]:
        """The rows in which a current from `node` to `other` counts as leaving `node`."""
        rows = [] if node in self.first or node < 0 else [node]
        group = self.group_of.get(node)
        if group is not None and self.group_of.get(other) != group:
            rows.append(group)
        return rows

    def add(self, row: int, column: int, constant: float, slope: float = 0.0) -> None:
        """One entry of a branch's own row."""
        if column >= 0:
            self.entries.append((row, column, constant, slope))

    def current(self, a: int, b: int, column: int, constant: float, slope: float = 0.0) -> None:
        """A current from a to b of (constant + s slope) times the unknown in `column`."""
        if column < 0:
            return
        for node, other, sign in ((a, b, 1.0), (b, a, -1.0)):
            for row in self.balances(node, other):
                self.entries.append((row, column, sign * constant, sign * slope))

    def admittance(self, a: int, b: int, constant: float, slope: float) -> None:
        if a != b:
            self.current(a, b, a, constant, slope)
            self.current(a, b, b, -constant, -slope)

    def branch(self, a: int, b: int, unknown: int) -> None:
        self.current(a, b, unknown, 1.0)
        self.add(unknown, a, 1.0)
        self.add(unknown, b, -1.0)


def equations(
    network: Network,
    values: npt.NDArray[np.float64] | None = None,
    *,
    high: bool = False,
    plain: bool = False,
) -> Equations:
    """Assemble the equations; `values` (parts,) stands in for the network's own. Raises CircuitError.

    Nodes that nothing but capacitors hold share one balance of currents, so that digits survive however low
    the frequency; with `high`, nodes that only resistors and inductors hold do, for high frequencies. With
    `plain` every node has its own balance and every inductor its current for unknown, as in a simulator.
    """
    arrays = network.arrays()
    numbers = arrays.values if values is None else values
    letters = [chr(code) for code in arrays.kinds.tolist()]
    branches = [row for row, letter in enumerate(letters) if letter in "VEHL"]
    branch_of = {row: arrays.node_count - 1 + k for k, row in enumerate(branches)}
    stamps = _Triplets([] if plain else loose_groups(network, "CVEH" if high else "RLVEH"))
    windings = windings_of(network, values)
    turned = () if plain else windings
    apart = {row for group in turned for row in group.rows}
    for row, letter in enumerate(letters):
        if row in apart or (letter == "K" and turned):
            continue
        nodes = [int(node) - 1 for node in arrays.nodes[row]]  # ground becomes -1 and is dropped
        _STAMPS[letter](_Stamp(stamps, network, row, nodes, numbers, branch_of))
    for group in turned:
        _windings(stamps, group, arrays.nodes[list(group.rows), :2] - 1, branch_of)
    table = np.array(stamps.entries, dtype=np.float64).reshape(-1, 4)
    gather = [(row, node + 1) for node in range(arrays.node_count - 1) for row in stamps.balances(node, -1)]
    return Equations(
        table[:, 0].astype(np.int64),
        table[:, 1].astype(np.int64),
        table[:, 2],
        table[:, 3],
        arrays.node_count - 1 + len(branches),
        arrays.node_count,
        branch_of,
        np.array(gather, dtype=np.int64).reshape(-1, 2),
        culprits(network),
        turned,
    )


@dataclass(frozen=True, slots=True)
class _Stamp:
    """One part on its way into the equations: n are its nodes, -1 for ground."""

    into: _Triplets
    network: Network
    row: int
    n: list[int]
    numbers: npt.NDArray[np.float64]
    branch_of: dict[int, int]

    @property
    def value(self) -> float:
        """The part's value."""
        return float(self.numbers[self.row])

    @property
    def own(self) -> int:
        """The unknown that is this part's current."""
        return self.branch_of[self.row]

    @property
    def sensed(self) -> int:
        """The unknown that is the current this part senses."""
        return self.branch_of[self.network.sensed_by(self.row)]


def _resistor(part: _Stamp) -> None:
    part.into.admittance(part.n[0], part.n[1], 1.0 / part.value, 0.0)


def _capacitor(part: _Stamp) -> None:
    part.into.admittance(part.n[0], part.n[1], 0.0, part.value)


def _inductor(part: _Stamp) -> None:
    part.into.branch(part.n[0], part.n[1], part.own)
    part.into.add(part.own, part.own, 0.0, -part.value)


def _coupling(part: _Stamp) -> None:
    first, second = part.network.coupled_by(part.row)
    mutual = part.value * math.sqrt(part.numbers[first]) * math.sqrt(part.numbers[second])
    a, b = part.branch_of[first], part.branch_of[second]
    part.into.add(a, b, 0.0, -mutual)
    part.into.add(b, a, 0.0, -mutual)


def _windings(
    into: _Triplets, group: Windings, ends: npt.NDArray[np.int64], branch_of: dict[int, int]
) -> None:
    """Coupled inductors: i = U j enters the balances, U^T v - s D j = 0 are their equations."""
    unknowns = [branch_of[row] for row in group.rows]
    for k, (a, b) in enumerate(ends.tolist()):
        for share, unknown in zip(group.mix[k].tolist(), unknowns, strict=True):
            if share:
                into.current(a, b, unknown, share)
                into.add(unknown, a, share)
                into.add(unknown, b, -share)
    for own, unknown in zip(group.own.tolist(), unknowns, strict=True):
        into.add(unknown, unknown, 0.0, -own)


def _current(part: _Stamp) -> None:
    """An independent current source stands on the right-hand side only."""


def _voltage(part: _Stamp) -> None:
    part.into.branch(part.n[0], part.n[1], part.own)


def _e_source(part: _Stamp) -> None:
    part.into.branch(part.n[0], part.n[1], part.own)
    part.into.add(part.own, part.n[2], -part.value)
    part.into.add(part.own, part.n[3], part.value)


def _g_source(part: _Stamp) -> None:
    part.into.current(part.n[0], part.n[1], part.n[2], part.value)
    part.into.current(part.n[0], part.n[1], part.n[3], -part.value)


def _f_source(part: _Stamp) -> None:
    part.into.current(part.n[0], part.n[1], part.sensed, part.value)


def _h_source(part: _Stamp) -> None:
    part.into.branch(part.n[0], part.n[1], part.own)
    part.into.add(part.own, part.sensed, -part.value)


_STAMPS: dict[str, Callable[[_Stamp], None]] = {
    "R": _resistor,
    "C": _capacitor,
    "L": _inductor,
    "K": _coupling,
    "V": _voltage,
    "I": _current,
    "E": _e_source,
    "G": _g_source,
    "F": _f_source,
    "H": _h_source,
}


def right_hand_side(
    network: Network,
    eqs: Equations,
    drive: npt.NDArray[np.complex128],
    currents: Numbers | None,
    points: int,
) -> Numbers:
    """The right-hand side (size, points).

    drive: (parts,), the independent sources, volts and amperes
    currents: (nodes, points), amperes put into each node from outside, or None
    """
    arrays = network.arrays()
    given: Numbers = drive if drive.imag.any() else drive.real
    dtype = np.result_type(given, np.float64 if currents is None else currents)
    entering = np.zeros((arrays.node_count, points), dtype=dtype)
    if currents is not None:
        entering += currents
    for row in np.flatnonzero((arrays.kinds == ord("I")) & (given != 0)).tolist():
        a, b = arrays.nodes[row, :2]
        entering[a] -= given[row]
        entering[b] += given[row]
    rhs: Numbers = np.zeros((eqs.size, points), dtype=dtype)
    np.add.at(rhs, eqs.gather[:, 0], entering[eqs.gather[:, 1]])
    for row in np.flatnonzero((arrays.kinds == ord("V")) & (given != 0)).tolist():
        rhs[eqs.branch_of[row]] += given[row]
    return rhs


def solve(eqs: Equations, s: Numbers, rhs: Numbers) -> Numbers:
    """Solve at each s. rhs: (size, points); the answer has the same shape.

    Rows and columns are scaled to one, the factorisation pivots, and the answer is refined with residuals in
    twice the working precision until nothing changes (J. Demmel et al., ACM Trans. Math. Softw.
    32(2):325-351, 2006). It is then right to a few units in the last place of the greatest unknown, for part
    values off by as little, unless the condition number nears 1e16. Raises UnsolvableError there, and for
    singular equations.
    """
    dtype = np.result_type(s.dtype, rhs.dtype)
    s = s.astype(dtype)
    answer: Numbers = np.empty((eqs.size, len(s)), dtype=dtype)
    if eqs.size == 0:
        return answer
    residual = Residual(eqs.rows, eqs.columns, eqs.constant, eqs.slope, eqs.size)
    dense = eqs.size <= DENSE_LIMIT
    point = 16 * eqs.size**2 + _RESIDUAL_BYTES * len(eqs.rows)
    block = max(1, _BATCH_BYTES // point) if dense else 1
    with np.errstate(all="ignore"):
        for start in range(0, len(s), block):
            part = slice(start, start + block)
            inverse = _dense_inverse(eqs, s[part]) if dense else _sparse_inverse(eqs, s[start])
            target = rhs[:, part].astype(dtype)
            answer[:, part] = _refined(eqs, inverse, target, partial(residual, s[part], target))
    return answer


def _refined(
    eqs: Equations,
    inverse: Callable[[Numbers], tuple[Numbers, Numbers]],
    target: Numbers,
    residual: Callable[[Numbers], Numbers],
) -> Numbers:
    """The answer, corrected until nothing changes; `inverse` also gives the units of the unknowns."""
    answer, scale = inverse(target)
    moved = np.inf
    for _ in range(_MOST_REFINEMENTS):
        correction, _ = inverse(residual(answer))
        answer = answer + correction
        most = (np.abs(answer) / scale).max(axis=0)
        share = (np.abs(correction) / scale).max(axis=0) / np.where(most > 0, most, 1.0)
        moved = float(share.max(initial=0.0))
        if not moved > _SETTLED:  # nan ends it too
            break
    if not moved <= _REFUSED or not np.isfinite(answer).all():
        raise singular(eqs.controlled)
    return answer


def _dense_inverse(eqs: Equations, s: Numbers) -> Callable[[Numbers], tuple[Numbers, Numbers]]:
    matrices = eqs.dense(eqs.constant) + s[:, None, None] * eqs.dense(eqs.slope)
    row_scale = 1.0 / _nonzero(np.abs(matrices).max(axis=2, keepdims=True))
    matrices = matrices * row_scale
    column_scale = 1.0 / _nonzero(np.abs(matrices).max(axis=1, keepdims=True))
    try:
        inverse = np.linalg.inv(matrices * column_scale)
    except np.linalg.LinAlgError as exc:
        raise singular(eqs.controlled) from exc
    scale = np.swapaxes(column_scale, 1, 2)

    def apply(target: Numbers) -> tuple[Numbers, Numbers]:
        solved = inverse @ (target.T[..., None] * row_scale) * scale
        return solved[..., 0].T, scale[..., 0].T

    return apply


def _sparse_inverse(eqs: Equations, point: complex) -> Callable[[Numbers], tuple[Numbers, Numbers]]:
    import scipy.sparse
    import scipy.sparse.linalg

    data = eqs.constant + point * eqs.slope
    matrix = scipy.sparse.csc_matrix((data, (eqs.rows, eqs.columns)), shape=(eqs.size, eqs.size))
    row_scale = 1.0 / _nonzero(abs(matrix).max(axis=1).toarray())
    matrix = scipy.sparse.diags(row_scale[:, 0]) @ matrix
    scale = 1.0 / _nonzero(abs(matrix).max(axis=0).toarray().T)
    try:
        factors = scipy.sparse.linalg.splu((matrix @ scipy.sparse.diags(scale[:, 0])).tocsc())
    except RuntimeError as exc:
        raise singular(eqs.controlled) from exc
    kind = matrix.dtype

    def apply(target: Numbers) -> tuple[Numbers, Numbers]:
        return factors.solve((target * row_scale).astype(kind)) * scale, scale

    return apply


def _nonzero(numbers: Numbers) -> Numbers:
    return np.where(numbers == 0, 1.0, numbers)


def culprits(network: Network) -> tuple[str, ...]:
    """The names of the controlled sources and of perfect couplings."""
    arrays = network.arrays()
    perfect = (arrays.kinds == ord("K")) & (np.abs(arrays.values) == 1)
    rows = np.flatnonzero(np.isin(arrays.kinds, [ord(letter) for letter in "EGFH"]) | perfect)
    names = network.names
    return tuple(names[row] for row in rows.tolist())


def singular(controlled: Sequence[str]) -> UnsolvableError:
    """The error for equations without one answer; `controlled` are the names of the usual culprits."""
    if not controlled:
        return UnsolvableError(
            "the network's equations have no solution that double precision can tell apart from others.",
            remedy="Look for part values more than fifteen decades apart.",
        )
    named = ", ".join(controlled[:8]) + (" and others" if len(controlled) > 8 else "")
    if all(name[0] in "Kk" for name in controlled):
        verb = "ties" if len(controlled) == 1 else "tie"
        return UnsolvableError(
            f"the network has no unique solution: {named}, of coefficient one, {verb} voltages together "
            "that something else fixes too.",
            remedy="Give each winding its resistance, or the coupling a coefficient below one.",
        )
    verb = "cancels" if len(controlled) == 1 else "cancel"
    return UnsolvableError(
        f"the network has no unique solution: {named} {verb} what would fix some voltage or current.",
        remedy="Look for a controlled source with a loop gain of exactly one, or one that controls itself.",
    )
