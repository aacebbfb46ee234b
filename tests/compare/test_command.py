"""`rcnet compare` and `rcnet confirm` on transients and noise: what is shown, granted and refused."""

from __future__ import annotations

import json
import struct
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rcnet import Curve, Curves
from rcnet.cli.main import run
from rcnet.curves import write_raw

CIRCUIT = """
title = "Pump station: level filter"
output = "out"

[parts]
R1 = "in a 10k"
C1 = "a 0 10n"
R2 = "a out 10k"
C2 = "out 0 10n"

[sources.Vin]
nodes = "in 0"
ac = 1
square = { low = 0, high = 1, frequency = "500 Hz", rise = "20 us", fall = "20 us" }

[analysis]
ac = { from = "10", to = "1 MHz", per_decade = 20 }
transient = { stop = "4 ms" }
noise = { from = "10", to = "1 MHz", per_decade = 10 }
operating_point = true
"""


@pytest.fixture
def file(tmp_path: Path) -> Path:
    """The circuit's file."""
    path = tmp_path / "level.rc.toml"
    path.write_text(CIRCUIT, "utf-8")
    return path


def called(*arguments: str | Path, capsys: pytest.CaptureFixture[str]) -> tuple[int, str, str]:
    """Exit code, standard output and standard error of one call."""
    with pytest.raises(SystemExit) as ended:
        run([str(argument) for argument in arguments])
    shown = capsys.readouterr()
    code = ended.value.code
    assert isinstance(code, int)
    return code, shown.out, shown.err


@pytest.fixture
def results(file: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Path:
    """What ngspice makes of the circuit with R1 off by 2 %."""
    file.write_text(CIRCUIT.replace('"in a 10k"', '"in a 10.2k"'), "utf-8")
    code, _, err = called(
        "confirm", file, "-o", tmp_path / "out", "--second-opinion", "ngspice", capsys=capsys
    )
    assert code == 0, err
    file.write_text(CIRCUIT, "utf-8")
    return tmp_path / "out" / "level" / "results.raw"


@pytest.mark.ngspice
def test_confirm_compares_every_analysis(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The main job compares ac, transient, noise and operating point, and shows the allowance beside."""
    folder = file.parent / "out"
    code, out, _ = called("confirm", file, "-o", folder, "--second-opinion", "ngspice", capsys=capsys)
    assert code == 0
    flat = " ".join(out.split())
    assert "4 operating point curves, 4 ac curves, 4 transient curves, 4 noise curves" in flat
    assert "of the greatest; allowed" in flat
    document = json.loads((folder / "level" / "comparison.json").read_text("utf-8"))
    assert {curve["analysis"] for curve in document["curves"]} == {
        "ac",
        "transient",
        "noise",
        "operating point",
    }
    assert document["not_compared"] == []
    for curve in document["curves"]:
        worst = curve["worst"]
        far = np.abs(complex(*np.atleast_1d(worst["other"])) - complex(*np.atleast_1d(worst["exact"])))
        assert worst["allowed"] >= far


@pytest.mark.ngspice
def test_a_wrong_part_shows_in_every_analysis(
    file: Path, results: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """R1 off by 2 % differs; nodes whose spans overlap stand in one paragraph; no line is too long."""
    code, out, _ = called("compare", file, results, capsys=capsys)
    assert code == 1
    flat = " ".join(out.split())
    assert "differs from results.raw (0 of 4 operating point curves, 3 of 4 ac curves, 3 of 4 tr" in flat
    assert "v(out) ac:" in flat
    assert "also v(a), i(Vin) ac: up to" in flat or "also i(Vin), v(a) ac: up to" in flat
    assert "v(out) transient:" in flat
    assert "onoise_spectrum noise:" in flat
    assert max(map(len, out.splitlines())) <= 80
    code, out, _ = called("compare", file, results, "--json", capsys=capsys)
    document = json.loads(out)
    assert (code, document["verdict"]) == (1, "differ")
    spans = [span for curve in document["curves"] for span in curve["spans"]]
    assert all(set(span) == {"from", "to", "worst_at", "db", "deg", "relative", "shape"} for span in spans)


@pytest.mark.ngspice
def test_what_is_granted_agrees(file: Path, results: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """With enough granted the same results agree, and the difference is shown; too little is not enough."""
    enough = ("--allow-db", "0.5 dB", "--allow-deg", "3", "--allow-relative", "3 %", "--floor", "1 uV")
    code, out, _ = called("compare", file, results, *enough, capsys=capsys)
    assert code == 0, out
    assert "dB" in out
    assert called("compare", file, results, "--allow-db", "0.01 dB", capsys=capsys)[0] == 1


@pytest.mark.parametrize(
    ("option", "text"),
    [
        ("--allow-db", "loud"),
        ("--allow-db", "-1"),
        ("--allow-deg", "inf"),
        ("--allow-relative", "1 V"),
        ("--floor", "3 s"),
    ],
)
@pytest.mark.parametrize("verb", ["compare", "confirm"])
def test_nonsense_is_one_sentence(
    verb: str, option: str, text: str, file: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """A grant that is none ends with 2 and one line that names the option."""
    other = [file] if verb == "compare" else []
    code, out, err = called(verb, file, *other, option, text, capsys=capsys)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert option in err


TIME = np.linspace(0.0, 4e-3, 50)


def _raw(name: str = "v(out)", analysis: Any = "transient") -> bytes:
    curve = Curve(name, analysis, TIME + (0 if analysis == "transient" else 1), np.ones(50), "V")
    return write_raw(Curves("x", (curve,)), title="x")


def _with_number(value: float, place: int) -> bytes:
    data = _raw()
    start = data.index(b"Binary:\n") + 8 + 8 * place
    return data[:start] + struct.pack("<d", value) + data[start + 8 :]


BROKEN: dict[str, tuple[str, Callable[[], bytes]]] = {
    "nothing": ("a.raw", lambda: b""),
    "cut short": ("a.raw", lambda: _raw()[:-100]),
    "cut in the header": ("a.raw", lambda: _raw()[:60]),
    "more than it says": ("a.raw", lambda: _raw() + b"\0" * 24),
    "interrupted": ("a.raw", lambda: _raw().replace(b"No. Points: 50", b"No. Points: 0 ")),
    "no number": ("a.raw", lambda: _with_number(float("nan"), 7)),
    "no end": ("a.raw", lambda: _with_number(float("inf"), 7)),
    "time that steps back": ("a.raw", lambda: _with_number(0.0, 20)),
    "time that is no number": ("a.raw", lambda: _with_number(float("nan"), 20)),
    "another circuit": ("a.raw", lambda: _raw("v(elsewhere)")),
    "no output": ("a.raw", lambda: _raw("v(a)")),
    "a node's voltage called noise": ("a.raw", lambda: _raw("v(out)", "noise")),
    "complex over time": ("a.raw", lambda: _raw().replace(b"Flags: real", b"Flags: complex")),
    "words": ("a.csv", lambda: b"time,v(out)\n0,zero\n1e-3,one\n"),
    "a hole": ("a.csv", lambda: b"time,v(out)\n0,0\n1e-3,\n2e-3,1\n"),
    "rows of two lengths": ("a.csv", lambda: b"time,v(out)\n0.000,0.000\n1e-3,1,2\n"),
    "times out of order": ("a.csv", lambda: b"time,v(out)\n0.000,0.000\n2e-3,1.000\n1e-3,1.000\n"),
    "no text": ("a.csv", lambda: bytes(range(256))),
    "a suffix of nothing": ("a.xls", lambda: b"PK\3\4"),
}


@pytest.mark.parametrize("case", BROKEN)
def test_broken_results_are_one_sentence(case: str, file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Results that are broken, or of something else, end with 2 and one line that names the file."""
    name, made = BROKEN[case]
    path = file.parent / name
    path.write_bytes(made())
    code, out, err = called("compare", file, path, capsys=capsys)
    assert (code, out) == (2, ""), out
    assert err.count("\n") == 1, err
    assert name in err
    assert "Traceback" not in err


def test_results_that_are_missing(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A file that is not there is one sentence too."""
    code, out, err = called("compare", file, file.parent / "nowhere.raw", capsys=capsys)
    assert (code, out, err.count("\n")) == (2, "", 1)
