"""The shape of a network: a chain of sections from the source to the output, or a known bridge.

Only the graph decides; values enter where a name depends on them nowhere. What is not recognised has no
shape, and the rules that need one leave it alone.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

from ..circuit import Network, Part
from .arms import Arm, Mesh, capacitor, resistor
from .formula import ONE, Formula, name, parallel

# The kind of a section by the kinds of its series and its shunt arm.
KINDS = {
    ("R", "C"): "low-pass",
    ("R", "R||C"): "low-pass",
    ("C", "R"): "high-pass",
    ("C", "R||C"): "high-pass",
    ("R-C", "R"): "high-pass",
    ("R", "R"): "divider",
    ("C", "C"): "capacitive divider",
    ("R-C", "R||C"): "band-pass",
    ("R||C", "R"): "lead",
    ("R", "R-C"): "lag",
    ("R||C", "R||C"): "compensated divider",
}


@dataclass(frozen=True)
class Section:
    """One arm along the way and one from there to ground.

    kind: one of KINDS, or `other`; node: where the two arms meet
    """

    kind: str
    series: Arm
    shunt: Arm
    node: str

    @cached_property
    def time_constant(self) -> Formula | None:
        """Of the section standing alone, s; None where it has not just one."""
        r, c = self.series, self.shunt
        if self.kind == "low-pass" and r.resistance is not None and c.capacitance is not None:
            through = r.resistance if c.resistance is None else parallel(r.resistance, c.resistance)
            return through * c.capacitance
        if self.kind == "high-pass" and r.capacitance is not None and c.resistance is not None:
            if r.resistance is not None:
                return (r.resistance + c.resistance) * r.capacitance
            held = r.capacitance if c.capacitance is None else r.capacitance + c.capacitance
            return c.resistance * held
        return None


@dataclass(frozen=True)
class Chain:
    """Sections from the source to the output, in blocks with a buffer between each two.

    gain: of the buffers, and what makes volts of the source's unit
    """

    blocks: tuple[tuple[Section, ...], ...]
    gain: Formula

    @cached_property
    def sections(self) -> tuple[Section, ...]:
        """Every section, from the source on."""
        return tuple(section for block in self.blocks for section in block)

    @property
    def buffers(self) -> int:
        """How many buffers stand between sections."""
        return len(self.blocks) - 1

    def all_of(self, kind: str) -> bool:
        """True if there are sections, and all are of one kind."""
        return bool(self.sections) and all(section.kind == kind for section in self.sections)

    def loads(self, omega: float) -> Iterator[tuple[int, float]]:
        """What each unbuffered section's successor takes over what it gives, as impedances at omega.

        Yields the number of the section, from 1, and |Z into the next| / |Z out of this one|.
        """
        number = 0
        s = 1j * omega
        for block in self.blocks:
            into: list[complex] = []
            behind: complex | None = None
            for section in reversed(block):
                shunt = section.shunt.impedance(s)
                behind = section.series.impedance(s) + (
                    shunt if behind is None else 1 / (1 / shunt + 1 / behind)
                )
                into.insert(0, behind)
            back = 0j
            for k, section in enumerate(block):
                number += 1
                back = 1 / (1 / section.shunt.impedance(s) + 1 / (back + section.series.impedance(s)))
                if k + 1 < len(block):
                    yield number, abs(into[k + 1]) / abs(back)


@dataclass(frozen=True)
class TwinT:
    """Two tees side by side: R1, R2 with C3 to ground; C1, C2 with R3 to ground."""

    r1: Formula
    r2: Formula
    c3: Formula
    c1: Formula
    c2: Formula
    r3: Formula
    load: Arm | None


@dataclass(frozen=True)
class BridgedT:
    """A tee of two equal kinds with the other kind to ground, and a bridge of that other kind.

    first, second: along the way; shunt: to ground; bridge: from end to end; of_capacitors: the two are
    capacitors
    """

    first: Formula
    second: Formula
    shunt: Formula
    bridge: Formula
    of_capacitors: bool
    load: Arm | None


@dataclass(frozen=True)
class Shape:
    """What a network was recognised as; all None where it was not."""

    chain: Chain | None = None
    twin_t: TwinT | None = None
    bridged_t: BridgedT | None = None


def shape_of(network: Network, driver: str, of: tuple[int, int]) -> Shape:
    """The shape between a driving source and an output; with no shape where the output is no single node."""
    if of[1] != 0 or of[0] == 0:
        return Shape()
    plan = _plan(network, driver)
    if plan is None:
        return Shape()
    return _followed(plan, plan.merged[of[0]])


# ---------------------------------------------------------------------- reading the network


@dataclass
class _Plan:
    """The network as recognition sees it, dead sources taken as the wires or gaps that they are.

    merged: for each node, the one that stands for it (0 is ground); passive: by node, the resistors and
    capacitors on it as (other node, arm, part); driven: the node of the source, gain: volts there for a unit
    of it, current: True where it is a current source
    """

    merged: list[int]
    names: tuple[str, ...]
    passive: dict[int, list[tuple[int, Arm, str]]] = field(default_factory=dict)
    buffers: dict[int, tuple[int, Formula]] = field(default_factory=dict)
    driven: int = 0
    gain: Formula = ONE
    current: bool = False

    @property
    def fixed(self) -> set[int]:
        """Ground and every node whose voltage something fixes."""
        held = {0, *self.buffers}
        return held if self.current else held | {self.driven}


def _plan(network: Network, driver: str) -> _Plan | None:
    parts = list(network.parts)
    if any(part.kind not in "RCVIE" for part in parts):
        return None
    plan = _Plan(_merged(network, parts, driver), network.nodes)
    for part in parts:
        ends = [plan.merged[network.node_index(node)] for node in part.nodes]
        if part.kind in "RC" and ends[0] != ends[1]:
            own = name(part.name, part.value)
            arm = resistor(own) if part.kind == "R" else capacitor(own)
            plan.passive.setdefault(ends[0], []).append((ends[1], arm, part.name))
            plan.passive.setdefault(ends[1], []).append((ends[0], arm, part.name))
        elif part.kind == "E":
            if ends[1] != 0 or ends[3] != 0 or ends[0] in (0, *plan.buffers):
                return None
            gain = ONE if part.value == 1 else name(part.name, part.value)
            plan.buffers[ends[0]] = (ends[2], gain)
        elif part.name == driver:
            plan.driven = ends[0] or ends[1]
            if 0 not in ends or ends[0] == ends[1]:
                return None
            plan.current = part.kind == "I"
            plan.gain = _sign(ends[0] == 0 if part.kind == "V" else ends[1] == 0)
    return None if plan.driven in plan.buffers else plan


def _sign(negative: bool) -> Formula:
    return Formula("-1", "-1", -1.0, 1) if negative else ONE


def _merged(network: Network, parts: list[Part], driver: str) -> list[int]:
    """For each node the lowest one that dead voltage sources join it with."""
    label = list(range(len(network.nodes)))

    def find(node: int) -> int:
        while label[node] != node:
            node = label[node]
        return node

    for part in parts:
        if part.kind == "V" and part.name != driver:
            a, b = (find(network.node_index(node)) for node in part.nodes)
            label[max(a, b)] = min(a, b)
    return [find(node) for node in range(len(label))]


# ---------------------------------------------------------------------- following the signal


def _followed(plan: _Plan, output: int) -> Shape:
    """From the output back to the source, one block for each buffer on the way."""
    blocks: list[tuple[Section, ...]] = []
    target, gain, seen = output, ONE, set[int]()
    while target not in seen and target != 0:
        seen.add(target)
        if target in plan.buffers:
            target, own = plan.buffers[target]
            gain = own * gain
            continue
        if not plan.current and target == plan.driven:
            return _chain(blocks, plan.gain * gain)
        entered = _injected(plan, *_component(plan, target))
        if entered is None:
            return Shape()
        entry, factor, arms = entered
        mesh = Mesh(arms, (entry, target, 0))
        sections = _ladder(plan, mesh, entry, target)
        at_source = entry in (plan.driven, _BEHIND)
        if sections is None:
            return _bridge(mesh, entry, target) if at_source and not blocks else Shape()
        if sections:
            blocks.insert(0, sections)
        if at_source:
            return _chain(blocks, plan.gain * factor * gain)
        target = entry
    return Shape()


def _chain(blocks: list[tuple[Section, ...]], gain: Formula) -> Shape:
    return Shape(Chain(tuple(blocks), gain)) if blocks else Shape()


_BEHIND = -1  # the node behind the resistance of a current source
_Arms = list[tuple[int, int, Arm]]


def _component(plan: _Plan, start: int) -> tuple[_Arms, set[int]]:
    """The arms joined with a node through nodes nothing fixes, and the fixed nodes they touch."""
    fixed = plan.fixed
    todo, inside, touched = [start], {start}, set[int]()
    arms: dict[str, tuple[int, int, Arm]] = {}
    while todo:
        node = todo.pop()
        for other, arm, part in plan.passive.get(node, ()):
            arms.setdefault(part, (node, other, arm))
            if other in fixed:
                touched.add(other)
            elif other not in inside:
                inside.add(other)
                todo.append(other)
    if plan.current and plan.driven in inside:
        touched.add(_BEHIND)
    return list(arms.values()), touched - {0}


def _injected(plan: _Plan, arms: _Arms, drivers: set[int]) -> tuple[int, Formula, _Arms] | None:
    """Where the one driver enters, by what factor, and the arms behind it.

    A current into a node with a resistor to ground is a voltage behind that resistor (Thevenin).
    """
    if len(drivers) != 1:
        return None
    (entry,) = drivers
    if entry != _BEHIND:
        return entry, ONE, arms
    beside = [arm for a, b, arm in arms if {a, b} == {plan.driven, 0} and arm.kind == "R"]
    if not beside:
        return None
    resistance = parallel(*(arm.resistance for arm in beside if arm.resistance is not None))
    moved = [
        (_BEHIND, plan.driven, arm) if {a, b} == {plan.driven, 0} and arm.kind == "R" else (a, b, arm)
        for a, b, arm in arms
    ]
    return _BEHIND, resistance, moved


def _ladder(plan: _Plan, mesh: Mesh, entry: int, target: int) -> tuple[Section, ...] | None:
    """The sections along the only way from the entry to the target; None where there is another way."""
    sections: list[Section] = []
    before, here = 0, entry
    while here != target:
        onward = [node for node in mesh.neighbours[here] if node not in (0, before)]
        if len(onward) != 1:
            return None
        before, here = here, onward[0]
        series, shunt = mesh.between(before, here), mesh.between(here, 0)
        if shunt is None or series is None:
            # Only at the end: nothing flows there, so nothing is lost on the way.
            return tuple(sections) if here == target and set(mesh.neighbours[here]) == {before} else None
        kind = KINDS.get((series.kind, shunt.kind), "other")
        sections.append(Section(kind, series, shunt, plan.names[here]))
    if set(mesh.neighbours[target]) - {0, before}:
        return None
    return tuple(sections)


# ---------------------------------------------------------------------- bridges


def _bridge(mesh: Mesh, entry: int, target: int) -> Shape:
    """A twin-T or a bridged T between two nodes."""
    around = mesh.neighbours
    inner = [node for node in around if node not in (entry, target, 0)]
    load = mesh.between(target, 0)
    direct = mesh.between(entry, target)
    tees = []
    for node in inner:
        if set(around[node]) != {entry, target, 0}:
            return Shape()
        tees.append([around[node][end] for end in (entry, target, 0)])
    if len(tees) == 1 and direct is not None:
        return Shape(bridged_t=_bridged(tees[0], direct, load))
    if len(tees) == 2 and direct is None:
        return Shape(twin_t=_twin(tees, load))
    return Shape()


def _bridged(tee: list[Arm], bridge: Arm, load: Arm | None) -> BridgedT | None:
    kinds = tuple(arm.kind for arm in (*tee, bridge))
    if kinds not in (("C", "C", "R", "R"), ("R", "R", "C", "C")):
        return None
    first, second, shunt, over = (_value(arm) for arm in (*tee, bridge))
    return BridgedT(first, second, shunt, over, kinds[0] == "C", load)


def _twin(tees: list[list[Arm]], load: Arm | None) -> TwinT | None:
    by_kind = {"".join(arm.kind for arm in tee): tee for tee in tees}
    if set(by_kind) != {"RRC", "CCR"}:
        return None
    r1, r2, c3 = (_value(arm) for arm in by_kind["RRC"])
    c1, c2, r3 = (_value(arm) for arm in by_kind["CCR"])
    return TwinT(r1, r2, c3, c1, c2, r3, load)


def _value(arm: Arm) -> Formula:
    lumped = arm.resistance if arm.resistance is not None else arm.capacitance
    assert lumped is not None
    return lumped
