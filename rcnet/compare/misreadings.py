"""Mistakes made with right results: signs, phase conventions, decibels, hertz and rad/s, a wrong node.

Each is a function from the exact curves to those the mistake would leave in a results file.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

Numbers = npt.NDArray[Any]

_SMALLEST = 1e-300  # a magnitude whose decibels can be written
_LARGEST_DB = 2000.0


@dataclass(frozen=True)
class Misreading:
    """One mistake: what it does to complex curves (..., points), and what to say of it.

    says: goes on from "v(out) is ..."; real_too: it also happens to an operating point
    """

    kind: Literal["sign", "units"]
    says: str
    apply: Callable[[Numbers], Numbers]
    real_too: bool = False


def _turned(values: Numbers, phase: Numbers) -> Numbers:
    return np.asarray(np.abs(values) * np.exp(1j * phase))


def _decibels(values: Numbers) -> Numbers:
    return np.asarray(20 * np.log10(np.maximum(np.abs(values), _SMALLEST)))


def _phase(values: Numbers) -> Numbers:
    return np.asarray(np.angle(values))


def _unwrapped(values: Numbers) -> Numbers:
    return np.asarray(np.unwrap(np.angle(values)))


_DEG = 180 / math.pi

MISREADINGS: dict[str, Misreading] = {
    "minus": Misreading(
        "sign",
        "the exact curve with its sign turned: 180 degrees off at every point, as when the source, or "
        "the two nodes of the output, are the other way round",
        lambda h: -h,
        real_too=True,
    ),
    "conjugate": Misreading(
        "sign",
        "the complex conjugate of the exact curve: the same magnitude and the opposite phase, as when lag is "
        "counted as positive or time runs as exp(-j omega t)",
        np.conj,
    ),
    "minus conjugate": Misreading(
        "sign",
        "minus the complex conjugate of the exact curve: the real part has the wrong sign",
        lambda h: -np.conj(h),
    ),
    "quarter turn": Misreading(
        "sign", "the exact curve 90 degrees ahead at every point, as a sine is of a cosine", lambda h: 1j * h
    ),
    "quarter turn back": Misreading(
        "sign", "the exact curve 90 degrees behind at every point, as a cosine of a sine", lambda h: -1j * h
    ),
    "degrees as radians": Misreading(
        "units",
        "the exact curve with its phase in degrees read as radians",
        lambda h: _turned(h, _phase(h) * _DEG),
    ),
    "unwrapped degrees as radians": Misreading(
        "units",
        "the exact curve with its continuous phase in degrees read as radians",
        lambda h: _turned(h, _unwrapped(h) * _DEG),
    ),
    "radians as degrees": Misreading(
        "units",
        "the exact curve with its phase in radians read as degrees",
        lambda h: _turned(h, _phase(h) / _DEG),
    ),
    "unwrapped radians as degrees": Misreading(
        "units",
        "the exact curve with its continuous phase in radians read as degrees",
        lambda h: _turned(h, _unwrapped(h) / _DEG),
    ),
    "decibels as magnitude": Misreading(
        "units",
        "the exact curve with its magnitude in decibels taken for a plain one",
        lambda h: _decibels(h) * np.exp(1j * _phase(h)),
    ),
    "decibels alone": Misreading(
        "units",
        "the exact curve's decibels without a phase, taken for volts",
        lambda h: _decibels(h) + 0j,
        real_too=True,
    ),
    "decibels and degrees": Misreading(
        "units",
        "the exact curve's decibels and degrees taken for real and imaginary part",
        lambda h: _decibels(h) + 1j * _phase(h) * _DEG,
    ),
    "decibels and radians": Misreading(
        "units",
        "the exact curve's decibels and radians taken for real and imaginary part",
        lambda h: _decibels(h) + 1j * _phase(h),
    ),
    "magnitude and degrees": Misreading(
        "units",
        "the exact curve's magnitude and degrees taken for real and imaginary part",
        lambda h: np.abs(h) + 1j * _phase(h) * _DEG,
    ),
    "magnitude and radians": Misreading(
        "units",
        "the exact curve's magnitude and radians taken for real and imaginary part",
        lambda h: np.abs(h) + 1j * _phase(h),
    ),
    "magnitude alone": Misreading(
        "units", "the exact curve's magnitude with its phase left out", lambda h: np.abs(h) + 0j
    ),
    "real part alone": Misreading(
        "units", "the exact curve's real part with its imaginary part left out", lambda h: np.real(h) + 0j
    ),
    "magnitude as decibels": Misreading(
        "units",
        "the exact curve with its plain magnitude read as decibels",
        lambda h: 10 ** np.minimum(np.abs(h) / 20, _LARGEST_DB / 20) * np.exp(1j * _phase(h)),
    ),
    "power decibels": Misreading(
        "units",
        "the square root of the exact curve's magnitude, as when 10 log10 stands for 20 log10",
        lambda h: _turned(np.sqrt(np.abs(h)), _phase(h)),
    ),
    "power": Misreading(
        "units",
        "the square of the exact curve's magnitude, as when power stands for voltage",
        lambda h: _turned(np.abs(h) ** 2, _phase(h)),
    ),
}

# By what the results' frequencies are to be multiplied to be hertz, and what was done.
AXES: dict[str, tuple[float, str]] = {
    "rad/s as hertz": (1 / (2 * math.pi), "rad/s written where hertz are expected"),
    "hertz as rad/s": (2 * math.pi, "hertz divided by 2 pi once too often"),
    "kilohertz": (1e3, "kilohertz written where hertz are expected"),
    "megahertz": (1e6, "megahertz written where hertz are expected"),
    "gigahertz": (1e9, "gigahertz written where hertz are expected"),
    "hertz as kilohertz": (1e-3, "hertz read as kilohertz"),
    "hertz as megahertz": (1e-6, "hertz read as megahertz"),
}
