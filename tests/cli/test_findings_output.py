"""How findings and unreadable files are shown, silenced and handed to code scanning services."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from rcnet.circuit import Circuit
from rcnet.errors import CircuitError, Problem
from rcnet.findings import Finding, Remark, all_rules, rule
from rcnet.findings.finding import RULES
from rcnet.report.document import finding_document

from .conftest import FAILS, FILTER, HOLDS, WARNS, Ended, circuit

Rcnet = Callable[..., Ended]
DANGLING = FILTER.replace('C1 = "out 0 10n 5%"', 'C1 = "out 0 10n 5%"\nR2 = "out uot 1k"')
MILLIOHM = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1M\nC1 out 0 1u\n.ac dec 5 1 1k\n.print ac v(out)\n.end\n"


@pytest.fixture
def pointing(monkeypatch: pytest.MonkeyPatch) -> None:
    """A rule that points at the first `uot` on the line of R2."""
    all_rules()  # so that they are there to be copied
    monkeypatch.setattr("rcnet.findings.finding.RULES", dict(RULES))

    @rule("test-pointer", "warning")
    def _(circuit: Circuit) -> Iterator[Remark]:
        """A place on a line."""
        yield Remark("this node is touched once.", "Check it.", circuit.place_of("R2").at("uot"))


def unread(monkeypatch: pytest.MonkeyPatch, *problems: Problem) -> None:
    """Let every file be one that cannot be read."""

    def refuse(_: str) -> Circuit:
        raise CircuitError(problems=problems)

    monkeypatch.setattr("rcnet.loading.load", refuse)


# ---------------------------------------------------------------------- carets


@pytest.mark.usefixtures("pointing")
def test_carets_under_what_is_meant(rcnet: Rcnet) -> None:
    """The line, and beneath it carets under the characters that the finding is about."""
    for text in (DANGLING, DANGLING.replace('R2 = "out', '  \tR2 = "out')):
        ended = rcnet("check", circuit("gauge.rc.toml", text=text))
        assert '\n    | R2 = "out uot 1k"\n                ^^^\n' in ended.out


@pytest.mark.usefixtures("pointing")
def test_a_caret_in_a_long_line(rcnet: Rcnet) -> None:
    """A line of any length is cut around the place, in 80 columns and in fewer."""
    text = DANGLING.replace('R2 = "out uot', f'R2 = "{" " * 200}out uot')
    ended = rcnet("check", circuit("gauge.rc.toml", text=text))
    lines = ended.out.splitlines()
    shown = [number for number, line in enumerate(lines) if line.startswith("    | ...") and "uot" in line]
    assert shown
    assert all(lines[number + 1].index("^^^") == lines[number].index("uot") for number in shown)
    assert all(len(line) <= 80 and line == line.rstrip() for line in lines)


@pytest.mark.usefixtures("pointing")
def test_column_and_width_in_the_document(rcnet: Rcnet) -> None:
    """The JSON document tells them too; null and 1 where the place on the line is not known."""
    found = json.loads(rcnet("check", "--json", circuit("gauge.rc.toml", text=DANGLING)).out)["findings"]
    told = {item["code"]: (item["column"], item["width"]) for item in found}
    assert told["test-pointer"] == (11, 3)
    nowhere = finding_document(Finding("dangling", "warning", "It dangles.", "gauge.cir", 3, "Mend it."))
    assert (nowhere["column"], nowhere["width"]) == (None, 1)


# ---------------------------------------------------------------------- unreadable files

MISSING = Problem(
    "R1 has no value.", "bad.cir", 3, "Give it one.", "value-missing", "  R1 a 0 ; the shunt", 10, 1
)
CLEFT = "rcnet: bad.cir:3: R1 has no value. Give it one.{code}\n  | R1 a 0 ; the shunt\n           ^\n"


@pytest.mark.parametrize("verb", ["check", "confirm", "response", "netlist", "simulate"])
def test_an_unreadable_line_is_shown(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch, verb: str) -> None:
    """The sentence, the line, the caret; `check` tells the broken rule's name too."""
    unread(monkeypatch, MISSING)
    ended = rcnet(verb, "bad.cir")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err == CLEFT.format(code=" [value-missing]" if verb == "check" else "")


def test_a_problem_without_a_place_on_its_line(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """A sentence alone where no column is known; each of several problems has its own excerpt."""
    unread(monkeypatch, replace(MISSING, column=None), MISSING, replace(MISSING, text="", code=None))
    ended = rcnet("check", "bad.cir")
    sentence = "rcnet: bad.cir:3: R1 has no value. Give it one."
    assert ended.err == (f"{sentence} [value-missing]\n{CLEFT.format(code=' [value-missing]')}{sentence}\n")


def test_a_line_of_a_stranger_is_shown_as_text(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """Escape codes in it are not obeyed, and however long it is it fits."""
    text = "\x1b[31m" + "x" * 500 + "\rrcnet: fake: all is well"
    unread(monkeypatch, replace(MISSING, text=text, column=507, width=3))
    ended = rcnet("check", "bad.cir")
    assert "\x1b" not in ended.err
    assert "\r" not in ended.err
    assert not re.search("^rcnet: fake", ended.err, re.MULTILINE)
    assert all(len(line) <= 80 for line in ended.err.splitlines()[1:])


@pytest.mark.parametrize("verb", ["check", "confirm", "netlist"])
def test_code_and_column_of_an_error_in_the_document(
    rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch, verb: str
) -> None:
    """An error as JSON has them, null where they are not known; no code is added to its sentence."""
    unread(monkeypatch, MISSING, Problem("it is too large.", "bad.cir"))
    ended = rcnet(verb, "--json", "bad.cir")
    first, second = json.loads(ended.out)["errors"]
    assert set(first) == {"message", "file", "line", "remedy", "code", "column"}
    assert (first["code"], first["column"]) == ("value-missing", 10)
    assert (second["code"], second["column"], second["line"]) == (None, None, None)
    assert "[value-missing]" not in ended.err


# ---------------------------------------------------------------------- silence


def test_silenced_findings_are_counted_not_told(rcnet: Rcnet) -> None:
    """The first line tells how many; the exit code is that of what is left."""
    file = circuit("gauge.rc.toml", WARNS, text=DANGLING)
    loud = rcnet("check", file)
    assert loud.out.startswith("gauge: holds (claims: 1 holds; 2 warnings)\n")
    quiet = rcnet("check", "--silence", "dangling", file)
    assert quiet.out.startswith("gauge: holds (claims: 1 holds; 1 warning; 1 silenced)\n")
    assert "dangling" not in quiet.out
    assert rcnet("check", "--strict", "--silence", "dangling", file).code == 1
    both = ("--silence", "dangling", "--silence", "hand-misleads")
    assert rcnet("check", "--strict", *both, file).code == 0
    document = json.loads(rcnet("check", "--json", *both, file).out)
    assert (document["findings"], document["silenced"]) == ([], 2)


def test_the_circuit_file_silences(rcnet: Rcnet) -> None:
    """A file's own list does the same; a slip in it is a warning with the line."""
    text = DANGLING.replace("[parts]", 'silence = ["dangling", "hand-mislead"]\n[parts]')
    ended = rcnet("check", circuit("gauge.rc.toml", text=text))
    assert ended.code == 0
    assert ended.out.splitlines() == [
        "gauge: holds (no claims; 1 warning; 1 silenced)",
        "  warning unknown-silence  gauge.rc.toml:3",
        '    | silence = ["dangling", "hand-mislead"]',
        "                              ^^^^^^^^^^^^",
        "    No rule is called 'hand-mislead'; did you mean 'hand-misleads'?",
        "    -> `rcnet check --rules` lists the rules.",
    ]


SILENCING = {
    "check": ["check"],
    "confirm": ["confirm", "--second-opinion", "none"],
    "netlist": ["netlist"],
    "simulate": ["simulate"],
}


@pytest.mark.parametrize(
    "verb",
    [pytest.param(verb, marks=pytest.mark.ngspice if verb == "simulate" else ()) for verb in SILENCING],
)
def test_every_verb_that_tells_findings_can_be_silenced(rcnet: Rcnet, verb: str) -> None:
    """An error that is silenced stops nothing, and is told nowhere but in a seal."""
    Path("gauge.cir").write_text(MILLIOHM, encoding="utf-8")
    before = rcnet(*SILENCING[verb], "gauge.cir")
    assert before.code == 1
    assert "odd-number" in before.out + before.err
    after = rcnet(*SILENCING[verb], "--silence", "odd-number", "gauge.cir")
    assert after.code == 0
    told = [line for line in (after.out + after.err).splitlines() if "odd-number" in line]
    assert told == (["*   silenced: 1 finding (odd-number)"] if verb == "netlist" else [])


@pytest.mark.parametrize("verb", SILENCING)
def test_a_rule_that_there_is_not(rcnet: Rcnet, verb: str) -> None:
    """Wrong usage, with the nearest rule named; nothing is done."""
    ended = rcnet(*SILENCING[verb], "--silence", "dangle", circuit("gauge.rc.toml", HOLDS))
    assert (ended.code, ended.out) == (2, "")
    assert "'--silence': No rule is called 'dangle'; did you mean 'dangling'?" in ended.err
    assert [path.name for path in Path().iterdir()] == ["gauge.rc.toml"]


# ---------------------------------------------------------------------- SARIF


def log(path: str) -> Any:
    """A log's only run."""
    (run,) = json.loads(Path(path).read_text(encoding="utf-8"))["runs"]
    return run


def test_one_log_for_all_files(rcnet: Rcnet) -> None:
    """Findings, claims and files that cannot be read, in one log; output and exit code stay as they are."""
    files = [circuit("pumps/one.rc.toml", FAILS, text=DANGLING), "absent.cir", circuit("two.rc.toml", HOLDS)]
    before = rcnet("check", *files)
    assert rcnet("check", "--sarif", "log.sarif", *files) == before
    assert before.code == 2
    run = log("log.sarif")
    told = [
        (item["ruleId"], item["locations"][0]["physicalLocation"]["artifactLocation"]["uri"])
        for item in run["results"]
    ]
    assert told == [
        ("dangling", "pumps/one.rc.toml"),
        ("claim-fails", "pumps/one.rc.toml"),
        ("unreadable", "absent.cir"),
    ]
    assert not run["invocations"][0]["executionSuccessful"]
    assert {path.name for path in Path().iterdir()} == {"pumps", "two.rc.toml", "log.sarif"}


def test_a_log_of_nothing(rcnet: Rcnet) -> None:
    """A sound circuit has a log with an empty list: looked, and found nothing."""
    ended = rcnet("check", "--sarif", "log.sarif", circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 0
    assert log("log.sarif")["results"] == []


def test_the_log_on_standard_output(rcnet: Rcnet) -> None:
    """Then nothing else stands there; what is told otherwise goes to standard error."""
    file = circuit("gauge.rc.toml", text=DANGLING)
    ended = rcnet("check", "--sarif", "-", file, "absent.cir")
    assert ended.code == 2
    assert [item["ruleId"] for item in json.loads(ended.out)["runs"][0]["results"]] == [
        "dangling",
        "unreadable",
    ]
    assert "gauge: holds (" in ended.err
    assert ended.err.endswith("2 circuits: 1 holds, 1 could not be done\n")
    clash = rcnet("check", "--json", "--sarif", "-", file)
    assert clash.code == 2
    assert "--json does not go with --sarif -." in clash.err


def test_the_log_beside_the_document(rcnet: Rcnet) -> None:
    """With --json the document is on standard output, and the log in its file."""
    file = circuit("gauge.rc.toml", text=DANGLING)
    ended = rcnet("check", "--json", "--silence", "dangling", "--sarif", "log.sarif", file)
    assert json.loads(ended.out)["silenced"] == 1
    (result,) = log("log.sarif")["results"]
    assert result["suppressions"] == [{"kind": "external"}]


UNWRITABLE = {
    "a folder": ("taken", r"^rcnet: taken: a folder of that name stands there\."),
    "no such folder": ("nowhere/log.sarif", r"^rcnet: nowhere/log.sarif: the folder for it does not exist\."),
}


@pytest.mark.parametrize("as_json", [[], ["--json"]], ids=["text", "json"])
@pytest.mark.parametrize("case", UNWRITABLE)
def test_a_place_that_cannot_be_written(rcnet: Rcnet, case: str, as_json: list[str]) -> None:
    """One sentence and 2; as JSON it is the only document."""
    place, says = UNWRITABLE[case]
    Path("taken").mkdir()
    ended = rcnet("check", *as_json, "--sarif", place, circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 2
    assert re.search(says, ended.err)
    assert ended.err.count("\n") == 1
    if as_json:
        assert json.loads(ended.out)["errors"][0]["file"] == place


@pytest.mark.parametrize("place", ["gauge.rc.toml", "./gauge.rc.toml", "other.rc.toml"])
def test_an_input_is_not_overwritten(rcnet: Rcnet, place: str) -> None:
    """However its path is spelt, and whichever of the inputs it is."""
    files = [circuit("gauge.rc.toml", HOLDS), circuit("other.rc.toml", HOLDS)]
    before = [Path(file).read_text(encoding="utf-8") for file in files]
    ended = rcnet("check", "--sarif", place, *files)
    assert (ended.code, ended.out) == (2, "")
    assert "this would overwrite the input" in ended.err
    assert "--sarif" in ended.err
    assert [Path(file).read_text(encoding="utf-8") for file in files] == before


def test_an_included_file_is_not_overwritten(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """What a netlist includes is an input too."""
    from rcnet import loading

    load = loading.load
    Path("part.inc").write_text("R1 a b 1k\n", encoding="utf-8")
    monkeypatch.setattr("rcnet.loading.load", lambda file: replace(load(file), files=(file, "part.inc")))
    ended = rcnet("check", "--sarif", "part.inc", circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 2
    assert "this would overwrite the input 'part.inc'" in ended.err
    assert Path("part.inc").read_text(encoding="utf-8") == "R1 a b 1k\n"
