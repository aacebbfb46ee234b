"""The numbers of one plot of a raw file, column by column."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
import numpy.typing as npt

from ._raw_layout import RUN_AGAIN, Plot, RawFile
from .curve import FloatArray
from .digits import MAX_NUMBER_LENGTH, written_digits

ValueArray = npt.NDArray[Any]  # float64 or complex128

DOUBLE_DIGITS = 17  # so many bring back every double
_CHUNK = 1 << 20  # text is turned into numbers this many bytes at a time
_WHITE = re.compile(rb"\s")
_NUMBER = re.compile(rb"[+-]?(([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?|nan|inf|infinity)", re.IGNORECASE)
_DAMAGED = "The data are damaged; run the simulation again."


def binary_columns(file: RawFile, plot: Plot, order: str, only: int | None = None) -> list[ValueArray]:
    """Every variable of a binary plot, shapes (its length,), or `only` the one of that index.

    `order` is '<' or '>', the byte order of the file; the arrays are native.
    """
    dtype = np.dtype(order + ("c16" if plot.is_complex else "f8"))
    wanted = range(len(plot.variables)) if only is None else range(only, only + 1)
    pieces: dict[int, list[ValueArray]] = {index: [] for index in wanted}
    offset = plot.start
    for begin, end, present in plot.segments:
        count = (end - begin) * len(present)
        block = np.frombuffer(file.data, dtype, count, offset).reshape(end - begin, len(present))
        offset += block.nbytes
        for column, index in enumerate(present):
            if index in pieces:
                pieces[index].append(block[:, column].astype(dtype.newbyteorder("=")))
    return [_joined(pieces[index], plot.variables[index].length) for index in wanted]


def _joined(pieces: list[ValueArray], length: int) -> ValueArray:
    return (pieces[0] if len(pieces) == 1 else np.concatenate(pieces))[:length]


def text_columns(file: RawFile, plot: Plot) -> tuple[list[ValueArray], int]:
    """Every variable of a plot written as text, and the most digits one of their numbers is written with.

    Raises ResultsError for a word that is no number, for too few or too many, and for points out of order.
    """
    numbers, digits = _text_numbers(file, plot)
    pieces: list[list[ValueArray]] = [[] for _ in plot.variables]
    offset = 0
    for begin, end, present in plot.segments:
        width = 1 + len(present) * (2 if plot.is_complex else 1)
        block = numbers[offset : offset + (end - begin) * width].reshape(end - begin, width)
        offset += block.size
        _check_indices(file, plot, block[:, 0], begin)
        values: ValueArray = np.ascontiguousarray(block[:, 1:])
        if plot.is_complex:
            values = values.view(np.complex128)
        for column, index in enumerate(present):
            pieces[index].append(values[:, column].copy())
    columns = zip(pieces, plot.variables, strict=True)
    return [_joined(piece, variable.length) for piece, variable in columns], digits


def _check_indices(file: RawFile, plot: Plot, indices: FloatArray, begin: int) -> None:
    wrong = np.flatnonzero(indices != np.arange(begin, begin + len(indices)))
    if wrong.size:
        row = int(wrong[0])
        message = f"plot {plot.name!r}: where point {begin + row} was expected, {indices[row]:.16g} stands."
        raise file.error(message, _DAMAGED)


def _text_numbers(file: RawFile, plot: Plot) -> tuple[FloatArray, int]:
    """All numbers of a text plot, the points' indices among them, and the most digits one is written with."""
    wanted = plot.points + plot.numbers * (2 if plot.is_complex else 1)
    blocks: list[FloatArray] = []
    found = digits = 0
    position = plot.start
    while position < plot.stop and found <= wanted:
        white = _WHITE.search(file.data, min(position + _CHUNK, plot.stop), plot.stop)
        end = white.end() if white else plot.stop
        tokens = file.data[position:end].replace(b",", b" ").split()
        blocks.append(_floats(file, plot, tokens, position, end))
        found += len(tokens)
        if digits < DOUBLE_DIGITS:
            # The points' indices are whole numbers and say nothing about the values' digits.
            cells = [token for token in tokens if b"." in token or b"e" in token or b"E" in token]
            digits = max(digits, int(np.max(written_digits(cells)[1])) if cells else 0)
        position = end
    if found != wanted:
        head = f"plot {plot.name!r}: its {plot.points} points take {wanted} numbers"
        raise file.error(f"{head}, {'more' if found > wanted else found} are there.", RUN_AGAIN)
    return np.concatenate(blocks), digits


def _floats(file: RawFile, plot: Plot, tokens: list[bytes], position: int, end: int) -> FloatArray:
    try:
        # Python's own reader takes '1_000', too.
        plain = file.data.find(b"_", position, end) < 0
        if plain and max(map(len, tokens), default=0) <= MAX_NUMBER_LENGTH:
            return np.fromiter(map(float, tokens), np.float64, len(tokens))
    except ValueError:
        pass
    bad = next(token for token in tokens if len(token) > MAX_NUMBER_LENGTH or not _NUMBER.fullmatch(token))
    message = f"plot {plot.name!r}: {bad[:40].decode('utf-8', 'replace')!r} is not a number."
    raise file.error(message, _DAMAGED, file.data.find(bad, position))
