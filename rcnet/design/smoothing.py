"""Smoothing a pulse-width signal to a level: the plan from a target to candidates."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence

import numpy as np

from ..errors import InputError
from ..values import format_quantity, write_quantity
from .account import account, counted, sections_text
from .candidate import Asked, candidates
from .design import Design
from .edge import NEPER
from .ladder import Ladder
from .level import Level, band_of
from .limits import least_ripple
from .passing import LOSSES, USEFUL
from .search import Hits, Tally, search
from .stock import Stock
from .target import MOST_SECTIONS, Target
from .written import Wanted, rounded


def smoothing(target: Target) -> Design:
    """Low-pass ladders; the fewest sections that will do where their number is not given."""
    _refuse_useless(target)
    tally, large = None, False
    # Rather one more section than a level of which the load leaves little.
    for loss, n in itertools.product(LOSSES if math.isfinite(target.load) else LOSSES[:1], _sections(target)):
        if large and loss in LOSSES[1:-1]:
            continue  # not all can be searched anyway
        level = _level(target, n, loss)
        hits, tally = search(level, target.keep)
        if len(hits) and (done := _designed(level, hits, tally)).candidates:
            return done
        large = large or not tally.complete
    assert tally is not None
    tried = sections_text(target.sections or MOST_SECTIONS["smoothing"])
    if tally.complete:
        what = f"none of the {counted(tally.combinations)} combinations of {tried} meets the target"
    else:
        what = f"no combination of {tried} was found that meets the target"
    raise InputError(
        f"{what}, though no bound forbids it.",
        remedy="Allow more ripple, a longer settling time, more sections, or wider ranges of parts.",
    )


def _level(target: Target, sections: int, loss: float) -> Level:
    ladder = Ladder(sections, True, target.source, target.load)
    made = Level(ladder, Stock.of(target.resistors), Stock.of(target.capacitors), target)
    if not math.isfinite(target.load):
        return made
    best = float(made.worst_gain(np.full((1, sections), made.resistors.values[0]))[0])
    return Level(ladder, made.resistors, made.capacitors, target, least_gain=best * 10 ** (-loss / 20))


def _least(target: Target, sections: int, *, exact: bool = False) -> float:
    """The bound of the ripple, V, at the worst of tolerances; with exact parts where `exact`."""
    assert target.settling is not None and target.carrier is not None and target.supply is not None
    faster = 1.0 if exact else target.down / target.up
    least = least_ripple(sections, band_of(target), target.settling * faster, target.carrier)
    if math.isfinite(target.load):
        # A load takes ripple and level down alike; no more than this is let go.
        least *= _level(target, sections, LOSSES[-1]).least_gain
    return target.supply * least


def _sections(target: Target) -> Sequence[int]:
    """The numbers of sections to try. Raises InputError where the bound forbids all of them."""
    most = MOST_SECTIONS["smoothing"]
    every = range(1, most + 1) if target.sections is None else (target.sections,)
    assert target.ripple is not None and target.settling is not None
    possible = [n for n in every if _least(target, n) <= target.ripple]
    if possible:
        return possible
    n = min(every, key=lambda each: _least(target, each))
    least, exact = _least(target, n), _least(target, n, exact=True)
    more = [each for each in range(n + 1, most + 1) if _least(target, each) <= target.ripple]
    shown, worst = format_quantity(exact, "V", 3), ""
    if target.down != target.up:
        worst = f", {format_quantity(least, 'V', 3)} at the worst of tolerances"
    raise InputError(
        f"{sections_text(n)} cannot settle within {format_quantity(target.settling, 's')} and ripple by no "
        f"more than {format_quantity(target.ripple, 'V')}: whatever settles so fast ripples by at least "
        f"{shown}{worst}.",
        remedy=f"Take {sections_text(more[0])}." if more else "Allow more time, or more ripple.",
    )


def _refuse_useless(target: Target) -> None:
    ladder = Ladder(target.sections or 1, True, target.source, target.load)
    smallest = Stock.of(target.resistors).values[0]
    best = float(ladder.gain(np.full((1, ladder.sections), smallest))[0])
    if best < USEFUL:
        raise InputError(
            f"a load of {format_quantity(target.load, 'ohm')} leaves at most {100 * best:.2g} % of the level "
            f"with {sections_text(ladder.sections)} of {format_quantity(float(smallest), 'ohm')}.",
            remedy="Allow smaller resistors with --resistors, or put a buffer after the filter.",
        )


def _designed(level: Level, hits: Hits, tally: Tally) -> Design:
    target = level.target
    assert target.ripple is not None and target.settling is not None
    assert target.carrier is not None and target.supply is not None
    ripple, settling = format_quantity(target.ripple, "V"), format_quantity(target.settling, "s")
    wanted = _claims(level)
    title = (
        f"Smoothing by {sections_text(level.sections)}: {format_quantity(target.carrier, 'Hz')}, "
        f"{format_quantity(target.supply, 'V')} to {ripple} in {settling}"
    )
    asked: Asked = {name: (name, {}) for name in ("mean", "cutoff", "dc_gain")}
    asked = {**asked, "noise": ("noise", {"from": 0.0, "to": math.inf})}
    found = candidates(target, title, hits, lambda *_: wanted, asked, level.enough)
    names = ("ripple", "settling", "carrier", "supply")
    return Design(
        target,
        title,
        level.sections,
        None,
        math.expm1(level.enough),
        found,
        tally,
        {**{name: getattr(target, name) for name in names}, "band": band_of(target)},
        account(
            tally,
            len(found),
            f"{100 * math.expm1(level.enough):.3g} %",
            "by what the target leaves to the time constants' sum",
            "by the carrier's level or the Elmore delay with that last resistor",
        ),
    )


def _claims(level: Level) -> list[Wanted]:
    target = level.target
    assert target.ripple is not None and target.settling is not None
    ripple, settling = format_quantity(target.ripple, "V"), format_quantity(target.settling, "s")
    band = write_quantity(band_of(target), "1")
    wanted = [
        Wanted(
            "ripple",
            f"Ripple of no more than {ripple} at half duty, where it is greatest",
            "ripple",
            {},
            {"at_most": write_quantity(target.ripple, "V")},
            frozenset({"Rload"}),
        ),
        Wanted(
            "settling_time",
            f"Within {settling} the level is half that ripple from its end",
            "settling_time",
            {"band": band},
            {"at_most": write_quantity(target.settling, "s")},
        ),
    ]
    if level.least_gain:
        loss = -NEPER * math.log(level.least_gain)
        bound = {"at_least": rounded(level.least_gain, "1", up=False)}
        says = f"No more than {loss:.2g} dB of the level lost to the load"
        wanted.append(Wanted("dc_gain", says, "dc_gain", {}, bound, frozenset({"Rload"})))
    return wanted


__all__ = ["smoothing"]
