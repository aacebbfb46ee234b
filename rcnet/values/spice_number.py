"""Numbers as SPICE reads them, which is not always as they were meant."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Final

from ..errors import QuantityError
from ._decimals import plain, shown

LONGEST_TOKEN: Final = 200  # characters; longer ones are no number a person or a program writes

# ngspice manual, "Numbers": scale factors, case ignored. Of the two micro signs only U+00B5 is taken as u.
_SCALES: Final = {"t": 12, "g": 9, "k": 3, "m": -3, "u": -6, "µ": -6, "n": -9, "p": -12, "f": -15}

# Blank, comma, brackets and "=" part words, and so does a sign, except behind an exponent's e. Behind d it
# parts: ngspice 39 reads 1d-3 as two numbers.
_PIECE: Final = re.compile(r"[+-]?[0-9.]+(?:[eE][+-]?)?[^\s,()=+-]*|[+-]?[^\s,()=+-]+|[+-]")
# No IGNORECASE: it would make the two micro signs one.
_NUMBER: Final = re.compile(
    r"([+-]?)([0-9]+\.?[0-9]*|\.[0-9]+)(?:([eE])([+-]?[0-9]*)|([dD])([0-9]*))?"
    r"([mM][eE][gG]|[mM][iI][lL]|[tTgGkKmMuUnNpPfFµ])?(.*)",
    re.DOTALL,
)
_REFUSED: Final = re.compile(r"[*/^{}'\x00]")

# Compared casefolded, which makes both ohm signs the small omega.
_UNITS: Final = frozenset(
    [
        *("", "ohm", "ohms", "o", "r", "ω", "f", "farad", "farads", "h", "henry", "henrys"),
        *("v", "volt", "volts", "a", "amp", "amps", "hz", "s", "sec"),
    ]
)


@dataclass(frozen=True, slots=True)
class SpiceNumber:
    """A number from a netlist.

    value: what SPICE takes it for
    text: the token as written
    suffix: the scale factor as written, "" where there is none
    tail: what SPICE passes over: the letters behind the suffix or, of two numbers in one token, the first
    """

    value: float
    text: str
    suffix: str
    tail: str


def read_spice_number(text: str) -> SpiceNumber:
    """A netlist token by the rules of SPICE, as ngspice 39 applies them.

    Scale factors T G MEG K MIL M U N P F in any case, U+00B5 for micro; letters behind are ignored; exponents
    with e or d. Of two numbers in one token (`4,7`, `1k+2`) the last counts. Unlike ngspice the value is the
    double nearest to what is written. Raises QuantityError for what is no number, for three and more, and for
    overflow.
    """
    token = text.strip()
    if len(token) > LONGEST_TOKEN:
        raise QuantityError(
            f"{shown(text)} is longer than the {LONGEST_TOKEN} characters a number may have.",
            remedy="Write a plain number such as 4.7e3.",
        )
    pieces = _PIECE.findall(token)
    numbers = [match.groups() for piece in pieces if (match := _NUMBER.fullmatch(piece))]
    if not 1 <= len(pieces) <= 2 or len(numbers) != len(pieces) or _REFUSED.search(token):
        raise QuantityError(f"{text!r} is not a number.", remedy="Write a plain number such as 4.7e3.")
    sign, mantissa, letter_e, power_e, letter_d, power_d, suffix, tail = numbers[-1]
    power = power_e or power_d or ""
    value = _scaled(sign, mantissa, int(power) if power.strip("+-") else 0, (suffix or "").lower())
    if math.isinf(value):
        raise QuantityError(
            f"{text!r} is too large: a double ends at 1.8e308.", remedy="Check the exponent and the suffix."
        )
    if (letter_e or letter_d) and not power.strip("+-"):
        tail = f"{letter_e or letter_d}{power}{tail}"  # SPICE steps over an exponent without digits
    return SpiceNumber(value, text, suffix or "", pieces[0] if len(pieces) == 2 else tail)


def _scaled(sign: str, mantissa: str, exponent: int, suffix: str) -> float:
    if suffix == "meg":
        return float(f"{sign}{mantissa}e{exponent + 6}")
    if suffix == "mil":  # a thousandth of an inch, 25.4e-6 m; in integers, so that float() rounds once
        whole, _, fraction = mantissa.partition(".")
        return float(f"{sign}{int(whole + fraction) * 254}e{exponent - 7 - len(fraction)}")
    return float(f"{sign}{mantissa}e{exponent + _SCALES.get(suffix, 0)}")


def number_oddity(number: SpiceNumber, kind: str) -> str | None:
    """One key for what a person probably did not mean by a part's number, or None.

    `kind` is the part's first letter. The keys: hexadecimal, decimal-comma, greek-mu, digits-after-suffix,
    mil-by-accident, milli-not-mega, femto-not-farad, unknown-letters (also for two numbers in one token).
    """
    token, suffix, tail, kind = number.text.strip(), number.suffix, number.tail, kind.upper()
    if re.match(r"[+-]?0x[0-9a-f]", token, re.IGNORECASE):
        return "hexadecimal"
    if len(_PIECE.findall(token)) > 1:
        return "decimal-comma" if re.fullmatch(r"[^,\s]+,[^,\s]+", token) else "unknown-letters"
    if tail.startswith("μ"):
        return "greek-mu"
    if re.match(r"[0-9]" if suffix else r"[a-z][0-9]", tail, re.IGNORECASE):
        return "digits-after-suffix"
    if suffix.lower() == "mil":
        return "mil-by-accident"
    if kind == "R" and suffix == "M":
        return "milli-not-mega"
    if kind == "C" and suffix.lower() == "f" and tail.lower() not in ("f", "farad", "farads"):
        return "femto-not-farad"
    # An ampere is no unit of a passive part: there 1a is meant as atto, which SPICE does not know.
    if tail.casefold() not in _UNITS or (kind in ("R", "C", "L") and tail.lower() == "a"):
        return "unknown-letters"
    return None


def write_spice_number(value: float) -> str:
    """The shortest plain decimal `read_spice_number` reads back to the same double, at most 24 characters.

    No suffixes: ngspice rounds those worse than exponents. Raises QuantityError for nan and infinity.
    """
    number = float(value)
    if not math.isfinite(number):
        raise QuantityError(f"{number!r} cannot be written in a netlist.", remedy="Give a finite number.")
    return plain(number)
