"""How far measures move over tolerances: held against an independent solver, closed forms and samples."""

from __future__ import annotations

import itertools
import math
import os
from collections.abc import Callable

import numpy as np
import numpy.typing as npt
import pytest
from scipy.optimize import minimize

from rcnet import CircuitError, Network, UndecidedError
from rcnet.circuit import Circuit, Conditions, parse_circuit_file
from rcnet.claims import ClaimResult, ToleranceBounds, bounds, judge, response_envelope

Float = npt.NDArray[np.float64]
Part = tuple[str, str, str, float, float]  # name, node, node, value, tolerance

FULL = bool(os.environ.get("RCNET_FULL"))
NETWORKS = 30 if FULL else 3
SAMPLES = 100_000


# ---------------------------------------------------------------------- an independent solver


class Plain:
    """A dense nodal solver for R and C driven by one volt at `in`, many samples at once."""

    def __init__(self, parts: list[Part]) -> None:
        self.parts = parts
        nodes = sorted({node for part in parts for node in part[1:3]} - {"0", "in"})
        self.row = {node: k for k, node in enumerate(nodes)}
        self.nominal = np.array([part[3] for part in parts])
        self.tolerance = np.array([part[4] for part in parts])

    def network(self) -> Network:
        """The same for rcnet."""
        net = Network("Leak listener")
        net.add_voltage_source("Vin", "in", "0", ac=1)
        for name, a, b, value, tolerance in self.parts:
            add = net.add_resistor if name[0] == "R" else net.add_capacitor
            add(name, a, b, value, tolerance=tolerance)
        return net

    def response(
        self, values: Float, omega: float | Float, output: str = "out"
    ) -> npt.NDArray[np.complex128]:
        """H of samples (samples, parts), (samples,)."""
        size = len(self.row)
        y = np.zeros((len(values), size, size), dtype=complex)
        b = np.zeros((len(values), size), dtype=complex)
        for (name, first, second, _, _), value in zip(self.parts, values.T, strict=True):
            admittance = 1 / value if name[0] == "R" else 1j * omega * value
            for node, other in ((first, second), (second, first)):
                if node not in self.row:
                    continue
                k = self.row[node]
                y[:, k, k] += admittance
                if other in self.row:
                    y[:, k, self.row[other]] -= admittance
                elif other == "in":
                    b[:, k] += admittance
        return np.linalg.solve(y, b[..., None])[:, self.row[output], 0]

    def decibels(self, values: Float, omega: float) -> Float:
        """20 log10 |H|."""
        return 20 * np.log10(np.abs(self.response(values, omega)))

    def at(self, sides: Float) -> Float:
        """Part values at places from -1 to 1 in their tolerances."""
        return self.nominal * (1 + sides * self.tolerance)

    def searched(self, function: Callable[[Float], Float], rng: np.random.Generator) -> tuple[Float, Float]:
        """Samples, and the extremes of samples, corners and SciPy's descents from the best of them."""
        count = len(self.parts)
        sides = rng.uniform(-1, 1, (SAMPLES, count))
        sampled = function(self.at(sides))
        sides = np.concatenate([sides, np.array(list(itertools.product((-1.0, 1.0), repeat=count)))])
        values = np.concatenate([sampled, function(self.at(sides[SAMPLES:]))])
        ends = []
        for sign in (1, -1):
            best = sides[np.argsort(sign * values)[:3]]
            found = [
                minimize(
                    lambda x, sign=sign: sign * float(function(self.at(x[None]))[0]),
                    start,
                    method="L-BFGS-B",
                    bounds=[(-1, 1)] * count,
                ).fun
                for start in best
            ]
            ends.append(sign * min(*found, float((sign * values).min())))
        return sampled, np.array(ends)


def random_network(rng: np.random.Generator) -> Plain:
    """Five to eight R and C between `in`, two or three inner nodes, `out` and ground, every node tied."""
    nodes = ["in", *"ab"[: int(rng.integers(1, 3))], "out", "0"]
    parts: list[Part] = []

    def add(kind: str, a: str, b: str) -> None:
        value = 10 ** rng.uniform(3, 5) if kind == "R" else 10 ** rng.uniform(-9, -7.5)
        parts.append((f"{kind}{len(parts)}", a, b, value, float(rng.choice([0.02, 0.05, 0.1, 0.2]))))

    for a, b in itertools.pairwise(nodes):
        add("RC"[int(rng.integers(2))], a, b)
    while len(parts) < rng.integers(5, 9):
        a, b = rng.choice(len(nodes), 2, replace=False)
        add("RC"[int(rng.integers(2))], nodes[a], nodes[b])
    return Plain(parts)


# A bridged T at the frequency of its notch: |H| is least where a part near its nominal value puts it there.
NOTCH = Plain(
    [
        ("C1", "in", "a", 10e-9, 0.2),
        ("C2", "a", "out", 10e-9, 0.2),
        ("R2", "a", "0", 1e3, 0.2),
        ("R1", "in", "out", 30e3, 0.001),
    ]
)
NOTCH_OMEGA = 1 / (10e-9 * math.sqrt(1e3 * 30e3))


def gains(number: int) -> tuple[Plain, float, np.random.Generator]:
    """The random networks, each with an omega near where it turns; the last one is the notch."""
    rng = np.random.default_rng(700 + number)
    if number == 0:
        return NOTCH, NOTCH_OMEGA, rng
    return random_network(rng), 10 ** rng.uniform(3, 5.5), rng


@pytest.mark.parametrize("number", range(NETWORKS))
def test_searched_bounds_hold_all_samples_and_are_not_too_wide(number: int) -> None:
    """No sample lies outside, and no bound lies outside what a dense search by other means attains."""
    plain, omega, rng = gains(number)
    got = bounds(Circuit(plain.network()), ("gain", "out", {"at": omega / (2 * math.pi)}))
    sampled, (least, greatest) = plain.searched(lambda values: plain.decibels(values, omega), rng)
    hair = 1e-9 * max(1.0, abs(least), abs(greatest))
    assert got.low <= sampled.min() + hair
    assert got.high >= sampled.max() - hair
    assert got.high - got.low <= 1.02 * (greatest - least) + hair
    assert got.low <= least + 1e-6 * (greatest - least) + hair
    assert got.high >= greatest - 1e-6 * (greatest - least) - hair
    attained = [
        plain.decibels(np.array([[at[part[0]] for part in plain.parts]]), omega)[0]
        for at in (got.low_at, got.high_at)
    ]
    assert attained == pytest.approx([got.low, got.high], rel=1e-9, abs=1e-9)


def test_an_extreme_inside_the_box() -> None:
    """A bridged T is deepest where C1 is not at a limit, more than a decibel below every corner."""
    got = bounds(Circuit(NOTCH.network()), ("gain", "out", {"at": NOTCH_OMEGA / (2 * math.pi)}))
    corners = NOTCH.at(np.array(list(itertools.product((-1.0, 1.0), repeat=4))))
    assert got.method == "searched"
    assert got.low < NOTCH.decibels(corners, NOTCH_OMEGA).min() - 1
    assert 9e-9 < got.low_at["C1"] < 11e-9


@pytest.mark.parametrize("number", range(1, NETWORKS))
def test_searched_cutoffs_hold_all_samples(number: int) -> None:
    """Nor does the cutoff of a network with a dead-end branch, found by bisection, lie outside."""
    rng = np.random.default_rng(40 + number)
    parts: list[Part] = [
        ("R1", "in", "a", 10 ** rng.uniform(3, 4), 0.05),
        ("C1", "a", "0", 10 ** rng.uniform(-9, -8), 0.2),
        ("R2", "a", "b", 10 ** rng.uniform(2, 4), 0.05),
        ("C2", "b", "0", 10 ** rng.uniform(-9, -7), 0.1),
        ("R3", "a", "out", 10 ** rng.uniform(3, 4), 0.1),
        ("C3", "out", "0", 10 ** rng.uniform(-9, -8), 0.1),
    ]
    plain = Plain(parts)
    got = bounds(Circuit(plain.network()), ("cutoff", "out", {}))

    def cutoff(values: Float) -> Float:
        low, high = np.full(len(values), 0.0), np.full(len(values), 20.0)
        for _ in range(60):
            middle = (low + high) / 2
            above = np.abs(plain.response(values, np.exp(middle))) > math.sqrt(0.5)
            low, high = np.where(above, middle, low), np.where(above, high, middle)
        return np.exp(low) / (2 * math.pi)

    sides = np.array(list(itertools.product((-1.0, 1.0), repeat=6)))
    every = cutoff(plain.at(np.concatenate([rng.uniform(-1, 1, (2000, 6)), sides])))
    assert got.method == "searched"
    assert got.low <= every.min() * (1 + 1e-9)
    assert got.high >= every.max() * (1 - 1e-9)
    assert got.high - got.low <= 1.02 * np.ptp(every)


# ---------------------------------------------------------------------- tolerances, temperature


def low_pass(r: str, c: str, **extras: str) -> Network:
    """One section of 1 kohm and 100 nF with these tolerances."""
    net = Network("Flow meter")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", "1k", tolerance=r or None, **extras)
    net.add_capacitor("C1", "out", "0", "100n", tolerance=c or None)
    return net


CORNER = 1e4 / (2 * math.pi)
# tolerance of R, of C (IEC 60062) -> the least and the greatest R C over the nominal one
SPANS: dict[tuple[str, str], tuple[float, float]] = {
    ("1%", "5%"): (0.99 * 0.95, 1.01 * 1.05),
    ("F", "J"): (0.99 * 0.95, 1.01 * 1.05),
    ("", "Z"): (0.8, 1.8),
    ("0.1%", "+20/-80%"): (0.999 * 0.2, 1.001 * 1.2),
    ("", "+100/-0%"): (1.0, 2.0),
    ("", ""): (1.0, 1.0),
}


@pytest.mark.parametrize("case", SPANS)
def test_tolerances_as_data_sheets_write_them(case: tuple[str, str]) -> None:
    """Per cent, IEC 60062 letters and unsymmetrical ones: the cutoff is 1/(2 pi R C) at both ends of R C."""
    least, greatest = SPANS[case]
    got = bounds(Circuit(low_pass(*case)), ("cutoff", "out", {}))
    assert got.method == "proven"
    assert (got.low, got.high) == pytest.approx((CORNER / greatest, CORNER / least), rel=1e-12)


def test_temperature_widens_the_box() -> None:
    """-40 to 85 °C is 67 K from 27 °C at most, so 100 ppm/K adds a factor of 1 +- 0.0067."""
    circuit = Circuit(low_pass("1%", "", tempco="100ppm"), conditions=Conditions(27.0, -40.0, 85.0))
    got = bounds(circuit, ("cutoff", "out", {}))
    factor = 1.01 * 1.0067, 0.99 * 0.9933
    assert (got.low, got.high) == pytest.approx(tuple(CORNER / f for f in factor), rel=1e-12)
    mild = bounds(Circuit(low_pass("1%", "", tempco="100ppm")), ("cutoff", "out", {}))
    assert mild.low == pytest.approx(CORNER / 1.01, rel=1e-12)


def test_noise_at_both_temperatures() -> None:
    """All the noise of one RC is sqrt(k T/C) (Nyquist 1928): least cold, with the largest C."""
    circuit = Circuit(low_pass("1%", "10%"), conditions=Conditions(27.0, -40.0, 85.0))
    got = bounds(circuit, ("noise", "out", {"from": 0.0, "to": math.inf}))
    ends = [math.sqrt(1.380649e-23 * t / (100e-9 * c)) for t, c in ((233.15, 1.1), (358.15, 0.9))]
    assert (got.low, got.high) == pytest.approx(tuple(ends), rel=1e-9)
    assert (got.low_at["temperature"], got.high_at["temperature"]) == (-40.0, 85.0)


def test_values_that_could_vanish_are_refused() -> None:
    """A drift of a hundred per cent is refused, naming the part."""
    circuit = Circuit(low_pass("1%", "", tempco="20000ppm"), conditions=Conditions(27.0, -40.0, 85.0))
    with pytest.raises(CircuitError, match=r"R1: .* fall to zero"):
        bounds(circuit, ("cutoff", "out", {}))


# ---------------------------------------------------------------------- every measure, one RC by closed form

TAU = (0.99e3 * 95e-9, 1.01e3 * 105e-9)
HIGH, PERIOD = 5.0, 1e-3


def _square_rms(tau: float) -> float:
    """A square of 0 and 5 V through one RC: mean square 1 - (4/r) tanh(r/4) about the mean, r = T/tau."""
    r = PERIOD / tau
    return HIGH / 2 * math.sqrt(1 + 1 - 4 / r * math.tanh(r / 4))


CLOSED: dict[str, tuple[str, dict[str, float], Callable[[float], float]]] = {
    "group delay": ("group_delay", {"at": 1e3}, lambda t: t / (1 + (2e3 * math.pi * t) ** 2)),
    "delay": ("delay", {}, lambda t: t * math.log(2)),
    "rise time": ("rise_time", {}, lambda t: t * math.log(9)),
    "settling time": ("settling_time", {"band": 0.01}, lambda t: t * math.log(100)),
    "ripple": ("ripple", {}, lambda t: HIGH * math.tanh(PERIOD / t / 4)),
    "rms": ("rms", {}, _square_rms),
    "harmonic": (
        "harmonic",
        {"order": 3.0},
        lambda t: 2 * HIGH / (3 * math.pi) / math.hypot(1, 6e3 * math.pi * t),
    ),
    "mean": ("mean", {}, lambda t: HIGH / 2),
    "peak": ("peak_voltage", {}, lambda t: HIGH / (1 + math.exp(-PERIOD / 2 / t))),
}


@pytest.mark.parametrize("case", CLOSED)
def test_measures_of_one_section(case: str) -> None:
    """For one RC the measures are functions of R C alone, which lies between its two corners."""
    measure, options, formula = CLOSED[case]
    net = Network("Pump station")
    net.add_voltage_source("Vin", "in", "0", ac=1, square={"low": 0, "high": HIGH, "frequency": 1 / PERIOD})
    net.add_resistor("R1", "in", "out", "1k", tolerance="1%")
    net.add_capacitor("C1", "out", "0", "100n", tolerance="5%")
    got = bounds(Circuit(net), (measure, "out", options))
    every = [formula(t) for t in np.linspace(*TAU, 2001).tolist()]
    assert (got.low, got.high) == pytest.approx((min(every), max(every)), rel=1e-8)


# ---------------------------------------------------------------------- verdicts

HEAD = """
title = "Flow meter: low-pass ahead of the logger"
output = "out"
[parts]
R1 = "in out 1k 1%"
C1 = "out 0 100n 5%"
[sources.Vin]
nodes = "in 0"
ac = 1
"""


def judged(claim: str, head: str = HEAD, *, samples: int | None = None) -> ClaimResult:
    """What comes of a single claim over the tolerances."""
    text = f'{head}[[claims]]\nover = "tolerance"\n{claim}\n'
    return judge(parse_circuit_file(text, "flow.rc.toml"), samples=samples)[0]


def test_a_claim_that_holds_over_the_tolerances() -> None:
    """Its bounds, its margin from the worse one, and the part that limits it."""
    got = judged('measure = "cutoff"\nat_least = "1.4 kHz"')
    assert (got.verdict, got.method, got.limiting, got.needed, got.why) == (
        "holds",
        "proven",
        "C1",
        None,
        None,
    )
    assert got.exact == pytest.approx(CORNER, rel=1e-12)
    assert got.low == pytest.approx(CORNER / (1.01 * 1.05), rel=1e-12)
    assert got.margin == pytest.approx(CORNER / (1.01 * 1.05) - 1400, rel=1e-9)


def test_a_claim_that_fails_at_a_corner() -> None:
    """It names the corner, the part that limits it, and the tolerance with which it would hold."""
    got = judged(f'measure = "cutoff"\nat_least = {CORNER / 1.03}')
    assert (got.verdict, got.limiting) == ("fails", "C1")
    assert got.needed is not None
    # 1.01 (1 + t) = 1.03, rounded down to three digits.
    assert got.needed == pytest.approx(1.03 / 1.01 - 1, rel=0.01)
    assert got.needed <= 1.03 / 1.01 - 1
    assert got.why is not None
    assert "R1 = 1.01 kohm, C1 = 105 nF" in got.why
    assert "C1 limits it: with 1.98 % instead of 5 % it would hold." in got.why
    mended = HEAD.replace("5%", f"{100 * got.needed}%")
    assert judged(f'measure = "cutoff"\nat_least = {CORNER / 1.03}', mended).verdict == "holds"


def test_a_claim_that_no_single_part_can_save() -> None:
    """Where the other parts alone already break it, no tolerance is named."""
    got = judged(f'measure = "cutoff"\nat_least = {CORNER / 1.005}')
    assert (got.verdict, got.limiting, got.needed) == ("fails", "C1", None)
    assert got.why is not None
    assert "no tolerance of that part alone" in got.why


def test_an_exact_part_is_no_tolerance_to_ask_for() -> None:
    """Where only an exact C1 would do, no tolerance is named."""
    got = judged(f'measure = "cutoff"\nat_least = {CORNER / 1.01 * (1 - 1e-12)}')
    assert (got.verdict, got.limiting, got.needed) == ("fails", "C1", None)


def test_both_ends_count() -> None:
    """A claim of a value within a share fails at either end; the tolerance needed mends both."""
    got = judged(f'measure = "cutoff"\nequals = {CORNER}\nwithin = "3 %"')
    # Downwards 1.01 (1 + t) = 1/0.97 and upwards 0.99 (1 - t) = 1/1.03: the second is the tighter one.
    assert got.needed is not None
    assert got.needed == pytest.approx(min(1 / 0.97 / 1.01 - 1, 1 - 1 / 1.03 / 0.99), rel=0.01)


def test_searched_claims_name_part_and_tolerance_too() -> None:
    """A lead network's gain: with the tolerance named, every sample of an independent solver holds."""
    head = HEAD.replace('C1 = "out 0 100n 5%"', 'C1 = "in out 100n 10%"\nR2 = "out 0 1k 1%"')
    got = judged('measure = "gain"\nat = "1 kHz"\nat_most = "-4.8 dB"', head)
    assert (got.verdict, got.method, got.limiting) == ("fails", "searched", "C1")
    assert got.needed is not None
    assert 0 < got.needed < 0.1

    def worst(t: float) -> float:
        sides = np.random.default_rng(3).choice([-1.0, 1.0], (200, 3))
        parts = [("R1", "in", "out", 1e3, 0.01), ("C1", "in", "out", 1e-7, t), ("R2", "out", "0", 1e3, 0.01)]
        plain = Plain(parts)
        return float(plain.decibels(plain.at(sides), 2e3 * math.pi).max())

    assert worst(got.needed) <= -4.8 < worst(1.02 * got.needed)


def test_undefined_somewhere_in_the_box_is_undecided() -> None:
    """A lead network has a lower cutoff only if R2/(R1 + R2) < sqrt(1/2): here not for every R1."""
    head = HEAD.replace('R1 = "in out 1k 1%"', 'R1 = "in out 420 5%"\nR2 = "out 0 1k"').replace(
        'C1 = "out 0 100n 5%"', 'C1 = "in out 100n 5%"'
    )
    got = judged('measure = "cutoff"\nat_least = 1', head)
    assert got.verdict == "undecided"
    assert got.exact is not None
    assert got.why is not None
    assert "within the tolerances, at R1 = " in got.why
    assert "no" in got.why
    with pytest.raises(UndecidedError, match="within the tolerances"):
        bounds(parse_circuit_file(head, "flow.rc.toml"), ("cutoff", "out", {}))


def test_limiting_without_a_claim() -> None:
    """Without a bound the part is named that moves the further end most."""
    got = bounds(Circuit(low_pass("1%", "5%")), ("cutoff", "out", {}))
    assert isinstance(got, ToleranceBounds)
    assert (got.limiting, got.needed) == ("C1", None)


def test_the_circuit_stays_as_it_was() -> None:
    """Looking over the tolerances changes no part."""
    net = NOTCH.network()
    before = tuple(net.parts)
    bounds(Circuit(net), ("gain", "out", {"at": 1e3}))
    assert tuple(net.parts) == before


def test_many_parts() -> None:
    """Two hundred and fifty toleranced parts with a side branch: the slopes lead to the corner."""
    net = Network("Long cable")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    for k in range(125):
        a, b = ("in" if k == 0 else f"n{k}"), ("out" if k == 124 else f"n{k + 1}")
        net.add_resistor(f"R{k}", a, b, 10.0, tolerance=0.05)
        net.add_capacitor(f"C{k}", b, "0", 1e-9, tolerance=0.05)
    proven = bounds(Circuit(net), ("cutoff", "out", {}))
    net.add_resistor("Rz", "n60", "z", 1e9)  # a dead end that hardly matters takes the proof away
    net.add_capacitor("Cz", "z", "0", 1e-15)
    got = bounds(Circuit(net), ("cutoff", "out", {}))
    assert (proven.method, got.method) == ("proven", "searched")
    assert (got.low, got.high) == pytest.approx((proven.low, proven.high), rel=1e-6)


# ---------------------------------------------------------------------- the envelope of a response


def test_envelope_of_a_ladder() -> None:
    """One RC: |H| = 1/sqrt(1 + (omega R C)^2) at both ends of R C, proven."""
    frequency = np.geomspace(10, 1e6, 31)
    got = response_envelope(low_pass("1%", "5%"), frequency, "out")
    ends = [-10 * np.log10(1 + (2 * math.pi * frequency * t) ** 2) for t in (TAU[1], TAU[0])]
    assert got.method == "proven"
    assert got.lower == pytest.approx(ends[0], rel=1e-9, abs=1e-12)
    assert got.upper == pytest.approx(ends[1], rel=1e-9, abs=1e-12)


def test_envelope_around_a_notch() -> None:
    """At every frequency no sample of an independent solver lies outside, and corners are not far inside."""
    frequency = NOTCH_OMEGA / (2 * math.pi) * np.geomspace(0.1, 10, 21)
    lower, upper = response_envelope(NOTCH.network(), frequency, "out")
    rng = np.random.default_rng(5)
    sides = np.concatenate([rng.uniform(-1, 1, (5000, 4)), list(itertools.product((-1.0, 1.0), repeat=4))])
    level = np.stack([NOTCH.decibels(NOTCH.at(sides), 2 * math.pi * f) for f in frequency], axis=1)
    assert (lower <= level.min(axis=0) + 1e-9).all()
    assert (upper >= level.max(axis=0) - 1e-9).all()
    assert (upper - lower <= 1.02 * np.ptp(level, axis=0)).all()


def test_envelope_of_many_parts() -> None:
    """Twelve parts in three sections with dead ends: nowhere does one of the 4096 corners lie outside."""
    parts: list[Part] = []
    for k, (here, there) in enumerate([("in", "a"), ("a", "b"), ("b", "out")]):
        parts += [(f"R{k}", here, there, 1e3 * (k + 1), 0.01), (f"C{k}", there, "0", 10e-9, 0.1)]
        parts += [(f"Rx{k}", there, f"x{k}", 2e3, 0.05), (f"Cx{k}", f"x{k}", "0", 22e-9, 0.2)]
    plain = Plain(parts)
    frequency = np.geomspace(100, 1e5, 7)
    lower, upper = response_envelope(plain.network(), frequency, "out")
    values = plain.at(np.array(list(itertools.product((-1.0, 1.0), repeat=12))))
    level = np.stack([plain.decibels(values, 2 * math.pi * f) for f in frequency], axis=1)
    assert (lower <= level.min(axis=0) + 1e-9).all()
    assert (upper >= level.max(axis=0) - 1e-9).all()
    assert (upper - lower <= 1.02 * np.ptp(level, axis=0)).all()


def test_envelope_without_tolerances() -> None:
    """Without tolerances both edges are the response itself."""
    lower, upper = response_envelope(low_pass("", ""), [CORNER], "out")
    assert lower == pytest.approx([-10 * math.log10(2)], rel=1e-12)
    assert upper == pytest.approx(lower)
