"""The layout of a text table: where its header stands, what parts its columns, and what marks decimals."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from ..errors import ResultsError
from ._csv_words import COLUMNS_REMEDY, axis_of, is_axis_unit, is_unit, with_unit

# Limits on strangers' files, stated in the README.
MAX_COLUMNS = 100_000
MAX_HEADER_LINES = 10_000  # comments and notes above the header row
MAX_HEADER_LENGTH = 16 * 1024 * 1024

COMMENT_MARKS = ("#", "%", "!", "//")
NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eEdD][+-]?[0-9]+)?")
CLOSE_QUOTES = "Close every quote in its own line."
_SEPARATORS = (";", "\t", ",", " ")
_MARK = re.compile(r"(?:[#%!]+|//+)\s*")
_COMMA_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:[.,][0-9]+)*\.?|[.,][0-9]+)(?:[eEdD][+-]?[0-9]+)?")
_NUMBER_STARTS = frozenset('+-.,0123456789"')
_NOTE = re.compile(r"[^,;\t]{1,80}[:=].*")
_BLANK_CELLS = re.compile(r'"[^"]*"|\S+')
_UNIT_CELL = re.compile(r"[(\[][^()\[\]]*[)\]]")
# A comma that cannot part thousands: after 0, after four digits or none; before one, two or four digits, or
# in a number with an exponent.
_DECIMAL_COMMA = re.compile(
    r"(?<![0-9.,])(?:0[0-9]*|[0-9]{4,}|),[0-9]|[0-9],(?:[0-9]{1,2}|[0-9]{4,})(?![0-9])|[0-9],[0-9]+[eEdD]"
)
_COMMA = re.compile(r"[0-9]{1,3}(?:,[0-9]{3})+(?:\.[0-9]*)?")
_POINT = re.compile(r"[0-9]\.[0-9]")
_QUOTED_COMMA = re.compile(r'"[^"\n]*[0-9],[0-9][^"\n]*"')


@dataclass(frozen=True, slots=True)
class Layout:
    """Where a table lies in its text.

    names: the header's cells, () where there is no header; line: its line, or that of the first row
    body, body_line: the character at which the rows begin, and its line
    separator: `;`, a tab, `,`, or a blank for any run of blanks
    width: cells in a row; trailing: whether rows end with one more separator
    header: the header's text, by which a second one is known
    notes: how many lines above the header are neither blank nor comments
    """

    names: tuple[str, ...]
    line: int
    body: int
    body_line: int
    separator: str
    width: int
    trailing: bool = False
    decimal_comma: bool = False
    header: str = ""
    notes: int = 0


@dataclass(frozen=True, slots=True)
class _Line:
    """A line that is not blank; `start` is its first character, `stop` that of the next one."""

    number: int
    start: int
    stop: int
    text: str

    @property
    def is_comment(self) -> bool:
        return self.text.startswith(COMMENT_MARKS)

    @property
    def bare(self) -> str:
        """The text without the mark of a comment."""
        mark = _MARK.match(self.text)
        return self.text[mark.end() :] if mark else self.text


@dataclass(frozen=True, slots=True)
class _Row:
    """The first line of nothing but numbers."""

    line: _Line
    separator: str
    width: int
    trailing: bool


def find_layout(text: str, source: str) -> Layout:
    """Where the table lies in `text`. Raises ResultsError where there is none, naming the line."""
    before: list[_Line] = []
    row: _Row | None = None
    for line in _lines(text):
        if (row := _numbers(line)) is not None or len(before) > MAX_HEADER_LINES:
            break
        before.append(line)
    header = _header_line(before, row, source)
    if header is not None:
        layout = _with_header(text, header, row, source)
        notes = sum(not line.is_comment for line in before if line.number < header.number)
    elif row is not None:
        line = row.line
        layout = Layout((), line.number, line.start, line.number, row.separator, row.width, row.trailing)
        notes = sum(not line.is_comment for line in before)
    else:
        where = f" among its first {MAX_HEADER_LINES} lines" if len(before) > MAX_HEADER_LINES else ""
        raise ResultsError(f"it has no header row{where}.", file=source, remedy=COLUMNS_REMEDY)
    return replace(layout, decimal_comma=_has_decimal_comma(text, layout, source), notes=notes)


def _lines(text: str) -> Iterator[_Line]:
    """The lines that are not blank."""
    start, number = 0, 1
    while start < len(text):
        end = text.find("\n", start)
        stop = end + 1 if end >= 0 else len(text)
        content = text[start : min(stop, start + MAX_HEADER_LENGTH + 1)].strip(" \r\n")
        if content.strip():
            yield _Line(number, start, stop, content)
        start, number = stop, number + 1


def _numbers(line: _Line) -> _Row | None:
    """The line as a row of two numbers or more; None where it is none."""
    text = line.text.strip()
    if text[0] not in _NUMBER_STARTS or line.is_comment or len(line.text) > MAX_HEADER_LENGTH:
        return None
    for separator in _SEPARATORS:
        cells = cells_of(text, separator)
        trailing = len(cells) > 2 and not cells[-1] and separator != " "
        cells = cells[:-1] if trailing else cells
        pattern = NUMBER if separator == "," and '"' not in text else _COMMA_NUMBER
        if len(cells) > 1 and all(pattern.fullmatch(cell) for cell in cells):
            return _Row(line, separator, len(cells), trailing)
    return None


def cells_of(row: str, separator: str) -> list[str]:
    """The cells of one line, quotes taken off, blanks around them too. Raises csv.Error."""
    if separator == " ":
        return [cell.strip('"') for cell in _BLANK_CELLS.findall(row)]
    if '"' not in row:
        return [cell.strip() for cell in row.split(separator)]
    try:
        found = next(csv.reader([row], delimiter=separator, strict=True, skipinitialspace=True), [])
    except csv.Error:
        return []
    return [cell.strip() for cell in found]


def _header_line(before: Sequence[_Line], row: _Row | None, source: str) -> _Line | None:
    """The line that names the columns; None where there is none. Raises ResultsError for two of them."""
    plain: list[_Line] = []
    exact: list[_Line] = []
    for line in before[:MAX_HEADER_LINES]:
        separator = _header_separator(line, row)
        if separator is None:
            continue
        cells = _header_cells(line.bare, separator, row)
        # In a note, "Time, 12:03", a number follows; a comment names columns only if it names all of them.
        if any(cell[:1].isdigit() for cell in cells[1:]) or (exact and _are_units(cells)):
            continue
        if row is not None and len(cells) == row.width:
            exact.append(line)
        if not line.is_comment:
            plain.append(line)
    named = [line for line in exact if not line.is_comment]
    if len(named) > 1:
        first, second = (line.number for line in named[-2:])
        message = f"it has two header rows, on line {first} and on line {second}."
        raise ResultsError(message, file=source, line=second, remedy="Keep one of the two.")
    found = named or plain or exact
    return found[-1] if found else _unknown_header(before, row)


def _are_units(cells: Sequence[str]) -> bool:
    """True for a row of units, as it stands below a header."""
    return is_axis_unit(cells[0]) and all(not cell or is_unit(cell) for cell in cells)


def _unknown_header(before: Sequence[_Line], row: _Row | None) -> _Line | None:
    """A line that stands where a header would, though it begins with no axis."""
    plain = [line for line in before if not line.is_comment]
    if row is None:
        return plain[0] if plain and len(before) <= MAX_HEADER_LINES else None
    last = plain[-1] if plain else None
    if last is None:
        return None
    cells = _header_cells(last.text, row.separator, row)
    broken = '"' in last.text and not cells
    return last if broken or (len(cells) == row.width and not _NOTE.fullmatch(last.text)) else None


def _header_separator(line: _Line, row: _Row | None) -> str | None:
    """What parts the cells of a line whose first cell is an axis; None for any other line."""
    text = line.bare[:MAX_HEADER_LENGTH]
    fitting = None
    for separator in _SEPARATORS if row is None else (row.separator, *_SEPARATORS):
        cells = _header_cells(text, separator, row)
        if len(cells) > 1 and cells[0] and axis_of(cells[0]) is not None:
            if row is None or len(cells) == row.width:
                return separator
            fitting = fitting or separator
    alone = row is None and axis_of(text.strip(' "')) is not None
    return fitting or ("," if alone else None)


def _header_cells(text: str, separator: str, row: _Row | None) -> list[str]:
    """The cells of a header; between blanks a unit belongs to the word before it."""
    text = text.strip(" ")
    if separator != " ":
        return cells_of(text, separator)
    cells: list[str] = []
    for cell in cells_of(text, " "):
        if cells and _UNIT_CELL.fullmatch(cell):
            cells[-1] += f" {cell}"
        else:
            cells.append(cell)
    wide = [cell.strip() for cell in re.split(r"\s{2,}", text)]
    # "Frequency (Hz)   Gain (dB)   Phase shift (deg)": more than one blank parts the columns.
    fits = row is not None and len(cells) != row.width and len(wide) == row.width
    return wide if fits else cells


def _with_header(text: str, header: _Line, row: _Row | None, source: str) -> Layout:
    separator = _header_separator(header, row) or (row.separator if row is not None else ",")
    names = _names(header, separator, row, source)
    body, body_line = header.stop, header.number + 1
    below = next(_lines(text[header.stop : header.stop + MAX_HEADER_LENGTH]), None)
    # What parts the header may be a comma where blanks part the rows.
    parting = row.separator if row is not None else separator
    if below is not None and (row is None or header.number + below.number < row.line.number):
        units = _header_cells(below.bare, separator, row)
        if len(units) == len(names) and _are_units(units):
            line = header.number + below.number
            names = _joined(names, units, line, source)
            body, body_line = header.stop + below.stop, line + 1
    if row is not None and row.trailing and not names[-1]:
        names = names[:-1]
    trailing = row is not None and row.trailing and row.width == len(names)
    return Layout(names, header.number, body, body_line, parting, len(names), trailing, header=header.text)


def _names(header: _Line, separator: str, row: _Row | None, source: str) -> tuple[str, ...]:
    """The names in the header row. Raises ResultsError."""
    why, remedy = "", "Keep only what is needed."
    text = header.bare
    if len(text) > MAX_HEADER_LENGTH or text.count(separator) >= MAX_COLUMNS:
        why = f"it has more than {MAX_COLUMNS} columns."
    elif "\r" in text:
        why, remedy = "its lines end with a carriage return alone.", "Save it with line ends LF or CR LF."
    elif '"' in text and not cells_of(text, separator):
        why, remedy = "the header row cannot be read: a quote is not closed.", CLOSE_QUOTES
    if why:
        raise ResultsError(why, file=source, line=header.number, remedy=remedy)
    return tuple(_header_cells(text, separator, row))


def _joined(names: Sequence[str], units: Sequence[str], line: int, source: str) -> tuple[str, ...]:
    joined = []
    for name, unit in zip(names, units, strict=True):
        both = with_unit(name, unit)
        if both is None:
            message = f"the unit {unit!r} stands under the header {name!r}, which says another."
            raise ResultsError(message, file=source, line=line, remedy="Keep the right one of the two.")
        joined.append(both)
    return tuple(joined)


def _has_decimal_comma(text: str, layout: Layout, source: str) -> bool:
    """True where commas stand for decimal points. Raises ResultsError where they may part thousands."""
    if layout.separator == ",":
        body = "\n".join(_QUOTED_COMMA.findall(text, layout.body)) if '"' in text else ""
    else:
        body = text if text.find(",", layout.body) >= 0 else ""
    start = layout.body if body is text else 0
    comma = _COMMA.search(body, start)
    if _DECIMAL_COMMA.search(body, start):
        return True
    if comma is None:
        return False
    at = text.find(comma[0], layout.body)
    line = layout.body_line + text.count("\n", layout.body, at)
    found = comma[0]
    what = "marks thousands" if _POINT.search(body, start) else "may mark thousands or decimals"
    message = f"the comma in {found!r} {what}."
    remedy = "Write numbers without marks between thousands, and with a decimal point."
    raise ResultsError(message, file=source, line=line, remedy=remedy)
