"""The allowance: whatever ngspice's own rounding can do is covered, and where nothing is delicate no more."""

from __future__ import annotations

import math
import random
from collections.abc import Callable

import numpy as np
import pytest

from rcnet import Network
from rcnet.circuit import Analyses, Circuit, Sweep
from rcnet.compare import Comparison, compare
from rcnet.compare.allowance import rounding_allowance
from rcnet.errors import UnsolvableError
from rcnet.netlist import write
from rcnet.opinion import ask


def asked(network: Network, start: float, stop: float, per_decade: int = 5, *, dc: bool = False) -> Circuit:
    """The circuit whose ac analysis runs from start to stop, with its operating point where `dc`."""
    sweep = Sweep(start, stop, per_decade)
    output = ("out",) if network.has_node("out") else ()
    return Circuit(network, "test", output=output, analyses=Analyses(ac=sweep, operating_point=dc))


def by_ngspice(circuit: Circuit) -> Comparison:
    """What comes of holding ngspice's answer against the exact curves."""
    opinion = ask(write(circuit), "ngspice")
    assert opinion is not None
    return compare(circuit, opinion.curves, who=opinion.who)


def driven(title: str = "") -> Network:
    """A network with a source of 1 V, ac and dc, from `in` to ground."""
    net = Network(title)
    net.add_voltage_source("V1", "in", "0", ac=1, dc=1)
    return net


def value(rng: random.Random, low: float, decades: float) -> float:
    """A random value within so many decades above low."""
    return low * 10 ** (decades * rng.random())


def ladder(rng: random.Random, sections: int, spread: float) -> Network:
    """Series R and shunt C, each over `spread` decades."""
    net, last = driven("ladder"), "in"
    for number in range(1, sections + 1):
        node = "out" if number == sections else f"n{number}"
        net.add_resistor(f"R{number}", last, node, value(rng, 10, spread))
        net.add_capacitor(f"C{number}", node, "0", value(rng, 1e-12, spread))
        last = node
    return net


def tree(rng: random.Random, nodes: int, spread: float) -> Network:
    """Each node hangs by a resistor on an earlier one and has a capacitor to ground."""
    net, names = driven("tree"), ["in"]
    for number in range(1, nodes + 1):
        node = "out" if number == nodes else f"n{number}"
        net.add_resistor(f"R{number}", rng.choice(names), node, value(rng, 10, spread))
        net.add_capacitor(f"C{number}", node, "0", value(rng, 1e-12, spread))
        names.append(node)
    return net


def mesh(rng: random.Random, nodes: int, spread: float) -> Network:
    """A tree of resistors with as many more parts, R or C, between any two nodes."""
    net = tree(rng, nodes, spread)
    names = list(net.nodes)
    for number in range(nodes + 1, 2 * nodes + 1):
        a, b = rng.sample(names, 2)
        if rng.random() < 0.5:
            net.add_resistor(f"R{number}", a, b, value(rng, 10, spread))
        else:
            net.add_capacitor(f"C{number}", a, b, value(rng, 1e-12, spread))
    return net


def buffered(rng: random.Random, sections: int, spread: float) -> Network:
    """RC sections with amplifiers of gain -3 to 3 between them."""
    net, last = driven("buffered"), "in"
    for number in range(1, sections + 1):
        net.add_resistor(f"R{number}", last, f"a{number}", value(rng, 10, spread))
        net.add_capacitor(f"C{number}", f"a{number}", "0", value(rng, 1e-12, spread))
        last = "out" if number == sections else f"b{number}"
        gain = rng.uniform(-3, 3)
        net.add_voltage_controlled_voltage_source(f"E{number}", last, "0", f"a{number}", "0", gain)
    net.add_resistor("Rload", "out", "0", 1e4)
    return net


def active(rng: random.Random, nodes: int, spread: float) -> Network:
    """A mesh with inductors, floating sources and controlled sources of every kind hung on it."""
    net = mesh(rng, nodes, spread)
    names = list(net.nodes)
    for number in range(rng.randint(1, 5)):
        a, (b, c, d) = f"x{number}", (rng.choice(names) for _ in range(3))
        kind, size = rng.choice("EGLVFH"), value(rng, 10, spread)
        if kind == "E":
            net.add_voltage_controlled_voltage_source(f"E{number}", a, "0", b, c, rng.uniform(-3, 3))
        elif kind == "G":
            net.add_voltage_controlled_current_source(f"G{number}", a, "0", b, c, rng.uniform(-1, 1) / size)
        elif kind == "L":
            net.add_inductor(f"L{number}", a, b, value(rng, 1e-9, spread))
        elif kind == "V":
            net.add_voltage_source(f"Vx{number}", a, b, dc=rng.uniform(-1, 1))
        else:
            net.add_voltage_source(f"Vs{number}", a, b)
        if kind == "F":
            net.add_current_controlled_current_source(f"F{number}", c, "0", f"Vs{number}", rng.uniform(-3, 3))
        elif kind == "H":
            net.add_current_controlled_voltage_source(f"H{number}", f"y{number}", "0", f"Vs{number}", size)
            net.add_resistor(f"Ry{number}", f"y{number}", c, value(rng, 10, spread))
        net.add_resistor(f"Rx{number}", a, d, value(rng, 10, spread))
        names.append(a)
    return net


RANDOM: dict[str, Callable[[random.Random, int, float], Network]] = {
    "ladder": ladder,
    "tree": tree,
    "mesh": mesh,
    "buffered": buffered,
    "active": active,
}
CASES = [
    *((kind, seed, spread) for kind in RANDOM for spread in (1.0, 4.0) for seed in range(4)),
    *(
        (kind, seed, spread)
        for kind in ("ladder", "tree", "mesh", "buffered")
        for spread in (8.0, 12.0)
        for seed in range(4)
    ),
]


@pytest.mark.ngspice
@pytest.mark.parametrize(("kind", "seed", "spread"), CASES)
def test_random_networks_agree(kind: str, seed: int, spread: float) -> None:
    """Random networks, values over up to twelve decades, sixteen decades of frequency: ngspice agrees."""
    rng = random.Random(f"{kind} {seed} {spread}")
    network = RANDOM[kind](rng, rng.randint(2, 18), spread)
    start, stop = (1.0, 1e8) if kind == "active" else (1e-4, 1e12)
    found = by_ngspice(asked(network, start, stop, 2, dc=True))
    assert found.verdict == "agree", found.curves
    assert {curve.analysis for curve in found.curves} == {"ac", "operating point"}


def twin_t(r: float, c: float) -> Network:
    """The notch: nothing arrives at 1/(2 pi RC)."""
    net = driven("level probe hum notch")
    net.add_resistor("R1", "in", "a", r)
    net.add_resistor("R2", "a", "out", r)
    net.add_capacitor("C3", "a", "0", 2 * c)
    net.add_capacitor("C1", "in", "b", c)
    net.add_capacitor("C2", "b", "out", c)
    net.add_resistor("R3", "b", "0", r / 2)
    return net


def link(r: float, between: float) -> Network:
    """A small resistor between two great ones; half the voltage stands at both its ends."""
    net = driven("link")
    net.add_resistor("R1", "in", "a", r)
    net.add_resistor("Rlink", "a", "out", between)
    net.add_resistor("R2", "out", "0", r)
    net.add_capacitor("C1", "out", "0", 1e-15)
    return net


def resonator(q: float) -> Network:
    """Series R, L and C with a narrow peak at 159.155 kHz."""
    net = driven("leak listener")
    net.add_resistor("R1", "in", "a", 1e3 / q)
    net.add_inductor("L1", "a", "out", 1e-3)
    net.add_capacitor("C1", "out", "0", 1e-9)
    return net


def positive_feedback(gain: float) -> Network:
    """An amplifier with RC feedback near its limit: 3 - gain is what damps it."""
    net = driven("active")
    net.add_resistor("R1", "in", "a", 1e4)
    net.add_resistor("R2", "a", "b", 1e4)
    net.add_capacitor("C1", "a", "out", 1e-8)
    net.add_capacitor("C2", "b", "0", 1e-8)
    net.add_voltage_controlled_voltage_source("E1", "out", "0", "b", "0", gain)
    net.add_resistor("R3", "out", "0", 1e6)
    return net


def capacitive_tee() -> Network:
    """Two capacitors in series with nothing else at their midpoint."""
    net = driven("divider")
    net.add_capacitor("C1", "in", "out", 1e-9)
    net.add_capacitor("C2", "out", "0", 3e-9)
    return net


F0 = 1e3
NOTCH_C = 1 / (2 * math.pi * F0 * 1e4)
SPECIAL: dict[str, Callable[[], Circuit]] = {
    "notch, on it": lambda: asked(twin_t(1e4, NOTCH_C), F0 / 100, F0 * 100, 50, dc=True),
    "notch, narrow sweep": lambda: asked(twin_t(1e4, NOTCH_C), 999.0, 1001.0, 20000),
    "link 1 mohm in 1 Mohm": lambda: asked(link(1e6, 1e-3), 1, 1e9, dc=True),
    "link 1 mohm in 1 Gohm": lambda: asked(link(1e9, 1e-3), 1, 1e9, dc=True),
    "link 1 mohm in 1 Tohm": lambda: asked(link(1e12, 1e-3), 1, 1e9, dc=True),
    "peak of Q 100": lambda: asked(resonator(100), 1e5, 3e5, 400),
    "peak of Q 1e6": lambda: asked(resonator(1e6), 1.5e5, 1.7e5, 4000),
    "feedback near its limit": lambda: asked(positive_feedback(2.999999), 1e2, 1e5, 200, dc=True),
    "ladder down to -700 dB": lambda: asked(ladder(random.Random(1), 12, 0.3), 1, 1e14, 3, dc=True),
    "high-pass up from -600 dB": lambda: asked(_highpass(10), 1e-6, 1e6, 3),
    "no dc path": lambda: asked(capacitive_tee(), 1e-3, 1e9),
    "units of 1": lambda: asked(_units(), 1e-3, 1e3, dc=True),
    "far beyond a follower": lambda: asked(buffered(random.Random(2), 6, 4.0), 1e-4, 1e12, 3),
    "undriven nodes": lambda: asked(_undriven(), 1, 1e6, dc=True),
    "two sources": lambda: asked(_two_sources(), 1, 1e6, dc=True),
}


def _highpass(sections: int) -> Network:
    net, last = driven("high-pass"), "in"
    for number in range(1, sections + 1):
        node = "out" if number == sections else f"n{number}"
        net.add_capacitor(f"C{number}", last, node, 1e-9 * number)
        net.add_resistor(f"R{number}", node, "0", 1e3 * number)
        last = node
    return net


def _units() -> Network:
    net = driven("units")
    net.add_resistor("R1", "in", "out", 1)
    net.add_capacitor("C1", "out", "0", 1)
    return net


def _undriven() -> Network:
    """A node that a source of 0 V holds at nothing, and one between equal voltages."""
    net = driven("undriven")
    net.add_resistor("R1", "in", "out", 1e3)
    net.add_voltage_source("V0", "x", "0")
    net.add_resistor("R2", "out", "x", 1e3)
    net.add_voltage_controlled_voltage_source("E1", "y", "0", "out", "out", 5)
    net.add_resistor("R3", "y", "in", 1e3)
    return net


def _two_sources() -> Network:
    net = driven("two")
    net.add_resistor("R1", "in", "out", 1e3)
    net.add_capacitor("C1", "out", "0", 1e-7)
    net.add_resistor("R2", "out", "b", 2.2e3)
    net.add_voltage_source("V2", "b", "0", ac=0.5, ac_phase=70, dc=-4)
    net.add_current_source("I1", "0", "out", ac=1e-4, dc=1e-3)
    return net


@pytest.mark.ngspice
@pytest.mark.parametrize("case", SPECIAL)
def test_hard_networks_agree(case: str) -> None:
    """Where ngspice rounds at its worst the allowance is wide enough, and nowhere is an alarm false."""
    found = by_ngspice(SPECIAL[case]())
    assert found.verdict == "agree", found.curves


@pytest.mark.ngspice
def test_wide_allowance_is_told() -> None:
    """Where rounding alone may move a value by more than 0.01 dB, the comparison says so; elsewhere not."""
    told = by_ngspice(SPECIAL["link 1 mohm in 1 Tohm"]()).remarks
    assert len(told) == 1
    assert "0.01 dB" in told[0]
    assert by_ngspice(SPECIAL["two sources"]()).remarks == ()


@pytest.mark.ngspice
def test_allowance_bounds_what_ngspice_does() -> None:
    """The link's error at 1 Tohm is really some percent of the value, and the allowance is no less."""
    found = by_ngspice(SPECIAL["link 1 mohm in 1 Tohm"]())
    worst = next(curve for curve in found.curves if curve.name == "v(out)").worst
    assert worst.relative > 1e-3
    assert worst.allowed >= abs(complex(worst.other) - complex(worst.exact))


# ---------------------------------------------------------------------- the bound itself


def bound(network: Network, omega: float, node: str, *, drive: float = 1.0) -> float:
    """The allowance of a node's voltage at one frequency, volts."""
    sources = np.zeros(len(network), dtype=np.complex128)
    sources[network.part_index("V1")] = drive
    found = rounding_allowance(network, np.array([1j * omega]), sources, [network.node_index(node) - 1])
    return float(found[0, 0])


def test_bound_is_small_where_nothing_is_delicate() -> None:
    """In an ordinary filter the allowance is far below a thousandth of a decibel, 1.15e-4 of the value."""
    net = ladder(random.Random(3), 5, 1.0)
    for omega in (1.0, 1e4, 1e6):
        size = abs(net.response([omega / (2 * math.pi)], "out")[0])
        assert 0 < bound(net, omega, "out") < 1e-6 * size


def test_bound_grows_with_the_link() -> None:
    """The allowance of a link grows as the great resistors over the small one, as the error does."""
    bounds = [bound(link(r, 1e-3), 1.0, "out") for r in (1e6, 1e8, 1e10)]
    assert bounds[1] / bounds[0] == pytest.approx(100, rel=0.1)
    assert bounds[2] / bounds[1] == pytest.approx(100, rel=0.1)


def test_bound_scales_with_the_drive() -> None:
    """Twice the source, twice the allowance."""
    net = ladder(random.Random(3), 5, 1.0)
    assert bound(net, 1e4, "out", drive=2) == pytest.approx(2 * bound(net, 1e4, "out"), rel=1e-9)


def test_bound_covers_a_perturbed_matrix() -> None:
    """Values moved by a unit in the last place each stay within the allowance."""
    net = mesh(random.Random(5), 9, 6.0)
    rng = random.Random(6)
    exact = net.response([1e4], "out")[0]
    allowed = bound(net, 2e4 * math.pi, "out")
    for _ in range(30):
        shifted = {name: v * (1 + rng.choice((-1, 1)) * 2.0**-52) for name, v in net.values.items()}
        assert abs(net.with_values(shifted).response([1e4], "out")[0] - exact) <= allowed


@pytest.mark.parametrize("nodes", [40, 220])
def test_dense_and_sparse_give_the_same_bound(nodes: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """A large network's bound is computed another way; it is the same bound."""
    from rcnet.compare import allowance

    net = ladder(random.Random(7), nodes, 2.0)
    omegas = (10.0, 1e5)
    first = [bound(net, omega, "out") for omega in omegas]
    monkeypatch.setattr(allowance, "DENSE_LIMIT", 1 if nodes == 40 else 10_000)
    assert [bound(net, omega, "out") for omega in omegas] == pytest.approx(first, rel=1e-6)


def test_many_points_keep_the_bound() -> None:
    """With more points than are bounded one by one, each has at least the bound it would have alone."""
    net = twin_t(1e4, 1.5e-8)
    sources = np.zeros(len(net), dtype=np.complex128)
    sources[net.part_index("V1")] = 1
    row = [net.node_index("out") - 1]
    s = 2j * math.pi * np.geomspace(1, 1e6, 5000)
    whole = rounding_allowance(net, s, sources, row)[0]
    alone = np.array([rounding_allowance(net, s[k : k + 1], sources, row)[0, 0] for k in range(0, 5000, 97)])
    assert (whole[::97] >= alone * (1 - 1e-9)).all()
    assert (whole[::97] <= 5 * alone).all()


def test_link_too_small_for_doubles() -> None:
    """Where a simulator's matrix is singular once rounded, no value can be told: the allowance has no end."""
    try:
        found = bound(link(1e19, 1e-3), 1e-9, "out")
    except UnsolvableError:
        pytest.fail("an exact answer exists and must be found")
    assert found > 0.5
