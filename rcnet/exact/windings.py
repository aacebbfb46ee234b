"""Coupled inductors turned on paper into as many without coupling, so that perfect coupling loses no digit.

With S the square roots of a group's inductances and K the matrix of its coefficients, v = s S K S i. From K =
L D L^T (L unit triangular, pivots taken largest first: N. J. Higham, Accuracy and Stability of Numerical
Algorithms, 2nd ed., SIAM 2002, section 10.3) follows, with i = U j and U = S^-1 L^-T,

    U^T v = s D j,

where D is diagonal, and exactly zero for what perfect coupling leaves no field of its own.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Trouble, explain
from ..circuit.coupling import CoupledGroup, contradictory_couplings, coupled_groups
from ..errors import CircuitError
from .twofold import two_product

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]

_ROUNDING = 8 * float(np.finfo(float).eps)  # of a pivot, for each inductor beyond two


@dataclass(frozen=True)
class Windings:
    """One group: the part rows of its inductors, U as `mix`, (inductors, inductors), and D as `own`."""

    rows: tuple[int, ...]
    mix: Float
    own: Float

    def currents(self, mixed: Numbers) -> Numbers:
        """The inductors' currents, amperes, from the unknowns j, both (inductors, points)."""
        return np.asarray(self.mix @ mixed)

    def volts(self, volts: Numbers) -> Numbers:
        """What volts in series with the inductors make in the equations of j, both (inductors, points)."""
        return np.asarray(self.mix.T @ volts)


def windings_of(network: Network, values: Float | None = None) -> tuple[Windings, ...]:
    """Every group of coupled inductors; `values` (parts,) stands in for the network's own.

    Raises CircuitError where couplings name what is no inductor, or contradict each other.
    """
    if not network.couplings:
        return ()
    for names in contradictory_couplings(network, values):
        raise contradiction(names)
    numbers = network.arrays().values if values is None else values
    return tuple(_turned(group, numbers) for group in coupled_groups(network, values))


def contradiction(names: tuple[str, ...]) -> CircuitError:
    """The error for couplings that no windings have."""
    return CircuitError(
        explain(Trouble("coupling", (), names), dc=False),
        remedy="Measure the coefficients again, or lower the greatest.",
    )


def _turned(group: CoupledGroup, values: Float) -> Windings:
    factor, own = _factors(group.matrix)
    roots = np.sqrt(values[list(group.inductors)])
    return Windings(group.inductors, np.linalg.inv(factor).T / roots[:, None], own)


def _factors(matrix: Float) -> tuple[Float, Float]:
    """L and D; rows and columns of L stand where the inductors do, so that it is triangular but for order."""
    count = len(matrix)
    factor, own, rest = np.eye(count), np.zeros(count), matrix.copy()
    # The first pivot is one, so that no rounding touches two inductors; more of them make rounded pivots.
    least = _ROUNDING * (count - 2)
    left = np.arange(count)
    while len(left):
        pivot = int(left[np.argmax(np.diag(rest)[left])])
        size = float(rest[pivot, pivot])
        if size <= least:
            break
        own[pivot] = size
        left = left[left != pivot]
        share = rest[left, pivot] / size
        factor[left, pivot] = share
        block = np.ix_(left, left)
        product, missing = two_product(share[:, None], rest[pivot, left][None, :])
        rest[block] = (rest[block] - product) - missing
    return factor, own
