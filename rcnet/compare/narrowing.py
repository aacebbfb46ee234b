"""Where to look in a network too large to go through part by part.

Two ways lead there: small changes that look like the difference (the adjoint solution gives all of them at
once), and a sample spread over the whole network, taken more closely around what fits best.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, Network
from ..exact.adjoint import Equations, unit_output
from .evidence import Block, Evidence, Float

Rows = npt.NDArray[np.int64]

TAKEN = 40  # nodes taken at a time, with the parts on them


class Neighbours:
    """The inner nodes of a network, which parts touch each, and which nodes lie how far apart."""

    def __init__(self, network: Network) -> None:
        self.network = network
        arrays = network.arrays()
        self.passive = np.flatnonzero((arrays.kinds == ord("R")) | (arrays.kinds == ord("C")))
        ends = arrays.nodes[self.passive, :2]
        rows = np.concatenate([self.passive, self.passive])
        nodes = np.concatenate([ends[:, 0], ends[:, 1]])
        order = np.argsort(nodes, kind="stable")
        self._rows, self._nodes = rows[order], nodes[order]
        inner = ends[(ends != 0).all(axis=1)]
        both = np.concatenate([inner, inner[:, ::-1]])
        self._edges = both[np.argsort(both[:, 0], kind="stable")]

    def parts_at(self, nodes: Iterable[int]) -> list[str]:
        """The resistors and capacitors that touch these nodes."""
        found: dict[int, None] = {}
        for node in nodes:
            start, stop = np.searchsorted(self._nodes, [node, node + 1])
            found.update(dict.fromkeys(self._rows[start:stop].tolist()))
        return [self.network.names[row] for row in found]

    def in_order(self, starts: Iterable[int], most: int) -> list[int]:
        """Nodes in order of their distance from `starts` (ground does not count as a way), `most` of them."""
        order = [node for node in dict.fromkeys(starts) if node]
        seen = set(order)
        for node in order:
            if len(order) >= most:
                break
            low, high = np.searchsorted(self._edges[:, 0], [node, node + 1])
            fresh = [n for n in self._edges[low:high, 1].tolist() if n not in seen]
            seen.update(fresh)
            order += dict.fromkeys(fresh)
        return order[:most]

    def spread(self, starts: Iterable[int], reach: int) -> list[int]:
        """A sample of the `reach` nodes nearest to `starts`, evenly by distance."""
        order = self.in_order(starts, reach)
        picks = np.unique(np.linspace(0, len(order) - 1, min(len(order), TAKEN)).astype(int))
        return [order[k] for k in picks]


def most_telling(network: Network, evidence: Evidence) -> list[int]:
    """The nodes at which a small resistor or capacitor to ground looks most like the difference."""
    count = len(network.nodes)
    ends = np.stack([np.arange(1, count), np.zeros(count - 1, dtype=np.int64)], axis=1)
    alike = np.zeros(count - 1)
    for block in evidence.blocks:
        slopes = _slopes(network, block, ends)
        s = np.abs(block.s)[None, :, None]
        for shape in (slopes, slopes * (1j * s)):
            alike = np.maximum(alike, _likeness(block, shape))
    return [int(k) + 1 for k in np.argsort(-alike)[: TAKEN // 2]]


def _slopes(network: Network, block: Block, ends: Rows) -> npt.NDArray[np.complex128]:
    """What a small admittance between each pair does to each voltage: (pairs, points, curves)."""
    equations = Equations(network, block.s)
    v = equations.forward(block.drive(network)).across(ends[:, 0], ends[:, 1])
    found = []
    for curve in block.curves:
        if curve.source is None:
            pair = (network.node_index(curve.nodes[0]), network.node_index(curve.nodes[1]))
            w = equations.transposed(unit_output(network, pair, len(block.s)))
            found.append(-v * w.across(ends[:, 0], ends[:, 1]))
        else:
            found.append(np.zeros(v.shape, dtype=np.complex128))
    return np.stack(found, axis=-1)


def _likeness(block: Block, slopes: npt.NDArray[np.complex128]) -> Float:
    """The share of the difference that each slope explains, (pairs,)."""
    alone = Evidence((replace(block, points=slice(0, len(block.axis))),), len(block.axis))
    shape = (len(block.curves), -1)
    weight = alone.weight.reshape(shape).T
    apart = (alone.other - alone.exact).reshape(shape).T
    with np.errstate(all="ignore"):
        own = (weight * np.abs(slopes) ** 2).sum(axis=(1, 2))
        shared = (weight * (slopes.conj() * apart).real).sum(axis=(1, 2))
        share = np.nan_to_num(shared**2 / own, posinf=0.0)
    return np.asarray(share)


def driven_nodes(network: Network) -> list[int]:
    """The nodes of the sources, from which the rest is reached."""
    found = [network.node_index(node) for source in network.sources.values() for node in source.nodes]
    return [node for node in dict.fromkeys(found) if node]


def nodes_of(network: Network, names: Sequence[str]) -> list[int]:
    """The nodes of parts, ground left out."""
    nodes = [network.node_index(node) for name in names for node in network.part(name).nodes[:2]]
    ground = network.node_index(GROUND)
    return [node for node in dict.fromkeys(nodes) if node != ground]
