"""Reading one part from text: a line of `[parts]` or a section of a ladder."""

from __future__ import annotations

from dataclasses import dataclass, replace

from ..errors import CircuitError, QuantityError
from ..values import Tolerance, classify_extra, parse_quantity, parse_rating, parse_tempco, parse_tolerance
from .names import check_name
from .parts import KINDS, Part
from .shown import shown


@dataclass(frozen=True, slots=True)
class Section:
    """One section of a ladder: a part along the way (`series`) or from here to ground."""

    series: bool
    part: Part


def parse_section(text: str) -> Section:
    """Read `"series R2 10k 1%"` or `"shunt C2 4n7 5%"`. The part has no nodes yet. Raises CircuitError."""
    words = text.split() if isinstance(text, str) else []
    if len(words) < 3 or words[0] not in ("series", "shunt"):
        raise CircuitError(
            f"the section {shown(text)} cannot be read.",
            remedy='Write "series R2 10k 1%" or "shunt C2 4n7 5%".',
        )
    check_name(words[1], "part name")
    letter = words[1][0].upper()
    if letter not in "RCL":
        raise CircuitError(
            f"the section {shown(text)} holds no R, C or L.", remedy="Only those stand in a ladder."
        )
    return Section(words[0] == "series", read_value_and_extras(words[1], letter, (), None, words[2:]))


def parse_part(name: str, text: str) -> Part:
    """Read what stands behind `NAME =` in `[parts]`: nodes, value, then extras in any order.

    E and G take four nodes; F and H take two nodes and the voltage source they sense; K takes the two
    inductors it couples. Raises CircuitError.
    """
    check_name(name, "part name")
    letter = name[:1].upper()
    kind = KINDS.get(letter)
    if kind is None or kind.is_source:
        where = (
            "Put sources under [sources.NAME]." if kind else f"Known first letters: {' '.join('RCLEGFHK')}."
        )
        raise CircuitError(f"{shown(name)} cannot stand in [parts].", remedy=where)
    words = text.split()
    lead = kind.nodes + (1 if kind.senses_branch else 0) + (2 if kind.couples else 0)
    if len(words) < lead + 1:
        raise CircuitError(
            f"{name} = {shown(text)} is too short for a {kind.name}.", remedy=f"Write {_pattern(letter)}."
        )
    senses = words[kind.nodes] if kind.senses_branch else None
    part = read_value_and_extras(name, letter, tuple(words[: kind.nodes]), senses, words[lead:])
    return replace(part, couples=(words[0], words[1])) if kind.couples else part


def _pattern(letter: str) -> str:
    middle = {"E": "a b control_a control_b gain", "G": "a b control_a control_b siemens"}
    middle |= {"F": "a b Vsense gain", "H": "a b Vsense ohms", "K": "L1 L2 coefficient"}
    return f'{letter}1 = "{middle.get(letter, "node node value [tolerance] [rating] [tempco]")}"'


def read_value_and_extras(
    name: str, letter: str, nodes: tuple[str, ...], senses: str | None, words: list[str]
) -> Part:
    """A part from the words behind its nodes. A unit may stand apart from its number (`4.7 kohm`)."""
    kind = KINDS[letter]
    value, rest = _leading_quantity(words, kind.unit, name)
    try:
        tolerance, rating, tempco = _extras(name, letter, value, rest)
    except QuantityError as exc:
        raise CircuitError(f"{name}: {exc.message}", remedy=exc.remedy) from exc
    return Part(name, letter, nodes, value, senses, tolerance, rating, tempco)


def _leading_quantity(words: list[str], unit: str, name: str) -> tuple[float, list[str]]:
    # "4.7 kohm" is one quantity in two words; "10k 5%" is a value and a tolerance. Longest reading first.
    if len(words) > 1:
        try:
            return parse_quantity(f"{words[0]} {words[1]}", unit, name), words[2:]
        except QuantityError:
            # Letters behind a bare number are a unit, and one that does not fit; one letter is a tolerance.
            if words[0][-1:].isdigit() and words[1].isalpha() and len(words[1]) > 1:
                raise
    return parse_quantity(words[0], unit, name), words[1:]


def _extras(
    name: str, letter: str, value: float, words: list[str]
) -> tuple[Tolerance | None, tuple[float, str] | None, float | None]:
    tolerance, rating, tempco = None, None, None
    for word in words:
        what = classify_extra(word) if KINDS[letter].is_passive else "nothing"
        if what == "tolerance" and tolerance is None:
            tolerance = parse_tolerance(word, kind=letter, nominal=value)
        elif what == "rating" and rating is None:
            rating = parse_rating(word)
        elif what == "tempco" and tempco is None:
            tempco = parse_tempco(word)
        else:
            twice = what in ("tolerance", "rating", "tempco")
            raise CircuitError(
                f"{name} has a second {what}, {shown(word)}."
                if twice
                else f"{name}: {shown(word)} means nothing after the value.",
                remedy="After the value may stand a tolerance (1%), a rating (0.1W) and a tempco (100ppm).",
            )
    return tolerance, rating, tempco
