"""Polynomials in s with exact coefficients: what they share, and their roots to every digit a double has.

The coefficients are sums of products of doubles, held as fractions, so nothing is lost before the roots are
sought. Roots that occur more than once are split off first (D. Y. Y. Yun, Proc. SYMSAC 1976, 26-35), the
others are found all at once by mpmath's iteration of Durand and Kerner.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from itertools import zip_longest

from ..errors import UndecidedError
from ..exact import Coefficient

Polynomial = list[Fraction]  # from s^0 up, the last one not zero; [] is zero

_DIGITS = 40


def numbers(coefficients: Sequence[Coefficient], values: dict[str, float]) -> Polynomial:
    """The coefficients as exact numbers."""
    exact = {name: Fraction(value) for name, value in values.items()}
    total = [
        sum(
            (
                Fraction(term.count)
                * math.prod(exact[name] for name in term.above)
                / math.prod(exact[name] for name in term.below)
                for term in coefficient.terms
            ),
            Fraction(0),
        )
        for coefficient in coefficients
    ]
    return _trimmed(total)


def _trimmed(polynomial: Polynomial) -> Polynomial:
    while polynomial and polynomial[-1] == 0:
        polynomial = polynomial[:-1]
    return polynomial


def power_of_s(polynomial: Polynomial) -> int:
    """The lowest power of s in it."""
    return next(k for k, value in enumerate(polynomial) if value)


def divided(a: Polynomial, b: Polynomial) -> tuple[Polynomial, Polynomial]:
    """Quotient and rest."""
    rest, quotient = list(a), [Fraction(0)] * max(len(a) - len(b) + 1, 0)
    for k in range(len(quotient) - 1, -1, -1):
        quotient[k] = rest[k + len(b) - 1] / b[-1]
        for j, value in enumerate(b):
            rest[k + j] -= quotient[k] * value
    return quotient, _trimmed(rest[: len(b) - 1])


def common(a: Polynomial, b: Polynomial) -> Polynomial:
    """The greatest common divisor, highest coefficient 1."""
    while b:
        a, b = b, divided(a, b)[1]
        b = [value / b[-1] for value in b]  # keeps the fractions short
    return [value / a[-1] for value in a]


def derivative(polynomial: Polynomial) -> Polynomial:
    """The derivative by s."""
    return [k * value for k, value in enumerate(polynomial)][1:]


def roots(polynomial: Polynomial) -> list[tuple[complex, int]]:
    """The roots, rad/s, and how many times each: by magnitude, a conjugate pair one after the other."""
    found: list[tuple[complex, int]] = []
    if polynomial and not polynomial[0]:
        at_zero = power_of_s(polynomial)
        found.append((0j, at_zero))
        polynomial = polynomial[at_zero:]
    for piece, count in _parted(polynomial):
        found.extend((root, count) for root in _simple_roots(piece))
    return sorted(found, key=lambda pair: (abs(pair[0]), pair[0].imag))


def _parted(polynomial: Polynomial) -> list[tuple[Polynomial, int]]:
    """Polynomials without double roots, each with the multiplicity its roots have."""
    if len(polynomial) < 2:
        return []
    slope = derivative(polynomial)
    shared = common(polynomial, slope)
    single, rest = divided(polynomial, shared)[0], divided(slope, shared)[0]
    pieces, count = [], 0
    while len(single) > 1:
        count += 1
        left = _less(rest, derivative(single))
        piece = common(single, left) if left else single
        if len(piece) > 1:
            pieces.append((piece, count))
        single = divided(single, piece)[0]
        rest = divided(left, piece)[0] if left else []
    return pieces


def _less(a: Polynomial, b: Polynomial) -> Polynomial:
    return _trimmed([x - y for x, y in zip_longest(a, b, fillvalue=Fraction(0))])


def _simple_roots(polynomial: Polynomial) -> list[complex]:
    import mpmath

    degree = len(polynomial) - 1
    with mpmath.workdps(_DIGITS):
        high = [mpmath.mpf(c.numerator) / c.denominator for c in reversed(polynomial)]
        if degree == 1:
            return [_cleaned(complex(-high[1] / high[0]))]
        # In units of their geometric mean the roots lie around one, where the iteration starts.
        scale = (abs(high[-1]) / abs(high[0])) ** (mpmath.mpf(1) / degree) if high[-1] else mpmath.mpf(1)
        scaled = [value * scale ** (degree - k) for k, value in enumerate(high)]
        try:
            found = mpmath.polyroots(
                [value / scaled[0] for value in scaled], maxsteps=500, extraprec=200 + 40 * degree
            )
        except mpmath.NoConvergence:
            raise UndecidedError(
                "the roots of a polynomial of the transfer function are not found."
            ) from None
        return [_cleaned(complex(root * scale)) for root in found]


def _cleaned(root: complex) -> complex:
    """Without the trace of an imaginary part that the iteration leaves on real roots."""
    if not 0 < abs(root) < math.inf:
        raise UndecidedError("they lie beyond the numbers double precision holds.")
    return complex(root.real, 0.0) if abs(root.imag) < 1e-25 * abs(root) else root
