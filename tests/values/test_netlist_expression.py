"""Netlist expressions have the value ngspice gives them, or are refused with their place."""

from __future__ import annotations

import dataclasses
import math
import os
import re
import subprocess
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rcnet.errors import CircuitError, QuantityError
from rcnet.values import (
    NetlistFunction,
    parse_netlist_expression,
    parse_netlist_function,
)

PARAMETERS = {
    "a": 2.0,
    "b": 3.0,
    "zero": 0.0,
    "r_leak": 4700.0,
    "k": 5.0,
    "e": 0.5,
    "temp2": 27.0,
    "w[1]": 9.0,
}
DEFINITIONS = [
    "twice(x) {2*x}",
    "square(x) {x^2}",
    "minus_square(x) = {-x^2}",
    "divider(rtop,rbottom) 'rbottom/(rtop+rbottom)'",
    "difference(x, y) = 'x-y'",
    "three() {3}",
    "scaled(k) 1k+k*b",
    "choose(c,x,y) {c?x:y}",
    "inner(x) {twice(x)+1}",
    "first(x,y) {x}",
    "sqr(x) {x+1000}",
    "gauss(nominal,relative,sigma) {nominal}",
]
FUNCTIONS = {function.name: function for function in map(parse_netlist_function, DEFINITIONS)}

# Expression, and its value by Python's own arithmetic or by hand. Rules: ngspice-39 manual, section 2.9.5.
VALUES = {
    "sum": ("1+2*3", 7.0),
    "blanks and tabs": (" 1\t+ 2 ", 3.0),
    "brackets": ("(1+2)*3", 9.0),
    "from the left": ("8/4/2-3-2", 1.0 - 5.0),
    "modulo": ("5%3", 2.0),
    "modulo of a negative": ("(-5)%3", -2.0),
    "modulo by a negative": ("5%-3", 2.0),
    "modulo rounds its quotient": ("7%0.1", 0.0),
    "modulo of fractions": ("5.3%0.1", 5.3 - 52 * 0.1),
    "whole quotient": ("7.9\\2", 3.0),
    "whole quotient has no sign": ("(-5)\\3", 1.0),
    "whole quotient below a leading sign": ("-5\\3", -1.0),
    "power": ("2^0.5", math.sqrt(2)),
    "power with stars": ("2**3", 8.0),
    "power with parted stars": ("2 * * 3", 8.0),
    "powers from the left": ("2^3^2", 64.0),
    "powers of both kinds from the left": ("2**3^2", 64.0),
    "a base loses its sign": ("(-8)^3", 512.0),
    "a root of a negative base": ("(-8)^(1/3)", 2.0),
    "nothing to the power nothing": ("0^0", 1.0),
    "leading sign looser than power": ("-2^2", -4.0),
    "leading sign in brackets": ("(-2)^2", 4.0),
    "leading sign in an argument": ("max(-2^2,-5)", -4.0),
    "leading plus": ("+2^2", 4.0),
    "leading sign before a parameter": ("-a^b", -8.0),
    "leading sign before a bracket": ("-(1+2)^2", -9.0),
    "leading sign before a function": ("-sqrt(4)^2", -4.0),
    "a minus belongs to its number": ("2*-3^2", 18.0),
    "a minus belongs to its number in a sum": ("2+-3^2", 11.0),
    "a minus in an exponent": ("2^-2^2", 0.0625),
    "a minus behind a minus": ("2- -3", 5.0),
    "a minus behind a leading minus": ("--2", 2.0),
    "a minus behind a leading plus": ("+-2", -2.0),
    "a minus behind a comparison": ("1<-2^2", 1.0),
    "not": ("!0", 1.0),
    "not of anything else": ("!0.1", 0.0),
    "not not": ("!!5", 1.0),
    "not before power": ("!0^2+1", 2.0),
    "not before product": ("!0*5", 5.0),
    "not of a bracket": ("!(1-1)", 1.0),
    "minus not": ("-!0", -1.0),
    "less": ("1<2", 1.0),
    "less or equal": ("2<=2", 1.0),
    "greater": ("1>2", 0.0),
    "greater or equal": ("1 > = 2", 0.0),
    "equal": ("3==3.0", 1.0),
    "equal exactly": ("0.1+0.2==0.3", 0.0),
    "not equal": ("1!=2", 1.0),
    "not equal in brackets": ("1<>1", 0.0),
    "comparisons from the left": ("3>2>1", 0.0),
    "comparison below sum": ("1+1<3", 1.0),
    "and": ("2&&3", 1.0),
    "and nothing": ("2&&0", 0.0),
    "or": ("0.1||0", 1.0),
    "or nothing": ("0||zero", 0.0),
    "and before or": ("1||0&&0", 1.0),
    "comparison before and": ("1<2&&2<1", 0.0),
    "choice": ("a>b?10:20", 20.0),
    "choice below or": ("0||1?2:3", 2.0),
    "choice takes all": ("1?2:3+4", 2.0),
    "choices in a row": ("0?2:0?3:5", 5.0),
    "choices in a row, the second": ("0?2:1?0:5", 0.0),
    "choice in brackets": ("2*(1?2:3)", 4.0),
    "choice within a choice": ("1?(0?4:5):6", 5.0),
    "a minus in a choice": ("1?-2^2:3", 4.0),
    "what is not chosen may not exist": ("zero==0?7:1/zero", 7.0),
    "what is not chosen may overflow": ("ternary_fcn(1,2,exp(1000))", 2.0),
    "and is settled by its left": ("zero!=0&&1/zero>5", 0.0),
    "or is settled by its right": ("1/zero>5||1", 1.0),
    "exponent": ("1.5e-3", 0.0015),
    "capital exponent": ("1E+3", 1000.0),
    "points": ("5.+.5", 5.5),
    "tera": ("1t", 1e12),
    "giga": ("1G", 1e9),
    "mega": ("1MEG", 1e6),
    "megaohm": ("2.2megohm", 2.2e6),
    "kilo": ("4.7k", 4700.0),
    "big M is milli": ("1M", 1e-3),
    "mil is milli": ("1mil", 1e-3),
    "micro": ("3u", 3e-6),
    "micro sign": ("1µF", 1e-6),
    "nano": ("100n", 1e-7),
    "pico": ("1pF", 1e-12),
    "femto": ("1F", 1e-15),
    "no atto": ("1a", 1.0),
    "unit": ("5ohm+1V", 6.0),
    "ohm sign": ("1kΩ", 1000.0),
    "suffix behind an exponent": ("1e3k", 1e6),
    "letters behind a suffix": ("1kilo_ohm", 1000.0),
    "a suffix is a product": ("floor(1.001k)", 1000.0),
    "sum of suffixes": ("1k+2", 1002.0),
    "hexadecimal": ("0x10", 16.0),
    "hexadecimal digits before letters": ("0x1e+3", 33.0),
    "hexadecimal with a suffix": ("0X1fk", 31000.0),
    "hexadecimal fraction": ("0x1.8p3", 12.0),
    "leading noughts": ("0012", 12.0),
    "parameter": ("a*b", 6.0),
    "parameter in capitals": ("R_LEAK/A", 2350.0),
    "parameters named like suffixes": ("2*k+e", 10.5),
    "parameter with brackets": ("w[1]+1", 10.0),
    "square root": ("sqrt(2)", 1.4142135623730951),
    "blank before the bracket": ("SQRT (4)", 2.0),
    "exponential": ("exp(1)", math.e),
    "log is natural": ("log(10)", math.log(10)),
    "ln": ("ln(2)", math.log(2)),
    "log10": ("log10(1000)", 3.0),
    "sine": ("sin(1)", math.sin(1)),
    "cosine": ("cos(1)", math.cos(1)),
    "tangent": ("tan(1)", math.tan(1)),
    "arc sine": ("asin(1)", math.pi / 2),
    "arc cosine": ("acos(0)", math.pi / 2),
    "arc tangent": ("4*atan(1)", math.pi),
    "arctan": ("arctan(1)", math.pi / 4),
    "hyperbolic sine": ("sinh(1)", (math.e - 1 / math.e) / 2),
    "hyperbolic cosine": ("cosh(1)", (math.e + 1 / math.e) / 2),
    "hyperbolic tangent": ("tanh(1000)", 1.0),
    "area sine": ("asinh(1)", math.log(1 + math.sqrt(2))),
    "area cosine": ("acosh(1.25)", math.log(2)),
    "area tangent": ("atanh(0.6)", math.log(2)),
    "absolute": ("abs(-2)", 2.0),
    "sign of a negative": ("sgn(-0.1)", -1.0),
    "sign of nothing": ("sgn(0)", 0.0),
    "sign of a positive": ("sgn(7)", 1.0),
    "towards nothing": ("int(-2.7)", -2.0),
    "beyond integers": ("int(1e20)", 1e20),
    "half to even": ("nint(2.5)", 2.0),
    "half to even above": ("nint(3.5)", 4.0),
    "nearest of a negative": ("nint(-1.5)", -2.0),
    "floor": ("floor(-2.5)", -3.0),
    "ceiling": ("ceil(2.1)", 3.0),
    "least": ("min(-1,-2)", -2.0),
    "greatest": ("max(1,max(7,3))", 7.0),
    "pow keeps the sign": ("pow(-2,3)", -8.0),
    "pwr drops the sign": ("pwr(-2,3)", 8.0),
    "choice as a function": ("ternary_fcn(0,2,3)", 3.0),
    "user function": ("twice(3)", 6.0),
    "user function in capitals": ("TWICE(3)", 6.0),
    "user function keeps its argument together": ("twice(1+2)", 6.0),
    "user function keeps its body together": ("2^difference(3,1)*2", 8.0),
    "user function of a negative": ("square(-2)", 4.0),
    "user function with a leading sign": ("10-minus_square(3)", 19.0),
    "user function of two": ("10*divider(1k,3k)", 7.5),
    "user function of none": ("three()*2", 6.0),
    "user function with a bare body": ("scaled(2)", 1006.0),
    "user function within a user function": ("inner(twice(1))", 5.0),
    "user function with a choice": ("choose(a<b,-2^2,1)", -4.0),
    "user function behind a bracket": ("1?(twice(2)):1", 4.0),
    "user function of a comparison": ("twice((1==1))", 2.0),
    "an argument hides a parameter": ("scaled(k-4)", 1003.0),
    "an argument that is not used may not exist": ("first(1,1/zero)", 1.0),
    "a user function takes the place of a built-in one": ("sqr(1)", 1001.0),
    "a user function takes the place of a random one": ("gauss(4,0.1,3)", 4.0),
}


def evaluated(text: str) -> float:
    """The value with the parameters and functions above."""
    return parse_netlist_expression(text).evaluate(PARAMETERS.__getitem__, FUNCTIONS)


@pytest.mark.parametrize(("text", "expected"), VALUES.values(), ids=VALUES.keys())
def test_expressions_have_their_stated_value(text: str, expected: float) -> None:
    """The value is the one Python's arithmetic gives by the rules of the manual."""
    assert evaluated(text) == pytest.approx(expected, rel=4e-15, abs=0)


def ngspice_values(texts: Sequence[str]) -> list[float | None]:
    """What ngspice puts in place of each expression, None where it refuses the netlist.

    Read from the expanded listing: 16 digits, in one piece from the evaluator to the text.
    """
    parameters = [f".param {name}={value!r}" for name, value in PARAMETERS.items()]
    functions = [f".func {definition}" for definition in DEFINITIONS]
    sources = [f"V{number} level 0 DC {{{text}}}" for number, text in enumerate(texts)]
    lines = [
        "* expressions",
        *parameters,
        *functions,
        *sources,
        ".control",
        "listing expand",
        ".endc",
        ".end",
    ]
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "in.cir").write_text("\n".join(lines) + "\n", encoding="utf-8")
        subprocess.run(
            [os.environ.get("RCNET_NGSPICE") or "ngspice", "-b", "-n", "-o", "out.log", "in.cir"],
            cwd=folder,
            env={"PATH": os.environ["PATH"], "HOME": folder, "LC_ALL": "C"},
            stdin=subprocess.DEVNULL,
            capture_output=True,
            timeout=60,
            check=False,
        )
        log = Path(folder, "out.log").read_text(encoding="utf-8", errors="replace")
    listed = dict(re.findall(r"^ *\d+ : v(\d+) level 0 dc +(\S+)", log, re.MULTILINE))
    return [float(listed[str(number)]) if str(number) in listed else None for number in range(len(texts))]


@pytest.mark.ngspice
def test_ngspice_gives_the_stated_values() -> None:
    """What the table states is what ngspice computes."""
    computed = ngspice_values([text for text, _ in VALUES.values()])
    assert dict(zip(VALUES, computed, strict=True)) == {
        name: pytest.approx(expected, rel=1e-12, abs=0) for name, (_, expected) in VALUES.items()
    }


_ATOM = st.sampled_from(
    ["0", "1", "2", "3", "0.5", "7.25", "1e-3", "2k", "3.3meg", "5mil", "1u", "0x1f", "1kOhm"]
    + list(PARAMETERS) * 2
)
_OPERATOR = st.sampled_from(
    ["+", " - ", "*", "/", "^", "**", " % ", "\\", "<", ">", "<=", ">=", "==", "!=", "<>", " && ", "||"]
)
_CALLS = {
    1: "sqrt sin cos atan tanh abs sgn int nint floor ceil asinh twice square minus_square inner scaled sqr",
    2: "min max pow pwr divider difference",
    3: "ternary_fcn choose",
}


def _joined(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
    calls = [
        st.tuples(st.sampled_from(names.split()), st.tuples(*[inner] * count)).map(
            lambda call: f"{call[0]}({','.join(call[1])})"
        )
        for count, names in _CALLS.items()
    ]
    return st.one_of(
        st.tuples(inner, _OPERATOR, inner).map("".join),
        st.tuples(inner, _OPERATOR, inner).map("".join),
        st.tuples(inner, _OPERATOR, _ATOM.filter(lambda atom: atom[0] in "0123456789")).map("-".join),
        st.tuples(inner, inner, inner).map(lambda parts: "({}?{}:{})".format(*parts)),
        inner.map(lambda text: f"({text})"),
        inner.map(lambda text: f"(-{text})"),
        inner.map(lambda text: f"!({text})"),
        *calls,
    )


_EXPRESSION = st.recursive(_ATOM, _joined, max_leaves=8)


@pytest.mark.ngspice
@settings(deadline=None, max_examples=12, suppress_health_check=list(HealthCheck), derandomize=True)
@given(st.lists(_EXPRESSION, min_size=60, max_size=200, unique=True))
def test_whatever_has_a_value_has_it_in_ngspice_too(texts: list[str]) -> None:
    """No expression that is computed here is refused by ngspice or computed otherwise."""
    ours: dict[str, float] = {}
    for text in texts:
        try:
            ours[text] = evaluated(text)
        except QuantityError as error:
            assert error.remedy
    theirs = dict(zip(ours, ngspice_values(list(ours)), strict=True))
    assert len(ours) > len(texts) / 4
    assert theirs == {text: pytest.approx(value, rel=1e-12, abs=0) for text, value in ours.items()}


# Refused here and by ngspice: expression, the place, a piece of the message or its remedy.
REFUSED = {
    "blank": ("  ", None, "empty"),
    "fraction behind the suffix": ("4k7", 1, "'4.7k'"),
    "comma in a number": ("4,7", 2, "a number has a point"),
    "two points": ("1.5.2", 1, "one point"),
    "exponent with d": ("1d3", 1, "neither a number nor a name"),
    "fraction in an exponent": ("1e3.5", 1, "'1e3.5'"),
    "grouped digits": ("1_000", 1, "'1_000'"),
    "no hexadecimal digits": ("2*0xg", 3, "hexadecimal"),
    "point alone": (".", 1, "'.'"),
    "blank before the suffix": ("1 k", 3, "'k' does not belong"),
    "two numbers": ("2 3", 3, "'3'"),
    "bracket behind a number": ("2(3)", 2, "'('"),
    "too early an end": ("a*", 3, "ends too early"),
    "open bracket": ("2*(a", 3, "never closed"),
    "open call": ("2*sqrt(a", 7, "never closed"),
    "bracket too many": ("a)", 2, "')'"),
    "nothing in brackets": ("()", 2, "')'"),
    "no argument before a comma": ("max(,2)", 5, "','"),
    "no argument behind a comma": ("max(2,)", 7, "')'"),
    "two operators": ("2*/3", 3, "'/'"),
    "plus behind a minus": ("-+2", 2, "brackets"),
    "plus behind an operator": ("2*+3", 3, "brackets"),
    "minus behind not": ("!-1", 2, "brackets"),
    "minus before a parameter": ("b- -a", 4, "nothing but a number"),
    "minus before a function": ("2*-sqrt(9)", 3, "nothing but a number"),
    "function without brackets": ("2+sqrt", 3, "'sqrt(...)'"),
    "ends in a choice": ("1?2:", 5, "ends too early"),
    "nothing to choose": ("1?:3", 3, "condition ? one : other"),
    "open choice in a bracket": ("1?(2", 3, "never closed"),
    "comparison in the wrong order": ("1=<2", 2, "'=='"),
    "one ampersand": ("1&1", 2, "'&&'"),
    "one bar": ("1|1", 2, "'||'"),
    "square brackets": ("sqrt[4]*{a}", 9, "round brackets"),
    "other characters": ("1~2", 2, "no meaning"),
    "dollar": ("1$", 2, "no meaning"),
    "word operators": ("1 or 0", 3, "'or'"),
}


@pytest.mark.parametrize(("text", "at", "says"), REFUSED.values(), ids=REFUSED.keys())
def test_what_is_no_expression_is_refused_at_its_place(text: str, at: int | None, says: str) -> None:
    """The error names the character and what to do."""
    with pytest.raises(QuantityError) as caught:
        parse_netlist_expression(text)
    assert says in str(caught.value)
    assert caught.value.remedy
    if at is not None:
        assert caught.value.message.startswith(f"expression {text!r}, at character {at}: ")


@pytest.mark.ngspice
@pytest.mark.parametrize("text", [text for text, _, _ in REFUSED.values()], ids=REFUSED.keys())
def test_ngspice_refuses_them_too(text: str) -> None:
    """Nothing in the table above is refused although ngspice computes it."""
    assert ngspice_values([text, "1"]) == [None, None]


# Refused although ngspice computes something: expression, what it computes, a piece of the message or remedy.
NONSENSE = {
    "operator at the start": ("*2", 0.0, "'*'"),
    "comparison at the start": ("<2", 1.0, "'<'"),
    "third sign": ("2---3", 5.0, "nothing but a number"),
    "minus before a bracket": ("2*-(3)^2", 2 / 9, "nothing but a number"),
    "minus before a parameter": ("2*-a+5", -1.0, "nothing but a number"),
    "minus before not": ("2*-!0", 2.0, "nothing but a number"),
    "function without brackets": ("sqrt 4", 4.0, "'sqrt(...)'"),
    "choice without an else": ("1?2", 1.0, "no ':'"),
    "else without a choice": ("1:2", 1.0, "condition ? one : other"),
    "choice within a choice": ("1?0?4:5:6", 4.0, "brackets"),
    "comma in brackets": ("(1,2)", 2.0, "Only functions take commas"),
    "argument too many": ("max(1,5,3)", 3.0, "It takes two arguments."),
    "argument too few": ("pow(2)", 1.0, "It takes two arguments."),
    "two arguments for one": ("sqrt(1,2)", math.sqrt(2), "It takes one argument."),
    "exponent without digits": ("1e+a", 1.0, "no digits"),
    "hexadecimal exponent without digits": ("0x1pk", 1000.0, "no digits"),
    # Brackets on the line of a part, but refused by ngspice in .param and .func.
    "braces within braces": ("2*{3}", 6.0, "round brackets"),
    "sharp": ("1#2", 1.0, "no meaning"),
    "double quotes": ('"2"', 2.0, "no meaning"),
    "one equals sign": ("1=1", 1.0, "'=='"),
    "degree sign": ("1°", 1.0, "no meaning"),
    "Greek micro": ("1μ", 1.0, "'1μ'"),
    "too small a number": ("1e-400", 0.0, "4.9e-324"),
    "bare comparison for a user function": ("twice(1==1)", 0.0, "'(1==1)'"),
    "no argument for a user function": ("difference(,2)", -2.0, "','"),
}


@pytest.mark.parametrize(("text", "computed", "says"), NONSENSE.values(), ids=NONSENSE.keys())
def test_what_ngspice_misreads_is_refused(text: str, computed: float, says: str) -> None:
    """Text that ngspice computes as nobody reads it is an error with a remedy."""
    assert math.isfinite(computed)
    with pytest.raises(QuantityError) as caught:
        evaluated(text)
    assert says in str(caught.value)
    assert caught.value.remedy


@pytest.mark.ngspice
def test_ngspice_does_misread_them() -> None:
    """The reason for refusing each of them still holds."""
    computed = ngspice_values([text for text, _, _ in NONSENSE.values()])
    assert computed == [pytest.approx(value, rel=1e-12) for _, value, _ in NONSENSE.values()]


# Expression, the place, a piece of the message.
WITHOUT_VALUE = {
    "division by zero": ("1/zero", 2, "'/' divides by zero"),
    "modulo zero": ("5%zero", 2, "'%' divides by zero"),
    "whole quotient by zero": ("5\\0", 2, "divides by zero"),
    "zero to a negative power": ("0^-1", 2, "0 to the power -1.0"),
    "pow of zero": ("pow(0,-1)", 1, "0 to the power -1.0"),
    "root of a negative": ("1+sqrt(-1)", 3, "sqrt(-1.0)"),
    "power of a negative": ("pow(-2,0.5)", 1, "pow(-2.0, 0.5)"),
    "logarithm of zero": ("log(0)", 1, "log(0.0)"),
    "arc sine beyond one": ("asin(2)", 1, "asin(2.0)"),
    "area tangent of one": ("atanh(1)", 1, "atanh(1.0)"),
    "overflowing exponential": ("exp(1000)", 1, "1.8e308"),
    "overflowing power": ("9^9^9^9", 6, "1.8e308"),
    "overflowing product": ("1e200*1e200", 6, "1.8e308"),
    "overflowing modulo": ("1e300%1e-300", 6, "1.8e308"),
    "hidden in a maximum": ("max(5,1/zero)", 8, "divides by zero"),
    "hidden in a comparison": ("sqrt(-1)<5", 1, "sqrt(-1.0)"),
    "a condition": ("1/zero?2:3", 2, "divides by zero"),
    "what is chosen": ("1?1/zero:2", 4, "divides by zero"),
    "what and depends on": ("1&&1/zero", 5, "divides by zero"),
    "what or depends on": ("1/zero||0", 2, "divides by zero"),
    "an argument that is used": ("twice(1/zero)", 8, "divides by zero"),
    "no function": ("2*foo(1)", 3, "'foo' is no function"),
    "no fabs": ("fabs(-1)", 1, "Known functions: abs, acos"),
    "parameter as a function": ("a(2)", 1, "'a' is no function"),
    "random": ("agauss(1,2,3)", 1, "agauss() draws a random number"),
    "random limit": ("limit(5,1)", 1, "every run differs"),
    "random where it is not chosen": ("1?2:unif(1,2)", 5, "every run differs"),
    "user function with too many arguments": ("twice(1,2)", 1, "two arguments. It takes one argument."),
    "user function with none": ("difference()", 1, "no argument. It takes two arguments."),
    "user function without brackets": ("twice*2", 1, "'twice'"),
    "user function behind a question mark": ("1? twice(2):3", 4, "directly behind '?'"),
    "user function behind a percent sign": ("5%twice(2)", 3, "'(twice(...))'"),
    "user function behind and": ("1&&twice(2)", 4, "directly behind '&&'"),
    "user function behind not": ("!twice(2)", 2, "directly behind '!'"),
}


@pytest.mark.parametrize(("text", "at", "says"), WITHOUT_VALUE.values(), ids=WITHOUT_VALUE.keys())
def test_what_has_no_value_is_refused_at_its_place(text: str, at: int, says: str) -> None:
    """No expression returns nan or infinity, nor a number that differs from run to run."""

    def names(name: str) -> float:
        if name not in PARAMETERS:
            raise QuantityError(
                f"expression {text!r}, at character 1: {name!r} is not defined.", remedy="Do."
            )
        return PARAMETERS[name]

    with pytest.raises(QuantityError) as caught:
        parse_netlist_expression(text).evaluate(names, FUNCTIONS)
    assert says in str(caught.value)
    assert caught.value.message.startswith(f"expression {text!r}, at character {at}: ")
    assert caught.value.remedy


@pytest.mark.ngspice
@pytest.mark.parametrize(
    "text", ["1?twice(2):3", "5%twice(2)", "1&&twice(2)", "!twice(2)", "twice(1,2)", "fabs(1)"]
)
def test_ngspice_does_not_see_these_functions(text: str) -> None:
    """Functions that are refused for where they stand are refused by ngspice."""
    assert ngspice_values([text]) == [None]


def test_names_are_the_parameters_in_lower_case() -> None:
    """Functions, suffixes and choices are no names; `temper` and `pi` are ordinary ones."""
    expression = parse_netlist_expression("A*sqrt(b)+2k+temper+PI+f(x1.r)+(c?d:0)")
    assert expression.names == {"a", "b", "temper", "pi", "x1.r", "c", "d"}


def test_expressions_are_frozen_and_comparable() -> None:
    """Two readings of one expression are equal, and neither can be changed."""
    expression = parse_netlist_expression("2*a")
    assert expression == parse_netlist_expression("2*a")
    assert expression.text == "2*a"
    with pytest.raises(dataclasses.FrozenInstanceError):
        expression.text = "3*a"  # type: ignore[misc]


def test_an_undefined_parameter_is_the_callers_error() -> None:
    """What `names` raises passes through, also from a branch that is not chosen."""

    def names(name: str) -> float:
        raise CircuitError(f"the parameter {name!r} is not defined.", remedy="Define it.")

    with pytest.raises(CircuitError, match="'r9' is not defined"):
        parse_netlist_expression("1?2:R9").evaluate(names)


@pytest.mark.parametrize("value", [math.nan, math.inf, "big", None, 10**400])
def test_a_parameter_stands_for_a_finite_number(value: object) -> None:
    """What is given for a parameter must be a finite number where it is needed."""
    with pytest.raises(QuantityError, match=r"at character 3: the parameter 'a' is .* not a finite number"):
        parse_netlist_expression("2*a").evaluate(lambda name: value)  # type: ignore[arg-type, return-value]
    assert parse_netlist_expression("1?2:a").evaluate(lambda name: value) == 2  # type: ignore[arg-type, return-value]


# A .func's text, its name, its arguments, the text of its body.
DEFINED = {
    "braces": ("f(a,b) {a*b}", "f", ("a", "b"), "a*b"),
    "equals sign": ("f(a,b) = {a*b}", "f", ("a", "b"), "a*b"),
    "quotes": ("f(a) 'a+1'", "f", ("a",), "a+1"),
    "equals sign and quotes": ("f(a)='a+1'", "f", ("a",), "a+1"),
    "bare": ("f(a) = 1+a", "f", ("a",), "1+a"),
    "bare in brackets": ("f(a) (1+a)*2", "f", ("a",), "(1+a)*2"),
    "capitals and blanks": (" F_1 ( A , Bee ) { A } ", "f_1", ("a", "bee"), " A "),
    "no arguments": ("f() {5}", "f", (), "5"),
}


@pytest.mark.parametrize(("text", "name", "arguments", "body"), DEFINED.values(), ids=DEFINED.keys())
def test_functions_are_read(text: str, name: str, arguments: tuple[str, ...], body: str) -> None:
    """Name and arguments come in lower case, the body as an expression."""
    expected = NetlistFunction(name, arguments, parse_netlist_expression(body))
    assert parse_netlist_function(text) == expected


UNDEFINABLE = {
    "empty": ("", "'f(a,b) {a*b}'"),
    "no brackets": ("f {5}", "arguments in brackets"),
    "open bracket": ("f(a {a}", "arguments in brackets"),
    "number as an argument": ("f(1) {5}", "'1' is no name"),
    "argument missing": ("f(a,) {5}", "'' is no name"),
    "argument twice": ("f(x,X) {x}", "'x' stands there twice"),
    "argument named as a function": ("f(max) {max+1}", "'max' is the name of a function"),
    "no body": ("f(x)", "no body"),
    "empty body": ("f(x) = { }", "no body"),
    "body in pieces": ("f(x) {x} + 1", "at character 1: '{' has no meaning"),
    "braces in the body": ("f(x) {{x}+1}", "at character 1: '{' has no meaning"),
    "wrong body": ("f(x) {x+}", "expression 'x+', at character 3"),
    "too long": (f"f(x) {{{'x+' * 1000}1}}", "2000 characters"),
}


@pytest.mark.parametrize(("text", "says"), UNDEFINABLE.values(), ids=UNDEFINABLE.keys())
def test_what_is_no_function_is_refused(text: str, says: str) -> None:
    """The error says what is wrong with the .func and what to write."""
    with pytest.raises(QuantityError) as caught:
        parse_netlist_function(text)
    assert says in str(caught.value)
    assert caught.value.remedy


def defined(*texts: str) -> dict[str, NetlistFunction]:
    """The functions by name."""
    return {function.name: function for function in map(parse_netlist_function, texts)}


def test_the_place_of_an_error_in_a_function_is_in_its_body() -> None:
    """An error within a .func quotes the body it stands in."""
    with pytest.raises(QuantityError, match=r"expression '1\+1/x', at character 4"):
        parse_netlist_expression("2*f(0)").evaluate(PARAMETERS.__getitem__, defined("f(x) {1+1/x}"))


def test_functions_must_not_call_themselves() -> None:
    """Recursion ends with one sentence, also over two functions; a function of its own value is none."""
    expression = parse_netlist_expression("f(1)")
    with pytest.raises(QuantityError, match="'f' calls itself"):
        expression.evaluate(PARAMETERS.__getitem__, defined("f(x) {x>9?x:f(x+1)}"))
    with pytest.raises(QuantityError, match="'f' calls itself"):
        expression.evaluate(PARAMETERS.__getitem__, defined("f(x) {g(x)}", "g(x) {f(x)}"))
    twice = parse_netlist_expression("f(f(f(1)))")
    assert twice.evaluate(PARAMETERS.__getitem__, defined("f(x) {2*x}")) == 8


def test_functions_cannot_multiply_without_end() -> None:
    """Sixty functions that each call the next one twice end at once, as does a chain of a thousand."""
    doubling = defined(*(f"f{n}(x) {{f{n + 1}(x)+f{n + 1}(x)}}" for n in range(60)), "f60(x) {x}")
    chain = defined(*(f"f{n}(x) {{f{n + 1}(x)}}" for n in range(1000)), "f1000(x) {x}")
    expression = parse_netlist_expression("f0(1)")
    start = time.perf_counter()
    with pytest.raises(QuantityError, match="more than 100000 steps"):
        expression.evaluate(PARAMETERS.__getitem__, doubling)
    with pytest.raises(QuantityError, match="more than 100 levels"):
        expression.evaluate(PARAMETERS.__getitem__, chain)
    assert time.perf_counter() - start < 5
    last = parse_netlist_expression("f901(1)")
    assert last.evaluate(PARAMETERS.__getitem__, chain) == 1


def test_long_and_deep_expressions_stay_within_the_stack() -> None:
    """A thousand terms and a hundred levels are computed; a character or a level more is refused."""
    assert evaluated("+".join(["1"] * 1000)) == 1000
    assert evaluated("0?2:" * 400 + "3") == 3
    assert evaluated("!" * 1001 + "0") == 1
    deep = "0||1&&1==1+0*1^("
    assert evaluated(deep * 100 + "1" + ")" * 100) == 1
    assert evaluated("max(1," * 100 + "2" + ")" * 100) == 2
    with pytest.raises(QuantityError, match="at character 102: more than 100 levels"):
        evaluated("(" * 101 + "1" + ")" * 101)
    with pytest.raises(QuantityError, match="2000 characters"):
        evaluated("1" * 2001)
    with pytest.raises(QuantityError, match=r"'1e9999' is beyond 1\.8e308"):
        evaluated("1e9999")
    with pytest.raises(QuantityError, match=r"beyond 1\.8e308"):
        evaluated("1e308k")


@pytest.mark.parametrize("text", [None, 5, b"1+2"])
def test_only_text_is_read(text: object) -> None:
    """Anything else than text is an error of the same kind."""
    with pytest.raises(QuantityError, match="is not text"):
        parse_netlist_expression(text)  # type: ignore[arg-type]
    with pytest.raises(QuantityError, match="is not text"):
        parse_netlist_function(text)  # type: ignore[arg-type]


@settings(deadline=None, max_examples=600)
@given(st.text(max_size=20) | st.text("12ab0xeEkp(),.+-*/^%\\<>=!&|?: sqrtmaxf{}'\t", max_size=24))
def test_any_text_is_computed_or_refused(text: str) -> None:
    """No text brings anything but a finite number or a QuantityError with a remedy."""
    functions = defined("f(x) {x/a}", "a(b,x) {b^x}")
    acts: list[Callable[[], float]] = [
        lambda: parse_netlist_expression(text).evaluate(lambda name: float(len(name)), functions),
        lambda: parse_netlist_function(f"f(a) {text}").body.evaluate(lambda name: 0.0, functions),
        lambda: parse_netlist_function(text).body.evaluate(lambda name: -1.0, functions),
    ]
    for act in acts:
        try:
            assert math.isfinite(act())
        except QuantityError as error:
            assert error.remedy
