"""Names that every SPICE reads the same: safe characters, unique without regard to case."""

from __future__ import annotations

import re
import string
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from ..circuit import GROUND, Network

# Words that begin something else where a node's name could stand: a source's drive, an expression.
_DRIVES = {"dc", "ac", "pulse", "sin", "sine", "pwl", "exp", "sffm", "am", "trnoise", "trrandom", "external"}
_EXPRESSIONS = {"poly", "value", "vol", "cur", "table", "laplace", "freq"}
KEYWORDS = frozenset(_DRIVES | _EXPRESSIONS)
# Words a simulator uses for its own vectors (a node called `time` disappears from the results of ngspice 39)
# or takes for ground.
_RESERVED = KEYWORDS | {"time", "frequency", "temper", "gnd", "ground", "all"}
_LOUD = frozenset(word.upper() for word in _RESERVED)
MAX_NAME = 36  # characters: `+ v(a,b)` with two such names fits in a line
_MANY = 1000  # names; fewer are looked at one by one


@dataclass(frozen=True)
class Names:
    """The names in a written netlist: network's name -> netlist's name, for nodes and for parts."""

    nodes: Mapping[str, str]
    parts: Mapping[str, str]

    @property
    def renamed(self) -> list[tuple[str, str, str]]:
        """(`node` or `part`, network's name, netlist's name) wherever the two differ."""
        both = [("node", self.nodes), ("part", self.parts)]
        changed = [(what, table) for what, table in both if [*table] != [*table.values()]]
        return [(what, old, new) for what, table in changed for old, new in table.items() if old != new]


@dataclass(frozen=True)
class Alphabet:
    """What names are made of beside letters and digits, behind the first character, and how long they get."""

    nodes: str = "_."
    parts: str = "_"
    longest: int = MAX_NAME


USUAL = Alphabet()


def safe_names(network: Network, alphabet: Alphabet = USUAL) -> Names:
    """Safe names for everything in a network. A name that is safe already is kept."""
    longest = alphabet.longest
    nodes = _table(network.nodes[1:], _safe_node, alphabet.nodes, longest)
    return Names({GROUND: GROUND, **nodes}, _table(network.names, _safe_part, alphabet.parts, longest))


def _table(
    names: Sequence[str], safe: Callable[[str, str], str], others: str, longest: int
) -> dict[str, str]:
    """Each name's safe form, all of them different. Names that are all plain are not looked at one by one."""
    if len(names) >= _MANY and _all_plain(names, others, longest):
        return dict(zip(names, names, strict=True))
    return _unique({name: safe(name, others)[:longest] for name in names}, longest)


def _all_plain(names: Sequence[str], others: str, longest: int) -> bool:
    """True if every name is safe as it stands, as a node and as a part, and unique without regard to case."""
    whole = "\n".join(["", *names])
    plain = f"{string.ascii_letters}{string.digits}{others}\n"
    if not whole.isascii() or whole.encode().translate(None, plain.encode()):
        return False
    if whole.count("\n") != len(names) or max(map(len, names)) > longest:
        return False
    if any(f"\n{first}" in whole for first in "_.0"):  # what leads no node, and what may be another ground
        return False
    if whole in (whole.lower(), whole.upper()):  # of one case, so that names that differ stay different
        return _RESERVED.isdisjoint(names) and _LOUD.isdisjoint(names)
    return len({*whole.lower().split("\n")} - _RESERVED - {""}) == len(names)


def folded(name: str) -> str:
    """The name as ngspice 39 keeps it: ASCII letters small, the micro sign `u`, other bytes `_` each."""
    plain = name.replace("µ", "u")
    return "".join(c.lower() if c.isascii() else "_" * len(c.encode("utf-8", "replace")) for c in plain)


def _safe_node(name: str, others: str) -> str:
    safe = re.sub(rf"[^A-Za-z0-9{others}]", "_", name)
    # `00`, `0.0` and their like are ordinary nodes to ngspice, and ground to other readers.
    if safe.lower() in _RESERVED or not safe.strip("0.") or not safe[0].isalnum():
        safe = f"n_{safe}"
    return safe


def _safe_part(name: str, others: str) -> str:
    letter = name[0] if name[0].isascii() else name[0].upper()
    return letter + re.sub(rf"[^A-Za-z0-9{others}]", "_", name[1:])


def _unique(wanted: Mapping[str, str], longest: int) -> dict[str, str]:
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
            result[name] = _free(stem, taken, counts, longest)
    return result


def _free(stem: str, taken: set[str], counts: dict[str, int], longest: int) -> str:
    """The stem, or the stem with the first number behind it that makes it new; it is marked as taken."""
    new, key = stem, stem.lower()
    while new.lower() in taken:
        counts[key] = number = counts.get(key, 1) + 1
        new = f"{stem[: longest - len(str(number)) - 1]}_{number}"
    taken.add(new.lower())
    return new
