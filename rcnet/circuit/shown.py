"""What messages show of a file's contents: values cut short, and the known word nearest to an unknown one."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from reprlib import Repr

_REPR = Repr()
_REPR.maxlevel, _REPR.maxstring, _REPR.maxlong, _REPR.maxother = 3, 80, 60, 80


def shown(value: object) -> str:
    """The `repr` of a value, however large or deep the value is, on one short line."""
    try:
        return _REPR.repr(value)
    except ValueError:  # Python refuses to write out integers of thousands of digits
        return "an integer of thousands of digits"


def nearest(word: str, known: Iterable[str]) -> str:
    """The remedy for an unknown word: the one probably meant, else all there are."""
    words = sorted(known)
    near = difflib.get_close_matches(word[:40], words, n=1)
    return f"Did you mean {near[0]!r}?" if near else f"Known here: {', '.join(words)}."
