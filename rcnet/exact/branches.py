"""A passive network between fixed potentials as weighted branches between its inner nodes.

With A the branch-node incidence matrix over the inner nodes and the potentials u of the fixed nodes known,
Kirchhoff's current law reads

    (A^T g A + s A^T c A) v = (b_G + s b_C) u + j,

g and c the diagonal matrices of the branches' conductances and capacitances. Nothing is ever summed into a
diagonal, so that the branches' own digits reach the answer.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from .solver import solver_for

Float = npt.NDArray[np.float64]
Indices = npt.NDArray[np.int64]

_MANY = 2000  # branches, from which on compiled graph code pays for its start


@dataclass(frozen=True)
class Branches:
    """The branches that touch an inner node.

    inner: (inner,), node indices of the network; fixed: the other nodes, ground first
    ends: (branches, 2), rows of `inner`, -1 for a fixed node
    held: (branches,), which fixed node, as a node index, the branch ends on; -1 where it ends on none
    conductance, capacitance: (branches,), siemens and farad; one of the two is zero in each branch
    """

    inner: Indices
    fixed: tuple[int, ...]
    ends: Indices
    held: Indices
    conductance: Float
    capacitance: Float

    def across(self, values: Float) -> Float:
        """A v: (inner, columns) node values to (branches, columns) differences."""
        padded = np.vstack([values, np.zeros((1, values.shape[1]))])
        return np.asarray(padded[self.ends[:, 0]] - padded[self.ends[:, 1]])

    def gathered(self, flows: Float) -> Float:
        """A^T i: (branches, columns) currents to the (inner, columns) currents leaving each node."""
        total = np.zeros((len(self.inner) + 1, flows.shape[1]))
        np.add.at(total, self.ends[:, 0], flows)
        np.add.at(total, self.ends[:, 1], -flows)
        return total[:-1]

    def groups(self, weights: Float) -> list[Indices]:
        """The groups of inner nodes that branches of positive weight join but do not tie to a fixed node.

        Each group is an array of rows of `inner`; a node that no such branch touches is a group of its own.
        """
        label = _components(len(self.inner) + 1, self.ends[weights > 0])  # -1 stands for all that is fixed
        loose = np.flatnonzero(label[:-1] != label[-1])
        if not len(loose):
            return []
        order = loose[np.argsort(label[loose], kind="stable")]
        cuts = np.flatnonzero(np.diff(label[order])) + 1
        return [np.asarray(rows, dtype=np.int64) for rows in np.split(order, cuts) if len(rows)]


def _components(count: int, ends: Indices) -> Indices:
    """A label for each of `count` nodes, equal for those that edges between `ends` join; -1 is the
    last node.
    """
    if len(ends) > _MANY:
        import scipy.sparse
        import scipy.sparse.csgraph

        a, b = (ends % count).T
        graph = scipy.sparse.coo_matrix((np.ones(len(a)), (a, b)), shape=(count, count))
        return np.asarray(scipy.sparse.csgraph.connected_components(graph, directed=False)[1], dtype=np.int64)
    parent = list(range(count))

    def root(node: int) -> int:
        while parent[node] != node:
            parent[node] = parent[parent[node]]
            node = parent[node]
        return node

    for a, b in (ends % count).tolist():
        parent[root(a)] = root(b)
    return np.array([root(node) for node in range(count)], dtype=np.int64)


def branches_of(network: Network) -> Branches | None:
    """The branches of a network of R, C, V and I whose voltage sources form a tree from ground, else None."""
    stiff = solver_for(network).stiff
    if stiff is None or stiff.controlled:
        return None
    return branches_between(network, stiff.nodes)


def branches_between(network: Network, fixed: Iterable[int]) -> Branches:
    """The resistors and capacitors of a network, the nodes `fixed` held."""
    arrays = network.arrays()
    holding = tuple(fixed)
    row_of = np.zeros(arrays.node_count, dtype=np.int64)
    row_of[list(holding)] = -1
    inner = np.flatnonzero(row_of == 0)
    row_of[inner] = np.arange(len(inner))
    kinds = arrays.kinds
    passive = np.flatnonzero((kinds == ord("R")) | (kinds == ord("C")))
    nodes = arrays.nodes[passive, :2]
    ends = row_of[nodes]
    kept = (nodes[:, 0] != nodes[:, 1]) & (ends >= 0).any(axis=1)
    passive, nodes, ends = passive[kept], nodes[kept], ends[kept]
    resistive = kinds[passive] == ord("R")
    values = arrays.values[passive]
    held = np.where(ends[:, 0] < 0, nodes[:, 0], np.where(ends[:, 1] < 0, nodes[:, 1], -1))
    conductance = np.where(resistive, 1.0 / np.where(resistive, values, 1.0), 0.0)
    return Branches(inner, holding, ends, held, conductance, np.where(resistive, 0.0, values))
