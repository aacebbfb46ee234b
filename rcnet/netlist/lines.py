"""The lines of a netlist's text: physical ones, logical ones, and the words on them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

_PARTING = re.compile(r"[ ,()=]+")
# ngspice 39 takes `$` for a comment only behind what parts words; `1k$5` and `n$1` are words.
_COMMENT = re.compile(r"//.*|;.*|(?:^|(?<=[ \t,]))\$.*", re.DOTALL)
_COMMAND = re.compile(r"\*(#|ng_script)", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Line:
    """A logical line: continuations joined, comments gone, tabs made blanks, never empty.

    number: of its first physical line, from 1
    """

    number: int
    text: str


def physical_lines(text: str) -> list[str]:
    """The lines of a text. LF or CRLF ends a line and nothing else does, as ngspice has it."""
    lines = text.split("\n")
    if not lines[-1]:
        lines.pop()
    return [line.removesuffix("\r") for line in lines]


def logical_lines(lines: Sequence[str]) -> Iterator[Line]:
    """Everything below the title as logical lines.

    `*` first and `//`, `;` or ` $` anywhere begin a comment; `+` continues the line before, across comments
    and blank lines, and never joins two words into one. A comment that is a command to ngspice (`*#`) comes
    as a line of its own, and so does a `+` that has nothing to continue.
    """
    number, pieces = 0, list[str]()
    for count, raw in enumerate(lines[1:], start=2):
        line = _uncommented(raw)
        if not line:
            continue
        if line[0] == "+" and pieces:
            if piece := line[1:].strip(" "):
                pieces.append(piece)
            continue
        if pieces:
            yield Line(number, " ".join(pieces))
        number, pieces = count, [line]
    if pieces:
        yield Line(number, " ".join(pieces))


def _uncommented(raw: str) -> str:
    line = raw.strip(" \t")
    if line[:1] == "*":
        return line if _COMMAND.match(line) else ""
    if "$" in line or ";" in line or "/" in line:
        line = _COMMENT.sub("", line, count=1)
    return line.replace("\t", " ").rstrip(" ")


def words_of(text: str) -> list[str]:
    """The words of a logical line: blanks, commas, brackets and `=` part them."""
    return [word for word in _PARTING.split(text) if word]
