"""The response of many samples of one small network, each as a sum over its modes.

With A0 + s A1 the network's equations and c a real point, (A0 + c A1)^-1 A1 has eigenvalues mu, and the
response is sum (a + (s - c) b)/(1 + (s - c) mu): one eigenproblem for a sample, after which a frequency costs
next to nothing. It is good to some nine digits, which is enough to say where to look.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from ..exact import dc_solvable, solver_for, span_of
from ..exact.nodal import Equations, equations, right_hand_side

Float = npt.NDArray[np.float64]
Numbers = npt.NDArray[Any]
Pair = tuple[int, int]

MOST_UNKNOWNS = 80
_MOST_NUMBERS = 4_000_000  # in one array


@dataclass(frozen=True)
class Sums:
    """H(s) = rest + sum over modes of (constant + (s - centre) slope)/(1 + (s - centre) mu) for each sample.

    constant, slope, mu: (samples, modes); rest: the part of the output that a source fixes
    """

    centre: float
    constant: Numbers
    slope: Numbers
    mu: Numbers
    rest: float

    def at(self, s: Numbers) -> Numbers:
        """H at points (points,) shared by all samples, or (samples, points): (samples, points)."""
        return self._summed(s, derivative=False)

    def derivative(self, s: Numbers) -> Numbers:
        """dH/ds at points as for `at`."""
        return self._summed(s, derivative=True)

    def _summed(self, s: Numbers, *, derivative: bool) -> Numbers:
        samples, modes = self.mu.shape
        away = np.broadcast_to(s - self.centre, (samples, s.shape[-1]))
        step = max(1, _MOST_NUMBERS // max(1, s.shape[-1] * modes))
        answer = np.empty(away.shape, dtype=np.result_type(s, self.mu, self.constant))
        for start in range(0, samples, step):
            rows = slice(start, start + step)
            t = away[rows, :, None]
            below = 1 + t * self.mu[rows, None]
            if derivative:
                above = (self.slope - self.constant * self.mu)[rows, None] / below
            else:
                above = self.constant[rows, None] + t * self.slope[rows, None]
            answer[rows] = (above / below).sum(axis=-1)
        return answer if derivative else answer + self.rest


class Sampler:
    """Makes the sums of a network for any values of some of its parts.

    names: the parts; sources: (parts of the network,), what drives it
    Raises UndecidedError for networks too large, and where a part enters the equations in no simple way.
    """

    def __init__(self, network: Network, names: Sequence[str], of: Pair, sources: Numbers) -> None:
        arrays, stiff = network.arrays(), solver_for(network).stiff
        kinds = {chr(code) for code in set(arrays.kinds.tolist())}
        self.passive = stiff is not None and kinds <= set("RCVI")
        self.network, self.of, self.sources = network, of, sources.real
        if sources.imag.any() or arrays.node_count > MOST_UNKNOWNS:
            raise UndecidedError("the network is too large, or its sources are out of phase.")
        self.centre = 0.0 if dc_solvable(network) else span_of(network).middle
        self.equations = equations(network, plain=self.passive)
        self.rows = [network.part_index(name) for name in names]
        self.inverse = np.array([chr(arrays.kinds[row]) == "R" for row in self.rows])
        self.nominal = arrays.values[self.rows]
        self.fixed, self.moving = self._split()
        self.node_potentials = np.zeros((arrays.node_count, 1, 1))
        if self.passive and stiff is not None:
            self.held = [node - 1 for node in stiff.nodes if node]
            stiff.fill(self.node_potentials, self.sources)

    def _split(self) -> tuple[tuple[Float, Float], tuple[Float, Float]]:
        """The matrices of what stays, (size, size), and of each part that moves, (parts, size, size)."""
        eqs, values = self.equations, self.network.arrays().values
        constant, slope = eqs.constant.copy(), eqs.slope.copy()
        moving: list[list[Float]] = [[], []]
        for row, inverse in zip(self.rows, self.inverse, strict=True):
            doubled = values.copy()
            doubled[row] *= 2
            other = equations(self.network, doubled, plain=self.passive)
            times = 0.5 if inverse else 2.0
            for mine, old, new, left in (
                (moving[0], eqs.constant, other.constant, constant),
                (moving[1], eqs.slope, other.slope, slope),
            ):
                own = new != old
                if not np.array_equal(new[own], times * old[own]):
                    raise UndecidedError("a part enters the equations in no simple way.")
                mine.append(eqs.dense(np.where(own, old, 0.0)))
                left[own] = 0.0
        shape = (len(self.rows), eqs.size, eqs.size)
        stacked = tuple(np.array(group, dtype=np.float64).reshape(shape) for group in moving)
        return (eqs.dense(constant), eqs.dense(slope)), (stacked[0], stacked[1])

    def __call__(self, values: Float) -> Sums:
        """The sums for part values (samples, names)."""
        factor = np.where(self.inverse, self.nominal / values, values / self.nominal)
        constant, slope = (
            stay + np.tensordot(factor, move, axes=1)
            for stay, move in zip(self.fixed, self.moving, strict=True)
        )
        return self._symmetric(constant, slope) if self.passive else self._general(constant, slope)

    def _symmetric(self, constant: Float, slope: Float) -> Sums:
        """R, C and sources: the eigenproblem is symmetric, so that even equal modes come out right."""
        inner = np.setdiff1d(np.arange(self.network.arrays().node_count - 1), self.held)
        held = np.array(self.held, dtype=np.int64)
        potential = self.node_potentials[1:, 0, 0]
        shifted = constant + self.centre * slope
        entering = self._entering(self.equations)[inner]
        drive = entering - shifted[:, inner[:, None], held] @ potential[held]
        drive_slope = -slope[:, inner[:, None], held] @ potential[held]
        root = np.linalg.cholesky(shifted[:, inner[:, None], inner])
        half = np.linalg.solve(root, slope[:, inner[:, None], inner])
        mu, turn = np.linalg.eigh(np.linalg.solve(root, half.transpose(0, 2, 1)))
        shapes = np.linalg.solve(root.transpose(0, 2, 1), turn)  # (samples, nodes, modes)
        pick = np.zeros(len(potential) + 1)
        pick[list(self.of)] += (1.0, -1.0)
        seen = np.einsum("n,snk->sk", pick[1:][inner], shapes)
        rest = float(pick[1:][held] @ potential[held])
        given, given_slope = (np.einsum("snk,sn->sk", shapes, right) for right in (drive, drive_slope))
        return Sums(self.centre, seen * given, seen * given_slope, mu, rest)

    def _general(self, constant: Float, slope: Float) -> Sums:
        shifted = constant + self.centre * slope
        right = np.broadcast_to(self._entering(self.equations)[:, None], (*shifted.shape[:2], 1))
        mu, shapes = np.linalg.eig(np.linalg.solve(shifted, slope))
        settled = np.linalg.solve(shifted, right)
        given = np.linalg.solve(shapes, settled.astype(shapes.dtype))[..., 0]
        pick = np.zeros(shifted.shape[1] + 1)
        pick[list(self.of)] += (1.0, -1.0)
        seen = np.einsum("n,snk->sk", pick[1:], shapes)
        return Sums(self.centre, seen * given, np.zeros_like(mu), mu, 0.0)

    def _entering(self, eqs: Equations) -> Float:
        return np.asarray(
            right_hand_side(self.network, eqs, self.sources.astype(np.complex128), None, 1)[:, 0].real
        )


__all__ = ["MOST_UNKNOWNS", "Sampler", "Sums"]
