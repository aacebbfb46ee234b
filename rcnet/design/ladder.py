"""The exact response of many ladders of one shape at once."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Ladder:
    """A ladder of equal sections, each a series part and a shunt part, between a source and a load.

    low: series resistors and shunt capacitors, else series capacitors and shunt resistors
    source: ohm, in series with the input; load: ohm, across the output, infinite where there is none
    Part values are given as (ladders, sections) from the input on, in base units.
    """

    sections: int
    low: bool
    source: float
    load: float

    @property
    def _leak(self) -> float:
        return 1 / self.load

    # ------------------------------------------------------------------ response

    def level(self, r: Float, c: Float, omega: Float | float) -> Float:
        """The passband's power over that at omega, rad/s: (ladders,), from 1 on."""
        p, q, d0, d1 = self.affine(r[:, :-1], c, omega)
        x = r[:, -1] if self.low else 1 / r[:, -1]
        return np.asarray(np.abs(p + q * x) ** 2 / (d0 + d1 * x) ** 2)

    def gain(self, r: Float) -> Float:
        """The response far inside the passband, (ladders,): at dc, or of a high-pass at infinity."""
        if self.low:
            return np.asarray(1 / (1 + (self.source + r.sum(axis=1)) * self._leak))
        return np.asarray(1 / (1 + self.source * ((1 / r).sum(axis=1) + self._leak)))

    def affine(
        self, r: Float, c: Float, omega: Float | float
    ) -> tuple[Complex, Complex, Float, Float | float]:
        """What is left open where all but the last resistor are known.

        1/H = p + q x, and deep in the passband d0 + d1 x, with x the last resistor of a low-pass, or the
        last conductance of a high-pass. Every response of a network is bilinear in each of its parts
        (H. W. Bode, Network Analysis, 1945).
        r: (ladders, sections - 1); omega: rad/s, a number or (ladders,)
        """
        s, n = 1j * np.asarray(omega), self.sections
        # The chain matrix' upper row, from the source to the node reached: 1/H is its first element.
        a: Complex = np.ones(len(c), np.complex128)
        b: Complex = np.full(len(c), self.source, np.complex128)
        if self.low:
            for k in range(n - 1):
                b = b + a * r[:, k]
                a = a + b * (s * c[:, k])
            shunt = s * c[:, -1] + self._leak
            return a + b * shunt, a * shunt, 1 + (self.source + r.sum(axis=1)) * self._leak, self._leak
        for k in range(n - 1):
            b = b + a / (s * c[:, k])
            a = a + b / r[:, k]
        b = b + a / (s * c[:, -1])
        open_gain = 1 + self.source * ((1 / r).sum(axis=1) + self._leak)
        return a + b * self._leak, b, open_gain, self.source

    def last_resistor(self, r: Float, c: Float, omega: float, level: float) -> Float:
        """The last resistor with which power at omega is down by `level` from the passband's, (ladders,).

        It is alone, since the attenuation moves one way with each part. Where every resistor gives more, 0
        (of a high-pass: infinite); where none gives so much, infinite (0).
        """
        p, q, d0, d1 = self.affine(r, c, omega)
        c2 = np.abs(q) ** 2 - level * d1 * d1
        c1 = 2 * ((p * q.conj()).real - level * d0 * d1)
        c0 = np.abs(p) ** 2 - level * d0**2
        with np.errstate(all="ignore"):
            # Written so that nothing cancels; c0 < 0 where there is a root.
            bottom = c1 + np.sqrt(c1 * c1 - 4 * c2 * c0)
            root = np.where(bottom > 0, -2 * c0 / bottom, np.inf)
            root = np.where(c0 >= 0, 0.0, root)
            return root if self.low else np.asarray(1 / root)

    # ------------------------------------------------------------------ the sum of the modes

    def weights(self, r: Float) -> Float:
        """(ladders, sections): times the `columns` of the capacitors, the sum of the modes.

        Of a low-pass the sum of its time constants, s, each capacitor with the resistance it sees while the
        others are open (W. C. Elmore, 1948); of a high-pass that of its natural rates, 1/s, each capacitor
        with the resistance it sees while the others are shorts.
        """
        if self.low:
            up = self.source + np.cumsum(r, axis=1)
            down = self.load + up[:, -1:] - up if math.isfinite(self.load) else np.full_like(up, np.inf)
            return np.asarray(up / (1 + up / down))
        g = 1 / r
        right = np.cumsum(g[:, ::-1], axis=1)[:, ::-1] + self._leak
        if not self.source:
            return np.asarray(right)
        left = 1 / (1 / self.source + np.cumsum(g, axis=1) - g)
        return np.asarray(1 / (left + 1 / right))

    def columns(self, c: Float) -> Float:
        """What the `weights` go with: the capacitors of a low-pass, their reciprocals of a high-pass."""
        return c if self.low else 1 / c

    def rates(self, r: Float, c: Float) -> Float:
        """The natural rates of a low-pass, 1/s, rising: (ladders, sections)."""
        assert self.low
        g = 1 / np.concatenate([self.source + r[:, :1], r[:, 1:]], axis=1)
        after = np.concatenate([g[:, 1:], np.full((len(r), 1), self._leak)], axis=1)
        scale = 1 / np.sqrt(c)
        matrix = np.zeros((len(r), self.sections, self.sections))
        for k in range(self.sections):
            matrix[:, k, k] = (g[:, k] + after[:, k]) * scale[:, k] ** 2
            if k:
                matrix[:, k, k - 1] = matrix[:, k - 1, k] = -g[:, k] * scale[:, k] * scale[:, k - 1]
        return np.asarray(np.linalg.eigvalsh(matrix))


__all__ = ["Ladder"]


class OfLadder:
    """What every question about a ladder takes from it."""

    ladder: Ladder

    @property
    def sections(self) -> int:
        """Of the ladder."""
        return self.ladder.sections

    @property
    def rising(self) -> bool:
        """The time constants of a low-pass grow with each part, the rates of a high-pass fall."""
        return self.ladder.low

    def weights(self, r: Float) -> Float:
        """See Ladder."""
        return self.ladder.weights(r)

    def columns(self, c: Float) -> Float:
        """See Ladder."""
        return self.ladder.columns(c)
