"""Coupled inductors in every exact analysis, beside closed forms, 50-digit equations, expm and ngspice."""

from __future__ import annotations

import math
import os
import random
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import high_precision
import mna_reference as reference
import mpmath
import numpy as np
import pytest
import scipy.linalg

from rcnet.circuit import Network
from rcnet.compare.allowance import rounding_allowance
from rcnet.curves.raw import Curves, parse_raw
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import (
    ac_drive,
    every_part,
    input_impedance,
    limit,
    modes,
    noise,
    one_part,
    operating_point,
    response,
    response_and_slope,
    response_sensitivity,
    span_of,
    total_noise,
    transfer_function,
    transient,
)
from rcnet.exact.nodal import equations
from rcnet.exact.sensitivity import derivatives, derivatives_at_zero, slowest_mode_sensitivity

L1, L2, R1, R2 = 1e-3, 4e-3, 50.0, 600.0  # H, ohm


def transformer(coefficient: float, **drive: object) -> Network:
    """A leak listener's isolation transformer between the pipe's pick-up and the logger."""
    net = Network("Leak listener: isolation transformer")
    net.add_voltage_source("Vpipe", "in", "0", **({"ac": 1} | drive))
    net.add_resistor("R1", "in", "p", R1)
    net.add_coupling("K1", "L1", "L2", coefficient)
    net.add_inductor("L1", "p", "0", L1)
    net.add_inductor("L2", "out", "0", L2)
    net.add_resistor("R2", "out", "0", R2)
    return net


def three_windings() -> Network:
    """A transformer with two secondaries, one of them reversed and with a capacitor across."""
    net = transformer(0.9)
    net.add_inductor("L3", "0", "aux", 0.25e-3)
    net.add_resistor("R3", "aux", "0", 75)
    net.add_capacitor("C3", "aux", "0", 1e-6)
    net.add_coupling("K2", "L1", "L3", 0.85)
    net.add_coupling("K3", "L3", "L2", 0.8)
    return net


def tuned(coefficient: float = 0.03) -> Network:
    """A double-tuned band-pass at 38 kHz, the leak listener's carrier: two loosely coupled tanks."""
    net = Network("Leak listener: carrier filter")
    net.add_current_source("Idrive", "0", "a", ac=1e-3)
    net.add_resistor("Ra", "a", "0", 22e3)
    net.add_capacitor("Ca", "a", "0", 4.7e-9)
    net.add_inductor("La", "a", "0", 3.73e-3)
    net.add_inductor("Lb", "b", "m", 3.73e-3)
    net.add_resistor("Rb", "m", "0", 18)
    net.add_capacitor("Cb", "b", "0", 4.7e-9)
    net.add_resistor("Rload", "b", "out", 100)
    net.add_resistor("Rlog", "out", "0", 33e3)
    net.add_coupling("K1", "La", "Lb", coefficient)
    return net


NETWORKS = {
    "tight": lambda: transformer(0.98),
    "perfect": lambda: transformer(1.0),
    "reversed": lambda: transformer(-0.5),
    "all but perfect": lambda: transformer(1 - 2.0**-40),
    "three windings": three_windings,
    "double-tuned": tuned,
}
FREQUENCIES = [1e-3, 30.0, 1e4, 3.8e4, 1e6, 1e10]


def each(networks: dict[str, Callable[[], Network]]) -> pytest.MarkDecorator:
    """One test for each network of a table."""
    return pytest.mark.parametrize("make", networks.values(), ids=networks.keys())


# ---------------------------------------------------------------------- the response


@each(NETWORKS)
def test_the_response_is_that_of_the_equations_in_50_digits(make: Callable[[], Network]) -> None:
    """Every node, over thirteen decades of frequency, to the last digits of the greatest."""
    net = make()
    (source,) = net.sources
    for frequency in FREQUENCIES:
        exact = reference.solve(net, reference.at(frequency), {source: 1})
        got = [response(net, [frequency], node)[0] for node in net.nodes[1:]]
        assert reference.error_against_largest(got, [exact[node] for node in net.nodes[1:]]) <= 1e-14


@pytest.mark.parametrize("coefficient", [0.98, 1.0, -0.5, 1 - 2.0**-40, -1.0])
def test_every_digit_of_a_transformers_secondary_is_right(coefficient: float) -> None:
    """V2 = s M R2 / ((R1 + s L1)(R2 + s L2) - (s M)^2), M = k sqrt(L1 L2), however near one |k| is."""
    got = response(transformer(coefficient), FREQUENCIES, "out")
    for value, frequency in zip(got, FREQUENCIES, strict=True):
        with mpmath.workdps(reference.DIGITS):
            s = reference.at(frequency)
            mutual = mpmath.mpf(coefficient) * mpmath.sqrt(mpmath.mpf(L1) * mpmath.mpf(L2))
            below = (R1 + s * mpmath.mpf(L1)) * (R2 + s * mpmath.mpf(L2)) - (s * mutual) ** 2
            expected = s * mutual * R2 / below
        assert reference.relative_error(value, expected) <= 2e-15


def test_the_primary_sees_what_the_secondary_reflects() -> None:
    """Z = R1 + j w L1 + (w M)^2 / (j w L2 + R2): F. E. Terman, Radio Engineers' Handbook, 1943, section 3."""
    omega = 2 * math.pi * np.array([10.0, 1e3, 1e5, 1e7])
    mutual = 0.98 * math.sqrt(L1 * L2)
    expected = R1 + 1j * omega * L1 + (omega * mutual) ** 2 / (1j * omega * L2 + R2)

    assert input_impedance(transformer(0.98), omega) == pytest.approx(expected, rel=1e-13)


def test_a_perfect_transformer_of_great_inductance_is_an_ideal_one() -> None:
    """V2/V1 = n R2 / (R2 + n^2 R1) with n = 2, up to the share that the magnetising current takes."""
    net = transformer(1.0).with_values({"L1": L1 * 1e9, "L2": L2 * 1e9})

    expected = 2 * R2 / (R2 + 4 * R1)
    assert response(net, [1e4, 1e9, 1e12], "out") == pytest.approx(np.full(3, expected), rel=1e-6)
    assert limit(net, (net.node_index("out"), 0), high=True) == pytest.approx(expected, rel=1e-14)
    assert limit(net, (net.node_index("out"), 0), high=False) == 0.0


def test_a_coefficient_of_zero_couples_nothing() -> None:
    """The secondary stays at rest, the primary is a plain inductor."""
    s = 2j * math.pi * 1e4
    assert response(transformer(0.0), [1e4], ["out", "p"])[:, 0] == pytest.approx([0, s * L1 / (R1 + s * L1)])


def test_the_sign_follows_the_dots_at_the_first_nodes() -> None:
    """Turning one winding round, or the coefficient, turns the output round."""
    turned = Network()
    for part in transformer(0.9).parts:
        if part.kind == "V":
            turned.add_voltage_source("Vpipe", "in", "0", ac=1)
        elif part.name == "L2":
            turned.add_inductor("L2", "0", "out", L2)
        else:
            turned.add_part(part)
    plain = response(transformer(0.9), FREQUENCIES, "out")
    assert response(turned, FREQUENCIES, "out") == pytest.approx(-plain, rel=1e-14)
    assert response(transformer(-0.9), FREQUENCIES, "out") == pytest.approx(-plain, rel=1e-14)


@pytest.mark.parametrize("name", ["K1", "L1", "R2"])
def test_samples_are_the_networks_with_those_values(name: str) -> None:
    """`values={"K1": [...]}`, and of a coupled inductor, whose mutual inductance follows it."""
    net = three_windings()
    samples = np.array([0.7, 0.8, 0.95]) * (1 if name == "K1" else net.part(name).value)
    got = response(net, [1e3, 1e5], ["out", "aux"], values={name: samples})

    assert got.shape == (2, 3, 2)
    for k, value in enumerate(samples.tolist()):
        expected = response(net.with_values({name: value}), [1e3, 1e5], ["out", "aux"])
        assert got[:, k] == pytest.approx(expected, rel=1e-14)


BAD_SAMPLES = {
    "beyond one": ({"K1": [0.5, 1.5]}, "the samples of K1 go beyond one"),
    "contradictory": ({"K1": [0.9, -0.9]}, "contradict each other"),
}


@pytest.mark.parametrize(("values", "says"), BAD_SAMPLES.values(), ids=BAD_SAMPLES.keys())
def test_samples_that_no_windings_have_are_refused(values: dict, says: str) -> None:
    """Beyond one, or against the other couplings."""
    with pytest.raises(CircuitError, match=says):
        response(three_windings(), [1e3], "out", values=values)


def test_contradictory_couplings_are_refused_before_solving() -> None:
    """Windings that would store energy below zero have no response: the three are named."""
    net = three_windings().with_values({"K3": -0.8})
    for ask in (response, noise):
        with pytest.raises(CircuitError, match="K1, K2, K3 contradict each other") as caught:
            ask(net, [1e3], "out")
        assert caught.value.remedy
    with pytest.raises(CircuitError, match="contradict each other"):
        transient(net, [1e-3], "out")


def test_two_sources_across_a_perfect_transformer_have_no_solution() -> None:
    """The turns ratio ties both voltages, which the sources fix too; the coupling is named."""
    net = Network()
    net.add_voltage_source("V1", "a", "0", ac=1)
    net.add_voltage_source("V2", "b", "0")
    net.add_inductor("L1", "a", "0", 1e-3)
    net.add_inductor("L2", "b", "0", 1e-3)
    net.add_coupling("K1", "L1", "L2", 1.0)
    net.add_resistor("R1", "b", "out", 50)
    net.add_resistor("R2", "out", "0", 50)
    with pytest.raises(UnsolvableError, match="K1, of coefficient one") as caught:
        response(net, [1e3], "out")
    assert caught.value.remedy


def test_direct_current_passes_a_transformer_by() -> None:
    """In the operating point each winding is a short of its own."""
    net = transformer(0.98, dc=3.0)
    net.add_resistor("Rleak", "in", "out", 1e3)
    assert operating_point(net) == pytest.approx({"in": 3.0, "p": 0.0, "out": 0.0}, abs=1e-15)


# ---------------------------------------------------------------------- modes, time, noise


@pytest.mark.parametrize("coefficient", [0.6, -0.2, 0.01])
def test_two_equal_tanks_ring_at_split_frequencies(coefficient: float) -> None:
    """Lossless, they have the poles +-j / sqrt(L C (1 +- k)): Terman, section 3."""
    net = Network()
    net.add_current_source("I1", "0", "a", ac=1)
    for node in "ab":
        net.add_capacitor(f"C{node}", node, "0", 4.7e-9)
        net.add_inductor(f"L{node}", node, "0", 3.73e-3)
    net.add_coupling("K1", "La", "Lb", coefficient)

    found = sorted(abs(pole) for pole in modes(net, "b").poles if pole.imag > 0)
    expected = sorted(1 / math.sqrt(3.73e-3 * 4.7e-9 * (1 + sign * coefficient)) for sign in (1, -1))
    assert found == pytest.approx(expected, rel=1e-12)


def test_a_perfect_transformer_has_one_mode_less() -> None:
    """One magnetising inductance is left, which both resistors discharge side by side: L1/(R1 || R2/n^2)."""
    found = modes(transformer(1.0), "out")
    side_by_side = 1 / (1 / R1 + 4 / R2)

    assert found.poles == pytest.approx([-side_by_side / L1], rel=1e-14)
    assert found.direct == pytest.approx(2 * side_by_side / R1, rel=1e-14)
    assert len(modes(transformer(1 - 2.0**-40), "out").poles) == 2


@each(NETWORKS)
def test_modes_sum_to_the_response(make: Callable[[], Network]) -> None:
    """Poles, residues and direct term are those of the 50-digit equations' response."""
    net = make()
    (source,) = net.sources
    exact = [reference.solve(net, reference.at(f), {source: 1})["out"] for f in FREQUENCIES]
    got = modes(net, "out").response(2j * np.pi * np.array(FREQUENCIES))
    assert reference.error_against_largest(got, exact) <= 1e-12


SQUARE = {"low": 0, "high": 1, "frequency": "2 kHz", "rise": "1us", "fall": "1us"}
DRIVES = {
    "step": {"step": {"from": 0, "to": 1, "at": 0}},
    "sine": {"sine": {"amplitude": 1, "frequency": 3e3}},
}


@pytest.mark.parametrize("coefficient", [0.98, -0.5, 0.9999])
@pytest.mark.parametrize("drive", DRIVES)
def test_the_transient_is_that_of_the_state_equations(drive: str, coefficient: float) -> None:
    """M di/dt = v - R i, solved by scipy's expm with the source as states of their own, to 1e-9."""
    net = transformer(coefficient, ac=None, **DRIVES[drive])
    time = np.array([1e-7, 1e-6, 2e-5, 1e-4, 4e-4, 1e-3])
    mutual = coefficient * math.sqrt(L1 * L2)
    inverse = np.linalg.inv([[L1, mutual], [mutual, L2]])
    # States: both currents, then the source's value and, for a sine, its quarter turn later.
    omega = 2 * math.pi * 3e3
    system = np.zeros((4, 4))
    system[:2, :2] = -inverse @ np.diag([R1, R2])
    system[:2, 2] = inverse[:, 0]
    if drive == "sine":
        system[2, 3], system[3, 2] = omega, -omega
    start = np.array([0, 0, 0, 1.0]) if drive == "sine" else np.array([0, 0, 1.0, 0])
    expected = [-R2 * (scipy.linalg.expm(system * t) @ start)[1] for t in time]

    got = transient(net, time, "out")
    assert np.abs(got - expected).max() <= 1e-9 * np.abs(expected).max()


def test_the_transient_of_a_perfect_transformer_jumps_and_decays() -> None:
    """A step arrives at once as V2 = n a, a = R2'/(R1 + R2'), and decays with the magnetising current."""
    net = transformer(1.0, ac=None, step={"from": 0, "to": 1, "at": 0})
    time = np.array([0.0, 1e-5, 1e-4])
    load = R2 / 4
    expected = 2 * load / (R1 + load) * np.exp(-time * (R1 * load / (R1 + load)) / L1)
    assert transient(net, time, "out") == pytest.approx(expected, rel=1e-12)


def test_a_harmonic_in_the_periodic_steady_state_is_the_responses() -> None:
    """A square of 1 us edges has the harmonics 2/(n pi) sinc(n f 1us) at odd n; H weights them."""
    net = transformer(0.98, square=SQUARE)
    for order in (1, 3, 7):
        frequency = order * 2e3
        given = 2 / (order * math.pi) * np.sinc(frequency * 1e-6)
        expected = given * abs(response(net, [frequency], "out")[0])
        assert net.measure("harmonic", of="out", order=order) == pytest.approx(expected, rel=1e-11)


def test_noise_passes_a_transformer_both_ways() -> None:
    """The output's noise is 4 k T Re Z of its impedance (H. Nyquist, 1928): the network is passive."""
    frequency = np.array([1e2, 1e4, 1e6])
    s = 2j * math.pi * frequency
    mutual = 0.98 * math.sqrt(L1 * L2)
    winding = s * L2 - (s * mutual) ** 2 / (R1 + s * L1)
    density = np.sqrt(4 * 1.380649e-23 * 300.15 * (1 / (1 / R2 + 1 / winding)).real)

    assert noise(transformer(0.98), frequency, "out") == pytest.approx(density, rel=1e-13)


def test_the_noise_of_a_tuned_circuits_capacitor_is_that_of_equipartition() -> None:
    """Whatever is coupled to it, a capacitor across the output has kT/C in all: sqrt(kT/C) volts."""
    net = tuned()
    total = total_noise(net, "b", 0.0, math.inf)
    assert total == pytest.approx(math.sqrt(1.380649e-23 * 300.15 / 4.7e-9), rel=1e-9)


def _random_network(rng: random.Random, rank: int) -> Network:
    """Four nodes with resistors and capacitors, and inductors whose matrix of coefficients has that rank."""
    net = Network()
    nodes = ["0", "n1", "n2", "n3"]
    net.add_current_source("I1", "0", "n1", ac=1)
    for node in nodes[1:]:
        net.add_resistor(f"R{node}", node, "0", 10 ** rng.uniform(0, 3))
    for k in range(rng.randint(0, 3)):
        net.add_capacitor(f"C{k}", *rng.sample(nodes, 2), 10 ** rng.uniform(-9, -6))
    count = 3
    for k in range(count):
        net.add_inductor(f"L{k}", nodes[k + 1], rng.choice(nodes[: k + 1]), 10 ** rng.uniform(-5, -2))
    turns = np.array([[rng.gauss(0, 1) for _ in range(rank)] for _ in range(count)])
    turns /= np.linalg.norm(turns, axis=1, keepdims=True)
    matrix = np.clip(turns @ turns.T, -1, 1)
    if rank == 1:
        matrix = np.sign(matrix)
    for a in range(count):
        for b in range(a):
            net.add_coupling(f"K{a}{b}", f"L{a}", f"L{b}", float(matrix[a, b]))
    return net


@pytest.mark.parametrize("rank", [3, 2, 1])
def test_the_span_holds_every_mode(rank: int) -> None:
    """Natural frequencies, eigenvalues of the same equations in 40 digits, lie within the bounds."""
    for seed in range(12):
        net = _random_network(random.Random(f"{rank} {seed}"), rank)
        span, eqs = span_of(net), equations(net)
        with mpmath.workdps(40):
            constant = mpmath.matrix(eqs.dense(eqs.constant).tolist())
            slope = mpmath.matrix(eqs.dense(eqs.slope).tolist())
            shift = mpmath.mpf(span.middle)
            found = mpmath.eig(mpmath.inverse(constant + shift * slope) * slope, left=False, right=False)
            poles = [abs(shift - 1 / theta) for theta in found if abs(theta) > mpmath.mpf(10) ** -12 / shift]
        moving = [float(pole) for pole in poles if pole > 1e-12 * span.low]
        assert moving
        assert span.low * (1 - 1e-9) <= min(moving), seed
        assert max(moving) <= span.high * (1 + 1e-9), seed


# ---------------------------------------------------------------------- derivatives


# Where |k| is one, more cannot be asked: a greater k is beyond what the network may have.
SMOOTH = {name: make for name, make in NETWORKS.items() if name not in ("perfect", "all but perfect")}


@each(SMOOTH)
def test_derivatives_by_every_part_are_those_of_50_digit_differences(make: Callable[[], Network]) -> None:
    """DH/d ln value of couplings and coupled inductors, which move mutual inductances, and of all others."""
    net = make()
    (source,) = net.sources
    found = response_sensitivity(net, FREQUENCIES[1:5], "out")

    assert list(found) == list(net.values)
    for k, frequency in enumerate(FREQUENCIES[1:5]):
        at = reference.at(frequency)
        expected = {part: high_precision.by_value(net, at, "out", part) for part in found}
        largest = max(abs(value) for value in expected.values())
        for part, value in expected.items():
            assert abs(mpmath.mpc(complex(found[part][k])) - value) <= 1e-13 * largest, (part, source)


@each(SMOOTH)
def test_slopes_and_their_derivatives_are_those_of_differences(make: Callable[[], Network]) -> None:
    """dH/ds and d^2H/(ds d ln value) of every part, beside differences along s."""
    net = make()
    frequencies = [1e3, 4e4]
    found = derivatives(net, 2j * np.pi * np.array(frequencies), (net.node_index("out"), 0), slope=True)
    assert found.slope is not None
    assert found.slope_by_part is not None
    _, slope = response_and_slope(net, 2 * np.pi * np.array(frequencies), (net.node_index("out"), 0))
    for k, frequency in enumerate(frequencies):
        with mpmath.workdps(reference.DIGITS):
            at, step = reference.at(frequency), high_precision.STEP

            def along(function, at=at, step=step):
                return (function(at * (1 + step)) - function(at * (1 - step))) / (2 * step * at)

            whole = along(lambda point: high_precision.voltage(net, point, "out"))
            mixed = [
                along(lambda point, part=part: high_precision.by_value(net, point, "out", part))
                for part in found.names
            ]
            largest = max(abs(value) for value in mixed)
            assert reference.relative_error(complex(found.slope[k]), whole) <= 1e-12
            assert reference.relative_error(complex(slope[k]), whole) <= 1e-12
            for row, value in enumerate(mixed):
                got = mpmath.mpc(complex(found.slope_by_part[row, k]))
                assert abs(got - value) <= 1e-12 * largest, found.names[row]


def test_at_zero_the_derivatives_are_those_of_the_first_term() -> None:
    """Near s = 0, H = s M/R1: dH/ds = M/R1, k moves it by as much, each inductor by half, R1 by less."""
    net = transformer(0.98)
    found = derivatives_at_zero(net, (net.node_index("out"), 0))
    first = 0.98 * math.sqrt(L1 * L2) / R1

    assert found.slope is not None
    assert found.slope_by_part is not None
    assert found.slope[0] == pytest.approx(first, rel=1e-12)
    moved = dict(zip(found.names, found.slope_by_part[:, 0] / first, strict=True))
    expected = {"R1": -1.0, "K1": 1.0, "L1": 0.5, "L2": 0.5, "R2": 0.0}
    assert moved == pytest.approx(expected, abs=1e-11)


def test_the_slowest_mode_moves_with_every_part() -> None:
    """The slower root of (R1 + s L1)(R2 + s L2) = (s M)^2, differentiated by differences of 50 digits."""
    net = transformer(0.98)
    pole, moved = slowest_mode_sensitivity(net)

    def slower(**factors):
        value = {"R1": R1, "R2": R2, "L1": L1, "L2": L2, "K1": 0.98}
        value = {name: mpmath.mpf(number) * factors.get(name, 1) for name, number in value.items()}
        a = value["L1"] * value["L2"] * (1 - value["K1"] ** 2)
        b = value["R1"] * value["L2"] + value["R2"] * value["L1"]
        c = value["R1"] * value["R2"]
        return -2 * c / (b + mpmath.sqrt(b * b - 4 * a * c))

    with mpmath.workdps(reference.DIGITS):
        assert pole == pytest.approx(complex(slower()), rel=1e-13)
        step = high_precision.STEP
        for name, value in moved.items():
            up, down = (slower(**{name: mpmath.exp(sign * step)}) for sign in (1, -1))
            assert value == pytest.approx(complex((up - down) / (2 * step)), rel=1e-11), name


# ---------------------------------------------------------------------- what is not given


def test_one_part_is_given_for_what_enters_with_rank_one() -> None:
    """Resistors and capacitors beside coupled inductors keep their bilinear form."""
    net = three_windings()
    found = every_part(net, FREQUENCIES, "out")

    assert set(found) == {"R1", "R2", "R3", "C3"}
    for name, part in found.items():
        changed = net.with_values({name: 1.7 * net.part(name).value})
        expected = response(changed, FREQUENCIES, "out")
        assert np.abs(part.scaled(1.7) - expected).max() <= 1e-12 * np.abs(expected).max()


@pytest.mark.parametrize("name", ["K1", "L3"])
def test_one_part_is_refused_for_couplings_and_coupled_inductors(name: str) -> None:
    """They enter with a higher rank: no number rather than a wrong one."""
    with pytest.raises(UndecidedError, match=f"function of {name} alone") as caught:
        one_part(three_windings(), [1e3], "out", name)
    assert caught.value.remedy


def test_a_transfer_function_in_part_names_is_refused() -> None:
    """A mutual inductance is the root of a product."""
    with pytest.raises(UndecidedError, match="K1 couples inductors"):
        transfer_function(transformer(0.9), "out")


# ---------------------------------------------------------------------- ngspice


def spice(folder: Path, network: Network, *commands: str) -> Curves:
    """What ngspice makes of the network, every value as `repr` writes it."""
    lines = ["coupled inductors"]
    for part in network.parts:
        ac = f"dc 0 ac {network.sources[part.name].ac!r}" if part.kind in "VI" else repr(part.value)
        lines.append(" ".join([part.name, *part.nodes, *(part.couples or ()), ac]))
    (folder / "deck.cir").write_text("\n".join([*lines, *commands, ".end", ""]), encoding="utf-8")
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")
    assert program is not None
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
        cwd=folder,
        env={**os.environ, "HOME": str(folder)},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        check=True,
        timeout=60,
    )
    return parse_raw((folder / "deck.raw").read_bytes(), "deck.raw")


@pytest.mark.ngspice
@each(NETWORKS)
def test_ngspice_gives_the_same_response(tmp_path: Path, make: Callable[[], Network]) -> None:
    """Signs, dots and mutual inductance are SPICE's: every node within the allowance, and within 1e-9."""
    net = make()
    curves = spice(tmp_path, net, ".options noopac", ".ac dec 10 100 10meg")
    (source,) = net.sources.values()
    for row, node in enumerate(net.nodes[1:]):
        curve = curves.get(f"v({node})", "ac")
        assert curve is not None
        exact = response(net, curve.axis, node)
        allowed = rounding_allowance(net, 2j * np.pi * curve.axis, ac_drive(net).sources, [row])[0]
        error = np.abs(curve.values / source.ac - exact)
        assert (error <= allowed).all(), node
        assert error.max() <= 1e-9 * np.abs(exact).max(), node


@pytest.mark.ngspice
@each({name: NETWORKS[name] for name in ("tight", "three windings", "double-tuned")})
def test_ngspice_gives_the_same_noise(tmp_path: Path, make: Callable[[], Network]) -> None:
    """The density agrees to 1e-9, Boltzmann's constant of 2014, which ngspice 39 has, put in its place."""
    net = make()
    (source,) = net.sources
    curves = spice(tmp_path, net, f".noise v(out) {source} dec 5 100 1meg")
    curve = next(curve for curve in curves if "onoise_spectrum" in curve.name)
    density = noise(net, curve.axis, "out") * math.sqrt(1.38064852e-23 / 1.380649e-23)
    assert np.abs(curve.values) == pytest.approx(density, rel=1e-9)
