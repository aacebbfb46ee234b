"""What drives an independent source on its netlist line: DC, AC and one waveform."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Protocol

from ..circuit import Exponential, Points, Sine, Source, Square, Step, Waveform
from ..errors import CircuitError

_WAVES = {"PULSE": "PULSE", "SIN": "SIN", "SINE": "SIN", "PWL": "PWL", "EXP": "EXP"}
_READ = "Sources read: DC, AC, PULSE, SIN, PWL and EXP."
_UNREAD_WAVES = ("SFFM", "AM", "TRNOISE", "TRRANDOM", "EXTERNAL")

Number = Callable[[str], float | None]


class Run(Protocol):
    """What fills in the numbers that a waveform leaves out: the netlist's transient, where it has one."""

    @property
    def step(self) -> float | None:
        """The print step, s."""
        ...

    @property
    def stop(self) -> float | None:
        """The end, s."""
        ...

    def notice(self, code: str, message: str, remedy: str, word: str = "") -> None:
        """Keep something for the rule of that code."""
        ...


def read_drive(name: str, nodes: tuple[str, str], words: list[str], number: Number, run: Run) -> Source:
    """A source from the words behind its nodes.

    number: what a word stands for, None where it is no number. Raises CircuitError, or QuantityError for a
    bad number.
    """
    source = Source(name, nodes)
    seen: set[str] = set()
    position = 0
    while position < len(words):
        word = words[position].upper()
        bare = (
            position == 0 and word not in _WAVES and word not in ("DC", "AC") and number(words[0]) is not None
        )
        key = "DC" if bare else _WAVES.get(word, word)
        numbers = _numbers(words[position + (not bare) :], number)
        used = len(numbers)
        if key in ("PULSE", "SIN", "PWL", "EXP"):
            repeat, more = _repeat(words[position + 1 + used :], number) if key == "PWL" else (None, 0)
            source = _with_wave(source, _wave(name, key, numbers, run, repeat), numbers)
            key, used = "waveform", used + more
        elif key == "DC" and not numbers and position + 1 < len(words):
            source = replace(source, dc=0.0)  # the manual of ngspice writes `DC PWL(...)` so
            run.notice(
                "dc-without-number",
                f"{name}: DC stands without a number, which is 0 for the operating point.",
                "Write the number, or leave DC out.",
                words[position],
            )
        elif key == "DC":
            numbers = numbers[:1] if bare else numbers
            _need(name, word, numbers, 1, 1)
            source, used = replace(source, dc=numbers[0]), 1
        elif key == "AC":
            _need(name, word, numbers, 0, 2)
            magnitude, phase = (*numbers, *(1.0, 0.0)[len(numbers) :])
            source = replace(source, ac=magnitude, ac_phase=phase)
        elif key in _UNREAD_WAVES:
            run.notice(
                "waveform-unknown",
                f"{name}: {word} is a waveform that is not read; it was left out, so nothing is true over "
                "time.",
                _READ,
                word,
            )
            key = "waveform"
        else:
            raise CircuitError(f"{name}: {words[position]!r} is not read.", remedy=_READ, code="unreadable")
        if key in seen:
            raise CircuitError(
                f"{name} has two {key} entries.",
                remedy="Keep one; SPICE takes the last.",
                code="second-value",
            )
        seen.add(key)
        position += used + (not bare)
    return source


def _with_wave(source: Source, wave: Waveform | None, numbers: list[float]) -> Source:
    """The source with a waveform; where it cannot be known, with its first value for the operating point."""
    if wave is not None or source.dc is not None:
        return replace(source, waveform=wave)
    return replace(source, dc=numbers[0])


def _numbers(words: list[str], number: Number) -> list[float]:
    """The numbers the words begin with."""
    numbers = []
    for word in words:
        if word.upper() in _WAVES or word.upper() in ("DC", "AC"):
            break
        value = number(word)
        if value is None:
            break
        numbers.append(value)
    return numbers


def _repeat(words: list[str], number: Number) -> tuple[float | None, int]:
    """`r=` behind a PWL: the time from which it repeats; and how many words that took."""
    if len(words) >= 2 and words[0].lower() == "r":
        return number(words[1]), 2
    return None, 0


def _wave(name: str, word: str, numbers: list[float], run: Run, repeat: float | None) -> Waveform | None:
    if word == "SIN":
        return _sine(name, numbers, run)
    if word == "PULSE":
        return _pulse(name, numbers, run)
    if word == "EXP":
        return _exponential(name, numbers, run)
    if len(numbers) < 2 or len(numbers) % 2:
        raise CircuitError(
            f"{name}: PWL has {len(numbers)} numbers.",
            remedy="Give pairs of time and value, rising in time.",
            code="unreadable",
        )
    pairs = tuple(zip(numbers[::2], numbers[1::2], strict=True))
    if repeat is None:
        return Points(pairs)
    if repeat != 0 or pairs[0][0] != 0:
        raise CircuitError(
            f"{name}: PWL repeats from {repeat:g} s.",
            remedy="Only r=0 of points from time 0 is read.",
            code="unreadable",
        )
    return Points(pairs, pairs[-1][0])


def _filled(name: str, word: str, numbers: list[float], run: Run, missing: str) -> bool:
    """Say that a simulator fills numbers in from `.tran`; False where there is no `.tran` to know them by."""
    if run.step is None or run.stop is None:
        run.notice(
            "waveform-unknown",
            f"{name}: {word} leaves out its {missing}, which a simulator takes from .tran; there is none, so "
            "the waveform was left out.",
            "Write all its numbers.",
            word,
        )
        return False
    run.notice(
        "edge-from-step",
        f"{name}: {word} leaves its {missing} to the simulator, which takes them from the .tran line "
        f"(step {run.step:g} s, stop {run.stop:g} s).",
        "Write all its numbers, so that another .tran makes no other waveform.",
        word,
    )
    return True


def _sine(name: str, numbers: list[float], run: Run) -> Waveform | None:
    _need(name, "SIN", numbers, 2, 6)
    offset, amplitude, frequency, delay, damping, phase = (*numbers, 0.0, 0.0, 0.0, 0.0)[:6]
    if frequency == 0:  # ngspice: one turn in the run
        if not _filled(name, "SIN", numbers, run, "frequency"):
            return None
        assert run.stop is not None
        frequency = 1.0 / run.stop
    return Sine(amplitude, frequency, offset, phase, delay, damping)


def _pulse(name: str, numbers: list[float], run: Run) -> Waveform | None:
    """Ngspice manual, "Pulse"; what is left out or zero is filled in as ngspice 39 does it (measured)."""
    _need(name, "PULSE", numbers, 2, 7)
    low, high, delay, rise, fall, width, period = (*numbers, *(0.0,) * 5)[:7]
    times = (("rise", rise), ("fall", fall), ("width", width), ("period", period))
    for what, value in times:
        if value < 0:
            raise CircuitError(
                f"{name}: PULSE has a {what} of {value:g} s.",
                remedy="Give times above zero.",
                code="unreadable",
            )
    missing = [what for what, value in times if value == 0]
    if not missing:
        return Square(low, high, period, width, rise, fall, delay)
    if not _filled(
        name,
        "PULSE",
        numbers,
        run,
        " and ".join([", ".join(missing[:-1]), missing[-1]] if missing[1:] else missing),
    ):
        return None
    assert run.step is not None and run.stop is not None
    rise, fall = rise if rise > 0 else run.step, fall if fall > 0 else run.step
    if 0 < period < run.stop - delay and rise + (width or run.stop) + fall > period:
        raise CircuitError(
            f"{name}: PULSE repeats after {period:g} s, before it is over.",
            remedy="Write all its numbers; rise, width and fall fit into the period.",
            code="unreadable",
        )
    if width <= 0 or width >= run.stop:
        return Step(low, high, delay, rise)  # it stays high until the run ends
    # A pulse that comes once in the run; its period is too long to matter.
    return Square(
        low, high, period if period > 0 else rise + width + fall + run.stop, width, rise, fall, delay
    )


def _exponential(name: str, numbers: list[float], run: Run) -> Waveform | None:
    _need(name, "EXP", numbers, 2, 6)
    # ngspice 39 takes its print step for a zero as well (measured).
    if len(numbers) < 6 or 0.0 in numbers[2:]:
        if not _filled(name, "EXP", numbers, run, "times"):
            return None
        assert run.step is not None
        step = run.step
        initial, final, at, tau, back, back_tau = (*numbers, *(0.0,) * (6 - len(numbers)))
        at = at or step
        return Exponential(initial, final, at, tau or step, back or at + step, back_tau or step)
    initial, final, at, tau, back, back_tau = numbers
    return Exponential(initial, final, at, tau, back, back_tau)


def _need(name: str, word: str, numbers: list[float], least: int, most: int) -> None:
    if not least <= len(numbers) <= most:
        wanted = str(least) if least == most else f"{least} to {most}"
        raise CircuitError(
            f"{name}: {word} has {len(numbers)} numbers; {wanted} are needed.",
            remedy="Give it its numbers.",
            code="unreadable",
        )


def scaled(source: Source, factor: float) -> Source:
    """A source that gives `factor` times as much."""
    return replace(
        source,
        ac=None if source.ac is None else source.ac * factor,
        dc=None if source.dc is None else source.dc * factor,
        waveform=None if source.waveform is None else _scaled_wave(source.waveform, factor),
    )


def _scaled_wave(wave: Waveform, factor: float) -> Waveform:
    if isinstance(wave, Square):
        return replace(wave, low=wave.low * factor, high=wave.high * factor)
    if isinstance(wave, Sine):
        return replace(wave, offset=wave.offset * factor, amplitude=wave.amplitude * factor)
    if isinstance(wave, (Step, Exponential)):
        return replace(wave, initial=wave.initial * factor, final=wave.final * factor)
    assert not math.isnan(factor)
    return replace(wave, values=tuple((time, value * factor) for time, value in wave.values))
