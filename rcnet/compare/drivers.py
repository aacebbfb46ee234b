"""What drives a network over time, wave by wave, and how each mode lags behind it.

With the response at rest, H(0) u, a mode with the pole p contributes (residue / -p) e, where e' = p e - u'.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Exponential, Network, Sine, Step, Waveform
from ..exact.modes import Driver
from ..exact.pieces import Pieces, followed, pieces_of
from ..exact.rest import FromRest, Impulse
from ..exact.swings import Swing, swings_of
from ..exact.transient import driving, starting_value
from .records import Float, Numbers

Flags = npt.NDArray[np.bool_]

_RESONANT = 1e-5  # times by rates closer than this: the difference of the exponentials has lost its digits
_CORNER = 1e-12  # relative: a time this near a corner is the corner


@dataclass(frozen=True)
class Wave:
    """One waveform from t = 0 on.

    start: the value before t = 0; pieces: straight lines, or None where it swings; swings: what is then added
    """

    start: float
    pieces: Pieces | None
    swings: tuple[Swing, ...] = ()

    def value(self, time: Float) -> Float:
        """The waveform at times (times,)."""
        if self.pieces is not None:
            return self.pieces.value(time)
        total = np.full(len(time), self.start)
        for swing in self.swings:
            going = time >= swing.begin
            total[going] += swing.moved(time[going] - swing.begin)
        return total

    def slope(self, time: Float) -> Float:
        """Its rate of change, just after a corner, (times,)."""
        if self.pieces is not None:
            _, piece, _ = self.pieces.located(np.maximum(time, self.pieces.begin))
            return np.where(time < self.pieces.begin, 0.0, self.pieces.slopes[piece])
        total = np.zeros(len(time))
        for swing in self.swings:
            going = time >= swing.begin
            total[going] += np.real(swing.amplitude * swing.rate * swing.turned(time[going] - swing.begin))
        return total

    def corners(self, stop: float, most: int) -> Float:
        """The times of its corners up to `stop`, rising; the first `most` of them."""
        if self.pieces is None:
            found = np.array([swing.begin for swing in self.swings])
            return found[found <= stop]
        pieces = self.pieces
        if pieces.period is None:
            found = pieces.begin + pieces.corners
        else:
            turns = max(0, min(math.floor((stop - pieces.begin) / pieces.period), most)) + 1
            found = (pieces.begin + pieces.period * np.arange(turns)[:, None] + pieces.corners[None]).ravel()
        return np.asarray(found[found <= stop][:most])

    def from_corner(self, time: Float) -> Float:
        """How far each time is from the nearest corner, s, (times,); inf where there is none."""
        if self.pieces is None:
            marks = np.array([swing.begin for swing in self.swings])
            return np.asarray(np.abs(time[:, None] - marks).min(axis=1, initial=np.inf), dtype=np.float64)
        pieces = self.pieces
        since, marks = time - pieces.begin, pieces.corners
        if pieces.period is not None:
            since = np.where(since < 0, since, np.fmod(since, pieces.period))
            marks = np.append(marks, pieces.period)
        right = np.clip(np.searchsorted(marks, since), 0, len(marks) - 1)
        return np.minimum(np.abs(marks[right] - since), np.abs(marks[np.maximum(right - 1, 0)] - since))

    def at_corner(self, time: Float) -> Flags:
        """True where a time is a corner as near as doubles tell, (times,)."""
        return np.asarray(self.from_corner(time) <= _CORNER * time)

    def lags(self, time: Float, poles: Numbers) -> Numbers:
        """The e of each mode, (times, poles); poles at zero have no place here."""
        lag = np.zeros((len(time), len(poles)), dtype=poles.dtype)
        if self.pieces is not None:
            going = time >= self.pieces.begin
            if going.any():
                lag[going] = followed(self.pieces, poles).at(*self.pieces.located(time[going]))
            return lag
        for swing in self.swings:
            going = time >= swing.begin
            lag[going] -= _swung(swing, time[going] - swing.begin, poles)
        return lag


def _swung(swing: Swing, since: Float, poles: Numbers) -> Numbers:
    """The integral of exp(p (t - s)) u'(s) under a swing u, (times, poles)."""
    turned = swing.turned(since)
    terms = swing.amplitude * swing.rate * _difference(swing.rate, turned, poles, since)
    if swing.frequency or swing.amplitude.imag:
        other = _difference(swing.rate.conjugate(), np.conj(turned), poles, since)
        terms = (terms + swing.amplitude.conjugate() * swing.rate.conjugate() * other) / 2
    return np.asarray(terms if np.iscomplexobj(poles) else terms.real)


def _difference(rate: complex, turned: Numbers, poles: Numbers, since: Float) -> Numbers:
    """(exp(rate t) - exp(p t)) / (rate - p); its series where the two are nearly equal."""
    apart = rate - poles
    near = np.abs(np.outer(since, apart)) < _RESONANT
    left = np.exp(np.outer(since, poles))
    far = (turned[:, None] - left) / np.where(apart == 0, 1.0, apart)
    return np.asarray(np.where(near, since[:, None] * left * (1 + np.outer(since, apart) / 2), far))


@dataclass(frozen=True)
class Driven:
    """A source, or several that do the same at once, and its wave; None is an impulse at t = 0.

    A source that stays as it is has a wave without pieces and swings.
    """

    driver: Driver
    wave: Wave | None


def drivers_of(network: Network) -> list[Driven]:
    """What drives a network from t = 0 on; steps from nothing that happen at once, and impulses, as one.

    The network may be one that `rcnet.exact.started` made.
    """
    driven: list[Driven] = []
    alike: dict[Step | None, list[tuple[str, float]]] = {}
    for name in driving(network):
        source = network.sources[name]
        wave: Any = source.waveform
        if isinstance(wave, FromRest):
            if wave.first:
                alike.setdefault(Step(0.0, 1.0), []).append((name, wave.first))
            wave = wave.risen
        if wave is None:
            driven.append(Driven(name, Wave(starting_value(source), None)))
        elif isinstance(wave, Impulse):
            alike.setdefault(None, []).append((name, wave.charge))
        elif isinstance(wave, Step) and wave.initial == 0:
            alike.setdefault(replace(wave, final=1.0), []).append((name, wave.final))
        else:
            start = 0.0 if isinstance(source.waveform, FromRest) else starting_value(source)
            driven.append(Driven(name, wave_of(wave, start)))
    for step, members in alike.items():
        driven.append(Driven(tuple(members), None if step is None else wave_of(step, 0.0)))
    return driven


def wave_of(wave: Waveform, start: float) -> Wave:
    """A waveform that has been `start` for ever before t = 0."""
    if isinstance(wave, (Sine, Exponential)):
        return Wave(start, None, tuple(swings_of(wave)))
    return Wave(start, pieces_of(wave))


def waves(driven: Sequence[Driven]) -> list[Wave]:
    """The waves among what drives, impulses left out."""
    return [each.wave for each in driven if each.wave is not None]
