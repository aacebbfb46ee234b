"""`rcnet design`: what a person sees, what a script reads, what is written."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from rcnet.circuit import parse_circuit_file
from rcnet.claims import measure
from rcnet.errors import OutputError
from rcnet.netlist import parse_netlist
from rcnet.values import parse_quantity

from .conftest import Ended, program

Rcnet = Callable[..., Ended]

KINDS = {
    "lowpass": ["--cutoff", "1k", "--sections", "3", "--source", "600", "--load", "100k"],
    "attenuation": ["--attenuation", "40", "--at", "10k", "--sections", "2"],
    "highpass": ["--cutoff", "25", "--sections", "2", "--source", "1k"],
    "bandpass": ["--lower", "100", "--upper", "2k"],
    "smoothing": ["--ripple", "10m", "--settling", "6m", "--carrier", "20k", "--supply", "5"],
    "debounce": ["--bounce", "5m", "--supply", "3.3", "--thresholds", "0.8,2", "--load", "1M"],
}


def kind_of(name: str) -> str:
    """The KIND on the command line."""
    return "lowpass" if name == "attenuation" else name


@pytest.mark.parametrize("name", KINDS)
def test_every_candidate_passes_confirm(rcnet: Rcnet, name: str) -> None:
    """`-o FOLDER` writes complete circuit files whose claims hold and whose netlists a read-back confirms."""
    ended = rcnet("design", kind_of(name), *KINDS[name], "--keep", "2", "-o", "found", "--quiet")
    assert ended.code == 0, ended.err
    files = sorted(str(path) for path in Path("found").iterdir())
    assert files == ["found/candidate-1.rc.toml", "found/candidate-2.rc.toml"]
    confirmed = rcnet("confirm", "--second-opinion", "read-back", "--strict", "--json", *files)
    assert confirmed.code == 0, confirmed.out
    for document in json.loads(confirmed.out):
        assert {claim["verdict"] for claim in document["check"]["claims"]} == {"holds"}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", ["lowpass", "highpass", "smoothing"])
def test_ngspice_agrees_with_the_best(rcnet: Rcnet, name: str) -> None:
    """The best candidate stands up to ngspice."""
    assert rcnet("design", kind_of(name), *KINDS[name], "-o", "best.rc.toml").code == 0
    confirmed = rcnet("confirm", "--second-opinion", "ngspice", "best.rc.toml")
    assert confirmed.code == 0, confirmed.out
    assert "agrees with ngspice" in confirmed.out


@pytest.mark.parametrize("name", KINDS)
def test_json(rcnet: Rcnet, name: str) -> None:
    """One document: the target, candidates in order of score, how far the search went."""
    ended = rcnet("design", kind_of(name), *KINDS[name], "--keep", "3", "--json")
    assert ended.code == 0, ended.err
    document = json.loads(ended.out)
    assert document["target"]["kind"] == kind_of(name)
    assert set(document) == {"target", "candidates", "search"}
    assert isinstance(document["search"]["complete"], bool)
    scores = [each["score"] for each in document["candidates"]]
    assert scores and scores == sorted(scores, reverse=True)
    for each in document["candidates"]:
        network = parse_netlist(each["netlist"], "").network
        for part, text in each["parts"].items():
            assert network.part(part).value == parse_quantity(text, "ohm" if part[0] == "R" else "F")
        assert [source.nodes for source in network.sources.values()] == [("in", "0")]
        if "cutoff" in each["measures"]:
            assert measure(network, "cutoff", "out") == pytest.approx(each["measures"]["cutoff"], rel=1e-12)
        written = parse_circuit_file(each["circuit"], "c.rc.toml").network
        assert {part.name: part.value for part in written.parts} == {p.name: p.value for p in network.parts}


def test_terminal(rcnet: Rcnet) -> None:
    """A table within 80 columns, what the score means, how complete the search was."""
    for name, options in KINDS.items():
        ended = rcnet("design", kind_of(name), *options)
        assert ended.code == 0
        lines = ended.out.splitlines()
        assert all(len(line) <= 80 and line == line.rstrip() for line in lines), ended.out
        assert "margin" in ended.out and "score" in ended.out and " combinations" in ended.out
    quiet = rcnet("design", "lowpass", "--cutoff", "1k", "--quiet", "--keep", "1")
    assert quiet.out == "R1=1.6k  C1=100n\n"


def test_values_have_units_and_signs_of_their_own(rcnet: Rcnet) -> None:
    """Values are read as everywhere, and the text given comes back in no odd form."""
    one = rcnet("design", "lowpass", "--cutoff", "1.59 kHz", "--load", "1 Mohm", "--json")
    two = rcnet("design", "lowpass", "--cutoff", "1k59", "--load", "1M", "--json")
    assert one.code == two.code == 0
    assert one.out == two.out


WRONG = {
    "no kind": ([], "KIND"),
    "another kind": (["notch"], "no kind of circuit"),
    "nothing asked": (["lowpass"], "needs --cutoff"),
    "cutoff of zero": (["lowpass", "--cutoff", "0"], "--cutoff is '0'"),
    "negative attenuation": (["lowpass", "--cutoff", "1k", "--attenuation", "-3", "--at", "9k"], "'-3'"),
    "sections": (["lowpass", "--cutoff", "1k", "--sections", "9"], "--sections is '9'"),
    "series": (["lowpass", "--cutoff", "1k", "--series", "E7"], "'E7'"),
    "impossible": (
        ["lowpass", "--cutoff", "1k", "--attenuation", "80", "--at", "2k", "--sections", "3"],
        "three sections cannot give 80 dB",
    ),
    "load": (["lowpass", "--cutoff", "1k", "--load", "10"], "load of 10 ohm"),
    "option": (["lowpass", "--cutof", "1k"], "--cutof"),
    "a netlist": (["lowpass", "--cutoff", "1k", "-o", "a.cir"], "circuit files"),
    "a plain toml": (["lowpass", "--cutoff", "1k", "-o", "a.toml"], "circuit files"),
}


@pytest.mark.parametrize(("arguments", "says"), WRONG.values(), ids=WRONG)
def test_wrong_usage(rcnet: Rcnet, arguments: list[str], says: str) -> None:
    """A sentence on standard error, exit code 2, nothing on standard output; in JSON too."""
    ended = rcnet("design", *arguments)
    assert ended.code == 2
    assert says in ended.err
    assert not ended.out
    as_json = rcnet("design", *arguments, "--json")
    assert as_json.code == 2
    assert says in json.loads(as_json.out)["errors"][0]["message"]


def test_nothing_is_overwritten(rcnet: Rcnet) -> None:
    """A file of that name, or candidates of an earlier design, stay as they are."""
    options = ["design", "lowpass", "--cutoff", "1k", "--quiet", "--keep", "2"]
    Path("mine.rc.toml").write_text("mine")
    assert rcnet(*options, "-o", "mine.rc.toml").code == 2
    assert Path("mine.rc.toml").read_text() == "mine"
    Path("plain").write_text("mine")
    assert rcnet(*options, "-o", "plain").code == 2
    assert rcnet(*options, "-o", "twice").code == 0
    ended = rcnet(*options, "-o", "twice")
    assert ended.code == 2
    assert "candidate-1.rc.toml" in ended.err
    assert rcnet(*options, "-o", "no/such/folder/best.rc.toml").code == 2
    assert not Path("no").exists()


def test_all_files_or_none(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the second file cannot be written the first one goes again, and so does the folder."""
    from rcnet.system import files

    real = files.write_file

    def full(path: Path, text: str) -> None:
        if path.name == "candidate-2.rc.toml":
            raise OutputError("the disk is full; nothing was written.", file=str(path))
        real(path, text)

    monkeypatch.setattr(files, "write_file", full)
    ended = rcnet("design", "lowpass", "--cutoff", "1k", "-o", "half")
    assert ended.code == 2
    assert "disk is full" in ended.err
    assert not Path("half").exists()


def test_as_a_program() -> None:
    """Started as a program it needs no terminal, and imports what it must only."""
    ended = program("design", "lowpass", "--cutoff", "1k", "--sections", "3", "--json")
    assert ended.returncode == 0, ended.stderr
    found = json.loads(ended.stdout)
    assert found["search"]["complete"]
    assert abs(found["candidates"][0]["measures"]["cutoff"] - 1000) < 1
