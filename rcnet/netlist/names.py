"""Names that every SPICE reads the same: safe characters, unique without regard to case."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from ..circuit import GROUND, Network

# Words a simulator uses for its own vectors; a node of that name disappears from its results (ngspice sheet).
_RESERVED = {"time", "frequency", "gnd", "gnd!", "ground", "all"}
_UNSAFE = re.compile(r"[^A-Za-z0-9_.]")
_MAX = 40  # characters: a part line with four such nodes still fits after wrapping


@dataclass(frozen=True)
class Names:
    """The names in a written netlist: network's name -> netlist's name, for nodes and for parts."""

    nodes: Mapping[str, str]
    parts: Mapping[str, str]

    @property
    def renamed(self) -> list[tuple[str, str, str]]:
        """(`node` or `part`, network's name, netlist's name) wherever the two differ."""
        both = (("node", self.nodes), ("part", self.parts))
        return [(what, old, new) for what, table in both for old, new in table.items() if old != new]


def safe_names(network: Network) -> Names:
    """Safe names for everything in a network. A name that is safe already is kept."""
    nodes = {GROUND: GROUND, **_unique(network.nodes[1:], _safe_node)}
    return Names(nodes, _unique(network.names, _safe_part))


def _safe_node(name: str) -> str:
    safe = _UNSAFE.sub("_", name)[:_MAX]
    if safe.lower() in _RESERVED or not safe.strip("0") or not safe[0].isalnum():
        safe = f"n_{safe}"
    return safe


def _safe_part(name: str) -> str:
    return name[0] + re.sub(r"[^A-Za-z0-9_]", "_", name[1:])[:_MAX]


def _unique(names: Iterable[str], safe: object) -> dict[str, str]:
    assert callable(safe)
    listed = list(names)
    # Names that are safe as they stand keep themselves; the others make way.
    taken: set[str] = set()
    result: dict[str, str] = {}
    for name in listed:
        if safe(name) == name and name.lower() not in taken:
            taken.add(name.lower())
            result[name] = name
    for name in listed:
        if name in result:
            continue
        stem, number = safe(name), 1
        new = stem
        while new.lower() in taken:
            number += 1
            new = f"{stem}_{number}"
        taken.add(new.lower())
        result[name] = new
    return {name: result[name] for name in listed}
