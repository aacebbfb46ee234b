"""The circuit at its ports: S-parameters against hand, numpy and ngspice, and the gain they imply."""

from __future__ import annotations

import subprocess
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet import Network
from rcnet.circuit import Circuit
from rcnet.compare.ports import (
    allowance_at_ports,
    exact_ports,
    gain_from_ports,
    measured_at_ports,
    ports_of,
)
from rcnet.curves import Curve, Curves, Ports, parse_touchstone, read_results
from rcnet.errors import ResultsError, UnsolvableError

F0 = 1e3
REFERENCE = (50.0, 50.0)


def meter_line() -> Circuit:
    """50 ohm in series, then omega C = 1/50 S at 1 kHz to ground."""
    net = Network("Flow meter line")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", 50)
    net.add_capacitor("C1", "out", "0", 1 / (2 * np.pi * F0 * 50))
    return Circuit(net, "meter-line", output=("out",))


def measured(
    circuit: Circuit, frequency: Any, reference: tuple[float, ...] = REFERENCE, **more: Any
) -> Curves:
    """A file that holds exactly the circuit's S-parameters."""
    axis = np.asarray(frequency, float)
    found = exact_ports(circuit, axis, reference)
    curves = tuple(Curve(name, "ac", axis, values, **more) for name, values in found.items())
    return Curves("line.s2p", curves, ports=Ports(reference))


def matrix(found: dict[str, Any]) -> np.ndarray[Any, Any]:
    """S as (frequencies, 2, 2)."""
    return np.moveaxis(np.array([[found["s11"], found["s12"]], [found["s21"], found["s22"]]]), 2, 0)


def by_impedances(z: Any, reference: tuple[float, float]) -> np.ndarray[Any, Any]:
    """S = F (Z - R)(Z + R)^-1 F^-1, F = R^(-1/2)/2, K. Kurokawa's definition for resistances."""
    r, f = np.diag(reference), np.diag(0.5 / np.sqrt(reference))
    return np.asarray(f @ (z - r) @ np.linalg.inv(z + r) @ np.linalg.inv(f))


# ---------------------------------------------------------------------- known networks


def test_the_check_network() -> None:
    """S11 = (3-2j)/13, S21 = S12 = (6-4j)/13, S22 = (-1-8j)/13, by hand."""
    found = exact_ports(meter_line(), [F0], REFERENCE)
    assert list(found) == ["s11", "s21", "s12", "s22"]
    np.testing.assert_allclose(matrix(found)[0] * 13, [[3 - 2j, 6 - 4j], [6 - 4j, -1 - 8j]], rtol=1e-14)


def test_one_port() -> None:
    """With one reference the output stays open: Z = 50 - 50j, S11 = -50j/(100 - 50j)."""
    found = exact_ports(replace(meter_line(), output=()), [F0], (50.0,))
    np.testing.assert_allclose(found["s11"], [-50j / (100 - 50j)], rtol=1e-14)
    assert list(found) == ["s11"]


def test_networks_without_impedances() -> None:
    """A resistor between the ports has no Z: with r = R/R0, S11 = r/(r + 2), S21 = 2/(r + 2), at dc too."""
    net = Network()
    net.add_voltage_source("V1", "a", "0", ac=1)
    net.add_resistor("R1", "a", "b", 150)
    found = exact_ports(Circuit(net, output=("b",)), [0, 1, 1e6], REFERENCE)
    np.testing.assert_allclose(found["s11"], 3 / 5, rtol=1e-14)
    np.testing.assert_allclose(found["s21"], 2 / 5, rtol=1e-14)
    net = Network()
    net.add_voltage_source("V1", "a", "0", ac=1)
    net.add_capacitor("C1", "a", "b", 1e-6)
    found = exact_ports(Circuit(net, output=("b",)), [0], REFERENCE)
    np.testing.assert_allclose([found["s11"][0], found["s21"][0]], [1, 0], atol=1e-9)


def tee(
    source: tuple[str, str] = ("in", "0"), kind: str = "V", output: tuple[str, ...] = ("out",)
) -> Circuit:
    """R 30 and 70 along the way, 40 to ground in the middle: Z = [[70, 40], [40, 110]]."""
    net = Network()
    add = net.add_voltage_source if kind == "V" else net.add_current_source
    add(f"{kind}1", *source, ac=2, ac_phase=30)
    net.add_resistor("R1", "in", "mid", 30)
    net.add_resistor("R2", "mid", "out", 70)
    net.add_resistor("R3", "mid", "0", 40)
    return Circuit(net, output=output)


TEES = {
    "voltage source": tee(),
    "voltage source turned round": tee(("0", "in")),
    "current source": tee(("0", "in"), "I"),
    "current source turned round": tee(("in", "0"), "I"),
    "ground named first in the output": tee(output=("0", "out")),
}


@pytest.mark.parametrize("case", TEES)
def test_the_hot_node_is_not_ground(case: str) -> None:
    """Whichever way the source stands, whatever its kind and value: S is that of the network."""
    z = np.array([[70, 40], [40, 110]])
    for reference in (REFERENCE, (75.0, 600.0)):
        found = exact_ports(TEES[case], [1.0], reference)
        np.testing.assert_allclose(matrix(found)[0], by_impedances(z, reference), rtol=1e-13)


def test_ports_between_two_nodes() -> None:
    """A source between two nodes and an output pair are ports between these nodes."""
    net = Network()
    net.add_voltage_source("V1", "a", "b", ac=1)
    net.add_resistor("R1", "a", "c", 10)
    net.add_resistor("R2", "b", "d", 20)
    net.add_resistor("R3", "c", "d", 70)
    net.add_resistor("R4", "d", "0", 5)
    found = exact_ports(Circuit(net, output=("c", "d")), [1.0], REFERENCE)
    # Seen from a-b, R4 carries nothing: Z11 = 10 + 70 + 20, Z22 = Z21 = 70.
    meant = by_impedances(np.array([[100, 70], [70, 70]]), (50.0, 50.0))
    np.testing.assert_allclose(matrix(found)[0], meant, rtol=1e-13)


def test_other_sources_are_dead_and_names_do_not_clash() -> None:
    """A supply is a short to ac; nodes and parts may be called as the closing ones would be."""
    net = Network()
    net.add_voltage_source("V1", "port1", "0", ac=1)
    net.add_voltage_source("Vport2", "supply", "0", dc=5)
    net.add_resistor("Rport1", "port1", "port2", 30)
    net.add_resistor("R2", "port2", "supply", 40)
    found = exact_ports(Circuit(net, output=("port2",)), [1.0], REFERENCE)
    meant = by_impedances(np.array([[70, 40], [40, 40]]), (50.0, 50.0))
    np.testing.assert_allclose(matrix(found)[0], meant, rtol=1e-13)


def test_a_source_without_ac_may_drive() -> None:
    """The one source is the driving one where none carries ac."""
    net = Network()
    net.add_voltage_source("V1", "a", "0", dc=1)
    net.add_resistor("R1", "a", "0", 150)
    np.testing.assert_allclose(exact_ports(Circuit(net), [1.0], (50.0,))["s11"], [0.5], rtol=1e-14)


# ---------------------------------------------------------------------- properties


@st.composite
def networks(draw: st.DrawFn) -> Circuit:
    """A connected network of R and C between up to six nodes, values over six decades."""
    nodes = draw(st.integers(2, 5))
    net = Network()
    net.add_voltage_source("V1", "n1", "0", ac=1)
    for k in range(1, nodes + 1):
        other = draw(st.integers(0, k - 1))
        net.add_resistor(f"R{k}", f"n{k}", f"n{other}" if other else "0", 10 ** draw(st.floats(0, 6)))
    for k in range(draw(st.integers(0, 5))):
        a, b = draw(st.integers(1, nodes)), draw(st.integers(0, nodes))
        if a != b:
            net.add_capacitor(f"C{k}", f"n{a}", f"n{b}" if b else "0", 10 ** draw(st.floats(-12, -6)))
    return Circuit(net, output=(f"n{draw(st.integers(1, nodes))}",))


@settings(deadline=None, max_examples=80)
@given(networks(), st.floats(0, 4), st.floats(0, 4))
def test_networks_of_r_and_c_are_reciprocal_and_passive(circuit: Circuit, one: float, two: float) -> None:
    """S12 = S21, and no singular value of S goes beyond one, whatever the references."""
    found = matrix(exact_ports(circuit, np.geomspace(1, 1e6, 7), (10**one, 10**two)))
    np.testing.assert_allclose(found[:, 0, 1], found[:, 1, 0], rtol=1e-9, atol=1e-15)
    assert (np.linalg.svd(found, compute_uv=False) <= 1 + 1e-12).all()


@settings(deadline=None, max_examples=60)
@given(networks(), st.floats(0, 4), st.floats(0, 4))
def test_the_gain_of_the_open_output_comes_back(circuit: Circuit, one: float, two: float) -> None:
    """V2/V1 = Z21/Z11 from the S-parameters is the circuit's own response, with any references."""
    frequency = np.geomspace(1, 1e6, 7)
    found = gain_from_ports(circuit, measured(circuit, frequency, (10**one, 10**two)))
    meant = circuit.network.response(frequency, circuit.output[0])
    assert (found.name, found.unit, found.analysis) == (f"v({circuit.output[0]})", "V", "ac")
    # Rounding of S near total reflection is all that is lost: the source's reference over the impedances.
    np.testing.assert_allclose(found.values, meant, rtol=1e-5, atol=1e-9)


@pytest.mark.parametrize("case", TEES)
def test_the_gain_per_unit_of_the_source(case: str) -> None:
    """40/70 for a voltage source, 40 V/A for a current source, negative where it is turned round."""
    found = gain_from_ports(TEES[case], measured(TEES[case], [1.0], (75.0, 600.0))).values[0]
    meant = 40.0 if "current" in case else 40 / 70
    np.testing.assert_allclose(found, -meant if "turned" in case else meant, rtol=1e-13)


def test_the_gain_carries_the_digits() -> None:
    """The resolution bounds what moving each S-parameter by its own does to the gain."""
    circuit = meter_line()
    exact = measured(circuit, [F0])
    size = 1e-5
    coarse = replace(
        exact, curves=tuple(replace(curve, resolution=np.array([size])) for curve in exact.curves)
    )
    found = gain_from_ports(circuit, coarse)
    assert found.resolution is not None
    random = np.random.default_rng(1)
    worst = 0.0
    for _ in range(300):
        moved = tuple(
            replace(curve, values=curve.values + size * np.exp(2j * np.pi * random.uniform(size=1)))
            for curve in exact.curves
        )
        shifted = gain_from_ports(circuit, replace(exact, curves=moved)).values[0]
        worst = max(worst, abs(shifted - (0.5 - 0.5j)))
    assert 0.5 * found.resolution[0] < worst <= 1.001 * found.resolution[0]


# ---------------------------------------------------------------------- files


S2P = """! flow meter line
# kHz S RI R 50
1.0000000000000000 0.23076923076923078 -0.15384615384615385 0.46153846153846156 -0.3076923076923077 \
0.46153846153846156 -0.3076923076923077 -0.07692307692307693 -0.6153846153846154
"""


def test_a_file_is_answered_at_its_own_points() -> None:
    """Curve for curve, in the file's order; what is no S-parameter is left out."""
    curves = parse_touchstone(S2P, "line.s2p")
    other = Curve("v(out)", "ac", np.ones(1), np.ones(1, complex))
    answer = measured_at_ports(meter_line(), replace(curves, curves=(*curves.curves, other)))
    assert [curve.name for curve in answer] == ["s11", "s21", "s12", "s22"]
    for exact, other in zip(answer, curves, strict=True):
        np.testing.assert_allclose(exact.values, other.values, rtol=1e-14)
        assert exact.axis is other.axis


def test_the_allowance_is_rounding_and_digits() -> None:
    """Tiny for full doubles; twice the digits for short ones; and how far the frequency's digits move S."""
    circuit = meter_line()
    (s11, *_) = measured(circuit, [F0]).curves
    tiny = allowance_at_ports(circuit, s11, REFERENCE)
    assert 0 < tiny[0] < 1e-10
    coarse = replace(s11, resolution=np.array([1e-4]))
    np.testing.assert_allclose(allowance_at_ports(circuit, coarse, REFERENCE) - tiny, 2e-4, rtol=1e-9)
    moved = replace(s11, axis_resolution=np.array([1.0]))
    slope = abs(np.diff(exact_ports(circuit, [F0, F0 + 1], REFERENCE)["s11"])[0])
    np.testing.assert_allclose(allowance_at_ports(circuit, moved, REFERENCE) - tiny, slope, rtol=1e-2)


def _no_ports() -> Curves:
    return Curves("a.csv", (Curve("s11", "ac", np.ones(1), np.ones(1, complex)),))


REFUSED = {
    "no ports": (lambda: measured_at_ports(meter_line(), _no_ports()), "say nothing of ports"),
    "no output": (
        lambda: exact_ports(replace(meter_line(), output=()), [1.0], REFERENCE),
        "port 2 is the circuit's output, and the circuit names none",
    ),
    "no output for a gain": (
        lambda: gain_from_ports(replace(meter_line(), output=()), measured(meter_line(), [F0])),
        "port 2 is the circuit's output",
    ),
    "one port for a gain": (
        lambda: gain_from_ports(meter_line(), measured(meter_line(), [F0], (50.0,))),
        "all four S-parameters",
    ),
    "no bound": (
        lambda: gain_from_ports(
            meter_line(),
            replace(measured(meter_line(), [F0]), curves=tuple(
                Curve(name, "ac", np.array([F0]), np.array([value], complex))
                for name, value in (("s11", -1), ("s21", 0), ("s12", 0), ("s22", 0))
            )),
        ),
        "at 1000 Hz leave the response of an open output without bound",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str) -> None:
    """One sentence and a remedy."""
    call, pattern = REFUSED[case]
    with pytest.raises(ResultsError, match=pattern) as caught:
        call()
    assert caught.value.remedy


def test_several_driving_sources_are_refused() -> None:
    """Then no source is port 1."""
    net = Network()
    net.add_voltage_source("V1", "a", "0", ac=1)
    net.add_voltage_source("V2", "b", "0", ac=1)
    net.add_resistor("R1", "a", "b", 1)
    with pytest.raises(ResultsError, match="V1, V2"):
        ports_of(Circuit(net, output=("b",)))


def test_a_floating_network_is_unsolvable() -> None:
    """As everywhere: the node without a path to ground is named."""
    net = Network()
    net.add_voltage_source("V1", "a", "b", ac=1)
    net.add_resistor("R1", "a", "b", 1)
    with pytest.raises(UnsolvableError):
        exact_ports(Circuit(net), [1.0], (50.0,))


# ---------------------------------------------------------------------- ngspice

TWO_PORT = """pressure line
V1 in 0 dc 0 ac 1 portnum 1 z0 {one}
R1 in a 1k
C1 a 0 10n
R2 a out 2.2k
C2 out 0 4.7n
C3 in out 100p
V2 out 0 dc 0 ac 0 portnum 2 z0 {two}
.control
sp dec 5 100 1meg
let Rbase={one}
wrs2p line.s2p
set filetype=ascii
.endc
.end
"""


def pressure_line() -> Circuit:
    """The two-port of the netlists here."""
    net = Network("pressure line")
    net.add_voltage_source("V1", "in", "0", ac=1)
    net.add_resistor("R1", "in", "a", 1e3)
    net.add_capacitor("C1", "a", "0", 10e-9)
    net.add_resistor("R2", "a", "out", 2.2e3)
    net.add_capacitor("C2", "out", "0", 4.7e-9)
    net.add_capacitor("C3", "in", "out", 100e-12)
    return Circuit(net, "pressure-line", output=("out",))


def run(folder: Path, netlist: str) -> None:
    """Let ngspice run a netlist in a folder."""
    (folder / "line.cir").write_text(netlist)
    subprocess.run(["ngspice", "-b", "line.cir"], cwd=folder, capture_output=True, check=False)


@pytest.mark.ngspice
def test_a_touchstone_file_of_ngspice(tmp_path: Path) -> None:
    """The S-parameter analysis of ngspice, written with wrs2p, lies within the allowance at every point."""
    run(tmp_path, TWO_PORT.format(one=600, two=600))
    curves = read_results(tmp_path / "line.s2p")
    assert curves.ports == Ports((600.0, 600.0))
    circuit = pressure_line()
    for other, exact in zip(curves, measured_at_ports(circuit, curves), strict=True):
        assert len(other) > 20
        assert (
            np.abs(other.values - exact.values) <= allowance_at_ports(circuit, other, (600.0, 600.0))
        ).all()
    gain = gain_from_ports(circuit, curves)
    np.testing.assert_allclose(gain.values, circuit.network.response(gain.axis, "out"), rtol=1e-3)


AC = """pressure line between resistances
V1 e 0 ac {ac1}
Rg e in 600
{body}
Rl out f 75
V2 f 0 ac {ac2}
.ac dec 5 100 1meg
.end
"""
BODY = "R1 in a 1k\nC1 a 0 10n\nR2 a out 2.2k\nC2 out 0 4.7n\nC3 in out 100p"


@pytest.mark.ngspice
def test_ac_with_terminations_in_ngspice(tmp_path: Path) -> None:
    """S21 = 2 (V2/E) sqrt(R1/R2), S11 = 2 V1/E - 1, and the other way round, from two ac analyses."""
    answers = {}
    for driven in (1, 2):
        run(tmp_path, AC.format(ac1=int(driven == 1), ac2=int(driven == 2), body=BODY))
        subprocess.run(
            ["ngspice", "-b", "-r", "ac.raw", "line.cir"], cwd=tmp_path, capture_output=True, check=False
        )
        raw = read_results(tmp_path / "ac.raw")
        answers[driven] = [raw.get("v(in)"), raw.get("v(out)")]
    (v11, v21), (v12, v22) = answers[1], answers[2]
    assert v11 is not None and v21 is not None and v12 is not None and v22 is not None
    found = exact_ports(pressure_line(), v11.axis, (600.0, 75.0))
    turn = np.sqrt(600 / 75)
    for name, meant in (
        ("s11", 2 * v11.values - 1),
        ("s21", 2 * turn * v21.values),
        ("s12", 2 / turn * v12.values),
        ("s22", 2 * v22.values - 1),
    ):
        np.testing.assert_allclose(found[name], meant, rtol=1e-9, atol=1e-12)


SENSED = """a source controlled by the port's own current
V1 {nodes} ac 1
Rg in e 600
R1 in out 1k
C1 out 0 10n
F1 0 out V1 0.3
Rl out 0 75
.ac dec 5 100 1meg
.end
"""


@pytest.mark.ngspice
@pytest.mark.parametrize("nodes", ["e 0", "0 e"])
def test_the_port_current_still_controls_what_it_did(tmp_path: Path, nodes: str) -> None:
    """What the driving source's current controls goes on working at the port; not reciprocal then."""
    run(tmp_path, SENSED.format(nodes=nodes))
    subprocess.run(
        ["ngspice", "-b", "-r", "ac.raw", "line.cir"], cwd=tmp_path, capture_output=True, check=False
    )
    raw = read_results(tmp_path / "ac.raw")
    out = raw.get("v(out)")
    assert out is not None
    net = Network()
    net.add_voltage_source("V1", *nodes.replace("e", "in").split(), ac=1)
    net.add_resistor("R1", "in", "out", 1e3)
    net.add_capacitor("C1", "out", "0", 10e-9)
    net.add_current_controlled_current_source("F1", "0", "out", "V1", 0.3)
    found = exact_ports(Circuit(net, output=("out",)), out.axis, (600.0, 75.0))
    emf = 1 if nodes == "e 0" else -1
    np.testing.assert_allclose(found["s21"], 2 * np.sqrt(600 / 75) * out.values / emf, rtol=1e-9)
    assert (np.abs(found["s21"] - found["s12"]) > 1e-3).any()
