"""The least and the greatest magnitude of a response at each frequency over the tolerances."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from ..circuit import Conditions, Network
from ..errors import UndecidedError
from ..exact import ac_drive, dc_solvable, node_pair, response, solver_for, span_of
from .box import Box, box_of
from .many_responses import response_of
from .monotone import directions
from .profile import decibels
from .search import climb, corners, spread
from .sums import Sampler

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]

_MOST_CORNERS = 8  # parts up to which every corner is tried
_SAMPLES = 256
_MOST_PARTS = 200
_MOST_NUMBERS = 4_000_000  # in one array
_ROUNDS = 40
_SILENCE = 1e6  # dB: where a response vanishes, a climber towards less stops


@dataclass(frozen=True)
class Envelope:
    """lower, upper: dB, (frequencies,), -inf where the response vanishes; unpacks into the two.

    method: "proven" or "searched", as for bounds
    """

    lower: Float
    upper: Float
    method: Literal["proven", "searched"]

    def __iter__(self) -> Iterator[Float]:
        return iter((self.lower, self.upper))


def response_envelope(
    network: Network, frequency: npt.ArrayLike, of: str, conditions: Conditions | None = None
) -> Envelope:
    """The least and the greatest |H| at each frequency over the box of `box_of`, in dB.

    frequency: Hz, (frequencies,), zero or more; `of`: a node or a pair `"a b"`. Each frequency has corners of
    its own. Raises UndecidedError for more parts with a tolerance than can be searched, where nothing is
    proven; errors of the response as for `rcnet.exact.response`.
    """
    points = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
    nominal = decibels(response(network, points, of))
    box = box_of(network, conditions)
    if not len(box):
        return Envelope(nominal, nominal, "proven")
    ends = _proven(network, box, points, of)
    if ends is not None:
        return Envelope(np.minimum(*ends), np.maximum(*ends), "proven")
    if len(box) > _MOST_PARTS:
        raise UndecidedError(
            f"{len(box)} parts have a tolerance, too many to search.",
            remedy=f"Give tolerances to {_MOST_PARTS} parts at most.",
        )
    lower, upper = _searched(network, box, points, of)
    return Envelope(np.minimum(lower, nominal), np.maximum(upper, nominal), "searched")


def _proven(network: Network, box: Box, points: Float, of: str) -> tuple[Float, Float] | None:
    """The two corners' responses, where the shape of the network proves them; their order may differ."""
    if any(network.part(name).kind not in "RC" for name in box.names):
        return None
    signs = directions(network, "gain", of, {"at": 1.0})
    if signs is None:
        return None
    found = []
    for direction in (-1, 1):
        turned = np.array([direction * signs.get(name, 0) for name in box.names])
        place = np.where(turned > 0, 1.0, np.where(turned < 0, 0.0, box.home))
        found.append(decibels(response(network.with_values(box.named(place)), points, of)))
    return found[0], found[1]


def _searched(network: Network, box: Box, points: Float, of: str) -> tuple[Float, Float]:
    """The best of corners and quasi-random points at each frequency, and what climbing from there adds."""
    places = np.concatenate([corners(box.home, _MOST_CORNERS), spread(_SAMPLES, len(box))])
    answer = response_of(network, box.names, of)
    step = max(1, _MOST_NUMBERS // len(places))
    ends: list[list[Float]] = [[], []]
    for start in range(0, len(points), step):
        some = points[start : start + step]
        level = decibels(answer(box.values(places), some))
        for end, sign in zip(ends, (-1.0, 1.0), strict=True):
            best = np.argmax(np.where(np.isfinite(level), sign * level, -np.inf), axis=0)
            end.append(sign * _climbed(network, box, places[best], some, of, sign))
    return np.concatenate(ends[0]), np.concatenate(ends[1])


def _climbed(network: Network, box: Box, starts: Float, points: Float, of: str, sign: float) -> Float:
    """Heights reached from a start for each frequency, all climbing side by side."""
    answer = _at_own_frequency(network, box, of)
    omega = 2 * math.pi * points
    still = span_of(network).far_below
    s = np.where(omega == 0, 0.0 if dc_solvable(network) else still, 1j * omega)

    def level(places: Float, who: npt.NDArray[np.int64]) -> Float:
        return np.maximum(sign * decibels(answer(box.values(places), s[who])), -_SILENCE)

    return climb(level, starts, _ROUNDS, rivals=False)[1]


def _at_own_frequency(network: Network, box: Box, of: str) -> Callable[[Float, Complex], Complex]:
    """The response of samples, part values (samples, parts), each at an s of its own, (samples,)."""
    pair, solver, drive = node_pair(network, of), solver_for(network), ac_drive(network)
    if not solver.eliminates:
        sampler = Sampler(network, box.names, pair, drive.sources)
        return lambda values, s: np.asarray(sampler(values).at(s[:, None])[:, 0])
    rows = [network.part_index(name) for name in box.names]
    step = max(1, solver.block())

    def eliminated(values: Float, s: Complex) -> Complex:
        found = np.empty(len(values), dtype=np.complex128)
        for start in range(0, len(values), step):
            part = slice(start, start + step)
            table = np.repeat(network.arrays().values[:, None], len(s[part]), axis=1)
            table[rows] = values[part].T
            v = solver.solve(s[part], drive, pair, table).voltages
            found[part] = v[pair[0]] - v[pair[1]]
        return found

    return eliminated


__all__ = ["Envelope", "response_envelope"]
