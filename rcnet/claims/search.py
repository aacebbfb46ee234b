"""Global search for the least and the greatest value of a function over the unit cube.

Starts come from the corners, from quasi-random points and from where the caller stands; from the best of them
a compass search climbs (T. Kolda, R. Lewis, V. Torczon, SIAM Rev. 45:385-482, 2003), all climbers side by
side so that the function sees many points in one call. What it returns are values the function has taken.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Float = npt.NDArray[np.float64]
# (points, dimensions) and which climber asks for each point, (points,) -> (points,)
Function = Callable[[Float, npt.NDArray[np.int64]], Float]

_FINEST = 2.0**-12  # a smooth top is flat: its height is off by the square of the last step
_SHRINK = 0.25
_NO_GAIN = 1e-12  # of a value: less is rounding
_WORTH_IT = 1e-3  # of the spread of values and the square of the step: less, and the step is too long
_MOST_MIXED = 20  # coordinates up to which a fitted quadratic has products
_MOST_CURVED = 16  # free coordinates up to which the curvature matrix is taken
_CURVATURE_STEP = 2.0**-8


@dataclass(frozen=True)
class Effort:
    """How much to spend. corners: dimensions up to which every corner is tried; samples: quasi-random points;
    climbers: how many starts to climb from, in each direction; rounds: how many trials each may make.
    """

    corners: int
    samples: int
    climbers: int
    rounds: int


@dataclass(frozen=True)
class Extremes:
    """The least and the greatest value found, each with its place, (dimensions,)."""

    low: float
    high: float
    low_at: Float
    high_at: Float


def extremes(function: Callable[[Float], Float], start: Float, effort: Effort) -> Extremes:
    """The least and the greatest value over the unit cube.

    function: (points, dimensions) -> (points,), finite; start: (dimensions,), a place of which the caller
    knows nothing better
    """
    if not len(start):
        value = float(function(start[None])[0])
        return Extremes(value, value, start, start)
    places = np.concatenate([start[None], corners(start, effort.corners), spread(effort.samples, len(start))])
    values = function(places)
    ends = []
    for sign in (-1.0, 1.0):
        best = _distinct(places[np.argsort(-sign * values, kind="stable")], effort.climbers)
        starts = np.concatenate([best, _modelled(places, values, sign)[None]])

        def signed(points: Float, _: npt.NDArray[np.int64], sign: float = sign) -> Float:
            return sign * function(points)

        found, height = climb(signed, starts, effort.rounds)
        place = found[int(np.argmax(height))]
        place, top = polish(lambda points, sign=sign: sign * function(points), place)  # type: ignore[misc]
        ends.append((sign * top, place))
    return Extremes(ends[0][0], ends[1][0], ends[0][1], ends[1][1])


def corners(start: Float, most: int) -> Float:
    """Every corner of the cube, (2^n, n), up to `most` dimensions; beyond, the two all alike."""
    count = len(start)
    if count > most:
        return np.stack([np.zeros(count), np.ones(count)])
    return np.array(list(itertools.product((0.0, 1.0), repeat=count)))


def spread(count: int, dimensions: int) -> Float:
    """Points spread evenly over the cube, (count, dimensions): the additive recurrence of the generalised
    golden ratio.

    Its base is the root of x^(d+1) = x + 1, the most badly approximable choice for d = 1 (H. Niederreiter,
    Random Number Generation and Quasi-Monte Carlo Methods, 1992, ch. 3, on such Kronecker sequences).
    """
    base = 2.0
    for _ in range(64):
        base = (1 + base) ** (1 / (dimensions + 1))
    steps = base ** -np.arange(1.0, dimensions + 1)
    return np.asarray((0.5 + np.arange(1, count + 1)[:, None] * steps) % 1.0)


def _distinct(places: Float, count: int) -> Float:
    """The first `count` places that do not lie beside one before."""
    chosen: list[Float] = []
    for place in places:
        if all(np.abs(place - other).max() > 0.3 for other in chosen):
            chosen.append(place)
        if len(chosen) == count:
            break
    return np.array(chosen)


def _modelled(places: Float, values: Float, sign: float) -> Float:
    """Where a quadratic fitted to values at places has its top, (dimensions,): it costs no new values."""
    size = places.shape[1]
    mixed = size <= _MOST_MIXED and len(places) > 1.2 * (size + 1) * (size + 2) / 2
    curved = mixed or len(places) > 1.2 * (2 * size + 1)
    pairs = np.triu_indices(size, 1) if mixed else (np.empty(0, dtype=np.int64),) * 2

    def terms(points: Float) -> Float:
        x = points - 0.5
        columns = [np.ones((len(x), 1)), x, x * x if curved else x[:, :0], x[:, pairs[0]] * x[:, pairs[1]]]
        return np.concatenate(columns, axis=1)

    weights = np.linalg.lstsq(terms(places), sign * values, rcond=None)[0]
    starts = np.stack([places[int(np.argmax(sign * values))], np.where(weights[1 : size + 1] > 0, 1.0, 0.0)])
    tops, heights = climb(lambda points, _: terms(points) @ weights, starts)
    return np.asarray(tops[int(np.argmax(heights))])


def climb(
    function: Function, starts: Float, rounds: int = 100, *, rivals: bool = True
) -> tuple[Float, Float]:
    """Climb from every start: the places reached, (climbers, dimensions), and the heights, (climbers,).

    Each round tries a step up and down every coordinate, then all the steps that helped together. A climber
    whose round gains nothing takes shorter steps; the first ones reach from face to face, so that no single
    part at its other limit does better in the end. rivals: True where all climb the same function, so that
    one who comes to where another stands may stop.
    """
    places, count = starts.copy(), len(starts)
    heights = function(places, np.arange(count))
    steps, spread_seen = np.ones(count), 0.0
    for _ in range(rounds):
        if rivals:
            steps = np.where(_meets_another(places, heights), 0.0, steps)
        active = np.flatnonzero(steps >= _FINEST)
        if not len(active):
            break
        moved, reached, seen = _round(function, places[active], heights[active], steps[active], active)
        gained, spread_seen = reached - heights[active], max(spread_seen, seen)
        rises = gained > 0
        places[active[rises]], heights[active[rises]] = moved[rises], reached[rises]
        enough = np.maximum(_NO_GAIN * np.abs(reached), _WORTH_IT * spread_seen * steps[active] ** 2)
        for k in active[gained <= enough].tolist():
            at_corner = bool(((places[k] == 0) | (places[k] == 1)).all())
            # At a corner that beats its edges, what is left to ask is whether it slopes down to all sides.
            rough = steps[k] > 1 / 32
            steps[k] = 1 / 1024 if at_corner and rough and steps[k] < 0.5 else steps[k] * _SHRINK
            if at_corner and not rough:
                steps[k] = 0.0
    return places, heights


def _meets_another(places: Float, heights: Float) -> npt.NDArray[np.bool_]:
    """True for climbers that stand where an earlier one does."""
    same = np.zeros(len(places), dtype=bool)
    for k in range(1, len(places)):
        near = np.abs(places[:k] - places[k]).max(axis=1) < 1e-9
        same[k] = bool((near & (heights[:k] >= heights[k])).any())
    return same


def _round(
    function: Function, places: Float, heights: Float, steps: Float, who: npt.NDArray[np.int64]
) -> tuple[Float, Float, float]:
    """What one round of trials finds best for each climber, its height, and how far all values range."""
    count, size = places.shape
    moves = steps[:, None, None] * np.concatenate([np.eye(size), -np.eye(size)])
    trials = np.clip(places[:, None] + moves, 0.0, 1.0)
    values = function(trials.reshape(-1, size), np.repeat(who, 2 * size)).reshape(count, 2 * size)
    up, down = values[:, :size], values[:, size:]
    better = np.maximum(up, down) > heights[:, None]
    side = np.where(
        up >= down, trials[:, range(size), range(size)], trials[:, range(size, 2 * size), range(size)]
    )
    joint = np.where(better, side, places)
    bent = np.clip(np.where(better, side, places + _vertex(up, down, heights[:, None], steps[:, None])), 0, 1)
    both = np.concatenate([joint, bent])
    together = function(both, np.tile(who, 2)).reshape(2, count)
    single = values.argmax(axis=1)
    rows = np.arange(count)
    options = np.stack([values[rows, single], *together])
    choice = options.argmax(axis=0)
    found = np.stack([trials[rows, single], joint, bent])
    return found[choice, rows], options[choice, rows], float(np.ptp(values, axis=1).max())


def _vertex(up: Float, down: Float, middle: Float, step: Float) -> Float:
    """How far from the middle of three points the parabola through them has its top, where one is near."""
    bend = 2 * middle - up - down
    with np.errstate(divide="ignore", invalid="ignore"):
        top = np.where(bend > 0, step * (up - down) / (2 * bend), 0.0)
    return np.asarray(np.clip(np.nan_to_num(top), -step, step))


def polish(function: Callable[[Float], Float], place: Float) -> tuple[Float, float]:
    """A top climbed to, brought to its last digits by Newton's steps in the coordinates that lie inside."""
    height = float(function(place[None])[0])
    free = np.flatnonzero((place > 0) & (place < 1))
    if not 0 < len(free) <= _MOST_CURVED:
        return place, height
    for step in (_CURVATURE_STEP, _CURVATURE_STEP / 8):
        for _ in range(6):
            trial = _newton(function, place, free, step)
            reached = float(function(trial[None])[0])
            if not reached > height:
                break
            place, height = trial, reached
    return place, height


def _newton(
    function: Callable[[Float], Float], place: Float, free: npt.NDArray[np.int64], step: float
) -> Float:
    """One Newton step from differences, in the free coordinates."""
    size = len(free)
    room = np.minimum(place[free], 1 - place[free])
    h = np.minimum(step, room)
    unit = np.zeros((size, len(place)))
    unit[range(size), free] = h
    pairs = [(i, j) for i in range(size) for j in range(i)]
    around = [place + unit, place - unit, place[None]]
    around += [(place + unit[i] + unit[j])[None] for i, j in pairs]
    around += [(place - unit[i] - unit[j])[None] for i, j in pairs]
    values = function(np.concatenate(around))
    up, down, middle, mixed = values[:size], values[size : 2 * size], values[2 * size], values[2 * size + 1 :]
    gradient = (up - down) / 2
    curve = np.diag(up + down - 2 * middle)
    for number, (i, j) in enumerate(pairs):
        total = mixed[number] + mixed[number + len(pairs)] + 2 * middle
        curve[i, j] = curve[j, i] = (total - up[i] - down[i] - up[j] - down[j]) / 2
    move = np.linalg.lstsq(curve, -gradient, rcond=1e-10)[0] * h
    result = place.copy()
    result[free] = np.clip(place[free] + move, 0, 1)
    return result


__all__ = ["Effort", "Extremes", "climb", "corners", "extremes", "polish", "spread"]
