"""Causes that the results cannot tell apart, and the one measurement that would."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, Network
from ..errors import RcnetError
from ..exact import Drive, require_solvable, solver_for
from .changes import changed
from .evidence import Block, Evidence, Float
from .misreadings import AXES, MISREADINGS
from .suspicion import Suspicion

Numbers = npt.NDArray[Any]

_MARGIN = 100.0  # how far beyond the results' own frequencies a measurement is looked for
_POINTS = 61
_TELLING = 3.0  # how many times what is allowed two predictions must lie apart
_FINEST = 1e-6  # share of a value that a measurement is credited with resolving


@dataclass(frozen=True)
class Measurement:
    """A voltage that tells causes apart.

    node: whose voltage to ground; frequency: Hz, None at dc
    predicted: what each cause makes of it, V, complex unless at dc
    apart: how many times what is allowed the first cause lies from the nearest other
    """

    node: str
    frequency: float | None
    predicted: tuple[complex | float, ...]
    apart: float


def telling_measurement(
    network: Network, evidence: Evidence, suspicions: Sequence[Suspicion]
) -> Measurement | None:
    """Where the predictions of causes lie furthest apart over what is allowed; None where nowhere.

    The first is held against each of the others; such as cannot be told from it anywhere are left aside.
    """
    if len(suspicions) < 2:
        return None
    for block in _asked(evidence):
        found = _told_at(network, evidence, block, suspicions)
        if found is not None:
            return found
    return None


def _told_at(
    network: Network, evidence: Evidence, block: Block, suspicions: Sequence[Suspicion]
) -> Measurement | None:
    fields = [_field(network, block, suspicion) for suspicion in suspicions]
    if any(field is None for field in fields):
        return None
    stack = np.stack([field for field in fields if field is not None])
    apart = np.abs(stack[1:] - stack[0]) / _allowed(evidence, stack)
    apart[~np.isfinite(apart)] = 0.0
    apart[:, 0] = 0.0
    telling = apart.max(axis=(1, 2)) > _TELLING
    if not telling.any():
        return None
    worth = apart[telling].min(axis=0)
    if worth.max() <= _TELLING:
        worth = apart[telling].mean(axis=0)
    node, point = np.unravel_index(int(np.argmax(worth)), worth.shape)
    dc = block.analysis == "operating point"
    found = stack[:, node, point]
    predicted = tuple(float(v.real) if dc else complex(v) for v in found)
    frequency = None if dc else float(block.axis[point])
    return Measurement(network.nodes[int(node)], frequency, predicted, float(worth.max()))


def _asked(evidence: Evidence) -> list[Block]:
    """Where to look: over the results' frequencies, then a wider sweep; or their operating point."""
    swept = [block for block in evidence.blocks if block.analysis == "ac" and (block.axis > 0).any()]
    if not swept:
        return list(evidence.blocks[:1])
    curves = swept[0].curves
    low = min(float(block.axis[block.axis > 0].min()) for block in swept)
    high = max(float(block.axis.max()) for block in swept)
    axes = [np.geomspace(low / margin, high * margin, _POINTS) for margin in (1.0, _MARGIN)]
    return [Block("ac", axis, curves, slice(0, _POINTS)) for axis in axes]


def _field(network: Network, block: Block, suspicion: Suspicion) -> Numbers | None:
    """Every node's voltage as the cause has it, in the order of the sound network, (nodes, points)."""
    try:
        if suspicion.word in AXES:
            times = AXES[suspicion.word][0]
            return _solved(network, Block("ac", block.axis * times, block.curves, block.points), network)
        if suspicion.word:
            # Of one curve alone the mistake is in that column, and the network is sound.
            exact = _solved(network, block, network)
            return exact if suspicion.curves else MISREADINGS[suspicion.word].apply(exact)
        if suspicion.kind == "node":
            return _solved(network, block, network)
        if suspicion.kind == "source-scale" and not suspicion.parts:
            return (suspicion.amount or 0.0) * _solved(network, block, network)
        return _solved(changed(network, suspicion), block, network)
    except RcnetError:
        return None


def _solved(network: Network, block: Block, sound: Network) -> Numbers:
    require_solvable(network, dc=not block.s.all())
    voltages = solver_for(network).solve(block.s, Drive(block.drive(network))).voltages
    missing = np.full(voltages.shape[1], np.nan)
    known = [
        voltages[network.node_index(node)] if node == GROUND or network.has_node(node) else missing
        for node in sound.nodes
    ]
    return np.stack(known)


def _allowed(evidence: Evidence, stack: Numbers) -> Float:
    """What a measurement like those at hand would resolve: their share of a value, and their floor."""
    told = np.isfinite(evidence.allowed) & (np.abs(evidence.exact) > 0)
    with np.errstate(over="ignore"):
        shares = np.minimum(evidence.allowed[told] / np.abs(evidence.exact[told]), 1e6)
    share = max(float(np.median(shares)) if shares.size else 0.0, _FINEST)
    floor = float(evidence.allowed[told].min()) if told.any() else 0.0
    scale = float(np.abs(evidence.exact).max(initial=0.0)) or 1.0
    return np.asarray(share * np.abs(stack).max(axis=0) + floor + _FINEST * scale)
