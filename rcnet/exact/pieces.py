"""Waveforms as straight pieces between corners, and what a mode does under them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Points, Square, Step

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]  # float64 where every pole is real, else complex128
Indices = npt.NDArray[np.int64]

_SNAP = 4 * np.finfo(float).eps  # a time this close below a corner, relatively, means the corner


@dataclass(frozen=True)
class Pieces:
    """Straight pieces: from `corners[i]` on the value is levels[i] + slopes[i] (t - corners[i]).

    begin: s, when the first turn begins; the value is `start` until then
    corners: s from the turn's beginning, rising from 0, (pieces,); levels, slopes: (pieces,)
    period: s, or None where the last piece lasts for ever (its slope is then zero)
    """

    begin: float
    start: float
    corners: Float
    levels: Float
    slopes: Float
    period: float | None

    @property
    def lengths(self) -> Float:
        """How long each piece lasts, s; the last one of a single turn for ever."""
        end = math.inf if self.period is None else self.period
        return np.diff(np.append(self.corners, end))

    @property
    def ends(self) -> Float:
        """The value at the end of each piece."""
        steady = self.slopes == 0
        return self.levels + np.where(steady, 0.0, self.slopes * np.where(steady, 0.0, self.lengths))

    @property
    def mean(self) -> float:
        """The mean over a period; the last value where there is none."""
        if self.period is None:
            return float(self.levels[-1])
        return float((self.lengths * (self.levels + self.ends)).sum() / 2 / self.period)

    def located(self, time: Float) -> tuple[Indices, Indices, Float]:
        """(turn, piece, seconds since the piece's corner) at times from `begin` on."""
        since = time - self.begin
        slack = _SNAP * np.abs(time)
        if self.period is None:
            turn = np.zeros(len(time), dtype=np.int64)
            phase = since
        else:
            phase = np.fmod(since, self.period)  # fmod commits no rounding error
            phase = np.where(self.period - phase <= slack, 0.0, phase)
            turn = np.rint((since - phase) / self.period).astype(np.int64)
        piece = np.searchsorted(self.corners, phase + slack, side="right") - 1
        return turn, piece, np.maximum(phase - self.corners[piece], 0.0)

    def value(self, time: Float) -> Float:
        """The waveform at times (times,); just after a vertical edge."""
        _, piece, since = self.located(np.maximum(time, self.begin))
        return np.where(time < self.begin, self.start, self.value_in(piece, since))

    def value_in(self, piece: Indices, since: Float) -> Float:
        """The waveform `since` seconds after corners."""
        return np.asarray(self.levels[piece] + self.slopes[piece] * since)


def pieces_of(wave: Square | Step | Points) -> Pieces:
    """The straight pieces of a waveform."""
    if isinstance(wave, Square):
        return _square(wave)
    if isinstance(wave, Step):
        return _step(wave)
    return _points(wave)


def _made(begin: float, start: float, rows: list[tuple[float, float, float]], period: float | None) -> Pieces:
    """Pieces from (corner, level, slope) rows; a piece that lasts no time is left out."""
    kept = [
        row
        for row, after in zip(rows, [*rows[1:], (period or math.inf, 0.0, 0.0)], strict=True)
        if after[0] > row[0]
    ]
    corners, levels, slopes = np.array(kept, dtype=np.float64).T
    return Pieces(begin, start, corners, levels, slopes, period)


def _square(wave: Square) -> Pieces:
    low, high = wave.low, wave.high
    top = wave.rise
    fall = min(top + wave.width, wave.period)
    rest = min(fall + wave.fall, wave.period)
    rows = []
    if wave.rise > 0:
        rows.append((0.0, low, (high - low) / wave.rise))
    rows.append((top, high, 0.0))
    if wave.fall > 0:
        rows.append((fall, high, (low - high) / wave.fall))
    rows.append((rest, low, 0.0))
    return _made(wave.delay, low, rows, wave.period)


def _step(wave: Step) -> Pieces:
    if wave.rise > 0:
        rows = [(0.0, wave.initial, (wave.final - wave.initial) / wave.rise), (wave.rise, wave.final, 0.0)]
    else:
        rows = [(0.0, wave.final, 0.0)]
    return _made(wave.at, wave.initial, rows, None)


def _points(wave: Points) -> Pieces:
    pairs = list(wave.values)
    if wave.period is None:
        begin = pairs[0][0]
        pairs.append((math.inf, pairs[-1][1]))
    else:
        begin = 0.0
        if pairs[0][0] > 0:
            pairs.insert(0, (0.0, wave.start))
        if pairs[-1][0] < wave.period:
            pairs.append((wave.period, wave.start))
    rows = [
        (t0 - begin, v0, 0.0 if math.isinf(t1) else (v1 - v0) / (t1 - t0))
        for (t0, v0), (t1, v1) in pairwise(pairs)
    ]
    return _made(begin, wave.start, rows, wave.period)


# ---------------------------------------------------------------------- modes under pieces


@dataclass(frozen=True)
class Followed:
    """How far each term lags under pieces: e' = p e - u', which is zero at rest.

    With the response at rest, H(0) u, a term contributes (residue / -p) e. Poles at exactly zero are left
    out.

    first: (terms,), e just after the beginning of the first turn
    begun: (pieces, terms), e just after each corner if it was zero at the turn's beginning
    gained: (terms,), what a turn that began at zero adds until just after the next one's beginning
    """

    pieces: Pieces
    poles: Numbers
    first: Numbers
    begun: Numbers
    gained: Numbers

    def at(self, turn: Indices, piece: Indices, since: Float) -> Numbers:
        """E `since` seconds after corners, as `Pieces.located` has it: (times, terms)."""
        first, last = (int(turn.min()), int(turn.max())) if len(turn) else (0, 0)
        if last - first < len(turn):  # a turn seldom holds one time only
            turned = self.turned(np.arange(first, last + 1))[turn - first]
        else:
            turned = self.turned(turn)
        return self.in_piece(turned, piece, since)

    def turned(self, turn: Indices) -> Numbers:
        """E just after the beginning of each turn, (turns, terms), as a geometric sum."""
        if self.pieces.period is None:
            return np.broadcast_to(self.first, (len(turn), len(self.poles)))
        once = self.poles * self.pieces.period
        many = turn[:, None] * once
        growth = np.expm1(once)
        with np.errstate(all="ignore"):
            sums = np.where(growth == 0, turn[:, None], np.expm1(many) / np.where(growth == 0, 1.0, growth))
        return np.asarray(np.exp(many) * self.first + sums * self.gained)

    def settled(self) -> Numbers:
        """E just after the beginning of a turn once every turn is like the last, (terms,)."""
        assert self.pieces.period is not None
        growth = np.expm1(self.poles * self.pieces.period)
        moving = growth != 0
        return np.asarray(np.where(moving, self.gained / np.where(moving, -growth, 1.0), 0.0))

    def in_piece(self, turned: Numbers, piece: Indices, since: Float) -> Numbers:
        """E at `since` seconds after corners, given e at the turn's beginning: (times, terms)."""
        # A piece seldom holds one time only: what has died away by its corner is computed once.
        before = np.exp(np.outer(self.pieces.corners, self.poles))[piece] * turned + self.begun[piece]
        grown = np.outer(since, self.poles)
        lag = np.exp(grown) * before
        slopes = self.pieces.slopes[piece]
        sloped = np.flatnonzero(slopes)
        if len(sloped):
            lag[sloped] -= slopes[sloped, None] * _ramp(grown[sloped], self.poles, since[sloped])
        return np.asarray(lag)


def _ramp(grown: Numbers, poles: Numbers, since: Float) -> Numbers:
    """The integral of exp(p t) from 0 to h, (exp(p h) - 1) / p, h where p is zero."""
    moving = poles != 0
    return np.asarray(np.where(moving, np.expm1(grown) / np.where(moving, poles, 1.0), since[:, None]))


def followed(pieces: Pieces, poles: Numbers) -> Followed:
    """Follow every term through one turn."""
    count = len(pieces.corners)
    begun = np.zeros((count, len(poles)), dtype=poles.dtype)
    lengths, ends = pieces.lengths, pieces.ends
    for k in range(count - 1):
        begun[k + 1] = _over(begun[k], poles, lengths[k], pieces.slopes[k]) - (pieces.levels[k + 1] - ends[k])
    gained = np.zeros(len(poles), dtype=poles.dtype)
    if pieces.period is not None:
        gained = _over(begun[-1], poles, lengths[-1], pieces.slopes[-1]) - (pieces.levels[0] - ends[-1])
    first = np.full(len(poles), pieces.start - pieces.levels[0], dtype=poles.dtype)
    return Followed(pieces, poles, first, begun, np.asarray(gained))


def _over(start: Numbers, poles: Numbers, length: float, slope: float) -> Numbers:
    grown = poles * length
    kept = np.exp(grown) * start
    return np.asarray(kept - slope * _ramp(grown[None], poles, np.array([length]))[0] if slope else kept)
