"""Tables of bench instruments and simulators: shapes read, assumptions told, the rest refused."""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.curves import Curves, parse_csv, read_results
from rcnet.errors import ResultsError

# The textbook response of one RC section with its corner at 1 kHz, over four decades.
F = np.geomspace(10, 1e5, 17)
H = 1 / (1 + 1j * F / 1e3)
SIZE, DB = np.abs(H), 20 * np.log10(np.abs(H))
RAD, DEG = np.angle(H), np.degrees(np.angle(H))
OMEGA = 2 * np.pi * F


def table(head: str, *columns: Any, sep: str = ",", mark: str = ".", end: str = "\n") -> str:
    """A table in ten digits under the given header lines."""
    rows = [
        sep.join(f"{value:.10g}".replace(".", mark) for value in row) for row in zip(*columns, strict=True)
    ]
    return end.join([*head.splitlines(), *rows, ""])


RESPONSES = {
    "gain in dB, phase in deg": table("Frequency (Hz),Gain (dB),Phase (deg)", F, DB, DEG),
    "magnitude, phase in rad": table("Frequency (Hz),Magnitude,Phase (rad)", F, SIZE, RAD),
    "real, imaginary": table("Frequency (Hz),Re,Im", F, H.real, H.imag),
    "semicolons, decimal commas": table(
        "Frequency (Hz);Gain (dB);Phase (deg)", F, DB, DEG, sep=";", mark=","
    ),
    "tabs": table("f/kHz\tGain [dB]\tPhase [°]", F / 1e3, DB, DEG, sep="\t"),
    "tabs, decimal commas": table("f/MHz\tGain [dB]\tPhase [°]", F / 1e6, DB, DEG, sep="\t", mark=","),
    "blanks": table("freq re im", F, H.real, H.imag, sep="   "),
    "blanks, units behind blanks": table("Frequency (Hz) Gain (dB) Phase (deg)", F, DB, DEG, sep=" "),
    "blanks, two parting columns": table("Freq. (Hz)  Gain in dB  Phase in deg", F, DB, DEG, sep="  "),
    "blanks, decimal commas": table("f |H| arg(H)", F, SIZE, RAD, sep="  ", mark=","),
    "quoted decimal commas": '"f","re","im"\n'
    + "".join(
        f'"{a:.9f}","{b.real:.9f}","{b.imag:.9f}"\n'.replace(".", ",") for a, b in zip(F, H, strict=True)
    ),
    "GHz": table("Frequency (GHz),Gain (dB),Phase (deg)", F / 1e9, DB, DEG),
    "rad/s": table("omega (rad/s),|H|,Phase (deg)", OMEGA, SIZE, DEG),
    "angular frequency": table("ω,|H(jω)|,∠H(jω) [°]", OMEGA, SIZE, DEG),
    "frequency in rad/s": table("Frequency [rad/s];dB;deg", OMEGA, DB, DEG, sep=";"),
    "units row": table("Frequency,Gain,Phase\nkHz,dB,deg", F / 1e3, DB, DEG),
    "units row in brackets": table("Frequency;Gain;Phase\n[Hz];[dB];[rad]", F, DB, RAD, sep=";"),
    "units row, blank line below": table("Frequency,Gain,Phase\nHz,dB,deg\n\n", F, DB, DEG),
    "underscores": table("frequency_khz,gain_db,phase_deg", F / 1e3, DB, DEG),
    "brackets without blanks": table("Frequency(Hz),Gain(dB),Phase(deg)", F, DB, DEG),
    "words": table("Frequency in kHz;Magnitude in dB;Phase in degrees", F / 1e3, DB, DEG, sep=";"),
    "braces": table("f [Hz],Re{H},Im{H}", F, H.real, H.imag),
    "ratio": table("f,|Vout/Vin|,arg(Vout/Vin) [deg]", F, SIZE, DEG),
    "a label": table("Frequency (Hz),CH2 Gain (dB),CH2 Phase (deg)", F, DB, DEG),
    "comments above": table("# pump station 3\n% sweep\n! log\n// x\nf,re,im", F, H.real, H.imag),
    "notes above": table("Bench: level logger\nDate,2024-01-01\nSweep = log\n\nf,re,im", F, H.real, H.imag),
    "a note that begins as an axis": table("Time, 12:03:11\nFrequency,Re,Im", F, H.real, H.imag),
    "header in a comment": table("# made by a sweep\n# frequency re im", F, H.real, H.imag, sep=" "),
    "header in a comment, commas": table("! Frequency (Hz), Re, Im", F, H.real, H.imag, sep="  "),
    "separators at the ends": table("f;gain_db;phase_deg;", F, DB, DEG, sep=";", end=";\n").replace(
        ";;", ";"
    ),
    "ends of rows only": table("f,gain_db,phase_deg", F, DB, DEG, end=",\n").replace("deg,", "deg"),
    "CR LF and a mark": "\ufeff" + table("Frequency (Hz),Gain (dB),Phase (deg)", F, DB, DEG, end="\r\n"),
    "thousands of blank lines": table("f,re,im", F, H.real, H.imag, end="\n" * 3000),
    "comments between and below": table("f,re,im", F, H.real, H.imag, end="\n# point\n"),
    "wrapped phase": table("f,Gain (dB),Phase (deg)", F, DB, DEG + 360 * np.arange(17)),
    "wrapped radians": table("f,Magnitude,Phase (rad)", F, SIZE, RAD % (2 * np.pi)),
    "phase without a unit: degrees": table("Frequency,Gain (dB),Phase", F, DB, DEG),
    "phase without a unit: radians": table("Frequency,Gain (dB),Phase", F, DB, RAD),
    "gain without a unit: dB": table("Frequency,Gain,Phase", F, DB, DEG),
    "gain without a unit: ratio": table("Frequency,Gain,Phase", F, SIZE, RAD),
    "magnitude that is dB": table("Frequency,Magnitude,Phase", F, DB, RAD),
    "no header: dB, deg": table("", F, DB, DEG),
    "no header: ratio, deg": table("", F, SIZE, DEG),
    "no header: ratio, rad": table("", F, SIZE, RAD, sep=";", mark=","),
    "no header: dB, rad": table("", F, DB, RAD, sep="\t"),
    "no header: real, imaginary": table("", F, H.real, H.imag, sep=" "),
    "no header, notes": table("Bench: logger\n# x", F, H.real, H.imag, sep=" "),
    "no header, axis twice": table("", F, H.real, F, H.imag, sep=" "),
}
NAMED = {
    "one name twice": table("frequency v(out) v(out)", F, H.real, H.imag, sep=" "),
    "axis once more": table("frequency vdb(out) frequency ph(v(out))", F, DB, F, RAD, sep=" "),
    "bars": table("Freq;|V(out)|;∠V(out)", F, SIZE, DEG, sep=";", mark=","),
    "underscores": table("Frequency_Hz,out_re,out_im", F, H.real, H.imag),
    "function of a node": table("f,mag(out),arg(out) [rad]", F, SIZE, RAD),
    "node and unit": table("f,out (dB),out (deg)", F, DB, DEG),
    "words around": table("f,Magnitude v(out),v(out) phase [deg]", F, SIZE, DEG),
    "millivolts in a units row": table("Frequency,v(out),v(out).deg\nHz,mV,deg", F, 1e3 * SIZE, DEG),
}


@pytest.mark.parametrize("shape", RESPONSES)
def test_a_response(shape: str) -> None:
    """The same response whatever the shape, taken for the output's, with what was assumed."""
    curves = parse_csv(RESPONSES[shape], "sweep.csv")
    (curve,) = curves
    assert (curve.name, curve.analysis) == ("response", "ac")
    np.testing.assert_allclose(curve.axis, F, rtol=1e-8)
    np.testing.assert_allclose(curve.values, H, rtol=1e-7)
    assert curves.assumed[0].startswith(("the first column is taken for the ", "there is no header row"))
    assert "the trace names no node; it is taken for the circuit's output" in curves.remarks


@pytest.mark.parametrize("shape", NAMED)
def test_a_response_of_a_node(shape: str) -> None:
    """A node in the header is the curve's."""
    (curve,) = parse_csv(NAMED[shape], "sweep.csv")
    assert (curve.name, curve.analysis, curve.unit) == ("v(out)", "ac", "V")
    np.testing.assert_allclose(curve.values, H, rtol=1e-7)


# shape: clauses that must be among those told
ASSUMED = {
    "tabs": ["the first column is taken for the frequency in kHz", "phase is taken for degrees"],
    "rad/s": ["the first column is taken for the angular frequency in rad/s"],
    "semicolons, decimal commas": [
        "commas in the numbers are taken for decimal points",
        "'Gain (dB)' is taken for dB",
    ],
    "units row": ["the first column is taken for the frequency in kHz"],
    "notes above": ["3 lines above the table are taken for notes"],
    "real, imaginary": ["two columns are taken for the real and imaginary part"],
    "phase without a unit: degrees": [
        "phase is taken for degrees, as the slope of the magnitude and the phase then agree"
    ],
    "gain without a unit: dB": ["'Gain' is taken for dB, since it goes down to -40.0004"],
    "gain without a unit: ratio": [
        "'Gain' is taken for a ratio or volts, as the slope of the magnitude and the phase then agree"
    ],
    "no header: real, imaginary": [
        "there is no header row",
        "the first column is taken for the frequency in Hz",
        "the others are taken for real and imaginary part",
    ],
    "no header: dB, rad": ["'column 2' is taken for dB", "phase is taken for radians"],
}


@pytest.mark.parametrize("shape", ASSUMED)
def test_what_was_assumed_is_told(shape: str) -> None:
    """Unit of the axis, units of magnitude and phase with the reason for a guess, decimal commas, notes."""
    assert set(ASSUMED[shape]) <= set(parse_csv(RESPONSES[shape], "sweep.csv").assumed)


def test_nothing_is_assumed_of_own_columns() -> None:
    """What rcnet writes says everything itself."""
    for text in (
        "frequency,v(out).real,v(out).imag\n1,2,3\n",
        "time,v(out)\n0,1\n",
        "frequency,onoise_spectrum\n1,2\n",
    ):
        assert parse_csv(text, "own.csv").assumed == ()


def test_a_phase_whose_reach_tells_degrees() -> None:
    """A flat response decides nothing, but no radian goes beyond a turn."""
    (told,) = [c for c in parse_csv("f,Gain (dB),Phase\n1,0,7\n2,0,8\n", "a.csv").assumed if "phase" in c]
    assert told == "phase is taken for degrees, since it reaches 8"


def _names(curves: Curves) -> list[str]:
    return [curve.name for curve in curves]


def test_several_traces() -> None:
    """Labels tell traces apart; nodes name them; without a header they are numbered."""
    two = table("f,CH1 Mag (dB),CH1 Phase (deg),CH2 Re,CH2 Im", F, DB, DEG, H.real, H.imag)
    curves = parse_csv(two, "two.csv")
    assert (_names(curves), curves.remarks) == (["ch1", "ch2"], ())
    for curve in curves:
        np.testing.assert_allclose(curve.values, H, rtol=1e-7)
    nodes = table("f,|V(in)|,V(in) deg,|V(out)|,V(out) deg", F, SIZE, DEG, SIZE, DEG)
    assert _names(parse_csv(nodes, "two.csv")) == ["v(in)", "v(out)"]
    bare = table("", F, H.real, H.imag, np.ones(17), np.zeros(17), sep=" ")
    curves = parse_csv(bare, "two.csv")
    assert _names(curves) == ["trace 1", "trace 2"]
    np.testing.assert_allclose(curves.curves[1].values, 1)


# header, rows, times in s, values in V
TIMES = {
    "milliseconds, millivolts": ("Time (ms),CH1 (mV)\n0,1\n1,2\n", [0, 1e-3], [1e-3, 2e-3]),
    "microseconds": ("t/us;Voltage\n0,0;1,0\n0,5;2,5\n", [0, 5e-7], [1, 2.5]),
    "units row": ("Time,CH1\nsecond,Volt\n0,1\n1,2\n", [0, 1], [1, 2]),
    "notes": ("Model,A17\nPoints,2\nTime,12:03\n\nTime(s),V\n0,1\n1,2\n", [0, 1], [1, 2]),
    "no header, from 0": ("0 1\n1e-3 2\n", [0, 1e-3], [1, 2]),
    "no header, even steps": ("0.001;1\n0.002;2\n0.003;2\n", [1e-3, 2e-3, 3e-3], [1, 2, 2]),
}


@pytest.mark.parametrize("shape", TIMES)
def test_a_curve_along_time(shape: str) -> None:
    """Scaled to s and V; a trace without a node is the output's."""
    text, axis, values = TIMES[shape]
    (curve,) = parse_csv(text, "scope.csv")
    assert (curve.name, curve.analysis) == ("response", "transient")
    np.testing.assert_allclose(curve.axis, axis, rtol=1e-15)
    np.testing.assert_allclose(curve.values, values, rtol=1e-15)


def test_digits_are_kept_through_decimal_commas_and_units() -> None:
    """Half a unit of the last place, scaled as the column is: kHz and rad/s on the axis."""
    (curve,) = parse_csv("f/kHz;re;im\n1,50;0,250;0,000\n2,50;0,125;0,000\n", "d.csv")
    assert curve.axis_resolution is not None
    assert curve.resolution is not None
    np.testing.assert_allclose(curve.axis_resolution, 5, rtol=1e-12)
    np.testing.assert_allclose(curve.resolution, np.hypot(5e-4, 5e-4), rtol=1e-12)
    (turned,) = parse_csv("omega,re,im\n1.50,0.250,0.000\n2.50,0.125,0.000\n", "d.csv")
    assert turned.axis_resolution is not None
    np.testing.assert_allclose(turned.axis_resolution, 0.005 / (2 * np.pi), rtol=1e-12)


GOOD = "1,1,0\n2,1,0\n"
# name: text, line, pattern
REFUSED = {
    "thousands or decimals": ("f;re;im\n1,234;2;3\n2,345;1;4\n", 2, "comma in '1,234' may mark thousands"),
    "thousands": ("f;re;im\n1,234;2.5;3\n2,345;1;4\n", 2, "comma in '1,234' marks thousands"),
    "both marks": ("f;re;im\n1,2;2,5;3\n1.234,5;1;4\n", 3, "'1.234,5', with a point where other numbers"),
    "points among decimal commas": ("f;re;im\n1,2;2;3\n2;1.5;4\n", 3, "'1.5', with a point"),
    "decimal commas among commas": ("f,re,im\n1,5,0,1,0,2\n", 2, "6 fields where the header has 3"),
    "two headers": ("f,re,im\nf,re,im\n" + GOOD, 2, "two header rows, on line 1 and on line 2"),
    "a second header below": (
        "f,re,im\n" + GOOD + "f,re,im\n3,1,0\n",
        4,
        "the header stands here a second time",
    ),
    "text in the middle": ("f,re,im\n" + GOOD + "sweep two\n3,1,0\n", 4, "the line holds 1 fields"),
    "words in the middle": ("f,re,im\n" + GOOD + "a,b,c\n", 4, "column 'f' is 'a', not a finite number"),
    "half a line": ("f;re;im\n1;2;3\n2;", 3, "2 fields where the header has 3"),
    "half a cell": ("f;re;im\n1;2;3\n2;1;", 3, "column 'im' is empty"),
    "wrong columns": ("f,re,im\n1,2\n2,3\n", 2, "2 fields where the header has 3"),
    "wrong columns without a header": (
        table("", F, H.real, H.imag) + "2e5,1\n",
        18,
        "where the first row has 3",
    ),
    "not a number": ("f\tre\tim\n1\t2\tNaN\n", 2, "column 'im' is 'NaN'"),
    "infinite": ("f re im\n1 inf 2\n", 2, "column 're' is 'inf'"),
    "falling": ("omega;re;im\n2;1;0\n1;1;0\n", 3, "must rise from row to row, but goes from 2.0 to 1.0"),
    "falling behind blank lines": ("f,re,im\n2,1,0\n\n\n# x\n1,1,0\n", 6, "must rise"),
    "a point twice": ("# x\nf;re;im\n1,0;1;0\n1,0;1;0\n", 4, "must rise"),
    "gain and phase flat": (
        "Frequency,Gain,Phase\n1,1,0\n2,1,0\n3,1,0\n",
        1,
        "does not say whether it is in dB",
    ),
    "phase small and flat": (
        "Frequency,Gain (dB),Phase\n1,-6,0.1\n2,-6,0.1\n3,-6,0.1\n",
        1,
        "'Phase' is a phase without a unit, and its numbers do not tell it",
    ),
    "far below the corner": (
        table("Frequency,Gain (dB),Phase", F[:4], DB[:4], RAD[:4]),
        1,
        "a phase without a unit",
    ),
    "no header, flat": ("1,1,0\n10,1,0\n100,1,0\n", 1, "begins with '1', which is a number"),
    "no header, a magnitude alone": (table("", F, SIZE), 1, "no header row says what its columns are"),
    "units that differ": (
        "Frequency (kHz),re,im\nHz,V,V\n1,2,3\n",
        2,
        "under the header 'Frequency \\(kHz\\)'",
    ),
    "axis repeated otherwise": (
        "f v(a) v(a) f v(b) v(b)\n1 1 1 1 1 1\n2 1 1 3 1 1\n",
        3,
        "column 4 repeats 'f'",
    ),
    "unknown unit of omega": ("omega [Hz],re,im\n1,2,3\n", 1, "'Hz' is no unit of"),
    "dBm": ("f,Level (dBm),Phase (deg)\n1,2,3\n", 1, "unit 'dBm', which is not read"),
    "open quote": ('f;"re;im\n1;2;3\n', 1, "a quote is not closed"),
    "text alone": ("Dear reader,\n\nthis is no table.\n", 1, "which is no axis"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str) -> None:
    """One sentence with file, line and remedy."""
    text, line, pattern = REFUSED[case]
    with pytest.raises(ResultsError, match=pattern) as caught:
        parse_csv(text, "bench.csv")
    assert (caught.value.file, caught.value.line) == ("bench.csv", line)
    assert caught.value.remedy


def test_the_advice_for_decimal_commas_among_commas() -> None:
    """Twice the fields of the header points to decimal commas."""
    with pytest.raises(ResultsError) as caught:
        parse_csv("f,re,im\n1,5,0,1,0,2\n", "bench.csv")
    assert caught.value.remedy == "If its commas are decimal ones, part the columns by semicolons or tabs."


@settings(deadline=None, max_examples=60)
@given(
    st.sampled_from([";", "\t", " ", ","]),
    st.booleans(),
    st.sampled_from(["db deg", "db rad", "mag deg", "mag rad", "re im"]),
    st.floats(-2, 6),
    st.integers(5, 60),
    st.integers(1, 3),
)
def test_a_low_pass_without_units_is_read_right(
    sep: str, comma: bool, form: str, corner: float, points: int, order: int
) -> None:
    """Whatever the numbers decide is the truth; the corner and the order of the filter do not matter."""
    f = np.geomspace(10.0 ** (corner - 2), 10.0 ** (corner + 2), points)
    h = 1 / (1 + 1j * f / 10.0**corner) ** order
    columns: dict[str, Sequence[Any]] = {
        "db": 20 * np.log10(np.abs(h)),
        "mag": np.abs(h),
        "deg": np.degrees(np.angle(h)),
        "rad": np.angle(h),
        "re": h.real,
        "im": h.imag,
    }
    first, second = form.split()
    head = "f|Re|Im" if first == "re" else "f|Gain|Phase"
    mark = "," if comma and sep != "," else "."
    text = table(head.replace("|", sep), f, columns[first], columns[second], sep=sep, mark=mark)
    (curve,) = parse_csv(text, "sweep.csv")
    np.testing.assert_allclose(curve.values, h, rtol=1e-6)


@settings(deadline=None, max_examples=200)
@given(
    st.sampled_from(sorted(RESPONSES.values(), key=len)[:40]),
    st.lists(
        st.tuples(
            st.integers(0, 120), st.integers(0, 4), st.text('0123456789.,;+-e "\r\n\tdif#()[]/', max_size=4)
        ),
        min_size=1,
        max_size=4,
    ),
)
def test_mutations(text: str, edits: list[tuple[int, int, str]]) -> None:
    """Characters replaced, removed or put in: a ResultsError with the file, or finite, rising curves."""
    for at, removed, put in edits:
        text = text[:at] + put + text[at + removed :]
    try:
        curves = parse_csv(text, "mutant.csv")
    except ResultsError as error:
        assert error.file == "mutant.csv"
        return
    for curve in curves:
        assert np.isfinite(curve.values).all()
        assert (np.diff(curve.axis) > 0).all()


def test_hostile_headers_take_no_time() -> None:
    """A million brackets, blanks, quotes or words are answered at once."""
    start = time.perf_counter()
    for piece in ("(", "a ", '"', "[x]", "_re", " in ", "re(", "f "):
        with pytest.raises(ResultsError):
            parse_csv(f"f,{piece * 300_000},x\n1,2,3\n", "hostile.csv")
    assert time.perf_counter() - start < 5


def test_a_million_points(tmp_path: Path) -> None:
    """Read in seconds within 1 GiB, in a process of its own."""
    path = tmp_path / "long.csv"
    rows = "".join(f"{n + 1},{1 / (n + 1):.9g},{-n / 1e6:.9g}\n" for n in range(1_000_000))
    path.write_text("f,re,im\n" + rows)
    code = (
        "import resource, sys, time\nfrom rcnet.curves import read_results\nstart = time.perf_counter()\n"
        "n = len(read_results(sys.argv[1]).curves[0])\n"
        "print(n, time.perf_counter() - start, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    done = subprocess.run([sys.executable, "-c", code, path], capture_output=True, text=True, check=True)
    points, seconds, kilobytes = done.stdout.split()
    assert int(points) == 1_000_000
    assert float(seconds) < 10
    assert int(kilobytes) * 1024 < 2**30


CIRCUIT = """flow meter filter
V1 in 0 dc 1 ac 1
R1 in out 1k
C1 out 0 159.15494309189535n
.control
ac dec 4 10 100k
wrdata plain.data v(out)
wrdata levels.data vdb(out) ph(v(out))
set wr_vecnames
wrdata named.data v(out) v(in)
set wr_singlescale
wrdata single.data vdb(out) vp(out)
tran 1u 20u
wrdata time.data v(out) v(in)
.endc
.end
"""


@pytest.mark.ngspice
def test_tables_of_ngspice(tmp_path: Path) -> None:
    """What ngspice writes with `wrdata`, with and without names, is read as what it is."""
    (tmp_path / "filter.cir").write_text(CIRCUIT)
    subprocess.run(["ngspice", "-b", "filter.cir"], cwd=tmp_path, capture_output=True, check=False)
    found = {
        name: read_results(tmp_path / f"{name}.data")
        for name in ("plain", "levels", "named", "single", "time")
    }
    for name in ("plain", "levels", "named", "single"):
        curve = found[name].curves[0]
        assert curve.name == ("response" if name in ("plain", "levels") else "v(out)")
        np.testing.assert_allclose(curve.values, 1 / (1 + 1j * curve.axis / 1e3), rtol=1e-6)
    assert _names(found["named"]) == ["v(out)", "v(in)"]
    assert [(c.name, c.analysis) for c in found["time"]] == [("v(out)", "transient"), ("v(in)", "transient")]
