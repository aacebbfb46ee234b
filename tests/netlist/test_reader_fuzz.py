"""The netlist reader against anything: random netlists, damaged ones, inputs that look for its new lines."""

from __future__ import annotations

import os
import random
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import rcnet.netlist
import rcnet.values
from rcnet.circuit import Circuit
from rcnet.errors import RcnetError
from rcnet.netlist import Limits, Reading, parse_netlist, write

# What a test may spend on the search for new lines; more where somebody sets it.
SECONDS = float(os.environ.get("RCNET_FUZZ_SECONDS", "8"))
LONGEST = 2.0  # seconds for one netlist
SMALL = Limits(parts=2_000, depth=8, files=8, nesting=4, parameters=300, steps=200_000, line=20_000)
READING = Reading(limits=SMALL)
LINEAR = Reading(limits=SMALL, linear_part=True)

FILES = {
    "a.inc": ".subckt cell a b r=1k\nR1 a m {r}\nC1 m b 1n\n.ends\n",
    "b.inc": ".include a.inc\n.param q=2k\n",
    "self.inc": ".include self.inc\n",
    "l.lib": ".lib fast\n.param q=1k\n.lib l.lib slow\n.endl\n.lib slow\n.include a.inc\n.endl\n"
    ".lib open\nR9 a b 1\n",
    "latin.inc": "* 20 \xb0C\n.param deg=3\n",
    "end.inc": "R7 in 0 1k\n.end\nR8 in 0 1k\n.control\nshell touch x\n.endc\n",
}


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with files to include."""
    here = tmp_path_factory.mktemp("fuzz")
    for name, text in FILES.items():
        (here / name).write_bytes(text.encode("latin-1"))
    return here


def harmless(text: str, folder: Path, reading: Reading = READING) -> None:
    """The text is read, or refused with a reason, and soon; what is read can be written."""
    began = time.process_time()
    circuit: Circuit | None = None
    try:
        circuit = parse_netlist(text, str(folder / "net.cir"), reading, folder)
    except RcnetError as exc:
        assert exc.problems
        assert all(problem.message for problem in exc.problems)
    assert time.process_time() - began < LONGEST, text
    if circuit is not None:
        try:
            written = write(circuit).text
        except RcnetError:
            return
        assert not any(
            line.startswith((".control", "*#", "*ng_script")) for line in written.lower().split("\n")
        )


# ---------------------------------------------------------------------- netlists out of pieces

NAMES = st.sampled_from(["in", "out", "0", "gnd", "m", "a", "b", "x1.m", "1k", "µ1", "rail"])
PARAMETERS = st.sampled_from(["p", "q", "r", "c", "m", "temper", "nope"])
NUMBERS = st.sampled_from(
    ["1k", "0", "-1", "2.2n", "1e400", "4,7k", "1M", "1", "0x1f", "1e-320", "3meg", "", "1k5"]
)


def expressions() -> st.SearchStrategy[str]:
    """Expressions, most of them with sense."""
    leaves = PARAMETERS | NUMBERS.filter(bool)
    inner = st.recursive(
        leaves,
        lambda children: st.one_of(
            st.builds("{}{}{}".format, children, st.sampled_from("+-*/^%"), children),
            st.builds("({})".format, children),
            st.builds("f({})".format, children),
            st.builds("max({},{})".format, children, children),
            st.builds("{}>{} ? {} : {}".format, children, children, children, children),
            st.builds("-{}".format, children),
        ),
        max_leaves=6,
    )
    return st.one_of(st.builds("{{{}}}".format, inner), st.builds("'{}'".format, inner), inner)


VALUES = NUMBERS | expressions()
SETTINGS = st.lists(
    st.builds(
        "{}={}".format,
        st.sampled_from(["m", "tc1", "tc2", "temp", "scale", "ic", "l", "w", "r", "foo"]),
        VALUES,
    ),
    max_size=2,
).map(" ".join)
WAVES = st.builds(
    "{}({})".format,
    st.sampled_from(["PULSE", "SIN", "PWL", "EXP", "SFFM"]),
    st.lists(VALUES, max_size=8).map(" ".join),
)


def statements() -> st.SearchStrategy[str]:
    """Lines that are no cards."""
    number = st.integers(0, 6)
    return st.one_of(
        st.builds("{}{} {} {} {} {}".format, st.sampled_from("RCL"), number, NAMES, NAMES, VALUES, SETTINGS),
        st.builds("R{} {} {} rm {} {}".format, number, NAMES, NAMES, VALUES, SETTINGS),
        st.builds(
            "{}{} {} {} DC {} AC {} {}".format,
            st.sampled_from("VI"),
            number,
            NAMES,
            NAMES,
            VALUES,
            VALUES,
            WAVES,
        ),
        st.builds(
            "{}{} {} {} {} {} {}".format, st.sampled_from("EG"), number, NAMES, NAMES, NAMES, NAMES, VALUES
        ),
        st.builds("{}{} {} {} V{} {}".format, st.sampled_from("FH"), number, NAMES, NAMES, number, VALUES),
        st.builds("K{} L{} L{} {}".format, number, number, number, VALUES),
        st.builds(
            "X{} {} {} {} {}".format,
            number,
            NAMES,
            NAMES,
            st.sampled_from(["s0", "s1", "cell", "s9"]),
            SETTINGS,
        ),
        st.builds("D{} {} {} dm".format, number, NAMES, NAMES),
    )


def cards() -> st.SearchStrategy[str]:
    """Dot lines."""
    return st.one_of(
        st.builds(".param {}={} {}={}".format, PARAMETERS, VALUES, PARAMETERS, VALUES),
        st.builds(".func f(x) {{x*{}}}".format, PARAMETERS),
        st.builds(".model rm r(tc1={} r={} rsh={})".format, VALUES, VALUES, VALUES),
        st.builds(".ac {} {} {} {}".format, st.sampled_from(["dec", "lin", "oct"]), VALUES, VALUES, VALUES),
        st.builds(".tran {} {} {}".format, VALUES, VALUES, st.sampled_from(["", "uic", "0 1u"])),
        st.builds(".temp {}".format, VALUES),
        st.builds(
            ".options {}={} temp={}".format,
            st.sampled_from(["reltol", "tnom", "rshunt", "scale"]),
            VALUES,
            VALUES,
        ),
        st.builds(".ic v({})={}".format, NAMES, VALUES),
        st.builds(".global {}".format, NAMES),
        st.builds(".print ac v({},{})".format, NAMES, NAMES),
        st.builds(".noise v({}) V1 dec 3 1 1k".format, NAMES),
        st.builds(".dc V{} 0 {} {}".format, st.integers(0, 3), VALUES, VALUES),
        st.builds(".meas ac x find v({}) at={}".format, NAMES, VALUES),
        st.sampled_from([f".include {name}" for name in [*FILES, "none.inc", "../up.inc", "/dev/zero", "."]]),
        st.builds(".lib l.lib {}".format, st.sampled_from(["fast", "slow", "open", "none", ""])),
        st.sampled_from(
            [
                ".control",
                ".endc",
                ".end",
                "*#shell x",
                "+ 1k",
                "+",
                "* x",
                "",
                ".if (1)",
                ".endif",
                ".ends",
                ".endl",
                "\t",
            ]
        ),
    )


def subcircuits() -> st.SearchStrategy[str]:
    """Definitions, perhaps within one another, perhaps without an end."""
    body = st.lists(statements() | st.builds(".param {}={}".format, PARAMETERS, VALUES), max_size=4).map(
        "\n".join
    )
    flat = st.builds(
        ".subckt s{} a b {}={}\n{}\n{}".format,
        st.integers(0, 2),
        PARAMETERS,
        VALUES,
        body,
        st.sampled_from([".ends", ".ends", ".ends s1", ""]),
    )
    return flat | st.builds(".subckt s{} a b\n{}\n{}\n.ends".format, st.integers(0, 2), flat, body)


NETLISTS = st.lists(statements() | cards() | subcircuits(), max_size=14).map(
    lambda lines: "* gauge\nV1 in 0 AC 1\nR1 in out 1k\n" + "\n".join(lines) + "\n.end\n"
)
SLOW = settings(deadline=None, max_examples=150, suppress_health_check=list(HealthCheck))


@SLOW
@given(NETLISTS, st.booleans())
def test_netlists_out_of_pieces_are_read_or_refused(folder: Path, text: str, linear: bool) -> None:
    """Nothing but an error of rcnet's own comes out, and soon."""
    harmless(text, folder, LINEAR if linear else READING)


# ---------------------------------------------------------------------- damaged ones

GOOD = (
    "* Level gauge\n.param r=4.7k q={r*2} n=2\n.func f(x,y) {x*y/(1+temper)}\n.global rail\n"
    "V1 in 0 DC 1 AC 1 90 PULSE(0 {n} 0 1u 1u 0.5m 1m)\nR1 in out {r} tc1=1m $ film\nC1 out 0\n"
    "+ 10n ic=0.5 m={n}\n.subckt cell a b r=1k c={10n*n}\n.model rm r(tc1=0.01 rsh=50)\n"
    ".subckt inner x\nR1 x rail '2*r'\n.ends inner\nR1 a mid rm {r}\nR2 mid b rm l=10u w=2u\n"
    "C1 mid b {c}\nX1 mid inner\n.ends cell\nX1 out 0 cell r={r}\nX2 in out cell c=1n\n"
    "X3 out 0 leaf m=3\n.subckt leaf a b\nR1 a b 1k\n.ends\nE1 e 0 out in {n}\nR3 e rail 10k\n"
    "G1 0 out in 0 1u m=2\nVs rail g 0\nF1 0 out Vs 0.1\nH1 h g Vs 50\nR4 h g 1k\nR5 g 0 1k\n"
    "L1 out 0 10m\nL2 g 0 10m\nK1 L1 L2 0.9\nI1 0 out SIN(0 1m 1k) AC 1u m=2\nI2 0 out EXP(0 1m 1u)\n"
    "I3 0 out PWL(0 0 1m {f(1,2)}) r=0\n.ic v(out)=0.1 v(x1.mid)=0\n"
    ".options reltol=1e-6 tnom=25 temp={27+n}\n.temp 37\n.ac dec 10 1 1meg\n.ac lin 5 1 10\n"
    ".print ac vdb(out) v(x1.mid)\n.tran 1u 5m 0 10u uic\n.noise v(out) V1 dec 10 1 1k\n"
    ".dc V1 0 1 {0.5/n}\n.tf v(out) V1\n.four 1k v(out)\n.meas ac f3 when vdb(out)=-3\n.include a.inc\n"
    ".lib l.lib slow\n.control\nrun\nplot v(out)\n.endc\n* rcnet: silence zero-resistance\n"
    "R6 out 0 0 ; rcnet: silence odd-number\n.end\n"
)
ODD = [
    "{",
    "}",
    "'",
    "(",
    ")",
    ",",
    "=",
    "+",
    "*#",
    "$",
    ";",
    "//",
    "\n",
    "\n+",
    "\n.",
    "\r",
    "\0",
    "\x0c",
    "\u2028",
]
ODD += [
    "µ",
    "\ufeff",
    " ",
    "\t",
    ".ends",
    ".subckt",
    ".control",
    ".lib a",
    ".include b.inc",
    "X1",
    "m=",
    "{1/0}",
    "1e999",
]


def test_the_good_netlist_is_good(folder: Path) -> None:
    """What is damaged below is whole at first."""
    assert len(parse_netlist(GOOD, str(folder / "net.cir"), READING, folder).network) >= 25


@SLOW
@given(
    st.lists(
        st.tuples(st.integers(0, len(GOOD)), st.integers(0, 12), st.sampled_from(ODD) | st.text(max_size=3)),
        min_size=1,
        max_size=5,
    )
)
def test_damaged_netlists_are_read_or_refused(folder: Path, damages: list[tuple[int, int, str]]) -> None:
    """Letters cut out and others put in."""
    text = GOOD
    for position, length, piece in damages:
        text = text[:position] + piece + text[position + length :]
    harmless(text, folder)


@SLOW
@given(st.binary(max_size=300), st.integers(0, len(GOOD)))
def test_damaged_files_are_read_or_refused(folder: Path, data: bytes, position: int) -> None:
    """Bytes put into a file, whatever they are in UTF-8."""
    path = folder / "bytes.cir"
    path.write_bytes(GOOD[:position].encode() + data + GOOD[position:].encode())
    began = time.process_time()
    try:
        rcnet.netlist.read_netlist(path, READING)
    except RcnetError as exc:
        assert exc.problems
    assert time.process_time() - began < LONGEST


# ---------------------------------------------------------------------- towards new lines

WATCHED = tuple(str(Path(module.__file__ or "").parent) + os.sep for module in (rcnet.netlist, rcnet.values))
SEEDS = (
    GOOD,
    *(
        "\n".join([*GOOD.split("\n")[:6], *GOOD.split("\n")[k : k + 5], ""])
        for k in range(6, GOOD.count("\n"), 5)
    ),
    "* t\n.macro s a b\nR1 a b 1k\n.eom\nX1 in 0 s\nV1 in 0 1\nB1 in 0 v=1\nT1 in 0 out 0 z0=50\n",
    "* t\nV1 in 0 1\nR1 in 0 r=1k temp=50 dtemp=3 tce=1 scale=2\nC1 in 0 cm l=10u w=2u\n"
    ".model cm c(cj=1m cjsw=1n "
    "narrow=1u short=1u defw=2u cap=1u)\nL1 in 0 lm\n.model lm l(ind=1m)\n.temp 1 2\n.sens v(in)\n.foo\n",
    "* t\nV1 in 0 1\n.param a={b} b={a}\n.subckt s a\nX1 a t\n.ends\n.subckt t a\nX1 a s\n.ends\n"
    "X1 in s\nX2 in q\n",
)


@contextmanager
def lines_of_the_reader(met: set[tuple[int, int]]) -> Iterator[None]:
    """Note every line of the reader that is executed, by the code it belongs to."""
    watched: dict[Any, bool] = {}

    def trace(frame: FrameType, event: str, _: Any) -> Callable[..., Any] | None:
        code = frame.f_code
        if code not in watched:
            watched[code] = code.co_filename.startswith(WATCHED)
        if not watched[code]:
            return None
        if event == "line":
            met.add((id(code), frame.f_lineno))
        return trace

    before = sys.gettrace()
    sys.settrace(trace)
    try:
        yield
    finally:
        sys.settrace(before)


def mutated(chance: random.Random, corpus: list[str]) -> str:
    """One of the inputs so far, changed a little: lines, words or letters of it, or of two of them."""
    lines = chance.choice(corpus).split("\n")
    for _ in range(chance.randint(1, 4)):
        at = chance.randrange(len(lines))
        what = chance.randrange(8)
        if what == 0:
            del lines[at : at + chance.randint(1, 3)]
        elif what == 1:
            lines.insert(at, chance.choice(chance.choice(corpus).split("\n")))
        elif what == 2:
            other = chance.randrange(len(lines))
            lines[at], lines[other] = lines[other], lines[at]
        elif what in (3, 4):
            words = lines[at].split(" ")
            words[chance.randrange(len(words))] = chance.choice(chance.choice(corpus).split() or ODD)
            lines[at] = " ".join(words)
        elif what == 5:
            cut = chance.randint(0, len(lines[at]))
            lines[at] = lines[at][:cut] + chance.choice(ODD) + lines[at][cut + chance.randint(0, 2) :]
        elif what == 6:
            lines[at] = lines[at].replace(
                chance.choice("0123456789abcrx={}' "), chance.choice(["", "0", "-", "{p}", "'"])
            )
        else:
            lines[at] = lines[at] + " " + chance.choice(ODD) + chance.choice(["1k", "a", "{r}", "m=2", ""])
        lines = lines or ["* t"]
    return "\n".join(lines)[:6_000]


def test_inputs_that_reach_new_lines_do_no_harm(folder: Path) -> None:
    """What reaches a line of the reader that nothing reached before is kept, and changed further."""
    chance = random.Random(20_250_101)
    met: set[tuple[int, int]] = set()
    corpus: list[str] = []
    until = time.monotonic() + SECONDS
    waiting = list(SEEDS)
    count = 0
    while waiting or time.monotonic() < until:
        text = waiting.pop() if waiting else mutated(chance, corpus)
        known = len(met)
        with lines_of_the_reader(met):
            try:
                harmless(text, folder, LINEAR if count % 3 == 0 else READING)
            except (Exception, RecursionError) as exc:
                exc.add_note(f"in this netlist:\n{text}")
                raise
        count += 1
        if len(met) > known:
            corpus.append(text)
    assert count > len(SEEDS)
    assert len(corpus) > 10
