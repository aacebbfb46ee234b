"""Band-passes of a high-pass section and a low-pass one, for two cutoffs."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import numpy.typing as npt

from .stock import Stock
from .target import Target

Float = npt.NDArray[np.float64]

NEAR = 2.5e-3  # of each cutoff: nearer it need not be before the spread of values counts


@dataclass(frozen=True)
class Band:
    """The question: C1 in series, R1 to ground, R2 in series, C2 to ground.

    H = b1 s/(a0 + a1 s + a2 s^2): the peak lies at sqrt(a0/a2), the cutoffs where |a0/w - a2 w| = a1.
    lower, upper: rad/s; width: the logarithm of how far off either may be; what tolerances add comes on top
    least_gain: in the middle between the cutoffs asked for, at the worst of tolerances
    """

    resistors: Stock
    capacitors: Stock
    target: Target
    lower: float
    upper: float
    width: float
    least_gain: float
    sections: int = 2
    rising: bool = True
    cost: float = 1.0
    sums: tuple[float, float] = (0.0, math.inf)

    @property
    def enough(self) -> float:
        """Nothing lies further inside than what is aimed at exactly; a four-hundredth from it is as good."""
        return self.width - NEAR

    @property
    def middle(self) -> float:
        """Between the cutoffs asked for, rad/s."""
        return math.sqrt(self.lower * self.upper)

    def weights(self, r: Float) -> Float:
        """None: there is no bound on the sum of modes that both cutoffs set."""
        return np.zeros((len(r), 2))

    def columns(self, c: Float) -> Float:
        """What nothing is multiplied with."""
        return c

    def span(self, r: Float, c: Float) -> tuple[Float, Float]:
        """The last resistors between which the peak, sqrt(a0/a2), lies as near as both cutoffs may be off.

        a0/a2 falls as R2 grows, as it is a quotient of two linear functions with one pole, below zero.
        """
        ends = []
        for shift in (1, -1):
            square = (self.middle * math.exp(shift * self.width)) ** 2
            g, q, p, through = self._pieces(r[:, 0], c[:, 0])
            top, bottom = q + g - square * through * c[:, 1], square * c[:, 1] * p - q * g
            with np.errstate(all="ignore"):
                ends.append(np.where(top <= 0, 0.0, np.where(bottom > 0, top / bottom, np.inf)))
        return ends[0], ends[1]

    def _pieces(
        self, r1: Float, c1: Float, source: Float | float | None = None, load: Float | float | None = None
    ) -> tuple[Float | float, Float, Float, Float]:
        source = self.target.source if source is None else source
        load = self.target.load if load is None else load
        return 1 / load, 1 / r1, c1 * (1 + source / r1), c1 * source

    def coefficients(
        self, r: Float, c: Float, source: Float | float | None = None, load: Float | float | None = None
    ) -> tuple[Float, Float, Float, Float]:
        """b1, a0, a1, a2 for each ladder; source and load as the target has them where they are not given."""
        r2, c2 = r[..., 1], c[..., 1]
        g, q, p, through = self._pieces(r[..., 0], c[..., 0], source, load)
        alpha, beta = 1 + r2 * g, r2 * c2
        return (
            c[..., 0],
            np.asarray(alpha * q + g),
            np.asarray(alpha * p + beta * q + c2 + through * g),
            np.asarray(beta * p + through * c2),
        )

    def margins(self, r: Float, c: Float) -> Float:
        """Both cutoffs and the gain in the middle, at every corner of the tolerances."""
        nominal = self.coefficients(r, c)
        found = np.min(
            [self.width - np.abs(np.log(edge / wanted)) for edge, wanted in self._edges(nominal)], axis=0
        )
        rest = np.flatnonzero(found >= 0)
        found[rest] = np.minimum(found[rest], self._at_corners(r[rest], c[rest]))
        return np.asarray(found)

    def _edges(self, coefficients: tuple[Float, Float, Float, Float]) -> list[tuple[Float, float]]:
        _, a0, a1, a2 = coefficients
        root = np.sqrt(a1 * a1 + 4 * a0 * a2)
        # The product of both is a0/a2; written so that nothing cancels.
        return [(2 * a0 / (a1 + root), self.lower), ((a1 + root) / (2 * a2), self.upper)]

    def _at_corners(self, r: Float, c: Float) -> Float:
        target, found = self.target, np.full(len(r), np.inf)
        for _, factors in self._corners:
            coefficients = self._moved(r, c, factors)
            for edge, wanted in self._edges(coefficients):
                low, high = wanted / target.up, wanted / target.down
                found = np.minimum(found, self.width + np.minimum(np.log(edge / low), np.log(high / edge)))
            b1, a0, a1, a2 = coefficients
            w = self.middle
            gain = b1 * w / np.hypot(a0 - a2 * w * w, a1 * w)
            found = np.minimum(found, np.log(gain / self.least_gain))
        return found

    @cached_property
    def _corners(self) -> list[tuple[frozenset[str], tuple[float, ...]]]:
        """The parts at the upper end of their tolerance, and what each part is multiplied with.

        Both cutoffs have their extremes at corners. Each is a root of a2 w^2 -+ a1 w - a0, and as all three
        are linear in each part, a given w is the cutoff for one value of the part at most: so the cutoff
        moves one way with it. And |H| is least at a corner, since 1/|H|^2 is a convex quadratic in each
        part's value, or in the reciprocal of C1's.
        """
        names = ("R1", "R2", "C1", "C2", "Rsource", "Rload")
        on_r, on_c = self.target.resistors.tolerance, self.target.capacitors.tolerance
        ends = [on_r, on_r, on_c, on_c, on_r, on_r]
        there = [True, True, True, True, self.target.source > 0, math.isfinite(self.target.load)]
        found = []
        for ups in itertools.product(*((False, True) if each else (False,) for each in there)):
            factors = [1 + (end.high if up else end.low) for end, up in zip(ends, ups, strict=True)]
            found.append((frozenset(itertools.compress(names, ups)), tuple(factors)))
        return found

    def _moved(self, r: Float, c: Float, factors: tuple[float, ...]) -> tuple[Float, Float, Float, Float]:
        return self.coefficients(
            r * np.array(factors[:2]),
            c * np.array(factors[2:4]),
            self.target.source * factors[4],
            self.target.load * factors[5],
        )

    def extremes(self, r: list[float], c: list[float]) -> dict[str, tuple[frozenset[str], frozenset[str]]]:
        """For each cutoff of one network the corners where it is least and greatest, as upper parts."""
        at = [
            (upper, [float(edge) for edge, _ in self._edges(self._moved(np.array(r), np.array(c), factors))])
            for upper, factors in self._corners
        ]
        return {
            name: (min(at, key=lambda each: each[1][k])[0], max(at, key=lambda each: each[1][k])[0])
            for k, name in enumerate(("lower", "upper"))
        }

    def noise(self, r: Float, c: Float) -> Float:
        """Over all frequencies, kT over the last capacitor."""
        return -c[:, -1]


__all__ = ["Band"]
