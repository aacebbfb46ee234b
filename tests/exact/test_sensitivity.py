"""Derivatives by part values beside differences of 50-digit responses."""

from __future__ import annotations

import math

import high_precision
import mna_reference as reference
import mpmath
import numpy as np
import pytest
from shared_networks import NETWORKS, driven, twin_t

from rcnet.circuit import Network
from rcnet.errors import CircuitError, UndecidedError, UnsolvableError
from rcnet.exact import response_sensitivity
from rcnet.exact.sensitivity import derivatives, derivatives_at_zero, slowest_mode_sensitivity

FREQUENCIES = [30.0, 1e4, 3e5, 2e7]


@pytest.mark.parametrize("name", NETWORKS)
def test_every_part_of_every_kind_has_the_derivative_of_the_exact_response(name: str) -> None:
    """Every part's dH/d ln value lies within 1e-13 of the greatest one's, at frequencies over six decades."""
    network = NETWORKS[name]()
    found = response_sensitivity(network, FREQUENCIES, "out")

    assert list(found) == list(network.values)
    for k, frequency in enumerate(FREQUENCIES):
        expected = {
            part: high_precision.by_value(network, reference.at(frequency), "out", part) for part in found
        }
        largest = max(abs(value) for value in expected.values())
        for part, value in expected.items():
            assert abs(mpmath.mpc(complex(found[part][k])) - value) <= 1e-13 * largest, (part, frequency)


@pytest.mark.parametrize("pair", ["x y", "y x", "in out"])
def test_a_pair_has_the_difference_of_both_derivatives(pair: str) -> None:
    """The output may be the voltage between any two nodes."""
    network = twin_t()
    found = response_sensitivity(network, [1e4], pair)
    for part, value in found.items():
        expected = high_precision.by_value(network, reference.at(1e4), pair, part)
        assert complex(value[0]) == pytest.approx(complex(expected), rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("name", NETWORKS)
def test_slopes_are_those_of_the_exact_response(name: str) -> None:
    """dH/ds and d^2H/(ds d ln value) lie within 1e-12 of differences along s.

    Where the response is flat, within the rounding of its own: what 1e-14 of a part's share makes over s.
    """
    network = NETWORKS[name]()
    frequencies = FREQUENCIES[::2] if name == "every kind" else FREQUENCIES
    s = 2j * math.pi * np.array(frequencies)
    found = derivatives(network, s, (network.node_index("out"), 0), slope=True)
    assert found.slope is not None
    assert found.slope_by_part is not None
    for k, frequency in enumerate(frequencies):
        with mpmath.workdps(reference.DIGITS):
            at, step = reference.at(frequency), high_precision.STEP

            def along(function, at=at, step=step):
                return (function(at * (1 + step)) - function(at * (1 - step))) / (2 * step * at)

            slope = along(lambda point: high_precision.voltage(network, point, "out"))
            mixed = [
                along(lambda point, part=part: high_precision.by_value(network, point, "out", part))
                for part in found.names
            ]
            rounding = 1e-14 * np.abs(found.by_part[:, k]).max() / abs(at)
            largest = max(abs(value) for value in mixed)
            assert abs(mpmath.mpc(complex(found.slope[k])) - slope) <= 1e-12 * abs(slope) + rounding
            for row, value in enumerate(mixed):
                got = mpmath.mpc(complex(found.slope_by_part[row, k]))
                assert abs(got - value) <= 1e-12 * largest + rounding, found.names[row]


@pytest.mark.parametrize("name", ["resonant", "every kind", "ladder"])
def test_derivatives_at_zero_frequency_hold_with_inductors_too(name: str) -> None:
    """An inductor's admittance is infinite at s = 0; derivatives there agree with differences about zero."""
    network = NETWORKS[name]()
    network.add_resistor("Rdc", "out", "0", 1e4)
    if name == "ladder":
        for node in range(1, 7):
            network.add_resistor(f"Rleak{node}", f"n{node}", "0", 1e5)
            network.add_resistor(f"Rpass{node}", f"n{node - 1}", f"n{node}", 1e5)
    found = derivatives_at_zero(network, (network.node_index("out"), 0))
    assert found.slope is not None
    assert found.slope_by_part is not None
    with mpmath.workdps(reference.DIGITS):
        step = mpmath.mpf(10) ** -10
        slope = (
            high_precision.voltage(network, step, "out") - high_precision.voltage(network, -step, "out")
        ) / (2 * step)
        assert abs(mpmath.mpf(float(found.slope[0].real)) - slope) <= 1e-12 * abs(slope)
        mixed = {
            part: (
                high_precision.by_value(network, step, "out", part)
                - high_precision.by_value(network, -step, "out", part)
            )
            / (2 * step)
            for part in found.names
        }
        largest = max(abs(value) for value in mixed.values())
        for row, (part, value) in enumerate(mixed.items()):
            assert abs(mpmath.mpf(float(found.slope_by_part[row, 0].real)) - value) <= 1e-12 * largest, part


@pytest.mark.parametrize("name", ["twin-T", "band-pass", "buffered", "ladder"])
def test_a_gain_is_unmoved_by_scaling_impedances(name: str) -> None:
    """With every R up and every C down by as much a voltage ratio stays: sums over R and over C are equal."""
    network = NETWORKS[name]()
    found = response_sensitivity(network, FREQUENCIES, "out")
    resistive = sum(value for part, value in found.items() if part[0] == "R")
    capacitive = sum(value for part, value in found.items() if part[0] == "C")
    np.testing.assert_allclose(resistive, capacitive, rtol=1e-11, atol=1e-14 * np.abs(resistive).max())


def test_zero_frequency_without_a_dc_solution_is_the_limit() -> None:
    """Two capacitors in series share as C1/(C1 + C2): +-C2/(C1 + C2) and nothing of the resistor."""
    found = response_sensitivity(NETWORKS["held by capacitors"](), [0.0], "out")
    expected = {"C1": 2 / 9, "C2": -2 / 9, "R1": 0.0}
    for part, value in expected.items():
        assert complex(found[part][0]) == pytest.approx(value, rel=1e-14, abs=1e-15)


@pytest.mark.parametrize("name", ["twin-T", "band-pass", "buffered", "every kind"])
def test_the_slowest_mode_moves_as_the_root_of_the_exact_determinant(name: str) -> None:
    """dp/d ln value beside roots of 1/Z found in 50 digits, Z the impedance at a node the mode moves."""
    network = NETWORKS[name]()
    node = {"twin-T": "out", "band-pass": "out", "buffered": "out", "every kind": "f"}[name]
    network.add_current_source("Iprobe", "0", node)
    pole, moved = slowest_mode_sensitivity(network)
    with mpmath.workdps(reference.DIGITS):

        def root(part: str | None, factor):
            def admittance(s):
                try:
                    return 1 / high_precision.voltage(network, s, node, part, factor, driven="Iprobe")
                except ZeroDivisionError:  # so near the root that 50 digits call the matrix singular
                    return mpmath.mpf(0)

            return mpmath.findroot(
                admittance,
                (mpmath.mpc(pole) * (1 + mpmath.mpf(10) ** -7), mpmath.mpc(pole)),
                tol=1e-60,
                verify=False,
            )

        assert abs(root(None, 1) / mpmath.mpc(pole) - 1) < 1e-12
        for part, derivative in moved.items():
            step = mpmath.mpf(10) ** -10
            expected = (root(part, mpmath.exp(step)) - root(part, mpmath.exp(-step))) / (2 * step)
            assert abs(mpmath.mpc(derivative) - expected) < 1e-10 * abs(pole), part


def unstable() -> Network:
    """More than unity fed back to a capacitor's node."""
    network = driven(("R1", "in", "out", 1e3), ("C1", "out", "0", 1e-9), ("R3", "b", "out", 1e3))
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "out", "0", 10.0)
    return network


REFUSED = {
    "negative frequency": (lambda: response_sensitivity(twin_t(), [-1.0], "out"), CircuitError),
    "nan frequency": (lambda: response_sensitivity(twin_t(), [math.nan], "out"), CircuitError),
    "unknown node": (lambda: response_sensitivity(twin_t(), [1.0], "nowhere"), CircuitError),
    "floating node": (
        lambda: response_sensitivity(driven(("R1", "in", "0", 1.0), ("R2", "p", "q", 1.0)), [1.0], "in"),
        UnsolvableError,
    ),
    "no mode": (lambda: slowest_mode_sensitivity(driven(("R1", "in", "0", 1.0))), UndecidedError),
    "mode that never decays": (
        lambda: slowest_mode_sensitivity(NETWORKS["held by capacitors"]()),
        UndecidedError,
    ),
    "a mode that grows": (lambda: slowest_mode_sensitivity(unstable()), UndecidedError),
    "two equal modes": (
        lambda: slowest_mode_sensitivity(
            driven(
                ("R1", "in", "a", 1e3), ("C1", "a", "0", 1e-9), ("R2", "in", "b", 1e3), ("C2", "b", "0", 1e-9)
            )
        ),
        UndecidedError,
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_has_no_derivative_is_refused(case: str) -> None:
    """Each refusal is an error of ours with a sentence."""
    call, kind = REFUSED[case]
    with pytest.raises(kind, match=r"\.$|\. "):
        call()
