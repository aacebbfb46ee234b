"""How complete a search was, in sentences."""

from __future__ import annotations

import math

from .search import Tally

_WORDS = ("no", "one", "two", "three", "four", "five", "six")


def account(tally: Tally, found: int, enough: str, by_sum: str, by_span: str) -> str:
    """What became of all combinations.

    found: candidates; enough: the margin that counts, as text; by_sum, by_span: the arguments that excluded
    combinations, as they follow their number
    """
    excluded = [
        f"{number:,} {why}" for number, why in ((tally.by_sum, by_sum), (tally.by_span, by_span)) if number
    ]
    fate = f"Excluded: {', '.join(excluded)}. " if excluded else ""
    fate += f"Computed: {tally.computed:,}; {tally.met:,} of them meet the target."
    start = f"{counted(tally.combinations)} combinations"
    if math.isinf(tally.spread):
        return f"{start}, all of them decided. {fate} The search is complete."
    inner = f"{start}; {tally.within:,} of values that spread by no more than {tally.spread:.3g} to 1. {fate}"
    if tally.complete:
        return (
            f"{inner} All others spread wider, so they cannot rank before {found} with the full margin that "
            f"counts, {enough}: the search is complete."
        )
    return (
        f"{inner} Of those that spread wider, {tally.tapers:,} were looked at, whose impedance rises from "
        f"section to section by one ratio; {tally.tapers_met:,} meet the target. The search is not complete, "
        f"but what it left out has no more margin that counts than {enough}."
    )


def counted(count: int) -> str:
    """A number of things, written out as far as a person reads it."""
    return f"{count:,}" if count < 10**15 else f"{float(count):.3g}"


def sections_text(sections: int) -> str:
    """`three sections`."""
    return f"{_WORDS[sections]} section{'s' * (sections != 1)}"


__all__ = ["account", "counted", "sections_text"]
