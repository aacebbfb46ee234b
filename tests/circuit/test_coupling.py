"""Couplings of inductors in the network, in the circuit file, and as questions to the graph."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from rcnet.circuit import KINDS, Network, Part, explain, parse_circuit_file, troubles
from rcnet.circuit.coupling import MOST_COUPLED, contradictory_couplings, coupled_groups
from rcnet.circuit.ladder import parse_part
from rcnet.errors import CircuitError, QuantityError

FILE = "leak-listener.rc.toml"


def transformer(coefficient: str | float = 0.98) -> Network:
    """A leak listener's isolation transformer; the coupling stands before its inductors."""
    net = Network("Leak listener: isolation transformer")
    net.add_voltage_source("Vpipe", "in", "0", ac=1)
    net.add_coupling("K1", "Lpipe", "Llog", coefficient)
    net.add_resistor("R1", "in", "p", 50)
    net.add_inductor("Lpipe", "p", "0", "1 mH")
    net.add_inductor("Llog", "s", "0", "4 mH")
    net.add_resistor("R2", "s", "0", 600)
    return net


def windings(coefficients: dict[str, float]) -> Network:
    """Equal inductors with couplings `{"12": 0.9}` between them, each loaded with a resistor."""
    net = Network()
    for name in sorted({digit for pair in coefficients for digit in pair}):
        net.add_inductor(f"L{name}", f"n{name}", "0", "1 mH")
        net.add_resistor(f"R{name}", f"n{name}", "0", 100)
    net.add_current_source("I1", "0", "n1", ac=1)
    for pair, coefficient in coefficients.items():
        net.add_coupling(f"K{pair}", f"L{pair[0]}", f"L{pair[1]}", coefficient)
    return net


def test_a_coupling_is_kept_as_given() -> None:
    """A K is a part without nodes, with two inductors and a coefficient, in any order with them."""
    net = transformer("0.98")

    assert net.part("K1") == Part("K1", "K", (), 0.98, couples=("Lpipe", "Llog"))
    assert net.values["K1"] == 0.98
    row = net.part_index("K1")
    assert net.couplings == (row,)
    assert net.coupled_by(row) == (net.part_index("Lpipe"), net.part_index("Llog"))
    assert net.arrays().nodes[row].tolist() == [-1] * 4
    assert (KINDS["K"].nodes, KINDS["K"].unit, KINDS["R"].couples) == (0, "1", False)


def test_copies_keep_couplings_and_changed_values_leave_the_network_alone() -> None:
    """`copy`, `with_values` and `add_part` carry the pair; a copy refuses a second K as the network does."""
    net = transformer()
    changed = net.with_values({"K1": "-0.5"})

    assert (changed.part("K1").value, net.part("K1").value) == (-0.5, 0.98)
    assert changed.part("K1").couples == ("Lpipe", "Llog")
    again = Network()
    for part in (part for part in net.parts if part.name not in net.sources):
        again.add_part(part)
    assert [*again.parts] == [part for part in net.parts if part.name not in net.sources]
    with pytest.raises(CircuitError, match="as K1 does already"):
        net.copy().add_coupling("K2", "Llog", "Lpipe", 0.1)


def test_the_graph_has_no_edge_for_a_coupling_but_an_attribute() -> None:
    """A K joins no nodes: it stands in the graph's attribute `couplings`."""
    graph = transformer().graph

    assert graph.graph["couplings"] == {"K1": ("Lpipe", "Llog", 0.98)}
    assert {key for _, _, key in graph.edges(keys=True)} == {"Vpipe", "R1", "Lpipe", "Llog", "R2"}


BOUNDS = {"none": 0.0, "perfect": 1.0, "perfect, reversed": -1.0, "reversed": -0.3}


@pytest.mark.parametrize("coefficient", BOUNDS.values(), ids=BOUNDS.keys())
def test_coefficients_up_to_one_are_accepted(coefficient: float) -> None:
    """From -1 to 1, both included, and zero, which ngspice 39 takes too."""
    assert transformer(coefficient).part("K1").value == coefficient
    assert transformer().with_values({"K1": coefficient}).part("K1").value == coefficient


REFUSED: dict[str, tuple[Callable[[Network], object], str]] = {
    "beyond one": (
        lambda n: n.add_coupling("K2", "La", "Lb", 1.0000001),
        "coefficient 1.0000001",
    ),
    "beyond minus one": (lambda n: n.add_coupling("K2", "La", "Lb", "-1.5"), "share at most all"),
    "changed beyond one": (lambda n: n.with_values({"K1": 1.01}), "K1 has the coefficient 1.01"),
    "not a number": (lambda n: n.add_coupling("K2", "La", "Lb", float("nan")), "nan"),
    "with itself": (lambda n: n.add_coupling("K2", "La", "La", 0.5), "K2 couples 'La' with itself"),
    "a second one": (lambda n: n.add_coupling("K2", "Llog", "Lpipe", 0.1), "as K1 does already"),
    "another first letter": (lambda n: n.add_coupling("M1", "La", "Lb", 0.5), "called 'M1'"),
    "a name twice": (lambda n: n.add_coupling("K1", "La", "Lb", 0.5), "two parts called 'K1'"),
    "no inductors": (lambda n: n.add_part(Part("K2", "K", (), 0.5)), "K2 names 0 inductors"),
    "an empty name": (lambda n: n.add_part(Part("K2", "K", (), 0.5, couples=("La", ""))), "joins two"),
    "nodes": (lambda n: n.add_part(Part("K2", "K", ("a",), 0.5, couples=("La", "Lb"))), "has 1 nodes"),
}


@pytest.mark.parametrize(("attempt", "says"), REFUSED.values(), ids=REFUSED.keys())
def test_what_is_no_coupling_is_refused(attempt: Callable[[Network], object], says: str) -> None:
    """One clear sentence, and nothing is added."""
    net = transformer()
    before = net.names
    with pytest.raises((CircuitError, QuantityError), match=says) as caught:
        attempt(net)
    assert caught.value.remedy
    assert net.names == before


@pytest.mark.parametrize(
    ("second", "says"),
    [("Lnowhere", "'Lnowhere', of which there is none here"), ("R2", "'R2', which is no inductor")],
)
def test_naming_what_is_no_inductor_is_told_when_it_is_asked_for(second: str, says: str) -> None:
    """The inductor may be added later, so that a wrong name shows where the pair is used."""
    net = Network()
    net.add_coupling("K1", "L1", second, 0.5)
    net.add_inductor("L1", "a", "0", 1e-3)
    net.add_resistor("R2", "a", "0", 50)
    with pytest.raises(CircuitError, match=says) as caught:
        net.coupled_by(net.part_index("K1"))
    assert caught.value.remedy == "Inductors here: L1."
    with pytest.raises(CircuitError, match=says):
        coupled_groups(net)


# ---------------------------------------------------------------------- the circuit file

TOML = """
output = "s"
[parts]
K1 = "L1 L2 0.98"
R1 = "in p 50"
L1 = "p 0 1m"
R2 = "s 0 600"
[ladder]
path = "s -> out"
sections = ["shunt L2 4m", "series R3 1k"]
[sources.Vin]
nodes = "in 0"
ac = 1
"""


def test_the_circuit_file_takes_a_coupling_in_any_order() -> None:
    """`K1 = "L1 L2 0.98"` may stand before its inductors, one of which a ladder holds."""
    net = parse_circuit_file(TOML, FILE).network

    assert net.part("K1") == Part("K1", "K", (), 0.98, couples=("L1", "L2"))
    assert net.coupled_by(net.part_index("K1")) == (net.part_index("L1"), net.part_index("L2"))


WRONG_LINES = {
    "too short": ('K1 = "L1 L2"', "too short for a coupling of inductors"),
    "too long": ('K1 = "L1 L2 0.9 5%"', "'5%' means nothing after the value"),
    "no number": ('K1 = "L1 L2 L3"', "K1"),
    "beyond one": ('K1 = "L1 L2 9.8"', "coefficient 9.8"),
    "itself": ('K1 = "L1 L1 0.9"', "couples 'L1' with itself"),
    "unknown": ('K1 = "L1 L7 0.9"', "'L7', of which there is none here"),
    "no inductor": ('K1 = "L1 R2 0.9"', "'R2', which is no inductor"),
    "twice": ('K1 = "L1 L2 0.98"\nK2 = "L2 L1 0.5"', "as K1 does already"),
}


@pytest.mark.parametrize(("line", "says"), WRONG_LINES.values(), ids=WRONG_LINES.keys())
def test_a_wrong_coupling_is_told_with_its_line(line: str, says: str) -> None:
    """One problem, on the coupling's own line, with a remedy."""
    with pytest.raises(CircuitError) as caught:
        parse_circuit_file(TOML.replace('K1 = "L1 L2 0.98"', line), FILE)
    (problem,) = caught.value.problems
    assert says in problem.message
    assert problem.line == (5 if "K2" in line else 4)
    assert problem.remedy


def test_an_inductor_that_cannot_be_read_is_told_once() -> None:
    """The coupling that names it is not complained about as well."""
    with pytest.raises(CircuitError) as caught:
        parse_circuit_file(TOML.replace('L1 = "p 0 1m"', 'L1 = "p 0 -1m"'), FILE)
    assert [problem.line for problem in caught.value.problems] == [6]


def test_a_line_alone_shows_its_pattern() -> None:
    """What is too short is told with how a coupling is written, and K among the known letters."""
    with pytest.raises(CircuitError) as short:
        parse_part("K1", "L1")
    assert short.value.remedy == 'Write K1 = "L1 L2 coefficient".'
    with pytest.raises(CircuitError) as unknown:
        parse_part("Q1", "a b c")
    assert "K" in str(unknown.value.remedy)


# ---------------------------------------------------------------------- groups


def test_groups_are_what_couplings_join() -> None:
    """Inductors joined by way of others stand in one group; the matrix has ones and the coefficients."""
    net = windings({"12": 0.5, "34": -0.25, "23": 0.125, "56": 1.0})
    names = net.names

    groups = {tuple(names[row] for row in group.inductors): group for group in coupled_groups(net)}
    assert {frozenset(group) for group in groups} == {
        frozenset(("L1", "L2", "L3", "L4")),
        frozenset(("L5", "L6")),
    }
    four = groups[next(group for group in groups if len(group) == 4)]
    place = {names[row]: k for k, row in enumerate(four.inductors)}
    expected = np.eye(4)
    for a, b, coefficient in (("L1", "L2", 0.5), ("L3", "L4", -0.25), ("L2", "L3", 0.125)):
        expected[place[a], place[b]] = expected[place[b], place[a]] = coefficient
    assert np.array_equal(four.matrix, expected)
    assert {names[row] for row in four.couplings} == {"K12", "K34", "K23"}


# Three windings can be coupled so unless 1 + 2abc - a^2 - b^2 - c^2, the determinant, is negative.
CONTRADICTORY = {
    "signs": ({"12": 0.9, "23": 0.9, "13": -0.9}, True),
    "missing third": ({"12": 0.9, "23": 0.9}, True),
    "perfect, and not": ({"12": 1.0, "23": 0.5, "13": 0.4}, True),
    "consistent": ({"12": 0.9, "23": 0.9, "13": 0.7}, False),
    "perfect": ({"12": 1.0, "23": -1.0, "13": -1.0}, False),
    "at the edge": ({"12": 0.6, "13": 0.8, "23": 0.0}, False),
    "a pair": ({"12": 1.0}, False),
}


@pytest.mark.parametrize(("coefficients", "wrong"), CONTRADICTORY.values(), ids=CONTRADICTORY.keys())
def test_couplings_no_windings_have_are_a_trouble(coefficients: dict[str, float], wrong: bool) -> None:
    """Three windings and more whose couplings contradict each other are named, others are not."""
    net = windings(coefficients)

    found = [trouble for trouble in troubles(net, dc=False) if trouble.kind == "coupling"]
    assert [set(trouble.parts) for trouble in found] == (
        [{f"K{pair}" for pair in coefficients}] if wrong else []
    )
    for trouble in found:
        assert "contradict each other" in explain(trouble, dc=False)


def test_other_values_may_contradict_where_the_networks_own_do_not() -> None:
    """The couplings of a sample are looked at with its own values."""
    net = windings({"12": 0.9, "23": 0.9, "13": 0.7})
    values = net.arrays().values.copy()
    values[net.part_index("K13")] = -0.7

    assert contradictory_couplings(net) == []
    assert contradictory_couplings(net, values) == [("K12", "K23", "K13")]


def test_a_transformers_secondary_floats_unless_it_is_tied() -> None:
    """A coupling ties no nodes together, as in SPICE."""
    net = Network()
    net.add_voltage_source("V1", "in", "0", ac=1)
    net.add_inductor("L1", "in", "0", 1e-3)
    net.add_inductor("L2", "s", "t", 1e-3)
    net.add_resistor("R1", "s", "t", 50)
    net.add_coupling("K1", "L1", "L2", 0.9)

    (trouble,) = troubles(net, dc=False)
    assert (trouble.kind, trouble.nodes) == ("floating", ("s", "t"))


def test_a_group_beyond_the_limit_is_refused_in_one_sentence() -> None:
    """Too many inductors in one group would need a matrix without bound."""
    net = Network()
    for k in range(MOST_COUPLED + 1):
        net.add_inductor(f"L{k}", f"n{k}", "0", 1e-3)
    for k in range(MOST_COUPLED):
        net.add_coupling(f"K{k}", f"L{k}", f"L{k + 1}", 0.1)
    with pytest.raises(CircuitError, match=f"{MOST_COUPLED + 1} inductors are coupled"):
        coupled_groups(net)
