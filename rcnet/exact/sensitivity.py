"""What each part does to a response: derivatives by its value, from two solutions for all parts together.

With v the solution and w the transposed one, dH = -w^T dA v (S. Director, R. Rohrer, IEEE Trans. Circuit
Theory CT-16(3):318-323, 1969). An admittance y between two nodes gives dH/dy = -(w_a - w_b)(v_a - v_b).

With i and h the unknowns of inductors in both, a mutual inductance gives dH/dM = s (h_1 i_2 + h_2 i_1). A
coupled inductor moves its own inductance and, half as much, every mutual one. These sum to dH/d ln L = (h
(v_a - v_b) + i (w_a - w_b))/2, where nothing of a current that another winding cancels is left.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import CircuitError, UndecidedError
from . import nodal
from .ac import ac_drive, dc_solvable, natural_frequencies, node_pair
from .adjoint import Equations, Field, Numbers, block_of, points_of, unit_output
from .solver import require_solvable
from .span import span_of

Pair = tuple[int, int]

_CIRCLE = (
    24  # points on a circle about s = 0: for a radius a quarter of the analytic one, 4^-24 = 4e-15 is left
)


@dataclass(frozen=True)
class Derivatives:
    """A response at each s with its derivatives; all volts per unit of the source.

    names: the parts, sources left out; response: (points,), H
    by_part: (parts, points), dH/d ln value
    slope: (points,), dH/ds; slope_by_part: (parts, points), d^2H/(ds d ln value); None where not asked for
    """

    names: tuple[str, ...]
    response: Numbers
    by_part: Numbers
    slope: Numbers | None = None
    slope_by_part: Numbers | None = None


def response_sensitivity(
    network: Network, frequency: npt.ArrayLike, of: str
) -> dict[str, npt.NDArray[np.complex128]]:
    """The derivative of the complex response by the logarithm of each part's value, (frequencies,) by name.

    frequency: Hz, zero means the limit; `of`: a node or a pair `"a b"`. Divided by the response this is the
    relative sensitivity: its real part belongs to ln of the magnitude, its imaginary part to the phase in
    rad.
    """
    points = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
    if points.ndim != 1 or not np.isfinite(points).all() or (points < 0).any():
        raise CircuitError(
            "the frequencies are no list of finite numbers from zero up.", remedy="Give hertz."
        )
    found = derivatives(network, points_of(network, 2 * math.pi * points), node_pair(network, of))
    return {name: found.by_part[k] for k, name in enumerate(found.names)}


def derivatives(network: Network, s: Numbers, of: Pair, *, slope: bool = False) -> Derivatives:
    """H and its derivatives at each s, rad/s, (points,). With `slope`, those of dH/ds too."""
    require_solvable(network)
    step = max(1, block_of(network) // (2 if slope else 1))
    blocks = [_block(network, s[k : k + step], of, slope) for k in range(0, len(s), step)]
    first = blocks[0]
    if len(blocks) == 1:
        return first
    return Derivatives(
        first.names,
        np.concatenate([b.response for b in blocks]),
        np.hstack([b.by_part for b in blocks]),
        np.concatenate([b.slope for b in blocks if b.slope is not None]) if slope else None,
        np.hstack([b.slope_by_part for b in blocks if b.slope_by_part is not None]) if slope else None,
    )


def derivatives_at_zero(network: Network, of: Pair) -> Derivatives:
    """All derivatives at s = 0, one point, of a network that has a solution there.

    With inductors, whose admittance has no value there, they are means over a circle about zero (Cauchy's
    integral formula), inside which the response has no pole.
    """
    if not (network.arrays().kinds == ord("L")).any():
        return derivatives(network, np.zeros(1, dtype=np.complex128), of, slope=True)
    turns = np.exp(2j * math.pi * (np.arange(_CIRCLE) + 0.5) / _CIRCLE)
    found = derivatives(network, span_of(network).low / 4 * turns, of, slope=True)
    assert found.slope is not None
    assert found.slope_by_part is not None
    return Derivatives(
        found.names,
        found.response.mean(keepdims=True).real,
        found.by_part.mean(axis=1, keepdims=True).real,
        found.slope.mean(keepdims=True).real,
        found.slope_by_part.mean(axis=1, keepdims=True).real,
    )


# ---------------------------------------------------------------------- one block of s


def _block(network: Network, s: Numbers, of: Pair, slope: bool) -> Derivatives:
    equations = Equations(network, s)
    parts = _Parts(network, s)
    output = unit_output(network, of, len(s))
    v = equations.forward(ac_drive(network).sources)
    w = equations.transposed(output)
    response = v.across(of[0], of[1])
    by_part = parts.products(w, v)
    if not slope:
        return Derivatives(parts.names, response, by_part)
    # A v = b gives A v' = -A' v for a source that does not depend on s; likewise transposed.
    dead = np.zeros(len(network), dtype=np.complex128)
    v_slope = equations.forward(dead, parts.pulled(v), parts.linked(v))
    w_slope = equations.transposed(parts.pulled(w), parts.linked(w))
    return Derivatives(
        parts.names,
        response,
        by_part,
        parts.slope(w, v),
        parts.products(w_slope, v) + parts.products(w, v_slope) + parts.moved_products(w, v),
    )


class _Parts:
    """A network's parts between two solutions, w transposed and v."""

    def __init__(self, network: Network, s: Numbers) -> None:
        self.network, self.s = network, s
        self.arrays = network.arrays()
        letters = np.array([chr(code) for code in self.arrays.kinds.tolist()])
        self.rows = np.flatnonzero(~np.isin(letters, ["V", "I"]))
        self.letters = letters[self.rows].tolist()
        names = network.names
        self.names = tuple(names[row] for row in self.rows.tolist())
        coupled = {row for coupling in network.couplings for row in network.coupled_by(coupling)}
        self.coupled = np.isin(self.rows, list(coupled))
        self.admittances = np.isin(letters[self.rows], ["R", "C", "L"]) & ~self.coupled
        self.value = self.arrays.values[self.rows]
        self.nodes = self.arrays.nodes[self.rows]

    def _both_across(self, w: Field, v: Field) -> Numbers:
        a, b = self.nodes[self.admittances, 0], self.nodes[self.admittances, 1]
        return np.asarray(w.across(a, b) * v.across(a, b))

    def _by_kind(self, resistor: Numbers, capacitor: Numbers, inductor: Numbers) -> Numbers:
        """A coefficient for each admittance, (admittances, points), from those of one ohm, farad, henry."""
        value = self.value[self.admittances, None]
        kind = np.array(self.letters)[self.admittances][:, None]
        return np.where(
            kind == "R", resistor / value, np.where(kind == "C", capacitor * value, inductor / value)
        )

    def products(self, w: Field, v: Field) -> Numbers:
        """-w^T (dA/d ln value) v for each part, (parts, points)."""
        answer = np.zeros((len(self.rows), len(self.s)), dtype=np.complex128)
        one = np.ones_like(self.s)
        # An inductor is a short at s = 0 whatever its value.
        inductance = np.divide(one, self.s, out=np.zeros_like(self.s), where=self.s != 0)
        answer[self.admittances] = self._by_kind(one, -self.s, inductance) * self._both_across(w, v)
        for k in np.flatnonzero(~self.admittances & ~self.coupled).tolist():
            answer[k] = self._mutual(k, w, v) if self.letters[k] == "K" else self._controlled(k, w, v)
        for k in np.flatnonzero(self.coupled).tolist():
            answer[k] = self._inductor(k, w, v)
        return answer

    def _inductor(self, k: int, w: Field, v: Field) -> Numbers:
        row, (a, b) = int(self.rows[k]), self.nodes[k, :2].tolist()
        return np.asarray((w.branch(row) * v.across(a, b) + v.branch(row) * w.across(a, b)) / 2)

    def _mutual(self, k: int, w: Field, v: Field) -> Numbers:
        first, second = self.network.coupled_by(int(self.rows[k]))
        roots = np.sqrt(self.arrays.values[[first, second]])
        both = w.branch(first) * v.branch(second) + w.branch(second) * v.branch(first)
        return np.asarray(self.s * (self.value[k] * roots[0] * roots[1]) * both)

    def _controlled(self, k: int, w: Field, v: Field) -> Numbers:
        row, letter, (a, b, c, d) = int(self.rows[k]), self.letters[k], self.nodes[k].tolist()
        cause = v.across(c, d) if letter in "EG" else v.branch(self.network.sensed_by(row))
        effect = w.branch(row) if letter in "EH" else -w.across(a, b)
        return np.asarray(self.value[k] * effect * cause)

    def _slopes(self) -> Numbers:
        """dy/ds of each admittance."""
        if "L" not in self.letters:
            return self._by_kind(np.zeros_like(self.s), np.ones_like(self.s), np.zeros_like(self.s))
        return self._by_kind(np.zeros_like(self.s), np.ones_like(self.s), -1 / self.s**2)

    def slope(self, w: Field, v: Field) -> Numbers:
        """-w^T (dA/ds) v, (points,)."""
        total = -np.asarray((self._slopes() * self._both_across(w, v)).sum(axis=0))
        for k in np.flatnonzero(self.coupled).tolist():
            total += self._inductor(k, w, v) / self.s
        return total

    def moved_products(self, w: Field, v: Field) -> Numbers:
        """-w^T (d^2A/ds d ln value) v for each part."""
        answer = np.zeros((len(self.rows), len(self.s)), dtype=np.complex128)
        sign = np.where(np.array(self.letters)[self.admittances] == "C", -1.0, 1.0)[:, None]
        answer[self.admittances] = sign * self._slopes() * self._both_across(w, v)
        # A coupled inductor's derivative does not name s.
        for k in (k for k, letter in enumerate(self.letters) if letter == "K"):
            answer[k] = self._mutual(k, w, v) / self.s
        return answer

    def linked(self, field: Field) -> Numbers | None:
        """The volts -(dA/ds) times a solution in series with coupled inductors, (parts, points); or None."""
        if not self.coupled.any():
            return None
        volts = np.zeros((len(self.network), len(self.s)), dtype=np.complex128)
        a, b = self.nodes[self.coupled, 0], self.nodes[self.coupled, 1]
        volts[self.rows[self.coupled]] = field.across(a, b) / self.s
        return volts

    def pulled(self, field: Field) -> Numbers:
        """The currents -(dA/ds) times a solution, put into the nodes, (nodes, points)."""
        a, b = self.nodes[self.admittances, 0], self.nodes[self.admittances, 1]
        flow = self._slopes() * field.across(a, b)
        currents = np.zeros((self.arrays.node_count, len(self.s)), dtype=np.complex128)
        np.add.at(currents, a, -flow)
        np.add.at(currents, b, flow)
        return currents


# ---------------------------------------------------------------------- the slowest mode


def slowest_mode_sensitivity(network: Network) -> tuple[complex, dict[str, complex]]:
    """The natural frequency that decays slowest, rad/s, and its derivative by the logarithm of each value.

    From the vectors A(p) x = 0 and z^T A(p) = 0: dp = -(z^T dA x)/(z^T A' x) (P. Lancaster, Numer. Math.
    6:377-387, 1964). Raises UndecidedError where there is none, where it never decays, where two coincide,
    and for networks beyond a few hundred nodes.
    """
    require_solvable(network)
    if not dc_solvable(network):
        raise UndecidedError("a node has no dc path, so one mode never decays.")
    start = _slowest(network)
    pole, right, left = _vectors(network, start)
    parts = _Parts(network, np.array([pole]))
    slope = parts.slope(left, right)
    moved = -parts.products(left, right) / slope
    if not np.isfinite(moved).all():
        raise UndecidedError("the slowest mode is not a simple one, so it has no derivative.")
    return pole, {name: complex(moved[k, 0]) for k, name in enumerate(parts.names)}


def _slowest(network: Network) -> complex:
    poles = natural_frequencies(network)
    if not len(poles):
        raise UndecidedError(
            "the network has no natural mode, or more nodes than are searched for the slowest."
        )
    order = np.argsort(-poles.real)
    slowest = complex(poles[order[0]])
    if slowest.real > -1e-9 * abs(slowest):
        raise UndecidedError("a natural mode does not die away, so the network has no time constant.")
    if abs(slowest.imag) < 1e-6 * abs(slowest):
        slowest = complex(slowest.real)
    for pole in poles[order[1:]]:
        if abs(pole - slowest) < 1e-6 * abs(slowest):
            raise UndecidedError("two modes are equally slow, so the slowest has no derivative.")
    return slowest


def _vectors(network: Network, start: complex) -> tuple[complex, Field, Field]:
    """The natural frequency near `start` with both its vectors, by two-sided inverse iteration.

    The quotient p = -(z^T A0 x)/(z^T A1 x) is off by the product of both vectors' errors (A. Ostrowski, Arch.
    Rational Mech. Anal. 3:325-340, 1959).
    """
    eqs = nodal.equations(network, plain=True)
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    pole = start * (1 + 1e-7)
    rng = np.random.default_rng(0)
    right, left = (rng.standard_normal(eqs.size) + 0j for _ in range(2))
    for _ in range(6):
        matrix = constant + pole * slope
        try:
            right, left = _solved(matrix, slope @ right), _solved(matrix.T, slope.T @ left)
        except np.linalg.LinAlgError:
            break  # exactly singular: the vectors of the turn before are as good as they get
        quotient = complex(-(left @ constant @ right) / (left @ slope @ right))
        if not abs(quotient - start) < 1e-3 * abs(start):
            raise UndecidedError("the slowest mode cannot be told apart from another.")
        if abs(quotient - pole) <= 1e-15 * abs(pole):
            break
        pole = quotient
    return pole, _field(network, eqs, right), _field(network, eqs, left)


def _solved(matrix: Numbers, target: Numbers) -> Numbers:
    """The solution of equations scaled to one, itself scaled to one."""
    rows = 1 / np.abs(matrix).max(axis=1)
    matrix = matrix * rows[:, None]
    columns = 1 / np.abs(matrix).max(axis=0)
    answer = columns * np.linalg.solve(matrix * columns, rows * target)
    return np.asarray(answer / np.abs(answer).max())


def _field(network: Network, eqs: nodal.Equations, unknowns: Numbers) -> Field:
    voltages = np.concatenate([[0], unknowns[: eqs.node_count - 1]])[:, None]
    branches = np.zeros((len(network), 1), dtype=np.complex128)
    for row, unknown in eqs.branch_of.items():
        branches[row] = unknowns[unknown]
    return Field(((np.ones(1), voltages, np.zeros_like(voltages)),), branches)
