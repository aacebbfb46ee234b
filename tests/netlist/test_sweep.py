"""The frequencies of a sweep: those ngspice makes, point for point."""

from __future__ import annotations

import random
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from rcnet.circuit import Sweep
from rcnet.errors import CircuitError
from rcnet.netlist import frequencies, sweep_fault

GRIDS = [
    Sweep(1.0, 1e6, 10),
    Sweep(1.0, 15.0, 10),
    Sweep(1e-3, 1e3, 20),
    Sweep(1.0, 10.0, 5000),  # steps so fine that a point or two lie beyond the end
    Sweep(1.0, 1000.0, 4, "oct"),
    Sweep(1.0, 1023.5, 4, "oct"),  # the last point lies a hair beyond the end
    Sweep(1.0, 10.0, 1000, "oct"),
    Sweep(10.0, 10.0, 1, "oct"),
    Sweep(5.0, 5.5, 3, "oct"),
    Sweep(5.0, 5.0, 1, "lin"),
    Sweep(1.0, 10.0, 2, "lin"),
    Sweep(0.0, 5.0, 5, "lin"),
    Sweep(3.0, 77.0, 101, "lin"),
]


def random_grids() -> list[Sweep]:
    """A hundred sweeps of every kind with ends of four digits."""
    rng = random.Random(5)
    made = []
    for _ in range(100):
        start = float(f"{10 ** rng.uniform(-2, 3):.4g}")
        stop = float(f"{start * 10 ** rng.uniform(1.3, 4):.5g}")
        made.append(Sweep(start, stop, rng.choice([3, 7, 10, 20]), rng.choice(["dec", "oct", "lin"])))
    return made


def card(sweep: Sweep) -> str:
    """The netlist's line."""
    return f".ac {sweep.kind} {sweep.points} {sweep.start!r} {sweep.stop!r}"


@pytest.mark.ngspice
@pytest.mark.parametrize("sweep", [*GRIDS, *random_grids()], ids=card)
def test_the_grid_is_the_simulators(ngspice: Callable[..., Any], sweep: Sweep) -> None:
    """As many points as ngspice makes, each within a few units of the last place."""
    ran = ngspice(f"* t\nV1 in 0 DC 0 AC 1\nR1 in 0 1k\n.options noopac\n{card(sweep)}\n.end\n")
    theirs = ran.curve("v(in)").axis
    ours = frequencies(sweep)
    assert len(ours) == len(theirs)
    # ngspice reads decimal numbers up to a unit off, and a step's rounding adds up over the grid.
    assert np.allclose(ours, theirs, rtol=4e-16 * max(len(ours), 4), atol=0)


FAULTS = {
    "milli for mega": ("ac", Sweep(1.0, 1e-3, 10), "ends below its start"),
    "no step": ("ac", Sweep(10.0, 11.0, 10), "less than one step"),
    "a unit under a decade": ("ac", Sweep(0.0011, 0.011, 1), "less than one step"),
    "equal ends": ("ac", Sweep(1.0, 1.0, 10), "its ends are equal"),
    "from zero": ("ac", Sweep(0.0, 1.0, 10), "begins at 0 Hz"),
    "octaves from zero": ("ac", Sweep(0.0, 1.0, 10, "oct"), "begins at 0 Hz"),
    "linear from below zero": ("ac", Sweep(-1.0, 1.0, 10, "lin"), "begins at -1 Hz"),
    "two linear points": ("ac", Sweep(1.0, 10.0, 2, "lin"), "one point only"),
    "one linear point": ("ac", Sweep(1.0, 10.0, 1, "lin"), "one point only"),
    "linear, falling": ("ac", Sweep(10.0, 1.0, 5, "lin"), "ends below its start"),
    "noise from zero": ("noise", Sweep(0.0, 1.0, 3, "lin"), "begins at 0 Hz"),
    "noise, decades from zero": ("noise", Sweep(0.0, 1.0, 3), "begins at 0 Hz"),
    "noise, falling": ("noise", Sweep(5.0, 1.0, 3), "ends below its start"),
}


@pytest.mark.parametrize(("analysis", "sweep", "fault"), FAULTS.values(), ids=FAULTS)
def test_a_sweep_that_is_no_use_is_named(analysis: str, sweep: Sweep, fault: str) -> None:
    """The reason says what ngspice makes of it."""
    assert fault in (sweep_fault(sweep, noise=analysis == "noise") or "")


@pytest.mark.ngspice
@pytest.mark.parametrize(("analysis", "sweep", "fault"), FAULTS.values(), ids=FAULTS)
def test_ngspice_makes_no_use_of_such_a_sweep(
    ngspice: Callable[..., Any], analysis: str, sweep: Sweep, fault: str
) -> None:
    """It refuses, never ends, gives no point, or one point only."""
    line = card(sweep) if analysis == "ac" else card(sweep).replace(".ac", ".noise v(in) V1")
    ran = ngspice(f"* t\nV1 in 0 DC 0 AC 1\nR1 in 0 1k\n{line}\n.end\n", timeout=0.7)
    if ran.code == 0 and ran.curves is not None:
        assert fault == "one point only"
        assert len(ran.curve("v(in)").axis) == 1


SOUND = {
    "whole decades": ("ac", Sweep(1.0, 1e6, 10)),
    "one decade": ("ac", Sweep(1.0, 10.0, 1)),
    "one linear point": ("ac", Sweep(5.0, 5.0, 1, "lin")),
    "one octave point": ("ac", Sweep(5.0, 5.0, 1, "oct")),
    "two noise points": ("noise", Sweep(1.0, 5.0, 2, "lin")),
    "narrow noise": ("noise", Sweep(1.0, 5.0, 1)),
    "equal noise": ("noise", Sweep(1.0, 1.0, 10)),
}


@pytest.mark.ngspice
@pytest.mark.parametrize(("analysis", "sweep"), SOUND.values(), ids=SOUND)
def test_a_sound_sweep_is_left_alone(ngspice: Callable[..., Any], analysis: str, sweep: Sweep) -> None:
    """What ngspice runs with the points asked for has no fault."""
    assert sweep_fault(sweep, noise=analysis == "noise") is None
    line = card(sweep) if analysis == "ac" else card(sweep).replace(".ac", ".noise v(in) V1")
    ran = ngspice(f"* t\nV1 in 0 DC 0 AC 1\nR1 in 0 1k\nR2 in 0 1k\n{line}\n.end\n")
    name = ("v(in)", "ac") if analysis == "ac" else ("onoise_spectrum", "noise")
    assert len(ran.curve(*name).axis) >= 1


RANGE = [
    Sweep(1e-320, 1e3, 10),
    Sweep(1.0, 1e308, 10),
    Sweep(1e-320, 1e308, 10, "oct"),
    Sweep(1e-320, 1e3, 5, "lin"),
    Sweep(0.0, 1e308, 5, "lin"),
]


@pytest.mark.parametrize("sweep", RANGE, ids=card)
def test_a_sweep_out_of_range_is_named(sweep: Sweep) -> None:
    """Ends that doubles can hardly hold give no points, and the reason tells the range."""
    assert len(frequencies(sweep)) == 0
    for noise in (False, True):
        assert "1e-30 Hz to 1e+30 Hz" in (sweep_fault(sweep, noise=noise) or "")


def test_the_whole_range_is_swept() -> None:
    """The limits themselves are allowed: sixty decades and the end."""
    whole = Sweep(1e-30, 1e30, 1)
    assert sweep_fault(whole) is None
    assert np.allclose(frequencies(whole), 10.0 ** np.arange(-30, 31), rtol=1e-13)


EMPTY = [Sweep(2.0, 1.0, 10), Sweep(0.0, 1.0, 10), Sweep(-1.0, 1.0, 3, "lin"), Sweep(1.0, float("inf"), 1)]


@pytest.mark.parametrize("sweep", EMPTY, ids=card)
def test_a_sweep_without_points_is_empty(sweep: Sweep) -> None:
    """No error and no endless loop: there are no points."""
    assert len(frequencies(sweep)) == 0


@pytest.mark.parametrize(
    "sweep",
    [Sweep(1.0, 10.0, 10**9), Sweep(1.0, 10.0, 10**9, "oct"), Sweep(1.0, 10.0, 10**9, "lin")],
    ids=card,
)
def test_too_many_points_are_refused(sweep: Sweep) -> None:
    """Memory is not filled with a sweep nobody can use."""
    with pytest.raises(CircuitError, match="points") as caught:
        frequencies(sweep)
    assert "at most 2000000" in (caught.value.remedy or "")
