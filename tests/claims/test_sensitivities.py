"""Sensitivities of measures beside differences of closed forms in 50 digits, and the laws of scaling."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import mpmath
import pytest

from rcnet.circuit import Network, Source, measure_spec, parse_options
from rcnet.claims import measure, sensitivity
from rcnet.claims.noise_measures import NOISE_MEASURES
from rcnet.claims.sensitivities import by_differences
from rcnet.errors import CircuitError, RcnetError, UndecidedError

Values = Mapping[str, Any]

STEP = mpmath.mpf(10) ** -12


@dataclass(frozen=True)
class Case:
    """A network and its closed forms.

    transfer, input_impedance, output_impedance: of s and the part values
    peak: where the magnitude is greatest, rad/s, of the part values; 0 for the limit at zero
    """

    network: Network
    transfer: Callable[[Any, Values], Any]
    input_impedance: Callable[[Any, Values], Any]
    output_impedance: Callable[[Any, Values], Any]
    peak: Callable[[Values], Any]


def driven(*parts: tuple[str, str, str, float]) -> Network:
    """Passive parts driven by 1 V between `in` and ground."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1)
    add = {"R": network.add_resistor, "C": network.add_capacitor, "L": network.add_inductor}
    for name, a, b, value in parts:
        add[name[0]](name, a, b, value)
    return network


def buffered() -> Network:
    """Two sections with an amplifier between."""
    network = driven(
        ("R1", "in", "a", 1e3), ("C1", "a", "0", 10e-9), ("R2", "b", "out", 2.2e3), ("C2", "out", "0", 3.3e-9)
    )
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 2.5)
    return network


def parallel(*impedances: Any) -> Any:
    """The impedance of several side by side."""
    return 1 / sum(1 / z for z in impedances)


def resonant_peak(v: Values) -> Any:
    """Where |1 + s (R1 C1 + L1/R2) + s^2 L1 C1 + R1/R2| is least: a quadratic in omega^2."""
    a0, a1, a2 = 1 + v["R1"] / v["R2"], v["R1"] * v["C1"] + v["L1"] / v["R2"], v["L1"] * v["C1"]
    return mpmath.sqrt((2 * a0 * a2 - a1**2) / (2 * a2**2))


CASES = {
    "ladder": Case(
        driven(
            ("R1", "in", "a", 1e3),
            ("C1", "a", "0", 10e-9),
            ("R2", "a", "out", 4.7e3),
            ("C2", "out", "0", 2.2e-9),
        ),
        lambda s, v: (
            1
            / (
                1
                + s * (v["C1"] * v["R1"] + v["C2"] * v["R1"] + v["C2"] * v["R2"])
                + s**2 * v["C1"] * v["C2"] * v["R1"] * v["R2"]
            )
        ),
        lambda s, v: v["R1"] + parallel(1 / (s * v["C1"]), v["R2"] + 1 / (s * v["C2"])),
        lambda s, v: parallel(1 / (s * v["C2"]), v["R2"] + parallel(v["R1"], 1 / (s * v["C1"]))),
        lambda v: mpmath.mpf(0),
    ),
    "band-pass": Case(
        driven(
            ("R1", "in", "a", 1e3),
            ("C1", "a", "out", 10e-9),
            ("R2", "out", "0", 1.5e3),
            ("C2", "out", "0", 12e-9),
        ),
        lambda s, v: (
            s
            * v["C1"]
            * v["R2"]
            / (
                1
                + s * (v["C1"] * v["R1"] + v["C2"] * v["R2"] + v["C1"] * v["R2"])
                + s**2 * v["C1"] * v["C2"] * v["R1"] * v["R2"]
            )
        ),
        lambda s, v: v["R1"] + 1 / (s * v["C1"]) + parallel(v["R2"], 1 / (s * v["C2"])),
        lambda s, v: parallel(v["R2"], 1 / (s * v["C2"]), v["R1"] + 1 / (s * v["C1"])),
        lambda v: 1 / mpmath.sqrt(v["C1"] * v["C2"] * v["R1"] * v["R2"]),
    ),
    "resonance": Case(
        driven(
            ("R1", "in", "a", 100.0),
            ("L1", "a", "out", 1e-3),
            ("C1", "out", "0", 10e-9),
            ("R2", "out", "0", 1.5e3),
        ),
        lambda s, v: (
            1
            / (1 + v["R1"] / v["R2"] + s * (v["R1"] * v["C1"] + v["L1"] / v["R2"]) + s**2 * v["L1"] * v["C1"])
        ),
        lambda s, v: v["R1"] + s * v["L1"] + parallel(v["R2"], 1 / (s * v["C1"])),
        lambda s, v: parallel(v["R2"], 1 / (s * v["C1"]), v["R1"] + s * v["L1"]),
        resonant_peak,
    ),
    "buffered": Case(
        buffered(),
        lambda s, v: v["E1"] / ((1 + s * v["R1"] * v["C1"]) * (1 + s * v["R2"] * v["C2"])),
        lambda s, v: v["R1"] + 1 / (s * v["C1"]),
        lambda s, v: parallel(v["R2"], 1 / (s * v["C2"])),
        lambda v: mpmath.mpf(0),
    ),
}


def twin_t(s: Any, v: Values) -> Any:
    """The twin-T of any parts by its chain matrices: y21/y22 of two T networks side by side."""
    series = v["R1"] + v["R2"] + s * v["C3"] * v["R1"] * v["R2"]
    z1, z2, z3 = 1 / (s * v["C1"]), 1 / (s * v["C2"]), v["R3"]
    other = z1 + z2 + z1 * z2 / z3
    through = 1 / series + 1 / other
    own = (1 + s * v["C3"] * v["R1"]) / series + (1 + z1 / z3) / other
    return through / own


CASES["twin-T"] = Case(
    driven(
        ("R1", "in", "x", 1e3),
        ("R2", "x", "out", 1.1e3),
        ("R3", "y", "0", 480.0),
        ("C1", "in", "y", 1e-8),
        ("C2", "y", "out", 1.2e-8),
        ("C3", "x", "0", 2e-8),
    ),
    twin_t,
    lambda s, v: None,
    lambda s, v: None,
    lambda v: mpmath.mpf(0),
)


def near_zero(case: Case, s: Any, v: Values) -> Any:
    """The transfer function, at zero by its limit."""
    return case.transfer(s if s else mpmath.mpf(10) ** -40, v)


def level(case: Case, omega: Any, v: Values) -> Any:
    """The logarithm of the magnitude."""
    return mpmath.log(abs(near_zero(case, 1j * omega, v)))


def delay(case: Case, omega: Any, v: Values) -> Any:
    """Minus Re(H'/H), the derivative by differences of 50 digits."""
    s, h = 1j * omega, mpmath.mpf(10) ** -12 * (omega or 1)
    slope = (case.transfer(s + h, v) - case.transfer(s - h, v)) / (2 * h)
    return -mpmath.re(slope / near_zero(case, s, v))


def edge(case: Case, v: Values, near: float) -> Any:
    """The half-power frequency near one, Hz."""
    threshold = level(case, case.peak(v), v) - mpmath.log(2) / 2
    start = 2 * mpmath.pi * mpmath.mpf(near)
    found = mpmath.findroot(lambda w: level(case, w, v) - threshold, (start, start * (1 + STEP)), tol=1e-80)
    return found / (2 * mpmath.pi)


AT = {"at": 3e3}
OMEGA = 2 * mpmath.pi * 3000


def both_edges(case: Case, v: Values) -> tuple[Any, Any]:
    """The lower and the upper half-power frequency."""
    low = edge(case, v, measure(case.network, "cutoff", edge="lower"))
    return low, edge(case, v, measure(case.network, "cutoff", edge="upper"))


# What each measure is by definition; its options; the cases that have it.
Definition = Callable[[Case, Values], Any]
MEASURES: dict[str, tuple[str, dict[str, Any], Definition, str]] = {
    "gain": (
        "gain",
        AT,
        lambda c, v: 20 / mpmath.log(10) * level(c, OMEGA, v),
        "ladder band-pass resonance buffered twin-T",
    ),
    "gain at zero": (
        "gain",
        {"at": 0.0},
        lambda c, v: 20 / mpmath.log(10) * level(c, 0, v),
        "ladder resonance buffered twin-T",
    ),
    "attenuation": (
        "attenuation",
        AT,
        lambda c, v: 20 / mpmath.log(10) * (level(c, c.peak(v), v) - level(c, OMEGA, v)),
        "ladder band-pass resonance buffered twin-T",
    ),
    "phase": (
        "phase",
        AT,
        lambda c, v: mpmath.degrees(mpmath.arg(c.transfer(1j * OMEGA, v))),
        "ladder band-pass resonance buffered twin-T",
    ),
    "group delay": (
        "group_delay",
        AT,
        lambda c, v: delay(c, OMEGA, v),
        "ladder band-pass resonance buffered twin-T",
    ),
    "Elmore delay": ("elmore_delay", {}, lambda c, v: delay(c, 0, v), "ladder resonance buffered"),
    "cutoff": (
        "cutoff",
        {"edge": "upper"},
        lambda c, v: edge(c, v, measure(c.network, "cutoff", edge="upper")),
        "ladder band-pass resonance buffered twin-T",
    ),
    "lower cutoff": (
        "cutoff",
        {"edge": "lower"},
        lambda c, v: edge(c, v, measure(c.network, "cutoff", edge="lower")),
        "band-pass twin-T",
    ),
    "bandwidth": (
        "bandwidth",
        {},
        lambda c, v: abs(both_edges(c, v)[1] - both_edges(c, v)[0]),
        "band-pass twin-T",
    ),
    "centre": (
        "centre",
        {},
        lambda c, v: mpmath.sqrt(both_edges(c, v)[0] * both_edges(c, v)[1]),
        "band-pass twin-T",
    ),
    "dc gain": ("dc_gain", {}, lambda c, v: near_zero(c, 0, v), "ladder resonance buffered twin-T"),
    "input impedance": (
        "input_impedance",
        AT,
        lambda c, v: abs(c.input_impedance(1j * OMEGA, v)),
        "ladder band-pass resonance buffered",
    ),
    "output impedance": (
        "output_impedance",
        AT,
        lambda c, v: abs(c.output_impedance(1j * OMEGA, v)),
        "ladder band-pass resonance buffered",
    ),
}


@pytest.mark.parametrize(
    ("name", "case"), [(name, case) for name, row in MEASURES.items() for case in row[3].split()]
)
def test_each_measure_moves_as_its_closed_form(name: str, case: str) -> None:
    """Relative (dB and degrees: absolute) derivatives within 1e-9 of 50-digit central differences."""
    word, options, definition, _ = MEASURES[name]
    one = CASES[case]
    network = one.network
    found = sensitivity(network, word, "out", **options)

    assert list(found) == list(network.values)
    absolute = measure_spec(word).unit in ("dB", "deg")
    with mpmath.workdps(50):
        nominal = {part: mpmath.mpf(value) for part, value in network.values.items()}
        for part in network.values:

            def at(step: Any, part: str = part) -> Any:
                value = definition(one, {**nominal, part: nominal[part] * mpmath.exp(step)})
                return value if absolute else mpmath.log(abs(value))

            expected = float((at(STEP) - at(-STEP)) / (2 * STEP))
            assert found[part] == pytest.approx(expected, rel=1e-9, abs=1e-10), part


@pytest.mark.parametrize("case", ["ladder", "band-pass", "buffered", "twin-T"])
def test_an_rc_corner_scales_with_every_product_of_r_and_c(case: str) -> None:
    """All R times x: every corner over x, likewise C; sums of -1 for corners, 1 for delays, 0 for gains."""
    network = CASES[case].network
    sums = {
        ("cutoff", "upper"): -1.0,
        ("elmore_delay", None): 1.0,
        ("time_constant", None): 1.0,
        ("dc_gain", None): 0.0,
    }
    if case == "band-pass":
        sums = {
            ("cutoff", "lower"): -1.0,
            ("cutoff", "upper"): -1.0,
            ("bandwidth", None): -1.0,
            ("centre", None): -1.0,
        }
    for (word, which), expected in sums.items():
        options = {"edge": which} if which else {}
        found = sensitivity(network, word, "out", **options)
        for letter in "RC":
            total = sum(value for part, value in found.items() if part[0] == letter)
            assert total == pytest.approx(expected, abs=1e-11), (word, letter)


def test_impedances_scale_with_r_and_against_c() -> None:
    """R times x, C over x: an impedance times x. The sum over R less that over C is 1."""
    for word in ("input_impedance", "output_impedance"):
        found = sensitivity(CASES["ladder"].network, word, "out", at="2 kHz")
        total = sum(value if part[0] == "R" else -value for part, value in found.items())
        assert total == pytest.approx(1.0, abs=1e-12)


def test_the_time_constant_of_one_rc_is_the_product() -> None:
    """One per cent of either is one per cent."""
    found = sensitivity(driven(("R1", "in", "out", 1e3), ("C1", "out", "0", 1e-9)), "time_constant")
    assert found == pytest.approx({"R1": 1.0, "C1": 1.0}, rel=1e-12)


def test_the_time_constant_of_the_uniform_ladder() -> None:
    """Two equal sections, by the roots of 1 + (R1 C1 + R1 C2 + R2 C2) s + R1 R2 C1 C2 s^2."""
    network = driven(
        ("R1", "in", "a", 1e3), ("C1", "a", "0", 1e-9), ("R2", "a", "out", 1e3), ("C2", "out", "0", 1e-9)
    )
    found = sensitivity(network, "time_constant")
    with mpmath.workdps(50):

        def slowest(v: Values) -> Any:
            b = v["R1"] * v["C1"] + v["R1"] * v["C2"] + v["R2"] * v["C2"]
            return (b + mpmath.sqrt(b**2 - 4 * v["R1"] * v["R2"] * v["C1"] * v["C2"])) / 2

        nominal = {part: mpmath.mpf(value) for part, value in network.values.items()}
        for part, got in found.items():
            up, down = (
                mpmath.log(slowest({**nominal, part: nominal[part] * mpmath.exp(step)}))
                for step in (STEP, -STEP)
            )
            assert got == pytest.approx(float((up - down) / (2 * STEP)), rel=1e-11)


@pytest.mark.parametrize("word", ["input_impedance", "output_impedance"])
def test_ports_of_networks_that_sense_the_driving_current(word: str) -> None:
    """An F source that senses the driving source's current, beside the closed form and plain differences.

    i flows through the driving source into R1; the F source adds beta i at node a, where R2 goes to ground:
    Z = R1 + R2 (1 + beta) seen from the source, R1 R2/(R1 + R2 (1 + beta)) at node a.
    """
    network = driven(("R1", "in", "a", 1e3), ("R2", "a", "0", 2e3))
    # The current through Vin runs from + to -, so what it delivers is minus that.
    network.add_current_controlled_current_source("F1", "a", "0", "Vin", 1.5)
    r1, r2, beta = 1e3, 2e3, 1.5
    if word == "input_impedance":
        whole = r1 + r2 * (1 + beta)
        expected = {"R1": r1 / whole, "R2": r2 * (1 + beta) / whole, "F1": r2 * beta / whole}
    else:
        below = r1 + r2 * (1 + beta)
        expected = {"R1": 1 - r1 / below, "R2": 1 - r2 * (1 + beta) / below, "F1": -r2 * beta / below}
    found = sensitivity(network, word, "a", at=1e3)
    assert found == pytest.approx(expected, rel=1e-12)


def test_a_current_source_drives_a_port_too() -> None:
    """The input impedance of R beside C driven by a current, beside |Z| = R/|1 + s R C|."""
    network = Network()
    network.add_current_source("Iin", "0", "out", ac=1)
    network.add_resistor("R1", "out", "0", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-9)
    x = 2 * math.pi * 1e5 * 1e-6
    found = sensitivity(network, "input_impedance", "out", at=1e5)
    assert found == pytest.approx({"R1": 1 / (1 + x * x), "C1": -x * x / (1 + x * x)}, rel=1e-12)


def test_measures_without_a_formula_go_by_differences() -> None:
    """Where both ways exist they agree, and the differences' own estimate of their error covers it."""
    network = CASES["ladder"].network
    for word, options in (("cutoff", {}), ("gain", {"at": 3e3}), ("elmore_delay", {})):
        parsed = parse_options(measure_spec(word), options)
        exact = sensitivity(network, word, "out", **options)
        for part, (value, error) in by_differences(network, word, "out", parsed).items():
            assert abs(value - exact[part]) <= max(error, 1e-10)
            assert error < 1e-6


@pytest.mark.parametrize(("temperature", "expected"), [(None, 2.0356861e-6), (300.0, 2.0351774e-6)])
def test_the_noise_measure_is_the_band_at_its_temperature(temperature: float | None, expected: float) -> None:
    """sqrt(k T/C) of 1 nF: 2.0356861 uV at 300.15 K and 2.0351774 uV at 300 K (k_B of the SI, 2019)."""
    network = driven(("R1", "in", "out", 1e3), ("C1", "out", "0", 1e-9))
    options: dict[str, float | str] = {"from": 0.0, "to": math.inf}
    if temperature is not None:
        options["temperature"] = temperature
    found = NOISE_MEASURES["noise"](network, (network.node_index("out"), 0), options)
    assert found == pytest.approx(expected, rel=1e-7)


def split() -> Network:
    """Two branches that tie at zero and at infinity and move apart."""
    return driven(
        ("R1", "in", "out", 1e3), ("R2", "out", "0", 1e3), ("C1", "in", "out", 1e-9), ("C2", "out", "0", 1e-9)
    )


REFUSED = {
    "no cutoff": (lambda: sensitivity(split(), "cutoff"), UndecidedError, "cutoff"),
    "a dc gain of zero": (lambda: sensitivity(CASES["band-pass"].network, "dc_gain"), UndecidedError, "zero"),
    "two ends equally high that move apart": (
        lambda: sensitivity(split(), "attenuation", at=1e3),
        UndecidedError,
        "corner",
    ),
    "an unknown measure": (lambda: sensitivity(split(), "slowness"), CircuitError, "slowness"),
    "a missing option": (lambda: sensitivity(split(), "gain"), CircuitError, "at"),
    "an unknown node": (lambda: sensitivity(split(), "gain", "nowhere", at=1e3), CircuitError, "nowhere"),
    "no source": (
        lambda: sensitivity(split().with_source(Source("Vin", ("in", "0"))), "gain", at=1e3),
        CircuitError,
        "ac",
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_has_no_sensitivity_is_refused_with_the_reason(case: str) -> None:
    """A sentence instead of a number."""
    call, kind, says = REFUSED[case]
    with pytest.raises(kind, match=says):
        call()
    assert issubclass(kind, RcnetError)


def test_the_network_is_left_as_it_was() -> None:
    """Differences and ports work on copies."""
    network = CASES["buffered"].network
    before = network.values, network.sources, network.nodes
    for word, options in (("input_impedance", AT), ("output_impedance", AT), ("cutoff", {})):
        sensitivity(network, word, "out", **options)
    by_differences(network, "cutoff", "out", {})
    assert (network.values, network.sources, network.nodes) == before
