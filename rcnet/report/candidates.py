"""A design for people and for scripts: the candidates, their margins, how complete the search was."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from ..circuit import MEASURES
from ..values import format_quantity
from .terminal import _say as say

if TYPE_CHECKING:
    from rich.console import Console

    from ..design import Candidate, Design, Held

_HEADS = ("", "exact", "lowest", "highest", "margin")


def show_design(design: Design, out: Console, *, quiet: bool = False) -> None:
    """The target, a table of the candidates, and how complete the search was; where `quiet`, only parts."""
    if quiet:
        for candidate in design.candidates:
            out.print(_parts(candidate), soft_wrap=True)
        return
    say(out, design.says, hang=2)
    say(out, _stock(design), indent=2, hang=2)
    for held in design.candidates[0].held:
        say(out, f"{held.claim.says}: {held.claim.bound.text}", indent=2, hang=4)
    rows = [_rows(candidate) for candidate in design.candidates]
    widths = [
        max(len(row[k]) for row in [_HEADS, *(row for group in rows for row in group)]) for k in range(5)
    ]
    out.print()
    _print_row(out, _HEADS, widths, "dim")
    for number, (candidate, group) in enumerate(zip(design.candidates, rows, strict=True), 1):
        say(out, f"{number:>2}  {_parts(candidate)}", hang=4)
        for row in group:
            _print_row(out, row, widths)
        say(out, _besides(candidate), indent=4, hang=2)
    out.print()
    say(out, _score(design))
    say(out, design.account)


def _parts(candidate: Candidate) -> str:
    return "  ".join(f"{name}={value}" for name, value in candidate.parts.items())


def _stock(design: Design) -> str:
    target, told = design.target, []
    for name, unit, parts in (("R", "ohm", target.resistors), ("C", "F", target.capacitors)):
        low, high = format_quantity(parts.low, unit), format_quantity(parts.high, unit)
        told.append(f"{name} {parts.series} {parts.tolerance}, {low} to {high}")
    if target.source:
        told.append(f"source {format_quantity(target.source, 'ohm')}")
    if math.isfinite(target.load):
        told.append(f"load {format_quantity(target.load, 'ohm')}")
    return "; ".join(told)


def _rows(candidate: Candidate) -> list[tuple[str, ...]]:
    """A row for each measure; of several claims of one the tightest."""
    least: dict[str, Held] = {}
    for held in candidate.held:
        if held.key not in least or held.margin < least[held.key].margin:
            least[held.key] = held
    return [_row(held) for held in least.values()]


def _row(held: Held) -> tuple[str, ...]:
    unit = held.claim.measure.unit
    exact, low, high = (format_quantity(value, unit) for value in (held.exact, held.low, held.high))
    return held.key.replace("_", " "), exact, low, high, _percent(held.margin)


def _percent(share: float) -> str:
    return f"{100 * share:.3g} %" if share < 10 else f"x {1 + share:.3g}"


def _print_row(out: Console, cells: Sequence[str], widths: Sequence[int], style: str = "") -> None:
    from rich.text import Text

    first = f"{cells[0]:<{widths[0]}}"
    rest = "".join(f"  {cell:>{width}}" for cell, width in zip(cells[1:], widths[1:], strict=True))
    out.print(Text(f"    {first}{rest}".rstrip(), style=style), soft_wrap=True)


def _besides(candidate: Candidate) -> str:
    claimed = {held.key for held in candidate.held}
    told = [
        f"{key.replace('_', ' ')} {format_quantity(value, MEASURES[key].unit)}"
        for key, value in candidate.measures.items()
        if key not in claimed
    ]
    return ", ".join([*told, f"spread {candidate.spread:.3g}", f"score {candidate.score:.4g}"])


def _score(design: Design) -> str:
    return (
        "lowest and highest: over the tolerances. score: the least margin as a fraction, the higher the "
        f"better, counted up to {design.enough:.4g}; then the narrower spread of values ranks first, then "
        "the lower noise."
    )


# ---------------------------------------------------------------------- JSON


def design_document(design: Design) -> dict[str, Any]:
    """The document of `design`."""
    from ..handover import sealed_netlist

    return {
        "target": _target_document(design),
        "candidates": [
            {
                "parts": dict(candidate.parts),
                "measures": dict(candidate.measures),
                "score": candidate.score,
                "spread": candidate.spread,
                "claims": [_held_document(held) for held in candidate.held],
                "netlist": sealed_netlist(candidate.circuit).text,
                "circuit": candidate.text,
            }
            for candidate in design.candidates
        ],
        "search": _search_document(design),
    }


def _target_document(design: Design) -> dict[str, Any]:
    target = design.target
    return {
        "kind": target.kind,
        "says": design.says,
        **design.wanted,
        "within": design.within,
        "sections": design.sections,
        "source": target.source,
        "load": target.load if math.isfinite(target.load) else None,
        "series": target.resistors.series,
        "capacitor_series": target.capacitors.series,
        "tolerance": [target.resistors.tolerance.low, target.resistors.tolerance.high],
        "capacitor_tolerance": [target.capacitors.tolerance.low, target.capacitors.tolerance.high],
        "resistors": [target.resistors.low, target.resistors.high],
        "capacitors": [target.capacitors.low, target.capacitors.high],
    }


def _held_document(held: Held) -> dict[str, Any]:
    return {
        "says": held.claim.says,
        "measure": held.claim.measure.name,
        "unit": held.claim.measure.unit,
        "exact": held.exact,
        "low": held.low,
        "high": held.high,
        "wanted": [held.claim.bound.low, held.claim.bound.high],
        "margin": held.margin,
    }


def _search_document(design: Design) -> dict[str, Any]:
    tally = design.tally
    return {
        "complete": tally.complete,
        "combinations": tally.combinations,
        "computed": tally.computed,
        "met": tally.met,
        "excluded": {
            "by_sum_of_modes": tally.by_sum,
            "by_last_resistor": tally.by_span,
            "by_spread": tally.combinations - tally.within,
        },
        "tapers": {"looked_at": tally.tapers, "met": tally.tapers_met},
        "spread": tally.spread if math.isfinite(tally.spread) else None,
        "score_counts_up_to": design.enough,
        "says": design.account,
    }
