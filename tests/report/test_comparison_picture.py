"""A picture of a comparison: kinds of files, what is written on it, strangers' text, long and odd curves."""

from __future__ import annotations

import json
import os
import struct
import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rcnet import Curve, Curves, InputError, Network
from rcnet.circuit import Analyses, Circuit, Sweep, TransientRun
from rcnet.cli.main import run
from rcnet.compare import Comparison, compare
from rcnet.report.comparison_picture import comparison_picture

R, C = 1e4, 1e-8
TAU = R * C
GRID = np.geomspace(10, 1e6, 101)
STRANGE = r"$\frac{1$ <script>alert(1)</script> & ]]> 水位"


def circuit(title: str = "Level gauge filter") -> Circuit:
    """One RC section that asks for every analysis with curves."""
    net = Network(title)
    net.add_voltage_source("V1", "in", "0", ac=1, step={"from": 0, "to": 1})
    net.add_resistor("R1", "in", "out", R)
    net.add_capacitor("C1", "out", "0", C)
    asked = Analyses(
        ac=Sweep(10, 1e6, 20), transient=TransientRun(8 * TAU, TAU / 10), noise=Sweep(10, 1e6, 10)
    )
    return Circuit(net, "gauge", output=("out",), analyses=asked)


def phasors(tau: float = TAU, grid: Any = GRID, name: str = "v(out)") -> Curve:
    """The textbook low-pass over frequency."""
    return Curve(name, "ac", grid, 1 / (1 + 2j * np.pi * grid * tau), "V")


def waveform(tau: float = TAU, points: int = 400) -> Curve:
    """The textbook low-pass behind a step."""
    time = np.linspace(0, 8 * TAU, points)
    return Curve("v(out)", "transient", time, 1 - np.exp(-time / tau), "V")


def density(factor: float = 1.0) -> Curve:
    """The textbook noise of the section: sqrt(4 k T R) through its pole, k of CODATA 2014, at 27 degrees."""
    level = np.sqrt(4 * 1.38064852e-23 * 300.15 * R)
    values = factor * level / np.sqrt(1 + (2 * np.pi * GRID * TAU) ** 2)
    return Curve("onoise_spectrum", "noise", GRID, values, "V/sqrt(Hz)")


def held(*curves: Curve, title: str = "Level gauge filter", who: str = "bench.raw") -> Comparison:
    """The comparison of these curves with the section."""
    return compare(circuit(title), Curves(who, curves), who=who)


def words(picture: bytes) -> list[str]:
    """Every text of an SVG picture."""
    root = ET.fromstring(picture)
    return ["".join(node.itertext()) for node in root.iter("{http://www.w3.org/2000/svg}text")]


# the first bytes: PNG (W3C, section 5.2), PDF (ISO 32000-1, 7.5.2), XML 1.0 (section 2.8)
MAGIC = {"png": b"\x89PNG\r\n\x1a\n", "pdf": b"%PDF-", "svg": b"<?xml"}


@pytest.mark.parametrize("kind", MAGIC)
def test_a_picture_is_a_file_of_its_kind_and_the_same_bytes_each_time(kind: Any) -> None:
    """Each kind begins as its standard says, and a comparison drawn twice gives the same bytes."""
    found = held(phasors(1.1 * TAU))
    picture = comparison_picture(found, kind)
    assert picture.startswith(MAGIC[kind])
    assert picture == comparison_picture(found, kind)


def test_a_png_has_the_promised_size() -> None:
    """1200 by 900 pixels, as its header says."""
    header = comparison_picture(held(phasors()), "png")[16:24]
    assert struct.unpack(">II", header) == (1200, 900)


# curve -> texts that must be on the picture
SHOWN: dict[str, tuple[Curve, list[str]]] = {
    "ac": (
        phasors(2 * TAU),
        ["magnitude, dB (1 V)", "phase, degrees", "|other − exact| / |exact|, %", "frequency, Hz", "1 kHz"],
    ),
    "transient": (waveform(1.2 * TAU), ["voltage, V", "|other − exact|, V", "time, s", "400 us"]),
    "noise": (density(1.05), ["density, V/sqrt(Hz)", "|other − exact| / |exact|, %", "frequency, Hz"]),
}


@pytest.mark.parametrize("case", SHOWN)
def test_every_axis_and_line_is_named(case: str) -> None:
    """Axes bear their units, lines and spans their names; the title says what is drawn and the verdict."""
    curve, expected = SHOWN[case]
    shown = words(comparison_picture(held(curve), "svg"))
    assert {*expected, "exact", "other: bench.raw", "difference", "allowed", "Level gauge filter"} <= {*shown}
    assert f"differs from bench.raw in 1 of 1 curves; shown: {curve.name}, {curve.analysis}" in shown
    assert any(text.startswith("more than allowed: ") for text in shown)


def test_an_agreeing_comparison_says_so_and_shades_nothing() -> None:
    """No span is named where all agrees."""
    shown = words(comparison_picture(held(phasors()), "svg"))
    assert "agrees with bench.raw; shown: v(out), ac" in shown
    assert not any("more than allowed" in text for text in shown)


def test_the_curve_that_differs_is_the_one_drawn() -> None:
    """Of two curves the second is drawn where only that differs."""
    right = Curve("v(in)", "ac", GRID, np.ones(len(GRID), complex), "V")
    shown = words(comparison_picture(held(right, density(1.05), phasors()), "svg"))
    assert "differs from bench.raw in 1 of 3 curves; shown: onoise_spectrum, noise" in shown


@pytest.mark.parametrize("kind", MAGIC)
def test_text_of_strangers_stays_text(kind: Any) -> None:
    """Formulas, markup and letters without a glyph in titles and names of files are drawn as they stand."""
    picture = comparison_picture(held(phasors(), title=STRANGE, who="_$x$<b>.raw"), kind)
    assert picture.startswith(MAGIC[kind])
    if kind == "svg":
        shown = words(picture)
        assert STRANGE in shown
        assert "other: _$x$<b>.raw" in shown
        assert b"<script" not in picture


def test_control_characters_and_endless_names_are_made_fit() -> None:
    """A title with an escape and a bell makes a well-formed SVG; one of thousands of letters is cut."""
    assert any(
        "�[31m" in text for text in words(comparison_picture(held(phasors(), title="a\x1b[31m\x07"), "svg"))
    )
    found = held(phasors(), title="W" * 5000, who="M" * 5000)
    assert max(map(len, words(comparison_picture(found, "svg")))) < 120


def test_a_long_curve_is_thinned_and_keeps_its_extremes() -> None:
    """Of 300 000 points few are drawn, and a spike one point wide is still there: the axis reaches to it."""
    usual = waveform(points=300_001)
    values = usual.values.real.copy()
    values[123_456] = 40.0
    picture = comparison_picture(held(Curve("v(out)", "transient", usual.axis, values, "V")), "svg")
    assert len(picture) < 2_000_000
    paths = ET.fromstring(picture).iter("{http://www.w3.org/2000/svg}path")
    dashed = max((node.get("d", "") for node in paths if "stroke: #d55e00" in node.get("style", "")), key=len)
    heights = np.array(dashed.split()[2::3], float)
    # 40 V against 1 V at most elsewhere: nothing but the spike lies in the upper half.
    assert np.count_nonzero(heights < (heights.min() + heights.max()) / 2) == 1


def narrow(low: float, high: float, points: int) -> Curve:
    """A sweep over less than usual."""
    return phasors(1.5 * TAU, np.linspace(low, high, points))


ODD: dict[str, Curve] = {
    "two points": narrow(1e3, 1e4, 2),
    "less than a decade": narrow(1000, 1100, 11),
    "all zero": Curve("v(out)", "ac", GRID, np.zeros(len(GRID), complex), "V"),
    "huge": Curve("v(out)", "ac", GRID, np.full(len(GRID), 1e200 + 0j), "V"),
    "tiny": Curve("v(out)", "transient", np.linspace(0, TAU, 50), np.full(50, 1e-300), "V"),
}


@pytest.mark.parametrize("case", ODD)
def test_odd_curves_are_drawn(case: str) -> None:
    """Few points, narrow sweeps and extreme values make a picture with labelled ticks too."""
    shown = words(comparison_picture(held(ODD[case]), "svg"))
    unit = " s" if ODD[case].analysis == "transient" else "Hz"
    assert sum(text.endswith((unit, "us")) for text in shown) >= 3


def test_nothing_to_draw_is_refused_in_one_sentence() -> None:
    """A comparison of single points only is no picture."""
    found = held(phasors(grid=np.array([1e3])))
    with pytest.raises(InputError, match=r"^there is no curve to draw: [^.]*\. Write .*\.json") as caught:
        comparison_picture(found, "png")
    assert len(caught.value.problems) == 1


CIRCUIT = """
title = "Level gauge filter"
output = "out"
[parts]
R1 = "in out 10k"
C1 = "out 0 10n"
[sources.Vin]
nodes = "in 0"
ac = 1
[analysis]
ac = { from = "10", to = "1 MHz", per_decade = 20 }
"""


@pytest.mark.parametrize("name", ["a.png", "a.SVG", "a.pdf", "a.json", "a"])
def test_the_name_of_the_output_tells_its_kind(
    name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """`rcnet compare -o` draws where the name ends in .png, .svg or .pdf, and writes JSON elsewhere."""
    (tmp_path / "gauge.rc.toml").write_text(CIRCUIT, "utf-8")
    rows = [
        f"{f!r},{v.real!r},{v.imag!r}" for f, v in zip(GRID.tolist(), phasors().values.tolist(), strict=True)
    ]
    table = "\n".join(["frequency,v(out).real,v(out).imag", *rows])
    (tmp_path / "bench.csv").write_text(table + "\n", "utf-8")
    with pytest.raises(SystemExit) as ended:
        run(
            [
                "compare",
                str(tmp_path / "gauge.rc.toml"),
                str(tmp_path / "bench.csv"),
                "-o",
                str(tmp_path / name),
            ]
        )
    assert ended.value.code == 0, capsys.readouterr().err
    written = (tmp_path / name).read_bytes()
    suffix = Path(name).suffix.lower()[1:]
    if suffix in MAGIC:
        assert written.startswith(MAGIC[suffix])
    else:
        assert json.loads(written)["verdict"] == "agree"


def test_matplotlib_is_loaded_by_a_picture_only() -> None:
    """Neither rcnet nor the module of the picture itself nor the command loads it when imported."""
    rooms = "rcnet, rcnet.report.comparison_picture, rcnet.cli.compare"
    code = f"import sys, {rooms}; print('matplotlib' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"


def test_a_matplotlib_that_cannot_be_loaded_is_told_in_a_sentence(tmp_path: Path) -> None:
    """A setting that matplotlib refuses is an error with a remedy, and no file is written."""
    (tmp_path / "gauge.rc.toml").write_text(CIRCUIT, "utf-8")
    (tmp_path / "bench.csv").write_text("frequency,v(out).real,v(out).imag\n1e3,1,0\n2e3,1,0\n", "utf-8")
    asked = ["compare", "gauge.rc.toml", "bench.csv", "-o", "a.png"]
    done = subprocess.run(
        [sys.executable, "-c", f"from rcnet.cli.main import run; run({asked!r})"],
        cwd=tmp_path,
        env={**os.environ, "MPLBACKEND": "nonsense", "PYTHONPATH": os.pathsep.join(sys.path)},
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 2
    assert "matplotlib, which draws pictures, cannot be loaded: " in done.stderr
    assert "Traceback" not in done.stderr
    assert "defect" not in done.stderr
    assert not (tmp_path / "a.png").exists()
