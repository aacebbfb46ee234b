"""The poles of any linear network, and its transfer functions near them by integrals around them.

Eigenvalues of the equations (A0 + p A1) x = 0 only tell where poles lie. Around each place, circles count
them and fix them: the trace of (A0 + z A1)^-1 A1 integrates to their number, z times it to their sum (the
argument principle), and the exact response itself integrates to the residues. The trapezoidal rule on a
circle converges geometrically (L. Trefethen, J. Weideman, SIAM Rev. 56(3):385-458, 2014). Where several poles
lie together, as in a chain of equal buffered sections, no residues exist that double precision could hold;
the points of the circle, weighted with the response there, then stand for them in Cauchy's formula.
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
_POINTS = 64  # on a circle at least; a point's error falls as the ratio of its radius to other distances does
_NEAR = (
    0.15,
    0.05,
    0.015,
    0.005,
    0.0,
)  # poles closer than this, relatively, are taken together if there is room
_LEAST_RATIO = 1.5  # between a circle and the poles inside and outside it
_ROUNDING = 1e-13  # of the greatest response on a circle: what rounding leaves of a residue that is zero
_MOST_SPLIT = 4  # poles on one circle that are told apart
_APART = 0.02  # of the circle's radius, by how much they must differ
_TOLD_APART = 1e-4  # of their size, from which on undamped poles are never taken together
_WINDOW = 1e3  # a shifted eigenproblem serves poles within this factor of its shift


@dataclass(frozen=True)
class Place:
    """One pole (count 1) or several together, in the upper half plane or on the real axis.

    pole: rad/s, the mean of those inside; count: how many; centre, radius, points: the circle around them
    members: the single ones where they are far enough apart to be told from each other, else none
    """

    pole: complex
    count: int
    centre: complex
    radius: float
    points: int
    members: tuple[complex, ...] = ()


def circle(centre: complex, radius: float, points: int) -> Complex:
    """Points on a circle, none of them on the horizontal line through its centre."""
    angle = (np.arange(points) + 0.5) * (2 * math.pi / points)
    return np.asarray(centre + radius * np.exp(1j * angle))


def pole_places(network: Network) -> tuple[Place, ...]:
    """Where the natural frequencies lie, slowest first. Raises UndecidedError beyond MOST_UNKNOWNS
    unknowns.
    """
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
        for circled in _circles(found, span_of(network).low)
        if (place := _counted(constant, slope, circled, span_of(network).low)) is not None
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


def _circles(found: list[complex], slowest: float) -> list[tuple[complex, float, int]]:
    """Circles (centre, radius, points) about poles that lie together, each well clear of all others.

    Near poles share a circle, for between them the response is great; where they form a long chain, with too
    little room around it, the chain is cut at its wider gaps.
    """
    places = []
    for pole in found:
        real = abs(pole.imag) < 1e-3 * abs(pole)  # a double real pole splits into a pair just off the axis
        here = 0.0 if abs(pole) < 1e-6 * slowest else pole.real
        places.append(complex(here, 0.0) if real else pole)
    circles = []
    waiting = [(group, 0) for group in _linked(places, _NEAR[0])]
    while waiting:
        group, level = waiting.pop()
        made = _circle_about(group, places, slowest)
        if made is None and level + 1 < len(_NEAR):
            waiting.extend((part, level + 1) for part in _linked(group, _NEAR[level + 1]))
        elif made is not None:
            circles.append(made)
    return circles


def _linked(poles: list[complex], near: float) -> list[list[complex]]:
    """Groups of poles joined by relative distances up to `near`."""
    groups: list[list[complex]] = []
    for pole in sorted(poles, key=abs):
        touching = [
            group for group in groups if any(abs(pole - p) <= near * max(abs(pole), abs(p)) for p in group)
        ]
        joined = [pole, *(p for group in touching for p in group)]
        groups = [group for group in groups if not any(group is taken for taken in touching)] + [joined]
    return groups


def _circle_about(
    group: list[complex], all_of: list[complex], slowest: float
) -> tuple[complex, float, int] | None:
    centre = sum(group) / len(group)
    if centre == 0:
        return 0j, min(min((abs(p) for p in all_of if p), default=math.inf) / 3, slowest * 1e-2), _POINTS
    spread = max(abs(pole - centre) for pole in group)
    inside = set(group)
    others = [p for p in all_of if p not in inside] + [p.conjugate() for p in all_of if p.imag]
    reach = min((abs(p - centre) for p in others), default=math.inf)
    undamped = abs(centre.real) <= 1e-9 * abs(centre)
    if undamped and spread > _TOLD_APART * abs(centre):
        return None  # points of a circle about both would grow with time; each has room for its own
    damped = abs(centre) if undamped else abs(centre.real)
    # Half of what damps the poles stays: beyond, the points' own exponentials would die away too slowly.
    radius = min(0.45 * damped, reach / 2)
    if spread and radius < 3 * spread:
        radius = math.sqrt(spread * min(0.7 * damped, reach))
    ratio = min(reach / radius, radius / spread if spread else math.inf)
    if radius > 0.6 * damped or ratio < _LEAST_RATIO:
        return None
    return centre, radius, max(_POINTS, 2 * math.ceil(math.log(1e17) / math.log(ratio) / 2))


def _counted(
    constant: Float, slope: Float, circled: tuple[complex, float, int], slowest: float
) -> Place | None:
    """How many poles a circle holds, and their mean; None where it holds none after all."""
    centre, radius, number_of_points = circled
    points = circle(centre, radius, number_of_points)
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
    if not np.isfinite(number):
        return None
    count = round(number.real)
    # What is no whole number is a phantom of rounding, far beyond every mode as a rule; whoever uses the
    # places compares with the exact response, which shows where a mode is missing.
    if abs(number - count) > 1e-3 or count <= 0:
        return None
    pole = centre + complex((trace * weight * (points - centre)).sum()) / count
    if centre.imag == 0:
        pole = complex(pole.real, 0.0)
    if abs(pole) < 1e-6 * slowest:
        pole = 0j
    scaled = (points - centre) / radius
    sums = [complex((trace * weight * scaled**k).sum()) for k in range(1, count + 1)]
    return Place(pole, count, centre, radius, len(points), _members(sums, centre, radius))


def _members(sums: list[complex], centre: complex, radius: float) -> tuple[complex, ...]:
    """The poles with these power sums, in units of the circle, by Newton's identities; none if too near."""
    count = len(sums)
    if not 1 < count <= _MOST_SPLIT:
        return ()
    symmetric = [1 + 0j]
    for k in range(1, count + 1):
        terms = ((-1) ** (i - 1) * symmetric[k - i] * sums[i - 1] for i in range(1, k + 1))
        symmetric.append(sum(terms) / k)
    roots = np.roots([(-1) ** k * e for k, e in enumerate(symmetric)])
    if centre.imag == 0:
        roots = np.where(np.abs(roots.imag) < 1e-9, roots.real, roots)
    apart = np.abs(roots[:, None] - roots)[~np.eye(count, dtype=bool)]
    if apart.min() < _APART or np.abs(roots).max() > 1:
        return ()
    return tuple(complex(centre + radius * root) for root in roots)


def member_residues(place: Place, response: Sampled) -> Complex:
    """The residues (..., members) at a place whose poles are told apart, from the moments on its circle."""
    points = circle(place.centre, place.radius, place.points)
    scaled = (points - place.centre) / place.radius
    values = response(points) * ((points - place.centre) / place.points)
    moments = np.stack([(values * scaled**k).sum(axis=-1) for k in range(place.count)], axis=-1)
    roots = (np.array(place.members) - place.centre) / place.radius
    vandermonde = roots[None, :] ** np.arange(place.count)[:, None]
    return np.asarray(np.linalg.solve(vandermonde, moments[..., None])[..., 0])


def expanded(places: tuple[Place, ...], response: Sampled) -> tuple[Complex, Complex]:
    """Poles and residues whose partial fractions are the transfer functions' (their real parts are meant).

    response: the transfer functions at any s, exact
    Returns poles (terms,), in the upper half plane or on the axis, and residues (..., terms); those off the
    axis are doubled and stand for their conjugates too.
    """
    poles: list[Complex] = []
    residues: list[Complex] = []
    for place in places:
        points = circle(place.centre, place.radius, place.points)
        on_axis = place.centre.imag == 0
        kept = points[: place.points // 2] if on_axis else points
        values = response(kept)
        parts = values * ((kept - place.centre) / place.points)
        if place.count == 1 or place.pole == 0:
            poles.append(np.array([place.pole]))
            residues.append(_simple(place, kept, values, parts, on_axis))
        else:
            poles.append(kept)
            residues.append(2 * parts)
    if not poles:
        shape = response(np.ones(1, dtype=np.complex128)).shape[:-1]
        return np.empty(0, dtype=np.complex128), np.empty((*shape, 0), dtype=np.complex128)
    return np.concatenate(poles), np.concatenate(residues, axis=-1)


def _simple(place: Place, points: Complex, values: Complex, parts: Complex, on_axis: bool) -> Complex:
    """The residue of a simple pole; exactly zero where no more than rounding is left of it.

    Several charges that nothing drains have one simple pole at zero between them, unless one feeds another.
    """
    size = np.abs(values).max(axis=-1, keepdims=True) * place.radius
    if place.count > 1:
        second = (2 * parts * points).sum(axis=-1, keepdims=True).real
        if (np.abs(second) > _ROUNDING * size * place.radius).any():
            raise UndecidedError(
                "one part integrates what another has integrated, so the output grows for ever."
            )
    total = parts.sum(axis=-1, keepdims=True)
    total = 2 * (total.real if on_axis else total) + 0j
    return np.asarray(np.where(np.abs(total) <= _ROUNDING * size, 0.0, total))
