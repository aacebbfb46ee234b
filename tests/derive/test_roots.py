"""Poles and zeros beside mpmath's roots of determinants, scipy's state space and textbook numbers."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
import scipy.signal

from rcnet.circuit import Network
from rcnet.derive import Roots, derive

Build = Callable[..., Network]


def roots_of(network: Network, of: str | None = None) -> Roots:
    """The roots of a derivation that has them."""
    found = derive(network, of).roots
    assert found is not None
    return found


def listed(roots: Any) -> list[complex]:
    """Each root as often as it occurs, by size."""
    return sorted((root.s for root in roots for _ in range(root.count)), key=lambda s: (abs(s), s.imag))


def by_determinants(network: Network, of: str) -> tuple[list[complex], list[complex]]:
    """Zeros and poles of a network of grounded source, R and C: roots of two determinants, 60 digits.

    The nodal equations are stamped here; the polynomials come from as many points as they have coefficients.
    """
    with mpmath.workdps(60):
        (source,) = network.sources.values()
        held = source.nodes[0]
        free = [node for node in network.nodes if node not in ("0", held)]
        row = {node: k for k, node in enumerate(free)}

        def matrices(s: Any) -> tuple[Any, Any]:
            y, b = mpmath.zeros(len(free)), mpmath.zeros(len(free), 1)
            for part in network.parts:
                if part.kind not in "RC":
                    continue
                admittance = 1 / mpmath.mpf(part.value) if part.kind == "R" else s * mpmath.mpf(part.value)
                for here, there in (part.nodes, part.nodes[::-1]):
                    if here in row:
                        y[row[here], row[here]] += admittance
                        if there in row:
                            y[row[here], row[there]] -= admittance
                        elif there == held:
                            b[row[here]] += admittance
            numerator = y.copy()
            for k in range(len(free)):
                numerator[k, row[of]] = b[k]
            return mpmath.det(numerator), mpmath.det(y)

        scale = 1 / mpmath.mpf(
            np.exp(
                np.mean([math.log(p.value) for p in network.parts if p.kind == "C"])
                + np.mean([math.log(p.value) for p in network.parts if p.kind == "R"])
            )
        )
        points = [scale * (k + 1) for k in range(len(free) + 2)]
        values = [matrices(s) for s in points]
        fit = mpmath.matrix([[(s / scale) ** k for k in range(len(points))] for s in points])
        answer = []
        for which in (0, 1):
            coefficients = mpmath.lu_solve(fit, mpmath.matrix([v[which] for v in values]))
            largest = max(abs(c) for c in coefficients)
            kept = [c if abs(c) > largest * mpmath.mpf(10) ** -40 else mpmath.mpf(0) for c in coefficients]
            while kept and kept[-1] == 0:
                kept.pop()
            found = (
                mpmath.polyroots(list(reversed(kept)), maxsteps=500, extraprec=400) if len(kept) > 1 else []
            )
            answer.append(sorted((complex(r * scale) for r in found), key=lambda s: (abs(s), s.imag)))
        return answer[0], answer[1]


def same(found: list[complex], wanted: list[complex]) -> None:
    """Fail unless both lists agree to 1e-9, whatever their order."""
    assert len(found) == len(wanted)
    left = list(found)
    for root in wanted:
        near = min(left, key=lambda s: abs(s - root))
        assert near == pytest.approx(root, rel=1e-9)
        left.remove(near)


def without_hidden(found: Roots, *sides: list[complex]) -> None:
    """Take the modes that the output does not show off both sides: they are roots of both determinants."""
    for hidden in found.hidden:
        for side in sides:
            near = min(side, key=lambda s: abs(s - hidden.s))
            assert near == pytest.approx(hidden.s, rel=1e-9)
            side.remove(near)


def random_network(seed: int, nodes: int, parts: int) -> Network:
    """A connected network of resistors and capacitors driven at `in`, most nodes with both."""
    rng = random.Random(seed)
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1)
    names = ["in", *(f"n{k}" for k in range(nodes))]
    for k, node in enumerate(names[1:]):
        network.add_resistor(f"R{k}", rng.choice(names[: k + 1]), node, 10 ** rng.uniform(2, 5))
        network.add_capacitor(f"C{k}", node, "0", 10 ** rng.uniform(-9, -7))
    for k in range(parts):
        a, b = rng.sample([*names, "0"], 2)
        if rng.random() < 0.5:
            network.add_resistor(f"Rx{k}", a, b, 10 ** rng.uniform(2, 5))
        else:
            network.add_capacitor(f"Cx{k}", a, b, 10 ** rng.uniform(-9, -7))
    return network


@pytest.mark.parametrize("seed", range(8))
def test_small_networks(seed: int) -> None:
    """Networks small enough for symbols: every pole and zero is a root of the determinants."""
    network = random_network(seed, 4, 5)
    found = roots_of(network, "n3")
    zeros, poles = by_determinants(network, "n3")

    without_hidden(found, zeros, poles)
    same(listed(found.poles), poles)
    same(listed(found.zeros), zeros)


@pytest.mark.parametrize("seed", range(6))
def test_networks_without_symbols(seed: int) -> None:
    """Networks too large for symbols: the same roots, from modes and from pieces."""
    network = random_network(seed, 11, 3)
    done = derive(network, "n10")
    assert done.function is None
    assert done.roots is not None
    assert done.roots.zeros is not None
    zeros, poles = by_determinants(network, "n10")

    without_hidden(done.roots, zeros, poles)
    same(listed(done.roots.poles), poles)
    same(listed(done.roots.zeros), zeros)


def test_side_branches_are_the_zeros() -> None:
    """Along a ladder of 30 sections the zeros are the corners of the branches hanging off it, -1/(R C)."""
    network = Network()
    network.add_voltage_source("Vline", "in", "0", ac=1)
    network.add_ladder("in", "out", [t for k in range(30) for t in (f"series R{k} 8R2", f"shunt C{k} 4n7")])
    for k in range(1, 4):
        network.add_resistor(f"Rleak{k}", f"out_{5 * k}", f"leak{k}", 1000.0 * k)
        network.add_capacitor(f"Cleak{k}", f"leak{k}", "0", 1e-9 * k)
    found = roots_of(network)

    assert found.zeros is not None
    same(listed(found.zeros), sorted((-1 / (1e-6 * k * k) + 0j for k in range(1, 4)), key=abs))
    assert found.gain == pytest.approx(1, rel=1e-9)
    assert len(listed(found.poles)) == 33


def test_uniform_ladder(network: Build) -> None:
    """The poles of n equal sections are -4 sin^2((2k - 1) pi/(4n + 2))/(R C), and there are no zeros."""
    for n in (3, 25):
        made = network()
        made.add_ladder("in", "out", [t for k in range(n) for t in (f"series R{k} 1", f"shunt C{k} 1")])
        found = roots_of(made)
        wanted = [-4 * math.sin((2 * k - 1) * math.pi / (4 * n + 2)) ** 2 + 0j for k in range(1, n + 1)]
        same(listed(found.poles), wanted)
        assert found.zeros == ()
        assert found.gain == pytest.approx(1, rel=1e-9)


def test_twin_t_cancels(network: Build) -> None:
    """An exact twin-T: its third pole is taken away by a zero, and the null lies on the imaginary axis."""
    found = roots_of(network("R1 in a 1", "R2 a out 1", "C3 a 0 2", "C1 in b 1", "C2 b out 1", "R3 b 0 0.5"))

    same(listed(found.poles), [-2 + math.sqrt(3) + 0j, -2 - math.sqrt(3) + 0j])
    same(listed(found.zeros), [-1j, 1j])
    assert [(pair.pole, pair.apart) for pair in found.cancelled] == [(-1 + 0j, 0.0)]
    assert found.zeros is not None
    assert found.zeros[0].quality == math.inf
    assert found.zeros[0].time_constant is None


def test_buffered_sections_are_one_triple_pole(network: Build) -> None:
    """Three equal sections with followers: one pole, three times, to every digit."""
    lines = ["R1 in a 10k", "C1 a 0 15n", "E1 b 0 a 0 1", "R2 b c 10k", "C2 c 0 15n"]
    found = roots_of(network(*lines, "E2 d 0 c 0 1", "R3 d out 10k", "C3 out 0 15n"))

    assert [(root.count, root.share) for root in found.poles] == [(3, None)]
    assert found.poles[0].s == pytest.approx(-1 / 150e-6, rel=1e-14)


def test_complex_pair(network: Build) -> None:
    """R, L and C in a row: scipy's poles of the textbook's polynomial, and Q = sqrt(L/C)/R."""
    found = roots_of(network("R1 in a 10", "L1 a out 1m", "C1 out 0 100n"))
    wanted = np.roots([1e-3 * 100e-9, 10 * 100e-9, 1])

    same(listed(found.poles), sorted((complex(p) for p in wanted), key=lambda s: s.imag))
    assert found.poles[0].quality == pytest.approx(math.sqrt(1e-3 / 100e-9) / 10, rel=1e-12)
    assert found.poles[0].frequency == pytest.approx(1 / (2 * math.pi * math.sqrt(1e-10)), rel=1e-12)
    assert found.poles[0].time_constant == pytest.approx(2 * 1e-3 / 10, rel=1e-12)


def test_shares_are_scipys_residues(network: Build) -> None:
    """The share of a pole is its residue over itself, as scipy expands the fraction."""
    found = roots_of(network("R1 in a 1", "C1 a 0 1", "R2 a out 1", "C2 out 0 1"))
    residues, poles, _ = scipy.signal.residue([1], [1, 3, 1])
    sizes = {complex(p): abs(r / p) for r, p in zip(residues, poles, strict=True)}

    for root in found.poles:
        near = min(sizes, key=lambda p: abs(p - root.s))
        assert root.share == pytest.approx(sizes[near] / sum(sizes.values()), rel=1e-12)


def test_wide_spread(network: Build) -> None:
    """Corners fourteen decades apart keep their digits: x^2 + (2 + 1/k) x + 1 in closed form."""
    found = roots_of(network("R1 in a 1", "C1 a 0 1n", "R2 a out 1M", "C2 out 0 10m"))

    with mpmath.workdps(50):
        t1, t2, cross = mpmath.mpf(1e-9), mpmath.mpf(1e6) * mpmath.mpf(0.01), mpmath.mpf(0.01)
        wanted = mpmath.polyroots([t1 * t2, t1 + t2 + cross, 1], maxsteps=500, extraprec=300)
    same(listed(found.poles), sorted((complex(p) for p in wanted), key=abs))


def test_hidden_modes(network: Build) -> None:
    """What hangs on an ideal source does not show at the output, and is told."""
    found = roots_of(network("R1 in out 1k", "C1 out 0 1u", "R2 in x 1k", "C2 x 0 10n"))

    same(listed(found.poles), [-1e3 + 0j])
    assert [root.s for root in found.hidden] == [pytest.approx(-1e5, rel=1e-9)]
    assert found.zeros == ()


def test_hidden_modes_of_a_large_network(network: Build) -> None:
    """The same where the network is too large for symbols."""
    made = network("Rside in x 1k", "Cside x 0 10n")
    made.add_ladder("in", "out", [t for k in range(12) for t in (f"series R{k} 1k", f"shunt C{k} 1u")])
    found = roots_of(made)

    assert len(listed(found.poles)) == 12
    assert [root.s for root in found.hidden] == [pytest.approx(-1e5, rel=1e-9)]
    assert found.zeros == ()


def test_zeros_at_the_origin(network: Build) -> None:
    """Each coupling capacitor of a high-pass ladder is a zero at zero frequency, whatever its size."""
    for n in (3, 12):
        made = network()
        for k in range(n):
            here, there = "in" if k == 0 else f"n{k}", "out" if k == n - 1 else f"n{k + 1}"
            made.add_capacitor(f"C{k}", here, there, 1e-6)
            made.add_resistor(f"R{k}", there, "0", 1e3)
        found = roots_of(made)
        assert found.origin == n
        assert found.zeros is not None
        assert [(root.s, root.count) for root in found.zeros] == [(0, n)]


def test_a_twin_t_within_a_long_ladder(network: Build) -> None:
    """A twin-T between two ladders keeps its zeros: those of the twin-T itself."""
    made = network("R1 n3 a 10k", "R2 a m 10k", "C3 a 0 20n", "C1 n3 b 10n", "C2 b m 10n", "R3 b 0 6k")
    made.add_ladder("in", "n3", [t for k in range(6) for t in (f"series Ra{k} 1k", f"shunt Ca{k} 10n")])
    made.add_ladder("m", "out", [t for k in range(6) for t in (f"series Rb{k} 1k", f"shunt Cb{k} 10n")])
    found = roots_of(made)

    # C1 C2 C3 R1 R2 R3 s^3 + C1 C2 R3 (R1 + R2) s^2 + R3 (C1 + C2) s + 1
    cubic = [10e-9**2 * 20e-9 * 1e4**2 * 6e3, 10e-9**2 * 6e3 * 2e4, 6e3 * 20e-9, 1]
    wanted = sorted((complex(z) for z in np.roots(cubic)), key=lambda s: (round(abs(s), 3), s.imag))
    got = listed(found.zeros)
    assert len(got) == 3
    for a in wanted:
        assert min(abs(a - b) for b in got) < 1e-9 * abs(a)


def test_hundreds_of_nodes_end_in_seconds() -> None:
    """Four hundred sections give their poles; the slowest is that of the closed form."""
    network = Network()
    network.add_voltage_source("Vline", "in", "0", ac=1)
    names = ["in", *(f"n{k}" for k in range(1, 400)), "out"]
    network.add_resistors([f"R{k}" for k in range(400)], names[:-1], names[1:], np.full(400, 8.2))
    network.add_capacitors([f"C{k}" for k in range(400)], names[1:], ["0"] * 400, np.full(400, 4.7e-9))
    found = roots_of(network)

    slowest = -4 * math.sin(math.pi / 1602) ** 2 / (8.2 * 4.7e-9)
    assert found.poles[0].s == pytest.approx(slowest, rel=1e-9)
    assert len(found.poles) + found.left_out == 400
    assert found.zeros == ()


def test_modes_hidden_inside_a_piece(network: Build) -> None:
    """A dead end in the middle of a piece is a pole and a zero alike; neither is listed, all others are."""
    made = network("R1 in a 36k", "C1 a 0 28n", "R2 a b 17k", "C2 b in 370n", "R3 b c 500k", "C3 c 0 31n")
    made.add_resistor("R4", "c", "d", 435e3)
    made.add_capacitor("C4", "d", "c", 25e-9)
    made.add_ladder("a", "out", [t for k in range(8) for t in (f"series Rl{k} 1k", f"shunt Cl{k} 1n")])
    done = derive(made)
    zeros, poles = by_determinants(made, "out")

    assert done.function is None
    assert done.roots is not None
    assert [root.s for root in done.roots.hidden] == [pytest.approx(-1 / (435e3 * 25e-9), rel=1e-9)]
    without_hidden(done.roots, zeros, poles)
    same(listed(done.roots.poles), poles)
    same(listed(done.roots.zeros), zeros)


def test_feedback_beyond_the_symbols(network: Build) -> None:
    """Poles and zeros of a long chain with an amplifier in it give the exact response between them."""
    made = network("R1 in a 10k", "C1 a b 10n", "E1 b 0 c 0 0.5", "R2 a c 10k", "C2 c 0 10n")
    made.add_ladder("b", "out", [t for k in range(9) for t in (f"series Rl{k} 1k", f"shunt Cl{k} 1n")])
    done = derive(made)
    assert done.function is None
    assert done.roots is not None
    assert done.roots.zeros is not None

    assert len(listed(done.roots.poles)) == 11
    for frequency in (10.0, 1e3, 1e5):
        s = 2j * math.pi * frequency
        own = np.exp(done.roots.log_response(s))
        assert own == pytest.approx(complex(made.response([frequency], "out")[0]), rel=1e-9)
