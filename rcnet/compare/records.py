"""What a comparison says: differences, the spans where they are too great, curves, and the whole."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit
from ..curves import Analysis
from .fsv import Fsv

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]  # float64 or complex128
Verdict = Literal["agree", "differ"]


@dataclass(frozen=True, slots=True)
class Difference:
    """How far apart two values are at one place.

    at: Hz, s, or 0 for an operating point and for a total; exact, other: in the curve's unit
    db: 20 log10 |other/exact|, deg: phase of other less that of exact; None where a value is zero, db also in
        a transient, and deg also where the curve is real
    relative: |other - exact| / |exact|; where the exact value is zero, and throughout a transient, over the
        curve's greatest exact value, and where all are zero, over the greatest of the other
    allowed: how far the other may lie from the exact value here: what is predicted and what is granted
    """

    at: float
    exact: complex | float
    other: complex | float
    db: float | None
    deg: float | None
    relative: float
    allowed: float


@dataclass(frozen=True, slots=True)
class Span:
    """An interval over which two curves differ by more than allowed, and its worst place.

    start, stop: between the last point that agrees and the first that differs; the ends of the curve at most
    shape: in what way they differ, in words and numbers, where one simple way explains nearly all; else None
    """

    start: float
    stop: float
    worst: Difference
    shape: str | None = None


@dataclass(frozen=True, eq=False)
class Held:
    """The numbers behind one compared curve, for whoever looks for causes.

    axis, exact, other, allowed: (points,), of the points compared; allowed as in `Difference`
    nodes: the two nodes, by index, whose voltage it is; source: the row of the part whose current it is
    exact_at: the exact curve at any axis; None where there is no telling
    """

    axis: Float
    exact: Numbers
    other: Numbers
    allowed: Float
    nodes: tuple[int, int] = (0, 0)
    source: int | None = None
    exact_at: Callable[[Float], Numbers] | None = None


@dataclass(frozen=True)
class CurveComparison:
    """One curve compared: its verdict, its worst place, its spans, and how alike the two look (FSV).

    coarse: from where to where, Hz or s, the predicted allowance is more than a hundredth of a decibel, in a
        transient more than a thousandth of the greatest value; None for nowhere
    unit: V, A, V/sqrt(Hz) or A/sqrt(Hz); held: the numbers themselves
    """

    name: str
    analysis: Analysis
    points: int
    verdict: Verdict
    worst: Difference
    spans: tuple[Span, ...]
    fsv: Fsv | None
    coarse: tuple[float, float] | None = None
    unit: str = "V"
    held: Held | None = field(default=None, repr=False, compare=False)

    @property
    def single(self) -> bool:
        """True for a value that lies nowhere along an axis: an operating point, a total."""
        return self.analysis == "operating point" or (self.analysis == "noise" and "total" in self.name)


@dataclass(frozen=True, slots=True)
class Uncompared:
    """A curve of the results that was not compared, and why."""

    name: str
    analysis: Analysis
    why: str


@dataclass(frozen=True)
class Comparison:
    """Every curve of a second opinion held against the exact one.

    causes: changes that would explain the differences, best first, each with `kind`, `part`, `factor`, `says`
        and `explains`; filled in by whoever looks for them
    """

    circuit: Circuit
    second_opinion: str
    curves: tuple[CurveComparison, ...]
    uncompared: tuple[Uncompared, ...] = ()
    remarks: tuple[str, ...] = ()
    causes: tuple[Any, ...] = ()

    @property
    def verdict(self) -> Verdict:
        """`agree` if every curve compared agrees; so too where there was none to compare."""
        return "differ" if any(curve.verdict == "differ" for curve in self.curves) else "agree"
