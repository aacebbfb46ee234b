"""Subcircuits for a library: used in another netlist they do what the circuit does."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import rcnet
from rcnet.circuit import Circuit, Network
from rcnet.errors import CircuitError, InputError
from rcnet.exact import response
from rcnet.forms import sealed_subcircuit
from rcnet.netlist import digest, parse_netlist
from rcnet.resources import starters

STARTERS = starters()


def definition(text: str) -> list[str]:
    """The lines from `.subckt` on."""
    lines = text.removesuffix("\n").split("\n")
    return lines[next(k for k, line in enumerate(lines) if line.startswith(".subckt")) :]


@pytest.mark.ngspice
@pytest.mark.parametrize("name", ["noise-filter", "pump-current", "hum-notch", "leak-microphone"])
@pytest.mark.parametrize("portable", [False, True], ids=["usual", "portable"])
def test_a_subcircuit_answers_as_the_circuit(name: str, portable: bool, ngspice: Callable[..., Any]) -> None:
    """With the circuit's own sources around it, used as the example says, it gives the exact response."""
    circuit = rcnet.load(STARTERS[name])
    text = sealed_subcircuit(circuit, "lib1", portable=portable)
    (example,) = re.findall(r"^\*   (X1 .*)$", text, re.MULTILINE)
    ports = definition(text)[0].split()[2:]
    assert example.split()[1:-1] == ports
    sources = [
        f"{source.name} {' '.join(source.nodes)} DC 0 AC {source.ac or 0} {source.ac_phase}"
        for source in circuit.network.sources.values()
    ]
    bench = "\n".join(["* bench", text, *sources, example, ".options noopac", ".ac dec 5 1 100k", ".end\n"])
    ran = ngspice(bench)
    assert (ran.code, ran.trouble) == (0, [])
    first, *second = (ran.curve(f"v({node})") for node in circuit.output)
    got = first.values - (second[0].values if second else 0)
    want = response(circuit.network, first.axis, " ".join(circuit.output))
    assert np.allclose(got, want, rtol=1e-9, atol=1e-13)


def ammeter() -> Network:
    """A current mirrored: F1 senses Vs, which gives nothing itself."""
    network = Network("Loop current")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", 250.0)
    network.add_voltage_source("Vs", "a", "0", dc=0)
    network.add_current_controlled_current_source("F1", "0", "out", "Vs", 0.5)
    network.add_resistor("R2", "out", "0", 1e3)
    return network


def test_what_goes_inside() -> None:
    """Driving sources stay out, the ammeter goes in; ports are those of sources, then the output."""
    text = sealed_subcircuit(Circuit(ammeter(), output=("out",)), "loop")
    lines = definition(text)
    assert lines[0] == ".subckt loop in out"
    assert [line.split()[0] for line in lines[1:-1]] == ["R1", "Vs", "F1", "R2"]
    assert lines[-1] == ".ends loop"
    assert "* Ports, in order: in (fed by Vin), out (the output).\n" in text
    assert "* Left out: Vin.\n" in text


def test_the_seal_is_about_the_inside() -> None:
    """The digest is that of the inner lines as a netlist; a netlist that includes the file stays unsealed."""
    text = sealed_subcircuit(Circuit(ammeter(), output=("out",)), "loop")
    inner = parse_netlist("\n".join(["* inside", *definition(text)[1:-1], ".end", ""]), "x")
    assert f"*   {digest(inner)}\n" in text
    assert "checked: 0 errors" in text
    bench = f"* bench\n{text}V1 a 0 AC 1\nX1 a b loop\n.ac dec 5 1 1k\n.end\n"
    assert parse_netlist(bench, "x").seal is None


def test_ports_can_be_chosen() -> None:
    """In the order given; an inner node may be one."""
    circuit = Circuit(ammeter(), output=("out",))
    assert definition(sealed_subcircuit(circuit, "x", ports=["out", "a", "in"]))[0] == ".subckt x out a in"


PORTS = {
    "no such node": (["nowhere"], "no node called 'nowhere'"),
    "ground": (["in", "0"], "ground is node 0"),
    "twice": (["in", "out", "in"], "'in' is named twice"),
}


@pytest.mark.parametrize(("ports", "says"), PORTS.values(), ids=PORTS)
def test_wrong_ports_are_refused(ports: list[str], says: str) -> None:
    """With the reason."""
    with pytest.raises(CircuitError, match=says):
        sealed_subcircuit(Circuit(ammeter(), output=("out",)), "x", ports=ports)


NAMES = ["", "1x", "a-b", "a.b", "a b", "a\n.control", "x" * 37, "é", "_a"]


@pytest.mark.parametrize("name", NAMES)
def test_wrong_names_are_refused(name: str) -> None:
    """Ngspice 39 does not find a subcircuit called `rc-1.5k`; letters, digits and _ are safe."""
    with pytest.raises(InputError, match="a subcircuit cannot be called"):
        sealed_subcircuit(Circuit(ammeter(), output=("out",)), name)


def test_a_driving_source_that_is_sensed_is_refused() -> None:
    """Outside it could not be sensed, inside it would be no port."""
    network = ammeter()
    network.add_current_controlled_current_source("F2", "0", "out", "Vin", 0.5)
    with pytest.raises(CircuitError, match="F2 senses the current of Vin"):
        sealed_subcircuit(Circuit(network, output=("out",)), "x")


def test_a_circuit_of_sources_alone_is_refused() -> None:
    """Nothing would be left."""
    network = Network("bare")
    network.add_voltage_source("V1", "a", "0", ac=1)
    with pytest.raises(CircuitError, match="nothing is left"):
        sealed_subcircuit(Circuit(network, output=("a",)), "x", anyway=True)


def test_a_circuit_from_which_nothing_leads_is_refused() -> None:
    """Without a source and an output the ports must be named."""
    network = Network("closed")
    network.add_resistor("R1", "a", "0", 1.0)
    with pytest.raises(CircuitError, match="no node leads out") as caught:
        sealed_subcircuit(Circuit(network), "x", anyway=True)
    assert "--ports" in (caught.value.remedy or "")
