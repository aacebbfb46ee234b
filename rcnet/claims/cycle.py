"""The periodic steady state of many samples of one network under one source of straight pieces."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Points, Square
from ..errors import UndecidedError
from ..exact.pieces import Pieces, pieces_of
from .sums import Sampler, Sums

Float = npt.NDArray[np.float64]
Indices = npt.NDArray[np.int64]
Pair = tuple[int, int]

_EVEN, _GRADED = 33, 49  # points of time looked at in each piece
_GOLDEN = (math.sqrt(5) - 1) / 2
_MOST_PIECES = 64


@dataclass(frozen=True)
class Cycles:
    """One output over a period: in piece j, s seconds after its corner, for each sample

    offset_j + rise_j s + sum over modes of decaying_j exp(-s rate)

    offset, rise: (samples, pieces); decaying: (samples, pieces, modes); rate: (samples, modes), 1/s
    lengths: (pieces,), s; times: of each piece, where turns are looked for, (pieces, points)
    """

    sums: Sums
    mean: Float
    offset: Float
    rise: Float
    decaying: Float
    rate: Float
    lengths: Float
    times: Float

    def alternating_square(self) -> Float:
        """The mean square of the output less its mean, (samples,), in closed form."""
        total = np.zeros(len(self.rate))
        both = self.rate[:, :, None] + self.rate[:, None, :]
        for j, h in enumerate(self.lengths.tolist()):
            a, b, e = self.offset[:, j] - self.mean, self.rise[:, j], self.decaying[:, j]
            gone = -np.expm1(-h * self.rate)
            total += a * a * h + a * b * h * h + b * b * h**3 / 3
            moment = gone / self.rate**2 - h * (1 - gone) / self.rate
            total += 2 * (e * (a[:, None] * gone / self.rate + b[:, None] * moment)).sum(axis=1)
            total += np.einsum("sk,skl,sl->s", e, -np.expm1(-h * both) / both, e)
        return np.asarray(total / self.lengths.sum())

    def greatest(self, sign: float) -> Float:
        """The supremum of the output where sign is 1, its infimum where it is -1, (samples,)."""
        best = np.full(len(self.rate), -np.inf)
        for j in range(len(self.lengths)):
            grid = np.broadcast_to(self.times[j], (len(self.rate), self.times.shape[1]))
            values = sign * self._at(j, grid)
            top = values.argmax(axis=1)
            left, right = (
                self.times[j][np.maximum(top - 1, 0)],
                self.times[j][np.minimum(top + 1, grid.shape[1] - 1)],
            )
            best = np.maximum(best, np.maximum(values.max(axis=1), self._refined(j, left, right, sign)))
        return sign * best

    def _at(self, j: int, time: Float) -> Float:
        fading = np.einsum("sk,stk->st", self.decaying[:, j], np.exp(-time[..., None] * self.rate[:, None]))
        return np.asarray(self.offset[:, j, None] + self.rise[:, j, None] * time + fading)

    def _refined(self, j: int, low: Float, high: Float, sign: float) -> Float:
        """The maximum between points of time, by golden section (J. Kiefer, 1953)."""
        for _ in range(24):
            width = _GOLDEN * (high - low)
            inner = np.stack([high - width, low + width], axis=1)
            values = sign * self._at(j, inner)
            left = values[:, 0] >= values[:, 1]
            low, high = np.where(left, low, inner[:, 0]), np.where(left, inner[:, 1], high)
        return np.asarray(sign * self._at(j, ((low + high) / 2)[:, None])[:, 0])


def cycles(network: Network, names: Sequence[str], of: Pair) -> tuple[Callable[[Float], Cycles], Pieces]:
    """A function from part values (samples, names) to the periodic steady states, and what drives them.

    Raises UndecidedError for other drives, and where the network has no dc solution.
    """
    sources = network.sources
    wave = next(iter(sources.values())).waveform if len(sources) == 1 else None
    if not isinstance(wave, (Square, Points)) or wave.repeats is None:
        raise UndecidedError("several sources add up, or the one is not of straight pieces that repeat.")
    pieces = pieces_of(wave)
    unit = np.zeros(len(network), dtype=np.complex128)
    unit[network.part_index(next(iter(sources)))] = 1.0
    sampler = Sampler(network, names, of, unit)
    if sampler.centre or len(pieces.corners) > _MOST_PIECES:
        raise UndecidedError("the network has no dc solution, or the waveform has too many pieces.")
    return lambda values: _settled(sampler(values), pieces), pieces


def _settled(sums: Sums, pieces: Pieces) -> Cycles:
    if np.iscomplexobj(sums.mu) and np.abs(sums.mu.imag).max() > 1e-9 * np.abs(sums.mu).max():
        raise np.linalg.LinAlgError("ringing modes are not followed here")
    mu, constant, slope = sums.mu.real, np.real(sums.constant), np.real(sums.slope)
    moving = mu > 1e-14 * mu.max(axis=1, keepdims=True)
    tau = np.where(moving, mu, 1.0)
    # Each mode is a share that follows at once, and a low-pass of the rest.
    weight = np.where(moving, constant - slope / tau, 0.0)
    final = constant.sum(axis=1) + sums.rest
    lag = _lags(tau, pieces)
    rise = final[:, None] * pieces.slopes
    offset = final[:, None] * pieces.levels - (weight * tau).sum(axis=1)[:, None] * pieces.slopes
    fastest = float(np.where(np.abs(weight) > 1e-12, tau, np.inf).min())
    times = np.stack([_looked_at(h, fastest) for h in pieces.lengths.tolist()])
    mean = final * pieces.mean
    return Cycles(sums, mean, offset, rise, weight[:, None] * lag, 1 / tau, pieces.lengths, times)


def pieces_spectrum(pieces: Pieces, frequency: Float) -> npt.NDArray[np.complex128]:
    """The complex amplitudes (peak) of a repeating waveform at harmonics (harmonics,), Hz."""
    s = 2j * math.pi * frequency
    total = np.zeros(len(frequency), dtype=np.complex128)
    for corner, h, level, slope in zip(
        pieces.corners, pieces.lengths, pieces.levels, pieces.slopes, strict=True
    ):
        start, end = np.exp(-s * corner), np.exp(-s * (corner + h))
        total += (level * start - (level + slope * h) * end) / s + slope * (start - end) / s**2
    return np.asarray(2 * total / pieces.lengths.sum())


def _lags(tau: Float, pieces: Pieces) -> Float:
    """How far a low-pass of each tau lies from where it is heading at each corner: (samples, pieces, modes).

    It follows z' tau = u - z; over a period its state is multiplied by exp(-T/tau) and something added, which
    the steady state solves.
    """
    added = np.zeros_like(tau)
    for h, level, slope in zip(pieces.lengths, pieces.levels, pieces.slopes, strict=True):
        heading = level - tau * slope
        added = heading + slope * h + (added - heading) * np.exp(-h / tau)
    state = added / -np.expm1(-pieces.lengths.sum() / tau)
    lags = []
    for h, level, slope in zip(pieces.lengths, pieces.levels, pieces.slopes, strict=True):
        heading = level - tau * slope
        lags.append(state - heading)
        state = heading + slope * h + (state - heading) * np.exp(-h / tau)
    return np.stack(lags, axis=1)


def _looked_at(length: float, fastest: float) -> Float:
    """Points of time in a piece: even ones, and ones that grow from a tenth of the fastest mode."""
    first = min(fastest / 10, length / 2)
    graded = np.geomspace(first, length, _GRADED)[:-1]
    return np.sort(np.concatenate([np.linspace(0.0, length, _EVEN), graded]))


__all__ = ["Cycles", "cycles", "pieces_spectrum"]
