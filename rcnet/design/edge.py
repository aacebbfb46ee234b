"""Low-pass and high-pass ladders for a cutoff, an attenuation or both."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from .ladder import Ladder, OfLadder
from .limits import least_sum, sum_of_modes
from .stock import Stock
from .target import Target

Float = npt.NDArray[np.float64]

HALF = 2.0
NEPER = 20 / math.log(10)  # dB
SETTLED = 1e-4  # of the frequency aimed at: what no tolerance is as fine as
_SECANTS = 4


@dataclass(frozen=True)
class Edge(OfLadder):
    """The question for one number of sections.

    omega: rad/s, where power is to be down by `level` at nominal values
    width: the logarithm of how far off that may be, either way; what tolerances add is added to the claims
    stop: rad/s and the level to be reached there at the worst of tolerances, None where only one point counts
    least_gain: of the passband at the worst of tolerances, 0 where it does not matter
    """

    ladder: Ladder
    resistors: Stock
    capacitors: Stock
    target: Target
    omega: float
    level: float
    width: float
    stop: tuple[float, float] | None = None
    least_gain: float = 0.0
    cost: float = 1.0

    @property
    def sums(self) -> tuple[float, float]:
        """Limits of the sum of modes; see `sum_of_modes`."""
        least, most = sum_of_modes(self.ladder.sections, self.level)
        low, high = self._ends
        found = (least / high, most / low) if self.ladder.low else (least * low, most * high)
        if self.stop is None:
            return found
        least = least_sum(self.ladder.sections, self.stop[1])
        return max(
            found[0], least / self._worst_stop if self.ladder.low else least * self._worst_stop
        ), found[1]

    @property
    def _worst_stop(self) -> float:
        """The frequency, rad/s, where nominal values do what the worst ones do in the stop-band."""
        assert self.stop is not None
        return self.stop[0] * (self.target.down if self.ladder.low else self.target.up)

    @property
    def enough(self) -> float:
        """Nothing lies further inside than what is aimed at exactly; a ten-thousandth from it is as good."""
        return self.width - SETTLED

    @property
    def _ends(self) -> tuple[float, float]:
        return self.omega * math.exp(-self.width), self.omega * math.exp(self.width)

    def span(self, r: Float, c: Float) -> tuple[Float, Float]:
        """The last resistors between which the frequency is met; it falls as each part grows."""
        low, high = self._ends
        return (
            self.ladder.last_resistor(r, c, high, self.level),
            self.ladder.last_resistor(r, c, low, self.level),
        )

    def margins(self, r: Float, c: Float) -> Float:
        """The frequency against its limits, the attenuation against what is asked, the loss against its own.

        Every natural rate is 1/(ab) of what it was where all resistors are a times and all capacitors b times
        as great, and no single part moves the frequency the other way: so the worst tolerances do to it is
        one factor, the same for every ladder, and the claims are wider by that.
        """
        found = np.full(len(c), np.inf)
        if self.stop is not None:
            found = 0.5 * np.log(self.ladder.level(r, c, self._worst_stop) / self.stop[1])
        if self.least_gain:
            found = np.minimum(found, np.log(self.worst_gain(r) / self.least_gain))
        rest = np.flatnonzero(found >= 0)
        found[rest] = np.minimum(found[rest], self.width - np.abs(self.crossing(r[rest], c[rest])))
        return found

    def crossing(self, r: Float, c: Float) -> Float:
        """The logarithm of the frequency where power is down by the level over the one aimed at."""
        goal = math.log(self.level)

        def off(x: Float) -> Float:
            return np.asarray(np.log(self.ladder.level(r, c, self.omega * np.exp(x))) - goal)

        before, x = np.full(len(c), -self.width), np.full(len(c), self.width)
        was, now = off(before), off(x)
        for _ in range(_SECANTS):
            step = now - was
            slope = np.where(step == 0, 1.0, step)
            nearer = np.where(step == 0, x, x - now * (x - before) / slope)
            nearer = np.clip(nearer, -4 * self.width, 4 * self.width)
            before, was, x = x, now, nearer
            now = off(x)
        return x

    def worst_gain(self, r: Float) -> Float:
        """The passband's gain with series resistors high and shunt ones low."""
        tolerance = self.target.resistors.tolerance
        apart = (1 + tolerance.low) / (1 + tolerance.high)
        gain = self.ladder.gain(r)
        return np.asarray(gain * apart / (gain * apart + 1 - gain))

    def noise(self, r: Float, c: Float) -> Float:
        """Over all frequencies kT over the last capacitor; of a high-pass, in the band, by the last resistor.

        H. Nyquist, Phys. Rev. 32:110-113, 1928.
        """
        return -c[:, -1] if self.ladder.low else r[:, -1]


__all__ = ["HALF", "NEPER", "SETTLED", "Edge"]
