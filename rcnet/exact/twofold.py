"""Matrix products in twice the working precision.

A twofold array is a pair (high, low) of float64 arrays whose exact sum is meant. Products of matrices are
made of products of slices so narrow that ordinary matrix products of them commit no rounding error: K. Ozaki,
T. Ogita, S. Oishi, S. Rump, Numer. Algorithms 59(1):95-118, 2012.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from .residual import _product as product_error
from .residual import _sum as sum_error

Float = npt.NDArray[np.float64]
Twofold = tuple[Float, Float]

_CHUNK = 8192  # rows sliced at once
_SLICES = 5  # 5 slices of some 22 bits: 2^-100 of the greatest entry of a row


def add(a: Twofold, b: Twofold) -> Twofold:
    """The sum a + b, to about 2^-104 of the greater."""
    high, error = sum_error(a[0], b[0])
    return renormalised(high, error + (a[1] + b[1]))


def subtract(a: Twofold, b: Twofold) -> Twofold:
    """The difference a - b, to about 2^-104 of the greater."""
    return add(a, (-b[0], -b[1]))


def times(a: Twofold, b: Float) -> Twofold:
    """The product a b for an ordinary array b."""
    high, error = product_error(a[0], b)
    return renormalised(high, error + a[1] * b)


def renormalised(high: Float, low: Float) -> Twofold:
    """The same sum with the high part the nearest double."""
    return sum_error(high, low)


def sum_rows(a: Twofold) -> Twofold:
    """The sum over the first axis."""
    high, low = np.zeros(a[0].shape[1:]), np.zeros(a[0].shape[1:])
    for row in range(len(a[0])):
        high, error = sum_error(high, a[0][row])
        low = low + (error + a[1][row])
    return renormalised(high, low)


def cross_product(a: Twofold, b: Twofold) -> Twofold:
    """The product a^T b for a, b of shapes (terms, columns), to 2^-100 of the product of the columns'
    greatest entries.
    """
    if len(a[0]) > _CHUNK:
        parts = [slice(start, start + _CHUNK) for start in range(0, len(a[0]), _CHUNK)]
        products = [cross_product((a[0][p], a[1][p]), (b[0][p], b[1][p])) for p in parts]
        return sum_rows((np.array([p[0] for p in products]), np.array([p[1] for p in products])))
    terms = max(len(a[0]), 1)
    bits = (53 - math.ceil(math.log2(terms + 1))) // 2
    left, left_scale = _sliced(a, bits)
    right, right_scale = _sliced(b, bits)
    high = np.zeros((a[0].shape[1], b[0].shape[1]))
    low = np.zeros_like(high)
    for order in range(_SLICES):
        for i in range(order + 1):
            high, error = sum_error(high, left[i].T @ right[order - i])
            low += error
    high, low = renormalised(high, low)
    scale = left_scale[:, None] * right_scale
    return high * scale, low * scale


def _sliced(a: Twofold, bits: int) -> tuple[list[Float], Float]:
    """Slices of `bits` bits each, largest first, of the columns scaled by a power of two to at most one."""
    greatest = np.abs(a[0]).max(axis=0, initial=0.0)
    scale = np.exp2(np.ceil(np.log2(np.where(greatest > 0, greatest, 1.0))))
    high, low = a[0] / scale, a[1] / scale
    slices = []
    for number in range(_SLICES):
        # Adding and taking away 2^(52 - bits of this slice and those before) rounds to a multiple of its last
        # bit.
        cutter = 1.5 * 2.0 ** (52 - bits * (number + 1))
        top = (high + cutter) - cutter
        slices.append(top)
        high, low = renormalised(high - top, low)
    return slices, scale
