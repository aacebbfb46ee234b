"""What a response's numbers say of their own units, where its header does not.

In a minimum-phase network, as ladders are, phase follows from magnitude; H. W. Bode's approximation, that it
is 90 degrees times the slope d ln|H| / d ln f (Network Analysis and Feedback Amplifier Design, 1945, chapter
14), is right to a few tenths where the response bends. Degrees taken for radians are off by a factor of 57,
and so are decibels taken for a ratio by more than that: nothing finer is needed. A flat response decides
nothing.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import product
from typing import Literal

import numpy as np

from .curve import FloatArray

SizeUnit = Literal["mag", "db"]
AngleUnit = Literal["deg", "rad"]
_SIZES: tuple[SizeUnit, ...] = ("mag", "db")
_ANGLES: tuple[AngleUnit, ...] = ("deg", "rad")

_STATIONS = 40
_FIT = 0.15  # the share of phase unexplained up to which a reading is believed
_APART = (
    0.1  # what a reading must leave unexplained, beyond twice that of the best, to be out of the question
)
_FEWEST_BEND = 0.5  # rad: less is no evidence


@dataclass(frozen=True, slots=True)
class Fit:
    """How well phase follows from magnitude: the share of it unexplained, 0 to 2; the greatest bend, rad."""

    misfit: float
    bend: float

    def beats(self, other: Fit | None, apart: float) -> bool:
        """True where this reading is so much better that the other is out of the question."""
        return other is None or other.misfit > 2 * self.misfit + apart

    @property
    def is_good(self) -> bool:
        """True where the reading may be believed."""
        return self.misfit <= _FIT and self.bend >= _FEWEST_BEND


def fit(axis: FloatArray, size: FloatArray, phase: FloatArray) -> Fit | None:
    """How well a phase, rad, fits a magnitude along frequency, each (points,); None for too few points."""
    kept = (axis > 0) & (size > 0) & np.isfinite(size)
    if kept.sum() < 3:
        return None
    place = np.log(axis[kept])
    if not (np.diff(place) > 0).all():
        return None
    stations = np.linspace(place[0], place[-1], _STATIONS) if len(place) > _STATIONS else place
    level = np.interp(stations, place, np.log(size[kept]))
    angle = np.interp(stations, place, _unwrapped(phase[kept]))
    expected = math.pi / 2 * np.diff(level) / np.diff(stations)
    found = (angle[1:] + angle[:-1]) / 2
    found = found - 2 * math.pi * np.round(np.mean(found - expected) / (2 * math.pi))
    total = float(np.sum(found**2 + expected**2))
    misfit = float(np.sum((found - expected) ** 2)) / total if total > 0 else 2.0
    return Fit(misfit, float(np.abs(expected).max()))


def _unwrapped(phase: FloatArray) -> FloatArray:
    """The phase without its jumps of a turn; one that spans more than a turn has none."""
    return np.asarray(np.unwrap(phase) if np.ptp(phase) <= 2 * math.pi * (1 + 1e-6) else phase)


def polar(
    values: FloatArray, angles: FloatArray, size: SizeUnit, angle: AngleUnit
) -> tuple[FloatArray, FloatArray]:
    """Magnitude and phase in radians, of numbers read in the given units."""
    with np.errstate(over="ignore"):
        magnitude = 10.0 ** (values / 20.0) if size == "db" else values
    return magnitude, np.deg2rad(angles) if angle == "deg" else angles


def best(fits: Sequence[Fit | None], apart: float = _APART) -> int | None:
    """Which reading the numbers decide for; None where they do not."""
    order = sorted((fit.misfit, n) for n, fit in enumerate(fits) if fit is not None)
    if not order:
        return None
    first = order[0][1]
    chosen = fits[first]
    if chosen is None or not chosen.is_good:
        return None
    others = [other for n, other in enumerate(fits) if n != first]
    return first if all(chosen.beats(other, apart) for other in others) else None


@dataclass(frozen=True, slots=True)
class Reading:
    """The units decided for; None where nothing decides. `why` is a clause for each guess, "" where said."""

    size: SizeUnit | None
    angle: AngleUnit | None
    why_size: str = ""
    why_angle: str = ""


def read_polar(axis: FloatArray, values: FloatArray, angles: FloatArray, size: str, angle: str) -> Reading:
    """The units of a magnitude and a phase.

    size: `mag`, `db`, `gain` (either), `size` (a ratio unless the numbers say otherwise)
    angle: `deg`, `rad`, `angle` (either)
    """
    sizes: list[SizeUnit] = [unit for unit in _SIZES if size == unit or size not in _SIZES]
    turns: list[AngleUnit] = [unit for unit in _ANGLES if angle == unit or angle not in _ANGLES]
    why = ""
    if len(sizes) > 1 and values.min() < 0:
        sizes, why = ["db"], f", since it goes down to {values.min():.6g}"
    readings = list(product(sizes, turns))
    if len(readings) == 1:
        return Reading(*readings[0], why)
    chosen = best([fit(axis, *polar(values, angles, *reading)) for reading in readings])
    if chosen is not None:
        agree = ", as the slope of the magnitude and the phase then agree"
        return Reading(*readings[chosen], agree if len(sizes) > 1 else why, agree if len(turns) > 1 else "")
    plain = sizes[0] if len(sizes) == 1 or size == "size" else None
    reach = float(angles[np.argmax(np.abs(angles))])
    if len(turns) > 1 and abs(reach) > 2 * math.pi * (1 + 1e-6):
        return Reading(plain, "deg", why, f", since it reaches {reach:.6g}")
    return Reading(plain, turns[0] if len(turns) == 1 else None, why)


def ways(values: FloatArray, others: FloatArray) -> Iterator[tuple[tuple[str, str], FloatArray, FloatArray]]:
    """The ways to read two columns without a header as a response: the parts, magnitude and phase in rad."""
    yield ("real", "imag"), np.hypot(values, others), np.arctan2(others, values)
    for size, angle in product(_SIZES, _ANGLES):
        if size == "db" or values.min() >= 0:
            yield ((size, angle), *polar(values, others, size, angle))
