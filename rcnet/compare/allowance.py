"""How far another solver's answer may lie from the exact one before it counts as different.

A simulator's ac analysis and operating point are nodal analysis in double precision. Its factorisation solves a
matrix whose entries are each off by a few units in the last place, so to first order the error of unknown k is at
most  c u sum_ij |inv(A)_ki| |A_ij| |x_j|  (R. Skeel, J. ACM 26:494-526, 1979). This is small where the network is
benign, and grows exactly where a small resistor joins two high impedances or a stopband lies at the rounding floor.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..exact import nodal

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]

UNIT_ROUNDOFF = 2.0**-53
# Entries are sums, values pass through decimal text once, and a factorisation that pivots for sparsity lets
# numbers grow: ngspice 39 was seen at 160 of these units behind a controlled source. A generous constant costs
# nothing: a hundredth of a decibel is 1e13 units.
CONSTANT = 4096.0
DENSE_LIMIT = 160  # unknowns; above, only what is asked for is solved for
MOST_POINTS = 256  # frequencies the bound is computed at; it is smooth between them


def rounding_allowance(
    network: Network, s: Numbers, drive: npt.NDArray[np.complex128], unknowns: Sequence[int]
) -> tuple[Float, nodal.Equations]:
    """The bound for some unknowns at each s: (unknowns, points), volts or amperes.

    s: rad/s; drive: (parts,), the sources' values; unknowns: rows of the modified nodal equations
    """
    eqs = nodal.equations(network, plain=True)
    picks = np.unique(np.linspace(0, len(s) - 1, min(len(s), MOST_POINTS)).astype(int))
    some = s[picks]
    answer = nodal.solve(eqs, some, nodal.right_hand_side(network, eqs, drive, None, len(some)))
    bound = (_dense if eqs.size <= DENSE_LIMIT else _sparse)(eqs, some, answer, unknowns)
    bound *= CONSTANT * UNIT_ROUNDOFF
    if len(picks) == len(s):
        return bound, eqs
    # Between two computed points the larger neighbour, doubled, stands for both.
    right = np.minimum(np.searchsorted(picks, np.arange(len(s))), len(picks) - 1)
    left = np.maximum(right - 1, 0)
    return 2 * np.maximum(bound[:, left], bound[:, right]), eqs


def _dense(eqs: nodal.Equations, s: Numbers, answer: Numbers, unknowns: Sequence[int]) -> Float:
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    # |A| entry by entry as stamped: a diagonal is a sum, and each of its terms was rounded.
    sizes = np.zeros((2, eqs.size, eqs.size))
    np.add.at(sizes[0], (eqs.rows, eqs.columns), np.abs(eqs.constant))
    np.add.at(sizes[1], (eqs.rows, eqs.columns), np.abs(eqs.slope))
    bound = np.empty((len(unknowns), len(s)))
    for number, point in enumerate(s):
        inverse = _inverse(constant + point * slope)
        load = (sizes[0] + abs(point) * sizes[1]) @ np.abs(answer[:, number])
        bound[:, number] = np.abs(inverse[list(unknowns)]) @ load
    return bound


def _inverse(matrix: Numbers) -> Numbers:
    scale = np.abs(matrix).max(axis=1)
    scale[scale == 0] = 1.0
    return np.asarray(np.linalg.inv(matrix / scale[:, None]) / scale[None, :])


def _sparse(eqs: nodal.Equations, s: Numbers, answer: Numbers, unknowns: Sequence[int]) -> Float:
    import scipy.sparse
    import scipy.sparse.linalg

    shape = (eqs.size, eqs.size)
    sizes = [
        scipy.sparse.csr_matrix((np.abs(part), (eqs.rows, eqs.columns)), shape=shape)
        for part in (eqs.constant, eqs.slope)
    ]
    bound = np.empty((len(unknowns), len(s)))
    for number, point in enumerate(s):
        data = eqs.constant + point * eqs.slope
        factors = scipy.sparse.linalg.splu(scipy.sparse.csc_matrix((data, (eqs.rows, eqs.columns)), shape=shape))
        load = sizes[0] @ np.abs(answer[:, number]) + abs(point) * (sizes[1] @ np.abs(answer[:, number]))
        for row, unknown in enumerate(unknowns):
            unit = np.zeros(eqs.size, dtype=data.dtype)
            unit[unknown] = 1.0
            bound[row, number] = np.abs(factors.solve(unit, trans="T")) @ load
    return bound


def axis_allowance(omega_resolution: Float | None, slope: Numbers | None) -> Float | float:
    """How far a value may lie off because the file's frequencies carry few digits: |dH/d omega| times their slack."""
    if omega_resolution is None or slope is None:
        return 0.0
    return np.asarray(2 * math.pi * omega_resolution * np.abs(slope))
