"""Berkeley SPICE3 raw files, binary and text.

A file is a sequence of plots with nothing between them, each a text header and its data. The layout follows
W. Christopher's `rawfile.c` (Berkeley, 1986) as ngspice 39 reads and writes it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from ..errors import ResultsError
from ._raw_layout import ALONG, Plot, RawFile, Variable
from ._raw_numbers import DOUBLE_DIGITS, ValueArray, binary_columns, text_columns
from .curve import Analysis, Curve, Curves, FloatArray
from .digits import half_unit

_UNITS = {
    "time": "s",
    "frequency": "Hz",
    "voltage": "V",
    "current": "A",
    "voltage-density": "V/sqrt(Hz)",
    "current-density": "A/sqrt(Hz)",
    "voltage^2-density": "V^2/Hz",
    "current^2-density": "A^2/Hz",
    "decibel": "dB",
}
_TYPES = {unit: kind for kind, unit in _UNITS.items()}

PLOT_NAMES: Mapping[Analysis, str] = {
    "ac": "AC Analysis",
    "transient": "Transient Analysis",
    "operating point": "Operating Point",
    "noise": "Noise Spectral Density Curves",
    "other": "Other Curves",
}


def parse_raw(data: bytes, source: str) -> Curves:
    """Every curve of a raw file, plot by plot.

    Names are lower case; a bare node `out` reads `v(out)`, SPICE3's `v1#branch` reads `i(v1)`. The imaginary
    part of frequency is ignored, since ngspice leaves unset memory there. Numbers are little-endian; a file
    whose axes make sense only when read big-endian is read so, with a remark. Text carries a `resolution`.

    Raises ResultsError, with `source` as its file, for whatever is cut short, interrupted, malformed, not
    finite, or longer than its header says.
    """
    file = RawFile(data, source)
    plots = list(file.plots())
    if not plots:
        raise file.error("the file is empty.", "Run the simulation again; see its log.")
    order = _byte_order(file, plots)
    curves = tuple(curve for plot in plots for curve in _curves(file, plot, order))
    if not curves:
        raise file.error("it holds an axis, but no curve.", "Save at least one voltage or current.")
    remarks = ("Its numbers were read as big-endian.",) if order == ">" else ()
    return Curves(source, curves, plots[0].title, remarks)


def _byte_order(file: RawFile, plots: Sequence[Plot]) -> str:
    """'<', or '>' where every axis that must rise makes sense only when read big-endian."""
    tested = [plot for plot in plots if not plot.is_text and plot.analysis in ALONG and plot.points > 1]
    swapped = bool(tested) and all(
        not _is_ordinary(binary_columns(file, plot, "<", only=0)[0].real)
        and _is_ordinary(axis := binary_columns(file, plot, ">", only=0)[0].real)
        and _rises(axis)
        for plot in tested
    )
    return ">" if swapped else "<"


def _is_ordinary(axis: FloatArray) -> bool:
    """True for sizes that times and frequencies have; doubles with their bytes swapped fall outside.

    An axis that merely does not rise is no sign of the other byte order, so this is asked and not that.
    """
    return bool(np.all((axis == 0) | ((axis > 1e-30) & (axis < 1e30))))


def _rises(axis: FloatArray) -> bool:
    return bool(np.all(axis[1:] > axis[:-1]))


def _curves(file: RawFile, plot: Plot, order: str) -> Iterator[Curve]:
    _check_kind(file, plot)
    if plot.is_text:
        columns, digits = text_columns(file, plot)
    else:
        columns = binary_columns(file, plot, order)
        digits = DOUBLE_DIGITS
    coarse = 0 < digits < DOUBLE_DIGITS
    first = 1 if plot.has_scale else 0
    axis = _axis(file, plot, columns[0]) if first else np.zeros(plot.points)
    axis_resolution = half_unit(axis, digits) if coarse and first else None
    for variable, column in zip(plot.variables[first:], columns[first:], strict=True):
        values = _values(file, plot, variable, column, axis)
        length = len(values)
        yield Curve(
            name=_name(variable, plot.analysis),
            analysis=plot.analysis,
            axis=axis[:length],
            values=values,
            unit=_UNITS.get(variable.kind, ""),
            resolution=_resolution(values, digits) if coarse else None,
            axis_resolution=None if axis_resolution is None else axis_resolution[:length],
        )


def _check_kind(file: RawFile, plot: Plot) -> None:
    if plot.analysis == "ac" and not plot.is_complex:
        raise file.error(
            f"plot {plot.name!r} holds real numbers, and a magnitude alone is no response.",
            "Save the complex voltages and currents themselves.",
        )
    if plot.analysis == "operating point" and plot.points != 1:
        message = f"plot {plot.name!r} holds {plot.points} points; an operating point is one."
        raise file.error(message, "Write each operating point to a plot of its own.")


def _axis(file: RawFile, plot: Plot, column: ValueArray) -> FloatArray:
    """The scale of a plot: finite, and rising where the analysis runs along frequency or time."""
    scale = plot.variables[0]
    axis = _real(column)
    if (bad := np.flatnonzero(~np.isfinite(axis))).size:
        message = (
            f"plot {plot.name!r}: {scale.name!r} is {axis[bad[0]]} at point {bad[0]}, not a finite number."
        )
        raise file.error(message, "The data are damaged; run the simulation again.")
    along = ALONG.get(plot.analysis)
    if along is None:
        return axis
    if along not in (scale.kind, scale.name):
        message = f"plot {plot.name!r}: its first variable is {scale.name!r}, not {along}."
        raise file.error(message, f"Save {along} with the results.")
    if not _rises(axis):
        n = int(np.flatnonzero(axis[1:] <= axis[:-1])[0])
        step = f"goes from {axis[n]:.10g} to {axis[n + 1]:.10g} at point {n + 1}"
        message = f"plot {plot.name!r}: {along} must rise from point to point, but {step}."
        raise file.error(message, "Write each run to a plot of its own.")
    return axis


def _values(
    file: RawFile, plot: Plot, variable: Variable, column: ValueArray, axis: FloatArray
) -> ValueArray:
    """The values of one variable: finite, and real where the analysis knows no phase."""
    head = f"plot {plot.name!r}: {variable.name!r}"
    if (bad := np.flatnonzero(~np.isfinite(column))).size:
        n = int(bad[0])
        along = ALONG.get(plot.analysis)
        place = f"point {n} ({axis[n]:.10g} {_UNITS[along]})" if along else f"point {n}"
        raise file.error(
            f"{head} is {column[n]} at {place}, not a finite number.",
            "The simulation diverged or the data are damaged; see the simulator's log.",
        )
    if not plot.is_complex or plot.analysis in ("ac", "other"):
        return column
    if (turned := np.flatnonzero(column.imag)).size:
        message = f"{head} has an imaginary part at point {turned[0]}, which this analysis cannot give."
        raise file.error(message, "The header names the wrong analysis, or the data are damaged.")
    return _real(column)


def _real(column: ValueArray) -> FloatArray:
    return np.ascontiguousarray(column.real, np.float64)


def _resolution(values: ValueArray, digits: int) -> FloatArray:
    if not np.iscomplexobj(values):
        return half_unit(values, digits)
    modulus: FloatArray = np.hypot(half_unit(values.real, digits), half_unit(values.imag, digits))
    return modulus


def _name(variable: Variable, analysis: Analysis) -> str:
    """The name as batch results have it; in memory ngspice calls the same vectors `out` and `v1#branch`."""
    name = variable.name
    if variable.kind == "current" and name.endswith("#branch"):
        return f"i({name.removesuffix('#branch')})"
    is_spectrum = analysis == "noise" and name.startswith(("onoise", "inoise"))
    if variable.kind == "voltage" and "(" not in name and not is_spectrum:
        return f"v({name})"
    return name


def write_raw(
    curves: Curves,
    *,
    title: str,
    plot_names: Mapping[Analysis, str] | None = None,
    date: str = "Thu Jan  1 00:00:00  1970",
) -> bytes:
    """The curves as a binary little-endian raw file, which `parse_raw` and ngspice's `load` read.

    Curves of one analysis on one axis share a plot; plots stand in the order of their first curves.
    `plot_names` replaces entries of PLOT_NAMES; the fixed `date` keeps equal results equal files.

    Raises ResultsError for no curves, for a name no header line can hold, for values that are not finite,
    and for complex ones where the analysis knows no phase.
    """
    groups: list[list[Curve]] = []
    for curve in curves:
        _check_writable(curve, curves.source)
        mates = next((group for group in groups if _share_plot(group[0], curve)), None)
        if mates is None:
            groups.append([curve])
        else:
            mates.append(curve)
    if not groups:
        raise ResultsError("there is no curve to write.", file=curves.source, remedy="Ask for at least one.")
    names = {**PLOT_NAMES, **(plot_names or {})}
    head = f"Title: {_one_line(title)}\nDate: {_one_line(date)}\n"
    return b"".join(
        f"{head}Plotname: {_one_line(names[group[0].analysis])}\n".encode() + _plot_bytes(group)
        for group in groups
    )


def _one_line(text: str) -> str:
    return " ".join(text.split())


def _check_writable(curve: Curve, source: str) -> None:
    why = ""
    if not curve.name or not curve.name.isprintable() or " " in curve.name:
        why = "has a name that a raw file cannot hold: empty, or with a blank in it."
    elif not len(curve) or not np.isfinite(curve.values).all() or not np.isfinite(curve.axis).all():
        why = "has no values, or one that is not finite."
    elif curve.is_complex and curve.analysis not in ("ac", "other"):
        why = f"is complex, which {curve.analysis} results cannot be."
    elif curve.analysis == "operating point" and len(curve) != 1:
        why = f"has {len(curve)} points; an operating point is one."
    if why:
        raise ResultsError(f"the curve {curve.name!r} {why}", file=source, remedy="Leave it out.")


def _share_plot(one: Curve, two: Curve) -> bool:
    return one.analysis == two.analysis and (one.axis is two.axis or np.array_equal(one.axis, two.axis))


def _plot_bytes(group: Sequence[Curve]) -> bytes:
    """Flags, variables and data of one plot."""
    first = group[0]
    scale = _scale_line(first)
    columns: list[ValueArray] = [curve.values for curve in group]
    lines = [f"{curve.name}\t{_TYPES.get(curve.unit, 'notype')}" for curve in group]
    if scale is not None:
        columns, lines = [first.axis, *columns], [scale, *lines]
    is_complex = first.analysis == "ac" or any(curve.is_complex for curve in group)
    header = [
        f"Flags: {'complex' if is_complex else 'real'}",
        f"No. Variables: {len(columns)}",
        f"No. Points: {len(first)}",
        "Variables:",
        *(f"\t{index}\t{line}" for index, line in enumerate(lines)),
        "Binary:\n",
    ]
    table = np.empty((len(first), len(columns)), "<c16" if is_complex else "<f8")
    for index, column in enumerate(columns):
        table[:, index] = column
    return "\n".join(header).encode() + table.tobytes()


def _scale_line(curve: Curve) -> str | None:
    """The variable that is the axis; None for a single point that lies nowhere."""
    along = ALONG.get(curve.analysis)
    if along is not None:
        return f"{along}\t{along}"
    if curve.analysis == "operating point" or (len(curve) == 1 and curve.axis[0] == 0):
        return None
    return "sweep\tnotype"
