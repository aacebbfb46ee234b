"""In what simple way one curve lies off another over a span: an offset, a slope, a shift, an extra pole.

Each way is fitted by least squares; the simplest that explains more than 95 % of the squared difference, and
not much less than the best does, is told.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..curves import Analysis
from ..values import format_quantity
from .records import Float, Numbers

LEAST_POINTS = 5
EXPLAINS = 0.95
_MOST_POINTS = 400  # a fit needs no more
_ROUNDS = 8
_SAME = 4.0  # a simpler shape may leave this many times as much unexplained
_BESIDE = 8  # points to either side of a span that tell how the curve runs on


@dataclass(frozen=True, slots=True)
class _Fit:
    """A shape in words and what it leaves unexplained of the squared difference, 0 to 1."""

    says: str
    left: float


def shape_of(
    analysis: Analysis, axis: Float, exact: Numbers, other: Numbers, start: int, stop: int
) -> str | None:
    """The shape of the difference at points start to stop - 1, or None where none is simple."""
    if stop - start < LEAST_POINTS:
        return None
    pick = np.unique(np.linspace(start, stop - 1, min(stop - start, _MOST_POINTS)).astype(int))
    low, high = max(start - _BESIDE, 0), min(stop + _BESIDE, len(axis))
    around = np.unique(np.concatenate([np.arange(low, start), pick, np.arange(stop, high)]))
    inside = (around >= start) & (around < stop)
    with np.errstate(all="ignore"):
        if analysis == "transient":
            fits = _over_time(axis[around], exact[around], other[around], inside)
        else:
            fits = _over_frequency(axis[around], exact[around], other[around], inside)
    fits = [fit for fit in fits if math.isfinite(fit.left)]
    if not fits:
        return None
    best = min(fit.left for fit in fits)
    return next((fit.says for fit in fits if fit.left < 1 - EXPLAINS and fit.left <= _SAME * best), None)


# ---------------------------------------------------------------------- along frequency


def _over_frequency(f: Float, exact: Numbers, other: Numbers, inside: Numbers) -> list[_Fit]:
    """Fits of the ratio of the two curves, simplest first."""
    if f[0] <= 0 or not (exact.all() and other.all()):
        return []
    ratio = (other / exact)[inside]
    total = float((np.abs(ratio - 1) ** 2).sum())

    def left(model: Numbers) -> float:
        return float((np.abs(ratio - model) ** 2).sum()) / total

    x, log_ratio = np.log(f), _logarithm(other / exact)
    gain = float(ratio.real.mean())
    fits = [_Fit(_gain_words(gain), left(np.full(len(ratio), gain)))]
    fits += _poles(f[inside], ratio, left)
    log_exact = _logarithm(exact)
    fits.append(_shift(x, log_exact, log_ratio, inside))
    straight = x[inside] - x[inside].mean()
    turned = 1j * math.pi / 2 if np.iscomplexobj(ratio) else 0.0
    design = np.stack([np.ones(len(straight)), straight + turned]).T
    found = _least_squares(design, log_ratio[inside])
    fits.append(_Fit(f"slope of {20 * found[1]:+.3g} dB per decade", _SAME * left(np.exp(design @ found))))
    return fits


def _logarithm(values: Numbers) -> Numbers:
    if np.iscomplexobj(values):
        return np.asarray(np.log(np.abs(values)) + 1j * np.unwrap(np.angle(values)))
    return np.asarray(np.log(np.abs(values)))


def _gain_words(gain: float) -> str:
    size = f"gain offset of {20 * math.log10(abs(gain)):+.4g} dB" if gain else "nothing arrives"
    if gain >= 0:
        return size
    return "upside down" if abs(gain + 1) < 1e-3 else f"upside down, {size}"


def _poles(f: Float, ratio: Numbers, left: Callable[[Numbers], float]) -> list[_Fit]:
    """One pole or zero more: ratio = 1/(1 + j f/fp), or its inverse; magnitudes where the curve is real."""
    fits = []
    for word, power in (("pole", -1), ("zero", 1)):
        target = ratio if power == 1 else 1 / ratio
        if np.iscomplexobj(ratio):
            weight = np.abs(ratio) ** 2 if power == -1 else np.ones(len(f))
            share = float((weight * f * target.imag).sum() / (weight * f * f).sum())
            model = (1 + 1j * f * share) ** power
        else:
            square = float((f * f * (target**2 - 1)).sum() / (f**4).sum())
            share = math.sqrt(square) if square > 0 else math.nan
            model = np.sqrt(1 + square * f * f) ** power
        if share > 0:
            fits.append(_Fit(f"extra {word} at {format_quantity(1 / share, 'Hz')}", left(model)))
    return fits


def _shift(x: Float, log_exact: Numbers, log_ratio: Numbers, inside: Numbers) -> _Fit:
    """The other is the exact curve moved along the logarithm of frequency (Gauss-Newton)."""
    from scipy.interpolate import CubicSpline

    curve = CubicSpline(x, log_exact)
    slope, moved = curve.derivative(), 0.0
    known = inside
    model = np.zeros(len(x), dtype=log_exact.dtype)
    for _ in range(_ROUNDS):
        there = slope(x + moved)
        # Where the exact curve is not known so far out there is nothing to hold the other against.
        known = inside & (x + moved >= x[0]) & (x + moved <= x[-1])
        size = float((np.abs(there[known]) ** 2).sum())
        if not size > 0:
            break
        lacking = (log_ratio - model)[known]
        moved += float(np.real(np.conj(there[known]) * lacking).sum()) / size
        moved = min(max(moved, x[0] - x[-1]), x[-1] - x[0])
        model = curve(x + moved) - log_exact
    if 2 * known.sum() < inside.sum():
        return _Fit("", math.nan)
    ratio = np.exp(log_ratio[known])
    left = float((np.abs(ratio - np.exp(model[known])) ** 2).sum() / (np.abs(ratio - 1) ** 2).sum())
    return _Fit(f"shifted along the axis, to {math.exp(-moved):.4g} times", left)


def _least_squares(design: Numbers, wanted: Numbers) -> Float:
    """Real coefficients of complex columns."""
    both = np.concatenate([design.real, design.imag]), np.concatenate([wanted.real, wanted.imag])
    return np.asarray(np.linalg.lstsq(*both, rcond=None)[0], dtype=np.float64)


# ---------------------------------------------------------------------- along time


def _over_time(t: Float, exact: Numbers, other: Numbers, inside: Numbers) -> list[_Fit]:
    """Fits of the difference of the two curves, simplest first; each point weighs as long as it lasts."""
    weight = np.gradient(t)[inside]
    apart = (other - exact)[inside]
    total = float((weight * apart**2).sum())

    def fitted(*columns: Float) -> tuple[Float, float]:
        root = np.sqrt(weight)
        design = np.stack([column * root for column in columns]).T
        found = np.linalg.lstsq(design, apart * root, rcond=None)[0]
        rest = apart * root - design @ found
        return found, float((rest**2).sum()) / total

    ones, since = np.ones(len(apart)), t[inside] - t[inside].mean()
    (gain,), gain_left = fitted(exact[inside])
    (level,), level_left = fitted(ones)
    (_, slope), slope_left = fitted(ones, since)
    (late,), late_left = fitted(-np.gradient(exact, t)[inside])
    (tau,), tau_left = fitted(-np.gradient(other, t)[inside])
    sign = "later" if late > 0 else "earlier"
    fits = [
        _Fit(f"gain offset of {100 * gain:+.4g} %", gain_left),
        _Fit(f"offset of {level:+.4g}", level_left),
        _Fit(f"shifted along the axis, {format_quantity(abs(late), 's')} {sign}", late_left),
        _Fit(f"slope of {slope:+.4g} per second", _SAME * slope_left),
    ]
    if tau > 0:
        fits.insert(3, _Fit(f"extra pole at {format_quantity(1 / (2 * math.pi * tau), 'Hz')}", tau_left))
    return fits
