"""Why results differ: faults of small circuits with the curves that textbook formulas give them."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from rcnet import CircuitError, Curve, Curves, Network
from rcnet.circuit import Circuit
from rcnet.compare import compare
from rcnet.compare.causes import Cause, find_causes
from rcnet.compare.evidence import Observed
from rcnet.compare.explained import explained, noise_causes

Complex = np.ndarray[Any, np.dtype[np.complex128]]

F = np.geomspace(10, 1e6, 61)
S = 2j * np.pi * F
R1, C1, R2, C2 = 1e4, 1e-8, 4.7e4, 2.2e-9


def two_sections(s: Any = S, r1: float = R1, c1: float = C1, r2: float = R2, c2: float = C2) -> Any:
    """V(n1) and V(out) of R1 - C1 - R2 - C2 for one volt: the ladder's continued fraction, by hand.

    V(out) = 1/(1 + s (R1 C1 + R1 C2 + R2 C2) + s^2 R1 C1 R2 C2), V(n1) = (1 + s R2 C2) V(out).
    """
    out = 1 / (1 + s * (r1 * c1 + r1 * c2 + r2 * c2) + s * s * r1 * c1 * r2 * c2)
    return (1 + s * r2 * c2) * out, out


def ladder(**drive: Any) -> Network:
    """The two sections as a network."""
    net = Network("Float gauge filter")
    net.add_voltage_source("Vin", "in", "0", **(drive or {"ac": 1}))
    net.add_resistor("R1", "in", "n1", R1)
    net.add_capacitor("C1", "n1", "0", C1)
    net.add_resistor("R2", "n1", "out", R2)
    net.add_capacitor("C2", "out", "0", C2)
    return net


def seen(node: str, exact: Any, other: Any, allowed: Any = None, axis: Any = F) -> Observed:
    """A node's curve beside the exact one, allowed to be off by rounding unless told otherwise."""
    exact, other = np.asarray(exact, complex), np.asarray(other, complex)
    slack = 1e-12 * np.abs(exact) + 1e-15 if allowed is None else np.broadcast_to(allowed, exact.shape)
    return Observed(f"v({node})", "ac", np.asarray(axis, float), (node, "0"), None, exact, other, slack)


def at_rest(node: str, exact: float, other: float) -> Observed:
    """A node's voltage at the operating point."""
    return Observed(
        f"v({node})", "operating point", np.zeros(1), (node, "0"), None,
        np.array([exact]), np.array([other]), np.array([1e-12]),
    )  # fmt: skip


def causes_of(net: Network, *curves: Observed, output: str = "out") -> tuple[Cause, ...]:
    """The causes found."""
    return find_causes(Circuit(net, output=(output,)), curves)


def the_one(causes: tuple[Cause, ...]) -> Cause:
    """The only cause, which explains all."""
    (cause,) = causes
    assert cause.explains == pytest.approx(1, abs=1e-12)
    assert cause.fits
    return cause


def of_output(spoilt: Any) -> tuple[Cause, ...]:
    """The causes for an output that should be that of the two sections."""
    return causes_of(ladder(), seen("out", two_sections()[1], spoilt))


# ---------------------------------------------------------------------- nothing to explain


def test_agreeing_curves_have_no_cause() -> None:
    """Where no curve differs there is nothing to explain."""
    n1, out = two_sections()
    assert causes_of(ladder(), seen("n1", n1, n1), seen("out", out, out * (1 + 1e-14))) == ()


# ---------------------------------------------------------------------- parts


@pytest.mark.parametrize("factor", [1e-12, 1e-6, 1e-3, 0.1, 0.93, 1.02, 4.7, 10.0, 1e3, 1e6])
@pytest.mark.parametrize("part", ["R1", "C1", "R2", "C2"])
def test_value_is_found_from_all_nodes(part: str, factor: float) -> None:
    """A part off by any factor is named with that factor, as the two-section formula has it."""
    values = {"r1": R1, "c1": C1, "r2": R2, "c2": C2}
    values[part.lower()] *= factor
    exact, other = two_sections(), two_sections(**values)
    causes = causes_of(ladder(), seen("n1", exact[0], other[0]), seen("out", exact[1], other[1]))
    found = {cause.part: cause for cause in causes if cause.kind == "part-value"}
    if factor < 1e-9 and part[0] == "R":
        # A resistor of 1e-8 ohm is a wire.
        assert ("part-shorted", part) in {(cause.kind, cause.part) for cause in causes}
    else:
        assert found[part].factor == pytest.approx(factor, rel=1e-6)
        assert found[part].explains == pytest.approx(1, abs=1e-9)


SLIPS = {
    1e3: "one SI prefix", 1e-3: "one SI prefix", 1e6: "two SI prefixes", 10.0: "one decade",
    0.01: "two decades", 2 * math.pi: "2 pi", 2.0: "off by two", math.sqrt(0.5): "root of two",
}  # fmt: skip


@pytest.mark.parametrize(("factor", "words"), SLIPS.items(), ids=str)
def test_usual_slips_are_named(factor: float, words: str) -> None:
    """Decades, prefixes, 2 pi and the root of two are told for what they are."""
    causes = of_output(two_sections(c1=C1 * factor)[1])
    cause = next(cause for cause in causes if cause.part == "C1")
    assert cause.factor == pytest.approx(factor)
    assert words in cause.says


def test_sentence_tells_both_values() -> None:
    """A changed value is told in numbers, with what it takes away."""
    causes = of_output(two_sections(r2=1.23 * R2)[1])
    cause = the_one(causes)
    assert "R2 acts as 57.81 kohm where the circuit has 47 kohm, 1.23 times as much" in cause.says
    assert "agree within what is allowed" in cause.says


def test_four_k_seven_read_as_four() -> None:
    """`4k7` read by SPICE as 4k, here 47 kohm as 40 kohm, is told as digits lost behind a letter."""
    cause = the_one(of_output(two_sections(r2=4e4)[1]))
    assert cause.factor == pytest.approx(40 / 47)
    net = ladder().with_values({"R2": 4.7e3})
    exact, other = two_sections(r2=4.7e3)[1], two_sections(r2=4e3)[1]
    assert "4k7" in the_one(causes_of(net, seen("out", exact, other))).says


def test_missing_capacitor() -> None:
    """C1 left out: 1/(1 + s (R1 + R2) C2)."""
    cause = the_one(of_output(1 / (1 + S * (R1 + R2) * C2)))
    assert (cause.kind, cause.part, cause.factor) == ("part-missing", "C1", None)


@pytest.mark.parametrize("link", [1e-3, 1e-7])
def test_shorted_resistor(link: float) -> None:
    """R2 as ngspice's silent 1 mohm, or as less: both capacitors at one node."""
    cause = the_one(of_output(two_sections(r2=link)[1]))
    assert (cause.kind, cause.part) == ("part-shorted", "R2")


def test_exchanged_resistors() -> None:
    """R1 and R2 in each other's place."""
    cause = the_one(of_output(two_sections(r1=R2, r2=R1)[1]))
    assert (cause.kind, cause.part) == ("parts-exchanged", "R1 R2")


def test_resistor_and_capacitor_exchanged() -> None:
    """A low-pass wired as a high-pass: s R C/(1 + s R C)."""
    net = Network("Leak listener")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", R1)
    net.add_capacitor("C1", "out", "0", C1)
    x = S * R1 * C1
    cause = the_one(causes_of(net, seen("out", 1 / (1 + x), x / (1 + x))))
    assert (cause.kind, cause.part) == ("parts-exchanged", "R1 C1")


def test_extra_resistor_at_an_inner_node() -> None:
    """22 kohm from n1 to ground: (1 + R1/R + ...) in the denominator."""
    extra = 2.2e4
    load = 1 / extra + S * C1 + 1 / (R2 + 1 / (S * C2))
    n1 = 1 / (1 + R1 * load)
    exact = two_sections()
    causes = causes_of(ladder(), seen("n1", exact[0], n1), seen("out", exact[1], n1 / (1 + S * R2 * C2)))
    cause = the_one(causes)
    assert (cause.kind, cause.part, cause.node, cause.unit) == ("part-extra", None, "n1", "ohm")
    assert cause.amount == pytest.approx(extra, rel=1e-9)


def test_load_of_a_divider_from_its_operating_point() -> None:
    """Two 10 kohm from 5 V, loaded with 1 Mohm: 5 V x (R || RL)/(R + R || RL)."""
    net = Network("Supply monitor")
    net.add_voltage_source("Vin", "in", "0", dc=5)
    net.add_resistor("R1", "in", "out", 1e4)
    net.add_resistor("R2", "out", "0", 1e4)
    joined = 1 / (1 / 1e4 + 1 / 1e6)
    causes = causes_of(net, at_rest("in", 5, 5), at_rest("out", 2.5, 5 * joined / (1e4 + joined)))
    load = next(cause for cause in causes if cause.kind == "load")
    assert load.amount == pytest.approx(1e6, rel=1e-6)
    # One voltage at dc cannot tell a load from either resistor being off.
    assert {cause.part for cause in causes if cause.kind == "part-value"} >= {"R1", "R2"}
    assert all(cause.tied for cause in causes)


# ---------------------------------------------------------------------- sources


def test_source_scale() -> None:
    """An rms value where a peak is meant: every curve 1/sqrt 2 of what it should be."""
    n1, out = two_sections()
    k = math.sqrt(0.5)
    cause = the_one(causes_of(ladder(), seen("n1", n1, k * n1), seen("out", out, k * out)))
    assert (cause.kind, cause.part) == ("source-scale", "Vin")
    assert cause.factor == pytest.approx(k)
    assert "rms" in cause.says


def test_one_of_two_sources_scaled() -> None:
    """Superposition: V1 through R1 and V2 through R2 into C; V2 three times too great."""
    net = Network("Two sensors on one line")
    net.add_voltage_source("V1", "a", "0", ac=1)
    net.add_voltage_source("V2", "b", "0", ac=0.5)
    net.add_resistor("R1", "a", "out", R1)
    net.add_resistor("R2", "b", "out", R2)
    net.add_capacitor("C1", "out", "0", C1)
    y = 1 / R1 + 1 / R2 + S * C1
    exact, other = (1 / R1 + 0.5 / R2) / y, (1 / R1 + 1.5 / R2) / y
    causes = causes_of(net, seen("out", exact, other))
    cause = next(cause for cause in causes if cause.part == "V2")
    assert cause.kind == "source-scale"
    assert cause.factor == pytest.approx(3)


def test_source_resistance_shows_at_the_driven_node() -> None:
    """600 ohm behind the source: V(in) = 1/(1 + 600 Y) with Y = 1/(R1 + 1/sC) of a single section."""
    net = Network("Flow meter")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", R1)
    net.add_capacitor("C1", "out", "0", C1)
    v_in = 1 / (1 + 600 / (R1 + 1 / (S * C1)))
    share = 1 / (1 + S * R1 * C1)
    cause = the_one(causes_of(net, seen("in", np.ones(61), v_in), seen("out", share, v_in * share)))
    assert (cause.kind, cause.part, cause.unit) == ("source-impedance", "Vin", "ohm")
    assert cause.amount == pytest.approx(600, rel=1e-9)


def test_coupling_capacitor_behind_the_source() -> None:
    """100 nF in series: the same with 1/(s C)."""
    net = Network("Flow meter")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", R1)
    net.add_resistor("R2", "out", "0", R2)
    v_in = 1 / (1 + 1 / (S * 1e-7) / (R1 + R2))
    share = R2 / (R1 + R2)
    curves = seen("in", np.ones(61), v_in), seen("out", np.full(61, share), v_in * share)
    cause = the_one(causes_of(net, *curves))
    assert (cause.kind, cause.unit) == ("source-impedance", "F")
    assert cause.amount == pytest.approx(1e-7, rel=1e-9)


def test_current_of_the_source_tells_too() -> None:
    """Of i(Vin) alone, -1/(R + 1/sC), a resistor 20 % off is found."""
    net = Network("Flow meter")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", R1)
    net.add_capacitor("C1", "out", "0", C1)
    exact, other = (-1 / (r + 1 / (S * C1)) for r in (R1, 1.2 * R1))
    curve = Observed("i(vin)", "ac", F, (), "Vin", exact, other, 1e-12 * np.abs(exact))
    causes = causes_of(net, curve)
    found = next(cause for cause in causes if cause.part == "R1")
    assert found.factor == pytest.approx(1.2)


# ---------------------------------------------------------------------- results


def phase(h: Complex) -> Any:
    """The phase in radians."""
    return np.angle(h)


MISTAKES: dict[str, tuple[str, Callable[[Complex], Complex]]] = {
    "minus": ("sign", lambda h: -h),
    "conjugate": ("sign", lambda h: h.conjugate()),
    "degrees read as radians": ("units", lambda h: np.abs(h) * np.exp(1j * np.degrees(phase(h)))),
    "radians read as degrees": ("units", lambda h: np.abs(h) * np.exp(1j * np.radians(phase(h)))),
    "decibels for magnitude": ("units", lambda h: 20 * np.log10(np.abs(h)) * np.exp(1j * phase(h))),
    "decibels, no phase": ("units", lambda h: 20 * np.log10(np.abs(h)) + 0j),
    "magnitude, no phase": ("units", lambda h: np.abs(h) + 0j),
    "10 log for 20 log": ("units", lambda h: np.sqrt(np.abs(h)) * np.exp(1j * phase(h))),
}


@pytest.mark.parametrize(("kind", "mistake"), MISTAKES.values(), ids=MISTAKES.keys())
def test_misread_results(kind: str, mistake: Callable[[Complex], Complex]) -> None:
    """Signs, phases and decibels gone wrong are told as such."""
    assert the_one(of_output(mistake(two_sections()[1]))).kind == kind


def test_sign_of_one_curve_alone() -> None:
    """One probe the other way round is told of that curve, not of the source."""
    n1, out = two_sections()
    cause = the_one(causes_of(ladder(), seen("n1", n1, n1), seen("out", out, -out)))
    assert (cause.kind, cause.factor) == ("sign", -1)
    assert "v(out) is" in cause.says


@pytest.mark.parametrize("times", [2 * math.pi, 1 / (2 * math.pi), 1e3])
def test_wrong_unit_of_the_frequencies(times: float) -> None:
    """rad/s or kHz for Hz: every time constant looks changed alike, which one part cannot do."""
    cause = the_one(of_output(two_sections(S * times)[1]))
    assert cause.kind == "units"
    assert "frequencies" in cause.says


def test_another_node_saved() -> None:
    """The output's column holds V(n1)."""
    cause = the_one(of_output(two_sections()[0]))
    assert (cause.kind, cause.part) == ("node", "n1")


def test_two_columns_exchanged() -> None:
    """V(n1) and V(out) under each other's name."""
    n1, out = two_sections()
    cause = the_one(causes_of(ladder(), seen("n1", n1, out), seen("out", out, n1)))
    assert cause.kind == "node"
    assert "v(n1) is the voltage of out" in cause.says
    assert "v(out) is the voltage of n1" in cause.says


# ---------------------------------------------------------------------- everywhere at once


def test_temperature() -> None:
    """Resistors of 3900 ppm/K (platinum, IEC 60751) 60 K warmer than meant."""
    net = Network("Level gauge")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "n1", R1, tempco="3900ppm")
    net.add_capacitor("C1", "n1", "0", C1)
    net.add_resistor("R2", "n1", "out", R2, tempco="3900ppm")
    net.add_capacitor("C2", "out", "0", C2)
    hot = 1 + 3.9e-3 * 60
    causes = causes_of(net, seen("out", two_sections()[1], two_sections(r1=R1 * hot, r2=R2 * hot)[1]))
    cause = the_one(causes)
    assert (cause.kind, cause.unit) == ("temperature", "K")
    assert cause.amount == pytest.approx(60, rel=1e-6)


def test_shunts_of_the_simulator() -> None:
    """`rshunt=1e12` on a ladder of gigohms: 1 Tohm from every node to ground, by the chain matrix."""
    r, c, shunt = 1e9, 1e-12, 1e12

    def by_hand(extra: float) -> tuple[Complex, Complex]:
        y = S * c + extra
        n1 = 1 / (1 + r * (y + y / (1 + r * y)))
        return n1, n1 / (1 + r * y)

    net = Network("Insulation monitor")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "n1", r)
    net.add_capacitor("C1", "n1", "0", c)
    net.add_resistor("R2", "n1", "out", r)
    net.add_capacitor("C2", "out", "0", c)
    exact, other = by_hand(0.0), by_hand(1 / shunt)
    cause = the_one(causes_of(net, seen("n1", exact[0], other[0]), seen("out", exact[1], other[1])))
    assert cause.kind == "simulator"
    assert cause.amount == pytest.approx(shunt, rel=1e-3)


# ---------------------------------------------------------------------- other kinds of part


def test_gain_of_a_buffer() -> None:
    """Two sections with a buffer between, whose gain is 0.98 in place of 1."""
    net = Network("Sensor with a buffer")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "a", R1)
    net.add_capacitor("C1", "a", "0", C1)
    net.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 1.0)
    net.add_resistor("R2", "b", "out", R2)
    net.add_capacitor("C2", "out", "0", C2)
    first, second = 1 / (1 + S * R1 * C1), 1 / (1 + S * R2 * C2)
    causes = causes_of(net, seen("a", first, first), seen("out", first * second, 0.98 * first * second))
    cause = the_one(causes)
    assert (cause.kind, cause.part) == ("part-value", "E1")
    assert cause.factor == pytest.approx(0.98)


def test_inductor() -> None:
    """A series L, R into C: 1/(1 + s R C + s^2 L C); L half."""
    net = Network("Pump supply")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "a", 50.0)
    net.add_inductor("L1", "a", "out", 1e-3)
    net.add_capacitor("C1", "out", "0", C1)
    exact, other = (1 / (1 + S * 50 * C1 + S * S * ind * C1) for ind in (1e-3, 5e-4))
    cause = the_one(causes_of(net, seen("out", exact, other)))
    assert (cause.kind, cause.part) == ("part-value", "L1")
    assert cause.factor == pytest.approx(0.5, rel=1e-6)


# ---------------------------------------------------------------------- ties


def test_equal_causes_stand_together() -> None:
    """Of one RC section's output R and C cannot be told apart; nor would any voltage tell them."""
    net = Network("Float gauge")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", R1)
    net.add_capacitor("C1", "out", "0", C1)
    causes = causes_of(net, seen("out", 1 / (1 + S * R1 * C1), 1 / (1 + 1.3 * S * R1 * C1)))
    values = {cause.part: cause.factor for cause in causes if cause.kind == "part-value"}
    assert values == {"R1": pytest.approx(1.3), "C1": pytest.approx(1.3)}
    assert all(cause.tied for cause in causes)
    assert "cannot tell" in causes[0].says


def test_measurement_that_tells_a_tie_apart() -> None:
    """Of the output alone 3 kohm more at R1 may be the source's: V(in) would tell, and by how much."""
    causes = of_output(two_sections(r1=R1 + 3e3)[1])
    kinds = {cause.kind: k for k, cause in enumerate(causes)}
    assert set(kinds) == {"part-value", "source-impedance"}
    telling = causes[0].telling
    assert telling is not None
    assert telling.node == "in"
    assert telling.frequency is not None
    s = 2j * math.pi * telling.frequency
    admittance = 1 / (R1 + 1 / (s * C1 + 1 / (R2 + 1 / (s * C2))))
    expected = {"part-value": 1.0, "source-impedance": 1 / (1 + 3e3 * admittance)}
    for kind, k in kinds.items():
        assert telling.predicted[k] == pytest.approx(expected[kind], rel=1e-6)
    assert "v(in)" in causes[0].says


# ---------------------------------------------------------------------- no guessing


def test_two_faults_are_unexplained() -> None:
    """R1 three times, C2 a third and the output's phase off: no single cause is made up for it."""
    other = two_sections(r1=3 * R1, c2=C2 / 3)[1] * np.exp(0.4j * np.sin(np.log(F)))
    (cause,) = of_output(other)
    assert (cause.kind, cause.part, cause.factor) == ("unexplained", None, None)
    assert 0 <= cause.explains < 0.9
    assert "No single change" in cause.says


def test_glitch_is_unexplained() -> None:
    """One wild point of 61 is no part's doing."""
    other = two_sections()[1].copy()
    other[30] *= 1.5
    (cause,) = of_output(other)
    assert cause.kind == "unexplained"


def test_share_explained_is_as_documented() -> None:
    """Explains = 1 - sum w |other - predicted|^2 / sum w |other - exact|^2, w relative to both values."""
    out = two_sections()[1]
    ripple = 1 + 0.03 * np.sin(3 * np.log(F))
    other = 0.7 * out * ripple
    cause = next(c for c in of_output(other) if c.kind == "source-scale")
    weight = 1 / (np.abs(out) ** 2 + np.abs(other) ** 2)
    left = np.sum(weight * np.abs(other - (cause.factor or 0) * out) ** 2)
    assert cause.explains == pytest.approx(1 - left / np.sum(weight * np.abs(other - out) ** 2), rel=1e-6)
    assert not cause.fits
    assert 0.9 < cause.explains < 1
    assert "what is left is more than allowed" in cause.says


@pytest.mark.parametrize("seed", range(5))
def test_measured_data_of_few_digits(seed: int) -> None:
    """A capacitor 20 % off is named in data of three digits above a noise floor of 1 mV."""
    rng = np.random.default_rng(seed)
    exact, other = two_sections(), two_sections(c2=1.2 * C2)
    curves = []
    for node, a, b in zip(("n1", "out"), exact, other, strict=True):
        noise = (np.abs(b) * 2e-3 + 1e-3) / 3
        measured = b + noise * (rng.standard_normal(61) + 1j * rng.standard_normal(61)) / math.sqrt(2)
        curves.append(seen(node, a, measured, np.abs(a) * 2e-3 + 1e-3))
    causes = causes_of(ladder(), *curves)
    found = next(cause for cause in causes if cause.part == "C2")
    assert found.factor == pytest.approx(1.2, rel=0.02)
    assert len(causes) <= 2  # and as much more capacitance at the output


# ---------------------------------------------------------------------- with a comparison


def test_causes_of_a_comparison() -> None:
    """Results handed in as curves are compared, and the comparison gets its causes."""
    axis = np.asarray(F, float)
    curves = Curves("bench.raw", (Curve("v(out)", "ac", axis, two_sections(c1=10 * C1)[1], "V"),))
    comparison = explained(compare(Circuit(ladder(), output=("out",)), curves))
    assert comparison.verdict == "differ"
    assert (comparison.causes[0].kind, comparison.causes[0].part) == ("part-value", "C1")


def test_agreeing_comparison_has_no_causes() -> None:
    """A comparison that agrees stays as it is."""
    curves = Curves("bench.raw", (Curve("v(out)", "ac", F, two_sections()[1], "V"),))
    comparison = compare(Circuit(ladder(), output=("out",)), curves)
    assert explained(comparison) is comparison


NOISE = np.sqrt(4 * 1.380649e-23 * 300.15 * R1) / np.abs(1 + S * R1 * C1)  # of one section, Nyquist's formula


@pytest.mark.parametrize(
    ("other", "kind", "amount"),
    [(NOISE * math.sqrt(373.15 / 300.15), "temperature", 73.0), (NOISE**2, "units", None)],
    ids=["hot", "squared"],
)
def test_noise_of_another_temperature(other: Any, kind: str, amount: float | None) -> None:
    """Noise goes with the root of the temperature; a density in V^2/Hz is told as one."""
    seen_noise = Observed("onoise_spectrum", "noise", F, ("out", "0"), None, NOISE, other, 1e-9 * NOISE)
    (cause,) = noise_causes(Circuit(ladder()), [seen_noise])
    assert cause.kind == kind
    assert cause.fits
    assert cause.amount == (None if amount is None else pytest.approx(amount))


# ---------------------------------------------------------------------- size and bad input


def long_ladder(sections: int, **changed: float) -> Network:
    """Equal sections but for those changed."""
    net = Network("Logger line")
    net.add_voltage_source("Vin", "n0", "0", ac=1)
    for k in range(1, sections + 1):
        net.add_resistor(f"R{k}", f"n{k - 1}", f"n{k}", changed.get(f"R{k}", 1e3 + 10 * k))
        net.add_capacitor(f"C{k}", f"n{k}", "0", changed.get(f"C{k}", 1e-10))
    return net


def held(net: Network, faulty: Network, nodes: list[str]) -> list[Observed]:
    """The curves of two networks at some nodes."""
    exact, other = net.response(F, nodes), faulty.response(F, nodes)
    return [seen(node, exact[k], other[k]) for k, node in enumerate(nodes)]


def test_fifty_parts_take_less_than_two_seconds() -> None:
    """A network of 50 parts, all its nodes saved."""
    net, faulty = long_ladder(25), long_ladder(25, C13=1e-7)
    curves = held(net, faulty, list(net.nodes[1:]))
    begun = time.perf_counter()
    causes = causes_of(net, *curves, output="n25")
    seconds = time.perf_counter() - begun

    assert causes[0].part == "C13"
    assert causes[0].factor == pytest.approx(1000)
    assert seconds < 2


def test_large_network_is_narrowed_down() -> None:
    """Of 2400 parts the one that is off is found between the nodes that were saved."""
    net, faulty = long_ladder(1200), long_ladder(1200, R500=5e5)
    causes = causes_of(net, *held(net, faulty, [f"n{k}" for k in range(75, 1201, 75)]), output="n1200")
    cause = the_one(causes)
    assert (cause.kind, cause.part) == ("part-value", "R500")
    assert cause.factor == pytest.approx(5e5 / 6e3)


@pytest.mark.parametrize("node", ["nowhere", "N1"])
def test_unknown_node_is_refused(node: str) -> None:
    """A curve of a node the network does not have is an error that names it."""
    with pytest.raises(CircuitError, match=node):
        causes_of(ladder(), seen(node, np.ones(61), np.zeros(61)))


def test_uneven_lengths_are_refused() -> None:
    """Axis and values of different lengths are an error."""
    with pytest.raises(CircuitError, match="shapes"):
        causes_of(ladder(), seen("out", np.ones(60), np.zeros(60)))
