"""The operating point: every source at its dc value, capacitors open, inductors short."""

from __future__ import annotations

import numpy as np

from ..circuit import Network
from .solver import Drive, Solution, require_solvable, solver_for


def operating_point(network: Network) -> dict[str, float]:
    """Node voltages by name, volts, ground left out.

    Raises UnsolvableError where a node has no path to ground for dc, or sources and inductors form a loop.
    """
    solution = solve_operating_point(network)
    return {name: float(solution.voltages[k, 0]) for k, name in enumerate(network.nodes) if k}


def source_currents(network: Network) -> dict[str, float]:
    """Currents of the independent voltage sources by name, amperes, from + through the source to -."""
    solution = solve_operating_point(network)
    assert solution.source_currents is not None
    return {
        name: float(solution.source_currents[network.part_index(name), 0])
        for name, source in network.sources.items()
        if source.kind == "V"
    }


def solve_operating_point(network: Network) -> Solution:
    """The whole solution at s = 0, one column."""
    require_solvable(network, dc=True)
    sources = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        sources[network.part_index(name)] = source.operating_value
    return solver_for(network).solve(np.zeros(1), Drive(sources), currents_too=True)
