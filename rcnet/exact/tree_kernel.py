"""Elimination of trees and ladders from the leaves, sixteen frequencies at a time, without a subtraction.

With y the admittance that feeds a node and Y all that hangs from the node, the parent sees

    y Y/(y + Y) = (y |Y|^2 + Y |y|^2)/|y + Y|^2,

whose real and imaginary parts are sums of products of numbers of one sign wherever y and Y lie in the first
quadrant, as those of R and C do: no digit is lost whatever the spread of values. Leaves first leaves no fill
(S. Parter, SIAM Rev. 3:119-130, 1961). Nodes come in postorder, the greatest subtree of each node first, so
that at most log2(nodes) + 1 partial sums are alive and stay in the fastest memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from .compiled import compiled, run_blocks
from .inner import Complex, Float, Indices, Inner, Load, Sums

BLOCK = 16  # frequencies that share one pass over the tree
_TOGETHER = 50_000  # nodes of the blocks that one call may take, as long as every thread gets some
_Small = npt.NDArray[np.int32]


@dataclass(frozen=True)
class TreePlan:
    """The order in which a forest is eliminated; position k is the k-th node to go.

    order: (nodes,), inner numbers by position; place: the inverse
    parent: (nodes,), the position of each node's parent, -1 for a root
    link: (nodes,), the link to the parent, -1 for a root
    own, target: (nodes,), the slot its partial sum is kept in, and the parent's, where its own part is added
    depth: how many slots there are; a root adds to the one after the last
    """

    order: Indices
    place: Indices
    parent: Indices
    link: Indices
    own: _Small
    target: _Small
    depth: int


def plan(inner: Inner) -> TreePlan:
    """The order for a forest, each tree rooted where it is fed; `inner.is_forest` must hold."""
    count, links = inner.count, inner.links
    ends = np.concatenate([links[:, 0], links[:, 1]])
    sorting = np.argsort(ends, kind="stable")
    start = np.concatenate([[0], np.cumsum(np.bincount(ends, minlength=count))]).astype(np.int64)
    other = np.concatenate([links[:, 1], links[:, 0]])[sorting]
    number = np.tile(np.arange(len(links)), 2)[sorting]
    roots = np.concatenate([inner.feed_at, np.arange(count)])
    order, place, parent, link, own, depth = _postorder(count, start, other, number, roots)
    target = np.where(parent >= 0, own[parent], depth).astype(np.int32)
    return TreePlan(order, place, parent, link, own, target, int(depth))


@compiled
def _postorder(
    count: int, start: Indices, other: Indices, number: Indices, roots: Indices
) -> tuple[Any, ...]:
    up = np.full(count, -2, np.int64)
    by = np.full(count, -1, np.int64)
    queue = np.empty(count, np.int64)
    filled = 0
    for root in roots:
        if up[root] != -2:
            continue
        up[root] = -1
        queue[filled] = root
        looked = filled
        filled += 1
        while looked < filled:
            node = queue[looked]
            looked += 1
            for k in range(start[node], start[node + 1]):
                child = other[k]
                if child != up[node]:
                    up[child] = node
                    by[child] = number[k]
                    queue[filled] = child
                    filled += 1
    size = np.ones(count, np.int64)
    heavy = np.full(count, -1, np.int64)
    for k in range(count - 1, -1, -1):
        node = queue[k]
        if up[node] >= 0:
            size[up[node]] += size[node]
            if heavy[up[node]] < 0 or size[node] > size[heavy[up[node]]]:
                heavy[up[node]] = node
    # A subtree takes consecutive positions that end with its own node; the heavy child's come first.
    end = np.empty(count, np.int64)
    used = np.zeros(count, np.int64)
    level = np.zeros(count, np.int32)
    offset = 0
    depth = 1
    for k in range(count):
        node = queue[k]
        above = up[node]
        if above < 0:
            offset += size[node]
            end[node] = offset
        elif node == heavy[above]:
            level[node] = level[above]
            end[node] = end[above] - size[above] + size[node]
        else:
            level[node] = level[above] + 1
            begin = end[above] - size[above] + size[heavy[above]] + used[above]
            used[above] += size[node]
            end[node] = begin + size[node]
        depth = max(depth, level[node] + 1)
    order = np.empty(count, np.int64)
    place = np.empty(count, np.int64)
    for node in range(count):
        order[end[node] - 1] = node
        place[node] = end[node] - 1
    parent = np.empty(count, np.int64)
    link = np.empty(count, np.int64)
    slot = np.empty(count, np.int32)
    for k in range(count):
        node = order[k]
        parent[k] = place[up[node]] if up[node] >= 0 else -1
        link[k] = by[node]
        slot[k] = level[node]
    return order, place, parent, link, slot, depth


def prepare(tree: TreePlan, numbers: Sums) -> tuple[Float, ...]:
    """The link to the parent and the shunts of each node, in order of position: g, c, g, c."""
    return (
        np.append(numbers.link_g, 0.0)[tree.link],
        np.append(numbers.link_c, 0.0)[tree.link],
        numbers.shunt_g[tree.order],
        numbers.shunt_c[tree.order],
    )


def solve(tree: TreePlan, values: tuple[Float, ...], s: Complex, load: Load, wanted: Indices) -> Complex:
    """Voltages of the inner nodes `wanted` at each s, (wanted, columns, points); Re s and Im s >= 0."""
    starts, ends = tree.place[load.nodes], tree.place[wanted]
    carry, carried = _mark(tree.parent, starts)
    keep, kept = _mark(tree.parent, ends)
    places = (tree.parent, tree.own, tree.target, keep, carry)
    answer = np.empty((len(wanted), load.columns, len(s)), dtype=np.complex128)

    # Small trees take several blocks at a time, so that what Python does between them does not count.
    several = BLOCK * max(1, min(_TOGETHER // len(tree.parent), len(s) // (4 * BLOCK)))

    def work(start: int) -> None:
        points = slice(start, min(start + several, len(s)))
        size = points.stop - start
        here = np.full((-(-size // BLOCK), BLOCK), s[points][-1])  # the last point fills an incomplete block
        here.reshape(-1)[:size] = s[points]
        currents = np.zeros((carried, load.columns, 2, here.size))
        flow = load.at(s[points], points)
        currents[carry[starts], :, 0, :size] = flow.real
        currents[carry[starts], :, 1, :size] = flow.imag
        volts = np.empty((len(ends), load.columns, 2, here.size))
        _blocks(
            values, places, here.real.copy(), here.imag.copy(), tree.depth, currents, keep[ends], kept, volts
        )
        answer[:, :, points] = volts[:, :, 0, :size] + 1j * volts[:, :, 1, :size]

    run_blocks(work, range(0, len(s), several))
    return answer


@compiled
def _blocks(
    values: Any,
    places: Any,
    re: Float,
    im: Float,
    depth: int,
    currents: Float,
    rows: Indices,
    kept: int,
    volts: Float,
) -> None:
    """One block after another: from `currents`, (.., columns, 2, points), `volts` of the kept `rows`."""
    own = np.empty((currents.shape[0], currents.shape[1], 2, BLOCK))
    shares = np.empty((kept, 2, BLOCK))
    found = np.empty((kept, currents.shape[1], 2, BLOCK))
    for block in range(len(re)):
        points = slice(block * BLOCK, block * BLOCK + BLOCK)
        own[:] = currents[:, :, :, points]
        found[:] = 0.0
        _sweep(values, places, re[block], im[block], depth, own, shares, found)
        _descend(places[0], places[3], shares, found)
        for k in range(len(rows)):
            volts[k, :, :, points] = found[rows[k]]


@compiled
def _mark(parent: Indices, starts: Indices) -> tuple[Any, int]:
    """Numbers, in order of position, for the nodes `starts` and all above them; -1 for the others."""
    number = np.full(len(parent), -1, np.int32)
    for start in starts:
        k = start
        while k >= 0 and number[k] < 0:
            number[k] = 0
            k = parent[k]
    count = 0
    for k in range(len(parent)):
        if number[k] >= 0:
            number[k] = count
            count += 1
    return number, count


@compiled
def _sweep(
    values: Any, places: Any, re: Float, im: Float, depth: int, currents: Float, shares: Float, volts: Float
) -> None:
    """One pass from the leaves to the roots: shares, volts as far as current gives them, currents added up.

    Longer than a screen, because loops over f become vector instructions only where the compiler sees the
    arrays they write being made: nothing here may move to a function of its own.
    """
    link_g, link_c, shunt_g, shunt_c = values
    parent, own, target, keep, carry = places
    partial = np.zeros((depth + 1, 2, BLOCK))
    seen = np.empty((2, BLOCK))
    hanging = np.empty((2, BLOCK))
    for k in range(len(parent)):
        here = partial[np.uint32(own[k])]
        g, c, g0, c0 = link_g[k], link_c[k], shunt_g[k], shunt_c[k]
        if keep[k] >= 0 or carry[k] >= 0:
            for f in range(BLOCK):
                hanging[0, f] = here[0, f] + (g0 + re[f] * c0)
                hanging[1, f] = here[1, f] + im[f] * c0
            above = carry[parent[k]] if parent[k] >= 0 else -1
            _special(g, c, hanging, re, im, keep[k], carry[k], above, currents, shares, volts)
        if c == 0.0:
            for f in range(BLOCK):
                a = here[0, f] + (g0 + re[f] * c0)
                b = here[1, f] + im[f] * c0
                d = a + g
                square = b * b
                scale = g / (d * d + square)
                seen[0, f] = (a * d + square) * scale
                seen[1, f] = g * b * scale
                here[0, f] = 0.0
                here[1, f] = 0.0
        else:
            for f in range(BLOCK):
                a = here[0, f] + (g0 + re[f] * c0)
                b = here[1, f] + im[f] * c0
                x = g + re[f] * c
                y = im[f] * c
                scale = 1.0 / ((a + x) * (a + x) + (b + y) * (b + y))
                fed = x * x + y * y
                hung = a * a + b * b
                seen[0, f] = (x * hung + a * fed) * scale
                seen[1, f] = (y * hung + b * fed) * scale
                here[0, f] = 0.0
                here[1, f] = 0.0
        # By now the slot is clear, which matters where the parent's is the same one.
        there = partial[np.uint32(target[k])]
        for f in range(BLOCK):
            there[0, f] += seen[0, f]
            there[1, f] += seen[1, f]


@compiled
def _special(
    g: float,
    c: float,
    hanging: Float,
    re: Float,
    im: Float,
    row: int,
    own: int,
    above: int,
    currents: Float,
    shares: Float,
    volts: Float,
) -> None:
    """At a kept node its share y/(y + Y) of the parent's voltage, and J/(y + Y); the share of J handed up."""
    share = np.empty((2, BLOCK))
    inverse = np.empty((2, BLOCK))
    for f in range(BLOCK):
        x = g + re[f] * c
        y = im[f] * c
        dx = hanging[0, f] + x
        dy = hanging[1, f] + y
        scale = 1.0 / (dx * dx + dy * dy)
        inverse[0, f] = dx * scale
        inverse[1, f] = -dy * scale
        share[0, f] = (x * dx + y * dy) * scale
        share[1, f] = (y * hanging[0, f] - x * hanging[1, f]) * scale
    if row >= 0:
        shares[row] = share
    for column in range(currents.shape[1] if own >= 0 else 0):
        if row >= 0:
            _add_product(inverse, currents[own, column], volts[row, column])
        if above >= 0:
            _add_product(share, currents[own, column], currents[above, column])


@compiled
def _add_product(first: Float, second: Float, into: Float) -> None:
    """Add first x second, complex, to `into`; each (2, BLOCK)."""
    for f in range(BLOCK):
        re = first[0, f] * second[0, f] - first[1, f] * second[1, f]
        im = first[0, f] * second[1, f] + first[1, f] * second[0, f]
        into[0, f] += re
        into[1, f] += im


@compiled
def _descend(parent: Indices, keep: Any, shares: Float, volts: Float) -> None:
    """Each kept node's voltage from its parent's, from the roots down."""
    for k in range(len(parent) - 1, -1, -1):
        if keep[k] >= 0 and parent[k] >= 0:
            for column in range(volts.shape[1]):
                _add_product(shares[keep[k]], volts[keep[parent[k]], column], volts[keep[k], column])
