"""What one admittance does to many curves at once, in closed form, for many places in a network together.

With y added between two nodes a curve is H - y T u/(1 + y z): u what lies across the nodes, T what an ampere
pushed through them does to the curve, z what it does to them (J. Sherman, W. Morrison, Ann. Math. Statist.
21:124-127, 1950; see `rcnet.exact.one_part`). An impedance in series with a voltage source has the same form,
with the current that the source delivers and the admittance it sees; so has a controlled source's gain.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UnsolvableError
from ..exact import Drive, Solution, solver_for
from .evidence import Block, Complex, Evidence, value_table

Numbers = npt.NDArray[Any]

_BLOCK_BYTES = 96 * 1024 * 1024


@dataclass(frozen=True, eq=False)
class Places:
    """Places in a network where one coefficient may change; the first index of each array is the place.

    across: (places, points), u; port: (places, points), z; reach: (places, values), T
    """

    across: Complex
    port: Complex
    reach: Complex

    def __len__(self) -> int:
        return len(self.across)

    def __getitem__(self, which: Any) -> Places:
        return Places(self.across[which], self.port[which], self.reach[which])

    def moved(self, change: Complex, at: npt.NDArray[np.int64]) -> Complex:
        """How far the curves move for a change (places, points) of the coefficients, (places, values)."""
        return np.asarray(-self.reach * (change * self.across / (1 + change * self.port))[:, at])

    def moved_to_short(self, at: npt.NDArray[np.int64]) -> Complex:
        """The same for an infinite change."""
        return np.asarray(-self.reach * (self.across / self.port)[:, at])

    def change_for(self, moved: Complex, at: npt.NDArray[np.int64]) -> Complex:
        """The change of each coefficient that moves each value (values,) so far, (places, values)."""
        return np.asarray(-moved / (self.reach * self.across[:, at] + self.port[:, at] * moved))


def joined(parts: Sequence[Places]) -> Places:
    """Several sets of places as one."""
    return Places(
        np.concatenate([part.across for part in parts]),
        np.concatenate([part.port for part in parts]),
        np.concatenate([part.reach for part in parts]),
    )


def between_nodes(network: Network, evidence: Evidence, ends: npt.NDArray[np.int64]) -> Places:
    """Admittances put between pairs of nodes, `ends` (places, 2)."""
    across, port, reach = [], [], []
    for block in evidence.blocks:
        solver = solver_for(network)
        own = solver.solve(block.s, Drive(block.drive(network)), wanted=np.unique(ends).tolist())
        across.append(own.voltages[ends[:, 0]] - own.voltages[ends[:, 1]])
        step = max(1, _BLOCK_BYTES // (24 * len(network.nodes) * len(block.s)))
        pushes = [_pushed(network, block, ends[k : k + step]) for k in range(0, len(ends), step)]
        port.append(np.concatenate([z for z, _ in pushes]))
        reach.append(np.concatenate([t for _, t in pushes]))
    return Places(*(np.hstack(rows).astype(np.complex128) for rows in (across, port, reach)))


def _pushed(network: Network, block: Block, ends: npt.NDArray[np.int64]) -> tuple[Numbers, Numbers]:
    """What an ampere pushed through each pair does: z (places, points), T (places, values of the block)."""
    places, points = len(ends), len(block.s)
    currents = np.zeros((len(network.nodes), places, points))
    rows = np.arange(places)
    np.add.at(currents, (ends[:, 0], rows), 1.0)
    np.add.at(currents, (ends[:, 1], rows), -1.0)
    dead = Drive(np.zeros(len(network), dtype=np.complex128), currents.reshape(-1, places * points))
    watched = [network.node_index(node) for curve in block.curves for node in curve.nodes]
    solved = solver_for(network).solve(
        np.tile(block.s, places),
        dead,
        wanted=np.unique(np.concatenate([ends.ravel(), watched]).astype(np.int64)).tolist(),
        currents_too=block.currents_too,
    )
    volts = solved.voltages.reshape(-1, places, points)
    return volts[ends[:, 0], rows] - volts[ends[:, 1], rows], _by_place(network, block, solved, places)


def _by_place(network: Network, block: Block, solved: Solution, places: int) -> Numbers:
    curves = block.across(network, solved).reshape(len(block.curves), places, -1)
    return np.moveaxis(curves, 1, 0).reshape(places, -1)


def in_series_with_sources(network: Network, evidence: Evidence, names: Sequence[str]) -> Places:
    """Impedances put in series with voltage sources; the coefficient is in ohm."""
    solver = solver_for(network)
    across, port, reach = [], [], []
    for block in evidence.blocks:
        own = solver.solve(block.s, Drive(block.drive(network)), currents_too=True)
        assert own.source_currents is not None
        across.append(np.stack([-own.source_currents[network.part_index(name)] for name in names]))
        seen, moved = [], []
        for name in names:
            row = network.part_index(name)
            unit = np.zeros(len(network), dtype=np.complex128)
            unit[row] = 1
            alone = solver.solve(block.s, Drive(unit), currents_too=True)
            assert alone.source_currents is not None
            seen.append(-alone.source_currents[row])
            moved.append(block.across(network, alone).ravel())
        port.append(np.stack(seen))
        reach.append(np.stack(moved))
    return Places(*(np.hstack(rows).astype(np.complex128) for rows in (across, port, reach)))


def in_gains(network: Network, evidence: Evidence, names: Sequence[str]) -> Places:
    """Other coefficients, relative to the present one; each from the response at half and at twice of it."""
    rows = []
    for name in names:
        value = network.part(name).value
        # An inductor counts by its admittance, which doubles where it is halved.
        up, down = (0.5, 2.0) if network.part(name).kind == "L" else (2.0, 0.5)
        try:
            more, less = (
                evidence.predicted_by(network, value_table(network, {name: value * times})) - evidence.exact
                for times in (up, down)
            )
        except UnsolvableError:  # a loop gain of one at just this value
            more = less = np.zeros_like(evidence.exact)
        bend = np.where(more != less, -(2 * less + more) / np.where(more == less, 1.0, more - less), 0.0)
        # The bend belongs to the network: the value that moves most tells it best.
        port = np.zeros(evidence.points, dtype=np.complex128)
        order = np.argsort(np.abs(more - less) * np.sqrt(evidence.weight))
        port[evidence.at[order]] = bend[order]
        reach = -more * (1 + port[evidence.at])
        rows.append(Places(np.ones((1, evidence.points), dtype=np.complex128), port[None], reach[None]))
    return joined(rows)
