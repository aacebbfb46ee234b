"""The pattern of a sparse symmetric elimination: order, elimination tree, supernodes, index lists.

J. Liu, SIAM J. Matrix Anal. Appl. 11:134-172, 1990 (elimination trees); J. Liu, SIAM Rev. 34:82-109, 1992
(multifrontal method). Found once for a network, whatever its values and frequencies.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from .compiled import compiled
from .inner import Indices, Inner

_PADDING = 0.1  # share of a joined front that may be zeros: fewer, larger fronts run faster


@dataclass(frozen=True)
class LdlPlan:
    """What elimination in fronts needs to know before it sees numbers; node numbers here follow the order.

    place: (nodes,), an inner node's number in the order; node_front: (nodes,), the front a node goes in
    first: (fronts + 1,), the first node of each front
    row_start: (fronts + 1,); rows: what is left of each front's nodes once its own are gone, ascending
    seat: for each of `rows`, its place in the parent's front
    parent: (fronts,), -1 at a root; fronts come in postorder
    link_start: (fronts + 1,); link, link_seat: the links assembled into each front, and where
    largest: entries of the greatest front; stack: most entries of waiting updates
    """

    place: Indices
    node_front: Indices
    first: Indices
    row_start: Indices
    rows: Indices
    seat: Indices
    parent: Indices
    link_start: Indices
    link: Indices
    link_seat: Indices
    largest: int
    stack: int


def analyse(inner: Inner) -> LdlPlan:
    """The plan for the graph of `inner`'s links."""
    place = _fill_reducing(inner)
    start, other = _neighbours(place[inner.links], inner.count)
    up = _elimination_tree(start, other)
    later = _postordered(up)
    place = later[place]
    ends = np.sort(place[inner.links], axis=1)
    start, other = _neighbours(ends, inner.count)
    up = _elimination_tree(start, other)
    first, node_front = _fronts(up, _column_counts(start, other, up), _PADDING)
    row_start, rows = _front_rows(start, other, up, first, node_front)
    parent, seat = _seats(first, row_start, rows, node_front)
    largest, stack = _sizes(first, row_start, parent)
    link_front = node_front[ends[:, 0]]
    link = np.argsort(link_front, kind="stable")
    link_start = np.concatenate([[0], np.cumsum(np.bincount(link_front, minlength=len(parent)))])
    link_seat = _link_seats(ends[link], link_front[link], first, row_start, rows)
    return LdlPlan(
        place,
        node_front,
        first,
        row_start,
        rows,
        seat,
        parent,
        link_start.astype(np.int64),
        link,
        link_seat,
        int(largest),
        int(stack),
    )


def _fill_reducing(inner: Inner) -> Indices:
    """A minimum-degree order (A. George, J. Liu, SIAM Rev. 31:1-19, 1989), as SuperLU finds it."""
    import scipy.sparse
    import scipy.sparse.linalg

    n, (a, b) = inner.count, inner.links.T
    ones = np.ones(len(a))
    degree = np.bincount(np.concatenate([a, b]), minlength=n) + 1.0
    rows, columns = np.concatenate([a, b, np.arange(n)]), np.concatenate([b, a, np.arange(n)])
    matrix = scipy.sparse.csc_matrix((np.concatenate([-ones, -ones, degree]), (rows, columns)), shape=(n, n))
    factors = scipy.sparse.linalg.splu(
        matrix, permc_spec="MMD_AT_PLUS_A", diag_pivot_thresh=0.0, options={"SymmetricMode": True}
    )
    return np.asarray(factors.perm_c, dtype=np.int64)


def _neighbours(ends: Indices, count: int) -> tuple[Indices, Indices]:
    """Each node's neighbours, compressed: `other[start[k] : start[k + 1]]` are those of node k."""
    here = np.concatenate([ends[:, 0], ends[:, 1]])
    sorting = np.argsort(here, kind="stable")
    start = np.concatenate([[0], np.cumsum(np.bincount(here, minlength=count))]).astype(np.int64)
    return start, np.concatenate([ends[:, 1], ends[:, 0]])[sorting]


@compiled
def _elimination_tree(start: Indices, other: Indices) -> Indices:
    """The parent of each node, -1 for a root; with path compression."""
    count = len(start) - 1
    up = np.full(count, -1, np.int64)
    root = np.full(count, -1, np.int64)
    for node in range(count):
        for k in range(start[node], start[node + 1]):
            below = other[k]
            while below != -1 and below < node:
                above = root[below]
                root[below] = node
                if above == -1:
                    up[below] = node
                below = above
    return up


@compiled
def _postordered(up: Indices) -> Indices:
    """Each node's number when every subtree takes consecutive numbers."""
    count = len(up)
    size = np.ones(count, np.int64)
    for node in range(count):
        if up[node] >= 0:
            size[up[node]] += size[node]
    later = np.empty(count, np.int64)
    begin = np.zeros(count, np.int64)  # where the next child's subtree begins
    total = 0
    for node in range(count - 1, -1, -1):
        if up[node] < 0:
            base = total
            total += size[node]
        else:
            base = begin[up[node]]
            begin[up[node]] += size[node]
        begin[node] = base
        later[node] = base + size[node] - 1
    return later


@compiled
def _column_counts(start: Indices, other: Indices, up: Indices) -> Indices:
    """How many nodes are left in each node's row of the factor, itself among them."""
    count = len(up)
    counts = np.ones(count, np.int64)
    mark = np.full(count, -1, np.int64)
    for row in range(count):
        mark[row] = row
        for k in range(start[row], start[row + 1]):
            below = other[k]
            while below < row and mark[below] != row:
                mark[below] = row
                counts[below] += 1
                below = up[below]
    return counts


@compiled
def _fronts(up: Indices, counts: Indices, padding: float) -> tuple[Any, ...]:
    """Nodes joined in fronts: those of one pattern, and last child with parent where few zeros come in."""
    count = len(up)
    begin = np.empty(count, np.int64)
    zeros = np.zeros(count, np.float64)
    fronts = 0
    for node in range(count):
        begin[fronts] = node
        zeros[fronts] = 0.0
        fronts += 1
        # Join the front before with this one for as long as it is a child and the padding stays small.
        while fronts > 1 and up[begin[fronts - 1] - 1] >= begin[fronts - 1]:
            child = fronts - 2
            if up[begin[fronts - 1] - 1] > node:
                break
            wide = begin[fronts - 1] - begin[child]
            below = counts[begin[fronts - 1] - 1] - 1
            here = node - begin[fronts - 1] + counts[node]
            more = zeros[child] + zeros[fronts - 1] + wide * (here - below)
            whole = (wide + here) * (wide + here) * 0.5
            if here > below and (more > padding * whole or here - below > 16):
                break
            zeros[child] = more
            fronts -= 1
    first = np.empty(fronts + 1, np.int64)
    first[:fronts] = begin[:fronts]
    first[fronts] = count
    node_front = np.empty(count, np.int64)
    for front in range(fronts):
        for node in range(first[front], first[front + 1]):
            node_front[node] = front
    return first, node_front


@compiled
def _front_rows(
    start: Indices, other: Indices, up: Indices, first: Indices, node_front: Indices
) -> tuple[Any, ...]:
    """What is left of each front once its own nodes are gone: their neighbours and its children's."""
    fronts = len(first) - 1
    row_start = np.zeros(fronts + 1, np.int64)
    rows = np.empty(max(len(other), 16), np.int64)
    mark = np.full(len(up), -1, np.int64)
    child = np.full(fronts, -1, np.int64)  # linked lists of children
    sibling = np.full(fronts, -1, np.int64)
    for front in range(fronts):
        end = first[front + 1]
        size = row_start[front]
        found = size
        for pas in range(2):
            reader = first[front] if pas == 0 else child[front]
            while (reader < end) if pas == 0 else (reader >= 0):
                low = start[reader] if pas == 0 else row_start[reader]
                high = start[reader + 1] if pas == 0 else row_start[reader + 1]
                for k in range(low, high):
                    row = other[k] if pas == 0 else rows[k]
                    if row >= end and mark[row] != front:
                        mark[row] = front
                        if found == len(rows):
                            rows = np.concatenate((rows, np.empty(len(rows), np.int64)))
                        rows[found] = row
                        found += 1
                reader = reader + 1 if pas == 0 else sibling[reader]
        rows[size:found] = np.sort(rows[size:found])
        row_start[front + 1] = found
        if found > size:
            above = node_front[rows[size]]
            sibling[front] = child[above]
            child[above] = front
    return row_start, rows[: row_start[fronts]].copy()


@compiled
def _seats(first: Indices, row_start: Indices, rows: Indices, node_front: Indices) -> tuple[Any, ...]:
    """Each front's parent, and the place of each of its rows there."""
    fronts = len(first) - 1
    parent = np.full(fronts, -1, np.int64)
    seat = np.empty(len(rows), np.int64)
    for front in range(fronts):
        if row_start[front] == row_start[front + 1]:
            continue
        above = node_front[rows[row_start[front]]]
        parent[front] = above
        wide = first[above + 1] - first[above]
        k = row_start[above]
        for place in range(row_start[front], row_start[front + 1]):
            row = rows[place]
            if row < first[above + 1]:
                seat[place] = row - first[above]
            else:
                while rows[k] != row:
                    k += 1
                seat[place] = wide + k - row_start[above]
    return parent, seat


@compiled
def _sizes(first: Indices, row_start: Indices, parent: Indices) -> tuple[int, int]:
    """Entries of the greatest front, and the most entries of updates that wait for their parents at once."""
    fronts = len(parent)
    waiting = np.zeros(fronts, np.int64)  # entries of each front's children's updates
    largest = 0
    now = 0
    most = 0
    for front in range(fronts):
        below = row_start[front + 1] - row_start[front]
        size = first[front + 1] - first[front] + below
        largest = max(largest, size * (size - 1) // 2)
        now -= waiting[front]
        update = below * (below - 1) // 2
        now += update
        most = max(most, now)
        if parent[front] >= 0:
            waiting[parent[front]] += update
    return largest, most


@compiled
def _link_seats(ends: Indices, fronts: Indices, first: Indices, row_start: Indices, rows: Indices) -> Indices:
    """The entry of its front that each link is added to; see `ldl_kernel` for the layout."""
    seat = np.empty(len(ends), np.int64)
    for k in range(len(ends)):
        front = fronts[k]
        wide = first[front + 1] - first[front]
        low, high = row_start[front], row_start[front + 1]
        size = wide + high - low
        column = ends[k, 0] - first[front]
        if ends[k, 1] < first[front + 1]:
            row = ends[k, 1] - first[front]
        else:
            row = wide + np.searchsorted(rows[low:high], ends[k, 1])
        seat[k] = column * (size - 1) - column * (column - 1) // 2 + row - column - 1
    return seat
