"""The layout of a Berkeley raw file: its headers, and where the numbers of each plot lie."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from ..errors import ResultsError
from .curve import Analysis

# Limits on strangers' files, stated in the README.
MAX_CURVES = 1_000_000
MAX_HEADER_LINES = 10_000  # of one plot, its variables not counted
MAX_HEADER_LINE = 1 << 20  # bytes
MAX_LENGTHS = 64  # different lengths among the vectors of an unpadded plot

# Which analyses run along an axis that must rise, and its name.
ALONG: Mapping[Analysis, str] = {"ac": "frequency", "transient": "time", "noise": "frequency"}

RUN_AGAIN = "Run the simulation again and let it finish."
_WRITE_AGAIN = "The header is damaged; write the file again."

_PLOTS: Mapping[str, Analysis] = {
    "ac analysis": "ac",
    "transient analysis": "transient",
    "operating point": "operating point",
    "noise spectral density curves": "noise",
}
_WORDS = "title date command plotname flags dimensions option variables values binary"
_KEYWORDS = frozenset((*_WORDS.split(), "no. variables", "no. points"))
_REPEATABLE = frozenset(("command", "option"))
_COUNT = re.compile(r"[0-9]{1,15}")
_SWEEP = re.compile(r"(.*-)?sweep\)?")
_BLANK_TAIL = re.compile(rb"\s*\Z")
_WHITE = re.compile(rb"\s")


@dataclass(frozen=True, slots=True)
class Variable:
    """One line of a header: name and kind in lower case, `length` the points that are really its own."""

    name: str
    kind: str
    length: int


@dataclass(frozen=True, slots=True)
class Plot:
    """A header, and the bytes `start` to `stop` of its data."""

    title: str
    name: str
    analysis: Analysis
    is_complex: bool
    padded: bool
    points: int
    variables: tuple[Variable, ...]
    is_text: bool
    start: int
    stop: int

    @property
    def has_scale(self) -> bool:
        """True where variable 0 is the axis and not a result."""
        first = self.variables[0]
        return (
            self.analysis in ALONG
            or first.kind in ("time", "frequency")
            or _SWEEP.fullmatch(first.name) is not None
            or (self.analysis == "other" and self.points > 1)
        )

    @property
    def segments(self) -> list[tuple[int, int, list[int]]]:
        """Runs of points (from, to) with the variables whose numbers stand in the data there.

        A variable shorter than the plot stops early unless the data are padded.
        """
        everything = list(range(len(self.variables)))
        if self.padded:
            return [(0, self.points, everything)]
        ends = sorted({variable.length for variable in self.variables})
        return [
            (begin, end, [i for i in everything if self.variables[i].length > begin])
            for begin, end in zip([0, *ends[:-1]], ends, strict=True)
        ]

    @property
    def numbers(self) -> int:
        """How many values, real or complex, the data hold."""
        if self.padded:
            return self.points * len(self.variables)
        return sum(variable.length for variable in self.variables)


class RawFile:
    """The bytes of a raw file, a position in them, and the errors that name the place."""

    def __init__(self, data: bytes, source: str) -> None:
        self.data = data
        self.source = source
        self._position = 0
        self._only_text = True

    def error(self, message: str, remedy: str, at: int | None = None) -> ResultsError:
        """The error, with the line of byte `at` where all before it is text."""
        line = self.data.count(b"\n", 0, at) + 1 if at is not None and self._only_text else None
        return ResultsError(message, file=self.source, line=line, remedy=remedy)

    def plots(self) -> Iterator[Plot]:
        """The plots in the file's order; every byte of the file belongs to one. Raises ResultsError."""
        title, curves = "", 0
        while self._position < len(self.data):
            if self._only_text and _BLANK_TAIL.match(self.data, self._position):
                return
            plot = self._plot(title)
            title = plot.title
            curves += len(plot.variables)
            if curves > MAX_CURVES:
                raise self.error(f"there are more than {MAX_CURVES} curves.", "Save fewer variables.")
            yield plot

    def _plot(self, title: str) -> Plot:
        begin = self._position
        fields, rest = self._header()
        name = " ".join(fields.get("plotname", "").split())
        title = " ".join(fields.get("title", title).split())
        flags = fields.get("flags", "").lower().replace(",", " ").split()
        if ("real" in flags) == ("complex" in flags):
            message = f"plot {name!r}: its flags {' '.join(flags)[:80]!r} do not say 'real' or 'complex'."
            raise self.error(message, _WRITE_AGAIN, begin)
        count = self._count(fields, "No. Variables", name)
        points = self._count(fields, "No. Points", name)
        if points == 0:
            raise self._no_points(name, count)
        variables = self._variables(name, count, points, rest)
        is_text = self._marker(name)
        padded, start = "unpadded" not in flags, self._position
        kind = _analysis(name)
        plot = Plot(title, name, kind, "complex" in flags, padded, points, variables, is_text, start, start)
        self._check_lengths(plot)
        plot = replace(plot, stop=self._text_end(plot) if is_text else self._binary_end(plot))
        self._position = plot.stop
        self._only_text = self._only_text and is_text
        return plot

    def _line(self) -> str | None:
        """The next line of a header without its end; None where the file breaks off before there is one."""
        end = self.data.find(b"\n", self._position, self._position + MAX_HEADER_LINE)
        if end < 0:
            return None
        line = self.data[self._position : end].decode("utf-8", "replace")
        self._position = end + 1
        return line.rstrip("\r")

    def _header(self) -> tuple[dict[str, str], str]:
        """The header's fields up to `Variables:`, and what follows that word on its line."""
        fields: dict[str, str] = {}
        for _ in range(MAX_HEADER_LINES):
            at = self._position
            line = self._line()
            key, value = _keyword(
                line if line is not None else self.data[at : at + 80].decode("utf-8", "replace")
            )
            if not fields and key not in _KEYWORDS:
                raise self._not_a_header(at)
            if line is None:
                raise self.error("the file breaks off inside a header.", RUN_AGAIN, at)
            if key == "variables":
                return fields, value
            if key in ("values", "binary") or (key in fields and key in _KEYWORDS - _REPEATABLE):
                found = line.strip()[:80]
                raise self.error(f"{found!r} stands where 'Variables:' was expected.", _WRITE_AGAIN, at)
            fields[key] = value
        message = f"a header has more than {MAX_HEADER_LINES} lines before its variables."
        raise self.error(message, "Name a Berkeley raw file.")

    def _not_a_header(self, at: int) -> ResultsError:
        found = self.data[at : at + 24]
        if at == 0:
            return self.error(
                f"this is not a raw file: it begins {found!r}, not with 'Title:'.",
                "Name a Berkeley raw file as ngspice writes it with -r.",
            )
        return self.error(
            f"{len(self.data) - at} bytes follow the last plot and belong to none; they begin {found!r}.",
            "The header counts too few points, or the file is damaged; run the simulation again.",
            at,
        )

    def _count(self, fields: Mapping[str, str], word: str, plot: str) -> int:
        text = fields.get(word.lower(), "").strip()
        if not _COUNT.fullmatch(text):
            raise self.error(f"plot {plot!r}: '{word}:' says {text[:40]!r}, not a count.", _WRITE_AGAIN)
        return int(text)

    def _no_points(self, plot: str, count: int) -> ResultsError:
        """Why a plot has no points: the run was stopped before the count was filled in, or made none."""
        for _ in range(min(count, MAX_CURVES) + 2):
            line = self._line()
            if line is None or _keyword(line)[0] in ("values", "binary"):
                break
        left = len(self.data) - self._position
        rest = self.data[self._position : self._position + 4096]
        if rest.strip() and _keyword(rest.split(b"\n")[0].decode("utf-8", "replace"))[0] not in _KEYWORDS:
            message = f"plot {plot!r}: the run was interrupted; it counts 0 points, yet {left} bytes follow."
            return self.error(message, RUN_AGAIN)
        remedy = "See the simulator's log: the analysis failed, was stopped at once, or its range is empty."
        return self.error(f"plot {plot!r} holds no points.", remedy)

    def _variables(self, plot: str, count: int, points: int, rest: str) -> tuple[Variable, ...]:
        if not 0 < count <= MAX_CURVES:
            message = f"plot {plot!r} counts {count} variables; 1 to {MAX_CURVES} are read."
            raise self.error(message, "Save fewer variables.")
        variables = []
        for index in range(count):
            at = self._position
            line = rest if index == 0 and rest.strip() else self._line()
            if line is None:
                raise self.error(f"the file breaks off among the variables of plot {plot!r}.", RUN_AGAIN, at)
            text = line.strip()
            fields = [field.strip() for field in text.split("\t" if text.count("\t") >= 2 else None)]
            if len(fields) < 3 or fields[0] != str(index) or not fields[1] or not fields[2]:
                message = (
                    f"plot {plot!r}: {text[:80]!r} is not variable {index} of {count}: number, name, type."
                )
                raise self.error(message, _WRITE_AGAIN, at)
            kind, *parameters = " ".join(fields[2:]).lower().split()
            variables.append(Variable(fields[1].lower(), kind, _length(parameters, points)))
        return tuple(variables)

    def _marker(self, plot: str) -> bool:
        """True where text follows, False for binary data."""
        at = self._position
        line = self._line()
        if line is None:
            raise self.error(f"plot {plot!r} is cut short: its data are missing.", RUN_AGAIN, at)
        key, value = _keyword(line)
        if key not in ("values", "binary") or value.strip():
            found = line.strip()[:80]
            message = (
                f"plot {plot!r}: 'Values:' or 'Binary:' was expected after its variables, not {found!r}."
            )
            raise self.error(message, _WRITE_AGAIN, at)
        return key == "values"

    def _check_lengths(self, plot: Plot) -> None:
        if plot.has_scale and plot.variables[0].length != plot.points:
            raise self.error(f"plot {plot.name!r}: its axis is shorter than the plot.", _WRITE_AGAIN)
        if len({variable.length for variable in plot.variables}) > MAX_LENGTHS:
            message = f"plot {plot.name!r}: its vectors have more than {MAX_LENGTHS} different lengths."
            raise self.error(message, "Write vectors of one length to one plot.")

    def _binary_end(self, plot: Plot) -> int:
        width = 16 if plot.is_complex else 8
        wanted, found = plot.numbers * width, len(self.data) - plot.start
        head = f"plot {plot.name!r} is cut short: its {plot.points} points take {wanted} bytes"
        if found < wanted:
            whole = f" ({found // (width * len(plot.variables))} whole points)" if plot.padded else ""
            raise self.error(f"{head}, {found} are there{whole}.", RUN_AGAIN)
        if self.data.find(b"\nPlotname:", plot.start, plot.start + wanted) >= 0:
            raise self.error(f"{head}, and another plot begins among them.", RUN_AGAIN)
        return plot.start + wanted

    def _text_end(self, plot: Plot) -> int:
        # Numbers hold no colon, so the next one stands in the first line of the next header.
        colon = self.data.find(b":", plot.start)
        line = self.data.rfind(b"\n", plot.start, colon) + 1 if colon >= 0 else len(self.data)
        stop = max(line, plot.start)
        head = f"plot {plot.name!r} is cut short"
        # A number and the blank behind it take two bytes at least; each point has an index, too.
        if 2 * (plot.points + plot.numbers) > stop - plot.start:
            message = (
                f"{head}: its {plot.points} points do not fit the {stop - plot.start} bytes that are there."
            )
            raise self.error(message, RUN_AGAIN)
        if not _WHITE.match(self.data, stop - 1):
            raise self.error(
                f"{head}: its last line has no end, so its last number may lack digits.",
                f"{RUN_AGAIN} If the file is whole, put a line end behind it.",
                stop,
            )
        return stop


def _keyword(line: str) -> tuple[str, str]:
    """The keyword of a header line, in lower case with single blanks, and the text after its colon."""
    key, colon, value = line.partition(":")
    return (" ".join(key.lower().split()) if colon else "", value)


def _length(parameters: Sequence[str], points: int) -> int:
    """How many points a variable has: the product of its `dims=`, else as many as the plot."""
    dims = next((word[5:].split(",") for word in parameters if word.startswith("dims=")), [])
    if not 0 < len(dims) <= 8 or not all(_COUNT.fullmatch(part) for part in dims):
        return points
    length = math.prod(int(part) for part in dims)
    return length if 0 < length < points else points


def _analysis(plot: str) -> Analysis:
    return next((analysis for start, analysis in _PLOTS.items() if plot.lower().startswith(start)), "other")
