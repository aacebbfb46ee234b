"""Questions to the graph that decide, before any arithmetic, whether a network has a solution."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from .network import Network, PartArrays

# Kinds of parts that tie two nodes together in each analysis. Controlled current sources and current sources
# tie nothing: what they carry is fixed from elsewhere.
_TIES_AC = "RCLVEH"
_TIES_DC = "RLVEH"
_STIFF_AC = "VEH"
_STIFF_DC = "VEHL"
_MANY_PARTS = 20_000  # from here on compiled graph code is worth loading
MAX_LOOPS = 20  # every loop costs a walk through the network, and nobody reads more


class _Sets:
    """Disjoint sets of node indices with path halving (Tarjan 1975)."""

    def __init__(self, count: int) -> None:
        self.parent = list(range(count))

    def find(self, item: int) -> int:
        parent = self.parent
        while parent[item] != item:
            parent[item] = parent[parent[item]]
            item = parent[item]
        return item

    def join(self, a: int, b: int) -> bool:
        """Join two sets; False if they were one already."""
        a, b = self.find(a), self.find(b)
        if a == b:
            return False
        self.parent[max(a, b)] = min(a, b)
        return True


@dataclass(frozen=True, slots=True)
class Trouble:
    """Why a network has no unique solution: the nodes and parts to blame."""

    kind: str  # "floating" or "loop"
    nodes: tuple[str, ...]
    parts: tuple[str, ...]


def loose_groups(network: Network, ties: str) -> list[tuple[int, ...]]:
    """The groups of nodes, as indices, that parts of the kinds `ties` join but do not tie to ground."""
    arrays = network.arrays()
    if len(arrays.kinds) >= _MANY_PARTS:
        return _loose_groups_of_many(arrays, ties)
    sets = _Sets(arrays.node_count)
    codes = {ord(letter) for letter in ties}
    for code, (a, b, _, _) in zip(arrays.kinds.tolist(), arrays.nodes.tolist(), strict=True):
        if code in codes:
            sets.join(a, b)
    groups: dict[int, list[int]] = {}
    for node in range(arrays.node_count):
        groups.setdefault(sets.find(node), []).append(node)
    return [tuple(group) for root, group in groups.items() if root != 0]


def _loose_groups_of_many(arrays: PartArrays, ties: str) -> list[tuple[int, ...]]:
    import scipy.sparse
    import scipy.sparse.csgraph

    rows = np.isin(arrays.kinds, [ord(letter) for letter in ties])
    a, b = arrays.nodes[rows, 0], arrays.nodes[rows, 1]
    size = (arrays.node_count, arrays.node_count)
    graph = scipy.sparse.coo_matrix((np.ones(len(a), dtype=np.int8), (a, b)), shape=size)
    _, label = scipy.sparse.csgraph.connected_components(graph, directed=False)
    groups: dict[int, list[int]] = {}
    for node in np.flatnonzero(label != label[0]).tolist():
        groups.setdefault(int(label[node]), []).append(node)
    return [tuple(group) for group in groups.values()]


def floating_nodes(network: Network, *, dc: bool) -> list[tuple[str, ...]]:
    """Groups of nodes that nothing ties to ground: at dc (by R, L, V, E, H), or at any frequency.

    A group whose own voltage controls some G source, and that some G source drives, is not among them:
    whether it has a solution is for the numbers to say.
    """
    groups = loose_groups(network, _TIES_DC if dc else _TIES_AC)
    held = _held_by_transconductance(network, groups) if groups else frozenset()
    names = network.nodes
    return [tuple(names[node] for node in group) for k, group in enumerate(groups) if k not in held]


def _held_by_transconductance(network: Network, groups: list[tuple[int, ...]]) -> frozenset[int]:
    arrays = network.arrays()
    group_of = {node: k for k, group in enumerate(groups) for node in group}
    driven: set[int] = set()
    sensed: set[int] = set()
    for a, b, c, d in arrays.nodes[arrays.kinds == ord("G")].tolist():
        for ends, found in (((a, b), driven), ((c, d), sensed)):
            # A pair within one group neither moves it as a whole nor sees it move.
            first, second = (group_of.get(node) for node in ends)
            if first != second:
                found.update(k for k in (first, second) if k is not None)
    return frozenset(driven & sensed)


def stiff_loops(network: Network, *, dc: bool) -> list[tuple[str, ...]]:
    """Loops of parts that each fix a voltage (V, E, H; inductors too at dc), as the names around each loop.

    At most MAX_LOOPS are looked for.
    """
    arrays = network.arrays()
    codes = [ord(letter) for letter in (_STIFF_DC if dc else _STIFF_AC)]
    rows = np.flatnonzero(np.isin(arrays.kinds, codes)).tolist()
    if not rows:
        return []
    sets = _Sets(arrays.node_count)
    tree: dict[int, list[tuple[int, str]]] = {}
    loops: list[tuple[str, ...]] = []
    names = network.names
    for row in rows:
        a, b = int(arrays.nodes[row, 0]), int(arrays.nodes[row, 1])
        if sets.join(a, b):
            tree.setdefault(a, []).append((b, names[row]))
            tree.setdefault(b, []).append((a, names[row]))
        elif len(loops) < MAX_LOOPS:
            loops.append((*_tree_path(tree, a, b), names[row]))
    return loops


def _tree_path(tree: dict[int, list[tuple[int, str]]], start: int, end: int) -> tuple[str, ...]:
    came: dict[int, tuple[int, str]] = {}
    stack = [start]
    while stack:
        node = stack.pop()
        for other, name in tree.get(node, ()):
            if other != start and other not in came:
                came[other] = (node, name)
                stack.append(other)
    names: list[str] = []
    while end != start:
        end, name = came[end]
        names.append(name)
    return tuple(reversed(names))


def troubles(network: Network, *, dc: bool) -> list[Trouble]:
    """Everything in the graph that denies the network a unique solution, at dc or at frequencies above it."""
    groups = floating_nodes(network, dc=dc)
    group_of = {node: k for k, group in enumerate(groups) for node in group}
    parts: list[dict[str, None]] = [{} for _ in groups]
    for part in network.parts if groups else ():
        for node in part.nodes:
            if node in group_of:
                parts[group_of[node]][part.name] = None
    found = [Trouble("floating", group, tuple(names)) for group, names in zip(groups, parts, strict=True)]
    found.extend(Trouble("loop", (), loop) for loop in stiff_loops(network, dc=dc))
    return found


def explain(trouble: Trouble, *, dc: bool) -> str:
    """One sentence about a trouble, for people."""
    if trouble.kind == "loop":
        if len(trouble.parts) == 1:
            return f"{trouble.parts[0]} has both ends on one node, so the current through it is not defined."
        what = "voltage sources and inductors" if dc else "voltage sources"
        return f"{_listed(trouble.parts)} form a loop of {what}, so the current around it is not defined."
    nodes = (
        f"node {trouble.nodes[0]!r} has"
        if len(trouble.nodes) == 1
        else f"nodes {_listed(trouble.nodes)} have"
    )
    path = "no path to ground for dc" if dc else "no connection to ground"
    return f"{nodes} {path} (parts there: {_listed(trouble.parts)})."


def _listed(names: Iterable[str], most: int = 8) -> str:
    listed = list(names)
    shown = ", ".join(listed[:most])
    return f"{shown} and {len(listed) - most} more" if len(listed) > most else shown
