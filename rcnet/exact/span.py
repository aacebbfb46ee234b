"""The span of frequencies that matters to a network, from its part values alone."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network


@dataclass(frozen=True, slots=True)
class Span:
    """The angular frequencies, rad/s, between which every natural mode of a network lies."""

    low: float
    high: float

    @property
    def far_below(self) -> float:
        """A real s so far below the lowest mode that a response there is its limit at zero."""
        return max(self.low * 1e-20, 1e-150)

    @property
    def far_above(self) -> float:
        """A real s so far above the highest mode that a response there is its limit at infinity."""
        return min(self.high * 1e20, 1e150)

    @property
    def middle(self) -> float:
        """The geometric mean of both ends."""
        return math.sqrt(self.low) * math.sqrt(self.high)


def span_of(network: Network) -> Span:
    """Bounds on the natural modes from the part values alone.

    For R and C: every time constant is at most (sum of R)(sum of C), because any capacitor's voltage is at
    most the sum of the resistors' and sum |v_R| <= sqrt(sum R . power) by Cauchy's inequality; and at least
    1/((sum of 1/R)(sum of 1/C)) by the dual argument. Inductors add L/R and sqrt(LC) in the same way, and
    controlled sources widen both ends by their gains.
    """
    with np.errstate(all="ignore"):
        return _span(network)


def _span(network: Network) -> Span:
    arrays = network.arrays()

    def of(letter: str) -> npt.NDArray[np.float64]:
        sizes: npt.NDArray[np.float64] = np.abs(arrays.values[arrays.kinds == ord(letter)])
        return sizes

    r, c, inductors = of("R"), of("C"), of("L")
    # Transconductances act as conductances do and transresistances as resistances; a zero one does nothing.
    through, across = of("G"), of("H")
    r = np.concatenate([r, 1 / through[through > 0], across[across > 0]])
    slow, fast = [], []
    if len(r) and len(c):
        slow.append(r.sum() * c.sum())
        fast.append(1 / ((1 / r).sum() * (1 / c).sum()))
    if len(r) and len(inductors):
        slow.append(inductors.sum() * (1 / r).sum())
        fast.append(1 / ((1 / inductors).sum() * r.sum()))
    if len(c) and len(inductors):
        slow.append(np.sqrt(inductors.sum() * c.sum()))
        fast.append(1 / np.sqrt((1 / inductors).sum() * (1 / c).sum()))
    if not slow:
        return Span(1.0, 1.0)
    gains = math.prod(1.0 + float(g) for letter in "EF" for g in of(letter))
    widen = min(gains, 1e6)
    # Values at the ends of what a double holds must not carry the span over them.
    low, high = float(1 / (max(slow) * widen)), float(widen / min(fast))
    return Span(min(max(low, 1e-120), 1e120), min(max(high, 1e-120), 1e120))
