"""Parameters of a netlist: their values, the parts that follow them, and changing them."""

from __future__ import annotations

import re
import time
from pathlib import Path

import pytest
from beside_ngspice import AC, OP, both

from rcnet.circuit import Circuit
from rcnet.errors import CircuitError, RcnetError
from rcnet.netlist import parse_netlist

V = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1k\nC1 out 0 100n\n"


def read(body: str) -> Circuit:
    """A netlist with a title line above the body."""
    return parse_netlist("* gauge\n" + body, "gauge.cir")


# ---------------------------------------------------------------------- as ngspice has them

SAME: dict[str, str] = {
    "number": ".param a=2k\nR2 out 0 {a}\n",
    "behind its use": "R2 out 0 {a}\n.param a=2k\n",
    "of another behind it": ".param a={b*2}\n.param b=1k\nR2 out 0 {a}\n",
    "several on a line": ".param a=2k b={a*3} c='a+b'\nR2 out 0 {c}\n",
    "blanks about the sign": ".param a = 2k b= {a*3}\nR2 out 0 {b}\n",
    "bare expression": ".param b=1k\n.param a=b*2+1\nR2 out 0 {a}\n",
    "bare brackets": ".param a=(1k+2k)*2\nR2 out 0 {a}\n",
    "over lines": ".param a={1k +\n+ 2k}\n+ b='a'\nR2 out 0 {b}\n",
    "capitals": ".PARAM Rload=2K\nR2 out 0 {RLOAD}\n",
    "underscores": ".param _a_1=2k\nR2 out 0 {_a_1}\n",
    ".params": ".params a=2k\nR2 out 0 {a}\n",
    "last of two": ".param a=1k\nR2 out 0 {a}\n.param a=2k\n",
    "last of two on a line": ".param a=1k a=3k\nR2 out 0 {a}\n",
    "bare value": ".param a=2k\nR2 out 0 a\nC2 out 0 c\n.param c=1u\n",
    "value by name": ".param a=2k\nR2 out 0 r=a\nR3 out 0 r={a*2}\nR4 out 0 R = 'a*3'\n",
    "quoted with blanks": ".param a=2k\nR2 out 0 ' a * 2 '\n",
    "braces within braces": ".param a=2k\nR2 out 0 {a*{2+1}}\n",
    "settings": ".param n=2 t=1m\nR2 out 0 1k m={n} tc1='t*2' tc2=t\nR3 out 0 1k m=n\n.temp 37\n",
    "gains": (
        ".param g=2m\nE1 e 0 in 0 {g*500}\nR2 e out 1k\nG1 out 0 in 0 'g'\nF1 out 0 V1 {g*100}\n"
        "H1 h 0 V1 g\nR3 h out 1k\n"
    ),
    "coupling": ".param k=0.9\nL1 out 0 1m\nL2 c 0 2m\nK1 L1 L2 {k}\nR2 c 0 10\n",
    "sources": ".param p=2\nV2 b 0 DC {p} AC {p/2} {p*15}\nR2 b out 1k\nI2 0 out AC 'p*1m'\n"
    "I3 0 out p AC 1\n",
    "function": ".func f(x,y) {x*y+1}\nR2 out 0 {f(1k,2)}\n",
    "function with an equals sign": ".func f(x) = {x*2}\nR2 out 0 {f(1k)}\n",
    "function in quotes": ".func f(x) 'x*2'\nR2 out 0 {f(1k)}\n",
    "function by .param": ".param f(x)={x*2}\nR2 out 0 {f(1k)}\n",
    "function of nothing": ".func f() {2k}\nR2 out 0 {f()}\n",
    "function behind its use": ".param a={f(3)}\n.func f(x) {x*q}\n.param q=1k\nR2 out 0 {a}\n",
    "function's argument named like a parameter": ".param x=9k\n.func f(x) {x*2}\nR2 out 0 {f(1k)}\n",
    "last of two functions": ".func f(x) {x}\n.func f(x) {x*2}\nR2 out 0 {f(1k)}\n",
    "choice": ".param a=3\nR2 out 0 {a==3 ? 1k : 5k}\nR3 out 0 {ternary_fcn(a>4, 1k, 2k)}\n",
    "temperature": "R2 out 0 {100*temper}\nR3 out 0 {a}\n.param a={temper*2}\n.temp 37\n",
    "temperature by an option": "R2 out 0 {100*temper}\n.options temp=47\n",
    "temperature of several": "R2 out 0 {100*temper}\n.temp 37 47\n",
    "unused": ".param a=2k b={a/2}\nR2 out 0 1k\n",
    ".csparam": ".param a=2k\n.csparam b={a}\nR2 out 0 {a}\n",
    "named like a unit": ".param k=5k meg=2k\nR2 out 0 {k+1meg*0+meg}\n",
    "named like a part": ".param r2=5k\nR2 out 0 {r2}\n",
    "temperature on a card": ".param t=47\nR2 out 0 1k tc1=0.01\n.temp {t}\n",
    "temperature in an option": ".param t=47\nR2 out 0 1k tc1=0.01\n.options temp={t} tnom='t-10'\n",
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", SAME)
def test_the_answer_is_that_of_ngspice(tmp_path: Path, name: str) -> None:
    """The same voltages at all nodes."""
    both(tmp_path, V + SAME[name] + AC).require_same()


@pytest.mark.ngspice
def test_a_sweep_by_parameters_is_that_of_ngspice(tmp_path: Path) -> None:
    """Expressions on the line of an analysis are computed."""
    text = V + "R2 out 0 1k\n.param f=100 n=2\n.options noopac\n.ac dec {n+1} {f/100} 'f*10'\n.end\n"
    circuit = both(tmp_path, text).require_same()
    sweep = circuit.analyses.ac
    assert sweep is not None
    assert (sweep.points, sweep.start, sweep.stop) == (3, 1.0, 1000.0)


@pytest.mark.ngspice
def test_a_transient_by_parameters_is_that_of_ngspice(tmp_path: Path) -> None:
    """The same on `.tran`, in waveforms and starting voltages."""
    text = (
        "* gauge\n.param p=3 t=10u v0=0.5\nV1 in 0 PULSE(0 {p} {t} 't/10' {t/10} {2*t} {5*t})\nR1 in out 1k\n"
        "C1 out 0 1n\n.ic v(out)={v0}\n.tran {t/20} {t*10} 0 't/2000'\n.end\n"
    )
    circuit = both(tmp_path, text).require_same(1e-4)
    assert dict(circuit.initial.nodes) == {"out": 0.5}


REFUSED_BY_BOTH: dict[str, tuple[str, str, int]] = {
    "undefined": ("R2 out 0 {nope}\n", "the parameter 'nope' is not defined", 5),
    "undefined in another": (".param a={nope*2}\nR2 out 0 {a}\n", "the parameter 'nope' is not defined", 5),
    "undefined and unused": (".param a={nope}\nR2 out 0 1k\n", "the parameter 'nope' is not defined", 5),
    "of itself": (".param a={a+1}\nR2 out 0 {a}\n", "'a' is defined by itself\\.", 5),
    "of one another": (".param a={b}\n.param b={a}\nR2 out 0 {a}\n", "is defined by itself, by way of", 6),
    "of one another, by functions": (
        ".func f(x) {x*b}\n.param a={f(1)}\n.param b={a}\nR2 out 0 {a}\n",
        "is defined by itself, by way of",
        7,
    ),
    "no function": ("R2 out 0 {f(1)}\n", "'f' is no function", 5),
    "wrong count of arguments": (".func f(x) {x}\nR2 out 0 {f(1,2)}\n", "f has two arguments", 6),
    "bare expression on a part": (".param a=2k\nR2 out 0 a*2\n", "'a\\*2'", 6),
    "bare on a sweep": (".param f=1k\n.ac dec 3 1 f\n", "'f' is not a number", 6),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", REFUSED_BY_BOTH)
def test_what_ngspice_refuses_is_refused(tmp_path: Path, name: str) -> None:
    """Both refuse it; rcnet says why, on the line of the mistake, and once."""
    body, says, line = REFUSED_BY_BOTH[name]
    pair = both(tmp_path, V + body + OP)
    pair.require_refused_by_both()
    assert re.search(says, pair.refusal), pair.refusal
    assert isinstance(pair.read, CircuitError)
    assert [problem.line for problem in pair.read.problems] == [line]


REFUSED: dict[str, tuple[str, str]] = {
    "value with blanks": (
        ".param a=2 * 3\n",
        "holds '\\*', .* takes only what stands before the first blank",
    ),
    "comma": (".param a=1, b=2\n", "a comma between parameters, on which ngspice 39 never ends"),
    "no definition": (".param\n", "defines nothing"),
    "no value": (".param a\n", "holds 'a', which is no NAME=VALUE"),
    "text": ('.param a="abc"\n', "has no meaning in a netlist expression"),
    "called temper": (".param temper=30\n", "'temper' is the circuit's temperature"),
    "default called temper": (".subckt s a temper=3\n.ends\n", "'temper' is the circuit's temperature"),
    "random": (".param a={gauss(1,0.1,3)}\n", "draws a random number"),
    "division by zero": (".param a={1/b} b=0\n", "parameter a: .* divides by zero"),
    "beyond the numbers": (".param a={1e300*1e300}\n", "parameter a: .* beyond 1.8e308"),
    "function of itself": (".func f(x) {f(x)}\n.param a={f(1)}\n", "calls itself"),
    "bad function": (".func f {1}\n", "has no name with its arguments"),
    "function without a body": (".func f(x)\n", "has no body"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_definition_is_refused(name: str) -> None:
    """One message on its line; ngspice takes some of these for something else, and never ends on others."""
    body, says = REFUSED[name]
    with pytest.raises(CircuitError, match=says) as caught:
        read("V1 in 0 1\nR1 in 0 1k\n" + body)
    assert [problem.line for problem in caught.value.problems] == [4 + body.startswith(".func f(x) {")]


def test_a_misspelt_parameter_is_suggested() -> None:
    """The nearest name is offered, else the first ones."""
    with pytest.raises(CircuitError) as caught:
        read("V1 in 0 1\n.param rload=1k\nR1 in 0 {rlaod}\n")
    assert caught.value.remedy == "Did you mean 'rload'?"
    with pytest.raises(CircuitError) as caught:
        read("V1 in 0 1\n.param rload=1k\nR1 in 0 {xyz}\n")
    assert caught.value.remedy == "Define it with .param; known are rload."


def test_a_parameter_defined_twice_is_noticed() -> None:
    """The last definition counts, and the first one's line is named."""
    circuit = read("V1 in 0 1\nR1 in 0 {a}\n.param a=1k\n.param a=2k\n")
    (seen,) = circuit.seen
    assert (seen.code, seen.place.line, seen.place.column) == ("duplicate-parameter", 5, 8)
    assert "line 4" in seen.message
    assert circuit.network.part("R1").value == 2000


def test_a_bare_parameter_is_noticed() -> None:
    """It works, and ngspice warns of a model that it cannot find."""
    circuit = read("V1 in 0 1\n.param a=1k\nR1 in 0 a\n")
    assert [(each.code, each.place.line) for each in circuit.seen] == [("bare-parameter", 4)]


# ---------------------------------------------------------------------- many

CHAIN = "".join(f".param p{k}={{p{k - 1}+1}}\n" for k in range(1, 10_000))
BACK = "".join(f".param p{k}={{p{k - 1}+1}}\n" for k in range(9_999, 0, -1))


@pytest.mark.parametrize(
    "text",
    [
        pytest.param(f".param p0=1\n{CHAIN}R1 in 0 {{p9999}}\n", id="in order"),
        pytest.param(f"R1 in 0 {{p9999}}\n{BACK}.param p0=1\n", id="backwards"),
        pytest.param(f".param p0=1\n.subckt s a\n{CHAIN}R1 a 0 {{p9999}}\n.ends\nX1 in s\n", id="inside"),
        pytest.param(
            ".param p0=1\n"
            + "".join(f".func f{k}() {{p{k - 1}}}\n.param p{k}={{f{k}()+1}}\n" for k in range(1, 10_000))
            + "R1 in 0 {p9999}\n",
            id="by functions",
        ),
    ],
)
def test_a_chain_of_ten_thousand(text: str) -> None:
    """Each is one more than the one before it; neither stack nor time gives out."""
    began = time.process_time()
    network = read("V1 in 0 1\n" + text).network
    assert time.process_time() - began < 5
    assert network.part(network.names[-1]).value == 10_000


def test_a_circle_of_ten_thousand_is_told_once() -> None:
    """One mistake, one message, in no time."""
    began = time.process_time()
    with pytest.raises(CircuitError, match="is defined by itself") as caught:
        read("V1 in 0 1\nR1 in 0 {p1}\n.param p0={p9999}\n" + CHAIN)
    assert time.process_time() - began < 5
    assert len(caught.value.problems) == 1


def test_every_part_of_a_chain_is_known() -> None:
    """A parameter that 2000 others rest on, each with a part of its own, knows them all."""
    chain = "".join(f".param p{k}={{p{k - 1}+1}}\nR{k} in 0 {{p{k}}}\n" for k in range(1, 2_000))
    circuit = read("V1 in 0 1\n.param p0=1\n" + chain)
    assert len(circuit.parameters["p0"].parts) == 1_999
    assert set(circuit.parameters["p1990"].parts) == {f"R{k}" for k in range(1990, 2000)}


# ---------------------------------------------------------------------- what is known of them

NETLIST = (
    "V1 in 0 AC {level}\n.param level={2*half}\n.param half=1\n.param Rload = 4.7k\n.param idle=7 stop=1k\n"
    "R1 in out {Rload}\nR2 out 0 '2*rload'\n.subckt s a b c=1n\nC1 a b {c*half}\nC2 a b 1n\n.ends\n"
    "X1 out 0 s c={rload*1p}\nX2 out 0 s\n.ac dec 5 1 {stop}\n"
)


def test_values_texts_and_places() -> None:
    """By lower-case name, in the order of definition."""
    known = read(NETLIST).parameters
    assert {name: each.value for name, each in known.items()} == {
        "level": 2.0,
        "half": 1.0,
        "rload": 4700.0,
        "idle": 7.0,
        "stop": 1000.0,
    }
    assert known["level"].text == "{2*half}"
    assert (known["rload"].place.line, known["rload"].place.column) == (5, 8)


def test_the_parts_that_follow() -> None:
    """Directly, by way of other parameters, or inside subcircuits; a card is told from a part."""
    known = read(NETLIST).parameters
    assert {name: set(each.parts) for name, each in known.items()} == {
        "level": {"V1"},
        "half": {"V1", "C.X1.C1", "C.X2.C1"},
        "rload": {"R1", "R2", "C.X1.C1"},
        "idle": set(),
        "stop": {".cards"},
    }


# ---------------------------------------------------------------------- changing them


def same_parts(circuit: Circuit) -> list[object]:
    """Everything about the circuit that a parameter may change."""
    return [*circuit.network.parts, dict(circuit.network.sources), circuit.analyses, circuit.requests]


@pytest.mark.parametrize(
    ("values", "texts"),
    [
        ({"rload": "10k"}, {"Rload = 4.7k": "Rload = 10k"}),
        ({"RLOAD": 10e3}, {"Rload = 4.7k": "Rload = 10k"}),
        ({"half": 3}, {"half=1\n": "half=3\n"}),
        ({"level": 5}, {"level={2*half}": "level=5"}),
        (
            {"half": "2", "rload": "1k", "stop": 1e4},
            {"half=1\n": "half=2\n", "= 4.7k": "= 1k", "stop=1k": "stop=10k"},
        ),
        ({"idle": 3}, {"idle=7": "idle=3"}),
    ],
)
def test_changed_parameters_are_as_if_written_so(
    values: dict[str, str | float], texts: dict[str, str]
) -> None:
    """Every dependent part follows, those inside subcircuits too; the circuit itself stays as it was."""
    circuit = read(NETLIST)
    before = same_parts(circuit)
    changed = circuit.with_parameters(values)
    written = NETLIST
    for old, new in texts.items():
        assert old in written
        written = written.replace(old, new)
    expected = read(written)
    assert same_parts(changed) == same_parts(expected)
    assert {name: each.value for name, each in changed.parameters.items()} == {
        name: each.value for name, each in expected.parameters.items()
    }
    assert same_parts(circuit) == before


def test_changes_add_up() -> None:
    """What was changed before stays changed, and can be changed again."""
    circuit = read(NETLIST).with_parameters({"rload": "1k"}).with_parameters({"half": 3})
    assert circuit.network.part("R1").value == 1000
    assert circuit.network.sources["V1"].ac == 6
    assert circuit.with_parameters({"rload": "2k"}).network.part("R2").value == 4000
    assert set(circuit.parameters["half"].parts) == {"V1", "C.X1.C1", "C.X2.C1"}


def test_a_change_that_nothing_survives_is_refused() -> None:
    """With the place of the part; an unknown name with those that are known; a bad number as one."""
    circuit = read(NETLIST)
    with pytest.raises(CircuitError, match=r"R1 has the value -1\.0 ohm") as caught:
        circuit.with_parameters({"rload": -1})
    assert caught.value.line == 7
    with pytest.raises(CircuitError, match="no parameter called 'nope'") as caught:
        circuit.with_parameters({"nope": 1})
    assert "level, half, rload, idle, stop" in (caught.value.remedy or "")
    for bad in ("ten", "", "1kk", float("nan"), float("inf")):
        with pytest.raises(RcnetError):
            circuit.with_parameters({"rload": bad})


def test_a_circuit_without_parameters_has_none_to_change() -> None:
    """It says so."""
    with pytest.raises(CircuitError, match="no parameter called 'a'") as caught:
        read("V1 in 0 1\nR1 in 0 1k\n").with_parameters({"a": 1})
    assert "none" in (caught.value.remedy or "")


def test_a_changed_temperature_parameter_moves_what_it_warms() -> None:
    """A parameter on `.temp` reaches every part with a temperature coefficient."""
    circuit = read("V1 in 0 1\n.param t=37\n.temp {t}\nR1 in 0 1k tc1=0.01\n")
    assert circuit.network.part("R1").value == pytest.approx(1100, rel=1e-12)
    assert circuit.with_parameters({"t": 47}).network.part("R1").value == pytest.approx(1200, rel=1e-12)
