"""One part changed by any amount, beside networks that really hold the changed part."""

from __future__ import annotations

import math

import numpy as np
import pytest
from shared_networks import NETWORKS, buffered, driven, every_kind, twin_t

from rcnet.circuit import Network
from rcnet.errors import CircuitError, UnsolvableError
from rcnet.exact import between, every_part, one_part, response

FREQUENCIES = [30.0, 1e4, 3e5, 2e7]


def without(network: Network, gone: str, joined: tuple[str, str] | None = None) -> Network:
    """The network rebuilt without a part, and with its two nodes one where `joined` names them."""
    rebuilt = Network()
    for part in network.parts:
        if part.name == gone:
            continue
        nodes = [joined[0] if joined and node == joined[1] else node for node in part.nodes]
        if part.kind == "V":
            rebuilt.add_voltage_source(part.name, *nodes, ac=network.sources[part.name].ac)
        elif part.kind == "R":
            rebuilt.add_resistor(part.name, *nodes, part.value)
        elif part.kind == "C":
            rebuilt.add_capacitor(part.name, *nodes, part.value)
        else:
            rebuilt.add_voltage_controlled_voltage_source(part.name, *nodes, part.value)
    return rebuilt


@pytest.mark.parametrize("name", NETWORKS)
def test_scaling_by_any_factor_is_the_changed_network(name: str) -> None:
    """From a thousandth to a thousandfold, every part of every kind, within 1e-11 of the greatest value."""
    network, factors = NETWORKS[name](), [1e-3, 0.5, 1.0, 2.0, 1e3]
    for part, found in every_part(network, FREQUENCIES, "out").items():
        scaled = found.scaled(factors)
        assert scaled.shape == (len(factors), len(FREQUENCIES))
        for k, factor in enumerate(factors):
            changed = network.with_values({part: network.part(part).value * factor})
            expected = response(changed, FREQUENCIES, "out")
            limit = 1e-11 * max(np.abs(expected).max(), np.abs(found.response).max())
            assert np.abs(scaled[k] - expected).max() <= limit, (part, factor)


@pytest.mark.parametrize("make", [twin_t, buffered])
def test_open_and_short_are_the_network_without_the_part(make) -> None:
    """A part taken out, and a part replaced by wire, for every R and C whose loss leaves a solution."""
    network = make()
    for name, found in every_part(network, FREQUENCIES, "out").items():
        part = network.part(name)
        if part.kind == "E":
            continue
        expected = response(without(network, name), FREQUENCIES, "out")
        np.testing.assert_allclose(found.opened(), expected, rtol=1e-9, atol=1e-10)
        far = found.scaled(math.inf if part.kind == "R" else 0.0)
        np.testing.assert_array_equal(found.opened(), far)
        kept, lost = part.nodes if part.nodes[1] not in ("0", "out", "in") else part.nodes[::-1]
        if {kept, lost} <= {"0", "in", "b", "d", "out"}:
            continue  # the short would lie across a source, or rename the output
        expected = response(without(network, name, (kept, lost)), FREQUENCIES, "out")
        np.testing.assert_allclose(found.shorted(), expected, rtol=1e-11, atol=1e-13)


def test_a_new_part_between_any_two_nodes() -> None:
    """A load at the output and a bridge across the twin-T, as if they had been there."""
    network = twin_t()
    s = 2j * math.pi * np.array(FREQUENCIES)
    loaded, bridged = network.copy(), network.copy()
    loaded.add_resistor("Rx", "out", "0", 5e3)
    bridged.add_capacitor("Cx", "in", "out", 3e-9)

    load = between(network, FREQUENCIES, "out", "out").changed_by(1 / 5e3)
    bridge = between(network, FREQUENCIES, "out", "in out").changed_by(3e-9 * s)

    np.testing.assert_allclose(load, response(loaded, FREQUENCIES, "out"), rtol=1e-12)
    np.testing.assert_allclose(bridge, response(bridged, FREQUENCIES, "out"), rtol=1e-12)


@pytest.mark.parametrize("name", ["R2", "C3"])
def test_the_change_behind_a_changed_response_is_found_again(name: str) -> None:
    """Seen from the right part, a changed response gives one and the same value at all frequencies."""
    network = twin_t()
    value = network.part(name).value
    seen = response(network.with_values({name: 3 * value}), FREQUENCIES, "out")
    change = one_part(network, FREQUENCIES, "out", name).change_for(seen)
    s = 2j * math.pi * np.array(FREQUENCIES)
    expected = np.full(4, 1 / (3 * value) - 1 / value) if name[0] == "R" else s * 2 * value
    np.testing.assert_allclose(change, expected, rtol=1e-6)

    wrong = one_part(network, FREQUENCIES, "out", "R1").change_for(seen)
    assert np.ptp(wrong.real) > 0.5 * np.abs(wrong.real).max()


def test_a_part_that_does_nothing_changes_nothing() -> None:
    """A resistor across an ideal source may have any value but zero."""
    network = driven(("Rx", "in", "0", 1e3), ("R1", "in", "out", 1e3), ("C1", "out", "0", 1e-9))
    found = one_part(network, FREQUENCIES, "out", "Rx")
    np.testing.assert_array_equal(found.scaled(1e-6), found.response)
    np.testing.assert_array_equal(found.opened(), found.response)
    with pytest.raises(UnsolvableError, match="Rx"):
        found.shorted()


REFUSED = {
    "the only tie to ground": lambda: one_part(driven(("R1", "in", "out", 1e3)), [1e3], "out", "R1").opened(),
    "negative resistor": lambda: one_part(twin_t(), [1e3], "out", "R1").scaled(-1.0),
    "nan": lambda: one_part(twin_t(), [1e3], "out", "R1").scaled(math.nan),
    "a source": lambda: one_part(twin_t(), [1e3], "out", "Vin"),
    "unknown part": lambda: one_part(twin_t(), [1e3], "out", "R9"),
    "short of a controlled source": lambda: one_part(every_kind(), [1e3], "out", "G1").shorted(),
    "frequencies below zero": lambda: one_part(twin_t(), [-1e3], "out", "R1"),
    "factor of an added admittance": lambda: between(twin_t(), [1e3], "out", "x y").scaled(2.0),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_cannot_be_changed_is_refused(case: str) -> None:
    """Each refusal is an error of ours, never a division by zero."""
    with pytest.raises((CircuitError, UnsolvableError)):
        REFUSED[case]()
