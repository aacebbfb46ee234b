"""Sums of exponentials over time, and where they cross a level."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..errors import UndecidedError
from .roots import zeros

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]  # float64 where every pole is real, else complex128

_PER_DECADE = 96  # points of time at which a crossing is looked for
_GONE = 45.0  # time constants after which exp(-t/tau) is below the last digit of anything
_MOST_POINTS = 4_000_000
_BLOCK = 4_000_000


@dataclass(frozen=True)
class Decay:
    """base + sum over k of Re(weights[k] exp(poles[k] t)), t >= 0; poles 1/s, every real part negative."""

    base: float
    poles: Numbers
    weights: Numbers

    def __call__(self, time: Float) -> Float:
        """The values at times (times,), s."""
        size = max(1, _BLOCK // max(len(self.poles), 1))
        parts = [
            np.real(np.exp(np.outer(time[start : start + size], self.poles)) @ self.weights)
            for start in range(0, len(time), size)
        ]
        return self.base + (np.concatenate(parts) if parts else np.empty(0))

    def lifted(self, level: float) -> Decay:
        """The same less a level."""
        return Decay(self.base - level, self.poles, self.weights)

    def crossings(self) -> Float:
        """Every time at which the sum changes sign, rising, s."""
        time = self._grid()
        value = self(time)
        inner = self._turns(time, value)
        if len(inner):
            time = np.union1d(time, inner)
            value = self(time)
        signs = np.sign(value)
        known = np.flatnonzero(signs)  # a point exactly at the level belongs to the crossing around it
        time, signs = time[known], signs[known]
        change = np.flatnonzero(signs[:-1] != signs[1:])
        return zeros(lambda x, _: self(x), time[change], time[change + 1])

    def _turns(self, time: Float, value: Float) -> Float:
        """Where the sum turns between points, so that a crossing there and back is not missed."""
        rate = Decay(0.0, self.poles, self.weights * self.poles)
        slope = rate(time)
        turning = np.flatnonzero((slope[:-1] > 0) != (slope[1:] > 0))
        # Only a turn towards the level can cross it.
        towards = turning[np.sign(value[turning]) == np.sign(value[turning + 1])]
        return zeros(lambda x, _: rate(x), time[towards], time[towards + 1])

    def _grid(self) -> Float:
        """Times dense enough for every mode, from far below the fastest to where the slowest has
        died away.
        """
        size = np.abs(self.poles)
        if not len(size):
            return np.array([0.0])
        last = _GONE / float(np.abs(np.real(self.poles)).min())
        first = 1e-6 / float(size.max())
        count = math.ceil(math.log10(last / first) * _PER_DECADE)
        grids = [np.zeros(1), np.geomspace(first, last, count)]
        for pole in self.poles[np.abs(np.imag(self.poles)) > 0.02 * size]:
            end = _GONE / abs(pole.real)
            points = math.ceil(end * abs(pole.imag) / (2 * math.pi) * 24)
            if points > _MOST_POINTS:
                raise UndecidedError("the response rings too long to follow every swing.")
            grids.append(np.linspace(0.0, end, points))
        return np.unique(np.concatenate(grids))
