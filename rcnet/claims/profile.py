"""The magnitude of a response over all frequencies: its greatest value and where it crosses half power."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from ..exact import limit, natural_frequencies, response, span_of

Float = npt.NDArray[np.float64]
Indices = npt.NDArray[np.int64]

HALF_POWER_DB = 10 * math.log10(2)  # 3.0103 dB: power is half
PER_DECADE = 32  # a response with real poles turns over about a decade; this brackets each turn many times
_TIE_DB = 1e-9  # two peaks closer than this are equally high
_MOST_TURNS = 64  # the highest ones refined, to bound the time taken
NOTHING_ARRIVES = "nothing of the source arrives at this output at any frequency."


@dataclass(frozen=True)
class Profile:
    """A response's magnitude over all frequencies.

    omega: rad/s, (points,), rising; level: dB, (points,); peak: dB, the supremum over all frequencies
    peaks: where the supremum lies, rad/s; 0 and inf stand for the limits; several where they tie
    at_zero, at_infinity: dB, the limits (-inf where the response vanishes)
    """

    omega: Float
    level: Float
    peak: float
    peaks: tuple[float, ...]
    at_zero: float
    at_infinity: float
    level_at: Callable[[float], float]


def decibels(magnitude: npt.ArrayLike) -> Float:
    """20 log10 of a magnitude; -inf for zero."""
    with np.errstate(divide="ignore"):
        return np.asarray(20 * np.log10(np.abs(np.asarray(magnitude))), dtype=np.float64)


def profile(network: Network, of: tuple[int, int]) -> Profile:
    """The profile of a response. Raises UndecidedError where it grows without bound."""
    return _profile(network, network.arrays().values.tobytes(), len(network), of)


@lru_cache(
    maxsize=8
)  # one circuit asks for the same few profiles again and again; many circuits must not pile up
def _profile(network: Network, _values: bytes, _parts: int, of: tuple[int, int]) -> Profile:
    omega = _grid(network)
    text = _text(network, of)
    level = decibels(response(network, omega / (2 * math.pi), text))
    ends = [float(decibels(limit(network, of, high=high))) for high in (False, True)]
    if not (np.isfinite(level) | (level == -math.inf)).all():
        raise UndecidedError("somewhere the response is beyond the numbers double precision holds.")

    def level_at(w: float) -> float:
        return float(decibels(response(network, [w / (2 * math.pi)], text))[0])

    candidates = [(ends[0], 0.0), (ends[1], math.inf), *_turns(omega, level, level_at)]
    peak = max(height for height, _ in candidates)
    if peak == -math.inf:
        raise UndecidedError(NOTHING_ARRIVES)
    # A turn within rounding of a limit is the limit's own flat approach, not a peak of its own.
    at_ends = [where for height, where in candidates[:2] if height >= peak - _TIE_DB]
    inside = [where for height, where in candidates[2:] if height >= peak - 1e-12]
    return Profile(omega, level, peak, tuple(at_ends or inside), ends[0], ends[1], level_at)


def _text(network: Network, of: tuple[int, int]) -> str:
    names = network.nodes
    return names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"


def _grid(network: Network) -> Float:
    """Frequencies dense enough that no turn of the magnitude hides between two of them."""
    span = span_of(network)
    low, high = span.low / 100, span.high * 100
    decades = math.log10(high / low)
    grid = low * 10 ** (np.arange(math.ceil(decades * PER_DECADE) + 1) / PER_DECADE)
    if {chr(code) for code in set(network.arrays().kinds.tolist())} & set("LEFGH"):
        # Only such networks can have complex poles, whose peaks may be as narrow as their damping.
        extra = [
            np.abs(abs(pole.imag) + np.linspace(-4, 4, 33) * abs(pole.real))
            for pole in natural_frequencies(network)
            if abs(pole.imag) > 1e-6 * abs(pole)
        ]
        grid = np.unique(np.concatenate([grid, *extra]))
        grid = grid[grid > 0]
    return np.asarray(grid, dtype=np.float64)


def _turns(omega: Float, level: Float, level_at: Callable[[float], float]) -> list[tuple[float, float]]:
    """The local maxima that may be the greatest, each refined: (dB, rad/s)."""
    middle = level[1:-1]
    inner = np.flatnonzero((middle >= level[:-2]) & (middle >= level[2:]) & (middle > -math.inf)) + 1
    if not len(inner):
        return []
    tops = _one_of_each_plateau(level, inner)
    # The top of a parabola lies above the middle of three points by an eighth of their drop at most.
    reach = level[tops] + np.maximum(level[tops] - level[tops - 1], level[tops] - level[tops + 1])
    tops = tops[reach >= level[tops].max() - 1e-3]
    found = []
    for k in tops[np.argsort(-level[tops], kind="stable")][:_MOST_TURNS].tolist():
        where = _highest(level_at, math.log(omega[k - 1]), math.log(omega[k + 1]))
        height = level_at(where)
        found.append((height, where) if height >= level[k] else (float(level[k]), float(omega[k])))
    return found


def _one_of_each_plateau(level: Float, inner: Indices) -> Indices:
    """The highest of the local maxima between which the level dips by no more than rounding."""
    dips = np.minimum.reduceat(level, inner)[:-1]
    apart = dips < np.minimum(level[inner[:-1]], level[inner[1:]]) - _TIE_DB
    groups = np.split(inner, np.flatnonzero(apart) + 1)
    return np.array([group[np.argmax(level[group])] for group in groups], dtype=np.int64)


def _highest(level_at: Callable[[float], float], low: float, high: float) -> float:
    """The maximum between two values of ln omega, by golden section (J. Kiefer, Proc. AMS 4:502-506, 1953).

    A ten-millionth of the interval is enough: the top is flat, and the height off by the square of that.
    """
    enough = 1e-7 * (high - low)
    golden = (math.sqrt(5) - 1) / 2
    left, right = high - golden * (high - low), low + golden * (high - low)
    at_left, at_right = level_at(math.exp(left)), level_at(math.exp(right))
    while high - low > enough:
        if at_left >= at_right:
            high, right, at_right = right, left, at_left
            left = high - golden * (high - low)
            at_left = level_at(math.exp(left))
        else:
            low, left, at_left = left, right, at_right
            right = low + golden * (high - low)
            at_right = level_at(math.exp(right))
    return math.exp((low + high) / 2)


def half_power(found: Profile, edge: str) -> float | None:
    """The half-power frequency above (`upper`) or below (`lower`) the peak, Hz; None where there is none.

    A band-stop passes both ends alike: it has its peak at zero and at infinity, and an edge on the inner
    side of each. Its `lower` cutoff is the lower frequency of the two, as the trade has it.
    """
    threshold = found.peak - HALF_POWER_DB
    upward = edge == "upper"
    if found.peaks == (0.0, math.inf):
        upward = not upward
    crossings = [
        crossing
        for peak in found.peaks
        if (crossing := _crossing(found, peak, threshold, upward=upward)) is not None
    ]
    if not crossings:
        return None
    return min(crossings, key=lambda pair: pair[1])[0] / (2 * math.pi)


def _crossing(found: Profile, peak: float, threshold: float, *, upward: bool) -> tuple[float, float] | None:
    """The first crossing on one side of a peak: (rad/s, distance from the peak in ln omega)."""
    omega = found.omega
    below = np.flatnonzero((found.level < threshold) & (omega > peak if upward else omega < peak))
    if not len(below):
        return None
    outer = int(below[0] if upward else below[-1])
    inner = outer - 1 if upward else outer + 1
    # Between a peak inside and its neighbour on the grid lies no other point; a limit has none beside it.
    start = (
        float(omega[inner]) if 0 <= inner < len(omega) else float(omega[outer]) * (1e-12 if upward else 1e12)
    )
    if 0 < peak < math.inf and (start < peak) == upward:
        start = peak
    end = float(omega[outer])
    where = root(lambda w: found.level_at(w) - threshold, min(start, end), max(start, end))
    near = min(max(peak, 1e-300), 1e300)
    return where, abs(math.log(where / near))


def root(function: Callable[[float], float], low: float, high: float) -> float:
    """The zero of a function between two positive points where it differs in sign, to the last digits.

    T. R. Chandrupatla, Adv. Eng. Software 28(3):145-149, 1997: inverse quadratic interpolation where it is
    safe, bisection elsewhere. Works in the logarithm of the argument.
    """
    a, b = math.log(low), math.log(high)
    fa, fb = function(low), function(high)
    if fa == 0 or fb == 0:
        return low if fa == 0 else high
    if (fa > 0) == (fb > 0):
        raise UndecidedError(
            "the response comes so near the level asked for that rounding hides where it crosses it."
        )
    c, fc, t = a, fa, 0.5
    for _ in range(200):
        x = a + t * (b - a)
        fx = function(math.exp(x))
        if (fx > 0) == (fa > 0):
            c, fc = a, fa
        else:
            c, b, fc, fb = b, a, fb, fa
        a, fa = x, fx
        best, f_best = (a, fa) if abs(fa) < abs(fb) else (b, fb)
        # A unit in the last place of omega is 2e-16 in its logarithm, but the logarithm has fewer digits.
        tolerance = max(2e-16, abs(best) * 1.2e-16)
        if f_best == 0 or abs(b - a) <= 2 * tolerance:
            return math.exp(best)
        limit_t = tolerance / abs(b - a)
        t = min(1 - limit_t, max(limit_t, _next_step((a, b, c), (fa, fb, fc))))
    return math.exp(best)


def _next_step(points: tuple[float, float, float], values: tuple[float, float, float]) -> float:
    """Where to look next between a (0) and b (1): inverse quadratic where that is safe, else half-way."""
    (a, b, c), (fa, fb, fc) = points, values
    xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
    if phi * phi < xi and (1 - phi) * (1 - phi) < 1 - xi:
        return fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    return 0.5
