"""What parts bear, held against closed forms, and what is dangerous to touch."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
import scipy.integrate

from rcnet.check import check
from rcnet.circuit import Circuit, Network, Seen, parse_circuit_file
from rcnet.claims.caution import caution_findings
from rcnet.claims.ratings import Stress, rating_findings, stress
from rcnet.claims.strain import Strain, most_volts

SINE = 'sine = { amplitude = "10 V", frequency = "1 kHz" }'
SQUARE = 'square = { low = "-5 V", high = "5 V", frequency = "10 kHz" }'


def circuit(parts: str, drive: str, more: str = "") -> Circuit:
    """A circuit driven at node `in`; parts as lines separated by semicolons."""
    lines = "\n".join(line.strip() for line in parts.split(";"))
    text = (
        f'title = "Pump station"\noutput = "in"\n[parts]\n{lines}\n'
        f'[sources.Vin]\nnodes = "in 0"\nac = 1\n{drive}\n{more}'
    )
    return parse_circuit_file(text, "pump.rc.toml")


def borne(parts: str, drive: str, part: str, more: str = "") -> Stress:
    """What one part bears."""
    (found,) = (each for each in stress(circuit(parts, drive, more)) if each.part == part)
    return found


def codes(seen: list[Seen]) -> list[str]:
    """The codes of what is told."""
    return [each.code for each in seen]


# ---------------------------------------------------------------------- nominal values


def test_power_at_dc() -> None:
    """A divider of two equal resistors at 10 V: a quarter of 100 V^2 over 1 kohm in each."""
    got = borne('R1 = "in out 1k 0.1W"; R2 = "out 0 1k"', 'dc = "10 V"', "R1")
    assert (got.quantity, got.rating, got.why) == ("power", 0.1, None)
    assert got.value == pytest.approx(0.025, rel=1e-12)
    assert got.share == pytest.approx(0.25, rel=1e-12)


# rc-facts of one RC under a square wave +-A, r = T/tau: mean square across R is V+^2 (1 - e^-r)/r with
# V+ = 2A/(1 + e^(-r/2)); across C A^2 (1 - (4/r) tanh(r/4)), its peak A tanh(r/4).
R, C, A, T = 1e3, 100e-9, 5.0, 1e-4
PERIODIC = {
    "power of R": ("R1", "0.1W", (2 * A / (1 + math.exp(-0.5))) ** 2 * (1 - math.exp(-1)) / R),
    "current of R": ("R1", "1A", math.sqrt((2 * A / (1 + math.exp(-0.5))) ** 2 * (1 - math.exp(-1))) / R),
    "current of C": ("C1", "1A", math.sqrt((2 * A / (1 + math.exp(-0.5))) ** 2 * (1 - math.exp(-1))) / R),
    "voltage of C": ("C1", "25V", A * math.tanh(0.25)),
    "voltage of R": ("R1", "25V", 2 * A / (1 + math.exp(-0.5))),
}


@pytest.mark.parametrize("case", PERIODIC)
def test_periodic_steady_state(case: str) -> None:
    """Mean power, rms current and peak voltage of an RC under a square wave with T = RC."""
    part, rating, expected = PERIODIC[case]
    ratings = {"R1": "", "C1": ""} | {part: rating}
    got = borne(
        f'R1 = "in out 1k {ratings["R1"]}"; C1 = "out 0 100n {ratings["C1"]}"', SQUARE + "\ndc = 0", part
    )
    assert got.value == pytest.approx(expected, rel=1e-9)


def test_ripple_current_beside_a_load() -> None:
    """A capacitor's rms current from the harmonics of a triangle: sum of (w n C |V_n|)^2 / 2."""
    points = 'points = { values = [[0, 0], ["1 ms", 10], ["2 ms", 0]], period = "2 ms" }'
    got = borne('R1 = "in out 100"; C1 = "out 0 1u 0.1A"; R2 = "out 0 1k"', points, "C1")

    def square(n: int) -> mpmath.mpf:
        s = 2j * mpmath.pi * n / mpmath.mpf("0.002")
        amplitude = 40 / (mpmath.pi * n) ** 2  # of a triangle from 0 to 10
        return (
            abs(s * mpmath.mpf("1e-6") / (1 + 100 * (s * mpmath.mpf("1e-6") + 0.001))) * amplitude
        ) ** 2 / 2

    expected = mpmath.sqrt(mpmath.nsum(lambda n: square(2 * int(n) + 1), [0, mpmath.inf], method="e"))
    assert got.quantity == "rms current"
    assert got.value == pytest.approx(float(expected), rel=1e-7)


def test_current_of_an_inductor() -> None:
    """In series with 100 ohm under 10 V at 1 kHz: 10/sqrt 2 over |100 + j 2 pi 1000 L|."""
    got = borne('L1 = "in out 10m 0.1A"; R1 = "out 0 100"', SINE, "L1")
    expected = 10 / math.sqrt(2) / abs(100 + 2j * math.pi * 1000 * 10e-3)
    assert got.value == pytest.approx(expected, rel=1e-9)


def test_the_dc_state_counts_beside_the_waveform() -> None:
    """A source with dc = 20 V and a wave of 10 V about zero: the greater of both."""
    got = borne('R1 = "in out 1k 1W"; R2 = "out 0 1k 25V"', SINE + '\ndc = "20 V"', "R2")
    assert got.value == pytest.approx(10.0, rel=1e-12)
    quiet = borne('R1 = "in out 1k 1W"; R2 = "out 0 1k 25V"', SINE, "R2")
    assert quiet.value == pytest.approx(5.0, rel=1e-12)


# ---------------------------------------------------------------------- changes that happen once


def test_peak_of_a_ringing_step() -> None:
    """A series RLC overshoots its step by exp(-zeta pi/sqrt(1 - zeta^2)), zeta = R/2 sqrt(C/L)."""
    got = borne(
        'R1 = "in a 10"; L1 = "a out 1m"; C1 = "out 0 1u 25V"', 'step = { from = 0, to = "10 V" }', "C1"
    )
    zeta = 5 * math.sqrt(1e-6 / 1e-3)
    assert got.value == pytest.approx(10 * (1 + math.exp(-zeta * math.pi / math.sqrt(1 - zeta**2))), rel=1e-6)


def test_peak_of_a_pulse_through_rc() -> None:
    """A triangle 0-10-0 V of twice the time constant: 10 (1 - u) with exp(-u) = 1/(2 - 1/e), 1 ms after
    the top.
    """
    got = borne(
        'R1 = "in out 1k"; C1 = "out 0 1u 25V"',
        'points = { values = [[0, 0], ["1 ms", 10], ["2 ms", 0]] }',
        "C1",
    )
    assert got.value == pytest.approx(10 * (1 - math.log(2 - math.exp(-1))), rel=1e-7)


def test_peak_of_two_exponentials() -> None:
    """A surge with two time constants through one RC, against scipy's integration of it."""
    there = 'from = 0, to = "100 V", time_constant = "1 us"'
    wave = f'exponential = {{ {there}, back_at = "20 us", back_time_constant = "50 us" }}'
    got = borne('R1 = "in out 1k"; C1 = "out 0 100n 63V"', wave, "C1")

    def drive(t: float) -> float:
        back = 1 - math.exp(-(t - 20e-6) / 50e-6) if t > 20e-6 else 0.0
        return 100 * (1 - math.exp(-t / 1e-6)) - 100 * back

    run = scipy.integrate.solve_ivp(
        lambda t, v: [(drive(t) - v[0]) / 1e-4], (0, 5e-4), [0.0], rtol=1e-10, atol=1e-10, max_step=1e-6
    )
    assert got.value == pytest.approx(float(run.y.max()), rel=1e-4)


def test_a_single_event_has_no_mean_power() -> None:
    """A step through a capacitor leaves nothing in R1 in the end; that it is too much at first is said."""
    parts = 'R1 = "in out 1k 0.05W"; C1 = "out 0 1u"'
    got = borne(parts, 'step = { from = 0, to = "10 V" }', "R1")
    assert got.value == pytest.approx(0.0, abs=1e-15)
    assert got.why is not None
    assert "goes up to 100 mW for a while" in got.why
    assert rating_findings(circuit(parts, 'step = { from = 0, to = "10 V" }')) == []


def test_power_that_lasts_after_a_step() -> None:
    """What a step leaves for ever counts as the mean: 10 V over two times 500 ohm, 50 mW in each."""
    parts = 'R1 = "in out 500 0.04W"; R2 = "out 0 500"'
    (found,) = rating_findings(circuit(parts, 'step = { from = 0, to = "10 V" }'))
    assert found.code == "over-rating"
    assert "50 mW" in found.message


# ---------------------------------------------------------------------- over the tolerances


def test_power_at_the_worst_corner() -> None:
    """R1 of a divider dissipates V^2 R1/(R1 + R2)^2: least R2 counts, and the better of R1's two ends."""
    parts = 'R1 = "in out 1k 10% 0.03W"; R2 = "out 0 2k 10%"'
    got = borne(parts, 'dc = "10 V"', "R1")
    corners = [100 * a / (a + b) ** 2 for a in (900, 1100) for b in (1800, 2200)]
    assert got.value == pytest.approx(100 * 1000 / 3000**2, rel=1e-12)
    assert got.low == pytest.approx(min(corners), rel=1e-9)
    assert got.high == pytest.approx(max(corners), rel=1e-9)
    assert got.method == "corners"


def test_temperature_widens_the_corner() -> None:
    """5000 ppm over 40 K take R2 up or down by a fifth beyond nothing else."""
    parts = 'R1 = "in out 1k"; R2 = "out 0 1k 5000ppm"; C2 = "out 0 1n 6V"'
    got = borne(parts, 'dc = "10 V"', "C2", "[conditions]\ntemperature = { from = 27, to = 67 }\n")
    assert got.high == pytest.approx(10 * 1.2 / 2.2, rel=1e-9)
    assert got.low == pytest.approx(10 * 0.8 / 1.8, rel=1e-9)


def test_a_balanced_bridge_is_not_taken_for_idle() -> None:
    """Nothing at the nominal values; at the corners 100 V (1.05 - 0.95)/(1.05 + 0.95) across the middle."""
    parts = 'R1 = "in a 1k 5%"; R2 = "a 0 1k 5%"; R3 = "in b 1k 5%"; R4 = "b 0 1k 5%"; C1 = "a b 1n 6V"'
    got = borne(parts, 'dc = "100 V"', "C1")
    assert got.value == pytest.approx(0.0, abs=1e-9)
    assert got.high == pytest.approx(5.0, rel=1e-9)
    assert got.share == pytest.approx(5 / 6, rel=1e-9)


def test_far_below_the_rating_no_corner_is_looked_at() -> None:
    """A tenth of the rating and tolerances of a few per cent need no search."""
    got = borne('R1 = "in out 1k 5%"; R2 = "out 0 1k 5% 1W"', 'dc = "10 V"', "R2")
    assert (got.method, got.low, got.high) == ("nominal", got.value, got.value)


# ---------------------------------------------------------------------- what is told


def test_over_rating_at_the_nominal_values() -> None:
    """An error at the part, with both numbers."""
    done = check(circuit('R1 = "in out 100 0.1W"; R2 = "out 0 100"', 'dc = "10 V"'))
    (finding,) = done.errors
    assert (finding.code, finding.line, finding.column, finding.width) == ("over-rating", 4, 1, 2)
    assert finding.message == (
        "R1 dissipates 250 mW at the nominal values, more than the 100 mW it is rated for."
    )
    assert done.verdict == "fails"


def test_over_rating_only_over_the_tolerances() -> None:
    """Exactly at its rating a capacitor passes; a divider's 5 % take it beyond, 10 V 1.05/(1.05 + 0.95)."""
    assert codes(rating_findings(circuit('R1 = "in 0 1k"; C1 = "in 0 1n 10V"', 'dc = "10 V"'))) == [
        "near-rating"
    ]
    (found,) = rating_findings(
        circuit('R1 = "in out 1k 5%"; R2 = "out 0 1k 5%"; C1 = "out 0 1n 10V"', 'dc = "20 V"')
    )
    assert (found.code, found.severity) == ("over-rating", "error")
    assert "10.5 V at the worst corner of the tolerances (10 V at the nominal values)" in found.message


NEAR = {79: [], 81: ["near-rating"], 100: ["near-rating"], 101: ["over-rating"]}


@pytest.mark.parametrize("volts", NEAR)
def test_shares_of_a_rating(volts: int) -> None:
    """Above 80 % a warning, above all of it an error."""
    found = rating_findings(circuit('R1 = "in 0 1M"; C1 = "in 0 1n 100V"', f'dc = "{volts} V"'))
    assert codes(found) == NEAR[volts]
    assert [each.severity for each in found] == [
        {"near-rating": "warning", "over-rating": "error"}[each.code] for each in found
    ]


def test_a_corner_near_the_rating_is_searched_again() -> None:
    """Just below the rating the bounds of the measure decide, and the message says how they were found."""
    (found,) = rating_findings(circuit('R1 = "in out 1k 5% 0.11W"; R2 = "out 0 1k 5%"', 'dc = "20 V"'))
    worst = max(400 * a / (a + b) ** 2 for a in (950, 1050) for b in (950, 1050))
    assert found.code == "near-rating"
    assert f"{worst * 1e3:.4g} mW" in found.message
    assert "over the tolerances" in found.message


SILENT = {
    "no rating": ('R1 = "in out 1"; C1 = "out 0 1n"', 'dc = "10 V"'),
    "nothing but ac": ('R1 = "in out 1 0.1W"; C1 = "out 0 1n 1V"', ""),
    "far below": ('R1 = "in out 10k 0.1W"; C1 = "out 0 1n 50V"', 'dc = "5 V"'),
    "watts of a capacitor": ('R1 = "in out 1k"; C1 = "out 0 1n 1W"', 'dc = "10 V"'),
    "no answer": ('R1 = "in out 1k 0.1W"; R2 = "x y 1k 1V"', 'dc = "10 V"'),
}


@pytest.mark.parametrize("case", SILENT)
def test_nothing_is_told(case: str) -> None:
    """Where no rating is in question nothing is found."""
    parts, drive = SILENT[case]
    assert rating_findings(circuit(parts, drive)) == []
    assert caution_findings(circuit(parts, drive)) == []


def test_silenced_ratings() -> None:
    """These findings can be silenced as all others can."""
    whole = circuit('R1 = "in 0 1k"; C1 = "in out 1n 10V"; R2 = "out 0 1k"', 'dc = "9 V"')
    assert [finding.code for finding in check(whole).warnings] == ["near-rating"]
    quiet = parse_circuit_file('silence = ["near-rating"]\n' + "\n".join(whole.lines), "pump.rc.toml")
    assert check(quiet).findings == ()


def test_large_networks_cost_nothing() -> None:
    """Beyond 5000 parts nothing is computed."""
    network = Network("Cable")
    names = [f"R{k}" for k in range(5001)]
    network.add_resistors(names, ["in"] * 5001, ["0"] * 5001, np.ones(5001))
    network.add_voltage_source("Vin", "in", "0", dc=500)
    assert stress(Circuit(network)) == []
    assert caution_findings(Circuit(network)) == []


# ---------------------------------------------------------------------- the bound that saves computing


@pytest.mark.parametrize("seed", range(6))
def test_no_voltage_exceeds_the_bound(seed: int) -> None:
    """Random networks of R and C under square waves stay below it."""
    rng = np.random.default_rng(seed)
    nodes = ["in", "a", "b", "c", "d", "0"]
    network = Network("Leak listener")
    for k, node in enumerate(nodes[1:5]):
        network.add_resistor(f"Rg{k}", node, "0", float(10 ** rng.uniform(3, 6)))
    for k in range(8):
        a, b = rng.choice(nodes, 2, replace=False)
        network.add_resistor(f"R{k}", a, b, float(10 ** rng.uniform(2, 6)))
        a, b = rng.choice(nodes, 2, replace=False)
        network.add_capacitor(f"C{k}", a, b, float(10 ** rng.uniform(-9, -6)))
    network.add_voltage_source(
        "Vin", "in", "0", square={"low": -5, "high": 10, "frequency": 1000, "rise": 1e-6, "fall": 1e-6}
    )
    pairs = [(a, b) for a in range(1, 6) for b in range(a) if len({a, b}) == 2]
    found = Strain(network, pairs)
    assert max(found.peak(k) for k in range(len(pairs))) <= most_volts(network) == pytest.approx(22.5)


# ---------------------------------------------------------------------- cautions

# drive -> what is told of "R1 in out 1k, R2 out 0 100k"
HAZARDS = {
    "60 V dc": ('dc = "60 V"', None),
    "61 V dc": ('dc = "61 V"', "61 V dc"),
    "42 V peak": ('sine = { amplitude = "42 V", frequency = "50 Hz" }', None),
    "43 V peak": ('sine = { amplitude = "43 V", frequency = "50 Hz" }', "43 V peak"),
    "30 V rms": ('square = { low = "-31 V", high = "31 V", frequency = "1 kHz" }', "31 V rms"),
    "dc with little ripple": (
        'sine = { amplitude = "3 V", frequency = "50 Hz", offset = "50 V" }',
        None,
    ),
    "a step": ('step = { from = 0, to = "100 V" }', "100 V dc"),
    "mains as ac": ("", None),
}


@pytest.mark.parametrize("case", HAZARDS)
def test_hazardous_voltages(case: str) -> None:
    """Beyond 60 V dc, 30 V rms or 42.4 V peak one note is told, with the voltage."""
    drive, told = HAZARDS[case]
    found = caution_findings(circuit('R1 = "in out 1k"; R2 = "out 0 100k"', drive))
    assert codes(found) == ["hazardous-voltage"] * (told is not None)
    if told is not None:
        assert f"reaches {told}" in found[0].message
        assert found[0].severity == "note"
        assert "licensed practice" in found[0].remedy


def test_an_ac_amplitude_no_signal_has() -> None:
    """A source of nothing but `ac = 325` is taken for mains; one of dc beside it is not."""
    parts = 'title = "x"\noutput = "out"\n[parts]\nR1 = "in out 1k"\nC1 = "out 0 1n"\n'
    parts += '[sources.Vmains]\nnodes = "in 0"\nac = 325\n'
    (found,) = caution_findings(parse_circuit_file(parts, "mains.rc.toml"))
    assert found.message.startswith("The source Vmains reaches 325 V peak ac")
    assert caution_findings(parse_circuit_file(parts + "dc = 5\n", "mains.rc.toml")) == []


def test_a_node_to_ground_counts() -> None:
    """Two supplies of 40 V in a row: 80 V at the top, though no part sees more than half of it."""
    text = (
        'title = "x"\noutput = "b"\n[parts]\nR1 = "b a 1k"\nR2 = "a 0 1k"\n'
        '[sources.V1]\nnodes = "a 0"\ndc = 40\nac = 1\n[sources.V2]\nnodes = "b a"\ndc = 40\n'
    )
    (found,) = caution_findings(parse_circuit_file(text, "stack.rc.toml"))
    assert "ode 'b' reaches 80 V dc" in found.message


def test_stored_charge_says_how_long_it_stays() -> None:
    """1 mF at 325 V (100/110): energy and charge, and R C ln(V/60) with the source gone."""
    parts = 'R1 = "in out 10k"; C1 = "out 0 1m"; R2 = "out 0 100k"'
    found = caution_findings(circuit(parts, 'dc = "325 V"'))
    assert codes(found) == ["hazardous-voltage", "stored-charge"]
    volts = 325 * 100 / 110
    assert f"{volts**2 * 1e-3 / 2:.4g} J at {volts:.4g} V" in found[1].message
    assert f"takes {100 * math.log(volts / 60):.4g} s to fall below 60 V" in found[1].message


def test_stored_charge_that_nothing_drains() -> None:
    """A capacitor that only the source could discharge keeps its voltage, and that is said."""
    (_, found) = caution_findings(circuit('R1 = "in out 10k"; C1 = "out 0 1m"', 'dc = "325 V"'))
    assert "C1 keeps 325 V" in found.message


# farad, volts -> is it told
STORES = {
    "47 uC at 61 V": (0.78e-6, 61, True),
    "44 uC at 61 V": (0.72e-6, 61, False),
    "much at 50 V": (100e-6, 50, False),
    "21 J at 5 V": (1.7, 5, True),
    "19 J at 5 V": (1.5, 5, False),
}


@pytest.mark.parametrize("case", STORES)
def test_limits_of_stored_charge(case: str) -> None:
    """45 uC count above 60 V only; below, energy that burns."""
    farad, volts, told = STORES[case]
    found = caution_findings(circuit(f'R1 = "in 0 1k"; C1 = "in 0 {farad}"', f'dc = "{volts} V"'))
    assert ("stored-charge" in codes(found)) is told


def test_many_hazards_are_one_note() -> None:
    """Ten capacitors at 325 V are told once, with how many there are."""
    parts = "; ".join(f'C{k} = "in 0 10u"' for k in range(10))
    found = caution_findings(circuit(f'{parts}; R1 = "in out 1k"; R2 = "out 0 1k"', 'dc = "325 V"'))
    assert codes(found) == ["hazardous-voltage", "stored-charge"]
    assert "9 other capacitors" in found[1].message


def test_notes_leave_the_verdict_alone() -> None:
    """A caution is neither a warning nor an error."""
    done = check(circuit('R1 = "in out 1k"; R2 = "out 0 1k"', 'dc = "325 V"'))
    assert [finding.code for finding in done.findings] == ["hazardous-voltage"]
    assert done.passes(strict=True)
