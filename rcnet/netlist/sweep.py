"""The frequencies of a sweep, as ngspice 39 makes them."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ..circuit import Sweep

MAX_POINTS = 2_000_000


def frequencies(sweep: Sweep) -> npt.NDArray[np.float64]:
    """The points of an ac sweep, Hz, rising.

    `dec`: n = floor(log10(stop/start) N) steps of one ratio, stretched so that the last point is `stop`;
    `oct`: steps of 2^(1/N) up to `stop`; `lin`: N points evenly spaced (measured on ngspice 39.3).
    """
    if sweep.kind == "lin":
        return np.linspace(sweep.start, sweep.stop, max(sweep.points, 1))
    if sweep.kind == "oct":
        count = math.floor(math.log2(sweep.stop / sweep.start) * sweep.points + 1e-9)
        ratio = math.exp(math.log(2) / sweep.points)
    else:
        count = math.floor(math.log10(sweep.stop / sweep.start) * sweep.points + 1e-9)
        ratio = math.exp(math.log(sweep.stop / sweep.start) / max(count, 1))
    count = min(max(count, 0), MAX_POINTS)
    # Repeated multiplication, as the simulator does it; its rounding is part of the grid.
    return np.asarray(sweep.start * np.cumprod(np.concatenate([[1.0], np.full(count, ratio)])))
