"""What the shape of a network proves about its tolerances, and what it must not be said to prove."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt
import pytest
from scipy.optimize import brentq

from rcnet import Network
from rcnet.circuit import Circuit
from rcnet.claims import bounds
from rcnet.claims.monotone import directions

Float = npt.NDArray[np.float64]
Ladder = list[tuple[bool, str, float, float]]  # series?, kind, nominal value, tolerance
LADDERS = 100
AT = 1000.0


# ---------------------------------------------------------------------- ladders by hand


def random_ladder(rng: np.random.Generator, *, low: bool) -> Ladder:
    """Series R and shunts of C and perhaps R, or series C and shunts of R and perhaps C; six parts or so."""
    parts: Ladder = []
    for _ in range(int(rng.integers(1, 4))):
        r, c = 10 ** rng.uniform(2.5, 5), 10 ** rng.uniform(-9, -7)
        series, shunt = (("R", r), ("C", c)) if low else (("C", c), ("R", r))
        parts.append((True, *series, float(rng.choice([0.01, 0.05, 0.1]))))
        parts.append((False, *shunt, float(rng.choice([0.02, 0.2]))))
        if rng.random() < 0.4:
            parts.append((False, series[0], series[1] * (20 if low else 0.1), 0.05))
    return parts


def network_of(ladder: Ladder) -> Network:
    """The ladder as a network, driven by Vin at `in`; its last node is `out`."""
    net = Network("Float gauge filter")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    steps = sum(series for series, *_ in ladder)
    names, here = ["in", *(f"n{k}" for k in range(1, steps)), "out"], 0
    for number, (series, kind, value, tolerance) in enumerate(ladder):
        nodes = (names[here], names[here + 1]) if series else (names[here], "0")
        here += series
        add = net.add_resistor if kind == "R" else net.add_capacitor
        add(f"{kind}{number}", *nodes, value, tolerance=tolerance)
    return net


def corner_values(ladder: Ladder) -> Float:
    """The part values of every corner, (2^parts, parts)."""
    sides = np.array(list(itertools.product((-1, 1), repeat=len(ladder))))
    nominal, tolerance = np.array([row[2] for row in ladder]), np.array([row[3] for row in ladder])
    return np.asarray(nominal * (1 + sides * tolerance))


def chain(ladder: Ladder, values: Float, s: complex | Float) -> npt.NDArray[np.complex128]:
    """H by the product of chain matrices, only their first column: from the open end v = 1, i = 0."""
    v, i = np.ones(len(values), dtype=complex), np.zeros(len(values), dtype=complex)
    for (series, kind, _, _), value in reversed(list(zip(ladder, values.T, strict=True))):
        z = value if kind == "R" else 1 / (s * value)
        v, i = (v + z * i, i) if series else (v, i + v / z)
    return 1 / v


def nodal(ladder: Ladder, values: Float) -> tuple[Float, Float, Float]:
    """G, C (nodes, nodes) and the source's conductances (nodes,) of one corner, the node `out` last."""
    steps = sum(series for series, *_ in ladder)
    matrices = {"R": np.zeros((steps + 1, steps + 1)), "C": np.zeros((steps + 1, steps + 1))}
    here = 0
    for (series, kind, _, _), value in zip(ladder, values, strict=True):
        y, m = (1 / value if kind == "R" else value), matrices[kind]
        m[here, here] += y
        if series:
            m[here + 1, here + 1] += y
            m[here, here + 1] -= y
            m[here + 1, here] -= y
            here += 1
    return matrices["R"][1:, 1:], matrices["C"][1:, 1:], -matrices["R"][1:, 0]


# ---------------------------------------------------------------------- the measures by hand


def gain(ladder: Ladder, values: Float) -> Float:
    """20 log10 |H| at AT."""
    return 20 * np.log10(np.abs(chain(ladder, values, 2j * math.pi * AT)))


def far(ladder: Ladder, values: Float) -> Float:
    """|H| in the passband: at dc for series R, at infinity for series C."""
    low = ladder[0][1] == "R"
    return np.abs(chain(ladder, values, 1e-9 if low else 1e18))


def attenuation(ladder: Ladder, values: Float) -> Float:
    """Below the passband, dB."""
    return 20 * np.log10(far(ladder, values)) - gain(ladder, values)


def cutoff(ladder: Ladder, values: Float) -> Float:
    """Bisection in ln f for half the passband's power, every corner at once."""
    target, falls = far(ladder, values) / math.sqrt(2), ladder[0][1] == "R"
    low, high = np.full(len(values), math.log(1e-3)), np.full(len(values), math.log(1e12))
    for _ in range(100):
        middle = (low + high) / 2
        above = np.abs(chain(ladder, values, 2j * math.pi * np.exp(middle))) > target
        up = above if falls else ~above
        low, high = np.where(up, middle, low), np.where(up, high, middle)
    return np.exp((low + high) / 2)


def each(function: Callable[[Float, Float, Float], float]) -> Callable[[Ladder, Float], Float]:
    """A measure of the nodal matrices of one corner, taken at all of them."""
    return lambda ladder, values: np.array([function(*nodal(ladder, row)) for row in values])


def taus(g: Float, c: Float) -> Float:
    """The time constants: eigenvalues of G^-1 C."""
    return np.sort(np.linalg.eigvals(np.linalg.solve(g, c)).real)[::-1]


def elmore(g: Float, c: Float, b: Float) -> float:
    """-H'(0)/H(0) = e G^-1 C G^-1 b / e G^-1 b."""
    v = np.linalg.solve(g, b)
    return float(np.linalg.solve(g, c @ v)[-1] / v[-1])


def reaching(share: float) -> Callable[[Float, Float, Float], float]:
    """When the step response first reaches a share of its final value."""

    def time(g: Float, c: Float, b: Float) -> float:
        final = np.linalg.solve(g, b)
        rate, shapes = np.linalg.eig(np.linalg.solve(g, c))
        weight = shapes[-1] * np.linalg.solve(shapes, final) / final[-1]
        kept = rate.real > 1e-15
        weight, tau = weight[kept].real, rate[kept].real
        return float(
            brentq(
                lambda t: 1 - share - (weight * np.exp(-t / tau)).sum(),
                0,
                60 * tau.max(),
                xtol=1e-30,
                rtol=1e-14,
            )
        )

    return time


BY_HAND: dict[str, tuple[dict[str, float], Callable[[Ladder, Float], Float]]] = {
    "gain": ({"at": AT}, gain),
    "attenuation": ({"at": AT}, attenuation),
    "cutoff": ({}, cutoff),
    "time_constant": ({}, each(lambda g, c, b: float(taus(g, c)[0]))),
}
# What needs a final value at dc.
BY_HAND_LOW: dict[str, tuple[dict[str, float], Callable[[Ladder, Float], Float]]] = {
    "dc_gain": ({}, far),
    "phase": ({"at": AT}, lambda ladder, values: np.array([
        -np.degrees(np.arctan(2 * math.pi * AT * taus(*nodal(ladder, row)[:2])).sum()) for row in values
    ])),
    "elmore_delay": ({}, each(elmore)),
    "delay": ({}, each(reaching(0.5))),
    "rise_time": ({}, each(lambda g, c, b: reaching(0.9)(g, c, b) - reaching(0.1)(g, c, b))),
    "settling_time": ({"band": 0.02}, each(reaching(0.98))),
}  # fmt: skip


@pytest.mark.parametrize("low", [True, False], ids=["low-pass", "high-pass"])
def test_proven_bounds_are_those_of_all_corners(low: bool) -> None:
    """On random ladders the proven bounds are the extremes over every corner, worked out by other means."""
    rng = np.random.default_rng(11 + low)
    for number in range(LADDERS // 2):
        ladder = random_ladder(rng, low=low)
        values = corner_values(ladder)
        slow = list(BY_HAND_LOW)[number % len(BY_HAND_LOW)] if low else None
        chosen = {**BY_HAND, **({slow: BY_HAND_LOW[slow]} if slow else {})}
        for measure, (options, by_hand) in chosen.items():
            every = by_hand(ladder, values)
            got = bounds(Circuit(network_of(ladder)), (measure, "out", options))
            assert got.method == "proven"
            scale = 1e-9 * max(1e-300, np.abs(every).max())
            assert got.low == pytest.approx(every.min(), abs=scale), (measure, ladder)
            assert got.high == pytest.approx(every.max(), abs=scale), (measure, ladder)


# ---------------------------------------------------------------------- other proofs


def built(*lines: str, gain_source: str = "") -> Network:
    """A network of `NAME a b value` lines, each part within 10 %, driven at `in`."""
    net = Network("Pump station")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    for line in lines:
        name, a, b, value = line.split()
        kind = {"R": net.add_resistor, "C": net.add_capacitor, "L": net.add_inductor}[name[0]]
        kind(name, a, b, value, tolerance="10%")
    if gain_source:
        name, *nodes = gain_source.split()
        net.add_voltage_controlled_voltage_source(name, nodes[0], nodes[1], nodes[2], nodes[3], 2.0)
    return net


TREE = ("R1 in a 1k", "C1 a 0 1n", "R2 a out 2k", "C2 out 0 3n", "R3 a b 4k", "C3 b 0 1n")


def test_elmore_delay_of_a_tree() -> None:
    """In a tree it is sum R_ke C_k (Rubinstein, Penfield, Horowitz 1983), so both ends follow by hand."""
    got = bounds(Circuit(built(*TREE)), ("elmore_delay", "out", {}))
    nominal = 1e3 * (1e-9 + 3e-9 + 1e-9) + 2e3 * 3e-9
    assert got.method == "proven"
    assert (got.low, got.high) == pytest.approx((0.81 * nominal, 1.21 * nominal), rel=1e-12)


def test_divider_loaded_by_a_ladder() -> None:
    """At dc a capacitor carries nothing: a divider with a load behind it has its extremes at two corners."""
    net = built("R1 in out 1k", "R2 out 0 10k", "R3 out b 1k", "R4 b 0 5k", "C1 out 0 1n", "C2 b in 1n")
    got = bounds(Circuit(net), ("dc_gain", "out", {}))
    # Up and down by a tenth are not each other's reciprocals.
    load_high, load_low = 1 / (1 / 11e3 + 1 / 6.6e3), 1 / (1 / 9e3 + 1 / 5.4e3)
    assert got.method == "proven"
    assert got.high == pytest.approx(load_high / (900 + load_high), rel=1e-12)
    assert got.low == pytest.approx(load_low / (1100 + load_low), rel=1e-12)


def test_port_resistance_at_dc() -> None:
    """The resistance of a bridge rises with each of its five (Rayleigh): all up and all down by a tenth."""
    net = built("R1 in a 1k", "R2 in b 2k", "R3 a b 3k", "R4 a 0 4k", "R5 b 0 1k", "C1 a 0 1n")
    got = bounds(Circuit(net), ("input_impedance", "a", {"at": 0.0}))
    g = np.array([[1 / 1e3 + 1 / 3e3 + 1 / 4e3, -1 / 3e3], [-1 / 3e3, 1 / 2e3 + 1 / 3e3 + 1 / 1e3]])
    v = np.linalg.solve(g, [1 / 1e3, 1 / 2e3])
    ohms = 1 / ((1 - v[0]) / 1e3 + (1 - v[1]) / 2e3)
    assert got.method == "proven"
    assert (got.low, got.high) == pytest.approx((0.9 * ohms, 1.1 * ohms), rel=1e-12)


def test_buffered_stages_multiply() -> None:
    """Behind a buffer a second stage's gain adds in dB: |H| = 2/(|1 + x1||1 + x2|)."""
    net = built("R1 in a 1k", "C1 a 0 100n", "R2 b out 2k", "C2 out 0 100n", gain_source="E1 b 0 a 0")
    got = bounds(Circuit(net), ("gain", "out", {"at": 1e3}))
    x = 2 * math.pi * 1e3 * np.array([1e3 * 1e-7, 2e3 * 1e-7])
    ends = [20 * np.log10(2 / np.sqrt(1 + (x * by) ** 2).prod()) for by in (1.21, 0.81)]
    assert got.method == "proven"
    assert (got.low, got.high) == pytest.approx(tuple(ends), rel=1e-12)


# ---------------------------------------------------------------------- what is not proven

SIDE_BRANCH = ("R1 in out 1", "C1 out 0 0.01", "Rb out b 1", "Cb b 0 1")
NOT_PROVEN: dict[str, tuple[tuple[str, ...], str, dict[str, float]]] = {
    "side branch": (SIDE_BRANCH, "gain", {"at": 1.0}),
    "cutoff with a side branch": (SIDE_BRANCH, "cutoff", {}),
    "inside a ladder": (("R1 in out 1k", "C1 out 0 1n", "R2 out b 1k", "C2 b 0 1n"), "gain", {"at": 1e5}),
    "lead": (("R1 in out 1k", "C1 in out 1n", "R2 out 0 1k"), "gain", {"at": 1e5}),
    "bridge": (("R1 in a 1k", "R2 a out 1k", "C1 in out 1n", "C2 a 0 1n"), "gain", {"at": 1e5}),
    "bridged divider at dc": (
        ("R1 in a 1k", "R2 in out 1k", "R3 a out 1k", "R4 a 0 1k", "R5 out 0 1k"), "dc_gain", {},
    ),
    "inductor": (("R1 in out 1k", "L1 out 0 1m"), "gain", {"at": 1e5}),
    "series R then series C": (("R1 in a 1k", "C1 a out 1n", "R2 out 0 1k"), "gain", {"at": 1e5}),
    "group delay": (("R1 in out 1k", "C1 out 0 1n"), "group_delay", {"at": 1e5}),
    "impedance above dc": (("R1 in out 1k", "C1 out 0 1n"), "input_impedance", {"at": 1e5}),
    "distortion": (("R1 in out 1k", "C1 out 0 1n"), "thd", {}),
    "elmore of a loop": (("R1 in a 1k", "R2 in out 1k", "R3 a out 1k", "C1 out 0 1n", "C2 a 0 1n"),
                         "elmore_delay", {}),
    "elmore of a loaded tree": ((*TREE, "R4 b 0 1k"), "elmore_delay", {}),
}  # fmt: skip


@pytest.mark.parametrize("case", NOT_PROVEN)
def test_no_proof_is_claimed_where_there_is_none(case: str) -> None:
    """Shapes and measures that the argument does not cover are left to the search."""
    lines, measure, options = NOT_PROVEN[case]
    assert directions(built(*lines), measure, "out", options) is None


def test_two_sources_and_pairs_are_not_proven() -> None:
    """A second source, a current source, and a difference of two nodes are outside the argument."""
    ladder = ("R1 in out 1k", "C1 out 0 1n")
    two = built(*ladder)
    two.add_voltage_source("V2", "b", "0", dc=1)
    assert directions(two, "gain", "out", {"at": 1.0}) is None
    assert directions(built(*ladder), "gain", "in out", {"at": 1.0}) is None
    fed = Network("Current loop")
    fed.add_current_source("Iin", "0", "out", ac=1)
    fed.add_resistor("R1", "out", "0", "1k")
    fed.add_capacitor("C1", "out", "0", "1n")
    assert directions(fed, "gain", "out", {"at": 1.0}) is None


def test_the_counterexample_is_searched() -> None:
    """A dead-end branch: |H| at omega = 10 is 0.12699, 0.49999 and 0.90529 as Rb is 0.1, 1 and 10."""
    net = Network("Dead end")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", 1.0)
    net.add_capacitor("C1", "out", "0", 0.01)
    net.add_resistor("Rb", "out", "b", 1.0, tolerance="+900/-90%")
    net.add_capacitor("Cb", "b", "0", 1.0)
    got = bounds(Circuit(net), ("gain", "out", {"at": 10 / (2 * math.pi)}))
    assert got.method == "searched"
    magnitudes = 10 ** (np.array([got.low, got.high]) / 20)

    def by_hand(rb: Float) -> Float:
        y = 1j * 10 * 0.01 + 1 / (rb + 1 / 10j)
        return np.abs(1 / (1 + y))

    every = by_hand(np.geomspace(0.1, 10, 100_001))
    assert by_hand(np.array([0.1, 1, 10])) == pytest.approx([0.12699, 0.49999, 0.90529], abs=5e-6)
    assert magnitudes == pytest.approx([every.min(), every.max()], rel=1e-9)
