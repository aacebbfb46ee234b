"""`.meas` lines: a simulator prints what stands beside them, and what stands beside them is exact."""

from __future__ import annotations

import math
import os
import re
import subprocess
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

import rcnet
from rcnet.circuit import (
    Analyses,
    Circuit,
    Claim,
    Network,
    Place,
    Request,
    StartingState,
    Sweep,
    TransientRun,
    measure_spec,
    parse_options,
)
from rcnet.circuit.circuit import Bound
from rcnet.errors import CircuitError
from rcnet.forms import sealed_deck
from rcnet.handover import sealed_netlist
from rcnet.netlist import parse_netlist
from rcnet.resources import starters

STARTERS = starters()
# 10 kohm and 10 nF: cutoff 1/(2 pi R C), time constant R C = 100 us.
R, C = 10e3, 10e-9
CUTOFF = 1 / (2 * math.pi * R * C)


def claim(measure: str, of: tuple[str, ...] = ("out",), **options: Any) -> Claim:
    """A claim that says nothing about the number."""
    spec = measure_spec(measure)
    bound = Bound(-math.inf, math.inf, "")
    return Claim(f"About {measure}", spec, of, parse_options(spec, options), bound)


def low_pass(
    *claims: Claim, ac: Sweep | None = None, run: TransientRun | None = None, **drive: Any
) -> Circuit:
    """A resistor into a capacitor, with claims."""
    network = Network("Flow meter filter")
    network.add_voltage_source("Vin", "in", "0", **{"ac": 1, "dc": 0, **drive})
    network.add_resistor("R1", "in", "out", R)
    network.add_capacitor("C1", "out", "0", C)
    return Circuit(network, output=("out",), claims=claims, analyses=Analyses(ac=ac, transient=run))


SWEEP = Sweep(10.0, 1e6, 20)


def expected(text: str) -> dict[str, tuple[float, float]]:
    """Of every measurement in a netlist: its exact value, and what is read off between two points."""
    joined = re.sub(r"\n\*   ", " ", text)
    found = re.findall(r"^\* expect (\w+) = (\S+) [^\n(]*(?:\((.*)\))?$", joined, re.MULTILINE)
    seen = {name: re.search(r"(\S+) read off", remark) for name, _, remark in found}
    return {
        name: (float(value), float(match[1]) if (match := seen[name]) else float(value))
        for name, value, _ in found
    }


def measured(text: str, folder: Path) -> dict[str, float]:
    """What ngspice prints for every measurement, run as a person runs it: without a raw file."""
    (folder / "in.cir").write_text(text, encoding="utf-8")
    environment = {
        "HOME": str(folder),
        "PATH": os.environ["PATH"],
        "LC_ALL": "C",
        "NGSPICE_MEAS_PRECISION": "15",
    }
    argv = [os.environ.get("RCNET_NGSPICE", "ngspice"), "-b", "-n", "in.cir"]
    ran = subprocess.run(
        argv,
        cwd=folder,
        env=environment,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        check=True,
    )
    said = ran.stdout + ran.stderr
    assert not re.search(r"failed|^Error|no such vector", said, re.MULTILINE), said
    return {name: float(value) for name, value in re.findall(r"^(\w+)\s+=\s+(\S+)", said, re.MULTILINE)}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", STARTERS)
def test_ngspice_measures_what_is_written_beside(name: str, tmp_path: Path) -> None:
    """In ac every number is the exact one, as a straight line between two points of the sweep shows it."""
    text = sealed_netlist(rcnet.load(STARTERS[name]), measures=True).text
    wanted, got = expected(text), measured(text, tmp_path)
    names = set(re.findall(r"^\.meas ac (\w+)", text, re.MULTILINE))
    assert names == set(wanted)
    for key, (_, seen) in wanted.items():
        # ngspice prints some results with seven digits whatever is asked for.
        assert got[key] == pytest.approx(seen, rel=2e-6, abs=1e-9), key


@pytest.mark.ngspice
@pytest.mark.parametrize("name", STARTERS)
def test_a_finer_sweep_measures_the_exact_values(name: str, tmp_path: Path) -> None:
    """With fifty times the points the exact values themselves come out."""
    circuit = rcnet.load(STARTERS[name])
    sweep = circuit.analyses.ac
    assert sweep is not None
    fine = replace(circuit, analyses=replace(circuit.analyses, ac=replace(sweep, points=50 * sweep.points)))
    text = sealed_netlist(fine, measures=True).text
    wanted, got = expected(text), measured(text, tmp_path)
    for key, (exact, _) in wanted.items():
        assert got[key] == pytest.approx(exact, rel=3e-6, abs=3e-6), key


@pytest.mark.ngspice
@pytest.mark.parametrize("name", ["leak-microphone", "level-sender", "valve-positioner"])
def test_ngspice_measures_over_time(name: str, tmp_path: Path) -> None:
    """In a run of short steps the numbers come out as they stand beside the lines."""
    circuit = rcnet.load(STARTERS[name])
    run = circuit.analyses.transient
    assert run is not None
    fine = replace(run, step=run.stop / 1e5, max_step=run.stop / 1e5)
    circuit = replace(circuit, analyses=replace(circuit.analyses, transient=fine))
    text = sealed_deck(circuit, "transient", measures=True)
    wanted, got = expected(text), measured(text, tmp_path)
    assert wanted
    for key, (exact, _) in wanted.items():
        assert got[key] == pytest.approx(exact, rel=3e-4), key


# Measure, options -> (name, value in closed form): a single pole, and a source of 2 V at 30 degrees.
CLOSED = {
    "cutoff": (claim("cutoff"), "cutoff", CUTOFF),
    "gain": (claim("gain", at=CUTOFF), "gain", 10 * math.log10(0.5) + 20 * math.log10(2)),
    "gain at the end": (claim("gain", at=1e6), "gain", 20 * math.log10(2 / math.hypot(1, 1e6 / CUTOFF))),
    "attenuation": (claim("attenuation", at=CUTOFF), "attenuation", 10 * math.log10(2)),
    "phase": (claim("phase", at=CUTOFF), "phase", -math.pi / 4 + math.pi / 6),
}


@pytest.mark.parametrize(("about", "name", "value"), CLOSED.values(), ids=CLOSED)
def test_the_values_are_those_of_a_single_pole(about: Claim, name: str, value: float) -> None:
    """H = 1/(1 + j f/f0); what the source gives is counted in, as the simulator shows it."""
    text = sealed_netlist(_driven(about), measures=True).text
    assert expected(text)[name][0] == pytest.approx(value, rel=1e-9)


def _driven(about: Claim) -> Circuit:
    circuit = low_pass(about, ac=SWEEP)
    source = replace(circuit.network.sources["Vin"], ac=2.0, ac_phase=30.0)
    return circuit.with_network(circuit.network.with_source(source))


EDGE = {"from": 0, "to": 2, "at": 1e-4, "rise": 1e-9}
RUN = TransientRun(1.1e-3, 1e-6)
IN_TIME = {
    "rise_time": (claim("rise_time"), math.log(9) * R * C),
    "delay": (claim("delay"), math.log(2) * R * C),
    "settling_time": (claim("settling_time", band=0.01), math.log(100) * R * C),
}


@pytest.mark.ngspice
@pytest.mark.parametrize(("about", "value"), IN_TIME.values(), ids=IN_TIME)
def test_the_times_are_those_of_a_single_pole(about: Claim, value: float, tmp_path: Path) -> None:
    """1 - exp(-t/RC): ln 9 RC from 10 % to 90 %, ln 2 RC to the half, ln 100 RC to 1 %; in ngspice too."""
    text = sealed_deck(low_pass(about, run=RUN, step=EDGE), "transient", measures=True)
    (found,) = expected(text).values()
    assert found[0] == pytest.approx(value, rel=1e-4)  # the edge of a nanosecond
    assert measured(text, tmp_path)[about.measure.name] == pytest.approx(value, rel=1e-3)


def test_a_falling_step_is_measured_downwards() -> None:
    """The crossings counted are those that the output makes."""
    down = {"from": 2, "to": 0, "at": 1e-4, "rise": 1e-9}
    text = sealed_deck(low_pass(claim("delay"), run=RUN, step=down), "transient", measures=True)
    assert "fall=1" in text
    assert expected(text)["delay"][0] == pytest.approx(math.log(2) * R * C, rel=1e-4)


@pytest.mark.ngspice
def test_a_period_is_the_run_s_last(tmp_path: Path) -> None:
    """Of a square wave far below the pole: mean, rms and ripple over the last period, which are its own."""
    square = {"low": 0, "high": 4, "frequency": 100, "duty": 0.25, "rise": 1e-6, "fall": 1e-6}
    about = [claim("mean"), claim("rms"), claim("ripple")]
    circuit = low_pass(*about, run=TransientRun(0.03, 1e-5, 0.0, 1e-5), square=square)
    text = sealed_deck(circuit, "transient", measures=True)
    wanted, got = expected(text), measured(text, tmp_path)
    assert wanted["mean"][0] == pytest.approx(1.0, rel=1e-6)  # 4 V for a quarter of the time
    # Of 4^2, the rising exponential of R C takes away (2 - 1/2) R C and the falling one adds R C / 2.
    assert wanted["rms"][0] == pytest.approx(math.sqrt(16 * (0.25 - R * C / 0.01)), rel=1e-3)
    assert wanted["ripple"][0] == pytest.approx(4.0, rel=1e-9)
    for key, (exact, _) in wanted.items():
        assert got[key] == pytest.approx(exact, rel=2e-4), key


NOT_MEASURED = {
    "pair": (claim("gain", ("in", "out"), at=1e3), "no difference of two"),
    "outside": (claim("gain", at=1e7), "10 MHz lies outside the sweep"),
    "kind": (claim("noise", **{"from": 0, "to": math.inf}), "not measured (noise): About noise"),
    "no such edge": (claim("cutoff", edge="lower"), "there is no lower cutoff"),
}


@pytest.mark.parametrize(("about", "says"), NOT_MEASURED.values(), ids=NOT_MEASURED)
def test_what_is_not_measured_is_told(about: Claim, says: str) -> None:
    """A claim that the simulator cannot measure is a comment with the reason, and the rest is measured."""
    text = sealed_netlist(low_pass(about, ac=SWEEP), measures=True).text
    assert says in re.sub(r"\n\*   ", " ", text)
    assert set(expected(text)) == {"cutoff", "peak_level"}


def test_a_wrapping_phase_is_not_measured() -> None:
    """Between two points of the sweep a straight line would cross the circle the wrong way."""
    network = Network("Delay line")
    network.add_voltage_source("Vin", "n0", "0", ac=1)
    for k in range(8):
        network.add_resistor(f"R{k}", f"n{k}", f"n{k + 1}", 1e3)
        network.add_capacitor(f"C{k}", f"n{k + 1}", "0", 1e-7)
    at = next(f for f in range(100, 10_000) if network.measure("phase", "n8", at=float(f)) < -180)
    circuit = Circuit(network, output=("n8",), claims=(claim("phase", ("n8",), at=float(at)),))
    text = sealed_netlist(replace(circuit, analyses=Analyses(ac=SWEEP)), measures=True).text
    assert "the phase wraps around" in re.sub(r"\n\*   ", " ", text)


def test_one_analysis_is_left_to_measure_in() -> None:
    """Of several analyses ngspice measures in the last it runs only: ac alone stays, and that is said."""
    circuit = rcnet.load(STARTERS["level-sender"])
    text = sealed_netlist(circuit, measures=True).text
    assert re.findall(r"^\.(ac|tran|op|noise)\b", text, re.MULTILINE) == ["ac"]
    assert "this netlist asks for one" in re.sub(r"\n\*   ", " ", text)
    alone = sealed_netlist(low_pass(ac=SWEEP), measures=True).text
    assert "asks for one" not in alone


def test_nothing_to_measure_in_is_an_error() -> None:
    """A circuit that only rests cannot be measured."""
    circuit = replace(low_pass(ac=None), analyses=Analyses(operating_point=True))
    with pytest.raises(CircuitError, match="nothing to measure in"):
        sealed_netlist(circuit, measures=True)


def test_a_measured_netlist_is_read_and_sealed() -> None:
    """What is read back holds the very measurements, and the seal covers them."""
    text = sealed_netlist(low_pass(claim("cutoff"), ac=SWEEP), measures=True).text
    back = parse_netlist(text, "x.cir")
    assert [request.text.split()[1] for request in back.requests] == ["cutoff", "peak_level"]
    assert back.seal is not None
    again = sealed_netlist(back, measures=True).text
    names = re.findall(r"^\.meas ac (\w+)", again, re.MULTILINE)
    assert len(names) == len(set(names)) == 4


def test_measurements_of_one_s_own_stay() -> None:
    """Those of the analysis that is left; others would find nothing."""
    requests = (
        Request(".meas", "ac mine max vdb(out)", Place("x", 1)),
        Request(".meas", "tran other max v(out)", Place("x", 2)),
    )
    circuit = replace(low_pass(ac=SWEEP), requests=requests)
    text = sealed_netlist(circuit, measures=True).text
    assert ".meas ac mine max vdb(out)" in text
    assert "other" not in text


def test_a_run_from_given_voltages_is_not_measured() -> None:
    """The claims are about a circuit at rest."""
    circuit = replace(low_pass(claim("delay"), run=RUN, step=EDGE), initial=StartingState({"out": 1.0}))
    assert "starts from given voltages" in sealed_deck(circuit, "transient", measures=True)
