"""Networks of resistors and capacitors taken together, in series and side by side, as far as that goes."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

from .formula import Formula, parallel

Joint = Literal["R", "C", "R-C", "R||C", "other"]


@dataclass(frozen=True)
class Arm:
    """Two terminals with resistors and capacitors between them.

    kind: `R`, `C`, `R-C` (one after the other), `R||C` (side by side), or `other`, which only `inside` tells
    resistance, capacitance: lumped, None where there is none or the kind is `other`
    parts: the names of all parts in it; inside: the two arms an `other` is made of, and whether in a row
    """

    kind: Joint
    resistance: Formula | None
    capacitance: Formula | None
    parts: tuple[Formula, ...]
    inside: tuple[Arm, Arm, bool] | None = None

    def impedance(self, s: complex) -> complex:
        """At a complex frequency, ohm."""
        if self.inside is not None:
            first, second, in_a_row = self.inside
            a, b = first.impedance(s), second.impedance(s)
            return a + b if in_a_row else 1 / (1 / a + 1 / b)
        r = None if self.resistance is None else complex(self.resistance.value)
        x = None if self.capacitance is None else 1 / (s * self.capacitance.value)
        if r is None or x is None:
            answer = r if r is not None else x
            assert answer is not None
            return answer
        return r + x if self.kind == "R-C" else 1 / (1 / r + 1 / x)

    def named(self, letter: str) -> list[Formula]:
        """Its resistors (`R`) or capacitors (`C`)."""
        return [part for part in self.parts if part.text[:1].upper() == letter]


def resistor(part: Formula) -> Arm:
    """One resistor."""
    return Arm("R", part, None, (part,))


def capacitor(part: Formula) -> Arm:
    """One capacitor."""
    return Arm("C", None, part, (part,))


def in_a_row(first: Arm, second: Arm) -> Arm:
    """Two arms one after the other."""
    return _joined(first, second, True)


def side_by_side(first: Arm, second: Arm) -> Arm:
    """Two arms between the same two nodes."""
    return _joined(first, second, False)


def _joined(first: Arm, second: Arm, row: bool) -> Arm:
    mixed: Joint = "R-C" if row else "R||C"
    parts = first.parts + second.parts
    if first.kind not in ("R", "C", mixed) or second.kind not in ("R", "C", mixed):
        return Arm("other", None, None, parts, (first, second, row))
    r = _lump(first.resistance, second.resistance, add=row)
    c = _lump(first.capacitance, second.capacitance, add=not row)
    kind: Joint = "R" if c is None else "C" if r is None else mixed
    return Arm(kind, r, c, parts)


def _lump(first: Formula | None, second: Formula | None, *, add: bool) -> Formula | None:
    if first is None or second is None:
        return first if second is None else second
    if add:
        return first + second
    return parallel(first, second)


# ---------------------------------------------------------------------- reduction


class Mesh:
    """Arms between nodes, taken together wherever two follow each other or stand side by side."""

    def __init__(self, arms: Iterable[tuple[int, int, Arm]], kept: Iterable[int]) -> None:
        self.kept = frozenset(kept)
        self.neighbours: dict[int, dict[int, Arm]] = {node: {} for node in self.kept}
        for a, b, arm in arms:
            self._add(a, b, arm)
        waiting = deque(self.neighbours)
        while waiting:
            waiting.extend(self._reduce(waiting.popleft()))

    def _add(self, a: int, b: int, arm: Arm) -> None:
        if a == b:
            return
        before = self.neighbours.setdefault(a, {}).get(b)
        arm = arm if before is None else side_by_side(before, arm)
        self.neighbours[a][b] = arm
        self.neighbours.setdefault(b, {})[a] = arm

    def _reduce(self, node: int) -> list[int]:
        """Take out a node between two arms, or at the end of one; the nodes to look at again."""
        around = self.neighbours.get(node)
        if around is None or node in self.kept or len(around) > 2:
            return []
        del self.neighbours[node]
        ends = list(around)
        for end in ends:
            del self.neighbours[end][node]
        if len(ends) == 2:
            self._add(ends[0], ends[1], in_a_row(around[ends[0]], around[ends[1]]))
        return ends

    def between(self, a: int, b: int) -> Arm | None:
        """The arm between two nodes."""
        return self.neighbours.get(a, {}).get(b)

    def single(self, a: int, b: int) -> Arm | None:
        """The arm between two nodes where nothing else is left, else None."""
        if set(self.neighbours) != {a, b}:
            return None
        return self.between(a, b)
