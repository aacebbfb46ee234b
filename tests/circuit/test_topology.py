"""Questions to the graph, against networkx on random graphs and by hand on small ones."""

from __future__ import annotations

import random
import time

import networkx
import pytest

from rcnet.circuit import Network, explain, floating_nodes, loose_groups, stiff_loops, troubles
from rcnet.circuit.topology import MAX_LOOPS

KINDS = "RCLVIEGFH"


def random_network(rng: random.Random, nodes: int, parts: int) -> Network:
    """Parts of every kind between random nodes, some with both ends on one."""
    network = Network()
    names = ["0", *(f"n{k}" for k in range(nodes))]
    network.add_voltage_source("Vsense", "n0", "0")
    for k in range(parts):
        a, b, c, d = (rng.choice(names) for _ in range(4))
        kind = rng.choice(KINDS)
        name = f"{kind}{k}"
        if kind == "R":
            network.add_resistor(name, a, b, 1)
        elif kind == "C":
            network.add_capacitor(name, a, b, 1)
        elif kind == "L":
            network.add_inductor(name, a, b, 1)
        elif kind == "V":
            network.add_voltage_source(name, a, b)
        elif kind == "I":
            network.add_current_source(name, a, b)
        elif kind == "E":
            network.add_voltage_controlled_voltage_source(name, a, b, c, d, 1)
        elif kind == "G":
            network.add_voltage_controlled_current_source(name, a, b, c, d, 1)
        elif kind == "F":
            network.add_current_controlled_current_source(name, a, b, "Vsense", 1)
        else:
            network.add_current_controlled_voltage_source(name, a, b, "Vsense", 1)
    return network


def tied(network: Network, kinds: str) -> networkx.MultiGraph:
    """The network's graph with parts of these kinds only."""
    graph = network.graph
    graph.remove_edges_from([edge for edge in graph.edges if graph.edges[edge]["kind"] not in kinds])
    return graph


@pytest.mark.parametrize("seed", range(40))
def test_groups_without_ground_are_connected_components(seed: int) -> None:
    """`loose_groups` against networkx.connected_components for every set of kinds that is asked for."""
    rng = random.Random(seed)
    network = random_network(rng, rng.randint(1, 14), rng.randint(0, 18))
    for kinds in ("RCLVEH", "RLVEH", "CVEH", "R", ""):
        components = networkx.connected_components(tied(network, kinds))
        expected = {frozenset(component) for component in components if "0" not in component}
        groups = loose_groups(network, kinds)
        assert {frozenset(network.nodes[node] for node in group) for group in groups} == expected


@pytest.mark.parametrize("seed", range(40))
def test_floating_nodes_are_the_components_no_transconductance_holds(seed: int) -> None:
    """Components without ground, less those that G sources both drive from outside and sense."""
    rng = random.Random(100 + seed)
    network = random_network(rng, rng.randint(1, 14), rng.randint(0, 18))
    for dc, kinds in ((False, "RCLVEH"), (True, "RLVEH")):
        expected = set()
        for component in networkx.connected_components(tied(network, kinds)):
            sources = [part.nodes for part in network.parts if part.kind == "G"]
            driven = any((a in component) != (b in component) for a, b, _, _ in sources)
            sensed = any((c in component) != (d in component) for _, _, c, d in sources)
            if "0" not in component and not (driven and sensed):
                expected.add(frozenset(component))
        assert {frozenset(group) for group in floating_nodes(network, dc=dc)} == expected


@pytest.mark.parametrize("seed", range(40))
def test_stiff_loops_are_as_many_as_independent_cycles(seed: int) -> None:
    """Each is a closed walk along stiff parts, and there are edges - nodes + components of them."""
    rng = random.Random(200 + seed)
    network = random_network(rng, rng.randint(1, 8), rng.randint(0, 18))
    for dc, kinds in ((False, "VEH"), (True, "VEHL")):
        graph = tied(network, kinds)
        loops = stiff_loops(network, dc=dc)
        independent = (
            graph.number_of_edges() - graph.number_of_nodes() + networkx.number_connected_components(graph)
        )
        assert len(loops) == min(independent, MAX_LOOPS)
        for loop in loops:
            assert len(set(loop)) == len(loop)
            ends = [network.part(name).nodes[:2] for name in loop]
            around = networkx.MultiGraph(ends)
            assert all(degree == 2 for _, degree in around.degree)
            assert networkx.is_connected(around)
            assert all(network.part(name).kind in kinds for name in loop)


def lines(*parts: str) -> Network:
    """A network from lines `NAME node node`, R, C, L, V and I."""
    network = Network()
    for line in parts:
        name, a, b = line.split()
        if name[0] in "VI":
            (network.add_voltage_source if name[0] == "V" else network.add_current_source)(name, a, b)
        else:
            add = {"R": network.add_resistor, "C": network.add_capacitor, "L": network.add_inductor}
            add[name[0]](name, a, b, 1.0)
    return network


EXPLAINED = {
    "one node": (
        ("V1 a 0", "C1 a b", "R1 a 0"),
        True,
        "node 'b' has no path to ground for dc (parts there: C1).",
    ),
    "two nodes": (
        ("V1 a 0", "R1 b c", "C1 c b"),
        False,
        "nodes b, c have no connection to ground (parts there: R1, C1).",
    ),
    "loop": (
        ("V1 a 0", "V2 b a", "V3 b 0"),
        False,
        "V2, V1, V3 form a loop of voltage sources, so the current around it is not defined.",
    ),
    "loop with an inductor": (
        ("V1 a 0", "L1 a 0"),
        True,
        "V1, L1 form a loop of voltage sources and inductors, so the current around it is not defined.",
    ),
    "one part": (
        ("V1 a a", "R1 a 0"),
        False,
        "V1 has both ends on one node, so the current through it is not defined.",
    ),
}


@pytest.mark.parametrize("name", EXPLAINED)
def test_a_trouble_is_explained_in_a_sentence(name: str) -> None:
    """Nodes and parts to blame are named."""
    parts, dc, expected = EXPLAINED[name]
    (trouble,) = troubles(lines(*parts), dc=dc)
    said = explain(trouble, dc=dc)
    if "loop" in name:  # where a loop is begun is nobody's business
        assert sorted(said.split(" form")[0].split(", ")) == sorted(expected.split(" form")[0].split(", "))
        said, expected = said.split(" form")[1], expected.split(" form")[1]
    assert said == expected


def test_a_long_list_is_cut_short() -> None:
    """Eight names and how many more."""
    (trouble,) = troubles(lines("V1 a 0", *(f"R{k} x{k} x{k + 1}" for k in range(20))), dc=False)
    assert len(trouble.nodes) == 21
    assert "x7 and 13 more" in explain(trouble, dc=False)


def test_a_sound_network_has_no_troubles() -> None:
    """Neither at dc nor above."""
    network = lines("V1 a 0", "R1 a b", "C1 b 0", "L1 b c", "R2 c 0")
    assert troubles(network, dc=True) == []
    assert troubles(network, dc=False) == []


def test_many_troubles_are_found_in_a_blink() -> None:
    """Ten thousand floating nodes and as many doubled sources, in far less than ten seconds."""
    count = 10_000
    parts = [f"C{k} a{k} b{k}" for k in range(count)] + [f"V{k} c{k % (count // 2)} 0" for k in range(count)]
    network = lines(*parts)
    start = time.perf_counter()
    found = troubles(network, dc=False)
    assert time.perf_counter() - start < 10
    assert sum(trouble.kind == "floating" for trouble in found) == count
    assert sum(trouble.kind == "loop" for trouble in found) == MAX_LOOPS
