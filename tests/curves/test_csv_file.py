"""CSV results: rcnet's own column names, written and read back, and what is refused."""

from __future__ import annotations

import csv
import io
import time

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
    "semicolons": ("frequency;v(out).mag;v(out).deg\n1,5;2;3\n", 1, "parted by semicolons"),
    "quoted semicolons": ('"time";"v(out)"\n1;2\n', 1, "parted by semicolons"),
    "tabs": ("# x\nTime\tv(out)\n1\t2\n", 2, "parted by tabs"),
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
    "blank line between": (HEAD + "1,2,3\n\n2,3,4\n", 3, "nothing, yet rows follow"),
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
    "zeros dropped": (["0.123", "12.345", "0"], [0.5e-3 * 1e-2, 0.5e-3, 0.5e-3]),
    "exponents": (["1.23e-1", "4.56e+3", "0.00e0"], [0.5e-3, 5.0, 0]),
    "one exponent in the column": (["0.123", "1.2345e3", "1"], [0.5e-5, 0.05, 0.5e-4]),
    "whole numbers": (["1", "10", "1000"], [0.5e-3, 0.5e-2, 0.5]),
    "fourteen digits": (["1.2345678901234", "2", "3"], [0.5e-13, 0.5e-13, 0.5e-13]),
    "fifteen digits": (["1.23456789012345", "2", "3"], None),
    "zeros": (["0e0", "0", "0"], None),
}


@pytest.mark.parametrize("case", RESOLUTIONS)
def test_resolution_of_a_real_column(case: str) -> None:
    """Half a unit of the last decimal where all have as many; else the smaller of the two."""
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
    polar = _one(f"f [kHz],v(out).mag,v(out).deg\n0.1,0.250,30.0\n{full},1,45.5\n")
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
    st.integers(1, 12),
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
