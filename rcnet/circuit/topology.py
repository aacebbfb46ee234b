"""Questions to the graph that decide, before any arithmetic, whether a network has a solution."""

from __future__ import annotations

import itertools
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from .coupling import contradictory_couplings
from .network import Network

Indices = npt.NDArray[np.int64]

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

    kind: str  # "floating", "loop" or "coupling"
    nodes: tuple[str, ...]
    parts: tuple[str, ...]


def loose_groups(network: Network, ties: str) -> list[tuple[int, ...]]:
    """The groups of nodes, as indices, that parts of the kinds `ties` join but do not tie to ground."""
    arrays = network.arrays()
    rows = np.isin(arrays.kinds, [ord(letter) for letter in ties])
    label = joined(arrays.node_count, arrays.nodes[rows, 0], arrays.nodes[rows, 1])
    groups: dict[int, list[int]] = {}
    for node in np.flatnonzero(label != label[0]).tolist():
        groups.setdefault(int(label[node]), []).append(node)
    return [tuple(group) for group in groups.values()]


def joined(count: int, a: Indices, b: Indices) -> Indices:
    """A label for each of `count` nodes, (count,): one for all that the pairs a, b, (pairs,), join."""
    if len(a) >= _MANY_PARTS:
        import scipy.sparse
        import scipy.sparse.csgraph

        graph = scipy.sparse.coo_matrix((np.ones(len(a), dtype=np.int8), (a, b)), shape=(count, count))
        _, label = scipy.sparse.csgraph.connected_components(graph, directed=False)
        return np.asarray(label, dtype=np.int64)
    sets = _Sets(count)
    for first, second in zip(a.tolist(), b.tolist(), strict=True):
        sets.join(first, second)
    return np.array([sets.find(node) for node in range(count)], dtype=np.int64)


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
    at = _parts_at(network, groups) if groups else []
    found = [Trouble("floating", group, parts) for group, parts in zip(groups, at, strict=True)]
    found.extend(Trouble("loop", (), loop) for loop in stiff_loops(network, dc=dc))
    found.extend(Trouble("coupling", (), names) for names in contradictory_couplings(network))
    return found


def _parts_at(network: Network, groups: list[tuple[str, ...]]) -> list[tuple[str, ...]]:
    """The names of the parts that touch each group of nodes."""
    arrays, names = network.arrays(), network.names
    group_of = np.full(arrays.node_count + 1, -1, dtype=np.int64)  # the last, for the index -1, is no node
    for number, group in enumerate(groups):
        group_of[[network.node_index(node) for node in group]] = number
    met = group_of[arrays.nodes]
    rows, columns = np.nonzero(met >= 0)
    number, row = np.unique(np.stack([met[rows, columns], rows]), axis=1)
    pieces = np.split(row, np.searchsorted(number, np.arange(1, len(groups))))
    return [tuple(names[k] for k in piece.tolist()) for piece in pieces]


def cut_set(network: Network, nodes: Iterable[str]) -> tuple[str, ...]:
    """The names of the parts that join a group of nodes to the rest of the network."""
    arrays, names = network.arrays(), network.names
    among = np.zeros(arrays.node_count + 1, dtype=bool)  # the last, for the index -1, is no node
    among[[network.node_index(node) for node in nodes]] = True
    inside = among[arrays.nodes[:, :2]]
    return tuple(names[row] for row in np.flatnonzero(inside[:, 0] != inside[:, 1]).tolist())


def touches(network: Network) -> tuple[Indices, Indices]:
    """How many parts touch each node, a part with both ends there once; and the row of the last one, -1 for
    none. Both (nodes,).
    """
    arrays = network.arrays()
    count = np.zeros(arrays.node_count, dtype=np.int64)
    last = np.full(arrays.node_count, -1, dtype=np.int64)
    for column in range(arrays.nodes.shape[1]):
        here = arrays.nodes[:, column]
        new = here >= 0
        for earlier in range(column):
            new &= here != arrays.nodes[:, earlier]
        rows = np.flatnonzero(new)
        count += np.bincount(here[rows], minlength=arrays.node_count)
        np.maximum.at(last, here[rows], rows)
    return count, last


def blocks(network: Network, ties: Iterable[tuple[int, int]] = ()) -> Indices:
    """A label for each node, (nodes,): the same where parts join two nodes otherwise than by way of ground.

    Coupled inductors are joined; what a controlled source senses is not joined to what it drives.
    ties: more pairs of nodes that are joined
    """
    arrays = network.arrays()
    more = [*ties]
    for row in network.couplings:
        first, second = network.coupled_by(row)
        more.append((int(arrays.nodes[first, :2].max()), int(arrays.nodes[second, :2].max())))
    pairs = np.concatenate([arrays.nodes[:, :2], np.array(more, dtype=np.int64).reshape(-1, 2)])
    inner = pairs[(pairs > 0).all(axis=1)]
    return joined(arrays.node_count, inner[:, 0], inner[:, 1])


def influenced(
    network: Network, label: Indices, start: Iterable[int], way: Literal["on", "back", "both"] = "on"
) -> npt.NDArray[np.bool_]:
    """Which nodes what happens at the nodes `start` can change, (nodes,); `back`, which can change those.

    label: the blocks; within one everything changes everything, a controlled source leads on one way only
    (with `both` it is taken as leading both ways).
    """
    arrays = network.arrays()
    leads: dict[int, set[int]] = {}
    for row in np.flatnonzero(np.isin(arrays.kinds, [*b"EGFH"])).tolist():
        sensing = (
            arrays.nodes[row, 2:] if arrays.kinds[row] in b"EG" else arrays.nodes[network.sensed_by(row)]
        )
        sensed, driven = (label[nodes[nodes > 0]].tolist() for nodes in (sensing[:2], arrays.nodes[row, :2]))
        for one, other in itertools.product(sensed, driven):
            if way != "back":
                leads.setdefault(one, set()).add(other)
            if way != "on":
                leads.setdefault(other, set()).add(one)
    reached = {int(label[node]) for node in start if node > 0}
    waiting = list(reached)
    while waiting:
        for block in leads.get(waiting.pop(), set()) - reached:
            reached.add(block)
            waiting.append(block)
    return np.asarray(np.isin(label, list(reached)))


def explain(trouble: Trouble, *, dc: bool) -> str:
    """One sentence about a trouble, for people."""
    if trouble.kind == "coupling":
        return (
            f"the couplings {_listed(trouble.parts)} contradict each other: "
            "windings so coupled could store energy below zero."
        )
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
