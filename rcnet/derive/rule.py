"""A rule of thumb as a record, and what came of it for one network."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass

from ..errors import UndecidedError
from .case import Case, Stated

# What leads beyond the numbers a double holds says nothing.
_BEYOND = (ZeroDivisionError, OverflowError)


@dataclass(frozen=True)
class Rule:
    """A rule of thumb.

    name: as people call it; assumes: what it takes for granted; applied: gives one statement or several for a
    network whose shape fits, none for others
    source: where it was published, "" for common knowledge
    """

    name: str
    assumes: str
    applied: Callable[[Case], Iterator[Stated]]
    source: str = ""


@dataclass(frozen=True, slots=True)
class Result:
    """What a rule gives for one network, beside the exact value it stands for.

    formula, tex: in part names; stands_for: the exact quantity; value, exact: in `unit`; exact is None where
    `why` says why there is none
    error: value against exact, in per cent of the exact one, or in decibels where the unit is dB
    holds: whether what it assumes is true here; because: the number that says so
    where: what short names in the formula stand for
    """

    rule: str
    formula: str
    tex: str
    assumes: str
    stands_for: str
    unit: str
    value: float
    exact: float | None
    error: float | None
    holds: bool
    because: str
    why: str | None = None
    source: str = ""
    where: str = ""

    @property
    def error_unit(self) -> str:
        """`%`, or `dB`."""
        return "dB" if self.unit == "dB" else "%"


def apply(rules: Iterable[Rule], case: Case) -> tuple[Result, ...]:
    """Every statement of every rule whose shape fits, in the order of the table."""
    results: list[Result] = []
    for rule in rules:
        try:
            stated = list(rule.applied(case))
        except (UndecidedError, *_BEYOND):
            continue  # what the rule is about does not exist here
        results.extend(
            _result(rule, each, case.symbols) for each in stated if math.isfinite(each.formula.value)
        )
    return tuple(results)


def _result(rule: Rule, stated: Stated, symbols: Mapping[str, str]) -> Result:
    exact, why = None, None
    try:
        exact = stated.exact()
    except UndecidedError as exc:
        why = exc.message
    value = stated.formula.value
    return Result(
        rule.name,
        stated.formula.text,
        stated.formula.tex,
        rule.assumes,
        stated.stands_for,
        stated.unit,
        value,
        exact,
        _error(value, exact, stated.unit),
        stated.holds,
        stated.because,
        why,
        rule.source,
        ", ".join(f"{short} = {told}" for short, told in symbols.items() if short in stated.formula.text),
    )


def _error(value: float, exact: float | None, unit: str) -> float | None:
    if exact is None:
        return None
    if unit == "dB":
        return value - exact
    return 100 * (value - exact) / abs(exact) if exact else None
