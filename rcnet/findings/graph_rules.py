"""Rules about the network as a graph: what is connected to what."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

from ..circuit import GROUND, Circuit, Place, Trouble, explain, floating_nodes, troubles
from .finding import Remark, rule


def _whole(circuit: Circuit) -> Place:
    return Place(circuit.file or circuit.name, None)


def _first_place(circuit: Circuit, trouble: Trouble) -> Place:
    return circuit.place_of(trouble.parts[0]) if trouble.parts else _whole(circuit)


def _told(circuit: Circuit, kind: str, remedy: str) -> Iterator[Remark]:
    """A remark for each trouble of one kind that denies the network a solution at any frequency."""
    for trouble in troubles(circuit.network, dc=False):
        if trouble.kind == kind:
            yield Remark(explain(trouble, dc=False), remedy, _first_place(circuit, trouble))


@rule("floating", "error")
def floating(circuit: Circuit) -> Iterator[Remark]:
    """Nodes that nothing connects to ground have no defined voltage; a simulator aborts or invents one."""
    yield from _told(circuit, "floating", "Connect them to the rest, or remove them.")


@rule("voltage-loop", "error")
def voltage_loop(circuit: Circuit) -> Iterator[Remark]:
    """A loop of voltage sources contradicts itself or leaves its current undefined."""
    yield from _told(circuit, "loop", "Put a resistance in the loop, or remove one of its parts.")


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
    for trouble in troubles(circuit.network, dc=True):
        if trouble.kind == "floating" and not floating_anyway.issuperset(trouble.nodes):
            yield Remark(
                explain(trouble, dc=True),
                "Add a resistor to ground, as a real circuit's leakage would.",
                _first_place(circuit, trouble),
                "error" if _needs_dc(circuit) else None,
            )


@rule("no-source", "error")
def no_source(circuit: Circuit) -> Iterator[Remark]:
    """Without an independent source nothing happens in the circuit."""
    if not circuit.network.sources:
        yield Remark("the circuit has no source.", "Add one, as Vin in 0 DC 0 AC 1.", _whole(circuit))


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
    for part in circuit.network.parts:
        if part.nodes[0] == part.nodes[1] and part.kind in "RCLIGF":
            yield Remark(
                f"{part.name} has both ends on node {part.nodes[0]!r}, so it does nothing.",
                "Mend its nodes, or remove it.",
                circuit.place_of(part.name),
            )


@rule("dangling", "warning")
def dangling(circuit: Circuit) -> Iterator[Remark]:
    """A node that only one part touches carries no current; often a misspelt name."""
    touches: Counter[str] = Counter()
    last: dict[str, str] = {}
    for part in circuit.network.parts:
        for node in dict.fromkeys(part.nodes):
            touches[node] += 1
            last[node] = part.name
    meant = {GROUND, *circuit.output, *(node for claim in circuit.claims for node in claim.of)}
    # A node that floats is reported as that.
    meant.update(node for group in floating_nodes(circuit.network, dc=False) for node in group)
    for node, count in touches.items():
        if count == 1 and node not in meant:
            yield Remark(
                f"node {node!r} is touched by {last[node]} alone, so no current flows there.",
                "Check the spelling of the node's name.",
                circuit.place_of(last[node]),
            )


@rule("output-absent", "error")
def output_absent(circuit: Circuit) -> Iterator[Remark]:
    """The output named (in a netlist by `.print`, `.plot`, `.save` or `.noise`) is no node of the circuit.

    ngspice 39 leaves such a voltage out without a word; its noise comes out as zeros.
    """
    place = circuit.analysis_places.get("output") or _whole(circuit)
    for node in circuit.output:
        if not circuit.network.has_node(node):
            yield Remark(
                f"the output {node!r} is no node of this circuit.",
                f"Nodes here: {', '.join(circuit.network.nodes[1:9])}.",
                place,
            )
    if circuit.analyses.noise and not circuit.output:
        yield Remark(
            "a noise analysis is asked for, but no output node is named.",
            'Add output = "out" to the circuit.',
            circuit.analysis_places.get("noise") or _whole(circuit),
        )


@rule("case-only", "note")
def case_only(circuit: Circuit) -> Iterator[Remark]:
    """Names that differ only in case are one name to SPICE; the written netlist renames them."""
    for what, names in (("nodes", circuit.network.nodes), ("parts", circuit.network.names)):
        seen: dict[str, str] = {}
        for name in names:
            other = seen.setdefault(name.lower(), name)
            if other != name:
                yield Remark(
                    f"the {what} {other!r} and {name!r} differ only in case.",
                    "Give them different names.",
                    circuit.place_of(name) if what == "parts" else _touching(circuit, name),
                )


def _touching(circuit: Circuit, node: str) -> Place:
    return circuit.place_of(next(part.name for part in circuit.network.parts if node in part.nodes))
