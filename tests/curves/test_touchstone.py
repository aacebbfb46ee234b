"""Touchstone files: both versions, every option, and what is refused.

The check network is 50 ohm in series, then a capacitor with omega C = 1/50 S to ground; at a reference of 50
ohm S11 = (3-2j)/13, S21 = S12 = (6-4j)/13, S22 = (-1-8j)/13, by hand.
"""

from __future__ import annotations

import time
from itertools import product
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.curves import Curves, Ports, parse_touchstone
from rcnet.errors import ResultsError

Matrix = np.ndarray[Any, np.dtype[np.complex128]]

S = np.array([[3 - 2j, 6 - 4j], [6 - 4j, -1 - 8j]]) / 13
# The same network by its equations: V1 = 50 I1 + V2, I1 + I2 = V2 j/50.
Z = np.array([[50 - 50j, -50j], [-50j, -50j]])
Y = np.linalg.inv(Z)
H = np.array([[50, 1], [-1, 1j / 50]], complex)
G = np.linalg.inv(H)
PARAMETERS: dict[str, Matrix] = {"S": S, "Z": Z, "Y": Y, "H": H, "G": G}
NORMAL: dict[str, Matrix] = {
    "S": np.ones((2, 2), complex),
    "Z": np.full((2, 2), 1 / 50 + 0j),
    "Y": np.full((2, 2), 50 + 0j),
    "H": np.array([[1 / 50, 1], [1, 50]], complex),
    "G": np.array([[50, 1], [1, 1 / 50]], complex),
}
ORDER_1 = ((0, 0), (1, 0), (0, 1), (1, 1))


def number(value: complex, form: str) -> str:
    """A complex number in one of the three forms, all digits."""
    if form == "RI":
        return f"{value.real!r} {value.imag!r}"
    size = abs(value) if form == "MA" else 20 * np.log10(abs(value)) if value else -400.0
    return f"{float(size)!r} {float(np.degrees(np.angle(value)))!r}"


def row(matrix: Matrix, form: str = "RI", order: Any = ORDER_1) -> str:
    """One set of numbers without its frequency."""
    return " ".join(number(complex(matrix[at]), form) for at in order)


def two_port(curves: Curves) -> Matrix:
    """The matrix at the first frequency, by the curves' names."""
    assert [(c.name, c.analysis, c.unit) for c in curves] == [
        (n, "ac", "") for n in ("s11", "s21", "s12", "s22")
    ]
    s11, s21, s12, s22 = (complex(curve.values[0]) for curve in curves)
    return np.array([[s11, s12], [s21, s22]])


def version_2(keywords: str, *rows: str, options: str = "# Hz S RI R 50", tail: str = "[End]\n") -> str:
    """A file of version 2 with one frequency unless the keywords say otherwise."""
    count = "" if "of Frequencies" in keywords else "[Number of Frequencies] 1\n"
    lines = "\n".join(rows)
    return f"! v2\n[Version] 2.0\n{options}\n{keywords}{count}[Network Data]\n{lines}\n{tail}"


TWO = "[Number of Ports] 2\n[Two-Port Data Order] 21_12\n"


@pytest.mark.parametrize(("kind", "form"), list(product(PARAMETERS, ("RI", "MA", "DB"))))
def test_version_1(kind: str, form: str) -> None:
    """Every kind of parameters, normalised, in every form, becomes the network's S."""
    text = f"! bench\n# kHz {kind} {form} R 50\n1 {row(PARAMETERS[kind] * NORMAL[kind], form)} ! one\n"
    curves = parse_touchstone(text, "meter.s2p")
    np.testing.assert_allclose(two_port(curves), S, rtol=1e-13, atol=1e-15)
    assert (curves.curves[0].axis.tolist(), curves.ports, curves.remarks) == ([1000], Ports((50.0, 50.0)), ())


@pytest.mark.parametrize(("kind", "form"), list(product(PARAMETERS, ("RI", "MA", "DB"))))
def test_version_2(kind: str, form: str) -> None:
    """The same in ohm and siemens, as version 2 has them."""
    text = version_2(TWO, f"1 {row(PARAMETERS[kind], form)}", options=f"# MHz {kind} {form}")
    curves = parse_touchstone(text, "meter.ts")
    np.testing.assert_allclose(two_port(curves), S, rtol=1e-13, atol=1e-15)
    assert (curves.curves[0].axis.tolist(), curves.ports) == ([1e6], Ports((50.0, 50.0)))


OTHER = (("two references", (75.0, 10.0)), ("one reference", (200.0, 200.0)))


@pytest.mark.parametrize(("kind", "reference"), [(k, r) for k in "ZYHG" for _, r in OTHER])
def test_other_references(kind: str, reference: tuple[float, float]) -> None:
    """S = F (Z - R)(Z + R)^-1 F^-1 with F = R^(-1/2)/2, K. Kurokawa's definition for resistances."""
    r, f = np.diag(reference), np.diag(0.5 / np.sqrt(reference))
    meant = f @ (Z - r) @ np.linalg.inv(Z + r) @ np.linalg.inv(f)
    keywords = f"{TWO}[Reference] {reference[0]}\n {reference[1]}\n"
    text = version_2(keywords, f"1 {row(PARAMETERS[kind])}", options=f"# {kind} RI")
    curves = parse_touchstone(text, "meter.s2p")
    np.testing.assert_allclose(two_port(curves), meant, rtol=1e-12)
    assert curves.ports == Ports(reference)
    if len(set(reference)) > 1:
        named = parse_touchstone(f"# S RI R {reference[0]} {reference[1]}\n1 {row(meant)}\n", "meter.s2p")
        assert named.ports == Ports(reference)


# option line: Hz of one unit, what 0.5 0.5 means, ohm
OPTIONS = {
    "#": (1e9, 0.5 * np.exp(0.5j * np.pi / 180), 50.0),
    "# GHz S MA R 50": (1e9, 0.5 * np.exp(0.5j * np.pi / 180), 50.0),
    "#HZ ri": (1.0, 0.5 + 0.5j, 50.0),
    "# R 75 db khz": (1e3, 10 ** (0.5 / 20) * np.exp(0.5j * np.pi / 180), 75.0),
    "# ri r 1.5e2 Mhz s": (1e6, 0.5 + 0.5j, 150.0),
}


@pytest.mark.parametrize("line", OPTIONS)
def test_option_lines(line: str) -> None:
    """Any order, any case; what is missing is GHz, S, MA, 50 ohm; only the first such line counts."""
    unit, value, ohms = OPTIONS[line]
    curves = parse_touchstone(f"{line}\n2 0.5 0.5\n# kHz S DB R 1\n3 0.5 0.5\n", "sonde.S1P")
    (curve,) = curves
    np.testing.assert_allclose(curve.values, value, rtol=1e-14)
    assert (curve.name, curve.axis.tolist(), curves.ports) == ("s11", [2 * unit, 3 * unit], Ports((ohms,)))


ONE_PORT = {
    "Z of version 1": ("# Hz Z RI R 50\n1 2 1\n", "s.s1p"),
    "Y of version 1": ("# Hz Y RI R 50\n1 0.4 -0.2\n", "s.s1p"),
    "Z of version 2": (version_2("[Number of Ports] 1\n", "1 100 50", options="# Hz Z RI"), "s.ts"),
    "by its first row": ("# Hz Z RI R 50\n1 2 1\n", "s.ts"),
}


@pytest.mark.parametrize("case", ONE_PORT)
def test_one_port(case: str) -> None:
    """100 + 50j ohm at 50 ohm: (z - 1)/(z + 1) = (1 + 1j)/(3 + 1j) = 0.4 + 0.2j."""
    (curve,) = parse_touchstone(*ONE_PORT[case])
    np.testing.assert_allclose(curve.values, [0.4 + 0.2j], rtol=1e-12)


def _halves() -> dict[str, str]:
    lower, upper = ((0, 0), (1, 0), (1, 1)), ((0, 0), (0, 1), (1, 1))
    order_12 = ((0, 0), (0, 1), (1, 0), (1, 1))
    return {
        "lower": version_2(f"{TWO}[Matrix Format] Lower\n", f"1 {row(S, order=lower)}"),
        "upper": version_2(f"[Matrix Format] upper\n{TWO}", f"1 {row(S, order=upper)}"),
        "12_21": version_2(TWO.replace("21_12", "12_21"), f"1 {row(S, order=order_12)}"),
        "over lines": version_2(TWO, *f"1 {row(S)}".split()),
        "version 1 over lines": "# Hz S RI R 50\n1 {} {}\n{} {}\n {} {} {} ! x\n\n{}\n".format(
            *row(S).split()
        ),
        "information": version_2(
            f"[Begin Information]\nmade 1 2 3 [x]\n# MHz\n[End Information]\n{TWO}", f"1 {row(S)}"
        ),
        "noise": version_2(
            f"{TWO}[Number of Noise Frequencies] 1\n", f"1 {row(S)}", tail="[Noise Data]\n1 2 3 4 5\n[End]\n"
        ),
        "version 2.1, CR LF": version_2(TWO, f"1 {row(S)}").replace("2.0", "2.1").replace("\n", "\r\n"),
        "comments, capitals": version_2(TWO.upper(), f"1 {row(S)} ! x").replace("[Network", "! y\n[NETWORK"),
    }


SHAPES = _halves()


@pytest.mark.parametrize("shape", SHAPES)
def test_shapes(shape: str) -> None:
    """Halves of a matrix, both orders, broken lines, information, noise, line ends."""
    curves = parse_touchstone(SHAPES[shape], "meter.s2p")
    np.testing.assert_allclose(two_port(curves), S, rtol=1e-14)
    assert curves.curves[0].axis.tolist() == [1]
    assert curves.remarks == (("Its noise parameters are passed over.",) if shape == "noise" else ())


def test_the_order_of_columns() -> None:
    """Version 1 writes 21 before 12, version 2 as its keyword says."""
    for order, text in (
        ("21_12", "# Hz S RI\n1 1 0 2 0 3 0 4 0\n"),
        ("21_12", version_2(TWO, "1 1 0 2 0 3 0 4 0")),
        ("12_21", version_2(TWO.replace("21_12", "12_21"), "1 1 0 2 0 3 0 4 0")),
    ):
        curves = parse_touchstone(text, "meter.s2p")
        values = {curve.name: curve.values[0] for curve in curves}
        assert values == {"s11": 1, "s21": 2 if order == "21_12" else 3, "s12": 5 - values["s21"], "s22": 4}


def test_noise_of_version_1() -> None:
    """Where frequency falls back five numbers a line follow; they are passed over, with a remark."""
    text = f"# Hz S RI\n1 {row(S)}\n2 {row(S)}\n1 0.5 0.3 20 0.1\n3 0.6 0.3 20 0.1\n"
    curves = parse_touchstone(text, "meter.s2p")
    assert curves.curves[0].axis.tolist() == [1, 2]
    assert curves.remarks == ("Its noise parameters are passed over.",)


def test_digits_become_resolution() -> None:
    """Half a unit of the last place, for RI the root of both squares; frequencies in the unit of the file."""
    text = "# kHz S RI R 50\n1.5 0.250 0.000\n2.5 0.125 0.500\n"
    (curve,) = parse_touchstone(text, "sonde.s1p")
    assert curve.resolution is not None
    assert curve.axis_resolution is not None
    np.testing.assert_allclose(curve.resolution, np.hypot(5e-4, 5e-4), rtol=1e-12)
    np.testing.assert_allclose(curve.axis_resolution, 50, rtol=1e-12)
    (level,) = parse_touchstone(
        text.replace("RI", "DB").replace("0.250", "-20.0").replace("0.125", "-40.0"), "a.s1p"
    )
    assert level.resolution is not None
    share = np.hypot(np.log(10) / 20 * 0.05, np.deg2rad(0.0005))
    np.testing.assert_allclose(level.resolution, [0.1 * share, 0.01 * share], rtol=1e-12)


@settings(deadline=None, max_examples=40)
@given(st.sampled_from(["Z", "Y", "H", "G"]), st.integers(3, 7), st.integers(0, 2**32 - 1))
def test_resolution_covers_rounded_parameters(kind: str, digits: int, seed: int) -> None:
    """Parameters printed with few digits lie, turned into S, within their resolution of the exact ones."""
    random = np.random.default_rng(seed)
    r = random.uniform(10, 200, 3)
    z = np.array([[r[0] + r[2], r[2]], [r[2], r[1] + r[2]]]) * np.exp(-1j * random.uniform(0, 1.5))
    h = np.array([[np.linalg.det(z), z[0, 1]], [-z[1, 0], 1]]) / z[1, 1]
    matrix = {"Z": z, "Y": np.linalg.inv(z), "H": h, "G": np.linalg.inv(h)}[kind]
    cells = " ".join(f"{matrix[at].real:.{digits}e} {matrix[at].imag:.{digits}e}" for at in ORDER_1)
    curves = parse_touchstone(version_2(TWO, f"1 {cells}", options=f"# Hz {kind} RI"), "meter.s2p")
    unit = 50 * np.eye(2)
    meant = (z - unit) @ np.linalg.inv(z + unit)
    found = two_port(curves)
    s11, s21, s12, s22 = (curve.resolution for curve in curves)
    assert s11 is not None and s12 is not None and s21 is not None and s22 is not None
    allowed = np.array([[s11[0], s12[0]], [s21[0], s22[0]]])
    assert (np.abs(found - meant) <= 1.2 * allowed + 1e-14).all()


FULL = f"1 {row(S)}"
# name: text, file, line, pattern
REFUSED = {
    "three ports by name": ("# Hz\n", "a.s3p", None, "named as a file of 3 ports"),
    "no ports by name": ("# Hz\n1 2 3\n", "a.s0p", None, "named as a file of 0 ports"),
    "three ports by keyword": (version_2("[Number of Ports] 3\n", "1"), "a.ts", 4, "it has 3 ports"),
    "ports that differ": (version_2(TWO, FULL), "a.s1p", 4, "has 2 ports, yet is named as a file of 1"),
    "ports unknown": ("# Hz\n1 2 3 4\n", "a.ts", 2, "tells how many ports"),
    "nothing": ("! x\n", "a.s2p", None, "holds no option line"),
    "no numbers": ("# Hz S RI\n! x\n", "a.s2p", 1, "holds no numbers"),
    "no option line": ("1 2 3\n", "a.s1p", 1, "numbers stand where the option line was expected"),
    "words first": ("Pump\n", "a.s1p", 1, "'Pump' stands where the option line"),
    "unknown option": ("# Hz S XX\n1 2 3\n", "a.s1p", 1, "'xx' is no option"),
    "two units": ("# Hz kHz\n1 2 3\n", "a.s1p", 1, "names two of 'hz' and 'khz'"),
    "no ohms": ("# Hz S R\n1 2 3\n", "a.s1p", 1, "no positive number of ohms"),
    "no resistance": ("# Hz S R 0\n1 2 3\n", "a.s1p", 1, "no positive number of ohms"),
    "three resistances": ("# Hz S R 1 2 3\n" + FULL, "a.s2p", 1, "3 reference resistances for 2 ports"),
    "H of one port": ("# Hz H\n1 2 3\n", "a.s1p", 1, "H parameters need two ports"),
    "Z with two resistances": ("# Hz Z RI R 50 75\n" + FULL, "a.s2p", 1, "normalised to one resistance"),
    "mixed mode": (version_2(TWO + "[Mixed-Mode Order] D1,2\n", FULL), "a.s2p", 6, "mixed-mode"),
    "unknown keyword": (version_2(TWO + "[Colour] red\n", FULL), "a.s2p", 6, "'\\[colour\\]' is not known"),
    "a keyword twice": (version_2(TWO + TWO, FULL), "a.s2p", 6, "stands there twice"),
    "a keyword in version 1": ("# Hz\n1 2 3\n[End]\n", "a.s1p", 3, "among the numbers of a version-1 file"),
    "no version first": ("[Number of Ports] 1\n", "a.s1p", 1, "does not begin with '\\[Version\\]'"),
    "version 3": ("[Version] 3.0\n", "a.s1p", 1, "version is '3.0'"),
    "no order": (version_2("[Number of Ports] 2\n", FULL), "a.s2p", 6, "is missing, which two ports need"),
    "order of one port": (
        version_2(TWO.replace(" 2\n", " 1\n"), "1 2 3"),
        "a.s1p",
        5,
        "in a file of one port",
    ),
    "odd order": (version_2(TWO.replace("21_12", "x"), FULL), "a.s2p", 5, "says 'x'"),
    "odd format": (version_2(TWO + "[Matrix Format] Left\n", FULL), "a.s2p", 6, "says 'left'"),
    "no count of ports": (version_2("", FULL), "a.ts", 5, "'\\[number of ports\\]' is missing"),
    "odd count": (version_2("[Number of Ports] two\n", FULL), "a.ts", 4, "says 'two', not a count"),
    "one reference of two": (version_2(TWO + "[Reference] 50\n", FULL), "a.s2p", 6, "for each of 2 ports"),
    "negative reference": (version_2(TWO + "[Reference] 50 -1\n", FULL), "a.s2p", 6, "no positive number"),
    "endless information": (
        version_2("[Begin Information]\n", FULL),
        "a.s2p",
        8,
        "no '\\[End Information\\]'",
    ),
    "text among keywords": (version_2(TWO + "fifty\n", FULL), "a.s2p", 6, "'fifty' stands where a keyword"),
    "keywords alone": ("[Version] 2.0\n# Hz\n", "a.s2p", 2, "ends before '\\[Network Data\\]'"),
    "no option line in version 2": (version_2(TWO, FULL, options="!"), "a.s2p", 7, "no option line"),
    "fewer than promised": (
        version_2(TWO + "[Number of Frequencies] 2\n", FULL),
        "a.s2p",
        9,
        "holds 1 frequencies, yet says 2",
    ),
    "more than promised": (
        version_2(TWO, FULL, "2" + FULL[1:]),
        "a.s2p",
        10,
        "holds 2 frequencies, yet says 1",
    ),
    "no end": (version_2(TWO, FULL, tail=""), "a.s2p", 8, "breaks off before '\\[End\\]'"),
    "text behind the end": (version_2(TWO, FULL, tail="[End]\n1\n"), "a.s2p", 10, "'1' follows '\\[End\\]'"),
    "cut short": ("# Hz S RI\n1 2 3\n2 3\n", "a.s1p", 3, "cut short: 2 of 3"),
    "two numbers too few": (
        "# Hz S RI\n1 2 3 4 5 6 7\n" + FULL,
        "a.s2p",
        2,
        "line 2 to 3 holds 16 numbers where 9",
    ),
    "a number too many": ("# Hz S RI\n1 2 3 4\n", "a.s1p", 2, "line 2 holds 4 numbers where 3"),
    "one port named as two": ("# Hz S RI\n1 2 3\n2 2 3\n3 2 3\n", "a.s2p", 4, "as in a file of one port"),
    "two ports named as one": ("# Hz S RI\n" + FULL, "a.s1p", 2, "holds 9 numbers where 3"),
    "falling": (
        "# Hz S RI\n2 1 0\n1 1 0\n",
        "a.s1p",
        3,
        "must rise from set to set, but goes from 2.0 to 1.0",
    ),
    "falling two-port": (f"# Hz S RI\n2 {row(S)}\n1 {row(S)}\n", "a.s2p", 3, "must rise"),
    "falling over two lines": (
        f"# Hz S RI\n2 {row(S)}\n1 1 0 2 0\n2 0 3 0\n",
        "a.s2p",
        3,
        "falls back on line 3",
    ),
    "falling in version 2": (
        version_2(TWO + "[Number of Frequencies] 2\n", FULL, FULL),
        "a.s2p",
        9,
        "must rise",
    ),
    "a point twice": ("# Hz S RI\n1 1 0\n1 1 0\n", "a.s1p", 3, "must rise"),
    "negative frequency": ("# Hz S RI\n-1 1 0\n", "a.s1p", 2, "below 0"),
    "too far": ("# GHz S RI\n1e300 1 0\n", "a.s1p", 2, "beyond what a double holds"),
    "a word": ("# Hz S RI\n1 1 0\n2 one 0\n", "a.s1p", 3, "'one' is not a finite number"),
    "a word on a later line": ("# Hz S RI\n1\n1\nx\n", "a.s1p", 4, "'x' is not a finite number"),
    "nan": ("# Hz S RI\n1 nan 0\n", "a.s1p", 2, "'nan' is not a finite number"),
    "underscore": ("# Hz S RI\n1_0 1 0\n", "a.s1p", 2, "'1_0' is not a finite number"),
    "overflow": ("# Hz S RI\n1 1e999 0\n", "a.s1p", 2, "'1e999' is not a finite number"),
    "negative magnitude": ("# Hz S MA\n1 -0.5 0\n", "a.s1p", 2, "-0.5 is no magnitude"),
    "level beyond doubles": ("# Hz S DB\n1 9000 0\n", "a.s1p", 2, "9000.0 is no magnitude"),
    "no S": ("# Hz Z RI\n1 1 0\n2 -1 0\n", "a.s1p", 3, "these Z parameters have no S"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case: str) -> None:
    """One sentence with file, line and remedy."""
    text, name, line, pattern = REFUSED[case]
    with pytest.raises(ResultsError, match=pattern) as caught:
        parse_touchstone(text, name)
    assert (caught.value.file, caught.value.line) == (name, line)
    assert caught.value.remedy


def test_a_last_line_without_its_end_is_remarked() -> None:
    """So ends a version-1 file that was cut inside its last number."""
    (remark,) = parse_touchstone("# Hz S RI\n1 0.5 0.25", "a.s1p").remarks
    assert "cut short" in remark


@settings(deadline=None, max_examples=300)
@given(
    st.sampled_from([*SHAPES.values(), f"# Hz S RI\n{FULL}\n2{FULL[1:]}\n1 2 3 4 5\n"]),
    st.lists(
        st.tuples(st.integers(0, 320), st.integers(0, 4), st.text("0123456789.-e \r\n![]#RSZ", max_size=4)),
        min_size=1,
        max_size=4,
    ),
)
def test_mutations(text: str, edits: list[tuple[int, int, str]]) -> None:
    """Characters replaced, removed or put in: a ResultsError with the file, or finite, rising curves."""
    for at, removed, put in edits:
        text = text[:at] + put + text[at + removed :]
    try:
        curves = parse_touchstone(text, "mutant.s2p")
    except ResultsError as error:
        assert error.file == "mutant.s2p"
        return
    for curve in curves:
        assert np.isfinite(curve.values).all()
        assert (np.diff(curve.axis) > 0).all()


def test_many_points_take_seconds() -> None:
    """Thirty thousand frequencies of two ports."""
    text = "# Hz S RI R 50\n" + "".join(f"{n} {row(S)}\n" for n in range(1, 30_001))
    start = time.perf_counter()
    assert len(parse_touchstone(text, "long.s2p").curves[3]) == 30_000
    assert time.perf_counter() - start < 5
