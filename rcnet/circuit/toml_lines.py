"""Finding the line of a key in a TOML text, which the standard library's reader does not tell."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator

Path = tuple[str | int, ...]

_DEEPEST = 8  # keys within keys; no circuit file has more than four

_NAME = r"""(?:"(?:[^"\\]|\\.)*"|'[^']*'|[A-Za-z0-9_-]+)"""
_DOTTED = rf"{_NAME}(?:[ \t]*\.[ \t]*{_NAME})*"
_HEADER = re.compile(rf"[ \t]*(\[\[?)[ \t]*({_DOTTED})[ \t]*\]")
_KEY = re.compile(rf"[ \t]*({_DOTTED})[ \t]*=")
# What a value is made of, as far as finding its end goes: strings, comments, brackets.
_PIECE = re.compile(
    r'"""(?:[^\\]|\\.)*?"{3,5}|\'\'\'.*?\'{3,5}|"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|#[^\n]*|[\[\]{}]|\n',
    re.DOTALL,
)


def line_table(text: str) -> dict[Path, int]:
    """The line, from 1, of every table header and key: `("sources", "Vin", "ac")`, `("claims", 0, "equals")`.

    Meant for text that the TOML reader has accepted. Keys within inline tables are not listed: they stand in
    the value of their table's key.
    """
    lines: dict[Path, int] = {(): 1}
    counts: dict[Path, int] = {}
    table: Path = ()
    for number, statement in _statements(text):
        if header := _HEADER.match(statement):
            table = _resolved(_pieces(header[2]), counts)
            if header[1] == "[[":
                counts[table] = counts.get(table, -1) + 1
                lines.setdefault(table, number)
                table = (*table, counts[table])
            lines.setdefault(table, number)
        elif key := _KEY.match(statement):
            path = (*table, *_pieces(key[1]))[:_DEEPEST]
            for depth in range(len(table) + 1, len(path) + 1):
                lines.setdefault(path[:depth], number)
    return lines


def _statements(text: str) -> Iterator[tuple[int, str]]:
    """Each header or key with its value, and the line it begins on; values may run over several lines."""
    text = text.replace("\r\n", "\n")
    start, line, depth, seen = 0, 1, 0, 0
    # A header's own brackets close on its line, so the count is back at zero where the line ends.
    for piece in _PIECE.finditer(f"{text}\n"):
        found = piece[0]
        depth += (found in "[{") - (found in "]}")
        seen += found.count("\n")
        if found == "\n" and depth <= 0:
            yield line, text[start : piece.start()]
            start, line, depth = piece.end(), 1 + seen, 0


def _resolved(path: Path, counts: dict[Path, int]) -> Path:
    """The path with the number of the latest element put behind each array of tables on the way."""
    whole: Path = ()
    for piece in path[:-1]:
        whole = (*whole, piece)
        if whole in counts:
            whole = (*whole, counts[whole])
    return (*whole, path[-1])


def _pieces(dotted: str) -> Path:
    if '"' not in dotted and "'" not in dotted:
        return tuple(piece.strip() for piece in dotted.split("."))
    table = tomllib.loads(f"{dotted} = 0")
    pieces: list[str] = []
    while isinstance(table, dict):
        (piece, table), *_ = table.items()
        pieces.append(piece)
    return tuple(pieces)
