"""The resistance that a capacitor sees, others open or shorted, for the method of time constants."""

from __future__ import annotations

import numpy as np

from ..circuit import Network, Part, Source
from ..errors import RcnetError, UndecidedError
from ..exact import node_pair, output_impedance
from .arms import Mesh, resistor
from .formula import Formula, name, number


def resistance_seen(network: Network, capacitor: str, shorted: frozenset[str], *, loop_free: bool) -> Formula:
    """Between the ends of a capacitor, sources dead, the capacitors `shorted` wires, all others open, ohm.

    loop_free: no controlled source feeds back, so that each is dead with the sources. Raises UndecidedError
    where it is zero or infinite.
    """
    label = _labels(network, shorted, loop_free=loop_free)
    a, b = (label[network.node_index(node)] for node in network.part(capacitor).nodes)
    if a == b:
        raise UndecidedError(f"{capacitor} is short-circuited.")
    if loop_free:
        arms = []
        for part in network.parts:
            if part.kind == "R":
                first, second = (label[network.node_index(node)] for node in part.nodes)
                arms.append((first, second, resistor(name(part.name, part.value))))
        arm = Mesh(arms, (a, b)).single(a, b)
        if arm is not None and arm.resistance is not None:
            return arm.resistance
    return number(_numeric(network, capacitor, shorted), 10)


def _labels(network: Network, shorted: frozenset[str], *, loop_free: bool) -> list[int]:
    """For each node the one that wires join it with."""
    label = list(range(len(network.nodes)))

    def find(node: int) -> int:
        while label[node] != node:
            node = label[node]
        return node

    for part in network.parts:
        wire = part.kind == "V" or (part.kind == "E" and loop_free) or part.name in shorted
        if wire:
            a, b = (find(network.node_index(node)) for node in part.nodes[:2])
            label[max(a, b)] = min(a, b)
    return [find(node) for node in range(len(label))]


def _numeric(network: Network, capacitor: str, shorted: frozenset[str]) -> float:
    still = Network()
    for part in network.parts:
        if part.kind == "C":
            if part.name in shorted:
                still.add_source(Source(f"Vshorted{part.name}", (part.nodes[0], part.nodes[1])))
        elif part.kind in "VI":
            still.add_source(Source(part.name, (part.nodes[0], part.nodes[1])))
        else:
            still.add_part(part)
    ends = network.part(capacitor).nodes
    try:
        for node in ends:
            still.node_index(node)
        pair = node_pair(still, " ".join(ends))
        seen = complex(output_impedance(still, np.zeros(1), pair)[0]).real
    except RcnetError as exc:
        raise UndecidedError(f"{capacitor} sees no resistance: {exc.message}") from exc
    if seen <= 0:
        raise UndecidedError(f"{capacitor} sees no resistance.")
    return seen


def capacitors(network: Network) -> list[Part]:
    """The capacitors between two different nodes."""
    return [part for part in network.parts if part.kind == "C" and part.nodes[0] != part.nodes[1]]
