"""The last look at a deck before a simulator sees it.

What a deck can do to its reader (run shell commands, read and write files, never end) and which frequency
grids misbehave was measured on ngspice 39; the ngspice manual describes both in its chapters on control lines
and on `.ac`.
"""

from __future__ import annotations

import math
import re

from ..errors import SimulatorError

MAX_TITLE_BYTES = 400  # ngspice 39 overruns a buffer at 504

_MADE_BY_RCNET = "Let rcnet write the netlist; foreign text never goes to a simulator."

# PySpice splits a deck wherever str.splitlines does, so any such character could start a line of its own.
_CONTROL_CHARACTER = re.compile("[\x00-\x08\x0b-\x1f\x7f-\x9f\u2028\u2029\ud800-\udfff]")
# ngspice drops the characters after the blanks here with a warning when they lead a line.
_LEADING = r"^(?:[^\S\n]|[=\[\]?()&%$\"!:,;])*"
_DIRECTIVE = re.compile(_LEADING + r"(\*#|\*ng_script|\.control|\.inc|\.lib)", re.IGNORECASE | re.MULTILINE)
_CODE_MODEL = re.compile(r"^[^\S\n]*(a\S*)", re.IGNORECASE | re.MULTILINE)
_JOINED_LINE = re.compile(r"\\[^\S\n]*$", re.MULTILINE)
_NO_VALUE = re.compile(
    r"^[ \t]*([rcl][^\s,]*)(?:[ \t,]+[^\s,]+){0,2}[ \t,]*$(?!(?:\n[ \t]*(?:\*[^\n]*)?$)*\n[ \t]*\+)",
    re.IGNORECASE | re.MULTILINE,
)
_SWEEP = re.compile(
    r"^[ \t]*\.(ac|noise)\b[^\n]*(?:\n[ \t]*[+*][^\n]*|\n[ \t]*$)*", re.IGNORECASE | re.MULTILINE
)
_AC_SOURCE = re.compile(r"^[ \t]*[vi+][^\n]*[ \t,(=]ac\b", re.IGNORECASE | re.MULTILINE)
_NUMBER = re.compile(
    r"([+-]?(?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?)(meg|mil|t|g|k|m|u|n|p|f)?[a-z]*", re.IGNORECASE | re.ASCII
)
_SUFFIX = {
    "t": 1e12, "g": 1e9, "meg": 1e6, "k": 1e3, "mil": 25.4e-6,
    "m": 1e-3, "u": 1e-6, "n": 1e-9, "p": 1e-12, "f": 1e-15,
}  # fmt: skip


def guard_deck(deck: str) -> None:
    """Refuse a deck that could do more than be simulated, or whose simulation would be known nonsense.

    deck: the whole netlist, title line first, lines ended by LF. Raises SimulatorError naming the line.
    """
    _guard_characters(deck)
    title, newline, _ = deck.partition("\n")
    _guard_title(title)
    if hit := _DIRECTIVE.search(deck):
        raise _refused(
            deck, hit.start(1), f"a line begins with {hit[1]!r}, which can reach beyond the simulation"
        )
    body = len(title) + len(newline)
    if hit := _CODE_MODEL.search(deck, body):
        raise _refused(deck, hit.start(1), f"{hit[1][:40]!r} is a code model, which can read files")
    if hit := _NO_VALUE.search(deck, body):
        remedy = "Give it two nodes and a value."
        raise _refused(deck, hit.start(1), f"the part {hit[1][:40]!r} lacks a node or its value", remedy)
    for sweep in _SWEEP.finditer(deck, body):
        _guard_sweep(deck, sweep, body)


def _refused(deck: str, position: int, what: str, remedy: str = _MADE_BY_RCNET) -> SimulatorError:
    line = deck.count("\n", 0, position) + 1
    return SimulatorError(f"the deck was not given to the simulator: {what}.", line=line, remedy=remedy)


def _guard_characters(deck: str) -> None:
    if hit := _CONTROL_CHARACTER.search(deck):
        raise _refused(deck, hit.start(), f"it holds the control character {hit[0]!r}")
    if hit := _JOINED_LINE.search(deck):
        raise _refused(deck, hit.start(), "a line ends with a backslash, which can join it to the next")


def _guard_title(title: str) -> None:
    if not title.strip():
        raise _refused(title, 0, "its first line, the title, is empty", "Give the circuit a title.")
    size = len(title.encode())
    if size > MAX_TITLE_BYTES:
        what = f"its title has {size} bytes, of which at most {MAX_TITLE_BYTES} are safe"
        raise _refused(title, 0, what, "Shorten the title.")


def _guard_sweep(deck: str, sweep: re.Match[str], body: int) -> None:
    lines = [line.strip() for line in sweep[0].split("\n")]
    text = " ".join(re.split(r";|//|\s\$", line.lstrip("+"))[0] for line in lines if not line.startswith("*"))
    words = [word for word in re.split(r"[\s,()=]+", text.lower()) if word]
    if words[0] == ".ac" and not _AC_SOURCE.search(deck, body):
        remedy = "Give the driving source an `ac` value."
        raise _refused(
            deck, sweep.start(), "no source carries an AC value, so every result would be zero", remedy
        )
    if words[0] == ".noise":
        _guard_noise_node(deck, sweep, words, body)
    kinds = [index for index, word in enumerate(words) if word in ("dec", "oct", "lin")]
    if not kinds:
        return  # the simulator itself refuses such a line
    kind, numbers = words[kinds[-1]], words[kinds[-1] + 1 : kinds[-1] + 4]
    fault = _grid_fault(words[0], kind, numbers)
    if fault:
        raise _refused(
            deck, sweep.start(), fault, "Choose a rising frequency range and enough points per decade."
        )


def _guard_noise_node(deck: str, sweep: re.Match[str], words: list[str], body: int) -> None:
    node = words[2] if len(words) > 2 and words[1] == "v" else "0"
    if node in ("0", "gnd") or "." in node:  # a dot is the path into a subcircuit
        return
    used = rf"^[ \t]*[a-z+][^\n]*[\s,()=]{re.escape(node)}(?![^\s,()=])"
    if not re.compile(used, re.IGNORECASE | re.MULTILINE).search(deck, body):
        raise _refused(
            deck, sweep.start(), f"no part touches the noise output {node!r}", "Name a node of the circuit."
        )


def _grid_fault(analysis: str, kind: str, numbers: list[str]) -> str | None:
    """What is wrong with a frequency grid, or None."""
    count, start, stop = (_read_number(number) for number in [*numbers, "", "", ""][:3])
    shown = " ".join((analysis, kind, *numbers))
    if count is None or start is None or stop is None:
        return f"the frequency grid of {shown!r} cannot be read"
    if count < 1 or count != math.floor(count):
        return f"{shown!r} asks for {count:g} points, where a whole number from 1 is needed"
    if kind == "lin":
        return f"{shown!r} has no frequency in it" if start > stop or start < 0 else None
    if not 0 < start < stop:
        return f"{shown!r} needs frequencies above zero that rise"
    if analysis == ".ac" and kind == "dec" and not _has_a_step(count, start, stop):
        # ngspice takes floor(log10(stop/start) count) steps of a ratio computed by dividing by that number.
        return f"{shown!r} is less than one step wide, with which ngspice never ends"
    return None


def _has_a_step(count: float, start: float, stop: float) -> bool:
    steps = math.log10(stop / start) * count
    # ngspice reads whole numbers exactly, others up to a unit off: then a hair's breadth decides.
    whole = all(value == math.floor(value) and value < 2**53 for value in (start, stop))
    return steps >= 1 if whole else steps >= 1 + 1e-12


def _read_number(text: str) -> float | None:
    match = _NUMBER.fullmatch(text)
    if match is None:
        return None
    value = float(match[1]) * _SUFFIX.get((match[2] or "").lower(), 1.0)
    return value if math.isfinite(value) else None
