"""Transfer functions in part names beside textbook forms, sympy's determinants, tree counts, numbers."""

from __future__ import annotations

import itertools
import math
import random
import time

import mna_reference as reference
import networkx
import numpy as np
import pytest
import sympy
from shared_networks import NETWORKS, driven, twin_t

from rcnet.circuit import KINDS, Network, Part
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import limit, response, transfer_function
from rcnet.exact.multilinear import determinant, factors, product
from rcnet.exact.symbols import MOST_PARTS

S = sympy.Symbol("s")
UNIT = 1.0


def ladder(sections: int) -> Network:
    """Equal sections of series R, shunt C."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1)
    sections_text = [f"{kind}{k} 1" for k in range(1, sections + 1) for kind in ("series R", "shunt C")]
    network.add_ladder("in", "out", sections_text)
    return network


def expression(text: str) -> sympy.Expr:
    """A formula in part names, as a textbook prints it."""
    names = {f"{kind}{k}" for kind in "RCLEGFH" for k in range(10)}
    symbols = {
        n: sympy.Symbol(n, positive=True) if n[0] in "RCL" else sympy.Symbol(n, real=True) for n in names
    }
    return sympy.sympify(text, locals={**symbols, "s": S, "S": None, "E1": symbols["E1"]})


def current_driven(*parts: tuple[str, str, str, float]) -> Network:
    """Passive parts driven by 1 A into `out`."""
    network = driven(*parts)
    rebuilt = Network()
    rebuilt.add_current_source("Iin", "0", "out", ac=1)
    for part in network.parts:
        if part.kind != "V":
            rebuilt.add_part(part)
    return rebuilt


# Network, pretty text, and the transfer function as textbooks give it (voltage dividers by Kirchhoff's laws).
TEXTBOOK = {
    "low-pass": (
        driven(("R1", "in", "out", 1), ("C1", "out", "0", 1)),
        "(1) / (1 + s*C1*R1)",
        "1/(1 + s*C1*R1)",
    ),
    "high-pass": (
        driven(("C1", "in", "out", 1), ("R1", "out", "0", 1)),
        "(s*C1*R1) / (1 + s*C1*R1)",
        "s*C1*R1/(1 + s*C1*R1)",
    ),
    "two sections": (
        ladder(2),
        "(1) / (1 + s*(C1*R1 + C2*R1 + C2*R2) + s^2*C1*C2*R1*R2)",
        "1/(1 + s*(C1*R1 + C2*R1 + C2*R2) + s**2*C1*C2*R1*R2)",
    ),
    "Wien": (
        NETWORKS["band-pass"](),
        "(s*C1*R2) / (1 + s*(C1*R1 + C1*R2 + C2*R2) + s^2*C1*C2*R1*R2)",
        "s*C1*R2/(1 + s*(C1*R1 + C2*R2 + C1*R2) + s**2*C1*C2*R1*R2)",
    ),
    "lead": (
        driven(("R1", "in", "out", 1), ("C1", "in", "out", 1), ("R2", "out", "0", 1)),
        "(R2 + s*C1*R1*R2) / (R1 + R2 + s*C1*R1*R2)",
        "R2*(1 + s*C1*R1)/(R1 + R2 + s*C1*R1*R2)",
    ),
    "lag": (
        driven(("R1", "in", "out", 1), ("R2", "out", "a", 1), ("C2", "a", "0", 1)),
        "(1 + s*C2*R2) / (1 + s*C2*(R1 + R2))",
        "(1 + s*C2*R2)/(1 + s*C2*(R1 + R2))",
    ),
    "compensated divider": (
        driven(("R1", "in", "out", 1), ("C1", "in", "out", 1), ("R2", "out", "0", 1), ("C2", "out", "0", 1)),
        "(R2 + s*C1*R1*R2) / (R1 + R2 + s*R1*R2*(C1 + C2))",
        "R2*(1 + s*C1*R1)/(R1 + R2 + s*(C1 + C2)*R1*R2)",
    ),
    "capacitive divider": (
        driven(("C1", "in", "out", 1), ("C2", "out", "0", 1)),
        "(C1) / (C1 + C2)",
        "C1/(C1 + C2)",
    ),
    "series resonance": (
        driven(("R1", "in", "a", 1), ("L1", "a", "out", 1), ("C1", "out", "0", 1)),
        "(1) / (1 + s*C1*R1 + s^2*C1*L1)",
        "1/(1 + s*C1*R1 + s**2*L1*C1)",
    ),
    "inductive": (
        driven(("R1", "in", "out", 1), ("L1", "out", "0", 1)),
        "(s*L1/R1) / (1 + s*L1/R1)",
        "s*L1/(R1 + s*L1)",
    ),
    "impedance": (
        current_driven(("R1", "out", "0", 1), ("C1", "out", "0", 1)),
        "(R1) / (1 + s*C1*R1)",
        "R1/(1 + s*C1*R1)",
    ),
    "bridged T": (
        driven(("C1", "in", "a", 1), ("C2", "a", "out", 1), ("R2", "a", "0", 1), ("R1", "in", "out", 1)),
        "(1 + s*R2*(C1 + C2) + s^2*C1*C2*R1*R2) / (1 + s*(C1*R2 + C2*R1 + C2*R2) + s^2*C1*C2*R1*R2)",
        "(1 + s*R2*(C1 + C2) + s**2*C1*C2*R1*R2)/(1 + s*(C1*R2 + C2*R1 + C2*R2) + s**2*C1*C2*R1*R2)",
    ),
    "parts that do nothing": (
        driven(
            ("R9", "in", "0", 1),
            ("R1", "in", "out", 1),
            ("C1", "out", "0", 1),
            ("R8", "in", "b", 1),
            ("C8", "b", "0", 1),
        ),
        "(1) / (1 + s*C1*R1)",
        "1/(1 + s*C1*R1)",
    ),
    "nothing arrives": (driven(("R1", "in", "0", 1), ("R2", "out", "0", 1)), "(0) / (1)", "0"),
}


@pytest.mark.parametrize("name", TEXTBOOK)
def test_the_form_is_the_one_engineers_write(name: str) -> None:
    """Common factors cancelled, the lowest coefficient below 1 where it is a single product."""
    network, text, formula = TEXTBOOK[name]
    found = transfer_function(network, "out")
    assert str(found) == text
    assert sympy.simplify(found.to_sympy() - expression(formula)) == 0


def test_any_twin_t_has_the_null_of_its_parts() -> None:
    """The general twin-T's numerator, and with equal parts (1 + x^2)/(1 + 4x + x^2)."""
    found = transfer_function(twin_t(), "out")
    assert [str(coefficient) for coefficient in found.numerator] == [
        "1",
        "R3*(C1 + C2)",
        "C1*C2*R3*(R1 + R2)",
        "C1*C2*C3*R1*R2*R3",
    ]
    equal = {"R1": 1.0, "R2": 1.0, "R3": 0.5, "C1": 1.0, "C2": 1.0, "C3": 2.0}
    x = np.array([0.3j, 1j, 2.5j, 0.7 + 0.2j])
    np.testing.assert_allclose(
        found.evaluate(x, equal), (1 + x**2) / (1 + 4 * x + x**2), rtol=1e-13, atol=1e-15
    )


@pytest.mark.parametrize("sections", range(1, 9))
def test_the_uniform_ladder_counts_binomials_and_fibonacci_numbers(sections: int) -> None:
    """Morgan-Voyce: coefficient k of b_n has binom(n + k, 2k) products; b_n(1) = F(2n + 1) spanning trees."""
    found = transfer_function(ladder(sections), "out")
    counts = [sum(term.count for term in coefficient.terms) for coefficient in found.denominator]
    assert counts == [math.comb(sections + k, 2 * k) for k in range(sections + 1)]
    assert [str(coefficient) for coefficient in found.numerator] == ["1"]
    fibonacci = [0, 1]
    while len(fibonacci) <= 2 * sections + 1:
        fibonacci.append(fibonacci[-1] + fibonacci[-2])
    assert sum(counts) == fibonacci[2 * sections + 1]


@pytest.mark.parametrize("seed", range(8))
def test_the_denominator_has_a_product_for_each_spanning_tree(seed: int) -> None:
    """Kirchhoff (1847): an input resistance has as many products as networkx counts trees."""
    rng = random.Random(f"trees {seed}")
    graph = networkx.MultiGraph(networkx.gnm_random_graph(6, 10, seed=rng.randrange(1000)))
    graph.add_edges_from(zip(range(5), range(1, 6), strict=True))
    network = Network()
    network.add_current_source("Iin", "0", "n1", ac=1)
    for k, (a, b) in enumerate(graph.edges()):
        network.add_resistor(f"R{k}", f"n{a}" if a else "0", f"n{b}" if b else "0", 1.0 + k)
    found = transfer_function(network, "n1")
    # Bridges and the like cancel between numerator and denominator; the plain determinant counts them all.
    rows = [[] for _ in range(5)]
    for k, (a, b) in enumerate(graph.edges()):
        for row, column, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
            if row and column:
                rows[row - 1].append((column - 1, 1 << k, sign))
    trees = determinant(rows, 10**6)
    assert set(trees.values()) == {1}
    assert len(trees) == round(networkx.number_of_spanning_trees(graph))
    expected = complex(response(network, [0.0], "n1")[0])
    assert complex(found.evaluate([0.0])[0]) == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("seed", range(10))
def test_determinants_of_small_networks_are_sympys(seed: int) -> None:
    """The whole ratio beside Cramer's rule on sympy's own nodal matrix."""
    rng = random.Random(f"sympy {seed}")
    network = Network()
    network.add_current_source("Iin", "0", "n1", ac=1)
    nodes = 3
    across = [rng.sample(range(nodes + 1), 2) for _ in range(3)]
    for parts, (a, b) in enumerate([*itertools.pairwise(range(nodes + 1)), *across], 1):
        kind = rng.choice("RCL")
        network.add_part(Part(f"{kind}{parts}", kind, (f"n{a}" if a else "0", f"n{b}" if b else "0"), UNIT))
    network.add_voltage_controlled_current_source("G1", "n2", "0", "n1", "n3", 0.1)
    matrix = sympy.zeros(nodes, nodes)
    for part in network.parts:
        if part.kind == "I":
            continue
        ends = [network.node_index(node) - 1 for node in part.nodes]
        symbol = (
            sympy.Symbol(part.name, positive=True) if part.kind != "G" else sympy.Symbol(part.name, real=True)
        )
        y = {"R": 1 / symbol, "C": S * symbol, "L": 1 / (S * symbol), "G": symbol}[part.kind]
        columns = ends[2:] if part.kind == "G" else ends
        for (row, sign), (column, other) in itertools.product(
            zip(ends[:2], (1, -1), strict=True), zip(columns, (1, -1), strict=True)
        ):
            if row >= 0 and column >= 0:
                matrix[row, column] += sign * other * y
    right = sympy.zeros(nodes, 1)
    right[network.node_index("n1") - 1] = 1
    place = network.node_index("n3") - 1
    replaced = matrix.copy()
    replaced[:, place] = right
    expected = replaced.det(method="berkowitz") / matrix.det(method="berkowitz")
    assert sympy.simplify(transfer_function(network, "n3").to_sympy() - expected) == 0


@pytest.mark.parametrize("name", NETWORKS)
def test_it_evaluates_to_the_exact_response(name: str) -> None:
    """The same numbers as nodal analysis, within 1e-10, at other values too, and for pairs of nodes."""
    network = NETWORKS[name]()
    frequencies = np.geomspace(10, 1e8, 25)
    s = 2j * math.pi * frequencies
    for of in ("out", f"out {network.nodes[3]}"):
        exact = response(network, frequencies, of)
        error = np.abs(transfer_function(network, of).evaluate(s) - exact)
        assert (error <= 1e-10 * np.abs(exact) + 1e-14 * np.abs(exact).max()).all()
    rng = random.Random(name)
    values = {part: value * rng.uniform(0.5, 2) for part, value in network.values.items()}
    exact = response(network.with_values(values), frequencies, "out")
    np.testing.assert_allclose(transfer_function(network, "out").evaluate(s, values), exact, rtol=1e-10)


@pytest.mark.parametrize("seed", range(12))
def test_random_networks_of_twelve_parts_of_every_kind_take_well_under_seconds(seed: int) -> None:
    """Twelve parts at random between six nodes, each kind among them, evaluated beside nodal analysis."""
    rng = random.Random(f"twelve {seed}")
    network = Network()
    network.add_voltage_source("Vin", "n1", "0", ac=1)
    network.add_voltage_source("Vs", "n2", "m")
    names = ["0", *(f"n{k}" for k in range(1, 7))]
    scale = {"R": 1e3, "C": 1e-9, "L": 1e-3, "G": 1e-4, "F": 0.3, "H": 200.0, "E": 0.4}
    network.add_resistor("R0", "m", "n3", 1e3)
    for k, (a, b) in enumerate(itertools.pairwise(names), 1):
        if k > 1:
            network.add_resistor(f"R{k}", a, b, 1e3 * rng.uniform(0.5, 2))
    for kind in "CCLGFH":
        parts = len(network)
        nodes = tuple(rng.sample(names, KINDS[kind].nodes))
        if kind == "H":
            nodes = ("h", nodes[0])
            network.add_resistor("Rh", "h", nodes[1] if nodes[1] != "0" else "n4", 2e3)
        network.add_part(
            Part(
                f"{kind}{parts}",
                kind,
                nodes,
                scale[kind] * rng.uniform(0.5, 2),
                "Vs" if kind in "FH" else None,
            )
        )
    begun = time.perf_counter()
    found = transfer_function(network, "n6")
    text = str(found)
    assert time.perf_counter() - begun < 5
    assert "nan" not in text
    frequencies = np.geomspace(1e3, 1e7, 9)
    exact = response(network, frequencies, "n6")
    error = np.abs(found.evaluate(2j * math.pi * frequencies) - exact)
    assert (error <= 1e-10 * np.abs(exact).max()).all()


def test_the_largest_network_taken_takes_seconds() -> None:
    """Ten sections of ladder, 10 946 products, and a mesh as dense as the limit allows."""
    begun = time.perf_counter()
    assert sum(len(c.terms) for c in transfer_function(ladder(10), "out").denominator) == 10946
    network = Network()
    network.add_voltage_source("Vin", "n0", "0", ac=1)
    names = ["0", *(f"n{k}" for k in range(6))]
    edges = [pair for pair in itertools.combinations(names, 2) if pair != ("0", "n0")]
    for k, (a, b) in enumerate(edges[:MOST_PARTS]):
        network.add_part(Part(f"{'RC'[k % 2]}{k}", "RC"[k % 2], (a, b), 1.0))
    found = transfer_function(network, "n5")
    assert time.perf_counter() - begun < 30
    exact = response(network, [0.1], "n5")
    np.testing.assert_allclose(found.evaluate([0.2j * math.pi]), exact, rtol=1e-10)


def test_values_at_the_ends_of_what_a_double_holds_neither_overflow_nor_vanish() -> None:
    """Products of ten capacitors of 1e-40 F lie far below the least double; the ratio does not."""
    network = ladder(10).with_values(
        {f"C{k}": 1e-40 for k in range(1, 11)} | {f"R{k}": 1e30 for k in range(1, 11)}
    )
    found = transfer_function(network, "out")
    s = np.array([0.0, 1e8j, 1e10j, 1e12j])
    np.testing.assert_allclose(
        found.evaluate(s), response(network, s.imag / (2 * math.pi), "out"), rtol=1e-10
    )
    assert found.evaluate([0.0])[0] == limit(network, (network.node_index("out"), 0), high=False)


def test_factors_multiply_back_and_share_no_symbol() -> None:
    """(a b + c)(d - e) f times 6, taken apart and put together."""
    a, b, c, d, e, f = (1 << k for k in range(6))
    pieces = [{a | b: 1, c: 1}, {d: 1, e: -1}, {f: 1}]
    whole, found = factors(product(6, pieces))
    assert len(found) == 3
    assert product(whole, found) == product(6, pieces)
    assert factors({}) == (0, [])
    assert factors({0: -4}) == (-4, [])


def two_sources() -> Network:
    """Two sources with ac."""
    network = ladder(1)
    network.add_current_source("I2", "0", "out", ac=1)
    return network


def self_controlled() -> Network:
    """Two nodes that only the difference of their own voltages drives: nothing fixes their sum."""
    network = driven(("R1", "in", "0", 1.0))
    network.add_voltage_controlled_current_source("G1", "a", "0", "a", "b", 1.0)
    network.add_voltage_controlled_current_source("G2", "b", "0", "a", "b", 2.0)
    return network


REFUSED = {
    "too many parts": (
        lambda: transfer_function(ladder(11), "out"),
        UndecidedError,
        f"22 parts.*{MOST_PARTS}",
    ),
    "two sources": (lambda: transfer_function(two_sources(), "out"), CircuitError, "2 sources carry ac"),
    "no source": (
        lambda: transfer_function(
            ladder(1).with_source(ladder(1).sources["Vin"].__class__("Vin", ("in", "0"))), "out"
        ),
        CircuitError,
        "0 sources carry ac",
    ),
    "unknown node": (lambda: transfer_function(ladder(1), "nowhere"), CircuitError, "nowhere"),
    "floating": (
        lambda: transfer_function(driven(("R1", "in", "0", 1.0), ("R2", "p", "q", 1.0)), "p"),
        UnsolvableError,
        "connection",
    ),
    "never a solution": (
        lambda: transfer_function(self_controlled(), "b"),
        UnsolvableError,
        "no unique solution",
    ),
    "unknown value": (
        lambda: transfer_function(ladder(1), "out").evaluate([1j], {"R9": 1.0}),
        CircuitError,
        "R9",
    ),
    "value of text": (
        lambda: transfer_function(ladder(1), "out").evaluate([1j], {"R1": "1k"}),  # type: ignore[dict-item]
        CircuitError,
        "R1",
    ),
    "at a pole": (lambda: transfer_function(ladder(1), "out").evaluate([-1.0]), UnsolvableError, "pole"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_has_no_transfer_function_is_refused(case: str) -> None:
    """With the reason, and the limit where one is exceeded."""
    call, kind, says = REFUSED[case]
    with pytest.raises(kind, match=says):
        call()


def test_products_beyond_the_limit_are_refused_on_the_way() -> None:
    """The limit holds for what is held in between, not only for the end."""
    rows = [[(column, 1 << (8 * row + column), 1) for column in range(8)] for row in range(8)]
    with pytest.raises(UndecidedError, match="1000 products"):
        determinant(rows, 1000)


def test_random_ladders_evaluate_over_many_decades() -> None:
    """Values over six decades: no cancellation in sums of positive products."""
    rng = random.Random("wide")
    network = reference.random_ladder(rng, 5, 6)
    frequencies = np.array(sorted(reference.frequencies(rng, 6, 20)))
    exact = response(network, frequencies, "n5")
    np.testing.assert_allclose(
        transfer_function(network, "n5").evaluate(2j * math.pi * frequencies), exact, rtol=1e-10
    )
