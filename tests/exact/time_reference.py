"""An independent reference over time: natural modes by mpmath's own eigensolver, sources by plain
superposition.
"""

from __future__ import annotations

from collections.abc import Sequence

import mpmath

from rcnet.circuit import Network

DIGITS = 60
Number = float | mpmath.mpf


class ModalReference:
    """The step and ramp responses of an RC network with one grounded voltage source `V1`, to 60 digits.

    Every node needs a capacitor on some path to ground. G and C are stamped here; C = L L^T and mpmath's
    symmetric eigensolver give the modes (textbook simultaneous diagonalisation).
    """

    def __init__(self, network: Network) -> None:
        with mpmath.workdps(DIGITS):
            self.driven = network.sources["V1"].nodes[0]
            names = [name for name in network.nodes if name not in ("0", self.driven)]
            self.row = {name: k for k, name in enumerate(names)}
            size = len(names)
            tables = {"R": mpmath.zeros(size), "C": mpmath.zeros(size)}
            inputs = {"R": mpmath.zeros(size, 1), "C": mpmath.zeros(size, 1)}
            for part in network.parts:
                if part.kind not in "RC":
                    continue
                value = 1 / mpmath.mpf(part.value) if part.kind == "R" else mpmath.mpf(part.value)
                a, b = part.nodes
                for here, there in ((a, b), (b, a)):
                    if here in self.row:
                        tables[part.kind][self.row[here], self.row[here]] += value
                        if there in self.row:
                            tables[part.kind][self.row[here], self.row[there]] -= value
                        elif there == self.driven:
                            inputs[part.kind][self.row[here]] += value
            lower = mpmath.inverse(mpmath.cholesky(tables["C"]))
            rates, turned = mpmath.eigsy(lower * tables["R"] * lower.T)
            shapes = lower.T * turned
            self.rates = [rates[k] for k in range(size)]
            self.shapes = [[shapes[row, k] for k in range(size)] for row in range(size)]
            self.drive = [
                sum(shapes[row, k] * (inputs["R"][row] - rates[k] * inputs["C"][row]) for row in range(size))
                for k in range(size)
            ]
            self.direct = [
                sum(
                    self.shapes[row][k] * sum(self.shapes[r][k] * inputs["C"][r] for r in range(size))
                    for k in range(size)
                )
                for row in range(size)
            ]

    def residues(self, node: str) -> list[mpmath.mpf]:
        """Residues of v(node)/v(V1), in the order of `rates`."""
        with mpmath.workdps(DIGITS):
            return [
                shape * drive for shape, drive in zip(self.shapes[self.row[node]], self.drive, strict=True)
            ]

    def step(self, node: str, time: mpmath.mpf) -> mpmath.mpf:
        """The response to a unit step at 0."""
        with mpmath.workdps(DIGITS):
            if time < 0:
                return mpmath.mpf(0)
            terms = zip(self.residues(node), self.rates, strict=True)
            return self.direct[self.row[node]] + sum(r / p * -mpmath.expm1(-p * time) for r, p in terms)

    def ramp(self, node: str, time: mpmath.mpf) -> mpmath.mpf:
        """The response to a ramp of 1 V/s that begins at 0."""
        with mpmath.workdps(DIGITS):
            if time < 0:
                return mpmath.mpf(0)
            terms = zip(self.residues(node), self.rates, strict=True)
            return self.direct[self.row[node]] * time + sum(
                r / p * (time + mpmath.expm1(-p * time) / p) for r, p in terms
            )

    def under(
        self, node: str, start: float, corners: Sequence[tuple[float, Number, Number]], time: float
    ) -> mpmath.mpf:
        """The response at `time` to `start` since ever, then (when, jump, change of slope), times exact
        doubles.
        """
        with mpmath.workdps(DIGITS):
            gain = self.direct[self.row[node]] + sum(
                r / p for r, p in zip(self.residues(node), self.rates, strict=True)
            )
            total = mpmath.mpf(start) * gain
            for when, jump, slope in corners:
                since = mpmath.mpf(time) - mpmath.mpf(when)
                if since >= 0:
                    total += mpmath.mpf(jump) * self.step(node, since) + mpmath.mpf(slope) * self.ramp(
                        node, since
                    )
            return total
