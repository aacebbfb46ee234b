"""Formulas in part names that know their own value: what a rule says and what it gives cannot differ."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

# How tightly a text binds: what stands around it decides whether it needs brackets.
_SUM, _PRODUCT, _POWER, _ATOM = range(4)
_SORTED = 64  # names in a sum that are put in order; nobody sees the middle of longer ones
MOST_SHOWN = 6  # terms of a sum written out; of more, the first ones and how many there are


@dataclass(frozen=True, slots=True)
class Formula:
    """A formula with its value.

    text: as a hand formula of a circuit file has it, `1/(2*pi*R1*C1)`; a sum of very many terms is cut short
    tex: the same for TeX's mathematics; value: in base units; rank: how tightly the text binds
    beside, terms: what it is made of, where it is a `parallel(...)` or a sum
    """

    text: str
    tex: str
    value: float
    rank: int = _ATOM
    beside: tuple[Formula, ...] = ()
    terms: tuple[Formula, ...] = ()

    def __add__(self, other: Formula) -> Formula:
        return total([*(self.terms or (self,)), *(other.terms or (other,))], most=1000)

    def __sub__(self, other: Formula) -> Formula:
        text, tex = other._inside(_PRODUCT)
        return Formula(f"{self.text} - {text}", f"{self.tex} - {tex}", self.value - other.value, _SUM)

    def __mul__(self, other: Formula) -> Formula:
        if self.text == "1":
            return other
        if other.text == "1":
            return self
        (text, tex), (right, right_tex) = self._inside(_PRODUCT), other._inside(_PRODUCT)
        joint = r" \cdot " if right_tex[:1].isdigit() else r"\,"
        return Formula(f"{text}*{right}", f"{tex}{joint}{right_tex}", self.value * other.value, _PRODUCT)

    def __truediv__(self, other: Formula) -> Formula:
        if other.text == "1":
            return self
        text, below = self._inside(_PRODUCT)[0], other._inside(_POWER)[0]
        return Formula(
            f"{text}/{below}", rf"\frac{{{self.tex}}}{{{other.tex}}}", self.value / other.value, _PRODUCT
        )

    def __pow__(self, power: int) -> Formula:
        text, tex = self._inside(_ATOM)
        return Formula(f"{text}^{power}", f"{tex}^{{{power}}}", self.value**power, _POWER)

    def _inside(self, rank: int) -> tuple[str, str]:
        """Text and TeX as they stand where something binds as tightly as `rank`."""
        if self.rank >= rank:
            return self.text, self.tex
        return f"({self.text})", rf"\left({self.tex}\right)"


PI = Formula("pi", r"\pi", math.pi)
ONE = Formula("1", "1", 1.0)
BOLTZMANN = Formula("k_B", r"k_\mathrm{B}", 1.380649e-23)


def name(text: str, value: float) -> Formula:
    """A part, or another named quantity, with its value."""
    return Formula(text, name_tex(text), value)


def number(value: float, digits: int = 15) -> Formula:
    """A plain number, rounded to so many digits; the value is what is written."""
    text = f"{value:.{digits}g}"
    mantissa, _, exponent = text.partition("e")
    tex = rf"{mantissa} \cdot 10^{{{int(exponent)}}}" if exponent else text
    return Formula(text, tex, float(text), _ATOM if value >= 0 and not exponent else _PRODUCT)


def told(text: str, tex: str, value: float) -> Formula:
    """Something that no short formula says, in words of its own."""
    return Formula(text, tex, value)


def sqrt(inner: Formula) -> Formula:
    """The square root."""
    return Formula(f"sqrt({inner.text})", rf"\sqrt{{{inner.tex}}}", math.sqrt(inner.value))


def log(inner: Formula) -> Formula:
    """The natural logarithm, which hand formulas call `log`."""
    return Formula(f"log({inner.text})", rf"\ln\left({inner.tex}\right)", math.log(inner.value))


def one_less_exp(inner: Formula) -> Formula:
    """1 - exp(-inner), small ones with all their digits."""
    text = inner._inside(_PRODUCT)
    return Formula(f"1 - exp(-{text[0]})", f"1 - e^{{-{text[1]}}}", -math.expm1(-inner.value), _SUM)


def parallel(*parts: Formula) -> Formula:
    """What resistances side by side, or capacitances in a row, come to."""
    if len(parts) == 1:
        return parts[0]
    every = _in_order(each for part in parts for each in (part.beside or (part,)))
    shown = [part.text for part in every[:MOST_SHOWN]]
    texs = [part._inside(_PRODUCT)[1] for part in every[:MOST_SHOWN]]
    if len(every) > MOST_SHOWN:
        shown.append(f"... {len(every)} in all")
        texs.append(r"\cdots")
    smallest = min(abs(part.value) for part in every)
    value = smallest / math.fsum(smallest / part.value for part in every)
    tex = r" \parallel ".join(texs)
    return Formula(f"parallel({', '.join(shown)})", rf"\left({tex}\right)", value, _ATOM, every)


def _in_order(parts: Iterable[Formula]) -> tuple[Formula, ...]:
    """By name where all are names and not too many, R2 before R10; else as they come."""
    every = tuple(parts)
    if len(every) > _SORTED or any(part.rank != _ATOM or part.beside for part in every):
        return every
    return tuple(sorted(every, key=lambda part: natural(part.text)))


def natural(text: str) -> list[tuple[int, str]]:
    """A key that sorts R2 before R10."""
    return [(int(piece), "") if piece.isdecimal() else (0, piece) for piece in re.split(r"([0-9]+)", text)]


def total(terms: Sequence[Formula], most: int = MOST_SHOWN) -> Formula:
    """A sum; of many terms only the first ones and the last are written out."""
    if len(terms) == 1:
        return terms[0]
    terms = _in_order(terms)
    shown = list(terms) if len(terms) <= most else [*terms[:2], terms[-1]]
    texts, texs = [term.text for term in shown], [term.tex for term in shown]
    if len(terms) > most:
        texts[2:2], texs[2:2] = [f"... {len(terms) - 3} more ..."], [r"\cdots"]
    value = math.fsum(term.value for term in terms)
    return Formula(" + ".join(texts), " + ".join(texs), value, _SUM, terms=terms)


def product(factors: Iterable[Formula]) -> Formula:
    """A product; 1 where there is no factor."""
    answer = ONE
    for factor in factors:
        answer = answer * factor
    return answer


def name_tex(text: str) -> str:
    """A part's name in TeX: R1 as R with the index 1, Rload with the index "load" in upright letters."""
    # A netlist may call its parts anything; what TeX would act upon is taken for what it looks like.
    safe = re.sub(r"[^A-Za-z0-9.+-]", lambda mark: r"\_" if mark[0] == "_" else r"\cdot ", text)
    head, rest = safe[:1], safe[1:]
    if not rest:
        return head
    return f"{head}_{{{rest}}}" if rest.isdigit() else rf"{head}_\mathrm{{{rest}}}"
