"""Two accounts of one curve at the same points: where they differ by more than allowed, and by how much."""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..curves import Analysis
from .fsv import Fsv, fsv
from .granted import NOTHING, Grant, granted_slack, nearest_granted, share_used
from .records import CurveComparison, Difference, Float, Held, Numbers, Span
from .shapes import shape_of
from .targets import TOTALS, Target

Flags = npt.NDArray[np.bool_]

COARSE = 1e-3  # an allowance above this share of a value, a hundredth of a decibel, is worth telling
MOST_SPANS = 1000
MOST_SHAPES = 32  # spans of one curve whose shape is looked for
_MOST_LOOKED_AT = 4096  # points of a transient for its FSV
_LEAST_SHARE = 1e-3  # of the allowance: what is used less is rounding, which tells no place


def judged(
    target: Target,
    analysis: Analysis,
    axis: Float,
    exact: Numbers,
    other: Numbers,
    allowed: Float,
    *,
    unit: str = "V",
    grant: Grant = NOTHING,
    exact_at: Callable[[Float], Numbers] | None = None,
) -> CurveComparison:
    """One curve with its verdict, its spans and its look.

    axis, exact, other: (points,); allowed: (points,), what is predicted, before anything is granted
    exact_at: the exact curve elsewhere, wanted for the FSV of a transient
    """
    timed = analysis == "transient"
    limits = _limits(exact, other, allowed, grant, unit, timed=timed)
    sizes = np.abs(exact)
    greatest = float(sizes.max(initial=0.0)) or float(np.abs(other).max(initial=0.0)) or 1.0
    relative = _relative(np.abs(other - exact), sizes, greatest, limits.beyond, timed=timed)
    values = (axis, exact, other, relative, limits.allowed)
    runs = _fewer(_runs(limits.beyond))
    starts, stops = _ends(axis, limits.share, runs, timed=timed)
    shapes = _shapes(analysis, axis, exact, other, runs)
    spans = tuple(
        Span(start, stop, _difference(a + int(np.argmax(relative[a:b])), *values, timed=timed), shape)
        for (a, b), start, stop, shape in zip(runs, starts, stops, shapes, strict=True)
    )
    worst = int(np.argmax(np.where(limits.beyond, relative, -1.0) if runs else relative))
    source = None if target.kind == "share" else target.source
    return CurveComparison(
        name=target.name,
        analysis=analysis,
        points=len(axis),
        verdict="differ" if spans else "agree",
        worst=_difference(worst, *values, timed=timed),
        spans=spans,
        fsv=_look(analysis, axis, exact, other, exact_at),
        coarse=None if target.kind in TOTALS else _coarse(axis, allowed, sizes, greatest, timed=timed),
        unit=unit,
        held=Held(axis, exact, other, limits.allowed, target.nodes, source, exact_at),
    )


@dataclass(frozen=True)
class _Limits:
    """Where a curve is beyond what is allowed, (points,).

    allowed: how far from the exact value, all in all; share: about how much of that is used up
    """

    beyond: Flags
    allowed: Float
    share: Float


def _limits(
    exact: Numbers, other: Numbers, allowed: Float, grant: Grant, unit: str, *, timed: bool
) -> _Limits:
    near = nearest_granted(exact, other, grant)
    if grant:
        allowed = allowed + granted_slack(exact, grant, unit, of_greatest=timed)
    distance = np.abs(other - near)
    # Written so that an allowance that is no number counts as none.
    beyond = ~(distance <= allowed)
    share = share_used(exact, other, distance, allowed, grant)
    return _Limits(beyond, allowed if near is exact else allowed + np.abs(near - exact), share)


def _relative(distance: Float, sizes: Float, greatest: float, beyond: Flags, *, timed: bool) -> Float:
    with np.errstate(over="ignore"):
        if timed:
            return np.asarray(np.minimum(distance / greatest, np.finfo(float).max))
        scale = np.where(sizes > 0, sizes, greatest)
        relative = np.minimum(distance / scale, np.finfo(float).max)
    # Rounding beside an exact zero is no share of anything.
    relative[(sizes == 0) & ~beyond] = 0.0
    return np.asarray(relative)


def _coarse(
    axis: Float, allowed: Float, sizes: Float, greatest: float, *, timed: bool
) -> tuple[float, float] | None:
    wide = axis[allowed > COARSE * (greatest if timed else sizes)]
    return (float(wide[0]), float(wide[-1])) if len(wide) and sizes.any() else None


def _difference(
    k: int, axis: Float, exact: Numbers, other: Numbers, relative: Float, allowed: Float, *, timed: bool
) -> Difference:
    """The difference at point k."""
    at, share, most = float(axis[k]), float(relative[k]), float(allowed[k])
    a, b = complex(exact[k]), complex(other[k])
    # Where a transient crosses zero its decibels say nothing.
    db, deg = _apart(a, b) if a and b and not timed else (None, None)
    if not np.iscomplexobj(exact) and not np.iscomplexobj(other):
        return Difference(at, a.real, b.real, db, None, share, most)
    return Difference(at, a, b, db, deg, share, most)


def _apart(a: complex, b: complex) -> tuple[float, float]:
    """How far b lies from a: dB and deg. Close ones are told by their difference, or rounding would show."""
    if abs(b - a) < abs(a) / 2:
        share = (b - a) / a
        db = 10 / math.log(10) * math.log1p(2 * share.real + abs(share) ** 2)
        return db, math.degrees(math.atan2(share.imag, 1 + share.real))
    turned = math.remainder(cmath.phase(b) - cmath.phase(a), 2 * math.pi)
    return 20 * (math.log10(abs(b)) - math.log10(abs(a))), math.degrees(turned)


def _runs(flags: Flags) -> list[tuple[int, int]]:
    """The runs of True as half-open index pairs."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))


def _fewer(runs: list[tuple[int, int]]) -> list[tuple[int, int]]:
    """At most MOST_SPANS runs: of more, those nearest to each other are told as one."""
    if len(runs) <= MOST_SPANS:
        return runs
    table = np.array(runs)
    gaps = table[1:, 0] - table[:-1, 1]
    parting = np.sort(np.argsort(gaps, kind="stable")[len(gaps) - MOST_SPANS + 1 :])
    starts = table[np.concatenate([[0], parting + 1]), 0]
    stops = table[np.concatenate([parting, [len(table) - 1]]), 1]
    return list(zip(starts.tolist(), stops.tolist(), strict=True))


# ---------------------------------------------------------------------- the ends of spans


def _ends(
    axis: Float, share: Float, runs: list[tuple[int, int]], *, timed: bool
) -> tuple[list[float], list[float]]:
    """Where each run begins and ends, between its outermost points and the agreeing ones beside them.

    share: (points,), the distance over the allowance. Along the axis its logarithm is taken for a straight
    line, as it is for whatever grows by a power of frequency; the other curve is known at its points only.
    """
    first = np.array([a for a, _ in runs], dtype=np.int64)
    last = np.array([b - 1 for _, b in runs], dtype=np.int64)
    return (
        _crossings(axis, share, np.maximum(first - 1, 0), first, timed=timed),
        _crossings(axis, share, np.minimum(last + 1, len(axis) - 1), last, timed=timed),
    )


def _crossings(
    axis: Float, share: Float, inside: npt.NDArray[np.int64], outside: npt.NDArray[np.int64], *, timed: bool
) -> list[float]:
    with np.errstate(all="ignore"):
        below = -np.log(np.clip(share[inside], _LEAST_SHARE, 1.0))
        above = np.log(np.clip(np.nan_to_num(share[outside], nan=np.inf), 1.0, 1e300))
        way = np.where(below + above > 0, below / np.where(below + above > 0, below + above, 1.0), 1.0)
    # The span never reaches the point that agrees.
    way = np.clip(way, _LEAST_SHARE, 1.0)
    a, b = axis[inside], axis[outside]
    straight = a + way * (b - a)
    if timed:
        found = straight
    else:
        positive = (a > 0) & (b > 0)
        bent = np.where(positive, a, 1.0) * (np.where(positive, b, 1.0) / np.where(positive, a, 1.0)) ** way
        found = np.where(positive, bent, straight)
    found = np.where((inside == outside) | (way == 1.0), b, found)
    return [float(x) for x in np.clip(found, np.minimum(a, b), np.maximum(a, b))]


# ---------------------------------------------------------------------- what differences look like


def _shapes(
    analysis: Analysis, axis: Float, exact: Numbers, other: Numbers, runs: list[tuple[int, int]]
) -> list[str | None]:
    """The shape of each run; of very many, that of the longest."""
    told = sorted(range(len(runs)), key=lambda k: runs[k][0] - runs[k][1])[:MOST_SHAPES]
    found: list[str | None] = [None] * len(runs)
    if analysis != "operating point":
        for number in told:
            found[number] = shape_of(analysis, axis, exact, other, *runs[number])
    return found


def _look(
    analysis: Analysis,
    axis: Float,
    exact: Numbers,
    other: Numbers,
    exact_at: Callable[[Float], Numbers] | None,
) -> Fsv | None:
    if analysis == "transient":
        return None if exact_at is None else _alike_over_time(axis, other, exact_at)
    if analysis in ("ac", "noise"):
        return _alike(axis, exact, other)
    return None


def _alike(axis: Float, exact: Numbers, other: Numbers) -> Fsv | None:
    """FSV of magnitude (dB) and of phase (deg), the worse of the two; None off an even grid or at a zero."""
    if len(axis) < 3 or axis[0] <= 0 or not (exact.all() and other.all()):
        return None
    steps = np.diff(np.log(axis))
    if steps.max() > steps.min() * (1 + 1e-6):
        return None
    looks = [fsv(20 * np.log10(np.abs(exact)), 20 * np.log10(np.abs(other)))]
    if np.iscomplexobj(exact):
        looks.append(fsv(np.degrees(np.unwrap(np.angle(exact))), np.degrees(np.unwrap(np.angle(other)))))
    found = [look for look in looks if look is not None]
    return max(found, key=lambda look: look.gdm) if found else None


def _alike_over_time(axis: Float, other: Numbers, exact_at: Callable[[Float], Numbers]) -> Fsv | None:
    """FSV at even steps, as the method needs them: the exact curve itself, the other along straight lines."""
    if len(axis) < 3:
        return None
    even = np.linspace(axis[0], axis[-1], min(len(axis), _MOST_LOOKED_AT))
    return fsv(np.asarray(exact_at(even), dtype=np.float64), np.interp(even, axis, other))
