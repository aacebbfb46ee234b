"""Sums and products in twice the working precision.

A twofold array is a pair (high, low) of float64 arrays whose exact sum is meant. Products of matrices are
made of products of slices so narrow that ordinary matrix products of them commit no rounding error: K. Ozaki,
T. Ogita, S. Oishi, S. Rump, Numer. Algorithms 59(1):95-118, 2012.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import numpy.typing as npt

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]
Twofold = tuple[Float, Float]

_CHUNK = 8192  # rows sliced at once
_SLICES = 5  # 5 slices of some 22 bits: 2^-100 of the greatest entry of a row

_SPLITTER = 134217729.0  # 2^27 + 1, halves a double's 53 digits (T. Dekker, Numer. Math. 18:224-242, 1971)


def two_sum(a: Numbers, b: Numbers) -> tuple[Numbers, Numbers]:
    """The sum a + b and its rounding error (D. Knuth, The Art of Computer Programming 2, section 4.2.2)."""
    total = a + b
    other = total - a
    return total, (a - (total - other)) + (b - other)


def two_product(a: Float, b: Float) -> tuple[Float, Float]:
    """The product a b and its rounding error (G. Veltkamp's way, in Dekker 1971)."""
    product = a * b
    a_high, a_low = _halves(a)
    b_high, b_low = _halves(b)
    return product, a_low * b_low - (((product - a_high * b_high) - a_low * b_high) - a_high * b_low)


def _halves(a: Float) -> tuple[Float, Float]:
    scaled = a * _SPLITTER
    high = scaled - (scaled - a)
    return high, a - high


def add(a: Twofold, b: Twofold) -> Twofold:
    """The sum a + b, to about 2^-104 of the greater."""
    high, error = two_sum(a[0], b[0])
    return renormalised(high, error + (a[1] + b[1]))


def subtract(a: Twofold, b: Twofold) -> Twofold:
    """The difference a - b, to about 2^-104 of the greater."""
    return add(a, (-b[0], -b[1]))


def square_root(a: Float) -> Twofold:
    """The square root of positive numbers, to about 2^-104."""
    mantissa, power = np.frexp(a)  # the square of a small root's last digits would be too small for a double
    odd = power % 2
    root = np.sqrt(mantissa * 2.0**odd)
    square, error = two_product(root, root)
    rest = ((mantissa * 2.0**odd - square) - error) / (2 * root)
    half = (power - odd) // 2
    return np.ldexp(root, half), np.ldexp(rest, half)


def times(a: Twofold, b: Float) -> Twofold:
    """The product a b for an ordinary array b."""
    high, error = two_product(a[0], b)
    return renormalised(high, error + a[1] * b)


def product(a: Twofold, b: Twofold) -> Twofold:
    """The product a b, entry by entry, to about 2^-103."""
    high, error = two_product(a[0], b[0])
    return renormalised(high, error + (a[0] * b[1] + a[1] * b[0]))


def renormalised(high: Float, low: Float) -> Twofold:
    """The same sum with the high part the nearest double."""
    return two_sum(high, low)


def sum_rows(a: Twofold) -> Twofold:
    """The sum over the first axis."""
    if not len(a[0]):
        return np.zeros(a[0].shape[1:]), np.zeros(a[0].shape[1:])
    high, low = a[0][0], a[1][0]
    for row in range(1, len(a[0])):
        high, error = two_sum(high, a[0][row])
        low = low + (error + a[1][row])
    return renormalised(high, low)


def gram(a: Twofold) -> Twofold:
    """The products a^T a for several a, (several, terms, columns), to 2^-100 of the product of the columns'
    greatest entries.
    """
    terms = a[0].shape[1]
    if terms > _CHUNK:
        parts = [slice(start, start + _CHUNK) for start in range(0, terms, _CHUNK)]
        products = [gram((a[0][:, p], a[1][:, p])) for p in parts]
        return sum_rows((np.array([p[0] for p in products]), np.array([p[1] for p in products])))
    bits = (53 - math.ceil(math.log2(2 * max(terms, 1)))) // 2
    slices, scale = _sliced(a, bits)
    turned = slices.swapaxes(-2, -1)
    high = turned[0] @ slices[0]
    low = np.zeros_like(high)
    # Products of slices i and j are multiples of one number for each i + j. Slices after the first hold a
    # sign in their bits, so all of them together sum to less than 2 terms 2^(2 bits) of it: no rounding.
    for order in range(1, _SLICES):
        pairs = (order + 1) // 2
        share = (turned[:pairs] @ slices[order : order - pairs : -1]).sum(axis=0)
        share = share + share.swapaxes(-2, -1)
        if order % 2 == 0:
            share += turned[pairs] @ slices[pairs]
        high, error = two_sum(high, share)
        low += error
    high, low = renormalised(high, low)
    both = scale.swapaxes(-2, -1) * scale
    return high * both, low * both


def _sliced(a: Twofold, bits: int) -> tuple[Float, Float]:
    """Slices (slices, several, terms, columns) of `bits` bits each, largest first, of the columns scaled by a
    power of two to at most one, and the scale, (several, 1, columns).
    """
    greatest = np.abs(a[0]).max(axis=-2, initial=0.0, keepdims=True)
    scale = np.exp2(np.ceil(np.log2(np.where(greatest > 0, greatest, 1.0))))
    high, low = a[0] / scale, a[1] / scale
    slices, spare = np.empty((_SLICES, *high.shape)), np.empty_like(high)
    for number in range(_SLICES):
        # Adding and taking away 2^(52 - bits of this slice and those before) rounds to a multiple of its last
        # bit.
        cutter = 1.5 * 2.0 ** (52 - bits * (number + 1))
        top = np.add(high, cutter, out=slices[number])
        top -= cutter
        # What is left of the high part is zero or no smaller than the low one: Dekker's sum will do.
        high -= top
        np.add(high, low, out=spare)
        high -= spare
        low += high
        high, spare = spare, high
    return slices, scale
