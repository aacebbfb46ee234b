"""Transients from a given state against closed forms, the conservation of charge, 50-digit solutions and
ngspice.
"""

from __future__ import annotations

import math
import os
import random
import shutil
import subprocess
from pathlib import Path

import mna_reference as reference
import mpmath
import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.answers import time_curves
from rcnet.circuit import (
    Analyses,
    Circuit,
    Exponential,
    Network,
    Points,
    Sine,
    Source,
    Square,
    StartingState,
    Step,
    TransientRun,
    Waveform,
)
from rcnet.curves import read_results
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import natural_frequencies, operating_point, started, transient, transient_from

Float = npt.NDArray[np.float64]


def waveform(text: str) -> Waveform | None:
    """The waveform of a source's line, its numbers written out; None for a mere dc value."""
    if "(" not in text:
        return None
    word, _, numbers = text.rstrip(")").partition("(")
    n = [float(number) for number in numbers.split()]
    if word == "SIN":
        n += [0.0] * (6 - len(n))
        return Sine(n[1], n[2], n[0], n[5], n[3], n[4])
    if word == "EXP":
        return Exponential(n[0], n[1], n[2], n[3], n[4], n[5])
    if word == "PULSE":
        return Square(n[0], n[1], n[6], n[5], n[3], n[4], n[2])
    return Points(tuple(zip(n[::2], n[1::2], strict=True)))


def read(text: str) -> tuple[Network, StartingState]:
    """A network and its starting state from lines as ngspice takes them; numbers without suffixes."""
    network, nodes, parts = Network(), {}, {}
    for line in text.strip().splitlines():
        name, *words = line.split()
        if name == ".ic":
            nodes.update({word[2 : word.index(")")]: float(word.split("=")[1]) for word in words})
            continue
        for word in words:
            if word.startswith("ic="):
                parts[name] = float(word[3:])
        words = [word for word in words if not word.startswith("ic=")]
        if name[0] in "VI":
            wave = waveform(" ".join(words[2:]))
            dc = None if wave is not None else float(words[2])
            network.add_source(Source(name, (words[0], words[1]), dc=dc, waveform=wave))
            continue
        add = {
            "R": network.add_resistor,
            "C": network.add_capacitor,
            "L": network.add_inductor,
            "E": network.add_voltage_controlled_voltage_source,
            "G": network.add_voltage_controlled_current_source,
            "F": network.add_current_controlled_current_source,
            "H": network.add_current_controlled_voltage_source,
        }[name[0]]
        add(name, *words[:-1], float(words[-1]))  # type: ignore[operator]
    return network, StartingState(nodes, parts)


def response(text: str, time: npt.ArrayLike, of: str | list[str], *, uic: bool) -> Float:
    """The transient of a netlist's lines from their starting state."""
    network, state = read(text)
    return transient_from(network, time, of, state, uic)


# ---------------------------------------------------------------------- closed forms


@pytest.mark.parametrize("ends", ["out 0", "0 out"])
def test_a_charged_capacitor_drains_through_a_resistor(ends: str) -> None:
    """v0 exp(-t/RC), the sign that of the capacitor's first node less its second."""
    time = np.geomspace(1e-6, 2e-2, 40)
    sign = 1 if ends == "out 0" else -1
    got = response(f"R1 out 0 1e3\nC1 {ends} 1e-6 ic=2.5", time, "out", uic=True)
    assert got == pytest.approx(sign * 2.5 * np.exp(-time / 1e-3), rel=1e-14)


def test_a_supply_goes_on_charging_a_capacitor_from_where_it_is() -> None:
    """v1 + (v0 - v1) exp(-t/RC), whether the capacitor says so, its node, or its node's operating point."""
    time = np.linspace(0.0, 8e-3, 40)
    exact = 3 + (1 - 3) * np.exp(-time / 1e-3)
    circuit = "V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6"
    for text, uic in (
        (f"{circuit} ic=1", True),
        (f"{circuit} ic=1\n.ic v(out)=7 v(in)=9", True),  # what the capacitor says wins
        (f"{circuit}\n.ic v(out)=1", True),
        (f"{circuit} ic=7\n.ic v(out)=1", False),  # ic= does not count without uic
        (f"{circuit}\n.ic v(out)=1 v(in)=9", False),  # a source keeps its own node
    ):
        assert response(text, time, "out", uic=uic) == pytest.approx(exact, rel=1e-14)


def test_a_current_decays_through_an_inductor() -> None:
    """It is -R i0 exp(-R t/L) for a current that flows from the inductor's first node to its second."""
    time = np.geomspace(1e-7, 2e-5, 40)
    got = response("R1 a 0 1e3\nL1 a 0 1e-3 ic=0.02", time, "a", uic=True)
    assert got == pytest.approx(-20 * np.exp(-time / 1e-6), rel=1e-13)
    got = response("V1 in 0 3\nR1 in a 1e3\nL1 a 0 1e-3 ic=0.001", time, "a", uic=True)
    assert got == pytest.approx(2 * np.exp(-time / 1e-6), rel=1e-13)


def test_a_charged_tank_rings() -> None:
    """V0 cos(w t) - i0/(w C) sin(w t) in a lossless L and C."""
    w = 1 / math.sqrt(1e-3 * 1e-6)
    time = np.linspace(0.0, 20 / w, 60)
    got = response("L1 a 0 1e-3 ic=0.02\nC1 a 0 1e-6 ic=1.5", time, "a", uic=True)
    exact = 1.5 * np.cos(w * time) - 0.02 / (w * 1e-6) * np.sin(w * time)
    assert got == pytest.approx(exact, abs=1e-12)


def test_two_capacitors_share_their_charge_through_a_resistor() -> None:
    """Both end at (C1 v1 + C2 v2)/(C1 + C2); the difference dies with R C1 C2/(C1 + C2)."""
    c1, c2, v1, v2 = 1e-6, 3e-6, 5.0, -1.0
    time = np.array([0.0, 1e-4, 1e-3, 5e-3, 1.0])
    got = response(f"C1 a 0 {c1} ic={v1}\nR1 a b 1e3\nC2 b 0 {c2} ic={v2}", time, ["a", "b"], uic=True)
    final = (c1 * v1 + c2 * v2) / (c1 + c2)
    left = np.exp(-time / (1e3 * c1 * c2 / (c1 + c2)))
    assert got[0] == pytest.approx(final + (v1 - final) * left, rel=1e-13)
    assert got[1] == pytest.approx(final + (v2 - final) * left, rel=1e-13)


def test_contradicting_capacitors_share_their_charge_at_once() -> None:
    """In a loop without resistance each node keeps its charge: the value at t = 0 is that just after."""
    beside = "C1 a 0 1e-6 ic=5\nC2 a 0 3e-6 ic=-1\nR1 a 0 1e3"
    assert response(beside, [0.0], "a", uic=True) == pytest.approx([(5 - 3) / 4], rel=1e-14)
    divider = "V1 in 0 3\nC1 in out 1e-6 ic=1\nC2 out 0 3e-6 ic=1\nR1 out 0 1e3"
    assert response(divider, [0.0], "out", uic=True) == pytest.approx([1 + (3 - 2) / 4], rel=1e-14)
    across = "V1 in 0 3\nC1 in 0 1e-6 ic=1\nR1 in out 1e3\nC2 out 0 1e-6"
    assert response(across, [0.0, 1e-3], ["in", "out"], uic=True) == pytest.approx(
        np.array([[3, 3], [0, -3 * math.expm1(-1)]]), rel=1e-14
    )


def test_charge_that_nothing_drains_stays() -> None:
    """A node held by capacitors alone keeps what it began with, and so does the sum of its charges."""
    held = "V1 in 0 3\nR1 in out 1e3\nC1 out x 1e-6\nC2 x 0 2e-6\n.ic v(x)=0.5"
    time = np.array([0.0, 1e-4, 1.0])
    assert response(held, time, "x", uic=False) == pytest.approx([0.5, 0.5, 0.5], rel=1e-14)
    # With uic C1 starts at 0 - 0.5: `out` stands at 0 and the charge at x is 2e-6 0.5 + 1e-6 0.5.
    tau = 1e3 * 2e-6 / 3
    exact = 0.5 + 3 / 3 * -np.expm1(-time / tau)
    assert response(held, time, "x", uic=True) == pytest.approx(exact, rel=1e-13)


def test_a_current_into_a_charged_capacitor_adds_up() -> None:
    """v0 + I t/C, and with a sine of which the mean is not zero; there is no steady state to start from."""
    time = np.linspace(0.0, 4e-3, 9)
    text = "I1 0 a 1e-3\nC1 a 0 1e-6 ic=2"
    assert response(text, time, "a", uic=True) == pytest.approx(2 + 1e3 * time, rel=1e-14)
    assert response(f"{text}\n.ic v(a)=2", time, "a", uic=False) == pytest.approx(2 + 1e3 * time, rel=1e-14)
    w = 2 * math.pi * 1e3
    got = response("I1 0 a SIN(1e-3 2e-3 1e3 0 0 90)\nC1 a 0 1e-6 ic=2", time, "a", uic=True)
    assert got == pytest.approx(2 + 1e3 * time + 2e3 / w * np.sin(w * time), abs=1e-12)
    with pytest.raises(UndecidedError, match="I1 charges nodes"):
        transient(read(text)[0], time, "a")


def test_a_source_that_is_sensed_still_shows_all_of_its_current() -> None:
    """An H that senses a supply of 2 V before 1 kohm and a capacitor charged to 0.5 V: -h (2 - vc)/R."""
    time = np.linspace(0.0, 4e-3, 20)
    for drive in ("2", "SIN(2 0 1e3)", "PWL(0 2 1 2)"):
        text = f"V1 in 0 {drive}\nR1 in a 1e3\nC1 a 0 1e-6 ic=0.5\nH1 h 0 V1 100\nR2 h 0 50"
        got = response(text, time, "h", uic=True)
        assert got == pytest.approx(-100 * 1.5e-3 * np.exp(-time / 1e-3), rel=1e-12)


STARTS: dict[str, Waveform] = {
    "square": Square(2.0, 5.0, 4e-3, 1e-3, 0.2e-3, 0.0, 0.5e-3),
    "sine": Sine(2.0, 500.0, 1.0, 40.0, 0.1e-3),
    "damped sine": Sine(2.0, 500.0, 1.0, 40.0, 0.1e-3, 300.0),
    "step": Step(1.0, 4.0, 1e-3, 1e-3),
    "exponential": Exponential(1.5, 4.0, 1e-3, 1e-3, 3e-3, 1e-3),
    "points": Points(((0.5e-3, 2.0), (1e-3, -1.0), (2e-3, 3.0))),
    "points that repeat": Points(((0.5e-3, 2.0), (1e-3, -1.0), (2e-3, 3.0)), 3e-3),
}


@pytest.mark.parametrize("name", STARTS)
@pytest.mark.parametrize("general", [False, True])
def test_a_start_from_the_steady_state_is_the_ordinary_transient(name: str, *, general: bool) -> None:
    """The capacitors' and the inductor's own steady values, given as a state, change nothing."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=STARTS[name], dc=9.0)
    network.add_current_source("I1", "0", "b", waveform=STARTS[name])
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "b", 1e-7)
    network.add_resistor("R2", "a", "b", 2e3)
    network.add_capacitor("C2", "b", "0", 3e-7)
    network.add_resistor("R3", "b", "0", 5.0)
    if general:
        network.add_inductor("L1", "b", "c", 1e-3)
        network.add_resistor("R4", "c", "0", 20.0)
    time = np.linspace(0.0, 6e-3, 40)
    nodes = ["a", "b", "c"] if general else ["a", "b"]
    plain = transient(network, time, nodes)
    steady = dict(zip(nodes, plain[:, 0].tolist(), strict=True))
    parts = {"C1": steady["a"] - steady["b"], "C2": steady["b"]}
    if general:
        parts["L1"] = steady["c"] / 20.0
    for got in (
        transient_from(network, time, nodes, StartingState({}, parts), True),
        transient_from(network, time, nodes, StartingState({"b": steady["b"]}, {}), False),
        transient_from(network, time, nodes, StartingState({}, {"C1": 9.0}), False),
    ):
        assert np.abs(got - plain).max() <= 1e-11 * np.abs(plain).max()


@settings(max_examples=20, deadline=None, derandomize=True)
@given(st.integers(0, 10**9))
def test_going_on_from_where_a_transient_has_come_to_is_going_on(seed: int) -> None:
    """The state at t1, started from, gives the rest: the semigroup property of linear systems."""
    rng = random.Random(seed)
    network = reference.random_mesh(rng, rng.randint(2, 6), 3)
    network = network.with_source(Source("V1", ("n0", "0"), waveform=Step(0.0, 1.0)))
    first, rest = 3e-7, np.geomspace(1e-9, 1e-4, 12)
    capacitors = [part for part in network.parts if part.kind == "C"]
    pairs = [" ".join(node for node in part.nodes if node != "0") for part in capacitors]
    reached = transient(network, [first], pairs)[:, 0].tolist()
    state = {part.name: volts for part, volts in zip(capacitors, reached, strict=True)}
    on = network.with_source(Source("V1", ("n0", "0"), dc=1.0))
    got = transient_from(on, rest, "n2", StartingState({}, state), True)
    assert np.abs(got - transient(network, first + rest, "n2")).max() <= 1e-12


def test_a_state_in_a_general_network_against_an_inverse_laplace_transform() -> None:
    """Each kind of part; capacitors with a source v0/s in series, the inductor with i0/s beside it, in 50
    digits, by mpmath's Talbot inversion (A. Talbot 1979).
    """
    text = """V1 in 0 2
R1 in a 1e3
C1 a b 1e-6 ic=0.7
R2 b 0 2e3
Vs b c 0
C2 c 0 2e-7 ic=-1.5
R3 c d 3e3
L1 d 0 0.5 ic=4e-4
F1 0 a Vs 0.3
H1 h 0 Vs 200
R4 h c 5e3
G1 0 a c d 1e-4
E1 e 0 a c 0.5
R5 e f 1e3
C3 f 0 1e-6 ic=0.25
"""
    network, state = read(text)
    times = (3e-4, 2e-3)
    got = transient_from(network, times, ["c", "f"], state, True)
    charged, drive = (
        Network(),
        {"V1": 2.0, **{f"V{name}": v for name, v in state.parts.items() if name[0] == "C"}},
    )
    for part in network.parts:
        if part.kind == "V":
            charged.add_source(network.sources[part.name])
        elif part.kind == "C":
            charged.add_capacitor(part.name, part.nodes[0], f"x{part.name}", part.value)
            charged.add_voltage_source(f"V{part.name}", f"x{part.name}", part.nodes[1])
        else:
            charged.add_part(part)
    charged.add_current_source("I1", "d", "0")
    drive["I1"] = 4e-4
    for row, node in enumerate(("c", "f")):
        for t, value in zip(times, got[row].tolist(), strict=True):
            with mpmath.workdps(30):
                exact = mpmath.invertlaplace(
                    lambda s, node=node: reference.solve(charged, s, drive)[node] / s,
                    mpmath.mpf(t),
                    method="talbot",
                    degree=30,
                )
            assert value == pytest.approx(float(exact), abs=1e-10)


# ---------------------------------------------------------------------- the operating point with nodes held


def test_a_held_node_lets_go_at_once() -> None:
    """A divider's middle held at 1 V: what it does to a capacitor stays, its own voltage does not."""
    text = "V1 in 0 4\nR1 in m 1e3\nR2 m 0 1e3\nR3 m out 1e3\nC1 out 0 1e-6\n.ic v(m)=1"
    got = response(text, [0.0, 1e-9, 1.0], ["m", "out"], uic=False)
    assert got[1][[0, 2]] == pytest.approx([1.0, 2.0], rel=1e-14)
    assert got[0][[0, 2]] == pytest.approx([(4 + 0 + 1) / 3, 2.0], rel=1e-14)


def test_inductors_start_with_what_the_held_node_drives_through_them() -> None:
    """V - R - L to a node held at 1 V: (3 - 1)/R flows, and goes on into the load."""
    text = "V1 in 0 3\nR1 in a 100\nL1 a out 1e-3\nR2 out 0 1e3\nC1 out 0 1e-6\n.ic v(out)=1"
    got = response(text, [0.0], ["out", "a"], uic=False)
    assert got[:, 0] == pytest.approx([1.0, 3 - 100 * 0.02], rel=1e-12)


def test_what_cannot_be_held_is_said() -> None:
    """Inductors that tie a node to a fixed voltage; a source that ties two nodes otherwise than asked."""
    tank = "L1 a 0 1e-3\nC1 a 0 1e-6\nR1 a 0 1e3\n.ic v(a)=1"
    with pytest.raises(UndecidedError, match=r"node 'a' cannot start at 1 V: inductors.*keep it at 0 V"):
        response(tank, [0.0], "a", uic=False)
    assert response(tank, [0.0], "a", uic=True) == pytest.approx([1.0])
    tied = "R1 a 0 1e3\nV2 a b 1\nR2 b 0 1e3\nC2 b 0 1e-6\n.ic v(a)=1 v(b)="
    with pytest.raises(UndecidedError, match=r"node 'b' cannot start at 2 V.*keep it at 0 V"):
        response(f"{tied}2", [0.0], "a", uic=False)
    assert response(f"{tied}0", [0.0], "a", uic=False) == pytest.approx([1.0])
    with pytest.raises(UndecidedError, match="there is no operating point to start from"):
        response("I1 0 a 1e-3\nC1 a 0 1e-6\nR1 b 0 1\nC2 b 0 1\n.ic v(b)=1", [0.0], "a", uic=False)


def test_names_and_values_that_are_wrong_are_refused() -> None:
    """Nodes and parts that are not there, parts without a state, numbers that are none."""
    network, _ = read("V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6")
    for nodes, parts, words in (
        ({"nowhere": 1.0}, {}, "no node called 'nowhere'"),
        ({}, {"C9": 1.0}, "no part called 'C9'"),
        ({}, {"R1": 1.0}, "R1 is neither a capacitor nor an inductor"),
        ({"out": math.nan}, {}, "starting voltage of node 'out' is nan"),
        ({}, {"C1": math.inf}, "starting value of C1 is inf"),
    ):
        with pytest.raises(CircuitError, match=words):
            started(network, nodes, parts, use_initial=True)
    with pytest.raises(CircuitError, match="'n9'"):
        transient_from(network, [0.0], "n9", StartingState({"out": 1.0}), False)
    network.add_capacitor("Cx", "x", "y", 1e-9)
    for uic in (False, True):
        with pytest.raises(UnsolvableError, match="nodes x, y have no connection"):
            transient_from(network, [0.0], "out", StartingState({"out": 1.0}), uic)


def test_the_given_network_is_left_alone_and_names_never_clash() -> None:
    """Sources called as the added ones would be stay themselves."""
    network, state = read("V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6 ic=1\nIstart1 0 out 1e-3\nIstart2 0 out 0")
    before = [*network.parts], dict(network.sources)
    made = started(network, state.nodes, state.parts, use_initial=True)
    assert ([*network.parts], dict(network.sources)) == before
    assert made.nodes == network.nodes
    assert len(made) == len(network) + 1
    assert transient(made, [0.0, 1.0], "out") == pytest.approx([1.0, 4.0], rel=1e-14)
    assert operating_point(network)["out"] == pytest.approx(4.0)


def test_the_curves_of_a_circuit_start_where_it_says() -> None:
    """A starting state alone, uic alone, both; nodes named and ordered as ever."""
    network, state = read("V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6 ic=2\n.ic v(out)=1")
    plain = Circuit(network)
    run = Analyses(transient=TransientRun(1e-2, 1e-4, use_initial=True))
    for circuit, first in (
        (plain, 3.0),
        (Circuit(network, initial=state), 1.0),
        (Circuit(network, initial=StartingState({}, {"C1": 2.0})), 3.0),
        (Circuit(network, initial=state, analyses=run), 2.0),
        (Circuit(network, analyses=run), 0.0),
    ):
        curves = time_curves(circuit, [], [0.0, 1.0])
        assert [curve.name for curve in curves] == ["v(in)", "v(out)"]
        assert [curve.values.real.tolist() for curve in curves] == [[3.0, 3.0], pytest.approx([first, 3.0])]


# ---------------------------------------------------------------------- ngspice

RC = "V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6 ic=1"
BRIDGED = """V1 in 0 SIN(1 2 1e3 0 300 40)
R1 in a 1e3
C1 a 0 1e-6
R2 a b 2e3
C2 b 0 5e-7
C3 a b 2e-7 ic=0.5"""
FLOATING = """V1 in 0 PULSE(1 3 2e-4 1e-5 2e-5 5e-4 1e-3)
R1 in a 1e3
C1 a b 1e-6 ic=0.3
R2 b 0 2e3
R3 a 0 5e3
C2 b c 2e-7 ic=-2
R4 c 0 3e3
R5 c in 1e4"""
RLC = "V1 in 0 3\nR1 in a 10\nL1 a out 1e-3 ic=0.05\nC1 out 0 1e-6 ic=1\nR2 out 0 100"
CONTROLLED = """V1 in 0 3
Vs m q EXP(0.5 2 1e-4 2e-4 1e-3 3e-4)
Rq q 0 300
R1 in a 1e3
C1 a m 1e-6 ic=0.3
F1 0 b Vs 0.5
R2 b 0 2e3
C2 b 0 2e-7 ic=-1
H1 h 0 Vs 500
R3 h c 1e3
C3 c 0 1e-6
G1 0 c a b 1e-4
E1 d 0 c b 2
R4 d e 1e3
C4 e 0 1e-7 ic=0.1"""
HELD = "V1 in 0 3\nR1 in out 1e3\nC1 out x 1e-6\nC2 x 0 2e-6\n.ic v(x)=0.5"

DECKS: dict[str, tuple[str, bool, float]] = {
    "one capacitor": (f"{RC}\n.ic v(out)=2", True, 5e-3),
    "one node": (f"{RC}\n.ic v(out)=2", False, 5e-3),
    "between two nodes": (f"{BRIDGED}\n.ic v(b)=-1", True, 5e-3),
    "held between two nodes": (f"{BRIDGED}\n.ic v(b)=-1", False, 5e-3),
    "nothing grounded": (FLOATING, True, 5e-3),
    "nothing grounded, held": (f"{FLOATING}\n.ic v(c)=2", False, 5e-3),
    "ringing": (RLC, True, 5e-4),
    "ringing, held": (f"{RLC}\n.ic v(out)=-1", False, 5e-4),
    "controlled": (CONTROLLED, True, 4e-3),
    "contradicting a source": (
        "V1 in 0 3\nC0 in out 1e-6 ic=1\nC1 out 0 3e-6 ic=1\nR1 out 0 1e3",
        True,
        5e-3,
    ),
    "contradicting each other": ("R1 a 0 1e3\nC0 a 0 1e-6 ic=1\nC1 a 0 3e-6 ic=2", True, 5e-3),
    "kept charge": (HELD, True, 5e-3),
    "kept charge, held": (HELD, False, 5e-3),
    "held behind a source": (
        "V1 in 0 3\nR1 in out 1e3\nC1 out 0 1e-6\nV2 out b 1\nR2 b 0 1e3\nC2 b 0 1e-6\n.ic v(out)=1 v(in)=7",
        False,
        5e-3,
    ),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", DECKS)
def test_ngspice_starts_alike(tmp_path: Path, name: str) -> None:
    """At its own times, to what the trapezoidal rule loses (Nagel 1975): (h p)^2/12 of each mode p in each of
    its time constants or turns. Without uic its point at t = 0 is still the held operating point, not the
    first one of the run.
    """
    text, uic, stop = DECKS[name]
    network, state = read(text)
    step = stop / 20_000
    options = ".options reltol=1e-8 abstol=1e-18 vntol=1e-12 chgtol=1e-20"
    run = f".tran {step!r} {stop!r} 0 {step!r}{' uic' if uic else ''}"
    (tmp_path / "deck.cir").write_text(
        "\n".join(["* state", text, options, run, ".end", ""]), encoding="utf-8"
    )
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")
    assert program is not None
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
        cwd=tmp_path,
        env={**os.environ, "HOME": str(tmp_path)},
        capture_output=True,
        check=True,
        timeout=60,
    )
    curves = read_results(tmp_path / "deck.raw")
    poles = natural_frequencies(network)
    fastest, slowest = float(np.abs(poles).max()), float(np.abs(poles.real[poles != 0]).min())
    swing = max(fastest, 2 * math.pi * 1e3)
    allowed = (step * swing) ** 2 / 12 * (1 + swing * min(stop, 2 / slowest))
    nodes = [node for node in network.nodes if node != "0"]
    time = curves.get(f"v({nodes[0]})", "transient").axis  # type: ignore[union-attr]
    assert len(time) > 10_000
    exact = transient_from(network, time, nodes, state, uic)
    later = time > 0
    for row, node in enumerate(nodes):
        curve = curves.get(f"v({node})", "transient")
        assert curve is not None
        size = float(np.abs(exact[row]).max())
        assert np.abs(curve.values.real - exact[row])[later].max() <= (allowed + 1e-9) * size, node
