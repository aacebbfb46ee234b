"""Networks with closed forms: ladders, tapers, the distributed line, and the named networks of the textbooks.

Closed forms follow from Kirchhoff's laws and are written out beside each network; the uniform ladder's are
A. Morgan-Voyce's (IRE Trans. Circuit Theory CT-6:321-322, 1959), the line's W. Thomson's (1855).
"""

from __future__ import annotations

import gc
import itertools
import math
import random
import warnings
import weakref
from collections.abc import Callable
from dataclasses import dataclass

import networkx
import numpy as np
import pytest
import scipy.signal

from rcnet.circuit import Network
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import (
    input_impedance,
    limit,
    nodal,
    operating_point,
    output_impedance,
    response,
    response_and_slope,
    span_of,
)

R, C = 2e3, 5e-9  # every normalised network is built from these
RC = R * C
F1 = 1 / (2 * math.pi * RC)


def driven(*parts: tuple[str, str, str, float]) -> Network:
    """A network from (name, node, node, value), driven between `in` and ground."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1, dc=1)
    for name, a, b, value in parts:
        (network.add_resistor if name[0] == "R" else network.add_capacitor)(name, a, b, value)
    return network


def ladder(sections: int, *, taper: float = 1.0, high_pass: bool = False) -> Network:
    """Equal sections of series R, shunt C (or the other way round), impedances growing by `taper`."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1, dc=1)
    for k in range(sections):
        here, there = ("in" if k == 0 else f"n{k}"), ("out" if k == sections - 1 else f"n{k + 1}")
        series, shunt = ((here, there), (there, "0"))
        network.add_resistor(f"R{k}", *(shunt if high_pass else series), R * taper**k)
        network.add_capacitor(f"C{k}", *(series if high_pass else shunt), C / taper**k)
    return network


def magnitude(network: Network, frequency: float, node: str = "out") -> float:
    """|H| at one frequency."""
    return float(abs(response(network, [frequency], node)[0]))


# ---------------------------------------------------------------------- single pole


def test_a_single_pole_is_one_over_one_plus_x() -> None:
    """1 kohm and 159.154943091895 nF: half power and -45 degrees at 1 kHz, to twelve digits."""
    network = driven(("R1", "in", "out", 1e3), ("C1", "out", "0", 159.154943091895e-9))
    h = response(network, [1000.0], "out")[0]
    assert 20 * math.log10(abs(h)) == pytest.approx(-3.01029995663981, abs=1e-12)
    assert math.degrees(math.atan2(h.imag, h.real)) == pytest.approx(-45, abs=1e-11)
    assert abs(h) == pytest.approx(0.707106781186548, rel=1e-13)


@pytest.mark.parametrize("x", [1e-6, 0.1, 1.0, 10.0, 1e6])
def test_the_slope_of_a_single_pole(x: float) -> None:
    """H = 1/(1 + sRC), dH/ds = -RC/(1 + sRC)^2; the group delay is RC/(1 + x^2)."""
    network = driven(("R1", "in", "out", R), ("C1", "out", "0", C))
    h, slope = response_and_slope(network, np.array([x / RC]), (network.node_index("out"), 0))
    assert h[0] == pytest.approx(1 / (1 + 1j * x), rel=1e-14)
    assert slope[0] == pytest.approx(-RC / (1 + 1j * x) ** 2, rel=1e-14)
    assert -(1j * slope[0] / h[0]).imag == pytest.approx(RC / (1 + x * x), rel=1e-12)


# ---------------------------------------------------------------------- equal sections

BUFFERED = {2: 0.643594252905583, 3: 0.509824528533959, 5: 0.385614256734674, 10: 0.267905697095626}


@pytest.mark.parametrize(("sections", "cutoff"), BUFFERED.items())
def test_buffered_equal_sections_have_half_power_at(sections: int, cutoff: float) -> None:
    """Sections with buffers between: |H|^2 = 1/2 at sqrt(2^(1/n) - 1) f1."""
    network = Network()
    network.add_voltage_source("Vin", "b0", "0", ac=1)
    for k in range(1, sections + 1):
        network.add_resistor(f"R{k}", f"b{k - 1}", f"a{k}", R)
        network.add_capacitor(f"C{k}", f"a{k}", "0", C)
        network.add_voltage_controlled_voltage_source(f"E{k}", f"b{k}", "0", f"a{k}", "0", 1)
    assert magnitude(network, cutoff * F1, f"b{sections}") ** 2 == pytest.approx(0.5, rel=1e-12)
    assert cutoff == pytest.approx(math.sqrt(2 ** (1 / sections) - 1), rel=1e-14)


def morgan_voyce(n: int, x: complex) -> complex:
    """b_n(x) = sum_k binom(n + k, 2k) x^k."""
    return sum(math.comb(n + k, 2 * k) * x**k for k in range(n + 1))


@pytest.mark.parametrize("sections", [1, 2, 3, 4, 7, 10])
def test_the_uniform_ladder_is_morgan_voyce(sections: int) -> None:
    """Low-pass H = 1/b_n(sRC), high-pass H = 1/b_n(1/(sRC)), over six decades."""
    for x in (1e-3, 0.03, 0.4, 1.0, 7.0, 1e3):
        low = response(ladder(sections), [x * F1], "out")[0]
        high = response(ladder(sections, high_pass=True), [x * F1], "out")[0]
        assert low == pytest.approx(1 / morgan_voyce(sections, 1j * x), rel=1e-12)
        assert high == pytest.approx(1 / morgan_voyce(sections, 1 / (1j * x)), rel=1e-12)


UNIFORM = {
    1: 1.0,
    2: 0.374239154338852,
    3: 0.194286000459512,
    4: 0.118490377691281,
    6: 0.0571854459342470,
    10: 0.0220047584971262,
}


@pytest.mark.parametrize(("sections", "cutoff"), UNIFORM.items())
def test_the_uniform_ladder_has_half_power_at(sections: int, cutoff: float) -> None:
    """The roots of |b_n(jx)|^2 = 2 at 40 digits; the high-pass has them at the reciprocal."""
    assert magnitude(ladder(sections), cutoff * F1) ** 2 == pytest.approx(0.5, rel=1e-12)
    assert magnitude(ladder(sections, high_pass=True), F1 / cutoff) ** 2 == pytest.approx(0.5, rel=1e-12)


def test_two_equal_sections_are_a_ninth_at_the_corner() -> None:
    """b_2(j) = 3j: at f1 two sections are 20 log10 3 down with -90 degrees, the usual trap."""
    assert response(ladder(2), [F1], "out")[0] == pytest.approx(1 / 3j, rel=1e-13)


TAPERED = {
    (2, 2): 0.4727967623694,
    (2, 10): 0.6007447986993,
    (3, 5): 0.4130545086494,
    (5, 2): 0.1816098854914,
    (5, 100): 0.3802728648893,
    (10, 10): 0.2255722172620,
}


@pytest.mark.parametrize(("shape", "cutoff"), TAPERED.items())
def test_the_tapered_ladder_has_half_power_at(shape: tuple[int, int], cutoff: float) -> None:
    """Section i has R k^(i-1), C/k^(i-1): half power at 13 known digits; n = 2 in closed form too."""
    sections, taper = shape
    network = ladder(sections, taper=taper)
    assert magnitude(network, cutoff * F1) ** 2 == pytest.approx(0.5, rel=1e-11)
    if sections == 2:
        expected = 1 / (1 + (2 + 1 / taper) * 0.7j + (0.7j) ** 2)
        assert response(network, [0.7 * F1], "out")[0] == pytest.approx(expected, rel=1e-13)


LUMPED = {1: 1.0, 2: 1.49695661736, 5: 1.99163617755, 10: 2.20047584971, 20: 2.31357660460, 50: 2.38418346515}


@pytest.mark.parametrize(("sections", "omega"), LUMPED.items())
def test_a_lumped_line_has_half_power_at(sections: int, omega: float) -> None:
    """Sections sharing one total R and C: omega RC at half power, on its way to 2.43238340264596."""
    network = ladder(sections)
    assert magnitude(network, omega / sections**2 * F1) ** 2 == pytest.approx(0.5, rel=1e-10)


def test_many_sections_approach_the_distributed_line() -> None:
    """H -> 1/cosh(sqrt(sRC)); the gap shrinks as 1/n, and n = 100, 200 extrapolate to it."""
    omega = 2.43238340264596097
    line = 1 / np.cosh(np.sqrt(1j * omega))
    assert abs(line) ** 2 == pytest.approx(0.5, rel=1e-14)

    def lumped(sections: int) -> complex:
        return complex(response(ladder(sections), [omega / sections**2 * F1], "out")[0])

    gaps = [abs(lumped(n) - line) for n in (50, 100, 200)]
    orders = [math.log2(wide / narrow) for wide, narrow in itertools.pairwise(gaps)]
    assert orders == pytest.approx([1, 1], abs=0.02)
    assert 2 * lumped(200) - lumped(100) == pytest.approx(line, rel=1e-4)


# ---------------------------------------------------------------------- named networks


@dataclass(frozen=True)
class Named:
    """A network with its numerator and denominator in s, highest power first, and its two limits."""

    network: Network
    numerator: list[float]
    denominator: list[float]
    low: float
    high: float
    of: str = "out"


R1, R2, R3, C1, C2, C3 = 1.1e3, 4.7e3, 330.0, 22e-9, 3.3e-9, 10e-9

NAMED: dict[str, Callable[[], Named]] = {
    # Wien: series R1 and C1, shunt R2 with C2.
    "wien": lambda: Named(
        driven(("R1", "in", "m", R1), ("C1", "m", "out", C1), ("R2", "out", "0", R2), ("C2", "out", "0", C2)),
        [C1 * R2, 0],
        [C1 * C2 * R1 * R2, C1 * R1 + C2 * R2 + C1 * R2, 1],
        0.0,
        0.0,
    ),
    # Twin-T of R, R, 2C and C, C, R/2.
    "twin-T": lambda: Named(
        driven(
            *(("R1", "in", "a", R), ("R2", "a", "out", R), ("C3", "a", "0", 2 * C)),
            *(("C1", "in", "b", C), ("C2", "b", "out", C), ("R3", "b", "0", R / 2)),
        ),
        [RC**2, 0, 1],
        [RC**2, 4 * RC, 1],
        1.0,
        1.0,
    ),
    # Three sections each way: x^3/(x^3 + 6x^2 + 5x + 1) and 1/(1 + 6x + 5x^2 + x^3), x = sRC.
    "phase shift, high-pass": lambda: Named(
        ladder(3, high_pass=True), [RC**3, 0, 0, 0], [RC**3, 6 * RC**2, 5 * RC, 1], 0.0, 1.0
    ),
    "phase shift, low-pass": lambda: Named(ladder(3), [1], [RC**3, 5 * RC**2, 6 * RC, 1], 1.0, 0.0),
    # Bridged T: series C, C with R2 to ground between, bridged by R1.
    "bridged T of capacitors": lambda: Named(
        driven(("C1", "in", "m", C), ("C2", "m", "out", C), ("R2", "m", "0", R2), ("R1", "in", "out", R1)),
        [C**2 * R1 * R2, 2 * C * R2, 1],
        [C**2 * R1 * R2, C * R1 + 2 * C * R2, 1],
        1.0,
        1.0,
    ),
    # Bridged T: series R, R with C2 to ground between, bridged by C1.
    "bridged T of resistors": lambda: Named(
        driven(("R1", "in", "m", R), ("R2", "m", "out", R), ("C2", "m", "0", C2), ("C1", "in", "out", C1)),
        [C1 * C2 * R**2, 2 * C1 * R, 1],
        [C1 * C2 * R**2, (2 * C1 + C2) * R, 1],
        1.0,
        1.0,
    ),
    # Lattice of arms R and C, taken between its midpoints: (1 - x)/(1 + x).
    "lattice": lambda: Named(
        driven(("R1", "in", "a", R), ("C1", "a", "0", C), ("C2", "in", "b", C), ("R2", "b", "0", R)),
        [-RC, 1],
        [RC, 1],
        1.0,
        -1.0,
        "a b",
    ),
    "lead": lambda: Named(
        driven(("R1", "in", "out", R1), ("C1", "in", "out", C1), ("R2", "out", "0", R2)),
        [R2 * C1 * R1, R2],
        [C1 * R1 * R2, R1 + R2],
        R2 / (R1 + R2),
        1.0,
    ),
    "lag": lambda: Named(
        driven(("R1", "in", "out", R1), ("R2", "out", "m", R2), ("C2", "m", "0", C2)),
        [C2 * R2, 1],
        [C2 * (R1 + R2), 1],
        1.0,
        R2 / (R1 + R2),
    ),
    "divider with capacitors": lambda: Named(
        driven(
            *(("R1", "in", "out", R1), ("C1", "in", "out", C1)),
            ("R2", "out", "0", R2),
            ("C2", "out", "0", C2),
        ),
        [R2 * C1 * R1, R2],
        [(C1 + C2) * R1 * R2, R1 + R2],
        R2 / (R1 + R2),
        C1 / (C1 + C2),
    ),
}


@pytest.mark.parametrize("name", NAMED)
def test_a_named_network_is_its_closed_form(name: str) -> None:
    """The transfer function at points over five decades, against the closed form and scipy.signal.freqs."""
    case = NAMED[name]()
    frequency = F1 * 10 ** np.linspace(-2.5, 2.5, 41)
    s = 2j * np.pi * frequency
    got = response(case.network, frequency, case.of)
    expected = np.polyval(case.numerator, s) / np.polyval(case.denominator, s)
    scale = np.maximum(np.abs(expected), 1e-3)  # the twin-T's null is a difference of ones
    assert (np.abs(got - expected) <= 1e-12 * scale).all()
    _, from_scipy = scipy.signal.freqs(case.numerator, case.denominator, worN=2 * np.pi * frequency)
    assert (np.abs(got - from_scipy) <= 1e-12 * scale).all()


@pytest.mark.parametrize("name", NAMED)
def test_a_named_network_has_its_limits(name: str) -> None:
    """The response at zero and at infinite frequency, and at a frequency of zero."""
    case = NAMED[name]()
    a, b = (*case.of.split(), "0")[:2]
    of = (case.network.node_index(a), case.network.node_index(b))
    assert limit(case.network, of, high=False) == pytest.approx(case.low, rel=1e-14, abs=1e-15)
    assert limit(case.network, of, high=True) == pytest.approx(case.high, rel=1e-14, abs=1e-15)
    assert response(case.network, [0.0], case.of)[0] == pytest.approx(case.low, rel=1e-14, abs=1e-15)


def test_phase_shift_networks_turn_by_half_a_turn() -> None:
    """Three sections: H = -1/29 at omega RC = sqrt 6 (high-pass 1/sqrt 6); four: -49/901 at sqrt(10/7)."""
    assert response(ladder(3), [math.sqrt(6) * F1], "out")[0] == pytest.approx(-1 / 29, rel=1e-12)
    assert response(ladder(3, high_pass=True), [F1 / math.sqrt(6)], "out")[0] == pytest.approx(
        -1 / 29, rel=1e-12
    )
    assert response(ladder(4), [math.sqrt(10 / 7) * F1], "out")[0] == pytest.approx(-49 / 901, rel=1e-12)
    turned = response(ladder(4, high_pass=True), [math.sqrt(7 / 10) * F1], "out")[0]
    assert turned == pytest.approx(-49 / 901, rel=1e-12)


def test_a_wien_network_of_equal_parts_peaks_at_a_third() -> None:
    """Equal parts: 1/3 at omega = 1/RC with phase 0, half of that power at x = (sqrt 13 -+ 3)/2."""
    network = driven(
        ("R1", "in", "m", R), ("C1", "m", "out", C), ("R2", "out", "0", R), ("C2", "out", "0", C)
    )
    assert response(network, [F1], "out")[0] == pytest.approx(1 / 3, rel=1e-13)
    for x in (0.302775637731995, 3.30277563773199):
        assert magnitude(network, x * F1) ** 2 == pytest.approx(0.5 / 9, rel=1e-12)


def test_a_twin_t_has_its_null() -> None:
    """Nothing at 1/RC; half power at x = sqrt 5 -+ 2. Any parts with R3(C1+C2)(R1+R2) = C3R1R2 null too."""
    network = NAMED["twin-T"]().network
    assert magnitude(network, F1) < 1e-15
    for x in (0.23606797749979, 4.23606797749979):
        assert magnitude(network, x * F1) ** 2 == pytest.approx(0.5, rel=1e-12)
    shunt = R3 * (C1 + C2) * (R1 + R2) / (R1 * R2)
    network = driven(
        *(("R1", "in", "a", R1), ("R2", "a", "out", R2), ("C3", "a", "0", shunt)),
        *(("C1", "in", "b", C1), ("C2", "b", "out", C2), ("R3", "b", "0", R3)),
    )
    null = 1 / (2 * math.pi * math.sqrt(C1 * C2 * R3 * (R1 + R2)))
    assert magnitude(network, null) < 1e-14


def test_bridged_ts_dip_to_their_least() -> None:
    """2R2/(R1 + 2R2) at 1/(C sqrt(R1R2)); 2C1/(2C1 + C2) at 1/(R sqrt(C1C2))."""
    network = NAMED["bridged T of capacitors"]().network
    dip = response(network, [1 / (2 * math.pi * C * math.sqrt(R1 * R2))], "out")[0]
    assert dip == pytest.approx(2 * R2 / (R1 + 2 * R2), rel=1e-12)
    network = NAMED["bridged T of resistors"]().network
    dip = response(network, [1 / (2 * math.pi * R * math.sqrt(C1 * C2))], "out")[0]
    assert dip == pytest.approx(2 * C1 / (2 * C1 + C2), rel=1e-12)


def test_the_lattice_passes_everything() -> None:
    """|H| = 1 everywhere, -90 degrees at 1/RC; the pair the other way round has the other sign."""
    network = NAMED["lattice"]().network
    frequency = F1 * 10 ** np.linspace(-4, 4, 33)
    assert np.abs(response(network, frequency, "a b")) == pytest.approx(np.ones(33), rel=1e-13)
    assert response(network, [F1], "a b")[0] == pytest.approx(-1j, rel=1e-13)
    assert (response(network, frequency, "b a") == -response(network, frequency, "a b")).all()


def test_a_compensated_divider_is_flat() -> None:
    """R1C1 = R2C2: R2/(R1 + R2) at every frequency, no phase."""
    network = driven(
        *(("R1", "in", "out", 9e6), ("C1", "in", "out", 10e-12)),
        *(("R2", "out", "0", 1e6), ("C2", "out", "0", 90e-12)),
    )
    flat = response(network, [0, 1.0, 1e3, 177.0, 1e6, 1e12], "out")
    assert np.abs(flat - 0.1).max() < 1e-16


def test_a_balanced_bridge_has_no_limit_but_zero() -> None:
    """Arms of 1:3 on both sides that do not divide evenly: exactly zero, not what rounding leaves over."""
    network = driven(
        ("R1", "in", "a", 0.1), ("R2", "a", "0", 0.3), ("R3", "in", "b", 0.7), ("R4", "b", "0", 2.1)
    )
    network.add_capacitor("C1", "a", "0", 1e-9)
    assert limit(network, (network.node_index("a"), network.node_index("b")), high=False) == 0.0


# ---------------------------------------------------------------------- ports


def test_input_impedances_by_closed_form() -> None:
    """R + 1/sC seen from a voltage source; R beside C seen from a current source."""
    network = driven(("R1", "in", "out", R), ("C1", "out", "0", C))
    omega = np.array([1e2, 1 / RC, 1e9])
    assert input_impedance(network, omega) == pytest.approx(R + 1 / (1j * omega * C), rel=1e-14)
    shunted = Network()
    shunted.add_current_source("I1", "0", "a", ac=1)
    shunted.add_resistor("R1", "a", "0", R)
    shunted.add_capacitor("C1", "a", "0", C)
    assert input_impedance(shunted, omega) == pytest.approx(R / (1 + 1j * omega * RC), rel=1e-14)
    assert input_impedance(shunted, np.zeros(1)) == pytest.approx(R, rel=1e-14)


def test_output_impedances_by_closed_form() -> None:
    """R beside C with the source dead; between the lattice's midpoints 2 (R beside C)."""
    omega = np.array([1e2, 1 / RC, 1e9])
    network = driven(("R1", "in", "out", R), ("C1", "out", "0", C))
    expected = R / (1 + 1j * omega * RC)
    assert output_impedance(network, omega, (network.node_index("out"), 0)) == pytest.approx(
        expected, rel=1e-14
    )
    lattice = NAMED["lattice"]().network
    pair = (lattice.node_index("a"), lattice.node_index("b"))
    assert output_impedance(lattice, omega, pair) == pytest.approx(2 * expected, rel=1e-14)


def test_an_inductor_in_series_is_right() -> None:
    """A series R, L, C: input impedance R + sL + 1/sC, and 1/(1 + sRC + s^2 LC) across C with its slope."""
    inductance = 1e-3
    network = driven(("R1", "in", "a", R), ("C1", "out", "0", C))
    network.add_inductor("L1", "a", "out", inductance)
    omega = np.array([1e3, 4e5, 1e8])
    s = 1j * omega
    assert input_impedance(network, omega) == pytest.approx(R + s * inductance + 1 / (s * C), rel=1e-13)
    below = 1 + s * RC + s**2 * inductance * C
    h, slope = response_and_slope(network, omega, (network.node_index("out"), 0))
    assert h == pytest.approx(1 / below, rel=1e-13)
    assert slope == pytest.approx(-(RC + 2 * s * inductance * C) / below**2, rel=1e-12)
    assert limit(network, (network.node_index("out"), 0), high=False) == 1.0
    assert limit(network, (network.node_index("out"), 0), high=True) == 0.0


@pytest.mark.parametrize("port", ["input", "output"])
def test_an_infinite_impedance_is_no_number(port: str) -> None:
    """A capacitor in series with the port at zero frequency: UndecidedError instead of a large number."""
    network = driven(("C1", "in", "out", C), ("C2", "out", "0", C))
    with pytest.raises(UndecidedError, match="infinite"):
        if port == "input":
            input_impedance(network, np.zeros(1))
        else:
            output_impedance(network, np.zeros(1), (network.node_index("out"), 0))


def test_a_response_without_bound_has_no_limit() -> None:
    """A current into a capacitor: 1/(sC) at zero frequency is UndecidedError, at infinity zero."""
    network = Network()
    network.add_current_source("I1", "0", "out", ac=1)
    network.add_capacitor("C1", "out", "0", C)
    with pytest.raises(UndecidedError, match="grows without bound towards zero"):
        limit(network, (1, 0), high=False)
    assert limit(network, (1, 0), high=True) == 0.0
    assert response(network, [F1], "out")[0] == pytest.approx(1 / (2j * math.pi * F1 * C), rel=1e-15)


def test_the_slope_at_zero_frequency_is_the_first_moment() -> None:
    """-H'(0)/H(0) of the uniform ladder is n(n+1)/2 RC (W. Elmore 1948); of a capacitive divider, nothing."""
    for sections in (1, 2, 5, 10):
        network = ladder(sections)
        h, slope = response_and_slope(network, np.zeros(1), (network.node_index("out"), 0))
        assert -slope[0] / h[0] == pytest.approx(RC * sections * (sections + 1) / 2, rel=1e-13)
    for share in (0.1, 0.3, 0.7):
        network = driven(
            ("C1", "in", "out", share * C), ("C2", "out", "0", (1 - share) * C), ("R1", "in", "0", R)
        )
        h, slope = response_and_slope(network, np.zeros(1), (network.node_index("out"), 0))
        assert h[0] == pytest.approx(share, rel=1e-15)
        assert abs(slope[0]) < 1e-12 * RC


def test_a_transconductance_with_feedback_has_an_operating_point() -> None:
    """A G source charges C until its two inputs agree: no resistor at `out`, yet H = 1/(1 + sC/g)."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1, dc=2.5)
    network.add_voltage_controlled_current_source("G1", "0", "out", "in", "out", 1e-3)
    network.add_capacitor("C1", "out", "0", C)
    assert operating_point(network)["out"] == pytest.approx(2.5, rel=1e-15)
    omega = 1e-3 / C
    assert response(network, [omega / (2 * math.pi)], "out")[0] == pytest.approx(1 / (1 + 1j), rel=1e-14)


def test_every_pole_of_the_uniform_ladder_lies_in_the_span() -> None:
    """Poles -4 sin^2(phi/2)/RC, phi = (2k-1) pi/(2n+1), lie between the two ends that `span_of` gives."""
    for sections in (1, 3, 10):
        span = span_of(ladder(sections))
        angles = (2 * np.arange(1, sections + 1) - 1) * math.pi / (2 * sections + 1)
        poles = 4 * np.sin(angles / 2) ** 2 / RC
        assert span.low <= poles.min() * (1 + 1e-12)
        assert poles.max() <= span.high * (1 + 1e-12)


# ---------------------------------------------------------------------- properties of every solution


def shuffled(network: Network, seed: int) -> Network:
    """The same network with its parts in another order, so its nodes too."""
    parts = list(network.parts)
    random.Random(seed).shuffle(parts)
    other = Network()
    for part in parts:
        if part.name in network.sources:
            other.add_source(network.sources[part.name])
        else:
            other.add_part(part)
    return other


@pytest.mark.parametrize("name", NAMED)
def test_the_order_of_parts_does_not_matter(name: str) -> None:
    """Voltages by name agree to rounding however the parts are ordered."""
    network = NAMED[name]().network
    frequency = F1 * np.array([0.1, 0.9, 12.0])
    nodes = list(network.nodes[1:])
    expected = response(network, frequency, nodes)
    for seed in range(4):
        got = response(shuffled(network, seed), frequency, nodes)
        assert np.abs(got - expected).max() < 1e-14


def snapshot(network: Network) -> tuple[object, ...]:
    """Everything a network says of itself."""
    return (
        network.title,
        network.nodes,
        tuple(network.parts),
        dict(network.sources),
        network.arrays().values.tolist(),
    )


@pytest.mark.parametrize("kind", ["eliminated", "general"])
def test_no_analysis_changes_the_network(kind: str) -> None:
    """Parts, nodes, sources and values are the same after every analysis, and so is a second answer."""
    network = NAMED["lattice"]().network
    if kind == "general":
        network.add_inductor("L1", "a", "b", 1e-3)
    before = snapshot(network)
    pair = (network.node_index("a"), network.node_index("b"))
    first = response(network, [1e3, 1e4], ["a", "a b"])
    response(network, [1e3], "a", values={"R1": np.array([1.0, 2.0])})
    operating_point(network)
    limit(network, pair, high=False)
    limit(network, pair, high=True)
    response_and_slope(network, np.array([1e4]), pair)
    input_impedance(network, np.array([1e4]))
    output_impedance(network, np.array([1e4]), pair)
    assert snapshot(network) == before
    assert (response(network, [1e3, 1e4], ["a", "a b"]) == first).all()


def test_a_changed_network_is_solved_anew() -> None:
    """A part added after a response counts in the next one, and a copy is solved with its own values."""
    network = driven(("R1", "in", "out", R), ("R2", "out", "0", R))
    assert response(network, [1.0], "out")[0] == pytest.approx(0.5, rel=1e-15)
    network.add_resistor("R3", "out", "0", R)
    assert response(network, [1.0], "out")[0] == pytest.approx(1 / 3, rel=1e-15)
    assert response(network.with_values({"R1": 2 * R}), [1.0], "out")[0] == pytest.approx(0.2, rel=1e-15)
    assert response(network, [1.0], "out")[0] == pytest.approx(1 / 3, rel=1e-15)


@pytest.mark.parametrize("kind", ["eliminated", "general"])
def test_a_network_nobody_holds_is_let_go(kind: str) -> None:
    """What is kept of a network for its next analysis does not keep the network itself."""
    network = ladder(2)
    if kind == "general":
        network.add_inductor("L1", "n1", "out", 1e-3)
    response(network, [1.0], "out")
    watched = weakref.ref(network)
    del network
    gc.collect()
    assert watched() is None


@pytest.mark.parametrize("kind", ["ladder", "buffered", "general"])
def test_samples_are_what_single_networks_give(kind: str) -> None:
    """Arrays in `values` give, sample by sample, what a network with those values gives; numbers give one."""
    network = ladder(3)
    if kind == "buffered":
        network.add_voltage_controlled_voltage_source("E1", "e", "0", "out", "0", 2.0)
        network.add_resistor("Rb", "e", "n1", 5e3)
    elif kind == "general":
        network.add_inductor("L1", "n1", "n2", 1e-3)
    rng = np.random.default_rng(5)
    samples = {"R1": R * rng.uniform(0.5, 2, 4), "C2": C * rng.uniform(0.5, 2, 4)}
    frequency = F1 * np.array([0.01, 0.3, 4.0])
    got = response(network, frequency, ["out", "n1"], values=samples | {"R0": "3k"})
    assert got.shape == (2, 4, 3)
    for k in range(4):
        single = network.with_values({"R0": 3e3, "R1": samples["R1"][k], "C2": samples["C2"][k]})
        expected = response(single, frequency, ["out", "n1"])
        assert np.abs(got[:, k] - expected).max() < 1e-14
    one = response(network, frequency, "out", values={"R1": 3e3})
    assert one.shape == (3,)
    assert np.abs(one - response(network.with_values({"R1": 3e3}), frequency, "out")).max() < 1e-14
    assert response(network, frequency, "out", values={"R1": np.array([R])}).shape == (1, 3)


def test_shapes_follow_what_is_asked() -> None:
    """One node gives (frequencies,), a list (nodes, frequencies), no frequency an empty answer."""
    network = ladder(2)
    assert response(network, 1e3, "out").shape == (1,)
    assert response(network, [], "out").shape == (0,)
    assert response(network, [1.0, 2.0], ["out"]).shape == (1, 2)
    assert response(network, [1.0, 2.0], ["out", "n1", "in out"]).shape == (3, 2)
    assert response(network, [1.0], "in")[0] == 1


def test_several_ac_sources_superpose() -> None:
    """2 V, and 1 V at -90 degrees, through equal resistors: their mean; one source alone counts as unity."""
    network = Network()
    network.add_voltage_source("V1", "a", "0", ac=2)
    network.add_voltage_source("V2", "b", "0", ac=1, ac_phase=-90)
    network.add_resistor("R1", "a", "out", R)
    network.add_resistor("R2", "b", "out", R)
    assert response(network, [1e3], "out")[0] == pytest.approx(1 - 0.5j, rel=1e-15)
    one = Network()
    one.add_voltage_source("V1", "a", "0", ac=2, ac_phase=30)
    one.add_resistor("R1", "a", "0", R)
    assert response(one, [1e3], "a")[0] == 1


@pytest.mark.parametrize("seed", range(6))
def test_the_nodal_determinant_counts_spanning_trees(seed: int) -> None:
    """The determinant of G sums products of conductances over spanning trees (Kirchhoff 1847; networkx)."""
    rng = random.Random(seed)
    nodes = rng.randint(3, 7)
    network = Network()
    network.add_current_source("I1", "0", "1", ac=1)
    for k in range(1, nodes):
        network.add_resistor(f"R{k}", str(k), str(rng.randrange(k)), 1 / rng.randint(1, 9))
    for k in range(rng.randint(2, 6)):
        a, b = rng.sample(range(nodes), 2)
        network.add_resistor(f"Rx{k}", str(a), str(b), 1 / rng.randint(1, 9))
    weighted = networkx.Graph()
    for part in network.parts:
        if part.kind == "R":
            a, b = part.nodes
            known = weighted.get_edge_data(a, b, {"weight": 0.0})["weight"]
            weighted.add_edge(a, b, weight=known + 1 / part.value)
    equations = nodal.equations(network)
    determinant = np.linalg.det(equations.dense(equations.constant))
    assert determinant == pytest.approx(
        networkx.number_of_spanning_trees(weighted, weight="weight"), rel=1e-10
    )


@pytest.mark.parametrize(("sections", "trees"), [(1, 2), (2, 5), (3, 13), (4, 34), (5, 89), (8, 1597)])
def test_the_uniform_ladder_counts_fibonacci_trees(sections: int, trees: int) -> None:
    """b_n(1) = F(2n+1): with s RC = 1 on the real axis the response is one over that many spanning trees."""
    network = Network()
    network.add_voltage_source("Vin", "n0", "0", dc=1)
    for k in range(1, sections + 1):
        network.add_resistor(f"R{k}", f"n{k - 1}", f"n{k}", 1)
        network.add_resistor(f"Rp{k}", f"n{k}", "0", 1)
    assert operating_point(network)[f"n{sections}"] == pytest.approx(1 / trees, rel=1e-15)


# ---------------------------------------------------------------------- networks without a solution


def no_solution(*parts: str) -> Network:
    """A network from lines `NAME node node [node node] value`; V and I have that value as ac and as dc."""
    network = Network()
    for line in parts:
        name, *nodes, value = line.split()
        number = float(value)
        add = {
            "R": network.add_resistor,
            "C": network.add_capacitor,
            "L": network.add_inductor,
            "E": network.add_voltage_controlled_voltage_source,
            "G": network.add_voltage_controlled_current_source,
            "H": network.add_current_controlled_voltage_source,
        }
        if name[0] in "VI":
            source = network.add_voltage_source if name[0] == "V" else network.add_current_source
            source(name, *nodes, ac=number, dc=number)
        else:
            add[name[0]](name, *nodes, number)
    return network


AC_UNSOLVABLE = {
    "floating group": (("V1 in 0 1", "R1 in 0 1", "R2 x y 1", "C1 x y 1"), ("x", "y", "R2", "C1")),
    "node that only a current source feeds": (("V1 in 0 1", "R1 in 0 1", "I1 0 x 1"), ("x", "I1")),
    "loop of voltage sources": (("V1 in 0 1", "V2 in 0 2", "R1 in 0 1"), ("V1", "V2")),
    "loop over three nodes": (("V1 a 0 1", "V2 b a 1", "V3 b 0 3", "R1 b 0 1"), ("V1", "V2", "V3")),
    "loop of V and E": (("V1 a 0 1", "R1 a c 1", "R2 c 0 1", "E1 a 0 c 0 2"), ("V1", "E1")),
    "one source on one node": (("V1 in in 1", "R1 in 0 1"), ("V1", "both ends on one node")),
    "loop gain of one": (("V1 in 0 1", "R1 in a 1e3", "R2 a b 1e3", "E1 b 0 a 0 2"), ("E1",)),
    "loop gain of one but for rounding": (
        (
            "V1 in 0 1",
            "R1 in a 3e3",
            "R2 a b 7e3",
            "R3 a 0 11e3",
            f"E1 b 0 a 0 {(1 / 3 + 1 / 7 + 1 / 11) * 7!r}",
        ),
        ("E1",),
    ),
    "source that controls itself": (("V1 in 0 1", "R1 in a 1", "E1 a 0 a 0 1"), ("E1",)),
    "negative conductance": (
        ("I1 0 a 1", "R1 a 0 3e3", "R2 a 0 7e3", f"G1 a 0 a 0 {-(1 / 3e3 + 1 / 7e3)!r}"),
        ("G1",),
    ),
}
DC_UNSOLVABLE = {
    "node held by capacitors": (("V1 in 0 1", "C1 in x 1", "C2 x 0 1"), ("x", "C1", "C2", "ground for dc")),
    "inductor across a source": (("V1 in 0 1", "L1 in 0 1"), ("V1", "L1", "inductors")),
    "loop of inductors": (
        ("V1 in 0 1", "R1 in a 1", "R2 b 0 1", "L1 a b 1", "L2 a b 1"),
        ("L1", "L2", "inductors"),
    ),
    "current into a capacitor": (("I1 0 x 1", "C1 x 0 1"), ("x", "I1", "C1")),
    "inductor on one node": (("V1 a 0 1", "R1 a 0 1", "L1 a a 1"), ("L1", "both ends on one node")),
    "integrator": (("V1 in 0 1", "R1 in 0 1", "G1 x 0 in 0 1", "C1 x 0 1"), ("x", "C1", "ground for dc")),
}


@pytest.mark.parametrize("name", AC_UNSOLVABLE)
def test_a_network_without_a_response_says_why(name: str) -> None:
    """UnsolvableError that names the parts and nodes to blame, without a warning from numpy."""
    parts, words = AC_UNSOLVABLE[name]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with pytest.raises(UnsolvableError) as caught:
            response(no_solution(*parts), [10.0, 1e3], no_solution(*parts).nodes[-1])
    for word in words:
        assert word in caught.value.message
    assert caught.value.remedy


@pytest.mark.parametrize("name", [*AC_UNSOLVABLE, *DC_UNSOLVABLE])
def test_a_network_without_an_operating_point_says_why(name: str) -> None:
    """UnsolvableError naming parts and nodes to blame; what has no response has no operating point."""
    parts, words = (AC_UNSOLVABLE | DC_UNSOLVABLE)[name]
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with pytest.raises(UnsolvableError) as caught:
            operating_point(no_solution(*parts))
    for word in words:
        assert word in caught.value.message


@pytest.mark.parametrize("name", DC_UNSOLVABLE)
def test_what_has_no_operating_point_may_have_a_response(name: str) -> None:
    """At frequencies above zero each of these networks is solvable: its voltages are finite numbers."""
    network = no_solution(*DC_UNSOLVABLE[name][0])
    assert np.isfinite(response(network, [0.1, 10.0], list(network.nodes[1:]))).all()


BAD_CALLS: dict[str, tuple[Callable[[Network], object], str]] = {
    "unknown node": (lambda n: response(n, [1.0], "nowhere"), "'nowhere'"),
    "three nodes": (lambda n: response(n, [1.0], "a b c"), "'a b c'"),
    "negative frequency": (lambda n: response(n, [-1.0], "out"), "zero up"),
    "infinite frequency": (lambda n: response(n, [math.inf], "out"), "finite"),
    "frequency in words": (lambda n: response(n, "1 kHz", "out"), "not numbers"),
    "table of frequencies": (lambda n: response(n, [[1.0]], "out"), "list"),
    "unknown part": (lambda n: response(n, [1.0], "out", values={"R9": 1.0}), "'R9'"),
    "negative sample": (lambda n: response(n, [1.0], "out", values={"R0": [-1.0]}), "R0"),
    "endless sample": (lambda n: response(n, [1.0], "out", values={"R0": [math.nan]}), "R0"),
    "samples of two lengths": (
        lambda n: response(n, [1.0], "out", values={"R0": [1, 2], "C0": [1, 2, 3]}),
        r"\[2, 3\]",
    ),
    "sampled source": (lambda n: response(n, [1.0], "out", values={"Vin": [1.0]}), "Vin"),
    "sample in words": (lambda n: response(n, [1.0], "out", values={"R0": [{}]}), "R0"),
}


@pytest.mark.parametrize("name", BAD_CALLS)
def test_a_wrong_call_is_a_sentence(name: str) -> None:
    """CircuitError naming the offending value, with a remedy."""
    call, words = BAD_CALLS[name]
    with pytest.raises(CircuitError, match=words) as caught:
        call(ladder(1))
    assert caught.value.remedy


def test_no_source_means_no_response() -> None:
    """A network none of whose sources carries ac: CircuitError; two of them: no one driven port."""
    network = Network()
    network.add_voltage_source("V1", "a", "0", dc=1)
    network.add_resistor("R1", "a", "0", 1)
    with pytest.raises(CircuitError, match="no source carries ac"):
        response(network, [1.0], "a")
    network.add_current_source("I1", "a", "0", ac=1)
    network.add_current_source("I2", "a", "0", ac=1)
    with pytest.raises(CircuitError, match="2 sources"):
        input_impedance(network, np.array([1.0]))


@pytest.mark.parametrize("r", [1e-300, 1e-200, 1e200, 1e300])
@pytest.mark.parametrize("c", [1e-300, 1e-200, 1e200, 1e300])
def test_values_at_the_ends_of_a_double_never_warn(r: float, c: float) -> None:
    """A response of modulus at most one or UnsolvableError, never a warning or a nan; at dc always one."""
    network = driven(("R1", "in", "out", r), ("C1", "out", "0", c))
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert limit(network, (network.node_index("out"), 0), high=False) == 1.0
        try:
            h = response(network, [1e-3, 1.0, 1e9], "out")
        except UnsolvableError as error:
            assert c == 1e300, "a susceptance of 6e309 S is past every double"
            assert error.remedy
        else:
            assert (np.abs(h) <= 1 + 1e-15).all()
