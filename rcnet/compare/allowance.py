"""How far another solver's answer may lie from the exact one before it counts as different.

A simulator's ac analysis and operating point are nodal analysis in double precision. Its factorisation solves
a matrix whose entries are each off by a few units in the last place, so to first order the error of unknown k
is at most  c u sum_ij |inv(A)_ki| |A_ij| |x_j|  (R. Skeel, J. ACM 26:494-526, 1979). This is small where the
network is benign, and grows exactly where a small resistor joins two high impedances or a stopband lies at
the rounding floor.

That holds while pivots stay good. Where sources tie nodes together, equations without a diagonal of their
own enter, and ngspice 39 keeps the order of its first frequency for all others: an unknown may then come out
of another equation as the difference of great terms. For such networks |x_j| makes way for the greatest term
of any equation that x_j may have been taken from, over its coefficient there, and that twice over. Of 1450
random networks of all kinds of parts, values over up to twelve decades and frequencies over as many, ngspice
39 went beyond this in one of a hundred, always by losing all digits: such an answer differs, and is told.

No value is held to less than the rounding of the greatest one: where nothing arrives, simulators show that.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..exact import Drive, nodal, solver_for

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]

UNIT_ROUNDOFF = 2.0**-53
# Entries are sums, values pass through decimal text once, and a factorisation that pivots for sparsity lets
# numbers grow: ngspice 39 was seen at 160 of these units behind a controlled source. A generous constant
# costs nothing: a hundredth of a decibel is 1e13 units.
CONSTANT = 4096.0
DENSE_LIMIT = 160  # unknowns; above, only what is asked for is solved for
PIVOT_SHARE = 1e-3  # of a column's greatest entry, what ngspice takes for a pivot (its option pivrel)
GROWTH_ROUNDS = 2
FLOOR = 64 * 2.0**-53
MOST_POINTS = 256  # frequencies the bound is computed at; it is smooth between them


def rounding_allowance(
    network: Network, s: Numbers, drive: npt.NDArray[np.complex128], unknowns: Sequence[int]
) -> Float:
    """The bound for some unknowns at each s: (unknowns, points), volts or amperes; inf where there is none.

    s: rad/s; drive: (parts,), the sources' values; unknowns: rows of the plain modified nodal equations
    """
    eqs = nodal.equations(network, plain=True)
    picks = np.unique(np.linspace(0, len(s) - 1, min(len(s), MOST_POINTS)).astype(int))
    bound = rounding_of(network, s[picks], _unknowns_at(network, eqs, s[picks], drive), unknowns)
    if len(picks) == len(s):
        return bound
    # Between two computed points the larger neighbour, doubled, stands for both.
    right = np.minimum(np.searchsorted(picks, np.arange(len(s))), len(picks) - 1)
    left = np.maximum(right - 1, 0)
    return np.asarray(2 * np.maximum(bound[:, left], bound[:, right]))


def rounding_of(
    network: Network, s: Numbers, answer: Numbers, unknowns: Sequence[int], *, good_pivots: bool = False
) -> Float:
    """The same bound where the answer is known, or how great each unknown may be: (unknowns, points).

    answer: (all unknowns, points), nodes first, then the currents of parts that have one
    good_pivots: take the simulator's pivots for good whatever ties nodes together
    """
    eqs = nodal.equations(network, plain=True)
    sizes = _Sizes(eqs, s[0], tied=not good_pivots and ties_nodes(network))
    loads = np.empty((eqs.size, len(s)))
    floor = np.empty((len(unknowns), len(s)))
    for number, point in enumerate(s):
        own = np.abs(answer[:, number])
        loads[:, number] = sizes.load(point, own)
        floor[:, number] = FLOOR * sizes.greatest(point, own)[list(unknowns)]
    bound = (_dense if eqs.size <= DENSE_LIMIT else _sparse)(eqs, s, loads, unknowns)
    return np.asarray(CONSTANT * UNIT_ROUNDOFF * bound + floor)


def influence_rounding(network: Network, s: Numbers, of: tuple[int, int]) -> Float:
    """How far rounding may move what an ampere put into each node does to an output: (nodes, points), ohm.

    The same bound for the transposed equations, which a simulator solves for noise; ground is row 0. For
    networks of at most DENSE_LIMIT unknowns.
    """
    eqs = nodal.equations(network, plain=True)
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    output = np.zeros(eqs.size)
    for node, sign in zip(of, (1.0, -1.0), strict=True):
        if node:
            output[node - 1] += sign
    bound = np.zeros((eqs.node_count, len(s)))
    for number, point in enumerate(s):
        try:
            inverse = _inverse(constant + point * slope)
        except np.linalg.LinAlgError:
            bound[:, number] = np.inf
            continue
        found = np.abs(output @ inverse)
        load = found @ (np.abs(constant) + abs(point) * np.abs(slope))
        moved = CONSTANT * UNIT_ROUNDOFF * (load @ np.abs(inverse)) + FLOOR * found.max(initial=0.0)
        bound[1:, number] = moved[: eqs.node_count - 1]
    return bound


def ties_nodes(network: Network) -> bool:
    """True if anything but R, C, current sources and voltage sources to ground stands in the network."""
    arrays = network.arrays()
    letters = {chr(code) for code in arrays.kinds.tolist()}
    floating = (arrays.kinds == ord("V")) & (arrays.nodes[:, :2] != 0).all(axis=1)
    return bool(letters - set("RCIV")) or bool(floating.any())


class _Sizes:
    """The sizes of a network's equations: |A| as stamped, since each term of a sum was rounded."""

    def __init__(self, eqs: nodal.Equations, first: complex, *, tied: bool) -> None:
        places, which = np.unique(eqs.rows * eqs.size + eqs.columns, return_inverse=True)
        self.rows, self.columns = places // eqs.size, places % eqs.size
        self.constant = np.bincount(which, np.abs(eqs.constant))
        self.slope = np.bincount(which, np.abs(eqs.slope))
        self.count, self.nodes, self.tied = eqs.size, eqs.node_count - 1, tied
        self.pivots = self._fit_for_pivots(self._at(first))

    def _at(self, point: complex) -> Float:
        return np.asarray(self.constant + abs(point) * self.slope)

    def _fit_for_pivots(self, sizes: Float) -> npt.NDArray[np.bool_]:
        # Which equations are left when a column's turn comes is the simulator's business. Current balances
        # and source equations come in different units, so each is held against its own kind only.
        balance = self.rows < self.nodes
        fit = sizes > 0
        for kind in (balance, ~balance):
            most = np.zeros(self.count)
            np.maximum.at(most, self.columns[kind], sizes[kind])
            fit[kind] &= sizes[kind] >= PIVOT_SHARE * most[self.columns[kind]]
        return np.asarray(fit)

    def load(self, point: complex, answer: Float) -> Float:
        """The sum of the sizes of each equation's terms, (equations,)."""
        sizes = self._at(point)
        load = self._sum(sizes * answer[self.columns])
        if not self.tied:
            return load
        fit = self._fit_for_pivots(sizes) | (self.pivots & (sizes > 0))
        greatest = answer.copy()
        for _ in range(GROWTH_ROUNDS):
            np.maximum.at(greatest, self.columns[fit], load[self.rows[fit]] / sizes[fit])
            load = self._sum(sizes * greatest[self.columns])
        return load

    def greatest(self, point: complex, answer: Float) -> Float:
        """The greatest voltage, or the greatest current at a node, for each unknown."""
        currents = self._sum(self._at(point) * answer[self.columns])[: self.nodes]
        most = np.empty(self.count)
        most[: self.nodes] = answer[: self.nodes].max(initial=0.0)
        most[self.nodes :] = currents.max(initial=0.0)
        return most

    def _sum(self, terms: Float) -> Float:
        return np.asarray(np.bincount(self.rows, terms, self.count), dtype=np.float64)


def _unknowns_at(
    network: Network, eqs: nodal.Equations, s: Numbers, drive: npt.NDArray[np.complex128]
) -> Numbers:
    """The exact node voltages and branch currents, (unknowns, points), in the order of the equations."""
    solution = solver_for(network).solve(s, Drive(drive), currents_too=True)
    assert solution.source_currents is not None
    return np.concatenate([solution.voltages[1:], solution.source_currents[list(eqs.branch_of)]])


def _dense(eqs: nodal.Equations, s: Numbers, loads: Float, unknowns: Sequence[int]) -> Float:
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    bound = np.empty((len(unknowns), len(s)))
    for number, point in enumerate(s):
        try:
            inverse = _inverse(constant + point * slope)
        except np.linalg.LinAlgError:
            bound[:, number] = np.inf
        else:
            bound[:, number] = np.abs(inverse[list(unknowns)]) @ loads[:, number]
    return bound


def _inverse(matrix: Numbers) -> Numbers:
    scale = np.abs(matrix).max(axis=1)
    scale[scale == 0] = 1.0
    return np.asarray(np.linalg.inv(matrix / scale[:, None]) / scale[None, :])


def _sparse(eqs: nodal.Equations, s: Numbers, loads: Float, unknowns: Sequence[int]) -> Float:
    import scipy.sparse
    import scipy.sparse.linalg

    shape, places = (eqs.size, eqs.size), (eqs.rows, eqs.columns)
    bound = np.empty((len(unknowns), len(s)))
    for number, point in enumerate(s):
        data = eqs.constant + point * eqs.slope
        units = np.zeros((eqs.size, len(unknowns)), dtype=data.dtype)
        units[list(unknowns), range(len(unknowns))] = 1.0
        try:
            factors = scipy.sparse.linalg.splu(scipy.sparse.csc_matrix((data, places), shape=shape))
        except RuntimeError:  # exactly singular once rounded
            bound[:, number] = np.inf
        else:
            bound[:, number] = loads[:, number] @ np.abs(factors.solve(units, trans="T"))
    return bound
