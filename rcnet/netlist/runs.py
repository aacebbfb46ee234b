"""Runs of plain lines, `R1 a b 1k`, read many at a time: large netlists are made of them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from .lines import Line, uncommented

# Only what every reader takes alike: a resistor or capacitor, two nodes, a number whose suffix, if it has
# one, nobody mistakes. Everything else goes the slow way.
_PLAIN = re.compile(
    r"[ \t]*([RrCc][A-Za-z0-9_.]*)[ \t]+([A-Za-z0-9_.:\-]+)[ \t]+([A-Za-z0-9_.:\-]+)[ \t]+"
    r"((?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?(?:[kKuUnNpP]|[mM][eE][gG])?)[ \t]*\r?"
)


@dataclass(slots=True)
class Run:
    """Plain lines that follow one another.

    rows: (name, node, node, value) as written; numbers: their lines, from 1; file: which file
    """

    file: int
    rows: list[tuple[str, str, str, str]] = field(default_factory=list)
    numbers: list[int] = field(default_factory=list)

    def lines(self) -> Iterator[Line]:
        """The same as logical lines."""
        for number, row in zip(self.numbers, self.rows, strict=True):
            yield Line(number, " ".join(row), self.file)


def lines_and_runs(lines: Sequence[str], *, title: bool, file: int) -> Iterator[Line | Run]:
    """What `logical_lines` gives, with neighbouring plain lines gathered into runs."""
    plain = _PLAIN.fullmatch
    run = Run(file)
    number, pieces, held = 0, list[str](), list[Line]()
    last_is_plain = False
    for count in range(1 if title else 0, len(lines)):
        raw = lines[count]
        if (match := plain(raw)) is not None:
            if pieces or held:
                if pieces:
                    yield Line(number, " ".join(pieces), file)
                yield from held
                pieces, held = [], []
            run.rows.append(match.groups())  # type: ignore[arg-type]
            run.numbers.append(count + 1)
            last_is_plain = True
            continue
        line = uncommented(raw)
        if not line:
            continue
        if line[0] == "*":
            held.append(Line(count + 1, line, file))  # as a comment it does not end the line before
            continue
        if line[0] == "+" and last_is_plain:
            # The line before goes on: it was not as plain as it looked.
            pieces, number = [" ".join(run.rows.pop())], run.numbers.pop()
        if run.rows:
            yield run
            run = Run(file)
        last_is_plain = False
        if line[0] == "+" and pieces:
            if piece := line[1:].strip(" "):
                pieces.append(piece)
            continue
        if pieces:
            yield Line(number, " ".join(pieces), file)
        yield from held
        number, pieces, held = count + 1, [line], []
    if pieces:
        yield Line(number, " ".join(pieces), file)
    yield from held
    if run.rows:
        yield run
