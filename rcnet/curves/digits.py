"""How far a number written with few digits may lie from the number meant."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

IntArray = npt.NDArray[np.int64]
FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

# No double needs more; a longer one is not a number a program wrote, and one huge cell would
# size every row of the digit table.
MAX_NUMBER_LENGTH = 64


def written_digits(cells: Sequence[str] | Sequence[bytes]) -> tuple[IntArray, IntArray, BoolArray]:
    """What each written number shows of its precision.

    `cells` are ASCII numbers such as `0.0120` or `-1.5e-3`, at most MAX_NUMBER_LENGTH characters each.

    Returns three arrays of shape (len(cells),): the decimals of the mantissa, its significant digits
    (leading zeros left out, trailing ones counted: 0.0120 has 3), whether an exponent is written.
    """
    table = np.array(cells, dtype=np.bytes_)
    # One row per character place: scanning down the rows is several times faster than along them.
    letters = np.ascontiguousarray(table.view(np.uint8).reshape(len(cells), -1).T)
    exponent = np.isin(letters, np.frombuffer(b"eEdD", np.uint8))
    np.logical_or.accumulate(exponent, axis=0, out=exponent)
    digit = (letters >= ord("0")) & (letters <= ord("9")) & ~exponent
    after_point = np.logical_or.accumulate(letters == ord("."), axis=0)
    started = np.logical_or.accumulate(digit & (letters != ord("0")), axis=0)
    decimals: IntArray = np.sum(digit & after_point, axis=0, dtype=np.int64)
    significant: IntArray = np.sum(digit & started, axis=0, dtype=np.int64)
    has_exponent: BoolArray = exponent[-1]
    return decimals, significant, has_exponent


def half_unit(values: FloatArray, significant: int) -> FloatArray:
    """Half a unit of the last of `significant` digits of each value; 0 for a value of 0.

    0.5 * 10^floor(log10|v|) * 10^-(significant - 1), in the values' unit.
    """
    size = np.abs(values)
    decade = np.floor(np.log10(size, out=np.zeros_like(size), where=size > 0))
    # Two powers, not one: 10^(decade - significant + 1) alone would underflow for the smallest doubles.
    half: FloatArray = np.where(size > 0, 0.5 * 10.0**decade * 10.0 ** (1 - significant), 0.0)
    return half
