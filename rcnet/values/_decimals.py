"""Doubles as decimal digits, so that a prefix moves the point and never rounds."""

from __future__ import annotations

from ..errors import QuantityError


def scaled(mantissa: str, exponent: int, shown: str) -> float:
    """`mantissa` x 10^`exponent` as the nearest double: the text is converted once, so it is rounded once.

    mantissa: digits with at most one point and a sign; shown: the text an error quotes.
    Raises QuantityError where a double cannot hold it: overflow, or a number that would vanish.
    """
    number = float(f"{mantissa}e{exponent}")
    if number in (float("inf"), float("-inf")):
        raise QuantityError(
            f"{shown} is too large: a double ends at 1.8e308.", remedy="Check the exponent and the prefix."
        )
    if number == 0 and mantissa.strip("+-0."):
        raise QuantityError(
            f"{shown} is too small: a double begins at 4.9e-324.", remedy="Check the exponent and the prefix."
        )
    return number


def significant(text: str) -> tuple[str, str, int]:
    """Sign ("" or "-"), digits and exponent of a finite number's `repr` or `e` format.

    The value is digits x 10^exponent; the digits have no zeros at either end; zero is "0" with exponent 0.
    """
    sign = "-" if text.startswith("-") else ""
    mantissa, _, power = text.lstrip("-").partition("e")
    whole, _, fraction = mantissa.partition(".")
    digits = (whole + fraction).lstrip("0")
    stripped = digits.rstrip("0")
    if not stripped:
        return sign, "0", 0
    return sign, stripped, int(power or "0") - len(fraction) + len(digits) - len(stripped)


def positional(digits: str, exponent: int) -> str:
    """`digits` x 10^`exponent` written out with a decimal point where one is needed."""
    if exponent >= 0:
        return digits + "0" * exponent
    if -exponent < len(digits):
        return f"{digits[:exponent]}.{digits[exponent:]}"
    return f"0.{'0' * (-exponent - len(digits))}{digits}"


def plain(value: float) -> str:
    """The shortest decimal that is this double, without a bare `.0` behind it."""
    return repr(value).removesuffix(".0")


def shown(value: object) -> str:
    """The value's `repr` for a message, shortened where it is long."""
    try:
        text = repr(value)
    except ValueError:  # Python refuses to write out integers of thousands of digits
        return "an integer of thousands of digits"
    return text if len(text) <= 100 else f"{text[:60]}... ({len(text)} characters)"
