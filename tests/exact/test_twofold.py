"""Arithmetic in twice the working precision against exact fractions and mpmath."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import numpy.typing as npt
import pytest

from rcnet.exact import twofold
from rcnet.exact.twofold import Twofold

Float = npt.NDArray[np.float64]


def numbers(kind: str, shape: tuple[int, ...]) -> Twofold:
    """Twofold numbers: of one size, over forty decades, or full of ones in their bits."""
    rng = np.random.default_rng(1)
    high = rng.standard_normal(shape)
    if kind == "decades":
        high *= 10 ** rng.uniform(-20, 20, shape)
    elif kind == "ones":
        high = np.sign(high) * (1 - 2.0**-53 * rng.integers(1, 4, shape))
    return twofold.renormalised(high, high * 2.0**-54 * rng.uniform(-1, 1, shape))


def fractions(a: Twofold) -> npt.NDArray[np.object_]:
    """The exact values."""
    exact = np.vectorize(Fraction, otypes=[object])
    return np.asarray(exact(a[0]) + exact(a[1]))


@pytest.mark.parametrize("kind", ["alike", "decades", "ones"])
@pytest.mark.parametrize("terms", [1, 2, 3, 12, 200])
def test_gram_holds_a_hundred_bits(kind: str, terms: int) -> None:
    """A^T A is right to 2^-100 of the product of the columns' greatest entries and the terms' number."""
    a = numbers(kind, (2, terms, 4))
    high, low = twofold.gram(a)
    for which in range(2):
        exact = fractions((a[0][which], a[1][which]))
        error = fractions((high[which], low[which])) - exact.T @ exact
        greatest = np.abs(a[0][which]).max(axis=0)
        allowed = 2.0**-100 * terms * np.outer(greatest, greatest)
        assert (np.abs(error.astype(np.float64)) <= allowed).all()


def test_gram_of_many_rows_is_the_sum_of_its_parts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Rows taken in chunks give what they give at once."""
    a = numbers("alike", (1, 50, 3))
    whole = fractions(twofold.gram(a))
    monkeypatch.setattr(twofold, "_CHUNK", 16)
    parts = fractions(twofold.gram(a))
    assert np.abs((parts - whole).astype(np.float64)).max() <= 2.0**-98 * 50 * np.abs(a[0]).max() ** 2


def test_gram_of_no_rows_is_zero() -> None:
    """Without terms the sum is nothing."""
    empty = np.empty((2, 0, 3))
    assert not twofold.gram((empty, empty))[0].any()


@pytest.mark.parametrize("kind", ["alike", "decades", "ones"])
def test_products_hold_a_hundred_bits(kind: str) -> None:
    """Entry by entry, relative to the product itself."""
    a = numbers(kind, (200,))
    b = (a[0][::-1], a[1][::-1])
    exact = fractions(a) * fractions(b)
    error = (fractions(twofold.product(a, b)) - exact) / exact
    assert np.abs(error.astype(np.float64)).max() <= 2.0**-100


def test_square_roots_hold_a_hundred_bits_whatever_their_size() -> None:
    """From 1e-300 to 1e300, against mpmath."""
    values: Float = 10 ** np.random.default_rng(2).uniform(-300, 300, 300)
    with mpmath.workdps(60):
        for value, high, low in zip(values, *twofold.square_root(values), strict=True):
            exact = mpmath.sqrt(mpmath.mpf(float(value)))
            assert (
                abs((mpmath.mpf(float(high)) + mpmath.mpf(float(low))) / exact - 1) <= mpmath.mpf(2) ** -100
            )
