"""Subtraction-free elimination of the inner nodes of a network of admittances.

The nodal equations of a passive network are solved by the star-mesh transformation: node k with admittances
y_kj to its neighbours is replaced by admittances y_ki y_kj / d between them, d = sum_j y_kj. Ground is a node
like any other and diagonals are never stored, so nothing is ever subtracted: W. Grassmann, M. Taksar, D.
Heyman, Oper. Res. 33(5):1107-1116, 1985 (GTH elimination). For real s >= 0 every component of the answer is
right to a few units in the last place whatever the spread of values. At s = j omega the leaves of trees and
ladders are eliminated by products, quotients and sums of numbers of one quadrant, none of which amplifies
relative error; on meshes the method is normwise stable, as LDL^T without pivoting is (N. Higham, Math. Comp.
67(224):1591-1599, 1998).

The pattern (order, fill, index lists) is found once for a network, the numbers once for each block of s.
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Numbers = npt.NDArray[Any]  # float64 for real s, complex128 otherwise
Indices = npt.NDArray[np.int64]


@dataclass(frozen=True)
class _Step:
    """The elimination of one node: its neighbours, its admittances, and where the mesh it leaves behind goes.

    neighbours, slots: (m,); first, second, fill: one entry for each pair of neighbours
    """

    node: int
    neighbours: Indices
    slots: Indices
    first: Indices
    second: Indices
    fill: Indices


@dataclass(frozen=True)
class Pattern:
    """What elimination needs to know before it sees numbers.

    kept: the nodes that stay (terminals), ground among them
    steps: the eliminations in order, by minimum degree (Tinney, Walker, Proc. IEEE 55:1801-1809, 1967)
    part_slots: (admittances,), the slot each given admittance is added to; -1 if both its ends are one node
    slot_ends: (slots, 2), the nodes each slot joins
    work: products of one pass, the measure of its cost
    """

    kept: tuple[int, ...]
    steps: tuple[_Step, ...]
    part_slots: Indices
    slot_ends: Indices
    work: int


def analyse(node_count: int, ends: Indices, kept: Iterable[int], most_work: int) -> Pattern | None:
    """The pattern for admittances between `ends`, (admittances, 2); None beyond `most_work` products."""
    staying = frozenset(kept)
    graph: list[dict[int, int]] = [{} for _ in range(node_count)]
    slot_ends: list[tuple[int, int]] = []
    part_slots = np.full(len(ends), -1, dtype=np.int64)

    def slot(a: int, b: int) -> int:
        found = graph[a].get(b)
        if found is None:
            found = graph[a][b] = graph[b][a] = len(slot_ends)
            slot_ends.append((a, b))
        return found

    for number, (a, b) in enumerate(ends.tolist()):
        if a != b:
            part_slots[number] = slot(a, b)
    steps: list[_Step] = []
    work = 0
    queue = [(len(graph[node]), node) for node in range(node_count) if node not in staying]
    heapq.heapify(queue)
    gone = [False] * node_count
    while queue:
        degree, node = heapq.heappop(queue)
        if gone[node]:
            continue
        if degree != len(graph[node]):  # the entry is stale; the node comes again with its present degree
            heapq.heappush(queue, (len(graph[node]), node))
            continue
        gone[node] = True
        neighbours = sorted(graph[node])
        work += 1 + len(neighbours) * (len(neighbours) + 1) // 2
        if work > most_work:
            return None
        steps.append(_eliminated(node, neighbours, graph, slot))
    return Pattern(tuple(sorted(staying)), tuple(steps), part_slots, _pairs(slot_ends), work)


def _eliminated(node: int, neighbours: list[int], graph: list[dict[int, int]], slot: Any) -> _Step:
    slots = [graph[node][other] for other in neighbours]
    for other in neighbours:
        del graph[other][node]
    pairs = [(i, j) for i in range(len(neighbours)) for j in range(i + 1, len(neighbours))]
    fill = [slot(neighbours[i], neighbours[j]) for i, j in pairs]
    graph[node] = {}
    both = _pairs(pairs)
    return _Step(
        node,
        np.array(neighbours, dtype=np.int64),
        np.array(slots, dtype=np.int64),
        both[:, 0],
        both[:, 1],
        np.array(fill, dtype=np.int64),
    )


def _pairs(pairs: list[tuple[int, int]]) -> Indices:
    return np.array(pairs, dtype=np.int64).reshape(-1, 2)


@dataclass(frozen=True)
class Factors:
    """One block of s, eliminated.

    shares: for each step, (m, block): what each neighbour contributes to the node's voltage, y_kj / d
    totals: for each step, (block,): d, siemens
    reduced: (slots, block): the admittances left; valid between kept nodes
    """

    pattern: Pattern
    shares: tuple[Numbers, ...]
    totals: tuple[Numbers, ...]
    reduced: Numbers


def eliminate(pattern: Pattern, admittances: Numbers) -> Factors:
    """Eliminate every inner node. `admittances`: (admittances, block), siemens, in the order of `analyse`."""
    block = admittances.shape[1:]
    slots = np.zeros((len(pattern.slot_ends), *block), dtype=admittances.dtype)
    used = pattern.part_slots >= 0
    np.add.at(slots, pattern.part_slots[used], admittances[used])
    shares, totals = [], []
    for step in pattern.steps:
        own = slots[step.slots]
        total = own.sum(axis=0)
        share = own / total
        if len(step.fill):
            slots[step.fill] += own[step.first] * share[step.second]
        shares.append(share)
        totals.append(total)
    return Factors(pattern, tuple(shares), tuple(totals), slots)


def substitute(
    factors: Factors, voltages: Numbers, currents: Numbers | None, wanted: Iterable[int]
) -> Numbers:
    """Fill in the inner nodes' voltages, given the kept nodes'.

    voltages: (nodes, columns, block), volts: kept rows given; rows `wanted`, and those they need, filled in
    currents: (nodes, columns, block), amperes flowing into each node from outside, or None; overwritten with
        the currents that arrive at the kept nodes once the inner ones are gone
    Returns `voltages`, changed in place.
    """
    pattern = factors.pattern
    needed = _needed(pattern, wanted)
    if currents is not None:
        for step, share in zip(pattern.steps, factors.shares, strict=True):
            currents[step.neighbours] += share[:, None, :] * currents[step.node]
    for number in reversed(range(len(pattern.steps))):
        step = pattern.steps[number]
        if step.node not in needed:
            continue
        share = factors.shares[number]
        value = (share[:, None, :] * voltages[step.neighbours]).sum(axis=0)
        if currents is not None:
            value += currents[step.node] / factors.totals[number]
        voltages[step.node] = value
    return voltages


def _needed(pattern: Pattern, wanted: Iterable[int]) -> set[int]:
    needed = set(wanted)
    for step in pattern.steps:
        if step.node in needed:
            needed.update(step.neighbours.tolist())
    return needed
