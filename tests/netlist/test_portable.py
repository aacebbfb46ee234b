"""Portable netlists: what is written is what every simulator descended from Berkeley's reads."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given, settings

import rcnet
from rcnet.circuit import Analyses, Circuit, Network, Place, Request, Sine, Sweep, TransientRun
from rcnet.errors import CircuitError
from rcnet.exact import response
from rcnet.handover import sealed_netlist
from rcnet.netlist import digest, parse_netlist, read_same, write
from rcnet.netlist.portable import ascii_text
from rcnet.resources import starters

from .test_writer import circuits

# SPICE3 Version 3f User's Manual (1993): elements by their first letter, and the lines it knows.
CARDS = r"\.(ac|tran|noise|op|dc|tf|four|print|options|ic|end)\b"
NUMBER = r"[+-]?\d+(\.\d*)?(e[+-]?\d+)?"


def portable(circuit: Circuit) -> str:
    """The text, comments and all."""
    return write(circuit, ["Pegelmesser für 3 Ω"], portable=True).text


@settings(deadline=None, max_examples=60)
@given(circuits())
def test_every_line_is_read_by_all(circuit: Circuit) -> None:
    """Short lines of ASCII, comments on lines of their own, known cards, plain numbers, `.end` at the end."""
    for source in circuit.network.sources.values():
        assume(not (isinstance(source.waveform, Sine) and source.waveform.phase))
    lines = portable(circuit).removesuffix("\n").split("\n")
    assert lines[-1] == ".end"
    for line in lines:
        assert len(line) <= 80
        assert line.isascii()
        assert line.isprintable()
        if line.startswith("*"):
            continue
        assert re.match(rf"[RCLEGFHVIK+]|{CARDS}", line, re.IGNORECASE), line
        assert not re.search(r"[;$&{}'\"]|//", line)


@settings(deadline=None, max_examples=60)
@given(circuits())
def test_names_are_short_words_and_the_circuit_is_the_same(circuit: Circuit) -> None:
    """Eight letters, digits and _ at most, all different in any case; read back, nothing differs."""
    for source in circuit.network.sources.values():
        assume(not (isinstance(source.waveform, Sine) and source.waveform.phase))
    written = write(circuit, portable=True)
    for table, pattern in (
        (written.names.nodes, r"[A-Za-z0-9]\w{0,7}"),
        (written.names.parts, r"[A-Za-z]\w{0,7}"),
    ):
        assert all(re.fullmatch(pattern, name, re.ASCII) for name in table.values())
        assert len({name.lower() for name in table.values()}) == len(table)
    assert read_same(written)


def test_a_long_title_and_names_are_transliterated() -> None:
    """Accents go, signs are spelt out, and the table of names is in ASCII too."""
    network = Network("Pegelstand µA·3 Ω – Überlauf 水位")
    network.add_voltage_source("Vgeber", "zufluß", "0", ac=1)
    network.add_resistor("Rlangername", "zufluß", "x1.out", 1e3)
    network.add_resistor("Rlangername2", "x1.out", "0", 1e3)
    text = write(Circuit(network, output=("x1.out",)), portable=True).text
    first, *lines = text.split("\n")
    assert first == "* Pegelstand uA*3 ohm - Uberlauf ??"
    assert '*   part Rlangern is "Rlangername"' in lines
    assert '*   part Rlange_2 is "Rlangername2"' in lines
    assert '*   node x1_out is "x1.out"' in lines
    assert "Rlangern zuflu_ x1_out 1000" in lines


TEXTS = {
    "plain": ("R1 = 4k7", "R1 = 4k7"),
    "accents": ("Überlauf, café", "Uberlauf, cafe"),
    "signs": ("±5 °C, 3 Ω, 10 µF, 10 μF", "+/-5  deg C, 3 ohm, 10 uF, 10 uF"),
    "letters": ("Straße Łódź", "Strasse Lodz"),
    "wide": ("\uff03shell", "#shell"),
    "other": ("水", "?"),
}


@pytest.mark.parametrize(("text", "plain"), TEXTS.values(), ids=TEXTS)
def test_transliteration(text: str, plain: str) -> None:
    """Each letter has the plain one nearest to it."""
    assert ascii_text(text) == plain


def test_a_title_does_not_become_a_command() -> None:
    """A wide number sign is one in ASCII, and must not stand behind the star."""
    network = Network("\uff03shell touch x")
    network.add_resistor("R1", "a", "0", 1.0)
    assert write(Circuit(network), portable=True).text.startswith("* shell touch x\n")


def filter_circuit(**drive: Any) -> Circuit:
    """R into C."""
    network = Network("Filter")
    network.add_voltage_source("Vin", "in", "0", ac=1, **drive)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    return Circuit(network, output=("out",), analyses=Analyses(ac=Sweep(1.0, 1e4, 5)))


def test_a_sine_with_a_phase_is_refused() -> None:
    """SPICE3 has no number for it and would start the wave elsewhere."""
    sine = {"amplitude": 1, "frequency": 50, "phase": 30}
    with pytest.raises(CircuitError, match="starts at 30 degrees, and SPICE3 knows no phase"):
        write(filter_circuit(sine=sine), portable=True)
    assert "SIN(0 1 50)" in write(filter_circuit(sine={**sine, "phase": 0}), portable=True).text


def test_what_is_left_out_is_told() -> None:
    """Options and measurements of later simulators become comments; what SPICE3 knows stays."""
    place = Place("x", 1)
    requests = (Request(".dc", "Vin 0 5 0.1", place), Request(".meas", "ac x max vdb(out)", place))
    options = {"noopac": "", "reltol": "1e-06"}
    circuit = replace(filter_circuit(), options=options, requests=requests)
    written = write(circuit, portable=True)
    assert ".options reltol=1e-06\n" in written.text
    assert ".dc Vin 0 5 0.1\n" in written.text
    assert "* Left out, since not every simulator knows it: .options noopac\n" in written.text
    assert "* Left out, since not every simulator knows it: .meas ac x max vdb(out)\n" in written.text
    assert written.circuit.options == {"reltol": "1e-06"}


def test_several_analyses_want_a_raw_file() -> None:
    """Ngspice 39 keeps the first only when it just prints, and `.save` is not everybody's."""
    circuit = replace(filter_circuit(dc=1), analyses=Analyses(ac=Sweep(1.0, 1e4, 5), operating_point=True))
    text = write(circuit, portable=True).text
    assert "* Give ngspice a raw file" in text
    assert ".save" not in text
    assert "raw file" not in write(filter_circuit(), portable=True).text


@pytest.mark.ngspice
@pytest.mark.parametrize("name", starters())
def test_a_portable_starter_runs_and_gives_the_exact_response(name: str, ngspice: Callable[..., Any]) -> None:
    """Sealed, read by ngspice without a word of complaint, and right."""
    circuit = rcnet.load(starters()[name])
    text = sealed_netlist(circuit, portable=True).text
    back = parse_netlist(text, "x.cir")
    assert back.seal is not None
    assert back.seal.digest == digest(back)
    ran = ngspice(text)
    assert (ran.code, ran.trouble) == (0, [])
    names = write(circuit, portable=True).names.nodes
    node = circuit.output[0]
    curve = ran.curve(f"v({names[node].lower()})")
    want = response(circuit.network, curve.axis, node)
    assert np.allclose(curve.values, want, rtol=1e-9, atol=1e-12)


def test_a_wave_over_time_keeps_its_numbers() -> None:
    """PULSE has all seven."""
    circuit = filter_circuit(square={"low": 0, "high": 1, "frequency": 1e3})
    circuit = replace(circuit, analyses=Analyses(transient=TransientRun(1e-2, 1e-5)))
    pulse = re.search(r"PULSE\(([^)]*)\)", portable(circuit).replace("\n+ ", " "))
    assert pulse is not None
    assert all(re.fullmatch(NUMBER, word) for word in pulse[1].split())
    assert len(pulse[1].split()) == 7
