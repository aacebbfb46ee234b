"""The lines of a netlist's text: physical ones, logical ones, and the words on them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from typing import NamedTuple

_PARTING = re.compile(r"[ ,()=]+")
# ngspice 39 takes `$` for a comment only behind what parts words; `1k$5` and `n$1` are words.
_COMMENT = re.compile(r"//.*|;.*|(?:^|(?<=[ \t,]))\$.*", re.DOTALL)
_COMMAND = re.compile(r"\*(#|ng_script)", re.IGNORECASE)


class Line(NamedTuple):
    """A logical line: continuations joined, comments gone, tabs made blanks, never empty.

    number: of its first physical line, from 1; file: which of the netlist's files it stands in
    """

    number: int
    text: str
    file: int = 0


def physical_lines(text: str) -> list[str]:
    """The lines of a text. LF or CRLF ends a line and nothing else does, as ngspice has it."""
    lines = text.split("\n")
    if not lines[-1]:
        lines.pop()
    if "\r" in text:
        return [line.removesuffix("\r") for line in lines]
    return lines


def logical_lines(lines: Sequence[str], *, title: bool = True, file: int = 0) -> Iterator[Line]:
    """Everything below the title as logical lines.

    `*` first and `//`, `;` or ` $` anywhere begin a comment; `+` continues the line before, across comments
    and blank lines, and never joins two words into one. A comment that is a command to ngspice (`*#`) comes
    as a line of its own, and so does a `+` that has nothing to continue.

    title: whether the first line is one; an included file has none
    """
    number, pieces, held = 0, list[str](), list[Line]()
    for count in range(1 if title else 0, len(lines)):
        line = uncommented(lines[count])
        if not line:
            continue
        if line[0] == "*":
            held.append(Line(count + 1, line, file))  # as a comment it does not end the line before
            continue
        if line[0] == "+" and pieces:
            if piece := line[1:].strip(" "):
                pieces.append(piece)
            continue
        if pieces:
            yield Line(number, pieces[0] if len(pieces) == 1 else " ".join(pieces), file)
        yield from held
        number, pieces, held = count + 1, [line], []
    if pieces:
        yield Line(number, " ".join(pieces), file)
    yield from held


def uncommented(raw: str) -> str:
    """A physical line without its comment, tabs made blanks; a command hidden in a comment stays."""
    line = raw.strip(" \t")
    if line[:1] == "*":
        return line if _COMMAND.match(line) else ""
    if "$" in line or ";" in line or "/" in line:
        line = _COMMENT.sub("", line, count=1)
    return line.replace("\t", " ").rstrip(" ")


def words_of(text: str) -> list[str]:
    """The words of a logical line: blanks, commas, brackets and `=` part them."""
    return [word for word in _PARTING.split(text) if word]
