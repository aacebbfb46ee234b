"""The poles of any linear network, and its transfer functions near them by integrals around them.

Eigenvalues of the equations (A0 + p A1) x = 0 only tell where poles lie. Around each place, circles count them
and fix them: the trace of (A0 + z A1)^-1 A1 integrates to their number, z times it to their sum (the argument
principle), and the exact response itself integrates to the residues. The trapezoidal rule on a circle
converges geometrically (L. Trefethen, J. Weideman, SIAM Rev. 56(3):385-458, 2014). Where several poles lie
together, as in a chain of equal buffered sections, no residues exist that double precision could hold; the
points of the circle, weighted with the response there, then stand for them in Cauchy's formula.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from . import nodal
from .span import span_of

Complex = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]
Sampled = Callable[[Complex], Complex]  # s (points,) to responses (..., points)

MOST_UNKNOWNS = 400
_POINTS = 64  # on a circle that keeps twice its radius from every other pole
_NEAR = 0.08  # poles closer than this, relatively, are taken together
_WINDOW = 1e3  # a shifted eigenproblem serves poles within this factor of its shift


@dataclass(frozen=True)
class Place:
    """One pole (count 1) or several together, in the upper half plane or on the real axis.

    pole: rad/s, the mean of those inside; count: how many; centre, radius: the circle around them
    """

    pole: complex
    count: int
    centre: complex
    radius: float


def circle(centre: complex, radius: float, points: int) -> Complex:
    """Points on a circle, none of them on the horizontal line through its centre."""
    angle = (np.arange(points) + 0.5) * (2 * math.pi / points)
    return np.asarray(centre + radius * np.exp(1j * angle))


def pole_places(network: Network) -> tuple[Place, ...]:
    """Where the natural frequencies lie, slowest first. Raises UndecidedError beyond MOST_UNKNOWNS unknowns."""
    eqs = nodal.equations(network)
    if eqs.size > MOST_UNKNOWNS:
        raise UndecidedError(
            f"the network has {eqs.size} unknowns; its natural modes are computed up to {MOST_UNKNOWNS}"
            " where it holds controlled sources, inductors or floating voltage sources.",
        )
    if eqs.size == 0:
        return ()
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    found = _eigenvalues(network, constant, slope)
    places = [
        place
        for centre, radius in _circles(found, span_of(network).low)
        if (place := _counted(constant, slope, centre, radius, span_of(network).low)) is not None
    ]
    return tuple(sorted(places, key=lambda place: (abs(place.pole.real), abs(place.pole.imag))))


def _eigenvalues(network: Network, constant: Float, slope: Float) -> list[complex]:
    """The poles in the upper half plane or on the axis, each from a shift of about its own size."""
    span = span_of(network)
    decades = math.log10(span.high / span.low)
    shifts = span.low * 10 ** np.linspace(0, decades, max(2, math.ceil(decades / math.log10(_WINDOW)) + 1))
    found: list[complex] = []
    for number, shift in enumerate(shifts.tolist()):
        try:
            inverse = np.linalg.eigvals(np.linalg.solve(constant + shift * slope, slope))
        except np.linalg.LinAlgError as exc:
            raise UndecidedError("the natural modes cannot be located: the equations are singular.") from exc
        with np.errstate(all="ignore"):
            poles = shift - 1 / inverse
        edge = math.sqrt(shifts[1] / shifts[0])
        size = np.abs(poles)
        low = 0.0 if number == 0 else shift / edge
        high = shift * edge * (100.0 if number == len(shifts) - 1 else 1.0)
        inside = np.isfinite(poles) & (size > low * 0.9) & (size < high * 1.1) & (poles.imag >= 0)
        found.extend(complex(pole) for pole in poles[inside])
    return found


def _circles(found: list[complex], slowest: float) -> list[tuple[complex, float]]:
    """Circles about groups of poles that keep their distance from all others."""
    groups: list[list[complex]] = []
    for pole in sorted(found, key=abs):
        real = abs(pole.imag) < 1e-3 * abs(pole)  # a double real pole splits into a pair just off the axis
        here = complex(0.0 if abs(pole) < 1e-6 * slowest else pole.real, 0.0) if real else pole
        near = [group for group in groups if any(_together(here, other, slowest) for other in group)]
        joined = [here, *(other for group in near for other in group)]
        groups = [group for group in groups if not any(group is taken for taken in near)] + [joined]
    circles = []
    for k, group in enumerate(groups):
        centre = sum(group) / len(group)
        spread = max(abs(pole - centre) for pole in group)
        others = [p for j, other in enumerate(groups) if j != k for p in other]
        others += [p.conjugate() for p in found if abs(p.imag) >= 1e-3 * abs(p)]
        reach = min((abs(p - centre) for p in others), default=math.inf)
        room = 0.45 * abs(centre.real) if abs(centre.real) > 1e-9 * abs(centre) else 0.45 * abs(centre)
        radius = min(reach / 2.5, room if centre else slowest * 1e-2)
        circles.append((centre, max(radius, 3 * spread)))
    return circles


def _together(a: complex, b: complex, slowest: float) -> bool:
    return abs(a - b) <= _NEAR * max(abs(a), abs(b)) or max(abs(a), abs(b)) < 1e-6 * slowest


def _counted(
    constant: Float, slope: Float, centre: complex, radius: float, slowest: float
) -> Place | None:
    """How many poles a circle holds, and their mean; None where it holds none after all."""
    points = circle(centre, radius, _POINTS)
    matrices = constant + points[:, None, None] * slope
    rows = 1 / np.abs(matrices).max(axis=2, keepdims=True)
    columns = 1 / np.abs(matrices * rows).max(axis=1, keepdims=True)
    try:
        solved = np.linalg.solve(matrices * rows * columns, slope * rows)
    except np.linalg.LinAlgError as exc:
        raise UndecidedError("the natural modes cannot be located: the equations are singular.") from exc
    trace = np.einsum("pii,pi->p", solved, columns[:, 0, :])
    weight = (points - centre) / len(points)
    number = complex((trace * weight).sum())
    count = round(number.real)
    if abs(number - count) > 1e-3:
        raise UndecidedError(f"the natural modes near {centre:.6g} rad/s cannot be told apart.")
    if count == 0:
        return None
    pole = centre + complex((trace * weight * (points - centre)).sum()) / count
    if centre.imag == 0:
        pole = complex(pole.real, 0.0)
    if abs(pole) < 1e-6 * slowest:
        pole = 0j
    return Place(pole, count, centre, radius)


def expanded(places: tuple[Place, ...], response: Sampled) -> tuple[Complex, Complex]:
    """Poles and residues whose partial fractions are the transfer functions' (their real parts are meant).

    response: the transfer functions at any s, exact
    Returns poles (terms,), in the upper half plane or on the axis, and residues (..., terms); those off the
    axis are doubled and stand for their conjugates too.
    """
    poles: list[Complex] = []
    residues: list[Complex] = []
    for place in places:
        points = circle(place.centre, place.radius, _POINTS)
        on_axis = place.centre.imag == 0
        kept = points[: _POINTS // 2] if on_axis else points
        parts = response(kept) * ((kept - place.centre) / _POINTS)
        if place.count == 1:
            total = parts.sum(axis=-1, keepdims=True)
            poles.append(np.array([place.pole]))
            residues.append(2 * (total.real if on_axis else total) + 0j)
        else:
            poles.append(kept)
            residues.append(2 * parts)
    if not poles:
        shape = response(np.ones(1, dtype=np.complex128)).shape[:-1]
        return np.empty(0, dtype=np.complex128), np.empty((*shape, 0), dtype=np.complex128)
    return np.concatenate(poles), np.concatenate(residues, axis=-1)
