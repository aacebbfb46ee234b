"""What may stand behind a part's value: its tolerance, rating, temperature coefficient."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Final

from ..errors import QuantityError
from ._decimals import positional, scaled, shown, significant
from .quantity import LONGEST, parse_quantity

# IEC 60062:2016, per cent, both ways.
_LETTERS: Final = {
    "E": "0.005", "L": "0.01", "P": "0.02", "W": "0.05", "A": "0.05", "B": "0.1", "C": "0.25", "D": "0.5",
    "F": "1", "G": "2", "H": "3", "J": "5", "K": "10", "M": "20", "N": "30",
}  # fmt: skip
# IEC 60062:2016, capacitors, per cent down and up.
_UNSYMMETRICAL: Final = {"Q": ("10", "30"), "S": ("20", "50"), "T": ("10", "50"), "Z": ("20", "80")}
# IEC 60062:2016, capacitors below 10 pF, picofarads both ways.
_PICOFARADS: Final = {"B": "0.1", "C": "0.25", "D": "0.5", "F": "1", "G": "2"}
# Public lists give these letters on capacitors two meanings and more, so none is taken.
_CONTRADICTED: Final = {
    "P": "±0.02 %, +100/-0 % or +80/-0 %",
    "V": "+100/-10 % or nothing",
    "Y": "+50/-0 % or nothing",
    "R": "+30/-20 % or nothing",
}

_DECIMAL: Final = r"(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_BOTH_WAYS: Final = re.compile(rf"(?:±|\+/-|\+-)?\s*({_DECIMAL})\s*%")
_TWO_SIDED: Final = re.compile(rf"([+-])\s*({_DECIMAL})\s*%?\s*/\s*([+-])\s*({_DECIMAL})\s*%")
_BARE: Final = re.compile(rf"[+-]?{_DECIMAL}")
_TEMPCO: Final = re.compile(rf"([+-]?{_DECIMAL})\s*(?:(ppm)(?:\s*/\s*(?:K|°C|degC))?|(?:1?/K))?")
_FRACTION: Final = re.compile(r"([0-9]+)\s*/\s*([0-9]+)\s*([WVA])")
_HOW: Final = "Write '5%', '+20/-80%' or an IEC 60062 letter such as 'J'."


@dataclass(frozen=True, slots=True)
class Tolerance:
    """How far a part's value may lie from its nominal one, as fractions of it: -1 < low <= 0 <= high.

    `str()` writes it in per cent so that `parse_tolerance` reads the same fractions back.
    """

    low: float
    high: float

    def __post_init__(self) -> None:
        if not (math.isfinite(self.low) and math.isfinite(self.high) and self.low <= 0 <= self.high):
            raise QuantityError(
                f"a tolerance from {self.low!r} to {self.high!r} does not lie about zero.",
                remedy="Give a low end of 0 or below and a high end of 0 or above.",
            )
        if self.low <= -1:
            raise QuantityError(
                f"a tolerance of {_percent(abs(self.low))} % downwards lets the part vanish.",
                remedy="The low end must stay above -100 %.",
            )

    def __str__(self) -> str:
        if self.high == -self.low:
            return f"{_percent(self.high)}%"
        return f"+{_percent(abs(self.high))}/-{_percent(abs(self.low))}%"


def _percent(fraction: float) -> str:
    _, digits, exponent = significant(repr(fraction))
    text = positional(digits, exponent + 2) if digits != "0" else "0"
    return text if len(text) <= 24 else f"{digits}e{exponent + 2}"


def parse_tolerance(value: str | int | float, *, kind: str = "R", nominal: float | None = None) -> Tolerance:
    """A tolerance as data sheets write it: `1%`, `±1%`, `+20/-80%`, an IEC 60062:2016 letter, or a fraction.

    value: text, or a number that is the fraction itself (0.05 is 5 %)
    kind: the part's first letter; unsymmetrical letters exist for capacitors ("C") only
    nominal: the part's value in base units; on a capacitor below 10 pF the letters B C D F G are picofarads

    Raises QuantityError, with the remedy.
    """
    if not isinstance(value, str):
        return _from_fraction(parse_quantity(value, "1", "tolerance"), shown(value))
    text, quoted = _short(value, "tolerance", _HOW), f"tolerance {value!r}"
    if match := _BOTH_WAYS.fullmatch(text):
        high = _fraction(match.group(1), quoted)
        return Tolerance(-high, high)
    if match := _TWO_SIDED.fullmatch(text):
        sign, first, other, second = match.groups()
        if sign == other:
            raise QuantityError(f"{quoted} has the same sign twice.", remedy="Write one '+' and one '-'.")
        up, down = (first, second) if sign == "+" else (second, first)
        return Tolerance(-_fraction(down, quoted), _fraction(up, quoted))
    if len(text) == 1 and text.isalpha():
        return _from_letter(text, quoted, kind, nominal)
    if _BARE.fullmatch(text):
        return _from_fraction(parse_quantity(text, "1", "tolerance"), repr(value))
    if re.fullmatch(rf"[+-]\s*{_DECIMAL}\s*%", text):
        number = text.lstrip("+-").strip()
        raise QuantityError(
            f"{quoted} names one side only.",
            remedy=f"Write '±{number}' for both, or '+{number[:-1].strip()}/-0%' for one.",
        )
    if "," in text:
        raise QuantityError(f"{quoted} has a comma in it.", remedy="Write a decimal point.")
    raise QuantityError(f"{quoted} cannot be read.", remedy=_HOW)


def _short(value: str, what: str, how: str) -> str:
    text = value.strip()
    if not text or len(text) > LONGEST:
        fault = f"is longer than {LONGEST} characters" if text else "is empty"
        raise QuantityError(f"{what} {shown(value)} {fault}.", remedy=how)
    return text


def _fraction(percent: str, quoted: str) -> float:
    mantissa, _, power = percent.lower().partition("e")
    return scaled(mantissa, int(power or "0") - 2, quoted)


def _from_fraction(fraction: float, quoted: str) -> Tolerance:
    if fraction < 0:
        raise QuantityError(f"tolerance {quoted} is negative.", remedy=_HOW)
    if fraction >= 1:
        guess = f" Did you mean '{_percent(fraction / 100)}%'?" if fraction < 100 else ""
        raise QuantityError(
            f"tolerance {quoted} is a bare number, so a fraction, and must stay below 1.",
            remedy=f"A bare 0.05 is 5 %.{guess}",
        )
    return Tolerance(-fraction, fraction)


def _from_letter(letter: str, quoted: str, kind: str, nominal: float | None) -> Tolerance:
    capacitor = kind.upper() == "C"
    if capacitor and letter in _CONTRADICTED:
        raise QuantityError(
            f"{quoted} on a capacitor means different things in different lists ({_CONTRADICTED[letter]}).",
            remedy="Write the per cent out, such as '+100/-10%'.",
        )
    if capacitor and letter in _PICOFARADS and nominal is not None and 0 < nominal < 10e-12:
        part = scaled(_PICOFARADS[letter], -12, quoted) / nominal
        if part >= 1:
            raise QuantityError(
                f"{quoted} is ±{_PICOFARADS[letter]} pF below 10 pF, and the capacitor has {nominal!r} F.",
                remedy="Write the tolerance in per cent.",
            )
        return Tolerance(-part, part)
    if letter in _LETTERS:
        both = _fraction(_LETTERS[letter], quoted)
        return Tolerance(-both, both)
    if letter in _UNSYMMETRICAL:
        if not capacitor:
            raise QuantityError(f"{quoted}: the letter {letter} is for capacitors only.", remedy=_HOW)
        down, up = _UNSYMMETRICAL[letter]
        return Tolerance(-_fraction(down, quoted), _fraction(up, quoted))
    known = letter.upper() in _LETTERS or letter.upper() in _UNSYMMETRICAL
    hint = f" The letters are capitals: '{letter.upper()}'." if known else ""
    raise QuantityError(f"{quoted} is no tolerance letter of IEC 60062.", remedy=f"{_HOW}{hint}")


def parse_tempco(text: str | float) -> float:
    """A temperature coefficient in 1/K, signed: `100ppm`, `-750 ppm/K`, or a bare number in 1/K.

    Raises QuantityError, with the remedy.
    """
    how = "Write '100ppm', '-750ppm/K' or a number in 1/K such as '1e-4'."
    if not isinstance(text, str):
        value = parse_quantity(text, "1", "temperature coefficient")
        quoted = f"temperature coefficient {shown(text)}"
    else:
        quoted = f"temperature coefficient {shown(text)}"
        match = _TEMPCO.fullmatch(_short(text, "temperature coefficient", how))
        if match is None:
            sign = " It is a signed number here: leave the '±' out." if "±" in text or "+/-" in text else ""
            raise QuantityError(f"{quoted} cannot be read.", remedy=f"{how}{sign}")
        mantissa, _, power = match.group(1).lower().partition("e")
        value = scaled(mantissa, int(power or "0") - (6 if match.group(2) else 0), quoted)
    if not abs(value) < 1:
        raise QuantityError(f"{quoted} is {value!r} per kelvin, which no part has.", remedy=how)
    return value


def parse_rating(text: str) -> tuple[float, str]:
    """A rating as its value in base units and the unit, "W", "V" or "A": `0.1W`, `250 mW`, `1/4W`, `25 V`.

    Raises QuantityError, with the remedy.
    """
    how = "Write '0.1W', '1/4W', '25V' or '0.5A'."
    if not isinstance(text, str):
        raise QuantityError(f"rating {shown(text)} has no unit.", remedy=how)
    short = _short(text, "rating", how)
    unit = short[-1]
    if unit not in ("W", "V", "A"):
        raise QuantityError(f"rating {text!r} names no unit W, V or A.", remedy=how)
    if match := _FRACTION.fullmatch(short):
        above, below = int(match.group(1)), int(match.group(2))
        value = above / below if below else 0.0
    else:
        value = parse_quantity(short, unit, "rating")
    if not 0 < value < math.inf:
        raise QuantityError(f"rating {text!r} is not a positive, finite value.", remedy=how)
    return value, unit


_SHAPES: Final = (
    ("tempco", re.compile(r"[^0-9]*[0-9].*(?:ppm.*|/K)")),
    ("rating", re.compile(r"[+-]?\.?[0-9].*[WVA]")),
    ("tolerance", re.compile(r"[^0-9]*[0-9].*%|[A-Za-z]")),
)


def classify_extra(token: str) -> str:
    """What a token behind a part's value is by its shape: "tolerance", "rating" or "tempco".

    The reader of that kind still judges the contents. A bare number could be any of the three: it is refused.
    Raises QuantityError naming the token.
    """
    text = token.strip()
    if len(text) <= LONGEST:
        for kind, shape in _SHAPES:
            if shape.fullmatch(text):
                return kind
    raise QuantityError(
        f"{shown(token)} behind the value is no tolerance, rating or temperature coefficient.",
        remedy="Write a tolerance as '1%' or 'J', a rating as '0.1W', a temperature coefficient as '100ppm'.",
    )
