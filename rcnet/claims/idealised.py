"""A network as a designer idealises it: stages parted by buffers, parts left out or shorted."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import product

from ..circuit import GROUND, Network, Part, Source
from ..exact import driving_sources

_Moved = Callable[[str, tuple[str, ...]], tuple[str, ...]]  # a part's name and nodes -> its nodes now

_CONDUCTORS = "RCLVEHGF"  # what joins its first two nodes, or drives one from the other


@dataclass(frozen=True, slots=True)
class Split:
    """A node that the whole signal passes, and what lies behind it.

    behind: the names of the parts from there to the output; what else touches the node belongs before it
    """

    node: str
    behind: frozenset[str]


def splits(network: Network, targets: Sequence[str]) -> tuple[Split, ...]:
    """The nodes between the driving source and the output at which one stage loads the next, in order.

    Without such a node nothing of the source reaches the output (an articulation node of the signal's graph,
    ground left out); on its near side it is more than the end of a series part, and on its far side
    something draws current. Parts from the node to ground belong to the stage before it.
    """
    graph = _Graph(network)
    start = graph.start
    goals = {node for node in targets if node not in graph.held}
    if not start or not goals:
        return ()
    found = []
    for node in graph.reached(start, None):
        # An ideal voltage source's own node is not loaded by anything, a current source's is.
        if node in goals or (node in start and (graph.stiff or len(start) > 1)):
            continue
        before = graph.reached(start - {node}, node)
        if goals & before:
            continue
        behind = graph.reached(goals, node)
        split = _split(network, graph, node, behind)
        if split is not None:
            found.append((len(before), split))
    return tuple(split for _, split in sorted(found, key=lambda pair: pair[0]))


def _split(network: Network, graph: _Graph, node: str, behind: set[str]) -> Split | None:
    names = frozenset(part.name for part in network.parts if behind & set(_touched(network, part)))
    near = {node} if node in graph.start else set()  # a current source is one neighbour more
    draws = False
    for part in network.parts:
        ends = part.nodes[:2]
        if part.kind not in _CONDUCTORS or node not in ends:
            continue
        if part.name in names:
            draws = True
        else:
            near.update(GROUND if other in graph.held else other for other in set(ends) - {node})
    return Split(node, names) if draws and len(near) > 1 else None


def _touched(network: Network, part: Part) -> tuple[str, ...]:
    """The nodes a part belongs to; a K to those of its inductors."""
    if part.couples is None:
        return part.nodes
    return tuple(node for name in part.couples for node in network.part(name).nodes)


class _Graph:
    """Which nodes the signal passes to from which, ground and what dead voltage sources hold left out."""

    def __init__(self, network: Network) -> None:
        driving = _driving(network)
        self.held = _held(network, driving)
        self.stiff = any(source.kind == "V" for source in driving)
        self.start = {node for source in driving for node in source.nodes} - self.held
        self.next: dict[str, list[str]] = {}
        for part in network.parts:
            for one, other in _edges(network, part):
                if one not in self.held and other not in self.held:
                    self.next.setdefault(one, []).append(other)
                    self.next.setdefault(other, []).append(one)

    def reached(self, start: Iterable[str], avoided: str | None) -> set[str]:
        """Every node reached from `start` without passing `avoided`."""
        found = set(start)
        waiting = list(found)
        while waiting:
            for node in self.next.get(waiting.pop(), ()):
                if node not in found and node != avoided:
                    found.add(node)
                    waiting.append(node)
        return found


def _driving(network: Network) -> list[Source]:
    """The sources whose signal is looked at: those with ac, else with a waveform, else with a dc value."""
    sources = network.sources
    for names in (
        driving_sources(network),
        tuple(name for name, source in sources.items() if source.waveform is not None),
        tuple(name for name, source in sources.items() if source.dc),
    ):
        if names:
            return [sources[name] for name in names]
    return []


def _held(network: Network, driving: Sequence[Source]) -> set[str]:
    """Ground, and the nodes that voltage sources without a signal tie to it."""
    held = {GROUND}
    quiet = [s for s in network.sources.values() if s.kind == "V" and s not in driving]
    while more := {n for s in quiet if held & set(s.nodes) for n in s.nodes} - held:
        held |= more
    return held


def _edges(network: Network, part: Part) -> Iterator[tuple[str, str]]:
    if part.couples is not None:
        first, second = (network.part(name).nodes for name in part.couples)
        yield from product(first, second)
    elif part.kind in _CONDUCTORS:
        yield part.nodes[0], part.nodes[1]
    if part.kind in "EG":
        yield from product(part.nodes[:2], part.nodes[2:])
    if part.senses is not None and part.senses in network.sources:
        yield from product(part.nodes, network.sources[part.senses].nodes)


# ---------------------------------------------------------------------- changed networks


def buffered(network: Network, parted: Sequence[Split]) -> tuple[Network, dict[str, str]]:
    """The network with an ideal unity buffer at each split, and the new node behind each buffer."""
    behind = {split.node: split.behind for split in parted}
    fresh = {node: _free_name(network, node) for node in behind}

    def moved(name: str, nodes: tuple[str, ...]) -> tuple[str, ...]:
        return tuple(fresh[n] if n in behind and name in behind[n] else n for n in nodes)

    twin = Network(network.title)
    _add_all(twin, network, moved, frozenset())
    for number, (node, after) in enumerate(fresh.items(), 1):
        twin.add_part(Part(_free_part(network, number), "E", (after, GROUND, node, GROUND), 1.0))
    return twin, fresh


def altered(
    network: Network, opened: Iterable[str] = (), shorted: Iterable[str] = ()
) -> tuple[Network, Mapping[str, str]] | None:
    """The network with some parts taken away and some shorted, and which nodes became one with which.

    None where a short would lie across a source.
    """
    names, gone = {node: node for node in network.nodes}, {*opened, *shorted}
    for name in shorted:
        a, b = (names[node] for node in network.part(name).nodes)
        kept, lost = (b, a) if b == GROUND else (a, b)
        names = {node: kept if now == lost else now for node, now in names.items()}

    def moved(_: str, nodes: tuple[str, ...]) -> tuple[str, ...]:
        return tuple(names[node] for node in nodes)

    for part in network.parts:
        if len(part.nodes) >= 2 and part.name not in gone:
            ends = part.nodes[:2]
            if ends[0] != ends[1] and names[ends[0]] == names[ends[1]]:
                if part.kind not in "RCL":
                    return None
                gone.add(part.name)
    twin = Network(network.title)
    _add_all(twin, network, moved, frozenset(gone))
    return twin, names


def _add_all(twin: Network, network: Network, moved: _Moved, gone: frozenset[str]) -> None:
    sources = network.sources
    for part in network.parts:
        if part.name in gone or (part.couples is not None and gone & set(part.couples)):
            continue
        nodes = moved(part.name, part.nodes)
        if part.name in sources:
            twin.add_source(replace(sources[part.name], nodes=(nodes[0], nodes[1])))
        else:
            twin.add_part(replace(part, nodes=nodes))


def _free_name(network: Network, node: str) -> str:
    name = f"{node}_buffered"
    while network.has_node(name):
        name += "_"
    return name


def _free_part(network: Network, number: int) -> str:
    name = f"Ebuffer{number}"
    while name in network:
        name += "_"
    return name
