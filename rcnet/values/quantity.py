"""Quantities as people write them: a number, an SI prefix, a unit."""

from __future__ import annotations

import math
import re
from numbers import Real
from typing import Final

from ..errors import QuantityError
from ._decimals import plain, positional, scaled, shown, significant

LONGEST: Final = 100  # characters; no quantity a person writes is longer

# ISO 80000-1, table of SI prefixes, as far as circuits go.
_PREFIXES: Final = {"T": 12, "G": 9, "M": 6, "k": 3, "": 0, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15}
_LETTERS: Final = {name: power for name, power in _PREFIXES.items() if name} | {"µ": -6, "μ": -6}

_SPELLINGS: Final[dict[str, tuple[str, ...]]] = {
    "ohm": ("ohm", "ohms", "Ohm", "Ohms", "\u2126", "\u03a9"),
    "F": ("F", "farad", "farads"),
    "H": ("H", "henry"),
    "V": ("V", "volt", "volts"),
    "A": ("A", "ampere", "amperes"),
    "W": ("W", "watt", "watts"),
    "Hz": ("Hz", "hertz"),
    "s": ("s", "second", "seconds"),
    "S": ("S", "siemens"),
    "V/sqrt(Hz)": ("V/sqrt(Hz)", "V/√Hz"),
}
_PLAIN_SPELLINGS: Final[dict[str, tuple[str, ...]]] = {
    "dB": ("dB",),
    "deg": ("deg", "°", "degree", "degrees"),
    "degC": ("degC", "°C", "C", "\u2103"),
    "%": ("%",),
    "1": (),
}

# What may stand behind a number, and the power of ten it stands for, unit by unit.
_TAILS: Final[dict[str, dict[str, int]]] = {
    unit: {
        prefix + spelling: power
        for prefix, power in ({"": 0} | _LETTERS).items()
        for spelling in ("", *spellings)
    }
    for unit, spellings in _SPELLINGS.items()
} | {unit: dict.fromkeys(("", *spellings), 0) for unit, spellings in _PLAIN_SPELLINGS.items()}
_TAILS["1"]["%"] = -2

_OWNERS: Final = {
    tail: unit
    for unit in reversed(_TAILS)
    if unit != "1"
    for tail in _TAILS[unit]
    if tail and tail not in _LETTERS
} | {"rad": "rad"}

# IEC 60062 for resistors and capacitors; elsewhere the same habit with the letters in common use.
_CAPACITOR: Final = {"p": -12, "n": -9, "u": -6, "µ": -6, "μ": -6, "m": -3, "F": 0}
_MARKS: Final[dict[str, dict[str, int]]] = {
    "ohm": {"L": -3, "R": 0, "K": 3, "k": 3, "M": 6, "G": 9, "T": 12},
    "F": _CAPACITOR,
    "H": {letter: _CAPACITOR[letter] for letter in ("n", "u", "µ", "μ", "m")},
} | dict.fromkeys(("Hz", "s", "V", "A", "W", "S"), _LETTERS)

_NUMBER: Final = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:[eE]([+-]?[0-9]+))?\s*(.*)", re.DOTALL)
_MARKING: Final = re.compile(r"(?=.*[0-9])([0-9]*)([A-Za-zµμ])([0-9]*)")
_INFINITE: Final = re.compile(r"([+-]?)(?:inf|Inf|INF)(?:inity)?\b\s*(.*)", re.DOTALL)

_EXAMPLES: Final = {
    "ohm": "'4.7 kohm', '4k7' or '4700'",
    "F": "'10 nF', '2n2' or '1e-8'",
    "H": "'10 mH' or '0.01'",
    "Hz": "'1.59 kHz' or '1590'",
    "V/sqrt(Hz)": "'4 nV/sqrt(Hz)'",
    "dB": "'40 dB' or '40'",
    "deg": "'-45 deg' or '-45'",
    "degC": "'27 degC' or '27'",
    "%": "'5 %' or '5'",
    "1": "'0.5'",
}


def parse_quantity(value: str | int | float, unit: str, what: str = "value") -> float:
    """A quantity in base units, the double nearest to the decimal that was written.

    value: text (`4.7 kohm`, `4.7k`, `4k7`, `10 nF`, `1e-8`), or a number already in base units; `inf` is
        returned as it is, for the caller to judge
    unit: the expected unit, one of ohm F H V A W Hz s S V/sqrt(Hz), or dB deg degC % 1, which take no prefix;
        for "deg" radians are converted, for "%" the number is in per cent, for "1" a `%` divides by 100
    what: the words a message begins with

    Prefixes are those of ISO 80000-1 (`m` milli, `M` mega; also `meg`); markings are those of IEC 60062.
    Raises QuantityError, with the remedy.
    """
    if unit not in _TAILS:
        raise QuantityError(f"{unit!r} is no unit known here.", remedy=f"Known units: {', '.join(_TAILS)}.")
    if isinstance(value, str):
        return _from_text(value, unit, what)
    if isinstance(value, bool) or not isinstance(value, Real):
        raise QuantityError(
            f"{what} {shown(value)} is neither a number nor text.", remedy=f"Write it like {_example(unit)}."
        )
    try:
        number = float(value)
    except OverflowError as exc:
        raise QuantityError(
            f"{what} {shown(value)} is too large: a double ends at 1.8e308.",
            remedy="Check the number of digits.",
        ) from exc
    if math.isnan(number):
        raise QuantityError(f"{what} {number!r} is not a number.", remedy=f"Write it like {_example(unit)}.")
    return number


def _from_text(value: str, unit: str, what: str) -> float:
    text = value.strip()
    if not text:
        raise QuantityError(f"{what} {shown(value)} is empty.", remedy=f"Write it like {_example(unit)}.")
    if len(text) > LONGEST:
        raise QuantityError(
            f"{what} {shown(value)} is longer than {LONGEST} characters.",
            remedy=f"Write it like {_example(unit)}.",
        )
    quoted = f"{what} {value!r}"
    if match := _INFINITE.fullmatch(text):
        sign, tail = match.groups()
        if _mega(tail) in _TAILS[unit]:
            return -math.inf if sign == "-" else math.inf
    elif match := _NUMBER.fullmatch(text):
        mantissa, exponent, tail = match.group(1), int(match.group(2) or "0"), _mega(match.group(3))
        if tail in _TAILS[unit]:
            return scaled(mantissa, exponent + _TAILS[unit][tail], quoted)
        if unit == "deg" and tail in ("rad", "radian", "radians"):
            return _degrees(scaled(mantissa, exponent, quoted), quoted)
    if (match := _MARKING.fullmatch(text)) and match.group(2) in _MARKS.get(unit, {}):
        whole, letter, fraction = match.groups()
        return scaled(f"{whole}.{fraction}", _MARKS[unit][letter], quoted)
    says, remedy = _explain(text, unit)
    raise QuantityError(f"{quoted} {says}", remedy=remedy)


def _degrees(radians: float, quoted: str) -> float:
    degrees = math.degrees(radians)
    if math.isinf(degrees):
        raise QuantityError(f"{quoted} is too large: a double ends at 1.8e308.", remedy="Check the exponent.")
    return degrees


def _mega(tail: str) -> str:
    """`meg` in any case, as SPICE users write it, becomes `M`."""
    return f"M{tail[3:]}" if tail[:3].lower() == "meg" else tail


def _example(unit: str) -> str:
    return _EXAMPLES.get(unit, f"'1.5 m{unit}' or '0.0015'")


def _explain(text: str, unit: str) -> tuple[str, str]:
    """Why `text` is no quantity in `unit`, the likeliest slip first, and the remedy."""
    example = f"Write it like {_example(unit)}."
    if "," in text:
        return "has a comma in it.", "Write a decimal point, and nothing between the thousands."
    if text.lstrip("+-").lower() == "nan":
        return "is not a number.", example
    match = _NUMBER.fullmatch(text) or _INFINITE.fullmatch(text)
    marking = _MARKING.fullmatch(text)
    if match is None and marking is None:
        return "does not begin with a number.", example
    written = match.groups()[-1] if match else ""
    number, tail = text.removesuffix(written).rstrip(), _mega(written)
    if _OWNERS.get(tail, unit) != unit:
        return f"is in {_OWNERS[tail]}, but {_expected(unit)} is expected.", example
    if tail[:1] == "K" and f"k{tail[1:]}" in _TAILS[unit]:
        return "has a capital K for kilo.", f"Kilo is written k: '{number} k{tail[1:]}'."
    if tail and (near := _alike(tail, unit)):
        wanted = " or ".join(f"'{number} {known}'" for known in near)
        return "has capital and small letters exchanged.", f"Write {wanted}."
    if unit in _PLAIN_SPELLINGS and tail[:1] in _LETTERS and tail[1:] in _TAILS[unit]:
        return f"has a prefix, and {_expected(unit)} takes none.", example
    if marking:
        return _explain_marking(unit, *marking.groups())
    if tail[:1] in _MARKS.get(unit, {}) and tail[1:2].isdigit():
        return "mixes a marking (IEC 60062) with a sign, a point, an exponent or more letters.", example
    return f"ends in {tail!r}, which is no prefix or unit of {_expected(unit)}.", example


def _alike(tail: str, unit: str) -> list[str]:
    """The tails of `unit` that differ from `tail` in capitals only, one for each power of ten."""
    near: dict[int, str] = {}
    for known, power in _TAILS[unit].items():
        if known.casefold() == tail.casefold():
            near.setdefault(power, known)
    return list(near.values())


def _expected(unit: str) -> str:
    return "a plain number" if unit == "1" else unit


def _explain_marking(unit: str, whole: str, letter: str, fraction: str) -> tuple[str, str]:
    if unit not in _MARKS:
        return f"is a marking, and {_expected(unit)} has none.", f"Write it like {_example(unit)}."
    standard = " (IEC 60062)" if unit in ("ohm", "F") else ""
    says = f"is marked {letter!r}, which is no letter for {unit}{standard}."
    remedy = f"The letters for {unit} are {' '.join(_MARKS[unit])}."
    if letter in _LETTERS:
        remedy += f" For that prefix write '{whole or '0'}.{fraction or '0'} {letter}{unit}'."
    twin = letter.swapcase()
    if twin in _MARKS[unit]:
        meaning = {"M": "For mega write", "m": "For milli write"}.get(twin, "Or write")
        remedy += f" {meaning} '{whole}{twin}{fraction}'."
    return says, remedy


def format_quantity(value: float, unit: str = "", digits: int = 4) -> str:
    """A quantity for people: `1.592 kHz`, `159.2 nF`, `-3.01 dB`.

    Rounded to `digits` (1 to 17) significant digits, zeros at the end dropped, with the SI prefix that leaves
    one to three digits before the point. Units that take no prefix, unknown ones and "" get the plain number.
    """
    number = float(value)
    if math.isnan(number):
        return "not a number"
    if math.isinf(number):
        return "inf" if number > 0 else "-inf"
    sign, figures, exponent = significant(f"{number:.{min(max(digits, 1), 17) - 1}e}")
    if figures == "0":
        sign = ""
    text, prefix = _engineering(figures, exponent) if unit in _SPELLINGS else _written_out(figures, exponent)
    named = "" if unit == "1" else f"{prefix}{unit}"
    return f"{sign}{text} {named}".rstrip()


def write_quantity(value: float, unit: str = "") -> str:
    """The shortest text that `parse_quantity` reads back to the same double, with a prefix where one fits.

    `unit` is one `parse_quantity` knows (`4.7 kohm`), or "" for the bare token of a part's line (`4.7k`), to
    be read under any unit that takes a prefix. Raises QuantityError for nan and for an unknown unit.
    """
    number = float(value)
    if math.isnan(number):
        raise QuantityError("nan cannot be written as a quantity.", remedy="Give a number.")
    if unit and unit not in _TAILS:
        raise QuantityError(f"{unit!r} is no unit known here.", remedy=f"Known units: {', '.join(_TAILS)}.")
    if math.isinf(number):
        return plain(number)
    if unit in _PLAIN_SPELLINGS:
        return f"{plain(number)} {unit}" if unit != "1" else plain(number)
    sign, figures, exponent = significant(repr(number))
    if -15 <= len(figures) + exponent - 1 < 15:
        text, prefix = _engineering(figures, exponent)
        text = sign + text
    else:
        text, prefix = plain(number), ""
    return f"{text} {prefix}{unit}" if unit else f"{text}{prefix}"


def _engineering(figures: str, exponent: int) -> tuple[str, str]:
    power = (len(figures) + exponent - 1) // 3 * 3
    for prefix, known in _PREFIXES.items():
        if known == power:
            return positional(figures, exponent - power), prefix
    return _scientific(figures, exponent), ""


def _written_out(figures: str, exponent: int) -> tuple[str, str]:
    if -5 <= len(figures) + exponent - 1 < 15:
        return positional(figures, exponent), ""
    return _scientific(figures, exponent), ""


def _scientific(figures: str, exponent: int) -> str:
    return f"{positional(figures, 1 - len(figures))}e{len(figures) + exponent - 1:+03d}"
