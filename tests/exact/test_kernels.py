"""The compiled kernels of large networks and of many samples: digits, order, sources, memory, absence.

Digits are held against mpmath (50 digits) and closed forms. Small networks are put through the kernels by
lowering the sizes from which they are chosen.
"""

from __future__ import annotations

import random
import subprocess
import sys
from collections.abc import Iterator

import mna_reference as reference
import mpmath
import numpy as np
import pytest

from rcnet.circuit import Network
from rcnet.errors import CircuitError, UnsolvableError
from rcnet.exact import ac_drive, large, limit, response, response_chunks, solver_for

pytest.importorskip("numba")

OFF = {"_PAYS": np.inf, "_MESH_NODES": 1 << 40, "_SAMPLE_PRODUCTS": 1 << 60}


@pytest.fixture
def kernels(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """Every network and every set of samples goes through the kernels."""
    monkeypatch.setattr(large, "_PAYS", 0.0)
    monkeypatch.setattr(large, "_SAMPLE_PRODUCTS", 0)
    return


def without(monkeypatch: pytest.MonkeyPatch) -> None:
    """No network goes through the kernels."""
    for name, value in OFF.items():
        monkeypatch.setattr(large, name, value)


def inner(network: Network) -> list[str]:
    """Every node but ground."""
    return [name for name in network.nodes if name != "0"]


def chain(links: list[tuple[str, float]], shunts: list[tuple[str, float]]) -> Network:
    """A ladder of given parts, ("R", ohm) or ("C", farad), driven at n0."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1)
    for k, ((along, first), (down, second)) in enumerate(zip(links, shunts, strict=True), 1):
        for letter, value, a, b in ((along, first, f"n{k - 1}", f"n{k}"), (down, second, f"n{k}", "0")):
            add = network.add_resistor if letter == "R" else network.add_capacitor
            add(f"{letter}{a}_{b}", a, b, value)
    return network


def ladder_response(links: list[tuple[str, float]], shunts: list[tuple[str, float]], f: float) -> mpmath.mpc:
    """The far end of a ladder by adding immittances from there, 50 digits."""
    with mpmath.workdps(reference.DIGITS):
        s = reference.at(f)

        def admittance(letter: str, value: float) -> mpmath.mpc:
            return 1 / mpmath.mpf(value) if letter == "R" else s * mpmath.mpf(value)

        seen, transfer = mpmath.mpc(0), mpmath.mpc(1)
        for link, shunt in zip(reversed(links), reversed(shunts), strict=True):
            seen += admittance(*shunt)
            feeding = admittance(*link)
            transfer *= feeding / (feeding + seen)
            seen = feeding * seen / (feeding + seen)
        return transfer


# ---------------------------------------------------------------------- digits


@pytest.mark.parametrize("seed", range(12))
def test_ladders_over_eighteen_decades_keep_twelve_digits_at_every_frequency(
    kernels: None, seed: int
) -> None:
    """Resistors and capacitors along and across, in any mixture."""
    rng = random.Random(f"ladder {seed}")
    sections = rng.randint(1, 60)

    def part() -> tuple[str, float]:
        return rng.choice([("R", 1e3), ("C", 1e-9)])

    links = [
        (letter, value * reference.spread(rng, 18)) for letter, value in (part() for _ in range(sections))
    ]
    shunts = [
        (letter, value * reference.spread(rng, 18)) for letter, value in (part() for _ in range(sections))
    ]
    network = chain(links, shunts)
    points = reference.frequencies(rng, 18, 20)
    got = response(network, points, f"n{sections}")
    for value, frequency in zip(got, points, strict=True):
        expected = ladder_response(links, shunts, frequency)
        if abs(expected) > 1e-280:
            assert reference.relative_error(value, expected) <= 1e-12


@pytest.mark.parametrize("seed", range(8))
def test_trees_over_eighteen_decades_keep_twelve_digits_at_every_node(kernels: None, seed: int) -> None:
    """All nodes of random trees, against 50-digit nodal analysis."""
    rng = random.Random(f"tree {seed}")
    network = reference.random_tree(rng, rng.randint(2, 30), 18)
    assert solver_for(network).kernel is not None
    assert solver_for(network).kernel.inner.is_forest
    for frequency in reference.frequencies(rng, 18, 2):
        expected = reference.solve(network, reference.at(frequency), {"V1": 1})
        got = response(network, [frequency], inner(network))[:, 0]
        for value, name in zip(got, inner(network), strict=True):
            assert reference.relative_error(value, expected[name]) <= 1e-12, name


@pytest.mark.parametrize(("decades", "bound"), [(0, 1e-12), (4, 1e-12), (12, 1e-9)])
@pytest.mark.parametrize("seed", range(4))
def test_meshes_are_right_relative_to_the_greatest_voltage(
    kernels: None, seed: int, decades: float, bound: float
) -> None:
    """The bounds promised for general networks of R and C."""
    rng = random.Random(f"mesh {seed} {decades}")
    network = reference.random_mesh(rng, rng.randint(10, 25), decades)
    kernel = solver_for(network).kernel
    assert kernel is not None
    assert not kernel.inner.is_forest
    for frequency in reference.frequencies(rng, decades, 2):
        expected = reference.solve(network, reference.at(frequency), {"V1": 1})
        got = response(network, [frequency], inner(network))[:, 0]
        assert reference.error_against_largest(got, [expected[name] for name in inner(network)]) <= bound


def test_real_s_keeps_every_digit_of_meshes_too(kernels: None) -> None:
    """For s > 0 elimination adds positive numbers only (O'Cinneide, Numer. Math. 65:109-120, 1993)."""
    rng = random.Random("real")
    network = reference.random_mesh(rng, 20, 16)
    for s in (1e-3, 1e4, 1e11):
        expected = reference.solve(network, mpmath.mpf(s), {"V1": 1})
        got = solver_for(network).solve(np.array([s]), ac_drive(network)).voltages[:, 0]
        assert got.dtype == np.float64
        for value, name in zip(got, network.nodes, strict=True):
            if name != "0":
                assert reference.relative_error(value, expected[name]) <= 1e-13, name


@pytest.mark.parametrize("kind", ["tree", "mesh"])
def test_kernels_and_the_way_of_small_networks_agree(monkeypatch: pytest.MonkeyPatch, kind: str) -> None:
    """Either choice gives the same numbers, at a dc point and at more frequencies than a block holds."""
    rng = random.Random(f"both {kind}")
    make = reference.random_tree if kind == "tree" else reference.random_mesh
    network = make(rng, 60, 4)
    points = np.concatenate([[0.0], np.sort(reference.frequencies(rng, 4, 36))])
    answers = []
    for pays in (0.0, np.inf):
        monkeypatch.setattr(large, "_PAYS", pays)
        answers.append(response(network, points, ["n60", "n3 n7", "n0"]))
    assert np.abs(answers[0] - answers[1]).max() <= 1e-13
    assert (answers[0] != 0).any()


@pytest.mark.parametrize("kind", ["tree", "mesh"])
def test_the_order_of_parts_and_nodes_changes_nothing(kernels: None, kind: str) -> None:
    """A network with its parts shuffled and turned round gives the same voltages by name."""
    rng = random.Random(f"shuffled {kind}")
    network = (reference.random_tree if kind == "tree" else reference.random_mesh)(rng, 50, 6)
    parts = [part for part in network.parts if part.kind != "V"]
    rng.shuffle(parts)
    shuffled = Network()
    for part in parts:
        add = shuffled.add_resistor if part.kind == "R" else shuffled.add_capacitor
        add(part.name, *rng.sample(part.nodes, 2), part.value)
    shuffled.add_source(network.sources["V1"])
    points = np.logspace(2, 8, 21)
    names = inner(network)
    first, second = response(network, points, names), response(shuffled, points, names)
    assert np.abs(first - second).max() <= 1e-13 * np.abs(first).max()


# ---------------------------------------------------------------------- sources


def meter_chain(mesh: bool) -> Network:
    """A buffered line with a current source and a stacked supply: every kind of drive elimination knows."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_voltage_source("V2", "stack", "in", ac=0.5, ac_phase=90)
    network.add_current_source("I1", "0", "b", ac=1e-4)
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 10e-9)
    network.add_voltage_controlled_voltage_source("E1", "buf", "0", "a", "0", 2.5)
    network.add_resistor("R2", "buf", "b", 4.7e3)
    network.add_capacitor("C2", "b", "0", 3.3e-9)
    network.add_resistor("R3", "b", "c", 2.2e3)
    network.add_resistor("R4", "c", "stack", 6.8e3)
    network.add_capacitor("C4", "c", "0", 1e-9)
    network.add_resistor("Rlink", "a", "a", 1e3)
    if mesh:
        network.add_capacitor("C3", "a", "c", 2.2e-9)
        network.add_resistor("R5", "a", "b", 15e3)
    return network


@pytest.mark.parametrize("mesh", [False, True])
def test_several_sources_and_controlled_ones_against_mpmath(kernels: None, mesh: bool) -> None:
    """V stacked on V, I, and E inside a loop, all at once, relative to the greatest voltage."""
    network = meter_chain(mesh)
    drive = {name: mpmath.mpmathify(source.phasor) for name, source in network.sources.items()}
    points = [0.0, 10.0, 3e3, 2e5, 1e7]
    got = response(network, points, inner(network))
    for k, frequency in enumerate(points):
        expected = reference.solve(network, reference.at(frequency), drive)
        wanted = [expected[name] for name in inner(network)]
        assert reference.error_against_largest(got[:, k], wanted) <= 1e-13


@pytest.mark.parametrize("mesh", [False, True])
def test_currents_put_into_nodes_from_outside_against_mpmath(kernels: None, mesh: bool) -> None:
    """What output impedances and adjoint analyses ask: a current that differs from point to point."""
    rng = random.Random("currents")
    network = (reference.random_mesh if mesh else reference.random_tree)(rng, 20, 4)
    points = reference.frequencies(rng, 4, 19)
    amounts = np.arange(1, 20) * (1e-3 + 2e-4j)
    solver, drive = solver_for(network), ac_drive(network)
    currents = np.zeros((len(network.nodes), 19), dtype=np.complex128)
    currents[network.node_index("n9")] = amounts
    s = 2j * np.pi * np.array(points)
    got = solver.solve(s, type(drive)(drive.sources, currents)).voltages
    probed = Network()
    for part in network.parts:
        if part.kind == "V":
            probed.add_source(network.sources[part.name])
        else:
            probed.add_part(part)
    probed.add_current_source("I1", "0", "n9", ac=1)
    for k in (0, 7, 18):
        given = {"V1": 1, "I1": mpmath.mpmathify(complex(amounts[k]))}
        expected = reference.solve(probed, reference.at(points[k]), given)
        wanted = [expected[name] for name in inner(network)]
        mine = [got[network.node_index(name), k] for name in inner(network)]
        assert reference.error_against_largest(mine, wanted) <= 1e-12


def test_a_loop_gain_of_one_is_refused(kernels: None) -> None:
    """An E source that holds up its own control has no unique solution, and the error names it."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 2.0)
    network.add_resistor("R2", "b", "a", 1e3)
    with pytest.raises(UnsolvableError, match="E1"):
        response(network, [1e3], "a")


def test_limits_of_a_large_ladder_are_its_gains(kernels: None) -> None:
    """A capacitive divider's limit at zero frequency, and a resistive one's at infinity."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_capacitor("C1", "in", "a", 1e-9)
    network.add_capacitor("C2", "a", "0", 3e-9)
    network.add_resistor("R1", "a", "out", 1e3)
    network.add_capacitor("C3", "out", "0", 4e-9)
    assert response(network, [0.0], "out")[0] == pytest.approx(1 / 8, rel=1e-14)
    assert limit(network, (network.node_index("a"), 0), high=True) == pytest.approx(1 / 4, rel=1e-14)


# ---------------------------------------------------------------------- large networks


def uniform_ladder(sections: int) -> Network:
    """Equal sections, R = 1 ohm and C = 1 farad."""
    network = Network()
    network.add_voltage_source("V1", "n0", "0", ac=1)
    here, there = [f"n{k}" for k in range(sections)], [f"n{k + 1}" for k in range(sections)]
    network.add_resistors([f"R{name}" for name in there], here, there, np.ones(sections))
    network.add_capacitors([f"C{name}" for name in there], there, ["0"] * sections, np.ones(sections))
    return network


def test_a_ladder_of_30_000_sections_follows_its_closed_form() -> None:
    """H_n = cosh(x/2)/cosh((n + 1/2) x) with 2 cosh x = 2 + s, by the ladder's difference equation."""
    sections = 30_000
    network = uniform_ladder(sections)
    assert large.pays(sections, sections - 1, 3)
    points = np.array([1e-10, 1e-9, 4e-8])
    got = response(network, points, [f"n{sections}", f"n{sections // 2}"])
    with mpmath.workdps(40):
        for k, frequency in enumerate(points):
            x = mpmath.acosh(1 + reference.at(frequency) / 2)
            for row, node in enumerate((sections, sections // 2)):
                expected = mpmath.cosh((sections - node + mpmath.mpf(1) / 2) * x)
                expected /= mpmath.cosh((sections + mpmath.mpf(1) / 2) * x)
                assert reference.relative_error(got[row, k], expected) <= 1e-11


def test_a_grid_of_3_600_nodes_agrees_with_a_sparse_factorisation() -> None:
    """The kernel's own choice for a mesh, beside SciPy's SuperLU on the same matrix."""
    import scipy.sparse
    import scipy.sparse.linalg

    side, rng = 60, np.random.default_rng(4)
    grid = np.arange(side * side).reshape(side, side)
    ends = np.concatenate(
        [
            np.stack([grid[:, :-1].ravel(), grid[:, 1:].ravel()], axis=1),
            np.stack([grid[:-1].ravel(), grid[1:].ravel()], axis=1),
        ]
    )
    ohms, farads = 10 ** rng.uniform(2, 4, len(ends)), 10 ** rng.uniform(-12, -10, side * side)
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("Rin", "in", "m0", 50)
    names = [f"m{k}" for k in range(side * side)]
    network.add_resistors(
        [f"R{k}" for k in range(len(ends))], [names[a] for a, _ in ends], [names[b] for _, b in ends], ohms
    )
    network.add_capacitors([f"C{k}" for k in range(len(names))], names, ["0"] * len(names), farads)
    assert large.pays(side * side, len(ends), 3)
    points = np.array([1e4, 1e6, 3e7])
    wanted = ["m0", f"m{side * side // 2}", f"m{side * side - 1}"]
    got = response(network, points, wanted)
    a, b = ends.T
    places = (np.concatenate([a, b, a, b, [0]]), np.concatenate([a, b, b, a, [0]]))
    data = np.concatenate([1 / ohms, 1 / ohms, -1 / ohms, -1 / ohms, [1 / 50]])
    conductance = scipy.sparse.coo_matrix((data, places), shape=(len(names), len(names))).tocsc()
    for k, frequency in enumerate(points):
        matrix = (conductance + 2j * np.pi * frequency * scipy.sparse.diags(farads)).tocsc()
        right = np.zeros(len(names), dtype=complex)
        right[0] = 1 / 50
        expected = scipy.sparse.linalg.splu(matrix).solve(right)[[int(name[1:]) for name in wanted]]
        assert np.abs(got[:, k] - expected).max() <= 1e-12


def test_memory_follows_the_block_and_not_the_sweep(kernels: None, monkeypatch: pytest.MonkeyPatch) -> None:
    """No array made while a sweep runs holds nodes times frequencies."""
    network = uniform_ladder(4000)
    points = np.logspace(-8, -4, 2000)
    response(network, points[:2], "n4000")
    largest = [0]
    for name in ("empty", "zeros"):
        make = getattr(np, name)

        def watched(shape: object, *rest: object, make: object = make, **options: object) -> object:
            largest[0] = max(largest[0], int(np.prod(shape)))
            return make(shape, *rest, **options)  # type: ignore[operator]

        monkeypatch.setattr(np, name, watched)
    response(network, points, "n4000")
    assert 0 < largest[0] < 4000 * 2000 / 10


def test_values_outside_the_kernels_range_are_answered_the_other_way(kernels: None) -> None:
    """Squares of 1e-200 S would vanish; the answer is a divider's, R2/(R1 + R2), all the same."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", 1e200)
    network.add_resistor("R2", "out", "0", 3e200)
    assert response(network, [1.0], "out")[0] == pytest.approx(0.75, rel=1e-15)


# ---------------------------------------------------------------------- many samples


def twin_t() -> Network:
    """A twin-T notch, loaded: three loops, and a node list that is no tree."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1)
    for name, a, b, value in (
        ("R1", "in", "a", 10e3),
        ("R2", "a", "out", 10e3),
        ("R3", "b", "0", 5e3),
        ("Rload", "out", "0", 1e6),
    ):
        network.add_resistor(name, a, b, value)
    for name, a, b, value in (("C1", "in", "b", 1e-9), ("C2", "b", "out", 1e-9), ("C3", "a", "0", 2e-9)):
        network.add_capacitor(name, a, b, value)
    return network


def sampled(network: Network, count: int, seed: int) -> dict[str, np.ndarray]:
    """Samples of every R and C, two decades wide, and one part left as it is."""
    rng = np.random.default_rng(seed)
    names = [name for name in network.values if name[0] in "RCE"][:-1]
    return {name: network.values[name] * 10 ** rng.uniform(-1, 1, count) for name in names}


@pytest.mark.parametrize("make", [twin_t, lambda: meter_chain(False), lambda: meter_chain(True)])
def test_samples_are_those_of_mpmath(kernels: None, make: object) -> None:
    """Some of a thousand samples against 50-digit nodal analysis, nodes and differences."""
    network = make()  # type: ignore[operator]
    values = sampled(network, 1000, 5)
    points = np.concatenate([[0.0], np.logspace(2, 6, 69)])
    got = response(
        network, points, ["out", "in out"] if network.has_node("out") else ["c", "a b"], values=values
    )
    assert got.shape == (2, 1000, 70)
    driving = {name: mpmath.mpmathify(source.phasor) for name, source in network.sources.items()}
    for sample in (0, 511, 512, 999):
        changed = network.with_values({name: float(numbers[sample]) for name, numbers in values.items()})
        for k in (0, 1, 40, 69):
            v = reference.solve(changed, reference.at(points[k]), driving)
            if network.has_node("out"):
                expected = [v["out"], v["in"] - v["out"]]
            else:
                expected = [v["c"], v["a"] - v["b"]]
            largest = max(abs(value) for value in v.values())
            for row in range(2):
                assert abs(mpmath.mpc(got[row, sample, k]) - expected[row]) <= 1e-13 * largest


def test_samples_with_and_without_the_kernel_agree(monkeypatch: pytest.MonkeyPatch) -> None:
    """Either way, in one piece or in many."""
    network = twin_t()
    values = sampled(network, 700, 8)
    points = np.logspace(2, 6, 13)
    without(monkeypatch)
    plain = response(network, points, "out", values=values)
    monkeypatch.setattr(large, "_SAMPLE_PRODUCTS", 0)
    compiled = response(network, points, "out", values=values)
    assert np.abs(plain - compiled).max() <= 1e-13
    pieces = list(response_chunks(network, points, "out", values, chunk=256))
    assert [part for part, _ in pieces] == [slice(0, 256), slice(256, 512), slice(512, 700)]
    assert np.array_equal(np.concatenate([block for _, block in pieces]), compiled)


def test_samples_of_a_large_network_are_its_responses(kernels: None) -> None:
    """A ladder large enough for its own kernel, sampled, against the closed form of its elements scaled."""
    network, factors = uniform_ladder(40), np.array([0.5, 1.0, 3.0])
    values = {name: value * factors for name, value in network.values.items() if name[0] == "R"}
    got = response(network, [1e-3, 1e-2], "n40", values=values)
    with mpmath.workdps(40):
        for k, factor in enumerate(factors):
            for column, frequency in enumerate((1e-3, 1e-2)):
                x = mpmath.acosh(1 + reference.at(frequency) * factor / 2)
                expected = mpmath.cosh(x / 2) / mpmath.cosh((40 + mpmath.mpf(1) / 2) * x)
                assert reference.relative_error(got[k, column], expected) <= 1e-12


def test_pieces_need_samples_and_a_size() -> None:
    """Without an array there are no samples to take in pieces, and a piece holds at least one."""
    network = twin_t()
    with pytest.raises(CircuitError, match="no samples"):
        next(response_chunks(network, [1e3], "out", {"R1": 1e3}))
    with pytest.raises(CircuitError, match="chunk is 0"):
        next(response_chunks(network, [1e3], "out", {"R1": [1e3, 2e3]}, chunk=0))


# ---------------------------------------------------------------------- many parts at once


def test_many_parts_at_once_are_the_parts_added_one_by_one() -> None:
    """Same names, nodes in the same order, same values."""
    one, many = Network(), Network()
    a, b, ohms = ["in", "x", "y"], ["x", "y", "0"], [1e3, 2.2e3, 47.0]
    for k, (first, second, value) in enumerate(zip(a, b, ohms, strict=True)):
        one.add_resistor(f"R{k}", first, second, value)
    many.add_resistors([f"R{k}" for k in range(3)], a, b, ohms)
    assert (many.nodes, many.names, many.values) == (one.nodes, one.names, one.values)
    assert np.array_equal(many.arrays().nodes, one.arrays().nodes)
    assert list(many.parts) == list(one.parts)


WRONG = {
    "a name twice": (["R1", "R1"], ["a", "b"], ["0", "0"], [1.0, 1.0], "two parts called 'R1'"),
    "a name already there": (["R0", "R1"], ["a", "b"], ["0", "0"], [1.0, 1.0], "two parts called 'R0'"),
    "another kind's name": (["C1"], ["a"], ["0"], [1.0], "resistor is called 'C1'"),
    "a blank in a node": (["R1"], ["a b"], ["0"], [1.0], "'a b' holds a blank"),
    "a node that is no text": (["R1"], [7], ["0"], [1.0], "7 is not text"),
    "ground by another name": (["R1"], ["gnd"], ["0"], [1.0], "'gnd' means ground"),
    "a negative value": (["R1", "R2"], ["a", "b"], ["0", "0"], [1.0, -2.0], "R2 has the value -2.0"),
    "not a number": (["R1"], ["a"], ["0"], [float("nan")], "R1 has the value nan"),
    "text for a value": (["R1"], ["a"], ["0"], ["4k7"], "not numbers"),
    "too few nodes": (["R1", "R2"], ["a"], ["0", "0"], [1.0, 2.0], "do not match"),
}


@pytest.mark.parametrize("case", WRONG, ids=list(WRONG))
def test_many_parts_with_one_wrong_are_refused_and_nothing_is_added(case: str) -> None:
    """The error names the offender; the network stays as it was."""
    names, a, b, values, message = WRONG[case]
    network = Network()
    network.add_resistor("R0", "in", "0", 1e3)
    with pytest.raises(CircuitError, match=message):
        network.add_resistors(names, a, b, values)  # type: ignore[arg-type]
    assert network.names == ("R0",)
    assert network.nodes == ("0", "in")


def test_floating_nodes_of_a_large_network_are_named() -> None:
    """Groups that nothing ties to ground are found in networks of many parts as in small ones."""
    network = uniform_ladder(11_000)
    network.add_resistor("Rlost", "adrift", "alone", 1e3)
    with pytest.raises(UnsolvableError, match=r"'?adrift.*alone.*Rlost"):
        response(network, [1.0], "n1")


# ---------------------------------------------------------------------- without numba

ABSENT = """
import sys
sys.modules["numba"] = None
import numpy as np
from rcnet.circuit import Network
from rcnet.exact import large, response
large._PAYS, large._SAMPLE_PRODUCTS = 0.0, 0
network = Network()
network.add_voltage_source("V1", "in", "0", ac=1)
network.add_resistor("R1", "in", "out", 1e3)
network.add_capacitor("C1", "out", "0", 1e-6)
one = response(network, [0.0, 159.15494309189535], "out")
many = response(network, [159.15494309189535], "out", values={"R1": [1e3, 2e3]})
assert np.abs(one - [1, 1 / (1 + 1j)]).max() < 1e-15
assert np.abs(many[:, 0] - [1 / (1 + 1j), 1 / (1 + 2j)]).max() < 1e-15
"""

UNUSED = """
import sys
import rcnet
from rcnet.circuit import Network
network = Network()
network.add_voltage_source("V1", "in", "0", ac=1)
network.add_resistor("R1", "in", "out", 1e3)
network.add_capacitor("C1", "out", "0", 1e-6)
network.response([10.0], "out")
network.response([10.0], "out", values={"R1": [1e3] * 100})
assert "numba" not in sys.modules
"""

UNWRITABLE = """
import numba
original = numba.njit

def refusing(*args, **options):
    if options.pop("cache", False):
        raise RuntimeError("cannot cache function: no locator available")
    return original(*args, **options)

numba.njit = refusing
from rcnet.exact.compiled import compiled

@compiled
def twice(x):
    return 2 * x

assert twice(21) == 42
"""


@pytest.mark.parametrize("script", [ABSENT, UNUSED, UNWRITABLE], ids=["absent", "unused", "unwritable"])
def test_numba_is_no_condition(script: str) -> None:
    """Answers are right without numba, small networks never load it, and no cache directory is no error."""
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
