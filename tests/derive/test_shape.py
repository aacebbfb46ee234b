"""What shapes are recognised, and what comes near and is not."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from rcnet.circuit import Network
from rcnet.derive.shape import Shape, shape_of

Build = Callable[..., Network]


def seen(network: Network, of: str = "out") -> Shape:
    """The shape from the one source to a node."""
    (driver,) = [name for name, source in network.sources.items() if source.ac]
    return shape_of(network, driver, (network.node_index(of), 0))


SECTIONS = {
    "low-pass": (["R1 in out 1", "C1 out 0 1"], ["low-pass"]),
    "loaded low-pass": (["R1 in out 1", "C1 out 0 1", "R2 out 0 1"], ["low-pass"]),
    "source resistance in a row": (["Rs in a 1", "R1 a out 1", "C1 out 0 1"], ["low-pass"]),
    "high-pass": (["C1 in out 1", "R1 out 0 1"], ["high-pass"]),
    "high-pass with stray": (["C1 in out 1", "R1 out 0 1", "C2 out 0 1"], ["high-pass"]),
    "high-pass behind a resistance": (["Rs in a 1", "C1 a out 1", "R1 out 0 1"], ["high-pass"]),
    "divider": (["R1 in out 1", "R2 out 0 1"], ["divider"]),
    "capacitive divider": (["C1 in out 1", "C2 out 0 1"], ["capacitive divider"]),
    "Wien": (["R1 in a 1", "C1 a out 1", "R2 out 0 1", "C2 out 0 1"], ["band-pass"]),
    "lead": (["R1 in out 1", "C1 in out 1", "R2 out 0 1"], ["lead"]),
    "lag": (["R1 in out 1", "R2 out a 1", "C2 a 0 1"], ["lag"]),
    "compensated": (["R1 in out 1", "C1 in out 1", "R2 out 0 1", "C2 out 0 1"], ["compensated divider"]),
    "ladder": (["R1 in a 1", "C1 a 0 1", "R2 a out 1", "C2 out 0 1"], ["low-pass", "low-pass"]),
    "band": (["C1 in a 1", "R1 a 0 1", "R2 a out 1", "C2 out 0 1"], ["high-pass", "low-pass"]),
    "follower": (
        ["R1 in a 1", "C1 a 0 1", "E1 b 0 a 0 1", "R2 b out 1", "C2 out 0 1"],
        ["low-pass", "low-pass"],
    ),
    "amplifier at the end": (["R1 in a 1", "C1 a 0 1", "E1 out 0 a 0 10"], ["low-pass"]),
    "dangling part": (["R1 in out 1", "C1 out 0 1", "R2 out nowhere 1"], ["low-pass"]),
    "part across the source": (["R1 in out 1", "C1 out 0 1", "C2 in 0 1"], ["low-pass"]),
    "parts side by side": (["R1 in out 1", "R2 in out 1", "C1 out 0 1", "C2 out 0 1"], ["low-pass"]),
    "branch beyond the output": (["R1 in out 1", "C1 out 0 1", "R2 out a 1", "C2 a 0 1"], ["other"]),
}


@pytest.mark.parametrize("which", SECTIONS)
def test_chains(network: Build, which: str) -> None:
    """A chain of sections is recognised, with the kind of each."""
    lines, kinds = SECTIONS[which]
    chain = seen(network(*lines)).chain

    assert chain is not None
    assert [section.kind for section in chain.sections] == kinds


NEAR_MISSES = {
    "a resistor over the ladder": ["R1 in a 1", "C1 a 0 1", "R2 a out 1", "C2 out 0 1", "R3 in out 1"],
    "feedback": ["R1 in a 1", "R2 a b 1", "C1 a out 1", "C2 b 0 1", "E1 out 0 b 0 1"],
    "an inductor": ["R1 in a 1", "L1 a out 1", "C1 out 0 1"],
    "a follower that floats": ["R1 in a 1", "C1 a 0 1", "E1 b a a 0 1", "R2 b out 1", "C2 out 0 1"],
    "a follower that senses a difference": [
        *("R1 in a 1", "C1 a 0 1", "R3 in c 1", "R4 c 0 1", "E1 b 0 a c 1", "R2 b out 1", "C2 out 0 1"),
    ],
    "two feeds": ["R1 in a 1", "C1 a 0 1", "E1 b 0 a 0 1", "R2 b out 1", "R3 in out 1", "C2 out 0 1"],
    "a lattice": ["R1 in out 1", "C1 in b 1", "C2 out 0 1", "R2 b 0 1", "R3 out b 1"],
    "two nulls wired across": [
        *("R1 in a 1", "R2 a out 1", "C3 a 0 2", "C1 in b 1", "C2 b out 1", "R3 b 0 1", "R4 a b 1"),
    ],
}


@pytest.mark.parametrize("which", NEAR_MISSES)
def test_near_misses(network: Build, which: str) -> None:
    """What is no chain and no known bridge has no shape."""
    assert seen(network(*NEAR_MISSES[which])) == Shape()


def test_twin_t_and_its_near_misses(network: Build) -> None:
    """A twin-T is one whatever its values; with two tees of one kind it is none."""
    parts = ["R1 in a 1", "R2 a out 1", "C3 a 0 2", "C1 in b 1", "C2 b out 1", "R3 b 0 7"]

    assert seen(network(*parts)).twin_t is not None
    assert seen(network(*parts, "Rload out 0 9")).twin_t is not None
    assert seen(network(*parts[:3], "R4 in b 1", "R5 b out 1", "C4 b 0 1")).twin_t is None
    assert seen(network(*parts, "C9 in out 1")).twin_t is None


def test_bridged_t_and_its_near_misses(network: Build) -> None:
    """Both bridged tees are recognised; a bridge of the wrong kind is none."""
    assert seen(network("C1 in a 1", "C2 a out 1", "R2 a 0 1", "R1 in out 1")).bridged_t is not None
    assert seen(network("R1 in a 1", "R2 a out 1", "C2 a 0 1", "C1 in out 1")).bridged_t is not None
    assert seen(network("R1 in a 1", "R2 a out 1", "C2 a 0 1", "R3 in out 1")).bridged_t is None


def test_dead_supply_is_ground(network: Build) -> None:
    """A bias resistor to a dead supply leads to ground as far as signals go."""
    made = network("C1 in out 1", "R1 out supply 2", "R2 out 0 2")
    made.add_voltage_source("Vsupply", "supply", "0", dc=5)
    chain = seen(made).chain

    assert chain is not None
    (only,) = chain.sections
    assert only.kind == "high-pass"
    assert only.time_constant is not None
    assert only.time_constant.value == pytest.approx(1)


def test_gain_of_the_chain(network: Build) -> None:
    """Amplifiers, a reversed source and a current source's resistance all count."""
    amplified = seen(
        network("R1 in a 1", "C1 a 0 1", "E1 b 0 a 0 3", "R2 b out 1", "C2 out 0 1", "E2 x 0 b 0 2")
    )
    assert amplified.chain is not None
    assert amplified.chain.gain.value == 3
    reversed_one = seen(network("R1 in out 1", "C1 out 0 1", drive=("0", "in"))).chain
    assert reversed_one is not None
    assert reversed_one.gain.value == -1
    current = seen(network("R1 in 0 50", "R2 in out 1", "C1 out 0 1", drive=("0", "in"), kind="I")).chain
    assert current is not None
    assert current.gain.value == 50
    assert current.sections[0].series.resistance is not None
    assert current.sections[0].series.resistance.value == 51
