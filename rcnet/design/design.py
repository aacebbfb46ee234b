"""A design: a target, the candidates that meet it, and how complete the search for them was."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from .candidate import Candidate
from .search import Tally
from .target import Target


@dataclass(frozen=True, slots=True)
class Design:
    """What came of a target.

    within: how far off the frequency (or the time) aimed at nominal values may put it, a fraction; None where
    limits are all that is asked. enough: the margin beyond which more does not count
    wanted: the target as JSON has it; says: the target in words; account: how complete the search was
    """

    target: Target
    says: str
    sections: int
    within: float | None
    enough: float
    candidates: tuple[Candidate, ...]
    tally: Tally
    wanted: Mapping[str, object]
    account: str


def design(target: Target) -> Design:
    """The parts in stock that meet a target best, in the network with its source, load and tolerances.

    Raises InputError where it cannot be met, with the bound that forbids it where there is one.
    """
    if target.kind in ("lowpass", "highpass"):
        from .passing import passing as designed
    elif target.kind == "bandpass":
        from .bandpass import bandpass as designed
    elif target.kind == "smoothing":
        from .smoothing import smoothing as designed
    else:
        from .debounce import debounce as designed
    return designed(target)


__all__ = ["Design", "design"]
