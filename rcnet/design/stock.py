"""The values to choose from, and every way to take some of them that spread no wider than asked."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from ..values import values_between
from .target import Parts

Float = npt.NDArray[np.float64]
Indices = npt.NDArray[np.intp]

_ROUNDING = 1e-9


@dataclass(frozen=True)
class Stock:
    """The values of one kind of part, (count,), base units, rising."""

    values: Float

    @classmethod
    def of(cls, parts: Parts) -> Stock:
        """The values of a series within its range."""
        return cls(np.array(values_between(parts.low, parts.high, parts.series)))

    def __len__(self) -> int:
        return len(self.values)

    @property
    def range(self) -> float:
        """The greatest value over the least."""
        return float(self.values[-1] / self.values[0])

    def _widths(self, spread: float) -> Indices:
        """For each value, how many from it on are at most `spread` times as great, itself included."""
        tops = np.searchsorted(self.values, self.values * (spread * (1 + _ROUNDING)), side="right")
        return np.asarray(tops - np.arange(len(self)))

    def count(self, size: int, spread: float) -> int:
        """How many tuples `rows` has."""
        if size == 0:
            return 1
        return sum(int(w) ** size - (int(w) - 1) ** size for w in self._widths(spread))

    def rows(self, size: int, spread: float) -> Float:
        """Every tuple of `size` values whose greatest is at most `spread` times its least, (rows, size)."""
        if size == 0:
            return np.empty((1, 0))
        widths = self._widths(spread)
        found = [first + _from_zero(int(width), size) for first, width in enumerate(widths)]
        return np.asarray(self.values[np.concatenate(found)])

    def tapers(self, size: int, ratios: Float) -> Float:
        """Tuples whose successive values stand in one of the ratios, each the nearest in stock, (rows, size).

        Those that leave the range are left out, and what comes out twice is there once.
        """
        if size == 0:
            return np.empty((1, 0))
        wanted = np.log(self.values)[:, None, None] + np.log(ratios)[None, :, None] * np.arange(size)
        wanted = wanted.reshape(-1, size)
        half_step = 0.5 * np.log(self.range) / max(len(self) - 1, 1) + _ROUNDING
        inside = (wanted >= np.log(self.values[0]) - half_step) & (
            wanted <= np.log(self.values[-1]) + half_step
        )
        middles = (np.log(self.values[1:]) + np.log(self.values[:-1])) / 2
        nearest = np.searchsorted(middles, wanted[inside.all(axis=1)])
        return np.asarray(self.values[np.unique(nearest, axis=0)])


@lru_cache(maxsize=64)
def _from_zero(width: int, size: int) -> Indices:
    """Every tuple of 0 ... width - 1 that holds a 0, (tuples, size)."""
    # By the place of the first zero, so that nothing is made only to be thrown away.
    blocks = []
    for place in range(size):
        axes = (
            [np.arange(1, width)] * place + [np.zeros(1, np.intp)] + [np.arange(width)] * (size - place - 1)
        )
        grid = np.meshgrid(*axes, indexing="ij")
        blocks.append(np.stack([each.ravel() for each in grid], axis=1))
    return np.concatenate(blocks)


__all__ = ["Stock"]
