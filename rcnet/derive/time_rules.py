"""Rules of thumb about time: delays, edges, settling, charging and discharging."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from functools import partial

from ..circuit import Points, Square, Step
from ..errors import QuantityError
from ..exact.step import disconnected
from ..values import read_spice_number
from . import exact_numbers as exact
from .case import APART, Case, Stated
from .corner_rules import distributed, single_section, time_constants
from .formula import PI, Formula, log, name, number, one_less_exp, sqrt, total
from .seen import resistance_seen

LN2 = Formula("log(2)", r"\ln 2", math.log(2))
LN9 = Formula("log(9)", r"\ln 9", math.log(9))
CONVERTERS = (8, 10, 12, 16)  # bits


def settles(case: Case) -> bool:
    """True for a response that passes dc and falls from there, as delays and edges ask for."""
    return case.profile is not None and case.profile.peaks == (0.0,) and case.edge("upper") is not None


def elmore_sum(case: Case) -> tuple[Formula, bool, str] | None:
    """As `_elmore_sum`, once."""
    return case.kept("elmore sum", lambda: _elmore_sum(case))


def _elmore_sum(case: Case) -> tuple[Formula, bool, str] | None:
    """Each capacitance times all resistance back to its buffer or the source; whether that is all, and why.

    W. C. Elmore, J. Appl. Phys. 19:55-63, 1948. Loads are left out, as on paper, but for one section.
    """
    chain = case.chain
    if chain is None or not chain.all_of("low-pass"):
        return None
    only = single_section(case)
    if only is not None and only.time_constant is not None:
        return only.time_constant, True, "there is one section, and its load is counted."
    terms: list[Formula] = []
    loads: list[str] = []
    for block in chain.blocks:
        way: list[Formula] = []
        for section in block:
            if section.series.resistance is None or section.shunt.capacitance is None:
                return None
            way.append(section.series.resistance)
            loads += [part.text for part in section.shunt.named("R")]
            terms.append(total(way) * section.shunt.capacitance)
    lost = abs(1 - case.measure("dc_gain") / chain.gain.value)
    if not loads:
        return total(terms), True, "nothing but capacitors leads to ground, and all are counted."
    return (
        total(terms),
        lost < 0.02,
        f"{', '.join(loads[:4])}, left out, {'take' if len(loads) > 1 else 'takes'} {100 * lost:.3g} % of the"
        " level at rest; to be left out it wants less than 2 %.",
    )


def chief_time_constant(case: Case) -> Formula | None:
    """The time constant by which people reckon: R C of one section, else the sum."""
    found = elmore_sum(case)
    if found is not None:
        return found[0]
    if not settles(case):
        return None
    return case.symbol("T_elmore", r"T_\mathrm{Elmore}", case.measure("elmore_delay"), "s")


def ruled(case: Case, tau: Formula, faint: float = 1e-3) -> tuple[bool, str]:
    """Whether one pole rules the step response, and the time constant is that pole's."""
    holds, because = case.one_pole(faint=faint)
    if holds:
        share = tau.value * case.poles_beyond(upper=True, faint=faint)[0]
        if not 0.8 < share < 1.25:
            return False, (
                f"the time constant is {share:.3g} times that of the pole: faint poles count in it."
            )
    return holds, because


# ---------------------------------------------------------------------- delay and edge


def elmore(case: Case) -> Iterator[Stated]:
    """The delay as the sum of resistances back to the source times capacitances."""
    if (found := elmore_sum(case)) is not None and settles(case):
        formula, holds, because = found
        yield case.stated(formula, "elmore_delay", holds, because)


def half_delay(case: Case) -> Iterator[Stated]:
    """50 % of a step is there after ln 2 of the time constant."""
    if settles(case) and (tau := chief_time_constant(case)) is not None:
        holds, because = ruled(case, tau)
        yield case.stated(LN2 * tau, "delay", holds, because)


def edge_of_bandwidth(case: Case) -> Iterator[Stated]:
    """Rise time 0.35 / bandwidth; exactly ln 9 / (2 pi)."""
    cutoff = case.edge("upper")
    if settles(case) and cutoff is not None:
        holds, because = case.one_pole()
        f = case.symbol("f_cutoff", r"f_\mathrm{c}", cutoff, "Hz")
        yield case.stated(LN9 / (number(2) * PI * f), "rise_time", holds, because)


def edges_in_squares(case: Case) -> Iterator[Stated]:
    """Rise times of isolated stages add in squares."""
    taus = time_constants(case.chain)
    if case.chain is None or len(taus) < 2 or not case.chain.all_of("low-pass") or not settles(case):
        return
    holds, because = case.isolation()
    yield case.stated(LN9 * sqrt(total([tau**2 for tau in taus])), "rise_time", holds, because)


def line_times(case: Case) -> Iterator[Stated]:
    """Delay, edge and Elmore's delay of an evenly distributed line of the same R and C in all."""
    if (line := distributed(case)) is None or not settles(case):
        return
    r, c, holds, because = line
    # Step response of 1/cosh(sqrt(s R C)), see W. Thomson, Proc. Royal Soc. 7:382-399, 1855.
    for factor, measure in (
        (0.378747838271396, "delay"),
        (0.900946091804982, "rise_time"),
        (0.5, "elmore_delay"),
    ):
        yield case.stated(number(factor) * r * c, measure, holds, because)


# ---------------------------------------------------------------------- settling


def charge(case: Case) -> Iterator[Stated]:
    """Charged to 5 % after three time constants, to 1 % after five."""
    tau = chief_time_constant(case)
    if tau is None or not settles(case):
        return
    holds, because = ruled(case, tau)
    for factor, band in ((3.0, 0.05), (5.0, 0.01)):
        yield case.stated(number(factor) * tau, "settling_time", holds, because, band=band)


def half_a_bit(case: Case) -> Iterator[Stated]:
    """Settled to half a step of an N-bit converter after (N + 1) ln 2 time constants."""
    tau = chief_time_constant(case)
    if tau is None or not settles(case):
        return
    for bits in CONVERTERS:
        holds, because = ruled(case, tau, faint=2.0 ** -(bits + 2))
        stated = case.stated(
            number(float(bits + 1)) * LN2 * tau, "settling_time", holds, because, band=2.0 ** -(bits + 1)
        )
        yield Stated(
            stated.formula,
            f"settling_time ({bits} bits)",
            stated.unit,
            stated.exact,
            stated.holds,
            stated.because,
        )


# ---------------------------------------------------------------------- thresholds


def levels(case: Case) -> tuple[float, float] | None:
    """What the source's waveform goes from and to, volts; None where it does not go from one to another."""
    wave = case.source.waveform
    if case.source.kind != "V":
        return None
    if isinstance(wave, Square) and wave.low != wave.high:
        return wave.low, wave.high
    if isinstance(wave, Step) and wave.initial != wave.final:
        return wave.initial, wave.final
    if isinstance(wave, Points) and wave.period is None:
        first, last = wave.values[0][1], wave.values[-1][1]
        return (first, last) if first != last else None
    return None


def thresholds(case: Case) -> list[float]:
    """The voltages of the output that the circuit names: where claims discharge to, and `.meas ... when`."""
    found = []
    for claim in case.circuit.claims:
        part = claim.options.get("part")
        if claim.measure.name == "discharge_time" and isinstance(part, str) and part in case.network:
            ends = case.network.part(part).nodes
            if {case.network.node_index(node) for node in ends} == set(case.pair):
                found.append(float(claim.options["to"]))
    for request in case.circuit.requests:
        match = re.search(r"\bwhen\s+v\(\s*([^\s(),]+)\s*\)\s*=\s*(\S+)", request.text, re.IGNORECASE)
        if request.word == ".meas" and match and match[1].lower() == case.of.lower():
            found += _written(match[2])
    return list(dict.fromkeys(found))


def _written(text: str) -> list[float]:
    try:
        return [read_spice_number(text).value]
    except QuantityError:
        return []  # a parameter, or a node


def threshold_time(case: Case) -> Iterator[Stated]:
    """A contact's output reaches a threshold after R C ln((V1 - V0)/(V1 - Vth))."""
    only, between = single_section(case), levels(case)
    if only is None or only.kind != "low-pass" or only.time_constant is None or between is None:
        return
    start, end = between
    gain = case.measure("dc_gain")
    for threshold in thresholds(case):
        if not min(start, end) < threshold < max(start, end) or case.chain is None:
            continue
        # The source's levels with the output at rest: a divider's share is counted where it is a load.
        reach = log(number(end - start) / number(end - threshold))
        yield Stated(
            only.time_constant * reach,
            f"time to {threshold:g} V",
            "s",
            partial(exact.time_to, case, (threshold - start * gain) / (end - start)),
            abs(gain - 1) < 0.02,
            f"at rest the output stands at {100 * gain:.4g} % of the source; the rule wants 98 % or more.",
        )


def discharge(case: Case) -> Iterator[Stated]:
    """A capacitor cut off from its source falls from V0 to V within R C ln(V0/V)."""
    start = _charged_to(case)
    for claim in case.circuit.claims:
        if claim.measure.name != "discharge_time" or not start:
            continue
        part, to = str(claim.options["part"]), float(claim.options["to"])
        if part not in case.network or not 0 < to < start:
            continue
        seen = resistance_seen(disconnected(case.network), part, frozenset(), loop_free=True)
        own = name(part, case.network.part(part).value)
        many = len(case.parts_of.get("C", []))
        yield case.stated(
            seen * own * log(number(start) / number(to)),
            "discharge_time",
            many == 1,
            "there is one capacitor."
            if many == 1
            else f"there are {many} capacitors, and the others discharge along; the rule wants one.",
            part=part,
            to=to,
        )


def _charged_to(case: Case) -> float:
    """The source's greatest level, volts, to which people take a capacitor to be charged."""
    found = levels(case) or (0.0, case.source.operating_value)
    return max(abs(found[0]), abs(found[1]))


# ---------------------------------------------------------------------- coupling


def droop(case: Case) -> Iterator[Stated]:
    """What a coupling capacitor lets sink of a pulse's top: 1 - exp(-t/(R C))."""
    only, wave = single_section(case), case.source.waveform
    if only is None or only.kind != "high-pass" or only.time_constant is None:
        return
    if isinstance(wave, Square):
        width = wave.width + (wave.rise + wave.fall) / 2
        share = (wave.rise + wave.fall) / 2 / width if width else 1.0
        formula = number(width, 12) / only.time_constant
        yield Stated(
            one_less_exp(formula),
            f"droop over {width:.4g} s",
            "1",
            lambda: case.once(("droop", width), lambda: exact.droop(case, width)),
            share < APART,
            f"its edges take {100 * share:.3g} % of the pulse; a step wants less than {100 * APART:g} %.",
        )
