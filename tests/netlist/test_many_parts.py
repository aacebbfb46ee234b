"""Large networks are written column by column, and what else a netlist hands on: starts, requests, pulses."""

from __future__ import annotations

import math
import random
import re
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rcnet.circuit import (
    Analyses,
    Circuit,
    Network,
    Part,
    Place,
    Request,
    Square,
    StartingState,
    Sweep,
    TransientRun,
)
from rcnet.errors import CircuitError
from rcnet.exact import transient
from rcnet.handover import sealed_netlist
from rcnet.netlist import names as names_module
from rcnet.netlist import parse_netlist, read_same, safe_names, write, writer

PLACE = Place("x.cir", 3)


def mixed(seed: int, count: int) -> Network:
    """Parts of every kind between nodes with plain and with odd names."""
    draw = random.Random(seed)
    network = Network("Distribution network")
    network.add_voltage_source("Vin", "in", "0", ac=1, square={"low": 0, "high": 5, "frequency": 1e3})
    network.add_voltage_source("Vs", "in", "s", dc=0)
    nodes = ["0", "in", "s", "Out", "OUT", "né", "x.1", "00", "y" * 60, *(f"n{k}" for k in range(count // 3))]
    for k in range(count):
        letter = draw.choice("RRRRCCCCLEGF")
        value = draw.choice([1e3, 4700.0, 0.1, 1e22, draw.random() * 10.0 ** draw.randint(-12, 6)])
        name = f"{letter}{k}{draw.choice(['', '', '', 'é', '.x', 'q' * 40])}"
        ends = 4 if letter in "EG" else 2
        senses = "Vs" if letter == "F" else None
        network.add_part(Part(name, letter, tuple(draw.choices(nodes, k=ends)), value, senses))
    return network


@pytest.mark.parametrize("seed", range(4))
def test_columns_write_what_single_lines_write(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Byte for byte, long lines wrapped, starting values behind theirs."""
    network = mixed(seed, 300)
    capacitors = [part.name for part in network.parts if part.kind == "C"][:5]
    circuit = Circuit(network, initial=StartingState({"n1": 1.5}, dict.fromkeys(capacitors, 2.0)))
    one_by_one = write(circuit)
    monkeypatch.setattr(writer, "_MANY", 1)
    monkeypatch.setattr(names_module, "_MANY", 1)
    assert write(circuit).text == one_by_one.text
    assert write(circuit).names == one_by_one.names


PLAIN_NAMES = {
    "plain": ["a1", "a2", "b_1", "x.y"],
    "capitals": ["A1", "A2", "B_1"],
    "mixed": ["Ab", "aB2", "c"],
    "differ in case only": ["Out", "OUT", "out"],
    "reserved": ["a", "time", "b"],
    "reserved, capitals": ["A", "TIME", "B"],
    "zeros": ["00", "0.0", "a"],
    "begins odd": ["_a", ".b", "c"],
    "odd character": ["a+b", "c"],
    "not ASCII": ["é", "c"],
    "long": ["n" * 40, "n" * 41],
}


@pytest.mark.parametrize("nodes", PLAIN_NAMES.values(), ids=PLAIN_NAMES)
def test_names_taken_as_a_whole_are_those_taken_singly(
    nodes: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whichever way they are looked at."""
    network = Network("x")
    network.add_resistors([f"R{node}" for node in nodes], nodes, ["0"] * len(nodes), [1.0] * len(nodes))
    singly = safe_names(network)
    monkeypatch.setattr(names_module, "_MANY", 1)
    assert safe_names(network) == singly


def test_a_large_network_comes_back() -> None:
    """Twenty thousand parts, bit for bit, through the columns of writer and guard."""
    count = 10_000
    values = np.random.default_rng(3).uniform(1e-9, 1e3, 2 * count)
    network = Network("Ladder")
    network.add_voltage_source("Vin", "n0", "0", ac=1)
    nodes = [f"n{k}" for k in range(count + 1)]
    network.add_resistors([f"R{k}" for k in range(count)], nodes[:-1], nodes[1:], values[:count])
    network.add_capacitors([f"C{k}" for k in range(count)], nodes[1:], ["0"] * count, values[count:])
    back = read_same(write(Circuit(network, analyses=Analyses(ac=Sweep(1.0, 1e3, 5)))))
    assert back.network.arrays().values.tobytes() == network.arrays().values.tobytes()


def test_a_changed_column_is_noticed() -> None:
    """One value of many off by one unit, or one node another, is named."""
    network = mixed(1, 1200)
    written = write(Circuit(network))
    part = next(part for part in network.parts if part.kind == "C" and part.nodes[0] != "in")
    name, first, second, value = (line := _line_of(written.text, written.names.parts[part.name])).split(" ")
    for changed in (
        f"{name} {first} {second} {math.nextafter(part.value, 1)!r}",
        f"{name} in {second} {value}",
    ):
        text = written.text.replace(line, changed)
        with pytest.raises(CircuitError, match=f"{re.escape(part.name)} does not come back"):
            read_same(replace(written, text=text))


def _line_of(text: str, name: str) -> str:
    return next(line for line in text.split("\n") if line.startswith(f"{name} "))


# ---------------------------------------------------------------------- starting state


def filter_circuit() -> Circuit:
    """1 kohm into 1 uF; time constant 1 ms."""
    network = Network("Filter")
    network.add_voltage_source("Vin", "in", "0", dc=0)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    run = TransientRun(2e-3, 1e-6, 0.0, 1e-6)
    return Circuit(network, output=("out",), analyses=Analyses(transient=run))


@pytest.mark.ngspice
@pytest.mark.parametrize("use_initial", [False, True], ids=[".ic", "ic= and uic"])
def test_a_run_starts_where_it_is_told_to(use_initial: bool, ngspice: Callable[..., Any]) -> None:
    """From 3 V it falls as 3 exp(-t/RC), whichever of the two ways it is told."""
    circuit = filter_circuit()
    run = circuit.analyses.transient
    assert run is not None
    start = StartingState({}, {"C1": 3.0}) if use_initial else StartingState({"out": 3.0})
    circuit = replace(
        circuit, initial=start, analyses=Analyses(transient=replace(run, use_initial=use_initial))
    )
    written = write(circuit)
    assert read_same(written).initial == start
    curve = ngspice(written.text).curve("v(out)", "transient")
    assert np.allclose(curve.values, 3 * np.exp(-curve.axis / 1e-3), atol=2e-4)


def test_the_ac_run_is_given_no_start() -> None:
    """A simulator's deck for another analysis leaves it out."""
    circuit = replace(filter_circuit(), initial=StartingState({"out": 3.0}))
    source = replace(circuit.network.sources["Vin"], ac=1.0)
    circuit = replace(
        circuit.with_network(circuit.network.with_source(source)),
        analyses=replace(circuit.analyses, ac=Sweep(1.0, 1e3, 5)),
    )
    written = write(circuit)
    assert ".ic" not in writer.deck(written.circuit, written.names, "ac")
    assert ".ic v(out)=3" in writer.deck(written.circuit, written.names, "transient")


# ---------------------------------------------------------------------- requests


REQUESTS = {
    "sweep": (".dc", "Vin 0 5 0.5"),
    "transfer": (".tf", "v(out) Vin"),
    "fourier": (".four", "1000 v(out)"),
    "measurement": (".meas", "tran low min v(out) from=0 to=0.001"),
    "difference": (".meas", "tran high max v(in,out)"),
    "current": (".meas", "tran charge max i(Vin)"),
    "formula": (".meas", "tran twice param='2*low'"),
}


@pytest.mark.parametrize(("word", "text"), REQUESTS.values(), ids=REQUESTS)
def test_a_request_is_handed_on(word: str, text: str) -> None:
    """What a netlist asked for besides is written behind the analyses, and comes back."""
    circuit = replace(filter_circuit(), requests=(Request(word, text, PLACE),))
    written = write(circuit)
    assert f"\n{word} {text}\n" in written.text.split(".tran")[1]
    assert [(request.word, request.text) for request in read_same(written).requests] == [(word, text)]


def test_names_in_requests_follow() -> None:
    """Inside v(...), i(...) and where a source stands by itself."""
    network = Network("Odd names")
    network.add_voltage_source("V.X1.Vin", "né", "0", ac=1, dc=1)
    network.add_resistor("R1", "né", "a+b", 1e3)
    network.add_resistor("R2", "a+b", "0", 1e3)
    requests = (
        Request(".dc", "V.X1.Vin 0 1 0.1", PLACE),
        Request(".meas", "ac x find vdb(a+b) at=10", PLACE),
        Request(".meas", "ac y max i(V.X1.Vin)", PLACE),
    )
    text = write(Circuit(network, analyses=Analyses(ac=Sweep(1.0, 1e3, 5)), requests=requests)).text
    assert ".dc V_X1_Vin 0 1 0.1\n" in text
    assert ".meas ac x find vdb(a_b) at=10\n" in text
    assert ".meas ac y max i(V_X1_Vin)\n" in text


BAD_REQUESTS = ["x\n.control", "a;b", "a`b`", "a // b", "é", "tab\there"]


@pytest.mark.parametrize("text", BAD_REQUESTS)
def test_a_request_that_is_more_than_one_is_refused(text: str) -> None:
    """Nothing gets into a netlist that a simulator could take for something else."""
    with pytest.raises(CircuitError, match="not written into a netlist") as caught:
        write(replace(filter_circuit(), requests=(Request(".meas", text, PLACE),)))
    assert caught.value.line == 3
    with pytest.raises(CircuitError, match="not written into a netlist"):
        write(replace(filter_circuit(), requests=(Request(".include x", "y", PLACE),)))


# ---------------------------------------------------------------------- pulses without width


@pytest.mark.ngspice
def test_a_pulse_without_width_falls_at_once(ngspice: Callable[..., Any]) -> None:
    """A triangle as a pulse: to ngspice 39 a width of 0 would be none, and the pulse would stay up."""
    network = filter_circuit().network
    wave = Square(0.0, 1.0, 4e-3, 0.0, 1e-3, 1e-3)
    network = network.with_source(replace(network.sources["Vin"], waveform=wave))
    circuit = Circuit(
        network, output=("out",), analyses=Analyses(transient=TransientRun(8e-3, 1e-6, 0.0, 1e-6))
    )
    written = sealed_netlist(circuit)
    assert "* Pulses of Vin, which have no width, are written with a billionth" in written.text
    curve = ngspice(written.text).curve("v(out)", "transient")
    assert np.allclose(curve.values, transient(network, curve.axis, "out"), atol=1e-5)


def test_a_pulse_without_width_comes_back() -> None:
    """Also one whose edges are shorter than a billionth of its period."""
    network = filter_circuit().network
    for edge in (0.0, 1e-15, 1e-3):
        wave = Square(0.0, 1.0, 4e-3, 0.0, edge, edge)
        source = replace(network.sources["Vin"], waveform=wave)
        assert read_same(write(Circuit(network.with_source(source))))


def test_a_seal_covers_requests_and_start() -> None:
    """A netlist read, written and read again keeps its seal."""
    circuit = replace(
        filter_circuit(),
        initial=StartingState({"out": 3.0}),
        requests=(Request(".meas", "tran low min v(out)", PLACE),),
    )
    text = sealed_netlist(circuit).text
    again = sealed_netlist(parse_netlist(text, "x.cir")).text
    digests = [re.findall(r"digest ([0-9a-f]{64})", each) for each in (text, again)]
    assert digests[0] == digests[1] != []
