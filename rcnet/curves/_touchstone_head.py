"""The head of a Touchstone file: what its option line and its keywords say of the numbers below."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

from ..errors import ResultsError
from ._csv_layout import NUMBER

UNITS = {"hz": 1.0, "khz": 1e3, "mhz": 1e6, "ghz": 1e9}
MOST_PORTS = 2
AGAIN = "Export the file again."
_PARAMETERS = ("s", "y", "z", "h", "g")
_FORMATS = ("ma", "db", "ri")
_KEYWORD = re.compile(r"\[\s*([^\]]{1,60}?)\s*\]\s*(.*)")
_SUFFIX = re.compile(r"\.s([0-9]{1,6})p", re.IGNORECASE)
_COUNT = re.compile(r"[0-9]{1,9}")
_EXPORT = "Export one- or two-port parameters, single-ended."
_OPTIONS = "Write '# UNIT PARAMETER FORMAT R OHMS', such as '# MHz S RI R 50'."


@dataclass(frozen=True, slots=True)
class Options:
    """The option line: Hz of one unit of frequency, kind of parameters, form of numbers, reference in ohm."""

    unit: float
    parameter: str
    form: str
    reference: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Head:
    """What is known before the numbers.

    pairs: which matrix entries a set of numbers holds, in order, counted from 0
    frequencies: how many sets are promised, None where nothing is; bare: in ohm and siemens, not normalised
    """

    ports: int
    options: Options
    pairs: tuple[tuple[int, int], ...]
    frequencies: int | None = None
    bare: bool = False

    @property
    def width(self) -> int:
        """How many numbers belong to one frequency."""
        return 1 + 2 * len(self.pairs)


class Lines:
    """The lines of a file that hold more than a comment, and the errors that name them."""

    def __init__(self, text: str, source: str) -> None:
        self.source = source
        self.number = 0
        self._waiting: str | None = None
        self._lines = self._content(text)

    def _content(self, text: str) -> Iterator[tuple[int, str]]:
        start, number = 0, 0
        while start < len(text):
            end = text.find("\n", start)
            end = end if end >= 0 else len(text)
            number += 1
            line = text[start:end].partition("!")[0].strip()
            start = end + 1
            if line:
                yield number, line

    def __iter__(self) -> Iterator[str]:
        while True:
            if self._waiting is None:
                found = next(self._lines, None)
                if found is None:
                    return
                self.number, line = found
            else:
                line, self._waiting = self._waiting, None
            yield line

    def back(self, line: str) -> None:
        """Let the line just read come once more."""
        self._waiting = line

    def error(self, message: str, remedy: str, line: int | None = None) -> ResultsError:
        """The error, at the line last read unless another is named."""
        number = line if line is not None else self.number or None
        return ResultsError(message, file=self.source, line=number, remedy=remedy)


def is_touchstone(suffix: str) -> bool:
    """True for `.ts`, `.s1p`, `.s2p` and so on, in any case."""
    return suffix.lower() == ".ts" or _SUFFIX.fullmatch(suffix) is not None


def ports_by_name(source: str) -> int | None:
    """How many ports the file's suffix speaks of; None for `.ts` and others. Raises ResultsError."""
    match = _SUFFIX.search(source[-12:])
    ports = int(match[1]) if match and source.endswith(match[0]) else None
    if ports is not None and not 1 <= ports <= MOST_PORTS:
        message = f"it is named as a file of {ports} ports; one and two are read."
        raise ResultsError(message, file=source, remedy=_EXPORT)
    return ports


def read_head(lines: Lines, ports: int | None) -> Head:
    """Everything above the numbers. Raises ResultsError with the line."""
    for line in lines:
        match = _KEYWORD.fullmatch(line)
        if match and match[1].lower() == "version":
            if match[2] not in ("2.0", "2.1"):
                raise lines.error(f"its version is {match[2][:20]!r}; 1.x, 2.0 and 2.1 are read.", AGAIN)
            return _Keywords(lines, ports).head()
        if match:
            message = f"the keyword '[{match[1]}]' stands in a file that does not begin with '[Version]'."
            raise lines.error(message, "Write '[Version] 2.0' first, or leave the keyword out.")
        if not line.startswith("#"):
            found = "numbers stand" if NUMBER.fullmatch(line.split()[0]) else f"{line[:40]!r} stands"
            raise lines.error(f"{found} where the option line was expected.", _OPTIONS)
        return _head_of_version_1(lines, line, ports)
    raise lines.error("it holds no option line.", _OPTIONS)


def _head_of_version_1(lines: Lines, line: str, ports: int | None) -> Head:
    line_number = lines.number
    if ports is None:
        ports = _ports_by_first_row(lines)
    options = _options(lines, line, ports, line_number)
    if options.parameter != "s" and len(set(options.reference)) > 1:
        message = (
            f"{options.parameter.upper()} parameters are normalised to one resistance, yet it names two."
        )
        raise lines.error(message, "Export S parameters.", line_number)
    pairs = ((0, 0),) if ports == 1 else ((0, 0), (1, 0), (0, 1), (1, 1))
    return Head(ports, options, pairs)


def _ports_by_first_row(lines: Lines) -> int:
    for line in lines:
        lines.back(line)
        count = len(line.split())
        if count in (3, 9):
            return 1 if count == 3 else 2
        break
    message = "neither its name nor its first row of numbers tells how many ports it has."
    raise lines.error(message, "Name it .s1p or .s2p.")


def _options(lines: Lines, line: str, ports: int, number: int | None = None) -> Options:
    """The option line; what it leaves out is GHz, S, MA and 50 ohm."""
    found: dict[str, str] = {}
    reference: list[float] = []
    words = line[1:].lower().split()
    while words:
        word = words.pop(0)
        kind = next((k for k, table in _KINDS.items() if word in table), None)
        if kind is None:
            raise lines.error(f"{word[:40]!r} is no option that is read.", _OPTIONS, number)
        if kind in found:
            raise lines.error(f"the option line names two of {found[kind]!r} and {word!r}.", _OPTIONS, number)
        found[kind] = word
        while word == "r" and words and NUMBER.fullmatch(words[0]):
            reference.append(float(words.pop(0).replace("d", "e")))
    if ("r" in found) != bool(reference) or any(not 0 < r < float("inf") for r in reference):
        raise lines.error("the reference resistance is no positive number of ohms.", _OPTIONS, number)
    if len(reference) not in (0, 1, ports):
        message = f"it names {len(reference)} reference resistances for {ports} ports."
        raise lines.error(message, _OPTIONS, number)
    parameter = found.get("parameter", "s")
    if ports == 1 and parameter in "hg":
        raise lines.error(f"{parameter.upper()} parameters need two ports, and it has one.", _EXPORT, number)
    each = tuple(reference) if len(reference) == ports else tuple((reference or [50.0]) * ports)
    return Options(UNITS[found.get("unit", "ghz")], parameter, found.get("form", "ma"), each)


_KINDS = {"unit": tuple(UNITS), "parameter": _PARAMETERS, "form": _FORMATS, "r": ("r",)}
_KNOWN = (
    "number of ports",
    "two-port data order",
    "two-port order",
    "number of frequencies",
    "number of noise frequencies",
    "reference",
    "matrix format",
)


class _Keywords:
    """The option line and keywords of version 2, up to `[Network Data]`."""

    def __init__(self, lines: Lines, ports: int | None) -> None:
        self.lines = lines
        self.named = ports
        self.values: dict[str, tuple[str, int]] = {}
        self.option_line: tuple[str, int] | None = None

    def head(self) -> Head:
        for line in self.lines:
            match = _KEYWORD.fullmatch(line)
            if line.startswith("#"):
                self.option_line = self.option_line or (line, self.lines.number)
            elif match is None:
                raise self.lines.error(f"{line[:40]!r} stands where a keyword was expected.", AGAIN)
            elif match[1].lower() == "network data":
                return self._checked()
            else:
                self._take(" ".join(match[1].lower().split()), match[2])
        raise self.lines.error("it ends before '[Network Data]'.", AGAIN)

    def _take(self, keyword: str, value: str) -> None:
        lines = self.lines
        if keyword == "begin information":
            if not any(re.fullmatch(r"\[\s*end information\s*\]", line, re.IGNORECASE) for line in lines):
                raise lines.error("'[Begin Information]' has no '[End Information]'.", AGAIN)
            return
        if keyword == "mixed-mode order":
            raise lines.error("it holds mixed-mode parameters, which are not read.", _EXPORT)
        if keyword not in _KNOWN:
            raise lines.error(f"the keyword '[{keyword}]' is not known here.", AGAIN)
        keyword = "two-port data order" if keyword == "two-port order" else keyword
        if keyword in self.values:
            raise lines.error(f"'[{keyword}]' stands there twice.", "Keep one of the two.")
        number = lines.number
        if keyword == "reference":
            value = " ".join([value, *self._rows()])
        self.values[keyword] = value.lower(), number

    def _rows(self) -> Iterator[str]:
        """The lines of numbers that follow."""
        for line in self.lines:
            if line.startswith(("[", "#")):
                self.lines.back(line)
                return
            yield line

    def _count(self, keyword: str) -> int:
        text, number = self.values.get(keyword, ("", None))
        if number is None:
            raise self.lines.error(f"'[{keyword}]' is missing above '[network data]'.", AGAIN)
        if not _COUNT.fullmatch(text) or int(text) == 0:
            raise self.lines.error(f"'[{keyword}]' says {text[:40]!r}, not a count.", AGAIN, number)
        return int(text)

    def _checked(self) -> Head:
        lines = self.lines
        ports = self._count("number of ports")
        if ports > MOST_PORTS:
            message = f"it has {ports} ports; one and two are read."
            raise lines.error(message, _EXPORT, self.values["number of ports"][1])
        if self.named not in (None, ports):
            message = f"it has {ports} ports, yet is named as a file of {self.named}."
            raise lines.error(message, "Correct the suffix.", self.values["number of ports"][1])
        if self.option_line is None:
            raise lines.error("it holds no option line.", _OPTIONS)
        options = _options(lines, self.option_line[0], ports, self.option_line[1])
        options = Options(options.unit, options.parameter, options.form, self._reference(options, ports))
        return Head(ports, options, self._pairs(ports), self._count("number of frequencies"), bare=True)

    def _reference(self, options: Options, ports: int) -> tuple[float, ...]:
        text, number = self.values.get("reference", ("", None))
        if number is None:
            return options.reference
        words = text.split()
        if len(words) != ports or not all(NUMBER.fullmatch(word) for word in words):
            message = (
                f"'[Reference]' says {text.strip()[:40]!r}, not a number of ohms for each of {ports} ports."
            )
            raise self.lines.error(message, AGAIN, number)
        found = tuple(float(word.replace("d", "e")) for word in words)
        if any(not 0 < ohms < float("inf") for ohms in found):
            raise self.lines.error("'[Reference]' holds no positive number of ohms.", AGAIN, number)
        return found

    def _pairs(self, ports: int) -> tuple[tuple[int, int], ...]:
        shape, at = self.values.get("matrix format", ("full", None))
        if shape not in ("full", "lower", "upper"):
            raise self.lines.error(f"'[Matrix Format]' says {shape[:40]!r}.", "Say Full, Lower or Upper.", at)
        order, number = self.values.get("two-port data order", ("", None))
        if ports == 1:
            if number is not None:
                message = "'[Two-Port Data Order]' stands in a file of one port."
                raise self.lines.error(message, "Leave it out.", number)
            return ((0, 0),)
        if order not in ("12_21", "21_12"):
            message = (
                f"'[Two-Port Data Order]' says {order[:40]!r}."
                if number
                else ("'[Two-Port Data Order]' is missing, which two ports need.")
            )
            raise self.lines.error(message, "Say 12_21 or 21_12.", number)
        if shape != "full":
            return ((0, 0), (1, 0) if shape == "lower" else (0, 1), (1, 1))
        middle = ((0, 1), (1, 0)) if order == "12_21" else ((1, 0), (0, 1))
        return ((0, 0), *middle, (1, 1))
