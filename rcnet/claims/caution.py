"""Cautions: voltages and stored charges that are dangerous to touch."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

from ..circuit import Circuit, Network, Part, Seen
from ..errors import RcnetError, UndecidedError
from ..values import format_quantity
from .measures import evaluate
from .strain import Strain, driven, most_volts

MOST_PARTS = 5000
# Limits commonly quoted, not checked against the standards' own text: extra-low voltage, IEC 61140 and
# IEC 60950-1 (SELV), 60 V dc, 30 V rms and 42.4 V peak ac; what a capacitor charged beyond that may hold,
# 45 uC or 350 mJ, IEC 60335-1 and IEC 61010-1; hazardous energy at 2 V and more, 20 J, IEC 60950-1.
DC_VOLTS = 60.0
AC_RMS, AC_PEAK = 30.0, 42.4
CHARGE, ENERGY = 45e-6, 0.35
BURNING_ENERGY, BURNING_VOLTS = 20.0, 2.0
_RIPPLE_FREE = 0.1  # rms of the ripple over the mean, up to which dc is called so, IEC 60364-4-41
_MOST_PAIRS = 40  # pairs of nodes looked at where sources have waveforms

_REMEDY = (
    "Insulation, discharge and access follow local codes and licensed practice; no calculation replaces them."
)


def caution_findings(circuit: Circuit) -> list[Seen]:
    """At most one `hazardous-voltage` and one `stored-charge`, both notes.

    The first where some part, source or node to ground reaches more than 60 V dc, or 30 V rms or 42.4 V peak
    of ac; the second where a capacitor holds more than 45 uC or 350 mJ at more than 60 V, or 20 J at any
    voltage from 2 V on. Nothing where that cannot be computed, and in networks of more than 5000 parts.
    """
    network = circuit.network
    if len(network) > MOST_PARTS:
        return []
    alarms = _by_ac(network)
    stores: list[_Store] = []
    if driven(network) and not _harmless(network):
        try:
            found, stores = _looked(network)
        except RcnetError:
            found = []
        alarms = found or alarms
    told = [_hazardous(circuit, alarms)] if alarms else []
    return [*told, _stored(circuit, stores)] if stores else told


@dataclass(frozen=True, slots=True)
class _Alarm:
    """A voltage beyond a limit. where: for people; part: its name, or that of one at the node."""

    where: str
    part: str
    told: str
    limit: str
    share: float


@dataclass(frozen=True, slots=True)
class _Store:
    """A capacitor that holds more than is harmless, at so many volts."""

    part: Part
    volts: float

    @property
    def charge(self) -> float:
        return self.part.value * self.volts

    @property
    def energy(self) -> float:
        return self.part.value * self.volts**2 / 2


def _harmless(network: Network) -> bool:
    """True if no voltage can come near a limit, and no capacitor holds energy that burns."""
    volts = most_volts(network)
    most = max((part.value for part in network.parts if part.kind == "C"), default=0.0)
    return volts <= AC_PEAK and (volts < BURNING_VOLTS or most * volts**2 / 2 < BURNING_ENERGY)


def _by_ac(network: Network) -> list[_Alarm]:
    """Sources that give nothing but an ac amplitude beyond a limit, as mains voltages are often written."""
    found = []
    for name, source in network.sources.items():
        size = abs(source.ac or 0.0)
        if source.kind == "V" and source.waveform is None and source.dc is None and size > AC_PEAK:
            told = f"{format_quantity(size, 'V')} peak ac"
            found.append(_Alarm(f"the source {name}", name, told, f"{AC_PEAK:g} V peak ac", size / AC_PEAK))
    return found


def _looked(network: Network) -> tuple[list[_Alarm], list[_Store]]:
    """The voltages beyond a limit, the worst first, and the capacitors that hold too much, likewise."""
    parts = [part for part in network.parts if part.kind != "K" and len(set(part.nodes[:2])) == 2]
    moving = any(source.waveform is not None for source in network.sources.values())
    if moving:
        # What stores charge and what drives first: beyond a number, a waveform takes long to follow.
        order = {"C": 0, "V": 1, "I": 1}
        parts = sorted(parts, key=lambda part: order.get(part.kind, 2))[:_MOST_PAIRS]
    from .time_measures import ends_of

    pairs = [ends_of(network, part.name) for part in parts]
    named = [(_across(part), part.name) for part in parts]
    for node, part in _nodes(network, {pair for pair in pairs if 0 in pair}):
        if not moving or len(pairs) < _MOST_PAIRS:
            pairs.append((network.node_index(node), 0))
            named.append((f"node {node!r}", part))
    strain = Strain(network, pairs)
    alarms = [
        alarm
        for k, (where, part) in enumerate(named)
        if (alarm := _alarm(strain, k, where, part)) is not None
    ]
    stores = [
        store
        for k, part in enumerate(parts)
        if part.kind == "C" and _too_much(store := _Store(part, strain.peak(k)))
    ]
    alarms.sort(key=lambda alarm: -alarm.share)
    stores.sort(key=lambda store: -store.energy)
    return alarms, stores


def _across(part: Part) -> str:
    return f"the source {part.name}" if part.kind in "VI" else part.name


def _nodes(network: Network, seen: Iterable[tuple[int, int]]) -> list[tuple[str, str]]:
    """The nodes that no part leads from to ground, each with a part that touches it."""
    grounded = {node for pair in seen for node in pair}
    found: dict[str, str] = {}
    for part in network.parts:
        for node in part.nodes:
            if network.node_index(node) not in grounded and node != "0":
                found.setdefault(node, part.name)
    return list(found.items())


def _alarm(strain: Strain, k: int, where: str, part: str) -> _Alarm | None:
    peak, varying = strain.peak(k), strain.alternating(k)
    if varying > _RIPPLE_FREE * abs(strain.mean(k)):
        rms = strain.rms(k)
        if peak / AC_PEAK >= rms / AC_RMS:
            told, limit, share = peak, f"{AC_PEAK:g} V peak ac", peak / AC_PEAK
            words = f"{format_quantity(told, 'V')} peak"
        else:
            told, limit, share = rms, f"{AC_RMS:g} V rms ac", rms / AC_RMS
            words = f"{format_quantity(told, 'V')} rms"
    else:
        words, limit, share = f"{format_quantity(peak, 'V')} dc", f"{DC_VOLTS:g} V dc", peak / DC_VOLTS
    return _Alarm(where, part, words, limit, share) if share > 1 else None


def _too_much(store: _Store) -> bool:
    if store.volts > DC_VOLTS and (store.charge > CHARGE or store.energy > ENERGY):
        return True
    return store.volts >= BURNING_VOLTS and store.energy > BURNING_ENERGY


# ---------------------------------------------------------------------- what is told


def _hazardous(circuit: Circuit, alarms: list[_Alarm]) -> Seen:
    worst = alarms[0]
    message = (
        f"{worst.where[0].upper()}{worst.where[1:]} reaches {worst.told}{_more(len(alarms) - 1, 'place')}; "
        f"{worst.limit} is commonly taken as the limit of extra-low voltage."
    )
    place = circuit.place_of(worst.part).at(worst.part)
    return Seen("hazardous-voltage", message, _REMEDY, place, "note")


def _stored(circuit: Circuit, stores: list[_Store]) -> Seen:
    worst, shock = stores[0], stores[0].volts > DC_VOLTS
    limit = (
        f"above {DC_VOLTS:g} V, 45 uC or 350 mJ are commonly taken as the limit"
        if shock
        else f"{BURNING_ENERGY:g} J are commonly taken as enough to burn through a short circuit"
    )
    held = (
        f"{_prefixed(worst.charge, 'C')} and {_prefixed(worst.energy, 'J')} "
        f"at {format_quantity(worst.volts, 'V')}"
    )
    message = f"{worst.part.name} holds up to {held}{_more(len(stores) - 1, 'capacitor')}; {limit}."
    after = _after_switch_off(circuit.network, worst) if shock else ""
    place = circuit.place_of(worst.part.name).at(worst.part.name)
    return Seen("stored-charge", message + after, _REMEDY, place, "note")


def _prefixed(value: float, unit: str) -> str:
    """A quantity in a unit that circuits do not have, with its prefix."""
    return format_quantity(value, "V").removesuffix("V") + unit


def _more(count: int, what: str) -> str:
    if count <= 0:
        return ""
    return (
        f" ({count} other {what}s go beyond the limit too)"
        if count > 1
        else f" (1 other {what} goes beyond the limit too)"
    )


def _after_switch_off(network: Network, store: _Store) -> str:
    """How long the capacitor stays above the limit once the sources are gone; "" where that is unknown."""
    if set(network.arrays().kinds.tolist()) - {*b"RCVI"}:
        return ""
    try:
        time = evaluate(network, "discharge_time", None, {"part": store.part.name, "to": DC_VOLTS})
    except UndecidedError as exc:
        return f" {exc.message}"
    except RcnetError:
        return ""
    if time == 0 or not math.isfinite(time):
        return ""
    taken = format_quantity(time, "s")
    return f" With the sources disconnected it takes {taken} to fall below {DC_VOLTS:g} V."


__all__ = ["caution_findings"]
