"""The networks that benchmarks solve, as an rcnet network, as a netlist, and as matrices."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from rcnet.circuit import Network


@dataclass(frozen=True)
class Case:
    """R and C between numbered nodes, 0 ground and 1 driven; resistors (n, 2), ohm (n,), and so on.

    output: the node asked for; low, high, points: the sweep, Hz, logarithmic
    """

    name: str
    resistors: npt.NDArray[np.int64]
    ohms: npt.NDArray[np.float64]
    capacitors: npt.NDArray[np.int64]
    farads: npt.NDArray[np.float64]
    output: int
    low: float
    high: float
    points: int

    @property
    def nodes(self) -> int:
        """How many, ground and the driven one left out."""
        return int(max(self.resistors.max(), self.capacitors.max())) - 1

    @property
    def frequency(self) -> npt.NDArray[np.float64]:
        """The sweep, Hz."""
        return np.logspace(np.log10(self.low), np.log10(self.high), self.points)


def tree(nodes: int, points: int, *, seed: int = 1) -> Case:
    """A random tree of a district's meter lines: node k hangs on any earlier one, a capacitor at each."""
    rng = np.random.default_rng(seed)
    parents = np.concatenate([[1], 2 + (rng.random(nodes - 1) * np.arange(1, nodes)).astype(np.int64)])
    own = np.arange(2, nodes + 2)
    return Case(
        f"random tree, {nodes} nodes",
        np.stack([parents, own], axis=1),
        10 ** rng.uniform(1, 4, nodes),
        np.stack([own, np.zeros(nodes, dtype=np.int64)], axis=1),
        10 ** rng.uniform(-13, -10, nodes),
        nodes + 1,
        1e3,
        1e8,
        points,
    )


def mesh(side: int, points: int, *, seed: int = 1) -> Case:
    """A square grid of resistors driven at one corner, a capacitor at each node, the far corner asked for."""
    rng = np.random.default_rng(seed)
    grid = 2 + np.arange(side * side).reshape(side, side)
    along = np.stack([grid[:, :-1].ravel(), grid[:, 1:].ravel()], axis=1)
    across = np.stack([grid[:-1].ravel(), grid[1:].ravel()], axis=1)
    resistors = np.concatenate([[[1, 2]], along, across])
    return Case(
        f"mesh {side} x {side}",
        resistors,
        10 ** rng.uniform(2, 4, len(resistors)),
        np.stack([grid.ravel(), np.zeros(side * side, dtype=np.int64)], axis=1),
        10 ** rng.uniform(-13, -11, side * side),
        int(grid[-1, -1]),
        1e3,
        1e7,
        points,
    )


def network(case: Case) -> Network:
    """The case as rcnet takes it."""
    made = Network(case.name)
    made.add_voltage_source("Vin", "n1", "0", ac=1)
    for add, letter, ends, values in (
        (made.add_resistors, "R", case.resistors, case.ohms),
        (made.add_capacitors, "C", case.capacitors, case.farads),
    ):
        names = [f"{letter}{k}" for k in range(len(values))]
        a, b = ([f"n{k}" if k else "0" for k in column] for column in ends.T.tolist())
        add(names, a, b, values)
    return made


def netlist(case: Case) -> str:
    """The case as ngspice takes it, its statistics asked for, one voltage saved, no operating point first."""
    lines = [f"* {case.name}", "Vin n1 0 dc 0 ac 1"]
    for letter, ends, values in (
        ("R", case.resistors, case.ohms),
        ("C", case.capacitors, case.farads),
    ):
        both = zip(ends.tolist(), values.tolist(), strict=True)
        for k, ((a, b), value) in enumerate(both):
            lines.append(f"{letter}{k} {f'n{a}' if a else '0'} {f'n{b}' if b else '0'} {value!r}")
    decades = round(np.log10(case.high / case.low))
    per_decade = (case.points - 1) / decades
    assert per_decade == int(per_decade), "ngspice sweeps whole steps per decade"
    lines += [
        ".options acct noopac",
        f".save v(n{case.output})",
        f".ac dec {int(per_decade)} {case.low!r} {case.high!r}",
        ".end",
        "",
    ]
    return "\n".join(lines)


def matrices(case: Case) -> tuple[Any, Any, npt.NDArray[np.float64]]:
    """G and C of the inner nodes as sparse matrices, and the right-hand side for a volt at node 1."""
    import scipy.sparse

    size = case.nodes + 2
    both = []
    for ends, values in ((case.resistors, 1 / case.ohms), (case.capacitors, case.farads)):
        a, b = ends.T
        data = np.concatenate([values, values, -values, -values])
        places = (np.concatenate([a, b, a, b]), np.concatenate([a, b, b, a]))
        both.append(scipy.sparse.coo_matrix((data, places), shape=(size, size)).tocsc())
    conductance, capacitance = both
    driven = -conductance[2:, [1]].toarray()[:, 0]
    return conductance[2:, 2:], capacitance[2:, 2:], driven
