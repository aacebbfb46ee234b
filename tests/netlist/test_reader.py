"""Reading netlists: forms that are accepted, lines that are refused, and traps where ngspice says nothing."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from rcnet.circuit import Circuit, Points, Sine, Square, Sweep, TransientRun
from rcnet.errors import CircuitError, InputError, RcnetError
from rcnet.findings import findings
from rcnet.netlist import parse_netlist, read_netlist, reads_as_part, write
from rcnet.netlist.reader import MAX_PROBLEMS

V = "V1 in 0 DC 0 AC 1\n"
RC = V + "R1 in out 1k\nC1 out 0 1u\n"


def read(body: str) -> Circuit:
    """A netlist with a title line above the body."""
    return parse_netlist("* pump station\n" + body, "pump.cir")


# --------------------------------------------------------------------------------------- parts that are read

PARTS: dict[str, tuple[str, tuple[str, ...], float]] = {
    "resistor": ("R1 in out 4.7k", ("in", "out"), 4700.0),
    "small letters": ("r1 in out 4.7K", ("in", "out"), 4700.0),
    "mega": ("R1 in out 1MEG", ("in", "out"), 1e6),
    "milli": ("R1 in out 1m", ("in", "out"), 1e-3),
    "unit behind the suffix": ("R1 in out 1kOhm", ("in", "out"), 1e3),
    "exponent": ("R1 in out 1E+3", ("in", "out"), 1e3),
    "point first": ("R1 in out .5k", ("in", "out"), 500.0),
    "tabs": ("R1\tin\tout\t1k", ("in", "out"), 1e3),
    "commas": ("R1 in,out,1k", ("in", "out"), 1e3),
    "brackets": ("R1 (in out) 1k", ("in", "out"), 1e3),
    "value word": ("R1 in out R=1k", ("in", "out"), 1e3),
    "long value word": ("R1 in out resistance = 1k", ("in", "out"), 1e3),
    "capacitor": ("C1 out gnd 100n", ("out", "0"), 1e-7),
    "micro sign": ("C1 out 0 1µF", ("out", "0"), 1e-6),
    "capacitor's word": ("C1 out 0 c=10p", ("out", "0"), 1e-11),
    "inductor": ("L1 out GND 10m", ("out", "0"), 1e-2),
    "voltage-controlled source": ("E1 out 0 (in,0) 2", ("out", "0", "in", "0"), 2.0),
    "negative gain": ("E1 out 0 in 0 -2", ("out", "0", "in", "0"), -2.0),
    "transconductance": ("G1 out 0 in 0 1m", ("out", "0", "in", "0"), 1e-3),
    "named by its letter": ("R in out 1k", ("in", "out"), 1e3),
    "number for a node": ("R1 1 00 1k", ("1", "00"), 1e3),
    "value-like node": ("R1 1k 2k 3k", ("1k", "2k"), 3e3),
    "indented": ("   R1 in out 1k   ", ("in", "out"), 1e3),
    "dollar comment": ("R1 in out 1k $ film", ("in", "out"), 1e3),
    "semicolon comment": ("R1 in out 1k;film", ("in", "out"), 1e3),
    "slashes comment": ("R1 in out 1k // film", ("in", "out"), 1e3),
    "dollar within a name": ("R1 n$1 out 1k", ("n$1", "out"), 1e3),
    "continued": ("R1 in\n+ out\n+1k", ("in", "out"), 1e3),
    "continued over a comment": ("R1 in\n* why\n+ out 1k", ("in", "out"), 1e3),
    "continued over an empty line": ("R1 in out\n\n   \n  + 1k", ("in", "out"), 1e3),
    "continued over an empty plus": ("R1 in out\n+\n+ 1k", ("in", "out"), 1e3),
    "continued behind a comment": ("R1 in $ here\n+ out ; there\n+ 1k", ("in", "out"), 1e3),
    "behind .end": (".end\nR1 in out 1k", ("in", "out"), 1e3),
    "odd characters": ("R1 a#b c@d 1k", ("a#b", "c@d"), 1e3),
    "accent": ("R1 né out 1k", ("né", "out"), 1e3),
}


@pytest.mark.parametrize(("text", "nodes", "value"), PARTS.values(), ids=PARTS)
@pytest.mark.parametrize("end", ["\n", "\r\n"], ids=["LF", "CRLF"])
def test_a_part_is_read(text: str, nodes: tuple[str, ...], value: float, end: str) -> None:
    """Name, kind, nodes and value."""
    (part,) = parse_netlist(f"* t\n{text}\n".replace("\n", end), "x").network.parts
    assert part.name == text.split()[-4 if ".end" in text else 0]
    assert (part.kind, part.nodes, part.value) == (part.name[0].upper(), nodes, value)


@pytest.mark.ngspice
@pytest.mark.parametrize("name", [name for name, case in PARTS.items() if case[0][0] in "Rr"])
def test_ngspice_reads_a_resistor_the_same(ngspice: Callable[..., Any], name: str) -> None:
    """A known current through the part shows the value ngspice took."""
    text, nodes, value = PARTS[name]
    first, second = (node.replace("é", "__") for node in nodes)
    probe = f"Ix {second} {first} DC 1\nRx {second} 0 1\n.op\n"
    ran = ngspice(f"* t\n{text}\n{probe}.end\n")
    difference = (
        ran.curve(f"v({first})", "operating point").values
        - ran.curve(f"v({second})", "operating point").values
    )
    assert difference[0] == pytest.approx(value, rel=1e-6)


def test_nodes_are_one_whatever_their_case() -> None:
    """The first spelling stands for all."""
    circuit = read("V1 In 0 1\nR1 IN Out 1k\nC1 OUT Gnd 1u\n")
    assert circuit.network.nodes == ("0", "In", "Out")


def test_controlled_sources_may_stand_before_what_they_sense() -> None:
    """F and H name a voltage source in any case, anywhere in the netlist; the order is kept."""
    network = read("F1 0 out VSENSE 2\nH1 h 0 vsense 50\nVsense a 0 0\nR1 out 0 1k\nR2 h a 1k\n").network
    assert network.names == ("F1", "H1", "Vsense", "R1", "R2")
    assert [network.part(name).senses for name in ("F1", "H1")] == ["Vsense", "Vsense"]
    assert [network.part(name).value for name in ("F1", "H1")] == [2.0, 50.0]


SOURCES: dict[str, tuple[str, tuple[float | None, float, float | None, object]]] = {
    "nothing": ("", (None, 0.0, None, None)),
    "bare number": ("5", (None, 0.0, 5.0, None)),
    "bare number and ac": ("0 AC 1", (1.0, 0.0, 0.0, None)),
    "dc": ("DC 2.5", (None, 0.0, 2.5, None)),
    "equals signs": ("DC=5 AC=1", (1.0, 0.0, 5.0, None)),
    "ac first": ("ac 2 dc 3", (2.0, 0.0, 3.0, None)),
    "ac alone": ("AC", (1.0, 0.0, None, None)),
    "ac with phase": ("AC 1 90", (1.0, 90.0, None, None)),
    "sine": ("SIN(1 2 50)", (None, 0.0, None, Sine(2.0, 50.0, 1.0))),
    "sine, all numbers": ("sin(1 2 50 1m 0 30)", (None, 0.0, None, Sine(2.0, 50.0, 1.0, 30.0, 1e-3))),
    "sine without brackets": ("SIN 0 1 1k", (None, 0.0, None, Sine(1.0, 1e3))),
    "long word": ("SINE(0 1 1k)", (None, 0.0, None, Sine(1.0, 1e3))),
    "pulse": (
        "DC 0 AC 1 PULSE(0 5 1m 1u 2u 0.5m 2m)",
        (1.0, 0.0, 0.0, Square(0.0, 5.0, 2e-3, 0.5e-3, 1e-6, 2e-6, 1e-3)),
    ),
    "points": ("PWL(0 0, 1m 1 2m 0)", (None, 0.0, None, Points(((0.0, 0.0), (1e-3, 1.0), (2e-3, 0.0))))),
    "points over lines": ("PWL(0 0\n+ 1m 1)", (None, 0.0, None, Points(((0.0, 0.0), (1e-3, 1.0))))),
}


@pytest.mark.parametrize(("text", "expected"), SOURCES.values(), ids=SOURCES)
@pytest.mark.parametrize("kind", ["V", "I"])
def test_a_source_is_read(kind: str, text: str, expected: tuple[object, ...]) -> None:
    """AC magnitude and phase, DC and the waveform, in any order."""
    source = read(f"{kind}1 in 0 {text}\nR1 in 0 1k\n").network.sources[f"{kind}1"]
    assert (source.ac, source.ac_phase, source.dc, source.waveform) == expected


CARDS: dict[str, tuple[str, Callable[[Circuit], object], object]] = {
    "ac": (".ac dec 10 1 1meg", lambda c: c.analyses.ac, Sweep(1.0, 1e6, 10)),
    "AC": (".AC LIN 5 0 1K", lambda c: c.analyses.ac, Sweep(0.0, 1e3, 5, "lin")),
    "oct": (".ac oct 4 1 1k", lambda c: c.analyses.ac, Sweep(1.0, 1e3, 4, "oct")),
    "tran": (".tran 1u 5m", lambda c: c.analyses.transient, TransientRun(5e-3, 1e-6)),
    "tran, start": (".tran 1u 5m 1m", lambda c: c.analyses.transient, TransientRun(5e-3, 1e-6, 1e-3)),
    "tran, all": (
        ".tran 1u 5m 1m 2u UIC",
        lambda c: c.analyses.transient,
        TransientRun(5e-3, 1e-6, 1e-3, 2e-6, True),
    ),
    "op": (".op", lambda c: c.analyses.operating_point, True),
    "noise": (".noise v(out) v1 dec 10 1 1k", lambda c: c.analyses.noise, Sweep(1.0, 1e3, 10)),
    "noise with summary": (
        ".noise V( Out , 0 ) V1 dec 10 1 1k 1",
        lambda c: (c.output, c.analyses.noise),
        (("out",), Sweep(1.0, 1e3, 10)),
    ),
    "print": (".print ac vdb(in) vp(in)", lambda c: c.output, ("in",)),
    "print a difference": (".PRINT AC V(IN,OUT)", lambda c: c.output, ("in", "out")),
    "print against ground": (".print ac v(in,0)", lambda c: c.output, ("in",)),
    "print with blanks": (".print ac v( in )", lambda c: c.output, ("in",)),
    "print of currents first": (".print ac i(V1) vm(in)", lambda c: c.output, ("in",)),
    "print of ground first": (".print ac v(0) v(in)", lambda c: c.output, ("in",)),
    "plot": (".plot ac vdb(in)", lambda c: c.output, ("in",)),
    "save": (".save v(in) v(out)", lambda c: c.output, ("in",)),
    "first of several": (".save all\n.print ac v(in)\n.print ac v(out)", lambda c: c.output, ("in",)),
    "no print": ("", lambda c: c.output, ("out",)),
    "options": (
        ".options reltol=1e-6 ABSTOL = 1p,method=gear noopac acct",
        lambda c: dict(c.options),
        {"reltol": "1e-06", "abstol": "1e-12", "method": "gear", "noopac": ""},
    ),
    "option": (".option itl1=200", lambda c: dict(c.options), {"itl1": "200"}),
    "temperature option": (".options temp=37", lambda c: c.conditions.nominal, 37.0),
    "temperature": (".temp -40", lambda c: c.conditions.nominal, -40.0),
    "title": (".title Level  gauge", lambda c: c.title, "Level gauge"),
}


@pytest.mark.parametrize(("text", "look", "expected"), CARDS.values(), ids=CARDS)
def test_a_dot_line_is_read(text: str, look: Callable[[Circuit], object], expected: object) -> None:
    """Analyses, the output, options, temperature and title, in any case."""
    assert look(read(f"{RC}{text}\n.end\n")) == expected


def test_a_circuit_knows_where_everything_stands() -> None:
    """Parts, the analyses and the output have the line they begin on, and its text."""
    circuit = read(f"{RC}\n* why\n.ac dec 10\n+ 1 1k\n.print ac v(out)\n")
    place = circuit.place_of("R1")
    assert (place.file, place.line, place.text) == ("pump.cir", 3, "R1 in out 1k")
    assert circuit.analysis_places["ac"].line == 7
    assert circuit.analysis_places["output"].line == 9
    assert (circuit.name, circuit.origin, circuit.title) == ("pump", "netlist", "pump station")


TITLES = {
    "plain": ("Level gauge", "Level gauge"),
    "comment": ("*  Level gauge", "Level gauge"),
    "blank": ("", ""),
    "escape": ("red\x1b[31m", "red [31m"),
    "line separator": ("a\u2028R9 in out 1", "a R9 in out 1"),
    "byte-order mark": ("\ufeff* Pump", "Pump"),
    "part": ("R1 in out 1k", "R1 in out 1k"),
    "plus": ("+ more", "+ more"),
    "quotes": ("`touch x` $(touch x)", "`touch x` $(touch x)"),
}


@pytest.mark.parametrize(("line", "title"), TITLES.values(), ids=TITLES)
def test_the_first_line_is_the_title(line: str, title: str) -> None:
    """Whatever it holds, it is text, and no part of the circuit."""
    circuit = parse_netlist(f"{line}\n{RC}", "x")
    assert circuit.title == title
    assert circuit.network.names == ("V1", "R1", "C1")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("R1 in out 1k", True),
        ("V1 in 0 DC 0 AC 1", True),
        ("C1 a 0", False),
        ("Level gauge", False),
        ("", False),
        (".ac dec 10 1 1k", False),
        ("Q1 a b c 1k", False),
    ],
)
def test_a_line_reads_as_a_part_or_not(text: str, expected: bool) -> None:
    """Only what the reader would take for a part below the title counts."""
    assert reads_as_part(text) is expected


# ------------------------------------------------------------------------------------------- lines refused

# name -> (line, words of the message, words of the remedy); the line stands on line 5.
REFUSED: dict[str, tuple[str, str, str]] = {
    "resistor without a value": ("R2 in out", "R2 has no value, or lacks a node", "1 milliohm"),
    "resistor without a node": ("R2 out 1k", "R2 has no value, or lacks a node", "1 milliohm"),
    "capacitor without a value": ("C2 out 0", "C2 has no value", "nothing for a capacitor"),
    "one node": ("R2 out", "R2 names fewer than 2 nodes", "Name all"),
    "controlled source of three nodes": ("E2 out 0 in", "E2 names fewer than 4 nodes", "Name all"),
    "polynomial": ("E2 out 0 POLY(1) in 0 0 2", "'E2' is a polynomial source", "--linear-part"),
    "polynomial current": ("F2 out 0 POLY(1) V1 0 2", "'F2' is a polynomial source", "--linear-part"),
    "value expression": ("E2 out 0 value={2*v(in)}", "'E2' is a behavioural source", "--linear-part"),
    "word value": ("G2 out 0 table in 0 1", "'G2' is a behavioural source", "--linear-part"),
    "behavioural resistor": (
        "R2 out 0 {1k*(1+v(in))}",
        "'R2' is a part whose value depends",
        "--linear-part",
    ),
    "resistor over time": ("R2 out 0 r='1k+time'", "'R2' is a part whose value depends", "--linear-part"),
    "source without a node": ("V2 in DC 5", "'DC' stands where a name belongs", "Name what is missing"),
    "no sensed source": ("F2 out 0 V1", "F2 lacks its sensed source or its gain", "F2 a b Vsense gain"),
    "sensing a resistor": ("F2 out 0 R1 2", "F2 senses the current of 'R1'", "voltage source"),
    "sensing nothing": ("H2 out 0 Vnone 2", "H2 senses the current of 'Vnone'", "voltage source"),
    "duplicate": ("R1 out 0 1k", "two parts called 'R1'; the first is on line 3", "its own name"),
    "duplicate but for case": (
        "r1 out 0 1k",
        "two parts called 'r1'; the first is on line 3",
        "its own name",
    ),
    "duplicate source": ("v1 out 0 1", "two parts called 'v1'; the first is on line 2", "its own name"),
    "negative capacitor": ("C2 out 0 -1n", "C2 has the value -1e-09 F", "Leave the part out"),
    "infinite": ("R2 out 0 1e400", "too large", "exponent"),
    "name for a value": (
        "R2 out 0 rload",
        "'rload' is neither a number nor a parameter nor a model",
        ".param",
    ),
    "double quotes": ('R2 out 0 "2*3"', "is not a number", "plain number"),
    "undefined parameter": ("R2 out 0 {2*rl}", "the parameter 'rl' is not defined", ".param"),
    "brace never closed": ("R2 out 0 {2*3", "the '{' at character 10 is never closed", "both ends"),
    "quote never closed": ("R2 out 0 '2*3", "is never closed", "both ends"),
    "number against a brace": ("R2 out 0 2{3}", "2{3} is a word and an expression in one", "a blank"),
    "expression of nothing": ("R2 out 0 {}", "is empty", "2*r0"),
    "expression without a value": ("R2 out 0 {1/0}", "'/' divides by zero", "Check the expression"),
    "expression for a node": ("R2 {1} 0 1k", "{1} stands where a node belongs", "Name the node"),
    "unit apart": (
        "R2 out 0 1k ohm",
        "'ohm' behind the value '1k' is a unit by itself",
        "against the number",
    ),
    "prefix apart": ("R2 out 0 1 k", "'k' behind the value '1' is a unit by itself", "against the number"),
    "tolerance": ("R2 out 0 1k 1%", "'1%' behind the value '1k' is a tolerance", "1k 1%"),
    "tolerance word": ("R2 out 0 1k tol=1%", "is a tolerance", "circuit file"),
    "two values": ("R2 out 0 1k 5", "'5' behind the value '1k' is a second value", "Keep one"),
    "ac value": ("R2 out 0 1k ac=5k", "is a value of its own for the ac analysis", "one value"),
    "noise turned off": ("R2 out 0 1k noisy=0", "turns its noise off", "Remove it"),
    "setting twice": ("R2 out 0 1k tc1=1m tc1=2m", "R2 has two tc1= entries", "takes the last"),
    "unknown model": ("R2 out 0 1k rmod", "'rmod' behind the value '1k' is not read", "NAME NODES VALUE"),
    "model of another kind": (
        "R2 out 0 cm\n.model cm c(cap=1u)",
        "the model 'cm' is no model of such a part",
        "its own kind",
    ),
    "flicker noise": ("R2 out 0 rm 1k\n.model rm r(kf=1e-9)", "flicker noise", "Take kf out"),
    "multiplied by nothing": ("R2 out 0 1k m=0", "R2 is there 0 times", "above zero"),
    "multiplied by a word": ("I2 out 0 1 m=many", "m=many is no number", "m=2"),
    "multiplier of a gain": ("E2 x 0 in 0 2 m=2", "multiplies the part", "as often"),
    "multiplied and coupled": (
        "K1 L1 L2 0.9\nL1 out 0 1m m=2\nL2 x 0 1m",
        "couples inductors that are multiplied",
        "without m=",
    ),
    "long name": ("R" + "x" * 300 + " out 0 1k", "has 301 characters", "at most 200"),
    "no-break space": ("R2 out\u00a0 0 1k", r"the character '\xa0'", "Type the line anew"),
    "zero-width space": ("R2 out\u200b 0 1k", r"the character '\u200b'", "Type the line anew"),
    "form feed": ("R2 out\x0c0 1k", r"the character '\x0c'", "Type the line anew"),
    "NUL": ("R2 out\0 0 1k", r"the character '\x00'", "Type the line anew"),
    "carriage return": ("R2 out 0 1k\rR3 out 0 1k", "carriage return stands alone", "LF or CRLF"),
    "carriage return in a comment": ("* x\rR3 out 0 1k", "carriage return stands alone", "LF or CRLF"),
    "two dc": ("V2 x 0 DC 5 DC 2", "V2 has two DC entries", "takes the last"),
    "two dc, one bare": ("V2 x 0 5 DC 2", "V2 has two DC entries", "takes the last"),
    "two ac": ("V2 x 0 AC 1 AC 2", "V2 has two AC entries", "takes the last"),
    "two waveforms": (
        "V2 x 0 SIN(0 1 1k) PULSE(0 1 0 1u 1u 1m 2m)",
        "V2 has two waveform entries",
        "the last",
    ),
    "dc without a number": ("V2 x 0 DC", "V2: DC has 0 numbers; 1 are needed", "Give it its numbers"),
    "dc with two": ("V2 x 0 DC 5 3", "V2: DC has 2 numbers; 1 are needed", "Give it its numbers"),
    "two bare numbers": ("V2 x 0 5 3", "V2: '3' is not read", "DC, AC, PULSE"),
    "ac with three": ("V2 x 0 AC 1 0 5", "V2: AC has 3 numbers; 0 to 2 are needed", "Give it its numbers"),
    "short pulse": ("V2 x 0 PULSE(0)", "V2: PULSE has 1 numbers; 2 to 7 are needed", "its numbers"),
    "long pulse": (
        "V2 x 0 PULSE(0 1 0 1u 1u 1m 2m 3)",
        "V2: PULSE has 8 numbers; 2 to 7 are needed",
        "Give it its numbers",
    ),
    "pulse of negative width": ("V2 x 0 PULSE(0 1 0 1u 1u -1m 2m)", "a width of -0.001 s", "above zero"),
    "pulse longer than its period": ("V2 x 0 PULSE(0 1 0 1u 1u 2m 1m)", "edges do not fit", "duty"),
    "short sine": ("V2 x 0 SIN(0)", "V2: SIN has 1 numbers; 2 to 6 are needed", "its numbers"),
    "long sine": ("V2 x 0 SIN(0 1 1k 0 0 0 0)", "V2: SIN has 7 numbers", "its numbers"),
    "odd points": ("V2 x 0 PWL(0 0 1m)", "V2: PWL has 3 numbers", "pairs"),
    "no points": ("V2 x 0 PWL()", "V2: PWL has 0 numbers", "pairs"),
    "equal times": ("V2 x 0 PWL(0 0 1m 0 1m 4)", "the time 0.001 s does not come after", "rise"),
    "negative time": ("V2 x 0 PWL(-1m 0 1m 4)", "before t = 0", "zero or later"),
    "points from a file": ("V2 x 0 PWL file=x.txt", "V2: PWL has 0 numbers", "pairs"),
    "points repeated from within": ("V2 x 0 PWL(0 0 1m 1) r=1m", "PWL repeats from 0.001 s", "Only r=0"),
    "points delayed": ("V2 x 0 PWL(0 0 1m 1) td=1m", "V2: 'td' is not read", "DC, AC, PULSE"),
    "diode": ("D1 out 0 dmod", "'D1' is a diode; only R C L K E F G H V I and X", "--linear-part"),
    "transistor": ("Q1 c b 0 qmod", "'Q1' is a bipolar transistor", "Take it out"),
    "unknown subcircuit": ("X1 in out rc", "there is no subcircuit 'rc' here", "Define it with .subckt"),
    "code model": ("A1 in out gain", "'A1' is a code model", "read files"),
    "coupling of nothing": ("K1 L1 L2 0.99", "K1 couples 'L1', of which there is none", "Inductors here"),
    "coupling of one": ("K1 L1 0.99", "K1 does not name two inductors", "K1 L1 L2"),
    "behavioural": ("B1 out 0 v=v(in)^2", "'B1' is a behavioural source", "E, G, F or H"),
    "switch": ("S1 out 0 in 0 sw", "'S1' is a switch", "resistor"),
    "current switch": ("W1 out 0 V1 sw", "'W1' is a switch", "resistor"),
    "line": ("T1 in 0 out 0 z0=50 td=1n", "'T1' is a transmission line", "ladder"),
    "compiled device": ("né out 0 1k", "'né' is a compiled device", "Take it out"),
    "letter outside ASCII": ("é1 out 0 1k", "begins with 'é', which begins no part", "comment"),
    "dotless i": ("ı1 out 0 1", "begins with 'ı', which begins no part", "comment"),
    "digit first": ("1k out 0", "begins with '1', which begins no part", "comment"),
    "hash": ("# a comment?", "begins with '#'", "comment"),
    **{
        f"leading {first}": (
            f"{first}R2 out 0 1k",
            f"begins with {first!r}, which begins no part and no command; ngspice passes over",
            "comment",
        )
        for first in '=[]?()&%"!:,'
    },
    "include": (".include parts.lib", "'parts.lib' cannot be included: this netlist is text", "as a file"),
    "inc": (".inc parts.lib", "'parts.lib' cannot be included", "Save it as a file"),
    "lib": (".lib parts.lib tt", "'parts.lib' cannot be included", "Save it as a file"),
    "include of nothing": (".include", ".include names no single file", "quote a name with blanks"),
    "condition": (".if (1)\nR2 out 0 1k\n.else\nR2 out\n.endif", "'.if' is not read", "Keep the branch"),
    "cases": (".step param r 1 2 1", "'.step' is not read", "a netlist for each case"),
    "endc": (".endc", ".endc closes nothing", "Remove it"),
    "endl": (".endl", ".endl closes nothing", "Remove it"),
    "ends": (".ends", ".ends closes nothing", "Remove it"),
    "unknown card": (".xyzzy", "'.xyzzy' is not read", "take the line out"),
    "misspelt card": (".tram 1u 1m", "'.tram' is not read", "Did you mean .tran?"),
    "dot": (".", "'.' is not read", "take the line out"),
    "option without a number": (".options reltol", "'' is not a number", "plain number"),
    "negative option": (".options reltol=-1", "option reltol is '-1'", "above zero"),
    "odd method": (".options method=`touch_x`", "option method is '`touch_x`'", "gear"),
    "no temperature": (".temp", ".temp names no temperature", "Give one"),
    "below absolute zero": (".temp -300", "not above absolute zero", "degrees Celsius"),
    "ac without words": (".ac", ".ac cannot be read", ".ac dec 20 10 1meg"),
    "ac of another kind": (".ac foo 10 1 1k", ".ac cannot be read", ".ac dec 20 10 1meg"),
    "ac with a word missing": (".ac dec 10 1", ".ac cannot be read", ".ac dec 20 10 1meg"),
    "ac with a word more": (".ac dec 10 1 1k 5", ".ac cannot be read", ".ac dec 20 10 1meg"),
    "ac with a decimal comma": (".ac dec 10 1,5 1k", ".ac cannot be read", ".ac dec 20 10 1meg"),
    "ac of half points": (".ac dec 1.5 1 1k", "'1.5' points", "whole number"),
    "ac of no points": (".ac dec 0 1 1k", "'0' points", "whole number"),
    "ac of too many": (".ac lin 1e12 1 1k", "'1e12' points", "1 to 2000000"),
    "ac of no number": (".ac dec ten 1 1k", "'ten' is not a number", "plain number"),
    "tran of one": (".tran 10u", ".tran cannot be read", ".tran step stop"),
    "tran of five": (".tran 1u 1m 0 1u 5", ".tran cannot be read", ".tran step stop"),
    "tran without a step": (".tran 0 1m", "not positive", "0 < step"),
    "tran backwards": (".tran 1u 1m 2m", "not positive", "start < stop"),
    "tran with a decimal comma": (".tran 1,5u 5m", "not positive", "start < stop"),
    "noise without words": (".noise", ".noise cannot be read", ".noise v(out) Vin dec"),
    "noise of a current": (".noise i(V1) V1 dec 10 1 1k", ".noise cannot be read", ".noise v(out) Vin dec"),
    "noise without a source": (".noise v(out) dec 10 1 1k", ".noise cannot be read", ".noise v(out) Vin dec"),
    "noise of another kind": (
        ".noise v(out) V1 foo 10 1 1k",
        ".noise cannot be read",
        ".noise v(out) Vin dec",
    ),
    "noise from nowhere": (".noise v(out) V9 dec 10 1 1k", "refers to 'V9', which is no source here", "AC 1"),
    "noise elsewhere than printed": (
        ".print ac v(in)\n.noise v(out) V1 dec 10 1 1k",
        "about v(out), but v(in) is printed",
        "Let both name the same",
    ),
}
ON_LATER_LINE = {"noise elsewhere than printed": 6}


@pytest.mark.parametrize("name", REFUSED)
def test_a_line_is_refused(name: str) -> None:
    """One message with file, line and remedy; nothing of the line is passed over in silence."""
    text, message, remedy = REFUSED[name]
    with pytest.raises(CircuitError) as caught:
        read(f"{RC}{text}\n.op\n.end\n")
    problems = caught.value.problems
    assert [(p.file, p.line) for p in problems] == [("pump.cir", ON_LATER_LINE.get(name, 5))], problems
    assert message in problems[0].message
    assert problems[0].remedy
    assert remedy in problems[0].remedy


def test_a_noise_source_without_ac_is_refused() -> None:
    """Where ngspice names no line, rcnet does."""
    with pytest.raises(CircuitError, match="'V2', which is a source without ac") as caught:
        read(f"{RC}V2 x 0 1\nR2 x 0 1\n.noise v(out) V2 dec 10 1 1k\n")
    assert caught.value.line == 7


WHOLE = {
    "nothing": ("", "the netlist is empty", None),
    "blank lines": ("\n \n\t\n", "the netlist is empty", None),
    "only a title": ("* pump station\n", "holds no parts", None),
    "only comments": ("* pump\n* station\n.end\n", "holds no parts", None),
    "carriage returns only": ("* pump\rV1 in 0 1\rR1 in 0 1\r.end\r", "carriage return stands alone", 1),
    "title of a command": ("*#shell touch x\n" + RC, "title begins with '*#', which is a command", 1),
    "title of a script": ("*NG_SCRIPT\n" + RC, "which is a command to ngspice", 1),
    "title of a control section": (".control\n" + RC, "'.control', which is a command", 1),
    "title of an include": ("  .include /etc/passwd\n" + RC, "'.inc', which is a command", 1),
    "plus below the title": ("* pump\n+ station\n" + RC, "continues nothing", 2),
    "bare plus below the title": ("* pump\n+\n" + RC, "continues nothing", 2),
}


@pytest.mark.parametrize(("text", "message", "line"), WHOLE.values(), ids=WHOLE)
def test_a_whole_netlist_is_refused(text: str, message: str, line: int | None) -> None:
    """What is no netlist, or begins with a command, is named in one message."""
    with pytest.raises(CircuitError) as caught:
        parse_netlist(text, "pump.cir")
    (problem,) = caught.value.problems
    assert message in problem.message
    assert (problem.file, problem.line) == ("pump.cir", line)
    assert problem.remedy


def test_every_bad_line_is_reported_in_the_files_order() -> None:
    """Also those that show only when the parts are put together."""
    with pytest.raises(CircuitError) as caught:
        read("V1 in 0 AC 1\nF1 out 0 Vx 2\nR1 in out\nR2 in out -1\n.foo\nC1 out 0 1u 5\nq1 a b c\n.ac dec\n")
    assert [problem.line for problem in caught.value.problems] == [3, 4, 5, 6, 7, 8, 9]


def test_a_bad_source_is_not_missed_by_what_senses_it() -> None:
    """One mistake, one message."""
    with pytest.raises(CircuitError) as caught:
        read("V1 in 0 DC five\nF1 out 0 V1 2\nR1 in out 1k\n")
    assert [problem.line for problem in caught.value.problems] == [2]


def test_no_flood_of_messages() -> None:
    """Beyond the limit the rest is counted."""
    with pytest.raises(CircuitError) as caught:
        read("R out\n" * 1000)
    assert len(caught.value.problems) == MAX_PROBLEMS + 1
    assert f"and {1000 - MAX_PROBLEMS} more" in caught.value.problems[-1].message


def test_a_file_is_read_from_disk(tmp_path: Path) -> None:
    """The circuit is named after the file; what is no file, or no text, is refused with its name."""
    path = tmp_path / "float-gauge.cir"
    path.write_bytes(b"\xef\xbb\xbf* Float gauge\r\n" + RC.replace("\n", "\r\n").encode())
    circuit = read_netlist(path)
    assert (circuit.name, circuit.file, circuit.title) == ("float-gauge", str(path), "Float gauge")
    path.write_bytes(b"* t\nR1 a\0 b 1k\n")
    with pytest.raises(InputError, match="NUL") as caught:
        read_netlist(path)
    assert caught.value.line == 2
    with pytest.raises(InputError, match="folder"):
        read_netlist(tmp_path)
    with pytest.raises(InputError, match="no such file"):
        read_netlist(tmp_path / "none.cir")


# ----------------------------------------------------------------------------------------------------- traps

DIVIDER = "V1 in 0 DC 1 AC 1\nR1 in out 1k\n"
OP = ".op\n.end\n"
AT_POLE = ".options noopac\n.ac lin 1 159.15494309189535 159.15494309189535\n.end\n"


# Body, what ngspice does (the value at `out`, None where it gives no results, all with exit code 0), and the
# code of the finding, or the words of the refusal, with which rcnet answers.
TRAPS: dict[str, tuple[str, complex | None, str]] = {
    "missing resistor value": (f"{DIVIDER}R2 out 0\n{OP}", 1e-3 / 1000.001, "has no value"),
    "missing capacitor value": (f"{DIVIDER}C1 out 0\n{AT_POLE}", 1.0, "has no value"),
    "missing node": (f"{DIVIDER}R2 out 1k\n{AT_POLE}", 1.0, "has no value"),
    "M for mega": (f"{DIVIDER}R2 out 0 1M\n{OP}", 1e-3 / 1000.001, "odd-number"),
    "F for farad": (f"{DIVIDER}C1 out 0 1F\n{AT_POLE}", 1 / (1 + 1e-9j), "odd-number"),
    "farad behind an exponent": (f"{DIVIDER}C1 out 0 1e-6F\n{AT_POLE}", 1 / (1 + 1e-15j), "odd-number"),
    "Greek mu": (f"{DIVIDER}C1 out 0 1μ\n{AT_POLE}", 1 / (1 + 1e6j), "odd-number"),
    "mil": (f"{DIVIDER}R2 out 0 1milliohm\n{OP}", 25.4e-6 / 1000.0000254, "odd-number"),
    "atto": (f"{DIVIDER}C1 out 0 1a\n{AT_POLE}", 1 / (1 + 1e6j), "odd-number"),
    "IEC marking": (f"{DIVIDER}R2 out 0 4k7\n{OP}", 4 / 5, "odd-number"),
    "decimal comma": (f"{DIVIDER}R2 out 0 4,7k\n{OP}", 7 / 8, "odd-number"),
    "underscore": (f"{DIVIDER}R2 out 0 1_000\n{OP}", 1 / 1001, "odd-number"),
    "sum": (f"{DIVIDER}R2 out 0 1k+2\n{OP}", 2 / 1002, "odd-number"),
    "exponent and suffix": (f"{DIVIDER}R2 out 0 1e3.5\n{OP}", 0.5, "odd-number"),
    "hexadecimal": (f"{DIVIDER}R2 out 0 0x10\n{OP}", 1e-3 / 1000.001, "zero-resistance"),
    "zero ohm": (f"{DIVIDER}R2 out 0 0\n{OP}", 1e-3 / 1000.001, "zero-resistance"),
    "zero point five in IEC marking": (f"{DIVIDER}R2 out 0 0R5\n{OP}", 1e-3 / 1000.001, "zero-resistance"),
    "infinite": (f"{DIVIDER}R2 out 0 1e400\n{OP}", 1.0, "too large"),
    "second value": (f"{DIVIDER}R2 out 0 1k 5\n{OP}", 5 / 1005, "second value"),
    "tolerance": (f"{DIVIDER}R2 out 0 1k 1%\n{OP}", 1 / 1001, "tolerance"),
    "multiplier": (f"{DIVIDER}R2 out 0 1k m=2\n{OP}", 1 / 3, ""),
    "two dc": ("V1 in 0 DC 5 DC 2\nR1 in out 1k\nR2 out 0 1k\n" + OP, 1.0, "two DC entries"),
    "ac with a decimal comma": (
        f"V1 in 0 DC 0 AC 0,5\nR1 in out 1k\nC1 out 0 1u\n{AT_POLE}",
        0.0,
        "odd-number",
    ),
    "IEC marking on a source": ("V1 in 0 DC 1k5\nR1 in out 1k\nR2 out 0 1k\n" + OP, 500.0, "odd-number"),
    "node missing on a source": (
        f"V1 in DC 5 AC 1\nR1 in out 1k\nR3 in 0 1k\n{AT_POLE}",
        0.0,
        "stands where",
    ),
    "no ac source": (f"V1 in 0 DC 1\nR1 in out 1k\nC1 out 0 1u\n{AT_POLE}", 0.0, "no-ac-source"),
    "M in a sweep": (f"{DIVIDER}C1 out 0 1u\n.ac dec 10 1 1M\n.end\n", None, "empty-sweep"),
    "sweep of nothing": (f"{DIVIDER}C1 out 0 1u\n.ac dec 10 1 1\n.end\n", None, "empty-sweep"),
    "no dc path": (f"{DIVIDER}C1 out x 1u\nC2 x 0 1u\n{OP}", 0.0198, "no-dc-path"),
    "loose part": (f"{DIVIDER}R2 out 0 1k\nR3 out stray 1k\n{OP}", 0.5, "dangling"),
    "part in the title": (f"R2 out 0 1k\n{DIVIDER}{AT_POLE}", 1.0, "title-is-part"),
    "part behind .end": (f"{DIVIDER}.op\n.end\nR2 out 0 1k\n", 0.5, "text-behind-end"),
    "two zeros for ground": (f"{DIVIDER}R2 out 00 1k\n{AT_POLE}", 1.0, "ground-lookalike"),
    "gnd! for ground": (f"{DIVIDER}R2 out gnd! 1k\n{AT_POLE}", 1.0, "ground-lookalike"),
    "names that merge": (f"{DIVIDER}R2 né 0 1k\nR3 nü out 1k\n{OP}", 2 / 3, "names-merge"),
    "micro sign merges with u": (f"{DIVIDER}R2 µ1 0 1k\nR3 u1 out 1k\n{OP}", 2 / 3, "names-merge"),
    "no-break space": (f"{DIVIDER}R2 out 0 1k\nR3 out\u00a0 0 1k\n{OP}", 0.5, "character"),
    "leading bracket": (f"{DIVIDER}R2 out 0 1k\n(R3 out 0 1k)\n{OP}", 0.5, "begins with"),
    "two temperatures": (f"{DIVIDER}R2 out 0 1k tc1=0.1\n.temp 27 37\n{OP}", 0.5, "several-temperatures"),
    "expression": (f"{DIVIDER}R2 out 0 {{2^3^2}}\n{OP}", 64 / 1064, "odd-expression"),
    "absent noise node": (
        f"{DIVIDER}R2 out 0 1k\n.noise v(nope) V1 dec 10 1 10\n.end\n",
        None,
        "output-absent",
    ),
    "carriage return in a comment": (f"{DIVIDER}R2 out 0 1k\n* x\rR3 out 0 1k\n{OP}", 0.5, "carriage return"),
}
TITLE_IN_BODY = {"part in the title"}


def answer(text: str) -> tuple[str, ...]:
    """The codes of rcnet's findings, or the message of its refusal."""
    try:
        circuit = parse_netlist(text, "trap.cir")
    except CircuitError as exc:
        return (exc.message,)
    return tuple(finding.code for finding in findings(circuit) if finding.severity != "note")


@pytest.mark.ngspice
@pytest.mark.parametrize("name", TRAPS)
def test_where_ngspice_says_nothing_rcnet_does(ngspice: Callable[..., Any], name: str) -> None:
    """Taken by ngspice with exit code 0 and this number, a trap is named by rcnet, or read the same way."""
    body, value, words = TRAPS[name]
    text = body if name in TITLE_IN_BODY else f"* trap\n{body}"
    ran = ngspice(text)
    assert ran.code == 0, ran.log
    found = [curve for curve in ran.curves or () if curve.name == "v(out)"]
    if value is None:
        assert not found
    else:
        assert found[0].values[0] == pytest.approx(value, rel=2e-3, abs=1e-9)
    if words:
        assert any(words in said for said in answer(text)), answer(text)
    else:
        assert answer(text) == ()
        assert parse_netlist(text, "x").network.operating_point()["out"] == pytest.approx(value, rel=1e-12)


@pytest.mark.ngspice
@pytest.mark.parametrize(
    ("text", "code"),
    [
        pytest.param(f"* t\n{RC}.control\nshell touch made\n.endc\n.op\n", "commands-dropped", id="control"),
        pytest.param(f"* t\n{RC}*#shell touch made\n.op\n.end\n", "hidden-command", id="command comment"),
        pytest.param(f"* t\n{RC}   *#shell touch made\n.op\n.end\n", "hidden-command", id="indented"),
        pytest.param(
            f"* t\n{RC}.op\n.end\n.control\nshell touch made\n", "commands-dropped", id="behind .end"
        ),
    ],
)
def test_what_ngspice_would_execute_is_left_out(ngspice: Callable[..., Any], text: str, code: str) -> None:
    """The shell command that ngspice runs is an error to rcnet, and gets into nothing that rcnet writes."""
    assert "made" in ngspice(text).files
    circuit = parse_netlist(text, "x")
    assert [(each.code, each.severity) for each in findings(circuit) if each.severity == "error"] == [
        (code, "error")
    ]
    assert "touch" not in write(circuit).text


@pytest.mark.ngspice
def test_a_script_is_refused(ngspice: Callable[..., Any]) -> None:
    """A netlist whose title makes it a script is none."""
    text = "*ng_script\nshell touch made\n"
    assert "made" in ngspice(text).files
    with pytest.raises(CircuitError, match="is a command to ngspice"):
        parse_netlist(text, "x")


@pytest.mark.ngspice
def test_a_sweep_that_never_ends_is_named(ngspice: Callable[..., Any]) -> None:
    """A sweep of less than one step fills the disk for ever in ngspice; rcnet finds it."""
    text = f"* t\n{DIVIDER}C1 out 0 1u\n.ac dec 10 10 11\n.end\n"
    assert ngspice(text, timeout=0.5).code is None
    assert answer(text) == ("empty-sweep",)


# ---------------------------------------------------------------------------------------------- strange input

GOOD = (
    "* Level gauge\nVin in 0 DC 0 AC 1 PULSE(0 5 0 1u 1u 0.5m 1m)\nR1 in a 4.7k $ film\nC1 a 0\n+ 10n\n"
    "E1 b 0 a 0 1\nR2 b out 10k\nF1 0 out Vs 0.1\nVs b c 0\nR3 c 0 1k\nL1 out 0 10m\n.options reltol=1e-6\n"
    ".ac dec 10 1 1meg\n.print ac vdb(out) vp(out)\n.tran 1u 5m\n.noise v(out) Vin dec 10 1 1k\n.end\n"
)
LIMIT = 0.2  # seconds of processor time


def harmless(text: str) -> None:
    """The text is read, or refused with a reason, without delay; what was read can be looked at."""
    began = time.process_time()
    try:
        circuit = parse_netlist(text, "x.cir")
    except RcnetError as exc:
        assert all(problem.message for problem in exc.problems)
        assert time.process_time() - began < LIMIT
    else:
        assert time.process_time() - began < LIMIT
        findings(circuit)


WORDS = (
    "R1 C1 V1 in out 0 1k 1e-9F DC AC PULSE( ) SIN( PWL( , = + *# $ ; // .ac .tran .noise .options { dec lin"
)
WORDS += " - 1e999 µ .control .endc .subckt .print"
PIECES = st.sampled_from(
    [*WORDS.split(), "v(out)", "v(", "\n", "\n+", "\n*", "\u2028", "\r", "\0", "\x0c", " ", "\t"]
)


@settings(deadline=None, max_examples=200)
@given(st.lists(PIECES | st.text(max_size=5), max_size=40).map(" ".join) | st.text(max_size=200))
@example("* t\n+")
@example("* t\n.noise v(" + "(" * 1000)
def test_random_text_never_escapes(text: str) -> None:
    """Nothing but an error of rcnet's own comes out, and soon."""
    harmless("* t\n" + text)
    harmless(text)


@settings(deadline=None, max_examples=200)
@given(
    st.lists(
        st.tuples(st.integers(0, len(GOOD)), st.integers(0, 8), PIECES | st.text(max_size=3)),
        min_size=1,
        max_size=4,
    )
)
def test_a_damaged_netlist_never_escapes(damages: list[tuple[int, int, str]]) -> None:
    """Letters cut out of a good netlist and others put in: read or refused."""
    text = GOOD
    for position, length, piece in damages:
        text = text[:position] + piece + text[position + length :]
    harmless(text)


LONG = {
    "words": "R1 " + "a " * 200_000,
    "one word": "R1 " + "a" * 1_000_000 + " 0 1k",
    "brackets": ".print ac " + "v(" * 200_000,
    "blanks": ".print ac v" + " " * 500_000 + "x",
    "equals": ".options " + "=" * 300_000,
    "commas": "R1 a 0 " + "1," * 200_000,
    "digits": "R1 a 0 " + "1" * 500_000,
    "exponent": "R1 a 0 1e" + "9" * 190,
    "noise": ".noise v(" + " " * 300_000,
    "dollars": "R1 a 0" + " $" * 200_000,
    "points": "V1 a 0 PWL(" + "0 " * 100_001 + ")",
}


@pytest.mark.parametrize("text", LONG.values(), ids=LONG)
def test_a_monstrous_line_takes_no_time(text: str) -> None:
    """A line of a megabyte is refused as fast as it is read: no pattern runs away."""
    began = time.perf_counter()
    with pytest.raises(CircuitError) as caught:
        parse_netlist(f"* t\n{text}\n", "x")
    assert time.perf_counter() - began < 2
    assert len(str(caught.value)) < 1000


def test_a_large_netlist_is_read_whole() -> None:
    """A ladder of a hundred thousand parts comes out part for part."""
    sections = 50_000
    ladder = "".join(f"R{k} n{k} n{k + 1} 1k\nC{k} n{k + 1} 0 1n\n" for k in range(sections))
    network = read(f"V1 n0 0 AC 1\n{ladder}.end\n").network
    assert len(network) == 2 * sections + 1
    assert len(network.nodes) == sections + 2
    assert network.part(f"C{sections - 1}").nodes == (f"n{sections}", "0")


def test_a_thousands_mark_is_named() -> None:
    """`1,000` on a resistor is 0 to SPICE (the last of two numbers wins): the comma is named."""
    with pytest.raises(CircuitError, match=r"'1,000': a comma parts words in SPICE, so it is 0") as caught:
        parse_netlist("* tank\nV1 a 0 DC 0 AC 1\nR17 a 0 1,000\n.end\n", "tank.cir")
    assert caught.value.line == 3
    assert "thousands" in (caught.value.remedy or "")
