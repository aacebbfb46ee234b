"""Ladders that smooth a pulse-width signal to a level."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from .ladder import Ladder, OfLadder
from .stock import Stock
from .target import Target

Float = npt.NDArray[np.float64]

PLENTY = math.log(1.1)  # a claim that holds by a tenth at the worst of tolerances holds well enough
_NEWTON, _HALVINGS = 8, 22


def band_of(target: Target) -> float:
    """The share of the final value within which the level counts as settled: half the ripple allowed."""
    assert target.ripple is not None and target.supply is not None
    return target.ripple / (2 * target.supply)


@dataclass(frozen=True)
class Level(OfLadder):
    """The question for one number of sections.

    The wave runs from 0 to the supply, half the time each: at that duty a ladder's ripple is greatest, as is
    the fundamental, (2/pi) sin(pi duty).
    least_gain: of the passband at the worst of tolerances, 0 where it does not matter
    """

    ladder: Ladder
    resistors: Stock
    capacitors: Stock
    target: Target
    least_gain: float = 0.0
    enough: float = PLENTY

    @property
    def cost(self) -> float:
        """Several last resistors come into question, and each takes its modes."""
        return 4 * len(self.resistors) / max(math.log(self.resistors.range), 1.0)

    @property
    def sums(self) -> tuple[float, float]:
        """No mode is slower than alone settles in time; and the sum of n is at most n times the slowest.

        The other end: ripple of at least the supply times |H|, and |H| >= prod 1/(1 + omega t) >=
        (1 + omega sum/n)^-n.
        """
        assert self.target.settling is not None and self.target.ripple is not None
        n = self.ladder.sections
        most = n * self.target.settling / self.target.up / math.log(1 / band_of(self.target))
        root = (self._wanted_level * self.least_gain**2) ** (0.5 / n) if self.least_gain else 0.0
        return n * max(root - 1, 0.0) / self._omega, most

    @property
    def _omega(self) -> float:
        """The carrier, rad/s, where nominal values do what the smallest do."""
        assert self.target.carrier is not None
        return 2 * math.pi * self.target.carrier * self.target.down

    @property
    def _wanted_level(self) -> float:
        assert self.target.supply is not None and self.target.ripple is not None
        return (self.target.supply / self.target.ripple) ** 2

    def span(self, r: Float, c: Float) -> tuple[Float, Float]:
        """Below the least one |H| alone, of which the ripple has no less, is too great at the carrier."""
        p, q, _, _ = self.ladder.affine(r, c, self._omega)
        c2, c1, c0 = np.abs(q) ** 2, 2 * (p * q.conj()).real, np.abs(p) ** 2 - self._wanted_level
        least = np.where(c0 >= 0, 0.0, -2 * c0 / (c1 + np.sqrt(np.maximum(c1 * c1 - 4 * c2 * c0, 0.0))))
        return least, self._slowest(r, c)

    def _slowest(self, r: Float, c: Float) -> Float:
        """The last resistor beyond which the sum of time constants is too great for the settling time."""
        low = np.full(len(c), self.resistors.values[0])
        high = np.full(len(c), self.resistors.values[-1])
        for _ in range(_HALVINGS):
            middle = np.sqrt(low * high)
            total = (self.ladder.weights(np.concatenate([r, middle[:, None]], axis=1)) * c).sum(axis=1)
            fits = total <= self.sums[1]
            low, high = np.where(fits, middle, low), np.where(fits, high, middle)
        return high

    def margins(self, r: Float, c: Float) -> Float:
        """The ripple with every part as small, and the settling time with every part as great, as it may be.

        Every time constant grows with every part, and with it the settling time; each harmonic falls with
        each part but the load, with which it grows.
        """
        assert self.target.settling is not None and self.target.carrier is not None
        assert self.target.ripple is not None and self.target.supply is not None
        found = np.full(len(c), -np.inf)
        soonest = self._slowest_mode(r, c) * self.target.up * math.log(1 / band_of(self.target))
        rest = np.flatnonzero(soonest <= self.target.settling)
        found[rest] = self._margins(r[rest], c[rest])
        return found

    def _slowest_mode(self, r: Float, c: Float) -> Float:
        """No more than the greatest time constant, s, (ladders,): the sum of all their squares over the sum.

        Both are traces of G^-1 C and of its square, known without finding the modes.
        """
        up = self.ladder.source + np.cumsum(r, axis=1)
        left = 1 - up / (up[:, -1:] + self.ladder.load)  # of a voltage at the output, what is across the load
        squares, total = np.zeros(len(c)), np.zeros(len(c))
        for i in range(self.sections):
            total += c[:, i] * up[:, i] * left[:, i]
            for j in range(i + 1):
                shared = (c[:, i] * c[:, j]) * (up[:, j] * left[:, i]) ** 2
                squares += shared if i == j else 2 * shared
        return np.asarray(squares / total)

    def _margins(self, r: Float, c: Float) -> Float:
        assert self.target.settling is not None and self.target.carrier is not None
        assert self.target.ripple is not None and self.target.supply is not None
        rates = self.ladder.rates(r, c)
        settled = _settling(rates, _shares(rates), band_of(self.target)) * self.target.up
        small, r_small, c_small = self._smallest(r, c)
        rates = rates / self.target.down if small is self.ladder else small.rates(r_small, c_small)
        height = small.gain(r_small) * self.target.supply
        ripple = _ripple(rates, _shares(rates), 1 / self.target.carrier) * height
        found = np.minimum(np.log(self.target.settling / settled), np.log(self.target.ripple / ripple))
        if self.least_gain:
            found = np.minimum(found, np.log(self.worst_gain(r) / self.least_gain))
        return np.where(np.isfinite(found), found, -np.inf)

    def _smallest(self, r: Float, c: Float) -> tuple[Ladder, Float, Float]:
        """The ladders with every part as small as it may be, but the load as great."""
        on_r, on_c = self.target.resistors.tolerance, self.target.capacitors.tolerance
        if not math.isfinite(self.target.load):
            return self.ladder, r, c
        source, load = self.target.source * (1 + on_r.low), self.target.load * (1 + on_r.high)
        return Ladder(self.sections, True, source, load), r * (1 + on_r.low), c * (1 + on_c.low)

    def worst_gain(self, r: Float) -> Float:
        """The gain at dc with series resistors high and the load low."""
        ends, gain = self.target.resistors.tolerance, self.ladder.gain(r)
        apart = (1 + ends.low) / (1 + ends.high)
        return np.asarray(gain * apart / (gain * apart + 1 - gain))

    def noise(self, r: Float, c: Float) -> Float:
        """Over all frequencies, kT over the last capacitor (H. Nyquist, Phys. Rev. 32:110-113, 1928)."""
        return -c[:, -1]


def _shares(rates: Float) -> Float:
    """What each mode has of the unit step response, (ladders, modes): prod over the others l/(l - l_k)."""
    n = rates.shape[1]
    shares = np.ones_like(rates)
    for k in range(n):
        for other in range(n):
            if other != k:
                shares[:, k] *= rates[:, other] / (rates[:, other] - rates[:, k])
    return shares


def _settling(rates: Float, shares: Float, band: float) -> Float:
    """When the unit step response of ladders is within a band of its end, (ladders,)."""
    # What is left falls from 1 and ends as the slowest mode alone; Newton's method in its logarithm.
    time = np.maximum(np.log(shares[:, 0] / band) / rates[:, 0], 0.0)
    for _ in range(_NEWTON):
        parts = shares * np.exp(-rates * time[:, None])
        left, slope = parts.sum(axis=1), (parts * rates).sum(axis=1)
        time = np.maximum(time + np.log(np.maximum(left, 1e-300) / band) * left / slope, 0.0)
    return np.asarray(time)


def _ripple(rates: Float, shares: Float, period: float) -> Float:
    """The steady ripple of a square wave of height 1 and duty a half, peak to peak, (ladders,).

    In the half period after the wave rises the output is, but for its mean, the sum of
    shares/2 (1 - 2 exp(-rate t)/(1 + exp(-rate period/2))); half a period later it is the negative of that.
    """
    half = period / 2
    bottom = 1 + np.exp(-rates * half)

    def slope(time: Float) -> Float:
        return np.asarray((shares * rates * np.exp(-rates * time[:, None]) / bottom).sum(axis=1))

    low, high = np.zeros(len(rates)), np.full(len(rates), half)
    if rates.shape[1] > 1:  # the output of one section turns where the wave does
        for _ in range(_HALVINGS):
            middle = (low + high) / 2
            falls = slope(middle) < 0
            low, high = np.where(falls, middle, low), np.where(falls, high, middle)
    at = low[:, None]
    # expm1, because each mode hardly moves in a period.
    wave = (np.expm1(-rates * half) - 2 * np.expm1(-rates * at)) / bottom
    return np.asarray(np.abs((shares * wave).sum(axis=1)))


__all__ = ["PLENTY", "Level", "band_of"]
