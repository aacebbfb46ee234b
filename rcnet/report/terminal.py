"""Reports for the terminal: what a person should understand at a glance, within 80 columns."""

from __future__ import annotations

import math
import os
import re
from collections import Counter
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from ..values import format_quantity
from .claim_table import show_claims
from .envelope import envelope_columns
from .excerpt import excerpt
from .plain import printable

if TYPE_CHECKING:
    from rich.console import Console
    from rich.text import Text

    from ..check import Check
    from ..circuit import Circuit
    from ..compare import Comparison, CurveComparison, Difference, Span
    from ..confirmation import Confirmation
    from ..curves import Curve
    from ..findings import Finding
    from .envelope import Envelopes

WIDTH = 80
MOST_CAUSES = 4
MOST_LISTED = 12  # curves or spans shown one by one; the JSON document holds them all
# The remark about coarse curves names them and says why; the JSON document holds it, here a count is enough.
_COARSE = "smaller differences do not count there."
_STEPS = "the simulator's own steps hide more than 0.1 %"
ROUNDING = 1e-9  # a difference below this share of the value is told as such; its decibels say nothing

# A word always says what a colour says.
STYLES = {
    "holds": "green",
    "passes": "green",
    "agrees": "green",
    "fails": "bold red",
    "differs": "bold red",
    "undecided": "yellow",
    "error": "bold red",
    "warning": "yellow",
    "note": "blue",
}
_PLURALS = {"holds": "hold", "passes": "pass", "fails": "fail"}


def console(*, error: bool = False) -> Console:
    """A console of at most 80 columns that writes plain text where it is piped or NO_COLOR is set."""
    from rich.console import Console

    class _Console(Console):
        def on_broken_pipe(self) -> None:
            # Left to itself it would end the program with the exit code that says a circuit fails.
            raise BrokenPipeError

    plain = bool(os.environ.get("NO_COLOR"))
    out = _Console(
        stderr=error, highlight=False, markup=False, emoji=False, color_system=None if plain else "auto"
    )
    out.width = max(40, min(out.width, WIDTH))
    return out


def _styled(text: str, style: str = "") -> Text:
    from rich.text import Text

    return Text(printable(text), style=style)


def _word(word: str) -> Text:
    return _styled(word, STYLES.get(word, ""))


def _say(out: Console, *pieces: str | Text, indent: int = 0, hang: int = 0) -> None:
    """One paragraph: wrapped between words, later lines `hang` further in, no blanks at the ends of lines."""
    from rich.text import Text

    text = Text.assemble(*(printable(piece) if isinstance(piece, str) else piece for piece in pieces))
    text.rstrip()
    for number, (start, end) in enumerate(_lines(text.plain, out.width - indent - hang)):
        margin = indent + (hang if number else 0)
        out.print(Text(" " * margin) + text[start:end], soft_wrap=True)


def _lines(text: str, width: int) -> list[tuple[int, int]]:
    """Where each line of a wrapped text begins and ends. Long words, paths above all, stay whole.

    A path cut in two opens nothing.
    """
    from rich.cells import cell_len

    lines: list[tuple[int, int]] = []
    for word in re.finditer(r"\S+", text):
        start = lines[-1][0] if lines else 0
        if lines and cell_len(text[start : word.end()]) <= width:
            lines[-1] = (start, word.end())
        else:
            lines.append((word.start() if lines else 0, word.end()))
    return lines


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}{'s' * (count != 1)}"


def _verdicts(counts: Counter[str], order: Sequence[str]) -> str:
    """`2 hold, 1 fails`."""
    named = [(counts[word], word) for word in order if counts[word]]
    return ", ".join(f"{count} {word if count == 1 else _PLURALS.get(word, word)}" for count, word in named)


# ---------------------------------------------------------------------- check


def show_check(check: Check, out: Console, *, quiet: bool = False) -> None:
    """The verdict, the findings and the claims of one circuit; one line where `quiet`."""
    _headline(check.circuit.name, [_word(check.verdict)], _summary(check), out, quiet=quiet)
    if not quiet:
        show_left_out(check.circuit, out)
        show_findings(check.findings, out)
        show_claims(check.claims, out, _say)


def show_left_out(circuit: Circuit, out: Console) -> None:
    """The parts of a netlist that were left out as not linear, and the nodes where they were connected."""
    for left in circuit.left_out[:MOST_LISTED]:
        nodes = ", ".join(left.nodes) or "none that is left"
        where = f"{left.place.file}:{left.place.line}"
        _say(
            out,
            "left out  ",
            _styled(where, "dim"),
            f"  {left.name} is {left.kind}; nodes: {nodes}",
            indent=2,
            hang=10,
        )
    if len(circuit.left_out) > MOST_LISTED:
        _say(out, f"and {len(circuit.left_out) - MOST_LISTED} more left out", indent=2)
    if circuit.left_out:
        boundary = dict.fromkeys(node for left in circuit.left_out for node in left.nodes)
        _say(
            out,
            f"what follows is about the linear rest; boundary nodes: {', '.join(boundary) or 'none'}",
            indent=2,
        )


def _headline(name: str, verdict: Sequence[str | Text], details: str, out: Console, *, quiet: bool) -> None:
    """A circuit's first line; the only one where `quiet`, and then never wrapped."""
    from rich.text import Text

    pieces = (_styled(name, "bold"), ": ", *verdict, f" ({printable(details)})")
    if quiet:
        out.print(Text.assemble(*pieces), soft_wrap=True)
    else:
        _say(out, *pieces, hang=2)


def _summary(check: Check) -> str:
    verdicts = _verdicts(Counter(result.verdict for result in check.claims), ("holds", "fails", "undecided"))
    found = Counter(finding.severity for finding in check.findings)
    named = [_counted(found[word], word) for word in ("error", "warning", "note") if found[word]]
    details = [f"claims: {verdicts}" if verdicts else "no claims"]
    if named:
        details.append(", ".join(named))
    if check.silenced:
        details.append(f"{len(check.silenced)} silenced")
    if check.circuit.left_out:
        details.append(f"linear part, {_counted(len(check.circuit.left_out), 'part')} left out")
    return "; ".join(details)


def show_findings(findings: Iterable[Finding], out: Console) -> None:
    """Each finding with its place, the line itself, carets under what is meant there, and the remedy."""
    for finding in findings:
        place = finding.file if finding.line is None else f"{finding.file}:{finding.line}"
        _say(out, _word(finding.severity), f" {finding.code}  ", _styled(place, "dim"), indent=2, hang=2)
        if finding.column is not None or not finding.text.lstrip().startswith("["):
            # A table's own heading tells nothing.
            lines = excerpt(finding.text, finding.column, finding.width, room=out.width - 6)
            for mark, line in zip("| ", lines, strict=False):
                out.print(_styled(f"    {mark} {line}", "dim"), soft_wrap=True)
        _say(out, finding.message, indent=4)
        _say(out, f"-> {finding.remedy}", indent=4, hang=3)


# ---------------------------------------------------------------------- compare


def show_comparison(comparison: Comparison, out: Console, *, quiet: bool = False) -> None:
    """The comparison of one circuit with results somebody handed in; one line where `quiet`."""
    counts = _counted_curves(comparison)
    _headline(comparison.circuit.name, _verdict_of(comparison), counts, out, quiet=quiet)
    if not quiet:
        _show_details(comparison, out)


def _verdict_of(comparison: Comparison) -> tuple[Text, str]:
    if not comparison.curves:
        return _word("not compared"), f" with {comparison.second_opinion}"
    agrees = comparison.verdict == "agree"
    return _word(
        "agrees" if agrees else "differs"
    ), f" {'with' if agrees else 'from'} {comparison.second_opinion}"


def _counted_curves(comparison: Comparison) -> str:
    """`4 ac curves`, or `1 of 4 ac curves` where one differs."""
    total = Counter(curve.analysis for curve in comparison.curves)
    wrong = Counter(curve.analysis for curve in comparison.curves if curve.verdict == "differ")
    if not total:
        return "it has no curve of a kind that is compared now"
    return ", ".join(
        f"{f'{wrong[name]} of ' if wrong else ''}{_counted(count, f'{name} curve')}"
        for name, count in total.items()
    )


def _show_details(comparison: Comparison, out: Console) -> None:
    outputs = {f"v({','.join(comparison.circuit.output)})", *(f"v({n})" for n in comparison.circuit.output)}
    differing = [curve for curve in comparison.curves if curve.verdict == "differ"]
    differing.sort(key=lambda curve: (curve.name not in outputs, -curve.worst.relative))
    for analysis in dict.fromkeys(curve.analysis for curve in differing):
        first, *others = (curve for curve in differing if curve.analysis == analysis)
        _show_curve(first, out)
        _show_others(others, out)
    _show_causes(comparison, out)
    if comparison.curves and not differing:
        _show_largest(comparison, out)
    for why, names in _grouped(comparison).items():
        _say(out, f"not compared: {names}: {why}", indent=4, hang=2)
    for remark in comparison.remarks:
        if not remark.endswith(_COARSE):
            _say(out, f"note: {remark}", indent=4, hang=2)
    for timed, what in ((False, "rounding hides more than 0.01 dB"), (True, _STEPS)):
        some = [curve for curve in comparison.curves if (curve.analysis == "transient") == timed]
        coarse = sum(curve.coarse is not None for curve in some)
        if coarse:
            total = _counted(len(some), "transient curve" if timed else "curve")
            _say(out, f"note: in {coarse} of {total} {what} in places", indent=4, hang=2)


def _show_causes(comparison: Comparison, out: Console) -> None:
    """What would explain the differences, best first; several that explain them alike are a tie."""
    for cause in comparison.causes[:MOST_CAUSES]:
        share = f"{100 * max(cause.explains, 0.0):.3g} %"
        explains = "" if cause.kind == "unexplained" else f" (explains {share} of the squared difference)"
        _say(out, _styled(f"cause {cause.kind}", "bold"), f": {cause.says}{explains}", indent=4, hang=2)
    if len(comparison.causes) > MOST_CAUSES:
        _say(out, f"and {len(comparison.causes) - MOST_CAUSES} more that explain as much", indent=4)


def _show_largest(comparison: Comparison, out: Console) -> None:
    """The largest difference in each analysis, and what would have been allowed there."""
    groups: dict[str, list[CurveComparison]] = {}
    for curve in comparison.curves:
        groups.setdefault(curve.analysis, []).append(curve)
    for analysis, curves in groups.items():
        worst = max(curves, key=lambda curve: curve.worst.relative)
        if worst.worst.relative == 0 and len(groups) > 1:
            continue
        named = f" in {analysis}" if len(groups) > 1 else ""
        told = f"{_amount(worst)}{_allowance(worst.worst)}"
        _say(out, f"largest difference{named}: {worst.name}{_where(worst)}: {told}", indent=4, hang=2)


def _grouped(comparison: Comparison) -> dict[str, str]:
    """Why some curves were not compared -> which ones, in a few words."""
    groups: dict[str, list[str]] = {}
    for curve in comparison.uncompared:
        groups.setdefault(curve.why, []).append(curve.name)
    listed = {why: list(dict.fromkeys(names)) for why, names in groups.items()}
    return {
        why: ", ".join(names[:4]) + (f" and {len(names) - 4} more" if len(names) > 4 else "")
        for why, names in listed.items()
    }


def _show_curve(curve: CurveComparison, out: Console) -> None:
    worst = curve.worst
    look = f"; FSV {curve.fsv.grade.lower()}" if curve.fsv is not None else ""
    told = f"{_amount(curve)}{_where(curve)}{_allowance(worst)}{look}"
    _say(out, f"{curve.name} {curve.analysis}: {told}", indent=4, hang=2)
    _say(out, f"exact {_value(worst.exact, curve.unit)}", indent=6)
    _say(out, f"other {_value(worst.other, curve.unit)}", indent=6)
    if curve.single:
        return
    for span in curve.spans[:MOST_LISTED]:
        shape = f"; {span.shape}" if span.shape else ""
        at = _place(span.worst.at, curve)
        told = f"up to {_amount(curve, span.worst)} at {at}{shape}"
        _say(out, f"{_from_to(span.start, span.stop, curve)}: {told}", indent=6, hang=2)
    if len(curve.spans) > MOST_LISTED:
        _say(out, f"and {len(curve.spans) - MOST_LISTED} more spans", indent=6)


def _show_others(curves: Sequence[CurveComparison], out: Console) -> None:
    """Further curves of one analysis that differ, those with overlapping spans in one paragraph."""
    groups = _overlapping(curves)
    for start, stop, group in groups[:MOST_LISTED]:
        worst, span = max(group, key=lambda pair: pair[1].worst.relative)
        names = list(dict.fromkeys(curve.name for curve, _ in group))
        listed = ", ".join(names[:6]) + (f" and {len(names) - 6} more" if len(names) > 6 else "")
        where = "" if worst.single else f"{_from_to(start, stop, worst)} "
        at = "" if worst.single else f" at {_place(span.worst.at, worst)}"
        in_which = f" in {worst.name}" if len(names) > 1 else ""
        told = f"up to {_amount(worst, span.worst)}{at}{in_which}"
        _say(out, f"{where}also {listed} {worst.analysis}: {told}", indent=4, hang=2)
    if len(groups) > MOST_LISTED:
        _say(out, f"and {len(groups) - MOST_LISTED} more spans", indent=4)


def _overlapping(
    curves: Sequence[CurveComparison],
) -> list[tuple[float, float, list[tuple[CurveComparison, Span]]]]:
    """(from, to, curves with their spans there) where spans overlap, in the order of the axis."""
    every = sorted(
        ((span.start, span.stop, k, span) for k, curve in enumerate(curves) for span in curve.spans)
    )
    groups: list[tuple[float, float, list[tuple[CurveComparison, Span]]]] = []
    for start, stop, number, span in every:
        if groups and start <= groups[-1][1]:
            first, last, members = groups[-1]
            groups[-1] = (first, max(last, stop), [*members, (curves[number], span)])
        else:
            groups.append((start, stop, [(curves[number], span)]))
    return groups


def _unit_along(curve: CurveComparison) -> str:
    return "s" if curve.analysis == "transient" else "Hz"


def _place(at: float, curve: CurveComparison) -> str:
    return format_quantity(at, _unit_along(curve))


def _from_to(start: float, stop: float, curve: CurveComparison) -> str:
    low, high = _place(start, curve), _place(stop, curve)
    return f"from {low} to {high}" if low != high else f"near {low}"


def _where(curve: CurveComparison) -> str:
    return "" if curve.single else f" at {_place(curve.worst.at, curve)}"


def _value(value: complex | float, unit: str) -> str:
    if not isinstance(value, complex):
        return f"{value:.7g} {unit}"
    if value == 0:
        return "0"
    angle = math.degrees(math.atan2(value.imag, value.real))
    return f"{20 * math.log10(abs(value)):10.4f} dB {angle:10.3f} deg"


def _amount(curve: CurveComparison, worst: Difference | None = None) -> str:
    """A difference with its sign: in dB and degrees, in a transient as a share of the greatest value."""
    worst = worst or curve.worst
    of = "the greatest" if curve.analysis == "transient" else "the value"
    if worst.relative == 0:
        return "none"
    if worst.relative < ROUNDING:
        return f"{worst.relative:.1e} of {of} (rounding)"
    parts = []
    if worst.db is not None:
        parts.append(f"{worst.db:+.4g} dB")
    if worst.deg is not None:
        parts.append(f"{worst.deg:+.4g} deg")
    if parts:
        return ", ".join(parts)
    more = isinstance(worst.exact, complex) or abs(worst.other) >= abs(worst.exact)
    if curve.analysis == "transient":
        more = complex(worst.other).real >= complex(worst.exact).real
    return f"{100 * worst.relative * (1 if more else -1):+.4g} % of {of}"


def _allowance(worst: Difference) -> str:
    """What was allowed there, in the same measure as the difference; nothing where that is rounding."""
    distance = abs(worst.other - worst.exact)
    if worst.relative < ROUNDING or not distance or not math.isfinite(worst.allowed):
        return ""
    share = worst.allowed * (worst.relative / distance)
    if share < ROUNDING:
        return f"; allowed {share:.1e}"
    if worst.db is not None:
        return f"; allowed {20 * math.log10(1 + share):.2g} dB"
    return f"; allowed {100 * share:.2g} %"


# ---------------------------------------------------------------------- confirm, simulate


def show_confirmation(done: Confirmation, out: Console, *, strict: bool = False, quiet: bool = False) -> None:
    """The whole of the main job for one circuit; one line where `quiet`."""
    details = [_summary(done.check)]
    if done.written is None:
        details.append("no netlist was written")
    elif done.comparison is None:
        details.append("no second opinion was asked for")
    elif quiet:
        details.append("".join(str(piece) for piece in _verdict_of(done.comparison)))
    verdict = _word(done.verdict(strict=strict))
    _headline(done.check.circuit.name, [verdict], "; ".join(details), out, quiet=quiet)
    if quiet:
        return
    show_left_out(done.check.circuit, out)
    show_findings(done.check.findings, out)
    show_claims(done.check.claims, out, _say)
    if done.comparison is not None:
        _say(out, *_verdict_of(done.comparison), f": {_counted_curves(done.comparison)}", indent=2, hang=2)
        _show_details(done.comparison, out)
    if done.written is None:
        _say(out, "mend the errors, or write the netlist all the same with --anyway", indent=2)
    _show_kept(done, out)


def _show_kept(done: Confirmation, out: Console) -> None:
    if done.folder is not None:
        _say(out, f"kept in {done.folder}: {', '.join(done.files)}", indent=2, hang=2)


def show_simulation(done: Confirmation, out: Console, *, quiet: bool = False) -> None:
    """What a simulator's run gave, and where it is kept."""
    assert done.opinion is not None
    opinion = done.opinion
    _headline(done.check.circuit.name, [opinion.who, " ran"], f"{opinion.seconds:.2f} s", out, quiet=quiet)
    if quiet:
        return
    for analysis in dict.fromkeys(curve.analysis for curve in opinion.curves):
        group = opinion.curves.of(analysis)
        _say(
            out,
            f"{analysis}: {_counted(len(group), 'curve')} of {_counted(len(group[0]), 'point')}",
            indent=2,
        )
    _show_kept(done, out)


def show_total(words: Sequence[str], out: Console) -> None:
    """How several circuits came out; words: `passes`, `holds`, `fails`, `undecided` or `error` for each."""
    counts = Counter(words)
    done = _verdicts(counts, ("passes", "holds", "fails", "undecided"))
    broken = f"{counts['error']} could not be done" if counts["error"] else ""
    _say(out, f"{_counted(len(words), 'circuit')}: {', '.join(part for part in (done, broken) if part)}")


# ---------------------------------------------------------------------- response


def show_response(
    curves: Sequence[Curve], out: Console, *, quiet: bool = False, envelopes: Envelopes | None = None
) -> None:
    """Curves of one axis as a table, of dB and degrees or of volts; side by side as many as fit.

    No headings where `quiet`. envelopes: the least and the greatest gain over the tolerances, by curve
    """
    timed = curves[0].analysis == "transient"
    heading, unit = ("time", "s") if timed else ("frequency", "Hz")
    columns = [_column(heading, [format_quantity(x, unit, 6) for x in curves[0].axis.tolist()])]
    block: list[list[str]] = []
    for curve in curves:
        if envelopes is not None:
            pair = [_column(*each) for each in envelope_columns(curve, envelopes[curve.name])]
        else:
            pair = _waveform_column(curve) if timed else _phasor_columns(curve)
        if block and sum(len(column[0]) + 2 for column in columns + block + pair) - 2 > out.width:
            _show_rows(columns + block, out, quiet=quiet)
            out.print()
            block = []
        block += pair
    _show_rows(columns + block, out, quiet=quiet)
    if envelopes is not None and not quiet:
        methods = sorted({envelope.method for envelope in envelopes.values()})
        _say(out, _styled(f"least and most over the tolerances: {' and '.join(methods)}", "dim"))


def _waveform_column(curve: Curve) -> list[list[str]]:
    return [_column(curve.name, [format_quantity(value + 0.0, "V", 6) for value in curve.values.tolist()])]


def _phasor_columns(curve: Curve) -> list[list[str]]:
    values = curve.values.tolist()
    return [
        _column(f"{curve.name} dB", [_fixed(20 * math.log10(abs(v)), 4) if v else "-inf" for v in values]),
        _column("deg", [_fixed(math.degrees(math.atan2(v.imag, v.real)), 3) if v else "-" for v in values]),
    ]


def _fixed(value: float, places: int) -> str:
    """A number with that many decimals; one that rounds to zero has no sign."""
    text = f"{value:.{places}f}"
    return text if float(text) else text.removeprefix("-")


def _column(heading: str, cells: list[str]) -> list[str]:
    heading = printable(heading)
    width = max(len(text) for text in (heading, *cells))
    return [f"{text:>{width}}" for text in (heading, *cells)]


def _show_rows(columns: Sequence[Sequence[str]], out: Console, *, quiet: bool) -> None:
    for number, row in enumerate(zip(*columns, strict=True)):
        if quiet and not number:
            continue
        out.print(_styled("  ".join(row), "" if number else "dim"), soft_wrap=True)
