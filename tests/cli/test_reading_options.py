"""Options that say how a netlist is read, and what is told of one that cannot be read whole."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from .conftest import Ended, circuit

Rcnet = Callable[..., Ended]

CELL = ".subckt cell a b\nR1 a b 1k\nC1 b 0 1u\n.ends\n"
NETLIST = (
    "* gauge\nV1 in 0 DC 0 AC 1\n.include {}\nX1 in out cell\n.ac dec 5 1 1k\n.print ac v(out)\n.op\n.end\n"
)
DIODE = "* gauge\nV1 in 0 DC 0 AC 1\nR1 in out 1k\nC1 out 0 1u\nD1 out 0 clamp\n.ac dec 5 1 1k\n"
".print ac v(out)\n.end\n"
COMMANDS = ".control\nshell touch owned\n.endc\n*#shell touch owned\n"
VERBS = ["check", "confirm", "response", "netlist", "simulate"]


def wrote(name: str, text: str) -> str:
    """A file of the working folder."""
    path = Path(name)
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    return name


def sentences(ended: Ended) -> list[str]:
    """What was said on standard error, without the lines of the file that are shown."""
    return [line for line in ended.err.splitlines() if line.startswith("rcnet:")]


@pytest.fixture
def outside() -> str:
    """A netlist that includes a file from beside its folder."""
    wrote("library/cell.inc", CELL)
    return wrote("in/gauge.cir", NETLIST.format("../library/cell.inc"))


@pytest.mark.parametrize("verb", VERBS)
def test_a_file_outside_needs_leave(rcnet: Rcnet, outside: str, verb: str) -> None:
    """Without it every verb refuses, with the line, and writes nothing."""
    ended = rcnet(verb, outside)
    assert (ended.code, ended.out) == (2, "")
    assert sentences(ended)[0].startswith("rcnet: in/gauge.cir:3: '../library/cell.inc' lies outside")
    assert "--allow DIR" in ended.err
    assert not Path("out").exists()


@pytest.mark.parametrize("verb", ["check", "response", "netlist"])
def test_a_folder_is_allowed(rcnet: Rcnet, outside: str, verb: str) -> None:
    """With it they read it; several folders may be given, in any place on the line."""
    wrote("other/none.inc", "* none\n")
    ended = rcnet(verb, "--allow", "other", outside, "--allow", "library")
    assert ended.code == 0, ended.err
    assert ended.err == ""


def test_only_what_is_allowed(rcnet: Rcnet, outside: str) -> None:
    """Another folder is no leave; one that is none is told."""
    assert rcnet("check", outside, "--allow", "in").code == 2
    for folder in ("nowhere", "library/cell.inc"):
        ended = rcnet("check", outside, "--allow", folder)
        assert (ended.code, ended.out) == (2, "")
        assert folder in ended.err
        assert "Traceback" not in ended.err


# ---------------------------------------------------------------------- limits


def test_a_limit_is_told_and_raised(rcnet: Rcnet) -> None:
    """The message names the option that raises it."""
    wrote("cell.inc", CELL)
    file = wrote("gauge.cir", NETLIST.format("cell.inc"))
    ended = rcnet("check", file, "--limit", "parts=3")
    assert ended.code == 2
    assert "at most 3 are read" in ended.err
    assert "--limit parts=NUMBER" in ended.err
    assert rcnet("check", file, "--limit", "parts=4").code == 0
    assert rcnet("check", file, "--limit", "files=1").code == 2
    assert rcnet("check", file, "--limit", "files=2", "--limit", "nesting=1").code == 0


def test_a_tower_of_subcircuits_is_refused(rcnet: Rcnet) -> None:
    """A few lines that ask for a million million parts are one sentence."""
    text = ".subckt s0 a\nR1 a 0 1k\n.ends\n"
    for level in range(1, 13):
        text += f".subckt s{level} a\n" + "".join(f"X{k} a s{level - 1}\n" for k in range(10)) + ".ends\n"
    ended = rcnet("check", wrote("tower.cir", f"* t\nV1 a 0 1\n{text}X1 a s12\n.end\n"))
    assert ended.code == 2
    assert len(sentences(ended)) == 1
    assert "the netlist has" in ended.err


@pytest.mark.parametrize("setting", ["parts", "parts=", "parts=-1", "parts=many", "pieces=3", "depth=1000"])
def test_what_is_no_limit_is_told(rcnet: Rcnet, setting: str) -> None:
    """One sentence, with the names that there are or the most that can be asked for."""
    file = wrote("gauge.cir", DIODE.replace("D1 out 0 clamp\n", ""))
    ended = rcnet("check", file, "--limit", setting)
    assert (ended.code, len(sentences(ended))) == (2, 1)
    assert f"'{setting}'" in ended.err


# ---------------------------------------------------------------------- the linear part


@pytest.mark.parametrize("verb", VERBS)
def test_what_is_not_linear_is_refused(rcnet: Rcnet, verb: str) -> None:
    """With the option that leaves it out."""
    ended = rcnet(verb, wrote("gauge.cir", DIODE))
    assert ended.code == 2
    assert sentences(ended)[0].startswith("rcnet: gauge.cir:5: 'D1' is a diode")
    assert "--linear-part" in ended.err


def test_the_linear_part_is_answered_for(rcnet: Rcnet) -> None:
    """The same answer as without the line, and a word about what was left out."""
    file = wrote("gauge.cir", DIODE)
    rest = wrote("rest.cir", DIODE.replace("D1 out 0 clamp\n", ""))
    checked = rcnet("check", file, "--linear-part")
    assert checked.code == 0
    assert "D1 is a diode" in checked.out
    answers = [rcnet("response", name, "--linear-part", "--csv") for name in (file, rest)]
    assert [answer.code for answer in answers] == [0, 0]
    assert answers[0].out == answers[1].out
    written = rcnet("netlist", file, "--linear-part")
    assert written.code == 0
    assert "D1" not in [line.split(" ")[0] for line in written.out.splitlines()]


def test_options_leave_circuit_files_alone(rcnet: Rcnet) -> None:
    """They are about netlists, and harm nothing else."""
    Path("folder").mkdir()
    ended = rcnet("check", circuit(), "--linear-part", "--allow", "folder", "--limit", "parts=1")
    assert (ended.code, ended.err) == (0, "")


# ---------------------------------------------------------------------- findings beside what cannot be read


def test_findings_are_told_beside_unreadable_lines(rcnet: Rcnet) -> None:
    """A netlist that cannot be read is 2, and what was noticed of its text is told all the same."""
    file = wrote("gauge.cir", DIODE.replace("D1 out 0 clamp", "R2 out 0 4,7k\nR3 out") + COMMANDS)
    ended = rcnet("check", file)
    assert ended.code == 2
    assert len(sentences(ended)) == 1
    assert sentences(ended)[0].startswith("rcnet: gauge.cir:6: R3 names fewer than 2 nodes")
    told = ended.out + ended.err
    for code in ("commands-dropped", "hidden-command", "odd-number"):
        assert code in told
    assert not Path("owned").exists()


def test_dropped_commands_are_an_error_of_the_netlist(rcnet: Rcnet) -> None:
    """1 where they reach beyond the simulation, 0 where they do not; nothing of them is written or done."""
    plain = DIODE.replace("D1 out 0 clamp\n", "")
    harmless = wrote("harmless.cir", plain + ".control\nrun\nplot v(out)\n.endc\n")
    ended = rcnet("check", harmless)
    assert ended.code == 0
    assert "commands-dropped" in ended.out
    evil = wrote("evil.cir", plain + COMMANDS)
    assert rcnet("check", evil).code == 1
    assert rcnet("confirm", evil).code == 1
    written = rcnet("netlist", evil, "--anyway")
    assert "touch" in written.out  # in the comments that say what was found, and nowhere else
    assert not any("touch" in line for line in written.out.splitlines() if not line.startswith("* "))
    assert not Path("owned").exists()


def test_every_problem_has_its_file(rcnet: Rcnet) -> None:
    """Those of an included file are told with its name and line, and as JSON with the same."""
    wrote("cell.inc", CELL.replace("1k", "1k 5"))
    file = wrote("gauge.cir", NETLIST.format("cell.inc"))
    ended = rcnet("check", file)
    assert sentences(ended) == [line for line in sentences(ended) if line.startswith("rcnet: cell.inc:2: ")]
    assert ended.code == 2
    as_json = rcnet("check", "--json", file)
    assert as_json.code == 2
    document = json.loads(as_json.out)
    assert '"line": 2' in json.dumps(document)
    assert "cell.inc" in json.dumps(document)
