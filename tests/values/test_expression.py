"""Hand formulas compute what a designer means, and refuse the rest with its place."""

from __future__ import annotations

import dataclasses
import math

import mpmath
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.errors import InputError, QuantityError
from rcnet.values import parse_expression

PARTS = {"R1": 4700.0, "R2": 10e3, "C1": 10e-9, "T": 300.15, "X1.R1": 820.0, "min": 3.0, "_a": 2.0}

# The same formulas in mpmath at 30 digits, written by hand; mp.k is the 2019 value from the SI Brochure.
_K_B = "1.380649e-23"
FORMULAS = {
    "corner": ("1/(2*pi*R1*C1)", lambda m, v: 1 / (2 * m.pi * v["R1"] * v["C1"])),
    "thermal noise": ("sqrt(4*k_B*T*R1)", lambda m, v: m.sqrt(4 * m.mpf(_K_B) * v["T"] * v["R1"])),
    "parallel": ("parallel(R1, R2)", lambda m, v: v["R1"] * v["R2"] / (v["R1"] + v["R2"])),
    "parallel of one": ("parallel(R1)", lambda m, v: v["R1"]),
    "three in parallel": (
        "parallel(R1,R2,X1.R1)",
        lambda m, v: 1 / (1 / v["R1"] + 1 / v["R2"] + 1 / v["X1.R1"]),
    ),
    "decibels": ("dB(R1/(R1+R2))", lambda m, v: 20 * m.log10(v["R1"] / (v["R1"] + v["R2"]))),
    "decibels of a negative gain": ("dB(-10)", lambda m, v: m.mpf(20)),
    "natural logarithm": ("R1*C1*log(2)", lambda m, v: v["R1"] * v["C1"] * m.log(2)),
    "decimal logarithm": ("log10(R2)", lambda m, v: m.log10(v["R2"])),
    "discharge": ("5*exp(-1e-4/(R1*C1))", lambda m, v: 5 * m.exp(-m.mpf("1e-4") / (v["R1"] * v["C1"]))),
    "phase": (
        "-atan(2*pi*1e3*R1*C1)*180/pi",
        lambda m, v: -m.atan(2 * m.pi * 1000 * v["R1"] * v["C1"]) * 180 / m.pi,
    ),
    "circle functions": ("sin(1)+cos(1)*tan(1)", lambda m, v: 2 * m.sin(1)),
    "least": ("min(R1, R2, 5)", lambda m, v: m.mpf(5)),
    "greatest": ("max(R1, R2, 5)", lambda m, v: v["R2"]),
    "one argument": ("max(R1)", lambda m, v: v["R1"]),
    "absolute": ("abs(R1-R2)", lambda m, v: v["R2"] - v["R1"]),
    "powers": ("(R1^2 + R2**2)^0.5", lambda m, v: m.sqrt(v["R1"] ** 2 + v["R2"] ** 2)),
    "sign looser than power": ("-2^2", lambda m, v: m.mpf(-4)),
    "power from the right": ("2^3^2", lambda m, v: m.mpf(512)),
    "signed power": ("2**-1", lambda m, v: m.mpf("0.5")),
    "sign tighter than product": ("2*-3", lambda m, v: m.mpf(-6)),
    "unary plus": ("+R1 - -R2", lambda m, v: v["R1"] + v["R2"]),
    "left to right": ("8/4/2 - 3 - 2", lambda m, v: m.mpf(-4)),
    "numbers": ("1.5e-3 + .5 + 2. + 1E2", lambda m, v: m.mpf("102.5015")),
    "a part named like a function": ("min*min(min, 7)", lambda m, v: m.mpf(9)),
    "underscore": ("_a", lambda m, v: m.mpf(2)),
    "blanks": (" R1\t*\n2 ", lambda m, v: 2 * v["R1"]),
}


@pytest.mark.parametrize(("text", "reference"), FORMULAS.values(), ids=FORMULAS.keys())
def test_formulas_give_what_mpmath_gives(text: str, reference: object) -> None:
    """Thirty-digit arithmetic and the formula agree to rounding."""
    with mpmath.workdps(30):
        expected = reference(mpmath, {name: mpmath.mpf(value) for name, value in PARTS.items()})  # type: ignore[operator]
    assert parse_expression(text).evaluate(PARTS) == pytest.approx(float(expected), rel=4e-15)


def test_names_are_the_free_ones() -> None:
    """Constants and functions are not names; a function's name without brackets is."""
    assert parse_expression("sqrt(4*k_B*T*R1)/pi + min + X1.R1").names == {"T", "R1", "min", "X1.R1"}
    assert parse_expression("2*pi").names == frozenset()


def test_an_expression_is_frozen_and_comparable() -> None:
    """Two readings of one formula are equal, and neither can be changed."""
    expression = parse_expression("R1*C1")
    assert expression == parse_expression("R1*C1")
    assert expression.text == "R1*C1"
    with pytest.raises(dataclasses.FrozenInstanceError):
        expression.text = "R2"  # type: ignore[misc]


# Formula, the place, a piece of the message or its remedy.
REFUSED = {
    "empty": ("", None, "empty"),
    "blank": ("  ", None, "empty"),
    "long": ("1" * 2001, None, "2000 characters"),
    "marking": ("2*4k7", 3, "Write '4.7e3'"),
    "prefix": ("10n*R1", 1, "Write '10e-9'"),
    "prefix and unit": ("R1*10nF", 4, "Write '10e-9'"),
    "missing product": ("2pi", 1, "Write '2*pi'"),
    "missing product with a part": ("2R1", 1, "'2*R1'"),
    "two points": ("1.2.3", 1, "one point"),
    "too large a number": ("2*1e999", 3, "1.8e308"),
    "too early an end": ("R1*", 4, "ends too early"),
    "open bracket": ("2*(R1", 3, "never closed"),
    "open call": ("2*sqrt(R1", 7, "never closed"),
    "bracket too many": ("R1)", 3, "')'"),
    "no operator": ("R1 R2", 4, "'R2'"),
    "two operators": ("R1*/R2", 4, "'/'"),
    "comma": ("1,5*R1", 2, "Only functions take commas"),
    "comma in brackets": ("(R1,R2)", 4, "Only functions take commas"),
    "argument missing": ("min(R1,)", 8, "')'"),
    "no function": ("R1 + eval(R1)", 6, "Known functions: abs, atan"),
    "name as a function": ("R1(2)", 1, "'R1' is no function"),
    "too many arguments": ("sqrt(1, 2)", 1, "sqrt has 2 arguments"),
    "no arguments": ("max()", 1, "at least one argument"),
    "code": ("().__class__", 2, "')'"),
    "index": ("R1[0]", 3, "round brackets"),
    "string": ("'R1'", 1, "no meaning"),
    "assignment": ("R1 = 2", 4, "no meaning"),
    "statement": ("R1; R2", 3, "no meaning"),
    "typographic product": ("2 × R1", 3, "'*'"),
    "typographic minus": ("2 − R1", 3, "'-'"),
    "NUL": ("R1\x00", 3, "no meaning"),
    "101 brackets": ("(" * 101 + "1" + ")" * 101, 102, "100 levels"),
    "101 signs": ("-" * 101 + "1", 102, "100 levels"),
    "101 powers": ("^".join(["1"] * 102), 203, "100 levels"),
}


@pytest.mark.parametrize(("text", "at", "says"), REFUSED.values(), ids=REFUSED.keys())
def test_what_is_no_formula_is_refused_at_its_place(text: str, at: int | None, says: str) -> None:
    """The error names the character and what to do."""
    with pytest.raises(QuantityError) as caught:
        parse_expression(text)
    assert says in str(caught.value)
    assert caught.value.remedy
    if at is not None:
        assert f"at character {at}:" in caught.value.message


def test_errors_are_input_errors() -> None:
    """Who catches InputError catches a bad formula."""
    with pytest.raises(InputError):
        parse_expression("1+")


UNDEFINED = {
    "unknown name": ("R1*R9", 4, "Known names: C1, R1"),
    "other case": ("r1", 1, "Did you mean 'R1'?"),
    "function without brackets": ("sqrt", 1, "'sqrt(...)'"),
    "division by zero": ("1/(R1-R1)", 2, "divides by zero"),
    "zero to a negative power": ("0^-1", 2, "divides by zero"),
    "root of a negative": ("1+sqrt(-1)", 3, "sqrt(-1.0)"),
    "logarithm of zero": ("log(0)", 1, "log(0.0)"),
    "logarithm of a negative": ("log10(-1)", 1, "log10(-1.0)"),
    "decibels of nothing": ("dB(0)", 1, "dB(0.0)"),
    "complex power": ("(-8)^(1/3)", 5, "no real number"),
    "overflowing exponential": ("exp(1000)", 1, "1.8e308"),
    "overflowing power": ("10^400", 3, "1.8e308"),
    "overflowing product": ("1e200*1e200", 6, "1.8e308"),
    "short in parallel": ("parallel(R1, 0)", 1, "divides by zero"),
    "cancelling in parallel": ("parallel(R1, -R1)", 1, "divides by zero"),
}


@pytest.mark.parametrize(("text", "at", "says"), UNDEFINED.values(), ids=UNDEFINED.keys())
def test_what_has_no_value_is_refused_at_its_place(text: str, at: int, says: str) -> None:
    """No formula returns nan, infinity or a complex number."""
    expression = parse_expression(text)
    with pytest.raises(QuantityError) as caught:
        expression.evaluate(PARTS)
    assert says in str(caught.value)
    assert f"at character {at}:" in caught.value.message
    assert caught.value.remedy


@pytest.mark.parametrize("value", [math.nan, math.inf, "big", None, 10**400, 1j])
def test_a_name_stands_for_a_finite_number(value: object) -> None:
    """What is given for a name must be a finite number."""
    with pytest.raises(QuantityError, match="'R1' is"):
        parse_expression("R1*2").evaluate({"R1": value})  # type: ignore[dict-item]


def test_unequal_magnitudes_in_parallel_do_not_overflow() -> None:
    """1e-310 beside 1 is 1e-310, though its reciprocal is beyond a double."""
    assert parse_expression("parallel(1e-310, 1)").evaluate({}) == 1e-310


def test_wide_formulas_stay_within_the_stack() -> None:
    """A thousand terms, and a hundred levels of every kind, are read and computed."""
    assert parse_expression("+".join(["1"] * 1000)).evaluate({}) == 1000
    assert parse_expression("max(0+2*" * 100 + "1" + ")" * 100).evaluate({}) == 2.0**100
    assert parse_expression("(" * 100 + "1" + ")" * 100).evaluate({}) == 1


def _python(text: str) -> float | None:
    """Python's own arithmetic, with the same rules for signs and powers; None where there is no value."""
    try:
        value = eval(text)  # made below from digits, operators and brackets alone
    except (ZeroDivisionError, OverflowError):
        return None
    return value if isinstance(value, float) and math.isfinite(value) else None


_OPERAND = st.sampled_from(["1.0", "2.0", "3.0", "0.5", "7.25", "0.0"])


def _combined(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    operator = st.sampled_from([" + ", "-", "*", " / ", "**"])
    return (
        st.tuples(inner, operator, inner).map("".join)
        | inner.map(lambda text: f"({text})")
        | inner.map(lambda text: f"-{text}")
    )


@settings(deadline=None, max_examples=500)
@given(st.recursive(_OPERAND, _combined, max_leaves=12))
def test_arithmetic_agrees_with_python(text: str) -> None:
    """Precedence, association and rounding are those of floating-point arithmetic everywhere."""
    expected = _python(text)
    expression = parse_expression(text.replace("**", "^") if len(text) % 2 else text)
    if expected is None:
        with pytest.raises(QuantityError):
            expression.evaluate({})
    else:
        assert expression.evaluate({}) == expected


@settings(deadline=None, max_examples=500)
@given(st.text(max_size=20) | st.text("R1(),.+-*/^ 2ekmsqrt_", max_size=20))
def test_any_text_is_computed_or_refused(text: str) -> None:
    """No text brings anything but a finite number or a QuantityError with a remedy."""
    try:
        assert math.isfinite(parse_expression(text).evaluate(PARTS))
    except QuantityError as error:
        assert error.remedy
