"""Periodic steady states against the closed forms of waveforms and filters, and 60-digit modal sums."""

from __future__ import annotations

import math
import random
from typing import Any

import mna_reference as reference
import mpmath
import numpy as np
import pytest
import scipy.integrate
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.circuit import Network, Source
from rcnet.circuit.waveform import Points, Sine, Square, Step
from rcnet.errors import CircuitError, UndecidedError
from rcnet.exact import Periodic, periodic, response, transient

R, C = 1e3, 1e-6
TAU = R * C


def driven(wave: Any, *, high_pass: bool = False, sections: int = 1) -> Network:
    """Equal sections of series R, shunt C (or the other way round) under a waveform; the far end is
    `n{sections}`.
    """
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1, waveform=wave)
    for k in range(sections):
        series, shunt = (f"n{k}", f"n{k + 1}"), (f"n{k + 1}", "0")
        network.add_resistor(f"R{k}", *(shunt if high_pass else series), R)
        network.add_capacitor(f"C{k}", *(series if high_pass else shunt), C)
    return network


def divider(wave: Any) -> Network:
    """Two equal resistors: the output is half the waveform, at once."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_resistor("R2", "out", "0", 1e3)
    return network


# Fourier series of textbook waves of amplitude 1 (any handbook): peak of harmonic n, rms, THD.
TEXTBOOK = {
    "square": (
        Square(-1, 1, 1e-3, 0.5e-3),
        lambda n: 4 / (math.pi * n) if n % 2 else 0.0,
        1.0,
        math.pi**2 / 8 - 1,
    ),
    "triangle": (
        Points(((0.0, -1.0), (0.5e-3, 1.0)), 1e-3),
        lambda n: 8 / (math.pi * n) ** 2 if n % 2 else 0.0,
        1 / math.sqrt(3),
        math.pi**4 / 96 - 1,
    ),
    "sawtooth": (
        Points(((0.0, -1.0), (1e-3, 1.0)), 1e-3),
        lambda n: 2 / (math.pi * n),
        1 / math.sqrt(3),
        math.pi**2 / 6 - 1,
    ),
    "sine": (Sine(1.0, 1e3), lambda n: float(n == 1), 1 / math.sqrt(2), 0.0),
}


@pytest.mark.parametrize("name", TEXTBOOK)
def test_textbook_waves_have_their_harmonics_rms_and_distortion(name: str) -> None:
    """Through a resistive divider nothing is filtered: half of the wave itself."""
    wave, harmonic, rms, thd_squared = TEXTBOOK[name]
    state = periodic(divider(wave), "out")
    assert state.mean == pytest.approx(0, abs=1e-16)
    assert state.rms == pytest.approx(rms / 2, rel=1e-14)
    assert state.thd == pytest.approx(math.sqrt(thd_squared), rel=1e-12)
    assert state.ripple == pytest.approx(1.0, rel=1e-14)
    for n in (1, 2, 3, 7, 50):
        assert state.harmonic(n) == pytest.approx(harmonic(n) / 2, rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("duty", [0.5, 0.25, 0.1])
def test_pulse_distortion_by_duty(duty: float) -> None:
    """Pulse 0..A: mean AD, rms A sqrt D, THD^2 = 2 D(1-D) / (2 sin(pi D) / pi)^2 - 1."""
    state = periodic(divider(Square.from_duty(0.0, 2.0, 1e3, duty)), "out")
    assert state.mean == pytest.approx(duty, rel=1e-14)
    assert state.rms == pytest.approx(math.sqrt(duty), rel=1e-14)
    thd = math.sqrt(2 * duty * (1 - duty) / (2 * math.sin(math.pi * duty) / math.pi) ** 2 - 1)
    assert state.thd == pytest.approx(thd, rel=1e-12)


def test_trapezoid_harmonics() -> None:
    """Trapezoid 0..A, D at 50 %, equal edges: 2 A D |sinc(nD)| |sinc(n tr/T)|."""
    duty, edge = 0.3, 1e-6
    wave = Square.from_duty(0.0, 2.0, 1e3, duty, rise=edge * 1e-3, fall=edge * 1e-3)
    state = periodic(divider(wave), "out")
    for n in (1, 2, 5, 10, 1000):
        expected = 2 * duty * abs(np.sinc(n * duty)) * abs(np.sinc(n * edge))
        assert state.harmonic(n) == pytest.approx(expected, rel=1e-9, abs=1e-15)


@pytest.mark.parametrize("r", [0.01, 1.0, 2 * math.pi, 10.0, 300.0])
def test_square_wave_through_one_rc(r: float) -> None:
    """R = T/tau: ms = 1 - (4/r) tanh(r/4), V1 = (4/pi) / sqrt(1 + (2 pi/r)^2), peak to peak 2 tanh(r/4)."""
    state = periodic(driven(Square(-1, 1, r * TAU, r * TAU / 2)), "n1")
    with mpmath.workdps(40):
        exact_r = mpmath.mpf(r * TAU) / (mpmath.mpf(R) * mpmath.mpf(C))
        square = 1 - 4 / exact_r * mpmath.tanh(exact_r / 4)
        first = 4 / mpmath.pi / mpmath.sqrt(1 + (2 * mpmath.pi / exact_r) ** 2)
        assert state.rms == pytest.approx(float(mpmath.sqrt(square)), rel=1e-12)
        assert state.harmonic(1) == pytest.approx(float(first), rel=1e-13)
        assert state.thd == pytest.approx(float(mpmath.sqrt(2 * square / first**2 - 1)), rel=1e-11)
        assert state.ripple == pytest.approx(float(2 * mpmath.tanh(exact_r / 4)), rel=1e-13)


def test_square_wave_distortion_at_the_cutoff() -> None:
    """F = cutoff (r = 2 pi): THD 16.35285305224 %, rms 0.6450757233388; as a high-pass 66.38219038097 %."""
    wave = Square(-1, 1, 2 * math.pi * TAU, math.pi * TAU)
    low, high = periodic(driven(wave), "n1"), periodic(driven(wave, high_pass=True), "n1")
    assert 100 * low.thd == pytest.approx(16.35285305224, rel=1e-12)
    assert low.rms == pytest.approx(0.6450757233388, rel=1e-12)
    assert 100 * high.thd == pytest.approx(66.38219038097, rel=1e-12)
    assert high.rms == pytest.approx(0.7641186499222, rel=1e-12)
    # A high-pass starts each half period at 2 / (1 + exp(-r/2)) and droops to exp(-r/2) of that.
    assert high.maximum == pytest.approx(2 / (1 + math.exp(-math.pi)), rel=1e-13)
    assert high.ripple == pytest.approx(4 / (1 + math.exp(-math.pi)), rel=1e-13)


@pytest.mark.parametrize(
    ("duty", "r"), [(0.5, 1.0), (0.5, 0.1), (0.25, 1.0), (0.1, 0.1), (0.3, 1e-6), (0.37, 40.0)]
)
def test_pulse_width_ripple_of_one_rc(duty: float, r: float) -> None:
    """PWM 0..V: V (1 - e^-Dr)(1 - e^-(1-D)r) / (1 - e^-r) peak to peak, highest V (1 - e^-Dr) / (1 -
    e^-r).
    """
    state = periodic(driven(Square(0.0, 1.0, r * TAU, duty * (r * TAU))), "n1")
    up, down, whole = (-math.expm1(-x) for x in (duty * r, (1 - duty) * r, r))
    assert state.ripple == pytest.approx(up * down / whole, rel=1e-12)
    assert state.maximum == pytest.approx(up / whole, rel=1e-13)
    assert state.mean == pytest.approx(duty, rel=1e-14)


def ladder_ripple(sections: int, ratio: float, duty: float, share: float, period: float) -> mpmath.mpf:
    """The alternating part of a PWM signal 0..1 after n equal sections at a share of the period, 60
    digits.
    """
    tau = mpmath.mpf(R) * mpmath.mpf(C)
    t, whole, on = share * mpmath.mpf(period), mpmath.mpf(period), mpmath.mpf(duty * period)
    total = (1 if t < on else 0) - on / whole
    for k in range(1, sections + 1):
        phi = (2 * k - 1) * mpmath.pi / (2 * sections + 1)
        rate = 4 * mpmath.sin(phi / 2) ** 2 / tau
        weight = (-1) ** (k + 1) * 2 * mpmath.cos(phi / 2) ** 2 / ((2 * sections + 1) * mpmath.sin(phi / 2))
        since_fall = t - on if t >= on else t - on + whole
        total += (
            weight
            * (mpmath.exp(-rate * since_fall) - mpmath.exp(-rate * t))
            / (1 - mpmath.exp(-rate * whole))
        )
    return total


@pytest.mark.parametrize(
    ("sections", "ratio"), [(2, 1e-3), (3, 1e-2), (6, 1e-2), (6, 1.0), (6, 5.0), (6, 100.0), (10, 3.0)]
)
def test_tiny_ripple_after_several_sections_has_its_own_digits(sections: int, ratio: float) -> None:
    """Ripple down to 1e-17 of the mean, to 1e-9 of itself and better, by the closed form of equal
    sections.
    """
    duty, period = 0.375, ratio * TAU
    state = periodic(driven(Square(0.0, 1.0, period, duty * period), sections=sections), f"n{sections}")
    shares = np.array([0.02, 0.2, 0.36, 0.39, 0.6, 0.97])
    middles = np.where(shares < duty, duty / 2, (1 + duty) / 2) * period
    got = state.alternating(middles, shares * period)
    with mpmath.workdps(60):
        exact = [ladder_ripple(sections, ratio, duty, mpmath.mpf(s), period) for s in shares.tolist()]
        error = max(abs(mpmath.mpf(g) - e) for g, e in zip(got.tolist(), exact, strict=True))
        assert error < 1e-11 * state.ripple
        # No sample of the exact wave may leave what is called its extremes, and its top comes close to them.
        least, greatest = state.extremes
        many = [ladder_ripple(sections, ratio, duty, mpmath.mpf(k) / 97, period) for k in range(97)]
        assert min(many) > least - 1e-11 * state.ripple
        assert max(many) < greatest + 1e-11 * state.ripple
        assert max(many) - min(many) > 0.95 * state.ripple


def numeric(state: Periodic) -> tuple[float, float]:
    """Mean and rms of the waveform by adaptive quadrature between its corners."""
    period = state.period
    edges = state._edges / period
    mean = square = 0.0
    for low, high in zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True):
        inside = (low + (high - low) * 1e-13, high - (high - low) * 1e-13)
        mean += scipy.integrate.quad(lambda x: state.waveform([x])[0], *inside, epsabs=1e-12, epsrel=1e-10)[0]
        square += scipy.integrate.quad(
            lambda x: state.waveform([x])[0] ** 2, *inside, epsabs=1e-12, epsrel=1e-10
        )[0]
    return mean, math.sqrt(square)


def test_several_sources_share_a_common_period() -> None:
    """A 2 kHz sine, a 3 kHz square wave and a dc source: period 1 ms, harmonics where each source
    has them.
    """
    network = Network()
    network.add_voltage_source(
        "V1", "a", "0", sine={"amplitude": 2, "frequency": "2 kHz", "offset": 1, "phase": 40}
    )
    network.add_voltage_source(
        "V2", "b", "0", square={"low": -1, "high": 1, "frequency": "3 kHz", "delay": "0.1 ms"}
    )
    network.add_voltage_source("V3", "c", "0", dc=3)
    network.add_voltage_source("V4", "d", "0", step={"from": 0, "to": 5, "at": "7 ms"})
    for k, node in enumerate("abcd"):
        network.add_resistor(f"R{k}", node, "out", 4e3)
    network.add_capacitor("C1", "out", "0", 50e-9)
    state = periodic(network, "out")
    assert state.period == pytest.approx(1e-3, rel=1e-12)
    assert state.mean == pytest.approx((1 + 0 + 3 + 5) / 4, rel=1e-13)
    mean, rms = numeric(state)
    assert mean == pytest.approx(state.mean, rel=1e-9)
    assert rms == pytest.approx(state.rms, rel=1e-9)
    h = np.abs(1 / (1 + 2j * math.pi * np.array([2e3, 3e3, 9e3]) * 1e3 * 50e-9)) / 4
    assert state.harmonic(1) == pytest.approx(0, abs=1e-15)
    assert state.harmonic(2) == pytest.approx(2 * h[0], rel=1e-12)
    assert state.harmonic(3) == pytest.approx(4 / math.pi * h[1], rel=1e-9)
    assert state.harmonic(9) == pytest.approx(4 / math.pi / 3 * h[2], rel=1e-9)
    # Long after the step, the response over time is the periodic one.
    share = np.array([0.05, 0.2, 0.44, 0.61, 0.93])
    assert state.waveform(share) == pytest.approx(transient(network, 0.1 + share * 1e-3, "out"), abs=1e-9)


@settings(max_examples=25, deadline=None, derandomize=True)
@given(st.integers(0, 10**9), st.floats(-3, 3))
def test_the_steady_state_is_where_transients_go(seed: int, decade: float) -> None:
    """After many slowest time constants the response over time repeats the periodic waveform."""
    rng = random.Random(seed)
    network = reference.random_mesh(rng, rng.randint(1, 6), 3)
    period = 1e-6 * 10**decade
    wave: Any = rng.choice(
        [
            Square.from_duty(-1, 2, 1 / period, rng.uniform(0.1, 0.9)),
            Square.from_duty(0, 1, 1 / period, 0.5, rise=0.1 * period, fall=0.3 * period, delay=0.2 * period),
            Sine(1.0, 1 / period, 0.5, rng.uniform(-180, 180), 0.3 * period),
            Points(((0.1 * period, 1.0), (0.5 * period, -1.0), (0.8 * period, 0.2)), period),
        ]
    )
    network = network.with_source(Source("V1", ("n0", "0"), ac=1, waveform=wave))
    node = network.nodes[-1]
    state = periodic(network, node)
    slowest = -1 / network.modes(node).poles[0]
    turns = math.ceil(60 * slowest / period) + 2
    share = np.linspace(0.013, 0.987, 9)
    late = transient(network, (turns + share) * period, node)
    scale = max(state.ripple, abs(state.mean), 1e-6)
    # Times this late are themselves known only to turns x 1e-16 of a period.
    assert np.abs(state.waveform(share) - late).max() <= (1e-11 + 1e-14 * turns) * max(scale, 1.0)
    assert state.minimum - 1e-12 <= late.min()
    assert state.maximum + 1e-12 >= late.max()


def test_harmonics_of_a_filter_are_the_waves_times_its_response() -> None:
    """|c_n| = 4/(pi n) |H(n f)| for a square wave, H from the exact ac response."""
    network = driven(Square(-1, 1, 1e-3, 0.5e-3), sections=4)
    state = periodic(network, "n4")
    h = np.abs(response(network, [1e3, 3e3, 11e3], "n4"))
    for n, size in zip((1, 3, 11), h.tolist(), strict=True):
        assert state.harmonic(n) == pytest.approx(4 / (math.pi * n) * size, rel=1e-12)
    thd = math.sqrt(sum((abs(state.phasors([n])[0])) ** 2 for n in range(3, 400, 2))) / state.harmonic(1)
    assert state.thd == pytest.approx(thd, rel=1e-9)


def test_tiny_distortion_is_summed_to_its_end() -> None:
    """Eight sections far above their cutoff: THD below 1e-6 still equals the sum over its harmonics."""
    network = driven(Square(-1, 1, TAU / 50, TAU / 100), sections=8)
    state = periodic(network, "n8")
    n = np.arange(3, 199, 2)
    h = np.abs(response(network, 50 / TAU * np.concatenate([[1], n]), "n8"))
    expected = math.sqrt(float(((h[1:] / n) ** 2).sum())) / h[0]
    assert expected < 1e-4
    assert state.thd == pytest.approx(expected, rel=1e-11)


def test_equal_buffered_sections_have_a_periodic_state() -> None:
    """A multiple pole is no obstacle: harmonic n of a square wave falls as 1/(1 + (n w tau)^2)^(m/2)."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", square={"low": -1, "high": 1, "frequency": "2 kHz"})
    here = "in"
    for k in range(4):
        network.add_resistor(f"R{k}", here, f"a{k}", R)
        network.add_capacitor(f"C{k}", f"a{k}", "0", C)
        network.add_voltage_controlled_voltage_source(f"E{k}", f"b{k}", "0", f"a{k}", "0", 1.0)
        here = f"b{k}"
    state = periodic(network, here)
    amplitudes = [4 / (math.pi * n) / (1 + (2 * math.pi * 2e3 * n * TAU) ** 2) ** 2 for n in range(1, 200, 2)]
    assert state.rms == pytest.approx(math.sqrt(sum(a * a for a in amplitudes) / 2), rel=1e-11)
    # A symmetric wave has its extremes a quarter period apart from its zeros; sum the series there.
    phase = np.linspace(0, 1, 4001)
    n = np.arange(1, 200, 2)
    turn = (1 + 2j * math.pi * 2e3 * n * TAU) ** -4.0
    wave = (4 / (math.pi * n) * np.imag(turn * np.exp(2j * math.pi * n * phase[:, None]))).sum(axis=1)
    assert state.ripple == pytest.approx(wave.max() - wave.min(), rel=1e-5)
    assert state.waveform(phase) == pytest.approx(wave, abs=1e-9 * state.ripple)


def test_what_has_no_periodic_state_is_undecided() -> None:
    """No repeating source, periods without a common multiple, an unstable circuit, charge without a drain."""
    with pytest.raises(UndecidedError, match="no source repeats"):
        periodic(driven(Step(0, 1)), "n1")
    network = driven(Sine(1.0, 1e3))
    network.add_voltage_source("V2", "x", "0", sine={"amplitude": 1, "frequency": 1e3 * math.sqrt(2)})
    network.add_resistor("Rx", "x", "n1", 1e3)
    with pytest.raises(UndecidedError, match="no common multiple"):
        periodic(network, "n1")
    unstable = driven(Sine(1.0, 1e3))
    unstable.add_voltage_controlled_current_source("G1", "0", "n1", "n1", "0", 2e-3)
    with pytest.raises(UndecidedError, match="unstable"):
        periodic(unstable, "n1")
    floating = Network()
    floating.add_current_source("I1", "0", "a", square={"low": 0, "high": 1e-3, "frequency": 1e3})
    floating.add_capacitor("C1", "a", "0", 1e-6)
    with pytest.raises(UndecidedError, match="settles nowhere"):
        periodic(floating, "a")
    with pytest.raises(CircuitError, match="phases"):
        periodic(driven(Sine(1.0, 1e3)), "n1").waveform([math.nan])
