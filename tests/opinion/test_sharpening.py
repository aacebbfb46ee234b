"""The settings a second opinion's transient is taken with: finer than asked for, never coarser, bounded."""

from __future__ import annotations

from typing import Any

import pytest

from rcnet import Network
from rcnet.circuit import Analyses, Circuit, TransientRun
from rcnet.netlist import write
from rcnet.opinion import ask
from rcnet.opinion.sharpening import sharpened

MOST_POINTS = 20_000


def circuit(run: TransientRun, *, frequency: float = 1e3, sections: int = 1, **more: Any) -> Circuit:
    """A ladder under a square wave."""
    net, last = Network("Pump counter"), "in"
    net.add_voltage_source("Vin", "in", "0", square={"low": 0, "high": 1, "frequency": frequency})
    for number in range(sections):
        node = "out" if number == sections - 1 else f"n{number}"
        net.add_resistor(f"R{number}", last, node, 1e3)
        net.add_capacitor(f"C{number}", node, "0", 1e-8)
        last = node
    return Circuit(net, "pump", output=("out",), analyses=Analyses(transient=run), **more)


def settings(made: Circuit) -> tuple[float | None, str | None, float]:
    """Longest step, reltol and beginning of what a simulator is given."""
    found = sharpened(made)
    run = found.analyses.transient
    assert run is not None
    return run.max_step, found.options.get("reltol"), run.start


def test_finer_than_asked_for() -> None:
    """A run is cut into 2000 steps at least, its tolerance is tightened, and it is shown from zero."""
    assert settings(circuit(TransientRun(1e-2, 1e-4, start=5e-3))) == (5e-6, "1e-05", 0.0)


@pytest.mark.parametrize(
    ("text", "kept"), [("1e-7", "1e-07"), ("1m", "1e-05"), ("junk", "1e-05"), ("100n", "1e-07")]
)
def test_never_coarser(text: str, kept: str) -> None:
    """What was asked for more strictly stays."""
    run = TransientRun(1e-2, 1e-4, max_step=1e-7)
    assert settings(circuit(run, options={"reltol": text})) == (1e-7, kept, 0.0)


def test_long_runs_and_large_networks_keep_their_own_settings() -> None:
    """Where fine steps would take long, the run is as asked for; so is a circuit without a transient."""
    long = circuit(TransientRun(1.0, 1e-4))
    large = circuit(TransientRun(1e-2, 1e-4), sections=2100)
    none = Circuit(long.network, "none", output=("out",))
    assert [sharpened(each) is each for each in (long, large, none)] == [True, True, True]


@pytest.mark.ngspice
@pytest.mark.parametrize("periods", [1, 10, 29])
def test_the_number_of_points_is_bounded(periods: int) -> None:
    """However many edges a sharpened run has, it gives at most 20 000 points."""
    opinion = ask(write(circuit(TransientRun(periods * 1e-3, periods * 1e-5))), "ngspice")
    assert opinion is not None
    assert 2000 <= len(opinion.curves.of("transient")[0]) <= MOST_POINTS
