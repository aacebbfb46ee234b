"""Measures taken in time, against the textbook's closed forms and tables."""

from __future__ import annotations

import math
from typing import Any

import mpmath
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.circuit import Network
from rcnet.claims.time_measures import TIME_MEASURES
from rcnet.errors import CircuitError, UndecidedError
from rcnet.exact import transient

R, C = 2e3, 5e-9
RC = R * C


def take(network: Network, name: str, node: str = "out", **options: Any) -> float:
    """One measure of a node or pair."""
    words = node.split()
    pair = (network.node_index(words[0]), network.node_index(words[1]) if len(words) == 2 else 0)
    return TIME_MEASURES[name](network, pair, options)


def ladder(sections: int, **drive: Any) -> Network:
    """Equal sections of series R, shunt C."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1, **drive)
    for k in range(sections):
        there = "out" if k == sections - 1 else f"n{k + 1}"
        network.add_resistor(f"R{k}", f"n{k}", there, R)
        network.add_capacitor(f"C{k}", there, "0", C)
    return network


# Step response of n equal sections, in units of RC, by Morgan-Voyce's closed form at 40 digits.
LADDER = {  # n: 50 % delay, 10-90 % rise, slowest time constant
    1: (0.693147180559945, 2.19722457733622, 1.0),
    2: (2.22491916272872, 5.85827739969921, 2.618033988750),
    3: (4.50275047480941, 11.2775661424191, 5.048917339522),
    4: (7.53489969757373, 18.4890938073503, 8.290859369382),
    5: (11.3234583121268, 27.4998774001247, 12.34353751968),
    6: (15.8690478688547, 38.3117287524906, 17.20685726740),
    7: (21.1719014989701, 50.9251802068673, 22.88078274194),
    8: (27.2321224729398, 65.3404084328138, 29.36529789437),
    9: (34.0497622715956, 81.5574790901968, 36.66039466702),
    10: (41.6248489101971, 99.5764190483679, 44.76606865272),
}


@pytest.mark.parametrize("sections", LADDER)
def test_step_times_of_uniform_ladders(sections: int) -> None:
    """Delay, rise and slowest mode of one to ten sections."""
    delay, rise, slowest = LADDER[sections]
    network = ladder(sections)
    assert take(network, "delay") == pytest.approx(delay * RC, rel=2e-14)
    assert take(network, "rise_time") == pytest.approx(rise * RC, rel=2e-14)
    assert take(network, "time_constant") == pytest.approx(slowest * RC, rel=1e-12)


@pytest.mark.parametrize("band", [0.1, 0.05, 0.02, 0.01, 1e-3, 1e-6, 2.0**-25])
def test_settling_of_one_pole(band: float) -> None:
    """-ln(band) time constants."""
    assert take(ladder(1), "settling_time", band=band) == pytest.approx(-math.log(band) * RC, rel=1e-13)


def test_many_sections_approach_the_distributed_line() -> None:
    """Step times over the total RC tend to 0.378747838271396 (50 %) and 0.900946091804982 (10-90 %); W.
    Thomson 1855.
    """
    errors = []
    for n in (30, 60):
        network = ladder(n)
        total = (n * R) * (n * C)
        rise, delay = take(network, "rise_time") / total, take(network, "delay") / total
        slowest = take(network, "time_constant") / total
        assert delay == pytest.approx(0.378747838271396, rel=0.05)
        errors.append((rise - 0.900946091804982, delay - 0.378747838271396, slowest - 4 / math.pi**2))
    # The lumped line differs by 1/n to leading order: twice the sections, half the error.
    for coarse, fine in zip(*errors, strict=True):
        assert coarse / fine == pytest.approx(2.0, abs=0.05)


def test_the_check_tree() -> None:
    """Root R 1 C 1; from it R 2 C 3 (output) and R 4 C 1: t50 7.947303167244, t90 - t10 22.699129574...."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    for name, a, b, r, c in (("1", "in", "a", 1, 1), ("2", "a", "out", 2, 3), ("3", "a", "b", 4, 1)):
        network.add_resistor(f"R{name}", a, b, float(r))
        network.add_capacitor(f"C{name}", b, "0", float(c))
    assert take(network, "delay") == pytest.approx(7.947303167244, rel=1e-12)
    assert take(network, "rise_time") == pytest.approx(24.38123605038 - 1.682106472075, rel=1e-12)
    assert take(network, "time_constant") == pytest.approx(10.0752801327736, rel=1e-13)


def test_a_step_that_jumps_past_its_levels_takes_no_time() -> None:
    """A divider of capacitors that overshoots: 80 % of the source at once, 50 % in the end."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "in", "out", 4e-6)
    network.add_resistor("R2", "out", "0", 1e3)
    network.add_capacitor("C2", "out", "0", 1e-6)
    assert take(network, "rise_time") == 0.0
    assert take(network, "delay") == 0.0
    # It comes down from 0.8 to 0.5 with (R1 || R2)(C1 + C2) = 2.5 ms: 5 % of 0.5 is left after ln(0.3/0.025).
    assert take(network, "settling_time", band=0.05) == pytest.approx(2.5e-3 * math.log(12), rel=1e-12)


def test_a_ringing_step_settles_when_it_last_enters_the_band() -> None:
    """R L C in series: the envelope's last crossing, found by bisection of the textbook solution in 40
    digits.
    """
    r, inductance, c, band = 20.0, 1e-3, 1e-6, 0.02
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", r)
    network.add_inductor("L1", "a", "out", inductance)
    network.add_capacitor("C1", "out", "0", c)
    with mpmath.workdps(40):
        a = mpmath.mpf(r) / (2 * mpmath.mpf(inductance))
        w = mpmath.sqrt(1 / (mpmath.mpf(inductance) * mpmath.mpf(c)) - a * a)

        def missing(t: mpmath.mpf) -> mpmath.mpf:
            return mpmath.exp(-a * t) * (mpmath.cos(w * t) + a / w * mpmath.sin(w * t))

        # Extremes of what is missing lie at k pi / w; the last one outside the band precedes the last entry.
        k = max(k for k in range(200) if abs(missing(k * mpmath.pi / w)) > band)
        sign = mpmath.sign(missing(k * mpmath.pi / w))
        low, high = k * mpmath.pi / w, (k + 1) * mpmath.pi / w
        for _ in range(120):
            middle = (low + high) / 2
            low, high = (middle, high) if sign * missing(middle) > band else (low, middle)
        assert take(network, "settling_time", band=band) == pytest.approx(float(low), rel=1e-11)


@settings(max_examples=20, deadline=None, derandomize=True)
@given(st.floats(0.001, 0.4), st.integers(1, 7))
def test_the_response_is_at_its_levels_when_the_measures_say(band: float, sections: int) -> None:
    """The response over time, taken at the measured times, shows the levels that define them."""
    network = ladder(sections, step={"from": 0, "to": 1})
    settled = take(network, "settling_time", band=band)
    half = take(network, "delay")
    at = transient(network, [half, settled, settled * 1.3], "out")
    assert at[0] == pytest.approx(0.5, abs=1e-13)
    assert at[1] == pytest.approx(1 - band, abs=1e-13)
    assert at[2] > 1 - band


def test_periodic_measures_of_a_pulse_width_filter() -> None:
    """PWM 0..5 V, duty 0.3, r = T/RC = 1: closed forms of one RC, and the square wave's THD through its
    cutoff.
    """
    network = ladder(1, square={"low": 0, "high": 5, "frequency": 1 / RC, "duty": 0.3})
    up, down, whole = (-math.expm1(-x) for x in (0.3, 0.7, 1.0))
    assert take(network, "mean") == pytest.approx(1.5, rel=1e-13)
    assert take(network, "ripple") == pytest.approx(5 * up * down / whole, rel=1e-12)
    assert take(network, "peak_voltage") == pytest.approx(5 * up / whole, rel=1e-12)
    # Across the resistor flows what the capacitor's current is: mean zero, and the difference's peak at the
    # edge.
    top, bottom = 5 * up / whole, 5 * up / whole - 5 * up * down / whole
    assert take(network, "peak_voltage", part="R0") == pytest.approx(max(5 - bottom, top), rel=1e-12)
    rms = take(network, "rms")
    ac = rms**2 - 1.5**2
    # Power balance: the source's square is the resistor's plus the capacitor's plus twice their (zero)
    # product.
    assert take(network, "dissipation", part="R0") == pytest.approx((25 * 0.3 - 1.5**2 - ac) / R, rel=1e-11)
    square = ladder(1, square={"low": -1, "high": 1, "frequency": 1 / (2 * math.pi * RC)})
    assert take(square, "thd") == pytest.approx(16.35285305224, rel=1e-11)
    assert take(square, "harmonic", order=1.0) == pytest.approx(4 / math.pi / math.sqrt(2), rel=1e-12)
    assert take(square, "harmonic", order=3.0) == pytest.approx(4 / (3 * math.pi) / math.sqrt(10), rel=1e-12)


def test_droop_of_a_coupled_wave() -> None:
    """Through a series C, shunt R the top of a square wave of r = T/tau tilts by 2 tanh(r/4) of half its
    swing.
    """
    network = Network()
    network.add_voltage_source("V1", "in", "0", square={"low": -1, "high": 1, "frequency": 1e3})
    network.add_capacitor("C1", "in", "out", 1e-6)
    network.add_resistor("R1", "out", "0", 10e3)
    r = 1e-3 / (10e3 * 1e-6)
    top = take(network, "peak_voltage")
    assert top * -math.expm1(-r / 2) == pytest.approx(2 * math.tanh(r / 4), rel=1e-12)


def test_dc_steady_state_where_nothing_repeats() -> None:
    """Peak and power with dc sources only, or after a step: Ohm's law."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", dc=12)
    network.add_voltage_source("V2", "b", "0", step={"from": 0, "to": -6, "at": 1e-3})
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_resistor("R2", "out", "b", 2e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    assert take(network, "dissipation", part="R2") == pytest.approx(2e3 * (18 / 3e3) ** 2, rel=1e-13)
    assert take(network, "peak_voltage") == pytest.approx(6.0, rel=1e-13)
    assert take(network, "peak_voltage", "in b") == pytest.approx(18.0, rel=1e-13)
    for name in ("mean", "rms", "ripple", "thd"):
        with pytest.raises(UndecidedError, match="no source repeats"):
            take(network, name)


def charged() -> Network:
    """A 325 V supply feeding a reservoir C1 with a bleeder R2."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", dc=325)
    network.add_resistor("R1", "in", "out", 100.0)
    network.add_capacitor("C1", "out", "0", 1e-6)
    network.add_resistor("R2", "out", "0", 1e6)
    return network


def test_discharge_through_a_bleeder() -> None:
    """R2 C1 ln(V0/V): with the source gone its series resistor carries nothing."""
    start = 325 * 1e6 / (1e6 + 100)
    assert take(charged(), "discharge_time", part="C1", to=34.0) == pytest.approx(
        math.log(start / 34), rel=1e-13
    )
    assert take(charged(), "discharge_time", part="C1", to=400.0) == 0.0


def test_discharge_with_charge_from_a_neighbour() -> None:
    """A second capacitor at the supply feeds back: two modes, solved in 40 digits by the quadratic
    formula.
    """
    network = charged()
    network.add_capacitor("C2", "in", "0", 2e-6)
    got = take(network, "discharge_time", part="C1", to=34.0)
    with mpmath.workdps(40):
        c1, c2, g1, g2 = (mpmath.mpf(x) for x in (1e-6, 2e-6, 1 / mpmath.mpf(100), 1 / mpmath.mpf(10) ** 6))
        start = 325 * g1 / (g1 + g2)
        system = mpmath.matrix([[-(g1 + g2) / c1, g1 / c1], [g1 / c2, -g1 / c2]])
        state = mpmath.expm(system * mpmath.mpf(got)) * mpmath.matrix([start, mpmath.mpf(325)])
        assert float(state[0]) == pytest.approx(34.0, rel=1e-11)


def test_discharge_from_the_peak_of_a_periodic_state() -> None:
    """A rectified wave charges to its ripple's top; the bleeder takes it from there."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", square={"low": 0, "high": 10, "frequency": 1e3, "duty": 0.3})
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    network.add_resistor("R2", "out", "0", 9e3)
    tau, gain, r = 0.9e-3, 9.0, 1e-3 / 0.9e-3
    top = gain * -math.expm1(-0.3 * r) / -math.expm1(-r)
    assert take(network, "discharge_time", part="C1", to=1.0) == pytest.approx(
        9e-3 * math.log(top), rel=1e-12
    )
    assert tau == pytest.approx(1e3 * 9e3 / 10e3 * 1e-6)


def test_charge_that_stays_is_never_down() -> None:
    """Without a bleeder the capacitor keeps its charge; two capacitors share theirs and keep it."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", dc=100)
    network.add_resistor("R1", "in", "out", 100.0)
    network.add_capacitor("C1", "out", "0", 1e-6)
    with pytest.raises(UndecidedError, match="C1 keeps 100 V"):
        take(network, "discharge_time", part="C1", to=34.0)
    network.add_resistor("R2", "out", "x", 50.0)
    network.add_capacitor("C2", "x", "y", 1e-6)
    network.add_resistor("R3", "in", "y", 50.0)
    with pytest.raises(UndecidedError, match="C1 keeps 100 V"):
        take(network, "discharge_time", part="C1", to=34.0)


def test_measures_that_do_not_exist_say_why() -> None:
    """No final value, no mode, charge for ever, a part of the wrong kind, a target of zero."""
    blocked = Network()
    blocked.add_voltage_source("V1", "in", "0", ac=1)
    blocked.add_capacitor("C1", "in", "out", 1e-6)
    blocked.add_resistor("R1", "out", "0", 1e3)
    for name in ("rise_time", "delay"):
        with pytest.raises(UndecidedError, match="settles at zero"):
            take(blocked, name)
    resistive = Network()
    resistive.add_voltage_source("V1", "in", "0", ac=1)
    resistive.add_resistor("R1", "in", "out", 1.0)
    resistive.add_resistor("R2", "out", "0", 1.0)
    with pytest.raises(UndecidedError, match="no natural mode"):
        take(resistive, "time_constant")
    assert take(resistive, "rise_time") == 0.0
    floating = Network()
    floating.add_voltage_source("V1", "in", "0", ac=1)
    floating.add_capacitor("C1", "in", "out", 1e-6)
    floating.add_capacitor("C2", "out", "0", 1e-6)
    with pytest.raises(UndecidedError, match="stays for ever"):
        take(floating, "time_constant")
    with pytest.raises(CircuitError, match="R2 is no capacitor"):
        take(charged(), "discharge_time", part="R2", to=1.0)
    with pytest.raises(CircuitError, match="C1 is no resistor"):
        take(charged(), "dissipation", part="C1")
    with pytest.raises(UndecidedError, match="never arrives"):
        take(charged(), "discharge_time", part="C1", to=0.0)
    with pytest.raises(CircuitError, match="no part called"):
        take(charged(), "dissipation", part="R9")


def test_a_network_without_a_free_node() -> None:
    """A resistor across its source has no mode at all: 5 V at half duty are 2.5 V mean and 12.5 V^2/R."""
    net = Network("Heater of a valve chamber")
    net.add_voltage_source("Vin", "out", "0", ac=1, square={"low": 0, "high": 5, "frequency": 50})
    net.add_resistor("R1", "out", "0", 1e3)
    assert net.measure("mean") == pytest.approx(2.5, rel=1e-12)
    assert net.measure("dissipation", part="R1") == pytest.approx(12.5e-3, rel=1e-12)
    assert net.measure("peak_voltage") == 5
    assert net.measure("rise_time") == 0
