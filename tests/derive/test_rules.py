"""Rules of thumb beside the closed forms of textbooks, and the errors they make beside outside solutions.

Numbers with a remark were computed with 40-digit arithmetic from the closed form named there.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
import scipy.integrate
import scipy.optimize

from rcnet.circuit import Circuit, Network
from rcnet.derive import RULES, Result, derive
from rcnet.netlist import parse_netlist

Build = Callable[..., Network]
Rules = Callable[..., dict[tuple[str, str], Result]]
UPPER, LOWER = "cutoff (upper)", "cutoff (lower)"


def ladder(n: int, taper: float = 1.0) -> list[str]:
    """Sections of series R, shunt C, with R C = 1 s; each has `taper` times the impedance of the last."""
    nodes = ["in", *[f"n{k}" for k in range(1, n)], "out"]
    lines = []
    for k in range(1, n + 1):
        size = taper ** (k - 1)
        lines += [f"R{k} {nodes[k - 1]} {nodes[k]} {size!r}", f"C{k} {nodes[k]} 0 {1 / size!r}"]
    return lines


def mirrored(n: int) -> list[str]:
    """The high-pass ladder: series C, shunt R."""
    nodes = ["in", *[f"n{k}" for k in range(1, n)], "out"]
    return [
        line
        for k in range(1, n + 1)
        for line in (f"C{k} {nodes[k - 1]} {nodes[k]} 1", f"R{k} {nodes[k]} 0 1")
    ]


def buffered(n: int) -> list[str]:
    """Equal low-pass sections with a follower between each two."""
    lines = []
    for k in range(1, n + 1):
        here, there = "in" if k == 1 else f"b{k}", "out" if k == n else f"n{k}"
        lines += [f"R{k} {here} {there} 1", f"C{k} {there} 0 1"]
        if k < n:
            lines.append(f"E{k} b{k + 1} 0 {there} 0 1")
    return lines


F1 = 1 / (2 * math.pi)

# sqrt(2^(1/n) - 1): W. M. Siebert, Circuits, Signals, and Systems, 1986.
ISOLATED = {
    2: 0.643594252905583,
    3: 0.509824528533959,
    4: 0.434979442046082,
    5: 0.385614256734674,
    10: 0.267905697095626,
}
# |b_n(jx)|^2 = 2 with b_n of A. M. Morgan-Voyce, Proc. IRE 47:321-322, 1959.
STRAIGHT = {
    2: 0.374239154338852,
    3: 0.194286000459512,
    4: 0.118490377691281,
    5: 0.0796654471020062,
    10: 0.0220047584971262,
}


@pytest.mark.parametrize(("n", "factor"), ISOLATED.items())
def test_isolated_sections(network: Build, rules: Rules, n: int, factor: float) -> None:
    """Equal sections with followers between: the rule is right, and says so."""
    stated = rules(network(*buffered(n)))[("n equal sections, isolated", UPPER)]

    assert stated.value == pytest.approx(factor * F1, rel=1e-9)
    assert stated.exact == pytest.approx(factor * F1, rel=1e-9)
    assert stated.holds
    assert stated.error == pytest.approx(0, abs=1e-9)


@pytest.mark.parametrize(("n", "factor"), STRAIGHT.items())
def test_equal_ladder(network: Build, rules: Rules, n: int, factor: float) -> None:
    """Equal sections wired straight: the ladder's rule is right, the isolated one wrong by a known amount."""
    stated = rules(network(*ladder(n)))
    right, wrong = (
        stated[(rule, UPPER)] for rule in ("n equal sections in a ladder", "n equal sections, isolated")
    )

    assert right.value == pytest.approx(factor * F1, rel=1e-9)
    assert right.exact == pytest.approx(factor * F1, rel=1e-9)
    assert right.holds
    assert not wrong.holds
    assert wrong.error == pytest.approx(100 * (ISOLATED[n] / factor - 1), rel=1e-9)


@pytest.mark.parametrize(
    ("n", "factor"), {2: 2.67208812441511, 3: 5.14705124216293, 10: 45.4447159749833}.items()
)
def test_mirrored_ladder(network: Build, rules: Rules, n: int, factor: float) -> None:
    """The high-pass mirror has the reciprocal corners."""
    stated = rules(network(*mirrored(n)))

    right = stated[("n equal sections in a ladder", LOWER)]
    assert right.value == pytest.approx(factor * F1, rel=1e-9)
    assert right.exact == pytest.approx(factor * F1, rel=1e-9)
    assert stated[("n equal sections, isolated", LOWER)].value == pytest.approx(F1 / ISOLATED[n], rel=1e-9)


# Two sections with R C alike, the second of k times the impedance: 1 + (2 + 1/k) x + x^2.
TAPER = {2: 0.4727967623694, 5: 0.5628309046500, 10: 0.6007447986993, 100: 0.6390707401566}


@pytest.mark.parametrize(("k", "factor"), TAPER.items())
def test_tapered_ladder(network: Build, rules: Rules, k: float, factor: float) -> None:
    """The more the impedance grows along the way, the less the isolated rule errs; from 10 on it holds."""
    stated = rules(network(*ladder(2, k)))[("n equal sections, isolated", UPPER)]

    assert stated.exact == pytest.approx(factor * F1, rel=1e-9)
    assert stated.error == pytest.approx(100 * (ISOLATED[2] / factor - 1), rel=1e-6)
    # Z of one section over the parallel R and C before it: k (1 + x)^2/x at x = j factor
    assert stated.holds == (k * (1 + factor**2) / factor > 10)


def test_loading_is_measured(network: Build, rules: Rules) -> None:
    """The number beside the isolated rule is the ratio of the two impedances at the cutoff."""
    stated = rules(network(*ladder(2, 5)))[("n equal sections, isolated", UPPER)]
    s = 1j * TAPER[5]

    ratio = abs(5 + 1 / (s / 5)) / abs(1 / (1 + s))
    assert f"section 2 takes {ratio:.3g} times the impedance that section 1 gives" in stated.because


def test_unequal_isolated_sections(network: Build, rules: Rules) -> None:
    """Sections of different corners, isolated: scipy's root of the product of single poles is the same."""
    lines = ["R1 in a 1k", "C1 a 0 1u", "E1 b 0 a 0 1", "R2 b out 2k", "C2 out 0 2u"]
    stated = rules(network(*lines))[("sections multiplied", UPPER)]

    def half(f: float) -> float:
        w = 2 * math.pi * f
        return (1 + (w * 1e-3) ** 2) * (1 + (w * 4e-3) ** 2) - 2

    assert stated.value == pytest.approx(scipy.optimize.brentq(half, 1, 100, xtol=1e-13), rel=1e-9)
    assert stated.holds
    assert stated.error == pytest.approx(0, abs=1e-8)


def test_band_of_isolated_sections(network: Build, rules: Rules) -> None:
    """A buffered high-pass and low-pass: both cutoffs of the product, by a quadratic in closed form."""
    stated = rules(network("C1 in a 1u", "R1 a 0 10k", "E1 b 0 a 0 1", "R2 b out 1k", "C2 out 0 1u"))
    # With u = w^2, a = 1e-2, b = 1e-3: greatest at u = 1/(a b); half of that there.
    a, b = 1e-2, 1e-3
    peak = a**2 / (a + b) ** 2

    def rest(u: float) -> float:
        return u * a**2 / ((1 + u * a**2) * (1 + u * b**2)) - peak / 2

    for edge, low, high in ((LOWER, 1e2, 1e5), (UPPER, 1e5, 1e8)):
        u = scipy.optimize.brentq(rest, low, high, xtol=1e-9)
        assert stated[("sections multiplied", edge)].value == pytest.approx(
            math.sqrt(u) / (2 * math.pi), rel=1e-9
        )
        assert stated[("sections multiplied", edge)].error == pytest.approx(0, abs=1e-7)


# R C = 1 s. Times to fractions: -ln e; (N + 1) ln 2: the table of N-bit converters.
SINGLE = {
    ("corner of one section", UPPER): F1,
    ("one pole alone", UPPER): F1,
    ("one pole of the same delay", UPPER): F1,
    ("straight lines", UPPER): F1,
    ("open-circuit time constants", UPPER): F1,
    ("Elmore's sum", "elmore_delay"): 1.0,
    ("half of a step after ln 2 tau", "delay"): 0.693147180559945,
    ("rise time 0.35 / bandwidth", "rise_time"): 2.19722457733622,
    ("half a converter's step", "settling_time (8 bits)"): 6.23832462503951,
    ("half a converter's step", "settling_time (10 bits)"): 7.62461898615940,
    ("half a converter's step", "settling_time (12 bits)"): 9.01091334727929,
    ("half a converter's step", "settling_time (16 bits)"): 11.7835020695191,
    # k T at 27 degrees Celsius over 1 F
    ("noise of a capacitor, kT/C", "noise"): math.sqrt(1.380649e-23 * 300.15),
}


@pytest.mark.parametrize(
    ("rule", "value"), SINGLE.items(), ids=lambda x: x[0] if isinstance(x, tuple) else ""
)
def test_one_section(network: Build, rules: Rules, rule: tuple[str, str], value: float) -> None:
    """Of one section every rule is exact."""
    stated = rules(network("R1 in out 1", "C1 out 0 1"))[rule]

    assert stated.value == pytest.approx(value, rel=1e-9)
    assert stated.exact == pytest.approx(value, rel=1e-9)
    assert stated.holds


def test_charging(network: Build, rules: Rules) -> None:
    """Three and five time constants stand for ln 20 and ln 100 of them."""
    stated = rules(network("R1 in out 1", "C1 out 0 1"))
    rule = "charged after 3 tau, 5 tau"

    for factor, exact, band in ((3, 2.99573227355399, "5"), (5, 4.60517018598809, "1")):
        each = stated[(rule, f"settling_time (within {band} %)")]
        assert each.value == pytest.approx(factor, rel=1e-12)
        assert each.exact == pytest.approx(exact, rel=1e-9)
        assert each.error == pytest.approx(100 * (factor / exact - 1), rel=1e-6)


# 1 + 6 x + 5 x^2 + x^3 and its kin: A. M. Morgan-Voyce (1959); half a turn and loss in closed form.
HALF_TURNS = {
    3: (math.sqrt(6), 29.2479599579791),
    4: (1.19522860933439, 20 * math.log10(18.3877551020408)),
}


@pytest.mark.parametrize("n", HALF_TURNS)
def test_half_turn(network: Build, rules: Rules, n: int) -> None:
    """Three and four equal sections turn the phase by half a turn where textbooks say, both ways round."""
    turn, loss = HALF_TURNS[n]
    for lines, where in ((ladder(n), turn), (mirrored(n), 1 / turn)):
        stated = rules(network(*lines))
        at = stated[("half a turn of equal sections", "frequency of half a turn")]
        lost = stated[("half a turn of equal sections", "loss at half a turn")]
        assert at.value == pytest.approx(where * F1, rel=1e-9)
        assert at.exact == pytest.approx(where * F1, rel=1e-9)
        assert lost.value == pytest.approx(loss, rel=1e-9)
        assert lost.exact == pytest.approx(loss, rel=1e-9)


def test_twin_t(network: Build, rules: Rules) -> None:
    """(1 + x^2)/(1 + 4 x + x^2): the null at 1/(R C), the edges at sqrt(5) -+ 2."""
    lines = ["R1 in a 1", "R2 a out 1", "C3 a 0 2", "C1 in b 1", "C2 b out 1", "R3 b 0 0.5"]
    stated = rules(network(*lines))
    rule = "notch of a twin-T"

    for what, x in (
        ("frequency of the least gain", 1),
        (LOWER, 0.23606797749979),
        (UPPER, 4.23606797749979),
    ):
        each = stated[(rule, what)]
        assert each.value == pytest.approx(x * F1, rel=1e-9)
        assert each.exact == pytest.approx(x * F1, rel=1e-6 if x == 1 else 1e-9)
        assert each.holds


# Least at 1/(C sqrt(R1 R2)): 2 R2/(R1 + 2 R2); at 1/(R sqrt(C1 C2)): 2 C1/(2 C1 + C2).
BRIDGED = {
    "of capacitors": (["C1 in a 1", "C2 a out 1", "R2 a 0 0.5", "R1 in out 8"], 0.5, 1 / 9),
    "of resistors": (["R1 in a 1", "R2 a out 1", "C2 a 0 8", "C1 in out 0.5"], 0.5, 1 / 9),
}


@pytest.mark.parametrize("which", BRIDGED)
def test_bridged_t(network: Build, rules: Rules, which: str) -> None:
    """Both bridged tees have their dip where textbooks say, and as deep."""
    lines, x, depth = BRIDGED[which]
    stated = rules(network(*lines))

    at = stated[("dip of a bridged T", "frequency of the least gain")]
    least = stated[("dip of a bridged T", "least gain")]
    assert at.value == pytest.approx(x * F1, rel=1e-9)
    assert at.exact == pytest.approx(x * F1, rel=1e-6)
    assert least.value == pytest.approx(depth, rel=1e-9)
    assert least.exact == pytest.approx(depth, rel=1e-9)


def test_wien(network: Build, rules: Rules) -> None:
    """Equal parts: a third at 1/(R C)."""
    stated = rules(network("R1 in a 1", "C1 a out 1", "R2 out 0 1", "C2 out 0 1"))

    centre = stated[("centre of the band", "centre")]
    gain = stated[("gain in the middle of the band", "greatest gain")]
    assert centre.value == pytest.approx(F1, rel=1e-9)
    assert centre.exact == pytest.approx(F1, rel=1e-9)
    assert gain.value == pytest.approx(1 / 3, rel=1e-9)
    assert gain.exact == pytest.approx(1 / 3, rel=1e-9)


@pytest.mark.parametrize(
    ("lines", "gain"),
    [
        # s C1 R1/(1 + s (R1 C1 + R2 C2 + R1 C2) + ...), and the other order, with its own cross term
        (["C1 in a 3", "R1 a 0 1", "R2 a out 2", "C2 out 0 0.1"], 3 / (3 + 0.2 + 0.1)),
        (["R1 in a 1", "C1 a 0 0.1", "C2 a out 3", "R2 out 0 2"], 6 / (0.1 + 6 + 3)),
    ],
    ids=["high-pass first", "low-pass first"],
)
def test_band_gain(network: Build, rules: Rules, lines: list[str], gain: float) -> None:
    """The greatest gain of two sections, whichever comes first, at 1/sqrt(R1 C1 R2 C2)."""
    stated = rules(network(*lines))[("gain in the middle of the band", "greatest gain")]

    assert stated.value == pytest.approx(gain, rel=1e-12)
    assert stated.exact == pytest.approx(gain, rel=1e-9)


# R2 (1 + s C1 R1)/(R1 + R2 + s C1 R1 R2); (1 + s C2 R2)/(1 + s C2 (R1 + R2)); the compensated divider.
CORNERS = {
    "lead": (["R1 in out 3", "C1 in out 2", "R2 out 0 1"], 1 / 6, 1 / (0.75 * 2)),
    "lag": (["R1 in out 3", "R2 out a 1", "C2 a 0 2"], 1 / 2, 1 / 8),
    "divider": (
        ["R1 in out 3", "C1 in out 2", "R2 out 0 1", "C2 out 0 4"],
        1 / 6,
        1 / (0.75 * 6),
    ),
}


@pytest.mark.parametrize("which", CORNERS)
def test_lead_and_lag(network: Build, rules: Rules, which: str) -> None:
    """Zero and pole of lead, lag and divider are those of the textbook."""
    lines, zero, pole = CORNERS[which]
    stated = rules(network(*lines))

    for what, w in (("zero", zero), ("pole", pole)):
        each = stated[("zero and pole of a lead or lag", what)]
        assert each.value == pytest.approx(w * F1, rel=1e-12)
        assert each.exact == pytest.approx(w * F1, rel=1e-12)


def test_dividers(network: Build, rules: Rules) -> None:
    """A probe's two dividers, and the condition under which they are one."""
    good = rules(network("R1 in out 9M", "C1 in out 10p", "R2 out 0 1M", "C2 out 0 90p"))
    bad = rules(network("R1 in out 9M", "C1 in out 10p", "R2 out 0 1M", "C2 out 0 190p"))

    for stated, far in ((good, 0.1), (bad, 0.05)):
        assert stated[("divider at rest", "dc_gain")].value == pytest.approx(0.1, rel=1e-12)
        assert stated[("divider at rest", "dc_gain")].error == pytest.approx(0, abs=1e-9)
        up = stated[("capacitive divider far up", "gain at infinite frequency")]
        assert up.value == pytest.approx(far, rel=1e-12)
        assert up.exact == pytest.approx(far, rel=1e-12)
    assert good[("compensated divider", "gain at infinite frequency")].holds
    assert not bad[("compensated divider", "gain at infinite frequency")].holds
    assert bad[("compensated divider", "gain at infinite frequency")].error == pytest.approx(100)


# PWM 0..1 V, duty D, r = T/tau: (1 - e^(-D r))(1 - e^(-(1 - D) r))/(1 - e^(-r)); values from that form.
RIPPLES = [
    (0.5, 1.0, 0.2449186624037),
    (0.5, 0.1, 0.02499479296842),
    (0.25, 1.0, 0.1846358320877),
    (0.1, 0.1, 0.008999325132718),
]


@pytest.mark.parametrize(("duty", "r", "exact"), RIPPLES)
def test_ripple(network: Build, rules: Rules, duty: float, r: float, exact: float) -> None:
    """V D (1 - D)/(f R C) beside the exact ripple; it errs more, the longer the period."""
    wave = {"low": 0, "high": 1, "frequency": 1 / r, "duty": duty}
    stated = rules(network("R1 in out 1", "C1 out 0 1", square=wave))

    small = stated[("ripple of one section", "ripple")]
    assert small.value == pytest.approx(duty * (1 - duty) * r, rel=1e-9)
    assert small.exact == pytest.approx(exact, rel=1e-9)
    assert small.error == pytest.approx(100 * (duty * (1 - duty) * r / exact - 1), rel=1e-6)
    worst = stated[("worst ripple of one section", "ripple")]
    assert worst.value == pytest.approx(r / 4, rel=1e-9)
    assert worst.holds == (duty == 0.5 and r < 1)


def test_ripple_counts_the_load_rightly(network: Build, rules: Rules) -> None:
    """A load lowers the level and shortens the time constant: the ripple stays V D (1 - D)/(f R C)."""
    wave = {"low": 0, "high": 5, "frequency": "100 kHz", "duty": 0.3}
    stated = rules(network("R1 in out 1k", "C1 out 0 10u", "Rload out 0 1k", square=wave))

    small = stated[("ripple of one section", "ripple")]
    assert small.value == pytest.approx(5 * 0.3 * 0.7 / (1e5 * 1e3 * 1e-5), rel=1e-9)
    assert small.error == pytest.approx(0, abs=1e-3)


def test_ripple_of_two_sections(network: Build, rules: Rules) -> None:
    """Two isolated sections: the second integrates the first one's triangle."""
    wave = {"low": 0, "high": 3.3, "frequency": "10 kHz", "duty": 0.5}
    lines = ["R1 in a 1k", "C1 a 0 1u", "E1 b 0 a 0 1", "R2 b out 1k", "C2 out 0 1u"]
    stated = rules(network(*lines, square=wave))[("ripple of two sections", "ripple")]

    assert stated.value == pytest.approx(3.3 * 0.25 * 1e-8 / (8 * 1e-6), rel=1e-9)
    assert stated.holds
    assert abs(stated.error or 100) < 0.2


def test_droop(network: Build, rules: Rules) -> None:
    """A pulse of a tenth of R C sinks by 1 - exp(-0.1) behind a coupling capacitor."""
    wave = {"low": 0, "high": 1, "frequency": 0.1, "duty": 0.01}
    stated = rules(network("C1 in out 1", "R1 out 0 1", square=wave))
    (droop,) = (each for (rule, _), each in stated.items() if rule == "droop of a coupled pulse")

    assert droop.value == pytest.approx(0.09516258196404, rel=1e-9)
    assert droop.exact == pytest.approx(0.09516258196404, rel=1e-9)


def test_noise_of_a_buffered_chain(network: Build, rules: Rules) -> None:
    """Behind a follower earlier noise is carried in; two equal sections make 1 + 1/2 of k T/C."""
    lines = ["R1 in a 1k", "C1 a 0 1n", "E1 b 0 a 0 1", "R2 b out 1k", "C2 out 0 1n"]
    stated = rules(network(*lines))[("noise of a capacitor, kT/C", "noise")]

    # 300.15 K, 1 nF: 2.0356861 uV
    assert stated.value == pytest.approx(2.0356861e-6, rel=1e-7)
    # H^2 = 1/(1 + x^2) through a second section: the integral of 1/(1 + x^2)^2 is half that of 1/(1 + x^2).
    share = scipy.integrate.quad(lambda x: 1 / (1 + x * x) ** 2, 0, np.inf)[0] / (math.pi / 2)
    assert stated.error == pytest.approx(100 * (1 / math.sqrt(1 + share) - 1), rel=1e-6)
    assert not stated.holds


def test_noise_at_the_circuits_temperature() -> None:
    """T is the temperature of the circuit: 300 K and 1 nF make 2.0351774 uV."""
    from dataclasses import replace

    circuit = parse_netlist(
        "* level gauge\nVin in 0 ac 1\nR1 in out 1k\nC1 out 0 1n\n.print ac v(out)\n.end\n", ""
    )
    circuit = replace(circuit, conditions=replace(circuit.conditions, nominal=300 - 273.15))
    (noise,) = (r for r in derive(circuit).rules if r.rule == "noise of a capacitor, kT/C")

    assert noise.value == pytest.approx(2.0351774e-6, rel=1e-7)
    assert noise.error == pytest.approx(0, abs=1e-9)


# Evenly distributed line, W. Thomson 1855: omega R C at -3 dB, and step times over R C.
LINE = {
    ("corner of a distributed line", UPPER): 2.43238340264596097 / (2 * math.pi),
    ("times of a distributed line", "delay"): 0.378747838271396,
    ("times of a distributed line", "rise_time"): 0.900946091804982,
    ("times of a distributed line", "elmore_delay"): 0.5,
}


def test_distributed_line(network: Build, rules: Rules) -> None:
    """Fifty equal sections pass for a line; their cutoff is 2.38418346515/(R C), not 2.43238340265."""
    stated = rules(network(*ladder(50)))
    rc = 50.0 * 50.0

    for rule, value in LINE.items():
        scale = 1 / rc if rule[1] == UPPER else rc
        assert stated[rule].value == pytest.approx(value * scale, rel=1e-9)
        assert stated[rule].holds
    corner = stated[("corner of a distributed line", UPPER)]
    assert corner.error == pytest.approx(100 * (2.43238340265 / 2.38418346515 - 1), rel=1e-6)
    assert ("corner of a distributed line", UPPER) not in rules(network(*ladder(5)))


def test_elmore_of_ladders(network: Build, rules: Rules) -> None:
    """Elmore's sum is n (n + 1)/2 of a uniform ladder; ln 2 of it falls short of the 50 % delay of 4.5027."""
    stated = rules(network(*ladder(3)))

    assert stated[("Elmore's sum", "elmore_delay")].value == pytest.approx(6, rel=1e-12)
    assert stated[("Elmore's sum", "elmore_delay")].error == pytest.approx(0, abs=1e-9)
    half = stated[("half of a step after ln 2 tau", "delay")]
    assert half.exact == pytest.approx(4.50275047480941, rel=1e-9)
    assert half.error == pytest.approx(100 * (6 * math.log(2) / 4.50275047480941 - 1), rel=1e-6)
    rise = stated[("rise time 0.35 / bandwidth", "rise_time")]
    assert rise.value == pytest.approx(2.19722457733622 / STRAIGHT[3], rel=1e-9)
    assert rise.exact == pytest.approx(11.2775661424191, rel=1e-9)


def test_elmore_of_the_published_tree(network: Build, rules: Rules) -> None:
    """J. Rubinstein, P. Penfield, M. Horowitz (1983): the tree with T_D = 11 s and t50 = 7.947 s."""
    tree = network("R1 in a 1", "C1 a 0 1", "R2 a out 2", "C2 out 0 3", "R3 a b 4", "C3 b 0 1")
    stated = rules(tree)

    half = stated[("half of a step after ln 2 tau", "delay")]
    assert half.value == pytest.approx(11 * math.log(2), rel=1e-9)
    assert half.exact == pytest.approx(7.947303167244, rel=1e-9)
    assert half.where.startswith("T_elmore = 11")
    # T_P, the sum of what each capacitor sees alone, is 15 s.
    alone = stated[("open-circuit time constants", UPPER)]
    assert alone.value == pytest.approx(F1 / 15, rel=1e-9)


def test_rise_times_in_squares(network: Build, rules: Rules) -> None:
    """Two equal isolated sections: ln 9 sqrt(2), beside the root of (1 + t) exp(-t)."""
    stated = rules(network(*buffered(2)))[("rise times add in squares", "rise_time")]

    def time(share: float) -> float:
        return scipy.optimize.brentq(lambda t: 1 - (1 + t) * math.exp(-t) - share, 0, 20, xtol=1e-14)

    assert stated.value == pytest.approx(2.19722457733622 * math.sqrt(2), rel=1e-9)
    assert stated.exact == pytest.approx(time(0.9) - time(0.1), rel=1e-9)


def test_slopes(network: Build, rules: Rules) -> None:
    """Past ten times its corner, one section loses 20 dB in a decade less what the closed form lacks."""
    stated = rules(network("R1 in out 1", "C1 out 0 1"))
    loss = stated[("20 dB a decade for each section", "loss beyond 10 x upper cutoff")]

    assert loss.value == 20
    assert loss.exact == pytest.approx(10 * math.log10((1 + 1e4) / (1 + 1e2)), rel=1e-9)
    assert loss.error_unit == "dB"
    mirror = rules(network(*mirrored(2)))[("20 dB a decade for each section", "loss below lower cutoff / 10")]
    assert mirror.value == 40


def test_method_of_time_constants(network: Build, rules: Rules) -> None:
    """A stage with a coupling and a stray capacitor: each edge from its own, the other open or shorted."""
    lines = ["Rs in a 1k", "C1 a b 1u", "R2 b 0 100k", "R3 b out 10k", "C2 out 0 10p"]
    stated = rules(network(*lines))

    low = stated[("short-circuit time constants", LOWER)]
    high = stated[("open-circuit time constants", UPPER)]
    assert low.value == pytest.approx(F1 / (101e3 * 1e-6), rel=1e-9)
    seen = 10e3 + 1 / (1 / 1e3 + 1 / 100e3)
    assert high.value == pytest.approx(F1 / (seen * 10e-12), rel=1e-9)
    assert low.holds
    assert high.holds
    assert abs(low.error or 100) < 0.01
    assert abs(high.error or 100) < 0.01


def test_bridged_resistance_is_computed(network: Build, rules: Rules) -> None:
    """A capacitor across a bridge sees what no series and parallel formula gives; numpy's solution does."""
    lines = ["R1 in a 1", "R2 in b 2", "R3 a b 3", "R4 a 0 4", "R5 b 0 5", "C1 a 0 1", "C2 b 0 2"]
    stated = rules(network(*lines), "a")[("open-circuit time constants", UPPER)]

    conductances = np.array([[1 / 1 + 1 / 3 + 1 / 4, -1 / 3], [-1 / 3, 1 / 2 + 1 / 3 + 1 / 5]])
    seen = np.linalg.inv(conductances)
    assert stated.value == pytest.approx(F1 / (seen[0, 0] * 1 + seen[1, 1] * 2), rel=1e-9)


def test_sum_over_many_capacitors(network: Build, rules: Rules) -> None:
    """Beyond forty capacitors the sum is that of all natural time constants: n (n + 1)/2 of a ladder."""
    stated = rules(network(*ladder(45)))[("open-circuit time constants", UPPER)]

    assert stated.value == pytest.approx(F1 / (45 * 46 / 2), rel=1e-9)
    assert "45 capacitors" in stated.formula


def test_source_and_load(network: Build, rules: Rules) -> None:
    """Both lumped give the corner; left out, the error is what they change, and the rule says so."""
    stated = rules(network("Rs in a 1k", "R1 a out 9k", "C1 out 0 10n", "Rload out 0 90k"))

    whole, bare = (stated[(rule, UPPER)] for rule in ("corner of one section", "corner by R and C alone"))
    assert whole.formula == "1/(2*pi*parallel(R1 + Rs, Rload)*C1)"
    assert whole.value == pytest.approx(F1 / (9e3 * 10e-9), rel=1e-12)
    assert bare.formula == "1/(2*pi*R1*C1)"
    assert bare.error == pytest.approx(0, abs=1e-9)  # here the two happen to undo each other
    loaded = rules(network("R1 in out 9k", "C1 out 0 10n", "Rload out 0 9k"))[
        ("corner by R and C alone", UPPER)
    ]
    assert loaded.error == pytest.approx(-50, rel=1e-9)
    assert not loaded.holds


def test_current_source(network: Build, rules: Rules) -> None:
    """A current into a resistor is a voltage behind it."""
    lines = ["Rshunt hi 0 50", "R1 hi out 950", "C1 out 0 1u"]
    stated = rules(network(*lines, drive=("0", "hi"), kind="I"))

    assert stated[("corner of one section", UPPER)].value == pytest.approx(F1 / 1e-3, rel=1e-12)
    assert stated[("corner of one section", UPPER)].error == pytest.approx(0, abs=1e-9)


REED = """\
title = "Flow meter: reed contact"
output = "out"
[parts]
R1 = "in out 10k"
C1 = "out 0 1u"
Rleak = "out 0 1M"
[sources.Vreed]
nodes = "in 0"
ac = 1
step = { from = 0, to = 5 }
dc = 5
[[claims]]
says = "Empty within three seconds"
measure = "discharge_time"
part = "C1"
to = "1 V"
at_most = "3 s"
"""


def test_thresholds_and_discharge(tmp_path: Any) -> None:
    """With a threshold in a claim, charging to it and discharging to it are stated, R C ln of the ratio."""
    import rcnet

    path = tmp_path / "reed.rc.toml"
    path.write_text(REED, encoding="utf-8")
    stated = {(r.rule, r.stands_for): r for r in derive(rcnet.load(path)).rules}

    rise = stated[("time to a threshold", "time to 1 V")]
    tau = 1e-6 / (1e-4 + 1e-6)
    assert rise.value == pytest.approx(tau * math.log(5 / 4), rel=1e-9)
    assert rise.exact == pytest.approx(-tau * math.log1p(-1 / 5 * (1.01)), rel=1e-9)
    fall = stated[("discharge R C ln(V0/V)", "discharge_time (C1)")]
    assert fall.value == pytest.approx(1.0 * math.log(5), rel=1e-9)
    assert fall.exact == pytest.approx(1.0 * math.log(5 / 1.01), rel=1e-9)


def test_threshold_of_a_measurement() -> None:
    """A netlist's `.meas ... when v(out)=` names a threshold too."""
    text = (
        "* reed contact\nVin in 0 dc 0 ac 1 pulse(0 5 0 1u 1u 50m 100m)\nR1 in out 10k\nC1 out 0 1u\n"
        ".tran 1m 100m\n.meas tran late when v(out)=2.5\n.print tran v(out)\n.end\n"
    )
    stated = {(r.rule, r.stands_for): r for r in derive(parse_netlist(text, "")).rules}

    assert stated[("time to a threshold", "time to 2.5 V")].value == pytest.approx(
        10e-3 * math.log(2), rel=1e-9
    )


def test_rules_need_their_waveform(network: Build, rules: Rules) -> None:
    """Without pulses and thresholds no rule about them is stated."""
    names = {rule for rule, _ in rules(network("R1 in out 1k", "C1 out 0 1u"))}

    assert not names & {"ripple of one section", "time to a threshold", "discharge R C ln(V0/V)"}
    assert "corner of one section" in names


def test_table_is_in_order() -> None:
    """Each rule stands in the table once, with what it assumes."""
    names = [rule.name for rule in RULES]

    assert len(set(names)) == len(names)
    assert all(rule.assumes and not rule.assumes.endswith(".") for rule in RULES)


def test_valve_positioner_by_hand() -> None:
    """The starter's own formulas: mpmath's cutoff of its chain matrix, and the error of the isolated rule."""
    import rcnet
    from rcnet.resources import starters

    done = derive(rcnet.load(starters()["valve-positioner"]))
    stated = {(r.rule, r.stands_for): r for r in done.rules}
    r1, c1, r2, c2, load = 4700, mpmath.mpf("1e-6"), 47000, mpmath.mpf("1e-7"), 1000000

    def gain(w: Any) -> Any:
        s = 1j * w
        end = 1 / (s * c2 + mpmath.mpf(1) / load)
        middle = 1 / (s * c1 + 1 / (r2 + end))
        return abs(middle / (middle + r1) * end / (end + r2))

    half = gain(mpmath.mpf(0)) / mpmath.sqrt(2)
    cutoff = mpmath.findroot(lambda w: gain(w) - half, 130) / (2 * mpmath.pi)
    isolated = stated[("n equal sections, isolated", UPPER)]
    assert isolated.exact == pytest.approx(float(cutoff), rel=1e-9)
    by_hand = ISOLATED[2] * F1 / 4.7e-3
    assert isolated.value == pytest.approx(by_hand, rel=1e-9)
    assert isolated.error == pytest.approx(100 * (by_hand / float(cutoff) - 1), rel=1e-6)


def test_circuit_is_not_changed(network: Build) -> None:
    """Deriving leaves the circuit as it was."""
    made = network("R1 in out 1k", "C1 out 0 1u", ac=None, step={"from": 0, "to": 1})
    circuit = Circuit(made)
    done = derive(circuit)

    assert done.source == "Vgauge"
    assert done.circuit is circuit
    assert made.sources["Vgauge"].ac is None
