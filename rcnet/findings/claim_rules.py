"""Rules about claims and ratings, by name: their findings are made where claims are judged."""

from __future__ import annotations

from collections.abc import Iterable

from ..circuit import Circuit
from .finding import Remark, rule

# Judging lies beside this room, so nothing is looked for here; registered, these can be listed and silenced.


@rule("hand-misleads", "warning")
def hand_misleads(_: Circuit) -> Iterable[Remark]:
    """A hand formula that leads to another verdict on its claim than the real network does."""
    return ()


@rule("hand-fails", "warning")
def hand_fails(_: Circuit) -> Iterable[Remark]:
    """A hand formula that gives no number, as by a division by zero."""
    return ()


@rule("over-rating", "error")
def over_rating(_: Circuit) -> Iterable[Remark]:
    """A part that bears more than it is rated for, at its nominal values or somewhere over the tolerances.

    Ratings in W are held against a resistor's mean power, in V against the greatest voltage across the part,
    in A against its rms current.
    """
    return ()


@rule("near-rating", "warning")
def near_rating(_: Circuit) -> Iterable[Remark]:
    """A part that bears more than 80 % of what it is rated for."""
    return ()


@rule("hazardous-voltage", "note")
def hazardous_voltage(_: Circuit) -> Iterable[Remark]:
    """A voltage above 60 V dc, or 30 V rms or 42.4 V peak ac, the usual limits of extra-low voltage."""
    return ()


@rule("stored-charge", "note")
def stored_charge(_: Circuit) -> Iterable[Remark]:
    """A capacitor with more than 45 uC or 350 mJ above 60 V, or 20 J: dangerous after switch-off too."""
    return ()
