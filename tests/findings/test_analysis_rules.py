"""The rules about analyses: sweeps that miss what there is to see, steps too long, runs too short."""

from __future__ import annotations

import math
import re
import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import pytest

from rcnet.circuit import (
    Analyses,
    Circuit,
    Network,
    Place,
    StartingState,
    Sweep,
    TransientRun,
    parse_circuit_file,
)
from rcnet.curves import Curves
from rcnet.findings import Finding, findings

CORNER = 1 / (2 * math.pi * 1e3 * 1e-6)  # of the filter below: 159.155 Hz


def rc(**drive: object) -> Network:
    """1 kohm and 1 uF behind a source: one pole, time constant 1 ms."""
    network = Network("Level gauge")
    network.add_voltage_source("Vin", "in", "0", **(drive or {"ac": 1}))
    network.add_resistor("R1", "in", "out", "1k")
    network.add_capacitor("C1", "out", "0", "1u")
    return network


def of(network: Network, output: str = "out", **analyses: object) -> Circuit:
    """A circuit that asks for analyses."""
    return Circuit(network, output=tuple(output.split()), analyses=Analyses(**analyses))  # type: ignore[arg-type]


def told(circuit: Circuit, code: str) -> list[Finding]:
    """The findings of one rule."""
    return [finding for finding in findings(circuit) if finding.code == code]


def from_lines(text: str) -> Circuit:
    """The filter above as a circuit file, with `[analysis]` as given."""
    head = (
        'output = "out"\n[parts]\nR1 = "in out 1k"\nC1 = "out 0 1u"\n[sources.Vin]\nnodes = "in 0"\nac = 1\n'
    )
    return parse_circuit_file(f"{head}[analysis]\n{text}\n", "gauge.rc.toml")


def pointed(finding: Finding) -> str:
    """The characters a finding points at."""
    assert finding.column is not None
    return finding.text[finding.column - 1 :][: finding.width]


# ----------------------------------------------------------------------------------- sweeps and their corners


@dataclass(frozen=True)
class Missed:
    """A sweep of the filter with its corner at 159 Hz, and what is said of it."""

    sweep: Sweep
    severity: str
    says: str
    remedy: str = ""


MISSED = {
    "ends below": Missed(
        Sweep(1, 100, 20),
        "warning",
        "159.2 Hz, beyond the ac sweep's end at 100 Hz.",
        "Sweep from 1 Hz to 1 kHz.",
    ),
    "begins above": Missed(
        Sweep(1e3, 1e6, 20),
        "warning",
        "159.2 Hz, below the ac sweep's start at 1 kHz.",
        "Sweep from 10 Hz to 1 MHz.",
    ),
    "ends just behind": Missed(
        Sweep(1, 300, 20), "note", "159.2 Hz, less than an octave from the ac sweep's end at 300 Hz."
    ),
    "begins just before": Missed(
        Sweep(100, 1e5, 20), "note", "159.2 Hz, less than an octave from the ac sweep's start at 100 Hz."
    ),
    "a linear sweep": Missed(Sweep(10, 100, 20, "lin"), "note", "beyond the ac sweep's end at 100 Hz."),
    "in octaves": Missed(Sweep(1, 64, 8, "oct"), "warning", "beyond the ac sweep's end at 64 Hz."),
}


@pytest.mark.parametrize("case", MISSED.values(), ids=MISSED)
def test_a_sweep_that_misses_the_corner(case: Missed) -> None:
    """Where it ends before the cutoff, a warning; less than an octave behind, or on purpose, a note."""
    (finding,) = told(of(rc(), ac=case.sweep), "sweep-misses-corner")
    assert finding.severity == case.severity
    assert case.says in finding.message
    assert case.remedy in finding.remedy
    assert format(CORNER, ".1f") in finding.message


SHOWN = {
    "an octave to either side": (rc(), Sweep(CORNER / 2.01, CORNER * 2.01, 20), "out"),
    "wide": (rc(), Sweep(1, 1e5, 20), "out"),
    "one frequency": (rc(), Sweep(1.0, 1.0, 1, "lin"), "out"),
    "no cutoff": (rc(), Sweep(1, 10, 20), "in"),
    "nobody looks at one node": (rc(), Sweep(1, 10, 20), ""),
    "no such node": (rc(), Sweep(1, 10, 20), "uot"),
    "nothing drives": (rc(dc=1), Sweep(1, 10, 20), "out"),
}


@pytest.mark.parametrize(("network", "sweep", "output"), SHOWN.values(), ids=SHOWN)
def test_a_sweep_that_shows_what_there_is(network: Network, sweep: Sweep, output: str) -> None:
    """No finding where the corner is well inside, where there is none, or nothing to look at."""
    assert told(of(network, output, ac=sweep), "sweep-misses-corner") == []


def test_what_rcnet_chose_is_not_held_against_the_designer() -> None:
    """Neither sweep nor run."""
    run = TransientRun(1e-6, 1e-6)
    square = {"low": 0, "high": 1, "frequency": 50}
    circuit = of(rc(ac=1, square=square), ac=Sweep(1, 10, 1), transient=run, chosen=True)
    assert {finding.code for finding in findings(circuit)} == set()


def test_one_of_two_corners_is_enough() -> None:
    """A band-pass whose upper corner lies outside: a note, because the lower one is shown."""
    network = Network("Pump")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_capacitor("C1", "in", "a", "1u")
    network.add_resistor("R1", "a", "0", "1k")
    network.add_resistor("R2", "a", "out", "1Meg")
    network.add_capacitor("C2", "out", "0", "1p")
    assert told(of(network, ac=Sweep(1, 1e6, 20)), "sweep-misses-corner") == []
    (finding,) = told(of(network, ac=Sweep(1, 1e4, 20)), "sweep-misses-corner")
    upper = re.search(r"at (\S+) kHz, beyond", finding.message)
    assert upper is not None
    # s^2 + B s + w^2 has its half-power points at (B +- sqrt(B^2 + 4 w^2)) / 2 about its centre w.
    width, centre = 1 / (1e3 * 1e-6) + 1 / (1e6 * 1e-6) + 1 / (1e6 * 1e-12), 1 / math.sqrt(1e-3 * 1e-6)
    cutoff = (width + math.sqrt(width**2 + 4 * centre**2)) / 2 / (2 * math.pi)
    assert float(upper[1]) == pytest.approx(cutoff / 1e3, rel=4e-4)
    assert finding.severity == "note"


def test_a_finding_points_at_the_end_of_the_sweep() -> None:
    """In a circuit file at `from` or `to` or the number of points, in a netlist at that number."""
    low = from_lines('ac = { from = "1 kHz", to = "1 MHz", per_decade = 20 }')
    assert pointed(told(low, "sweep-misses-corner")[0]) == "1 kHz"
    high = from_lines("ac = { from = 1, to = 100.0 }")
    assert pointed(told(high, "sweep-misses-corner")[0]) == "100.0"
    coarse = from_lines("ac = { from = 1, to = 1e6, per_decade = 1 }")
    assert pointed(told(coarse, "sweep-too-coarse")[0]) == "1"
    noise = from_lines('noise = { from = "1", to = "1 MHz", per_decade = 2 }')
    assert pointed(told(noise, "sweep-too-coarse")[0]) == "2"
    place = Place("a.cir", 5, ".ac DEC 1 1k 1Meg")
    netlist = replace(of(rc(), ac=Sweep(1e3, 1e6, 1)), origin="netlist", analysis_places={"ac": place})
    assert pointed(told(netlist, "sweep-misses-corner")[0]) == "1k"
    place = Place("a.cir", 5, ".ac dec 1 1 1Meg")
    netlist = replace(of(rc(), ac=Sweep(1, 1e6, 1)), origin="netlist", analysis_places={"ac": place})
    assert (told(netlist, "sweep-too-coarse")[0].column, pointed(told(netlist, "sweep-too-coarse")[0])) == (
        9,
        "1",
    )


# ------------------------------------------------------------------------------------ how dense a sweep is


def one_pole_off(points: int) -> float:
    """By how many dB reading between the points of a decade sweep is off at most, from |H| on paper."""
    grid = 10 ** np.linspace(0, 6, 6 * points + 1)
    fine = 10 ** np.linspace(0, 6, 6 * points * 64 + 1)
    level = [-10 * np.log10(1 + (f / CORNER) ** 2) for f in (grid, fine)]
    return float(np.abs(np.interp(np.log(fine), np.log(grid), level[0]) - level[1]).max())


@pytest.mark.parametrize("points", [1, 2, 3, 5, 20])
def test_a_corner_between_the_points(points: int) -> None:
    """Off by more than 0.5 dB is a finding; by how much is told, and the number asked for is enough."""
    off = one_pole_off(points)
    found = told(of(rc(), ac=Sweep(1, 1e6, points)), "sweep-too-coarse")
    assert bool(found) == (off > 0.5)
    for finding in found:
        said = re.search(r"off by (\S+) dB near (\S+) Hz", finding.message)
        asked = re.search(r"Ask for (\d+) points a decade", finding.remedy)
        assert said is not None
        assert asked is not None
        # Looked at in three places between two points.
        assert float(said[1]) == pytest.approx(off, rel=0.15)
        assert finding.severity == ("warning" if off > 3 else "note")
        assert one_pole_off(int(asked[1])) <= 0.5 < one_pole_off(int(asked[1]) // 2)


def test_a_resonance_narrower_than_the_spacing() -> None:
    """A tank of quality 1000 rises 60 dB between two points at 20 a decade; the sweep shows nothing of it."""
    network = Network("Acoustic tag")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", 1.0)
    network.add_inductor("L1", "a", "out", 1e-3)
    network.add_capacitor("C1", "out", "0", 1e-9)
    (finding,) = told(of(network, ac=Sweep(1.5e3, 1.5e7, 20)), "sweep-too-coarse")
    assert finding.severity == "warning"
    said = re.search(r"off by (\S+) dB near (\S+) kHz", finding.message)
    assert said is not None
    assert float(said[2]) == pytest.approx(1e-3 / (2 * math.pi * math.sqrt(1e-12)), rel=1e-3)
    assert float(said[1]) > 30
    assert finding.remedy == "Ask for a second, finer sweep around that frequency."


NOISE = {
    "two a decade": (Sweep(1, 1e6, 2), True),
    "five a decade": (Sweep(1, 1e6, 5), False),
    "one an octave": (Sweep(1, 1e6, 1, "oct"), True),
    "two an octave": (Sweep(1, 1e6, 2, "oct"), False),
    "linear": (Sweep(1, 1e6, 3, "lin"), False),
}


@pytest.mark.parametrize(("sweep", "coarse"), NOISE.values(), ids=NOISE)
def test_a_noise_sweep_too_coarse_to_integrate(sweep: Sweep, coarse: bool) -> None:
    """Fewer than five points a decade: a note."""
    found = told(of(rc(), noise=sweep), "sweep-too-coarse")
    assert [finding.severity for finding in found] == ["note"] * coarse


@pytest.mark.ngspice
def test_ngspice_integrates_a_coarse_noise_sweep_wrongly(ngspice: Callable[[str], Curves]) -> None:
    """The total of one pole is sqrt(kT/C); two points a decade miss it by more than 2 %, twenty by 0.1 %."""
    total = math.sqrt(1.380649e-23 * 300.15 / 1e-6)
    deck = "* t\nV1 in 0 AC 1\nR1 in out 1k\nC1 out 0 1u\n.noise v(out) V1 dec {} 1m 1g\n.end\n"
    for points, least, most in ((2, 0.01, 0.1), (20, 0.0, 1e-3)):
        curves = ngspice(deck.format(points))
        (curve,) = [curve for curve in curves if "onoise_total" in curve.name]
        assert least <= abs(float(np.real(curve.values[0])) / total - 1) <= most


# ------------------------------------------------------------------------------------ runs over time

STEP = {"from": 0, "to": 1}


@dataclass(frozen=True)
class Run:
    """A drive of the filter (time constant 1 ms) and a run; what is said of it, and the step asked for."""

    drive: dict[str, object]
    run: TransientRun
    says: str = ""
    step: str = ""


STEPS = {
    "a step of 2 ms": Run(
        {"step": STEP},
        TransientRun(0.1, 2e-3),
        "the time step may grow to 2 ms, longer than the time constant of 1 ms; what is as fast makes 100 % "
        "of the response.",
        "100 us",
    ),
    "a fiftieth of the run": Run(
        {"step": STEP}, TransientRun(0.2, 0.1), "the time step may grow to 4 ms, longer than", "100 us"
    ),
    "a greatest step": Run({"step": STEP}, TransientRun(0.2, 1e-6, 0.0, 5e-3), "may grow to 5 ms", "100 us"),
    "a sine": Run(
        {"sine": {"amplitude": 1, "frequency": 1000}},
        TransientRun(0.01, 2e-4),
        "the time step may grow to 200 us, longer than a tenth of the period of Vin, 1 ms.",
        "10 us",
    ),
    "as long as the time constant": Run({"step": STEP}, TransientRun(0.1, 1e-3)),
    "a short greatest step": Run({"step": STEP}, TransientRun(10.0, 0.1, 0.0, 1e-4)),
    "a slow edge": Run({"step": {**STEP, "rise": 0.1}}, TransientRun(0.2, 4e-3)),
    "a slow sine": Run({"sine": {"amplitude": 1, "frequency": 1}}, TransientRun(2.0, 4e-2)),
    "nothing moves": Run({"dc": 1}, TransientRun(1.0, 1.0)),
}


@pytest.mark.parametrize("case", STEPS.values(), ids=STEPS)
def test_a_step_longer_than_what_happens(case: Run) -> None:
    """A warning, with the step to write; none where nothing that fast is set off."""
    found = told(of(rc(**case.drive), transient=case.run), "step-too-long")
    assert [case.says in finding.message for finding in found] == [True] * bool(case.says)
    if found:
        assert found[0].severity == "warning"
        assert found[0].remedy == f'Write max_step = "{case.step}".'


def test_the_step_to_write_in_a_netlist() -> None:
    """The whole line; for a run of a million steps and more, another run."""
    circuit = replace(of(rc(step=STEP), transient=TransientRun(0.2, 2e-3, 0.1)), origin="netlist")
    assert told(circuit, "step-too-long")[0].remedy == "Write .tran 2m 200m 100m 100u."
    circuit = replace(circuit, analyses=Analyses(transient=TransientRun(0.2, 2e-3, use_initial=True)))
    assert told(circuit, "step-too-long")[0].remedy == "Write .tran 2m 200m 0 100u uic."
    circuit = replace(circuit, analyses=Analyses(transient=TransientRun(3600.0, 1.0)))
    assert told(circuit, "step-too-long")[0].remedy == (
        "Look at it in a shorter run of its own, with steps of 100 us."
    )


def test_a_small_mode_may_be_stepped_over() -> None:
    """A stray capacitance of a thousandth, a thousand times as fast, does not ask for a shorter step."""
    network = rc(step=STEP)
    network.add_resistor("R2", "out", "probe", "1k")
    network.add_capacitor("C2", "probe", "0", "1n")
    assert told(of(network, "probe", transient=TransientRun(0.05, 1e-4)), "step-too-long") == []


@pytest.mark.ngspice
def test_the_step_asked_for_is_short_enough_for_ngspice(ngspice: Callable[[str], Curves]) -> None:
    """As it stands, the run is off by 1 % of the step; with the line of the remedy by less than 0.1 %."""
    circuit = replace(of(rc(step=STEP), transient=TransientRun(0.1, 2e-3)), origin="netlist")
    (finding,) = told(circuit, "step-too-long")
    asked = finding.remedy.removeprefix("Write ").removesuffix(".")
    assert asked.startswith(".tran ")

    def off(line: str) -> float:
        curves = ngspice(f"* t\nVin in 0 PWL(0 0 1u 1)\nR1 in out 1k\nC1 out 0 1u\n{line}\n.end\n")
        (curve,) = [curve for curve in curves if curve.name == "v(out)"]
        late = curve.axis > 1e-6
        exact = 1 - np.exp(-(curve.axis[late] - 0.5e-6) / 1e-3)
        return float(np.abs(np.real(curve.values[late]) - exact).max())

    assert off(".tran 2m 100m 0 2m") > 5e-3
    assert off(asked) < 1e-3


SHORT = {
    "two time constants": ({"step": STEP}, 2e-3, "3 time constants of 1 ms would take until 3 ms.", "5 ms"),
    "after its beginning": (
        {"step": {**STEP, "at": "4 ms"}},
        5e-3,
        "3 time constants of 1 ms would take until 7 ms.",
        "10 ms",
    ),
    "half a period": (
        {"square": {"low": 0, "high": 1, "frequency": 50}},
        0.01,
        "one period of 20 ms would take until 20 ms.",
        "20 ms",
    ),
    "long enough": ({"step": STEP}, 3.01e-3, "", ""),
    "a whole period": ({"square": {"low": 0, "high": 1, "frequency": 30}}, 1 / 30, "", ""),
    "nothing moves": ({"dc": 1}, 1e-6, "", ""),
}


@pytest.mark.parametrize(("drive", "stop", "says", "until"), SHORT.values(), ids=SHORT)
def test_a_run_that_ends_before_anything_settles(
    drive: dict[str, object], stop: float, says: str, until: str
) -> None:
    """A note with the time to run to: three time constants, or one period."""
    found = told(of(rc(**drive), transient=TransientRun(stop, stop / 100)), "run-too-short")
    assert [(finding.severity, says in finding.message) for finding in found] == [("note", True)] * bool(says)
    assert [finding.remedy for finding in found] == [f"Let it run to {until}."] * bool(says)


# ------------------------------------------------------------------------------------ starting values


def test_a_starting_value_without_uic() -> None:
    """A warning at the `ic=`; with uic none, and without a run every starting value is idle."""
    place = Place("a.cir", 4, "C1 out 0 1u ic=0.5")
    start = StartingState({"out": 0.1}, {"C1": 0.5})
    circuit = replace(
        of(rc(step=STEP), transient=TransientRun(0.01, 1e-4)),
        origin="netlist",
        initial=start,
        places={"C1": place},
    )
    (finding,) = told(circuit, "start-ignored")
    assert finding.message == "the starting value of C1 is not used: the .tran line does not say uic."
    assert (finding.severity, finding.line, pointed(finding)) == ("warning", 4, "ic=0.5")
    used = Analyses(transient=TransientRun(0.01, 1e-4, use_initial=True))
    assert told(replace(circuit, analyses=used), "start-ignored") == []
    idle = told(replace(circuit, analyses=Analyses(ac=Sweep(1, 1e5, 20))), "start-ignored")
    assert {finding.message for finding in idle} == {
        "the starting value of out is not used: no run over time is asked for.",
        "the starting value of C1 is not used: no run over time is asked for.",
    }


@pytest.mark.ngspice
@pytest.mark.parametrize(("uic", "first"), [("", 0.0), (" uic", 0.5)])
def test_ngspice_passes_over_a_starting_value(
    ngspice: Callable[[str], Curves], uic: str, first: float
) -> None:
    """`ic=0.5` counts with uic only, exit code 0 either way."""
    curves = ngspice(f"* t\nVin in 0 0\nR1 in out 1k\nC1 out 0 1u ic=0.5\n.tran 1u 10u{uic}\n.end\n")
    (curve,) = [curve for curve in curves if curve.name == "v(out)"]
    assert curve.values[0] == pytest.approx(first, abs=1e-3)


# ------------------------------------------------------------------------------------ large networks


def test_large_networks_are_not_solved() -> None:
    """Beyond 5000 parts nothing is computed: ten thousand parts take a moment."""
    count = 5000
    network = Network("Long pipe")
    network.add_voltage_source("Vin", "n0", "0", ac=1, step=STEP)
    here, there = [f"n{k}" for k in range(count)], [f"n{k + 1}" for k in range(count)]
    network.add_resistors([f"R{k}" for k in range(count)], here, there, np.full(count, 1e3))
    network.add_capacitors([f"C{k}" for k in range(count)], there, ["0"] * count, np.full(count, 1e-9))
    circuit = of(network, f"n{count}", ac=Sweep(1e8, 1e9, 1), transient=TransientRun(1e-9, 1e-9))
    began = time.process_time()
    assert findings(circuit) == ()
    assert time.process_time() - began < 1
