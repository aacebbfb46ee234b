"""The evidence: all compared curves at all their points as one long row of numbers, with what each is worth.

What a difference counts: it is held against the size of the two values and against what is allowed. A point
weighs 1/(allowed^2 + (|exact|^2 + |other|^2) x 1e-6), so that decades of a stopband count as much as the
passband, a point below a noise floor next to nothing, and no single point more than a thousand times what any
other one may.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..curves import Analysis
from ..errors import CircuitError
from ..exact import Drive, Solution, require_solvable, solver_for

Complex = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]
Rows = npt.NDArray[np.int64]

RESOLVED = 1e-3  # differences smaller than this share of a value count for less than in proportion


@dataclass(frozen=True, eq=False)
class Observed:
    """One curve of the results beside the exact one.

    name: as in reports, `v(out)`; axis: (points,), Hz, or one 0 for an operating point
    nodes: names of the two nodes whose voltage it is, ground `"0"`, or () where it is a current
    source: the part whose current it is, else None
    exact, other: (points,), V or A; allowed: (points,), how far they may lie apart, inf where anything may
    """

    name: str
    analysis: Analysis
    axis: Float
    nodes: tuple[str, ...]
    source: str | None
    exact: npt.NDArray[Any]
    other: npt.NDArray[Any]
    allowed: Float

    @property
    def granted(self) -> Float:
        """How far off a value of the other's size may lie, (points,).

        What is allowed stands for the exact value. Where the other is greater, it has the share of its own
        value that the curve is allowed at its best point.
        """
        sizes = np.abs(self.exact)
        told = np.isfinite(self.allowed) & (sizes > 0)
        with np.errstate(over="ignore"):
            share = float(np.min(self.allowed[told] / sizes[told], initial=math.inf))
        return self.allowed if share >= 1 else np.maximum(self.allowed, share * np.abs(self.other))

    @property
    def differs(self) -> bool:
        """True if any point lies further off than allowed."""
        return not bool((np.abs(self.other - self.exact) <= self.allowed).all())


@dataclass(frozen=True, eq=False)
class Block:
    """The curves of one analysis at one axis. points: where its points stand in the row of all points."""

    analysis: Analysis
    axis: Float
    curves: tuple[Observed, ...]
    points: slice

    @property
    def s(self) -> npt.NDArray[Any]:
        """The points in rad/s, (points,); real for an operating point."""
        return np.zeros(1) if self.analysis == "operating point" else 2j * math.pi * self.axis

    def drive(self, network: Network) -> Complex:
        """What each part drives the network with, (parts,)."""
        drive = np.zeros(len(network), dtype=np.complex128)
        dc = self.analysis == "operating point"
        for name, source in network.sources.items():
            drive[network.part_index(name)] = source.operating_value if dc else source.phasor
        return drive

    def across(self, network: Network, solution: Solution) -> npt.NDArray[Any]:
        """What a solution gives for each curve, (curves, solved points)."""
        rows = []
        for curve in self.curves:
            if curve.source is not None:
                assert solution.source_currents is not None
                rows.append(solution.source_currents[network.part_index(curve.source)])
            else:
                a, b = (network.node_index(node) for node in curve.nodes)
                rows.append(solution.voltages[a] - solution.voltages[b])
        return np.stack(rows)

    @property
    def currents_too(self) -> bool:
        """True if one of the curves is a current."""
        return any(curve.source is not None for curve in self.curves)


@dataclass(frozen=True, eq=False)
class Evidence:
    """Curves as one row of values: block by block, in a block curve by curve. `points` counts all axes."""

    blocks: tuple[Block, ...]
    points: int

    @property
    def curves(self) -> tuple[Observed, ...]:
        """All curves, block by block."""
        return tuple(curve for block in self.blocks for curve in block.curves)

    @cached_property
    def exact(self) -> Complex:
        """The exact values, (values,)."""
        return self._row(lambda curve: curve.exact)

    @cached_property
    def other(self) -> Complex:
        """The values held against them, (values,)."""
        return self._row(lambda curve: curve.other)

    @cached_property
    def allowed(self) -> Float:
        """How far they may lie from what a cause predicts, (values,)."""
        return self._row(lambda curve: curve.granted).real

    @cached_property
    def weight(self) -> Float:
        """The weight of each squared difference, (values,); see the module."""
        sizes = np.abs(self.exact) ** 2 + np.abs(self.other) ** 2
        spread = np.square(self.allowed) + RESOLVED**2 * sizes
        return np.asarray(1 / np.maximum(spread, np.finfo(float).tiny))

    @cached_property
    def at(self) -> Rows:
        """The point each value belongs to, (values,)."""
        rows = [np.arange(b.points.start, b.points.stop) for b in self.blocks for _ in b.curves]
        return np.concatenate(rows)

    @cached_property
    def total(self) -> float:
        """The weighted sum of the squared differences."""
        return self.squared(self.exact)

    @cached_property
    def differing(self) -> frozenset[str]:
        """The names of the curves that differ in one analysis or another."""
        return frozenset(curve.name for block in self.blocks for curve in block.curves if curve.differs)

    def squared(self, predicted: Complex) -> float:
        """The weighted sum of the squared differences that a prediction (values,) leaves."""
        with np.errstate(over="ignore", invalid="ignore"):
            left = float(np.sum(self.weight * np.abs(self.other - predicted) ** 2))
        return left if math.isfinite(left) else math.inf

    def explained(self, predicted: Complex) -> float:
        """The share of the squared difference that is gone, 0 to 1."""
        return max(0.0, 1 - self.squared(predicted) / self.total) if self.total else 1.0

    def row(self, of: Callable[[Block], npt.NDArray[Any]]) -> Complex:
        """A row of values from what is given for each block, (curves, points)."""
        return np.concatenate([np.asarray(of(block), dtype=np.complex128).ravel() for block in self.blocks])

    def point_row(self, of: Callable[[Block], npt.NDArray[Any]]) -> Complex:
        """A row of points from what is given for each block, (its points,)."""
        return np.concatenate([np.asarray(of(block), dtype=np.complex128) for block in self.blocks])

    def _row(self, of: Callable[[Observed], npt.NDArray[Any]]) -> Complex:
        return self.row(lambda block: np.stack([of(curve) for curve in block.curves]))

    def predicted_by(self, network: Network, values: Float | None = None) -> Complex:
        """The same curves of another network (or of other part values), (values,). Raises RcnetError."""
        solver = solver_for(network)

        def solved(block: Block) -> npt.NDArray[Any]:
            require_solvable(network, dc=not block.s.all())
            solution = solver.solve(
                block.s,
                Drive(block.drive(network)),
                wanted=[network.node_index(node) for curve in block.curves for node in curve.nodes],
                values=values,
                currents_too=block.currents_too,
            )
            return block.across(network, solution)

        return self.row(solved)


def evidence_of(observed: Sequence[Observed], most_points: int = 1000) -> Evidence:
    """The curves sorted by analysis and axis; of longer ones this many points, spread evenly."""
    groups: dict[tuple[str, bytes], list[Observed]] = {}
    for curve in observed:
        groups.setdefault((curve.analysis, curve.axis.tobytes()), []).append(thinned(curve, most_points))
    blocks: list[Block] = []
    start = 0
    for (analysis, _), curves in groups.items():
        stop = start + len(curves[0].axis)
        known: Analysis = "operating point" if analysis == "operating point" else "ac"
        blocks.append(Block(known, curves[0].axis, tuple(curves), slice(start, stop)))
        start = stop
    return Evidence(tuple(blocks), start)


def thinned(curve: Observed, most: int) -> Observed:
    """The curve at no more than so many of its points."""
    if len(curve.axis) <= most:
        return curve
    kept = np.unique(np.linspace(0, len(curve.axis) - 1, most).astype(int))
    return Observed(
        curve.name,
        curve.analysis,
        curve.axis[kept],
        curve.nodes,
        curve.source,
        curve.exact[kept],
        curve.other[kept],
        curve.allowed[kept],
    )


def require_about(network: Network, observed: Sequence[Observed]) -> None:
    """Raise CircuitError where a curve is of a node or part the network does not have, or of ill shape."""
    nodes = set(network.nodes)
    for curve in observed:
        voltage = len(curve.nodes) == 2 and set(curve.nodes) <= nodes
        known = voltage if curve.source is None else curve.source in network
        if not known or curve.analysis not in ("ac", "operating point"):
            raise CircuitError(
                f"{curve.name} ({curve.analysis}) is no voltage or current of this network.",
                remedy="Give ac curves and operating points of its nodes and voltage sources.",
            )
        shapes = {np.shape(row) for row in (curve.axis, curve.exact, curve.other, curve.allowed)}
        if len(shapes) > 1 or not len(curve.axis):
            raise CircuitError(
                f"the axis and the values of {curve.name} have the shapes {sorted(shapes)!r}.",
                remedy="Give as many of each, at least one.",
            )


def contribution(evidence: Evidence, network: Network, source: str) -> Complex:
    """What one source alone does to each curve, (values,)."""
    row = network.part_index(source)

    def solved(block: Block) -> npt.NDArray[Any]:
        drive = np.zeros(len(network), dtype=np.complex128)
        drive[row] = block.drive(network)[row]
        solution = solver_for(network).solve(block.s, Drive(drive), currents_too=block.currents_too)
        return block.across(network, solution)

    return evidence.row(solved)


def value_table(network: Network, changed: Mapping[str, float]) -> Float:
    """The values of all parts with some of them changed, (parts,)."""
    table = network.arrays().values.copy()
    for name, value in changed.items():
        table[network.part_index(name)] = value
    return table
