"""Low-pass and high-pass filters: the plan from a target to candidates."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..errors import InputError
from ..values import format_quantity, write_quantity
from .account import account, counted, sections_text
from .candidate import candidates
from .design import Design
from .edge import HALF, NEPER, Edge
from .ladder import Ladder
from .limits import attenuation_of_endless, least_ratio, most_attenuation
from .search import Hits, Tally, search
from .stock import Stock
from .target import MOST_SECTIONS, Target
from .written import Wanted, rounded

WIDTHS = (
    0.01,
    0.02,
    0.05,
    0.1,
    0.2,
    0.3,
    0.5,
)  # how far off target nominal values may be; the first that will do
LOSSES = (1.0, 3.0, 6.0, 20.0)  # dB that a load may cost beyond the least it can cost
USEFUL = 0.1  # of the signal: with less left at best, the source or the load is not meant for such a filter


def passing(target: Target) -> Design:
    """Low-pass or high-pass ladders; the fewest sections that will do where their number is not given."""
    plan = _Plan(target)
    plan.refuse_impossible()
    tally = None
    for edge in plan.edges():
        hits, tally = search(edge, target.keep)
        if len(hits) and (done := plan.designed(edge, hits, tally)).candidates:
            return done
        plan.large = not tally.complete
    assert tally is not None
    raise plan.nothing(tally)


@dataclass
class _Plan:
    target: Target
    large: bool = False  # whether there were too many combinations to decide all of them

    def __post_init__(self) -> None:
        self.low = self.target.kind == "lowpass"
        self.resistors = Stock.of(self.target.resistors)
        self.capacitors = Stock.of(self.target.capacitors)

    # ------------------------------------------------------------------ what is looked for

    @property
    def sections(self) -> Sequence[int]:
        """The numbers of sections to try, in order."""
        if self.target.sections is not None:
            return (self.target.sections,)
        every = range(1, MOST_SECTIONS[self.target.kind] + 1)
        wanted = self.target.attenuation
        if self.target.cutoff is None or wanted is None:
            return every[:1]
        return [n for n in every if self.most(n) >= wanted]

    def most(self, sections: int, *, exact: bool = False) -> float:
        """The most attenuation there is, dB, at the worst of tolerances; with exact parts where `exact`."""
        assert self.target.cutoff is not None and self.target.at is not None
        ratio = self.target.at / self.target.cutoff
        ratio = ratio if self.low else 1 / ratio
        if not exact:
            ratio *= (self.target.down if self.low else 1 / self.target.up) * (1 + WIDTHS[0])
        return most_attenuation(sections, ratio) if ratio > 1 else 0.0

    def edges(self) -> Iterator[Edge]:
        """The questions, the strictest first: every number of sections, then more loss, then more width."""
        for n in self.sections:
            ladder = Ladder(n, self.low, self.target.source, self.target.load)
            self.refuse_useless(ladder)
            self.refuse_out_of_reach(ladder)
            self.large = False
            for width in WIDTHS:
                for loss in LOSSES if self.loses else LOSSES[:1]:
                    # Where not all is searched, time is better spent on one section more.
                    if not self.large or loss == LOSSES[-1]:
                        yield self.edge(ladder, width, loss)
                if self.large:
                    break

    @property
    def loses(self) -> bool:
        """Whether the passband loses anything, to the load, or in the source of a high-pass."""
        return math.isfinite(self.target.load) if self.low else self.target.source > 0

    def edge(self, ladder: Ladder, width: float, loss: float) -> Edge:
        """One question; see WIDTHS and LOSSES."""
        target = self.target
        made = Edge(
            ladder, self.resistors, self.capacitors, target, self.aim(width), self.level, math.log1p(width)
        )
        if target.cutoff is not None and target.attenuation is not None and target.at is not None:
            made = replace(made, stop=(2 * math.pi * target.at, 10 ** (target.attenuation / 10)))
        if self.loses:
            best = float(made.worst_gain(self._best_resistors(ladder))[0])
            made = replace(made, least_gain=best * 10 ** (-loss / 20))
        return made

    @property
    def level(self) -> float:
        """How far power is down at the frequency aimed at."""
        if self.target.cutoff is not None:
            return HALF
        assert self.target.attenuation is not None
        return float(10 ** (self.target.attenuation / 10))

    def aim(self, width: float) -> float:
        """The frequency to be met with nominal values, rad/s.

        An attenuation alone is to be reached at the worst of tolerances, with `width` to spare.
        """
        if self.target.cutoff is not None:
            return 2 * math.pi * self.target.cutoff
        assert self.target.at is not None
        shift = self.target.down / (1 + width) if self.low else self.target.up * (1 + width)
        return 2 * math.pi * self.target.at * shift

    def _best_resistors(self, ladder: Ladder) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
        return np.full((1, ladder.sections), self.resistors.values[0 if self.low else -1])

    # ------------------------------------------------------------------ what cannot be

    def refuse_impossible(self) -> None:
        """Raise InputError where no ladder has that attenuation so near its cutoff."""
        wanted, at, cutoff = self.target.attenuation, self.target.at, self.target.cutoff
        if wanted is None or at is None or cutoff is None:
            return
        n = self.target.sections or MOST_SECTIONS[self.target.kind]
        most = self.most(n)
        if wanted <= most:
            return
        exact = self.most(n, exact=True)
        worst = (
            "" if self.target.down == self.target.up else f", {most:.3g} dB at the worst of the tolerances"
        )
        reached = ", and only equal sections isolated from each other would reach it" if n > 1 else ""
        raise InputError(
            f"{sections_text(n)} cannot give {wanted:g} dB at {format_quantity(at, 'Hz')} with the cutoff at "
            f"{format_quantity(cutoff, 'Hz')}: the most is {exact:.3g} dB{worst}{reached}.",
            remedy=self._what_would_do(n, wanted),
        )

    def _what_would_do(self, sections: int, wanted: float) -> str:
        enough = [
            n for n in range(sections + 1, MOST_SECTIONS[self.target.kind] + 1) if self.most(n) >= wanted
        ]
        if enough:
            return f"Take {sections_text(enough[0])} or more, or ask for less."
        assert self.target.cutoff is not None and self.target.at is not None
        spoilt = (self.target.down if self.low else 1 / self.target.up) * (1 + WIDTHS[0])
        ratio = least_ratio(sections, wanted) / spoilt
        place = self.target.cutoff * ratio if self.low else self.target.cutoff / ratio
        asked = self.target.at / self.target.cutoff
        ever = attenuation_of_endless(asked if self.low else 1 / asked)
        least = f"Ask for it at {format_quantity(place, 'Hz', 3)} or {'above' if self.low else 'below'}"
        if ever < wanted:
            return f"{least}; no number of sections gives more than {ever:.3g} dB there."
        return f"{least}."

    def refuse_useless(self, ladder: Ladder) -> None:
        """Raise InputError where the load, or the source, leaves nearly nothing of the signal."""
        best = float(ladder.gain(self._best_resistors(ladder))[0])
        if best >= USEFUL:
            return
        resistor = format_quantity(float(self._best_resistors(ladder)[0, 0]), "ohm")
        who = ("a load", self.target.load) if self.low else ("a source", self.target.source)
        raise InputError(
            f"{who[0]} of {format_quantity(who[1], 'ohm')} leaves at most {100 * best:.2g} % of the signal "
            f"with {sections_text(ladder.sections)} of {resistor}.",
            remedy=f"Allow {'smaller' if self.low else 'greater'} resistors with --resistors, or put a "
            f"buffer {'after' if self.low else 'before'} the filter.",
        )

    def refuse_out_of_reach(self, ladder: Ladder) -> None:
        """Raise InputError where even the smallest or the greatest parts do not reach the frequency.

        No part moves it up as it grows, so those are the limits of all combinations.
        """
        aim = self.aim(WIDTHS[0])
        for at, size in ((0, "smallest"), (-1, "greatest")):
            r = np.full((1, ladder.sections), self.resistors.values[at])
            c = np.full((1, ladder.sections), self.capacitors.values[at])
            limit = _frequency(ladder, r, c, self.level)
            if (limit < aim / (1 + WIDTHS[-1])) if at == 0 else (limit > aim * (1 + WIDTHS[-1])):
                what = "the cutoff" if self.target.cutoff is not None else "that attenuation"
                asked, there = (format_quantity(each / (2 * math.pi), "Hz") for each in (aim, limit))
                raise InputError(
                    f"the {size} parts allowed put {what} at {there}, and none puts it "
                    f"{'higher' if at == 0 else 'lower'}; {asked} is asked for.",
                    remedy="Allow others with --resistors and --capacitors.",
                )

    def nothing(self, tally: Tally) -> InputError:
        """Why there is no candidate although no bound forbids one."""
        n = self.target.sections or self.sections[-1]
        if tally.complete:
            every = counted(tally.combinations)
            what = f"none of the {every} combinations of {sections_text(n)} meets the target"
        else:
            what = f"no combination of {sections_text(n)} was found that meets the target"
        return InputError(
            f"{what}, though no bound forbids it.",
            remedy="Ask for a little less, or allow more sections, finer series or wider ranges of parts.",
        )

    # ------------------------------------------------------------------ what is told

    def designed(self, edge: Edge, hits: Hits, tally: Tally) -> Design:
        """The candidates with their claims."""
        target, width = self.target, math.expm1(edge.width)
        wanted = [*self._frequency_claims(edge, width), *self._loss_claim(edge)]
        asked: dict[str, tuple[str, dict[str, float | str]]] = {"cutoff": ("cutoff", {})}
        if self.low:
            asked |= {"dc_gain": ("dc_gain", {}), "noise": ("noise", {"from": 0.0, "to": math.inf})}
        says = self.says()
        title = f"{'Low' if self.low else 'High'}-pass of {sections_text(edge.sections)}: {says}"
        found = candidates(target, title, hits, lambda *_: wanted, asked, edge.enough)
        names = ("cutoff", "attenuation", "at")
        return Design(
            target,
            title,
            edge.sections,
            width,
            math.expm1(edge.enough),
            found,
            tally,
            {name: getattr(target, name) for name in names if getattr(target, name) is not None},
            account(
                tally,
                len(found),
                f"{100 * math.expm1(edge.enough):.3g} %",
                f"by the bounds of the {'time constants' if self.low else 'natural rates'}' sum",
                "because the frequency falls as the last resistor grows",
            ),
        )

    def says(self) -> str:
        """The target in words."""
        target, words = self.target, []
        if target.cutoff is not None:
            words.append(f"cutoff {format_quantity(target.cutoff, 'Hz')}")
        if target.attenuation is not None and target.at is not None:
            words.append(f"{target.attenuation:g} dB at {format_quantity(target.at, 'Hz')}")
        return ", ".join(words)

    def _frequency_claims(self, edge: Edge, width: float) -> Iterator[Wanted]:
        target = self.target
        low = edge.omega / (2 * math.pi) / (1 + width) / target.up
        high = edge.omega / (2 * math.pi) * (1 + width) / target.down
        if target.cutoff is not None:
            text = f"Cutoff {format_quantity(target.cutoff, 'Hz')}, {allowed(width)}"
            between = [rounded(low, "Hz", up=False), rounded(high, "Hz", up=True)]
            yield Wanted("cutoff", text, "cutoff", {}, {"between": between})
        if target.attenuation is None or target.at is None:
            return
        least = write_quantity(target.attenuation, "dB")
        at = write_quantity(target.at, "Hz")
        says = f"At {format_quantity(target.at, 'Hz')} down by {target.attenuation:g} dB"
        yield Wanted("attenuation", says, "attenuation", {"at": at}, {"at_least": least})
        if target.cutoff is None:
            passed = low if self.low else high
            says = f"Not down by so much at {format_quantity(passed, 'Hz')} yet"
            at = rounded(passed, "Hz", up=not self.low)
            yield Wanted("attenuation_before", says, "attenuation", {"at": at}, {"at_most": least})

    def _loss_claim(self, edge: Edge) -> Iterator[Wanted]:
        if not edge.least_gain:
            return
        loss = -NEPER * math.log(edge.least_gain)
        says = f"No more than {loss:.2g} dB lost in the passband"
        if self.low:
            against = frozenset({"Rload"})
            bound = rounded(edge.least_gain, "1", up=False)
            yield Wanted("dc_gain", says, "dc_gain", {}, {"at_least": bound}, against)
            return
        # Far above the cutoff nothing but resistors is left; what the last thousandth costs is allowed for.
        at = write_far(edge.omega / (2 * math.pi))
        bound = rounded(-loss - 0.01, "dB", up=False)
        yield Wanted("gain", says, "gain", {"at": at}, {"at_least": bound}, frozenset({"Rsource"}))


def allowed(width: float) -> str:
    """How far off a frequency may be, in words."""
    return f"give or take {100 * width:.3g} % and what tolerances do"


def write_far(cutoff: float) -> str:
    """A frequency far inside a high-pass' passband, as a circuit file has it."""
    return rounded(1000 * cutoff, "Hz", up=True)


def _frequency(ladder: Ladder, r: np.ndarray, c: np.ndarray, level: float) -> float:
    """Where the power of one ladder is down by a level, rad/s."""
    low, high = -80.0, 80.0
    for _ in range(200):
        middle = (low + high) / 2
        beyond = float(ladder.level(r, c, math.exp(middle))[0]) > level
        low, high = (low, middle) if beyond == ladder.low else (middle, high)
    return math.exp((low + high) / 2)


__all__ = ["LOSSES", "USEFUL", "WIDTHS", "passing"]
