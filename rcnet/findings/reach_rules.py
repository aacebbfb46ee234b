"""Rules about what reaches what: parts without a source, parts without an effect."""

from __future__ import annotations

import re
from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, Circuit, floating_nodes
from ..circuit.topology import blocks, influenced
from ._telling import few, listed, meant
from .finding import Remark, rule

Rows = npt.NDArray[np.int64]

# Measures taken with every source dead, or of what parts make by themselves: no source need reach anything.
_WITHOUT_SOURCES = {"noise", "output_impedance", "time_constant", "discharge_time"}
_ASKING = re.compile(r"\s*\.(print|plot|save|probe|noise|four|tf|pz|meas)", re.IGNORECASE)


@rule("loose-part", "note")
def loose_part(circuit: Circuit) -> Iterator[Remark]:
    """Parts that no source reaches, or that are not connected to what is looked at: dead weight.

    Often a connection is missing, and a simulator says nothing. A warning where no source reaches the output.
    """
    network = circuit.network
    driven, label = _driven(circuit), blocks(network, _left_out_ties(circuit))
    if not driven or (label[1:] == label[-1]).all():
        return
    looked = _looked_at(circuit)
    cold = ~influenced(network, label, driven)
    if _asks_without_sources(circuit):
        cold &= ~influenced(network, label, looked, "back")
    # Where nothing arrives at what is looked at, that says it all.
    fed = any(not cold[node] for node in looked)
    apart = ~influenced(network, label, looked, "both") if fed else np.zeros_like(cold)
    dead = cold | apart
    # What has no connection to ground either is an error of its own.
    floating = [node for group in floating_nodes(network, dc=False) for node in group]
    dead[[0, *(network.node_index(node) for node in floating)]] = False
    if not dead.any():
        return
    outputs = {int(label[node]): network.nodes[node] for node in looked}

    def tell(block: tuple[int, list[str]]) -> Remark:
        at, parts = block
        return _dead_weight(circuit, parts, bool(cold[label == at].any()), outputs.get(at))

    # A node with a single part is another rule's.
    yield from few(
        [(at, parts) for at, parts in _parts_of(circuit, label, dead).items() if len(parts) > 1],
        tell,
        "groups of parts are reached by no source or not connected to what is looked at",
    )


def _dead_weight(circuit: Circuit, parts: list[str], cold: bool, output: str | None) -> Remark:
    said = listed(parts)
    if not cold:
        message = f"{said} are not connected to what is looked at."
    elif output is None:
        message = f"no source reaches {said}, so nothing ever happens there."
    else:
        message = f"no source reaches {said}, so nothing arrives at {output!r}."
    return Remark(
        message,
        "Connect them to the rest, or take them out.",
        circuit.place_of(parts[0]),
        "warning" if cold and output is not None else None,
    )


def _left_out_ties(circuit: Circuit) -> list[tuple[int, int]]:
    """What was left out of a netlist joins the nodes that it touches."""
    index = circuit.network.node_index
    return [(index(gone.nodes[0]), index(node)) for gone in circuit.left_out for node in gone.nodes[1:]]


def _parts_of(circuit: Circuit, label: Rows, dead: npt.NDArray[np.bool_]) -> dict[int, list[str]]:
    """The parts of each dead block, by its label."""
    arrays, names = circuit.network.arrays(), circuit.network.names
    end = arrays.nodes[:, :2].max(axis=1)
    rows = np.flatnonzero((end > 0) & dead[np.maximum(end, 0)])
    found: dict[int, list[str]] = {}
    for row, block in zip(rows.tolist(), label[end[rows]].tolist(), strict=True):
        found.setdefault(block, []).append(names[row])
    return found


def _driven(circuit: Circuit) -> list[int]:
    """The nodes of the sources that do anything, or that a `.dc` or `.tf` works on."""
    network = circuit.network
    asked = {word.lower() for request in circuit.requests for word in re.split(r"[\s(),]+", request.text)}
    return [
        network.node_index(node)
        for source in network.sources.values()
        if source.ac or source.dc or source.waveform is not None or source.name.lower() in asked
        for node in source.nodes
    ]


def _asks_without_sources(circuit: Circuit) -> bool:
    return circuit.analyses.noise is not None or any(
        claim.measure.name in _WITHOUT_SOURCES for claim in circuit.claims
    )


def _looked_at(circuit: Circuit) -> list[int]:
    """The nodes that output, claims and the netlist's own dot lines look at; none where every node is."""
    network = circuit.network
    if not circuit.output:
        return []
    names = meant(circuit)
    for claim in circuit.claims:
        if (part := claim.options.get("part")) is not None and str(part) in network:
            names.update(network.part(str(part)).nodes)
        if claim.measure.name == "input_impedance":
            names.update(node for source in network.sources.values() for node in source.nodes)
    if circuit.origin == "netlist":
        words = _dotted_words(circuit)
        if words is None:
            return []
        names.update(node for node in network.nodes if node.lower() in words)
        names.update(
            node for name, source in network.sources.items() if name.lower() in words for node in source.nodes
        )
    return [network.node_index(node) for node in names if network.has_node(node) and node != GROUND]


def _dotted_words(circuit: Circuit) -> set[str] | None:
    """Every word of the lines that ask for results, in lower case; None where none names what it wants."""
    words: set[str] = set()
    asking = False
    for line in circuit.lines:
        if not line.lstrip().startswith("+"):
            asking = _ASKING.match(line) is not None
        if asking:
            words.update(re.split(r"[\s(),={}'\"]+", line.lower()))
    return words if words and "all" not in words else None
