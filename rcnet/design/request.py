"""A target as people ask for it: options as text, read and held against each other."""

from __future__ import annotations

import math
from collections.abc import Mapping

from ..errors import InputError
from ..values import (
    SERIES,
    Tolerance,
    format_quantity,
    parse_quantity,
    parse_tolerance,
    values_between,
)
from .target import CAPACITORS, KEEP, KINDS, MOST_SECTIONS, RESISTORS, Kind, Parts, Target

Given = Mapping[str, str | int | None]

_UNITS = {
    "cutoff": "Hz", "lower": "Hz", "upper": "Hz", "at": "Hz", "carrier": "Hz", "attenuation": "dB",
    "ripple": "V", "supply": "V", "settling": "s", "bounce": "s", "source": "ohm", "load": "ohm",
}  # fmt: skip
_WANTS: dict[str, tuple[str, ...]] = {
    "lowpass": ("cutoff", "attenuation", "at"),
    "highpass": ("cutoff", "attenuation", "at"),
    "bandpass": ("lower", "upper"),
    "smoothing": ("ripple", "settling", "carrier", "supply"),
    "debounce": ("bounce", "supply", "thresholds"),
}
_SAYS = {
    "lowpass": "Give --cutoff, or --attenuation with --at, or all three",
    "highpass": "Give --cutoff, or --attenuation with --at, or all three",
    "bandpass": "Give --lower and --upper",
    "smoothing": "Give --ripple, --settling, --carrier and --supply",
    "debounce": "Give --bounce, --supply and --thresholds LOW,HIGH",
}
# The tolerance each series is named after. (Custom, not part of IEC 60063.)
_CUSTOMARY = {"E3": 0.2, "E6": 0.2, "E12": 0.1, "E24": 0.05, "E48": 0.02, "E96": 0.01, "E192": 0.005}
_MOST_VALUES = 3000
_MOST_KEPT = 100
# Beyond what any RC network does, and within what products of six of its numbers leave of a double's.
_LIMITS = {"Hz": (1e-9, 1e15), "s": (1e-15, 1e9), "V": (1e-9, 1e9), "dB": (1e-3, 1e3), "ohm": (1e-6, 1e15)}
# Far beyond any part; within, no product of six of them leaves the numbers a double holds.
_SMALLEST, _LARGEST = {"ohm": 1e-3, "F": 1e-15}, {"ohm": 1e12, "F": 1e3}


def read_target(kind: str, given: Given) -> Target:
    """The target that options describe.

    given: the options by name, `-` as `_`, as text; None or absent where one is not given
    Raises InputError (QuantityError for a number that cannot be read) with the remedy.
    """
    if kind not in KINDS:
        raise InputError(
            f"{kind!r} is no kind of circuit that can be designed.", remedy=f"Kinds: {', '.join(KINDS)}."
        )
    texts = {name: str(value) for name, value in given.items() if value is not None}
    _refuse_strangers(kind, texts)
    numbers = {name: _number(name, texts[name]) for name in _UNITS if name in texts}
    target = Target(
        kind,
        _parts(texts, "", "resistors", "E24", RESISTORS),
        _parts(texts, "capacitor_", "capacitors", "E12", CAPACITORS),
        _sections(kind, texts),
        _whole(texts, "keep", KEEP, _MOST_KEPT),
        **numbers,
    )
    return _sensible(target if "thresholds" not in texts else _with_thresholds(target, texts["thresholds"]))


def option(name: str) -> str:
    """An option's name as it is typed."""
    return f"--{name.replace('_', '-')}"


def _refuse_strangers(kind: Kind, texts: Mapping[str, str]) -> None:
    wanted = _WANTS[kind]
    for other in sorted({name for names in _WANTS.values() for name in names} - set(wanted)):
        if other in texts:
            raise InputError(f"{option(other)} does not go with {kind}.", remedy=f"{_SAYS[kind]}.")
    missing = [name for name in wanted if name not in texts]
    if kind in ("lowpass", "highpass"):
        if len({"attenuation", "at"} & texts.keys()) == 1:
            raise InputError("--attenuation and --at go together.", remedy=f"{_SAYS[kind]}.")
        missing = [] if {"cutoff", "at"} & texts.keys() else ["cutoff"]
    if missing:
        raise InputError(
            f"{kind} needs {' and '.join(option(name) for name in missing)}.", remedy=f"{_SAYS[kind]}."
        )


def _number(name: str, text: str) -> float:
    value = parse_quantity(text, _UNITS[name], option(name))
    if (name == "source" and value == 0) or (name == "load" and value == math.inf):
        return value
    low, high = _LIMITS[_UNITS[name]]
    if not low <= value <= high:
        ends = f"{format_quantity(low, _UNITS[name])} to {format_quantity(high, _UNITS[name])}"
        also = "0, or " if name == "source" else ""
        raise InputError(f"{option(name)} is {text!r}.", remedy=f"Give {also}{ends}.")
    return value


def _whole(texts: Mapping[str, str], name: str, default: int, most: int) -> int:
    text = texts.get(name, str(default))
    if not text.isascii() or not text.isdigit() or len(text) > 9 or not 1 <= int(text) <= most:
        raise InputError(f"{option(name)} is {text!r}.", remedy=f"Give a whole number from 1 to {most}.")
    return int(text)


def _sections(kind: Kind, texts: Mapping[str, str]) -> int | None:
    if "sections" not in texts:
        return None
    most = MOST_SECTIONS[kind]
    if kind == "bandpass" and texts["sections"] != "2":
        raise InputError(
            f"--sections is {texts['sections']!r}, and a band-pass has two: a high-pass and a low-pass one.",
            remedy="Leave --sections out.",
        )
    return _whole(texts, "sections", 1, most)


# ---------------------------------------------------------------------- parts


def _parts(
    texts: Mapping[str, str], prefix: str, ranged: str, series: str, default: tuple[float, float]
) -> Parts:
    unit = "ohm" if ranged == "resistors" else "F"
    name = texts.get(f"{prefix}series", series)
    known = {each.upper(): each for each in SERIES}
    if name.upper() not in known:
        raise InputError(
            f"{option(f'{prefix}series')} is {name!r}, which is no series of preferred values (IEC 60063).",
            remedy=f"Known: {', '.join(SERIES)}.",
        )
    name = known[name.upper()]
    low, high = _pair(texts[ranged], unit, option(ranged)) if ranged in texts else default
    if not (_SMALLEST[unit] <= low <= high <= _LARGEST[unit]):
        raise InputError(
            f"{option(ranged)} runs from {format_quantity(low, unit)} to {format_quantity(high, unit)}.",
            remedy=f"Put the lower end first, within {format_quantity(_SMALLEST[unit], unit)} to "
            f"{format_quantity(_LARGEST[unit], unit)}.",
        )
    count = len(values_between(low, high, name))
    if not 1 <= count <= _MOST_VALUES:
        raise InputError(
            f"{option(ranged)}: {name} has {count} values from {format_quantity(low, unit)} to "
            f"{format_quantity(high, unit)}.",
            remedy=f"Let the range hold 1 to {_MOST_VALUES}.",
        )
    return Parts(name, low, high, _tolerance(texts.get(f"{prefix}tolerance"), prefix, name))


def _tolerance(text: str | None, prefix: str, series: str) -> Tolerance:
    if text is None:
        return Tolerance(-_CUSTOMARY[series], _CUSTOMARY[series])
    kind = "C" if prefix else "R"
    bare = text.strip().replace(".", "", 1)
    # A bare 5 is meant as 5 %, and would otherwise be read as five hundred.
    found = parse_tolerance(f"{text}%" if bare.isascii() and bare.isdigit() else text, kind=kind)
    if found.low < -0.9 or found.high > 9:
        raise InputError(
            f"{option(f'{prefix}tolerance')} is {text!r}.", remedy="Give at most -90 % and +900 %."
        )
    return found


def _pair(text: str, unit: str, what: str) -> tuple[float, float]:
    words = [word.strip() for word in text.split(",")]
    if len(words) != 2:
        raise InputError(f"{what} is {text!r}.", remedy="Give two values with one comma between, LOW,HIGH.")
    low, high = (parse_quantity(word, unit, what) for word in words)
    return low, high


# ---------------------------------------------------------------------- one option against another


def _with_thresholds(target: Target, text: str) -> Target:
    from dataclasses import replace

    low, high = _pair(text, "V", "--thresholds")
    assert target.supply is not None
    if not 0 < low < high < target.supply:
        raise InputError(
            f"--thresholds {text!r} and --supply {format_quantity(target.supply, 'V')} do not fit: "
            "the output moves between 0 V and the supply and must cross both.",
            remedy="Give 0 < LOW < HIGH < supply.",
        )
    return replace(target, low=low, high=high)


def _sensible(target: Target) -> Target:
    """The target unless two of its options contradict each other."""
    cutoff, at, attenuation = target.cutoff, target.at, target.attenuation
    if cutoff is not None and at is not None and attenuation is not None:
        low = target.kind == "lowpass"
        if (at <= cutoff) if low else (at >= cutoff):
            side = "above" if low else "below"
            raise InputError(
                f"--at {format_quantity(at, 'Hz')} is not {side} --cutoff {format_quantity(cutoff, 'Hz')}: "
                f"a {target.kind} filter passes it.",
                remedy=f"Ask for attenuation {side} the cutoff.",
            )
    if target.lower is not None and target.upper is not None and target.lower >= target.upper:
        raise InputError(
            f"--lower {format_quantity(target.lower, 'Hz')} is not below "
            f"--upper {format_quantity(target.upper, 'Hz')}.",
            remedy="Exchange them.",
        )
    if target.ripple is not None and target.supply is not None and target.ripple >= target.supply:
        raise InputError(
            f"--ripple {format_quantity(target.ripple, 'V')} is no less than "
            f"--supply {format_quantity(target.supply, 'V')}.",
            remedy="The signal itself has no more ripple than that: ask for less.",
        )
    return target


__all__ = ["option", "read_target"]
