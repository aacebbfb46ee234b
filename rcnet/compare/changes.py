"""A network with a suspicion applied to it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from ..circuit import GROUND, Network, Part, Source
from .suspicion import Suspicion

SILENT_SHORT = 1e-3  # ohm: what ngspice 39 makes of a resistor of 0 without a word
LONGEST_SHORT = 1e-2  # ohm: what a joint or a link has at most
LEAST_SHORT = 1e-6  # ohm: what a wire may have; with less a simulator's rounding is all there is to see


def changed(network: Network, suspicion: Suspicion) -> Network:
    """A copy of the network with the suspicion applied; for those about the network only.

    Raises RcnetError where the changed network is none.
    """
    return _CHANGES[suspicion.kind](network, suspicion)


def with_values_of(network: Network, suspicion: Suspicion) -> dict[str, float] | None:
    """The part values that change, where nothing but values does; else None."""
    if suspicion.kind == "part-value":
        (name,) = suspicion.parts
        return {name: network.part(name).value * (suspicion.amount or 0.0)}
    if suspicion.kind == "parts-exchanged":
        first, second = (network.part(name) for name in suspicion.parts)
        if first.kind == second.kind:
            return {first.name: second.value, second.name: first.value}
    if suspicion.kind == "temperature":
        heat = suspicion.amount or 0.0
        return {part.name: part.value * (1 + part.tempco * heat) for part in network.parts if part.tempco}
    return None


def _values(network: Network, suspicion: Suspicion) -> Network:
    changes = with_values_of(network, suspicion)
    assert changes is not None
    return network.with_values(changes)


def _without(network: Network, suspicion: Suspicion) -> Network:
    return _rebuilt(network, lambda part: None if part.name in suspicion.parts else part)


def _shorted(network: Network, suspicion: Suspicion) -> Network:
    (name,) = suspicion.parts
    part = network.part(name)
    link = Part(_free_name(network, "R", name), "R", part.nodes, suspicion.amount or SILENT_SHORT)
    return _rebuilt(network, lambda old: link if old.name == name else old)


def _exchanged(network: Network, suspicion: Suspicion) -> Network:
    if with_values_of(network, suspicion) is not None:
        return _values(network, suspicion)
    first, second = (network.part(name) for name in suspicion.parts)
    places = {first.name: second.nodes, second.name: first.nodes}
    return _rebuilt(network, lambda part: replace(part, nodes=places.get(part.name, part.nodes)))


def _with_extra(network: Network, suspicion: Suspicion) -> Network:
    twin = network.copy()
    a, b = suspicion.nodes
    name = _free_name(network, suspicion.letter, "extra")
    twin.add_part(Part(name, suspicion.letter, (a, b), suspicion.amount or 0.0))
    return twin


def _scaled(network: Network, suspicion: Suspicion) -> Network:
    twin, factor = network, suspicion.amount or 0.0
    for name in suspicion.parts:
        source = network.sources[name]
        turn = 180.0 if factor < 0 else 0.0
        ac = None if source.ac is None else source.ac * abs(factor)
        twin = twin.with_source(
            replace(source, ac=ac, ac_phase=source.ac_phase + turn, dc=source.operating_value * factor)
        )
    return twin


def _behind(network: Network, suspicion: Suspicion) -> Network:
    """The source moved to a node of its own, and the impedance put between."""
    (name,) = suspicion.parts
    a, _ = network.sources[name].nodes
    inner = "feed"
    while network.has_node(inner):
        inner += "_"
    twin = _rebuilt(network, lambda part: part, name, inner)
    letter = suspicion.letter
    twin.add_part(Part(_free_name(network, letter, "feed"), letter, (inner, a), suspicion.amount or 0.0))
    return twin


def _shunted(network: Network, suspicion: Suspicion) -> Network:
    """A resistor or a capacitor from every node to ground, as `rshunt` and `cshunt` put them."""
    twin = network.copy()
    amount = suspicion.amount or 0.0
    for number, node in enumerate(node for node in network.nodes if node != GROUND):
        name = _free_name(network, suspicion.letter, f"shunt{number}")
        twin.add_part(Part(name, suspicion.letter, (node, GROUND), amount))
    return twin


def _rebuilt(
    network: Network, part_of: Callable[[Part], Part | None], moved: str = "", to: str = ""
) -> Network:
    """A copy part by part; `moved` is a source whose first node becomes `to`."""
    twin = Network(network.title)
    for part in network.parts:
        if part.name in network.sources:
            source: Source = network.sources[part.name]
            twin.add_source(replace(source, nodes=(to, source.nodes[1])) if part.name == moved else source)
        elif (kept := part_of(part)) is not None:
            twin.add_part(kept)
    return twin


def _free_name(network: Network, letter: str, wish: str) -> str:
    name = f"{letter}_{wish}"
    while name in network:
        name += "_"
    return name


_CHANGES: dict[str, Callable[[Network, Suspicion], Network]] = {
    "part-value": _values,
    "temperature": _values,
    "parts-exchanged": _exchanged,
    "part-missing": _without,
    "part-shorted": _shorted,
    "part-extra": _with_extra,
    "load": _with_extra,
    "source-scale": _scaled,
    "source-impedance": _behind,
    "simulator": _shunted,
}
