"""A network between fixed potentials as arrays: links among its inner nodes, shunts to fixed ones, drive."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Indices = npt.NDArray[np.int64]
Numbers = npt.NDArray[Any]


@dataclass(frozen=True)
class Inner:
    """Where each admittance of a network goes once the fixed nodes are set apart.

    count: inner nodes; index: (nodes,), a node's number among the inner ones, -1 where its potential is fixed
    links: (links, 2), inner numbers; parallel parts share a link
    components: connected parts of the graph of links
    link_rows, link_at: (n,), the admittances on links and the link of each
    shunt_rows, shunt_at: (n,), the admittances from an inner node to a fixed one, and that inner node
    feed_rows, feed_at, feed_from: those of them whose fixed node is not ground, and that node
    """

    count: int
    index: Indices
    links: Indices
    components: int
    link_rows: Indices
    link_at: Indices
    shunt_rows: Indices
    shunt_at: Indices
    feed_rows: Indices
    feed_at: Indices
    feed_from: Indices

    @property
    def is_forest(self) -> bool:
        """True if the links close no loop."""
        return len(self.links) == self.count - self.components


def inner_network(node_count: int, ends: Indices, fixed: Sequence[int]) -> Inner:
    """Sort the admittances between `ends`, (admittances, 2), by what their ends are."""
    import scipy.sparse
    import scipy.sparse.csgraph

    free = np.ones(node_count, dtype=bool)
    free[list(fixed)] = False
    index = np.where(free, np.cumsum(free) - 1, -1)
    count = int(free.sum())
    a, b = index[ends[:, 0]], index[ends[:, 1]]
    link_rows = np.flatnonzero((a >= 0) & (b >= 0) & (a != b))
    low, high = np.minimum(a[link_rows], b[link_rows]), np.maximum(a[link_rows], b[link_rows])
    keys, link_at = np.unique(low * max(count, 1) + high, return_inverse=True)
    links = np.stack([keys // max(count, 1), keys % max(count, 1)], axis=1)
    shunt_rows = np.flatnonzero((a >= 0) != (b >= 0))
    shunt_at = np.maximum(a[shunt_rows], b[shunt_rows])
    from_node = np.where(a[shunt_rows] >= 0, ends[shunt_rows, 1], ends[shunt_rows, 0])
    feeding = from_node != 0
    graph = scipy.sparse.coo_matrix((np.ones(len(links)), (links[:, 0], links[:, 1])), shape=(count, count))
    components = int(scipy.sparse.csgraph.connected_components(graph, directed=False)[0]) if count else 0
    return Inner(
        count,
        index,
        links,
        components,
        link_rows,
        link_at.reshape(-1),
        shunt_rows,
        shunt_at,
        shunt_rows[feeding],
        shunt_at[feeding],
        from_node[feeding],
    )


@dataclass(frozen=True)
class Sums:
    """Conductance, siemens, and capacitance, farad, of every link and of every node's shunts."""

    link_g: Float
    link_c: Float
    shunt_g: Float
    shunt_c: Float


def sums(inner: Inner, conductance: Float, capacitance: Float) -> Sums:
    """Parallel admittances added up; both arguments (admittances,). Only positive numbers are added."""

    def added(rows: Indices, at: Indices, numbers: Float, size: int) -> Float:
        return np.bincount(at, weights=numbers[rows], minlength=size).astype(np.float64)

    return Sums(
        added(inner.link_rows, inner.link_at, conductance, len(inner.links)),
        added(inner.link_rows, inner.link_at, capacitance, len(inner.links)),
        added(inner.shunt_rows, inner.shunt_at, conductance, inner.count),
        added(inner.shunt_rows, inner.shunt_at, capacitance, inner.count),
    )


@dataclass(frozen=True)
class Load:
    """The currents that drive the inner nodes: J = constant + s slope + given.

    nodes: (rows,), inner numbers, each once
    constant, slope: (rows, columns), one column for each right-hand side
    given: (rows, points), amperes added to the first column, or None
    """

    nodes: Indices
    constant: Complex
    slope: Complex
    given: Numbers | None = None

    @property
    def columns(self) -> int:
        """How many right-hand sides."""
        return int(self.constant.shape[1])

    def at(self, s: Complex, points: slice) -> Complex:
        """J at the points s, (rows, columns, len(s)); `points` says where in `given` they stand."""
        currents = self.constant[:, :, None] + self.slope[:, :, None] * s
        if self.given is not None:
            currents[:, 0] += self.given[:, points]
        return currents


def load(
    inner: Inner,
    conductance: Float,
    capacitance: Float,
    potentials: Complex,
    injected: dict[int, complex],
    given: Numbers | None,
) -> Load:
    """The currents into inner nodes from fixed potentials and from current sources.

    potentials: (nodes, columns), volts, of the fixed nodes
    injected: amperes into each node by its number in the network, first column
    given: (nodes, points), amperes into each node, first column, or None
    """
    extra = np.array([node for node in injected if inner.index[node] >= 0], dtype=np.int64)
    many = np.empty(0, dtype=np.int64)
    if given is not None:
        many = np.flatnonzero(given.any(axis=1) & (inner.index >= 0))
    at = np.concatenate([inner.feed_at, inner.index[extra], inner.index[many]])
    nodes, place = np.unique(at, return_inverse=True)
    feeds = len(inner.feed_at)
    constant = np.zeros((len(nodes), potentials.shape[1]), dtype=np.complex128)
    slope = np.zeros_like(constant)
    volts = potentials[inner.feed_from]
    np.add.at(constant, place[:feeds], conductance[inner.feed_rows][:, None] * volts)
    np.add.at(slope, place[:feeds], capacitance[inner.feed_rows][:, None] * volts)
    for row, node in zip(place[feeds:], extra.tolist(), strict=False):
        constant[row, 0] += injected[node]
    rows = None
    if given is not None:
        rows = np.zeros((len(nodes), given.shape[1]), dtype=given.dtype)
        rows[place[feeds + len(extra) :]] = given[many]
    return Load(nodes, constant, slope, rows)
