"""Rules of thumb about bands, notches, half turns, and the corners of lead and lag sections."""

from __future__ import annotations

import math
from collections.abc import Iterator

from ..errors import UndecidedError
from . import exact_numbers as exact
from .case import WIDE, Case, Stated
from .corner_rules import ALIKE, SAME_PARTS, TWO_PI, corner, differ_by, equal_parts, spread
from .formula import ONE, Formula, number, parallel, product, sqrt, total
from .shape import Section


def section_edges(case: Case) -> Iterator[Stated]:
    """Each edge of a band from its own section, as if the other were not there."""
    chain = case.chain
    if chain is None or sorted(s.kind for s in chain.sections) != ["high-pass", "low-pass"]:
        return
    isolated, because = case.isolation()
    taus = {s.kind: s.time_constant for s in chain.sections}
    low, high = taus["low-pass"], taus["high-pass"]
    if low is None or high is None:
        return
    ratio = high.value / low.value
    if isolated and ratio < WIDE:
        isolated, because = (
            False,
            f"the corners lie {ratio:.3g} to 1 apart; edges of their own want more than {WIDE:g} to 1.",
        )
    yield case.stated(corner(high), "cutoff", isolated, because, edge="lower")
    yield case.stated(corner(low), "cutoff", isolated, because, edge="upper")


def _band_parts(case: Case) -> tuple[Formula, Formula, Formula, Formula, bool] | None:
    """R1, C1, R2, C2 of a band-pass of two unloaded sections, and whether R1 and C1 form one arm (Wien)."""
    chain = case.chain
    if chain is None:
        return None
    kinds = [section.kind for section in chain.sections]
    parts: list[Formula | None] = []
    if kinds == ["band-pass"]:
        only = chain.sections[0]
        parts = [
            only.series.resistance,
            only.series.capacitance,
            only.shunt.resistance,
            only.shunt.capacitance,
        ]
    elif kinds in (["high-pass", "low-pass"], ["low-pass", "high-pass"]) and not chain.buffers:
        for section in chain.sections:
            r, c = section.series.kind, section.shunt.kind
            if {r, c} != {"R", "C"}:
                return None
            parts += [
                section.series.resistance or section.shunt.resistance,
                section.series.capacitance or section.shunt.capacitance,
            ]
    known = [part for part in parts if part is not None]
    return (known[0], known[1], known[2], known[3], kinds == ["band-pass"]) if len(known) == 4 else None


def band_centre(case: Case) -> Iterator[Stated]:
    """The centre of two sections that make a band, or of a Wien network: 1 / (2 pi sqrt(R1 C1 R2 C2))."""
    parts = _band_parts(case)
    if parts is not None:
        r1, c1, r2, c2, _ = parts
        yield case.stated(
            ONE / (TWO_PI * sqrt(product((r1, c1, r2, c2)))),
            "centre",
            True,
            "the response has two poles and one zero, at zero: it is even about that frequency.",
        )


def band_gain(case: Case) -> Iterator[Stated]:
    """The greatest gain there, by the three time constants in the denominator."""
    parts = _band_parts(case)
    if parts is None or case.chain is None:
        return
    r1, c1, r2, c2, wien = parts
    if wien:
        top, cross = c1 * r2, c1 * r2
    elif case.chain.sections[0].kind == "high-pass":
        top, cross = r1 * c1, r1 * c2
    else:
        top, cross = r2 * c2, r1 * c2
    yield Stated(
        case.chain.gain * (top / total([r1 * c1, r2 * c2, cross])),
        "greatest gain",
        "1",
        lambda: case.once("greatest gain", lambda: exact.greatest_gain(case)),
        True,
        "nothing loads the output, and the source has no resistance of its own but what is in the formula.",
    )


def twin_notch(case: Case) -> Iterator[Stated]:
    """The notch of a twin-T, 1 / (2 pi R C), and its edges at sqrt(5) -+ 2 times that."""
    twin = case.shape.twin_t
    if twin is None:
        return
    r, c = twin.r1, twin.c1
    rs = [r.value, twin.r2.value, 2 * twin.r3.value]
    cs = [c.value, twin.c2.value, twin.c3.value / 2]
    differ = max(spread(rs), spread(cs))
    loaded = twin.load is not None
    because = (
        "the output is loaded; a twin-T wants none."
        if loaded
        else differ_by("R, R, 2 R3 and C, C, C3/2", differ)
    )
    holds = differ < SAME_PARTS and not loaded
    notch = corner(r * c)
    yield Stated(
        notch,
        "frequency of the least gain",
        "Hz",
        lambda: case.once("notch", lambda: exact.least_frequency(case)),
        holds,
        because,
    )
    for edge, sign in (("lower", "-"), ("upper", "+")):
        value = math.sqrt(5) + (2 if sign == "+" else -2)
        factor = Formula(f"(sqrt(5) {sign} 2)", rf"(\sqrt 5 {sign} 2)", value)
        yield case.stated(factor / (TWO_PI * r * c), "cutoff", holds, because, edge=edge)


def bridged_notch(case: Case) -> Iterator[Stated]:
    """The dip of a bridged T of two equal arms, and how deep it is."""
    tee = case.shape.bridged_t
    if tee is None:
        return
    differ = spread([tee.first.value, tee.second.value])
    loaded = tee.load is not None
    because = "the output is loaded." if loaded else differ_by("the two arms along the way", differ)
    holds = differ < SAME_PARTS and not loaded
    root = sqrt(tee.bridge * tee.shunt)
    two = number(2)
    yield Stated(
        ONE / (TWO_PI * tee.first * root),
        "frequency of the least gain",
        "Hz",
        lambda: case.once("notch", lambda: exact.least_frequency(case)),
        holds,
        because,
    )
    # C, C, R2 bridged by R1: 2 R2/(R1 + 2 R2); R, R, C2 bridged by C1: 2 C1/(2 C1 + C2).
    few, many = (tee.shunt, tee.bridge) if tee.of_capacitors else (tee.bridge, tee.shunt)
    yield Stated(
        two * few / (many + two * few),
        "least gain",
        "1",
        lambda: case.once("depth", lambda: exact.least_gain(case)),
        holds,
        because,
    )


# Sections -> omega R C of half a turn for low-pass ones (high-pass: the reciprocal), and the loss there.
_HALF_TURNS = {
    3: ("sqrt(6)", r"\sqrt 6", math.sqrt(6), 29.0),
    4: ("sqrt(10/7)", r"\sqrt{10/7}", math.sqrt(10 / 7), 901 / 49),
}


def half_turn(case: Case) -> Iterator[Stated]:
    """Where three or four equal sections turn the phase by half a turn, and what is lost there."""
    found = equal_parts(case, ALIKE)
    n = len(case.chain.sections) if case.chain is not None else 0
    if found is None or n not in _HALF_TURNS:
        return
    low, r, c, differ = found
    text, tex, value, loss = _HALF_TURNS[n]
    factor = Formula(text, tex, value)
    formula = factor / (TWO_PI * r * c) if low else ONE / (TWO_PI * factor * r * c)
    because = differ_by("the parts, loads counted,", differ)
    holds = differ < SAME_PARTS
    yield Stated(
        formula,
        "frequency of half a turn",
        "Hz",
        lambda: case.once("half turn", lambda: exact.half_turn(case, formula.value)),
        holds,
        because,
    )
    lost = Formula("dB(29)", r"20 \log_{10} 29", 20 * math.log10(29)) if n == 3 else None
    lost = lost or Formula("dB(901/49)", r"20 \log_{10} \frac{901}{49}", 20 * math.log10(loss))
    yield Stated(
        lost,
        "loss at half a turn",
        "dB",
        lambda: (
            -case.measure("gain", at=case.once("half turn", lambda: exact.half_turn(case, formula.value)))
        ),
        holds,
        because,
    )


def arm_corners(case: Case) -> Iterator[Stated]:
    """The zero and the pole of a lead or a lag section standing alone."""
    chain = case.chain
    if chain is None or len(chain.sections) != 1 or case.roots is None:
        return
    only = chain.sections[0]
    pair = _lead_or_lag(only)
    if pair is None:
        return
    zero, pole = pair
    because = "there is one section, and nothing else joins it."
    yield Stated(corner(zero), "zero", "Hz", lambda: _frequency(case, zeros=True), True, because)
    yield Stated(corner(pole), "pole", "Hz", lambda: _frequency(case, zeros=False), True, because)


def _lead_or_lag(only: Section) -> tuple[Formula, Formula] | None:
    series, shunt = only.series, only.shunt
    if only.kind == "lead" and series.resistance and series.capacitance and shunt.resistance:
        c = series.capacitance
        return series.resistance * c, parallel(series.resistance, shunt.resistance) * c
    if only.kind == "lag" and series.resistance and shunt.resistance and shunt.capacitance:
        c = shunt.capacitance
        return shunt.resistance * c, (series.resistance + shunt.resistance) * c
    if only.kind == "compensated divider" and series.resistance and series.capacitance:
        if shunt.resistance is None or shunt.capacitance is None:
            return None
        both = series.capacitance + shunt.capacitance
        return series.resistance * series.capacitance, parallel(series.resistance, shunt.resistance) * both
    return None


def _frequency(case: Case, *, zeros: bool) -> float:
    found = (case.roots.zeros if zeros else case.roots.poles) if case.roots is not None else None
    if not found:
        raise UndecidedError("the two cancel." if case.roots is not None else "the roots are not known.")
    return found[0].frequency
