"""What sources do that have given nothing before t = 0, beyond what a source of a circuit can be told."""

from __future__ import annotations

from dataclasses import dataclass, replace

from ..circuit import Exponential, Points, Sine, Square, Step, Waveform


@dataclass(frozen=True, slots=True)
class FromRest:
    """Nothing before t = 0, the waveform from then on, with a jump to its first value."""

    wave: Waveform

    start = 0.0
    repeats = None

    @property
    def first(self) -> float:
        """The value just after t = 0."""
        return self.wave.start

    @property
    def risen(self) -> Waveform:
        """The waveform less its first value, which becomes exactly zero."""
        wave, first = self.wave, self.first
        if isinstance(wave, Square):
            return replace(wave, low=0.0, high=wave.high - first)
        if isinstance(wave, Sine):
            return replace(wave, offset=-replace(wave, offset=0.0).start)
        if isinstance(wave, (Step, Exponential)):
            return replace(wave, initial=0.0, final=wave.final - first)
        values = tuple((time, value - first) for time, value in wave.values)
        if wave.period is not None and values[0][0] > 0:  # t = 0 lies on the line that joins two turns
            values = ((0.0, 0.0), *values)
        return Points(values, wave.period)


@dataclass(frozen=True, slots=True)
class Impulse:
    """A charge, C, that passes through a current source at t = 0 at once; the source gives nothing else."""

    charge: float

    start = 0.0
    repeats = None
