"""Text from outside made fit to be shown."""

from __future__ import annotations


def printable(text: str) -> str:
    """The text with every control character, line end and direction mark made visible or a blank.

    Names, titles and messages may come from strangers' files; shown raw they could move the cursor, change
    colours, or look like lines of our own.
    """
    if text.isprintable():
        return text
    return "".join(
        c if c.isprintable() else " " if c.isspace() else "\N{REPLACEMENT CHARACTER}" for c in text
    )
