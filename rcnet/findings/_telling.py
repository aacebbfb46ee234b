"""What rules share in telling: where something stands, and few words where there are many cases."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import replace
from typing import TypeVar

import numpy as np

from ..circuit import GROUND, KINDS, Circuit, Part, Place
from ..errors import RcnetError
from ..values import parse_quantity
from .finding import Remark

MOST = 20  # remarks of one rule; nobody reads more
_WORD = re.compile(r"[^\s,()='\"{}]+")

Item = TypeVar("Item")


def whole(circuit: Circuit) -> Place:
    """The circuit as a whole."""
    return Place(circuit.file or circuit.name, None)


def few(items: Sequence[Item], tell: Callable[[Item], Remark], more: str) -> Iterator[Remark]:
    """A remark for each item; of many the first ones, and one that says how many more there are.

    more: what is true of the others, put behind their number, as `nodes are touched by one part alone`
    """
    told = len(items) if len(items) <= MOST else MOST - 1
    for item in items[:told]:
        yield tell(item)
    if told < len(items):
        yield replace(tell(items[told]), message=f"{len(items) - told} more {more}.")


def listed(names: Iterable[str], most: int = 8) -> str:
    """`a, b and 7 more`."""
    every = list(names)
    return ", ".join(every[:most]) + (f" and {len(every) - most} more" if len(every) > most else "")


def at_value(circuit: Circuit, part: Part) -> Place:
    """Where a part stands, pointing at its value where that is one word."""
    place = circuit.place_of(part.name)
    if text := circuit.value_texts.get(part.name):
        return place.at(text)
    words = list(_WORD.finditer(place.text))
    texts = [word[0] for word in words]
    if part.name not in texts:
        return place
    first = texts.index(part.name) + 1
    if tuple(texts[first : first + len(part.nodes)]) == part.nodes:  # else a section of a ladder
        first += len(part.nodes)
    for word in words[first : first + 2]:
        try:
            same = parse_quantity(word[0], KINDS[part.kind].unit) == part.value
        except RcnetError:
            continue
        if same:
            return replace(place, column=word.start() + 1, width=len(word[0]))
    return place


def at_node(circuit: Circuit, node: int) -> Place:
    """Where the first part that touches a node stands, pointing at the node's name."""
    rows = (circuit.network.arrays().nodes == node).any(axis=1)
    return circuit.place_of(circuit.network.names[int(np.argmax(rows))]).at(circuit.network.nodes[node])


def meant(circuit: Circuit) -> set[str]:
    """The nodes that the output and the claims look at, and ground."""
    return {GROUND, *circuit.output, *(node for claim in circuit.claims for node in claim.of)}
