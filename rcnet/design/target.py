"""What a design is to reach, and from which parts it may be made."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

from ..values import Tolerance

Kind = Literal["lowpass", "highpass", "bandpass", "smoothing", "debounce"]
KINDS: tuple[Kind, ...] = ("lowpass", "highpass", "bandpass", "smoothing", "debounce")

MOST_SECTIONS: dict[str, int] = {"lowpass": 6, "highpass": 6, "bandpass": 2, "smoothing": 3, "debounce": 1}
RESISTORS = (1e3, 1e6)  # ohm; below, a filter is a burden to what drives it, above, leakage counts
CAPACITORS = (100e-12, 10e-6)  # F; below, a board's own capacitance counts, above come electrolytics
KEEP = 5


@dataclass(frozen=True, slots=True)
class Parts:
    """The parts a design may be made of: an E series (IEC 60063), a range in base units, a tolerance."""

    series: str
    low: float
    high: float
    tolerance: Tolerance


@dataclass(frozen=True, slots=True)
class Target:
    """What a design is to reach; all in base units, attenuation in dB, None where it is not asked for.

    source, load: ohm, in series with the input and from the output to ground; 0 and infinite where there is
    none. Both are as exact as the resistors chosen.
    sections: None leaves the number to the search, which takes as few as do
    low, high: the thresholds of a debounced input, V
    """

    kind: Kind
    resistors: Parts
    capacitors: Parts
    sections: int | None = None
    keep: int = KEEP
    source: float = 0.0
    load: float = field(default=math.inf)
    cutoff: float | None = None
    lower: float | None = None
    upper: float | None = None
    attenuation: float | None = None
    at: float | None = None
    ripple: float | None = None
    settling: float | None = None
    carrier: float | None = None
    supply: float | None = None
    bounce: float | None = None
    low: float | None = None
    high: float | None = None

    @property
    def down(self) -> float:
        """Every time constant over its nominal value where every part is as small as it may be."""
        return (1 + self.resistors.tolerance.low) * (1 + self.capacitors.tolerance.low)

    @property
    def up(self) -> float:
        """Every time constant over its nominal value where every part is as great as it may be."""
        return (1 + self.resistors.tolerance.high) * (1 + self.capacitors.tolerance.high)


__all__ = ["CAPACITORS", "KEEP", "KINDS", "MOST_SECTIONS", "RESISTORS", "Kind", "Parts", "Target"]
