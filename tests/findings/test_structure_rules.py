"""The rules about how a netlist is put together, and the codes of refusals."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

import pytest

import rcnet.netlist
from rcnet.circuit import Circuit, Network, Parameter, Place, Seen, Subcircuit
from rcnet.curves import Curves
from rcnet.findings import Finding, all_rules, findings
from rcnet.findings.finding import RULES
from rcnet.findings.refusal_rules import ABOUT

LINES = ("* Pump", ".param gain=2 spare=3", ".param twice={gain*2} half={1/2}", "R1 in 0 {half}", "* spare")


def circuit(**more: object) -> Circuit:
    """A netlist of one resistor, with what the reader noticed beside it."""
    network = Network("Pump")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "0", "1k")
    return Circuit(network, "a", "a.cir", "netlist", lines=LINES, **more)  # type: ignore[arg-type]


def told(whole: Circuit, code: str) -> list[Finding]:
    """The findings of one rule."""
    return [finding for finding in findings(whole) if finding.code == code]


# ----------------------------------------------------------------------------------- what the reader noticed

NOTICED = {
    "commands-dropped": "warning",
    "hidden-command": "error",
    "text-behind-end": "warning",
    "include-end": "warning",
    "ends-name": "note",
    "encoding": "warning",
    "dc-without-number": "warning",
    "include-ambiguous": "warning",
    "duplicate-subcircuit": "error",
    "duplicate-model": "error",
    "duplicate-parameter": "warning",
    "unknown-override": "warning",
    "subcircuit-ground": "note",
    "bare-parameter": "note",
    "zero-resistance": "warning",
    "zero-capacitance": "warning",
    "edge-from-step": "warning",
    "waveform-unknown": "warning",
    "second-analysis": "warning",
    "several-temperatures": "warning",
    "start-of-no-node": "warning",
    "option-changes-circuit": "warning",
    "card-kept": "note",
    "card-ignored": "note",
}


@pytest.mark.parametrize("code", NOTICED)
def test_what_was_noticed_is_told(code: str) -> None:
    """Message, remedy and place as the reader left them, with the rule's severity or the reader's own."""
    place = Place("part.inc", 7, "R9 a b 1k", 4, 1)
    plain = Seen(code, "something was seen.", "Look at it.", place)
    other = Seen("another-code", "something else.", "Look away.", place)
    (finding,) = told(circuit(seen=(other, plain)), code)
    assert finding == Finding(
        code, NOTICED[code], "something was seen.", "part.inc", 7, "Look at it.", "R9 a b 1k", 4, 1
    )
    graver = Seen(code, "something was seen.", "Look at it.", place, "error")
    assert told(circuit(seen=(graver,)), code)[0].severity == "error"
    assert told(circuit(), code) == []


@pytest.mark.parametrize("code", NOTICED)
def test_what_was_noticed_a_thousand_times_is_told_twenty_times(code: str) -> None:
    """The last of twenty says how many more there are."""
    seen = tuple(Seen(code, f"line {k} was seen.", "Look.", Place("a.cir", k)) for k in range(1, 1001))
    found = told(circuit(seen=seen), code)
    assert [finding.message for finding in found[:19]] == [f"line {k} was seen." for k in range(1, 20)]
    assert found[19].message.startswith("981 more ")
    assert len(found) == 20


def test_every_code_the_reader_uses_is_a_rule() -> None:
    """What it notices would otherwise be lost, and what it refuses could not be looked up."""
    texts = [path.read_text("utf-8") for path in Path(rcnet.netlist.__file__).parent.glob("*.py")]
    called = r"(?:notice|Seen)\(\s*(?:\"([a-z-]+)\")"
    noticed = {found for text in texts for found in re.findall(called, text)}
    refused = {found for text in texts for found in re.findall(r"code=\"([a-z-]+)\"", text)}
    all_rules()
    assert len(noticed) > 10
    assert len(refused) > 10
    assert noticed - set(NOTICED) == set()
    assert refused - set(RULES) == set()


# ----------------------------------------------------------------------------------- unused things


def subcircuit(uses: int, file: str = "a.cir") -> Subcircuit:
    """A subcircuit of two ports."""
    return Subcircuit("rc", ("a", "b"), (), uses, Place(file, 2, ".subckt RC a b"))


def test_a_subcircuit_that_no_x_uses() -> None:
    """A warning at its name; a used one, and one of an included library, are left alone."""
    (finding,) = told(circuit(subcircuits=(subcircuit(0),)), "unused-subcircuit")
    assert (finding.severity, finding.line, finding.column, finding.width) == ("warning", 2, 9, 2)
    assert "'rc' is never used" in finding.message
    assert "X1 a b rc" in finding.remedy
    others = (subcircuit(1), subcircuit(0, "filters.lib"))
    assert told(circuit(subcircuits=others), "unused-subcircuit") == []


def parameter(name: str, parts: tuple[str, ...] = (), file: str = "a.cir") -> Parameter:
    """A parameter defined on one of the first lines."""
    line = next(number for number, text in enumerate(LINES, 1) if f"{name}=" in text)
    return Parameter(name, 1.0, "1", Place(file, line, LINES[line - 1]), parts)


def test_a_parameter_on_which_nothing_depends() -> None:
    """A note at its name; one that another line mentions is used, a comment does not count."""
    names = ("gain", "spare", "twice")
    known = {name: parameter(name) for name in names} | {"half": parameter("half", ("R1",))}
    found = told(circuit(parameters=known), "unused-parameter")
    assert [(finding.message, finding.line) for finding in found] == [
        ("nothing depends on the parameter 'spare'.", 2),
        ("nothing depends on the parameter 'twice'.", 3),
    ]
    for finding, name in zip(found, ("spare", "twice"), strict=True):
        assert finding.column is not None
        assert finding.text[finding.column - 1 :][: finding.width] == name
    assert {finding.severity for finding in found} == {"note"}
    library = {"spare": parameter("spare", file="values.inc")}
    assert told(circuit(parameters=library), "unused-parameter") == []


# ----------------------------------------------------------------------------------- refusals


def test_refusals_can_be_looked_up() -> None:
    """Each is a rule of severity error that finds nothing in a circuit and says what it is about."""
    rules = {each.code: each for each in all_rules()}
    for code, about in ABOUT.items():
        assert rules[code].severity == "error"
        assert rules[code].about == about
        assert about.endswith(".")
        assert about[0].isupper()
        assert list(rules[code].look(circuit())) == []


# Codes whose words say what ngspice does with exit code 0: a netlist, and v(out) in its operating point.
SILENT = {
    "value-missing": ("R1 in out 1k\nR2 out 0\n", 1e-3 / 1000.001),
    "node-missing": ("R1 in out 1k\nR2 out 1k\nR3 out 0 1k\n", 0.5),
    "second-value": ("R1 in out 1k\nR2 out 0 1k 3k\n", 0.75),
    "not-a-part": ("R1 in out 1k\nR2 out 0 1k\n(R3 out 0 1k)\n", 0.5),
    "duplicate-subcircuit": (
        ".subckt s a b\nR1 a b 1k\n.ends\n.subckt s a b\nR1 a b 3k\n.ends\nX1 in out s\nR2 out 0 1k\n",
        0.5,
    ),
    "duplicate-model": (
        ".model rm r(r=1k)\n.model rm r(r=3k)\nR1 in out rm\nR2 out 0 1k\n",
        0.5,
    ),
    "duplicate-parameter": (".param r=1k\n.param r=3k\nR1 in out {r}\nR2 out 0 1k\n", 0.25),
    "unknown-override": (
        ".subckt s a b r=1k\nR1 a b {r}\n.ends\nX1 in out s rr=3k\nR2 out 0 1k\n",
        0.5,
    ),
    "subcircuit-ground": (
        ".subckt s a gnd\nR1 a gnd 1k\n.ends\nR1 in out 1k\nX1 out up s\nR2 up in 1k\nR3 up 0 1\n",
        0.5,
    ),
    "several-temperatures": ("R1 in out 1k\nR2 out 0 1k tc1=0.1\n.temp 27 37\n", 0.5),
    "zero-resistance": ("R1 in out 1k\nR2 out 0 0\n", 1e-3 / 1000.001),
    "text-behind-end": ("R1 in out 1k\nR2 out 0 1k\n.end\nR3 out 0 0.5k\n", 0.25),
    "ends-name": (".subckt s a b\nR1 a b 1k\n.ends other\nX1 in out s\nR2 out 0 1k\n", 0.5),
    "option-changes-circuit": ("R1 in out 1k\nR2 out 0 1k\n.options rshunt=1k\n", 1 / 3),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("code", SILENT)
def test_what_ngspice_does_without_an_error(ngspice: Callable[[str], Curves], code: str) -> None:
    """Exit code 0, and the voltage that the rule's words lead to expect."""
    body, volts = SILENT[code]
    curves = ngspice(f"* t\nVin in 0 1\n{body}.op\n.end\n")
    (curve,) = [curve for curve in curves if curve.name == "v(out)"]
    assert curve.values[0] == pytest.approx(volts, rel=1e-5)
    assert code in {each.code for each in all_rules()}


@pytest.mark.ngspice
def test_an_edge_left_out_lasts_a_step(ngspice: Callable[[str], Curves]) -> None:
    """`PULSE(0 1)` under `.tran 1m`: half of the edge is over after half a millisecond."""
    curves = ngspice("* t\nVin in 0 PULSE(0 1)\nR1 in 0 1k\n.tran 1m 10m 0 0.1m\n.end\n")
    (curve,) = [curve for curve in curves if curve.name == "v(in)"]
    half = [v for t, v in zip(curve.axis, curve.values, strict=True) if 0.45e-3 < t < 0.55e-3]
    assert half
    assert all(0.4 < value < 0.6 for value in half)
