"""What parts have to bear, held against what they are rated for."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ..circuit import GROUND, Circuit, Network, Part, Seen, Source
from ..errors import CircuitError, RcnetError, UndecidedError
from ..values import format_quantity
from .box import Box, box_of
from .strain import Float, Strain, driven, most_volts, once

Quantity = Literal["power", "peak voltage", "rms current"]
Method = Literal["nominal", "corners", "proven", "searched"]

MOST_PARTS = 5000
NEAR = 0.8  # of a rating; chosen here, as a share that trade habits of derating seldom go beyond
_ROUNDING = 1e-9  # a part exactly at its rating is not beyond it
_MOST_TOLERANCES = 60  # parts that are moved one by one
_MOST_CLIMBING = 20  # parts whose corners are improved on, one part after another
_MOST_ROUNDS = 4
_SEARCHED = 0.9  # of a rating: a corner this near is looked at again by a global search
_MOST_SEARCHED = 2  # parts for which that is done
_MOST_SEARCHED_TOLERANCES = 12
_UNITS: dict[Quantity, str] = {"power": "W", "peak voltage": "V", "rms current": "A"}
_VERBS: dict[Quantity, str] = {"power": "dissipates", "peak voltage": "sees", "rms current": "carries"}


@dataclass(frozen=True, slots=True)
class Stress:
    """What one part has to bear of what it is rated for.

    quantity: mean power of a resistor, peak voltage or rms current; value, low, high, rating: W, V or A
    value: at nominal values; low, high: over the tolerances
    share: the greatest value over the rating
    method: how low and high were found: `nominal` where tolerances cannot take the part near its rating, or
        too many parts have one (both are then the nominal value), `corners` along the slopes, or as the
        bounds of a measure are, `proven` or `searched`
    why: the reason where the value is not all there is to say, else None: a state that could not be computed,
        or a change that happens once, which has no mean power
    """

    part: str
    quantity: Quantity
    value: float
    low: float
    high: float
    rating: float
    share: float
    method: Method = "nominal"
    why: str | None = None


def stress(circuit: Circuit) -> list[Stress]:
    """What every rated part bears, in the network's order.

    Ratings in W are held against the mean power of resistors, in V against the greatest voltage, in A against
    the rms current. Where a source repeats the periodic steady state counts, else a change that happens once;
    the dc state, every source at its dc value, counts always. Nothing where no source gives anything other
    than an ac signal, in networks of more than 5000 parts, and where nothing can be computed.
    """
    return _borne(circuit, _gauges(circuit.network))


def rating_findings(circuit: Circuit) -> list[Seen]:
    """What is to be told of ratings, each with its code.

    `over-rating`, an error, where a part bears more than it is rated for, at the nominal values or somewhere
    over the tolerances; `near-rating`, a warning, above 80 % of it. One for each part and rating.
    """
    network = circuit.network
    gauges = _gauges(network)
    if gauges:
        volts = most_volts(network)
        gauges = [gauge for gauge in gauges if not gauge.is_safe(network, volts)]
    return [
        _remark(circuit, found) for found in _borne(circuit, gauges) if found.share > NEAR * (1 + _ROUNDING)
    ]


@dataclass(frozen=True, slots=True)
class _Gauge:
    """What is measured at one part."""

    part: Part
    quantity: Quantity
    rating: float

    def is_safe(self, network: Network, volts: float) -> bool:
        """True if no voltage up to `volts` brings the part near its rating, whatever its tolerance."""
        if self.quantity == "peak voltage":
            return volts <= NEAR * self.rating
        if self.part.kind != "R":
            return False
        least = self.part.value * (1 + (self.part.tolerance.low if self.part.tolerance else 0.0)) * 0.9
        return (volts**2 if self.quantity == "power" else volts) / least <= NEAR * self.rating


def _gauges(network: Network) -> list[_Gauge]:
    if len(network) > MOST_PARTS or not driven(network):
        return []
    found = []
    for part in network.parts:
        if part.rating is None or len(set(part.nodes[:2])) < 2:
            continue
        rating, unit = part.rating
        if unit == "V":
            found.append(_Gauge(part, "peak voltage", rating))
        elif unit == "A":
            found.append(_Gauge(part, "rms current", rating))
        elif part.kind == "R":
            found.append(_Gauge(part, "power", rating))
    return found


# ---------------------------------------------------------------------- values


class _Bench:
    """The values of several gauges at any part values."""

    def __init__(self, network: Network, gauges: Sequence[_Gauge]) -> None:
        self.network, self.gauges = network, list(gauges)
        self.metered = {g.part.name for g in gauges if g.quantity == "rms current" and g.part.kind != "R"}
        self.why: dict[int, str] = {}

    def at(self, values: Mapping[str, float] | None = None) -> Float:
        """Each gauge's value, (gauges,), nan where it could not be had; `why` then says what is lacking."""
        network = self.network.with_values(values) if values else self.network
        found = np.full(len(self.gauges), np.nan)
        self.why = {}
        plain = [k for k, gauge in enumerate(self.gauges) if gauge.part.name not in self.metered]
        from .time_measures import ends_of

        self._read(network, plain, [ends_of(network, self.gauges[k].part.name) for k in plain], found)
        rows = [k for k, gauge in enumerate(self.gauges) if gauge.part.name in self.metered]
        if rows:
            names = [self.gauges[k].part.name for k in rows]
            read = {name: _free_node(network, f"ammeter_{name}") for name in names}
            metered = with_ammeters(network, read)
            self._read(metered, rows, [(metered.node_index(read[name]), 0) for name in names], found)
        return found

    def _read(self, network: Network, rows: list[int], pairs: list[tuple[int, int]], found: Float) -> None:
        if not rows:
            return
        try:
            strain = Strain(network, pairs)
            for number, k in enumerate(rows):
                found[k] = self._value(network, self.gauges[k], strain, number)
                why = strain.why or self._unsaid(network, self.gauges[k], strain, number)
                if why:
                    self.why[k] = why
        except RcnetError as exc:
            self.why.update(dict.fromkeys(rows, exc.message))

    def _value(self, network: Network, gauge: _Gauge, strain: Strain, number: int) -> float:
        if gauge.quantity == "peak voltage":
            return strain.peak(number)
        rms = strain.rms(number)
        if gauge.part.kind != "R":
            return rms
        ohms = network.part(gauge.part.name).value
        return rms**2 / ohms if gauge.quantity == "power" else rms / ohms

    def _unsaid(self, network: Network, gauge: _Gauge, strain: Strain, number: int) -> str | None:
        """Why a mean does not settle it: the part is beyond its rating for a while."""
        if gauge.quantity == "peak voltage" or not strain.passing(number):
            return None
        size = strain.passing(number)
        if gauge.part.kind == "R":
            ohms = network.part(gauge.part.name).value
            size = size**2 / ohms if gauge.quantity == "power" else size / ohms
        if size <= gauge.rating:
            return None
        told = format_quantity(size, _UNITS[gauge.quantity])
        return f"a change that happens once has no mean; it goes up to {told} for a while."


def with_ammeters(network: Network, read: Mapping[str, str]) -> Network:
    """The network with an ammeter in series with some two-ended parts, a zero-volt source each.

    read: part -> a new node whose voltage is, in volts, the part's current in amperes
    """
    twin = Network(network.title)
    sources = network.sources
    for part in network.parts:
        if part.name in sources:
            twin.add_source(sources[part.name])
            continue
        if part.name not in read:
            twin.add_part(part)
            continue
        node, (a, b) = read[part.name], part.nodes
        twin.add_part(replace(part, nodes=(a, f"{node}_in")))
        twin.add_source(Source(f"V{node}", (f"{node}_in", b), dc=0.0))
        twin.add_part(Part(f"H{node}", "H", (node, GROUND), 1.0, senses=f"V{node}"))
    return twin


def _free_node(network: Network, name: str) -> str:
    while network.has_node(name):
        name += "_"
    return name


# ---------------------------------------------------------------------- over the tolerances


def _borne(circuit: Circuit, gauges: Sequence[_Gauge]) -> list[Stress]:
    if not gauges:
        return []
    bench = _Bench(circuit.network, gauges)
    nominal = bench.at()
    why = dict(bench.why)
    found = [
        Stress(g.part.name, g.quantity, v, v, v, g.rating, v / g.rating, why=why.get(k))
        for k, (g, v) in enumerate(zip(gauges, nominal.tolist(), strict=True))
        if not math.isnan(v)
    ]
    try:
        box = box_of(circuit.network, circuit.conditions)
    except CircuitError:
        return found
    near = [each for each in found if _may_come_near(circuit.network, each, box)]
    if not near or len(box) > _MOST_TOLERANCES:
        return found
    wide = {(each.part, each.quantity): each for each in _over_corners(circuit, gauges, near, box)}
    return [wide.get((each.part, each.quantity), each) for each in found]


def _may_come_near(network: Network, found: Stress, box: Box) -> bool:
    """True unless the tolerances, all at their worst, leave a part well within its rating.

    In a network of resistors no voltage to ground changes by more than each resistance does, as a share (it
    is (a + b R)/(c + d R) of every R, nothing negative); between two nodes both changes may add up. Twice
    the share is allowed for what capacitors do.
    """
    grown = float(np.prod(np.maximum(box.high, 1 / box.low)))
    part, volts = network.part(found.part), most_volts(network)
    if GROUND in part.nodes or not math.isfinite(volts):
        high = found.value * (grown**3 if found.quantity == "power" else grown**2)
    elif found.quantity == "peak voltage":
        high = found.value + 2 * volts * (grown - 1)
    elif found.quantity == "power":
        high = (math.sqrt(found.value * part.value) + 2 * volts * (grown - 1)) ** 2 / part.value * grown
    elif part.kind == "R":
        high = (found.value + 2 * volts * (grown - 1) / part.value) * grown
    else:
        high = found.value * grown**2
    return high > NEAR * found.rating


def _over_corners(
    circuit: Circuit, gauges: Sequence[_Gauge], near: Sequence[Stress], box: Box
) -> list[Stress]:
    """The least and the greatest value at the corners that each part's own effect points to."""
    wanted = {(each.part, each.quantity): each for each in near}
    kept = [gauge for gauge in gauges if (gauge.part.name, gauge.quantity) in wanted]
    bench, home = _Bench(circuit.network, kept), box.home
    places = np.repeat(home[None], 2 * len(box), axis=0)
    places[range(0, 2 * len(box), 2), range(len(box))] = 0.0
    places[range(1, 2 * len(box), 2), range(len(box))] = 1.0
    ends = np.array([bench.at(box.named(place)) for place in places]).reshape(-1, len(kept))
    moves = ends[1::2] - ends[::2]
    known: dict[bytes, Float] = {}
    widened = []
    for number, gauge in enumerate(kept):
        each = wanted[gauge.part.name, gauge.quantity]
        values, tried = [each.value, *ends[:, number].tolist()], [home, *places]
        for sign in (-1.0, 1.0):
            moved = sign * moves[:, number]
            place = np.where(moved > 0, 1.0, np.where(moved < 0, 0.0, home))
            if place.tobytes() not in known:
                known[place.tobytes()] = bench.at(box.named(place))
            values.append(float(known[place.tobytes()][number]))
            tried.append(place)
        low, high = float(np.nanmin(values)), float(np.nanmax(values))
        if high <= each.rating and len(kept) <= _MOST_CLIMBING and _at_rest(circuit.network):
            high = _climbed(_Bench(circuit.network, [gauge]), box, tried[int(np.nanargmax(values))], high)
        widened.append(replace(each, low=low, high=high, share=high / each.rating, method="corners"))
    return _searched(circuit, widened, box)


def _at_rest(network: Network) -> bool:
    """True if no source has a waveform, so that a value costs no more than one solution."""
    return all(source.waveform is None for source in network.sources.values())


def _climbed(bench: _Bench, box: Box, place: Float, best: float) -> float:
    """The greatest value reached by taking parts to one of their ends, one after another, while that helps.

    A voltage at rest is monotone in each part alone, so its greatest magnitude lies at a corner; where it is
    nearly balanced, the parts' own effects at the nominal values do not tell which.
    """
    place = place.copy()
    for _ in range(_MOST_ROUNDS):
        before = best
        for k in range(len(box)):
            for end in {0.0, 1.0} - {float(place[k])}:
                there = place.copy()
                there[k] = end
                value = float(bench.at(box.named(there))[0])
                if value > best:
                    best, place = value, there
        if best <= before:
            break
    return best


def _searched(circuit: Circuit, found: Sequence[Stress], box: Box) -> list[Stress]:
    """The same, those just below their rating once more by the search that measures' bounds are found by."""
    left = _MOST_SEARCHED if len(box) <= _MOST_SEARCHED_TOLERANCES else 0
    surer = []
    for each in found:
        if left and _SEARCHED <= each.share <= 1 and _is_a_measure(circuit.network, each):
            left -= 1
            surer.append(_bounded(circuit, each))
        else:
            surer.append(each)
    return surer


def _is_a_measure(network: Network, found: Stress) -> bool:
    """True where the measure of that name means the same state: one without a dc value of its own."""
    two_states = any(s.dc is not None and s.waveform is not None for s in network.sources.values())
    return found.quantity != "rms current" and not two_states and not once(network)


def _bounded(circuit: Circuit, found: Stress) -> Stress:
    from .tolerance import bounds  # a search, which most circuits never need

    name = "dissipation" if found.quantity == "power" else "peak_voltage"
    try:
        sure = bounds(circuit, (name, None, {"part": found.part}))
    except (UndecidedError, CircuitError):
        return found
    high = max(found.high, sure.high)
    method: Method = sure.method
    return replace(found, low=min(found.low, sure.low), high=high, share=high / found.rating, method=method)


# ---------------------------------------------------------------------- what is told

_HOW: dict[Method, str] = {
    "nominal": "",
    "corners": "at the worst corner of the tolerances",
    "proven": "at the worst over the tolerances",
    "searched": "at the worst found over the tolerances",
}


def _remark(circuit: Circuit, found: Stress) -> Seen:
    unit, over = _UNITS[found.quantity], found.share > 1 + _ROUNDING
    nominal, high, rated = (format_quantity(v, unit) for v in (found.value, found.high, found.rating))
    where = "at the nominal values"
    if found.high > found.value:
        where = f"{_HOW[found.method]} ({nominal} {where})"
    against = "more than" if over else f"{100 * found.share:.3g} % of"
    remedy = "Take a part rated for more, or let it bear less."
    if not over:
        remedy += " Close to its rating a part runs hot and ages sooner."
    return Seen(
        "over-rating" if over else "near-rating",
        f"{found.part} {_VERBS[found.quantity]} {high} {where}, {against} the {rated} it is rated for.",
        remedy,
        circuit.place_of(found.part).at(found.part),
        "error" if over else "warning",
    )


__all__ = ["MOST_PARTS", "NEAR", "Stress", "rating_findings", "stress", "with_ammeters"]
