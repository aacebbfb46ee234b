"""Building a network, looking at it, and taking changed copies of it."""

from __future__ import annotations

import pickle
from collections.abc import Callable

import networkx
import numpy as np
import pytest

from rcnet.circuit import Network, Part, Sine, Source, Square, Step
from rcnet.errors import CircuitError, RcnetError
from rcnet.values import Tolerance


def pump_filter() -> Network:
    """A network with one part of every kind."""
    network = Network("Pump station: current sense filter")
    network.add_voltage_source("Vin", "in", "0", ac=1, dc=2.5)
    network.add_resistor("R1", "in", "a", "4k7", tolerance="1%", rating="0.1W", tempco="100ppm")
    network.add_capacitor("C1", "a", "0", 10e-9, tolerance=0.05)
    network.add_inductor("L1", "a", "b", "10 mH")
    network.add_voltage_controlled_voltage_source("E1", "e", "0", "a", "b", 2)
    network.add_voltage_controlled_current_source("G1", "b", "0", "a", "0", "1 mS")
    network.add_voltage_source("Vs", "b", "c")
    network.add_current_controlled_current_source("F1", "e", "0", "Vs", 0.5)
    network.add_current_controlled_voltage_source("H1", "h", "0", "Vs", "1 kohm")
    network.add_current_source("I1", "0", "c", dc="1 mA")
    network.add_resistor("R2", "c", "0", 1e3)
    return network


# ---------------------------------------------------------------------- building and looking


def test_every_part_is_kept_as_given() -> None:
    """Values in base units, options read, nodes in the order of the call."""
    parts = {part.name: part for part in pump_filter().parts}
    assert parts["R1"] == Part("R1", "R", ("in", "a"), 4700.0, None, Tolerance(-0.01, 0.01), (0.1, "W"), 1e-4)
    assert parts["C1"] == Part("C1", "C", ("a", "0"), 1e-8, None, Tolerance(-0.05, 0.05))
    assert parts["L1"] == Part("L1", "L", ("a", "b"), 0.01)
    assert parts["E1"] == Part("E1", "E", ("e", "0", "a", "b"), 2.0)
    assert parts["G1"] == Part("G1", "G", ("b", "0", "a", "0"), 1e-3)
    assert parts["F1"] == Part("F1", "F", ("e", "0"), 0.5, "Vs")
    assert parts["H1"] == Part("H1", "H", ("h", "0"), 1e3, "Vs")
    assert parts["Vin"] == Part("Vin", "V", ("in", "0"), 2.5)
    assert parts["I1"] == Part("I1", "I", ("0", "c"), 1e-3)
    assert list(parts) == ["Vin", "R1", "C1", "L1", "E1", "G1", "Vs", "F1", "H1", "I1", "R2"]


def test_nodes_stand_ground_first_then_in_order_of_mention() -> None:
    """The row order of every array."""
    network = pump_filter()
    assert network.nodes == ("0", "in", "a", "b", "e", "c", "h")
    assert [network.node_index(node) for node in network.nodes] == list(range(7))
    assert network.has_node("h")
    assert not network.has_node("x")


def test_arrays_hold_the_network() -> None:
    """One row a part: letter, node indices with -1 where there are none, value; all read-only."""
    network = pump_filter()
    arrays = network.arrays()
    assert bytes(arrays.kinds).decode() == "VRCLEGVFHIR"
    assert arrays.node_count == 7
    assert arrays.nodes[network.part_index("E1")].tolist() == [4, 0, 2, 3]
    assert arrays.nodes[network.part_index("R2")].tolist() == [5, 0, -1, -1]
    assert arrays.values.tolist() == [2.5, 4700.0, 1e-8, 0.01, 2.0, 1e-3, 0.0, 0.5, 1e3, 1e-3, 1e3]
    for column in (arrays.kinds, arrays.nodes, arrays.values):
        with pytest.raises(ValueError, match="read-only"):
            column[0] = 1


def test_values_are_those_of_parts_not_of_sources() -> None:
    """By name, in base units."""
    values = pump_filter().values
    assert values["R1"] == 4700.0
    assert set(values) == {"R1", "C1", "L1", "E1", "G1", "F1", "H1", "R2"}


def test_len_and_in_count_parts() -> None:
    """Sources included."""
    network = pump_filter()
    assert len(network) == 11
    assert "R1" in network
    assert "R9" not in network
    assert 5 not in network


def test_the_sensed_source_is_found() -> None:
    """The row of the source that an F senses; a source added later counts."""
    network = Network()
    network.add_current_controlled_current_source("F1", "a", "0", "Vlate", 1)
    with pytest.raises(CircuitError, match="'Vlate', which is no voltage source here"):
        network.sensed_by(0)
    network.add_voltage_source("Vlate", "a", "0")
    assert network.sensed_by(0) == 1


def test_the_graph_is_a_multigraph_of_nets() -> None:
    """Nodes are net names, edges parts keyed by name with kind, value, and what controls them."""
    network = pump_filter()
    network.add_resistor("R3", "c", "0", 2e3)
    graph = network.graph
    assert isinstance(graph, networkx.MultiGraph)
    assert set(graph.nodes) == set(network.nodes)
    assert graph.number_of_edges() == len(network)
    assert graph.edges["in", "a", "R1"] == {"kind": "R", "value": 4700.0}
    assert set(graph["c"]["0"]) == {"I1", "R2", "R3"}
    assert graph.edges["e", "0", "E1"] == {"kind": "E", "value": 2.0, "control": ("a", "b")}
    assert graph.edges["h", "0", "H1"] == {"kind": "H", "value": 1e3, "senses": "Vs"}
    graph.remove_node("a")
    assert "R1" in network, "the graph is a copy"


def test_letters_of_names_may_be_small() -> None:
    """A part's kind is its first letter in either case; names stay as written."""
    network = Network()
    network.add_resistor("rload", "a", "0", 1)
    network.add_voltage_source("vin", "a", "0", ac=1)
    assert [(part.name, part.kind) for part in network.parts] == [("rload", "R"), ("vin", "V")]


# ---------------------------------------------------------------------- ladders


def test_a_ladder_names_its_inner_nodes_after_its_end() -> None:
    """`out_1`, `out_2`, ... from the start on; a shunt stands where the path has got to."""
    network = Network()
    network.add_ladder(
        "in",
        "out",
        ["shunt C0 1n", "series R1 1k", "series R2 2k", "shunt C1 1n", "shunt R9 1M", "series L3 1m"],
    )
    assert [(part.name, part.nodes) for part in network.parts] == [
        ("C0", ("in", "0")),
        ("R1", ("in", "out_1")),
        ("R2", ("out_1", "out_2")),
        ("C1", ("out_2", "0")),
        ("R9", ("out_2", "0")),
        ("L3", ("out_2", "out")),
    ]


def test_a_ladder_takes_no_name_that_is_taken() -> None:
    """A node called `out_1` already there is passed over."""
    network = Network()
    network.add_resistor("R0", "out_1", "0", 1)
    network.add_ladder("in", "out", ["series R1 1k", "series R2 1k"])
    assert network.part("R1").nodes == ("in", "out_2")


def test_ladder_parts_changes_nothing() -> None:
    """The parts are shown, not added."""
    network = Network()
    parts = network.ladder_parts("in", "out", ["series R1 1k", "shunt C1 4n7 5%"])
    assert [part.name for part in parts] == ["R1", "C1"]
    assert len(network) == 0
    assert network.nodes == ("0",)


# ---------------------------------------------------------------------- what is refused


def ladder_of(*sections: str) -> Callable[[Network], object]:
    """A call that adds a ladder of these sections."""
    return lambda n: n.add_ladder("a", "b", sections)


REFUSED: dict[str, tuple[Callable[[Network], object], str]] = {
    "name of another kind": (lambda n: n.add_resistor("C9", "a", "0", 1), "resistor is called 'C9'"),
    "source of another kind": (
        lambda n: n.add_voltage_source("I9", "a", "0"),
        "voltage source is called 'I9'",
    ),
    "empty name": (lambda n: n.add_resistor("", "a", "0", 1), "part name is empty"),
    "name that is no text": (lambda n: n.add_resistor(5, "a", "0", 1), "part name 5 is not text"),
    "blank in a name": (lambda n: n.add_resistor("R 1", "a", "0", 1), "'R 1' holds a blank"),
    "line break in a name": (lambda n: n.add_resistor("R\n1", "a", "0", 1), "control character"),
    "long name": (lambda n: n.add_resistor("R" * 201, "a", "0", 1), "201 characters"),
    "name twice": (lambda n: n.add_resistor("R1", "a", "0", 1), "two parts called 'R1'"),
    "gnd": (lambda n: n.add_resistor("R9", "a", "gnd", 1), "'gnd' means ground"),
    "GND": (lambda n: n.add_voltage_source("V9", "a", "GND"), "'GND' means ground"),
    "node that is no text": (lambda n: n.add_resistor("R9", "a", 0, 1), "node name 0 is not text"),
    "empty node": (lambda n: n.add_resistor("R9", "", "0", 1), "node name is empty"),
    "blank in a node": (lambda n: n.add_resistor("R9", "a b", "0", 1), "'a b' holds a blank"),
    "zero ohms": (lambda n: n.add_resistor("R9", "a", "0", 0), "needs a positive one"),
    "negative farads": (lambda n: n.add_capacitor("C9", "a", "0", -1e-9), "needs a positive one"),
    "endless henries": (lambda n: n.add_inductor("L9", "a", "0", float("inf")), "inf"),
    "not a number": (lambda n: n.add_resistor("R9", "a", "0", float("nan")), "nan"),
    "value in another unit": (lambda n: n.add_resistor("R9", "a", "0", "1 nF"), "'1 nF' is in F"),
    "value of another type": (lambda n: n.add_resistor("R9", "a", "0", None), "None"),
    "unknown option": (lambda n: n.add_resistor("R9", "a", "0", 1, tollerance=0.1), "'tollerance'"),
    "tolerance of all": (lambda n: n.add_resistor("R9", "a", "0", 1, tolerance=1.5), "1.5"),
    "F senses nothing": (
        lambda n: n.add_current_controlled_current_source("F9", "a", "0", "", 1),
        "no voltage source",
    ),
    "unknown key of a source": (lambda n: n.add_voltage_source("V9", "a", "0", acc=1), "unknown key 'acc'"),
    "two waveforms": (
        lambda n: n.add_voltage_source(
            "V9", "a", "0", step={"from": 0, "to": 1}, sine={"amplitude": 1, "frequency": 1}
        ),
        "two waveforms",
    ),
    "waveform twice": (
        lambda n: n.add_voltage_source("V9", "a", "0", step={"from": 0, "to": 1}, waveform=Step(0, 1)),
        "two waveforms",
    ),
    "waveform of another type": (lambda n: n.add_voltage_source("V9", "a", "0", waveform=3), "waveform is 3"),
    "endless ac": (lambda n: n.add_voltage_source("V9", "a", "0", ac=float("inf")), "ac is inf"),
    "source among parts": (lambda n: n.add_part(Part("V9", "V", ("a", "0"), 1.0)), "V9 is a source"),
    "part among sources": (lambda n: n.add_source(Source("R9", ("a", "0"))), "'R9'"),
    "part of no kind": (
        lambda n: n.add_part(Part("Q9", "Q", ("a", "0"), 1.0)),
        "'Q9' begins with no known kind",
    ),
    "part with three nodes": (lambda n: n.add_part(Part("R9", "R", ("a", "b", "0"), 1.0)), "3 nodes"),
    "no such part": (lambda n: n.part("R9"), "no part called 'R9'"),
    "no such row": (lambda n: n.part_index("R9"), "no part called 'R9'"),
    "no such node": (lambda n: n.node_index("x"), "no node called 'x'"),
    "other value of no part": (lambda n: n.with_values({"R9": 1}), "no part called 'R9'"),
    "other value of a source": (lambda n: n.with_values({"Vin": 1}), "Vin is a source"),
    "other value of zero": (lambda n: n.with_values({"R1": 0}), "R1 has the value 0.0"),
    "other value in words": (lambda n: n.with_values({"R1": "blue"}), "'blue'"),
    "other source of no name": (lambda n: n.with_source(Source("V9", ("in", "0"))), "no source called 'V9'"),
    "other source elsewhere": (lambda n: n.with_source(Source("Vin", ("a", "0"))), "other nodes"),
    "ladder of shunts": (ladder_of("shunt C9 1n"), "no series part"),
    "ladder of nothing": (ladder_of(), "no series part"),
    "section of two words": (ladder_of("series R9"), "'series R9' cannot be read"),
    "section of another word": (ladder_of("parallel R9 1k"), "'parallel R9 1k' cannot be read"),
    "section with a source": (ladder_of("series V9 1"), "no R, C or L"),
    "section that is no text": (lambda n: n.add_ladder("a", "b", [5]), "5 cannot be read"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_wrong_call_is_a_sentence_and_changes_nothing(name: str) -> None:
    """An RcnetError that names the offending value and the remedy; the network stays as it was."""
    call, words = REFUSED[name]
    network = pump_filter()
    before = (network.nodes, tuple(network.parts))
    with pytest.raises(RcnetError) as caught:
        call(network)
    assert words in caught.value.message
    assert caught.value.remedy
    assert (network.nodes, tuple(network.parts)) == before


# ---------------------------------------------------------------------- sources


def test_a_source_carries_any_of_ac_dc_and_a_waveform() -> None:
    """Keys as in the circuit file, text or numbers, or a waveform object."""
    network = Network()
    network.add_voltage_source("V1", "a", "0", ac="2 V", ac_phase=90)
    network.add_voltage_source("V2", "b", "0", sine={"amplitude": "1 V", "frequency": "1 kHz"})
    network.add_current_source("I1", "0", "a", waveform=Step(0.0, 1e-3))
    network.add_voltage_source("V3", "c", "0", square={"low": 1, "high": 5, "frequency": 50}, dc=2)
    assert network.sources["V1"] == Source("V1", ("a", "0"), ac=2.0, ac_phase=90.0)
    assert network.sources["V2"].waveform == Sine(1.0, 1000.0)
    assert network.sources["I1"].waveform == Step(0.0, 1e-3)
    assert network.sources["V3"].waveform == Square(1.0, 5.0, 0.02, 0.01)


@pytest.mark.parametrize(
    ("source", "value"),
    [
        (Source("V1", ("a", "0")), 0.0),
        (Source("V1", ("a", "0"), ac=1), 0.0),
        (Source("V1", ("a", "0"), dc=3.0), 3.0),
        (Source("V1", ("a", "0"), dc=3.0, waveform=Step(7.0, 8.0)), 3.0),
        (Source("V1", ("a", "0"), waveform=Step(7.0, 8.0)), 7.0),
        (Source("V1", ("a", "0"), waveform=Sine(2.0, 50.0, 1.0, 90.0)), 3.0),
    ],
)
def test_dc_governs_the_operating_point_else_the_waveforms_start(source: Source, value: float) -> None:
    """Interface, section 3: dc, else the waveform at t = 0, else nothing."""
    assert source.operating_value == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize(
    ("phase", "expected"),
    [
        (0, 2),
        (90, 2j),
        (180, -2),
        (-90, -2j),
        (450, 2j),
        (45, complex(2**0.5, 2**0.5)),
        (-30, complex(3**0.5, -1)),
    ],
)
def test_a_phasor_turns_by_the_phase(phase: float, expected: complex) -> None:
    """Magnitude times exp(j phase), quarter turns exactly."""
    phasor = Source("V1", ("a", "0"), ac=2, ac_phase=phase).phasor
    assert phasor == pytest.approx(expected, rel=1e-15)
    if phase % 90 == 0:
        assert phasor == expected


# ---------------------------------------------------------------------- copies


def test_a_copy_with_other_values_leaves_the_network_alone() -> None:
    """Text or numbers; tolerances, sources and the order of everything stay."""
    network = pump_filter()
    before = tuple(network.parts)
    other = network.with_values({"R1": "5.1k", "C1": 2e-8, "E1": -3})
    assert tuple(network.parts) == before
    assert (other.values["R1"], other.values["C1"], other.values["E1"]) == (5100.0, 2e-8, -3.0)
    assert other.part("R1").tolerance == Tolerance(-0.01, 0.01)
    assert (other.nodes, other.names, other.title) == (network.nodes, network.names, network.title)
    assert other.sources == network.sources
    other.add_resistor("R9", "new", "0", 1)
    assert "R9" not in network
    assert not network.has_node("new")


def test_a_copy_with_another_source_leaves_the_network_alone() -> None:
    """The source's new value counts in the copy's arrays only."""
    network = pump_filter()
    other = network.with_source(Source("Vin", ("in", "0"), dc=9.0))
    row = network.part_index("Vin")
    assert (network.arrays().values[row], other.arrays().values[row]) == (2.5, 9.0)
    assert (network.sources["Vin"].ac, other.sources["Vin"].ac) == (1.0, None)


def test_arrays_follow_what_is_added() -> None:
    """Arrays taken before a part was added stay as they were; new ones have it."""
    network = pump_filter()
    before = network.arrays()
    assert network.arrays() is before
    network.add_resistor("R9", "x", "0", 5)
    assert len(before.values) == 11
    assert network.arrays().values[-1] == 5
    assert network.arrays().node_count == before.node_count + 1


def test_the_sources_handed_out_are_no_way_in() -> None:
    """Changing the mapping changes nothing."""
    network = pump_filter()
    sources = network.sources
    assert isinstance(sources, dict)
    sources.clear()
    assert set(network.sources) == {"Vin", "Vs", "I1"}


def test_a_network_crosses_process_borders() -> None:
    """Pickled and back, it is the same network and gives the same response."""
    network = Network("t")
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", "1k", tolerance="1%")
    network.add_capacitor("C1", "out", "0", "1u")
    expected = network.response([1.0, 1e3], "out")
    other = pickle.loads(pickle.dumps(network))
    assert tuple(other.parts) == tuple(network.parts)
    assert (other.response([1.0, 1e3], "out") == expected).all()
    assert np.abs(expected - 1 / (1 + 2j * np.pi * np.array([1.0, 1e3]) * 1e-3)).max() < 1e-15


def test_a_networks_methods_are_the_rooms_functions() -> None:
    """`operating_point` and `response` work on the network itself."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", dc=3, ac=1)
    network.add_resistor("R1", "in", "out", "2k")
    network.add_resistor("R2", "out", "0", "1k")
    assert network.operating_point() == pytest.approx({"in": 3.0, "out": 1.0})
    assert network.response(50, ["in", "out"]) == pytest.approx(np.array([[1], [1 / 3]]))
