"""Rules of thumb about levels: dividers, ripple, noise."""

from __future__ import annotations

import math
from collections.abc import Iterator

from ..circuit import Square
from . import exact_numbers as exact
from .case import ISOLATED, Case, Stated
from .corner_rules import SAME_PARTS
from .formula import BOLTZMANN, ONE, Formula, name, number, product, sqrt
from .shape import Section

MOST_OF_A_PERIOD = 1.0  # period over time constant up to which a ripple passes for straight lines


# ---------------------------------------------------------------------- dividers


def divider_at_rest(case: Case) -> Iterator[Stated]:
    """R2/(R1 + R2) of all resistance along the way and the one shunt resistance."""
    chain = case.chain
    if chain is None:
        return
    shunts = [k for k, section in enumerate(chain.sections) if _at_rest(section) is not None]
    if len(shunts) != 1 or any(section.series.kind in ("C", "R-C", "other") for section in chain.sections):
        return
    foot = _at_rest(chain.sections[shunts[0]])
    block = next(block for block in chain.blocks if chain.sections[shunts[0]] in block)
    before = block[: block.index(chain.sections[shunts[0]]) + 1]
    way = [section.series.resistance for section in before if section.series.resistance is not None]
    assert foot is not None
    along = way[0]
    for more in way[1:]:
        along = along + more
    yield case.stated(
        chain.gain * (foot / (along + foot)),
        "dc_gain",
        True,
        "one resistance leads to ground, and all that feeds it is counted.",
    )


def _at_rest(section: Section) -> Formula | None:
    """What a section's shunt arm conducts at dc."""
    return section.shunt.resistance if section.shunt.kind in ("R", "R||C") else None


def divider_far_up(case: Case) -> Iterator[Stated]:
    """C1/(C1 + C2) of a capacitance along the way and the one to ground."""
    chain = case.chain
    if chain is None or len(chain.sections) != 1:
        return
    only = chain.sections[0]
    if only.series.kind not in ("C", "R||C") or only.shunt.kind not in ("C", "R||C"):
        return
    c1, c2 = only.series.capacitance, only.shunt.capacitance
    assert c1 is not None and c2 is not None
    yield Stated(
        chain.gain * (c1 / (c1 + c2)),
        "gain at infinite frequency",
        "1",
        lambda: case.once("far up", lambda: exact.high_frequency_gain(case)),
        True,
        "one capacitance leads along and one to ground, and all of both is counted.",
    )


def compensated(case: Case) -> Iterator[Stated]:
    """Flat from dc up where R1 C1 = R2 C2: the gain far up is that at rest."""
    chain = case.chain
    if chain is None or [section.kind for section in chain.sections] != ["compensated divider"]:
        return
    series, shunt = chain.sections[0].series, chain.sections[0].shunt
    r1, c1, r2, c2 = series.resistance, series.capacitance, shunt.resistance, shunt.capacitance
    assert r1 is not None and c1 is not None and r2 is not None and c2 is not None
    ratio = r1.value * c1.value / (r2.value * c2.value)
    yield Stated(
        chain.gain * (r2 / (r1 + r2)),
        "gain at infinite frequency",
        "1",
        lambda: case.once("far up", lambda: exact.high_frequency_gain(case)),
        abs(ratio - 1) < SAME_PARTS,
        f"the upper time constant is {ratio:.4g} of the lower one; equal ones want less than"
        f" {100 * SAME_PARTS:g} % between them.",
    )


# ---------------------------------------------------------------------- ripple


def _pulses(case: Case, sections: int) -> tuple[Square, list[tuple[Formula, Formula]], float] | None:
    """A pulse train into low-pass sections: the wave, R and C of each, its period over the least R C."""
    wave, chain = case.source.waveform, case.chain
    if not isinstance(wave, Square) or chain is None or not chain.all_of("low-pass"):
        return None
    if len(chain.sections) != sections or wave.low == wave.high:
        return None
    parts = []
    for section in chain.sections:
        r, c = section.series.resistance, section.shunt.capacitance
        assert r is not None and c is not None
        parts.append((r, c))
    taus = [tau.value for section in chain.sections if (tau := section.time_constant) is not None]
    return wave, parts, max(wave.period / tau for tau in taus)


def _swing(wave: Square) -> tuple[Formula, Formula, Formula, float]:
    """V, D and f of a pulse train as formulas, and D."""
    duty = (wave.width + (wave.rise + wave.fall) / 2) / wave.period
    return number(wave.high - wave.low, 12), number(duty, 12), number(1 / wave.period, 12), duty


def _straight(ratio: float) -> tuple[bool, str]:
    return ratio < MOST_OF_A_PERIOD, (
        f"the period is {ratio:.3g} of the time constant; straight lines want less than {MOST_OF_A_PERIOD:g}."
    )


def ripple(case: Case) -> Iterator[Stated]:
    """What one section leaves of a pulse train: V D (1 - D)/(f R C)."""
    if (found := _pulses(case, 1)) is not None and case.chain is not None:
        wave, ((r, c),), ratio = found
        v, d, f, _ = _swing(wave)
        holds, because = _straight(ratio)
        yield case.stated(case.chain.gain * v * d * (ONE - d) / (f * r * c), "ripple", holds, because)


def worst_ripple(case: Case) -> Iterator[Stated]:
    """The same at the worst duty, one half: V/(4 f R C)."""
    if (found := _pulses(case, 1)) is not None and case.chain is not None:
        wave, ((r, c),), ratio = found
        v, _, f, duty = _swing(wave)
        holds, because = _straight(ratio)
        half = abs(duty - 0.5) < 0.05
        yield case.stated(
            case.chain.gain * v / (number(4) * f * r * c),
            "ripple",
            holds and half,
            because if half else f"the duty is {duty:.3g}; the worst is 0.5.",
        )


def ripple_of_two(case: Case) -> Iterator[Stated]:
    """What two sections leave: V D (1 - D)/(8 f^2 R1 C1 R2 C2)."""
    if (found := _pulses(case, 2)) is not None and case.chain is not None:
        wave, ((r1, c1), (r2, c2)), ratio = found
        v, d, f, _ = _swing(wave)
        holds, because = _straight(ratio)
        # The second section sees the carrier, far above the cutoff at which loading is told elsewhere.
        omega = 2 * math.pi / wave.period
        loads = [load for _, load in case.chain.loads(omega)]
        if holds and loads and min(loads) < ISOLATED:
            holds, because = (
                False,
                (
                    f"at the carrier section 2 takes {min(loads):.3g} times what section 1 gives;"
                    f" isolated sections want more than {ISOLATED:g}."
                ),
            )
        formula = v * d * (ONE - d) / (number(8) * f**2 * product((r1, c1, r2, c2)))
        yield case.stated(case.chain.gain * formula, "ripple", holds, because)


# ---------------------------------------------------------------------- noise


def noise_of_capacitor(case: Case) -> Iterator[Stated]:
    """sqrt(k T / C), whatever the resistors."""
    chain = case.chain
    if chain is None or chain.sections[-1].shunt.kind not in ("C", "R||C"):
        return
    last = chain.sections[-1]
    if last.series.kind != "R" or last.shunt.capacitance is None:
        return
    kelvin = case.circuit.conditions.nominal + 273.15
    quiet, because = _quiet(case, chain.buffers)
    yield case.stated(
        sqrt(BOLTZMANN * name("T", kelvin) / last.shunt.capacitance),
        "noise",
        quiet,
        because,
        from_=0.0,
        to=math.inf,
        temperature=kelvin,
    )


def _quiet(case: Case, buffers: int) -> tuple[bool, str]:
    """Whether nothing but the last capacitor sets the noise, and why."""
    if buffers:
        carry = "buffer carries" if buffers == 1 else "buffers carry"
        return False, f"{buffers} {carry} the noise of earlier sections in; the rule wants none."
    roots = case.roots
    if roots is not None and any(not root.s for root in (*roots.poles, *roots.hidden)):
        return False, "other capacitors keep the output from dc, and take their share of the noise."
    return True, "no buffer carries the noise of other sections in."
