"""The exact periodic steady state of an output under the sources' waveforms.

Mean and alternating part are computed apart, so that a small ripple on a large mean has its own digits.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
import numpy.typing as npt

from ..circuit import Exponential, Network, Sine, Waveform
from ..errors import CircuitError, UndecidedError
from .ac import node_pair
from .modes import Complex, Float, ModalSystem, Pair, modal_system, sampled
from .periodic_parts import Part, SinePart, piece_parts
from .pieces import pieces_of
from .roots import zeros
from .transient import driving

_COMMENSURATE = 1e-9
_MOST_TURNS = 1000  # turns of one source in the common period
_MOST_INTERVALS = 20_000
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
    parts: list[list[Part]] = [[] for _ in pairs]
    for number, name in enumerate(names):
        wave = waves.get(name)
        if wave is None or wave.repeats is None:
            continue
        if isinstance(wave, Sine):  # an undamped one, for it repeats
            steady = sampled(network, pairs, [name], np.array([2j * math.pi * wave.frequency]))[0, :, 0]
            for row, own in enumerate(parts):
                own.append(SinePart(wave, complex(steady[row]), turns[name]))
        else:
            assert not isinstance(wave, Exponential)
            made = piece_parts(network, pairs, system, number, name, pieces_of(wave), turns[name])
            for row, own in enumerate(parts):
                own.append(made[row])
    return [
        Periodic(network, pair, tuple(names), period, means[row], tuple(parts[row]))
        for row, pair in enumerate(pairs)
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
                f"the periods {first!r} s and {period!r} s have no common multiple,"
                " so nothing repeats exactly."
            )
        ratios[name] = ratio
    common = Fraction(1)
    for ratio in ratios.values():
        common = Fraction(
            math.lcm(common.numerator, ratio.numerator), math.gcd(common.denominator, ratio.denominator)
        )
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
            levels.append(_level(wave))
    return np.asarray(np.array(levels) @ system.static)


def _level(wave: Waveform) -> float:
    """The mean over a period; where there is none, what the waveform comes to in the end."""
    if isinstance(wave, Sine):
        return wave.offset
    if isinstance(wave, Exponential):
        return wave.initial if wave.falls else wave.final
    return pieces_of(wave).mean


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
    parts: tuple[Part, ...]

    def waveform(self, phase: npt.ArrayLike) -> Float:
        """The output at shares of the period, (points,); 0 is a time that is a whole number of periods after
        t = 0.

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
        return np.asarray(self.mean + self.alternating(middle, time))

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
        return np.asarray(np.append(edges[kept][:-1], self.period))

    @cached_property
    def _panels(self) -> tuple[Float, Float, Float]:
        """(starts, lengths, middles of the stretches they lie in): short after a corner, where fast modes
        die.
        """
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
        """The mean square of the alternating part less a fundamental Re(c e^jwt), by Gauss's rule in each
        panel.
        """
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
        """The least and the greatest value of the alternating part, V; both sides of every vertical edge
        count.
        """
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
        names = [
            n
            for n in self.sources
            if (v := self.network.sources[n].waveform) is not None and v.repeats is not None
        ]
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
        if all(isinstance(part, SinePart) and part.turns == 1 for part in self.parts):
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
