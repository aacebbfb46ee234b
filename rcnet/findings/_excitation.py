"""How strongly the waveforms of a circuit's sources set off each of its natural modes."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Network, Points, Sine, Source, Square, Step, Waveform
from ..exact import modal_system, node_pair

Float = npt.NDArray[np.float64]

_MOST_PARTS = 2000  # up to here the modes of a network of resistors and capacitors take a moment only
_MOST_OTHERS = 30  # and up to here those of other networks


@dataclass(frozen=True)
class Excitation:
    """The modes that waveforms set off.

    poles: rad/s, (modes,), the fastest first; shares: (modes,), what each contributes at most to the output,
    over the greatest thing that happens there; shares of opposite sign take one another away
    """

    poles: npt.NDArray[np.complex128]
    shares: npt.NDArray[np.complex128]


@np.errstate(all="ignore")  # values near the ends of what a double holds
def excitation(circuit: Circuit) -> Excitation | None:
    """The modes set off at the output; None where nothing is, or the network is too large for a quick look.

    Raises RcnetError where the network has no modes to tell.
    """
    network = circuit.network
    sources = [source for source in network.sources.values() if source.waveform is not None]
    if not circuit.output or not sources or _too_large(network):
        return None
    pair = node_pair(network, " ".join(circuit.output))
    system = modal_system(network, [pair], [source.name for source in sources])
    moving = system.poles != 0
    poles, weights = system.poles[moving], system.weights[:, 0, moving]
    if not len(poles):
        return None
    made = (np.array([_effect(source, np.abs(poles)) for source in sources]) * weights).sum(axis=0)
    sizes = np.array([_size(source) for source in sources])
    lasting = np.maximum(np.abs(system.static[:, 0]), np.abs(system.direct[:, 0])) @ sizes
    greatest = max(float(np.abs(made).max()), float(lasting))
    if not (greatest > 0 and math.isfinite(greatest)):
        return None
    order = np.argsort(-np.abs(poles), kind="stable")
    return Excitation(poles[order].astype(np.complex128), made[order].astype(np.complex128) / greatest)


def _too_large(network: Network) -> bool:
    arrays = network.arrays()
    plain = np.isin(arrays.kinds, [*b"RCVI"]).all()
    floating = (arrays.kinds == ord("V")) & (arrays.nodes[:, :2] != 0).all(axis=1)
    return len(network) > (_MOST_PARTS if plain and not floating.any() else _MOST_OTHERS)


def _effect(source: Source, rates: Float) -> Float:
    """The size of the sharpest change, as each mode feels it: one that lasts longer than it, the less."""
    assert source.waveform is not None
    felt = [
        abs(size) * np.minimum(1.0, 1 / np.maximum(rates * duration, 1e-300))
        for size, duration in changes(source.waveform)
    ]
    return np.asarray(np.max(felt, axis=0)) if felt else np.zeros_like(rates)


def _size(source: Source) -> float:
    assert source.waveform is not None
    return max((abs(size) for size, _ in changes(source.waveform)), default=0.0)


def changes(wave: Waveform) -> list[tuple[float, float]]:
    """Every change of a waveform: how much, V or A, and the time it takes, s; a sine takes 1/omega."""
    if isinstance(wave, Square):
        return [(wave.high - wave.low, wave.rise), (wave.low - wave.high, wave.fall)]
    if isinstance(wave, Sine):
        return [(wave.amplitude, 1 / (2 * math.pi * wave.frequency))]
    if isinstance(wave, Step):
        return [(wave.final - wave.initial, wave.rise)]
    if isinstance(wave, Points):
        return [(after[1] - before[1], after[0] - before[0]) for before, after in pairwise(wave.values)]
    size = wave.final - wave.initial
    return [(size, wave.rise_time_constant), *([(-size, wave.fall_time_constant)] if wave.falls else [])]


def begins(wave: Waveform) -> float:
    """When a waveform begins to change, s."""
    if isinstance(wave, Points):
        return next((before[0] for before, after in pairwise(wave.values) if before[1] != after[1]), 0.0)
    for name in ("delay", "at", "rise_delay"):
        if hasattr(wave, name):
            return float(getattr(wave, name))
    return 0.0
