"""Results as comma-separated values (RFC 4180) with rcnet's own column names."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import chain

import numpy as np
import numpy.typing as npt

from ..errors import ResultsError
from .curve import Analysis, ComplexArray, Curve, Curves, FloatArray
from .digits import MAX_NUMBER_LENGTH, half_unit, written_digits

# Limits on strangers' files, stated in the README.
MAX_COLUMNS = 100_000
MAX_HEADER_LINES = 10_000  # comments and blank lines before the header row
MAX_HEADER_LENGTH = 16 * 1024 * 1024

FULL_DIGITS = 15  # a column written with so many is taken as full doubles
FEWEST_DIGITS = 3  # a column of 0 and 1 is not taken for numbers that may be half a unit off
UNNAMED = "response"  # the curve of a trace whose header names no node
_CHUNK = 1 << 18  # the body is turned into numbers this many characters at a time

_AXIS = re.compile(r"(frequency|freq\.?|f|time|t)\s*(?:\[([^\]]*)\]|\(([^)]*)\)|/\s*([^/]*))?", re.IGNORECASE)
_PART = re.compile(r"(.+)\.(real|imag|mag|db|deg|rad)")
# A name and its unit, in brackets of either kind or after a slash. Round brackets follow only a word or
# another bracket: `v(1)` is a node.
_WITH_UNIT = re.compile(
    r"(.*\S)\s*\[([^\[\]]*)\]"
    r"|(.*\)|[^()]*[^()\s])\s*\(([^()]*)\)"
    r"|(.*[^/\s])\s*/\s*(v/v)"
    r"|(.*[^/\s])\s*/\s*([^/\s]+)",
    re.IGNORECASE,
)
_LONGEST_WITH_UNIT = 200  # characters; longer ones are names as they stand
_TRACE = re.compile(r"[vi]\([^()]+\)")
_FUNCTION = re.compile(r"([a-z]+)\(([vi]\([^()]+\))\)|([vi])(db|m|p|r|i)\(([^()]+)\)")
# What a function of a trace, or a word in the header of an unnamed trace, stands for. "angle" and "size"
# become a part by their unit.
_FUNCTIONS = {
    **dict.fromkeys(("re", "real", "r"), "real"),
    **dict.fromkeys(("im", "imag", "i"), "imag"),
    **dict.fromkeys(("mag", "magnitude", "abs", "m"), "size"),
    **dict.fromkeys(("ph", "cph", "phase", "arg", "p"), "angle"),
    "db": "db",
}
_WORDS = {
    **dict.fromkeys(("re", "real", "real part"), "real"),
    **dict.fromkeys(("im", "imag", "imaginary", "imaginary part"), "imag"),
    **dict.fromkeys(("mag", "magnitude", "amplitude"), "size"),
    **dict.fromkeys(("phase", "angle"), "angle"),
    "gain": "gain",
}
_PART_UNITS = {"db": "db", "deg": "deg", "°": "deg", "rad": "rad"}
_LINEAR_UNITS = {"v": 0, "mv": -3, "v/v": 0, "1": 0, "a": 0, "ma": -3}  # factors of ten to V or A
_NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eEdD][+-]?[0-9]+)?")
_PAIRS = frozenset(
    frozenset(pair.split()) for pair in ("real imag", "mag deg", "mag rad", "db deg", "db rad")
)
_NOISE = ("onoise", "inoise")
# Factors of ten from the unit in the header to Hz or seconds.
_FREQUENCY_UNITS = {
    "Hz": 0,
    "mHz": -3,
    "kHz": 3,
    "KHz": 3,
    "khz": 3,
    "KHZ": 3,
    "MHz": 6,
    "MHZ": 6,
    "GHz": 9,
    "GHZ": 9,
}
_TIME_UNITS = {"s": 0, "sec": 0, "ms": -3, "us": -6, "µs": -6, "μs": -6, "ns": -9, "ps": -12, "fs": -15}

_COLUMNS_REMEDY = (
    "Name the first column 'frequency' or 'time'. A response is two columns: 'v(out).real' and "
    "'v(out).imag', 'v(out).mag' or 'v(out).db' with 'v(out).deg' or 'v(out).rad', 're(v(out))' and "
    "'im(v(out))', 'mag(v(out))' or 'vdb(out)' with 'phase(v(out)) [deg]' or 'vp(out) [rad]', or for one "
    "trace without a node 'Gain (dB)' or 'Magnitude' with 'Phase (deg)' or 'Phase (rad)'. "
    "A curve along time is one: 'v(out)'."
)
_UNITS_REMEDY = "The units read are dB, deg, °, rad, V, mV, A, mA, V/V and 1."


@dataclass(frozen=True, slots=True)
class _Header:
    """The header row: its line, where the body begins, and what each column after the first holds.

    curves: name to {part: column}; the part of a real curve is ""
    millivolts: the columns to be divided by 1000
    unnamed: whether the curve UNNAMED comes from a trace without a node
    """

    line: int
    body: int
    names: tuple[str, ...]
    along: str
    exponent: int
    curves: dict[str, dict[str, int]]
    millivolts: frozenset[int]
    unnamed: bool


@dataclass(frozen=True, slots=True)
class _Column:
    """What one header says: the curve, its part, whether in mV, and whether a node is named."""

    curve: str
    part: str
    in_millivolts: bool = False
    is_named: bool = True


@dataclass(frozen=True, slots=True)
class _Table:
    """The numbers, shape (rows, columns), and what their writing shows.

    decimals: of each cell, 0 where it has an exponent, shape (rows, columns)
    significant: the most digits of a column; has_exponent: whether a cell has one; shape (columns,)
    """

    source: str
    header: _Header
    numbers: FloatArray
    decimals: npt.NDArray[np.int8]
    significant: npt.NDArray[np.int64]
    has_exponent: npt.NDArray[np.bool_]

    def error(self, message: str, row: int, remedy: str) -> ResultsError:
        """The error, at the line of a row counted from 0."""
        return ResultsError(message, file=self.source, line=self.header.line + 1 + row, remedy=remedy)

    def column(self, index: int) -> FloatArray:
        """The numbers of a column, in V where the header says mV."""
        return np.ascontiguousarray(self.numbers[:, index]) / self._divisor(index)

    def uncertainty(self, index: int) -> FloatArray:
        """How far each cell may lie from what was meant, by its column's digits.

        Half a unit of the last decimal place where every cell has the same number of decimals (zeros kept, so
        the column was printed with a fixed number). Else half a unit of the last of the column's most
        significant digits, of which FEWEST_DIGITS are taken for granted; at 0, which has none, half a unit of
        the cell's own last decimal. 0 where the column has full doubles.
        """
        values, written = self.numbers[:, index], int(self.significant[index])
        if written >= FULL_DIGITS:
            return np.zeros(len(values))
        decimals = self.decimals[:, index]
        place = 0.5 * 10.0 ** -decimals.astype(np.float64)
        fixed = len(values) > 1 and not self.has_exponent[index] and decimals.min() == decimals.max() > 0
        if not fixed:
            # Whole numbers are no sign of rounding: a 0 is meant as 0, and so is the 0.00e+00 of a %e file.
            at_zero = np.where(decimals > 0, place, 0.0)
            place = np.where(values == 0, at_zero, half_unit(values, max(written, FEWEST_DIGITS)))
        uncertainty: FloatArray = place / self._divisor(index)
        return uncertainty

    def _divisor(self, index: int) -> float:
        return 1000.0 if index in self.header.millivolts else 1.0


def parse_csv(text: str, source: str) -> Curves:
    """The curves of a CSV file whose columns are named as `write_csv` names them, or in other usual ways.

    The first column is `frequency` or `time`, with a unit where it is not Hz or s: `Time (ms)`, `f/kHz`.
    Curves along frequency are complex: `v(out).real` with `v(out).imag`, `.mag` or `.db` with `.deg` or
    `.rad`, also as `re(v(out))`, `vdb(out)`, `phase(v(out)) [deg]`; real columns there are noise,
    `onoise_spectrum`. A trace without a node, `Gain (dB)` with `Phase (deg)`, becomes the curve `response`,
    with a remark. Comment lines (`#`, `%`) may stand before the header. Few digits show as `resolution`.

    Raises ResultsError with the line, and the column where there is one.
    """
    text = text.removeprefix("\ufeff")
    header = _header(text, source)
    table, remarks = _body(text, header, source)
    if header.unnamed:
        remarks += ("the trace names no node; it is taken for the circuit's output",)
    axis = _axis(table)
    curves = tuple(_curve(name, parts, table, *axis) for name, parts in header.curves.items())
    return Curves(source, curves, remarks=remarks)


def _header(text: str, source: str) -> _Header:
    line, start = 1, 0
    while start < len(text) and line <= MAX_HEADER_LINES:
        end = text.find("\n", start)
        stop = end if end >= 0 else len(text)
        row = text[start : min(stop, start + MAX_HEADER_LENGTH + 1)].strip("\r ")
        if row.strip() and not row.lstrip().startswith(("#", "%")):
            names = _names(row, line, source)
            along, exponent = _along(names[0], line, source)
            body = min(stop + 1, len(text))
            columns = [_column(name, along, line, source) for name in names[1:]]
            millivolts = frozenset(n for n, column in enumerate(columns, start=1) if column.in_millivolts)
            unnamed = any(not column.is_named for column in columns)
            plan = _plan(names, columns, along, line, source)
            return _Header(line, body, names, along, exponent, plan, millivolts, unnamed)
        start, line = stop + 1, line + 1
    where = f" among its first {MAX_HEADER_LINES} lines" if start < len(text) else ""
    raise ResultsError(f"it has no header row{where}.", file=source, remedy=_COLUMNS_REMEDY)


def _names(row: str, line: int, source: str) -> tuple[str, ...]:
    """The column names of the header row."""
    why, remedy = "", "Write it again with commas between the columns and points in the numbers."
    fields: list[str] = []
    if len(row) > MAX_HEADER_LENGTH or row.count(",") >= MAX_COLUMNS:
        why, remedy = f"it has more than {MAX_COLUMNS} columns.", "Keep only what is needed."
    elif "\r" in row:
        why, remedy = "its lines end with a carriage return alone.", "Save it with line ends LF or CR LF."
    elif _starts_with_axis(row, ";"):
        why = "its columns are parted by semicolons, not by commas."
    elif _starts_with_axis(row, "\t"):
        why = "its columns are parted by tabs, not by commas."
    else:
        try:
            fields = next(csv.reader([row], strict=True), [])
        except csv.Error as exc:
            why, remedy = f"the header row cannot be read: {exc}.", "Close every quote in its own line."
    if why:
        raise ResultsError(why, file=source, line=line, remedy=remedy)
    return tuple(field.strip() for field in fields)


def _starts_with_axis(row: str, mark: str) -> bool:
    first, found, _ = row.partition(mark)
    return bool(found) and _AXIS.fullmatch(first.strip(' "')) is not None


def _along(name: str, line: int, source: str) -> tuple[str, int]:
    """What the first column runs along, and the power of ten that brings it to Hz or s."""
    match = _AXIS.fullmatch(name)
    if match is None:
        found = "a number" if _NUMBER.fullmatch(name) else "no axis"
        message = f"the header row begins with {name[:60]!r}, which is {found}."
        raise ResultsError(message, file=source, line=line, remedy=_COLUMNS_REMEDY)
    along = "time" if match[1].lower().startswith("t") else "frequency"
    units = _TIME_UNITS if along == "time" else _FREQUENCY_UNITS
    unit = (match[2] or match[3] or match[4] or "").strip()
    plain = unit.lower() in ("", "hz" if along == "frequency" else "s")
    exponent = 0 if plain else units.get(unit)
    if exponent is None:
        message = f"{unit[:20]!r} is no unit of {along} that is read."
        known = "s, ms, us, ns, ps, fs" if along == "time" else "Hz, mHz, kHz, MHz, GHz"
        raise ResultsError(message, file=source, line=line, remedy=f"Use one of {known}, spelled so.")
    return along, exponent


def _column(name: str, along: str, line: int, source: str) -> _Column:
    """What a column holds by its header; a name of no known form is the name of a real curve."""
    base, unit = _split_unit(name)
    curve, kind = _quantity(base.lower())
    # Along time a function of a trace, or a word such as "magnitude", is but a name.
    if not kind or (along == "time" and kind != "trace" and not _PART.fullmatch(base.lower())):
        return _Column(name.lower(), "")
    if unit.lower() not in ("", *_LINEAR_UNITS, *_PART_UNITS) or unit in ("MV", "Mv", "MA", "Ma"):
        part, why, remedy = "", f"has the unit {unit[:20]!r}, which is not read.", _UNITS_REMEDY
    else:
        part, why, remedy = _part(kind, unit, base)
    if why:
        message = f"the column {name[:60]!r} {why}"
        raise ResultsError(message, file=source, line=line, remedy=remedy)
    if kind == "trace" and along == "time" and part == "mag":
        part = ""
    return _Column(curve or UNNAMED, part, unit in ("mV", "mv"), bool(curve))


def _part(kind: str, unit: str, base: str) -> tuple[str, str, str]:
    """The part that a quantity in a unit is, and what is wrong with it, with the remedy."""
    by_unit = _PART_UNITS.get(unit.lower(), "")
    misfit = f"cannot have the unit {unit!r}."
    if kind == "trace":
        return by_unit or ("mag" if unit else ""), "", ""
    if kind == "angle":
        why = misfit if unit else "is a phase without a unit."
        wrong = by_unit not in ("deg", "rad")
        return by_unit, why if wrong else "", f"Say deg or rad in the header: '{base} [deg]'."
    if kind == "gain" and not unit:
        return "", "does not say whether it is in dB.", "Write 'Gain (dB)' or 'Gain (V/V)'."
    if kind in ("gain", "size"):
        wrong = by_unit not in ("", "db")
        return by_unit or "mag", misfit if wrong else "", "Use dB, V, mV, V/V or 1."
    own = kind if kind in ("db", "deg", "rad") else ""
    wrong = bool(unit) and by_unit != own
    return kind, misfit if wrong else "", f"Use {own}." if own else "Use V, mV, V/V or 1."


def _split_unit(name: str) -> tuple[str, str]:
    """The name without its unit, and the unit; a bracket or slash that belongs to the name stays in it."""
    match = _WITH_UNIT.fullmatch(name) if len(name) <= _LONGEST_WITH_UNIT else None
    if match is None or _quantity(name.lower())[1]:
        return name, ""
    base, unit = (found for found in match.groups() if found is not None)
    return (base, unit.strip()) if _quantity(base.lower())[1] else (name, "")


def _quantity(base: str) -> tuple[str, str]:
    """The curve ("" where no node is named) and what of it; the latter is "" where the form is unknown."""
    if match := _PART.fullmatch(base):
        return match[1], match[2]
    if match := _FUNCTION.fullmatch(base):
        function, curve = (match[1], match[2]) if match[1] else (match[4], f"{match[3]}({match[5]})")
        return curve, _FUNCTIONS.get(function, "")
    if _TRACE.fullmatch(base):
        return base, "trace"
    return "", _WORDS.get(base, "")


def _plan(
    names: tuple[str, ...], columns: list[_Column], along: str, line: int, source: str
) -> dict[str, dict[str, int]]:
    """Which columns make which curve; refuses doubles, halves of a pair, and responses without phase."""
    curves: dict[str, dict[str, int]] = {}
    for index, column in enumerate(columns, start=1):
        if not names[index]:
            message = f"column {index + 1} has no name."
            raise ResultsError(message, file=source, line=line, remedy=_COLUMNS_REMEDY)
        parts = curves.setdefault(column.curve, {})
        if column.part in parts:
            again = names[index] == names[parts[column.part]] or not column.part
            same = "" if again else f", first as {names[parts[column.part]]!r}"
            message = f"the column {names[index]!r} appears twice{same}."
            raise ResultsError(message, file=source, line=line, remedy="Keep one of the two.")
        parts[column.part] = index
    if not curves:
        raise ResultsError("it has no column but the axis.", file=source, line=line, remedy=_COLUMNS_REMEDY)
    for curve, parts in curves.items():
        why, remedy = _misfit(curve, {part: names[index] for part, index in parts.items()}, along)
        if why:
            raise ResultsError(why, file=source, line=line, remedy=remedy)
    return curves


def _misfit(curve: str, parts: dict[str, str], along: str) -> tuple[str, str]:
    """What is wrong with the parts a curve has, {part: header}, with the remedy; empty where all is well."""
    if set(parts) == {""}:
        if along == "time" or curve.startswith(_NOISE):
            return "", ""
        name = parts[""]
        return f"the column {name!r} is real, and a magnitude alone is no response.", _COLUMNS_REMEDY
    found = ", ".join(repr(name) for _, name in sorted(parts.items()))
    if along == "time":
        name = "v(out)" if curve == UNNAMED else curve
        return f"a curve along time is real, but there is {found}.", f"Name the column {name!r}."
    if frozenset(parts) in _PAIRS:
        return "", ""
    partner = {"real": "imag", "imag": "real", "mag": "deg", "db": "deg", "deg": "mag", "rad": "mag"}
    words = {"deg": "Phase (deg)", "mag": "Magnitude", "real": "real", "imag": "imag"}
    if len(parts) == 1:
        wanted = partner[next(iter(parts))]
        name = words[wanted] if curve == UNNAMED else f"{curve}.{wanted}"
        return f"{found} has no partner.", f"Add the column {name!r}."
    return f"{found} do not make one complex curve.", _COLUMNS_REMEDY


def _body(text: str, header: _Header, source: str) -> tuple[_Table, tuple[str, ...]]:
    stop = len(text.rstrip())
    width = len(header.names)
    blocks: list[FloatArray] = []
    decimals: list[npt.NDArray[np.int8]] = []
    significant = np.zeros(width, np.int64)
    has_exponent = np.zeros(width, np.bool_)
    for line, chunk in _chunks(text, header, stop):
        cells = _cells(chunk, width, line, source)
        blocks.append(_floats(cells, chunk, header.names, line, source).reshape(-1, width))
        if np.all(significant >= FULL_DIGITS):
            continue  # no column asks for its decimals any more
        counts = written_digits(cells)
        shown = np.where(counts[2], 0, counts[0]).astype(np.int8)  # at most MAX_NUMBER_LENGTH
        decimals.append(shown.reshape(-1, width))
        significant = np.maximum(significant, counts[1].reshape(-1, width).max(axis=0))
        has_exponent |= counts[2].reshape(-1, width).any(axis=0)
    if not blocks:
        message = "there is no row of numbers under the header."
        raise ResultsError(
            message, file=source, line=header.line, remedy="Write the results again; see the log."
        )
    cut = "The last line has no end; if the file was cut short there, its last number is wrong."
    remarks = (cut,) if stop == len(text) else ()
    numbers = np.concatenate(blocks)
    return _Table(source, header, numbers, np.concatenate(decimals), significant, has_exponent), remarks


def _chunks(text: str, header: _Header, stop: int) -> Iterator[tuple[int, str]]:
    """The body in pieces of whole lines, each with the number of its first line."""
    start, line = header.body, header.line + 1
    while start < stop:
        end = text.find("\n", min(start + _CHUNK, stop), stop)
        chunk = text[start : end if end >= 0 else stop]
        yield line, chunk.replace("\r\n", "\n").removesuffix("\r")
        line += chunk.count("\n") + 1
        start = end + 1 if end >= 0 else stop


def _cells(chunk: str, width: int, line: int, source: str) -> list[str]:
    """All cells of some lines, row after row; every line has `width` of them."""
    lines = chunk.split("\n")
    quoted = '"' in chunk
    rows = [_unquoted(row, line + n, source) for n, row in enumerate(lines)] if quoted else None
    for n, row in enumerate(lines):
        found = len(rows[n]) if rows is not None else row.count(",") + 1
        if found != width or not row:
            what = (
                f"{found} fields where the header has {width}" if row.strip() else "nothing, yet rows follow"
            )
            message = f"the line holds {what}."
            remedy = "Give every line the header's number of fields, and blank lines only at the end."
            raise ResultsError(message, file=source, line=line + n, remedy=remedy)
    return list(chain.from_iterable(rows)) if rows is not None else ",".join(lines).split(",")


def _unquoted(row: str, line: int, source: str) -> list[str]:
    try:
        return next(csv.reader([row], strict=True), [])
    except csv.Error as exc:
        message = f"the line cannot be read: {exc}."
        raise ResultsError(
            message, file=source, line=line, remedy="Close every quote in its own line."
        ) from exc


def _floats(cells: list[str], chunk: str, names: tuple[str, ...], line: int, source: str) -> FloatArray:
    """The cells as numbers; the first that is none is named by line and column."""
    # Python's own reader takes '1_000' and other scripts' digits, too, and no Fortran exponent.
    if chunk.isascii() and "_" not in chunk and max(map(len, cells)) <= MAX_NUMBER_LENGTH:
        plain = [re.sub("[dD]", "e", cell) for cell in cells] if re.search("[dD]", chunk) else cells
        try:
            numbers = np.fromiter(map(float, plain), np.float64, len(cells))
        except ValueError:
            pass
        else:
            if np.isfinite(numbers).all():
                return numbers
    place = next(n for n, cell in enumerate(cells) if not _is_finite(cell))
    row, column = divmod(place, len(names))
    cell = cells[place].strip()
    what = f"is {cell[:40]!r}, not a finite number" if cell else "is empty"
    message = f"column {names[column]!r} {what}."
    remedy = "Write plain numbers with a decimal point, such as 1.5e-3."
    raise ResultsError(message, file=source, line=line + row, remedy=remedy)


def _is_finite(cell: str) -> bool:
    cell = cell.strip(" \t")
    if len(cell) > MAX_NUMBER_LENGTH or not _NUMBER.fullmatch(cell):
        return False
    return bool(np.isfinite(float(cell.lower().replace("d", "e"))))


def _axis(table: _Table) -> tuple[FloatArray, FloatArray]:
    """The first column in Hz or s, from 0 strictly rising, and how far each value may be off."""
    along, exponent = table.header.along, table.header.exponent
    # Dividing by a power of ten keeps 1.5 ms the double nearest 0.0015; multiplying by 1e-3 would not.
    up, down = 10.0 ** max(exponent, 0), 10.0 ** max(-exponent, 0)
    written = table.column(0)
    with np.errstate(over="ignore"):
        axis, uncertainty = written * up / down, table.uncertainty(0) * up / down
    if (wrong := np.flatnonzero(~np.isfinite(axis))).size:
        row = int(wrong[0])
        message = f"{along} is {float(written[row])!r} in the unit of its column, beyond what a double holds."
        raise table.error(message, row, "Correct the value or the unit.")
    if (wrong := np.flatnonzero(written < 0)).size:
        row = int(wrong[0])
        message = f"{along} is {float(written[row])!r}, below 0."
        raise table.error(message, row, f"Leave out the rows whose {along} is negative.")
    if (wrong := np.flatnonzero(axis[1:] <= axis[:-1])).size:
        row = int(wrong[0]) + 1
        step = f"goes from {float(written[row - 1])!r} to {float(written[row])!r}"
        message = f"{along} must rise from row to row, but {step}."
        raise table.error(message, row, "Sort the rows, and give each point once.")
    return axis, uncertainty


def _curve(
    name: str, parts: dict[str, int], table: _Table, axis: FloatArray, axis_resolution: FloatArray
) -> Curve:
    along = table.header.along
    analysis: Analysis = "transient" if along == "time" else "noise" if "" in parts else "ac"
    values: FloatArray | ComplexArray
    if "" in parts:
        values, resolution = table.column(parts[""]), table.uncertainty(parts[""])
    elif "real" in parts:
        values = np.empty(len(axis), np.complex128)
        values.real, values.imag = table.column(parts["real"]), table.column(parts["imag"])
        resolution = np.hypot(table.uncertainty(parts["real"]), table.uncertainty(parts["imag"]))
    else:
        values, resolution = _from_polar(parts, table)
    return Curve(name, analysis, axis, values, _unit(name), _or_none(resolution), _or_none(axis_resolution))


def _from_polar(parts: dict[str, int], table: _Table) -> tuple[ComplexArray, FloatArray]:
    """The phasor of a magnitude and a phase, and how far off it may be.

    dm and dphi being the uncertainties of magnitude and phase: sqrt(dm^2 + (m dphi)^2), dm = m ln(10)/20 dL
    for a level L in dB.
    """
    is_level, in_degrees = "db" in parts, "deg" in parts
    size, angle = parts["db" if is_level else "mag"], parts["deg" if in_degrees else "rad"]
    written = table.column(size)
    with np.errstate(over="ignore"):
        magnitude = 10.0 ** (written / 20.0) if is_level else written
    if (wrong := np.flatnonzero(~np.isfinite(magnitude) | (magnitude < 0))).size:
        row = int(wrong[0])
        cell = float(table.numbers[row, size])
        message = f"column {table.header.names[size]!r} is {cell!r}, which is no magnitude."
        raise table.error(message, row, "A minus sign belongs into the phase.")
    phase, d_phase = table.column(angle), table.uncertainty(angle)
    if in_degrees:
        phase, d_phase = np.deg2rad(phase), np.deg2rad(d_phase)
    with np.errstate(over="ignore"):
        d_size = table.uncertainty(size) * (magnitude * (np.log(10.0) / 20.0) if is_level else 1.0)
        resolution: FloatArray = np.hypot(d_size, magnitude * d_phase)
    phasor: ComplexArray = magnitude * np.exp(1j * phase)
    return phasor, resolution


def _or_none(resolution: FloatArray) -> FloatArray | None:
    return resolution if resolution.any() else None


def _unit(name: str) -> str:
    if name.startswith("onoise"):
        return "V/sqrt(Hz)"
    return {"v(": "V", "i(": "A"}.get(name[:2], "")


def write_csv(curves: Curves) -> str:
    """Curves of one analysis on one axis as CSV; `parse_csv` reads the same doubles back.

    The header is `frequency` or `time` and the curves' names, a complex curve being `NAME.real`, `NAME.imag`;
    numbers stand in the shortest form that reads back the same, lines end CRLF (RFC 4180).

    Raises ResultsError for curves that one such table cannot hold.
    """
    along = _check_writable(curves)
    header, columns = [along], [curves.curves[0].axis]
    for curve in curves:
        if along == "frequency" and curve.analysis == "ac":
            header += [f"{curve.name}.real", f"{curve.name}.imag"]
            columns += [curve.values.real, curve.values.imag]
        else:
            header.append(curve.name)
            columns.append(np.asarray(curve.values, np.float64))
    out = io.StringIO()
    csv.writer(out).writerow(header)
    step = max(1, _CHUNK // len(columns))
    for start in range(0, len(columns[0]), step):
        rows = np.column_stack([column[start : start + step] for column in columns]).tolist()
        out.writelines(",".join(map(repr, row)) + "\r\n" for row in rows)
    return out.getvalue()


def _check_writable(curves: Curves) -> str:
    """The name of the axis that all curves share."""
    first = curves.curves[0] if len(curves) else None
    why = ""
    if first is None or not len(first):
        why = "there is no curve to write."
    elif first.analysis not in ("ac", "transient", "noise"):
        why = f"{first.analysis} results have no axis of frequency or time."
    elif len({curve.name.lower() for curve in curves}) < len(curves):
        why = "two curves have the same name."
    else:
        why = next(filter(None, (_clash(first, curve) for curve in curves)), "")
    if first is None or why:
        remedy = "Write one analysis, with one axis, to one file."
        raise ResultsError(why, file=curves.source, remedy=remedy)
    return "time" if first.analysis == "transient" else "frequency"


def _clash(first: Curve, curve: Curve) -> str:
    """Why a curve cannot stand in one table with the first; empty where it can."""
    if curve.analysis != first.analysis:
        return f"{curve.name!r} is of analysis {curve.analysis!r}, {first.name!r} of {first.analysis!r}."
    if curve.axis is not first.axis and not np.array_equal(curve.axis, first.axis):
        return f"{curve.name!r} and {first.name!r} have different axes."
    if curve.is_complex != (curve.analysis == "ac"):
        kind = "complex" if curve.is_complex else "real"
        return f"{curve.name!r} is {kind}, which {curve.analysis} results cannot be."
    if not np.isfinite(curve.values).all() or not np.isfinite(curve.axis).all():
        return f"{curve.name!r} has a value that is not finite."
    if not curve.name.isprintable() or not curve.name.strip():
        return f"{curve.name!r} is no name for a column."
    if curve.analysis == "noise" and not curve.name.lower().startswith(_NOISE):
        return f"{curve.name!r} does not read as noise: its name begins neither 'onoise' nor 'inoise'."
    return ""
