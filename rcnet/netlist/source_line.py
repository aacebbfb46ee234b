"""What drives an independent source on its netlist line: DC, AC and one waveform."""

from __future__ import annotations

import re
from dataclasses import replace

from ..circuit import Points, Sine, Source, Square, Waveform
from ..errors import CircuitError
from ..values import read_spice_number

_WAVES = {"PULSE": "PULSE", "SIN": "SIN", "SINE": "SIN", "PWL": "PWL"}
_READ = "Sources read: DC, AC, PULSE, SIN and PWL."


def read_drive(name: str, nodes: tuple[str, str], words: list[str]) -> Source:
    """A source from the words behind its nodes. Raises CircuitError, or QuantityError for a bad number."""
    source = Source(name, nodes)
    seen: set[str] = set()
    position = 0
    while position < len(words):
        word = words[position].upper()
        key = "DC" if position == 0 and _is_number(words[0]) else _WAVES.get(word, word)
        bare = key != word and key == "DC"
        numbers = _numbers(words[position + (not bare) :])
        if key in ("PULSE", "SIN", "PWL"):
            source, used = replace(source, waveform=_wave(name, key, numbers)), len(numbers)
            key = "waveform"
        elif key == "DC":
            numbers = numbers[:1] if bare else numbers
            _need(name, word, numbers, 1, 1)
            source, used = replace(source, dc=numbers[0]), 1
        elif key == "AC":
            _need(name, word, numbers, 0, 2)
            magnitude, phase = (*numbers, *(1.0, 0.0)[len(numbers) :])
            source, used = replace(source, ac=magnitude, ac_phase=phase), len(numbers)
        else:
            raise CircuitError(f"{name}: {words[position]!r} is not read.", remedy=_READ)
        if key in seen:
            raise CircuitError(f"{name} has two {key} entries.", remedy="Keep one; SPICE takes the last.")
        seen.add(key)
        position += used + (not bare)
    return source


def _wave(name: str, word: str, numbers: list[float]) -> Waveform:
    if word == "SIN":
        _need(name, word, numbers, 3, 6)
        offset, amplitude, frequency, delay, damping, phase = (*numbers, 0.0, 0.0, 0.0)[:6]
        if damping:
            raise CircuitError(f"{name}: a damped sine is not read.", remedy="Let its fifth number be 0.")
        return Sine(amplitude, frequency, offset, phase, delay)
    if word == "PULSE":
        _need(name, word, numbers, 7, 7)
        low, high, delay, rise, fall, width, period = numbers
        if rise <= 0 or fall <= 0:
            raise CircuitError(
                f"{name}: a pulse edge of {min(rise, fall)!r} s is not what it seems.",
                remedy="Write the edge out; for 0 a simulator takes its print step.",
            )
        return Square(low, high, period, width, rise, fall, delay)
    if len(numbers) < 2 or len(numbers) % 2:
        raise CircuitError(
            f"{name}: PWL has {len(numbers)} numbers.", remedy="Give pairs of time and value, rising in time."
        )
    return Points(tuple(zip(numbers[::2], numbers[1::2], strict=True)))


def _need(name: str, word: str, numbers: list[float], least: int, most: int) -> None:
    if not least <= len(numbers) <= most:
        wanted = str(least) if least == most else f"{least} to {most}"
        raise CircuitError(
            f"{name}: {word} has {len(numbers)} numbers; {wanted} are needed.",
            remedy="Write them all; what is left out a simulator fills in from its print step and stop time.",
        )


def _is_number(word: str) -> bool:
    return re.match(r"[-+]?\.?[0-9]", word) is not None


def _numbers(words: list[str]) -> list[float]:
    """The numbers the words begin with."""
    numbers = []
    for word in words:
        if not _is_number(word):
            break
        numbers.append(read_spice_number(word).value)
    return numbers
