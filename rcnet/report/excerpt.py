"""A line of a file as it is shown: cut to fit, with carets under the characters that are meant."""

from __future__ import annotations

from collections.abc import Callable

from .plain import printable

_DOTS = "..."


def excerpt(text: str, column: int | None, width: int = 1, *, room: int = 80) -> list[str]:
    """The line without its indent and, where the place on it is known, the carets beneath.

    column, width: the characters meant, from 1, counted in code points of `text`; None where that is not
    known. The place just behind the last character may be meant too. room: columns of the terminal for both.
    [] for a blank line.
    """
    body = text.strip()
    if not body:
        return []
    if column is None:
        return [_cut(body, 0, 0, room)[0].rstrip()]
    indent = len(text) - len(text.lstrip())
    start = min(max(column - 1 - indent, 0), len(body))
    end = max(start + 1, min(column - 1 - indent + max(width, 1), len(body)))
    shown, before, meant = _cut(body.ljust(end), start, end, room)
    return [shown.rstrip(), " " * before + "^" * max(1, meant)]


def _cut(line: str, start: int, end: int, room: int) -> tuple[str, int, int]:
    """The part of a line around line[start:end] that fits, with dots where it is cut.

    Also the columns before what is meant, and the columns that it takes.
    """
    from rich.cells import cell_len

    # A line may be of any length; what is further off than this is not shown anyhow.
    low, high = max(0, start - 4 * room), start + 4 * room
    piece = printable(line[low:high])
    last = len(piece)
    start, end = start - low, min(end - low, last)

    def fits(first: int, stop: int) -> bool:
        dots = len(_DOTS) * ((first > 0 or low > 0) + (stop < last or high < len(line)))
        return cell_len(piece[first:stop]) + dots <= room

    first, stop = _window(fits, start, end, last)
    left = _DOTS if first > 0 or low > 0 else ""
    right = _DOTS if stop < last or high < len(line) else ""
    before = cell_len(left + piece[first:start])
    meant = cell_len(piece[start : min(end, stop)])
    return left + piece[first:stop] + right, before, meant


def _window(fits: Callable[[int, int], bool], start: int, end: int, last: int) -> tuple[int, int]:
    """Which part is shown: all, else from the beginning, else to the end, else what is around the place."""
    if fits(0, last):
        return 0, last
    if fits(0, end):
        return 0, _furthest(lambda stop: fits(0, stop), end, last)
    if fits(start, last):
        return -_furthest(lambda first: fits(-first, last), -start, 0), last
    # The middle: as much of what is meant as fits, then a character more on either side in turn.
    first, stop = start, _furthest(lambda stop: fits(start, stop), start + 1, end)
    grown = True
    while grown:
        grown = False
        if first > 0 and fits(first - 1, stop):
            first, grown = first - 1, True
        if stop < last and fits(first, stop + 1):
            stop, grown = stop + 1, True
    return first, stop


def _furthest(good: Callable[[int], bool], start: int, stop: int) -> int:
    """The last number of a run from `start` to at most `stop` that are all good."""
    while start < stop and good(start + 1):
        start += 1
    return start
