"""The numbers of a text table, and what their writing shows of their precision."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import chain

import numpy as np
import numpy.typing as npt

from ..errors import ResultsError
from ._csv_layout import CLOSE_QUOTES, COMMENT_MARKS, NUMBER, Layout, cells_of
from .curve import FloatArray
from .digits import MAX_NUMBER_LENGTH, half_unit, written_digits

FULL_DIGITS = 15  # a column written with so many is taken as full doubles
FEWEST_DIGITS = 3  # a column of 0 and 1 is not taken for numbers that may be half a unit off
_CHUNK = 1 << 18  # the body is turned into numbers this many characters at a time
_REMEDY = "Write plain numbers with a decimal point, such as 1.5e-3."


@dataclass(frozen=True, slots=True)
class Digits:
    """What the writing of a table shows, column by column.

    decimals: of each cell, 0 where it has an exponent, shape (rows, columns)
    significant: the most digits of a column; has_exponent: whether a cell has one; shape (columns,)
    """

    decimals: npt.NDArray[np.int8]
    significant: npt.NDArray[np.int64]
    has_exponent: npt.NDArray[np.bool_]

    def uncertainty(self, index: int, values: FloatArray) -> FloatArray:
        """How far each cell may lie from what was meant, by its column's digits.

        Half a unit of the last decimal place where every cell has the same number of decimals (zeros kept, so
        the column was printed with a fixed number). Else half a unit of the last of the column's most
        significant digits, of which FEWEST_DIGITS are taken for granted; at 0, which has none, half a unit of
        the cell's own last decimal. 0 where the column has full doubles.
        """
        written = int(self.significant[index])
        if written >= FULL_DIGITS:
            return np.zeros(len(values))
        decimals = self.decimals[:, index]
        place = 0.5 * 10.0 ** -decimals.astype(np.float64)
        fixed = len(values) > 1 and not self.has_exponent[index] and decimals.min() == decimals.max() > 0
        if not fixed:
            # Whole numbers are no sign of rounding: a 0 is meant as 0, and so is the 0.00e+00 of a %e file.
            at_zero = np.where(decimals > 0, place, 0.0)
            place = np.where(values == 0, at_zero, half_unit(values, max(written, FEWEST_DIGITS)))
        return np.asarray(place, np.float64)


class DigitCount:
    """Gathers `Digits` block by block."""

    def __init__(self, width: int) -> None:
        self.width = width
        self.decimals: list[npt.NDArray[np.int8]] = []
        self.significant = np.zeros(width, np.int64)
        self.has_exponent = np.zeros(width, np.bool_)

    def add(self, cells: Sequence[str]) -> None:
        """Count the cells of some whole rows, row after row."""
        if np.all(self.significant >= FULL_DIGITS):
            return  # no column asks for its decimals any more
        counts = written_digits(cells)
        shown = np.where(counts[2], 0, counts[0]).astype(np.int8)  # at most MAX_NUMBER_LENGTH
        self.decimals.append(shown.reshape(-1, self.width))
        self.significant = np.maximum(self.significant, counts[1].reshape(-1, self.width).max(axis=0))
        self.has_exponent |= counts[2].reshape(-1, self.width).any(axis=0)

    def digits(self) -> Digits:
        """What was gathered."""
        return Digits(np.concatenate(self.decimals), self.significant, self.has_exponent)


@dataclass(frozen=True, slots=True)
class Table:
    """The numbers, shape (rows, columns), with what their writing shows and where each row stands.

    names: the columns'; line: the header's; is_cut: whether the last line has no end
    blocks: first row and, for its rows, the lines, or the first line where none lies between them
    """

    source: str
    names: tuple[str, ...]
    line: int
    numbers: FloatArray
    digits: Digits
    blocks: tuple[tuple[int, int | npt.NDArray[np.int64]], ...]
    is_cut: bool

    def error(self, message: str, row: int, remedy: str) -> ResultsError:
        """The error, at the line of a row counted from 0."""
        first, lines = next(block for block in reversed(self.blocks) if block[0] <= row)
        line = lines + row - first if isinstance(lines, int) else int(lines[row - first])
        return ResultsError(message, file=self.source, line=line, remedy=remedy)

    def at_header(self, message: str, remedy: str) -> ResultsError:
        """The error, at the header."""
        return ResultsError(message, file=self.source, line=self.line, remedy=remedy)

    def column(self, index: int, exponent: int = 0) -> FloatArray:
        """The numbers of a column times a power of ten."""
        return np.ascontiguousarray(self.numbers[:, index]) / 10.0**-exponent

    def uncertainty(self, index: int, exponent: int = 0) -> FloatArray:
        """How far each number may lie from what was meant; see `Digits`."""
        return np.asarray(self.digits.uncertainty(index, self.numbers[:, index]) / 10.0**-exponent)


@dataclass(frozen=True, slots=True)
class _Chunk:
    """Some whole lines that are neither blank nor comments; `lines` as in `Table.blocks`."""

    rows: list[str]
    lines: int | npt.NDArray[np.int64]

    def line(self, row: int) -> int:
        return self.lines + row if isinstance(self.lines, int) else int(self.lines[row])


def read_table(text: str, layout: Layout, source: str) -> Table:
    """The numbers below the header. Raises ResultsError with the line, and the column where there is one."""
    stop = len(text.rstrip())
    width = layout.width
    names = layout.names or tuple(f"column {n + 1}" for n in range(width))
    blocks: list[FloatArray] = []
    places: list[tuple[int, int | npt.NDArray[np.int64]]] = []
    count, rows = DigitCount(width), 0
    for chunk in _chunks(text, layout, stop):
        cells = _cells(chunk, layout, source)
        blocks.append(_floats(cells, chunk, layout, names, source).reshape(-1, width))
        count.add(cells)
        places.append((rows, chunk.lines))
        rows += len(chunk.rows)
    if not blocks:
        message = "there is no row of numbers under the header."
        remedy = "Write the results again; see the log."
        raise ResultsError(message, file=source, line=layout.line, remedy=remedy)
    numbers = np.concatenate(blocks)
    return Table(source, names, layout.line, numbers, count.digits(), tuple(places), stop == len(text))


def _chunks(text: str, layout: Layout, stop: int) -> Iterator[_Chunk]:
    start, line = layout.body, layout.body_line
    while start < stop:
        end = text.find("\n", min(start + _CHUNK, stop), stop)
        chunk = text[start : end if end >= 0 else stop].replace("\r\n", "\n").removesuffix("\r")
        found = _lines_with_rows(chunk.split("\n"), line)
        if found.rows:
            yield found
        line += chunk.count("\n") + 1
        start = end + 1 if end >= 0 else stop


def _lines_with_rows(lines: list[str], first: int) -> _Chunk:
    # Nearly every chunk holds nothing but rows, and then no line needs to be looked at by itself.
    if all(lines) and not any(line[0] in " \t#%!/" for line in lines):
        return _Chunk(lines, first)
    kept = [n for n, line in enumerate(lines) if line.strip() and not line.lstrip().startswith(COMMENT_MARKS)]
    return _Chunk([lines[n] for n in kept], np.array(kept, np.int64) + first)


def _cells(chunk: _Chunk, layout: Layout, source: str) -> list[str]:
    """All cells of some rows, row after row; every row has the width of the header."""
    separator, rows = layout.separator, chunk.rows
    if layout.trailing:
        rows = [row.rstrip(" \t" if separator != "\t" else " ").removesuffix(separator) for row in rows]
    quoted = any('"' in row for row in rows)
    if quoted:
        parted = [_unquoted(row, separator, chunk.line(n), source) for n, row in enumerate(rows)]
        counts = list(map(len, parted))
    elif separator == " ":
        parted = [row.split() for row in rows]
        counts = list(map(len, parted))
    else:
        parted, counts = [], [row.count(separator) + 1 for row in rows]
    for n, found in enumerate(counts):
        if found != layout.width:
            raise _wrong_count(rows[n], found, chunk.line(n), layout, source)
    cells = list(chain.from_iterable(parted)) if parted else separator.join(rows).split(separator)
    if layout.decimal_comma:
        # A point beside decimal commas marks thousands, or belongs to another table; it is no number.
        return [cell.replace(",", ".") if "." not in cell else f"'{cell}'" for cell in cells]
    return cells


def _wrong_count(row: str, found: int, line: int, layout: Layout, source: str) -> ResultsError:
    of = "header" if layout.names else "first row"
    message = f"the line holds {found} fields where the {of} has {layout.width}."
    remedy = f"Give every line the {of}'s number of fields."
    if layout.names and row.strip() == layout.header:
        message, remedy = "the header stands here a second time.", "Write each run to a file of its own."
    elif found == 2 * layout.width and layout.separator == ",":
        remedy = "If its commas are decimal ones, part the columns by semicolons or tabs."
    return ResultsError(message, file=source, line=line, remedy=remedy)


def _unquoted(row: str, separator: str, line: int, source: str) -> list[str]:
    cells = cells_of(row, separator)
    if not cells:
        message = "the line cannot be read: a quote is not closed."
        raise ResultsError(message, file=source, line=line, remedy=CLOSE_QUOTES)
    return cells


def _floats(
    cells: list[str], chunk: _Chunk, layout: Layout, names: tuple[str, ...], source: str
) -> FloatArray:
    """The cells as numbers; the first that is none is named by line and column."""
    # Python's own reader takes '1_000' and other scripts' digits, too, and no Fortran exponent.
    text = "".join(cells)
    if text.isascii() and "_" not in text and max(map(len, cells)) <= MAX_NUMBER_LENGTH:
        plain = [re.sub("[dD]", "e", cell) for cell in cells] if re.search("[dD]", text) else cells
        try:
            numbers = np.fromiter(map(float, plain), np.float64, len(cells))
        except ValueError:
            pass
        else:
            if np.isfinite(numbers).all():
                return numbers
    place = next(n for n, cell in enumerate(cells) if not _is_finite(cell))
    row, column = divmod(place, len(names))
    message, remedy = _not_a_number(chunk.rows[row], cells[place].strip(), names[column], layout)
    raise ResultsError(message, file=source, line=chunk.line(row), remedy=remedy)


def _not_a_number(row: str, cell: str, name: str, layout: Layout) -> tuple[str, str]:
    if layout.names and row.strip() == layout.header:
        return "the header stands here a second time.", "Write each run to a file of its own."
    if layout.decimal_comma and cell.startswith("'"):
        what = f"{cell[:42]}, with a point where other numbers have decimal commas"
        return f"column {name!r} is {what}.", "Write all numbers with a decimal point, without other marks."
    what = f"is {cell[:40]!r}, not a finite number" if cell else "is empty"
    return f"column {name!r} {what}.", _REMEDY


def _is_finite(cell: str) -> bool:
    cell = cell.strip(" \t")
    if len(cell) > MAX_NUMBER_LENGTH or not NUMBER.fullmatch(cell):
        return False
    return bool(np.isfinite(float(cell.lower().replace("d", "e"))))
