"""Zeros of a function between points where its sign differs, many at once."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt

Float = npt.NDArray[np.float64]

_MOST_STEPS = 200


def zeros(function: Callable[[Float, npt.NDArray[np.int64]], Float], low: Float, high: Float) -> Float:
    """One zero in each [low, high], to the last digits.

    function(x, which): values at x (m,), `which` (m,) telling whose bracket each belongs to
    T. R. Chandrupatla, Adv. Eng. Software 28(3):145-149, 1997: inverse quadratic interpolation where it is
    safe, bisection elsewhere.
    """
    low, high = np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    which = np.arange(len(low))
    a, b = low.copy(), high.copy()
    fa, fb = function(a, which), function(b, which)
    best = np.where(np.abs(fa) <= np.abs(fb), a, b)
    c, fc, t = a.copy(), fa.copy(), np.full(len(a), 0.5)
    live = (fa != 0) & (fb != 0) & ((fa > 0) != (fb > 0))
    for _ in range(_MOST_STEPS):
        rows = np.flatnonzero(live)
        if not len(rows):
            break
        x = a[rows] + t[rows] * (b[rows] - a[rows])
        fx = function(x, rows)
        same = (fx > 0) == (fa[rows] > 0)
        c[rows], fc[rows] = np.where(same, a[rows], b[rows]), np.where(same, fa[rows], fb[rows])
        b[rows], fb[rows] = np.where(same, b[rows], a[rows]), np.where(same, fb[rows], fa[rows])
        a[rows], fa[rows] = x, fx
        nearer = np.abs(fa[rows]) < np.abs(fb[rows])
        best[rows] = np.where(nearer, a[rows], b[rows])
        width = np.abs(b[rows] - a[rows])
        tolerance = 2 * np.finfo(float).eps * np.abs(best[rows]) + 1e-300
        live[rows] = (fx != 0) & (width > 2 * tolerance)
        edge = np.minimum(tolerance / np.where(width > 0, width, 1.0), 0.5)
        t[rows] = np.clip(_step(a[rows], b[rows], c[rows], fa[rows], fb[rows], fc[rows]), edge, 1 - edge)
    return best


def _step(a: Float, b: Float, c: Float, fa: Float, fb: Float, fc: Float) -> Float:
    with np.errstate(all="ignore"):
        xi, phi = (a - b) / (c - b), (fa - fb) / (fc - fb)
        safe = (phi * phi < xi) & ((1 - phi) ** 2 < 1 - xi)
        quadratic = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
    return np.where(safe & np.isfinite(quadratic), quadratic, 0.5)
