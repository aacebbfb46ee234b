"""Coupled inductors as groups, each with the matrix of its coefficients of coupling."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..errors import CircuitError
from .network import Network

Float = npt.NDArray[np.float64]

MOST_COUPLED = 300  # inductors in one group, whose matrix is a full one
_ROUNDING = 8 * float(np.finfo(float).eps)  # of an eigenvalue, for each inductor: coefficients are rounded


@dataclass(frozen=True, slots=True)
class CoupledGroup:
    """Inductors that couplings join, directly or by way of others.

    inductors, couplings: rows of parts
    matrix: (inductors, inductors), the coefficients, zero for a pair without a K, ones in the diagonal
    """

    inductors: tuple[int, ...]
    couplings: tuple[int, ...]
    matrix: Float

    @property
    def eigenvalues(self) -> Float:
        """The eigenvalues of the matrix, (inductors,), rising; what may be rounding is zero."""
        if len(self.matrix) == 2:
            coefficient = abs(float(self.matrix[0, 1]))
            return np.array([1 - coefficient, 1 + coefficient])
        found = np.linalg.eigvalsh(self.matrix)
        return np.where(np.abs(found) <= _ROUNDING * len(found), 0.0, found)


def coupled_groups(network: Network, values: Float | None = None) -> list[CoupledGroup]:
    """Every group of coupled inductors; `values` (parts,) stands in for the network's own.

    Raises CircuitError where a K names what is no inductor, and beyond MOST_COUPLED inductors in a group.
    """
    rows = network.couplings
    if not rows:
        return []
    pairs = {row: network.coupled_by(row) for row in rows}
    numbers = network.arrays().values if values is None else values
    return [_group(network, couplings, pairs, numbers) for couplings in _joined(pairs)]


def _joined(pairs: dict[int, tuple[int, int]]) -> Iterator[list[int]]:
    """The couplings in groups that share inductors."""
    touching: dict[int, list[int]] = {}
    for row, pair in pairs.items():
        for inductor in pair:
            touching.setdefault(inductor, []).append(row)
    left = dict.fromkeys(pairs)
    while left:
        first = next(iter(left))
        del left[first]
        found = [first]
        for row in found:  # grows on the way
            for inductor in pairs[row]:
                new = [other for other in touching.pop(inductor, ()) if other in left]
                found += new
                for other in new:
                    del left[other]
        yield sorted(found)


def _group(
    network: Network, couplings: Sequence[int], pairs: dict[int, tuple[int, int]], numbers: Float
) -> CoupledGroup:
    inductors = tuple(dict.fromkeys(row for coupling in couplings for row in pairs[coupling]))
    if len(inductors) > MOST_COUPLED:
        raise CircuitError(
            f"{len(inductors)} inductors are coupled with each other, "
            f"{network.names[inductors[0]]} among them; "
            f"at most {MOST_COUPLED} can be.",
            remedy="Leave the weakest couplings out, so that the rest falls into smaller groups.",
        )
    place = {row: k for k, row in enumerate(inductors)}
    matrix = np.eye(len(inductors))
    for coupling in couplings:
        a, b = (place[row] for row in pairs[coupling])
        matrix[a, b] = matrix[b, a] = numbers[coupling]
    return CoupledGroup(inductors, tuple(couplings), matrix)


def contradictory_couplings(network: Network, values: Float | None = None) -> list[tuple[str, ...]]:
    """The names of the couplings of each group that no windings have: energy below zero could be stored.

    The matrix of coefficients of real windings has no negative eigenvalue. Arguments and errors as for
    `coupled_groups`.
    """
    names = network.names
    return [
        tuple(names[row] for row in group.couplings)
        for group in coupled_groups(network, values)
        if len(group.inductors) > 2 and group.eigenvalues[0] < 0
    ]
