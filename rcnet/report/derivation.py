"""A derivation for a person at a terminal, within its width."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Sequence
from itertools import groupby
from typing import TYPE_CHECKING

from ..values import format_quantity
from .plain import printable
from .terminal import MOST_LISTED

if TYPE_CHECKING:
    from rich.console import Console

    from ..derive import Asymptote, Derivation, Number, Result, Root, Roots, Written

Line = tuple[str, str]  # text, style

NOTHING = 1e-7  # per cent or dB: an error below this is none
_COLUMNS = (13, 13, 11)  # value, exact, error


def show_derivation(done: Derivation, out: Console, *, quiet: bool = False) -> None:
    """All of it as lines that fit; one line where `quiet`."""
    from rich.text import Text

    lines = [(headline(done), "")] if quiet else list(derivation_lines(done, out.width))
    for text, style in lines:
        out.print(Text(printable(text), style=style), soft_wrap=True)


def headline(done: Derivation) -> str:
    """`noise-filter: 3 poles, 0 zeros; of 14 rules of thumb 3 hold`."""
    roots = done.roots
    parts = ["poles not known" if roots is None else _counted(sum(r.count for r in roots.poles), "pole")]
    if roots is not None:
        parts.append("zeros not known" if roots.zeros is None else _counted(_finite(roots), "zero"))
    names = {result.rule for result in done.rules}
    holding = {result.rule for result in done.rules if result.holds}
    rules = (
        f"{len(holding)} of {_counted(len(names), 'rule')} of thumb hold"
        if names
        else "no rule of thumb fits"
    )
    return f"{done.circuit.name}: {', '.join(parts)}; {rules}"


def _finite(roots: Roots) -> int:
    return sum(root.count for root in roots.zeros or ())


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}{'s' * (count != 1)}"


# ---------------------------------------------------------------------- lines


def derivation_lines(done: Derivation, width: int) -> Iterator[Line]:
    """Everything, line by line, each with a style."""
    unit = "volt" if done.source[:1].upper() == "V" else "ampere"
    of = ",".join(done.of.split())
    yield from _wrapped(f"{done.circuit.name}: v({of}) per {unit} of {done.source}", width, style="bold")
    yield from _function_lines(done, width)
    yield from _root_lines(done, width)
    yield from _asymptote_lines(done, width)
    yield from _result_lines("approximations", done.approximations, width)
    if done.rules:
        yield from _result_lines("rules of thumb", done.rules, width)
    else:
        yield "", ""
        yield from _wrapped("no rule of thumb fits this network.", width, indent=2)


def _function_lines(done: Derivation, width: int) -> Iterator[Line]:
    yield "", ""
    yield "  transfer function", "bold"
    form = done.function
    if form is None:
        yield from _wrapped(f"not in part names: {done.function_why}", width, indent=4)
        return
    yield from _wrapped(f"H = {form.text}", width, indent=4, hang=4)
    yield from _wrapped(f"  = {normalised(form)}", width, indent=4, hang=4)
    for number in (form.gain, *form.numerator, *form.denominator):
        if number.text != "1":
            value = power_of_seconds(number)
            told = "" if number.text == value else f" = {number.text}"
            yield from _wrapped(f"{number.name}{told} = {value}", width, indent=4, hang=4)


def normalised(form: Written) -> str:
    """`K s^n (1 + b1 s + ...)/(1 + a1 s + ...)`, as far as each is there."""
    above = _series(form.numerator)
    lead = [] if form.gain.text == "1" else ["K"]
    if form.origin:
        lead.append("s" if form.origin == 1 else f"s^{form.origin}")
    if above != "1":
        lead.append(f"({above})" if form.denominator or lead else above)
    below = _series(form.denominator)
    text = " ".join(lead) or "1"
    return text if below == "1" else f"{text} / ({below})"


def _series(numbers: Sequence[Number]) -> str:
    terms = ["1"] + [
        f"{number.name} s" + (f"^{number.power}" if number.power > 1 else "") for number in numbers
    ]
    return " + ".join(terms)


def power_of_seconds(number: Number) -> str:
    """A coefficient's value with its unit, seconds to a power."""
    if number.power == 1:
        return format_quantity(number.value, "s")
    return f"{number.value:.4g}" + (f" s^{number.power}" if number.power else "")


# ---------------------------------------------------------------------- poles and zeros


def _root_lines(done: Derivation, width: int) -> Iterator[Line]:
    roots = done.roots
    yield "", ""
    if roots is None:
        yield "  poles and zeros", "bold"
        yield from _wrapped(f"not known: {done.roots_why}", width, indent=4)
        return
    yield from _table_of("poles", roots.poles, width)
    if roots.left_out:
        yield from _wrapped(f"{_counted(roots.left_out, 'faster pole')} cannot be told.", width, indent=4)
    if roots.zeros is None:
        yield "  zeros", "bold"
        yield from _wrapped(f"not known: {roots.zeros_why}", width, indent=4)
    else:
        yield from _table_of("zeros", roots.zeros, width)
    for pair in roots.cancelled[:MOST_LISTED]:
        where = format_quantity(abs(pair.pole) / (2 * math.pi), "Hz")
        apart = (
            "cancel" if pair.apart < NOTHING else f"nearly cancel: they lie {100 * pair.apart:.2g} % apart"
        )
        yield from _wrapped(f"a pole and a zero at {where} {apart}.", width, indent=4)
    if len(roots.cancelled) > MOST_LISTED:
        yield from _wrapped(f"and {len(roots.cancelled) - MOST_LISTED} more such pairs.", width, indent=4)
    if roots.hidden:
        where = ", ".join(format_quantity(root.frequency, "Hz") for root in roots.hidden[:6])
        more = ", ..." if len(roots.hidden) > 6 else ""
        count = _counted(len(roots.hidden), "natural mode")
        yield from _wrapped(f"{count} that this output does not show: {where}{more}.", width, indent=4)


def _table_of(what: str, roots: Sequence[Root], width: int) -> Iterator[Line]:
    if not roots:
        yield f"  no {what}", "bold"
        return
    titles = (what, "frequency", "time constant", "Q" if any(r.quality for r in roots) else "", "")
    rows = [titles]
    for root in roots[:MOST_LISTED]:
        tau = root.time_constant
        note = f"{root.count} times" if root.count > 1 else ""
        if root.share is not None and len(roots) > 1:
            note = f"{100 * root.share:.3g} % of the response"
        rows.append(
            (
                _complex(root.s),
                format_quantity(root.frequency, "Hz"),
                "" if tau is None else format_quantity(tau, "s"),
                "" if root.quality is None else f"{root.quality:.4g}",
                note,
            )
        )
    widths = [max(len(row[column]) for row in rows) for column in range(5)]
    for number, row in enumerate(rows):
        cells = [f"{cell:>{size}}" for cell, size in zip(row[:4], widths, strict=False) if size]
        text = ("  " + f"{row[0]:<{widths[0]}}" if not number else "    " + cells[0]) + "  "
        if not number:
            text = f"  {row[0]:<{widths[0] + 2}}  "
        text += "  ".join(cells[1:])
        if len(text) + 2 + len(row[4]) <= width:
            yield f"{text}  {row[4]}".rstrip(), "" if number else "bold"
        else:
            yield text.rstrip(), ""
            yield from _wrapped(row[4], width, indent=8)
    if len(roots) > MOST_LISTED:
        last = format_quantity(roots[-1].frequency, "Hz")
        yield from _wrapped(f"and {len(roots) - MOST_LISTED} more, up to {last}.", width, indent=4)


def _complex(s: complex) -> str:
    if not s.imag:
        return f"{s.real:.6g}" if s else "0"
    return f"{s.real:.5g} {'-' if s.imag < 0 else '+'} {abs(s.imag):.5g}j"


def _asymptote_lines(done: Derivation, width: int) -> Iterator[Line]:
    for line in done.asymptotes:
        where = "far down" if line.end == "low" else "far up"
        yield from _wrapped(f"{where}: |H| = {_line(line)}", width, indent=2, hang=4)
    if done.corner is not None:
        yield from _wrapped(f"the two lines meet at {format_quantity(done.corner, 'Hz')}", width, indent=2)


def _line(line: Asymptote) -> str:
    value = line.coefficient
    known = line.text or ("a constant" if value is None else f"{value:.4g}")
    slope = "level" if not line.power else f"{line.slope:+d} dB a decade"
    w = {0: "", 1: "*omega"}.get(line.power, f"*omega^{line.power}")
    outside = re.sub(r"\([^()]*\)", "", re.sub(r"\([^()]*\)", "", known))
    known = f"({known})" if w and re.search(r" [+-] ", outside) else known
    return f"{known}{w}, {slope}"


# ---------------------------------------------------------------------- rules


def _result_lines(title: str, results: Sequence[Result], width: int) -> Iterator[Line]:
    if not results:
        return
    first = width - sum(_COLUMNS) - 3
    yield "", ""
    heads = "".join(
        f" {head:>{size}}" for head, size in zip(("value", "exact", "error"), _COLUMNS, strict=True)
    )
    yield f"{'  ' + title:<{first}}{heads}", "bold"
    for _, group in groupby(results, key=lambda result: result.rule):
        yield from _group_lines(list(group), width, first)


def _group_lines(group: list[Result], width: int, first: int) -> Iterator[Line]:
    lead = group[0]
    word = "holds" if lead.holds else "fails"
    style = "green" if lead.holds else "yellow"
    yield f"  {word}  {lead.rule}", style
    for result in group:
        yield from _row(result, width, first)
        where = f", {result.where}" if result.where else ""
        yield from _wrapped(f"= {result.formula}{where}", width, indent=11, hang=2, style="dim")
        if result.why is not None:
            yield from _wrapped(f"no exact value: {result.why}", width, indent=11, style="dim")
    because = list(dict.fromkeys(result.because for result in group))[:2]
    yield from _wrapped(
        f"assumes {lead.assumes}; here {' '.join(because)}", width, indent=9, hang=2, style="dim"
    )


def _row(result: Result, width: int, first: int) -> Iterator[Line]:
    exact = "none" if result.exact is None else _amount(result.exact, result.unit)
    cells = (_amount(result.value, result.unit), exact, error_text(result))
    what = f"         {result.stands_for.replace('_', ' ')}"
    row = "".join(f" {cell:>{size}}" for cell, size in zip(cells, _COLUMNS, strict=True))
    if len(what) > first:
        yield from _wrapped(what.strip(), width, indent=9)
        what = ""
    yield f"{what:<{first}}{row}", ""


def _amount(value: float, unit: str) -> str:
    return format_quantity(value, unit) if unit != "1" else f"{value:.5g}"


def error_text(result: Result) -> str:
    """`+8.76 %`, `-0.3 dB`, `none`, or nothing where there is no exact value."""
    if result.error is None:
        return ""
    if abs(result.error) < NOTHING:
        return "none"
    return f"{result.error:+.3g} {result.error_unit}"


def _wrapped(text: str, width: int, *, indent: int = 0, hang: int = 0, style: str = "") -> Iterator[Line]:
    """Broken between words; a word too long for a line behind a sign of multiplication or a comma."""
    margin, line = indent + len(text) - len(text.lstrip()), ""
    room = width - margin
    for piece in _pieces(text, width - indent - hang):
        if line.strip() and len(line) + len(piece.rstrip()) > room:
            yield " " * margin + line.rstrip(), style
            line, margin, room = "", indent + hang, width - indent - hang
        line += piece if line else piece.lstrip()
    if line.strip():
        yield " " * margin + line.rstrip(), style


def _pieces(text: str, longest: int) -> Iterator[str]:
    for word in re.findall(r"\s*\S+\s?", text):
        if len(word.strip()) <= longest:
            yield word
        else:
            yield from re.findall(r"\s*[^*,]*[*,]?", word)


__all__ = [
    "derivation_lines",
    "error_text",
    "headline",
    "normalised",
    "power_of_seconds",
    "show_derivation",
]
