"""The exact response over time to the waveforms of all sources, from the steady state at t = 0."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Exponential, Network, Sine, Source, Step, Waveform
from ..errors import CircuitError, UndecidedError
from .ac import node_pair
from .modes import Driver, ModalSystem, modal_system, sampled
from .pieces import Pieces, followed, pieces_of
from .rest import FromRest, Impulse
from .solver import require_solvable
from .swings import swings_of, swung, turns_of

Float = npt.NDArray[np.float64]
Pair = tuple[int, int]

_BLOCK = 4_000_000  # numbers held at once: times by terms
_RESONANT = 1e-6  # a mode this near to a sine, relatively, rises with it rather than dies away from it


def transient(network: Network, time: npt.ArrayLike, of: str | Sequence[str]) -> Float:
    """The exact response at times in seconds, volts.

    time: (times,), zero or more, in any order; of: a node, a pair `"a b"`, or a list of these
    Returns (times,), or (of, times) for a list.

    Before t = 0 every source has kept its waveform's value at t = 0, or its dc value where it has no
    waveform, for ever; nodes that only capacitors hold have carried no charge. At a vertical edge the value
    is the one just after it. Each mode is followed in closed form from the last corner before each time:
    there is no time step. Raises CircuitError for wrong names and times, UnsolvableError where there is no
    unique solution, and UndecidedError where there is no steady state to start from or the modes cannot be
    had to full accuracy.
    """
    points = _times(time)
    single = isinstance(of, str)
    pairs = [node_pair(network, text) for text in ([of] if isinstance(of, str) else of)]
    driven = _together(network)
    require_solvable(network)
    answer = np.zeros((len(pairs), len(points)))
    if driven and pairs:
        system = modal_system(network, pairs, [each.driver for each in driven])
        with np.errstate(over="ignore", invalid="ignore"):
            for number, each in enumerate(driven):
                answer += _from_source(network, pairs, system, number, each, points)
        if not np.isfinite(answer).all():
            raise UndecidedError("the circuit is unstable, and its output has outgrown every number by then.")
    return answer[0] if single else answer


def _times(time: npt.ArrayLike) -> Float:
    try:
        points = np.atleast_1d(np.asarray(time, dtype=np.float64))
    except (TypeError, ValueError) as exc:
        raise CircuitError(f"the times are not numbers: {exc}.", remedy="Give seconds.") from exc
    if points.ndim != 1 or not np.isfinite(points).all() or (points < 0).any():
        raise CircuitError("the times are no list of finite numbers from zero up.", remedy="Give seconds.")
    return points


def driving(network: Network) -> list[str]:
    """The sources that do anything over time: those with a waveform, or a dc value other than zero."""
    return [
        name
        for name, source in network.sources.items()
        if source.waveform is not None or source.dc not in (None, 0.0)
    ]


def starting_value(source: Source) -> float:
    """What the source has given for ever before t = 0."""
    return source.waveform.start if source.waveform is not None else source.operating_value


@dataclass(frozen=True, slots=True)
class _Driven:
    """A source, or several that do the same at once: what drives, its name, its past and its waveform."""

    driver: Driver
    name: str
    start: float
    wave: Waveform | Impulse | None


def _together(network: Network) -> list[_Driven]:
    """What drives the network; steps from nothing that happen at once, and impulses, as one."""
    driven: list[_Driven] = []
    alike: dict[Step | Impulse, list[tuple[str, float]]] = {}
    for name in driving(network):
        source = network.sources[name]
        wave: Any = source.waveform
        if isinstance(wave, FromRest):
            if wave.first:
                alike.setdefault(Step(0.0, 1.0), []).append((name, wave.first))
            wave = wave.risen
        if isinstance(wave, Impulse):
            alike.setdefault(Impulse(1.0), []).append((name, wave.charge))
        elif isinstance(wave, Step) and wave.initial == 0:
            alike.setdefault(replace(wave, final=1.0), []).append((name, wave.final))
        else:
            driven.append(_Driven(name, name, starting_value(source), wave))
    for wave, members in alike.items():
        name = ", ".join(name for name, _ in members[:8])
        driven.append(_Driven(tuple(members), name, 0.0, wave))
    return driven


def _from_source(
    network: Network, pairs: Sequence[Pair], system: ModalSystem, number: int, source: _Driven, time: Float
) -> Float:
    """What one source contributes: (outputs, times)."""
    start, wave = source.start, source.wave
    if isinstance(wave, Impulse):
        return _after_impulse(system, number, time)
    static, integrating = system.static[number], system.integrating[number]
    if integrating.any() and start != 0:
        raise UndecidedError(
            f"there is no steady state to start from: {source.name} charges nodes that nothing drains.",
        )
    answer = np.repeat(static[:, None] * start, len(time), axis=1)
    if wave is None:
        return answer
    if isinstance(wave, Sine) and _settles(system, number, wave):
        s = np.array([2j * math.pi * wave.frequency])
        steady = sampled(network, pairs, [source.driver], s)[0, :, 0]
        return _under_sine(system, number, wave, steady, time)
    if isinstance(wave, (Sine, Exponential)):
        for swing in swings_of(wave):
            for part in blocks(np.flatnonzero(time >= swing.begin), len(system.poles)):
                answer[:, part] += swung(system, number, swing, time[part] - swing.begin)
        return answer
    pieces = pieces_of(wave)
    moving = system.poles != 0
    lag = followed(pieces, system.poles[moving])
    weights = system.weights[number][:, moving]
    for part in blocks(np.flatnonzero(time >= pieces.begin), len(system.poles)):
        turn, piece, since = pieces.located(time[part])
        lacking = np.real(lag.at(turn, piece, since) @ weights.T).T
        answer[:, part] = static[:, None] * pieces.value_in(piece, since) + lacking
    if integrating.any():
        total = (system.residues[number][:, ~moving]).real.sum(axis=-1)
        answer += total[:, None] * np.where(time < pieces.begin, 0.0, _integral(pieces, time))
    return np.asarray(answer)


def _after_impulse(system: ModalSystem, number: int, time: Float) -> Float:
    """What remains of a unit of charge that the source has passed on at t = 0: (outputs, times)."""
    answer = np.zeros((len(system.static[number]), len(time)))
    for part in blocks(np.arange(len(time)), len(system.poles)):
        left = np.exp(np.outer(time[part], system.poles))
        answer[:, part] = np.real(left @ system.residues[number].T).T
    return answer


def blocks(rows: npt.NDArray[np.int64], terms: int) -> list[npt.NDArray[np.int64]]:
    """The rows in blocks that keep rows by terms bounded."""
    size = max(1, _BLOCK // max(terms, 1))
    return [rows[start : start + size] for start in range(0, len(rows), size)]


def _integral(pieces: Pieces, time: Float) -> Float:
    """The integral of the waveform from `begin`, where it began at zero."""
    turn, piece, since = pieces.located(np.maximum(time, pieces.begin))
    finite = np.where(np.isfinite(pieces.lengths), pieces.lengths, 0.0)
    areas = finite * (pieces.levels + np.where(finite > 0, pieces.ends, 0.0)) / 2
    before = np.concatenate([[0.0], np.cumsum(areas)])
    here = since * (pieces.levels[piece] + pieces.slopes[piece] * since / 2)
    return np.asarray(turn * before[-1] + before[piece] + here)


def _settles(system: ModalSystem, number: int, wave: Sine) -> bool:
    """True where a sine has a steady response that all others die away from."""
    apart = np.abs(system.poles - 2j * math.pi * wave.frequency)
    resonant = bool((apart < _RESONANT * np.abs(system.poles)).any())
    return not (wave.damping or resonant or system.integrating[number].any())


def _under_sine(
    system: ModalSystem, number: int, wave: Sine, steady: npt.NDArray[np.complex128], time: Float
) -> Float:
    """The phasor of the exact response, and each mode's own decay from the mismatch at the beginning."""
    omega = 2 * math.pi * wave.frequency
    phasor = wave.amplitude * np.exp(1j * math.radians(wave.phase))
    since = time - wave.delay
    going = since >= 0
    turning = np.exp(2j * math.pi * turns_of(wave.frequency, np.where(going, since, 0.0)))
    rest = system.static[number][:, None] * wave.start
    running = system.static[number][:, None] * wave.offset + np.imag(steady[:, None] * (phasor * turning))
    answer = np.where(going, running, rest)
    moving = system.poles != 0
    poles, weights = system.poles[moving], system.weights[number][:, moving]
    # e' = p e - u' with u' = (w U e^jwt + w conj(U) e^-jwt) / 2 has this solution at t = 0:
    forced = -(omega / 2) * (phasor / (1j * omega - poles) + np.conj(phasor) / (-1j * omega - poles))
    forced = forced if np.iscomplexobj(poles) else forced.real
    for part in blocks(np.flatnonzero(going), len(poles)):
        answer[:, part] -= np.real(np.exp(np.outer(since[part], poles)) @ (weights * forced).T).T
    return np.asarray(answer)
