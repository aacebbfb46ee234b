"""Natural modes against closed forms, against 60-digit eigenproblems, and against the exact response."""

from __future__ import annotations

import math
import random

import mna_reference as reference
import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from time_reference import DIGITS, ModalReference

from rcnet.circuit import Network
from rcnet.errors import CircuitError, UndecidedError
from rcnet.exact import modal_system, modes, natural_frequencies, natural_rates, response
from rcnet.exact.modes import FULL_NODES

R, C = 2e3, 5e-9
RC = R * C


def ladder(sections: int) -> Network:
    """Equal sections of series R and shunt C."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1)
    for k in range(sections):
        network.add_resistor(f"R{k}", f"n{k}", f"n{k + 1}", R)
        network.add_capacitor(f"C{k}", f"n{k + 1}", "0", C)
    return network


def buffered(sections: int) -> Network:
    """Equal sections of series R and shunt C with ideal buffers between them: one pole, as often as
    sections.
    """
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    here = "in"
    for k in range(sections):
        network.add_resistor(f"R{k}", here, f"a{k}", R)
        network.add_capacitor(f"C{k}", f"a{k}", "0", C)
        network.add_voltage_controlled_voltage_source(f"E{k}", f"b{k}", "0", f"a{k}", "0", 1.0)
        here = f"b{k}"
    return network


@pytest.mark.parametrize("sections", [1, 2, 3, 6, 10, 40])
def test_uniform_ladder_has_its_closed_form_poles(sections: int) -> None:
    """s_k RC = -4 sin^2(phi_k / 2), phi_k = (2k - 1) pi / (2n + 1) (A. Morgan-Voyce 1959)."""
    found = modes(ladder(sections), f"n{sections}")
    phi = (2 * np.arange(1, sections + 1) - 1) * math.pi / (2 * sections + 1)
    assert np.allclose(found.poles * RC, -4 * np.sin(phi / 2) ** 2, rtol=1e-14, atol=0)
    assert found.direct == 0.0
    # v(t) = 1 - sum (-1)^(k+1) 2 cos^2(phi/2) / ((2n+1) sin(phi/2)) exp(s t), so each weight is residue /
    # -pole.
    weights = (
        2 * np.cos(phi / 2) ** 2 / ((2 * sections + 1) * np.sin(phi / 2)) * (-1.0) ** np.arange(sections)
    )
    assert np.allclose(found.residues / -found.poles, weights, rtol=1e-12, atol=1e-15)


@pytest.mark.parametrize("decades", [4, 12, 18])
@pytest.mark.parametrize("kind", ["tree", "mesh"])
def test_poles_and_residues_keep_their_digits_over_many_decades(kind: str, decades: int) -> None:
    """Poles to 1e-14 of themselves, weights to 1e-12 of the source, beside 60-digit eigenproblems."""
    make = reference.random_tree if kind == "tree" else reference.random_mesh
    for seed in range(4):
        network = make(random.Random(f"modes {kind} {decades} {seed}"), 7, decades)
        exact = ModalReference(network)
        order = sorted(range(7), key=lambda k: exact.rates[k])
        for node in ("n2", "n7"):
            found = modes(network, node)
            expected = exact.residues(node)
            with mpmath.workdps(DIGITS):
                for k, which in enumerate(order):
                    rate = exact.rates[which]
                    assert abs(mpmath.mpf(float(found.poles[k])) / -rate - 1) < 1e-14
                    assert abs((mpmath.mpf(float(found.residues[k])) - expected[which]) / rate) < 1e-12
            assert found.direct == pytest.approx(float(exact.direct[exact.row[node]]), rel=1e-12, abs=1e-30)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.integers(0, 10**9), st.sampled_from(["ladder", "tree", "mesh"]), st.integers(0, 14))
def test_rc_poles_are_real_negative_and_rebuild_the_response(seed: int, kind: str, decades: int) -> None:
    """Poles of R and C are real and not positive, and the modes sum to the exact response."""
    make = {"ladder": reference.random_ladder, "tree": reference.random_tree, "mesh": reference.random_mesh}[
        kind
    ]
    rng = random.Random(seed)
    network = make(rng, rng.randint(1, 12), decades)
    node = network.nodes[-1]
    if decades > 8:  # far end of a long attenuator: nothing arrives that could be compared
        node = "n1"
    found = modes(network, node)
    assert found.poles.dtype == np.float64
    assert (found.poles <= 0).all()
    assert (np.diff(found.poles) <= 0).all()
    points = np.array(reference.frequencies(rng, decades, 12))
    exact = response(network, points, node)
    error = np.abs(found.response(2j * math.pi * points) - exact).max()
    assert error <= 1e-10 * max(np.abs(exact).max(), abs(found.direct))


def test_nodes_without_capacitance_act_at_once() -> None:
    """A divider in front of one capacitor leaves one mode: R_par C, and a direct share at the divider."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", 3e3)
    network.add_resistor("R2", "a", "0", 6e3)
    network.add_resistor("R3", "a", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    found = modes(network, "a")
    assert found.poles == pytest.approx([-1 / (3e3 * 1e-6)], rel=1e-14)  # (3k parallel 6k) + 1k
    assert found.direct == pytest.approx(
        (6 / 7) / (3 + 6 / 7), rel=1e-14
    )  # out held: 6k parallel 1k below 3k
    assert float(np.real(found.response(0j))) == pytest.approx(6 / 9, rel=1e-14)


def test_charge_that_nothing_drains_is_a_pole_at_exactly_zero() -> None:
    """Two capacitors in series leave a node that floats at dc: rates 0 and 1 / (R C1 C2 / (C1 + C2))."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_capacitor("C1", "in", "a", 1e-6)
    network.add_capacitor("C2", "a", "b", 3e-6)
    network.add_resistor("R1", "b", "0", 1e3)
    found = modes(network, "b")
    assert found.poles[0] == 0.0
    assert found.residues[0] == 0.0
    assert found.poles[1] == pytest.approx(-1 / (1e3 * 0.75e-6), rel=1e-14)
    assert found.direct == pytest.approx(1.0, rel=1e-14)


def test_a_current_into_a_floating_node_integrates() -> None:
    """A current source into a capacitor that nothing drains: H = 1 / (s C), a pole at zero with
    residue 1/C.
    """
    network = Network()
    network.add_current_source("I1", "0", "a", ac=1)
    network.add_capacitor("C1", "a", "0", 2e-6)
    network.add_resistor("R1", "a", "b", 1e3)
    network.add_capacitor("C2", "b", "0", 1e-6)
    found = modes(network, "a", "I1")
    assert found.poles[0] == 0.0
    assert found.residues[0] == pytest.approx(1 / 3e-6, rel=1e-13)


@pytest.mark.parametrize("sections", [2, 4, 7])
def test_equal_buffered_sections_are_followed_though_their_pole_is_multiple(sections: int) -> None:
    """H = 1 / (1 + s RC)^n has no residues to list, yet the expansion is right everywhere."""
    network = buffered(sections)
    with pytest.raises(UndecidedError, match="lie together"):
        modes(network, f"b{sections - 1}")
    system = modal_system(network, [(network.node_index(f"b{sections - 1}"), 0)], ["V1"])
    s = np.concatenate([1j * np.geomspace(1e-2, 1e2, 9) / RC, np.array([0.3 + 2j, 5.0]) / RC])
    assert np.allclose(system.at(s)[0, 0], 1 / (1 + s * RC) ** sections, rtol=0, atol=1e-12)
    assert natural_rates(network) * RC == pytest.approx([-1.0] * sections, rel=1e-11)


def test_a_resonance_has_its_pair_of_poles() -> None:
    """R L C in series: s^2 LC + s RC + 1 = 0."""
    r, inductance, c = 10.0, 1e-3, 1e-6
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", r)
    network.add_inductor("L1", "a", "out", inductance)
    network.add_capacitor("C1", "out", "0", c)
    found = modes(network, "out")
    damping = r / (2 * inductance)
    swing = math.sqrt(1 / (inductance * c) - damping**2)
    assert found.poles == pytest.approx([-damping - 1j * swing, -damping + 1j * swing], rel=1e-12)
    residue = 1 / (inductance * c) / (2j * swing)
    assert found.residues == pytest.approx([-residue, residue], rel=1e-9)


@pytest.mark.parametrize("seed", range(4))
def test_general_networks_rebuild_their_response(seed: int) -> None:
    """Trees with a controlled source and an inductor: the modes sum to the exact response."""
    rng = random.Random(f"general {seed}")
    network = reference.random_tree(rng, 6, 4)
    network.add_voltage_controlled_current_source("G1", "n3", "0", "n5", "n1", 1e-4)
    network.add_voltage_controlled_voltage_source("E1", "e", "0", "n6", "0", -2.0)
    network.add_resistor("Re", "e", "n2", 5e3)
    network.add_inductor("L1", "n4", "0", 1e-4)
    found = modes(network, "n6")
    points = np.array(reference.frequencies(rng, 4, 20))
    exact = response(network, points, "n6")
    assert np.abs(found.response(2j * math.pi * points) - exact).max() <= 1e-10 * np.abs(exact).max()


def test_a_large_network_gets_a_small_model_of_full_accuracy() -> None:
    """Beyond the size of a full eigenproblem fewer modes give the same response, here to 1e-12."""
    rng = random.Random("large")
    network = reference.random_tree(rng, 2 * FULL_NODES, 4)
    system = modal_system(network, [(network.node_index("n20"), 0)], ["V1"])
    assert len(system.poles) < FULL_NODES
    assert (system.poles < 0).all()
    points = np.geomspace(1e2, 1e10, 60)
    exact = response(network, points, "n20")
    assert np.abs(system.at(2j * math.pi * points)[0, 0] - exact).max() <= 1e-12 * np.abs(exact).max()


def test_a_uniform_line_of_many_sections_matches_its_closed_form() -> None:
    """600 equal sections: H = cosh(t/2) / cosh((n + 1/2) t), cosh t = 1 + s RC / 2, through the
    small model.
    """
    n = 2 * FULL_NODES
    network = ladder(n)
    system = modal_system(network, [(network.node_index(f"n{n}"), 0)], ["V1"])
    s = 1j * np.geomspace(1e-3, 3e2, 25) / (n * n * RC)
    t = np.arccosh(1 + s * RC / 2)
    assert np.allclose(system.at(s)[0, 0], np.cosh(t / 2) / np.cosh((n + 0.5) * t), rtol=0, atol=1e-11)


def test_sources_and_nodes_are_named_in_errors() -> None:
    """Unknown names, no source to refer to, too many of them."""
    network = ladder(2)
    with pytest.raises(CircuitError, match="'nowhere'"):
        modes(network, "nowhere")
    with pytest.raises(CircuitError, match="'V9'"):
        modes(network, "n1", "V9")
    silent = Network()
    silent.add_voltage_source("V1", "a", "0", dc=1)
    silent.add_resistor("R1", "a", "b", 1.0)
    silent.add_capacitor("C1", "b", "0", 1.0)
    with pytest.raises(CircuitError, match="no source carries"):
        silent.modes("b")
    assert silent.modes("b", "V1").poles == pytest.approx([-1.0])


@pytest.mark.parametrize(
    ("ohm", "farad", "poles"),
    [
        (1e300, 1e-300, [-1.0]),
        (1e-300, 1e300, [-1.0]),
        (1.0, 1e-300, [-1e300]),
        (1e-308, 1e300, []),  # the conductance, 1e308 S, and what it is added to are beyond a double
    ],
    ids=["great R", "great C", "fast", "beyond"],
)
def test_natural_frequencies_of_values_near_the_ends_of_doubles(
    ohm: float, farad: float, poles: list[float]
) -> None:
    """One R and one C give -1/RC; a value no double holds is left out, without a warning."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", ohm)
    network.add_capacitor("C1", "out", "0", farad)
    assert natural_frequencies(network).real == pytest.approx(poles, rel=1e-8)
