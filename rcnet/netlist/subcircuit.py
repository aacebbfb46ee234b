"""A network as a subcircuit: which parts go inside, which nodes lead out."""

from __future__ import annotations

import itertools
import re
from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from ..circuit import GROUND, Analyses, Circuit, Conditions, Network, Source, StartingState
from ..errors import CircuitError, InputError
from .names import USUAL, Names, safe_names
from .portable import NAMES as PORTABLE_NAMES
from .portable import as_portable, ascii_text
from .reader import parse_netlist
from .round_trip import DEFECT, read_same, same_part
from .writer import Written, body, comment_lines, renamed_remarks, title_line, wrap


@dataclass(frozen=True)
class Library:
    """A subcircuit as text for a library file.

    text: comments, `.subckt`, parts, `.ends`; ports: in order, under the network's names
    inside: what stands between `.subckt` and `.ends`, as a netlist of its own
    """

    name: str
    title: str
    definition: list[str]
    ports: tuple[str, ...]
    inside: Written

    def text(self, comments: Iterable[str]) -> str:
        """The library file. comments: texts under the title, each made a comment."""
        lines = [line for text in comments for line in comment_lines(text)]
        return "\n".join([self.title, *lines, *self.definition, ""])

    def read_back(self) -> Circuit:
        """What stands inside, read back, alone and as an instance. Raises CircuitError where it differs."""
        inside = read_same(self.inside)
        whole = parse_netlist("\n".join([self.title, *self.definition, self.instance, ".end", ""]), "")
        outer = {port: self.inside.names.nodes[port] for port in self.ports}
        found = instance_differences(self.inside.circuit, self.inside.names, "X1", outer, whole)
        for part in itertools.islice(found, 1):
            raise CircuitError(f"{part} does not come back from the subcircuit as it went in.", remedy=DEFECT)
        return inside

    @property
    def instance(self) -> str:
        """An example of a line that uses it."""
        nodes = [self.inside.names.nodes[port] for port in self.ports]
        return " ".join(["X1", *nodes, self.name])


def library(
    circuit: Circuit, name: str, ports: Sequence[str] | None = None, *, portable: bool = False
) -> Library:
    """A network as a subcircuit, its sources and analyses left out; ground is node 0 inside as outside.

    ports: node names in the order wanted; by default the nodes that sources touch, in the order of the
    sources, then those of the output. A voltage source that gives nothing and by which an F or H senses a
    current stays inside. Raises CircuitError, or InputError for the name.
    """
    _require_name(name, PORTABLE_NAMES.longest if portable else USUAL.longest)
    network = circuit.network
    kept = _ammeters(network)
    outer = [source for source in network.sources.values() if source.name not in kept]
    inside = replace(
        circuit,
        network=without(network, {source.name for source in outer}),
        analyses=Analyses(),
        output=(),
        conditions=Conditions(),
        options={},
        requests=(),
        initial=StartingState({}, circuit.initial.parts),
    )
    if portable:
        inside, _ = as_portable(inside)
    order = _checked_ports(inside.network, ports) if ports else default_ports(circuit, inside.network, outer)
    names = safe_names(inside.network, PORTABLE_NAMES if portable else USUAL)
    spelt = ascii_text if portable else str
    title = title_line(spelt(circuit.title or circuit.name))
    lines = body(inside, names)
    definition = [
        *(line for text in renamed_remarks(names) for line in comment_lines(spelt(text))),
        *wrap(" ".join([".subckt", name, *(names.nodes[port] for port in order)])),
        *lines,
        f".ends {name}",
    ]
    alone = Written("\n".join([title, *lines, ".end", ""]), names, inside)
    return Library(name, title, definition, order, alone)


def instance_differences(
    inside: Circuit, names: Names, instance: str, outer: Mapping[str, str], back: Circuit
) -> Iterator[str]:
    """The parts of a subcircuit that are others in a netlist read back, where one instance was put in place.

    inside: the subcircuit as a circuit, under `names`; outer: port -> the node that it leads to
    """
    nodes = {node: f"{instance}.{names.nodes[node]}" for node in inside.network.nodes}
    nodes |= {GROUND: GROUND, **outer}
    # As ngspice calls a part in a subcircuit: its letter, the path, its own name.
    parts = {part: f"{new[0]}.{instance}.{new}" for part, new in names.parts.items()}
    for part in inside.network.names:
        if not same_part(inside, Names(nodes, parts), back, part):
            yield part


def _require_name(name: str, longest: int) -> None:
    if not re.fullmatch(rf"[A-Za-z][A-Za-z0-9_]{{0,{longest - 1}}}", name):
        raise InputError(
            f"a subcircuit cannot be called {name[:80]!r}.",
            remedy=f"Use a letter, then letters, digits and _, at most {longest} in all.",
        )


def without(network: Network, left_out: Collection[str]) -> Network:
    """The network without some of its parts. Raises CircuitError where nothing is left."""
    rest = Network(network.title)
    sources = network.sources
    for part in network.parts:
        if part.name in sources:
            if part.name not in left_out:
                rest.add_source(sources[part.name])
        elif part.name not in left_out:
            rest.add_part(part)
    if not len(rest):
        raise CircuitError(
            "without its sources nothing is left of the circuit.", remedy="Add the parts between them."
        )
    return rest


def _ammeters(network: Network) -> set[str]:
    """The voltage sources that only measure a current. Raises CircuitError for one that drives as well."""
    sensed = {part.senses: part.name for part in network.parts if part.senses is not None}
    for name, by in sensed.items():
        source = network.sources.get(name)
        if source is not None and drives(source):
            raise CircuitError(
                f"{by} senses the current of {name}, a source that would be left out of the subcircuit.",
                remedy=f"Let {by} sense a source of 0 V in series with {name}.",
            )
    return {name for name in sensed if name in network.sources}


def drives(source: Source) -> bool:
    """True if a source ever gives anything."""
    return bool(source.ac or source.operating_value or source.waveform is not None)


def default_ports(circuit: Circuit, inside: Network, sources: Iterable[Source]) -> tuple[str, ...]:
    """The nodes of `inside` that sources touch, then those of the output, each once, none of them ground."""
    nodes = [*(node for source in sources for node in source.nodes), *circuit.output]
    order = tuple(node for node in dict.fromkeys(nodes) if node != GROUND and inside.has_node(node))
    if not order:
        raise CircuitError(
            "the circuit has neither a source nor an output, so no node leads out of it.",
            remedy='Name the nodes, as --ports "in out".',
        )
    return order


def _checked_ports(network: Network, ports: Sequence[str]) -> tuple[str, ...]:
    for port in ports:
        network.node_index(port)
        if port == GROUND:
            raise CircuitError("ground is node 0 everywhere and no port.", remedy="Leave 0 out of the ports.")
    if len(set(ports)) != len(ports):
        twice = next(port for port in ports if ports.count(port) > 1)
        raise CircuitError(f"the port {twice!r} is named twice.", remedy="Name each node once.")
    return tuple(ports)
