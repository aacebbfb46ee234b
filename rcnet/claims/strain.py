"""The voltages a circuit's sources put between pairs of nodes: greatest, and in the mean square."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from .. import exact  # its rooms load when they are used: most circuits need none of them here
from ..circuit import Exponential, Network, Points, Sine, Source, Step, Waveform
from ..errors import RcnetError, UndecidedError

if TYPE_CHECKING:
    from ..exact import Periodic

Float = npt.NDArray[np.float64]
Pair = tuple[int, int]

_OVERSHOOT = 1.5
_DRIFT = 1.1  # what temperature does to a resistance at most
_MOST_TIMES = 20_000
_PER_EVENT = (16, 400)  # times looked at after a corner: at least, at most
_GONE = 40.0  # time constants
_ZOOMS = 3
_ZOOMED = 33
_TOGETHER = 40  # pairs followed at once


class Strain:
    """What the sources of a network put across pairs of nodes, in every state it is in for long.

    The states: before t = 0, every source at its dc value (or its waveform's first); then, where a source
    repeats, the periodic steady state; else, where one changes once, the change and the rest after it.
    why: the reason why one of these could not be had, else None. Raises UndecidedError where none could.
    """

    def __init__(self, network: Network, pairs: Sequence[Pair]) -> None:
        self.network, self.pairs = network, list(pairs)
        self.why: str | None = None
        self.rests: list[Float] = []
        self.periodic: list[Periodic] | None = None
        for state in (self._before, self._after):
            try:
                state()
            except RcnetError as exc:
                self.why = exc.message
        if not self.rests and self.periodic is None:
            raise UndecidedError(self.why or "nothing drives the network.")

    def _before(self) -> None:
        if any(source.operating_value for source in self.network.sources.values()):
            volts = np.array([0.0, *exact.operating_point(self.network).values()])
            self.rests.append(np.array([volts[a] - volts[b] for a, b in self.pairs]))
        else:
            self.rests.append(np.zeros(len(self.pairs)))

    def _after(self) -> None:
        from ..exact.periodic import periodic_pairs, repeats, settled_values

        if repeats(self.network):
            self.periodic = periodic_pairs(self.network, self.pairs)
        elif once(self.network):
            self.rests.append(settled_values(self.network, self.pairs))
            self._event = _extremes(self.network, self.pairs)

    _event: Float | None = None

    def rms(self, k: int) -> float:
        """The greatest root mean square in any state that lasts, V; a change that happens once has none."""
        own = [abs(float(rest[k])) for rest in self.rests]
        return max([*own, self.periodic[k].rms] if self.periodic is not None else own)

    def peak(self, k: int) -> float:
        """The greatest magnitude at any moment, V."""
        own = [abs(float(rest[k])) for rest in self.rests]
        if self._event is not None:
            own.append(float(self._event[k]))
        return max([*own, self.periodic[k].peak] if self.periodic is not None else own)

    def passing(self, k: int) -> float:
        """The greatest magnitude while a change that happens once lasts, V; 0 where there is none."""
        return float(self._event[k]) if self._event is not None else 0.0

    def alternating(self, k: int) -> float:
        """The rms of what varies in the periodic steady state, V."""
        return math.sqrt(self.periodic[k].alternating_square) if self.periodic is not None else 0.0

    def mean(self, k: int) -> float:
        """The mean of the periodic steady state, V, or what the network rests at in the end."""
        return float(self.periodic[k].mean if self.periodic is not None else self.rests[-1][k])


def driven(network: Network) -> bool:
    """True if some source gives anything other than an ac signal."""
    return any(s.waveform is not None or s.dc for s in network.sources.values())


def once(network: Network) -> bool:
    """True if some source changes and does not repeat."""
    return any(s.waveform is not None and s.waveform.repeats is None for s in network.sources.values())


# ---------------------------------------------------------------------- a bound that costs nothing


def most_volts(network: Network) -> float:
    """A voltage that nothing in a network of R, C, V and I comes to exceed, also over its tolerances.

    At rest no node lies outside the range of the voltage sources and ground, whatever the resistances (the
    discrete maximum principle); a current source adds at most its current times the resistance it sees,
    which grows no more than the resistor that grows most. Under waveforms capacitors may lift a node
    further: an RC network can overshoot, though by less than the half that is allowed here. Infinite for
    other networks, and where a current has nowhere to flow at dc.
    """
    if set(network.arrays().kinds.tolist()) - {*b"RCVI"}:
        return math.inf
    wide = [part.tolerance.high for part in network.parts if part.kind == "R" and part.tolerance]
    total, grown = 0.0, _DRIFT * (1 + max(wide, default=0.0))
    for source in network.sources.values():
        low, high = range_of(source)
        if source.kind == "V":
            total += max(high, 0.0) - min(low, 0.0)
        elif low or high:
            nodes = (network.node_index(source.nodes[0]), network.node_index(source.nodes[1]))
            try:
                seen = abs(complex(exact.output_impedance(network, np.zeros(1), nodes)[0]))
            except RcnetError:
                return math.inf
            total += grown * max(abs(low), abs(high)) * seen
    moving = any(source.waveform is not None for source in network.sources.values())
    return _OVERSHOOT * total if moving else total


def range_of(source: Source) -> tuple[float, float]:
    """The least and the greatest value a source gives, dc and waveform, V or A."""
    low, high = _wave_range(source.waveform) if source.waveform is not None else (0.0, 0.0)
    if source.dc is not None:
        return (
            (min(low, source.dc), max(high, source.dc))
            if source.waveform is not None
            else (source.dc, source.dc)
        )
    return low, high


def _wave_range(wave: Waveform) -> tuple[float, float]:
    if isinstance(wave, Sine):
        return wave.offset - abs(wave.amplitude), wave.offset + abs(wave.amplitude)
    if isinstance(wave, Points):
        values = [value for _, value in wave.values]
        return min(values), max(values)
    ends = (wave.initial, wave.final) if isinstance(wave, (Step, Exponential)) else (wave.low, wave.high)
    return min(ends), max(ends)


# ---------------------------------------------------------------------- changes that happen once


def _extremes(network: Network, pairs: Sequence[Pair]) -> Float:
    """The greatest magnitudes of voltages under sources that change once, (pairs,)."""
    names, times = network.nodes, _times(network)
    texts = [f"{names[a]} {names[b]}" for a, b in pairs]
    found = [_highest(network, texts[k : k + _TOGETHER], times) for k in range(0, len(texts), _TOGETHER)]
    return np.concatenate(found) if found else np.zeros(0)


def _highest(network: Network, texts: list[str], times: Float) -> Float:
    size = np.abs(exact.transient(network, times, texts))
    best, places, last = size.max(axis=1), size.argmax(axis=1), len(times) - 1
    low, high = times[np.maximum(places - 1, 0)], times[np.minimum(places + 1, last)]
    rows, shares = np.arange(len(texts)), np.linspace(0, 1, _ZOOMED)
    for _ in range(_ZOOMS):  # each pair's own surroundings, all of them at once
        near = low[:, None] + (high - low)[:, None] * shares
        every = np.abs(exact.transient(network, near.ravel(), texts)).reshape(len(texts), *near.shape)
        size = every[rows, rows]
        best, places = np.maximum(best, size.max(axis=1)), size.argmax(axis=1)
        low, high = near[rows, np.maximum(places - 1, 0)], near[rows, np.minimum(places + 1, _ZOOMED - 1)]
    return np.asarray(best)


def _times(network: Network) -> Float:
    """Times at which voltages are looked at: dense after every corner, and just before each."""
    corners = sorted({time for wave in _once(network) for time in _corners(wave) if math.isfinite(time)})
    span = exact.span_of(network)
    each = min(max(_MOST_TIMES // max(len(corners), 1), _PER_EVENT[0]), _PER_EVENT[1])
    after = np.geomspace(1e-3 / span.high, _GONE / span.low, each)
    ringing = [p for p in exact.natural_frequencies(network) if p.real < 0 and abs(p.imag) > 0.02 * abs(p)]
    swings = [np.arange(1, 1 + min(each, 24 * 20)) * (2 * math.pi / (24 * abs(p.imag))) for p in ringing[:8]]
    found = [np.zeros(1)]
    for corner, following in zip(corners, [*corners[1:], math.inf], strict=True):
        own = corner + np.concatenate([np.zeros(1), after, *swings])
        found.append(own[own < following])
        found.append(np.array([corner * (1 - 1e-9)]))
    found.extend(_turns(wave) for wave in _once(network) if isinstance(wave, Sine))
    return np.unique(np.concatenate(found))


def _once(network: Network) -> list[Waveform]:
    waves = [source.waveform for source in network.sources.values()]
    return [wave for wave in waves if wave is not None and wave.repeats is None]


def _corners(wave: Waveform) -> list[float]:
    if isinstance(wave, Step):
        return [wave.at, wave.at + wave.rise]
    if isinstance(wave, Exponential):
        ends = [wave.rise_delay, wave.rise_delay + wave.rise_time_constant]
        return [*ends, wave.fall_delay, wave.fall_delay + wave.fall_time_constant] if wave.falls else ends
    if isinstance(wave, Points):
        every = -(-len(wave.values) // (_MOST_TIMES // _PER_EVENT[0]))
        return [time for time, _ in wave.values[::every]]
    return [wave.delay]


def _turns(wave: Sine) -> Float:
    """Times over a damped sine's turns, until it has died away or swung a hundred times."""
    turns = min(_GONE * wave.frequency / wave.damping, 100.0) if wave.damping else 100.0
    count = math.ceil(32 * turns)
    return wave.delay + np.arange(1, count + 1) / (32 * wave.frequency)


__all__ = ["Strain", "driven", "most_volts", "once", "range_of"]
