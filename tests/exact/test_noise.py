"""Thermal noise beside Nyquist's formula, closed forms, 50-digit integrals and ngspice."""

from __future__ import annotations

import itertools
import math
import os
import random
import shutil
import subprocess
from pathlib import Path

import high_precision
import mna_reference as reference
import mpmath
import numpy as np
import pytest
from shared_networks import NETWORKS, buffered, driven, every_kind, resonant, twin_t

from rcnet.circuit import Network
from rcnet.curves.raw import parse_raw
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import BOLTZMANN, noise, noise_shares, total_noise

K_2019 = 1.380649e-23  # J/K, BIPM, The International System of Units, 9th edition, 2019
K_2014 = 1.38064852e-23  # J/K, CODATA 2014, which ngspice 39 uses
FREQUENCIES = [30.0, 1e4, 3e5, 2e7]

# Low-pass of 1 kohm: sqrt(4 k T R) by Nyquist (1928) and sqrt(k T/C), to the digits shown.
DENSITIES = [(300.0, 4.07035478e-9), (300.15, 4.07137224e-9)]
KT_OVER_C = [
    (300.0, 1e-12, 64.357960e-6),
    (300.0, 10e-12, 20.351774e-6),
    (300.0, 100e-12, 6.4357960e-6),
    (300.0, 1e-9, 2.0351774e-6),
    (300.0, 1e-6, 0.064357960e-6),
    (300.15, 1e-12, 64.374047e-6),
    (300.15, 1e-9, 2.0356861e-6),
]


def low_pass(resistance: float = 1e3, capacitance: float = 1e-9) -> Network:
    """One R, one C."""
    return driven(("R1", "in", "out", resistance), ("C1", "out", "0", capacitance))


def passive(rng: random.Random, decades: float) -> Network:
    """A mesh of R and C with capacitance at every node."""
    return reference.random_mesh(rng, rng.randint(2, 6), decades)


def exact_resistance(network: Network, omega: mpmath.mpf, of: str) -> mpmath.mpf:
    """The noise over 4 k T in 50 digits, resistor by resistor: each one's current source in turn."""
    with mpmath.workdps(reference.DIGITS):
        total = mpmath.mpf(0)
        for part in list(network.parts):
            if part.kind == "R":
                probed = network.copy()
                probed.add_current_source("Iprobe", part.nodes[1], part.nodes[0])
                way = high_precision.voltage(probed, 1j * omega, of, driven="Iprobe")
                total += abs(way) ** 2 / mpmath.mpf(part.value)
        return total


def test_the_constant_is_the_si_one() -> None:
    """Exact since 2019."""
    assert BOLTZMANN == K_2019


@pytest.mark.parametrize(("temperature", "density"), DENSITIES)
def test_a_resistor_has_nyquists_density(temperature: float, density: float) -> None:
    """At low frequencies nothing but sqrt(4 k T R); at the corner 1/sqrt(2) of it."""
    corner = 1 / (2 * math.pi * 1e-6)
    found = noise(low_pass(), [0.0, corner], "out", temperature=temperature)
    assert found[0] == pytest.approx(density, rel=1e-9)
    assert found[1] == pytest.approx(density / math.sqrt(2), rel=1e-9)


@pytest.mark.parametrize(("temperature", "capacitance", "rms"), KT_OVER_C)
@pytest.mark.parametrize("resistance", [1.0, 1e3, 1e9])
def test_one_rc_keeps_kt_over_c(
    temperature: float, capacitance: float, rms: float, resistance: float
) -> None:
    """The whole band of one RC is sqrt(k T/C) whatever the resistance."""
    found = total_noise(low_pass(resistance, capacitance), "out", temperature=temperature)
    assert found == pytest.approx(math.sqrt(K_2019 * temperature / capacitance), rel=1e-14)
    assert found == pytest.approx(rms, rel=1e-7)


@pytest.mark.parametrize(
    ("low", "high"),
    [(0, 1), (1, math.inf), (0, 1e-12), (1e12, math.inf), (1, 1 + 1e-9), (1e-9, 1e9), (0.5, 2), (1e-7, 1e-6)],
)
def test_a_band_of_one_rc_is_a_difference_of_arctangents(low: float, high: float) -> None:
    """(2 k T/(pi C)) (arctan(f2/fc) - arctan(f1/fc)), bands given in corner frequencies, to 1e-11."""
    corner = 1 / (2 * math.pi * 1e3 * 1e-9)
    start, stop = low * corner, high * corner
    with mpmath.workdps(30):
        f1, f2 = mpmath.mpf(start) * 2 * mpmath.pi / 10**6, mpmath.mpf(stop) * 2 * mpmath.pi / 10**6
        square = 2 * K_2019 * 300.15 / (mpmath.pi * 1e-9) * (mpmath.atan(f2) - mpmath.atan(f1))
        expected = float(mpmath.sqrt(square))
    assert total_noise(low_pass(), "out", start, stop) == pytest.approx(expected, rel=1e-11)


@pytest.mark.parametrize("seed", range(12))
def test_the_whole_band_is_the_inverse_capacitance_matrix(seed: int) -> None:
    """With capacitance everywhere any RC network has k T [C^-1]_aa at node a; values over 4 to 12 decades."""
    network = passive(random.Random(f"kT/C {seed}"), 4 + seed % 3 * 4)
    nodes = [name for name in network.nodes if name not in ("0", "n0")]
    with mpmath.workdps(reference.DIGITS):
        matrix = mpmath.zeros(len(nodes), len(nodes))
        place = {name: k for k, name in enumerate(nodes)}
        for part in network.parts:
            if part.kind == "C":
                ends = [place.get(name) for name in part.nodes]
                for row, column, sign in ((0, 0, 1), (1, 1, 1), (0, 1, -1), (1, 0, -1)):
                    if ends[row] is not None and ends[column] is not None:
                        matrix[ends[row], ends[column]] += sign * mpmath.mpf(part.value)
        inverse = matrix**-1
    for node in nodes:
        expected = math.sqrt(K_2019 * 300.15 * float(inverse[place[node], place[node]]))
        assert total_noise(network, node) == pytest.approx(expected, rel=1e-12)
    a, b = nodes[0], nodes[-1]
    if a != b:
        i, j = place[a], place[b]
        square = K_2019 * 300.15 * float(inverse[i, i] + inverse[j, j] - 2 * inverse[i, j])
        assert total_noise(network, f"{a} {b}") == pytest.approx(math.sqrt(square), rel=1e-11)


def test_what_a_series_capacitor_keeps_from_dc_is_no_noise() -> None:
    """Bode: k T (lim sZ at infinity - lim sZ at zero) = k T (1/C2 - 1/(C1 + C2)) where capacitors hold."""
    expected = math.sqrt(K_2019 * 300.15 * (1 / 2e-9 - 1 / 3e-9))
    assert total_noise(NETWORKS["held by capacitors"](), "out") == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("frequency", [0.0, 1e-12, 1e-6, 1e-3, 1.0])
def test_a_node_capacitors_hold_has_its_small_noise_at_any_low_frequency(frequency: float) -> None:
    """Far below the corner its share of the resistor's voltage is C1/(C1 + C2), though 1/(s C) is huge."""
    expected = math.sqrt(4 * K_2019 * 300.15 * 1e3) / 3
    found = noise(NETWORKS["held by capacitors"](), [frequency], "out")
    assert found[0] == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize("seed", range(8))
def test_density_is_four_kt_times_the_real_part_of_z(seed: int) -> None:
    """Nyquist at every node of random ladders, trees, meshes, beside Re Z in 50 digits, over 10 decades."""
    rng = random.Random(f"Re Z {seed}")
    network = [
        reference.random_ladder(rng, 4, 10),
        reference.random_tree(rng, 5, 10),
        reference.random_mesh(rng, 4, 10),
    ][seed % 3]
    for node in network.nodes[2:]:
        probed = network.copy()
        probed.add_current_source("Iprobe", "0", node)
        for frequency in reference.frequencies(rng, 10, 3):
            with mpmath.workdps(reference.DIGITS):
                z = high_precision.voltage(probed, reference.at(frequency), node, driven="Iprobe")
                expected = float(4 * K_2019 * 300.15 * z.real)
            if expected:
                assert float(noise(network, frequency, node)[0]) ** 2 == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize("name", NETWORKS)
@pytest.mark.parametrize("pair", [False, True])
def test_shares_are_each_resistors_own_way_to_the_output(name: str, pair: bool) -> None:
    """4 k T/R times the squared transfer from a current source across each resistor, solved in 50 digits."""
    network = NETWORKS[name]()
    of = f"out {network.nodes[3]}" if pair else "out"
    found = noise_shares(network, FREQUENCIES, of)
    total = noise(network, FREQUENCIES, of)

    assert list(found) == [part.name for part in network.parts if part.kind == "R"]
    np.testing.assert_allclose(np.sqrt(sum(found.values())), total, rtol=1e-14)
    for part, share in found.items():
        probed = network.copy()
        a, b = network.part(part).nodes
        probed.add_current_source("Iprobe", b, a)
        for k, frequency in enumerate(FREQUENCIES):
            way = high_precision.voltage(probed, reference.at(frequency), of, driven="Iprobe")
            expected = 4 * K_2019 * 300.15 / network.part(part).value * float(abs(way)) ** 2
            assert share[k] == pytest.approx(expected, rel=1e-9, abs=1e-15 * float(total[k]) ** 2)


@pytest.mark.parametrize(
    ("name", "start", "stop"),
    [
        ("twin-T", 0.0, 1e5),
        ("band-pass", 1e2, math.inf),
        ("resonant", 4e4, 6e4),
        ("buffered", 1e4, 1e6),
        ("every kind", 1e5, 1e6),
        ("held by capacitors", 0.0, 1e3),
    ],
)
def test_bands_are_integrals_of_the_exact_density(name: str, start: float, stop: float) -> None:
    """Within 1e-9 of mpmath's own quadrature of 50-digit densities, decade by decade over ln f.

    Beyond 1e-6 Hz and 1e16 Hz lies 1e-11 of the whole, the densities being flat below and falling as 1/f^2.
    """
    network = NETWORKS[name]()
    with mpmath.workdps(18):
        low, high = max(start, 1e-6), min(stop, 1e16)
        points = [low, *(10.0**k for k in range(-6, 17) if low < 10.0**k < high), high]
        area = mpmath.quad(
            lambda x: mpmath.exp(x) * exact_resistance(network, 2 * mpmath.pi * mpmath.exp(x), "out"),
            [mpmath.log(point) for point in points],
            method="gauss-legendre",
            maxdegree=3,
        )
        expected = float(mpmath.sqrt(4 * K_2019 * 300.15 * area))
    assert total_noise(network, "out", start, stop) == pytest.approx(expected, rel=1e-9)


def test_equipartition_holds_for_a_lossy_resonance() -> None:
    """The capacitor of any passive RLC network keeps k T/C, even at a quality factor of a million."""
    sharp = driven(("R1", "in", "a", 1e-3), ("L1", "a", "out", 1e-3), ("C1", "out", "0", 1e-9))
    for network, capacitance in ((resonant(), 1e-8), (sharp, 1e-9)):
        expected = math.sqrt(K_2019 * 300.15 / capacitance)
        assert total_noise(network, "out") == pytest.approx(expected, rel=1e-9)


def test_bands_add_up() -> None:
    """Squares over adjoining bands sum to the square over both."""
    network = every_kind()
    edges = [0.0, 3.0, 1e3, 2e5, 1e7, 1e12]
    pieces = sum(total_noise(network, "out", a, b) ** 2 for a, b in itertools.pairwise(edges))
    assert total_noise(network, "out", edges[0], edges[-1]) ** 2 == pytest.approx(pieces, rel=1e-11)


def test_without_resistors_or_at_absolute_zero_there_is_none() -> None:
    """Capacitors make no noise, nor do resistors at 0 K, nor an output that a source holds."""
    capacitive = driven(("C1", "in", "out", 1e-9), ("C2", "out", "0", 1e-9))
    assert total_noise(capacitive, "out") == 0
    assert noise(capacitive, [1e3], "out")[0] == 0
    assert total_noise(low_pass(), "out", temperature=0.0) == 0
    assert total_noise(low_pass(), "in", 1.0, 10.0) == 0


def test_a_buffer_keeps_the_noise_of_what_it_drives_apart() -> None:
    """Two equal sections with a buffer between: k T/C times 1 + 1/2.

    The first resistor's noise passes both sections: integral of 4 k T R/(1 + x^2)^2 = k T/(2 C); the second's
    one: k T/C.
    """
    network = driven(
        ("R1", "in", "a", 1e3), ("C1", "a", "0", 1e-9), ("R2", "b", "out", 1e3), ("C2", "out", "0", 1e-9)
    )
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 1.0)
    expected = math.sqrt(K_2019 * 300.15 / 1e-9 * 1.5)
    assert total_noise(network, "out") == pytest.approx(expected, rel=1e-11)


def integrator() -> Network:
    """A resistor's noise integrated: 1/f^2 without end."""
    network = driven(("R1", "in", "a", 1e3), ("R2", "a", "0", 1e3), ("C1", "out", "0", 1e-9))
    network.add_voltage_controlled_current_source("G1", "0", "out", "a", "out", 1e-3)
    network.add_voltage_controlled_current_source("G2", "0", "out", "out", "0", 1e-3)
    return network


def unstable() -> Network:
    """More than unity fed back through a capacitor's node."""
    network = driven(("R1", "out", "0", 1e3), ("C1", "out", "0", 1e-9), ("R2", "in", "out", 1e3))
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "out", "0", 10.0)
    network.add_resistor("R3", "b", "out", 1e3)
    return network


REFUSED = {
    "resistive up to infinity": (
        lambda: total_noise(driven(("R1", "in", "out", 1.0), ("R2", "out", "0", 1.0)), "out", 1.0, math.inf),
        UndecidedError,
        "resistive",
    ),
    "resistive, the whole band": (
        lambda: total_noise(driven(("R1", "in", "out", 1.0), ("R2", "out", "0", 1.0)), "out"),
        UndecidedError,
        "resistive",
    ),
    "resistive behind a capacitor": (
        lambda: total_noise(
            driven(
                ("R1", "in", "out", 1.0),
                ("C1", "in", "out", 1.0),
                ("R2", "in", "b", 1.0),
                ("R3", "b", "0", 1.0),
            ),
            "b",
        ),
        UndecidedError,
        "resistive",
    ),
    "an integrator from zero": (lambda: total_noise(integrator(), "out", 0.0, 1e3), UndecidedError, "zero"),
    "unstable": (lambda: total_noise(unstable(), "out", 1.0, 1e3), UndecidedError, "not stable"),
    "an empty band": (lambda: total_noise(low_pass(), "out", 10.0, 10.0), CircuitError, "empty"),
    "a band from below zero": (lambda: total_noise(low_pass(), "out", -1.0, 10.0), CircuitError, "empty"),
    "nan in the band": (lambda: total_noise(low_pass(), "out", math.nan, 10.0), CircuitError, "empty"),
    "below absolute zero": (
        lambda: noise(low_pass(), [1.0], "out", temperature=-1.0),
        CircuitError,
        "temperature",
    ),
    "an infinite frequency": (lambda: noise(low_pass(), [math.inf], "out"), CircuitError, "frequencies"),
    "text for a frequency": (lambda: noise(low_pass(), ["x"], "out"), CircuitError, "frequencies"),
    "an unknown node": (lambda: noise(low_pass(), [1.0], "nowhere"), CircuitError, "nowhere"),
    "a floating part": (
        lambda: noise(driven(("R1", "in", "0", 1.0), ("R2", "p", "q", 1.0)), [1.0], "in"),
        UnsolvableError,
        "connection",
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_has_no_finite_answer_is_refused(case: str) -> None:
    """Each refusal says why, and no infinity or NaN gets out."""
    call, kind, says = REFUSED[case]
    with pytest.raises(kind, match=says):
        call()


@pytest.mark.ngspice
@pytest.mark.parametrize("make", [twin_t, resonant, buffered, every_kind, low_pass])
def test_densities_agree_with_ngspice(tmp_path: Path, make) -> None:
    """Spot noise of ngspice, whose constant is that of 2014, within 1e-9."""
    network = make()
    lines = ["thermal noise"]
    for part in network.parts:
        value = f"dc 0 ac {network.sources[part.name].ac or 0}" if part.kind == "V" else repr(part.value)
        lines.append(" ".join([part.name, *part.nodes, *([part.senses] if part.senses else []), value]))
    lines += [".options noopac", ".noise v(out) Vin dec 5 100 1meg 1", ".end", ""]
    (tmp_path / "deck.cir").write_text("\n".join(lines), encoding="utf-8")
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
    curves = parse_raw((tmp_path / "deck.raw").read_bytes(), "deck.raw")
    (density,) = [curve for curve in curves if "onoise_spectrum" in curve.name]
    np.testing.assert_allclose(
        np.abs(density.values) * math.sqrt(K_2019 / K_2014),
        network.noise(density.axis.real, "out"),
        rtol=1e-9,
    )
