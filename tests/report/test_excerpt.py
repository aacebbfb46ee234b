"""A line as it is shown: cut to fit, the carets under what is meant."""

from __future__ import annotations

import unicodedata

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.report.excerpt import excerpt

ROOM = 74

# text, column, width -> the two lines; the carets were put by hand under the word meant
SHOWN: dict[str, tuple[str, int, int, list[str]]] = {
    "a word": ("R1 in out 1M", 11, 2, ["R1 in out 1M", "          ^^"]),
    "an indent": ("   R1 in out 1M", 14, 2, ["R1 in out 1M", "          ^^"]),
    "tabs": ("\tR1\tin\tout\t1M", 12, 2, ["R1 in out 1M", "          ^^"]),
    "the first": ("R1 in out 1M", 1, 2, ["R1 in out 1M", "^^"]),
    "behind the last": ("R1 in out", 10, 1, ["R1 in out", "         ^"]),
    "far behind the last": ("R1 in out  \n", 99, 5, ["R1 in out", "         ^"]),
    "wider than the line": ("R1 in out 1M", 11, 99, ["R1 in out 1M", "          ^^"]),
    "no width": ("R1 in out 1M", 11, 0, ["R1 in out 1M", "          ^"]),
    "in the indent": ("   R1 in", 1, 1, ["R1 in", "^"]),
    # Each of these two letters takes two columns (Unicode Standard Annex 11: East Asian Wide).
    "wide before": ("R1 水位 0 1M", 9, 2, ["R1 水位 0 1M", "          ^^"]),
    "wide meant": ("R1 水位 0 1M", 4, 2, ["R1 水位 0 1M", "   ^^^^"]),
    # A combining accent takes none.
    "combining before": ("R1 e\u0301n 0 1M", 10, 2, ["R1 e\u0301n 0 1M", "        ^^"]),
    "control characters": ("R1 \x1b[31m 1M", 10, 2, ["R1 \N{REPLACEMENT CHARACTER}[31m 1M", "         ^^"]),
}


@pytest.mark.parametrize("case", SHOWN)
def test_carets_stand_under_what_is_meant(case: str) -> None:
    """The caret line points at the same characters as column and width do."""
    text, column, width, lines = SHOWN[case]
    assert excerpt(text, column, width, room=ROOM) == lines


def test_without_a_column_there_are_no_carets() -> None:
    """The line alone, its beginning where it is too long; nothing for a blank one."""
    assert excerpt("  R1 in out 1M  ", None) == ["R1 in out 1M"]
    assert excerpt("x" * 100, None, room=ROOM) == ["x" * 71 + "..."]
    assert excerpt(" \t ", 1) == []
    assert excerpt("", None) == []


CUT: dict[str, tuple[str, int, int, str, str]] = {
    "at the beginning": ("1M " + "y" * 200, 1, 2, "", "..."),
    "at the end": ("x" * 200 + " 1M", 202, 2, "...", ""),
    "in the middle": ("x" * 200 + " 1M " + "y" * 200, 202, 2, "...", "..."),
    "among wide ones": ("水" * 200 + " 1M " + "位" * 200, 202, 2, "...", "..."),
    "in an enormous line": ("x" * 100_000 + " 1M " + "y" * 100_000, 100_002, 2, "...", "..."),
}


@pytest.mark.parametrize("case", CUT)
def test_a_long_line_is_cut_around_what_is_meant(case: str) -> None:
    """What is meant stays in sight with the carets under it; dots stand where something is left out."""
    text, column, width, left, right = CUT[case]
    line, carets = excerpt(text, column, width, room=ROOM)
    assert columns(line) <= ROOM
    assert (line.startswith("..."), line.endswith("...")) == (bool(left), bool(right))
    assert carets.count("^") == 2
    before = line[: line.index("1M")]
    assert carets.index("^") == columns(before)
    if left and right:  # something is seen on both sides
        assert 20 < columns(before) < 50


def test_what_is_meant_may_be_longer_than_the_room() -> None:
    """Then its beginning is shown, and carets stand under all of it that is seen."""
    line, carets = excerpt("R1 in out " + "5" * 300, 11, 300, room=ROOM)
    assert len(line) == ROOM
    assert carets.strip() == "^" * line.count("5")


def columns(text: str) -> int:
    """The columns a text takes, by the tables of Python's own library."""
    wide = {"W", "F"}
    return sum(
        0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in wide else 1 for c in text
    )


@settings(deadline=None, max_examples=300)
@given(
    text=st.text(st.sampled_from("R1 .\t水e\u0301-5"), max_size=300),
    column=st.integers(-5, 310),
    width=st.integers(-1, 310),
    room=st.integers(34, 80),
)
def test_nothing_is_ever_wider_than_the_room(text: str, column: int, width: int, room: int) -> None:
    """Whatever the line and the place, both lines fit, and there is a caret."""
    lines = excerpt(text, column, width, room=room)
    if not text.strip():
        assert lines == []
        return
    assert all(columns(line) <= room for line in lines)
    assert len(lines) == 2
    assert "^" in lines[1]
    assert set(lines[1]) <= {" ", "^"}
    assert columns(lines[1]) <= columns(lines[0]) + 1
