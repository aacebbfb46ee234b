"""The seal: it says what was checked, and it breaks where what the netlist holds is changed."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from rcnet.circuit import Circuit, Network, parse_circuit_file
from rcnet.findings import Finding, findings
from rcnet.handover import sealed_netlist
from rcnet.netlist import digest, find_seal, parse_netlist

FILE = "level-filter.rc.toml"
TOML = """
title  = "Level gauge: filter ahead of the logger"
output = "out"
[parts]
R1 = "in a 4k7 1%"
C1 = "a 0 10n"
R2 = "a out 10k"
C2 = "out 0 4n7"
E1 = "buffer 0 out 0 1"
R3 = "buffer 0 1k"
[sources.Vin]
nodes = "in 0"
ac = 2
dc = 2.5
square = { low = 0, high = 5, frequency = "1 kHz", rise = "1 us", fall = "1 us" }
[analysis]
ac = { from = 10, to = "1 MHz", per_decade = 20 }
transient = { stop = "5 ms" }
noise = { from = 10, to = "1 MHz", per_decade = 10 }
operating_point = true
[conditions]
temperature = 40
[[claims]]
says = "Corner above 1 kHz"
measure = "cutoff"
at_least = "1 kHz"
[[claims]]
says = "Corner above 1 MHz"
measure = "cutoff"
at_least = "1 MHz"
"""


def circuit() -> Circuit:
    """Two unbuffered sections behind a source of 2 V ac."""
    return parse_circuit_file(TOML, f"/srv/pumps/{FILE}")


def sealed() -> str:
    """Its sealed netlist."""
    return sealed_netlist(circuit()).text


def seal_findings(text: str) -> list[Finding]:
    """What the rules say of the seal in a netlist."""
    found = findings(parse_netlist(text, "pumps.cir"))
    return [finding for finding in found if finding.code.startswith("seal")]


def test_an_unchanged_netlist_keeps_its_seal() -> None:
    """Nothing is found in a netlist as it was handed on."""
    text = sealed()
    seal = find_seal(text.split("\n"))
    assert seal is not None
    assert not seal.anyway
    assert seal.digest == digest(parse_netlist(text, "x"))
    assert text.split("\n")[seal.line - 1] == f"*   digest {seal.digest}"
    assert seal_findings(text) == []


BROKEN = {
    "value": ("R1 in a 4700", "R1 in a 4700.000000000001"),
    "node": ("C1 a 0", "C1 out 0"),
    "nodes exchanged": ("E1 buffer 0 out 0", "E1 0 buffer out 0"),
    "part gone": ("C2 out 0 4.7e-09\n", ""),
    "part more": ("R3 buffer", "R4 out 0 1e9\nR3 buffer"),
    "part renamed": ("R3 buffer", "R4 buffer"),
    "gain": ("E1 buffer 0 out 0 1", "E1 buffer 0 out 0 2"),
    "ac": ("AC 2", "AC 1"),
    "ac phase": ("AC 2", "AC 2 90"),
    "dc": ("DC 2.5", "DC 2.4"),
    "waveform": ("PULSE(0 5", "PULSE(0 4"),
    "waveform gone": (r"\n?(\+ )?PULSE\([^)]*\)", ""),
    "sweep": (".ac dec 20", ".ac dec 10"),
    "sweep's end": ("10 1000000\n.print ac", "10 100000\n.print ac"),
    "transient": (".tran 1e-05 0.005", ".tran 1e-05 0.004"),
    "transient's start": (".tran 1e-05 0.005", ".tran 1e-05 0.005 0.001"),
    "noise sweep": (".noise v(out) Vin dec 10", ".noise v(out) Vin dec 20"),
    "analysis gone": (r"\.op\n", ""),
    "temperature": ("temp=40", "temp=41"),
    "option": (".options", ".options method=gear"),
    "digest": ("digest ..", "digest 00"),
    "digest gone": (r"\*   digest .*\n", ""),
}


@pytest.mark.parametrize(("old", "new"), BROKEN.values(), ids=BROKEN)
def test_a_change_of_what_it_holds_breaks_the_seal(old: str, new: str) -> None:
    """An error at the seal's own line, whatever was changed."""
    pattern = old if old.startswith((r"\n", r"\.op", r"\*", "digest")) else re.escape(old)
    text, count = re.subn(pattern, new.replace("\\", "\\\\"), sealed(), count=1)
    assert count == 1
    (finding,) = seal_findings(text)
    assert (finding.code, finding.severity, finding.file) == ("seal-broken", "error", "pumps.cir")
    assert finding.line is not None
    assert text.split("\n")[finding.line - 1].startswith(("*   digest", "* Sealed by rcnet"))


def shuffled(text: str) -> str:
    """The parts in another order."""
    lines = text.split("\n")
    parts = [line for line in lines if re.match("[RCE]", line)]
    for line in parts:
        lines.remove(line)
    where = next(number for number, line in enumerate(lines) if line.startswith(".end"))
    return "\n".join([*lines[:where], *reversed(parts), *lines[where:]])


def test_another_output_breaks_the_seal() -> None:
    """The node that the netlist is about is part of what was sealed."""
    (finding,) = seal_findings(re.sub(r"^(\.\w+ .*)v\(out\)", r"\1v(a)", sealed(), flags=re.MULTILINE))
    assert finding.code == "seal-broken"


KEPT = {
    "comment added": lambda text: text.replace("R1 in", "* as measured\nR1 in"),
    "comment behind a part": lambda text: text.replace("R1 in a 4700", "R1 in a 4700 $ film"),
    "title": lambda text: "* Another title\n" + text.split("\n", 1)[1],
    "expectation": lambda text: text.replace("expect v(out)", "we saw v(out)"),
    "blanks": lambda text: text.replace("R1 in a", "  R1   in\ta  "),
    "empty lines": lambda text: text.replace("R1 in", "\n\nR1 in"),
    "case": lambda text: (
        text.split("\n", 1)[0]
        + "\n"
        + re.sub(r"^[^*].*$", lambda line: line[0].swapcase(), text.split("\n", 1)[1], flags=re.MULTILINE)
    ),
    "order": shuffled,
    "continuation": lambda text: text.replace("R1 in a 4700", "R1 in\n+ a\n* why\n+ 4700"),
    "other spelling of a value": lambda text: text.replace("R1 in a 4700", "R1 in a 4.7k"),
    "gnd for 0": lambda text: text.replace("C1 a 0", "C1 a GND"),
    "CRLF": lambda text: text.replace("\n", "\r\n"),
    "blanks behind comments": lambda text: text.replace("\n*", "  \n  *"),
    "no .end": lambda text: text.replace(".end\n", ""),
}


@pytest.mark.parametrize("change", KEPT.values(), ids=KEPT)
def test_what_means_the_same_keeps_the_seal(change) -> None:  # type: ignore[no-untyped-def]
    """Comments, layout, order, case and spelling of values do not count."""
    text = change(sealed())
    assert text != sealed()
    assert seal_findings(text) == []
    assert find_seal(text.replace("\r", "").split("\n")) is not None


def test_a_netlist_without_a_seal_is_no_offence() -> None:
    """Who wrote no seal broke none."""
    assert find_seal(["* digest " + "0" * 64, "* Sealed"]) is None
    assert seal_findings("* t\nV1 a 0 AC 1\nR1 a 0 1k\n") == []


def test_the_last_seal_counts() -> None:
    """A forged digest in front of the true one, or an older seal, does not stand in for it."""
    text = sealed().replace("* Sealed by rcnet.", "* Sealed by rcnet.\n*   digest " + "0" * 64)
    assert seal_findings(text) == []


def test_names_and_texts_cannot_imitate_the_words_of_a_seal() -> None:
    """A node or a claim called like the seal's own words changes nothing of what is read from it."""
    network = Network("Sealed by rcnet.")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("Rdespite", "in", "despite(--anyway)", "1k")
    network.add_capacitor("C1", "despite(--anyway)", "0", "1u")
    text = sealed_netlist(Circuit(network, output=("despite(--anyway)",))).text
    seal = find_seal(text.split("\n"))
    assert seal is not None
    assert not seal.anyway
    assert seal_findings(text) == []


def test_the_seal_says_that_errors_were_passed_over() -> None:
    """Written with --anyway, it lists the errors, and whoever reads it is warned."""
    network = Network("Pump")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "0", "1k")
    network.add_resistor("R2", "loose", "end", "1k")
    text = sealed_netlist(network, anyway=True).text
    assert "*   written despite errors (--anyway):\n*     nodes loose, end have no connection" in text
    (finding,) = seal_findings(text)
    assert (finding.code, finding.severity) == ("sealed-despite-errors", "warning")
    assert finding.text.startswith("*   digest ")


def test_the_seal_tells_findings_and_claims() -> None:
    """The counts of findings by severity and of claims by verdict."""
    text = sealed()
    assert "*   checked: 0 errors, 0 warnings, 0 notes\n" in text
    assert "*   2 claims: 1 true, 1 false, 0 undecided\n" in text


def exact(frequency: float) -> complex:
    """v(out) for 2 V: the ladder solved on paper, V/out = (1 + sR1 Y) (1 + sR2C2) ... by its two meshes."""
    s = 2j * np.pi * frequency
    r1, c1, r2, c2 = 4700.0, 10e-9, 10e3, 4.7e-9
    return complex(2 / (1 + s * (r1 * c1 + r1 * c2 + r2 * c2) + s * s * r1 * c1 * r2 * c2))


def test_the_expected_levels_are_what_a_simulator_shows() -> None:
    """Level and phase at the frequency printed, nine digits, with the source's own 2 V."""
    lines = re.findall(r"\*   expect v\(out\) at (\S+) (k|M)?Hz: (\S+) dB, (\S+) deg", sealed())
    assert len(lines) == 5
    for number, prefix, level, angle in lines:
        value = exact(float(number) * {"": 1, "k": 1e3, "M": 1e6}[prefix])
        assert float(level) == pytest.approx(20 * np.log10(abs(value)), rel=1e-8)
        assert float(angle) == pytest.approx(np.degrees(np.angle(value)), rel=1e-8)


def test_the_expected_cutoff_is_where_power_is_half() -> None:
    """Ten digits of the root of |H|^2 = 1/2, found by scipy."""
    from scipy.optimize import brentq

    found = re.search(r"expect v\(out\): upper cutoff (\S+) Hz", sealed())
    assert found is not None
    root = brentq(lambda f: abs(exact(f)) ** 2 - 2, 10, 1e6, xtol=1e-10, rtol=1e-15)
    assert float(found[1]) == pytest.approx(root, rel=1e-9)


def test_the_netlist_names_the_file_and_not_where_it_lies(tmp_path: Path) -> None:
    """No folder of the machine it was written on appears in it."""
    text = sealed()
    assert f"from {FILE}." in text
    assert "/srv" not in text
    assert "pumps" not in text


def test_expectations_speak_the_names_of_the_netlist() -> None:
    """Where the output was renamed, the lines name what the simulator will show."""
    network = Network("x")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "µ", "1k")
    network.add_capacitor("C1", "µ", "0", "1u")
    text = sealed_netlist(Circuit(network, output=("µ",))).text
    assert "expect v(n__)" in text
    assert "v(µ)" not in text
