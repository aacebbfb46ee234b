"""A finding, and the register of the rules that make them."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from typing import Literal

from ..circuit import Circuit, Place

Severity = Literal["error", "warning", "note"]
ORDER: dict[str, int] = {"error": 0, "warning": 1, "note": 2}


@dataclass(frozen=True, slots=True)
class Finding:
    """Something wrong or suspicious in a circuit or netlist.

    code: the rule's name; line: from 1, None where no line can be named; remedy: what to do, a sentence
    text: the line itself, for showing; column, width: which of its characters are meant, from 1
    """

    code: str
    severity: Severity
    message: str
    file: str
    line: int | None
    remedy: str
    text: str = ""
    column: int | None = None
    width: int = 1


@dataclass(frozen=True, slots=True)
class Remark:
    """What a rule says of one place; the register adds the code. `severity` overrides the rule's own."""

    message: str
    remedy: str
    place: Place
    severity: Severity | None = None


RuleFunction = Callable[[Circuit], Iterable[Remark]]


@dataclass(frozen=True, slots=True)
class Rule:
    """One rule: its code, its usual severity, what it looks for (its docstring), and the function.

    of_text: it looks at what was read, line by line, so that it holds also where other lines cannot be read
    """

    code: str
    severity: Severity
    about: str
    look: RuleFunction
    of_text: bool = False


RULES: dict[str, Rule] = {}


def rule(code: str, severity: Severity, *, of_text: bool = False) -> Callable[[RuleFunction], RuleFunction]:
    """Register a function as the rule `code`. Its docstring is what users read about it."""

    def register(function: RuleFunction) -> RuleFunction:
        if code in RULES:
            raise ValueError(f"two rules are called {code!r}")
        RULES[code] = Rule(code, severity, (function.__doc__ or "").strip(), function, of_text)
        return function

    return register


def all_rules() -> tuple[Rule, ...]:
    """Every rule there is, in the order of its code."""
    # Importing them registers their rules.
    from . import (  # noqa: F401
        analysis_rules,
        claim_rules,
        graph_rules,
        name_rules,
        netlist_rules,
        reach_rules,
        refusal_rules,
        silence,
        structure_rules,
        trap_rules,
        value_rules,
    )

    return tuple(RULES[code] for code in sorted(RULES))


def findings(circuit: Circuit) -> tuple[Finding, ...]:
    """What the rules find and nobody silenced, errors first, then by line."""
    from .silence import sifted

    return sifted(circuit, found(circuit))[0]


def found(circuit: Circuit) -> tuple[Finding, ...]:
    """Everything the rules find, silenced or not, errors first, then by line."""
    return in_order(finding for each in all_rules() for finding in _of(each, circuit))


def found_in_text(circuit: Circuit) -> tuple[Finding, ...]:
    """What the rules about text find in as much of a netlist as could be read."""
    return in_order(finding for each in all_rules() if each.of_text for finding in _of(each, circuit))


def in_order(several: Iterable[Finding]) -> tuple[Finding, ...]:
    """Findings as they are told: errors first, then by line."""
    return tuple(sorted(several, key=lambda finding: (ORDER[finding.severity], finding.line or 0)))


def _of(each: Rule, circuit: Circuit) -> Iterator[Finding]:
    for remark in each.look(circuit):
        place = remark.place
        severity = remark.severity or each.severity
        yield Finding(
            each.code,
            severity,
            remark.message,
            place.file,
            place.line,
            remark.remedy,
            place.text,
            place.column,
            place.width,
        )
