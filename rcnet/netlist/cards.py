"""What a netlist's dot lines ask for: sweeps, transients, noise, options, outputs."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from ..circuit import Sweep, TransientRun
from ..errors import CircuitError
from ..values import read_spice_number, write_spice_number
from .lines import words_of
from .sweep import MAX_POINTS

_KINDS: dict[str, Literal["dec", "oct", "lin"]] = {"dec": "dec", "oct": "oct", "lin": "lin"}
_PRINTED = re.compile(r"\bv(?:db|m|p|ph|r|i)?\s*\(\s*([^(),\s]+)\s*(?:,\s*([^(),\s]+)\s*)?\)", re.IGNORECASE)
_NOISE = re.compile(r"\.noise\s+v\s*\(\s*([^(),\s]+)\s*(?:,\s*([^(),\s]+)\s*)?\)(.*)", re.IGNORECASE)

# Settings of the simulator's own arithmetic: they change no circuit and are kept. The last few only print.
_NUMERIC = frozenset(
    ["reltol", "abstol", "vntol", "chgtol", "trtol", "pivtol", "pivrel", "maxord", "itl1", "itl2", "itl4"]
)
_METHODS = frozenset(["gear", "trap", "trapezoidal"])
_PRINTING = frozenset(
    ["acct", "noacct", "list", "node", "nomod", "nopage", "nopr", "opts", "noinit", "numdgt"]
)
ABSOLUTE_ZERO = -273.15  # degrees Celsius


@dataclass(frozen=True, slots=True)
class NoiseCard:
    """A `.noise` line: the output node or pair, the input source as written, the sweep."""

    nodes: tuple[str, ...]
    source: str
    sweep: Sweep


def read_sweep(card: str, words: Sequence[str]) -> Sweep:
    """`dec 20 10 1meg` and its like. Raises CircuitError or QuantityError."""
    kind = _KINDS.get(words[0].lower()) if words else None
    if kind is None or len(words) != 4:
        before = " v(out) Vin" if card == ".noise" else ""
        raise CircuitError(f"{card} cannot be read.", remedy=f"Write {card}{before} dec 20 10 1meg.")
    points, start, stop = (read_spice_number(word).value for word in words[1:])
    if not 1 <= points <= MAX_POINTS or points != int(points):
        raise CircuitError(
            f"{card} asks for {words[1]!r} points.", remedy=f"Give a whole number from 1 to {MAX_POINTS}."
        )
    return Sweep(start, stop, int(points), kind)


def read_noise(text: str) -> NoiseCard:
    """A whole `.noise` line; a number behind the sweep (a summary for each part) is passed over."""
    match = _NOISE.fullmatch(text)
    words = words_of(match[3]) if match else []
    if match is None or len(words) not in (5, 6):
        raise CircuitError(".noise cannot be read.", remedy="Write .noise v(out) Vin dec 20 10 1meg.")
    nodes = tuple(node for node in match.groups()[:2] if node)
    return NoiseCard(nodes, words[0], read_sweep(".noise", words[1:5]))


def read_transient(words: Sequence[str]) -> TransientRun:
    """`step stop [start [max_step]] [uic]`. Raises CircuitError or QuantityError."""
    uic = bool(words) and words[-1].lower() == "uic"
    numbers = [read_spice_number(word).value for word in (words[:-1] if uic else words)]
    if not 2 <= len(numbers) <= 4:
        raise CircuitError(".tran cannot be read.", remedy="Write .tran step stop [start [max_step]].")
    start = numbers[2] if len(numbers) > 2 else 0.0
    run = TransientRun(numbers[1], numbers[0], start, numbers[3] if len(numbers) > 3 else None, uic)
    if not (run.step > 0 and run.stop > run.start >= 0 and (run.max_step is None or run.max_step > 0)):
        raise CircuitError(
            ".tran has a step or a stop that is not positive.", remedy="Let 0 < step and 0 <= start < stop."
        )
    return run


def read_temperature(word: str) -> float:
    """A temperature in degrees Celsius. Raises CircuitError below absolute zero, or QuantityError."""
    number = read_spice_number(word).value
    if number <= ABSOLUTE_ZERO:
        raise CircuitError(
            f"{word!r} degrees Celsius is not above absolute zero.", remedy="Give degrees Celsius."
        )
    return number


# Options that reach into the circuit or its results -> what a simulator would do with them.
_CHANGING = {
    "rshunt": "would put that resistance from every node to ground",
    "gshunt": "would put that conductance from every node to ground, at dc",
    "cshunt": "would put that capacitance from every node to ground",
    "rseries": "would put that resistance in series with every inductor",
    "interp": "would make ngspice 39 write a results file that is wrong",
}
# Iteration, models of devices that are not read, solvers: nothing that a linear circuit notices.
_NO_MATTER = re.compile(
    r"gmin(steps)?|srcsteps|itl\d|absdv|reldv|noopiter|minbreak|ramptime|convstep|convabsstep|autostop|sparse|klu|"
    r"savecurrents|seed(info)?|def(l|w|ad|as|m)|badmos3|bypass|oldlimit|keepopinfo|xmu|trytocompact|nostepsizelimit|"
    r"noinit|post|probe|list|node|opts|acct|numdgt|ingold|brief|warn_?\w*|scale|scalm|limpts|cptime|parhier|units|"
    r"dcap|method|lvltim|filetype|num_threads|spicemode|unsupp\w*|nomod|nopage|measdgt|unicode|epsmin|delmin"
)

PassedOver = tuple[str, str, str]


def read_options(text: str) -> tuple[dict[str, str], list[PassedOver]]:
    """The options on a line by lower-case name, numbers in the shortest form; `temp`, `tnom` are among them.

    Also returns, for each option that may change what is solved and is left out: its name, message, remedy.
    Options that only print or steer the iteration are left out without a word. Raises CircuitError for one
    that cannot be read.
    """
    settings = re.sub(r"\s*=\s*", "=", text).replace(",", " ").split()[1:]
    kept: dict[str, str] = {}
    passed_over: list[PassedOver] = []
    for setting in settings:
        key, _, value = setting.lower().partition("=")
        if key in kept:
            continue  # of two on one line ngspice 39 takes the first (measured)
        if (known := _option(key, value)) is not None:
            kept[key] = known
        elif key in _CHANGING:
            message = (
                f"the option {key} {_CHANGING[key]}; the exact curves and what is written are without it."
            )
            passed_over.append((key, message, "Remove it, or put the parts it stands for into the netlist."))
        elif key not in _PRINTING and not _NO_MATTER.fullmatch(key):
            message = f"the option {key!r} is not known here, so it is not handed on."
            passed_over.append((key, message, "Check its name, or remove it."))
    return kept, passed_over


def _option(key: str, value: str) -> str | None:
    """The value of an option that is kept, in its shortest form; None for the others."""
    if (key == "noopac" and not value) or (key == "method" and value in _METHODS):
        return value
    if key in ("temp", "tnom"):
        return write_spice_number(read_temperature(value))
    if key in _NUMERIC:
        number = read_spice_number(value).value
        if number <= 0:
            raise CircuitError(f"the option {key} is {value!r}.", remedy="Give a number above zero.")
        return write_spice_number(number)
    if key in ("noopac", "method"):
        raise CircuitError(f"the option {key} is {value!r}.", remedy="Write noopac, or method=trap or gear.")
    return None


_START = re.compile(r"v\s*\(\s*([^(),\s]+)\s*\)\s*=\s*(\S+)", re.IGNORECASE)


def read_starts(text: str) -> dict[str, float]:
    """The node voltages of a `.ic` line. Raises CircuitError or QuantityError."""
    body = text.split(" ", 1)[1] if " " in text else ""
    found = {node: read_spice_number(value.rstrip(",")).value for node, value in _START.findall(body)}
    if not found or _START.sub("", body).replace(",", "").strip():
        raise CircuitError(
            ".ic cannot be read.", remedy="Write .ic v(out)=0.2 v(a)=1.", code="analysis-unreadable"
        )
    return found


def printed_voltages(text: str) -> list[tuple[str, ...]]:
    """The nodes and pairs in every `v(a)`, `vdb(a)`, `vp(a,b)`, ... of a line."""
    return [tuple(node for node in found if node) for found in _PRINTED.findall(text)]
