"""The netlist handed on: analyses chosen, errors refused, the text read back before anybody gets it."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.api import write_netlist
from rcnet.circuit import (
    Analyses,
    Circuit,
    Network,
    Points,
    Sine,
    Square,
    Step,
    Sweep,
    TransientRun,
    Waveform,
)
from rcnet.errors import CircuitError, OutputError
from rcnet.handover import sealed_netlist, with_analyses
from rcnet.netlist import Reading, parse_netlist, read_netlist, writer


def low_pass(r: float = 1e3, c: float = 1e-6, **drive: object) -> Network:
    """R into C: corner 1/(2 pi R C)."""
    network = Network("Flow meter")
    network.add_voltage_source("Vin", "in", "0", **(drive or {"ac": 1}))
    network.add_resistor("R1", "in", "out", r)
    network.add_capacitor("C1", "out", "0", c)
    return network


# ---------------------------------------------------------------------------- analyses that are chosen


@settings(deadline=None, max_examples=40)
@given(st.floats(-2, 8), st.floats(-14, 0))
def test_the_sweep_chosen_covers_the_corner_with_room(log_r: float, log_c: float) -> None:
    """At least a decade below 1/(2 pi R C) and one above, in whole decades, twelve at most."""
    r, c = 10**log_r, 10**log_c
    chosen = with_analyses(low_pass(r, c)).analyses
    corner = 1 / (2 * math.pi * r * c)
    assert chosen.chosen
    assert chosen.ac is not None
    assert chosen.ac.start * 10 <= corner <= chosen.ac.stop / 10
    assert (chosen.ac.kind, chosen.ac.points) == ("dec", 20)
    decades = math.log10(chosen.ac.stop / chosen.ac.start)
    assert decades == pytest.approx(round(decades))
    assert decades <= 12
    assert math.log10(chosen.ac.start) == pytest.approx(round(math.log10(chosen.ac.start)))


@pytest.mark.parametrize("ratio", [1e2, 1e7, 1e11, 1e15])
def test_the_sweep_chosen_covers_both_corners_of_a_band(ratio: float) -> None:
    """High-pass and low-pass far apart: a decade outside either corner, whatever lies between."""
    network = Network("Leak listener")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_capacitor("C1", "in", "a", 1e-3 / (2 * math.pi))  # 1 mHz with 1 Mohm
    network.add_resistor("R1", "a", "0", 1e6)
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 1.0)
    network.add_resistor("R2", "b", "out", 1e3)
    network.add_capacitor("C2", "out", "0", 1 / (2 * math.pi * 1e3 * 1e-3 * ratio))
    sweep = with_analyses(network).analyses.ac
    assert sweep is not None
    assert sweep.start <= 1e-4 * (1 + 1e-9)
    assert sweep.stop >= 1e-2 * ratio * (1 - 1e-9)


def test_without_a_corner_there_is_a_sweep_all_the_same() -> None:
    """A divider has the same response everywhere; a dozen decades at most are looked at."""
    network = Network("Divider")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", "1k")
    network.add_resistor("R2", "out", "0", "1k")
    sweep = with_analyses(network).analyses.ac
    assert sweep is not None
    assert 1 < math.log10(sweep.stop / sweep.start) <= 12


def test_a_wide_network_without_a_corner_keeps_to_twelve_decades() -> None:
    """The bounds on the modes may lie twenty decades apart; what is swept stays readable."""
    network = low_pass(1e9, 1e-3)
    network.add_resistor("R2", "in", "x", 1e-3)
    network.add_capacitor("C2", "x", "0", 1e-12)
    sweep = with_analyses(Circuit(network, output=("in",))).analyses.ac
    assert sweep is not None
    assert math.log10(sweep.stop / sweep.start) == pytest.approx(12)


def test_what_the_circuit_asks_for_is_left_alone() -> None:
    """Any analysis of the file's own means that none is added."""
    circuit = Circuit(low_pass(ac=1, dc=1), analyses=Analyses(ac=Sweep(1.0, 10.0, 3)))
    assert with_analyses(circuit) is circuit


def test_no_source_no_analysis() -> None:
    """Where nothing drives the circuit nothing is asked of it; a dead source asks for nothing either."""
    assert not with_analyses(low_pass(dc=0)).analyses


@pytest.mark.parametrize(
    ("drive", "expected"),
    [
        ({"ac": 1}, False),
        ({"ac": 1, "dc": 0}, False),
        ({"dc": 2.5}, True),
        ({"step": {"from": 1, "to": 2}}, True),
        ({"sine": {"amplitude": 1, "frequency": 50}}, False),
    ],
)
def test_an_operating_point_is_chosen_where_there_is_one(drive: dict[str, object], expected: bool) -> None:
    """Where a source rests at something other than zero."""
    assert with_analyses(low_pass(**drive)).analyses.operating_point is expected


def test_no_operating_point_or_transient_without_a_dc_path() -> None:
    """A node between capacitors has no dc voltage: only the ac sweep is chosen."""
    network = low_pass(ac=1, dc=1, step={"from": 0, "to": 1})
    network.add_capacitor("C2", "out", "x", "1n")
    network.add_capacitor("C3", "x", "0", "1n")
    chosen = with_analyses(network).analyses
    assert chosen.ac is not None
    assert not chosen.operating_point
    assert chosen.transient is None


def test_no_operating_point_in_an_inductor_loop() -> None:
    """A source across an inductor has no steady current."""
    network = low_pass(ac=1, dc=1)
    network.add_inductor("L1", "in", "0", "1m")
    assert not with_analyses(network).analyses.operating_point


# Waveform, and the least time the transient must last: what happens in it, and the filter's answer (1 ms).
RUNS: dict[str, tuple[Waveform, float]] = {
    "square": (Square(0.0, 1.0, 1e-3, 0.5e-3), 5e-3),
    "late square": (Square(0.0, 1.0, 1e-3, 0.5e-3, delay=1.0), 1.0 + 5e-3),
    "sine": (Sine(1.0, 50.0), 0.1),
    "late sine": (Sine(1.0, 50.0, delay=2.0), 2.1),
    "periodic points": (Points(((0.0, 0.0), (0.5, 1.0)), 1.0), 5.0),
    "step": (Step(0.0, 1.0), 5e-3),
    "late slow step": (Step(0.0, 1.0, 0.5, 0.25), 0.75 + 5e-3),
    "points": (Points(((0.0, 0.0), (3.0, 1.0), (4.0, 0.0))), 4.0 + 5e-3),
    "one point": (Points(((0.0, 1.0),)), 1e-3),
}


@pytest.mark.parametrize(("wave", "least"), RUNS.values(), ids=RUNS)
def test_the_transient_chosen_covers_the_waveform(wave: Waveform, least: float) -> None:
    """Every event and several periods lie in it, with steps short against the whole."""
    run = with_analyses(low_pass(waveform=wave)).analyses.transient
    assert run is not None
    assert least <= run.stop <= 20 * least
    assert 0 < run.step <= run.stop / 100
    assert run.start == 0


def test_two_waveforms_are_both_covered() -> None:
    """A slow wave beside a late event."""
    network = low_pass(waveform=Sine(1.0, 1e3))
    network.add_current_source("I1", "0", "out", waveform=Step(0.0, 1e-3, at=1.0))
    run = with_analyses(network).analyses.transient
    assert run is not None
    assert run.stop > 1.005


# -------------------------------------------------------------------------------------- the sealed netlist


def test_a_bare_network_can_be_handed_on() -> None:
    """Sealed text, with a word on the analyses that were chosen, which another reader can read."""
    written = sealed_netlist(low_pass())
    assert "from a network built in Python." in written.text
    assert "The circuit asks for no analysis; those below were chosen by rcnet." in written.text
    back = parse_netlist(written.text, "x.cir")
    assert back.analyses == replace(written.circuit.analyses, chosen=False)
    assert back.seal is not None


def test_vertical_edges_are_confessed() -> None:
    """The reader of the netlist learns that an edge was given a slope, and under the netlist's name."""
    network = low_pass(ac=1)
    network.add_voltage_source("Vµ", "b", "0", square={"low": 0, "high": 5, "frequency": 1e3})
    network.add_resistor("R2", "b", "out", "1k")
    text = sealed_netlist(network).text
    assert "* Vertical edges of V_ are written as a millionth" in text
    assert "Vertical" not in sealed_netlist(low_pass(sine={"amplitude": 1, "frequency": 1})).text


def bad_network() -> Network:
    """A filter with two loose parts."""
    network = low_pass()
    network.add_resistor("R2", "x", "y", "1k")
    return network


def test_errors_keep_a_netlist_from_being_written() -> None:
    """The first finding is in the message, its place and what to do beside it."""
    text = "* Pump\nV1 in 0 AC 1\nR1 in out 1M\nC1 out 0 1F\n.ac dec 10 1 1k\n"
    with pytest.raises(CircuitError) as caught:
        sealed_netlist(parse_netlist(text, "pump.cir"))
    assert caught.value.message.startswith(
        "2 findings of severity error; the first: R1: '1M' is read as 1 mohm"
    )
    assert (caught.value.file, caught.value.line) == ("pump.cir", 3)
    assert "--anyway" in (caught.value.remedy or "")
    with pytest.raises(CircuitError, match=r"\b1 finding of severity error; the first: nodes x, y have no"):
        sealed_netlist(bad_network())


ANYWAY = {
    "loose parts": (bad_network(), {}),
    "output absent": (low_pass(), {"output": ("nowhere",)}),
    "output absent, analysis": (
        low_pass(),
        {"output": ("nowhere",), "analyses": Analyses(ac=Sweep(1.0, 9.0, 9))},
    ),
    "empty sweep": (low_pass(), {"analyses": Analyses(ac=Sweep(10.0, 1.0, 10))}),
    "sweep from zero": (low_pass(), {"output": ("out",), "analyses": Analyses(ac=Sweep(0.0, 1.0, 10))}),
    "no source": (Network("x"), {}),
    "no ac": (low_pass(dc=1), {"output": ("out",), "analyses": Analyses(ac=Sweep(1.0, 10.0, 10))}),
}
ANYWAY["no source"][0].add_resistor("R1", "out", "0", "1k")


@pytest.mark.parametrize(("network", "fields"), ANYWAY.values(), ids=ANYWAY)
def test_a_netlist_can_be_written_in_spite_of_errors(network: Network, fields: dict[str, object]) -> None:
    """On demand it is written, says so, and can be read."""
    circuit = replace(Circuit(network, "pump"), **fields)
    with pytest.raises(CircuitError, match="of severity error"):
        sealed_netlist(circuit)
    seal = parse_netlist(sealed_netlist(circuit, anyway=True).text, "x").seal
    assert seal is not None
    assert seal.anyway


# A defect in the writer -> the name in the message.
DEFECTS = {
    "value": ("write_spice_number", lambda value: repr(value * (1 + 2**-52)), "Vin|R1|C1"),
    "digits lost": ("write_spice_number", lambda value: f"{value:.3g}", "R1"),
    "node": ("_part_line", lambda part, names: f"{part.name} in 0 1233.3", "R1"),
    "part dropped": ("_part_line", lambda part, names: "* gone", "the number of parts"),
    "source": ("source_line", lambda source, names, circuit: "Vin in 0 DC 0 AC 2 90", "Vin"),
    "waveform": ("_waveform", lambda source, circuit: "SIN(0 1 51)", "Vin"),
    "analysis": ("analysis_lines", lambda circuit, names, analysis: [".ac dec 3 1 10"], "an analysis"),
    "nonsense": ("_part_line", lambda part, names: f"{part.name} in", "cannot be read back"),
}


@pytest.mark.parametrize(("function", "broken", "says"), DEFECTS.values(), ids=DEFECTS)
def test_a_defect_of_the_writer_is_caught(
    monkeypatch: pytest.MonkeyPatch, function: str, broken: object, says: str
) -> None:
    """Whatever the text holds other than the circuit, it goes nowhere, and is called a defect of rcnet."""
    network = low_pass(1233.3333333333333, 1e-6, ac=1, sine={"amplitude": 1, "frequency": 50})
    circuit = Circuit(network, analyses=Analyses(ac=Sweep(1.0, 1e3, 10)))
    assert sealed_netlist(circuit)
    monkeypatch.setattr(writer, function, broken)
    with pytest.raises(CircuitError, match=says) as caught:
        sealed_netlist(circuit)
    assert "defect of rcnet" in (caught.value.remedy or "")


WAVE_DEFECTS: dict[str, tuple[Waveform, str]] = {
    "step level": (Step(0.0, 1.0, 0.5, 0.1), "PWL(0 0 0.5 0 0.6 2)"),
    "step time": (Step(0.0, 1.0, 0.5, 0.1), "PWL(0 0 0.4 0 0.6 1)"),
    "step as a sine": (Step(0.0, 1.0, 0.5, 0.1), "SIN(0 1 50)"),
    "point gone": (Points(((0.0, 0.0), (1.0, 1.0), (2.0, 0.5))), "PWL(0 0 1 1)"),
    "turn gone": (Points(((0.0, 0.0), (1.0, 1.0)), 2.0), "PWL(0 0 1 1)"),
    "turn shifted": (
        Points(((0.0, 0.0), (1.0, 1.0)), 2.0),
        "PWL(0 0 1 1 2.5 0" + "".join(f" {time} {time % 2}" for time in range(3, 21)) + ")",
    ),
    "waveform gone": (Square(0.0, 1.0, 1.0, 0.5), ""),
}


@pytest.mark.parametrize(("wave", "text"), WAVE_DEFECTS.values(), ids=WAVE_DEFECTS)
def test_a_wrong_waveform_is_caught(monkeypatch: pytest.MonkeyPatch, wave: Waveform, text: str) -> None:
    """Also where the waveform comes back as points."""
    network = low_pass(dc=0, waveform=wave)
    assert sealed_netlist(network)
    monkeypatch.setattr(writer, "_waveform", lambda source, circuit: text)
    with pytest.raises(CircuitError, match="Vin does not come back"):
        sealed_netlist(network)


@pytest.mark.parametrize("wave", [case[0] for case in RUNS.values()], ids=RUNS)
def test_every_waveform_can_be_handed_on(wave: Waveform) -> None:
    """The guard lets through what the writer writes."""
    assert sealed_netlist(low_pass(ac=1, waveform=wave))


def test_a_steep_edge_after_many_turns_can_be_handed_on() -> None:
    """Thousands of turns round their times; the guard knows."""
    wave = Points(((0.0, 0.0), (0.3, 1 / 3), (0.7, 0.7)), 0.7)
    circuit = Circuit(low_pass(waveform=wave))
    assert sealed_netlist(replace(circuit, analyses=Analyses(transient=TransientRun(3000.0, 1.0))))


def test_the_expected_numbers_are_those_of_several_sources() -> None:
    """Two sources with ac superpose as the simulator does it: 3 V here less 1 V there over two resistors."""
    network = Network("Mixer")
    network.add_voltage_source("V1", "a", "0", ac=3)
    network.add_voltage_source("V2", "b", "0", ac=1, ac_phase=180)
    network.add_resistor("R1", "a", "out", "1k")
    network.add_resistor("R2", "b", "out", "1k")
    text = sealed_netlist(Circuit(network, output=("out",))).text
    assert "1 Hz: 0 dB, 0 deg" in text  # (3 V - 1 V)/2 = 1 V


def test_a_difference_is_expected_with_its_sign() -> None:
    """v(out,in) of the filter at its corner is -j w R C/(1 + j w R C): -3.01 dB at -135 degrees."""
    r = 1 / (2 * math.pi * 1e-3)  # 1 kHz with 1 uF
    circuit = Circuit(low_pass(r, 1e-6), output=("out", "in"))
    (line,) = [line for line in sealed_netlist(circuit).text.split("\n") if " at 1 kHz" in line]
    level, angle = float(line.split()[-4]), float(line.split()[-2])
    assert line.startswith("*   expect v(out,in) at 1 kHz: ")
    assert level == pytest.approx(20 * np.log10(1 / np.sqrt(2)), rel=1e-8)
    assert angle == pytest.approx(-135, rel=1e-8)


# ------------------------------------------------------------------------------------------- write_netlist


def test_a_netlist_is_written_and_returned(tmp_path: Path) -> None:
    """What is returned is what the file holds."""
    path = tmp_path / "filter.cir"
    circuit = write_netlist(low_pass(), path)
    assert (circuit.file, circuit.origin, circuit.name) == (str(path), "netlist", "filter")
    assert read_netlist(path).network.values == {"R1": 1e3, "C1": 1e-6}
    assert str(tmp_path) not in path.read_text()


def test_a_netlist_with_errors_leaves_no_file(tmp_path: Path) -> None:
    """Unless it is wanted anyway."""
    path = tmp_path / "bad.cir"
    with pytest.raises(CircuitError):
        write_netlist(bad_network(), path)
    assert not path.exists()
    assert write_netlist(bad_network(), path, anyway=True).seal
    with pytest.raises(OutputError):
        write_netlist(low_pass(), tmp_path / "none" / "x.cir")


def test_the_seal_tells_what_was_silenced() -> None:
    """Whoever is handed the netlist learns which findings were not told, and how many."""
    text = "* t\n* rcnet: silence odd-number\nV1 in 0 AC 1\nR1 in out 1M\nC1 out 0 1u\n.ac dec 10 1 1k\n"
    sealed = sealed_netlist(parse_netlist(text, "gauge.cir")).text
    assert "*   silenced: 1 finding (odd-number)\n" in sealed
    assert "silenced" not in sealed_netlist(parse_netlist(text.replace("1M", "1Meg"), "gauge.cir")).text


def test_a_netlist_of_the_linear_part_says_so() -> None:
    """The header names what was left out, so that nobody takes the rest for the whole."""
    text = "* clamp\nV1 in 0 AC 1\nR1 in out 1k\nC1 out 0 1u\nD1 out 0 dm\n.ac dec 10 1 1k\n"
    sealed = sealed_netlist(parse_netlist(text, "gauge.cir", Reading(linear_part=True))).text
    assert "* Only the linear part of it; left out as not linear: D1.\n" in sealed
