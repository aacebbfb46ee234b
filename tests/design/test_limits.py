"""The bounds that forbid a target, held against closed forms and against many random ladders."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import brentq
from scipy.stats import gamma

from rcnet.design import limits


def _random_modes(seed: int, count: int, sections: int) -> np.ndarray:
    """Time constants over six decades, near each other and far apart."""
    rng = np.random.default_rng(seed)
    width = rng.uniform(0, 3, (count, 1))
    return 10 ** (width * rng.uniform(-1, 1, (count, sections)))


def _where(modes: np.ndarray, level: float) -> float:
    """The omega at which the product of 1 + (omega t)^2 is a level."""
    return math.exp(
        brentq(lambda x: np.log1p((math.exp(x) * modes) ** 2).sum() - math.log(level), -40, 40, xtol=1e-13)
    )


@pytest.mark.parametrize(("sections", "ratio"), [(1, 3.0), (2, 2.0), (3, 2.0), (4, 10.0), (6, 1.1)])
def test_most_attenuation(sections: int, ratio: float) -> None:
    """Equal isolated sections reach it, and no other modes exceed it."""
    # n isolated sections: cutoff at sqrt(2^(1/n) - 1) of one section's.
    one = math.sqrt(2 ** (1 / sections) - 1)
    isolated = 10 * sections * math.log10(1 + (ratio * one) ** 2)
    most = limits.most_attenuation(sections, ratio)
    assert most == pytest.approx(isolated, rel=1e-12)
    for modes in _random_modes(1, 300, sections):
        omega = ratio * _where(modes, 2.0)
        assert 10 * np.log10(1 + (omega * modes) ** 2).sum() <= most * (1 + 1e-9)


def test_most_attenuation_as_the_number_of_sections_grows() -> None:
    """One octave above the cutoff 12 dB are never reached; the inverse of the bound is its inverse."""
    values = [limits.most_attenuation(n, 2.0) for n in (1, 2, 3, 6, 1000)]
    assert values == sorted(values)
    assert values[-1] == pytest.approx(limits.attenuation_of_endless(2.0), rel=2e-3)
    assert limits.attenuation_of_endless(2.0) == pytest.approx(40 * math.log10(2))
    assert limits.most_attenuation(3, limits.least_ratio(3, 40.0)) == pytest.approx(40.0)


@pytest.mark.parametrize("level", [1.2, 2.0, 10.0, 1e4])
@pytest.mark.parametrize("sections", [1, 2, 3, 6])
def test_sum_of_modes(sections: int, level: float) -> None:
    """The sum of omega t lies between its bounds, whatever the modes."""
    least, most = limits.sum_of_modes(sections, level)
    lone = limits.least_sum(sections, level)
    for modes in _random_modes(2, 200, sections):
        total = _where(modes, level) * modes.sum()
        assert least * (1 - 1e-9) <= total <= most * (1 + 1e-9)
        assert total >= lone * (1 - 1e-9)


def test_least_edge_ratio() -> None:
    """One section of each kind: 3 + 2 sqrt 2; no band-pass of real modes is narrower."""
    assert limits.least_edge_ratio(1) == pytest.approx(3 + 2 * math.sqrt(2))
    for pairs in (1, 2):
        least = limits.least_edge_ratio(pairs)
        for modes in _random_modes(3, 150, 2 * pairs):
            y = np.log(modes)

            def fall(x: float, y: np.ndarray = y) -> float:
                return float(np.log(np.cosh(x - y)).sum())

            grid = np.linspace(y.min() - 5, y.max() + 5, 4001)
            values = np.log(np.cosh(grid[:, None] - y)).sum(axis=1)
            top, best = grid[values.argmin()], values.min() + math.log(2)
            edges = [brentq(lambda x: fall(x) - best, top, top + side * 20) for side in (-1, 1)]  # noqa: B023
            assert math.exp(edges[1] - edges[0]) >= least * (1 - 1e-4)


def test_greatest_band_gain() -> None:
    """Two corners far apart lose nothing; at the least ratio half is left."""
    assert limits.greatest_band_gain(3 + 2 * math.sqrt(2)) == pytest.approx(0.5)
    # Isolated corners at 1 and 100: H = s/((1 + s)(1 + s/100)), gain 1/(1 + 1/100) at the middle.
    a1, a2 = 1 + 1 / 100, 1 / 100
    root = math.sqrt(a1**2 + 4 * a2)
    ratio = (a1 + root) / (root - a1)
    assert limits.greatest_band_gain(ratio) == pytest.approx(1 / a1)


@pytest.mark.parametrize("share", [0.3, 1e-2, 1e-6])
@pytest.mark.parametrize("sections", [1, 2, 3])
def test_erlang_time(sections: int, share: float) -> None:
    """It is the upper quantile of a gamma distribution of whole order."""
    assert limits.erlang_time(sections, share) == pytest.approx(float(gamma.isf(share, sections)), rel=1e-9)


def _ripple_and_settling(modes: np.ndarray, share: float) -> tuple[float, float]:
    """Of isolated sections in a row under a square wave of period 1 and height 1, by matrix exponentials."""
    n = len(modes)
    a = np.diag(-1 / modes) + np.diag(1 / modes[1:], -1)
    b = np.concatenate([[1 / modes[0]], np.zeros(n - 1)])
    steady = -np.linalg.solve(a, b)  # for a drive of 1
    half = expm(a * 0.5)
    # After the rise the state runs towards `steady`, after the fall towards 0.
    low = np.linalg.solve(np.eye(n) - half @ half, half @ (np.eye(n) - half) @ steady)
    times = np.linspace(0, 0.5, 400)
    step = expm(a * (times[1] - times[0]))
    state, seen = low - steady, []
    for _ in times:
        seen.append((state + steady)[-1])
        state = step @ state
    # Both halves are alike about the mean of 1/2.
    ripple = 2 * max(abs(value - 0.5) for value in seen)

    def left(time: float) -> float:
        return float(-(expm(a * time) @ -steady)[-1])

    return ripple, brentq(lambda t: left(t) - share, 0, 200 * modes.sum(), xtol=1e-10)


@pytest.mark.parametrize("sections", [1, 2, 3])
def test_least_ripple(sections: int) -> None:
    """Nothing that settles as soon ripples less than the bound."""
    rng = np.random.default_rng(4)
    closest = math.inf
    for _ in range(25):
        modes = np.sort(10 ** rng.uniform(0, 1.5, sections) * rng.uniform(1, 1.3, sections))
        share = 10 ** rng.uniform(-4, -1)
        ripple, settling = _ripple_and_settling(modes, share)
        bound = limits.least_ripple(sections, share, settling, 1.0)
        assert 0 < bound <= ripple
        closest = min(closest, ripple / bound)
    assert closest < 4  # and it is no idle bound


def test_least_ripple_of_a_settling_within_a_period() -> None:
    """Where the argument does not hold, nothing is forbidden."""
    assert limits.least_ripple(3, 0.01, 0.1, 1.0) == 0.0
