"""How far a measure moves when every part moves within its tolerance."""

from __future__ import annotations

import contextlib
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from ..circuit import Bound, Circuit, Claim
from ..errors import UndecidedError
from .box import Box
from .question import About, Ends, Question, options_at

Float = npt.NDArray[np.float64]

_SMALLEST_SHARE = 1e-4  # of a tolerance: to ask for less is to ask for an exact part


@dataclass(frozen=True, slots=True)
class ToleranceBounds:
    """The least and the greatest value of a measure over the tolerances, each attained by the parts named.

    low, high: in the measure's unit; method: "proven" where the shape of the network proves them,
        "searched" where a global search found nothing beyond them
    low_at, high_at: part values, base units, by name; for noise the key `temperature` too, degrees Celsius
    limiting: the part that moves the measure most towards the bound (without one: at the further end), None
        where nothing moves it
    needed: for a claim that fails, the tolerance of `limiting`, a fraction (its wider side), with which it
        would hold, everything else as it is; None where it holds, or where no tolerance of that part is
        enough
    """

    low: float
    high: float
    method: Literal["proven", "searched"]
    low_at: Mapping[str, float]
    high_at: Mapping[str, float]
    limiting: str | None = None
    needed: float | None = None

    def margin(self, bound: Bound) -> float:
        """How far inside a bound the worse end lies, in the measure's unit; negative outside."""
        return min(self.low - bound.low, bound.high - self.high)


def bounds(circuit: Circuit, about: About) -> ToleranceBounds:
    """The least and the greatest value of a measure over the box of part tolerances.

    about: a claim, or a measure's name, node or pair (None for measures of a part) and read options
    Parts without a tolerance stay as they are. Each temperature coefficient widens its part's limits by the
    greatest distance of the circuit's temperatures from 27 degrees Celsius; noise is taken at both ends of
    them. Raises UndecidedError, naming part values, where the measure does not exist somewhere in the box,
    and CircuitError where a value could fall to zero.
    """
    question = Question.of(circuit, about)
    found = question.answer()
    bound = about.bound if isinstance(about, Claim) else None
    limiting = question.limiting(found, bound)
    needed = None
    if limiting is not None and bound is not None and found.margin(bound) < 0:
        with contextlib.suppress(UndecidedError):
            needed = _needed(question, found, bound, limiting)
    return ToleranceBounds(
        found.low,
        found.high,
        found.method,
        question.told(found.low_at, question.celsius[0]),
        question.told(found.high_at, question.celsius[1]),
        limiting,
        needed,
    )


def is_proven(circuit: Circuit, about: About) -> bool:
    """True if `bounds` can prove what it gives."""
    question = Question.of(circuit, about)
    return not len(question.box) or question.proof is not None


def _needed(question: Question, found: Ends, bound: Bound, part: str) -> float | None:
    """The widest tolerance of one part with which a failing claim would hold, rounded down, or None."""
    tolerance = question.circuit.network.part(part).tolerance
    if tolerance is None:
        return None
    ends = []
    if found.low < bound.low:
        ends.append((found.low_at, question.celsius[0]))
    if found.high > bound.high:
        ends.append((found.high_at, question.celsius[1]))

    def margin(share: float) -> float:
        # The other parts stay at the corner that was worst.
        narrow = question.narrowed(part, share)
        return min(bound.margin(narrow.exact(_carried(question.box, narrow.box, at), t)) for at, t in ends)

    if margin(0.0) < 0:
        return None
    wide = max(tolerance.high, -tolerance.low)
    share = _largest(margin)
    for _ in range(4):
        if share < _SMALLEST_SHARE:
            return None
        share = _rounded_down(share * wide) / wide
        # The worst corner may be another one now.
        if question.narrowed(part, share).answer().margin(bound) >= 0:
            return _rounded_down(share * wide * (1 + 1e-12))
        share *= 0.9
    return None


def _carried(old: Box, new: Box, place: Float) -> Float:
    """A place of one box in another of the same or fewer parts: what was nominal stays so, ends stay ends."""
    row = {name: k for k, name in enumerate(old.names)}
    kept = place[[row[name] for name in new.names]]
    return np.where(kept == old.home[[row[name] for name in new.names]], new.home, kept)


def _largest(margin: Callable[[float], float]) -> float:
    """The greatest share at which a margin that falls with it, from not below zero, is not yet below it."""
    low, high = 0.0, 1.0
    for _ in range(40):
        middle = (low + high) / 2
        low, high = (middle, high) if margin(middle) >= 0 else (low, middle)
        if high - low < 1e-5 * high:
            break
    return low


def _rounded_down(value: float) -> float:
    """Three significant digits, never more than the value."""
    digits = 2 - math.floor(math.log10(value))
    return math.floor(value * 10.0**digits * (1 + 1e-12)) / 10.0**digits


__all__ = ["ToleranceBounds", "bounds", "is_proven", "options_at"]
