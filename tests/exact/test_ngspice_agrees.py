"""Exact responses and operating points beside ngspice's, on random networks written here as small decks."""

from __future__ import annotations

import math
import os
import random
import shutil
import subprocess
from pathlib import Path

import mna_reference as reference
import numpy as np
import pytest

from rcnet.circuit import Network
from rcnet.curves.raw import parse_raw
from rcnet.exact import operating_point, response, source_currents

pytestmark = pytest.mark.ngspice

# An ac sweep carries double rounding only; ngspice 39 was within 9e-16 of the true ladder, and its LU loses
# digits as the spread of values grows, which is why these networks span four decades and no more.
AGREES = 1e-10


def deck(network: Network, *commands: str) -> str:
    """The network as SPICE text, every value as `repr` writes it."""
    lines = ["exact response against ngspice"]
    for part in network.parts:
        if part.kind in "VI":
            source = network.sources[part.name]
            lines.append(
                f"{part.name} {' '.join(part.nodes)} dc {source.operating_value!r} ac {source.ac or 0.0!r}"
            )
        else:
            sensed = [part.senses] if part.senses else []
            lines.append(" ".join([part.name, *part.nodes, *sensed, repr(part.value)]))
    # Without `noopac` the raw file begins with the operating point's plot.
    return "\n".join([*lines, ".options noopac", *commands, ".end", ""])


def run(folder: Path, text: str) -> bytes:
    """The raw file that ngspice makes of a deck."""
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")
    assert program is not None
    (folder / "deck.cir").write_text(text, encoding="utf-8")
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
        cwd=folder,
        env={**os.environ, "HOME": str(folder)},
        capture_output=True,
        check=True,
        timeout=60,
    )
    return (folder / "deck.raw").read_bytes()


def assert_ac_agrees(folder: Path, network: Network, low: float, high: float) -> None:
    """Every node's curve lies within `AGREES` of its greatest magnitude, at ngspice's own frequencies."""
    curves = parse_raw(run(folder, deck(network, f".ac dec 10 {low!r} {high!r}")), "deck.raw")
    for node in network.nodes[1:]:
        curve = curves.get(f"v({node})", "ac")
        assert curve is not None
        exact = response(network, curve.axis, node)
        size = np.abs(exact).max()
        assert np.abs(curve.values - exact).max() <= AGREES * max(size, 1e-3), node


@pytest.mark.parametrize("seed", range(6))
def test_ac_sweeps_of_random_networks_agree(tmp_path: Path, seed: int) -> None:
    """Random ladders, trees and meshes over four decades of values."""
    rng = random.Random(f"ngspice {seed}")
    network = (
        reference.random_ladder(rng, rng.randint(2, 20), 4)
        if seed < 2
        else reference.random_tree(rng, rng.randint(2, 25), 4)
        if seed < 4
        else reference.random_mesh(rng, rng.randint(3, 15), 4)
    )
    # ngspice adds its GMIN to no linear part, but a node that only capacitors hold stops its operating point.
    for k, node in enumerate(network.nodes[2:]):
        network.add_resistor(f"Rleak{k}", node, "0", 1e6)
    assert_ac_agrees(tmp_path, network, 1e2, 1e8)


@pytest.mark.parametrize("kinds", ["EG", "FH", "L"])
def test_ac_sweeps_with_controlled_sources_agree(tmp_path: Path, kinds: str) -> None:
    """The sign conventions of E, G, F, H and of source currents are SPICE's."""
    network = Network()
    network.add_voltage_source("V1", "in", "0", ac=1, dc=2)
    network.add_resistor("R1", "in", "a", 1e3)
    network.add_capacitor("C1", "a", "0", 10e-9)
    network.add_resistor("R2", "a", "b", 4.7e3)
    network.add_voltage_source("Vs", "b", "c", dc=0)
    network.add_resistor("R3", "c", "0", 2.2e3)
    network.add_capacitor("C2", "c", "0", 3.3e-9)
    for kind in kinds:
        if kind == "E":
            network.add_voltage_controlled_voltage_source("E1", "e", "0", "a", "c", -3.0)
            network.add_resistor("Re", "e", "b", 10e3)
        elif kind == "G":
            network.add_voltage_controlled_current_source("G1", "c", "0", "a", "b", 2e-4)
        elif kind == "F":
            network.add_current_controlled_current_source("F1", "a", "0", "Vs", 0.7)
        elif kind == "H":
            network.add_current_controlled_voltage_source("H1", "h", "0", "Vs", 500.0)
            network.add_resistor("Rh", "h", "c", 10e3)
        else:
            network.add_inductor("L1", "a", "c", 1e-3)
    assert_ac_agrees(tmp_path, network, 1e2, 1e7)
    point = parse_raw(run(tmp_path, deck(network, ".op")), "deck.raw")
    for node, volts in operating_point(network).items():
        curve = point.get(f"v({node})", "operating point")
        assert curve is not None
        assert curve.values[0] == pytest.approx(volts, rel=AGREES, abs=AGREES)
    for name, amperes in source_currents(network).items():
        curve = point.get(f"i({name})", "operating point")
        assert curve is not None
        assert curve.values[0] == pytest.approx(amperes, rel=AGREES, abs=AGREES)


def test_a_current_source_has_spices_sign(tmp_path: Path) -> None:
    """A current source drives its current from its first node through itself to its second."""
    network = Network()
    network.add_current_source("I1", "0", "a", ac=1, dc=1e-3)
    network.add_resistor("R1", "a", "b", 1e3)
    network.add_capacitor("C1", "a", "0", 1e-9)
    network.add_resistor("R2", "b", "0", 3e3)
    assert operating_point(network)["a"] == pytest.approx(4.0)
    assert_ac_agrees(tmp_path, network, 1e2, 1e7)


def test_several_ac_sources_agree(tmp_path: Path) -> None:
    """Two sources of different magnitude drive one network: the response is in volts, as SPICE's."""
    network = Network()
    network.add_voltage_source("V1", "a", "0", ac=2)
    network.add_current_source("I1", "0", "out", ac=1e-3)
    network.add_resistor("R1", "a", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1 / (2 * math.pi * 1e6))
    network.add_resistor("R2", "out", "0", 3e3)
    assert_ac_agrees(tmp_path, network, 1e2, 1e6)
