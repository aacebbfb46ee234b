"""Decks made through templates: they hold the circuit, run in a simulator, and cannot do anything else."""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import rcnet
from rcnet.circuit import Analyses, Circuit, Network, Sweep, TransientRun
from rcnet.errors import CircuitError, InputError
from rcnet.exact import noise, operating_point, response, transient
from rcnet.forms import deck_templates, sealed_deck
from rcnet.netlist import digest, parse_netlist, sandbox
from rcnet.netlist.samples import samples
from rcnet.netlist.writer import sheet
from rcnet.resources import starters

BODY = "{{ title }}\n{% for line in body %}\n{{ line }}\n{% endfor %}\n"
Run = Callable[..., Any]


def gauge() -> Circuit:
    """Two resistors and two capacitors with tolerances, driven by a square."""
    network = Network("Float gauge filter")
    network.add_voltage_source("Vin", "in", "0", ac=1, square={"low": 0, "high": 5, "frequency": 100})
    network.add_resistor("R1", "in", "a", 1e3, tolerance="5%")
    network.add_capacitor("C1", "a", "0", 1e-7, tolerance="+20/-10%")
    network.add_resistor("R2", "a", "out", 1e4, tolerance="1%")
    network.add_capacitor("C2", "out", "0", 1e-8)
    return Circuit(network, "gauge", output=("out",))


def folder_with(folder: Path, **templates: str) -> list[Path]:
    """A folder of templates of one's own."""
    for name, text in templates.items():
        (folder / f"{name}.cir.j2").write_text(text, encoding="utf-8")
    return [folder]


# ---------------------------------------------------------------------- the shipped templates


def test_the_shipped_templates_say_what_they_are() -> None:
    """Five, each with a sentence."""
    found = deck_templates()
    assert sorted(found) == ["ac-sweep", "noise", "operating-point", "tolerance-samples", "transient"]
    assert all(says.endswith(".") for says in found.values())


@pytest.mark.ngspice
def test_a_swept_deck_gives_the_exact_response(ngspice: Run) -> None:
    """The ac deck holds that analysis alone and needs no operating point."""
    circuit = gauge()
    circuit.network.add_capacitor("C3", "out", "b", 1e-9)
    circuit.network.add_capacitor("C4", "b", "0", 1e-9)  # b has no path for dc
    text = sealed_deck(circuit, "ac-sweep", anyway=True)
    ran = ngspice(text)
    assert (ran.code, ran.trouble) == (0, [])
    curve = ran.curve("v(b)")
    assert np.allclose(curve.values, response(circuit.network, curve.axis, "b"), rtol=1e-9, atol=1e-15)
    assert ".tran" not in text


@pytest.mark.ngspice
def test_a_transient_deck_gives_the_exact_run(ngspice: Run) -> None:
    """The run over time, to what the simulator's steps allow."""
    circuit = replace(gauge(), analyses=Analyses(transient=TransientRun(0.02, 1e-6, 0.0, 1e-6)))
    ran = ngspice(sealed_deck(circuit, "transient"))
    assert (ran.code, ran.trouble) == (0, [])
    curve = ran.curve("v(out)", "transient")
    held = sheet(circuit).circuit.network
    assert np.allclose(curve.values, transient(held, curve.axis, "out"), atol=1e-3)


@pytest.mark.ngspice
def test_a_noise_deck_gives_the_exact_density(ngspice: Run) -> None:
    """Thermal noise at the output; ngspice's Boltzmann constant is 2e-7 off."""
    circuit = gauge()
    ran = ngspice(sealed_deck(circuit, "noise"))
    curve = ran.curve("onoise_spectrum", "noise")
    assert ran.code == 0
    assert np.allclose(curve.values, noise(circuit.network, curve.axis, "out"), rtol=1e-6)


@pytest.mark.ngspice
def test_a_resting_deck_gives_the_exact_voltages(ngspice: Run) -> None:
    """The operating point alone."""
    network = gauge().network
    network.add_voltage_source("Vs", "s", "0", dc=3.3)
    network.add_resistor("R9", "s", "out", 1e5)
    circuit = Circuit(network, output=("out",))
    ran = ngspice(sealed_deck(circuit, "operating-point"))
    assert (ran.code, ran.trouble) == (0, [])
    value = ran.curve("v(out)", "operating point").values[0]
    assert value == pytest.approx(operating_point(network)["out"], rel=1e-9)


@pytest.mark.parametrize("template", ["ac-sweep", "noise", "operating-point", "transient"])
@pytest.mark.parametrize("name", ["leak-microphone", "valve-positioner"])
def test_a_deck_is_sealed(template: str, name: str) -> None:
    """The seal's digest is that of the deck as it is read, its lines are short, its analysis is one."""
    circuit = rcnet.load(starters()[name])
    text = sealed_deck(circuit, template)
    back = parse_netlist(text, "x.cir")
    assert back.seal is not None
    assert back.seal.digest == digest(back)
    assert max(map(len, text.split("\n"))) < 80
    assert text.endswith("\n.end\n")
    wanted = back.analyses
    assert sum(map(bool, (wanted.ac, wanted.transient, wanted.noise, wanted.operating_point))) == 1


MISSING = {
    "transient": ("transient", {"dc": 1}, "asks for the transient, but no source has a waveform"),
    "ac": ("ac-sweep", {"dc": 1}, "asks for the ac sweep, but no source carries ac"),
    "noise": ("noise", {"dc": 1}, "asks for the noise analysis, but no source carries ac"),
}


@pytest.mark.parametrize(("template", "drive", "says"), MISSING.values(), ids=MISSING)
def test_what_a_circuit_lacks_is_told(template: str, drive: dict[str, Any], says: str) -> None:
    """The sentence is about the circuit, not about an undefined word."""
    network = Network("Divider")
    network.add_voltage_source("Vin", "in", "0", **drive)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_resistor("R2", "out", "0", 1e3)
    with pytest.raises(CircuitError, match=says):
        sealed_deck(Circuit(network, output=("out",)), template)


# ---------------------------------------------------------------------- samples


def in_each_copy() -> Network:
    """What cannot be shared: a current, a voltage between two nodes, a voltage whose current is sensed."""
    network = Network("Pump current")
    network.add_voltage_source("Vin", "in", "0", ac=1, dc=0)
    network.add_voltage_source("Vs", "in", "a", dc=0)
    network.add_voltage_source("Vf", "b", "c", ac=0.5, ac_phase=45)
    network.add_current_source("Iin", "0", "a", ac=1e-4)
    network.add_current_controlled_current_source("F1", "0", "out", "Vs", 0.3)
    for name, a, b in (("R1", "a", "b"), ("R2", "c", "out"), ("R3", "out", "0"), ("R4", "b", "0")):
        network.add_resistor(name, a, b, 1e3, tolerance="10%")
    network.add_capacitor("C1", "out", "0", 1e-7, tolerance="20%")
    return network


SAMPLED = {
    "filter": gauge(),
    "sources inside": Circuit(in_each_copy(), output=("out",)),
    "pair": Circuit(in_each_copy(), output=("out", "b")),
    "fed node": Circuit(in_each_copy(), output=("in", "out")),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("circuit", SAMPLED.values(), ids=SAMPLED)
def test_every_copy_has_the_response_of_its_values(circuit: Circuit, ngspice: Run) -> None:
    """Ngspice's curve of each copy is the exact response with these values; copy 0 has the nominal ones."""
    circuit = replace(circuit, analyses=Analyses(ac=Sweep(1.0, 1e5, 5)))
    text = sealed_deck(circuit, "tolerance-samples", sample_count=6)
    made = sheet(circuit)
    drawn = samples(made.circuit, made.names, 6)
    ran = ngspice(text)
    assert (ran.code, ran.trouble) == (0, [])
    for values, nodes in zip(drawn.values, drawn.outputs, strict=True):
        first, *second = (ran.curve(f"v({node})") for node in nodes)
        got = first.values - (second[0].values if second else 0)
        want = response(circuit.network.with_values(values), first.axis, " ".join(circuit.output))
        assert np.allclose(got, want, rtol=1e-9, atol=1e-14)
    assert drawn.values[0] == {name: circuit.network.values[name] for name in drawn.values[0]}


def test_samples_lie_within_the_tolerances_and_cover_them() -> None:
    """Every eighth of every tolerance is hit by 64 samples; the next run draws the same ones."""
    circuit = gauge()
    made = sheet(circuit)
    drawn = samples(made.circuit, made.names, 64).values[1:]
    assert drawn == samples(made.circuit, made.names, 64).values[1:]
    bounds = {"R1": (950.0, 1050.0), "C1": (0.9e-7, 1.2e-7), "R2": (9900.0, 10100.0)}
    assert all(set(values) == set(bounds) for values in drawn)
    for name, (low, high) in bounds.items():
        shares = np.array([(values[name] - low) / (high - low) for values in drawn])
        assert shares.min() >= 0
        assert shares.max() <= 1
        assert set((shares * 8).astype(int).clip(0, 7)) == set(range(8))


def test_a_deck_of_samples_is_read_back_and_sealed() -> None:
    """All copies are put in place again, and their parts are those that were drawn."""
    text = sealed_deck(gauge(), "tolerance-samples", sample_count=3)
    back = parse_netlist(text, "x.cir")
    assert back.seal is not None
    assert back.seal.digest == digest(back)
    assert back.network.values["R.X0.R1"] == 1e3
    assert len(back.network) == 1 + 4 * 4
    assert max(map(len, text.split("\n"))) < 80


def test_outputs_keep_clear_of_the_circuit_s_own_names() -> None:
    """A node inside is called out_1: the copies' outputs get other names."""
    circuit = rcnet.load(starters()["noise-filter"])
    assert "out_1" in circuit.network.nodes
    text = sealed_deck(circuit, "tolerance-samples", sample_count=2)
    assert "X1 in out_x1 sample" in text


def test_a_circuit_without_tolerances_has_no_samples() -> None:
    """There is nothing to draw from, nor without an output anything to look at."""
    network = gauge().network
    bare = Network("bare")
    for source in network.sources.values():
        bare.add_source(source)
    bare.add_resistor("R1", "in", "out", 1e3)
    bare.add_capacitor("C1", "out", "0", 1e-6)
    with pytest.raises(CircuitError, match="no part has a tolerance"):
        sealed_deck(Circuit(bare, output=("out",)), "tolerance-samples", sample_count=2)
    with pytest.raises(CircuitError, match="at an output"):
        sealed_deck(Circuit(network), "tolerance-samples", sample_count=2)


# ---------------------------------------------------------------------- templates of one's own


def test_one_s_own_template_comes_first(tmp_path: Path) -> None:
    """Of two alike the own one is taken; it may include and extend others of the folder and shipped ones."""
    places = folder_with(
        tmp_path,
        noise="{# Mine. #}\n" + BODY + "* mine\n{% for line in noise %}\n{{ line }}\n{% endfor %}\n.end\n",
        base=BODY + "{% block asked %}{% endblock %}\n.end\n",
        extended='{% extends "base" %}\n{% block asked %}\n{% for line in ac %}\n{{ line }}\n{% endfor %}\n'
        '{% include "remark" %}\n{% endblock %}\n',
        remark="* {{ output|first }}, {{ nodes|length }} nodes, {{ 2 * 3 + 1 }}\n",
    )
    assert deck_templates(places)["noise"] == "Mine."
    assert "* mine\n" in sealed_deck(gauge(), "noise", folders=places)
    text = sealed_deck(gauge(), "extended", folders=places)
    assert "* out, 4 nodes, 7\n" in text
    assert parse_netlist(text, "x").analyses.ac is not None


def test_a_template_may_leave_an_analysis_out_where_there_is_none(tmp_path: Path) -> None:
    """`is defined` asks whether the circuit can have it."""
    text = BODY + "{% if transient is defined %}\n* timed\n{% endif %}\n.end\n"
    places = folder_with(tmp_path, asks=text)
    assert "* timed" in sealed_deck(gauge(), "asks", folders=places)
    network = gauge().network
    still = network.with_source(replace(network.sources["Vin"], waveform=None))
    assert "* timed" not in sealed_deck(Circuit(still, output=("out",)), "asks", folders=places)


END = "\n.end\n"
# Name -> (what stands behind the body, the sentence, its line).
REFUSED: dict[str, tuple[str, str, int | None]] = {
    "attribute": ('{{ "".__class__ }}', "access to attribute '__class__' of 'str' object is unsafe", 5),
    "attribute of a value": ("{{ body.__class__ }}", "is unsafe", 5),
    "method": ("{{ title.upper() }}", "calling anything but range() and super() is not allowed", 5),
    "macro": ("{% macro f() %}{% endmacro %}", "a macro is not allowed", 5),
    "import": ('{% import "ac-sweep" as a %}', "importing is not allowed", 5),
    "joining": ('{{ "a" ~ "b" }}', "joining texts with ~ is not allowed", 5),
    "set block": ("{% set a %}b{% endset %}", "a set block is not allowed", 5),
    "power": ("{{ 10 ** 9 }}", "raising to a power is not allowed", 5),
    "list": ("{{ [1] }}", "making a list is not allowed", 5),
    "recursive loop": ("{% for a in body recursive %}{% endfor %}", "a recursive loop is not allowed", 5),
    "text times a number": ('{{ "a" * 1000000000 }}', "reckons with numbers", 5),
    "adding texts": ("{{ title + title }}", "reckons with numbers", 5),
    "format": ('{{ "%999999999d" % 1 }}', "reckons with numbers", 5),
    "huge numbers": ("{{ 999999999999 * 999999999999 * 999999999999 }}", "reckons with numbers", 5),
    "undefined": ("{{ nosuch }}", "'nosuch' is undefined", 5),
    "undefined in a sum": ("{{ nosuch + 1 }}", "'nosuch' is undefined", 5),
    "tuple": ("{{ body }}", "a tuple cannot be printed", 5),
    "no filter": ("{{ title|eval }}", "No filter named 'eval'", 5),
    "division": ("{{ 1/0 }}", "division by zero", 5),
    "long range": ("{% for a in range(10000000) %}{% endfor %}", "Range too big", 5),
    "syntax": ("{% if %}", "Expected an expression", 5),
    "absent": ('{% include "nosuch" %}', "there is no template called 'nosuch'", 5),
    "path": ('{% include "../bad" %}', "a template is not called '../bad'", 5),
    "absolute path": ('{% include "/etc/passwd" %}', "a template is not called '/etc/passwd'", 5),
    "itself": ('{% include "bad" %}', "more than 100 templates are included", 5),
    "control": (".control\nshell touch pwned\n.endc", "'.control', which no deck may hold", None),
    "hidden command": ("*#shell touch pwned", "which no deck may hold", None),
    "hidden command, blank": ("*  # shell touch pwned", "which no deck may hold", None),
    "script": ("*ng_script", "which no deck may hold", None),
    "include": (".include /etc/passwd", "which no deck may hold", None),
    "library": (".lib x y", "which no deck may hold", None),
    "code model": ("A1 a b model", "which no deck may hold", None),
    "control character": ("* \x07", "which no deck may hold", None),
    "carriage return": ("* a\r.control", "which no deck may hold", None),
    "part more": ("Rx in 0 1k", "alters the circuit: the number of parts", None),
    "temperature": (".options temp=80", "alters the circuit: the temperature", None),
    "seal": ("* Sealed by rcnet.", "writes a seal of its own", None),
    "unread": (".model d1 d\nL1 in", "cannot be read", None),
}


@pytest.mark.parametrize(("text", "says", "line"), REFUSED.values(), ids=REFUSED)
def test_a_template_that_goes_too_far_is_refused(
    text: str, says: str, line: int | None, tmp_path: Path
) -> None:
    """One sentence with the template's file, and its line where the template itself is at fault."""
    places = folder_with(tmp_path, bad=BODY + text + END)
    with pytest.raises(InputError) as caught:
        sealed_deck(gauge(), "bad", folders=places)
    assert says in caught.value.message
    assert caught.value.file == str(tmp_path / "bad.cir.j2")
    assert caught.value.line == line
    assert caught.value.remedy
    assert not (tmp_path / "pwned").exists()


ALTERED = {
    "part gone": '{% for line in body %}{% if "C2" not in line %}\n{{ line }}\n{% endif %}{% endfor %}',
    "node swapped": '{% for line in body %}\n{% if "C2" in line %}\nC2 a 0 1e-08\n{% else %}\n{{ line }}\n'
    "{% endif %}\n{% endfor %}",
    "value": '{% for line in body %}\n{% if "C2" in line %}\nC2 out 0 1.0000000000000002e-08\n{% else %}\n'
    "{{ line }}\n{% endif %}\n{% endfor %}",
    "source": "{% for line in body %}\n{% if loop.first %}\nVin in 0 DC 0 AC 2\n{% else %}\n{{ line }}\n"
    "{% endif %}\n{% endfor %}",
}


@pytest.mark.parametrize("text", ALTERED.values(), ids=ALTERED)
def test_a_template_that_alters_the_circuit_is_refused(text: str, tmp_path: Path) -> None:
    """To the last bit of a value."""
    places = folder_with(tmp_path, bad="{{ title }}\n" + text + "\n.end\n")
    with pytest.raises(InputError, match=r"alters the circuit: (C2|Vin|the number of parts)"):
        sealed_deck(gauge(), "bad", folders=places)


def test_a_template_that_alters_a_sample_is_refused(tmp_path: Path) -> None:
    """Each copy is held to its own values."""
    shipped = Path(sandbox.__file__).parents[2] / "templates" / "netlists" / "tolerance-samples.cir.j2"
    text = shipped.read_text(encoding="utf-8").replace(
        "{% for line in samples %}\n{{ line }}",
        '{% for line in samples %}\n{% if "X2" in line %}\nX2 in out_2 sample\n{% else %}\n{{ line }}\n'
        "{% endif %}",
    )
    places = folder_with(tmp_path, bad=text)
    with pytest.raises(InputError, match="alters the circuit: R1 of sample 2"):
        sealed_deck(gauge(), "bad", folders=places, sample_count=3)


LIMITS = {
    "steps": ("MAX_STEPS", 100, "take more than 100 turns"),
    "characters": ("MAX_DECK_CHARACTERS", 200, "longer than 200 characters"),
    "time": ("MAX_SECONDS", -1.0, "is not done after"),
}


@pytest.mark.parametrize(("name", "value", "says"), LIMITS.values(), ids=LIMITS)
def test_a_template_has_an_end(
    name: str, value: float, says: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Steps of all loops together, characters and time are limited, and the sentence has the file."""
    monkeypatch.setattr(sandbox, name, value)
    loops = "{% for a in range(20) %}{% for b in range(20) %}* {{ a }} {{ b }}\n{% endfor %}{% endfor %}"
    places = folder_with(tmp_path, long=BODY + loops + END)
    with pytest.raises(InputError, match=says) as caught:
        sealed_deck(gauge(), "long", folders=places)
    assert caught.value.file == str(tmp_path / "long.cir.j2")


def test_what_is_joined_counts_before_it_is_made(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A long text between many lines is not built to be thrown away."""
    monkeypatch.setattr(sandbox, "MAX_DECK_CHARACTERS", 10_000)
    text = BODY + "{% set a = body|join(body|join(body|join(body|join))) %}\n" + END
    places = folder_with(tmp_path, joined=text)
    with pytest.raises(InputError, match="longer than 10000 characters"):
        sealed_deck(gauge(), "joined", folders=places)


BAD_NAMES = ["../ac-sweep", "a/b", "", ".hidden", "/etc/passwd", "x" * 80, "a b", "ac-sweep.cir.j2"]


@pytest.mark.parametrize("name", BAD_NAMES)
def test_a_template_is_named_and_not_a_path(name: str) -> None:
    """Nothing but a bare name is looked for."""
    with pytest.raises(InputError, match="a template is not called"):
        sealed_deck(gauge(), name)


def test_an_unknown_template_is_told_with_those_there_are() -> None:
    """The remedy lists them; a folder that is not there is told too."""
    with pytest.raises(InputError, match="no template called 'nosuch'") as caught:
        sealed_deck(gauge(), "nosuch")
    assert "ac-sweep" in (caught.value.remedy or "")
    with pytest.raises(InputError, match="no such folder of templates"):
        sealed_deck(gauge(), "noise", folders=[Path("nowhere")])


@pytest.mark.skipif(os.name != "posix", reason="links and pipes as POSIX has them")
def test_nothing_outside_the_folder_is_read(tmp_path: Path) -> None:
    """A link out of the folder is refused, one within it is not; a pipe and a folder are no templates."""
    (tmp_path / "secret.cir.j2").write_text(BODY + END)
    inside = tmp_path / "templates"
    inside.mkdir()
    places = folder_with(inside, good=BODY + ".end\n")
    (inside / "link.cir.j2").symlink_to(tmp_path / "secret.cir.j2")
    (inside / "alias.cir.j2").symlink_to(inside / "good.cir.j2")
    os.mkfifo(inside / "pipe.cir.j2")
    (inside / "folder.cir.j2").mkdir()
    (inside / "binary.cir.j2").write_bytes(b"\xff\xfe")
    (inside / "large.cir.j2").write_text("*" * 300_000)
    assert sealed_deck(gauge(), "alias", folders=places)
    told = {
        "link": "leads out of its folder",
        "pipe": "a device, a pipe or a socket",
        "folder": "a folder, not a file",
        "binary": "is not UTF-8",
        "large": "at most 262144 are read",
    }
    for name, says in told.items():
        with pytest.raises(InputError, match=says):
            sealed_deck(gauge(), name, folders=places)
    assert deck_templates(places)["link"] == "(cannot be read)"


def test_a_deck_begins_with_its_title(tmp_path: Path) -> None:
    """Otherwise the first part would be taken for it."""
    places = folder_with(tmp_path, bad="{% for line in body %}\n{{ line }}\n{% endfor %}\n.end\n")
    with pytest.raises(InputError, match="which is no title"):
        sealed_deck(gauge(), "bad", folders=places)
