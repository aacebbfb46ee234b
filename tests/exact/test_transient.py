"""Responses over time against closed forms, 60-digit modal sums, numerical inverse Laplace transforms and
ngspice.
"""

from __future__ import annotations

import itertools
import math
import os
import random
import shutil
import subprocess
from pathlib import Path
from typing import Any

import mna_reference as reference
import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from time_reference import ModalReference

from rcnet.circuit import Network, Source
from rcnet.circuit.waveform import Points, Sine, Square, Step
from rcnet.curves.raw import parse_raw
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import modes, transient

FULL_SCALE = 1e-10  # of the greatest value: what a transient promises


def ladder(sections: int, r: float, c: float, **drive: Any) -> Network:
    """Equal sections of series R and shunt C."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", **(drive or {"step": {"from": 0, "to": 1}}))
    for k in range(sections):
        network.add_resistor(f"R{k}", f"n{k}", f"n{k + 1}", r)
        network.add_capacitor(f"C{k}", f"n{k + 1}", "0", c)
    return network


def with_wave(network: Network, wave: Any) -> Network:
    """The network with its V1 driven by a waveform."""
    return network.with_source(Source("V1", network.sources["V1"].nodes, ac=1.0, waveform=wave))


@pytest.mark.parametrize("sections", [1, 2, 6, 25])
def test_step_of_a_uniform_ladder(sections: int) -> None:
    """v(t) = 1 - sum (-1)^(k+1) 2 cos^2(phi/2) / ((2n+1) sin(phi/2)) exp(-4 sin^2(phi/2) t/RC) (Morgan-Voyce
    1959).
    """
    r, c = 2e3, 5e-9
    time = np.concatenate([[0.0], np.geomspace(1e-3, 5 * sections**2, 60)])
    with mpmath.workdps(40):
        exact = []
        for t in time.tolist():
            total = mpmath.mpf(1)
            for k in range(1, sections + 1):
                phi = (2 * k - 1) * mpmath.pi / (2 * sections + 1)
                weight = 2 * mpmath.cos(phi / 2) ** 2 / ((2 * sections + 1) * mpmath.sin(phi / 2))
                total -= (-1) ** (k + 1) * weight * mpmath.exp(-4 * mpmath.sin(phi / 2) ** 2 * mpmath.mpf(t))
            exact.append(float(total))
    got = transient(ladder(sections, r, c), time * (r * c), f"n{sections}")
    assert np.abs(got - exact).max() <= 2e-15


@pytest.mark.parametrize("decades", [6, 12])
@pytest.mark.parametrize("kind", ["tree", "mesh"])
def test_random_networks_over_many_decades(kind: str, decades: int) -> None:
    """Steps, ramps and pulses into random networks, at times from the fastest to the slowest mode."""
    make = reference.random_tree if kind == "tree" else reference.random_mesh
    for seed in range(3):
        rng = random.Random(f"time {kind} {decades} {seed}")
        network = make(rng, 7, decades)
        exact = ModalReference(network)
        rates = sorted(float(rate) for rate in exact.rates)
        at, rise = 0.3 / rates[3], 2.0 / rates[5]
        wave = Points(((0.0, 1.0), (at, -2.0), (at + rise, 3.0)))
        with mpmath.workdps(60):
            first, second = -3 / mpmath.mpf(at), 5 / (mpmath.mpf(at + rise) - mpmath.mpf(at))
            corners = [(0.0, 0.0, first), (at, 0.0, second - first), (at + rise, 0.0, -second)]
        time = np.geomspace(0.01 / rates[-1], 30 / rates[0], 25)
        got = transient(with_wave(network, wave), time, ["n2", "n7"])
        for row, node in enumerate(("n2", "n7")):
            expected = [exact.under(node, 1.0, corners, t) for t in time.tolist()]
            full = max(1e-3, *(abs(float(v)) for v in expected))
            assert max(
                abs(float(v - mpmath.mpf(g))) for v, g in zip(expected, got[row].tolist(), strict=True)
            ) <= (FULL_SCALE / 100 * full)


@pytest.mark.parametrize("kind", ["EG", "FH", "L", "buffers"])
def test_general_networks_against_inverse_laplace_transforms(kind: str) -> None:
    """Unit steps against mpmath's Talbot inversion of a 50-digit nodal solution (A. Talbot 1979)."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", step={"from": 0, "to": 1})
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 1e-6)
    network.add_resistor("R2", "a", "b", 2e3)
    network.add_voltage_source("Vs", "b", "c", dc=0)
    network.add_capacitor("C2", "c", "0", 0.1e-6)
    network.add_resistor("R3", "c", "0", 5e3)
    if kind == "EG":
        network.add_voltage_controlled_voltage_source("E1", "e", "0", "a", "c", -3.0)
        network.add_resistor("Re", "e", "a", 10e3)
        network.add_voltage_controlled_current_source("G1", "c", "0", "a", "b", 2e-4)
    elif kind == "FH":
        network.add_current_controlled_current_source("F1", "a", "0", "Vs", 0.7)
        network.add_current_controlled_voltage_source("H1", "h", "0", "Vs", 500.0)
        network.add_resistor("Rh", "h", "c", 10e3)
    elif kind == "L":
        network.add_inductor("L1", "a", "c", 2.0)  # slow enough to ring inside the contour
    else:
        for k in range(3):
            here = "c" if k == 0 else f"y{k - 1}"
            network.add_voltage_controlled_voltage_source(f"E{k}", f"x{k}", "0", here, "0", 1.0)
            network.add_resistor(f"Rx{k}", f"x{k}", f"y{k}", 1e3)
            network.add_capacitor(f"Cx{k}", f"y{k}", "0", 1e-6)
    node = "y2" if kind == "buffers" else "c"
    for t in (2e-5, 3e-4, 2e-3, 1e-2):
        with mpmath.workdps(30):
            inverse = mpmath.invertlaplace(
                lambda s: reference.solve(network, s, {"V1": 1})[node] / s,
                mpmath.mpf(t),
                method="talbot",
                degree=30,
            )
        assert transient(network, [t], node)[0] == pytest.approx(float(inverse), abs=1e-11)


WAVES = {
    "square": Square(0.0, 5.0, 1e-3, 0.3e-3),
    "edges": Square(-1.0, 5.0, 1e-3, 0.2e-3, 0.05e-3, 0.2e-3, 0.4e-3),
    "sawtooth": Square(-1.0, 1.0, 1e-3, 0.0, 1e-3, 0.0),
    "triangle": Points(((0.0, 0.0), (0.5e-3, 2.0)), 1e-3),
    "late points": Points(((0.2e-3, 1.0), (0.3e-3, -1.0), (1e-3, 2.0)), 1e-3),
    "wrap": Points(((0.0, 1.0), (1e-3, 3.0)), 1e-3),
}


def corners_of(wave: Square | Points, until: float) -> list[tuple[float, float, float]]:
    """(when, jump, change of slope) of a repeating waveform, written out turn by turn."""
    corners: list[tuple[float, float, float]] = []
    turns = math.ceil(until / float(wave.repeats or until)) + 1
    for turn in range(turns):
        if isinstance(wave, Square):
            t = wave.delay + turn * wave.period
            swing = wave.high - wave.low
            for begin, length, sign in ((t, wave.rise, 1), (t + wave.rise + wave.width, wave.fall, -1)):
                if length:
                    corners += [
                        (begin, 0.0, sign * swing / length),
                        (begin + length, 0.0, -sign * swing / length),
                    ]
                else:
                    corners.append((begin, sign * swing, 0.0))
        else:
            assert wave.period is not None
            t = turn * wave.period
            pairs = [(0.0, wave.start), *wave.values] if wave.values[0][0] > 0 else list(wave.values)
            if pairs[-1][0] < wave.period:
                pairs.append((wave.period, wave.start))
            for (t0, v0), (t1, v1) in itertools.pairwise(pairs):
                slope = (v1 - v0) / (t1 - t0)
                corners += [(t + t0, 0.0, slope), (t + t1, 0.0, -slope)]
            corners.append((t + wave.period, wave.start - pairs[-1][1], 0.0))
    return corners


@pytest.mark.parametrize("name", WAVES)
def test_repeating_waveforms_equal_the_sum_over_all_their_corners(name: str) -> None:
    """Thirty turns of each waveform, superposed corner by corner in 60 digits."""
    wave = WAVES[name]
    network = reference.random_mesh(random.Random("waves"), 4, 3)
    exact = ModalReference(network)
    time = np.array([0.0, 0.17e-3, 0.61e-3, 1.37e-3, 7.93e-3, 29.45e-3])
    got = transient(with_wave(network, wave), time, "n3")
    for t, value in zip(time.tolist(), got.tolist(), strict=True):
        assert value == pytest.approx(float(exact.under("n3", wave.start, corners_of(wave, t), t)), abs=5e-12)


def test_a_sine_starts_from_its_first_value_and_settles_to_its_phasor() -> None:
    """One RC: y = offset + Im(H U e^jwt) less the mismatch exp(-t/tau), H = 1/(1 + jw tau)."""
    r, c, wave = 1e3, 1e-6, Sine(2.0, 700.0, 1.0, 30.0, 0.5e-3)
    network = with_wave(ladder(1, r, c), wave)
    time = np.array([0.0, 0.4e-3, 0.5e-3, 0.9e-3, 2.7e-3, 11.3e-3])
    with mpmath.workdps(40):
        tau, w = mpmath.mpf(r) * mpmath.mpf(c), 2 * mpmath.pi * 700
        phasor = 2 * mpmath.exp(1j * mpmath.pi / 6) / (1 + 1j * w * tau)
        for t, value in zip(time.tolist(), transient(network, time, "n1").tolist(), strict=True):
            since = mpmath.mpf(t) - mpmath.mpf(0.5e-3)
            if since < 0:
                expected = mpmath.mpf(2)
            else:
                steady = 1 + (phasor * mpmath.exp(1j * w * since)).imag
                expected = steady + (2 - 1 - phasor.imag) * mpmath.exp(-since / tau)
            assert value == pytest.approx(float(expected), abs=1e-14)


def test_nothing_is_lost_after_a_million_periods() -> None:
    """A square wave into one RC with tau = 10^4 periods: closed form with a geometric sum, at exact times."""
    period, tau = 2.0**-10, 10.0  # binary fractions, so that the times below are exact
    network = with_wave(ladder(1, 1e6, tau / 1e6), Square(0.0, 1.0, period, period / 4))
    turns = np.array([0, 1, 1000, 1_000_000])
    got = transient(network, turns * period + period / 8, "n1")
    with mpmath.workdps(40):
        p, rc = mpmath.mpf(period), mpmath.mpf(1e6) * mpmath.mpf(tau / 1e6)
        for m, value in zip(turns.tolist(), got.tolist(), strict=True):
            # Each turn adds exp(-3T/4tau) - exp(-T/tau) to the state at its end.
            sums = (1 - mpmath.exp(-m * p / rc)) / (1 - mpmath.exp(-p / rc))
            state = sums * (mpmath.exp(-3 * p / (4 * rc)) - mpmath.exp(-p / rc))
            expected = 1 - mpmath.exp(-p / (8 * rc)) * (1 - state)
            assert value == pytest.approx(float(expected), rel=2e-14)


def test_the_value_at_a_vertical_edge_is_the_one_just_after_it() -> None:
    """A capacitive divider passes an edge at once: C1/(C1 + C2) of it."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", step={"from": 1, "to": 3, "at": 1e-3})
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "in", "out", 1e-6)
    network.add_resistor("R2", "out", "0", 1e3)
    network.add_capacitor("C2", "out", "0", 3e-6)
    got = transient(network, [0.0, np.nextafter(1e-3, 0) * (1 - 1e-9), 1e-3, 1.0], "out")
    assert got == pytest.approx([0.5, 0.5, 0.5 + 2 * 0.25, 1.5], abs=1e-12)


def test_every_edge_of_a_long_square_wave_is_found_at_its_decimal_time() -> None:
    """K / 10 kHz, written as decimals, is an edge of a 10 kHz wave for every k: a resistor shows the new
    value.
    """
    network = Network()
    network.add_voltage_source("V1", "in", "0", square={"low": 0, "high": 1, "frequency": "10 kHz"})
    network.add_resistor("R1", "in", "out", 1.0)
    network.add_resistor("R2", "out", "0", 1.0)
    time = np.array([float(f"{k}e-4") for k in range(2000)])
    assert (transient(network, time, "out") == 0.5).all()


def test_the_start_is_the_steady_state_at_the_waveforms_first_value() -> None:
    """Dc governs the operating point only; a waveform starts from its own value at t = 0."""
    network = ladder(2, 1e3, 1e-6, dc=9.0, step={"from": 2, "to": 5, "at": "1 ms"})
    network.add_voltage_source("V2", "b", "0", dc=4.0)
    network.add_resistor("Rb", "b", "n2", 2e3)
    start = transient(network, [0.0], ["n2", "n1 n2"])
    assert start[0] == pytest.approx([2 + (4 - 2) / 2], rel=1e-14)
    assert start[1] == pytest.approx([(2 - 3) / 2], rel=1e-14)


def test_a_current_source_drives_with_spices_sign() -> None:
    """A current from ground into R parallel C: v = I R (1 - exp(-t/RC))."""
    network = Network()
    network.add_current_source("I1", "0", "a", step={"from": 0, "to": "1 mA"})
    network.add_resistor("R1", "a", "0", 2e3)
    network.add_capacitor("C1", "a", "0", 1e-6)
    time = np.array([0.0, 1e-3, 2e-3, 1e-1])
    assert transient(network, time, "a") == pytest.approx(2 * -np.expm1(-time / 2e-3), rel=1e-14)


def test_a_floating_capacitor_node_integrates_its_current() -> None:
    """A current into a capacitor that nothing drains: the charge over C, ramp after ramp."""
    network = Network()
    network.add_current_source("I1", "0", "a", points={"values": [[0, 0], [1, 2e-6], [2, 2e-6]]})
    network.add_capacitor("C1", "a", "0", 1e-6)
    assert transient(network, [0.0, 0.5, 1.0, 2.0, 5.0], "a") == pytest.approx(
        [0, 0.25, 1.0, 3.0, 9.0], rel=1e-14
    )
    standing = Network()
    standing.add_current_source("I1", "0", "a", dc=1e-6)
    standing.add_capacitor("C1", "a", "0", 1e-6)
    with pytest.raises(UndecidedError, match="I1 charges nodes"):
        transient(standing, [0.0], "a")


@settings(max_examples=25, deadline=None, derandomize=True)
@given(st.integers(0, 10**9), st.floats(-5, 5), st.floats(-5, 5))
def test_superposition(seed: int, one: float, two: float) -> None:
    """Two sources together do what each does alone, summed."""
    rng = random.Random(seed)
    network = reference.random_mesh(rng, rng.randint(2, 7), 4)
    time = np.geomspace(1e-9, 1e-3, 20)
    waves = (
        Source("V1", ("n0", "0"), waveform=Step(0.0, one, 1e-7, 3e-7)),
        Source("I1", ("0", "n1"), waveform=Square(0.0, two * 1e-3, 1e-5, 3e-6, 1e-6, 0.0)),
    )
    silent = (Source("V1", ("n0", "0")), Source("I1", ("0", "n1")))
    network.add_source(waves[1])

    def under(v: Source, i: Source) -> Any:
        return transient(network.with_source(v).with_source(i), time, "n2")

    both, alone = under(*waves), under(waves[0], silent[1]) + under(silent[0], waves[1])
    assert np.abs(both - alone).max() <= 1e-12 * (abs(one) + abs(two) * 1e3 + 1e-30)


@settings(max_examples=25, deadline=None, derandomize=True)
@given(st.integers(0, 10**9), st.integers(1, 1 << 20))
def test_time_shift(seed: int, shift: int) -> None:
    """A source that begins later does the same later (shifts that binary fractions hold exactly)."""
    rng = random.Random(seed)
    network = reference.random_tree(rng, rng.randint(1, 8), 4)
    late = shift * 2.0**-40
    time = np.arange(1, 30) * 2.0**-30
    pulse = Square(0.0, 1.0, 2.0**-20, 2.0**-22, 2.0**-25, 2.0**-24)
    moved = Square(0.0, 1.0, 2.0**-20, 2.0**-22, 2.0**-25, 2.0**-24, late)
    node = network.nodes[-1]
    got = transient(with_wave(network, moved), time + late, node)
    assert np.abs(got - transient(with_wave(network, pulse), time, node)).max() <= 1e-13


def _tree(rng: random.Random, nodes: int) -> tuple[Network, list[int], list[float], list[float]]:
    network = Network()
    network.add_voltage_source("V1", "n0", "0", step={"from": 0, "to": 1})
    parents, r, c = [0], [0.0], [0.0]
    for k in range(1, nodes + 1):
        parents.append(rng.randrange(max(0, k - 3), k))
        r.append(10 ** rng.uniform(1, 5))
        c.append(10 ** rng.uniform(-12, -8))
        network.add_resistor(f"R{k}", f"n{parents[k]}", f"n{k}", r[k])
        network.add_capacitor(f"C{k}", f"n{k}", "0", c[k])
    return network, parents, r, c


@settings(max_examples=60, deadline=None, derandomize=True)
@given(st.integers(0, 10**9))
def test_the_bounds_for_rc_trees_are_never_violated(seed: int) -> None:
    """J. Rubinstein, P. Penfield, M. Horowitz, IEEE Trans. CAD CAD-2(3):202-211, 1983, with their
    conditions.
    """
    rng = random.Random(seed)
    network, parents, r, c = _tree(rng, rng.randint(1, 14))
    output = rng.randint(1, len(parents) - 1)

    def path(node: int) -> set[int]:
        return {node} | path(parents[node]) if node else set()

    shared = [sum(r[j] for j in path(k) & path(output)) for k in range(len(parents))]
    own = [sum(r[j] for j in path(k)) for k in range(len(parents))]
    t_d = sum(s * cap for s, cap in zip(shared, c, strict=True))
    t_p = sum(s * cap for s, cap in zip(own, c, strict=True))
    t_r = sum(s * s * cap for s, cap in zip(shared, c, strict=True)) / own[output]
    time = np.geomspace(1e-4 * t_r, 20 * t_p, 60)
    value = transient(network, time, f"n{output}")
    slack = 1e-12
    assert (value >= -slack).all()
    lower = np.maximum(
        np.where(time >= t_d - t_r, 1 - t_d / (time + t_r), 0),
        np.where(time >= t_p - t_r, 1 - t_d / t_p * np.exp(-(time - t_p + t_r) / t_p), 0),
    )
    upper = np.minimum(
        1 - (t_d - time) / t_p,
        np.where(time >= t_d - t_r, 1 - t_r / t_p * np.exp(-(time - t_d + t_r) / t_r), 1),
    )
    assert (value >= lower - slack).all()
    assert (value <= upper + slack).all()


def test_check_tree_of_the_bounds_paper() -> None:
    """Root R 1 C 1, branches R 2 C 3 (output) and R 4 C 1: v(10) by 40-digit modal analysis of the
    same tree.
    """
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1, step={"from": 0, "to": 1})
    for name, a, b, r, c in (("1", "n0", "n1", 1, 1), ("2", "n1", "n2", 2, 3), ("3", "n1", "n3", 4, 1)):
        network.add_resistor(f"R{name}", a, b, float(r))
        network.add_capacitor(f"C{name}", b, "0", float(c))
    assert transient(network, [10.0], "n2")[0] == pytest.approx(0.589798375319, abs=1e-12)
    assert -1 / modes(network, "n2").poles == pytest.approx(
        [10.0752801327736, 4.38099191510565, 0.543727952120796], rel=1e-13
    )


def test_bad_times_and_unsolvable_networks_are_refused() -> None:
    """Times that are no times, nodes that are not there, networks without a solution."""
    network = ladder(1, 1e3, 1e-6)
    for bad in ([-1.0], [math.nan], [math.inf], [[1.0]], ["soon"]):
        with pytest.raises(CircuitError, match="times"):
            transient(network, bad, "n1")  # type: ignore[arg-type]
    with pytest.raises(CircuitError, match="'n9'"):
        transient(network, [0.0], "n9")
    assert transient(network, [], "n1").shape == (0,)
    assert network.transient([0.0, 1.0], ["n1", "n0 n1"]).shape == (2, 2)
    network.add_capacitor("Cx", "x", "y", 1e-9)
    with pytest.raises(UnsolvableError, match="nodes x, y have no connection"):
        transient(network, [0.0], "n1")
    derived = Network()
    derived.add_current_source("I1", "0", "a", step={"from": 0, "to": 1})
    derived.add_inductor("L1", "a", "0", 1e-3)
    derived.add_resistor("R1", "a", "0", 1.0)
    assert transient(derived, [1e-3], "a")[0] == pytest.approx(math.exp(-1), rel=1e-12)


# ---------------------------------------------------------------------- ngspice


def _spice(wave: Any) -> str:
    if isinstance(wave, Square):
        numbers = (wave.low, wave.high, wave.delay, wave.rise, wave.fall, wave.width, wave.period)
        return f"pulse({' '.join(repr(n) for n in numbers)})"
    if isinstance(wave, Sine):
        return f"sin({wave.offset!r} {wave.amplitude!r} {wave.frequency!r} {wave.delay!r} 0 {wave.phase!r})"
    assert isinstance(wave, Points)
    return f"pwl({' '.join(f'{t!r} {v!r}' for t, v in wave.values)})"


def _deck(network: Network, step: float, stop: float) -> str:
    lines = ["response over time"]
    for part in network.parts:
        if part.kind in "VI":
            wave = network.sources[part.name].waveform
            drive = _spice(wave) if wave is not None else f"dc {part.value!r}"
            lines.append(f"{part.name} {' '.join(part.nodes)} {drive}")
        else:
            lines.append(f"{part.name} {' '.join(part.nodes)} {part.value!r}")
    lines.append(".options reltol=1e-6 abstol=1e-15 vntol=1e-12 chgtol=1e-18")
    return "\n".join([*lines, f".tran {step!r} {stop!r} 0 {step!r}", ".end", ""])


@pytest.mark.ngspice
@pytest.mark.parametrize(
    "wave",
    [
        Square(0.0, 5.0, 4e-3, 1.2e-3, 0.1e-3, 0.3e-3, 0.2e-3),
        Sine(2.0, 400.0, 1.0),
        Points(((0.0, 0.0), (1e-3, 2.0), (1.5e-3, -1.0), (4e-3, 0.5))),
    ],
    ids=["pulse", "sine", "points"],
)
def test_ngspice_agrees_within_its_own_truncation_error(tmp_path: Path, wave: Any) -> None:
    """Trapezoidal integration with steps h errs by (h/tau)^2 / (12 e) of a step into one pole (Nagel
    1975).
    """
    network = Network()
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_voltage_source("V2", "bias", "0", dc=2.0)
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 1e-6)
    network.add_resistor("R2", "a", "out", 4.7e3)
    network.add_capacitor("C2", "out", "0", 0.5e-6)
    network.add_resistor("R3", "out", "bias", 10e3)
    network.add_capacitor("C3", "in", "out", 0.1e-6)
    step = 1e-6
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")
    assert program is not None
    (tmp_path / "deck.cir").write_text(_deck(network, step, 10e-3), encoding="utf-8")
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
        cwd=tmp_path,
        env={**os.environ, "HOME": str(tmp_path)},
        capture_output=True,
        check=True,
        timeout=120,
    )
    curves = parse_raw((tmp_path / "deck.raw").read_bytes(), "deck.raw")
    fastest = float(np.abs(modes(network, "out", "V1").poles).max())
    allowed = 5.0 * (step * fastest) ** 2 / (12 * math.e) * 3  # 5 V of swing, up to three modes
    for node in ("a", "out"):
        curve = curves.get(f"v({node})", "transient")
        assert curve is not None
        assert len(curve.axis) > 5000
        exact = transient(network, curve.axis, node)
        assert np.abs(curve.values.real - exact).max() <= allowed
