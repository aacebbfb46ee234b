"""Why a hand value is off: what is told is what independent reckoning says the formula leaves out."""

from __future__ import annotations

import math
from itertools import pairwise

import mpmath
import pytest

import rcnet
from rcnet.circuit import Circuit, parse_circuit_file
from rcnet.claims import evaluate, reasons
from rcnet.claims.reasons import Reason, why_off
from rcnet.resources import starters

R, C = 10e3, 15e-9
F1 = 1 / (2 * math.pi * R * C)
SOURCE = '[sources.Vin]\nnodes = "in 0"\nac = 1\n'


def circuit(parts: str, claim: str, source: str = SOURCE) -> Circuit:
    """A circuit with one claim; parts as lines separated by semicolons."""
    lines = "\n".join(line.strip() for line in parts.split(";"))
    text = f'title = "Flow meter"\noutput = "out"\n[parts]\n{lines}\n{source}[[claims]]\n{claim}\n'
    return parse_circuit_file(text, "flow.rc.toml")


def why(whole: Circuit, hand: float | None = None) -> Reason | None:
    """The reason for the first claim, its hand value taken from its formula unless given."""
    claim = whole.claims[0]
    exact = evaluate(whole.network, claim.measure.name, " ".join(claim.of) or None, claim.options)
    if hand is None:
        assert claim.hand is not None
        hand = claim.hand.evaluate(whole.network.values)
    return why_off(whole, claim, hand, exact)


def starter(name: str, says: str) -> Reason | None:
    """The reason for the claim of a starter circuit that says so."""
    whole = rcnet.load(starters()[name])
    (claim,) = (each for each in whole.claims if each.says.startswith(says))
    exact = evaluate(whole.network, claim.measure.name, " ".join(claim.of) or None, claim.options)
    assert claim.hand is not None
    return why_off(whole, claim, claim.hand.evaluate(whole.network.values), exact)


def ladder(count: int) -> str:
    """Equal low-pass sections wired straight one to the next."""
    nodes = ["in", *(f"n{k}" for k in range(1, count)), "out"]
    rows = [f'R{k} = "{a} {b} 10k"; C{k} = "{b} 0 15n"' for k, (a, b) in enumerate(pairwise(nodes), 1)]
    return "; ".join(rows)


# ---------------------------------------------------------------------- stages that load each other


def test_two_sections_load_each_other() -> None:
    """The buffered pair's corner is sqrt(sqrt(2) - 1) f1; the pair's own, 0.374239154338852 f1."""
    got = why(circuit(ladder(2), 'measure = "cutoff"\nat_least = 1\nhand = "sqrt(sqrt(2)-1)/(2*pi*R1*C1)"'))
    assert got is not None
    assert (got.kind, got.nodes, got.parts) == ("loading", ("n1",), ())
    assert got.remaining < 1e-9
    # One section's input impedance R + 1/sC over the other's output impedance R/(1 + sRC), at the corner.
    x = 0.374239154338852j
    ratio = abs((1 + 1 / x) * (1 + x))
    assert f"only {ratio:.3g} times stage 1's output impedance" in got.says
    assert got.says.startswith("stage 2 loads stage 1: at the corner its input impedance")
    assert f"{math.sqrt(math.sqrt(2) - 1) * F1:.1f} Hz" in got.says


def test_three_sections_load_each_other() -> None:
    """The starter's formula is that of buffered sections: 0.509824528533959 f1 for 0.194286000459512 f1."""
    got = starter("unbuffered-cascade", "Corner at 200 Hz")
    assert got is not None
    assert (got.kind, got.nodes, got.remaining < 1e-9) == ("loading", ("a", "b"), True)
    assert "each stage loads the one before it" in got.says
    assert f"{0.509824528533959 * F1:.1f} Hz" in got.says
    # The second and third section in a row, seen over the first one's output impedance.
    x = 0.194286000459512j
    third = 1 + 1 / x
    second = 1 + 1 / (x + 1 / third)
    one = abs(second * (1 + x))
    # The third section over what the first two look like from behind.
    two = abs(third / (1 / (x + 1 / (1 + 1 / (1 + x)))))
    assert f"{min(one, two):.3g} times" in got.says


def test_one_buffer_is_told_where_one_is_enough() -> None:
    """A formula that parts only the first of three sections from the others needs one buffer."""
    parts = ladder(3)
    x = mpmath.findroot(lambda w: abs((1 + 1j * w) * (1 + 3j * w - w * w)) ** 2 - 2, mpmath.mpf("0.33"))
    got = why(circuit(parts, 'measure = "cutoff"\nat_least = 1'), float(x) * F1)
    assert got is not None
    assert (got.kind, got.nodes) == ("loading", ("n1",))
    assert got.remaining < 1e-9


def test_band_pass_whose_formula_takes_each_section_alone() -> None:
    """Its two sections load each other, and the formula takes the distance of their own corners besides."""
    got = starter("band-pass", "Wide enough")
    assert got is not None
    assert (got.kind, got.nodes) == ("loading", ("a",))
    assert got.remaining < 1e-9
    lower, upper = 1 / (2 * math.pi * 15e3 * 100e-9), 1 / (2 * math.pi * 10e3 * 10e-9)
    assert f"{(upper - lower) / 1000:.3f} kHz" in got.says
    # 10k + 1/sC2 over 15k parallel to C1, at the geometric mean of the corners.
    s = 2j * math.pi * math.sqrt(lower * upper)
    ratio = abs((10e3 + 1 / (s * 10e-9)) * (1 / 15e3 + s * 100e-9))
    assert f"{ratio:.3g} times stage 1's output impedance" in got.says


# ---------------------------------------------------------------------- source, load, single parts


def test_a_sender_with_a_resistance_of_its_own() -> None:
    """The starter's corner forgets Rsender; an ideal source leaves what the load of 1 Mohm does, 1 %."""
    got = starter("level-sender", "Corner at 4 Hz")
    assert got is not None
    assert (got.kind, got.parts, got.nodes) == ("source", ("Rsender",), ())
    # R1 C1 with 1 Mohm beside C1, Cload too small to show: 1/(2 pi C1 (R1 par Rload)).
    hand, ideal = 1 / (2 * math.pi * 10e3 * 3.3e-6), (1 / 10e3 + 1 / 1e6) / (2 * math.pi * 3.3e-6)
    assert got.remaining == pytest.approx(1 - hand / ideal, rel=1e-2)
    assert f"{ideal:.3f} Hz" in got.says
    assert "0.99 %" in got.says


def test_a_loaded_divider() -> None:
    """A divider of 10k and 10k with 10k behind gives a third, not a half; the load sees 5k."""
    parts = 'R1 = "in out 10k"; R2 = "out 0 10k"; Rload = "out 0 10k"'
    got = why(circuit(parts, 'measure = "dc_gain"\nat_least = 0\nhand = "R2/(R1 + R2)"'))
    assert got is not None
    assert (got.kind, got.parts) == ("load", ("Rload",))
    assert got.remaining < 1e-12
    assert "at dc it is only 2 times the output impedance" in got.says
    assert "would be 0.5, which closes 100 % of the gap" in got.says


def test_several_loads_are_taken_away_together() -> None:
    """The probe's capacitor alone leaves a tenth of the gap, its resistor alone nine: both are told."""
    parts = 'R1 = "in out 10k"; C1 = "out 0 10n"; Rp = "out 0 20k"; Cp = "out 0 10n"'
    got = why(circuit(parts, 'measure = "cutoff"\nat_least = 1\nhand = "1/(2*pi*R1*C1)"'))
    assert got is not None
    assert (got.kind, set(got.parts)) == ("load", {"Rp", "Cp"})
    assert got.remaining < 1e-9


def test_a_part_left_out_within() -> None:
    """A damping resistor in series with the shunt capacitor: the formula takes it for a wire."""
    parts = 'R1 = "in out 10k"; C1 = "out x 100n"; R2 = "x 0 2k"'
    got = why(circuit(parts, 'measure = "cutoff"\nat_least = 1\nhand = "1/(2*pi*R1*C1)"'))
    assert got is not None
    assert (got.kind, got.parts, got.remaining < 1e-9) == ("part", ("R2",), True)
    assert "with R2 shorted, the cutoff would be 159.2 Hz" in got.says


def test_a_current_source_with_a_resistance_beside_it() -> None:
    """A current through 1k, of which 4k beside the source takes a fifth."""
    source = '[sources.Iloop]\nnodes = "0 out"\nac = 1\n'
    parts = 'R1 = "out 0 1k"; Rs = "out 0 4k"'
    got = why(circuit(parts, 'measure = "dc_gain"\nat_least = 0\nhand = "R1"', source))
    assert got is not None
    assert got.parts == ("Rs",)
    assert got.kind in ("source", "load")
    assert got.remaining < 1e-12


def test_two_parts_where_one_is_not_enough() -> None:
    """A formula that knows neither the series resistor of the capacitor nor the leak beside it."""
    parts = 'R1 = "in out 10k"; R3 = "out 0 20k"; C1 = "out x 100n"; R2 = "x 0 8k"'
    hand = -20 * math.log10(abs(1 + 2j * math.pi * 100 * 10e3 * 100e-9))
    named = 'hand = "0*R1*C1"'
    got = why(circuit(parts, f'measure = "gain"\nat = "100 Hz"\nat_most = 0\n{named}'), hand)
    assert got is not None
    assert set(got.parts) == {"R2", "R3"}
    assert got.remaining < 1e-9
    assert "without R3 and with R2 shorted" in got.says


def test_formula_of_an_option_part() -> None:
    """The power of one resistor, the other forgotten: V^2/R1 instead of a quarter of it."""
    source = '[sources.Vin]\nnodes = "in 0"\nac = 1\ndc = "10 V"\n'
    whole = circuit(
        'R1 = "in out 1k"; R2 = "out 0 1k"',
        'measure = "dissipation"\npart = "R1"\nat_most = 1\nhand = "100/R1"',
        source,
    )
    got = why(whole)
    assert got is not None
    assert (got.kind, got.parts) == ("part", ("R2",))


# ---------------------------------------------------------------------- another measure

# claim -> (what is told, the formula's value from outside), all of two equal sections, in units of RC
OTHER = {
    "slowest mode": ('measure = "cutoff"\nat_least = 1', "slowest natural mode", 0.3819660112501 * F1),
    "Elmore's corner": ('measure = "cutoff"\nat_least = 1', "Elmore delay", F1 / 3),
    "2.2 Elmore": ('measure = "rise_time"\nat_most = 1', "Elmore delay", math.log(9) * 3 * R * C),
    "slowest time constant": (
        'measure = "settling_time"\nband = "1 %"\nat_most = 1',
        "slowest time constant",
        math.log(100) * 2.618033988750 * R * C,
    ),
    "asymptote": (
        'measure = "attenuation"\nat = "10 kHz"\nat_least = 1',
        "high frequencies",
        40 * math.log10(10e3 / F1),
    ),
    "phase of another turn": ('measure = "phase"\nat = "5 kHz"\nat_most = 0', "another turn", None),
    "dc resistance": ('measure = "output_impedance"\nat = "1 kHz"\nat_most = 1e6', "at dc", 2 * R),
}


@pytest.mark.parametrize("case", OTHER)
def test_another_measure(case: str) -> None:
    """A formula that states a related measure of the same network is recognised as that."""
    claim, words, hand = OTHER[case]
    whole = circuit(ladder(2), claim)
    if hand is None:
        x = 1j * 5e3 / F1
        hand = math.degrees(-mpmath.arg(1 + 3 * x + x * x)) + 360
    got = why(whole, hand)
    assert got is not None
    assert got.kind == "other-measure"
    assert words in got.says
    assert (got.nodes, got.parts) == ((), ())


# ---------------------------------------------------------------------- nothing to say


@pytest.mark.parametrize("digits", [4, 6, 15])
def test_a_formula_right_to_its_digits(digits: int) -> None:
    """A factor written with four digits is right; there is no gap to explain."""
    factor = float(f"{0.374239154338852:.{digits}g}")
    got = why(circuit(ladder(2), f'measure = "cutoff"\nat_least = 1\nhand = "{factor!r}/(2*pi*R1*C1)"'))
    assert got is None


WRONG = {
    "a slip of ten": "10/(2*pi*R1*C1*R2*C2)*R1*C1",
    "two pi forgotten": "1/(R1*C1)*3",
    "far too low": "0.0007/(R1*C1)",
}


@pytest.mark.parametrize("case", WRONG)
def test_a_wrong_formula_that_nothing_explains(case: str) -> None:
    """Where no simplification comes near, nothing is guessed."""
    assert why(circuit(ladder(2), f'measure = "cutoff"\nat_least = 1\nhand = "{WRONG[case]}"')) is None


def test_a_change_that_closes_little_of_the_gap_is_not_told() -> None:
    """Shorting Rs moves the corner by a tenth; the hand value lies twice as far off again."""
    parts = 'Rs = "in a 1k"; R1 = "a out 10k"; C1 = "out 0 15n"'
    whole = circuit(parts, 'measure = "cutoff"\nat_least = 1')
    assert why(whole, F1 * 1.1) is None
    told = why(whole, F1)
    assert told is not None
    assert told.parts == ("Rs",)


def test_large_networks_are_left_alone() -> None:
    """Sixty parts are the most."""
    claim = 'measure = "cutoff"\nat_least = 1'
    assert why(circuit(ladder(30), claim), 12345.0) is None
    assert reasons.MOST_PARTS == 60


@pytest.mark.parametrize("hand", [math.nan, math.inf, 0.0])
def test_hand_values_that_are_no_numbers(hand: float) -> None:
    """Nothing is said of nan, infinity or zero, and nothing raised."""
    assert why(circuit(ladder(2), 'measure = "cutoff"\nat_least = 1'), hand) is None


@pytest.mark.parametrize("measure", ["cutoff", "rise_time"])
def test_the_effort_is_bounded(measure: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ten sections and a formula nothing explains: some hundreds of measures at most, fewer taken in time."""
    asked = 0

    def counted(*arguments: object) -> float:
        nonlocal asked
        asked += 1
        return evaluate(*arguments)  # type: ignore[arg-type]

    whole = circuit(ladder(10), f'measure = "{measure}"\nat_least = 0')
    monkeypatch.setattr(reasons, "evaluate", counted)
    assert why(whole, 123.456) is None
    assert 3 < asked <= (200 if measure == "cutoff" else 50)


def test_the_circuit_is_not_changed() -> None:
    """Everything is tried on copies."""
    whole = circuit(ladder(2), 'measure = "cutoff"\nat_least = 1\nhand = "sqrt(sqrt(2)-1)/(2*pi*R1*C1)"')
    before = tuple(whole.network.parts)
    assert why(whole) is not None
    assert tuple(whole.network.parts) == before


# ---------------------------------------------------------------------- networks with other parts


def test_couplings_and_sensing_sources_survive_the_changes() -> None:
    """Parts that others refer to are taken away with what refers to them, and nothing is raised."""
    parts = (
        'R1 = "in a 1k"; L1 = "a 0 1m"; L2 = "b 0 1m"; K1 = "L1 L2 0.9"; R2 = "b c 1k"; '
        'Vs = "x"; F1 = "0 out Vs 2"; R3 = "out 0 1k"; C3 = "out 0 1u"'
    ).replace('Vs = "x"; ', "")
    source = SOURCE + '[sources.Vs]\nnodes = "c 0"\ndc = 0\n'
    got = why(circuit(parts, 'measure = "gain"\nat = "1 kHz"\nat_most = 100', source), 77.7)
    assert got is None or got.remaining < 0.02


def test_a_node_held_by_another_supply_is_no_stage() -> None:
    """What a dead voltage source holds is ground to the signal: no buffer is proposed there."""
    parts = 'R1 = "in a 10k"; C1 = "a 0 15n"; Rb = "a supply 1M"; R2 = "a out 10k"; C2 = "out 0 15n"'
    source = SOURCE + '[sources.Vsupply]\nnodes = "supply 0"\ndc = 5\n'
    whole = circuit(parts, 'measure = "cutoff"\nat_least = 1\nhand = "sqrt(sqrt(2)-1)/(2*pi*R1*C1)"', source)
    got = why(whole)
    assert got is not None
    assert (got.kind, got.nodes) == ("loading", ("a",))
    assert got.remaining == pytest.approx(0.0, abs=0.01)
