"""Small networks that several tests ask: each exercises another way of solving."""

from __future__ import annotations

import random

import mna_reference as reference

from rcnet.circuit import Network


def driven(*parts: tuple[str, str, str, float]) -> Network:
    """Passive parts (name, node, node, value) driven by 1 V between `in` and ground."""
    network = Network()
    network.add_voltage_source("Vin", "in", "0", ac=1)
    add = {"R": network.add_resistor, "C": network.add_capacitor, "L": network.add_inductor}
    for name, a, b, value in parts:
        add[name[0]](name, a, b, value)
    return network


def twin_t() -> Network:
    """Two T networks side by side; not quite a null."""
    return driven(
        ("R1", "in", "x", 1e3),
        ("R2", "x", "out", 1.1e3),
        ("R3", "y", "0", 480.0),
        ("C1", "in", "y", 1e-8),
        ("C2", "y", "out", 1.2e-8),
        ("C3", "x", "0", 2e-8),
    )


def wien() -> Network:
    """Series R and C, shunt R and C: a band-pass."""
    return driven(
        ("R1", "in", "a", 1e3),
        ("C1", "a", "out", 1e-8),
        ("R2", "out", "0", 1.5e3),
        ("C2", "out", "0", 1.2e-8),
    )


def resonant() -> Network:
    """Series R and L, shunt C and R: a peak near the resonance."""
    return driven(
        ("R1", "in", "a", 100.0),
        ("L1", "a", "out", 1e-3),
        ("C1", "out", "0", 1e-8),
        ("R2", "out", "0", 1.5e3),
    )


def buffered() -> Network:
    """RC sections with buffers between, one of them fed back; solved by elimination."""
    network = driven(
        ("R1", "in", "a", 2e3),
        ("C1", "a", "0", 1e-9),
        ("R2", "b", "c", 3e3),
        ("C2", "c", "0", 2e-9),
        ("R3", "d", "out", 1e3),
        ("C3", "out", "0", 4e-9),
        ("C4", "out", "a", 2e-10),
    )
    network.add_voltage_controlled_voltage_source("E1", "b", "0", "a", "0", 1.7)
    network.add_voltage_controlled_voltage_source("E2", "d", "0", "c", "a", 0.7)
    return network


def every_kind() -> Network:
    """Each kind of part once at least, 13 of them and two sources."""
    network = driven(
        ("R1", "in", "a", 1e3),
        ("L1", "a", "b", 1e-3),
        ("C1", "b", "0", 1e-9),
        ("R2", "c", "0", 2e3),
        ("R3", "e", "0", 3e3),
        ("C2", "e", "f", 1e-9),
        ("R4", "f", "0", 1.5e3),
        ("R5", "g", "out", 800.0),
        ("C3", "out", "0", 3e-9),
    )
    network.add_voltage_source("Vs", "b", "c")
    network.add_voltage_controlled_current_source("G1", "0", "e", "b", "a", 1e-3)
    network.add_current_controlled_current_source("F1", "f", "0", "Vs", 1.5)
    network.add_current_controlled_voltage_source("H1", "g", "f", "Vs", 500.0)
    network.add_voltage_controlled_voltage_source("E1", "h", "0", "out", "f", 0.6)
    network.add_resistor("R6", "h", "e", 5e3)
    return network


def ladder() -> Network:
    """Six sections of series and shunt branches over six decades of values, driven at `n0`."""
    network = reference.random_ladder(random.Random("shared ladder"), 6, 6)
    network.add_resistor("Rlast", "n6", "out", 1e3)
    network.add_capacitor("Clast", "out", "0", 1e-9)
    return network


def held_by_capacitors() -> Network:
    """Nothing but capacitors ties `m` and `out` to the rest: no dc solution."""
    return driven(("C1", "in", "m", 1e-9), ("R1", "m", "out", 1e3), ("C2", "out", "0", 2e-9))


NETWORKS = {
    "twin-T": twin_t,
    "band-pass": wien,
    "resonant": resonant,
    "buffered": buffered,
    "every kind": every_kind,
    "ladder": ladder,
    "held by capacitors": held_by_capacitors,
}
