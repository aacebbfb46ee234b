"""Reading what drives a source: ac, dc and one waveform, from a circuit file's table or a call's keywords."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from ..errors import CircuitError
from ..values import parse_quantity
from .parts import Source
from .shown import nearest, shown
from .waveform import Exponential, Points, Sine, Square, Step, Waveform

_SQUARE = {"low", "high", "frequency", "duty", "rise", "fall", "delay"}
_SINE = {"amplitude", "frequency", "offset", "phase", "delay", "damping"}
_STEP = {"from", "to", "at", "rise"}
_EXPONENTIAL = {"from", "to", "at", "time_constant", "back_at", "back_time_constant"}
_POINTS = {"values", "period"}


def parse_drive(name: str, nodes: tuple[str, str], drive: Mapping[str, Any]) -> Source:
    """A source from the keys of `[sources.NAME]`. Raises CircuitError or QuantityError naming the key."""
    unit = {"V": "V", "I": "A"}.get(name[:1].upper())
    if unit is None:
        raise CircuitError(
            f"the source is called {shown(name)}.", remedy="Let its name begin with V or I, as Vin."
        )
    known = {"ac", "ac_phase", "dc", *WAVEFORMS}
    for key in drive:
        if key not in known:
            raise CircuitError(f"{name}: unknown key {shown(key)}.", remedy=nearest(key, known))
    waves = [key for key in WAVEFORMS if drive.get(key) is not None]
    if len(waves) > 1:
        raise CircuitError(f"{name} has two waveforms, {waves[0]} and {waves[1]}.", remedy="Keep one.")
    waveform = None
    if waves:
        table = drive[waves[0]]
        if not isinstance(table, Mapping):
            raise CircuitError(
                f"{name}: {waves[0]} is {shown(table)}.", remedy=f"Write {waves[0]} = {{ ... }}."
            )
        waveform = WAVEFORMS[waves[0]](_Reader(f"{name}: {waves[0]}", unit, table))
    ac, dc = drive.get("ac"), drive.get("dc")
    return Source(
        name,
        nodes,
        ac=None if ac is None else parse_quantity(ac, unit, f"{name}: ac"),
        ac_phase=parse_quantity(drive.get("ac_phase", 0.0), "deg", f"{name}: ac_phase"),
        dc=None if dc is None else parse_quantity(dc, unit, f"{name}: dc"),
        waveform=waveform,
    )


class _Reader:
    """Reads the keys of one waveform's table, with its name in every message."""

    def __init__(self, where: str, unit: str, table: Mapping[str, Any]) -> None:
        self.where, self.unit, self.table = where, unit, table

    def only(self, known: set[str]) -> None:
        for key in self.table:
            if key not in known:
                raise CircuitError(f"{self.where}: unknown key {shown(key)}.", remedy=nearest(key, known))

    def need(self, key: str, unit: str | None = None) -> float:
        if key not in self.table:
            raise CircuitError(f"{self.where}: {shown(key)} is missing.", remedy="Add it.")
        return parse_quantity(self.table[key], unit or self.unit, f"{self.where}: {key}")

    def may(self, key: str, unit: str, default: float) -> float:
        return self.need(key, unit) if key in self.table else default


def _square(read: _Reader) -> Waveform:
    read.only(_SQUARE)
    return Square.from_duty(
        read.need("low"),
        read.need("high"),
        read.need("frequency", "Hz"),
        read.may("duty", "1", 0.5),
        rise=read.may("rise", "s", 0.0),
        fall=read.may("fall", "s", 0.0),
        delay=read.may("delay", "s", 0.0),
    )


def _sine(read: _Reader) -> Waveform:
    read.only(_SINE)
    return Sine(
        read.need("amplitude"),
        read.need("frequency", "Hz"),
        read.may("offset", read.unit, 0.0),
        read.may("phase", "deg", 0.0),
        read.may("delay", "s", 0.0),
        read.may("damping", "1", 0.0),
    )


def _step(read: _Reader) -> Waveform:
    read.only(_STEP)
    return Step(read.need("from"), read.need("to"), read.may("at", "s", 0.0), read.may("rise", "s", 0.0))


def _exponential(read: _Reader) -> Waveform:
    read.only(_EXPONENTIAL)
    there = (read.need("from"), read.need("to"), read.may("at", "s", 0.0), read.need("time_constant", "s"))
    if "back_at" not in read.table and "back_time_constant" not in read.table:
        return Exponential(*there)
    return Exponential(*there, read.need("back_at", "s"), read.need("back_time_constant", "s"))


def _points(read: _Reader) -> Waveform:
    read.only(_POINTS)
    rows = read.table.get("values")
    if not isinstance(rows, (list, tuple)):
        raise CircuitError(
            f"{read.where}: 'values' is missing.", remedy="Write values = [[time, value], ...]."
        )
    pairs = []
    for row in rows:
        if not isinstance(row, (list, tuple)) or len(row) != 2:
            raise CircuitError(
                f"{read.where}: {shown(row)} is no pair.", remedy="Write each point as [time, value]."
            )
        time = parse_quantity(row[0], "s", f"{read.where}: time")
        pairs.append((time, parse_quantity(row[1], read.unit, f"{read.where}: value")))
    period = read.need("period", "s") if "period" in read.table else None
    return Points(tuple(pairs), period)


WAVEFORMS: dict[str, Callable[[_Reader], Waveform]] = {
    "square": _square,
    "sine": _sine,
    "step": _step,
    "exponential": _exponential,
    "points": _points,
}
