"""The rules: each fires where it should, at the right line, and none fires on a sound circuit."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import pytest

from rcnet.circuit import Analyses, Circuit, Network, Sweep, TransientRun, parse_circuit_file
from rcnet.findings import Finding, all_rules, findings, rule
from rcnet.findings.finding import RULES
from rcnet.findings.refusal_rules import ABOUT
from rcnet.handover import sealed_netlist
from rcnet.netlist import parse_netlist

GOOD = """* Level gauge: filter ahead of the logger
Vin in 0 DC 2.5 AC 1 PULSE(0 5 0 1u 1u 0.5m 1m)
R1 in a 4.7kOhm
C1 a 0 10nF
R2 a out 10k
C2 out 0 4.7n
L1 out coil 1mH
R3 coil 0 1Meg
E1 buffer 0 out 0 1
R4 buffer 0 1k
.ac dec 20 10 1Meg
.tran 1u 5m
.noise v(out) Vin dec 10 10 1Meg
.op
.print ac v(out)
.end
"""


@dataclass(frozen=True)
class Case:
    """A netlist below its title, and the one finding expected of one rule."""

    code: str
    severity: str
    line: int | None
    body: str
    says: str
    title: str = "* Pump station"


RC = "V1 in 0 DC 0 AC 1\nR1 in out 1k\nC1 out 0 1u\n"

CASES: dict[str, Case] = {
    "floating": Case(
        "floating", "error", 5, RC + "R2 x y 1k\nR3 x y 1k\n.ac dec 10 1 1k\n", "nodes x, y have no"
    ),
    "voltage loop": Case(
        "voltage-loop", "error", 2, RC + "V2 in 0 1\n", "V1, V2 form a loop of voltage sources"
    ),
    "shorted source": Case("voltage-loop", "error", 5, RC + "V2 out out 1\n", "V2 has both ends on one node"),
    "inductor loop": Case(
        "inductor-loop", "warning", 2, RC + "L1 in 0 1m\n.ac dec 10 1 1k\n", "V1, L1 form a loop"
    ),
    "inductor loop at dc": Case("inductor-loop", "error", 2, RC + "L1 in 0 1m\n.op\n", "V1, L1 form a loop"),
    "no dc path": Case(
        "no-dc-path", "warning", 5, RC + "C2 out x 1n\nC3 x 0 1n\n.ac dec 10 1 1k\n", "node 'x' has no path"
    ),
    "no dc path in op": Case(
        "no-dc-path", "error", 5, RC + "C2 out x 1n\nC3 x 0 1n\n.op\n", "node 'x' has no path"
    ),
    "no dc path in tran": Case(
        "no-dc-path", "error", 5, RC + "C2 out x 1n\nC3 x 0 1n\n.tran 1u 1m\n", "node 'x'"
    ),
    "no dc path in noise": Case(
        "no-dc-path", "error", 5, RC + "C2 out x 1n\nC3 x 0 1n\n.noise v(out) V1 dec 10 1 1k\n", "node 'x'"
    ),
    "no source": Case("no-source", "error", None, "R1 in 0 1k\nC1 in 0 1u\n", "has no source"),
    "no ac source": Case(
        "no-ac-source", "error", 5, RC.replace(" AC 1", "") + ".ac dec 10 1 1k\n", "no source carries ac"
    ),
    "ac of zero": Case(
        "no-ac-source", "error", 5, RC.replace("AC 1", "AC 0") + ".ac dec 10 1 1k\n", "no source carries"
    ),
    "one-node part": Case(
        "one-node-part", "warning", 5, RC + "R2 out OUT 1k\n", "R2 has both ends on node 'out'"
    ),
    "dangling": Case("dangling", "warning", 5, RC + "R2 out uot 1k\n", "node 'uot' is touched by R2 alone"),
    "output absent": Case(
        "output-absent", "error", 6, RC + "\n.print ac v(uot)\n", "output 'uot' is no node"
    ),
    "output pair absent": Case(
        "output-absent", "error", 5, RC + ".plot ac v(in,uot)\n", "output 'uot' is no node"
    ),
    "noise of an absent node": Case(
        "output-absent", "error", 5, RC + ".noise v(uot) V1 dec 10 1 1k\n", "output 'uot' is no node"
    ),
    "mega": Case("odd-number", "error", 5, RC + "R2 out 0 1M\n", "R2: '1M' is read as 1 mohm: M means milli"),
    "farad": Case("odd-number", "error", 5, RC + "C2 out 0 1F\n", "C2: '1F' is read as 1 fF: f means femto"),
    "IEC marking": Case("odd-number", "error", 5, RC + "R2 out 0 4k7\n", "R2: '4k7' is read as 4 kohm"),
    "decimal comma": Case("odd-number", "error", 5, RC + "R2 out 0 4,7k\n", "R2: '4,7k' is read as 7 kohm"),
    "node and comma": Case("odd-number", "error", 5, RC + "R2 out 0,5\n", "R2: '0,5' is read as 5 ohm"),
    "Greek mu": Case("odd-number", "error", 5, RC + "C2 out 0 1μ\n", "C2: '1μ' is read as 1 F"),
    "mil": Case("odd-number", "error", 5, RC + "R2 out 0 1mil\n", "mil means 25.4e-6"),
    "atto": Case("odd-number", "error", 5, RC + "C2 out 0 1a\n", "passes over what it does not know"),
    "underscore": Case("odd-number", "error", 5, RC + "R2 out 0 1_000\n", "R2: '1_000' is read as 1 ohm"),
    "sum": Case(
        "odd-number", "error", 5, RC + "R2 out 0 1k+2\n", "of two numbers in one word SPICE takes the last"
    ),
    "letters": Case("odd-number", "warning", 5, RC + "C2 out 0 1uX\n", "C2: '1uX' is read as 1 uF"),
    "on a source": Case(
        "odd-number", "error", 5, RC + "V2 x 0 DC 1k5\nR2 x 0 1k\n", "V2: '1k5' is read as 1000"
    ),
    "in a sweep": Case("odd-number", "error", 5, RC + ".ac dec 10 1 2k2\n", ".ac: '2k2' is read as 2000"),
    "in a run": Case("odd-number", "error", 5, RC + ".tran 1μ 5\n", ".tran: '1μ' is read as 1"),
    "ac comma": Case(
        "odd-number", "warning", 2, RC.replace("AC 1", "AC 1,5"), "'1,5' is read as magnitude and phase"
    ),
    "M in a sweep": Case("empty-sweep", "error", 5, RC + ".ac dec 10 1 1M\n", "from 1 Hz to 0.001 Hz"),
    "less than a step": Case("empty-sweep", "error", 5, RC + ".ac dec 10 10 11\n", "less than one step"),
    "two points": Case("empty-sweep", "error", 5, RC + ".ac lin 2 10 20\n", "one point only"),
    "noise backwards": Case(
        "empty-sweep", "error", 5, RC + ".noise v(out) V1 dec 10 5 1\n", "ends below its start"
    ),
    "part as title": Case("title-is-part", "warning", 1, RC, "looks like the part R2", title="R2 out 0 1k"),
    "source as title": Case(
        "title-is-part", "warning", 1, RC, "the part Vin", title="Vin in 0 DC 0 AC 1 SIN(0 1 1k)"
    ),
    "zeros": Case(
        "ground-lookalike", "warning", 5, RC + "R2 out 00 1k\nR3 00 out 1k\n", "'00' is not ground"
    ),
    "gnd!": Case(
        "ground-lookalike", "warning", 5, RC + "R2 out GND! 1k\nR3 gnd! out 1k\n", "'GND!' is not ground"
    ),
    "accents": Case(
        "names-merge", "error", 6, RC + "R2 né out 1k\nR3 nü né 1k\nR4 nü 0 1k\n", "'né' and 'nü' are one"
    ),
    "micro": Case(
        "names-merge", "error", 6, RC + "R2 µ1 out 1k\nR3 u1 µ1 1k\nR4 u1 0 1k\n", "'µ1' and 'u1' are one"
    ),
}


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_a_rule_fires_at_its_line(case: Case) -> None:
    """Code, severity, file, line and the line's text; the message names what it is about."""
    text = f"{case.title}\n{case.body}.end\n"
    found = [finding for finding in findings(parse_netlist(text, "pump.cir")) if finding.code == case.code]
    (finding,) = found
    assert (finding.severity, finding.file, finding.line) == (case.severity, "pump.cir", case.line)
    assert finding.text == ("" if case.line is None else text.split("\n")[case.line - 1])
    assert case.says in finding.message
    assert finding.message.endswith(".")
    assert finding.remedy.endswith(".")


def test_a_sound_netlist_has_no_findings() -> None:
    """All kinds of analysis, units behind numbers, an inductor, a buffer: nothing to say."""
    assert findings(parse_netlist(GOOD, "gauge.cir")) == ()


TITLES = [
    "Filter a b 5",
    "C64 power supply",
    "Version 2 of 3",
    "R1 in out",
    "* R1 in out 1k",
    "Vin for the pump",
    "",
]


@pytest.mark.parametrize("title", TITLES)
def test_a_title_in_words_is_no_part(title: str) -> None:
    """A title that only begins like a part is left alone."""
    assert findings(parse_netlist(GOOD.replace(GOOD.split("\n", 1)[0], title, 1), "x")) == ()


# ------------------------------------------------------------------------------------ rules beyond netlists


def python_network(**drive: object) -> Network:
    """An RC filter built in Python."""
    network = Network("Pump")
    network.add_voltage_source("Vin", "in", "0", **(drive or {"ac": 1}))
    network.add_resistor("R1", "in", "out", "1k")
    network.add_capacitor("C1", "out", "0", "1u")
    return network


def one(circuit: Circuit, code: str) -> Finding:
    """The finding of that code, which must be alone."""
    (finding,) = [finding for finding in findings(circuit) if finding.code == code]
    return finding


def test_names_that_differ_in_case_get_a_note() -> None:
    """Nodes and parts that SPICE would take for one; the netlist renames them, so it is a note."""
    network = python_network()
    network.add_resistor("R2", "OUT", "0", "1k")
    network.add_resistor("r2", "OUT", "out", "1k")
    found = [finding for finding in findings(Circuit(network, "pump")) if finding.code == "case-only"]
    assert [(finding.severity, finding.file, finding.line) for finding in found] == [
        ("note", "pump", None)
    ] * 2
    assert "'out' and 'OUT'" in found[0].message
    assert "'R2' and 'r2'" in found[1].message


def test_case_only_points_into_the_circuit_file() -> None:
    """The line is that of the first part at the second spelling."""
    text = 'output = "out"\n[parts]\nR1 = "in out 1k"\nR2 = "OUT 0 1k"\nR3 = "OUT out 1k"\n'
    text += '[sources.Vin]\nnodes = "in 0"\nac = 1\n'
    finding = one(parse_circuit_file(text, "a.rc.toml"), "case-only")
    assert (finding.file, finding.line, finding.text) == ("a.rc.toml", 4, 'R2 = "OUT 0 1k"')


def test_noise_without_an_output_is_an_error() -> None:
    """Nobody said which node the noise is wanted at."""
    circuit = Circuit(python_network(), "pump", analyses=Analyses(noise=Sweep(1.0, 10.0, 10)))
    finding = one(circuit, "output-absent")
    assert (finding.severity, finding.line) == ("error", None)
    assert "no output node" in finding.message


def test_analyses_that_rcnet_chose_make_no_errors_of_the_designers() -> None:
    """Without a dc path an operating point is an error only where the designer asked for it."""
    network = python_network()
    network.add_capacitor("C2", "out", "x", "1n")
    network.add_capacitor("C3", "x", "0", "1n")
    for chosen, severity in ((True, "warning"), (False, "error")):
        analyses = Analyses(transient=TransientRun(1.0, 0.1), chosen=chosen)
        assert one(Circuit(network, analyses=analyses), "no-dc-path").severity == severity


def test_a_network_that_floats_altogether_is_not_reported_twice() -> None:
    """What nothing ties to ground at any frequency is no second finding at dc."""
    circuit = parse_netlist(f"* t\n{RC}R2 x y 1k\nR3 x y 1k\n", "x")
    assert {finding.code for finding in findings(circuit)} == {"floating"}


def test_nodes_that_claims_look_at_do_not_dangle() -> None:
    """A node touched by one part is meant where a claim or the output is about it."""
    text = (
        'output = "out"\n[parts]\nR1 = "in out 1k"\nR2 = "in tap 1k"\n[sources.Vin]\nnodes = "in 0"\nac = 1\n'
    )
    claim = (
        '[[claims]]\nsays = "All of it arrives"\nmeasure = "dc_gain"\nof = "tap"\nequals = 1\nwithin = "1%"\n'
    )
    assert one(parse_circuit_file(text, "a.rc.toml"), "dangling").message.startswith("node 'tap'")
    assert findings(parse_circuit_file(text + claim, "a.rc.toml")) == ()


def test_circuit_files_may_use_any_letters_and_what_looks_like_a_part() -> None:
    """Rules about a netlist's text leave circuit files alone: their nodes are renamed, their title is one."""
    text = 'title = "R2 out 0 1k"\noutput = "né"\n[parts]\nR1 = "in né 1k"\nR2 = "né nü 1k"\nR3 = "nü 0 1M"\n'
    circuit = parse_circuit_file(text + '[sources.Vin]\nnodes = "in 0"\nac = 1\n', "a.rc.toml")
    assert findings(circuit) == ()


def test_errors_come_first_then_the_files_order() -> None:
    """Whoever reads the list meets the worst first."""
    text = f"R9 out 0 1k\n{RC}R2 out uot 1k\nR3 out 0 1M\nR4 out 0 4k7\n.print ac v(nowhere)\n.end\n"
    found = findings(parse_netlist(text, "x"))
    assert [(finding.severity, finding.line) for finding in found] == [
        ("error", 6),
        ("error", 7),
        ("error", 8),
        ("warning", 1),
        ("warning", 5),
    ]


# ------------------------------------------------------------------------------------------ the register

HERE = {case.code for case in CASES.values()}


def test_every_rule_has_a_test_and_is_documented() -> None:
    """A rule without a test that names its code, or without a word to users, is not a rule."""
    rules = all_rules()
    tests = "".join(path.read_text("utf-8") for path in Path(__file__).parents[1].rglob("test_*.py"))
    assert [each.code for each in rules] == sorted(RULES)
    for each in rules:
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", each.code)
        assert each.about.split("\n\n")[0].endswith(".")
        # The codes of refusals are tested together, from the table itself.
        assert each.code in HERE or each.code in ABOUT or f'"{each.code}"' in tests, each.code
        if each.code in HERE:
            assert each.severity in {case.severity for case in CASES.values() if case.code == each.code}


def test_a_broken_seal_is_an_error_at_its_digest() -> None:
    """The line is that of the digest; a comment cannot break it, a value does."""
    text = sealed_netlist(Circuit(python_network(), output=("out",))).text
    assert findings(parse_netlist(text, "x.cir")) == ()
    changed = text.replace("R1 in out 1000", "R1 in out 1001")
    finding = one(parse_netlist(changed, "x.cir"), "seal-broken")
    assert (finding.severity, finding.file) == ("error", "x.cir")
    assert finding.text == changed.split("\n")[(finding.line or 0) - 1]
    assert finding.text.startswith("*   digest ")


def test_a_seal_despite_errors_is_a_warning() -> None:
    """Whoever is handed such a netlist learns it."""
    network = python_network()
    network.add_resistor("R2", "x", "y", "1k")
    text = sealed_netlist(network, anyway=True).text
    assert one(parse_netlist(text, "x.cir"), "sealed-despite-errors").severity == "warning"


def test_two_rules_cannot_have_one_code() -> None:
    """The register refuses a second rule of the same code."""
    with pytest.raises(ValueError, match="two rules are called 'floating'"):
        rule("floating", "note")(lambda circuit: ())
