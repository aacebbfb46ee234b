"""Results as text tables: rcnet's own CSV (RFC 4180), and those of bench instruments and simulators."""

from __future__ import annotations

import csv
import io

import numpy as np

from ..errors import ResultsError
from ._csv_body import Table, read_table
from ._csv_evidence import read_polar
from ._csv_layout import Layout, find_layout
from ._csv_plan import Plan, Trace, check_repeated, plan_for, plan_without_header
from ._csv_words import UNNAMED, to_base
from .curve import Analysis, ComplexArray, Curve, Curves, FloatArray

_CHUNK = 1 << 18  # numbers are turned into text about this many at a time
_NOISE = ("onoise", "inoise")
_CUT = "The last line has no end; if the file was cut short there, its last number is wrong."
_ANGLE_WORDS = {"deg": "degrees", "rad": "radians"}


def parse_csv(text: str, source: str) -> Curves:
    """The curves of a table whose columns are named as `write_csv` names them, or in other usual ways.

    The first column is `frequency` or `time`, with a unit where it is not Hz or s: `Time (ms)`, `f/kHz`,
    `omega [rad/s]`. Curves along frequency are complex: `v(out).real` with `v(out).imag`, `.mag` or `.db`
    with `.deg` or `.rad`, also as `re(v(out))`, `vdb(out)`, `phase(v(out)) [deg]`; real columns there are
    noise, `onoise_spectrum`. A trace without a node, `Gain (dB)` with `Phase (deg)`, becomes the curve
    `response`, with a remark. Commas, semicolons, tabs or blanks part the columns, and all but the first
    allow decimal commas. Comments (`#`, `%`, `!`) and notes may stand above the header, a row of units below
    it, and the header may be missing. How columns not named in rcnet's own way were read is told in
    `assumed`; what their names leave open is decided by the numbers, or refused. Few digits show as
    `resolution`.

    Raises ResultsError with the line, and the column where there is one.
    """
    text = text.removeprefix("\ufeff")
    layout = find_layout(text, source)
    # The header is judged before the numbers: a wrong one is the better advice.
    plan = plan_for(layout, source) if layout.names else None
    table = read_table(text, layout, source)
    if plan is None:
        plan = plan_without_header(table)
    check_repeated(table, plan)
    axis = _axis(table, plan)
    assumed = [*plan.notes, *_about_layout(layout)]
    curves = tuple(_curve(trace, plan, table, axis, assumed) for trace in plan.traces)
    remarks = [_CUT] if table.is_cut else []
    if any(trace.name == UNNAMED for trace in plan.traces):
        remarks.append("the trace names no node; it is taken for the circuit's output")
    return Curves(source, curves, remarks=tuple(remarks), assumed=tuple(dict.fromkeys(assumed)))


def _about_layout(layout: Layout) -> list[str]:
    told = []
    if layout.decimal_comma:
        told.append("commas in the numbers are taken for decimal points")
    if layout.notes:
        lines = "a line" if layout.notes == 1 else f"{layout.notes} lines"
        told.append(f"{lines} above the table {'is' if layout.notes == 1 else 'are'} taken for notes")
    return told


def _axis(table: Table, plan: Plan) -> tuple[FloatArray, FloatArray]:
    """The first column in Hz or s, from 0 strictly rising, and how far each value may be off."""
    along = plan.axis.along
    up, down = to_base(plan.axis)
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
    trace: Trace, plan: Plan, table: Table, axis: tuple[FloatArray, FloatArray], assumed: list[str]
) -> Curve:
    parts = trace.parts
    is_real = "" in parts
    analysis: Analysis = "transient" if plan.axis.along == "time" else "noise" if is_real else "ac"
    values: FloatArray | ComplexArray
    if is_real:
        values, resolution = table.column(*parts[""]), table.uncertainty(*parts[""])
    elif "real" in parts:
        values = np.empty(len(table.numbers), np.complex128)
        values.real, values.imag = table.column(*parts["real"]), table.column(*parts["imag"])
        resolution = np.hypot(table.uncertainty(*parts["real"]), table.uncertainty(*parts["imag"]))
    else:
        values, resolution = _from_polar(trace, table, axis[0], assumed)
    return Curve(
        trace.name, analysis, axis[0], values, _unit(trace.name), _or_none(resolution), _or_none(axis[1])
    )


def _units(trace: Trace, table: Table, axis: FloatArray, assumed: list[str]) -> tuple[bool, bool]:
    """Whether a magnitude is in dB and its phase in degrees, by their headers or else by their numbers."""
    size, angle = trace.polar
    values, angles = table.column(*trace.parts[size]), table.column(*trace.parts[angle])
    reading = read_polar(axis, values, angles, size, angle)
    size_name, angle_name = (table.names[trace.parts[part][0]] for part in (size, angle))
    if reading.size is None:
        message = f"the column {size_name!r} does not say whether it is in dB, nor do its numbers."
        raise table.at_header(message, "Write 'Gain (dB)' or 'Gain (V/V)'.")
    if reading.angle is None:
        message = f"the column {angle_name!r} is a phase without a unit, and its numbers do not tell it."
        raise table.at_header(message, f"Say deg or rad in the header: '{angle_name} [deg]'.")
    if not trace.own:
        is_level = reading.size == "db"
        assumed.append(
            f"{size_name!r} is taken for {'dB' if is_level else 'a ratio or volts'}{reading.why_size}"
        )
        assumed.append(f"phase is taken for {_ANGLE_WORDS[reading.angle]}{reading.why_angle}")
    return reading.size == "db", reading.angle == "deg"


def _from_polar(
    trace: Trace, table: Table, axis: FloatArray, assumed: list[str]
) -> tuple[ComplexArray, FloatArray]:
    """The phasor of a magnitude and a phase, and how far off it may be.

    dm and dphi being the uncertainties of magnitude and phase: sqrt(dm^2 + (m dphi)^2), dm = m ln(10)/20 dL
    for a level L in dB.
    """
    is_level, in_degrees = _units(trace, table, axis, assumed)
    size, angle = (trace.parts[part] for part in trace.polar)
    written = table.column(*size)
    with np.errstate(over="ignore"):
        magnitude = 10.0 ** (written / 20.0) if is_level else written
    if (wrong := np.flatnonzero(~np.isfinite(magnitude) | (magnitude < 0))).size:
        row = int(wrong[0])
        cell = float(table.numbers[row, size[0]])
        message = f"column {table.names[size[0]]!r} is {cell!r}, which is no magnitude."
        raise table.error(message, row, "A minus sign belongs into the phase.")
    phase, d_phase = table.column(*angle), table.uncertainty(*angle)
    if in_degrees:
        phase, d_phase = np.deg2rad(phase), np.deg2rad(d_phase)
    with np.errstate(over="ignore"):
        d_size = table.uncertainty(*size) * (magnitude * (np.log(10.0) / 20.0) if is_level else 1.0)
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
