"""A broken seal says what was changed, as far as the seal lists it."""

from __future__ import annotations

import re

import numpy as np
import pytest

from rcnet.circuit import Circuit, Network, parse_circuit_file
from rcnet.findings import findings
from rcnet.handover import sealed_netlist
from rcnet.netlist import parse_netlist

TOML = """
title  = "Pump station: pressure gauge"
output = "out"
[parts]
R1 = "in a 4k7"
C1 = "a 0 10n"
R2 = "a out 10k"
C2 = "out 0 4n7"
[sources.Vin]
nodes = "in 0"
ac = 1
dc = 2.5
[analysis]
ac = { from = 10, to = "1 MHz", per_decade = 20 }
operating_point = true
[conditions]
temperature = 40
"""
START = "the netlist was changed after it was sealed: "


def sealed() -> str:
    """A sealed netlist of two sections."""
    return sealed_netlist(parse_circuit_file(TOML, "gauge.rc.toml")).text


def said(text: str) -> str:
    """What the rule says of a netlist; "" where the seal holds."""
    found = [each for each in findings(parse_netlist(text, "pump.cir")) if each.code == "seal-broken"]
    assert all(each.severity == "error" and each.message.startswith(START) for each in found)
    return "".join(each.message.removeprefix(START) for each in found)


CHANGES = {
    "a value": ("R1 in a 4700", "R1 in a 4701", "R1 differs."),
    "a node": ("C1 a 0", "C1 out 0", "C1 differs."),
    "two values": ("4700", "47000", "R1 differs."),
    "a part added": ("C1 a 0", "R9 a 0 1e6\nC1 a 0", "R9 was added."),
    "two parts added": ("C1 a 0", "R8 a 0 1e6\nR9 a 0 1e6\nC1 a 0", "R8, R9 were added."),
    "a part taken out": (r"C2 out 0 \S+\n", "", "C2 is gone."),
    "a part renamed": ("C2 out", "C7 out", "C7 was added; C2 is gone."),
    "a source": ("AC 1", "AC 2", "Vin differs."),
    "the sweep": (r"\.ac dec 20", ".ac dec 10", "the ac analysis differs."),
    "an analysis": (r"\.op\n", "", "the operating point differs."),
    "a run added": (r"\.op\n", ".op\n.tran 1u 1m\n", "the run over time differs."),
    "the output": (r"v\(out\)(?=\n)", "v(a)", "the output differs."),
    "the temperature": ("temp=40", "temp=41", "the temperature differs."),
    "an option": ("temp=40", "temp=40 reltol=1e-6", "the option reltol differs."),
    "everything": (r"R1 in a 4700\nC1", "R9 in a 1\nC1", "R9 was added; R1 is gone."),
}


@pytest.mark.parametrize(("old", "new", "says"), CHANGES.values(), ids=CHANGES)
def test_a_broken_seal_says_what_was_changed(old: str, new: str, says: str) -> None:
    """Parts by their names as written; analyses, options and conditions by theirs."""
    text, count = re.subn(old, new, sealed())
    assert count
    assert said(text) == says


def test_what_was_not_changed_is_not_named() -> None:
    """The order of lines, comments and capitals do not count."""
    text = sealed()
    head, comments = text.split("\n", 1)
    assert said(f"{head}\n" + comments.replace("R1 in a", "r1 IN A").replace("C1 a 0", "* x\nC1 a 0")) == ""


def test_an_older_seal_stays_valid_and_says_less() -> None:
    """Without its list a seal holds as before, and breaks with the general sentence."""
    older = re.sub(r"\* +(parts|asked|options) .*\n", "", sealed())
    assert older != sealed()
    assert said(older) == ""
    assert said(older.replace("4700", "4701")) == (
        "a part, a node, a value, a source, an analysis, an option or the output differs."
    )


def test_a_changed_digest_is_told_apart() -> None:
    """Where everything listed is as it was, the digest itself was touched."""
    text = re.sub("digest [0-9a-f]{4}", "digest 0000", sealed())
    assert said(text) == "nothing that the seal lists differs, but its digest does."


def test_the_list_lies_in_comments_of_lines_one_can_read() -> None:
    """Under 80 columns, every part once, by its name as written."""
    lines = [line for line in sealed().split("\n") if re.match(r"\* +(parts|asked|options)", line)]
    assert all(len(line) < 80 for line in lines)
    assert re.findall(r"(\w+):[0-9a-f]{4}\b", next(line for line in lines if "parts" in line)) == [
        "R1", "C1", "R2", "C2", "Vin",
    ]  # fmt: skip


def test_large_netlists_are_not_buried_under_their_seal() -> None:
    """Beyond 500 parts nothing is listed."""
    for count in (249, 250):
        network = Network("Long pipe")
        network.add_voltage_source("Vin", "n0", "0", ac=1)
        here, there = [f"n{k}" for k in range(count)], [f"n{k + 1}" for k in range(count)]
        network.add_resistors([f"R{k}" for k in range(count)], here, there, np.full(count, 1e3))
        network.add_capacitors([f"C{k}" for k in range(count)], there, ["0"] * count, np.full(count, 1e-9))
        text = sealed_netlist(Circuit(network, output=(f"n{count}",))).text
        assert ("*   parts R0:" in text) is (len(network) <= 500)
        assert "many parts" not in text
        changed = said(re.sub(r"C7 n8 0 \S+", "C7 n8 0 1", text))
        assert changed.startswith("C7 differs" if len(network) <= 500 else "a part, a node")
