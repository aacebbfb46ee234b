"""The measures a claim can be about: their names, units and options."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from ..errors import CircuitError
from ..values import parse_quantity
from .shown import shown

# option -> unit of its value; None for names and words.
OPTION_UNITS: dict[str, str | None] = {
    "at": "Hz",
    "edge": None,
    "band": "1",
    "order": "1",
    "from": "Hz",
    "to": "Hz",
    "part": None,
}


@dataclass(frozen=True, slots=True)
class MeasureSpec:
    """One measure: what it is called, in which unit it comes, which options it needs and may have."""

    name: str
    unit: str
    needs: tuple[str, ...] = ()
    may: tuple[str, ...] = ()
    option_units: tuple[tuple[str, str], ...] = ()

    def unit_of(self, option: str) -> str | None:
        """The unit of an option, or None where it is a word or a name."""
        return dict(self.option_units).get(option, OPTION_UNITS[option])


# To add a measure: one line here, one function in claims/measures.py.
MEASURES: dict[str, MeasureSpec] = {
    spec.name: spec
    for spec in (
        MeasureSpec("gain", "dB", ("at",)),
        MeasureSpec("attenuation", "dB", ("at",)),
        MeasureSpec("phase", "deg", ("at",)),
        MeasureSpec("group_delay", "s", ("at",)),
        MeasureSpec("cutoff", "Hz", (), ("edge",)),
        MeasureSpec("bandwidth", "Hz"),
        MeasureSpec("centre", "Hz"),
        MeasureSpec("dc_gain", "1"),
        MeasureSpec("input_impedance", "ohm", ("at",)),
        MeasureSpec("output_impedance", "ohm", ("at",)),
        MeasureSpec("time_constant", "s"),
        MeasureSpec("elmore_delay", "s"),
        MeasureSpec("rise_time", "s"),
        MeasureSpec("delay", "s"),
        MeasureSpec("settling_time", "s", ("band",)),
        MeasureSpec("mean", "V"),
        MeasureSpec("rms", "V"),
        MeasureSpec("ripple", "V"),
        MeasureSpec("harmonic", "V", ("order",)),
        MeasureSpec("thd", "%"),
        MeasureSpec("noise", "V", ("from", "to")),
        MeasureSpec("dissipation", "W", ("part",)),
        MeasureSpec("peak_voltage", "V", (), ("part",)),
        MeasureSpec("discharge_time", "s", ("part", "to"), (), (("to", "V"),)),
    )
}


def measure_spec(name: object) -> MeasureSpec:
    """The measure of that name. Raises CircuitError listing those there are."""
    spec = MEASURES.get(name) if isinstance(name, str) else None
    if spec is None:
        raise CircuitError(
            f"there is no measure called {shown(name)}.", remedy=f"Measures: {', '.join(MEASURES)}."
        )
    return spec


def parse_options(spec: MeasureSpec, given: Mapping[str, Any]) -> dict[str, float | str]:
    """The options of a measure, read and checked. Raises CircuitError or QuantityError.

    Frequencies may be 0 or `inf` only where the measure's meaning covers them; `order` is a whole number.
    """
    for key in given:
        if key not in (*spec.needs, *spec.may):
            takes = ", ".join((*spec.needs, *spec.may)) or "no option"
            raise CircuitError(f"{spec.name} takes no {shown(key)}.", remedy=f"It takes: {takes}.")
    options: dict[str, float | str] = {}
    for key in (*spec.needs, *spec.may):
        if key in given:
            options[key] = _option(spec, key, given[key])
        elif key in spec.needs:
            raise CircuitError(f"{spec.name} needs {shown(key)}.", remedy=f"Add {key} = ... to it.")
    check_band(spec, options)
    return options


def check_band(spec: MeasureSpec, options: Mapping[str, float | str]) -> None:
    """Raise CircuitError where a band of frequencies, given whole, does not run upwards."""
    if "from" in options and "to" in options and not float(options["from"]) < float(options["to"]):
        raise CircuitError(
            f"{spec.name}: from is {options['from']!r} Hz, which is not below to.",
            remedy="Put the lower frequency first.",
        )


def _option(spec: MeasureSpec, key: str, value: Any) -> float | str:
    unit = spec.unit_of(key)
    if unit is None:
        if not isinstance(value, str) or not value:
            raise CircuitError(f"{spec.name}: {key} is {shown(value)}.", remedy=f"Give {key} as text.")
        if key == "edge" and value not in ("lower", "upper"):
            raise CircuitError(f"{spec.name}: edge is {shown(value)}.", remedy='Write "lower" or "upper".')
        return value
    number = parse_quantity(value, unit, f"{spec.name}: {key}")
    if number < 0:
        raise CircuitError(f"{spec.name}: {key} is {number!r}, below zero.", remedy="Give zero or more.")
    if key == "at" and math.isinf(number):
        raise CircuitError(f"{spec.name}: at is {number!r}.", remedy="Give a finite frequency.")
    if key == "order" and (number < 1 or number != int(number)):
        raise CircuitError(f"{spec.name}: order is {number!r}.", remedy="Give a whole number from 1 on.")
    if key == "band" and not 0 < number < 1:
        raise CircuitError(
            f"{spec.name}: band is {number!r}.", remedy='Give a share between 0 and 1, as "1 %".'
        )
    return number
