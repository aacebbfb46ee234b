"""Suspicions put to the test: applied to the circuit or the results, and the exact curves computed anew."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import RcnetError
from ..exact import Drive, nodal, require_solvable, solver_for
from .allowance import rounding_allowance
from .changes import changed, with_values_of
from .evidence import Block, Complex, Evidence, Float, Observed, contribution, value_table
from .misreadings import AXES, MISREADINGS
from .suspicion import OF_RESULTS, Suspicion

Numbers = npt.NDArray[Any]

FITS = 4.0  # no value further off than this many times what is allowed, and all of them within it on average
SETTLED = 1e-6  # share of a value below which nobody tells two predictions apart
_NUDGE = 1e-4


@dataclass(frozen=True, eq=False)
class Trial:
    """A suspicion applied.

    predicted: (values,), the curves it makes; left: the weighted squares it leaves; off: the root mean square
    of what is left over what is allowed; fits: True if that is within what is allowed; settled: True if
    nothing is left that could be seen; slack: how far ln of the amount may lie off for what is left
    """

    suspicion: Suspicion
    predicted: Complex
    left: float
    off: float
    fits: bool
    settled: bool
    slack: float = 0.0


class Trials:
    """All trials of one network with one evidence."""

    def __init__(self, network: Network, evidence: Evidence) -> None:
        self.network, self.evidence = network, evidence
        self._contributions: dict[str, Complex] = {}

    # ------------------------------------------------------------------ the curves a suspicion makes

    def predict(self, suspicion: Suspicion) -> Complex:
        """The curves with a suspicion applied, (values,). Raises RcnetError where there are none."""
        if suspicion.kind in OF_RESULTS:
            return self._misread(suspicion)
        if suspicion.kind == "source-scale":
            factor = suspicion.amount or 0.0
            if not suspicion.parts:
                return np.asarray(factor * self.evidence.exact)
            return self.evidence.exact + (factor - 1) * self.contribution_of(suspicion.parts[0])
        values = with_values_of(self.network, suspicion)
        if values is not None:
            return self.evidence.predicted_by(self.network, value_table(self.network, values))
        return self.evidence.predicted_by(changed(self.network, suspicion))

    def contribution_of(self, source: str) -> Complex:
        """What one source alone does to the curves, (values,)."""
        if source not in self._contributions:
            self._contributions[source] = contribution(self.evidence, self.network, source)
        return self._contributions[source]

    @cached_property
    def voltages(self) -> list[Numbers]:
        """The exact voltages of all nodes, (nodes, points) for each block."""
        solver = solver_for(self.network)
        blocks = self.evidence.blocks
        return [solver.solve(block.s, Drive(block.drive(self.network))).voltages for block in blocks]

    def _misread(self, suspicion: Suspicion) -> Complex:
        if suspicion.kind == "node":
            return self._renamed(dict(suspicion.renamed))
        if suspicion.word in AXES:
            return self._on_axis(AXES[suspicion.word][0])
        mistake = MISREADINGS[suspicion.word]

        def read(block: Block, curve: Observed) -> Numbers:
            meant = not suspicion.curves or curve.name in suspicion.curves
            if not meant or (block.analysis == "operating point" and not mistake.real_too):
                return np.asarray(curve.exact, dtype=np.complex128)
            return mistake.apply(np.asarray(curve.exact, dtype=np.complex128))

        return self.evidence.row(lambda block: np.stack([read(block, curve) for curve in block.curves]))

    def _renamed(self, renamed: dict[str, str]) -> Complex:
        rows: list[Numbers] = []
        for block, voltages in zip(self.evidence.blocks, self.voltages, strict=True):
            for curve in block.curves:
                node = renamed.get(curve.name)
                rows.append(curve.exact if node is None else voltages[self.network.node_index(node)])
        return np.concatenate([np.asarray(row, dtype=np.complex128) for row in rows])

    def _on_axis(self, times: float) -> Complex:
        blocks = tuple(
            block if block.analysis == "operating point" else replace(block, axis=block.axis * times)
            for block in self.evidence.blocks
        )
        return replace(self.evidence, blocks=blocks).predicted_by(self.network)

    # ------------------------------------------------------------------ how well they fit

    def trial(self, suspicion: Suspicion, predicted: Complex | None = None, slack: float = 0.0) -> Trial:
        """A suspicion applied and judged. Raises RcnetError where it cannot be applied."""
        curves = self.predict(suspicion) if predicted is None else predicted
        evidence = self.evidence
        apart = np.abs(evidence.other - curves)
        sizes = np.abs(evidence.other) + np.abs(evidence.exact)
        off, fits = within(apart, evidence.allowed)
        if (
            not fits
            and suspicion.kind not in OF_RESULTS
            and within(apart, 1e-4 * sizes + evidence.allowed)[1]
        ):
            # The changed network may lose more digits in a simulator than the sound one.
            off, fits = within(apart, np.maximum(evidence.allowed, self._allowance(suspicion)))
        _, settled = within(apart, np.minimum(evidence.allowed + 1e-13 * sizes, SETTLED * sizes))
        return Trial(suspicion, curves, evidence.squared(curves), off, fits, fits and settled, slack)

    def _allowance(self, suspicion: Suspicion) -> Float:
        """How far a simulator's rounding may take it off the changed network's curves, (values,)."""
        try:
            network = changed(self.network, suspicion)
            return self.evidence.row(lambda block: _rounding(network, block)).real
        except RcnetError:
            return np.zeros(len(self.evidence.exact))

    def settle(self, suspicion: Suspicion, slope: Complex) -> Trial:
        """The trial of a suspicion with its amount corrected by exact curves.

        slope: (values,), the derivative of the curves by ln of the amount. Raises RcnetError.
        """
        weight, other = self.evidence.weight, self.evidence.other
        bottom = float(np.sum(weight * np.abs(slope) ** 2))
        best, curves = suspicion, self.predict(suspicion)
        left = self.evidence.squared(curves)
        for _ in range(2):
            step = float(np.sum(weight * (slope.conj() * (other - curves)).real)) / bottom if bottom else 0.0
            if best.amount is None or not abs(step) < 1:
                break
            new = best.with_amount(best.amount * math.exp(step))
            tried = self.predict(new)
            if not self.evidence.squared(tried) < left:
                break
            best, curves, left = new, tried, self.evidence.squared(tried)
        slack = math.sqrt(left / max(len(other) - 1, 1) / bottom) if bottom else math.inf
        return self.trial(best, curves, slack)

    def fitted(self, suspicion_of: Callable[[float], Suspicion], start: float, steps: int = 8) -> Trial:
        """The trial of a suspicion with the amount that fits best, by Gauss-Newton from `start`.

        suspicion_of: the suspicion for a number of which the curves are a smooth function. Raises RcnetError.
        """
        weight, other = self.evidence.weight, self.evidence.other
        x, curves = start, self.predict(suspicion_of(start))
        slack, shorter = math.inf, 1.0
        for _ in range(steps):
            nudge = _NUDGE * max(abs(x), 1e-3)
            slope = (self.predict(suspicion_of(x + nudge)) - curves) / nudge
            bottom = float(np.sum(weight * np.abs(slope) ** 2))
            if not bottom:
                break
            left = self.evidence.squared(curves)
            slack = math.sqrt(left / max(len(other) - 1, 1) / bottom)
            step = shorter * float(np.sum(weight * (slope.conj() * (other - curves)).real)) / bottom
            try:
                tried = self.predict(suspicion_of(x + step))
            except RcnetError:
                shorter /= 4
                continue
            if not self.evidence.squared(tried) < left:
                shorter /= 4
                continue
            x, curves = x + step, tried
        return self.trial(suspicion_of(x), curves, slack)


def within(apart: Float, allowed: Float) -> tuple[float, bool]:
    """Root mean square of a distance over what is allowed, and whether it is within it."""
    told = np.isfinite(allowed)
    with np.errstate(all="ignore"):
        ratio = np.where(apart[told] == 0, 0.0, apart[told] / allowed[told])
    if not ratio.size:
        return 0.0, True
    if not np.isfinite(ratio).all():
        return math.inf, False
    off = float(np.sqrt(np.mean(np.square(np.minimum(ratio, 1e150)))))
    return off, off <= 1 and float(ratio.max()) <= FITS


def _rounding(network: Network, block: Block) -> Float:
    require_solvable(network, dc=not block.s.all())
    branch_of = nodal.equations(network).branch_of
    rows = []
    for curve in block.curves:
        if curve.source is not None:
            rows.append([branch_of[network.part_index(curve.source)]])
        else:
            rows.append([network.node_index(node) - 1 for node in curve.nodes if node != "0"])
    wanted = sorted({row for own in rows for row in own})
    bound = rounding_allowance(network, block.s, block.drive(network), wanted)
    index = {row: k for k, row in enumerate(wanted)}
    zero = np.zeros(bound.shape[1])
    return np.stack([sum((bound[index[row]] for row in own), start=zero) for own in rows])
