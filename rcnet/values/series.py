"""Preferred values: the E series of IEC 60063."""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction
from types import MappingProxyType
from typing import Final

from ..errors import QuantityError
from ._decimals import shown, significant

_E24: Final = (
    10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91,
)  # fmt: skip
# IEC 60063:2015: three digits follow 100 * 10^(k/N), rounded, but for this one (the rule gives 919).
_E192: Final = tuple(920 if k == 185 else round(100 * 10 ** (k / 192)) for k in range(192))

SERIES: Final[Mapping[str, tuple[int, ...]]] = MappingProxyType(
    {
        "E3": _E24[::8],
        "E6": _E24[::4],
        "E12": _E24[::2],
        "E24": _E24,
        "E48": _E192[::4],
        "E96": _E192[::2],
        "E192": _E192,
    }
)
"""The values of one decade as IEC 60063:2015 lists them: two digits up to E24, three from E48 on."""

ROUNDING: Final = 1e-9  # relative; a value given as decimal text and computed with is still that value

# Tolerance up to which a series is the customary one, as a fraction. Parts of the finer ones are stocked in
# E24 too, which is no subset of them. (Custom, not part of the standard.)
_CUSTOMARY: Final = (
    (0.005, ("E192", "E24")),
    (0.01, ("E96", "E24")),
    (0.02, ("E48", "E24")),
    (0.05, ("E24",)),
    (0.10, ("E12",)),
    (0.20, ("E6",)),
    (math.inf, ("E3",)),
)


def nearest(value: float, series: str) -> float:
    """The value of a series nearest to `value` by ratio; of two as near, the lower one.

    It is the double nearest to the decimal value, as 4.7e-9. Raises QuantityError for a value that is not
    positive and finite, and for a series that does not exist.
    """
    near = _around(value, series)
    low = max((each for each in near if each <= value), default=near[0])
    high = min((each for each in near if each >= value), default=near[-1])
    # Nearer by ratio to the higher one: high / value < value / low; in fractions, so that nothing overflows.
    return high if Fraction(high) * Fraction(low) < Fraction(value) ** 2 else low


def in_series(value: float, series: str) -> bool:
    """True if a value is one of a series', but for rounding (one part in 1e9). Errors as for `nearest`."""
    near = nearest(value, series)
    return abs(value - near) <= ROUNDING * near


def below(value: float, series: str) -> float:
    """The next lower value of a series; one a value meets but for rounding is not lower. See `nearest`.

    Raises QuantityError where no double is left below.
    """
    lower = [each for each in _around(value, series) if each < value * (1 - ROUNDING)]
    if not lower:
        raise QuantityError(
            f"{series} has no value below {shown(value)} that a double holds.", remedy="Give a larger value."
        )
    return max(lower)


def above(value: float, series: str) -> float:
    """The next higher value of a series; one a value meets but for rounding is not higher. See `nearest`.

    Raises QuantityError where no double is left above.
    """
    higher = [each for each in _around(value, series) if each > value * (1 + ROUNDING)]
    if not higher:
        raise QuantityError(
            f"{series} has no value above {shown(value)} that a double holds.",
            remedy="Give a smaller value.",
        )
    return min(higher)


def values_between(low: float, high: float, series: str) -> list[float]:
    """The values of a series from `low` to `high`, both ends included, rising; none where low > high.

    Each is the double nearest to the decimal value. Errors as for `nearest`.
    """
    mantissas = _mantissas(series)
    first, last = _decade(_checked(low)), _decade(_checked(high))
    shift = len(str(mantissas[0])) - 1
    every = (
        float(f"{mantissa}e{decade - shift}") for decade in range(first, last + 1) for mantissa in mantissas
    )
    return [value for value in every if low <= value <= high]


def customary_series(tolerance: float) -> tuple[str, ...]:
    """The series in which parts of a tolerance are made, the one named after it first.

    tolerance: a fraction, 0.01 for 1 %, the greater of both sides. 20 % goes with E6, 10 % with E12, 5 % with
    E24, 2 % with E48, 1 % with E96, less with E192; E24 is made in the finer ones too. Raises QuantityError
    for a negative one.
    """
    if not tolerance >= 0:
        raise QuantityError(f"a tolerance of {shown(tolerance)} is none.", remedy="Give zero or more.")
    return next(names for most, names in _CUSTOMARY if tolerance <= most * (1 + ROUNDING))


def _mantissas(series: str) -> tuple[int, ...]:
    if series not in SERIES:
        raise QuantityError(
            f"{shown(series)} is no series of preferred values.", remedy=f"Known: {', '.join(SERIES)}."
        )
    return SERIES[series]


def _checked(value: float) -> float:
    if not 0 < value < math.inf:
        raise QuantityError(
            f"{shown(value)} has no preferred value near it.", remedy="Give a positive, finite number."
        )
    return value


def _decade(value: float) -> int:
    """The exponent of a positive double's first decimal digit; never off by one, as a logarithm may be."""
    _, digits, exponent = significant(repr(float(value)))
    return len(digits) + exponent - 1


def _around(value: float, series: str) -> list[float]:
    """The values of a series, rising, from the decade below a value's to the one above."""
    mantissas = _mantissas(series)
    decade = _decade(_checked(value))
    shift = len(str(mantissas[0])) - 1
    every = (
        float(f"{mantissa}e{power - shift}")
        for power in (decade - 1, decade, decade + 1)
        for mantissa in mantissas
    )
    return [each for each in every if 0 < each < math.inf]
