"""The linear part of a netlist: what is not linear left out on demand, with the nodes it touched."""

from __future__ import annotations

from pathlib import Path

import pytest
from beside_ngspice import AC, both

from rcnet.circuit import Circuit
from rcnet.errors import CircuitError
from rcnet.netlist import Reading, parse_netlist

LINEAR = Reading(linear_part=True)
V = "V1 in 0 DC 1 AC 1\nR1 in out 1k\nC1 out 0 1u\n"


def read(body: str, reading: Reading = LINEAR) -> Circuit:
    """A low-pass filter and some lines more; the first stands on line 5."""
    return parse_netlist(f"* gauge\n{V}{body}\n.end\n", "gauge.cir", reading)


# Line -> what it is, and which of the filter's nodes it touches.
LEFT_OUT: dict[str, tuple[str, tuple[str, ...]]] = {
    "A1 out x gain": ("a code model", ()),
    "B1 out 0 v=v(in)^2": ("a behavioural source", ("out",)),
    "D1 out 0 dmod": ("a diode", ("out",)),
    "J1 out in 0 jmod": ("a junction transistor", ("out", "in")),
    "M1 out in 0 x mmod": ("a field-effect transistor", ("out", "in")),
    "N1 out in dev": ("a compiled device", ()),
    "O1 in 0 out 0 lmod": ("a lossy line", ("in", "out")),
    "P1 out in cpl": ("a coupled line", ()),
    "Q1 OUT in 0 qmod": ("a bipolar transistor", ("out", "in")),
    "S1 out x in 0 smod": ("a switch", ("out", "in")),
    "T1 in 0 out 0 z0=50 td=1n": ("a transmission line", ("in", "out")),
    "U1 in out 0 umod l=1": ("a distributed RC line", ("in", "out")),
    "W1 out x V1 wmod": ("a switch", ("out",)),
    "Y1 in 0 out 0 ymod": ("a lossy line", ("in", "out")),
    "Z1 out in 0 zmod": ("a field-effect transistor", ("out", "in")),
    "E1 x 0 POLY(1) out 0 0 2": ("a part that is not linear", ()),
    "G1 out x value={v(in)}": ("a part that is not linear", ("out",)),
    "F1 out 0 POLY(1) V1 0 2": ("a part that is not linear", ("out",)),
    "H1 x in poly(1) V1 0 2": ("a part that is not linear", ("in",)),
    "R9 out x {1k*(1+v(out))}": ("a part that is not linear", ("out",)),
    "C9 out 0 c='1u*time'": ("a part that is not linear", ("out",)),
}


@pytest.mark.parametrize("line", LEFT_OUT)
def test_what_is_not_linear_is_left_out(line: str) -> None:
    """Its name, what it is, where it stands, and which nodes of the rest it touched, ground aside."""
    circuit = read(line)
    assert circuit.network.names == ("V1", "R1", "C1")
    (left,) = circuit.left_out
    kind, nodes = LEFT_OUT[line]
    assert (left.name, left.place.line, left.place.file) == (line.split(maxsplit=1)[0], 5, "gauge.cir")
    assert left.kind == kind
    assert set(nodes) == set(left.nodes)


@pytest.mark.parametrize("line", LEFT_OUT)
def test_without_the_wish_it_is_refused(line: str) -> None:
    """Once, on its line, and the remedy names the wish."""
    with pytest.raises(CircuitError) as caught:
        read(line, Reading())
    (problem,) = caught.value.problems
    assert (problem.code, problem.line) == ("not-linear", 5)
    assert "--linear-part" in (problem.remedy or "")


def test_inside_subcircuits() -> None:
    """Each instance has its own, with the paths of its name and nodes; what defines it stays unread."""
    cell = ".subckt s a b\nR1 a m 1k\nD1 m b dmod\nQ1 m a loose qmod\n.model dmod d(is=1e-14)\n.ends\n"
    circuit = read(cell + "X1 out 0 s\nX2 in out s")
    assert [(left.name, left.nodes, left.place.line) for left in circuit.left_out] == [
        ("D.X1.D1", ("X1.m",), 7),
        ("Q.X1.Q1", ("X1.m", "out"), 8),
        ("D.X2.D1", ("X2.m", "out"), 7),
        ("Q.X2.Q1", ("X2.m", "in"), 8),
    ]
    assert circuit.network.names == ("V1", "R1", "C1", "R.X1.R1", "R.X2.R1")


def test_what_senses_it_is_refused() -> None:
    """An F that senses the current of what is left out has nothing to sense."""
    with pytest.raises(CircuitError, match="F1 senses the current of 'Vd'"):
        read("F1 out 0 Vd 1\nD1 out 0 dmod")


def test_mistakes_stay_mistakes() -> None:
    """What is linear and cannot be read is not left out; nor is what nobody knows."""
    with pytest.raises(CircuitError) as caught:
        read("R9 out\n1x out 0\nD1 out 0 dmod\nX1 out 0 nope\n.foo")
    assert [problem.line for problem in caught.value.problems] == [5, 6, 8, 9]


def test_nothing_linear_is_no_netlist() -> None:
    """There is nothing to analyse then."""
    with pytest.raises(CircuitError, match="holds no parts"):
        parse_netlist("* gauge\nD1 a 0 dmod\n.end\n", "gauge.cir", LINEAR)


AMPLIFIER = (
    "* gauge\nV1 in 0 DC 1 AC 1\n.param r=10k\n.subckt stage a b\nC1 a g 100n\nR1 g 0 {r}\nR2 g s 22k\n{}"
    "C2 s b 1u\nR3 b 0 4.7k\n.ends\nX1 in mid stage\nX2 mid out stage\nR9 out 0 1k\n{}"
)
INNER, OUTER = (
    "Q1 c g s npn\nD1 0 g clamp\n",
    "D9 out 0 clamp\nB1 far 0 v=v(out)^2\nE2 e 0 poly(1) out 0 0 2\n",
)


@pytest.mark.ngspice
def test_the_answer_is_that_of_ngspice_without_those_lines(tmp_path: Path) -> None:
    """The rest has the voltages that ngspice finds where the lines are taken out."""
    full = AMPLIFIER.replace("{}", INNER, 1).replace("{}", OUTER, 1) + AC
    without = AMPLIFIER.replace("{}", "") + AC
    rest = both(tmp_path, without).require_same()
    circuit = parse_netlist(full, "gauge.cir", LINEAR)
    assert list(circuit.network.parts) == list(rest.network.parts)
    assert circuit.network.nodes == rest.network.nodes
    assert len(circuit.left_out) == 7
