"""Reports for the terminal: what a person should understand at a glance, within 80 columns."""

from __future__ import annotations

import math
from collections import Counter
from typing import TYPE_CHECKING

from ..check import Check
from ..claims import ClaimResult
from ..compare import Comparison, CurveComparison, Difference
from ..confirm import Confirmation
from ..findings import Finding
from ..values import format_quantity

if TYPE_CHECKING:
    from rich.console import Console, RenderableType
    from rich.text import Text

# A word always says what a colour says.
STYLES = {
    "holds": "green",
    "agree": "green",
    "fails": "bold red",
    "differ": "bold red",
    "undecided": "yellow",
    "error": "bold red",
    "warning": "yellow",
    "note": "blue",
}
_UNITS = {"operating point": "V", "ac": "V"}
MOST_LISTED = 12  # curves or spans shown one by one; the JSON document holds them all


def console(*, error: bool = False) -> Console:
    """A console that writes plain text where it is piped, and never guesses at the meaning of what it prints."""
    from rich.console import Console

    return Console(stderr=error, highlight=False, markup=False, emoji=False)


def _word(word: str) -> Text:
    from rich.text import Text

    return Text(word, style=STYLES.get(word, ""))


def _line(*pieces: str | Text, indent: int = 0) -> RenderableType:
    from rich.padding import Padding
    from rich.text import Text

    text = Text.assemble(*pieces)
    return Padding(text, (0, 0, 0, indent)) if indent else text


# ---------------------------------------------------------------------- check


def show_check(check: Check, out: Console, *, quiet: bool = False) -> None:
    """The verdict, the findings and the claims of one circuit."""
    from rich.text import Text

    out.print(_line(Text(check.circuit.name, style="bold"), "  ", _word(check.verdict), _summary(check)))
    if quiet:
        return
    show_findings(check.findings, out)
    show_claims(check.claims, out)


def _summary(check: Check) -> str:
    counts = Counter(result.verdict for result in check.claims)
    words = [f"{counts[word]} {_plural(word, counts[word])}" for word in ("holds", "fails", "undecided") if counts[word]]
    claims = f"claims: {', '.join(words)}" if words else "no claims"
    found = Counter(finding.severity for finding in check.findings)
    named = [f"{found[s]} {s}{'s' * (found[s] != 1)}" for s in ("error", "warning", "note") if found[s]]
    return f"   {claims}" + (f"; {', '.join(named)}" if named else "")


def _plural(word: str, count: int) -> str:
    return {"holds": "hold", "fails": "fail"}.get(word, word) if count != 1 else word


def show_findings(findings: tuple[Finding, ...], out: Console) -> None:
    """Each finding with its place, the line itself and the remedy."""
    from rich.text import Text

    for finding in findings:
        place = finding.file if finding.line is None else f"{finding.file}:{finding.line}"
        out.print(_line(_word(finding.severity), f" {finding.code}  ", Text(place, style="dim"), indent=2))
        out.print(_line(finding.message, indent=4))
        if finding.text.strip():
            shown = finding.text.strip()
            out.print(_line(Text(f"| {shown[:70]}{'...' if len(shown) > 70 else ''}", style="dim"), indent=4))
        out.print(_line(f"-> {finding.remedy}", indent=4))


def show_claims(claims: tuple[ClaimResult, ...], out: Console) -> None:
    """The claims as a table: what was said, what is exact, what the hand formula gives, what was wanted."""
    if not claims:
        return
    from rich.table import Table

    table = Table(box=None, padding=(0, 2, 0, 0), show_edge=False, header_style="dim")
    table.add_column("  claim", min_width=16, max_width=30)
    table.add_column("exact", justify="right", no_wrap=True)
    if any(result.hand is not None for result in claims):
        table.add_column("by hand", justify="right", no_wrap=True)
    table.add_column("wanted")
    table.add_column("verdict", no_wrap=True)
    for result in claims:
        unit = result.claim.measure.unit
        cells: list[str | Text] = [f"  {result.claim.says}", _quantity(result.exact, unit)]
        if len(table.columns) == 5:
            cells.append(_hand(result))
        table.add_row(*cells, result.claim.bound.text, _word(result.verdict))
    out.print(table)
    for result in claims:
        if result.why:
            out.print(_line(f"{result.claim.says}: {result.why}", indent=4))


def _quantity(value: float | None, unit: str) -> str:
    return "-" if value is None else format_quantity(value, unit)


def _hand(result: ClaimResult) -> str:
    if result.hand is None:
        return "-"
    shown = format_quantity(result.hand, result.claim.measure.unit)
    if result.exact is None or result.exact == 0:
        return shown
    if result.claim.measure.unit in ("dB", "deg"):
        return f"{shown} ({result.hand - result.exact:+.3g})"
    return f"{shown} ({100 * (result.hand / result.exact - 1):+.3g} %)"


# ---------------------------------------------------------------------- compare


def show_comparison(comparison: Comparison, out: Console, *, quiet: bool = False) -> None:
    """The verdict against a second opinion, the worst place, and every span where the two differ."""
    counts = Counter(curve.analysis for curve in comparison.curves)
    what = ", ".join(f"{count} {name} curve{'s' * (count != 1)}" for name, count in counts.items())
    out.print(_line("  ", _word(comparison.verdict), f" with {comparison.second_opinion} on {what}"))
    if quiet:
        return
    differing = [curve for curve in comparison.curves if curve.verdict == "differ"]
    for curve in differing[:MOST_LISTED]:
        _show_curve(curve, out)
    if len(differing) > MOST_LISTED:
        out.print(_line(f"and {len(differing) - MOST_LISTED} more curves that differ", indent=4))
    if not differing:
        worst = max(comparison.curves, key=lambda curve: curve.worst.relative)
        out.print(_line(f"largest difference: {worst.name}{_where(worst)}, {_amount(worst.worst)}", indent=4))
    for why, names in _grouped(comparison).items():
        out.print(_line(f"not compared: {names}: {why}", indent=4))
    for remark in comparison.remarks:
        out.print(_line(f"remark: {remark}", indent=4))


def _grouped(comparison: Comparison) -> dict[str, str]:
    """Why some curves were not compared -> which ones, in a few words."""
    groups: dict[str, list[str]] = {}
    for curve in comparison.uncompared:
        groups.setdefault(curve.why, []).append(curve.name)
    return {
        why: ", ".join(dict.fromkeys(names)) if len(names) <= 4 else f"{', '.join(names[:3])} and {len(names) - 3} more"
        for why, names in groups.items()
    }


def _show_curve(curve: CurveComparison, out: Console) -> None:
    look = f"   (FSV: {curve.fsv.grade.lower()})" if curve.fsv is not None else ""
    out.print(_line(f"{curve.name} {curve.analysis} ", _word("differ"), f"s, worst{_where(curve)}{look}", indent=4))
    worst = curve.worst
    out.print(_line(f"exact {_value(worst.exact)}, other {_value(worst.other)}: {_amount(worst)}", indent=6))
    if curve.analysis == "operating point":
        return
    for span in curve.spans[:MOST_LISTED]:
        ends = f"{format_quantity(span.start, 'Hz')} to {format_quantity(span.stop, 'Hz')}"
        out.print(_line(f"span {ends}: up to {_amount(span.worst)} at {format_quantity(span.worst.at, 'Hz')}", indent=6))
    if len(curve.spans) > MOST_LISTED:
        out.print(_line(f"and {len(curve.spans) - MOST_LISTED} more spans", indent=6))


def _where(curve: CurveComparison) -> str:
    return "" if curve.analysis == "operating point" else f" at {format_quantity(curve.worst.at, 'Hz')}"


def _value(value: complex | float) -> str:
    if isinstance(value, complex):
        if value == 0:
            return "0"
        angle = math.degrees(math.atan2(value.imag, value.real))
        return f"{20 * math.log10(abs(value)):.4f} dB {angle:.3f} deg"
    return f"{value:.7g}"


def _amount(worst: Difference) -> str:
    if worst.relative < 1e-9:
        return f"{worst.relative:.1e} of the value (rounding)"
    parts = []
    if worst.db is not None:
        parts.append(f"{worst.db:+.4g} dB")
    if worst.deg is not None:
        parts.append(f"{worst.deg:+.4g} deg")
    return ", ".join(parts) if parts else f"{100 * worst.relative:.4g} %"


# ---------------------------------------------------------------------- confirm


def show_confirmation(done: Confirmation, out: Console, *, quiet: bool = False) -> None:
    """The whole of the main job for one circuit."""
    show_check(done.check, out, quiet=quiet)
    if done.written is None:
        out.print(_line("  no netlist was written: mend the errors, or give --anyway"))
    if done.comparison is not None:
        show_comparison(done.comparison, out, quiet=quiet)
    if done.folder is not None and not quiet:
        out.print(_line(f"  kept in {done.folder}/: {', '.join(done.files)}"))
