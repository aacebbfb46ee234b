"""CSV results: rcnet's own column names, written and read back, and what is refused."""

from __future__ import annotations

import csv
import io
import time
from decimal import Decimal

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from rcnet.curves import Curve, Curves, parse_csv, write_csv
from rcnet.errors import ResultsError


def _one(text: str) -> Curve:
    curves = parse_csv(text, "flow.csv")
    assert len(curves) == 1
    return curves.curves[0]


# 0.6 - 0.8j: magnitude 1, -53.130... degrees (the 3-4-5 triangle); 0.3 - 0.4j is 20 log10 2 dB below it.
RAD = float(np.arctan2(-0.8, 0.6))
DEG = float(np.degrees(RAD))
DB = float(20 * np.log10(0.5))
COMPLEX = {
    "real and imag": "frequency,v(out).real,v(out).imag\n10,0.6,-0.8\n20,0.3,-0.4\n",
    "mag and deg": f"frequency,v(out).mag,v(out).deg\n10,1,{DEG!r}\n20,0.5,{DEG!r}\n",
    "mag and rad": f"frequency,v(out).mag,v(out).rad\n10,1,{RAD!r}\n20,0.5,{RAD!r}\n",
    "db and deg": f"frequency,v(out).db,v(out).deg\n10,0,{DEG!r}\n20,{DB!r},{DEG!r}\n",
    "db and rad": f"frequency,v(out).db,v(out).rad\n10,0,{RAD!r}\n20,{DB!r},{RAD!r}\n",
    "capitals": "FREQUENCY,V(OUT).Real,v(Out).IMAG\n10,0.6,-0.8\n20,0.3,-0.4\n",
    "parts in another order": "f,v(out).imag,v(out).real\n10,-0.8,0.6\n20,-0.4,0.3\n",
    "short axis name and unit": "freq [kHz],v(out).real,v(out).imag\n0.01,0.6,-0.8\n0.02,0.3,-0.4\n",
    "unit in parentheses": "Frequency (MHz),v(out).real,v(out).imag\n1e-5,0.6,-0.8\n2e-5,0.3,-0.4\n",
    "semicolons": "frequency;v(out).real;v(out).imag\n10;0.6;-0.8\n20;0.3;-0.4\n",
    "quoted semicolons": '"frequency";"v(out).real";"v(out).imag"\n10;0.6;-0.8\n20;0.3;-0.4\n',
    "tabs": "# x\nfrequency\tv(out).real\tv(out).imag\n10\t0.6\t-0.8\n20\t0.3\t-0.4\n",
    "blanks": "frequency  v(out).real   v(out).imag\n  10 0.6  -0.8\n  20 0.3  -0.4\n",
    "blank lines between": "frequency,v(out).real,v(out).imag\n\n10,0.6,-0.8\n\n\n20,0.3,-0.4\n",
    "CR LF": "frequency,v(out).real,v(out).imag\r\n10,0.6,-0.8\r\n20,0.3,-0.4\r\n",
    "byte-order mark": "\ufefffrequency,v(out).real,v(out).imag\n10,0.6,-0.8\n20,0.3,-0.4\n",
    "comments before the header": "# log 7\n\n% v1,5\nf,v(out).real,v(out).imag\n10,0.6,-0.8\n20,0.3,-0.4\n",
    "blank lines at the end": "frequency,v(out).real,v(out).imag\n10,0.6,-0.8\n20,0.3,-0.4\n\n \r\n\n",
    "Fortran exponents": "frequency,v(out).real,v(out).imag\n1.0D+1,6.0d-1,-8D-1\n2.0D1,3.0D-1,-4D-1\n",
    "blanks around fields": "frequency , v(out).real, v(out).imag\n 10, 0.6 ,-0.8\n 20,\t0.3, -0.4\n",
    "quotes": '"frequency","v(out).real","v(out).imag"\n"10","0.6","-0.8"\n20,"0.3",-0.4\n',
    "other forms of numbers": "frequency,v(out).real,v(out).imag\n+10.,.6,-.8\n2e1,3E-1,-0.04e+01\n",
}


@pytest.mark.parametrize("form", COMPLEX)
def test_a_complex_curve(form: str) -> None:
    """The same phasors, whatever the form."""
    curve = _one(COMPLEX[form])
    assert (curve.name, curve.analysis, curve.unit) == ("v(out)", "ac", "V")
    assert curve.axis.tolist() == [10, 20]
    np.testing.assert_allclose(curve.values, [0.6 - 0.8j, 0.3 - 0.4j], rtol=1e-15)


# 0.6 - 0.8j and 0.3 - 0.4j again, in what each header calls for.
SHAPES = {
    "cartesian": ("0.6,-0.8", "0.3,-0.4"),
    "millivolts": (f"1000,{DEG!r}", f"500,{DEG!r}"),
    "linear degrees": (f"1,{DEG!r}", f"0.5,{DEG!r}"),
    "linear radians": (f"1,{RAD!r}", f"0.5,{RAD!r}"),
    "level degrees": (f"0,{DEG!r}", f"{DB!r},{DEG!r}"),
    "level radians": (f"0,{RAD!r}", f"{DB!r},{RAD!r}"),
}
UNNAMED_HEADERS = {
    "Frequency (Hz),Gain (dB),Phase (deg)": "level degrees",
    "Freq. [Hz],Magnitude (dB),Phase (°)": "level degrees",
    "frequency,magnitude,phase (rad)": "linear radians",
    "f/Hz,gain/dB,phase/°": "level degrees",
    "f / Hz,Gain / V/V,Phase / rad": "linear radians",
    "FREQ [HZ],GAIN [DB],PHASE [RAD]": "level radians",
    "f,Gain (1),Angle (deg)": "linear degrees",
    "f,Amplitude (mV),Phase (deg)": "millivolts",
    "f,Real,Imag": "cartesian",
    "f,Re (V),Im (V)": "cartesian",
}
NAMED_HEADERS = {
    "f,re(v(out)),im(v(out))": "cartesian",
    "f,real(v(out)),imag(v(out))": "cartesian",
    "f,vr(out),vi(out)": "cartesian",
    "f,mag(v(out)),phase(v(out)) [deg]": "linear degrees",
    "f,mag(v(out)) [mV],ph(v(out)) (deg)": "millivolts",
    "f,vm(out),vp(out) [rad]": "linear radians",
    "f,db(v(out)),phase(v(out)) (rad)": "level radians",
    "f,VDB(OUT),VP(OUT)/°": "level degrees",
    "f,vdb(out) [dB],vp(out) [Deg]": "level degrees",
    "f,v(out) [dB],v(out) [deg]": "level degrees",
    "f,v(out) (V),v(out) (deg)": "linear degrees",
    "f,v(out).mag [mV],v(out).deg [deg]": "millivolts",
}


@pytest.mark.parametrize("header", [*UNNAMED_HEADERS, *NAMED_HEADERS])
def test_other_names_of_columns(header: str) -> None:
    """By function, word and unit; where no node is named the curve is `response`, with a remark."""
    first, second = SHAPES[(UNNAMED_HEADERS | NAMED_HEADERS)[header]]
    curves = parse_csv(f"{header}\n10,{first}\n20,{second}\n", "flow.csv")
    (curve,) = curves
    np.testing.assert_allclose(curve.values, [0.6 - 0.8j, 0.3 - 0.4j], rtol=1e-15)
    if header in UNNAMED_HEADERS:
        assert curve.name == "response"
        assert curves.remarks == ("the trace names no node; it is taken for the circuit's output",)
    else:
        assert (curve.name, curve.unit, curves.remarks) == ("v(out)", "V", ())


def test_brackets_that_belong_to_a_name() -> None:
    """`v(1)` and `v(rad)` are nodes; along time words and functions are but names, V and mV are units."""
    header = "time,v(1),v(rad),magnitude,vm(out),flow (l/s),v(a) [V],v(b) [mV]"
    curves = parse_csv(f"{header}\n0,1,2,3,4,5,6,7.00\n1,1,2,3,4,5,6,8.00\n", "t.csv")
    names = ["v(1)", "v(rad)", "magnitude", "vm(out)", "flow (l/s)", "v(a)", "v(b)"]
    assert [curve.name for curve in curves] == names
    assert curves.curves[-1].values.tolist() == [0.007, 0.008]
    assert curves.curves[-1].resolution is not None
    np.testing.assert_allclose(curves.curves[-1].resolution, 5e-6, rtol=1e-12)
    (node,) = parse_csv("f,v(1) [dB],v(1) [deg]\n1,0.0,0.0\n", "f.csv")
    assert node.name == "v(1)"


def test_advice_lists_the_forms() -> None:
    """A header of no known form is answered with the forms that are read; a lone half with its partner."""
    with pytest.raises(ResultsError) as caught:
        parse_csv("frequency,humidity\n1,2\n", "flow.csv")
    for form in ("v(out).real", "re(v(out))", "vdb(out)", "Gain (dB)", "Phase (deg)"):
        assert f"'{form}'" in (caught.value.remedy or "")
    with pytest.raises(ResultsError) as caught:
        parse_csv("frequency,Gain (dB)\n1,2\n", "flow.csv")
    assert caught.value.remedy == "Add the column 'Phase (deg)'."


def test_a_long_header_name_takes_no_time() -> None:
    """A hostile name of a million slashes is refused at once."""
    start = time.perf_counter()
    with pytest.raises(ResultsError):
        parse_csv(f"f,{'a/' * 1_000_000} x y\n1,2\n", "flow.csv")
    assert time.perf_counter() - start < 2


def test_an_axis_may_begin_at_zero() -> None:
    """0 is a frequency and a time, with a minus sign, too."""
    assert _one(HEAD + "-0.0,1,0\n1,1,0\n").axis.tolist() == [0, 1]
    assert _one("time,v(out)\n0,1\n1,1\n").axis.tolist() == [0, 1]


def test_real_curves_along_time() -> None:
    """Several columns on one axis, in the file's order; a scaled axis is the double nearest the decimal."""
    curves = parse_csv("Time (ms),v(out),i(v1),V(in)\n1.5,1,2,3\n2.7,4,5,6\n", "t.csv")
    assert [(c.name, c.analysis, c.unit) for c in curves] == [
        ("v(out)", "transient", "V"),
        ("i(v1)", "transient", "A"),
        ("v(in)", "transient", "V"),
    ]
    assert curves.curves[1].axis.tolist() == [0.0015, 0.0027]
    assert curves.curves[1].values.tolist() == [2, 5]
    assert (curves.source, curves.remarks) == ("t.csv", ())


def test_noise_beside_a_response() -> None:
    """A plain `onoise_spectrum` along frequency is noise, the pair beside it is the response."""
    curves = parse_csv("frequency,onoise_spectrum,v(out).real,v(out).imag\n1,4e-9,1,0\n", "n.csv")
    assert [(c.name, c.analysis, c.unit) for c in curves] == [
        ("onoise_spectrum", "noise", "V/sqrt(Hz)"),
        ("v(out)", "ac", "V"),
    ]


def test_a_last_line_without_its_end_is_remarked() -> None:
    """RFC 4180 allows it, but so ends a file that was cut short."""
    assert parse_csv("time,v(out)\n0,1.25\n", "a.csv").remarks == ()
    assert "cut short" in parse_csv("time,v(out)\n0,1.25", "a.csv").remarks[0]


HEAD = "frequency,v(out).real,v(out).imag\n"
# name: text, line, pattern
REFUSED = {
    "nothing": ("", None, "no header row"),
    "comments only": ("# a\n\n# b", None, "no header row"),
    "comments without end": ("#\n" * 20_000 + HEAD, None, "no header row among its first 10000 lines"),
    "no rows": (HEAD, 1, "no row of numbers"),
    "no header": ("10,1,2\n20,1,2\n", 1, "begins with '10', which is a number"),
    "unknown axis": ("x,v(out)\n1,2\n", 1, "begins with 'x', which is no axis"),
    "axis alone": ("frequency\n1\n", 1, "no column but the axis"),
    "carriage returns alone": ("time,v(out)\r0,1\r", 1, "carriage return alone"),
    "unknown unit": (
        "frequency [furlongs],v(out).real,v(out).imag\n1,2,3\n",
        1,
        "'furlongs' is no unit of frequency",
    ),
    "milli or mega": ("frequency [mhz],v(out).real,v(out).imag\n1,2,3\n", 1, "'mhz' is no unit"),
    "real along frequency": ("frequency,v(out)\n1,2\n", 1, "a magnitude alone is no response"),
    "magnitude without phase": ("frequency,v(out).mag\n1,2\n", 1, "'v\\(out\\).mag' has no partner"),
    "level without phase": ("frequency,v(out).db\n1,2\n", 1, "'v\\(out\\).db' has no partner"),
    "phase alone": ("frequency,v(out).deg\n1,2\n", 1, "has no partner"),
    "mixed pair": ("frequency,v(out).real,v(out).deg\n1,2,3\n", 1, "do not make one complex curve"),
    "three parts": (
        "frequency,v(out).mag,v(out).db,v(out).deg\n1,2,3,4\n",
        1,
        "do not make one complex curve",
    ),
    "complex along time": ("time,v(out).real,v(out).imag\n1,2,3\n", 1, "a curve along time is real"),
    "column twice": ("time,v(out),V(OUT)\n1,2,3\n", 1, "'V\\(OUT\\)' appears twice"),
    "column without a name": ("time,v(out),\n1,2,3\n", 1, "column 3 has no name"),
    "open quote in the header": ('time,"v(out)\n1,2\n', 1, "header row cannot be read"),
    "too few fields": (HEAD + "1,2,3\n2,3\n", 3, "2 fields where the header has 3"),
    "too many fields": ("# c\n" + HEAD + "1,2,3\n2,3,4,\n", 4, "4 fields where the header has 3"),
    "open quote": (HEAD + '1,2,3\n2,"3,4\n', 3, "cannot be read|2 fields"),
    "a word": (HEAD + "1,2,3\n2,x,4\n", 3, "column 'v\\(out\\).real' is 'x', not a finite number"),
    "an empty field": (HEAD + "1,2,3\n2,,4\n", 3, "column 'v\\(out\\).real' is empty"),
    "nan": (HEAD + "1,2,nan\n", 2, "column 'v\\(out\\).imag' is 'nan'"),
    "infinite": (HEAD + "1,-inf,2\n", 2, "'-inf', not a finite"),
    "overflow": (HEAD + "1,2,1e999\n", 2, "'1e999', not a finite"),
    "underscore": (HEAD + "1,2_0,3\n", 2, "'2_0', not a finite"),
    "other digits": (HEAD + "1,2,٣\n", 2, "not a finite number"),
    "hexadecimal": (HEAD + "0x10,2,3\n", 2, "column 'frequency' is '0x10'"),
    "an SI prefix": (HEAD + "1k,2,3\n", 2, "column 'frequency' is '1k'"),
    "an endless number": (HEAD + "1,2," + "3" * 1000 + "\n", 2, "not a finite number"),
    "unordered": (HEAD + "1,2,3\n5,2,3\n4,2,3\n", 4, "must rise from row to row, but goes from 5.0 to 4.0"),
    "a point twice": (HEAD + "1,2,3\n1,2,3\n", 3, "must rise"),
    "axis overflow": ("f [GHz],v(out).real,v(out).imag\n1e305,2,3\n", 2, "beyond what a double holds"),
    "negative magnitude": ("f,v(out).mag,v(out).deg\n1,1,0\n2,-1,0\n", 3, "is -1.0, which is no magnitude"),
    "negative frequency": (HEAD + "-5,1,0\n0,1,0\n", 2, "frequency is -5.0, below 0"),
    "negative time": ("Time (ms),v(out)\n-0.1,1\n0,1\n", 2, "time is -0.1, below 0"),
    "gain without a unit": ("f,Gain,Phase (deg)\n1,1,0\n", 1, "'Gain' does not say whether it is in dB"),
    "phase without a unit": ("f,Magnitude,Phase\n1,1,0\n", 1, "'Phase' is a phase without a unit"),
    "vp without a unit": ("f,vdb(out),vp(out)\n1,1,0\n", 1, "'vp\\(out\\)' is a phase without a unit"),
    "phase in volts": ("f,Magnitude,Phase (V)\n1,1,0\n", 1, "'Phase \\(V\\)' cannot have the unit 'V'"),
    "gain in degrees": ("f,Gain (deg),Phase (deg)\n1,1,0\n", 1, "'Gain \\(deg\\)' cannot have the unit"),
    "level in volts": ("f,vdb(out) [V],vp(out) [deg]\n1,1,0\n", 1, "cannot have the unit 'V'"),
    "real part in decibels": ("f,re(v(out)) [dB],im(v(out))\n1,1,0\n", 1, "cannot have the unit 'dB'"),
    "megavolts": ("f,Gain (MV),Phase (deg)\n1,1,0\n", 1, "unit 'MV', which is not read"),
    "unread unit": ("f,Gain (Np),Phase (deg)\n1,1,0\n", 1, "unit 'Np', which is not read"),
    "gain alone": ("f,Gain (dB)\n1,1\n", 1, "'Gain \\(dB\\)' has no partner"),
    "one part in two forms": (
        "f,vdb(out),db(v(out)),vp(out) [deg]\n1,1,1,0\n",
        1,
        "'db\\(v\\(out\\)\\)' appears twice, first as 'vdb\\(out\\)'",
    ),
    "level in decibels along time": ("time,v(out) [dB]\n1,2\n", 1, "a curve along time is real"),
    "level beyond doubles": ("f,v(out).db,v(out).deg\n1,7000,0\n", 2, "is 7000.0, which is no magnitude"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str) -> None:
    """One sentence with file, line and remedy."""
    text, line, pattern = REFUSED[case]
    with pytest.raises(ResultsError, match=pattern) as caught:
        parse_csv(text, "flow.csv")
    assert (caught.value.file, caught.value.line) == ("flow.csv", line)
    assert caught.value.remedy


def test_lines_are_counted_far_into_the_file() -> None:
    """The line of a damaged cell behind a hundred thousand good ones, CR LF included."""
    rows = [f"{n},{n / 7!r}" for n in range(100_000)]
    rows[88_888] = "88888,1.2.3"
    for end in ("\n", "\r\n"):
        with pytest.raises(ResultsError, match=r"'1\.2\.3'") as caught:
            parse_csv(f"time,v(out){end}{end.join(rows)}{end}", "far.csv")
        assert caught.value.line == 88_890


# column of cells: half units that the digits leave open, by the rule in the docstring
RESOLUTIONS = {
    "fixed number of decimals": (["0.123", "12.345", "0.000"], [0.5e-3, 0.5e-3, 0.5e-3]),
    "zeros dropped": (["0.123", "12.345", "0"], [0.5e-5, 0.5e-3, 0]),
    "six digits, a small cell": (["0.999917", "0.000720394", "12.5"], [0.5e-6, 0.5e-9, 0.5e-4]),
    "four digits, a large cell": (["1234", "0.01234", "0"], [0.5, 0.5e-5, 0]),
    "a zero with decimals among others": (["0.00", "0.1234", "5"], [0.5e-2, 0.5e-4, 0.5e-3]),
    "exponents": (["1.23e-1", "4.56e+3", "0.00e0"], [0.5e-3, 5.0, 0]),
    "one exponent in the column": (["0.123", "1.2345e3", "1"], [0.5e-5, 0.05, 0.5e-4]),
    "whole numbers": (["1", "10", "1000"], [0.5e-3, 0.5e-2, 0.5]),
    "ones": (["1", "1", "1"], [0.5e-2, 0.5e-2, 0.5e-2]),
    "one digit and exponents": (["1e-3", "2e0", "-3e3"], [0.5e-5, 0.5e-2, 5.0]),
    "a single row": (["0.25"], [0.5e-3]),
    "nothing but whole zeros": (["0", "-0", "0"], None),
    "fourteen digits": (["1.2345678901234", "2", "3"], [0.5e-13, 0.5e-13, 0.5e-13]),
    "fifteen digits": (["1.23456789012345", "2", "3"], None),
    "zeros": (["0e0", "0", "0"], None),
}


@pytest.mark.parametrize("case", RESOLUTIONS)
def test_resolution_of_a_real_column(case: str) -> None:
    """Half a unit of the last decimal where all have as many; else of the last of the most digits."""
    cells, expected = RESOLUTIONS[case]
    curve = _one("time,v(out)\n" + "".join(f"{n},{cell}\n" for n, cell in enumerate(cells)))
    if expected is None:
        assert curve.resolution is None
    else:
        assert curve.resolution is not None
        np.testing.assert_allclose(curve.resolution, expected, rtol=1e-12)


def test_resolution_of_axis_and_phasor() -> None:
    """Scaled with the axis; propagated to the modulus: sqrt(dm^2 + (m dphi)^2), dm = m ln(10)/20 dL."""
    full = "1.23456789012345"
    polar = _one(f"f [kHz],v(out).mag,v(out).deg\n0.1,0.250,30.0\n{full},1.000,45.5\n")
    assert polar.axis_resolution is None
    assert polar.resolution is not None
    step = np.deg2rad(0.05)
    np.testing.assert_allclose(
        polar.resolution, [np.hypot(0.5e-3, 0.25 * step), np.hypot(0.5e-3, step)], rtol=1e-9
    )
    level = _one("f [kHz],v(out).db,v(out).rad\n0.1,-20.0,1.00\n0.2,-40.0,1.00\n")
    assert level.axis_resolution is not None
    assert level.resolution is not None
    np.testing.assert_allclose(level.axis_resolution, [50, 50], rtol=1e-12)
    share = np.hypot(np.log(10) / 20 * 0.05, 0.005)
    np.testing.assert_allclose(level.resolution, [0.1 * share, 0.01 * share], rtol=1e-9)
    cartesian = _one(f"f,v(out).real,v(out).imag\n1,0.25,{full}\n2,0.50,2\n")
    assert cartesian.resolution is not None
    np.testing.assert_allclose(cartesian.resolution, [5e-3, 5e-3], rtol=1e-12)


@settings(deadline=None, max_examples=100)
@given(
    st.lists(st.floats(-1e6, 1e6, allow_subnormal=False), min_size=1, max_size=20),
    st.integers(2, 12),
    st.booleans(),
)
def test_resolution_covers_the_rounding(values: list[float], digits: int, fixed: bool) -> None:
    """Whatever is rounded away in print lies within the resolution, for both habits of printing."""
    cells = [f"{value:.{digits}f}" if fixed else f"{value:.{digits}e}" for value in values]
    curve = _one("time,v(out)\n" + "".join(f"{n},{cell}\n" for n, cell in enumerate(cells)))
    # Fixed point shows fewer digits for small values; there the coarser reading of the two is the true one.
    if fixed:
        allowed = np.full(len(values), 0.5 * 10.0**-digits)
        assert curve.resolution is None or np.all(curve.resolution <= allowed * (1 + 1e-9))
    else:
        allowed = curve.resolution if curve.resolution is not None else np.zeros(len(values))
        floor = np.abs(values) * 2**-52
        assert np.all(np.abs(curve.values - values) <= allowed * (1 + 1e-9) + floor)


@settings(deadline=None, max_examples=200)
@given(
    st.lists(st.floats(-1e20, 1e20, allow_subnormal=False), max_size=20),
    st.lists(st.floats(-2, 2, allow_subnormal=False), max_size=5),
    st.integers(4, 12),
)
def test_resolution_of_general_format(large: list[float], small: list[float], digits: int) -> None:
    """%g drops zeros and mixes forms: the rounding lies within the resolution, which is no wider than it."""
    # Two numbers that show all digits, at different places: whole numbers alone would show fewer.
    values = [1 / 3, 100 / 3, *large, *small]
    cells = [f"{value:.{digits}g}" for value in values]
    curve = _one("time,v(out)\n" + "".join(f"{n},{cell}\n" for n, cell in enumerate(cells)))
    assert curve.resolution is not None
    for value, cell, resolution in zip(values, cells, curve.resolution, strict=True):
        shown = Decimal(cell)
        # Half a unit of the last of `digits` digits; what %g shows as 10 may have been 9.9996.
        unit = Decimal(0) if shown.is_zero() else Decimal(5).scaleb(shown.adjusted() - digits)
        assert abs(Decimal(value) - shown) <= Decimal(float(resolution)) * Decimal("1.000001")
        assert Decimal(float(resolution)) <= unit * Decimal("1.01")


FREQUENCY = np.array([0.1, 1 / 3, 1e9])
RESPONSE = Curve("v(out)", "ac", FREQUENCY, np.array([1 - 0j, -1e-300j, 5e-324 + 1.7e308j]), "V")
CURRENT = Curve("i(v1)", "ac", FREQUENCY.copy(), 1j / FREQUENCY, "A")
STEP = Curve("v(out)", "transient", FREQUENCY, 1 / FREQUENCY, "V")
NOISE = Curve("onoise_spectrum", "noise", FREQUENCY, 1e-9 / FREQUENCY, "V/sqrt(Hz)")
PAIR = Curve("v(a,b)", "transient", FREQUENCY, FREQUENCY, "V")


def test_what_is_written() -> None:
    """The literal file: header, shortest numbers, CR LF; a comma in a name is quoted (RFC 4180)."""
    axis = np.array([10.0, 1e5])
    pair = Curve("v(a,b)", "ac", axis, np.array([0.1 + 0.2j, -1e-20j]), "V")
    meant = 'frequency,"v(a,b).real","v(a,b).imag"\r\n10.0,0.1,0.2\r\n100000.0,-0.0,-1e-20\r\n'
    assert write_csv(Curves("exact", (pair,))) == meant


@pytest.mark.parametrize("curves", [(RESPONSE, CURRENT), (STEP, PAIR), (NOISE,)])
def test_what_is_written_is_read_back(curves: tuple[Curve, ...]) -> None:
    """Every bit, names and units; nothing is left open and nothing remarked."""
    text = write_csv(Curves("exact", curves))
    assert len({len(row) for row in csv.reader(io.StringIO(text))}) == 1
    back = parse_csv(text, "back.csv")
    assert (len(back), back.remarks) == (len(curves), ())
    for found, meant in zip(back, curves, strict=True):
        assert (found.name, found.analysis, found.unit) == (meant.name, meant.analysis, meant.unit)
        assert found.values.tobytes() == meant.values.tobytes()
        assert found.axis.tobytes() == meant.axis.tobytes()


@settings(deadline=None, max_examples=100)
@given(hnp.arrays(np.float64, 3, elements=st.floats(allow_nan=False, allow_infinity=False)))
def test_any_double_is_read_back(values: np.ndarray) -> None:
    """Bit for bit, from the smallest to the largest."""
    text = write_csv(Curves("exact", (Curve("v(out)", "transient", FREQUENCY, values),)))
    assert _one(text).values.tobytes() == values.tobytes()


UNWRITABLE = {
    "nothing": (),
    "two analyses": (RESPONSE, NOISE),
    "two axes": (STEP, Curve("v(b)", "transient", FREQUENCY + 1, FREQUENCY)),
    "one name twice": (STEP, STEP),
    "an operating point": (Curve("v(out)", "operating point", np.zeros(1), np.ones(1)),),
    "real along frequency": (Curve("v(out)", "ac", FREQUENCY, FREQUENCY),),
    "complex along time": (Curve("v(out)", "transient", FREQUENCY, 1j * FREQUENCY),),
    "not finite": (Curve("v(out)", "transient", FREQUENCY, FREQUENCY * np.inf),),
    "a line end in a name": (Curve("v(a\nb)", "transient", FREQUENCY, FREQUENCY),),
    "noise by another name": (Curve("v(out)", "noise", FREQUENCY, FREQUENCY),),
}


@pytest.mark.parametrize("case", UNWRITABLE)
def test_what_no_table_can_hold(case: str) -> None:
    """Refused before a line is written."""
    with pytest.raises(ResultsError) as caught:
        write_csv(Curves("exact", UNWRITABLE[case]))
    assert caught.value.file == "exact"


@settings(deadline=None, max_examples=150)
@given(st.sampled_from(["", HEAD, "time,v(out)\n", "f,v(out).db,v(out).deg\n1,2,3\n"]), st.text(max_size=60))
def test_random_text(head: str, text: str) -> None:
    """Nothing but a ResultsError."""
    try:
        parse_csv(head + text, "random.csv")
    except ResultsError as error:
        assert error.file == "random.csv"


@settings(deadline=None, max_examples=300)
@given(
    st.sampled_from(sorted(COMPLEX.values())),
    st.lists(
        st.tuples(
            st.integers(0, 90), st.integers(0, 4), st.text('0123456789.,+-eED "\r\n\t;dinf#', max_size=4)
        ),
        min_size=1,
        max_size=4,
    ),
)
def test_mutations(text: str, edits: list[tuple[int, int, str]]) -> None:
    """Characters replaced, removed or put in: a ResultsError or finite curves on a rising axis."""
    for at, removed, put in edits:
        text = text[:at] + put + text[at + removed :]
    try:
        curves = parse_csv(text, "mutant.csv")
    except ResultsError:
        return
    for curve in curves:
        assert np.isfinite(curve.values).all()
        assert (np.diff(curve.axis) > 0).all()
        assert curve.resolution is None or np.isfinite(curve.resolution).all()


def test_many_rows_take_seconds() -> None:
    """Two hundred thousand rows of full doubles and of few digits, each in well under two seconds."""
    full = "".join(f"{n},{n / 7!r},{n / 11!r}\n" for n in range(200_000))
    few = "".join(f"{n},{n / 7:.4f},{n / 11:.4f}\n" for n in range(200_000))
    for body in (full, few):
        start = time.perf_counter()
        assert len(_one(HEAD + body)) == 200_000
        assert time.perf_counter() - start < 2
