"""The measures against closed forms, published tables and 30-digit arithmetic.

Tables: the equal-section ladder is H = 1/b_n(s RC) with the Morgan-Voyce polynomials b_n (A. M. Morgan-Voyce,
IRE Trans. Circuit Theory CT-6(3):321-322, 1959); the cutoffs of these and of the tapered ladders were worked
out from the transfer functions in 40-digit arithmetic, without this project.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Sequence
from typing import Any

import mpmath as mp
import numpy as np
import pytest
import scipy.signal
from hypothesis import given, settings
from hypothesis import strategies as st

import rcnet
from rcnet import Network, UndecidedError
from rcnet.circuit import MEASURES
from rcnet.claims import measure

R, C = 1e3, 1e-6
F1 = 1 / (2 * math.pi * R * C)

# Cutoff over 1/(2 pi RC) of n equal sections, and their slowest time constants' sum (Elmore) in RC.
LADDER = {
    1: 1.0,
    2: 0.374239154338852,
    3: 0.194286000459512,
    4: 0.118490377691281,
    5: 0.0796654471020062,
    6: 0.0571854459342470,
    7: 0.0430231610088039,
    8: 0.0335326912557638,
    9: 0.0268657579057766,
    10: 0.0220047584971262,
}
HIGHPASS = {
    2: 2.67208812441511,
    3: 5.14705124216293,
    4: 8.43950386085728,
    5: 12.5524934131050,
    6: 17.4869668962592,
    7: 23.2432944616823,
    8: 29.8216445668707,
    9: 37.2221027043866,
    10: 45.4447159749833,
}
# Section i has R k^(i-1) and C / k^(i-1): (n, k) -> cutoff over 1/(2 pi RC).
TAPER = {
    (2, 2): 0.4727967623694,
    (2, 5): 0.5628309046500,
    (2, 10): 0.6007447986993,
    (2, 100): 0.6390707401566,
    (3, 2): 0.3047469903076,
    (3, 10): 0.4587244961893,
    (4, 5): 0.3364831229463,
    (5, 100): 0.3802728648893,
    (6, 2): 0.1533117982870,
    (7, 10): 0.2753489227392,
    (8, 5): 0.2149115374870,
    (9, 2): 0.1086837803169,
    (10, 2): 0.1000924982079,
    (10, 100): 0.2634340952749,
}
# Equal sections with followers between them: sqrt(2^(1/n) - 1).
BUFFERED = {1: 1.0, 2: 0.643594252905583, 3: 0.509824528533959, 5: 0.385614256734674, 10: 0.267905697095626}


def driven(title: str = "") -> Network:
    """A network with a source of 1 V ac from `in` to ground."""
    net = Network(title)
    net.add_voltage_source("V1", "in", "0", ac=1)
    return net


def ladder(resistors: Sequence[float], capacitors: Sequence[float], *, highpass: bool = False) -> Network:
    """Series R and shunt C from `in` to `out`, or series C and shunt R."""
    net, last, count = driven("ladder"), "in", len(resistors)
    for number, (r, c) in enumerate(zip(resistors, capacitors, strict=True), 1):
        node = "out" if number == count else f"n{number}"
        if highpass:
            net.add_capacitor(f"C{number}", last, node, c)
            net.add_resistor(f"R{number}", node, "0", r)
        else:
            net.add_resistor(f"R{number}", last, node, r)
            net.add_capacitor(f"C{number}", node, "0", c)
        last = node
    return net


def twin_t(r: float = R, c: float = C) -> Network:
    """R, R, shunt 2C; C, C, shunt R/2: (1 + x^2)/(1 + 4x + x^2) with x = sRC."""
    net = driven("level probe hum notch")
    net.add_resistor("R1", "in", "a", r)
    net.add_resistor("R2", "a", "out", r)
    net.add_capacitor("C3", "a", "0", 2 * c)
    net.add_capacitor("C1", "in", "b", c)
    net.add_capacitor("C2", "b", "out", c)
    net.add_resistor("R3", "b", "0", r / 2)
    return net


def wien() -> Network:
    """Series R, C, then R and C to ground: peak 1/3 at 1/RC."""
    net = driven("wien")
    net.add_resistor("R1", "in", "a", R)
    net.add_capacitor("C1", "a", "out", C)
    net.add_resistor("R2", "out", "0", R)
    net.add_capacitor("C2", "out", "0", C)
    return net


def lattice() -> Network:
    """R and C crosswise: between the midpoints (1 - x)/(1 + x)."""
    net = driven("lattice")
    net.add_resistor("R1", "in", "a", R)
    net.add_capacitor("C1", "a", "0", C)
    net.add_capacitor("C2", "in", "b", C)
    net.add_resistor("R2", "b", "0", R)
    return net


def resonator(r: float, inductance: float, c: float) -> Network:
    """Series R and L, output across C: a peak as narrow as R is small."""
    net = driven("leak listener")
    net.add_resistor("R1", "in", "a", r)
    net.add_inductor("L1", "a", "out", inductance)
    net.add_capacitor("C1", "out", "0", c)
    return net


def sallen_key(gain: float, r: float = 10e3, c: float = 10e-9) -> Network:
    """Equal parts around an amplifier of that gain: gain/(1 + (3 - gain) x + x^2), so Q = 1/(3 - gain)."""
    net = driven("active")
    net.add_resistor("R1", "in", "a", r)
    net.add_resistor("R2", "a", "b", r)
    net.add_capacitor("C1", "a", "out", c)
    net.add_capacitor("C2", "b", "0", c)
    net.add_voltage_controlled_voltage_source("E1", "out", "0", "b", "0", gain)
    net.add_resistor("R3", "out", "0", 1e6)
    return net


def close(got: float, want: Any, relative: float = 1e-12) -> None:
    """Fail unless two numbers agree to twelve digits, or as stated."""
    assert got == pytest.approx(float(want), rel=relative, abs=0)


def ladder_response(resistors: Sequence[float], capacitors: Sequence[float], omega: Any) -> Any:
    """H of a ladder by chain matrices in mpmath, from the end back to the source."""
    voltage, current = mp.mpc(1), mp.mpc(0)
    for r, c in zip(reversed(resistors), reversed(capacitors), strict=True):
        current += voltage * mp.mpc(0, omega) * mp.mpf(c)
        voltage += current * mp.mpf(r)
    return 1 / voltage


def half_power_root(magnitude: Callable[[Any], Any], peak: Any, low: Any, high: Any) -> Any:
    """Where |H|^2 is half of peak^2 between two rad/s, in Hz, by bisection at 30 digits."""
    rising = magnitude(low) ** 2 * 2 < peak**2
    assert rising != (magnitude(high) ** 2 * 2 < peak**2)
    for _ in range(80):
        middle = mp.sqrt(low * high)
        if (magnitude(middle) ** 2 * 2 < peak**2) == rising:
            low = middle
        else:
            high = middle
    return low / (2 * mp.pi)


# ---------------------------------------------------------------------- cutoff


@pytest.mark.parametrize("n", LADDER)
def test_cutoff_of_equal_sections(n: int) -> None:
    """Equal sections, n in one ladder cut off where 1/b_n(j x) says, not at 1/(2 pi RC)."""
    close(ladder([R] * n, [C] * n).measure("cutoff") / F1, LADDER[n])


@pytest.mark.parametrize("n", HIGHPASS)
def test_cutoff_of_the_high_pass_mirror(n: int) -> None:
    """Series C and shunt R mirror the low-pass: the cutoff is the reciprocal."""
    got = ladder([R] * n, [C] * n, highpass=True).measure("cutoff") / F1
    close(got, HIGHPASS[n])
    close(got * LADDER[n], 1)


@pytest.mark.parametrize(("n", "k"), TAPER)
def test_cutoff_of_tapered_ladders(n: int, k: int) -> None:
    """A ladder whose impedance rises by k a section loads itself less."""
    net = ladder([R * k**i for i in range(n)], [C / k**i for i in range(n)])
    close(net.measure("cutoff") / F1, TAPER[n, k])


@pytest.mark.parametrize("n", BUFFERED)
def test_cutoff_with_followers(n: int) -> None:
    """With a follower behind every section the cutoff is sqrt(2^(1/n) - 1)."""
    net, last = driven(), "in"
    for number in range(1, n + 1):
        net.add_resistor(f"R{number}", last, f"a{number}", R)
        net.add_capacitor(f"C{number}", f"a{number}", "0", C)
        last = "out" if number == n else f"b{number}"
        net.add_voltage_controlled_voltage_source(f"E{number}", last, "0", f"a{number}", "0", 1)
    net.add_resistor("Rload", "out", "0", R)
    close(net.measure("cutoff") / F1, BUFFERED[n])


@given(st.lists(st.tuples(st.floats(1, 7), st.floats(-12, -6)), min_size=1, max_size=7))
@settings(max_examples=25, deadline=None)
def test_cutoff_of_random_ladders(exponents: list[tuple[float, float]]) -> None:
    """Ladders with parts over six decades cut off where 30-digit root finding says, to 1e-12."""
    resistors = [10**r for r, _ in exponents]
    capacitors = [10**c for _, c in exponents]
    with mp.workdps(30):
        # The sum of all R times the C behind them bounds the cutoff from below, a share of it from above.
        slow = sum(sum(resistors[: k + 1]) * c for k, c in enumerate(capacitors))
        want = half_power_root(
            lambda w: abs(ladder_response(resistors, capacitors, w)),
            mp.mpf(1),
            mp.mpf("0.1") / slow,
            10 / slow,
        )
        close(ladder(resistors, capacitors).measure("cutoff"), want)


@given(st.floats(1e-6, 1e6), st.integers(1, 5))
@settings(max_examples=25, deadline=None)
def test_cutoff_scales_with_the_capacitors(k: float, n: int) -> None:
    """All C times k moves the cutoff to 1/k of it."""
    first = ladder([R * (i + 1) for i in range(n)], [C] * n).measure("cutoff")
    second = ladder([R * (i + 1) for i in range(n)], [C * k] * n).measure("cutoff")
    close(second * k, first)


# ---------------------------------------------------------------------- bands


def test_wien_band() -> None:
    """The Wien network: -3 dB at (sqrt 13 -+ 3)/2, peak 1/3 at 1/RC with phase 0, bandwidth 3, centre 1."""
    net = wien()
    close(net.measure("cutoff", edge="lower") / F1, 0.302775637731995)
    close(net.measure("cutoff", edge="upper") / F1, 3.30277563773199)
    close(net.measure("bandwidth") / F1, 3)
    close(net.measure("centre") / F1, 1)
    close(net.measure("gain", at=F1), 20 * math.log10(1 / 3))
    assert net.measure("phase", at=F1) == pytest.approx(0, abs=1e-12)
    assert net.measure("attenuation", at=F1) == pytest.approx(0, abs=1e-12)
    assert net.measure("dc_gain") == 0


def test_twin_t_band() -> None:
    """The twin-T: -3 dB at sqrt 5 -+ 2, `lower` being the lower frequency; 4 wide, centred on the null."""
    net = twin_t()
    close(net.measure("cutoff", edge="lower") / F1, 0.23606797749979)
    close(net.measure("cutoff", edge="upper") / F1, 4.23606797749979)
    close(net.measure("bandwidth") / F1, 4)
    close(net.measure("centre") / F1, 1)
    close(net.measure("dc_gain"), 1)


@pytest.mark.parametrize("f", [0.5, 0.99, 0.999999, 1.00001, 3.0])
def test_twin_t_gain_beside_the_null(f: float) -> None:
    """Beside the null the gain is |1 - x^2| / |1 - x^2 + 4jx|, however deep."""
    with mp.workdps(30):
        x = 2 * mp.pi * mp.mpf(f * F1) * mp.mpf(R) * mp.mpf(C)
        want = 20 * mp.log10(abs((1 - x**2) / mp.mpc(1 - x**2, 4 * x)))
    assert twin_t().measure("gain", at=f * F1) == pytest.approx(float(want), abs=1e-8)


@pytest.mark.parametrize("q", [2.0, 30.0, 1e3, 1e5])
def test_resonant_peak(q: float) -> None:
    """A series RLC peaks at Q/sqrt(1 - 1/(4Q^2)) and both cutoffs solve a quadratic in omega^2.

    |H|^-2 = (1 - y)^2 + y/Q^2 with y = (omega/omega0)^2, least 1/Q^2 (1 - 1/(4Q^2)) at y = 1 - 1/(2Q^2).
    """
    inductance, c = 1e-3, 1e-9
    r = math.sqrt(inductance / c) / q
    net = resonator(r, inductance, c)
    with mp.workdps(30):
        lc = mp.mpf(inductance) * mp.mpf(c)
        a = mp.mpf(r) ** 2 * mp.mpf(c) / mp.mpf(inductance)  # 1/Q^2 of the very doubles
        least = a - a**2 / 4
        root = mp.sqrt((2 - a) ** 2 / 4 - 1 + 2 * least)
        edges = [mp.sqrt((1 - a / 2 + sign * root) / lc) / (2 * mp.pi) for sign in (-1, 1)]
        peak = -10 * mp.log10(least)
    close(net.measure("cutoff", edge="lower"), edges[0])
    close(net.measure("cutoff", edge="upper"), edges[1])
    close(net.measure("bandwidth"), edges[1] - edges[0], 1e-15 * 30 * q + 1e-12)
    # attenuation = peak - gain: at a decade above it tells the peak
    f = 10 * float(edges[1])
    assert net.measure("attenuation", at=f) + net.measure("gain", at=f) == pytest.approx(
        float(peak), abs=1e-9
    )


@pytest.mark.parametrize("gain", [1.0, 2.0, 2.9, 2.9999])
def test_active_filter(gain: float) -> None:
    """An amplifier with RC feedback: gain/(1 + (3 - gain) x + x^2), its cutoff to 30 digits."""
    r, c = 10e3, 10e-9
    net = sallen_key(gain, r, c)
    with mp.workdps(30):
        rc, loss = mp.mpf(r) * mp.mpf(c), 3 - mp.mpf(gain)

        def magnitude(w: Any) -> Any:
            x = w * rc
            return mp.mpf(gain) / abs(mp.mpc(1 - x**2, loss * x))

        squared = 1 - loss**2 / 2  # where the peak lies, in x^2, if above zero
        peak_at = mp.sqrt(squared) / rc if squared > 0 else mp.mpf("1e-9") / rc
        peak = magnitude(peak_at) if squared > 0 else mp.mpf(gain)
        upper = half_power_root(magnitude, peak, peak_at, 10 / rc)
        if peak > mp.sqrt(2) * gain:
            lower = half_power_root(magnitude, peak, peak_at / 10, peak_at)
            close(net.measure("cutoff", edge="lower"), lower, 1e-11)
    close(net.measure("cutoff", edge="upper"), upper, 1e-11)
    close(net.measure("dc_gain"), gain)


def test_two_coupled_peaks() -> None:
    """Two resonators with weak coupling have two narrow peaks; the cutoffs lie beside the higher one."""
    net = driven("pair")
    for name, a, b in (("1", "in", "m"), ("2", "m", "out")):
        net.add_resistor(f"R{name}", a, f"x{name}", 1.0)
        net.add_inductor(f"L{name}", f"x{name}", b, 1e-3 if name == "1" else 1.1e-3)
    net.add_capacitor("Cm", "m", "0", 1e-7)
    net.add_capacitor("Cout", "out", "0", 1e-9)
    with mp.workdps(30):

        def magnitude(w: Any) -> Any:
            s = mp.mpc(0, w)
            tail = 1 + s * mp.mpf(1.1e-3), 1 / (s * mp.mpf(1e-9))
            shunt = 1 / (s * mp.mpf(1e-7) + 1 / (tail[0] + tail[1]))
            return abs(shunt / (shunt + 1 + s * mp.mpf(1e-3)) * tail[1] / (tail[0] + tail[1]))

        grid = [mp.mpf(10) ** (mp.mpf(k) / 4000) for k in range(16000, 28000)]
        heights = [magnitude(w) for w in grid]
        best = max(range(1, len(grid) - 1), key=lambda k: heights[k])
        at = mp.findroot(lambda w: mp.diff(magnitude, w), grid[best], tol=1e-18)
        upper = half_power_root(magnitude, magnitude(at), at, at * mp.mpf("1.02"))
        lower = half_power_root(magnitude, magnitude(at), at * mp.mpf("0.98"), at)
    close(net.measure("cutoff", edge="upper"), upper, 1e-11)
    close(net.measure("cutoff", edge="lower"), lower, 1e-11)


# ---------------------------------------------------------------------- gain and phase


@pytest.mark.parametrize("n", [3, 4])
@pytest.mark.parametrize("highpass", [False, True])
def test_phase_shift_networks(n: int, highpass: bool) -> None:
    """Three sections turn by 180 degrees at sqrt 6 (or 1/sqrt 6), 1/29 left; four at sqrt(10/7), 49/901."""
    x = {3: math.sqrt(6), 4: math.sqrt(10 / 7)}[n]
    gain = {3: -29.2479599579791, 4: 20 * math.log10(49 / 901)}[n]
    f = F1 / x if highpass else F1 * x
    net = ladder([R] * n, [C] * n, highpass=highpass)
    assert net.measure("gain", at=f) == pytest.approx(gain, abs=1e-12)
    # The low-pass starts at 0 and falls; the high-pass starts at n times 90, brought into (-180, 180].
    start = {3: -90, 4: 0}[n] if highpass else 0
    lead = {3: -90, 4: -180}[n] if highpass else -180
    assert net.measure("phase", at=f) == pytest.approx(start + lead, abs=1e-9)


@pytest.mark.parametrize("x", [1e-9, 1e-3, 0.1, 1.0, 7.0, 1e3, 1e9])
def test_all_pass_phase_is_continuous(x: float) -> None:
    """The lattice is an all-pass: phase -2 arctan(omega RC) from 0 to -180 without a jump, gain 0 dB."""
    net = lattice()
    assert net.measure("phase", of="a b", at=x * F1) == pytest.approx(
        -2 * math.degrees(math.atan(x)), abs=1e-9
    )
    assert net.measure("gain", of="a b", at=x * F1) == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize("n", [1, 8, 60, 150])
@pytest.mark.parametrize("x", [1e-4, 0.02, 1.0, 5.0])
def test_phase_of_long_ladders_counts_every_turn(n: int, x: float) -> None:
    """A long ladder turns many times: the sum of arctan over its poles 4 sin^2((2k-1) pi/(4n+2))."""
    with mp.workdps(30):
        poles = [4 * mp.sin((2 * k - 1) * mp.pi / (2 * (2 * n + 1))) ** 2 for k in range(1, n + 1)]
        want = -mp.degrees(sum(mp.atan(mp.mpf(x) / pole) for pole in poles))
    assert ladder([R] * n, [C] * n).measure("phase", at=x * F1) == pytest.approx(
        float(want), rel=1e-12, abs=1e-9
    )


PHASE_LIMITS = {
    "low-pass": (ladder([R], [C]), "out", 0.0),
    "one high-pass section": (ladder([R], [C], highpass=True), "out", 90.0),
    "two high-pass sections": (ladder([R] * 2, [C] * 2, highpass=True), "out", 180.0),
    "three high-pass sections": (ladder([R] * 3, [C] * 3, highpass=True), "out", -90.0),
    "inverted": (lattice(), "b a", 180.0),
}


@pytest.mark.parametrize("case", PHASE_LIMITS)
def test_phase_at_the_lowest_frequencies(case: str) -> None:
    """At zero the phase is its limit, in (-180, 180]; from there it is followed."""
    net, of, want = PHASE_LIMITS[case]
    assert net.measure("phase", of=of, at=0) == want
    assert net.measure("phase", of=of, at=1e-12) == pytest.approx(want, abs=1e-9)


@pytest.mark.parametrize("f", [1.0, F1, 1e5])
def test_single_pole(f: float) -> None:
    """One section: gain -10 log10(1 + x^2), phase -arctan x, group delay RC/(1 + x^2)."""
    net, x = ladder([R], [C]), f / F1
    assert net.measure("gain", at=f) == pytest.approx(-10 * math.log10(1 + x * x), abs=1e-12)
    assert net.measure("attenuation", at=f) == pytest.approx(10 * math.log10(1 + x * x), abs=1e-12)
    assert net.measure("phase", at=f) == pytest.approx(-math.degrees(math.atan(x)), abs=1e-12)
    close(net.measure("group_delay", at=f), R * C / (1 + x * x))
    close(ladder([R], [C], highpass=True).measure("group_delay", at=f), R * C / (1 + x * x), 1e-9)


@pytest.mark.parametrize("f", [0.0, 1e-6])
def test_group_delay_at_the_lowest_frequencies(f: float) -> None:
    """Towards zero a single pole delays by RC, in the low-pass and in the high-pass alike."""
    close(ladder([R], [C]).measure("group_delay", at=f), R * C)
    close(ladder([R], [C], highpass=True).measure("group_delay", at=f), R * C, 1e-9)


@pytest.mark.parametrize("f", [3.0, 77.0, 1e3, 3e4])
def test_group_delay_against_a_derivative(f: float) -> None:
    """-d(phase)/d(omega) of a ladder with unequal sections, differentiated numerically at 30 digits."""
    resistors, capacitors = [1e3, 4.7e3, 220.0, 1e4], [1e-7, 2.2e-8, 4.7e-7, 1e-9]
    with mp.workdps(30):
        omega = 2 * mp.pi * mp.mpf(f)
        slope = mp.diff(lambda w: mp.log(ladder_response(resistors, capacitors, w)), omega)
    close(ladder(resistors, capacitors).measure("group_delay", at=f), -mp.im(slope), 1e-11)


def test_against_scipy_signal() -> None:
    """Gain and phase of the compensated divider and the bridged T as scipy.signal.freqs has them."""
    r1, r2, c1, c2 = 9e6, 1e6, 12e-12, 95e-12
    divider = driven("compensated divider")
    divider.add_resistor("R1", "in", "out", r1)
    divider.add_capacitor("C1", "in", "out", c1)
    divider.add_resistor("R2", "out", "0", r2)
    divider.add_capacitor("C2", "out", "0", c2)
    bridged = driven("bridged T")
    bridged.add_capacitor("C1", "in", "m", C)
    bridged.add_capacitor("C2", "m", "out", C)
    bridged.add_resistor("R2", "m", "0", R)
    bridged.add_resistor("R1", "in", "out", 20 * R)
    ra, rb = 20 * R, R
    cases = [
        (divider, [r2 * c1 * r1, r2], [(c1 + c2) * r1 * r2, r1 + r2]),
        (bridged, [C * C * ra * rb, 2 * C * rb, 1], [C * C * ra * rb, C * ra + 2 * C * rb, 1]),
    ]
    for net, numerator, denominator in cases:
        frequencies = np.geomspace(0.1, 1e7, 9)
        _, want = scipy.signal.freqs(numerator, denominator, 2 * np.pi * frequencies)
        for f, h in zip(frequencies.tolist(), want.tolist(), strict=True):
            assert net.measure("gain", at=f) == pytest.approx(20 * math.log10(abs(h)), abs=1e-9)
            turned = (net.measure("phase", at=f) - math.degrees(np.angle(h))) % 360
            assert min(turned, 360 - turned) < 1e-8


def test_bridged_t_floor() -> None:
    """The bridged T is least, 2R2/(R1 + 2R2), at 1/(C sqrt(R1 R2))."""
    ra, rb = 20 * R, R
    net = driven()
    net.add_capacitor("C1", "in", "m", C)
    net.add_capacitor("C2", "m", "out", C)
    net.add_resistor("R2", "m", "0", rb)
    net.add_resistor("R1", "in", "out", ra)
    f = 1 / (2 * math.pi * C * math.sqrt(ra * rb))
    assert net.measure("gain", at=f) == pytest.approx(20 * math.log10(2 * rb / (ra + 2 * rb)), abs=1e-12)
    assert net.measure("attenuation", at=f) == pytest.approx(
        -20 * math.log10(2 * rb / (ra + 2 * rb)), abs=1e-12
    )


def test_compensated_divider_is_flat() -> None:
    """With R1 C1 = R2 C2 the divider is R2/(R1 + R2) at every frequency and has no cutoff."""
    net = driven()
    net.add_resistor("R1", "in", "out", 9e6)
    net.add_capacitor("C1", "in", "out", 10e-12)
    net.add_resistor("R2", "out", "0", 1e6)
    net.add_capacitor("C2", "out", "0", 90e-12)
    for f in (0, 1e-3, 1768.0, 1e9):
        assert net.measure("gain", at=f) == pytest.approx(-20, abs=1e-12)
        assert net.measure("phase", at=f) == pytest.approx(0, abs=1e-9)
    with pytest.raises(UndecidedError, match="no cutoff"):
        net.measure("cutoff")


@given(st.floats(1e-6, 1e6), st.floats(-3, 6))
@settings(max_examples=25, deadline=None)
def test_gain_survives_impedance_scaling(k: float, decade: float) -> None:
    """All R times k and all C over k leave every voltage ratio as it was."""
    f = 10**decade
    first = wien().measure("gain", at=f)
    scaled = wien().with_values({"R1": R * k, "R2": R * k, "C1": C / k, "C2": C / k})
    assert scaled.measure("gain", at=f) == pytest.approx(first, abs=1e-11)


# ---------------------------------------------------------------------- dc, delay, impedances


@pytest.mark.parametrize("n", range(1, 11))
def test_elmore_delay(n: int) -> None:
    """Equal sections, n of them, delay by n(n+1)/2 RC (Elmore); a taper by the sum of (n-d) k^-d."""
    close(ladder([R] * n, [C] * n).measure("elmore_delay") / (R * C), n * (n + 1) / 2)
    k = 3
    tapered = ladder([R * k**i for i in range(n)], [C / k**i for i in range(n)])
    close(tapered.measure("elmore_delay") / (R * C), sum((n - d) * k**-d for d in range(n)))


def test_elmore_delay_of_a_tree() -> None:
    """The check tree of Rubinstein, Penfield and Horowitz's bounds: T_D = 11."""
    net = driven()
    net.add_resistor("R1", "in", "a", 1)
    net.add_capacitor("C1", "a", "0", 1)
    net.add_resistor("R2", "a", "out", 2)
    net.add_capacitor("C2", "out", "0", 3)
    net.add_resistor("R3", "a", "b", 4)
    net.add_capacitor("C3", "b", "0", 1)
    close(net.measure("elmore_delay"), 11)


def test_dc_gain_is_signed() -> None:
    """The dc gain of a divider, of an inverting source, and of a pair with its nodes exchanged."""
    net = driven()
    net.add_resistor("R1", "in", "out", 3e3)
    net.add_resistor("R2", "out", "0", 1e3)
    net.add_voltage_controlled_voltage_source("E1", "x", "0", "out", "0", -8)
    net.add_resistor("R3", "x", "0", 1e3)
    close(net.measure("dc_gain"), 0.25)
    close(net.measure("dc_gain", of="x"), -2)
    close(net.measure("dc_gain", of="out in"), -0.75)
    assert ladder([R] * 3, [C] * 3, highpass=True).measure("dc_gain") == 0.0


@pytest.mark.parametrize("f", [0.01, 159.0, 1e6])
def test_impedances(f: float) -> None:
    """Into an RC section |R + 1/sC|, out of it |R parallel 1/sC|."""
    with mp.workdps(30):
        z = 1 / (mp.mpc(0, 2 * mp.pi * mp.mpf(f)) * mp.mpf(C))
        close(ladder([R], [C]).measure("input_impedance", at=f), abs(R + z))
        close(ladder([R], [C]).measure("output_impedance", at=f), abs(R * z / (R + z)))


def test_impedances_of_a_current_drive() -> None:
    """A current source sees the impedance across it; it counts as open for the output impedance."""
    net = Network()
    net.add_current_source("I1", "0", "out", ac=1)
    net.add_resistor("R1", "out", "0", 2e3)
    net.add_resistor("R2", "out", "0", 2e3)
    close(net.measure("input_impedance", at=50), 1e3)
    close(net.measure("output_impedance", at=50), 1e3)
    close(net.measure("dc_gain"), 1e3)


# ---------------------------------------------------------------------- where there is no such number

UNDECIDED: dict[str, tuple[Network, str, dict[str, Any], str]] = {
    "all-pass has no cutoff": (lattice(), "cutoff", {"of": "a b"}, "no cutoff"),
    "low-pass has no lower cutoff": (ladder([R], [C]), "cutoff", {"edge": "lower"}, "no lower cutoff"),
    "high-pass has no upper cutoff": (
        ladder([R], [C], highpass=True),
        "cutoff",
        {"edge": "upper"},
        "no upper cutoff",
    ),
    "two cutoffs need an edge": (wien(), "cutoff", {}, "there are two cutoffs"),
    "low-pass has no bandwidth": (ladder([R], [C]), "bandwidth", {}, "no lower cutoff"),
    "low-pass has no centre": (ladder([R], [C]), "centre", {}, "no lower cutoff"),
    "gain at a null": (twin_t(), "gain", {"at": F1}, "nothing arrives"),
    "attenuation at a null": (twin_t(), "attenuation", {"at": F1}, "nothing arrives"),
    "phase beyond a null": (twin_t(), "phase", {"at": 10 * F1}, "vanishes|nothing arrives"),
    "gain of a high-pass at zero": (ladder([R], [C], highpass=True), "gain", {"at": 0}, "nothing arrives"),
    "elmore delay of a high-pass": (
        ladder([R], [C], highpass=True),
        "elmore_delay",
        {},
        "nothing passes at dc",
    ),
    "infinite input impedance": (ladder([R], [C]), "input_impedance", {"at": 0}, "infinite"),
}


@pytest.mark.parametrize("case", UNDECIDED)
def test_undecided(case: str) -> None:
    """A measure that does not exist for a network says why, and gives no number."""
    net, name, options, why = UNDECIDED[case]
    with pytest.raises(UndecidedError, match=why):
        net.measure(name, **options)


@pytest.mark.parametrize("f", [1.0, 1e3, 1e6])
def test_balanced_bridge_gives_no_number(f: float) -> None:
    """Between the midpoints of a balanced bridge there is nothing, not the rounding of two equal voltages."""
    net = driven()
    for name, top, bottom in (("a", 1e3, 2e3), ("b", 1.7e3, 3.4e3)):
        net.add_resistor(f"R{name}1", "in", name, top)
        net.add_resistor(f"R{name}2", name, "0", bottom)
    with pytest.raises(UndecidedError):
        net.measure("gain", of="a b", at=f)


OPTIONS: dict[str, dict[str, Any]] = {
    "settling_time": {"band": 0.01},
    "harmonic": {"order": 3},
    "noise": {"from_": 20, "to": 2e4},
    "dissipation": {"part": "R1"},
    "discharge_time": {"part": "C1", "to": 0.1},
    **{
        name: {"at": 100.0}
        for name in ("gain", "attenuation", "phase", "group_delay", "input_impedance", "output_impedance")
    },
}


def test_every_measure_of_the_interface_is_known() -> None:
    """The table holds the 24 measures of the interface, and no other."""
    assert list(MEASURES) == [
        *("gain", "attenuation", "phase", "group_delay", "cutoff", "bandwidth", "centre", "dc_gain"),
        *("input_impedance", "output_impedance", "time_constant", "elmore_delay", "rise_time", "delay"),
        *("settling_time", "mean", "rms", "ripple", "harmonic", "thd", "noise", "dissipation"),
        *("peak_voltage", "discharge_time"),
    ]


PERIODIC = ("mean", "rms", "ripple", "harmonic", "thd")


@pytest.mark.parametrize("name", MEASURES)
def test_every_measure_is_accepted(name: str) -> None:
    """Each name is taken with its options: it gives a finite number or is undecided, never anything else."""
    try:
        value = measure(wien(), name, **OPTIONS.get(name, {}))
    except UndecidedError as exc:
        # A Wien section has two cutoffs, passes no dc, and its source here has no waveform.
        assert name in ("cutoff", "elmore_delay", "rise_time", "delay", "settling_time", *PERIODIC)
        assert exc.message.endswith(".")
    else:
        assert math.isfinite(value)


def test_options_are_read_as_text() -> None:
    """Options may be written with units, and say what is wrong where they do not fit."""
    net = ladder([R], [C])
    assert net.measure("gain", at="1 kHz") == net.measure("gain", at=1000)
    with pytest.raises(rcnet.QuantityError):
        net.measure("gain", at="1 kohm")
    with pytest.raises(rcnet.CircuitError, match="'at'"):
        net.measure("gain")
    with pytest.raises(rcnet.CircuitError, match="no measure called"):
        net.measure("gian", at=1)
    with pytest.raises(rcnet.CircuitError, match="no node called"):
        net.measure("gain", of="outt", at=1)


def test_a_changed_network_is_measured_anew() -> None:
    """A part added later counts: nothing is remembered of the network as it was."""
    net = ladder([R], [C])
    before = net.measure("cutoff")
    net.add_capacitor("Cx", "out", "0", C)
    close(net.measure("cutoff"), before / 2)


def test_measures_do_not_change_the_network() -> None:
    """A network is the same after every measure was taken of it."""
    net = wien()
    before = [tuple(net.parts), net.nodes, net.sources]
    for name, edge in itertools.product(("cutoff",), ("lower", "upper")):
        net.measure(name, edge=edge)
    net.measure("phase", at=100)
    assert [tuple(net.parts), net.nodes, net.sources] == before


def peaking_with_a_slow_part() -> Network:
    """A Sallen-Key section 0.74 dB above its dc gain, and far below it the corner of a part apart from it."""
    net = sallen_key(1.9)
    net.add_resistor("Rx", "in", "x", 1e3)
    net.add_resistor("Rslow", "x", "0", 100e3)
    net.add_capacitor("Cslow", "x", "0", 1e-3)
    return net


@pytest.mark.parametrize("net", [sallen_key(1.9), peaking_with_a_slow_part()], ids=["alone", "long plateau"])
def test_a_low_peak_above_a_long_plateau(net: Network) -> None:
    """Its height over the plateau is that of K/(1 + a x + x^2), a = 3 - K: -10 log10(a^2 (1 - a^2/4))."""
    with mp.workdps(30):
        a2 = mp.mpf("1.1") ** 2
        top = 1 / (a2 * (1 - a2 / 4))  # |H/K|^2 at its greatest
        b = a2 / 2 - 1  # y^2 + 2 b y + 1 = 2/top at the corner, y = (omega RC)^2
        corner = mp.sqrt(-b + mp.sqrt(b * b - 1 + 2 / top)) / (2 * mp.pi * mp.mpf("1e-4"))
        at = mp.mpf(1) * 2 * mp.pi * mp.mpf("1e-4")  # 1 Hz
        loss = 10 * mp.log10(top * ((1 - at * at) ** 2 + a2 * at * at))
    close(measure(net, "cutoff", edge="upper"), corner, 1e-9)
    close(measure(net, "attenuation", at=1.0), loss, 1e-9)


@given(st.floats(-1, 8))
@settings(max_examples=40, deadline=None)
def test_attenuation_is_never_negative(exponent: float) -> None:
    """No frequency has a gain above the greatest one."""
    assert measure(peaking_with_a_slow_part(), "attenuation", at=10**exponent) >= 0


def faint() -> Network:
    """A low-pass and a controlled source whose gain is the smallest double there is."""
    net = ladder([R], [C])
    net.add_voltage_controlled_voltage_source("E2", "d", "0", "out", "0", 5e-324)
    net.add_resistor("R2", "d", "0", R)
    return net


def apart() -> Network:
    """An output that no branch joins to the source, beside a low-pass that one does."""
    net = ladder([R], [C])
    net.add_resistor("Rb", "b", "0", R)
    net.add_capacitor("Cb", "b", "0", C)
    return net


SILENT = "^nothing of the source arrives at this output"
BEYOND_DOUBLES: dict[str, tuple[Network, str, str, dict[str, Any], str]] = {
    "phase of a denormal": (faint(), "phase", "d", {"at": 1e3}, "smaller than double"),
    "group delay of a denormal": (faint(), "group_delay", "d", {"at": 1.0}, "smaller than double"),
    "elmore delay of a denormal": (faint(), "elmore_delay", "d", {}, "smaller than double"),
    "gain at 1e308 Hz": (faint(), "gain", "out", {"at": 1e308}, "beyond the frequencies"),
    "phase at 1e308 Hz": (faint(), "phase", "out", {"at": 1e308}, "beyond the frequencies"),
    "impedance at 1e308 Hz": (faint(), "output_impedance", "out", {"at": 1e308}, "beyond the frequencies"),
    "noise from 1e308 Hz": (faint(), "noise", "out", {"from_": 1e308, "to": math.inf}, "beyond the freq"),
    "settling of 1e308 F": (
        ladder([1e4], [1e308]),
        "settling_time",
        "out",
        {"band": 0.01},
        "double precision",
    ),
    "phase out of reach": (apart(), "phase", "b", {"at": 1e3}, SILENT),
    "gain out of reach": (apart(), "gain", "b", {"at": 1e3}, SILENT),
    "group delay out of reach": (apart(), "group_delay", "b", {"at": 1e3}, SILENT),
    "cutoff out of reach": (apart(), "cutoff", "b", {}, SILENT),
    "elmore delay out of reach": (apart(), "elmore_delay", "b", {}, SILENT),
}


@pytest.mark.parametrize("case", BEYOND_DOUBLES)
def test_what_no_double_holds_is_undecided(case: str) -> None:
    """Values past the range of doubles, and outputs out of reach, end in one sentence and no warning."""
    net, name, of, options, words = BEYOND_DOUBLES[case]
    with pytest.raises(UndecidedError, match=words):
        measure(net, name, of, **options)


@pytest.mark.parametrize("name", ["peak_voltage", "dissipation"])
def test_measures_of_a_part_are_plain_floats(name: str) -> None:
    """Of a periodic source as of a dc one: half of 1 V over 1 kohm is 0.5 V and 0.25 mW."""
    for wave in ({"dc": 1.0}, {"square": {"low": -1, "high": 1, "frequency": 50}}):
        net = Network()
        net.add_voltage_source("V1", "in", "0", **wave)
        net.add_resistor("R1", "in", "out", R)
        net.add_resistor("R2", "out", "0", R)
        got = measure(net, name, part="R2")
        assert type(got) is float
        close(got, {"peak_voltage": 0.5, "dissipation": 0.25e-3}[name], 1e-9)


def test_elmore_delay_beside_a_voltage_that_grows_without_bound() -> None:
    """A capacitor in series with a current source changes nothing downstream: R C3 C2/(C3 + C2)."""
    network = Network("Flow meter: charge amplifier's test input")
    network.add_current_source("Iin", "0", "in", ac=1)
    network.add_capacitor("C0", "in", "c", 22e-6)
    network.add_resistor("R4", "c", "0", 108772.0)
    network.add_capacitor("C3", "c", "out", 13.18e-12)
    network.add_capacitor("C2", "out", "0", 2e-9)
    wanted = 108772.0 * 13.18e-12 * 2e-9 / (13.18e-12 + 2e-9)
    assert network.measure("elmore_delay", of="out") == pytest.approx(wanted, rel=1e-9)
