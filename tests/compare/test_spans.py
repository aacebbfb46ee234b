"""Where differences begin and end, what they look like, what is granted, and how quickly it is found."""

from __future__ import annotations

import math
import time
from typing import Any

import numpy as np
import pytest

from rcnet import Curve, Curves, Network
from rcnet.circuit import Analyses, Circuit, Sweep, TransientRun
from rcnet.compare import Comparison, CurveComparison, Grant, compare, parse_grant
from rcnet.errors import RcnetError

R, C = 1e4, 1e-8
TAU = R * C
GRID = np.geomspace(10, 1e6, 101)
TIME = np.linspace(0, 1e-3, 2001)
STOP = 1e-3


def low_pass() -> Network:
    """One RC section under a sine of 1 kHz, 1 V ac."""
    net = Network("Flow meter filter")
    net.add_voltage_source("Vin", "in", "0", ac=1, sine={"amplitude": 1, "frequency": 1e3})
    net.add_resistor("R1", "in", "out", R)
    net.add_capacitor("C1", "out", "0", C)
    return net


CIRCUIT = Circuit(
    low_pass(),
    "flow-meter",
    output=("out",),
    analyses=Analyses(ac=Sweep(10, 1e6, 20), transient=TransientRun(STOP, STOP / 2000)),
)


def h(frequency: Any = GRID, tau: float = TAU) -> Any:
    """The textbook response."""
    return 1 / (1 + 2j * np.pi * np.asarray(frequency) * tau)


def wave(at: Any = TIME) -> Any:
    """The textbook answer to the sine from rest."""
    w = 2e3 * np.pi
    steady = (h(1e3) * np.exp(1j * w * np.asarray(at))).imag
    return steady + w * TAU / (1 + (w * TAU) ** 2) * np.exp(-np.asarray(at) / TAU)


def held(values: Any, grant: Grant | None = None, frequency: Any = GRID) -> Comparison:
    """The comparison of an ac curve with the section's."""
    other = Curve("v(out)", "ac", np.asarray(frequency), np.asarray(values, complex), "V")
    return compare(CIRCUIT, Curves("bench.raw", (other,)), grant=grant or Grant())


def held_over_time(values: Any, grant: Grant | None = None) -> Comparison:
    """The comparison of a transient with the section's."""
    other = Curve("v(out)", "transient", TIME, np.asarray(values, float), "V")
    return compare(CIRCUIT, Curves("bench.raw", (other,)), grant=grant or Grant())


def the_one(found: Comparison) -> CurveComparison:
    """The only curve compared."""
    (only,) = found.curves
    return only


# ---------------------------------------------------------------------- ends


@pytest.mark.parametrize("per_decade", [5, 20, 100])
def test_where_a_difference_outgrows_what_is_granted(per_decade: int) -> None:
    """A time constant 20 % off parts by 0.3 dB where the closed form says so, also between the points."""
    grid = np.geomspace(10, 1e6, 5 * per_decade + 1)
    # |1 + j x k| / |1 + j x| = 10^(-0.3/20), with x = omega tau and k = 1.2
    g = 10 ** (0.3 / 10)
    x = math.sqrt((g - 1) / (1.44 - g))
    curve = the_one(held(h(grid, 1.2 * TAU), Grant(db=0.3, deg=180), grid))
    (span,) = curve.spans
    step = (grid[1] / grid[0]) - 1
    assert span.start == pytest.approx(x / (2 * np.pi * TAU), rel=0.1 * step)
    assert span.stop == grid[-1]


def test_where_a_difference_in_time_outgrows_what_is_granted() -> None:
    """A level that drifts by 100 V/s is beyond 10 mV, and some 40 uV for the steps, from 100 us on."""
    (span,) = the_one(held_over_time(wave() + 100 * TIME, Grant(volts=1e-2))).spans
    assert 1e-4 <= span.start < 1e-4 + 2 * TIME[1]
    assert span.start not in TIME
    assert span.stop == TIME[-1]


def test_very_many_spans_are_told_as_fewer() -> None:
    """Of thousands of single points that differ, neighbours are told together; the worst stays the worst."""
    grid = np.geomspace(10, 1e6, 100_001)
    values = h(grid)
    values[::5] *= 1.001
    values[50_000] *= 1.5
    curve = the_one(held(values, frequency=grid))
    assert len(curve.spans) == 1000
    assert curve.worst.at == grid[50_000]
    assert any(span.worst.at == grid[50_000] for span in curve.spans)
    assert all(a.stop < b.start for a, b in zip(curve.spans, curve.spans[1:], strict=False))


# ---------------------------------------------------------------------- shapes

POLE = 1 / (1 + 1j * GRID / 3e4)
SHAPES: dict[str, tuple[Any, str]] = {
    "louder": (h() * 1.02, "gain offset of +0.172 dB"),
    "turned over": (-h(), "upside down"),
    "another corner": (h(GRID, 1.05 * TAU), "shifted along the axis, to 0.9524 times"),
    "a far corner": (h(GRID, 3 * TAU), "shifted along the axis, to 0.3333 times"),
    "one pole more": (h() * POLE, "extra pole at 30 kHz"),
    "one zero more": (h() / POLE, "extra zero at 30 kHz"),
    "steeper": (h() * (1j * GRID / 1e3) ** -0.1, "slope of -2 dB per decade"),
}


@pytest.mark.parametrize("case", SHAPES)
def test_shapes(case: str) -> None:
    """A simple difference is told in words, with its amount."""
    values, words = SHAPES[case]
    curve = the_one(held(values))
    assert [span.shape for span in curve.spans] == [words]


OVER_TIME: dict[str, tuple[Any, str, float, str]] = {
    "louder": (wave() * 1.02, "gain offset of ", 2.0, " %"),
    "higher": (wave() + 1e-3, "offset of ", 1e-3, ""),
    "later": (wave(np.maximum(TIME - 2e-7, 0)), "shifted along the axis, ", 200.0, " ns later"),
    "drifting": (wave() + 1e-3 + 5 * TIME, "slope of ", 5.0, " per second"),
}


@pytest.mark.parametrize("case", OVER_TIME)
def test_shapes_over_time(case: str) -> None:
    """So is one of a transient, its amount right to a hundredth."""
    values, before, amount, behind = OVER_TIME[case]
    span = the_one(held_over_time(values, Grant(volts=1e-6))).spans[-1]
    assert span.shape is not None
    told = span.shape.removeprefix(before).removesuffix(behind)
    assert float(told) == pytest.approx(amount, rel=0.01)


def test_what_has_no_simple_shape() -> None:
    """Noise on a curve is no shape, and a span of few points none either."""
    rng = np.random.default_rng(3)
    assert all(span.shape is None for span in the_one(held(h() * (1 + rng.normal(0, 0.01, 101)))).spans)
    values = h()
    values[3:6] *= 1.01
    assert [span.shape for span in the_one(held(values)).spans] == [None]


# ---------------------------------------------------------------------- grants

TURN = complex(math.cos(math.radians(2)), math.sin(math.radians(2)))
GRANTED: dict[str, tuple[Any, Grant, str]] = {
    "0.1 dB of 0.09": (h() * 10 ** (0.09 / 20), Grant(db=0.1), "agree"),
    "0.1 dB of 0.11": (h() * 10 ** (0.11 / 20), Grant(db=0.1), "differ"),
    "0.1 dB of -0.09": (h() * 10 ** (-0.09 / 20), Grant(db=0.1), "agree"),
    "0.1 dB of -0.11": (h() * 10 ** (-0.11 / 20), Grant(db=0.1), "differ"),
    "dB grant no phase": (h() * TURN, Grant(db=3), "differ"),
    "degrees grant no gain": (h() * 1.001, Grant(deg=90), "differ"),
    "3 deg of 2": (h() * TURN, Grant(deg=3), "agree"),
    "1 deg of 2": (h() * TURN, Grant(deg=1), "differ"),
    "both": (h() * TURN * 1.01, Grant(db=0.1, deg=3), "agree"),
    "1 % of 0.9 %": (h() * 1.009, Grant(relative=0.01), "agree"),
    "1 % of 1.1 %": (h() * 1.011, Grant(relative=0.01), "differ"),
    "a floor above": (h() + 9e-4, Grant(volts=1e-3), "agree"),
    "a floor below": (h() + 2e-3, Grant(volts=1e-3), "differ"),
    "a floor in amperes": (h() + 9e-4, Grant(amperes=1e-3), "differ"),
}


@pytest.mark.parametrize("case", GRANTED)
def test_what_is_granted(case: str) -> None:
    """A difference inside what is granted agrees, beyond it differs; the difference is told all the same."""
    values, grant, verdict = GRANTED[case]
    found = held(values, grant)
    assert found.verdict == verdict
    worst = the_one(found).worst
    assert worst.relative > 1e-4
    if verdict == "agree":
        assert worst.allowed >= abs(worst.other - worst.exact)


def test_a_grant_over_time_goes_by_the_greatest_value() -> None:
    """In a transient a share is one of the greatest value, so that crossings of zero spoil nothing."""
    assert held_over_time(wave() * 1.009, Grant(relative=0.01)).verdict == "agree"
    assert held_over_time(wave() * 1.011, Grant(relative=0.01)).verdict == "differ"


READ: dict[str, tuple[dict[str, str], Grant]] = {
    "all": (
        {"db": "0.1 dB", "deg": "2 deg", "relative": "1 %", "floor": "10 uV"},
        Grant(0.1, 2.0, 0.01, 1e-5, 0.0),
    ),
    "bare": (
        {"db": "0.1", "deg": "2", "relative": "0.01", "floor": "1e-5"},
        Grant(0.1, 2.0, 0.01, 1e-5, 1e-5),
    ),
    "amperes": ({"floor": "3 nA"}, Grant(amperes=3e-9)),
    "nothing": ({}, Grant()),
}


@pytest.mark.parametrize("case", READ)
def test_reading_a_grant(case: str) -> None:
    """Amounts are read with or without their unit; a bare floor is one in volts and in amperes."""
    texts, grant = READ[case]
    assert parse_grant(**texts) == grant


NONSENSE = [
    {"db": "much"},
    {"db": "-1"},
    {"db": "1 V"},
    {"deg": "inf"},
    {"deg": ""},
    {"relative": "nan"},
    {"relative": "1 Hz"},
    {"floor": "1 s"},
    {"floor": "-1 nA"},
]


@pytest.mark.parametrize("texts", NONSENSE, ids=str)
def test_nonsense_grants(texts: dict[str, str]) -> None:
    """What is no amount is refused in one sentence that names the option and says what to write."""
    with pytest.raises(RcnetError) as caught:
        parse_grant(**texts)
    (problem,) = caught.value.problems
    option = "--floor" if "floor" in texts else f"--allow-{next(iter(texts))}"
    assert option in problem.message
    assert problem.remedy


# ---------------------------------------------------------------------- size


@pytest.mark.parametrize("analysis", ["ac", "transient"])
def test_a_million_points_take_seconds(analysis: str) -> None:
    """A curve of 10^6 points is compared within two seconds of this machine's time."""
    count = 1_000_000
    if analysis == "ac":
        axis = np.geomspace(10, 1e6, count)
        values = h(axis)
    else:
        axis = np.linspace(0, STOP, count)
        values = wave(axis)
    other = Curve("v(out)", analysis, axis, values, "V")  # type: ignore[arg-type]
    begun = time.process_time()
    found = compare(CIRCUIT, Curves("bench.raw", (other,)))
    assert time.process_time() - begun < 4  # twice the promise, for machines that have more to do
    assert found.verdict == "agree"
