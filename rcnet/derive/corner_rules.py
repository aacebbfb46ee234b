"""Rules of thumb about frequencies: corners, centres, notches, slopes."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from functools import partial

from . import exact_numbers as exact
from .case import Case, Stated
from .formula import ONE, PI, Formula, number, told, total
from .shape import Chain, Section

TWO_PI = number(2) * PI
EDGES = {"low-pass": "upper", "high-pass": "lower"}
SAME_PARTS = 0.02  # parts this near to each other count as equal
ALIKE = 0.1  # sections further apart than this are not called equal at all
MOST_SECTIONS = 10  # of more, nobody reckons with each section by itself


def corner(time_constant: Formula) -> Formula:
    """1 / (2 pi tau), Hz."""
    return ONE / (TWO_PI * time_constant)


def spread(values: Sequence[float]) -> float:
    """How far the greatest lies above the least, relatively."""
    return max(values) / min(values) - 1


def single_section(case: Case) -> Section | None:
    """The one section of a network that is one low-pass or high-pass section."""
    chain = case.chain
    if chain is None or len(chain.sections) != 1 or chain.sections[0].kind not in EDGES:
        return None
    return chain.sections[0]


def time_constants(chain: Chain | None) -> list[Formula]:
    """Of each section standing alone; empty unless every one has one, or where there are very many."""
    if chain is None:
        return []
    found = [section.time_constant for section in chain.sections]
    known = [tau for tau in found if tau is not None]
    return known if len(known) == len(found) <= MOST_SECTIONS else []


def alike(case: Case) -> str | None:
    """The kind of two or more sections of one kind and one time constant, else None."""
    taus = time_constants(case.chain)
    kinds = {section.kind for section in case.chain.sections} if case.chain is not None else set()
    if len(taus) < 2 or len(kinds) != 1 or spread([tau.value for tau in taus]) > ALIKE:
        return None
    return kinds.pop()


# ---------------------------------------------------------------------- one section


def one_corner(case: Case) -> Iterator[Stated]:
    """1 / (2 pi R C), every resistance counted that the capacitor sees."""
    section = single_section(case)
    if section is not None and section.time_constant is not None:
        yield case.stated(
            corner(section.time_constant),
            "cutoff",
            True,
            "there is one section, and every resistance and capacitance in it is counted.",
            edge=EDGES[section.kind],
        )


def bare_corner(case: Case) -> Iterator[Stated]:
    """1 / (2 pi R C) of the chief resistor and capacitor, source and load forgotten."""
    section = single_section(case)
    if section is None or section.time_constant is None:
        return
    low = section.kind == "low-pass"
    beside, along = (section.shunt, section.series) if low else (section.series, section.shunt)
    held, resistors = beside.named("C"), along.named("R")
    if not held or not resistors:
        return
    # Of resistors in a row the greatest rules, of those side by side the least.
    chief = (max if low else min)(resistors, key=lambda part: part.value)
    capacitor = max(held, key=lambda part: part.value)
    others = [
        part for part in (*section.series.parts, *section.shunt.parts) if part not in (chief, capacitor)
    ]
    if not others:
        return
    change = abs(section.time_constant.value / (chief.value * capacitor.value) - 1)
    names = ", ".join(part.text for part in others[:4]) + (", ..." if len(others) > 4 else "")
    yield case.stated(
        corner(chief * capacitor),
        "cutoff",
        change < 0.05,
        f"{names} {'change' if len(others) > 1 else 'changes'} the time constant by {100 * change:.3g} %;"
        " to be left out it wants less than 5 %.",
        edge=EDGES[section.kind],
    )


# ---------------------------------------------------------------------- several sections


def equal_isolated(case: Case) -> Iterator[Stated]:
    """Sections of one time constant, none loading another: f sqrt(2^(1/n) - 1), or the reciprocal."""
    kind = alike(case)
    if kind not in EDGES or case.chain is None:
        return
    taus = time_constants(case.chain)
    n = len(taus)
    factor = Formula(
        f"sqrt(2^(1/{n}) - 1)", rf"\sqrt{{2^{{1/{n}}} - 1}}", math.sqrt(math.expm1(math.log(2) / n))
    )
    low = kind == "low-pass"
    isolated, because = case.isolation()
    differ = spread([tau.value for tau in taus])
    yield case.stated(
        factor / (TWO_PI * taus[0]) if low else ONE / (TWO_PI * taus[0] * factor),
        "cutoff",
        isolated and differ < SAME_PARTS,
        because if not isolated or differ < SAME_PARTS else differ_by("the time constants", differ),
        edge=EDGES[kind],
    )


def differ_by(what: str, by: float) -> str:
    """The sentence that tells by how much parts differ which a rule takes for equal."""
    return f"{what} differ by {100 * by:.3g} %; equal ones want less than {100 * SAME_PARTS:g} %."


def unequal_isolated(case: Case) -> Iterator[Stated]:
    """Sections with time constants of their own, none loading another: single-pole responses multiplied."""
    taus = time_constants(case.chain)
    if len(taus) < 2 or alike(case) or case.chain is None:
        return
    kinds = [section.kind for section in case.chain.sections]
    isolated, because = case.isolation()
    names = ", ".join(tau.text for tau in taus[:4]) + (", ..." if len(taus) > 4 else "")
    tex = r",\; ".join(tau.tex for tau in taus[:4])
    for edge, where in product_edges(kinds, [tau.value for tau in taus]).items():
        text = f"half power of {len(taus)} single poles: {names}"
        yield case.stated(
            told(text, rf"\prod_k \lvert H_k \rvert = \tfrac{{1}}{{\sqrt 2}} \max,\; \tau_k = {tex}", where),
            "cutoff",
            isolated,
            because,
            edge=edge,
        )


def product_edges(kinds: Sequence[str], taus: Sequence[float]) -> dict[str, float]:
    """The half-power frequencies, Hz, of isolated low-pass and high-pass sections, by edge.

    ln |H| is concave in ln omega, so there is one peak and at most one crossing on either side of it.
    """

    def level(x: float) -> float:
        return -0.5 * math.fsum(
            math.log1p(math.exp(2 * (x + math.log(t)) * (1 if kind == "low-pass" else -1)))
            for kind, t in zip(kinds, taus, strict=True)
        )

    def slope(x: float) -> float:
        return math.fsum(
            -1 / (1 + math.exp(-2 * (x + math.log(t))))
            if kind == "low-pass"
            else 1 / (1 + math.exp(2 * (x + math.log(t))))
            for kind, t in zip(kinds, taus, strict=True)
        )

    first, last = -math.log(max(taus)) - 30, -math.log(min(taus)) + 30
    both = len(set(kinds)) == 2
    top = _crossed(slope, first, last) if both else (first if kinds[0] == "low-pass" else last)
    height = level(top) if both else 0.0
    found = {}
    for edge, kind, end in (("lower", "high-pass", first), ("upper", "low-pass", last)):
        if kind in kinds:
            where = _crossed(lambda x: level(x) - height + math.log(2) / 2, top, end)
            found[edge] = math.exp(where) / (2 * math.pi)
    return found


def _crossed(function: Callable[[float], float], positive: float, negative: float) -> float:
    """Where a falling function passes zero, by bisection to the last digit."""
    for _ in range(200):
        middle = (positive + negative) / 2
        if middle in (positive, negative):
            break
        if function(middle) > 0:
            positive = middle
        else:
            negative = middle
    return (positive + negative) / 2


def equal_ladder(case: Case) -> Iterator[Stated]:
    """Equal sections wired straight one to the next: the corner of the Morgan-Voyce polynomial."""
    found = equal_parts(case, ALIKE)
    if found is None or case.chain is None:
        return
    low, resistance, capacitance, differ = found
    n = len(case.chain.sections)
    factor = number(ladder_cutoff(n) if low else 1 / ladder_cutoff(n), 12)
    yield case.stated(
        factor / (TWO_PI * resistance * capacitance),
        "cutoff",
        differ < SAME_PARTS,
        differ_by("the parts, loads counted,", differ),
        edge="upper" if low else "lower",
    )


def equal_parts(case: Case, within: float) -> tuple[bool, Formula, Formula, float] | None:
    """Whether low-pass, R and C of the first section, and by how much parts differ, in an unbuffered chain.

    A shunt part that is none of a section's own counts with what it takes.
    """
    chain = case.chain
    if chain is None or chain.buffers or len(chain.sections) < 2:
        return None
    for kind in EDGES:
        if not chain.all_of(kind):
            continue
        low = kind == "low-pass"
        r = [(s.series if low else s.shunt).resistance for s in chain.sections]
        c = [(s.shunt if low else s.series).capacitance for s in chain.sections]
        known = [(x, y) for x, y in zip(r, c, strict=True) if x is not None and y is not None]
        if len(known) != len(r):
            return None
        extra = 0.0
        for section, (own_r, own_c) in zip(chain.sections, known, strict=True):
            if low and section.shunt.resistance is not None:
                extra = max(extra, own_r.value / section.shunt.resistance.value)
            if not low and section.shunt.capacitance is not None:
                extra = max(extra, section.shunt.capacitance.value / own_c.value)
            if not low and section.series.resistance is not None:
                extra = max(extra, section.series.resistance.value / own_r.value)
        differ = max(spread([x.value for x, _ in known]), spread([y.value for _, y in known]), extra)
        return (low, *known[0], differ) if differ < within else None
    return None


def ladder_cutoff(n: int) -> float:
    """The half-power omega R C of n equal series-R, shunt-C sections, ideal source, open output.

    Its poles are -4 sin^2(phi/2), phi = (2k - 1) pi/(2n + 1), all real, so ln |H| falls with omega.
    """
    poles = [4 * math.sin((2 * k - 1) * math.pi / (4 * n + 2)) ** 2 for k in range(1, n + 1)]

    def above_half(x: float) -> float:
        return math.log(2) - math.fsum(math.log1p(math.exp(2 * x - 2 * math.log(p))) for p in poles)

    return math.exp(_crossed(above_half, math.log(poles[0]) - 30, math.log(poles[0]) + 3))


def distributed(case: Case) -> tuple[Formula, Formula, bool, str] | None:
    """Total R and C of many like sections, whether they are as good as a line, and why."""
    found = equal_parts(case, 0.2)
    if found is None or not found[0] or case.chain is None or len(case.chain.sections) < MANY:
        return None
    sections = case.chain.sections
    r = total([s.series.resistance for s in sections if s.series.resistance is not None], most=4)
    c = total([s.shunt.capacitance for s in sections if s.shunt.capacitance is not None], most=4)
    n = len(sections)
    because = f"there are {n} sections; to pass for a line it wants {AS_GOOD_AS_A_LINE} or more."
    return r, c, n >= AS_GOOD_AS_A_LINE, because


MANY = 8  # like sections from which on people take a ladder for a line
AS_GOOD_AS_A_LINE = 20  # sections whose corner lies within 5 % of the line's


def line_corner(case: Case) -> Iterator[Stated]:
    """The corner of an evenly distributed line, 2.432 / (2 pi R C)."""
    if (line := distributed(case)) is not None:
        r, c, holds, because = line
        factor = number(2.43238340264596)
        yield case.stated(factor / (TWO_PI * r * c), "cutoff", holds, because, edge="upper")


# ---------------------------------------------------------------------- slopes


def slopes(case: Case) -> Iterator[Stated]:
    """20 dB in a decade for each section, from ten times the cutoff on (or a tenth of it down)."""
    if case.chain is None or not time_constants(case.chain):
        return
    kinds = [section.kind for section in case.chain.sections]
    for kind, edge in EDGES.items():
        n, cutoff = kinds.count(kind), case.edge(edge)
        if not n or cutoff is None:
            continue
        up = kind == "low-pass"
        start, stop = (10 * cutoff, 100 * cutoff) if up else (cutoff / 10, cutoff / 100)
        sizes = case.poles_beyond(upper=up)
        last = 2 * math.pi * start
        far = (max(sizes) / last if up else last / min(sizes)) if sizes else 0.0
        formula = Formula(f"20*{n}", rf"20 \cdot {n}", 20.0 * n)
        yield Stated(
            formula,
            f"loss beyond 10 x {edge} cutoff" if up else f"loss below {edge} cutoff / 10",
            "dB",
            partial(exact.roll_off, case, start, stop),
            far < 0.5,
            f"the outermost corner lies at {far:.3g} of where the decade begins; to be past it, it wants less"
            " than 0.5.",
        )
