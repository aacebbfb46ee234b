"""How many digits are right: random networks of every kind against mpmath at 50 digits.

Ladders and trees are right in every component whatever the spread of values (W. Grassmann, M. Taksar, D.
Heyman, Oper. Res. 33(5):1107-1116, 1985); meshes and general networks relative to the greatest voltage (N.
Higham, Math. Comp. 67(224):1591-1599, 1998).
"""

from __future__ import annotations

import random

import mna_reference as reference
import mpmath
import numpy as np
import pytest

from rcnet.circuit import Network
from rcnet.exact import (
    ac_drive,
    input_impedance,
    limit,
    operating_point,
    output_impedance,
    response,
    response_and_slope,
    solver_for,
    source_currents,
)


def inner(network: Network) -> list[str]:
    """Every node but ground."""
    return [name for name in network.nodes if name != "0"]


def expected_at(network: Network, frequency: float, **drive: float) -> dict[str, mpmath.mpc]:
    """The reference's voltages at a frequency."""
    return reference.solve(network, reference.at(frequency), drive or {"V1": 1})


# ---------------------------------------------------------------------- ladders and trees: every component


@pytest.mark.parametrize("decades", [0, 6, 12, 18])
@pytest.mark.parametrize("sections", [2, 3, 5, 9, 17, 40])
def test_every_voltage_of_a_ladder_has_twelve_digits(sections: int, decades: int) -> None:
    """Random ladders, values spread over so many decades: 1e-12 in every modulus, stopband included."""
    rng = random.Random(f"ladder {sections} {decades}")
    for _ in range(2):
        network = reference.random_ladder(rng, sections, decades)
        frequency = reference.frequencies(rng, decades, 2)
        got = response(network, frequency, inner(network))
        for column, point in enumerate(frequency):
            expected = expected_at(network, point)
            for row, node in enumerate(inner(network)):
                assert reference.relative_error(got[row, column], expected[node]) <= 1e-12


@pytest.mark.parametrize("decades", [0, 6, 12, 18])
@pytest.mark.parametrize("nodes", [2, 4, 8, 16, 40])
def test_every_voltage_of_a_tree_has_twelve_digits(nodes: int, decades: int) -> None:
    """Random RC trees, values spread over so many decades: 1e-12 in every node's modulus."""
    rng = random.Random(f"tree {nodes} {decades}")
    for _ in range(2):
        network = reference.random_tree(rng, nodes, decades)
        frequency = reference.frequencies(rng, decades, 2)
        got = response(network, frequency, inner(network))
        for column, point in enumerate(frequency):
            expected = expected_at(network, point)
            for row, node in enumerate(inner(network)):
                assert reference.relative_error(got[row, column], expected[node]) <= 1e-12


@pytest.mark.parametrize("decades", [0, 12, 18])
def test_a_ladder_driven_by_a_current_source_has_twelve_digits(decades: int) -> None:
    """A current source in place of the voltage source: at the near end, in the middle, across a section."""
    rng = random.Random(f"current {decades}")
    for a, b in (("0", "n0"), ("n4", "0"), ("n2", "n3")):
        ladder = reference.random_ladder(rng, 8, decades)
        network = Network()
        for part in ladder.parts:
            if part.kind != "V":
                network.add_part(part)
        network.add_resistor("Rsource", "n0", "0", 1e3 * reference.spread(rng, decades))
        network.add_current_source("I1", a, b, ac=1)
        for point in reference.frequencies(rng, decades, 3):
            expected = expected_at(network, point, I1=1)
            got = response(network, [point], inner(network))[:, 0]
            if a == "n2":  # two currents of opposite sign meet: digits are those of the greatest voltage
                wanted = [expected[node] for node in inner(network)]
                assert reference.error_against_largest(got, wanted) <= 1e-12
            else:
                for value, node in zip(got, inner(network), strict=True):
                    assert reference.relative_error(value, expected[node]) <= 1e-12


def test_the_deep_stopband_keeps_its_digits() -> None:
    """Forty equal sections a thousand times above their corner: some 2000 dB down, still twelve digits."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1)
    for k in range(1, 41):
        network.add_resistor(f"R{k}", f"n{k - 1}", f"n{k}", 1e3)
        network.add_capacitor(f"C{k}", f"n{k}", "0", 1e-9)
    got = response(network, [1e8], "n40")[0]
    expected = expected_at(network, 1e8)["n40"]
    assert abs(expected) < 1e-90
    assert reference.relative_error(got, expected) <= 1e-12


# ---------------------------------------------------------------------- meshes: against the greatest voltage


@pytest.mark.parametrize(("decades", "allowed"), [(0, 1e-13), (4, 1e-12), (12, 1e-9)])
def test_a_mesh_is_right_against_its_greatest_voltage(decades: int, allowed: float) -> None:
    """Random general RC graphs: the error over the greatest node voltage."""
    rng = random.Random(f"mesh {decades}")
    for nodes in (2, 3, 5, 8, 12, 16):
        for _ in range(2):
            network = reference.random_mesh(rng, nodes, decades)
            for point in reference.frequencies(rng, decades, 2):
                got = response(network, [point], inner(network))[:, 0]
                expected = expected_at(network, point)
                wanted = [expected[node] for node in inner(network)]
                assert reference.error_against_largest(got, wanted) <= allowed


# ---------------------------------------------------------------------- the operating point


@pytest.mark.parametrize("nodes", [3, 10, 30, 40])
def test_the_operating_point_of_a_tree_has_thirteen_digits_everywhere(nodes: int) -> None:
    """Resistor trees with values over 18 decades: 1e-13 in every component."""
    rng = random.Random(f"dc {nodes}")
    for _ in range(3):
        network = reference.random_tree(rng, nodes, 18, dc=True)
        expected = reference.solve(network, 0, {"V1": 1})
        for node, volts in operating_point(network).items():
            assert reference.relative_error(volts, expected[node]) <= 1e-13


@pytest.mark.parametrize("drive", ["V", "I"])
def test_the_chain_that_defeats_plain_elimination_is_exact(drive: str) -> None:
    """Thirty links of 1 S, 1e-14 S from each node to ground (condition number 2e16): 1e-13 everywhere."""
    network = Network()
    if drive == "V":
        network.add_voltage_source("V1", "n0", "0", dc=1)
    else:
        network.add_current_source("I1", "0", "n0", dc=1)
    for k in range(1, 31):
        network.add_resistor(f"R{k}", f"n{k - 1}", f"n{k}", 1.0)
        network.add_resistor(f"Rp{k}", f"n{k}", "0", 1e14)
    expected = reference.solve(network, 0, {f"{drive}1": 1})
    for node, volts in operating_point(network).items():
        assert reference.relative_error(volts, expected[node]) <= 1e-13


def test_source_currents_in_the_operating_point_are_right() -> None:
    """A source's current is its tree's conductance times its voltage, to thirteen digits over 18 decades."""
    rng = random.Random("currents")
    for _ in range(5):
        network = reference.random_tree(rng, 12, 18, dc=True)
        expected = reference.solve(network, 0, {"V1": 1})
        with mpmath.workdps(reference.DIGITS):
            leaving = mpmath.mpf(0)
            for part in network.parts:
                if part.kind == "R" and "n0" in part.nodes:
                    other = part.nodes[part.nodes.index("n0") - 1]
                    leaving += (1 - expected[other]) / mpmath.mpf(part.value)
            # Current that leaves n0 enters the source at its second terminal: SPICE shows it negative.
            assert reference.relative_error(source_currents(network)["V1"], -leaving) <= 1e-13


def test_source_currents_count_what_current_sources_bring() -> None:
    """1 mA between two equal resistors returns half each way; 2 mA on the source's own node through it."""
    network = Network()
    network.add_voltage_source("V1", "a", "0", dc=0)
    network.add_resistor("R1", "a", "b", 1e3)
    network.add_resistor("R2", "b", "0", 1e3)
    network.add_current_source("I1", "0", "b", dc=1e-3)
    network.add_current_source("I2", "0", "a", dc=2e-3)
    assert source_currents(network) == pytest.approx({"V1": 2.5e-3}, rel=1e-14)


# ---------------------------------------------------------------------- sources on top of sources


def test_sources_on_top_of_sources_are_right() -> None:
    """V2 stands on V1, V3 hangs below ground, and each feeds an RC network: twelve digits at every node."""
    rng = random.Random("floating")
    for _ in range(8):
        network = Network()
        network.add_voltage_source("V1", "a", "0", dc=2.0)
        network.add_voltage_source("V2", "b", "a", ac=1, dc=3.0)
        network.add_voltage_source("V3", "0", "c", dc=1.5)
        for k, (one, other) in enumerate(
            [("a", "x"), ("b", "x"), ("x", "y"), ("c", "y"), ("y", "0"), ("a", "y")]
        ):
            network.add_resistor(f"R{k}", one, other, 1e3 * reference.spread(rng, 4))
        network.add_capacitor("C1", "x", "0", 1e-9 * reference.spread(rng, 4))
        network.add_capacitor("C2", "y", "b", 1e-9 * reference.spread(rng, 4))
        for point in reference.frequencies(rng, 4, 3):
            expected = expected_at(network, point, V2=1)
            got = response(network, [point], inner(network))[:, 0]
            assert reference.error_against_largest(got, [expected[node] for node in inner(network)]) <= 1e-12
        settled = reference.solve(network, 0, {"V1": 2.0, "V2": 3.0, "V3": 1.5})
        volts = operating_point(network)
        wanted = [settled[node] for node in inner(network)]
        assert reference.error_against_largest([volts[node] for node in inner(network)], wanted) <= 1e-12


def test_a_source_that_floats_in_the_network_is_right() -> None:
    """A voltage source between two nodes that only resistors and capacitors hold, over twelve decades."""
    rng = random.Random("ammeter")
    for _ in range(12):
        network = reference.random_mesh(rng, 5, 12)
        network.add_voltage_source("V2", "n3", "m", dc=0)
        network.add_resistor("Rm", "m", "n1", 1e3 * reference.spread(rng, 12))
        network.add_capacitor("Cm", "m", "0", 1e-9 * reference.spread(rng, 12))
        for point in reference.frequencies(rng, 12, 2):
            expected = expected_at(network, point)
            got = response(network, [point], inner(network))[:, 0]
            assert reference.error_against_largest(got, [expected[node] for node in inner(network)]) <= 1e-12


# ---------------------------------------------------------------------- buffers and controlled sources


def buffered_cascade(rng: random.Random, stages: int, decades: float) -> Network:
    """RC sections with an E source of random gain between."""
    network = Network()
    network.add_voltage_source("V1", "b0", "0", ac=1)
    for k in range(1, stages + 1):
        network.add_resistor(f"R{k}", f"b{k - 1}", f"a{k}", 1e3 * reference.spread(rng, decades))
        network.add_capacitor(f"C{k}", f"a{k}", "0", 1e-9 * reference.spread(rng, decades))
        network.add_voltage_controlled_voltage_source(
            f"E{k}", f"b{k}", "0", f"a{k}", "0", rng.choice([1, -2.5, 1e3])
        )
    return network


@pytest.mark.parametrize("decades", [0, 4, 12])
@pytest.mark.parametrize("stages", [1, 3, 8])
def test_a_buffered_cascade_has_twelve_digits_everywhere(stages: int, decades: int) -> None:
    """Buffers without feedback: 1e-12 in every node's modulus."""
    rng = random.Random(f"cascade {stages} {decades}")
    for _ in range(3):
        network = buffered_cascade(rng, stages, decades)
        for point in reference.frequencies(rng, decades, 2):
            expected = expected_at(network, point)
            got = response(network, [point], inner(network))[:, 0]
            for value, node in zip(got, inner(network), strict=True):
                assert reference.relative_error(value, expected[node]) <= 1e-12


@pytest.mark.parametrize("gain", [0.5, 1.0, 1.586, 2.9, -10.0])
def test_feedback_through_buffers_is_right(gain: float) -> None:
    """A second-order section with feedback around its gain stage, and a second stage that feeds back too."""
    rng = random.Random(f"feedback {gain}")
    for _ in range(6):
        network = Network()
        network.add_voltage_source("V1", "in", "0", ac=1)
        for k, (a, b) in enumerate([("in", "x"), ("x", "y"), ("o", "z"), ("z", "x")]):
            network.add_resistor(f"R{k}", a, b, 1e3 * reference.spread(rng, 2))
        for k, (a, b) in enumerate([("x", "o"), ("y", "0"), ("z", "0"), ("p", "x")]):
            network.add_capacitor(f"C{k}", a, b, 1e-9 * reference.spread(rng, 2))
        network.add_voltage_controlled_voltage_source("E1", "o", "0", "y", "0", gain)
        network.add_voltage_controlled_voltage_source("E2", "p", "o", "z", "y", 0.3)
        for point in reference.frequencies(rng, 2, 3):
            expected = expected_at(network, point)
            got = response(network, [point], inner(network))[:, 0]
            assert reference.error_against_largest(got, [expected[node] for node in inner(network)]) <= 1e-11


def random_active(rng: random.Random, kinds: str) -> Network:
    """A small RC mesh of one order of magnitude with one part of each of `kinds` in it."""
    network = reference.random_mesh(rng, rng.randint(3, 6), 1)
    network.add_voltage_source("Vs", "n2", "s", dc=0)
    network.add_resistor("Rs", "s", "n1", 1e3)
    others = ["n0", "n1", "n2", "n3", "s", "0"]

    def two() -> list[str]:
        return rng.sample(others, 2)

    for kind in kinds:
        if kind == "E":
            network.add_voltage_controlled_voltage_source("E1", "e", two()[0], *two(), rng.uniform(-1, 1))
            network.add_resistor("Re", "e", "n3", 1e3)
        elif kind == "G":
            network.add_voltage_controlled_current_source("G1", *two(), *two(), 1e-4 * rng.uniform(-1, 1))
        elif kind == "F":
            network.add_current_controlled_current_source("F1", *two(), "Vs", rng.uniform(-0.5, 0.5))
        elif kind == "H":
            network.add_current_controlled_voltage_source("H1", "h", two()[0], "Vs", 300 * rng.uniform(-1, 1))
            network.add_resistor("Rh", "h", "n1", 1e3)
        else:
            network.add_inductor("L1", *two(), 1e-3)
    return network


@pytest.mark.parametrize("kinds", ["E", "G", "F", "H", "L", "EG", "FH", "GL", "EGFHL"])
def test_every_kind_of_part_is_right(kinds: str) -> None:
    """Random well-scaled networks with controlled sources and inductors: 1e-12 of the greatest voltage."""
    rng = random.Random(f"active {kinds}")
    for _ in range(8):
        network = random_active(rng, kinds)
        frequency = reference.frequencies(rng, 1, 2)
        got = response(network, frequency, inner(network))
        for column, point in enumerate(frequency):
            expected = expected_at(network, point)
            wanted = [expected[node] for node in inner(network)]
            assert reference.error_against_largest(got[:, column], wanted) <= 1e-12


@pytest.mark.parametrize("decades", [6, 12])
def test_general_networks_keep_their_digits_over_decades(decades: int) -> None:
    """A current-sensing source, a transconductance and an inductor in a mesh of widely spread values."""
    rng = random.Random(f"spread {decades}")
    for _ in range(8):
        network = reference.random_mesh(rng, 5, decades)
        network.add_voltage_source("Vs", "n2", "s", dc=0)
        network.add_resistor("Rs", "s", "n1", 1e3 * reference.spread(rng, decades))
        network.add_voltage_controlled_current_source(
            "G1", "n3", "0", "n3", "n1", 1e-3 * reference.spread(rng, decades)
        )
        network.add_inductor("L1", "n4", "s", 1e-3 * reference.spread(rng, decades))
        for point in reference.frequencies(rng, decades, 2):
            expected = expected_at(network, point)
            got = response(network, [point], inner(network))[:, 0]
            assert reference.error_against_largest(got, [expected[node] for node in inner(network)]) <= 1e-12


def test_a_large_network_with_an_inductor_is_right() -> None:
    """A hundred nodes go through the sparse factorisation: twelve digits of the greatest voltage."""
    rng = random.Random("sparse")
    network = reference.random_tree(rng, 100, 2)
    network.add_inductor("L1", "n50", "n90", 1e-3)
    network.add_voltage_controlled_current_source("G1", "n30", "0", "n70", "n10", 1e-5)
    point = 1e5
    expected = expected_at(network, point)
    got = response(network, [point], inner(network))[:, 0]
    assert reference.error_against_largest(got, [expected[node] for node in inner(network)]) <= 1e-12


# ---------------------------------------------------------------------- limits, derivatives, ports


@pytest.mark.parametrize("extra", ["", "L", "V", "G"])
def test_limits_beside_general_parts_are_right(extra: str) -> None:
    """Nodes that capacitors alone hold: the limits are capacitive and resistive dividers."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "b", 3e-9)
    network.add_resistor("R2", "b", "c", 2e3)
    network.add_capacitor("C2", "c", "0", 1e-9)
    network.add_resistor("R3", "a", "0", 1e3)
    if extra == "L":
        network.add_inductor("L1", "in", "l", 1e-3)
        network.add_resistor("Rl", "l", "0", 50.0)
    elif extra == "V":
        network.add_voltage_source("V2", "in", "m", dc=0)
        network.add_resistor("Rm", "m", "a", 1e9)
    elif extra == "G":
        network.add_voltage_controlled_current_source("G1", "g", "0", "in", "0", 1e-3)
        network.add_resistor("Rg", "g", "0", 1e3)
    half = 0.5 if extra != "V" else (1e-3 + 1e-9) / (2e-3 + 1e-9)
    for node, low in (("a", half), ("b", 0.75 * half), ("c", 0.75 * half)):
        assert limit(network, (network.node_index(node), 0), high=False) == pytest.approx(low, rel=1e-13)
        assert response(network, [0.0], node)[0] == pytest.approx(low, rel=1e-13)
    for node, conductance in (("a", 2e-3), ("b", 2e-3)):
        # At infinity C1 is a short and C2 grounds c: R1 against R3 beside R2.
        expected = (1e-3 + (1e-9 if extra == "V" else 0)) / (
            conductance + 0.5e-3 + (1e-9 if extra == "V" else 0)
        )
        assert limit(network, (network.node_index(node), 0), high=True) == pytest.approx(expected, rel=1e-13)
    assert limit(network, (network.node_index("c"), 0), high=True) == 0.0


def test_the_slope_is_the_derivative() -> None:
    """The slope dH/ds against the reference's derivative: RC networks, active ones, ones with an inductor."""
    rng = random.Random("slope")
    cases = [
        reference.random_ladder(rng, 4, 4),
        reference.random_mesh(rng, 4, 2),
        buffered_cascade(rng, 2, 1),
    ]
    cases += [random_active(rng, "G"), random_active(rng, "L"), random_active(rng, "EGFHL")]
    for network in cases:
        node = inner(network)[-1]
        of = (network.node_index(node), 0)
        for point in reference.frequencies(rng, 1, 2):
            got, slope = response_and_slope(network, np.array([2 * np.pi * point]), of)
            with mpmath.workdps(reference.DIGITS):
                s = mpmath.mpc(0, mpmath.mpf(2 * np.pi * point))
                step = abs(s) * mpmath.mpf("1e-12")
                above = reference.solve(network, s + step, {"V1": 1})[node]
                below = reference.solve(network, s - step, {"V1": 1})[node]
                derivative = (above - below) / (2 * step)  # off by 1e-24 of the third derivative
                expected = reference.solve(network, s, {"V1": 1})[node]
            assert reference.relative_error(got[0], expected) <= 1e-12
            assert reference.relative_error(slope[0], derivative) <= 1e-11


def test_port_impedances_are_right() -> None:
    """Input and output impedance of random networks against voltages and currents of the reference."""
    rng = random.Random("ports")
    for network in [reference.random_mesh(rng, 5, 4) for _ in range(4)] + [random_active(rng, "GL")]:
        point = reference.frequencies(rng, 2, 1)[0]
        omega = np.array([2 * np.pi * point])
        with mpmath.workdps(reference.DIGITS):
            s = mpmath.mpc(0, mpmath.mpf(omega[0]))
            driven = Network()
            for part in network.parts:
                if part.name != "V1":
                    driven.add_source(network.sources[part.name]) if part.kind == "V" else driven.add_part(
                        part
                    )
            driven.add_current_source("I1", "0", "n0", ac=1)
            seen = reference.solve(driven, s, {"I1": 1})["n0"]
            network.add_current_source("I2", "0", "n2")
            out = reference.solve(network, s, {"I2": 1})["n2"]
        assert reference.relative_error(input_impedance(network, omega)[0], seen) <= 1e-11
        of = (network.node_index("n2"), 0)
        assert reference.relative_error(output_impedance(network, omega, of)[0], out) <= 1e-12
        assert reference.relative_error(input_impedance(driven, omega)[0], seen) <= 1e-11


# ---------------------------------------------------------------------- the residual, free of scale


def test_every_solution_has_a_residual_of_rounding_size() -> None:
    """Kirchhoff's current law at every inner node: what is left over, against the currents there."""
    rng = random.Random("residual")
    cases = [reference.random_tree(rng, 60, 12), reference.random_mesh(rng, 30, 8), random_active(rng, "G")]
    for network in cases:
        for point in reference.frequencies(rng, 4, 3):
            s = 2j * np.pi * point
            v = solver_for(network).solve(np.array([s]), ac_drive(network)).voltages[:, 0]
            left, size = np.zeros(len(v), complex), np.zeros(len(v))
            for part in network.parts:
                a, b = (network.node_index(node) for node in part.nodes[:2])
                if part.kind == "G":
                    c, d = (network.node_index(node) for node in part.nodes[2:])
                    currents = part.value * v[c], part.value * v[d]
                elif part.kind in "RC":
                    y = 1 / part.value if part.kind == "R" else s * part.value
                    currents = y * v[a], y * v[b]
                else:
                    size[[a, b]] = np.inf  # a source's nodes carry its unknown current
                    continue
                for node, sign in ((a, 1), (b, -1)):
                    left[node] += sign * (currents[0] - currents[1])
                    size[node] += abs(currents[0]) + abs(currents[1])
            assert (np.abs(left[1:]) <= 1e-13 * size[1:]).all()
