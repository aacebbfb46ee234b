"""A comparison as a picture: both curves, how far they lie apart, and what is allowed."""

from __future__ import annotations

import io
import math
import warnings
from dataclasses import replace
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
import numpy.typing as npt

from ..errors import InputError
from ..values import format_quantity
from .plain import printable

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Text
    from matplotlib.ticker import Formatter

    from ..compare import Comparison, CurveComparison
    from ..compare.records import Held

Kind = Literal["png", "svg", "pdf"]
Float = npt.NDArray[np.float64]

# Okabe and Ito, "Color Universal Design" (2008): told apart by colour-blind eyes too.
EXACT, OTHER, ALLOWANCE, SPAN, DIFFERENCE = "#0072B2", "#D55E00", "#999999", "#E69F00", "#000000"
WIDTH, HEIGHT, DPI = 1200, 900, 100  # pixels, and pixels per inch
MOST_POINTS = 100_000  # of a curve drawn point by point
_FEW_POINTS = 30  # up to here each one has a mark
_DECADES = 16  # of a difference: double precision holds no more
_LONGEST_TITLE, _LONGEST_NAME = 90, 32

# Which keys and types these have differs between releases of matplotlib.
_SETTINGS: Any = {
    "text.parse_math": False,
    "svg.fonttype": "none",
    "svg.hashsalt": "rcnet",
    "font.size": 11,
    "axes.grid": True,
    "grid.alpha": 0.35,
    "axes.xmargin": 0.0,
    "figure.constrained_layout.w_pad": 0.12,
    "figure.constrained_layout.h_pad": 0.1,
}
_METADATA: dict[Kind, dict[str, Any]] = {"png": {}, "svg": {"Date": None}, "pdf": {"CreationDate": None}}


def comparison_picture(comparison: Comparison, kind: Kind) -> bytes:
    """The picture of the curve that differs most, 1200 by 900 pixels, as the bytes of a file.

    Curves of the circuit's output come first, as in the report for the terminal; where all agree, it is the
    first of these or else the first. The same comparison gives the same bytes. Raises InputError where no
    curve has two points to draw, or matplotlib cannot be loaded.
    """
    curve = _chosen(comparison)
    mpl = _matplotlib()
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    # A letter that no font has is drawn as a box; that is no news to whoever asked for the picture.
    with mpl.rc_context(), warnings.catch_warnings():
        warnings.simplefilter("ignore")
        mpl.rcdefaults()
        mpl.rcParams.update(_SETTINGS)
        figure = Figure(figsize=(WIDTH / DPI, HEIGHT / DPI), dpi=DPI, layout="constrained")
        FigureCanvasAgg(figure)
        _draw(figure, comparison, curve)
        stream = io.BytesIO()
        figure.savefig(stream, format=kind, metadata=_METADATA[kind])
    return stream.getvalue()


def _matplotlib() -> Any:
    try:
        import matplotlib as mpl
    except (ImportError, ValueError) as exc:  # the latter for a word in MPLBACKEND that it does not know
        raise InputError(
            f"matplotlib, which draws pictures, cannot be loaded: {printable(str(exc)).rstrip('.')}.",
            remedy="Install or set it right, or write the comparison as .json instead.",
        ) from exc
    return mpl


def _chosen(comparison: Comparison) -> CurveComparison:
    drawable = [curve for curve in comparison.curves if _drawable(curve)]
    if not drawable:
        raise InputError(
            "there is no curve to draw: none of those compared has two points along an axis.",
            remedy="Write the comparison as .json instead.",
        )
    ends = comparison.circuit.output
    outputs = {f"v({','.join(ends)})", *(f"v({node})" for node in ends)}

    def rank(curve: CurveComparison) -> tuple[bool, bool, float]:
        differs = curve.verdict == "differ"
        return not differs, curve.name not in outputs, -curve.worst.relative if differs else 0.0

    return min(drawable, key=rank)


def _drawable(curve: CurveComparison) -> bool:
    return curve.held is not None and not curve.single and len(_shown(curve).axis) > 1


def _shown(curve: CurveComparison) -> Held:
    """The numbers that have a place on the axis: 0 Hz has none on a logarithmic one."""
    held = curve.held
    assert held is not None
    if curve.analysis == "transient" or np.all(held.axis > 0):
        return held
    kept = held.axis > 0
    return replace(
        held,
        axis=held.axis[kept],
        exact=held.exact[kept],
        other=held.other[kept],
        allowed=held.allowed[kept],
    )


def _draw(figure: Figure, comparison: Comparison, curve: CurveComparison) -> None:
    held = _shown(curve)
    who = _cut(comparison.second_opinion, _LONGEST_NAME)
    panels = {"ac": _draw_phasors, "noise": _draw_density}.get(curve.analysis, _draw_waveforms)
    axes = panels(figure, curve, held, who)
    for ax in axes:
        _shade(ax, curve)
    _axis_of(axes, curve, held)
    figure.align_ylabels(axes)
    _fit(figure.suptitle(_cut(comparison.circuit.title or comparison.circuit.name, _LONGEST_TITLE), size=15))
    _fit(axes[0].set_title(_verdict(comparison, curve, who), size=12))
    _legend(figure, axes, curve)


def _draw_phasors(figure: Figure, curve: CurveComparison, held: Held, who: str) -> list[Axes]:
    from matplotlib.ticker import MaxNLocator

    axes = _panels(figure, (3, 3, 4), "log")
    _pair(axes[0], held, _decibels(held.exact), _decibels(held.other), who, least=2.0)
    axes[0].set_ylabel(f"magnitude, dB (1 {curve.unit})")
    _pair(axes[1], held, *_phases(held), who, least=20.0)
    axes[1].yaxis.set_major_locator(MaxNLocator(6, steps=[1, 1.5, 3, 4.5, 9, 10]))
    axes[1].set_ylabel("phase, degrees")
    _draw_relative(axes[2], held)
    return axes


def _draw_density(figure: Figure, curve: CurveComparison, held: Held, who: str) -> list[Axes]:
    from matplotlib.ticker import EngFormatter

    axes = _panels(figure, (3, 2), "log")
    exact, other = np.abs(held.exact), np.abs(held.other)
    low, high = _decades(exact, other)
    _pair(axes[0], held, _positive(exact), _positive(other), who, limits=(low, high))
    axes[0].yaxis.set_major_formatter(EngFormatter())
    axes[0].set_ylabel(f"density, {curve.unit}")
    _draw_relative(axes[1], held)
    return axes


def _draw_waveforms(figure: Figure, curve: CurveComparison, held: Held, who: str) -> list[Axes]:
    axes = _panels(figure, (3, 2), "linear")
    exact, other = held.exact.real.astype(float), held.other.real.astype(float)
    # Six figures are written beside the axis; a span below that would show the same number at every line.
    least = max(1e-3 * float(np.nanmax(np.abs([exact, other]), initial=0.0)), 1e-15)
    _pair(axes[0], held, exact, other, who, least=least)
    what = "voltage" if curve.unit == "V" else "current"
    axes[0].yaxis.set_major_formatter(_told_in(curve.unit))
    axes[0].set_ylabel(f"{what}, {curve.unit}")
    _draw_apart(axes[1], held, np.abs(other - exact), held.allowed)
    axes[1].yaxis.set_major_formatter(_told_in(curve.unit))
    axes[1].set_ylabel(f"|other \N{MINUS SIGN} exact|, {curve.unit}")
    return axes


def _draw_relative(ax: Axes, held: Held) -> None:
    from matplotlib.ticker import FuncFormatter

    exact = np.abs(held.exact)
    apart, allowed = (100 * part / exact for part in (np.abs(held.other - held.exact), held.allowed))
    _draw_apart(ax, held, apart, allowed)
    ax.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    ax.set_ylabel("|other \N{MINUS SIGN} exact| / |exact|, %")


def _panels(figure: Figure, heights: tuple[int, ...], scale: Literal["log", "linear"]) -> list[Axes]:
    grid = figure.subplots(len(heights), 1, sharex=True, squeeze=False, height_ratios=heights)
    grid[0, 0].set_xscale(scale)
    return list(grid[:, 0])


def _pair(
    ax: Axes,
    held: Held,
    exact: Float,
    other: Float,
    who: str,
    *,
    least: float = 0.0,
    limits: tuple[float, float] | None = None,
) -> None:
    """Both curves, the other one dashed on top so that both are seen where they agree.

    least: the least height of the panel, in the unit of the curves; limits: of a logarithmic axis
    """
    if limits is not None:
        ax.set_yscale("log")
        ax.set_ylim(*limits)
    _line(ax, held.axis, exact, label="exact", color=EXACT, linewidth=3)
    _line(ax, held.axis, other, label=f"other: {who}", color=OTHER, linewidth=1.6, linestyle=(0, (5, 2)))
    shown = np.concatenate([exact, other])
    shown = shown[np.isfinite(shown)]
    if limits is None and len(shown):
        low, high = float(shown.min()), float(shown.max())
        margin = max(0.06 * (high - low), (least - (high - low)) / 2)
        ax.set_ylim(low - margin, high + margin)


def _draw_apart(ax: Axes, held: Held, apart: Float, allowed: Float) -> None:
    """The difference and the area that is allowed, on a logarithmic axis; no difference at all is no line."""
    apart, allowed = _positive(apart), _positive(allowed)
    low, high = _decades(apart, allowed)
    ax.set_yscale("log")
    ax.set_ylim(low, high)
    x, edge = _thinned(held.axis, allowed, steep=ax.get_xscale() == "log")
    ax.fill_between(x, low, np.maximum(edge, low), color=ALLOWANCE, alpha=0.25, linewidth=0)
    _line(ax, held.axis, allowed, label="allowed", color=ALLOWANCE, linewidth=2)
    _line(ax, held.axis, apart, label="difference", color=DIFFERENCE, linewidth=1.6)


def _line(ax: Axes, axis: Float, values: Float, **style: Any) -> None:
    few = len(axis) <= _FEW_POINTS
    x, y = _thinned(axis, values, steep=ax.get_xscale() == "log")
    ax.plot(x, y, marker="o" if few else "", markersize=4, **style)


def _thinned(axis: Float, values: Float, *, steep: bool) -> tuple[Float, Float]:
    """The points of a long curve that are seen: the ends and the extremes within each column of pixels.

    steep: columns are equally wide along the logarithm of the axis
    """
    if len(axis) <= MOST_POINTS:
        return axis, values
    place = np.log(axis) if steep else axis
    column = np.floor((place - place[0]) / (place[-1] - place[0]) * WIDTH)
    starts = np.flatnonzero(np.diff(column, prepend=-1.0))
    stops = np.append(starts[1:], len(axis))
    kept: set[int] = set()
    for start, stop in zip(starts.tolist(), stops.tolist(), strict=True):
        kept.update((start, stop - 1))
        finite = start + np.flatnonzero(np.isfinite(values[start:stop]))
        if len(finite):
            kept.update((int(finite[np.argmin(values[finite])]), int(finite[np.argmax(values[finite])])))
    index = np.array(sorted(kept))
    return axis[index], values[index]


def _positive(values: Float) -> Float:
    """The values, what a logarithmic axis cannot show left out."""
    return np.where(np.isfinite(values) & (values > 0), values, np.nan)


def _decades(*lines: Float) -> tuple[float, float]:
    """Whole decades around all lines, at most `_DECADES` of them."""
    shown = np.concatenate([_positive(line) for line in lines])
    shown = shown[np.isfinite(shown)]
    if not len(shown):
        return 1e-3, 1.0
    # Where two curves cross the difference dips without end; the deepest hundredth says nothing.
    top = min(math.ceil(math.log10(float(shown.max())) + 0.1), 300)
    bottom = math.floor(math.log10(float(np.quantile(shown, 0.01))))
    bottom = max(min(bottom, top - 1), top - _DECADES, -300)
    return 10.0**bottom, 10.0 ** max(top, bottom + 1)


def _decibels(values: npt.NDArray[Any]) -> Float:
    result: Float = 20 * np.log10(_positive(np.abs(values)))
    return result


def _phases(held: Held) -> tuple[Float, Float]:
    """Both phases in degrees without jumps, that of the other curve on the same turn as the exact one."""
    exact, other = np.angle(held.exact), np.angle(held.other)
    there = held.exact != 0  # zero has no phase
    seen = there & (held.other != 0)
    first, second = np.full(len(exact), np.nan), np.full(len(exact), np.nan)
    first[there] = np.unwrap(exact[there])
    apart = np.angle(np.exp(1j * (other[seen] - exact[seen])))
    second[seen] = first[seen] + np.unwrap(apart)
    return np.degrees(first), np.degrees(second)


def _shade(ax: Axes, curve: CurveComparison) -> None:
    first = _shown(curve).axis[0]
    starts = [max(span.start, first) for span in curve.spans]
    spans = [(start, span.stop - start) for start, span in zip(starts, curve.spans, strict=True)]
    if spans:
        ax.broken_barh(
            spans, (0, 1), transform=ax.get_xaxis_transform(), color=SPAN, alpha=0.2, linewidth=2, zorder=0
        )


def _axis_of(axes: list[Axes], curve: CurveComparison, held: Held) -> None:
    """The common axis: seconds, or hertz on a logarithmic scale."""
    from matplotlib.ticker import LogLocator, MaxNLocator, NullFormatter

    timed = curve.analysis == "transient"
    ax = axes[-1]
    axis = held.axis
    if not timed:
        decades = math.log10(axis[-1] / axis[0])
        subs = (1.0,) if decades > 3 else (1.0, 2.0, 5.0)
        ax.xaxis.set_major_locator(LogLocator(subs=subs) if decades > 0.8 else MaxNLocator(6))
        ax.xaxis.set_minor_formatter(NullFormatter())
    ax.xaxis.set_major_formatter(_told_in("s" if timed else "Hz"))
    ax.set_xlim(axis[0], axis[-1])
    ax.set_xlabel("time, s" if timed else "frequency, Hz")
    for panel in axes:
        if panel.get_yscale() == "log":
            panel.yaxis.set_minor_formatter(NullFormatter())


def _told_in(unit: str) -> Formatter:
    from matplotlib.ticker import FuncFormatter

    return FuncFormatter(lambda value, _: format_quantity(value, unit, 6))


def _verdict(comparison: Comparison, curve: CurveComparison, who: str) -> str:
    wrong = sum(each.verdict == "differ" for each in comparison.curves)
    told = (
        f"differs from {who} in {wrong} of {len(comparison.curves)} curves" if wrong else f"agrees with {who}"
    )
    return f"{told}; shown: {_cut(curve.name, _LONGEST_NAME)}, {curve.analysis}"


def _legend(figure: Figure, axes: list[Axes], curve: CurveComparison) -> None:
    """One legend below all panels, where it covers nothing."""
    from matplotlib.artist import Artist
    from matplotlib.patches import Patch

    lines = [*axes[0].get_lines()[:2], *axes[-1].get_lines()]
    handles: list[Artist] = [*lines]
    if curve.spans:
        handles.append(Patch(color=SPAN, alpha=0.2, label=_spans_in_words(curve)))
    figure.legend(handles=handles, loc="outside lower center", ncols=2, frameon=False)


def _spans_in_words(curve: CurveComparison) -> str:
    unit = "s" if curve.analysis == "transient" else "Hz"
    ends = [format_quantity(end, unit) for end in (curve.spans[0].start, curve.spans[-1].stop)]
    count = len(curve.spans)
    within = f", {count} spans" if count > 1 else ""
    return f"more than allowed: {ends[0]} to {ends[1]}{within}"


def _cut(text: str, longest: int) -> str:
    shown = printable(text)
    return shown if len(shown) <= longest else shown[: longest - 1] + "\N{HORIZONTAL ELLIPSIS}"


def _fit(text: Text) -> None:
    """Make a line of wide letters small enough for the picture."""
    wide, room = text.get_window_extent().width, 0.88 * WIDTH
    if wide > room:
        text.set_fontsize(float(text.get_fontsize()) * room / wide)
