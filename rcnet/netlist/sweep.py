"""The frequencies of a sweep, as ngspice 39 makes them."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ..circuit import Sweep
from ..circuit.circuit_file import HIGHEST_FREQUENCY, LOWEST_FREQUENCY
from ..errors import CircuitError

MAX_POINTS = 2_000_000
_RELTOL = 1e-3  # ngspice's default; a point this far beyond the end, in steps, still counts


def frequencies(sweep: Sweep) -> npt.NDArray[np.float64]:
    """The points of an ac sweep, Hz, rising; none where `start` and `stop` leave none, or lie out of range.

    `dec`: n = floor(log10(stop/start) N) steps of one ratio, stretched so that the last point is `stop`;
    `oct`: steps of 2^(1/N) up to `stop`; `lin`: N points evenly spaced, one only where N is 2 (measured on
    ngspice 39.3). Raises CircuitError for more than MAX_POINTS.
    """
    start, stop = sweep.start, sweep.stop
    if not (math.isfinite(stop) and start <= stop) or start < 0 or (start == 0 and sweep.kind != "lin"):
        return np.empty(0)
    if _out_of_range(sweep):
        return np.empty(0)
    step = _step(sweep)
    if step is None:
        return np.array([start])
    if sweep.kind == "lin":
        _require_fewer(sweep, sweep.points)
        # Added and multiplied up one by one, as the simulator does it; its rounding is part of the grid.
        points = np.cumsum(np.concatenate([[start], np.full(sweep.points - 1, step)]))
        return np.asarray(points[points <= stop + step * _RELTOL])
    limit = stop * (1 + step * _RELTOL)
    count = math.log(limit / start) / math.log(step) + 2
    _require_fewer(sweep, count)
    points = np.cumprod(np.concatenate([[start], np.full(math.ceil(count), step)]))
    return np.asarray(points[points <= limit])


def _step(sweep: Sweep) -> float | None:
    """The ratio (`dec`, `oct`) or the distance (`lin`) from point to point; None for a single point."""
    if sweep.stop == sweep.start:
        return None
    if sweep.kind == "lin":
        return (sweep.stop - sweep.start) / (sweep.points - 1) if sweep.points > 2 else None
    if sweep.kind == "oct":
        return math.exp(math.log(2) / sweep.points)
    steps = math.floor(math.log10(sweep.stop / sweep.start) * sweep.points)
    return math.exp(math.log(sweep.stop / sweep.start) / steps) if steps else None


def _out_of_range(sweep: Sweep) -> bool:
    return 0 < sweep.start < LOWEST_FREQUENCY or not LOWEST_FREQUENCY <= sweep.stop <= HIGHEST_FREQUENCY


def _require_fewer(sweep: Sweep, points: float) -> None:
    if points > MAX_POINTS:
        raise CircuitError(
            f"the sweep from {sweep.start:g} Hz to {sweep.stop:g} Hz has {points:.3g} points.",
            remedy=f"Ask for at most {MAX_POINTS}.",
        )


def sweep_fault(sweep: Sweep, *, noise: bool = False) -> str | None:
    """What is wrong with a sweep for ngspice 39, which says nothing of it; None where it is sound."""
    start, stop = sweep.start, sweep.stop
    if not math.isfinite(stop) or start > stop:
        return "it ends below its start, so there is no point in it"
    if start >= 0 and stop > 0 and _out_of_range(sweep):
        return f"only frequencies from {LOWEST_FREQUENCY:g} Hz to {HIGHEST_FREQUENCY:g} Hz are computed"
    if sweep.kind == "lin":
        if start < 0 or (noise and start == 0):
            return f"it begins at {start:g} Hz"
        if noise or sweep.points > 2 or (sweep.points == 1 and start == stop):
            return None
        return f"a simulator takes one point only for `lin {sweep.points}`"
    if start <= 0:
        return f"it begins at {start:g} Hz, and a logarithmic sweep cannot"
    if start == stop:
        return None if sweep.kind == "oct" or noise else "its ends are equal, so there is no point in it"
    if sweep.kind == "dec" and not noise and not _has_a_step(sweep):
        return "it is less than one step wide, with which ngspice never ends"
    return None


def _has_a_step(sweep: Sweep) -> bool:
    steps = math.log10(sweep.stop / sweep.start) * sweep.points
    # ngspice reads whole numbers exactly, others up to a unit off: then a hair's breadth decides.
    whole = all(value == math.floor(value) and value < 2**53 for value in (sweep.start, sweep.stop))
    return steps >= 1 if whole else steps >= 1 + 1e-12
