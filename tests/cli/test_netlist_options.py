"""`rcnet netlist` and the forms it writes."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from .conftest import BROKEN, FILTER, HOLDS, Ended, circuit

Rcnet = Callable[..., Ended]
TIMED = FILTER.replace(
    "[analysis]",
    'square = { low = 0, high = 5, frequency = "100 Hz" }\n[analysis]\ntransient = { stop = "20 ms" }',
)


def cards(text: str) -> list[str]:
    """The first words of the dot lines."""
    return re.findall(r"^(\.\w+)", text, re.MULTILINE)


def test_templates_are_listed(rcnet: Rcnet) -> None:
    """`--template list` needs no FILE; in JSON too, and with a folder of one's own."""
    ended = rcnet("netlist", "--template", "list")
    assert ended.code == 0
    assert "ac-sweep " in ended.out
    assert all(len(line) <= 80 for line in ended.out.splitlines())
    Path("mine").mkdir()
    Path("mine/odd.cir.j2").write_text("{# An odd one. #}\n{{ title }}\n.end\n")
    listed = json.loads(rcnet("netlist", "--template", "list", "--templates", "mine", "--json").out)
    assert {"name": "odd", "says": "An odd one."} in listed
    assert len(listed) == 6


FORMS = {
    "ac-sweep": (["--template", "ac-sweep"], [".options", ".ac", ".print", ".end"]),
    "operating-point": (["--template", "operating-point"], [".op", ".print", ".end"]),
    "noise": (["--template", "noise"], [".save", ".noise", ".print", ".end"]),
    "transient": (["--template", "transient"], [".tran", ".print", ".end"]),
    "samples": (
        ["--template", "tolerance-samples", "--samples", "3"],
        [".subckt", ".ends", ".ac", ".save", ".print", ".end"],
    ),
    "measures": (["--measures"], [".save", ".ac", ".print", ".meas", ".meas", ".end"]),
    "measured transient": (["--template", "transient", "--measures"], [".save", ".tran", ".print", ".end"]),
    "portable": (["--portable"], [".op", ".ac", ".print", ".tran", ".print", ".end"]),
    "portable sweep": (["--portable", "--template", "ac-sweep"], [".ac", ".print", ".end"]),
    "subcircuit": (["--as-subcircuit", "gauge"], [".subckt", ".ends"]),
    "portable subcircuit": (["--as-subcircuit", "gauge", "--portable"], [".subckt", ".ends"]),
}


@pytest.mark.parametrize(("options", "expected"), FORMS.values(), ids=FORMS)
def test_every_form(rcnet: Rcnet, options: list[str], expected: list[str]) -> None:
    """The same text on standard output, in a file and in the JSON document; short lines, and a seal."""
    file = circuit("gauge.rc.toml", HOLDS, text=TIMED)
    ended = rcnet("netlist", *options, file)
    assert ended.code == 0, ended.err
    assert cards(ended.out) == expected
    assert all(len(line) < 80 for line in ended.out.splitlines())
    assert re.search(r"^\* Sealed by rcnet", ended.out, re.MULTILINE)
    assert rcnet("netlist", *options, file, "-o", "x.cir").out == ""
    assert Path("x.cir").read_text(encoding="utf-8") == ended.out
    document = json.loads(rcnet("netlist", "--json", *options, file).out)
    assert document["netlist"] == ended.out
    if "subcircuit" not in options[0]:
        assert rcnet("check", "x.cir").code == 0


def test_ports(rcnet: Rcnet) -> None:
    """Named in any order, with blanks or commas."""
    file = circuit("gauge.rc.toml")
    for ports in ("out in", "out, in"):
        ended = rcnet("netlist", "--as-subcircuit", "gauge", "--ports", ports, file)
        assert ".subckt gauge out in\n" in ended.out


def test_samples_are_twenty(rcnet: Rcnet) -> None:
    """Beside the copy with the nominal values, unless another number is asked for."""
    file = circuit("gauge.rc.toml")
    ended = rcnet("netlist", "--template", "tolerance-samples", file)
    assert len(re.findall(r"^X\d+ ", ended.out, re.MULTILINE)) == 21


USAGE = {
    "no file": ([], "Missing argument 'FILE'"),
    "measures, portable": (["--measures", "--portable"], "--measures and --portable do not go together"),
    "subcircuit, deck": (["--as-subcircuit", "x", "--template", "noise"], "do not go together"),
    "subcircuit, measures": (["--as-subcircuit", "x", "--measures"], "no analysis to measure in"),
    "samples, measures": (
        ["--template", "tolerance-samples", "--measures"],
        "--template tolerance-samples and",
    ),
    "samples, portable": (["--template", "tolerance-samples", "--portable"], "beyond what every simulator"),
    "samples alone": (["--samples", "3"], "--samples needs --template"),
    "templates alone": (["--templates", "."], "--templates needs --template"),
    "ports alone": (["--ports", "a"], "--ports needs --as-subcircuit"),
    "no ports": (["--as-subcircuit", "x", "--ports", " "], "--ports names no node"),
    "no samples": (["--template", "tolerance-samples", "--samples", "0"], "Invalid value for '--samples'"),
}


@pytest.mark.parametrize(("options", "says"), USAGE.values(), ids=USAGE)
def test_options_that_make_no_sense_are_refused(rcnet: Rcnet, options: list[str], says: str) -> None:
    """In one sentence, with exit code 2, before anything is read."""
    ended = rcnet("netlist", *options, *([] if "FILE" in says else ["absent.rc.toml"]))
    assert ended.code == 2
    assert says in ended.err
    assert len([line for line in ended.err.splitlines() if line.startswith("Error")]) == 1
    assert ended.out == ""


IMPOSSIBLE = {
    "no such template": (["--template", "nosuch"], "there is no template called 'nosuch'"),
    "path": (["--template", "../x"], "a template is not called '../x'"),
    "no such folder": (["--template", "noise", "--templates", "nowhere"], "no such folder of templates"),
    "name": (["--as-subcircuit", "a-b"], "a subcircuit cannot be called 'a-b'"),
    "port": (["--as-subcircuit", "x", "--ports", "nowhere"], "there is no node called 'nowhere'"),
    "no wave": (["--template", "transient"], "no source has a waveform"),
}


@pytest.mark.parametrize(("options", "says"), IMPOSSIBLE.values(), ids=IMPOSSIBLE)
def test_what_cannot_be_done_is_told(rcnet: Rcnet, options: list[str], says: str) -> None:
    """One line, exit code 2, and the same as JSON."""
    file = circuit("gauge.rc.toml")
    ended = rcnet("netlist", *options, file)
    assert (ended.code, ended.out) == (2, "")
    assert says in ended.err
    assert len(ended.err.splitlines()) == 1
    errors = json.loads(rcnet("netlist", "--json", *options, file).out)["errors"]
    assert says in errors[0]["message"]


def test_a_template_s_mistake_has_its_place(rcnet: Rcnet) -> None:
    """The file and the line of the template."""
    Path("mine").mkdir()
    Path("mine/odd.cir.j2").write_text("{{ title }}\n{{ nosuch }}\n")
    ended = rcnet("netlist", "--template", "odd", "--templates", "mine", circuit("gauge.rc.toml"))
    assert ended.code == 2
    assert "odd.cir.j2:2: the template fails: 'nosuch' is undefined." in ended.err


@pytest.mark.parametrize("options", [["--template", "ac-sweep"], ["--measures"], ["--as-subcircuit", "x"]])
def test_errors_keep_every_form_from_being_written(rcnet: Rcnet, options: list[str]) -> None:
    """With --anyway it is written, and its seal says so."""
    file = circuit("broken.rc.toml", text=BROKEN)
    refused = rcnet("netlist", *options, file)
    assert (refused.code, refused.out) == (1, "")
    assert "no netlist was written" in refused.err
    anyway = rcnet("netlist", "--anyway", *options, file)
    assert "written despite errors (--anyway):" in anyway.out


ENGINE = """import sys
from rcnet.cli.main import run
try: run({})
except SystemExit: pass
print("jinja2" in sys.modules)
"""


@pytest.mark.parametrize("arguments", [["netlist", "--help"], ["netlist", "gauge.rc.toml", "-o", "x.cir"]])
def test_the_template_engine_is_loaded_for_decks_only(arguments: list[str]) -> None:
    """Whoever asks for no deck does not wait for it."""
    circuit("gauge.rc.toml")
    ended = subprocess.run(
        [sys.executable, "-c", ENGINE.format(arguments)],
        capture_output=True,
        text=True,
        check=True,
        timeout=120,
    )
    assert ended.stdout.splitlines()[-1] == "False"
