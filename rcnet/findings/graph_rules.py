"""Rules about the network as a graph: what is connected to what."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ..circuit import Circuit, Place, Trouble, explain, floating_nodes, troubles
from ..circuit.topology import cut_set, touches
from ._telling import few, listed, meant, whole
from .finding import Remark, Severity, rule
from .name_rules import alike


def _first_place(circuit: Circuit, trouble: Trouble) -> Place:
    place = circuit.place_of(trouble.parts[0]) if trouble.parts else whole(circuit)
    for node in trouble.nodes:
        if (pointed := place.at(node)) != place:
            return pointed
    return place


def _told(circuit: Circuit, kind: str, remedy: str, more: str) -> Iterator[Remark]:
    """A remark for each trouble of one kind that denies the network a solution at any frequency."""
    found = [trouble for trouble in troubles(circuit.network, dc=False) if trouble.kind == kind]
    return few(
        found,
        lambda trouble: Remark(explain(trouble, dc=False), remedy, _first_place(circuit, trouble)),
        more,
    )


@rule("floating", "error")
def floating(circuit: Circuit) -> Iterator[Remark]:
    """Nodes that nothing connects to ground have no defined voltage; a simulator aborts or invents one."""
    yield from _told(
        circuit,
        "floating",
        "Connect them to the rest, or remove them.",
        "groups of nodes have no connection to ground",
    )


@rule("voltage-loop", "error")
def voltage_loop(circuit: Circuit) -> Iterator[Remark]:
    """A loop of voltage sources contradicts itself or leaves its current undefined."""
    yield from _told(
        circuit,
        "loop",
        "Put a resistance in the loop, or remove one of its parts.",
        "loops of voltage sources were found",
    )


@rule("contradictory-couplings", "error")
def contradictory_couplings(circuit: Circuit) -> Iterator[Remark]:
    """Windings coupled so that they could store energy below zero; ngspice 39 only mentions it in its log."""
    yield from _told(
        circuit,
        "coupling",
        "Measure the coefficients again, or lower the greatest.",
        "groups contradict themselves",
    )


@rule("inductor-loop", "warning")
def inductor_loop(circuit: Circuit) -> Iterator[Remark]:
    """A loop of inductors and voltage sources has no operating point.

    An error where an operating point, a transient or a noise analysis is asked for.
    """
    here = {frozenset(trouble.parts) for trouble in troubles(circuit.network, dc=False)}
    for trouble in troubles(circuit.network, dc=True):
        if trouble.kind == "loop" and frozenset(trouble.parts) not in here:
            yield Remark(
                explain(trouble, dc=True),
                "Give the loop its resistance.",
                _first_place(circuit, trouble),
                "error" if _needs_dc(circuit) else None,
            )


def _needs_dc(circuit: Circuit) -> bool:
    wanted = circuit.analyses
    return not wanted.chosen and bool(wanted.operating_point or wanted.transient or wanted.noise)


@rule("no-dc-path", "warning")
def no_dc_path(circuit: Circuit) -> Iterator[Remark]:
    """A node held by capacitors alone has no dc voltage.

    ngspice 39 then takes the state after 10 microseconds of a start-up run for the operating point, with exit
    code 0, and every node of the circuit may be wrong. An error where an operating point, a transient or a
    noise analysis is asked for; the ac response is not affected.
    """
    floating_anyway = {node for group in floating_nodes(circuit.network, dc=False) for node in group}
    found = [
        trouble
        for trouble in troubles(circuit.network, dc=True)
        if trouble.kind == "floating" and not floating_anyway.issuperset(trouble.nodes)
    ]
    severity: Severity | None = "error" if _needs_dc(circuit) else None
    yield from few(
        found,
        lambda trouble: Remark(
            _hanging(circuit, trouble),
            "Add a resistor to ground, as a real circuit's leakage would.",
            _first_place(circuit, trouble),
            severity,
        ),
        "groups of nodes have no path to ground for dc",
    )


def _hanging(circuit: Circuit, trouble: Trouble) -> str:
    """One sentence: the nodes, and the parts of the cut-set, none of which carries dc of its own accord."""
    cut = cut_set(circuit.network, trouble.nodes)
    kinds = (
        ("capacitor", [name for name in cut if circuit.network.part(name).kind == "C"]),
        ("current source", [name for name in cut if circuit.network.part(name).kind != "C"]),
    )
    what = " and ".join(
        f"the {kind}{'s' if len(names) > 1 else ''} {listed(names)}" for kind, names in kinds if names
    )
    one = len(trouble.nodes) == 1
    nodes = f"node {trouble.nodes[0]!r} has" if one else f"nodes {listed(trouble.nodes)} have"
    return f"{nodes} no path to ground for dc: only {what} lead{'s' if len(cut) == 1 else ''} there."


@rule("no-source", "error")
def no_source(circuit: Circuit) -> Iterator[Remark]:
    """Without an independent source nothing happens in the circuit."""
    if not circuit.network.sources:
        yield Remark("the circuit has no source.", "Add one, as Vin in 0 DC 0 AC 1.", whole(circuit))


@rule("no-ac-source", "error")
def no_ac_source(circuit: Circuit) -> Iterator[Remark]:
    """An ac or noise analysis without a source that carries ac comes out as zeros; ngspice says nothing."""
    wanted, sources = circuit.analyses, circuit.network.sources
    if not sources or not (wanted.ac or wanted.noise) or any(source.ac for source in sources.values()):
        return
    places = circuit.analysis_places
    yield Remark(
        "an ac or noise analysis is asked for, but no source carries ac.",
        "Give one source ac = 1 (in a netlist, AC 1).",
        places.get("ac") or places.get("noise") or circuit.place_of(next(iter(sources))),
    )


@rule("one-node-part", "warning")
def one_node_part(circuit: Circuit) -> Iterator[Remark]:
    """A part with both ends on one node does nothing."""
    arrays, names = circuit.network.arrays(), circuit.network.names
    lone = (arrays.nodes[:, 0] == arrays.nodes[:, 1]) & np.isin(arrays.kinds, [*b"RCLIGF"])

    def tell(row: int) -> Remark:
        part = circuit.network.part(names[row])
        return Remark(
            f"{part.name} has both ends on node {part.nodes[0]!r}, so it does nothing.",
            "Mend its nodes, or remove it.",
            circuit.place_of(part.name).at(part.nodes[0]),
        )

    yield from few(np.flatnonzero(lone).tolist(), tell, "parts have both ends on one node")


@rule("dangling", "warning")
def dangling(circuit: Circuit) -> Iterator[Remark]:
    """A node that only one part touches carries no current; often a misspelt name."""
    network = circuit.network
    nodes, names = network.nodes, network.names
    count, last = touches(network)
    lone = np.flatnonzero(count == 1)
    if not len(lone):
        return
    # What floats, looks like another node or meets a part that was left out is reported as that.
    known = meant(circuit) | {node for group in floating_nodes(network, dc=False) for node in group}
    known |= {nodes[rare] for _, rare in alike(circuit)}
    known |= {node for gone in circuit.left_out for node in gone.nodes}

    def tell(node: int) -> Remark:
        part = names[last[node]]
        return Remark(
            f"node {nodes[node]!r} is touched by {part} alone, so no current flows there.",
            "Check the spelling of the node's name.",
            circuit.place_of(part).at(nodes[node]),
        )

    yield from few(
        [node for node in lone.tolist() if nodes[node] not in known],
        tell,
        "nodes are touched by one part alone",
    )


@rule("output-absent", "error")
def output_absent(circuit: Circuit) -> Iterator[Remark]:
    """The output named (in a netlist by `.print`, `.plot`, `.save` or `.noise`) is no node of the circuit.

    ngspice 39 leaves such a voltage out without a word; its noise comes out as zeros.
    """
    place = circuit.analysis_places.get("output") or whole(circuit)
    for node in circuit.output:
        if not circuit.network.has_node(node):
            yield Remark(
                f"the output {node!r} is no node of this circuit.",
                f"Nodes here: {', '.join(circuit.network.nodes[1:9])}.",
                place.at(node),
            )
    if circuit.analyses.noise and not circuit.output:
        yield Remark(
            "a noise analysis is asked for, but no output node is named.",
            'Add output = "out" to the circuit.',
            circuit.analysis_places.get("noise") or whole(circuit),
        )
