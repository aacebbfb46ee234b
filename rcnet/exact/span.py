"""The span of frequencies that matters to a network, from its part values alone."""

from __future__ import annotations

import math
import weakref
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network, PartArrays
from ..circuit.coupling import coupled_groups
from . import nodal

Float = npt.NDArray[np.float64]

_MOST_UNKNOWNS = 400  # beyond which natural modes are not computed anyway
_MOST_STEPS = 20
_TRUSTED = 1e6  # times a shift: farther out an eigenvalue may be what rounding makes of an infinite one


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
    """Bounds on the natural modes from the part values alone. Raises CircuitError for wrong couplings.

    For R and C: every time constant is at most (sum of R)(sum of C), because any capacitor's voltage is at
    most the sum of the resistors' and sum |v_R| <= sqrt(sum R . power) by Cauchy's inequality; and at least
    1/((sum of 1/R)(sum of 1/C)) by the dual argument. Inductors add L/R and sqrt(LC) in the same way, and
    controlled sources widen both ends by their gains.

    Coupled inductors store at most, and at least, what uncoupled ones do whose inductances are multiplied by
    the greatest and by the least eigenvalue of their matrix of coefficients. Where perfect coupling makes
    that zero, what windings against each other leave may be as small as it likes, and the upper end is found
    from the modes.
    """
    with np.errstate(all="ignore"):
        if not network.couplings:
            return _span(network, network.arrays().values, network.arrays().values)
        arrays = network.arrays()
        kept = _coupled.get(network)
        if kept is None or kept[0] is not arrays:
            kept = _coupled[network] = (arrays, _coupled_span(network))
        return kept[1]


_coupled: weakref.WeakKeyDictionary[Network, tuple[PartArrays, Span]] = weakref.WeakKeyDictionary()


def _coupled_span(network: Network) -> Span:
    least, most = network.arrays().values.copy(), network.arrays().values.copy()
    perfect = False
    for group in coupled_groups(network):
        rows, found = list(group.inductors), group.eigenvalues
        most[rows] *= found[-1]
        least[rows] *= min(float(found[found > 0][0]), 1.0)
        perfect = perfect or bool(found[0] <= 0)
    span = _span(network, least, most)
    return _reaching_every_mode(network, span) if perfect else span


def _reaching_every_mode(network: Network, span: Span) -> Span:
    """The span with its upper end beyond every mode, in steps over which eigenvalues are to be trusted."""
    eqs = nodal.equations(network)
    if not 0 < eqs.size <= _MOST_UNKNOWNS:
        return span
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    high = span.high
    for _ in range(_MOST_STEPS):
        try:
            poles = high - 1 / np.linalg.eigvals(np.linalg.solve(constant + high * slope, slope))
        except np.linalg.LinAlgError:
            break
        beyond = np.abs(poles)[(np.abs(poles) > high) & (np.abs(poles) < _TRUSTED * high)]
        if not len(beyond):
            break
        high = 2 * float(beyond.max())
    return Span(span.low, min(high, 1e120))


def _span(network: Network, least: Float, most: Float) -> Span:
    """The span for part values of which inductances are, in `least` and `most`, those that store so much."""
    arrays = network.arrays()
    inductors = arrays.kinds == ord("L")
    least, most = least[inductors], most[inductors]

    def of(letter: str) -> npt.NDArray[np.float64]:
        sizes: npt.NDArray[np.float64] = np.abs(arrays.values[arrays.kinds == ord(letter)])
        return sizes

    r, c = of("R"), of("C")
    # Transconductances act as conductances do and transresistances as resistances; a zero one does nothing.
    through, across = of("G"), of("H")
    r = np.concatenate([r, 1 / through[through > 0], across[across > 0]])
    slow, fast = [], []
    if len(r) and len(c):
        slow.append(r.sum() * c.sum())
        fast.append(1 / ((1 / r).sum() * (1 / c).sum()))
    if len(r) and len(most):
        slow.append(most.sum() * (1 / r).sum())
        fast.append(1 / ((1 / least).sum() * r.sum()))
    if len(c) and len(most):
        slow.append(np.sqrt(most.sum() * c.sum()))
        fast.append(1 / np.sqrt((1 / least).sum() * (1 / c).sum()))
    if not slow:
        return Span(1.0, 1.0)
    gains = math.prod(1.0 + float(g) for letter in "EF" for g in of(letter))
    widen = min(gains, 1e6)
    # Values at the ends of what a double holds must not carry the span over them.
    low, high = float(1 / (max(slow) * widen)), float(widen / min(fast))
    return Span(min(max(low, 1e-120), 1e120), min(max(high, 1e-120), 1e120))
