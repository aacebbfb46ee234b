"""The rules about values: what parts come in, by size and by preferred series."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest

from rcnet.circuit import Circuit, Network, Place, parse_circuit_file
from rcnet.findings import Finding, findings

HEAD = 'output = "out"\n[sources.Vin]\nnodes = "in 0"\nac = 1\n[parts]\nR0 = "in out 1k"\nC0 = "out 0 1u"\n'


def told(circuit: Circuit, code: str) -> list[Finding]:
    """The findings of one rule."""
    return [finding for finding in findings(circuit) if finding.code == code]


def of_file(parts: str, code: str) -> list[Finding]:
    """The findings of one rule about parts beside an RC filter."""
    return told(parse_circuit_file(f"{HEAD}{parts}\n", "a.rc.toml"), code)


def of_netlist(name: str, value: float, text: str, code: str) -> list[Finding]:
    """The findings of one rule about a part that a netlist writes with that text."""
    network = Network("Pump")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    add = {"R": network.add_resistor, "C": network.add_capacitor, "L": network.add_inductor}[name[0]]
    add(name, "in", "0", value)
    place = Place("a.cir", 3, f"{name} in 0 {text}")
    circuit = Circuit(
        network, "a", "a.cir", "netlist", places={name: place}, value_texts={name: text}, lines=("* t",)
    )
    return told(circuit, code)


# ------------------------------------------------------------------------------------------ suspicious values


@dataclass(frozen=True)
class Case:
    """A part beside an RC filter in a circuit file, and what is said of it; nothing where that is empty."""

    part: str
    says: str = ""


SUSPICIOUS = {
    "a capacitor of 10 F": Case('C1 = "in 0 10"', "C1 has 10 F; a capacitor usually has 10 fF to 100 mF."),
    "a capacitor of 1 fF": Case('C1 = "in 0 1f"', "C1 has 1 fF; a capacitor usually has"),
    "a resistor of 1 uohm": Case('R1 = "in 0 1u"', "R1 has 1 uohm; a resistor usually has 1 mohm to 1 Tohm."),
    "a resistor of 2 Tohm": Case('R1 = "in 0 2T"', "R1 has 2 Tohm; a resistor usually has"),
    "an inductor of 2 kH": Case(
        'L1 = "in a 2k"\nR1 = "a 0 1k"', "L1 has 2 kH; an inductor usually has 100 pH to 1 kH."
    ),
    "an inductor of 1 pH": Case('L1 = "in a 1p"\nR1 = "a 0 1k"', "L1 has 1 pH"),
    "a shunt": Case('R1 = "in 0 5m"'),
    "the least resistor": Case('R1 = "in 0 1m"'),
    "the greatest resistor": Case('R1 = "in 0 1T"'),
    "a stray capacitance": Case('C1 = "in 0 0.1p"'),
    "a large electrolytic": Case('C1 = "in 0 100m"'),
    "a choke": Case('L1 = "in a 10"\nR1 = "a 0 1k"'),
}


@pytest.mark.parametrize("case", SUSPICIOUS.values(), ids=SUSPICIOUS)
def test_a_value_outside_what_such_parts_come_in(case: Case) -> None:
    """A warning at the value's own characters, and none for what catalogues hold."""
    found = of_file(case.part, "suspicious-value")
    assert [finding.message[: len(case.says)] for finding in found] == [case.says] * bool(case.says)
    for finding in found:
        assert finding.severity == "warning"
        assert finding.column is not None
        assert finding.text[finding.column - 1 :][: finding.width] == case.part.split('"')[1].split()[2]


NETLIST = {
    "milli on a resistor": ("R1", 5e-3, "5m", "R1: '5m' is 5 mohm."),
    "with a unit": ("R1", 5e-2, "50mOhm", "R1: '50mOhm' is 50 mohm."),
    "written out": ("R1", 5e-3, "0.005", ""),
    "in exponents": ("R1", 5e-3, "5e-3", ""),
    "not so small": ("R1", 0.5, "500m", ""),
    "milli on a capacitor": ("C1", 5e-3, "5m", ""),
    "beyond the bound": ("R1", 5e-6, "5u", "R1 has 5 uohm; a resistor"),
    "an odd number is a finding already": ("R1", 5e-3, "5M", ""),
    "an odd number beyond the bound too": ("C1", 1e-15, "1F", ""),
    "a decimal comma too": ("R1", 7e-3, "4,7m", ""),
}


@pytest.mark.parametrize(("name", "value", "text", "says"), NETLIST.values(), ids=NETLIST)
def test_milliohms_in_a_netlist(name: str, value: float, text: str, says: str) -> None:
    """An m on a small resistance may have been meant as Meg; what another rule reports is not told twice."""
    found = of_netlist(name, value, text, "suspicious-value")
    assert [finding.message[: len(says)] for finding in found] == [says] * bool(says)
    if says:
        assert found[0].column == len(f"{name} in 0 ") + 1
        assert found[0].width == len(text)
    if " is " in says:
        assert found[0].remedy == f"Write Meg for a million, or {value!r} if so little is meant."


def test_many_suspicious_values_are_one_finding() -> None:
    """Ten thousand parasitic capacitors of a layout are told together, with their range."""
    count = 10_000
    network = Network("Layout")
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_capacitors(
        [f"C{k}" for k in range(count)], ["in"] * count, ["0"] * count, np.linspace(1e-15, 9e-15, count)
    )
    (finding,) = told(Circuit(network), "suspicious-value")
    assert finding.message == (
        "C0, C1, C2, C3, C4, C5, C6, C7 and 9992 more have 1 fF to 9 fF; a capacitor usually has 10 fF to "
        "100 mF."
    )


# ------------------------------------------------------------------------------------------ preferred series

# What is in which series: the lists of IEC 60063:2015.
OFF = {
    "5 kohm at 1 %": Case(
        'R1 = "in 0 5k 1%"',
        "R1: 5 kohm with 1% is no value of E96 or E24; nearest are 4.99 kohm (E96) and 5.1 kohm (E24).",
    ),
    "50 ohm at 5 %": Case('R1 = "in 0 50 5%"', "R1: 50 ohm with 5% is no value of E24; nearest is 51 ohm."),
    "5.1 kohm at 10 %": Case(
        'R1 = "in 0 5k1 10%"', "R1: 5.1 kohm with 10% is no value of E12; nearest is 4.7 kohm."
    ),
    "12 kohm at 20 %": Case(
        'R1 = "in 0 12k 20%"', "R1: 12 kohm with 20% is no value of E6; nearest is 10 kohm."
    ),
    "4.75 kohm at 2 %": Case(
        'R1 = "in 0 4k75 2%"',
        "R1: 4.75 kohm with 2% is no value of E48 or E24; nearest are 4.64 kohm (E48) and 4.7 kohm (E24).",
    ),
    "100 nF is 98 pF": Case('C1 = "in 0 98p 5%"', "C1: 98 pF with 5% is no value of E24; nearest is 100 pF."),
    "an inductor": Case(
        'L1 = "in a 1.4m 10%"\nR1 = "a 0 1k"', "L1: 1.4 mH with 10% is no value of E24; nearest is 1.5 mH."
    ),
    "unsymmetrical": Case('C1 = "in 0 500u +80/-20%"', "C1: 500 uF with +80/-20% is no value of E24;"),
    "4.7 kohm at 1 %": Case('R1 = "in 0 4k7 1%"'),
    "4.99 kohm at 1 %": Case('R1 = "in 0 4k99 1%"'),
    "4.93 kohm at 0.5 %": Case('R1 = "in 0 4k93 0.5%"'),
    "5.1 kohm at 0.1 %": Case('R1 = "in 0 5k1 0.1%"'),
    "4.64 kohm at 2 %": Case('R1 = "in 0 4k64 2%"'),
    "5.1 kohm at 5 %": Case('R1 = "in 0 5k1 5%"'),
    "8.2 kohm at 10 %": Case('R1 = "in 0 8k2 10%"'),
    "capacitors are made finer": Case('C1 = "in 0 13n 20%"'),
    "a shunt of 50 mohm": Case('R1 = "in 0 R05 1%"'),
    "no tolerance, no catalogue": Case('R1 = "in 0 5k"'),
    "an ideal part": Case('R1 = "in 0 5k 0%"'),
}


@pytest.mark.parametrize("case", OFF.values(), ids=OFF)
def test_a_value_that_is_not_made(case: Case) -> None:
    """A note with the nearest values, at the value; only where a tolerance says which series is meant."""
    found = of_file(case.part, "off-series")
    assert [finding.message[: len(case.says)] for finding in found] == [case.says] * bool(case.says)
    for finding in found:
        assert finding.severity == "note"
        assert finding.column is not None
        assert finding.text[finding.column - 1 :][: finding.width] == case.part.split('"')[1].split()[2]


def test_a_section_of_a_ladder_is_pointed_at() -> None:
    """The value behind the part's name, also where another section stands on the line."""
    text = 'output = "out"\n[ladder]\npath = "in -> out"\nsections = ["shunt C1 5n", "series R1 5k 1%"]\n'
    (finding,) = told(parse_circuit_file(f'{text}[sources.Vin]\nnodes = "in 0"\nac = 1\n', "a"), "off-series")
    assert finding.column is not None
    assert finding.text[finding.column - 1 :][: finding.width] == "5k"
    assert finding.text[: finding.column - 1].endswith("R1 ")


def test_equal_parts_are_one_note() -> None:
    """A value used again and again is told once, of many values the first ones."""
    same = "\n".join(f'R{k} = "in 0 5k 1%"' for k in range(1, 13))
    (finding,) = of_file(same, "off-series")
    assert finding.message.startswith("R1, R2, R3, R4, R5, R6, R7, R8 and 4 more: 5 kohm with 1%")
    many = "\n".join(f'R{k} = "in 0 {k}.003k 1%"' for k in range(1, 51))
    found = of_file(many, "off-series")
    assert len(found) == 20
    assert found[-1].message == "31 more values are in no series of their tolerance."
