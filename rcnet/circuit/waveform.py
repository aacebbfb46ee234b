"""Waveforms: what a source does over time, from t = 0 on."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from ..errors import CircuitError

# A vertical edge in a netlist becomes one of this share of the period (interface, section 3).
EDGE_SHARE = 1e-6
# SPICE's EXP has no word for a wave that does not fall; a netlist then names this time, in seconds.
NEVER = 1e30


def _need(condition: bool, message: str, remedy: str) -> None:
    if not condition:
        raise CircuitError(message, remedy=remedy)


def _finite(**numbers: float) -> None:
    for name, number in numbers.items():
        _need(math.isfinite(number), f"{name} is {number!r}, which is not finite.", "Give a finite number.")


@dataclass(frozen=True, slots=True)
class Square:
    """A square or pulse wave that rests at `low` until `delay`, then repeats for ever.

    low, high: V or A; period, width, rise, fall, delay: s. `width` is the time spent at `high` between the
    end of the rising and the start of the falling edge, as SPICE's PULSE has it.
    """

    low: float
    high: float
    period: float
    width: float
    rise: float = 0.0
    fall: float = 0.0
    delay: float = 0.0

    def __post_init__(self) -> None:
        _finite(low=self.low, high=self.high, period=self.period, width=self.width, delay=self.delay)
        _need(
            self.period > 0, f"a period of {self.period!r} s is not positive.", "Give a frequency above zero."
        )
        edges = (("rise", self.rise), ("fall", self.fall), ("delay", self.delay))
        for name, value in edges:
            _need(
                value >= 0 and math.isfinite(value),
                f"{name} is {value!r} s.",
                f"Give {name} of zero or more.",
            )
        _need(
            self.width >= 0,
            "the edges do not fit: the wave never gets to stay at its high level.",
            "Shorten rise and fall, or raise the duty.",
        )
        # One part in 1e9 of slack: duty, edges and period come from decimal text and may miss by rounding.
        _need(
            self.rise + self.width + self.fall <= self.period * (1 + 1e-9),
            "the edges do not fit: high time and edges last longer than the period.",
            "Shorten rise and fall, or lower the duty.",
        )

    @classmethod
    def from_duty(
        cls,
        low: float,
        high: float,
        frequency: float,
        duty: float = 0.5,
        *,
        rise: float = 0.0,
        fall: float = 0.0,
        delay: float = 0.0,
    ) -> Square:
        """The wave of a circuit file: `duty` is the time between the half-way points over the period."""
        _need(
            0 < duty < 1,
            f"a duty of {duty!r} is not between 0 and 1.",
            "Give the share of the period, as 0.25.",
        )
        _need(
            frequency > 0 and math.isfinite(frequency),
            f"a frequency of {frequency!r} Hz is not positive.",
            "Give a frequency above zero.",
        )
        period = 1.0 / frequency
        return cls(low, high, period, duty * period - (rise + fall) / 2, rise, fall, delay)

    @property
    def start(self) -> float:
        """The value at t = 0."""
        return self.low

    @property
    def repeats(self) -> float | None:
        """The period in seconds, None for a wave that does not repeat."""
        return self.period

    def with_edges(self, stop: float) -> Square:
        """The same wave with every vertical edge given a millionth of the period, half-way points kept.

        `stop` (the span looked at, s) is not needed here: the period is the scale.
        """
        edge = EDGE_SHARE * self.period
        room = min(self.width, self.period - self.rise - self.width - self.fall)
        if room > 0:  # a pulse or a gap shorter than the edge gets a shorter edge
            edge = min(edge, room)
        rise = self.rise if self.rise > 0 else edge
        fall = self.fall if self.fall > 0 else edge
        width = max(self.width - (rise - self.rise) / 2 - (fall - self.fall) / 2, 0.0)
        # Where the other edge leaves no room, as in a sawtooth, it gives way.
        excess = max(rise + width + fall - self.period, 0.0)
        if rise >= fall:
            return replace(self, rise=rise - excess, fall=fall, width=width)
        return replace(self, rise=rise, fall=fall - excess, width=width)


@dataclass(frozen=True, slots=True)
class Sine:
    """offset + amplitude exp(-damping (t - delay)) sin(2 pi frequency (t - delay) + phase).

    It is held at its first value until `delay`, as SPICE's SIN is. amplitude, offset: V or A; frequency: Hz;
    phase: degrees; delay: s; damping: 1/s.
    """

    amplitude: float
    frequency: float
    offset: float = 0.0
    phase: float = 0.0
    delay: float = 0.0
    damping: float = 0.0

    def __post_init__(self) -> None:
        _finite(amplitude=self.amplitude, frequency=self.frequency, offset=self.offset, phase=self.phase)
        _need(
            self.frequency > 0,
            f"a frequency of {self.frequency!r} Hz is not positive.",
            "Give one above zero.",
        )
        _need(
            self.delay >= 0 and math.isfinite(self.delay),
            f"delay is {self.delay!r} s.",
            "Give a delay of zero or more.",
        )
        _need(
            self.damping >= 0 and math.isfinite(self.damping),
            f"damping is {self.damping!r} 1/s.",
            "Give a damping of zero or more; a sine that grows for ever is no source.",
        )

    @property
    def start(self) -> float:
        """The value at t = 0."""
        return self.offset + self.amplitude * math.sin(math.radians(self.phase))

    @property
    def repeats(self) -> float | None:
        """The period in seconds, None for a damped sine, of which no two turns are alike."""
        return None if self.damping else 1.0 / self.frequency

    def with_edges(self, stop: float) -> Sine:
        """A sine has no edges."""
        return self


@dataclass(frozen=True, slots=True)
class Step:
    """One change from `initial` to `final`, beginning at `at` and lasting `rise`. V or A; s."""

    initial: float
    final: float
    at: float = 0.0
    rise: float = 0.0

    def __post_init__(self) -> None:
        _finite(**{"from": self.initial, "to": self.final})
        for name, value in (("at", self.at), ("rise", self.rise)):
            _need(
                value >= 0 and math.isfinite(value),
                f"{name} is {value!r} s.",
                f"Give {name} of zero or more.",
            )

    @property
    def start(self) -> float:
        """The value at t = 0, before the step begins."""
        return self.initial

    @property
    def repeats(self) -> float | None:
        """None: a step happens once."""
        return None

    def with_edges(self, stop: float) -> Step:
        """The same step, a vertical edge given a millionth of `stop` (the span looked at, s)."""
        if self.rise > 0:
            return self
        return replace(self, rise=EDGE_SHARE * (stop if stop > 0 else 1.0))


@dataclass(frozen=True, slots=True)
class Exponential:
    """From `initial` towards `final` along one exponential, and back along another, as SPICE's EXP.

    From rise_delay on, (final - initial) (1 - exp(-(t - rise_delay) / rise_time_constant)) is added to
    `initial`; from fall_delay on, the same of the fall is taken away, wherever the rise has come to by then.
    initial, final: V or A; the others: s. A `fall_delay` of NEVER or later: it never falls.
    """

    initial: float
    final: float
    rise_delay: float
    rise_time_constant: float
    fall_delay: float = math.inf
    fall_time_constant: float = math.inf

    def __post_init__(self) -> None:
        _finite(**{"from": self.initial, "to": self.final})
        _need(
            self.rise_delay >= 0 and math.isfinite(self.rise_delay),
            f"at is {self.rise_delay!r} s.",
            "Give a time of zero or more.",
        )
        _need(
            self.fall_delay >= self.rise_delay,
            f"the way back begins at {self.fall_delay!r} s, before the way there, {self.rise_delay!r} s.",
            "Let it begin later.",
        )
        named = (("time_constant", self.rise_time_constant, True),)
        for name, value, finite in (*named, ("back_time_constant", self.fall_time_constant, self.falls)):
            _need(
                value > 0 and (math.isfinite(value) or not finite),
                f"{name} is {value!r} s.",
                f"Give {name} above zero.",
            )

    @property
    def start(self) -> float:
        """The value at t = 0."""
        return self.initial

    @property
    def falls(self) -> bool:
        """True if it ever goes back to where it began."""
        return self.fall_delay < NEVER

    @property
    def repeats(self) -> float | None:
        """None: it happens once."""
        return None

    def with_edges(self, stop: float) -> Exponential:
        """An exponential has no vertical edge."""
        return self


@dataclass(frozen=True, slots=True)
class Points:
    """Straight lines between points (t, value); the last value is held, or the whole repeats every `period`.

    values: pairs of seconds and V or A, times strictly rising from zero or later. Before the first point the
    first value holds; with a period, the value between the last point and the period's end runs in a straight
    line to the first point of the next turn.
    """

    values: tuple[tuple[float, float], ...]
    period: float | None = None

    def __post_init__(self) -> None:
        _need(len(self.values) >= 1, "a list of points is empty.", "Give at least one pair [time, value].")
        last = -math.inf
        for time, value in self.values:
            _finite(time=time, value=value)
            _need(time >= 0, f"the time {time!r} s lies before t = 0.", "Start the points at zero or later.")
            _need(
                time > last,
                f"the time {time!r} s does not come after {last!r} s.",
                "Let the times rise strictly.",
            )
            last = time
        if self.period is not None:
            _need(
                math.isfinite(self.period) and self.period > 0 and self.period >= last,
                f"the period {self.period!r} s is shorter than the last time {last!r} s.",
                "Give a period that covers all points.",
            )

    @property
    def start(self) -> float:
        """The value at t = 0."""
        first_time, first_value = self.values[0]
        if first_time == 0 or self.period is None:
            return first_value
        last_time, last_value = self.values[-1]
        gap = self.period - last_time + first_time
        return last_value + (first_value - last_value) * (self.period - last_time) / gap

    @property
    def repeats(self) -> float | None:
        """The period in seconds, None for points that do not repeat."""
        return self.period

    def with_edges(self, stop: float) -> Points:
        """Points rise strictly in time: no edge is vertical, save where a period ends on its last point."""
        if self.period is None or self.values[-1][0] < self.period or self.values[0][0] > 0:
            return self
        if self.values[-1][1] == self.values[0][1]:
            return self
        cut = self.period * (1 - EDGE_SHARE)
        kept = tuple(pair for pair in self.values[:-1] if pair[0] < cut)
        (t0, v0), (t1, v1) = kept[-1], self.values[-1]
        return Points((*kept, (cut, v0 + (v1 - v0) * (cut - t0) / (t1 - t0))), self.period)


Waveform = Square | Sine | Step | Exponential | Points
