"""The search for ladders: complete as far as it goes, and able to say how far that is."""

from __future__ import annotations

import math
import os
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field, replace
from typing import Protocol

import numpy as np
import numpy.typing as npt

from .stock import Stock

Float = npt.NDArray[np.float64]

_BLOCK = 400_000  # pairs of tuples at a time, to bound the memory taken
_AT_ONCE = 1e6  # pairs: a search of no more is not cut into levels
_FIRST, _GROWTH = 2e5, 4  # pairs in the first level, and how much more each next one holds
_MOST = 2e7  # pairs in the last one
_ROW = 20  # pairs that take the time, and the memory, of one tuple
_STEP = 1.1  # from one spread that is considered to the next; about a step of E24
_KEPT = 8  # times as many candidates as are asked for, to be held against the exact engine
_PIECES = 50
_DIGITS = 9
_CLOSE = 1e-9


class Question(Protocol):
    """What is asked of a ladder.

    sums: limits of the sum of modes, weights(r) . columns(c), outside of which the target cannot be met;
    rising: whether it grows with the last resistor, or falls
    enough: the margin beyond which more is not better; cost: of a margin, in those of a cutoff's
    """

    @property
    def sections(self) -> int:
        """How many."""

    @property
    def resistors(self) -> Stock:
        """The values to choose from."""

    @property
    def capacitors(self) -> Stock:
        """The values to choose from."""

    @property
    def sums(self) -> tuple[float, float]:
        """The least and the greatest sum of modes."""

    @property
    def rising(self) -> bool:
        """Whether that sum grows with the last resistor."""

    @property
    def enough(self) -> float:
        """The margin that counts."""

    @property
    def cost(self) -> float:
        """The work of a margin."""

    def weights(self, r: Float) -> Float:
        """What each capacitor counts in the sum of modes, (ladders, sections)."""

    def columns(self, c: Float) -> Float:
        """What the weights are multiplied with, (ladders, sections)."""

    def span(self, r: Float, c: Float) -> tuple[Float, Float]:
        """The least and the greatest last resistor with which the target may be met, ohm, (ladders,)."""

    def margins(self, r: Float, c: Float) -> Float:
        """How far, as the logarithm of a factor, the tightest claim is met at the worst of tolerances."""

    def noise(self, r: Float, c: Float) -> Float:
        """What falls with the thermal noise at the output."""


@dataclass(frozen=True)
class Hits:
    """Ladders that meet a target, the best first: values (ladders, sections), margin and rank keys."""

    r: Float
    c: Float
    margin: Float
    keys: Float  # (ladders, 4), each smaller for the better

    def __len__(self) -> int:
        return len(self.r)

    def best(self, count: int) -> Hits:
        """The first ones in order of rank."""
        order = np.lexsort(self.keys.T[::-1])[:count]
        return Hits(self.r[order], self.c[order], self.margin[order], self.keys[order])

    @classmethod
    def joined(cls, pieces: list[Hits]) -> Hits:
        """All of several, each ladder once."""
        r, c, margin, keys = (
            np.concatenate([getattr(piece, name) for piece in pieces])
            for name in ("r", "c", "margin", "keys")
        )
        _, first = np.unique(np.concatenate([r, c], axis=1), axis=0, return_index=True)
        return cls(r[first], c[first], margin[first], keys[first])


@dataclass(frozen=True)
class Tally:
    """How many combinations there are, and what came of them.

    combinations: in all; within: those whose values spread by no more than `spread`
    by_sum: of those, excluded by the bounds of the sum of modes; by_span: by the span of the last resistor
    computed: whose margin was computed; met: that meet the target; solved: spans worked out
    complete: nothing that was left out can rank higher; tapers: how many
    were looked at besides, with impedance that rises from section to section
    """

    combinations: int
    within: int = 0
    spread: float = math.inf
    by_sum: int = 0
    by_span: int = 0
    computed: int = 0
    met: int = 0
    solved: int = 0
    complete: bool = True
    tapers: int = 0
    tapers_met: int = 0


@dataclass
class _Counts:
    by_sum: int = 0
    by_span: int = 0
    computed: int = 0
    met: int = 0
    solved: int = 0
    pieces: list[Hits] = field(default_factory=list)

    def add(self, other: _Counts, most: int) -> None:
        """Count another block's too, and keep no more of both than the best `most`."""
        self.by_sum += other.by_sum
        self.by_span += other.by_span
        self.computed += other.computed
        self.met += other.met
        self.solved += other.solved
        self.pieces += other.pieces
        if len(self.pieces) > _PIECES:
            self.pieces = [Hits.joined(self.pieces).best(most)]


def search(question: Question, keep: int) -> tuple[Hits, Tally]:
    """The ladders that meet a target best, at most 8 keep of them, and how far the search went.

    Ranked by margin (beyond `enough` all are alike), spread of values, noise. Combinations are taken in the
    order of their spread, and the search ends as soon as `keep` have margin enough: what is left spreads
    wider. Where there are too many for that it goes on along tapers.
    """
    n, resistors, capacitors = question.sections, question.resistors, question.capacitors
    total = len(resistors) ** n * len(capacitors) ** n
    hits, tally = _none(n), Tally(total)
    for spread in _levels(question):
        if not math.isfinite(spread):
            break
        counts = _covered(question, resistors.rows(n - 1, spread), capacitors.rows(n, spread), spread, keep)
        hits = Hits.joined([hits, *counts.pieces]).best(_KEPT * keep)
        full = spread >= max(resistors.range, capacitors.range)
        within = total if full else resistors.count(n, spread) * capacitors.count(n, spread)
        tally = _told(counts, Tally(total, within, math.inf if full else spread))
        if full or _enough(hits, question) >= keep:
            return hits, tally
    more = _tapers(question, keep)
    hits = Hits.joined([hits, *more.pieces]).best(_KEPT * keep)
    # What came of the tapers is told apart, so that the numbers within the spread add up.
    return hits, replace(
        tally, complete=False, tapers=more.by_sum + more.by_span + more.computed, tapers_met=more.met
    )


def _told(counts: _Counts, tally: Tally) -> Tally:
    return replace(
        tally,
        by_sum=counts.by_sum,
        by_span=counts.by_span,
        computed=counts.computed,
        met=counts.met,
        solved=counts.solved,
    )


def _none(sections: int) -> Hits:
    empty = np.empty((0, sections))
    return Hits(empty, empty, np.empty(0), np.empty((0, 4)))


def _enough(hits: Hits, question: Question) -> int:
    return int((hits.margin >= question.enough).sum())


def _pairs(question: Question, spread: float) -> float:
    """The work of a level, in pairs of tuples."""
    n = question.sections
    rows = question.resistors.count(n - 1, spread), question.capacitors.count(n, spread)
    return question.cost * (rows[0] * rows[1] + _ROW * sum(rows))


def _levels(question: Question) -> Iterator[float]:
    """Spreads to search within, rising; infinity where the next one would hold too many pairs."""
    full = max(question.resistors.range, question.capacitors.range)
    if _pairs(question, full) <= _AT_ONCE:
        yield full
        return
    spread, done, pairs = 1.0, 0.0, _pairs(question, 1.0)
    while spread < full:
        wider = min(spread * _STEP, full)
        upcoming = _pairs(question, wider)
        if pairs >= max(_FIRST, _GROWTH * done) or upcoming > _MOST:
            yield spread
            done = pairs
        if upcoming > _MOST:
            yield math.inf
            return
        spread, pairs = wider, upcoming
    yield full


def _tapers(question: Question, keep: int) -> _Counts:
    """Ladders whose impedance rises from section to section by one ratio of resistors, one of capacitors."""
    n = question.sections
    for steps in (36, 24, 12, 6, 3):
        ratios = 10 ** (np.arange(steps + 1) * 3 / steps)
        r = question.resistors.tapers(n - 1, ratios)
        c = question.capacitors.tapers(n, 1 / ratios)
        if question.cost * len(r) * len(c) <= _MOST:
            break
    return _covered(question, r, c, math.inf, keep)


def _covered(question: Question, r: Float, c: Float, spread: float, keep: int) -> _Counts:
    """Every pair of resistors but the last, a row of r, with capacitors, a row of c; all last resistors."""
    stock = question.resistors.values
    first = np.full(len(r), stock[0]) if not r.shape[1] else r.max(axis=1) / spread * (1 - _CLOSE)
    last = np.full(len(r), stock[-1]) if not r.shape[1] else r.min(axis=1) * spread * (1 + _CLOSE)
    low = np.searchsorted(stock, first, side="left")
    high = np.searchsorted(stock, last, side="right") - 1  # the last one that is still allowed
    weights = [question.weights(np.concatenate([r, stock[each][:, None]], axis=1)) for each in (low, high)]
    if not question.rising:
        weights.reverse()
    columns = np.ascontiguousarray(question.columns(c).T)
    wide = max(1, min(len(c), _BLOCK))
    tall = max(1, _BLOCK // wide)
    blocks = [(i, j) for i in range(0, len(r), tall) for j in range(0, len(c), wide)]

    def work(block: tuple[int, int]) -> _Counts:
        rows, cols = slice(block[0], block[0] + tall), slice(block[1], block[1] + wide)
        least, most = weights[0][rows] @ columns[:, cols], weights[1][rows] @ columns[:, cols]
        possible = (least <= question.sums[1] * (1 + _CLOSE)) & (most >= question.sums[0] * (1 - _CLOSE))
        at_r, at_c = np.nonzero(possible)
        choices = high[rows] - low[rows] + 1
        solved = int(choices[at_r].sum())
        counts = _Counts(by_sum=int(choices.sum()) * least.shape[1] - solved, solved=len(at_r))
        # Numbers beyond a double's meet no target; threads do not inherit how numpy takes them.
        with np.errstate(all="ignore"):
            window = low[rows][at_r], high[rows][at_r]
            _solve(question, r[rows][at_r], c[cols][at_c], window, keep, counts)
        counts.by_span = solved - counts.computed
        return counts

    total = _Counts()
    pool = ThreadPoolExecutor(min(4, os.cpu_count() or 1))
    try:
        for done in pool.map(work, blocks):
            total.add(done, _KEPT * keep)
    finally:
        pool.shutdown(cancel_futures=True)  # whoever interrupts the search does not wait for the rest of it
    return total


def _solve(
    question: Question,
    r: Float,
    c: Float,
    window: tuple[npt.NDArray[np.intp], npt.NDArray[np.intp]],
    keep: int,
    counts: _Counts,
) -> None:
    """For each row the last resistors in stock with which the target may be met, and what they make of it."""
    if not len(c):
        return
    stock = question.resistors.values
    least, most = question.span(r, c)
    first = np.maximum(np.searchsorted(stock, least * (1 - _CLOSE), side="left"), window[0])
    last = np.minimum(np.searchsorted(stock, most * (1 + _CLOSE), side="right") - 1, window[1])
    open_rows = np.flatnonzero(last >= first)
    while len(open_rows):
        full = np.concatenate([r[open_rows], stock[first[open_rows]][:, None]], axis=1)
        _keep_met(question, full, c[open_rows], keep, counts)
        first[open_rows] += 1
        open_rows = open_rows[last[open_rows] >= first[open_rows]]


def _keep_met(question: Question, r: Float, c: Float, keep: int, counts: _Counts) -> None:
    margin = question.margins(r, c)
    counts.computed += len(r)
    met = np.flatnonzero(margin >= 0)
    if not len(met):
        return
    counts.met += len(met)
    r, c, margin = r[met], c[met], margin[met]
    keys = ranked(r, c, margin, question.enough, question.noise(r, c))
    counts.pieces.append(Hits(r, c, margin, keys).best(_KEPT * keep))


def ranked(r: Float, c: Float, margin: Float, enough: float, noise: Float) -> Float:
    """The rank keys of ladders, (ladders, 4): margin as far as it counts, spread, noise, margin."""
    spread = np.maximum(r.max(axis=1) / r.min(axis=1), c.max(axis=1) / c.min(axis=1))
    # Rounded, so that what is the same but for rounding ties.
    keys = [np.round(-np.minimum(margin, enough), _DIGITS), np.round(spread, _DIGITS), noise]
    return np.stack([*keys, np.round(-margin, _DIGITS)], axis=1)


__all__ = ["Hits", "Question", "Tally", "ranked", "search"]
