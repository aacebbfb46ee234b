"""The words of a table's header: what a column name says of its axis, trace, part and unit."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, replace
from typing import Literal

UNNAMED = "response"  # the curve of a trace whose header names no node

# What a column holds of its curve; "" is a real value. "gain" is dB or a ratio, "size" a ratio unless it goes
# below zero, and "angle" degrees or radians: what they are is asked of their numbers.
Part = Literal["", "real", "imag", "mag", "db", "deg", "rad", "gain", "size", "angle"]
Kind = Literal[Part, "trace"]
Along = Literal["frequency", "time"]
Naming = Literal["node", "label", "none"]

# Factors of ten from the unit in the header to Hz or seconds. Only the spelling tells milli from mega.
_HERTZ = {"Hz": 0, "mHz": -3, "kHz": 3, "KHz": 3, "MHz": 6, "GHz": 9, "hertz": 0}
_ANY_CASE = ("hz", "khz", "ghz", "hertz")
_PER_SECOND = {"rad/s": 0, "rad/sec": 0, "1/s": 0, "krad/s": 3, "Mrad/s": 6}
_SECONDS = {
    **dict.fromkeys(("s", "sec", "second", "seconds"), 0),
    **dict.fromkeys(("us", "µs", "μs"), -6),
    "ms": -3,
    "ns": -9,
    "ps": -12,
    "fs": -15,
}
_PART_UNITS: dict[str, Part] = {
    **dict.fromkeys(("db", "dbv"), "db"),
    **dict.fromkeys(("deg", "degree", "degrees", "°", "º"), "deg"),
    **dict.fromkeys(("rad", "radian", "radians"), "rad"),
}
# Factors of ten to V, A or one.
_LINEAR_UNITS = {
    **dict.fromkeys(("v", "volt", "volts", "v/v", "a", "a/a", "1", "lin", "linear"), 0),
    **dict.fromkeys(("mv", "ma"), -3),
    **dict.fromkeys(("uv", "µv", "μv", "ua", "µa", "μa"), -6),
}
_PLAIN_RATIOS = ("1", "lin", "linear", "v/v", "a/a")
_MEGA = ("MV", "Mv", "MA", "Ma", "MHZ")

_AXIS_WORD = r"frequency|freq\.?|f|time|t|angular frequency|angular freq\.?|omega|w|ω"
_AXIS = re.compile(
    rf"({_AXIS_WORD})\s*(?:\[([^\]]*)\]|\(([^)]*)\)|/\s*(rad/s(?:ec)?|[^/]*)|(?:,|_|\s+in\s|\s)\s*(\S+))?",
    re.IGNORECASE,
)
_PART = re.compile(r"(.+)\.(real|imag|mag|db|deg|rad)")
_PARTS: dict[str, Part] = {
    "real": "real",
    "imag": "imag",
    "mag": "mag",
    "db": "db",
    "deg": "deg",
    "rad": "rad",
}
# A name and its unit, in brackets of either kind, after a slash, a comma, an underscore or a blank. Round
# brackets follow only a word or another bracket: `v(1)` is a node.
_WITH_UNIT = re.compile(
    r"(.*\S)\s*\[([^\[\]]*)\]"
    r"|(.*[)|]|[^()]*[^()\s])\s*\(([^()]*)\)"
    r"|(.*[^/\s])\s*/\s*(v/v|a/a)"
    r"|(.*[^/\s])\s*/\s*([^/\s]+)"
    r"|(.*[^\s,_])(?:\s*,\s*|_|\s+)(db|deg|rad|degrees|radians|°|m?v|µv|uv)",
    re.IGNORECASE,
)
_LONGEST_WITH_UNIT = 200  # characters; longer ones are names as they stand
_TRACE = re.compile(r"[vi]\([^()]+\)")
_SHORT_FUNCTION = re.compile(r"([vi])(db|m|p|r|i)\(([^()]+)\)")
_FUNCTION = re.compile(
    r"([a-z]+|∠)\s*[({\[]\s*(.+?)\s*[)}\]]|(\|)\s*(.+?)\s*\||(∠)\s*(.+)|(arg|re|im)\s+(.+)"
)
# A word and what it is of, in either order, parted at the first or at the last of the marks between.
_TAGGED_FIRST = re.compile(r"(\S.*?)[ _:.\-]+(\S.*)")
_TAGGED_LAST = re.compile(r"(.*\S)[ _:.\-]+(\S+)")
_FUNCTIONS: dict[str, Part] = {
    **dict.fromkeys(("re", "real", "r"), "real"),
    **dict.fromkeys(("im", "imag", "i"), "imag"),
    **dict.fromkeys(("mag", "magnitude", "abs", "m"), "mag"),
    **dict.fromkeys(("ph", "cph", "phase", "arg", "ang", "angle", "p", "∠"), "angle"),
    "|": "size",
    "db": "db",
    "gain": "gain",
}
_CALLED = ("re", "im", "real", "imag", "mag", "abs", "arg", "ph", "db", "|", "∠")
_WORDS: dict[str, Part] = {
    **dict.fromkeys(("re", "real", "real part"), "real"),
    **dict.fromkeys(("im", "imag", "imaginary", "imaginary part"), "imag"),
    **dict.fromkeys(("mag", "mag.", "magnitude", "amplitude", "ampl", "abs", "modulus"), "size"),
    **dict.fromkeys(("phase", "angle", "ph", "ang", "arg", "argument", "phi", "φ", "∠", "theta"), "angle"),
    **dict.fromkeys(("gain", "level"), "gain"),
    "db": "db",
    **dict.fromkeys(("deg", "degrees", "°"), "deg"),
    **dict.fromkeys(("rad", "radians"), "rad"),
}
# Ways to write "the transfer function", which names no node.
_TRANSFER = re.compile(
    r"(?:h|g|t|tf|a|av)(?:\((?:f|s|j?w|j?ω|jω)\))?|transfer function|transfer|response|"
    r"v?_?\(?out\)?\s*/\s*v?_?\(?in\)?"
)
_LABEL = re.compile(r"(?:(?:ch|channel|trace|curve|meas|measurement)\.?[ _]?)?[0-9]{1,4}|[a-d]")
_NODE = re.compile(r"[^\s()\[\]{}|/,;]{1,60}")
# Names of a voltage measured over time that name no node.
_SIGNAL = re.compile(
    r"(?:ch|channel|trace)\.?[ _]?[0-9]{0,3}|voltage|volts?|signal|amplitude|output|value|v|u"
)

COLUMNS_REMEDY = (
    "Name the first column 'frequency' or 'time'. A response is two columns: 'v(out).real' and "
    "'v(out).imag', 'v(out).mag' or 'v(out).db' with 'v(out).deg' or 'v(out).rad', 're(v(out))' and "
    "'im(v(out))', 'mag(v(out))' or 'vdb(out)' with 'phase(v(out)) [deg]' or 'vp(out) [rad]', or for one "
    "trace without a node 'Gain (dB)' or 'Magnitude' with 'Phase (deg)' or 'Phase (rad)'. "
    "A curve along time is one: 'v(out)'."
)
_UNITS_REMEDY = "The units read are dB, deg, °, rad, V, mV, uV, A, mA, uA, V/V and 1."


@dataclass(frozen=True, slots=True)
class Axis:
    """The first column. Its values times 10^exponent, over 2 pi where `angular`, are Hz or s.

    unit: as it is written, the base unit where it is not; own: named as rcnet names it
    """

    along: Along
    exponent: int
    angular: bool
    unit: str
    own: bool


@dataclass(frozen=True, slots=True)
class Column:
    """What one header says: the curve ("" where it names no node or label), its part, a factor of ten.

    word: the header without its unit; named: what the curve is named by; own: in rcnet's own words
    guessed: the name in the header that was taken for the node of a voltage, or ""
    """

    curve: str
    part: Part
    exponent: int = 0
    word: str = ""
    named: Naming = "node"
    own: bool = False
    guessed: str = ""


@dataclass(frozen=True, slots=True)
class _Said:
    """What a name says: the curve, "" where it names none, and what of it; the rest as in `Column`."""

    curve: str
    kind: Kind
    named: Naming = "node"
    guessed: str = ""


def axis_of(name: str) -> Axis | str | None:
    """What a first column is; the unit alone where that is not known; None where it is no axis."""
    if (alone := _unit(name)) is not None:
        return Axis(*alone, unit=name, own=False)
    match = _AXIS.fullmatch(name)
    if match is None:
        return None
    word, loose = match[1].lower(), match[5]
    angular = word.startswith(("ang", "o", "w", "ω"))
    along: Along = "time" if word.startswith("t") else "frequency"
    unit = next((found for found in match.groups()[1:] if found is not None), "").strip()
    if not unit:
        plain = "rad/s" if angular else "s" if along == "time" else "Hz"
        return Axis(along, 0, angular, plain, own=word in ("frequency", "time"))
    found = _unit(unit)
    if found is None or found[0] != along or (angular and not found[2]):
        # Behind a bracket or a slash stands a unit; behind a blank may stand anything.
        return unit if loose is None else None
    return Axis(*found, unit=unit, own=False)


def _unit(unit: str) -> tuple[Along, int, bool] | None:
    """What a unit of an axis measures, its power of ten, and whether it counts radians."""
    lower = unit.lower()
    if lower in _ANY_CASE:
        return "frequency", {"khz": 3, "ghz": 9}.get(lower, 0), False
    if unit in _HERTZ or unit in ("MHZ", "Mhz", "mHZ"):
        return "frequency", _HERTZ.get(unit, 6), False
    if unit in _PER_SECOND:
        return "frequency", _PER_SECOND[unit], True
    if unit in _SECONDS or lower in ("sec", "second", "seconds") or unit == "S":
        return "time", _SECONDS.get(unit, _SECONDS[lower]), False
    return None


def is_axis_unit(cell: str) -> bool:
    """True for the unit of an axis, as it begins a row of units below the header: `Hz`, `[ms]`."""
    return _unit(cell.strip(" ()[]")) is not None


def is_unit(cell: str) -> bool:
    """True for a cell of a row of units below the header: `Hz`, `(dB)`, `[deg]`."""
    bare = cell.strip(" ()[]")
    return bare == "-" or _unit(bare) is not None or bare.lower() in {*_PART_UNITS, *_LINEAR_UNITS}


def with_unit(name: str, cell: str) -> str | None:
    """A header's name with the unit below it; None where the two contradict each other."""
    unit = cell.strip(" ()[]")
    if unit in ("", "-"):
        return name
    match = _AXIS.fullmatch(name)
    own = next((found for found in match.groups()[1:] if found), "") if match else split_unit(name)[1]
    if own:
        return name if own.strip().lower() == unit.lower() else None
    return f"{name} [{unit}]"


def column_of(name: str, along: str) -> tuple[Column, str, str]:
    """What a column holds by its header; then what is wrong with it and the remedy, "" where nothing is."""
    base, unit = split_unit(name)
    lower = base.lower()
    said = _said(lower)
    own = _PART.fullmatch(name.lower()) is not None
    if along == "time" and not own:
        return _along_time(name, lower, unit, said is not None and said.kind == "trace"), "", ""
    if said is None and unit.lower() in _PART_UNITS and (named := _named(lower)) is not None:
        said = replace(named, kind="trace")
    if said is None:
        return Column(name.lower(), "", own=True), "", ""
    if unit.lower() not in ("", *_LINEAR_UNITS, *_PART_UNITS) or unit in _MEGA:
        return Column(said.curve, ""), f"has the unit {unit[:20]!r}, which is not read.", _UNITS_REMEDY
    part, why, remedy = _part_of(said.kind, unit, base)
    own = own or (said.kind == "trace" and not unit and not said.guessed)
    exponent = _LINEAR_UNITS.get(unit.lower(), 0)
    return Column(said.curve, part, exponent, base, said.named, own, said.guessed), why, remedy


def _along_time(name: str, base: str, unit: str, is_trace: bool) -> Column:
    """Along time a function of a trace, or a word such as "magnitude", is but a name."""
    lower = unit.lower()
    if is_trace and lower in _PART_UNITS:
        return Column(base, _PART_UNITS[lower], word=name)
    sized = lower in _LINEAR_UNITS and lower not in _PLAIN_RATIOS and unit not in _MEGA
    curve, exponent = (base, _LINEAR_UNITS[lower]) if sized else (base if not unit else name.lower(), 0)
    return Column(curve, "", exponent, name, "none" if _SIGNAL.fullmatch(curve) else "node", own=True)


def _part_of(kind: Kind, unit: str, base: str) -> tuple[Part, str, str]:
    """The part that a quantity in a unit is, and what is wrong with it, with the remedy."""
    by_unit = _PART_UNITS.get(unit.lower(), "")
    misfit = f"cannot have the unit {unit!r}."
    if kind == "trace":
        return by_unit or ("mag" if unit else ""), "", ""
    if kind == "angle":
        wrong = bool(unit) and by_unit not in ("deg", "rad")
        return by_unit or "angle", misfit if wrong else "", f"Say deg or rad in the header: '{base} [deg]'."
    if kind in ("gain", "size", "mag"):
        wrong = by_unit not in ("", "db")
        return by_unit or ("mag" if unit else kind), misfit if wrong else "", "Use dB, V, mV, V/V or 1."
    own = kind if kind in ("db", "deg", "rad") else ""
    wrong = bool(unit) and by_unit != own
    return kind, misfit if wrong else "", f"Use {own}." if own else "Use V, mV, V/V or 1."


def split_unit(name: str) -> tuple[str, str]:
    """The name without its unit, and the unit; a bracket or slash that belongs to the name stays in it."""
    match = _WITH_UNIT.fullmatch(name) if len(name) <= _LONGEST_WITH_UNIT else None
    if match is None or _said(name.lower()) is not None:
        return name, ""
    base, unit = (found for found in match.groups() if found is not None)
    base, unit = base.removesuffix(" in").strip(), unit.strip()
    known = unit.lower() in _PART_UNITS or unit.lower() in _LINEAR_UNITS
    return (base, unit) if known or _said(base.lower()) is not None else (name, "")


def _said(base: str) -> _Said | None:
    """What a name without its unit says; None where its form is unknown."""
    if match := _PART.fullmatch(base):
        return _Said(match[1], _PARTS[match[2]])
    if _TRACE.fullmatch(base):
        return _Said(base, "trace")
    if base in _WORDS:
        return _Said("", _WORDS[base], "none")
    if match := _SHORT_FUNCTION.fullmatch(base):
        return _Said(f"{match[1]}({match[3]})", _FUNCTIONS[match[2]])
    if len(base) > _LONGEST_WITH_UNIT:
        return None
    if match := _FUNCTION.fullmatch(base):
        function, inside = (found for found in match.groups() if found is not None)
        named = _named(inside) if function in _FUNCTIONS else None
        # In `Gain (Np)`, `Phase (x)` and `Re(V)` a unit stands in the brackets, in `re(out)` a node.
        bare = function in _CALLED and " " not in base and inside not in (*_LINEAR_UNITS, *_PART_UNITS)
        if named is not None and (bare or named.named == "none" or _TRACE.fullmatch(inside)):
            return replace(named, kind=_FUNCTIONS[function])
    for pattern in (_TAGGED_FIRST, _TAGGED_LAST):
        match = pattern.fullmatch(base)
        for word, tag in ((match[1], match[2]), (match[2], match[1])) if match else ():
            if word in _WORDS and (named := _named(tag)) is not None:
                return replace(named, kind=_WORDS[word])
    return None


def _named(inside: str) -> _Said | None:
    """The curve that a name stands for, of unknown kind; None for what is no name."""
    if _TRACE.fullmatch(inside):
        return _Said(inside, "")
    if _TRANSFER.fullmatch(inside):
        return _Said("", "", "none")
    if _LABEL.fullmatch(inside):
        return _Said(inside, "", "label")
    if inside in _WORDS or not _NODE.fullmatch(inside):
        return None
    return _Said(f"v({inside})", "", "node", inside)


def to_base(axis: Axis) -> tuple[float, float]:
    """What to multiply with and what to divide by; dividing keeps 1.5 ms the double nearest 0.0015."""
    down = 10.0 ** max(-axis.exponent, 0)
    return 10.0 ** max(axis.exponent, 0), down * 2 * math.pi if axis.angular else down
