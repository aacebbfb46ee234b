"""SARIF 2.1.0 (OASIS Standard, 27 March 2020): what checks found, as code scanning services read it."""

from __future__ import annotations

import hashlib
import os
import re
import urllib.parse
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from .claim_table import claim_numbers
from .plain import printable

if TYPE_CHECKING:
    from ..check import Check
    from ..errors import Problem, RcnetError
    from ..findings import Finding

SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"
LONGEST_SNIPPET = 1000  # code points; a snippet must be exact, so a longer line has none

# Results that come from no rule: id -> what it is. All of them end with an exit code that is not 0.
_OTHERS = {
    "claim-fails": "A claim of the circuit file that is not true of the network.",
    "claim-undecided": "A claim of the circuit file of which it cannot be said whether it is true.",
    "unreadable": "A file that could not be read, so that nothing of it was checked.",
}


@dataclass(frozen=True)
class _Result:
    """One result before it is written out.

    same_as: what makes it the same result as in an earlier run, wherever its line has moved
    """

    rule: str
    level: str
    message: str
    file: str
    line: int | None
    text: str
    column: int | None
    width: int
    same_as: str
    suppressions: tuple[str, ...] = ()


def sarif_document(checks: Sequence[Check], failures: Sequence[RcnetError], version: str) -> dict[str, Any]:
    """One SARIF log of one run: findings, claims that do not hold, and files that could not be read.

    failures: errors whose problems carry their file; version: that of rcnet
    """
    results = [result for check in checks for result in _of_check(check)]
    results += [_of_problem(problem) for error in failures for problem in error.problems]
    rules = _rules(results)
    index = {rule["id"]: number for number, rule in enumerate(rules)}
    seen: Counter[tuple[str, ...]] = Counter()
    driver = {"name": "rcnet", "version": version, "rules": rules}
    run = {
        "tool": {"driver": driver},
        "invocations": [{"executionSuccessful": not failures}],
        "columnKind": "unicodeCodePoints",
        "results": [_written(result, index[result.rule], seen) for result in results],
    }
    return {"$schema": SCHEMA, "version": "2.1.0", "runs": [run]}


# ---------------------------------------------------------------------- rules


def _rules(results: Sequence[_Result]) -> list[dict[str, Any]]:
    from ..findings import all_rules

    rules = [
        _rule(rule.code, rule.severity, " ".join(rule.about.split()), _help(rule.code))
        for rule in all_rules()
    ]
    known = {rule["id"] for rule in rules}
    rules += [_rule(code, "error", about, about) for code, about in _OTHERS.items() if code not in known]
    known.update(_OTHERS)
    for code in dict.fromkeys(result.rule for result in results if result.rule not in known):
        about = f"A file that breaks the rule {code}, so that nothing of it was checked."
        rules.append(_rule(code, "error", about, about))
    return rules


def _rule(code: str, level: str, about: str, told: str) -> dict[str, Any]:
    first = re.match(r".+?[.!?](?=\s|$)", about)
    return {
        "id": code,
        "name": "".join(word.capitalize() for word in code.split("-")),
        "shortDescription": {"text": first[0] if first else about or code},
        "fullDescription": {"text": about or code},
        "help": {"text": told},
        "defaultConfiguration": {"level": level},
    }


def _help(code: str) -> str:
    from ..findings import UNSILENCEABLE_BY_FILE

    told = f"Do what the message says. To silence this rule, run rcnet with `--silence {code}`"
    if code in UNSILENCEABLE_BY_FILE:
        return f"{told}; a file cannot silence it."
    return f'{told}, or write `silence = ["{code}"]` at the top of the circuit file.'


# ---------------------------------------------------------------------- results


def _of_check(check: Check) -> Iterator[_Result]:
    from ..findings import Silences

    for finding in check.findings:
        yield _of_finding(finding)
    silences = Silences(check.circuit)
    for finding in check.silenced:
        kinds = {"external" if each.trusted else "inSource" for each in silences.of(finding)}
        yield _of_finding(finding, tuple(sorted(kinds)))
    yield from _of_claims(check)


def _of_finding(finding: Finding, suppressions: tuple[str, ...] = ()) -> _Result:
    return _Result(
        finding.code,
        finding.severity,
        f"{finding.message} {finding.remedy}",
        finding.file,
        finding.line,
        finding.text,
        finding.column,
        finding.width,
        finding.text.strip() or finding.message,
        suppressions,
    )


def _of_claims(check: Check) -> Iterator[_Result]:
    circuit = check.circuit
    for result in check.claims:
        if result.verdict == "holds":
            continue
        claim, place = result.claim, result.claim.place
        came = "fails" if result.verdict == "fails" else "is undecided"
        why = f" {result.why[:1].upper()}{result.why[1:]}" if result.why else ""
        yield _Result(
            f"claim-{result.verdict}",
            "error",
            f"{claim.says!r} {came}: {'; '.join(claim_numbers(result))}.{why}",
            place.file if place else circuit.file or circuit.name,
            place.line if place else None,
            place.text if place else "",
            place.column if place else None,
            place.width if place else 1,
            claim.says,  # the line itself is the heading of a table, the same for every claim
        )


def _of_problem(problem: Problem) -> _Result:
    return _Result(
        problem.code or "unreadable",
        "error",
        f"{problem.message} {problem.remedy}" if problem.remedy else problem.message,
        problem.file or "",
        problem.line,
        problem.text,
        problem.column,
        problem.width,
        problem.text.strip() or problem.message,
    )


def _written(result: _Result, rule_index: int, seen: Counter[tuple[str, ...]]) -> dict[str, Any]:
    """A result as SARIF has it; `seen` counts those that only their order tells apart."""
    address = uri(result.file) if result.file else ""
    same = (result.rule, address, " ".join(result.same_as.split()))
    seen[same] += 1
    digest = hashlib.sha256(repr((*same, seen[same])).encode("utf-8", "backslashreplace"))
    document: dict[str, Any] = {
        "ruleId": result.rule,
        "ruleIndex": rule_index,
        "level": result.level,
        "message": {"text": printable(result.message)},
        "partialFingerprints": {"rcnet/v1": digest.hexdigest()[:32]},
    }
    if address:
        physical = {"artifactLocation": {"uri": address}, **_region(result)}
        document["locations"] = [{"physicalLocation": physical}]
    if result.suppressions:
        document["suppressions"] = [{"kind": kind} for kind in result.suppressions]
    return document


def _region(result: _Result) -> dict[str, Any]:
    """The region meant, and the whole line around it where they are not the same."""
    if result.line is None:
        return {}
    text, column = result.text, result.column
    line: dict[str, Any] = {"startLine": result.line}
    snippet = {"snippet": {"text": text}} if text and len(text) <= LONGEST_SNIPPET else {}
    if column is None or column < 1:
        return {"region": {**line, **snippet}}
    end = column + max(result.width, 1)
    if text:
        end = max(column, min(end, len(text) + 1))
    region: dict[str, Any] = {**line, "startColumn": column, "endColumn": end}
    if snippet and (meant := text[column - 1 : end - 1]):
        return {
            "region": {**region, "snippet": {"text": meant}},
            "contextRegion": {**line, **snippet},
        }
    return {"region": region}


def uri(file: str) -> str:
    """The address of a file: relative to the working folder where it lies below it, else absolute.

    Percent-encoded, with forward slashes (RFC 3986).
    """
    here = Path.cwd()
    for path in (os.path.abspath(file), os.path.realpath(file)):  # noqa: PTH100 - `..` is taken out
        if Path(path).is_relative_to(here):
            return urllib.parse.quote(os.fsencode(Path(path).relative_to(here).as_posix()))
    return Path(os.path.abspath(file)).as_uri()  # noqa: PTH100
