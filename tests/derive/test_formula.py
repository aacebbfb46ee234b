"""Formulas: what they say is what they give."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.derive import formula as f
from rcnet.derive.formula import Formula
from rcnet.values import parse_expression

NAMES = {"R1": 4700.0, "R2": 10e3, "R10": 22e3, "C1": 10e-9, "Rload": 1e6}
LEAVES = st.sampled_from(
    [f.name(k, v) for k, v in NAMES.items()] + [f.PI, f.ONE, f.number(2.5), f.number(3e-7)]
)


def _grown(inner: st.SearchStrategy[Formula]) -> st.SearchStrategy[Formula]:
    pairs = st.tuples(inner, inner)
    return st.one_of(
        pairs.map(lambda p: p[0] + p[1]),
        pairs.map(lambda p: p[0] * p[1]),
        pairs.map(lambda p: p[0] / p[1]),
        inner.map(lambda x: x**2),
        pairs.map(lambda p: f.parallel(p[0] * p[0], p[1] * p[1])),
        inner.map(lambda x: f.sqrt(x * x)),
        pairs.map(lambda p: f.total([p[0], p[1], p[0]])),
    )


@settings(deadline=None, max_examples=200)
@given(st.recursive(LEAVES, _grown, max_leaves=12).filter(lambda x: 0 < abs(x.value) < 1e100))
def test_text_has_the_value(formula: Formula) -> None:
    """A formula's text, read as a hand formula of a circuit file, has the formula's value."""
    if "..." in formula.text or len(formula.text) > 1500:
        return
    read = parse_expression(formula.text).evaluate(NAMES)

    assert read == pytest.approx(formula.value, rel=1e-6)


@pytest.mark.parametrize(
    ("formula", "text", "tex"),
    [
        (
            f.ONE / (f.number(2) * f.PI * f.name("R1", 1) * f.name("C1", 1)),
            "1/(2*pi*R1*C1)",
            r"\frac{1}{2\,\pi\,R_{1}\,C_{1}}",
        ),
        (f.name("R10", 1) + f.name("R2", 2), "R2 + R10", "R_{2} + R_{10}"),
        (
            f.parallel(f.parallel(f.name("Rb", 1), f.name("Ra", 1)), f.name("Rc", 1)),
            "parallel(Ra, Rb, Rc)",
            None,
        ),
        ((f.name("R1", 1) + f.name("R2", 1)) ** 2, "(R1 + R2)^2", r"\left(R_{1} + R_{2}\right)^{2}"),
        (f.name("R1", 3) - (f.name("R2", 1) + f.ONE), "R1 - (1 + R2)", None),
        (f.one_less_exp(f.name("T", 1) / f.name("tau", 2)), "1 - exp(-T/tau)", None),
        (f.name("R_x%1", 1), "R_x%1", r"R_\mathrm{\_x\cdot 1}"),
    ],
)
def test_texts(formula: Formula, text: str, tex: str | None) -> None:
    """Formulas read as people write them, in order of their names, and TeX as it sets them."""
    assert formula.text == text
    if tex is not None:
        assert formula.tex == tex


def test_long_sums_are_cut() -> None:
    """Of many terms the first ones and the last are shown; the value is that of all."""
    summed = f.total([f.name(f"R{k}", 1.0) for k in range(1, 51)])

    assert summed.text == "R1 + R2 + ... 47 more ... + R50"
    assert summed.value == 50
    assert math.isclose(f.parallel(*[f.name(f"R{k}", 50.0) for k in range(50)]).value, 1.0)
