"""Raw files: written by ngspice, by hand, by strangers, and by rcnet itself."""

from __future__ import annotations

import os
import struct
import subprocess
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.curves import Curve, Curves, parse_raw, write_raw
from rcnet.errors import ResultsError

R, C = 1e3, 1e-6  # of every single-pole circuit here


def _header(
    plot: str, flags: str, points: int | str, variables: Sequence[str], title: str = "Level gauge"
) -> bytes:
    lines = [f"Title: {title}", "Date: Thu Jan  1 00:00:00  1970", f"Plotname: {plot}", f"Flags: {flags}"]
    lines += [f"No. Variables: {len(variables)}", f"No. Points: {points}", "Variables:"]
    lines += [f"\t{n}\t{variable}" for n, variable in enumerate(variables)]
    return "\n".join(lines).encode() + b"\n"


TRAN = ("time\ttime", "v(out)\tvoltage")
AC = ("frequency\tfrequency\tgrid=3", "v(out)\tvoltage")


def _doubles(*values: float, order: str = "<") -> bytes:
    return struct.pack(f"{order}{len(values)}d", *values)


# The smallest text file of ngspice's own form.
SMALL_TEXT = (
    _header("Transient Analysis", "real", 2, TRAN)
    + b"Values:\n0\t\t0.000000000000000e+00\n\t0.000000000000000e+00\n"
    + b"1\t\t1.000000000000000e-03\n\t6.321205588285577e-01\n"
)
SMALL_BINARY = (
    _header("Transient Analysis", "real", 2, TRAN) + b"Binary:\n" + _doubles(0, 0, 1e-3, 0.6321205588285577)
)
SMALL_AC = (
    _header("AC Analysis", "complex", 2, AC)
    + b"Binary:\n"
    + _doubles(10, np.nan, 0.5, -0.25, 100, 1e250, 0.125, -0.0625)
)


def _one(curves: Curves) -> Curve:
    assert len(curves) == 1
    return curves.curves[0]


def test_the_smallest_text_file() -> None:
    """Names, unit, title, axis and values; 16 written digits leave half a unit of the 16th open."""
    curves = parse_raw(SMALL_TEXT, "small.raw")
    curve = _one(curves)
    assert (curves.source, curves.title, curves.remarks) == ("small.raw", "Level gauge", ())
    assert (curve.name, curve.analysis, curve.unit) == ("v(out)", "transient", "V")
    assert curve.axis.tolist() == [0, 1e-3]
    assert curve.values.tolist() == [0, 0.6321205588285577]
    assert curve.resolution is not None
    assert curve.axis_resolution is not None
    np.testing.assert_allclose(curve.resolution, [0, 0.5e-16], rtol=1e-12)
    np.testing.assert_allclose(curve.axis_resolution, [0, 0.5e-18], rtol=1e-12)


def test_binary_equals_text() -> None:
    """The same numbers in binary, with nothing left open."""
    curve, text = _one(parse_raw(SMALL_BINARY, "b.raw")), _one(parse_raw(SMALL_TEXT, "t.raw"))
    assert curve.values.tolist() == text.values.tolist()
    assert curve.axis.tolist() == text.axis.tolist()
    assert curve.resolution is None
    assert curve.axis_resolution is None


def test_complex_binary_ignores_the_imaginary_part_of_frequency() -> None:
    """Unset memory there, NaN included, is no error and leaves no trace."""
    curve = _one(parse_raw(SMALL_AC, "ac.raw"))
    assert curve.is_complex
    assert (curve.analysis, curve.axis.dtype) == ("ac", np.float64)
    assert curve.axis.tolist() == [10, 100]
    assert curve.values.tolist() == [0.5 - 0.25j, 0.125 - 0.0625j]


FORMS = {
    "keywords in capitals": SMALL_BINARY.replace(b"Title:", b"TITLE:").replace(b"No. Points", b"NO.  POINTS"),
    "CR LF in the header": SMALL_BINARY.replace(b"\n", b"\r\n"),
    "CR LF throughout a text file": SMALL_TEXT.replace(b"\n", b"\r\n"),
    "first variable on the line of the keyword": SMALL_BINARY.replace(b"Variables:\n\t0", b"Variables: 0"),
    "blanks instead of tabs": SMALL_BINARY.replace(b"\t1\tv(out)\tvoltage", b" 1 v(out) voltage"),
    "parameters after the type": SMALL_BINARY.replace(b"v(out)\tvoltage", b"v(out)\tvoltage min=0 color=3"),
    "blanks behind the count": SMALL_BINARY.replace(b"Points: 2\n", b"Points: 2          \n"),
    "dimensions, options, a command": SMALL_BINARY.replace(
        b"Variables:\n", b"Dimensions: 2\nOption: acct\nOption: temp = 27\nCommand: ngspice-39\nVariables:\n"
    ),
    "an unknown line": SMALL_BINARY.replace(b"Flags:", b"Offset: 0\nFlags:"),
    "unpadded, all of one length": SMALL_BINARY.replace(b"Flags: real", b"Flags: real unpadded"),
    "no title": SMALL_BINARY.replace(b"Title: Level gauge\n", b""),
    "capitals in a name": SMALL_BINARY.replace(b"v(out)", b"V(OUT)"),
    "a node's bare name": SMALL_BINARY.replace(b"v(out)", b"out"),
    "a blank line after each point": SMALL_TEXT.replace(b"1\t\t", b"\n 1\t").replace(
        b"77e-01\n", b"77e-01\n\n"
    ),
    "big-endian": _header("Transient Analysis", "real", 2, TRAN)
    + b"Binary:\n"
    + _doubles(0, 0, 1e-3, 0.6321205588285577, order=">"),
}


@pytest.mark.parametrize("form", FORMS)
def test_forms_of_the_same_file(form: str) -> None:
    """Whatever the writer's habits, the curve is the same."""
    curves = parse_raw(FORMS[form], "form.raw")
    curve = _one(curves)
    assert (curve.name, curve.analysis, curve.unit) == ("v(out)", "transient", "V")
    assert curve.axis.tolist() == [0, 1e-3]
    assert curve.values.tolist() == [0, 0.6321205588285577]
    assert bool(curves.remarks) == (form == "big-endian")


def test_several_plots_one_after_another() -> None:
    """Every plot's curves in the file's order, each with its own axis; the first title counts."""
    op = _header("Operating Point", "real", 1, ("v(out)\tvoltage", "v1#branch\tcurrent"), "other")
    curves = parse_raw(
        SMALL_AC + op + b"Binary:\n" + _doubles(2.5, -1e-3) + SMALL_BINARY + SMALL_TEXT, "many.raw"
    )
    found = [(curve.name, curve.analysis, len(curve), curve.unit) for curve in curves]
    assert found == [
        ("v(out)", "ac", 2, "V"),
        ("v(out)", "operating point", 1, "V"),
        ("i(v1)", "operating point", 1, "A"),
        ("v(out)", "transient", 2, "V"),
        ("v(out)", "transient", 2, "V"),
    ]
    assert curves.title == "Level gauge"
    current = curves.get("i(v1)")
    assert current is not None
    assert (current.axis.tolist(), current.values.tolist()) == ([0.0], [-1e-3])


def test_byte_order_holds_for_plots_without_an_axis() -> None:
    """An operating point in a big-endian file is read big-endian, because the other plots tell."""
    op = _header("Operating Point", "real", 1, ("v(out)\tvoltage",)) + b"Binary:\n" + _doubles(2.5, order=">")
    point = parse_raw(FORMS["big-endian"] + op, "big.raw").get("v(out)", "operating point")
    assert point is not None
    assert point.values.tolist() == [2.5]


def test_other_plots() -> None:
    """A sweep keeps its falling axis, totals have none; SPICE3 noise squares are called so."""
    sweep = _header("DC transfer characteristic", "real", 2, ("v(v-sweep)\tvoltage", "v(out)\tvoltage"))
    total = _header("Integrated Noise", "real", 1, ("v(onoise_total)\tvoltage",))
    square = _header(
        "Noise Spectral Density Curves - (V^2 or A^2)/Hz",
        "real",
        2,
        ("frequency\tfrequency", "onoise_spectrum\tvoltage^2-density"),
    )
    data = sweep + b"Binary:\n" + _doubles(1, 0.5, 0, 0) + total + b"Binary:\n" + _doubles(1e-6)
    curves = parse_raw(data + square + b"Binary:\n" + _doubles(1, 1e-17, 2, 1e-17), "o.raw")
    found = [(curve.name, curve.analysis, curve.axis.tolist(), curve.unit) for curve in curves]
    assert found == [
        ("v(out)", "other", [1, 0], "V"),
        ("v(onoise_total)", "other", [0], "V"),
        ("onoise_spectrum", "noise", [1, 2], "V^2/Hz"),
    ]


@pytest.mark.parametrize("flags", ["real unpadded", "real"])
@pytest.mark.parametrize("is_text", [True, False])
def test_vectors_shorter_than_the_plot(flags: str, is_text: bool) -> None:
    """`dims=` ends a vector early: its curve has its own points only, padded with zeros or not."""
    variables = ("time\ttime", "short\tnotype dims=1", "v(out)\tvoltage")
    rows: list[list[float]] = [[0, 7, 5], [1, 0, 6]] if "unpadded" not in flags else [[0, 7, 5], [1, 6]]
    if is_text:
        body = "Values:\n" + "".join(f"{n}\t{' '.join(map(repr, row))}\n" for n, row in enumerate(rows))
        data = body.encode()
    else:
        data = b"Binary:\n" + b"".join(_doubles(*row) for row in rows)
    curves = parse_raw(_header("Transient Analysis", flags, 2, variables) + data, "short.raw")
    assert [curve.values.tolist() for curve in curves] == [[7], [5, 6]]
    assert [curve.axis.tolist() for curve in curves] == [[0], [0, 1]]


def test_few_digits_show_as_resolution() -> None:
    """Six written digits leave half a unit of the sixth open, in modulus for complex values."""
    data = _header("AC Analysis", "complex", 1, AC)
    data += b"Values:\n 0\t1.00000e+02,0.00000e+00\n\t7.16957e-01,-4.50477e-03\n"
    curve = _one(parse_raw(data, "few.raw"))
    assert curve.resolution is not None
    assert curve.axis_resolution is not None
    np.testing.assert_allclose(curve.resolution, [np.hypot(0.5e-6, 0.5e-8)], rtol=1e-12)
    np.testing.assert_allclose(curve.axis_resolution, [0.5e-3], rtol=1e-12)


REFUSED = {
    "nothing": (b"", "the file is empty"),
    "not a raw file": (b"frequency,v(out)\n1,2\n", "not a raw file"),
    "short of data": (SMALL_BINARY[:-8], r"take 32 bytes, 24 are there \(1 whole points\)"),
    "short, another plot behind": (
        SMALL_BINARY[:-8] + SMALL_BINARY,
        "another plot begins|belong to none",
    ),
    "text short of numbers": (SMALL_TEXT[:-23], "take 6 numbers, 5 are there"),
    "too much data": (SMALL_BINARY + b"\0" * 8, "8 bytes follow the last plot and belong to none"),
    "too many numbers": (SMALL_TEXT + b"2\t\t3.0\n", "take 6 numbers, more are there"),
    "words behind": (SMALL_TEXT + b"end of file\n", "'end' is not a number"),
    "interrupted": (SMALL_BINARY.replace(b"Points: 2", b"Points: 0"), "the run was interrupted"),
    "interrupted text": (SMALL_TEXT.replace(b"Points: 2", b"Points: 0"), "the run was interrupted"),
    "interrupted after a whole plot": (
        SMALL_BINARY + SMALL_AC.replace(b"Points: 2", b"Points: 0"),
        "'AC Analysis': the run was interrupted",
    ),
    "no points": (_header("AC Analysis", "complex", 0, AC) + b"Binary:\n", "holds no points"),
    "no points and no variables": (
        _header("AC Analysis", "complex", "0       ", ()).replace(b"Variables: 0", b"Variables: 6"),
        "holds no points",
    ),
    "no points, then another plot": (
        _header("AC Analysis", "complex", 0, AC) + b"Binary:\n" + SMALL_BINARY,
        "'AC Analysis' holds no points",
    ),
    "absurd points": (SMALL_BINARY.replace(b"Points: 2", b"Points: 999999999999999"), "cut short"),
    "absurd points in text": (SMALL_TEXT.replace(b"Points: 2", b"Points: 999999999999999"), "do not fit"),
    "absurd variables": (SMALL_BINARY.replace(b"Variables: 2", b"Variables: 99999999999"), "1 to 1000000"),
    "endless count": (SMALL_BINARY.replace(b"Points: 2", b"Points: " + b"9" * 5000), "not a count"),
    "negative count": (SMALL_BINARY.replace(b"Points: 2", b"Points: -2"), "'-2', not a count"),
    "no variables": (SMALL_BINARY.replace(b"Variables: 2", b"Variables: 0"), "counts 0 variables"),
    "fewer variables than counted": (
        SMALL_BINARY.replace(b"Variables: 2", b"Variables: 3"),
        "not variable 2",
    ),
    "more variables than counted": (
        SMALL_BINARY.replace(b"Variables: 2", b"Variables: 1"),
        "'Binary:' was expected",
    ),
    "misnumbered variable": (SMALL_BINARY.replace(b"\t1\tv(out)", b"\t7\tv(out)"), "not variable 1 of 2"),
    "neither real nor complex": (SMALL_BINARY.replace(b"Flags: real", b"Flags: padded"), "do not say"),
    "a field twice": (SMALL_BINARY.replace(b"Flags:", b"Plotname: x\nFlags:"), "'Plotname: x' stands where"),
    "endless header": (b"Title: x\n" + b"Option: a\n" * 20_000, "more than 10000 lines"),
    "points out of order": (SMALL_TEXT.replace(b"1\t\t", b"2\t\t"), "where point 1 was expected, 2 stands"),
    "a word among the numbers": (SMALL_TEXT.replace(b"6.321205", b"6.32x205"), "is not a number"),
    "an underscore": (SMALL_TEXT.replace(b"6.321205588285577", b"6_3.2"), "is not a number"),
    "an endless number": (SMALL_TEXT.replace(b"6.321205588285577", b"6" * 1000), "is not a number"),
    "a text line without its end": (SMALL_TEXT[:-1], "may lack digits"),
    "not finite": (
        SMALL_BINARY[:-8] + _doubles(np.nan),
        r"'v\(out\)' is nan at point 1 \(0.001 s\), not a finite number",
    ),
    "not finite in text": (
        SMALL_TEXT.replace(b"6.321205588285577e-01", b"-nan"),
        r"'v\(out\)' is nan at point 1",
    ),
    "axis not finite": (SMALL_TEXT.replace(b"1.000000000000000e-03", b"inf"), "'time' is inf at point 1"),
    "time stands still": (
        SMALL_TEXT.replace(b"1.000000000000000e-03", b"0"),
        "must rise from point to point",
    ),
    "time goes back": (SMALL_TEXT.replace(b"1.000000000000000e-03", b"-1"), "goes from 0 to -1 at point 1"),
    "time goes back, binary": (
        _header("Transient Analysis", "real", 2, TRAN) + b"Binary:\n" + _doubles(2, 0, 1, 0),
        "goes from 2 to 1 at point 1",
    ),
    "no axis": (
        SMALL_BINARY.replace(b"\ttime\ttime", b"\tv(in)\tvoltage"),
        r"first variable is 'v\(in\)', not time",
    ),
    "axis only": (
        _header("Transient Analysis", "real", 1, TRAN[:1]) + b"Binary:\n" + _doubles(0),
        "an axis, but no curve",
    ),
    "real numbers for an ac analysis": (
        SMALL_BINARY.replace(b"Transient", b"AC").replace(b"\ttime\ttime", b"\tfrequency\tfrequency"),
        "a magnitude alone is no response",
    ),
    "an imaginary part in time": (
        SMALL_AC.replace(b"AC Analysis", b"Transient Analysis").replace(
            b"frequency\tfrequency", b"time\ttime"
        ),
        "has an imaginary part at point 0",
    ),
    "two operating points": (
        SMALL_BINARY.replace(b"Transient Analysis", b"Operating Point"),
        "holds 2 points; an operating point is one",
    ),
    "a shorter axis": (
        SMALL_BINARY.replace(b"real\n", b"real unpadded\n").replace(b"time\ttime", b"time\ttime dims=1"),
        "axis is shorter",
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str) -> None:
    """One sentence that says what is wrong, with the file and a remedy."""
    data, pattern = REFUSED[case]
    with pytest.raises(ResultsError, match=pattern) as caught:
        parse_raw(data, "pump.raw")
    assert caught.value.file == "pump.raw"
    assert caught.value.remedy


def test_errors_in_text_name_the_line() -> None:
    """The line of the damaged number and of the damaged header, counted from 1."""
    for old, new, line in ((b"6.321205", b"6.32x205", 14), (b"\t1\tv(out)", b"\t7\tv(out)", 9)):
        with pytest.raises(ResultsError) as caught:
            parse_raw(SMALL_TEXT.replace(old, new), "line.raw")
        assert caught.value.line == line


def _same(one: Curves, two: Curves) -> bool:
    return len(one) == len(two) and all(
        a.name == b.name and a.values.tolist() == b.values.tolist() and a.axis.tolist() == b.axis.tolist()
        for a, b in zip(one, two, strict=True)
    )


@pytest.mark.parametrize("whole", [SMALL_TEXT, SMALL_BINARY, SMALL_AC, SMALL_TEXT.replace(b"\n", b"\r\n")])
def test_a_file_cut_anywhere_is_refused(whole: bytes) -> None:
    """At every byte: an error, or every curve as in the whole file; never a shorter or another one."""
    complete = parse_raw(whole, "whole.raw")
    refused = 0
    for length in range(len(whole)):
        try:
            found = parse_raw(whole[:length], "cut.raw")
        except ResultsError:
            refused += 1
        else:
            assert _same(found, complete), length
    # Only the very last line end may be missing (a CR of a CR LF is one, too).
    assert refused >= len(whole) - 1


def test_a_file_of_two_plots_cut_anywhere() -> None:
    """The only cut that is read falls between the plots, and gives the first one whole."""
    whole = SMALL_AC + SMALL_BINARY
    for length in range(len(whole)):
        if length == len(SMALL_AC):
            assert _same(parse_raw(whole[:length], "cut.raw"), parse_raw(SMALL_AC, "ac.raw"))
        else:
            with pytest.raises(ResultsError):
                parse_raw(whole[:length], "cut.raw")


@settings(deadline=None, max_examples=150)
@given(st.binary(max_size=300))
def test_random_bytes(data: bytes) -> None:
    """Nothing but a ResultsError, after a good header or without one."""
    for head in (
        b"",
        b"Title:",
        SMALL_TEXT[: SMALL_TEXT.index(b"0\t\t")],
        SMALL_AC[: SMALL_AC.index(b"Binary:") + 8],
    ):
        try:
            parse_raw(head + data, "random.raw")
        except ResultsError as error:
            assert error.file == "random.raw"


@settings(deadline=None, max_examples=400)
@given(
    st.sampled_from([SMALL_TEXT, SMALL_BINARY, SMALL_AC, SMALL_TEXT + SMALL_AC]),
    st.lists(
        st.tuples(st.integers(0, 600), st.integers(0, 5), st.binary(max_size=5)), min_size=1, max_size=4
    ),
)
def test_mutations(whole: bytes, edits: list[tuple[int, int, bytes]]) -> None:
    """Bytes replaced, removed or put in: a ResultsError or finite curves on a rising axis."""
    for at, removed, put in edits:
        whole = whole[:at] + put + whole[at + removed :]
    try:
        curves = parse_raw(whole, "mutant.raw")
    except ResultsError:
        return
    for curve in curves:
        assert np.isfinite(curve.values).all()
        assert len(curve.axis) == len(curve.values)
        assert curve.analysis == "other" or (np.diff(curve.axis) > 0).all()


FREQUENCY = np.array([1.0, 10.0, 1e3])
TIME = np.array([0.0, 1e-3])
WRITTEN = Curves(
    "exact",
    (
        Curve("v(out)", "ac", FREQUENCY, 1 / (1 + 1j * FREQUENCY), "V"),
        Curve("v(out)", "transient", TIME, np.array([0.1, -0.0]), "V"),
        Curve("i(v1)", "ac", FREQUENCY.copy(), -1j * FREQUENCY, "A"),
        Curve("v(out)", "operating point", np.zeros(1), np.array([1 / 3]), "V"),
        Curve("onoise_spectrum", "noise", FREQUENCY, 1e-9 / FREQUENCY, "V/sqrt(Hz)"),
        Curve("v(onoise_total)", "other", np.zeros(1), np.array([2e-6]), "V"),
        Curve("v(out)", "other", np.array([2.0, 1.0]), np.array([1.0, 0.5]), "V"),
    ),
)


def test_what_is_written_is_read_back() -> None:
    """Names, units, axes and every bit of the values; curves of one analysis come together."""
    curves = parse_raw(write_raw(WRITTEN, title="Pump station\n*ng_script"), "back.raw")
    assert curves.title == "Pump station *ng_script"
    order = [0, 2, 1, 3, 4, 5, 6]
    assert len(curves) == len(order)
    for curve, index in zip(curves, order, strict=True):
        meant = WRITTEN.curves[index]
        assert (curve.name, curve.analysis, curve.unit) == (meant.name, meant.analysis, meant.unit)
        assert curve.axis.tobytes() == meant.axis.tobytes()
        assert curve.values.tobytes() == meant.values.tobytes()


UNWRITABLE = {
    "nothing": (),
    "a blank in the name": (Curve("v(a b)", "transient", TIME, TIME),),
    "a line end in the name": (Curve("v(a\nb)", "transient", TIME, TIME),),
    "no name": (Curve("", "transient", TIME, TIME),),
    "not finite": (Curve("v(out)", "transient", TIME, np.array([0, np.nan])),),
    "complex in time": (Curve("v(out)", "transient", TIME, 1j * TIME),),
    "two operating points": (Curve("v(out)", "operating point", TIME, TIME),),
}


@pytest.mark.parametrize("case", UNWRITABLE)
def test_what_no_raw_file_can_hold(case: str) -> None:
    """Refused before a byte is written."""
    with pytest.raises(ResultsError) as caught:
        write_raw(Curves("exact", UNWRITABLE[case]), title="t")
    assert caught.value.file == "exact"


# --- live files ---

ANALYSES = ".ac dec 7 1 1meg\n.tran 10u 3m 0 10u\n.op\n.noise v(out) V1 dec 5 1 1k\n.dc V1 1 0 -0.25\n"
DECK = "* Float Gauge filter\nV1 in 0 DC 1 AC 1 PULSE(0 1 0 1n 1n 1 2)\nR1 in out 1k\nC1 out 0 1u\n"


def _simulate(folder: Path, deck: str, ascii_raw: bool = False, result: str = "out.raw") -> bytes:
    (folder / "in.cir").write_text(deck)
    environment = {"PATH": os.environ.get("PATH", ""), "HOME": str(folder), "LC_ALL": "C"}
    if ascii_raw:
        environment["SPICE_ASCIIRAWFILE"] = "1"
    program = os.environ.get("RCNET_NGSPICE", "ngspice")
    command = [program, "-b", "-n", "-r", "out.raw", "-o", "out.log", "in.cir"]
    subprocess.run(
        command,
        cwd=folder,
        env=environment,
        stdin=subprocess.DEVNULL,
        capture_output=True,
        check=True,
        timeout=60,
    )
    return (folder / result).read_bytes()


def _get(curves: Curves, name: str, analysis: str) -> Curve:
    found = [curve for curve in curves if (curve.name, curve.analysis) == (name, analysis)]
    assert len(found) == 1
    return found[0]


@pytest.mark.ngspice
@pytest.mark.parametrize("ascii_raw", [False, True])
def test_ngspice_results_against_closed_forms(tmp_path: Path, ascii_raw: bool) -> None:
    """One pole: H = 1/(1 + j w RC); e^(-t/RC) after a step; sqrt(4kTR) |H| of noise at 300.15 K."""
    curves = parse_raw(_simulate(tmp_path, DECK + ANALYSES + ".end\n", ascii_raw), "out.raw")
    assert curves.title == "* float gauge filter"
    ac = _get(curves, "v(out)", "ac")
    response = 1 / (1 + 2j * np.pi * ac.axis * R * C)
    assert len(ac) == 43
    np.testing.assert_allclose(ac.values, response, rtol=2e-15)
    current = _get(curves, "i(v1)", "ac")
    assert current.unit == "A"
    np.testing.assert_allclose(current.values, -(1 - response) / R, rtol=1e-9)
    step = _get(curves, "v(out)", "transient")
    np.testing.assert_allclose(step.values, 1 - np.exp(-step.axis / (R * C)), rtol=0, atol=2e-5)
    noise = _get(curves, "onoise_spectrum", "noise")
    assert noise.unit == "V/sqrt(Hz)"
    density = np.sqrt(4 * 1.38064852e-23 * 300.15 * R) / np.hypot(1, 2 * np.pi * noise.axis * R * C)
    np.testing.assert_allclose(noise.values, density, rtol=1e-9)
    point = _get(curves, "v(out)", "operating point")
    assert (point.axis.tolist(), point.values.tolist()) == ([0.0], [1.0])
    others = {curve.name: curve for curve in curves.of("other")}
    assert others["v(out)"].axis.tolist() == [1, 0.75, 0.5, 0.25, 0]
    assert others["v(onoise_total)"].axis.tolist() == [0.0]
    assert all((curve.resolution is None) != ascii_raw for curve in curves if curve.values.any())


@pytest.mark.ngspice
def test_ngspice_binary_and_text_agree_within_the_resolution(tmp_path: Path) -> None:
    """Every number of the text file lies within its stated resolution of the binary one."""
    deck = DECK + ANALYSES + ".end\n"
    binary = parse_raw(_simulate(tmp_path, deck), "b.raw")
    text = parse_raw(_simulate(tmp_path, deck, ascii_raw=True), "t.raw")
    assert [(c.name, c.analysis) for c in binary] == [(c.name, c.analysis) for c in text]
    for one, two in zip(binary, text, strict=True):
        allowed = np.zeros(len(two)) if two.resolution is None else two.resolution
        # Reading the decimal text rounds once more, to half a unit of the double.
        assert np.all(np.abs(one.values - two.values) <= allowed + 2**-52 * np.abs(one.values)), one.name
        np.testing.assert_allclose(one.axis, two.axis, rtol=1e-15)


@pytest.mark.ngspice
def test_ngspice_files_written_from_memory(tmp_path: Path) -> None:
    """`write`, text with few digits and vectors of several lengths included."""
    control = (
        ".control\nac dec 2 1 1k\nset filetype=ascii\nset rawfileprec=5\nset nopadding\n"
        "let short = vector(3)\nwrite w.raw out short v1#branch\nquit 0\n.endc\n"
    )
    curves = parse_raw(_simulate(tmp_path, DECK + control + ".end\n", result="w.raw"), "w.raw")
    assert [(curve.name, len(curve)) for curve in curves] == [("v(out)", 7), ("short", 3), ("i(v1)", 7)]
    out = _get(curves, "v(out)", "ac")
    assert out.resolution is not None
    frequency = 10.0 ** (np.arange(7) / 2)
    difference = np.abs(out.values - 1 / (1 + 2j * np.pi * frequency * R * C))
    assert np.all(difference <= out.resolution * (1 + 1e-9))
    assert np.any(difference > 0.1 * out.resolution)


@pytest.mark.ngspice
def test_ngspice_loads_what_is_written(tmp_path: Path) -> None:
    """`load` takes every plot, and gives its numbers back when asked to write them."""
    (tmp_path / "ours.raw").write_bytes(write_raw(WRITTEN, title="Leak listener"))
    control = ".control\nload ours.raw\nset appendwrite\n"
    for plot in ("ac1", "tran1", "op1", "noise1"):
        control += f"setplot {plot}\nwrite back.raw all\n"
    data = _simulate(tmp_path, DECK + control + "quit 0\n.endc\n.end\n", result="back.raw")
    curves = parse_raw(data, "back.raw")
    for meant in WRITTEN.curves[:5]:
        found = _get(curves, meant.name, meant.analysis)
        assert found.values.tolist() == meant.values.tolist()
        assert found.axis.tolist() == meant.axis.tolist()
