"""What ngspice says is believed only where every sign is good, and nothing unsafe reaches it."""

from __future__ import annotations

import os
import pickle
import re
import signal
import stat
import struct
import sys
import textwrap
import time
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.curves.raw import parse_raw
from rcnet.errors import RcnetError, SimulatorError
from rcnet.opinion._acceptance import telling_line
from rcnet.opinion.ngspice import (
    Expected,
    Run,
    RunFailed,
    find_ngspice,
    guard_deck,
    install_hint,
    joined_raw,
    ngspice_version,
    run_deck,
)

posix_only = pytest.mark.skipif(os.name != "posix", reason="the stand-ins are scripts with a first line `#!`")

HEAD = "* flow meter\nV1 in 0 DC 0 AC 1\n"
FILTER = HEAD + "R1 in out 1k\nC1 out 0 1u\n"
QUIET = ".options noopac\n"
SWEEP = ".ac dec 10 1 1e6\n.end\n"
AC = Expected("AC Analysis", ("v(out)",), 61)
OP = Expected("Operating Point", ("v(out)",), 1)
TRAN = Expected("Transient Analysis", ("v(out)",))
NOISE = Expected("Noise Spectral Density Curves", ("onoise_spectrum",))


def live(deck: str, expected: Expected, timeout: float = 30) -> Run:
    """The deck through the real ngspice."""
    executable = find_ngspice()
    assert executable is not None
    return run_deck(deck, expected, executable=executable, timeout=timeout)


# ---------------------------------------------------------------------------------------------- good runs


@pytest.mark.ngspice
def test_a_good_run_has_the_values_of_the_closed_form() -> None:
    """H = 1/(1 + j omega R C) for one RC section, at ngspice's own frequencies, to 1e-12."""
    run = live(FILTER + QUIET + SWEEP, AC)
    curve = parse_raw(run.raw, "results.raw").get("v(out)", "ac")
    assert curve is not None
    exact = 1 / (1 + 2j * np.pi * curve.axis * 1e3 * 1e-6)
    np.testing.assert_allclose(curve.values, exact, rtol=1e-12)
    assert (len(curve), curve.axis[0], curve.axis[-1]) == (61, 1.0, pytest.approx(1e6, rel=1e-12))
    assert re.fullmatch(r"ngspice-\d+.*", run.version)
    assert run.seconds > 0
    assert "No. of Data Rows : 61" in run.log


@pytest.mark.ngspice
@pytest.mark.parametrize(
    ("deck", "expected"),
    [
        pytest.param(FILTER + ".op\n.end\n", OP, id="operating point"),
        pytest.param(FILTER + ".tran 10u 1m\n.end\n", TRAN, id="transient"),
        pytest.param(FILTER + ".noise v(out) V1 dec 10 1 1e4\n.end\n", NOISE, id="noise, totals behind it"),
        pytest.param(
            FILTER + QUIET + ".ac lin 1 50 50\n", Expected("AC Analysis", ("v(out)",), 1), id="one frequency"
        ),
        pytest.param(FILTER + QUIET + ".ac dec 1 1 10\n", Expected("AC Analysis", (), 2), id="one step"),
        pytest.param(FILTER + "+\n" + QUIET + "+\n.ac dec\n+ 10 1\n* why\n+ 1e6\n", AC, id="continued lines"),
        pytest.param(FILTER.replace("DC 0 ", "") + QUIET + SWEEP, AC, id="harmless note: no value"),
        pytest.param(
            FILTER.replace("DC 0", "DC 0 SIN(1 1 1k)") + ".tran 10u 1m\n", TRAN, id="harmless note: dc value"
        ),
        pytest.param(
            HEAD.replace("flow meter", "Error: aborted, Warning: x") + FILTER[len(HEAD) :] + QUIET + SWEEP,
            AC,
            id="title that speaks of errors",
        ),
        pytest.param(
            HEAD + "R1 in error 1k\nC1 error 0 1u\nR2 in aborted 1k\nC2 aborted 0 1u\n.tran 10u 1m\n",
            Expected("Transient Analysis", ("v(error)", "v(aborted)")),
            id="nodes called error and aborted",
        ),
        pytest.param(
            FILTER.replace("V1", "V.error").replace("DC 0 ", "") + QUIET + SWEEP,
            AC,
            id="source called error in a harmless note",
        ),
        pytest.param(
            HEAD + "R1 in out 1k\nC1 out x 1u\nR2 x 0 1k\nC2 x 0 1u\n" + QUIET + SWEEP, AC, id="noopac"
        ),
    ],
)
def test_a_good_run_is_accepted(deck: str, expected: Expected) -> None:
    """Every kind of analysis passes, and words of the user's are not mistaken for the simulator's."""
    run = live(deck, expected)
    curves = parse_raw(run.raw, "results.raw")
    assert all(curves.get(name) is not None for name in expected.variables)


@pytest.mark.ngspice
def test_joined_results_are_one_results_file() -> None:
    """Several runs make one raw file, plot after plot."""
    runs = [
        live(FILTER + QUIET + SWEEP, AC),
        live(FILTER + ".op\n", OP),
        live(FILTER + ".tran 10u 1m\n", TRAN),
    ]
    curves = parse_raw(joined_raw(runs), "results.raw")
    assert [len(curves.of(word)) > 0 for word in ("ac", "operating point", "transient")] == [True] * 3


@pytest.mark.ngspice
def test_nothing_is_left_in_the_temporary_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The private folder is gone after a good run and after a failed one."""
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    live(FILTER + QUIET + SWEEP, AC)
    with pytest.raises(RunFailed):
        live(FILTER + ".foo\n", AC)
    assert list(tmp_path.iterdir()) == []


# --------------------------------------------------------------------------- runs that must not be believed

# What ngspice 39 does with a deck that is not as it should be. Where it is refused beforehand, the class is
# SimulatorError itself; where ngspice has run, RunFailed.
BAD_DECKS = [
    pytest.param(
        HEAD + "R1 in out\nC1 out 0 1u\n" + QUIET + SWEEP,
        AC,
        SimulatorError,
        "line 3: .*'R1' lacks",
        id="resistor without value",
    ),
    pytest.param(
        HEAD + "R1 in out 1k\nC1 out 0\n" + QUIET + SWEEP,
        AC,
        SimulatorError,
        "line 4: .*'C1' lacks",
        id="capacitor without value",
    ),
    pytest.param(
        HEAD + "R1 in  1k\nC1 out 0 1u\n" + QUIET + SWEEP, AC, SimulatorError, "'R1' lacks", id="node missing"
    ),
    pytest.param(
        HEAD + "R1 in out {1-1+}\nC1 out 0 1u\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "ngspice",
        id="expression that is none",
    ),
    pytest.param(
        "V1 in 0 DC 0 AC 1\nR1 in out 1k\nC1 out 0 1u\n" + QUIET + SWEEP,
        AC,
        SimulatorError,
        "no source carries an AC value",
        id="element as title",
    ),
    pytest.param(
        FILTER.replace(" AC 1", "") + QUIET + SWEEP,
        AC,
        SimulatorError,
        "no source carries an AC value",
        id="no AC on any source",
    ),
    pytest.param(FILTER + ".end\n", AC, RunFailed, "without writing any results", id="no analysis"),
    pytest.param(
        (FILTER + QUIET + SWEEP).replace("\n", "\r"),
        AC,
        SimulatorError,
        r"control character '\\r'",
        id="CR for LF",
    ),
    pytest.param(
        FILTER + QUIET + ".ac dec 10 1 1M\n",
        AC,
        SimulatorError,
        "above zero that rise",
        id="stop at one milli",
    ),
    pytest.param(
        HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n" + SWEEP,
        AC,
        RunFailed,
        'saying "Warning: singular matrix: check node x"',
        id="no DC path, .ac with operating point",
    ),
    pytest.param(
        HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n.op\n",
        OP,
        RunFailed,
        "must not be trusted, saying .*singular matrix",
        id="no DC path, .op",
    ),
    pytest.param(
        HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n.tran 10u 1m\n",
        TRAN,
        RunFailed,
        "must not be trusted, saying .*singular matrix",
        id="no DC path, .tran",
    ),
    pytest.param(
        HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n.tf v(out) V1\n",
        Expected("Transfer Function", ()),
        RunFailed,
        "must not be trusted, saying .*singular matrix",
        id="no DC path, .tf",
    ),
    pytest.param(
        FILTER + ".noise v(nope) V1 dec 10 1 1e4\n",
        NOISE,
        SimulatorError,
        "no part touches the noise output 'nope'",
        id="noise of no node",
    ),
    pytest.param(
        FILTER + "=C2 out 0 1u\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "Unusual leading characters",
        id="unusual leading character",
    ),
    pytest.param(
        FILTER + "R9 a b 1k\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        'exit code 1, saying "doAnalyses: matrix is singular"',
        id="floating part, .ac",
    ),
    pytest.param(
        FILTER + "R9 a b 1k\n.noise v(out) V1 dec 10 1 1e4\n",
        NOISE,
        RunFailed,
        "it aborted itself",
        id="floating part, .noise",
    ),
    pytest.param(
        FILTER + "V2 in 0 DC 1\n.tran 10u 1m\n",
        TRAN,
        RunFailed,
        "exit code 1, saying",
        id="loop of voltage sources",
    ),
    pytest.param(
        FILTER + "V2 in 0 DC 1\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "matrix is singular",
        id="loop of voltage sources, .ac",
    ),
    pytest.param(
        FILTER + "R1 in out 1k\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "Error on line 5 or its substitute: r1 in out 1k device already exists",
        id="duplicate name",
    ),
    pytest.param(
        FILTER + "Y1 in out 1k\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "Error on line 5 .*model name is not found",
        id="unknown element",
    ),
    pytest.param(FILTER + ".foo\n" + SWEEP, AC, RunFailed, "unimplemented control card", id="unknown card"),
    pytest.param(FILTER + ".ac foo\n", AC, RunFailed, "Error on line 5", id="unknown sweep"),
    pytest.param(FILTER + "R2 in 0 1k foo\n" + QUIET + SWEEP, AC, RunFailed, "foo", id="extra word"),
    pytest.param(
        FILTER + "X1 in out foo\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "Error: unknown subckt: x1 in out foo",
        id="unknown subcircuit",
    ),
    pytest.param(
        FILTER + "R2 in 0 {rr}\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        r"exit code 1, saying \"Undefined parameter \[rr\]\"",
        id="undefined parameter",
    ),
    pytest.param(
        FILTER + ".include none.cir\n" + SWEEP, AC, SimulatorError, "line 5: .*'.inc'", id="missing include"
    ),
    pytest.param(
        FILTER + ".include in.cir\n" + SWEEP, AC, SimulatorError, "'.inc'", id="deck including itself"
    ),
    pytest.param(
        "* " + "x" * 503 + FILTER[12:] + SWEEP, AC, SimulatorError, "title has 505 bytes", id="long title"
    ),
    pytest.param(
        FILTER + QUIET + ".save v(in)\n" + SWEEP, AC, RunFailed, r"lack 'v\(out\)'", id="vector not there"
    ),
    pytest.param(FILTER + QUIET + ".ac dec 11 1 1e6\n", AC, RunFailed, "67 points where 61", id="other grid"),
    pytest.param(
        FILTER + ".tran 10u 1m\n",
        AC,
        RunFailed,
        "'Transient Analysis' where 'AC Analysis'",
        id="other analysis",
    ),
    pytest.param(
        FILTER + ".op\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "'AC Analysis' and 'Operating Point' where",
        id="two analyses",
    ),
    pytest.param(
        FILTER + ".options interp\n.tran 10u 1m\n", TRAN, RunFailed, "results", id="interp writes garbage"
    ),
    pytest.param(
        HEAD + "R1 in out 1e-320\nC1 out 0 1e300\n" + QUIET + SWEEP,
        AC,
        RunFailed,
        "infinite or no numbers",
        id="values beyond the doubles",
    ),
]


@pytest.mark.ngspice
@pytest.mark.parametrize(("deck", "expected", "kind", "message"), BAD_DECKS)
def test_a_bad_deck_is_refused(deck: str, expected: Expected, kind: type, message: str) -> None:
    """What ngspice gets wrong, with whatever exit code, is an error in one sentence with a remedy."""
    with pytest.raises(SimulatorError, match=message) as caught:
        live(deck, expected)
    assert type(caught.value) is kind
    assert caught.value.remedy
    assert caught.value.message.endswith(".")
    assert "\n" not in str(caught.value)


@pytest.mark.ngspice
def test_a_failed_run_carries_the_whole_log() -> None:
    """The caller can keep the simulator's log of a run that failed."""
    with pytest.raises(RunFailed) as caught:
        live(FILTER + "R9 a b 1k\n" + QUIET + SWEEP, AC)
    assert "run simulation(s) aborted" in caught.value.log
    assert isinstance(caught.value, RcnetError)


@pytest.mark.ngspice
def test_a_run_that_takes_too_long_is_stopped() -> None:
    """A transient of a hundred million steps ends when its time is up, and the error names the seconds."""
    began = time.monotonic()
    with pytest.raises(RunFailed, match=r"not done after 0\.5 s") as caught:
        live(FILTER + ".tran 10n 1\n", TRAN, timeout=0.5)
    assert time.monotonic() - began < 10
    assert "--timeout" in (caught.value.remedy or "")


@pytest.mark.parametrize("timeout", [0, -1, float("nan"), float("inf")])
def test_a_time_limit_must_be_a_time(timeout: float) -> None:
    """A limit that is none is refused before anything is started."""
    with pytest.raises(SimulatorError, match="time limit"):
        run_deck(FILTER + QUIET + SWEEP, AC, executable="none", timeout=timeout)


def test_a_failure_survives_pickling_and_placing() -> None:
    """Message, remedy and log are the same after a trip to another process, and with a file filled in."""
    error = RunFailed("ngspice crashed.", remedy="Look.", log="line\n")
    for copy in (pickle.loads(pickle.dumps(error)), error.at("gauge.cir", 3)):
        assert type(copy) is RunFailed
        assert (copy.message, copy.remedy, copy.log) == ("ngspice crashed.", "Look.", "line\n")
    assert error.at("gauge.cir", 3).file == "gauge.cir"


# ------------------------------------------------------------------------------------------------ the guard

NEVER_ENDING = [".ac dec 10 10 11", ".ac dec 1 18.2 95.06", ".ac dec 1 0.0011 0.011", ".ac dec 10 1 1"]


@pytest.mark.parametrize(
    ("deck", "message"),
    [
        *(
            pytest.param(
                f"{start}{words}\n{FILTER}{SWEEP}" if first else f"{FILTER}{start}{words}\n{SWEEP}",
                "begins with",
                id=f"{words!r} after {start!r}{' as title' if first else ''}",
            )
            for words in (
                "*#shell date",
                "*NG_script",
                ".control",
                ".CONTROL x",
                ".include x",
                ".inc x",
                ".LIB x y",
            )
            for start in ("", "  ", "\t", ";", "\xa0", " = ")
            for first in (False, True)
        ),
        pytest.param(FILTER + SWEEP + ".control\n", "begins with '.control'", id="after .end"),
        pytest.param(FILTER + "A1 in out gain\n" + SWEEP, "code model", id="A element"),
        pytest.param(FILTER + "  axyz in out gain\n" + SWEEP, "code model", id="indented a element"),
        pytest.param(
            "* x\u2028.control\n" + FILTER + SWEEP, "control character", id="line separator in the title"
        ),
        pytest.param(
            "* x\x0b.control\n" + FILTER + SWEEP, "control character", id="vertical tab in the title"
        ),
        pytest.param("* x\x85.control\n" + FILTER + SWEEP, "control character", id="next line in the title"),
        pytest.param(FILTER + "R2 a\0 0 1\n" + SWEEP, "control character", id="NUL"),
        pytest.param("* x\r\n" + FILTER + SWEEP, "control character", id="CR"),
        pytest.param("* x\ud800\n" + FILTER + SWEEP, "control character", id="half a character"),
        pytest.param(FILTER + ".cont\\\nrol\n" + SWEEP, "backslash", id="joined lines"),
        pytest.param("", "title, is empty", id="nothing"),
        pytest.param("\n" + FILTER + SWEEP, "title, is empty", id="empty title"),
        pytest.param(" \t\n" + FILTER + SWEEP, "title, is empty", id="blank title"),
        pytest.param("*" + "µ" * 200 + "\n" + FILTER + SWEEP, "401 bytes", id="title of 401 bytes"),
        *(pytest.param(FILTER + line + "\n", "never ends|that rise", id=line) for line in NEVER_ENDING),
        pytest.param(FILTER + ".AC DEC\n* why\n+ 10,\n+ (10 11)\n", "never ends", id="grid in pieces"),
        pytest.param(FILTER + ".ac dec 10 0 10\n", "that rise", id="from zero"),
        pytest.param(FILTER + ".ac dec 10 10 1\n", "that rise", id="falling"),
        pytest.param(FILTER + ".ac oct 10 0 10\n", "that rise", id="octaves from zero"),
        pytest.param(FILTER + ".ac lin 10 10 1\n", "no frequency", id="falling, linear"),
        pytest.param(FILTER + ".ac dec 0 1 10\n", "whole number from 1", id="no points"),
        pytest.param(FILTER + ".ac dec 2.7 1 10\n", "whole number from 1", id="a broken number of points"),
        pytest.param(FILTER + ".ac dec 10 1 1e400\n", "cannot be read", id="to infinity"),
        pytest.param(FILTER + ".ac dec 10 1\n", "cannot be read", id="half a grid"),
        pytest.param(FILTER + ".ac dec {n} 1 10\n", "cannot be read", id="a grid that is computed"),
        pytest.param(
            FILTER + ".noise v(out) V1 dec 10 1 1\n", "that rise", id="noise at one frequency by decades"
        ),
    ],
)
def test_an_unsafe_deck_is_refused(deck: str, message: str) -> None:
    """What could reach beyond the simulation, or never end, is named with its line and goes nowhere."""
    with pytest.raises(SimulatorError, match=message) as caught:
        guard_deck(deck)
    assert caught.value.line is not None
    assert caught.value.remedy


@pytest.mark.parametrize(
    "deck",
    [
        pytest.param("A flow meter\n" + FILTER + SWEEP, id="title beginning with A"),
        pytest.param("Control .include .lib *# of a pump\n" + FILTER + SWEEP, id="title that speaks of them"),
        pytest.param("*" + "µ" * 199 + "\n" + FILTER + SWEEP, id="title of 399 bytes"),
        pytest.param(FILTER + "* A1 .control *#\n" + SWEEP, id="comment that speaks of them"),
        pytest.param(FILTER + "R2 out .control 1k\nR3 out A1 1k\n" + SWEEP, id="nodes called so"),
        pytest.param(FILTER + "R2 out\n* why\n\n+ 0 1k\n" + SWEEP, id="part in pieces"),
        pytest.param(FILTER.replace(" AC 1", "\n+ AC 1") + SWEEP, id="source in pieces"),
        pytest.param(FILTER + ".noise v(out, 0) V1 dec 10 1 1k 1\n", id="noise"),
        pytest.param(FILTER + ".ac dec 10 1k 10meg\n", id="grid with suffixes"),
        pytest.param(FILTER + ".ac lin 1 0 0\n", id="zero frequency"),
        pytest.param(FILTER + ".ac oct 4 1 1000\n", id="octaves"),
        pytest.param("* µ\n" + FILTER + SWEEP, id="micro sign"),
    ],
)
def test_a_safe_deck_passes_the_guard(deck: str) -> None:
    """The guard does not stop what is harmless."""
    guard_deck(deck)


@settings(deadline=None, max_examples=200)
@given(
    st.sampled_from(["", "* pump station\n"]),
    st.lists(
        st.sampled_from(
            [
                "*#",
                ".control",
                ".CONTROL",
                ".inc",
                " ",
                "\t",
                "\n",
                "+",
                "A1",
                "R1 a b 1k",
                "*",
                ";",
                "\r",
                "\u2028",
            ]
        )
        | st.text(max_size=3),
        max_size=12,
    ),
)
def test_nothing_dangerous_passes_the_guard(title: str, pieces: list[str]) -> None:
    """Whatever passes, no line of it, split as broadly as Python does, begins as a command would."""
    deck = title + "".join(pieces)
    try:
        guard_deck(deck)
    except SimulatorError:
        return
    for number, line in enumerate(deck.splitlines()):
        start = line.strip().lower()
        assert not start.startswith(("*#", "*ng_script", ".control", ".inc", ".lib"))
        assert number == 0 or not start.startswith("a")
    assert "\0" not in deck


def test_a_deck_of_many_parts_is_looked_through_quickly() -> None:
    """A hundred thousand parts pass the guard in seconds."""
    ladder = "".join(f"R{i} n{i} n{i + 1} 1k\nC{i} n{i + 1} 0 1n\n" for i in range(50_000))
    began = time.monotonic()
    guard_deck(HEAD + ladder + "*\n" * 50_000 + QUIET + SWEEP)
    assert time.monotonic() - began < 5


# ------------------------------------------------------------------------------------------------- the log


@pytest.mark.parametrize(
    ("log", "line"),
    [
        pytest.param("Circuit: * error\n\nNote: No compatibility mode selected!\n", None, id="title"),
        pytest.param(
            "Initial Transient Solution\n--\n\nNode   Voltage\n----   -------\nerror  1e-3\nWarning:_x  -2\n",
            None,
            id="node table",
        ),
        pytest.param(
            "Node   Voltage\n----   -------\nerror  0\n\nError: out of memory\n",
            "Error: out of memory",
            id="after it",
        ),
        pytest.param(
            "Note: Starting dynamic gmin stepping", "Note: Starting dynamic gmin stepping", id="note"
        ),
        pytest.param("Note: v1: has no value, DC 0 assumed", None, id="harmless note"),
        pytest.param("Note: Reducing trtol to 1", None, id="reducing trtol"),
        pytest.param(
            "ERROR: fatal error in ngspice, exit(1)", "ERROR: fatal error in ngspice, exit(1)", id="fatal"
        ),
        pytest.param("a\x1b[31m\x07error\t\tx", "a [31m error x", id="escapes"),
        pytest.param("Error " + "x" * 500, "Error " + "x" * 191 + "...", id="long line"),
        pytest.param("no terror here", None, id="part of a word"),
    ],
)
def test_the_log_is_judged_by_the_simulators_own_words(log: str, line: str | None) -> None:
    """Phrases of trouble count, unless the log only repeats the user's names."""
    assert telling_line(log) == line


# ------------------------------------------------------------------------------------ stand-in simulators


def stand_in(folder: Path, body: str) -> str:
    """A program that takes ngspice's place: Python code with `raw` and `log`, the files it should write."""
    path = folder / "stand-in"
    head = f"#!{sys.executable} -IS\nimport os, signal, struct, sys, time\n"
    head += "raw, log = (sys.argv + [None] * 6)[4:7:2]\n"
    path.write_text(head + textwrap.dedent(body))
    path.chmod(path.stat().st_mode | stat.S_IXUSR)
    return str(path)


HEADER = (
    "Title: * t\\nDate: today\\nPlotname: AC Analysis\\nFlags: complex\\n"
    "No. Variables: 2\\nNo. Points: {points}\\n"
    "Variables:\\n\\t0\\tfrequency\\tfrequency\\tgrid=3\\n\\t1\\tv(out)\\tvoltage\\nBinary:\\n"
)


def writes(points: int, values: str) -> str:
    """Code of a stand-in that writes a raw file of that many points with those bytes behind the header."""
    return (
        f"open(raw, 'wb').write(b'{HEADER.format(points=points)}' + {values})\nopen(log, 'w').write('fine')"
    )


WHOLE = "struct.pack('<8d', 1, float('nan'), .9, -.1, 2, float('inf'), .8, -.2)"
TWO = Expected("AC Analysis", ("v(out)",), 2)


@posix_only
def test_a_stand_in_that_does_everything_right_is_believed(tmp_path: Path) -> None:
    """The imaginary part of the frequency may be anything, as ngspice leaves unset memory there."""
    run = run_deck(FILTER + SWEEP, TWO, executable=stand_in(tmp_path, writes(2, WHOLE)))
    assert run.log == "fine"


@posix_only
@pytest.mark.parametrize(
    ("body", "message"),
    [
        pytest.param("pass", "without writing any results", id="prints nothing and exits 0"),
        pytest.param(writes(2, WHOLE + "[:40]"), "are cut short", id="half a raw file"),
        pytest.param(writes(2, WHOLE + "+ b'x'"), "stop in the middle of their header", id="a byte too many"),
        pytest.param(writes(2, WHOLE + "+ b'x\\n'"), "no raw file", id="a line too many"),
        pytest.param(writes(0, WHOLE), "results", id="points not filled in"),
        pytest.param(writes(0, "b''"), "have 0 points", id="no points"),
        pytest.param(writes(-1, "b''"), "negative", id="negative points"),
        pytest.param(writes(10**15, "b''"), "are cut short", id="more points than the world holds"),
        pytest.param(
            writes(2, "struct.pack('<8d', 1, 0, float('nan'), 0, 2, 0, 0, 0)"),
            "infinite or no numbers",
            id="not a number",
        ),
        pytest.param(
            writes(2, "struct.pack('<8d', 2, 0, 1, 0, 1, 0, 1, 0)"), "does not rise", id="falling axis"
        ),
        pytest.param("open(raw, 'w').write('hello')", "stop in the middle", id="no raw file"),
        pytest.param("open(raw, 'wb').write(b'Title: x\\nVariables:\\n')", "header", id="half a header"),
        pytest.param("os.mkdir(raw)", "cannot be used", id="a folder for a file"),
        pytest.param("os.mkfifo(log)", "cannot be used", id="a pipe for a log"),
        pytest.param("sys.exit(3)", "ended with exit code 3", id="exit code without a word"),
        pytest.param(
            "sys.stderr.write('Error: no licence\\n'); sys.exit(1)",
            'saying "Error: no licence"',
            id="words on standard error",
        ),
        pytest.param(
            writes(2, WHOLE) + "\nopen(log, 'w').write('Warning: x')",
            "must not be trusted",
            id="good results, bad log",
        ),
        pytest.param(
            writes(2, WHOLE) + "\nsys.stderr.write('Warning: x')",
            "must not be trusted",
            id="good results, warning on standard error",
        ),
        *(
            pytest.param(f"os.kill(os.getpid(), signal.{name})", words, id=name)
            for name, words in {
                "SIGSEGV": r"ngspice crashed \(segmentation fault\)",
                "SIGABRT": "ngspice gave up",
                "SIGKILL": "ngspice was killed from outside",
                "SIGTERM": "ngspice was ended from outside",
                "SIGXCPU": "ngspice used up its processor time",
            }.items()
        ),
    ],
)
def test_a_simulator_that_misbehaves_is_not_believed(tmp_path: Path, body: str, message: str) -> None:
    """Whatever the program does, the outcome is one sentence with a remedy, never a result."""
    with pytest.raises(RunFailed, match=message) as caught:
        run_deck(FILTER + SWEEP, TWO, executable=stand_in(tmp_path, body))
    assert caught.value.remedy


@posix_only
def test_a_simulator_that_sleeps_for_ever_is_killed_with_its_children(tmp_path: Path) -> None:
    """After the timeout neither the program nor anything it started is left."""
    pids = tmp_path / "pids"
    body = f"""
        child = os.fork()
        if child:
            open({str(pids)!r}, "w").write(f"{{os.getpid()}} {{child}}")
        signal.signal(signal.SIGTERM, signal.SIG_IGN)
        while True:
            time.sleep(60)
    """
    with pytest.raises(RunFailed, match=r"not done after 0\.7 s"):
        run_deck(FILTER + SWEEP, AC, executable=stand_in(tmp_path, body), timeout=0.7)
    for pid in map(int, pids.read_text().split()):
        assert gone_soon(pid)


def gone_soon(pid: int) -> bool:
    """Whether a process has died within five seconds (unreaped counts as dead)."""
    for _ in range(250):
        try:
            os.kill(pid, 0)
        except ProcessLookupError:
            return True
        status = Path(f"/proc/{pid}/stat")
        if status.exists() and status.read_text().rpartition(")")[2].split()[0] == "Z":
            return True
        time.sleep(0.02)
    return False


@posix_only
def test_the_simulator_gets_a_folder_and_an_environment_of_its_own(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """SPICE variables do not reach it, HOME is the private folder, and the deck is the only file there."""
    monkeypatch.setenv("SPICE_SCRIPTS", "/elsewhere")
    monkeypatch.setenv("SPICE_ASCIIRAWFILE", "1")
    out = tmp_path / "seen"
    body = f"""
        seen = sorted(os.environ), os.environ["HOME"] == os.getcwd(), os.listdir("."), sys.argv[1:]
        open({str(out)!r}, "w").write(repr(seen))
    """
    with pytest.raises(RunFailed):
        run_deck(FILTER + SWEEP, AC, executable=stand_in(tmp_path, body))
    arguments = ["-b", "-n", "-r", "out.raw", "-o", "out.log", "in.cir"]
    assert out.read_text() == repr((["HOME", "LC_ALL", "PATH"], True, ["in.cir"], arguments))


@posix_only
def test_ctrl_c_ends_the_simulator_and_passes_through(tmp_path: Path) -> None:
    """KeyboardInterrupt reaches the caller as itself, after the program was killed."""
    pid_file = tmp_path / "pid"
    body = f"""
        open({str(pid_file)!r}, "w").write(str(os.getpid()))
        os.kill(os.getppid(), signal.SIGINT)
        time.sleep(60)
    """
    before = signal.signal(signal.SIGINT, signal.default_int_handler)
    try:
        with pytest.raises(KeyboardInterrupt):
            run_deck(FILTER + SWEEP, AC, executable=stand_in(tmp_path, body), timeout=30)
    finally:
        signal.signal(signal.SIGINT, before)
    assert gone_soon(int(pid_file.read_text()))


@pytest.mark.parametrize("bad", ["missing", "not executable", "a folder"])
def test_a_program_that_cannot_be_started_is_named(tmp_path: Path, bad: str) -> None:
    """The error names the program and says where ngspice comes from."""
    path = tmp_path / "ngspice"
    if bad == "not executable":
        path.write_text("x")
    elif bad == "a folder":
        path.mkdir()
    with pytest.raises(SimulatorError, match="cannot be started") as caught:
        run_deck(FILTER + SWEEP, AC, executable=str(path))
    assert str(path) in caught.value.message
    assert "apt install ngspice" in (caught.value.remedy or "")


def test_a_full_temporary_folder_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where no private folder can be made, the error says which variable chooses another place."""

    def full(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("tempfile.mkdtemp", full)
    with pytest.raises(SimulatorError, match="No space left on device") as caught:
        run_deck(FILTER + SWEEP, AC, executable="ngspice")
    assert "TMPDIR" in (caught.value.remedy or "")


# -------------------------------------------------------------------------------------------- finding it


@pytest.mark.ngspice
def test_the_version_is_the_programs_own() -> None:
    """`ngspice --version` names itself in its banner."""
    executable = find_ngspice()
    assert executable is not None
    assert Path(executable).is_absolute()
    assert re.fullmatch(r"ngspice-\d+\S*", ngspice_version(executable))


@posix_only
def test_a_program_that_is_no_ngspice_has_no_version(tmp_path: Path) -> None:
    """A program without ngspice's banner is refused."""
    with pytest.raises(SimulatorError, match="does not say which ngspice"):
        ngspice_version(stand_in(tmp_path, "print('hello')"))


def test_the_environment_names_the_program(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """RCNET_NGSPICE comes before PATH."""
    path = tmp_path / ("ngspice.exe" if os.name == "nt" else "my-ngspice")
    path.write_text("#!/bin/sh\n")
    path.chmod(0o755)
    monkeypatch.setenv("RCNET_NGSPICE", str(path))
    assert find_ngspice() == str(path)


def test_an_environment_that_names_no_program_is_an_error(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A wrong RCNET_NGSPICE is not passed over in silence."""
    monkeypatch.setenv("RCNET_NGSPICE", str(tmp_path / "none"))
    with pytest.raises(SimulatorError, match="RCNET_NGSPICE"):
        find_ngspice()


def test_no_ngspice_anywhere_is_none(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine without ngspice gives None, and the hint says how to get it and what to do without."""
    monkeypatch.delenv("RCNET_NGSPICE", raising=False)
    monkeypatch.setenv("PATH", str(tmp_path))
    assert find_ngspice() is None
    assert all(word in install_hint() for word in ("apt install", "brew install", "Windows", "rcnet compare"))


def test_raw_files_join_byte_for_byte() -> None:
    """Joining adds and drops nothing."""
    parts = [struct.pack("<d", value) for value in (1.0, 2.0)]
    assert joined_raw([Run(part, "", "ngspice-39", 0.1) for part in parts]) == b"".join(parts)
    assert joined_raw([]) == b""
