"""What ngspice 39 does without a word, one netlist each: what it really does, and what rcnet says of it."""

from __future__ import annotations

import json
import signal
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pytest

from rcnet.check import check
from rcnet.cli.main import run
from rcnet.curves import Curve, Curves
from rcnet.curves.raw import parse_raw
from rcnet.errors import ResultsError
from rcnet.findings import all_rules
from rcnet.netlist import parse_netlist
from rcnet.opinion.ngspice import find_ngspice
from rcnet.system.process import clean_environment, run_limited

pytestmark = pytest.mark.ngspice


@dataclass(frozen=True)
class Ran:
    """What ngspice left of a netlist: exit code (None: it did not end), raw file, what it said, files."""

    code: int | None
    raw: bytes | None
    said: str
    files: frozenset[str]
    text: str
    again: Callable[[str], Ran]

    @property
    def curves(self) -> Curves:
        """The results; exit code 0 and a whole raw file are demanded."""
        assert self.code == 0, self.said
        assert self.raw is not None, self.said
        return parse_raw(self.raw, "out.raw")

    def of(self, name: str) -> Curve:
        """The first curve of that name."""
        return next(curve for curve in self.curves if curve.name == name)


def simulate(folder: Path, text: str, *, keep_raw: bool = True) -> Ran:
    """Run a netlist as somebody does who was given it, in a folder of its own and within limits."""
    program = find_ngspice()
    assert program is not None
    (folder / "in.cir").write_bytes(text.encode())
    before = {path.name for path in folder.iterdir()}
    done = run_limited(
        [program, "-b", "-n", *(["-r", "out.raw"] if keep_raw else []), "in.cir"],
        cwd=folder,
        env=clean_environment(folder),
        timeout=2,
        memory_bytes=2**30,
        file_bytes=2**24,
        cpu_seconds=5,
    )
    endless = done.timed_out or done.returncode == -getattr(signal, "SIGXFSZ", 25)
    raw = folder / "out.raw"
    return Ran(
        None if endless else done.returncode,
        raw.read_bytes() if raw.exists() and not endless else None,
        (done.stdout + done.stderr).decode("utf-8", "replace"),
        frozenset(path.name for path in folder.iterdir()) - before,
        text,
        lambda other: simulate(folder, other),
    )


Does = Callable[[Ran], None]


@dataclass(frozen=True)
class Trap:
    """A netlist, what ngspice does with it, and the code, severity and line of what rcnet says.

    severity: of the finding; `refused` where the netlist is not read, whatever the code where that is None
    files: what lies beside it
    """

    text: str
    does: Does
    code: str | None
    severity: str
    line: int | None
    files: Mapping[str, str] = field(default_factory=dict)
    keep_raw: bool = True


# ---------------------------------------------------------------------- what ngspice does


def like(text: str, name: str = "v(out)") -> Does:
    """Exit code 0, and the very results of another netlist, one that says what is taken."""

    def check(ran: Ran) -> None:
        mine, meant = ran.of(name), ran.again(text).of(name)
        np.testing.assert_allclose(mine.axis, meant.axis, rtol=1e-12)
        np.testing.assert_allclose(mine.values, meant.values, rtol=1e-12, atol=1e-300)

    return check


def gives(value: complex, name: str = "v(out)") -> Does:
    """Exit code 0, and this value at the first point."""

    def check(ran: Ran) -> None:
        assert ran.of(name).values[0] == pytest.approx(value, rel=1e-6)

    return check


def never(value: complex, off: float = 0.01, name: str = "v(out)") -> Does:
    """Exit code 0, and at the first point anything but the value that is right."""

    def check(ran: Ran) -> None:
        assert abs(ran.of(name).values[0] - value) > off

    return check


def zeros(name: str = "v(out)") -> Does:
    """Exit code 0, and nothing but zeros."""

    def check(ran: Ran) -> None:
        assert not ran.of(name).values.any()

    return check


def points(count: int, last: float, name: str = "v(out)") -> Does:
    """Exit code 0, so many points, and the last of them there."""

    def check(ran: Ran) -> None:
        assert len(ran.of(name)) == count
        assert ran.of(name).axis[-1] == pytest.approx(last, rel=1e-4)

    return check


def steps_beyond(size: float, name: str = "v(out)") -> Does:
    """Exit code 0, and time steps longer than that."""

    def check(ran: Ran) -> None:
        assert np.diff(ran.of(name).axis).max() > size

    return check


def differs(ran: Ran) -> None:
    """Exit code 0, and another answer each time."""
    answers = {complex(ran.of("v(out)").values[0])}
    answers |= {complex(ran.again(ran.text).of("v(out)").values[0]) for _ in range(3)}
    assert len(answers) > 1


def lacks(name: str, but: str = "v(out)") -> Does:
    """Exit code 0, and no curve of a name, though there are others."""

    def check(ran: Ran) -> None:
        names = {curve.name for curve in ran.curves}
        assert name not in names
        assert but in names

    return check


def no_results(ran: Ran) -> None:
    """Exit code 0, and no raw file."""
    assert (ran.code, ran.raw) == (0, None)


def no_points(ran: Ran) -> None:
    """Exit code 0, and a raw file of no points."""
    assert ran.code == 0
    assert ran.raw is not None
    assert b"No. Points: 0 " in ran.raw


def spoilt(ran: Ran) -> None:
    """Exit code 0, and a raw file that is not whole."""
    assert ran.code == 0
    assert ran.raw is not None
    with pytest.raises(ResultsError):
        parse_raw(ran.raw, "out.raw")


def endless(ran: Ran) -> None:
    """It does not end."""
    assert ran.code is None


def aborts(ran: Ran) -> None:
    """It crashes."""
    assert ran.code is not None
    assert ran.code < 0


def fails(ran: Ran) -> None:
    """It crashes, or says something about a syntax that is not there."""
    assert ran.code


def touches(ran: Ran) -> None:
    """A file is there that the netlist named."""
    assert ran.files & {"touched", "touched.data"}


def obeys(ran: Ran) -> None:
    """Exit code 0, and the command was looked at."""
    assert ran.code == 0
    assert "none.cm" in ran.said


def says(text: str, *, no: str = "") -> Does:
    """Exit code 0, and this among what it prints."""

    def check(ran: Ran) -> None:
        assert ran.code == 0
        assert text in ran.said
        assert not no or no not in ran.said

    return check


# ---------------------------------------------------------------------- the netlists

T = "* pump station\n"
V = f"{T}V1 in 0 DC 1 AC 1\n"
D = f"{V}R1 in out 1k\n"
RC = f"{D}C1 out 0 1u\n"
OP = ".op\n.end\n"
AC = ".options noopac\n.ac dec 10 10 10k\n.print ac v(out)\n.end\n"
NOISE = ".noise v(out) V1 dec 10 10 100k\n.end\n"
MILLIOHM = f"{D}R2 out 0 1m\n{OP}"
TWO = f"{V}R1 in out 1k\nR2 out 0 1k\n{OP}"


def resistor(text: str, like_: str, code: str = "odd-number", severity: str = "error") -> Trap:
    """A resistance from `out` to ground as written, and as ngspice takes it."""
    return Trap(f"{D}R2 out 0 {text}\n{OP}", like(f"{D}R2 out 0 {like_}\n{OP}"), code, severity, 4)


def capacitor(text: str, like_: str, code: str = "odd-number", severity: str = "error") -> Trap:
    """A capacitance from `out` to ground as written, and as ngspice takes it."""
    return Trap(f"{D}C2 out 0 {text}\n{AC}", like(f"{D}C2 out 0 {like_}\n{AC}"), code, severity, 4)


def source(text: str, like_: str, code: str, severity: str, run_: str = ".tran 10u 5m") -> Trap:
    """What drives an RC filter, as written, and as ngspice takes it."""
    end = f"R1 in out 1k\nC1 out 0 1u\n{run_}\n.end\n"
    return Trap(f"{T}V1 in 0 {text}\n{end}", like(f"{T}V1 in 0 {like_}\n{end}"), code, severity, 2)


def measured(text: str, does: Does, code: str) -> Trap:
    """A `.meas` line, without a raw file: with one ngspice passes over it."""
    return Trap(
        f"{RC}.save all\n.ac dec 100 1 1meg\n.meas {text}\n.end\n", does, code, "warning", 7, keep_raw=False
    )


def with_parameter(text: str, value: str, code: str, severity: str, line: int) -> Trap:
    """Lines that define the parameter a, and the value it gets."""
    end = f"R1 in out 1k\nR2 out 0 {{a}}\n{OP}"
    return Trap(f"{V}{text}\n{end}", like(f"{V}R1 in out 1k\nR2 out 0 {value}\n{OP}"), code, severity, line)


SUB = ".subckt s a b r=1k\nRs a b {r}\n.ends\n"
INNER = ".subckt s a b\nRq a b 7k m=2\n.ends\n"
FAILS = "measure-fails"
COUPLED = ".subckt s a b\nL1 a 0 1m\nL2 b 0 2m\nK1 L1 L2 0.4\n.ends\n"
READS_FILE = 'a1 [x] fs\n.model fs filesource (file="a.txt" amploffset=[0] amplscale=[1])\n'
COMMANDS = ".control\necho hello > touched\n.endc\n"

EXIT_CODES = {
    "resistor without a value": Trap(f"{D}R2 out 0\n{OP}", like(MILLIOHM), "value-missing", "refused", 4),
    "capacitor without a value": Trap(
        f"{D}C2 out 0\n{AC}", like(f"{D}C2 out 0 0\n{AC}"), "value-missing", "refused", 4
    ),
    "resistor with a node missing": Trap(
        f"{D}R2 out  1k\nR3 1k 0 1k\n{OP}",
        like(f"{D}R2 out x 1m\nR3 x 0 1k\n{OP}"),
        "value-missing",
        "refused",
        4,
    ),
    "part in the first line": Trap(
        f"R2 out 0 1k\n{D.removeprefix(T)}C1 out 0 1u\n{OP}",
        gives(1),
        "title-is-part",
        "warning",
        1,
    ),
    "source in the first line": Trap(
        f"V1 in 0 AC 1\nV2 in2 0 1\nR1 in out 1k\nR2 out 0 1k\n{OP}", gives(0), "title-is-part", "warning", 1
    ),
    "no ac on any source": Trap(f"{RC.replace(' AC 1', '')}{AC}", zeros(), "no-ac-source", "error", 6),
    "no analysis": Trap(f"{RC}.print ac v(out)\n.end\n", no_results, "no-analysis", "warning", 5),
    "carriage returns alone": Trap((RC + AC).replace("\n", "\r"), no_results, "unreadable", "refused", 1),
    "ac up to 1M": Trap(f"{RC}.ac dec 10 1 1M\n.end\n", no_points, "empty-sweep", "error", 5),
    "no dc path, ac": Trap(
        f"{D}C1 out x 1u\nC2 x 0 1u\n.ac dec 10 10 10k\n.end\n",
        says("singular matrix"),
        "no-dc-path",
        "warning",
        4,
    ),
    "noise of a node that is not there": Trap(
        f"{RC}.noise v(nope) V1 dec 10 10 1k\n.end\n",
        zeros("onoise_spectrum"),
        "output-absent",
        "error",
        5,
    ),
    **{
        f"line led by {first}": Trap(
            f"{D}{first}R2 out 0 1k\nC1 out 0 1u\n{OP}", gives(1), "not-a-part", "refused", 4
        )
        for first in '=[]?()&%"!:,'
    },
    "line led by a form feed": Trap(
        f"{D}\fR2 out 0 1k\nC1 out 0 1u\n{OP}", gives(1), "unreadable", "refused", 4
    ),
    "title of 600 bytes": Trap(f"* {'x' * 598}\n{TWO}", aborts, "title-too-long", "warning", 1),
    "file that includes itself": Trap(f"{D}.include in.cir\n{OP}", aborts, "include-recursion", "refused", 4),
}

RESULTS = {
    "second analysis of a kind": Trap(
        f"{RC}.ac dec 10 1 10\n.ac dec 10 100 1k\n.end\n",
        points(11, 1000),
        "second-analysis",
        "warning",
        6,
    ),
    "saving what is not there": Trap(
        f"{RC}.save v(out) v(nope)\n.ac dec 10 10 10k\n.end\n",
        lacks("v(nope)"),
        "printed-absent",
        "warning",
        5,
    ),
    "printing what is not there": Trap(
        f"{RC}.ac dec 10 10 10k\n.print ac v(out) v(nope)\n.end\n",
        lacks("v(nope)"),
        "printed-absent",
        "warning",
        6,
    ),
    "saving a resistor's current": Trap(
        f"{RC}.save all i(r1)\n.ac dec 10 10 10k\n.end\n", lacks("i(r1)"), "printed-absent", "warning", 5
    ),
    "a resistor's current in ac": Trap(
        f"{RC}.save all @r1[i]\n.ac dec 10 10 10k\n.end\n",
        says("unrecognized variable - @r1[i]"),
        "printed-absent",
        "warning",
        5,
    ),
    "interpolated results": Trap(
        f"{RC}.options interp\n.tran 10u 1m\n.end\n", spoilt, "option-changes-circuit", "warning", 5
    ),
}

GRIDS = {
    "less than a step": Trap(f"{RC}.ac dec 10 100 110\n.end\n", endless, "empty-sweep", "error", 5),
    "one step, nearly": Trap(f"{RC}.ac dec 1 0.0011 0.011\n.end\n", endless, "empty-sweep", "error", 5),
    "ends that are equal": Trap(f"{RC}.ac dec 10 100 100\n.end\n", no_points, "empty-sweep", "error", 5),
    "octaves short of the end": Trap(
        f"{RC}.ac oct 4 1 1000\n.end\n", points(40, 861.08), "sweep-ends-early", "note", 5
    ),
    "two points": Trap(f"{RC}.ac lin 2 1 1000\n.end\n", points(1, 1), "empty-sweep", "error", 5),
    "backwards": Trap(f"{RC}.ac dec 10 1k 1\n.end\n", no_points, "empty-sweep", "error", 5),
    "noise short of the end": Trap(
        f"{RC}.noise v(out) V1 dec 10 10 15k\n.end\n",
        points(32, 12589.25, "onoise_spectrum"),
        "sweep-ends-early",
        "note",
        5,
    ),
    "decimal comma in a run": Trap(
        f"{T}V1 in 0 SIN(0 1 1k)\nR1 in out 1k\nC1 out 0 1u\n.tran 1m 1,5m\n.end\n",
        like(f"{T}V1 in 0 SIN(0 1 1k)\nR1 in out 1k\nC1 out 0 1u\n.tran 1m 1 5m\n.end\n"),
        "card-comma",
        "error",
        5,
    ),
}

NUMBERS = {
    "1M": resistor("1M", "1m"),
    "1MOhm": resistor("1MOhm", "1m"),
    "1F": capacitor("1F", "1e-15"),
    "1e-9F": capacitor("1e-9F", "1e-24"),
    "Greek mu": capacitor("1μ", "1"),
    "1milliohm": resistor("1milliohm", "25.4e-6"),
    "1million": resistor("1million", "25.4e-6"),
    "1a": capacitor("1a", "1"),
    "4k7": resistor("4k7", "4k"),
    "4R7": resistor("4R7", "4"),
    "2n2": capacitor("2n2", "2n"),
    "1M5": resistor("1M5", "1m"),
    "0R5": resistor("0R5", "1m"),
    "0R5, as 0 ohm": resistor("0R5", "1m", "zero-resistance", "warning"),
    "4,7k": resistor("4,7k", "7k"),
    "4,7": resistor("4,7", "7"),
    "1k 5": resistor("1k 5", "5", "second-value", "refused"),
    "1u 5": capacitor("1u 5", "5", "second-value", "refused"),
    "1k 1%": resistor("1k 1%", "1", "second-value", "refused"),
    "1u 1%": capacitor("1u 1%", "1", "second-value", "refused"),
    "1k+2": resistor("1k+2", "2"),
    "1e3.5": resistor("1e3.5", "1000"),
    "0x10": resistor("0x10", "1m"),
    "1_000": resistor("1_000", "1"),
    "1.5.2k": resistor("1.5.2k", "1.5"),
    "1k$5": resistor("1k$5", "1k"),
    "1k with a setting for ac": resistor("1k ac=4k", "1k", "unreadable", "refused"),
    "zero": resistor("0", "1m", "zero-resistance", "warning"),
    "minus zero": resistor("-0", "1m", "zero-resistance", "warning"),
    "zero in braces": resistor("{0}", "1m", "zero-resistance", "warning"),
    "capacitor of zero": capacitor("0", "1e-300", "zero-capacitance", "warning"),
    "M in braces": resistor("{2*1M}", "2m", "odd-expression", "warning"),
    "M in quotes": resistor("'1M'", "1m", "odd-expression", "warning"),
    "mil in braces": resistor("{1mil}", "1m", "odd-expression", "warning"),
    "power of a power": resistor("{2^3^2}", "64", "odd-expression", "warning"),
    "natural logarithm": resistor("{log(100)}", "4.605170185988092", "odd-expression", "note"),
    "M in a sine": source("SIN(0 1 1M)", "SIN(0 1 1m)", "capital-m", "warning"),
    "comma in a sine": source("SIN(0 1,5 1k)", "SIN(0 1 5 1k)", "card-comma", "warning"),
    "comma in ac": Trap(
        f"{RC.replace('AC 1', 'AC 1,5')}{AC}",
        like(f"{RC.replace('AC 1', 'AC 1 5')}{AC}"),
        "odd-number",
        "warning",
        2,
    ),
    "random number": Trap(
        f"{D}.param x=agauss(1k,100,1)\nR2 out 0 {{x}}\n{OP}",
        differs,
        None,
        "refused",
        4,
    ),
}

NAMES = {
    "part behind .end": Trap(
        f"{D}R2 out 0 1k\n{OP}R3 out 0 1k\n", gives(1 / 3), "text-behind-end", "warning", 7
    ),
    "part behind the .end of an included file": Trap(
        f"{D}.include a.inc\nR2 out 0 1k\n{OP}",
        gives(1 / 3),
        "include-end",
        "warning",
        3,
        {"a.inc": "* level gauge\n.end\nR3 out 0 1k\n"},
    ),
    "no-break space": Trap(
        f"{D}R2 out\N{NO-BREAK SPACE} 0 1k\nR3 out 0 1k\n{OP}", gives(0.5), "unreadable", "refused", 4
    ),
    "accents": Trap(
        f"{V}R1 in né 1k\nR2 nü 0 1k\nR3 né out 1\nR4 out 0 1g\n{OP}",
        like(f"{V}R1 in n 1k\nR2 n 0 1k\nR3 n out 1\nR4 out 0 1g\n{OP}"),
        "names-merge",
        "error",
        4,
    ),
    "micro sign in a name": Trap(
        f"{V}R1 in µ 1k\nR2 u 0 1k\nR3 u out 1\nR4 out 0 1g\n{OP}",
        like(f"{V}R1 in u 1k\nR2 u 0 1k\nR3 u out 1\nR4 out 0 1g\n{OP}"),
        "names-merge",
        "error",
        4,
    ),
    **{
        f"ground called {name}": Trap(
            f"{D}R2 out {name} 1k\n{OP}", gives(1), "ground-lookalike", "warning", 4
        )
        for name in ("00", "0.0", "gnd!", "ground")
    },
    "node led by a dollar sign": Trap(
        f"{V}R1 in $a 1k\nR2 out 0 1k\n{OP}", zeros(), "node-missing", "refused", 3
    ),
    "node with a semicolon": Trap(
        f"{V}R1 in out;x 1k\nR2 out 0 1k\n{OP}",
        like(f"{V}R1 in out 1m\nR2 out 0 1k\n{OP}"),
        "value-missing",
        "refused",
        3,
    ),
    "node with slashes": Trap(
        f"{V}R1 in out//x 1k\nR2 out 0 1k\n{OP}",
        like(f"{V}R1 in out 1m\nR2 out 0 1k\n{OP}"),
        "value-missing",
        "refused",
        3,
    ),
    "node called time": Trap(
        f"{T}V1 in 0 SIN(0 1 1k)\nR1 in time 1k\nR2 time out 1\nC2 out 0 1u\n.tran 10u 1m\n.end\n",
        lacks("v(time)"),
        "vanishing-name",
        "warning",
        3,
    ),
    "node called frequency": Trap(
        f"{V}R1 in frequency 1k\nC1 frequency 0 1u\nR2 frequency out 1k\nC2 out 0 1u\n{AC}",
        lacks("v(frequency)"),
        "vanishing-name",
        "warning",
        3,
    ),
    "node called x#branch": Trap(
        f"{V}R1 in x#branch 1k\nC1 x#branch 0 1u\nR2 x#branch out 1\nC2 out 0 1p\n{AC}",
        lacks("v(x#branch)"),
        "vanishing-name",
        "warning",
        3,
    ),
    "node called temper": Trap(
        f"{V}R1 in temper 1k\nR2 temper 0 1k\n{OP}", fails, "vanishing-name", "error", 3
    ),
    "node inside a subcircuit": Trap(
        f"{V}X1 in out s\n.subckt s a b\nR1 a mid 1k\nR2 mid b 1k\n.ends\nR3 out 0 1k\nR4 X1.mid 0 1k\n{OP}",
        gives(0.2),
        "inner-node",
        "note",
        9,
    ),
    "source with a node missing": Trap(
        f"{T}V1 in 5\nR1 in out 1k\nR2 out 0 1k\n{OP}", gives(0), "source-without-node", "warning", 2
    ),
    "part on one node": Trap(
        f"{D}R2 out 0 1k\nR3 out out 1k\n{OP}", like(TWO), "one-node-part", "warning", 5
    ),
    "capacitor on ground": Trap(f"{D}R2 out 0 1k\nC3 0 0 1u\n{OP}", like(TWO), "one-node-part", "warning", 5),
}

STRUCTURE = {
    "override of nothing": Trap(
        f"{V}{SUB}X1 in out s q=2k\nR2 out 0 1k\n{OP}", like(TWO), "unknown-override", "warning", 6
    ),
    "name behind .ends": Trap(
        f"{V}{SUB.replace('.ends', '.ends other')}X1 in out s\nR2 out 0 1k\n{OP}",
        like(TWO),
        "ends-name",
        "note",
        5,
    ),
    "subcircuit defined twice": Trap(
        f"{V}{INNER.replace('7k m=2', '1k')}{INNER.replace('7k m=2', '9k')}X1 in out s\nR2 out 0 1k\n{OP}",
        like(TWO),
        "duplicate-subcircuit",
        "error",
        6,
    ),
    **{
        f"port called {name}": Trap(
            f"{V}.subckt s a b {name}\nRs a b 1k\nRt b {name} 1k\n.ends\nX1 in out in s\n{OP}",
            like(TWO),
            "subcircuit-ground",
            "note",
            3,
        )
        for name in ("0", "gnd")
    },
    "subcircuit never used": Trap(
        f"{V}{SUB}R1 in out 1k\nR2 out 0 1k\n{OP}", like(TWO), "unused-subcircuit", "warning", 3
    ),
    "m= within m=": Trap(
        f"{V}R1 in out 1k\n{INNER}X1 out 0 s m=3\n{OP}",
        like(f"{V}R1 in out 1k\nRq out 0 7k m=3\n{OP}"),
        None,
        "refused",
        5,
    ),
    "X within m=": Trap(
        f"{D}{SUB}.subckt u a b\nX3 a b s r=7k\n.ends\nX1 out 0 u m=3\n{OP}",
        like(f"{D}Rq out 0 7k\n{OP}"),
        None,
        "refused",
        8,
    ),
    "coupled inductors within m=": Trap(
        f"{D}{COUPLED}X1 out b s m=2\nR2 b 0 50\n{AC}",
        # Twice the parts have half the inductances; the mutual one stays as it was: k is twice as great.
        like(f"{D}L1 out 0 0.5m\nL2 b 0 1m\nK1 L1 L2 0.8\nR2 b 0 50\n{AC}"),
        None,
        "refused",
        7,
    ),
    "coupled inductors with m=": Trap(
        f"{D}L1 out 0 1m m=2\nL2 b 0 2m m=2\nK1 L1 L2 0.4\nR2 b 0 50\n{AC}",
        like(f"{D}L1 out 0 0.5m\nL2 b 0 1m\nK1 L1 L2 0.8\nR2 b 0 50\n{AC}"),
        None,
        "refused",
        6,
    ),
    "sensed current within m=": Trap(
        f"{D}.subckt s a b\nRq a x 7k\nVs x b 0\nF1 a b Vs 1\n.ends\nX1 out 0 s m=2\n{OP}",
        like(f"{D}Rq out x 3.5k\nVs x 0 0\nF1 out 0 Vs 2\n{OP}"),
        "unreadable",
        "refused",
        7,
    ),
    "X with m= within m=": Trap(
        f"{D}{INNER.replace(' m=2', '')}.subckt u a b\nX3 a b s m=2\n.ends\nX1 out 0 u m=3\n{OP}",
        like(f"{V}R1 in out 1k\nRq out 0 7k m=3\n{OP}"),
        None,
        "refused",
        8,
    ),
    "parameter defined twice": with_parameter(
        ".param a=1k\n.param a=3k", "3k", "duplicate-parameter", "warning", 4
    ),
    "expression with blanks": with_parameter(".param b=1k a=b * 2", "1k", "unreadable", "refused", 3),
    "product with blanks": with_parameter(".param a=2k * b b=3", "2k", "unreadable", "refused", 3),
    "comma between parameters": Trap(
        f"{V}.param a=1k, b=2k\nR1 in out 1k\nR2 out 0 {{a}}\n{OP}", endless, "unreadable", "refused", 3
    ),
    "parameter without braces": Trap(
        f"{V}.param a=1k\nR1 in out 1k\nR2 out 0 a\n{OP}", like(TWO), "bare-parameter", "note", 5
    ),
    "folder included": Trap(
        f"{D}R2 out 0 1k\n.include sub\n{OP}", like(TWO), "include-missing", "refused", 5, {"sub/x": "y"}
    ),
    "endless file included": Trap(
        f"{D}R2 out 0 1k\n.include /dev/zero\n{OP}", endless, "include-outside", "refused", 5
    ),
    "included file that is there twice": Trap(
        f"{D}.include sub/a.inc\n{OP}",
        gives(0.75),
        "include-ambiguous",
        "warning",
        1,
        {"sub/a.inc": ".include v.inc\n", "sub/v.inc": "R2 out 0 1k\n", "v.inc": "R2 out 0 3k\n"},
    ),
    "model defined twice": Trap(
        f"{D}.model rm r(tc1=0.01)\n.model rm r(tc1=0.09)\nR2 out 0 rm 1k\n.temp 37\n{OP}",
        like(f"{D}R2 out 0 1.1k\n{OP}"),
        "duplicate-model",
        "error",
        5,
    ),
    "two temperatures": Trap(
        f"{D}R2 out 0 1k tc1=0.01\n.temp 37 47\n{OP}", like(TWO), "several-temperatures", "warning", 5
    ),
    "temperature with a unit": Trap(
        f"{D}R2 out 0 1k tc1=0.01\n.temp 37C\n{OP}", like(TWO), "odd-number", "warning", 5
    ),
    "condition": Trap(
        f"{D}.if (0)\nR2 out 0 1k\n.else\nR2 out 0 3k\n.endif\n{OP}",
        gives(0.75),
        "card-unknown",
        "refused",
        4,
    ),
    "source that says DC and no number": Trap(
        f"{T}V1 in 0 DC PWL(0 1 1m 2)\nR1 in out 1k\nR2 out 0 1k\n{OP}",
        gives(0),
        "dc-without-number",
        "warning",
        2,
    ),
    "resistor at every node": Trap(
        f"{D}R2 out 0 1k\n.options rshunt=1k\n{OP}",
        like(f"{D}R2 out 0 1k\nR3 out 0 1k\n{OP}"),
        "option-changes-circuit",
        "warning",
        5,
    ),
}

DC_PATH = {
    "no dc path, operating point": Trap(
        f"{D}C1 out x 1u\nC2 x 0 1u\n{OP}", never(1), "no-dc-path", "error", 4
    ),
    "no dc path, run": Trap(
        f"{D}C1 out x 1u\nC2 x 0 1u\n.tran 10u 5m\n.end\n", never(1), "no-dc-path", "error", 4
    ),
    "no dc path, transfer function": Trap(
        f"{D}C1 out x 1u\nC2 x 0 1u\n.tf v(out) V1\n.end\n",
        never(1, name="v(transfer_function)"),
        "no-dc-path",
        "warning",
        4,
    ),
    "no dc path, dc sweep": Trap(
        f"{D.replace('DC 1', 'DC 0')}C1 out x 1u\nC2 x 0 1u\n.dc V1 1 2 1\n.end\n",
        never(1),
        "no-dc-path",
        "warning",
        4,
    ),
    "floating resistor elsewhere": Trap(
        f"{D}C1 out 0 1u\nR3 a b 1k\nR4 a b 1k\n{OP}", never(1), "floating", "error", 5
    ),
}

TIME = {
    "step as long as a time constant": Trap(
        f"{T}V1 in 0 SIN(0 1 100)\nR1 in out 1k\nC1 out 0 1u\n.tran 2m 100m\n.end\n",
        steps_beyond(1e-3),
        "step-too-long",
        "warning",
        5,
    ),
    "pulse of two numbers": source("PULSE(0 1)", "PULSE(0 1 0 10u 10u 5m 5m)", "edge-from-step", "warning"),
    "pulse without edges": source(
        "PULSE(0 1 0 0 0 1m 2m)", "PULSE(0 1 0 10u 10u 1m 2m)", "edge-from-step", "warning"
    ),
    "exponential of two numbers": source("EXP(0 1)", "EXP(0 1 10u 10u 20u 10u)", "edge-from-step", "warning"),
    "sine of two numbers": source("SIN(0 1)", "SIN(0 1 200)", "edge-from-step", "warning"),
    "points at one time": Trap(
        f"{T}V1 in 0 PWL(0 0 1m 0 1m 1 2m 1)\nR1 in out 1k\nC1 out 0 1u\n.tran 10u 5m\n.end\n",
        says("non-increasing PWL time points"),
        None,
        "refused",
        2,
    ),
    "starting voltage without uic": Trap(
        f"{T}V1 in 0 0\nR1 in out 1k\nC1 out 0 1u ic=1\n.tran 10u 5m\n.end\n",
        zeros(),
        "start-ignored",
        "warning",
        4,
    ),
    "starting voltage in an operating point": Trap(
        f"{T}V1 in 0 0\nR1 in out 1k\nC1 out 0 1u ic=1\n{OP}", zeros(), "start-ignored", "warning", 4
    ),
    ".ic in an operating point": Trap(
        f"{T}V1 in 0 0\nR1 in out 1k\nC1 out 0 1u\n.ic v(out)=1\n{OP}",
        zeros(),
        "start-ignored",
        "warning",
        None,
    ),
    ".ic of a node that is not there": Trap(
        f"{T}V1 in 0 0\nR1 in out 1k\nC1 out 0 1u\n.ic v(nope)=1\n.tran 10u 5m\n.end\n",
        zeros(),
        "start-of-no-node",
        "warning",
        5,
    ),
}

NOISE_AND_MEASURES = {
    "noise in V^2/Hz": Trap(
        f"{RC}.options sqrnoise\n{NOISE}",
        lambda ran: gives(ran.again(RC + NOISE).of("onoise_spectrum").values[0] ** 2, "onoise_spectrum")(ran),
        "option-changes-circuit",
        "warning",
        5,
    ),
    "resistor without noise": Trap(
        f"{RC}R3 out 0 1k noisy=0\n{NOISE}",
        lambda ran: gives(
            ran.again(f"{RC}R3 out 0 1k\n{NOISE}").of("onoise_spectrum").values[0] / 2**0.5, "onoise_spectrum"
        )(ran),
        "unreadable",
        "refused",
        5,
    ),
    "noise summed over few points": Trap(
        f"{RC}.noise v(out) V1 dec 2 1 1meg\n.end\n",
        # sqrt(kT/C) at 300.15 K is 64.373 nV; 2.6 % in the variance is 1.3 % less of it here and there.
        never(64.373e-9, 0.1e-9, "v(onoise_total)"),
        "sweep-too-coarse",
        "note",
        5,
    ),
    "measure with a raw file": Trap(
        f"{RC}.ac dec 10 10 10k\n.meas ac f3 when v(nope)=1\n.end\n",
        says("No .measure possible in batch mode", no="f3 "),
        FAILS,
        "warning",
        6,
    ),
    "measure of nothing": measured("ac f3 when v(nope)=1", says("f3                  =   0.0"), FAILS),
    "measure of the real part": measured(
        "ac f3 when v(out)=0.707", says("f3                  =   1.02458e+02"), "measure-real-part"
    ),
    "measure in degrees": measured("ac f3 when vp(out)=-45", says("out of interval"), "measure-radians"),
    "measure of a run that is not asked for": measured(
        "tran x when v(out)=2", says("Doing analysis", no="x  "), FAILS
    ),
    "measure of an operating point": measured(
        "op x find v(out) at=0", says("unrecognized analysis type 'op'"), FAILS
    ),
    "derivative measured": measured("ac d deriv vm(out) at=159", says("failed!"), FAILS),
    "difference measured": measured("ac x find v(in,out) at=159", says("no such vector"), FAILS),
}

UNTRUSTED = {
    "commands": Trap(f"{TWO}{COMMANDS}", touches, "commands-dropped", "error", 7),
    "commands in capitals, indented": Trap(
        TWO.replace(".op", "  .CONTROL\necho hello > touched\n.endc\n.op"),
        touches,
        "commands-dropped",
        "error",
        5,
    ),
    "commands without their end": Trap(
        f"{TWO}.control\necho hello > touched\n", touches, "commands-dropped", "error", 7
    ),
    "commands in an included file": Trap(
        TWO.replace(".op", ".include a.inc\n.op"),
        touches,
        "commands-dropped",
        "error",
        1,
        {"a.inc": COMMANDS},
    ),
    "commands in a library": Trap(
        TWO.replace(".op", ".lib a.lib tt\n.op"),
        touches,
        "commands-dropped",
        "error",
        2,
        {"a.lib": f".lib tt\n{COMMANDS}.endl\n"},
    ),
    "command in a comment": Trap(
        TWO.replace(".op", "*#echo hello > touched\n.op"), touches, "hidden-command", "error", 5
    ),
    "command in an indented comment": Trap(
        TWO.replace(".op", "   *#echo hello > touched\n.op"), touches, "hidden-command", "error", 5
    ),
    "shell in a comment": Trap(
        TWO.replace(".op", "*#shell echo hello > touched\n.op"), touches, "hidden-command", "error", 5
    ),
    "command in a comment of an included file": Trap(
        TWO.replace(".op", ".include a.inc\n.op"),
        touches,
        "hidden-command",
        "error",
        1,
        {"a.inc": "*#echo hello > touched\n"},
    ),
    "script by its title": Trap(
        "*ng_script\necho hello > touched\n", touches, "hidden-command", "refused", 1
    ),
    "included file in the title": Trap(
        TWO.replace(T, ".include a.inc\n"),
        touches,
        "hidden-command",
        "refused",
        1,
        {"a.inc": COMMANDS},
    ),
    "backquotes": Trap(
        TWO.replace(".op", ".control\nset x=`echo hello > touched`\n.endc\n.op"),
        touches,
        "commands-dropped",
        "error",
        5,
    ),
    "command before the circuit": Trap(
        TWO.replace(".op", ".control\npre_shell echo hello > touched\n.endc\n.op"),
        touches,
        "commands-dropped",
        "error",
        5,
    ),
    "code loaded": Trap(
        TWO.replace(".op", ".control\ncodemodel none.cm\n.endc\n.op"), obeys, "commands-dropped", "error", 5
    ),
    "results written anywhere": Trap(
        TWO.replace(".op", ".control\nop\nwrdata touched v(out)\n.endc\n.op"),
        touches,
        "commands-dropped",
        "error",
        5,
    ),
    "circuit altered": Trap(
        TWO.replace(".op\n", ".control\nalter r2=3k\nop\n.endc\n"),
        says(""),
        "commands-dropped",
        "warning",
        5,
    ),
    "file read by a code model": Trap(
        TWO.replace(".op", f"{READS_FILE}.op"),
        gives(0.5),
        "not-linear",
        "refused",
        5,
        {"a.txt": "0 0\n1 1\n"},
    ),
}


ALL = {
    f"{section}: {name}": trap
    for section, traps in (
        ("2", EXIT_CODES),
        ("3", RESULTS),
        ("4", GRIDS),
        ("5", NUMBERS),
        ("6", NAMES | STRUCTURE),
        ("8", DC_PATH),
        ("9", TIME),
        ("10", NOISE_AND_MEASURES),
        ("11", UNTRUSTED),
    )
    for name, trap in traps.items()
}


@pytest.fixture
def folder(tmp_path: Path) -> Callable[[Trap], Path]:
    """A function that lays a trap's files out in a folder of their own."""

    def lay_out(trap: Trap) -> Path:
        for name, text in trap.files.items():
            (tmp_path / name).parent.mkdir(exist_ok=True)
            (tmp_path / name).write_text(text, encoding="utf-8")
        (tmp_path / "in.cir").write_bytes(trap.text.encode())
        return tmp_path

    return lay_out


@pytest.mark.parametrize("trap", ALL.values(), ids=ALL)
def test_ngspice_falls_silently(trap: Trap, folder: Callable[[Trap], Path]) -> None:
    """Exit code and results show what it really does."""
    trap.does(simulate(folder(trap), trap.text, keep_raw=trap.keep_raw))


@pytest.mark.parametrize("trap", ALL.values(), ids=ALL)
def test_rcnet_says_so(
    trap: Trap,
    folder: Callable[[Trap], Path],
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    """`rcnet check --json` names the code, how grave it is, and the line; the exit code says errors too."""
    monkeypatch.chdir(folder(trap))
    with pytest.raises(SystemExit) as ended:
        run(["check", "--json", "in.cir"])
    said = json.loads(capsys.readouterr().out)
    told = {(each["code"], "refused", each["line"]) for each in said.get("errors", ())}
    told |= {(each["code"], each["severity"], each["line"]) for each in said["findings"]}
    if trap.code is None:
        told |= {(None, severity, line) for _, severity, line in told}
    assert (trap.code, trap.severity, trap.line) in told
    assert ended.value.code == (2 if "errors" in said else int(said["verdict"] != "holds")), told
    if trap.severity in ("error", "refused"):
        assert ended.value.code != 0


# Netlists that look like a trap and are none, and the code that must not be told.
SOUND: dict[str, tuple[str, str]] = {
    "capitals throughout": (f"{T}V1 IN 0 SIN(0 1 1M)\nR1 IN 0 1K\n.TRAN 1 1000\n.END\n", "capital-m"),
    "other prefixes in capitals": (
        f"{T}V1 in 0 PULSE(0 5 1M 1U 1U 2M 5M)\nR1 in out 1k\nC1 out 0 1n\n.tran 1u 20m\n.end\n",
        "capital-m",
    ),
    "meg in a sine": (f"{T}V1 in 0 SIN(0 1 1Meg)\nR1 in 0 1k\n.tran 1n 1u\n.end\n", "capital-m"),
    "meg in an expression": (f"{D}R2 out 0 {{2*1MEG}}\n{OP}", "odd-expression"),
    "power of a product": (f"{D}R2 out 0 {{2^3*2^2}}\n{OP}", "odd-expression"),
    "decadic logarithm": (f"{D}R2 out 0 {{log10(100)}}\n{OP}", "odd-expression"),
    "commas between numbers": (f"{RC}.tran 10u,5m\n.end\n", "card-comma"),
    "commas in points": (
        f"{T}V1 in 0 PWL(0,0 1m,1)\nR1 in out 1k\nC1 out 0 1u\n.tran 10u 5m\n.end\n",
        "card-comma",
    ),
    "commas in a pulse": (
        f"{T}V1 in 0 PULSE(0,5,0,1u,1u,1m,2m)\nR1 in out 1k\nC1 out 0 1u\n.tran 10u 9m\n.end\n",
        "card-comma",
    ),
    "currents that are kept": (f"{RC}.save v(out) i(v1)\n.ac dec 10 10 10k\n.end\n", "printed-absent"),
    "current through a probe": (f"{RC}.probe i(r1)\n.ac dec 10 10 10k\n.end\n", "printed-absent"),
    "node of a subcircuit": (
        f"{V}{SUB.replace('Rs a b {r}', 'Rs a m {r}' + chr(10) + 'Rt m b 1k')}"
        f"X1 in out s\nC1 out 0 1u\n.save V(x1.m) v(OUT)\n.ac dec 10 10 10k\n.end\n",
        "printed-absent",
    ),
    "level measured": (
        f"{RC}.ac dec 10 1 10k\n.meas ac f when vdb(out)=-3\n.end\n",
        "measure-real-part",
    ),
    "voltage over time": (f"{RC}.tran 10u 5m\n.meas tran t when v(out)=0.5\n.end\n", "measure-real-part"),
    "phase in radians": (f"{RC}.ac dec 10 1 10k\n.meas ac f when vp(out)=-0.785\n.end\n", "measure-radians"),
    "measure that is done": (
        f"{RC}.ac dec 10 1 10k\n.meas ac f find vm(OUT) at=100\n.end\n",
        "measure-fails",
    ),
    "node called time, in ac": (f"{V}R1 in time 1k\nC1 time 0 1u\n{AC}", "vanishing-name"),
    "ammeter": (f"{D}V2 out 5\nR2 5 0 1k\n{OP}", "source-without-node"),
    "dots in names": (f"{V}R1 in a.b 1k\nC1 a.b 0 1u\n{AC}", "inner-node"),
    "whole octaves": (f"{RC}.ac oct 4 1 1024\n.end\n", "sweep-ends-early"),
    "stretched decades": (f"{RC}.ac dec 10 1 1500\n.end\n", "sweep-ends-early"),
    "long title": (f"* {'x' * 490}\n{RC}{AC}", "title-too-long"),
    "parts alone": (RC, "no-analysis"),
}


@pytest.mark.parametrize(("text", "code"), SOUND.values(), ids=SOUND)
def test_what_is_meant_so_is_left_alone(text: str, code: str) -> None:
    """No finding where a person writes just this and means it."""
    assert code in {each.code for each in all_rules()}
    assert code not in {finding.code for finding in check(parse_netlist(text, "in.cir")).findings}
