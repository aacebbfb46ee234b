"""How each driver of a network reaches each curve over time, as a sum over modes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..circuit import Circuit, Network
from ..exact import transient
from ..exact.modes import ModalSystem
from ..exact.rest import FromRest
from .drivers import Wave, wave_of
from .records import Numbers
from .source_currents import CurrentSum
from .targets import Target

Sums = dict[int, CurrentSum | None]


@dataclass(frozen=True)
class Reach:
    """How a driver reaches a curve: alpha u + beta u' + Re(e . weights), an impulse Re(x . weights).

    drift: what the integral of u adds, per second, through poles at zero
    """

    alpha: float
    beta: float
    weights: Numbers
    drift: float = 0.0


def pairs_of(target: Target, sums: Sums) -> list[tuple[int, int]]:
    """The pairs of nodes whose voltages a target is made of."""
    if target.source is None:
        return [target.nodes]
    found = sums[target.source]
    return [] if found is None else found.pairs


def given_of(network: Network, target: Target, sums: Sums) -> list[tuple[float, Wave]]:
    """The current sources that add to a source's current, each with its factor."""
    found = None if target.source is None else sums[target.source]
    return [] if found is None else [(factor, _wave(network, name)) for factor, name in found.given]


def sudden_of(circuit: Circuit, network: Network, target: Target, sums: Sums) -> float:
    """The charge by which capacitors at a source jump from where they were told to start."""
    found = None if target.source is None else sums[target.source]
    if found is None or not found.capacitance:
        return 0.0
    total = 0.0
    for (farads, (a, b)), name in zip(found.capacitance, found.capacitors, strict=True):
        ends = network.nodes[a], network.nodes[b]
        begun = float(transient(network, [0.0], " ".join(ends))[0])
        first, second = (circuit.initial.nodes.get(node, 0.0) for node in ends)
        total += abs(farads * (begun - circuit.initial.parts.get(name, first - second)))
    return total


def _wave(network: Network, name: str) -> Wave:
    source = network.sources[name]
    wave = source.waveform
    if isinstance(wave, FromRest):
        wave = wave.wave
    return Wave(source.operating_value, None) if wave is None else wave_of(wave, wave.start)


def reach_of(
    system: ModalSystem,
    number: int,
    target: Target,
    sums: Sums,
    index: dict[tuple[int, int], int],
    sudden: bool,
) -> Reach:
    """How a driver reaches a target; poles at zero are still among the weights."""
    found = None if target.source is None else sums[target.source]
    residues, weights = system.residues[number], system.weights[number]
    static, direct, poles = system.static[number], system.direct[number], system.poles
    still = poles == 0
    if found is None:
        k = index[target.nodes]
        drift = float(residues[k][still].real.sum())
        return Reach(float(static[k]), 0.0, residues[k] if sudden else weights[k], 0.0 if sudden else drift)
    alpha = beta = drift = 0.0
    total: Numbers = np.zeros(len(poles), dtype=residues.dtype)
    for factor, pair in found.conductance:
        k = index[pair]
        alpha += factor * static[k]
        drift += factor * float(residues[k][still].real.sum())
        total = total + factor * (residues[k] if sudden else weights[k])
    for factor, pair in found.capacitance:
        k = index[pair]
        beta += factor * direct[k]
        alpha += factor * float(residues[k][still].real.sum())
        total = total + factor * (poles * residues[k] if sudden else -residues[k])
    return Reach(float(alpha), float(beta), total, 0.0 if sudden else drift)
