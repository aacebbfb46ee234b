"""Exponentials and damped sines against closed forms, 60-digit modal sums, SciPy's integrator and ngspice."""

from __future__ import annotations

import math
import os
import random
import shutil
import subprocess
from pathlib import Path

import mna_reference as reference
import mpmath
import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from time_reference import ModalReference

from rcnet.circuit import Exponential, Network, Sine, Source, Waveform
from rcnet.curves import read_results
from rcnet.errors import UndecidedError
from rcnet.exact import modes, periodic, transient

Float = npt.NDArray[np.float64]


def one_pole(tau: float, wave: Waveform) -> Network:
    """A resistor and a grounded capacitor behind a source."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_resistor("R1", "in", "out", 1.0)
    network.add_capacitor("C1", "out", "0", tau)
    return network


def driven(rate: mpmath.mpc, pole: mpmath.mpf, time: mpmath.mpf) -> mpmath.mpc:
    """What x' = pole x + exp(rate t) comes to from zero."""
    if rate == pole:
        return time * mpmath.exp(pole * time)
    return (mpmath.exp(rate * time) - mpmath.exp(pole * time)) / (rate - pole)


def swings(wave: Exponential | Sine) -> list[tuple[mpmath.mpf, mpmath.mpc, mpmath.mpc]]:
    """(begin, c, s): from begin on, Re(c (exp(s (t - begin)) - 1)) is added to the waveform's start."""
    if isinstance(wave, Sine):
        turn = mpmath.exp(1j * mpmath.radians(mpmath.mpf(wave.phase)))
        rate = mpmath.mpc(-wave.damping, 2 * mpmath.pi * mpmath.mpf(wave.frequency))
        return [(mpmath.mpf(wave.delay), -1j * wave.amplitude * turn, rate)]
    change = mpmath.mpf(wave.final) - mpmath.mpf(wave.initial)
    rise = (
        mpmath.mpf(wave.rise_delay),
        mpmath.mpc(-change),
        mpmath.mpc(-1 / mpmath.mpf(wave.rise_time_constant)),
    )
    if not wave.falls:
        return [rise]
    fall = (
        mpmath.mpf(wave.fall_delay),
        mpmath.mpc(change),
        mpmath.mpc(-1 / mpmath.mpf(wave.fall_time_constant)),
    )
    return [rise, fall]


def expected(exact: ModalReference, node: str, wave: Exponential | Sine, time: float) -> float:
    """The response of an RC network as its modal sum, mode by mode, in 60 digits."""
    with mpmath.workdps(60):
        terms = list(zip(exact.residues(node), exact.rates, strict=True))
        direct = exact.direct[exact.row[node]]
        total = mpmath.mpf(wave.start) * (direct + sum(r / p for r, p in terms))
        for begin, amplitude, rate in swings(wave):
            since = mpmath.mpf(time) - begin
            if since < 0:
                continue
            total += direct * (amplitude * (mpmath.exp(rate * since) - 1)).real
            for r, p in terms:
                moved = driven(rate, -p, since) - driven(mpmath.mpf(0), -p, since)
                total += r * (amplitude * moved).real
        return float(total)


@pytest.mark.parametrize("decades", [3, 8])
@pytest.mark.parametrize("kind", ["tree", "mesh"])
def test_random_networks_under_waves_as_fast_as_each_of_their_modes(kind: str, decades: int) -> None:
    """Rates equal to a mode's, a billionth beside it, far below and far above."""
    make = reference.random_tree if kind == "tree" else reference.random_mesh
    network = make(random.Random(f"exponential {kind} {decades}"), 6, decades)
    exact = ModalReference(network)
    rates = sorted(float(rate) for rate in exact.rates)
    for r in rates:
        for wave in (
            Exponential(1.0, 3.0, 0.1 / r, 1 / r, 2 / r, 3 / r),
            Exponential(0.0, 1.0, 0.0, (1 + 1e-9) / r, 1 / r, 1 / r),
            Exponential(0.0, 2.0, 0.0, 0.01 / r),
            Sine(1.0, r / 20, 0.5, 30.0, 0.3 / r, r),
            Sine(1.0, r, 0.0, 0.0, 0.0, 100 * r),
            Sine(1.0, 1e-12 * r, 0.0, 90.0, 0.0, r),
        ):
            time = np.concatenate(
                [np.geomspace(0.01 / rates[-1], 30 / rates[0], 6), np.geomspace(0.1, 20, 6) / r]
            )
            source = Source("V1", network.sources["V1"].nodes, waveform=wave)
            got = transient(network.with_source(source), time, "n5")
            want = np.array([expected(exact, "n5", wave, t) for t in time.tolist()])
            assert np.abs(got - want).max() <= 1e-12 * max(1e-3, float(np.abs(want).max()))


@pytest.mark.parametrize("beside", [0.0, 1e-15, 1e-12, 1e-9, 1e-6, 1e-3, 1.0])
def test_one_pole_under_an_exponential_of_about_its_own_time_constant(beside: float) -> None:
    """1 - (T exp(-t/T) - tau exp(-t/tau)) / (T - tau), in 40 digits; early times too to their own digits."""
    tau = 0.75
    own = tau * (1 + beside)
    network = one_pole(tau, Exponential(0.0, 1.0, 0.0, own))
    time = np.geomspace(1e-7, 40.0, 60)
    with mpmath.workdps(40):
        a, b = mpmath.mpf(own), mpmath.mpf(tau)
        exact = []
        for t in map(mpmath.mpf, time.tolist()):
            if a == b:
                exact.append(float(1 - mpmath.exp(-t / b) * (1 + t / b)))
            else:
                exact.append(float(1 - (a * mpmath.exp(-t / a) - b * mpmath.exp(-t / b)) / (a - b)))
    assert transient(network, time, "out") == pytest.approx(exact, rel=2e-13)


def test_equal_buffered_sections_under_an_exponential_of_their_own_time_constant() -> None:
    """1/(1 + s tau)^3 under 1 - exp(-t/tau): 1 - exp(-x) (1 + x + x^2/2 + x^3/6), x = t/tau (by parts)."""
    network = Network()
    network.add_voltage_source("V1", "y0", "0", waveform=Exponential(0.0, 1.0, 0.0, 1e-3))
    for k in range(3):
        network.add_voltage_controlled_voltage_source(f"E{k}", f"x{k}", "0", f"y{k}", "0", 1.0)
        network.add_resistor(f"R{k}", f"x{k}", f"y{k + 1}", 1e3)
        network.add_capacitor(f"C{k}", f"y{k + 1}", "0", 1e-6)
    time = np.linspace(0.0, 20e-3, 50)
    x = time / 1e-3
    exact = 1 - np.exp(-x) * (1 + x + x**2 / 2 + x**3 / 6)
    assert np.abs(transient(network, time, "y3") - exact).max() <= 1e-11


@pytest.mark.parametrize("beside", [0.0, 1e-13, 1e-6, 0.3])
def test_a_ringing_circuit_under_a_damped_sine_of_its_own_mode(beside: float) -> None:
    """Series R L, shunt C: the sum over both poles and both halves of the sine, in 60 digits."""
    r, ind, c = 40.0, 1e-3, 1e-6
    damping = r / (2 * ind)
    natural = math.sqrt(1 / (ind * c) - damping**2) * (1 + beside)
    wave = Sine(1.5, natural / (2 * math.pi), 0.25, 20.0, 1e-5, damping)
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_resistor("R1", "in", "a", r)
    network.add_inductor("L1", "a", "out", ind)
    network.add_capacitor("C1", "out", "0", c)
    time = np.concatenate([[0.0], np.linspace(1e-5, 5e-4, 60)])
    exact = []
    with mpmath.workdps(60):
        a = mpmath.mpf(r) / mpmath.mpf(ind)
        b = 1 / (mpmath.mpf(ind) * mpmath.mpf(c))
        half = mpmath.sqrt(mpmath.mpc(a * a / 4 - b))
        poles = (-a / 2 + half, -a / 2 - half)
        (begin, amplitude, rate), *_ = swings(wave)
        for t in time.tolist():
            total, since = mpmath.mpf(wave.start), mpmath.mpf(t) - begin
            for pole, other in (poles, poles[::-1]):
                residue = b / (pole - other)
                for c_half, s in ((amplitude / 2, rate), (mpmath.conj(amplitude) / 2, mpmath.conj(rate))):
                    if since >= 0:
                        total += (
                            residue * c_half * (driven(s, pole, since) - driven(mpmath.mpf(0), pole, since))
                        )
            exact.append(float(mpmath.re(total)))
    assert transient(network, time, "out") == pytest.approx(exact, abs=3e-12)


def test_a_lossless_circuit_at_resonance_rises_without_end() -> None:
    """An undamped sine of exactly 1/sqrt(LC): v = (sin x - x cos x) / 2, x = w t (Laplace tables)."""
    ind, c = 1.0, 1.0
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=Sine(1.0, 1 / (2 * math.pi)))
    network.add_inductor("L1", "in", "out", ind)
    network.add_capacitor("C1", "out", "0", c)
    x = np.linspace(0.0, 60.0, 80)
    assert transient(network, x, "out") == pytest.approx((np.sin(x) - x * np.cos(x)) / 2, abs=1e-11)


def test_currents_into_a_capacitor_that_nothing_drains_add_up() -> None:
    """The integral over C: of 1 - exp(-t/T), of exp(-d t) sin(w t), of sin(w t)."""
    time = np.linspace(0.0, 12.0, 30)
    d, w = 0.5, 2 * math.pi * 0.75
    cases: list[tuple[Waveform, Float]] = [
        (Exponential(0.0, 3.0, 0.0, 2.0), 3 * (time + 2 * np.expm1(-time / 2))),
        (
            Sine(1.0, 0.75, damping=d),
            (w - np.exp(-d * time) * (d * np.sin(w * time) + w * np.cos(w * time))) / (d * d + w * w),
        ),
        (Sine(1.0, 0.75), (1 - np.cos(w * time)) / w),
    ]
    for wave, charge in cases:
        network = Network()
        network.add_current_source("I1", "0", "a", waveform=wave)
        network.add_capacitor("C1", "a", "0", 0.5)
        assert transient(network, time, "a") == pytest.approx(charge / 0.5, abs=1e-13)


def test_a_sine_far_above_every_mode_keeps_its_digits() -> None:
    """A damped sine at 1e6 times the corner: y' = (u - y)/tau in closed form, to 1e-9 of its own size."""
    tau, wave = 1.0, Sine(1.0, 1e6, damping=2.0)
    time = np.array([1.3e-6, 7.77e-6, 1e-3, 0.5, 3.0])
    got = transient(one_pole(tau, wave), time, "out")
    with mpmath.workdps(60):
        rate = mpmath.mpc(-2, 2 * mpmath.pi * 10**6)
        want = [float((-1j * driven(rate, mpmath.mpf(-1), mpmath.mpf(t))).real) for t in time.tolist()]
    assert got == pytest.approx(want, rel=1e-9)


def test_scipys_integrator_agrees_on_two_poles_and_both_waves() -> None:
    """State equations of two coupled RC sections, integrated by DOP853 (E. Hairer et al. 1993)."""
    from scipy.integrate import solve_ivp

    network = Network()
    for name, wave in (
        ("V1", Exponential(0.5, 2.0, 1e-3, 0.7e-3, 3e-3, 0.4e-3)),
        ("V2", Sine(1.0, 900.0, -0.2, 70.0, 0.0, 350.0)),
    ):
        network.add_voltage_source(name, f"in{name}", "0", waveform=wave)
    network.add_resistor("R1", "inV1", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 1e-6)
    network.add_resistor("R2", "a", "b", 2e3)
    network.add_capacitor("C2", "b", "0", 0.3e-6)
    network.add_resistor("R3", "b", "inV2", 3e3)

    def exponential(t: float) -> float:
        rise = -math.expm1(-(t - 1e-3) / 0.7e-3) if t > 1e-3 else 0.0
        fall = -math.expm1(-(t - 3e-3) / 0.4e-3) if t > 3e-3 else 0.0
        return 0.5 + 1.5 * (rise - fall)

    def sine(t: float) -> float:
        return -0.2 + math.exp(-350 * t) * math.sin(2 * math.pi * 900 * t + math.radians(70))

    def slope(t: float, v: Float) -> list[float]:
        a, b = v.tolist()
        return [
            ((exponential(t) - a) / 1e3 + (b - a) / 2e3) / 1e-6,
            ((a - b) / 2e3 + (sine(t) - b) / 3e3) / 0.3e-6,
        ]

    time = np.linspace(0.0, 6e-3, 61)
    state = transient(network, [0.0], ["a", "b"])[:, 0]
    parts = [state[:, None]]
    for start in range(0, 60, 10):  # the corners lie between stretches, not within one
        part = time[start : start + 11]
        done = solve_ivp(slope, (part[0], part[-1]), state, "DOP853", part, rtol=1e-12, atol=1e-14)
        state = done.y[:, -1]
        parts.append(done.y[:, 1:])
    assert np.abs(transient(network, time, ["a", "b"]) - np.hstack(parts)).max() <= 1e-9  # dense output


@settings(max_examples=20, deadline=None, derandomize=True)
@given(st.integers(0, 10**9), st.integers(1, 1 << 12))
def test_a_wave_that_begins_later_does_the_same_later(seed: int, shift: int) -> None:
    """Shifts that binary fractions hold exactly."""
    rng = random.Random(seed)
    network = reference.random_tree(rng, rng.randint(1, 6), 3)
    late, unit = shift * 2.0**-32, 2.0**-22
    time = np.arange(1, 20) * 2.0**-22
    for now, then in (
        (
            Exponential(0.0, 1.0, 0.0, unit, 2 * unit, unit),
            Exponential(0.0, 1.0, late, unit, 2 * unit + late, unit),
        ),
        (Sine(1.0, 1 / unit, 0.0, 30.0, 0.0, 1 / unit), Sine(1.0, 1 / unit, 0.0, 30.0, late, 1 / unit)),
    ):
        both = [network.with_source(Source("V1", ("n0", "0"), waveform=wave)) for wave in (now, then)]
        node = network.nodes[-1]
        assert np.abs(transient(both[0], time, node) - transient(both[1], time + late, node)).max() <= 1e-13


def test_neither_wave_has_a_periodic_steady_state_and_both_settle() -> None:
    """Measures of one are undecided with a sentence; those of the end see the last value."""
    for wave, last in (
        (Exponential(1.0, 3.0, 0.0, 1.0), 3.0),
        (Exponential(1.0, 3.0, 0.0, 1.0, 5.0, 1.0), 1.0),
        (Sine(2.0, 1.0, 0.5, damping=1.0), 0.5),
    ):
        network = one_pole(1.0, wave)
        with pytest.raises(UndecidedError, match="no source repeats, so there is no periodic steady state"):
            periodic(network, "out")
        with pytest.raises(UndecidedError, match="no periodic steady state"):
            network.measure("mean", "out")
        assert network.measure("peak_voltage", part="C1") == pytest.approx(last, rel=1e-15)
        network.add_voltage_source("V2", "b", "0", sine={"amplitude": 1, "frequency": 50})
        network.add_resistor("R2", "b", "out", 1.0)
        assert network.measure("mean", "out") == pytest.approx(last / 2, rel=1e-14)


# ---------------------------------------------------------------------- ngspice

SPICE = {
    "EXP(1 5 2e-4 1e-4 1e-3 3e-4)": Exponential(1.0, 5.0, 2e-4, 1e-4, 1e-3, 3e-4),
    "EXP(1 5 2e-4 1e-4 2e-4 3e-4)": Exponential(1.0, 5.0, 2e-4, 1e-4, 2e-4, 3e-4),
    "EXP(-1 5 1e-30 1e-4 1e30 1)": Exponential(-1.0, 5.0, 0.0, 1e-4),
    "SIN(1 2 5e3 3e-4 4e3 30)": Sine(2.0, 5e3, 1.0, 30.0, 3e-4, 4e3),
    "SIN(1 2 5e3 0 500 -90)": Sine(2.0, 5e3, 1.0, -90.0, 0.0, 500.0),
    "SIN(0 2 3e3 1e-4 0 45)": Sine(2.0, 3e3, 0.0, 45.0, 1e-4),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("text", SPICE)
def test_ngspice_makes_the_same_wave_and_the_same_response(tmp_path: Path, text: str) -> None:
    """The wave itself to rounding, at ngspice's own times, and before its delay too; what a network makes of
    it within (h p)^2 / (12 e) for each pole p of the trapezoidal rule's step h (Nagel 1975).
    """
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=SPICE[text])
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 1e-7)
    network.add_resistor("R2", "a", "out", 5e3)
    network.add_capacitor("C2", "out", "0", 5e-8)
    deck = [
        "a wave and what becomes of it",
        f"V1 in 0 {text}",
        *("R1 in a 1e3", "C1 a 0 1e-7", "R2 a out 5e3", "C2 out 0 5e-8"),
        ".options reltol=1e-8 abstol=1e-18 vntol=1e-12 chgtol=1e-20",
        ".tran 2.5e-7 2e-3 0 2.5e-7",
        ".end",
    ]
    (tmp_path / "deck.cir").write_text("\n".join(deck) + "\n", encoding="utf-8")
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")
    assert program is not None
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
        cwd=tmp_path,
        env={**os.environ, "HOME": str(tmp_path)},
        capture_output=True,
        check=True,
        timeout=60,
    )
    curves = read_results(tmp_path / "deck.raw")
    fastest = float(np.abs(modes(network, "out").poles).max())
    # A sine of 5 kHz is followed as a mode of 2 pi 5 kHz would be.
    allowed = 6.0 * (2.5e-7 * max(fastest, 2 * math.pi * 5e3)) ** 2 / (12 * math.e) * 3
    for node, share in (("in", 1e-12), ("a", allowed), ("out", allowed)):
        curve = curves.get(f"v({node})", "transient")
        assert curve is not None and len(curve.axis) > 5000
        assert np.abs(curve.values.real - transient(network, curve.axis, node)).max() <= share
