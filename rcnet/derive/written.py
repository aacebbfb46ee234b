"""The transfer function in part names, normalised: H = K s^n (1 + b1 s + ...) / (1 + a1 s + ...)."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from ..exact import Coefficient, Term, TransferFunction
from . import polynomials as poly
from .formula import name_tex


@dataclass(frozen=True, slots=True)
class Number:
    """One coefficient of the normalised form. name: `K`, `b2`, `a1`; power: of the second its unit holds."""

    name: str
    text: str
    tex: str
    value: float
    power: int = 0


@dataclass(frozen=True)
class Written:
    """A transfer function as people write it.

    text, tex: the ratio of two polynomials in s; origin: n; gain: K, with unit 1/s^n in front of s^n
    numerator, denominator: b1, b2, ... and a1, a2, ..., those that are zero left out
    highest: text and TeX of what H comes to, over a power of s, far above every corner
    """

    text: str
    tex: str
    origin: int
    gain: Number
    numerator: tuple[Number, ...]
    denominator: tuple[Number, ...]
    highest: tuple[str, str]
    function: TransferFunction


def written(function: TransferFunction) -> Written | None:
    """The normalised form; None where the response is zero."""
    values = dict(function.values)
    above, below = (poly.numbers(side, values) for side in (function.numerator, function.denominator))
    if not above:
        return None
    m, n = poly.power_of_s(above), poly.power_of_s(below)
    first_above, first_below = function.numerator[m], function.denominator[n]
    sides = []
    for letter, side, exact, start in (
        ("b", function.numerator, above, m),
        ("a", function.denominator, below, n),
    ):
        sides.append(
            tuple(
                _ratio(
                    f"{letter}{k - start}", side[k], side[start], _float(exact[k] / exact[start]), k - start
                )
                for k in range(start + 1, len(exact))
                if side[k].terms
            )
        )
    top = _ratio("", function.numerator[len(above) - 1], function.denominator[len(below) - 1], 0.0, 0)
    return Written(
        str(function),
        _fraction(_polynomial_tex(function.numerator), _polynomial_tex(function.denominator)),
        m - n,
        _ratio("K", first_above, first_below, _float(above[m] / below[n]), m - n),
        sides[0],
        sides[1],
        (top.text, top.tex),
        function,
    )


def _float(value: Fraction) -> float:
    try:
        return float(value)
    except OverflowError:
        return math.inf


def _ratio(name: str, above: Coefficient, below: Coefficient, value: float, power: int) -> Number:
    above, below = _without_common(above, below)
    text, tex = str(above), _coefficient_tex(above)
    if _is_one(below):
        return Number(name, text, tex, value, power)
    if len(above.factored) == 1 and len(above.terms) > 1:
        text = f"({text})"
    return Number(name, f"{text}/({below})", _fraction(tex, _coefficient_tex(below)), value, power)


def _without_common(above: Coefficient, below: Coefficient) -> tuple[Coefficient, Coefficient]:
    """Both without the part names and the sums that they share as factors."""
    first, second = (_lead_and_sums(side) for side in (above, below))
    sums = [piece for piece in first[1] if piece not in second[1]]
    others = [piece for piece in second[1] if piece not in first[1]]
    mine = Counter(first[0].above) + Counter(second[0].below)
    theirs = Counter(second[0].above) + Counter(first[0].below)
    divisor = math.gcd(first[0].count, second[0].count) * (-1 if second[0].count < 0 else 1)
    return (
        _joined(Term(first[0].count // divisor, tuple((mine - theirs).elements())), sums),
        _joined(Term(second[0].count // divisor, tuple((theirs - mine).elements())), others),
    )


def _lead_and_sums(coefficient: Coefficient) -> tuple[Term, list[tuple[Term, ...]]]:
    factored = coefficient.factored
    if len(factored) == 1 and len(factored[0]) > 1:
        return Term(1, ()), [factored[0]]
    return factored[0][0], list(factored[1:])


def _joined(lead: Term, sums: list[tuple[Term, ...]]) -> Coefficient:
    if len(sums) == 1 and lead.is_one and lead.count > 0:
        return Coefficient(sums[0], (sums[0],))
    return Coefficient((lead,), ((lead,), *sums))


def _is_one(coefficient: Coefficient) -> bool:
    factored = coefficient.factored
    return factored != () and len(factored) == len(factored[0]) == 1 and _is_plain_one(factored[0][0])


def _is_plain_one(term: Term) -> bool:
    return term.is_one and term.count > 0


# ---------------------------------------------------------------------- TeX


def _fraction(above: str, below: str) -> str:
    return above if below == "1" else rf"\frac{{{above}}}{{{below}}}"


def _polynomial_tex(coefficients: Sequence[Coefficient]) -> str:
    text = ""
    for power, coefficient in enumerate(coefficients):
        if not coefficient.terms:
            continue
        body = _coefficient_tex(coefficient)
        if power:
            s = "s" if power == 1 else f"s^{{{power}}}"
            if _is_one(coefficient):
                body = s
            elif coefficient.is_sum:
                body = rf"\left({body}\right) {s}"
            else:
                body = f"{body} {s}"
        text = _followed_by(text, body)
    return text or "0"


def _coefficient_tex(coefficient: Coefficient) -> str:
    if len(coefficient.factored) <= 1:
        return _sum_tex(coefficient.factored[0]) if coefficient.factored else "0"
    lead = coefficient.factored[0][0]
    sums = [rf"\left({_sum_tex(piece)}\right)" for piece in coefficient.factored[1:]]
    sign = "-" if lead.count < 0 else ""
    return sign + r" \, ".join(sums if lead.is_one else [_term_tex(lead), *sums])


def _sum_tex(terms: Sequence[Term]) -> str:
    text = ""
    for term in terms:
        text = _followed_by(text, ("-" if term.count < 0 else "") + _term_tex(term))
    return text


def _followed_by(text: str, body: str) -> str:
    if not text:
        return body
    return f"{text} - {body[1:]}" if body.startswith("-") else f"{text} + {body}"


def _term_tex(term: Term) -> str:
    above = r" \, ".join(name_tex(name) for name in term.above)
    if abs(term.count) != 1 or not above:
        above = rf"{abs(term.count)} \, {above}" if above else str(abs(term.count))
    return _fraction(above, r" \, ".join(name_tex(name) for name in term.below) or "1")
