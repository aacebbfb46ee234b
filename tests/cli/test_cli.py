"""Every verb: what it prints, what it writes, how it ends."""

from __future__ import annotations

import json
import os
import pty
import re
import select
import subprocess
import sys
from collections.abc import Callable
from importlib.metadata import version
from pathlib import Path
from typing import Any

import pytest

from rcnet.cli.main import _VERBS
from rcnet.cli.options import folder_names
from rcnet.curves import read_results

from .conftest import BROKEN, FAILS, FILTER, HOLDS, OPEN, WARNS, Ended, circuit, program

Rcnet = Callable[..., Ended]
ESCAPE = "\x1b"
READ_BACK = ("--second-opinion", "read-back")


def document(ended: Ended) -> Any:
    """The one JSON document on standard output."""
    return json.loads(ended.out, parse_constant=lambda word: pytest.fail(f"{word} is no JSON"))


def tidy(text: str) -> None:
    """Fail on a line of more than 80 columns, a blank at its end, or an escape code."""
    assert ESCAPE not in text
    for line in text.splitlines():
        assert len(line) <= 80, line
        assert line == line.rstrip(), line


# ---------------------------------------------------------------------- help, version, completion


@pytest.mark.parametrize("verb", _VERBS)
def test_help_has_an_example(rcnet: Rcnet, verb: str) -> None:
    """The help of every verb ends with 0 and shows how the verb is used."""
    ended = rcnet(verb, "--help")
    assert ended.code == 0
    assert re.search(rf"^    rcnet {verb}( |$)", ended.out, re.MULTILINE)
    assert all(len(line) <= 80 for line in ended.out.splitlines())


def test_help_lists_every_verb(rcnet: Rcnet) -> None:
    """`rcnet --help` lists the verbs, each with a sentence that is not cut off."""
    ended = rcnet("--help")
    assert ended.code == 0
    commands = ended.out.split("Commands:")[1].split("\n\n")[0].strip().splitlines()
    assert [line.split()[0] for line in commands] == list(_VERBS)
    assert not any(line.endswith("...") for line in commands)
    assert "130 interrupted" in ended.out


def test_version(rcnet: Rcnet) -> None:
    """`rcnet --version` tells the version that is installed."""
    assert rcnet("--version") == Ended(0, f"rcnet {version('rcnet')}\n", "")


@pytest.mark.parametrize(
    ("shell", "sign"), [("bash", "complete "), ("zsh", "compdef"), ("fish", "complete ")]
)
def test_completion(rcnet: Rcnet, shell: str, sign: str) -> None:
    """`rcnet --completion SHELL` prints a script for that shell."""
    ended = rcnet("--completion", shell)
    assert ended.code == 0
    assert "_RCNET_COMPLETE" in ended.out
    assert sign in ended.out


USAGE = {
    "no such verb": ["chekc"],
    "no such option": ["check", "--colour", "f.cir"],
    "no file": ["check"],
    "no second opinion of that name": ["confirm", "--second-opinion", "oracle", "f.cir"],
    "no time": ["confirm", "--timeout", "0", "f.cir"],
    "wrong first": ["--colour", "check", "f.cir"],
}


@pytest.mark.parametrize("case", USAGE)
def test_wrong_usage(rcnet: Rcnet, case: str) -> None:
    """Wrong usage ends with 2, a sentence on standard error and nothing on standard output."""
    ended = rcnet(*USAGE[case])
    assert (ended.code, ended.out) == (2, "")
    assert "Error: " in ended.err


USAGE_AS_JSON = {
    "two forms at once": (["response", "--json", "--csv", "f.cir"], "--json does not go with --csv."),
    "no such option": (["check", "--colour", "--json", "f.cir"], "No such option '--colour'."),
    "no file": (["check", "--json"], "Missing argument 'FILE...'."),
}


@pytest.mark.parametrize("case", USAGE_AS_JSON)
def test_wrong_usage_as_json(rcnet: Rcnet, case: str) -> None:
    """Where JSON was asked for, wrong usage is a document like every other error."""
    arguments, says = USAGE_AS_JSON[case]
    ended = rcnet(*arguments)
    assert ended.code == 2
    (error,) = document(ended)["errors"]
    assert (error["message"], error["file"]) == (says, None)
    assert f"rcnet {arguments[0]} --help" in error["remedy"]


# ---------------------------------------------------------------------- check

CODES = {
    "holds": ((HOLDS,), 0, 0, "holds"),
    "no claims": ((), 0, 0, "holds"),
    "fails": ((HOLDS, FAILS), 1, 1, "fails"),
    "undecided": ((OPEN,), 1, 1, "undecided"),
    "warns": ((WARNS,), 0, 1, "holds"),
}


@pytest.mark.parametrize("case", CODES)
def test_check_exit_codes(rcnet: Rcnet, case: str) -> None:
    """0 where everything holds, 1 where not; a warning counts under --strict only."""
    claims, code, strict, verdict = CODES[case]
    file = circuit("gauge.rc.toml", *claims)
    ended = rcnet("check", file)
    assert ended.code == code
    assert ended.out.startswith(f"gauge: {verdict} (")
    assert ended.err == ""
    tidy(ended.out)
    assert rcnet("check", "--strict", file).code == strict
    assert rcnet("check", "--json", file).code == code


def test_check_of_an_error(rcnet: Rcnet) -> None:
    """A finding of severity error is 1, with its place, the line itself and the remedy."""
    ended = rcnet("check", circuit("broken.rc.toml", text=BROKEN))
    assert ended.code == 1
    assert re.search(r"^  error \S+  broken.rc.toml:\d+$", ended.out, re.MULTILINE)
    assert '    | R2 = "x y 1k"' in ended.out
    assert re.search(r"^    -> ", ended.out, re.MULTILINE)
    tidy(ended.out)


def test_check_tells_claims_with_numbers(rcnet: Rcnet) -> None:
    """Each claim is told with its exact value, what was wanted and what the hand says."""
    ended = rcnet("check", circuit("gauge.rc.toml", WARNS, FAILS))
    # 1/(2 pi 10k 10n) = 1591.549 Hz; without the 2 pi 10 kHz, 2 pi times as much
    assert re.search(r"^    verdict  exact +by hand +wanted +margin$", ended.out, re.MULTILINE)
    assert re.search(r"^    holds +1\.592 kHz  10 kHz \(\+528 %\)", ended.out, re.MULTILINE)
    assert re.search(r"^  Corner\n    fails +1\.592 kHz +at least 2 kHz +-408 Hz$", ended.out, re.MULTILINE)


def test_check_document(rcnet: Rcnet) -> None:
    """`check --json` prints the interface's document and nothing else; with several files a list."""
    one, two = circuit("one.rc.toml", WARNS, OPEN), circuit("two.rc.toml", FAILS)
    got = document(rcnet("check", "--json", one))
    assert set(got) == {"circuit", "verdict", "findings", "claims", "silenced"}
    assert (got["circuit"], got["verdict"]) == ("one", "undecided")
    (finding,) = got["findings"]
    assert set(finding) == {"code", "severity", "message", "file", "line", "remedy", "column", "width"}
    assert (finding["severity"], finding["file"]) == ("warning", one)
    holds, undecided = got["claims"]
    for claim in (holds, undecided):
        assert set(claim) == {
            *("says", "measure", "of", "unit", "exact", "hand", "low", "high"),
            *("method", "margin", "verdict", "why", "limiting", "needed"),
        }
    assert (holds["says"], holds["measure"], holds["of"], holds["unit"]) == ("Corner", "cutoff", "out", "Hz")
    assert holds["exact"] == pytest.approx(1591.549430918953, rel=1e-12)
    assert holds["hand"] == pytest.approx(1e4, rel=1e-12)
    assert holds["margin"] == pytest.approx(1590 * 1.01 - 1591.549430918953, rel=1e-9)
    assert (holds["method"], holds["low"], holds["high"], holds["why"]) == ("nominal", None, None, None)
    assert (undecided["exact"], undecided["verdict"]) == (None, "undecided")
    assert "no lower cutoff" in undecided["why"]
    both = document(rcnet("check", "--json", one, two))
    assert [item["circuit"] for item in both] == ["one", "two"]


def test_check_goes_on_after_a_file_that_cannot_be_read(rcnet: Rcnet) -> None:
    """One bad file among several is 2, with its sentence; the others are checked all the same."""
    good = circuit("good.rc.toml", HOLDS)
    ended = rcnet("check", "absent.rc.toml", good)
    assert ended.code == 2
    assert ended.err == "rcnet: absent.rc.toml: there is no such file. Check the name and the folder.\n"
    assert "good: holds" in ended.out
    assert ended.out.endswith("2 circuits: 1 holds, 1 could not be done\n")
    listed = document(rcnet("check", "--json", "absent.rc.toml", good))
    assert listed[0]["errors"][0]["message"] == "there is no such file."
    assert (listed[0]["circuit"], listed[0]["verdict"]) == ("absent", None)
    assert listed[1]["verdict"] == "holds"


def test_check_of_a_netlist(rcnet: Rcnet) -> None:
    """A netlist is checked like a circuit file."""
    Path("gauge.cir").write_text("* gauge\nV1 in 0 AC 1\nR1 in out 1M\nC1 out 0 1n\n.end\n", encoding="utf-8")
    ended = rcnet("check", "gauge.cir")
    assert ended.code == 1
    assert "gauge.cir:3" in ended.out
    assert "milli" in ended.out


def test_check_writes_nothing(rcnet: Rcnet) -> None:
    """`check` leaves the folder as it was."""
    file = circuit("gauge.rc.toml", HOLDS)
    rcnet("check", file)
    assert [path.name for path in Path.cwd().iterdir()] == ["gauge.rc.toml"]


def test_rules(rcnet: Rcnet) -> None:
    """`check --rules` lists every rule with its severity and what it looks for."""
    ended = rcnet("check", "--rules")
    assert ended.code == 0
    assert re.search(r"^floating \(error\)$", ended.out, re.MULTILINE)
    assert all(len(line) <= 80 for line in ended.out.splitlines())
    for order in (["--rules", "--json"], ["--json", "--rules"]):
        listed = document(rcnet("check", *order))
        assert all(set(item) == {"code", "severity", "about"} for item in listed)
        assert [f"{item['code']} ({item['severity']})" for item in listed] == [
            line for line in ended.out.splitlines() if line[0] != " "
        ]


def test_long_words_stay_whole(rcnet: Rcnet) -> None:
    """Prose is wrapped at 80 columns; a path is never cut."""
    folder = "a-folder-with-a-long-name/" * 4
    ended = rcnet("check", circuit(f"{folder}gauge.rc.toml", WARNS))
    assert f"{folder}gauge.rc.toml:" in ended.out
    for line in ended.out.splitlines():
        assert len(line) <= 80 or folder in line


def test_control_characters_are_shown_not_obeyed(rcnet: Rcnet) -> None:
    """What a claim says cannot move the cursor, change colours or look like a line of its own."""
    claim = HOLDS.replace('"Corner"', '"Corner\\u001b[31m\\u202e\\nfake: holds"')
    ended = rcnet("check", circuit("gauge.rc.toml", claim))
    assert ESCAPE not in ended.out + ended.err
    assert "\u202e" not in ended.out + ended.err
    assert not re.search(r"^fake", ended.out + ended.err, re.MULTILINE)


# ---------------------------------------------------------------------- quiet


def test_quiet_is_one_line_for_each_circuit(rcnet: Rcnet) -> None:
    """`--quiet` prints one line for each circuit, and the total where there are several."""
    long = circuit(
        "a-name-of-a-circuit-that-is-long-enough-to-make-its-line-longer-than-eighty.rc.toml", WARNS
    )
    for verb in (("check",), ("confirm", *READ_BACK)):
        one = rcnet(*verb, "--quiet", long)
        assert one.code == 0
        assert one.out.count("\n") == 1
        two = rcnet(*verb, "--quiet", long, circuit("gauge.rc.toml", FAILS))
        assert two.code == 1
        assert two.out.count("\n") == 3


# ---------------------------------------------------------------------- confirm


@pytest.mark.ngspice
def test_confirm_with_ngspice(rcnet: Rcnet) -> None:
    """The main job with ngspice: 0, and out/NAME/ holds netlist, results, log and comparison."""
    ended = rcnet("confirm", circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 0
    assert ended.err == ""
    assert ended.out.startswith("gauge: passes (claims: 1 holds)\n")
    assert re.search(
        r"^  agrees with ngspice-\S+: 3 operating point curves, 3 ac curves$", ended.out, re.MULTILINE
    )
    tidy(ended.out)
    names = {path.name for path in Path("out/gauge").iterdir()}
    assert names == {"netlist.cir", "results.raw", "simulator.log", "comparison.json"}
    assert {curve.name for curve in read_results("out/gauge/results.raw").of("ac")} == {
        "v(in)",
        "v(out)",
        "i(vin)",
    }
    comparison = json.loads(Path("out/gauge/comparison.json").read_text(encoding="utf-8"))
    assert (comparison["circuit"], comparison["verdict"]) == ("gauge", "agree")
    assert Path("out/gauge/netlist.cir").read_text(encoding="utf-8").startswith("* Float gauge")


@pytest.mark.ngspice
def test_what_confirm_keeps_runs_in_ngspice(rcnet: Rcnet) -> None:
    """The netlist that is kept runs in ngspice as it stands, and its results agree when handed in."""
    file = circuit("gauge.rc.toml", HOLDS)
    rcnet("confirm", file)
    subprocess.run(
        ["ngspice", "-b", "-n", "-r", "own.raw", "out/gauge/netlist.cir"], check=True, capture_output=True
    )
    ended = rcnet("compare", file, "own.raw")
    assert (ended.code, ended.err) == (0, "")
    assert ended.out.startswith("gauge: agrees with own.raw (")


def test_confirm_without_ngspice(rcnet: Rcnet, without_ngspice: None) -> None:
    """Without ngspice the read-back is asked, and its ac curves are kept as CSV."""
    ended = rcnet("confirm", circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 0
    assert "  agrees with read-back: " in ended.out
    names = {path.name for path in Path("out/gauge").iterdir()}
    assert names == {"netlist.cir", "read-back.csv", "comparison.json"}
    header = Path("out/gauge/read-back.csv").read_text(encoding="utf-8").splitlines()[0]
    assert header.startswith("frequency,")


@pytest.mark.parametrize("verb", [("confirm", "--second-opinion", "ngspice"), ("simulate",)])
def test_demanding_ngspice_without_it(rcnet: Rcnet, without_ngspice: None, verb: tuple[str, ...]) -> None:
    """Demanding ngspice where there is none is 2, with how to install it and how to go on without."""
    ended = rcnet(*verb, circuit("gauge.rc.toml", HOLDS))
    assert (ended.code, ended.out) == (2, "")
    assert "ngspice is not installed here" in ended.err
    assert "apt install ngspice" in ended.err
    assert "rcnet compare" in ended.err
    assert ended.err.count("\n") == 1


def test_confirm_with_no_second_opinion(rcnet: Rcnet) -> None:
    """With `--second-opinion none` the netlist alone is kept, and the claims decide."""
    ended = rcnet("confirm", "--second-opinion", "none", circuit("gauge.rc.toml", HOLDS))
    assert ended.code == 0
    assert "no second opinion was asked for" in ended.out.replace("\n  ", " ")
    assert {path.name for path in Path("out/gauge").iterdir()} == {"netlist.cir"}


def test_confirm_exit_codes(rcnet: Rcnet) -> None:
    """1 where a claim fails, is undecided, or (strict) a warning was found; the files are kept anyway."""
    for claims, strict, code in ((FAILS, (), 1), (OPEN, (), 1), (WARNS, (), 0), (WARNS, ("--strict",), 1)):
        ended = rcnet("confirm", *READ_BACK, *strict, circuit("gauge.rc.toml", claims))
        assert ended.code == code
        assert Path("out/gauge/comparison.json").exists()


def test_confirm_refuses_a_broken_circuit(rcnet: Rcnet) -> None:
    """With an error among the findings no netlist is written, and not even a folder."""
    file = circuit("broken.rc.toml", text=BROKEN)
    ended = rcnet("confirm", *READ_BACK, file)
    assert ended.code == 1
    assert "broken: fails (" in ended.out
    assert "--anyway" in ended.out
    assert not Path("out").exists()


def test_confirm_anyway(rcnet: Rcnet) -> None:
    """With --anyway the netlist is written, says so in its seal, and the exit code stays 1."""
    text = "* gauge\nV1 in 0 AC 1\nR1 in out 1M\nC1 out 0 1n\n.ac dec 5 1 1k\n.print ac v(out)\n.end\n"
    Path("gauge.cir").write_text(text, encoding="utf-8")
    ended = rcnet("confirm", *READ_BACK, "--anyway", "gauge.cir")
    assert ended.code == 1
    assert "--anyway" in Path("out/gauge/netlist.cir").read_text(encoding="utf-8")


def test_confirm_document(rcnet: Rcnet) -> None:
    """`confirm --json` holds the check, the comparison and the files; with several circuits a list."""
    file = circuit("gauge.rc.toml", HOLDS)
    got = document(rcnet("confirm", *READ_BACK, "--json", file))
    assert (got["circuit"], got["verdict"], got["folder"]) == ("gauge", "passes", str(Path("out/gauge")))
    assert got["check"]["verdict"] == "holds"
    assert got["comparison"]["second_opinion"] == "read-back"
    assert got["files"] == ["netlist.cir", "read-back.csv", "comparison.json"]
    both = document(rcnet("confirm", *READ_BACK, "--json", file, "absent.cir"))
    assert (both[0]["verdict"], "errors" in both[1]) == ("passes", True)


def test_stale_results_go(rcnet: Rcnet) -> None:
    """What an earlier run left goes: by a run that writes less, one that fails, or a file gone bad."""
    folder = Path("out/gauge")
    stale = ("results.raw", "simulator.log", "comparison.json", "report.html")

    def plant() -> None:
        folder.mkdir(parents=True, exist_ok=True)
        for name in stale:
            (folder / name).write_text("old", encoding="utf-8")
        (folder / "notes.txt").write_text("mine", encoding="utf-8")

    for text, code in ((FILTER + HOLDS, 0), (BROKEN, 1), ("[parts", 2)):
        plant()
        assert rcnet("confirm", *READ_BACK, circuit("gauge.rc.toml", text=text)).code == code
        left = {path.name for path in folder.iterdir()}
        assert "notes.txt" in left
        assert all((folder / name).read_text(encoding="utf-8") != "old" for name in left & set(stale))
    assert left == {"notes.txt"}


def test_names_that_clash(rcnet: Rcnet) -> None:
    """Two files of one name in different folders get the folder's name before theirs."""
    files = [circuit(f"{site}/gauge.rc.toml", HOLDS) for site in ("north", "south")]
    assert rcnet("confirm", *READ_BACK, "--quiet", *files, circuit("pump.rc.toml", HOLDS)).code == 0
    assert {path.name for path in Path("out").iterdir()} == {"north-gauge", "south-gauge", "pump"}


NAMES = {
    "alone": (["a/x.rc.toml"], ["x"]),
    "netlist and circuit of one name": (["a/x.rc.toml", "a/x.cir"], ["a-x", "a-x-2"]),
    "the same file twice": (["a/x.cir", "a/x.cir"], ["x"]),
    "case is no difference": (["a/X.cir", "b/x.cir"], ["a-X", "b-x"]),
    "a name of dots stays inside": (["...rc.toml"], ["circuit"]),
}


@pytest.mark.parametrize("case", NAMES)
def test_folder_names(case: str) -> None:
    """NAME is the file's name without its suffixes, made different where two would clash."""
    files, names = NAMES[case]
    assert list(folder_names(files).values()) == names


def test_output_folder(rcnet: Rcnet) -> None:
    """`-o` names another folder for the results."""
    assert rcnet("confirm", *READ_BACK, "-o", "deep/er", circuit("gauge.rc.toml", HOLDS)).code == 0
    assert Path("deep/er/gauge/netlist.cir").exists()
    assert not Path("out").exists()


# ---------------------------------------------------------------------- response


def test_response_table(rcnet: Rcnet) -> None:
    """The response as a table: at the corner -3.0103 dB and -45 degrees."""
    ended = rcnet("response", circuit(), "--at", "1.591549430918953 kHz", "--at", "50 Hz")
    assert (ended.code, ended.err) == (0, "")
    tidy(ended.out)
    heading, low, corner = (line.split() for line in ended.out.splitlines())
    assert heading == ["frequency", "v(out)", "dB", "deg"]
    assert low[:2] == ["50", "Hz"]
    assert corner == ["1.59155", "kHz", "-3.0103", "-45.000"]


def test_response_of_many_nodes_stays_narrow(rcnet: Rcnet) -> None:
    """More curves than fit side by side come in blocks one below the other."""
    ended = rcnet("response", circuit(), "--at", "50", *(["--of", "out", "--of", "in", "--of", "in out"] * 2))
    assert ended.code == 0
    tidy(ended.out)
    assert ended.out.count("frequency") > 1


def test_response_csv_and_json(rcnet: Rcnet) -> None:
    """CSV reads back to the same doubles as JSON gives, on standard output and in files."""
    file = circuit()
    sweep = ("--from", "10", "--to", "1 kHz", "--per-decade", "2")
    got = document(rcnet("response", "--json", file, *sweep))
    assert set(got) == {"frequency", "curves"}
    assert len(got["frequency"]) == 5
    assert (got["frequency"][0], got["frequency"][-1]) == (10, pytest.approx(1000))
    table = got["curves"]["v(out)"]
    h = [1 / (1 + 2j * 3.141592653589793 * f * 1e-4) for f in got["frequency"]]
    assert table["real"] == pytest.approx([value.real for value in h], rel=1e-12)
    assert table["imag"] == pytest.approx([value.imag for value in h], rel=1e-12)
    printed = rcnet("response", "--csv", file, *sweep)
    for name in ("r.csv", "r.json"):
        ended = rcnet("response", file, *sweep, "-o", name)
        assert ended == Ended(0, "", "")
    assert Path("r.csv").read_bytes().decode() == printed.out
    assert json.loads(Path("r.json").read_text(encoding="utf-8")) == got
    curve = read_results("r.csv").curves[0]
    assert curve.values.real.tolist() == table["real"]


RESPONSE_ERRORS = {
    "another suffix": (["-o", "r.xls"], "'.xls'"),
    "no suffix": (["-o", "r"], "no suffix"),
    "a node there is none of": (["--of", "nowhere"], "'nowhere'"),
    "at with from": (["--at", "1", "--from", "1"], "--at does not go with"),
    "a frequency that is none": (["--at", "soon"], "--at"),
    "endless frequency": (["--at", "inf"], "--at"),
    "a huge frequency": (["--at", "1e308"], "--at is 1e+308 Hz"),
    "a frequency next to nothing": (["--at", "1e-320"], "--at is 1e-320 Hz"),
    "from next to nothing": (["--from", "1e-320"], "between 1e-30 Hz and 1e+30 Hz"),
    "to the end of numbers": (["--to", "1e308"], "between 1e-30 Hz and 1e+30 Hz"),
    "another case in a circuit file": (["--of", "OUT"], "'OUT'"),
    "negative frequency": (["--at", "-5"], "--at"),
    "backwards": (["--from", "1 kHz", "--to", "10"], "the sweep"),
    "ohms": (["--from", "1 kohm"], "--from"),
}


@pytest.mark.parametrize("case", RESPONSE_ERRORS)
def test_response_errors(rcnet: Rcnet, case: str) -> None:
    """What cannot be asked of a response is 2 and one sentence."""
    options, says = RESPONSE_ERRORS[case]
    ended = rcnet("response", circuit(), *options)
    assert (ended.code, ended.out) == (2, "")
    assert says in ended.err
    assert ended.err.count("\n") == 1


@pytest.mark.parametrize("given", ["OUT", "v(out)", "V(Out)", " v( out ) "])
def test_response_of_a_netlists_node(rcnet: Rcnet, given: str) -> None:
    """Nodes of a netlist are found in any case, and as the voltage a netlist would print."""
    Path("g.cir").write_text("* g\nV1 in 0 AC 1\nR1 in out 10k\nC1 out 0 10n\n.end\n", encoding="utf-8")
    wanted = rcnet("response", "g.cir", "--at", "1 kHz", "--of", "out")
    assert wanted.code == 0
    assert rcnet("response", "g.cir", "--at", "1 kHz", "--of", given) == wanted


def test_response_of_a_pair(rcnet: Rcnet) -> None:
    """A pair is given as two words or as v(a,b)."""
    wanted = rcnet("response", circuit(), "--at", "1 kHz", "--of", "in out")
    assert wanted.code == 0
    assert rcnet("response", circuit(), "--at", "1 kHz", "--of", "v(in, out)") == wanted


def test_response_table_without_headings(rcnet: Rcnet) -> None:
    """--quiet leaves the rows; a value that rounds to zero has no sign."""
    whole = rcnet("response", circuit(), "--at", "1e-6")
    ended = rcnet("response", circuit(), "--at", "1e-6", "--quiet")
    assert ended.out == whole.out.split("\n", 1)[1]
    assert ended.out.split()[-2:] == ["0.0000", "0.000"]


def test_response_of_a_circuit_without_ac_analysis(rcnet: Rcnet) -> None:
    """Where the circuit asks for an operating point only, --from and --to are enough."""
    text = FILTER.replace('ac = { from = "10", to = "1 MHz", per_decade = 10 }\n', "")
    file = circuit("gauge.rc.toml", text=text)
    assert rcnet("response", file).code == 2
    assert rcnet("response", file, "--from", "1", "--to", "100").code == 0


# ---------------------------------------------------------------------- netlist


def test_netlist(rcnet: Rcnet) -> None:
    """The netlist goes to standard output or to a file; the same text in both, or in a JSON document."""
    file = circuit("gauge.rc.toml", HOLDS)
    ended = rcnet("netlist", file)
    assert (ended.code, ended.err) == (0, "")
    assert ended.out.startswith("* Float gauge")
    assert ended.out.endswith(".end\n")
    assert all(len(line) <= 80 for line in ended.out.splitlines())
    assert rcnet("netlist", file, "-o", "gauge.cir") == Ended(0, "", "")
    assert Path("gauge.cir").read_text(encoding="utf-8") == ended.out
    assert document(rcnet("netlist", "--json", file))["netlist"] == ended.out


def test_netlist_with_findings(rcnet: Rcnet) -> None:
    """Findings go to standard error; an error keeps the netlist from being written, unless anyway."""
    warned = rcnet("netlist", circuit("gauge.rc.toml", WARNS))
    assert warned.code == 0
    assert "hand-misleads" in warned.err
    assert warned.out.startswith("* Float gauge")
    assert rcnet("netlist", "--quiet", "gauge.rc.toml").err == ""
    file = circuit("broken.rc.toml", text=BROKEN)
    refused = rcnet("netlist", file, "-o", "broken.cir")
    assert (refused.code, refused.out) == (1, "")
    assert "no netlist was written" in refused.err
    assert not Path("broken.cir").exists()
    assert document(rcnet("netlist", "--json", file))["netlist"] is None
    anyway = rcnet("netlist", "--anyway", file)
    assert anyway.code == 0
    assert "--anyway" in anyway.out


# ---------------------------------------------------------------------- simulate


@pytest.mark.ngspice
def test_simulate(rcnet: Rcnet) -> None:
    """`simulate` runs ngspice and keeps netlist, results and log; nothing is compared."""
    ended = rcnet("simulate", circuit("gauge.rc.toml", FAILS))
    assert (ended.code, ended.err) == (0, "")
    assert re.match(r"gauge: ngspice-\S+ ran \(\d+\.\d\d s\)\n", ended.out)
    assert "  operating point: 3 curves of 1 point\n" in ended.out
    tidy(ended.out)
    assert {path.name for path in Path("out/gauge").iterdir()} == {
        "netlist.cir",
        "results.raw",
        "simulator.log",
    }
    got = document(rcnet("simulate", "--json", "gauge.rc.toml"))
    assert got["simulator"].startswith("ngspice-")
    assert {"name": "v(out)", "analysis": "ac", "points": 51} in got["curves"]
    assert rcnet("simulate", "--quiet", "gauge.rc.toml").out.count("\n") == 1


def test_simulate_refuses_a_broken_circuit(rcnet: Rcnet) -> None:
    """A circuit with an error is not simulated: 1, the finding on standard error, nothing written."""
    ended = rcnet("simulate", circuit("broken.rc.toml", text=BROKEN))
    assert (ended.code, ended.out) == (1, "")
    assert "nothing was simulated" in ended.err
    assert not Path("out").exists()
    got = document(rcnet("simulate", "--json", "broken.rc.toml"))
    assert (got["simulator"], got["curves"]) == (None, [])


# ---------------------------------------------------------------------- compare


def test_compare(rcnet: Rcnet) -> None:
    """Results that agree are 0; those of another resistor are 1, told with span and worst place."""
    file = circuit("gauge.rc.toml", HOLDS)
    other = circuit("other.rc.toml", text=FILTER.replace("10k 1%", "10.5k"))
    rcnet("response", file, "-o", "good.csv")
    rcnet("response", other, "-o", "bad.csv")
    good = rcnet("compare", file, "good.csv")
    assert (good.code, good.err) == (0, "")
    assert good.out.startswith("gauge: agrees with good.csv (1 ac curve)\n")
    bad = rcnet("compare", file, "bad.csv", "-o", "bad.json")
    assert bad.code == 1
    assert bad.out.startswith("gauge: differs from bad.csv (1 of 1 ac curve)\n")
    # far above the corner 10 kohm against 10.5 kohm makes 20 log10(1/1.05) = -0.4238 dB
    assert "-0.4238 dB" in bad.out
    assert re.search(r"^      from \S+ Hz to 1 MHz: up to ", bad.out, re.MULTILINE)
    for ended in (good, bad):
        tidy(ended.out)
    kept = json.loads(Path("bad.json").read_text(encoding="utf-8"))
    assert kept == document(rcnet("compare", "--json", file, "bad.csv"))
    assert kept["verdict"] == "differ"
    assert rcnet("compare", "--quiet", file, "bad.csv").out.count("\n") == 1


def test_coarse_results_are_told_in_one_line(rcnet: Rcnet) -> None:
    """Results of three digits: one short note at the end, with how many curves it is about."""
    file = circuit("gauge.rc.toml")
    table = document(rcnet("response", file, "--json", "--from", "10", "--to", "1 MHz", "--per-decade", "5"))
    value = table["curves"]["v(out)"]
    rows = zip(table["frequency"], value["real"], value["imag"], strict=True)
    lines = ["frequency,v(out).real,v(out).imag", *(f"{f!r},{a:.2e},{b:.2e}" for f, a, b in rows)]
    Path("r.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    ended = rcnet("compare", file, "r.csv")
    assert ended.code == 0
    assert ended.out.count("0.01 dB") == 1
    assert ended.out.splitlines()[-1].startswith("    note: in 1 of 1 curve")
    assert any(
        "0.01 dB" in remark for remark in document(rcnet("compare", "--json", file, "r.csv"))["remarks"]
    )


# ---------------------------------------------------------------------- new


def test_new_lists_the_starters(rcnet: Rcnet) -> None:
    """`rcnet new` lists the starter circuits with their titles, as text and as JSON."""
    ended = rcnet("new")
    assert (ended.code, ended.err) == (0, "")
    assert all(len(line) <= 80 for line in ended.out.splitlines())
    listed = document(rcnet("new", "--json"))
    assert listed
    assert all(set(item) == {"name", "title"} for item in listed)
    assert [line.split()[0] for line in ended.out.splitlines() if line[0] != " "] == [
        item["name"] for item in listed
    ]


def test_new_copies_a_starter(rcnet: Rcnet) -> None:
    """`rcnet new STARTER` makes a file that `check` accepts; it overwrites nothing."""
    name = document(rcnet("new", "--json"))[0]["name"]
    ended = rcnet("new", name)
    assert ended.code == 0
    assert f"rcnet confirm {name}.rc.toml" in ended.out
    assert rcnet("check", f"{name}.rc.toml").code in (0, 1)
    Path(f"{name}.rc.toml").write_text("mine", encoding="utf-8")
    again = rcnet("new", name)
    assert (again.code, again.out) == (2, "")
    assert "is there already" in again.err
    assert Path(f"{name}.rc.toml").read_text(encoding="utf-8") == "mine"
    assert rcnet("new", name, "-o", "own.rc.toml").code == 0
    Path("folder").mkdir()
    assert rcnet("new", name, "-o", "folder").code == 0
    assert Path("folder", f"{name}.rc.toml").exists()


def test_new_quiet(rcnet: Rcnet) -> None:
    """--quiet prints names only."""
    names = [item["name"] for item in document(rcnet("new", "--json"))]
    assert rcnet("new", "--quiet").out.split() == names
    assert rcnet("new", names[0], "--quiet").out == f"{names[0]}.rc.toml\n"


def test_new_under_a_netlists_name(rcnet: Rcnet) -> None:
    """A starter is not written under a name by which it would be read as a netlist."""
    ended = rcnet("new", document(rcnet("new", "--json"))[0]["name"], "-o", "x.txt")
    assert ended.code == 2
    assert ended.err.count("\n") == 1
    assert "x.rc.toml" in ended.err
    assert not Path("x.txt").exists()


def test_new_under_a_name_too_long(rcnet: Rcnet) -> None:
    """A name the disk cannot hold is told in words."""
    ended = rcnet("new", document(rcnet("new", "--json"))[0]["name"], "-o", "x" * 300 + ".rc.toml")
    assert (ended.code, ended.out) == (2, "")
    assert "cannot be written" in ended.err
    assert "defect" not in ended.err


def test_new_with_a_name_there_is_none_of(rcnet: Rcnet) -> None:
    """A misspelt starter is 2 with the one that was probably meant."""
    name = document(rcnet("new", "--json"))[0]["name"]
    ended = rcnet("new", name[:-1])
    assert ended.code == 2
    assert f"Did you mean {name!r}?" in ended.err
    assert "rcnet new" in rcnet("new", "zzzzzzzz").err


# ---------------------------------------------------------------------- as a program of its own


def test_standard_output_is_one_document() -> None:
    """As a program: `--json` prints one JSON document there and nothing else, errors included."""
    file = circuit("gauge.rc.toml", WARNS)
    good = program("confirm", *READ_BACK, "--json", file)
    assert (good.returncode, good.stderr) == (0, "")
    assert json.loads(good.stdout)["verdict"] == "passes"
    for verb in (("check",), ("confirm",), ("response",), ("netlist",), ("simulate",)):
        bad = program(*verb, "--json", "absent.rc.toml")
        assert bad.returncode == 2
        assert json.loads(bad.stdout)["errors"][0]["file"] == "absent.rc.toml"
        assert bad.stderr.startswith("rcnet: absent.rc.toml: ")


def test_piped_output_has_no_escape_codes() -> None:
    """Into a pipe goes plain text."""
    ended = program("check", circuit("gauge.rc.toml", FAILS))
    assert ended.returncode == 1
    tidy(ended.stdout)


def test_ascii_terminals() -> None:
    """A terminal that knows ASCII only gets escapes for other letters, and JSON that is still JSON."""
    file = circuit("gauge.rc.toml", HOLDS.replace("Corner", "Grenze µ"))
    shown = program("check", file, PYTHONIOENCODING="ascii")
    assert (shown.returncode, shown.stderr) == (0, "")
    found = program("check", "--json", file, PYTHONIOENCODING="ascii")
    assert json.loads(found.stdout)["claims"][0]["says"] == "Grenze µ"


@pytest.mark.skipif(os.name != "posix", reason="a pseudo-terminal is needed")
@pytest.mark.parametrize(("no_color", "coloured"), [("", True), ("1", False)])
def test_colours_only_where_the_terminal_shows_them(no_color: str, coloured: bool) -> None:
    """On a terminal verdicts are coloured, unless NO_COLOR is set: then not one escape code comes."""
    file = circuit("gauge.rc.toml", FAILS)
    environment = {**os.environ, "TERM": "xterm-256color", "NO_COLOR": no_color, "COLUMNS": "132"}
    leader, follower = pty.openpty()
    with subprocess.Popen(
        [sys.executable, "-m", "rcnet", "check", file], stdout=follower, stderr=follower, env=environment
    ) as process:
        os.close(follower)
        said = b""
        while select.select([leader], [], [], 60)[0]:
            try:
                chunk = os.read(leader, 65536)
            except OSError:  # Linux says so when the other end is closed
                break
            if not chunk:
                break
            said += chunk
    os.close(leader)
    assert process.returncode == 1
    assert (ESCAPE.encode() in said) == coloured
    plain = re.sub(r"\x1b\[[0-9;]*m", "", said.decode()).replace("\r\n", "\n")
    tidy(plain)


@pytest.mark.skipif(os.name != "posix", reason="closed pipes are told by signal elsewhere")
def test_reader_that_goes_away() -> None:
    """Where the reader of the output has gone, the program ends in silence, not as if a circuit failed."""
    file = circuit("gauge.rc.toml", HOLDS)
    with subprocess.Popen(
        [sys.executable, "-m", "rcnet", "response", file, "--per-decade", "5000"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    ) as process:
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.readline()
        process.stdout.close()
        assert process.stderr.read() == ""
    assert process.returncode == 141


def test_defects_are_told_as_such(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """What should never happen is told in a sentence that says whose fault it is."""

    def broken(*_: object) -> None:
        raise KeyError("to")

    monkeypatch.setattr("rcnet.loading.load", broken)
    ended = rcnet("response", circuit())
    assert (ended.code, ended.out) == (2, "")
    assert "a defect of rcnet, not of your files: KeyError: 'to'" in ended.err
    assert "Traceback" not in ended.err
