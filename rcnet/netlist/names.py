"""Names that every SPICE reads the same: safe characters, unique without regard to case."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass

from ..circuit import GROUND, Network

# Words that begin something else where a node's name could stand: a source's drive, an expression.
_DRIVES = {"dc", "ac", "pulse", "sin", "sine", "pwl", "exp", "sffm", "am", "trnoise", "trrandom", "external"}
_EXPRESSIONS = {"poly", "value", "vol", "cur", "table", "laplace", "freq"}
KEYWORDS = frozenset(_DRIVES | _EXPRESSIONS)
# Words a simulator uses for its own vectors (a node called `time` disappears from the results of ngspice 39)
# or takes for ground.
_RESERVED = KEYWORDS | {"time", "frequency", "gnd", "ground", "all"}
MAX_NAME = 36  # characters: `+ v(a,b)` with two such names fits in a line


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


def folded(name: str) -> str:
    """The name as ngspice 39 keeps it: ASCII letters small, the micro sign `u`, other bytes `_` each."""
    plain = name.replace("µ", "u")
    return "".join(c.lower() if c.isascii() else "_" * len(c.encode("utf-8", "replace")) for c in plain)


def _safe_node(name: str) -> str:
    safe = re.sub(r"[^A-Za-z0-9_.]", "_", name)
    # `00`, `0.0` and their like are ordinary nodes to ngspice, and ground to other readers.
    if safe.lower() in _RESERVED or not safe.strip("0.") or not safe[0].isalnum():
        safe = f"n_{safe}"
    return safe[:MAX_NAME]


def _safe_part(name: str) -> str:
    letter = name[0] if name[0].isascii() else name[0].upper()
    return letter + re.sub(r"[^A-Za-z0-9_]", "_", name[1:])[: MAX_NAME - 1]


def _unique(names: Iterable[str], safe: Callable[[str], str]) -> dict[str, str]:
    wanted = {name: safe(name) for name in names}
    result = dict.fromkeys(wanted, "")
    # Names that are safe as they stand keep themselves; the others make way.
    taken: set[str] = set()
    for name, stem in wanted.items():
        if stem == name and name.lower() not in taken:
            taken.add(name.lower())
            result[name] = name
    counts: dict[str, int] = {}
    for name, stem in wanted.items():
        if not result[name]:
            result[name] = _free(stem, taken, counts)
    return result


def _free(stem: str, taken: set[str], counts: dict[str, int]) -> str:
    """The stem, or the stem with the first number behind it that makes it new; it is marked as taken."""
    new, key = stem, stem.lower()
    while new.lower() in taken:
        counts[key] = number = counts.get(key, 1) + 1
        new = f"{stem[: MAX_NAME - len(str(number)) - 1]}_{number}"
    taken.add(new.lower())
    return new
