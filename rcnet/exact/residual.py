"""The residual of linear equations given as triplets, computed in twice the working precision."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from .twofold import two_product, two_sum

Numbers = npt.NDArray[Any]
Float = npt.NDArray[np.float64]
Indices = npt.NDArray[np.int64]


class Residual:
    """b - (constant + s slope) x for triplets that are summed nowhere but here.

    Complex numbers are taken apart into real ones: rows and unknowns `size` and beyond are imaginary parts.
    Products and sums carry their rounding errors along (T. Ogita, S. Rump, S. Oishi, SIAM J. Sci. Comput.
    26(6):1955-1988, 2005), so the result is right to the last digit, or to 1e-32 of the largest product.
    """

    def __init__(self, rows: Indices, columns: Indices, constant: Float, slope: Float, size: int) -> None:
        self.size = size
        fixed, moving = np.flatnonzero(constant), np.flatnonzero(slope)
        self.constant, self.slope = constant[fixed], slope[moving]
        r, c, i = rows, columns, size
        # real and imaginary rows of: constant x, Re(s) slope x, Im(s) slope x
        self.row = np.concatenate(
            [r[fixed], r[fixed] + i, r[moving], r[moving] + i, r[moving], r[moving] + i]
        )
        self.column = np.concatenate(
            [c[fixed], c[fixed] + i, c[moving], c[moving] + i, c[moving] + i, c[moving]]
        )
        self.turns = _turns(self.row)

    def __call__(self, s: Numbers, b: Numbers, x: Numbers) -> Numbers:
        """The residual (size, points) at each s (points,), given b and x (size, points)."""
        along, across = self.slope[:, None] * np.real(s), self.slope[:, None] * np.imag(s)
        fixed = np.broadcast_to(self.constant[:, None], (len(self.constant), len(s)))
        factors = np.concatenate([fixed, fixed, along, along, -across, across])
        product, missing = two_product(factors, np.concatenate([np.real(x), np.imag(x)])[self.column])
        total = np.concatenate([np.real(b), np.imag(b)]).astype(np.float64)
        carried = np.zeros_like(total)
        for turn in self.turns:
            row = self.row[turn]
            total[row], error = two_sum(total[row], -product[turn])
            carried[row] += error - missing[turn]
        total += carried
        if np.iscomplexobj(x) or np.iscomplexobj(b) or np.iscomplexobj(s):
            return np.asarray(total[: self.size] + 1j * total[self.size :])
        return total[: self.size]


def _turns(rows: Indices) -> list[Indices]:
    """Entries dealt out so that no turn holds a row twice."""
    order = np.argsort(rows, kind="stable")
    ordered = rows[order]
    begins = np.searchsorted(ordered, ordered, side="left")
    rank = np.arange(len(rows)) - begins
    by_rank = np.argsort(rank, kind="stable")
    cuts = np.flatnonzero(np.diff(rank[by_rank])) + 1
    return np.split(order[by_rank], cuts)
