"""Limits of reading a stranger's netlist: neither time nor memory goes beyond what its size is worth."""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import fields
from pathlib import Path

import pytest

from rcnet.errors import CircuitError, InputError, RcnetError
from rcnet.netlist import Limits, Reading, parse_netlist, raised, read_netlist

HEAD = "* gauge\nV1 in 0 AC 1\nR0 in 0 1\n"


def tower(height: int, leaf: str, width: int = 10) -> str:
    """A subcircuit of so many of a subcircuit of so many ..., used once."""
    text = f".subckt s0 a b\n{leaf}.ends\n"
    for level in range(1, height):
        calls = "".join(f"X{k} a b s{level - 1}\n" for k in range(width))
        text += f".subckt s{level} a b\n{calls}.ends\n"
    return f"{HEAD}{text}X1 in 0 s{height - 1}\n"


def staircase(height: int) -> str:
    """Subcircuits within one another, each also used by itself, the shallowest first."""
    text = ".subckt s0 a b\nR1 a b 1\n.ends\n" + "".join(
        f".subckt s{k} a b\nX1 a b s{k - 1}\n.ends\n" for k in range(1, height)
    )
    return HEAD + text + "".join(f"X{k} in 0 s{k}\n" for k in range(0, height, 20))


def numbered(line: str, count: int) -> str:
    """A line so many times, `#` being its number."""
    return "".join(line.replace("#", str(k)) for k in range(count))


def many(word: str, count: int) -> str:
    """A word so many times on a line, `#` being its number."""
    return " ".join(word.replace("#", str(k)) for k in range(count))


# ---------------------------------------------------------------------- a few lines that ask for much


@pytest.mark.parametrize(
    "leaf", ["R1 a b 1k\n", "", ".param r=1\n", "R1 a b {r}\n"], ids=["part", "empty", "param", "bad"]
)
@pytest.mark.parametrize(("height", "width"), [(12, 10), (39, 2)])
def test_a_tower_of_subcircuits_is_refused_at_once(leaf: str, height: int, width: int) -> None:
    """A million million instances are counted, not made, also where there is nothing in them."""
    began = time.process_time()
    with pytest.raises(
        CircuitError, match=r"in place the netlist has \d+ parts; at most 5000000 are read"
    ) as caught:
        parse_netlist(tower(height, leaf, width), "x.cir")
    assert time.process_time() - began < 1
    (problem,) = caught.value.problems
    assert (problem.code, "--limit parts=" in (problem.remedy or "")) == ("limit", True)


def test_parts_have_a_limit_that_can_be_raised() -> None:
    """Instances count as well as what is in them: 2 parts, 1 + 10 + 100 instances, 100 parts."""
    text = tower(3, "R1 a b 1k\n")
    assert len(parse_netlist(text, "x", Reading(limits=Limits(parts=213))).network) == 102
    with pytest.raises(CircuitError, match="has 213 parts; at most 212"):
        parse_netlist(text, "x", Reading(limits=Limits(parts=212)))


def test_depth_has_a_limit_that_can_be_raised() -> None:
    """Forty deep by default, 150 at most, in whichever order they are met."""
    assert len(parse_netlist(tower(40, "R1 a b 1k\n", 1), "x").network) == 3
    for text in (tower(41, "R1 a b 1k\n", 1), staircase(60), staircase(1500)):
        with pytest.raises(CircuitError, match="more than 40 deep") as caught:
            parse_netlist(text, "x")
        assert {problem.code for problem in caught.value.problems[:50]} == {"limit"}
    limits = raised(Limits(), ["depth=150"])
    assert len(parse_netlist(tower(60, "R1 a b 1k\n", 1), "x", Reading(limits=limits)).network) == 3
    assert len(parse_netlist(tower(150, "", 1), "x", Reading(limits=limits)).network) == 2
    nested = "".join(f".subckt s{k} a\n" for k in range(41)) + ".ends\n" * 41
    with pytest.raises(CircuitError, match="defined more than 40 deep") as caught:
        parse_netlist(HEAD + nested, "x")
    assert [problem.line for problem in caught.value.problems] == [44]


def test_arithmetic_has_a_limit_that_can_be_raised() -> None:
    """Functions of functions double with every line; a few kilobytes could compute for hours."""
    functions = ".func f0(x) {x+x}\n" + numbered(".func g#(x) {x}\n", 1)
    functions += "".join(f".func f{k}(x) {{f{k - 1}(x)+f{k - 1}(x)}}\n" for k in range(1, 12))
    text = HEAD + functions + numbered("R1# in 0 {f11(1)}\n", 30)
    steps = Reading(limits=Limits(steps=100_000))
    with pytest.raises(CircuitError, match="more than 100000 steps of arithmetic") as caught:
        parse_netlist(text, "x", steps)
    assert caught.value.problems[0].code == "limit"
    assert parse_netlist(text, "x").network.part("R11").value == 4096
    text = HEAD + ".subckt s a r=1\nR1 a 0 {" + "r+" * 900 + "r}\n.ends\n" + numbered("X# in s r=#.5\n", 100)
    with pytest.raises(CircuitError, match="more than 100000 steps"):
        parse_netlist(text, "x", steps)


# ---------------------------------------------------------------------- long and many, read or refused soon

# Text -> words of the refusal, or None where it is read.
LARGE: dict[str, tuple[Callable[[], str], str | None]] = {
    "parameters": (lambda: numbered(".param p#=1\n", 300_000), "more than 100000 parameters, models and sub"),
    "parameters on a line": (lambda: ".param " + many("x#=1", 20_000) + "\n", None),
    "parameters twice on a line": (
        lambda: ".param " + f"{many('x#=1', 20_000)} {many('x#=2', 20_000)}\n",
        None,
    ),
    "functions beside functions": (
        lambda: (
            numbered(".func f#(x) {x+1}\n", 10_000)
            + ".subckt s a b\n.func g(x) {x}\nR1 a b {g(1)}\n.ends\n"
            + numbered("X# in 0 s\n", 1_000)
        ),
        None,
    ),
    "parts that depend on many": (
        lambda: (
            numbered(".param n#=#\n", 10_000)
            + "".join(
                f".param t{k}={{{'+'.join(f'n{k * 100 + i}' for i in range(100))}}}\n" for k in range(100)
            )
            + f".param z={{{'+'.join(f't{k}' for k in range(100))}}}\n"
            + numbered("R1# in 0 {z+#}\n", 10_000)
        ),
        None,
    ),
    "a chain, a part at each": (
        lambda: (
            ".param p0=1\n"
            + "".join(f".param p{k}={{p{k - 1}+1}}\nR1{k} in 0 {{p{k}}}\n" for k in range(1, 10_000))
        ),
        None,
    ),
    "a chain inside, a global at each": (
        lambda: (
            numbered(".param g#=1\n", 5_000)
            + ".subckt s a\n.param p0=1\n"
            + "".join(f".param p{k}={{p{k - 1}+g{k}}}\n" for k in range(1, 5_000))
            + "R1 a 0 {p4999}\n.ends\nX1 in s\n"
        ),
        None,
    ),
    "undefined names": (
        lambda: numbered(".param p#=1\n", 2_000) + numbered("R1# in 0 {q#}\n", 10_000),
        "'q0' is not",
    ),
    "unknown subcircuits": (
        lambda: numbered(".subckt s# a\n.ends\n", 3_000) + numbered("X# in 0 nope#\n", 5_000),
        "no subcircuit 'nope0'",
    ),
    "unknown cards": (lambda: ".foo\n" * 15_000, "'.foo' is not read"),
    "couplings of nothing": (lambda: numbered("K# La# Lb# 0.5\n", 10_000), "K0 couples 'La0'"),
    "names twice": (lambda: "R1 in 0 1k\n" * 15_000, "two parts called 'R1'"),
    "overrides of nothing": (
        lambda: ".subckt s a b\nR1 a b 1\n.ends\nX1 in 0 s " + many("x#=1", 20_000) + "\n",
        None,
    ),
    "options": (lambda: ".options " + many("o#=1", 20_000) + "\n", None),
    "starts of nothing": (lambda: ".ic " + many("v(n#)=1", 15_000) + "\n", None),
    "ports": (
        lambda: ".subckt s " + many("n#", 20_000) + "\nR1 n1 n2 1\n.ends\nX1 " + many("n#", 20_000) + " s\n",
        None,
    ),
    "globals": (lambda: ".global " + many("n#", 20_000) + "\n", None),
    "braces": (lambda: "R1 in 0 " + "{" * 200_000 + "\n", "never closed"),
    "pairs of braces": (lambda: "R1 in 0 {" + "{}" * 300_000 + "\n", "never closed"),
    "braces on a card": (lambda: ".ac {" + "{}" * 300_000 + "\n", ".ac cannot be read|is empty"),
    "quotes": (lambda: "R1 in 0 " + "'" * 200_001 + "\n", "a word and an expression in one"),
    "blanks in .tf": (lambda: ".tf v(in)" + " " * 200_000 + "x y\n", ".tf cannot be read"),
    "blanks in .options": (lambda: ".options" + " " * 200_000 + "x\n", None),
    "blanks in .four": (lambda: ".four 1k" + " " * 200_000 + "x\n", ".four cannot be read"),
    "blanks in .ic": (lambda: ".ic v" + " " * 200_000 + "x\n", ".ic cannot be read"),
    "blanks in .param": (lambda: ".param a" + " " * 200_000 + "b\n", "holds 'a'"),
    "blanks in .model": (lambda: ".model m r(" + " " * 200_000 + "r=1)\n", None),
    "equals signs": (lambda: "R1 in 0 " + "=" * 300_000 + "\n", "nothing before it"),
    "commas in .param": (lambda: ".param " + "a=1," * 100_000 + "\n", "holds '=1,a"),
    "names of .include": (lambda: ".include " + "a " * 300_000 + "\n", "names no single file"),
    "commands": (lambda: ".control\n" + "run\n" * 100_000 + ".endc\n", None),
    "commands never closed": (lambda: ".control\n" * 100_000, None),
    "hidden commands": (lambda: "*#x\n" * 15_000, None),
    "ends of nothing": (lambda: ".ends\n" * 15_000, ".ends closes nothing"),
    "subcircuits never closed": (lambda: ".subckt a b\n" * 15_000, "never closed|more than 40 deep"),
    "conditions": (lambda: ".if (1)\n" * 15_000, "'.if' is not read"),
    "codes to silence": (lambda: "* rcnet: silence " + "a " * 100_000 + "\n", None),
    "points": (lambda: "V2 x 0 PWL(" + many("# {1}", 15_000) + ")\n", None),
    "continuations": (lambda: "R1 in 0\n" + "+\n" * 300_000 + "+1k\n", None),
    "continuations of nothing": (lambda: "R1 a b 1k\n+" * 15_000, "behind the value"),
    "measures": (lambda: ".ac dec 1 1 10\n" + numbered(".meas ac m# max vdb(in)\n", 10_000), None),
    "voltages printed": (lambda: ".print ac " + "v(in) " * 15_000 + "\n", None),
}


@pytest.mark.parametrize("name", LARGE)
def test_size_alone_takes_no_time(name: str) -> None:
    """A megabyte is read or refused within seconds, and the refusal is short."""
    make, says = LARGE[name]
    text = HEAD + make()
    began = time.process_time()
    if says is None:
        parse_netlist(text, "x.cir")
    else:
        with pytest.raises(CircuitError, match=says) as caught:
            parse_netlist(text, "x.cir")
        assert len(str(caught.value)) < 20_000
        assert len(caught.value.problems) <= 51
    assert time.process_time() - began < 8


@pytest.mark.parametrize(
    "line", [".param p#=1", ".subckt s# a\n.ends", ".model m# r(r=1)", ".func f#(x) {x}", ".param f#(x)={x}"]
)
def test_definitions_have_a_limit(line: str) -> None:
    """Of every kind, and it can be raised."""
    limits = Limits(parameters=1000)
    assert len(parse_netlist(HEAD + numbered(line + "\n", 1000), "x", Reading(limits=limits)).network) == 2
    with pytest.raises(CircuitError, match="more than 1000 parameters, models and subcircuits") as caught:
        parse_netlist(HEAD + numbered(line + "\n", 1001) + "R2 in\n" * 100, "x", Reading(limits=limits))
    assert [problem.code for problem in caught.value.problems] == ["limit"]


def test_all_problems_are_counted() -> None:
    """Also those that nobody keeps."""
    with pytest.raises(CircuitError) as caught:
        parse_netlist("* gauge\nV1 in 0 1\n" + "R1 in\n" * 5_000, "x.cir")
    assert caught.value.problems[-1].message == "and 4950 more lines that cannot be read."


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("R1 in 0 " + " " * 2_000 + "1k\n", "the line has"),
        ("R1 in 0\n" + "+ \t \n+ x\n" * 500, "with what continues it"),
    ],
)
def test_a_line_has_a_limit(text: str, says: str) -> None:
    """By itself, and with what continues it."""
    with pytest.raises(CircuitError, match=says) as caught:
        parse_netlist(HEAD + text, "x.cir", Reading(limits=Limits(line=900)))
    assert caught.value.problems[0].code == "limit"
    assert caught.value.line == 4


# ---------------------------------------------------------------------- memory

MEASURE = """
import resource, sys
from rcnet.netlist import read_netlist
from rcnet.errors import RcnetError
def peak():
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss // 1024
before = peak()
try:
    read_netlist(sys.argv[1])
except RcnetError:
    pass
print(peak() - before)
"""


@pytest.mark.skipif(sys.platform != "linux", reason="peak memory is asked for as Linux tells it")
@pytest.mark.parametrize(
    ("name", "megabytes"),
    [
        ("a chain, a part at each", 150),
        ("a chain inside, a global at each", 100),
        ("parts that depend on many", 200),
        ("overrides of nothing", 200),
    ],
)
def test_memory_stays_in_proportion(tmp_path: Path, name: str, megabytes: int) -> None:
    """Nothing in a netlist is kept as many times as there are pairs of it."""
    path = tmp_path / "net.cir"
    path.write_text(HEAD + LARGE[name][0](), encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-c", MEASURE, str(path)], capture_output=True, text=True, check=True, timeout=60
    )
    assert int(done.stdout) < megabytes


# ---------------------------------------------------------------------- setting them


def test_limits_are_raised_by_name() -> None:
    """Each by its name, several at once, the last of two counting."""
    limits = raised(Limits(), ["parts=7", "depth=9", "parts=8"])
    assert (limits.parts, limits.depth, limits.files) == (8, 9, Limits().files)
    for each in fields(Limits):
        assert getattr(raised(Limits(), [f"{each.name}=3"]), each.name) == 3


@pytest.mark.parametrize(
    "setting",
    [
        "",
        "parts",
        "parts=",
        "parts=0",
        "parts=-1",
        "parts=1.5",
        "parts=1e6",
        "parts=many",
        "part=3",
        "parts=²",
    ],
)
def test_what_is_no_limit_is_refused(setting: str) -> None:
    """With the names that there are."""
    with pytest.raises(InputError, match="cannot be read") as caught:
        raised(Limits(), [setting])
    assert "bytes, depth, files, line, nesting, parameters, parts, steps" in (caught.value.remedy or "")


@pytest.mark.parametrize("setting", ["depth=151", "nesting=1000000"])
def test_what_takes_stack_is_bounded(setting: str) -> None:
    """One within another cannot be allowed without end."""
    with pytest.raises(InputError, match="is too high") as caught:
        raised(Limits(), [setting])
    assert "at most 150" in (caught.value.remedy or "")


def test_a_file_has_a_limit(tmp_path: Path) -> None:
    """The netlist itself counts among the bytes."""
    path = tmp_path / "net.cir"
    path.write_text(HEAD, encoding="utf-8")
    with pytest.raises(RcnetError, match="at most 20 are read"):
        read_netlist(path, Reading(limits=Limits(bytes=20)))
