"""Whether a simulator's run may be believed, judged by what it left behind.

An exit code of 0 says little: ngspice 39 also gives it for missing values, wrong operating points and results
that were never written. The phrases below are those it prints then; the ngspice manual describes the raw
file.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

NOISE_SPECTRUM = "Noise Spectral Density Curves"
NOISE_TOTALS = "Integrated Noise"


@dataclass(frozen=True)
class Expected:
    """The results a deck must give.

    plotname: the analysis as raw files name it: `AC Analysis`, `Transient Analysis`, `Operating Point`,
        `Noise Spectral Density Curves` (`Integrated Noise` may follow that one)
    variables: names that must be among the vectors, lower case, as raw files write them: `v(out)`
    points: how many points there must be; None for any number above zero
    """

    plotname: str
    variables: tuple[str, ...]
    points: int | None = None


@dataclass(frozen=True)
class Plot:
    """What the acceptance test has to know of one plot.

    name: its Plotname; variables: vector names, lower case, axis first; points: how many
    finite: False where a value is infinite or no number; rising: False where the axis steps back or stands
    """

    name: str
    variables: tuple[str, ...]
    points: int
    finite: bool
    rising: bool


class BadRawError(Exception):
    """A raw file is not whole; the text is a clause that can follow `its results`."""


_TELLING = re.compile(
    r"\berrors?\b|\baborted\b|\binterrupted\b|singular matrix|matrix is singular|gmin step|source stepping"
    r"|Transient op\b|\bmOhm\b|can't find model|Unusual leading|can't parse|unrecognized variable"
    r"|redefinition|Could not|non-increasing|\bWarning:|Undefined parameter|Timestep too small|Assertion"
    r"|can't allocate",
    re.IGNORECASE,
)
_HARMLESS = re.compile(
    r"Note: No compatibility mode selected!"
    r"|Note: \S+: has no value, DC 0 assumed"
    r"|Note: \S+: dc value used for op instead of transient time=0 value"
    r"|Linear circuit, option noopac given: no OP analysis"
    r"|.{0,80}Reducing trtol"
    r"|Circuit: "
)
_NODE_TABLE = re.compile(r"Node\s+(?:Last )?Voltage")
_NODE_ROW = re.compile(r"\S+\s+[-+]?[0-9.]+(?:e[-+]?[0-9]+)?", re.IGNORECASE)


def telling_line(log: str) -> str | None:
    """The first line of a log by which the run must not be believed, at most 200 characters; None if none.

    What the log only repeats (the title, the node names with their starting voltages) is passed over.
    """
    lines = [line.strip() for line in log.split("\n")]
    in_table = False
    for index, line in enumerate(lines):
        if _NODE_TABLE.match(line):
            in_table = True
            continue
        in_table = in_table and (_NODE_ROW.fullmatch(line) is not None or set(line) == {"-", " "})
        if in_table or _HARMLESS.match(line) or not _TELLING.search(line):
            continue
        if line.endswith(":"):  # the cause stands on the next two lines
            return _printable(" ".join(lines[index : index + 3]))
        return _printable(line)
    return None


def _printable(line: str) -> str:
    text = re.sub(r"\s+", " ", "".join(char if char.isprintable() else " " for char in line)).strip()
    return text if len(text) <= 200 else text[:197] + "..."


_REMEDIES = (
    (
        r"singular|gmin step|source stepping|Transient op|Timestep too small|Assertion",
        "Check that every node has a way to ground and that no voltage sources form a loop.",
    ),
    (r"mOhm", "Give every resistor a value above zero."),
    (r"allocate", "Ask for fewer points or nodes, or free some memory."),
    (
        r"error on line|unknown|undefined|can't find|can't parse|redefinition|could not",
        "Correct what it names in the circuit.",
    ),
)


def remedy_for(line: str | None) -> str:
    """What to do about a telling line, a full sentence."""
    for pattern, remedy in _REMEDIES:
        if line is not None and re.search(pattern, line, re.IGNORECASE):
            return remedy
    return "Look at the simulator's log, or choose another second opinion with --second-opinion."


def fault_of(plots: Sequence[Plot], expected: Expected) -> str | None:
    """Why these plots are not what was asked for, as a clause to follow `its results`; None if they are."""
    # Under `.options sqrnoise` ngspice 39 puts the unit behind the names of noise plots.
    names = [plot.name.partition(" - ")[0] for plot in plots]
    allowed = [[expected.plotname]]
    if expected.plotname == NOISE_SPECTRUM:
        allowed.append([NOISE_SPECTRUM, NOISE_TOTALS])
    if names not in allowed:
        return f"hold {' and '.join(map(repr, names)) or 'nothing'} where {expected.plotname!r} was asked for"
    first = plots[0]
    if first.points <= 0 or expected.points not in (None, first.points):
        wanted = "some" if expected.points is None else str(expected.points)
        return f"have {first.points} points where {wanted} were expected"
    missing = [name for name in expected.variables if name.lower() not in first.variables]
    if missing:
        return f"lack {missing[0]!r}"
    if not all(plot.finite for plot in plots):
        return "hold values that are infinite or no numbers"
    if not first.rising:
        return f"have a {first.variables[0]} axis that does not rise"
    return None


def scan_raw(data: bytes) -> list[Plot]:
    """The plots of a binary raw file, their payloads whole to the byte. Raises BadRawError."""
    plots = []
    position = 0
    while position < len(data):
        plot, position = _scan_plot(data, position)
        plots.append(plot)
    return plots


def _scan_plot(data: bytes, position: int) -> tuple[Plot, int]:
    header: dict[str, str] = {}
    while "variables" not in header:
        line, position = _line(data, position)
        key, colon, text = line.partition(":")
        if not colon:
            raise BadRawError("are no raw file of the simulator")
        header[key.strip().lower()] = text.strip()
    try:
        name, flags = header["plotname"], header["flags"].lower().split()
        variables, points = int(header["no. variables"]), int(header["no. points"])
    except (KeyError, ValueError):
        raise BadRawError("stop in the middle of their header") from None
    if min(variables, points) < 0:
        raise BadRawError("claim a negative size")
    names = []
    for _ in range(variables):
        line, position = _line(data, position)
        columns = line.split("\t")
        names.append(columns[2].lower() if len(columns) > 3 else "")
    line, position = _line(data, position)
    if line != "Binary:":
        raise BadRawError("are not in the binary form that was asked for")
    parts = 2 if "complex" in flags else 1
    end = position + points * variables * parts * 8
    if end > len(data):
        raise BadRawError("are cut short")
    values = np.frombuffer(data, "<f8", points * variables * parts, position).reshape(
        points, variables, parts
    )
    return plot_of(name, names, values), end


def _line(data: bytes, position: int) -> tuple[str, int]:
    end = data.find(b"\n", position, position + 1_000_000)
    if end < 0:
        raise BadRawError("stop in the middle of their header")
    return data[position:end].decode("utf-8", "replace"), end + 1


def plot_of(name: str, variables: Sequence[str], values: npt.NDArray[np.float64]) -> Plot:
    """A plot as the acceptance test sees it.

    values: shape (points, variables, 1 or 2), real numbers, or real and imaginary parts
    """
    has_axis = bool(variables) and variables[0] in ("frequency", "time")
    if has_axis:
        # ngspice leaves the imaginary part of a frequency as it found the memory.
        finite = np.isfinite(values[:, 0, 0]).all() and np.isfinite(values[:, 1:]).all()
        rising = bool(np.all(np.diff(values[:, 0, 0]) > 0))
    else:
        finite, rising = np.isfinite(values).all(), True
    return Plot(name, tuple(variables), values.shape[0], bool(finite), rising)
