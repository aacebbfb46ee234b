"""Touchstone files of one and two ports, versions 1 and 2 (IBIS Open Forum, 1.1 of 2002, 2.0 of 2009)."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ..errors import ResultsError
from ._csv_body import DigitCount, Digits
from ._csv_layout import NUMBER
from ._touchstone_head import AGAIN, Head, Lines, ports_by_name, read_head
from .curve import ComplexArray, Curve, Curves, FloatArray, Ports
from .digits import MAX_NUMBER_LENGTH
from .parameters import normalised, scale, to_scattering

_BLOCK = 1 << 15  # numbers turned into arrays at a time
_NOISE_ROW = 5
_CUT = "The last line has no end; if the file was cut short there, its last number is wrong."
_NAMES = (("s11", 0, 0), ("s21", 1, 0), ("s12", 0, 1), ("s22", 1, 1))


def parse_touchstone(text: str, source: str) -> Curves:
    """The S-parameters of a file named `.s1p`, `.s2p` or `.ts`, as ac curves `s11`, `s21`, `s12`, `s22`.

    Y, Z, H and G parameters are turned into S with the file's reference resistances, which stand in
    `Curves.ports`. Noise parameters are passed over, with a remark; few digits show as `resolution`.

    Raises ResultsError with the line: for three ports and more, mixed modes, wrong counts, falling
    frequencies, options and keywords that are not known, and whatever is cut short or no number.
    """
    if "\n" not in text:
        text = text.replace("\r", "\n")
    lines = Lines(text.removeprefix("\ufeff"), source)
    head = read_head(lines, ports_by_name(source))
    sets = _Sets(lines, head)
    has_noise = sets.read()
    remarks = ["Its noise parameters are passed over."] if has_noise else []
    if head.frequencies is None:
        remarks += [_CUT] if text and not text.endswith("\n") else []
    else:
        has_noise = _check_end(lines, head, len(sets.begins))
        remarks += ["Its noise parameters are passed over."] if has_noise else []
    return Curves(
        source,
        tuple(_curves(sets, head)),
        remarks=tuple(remarks),
        ports=Ports(head.options.reference),
    )


class _Sets:
    """The sets of numbers, one for each frequency.

    numbers: (frequencies, width); begins: the line each set begins on
    """

    def __init__(self, lines: Lines, head: Head) -> None:
        self.lines, self.head = lines, head
        self.begins: list[int] = []
        self._blocks: list[FloatArray] = []
        self._count = DigitCount(head.width)
        self._cells: list[str] = []
        self._places: list[tuple[int, int]] = []  # (cells before, line) of each line of the block
        self._only_threes = True

    @property
    def numbers(self) -> FloatArray:
        return np.concatenate(self._blocks)

    @property
    def digits(self) -> Digits:
        return self._count.digits()

    def read(self) -> bool:
        """Read all sets; True where noise parameters of version 1 follow. Raises ResultsError."""
        width, held, last = self.head.width, 0, -1.0
        for line in self.lines:
            if line[0] in "[#":
                if self._ends(line):
                    break
                continue
            words = line.split()
            if held == 0:
                if self._is_noise(words, last):
                    return self._skip_noise(words)
                self.begins.append(self.lines.number)
                last = _frequency(words[0], last)
            held += len(words)
            if held > width:
                raise self._wrong_count(held)
            self._places.append((len(self._cells), self.lines.number))
            self._cells += words
            self._only_threes = self._only_threes and len(words) == 3
            held %= width
            if held == 0 and len(self._cells) >= _BLOCK:
                self._flush()
        self._finish(held)
        return False

    def _ends(self, line: str) -> bool:
        if line[0] == "#":  # only the first option line counts
            return False
        if self.head.frequencies is None:
            message = f"{line[:40]!r} stands among the numbers of a version-1 file."
            raise self.lines.error(message, "Write '[Version] 2.0' first, or leave the keyword out.")
        self.lines.back(line)
        return True

    def _finish(self, held: int) -> None:
        if not self.begins:
            raise self.lines.error("it holds no numbers.", AGAIN)
        if held:
            message = f"the numbers of the last frequency are cut short: {held} of {self.head.width}."
            raise self.lines.error(message, AGAIN, self.begins[-1])
        self._flush()
        if self.head.ports == 2 and self.head.frequencies is None and self._only_threes:
            message = (
                "every line holds three numbers, as in a file of one port, yet it is named as one of two."
            )
            raise self.lines.error(
                message, "Name it .s1p, or give all nine numbers of a frequency in a line."
            )

    def _wrong_count(self, held: int) -> ResultsError:
        width, begin = self.head.width, self.begins[-1]
        until = f" to {self.lines.number}" if self.lines.number > begin else ""
        message = f"line {begin}{until} holds {held} numbers where {width} belong to a frequency."
        return self.lines.error(message, "Begin each frequency on a line of its own.", begin)

    def _is_noise(self, words: list[str], last: float) -> bool:
        version_1 = self.head.ports == 2 and self.head.frequencies is None
        return version_1 and len(words) == _NOISE_ROW and _frequency(words[0], np.inf) <= last

    def _skip_noise(self, words: list[str]) -> bool:
        """Pass over noise parameters; five numbers a line, frequencies rising."""
        begin, last = self.lines.number, -1.0
        self.lines.back(" ".join(words))
        for line in self.lines:
            row = line.split()
            if len(row) != _NOISE_ROW or not all(map(_is_finite, row)) or _frequency(row[0], last) <= last:
                message = f"frequency falls back on line {begin}, and what follows are no noise parameters."
                raise self.lines.error(message, "Let frequencies rise, each with all its numbers.", begin)
            last = _frequency(row[0], last)
        self._flush()
        return True

    def _flush(self) -> None:
        cells, self._cells = self._cells, []
        if not cells:
            return
        try:
            numbers = np.fromiter((float(cell) for cell in cells), np.float64, len(cells))
            good = bool(np.isfinite(numbers).all()) and max(map(len, cells)) <= MAX_NUMBER_LENGTH
            good = good and "_" not in (joined := "".join(cells)) and joined.isascii()
        except ValueError:
            good = False
        if not good:
            place = next((n for n, cell in enumerate(cells) if not _is_finite(cell)), None)
            if place is not None:
                line = next(number for start, number in reversed(self._places) if start <= place)
                message = f"{cells[place][:40]!r} is not a finite number."
                raise self.lines.error(message, "Write plain numbers, such as 1.5e-3.", line)
            numbers = np.array([float(cell.lower().replace("d", "e")) for cell in cells])
        self._count.add(cells)
        self._blocks.append(numbers.reshape(-1, self.head.width))
        self._places = []


def _is_finite(cell: str) -> bool:
    fits = len(cell) <= MAX_NUMBER_LENGTH and NUMBER.fullmatch(cell)
    return bool(fits) and bool(np.isfinite(float(cell.lower().replace("d", "e"))))


def _frequency(word: str, otherwise: float) -> float:
    return float(word.lower().replace("d", "e")) if _is_finite(word) else otherwise


def _check_end(lines: Lines, head: Head, found: int) -> bool:
    """Read what follows the numbers of version 2; True where noise parameters do. Raises ResultsError."""
    if found != head.frequencies:
        message = f"it holds {found} frequencies, yet says {head.frequencies}."
        raise lines.error(message, AGAIN)
    has_noise, ended = False, False
    for line in lines:
        word = "".join(line.lower().split())
        if ended:
            raise lines.error(f"{line[:40]!r} follows '[End]'.", "Write each file by itself.")
        if word == "[noisedata]" and head.ports == 2:
            has_noise = True
        elif word == "[end]":
            ended = True
        elif not (has_noise and line[0] not in "[#"):
            raise lines.error(f"{line[:40]!r} stands where '[End]' was expected.", AGAIN)
    if not ended:
        raise lines.error("it breaks off before '[End]'.", AGAIN)
    return has_noise


def _curves(sets: _Sets, head: Head) -> Iterator[Curve]:
    numbers, digits, options = sets.numbers, sets.digits, head.options
    axis = _axis(sets, numbers, options.unit)
    slack_of_axis = digits.uncertainty(0, numbers[:, 0]) * options.unit
    matrix = np.zeros((head.ports, head.ports, len(axis)), np.complex128)
    slack = np.zeros(matrix.shape)
    for place, (row, column) in enumerate(head.pairs):
        first, second = 1 + 2 * place, 2 + 2 * place
        offs = digits.uncertainty(first, numbers[:, first]), digits.uncertainty(second, numbers[:, second])
        entry = _entry(sets, options.form, numbers[:, first], numbers[:, second], offs)
        for at in {(row, column), (column, row)} if len(head.pairs) == 3 else {(row, column)}:
            matrix[at], slack[at] = entry
    if head.bare:
        matrix = normalised(options.parameter, matrix, options.reference)
        slack = slack * scale(options.parameter, options.reference)[:, :, None]
    s, off = to_scattering(options.parameter, matrix, slack)
    if (wrong := np.flatnonzero(~np.isfinite(s).all(axis=(0, 1)))).size:
        message = f"these {options.parameter.upper()} parameters have no S parameters."
        raise sets.lines.error(message, "Export S parameters.", sets.begins[int(wrong[0])])
    for name, row, column in _NAMES[: head.ports**2]:
        yield Curve(name, "ac", axis, s[row, column], "", _or_none(off[row, column]), _or_none(slack_of_axis))


def _or_none(slack: FloatArray) -> FloatArray | None:
    return slack if slack.any() else None


def _axis(sets: _Sets, numbers: FloatArray, unit: float) -> FloatArray:
    with np.errstate(over="ignore"):
        axis: FloatArray = numbers[:, 0] * unit
    begins = sets.begins
    if (wrong := np.flatnonzero(~np.isfinite(axis) | (axis < 0))).size:
        row = int(wrong[0])
        message = f"frequency is {float(numbers[row, 0])!r}, below 0 or beyond what a double holds."
        raise sets.lines.error(message, "Correct the value or the unit.", begins[row])
    if (wrong := np.flatnonzero(axis[1:] <= axis[:-1])).size:
        row = int(wrong[0]) + 1
        step = f"goes from {float(numbers[row - 1, 0])!r} to {float(numbers[row, 0])!r}"
        message = f"frequency must rise from set to set, but {step}."
        raise sets.lines.error(message, "Sort the sets, and give each frequency once.", begins[row])
    return axis


def _entry(
    sets: _Sets, form: str, first: FloatArray, second: FloatArray, offs: tuple[FloatArray, FloatArray]
) -> tuple[ComplexArray, FloatArray]:
    """One entry of the matrix along frequency, and the modulus by which it may be off.

    For a magnitude m and a phase: sqrt(dm^2 + (m dphi)^2), with dm = m ln(10)/20 dL for a level L in dB.
    """
    value: ComplexArray = np.empty(len(first), np.complex128)
    if form == "ri":
        value.real, value.imag = first, second
        return value, np.hypot(*offs)
    with np.errstate(over="ignore"):
        size = 10.0 ** (first / 20.0) if form == "db" else first
    if (wrong := np.flatnonzero(~np.isfinite(size) | (size < 0))).size:
        row = int(wrong[0])
        message = f"{float(first[row])!r} is no magnitude."
        raise sets.lines.error(message, "A minus sign belongs into the angle.", sets.begins[row])
    phase, d_phase = np.deg2rad(second), np.deg2rad(offs[1])
    d_size = offs[0] * (size * (np.log(10.0) / 20.0) if form == "db" else 1.0)
    value.real, value.imag = size * np.cos(phase), size * np.sin(phase)
    return value, np.hypot(d_size, size * d_phase)
