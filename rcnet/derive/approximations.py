"""Simpler responses that stand for the exact one: one pole, and straight lines far down and far up."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from .case import Case, Stated
from .corner_rules import TWO_PI
from .formula import ONE, Formula
from .rule import Rule
from .time_rules import settles
from .written import Written

MOST_POWERS = 4  # between the two lines; where they meet says nothing beyond


@dataclass(frozen=True, slots=True)
class Asymptote:
    """A straight line of the magnitude: |H| = coefficient omega^power.

    end: `low` or `high`; slope: dB a decade; text, tex: the coefficient in part names, None where it is not
    known in symbols; log_coefficient: ln of the coefficient, which itself may be beyond a double
    """

    end: str
    power: int
    log_coefficient: float
    text: str | None = None
    tex: str | None = None

    @property
    def slope(self) -> int:
        """How steep it is, dB a decade."""
        return 20 * self.power

    @property
    def coefficient(self) -> float | None:
        """The coefficient, None where no double holds it."""
        return math.exp(self.log_coefficient) if abs(self.log_coefficient) < 700 else None


def asymptotes(case: Case, written: Written | None) -> tuple[Asymptote, ...]:
    """The lines that the magnitude follows at the lowest and the highest frequencies; () where not known."""
    roots = case.roots
    if roots is None or roots.gain is None or roots.high is None:
        return ()
    low_text = high_text = low_tex = high_tex = None
    if written is not None:
        low_text, low_tex = written.gain.text, written.gain.tex
        high_text, high_tex = written.highest
    size, power = roots.high
    return (
        Asymptote("low", roots.origin, math.log(abs(roots.gain)), low_text, low_tex),
        Asymptote("high", power, size, high_text, high_tex),
    )


def meeting(lines: tuple[Asymptote, ...]) -> float | None:
    """The frequency at which the two lines meet, Hz; None where they are parallel."""
    if len(lines) != 2 or lines[0].power == lines[1].power:
        return None
    low, high = lines
    exponent = (low.log_coefficient - high.log_coefficient) / (high.power - low.power)
    return math.exp(exponent) / (2 * math.pi) if abs(exponent) < 700 else None


# ---------------------------------------------------------------------- as rules


def one_mode(case: Case) -> Iterator[Stated]:
    """The pole nearest the passband alone makes each cutoff."""
    for edge, upper in (("upper", True), ("lower", False)):
        if case.edge(edge) is None or not (sizes := case.poles_beyond(upper=upper)):
            continue
        size = sizes[0] if upper else sizes[-1]
        holds, because = case.one_pole(upper=upper)
        yield case.stated(
            Formula("|p|", r"\lvert p \rvert", size) / TWO_PI, "cutoff", holds, because, edge=edge
        )


def elmore_pole(case: Case) -> Iterator[Stated]:
    """A single pole with the same first moment."""
    if settles(case):
        tau = case.symbol("T_elmore", r"T_\mathrm{Elmore}", case.measure("elmore_delay"), "s")
        holds, because = case.one_pole()
        yield case.stated(ONE / (TWO_PI * tau), "cutoff", holds, because, edge="upper")


def lines_meet(case: Case) -> Iterator[Stated]:
    """The corner of the two straight lines."""
    lines = asymptotes(case, None)
    where = meeting(lines)
    if where is None:
        return
    low, high = lines
    formula = Formula("|K/K_high|^(1/n)/(2*pi)", r"\frac{\lvert K/K_\infty \rvert^{1/n}}{2\pi}", where)
    steep = abs(high.power - low.power)
    if steep > MOST_POWERS:
        return
    because = (
        "the lines differ by one power of s."
        if steep == 1
        else f"{steep} powers of s lie between the lines; a corner of its own wants one."
    )
    if low.power == 0 and high.power < 0 and case.edge("upper") is not None:
        yield case.stated(formula, "cutoff", steep == 1, because, edge="upper")
    elif high.power == 0 and low.power > 0 and case.edge("lower") is not None:
        yield case.stated(formula, "cutoff", steep == 1, because, edge="lower")
    elif low.power > 0 > high.power:
        yield case.stated(formula, "centre", True, "the response falls on either side.")


APPROXIMATIONS: tuple[Rule, ...] = (
    Rule("one pole alone", "the pole nearest the passband makes the cutoff", one_mode),
    Rule(
        "one pole of the same delay",
        "one pole makes the whole response",
        elmore_pole,
        "W. C. Elmore, J. Appl. Phys. 19:55-63, 1948",
    ),
    Rule("straight lines", "the response follows its asymptotes up to where they meet", lines_meet),
)
