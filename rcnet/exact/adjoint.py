"""A network's equations solved both ways at given s: forwards for the voltages, transposed for influences.

With A v = b and A^T w = c, the output c.v changes by -w^T dA v when the network does: one solution w tells
the influence of every part (S. Director, R. Rohrer, IEEE Trans. Circuit Theory CT-16(3):318-323, 1969). What
counts are voltages across parts, differences of nearly equal node voltages at times. Each solution therefore
carries what the rounding of its node voltages left out, from residuals in twice the working precision.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Source
from . import nodal
from .ac import dc_solvable
from .residual import Residual
from .solver import Drive, Solver, solver_for
from .span import span_of
from .twofold import two_sum

Complex = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]
Rows = npt.NDArray[np.int64]

MOST_REFINED = 5000  # parts; beyond, voltages across parts are plain differences of node voltages
_BLOCK_BYTES = 64 * 1024 * 1024


@dataclass(frozen=True)
class Field:
    """One solution at each s, (points,).

    terms: the node voltages as a sum of weight (points,) times voltages (nodes, points) plus what their
        rounding left out (nodes, points)
    branches: (parts, points): forwards the currents of V, E, H and L, transposed what a volt in series with
        each of them does to the output; None where the network has no part that needs them
    """

    terms: tuple[tuple[Numbers, Numbers, Numbers], ...]
    branches: Numbers | None

    def across(self, a: Any, b: Any) -> Numbers:
        """The voltage from node a to node b: (points,), or (rows, points) for arrays of nodes."""
        return np.asarray(
            sum(weight * ((v[a] - v[b]) + (rest[a] - rest[b])) for weight, v, rest in self.terms)
        )

    def size(self, a: Any, b: Any) -> Float:
        """The greater of the two node voltages' magnitudes, the scale of a difference's rounding."""
        whole = np.sum([weight * v for weight, v, _ in self.terms], axis=0)
        return np.asarray(np.maximum(np.abs(whole[a]), np.abs(whole[b])))

    def branch(self, row: int) -> Numbers:
        """One row of `branches`."""
        assert self.branches is not None
        return np.asarray(self.branches[row])


class Equations:
    """A network's equations at each s, rad/s, (points,), to be solved for sources and transposed."""

    def __init__(self, network: Network, s: Numbers) -> None:
        self.network, self.s = network, s
        self.arrays = network.arrays()
        letters = {chr(code) for code in np.unique(self.arrays.kinds).tolist()}
        solver = solver_for(network)
        self.reciprocal = not letters & set("LEGFH")
        # Elimination holds every digit of small voltages; E sources are then taken out of the network.
        self.buffered = not self.reciprocal and not letters & set("LGFH") and solver.eliminates

    def forward(
        self, sources: Complex, currents: Numbers | None = None, series: Numbers | None = None
    ) -> Field:
        """The solution for independent sources (parts,) and amperes put into the nodes (nodes, points).

        series: (parts,) or (parts, points), volts in series with E, H and L, or None
        """
        if (self.reciprocal or self.buffered) and series is None:
            return _Admittances(self.network, self.s).solve(Drive(sources, currents))
        return _nodal(self.network, self.s, sources, currents, series)

    def transposed(self, output: Numbers, series: Numbers | None = None) -> Field:
        """What an ampere into each node does to the output, the sum of `output` (nodes, points) times v.

        series: (parts, points), weights of the currents of L in the output besides, or None
        """
        if series is not None:
            return _nodal(self.network, self.s, None, output, series)
        if self.buffered:
            return _Buffered(self.network, self.s).transposed(output)
        if self.reciprocal:
            return _Admittances(self.network, self.s).solve(_dead(self.network, output))
        return _nodal(self.network, self.s, None, output)


def unit_output(network: Network, of: tuple[int, int], points: int) -> Float:
    """The output voltage between two nodes as weights of the node voltages, (nodes, points)."""
    weights = np.zeros((network.arrays().node_count, points))
    weights[of[0]] += 1
    weights[of[1]] -= 1
    return weights


def points_of(network: Network, omega: Float) -> Complex:
    """The points j omega; zero becomes a real point far below every corner where s = 0 has no solution."""
    if omega.all() or dc_solvable(network):
        return np.asarray(1j * omega, dtype=np.complex128)
    return np.asarray(np.where(omega == 0, span_of(network).far_below, 1j * omega), dtype=np.complex128)


def block_of(network: Network) -> int:
    """How many s to take at once so that memory stays bounded."""
    return max(1, min(solver_for(network).block(), _BLOCK_BYTES // (2400 * max(len(network), 1))))


def _dead(network: Network, currents: Numbers) -> Drive:
    return Drive(np.zeros(len(network), dtype=np.complex128), currents)


# ---------------------------------------------------------- networks of admittances, fixed potentials


class _Admittances:
    def __init__(self, network: Network, s: Numbers) -> None:
        self.network, self.s = network, s
        self.solver: Solver = solver_for(network)

    def solve(self, drive: Drive) -> Field:
        voltages = self.solver.solve(self.s, drive).voltages
        rest = np.zeros_like(voltages)
        if len(self.network) <= MOST_REFINED:
            missing = self._residual(drive, voltages)
            rest = self.solver.solve(self.s, _dead(self.network, missing)).voltages
        return Field(((np.ones(len(self.s)), voltages, rest),), None)

    def _residual(self, drive: Drive, voltages: Numbers) -> Numbers:
        """The currents that do not balance, at the nodes whose potential nothing fixes."""
        arrays = self.network.arrays()
        rows = np.flatnonzero((arrays.kinds == ord("R")) | (arrays.kinds == ord("C")))
        a, b = arrays.nodes[rows, 0], arrays.nodes[rows, 1]
        resistive = arrays.kinds[rows] == ord("R")
        g = np.where(resistive, 1.0 / arrays.values[rows], 0.0)
        c = np.where(resistive, 0.0, arrays.values[rows])
        residual = Residual(
            np.concatenate([a, a, b, b]),
            np.concatenate([a, b, b, a]),
            np.concatenate([g, -g, g, -g]),
            np.concatenate([c, -c, c, -c]),
            arrays.node_count,
        )
        entering = np.zeros(voltages.shape, dtype=np.complex128)
        if drive.currents is not None:
            entering += drive.currents
        for row in np.flatnonzero((arrays.kinds == ord("I")) & (drive.sources != 0)).tolist():
            entering[arrays.nodes[row, 0]] -= drive.sources[row]
            entering[arrays.nodes[row, 1]] += drive.sources[row]
        missing = residual(self.s.astype(np.complex128), entering, voltages.astype(np.complex128))
        missing[0] = 0
        stiff = (arrays.kinds == ord("V")) | (arrays.kinds == ord("E"))
        missing[arrays.nodes[stiff, :2].ravel()] = 0
        return missing


class _Buffered:
    """A network of admittances and E sources, transposed.

    Each E source becomes an independent source u_e = g_e (v_c - v_d), the rest is reciprocal: with p_e the
    voltages for u_e = 1 and q_e those for an ampere put in at c and taken out at d, w = w0 + sum of weights
    times q_e, where the weights close the loops among the sources.
    """

    def __init__(self, network: Network, s: Numbers) -> None:
        self.network, self.s = network, s
        self.probe, self.drives = _with_independent_sources(network)
        self.admittances = _Admittances(self.probe, s)
        place = [self.probe.node_index(name) for name in network.nodes]
        self.place = np.array(place, dtype=np.int64)

    def transposed(self, output: Numbers) -> Field:
        arrays, count = self.network.arrays(), len(self.drives)
        rows = list(self.drives)
        columns = [self._voltages(self._driven(self.drives[row])) for row in rows]
        controls = arrays.nodes[rows, 2:4]
        seen = np.array([[p[c] - p[d] for p in columns] for c, d in controls])  # (sensing, driven, points)
        gains = arrays.values[rows]
        loop = np.moveaxis(gains[:, None, None] * seen, 2, 0)
        reached = np.array([(output * p).sum(axis=0) for p in columns]).T
        closing = np.swapaxes(np.eye(count) - loop, 1, 2)
        try:
            series = np.linalg.solve(closing, reached[..., None])[..., 0].T
        except np.linalg.LinAlgError as exc:
            raise nodal.singular([self.network.names[row] for row in rows]) from exc
        terms = [*self._injected(output).terms]
        for k, (c, d) in enumerate(controls.tolist()):
            if series[k].any() and gains[k] != 0 and c != d:
                sensed = unit_output(self.network, (c, d), len(self.s))
                terms += [(gains[k] * series[k] * w, v, rest) for w, v, rest in self._injected(sensed).terms]
        branches = np.zeros((len(self.network), len(self.s)), dtype=np.complex128)
        branches[rows] = series
        return Field(tuple(terms), branches)

    def _driven(self, row: int) -> Field:
        sources = np.zeros(len(self.probe), dtype=np.complex128)
        sources[row] = 1
        return self.admittances.solve(Drive(sources))

    def _injected(self, currents: Numbers) -> Field:
        moved = np.zeros_like(currents)
        moved[self.place] = currents
        field = self.admittances.solve(_dead(self.probe, moved))
        return Field(tuple((w, v[self.place], rest[self.place]) for w, v, rest in field.terms), None)

    def _voltages(self, field: Field) -> Numbers:
        ((_, voltages, rest),) = field.terms
        return np.asarray((voltages + rest)[self.place])


def _with_independent_sources(network: Network) -> tuple[Network, dict[int, int]]:
    """The network with each E source made independent; its row here -> the new source's row there."""
    probe, drives = Network(), {}
    for row, part in enumerate(network.parts):
        if part.kind == "E":
            drives[row] = len(probe)
            name = f"V{row}"
            while name in network or name in probe:
                name += "_"
            probe.add_source(Source(name, (part.nodes[0], part.nodes[1])))
        elif part.name in network.sources:
            probe.add_source(replace(network.sources[part.name], ac=None, dc=None, waveform=None))
        else:
            probe.add_part(part)
    return probe, drives


# ------------------------------------------------------------ any network


def _nodal(
    network: Network,
    s: Numbers,
    sources: Complex | None,
    currents: Numbers | None,
    series: Numbers | None = None,
) -> Field:
    """The solution for the sources; where they are None that of the transposed equations."""
    arrays = network.arrays()
    nodes = np.zeros((2, arrays.node_count, len(s)), dtype=np.complex128)
    branches = np.zeros((len(network), len(s)), dtype=np.complex128)
    above = np.abs(s) > span_of(network).middle
    for group, high in ((np.flatnonzero(~above), False), (np.flatnonzero(above), True)):
        if not len(group):
            continue
        eqs = nodal.equations(network, high=high)
        here = None if currents is None else currents[:, group]
        if sources is None:
            eqs = replace(eqs, rows=eqs.columns, columns=eqs.rows)
            rhs: Numbers = np.zeros((eqs.size, len(group)), dtype=np.complex128)
            if here is not None:
                rhs[: arrays.node_count - 1] = here[1:]
        else:
            rhs = nodal.right_hand_side(network, eqs, sources, here, len(group))
        if series is not None:
            rhs = rhs + eqs.in_series(series[:, group] if series.ndim == 2 else series[:, None])
        x, rest = _with_rest(eqs, s[group], rhs)
        rows = np.array(list(eqs.branch_of), dtype=np.int64)
        branches[rows[:, None], group] = eqs.currents(x) + eqs.currents(rest)
        if sources is None:
            nodes[:, :, group] = _balances_to_nodes(eqs, x, rest)
        else:
            nodes[0, 1:, group] = x[: arrays.node_count - 1].T
            nodes[1, 1:, group] = rest[: arrays.node_count - 1].T
    return Field(((np.ones(len(s)), nodes[0], nodes[1]),), branches)


def _with_rest(eqs: nodal.Equations, s: Numbers, rhs: Numbers) -> tuple[Numbers, Numbers]:
    """The answer, and what its rounding left out."""
    x = nodal.solve(eqs, s, rhs)
    residual = Residual(eqs.rows, eqs.columns, eqs.constant, eqs.slope, eqs.size)
    missing = np.empty(x.shape, dtype=np.complex128)
    block = max(1, _BLOCK_BYTES // (600 * max(len(eqs.rows), 1)))
    for start in range(0, len(s), block):
        part = slice(start, start + block)
        missing[:, part] = residual(
            s[part].astype(np.complex128),
            rhs[:, part].astype(np.complex128),
            x[:, part].astype(np.complex128),
        )
    return x, nodal.solve(eqs, s, missing)


def _balances_to_nodes(eqs: nodal.Equations, x: Numbers, rest: Numbers) -> Numbers:
    """An ampere into a node enters each balance the node counts in: their sum, with its rounding error."""
    total = np.zeros((eqs.node_count, x.shape[1]), dtype=np.complex128)
    left = np.zeros_like(total)
    seen: set[int] = set()
    for row, node in eqs.gather.tolist():
        left[node] += rest[row]
        if node not in seen:
            total[node] = x[row]
            seen.add(node)
        else:
            total[node], error = two_sum(total[node], x[row])
            left[node] += error
    return np.stack([total, left])
