"""The response with one part changed by any amount, from four numbers at each frequency.

A part enters the equations as a matrix of rank one, so with its coefficient changed by d the response is the
bilinear H - d P/(1 + d z) (J. Sherman, W. Morrison, Ann. Math. Statist. 21:124-127, 1950; H. W. Bode, 1945):
P is what it does to the output for what drives it, z what it does to what drives it itself. A coupling and a
coupled inductor, which changes its mutual inductances too, enter as a matrix of a higher rank.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Part
from ..errors import CircuitError, UndecidedError, UnsolvableError
from .ac import ac_drive, node_pair
from .adjoint import Equations, Field, points_of, unit_output
from .solver import require_solvable
from .span import span_of

Complex = npt.NDArray[np.complex128]

_LOST = 1e-13  # 1 + d z below this share of its terms is rounding


@dataclass(frozen=True)
class OnePart:
    """A response as a function of one part, or of an admittance put between two nodes.

    name: the part, or the two nodes; kind: its letter, or "Y" for an added admittance
    response: (points,), H as the network is; product: P; port: z; coefficient: the part's present one, an
        admittance in siemens for R, C, L, Y, else the gain
    """

    name: str
    kind: str
    response: Complex
    product: Complex
    port: Complex
    coefficient: Complex

    def scaled(self, factor: npt.ArrayLike) -> Complex:
        """The response with the part's value times each factor, 0 to inf: (points,), or (factors, points).

        A resistor times 0 is a short, times inf open; a capacitor the other way round. Raises UnsolvableError
        where the changed network has no unique solution.
        """
        factors = np.asarray(factor, dtype=np.float64)
        if factors.ndim > 1 or np.isnan(factors).any() or self.kind == "Y":
            raise CircuitError(
                f"{self.name} cannot be scaled by {factor!r}.", remedy="Give numbers for a part."
            )
        if self.kind in "RCL" and (factors < 0).any():
            raise CircuitError(f"{self.name} cannot be negative.", remedy="Give factors from zero up.")
        with np.errstate(divide="ignore"):
            grown = 1 / factors if self.kind in "RL" else factors
        changes = [self._with_coefficient_times(float(times)) for times in np.atleast_1d(grown)]
        return changes[0] if factors.ndim == 0 else np.stack(changes)

    def shorted(self) -> Complex:
        """The response with the part, or the two nodes, joined by nothing but wire."""
        if self.kind not in "RCLY":
            raise CircuitError(f"{self.name} is a controlled source.", remedy="Scale it instead.")
        return self._in_the_limit()

    def opened(self) -> Complex:
        """The response with the part taken out."""
        return self._with_coefficient_times(0.0)

    def changed_by(self, change: npt.ArrayLike) -> Complex:
        """The response with more, (points,) or a number, added to the coefficient: siemens for R, C, L, Y."""
        d = np.broadcast_to(np.asarray(change, dtype=np.complex128), self.response.shape)
        return self._finite(d, 1 + d * self.port)

    def change_for(self, response: npt.ArrayLike) -> Complex:
        """The change of the coefficient that would turn the response into this one, (points,); the inverse.

        For the right part it is the same value at all frequencies: real for a resistor, j omega times a real
        number for a capacitor. Infinite where only a short does it, nan where no change of this part does
        anything.
        """
        moved = self.response - np.asarray(response, dtype=np.complex128)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(moved / (self.product - self.port * moved))

    def _with_coefficient_times(self, times: float) -> Complex:
        if math.isinf(times):
            return self._in_the_limit()
        if times == 1:
            return self.response
        d = (times - 1) * self.coefficient
        # 1 + d z = (1 - y z) + times y z, where the bracket may be all rounding.
        return self._finite(d, 1 + d * self.port)

    def _finite(self, d: Complex, denominator: Complex) -> Complex:
        if (np.abs(denominator) <= _LOST * (1 + np.abs(d * self.port))).any():
            raise self._unsolvable()
        return np.asarray(self.response - d * self.product / denominator)

    def _in_the_limit(self) -> Complex:
        if (self.port == 0).any():
            raise self._unsolvable()
        return np.asarray(self.response - self.product / self.port)

    def _unsolvable(self) -> UnsolvableError:
        return UnsolvableError(
            f"with {self.name} so changed the network has no solution that rounding leaves anything of.",
            remedy="Leave the case out: nothing else fixes a voltage or a current there.",
        )


def one_part(network: Network, frequency: npt.ArrayLike, of: str, part: str) -> OnePart:
    """The response at frequencies in Hz as a function of one part.

    Raises CircuitError for a source, UndecidedError for a coupling and a coupled inductor.
    """
    return every_part(network, frequency, of, [part])[part]


def every_part(
    network: Network, frequency: npt.ArrayLike, of: str, parts: list[str] | None = None
) -> dict[str, OnePart]:
    """`one_part` for all parts it is given for, or for those named; both solutions are shared.

    It is not given for sources, couplings and coupled inductors.
    """
    shared = _Shared(network, frequency, of)
    names = [name for name in network.values if name not in shared.coupled] if parts is None else parts
    return {name: shared.part(network.part(name)) for name in names}


def between(network: Network, frequency: npt.ArrayLike, of: str, nodes: str) -> OnePart:
    """The response as a function of an admittance put between two nodes, or from one to ground; now none."""
    a, b = node_pair(network, nodes)
    return _Shared(network, frequency, of).added(nodes, (a, b))


class _Shared:
    """The solutions that all parts share."""

    def __init__(self, network: Network, frequency: npt.ArrayLike, of: str) -> None:
        require_solvable(network)
        points = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
        if points.ndim != 1 or not np.isfinite(points).all() or (points < 0).any():
            raise CircuitError(
                "the frequencies are no list of finite numbers from zero up.", remedy="Give hertz."
            )
        pair = node_pair(network, of)
        rows = {row for coupling in network.couplings for row in (coupling, *network.coupled_by(coupling))}
        self.coupled = {network.names[row] for row in rows}
        self.network, self.s = network, points_of(network, 2 * math.pi * points)
        if (network.arrays().kinds == ord("L")).any():
            # An inductor's admittance has no value at zero.
            self.s = np.where(self.s == 0, span_of(network).far_below, self.s)
        self.equations = Equations(network, self.s)
        self.v = self.equations.forward(ac_drive(network).sources)
        self.w = self.equations.transposed(unit_output(network, pair, len(self.s)))
        self.response = np.asarray(self.v.across(*pair), dtype=np.complex128)

    def part(self, part: Part) -> OnePart:
        if part.kind in "VI":
            raise CircuitError(
                f"{part.name} is a source.", remedy="Name a part; a response is per unit of it."
            )
        if part.name in self.coupled:
            raise UndecidedError(
                f"the response as a function of {part.name} alone is not given: inductors are coupled there.",
                remedy="Solve afresh with its other value, as network.with_values does.",
            )
        nodes = [self.network.node_index(node) for node in part.nodes]
        if part.kind in "RCL":
            y = {"R": 1 / part.value, "C": self.s * part.value, "L": 1 / (self.s * part.value)}[part.kind]
            return self._admittance(part.name, part.kind, nodes, y)
        row = self.network.part_index(part.name)
        if part.kind in "EG":
            c, d = nodes[2:]
            cause = self.v.across(c, d)
            own = self.equations.transposed(unit_output(self.network, (c, d), len(self.s)))
        else:
            sensed = self.network.sensed_by(row)
            cause = self.v.branch(sensed)
        if part.kind == "E":
            product, port = -self.w.branch(row) * cause, -own.branch(row)
        elif part.kind == "G":
            product, port = self.w.across(*nodes[:2]) * cause, own.across(*nodes[:2])
        elif part.kind == "F":
            product, port = self.w.across(*nodes[:2]) * cause, self._pushed(nodes).branch(sensed)
        else:
            series = np.zeros(len(self.network))
            series[row] = 1
            dead = np.zeros(len(self.network), dtype=np.complex128)
            product = -self.w.branch(row) * cause
            port = -self.equations.forward(dead, series=series).branch(sensed)
        return self._found(part.name, part.kind, product, port, part.value)

    def added(self, name: str, nodes: tuple[int, int]) -> OnePart:
        return self._admittance(name, "Y", nodes, 0.0)

    def _admittance(self, name: str, kind: str, nodes: Sequence[int], y: Any) -> OnePart:
        a, b = nodes
        product = self.w.across(a, b) * self.v.across(a, b)
        return self._found(name, kind, product, self._pushed(nodes).across(a, b), y)

    def _pushed(self, nodes: Sequence[int]) -> Field:
        """What an ampere into the first node and out of the second does."""
        currents = unit_output(self.network, (nodes[0], nodes[1]), len(self.s))
        return self.equations.forward(np.zeros(len(self.network), dtype=np.complex128), currents)

    def _found(self, name: str, kind: str, product: Any, port: Any, coefficient: Any) -> OnePart:
        wide = [
            np.broadcast_to(np.asarray(numbers, dtype=np.complex128), self.response.shape)
            for numbers in (product, port, coefficient)
        ]
        return OnePart(name, kind, self.response, *wide)
