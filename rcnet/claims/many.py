"""Measures of many samples of one network at once, good enough to guide a search."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError, UnsolvableError
from .many_responses import RESPONSE_MAKERS, Measured
from .many_times import PART_MAKERS, TIME_MAKERS

Float = npt.NDArray[np.float64]
Options = Mapping[str, float | str]

_ROWS = 4096  # samples at a time, to bound the memory taken


def many(
    network: Network, measure: str, of: str | None, options: Options, names: Sequence[str]
) -> Measured | None:
    """A function from part values (samples, names) to the measure of each sample; None where there is none.

    What it gives agrees with `evaluate` to some nine digits, and is nan where it finds no such number.
    """
    try:
        with np.errstate(all="ignore"):
            if measure in PART_MAKERS:
                made = PART_MAKERS[measure](network, names, of, options)
            elif measure in _MAKERS and of is not None:
                made = _MAKERS[measure](network, names, of, options)
            else:
                return None
    except (UndecidedError, np.linalg.LinAlgError):
        return None

    def measured(values: Float) -> Float:
        pieces = [_tried(made, values[k : k + _ROWS]) for k in range(0, len(values), _ROWS)]
        return np.concatenate([np.empty(0), *pieces])

    return measured


def _tried(made: Measured, values: Float) -> Float:
    with np.errstate(all="ignore"):
        try:
            found = made(values)
        except (np.linalg.LinAlgError, UnsolvableError):
            return np.full(len(values), np.nan)
    return np.where(np.isfinite(found), found, np.nan)


_MAKERS = {**RESPONSE_MAKERS, **TIME_MAKERS}

__all__ = ["Measured", "many"]
