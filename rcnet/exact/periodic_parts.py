"""What one repeating source contributes to the periodic steady state, without its mean.

What slow modes make of the alternating part of a waveform nearly cancels between them; instead of mode by
mode it is therefore computed by Cauchy's formula on a circle around all of them, where the exact response is
as small as the ripple:

    y(t) = (1 / 2 pi j) integral of H(z) K(z, t) dz,

K the periodic answer of 1/(s - z), which has no singularity inside the circle because the mean is gone.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..circuit import Network, Sine
from .contour import circle
from .modes import Complex, Float, ModalSystem, Numbers, Pair, sampled
from .pieces import Followed, Indices, Pieces, followed
from .swings import turns_of

_LEAST_GAP = 1.25  # ratio between the moduli of neighbouring poles a circle needs to pass between them


@dataclass(frozen=True)
class SinePart:
    """A sine source's share: the exact phasor. `turns` of it fill the common period."""

    wave: Sine
    steady: complex
    turns: int

    @property
    def phasor(self) -> complex:
        """The peak phasor at t = 0 of sin: the share is Im(phasor e^jwt)."""
        wave = self.wave
        late = float(turns_of(wave.frequency, np.array([wave.delay]))[0])
        turn = np.exp(1j * (math.radians(wave.phase) - 2 * math.pi * late))
        return complex(self.steady * wave.amplitude * turn)

    def corners(self) -> Float:
        """None: a sine is smooth."""
        return np.empty(0)

    def scales(self) -> tuple[float, float]:
        """(shortest time that matters, longest panel), s."""
        return math.inf, 1 / (4 * self.wave.frequency)

    def value(self, middle: Float, time: Float) -> Float:
        """The share at times (times,), V."""
        turning = np.exp(2j * math.pi * turns_of(self.wave.frequency, time))
        return np.asarray((self.phasor * turning).imag)

    def slope(self, middle: Float, time: Float) -> Float:
        """The share's rate of change, V/s."""
        omega = 2 * math.pi * self.wave.frequency
        turning = np.exp(2j * math.pi * turns_of(self.wave.frequency, time))
        return np.asarray((1j * omega * self.phasor * turning).imag)

    def harmonic(self, order: int, h: complex) -> complex:
        """The share's complex peak amplitude (of cos) at the order-th harmonic of its own period."""
        return -1j * self.phasor if order == 1 else 0j


@dataclass(frozen=True)
class PiecePart:
    """The share of a source made of straight pieces.

    level: V per V (or ohm), how much of the waveform passes at once, fast modes having settled
    fast: fast modes as lags behind the waveform; slow: points around the slow modes, driven by it directly
    """

    pieces: Pieces
    mean: float
    level: float
    fast: Followed
    fast_weights: Complex | Float
    fast_settled: Complex | Float
    slow: _Driven
    slow_weights: Complex
    turns: int

    def corners(self) -> Float:
        """Corners within one own period, s."""
        assert self.pieces.period is not None
        return np.asarray(np.fmod(self.pieces.corners + self.pieces.begin, self.pieces.period))

    def scales(self) -> tuple[float, float]:
        """(shortest time that matters, longest panel), s."""
        poles = self.fast.poles
        if not len(poles):
            return math.inf, math.inf
        swing = float(np.abs(np.imag(poles)).max())
        return float(1 / np.abs(poles).max()), (math.pi / 2 / swing if swing else math.inf)

    def _placed(self, middle: Float, time: Float) -> tuple[Indices, Float]:
        """The piece that `middle` lies in, and how long after its corner `time` is."""
        assert self.pieces.period is not None
        period, begin = self.pieces.period, self.pieces.begin
        phase = np.fmod(middle - begin, period)
        phase = np.where(phase < 0, phase + period, phase)
        piece = np.searchsorted(self.pieces.corners, phase, side="right") - 1
        return piece, phase - self.pieces.corners[piece] + (time - middle)

    def value(self, middle: Float, time: Float) -> Float:
        """The share at times (times,), each in the piece that `middle` (times,) lies in."""
        piece, since = self._placed(middle, time)
        own = self.pieces.levels[piece] - self.mean + self.pieces.slopes[piece] * since
        lag = self.fast.in_piece(self.fast_settled[None], piece, since)
        return np.asarray(
            self.level * own
            + np.real(lag @ self.fast_weights)
            + np.real(self.slow.at(piece, since) @ self.slow_weights)
        )

    def slope(self, middle: Float, time: Float) -> Float:
        """The share's rate of change, V/s."""
        piece, since = self._placed(middle, time)
        slopes = self.pieces.slopes[piece]
        own = self.pieces.levels[piece] - self.mean + slopes * since
        lag = self.fast.poles * self.fast.in_piece(self.fast_settled[None], piece, since) - slopes[:, None]
        driven = self.slow.nodes * self.slow.at(piece, since) + own[:, None]
        return np.asarray(
            self.level * slopes + np.real(lag @ self.fast_weights) + np.real(driven @ self.slow_weights)
        )

    def harmonic(self, order: int, h: complex) -> complex:
        """The complex peak amplitude (of cos) at the order-th harmonic of the own period, given H there."""
        return h * fourier(self.pieces, order)


@dataclass(frozen=True)
class _Driven:
    """Terms x' = z x + u - mean(u) in the periodic steady state; nodes: z, (terms,); begun: (pieces,
    terms).
    """

    pieces: Pieces
    mean: float
    nodes: Complex
    begun: Complex

    def at(self, piece: Indices, since: Float) -> Complex:
        """The terms at `since` seconds after corners: (times, terms)."""
        level = self.pieces.levels[piece] - self.mean
        return _driven_over(self.begun[piece], self.nodes, since, level, self.pieces.slopes[piece])


def _driven_over(start: Complex, nodes: Complex, since: Float, level: Float, slope: Float) -> Complex:
    grown = np.outer(since, nodes)
    once = np.expm1(grown) / np.where(nodes == 0, 1.0, nodes)
    once = np.where(nodes == 0, since[:, None], once)
    twice = since[:, None] ** 2 * phi2(grown)
    return np.asarray(np.exp(grown) * start + level[:, None] * once + slope[:, None] * twice)


def phi2(z: Complex) -> Complex:
    """(e^z - 1 - z) / z^2, by its series for small z."""
    small = np.abs(z) < 1.0
    held = np.where(small, z, 0.0)
    series = np.zeros_like(held)
    for k in range(19, -1, -1):
        series = series * held / (k + 3) + 1.0
    safe = np.where(small, 1.0, z)
    return np.asarray(np.where(small, series / 2, (np.expm1(safe) - safe) / safe**2))


def _driven(pieces: Pieces, nodes: Complex) -> _Driven:
    """Follow the terms through one turn, then start so that the turn ends where it began."""
    assert pieces.period is not None
    count, mean = len(pieces.corners), pieces.mean
    begun = np.zeros((count + 1, len(nodes)), dtype=np.complex128)
    for k in range(count):
        begun[k + 1] = _driven_over(
            begun[k : k + 1],
            nodes,
            pieces.lengths[k : k + 1],
            pieces.levels[k : k + 1] - mean,
            pieces.slopes[k : k + 1],
        )[0]
    first = begun[-1] / -np.expm1(nodes * pieces.period)
    return _Driven(pieces, mean, nodes, np.exp(np.outer(pieces.corners, nodes)) * first + begun[:-1])


def piece_parts(
    network: Network,
    pairs: Sequence[Pair],
    system: ModalSystem,
    number: int,
    name: str,
    pieces: Pieces,
    turns: int,
) -> list[PiecePart]:
    """The shares of the source `name`, row `number` of the system, in each output; `turns`: see
    `SinePart`.
    """
    assert pieces.period is not None
    slow, radius, points = _slow(system.poles, 2 * math.pi / pieces.period)
    fast = system.poles[~slow]
    lag = followed(pieces, fast)
    settled = lag.settled()
    weights = system.weights[number][:, ~slow]
    nodes = np.empty(0, dtype=np.complex128)
    node_weights = np.zeros((len(pairs), 0), dtype=np.complex128)
    if slow.any():
        around = circle(0j, radius, points)[: points // 2]
        nodes, node_weights = around, 2 * sampled(network, pairs, [name], around)[0] * (around / points)
    driven = _driven(pieces, nodes)
    level = system.direct[number] + np.real(weights).sum(axis=-1) if slow.any() else system.static[number]
    return [
        PiecePart(
            pieces,
            pieces.mean,
            float(level[row]),
            lag,
            weights[row],
            settled,
            driven,
            node_weights[row],
            turns,
        )
        for row in range(len(pairs))
    ]


def _slow(poles: Numbers, omega: float) -> tuple[Numbers, float, int]:
    """Which poles a circle about zero can hold, its radius (rad/s, below `omega`) and its number of points.

    The circle must pass well between poles; the trapezoidal error falls as the ratios to the radius do.
    """
    size = np.sort(np.abs(poles[np.abs(poles) < omega]))
    outer = np.append(size[1:], min(omega, np.abs(poles[np.abs(poles) >= omega]).min(initial=math.inf)))
    fitting = np.flatnonzero(outer > _LEAST_GAP * size)
    if not len(fitting):
        return np.zeros(len(poles), dtype=bool), 0.0, 0
    k = int(fitting[-1])
    inside, outside = float(size[k]), float(outer[k])
    radius = max(math.sqrt(inside * outside), outside / 2.5)
    ratio = min(radius / inside if inside else math.inf, outside / radius)
    points = 2 * math.ceil((math.log(1e17) / math.log(ratio) + 4) / 2)
    return np.abs(poles) <= inside, radius, points


def fourier(pieces: Pieces, order: int) -> complex:
    """The peak amplitude c of the order-th harmonic, Re(c e^{j n w t}), t counted from zero."""
    assert pieces.period is not None
    k = 2 * math.pi * order / pieces.period
    lengths = pieces.lengths
    middle = pieces.corners + lengths / 2
    level = pieces.levels + pieces.slopes * lengths / 2
    x = k * lengths / 2
    flat = np.sinc(x / math.pi)
    turns = np.exp(-2j * math.pi * turns_of(order / pieces.period, middle + pieces.begin))
    pieces_sum = lengths * (level * flat - 1j * (pieces.slopes * lengths / 2) * _sloped(x)) * turns
    return complex(2 / pieces.period * pieces_sum.sum())


def _sloped(x: Float) -> Float:
    """(sin x / x - cos x) / x, by its series for small x."""
    small = np.abs(x) < 0.5
    held = np.where(small, x, 0.0)
    series = np.zeros_like(held)
    for k in range(10, -1, -1):  # sum over k of (-1)^k x^(2k+1) 2 (k+1) / (2k+3)!
        series = series * -(held**2) + 2 * (k + 1) / math.factorial(2 * k + 3)
    safe = np.where(small, 1.0, x)
    return np.where(small, series * held, (np.sinc(safe / math.pi) - np.cos(safe)) / safe)


Part = SinePart | PiecePart
