"""Rules about names: two that a reader, or a simulator, takes for one."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from functools import partial

from ..circuit import Circuit
from ..circuit.topology import touches
from ._telling import at_node, few, meant
from .finding import Remark, rule


@rule("case-only", "note")
def case_only(circuit: Circuit) -> Iterator[Remark]:
    """Names that differ only in case are one name to SPICE; the written netlist renames them."""
    for what, names in (("nodes", circuit.network.nodes), ("parts", circuit.network.names)):
        small = [name.lower() for name in names]
        if len(set(small)) == len(small):
            continue
        first: dict[str, int] = {}
        pairs = [(first.setdefault(name, index), index) for index, name in enumerate(small)]
        yield from few(
            [pair for pair in pairs if pair[0] != pair[1]],
            partial(_in_case, circuit, what, names),
            f"names of {what} differ from another one only in case",
        )


def _in_case(circuit: Circuit, what: str, names: tuple[str, ...], pair: tuple[int, int]) -> Remark:
    first, second = pair
    place = circuit.place_of(names[second]).at(names[second]) if what == "parts" else at_node(circuit, second)
    return Remark(
        f"the {what} {names[first]!r} and {names[second]!r} differ only in case.",
        "Give them different names.",
        place,
    )


@rule("look-alike", "note")
def look_alike(circuit: Circuit) -> Iterator[Remark]:
    """Two nodes whose names are easily taken for one another: `out` and `0ut`, `n1` and `nl`, `a_1` and `a1`.

    To a simulator they are two nodes, and the circuit quietly falls apart where one was meant. Only where one
    of the two has no more than two parts; a warning where it has a single one, or where a node looks like
    ground.
    """
    network = circuit.network
    nodes, names = network.nodes, network.names
    count, last = touches(network)
    looked_at = meant(circuit)

    def tell(pair: tuple[int, int]) -> Remark:
        usual, rare = pair
        suspect = usual == 0 or (count[rare] == 1 and nodes[rare] not in looked_at)
        parts = "a single part" if count[rare] == 1 else f"{count[rare]} parts"
        what = "looks like ground" if usual == 0 else f"looks like node {nodes[usual]!r}"
        return Remark(
            f"node {nodes[rare]!r} {what}, but is another one, with {parts}.",
            f"Write {nodes[usual]} if that is meant; otherwise give one of them a clearer name.",
            circuit.place_of(names[last[rare]]).at(nodes[rare]),
            "warning" if suspect else None,
        )

    yield from few(alike(circuit), tell, "nodes look like another one")


def alike(circuit: Circuit) -> list[tuple[int, int]]:
    """Pairs of nodes that look alike, as indices: the one with more parts, the one with one or two."""
    nodes = circuit.network.nodes
    looks = _looks(nodes)
    if len(set(looks)) == len(looks):
        return []
    groups: dict[str, list[int]] = {}
    for node, look in enumerate(looks):
        groups.setdefault(look, []).append(node)
    count, _ = touches(circuit.network)
    pairs = []
    for group in groups.values():
        usual = 0 if group[0] == 0 else max(group, key=lambda node: int(count[node]))
        pairs += [
            (usual, node)
            for node in group
            if node != usual
            and (count[node] <= 2 or usual == 0)
            # Names that differ in case alone are another rule's.
            and nodes[node].lower() != nodes[usual].lower()
        ]
    return pairs


def _looks(nodes: Iterable[str]) -> list[str]:
    """Each name as a hasty reader sees it; mostly all at once, as there may be a million."""
    text = re.sub(r"(?<=[A-Za-z])[-_.](?=[0-9])", "", "\n".join(nodes))
    text = text.translate(str.maketrans("OolI-.", "0011__")).lower()
    return [look.rstrip("_") or look for look in text.split("\n")]
