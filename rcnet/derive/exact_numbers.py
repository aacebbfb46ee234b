"""Exact numbers that rules of thumb stand for and that no claim is about."""

from __future__ import annotations

import math

import numpy as np

from ..errors import UndecidedError
from ..exact import limit, response, step_response
from .case import Case

_POINTS = 400  # of the grid on which a turning point is bracketed


def high_frequency_gain(case: Case) -> float:
    """The response's limit at infinite frequency, signed, 1."""
    return limit(case.network, case.pair, high=True)


def greatest_gain(case: Case) -> float:
    """The supremum of the response's magnitude, 1."""
    if case.profile is None:
        raise UndecidedError("the response has no greatest gain.")
    return math.pow(10, case.profile.peak / 20)


def peak_frequency(case: Case) -> float:
    """Where the response is greatest, Hz. Raises UndecidedError where that is at zero or infinity."""
    if case.profile is None or not 0 < case.profile.peaks[0] < math.inf:
        raise UndecidedError("the response has no peak between zero and infinite frequency.")
    return case.profile.peaks[0] / (2 * math.pi)


def roll_off(case: Case, start: float, stop: float) -> float:
    """How much is lost from one frequency to another, dB; both in Hz."""
    return case.measure("gain", at=start) - case.measure("gain", at=stop)


def least_frequency(case: Case) -> float:
    """Where the response is least between zero and infinite frequency, Hz."""
    return _least(case)[0]


def least_gain(case: Case) -> float:
    """The response's magnitude there, 1."""
    return _least(case)[1]


def _least(case: Case) -> tuple[float, float]:
    found = case.profile
    if found is None:
        raise UndecidedError("the response has no profile.")
    k = int(np.argmin(found.level))
    if k in (0, len(found.level) - 1):
        raise UndecidedError("the response has no dip between zero and infinite frequency.")
    low, high = math.log(found.omega[k - 1]), math.log(found.omega[k + 1])
    for _ in range(6):  # each time a hundred times narrower
        grid = np.linspace(low, high, _POINTS)
        size = np.abs(response(case.network, np.exp(grid) / (2 * math.pi), case.of))
        best = int(np.clip(np.argmin(size), 1, _POINTS - 2))
        low, high = float(grid[best - 1]), float(grid[best + 1])
    return math.exp(float(grid[best])) / (2 * math.pi), float(size[best])


def half_turn(case: Case, near: float) -> float:
    """The frequency nearest to `near` at which the response is real and negative, Hz."""
    from ..claims.profile import root

    def imaginary(frequency: float) -> float:
        return complex(response(case.network, [frequency], case.of)[0]).imag

    grid = near * np.geomspace(0.1, 10, 201)
    values = response(case.network, grid, case.of)
    turned = np.flatnonzero((np.sign(values.imag[:-1]) != np.sign(values.imag[1:])) & (values.real[:-1] < 0))
    if not len(turned):
        raise UndecidedError("the phase passes half a turn nowhere near.")
    k = int(turned[np.argmin(np.abs(np.log(grid[turned] / near)))])
    return root(imaginary, float(grid[k]), float(grid[k + 1]))


def droop(case: Case, width: float) -> float:
    """How far the response to a step has fallen after `width` seconds, over its first value, 1."""
    step = step_response(case.network, case.pair, case.driver)
    first, last = (float(value) for value in step(np.array([0.0, width])))
    if first == 0:
        raise UndecidedError("the step response starts at zero.")
    return 1 - last / first


def time_to(case: Case, share: float) -> float:
    """When the response to a unit step first reaches a value, s."""
    times = step_response(case.network, case.pair, case.driver).lifted(share).crossings()
    if not len(times):
        raise UndecidedError("the output does not reach the threshold.")
    return float(times[0])
