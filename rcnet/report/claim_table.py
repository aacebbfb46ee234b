"""The claims of a circuit as one table: what is said, exact, by hand, what was wanted, and the margin."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from ..values import format_quantity
from .plain import printable

if TYPE_CHECKING:
    from rich.console import Console

    from ..claims import ClaimResult

# A hand value closer than this to the exact one is shown as the same: no part is made that well.
SAME = {"dB": 1e-3, "deg": 1e-2, "share": 1e-4}
_HEADS = ("verdict", "exact", "by hand", "wanted", "margin")
_STYLES = {"holds": "green", "fails": "bold red", "undecided": "yellow"}

Say = Callable[..., None]


def show_claims(claims: Sequence[ClaimResult], out: Console, say: Say) -> None:
    """A line with what each claim says, a row of numbers under one common head, and what else is to be told.

    say: prints one wrapped paragraph
    """
    if not claims:
        return
    rows = [_row(result) for result in claims]
    kept = [k for k in range(len(_HEADS)) if k == 0 or any(row[k] for row in rows)]
    widths = [max(len(_HEADS[k]), *(len(row[k]) for row in rows)) for k in kept]
    _print_row(out, [_HEADS[k] for k in kept], widths, "dim")
    for result, row in zip(claims, rows, strict=True):
        say(out, result.claim.says, indent=2, hang=2)
        _print_row(out, [row[k] for k in kept], widths, _STYLES[result.verdict])
        for text in _more(result):
            say(out, text, indent=4, hang=2)


def _print_row(out: Console, cells: Sequence[str], widths: Sequence[int], style: str) -> None:
    """One row, its first cell in a colour of its own; a last cell that is too long goes to the next line."""
    from rich.text import Text

    padded = [f"{cell:<{width}}" for cell, width in zip(cells, widths, strict=True)]
    line = Text("    ") + Text(padded[0], style=style) + Text("  ")
    rest = "  ".join(padded[1:]).rstrip()
    line.append(rest, style="dim" if style == "dim" else "")
    line.rstrip()
    out.print(line, soft_wrap=True)


def _row(result: ClaimResult) -> list[str]:
    unit = result.claim.measure.unit
    exact = "" if result.exact is None else format_quantity(result.exact, unit)
    hand = "" if result.hand is None else f"{format_quantity(result.hand, unit)}{error_of_hand(result)}"
    margin = "" if result.margin is None else format_quantity(result.margin, unit, 3)
    return [printable(cell) for cell in (result.verdict, exact, hand, result.claim.bound.text, margin)]


def _more(result: ClaimResult) -> list[str]:
    """The range over the tolerances, and why the verdict is as it is, a sentence each."""
    told = []
    if result.low is not None and result.high is not None:
        most = f"; {result.limiting} moves it most" if result.limiting and result.verdict == "holds" else ""
        told.append(f"over tolerance {range_over_tolerance(result)}, {result.method}{most}")
    if result.why:
        told.append(result.why)
    return told


def range_over_tolerance(result: ClaimResult) -> str:
    """`198 Hz to 214 Hz`."""
    unit = result.claim.measure.unit
    assert result.low is not None and result.high is not None
    return f"{format_quantity(result.low, unit)} to {format_quantity(result.high, unit)}"


def claim_numbers(result: ClaimResult) -> list[str]:
    """What is exact, what was wanted and what the hand says, a phrase each."""
    unit = result.claim.measure.unit
    wanted = result.claim.bound.text + (" over tolerance" if result.claim.over_tolerance else "")
    row = [] if result.exact is None else [f"exact {format_quantity(result.exact, unit)}"]
    row.append(f"wanted {wanted}")
    if result.hand is not None:
        row.append(f"by hand {format_quantity(result.hand, unit)}{error_of_hand(result)}")
    return row


def error_of_hand(result: ClaimResult) -> str:
    """How far the hand value is from the exact one, in brackets behind a blank; empty where nobody knows."""
    assert result.hand is not None
    if result.exact is None:
        return ""
    off = result.hand - result.exact
    unit = result.claim.measure.unit
    if unit in ("dB", "deg"):
        return " (the same)" if abs(off) < SAME[unit] else f" ({off:+.2g} {unit})"
    if abs(off) <= SAME["share"] * abs(result.exact):
        return " (the same)"
    if not result.exact:
        return ""
    error = 100 * off / result.exact
    return f" ({error:+.0f} %)" if 100 <= abs(error) < 1e5 else f" ({error:+.2g} %)"
