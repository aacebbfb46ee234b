"""Rules about the values of parts: what such parts come in."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from ..circuit import KINDS, Circuit, Part
from ..errors import RcnetError
from ..values import customary_series, format_quantity, in_series, nearest, number_oddity, read_spice_number
from ._telling import at_value, few, listed
from .finding import Remark, rule

# What parts on a board come in, base units. Common practice, no source: far beyond ordinary catalogues, so
# that what lies outside is a slip of the pen more often than a part.
_COME_IN = {"R": (1e-3, 1e12), "C": (1e-14, 0.1), "L": (1e-10, 1e3)}
_SMALL_RESISTANCE = 0.1  # ohm; where a netlist writes it with an m, Meg may have been meant (common practice)
_SHUNT = 1.0  # ohm; below, shunts are made in round values, 1 2 5 (common practice, no source)
_EACH = 3  # parts beyond one bound told one by one; more are told together
_READ = 1000  # of these, looked at for how their values are written


@rule("suspicious-value", "warning", of_text=True)
def suspicious_value(circuit: Circuit) -> Iterator[Remark]:
    """A value outside what such parts come in: a capacitor of 10 F, a resistor of 2 microohm.

    Resistors from 1 mohm to 1 Tohm, capacitors from 10 fF to 100 mF, inductors from 100 pH to 1000 H; in a
    netlist also a resistance under 0.1 ohm that is written with an m (milli). A simulator takes any value.
    """
    arrays = circuit.network.arrays()
    for kind, (low, high) in _COME_IN.items():
        ours = arrays.kinds == ord(kind)
        for beyond in (ours & (arrays.values < low), ours & (arrays.values > high)):
            yield from _unusual(circuit, kind, np.flatnonzero(beyond).tolist())
    if circuit.origin == "netlist":
        yield from _milliohms(circuit)


def _unusual(circuit: Circuit, kind: str, rows: list[int]) -> Iterator[Remark]:
    names, values, unit = circuit.network.names, circuit.network.arrays().values, KINDS[kind].unit
    # An odd number is a finding already.
    rows = [row for row in rows[:_READ] if not _read_oddly(circuit, names[row], kind)] + rows[_READ:]
    low, high = (format_quantity(bound, unit) for bound in _COME_IN[kind])
    usual = f"{'an' if kind == 'L' else 'a'} {KINDS[kind].name} usually has {low} to {high}."
    for group in [rows] if len(rows) > _EACH else [[row] for row in rows]:
        sizes = sorted({float(values[row]) for row in group})
        has = " to ".join(format_quantity(size, unit) for size in dict.fromkeys((sizes[0], sizes[-1])))
        yield Remark(
            f"{listed(names[row] for row in group)} {'have' if len(group) > 1 else 'has'} {has}; {usual}",
            "Check the prefix and the unit.",
            at_value(circuit, circuit.network.part(names[group[0]])),
        )


def _milliohms(circuit: Circuit) -> Iterator[Remark]:
    network = circuit.network
    arrays, names = network.arrays(), network.names
    low, _ = _COME_IN["R"]
    small = (arrays.kinds == ord("R")) & (arrays.values >= low) & (arrays.values < _SMALL_RESISTANCE)
    rows = np.flatnonzero(small).tolist()

    def tell(name: str) -> Remark:
        part = network.part(name)
        return Remark(
            f"{name}: {circuit.value_texts[name]!r} is {format_quantity(part.value, 'ohm')}.",
            f"Write Meg for a million, or {part.value!r} if so little is meant.",
            at_value(circuit, part),
        )

    written = [names[row] for row in rows if _suffix(circuit, names[row]) == "m"]
    odd = "resistors have less than 0.1 ohm, written with an m"
    yield from few([name for name in written if not _read_oddly(circuit, name, "R")], tell, odd)


def _suffix(circuit: Circuit, name: str) -> str:
    try:
        return read_spice_number(circuit.value_texts.get(name, "")).suffix.lower()
    except RcnetError:  # an expression, or nothing
        return ""


def _read_oddly(circuit: Circuit, name: str, kind: str) -> bool:
    """True where SPICE reads the value's text otherwise than a person, which has a rule of its own."""
    text = circuit.value_texts.get(name)
    if text is None:
        return False
    try:
        return "," in text or number_oddity(read_spice_number(text), kind) is not None
    except RcnetError:
        return False


@dataclass(frozen=True, slots=True)
class _Kept:
    """What parts that get one remark have in common."""

    kind: str
    value: float
    tolerance: str
    series: tuple[str, ...]


@rule("off-series", "note")
def off_series(circuit: Circuit) -> Iterator[Remark]:
    """A value in no preferred series (IEC 60063) in which parts of its tolerance are made.

    20 % goes with E6, 10 % with E12, 5 % with E24, 2 % with E48 or E24, 1 % with E96 or E24, less with E192
    or E24; capacitors and inductors are taken in all of E24. Only parts that state a tolerance are looked at,
    and no resistor under 1 ohm: shunts are made in round values.
    """
    groups: dict[_Kept, list[Part]] = {}
    for part in circuit.network.parts if circuit.origin != "netlist" else ():
        if part.tolerance is None or part.kind not in _COME_IN or (part.kind == "R" and part.value < _SHUNT):
            continue
        width = max(-part.tolerance.low, part.tolerance.high)
        if width == 0:  # an ideal part, to be bought nowhere
            continue
        series = customary_series(width)
        if part.kind != "R" and "E24" not in series:
            series = ("E24",)
        if not any(in_series(part.value, name) for name in series):
            key = _Kept(part.kind, part.value, str(part.tolerance), series)
            groups.setdefault(key, []).append(part)
    yield from few(
        list(groups.items()),
        lambda group: _not_made(circuit, *group),
        "values are in no series of their tolerance",
    )


def _not_made(circuit: Circuit, kept: _Kept, parts: list[Part]) -> Remark:
    unit = KINDS[kept.kind].unit
    near = {name: nearest(kept.value, name) for name in kept.series}
    if len(set(near.values())) == 1:
        offers = f"nearest is {format_quantity(next(iter(near.values())), unit)}"
    else:
        each = [f"{format_quantity(value, unit)} ({name})" for name, value in near.items()]
        offers = f"nearest are {' and '.join(each)}"
    value, names = format_quantity(kept.value, unit), listed(part.name for part in parts)
    return Remark(
        f"{names}: {value} with {kept.tolerance} is no value of {' or '.join(kept.series)}; {offers}.",
        "Take a preferred value (IEC 60063), unless the part is trimmed or put together from several.",
        at_value(circuit, parts[0]),
    )
