"""The plan of a text table: which columns make which curve, by the header or, without one, by the numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..errors import ResultsError
from ._csv_body import Table
from ._csv_evidence import best, fit, ways
from ._csv_layout import NUMBER, Layout
from ._csv_words import COLUMNS_REMEDY, UNNAMED, Axis, Column, axis_of, column_of
from .curve import FloatArray

NOISE = ("onoise", "inoise")
_SIZES = ("mag", "db", "gain", "size")
_ANGLES = ("deg", "rad", "angle")
_PARTNERS = {"real": "imag", "imag": "real", "mag": "deg", "deg": "mag", "rad": "mag"}
_WORDS = {"deg": "Phase (deg)", "mag": "Magnitude", "real": "real", "imag": "imag"}
_EVEN = 0.02  # by how much of their mean the steps of an even axis may vary
_APART = 0.3  # without a header there are more readings, and two may fit: they must lie further apart
_LONGEST = 1.0  # seconds; a sweep of frequencies ends beyond 1 Hz, most transients before 1 s


@dataclass(frozen=True, slots=True)
class Trace:
    """One curve: its name, and for each of its parts the column and its power of ten to the base unit.

    own: whether the columns are named in rcnet's own words
    """

    name: str
    parts: dict[str, tuple[int, int]]
    own: bool = True

    @property
    def polar(self) -> tuple[str, str]:
        """The part that is a magnitude, and the one that is a phase."""
        return next(part for part in self.parts if part in _SIZES), next(
            p for p in self.parts if p in _ANGLES
        )


@dataclass(frozen=True, slots=True)
class Plan:
    """The axis, the traces, the columns that repeat the axis, and what was assumed."""

    axis: Axis
    traces: tuple[Trace, ...]
    repeated: tuple[int, ...] = ()
    notes: tuple[str, ...] = ()


def plan_for(layout: Layout, source: str) -> Plan:
    """What the columns under a header are. Raises ResultsError at the header's line."""
    names = layout.names
    axis = _axis(names[0], layout.line, source)
    repeated = tuple(n for n, name in enumerate(names) if n and name.lower() == names[0].lower())
    columns: dict[int, Column] = {}
    for index, name in enumerate(names):
        if index == 0 or index in repeated:
            continue
        if not name:
            raise _refusal(f"column {index + 1} has no name.", COLUMNS_REMEDY, layout, source)
        column, why, remedy = column_of(name, axis.along)
        if why:
            raise _refusal(f"the column {name[:60]!r} {why}", remedy, layout, source)
        columns[index] = column
    notes: list[str] = []
    if axis.along == "frequency":
        notes += _real_and_imaginary(columns)
    traces = _traces(layout, columns, source)
    for trace in traces:
        why, remedy = _misfit(trace, names, axis.along)
        if why:
            raise _refusal(why, remedy, layout, source)
    return _told(axis, traces, columns, repeated, notes)


def _refusal(message: str, remedy: str, layout: Layout, source: str) -> ResultsError:
    return ResultsError(message, file=source, line=layout.line, remedy=remedy)


def _axis(name: str, line: int, source: str) -> Axis:
    axis = axis_of(name)
    if isinstance(axis, Axis):
        return axis
    if axis is not None:
        along = "time" if name.lower().startswith("t") else "frequency"
        known = "s, ms, us, ns, ps, fs" if along == "time" else "Hz, mHz, kHz, MHz, GHz, rad/s"
        message = f"{axis[:20]!r} is no unit of {along} that is read."
        raise ResultsError(message, file=source, line=line, remedy=f"Use one of {known}, spelled so.")
    found = "a number" if NUMBER.fullmatch(name) else "no axis"
    message = f"the header row begins with {name[:60]!r}, which is {found}."
    raise ResultsError(message, file=source, line=line, remedy=COLUMNS_REMEDY)


def _real_and_imaginary(columns: dict[int, Column]) -> list[str]:
    """Make two columns of the same bare name, side by side, the real and imaginary part of one curve.

    So ngspice 39 writes complex vectors with `wrdata`.
    """
    notes = []
    for index in list(columns):
        one, two = columns[index], columns.get(index + 1)
        if two is None or one.curve != two.curve or one.part or two.part or one.curve.startswith(NOISE):
            continue
        columns[index], columns[index + 1] = replace(one, part="real"), replace(two, part="imag")
        notes.append(f"the two columns {one.curve!r} are taken for its real and imaginary part")
    return notes


def _traces(layout: Layout, columns: dict[int, Column], source: str) -> list[Trace]:
    """The columns gathered into curves. Raises ResultsError for one that stands there twice."""
    names = layout.names
    found: dict[str, Trace] = {}
    for index, column in columns.items():
        trace = found.setdefault(column.curve, Trace(column.curve, {}))
        if column.part in trace.parts:
            first = names[trace.parts[column.part][0]]
            again = names[index] == first or not column.part
            same = "" if again else f", first as {first!r}"
            message = f"the column {names[index]!r} appears twice{same}."
            raise _refusal(message, "Keep one of the two.", layout, source)
        trace.parts[column.part] = index, column.exponent
        found[column.curve] = replace(trace, own=trace.own and column.own)
    if not found:
        raise _refusal("it has no column but the axis.", COLUMNS_REMEDY, layout, source)
    traces = list(found.values())
    # A label tells traces apart; where there is one trace only it names nothing.
    bare = {column.curve for column in columns.values() if column.named != "node"}
    return [replace(traces[0], name=UNNAMED)] if len(traces) == 1 and traces[0].name in bare else traces


def _told(
    axis: Axis,
    traces: Sequence[Trace],
    columns: dict[int, Column],
    repeated: tuple[int, ...],
    notes: list[str],
) -> Plan:
    foreign = not axis.own or bool(notes) or not all(trace.own for trace in traces)
    told = [f"the first column is taken for the {_along(axis)} in {axis.unit}"] if foreign else []
    told += notes
    for trace in traces:
        if not trace.own and "real" in trace.parts:
            what = "" if trace.name == UNNAMED else f" of {trace.name!r}"
            told.append(f"two columns are taken for the real and imaginary part{what}")
    guessed = {column.guessed: column.curve for column in columns.values() if column.guessed}
    told += [f"{word!r} is taken for the voltage {curve}" for word, curve in guessed.items()]
    return Plan(axis, tuple(traces), repeated, tuple(told))


def _along(axis: Axis) -> str:
    return "angular frequency" if axis.angular else axis.along


def _misfit(trace: Trace, names: Sequence[str], along: str) -> tuple[str, str]:
    """What is wrong with the parts a curve has, with the remedy; empty where all is well."""
    parts = set(trace.parts)
    if parts == {""}:
        name = names[trace.parts[""][0]]
        if along == "time" or trace.name.startswith(NOISE):
            return "", ""
        return f"the column {name!r} is real, and a magnitude alone is no response.", COLUMNS_REMEDY
    found = ", ".join(repr(names[index]) for _, (index, _) in sorted(trace.parts.items()))
    if along == "time":
        name = "v(out)" if trace.name == UNNAMED else trace.name
        return f"a curve along time is real, but there is {found}.", f"Name the column {name!r}."
    sizes, angles = parts.intersection(_SIZES), parts.intersection(_ANGLES)
    if parts == {"real", "imag"} or (len(parts) == 2 and sizes and angles):
        return "", ""
    if len(parts) == 1:
        part = next(iter(parts))
        wanted = _PARTNERS.get(part, "deg" if sizes else "mag")
        name = _WORDS[wanted] if trace.name == UNNAMED else f"{trace.name}.{wanted}"
        return f"{found} has no partner.", f"Add the column {name!r}."
    return f"{found} do not make one complex curve.", COLUMNS_REMEDY


# ---------------------------------------------------------------------- without a header


def plan_without_header(table: Table) -> Plan:
    """What the columns are by their numbers alone. Raises ResultsError where these do not tell."""
    axis = table.column(0)
    columns = range(1, len(table.names))
    repeated = tuple(n for n in columns if np.array_equal(table.numbers[:, n], axis))
    others = [n for n in columns if n not in repeated]
    pairs = list(zip(others[::2], others[1::2], strict=False))
    parts = _parts_of(table, axis, pairs) if len(others) % 2 == 0 else None
    start = ["there is no header row"]
    if parts is not None and not _looks_like_time(axis):
        along = Axis("frequency", 0, angular=False, unit="Hz", own=False)
        traces = [
            Trace(name, {parts[0]: (one, 0), parts[1]: (two, 0)}, own="real" in parts)
            for name, (one, two) in zip(_numbered(len(pairs)), pairs, strict=True)
        ]
        start.append("the first column is taken for the frequency in Hz")
        start += ["the others are taken for real and imaginary part"] * ("real" in parts)
        return Plan(along, tuple(traces), repeated, tuple(start))
    if others and _looks_like_time(axis):
        along = Axis("time", 0, angular=False, unit="s", own=False)
        traces = [Trace(name, {"": (n, 0)}) for name, n in zip(_numbered(len(others)), others, strict=True)]
        start += ["the first column is taken for the time in s", "the others are taken for voltages"]
        return Plan(along, tuple(traces), repeated, tuple(start))
    cell = f"{float(axis[0]):.12g}"
    message = f"it begins with {cell!r}, which is a number, and no header row says what its columns are."
    raise table.at_header(message, COLUMNS_REMEDY)


def _parts_of(table: Table, axis: FloatArray, pairs: Sequence[tuple[int, int]]) -> tuple[str, str] | None:
    """The one way to read all pairs that their numbers decide for; None where they do not."""
    found = set()
    for one, two in pairs:
        readings = list(ways(table.column(one), table.column(two)))
        chosen = best([fit(axis, size, phase) for _, size, phase in readings], _APART)
        if chosen is not None and readings[chosen][0] == ("real", "imag") and _may_be_polar(table, one, two):
            return None
        # A flat curve, such as the source's own voltage, decides nothing, and need not where another does.
        if chosen is not None:
            found.add(readings[chosen][0])
    return found.pop() if len(found) == 1 else None


def _may_be_polar(table: Table, one: int, two: int) -> bool:
    """True where a first column hardly moves, and may be a flat magnitude as well as a real part."""
    first, second = table.column(one), table.column(two)
    return bool(first.min() > 0 and np.ptp(first) < 0.25 * np.ptp(second))


def _numbered(count: int) -> list[str]:
    return [UNNAMED] if count == 1 else [f"trace {n + 1}" for n in range(count)]


def _looks_like_time(axis: FloatArray) -> bool:
    """True for an axis that begins at 0, or ends before 1 with even steps."""
    steps = np.diff(axis)
    if not len(steps) or not (steps > 0).all():
        return False
    return bool(axis[0] == 0 or (axis[-1] <= _LONGEST and np.ptp(steps) <= _EVEN * steps.mean()))


def check_repeated(table: Table, plan: Plan) -> None:
    """Raise ResultsError where a column named as the axis is not the axis."""
    for index in plan.repeated:
        if (wrong := np.flatnonzero(table.numbers[:, index] != table.numbers[:, 0])).size:
            row = int(wrong[0])
            one, two = table.numbers[row, [0, index]].tolist()
            message = f"column {index + 1} repeats {table.names[0]!r}, yet is {two!r} where that is {one!r}."
            raise table.error(message, row, "Write curves with different axes to different files.")
