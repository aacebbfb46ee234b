"""Feature Selective Validation: how alike two curves are, in numbers and in six words.

The published method of IEEE Std 1597.1, as described by
  A. P. Duffy et al., IEEE Trans. EMC 48(3):449, 2006, doi 10.1109/TEMC.2006.879358: the method;
  A. Duffy, A. Orlandi, H. Sasse, IEEE Trans. EMC 50(2):413-415, 2008: the offset term;
  J. Bongiorno, A. Mariscotti, Electronics 11(16):2532, 2022, doi 10.3390/electronics11162532: derivatives;
  1-D FSV manual, EMC Laboratory, University of L'Aquila, 2009: break point, edges, GRADE, SPREAD, scale.
Public descriptions differ in details, so these numbers are not to be held against another program's. They
describe and judge nothing: the method sees no change of sign, and a shifted corner hardly moves it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

WORDS = ("Excellent", "Very good", "Good", "Fair", "Poor", "Very poor")
BOUNDARIES = (0.1, 0.2, 0.4, 0.8, 1.6)  # between the six classes; a boundary belongs to the class above it

MIN_POINTS = 26  # below, no element of the transform has full weight in the high band
DC_ELEMENTS = 5  # the DC term and the lowest four
EDGE = 3  # half the width of the slope between the low and the high band
EMPTY = (
    64 * np.finfo(np.float64).eps
)  # a band whose mean is below this share of the curves holds rounding only


class Bands(NamedTuple):
    """One curve in three parts, each of shape (points,); their sum is the curve."""

    dc: FloatArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, eq=False)
class Fsv:
    """The measures of one comparison; 0 is identity.

    adm, fdm, gdm: totals of the amplitude, the feature and the global difference measure
    grade: the word for `gdm`
    adm_points, fdm_points, gdm_points: point by point, float64, shape (points,)
    """

    adm: float
    fdm: float
    gdm: float
    grade: str
    adm_points: FloatArray
    fdm_points: FloatArray
    gdm_points: FloatArray

    @property
    def grade_number(self) -> int:
        """GRADE of the global measure, 1 (best) to 6."""
        return grade_number(self.gdm_points)

    @property
    def spread_number(self) -> int:
        """SPREAD of the global measure, 1 (the single figure says it all) to 6."""
        return spread_number(self.gdm_points)


def fsv(first: FloatArray, second: FloatArray) -> Fsv | None:
    """The difference measures of two real curves on the same uniform abscissae.

    Both are float64, shape (points,), in the same unit; for a logarithmic sweep the uniform abscissa is
    the logarithm of frequency.

    Returns None where the method has no answer: fewer than 26 points, or a value that is not finite.
    Raises ValueError where the shapes differ.
    """
    one, two = _common_scale(np.asarray(first, np.float64), np.asarray(second, np.float64))
    if len(one) < MIN_POINTS or not (np.isfinite(one).all() and np.isfinite(two).all()):
        return None
    edge = break_point(one, two)
    a, b = bands(one, edge), bands(two, edge)
    floor = float(EMPTY * np.mean(np.abs(one) + np.abs(two)))
    adm = _amplitude(a, b, floor)
    fdm = _feature(a, b, floor)
    gdm = np.hypot(adm, fdm)
    total = float(np.mean(gdm))
    return Fsv(float(np.mean(adm)), float(np.mean(fdm)), total, word(total), adm, fdm, gdm)


def _common_scale(one: FloatArray, two: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Both curves over one power of two: the measures do not see it, and no sum overflows."""
    if one.ndim != 1 or one.shape != two.shape:
        raise ValueError(f"two curves of one shape (points,) are compared, not {one.shape} and {two.shape}")
    largest = max(np.max(np.abs(one), initial=0.0), np.max(np.abs(two), initial=0.0))
    exponent = -int(np.frexp(largest)[1])
    return np.ldexp(one, exponent), np.ldexp(two, exponent)


def break_point(first: FloatArray, second: FloatArray) -> int:
    """The element of the transform where the low band meets the high one, one for both curves.

    Five above the lower of the two places at which the magnitudes, summed from the fifth element, reach 40 %.
    """
    return min(_forty_percent_place(first), _forty_percent_place(second)) + 5


def _forty_percent_place(curve: FloatArray) -> int:
    running = np.cumsum(np.abs(np.fft.rfft(curve))[DC_ELEMENTS:])
    return DC_ELEMENTS + int(np.argmax(running >= 0.4 * running[-1]))


def bands(curve: FloatArray, edge: int) -> Bands:
    """The curve, shape (points,), split at the break point `edge`."""
    transform = np.fft.rfft(curve)
    element = np.arange(len(transform))
    is_dc = element < DC_ELEMENTS
    weight = np.clip((edge + EDGE - element) / (2 * EDGE), 0.0, 1.0)
    masks = (is_dc, np.where(is_dc, 0.0, weight), np.where(is_dc, 0.0, 1.0 - weight))
    return Bands(*(np.fft.irfft(transform * mask, len(curve)) for mask in masks))


def _amplitude(a: Bands, b: Bands, floor: float) -> FloatArray:
    low: FloatArray = np.abs(_difference(a.low, b.low, floor))
    offset: FloatArray = np.abs(_difference(a.dc, b.dc, floor))
    return low + offset * np.exp(offset)


def _feature(a: Bands, b: Bands, floor: float) -> FloatArray:
    high_a, high_b = _slope(a.high, 3), _slope(b.high, 3)
    f1 = _difference(_slope(a.low, 2), _slope(b.low, 2), floor) / 2.0
    f2 = _difference(high_a, high_b, floor) / 6.0
    f3 = _difference(_slope(high_a, 3), _slope(high_b, 3), floor) / 7.2
    fdm: FloatArray = 2.0 * np.abs(f1 + f2 + f3)
    return fdm


def _difference(a: FloatArray, b: FloatArray, floor: float) -> FloatArray:
    """The difference of magnitudes over the mean of their sum; 0 throughout for an empty band."""
    size_a, size_b = np.abs(a), np.abs(b)
    normaliser = float(np.mean(size_a + size_b))
    # Rounding divided by rounding would show as a large false difference.
    share: FloatArray = (size_a - size_b) / (normaliser if normaliser > floor else np.inf)
    return share


def _slope(x: FloatArray, span: int) -> FloatArray:
    """x(n + span) - x(n - span), the index held inside the curve at both ends."""
    n = np.arange(len(x))
    slope: FloatArray = x[np.minimum(n + span, len(x) - 1)] - x[np.maximum(n - span, 0)]
    return slope


def word(value: float) -> str:
    """The word for one value of a measure."""
    return WORDS[int(np.searchsorted(BOUNDARIES, value, side="right"))]


def histogram(points: FloatArray) -> IntArray:
    """How many of the point-by-point values fall in each class, Excellent first; shape (6,)."""
    classes = np.searchsorted(BOUNDARIES, points, side="right")
    return np.bincount(classes, minlength=len(WORDS)).astype(np.int64)


def grade_number(points: FloatArray) -> int:
    """GRADE: how many classes, from Excellent on, hold at least 85 % of the points."""
    return _classes_needed(histogram(points))


def spread_number(points: FloatArray) -> int:
    """SPREAD: how many classes, the fullest first, hold at least 85 % of the points."""
    return _classes_needed(np.sort(histogram(points))[::-1])


def _classes_needed(counts: IntArray) -> int:
    held = np.cumsum(counts)
    return int(np.argmax(100 * held >= 85 * held[-1])) + 1


def histogram_mean(points: FloatArray) -> float:
    """The mean class number of the points, 1 to 6 (L'Aquila manual)."""
    counts = histogram(points)
    return float(counts @ np.arange(1, len(WORDS) + 1) / counts.sum())


def visual(value: float) -> float:
    """A value on the visual six-point scale (L'Aquila manual)."""
    if value <= 0.1:
        return 1 + 10 * value
    if value <= 0.2:
        return 2 + 10 * (value - 0.099)
    if value <= 0.4:
        return 3 + 5 * (value - 0.199)
    if value <= 0.8:
        return 4 + 2.5 * (value - 0.399)
    return 5 + 1.25 * (value - 0.799) if value <= 1.6 else 6.0
