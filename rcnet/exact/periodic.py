"""The exact periodic steady state of an output under the sources' waveforms.

Mean and alternating part are computed apart, so that a small ripple on a large mean has its own digits. What
slow modes make of the alternating part nearly cancels between them; instead of mode by mode it is therefore
computed by Cauchy's formula on a circle around all of them, where the exact response is as small as the ripple:

    y(t) = (1 / 2 pi j) integral of H(z) K(z, t) dz,

K the periodic answer of 1/(s - z), which has no singularity inside the circle because the mean is gone.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Sine
from ..errors import CircuitError, UndecidedError
from .ac import node_pair
from .contour import circle
from .modes import ModalSystem, modal_system, sampled
from .pieces import Followed, Pieces, followed, pieces_of
from .roots import zeros
from .transient import driving, turns_of

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Indices = npt.NDArray[np.int64]
Pair = tuple[int, int]

_COMMENSURATE = 1e-9
_MOST_TURNS = 1000  # turns of one source in the common period
_MOST_INTERVALS = 20_000
_LEAST_GAP = 1.25  # ratio between the moduli of neighbouring poles a circle needs to pass between them
_ORDER = 16  # points of the Gauss rule in each panel
_SMALL_THD = 1e-4  # below this, digits of the mean square are lost and the harmonics are summed instead
_MOST_HARMONICS = 1 << 14


def periodic(network: Network, of: str) -> Periodic:
    """The periodic steady state of a node or a pair `"a b"`.

    Sources with no waveform count with their dc value, waveforms that end with their last value; sources
    without either do nothing. Raises UndecidedError where no source repeats, where the periods have no common
    multiple to 1e-9, or where the circuit never settles.
    """
    return periodic_pairs(network, [node_pair(network, of)])[0]


def periodic_pairs(network: Network, pairs: Sequence[Pair]) -> list[Periodic]:
    """The periodic steady states of several outputs at once."""
    waves = {name: wave for name in driving(network) if (wave := network.sources[name].waveform) is not None}
    repeating = {name: wave.repeats for name, wave in waves.items() if wave.repeats is not None}
    if not repeating:
        raise UndecidedError("no source repeats, so there is no periodic steady state.")
    period, turns = common_period(repeating)
    names = driving(network)
    system = modal_system(network, pairs, names)
    require_settling(system)
    means = _means(network, system, names)
    parts: list[list[_Part]] = [[] for _ in pairs]
    for number, name in enumerate(names):
        wave = waves.get(name)
        if wave is None or wave.repeats is None:
            continue
        if isinstance(wave, Sine):
            steady = sampled(network, pairs, [name], np.array([2j * math.pi * wave.frequency]))[0, :, 0]
            for row, own in enumerate(parts):
                own.append(_SinePart(wave, complex(steady[row]), turns[name]))
        else:
            made = _piece_parts(network, pairs, system, number, name, pieces_of(wave), turns[name])
            for row, own in enumerate(parts):
                own.append(made[row])
    return [
        Periodic(network, pair, tuple(names), period, means[row], tuple(parts[row])) for row, pair in enumerate(pairs)
    ]


def settled_values(network: Network, pairs: Sequence[Pair]) -> Float:
    """The steady outputs where no source repeats: every source at its last value, or dc."""
    names = driving(network)
    if not names:
        return np.zeros(len(pairs))
    system = modal_system(network, pairs, names)
    require_settling(system)
    return _means(network, system, names)


def repeats(network: Network) -> bool:
    """True if some source has a waveform that repeats."""
    return any(s.waveform is not None and s.waveform.repeats is not None for s in network.sources.values())


def common_period(periods: dict[str, float]) -> tuple[float, dict[str, int]]:
    """The least common period, s, and how often each source turns in it."""
    first = next(iter(periods.values()))
    ratios = {}
    for name, period in periods.items():
        ratio = Fraction(period / first).limit_denominator(_MOST_TURNS)
        if ratio == 0 or abs(float(ratio) * first / period - 1) > _COMMENSURATE:
            raise UndecidedError(
                f"the periods {first!r} s and {period!r} s have no common multiple, so nothing repeats exactly."
            )
        ratios[name] = ratio
    common = Fraction(1)
    for ratio in ratios.values():
        common = Fraction(math.lcm(common.numerator, ratio.numerator), math.gcd(common.denominator, ratio.denominator))
    turns = {name: int(common / ratio) for name, ratio in ratios.items()}
    if max(turns.values()) > _MOST_TURNS:
        raise UndecidedError(f"the common period holds {max(turns.values())} turns of one source, too many.")
    return float(common) * first, turns


def require_settling(system: ModalSystem) -> None:
    """Raise UndecidedError unless every mode that reaches an output dies away."""
    poles = system.poles
    reaches = np.abs(system.residues).max(axis=(0, 1), initial=0.0) > 0
    if (reaches & (poles != 0) & (np.real(poles) >= 0)).any():
        raise UndecidedError("the circuit is unstable: a natural mode does not die away.")
    if system.integrating.any():
        raise UndecidedError("a source charges nodes that nothing drains, so the output settles nowhere.")


def _means(network: Network, system: ModalSystem, names: Sequence[str]) -> Float:
    levels = []
    for name in names:
        source = network.sources[name]
        wave = source.waveform
        if wave is None:
            levels.append(source.operating_value)
        else:
            levels.append(wave.offset if isinstance(wave, Sine) else pieces_of(wave).mean)
    return np.asarray(np.array(levels) @ system.static)


# ---------------------------------------------------------------------- one source's alternating part


@dataclass(frozen=True)
class _SinePart:
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
        return np.empty(0)

    def scales(self) -> tuple[float, float]:
        """(shortest time that matters, longest panel), s."""
        return math.inf, 1 / (4 * self.wave.frequency)

    def value(self, middle: Float, time: Float) -> Float:
        turning = np.exp(2j * math.pi * turns_of(self.wave.frequency, time))
        return np.asarray((self.phasor * turning).imag)

    def slope(self, middle: Float, time: Float) -> Float:
        omega = 2 * math.pi * self.wave.frequency
        turning = np.exp(2j * math.pi * turns_of(self.wave.frequency, time))
        return np.asarray((1j * omega * self.phasor * turning).imag)

    def harmonic(self, order: int, h: complex) -> complex:
        """The share's complex peak amplitude (of cos) at the order-th harmonic of its own period."""
        return -1j * self.phasor if order == 1 else 0j


@dataclass(frozen=True)
class _PiecePart:
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
            self.level * own + np.real(lag @ self.fast_weights) + np.real(self.slow.at(piece, since) @ self.slow_weights)
        )

    def slope(self, middle: Float, time: Float) -> Float:
        """The share's rate of change, V/s."""
        piece, since = self._placed(middle, time)
        slopes = self.pieces.slopes[piece]
        own = self.pieces.levels[piece] - self.mean + slopes * since
        lag = self.fast.poles * self.fast.in_piece(self.fast_settled[None], piece, since) - slopes[:, None]
        driven = self.slow.nodes * self.slow.at(piece, since) + own[:, None]
        return np.asarray(self.level * slopes + np.real(lag @ self.fast_weights) + np.real(driven @ self.slow_weights))

    def harmonic(self, order: int, h: complex) -> complex:
        """The complex peak amplitude (of cos) at the order-th harmonic of the own period, given H there."""
        return h * fourier(self.pieces, order)


@dataclass(frozen=True)
class _Driven:
    """Terms x' = z x + u - mean(u) in the periodic steady state; nodes: z, (terms,); begun: (pieces, terms)."""

    pieces: Pieces
    mean: float
    nodes: Complex
    begun: Complex

    def at(self, piece: Indices, since: Float) -> Complex:
        """x at `since` seconds after corners: (times, terms)."""
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
            begun[k : k + 1], nodes, pieces.lengths[k : k + 1], pieces.levels[k : k + 1] - mean, pieces.slopes[k : k + 1]
        )[0]
    first = begun[-1] / -np.expm1(nodes * pieces.period)
    return _Driven(pieces, mean, nodes, np.exp(np.outer(pieces.corners, nodes)) * first + begun[:-1])


def _piece_parts(
    network: Network,
    pairs: Sequence[Pair],
    system: ModalSystem,
    number: int,
    name: str,
    pieces: Pieces,
    turns: int,
) -> list[_PiecePart]:
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
        _PiecePart(pieces, pieces.mean, float(level[row]), lag, weights[row], settled, driven, node_weights[row], turns)
        for row in range(len(pairs))
    ]


def _slow(poles: npt.NDArray[np.float64] | Complex, omega: float) -> tuple[npt.NDArray[np.bool_], float, int]:
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


_Part = _SinePart | _PiecePart


# ---------------------------------------------------------------------- the output


@dataclass(frozen=True)
class Periodic:
    """An output in the periodic steady state.

    period: s; mean: V
    """

    network: Network
    of: Pair
    sources: tuple[str, ...]
    period: float
    mean: float
    parts: tuple[_Part, ...]

    def waveform(self, phase: npt.ArrayLike) -> Float:
        """The output at shares of the period, (points,); 0 is a time that is a whole number of periods after t = 0.

        At a vertical edge the value is the one just after it.
        """
        share = np.atleast_1d(np.asarray(phase, dtype=np.float64))
        if share.ndim != 1 or not np.isfinite(share).all():
            raise CircuitError("the phases are no list of finite numbers.", remedy="Give shares of a period.")
        time = (share - np.floor(share)) * self.period
        edges = self._edges
        slack = 4 * np.finfo(float).eps * self.period
        which = np.searchsorted(edges, time + slack, side="right") - 1
        which = np.clip(which, 0, len(edges) - 2)
        middle = (edges[which] + edges[which + 1]) / 2
        return self.mean + self.alternating(middle, time)

    def alternating(self, middle: Float, time: Float) -> Float:
        """The output without its mean at times, each in the stretch between corners that `middle` lies in."""
        return np.asarray(sum((part.value(middle, time) for part in self.parts), np.zeros(len(time))))

    def _slope(self, middle: Float, time: Float) -> Float:
        return np.asarray(sum((part.slope(middle, time) for part in self.parts), np.zeros(len(time))))

    @cached_property
    def _edges(self) -> Float:
        """The corners of all sources over one period, its ends included, s."""
        found = [0.0, self.period]
        for part in self.parts:
            own = self.period / part.turns
            corners = part.corners()
            if len(corners) * part.turns > _MOST_INTERVALS:
                raise UndecidedError(f"the common period holds more than {_MOST_INTERVALS} corners.")
            found.extend((corners[None, :] + own * np.arange(part.turns)[:, None]).ravel().tolist())
        edges = np.unique(np.array(found))
        # Corners that rounding has set apart are one.
        kept = np.concatenate([[True], np.diff(edges) > 1e-14 * self.period])
        edges = edges[kept]
        edges[-1] = self.period
        return edges

    @cached_property
    def _panels(self) -> tuple[Float, Float, Float]:
        """(starts, lengths, middles of the stretches they lie in): short after a corner, where fast modes die."""
        scales = [part.scales() for part in self.parts]
        fastest, longest = min(s[0] for s in scales), min(s[1] for s in scales)
        starts, lengths, middles = [], [], []
        edges = self._edges
        for low, high in zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True):
            cuts = _graded(high - low, fastest, longest)
            starts.append(low + cuts[:-1])
            lengths.append(np.diff(cuts))
            middles.append(np.full(len(cuts) - 1, (low + high) / 2))
        return np.concatenate(starts), np.concatenate(lengths), np.concatenate(middles)

    def _mean_square(self, without: complex = 0j) -> float:
        """The mean square of the alternating part less a fundamental Re(c e^jwt), by Gauss's rule in each panel."""
        starts, lengths, middles = self._panels
        nodes, weights = np.polynomial.legendre.leggauss(_ORDER)
        total = 0.0
        for begin in range(0, len(starts), 2000):
            part = slice(begin, begin + 2000)
            time = (starts[part, None] + lengths[part, None] * (nodes + 1) / 2).ravel()
            value = self.alternating(np.repeat(middles[part], _ORDER), time)
            if without:
                value = value - (without * np.exp(2j * math.pi * time / self.period)).real
            total += float((value.reshape(-1, _ORDER) ** 2 @ weights) @ lengths[part]) / 2
        return total / self.period

    @cached_property
    def alternating_square(self) -> float:
        """The mean square of the output less its mean, V^2."""
        return self._mean_square()

    @property
    def rms(self) -> float:
        """The root of the mean square, mean included, V."""
        return math.hypot(self.mean, math.sqrt(self.alternating_square))

    @cached_property
    def _turning_points(self) -> tuple[Float, Float, Float]:
        """(values, times, middles of their stretches): both ends of every panel and every turn inside."""
        starts, lengths, middles = self._panels
        share = (1 - np.cos(np.linspace(0, math.pi, 9))) / 2
        time = starts[:, None] + lengths[:, None] * share
        middle = np.repeat(middles[:, None], len(share), axis=1)
        slope = self._slope(middle.ravel(), time.ravel()).reshape(time.shape)
        turning = (slope[:, :-1] > 0) != (slope[:, 1:] > 0)
        low, high, where = time[:, :-1][turning], time[:, 1:][turning], middle[:, 1:][turning]
        tops = zeros(lambda x, which: self._slope(where[which], x), low, high)
        times = np.concatenate([starts, starts + lengths, tops])
        stretches = np.concatenate([middles, middles, where])
        return self.alternating(stretches, times), times, stretches

    @cached_property
    def extremes(self) -> tuple[float, float]:
        """The least and the greatest value of the alternating part, V; both sides of every vertical edge count."""
        values = self._turning_points[0]
        return float(values.min()), float(values.max())

    @property
    def peak_moment(self) -> tuple[float, float]:
        """When the magnitude is greatest: (middle of the stretch, time), as `alternating` takes them."""
        values, times, middles = self._turning_points
        k = int(np.argmax(np.abs(self.mean + values)))
        return float(middles[k]), float(times[k])

    @property
    def minimum(self) -> float:
        """The least value, V."""
        return self.mean + self.extremes[0]

    @property
    def maximum(self) -> float:
        """The greatest value, V."""
        return self.mean + self.extremes[1]

    @property
    def peak(self) -> float:
        """The greatest magnitude, V."""
        return max(abs(self.minimum), abs(self.maximum))

    @property
    def ripple(self) -> float:
        """Peak to peak, V."""
        return self.extremes[1] - self.extremes[0]

    def phasors(self, orders: Sequence[int]) -> Complex:
        """The complex peak amplitudes c of harmonics of the common period, Re(c e^{j n w t}), (orders,)."""
        w = 2 * math.pi / self.period
        names = [n for n in self.sources if (v := self.network.sources[n].waveform) is not None and v.repeats is not None]
        total = np.zeros(len(orders), dtype=np.complex128)
        for name, part in zip(names, self.parts, strict=True):
            own = [k for k, order in enumerate(orders) if order % part.turns == 0]
            if not own:
                continue
            s = 1j * w * np.array([orders[k] for k in own])
            response = sampled(self.network, [self.of], [name], s)[0, 0]
            for k, h in zip(own, response.tolist(), strict=True):
                total[k] += part.harmonic(orders[k] // part.turns, h)
        return total

    def harmonic(self, order: int) -> float:
        """The peak amplitude of a harmonic of the common period, V."""
        return abs(complex(self.phasors([order])[0]))

    @cached_property
    def thd(self) -> float:
        """The root of the summed squares of harmonics 2 and up over the first, a ratio; not cut short."""
        first = complex(self.phasors([1])[0])
        if abs(first) <= 1e-13 * math.sqrt(self.alternating_square):
            raise UndecidedError("the output has no fundamental to compare harmonics with.")
        if all(isinstance(part, _SinePart) and part.turns == 1 for part in self.parts):
            return 0.0
        ratio = math.sqrt(2 * self._mean_square(first)) / abs(first)
        return ratio if ratio > _SMALL_THD else self._summed(first)

    def _summed(self, first: complex) -> float:
        """THD from the harmonics themselves, where they fall so fast that their sum ends."""
        total, start = 0.0, 2
        while start < _MOST_HARMONICS:
            squares = np.abs(self.phasors(range(start, 2 * start))) ** 2
            total += float(squares.sum())
            # Harmonics fall at least as 1/n^2 here, so what is left is below this octave's share.
            if squares.sum() <= 1e-12 * total:
                break
            start *= 2
        return math.sqrt(total) / abs(first)


def _graded(length: float, fastest: float, longest: float) -> Float:
    """Cuts from 0 to `length`, doubling from a share of the fastest time on, none longer than `longest`."""
    least = min(longest, length / 4)
    first = min(least, fastest / 2)
    cuts, step, here = [0.0], max(first, length * 1e-14), 0.0
    while here < length * (1 - 1e-12):
        here = min(here + min(step, least), length)
        cuts.append(here)
        step = max(step, here)
        if len(cuts) > 100_000:
            raise UndecidedError("the output swings too often within one period to follow every turn.")
    return np.array(cuts)
