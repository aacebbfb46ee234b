"""An independent reference: modified nodal analysis in mpmath, and the random networks it is asked about."""

from __future__ import annotations

import math
import random
from collections.abc import Iterable, Mapping

import mpmath

from rcnet.circuit import Network

DIGITS = 50

LETTERS_WITH_CURRENT = "VEHL"


def solve(
    network: Network, s: mpmath.mpc | mpmath.mpf | int, drive: Mapping[str, float]
) -> dict[str, mpmath.mpc]:
    """Every node's voltage at s for the sources' values in `drive`, by Ho, Ruehli, Brennan (1975), 50 digits.

    Written from the paper's stamps, with mpmath's own pivoting LU; nothing of the package's arithmetic is
    used.
    """
    with mpmath.workdps(DIGITS):
        nodes = {name: k for k, name in enumerate(name for name in network.nodes if name != "0")}
        branches = {
            part.name: len(nodes) + k
            for k, part in enumerate(p for p in network.parts if p.kind in LETTERS_WITH_CURRENT)
        }
        size = len(nodes) + len(branches)
        matrix, right = mpmath.matrix(size, size), mpmath.matrix(size, 1)
        inductance = {part.name: mpmath.mpf(part.value) for part in network.parts if part.kind == "L"}

        def add(row: int | None, column: int | None, value: object) -> None:
            if row is not None and column is not None:
                matrix[row, column] += value

        for part in network.parts:
            ends = [nodes.get(name) for name in part.nodes]
            value = mpmath.mpf(part.value)
            given = drive.get(part.name, 0)
            if part.kind in "RC":
                admittance = 1 / value if part.kind == "R" else s * value
                for row, column, sign in ((0, 0, 1), (1, 1, 1), (0, 1, -1), (1, 0, -1)):
                    add(ends[row], ends[column], sign * admittance)
            if part.kind in LETTERS_WITH_CURRENT:
                current = branches[part.name]
                for end, sign in ((0, 1), (1, -1)):
                    add(ends[end], current, sign)
                    add(current, ends[end], sign)
            if part.kind == "V":
                right[branches[part.name]] = given
            elif part.kind == "I":
                for end, sign in ((0, -1), (1, 1)):
                    if ends[end] is not None:
                        right[ends[end]] += sign * given
            elif part.kind == "L":
                add(branches[part.name], branches[part.name], -s * value)
            elif part.kind == "K":
                first, second = part.couples
                mutual = value * mpmath.sqrt(inductance[first] * inductance[second])
                add(branches[first], branches[second], -s * mutual)
                add(branches[second], branches[first], -s * mutual)
            elif part.kind == "E":
                add(branches[part.name], ends[2], -value)
                add(branches[part.name], ends[3], value)
            elif part.kind == "H":
                add(branches[part.name], branches[str(part.senses)], -value)
            elif part.kind == "G":
                for row, sign in ((0, 1), (1, -1)):
                    add(ends[row], ends[2], sign * value)
                    add(ends[row], ends[3], -sign * value)
            elif part.kind == "F":
                for row, sign in ((0, 1), (1, -1)):
                    add(ends[row], branches[str(part.senses)], sign * value)
        answer = mpmath.lu_solve(matrix, right)
        return {"0": mpmath.mpf(0)} | {name: answer[k] for name, k in nodes.items()}


def at(frequency: float) -> mpmath.mpc:
    """The point j 2 pi f, f in hertz, to 50 digits."""
    with mpmath.workdps(DIGITS):
        return mpmath.mpc(0, 2 * mpmath.pi * mpmath.mpf(frequency))


def relative_error(got: complex, expected: mpmath.mpc) -> float:
    """|got - expected| / |expected|."""
    with mpmath.workdps(DIGITS):
        return float(abs(mpmath.mpc(got) - expected) / abs(expected))


def error_against_largest(got: Iterable[complex], expected: Iterable[mpmath.mpc]) -> float:
    """The greatest |got - expected| over the greatest |expected|."""
    with mpmath.workdps(DIGITS):
        pairs = list(zip(got, expected, strict=True))
        largest = max(abs(value) for _, value in pairs)
        return float(max(abs(mpmath.mpc(mine) - value) for mine, value in pairs) / largest)


def spread(rng: random.Random, decades: float) -> float:
    """A factor spread evenly over so many decades about one, in its logarithm."""
    return 10 ** rng.uniform(-decades / 2, decades / 2)


def frequencies(rng: random.Random, decades: float, count: int) -> list[float]:
    """Frequencies over the span that R about 1 kohm and C about 1 nF, so spread, make."""
    centre = 1 / (2 * math.pi * 1e3 * 1e-9)
    return [centre * spread(rng, decades + 2) for _ in range(count)]


def random_ladder(rng: random.Random, sections: int, decades: float) -> Network:
    """Series R, C or both side by side; shunt C, R or both; driven at `n0`, the far end is the last node."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1)
    for k in range(1, sections + 1):
        here, there = f"n{k - 1}", f"n{k}"
        _branch(rng, network, f"s{k}", here, there, decades, "RC")
        _branch(rng, network, f"p{k}", there, "0", decades, "CR")
    return network


def random_tree(rng: random.Random, nodes: int, decades: float, *, dc: bool = False) -> Network:
    """A tree of R (or R with C beside it) from `n0`, with a branch to ground at each node."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1, dc=1)
    for k in range(1, nodes + 1):
        parent = f"n{rng.randrange(max(0, k - 4), k)}"
        network.add_resistor(f"R{k}", parent, f"n{k}", 1e3 * spread(rng, decades))
        if not dc and rng.random() < 0.2:
            network.add_capacitor(f"Cs{k}", parent, f"n{k}", 1e-9 * spread(rng, decades))
        if dc or rng.random() < 0.2:
            network.add_resistor(f"Rp{k}", f"n{k}", "0", 1e3 * spread(rng, decades))
        network.add_capacitor(f"C{k}", f"n{k}", "0", 1e-9 * spread(rng, decades))
    return network


def _branch(
    rng: random.Random, network: Network, name: str, a: str, b: str, decades: float, order: str
) -> None:
    """Usually the first kind of `order`, at times the second, at times both."""
    chosen = rng.choices((order[0], order[1], order), (0.7, 0.15, 0.15))[0]
    if "R" in chosen:
        network.add_resistor(f"R{name}", a, b, 1e3 * spread(rng, decades))
    if "C" in chosen:
        network.add_capacitor(f"C{name}", a, b, 1e-9 * spread(rng, decades))


def random_mesh(rng: random.Random, nodes: int, decades: float) -> Network:
    """A spanning tree of resistors, a capacitor to ground at each node, and as many links across."""
    network = random_tree(rng, nodes, decades)
    for k in range(nodes):
        a, b = rng.sample(range(nodes + 1), 2)
        if rng.random() < 0.5:
            network.add_resistor(f"Rx{k}", f"n{a}", f"n{b}", 1e3 * spread(rng, decades))
        else:
            network.add_capacitor(f"Cx{k}", f"n{a}", f"n{b}", 1e-9 * spread(rng, decades))
    return network
