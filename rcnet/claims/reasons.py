"""Why a hand value is off, found by computing what the network would do if it were simpler."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ..circuit import GROUND, Circuit, Claim, Network, Part
from ..errors import RcnetError
from ..exact import driving_sources, node_pair
from .idealised import Split, altered, buffered, splits
from .measures import evaluate
from .profile import profile
from .question import options_at
from .reason_words import Words
from .related_measures import related
from .time_measures import TIME_MEASURES
from .trials import Change, Gap, Hit, Kind

MOST_PARTS = 60
_SAME = 1e-3  # a hand value this near is right: formulas are written with so many digits
_CLOSES = 0.8  # of the gap
_LEAVES = 0.02
# Among many tries some hit by chance, so those of which there are many must hit harder.
_LEAVES_RELATED = 0.005
_LEAVES_TWICE = 0.002  # two things at once
_MOST_PAIRED = 8  # single changes, the nearest ones, that are also tried two by two
_MOST_SINGLE = 6  # stages up to which each buffer is tried alone
# What a measure costs, in measures of a response (a millisecond or two), and how much is spent.
_EFFORT = 200.0
_USUAL = 20  # parts of a network; in larger ones each measure costs more
_IN_TIME, _PERIODIC, _GENERAL_IN_TIME = 4, 20, 40
_PERIODIC_MEASURES = ("mean", "rms", "ripple", "harmonic", "thd", "dissipation", "peak_voltage", "noise")
_PROFILED = ("cutoff", "bandwidth", "centre", "attenuation")
_TOP, _FLAT = 10, 1e-3  # the cost of one more top, within so many dB of the highest
_RELATED = 3  # measures taken where related ones are asked for


@dataclass(frozen=True, slots=True)
class Reason:
    """Why the hand value differs from the exact one.

    says: a clause without a capital or a full stop, numbers in it
    kind: what the formula leaves out: that stages load each other, the load, the source's own impedance,
        some other part; or that it gives another measure
    nodes: where ideal buffers would stand; parts: what would be taken away or shorted
    remaining: how far the hand value lies from the exact one of the network so simplified, as a fraction of
        it (of the amplitude for dB, in radians for phases)
    """

    says: str
    kind: Kind
    nodes: tuple[str, ...]
    parts: tuple[str, ...]
    remaining: float


def why_off(circuit: Circuit, claim: Claim, hand: float, exact: float) -> Reason | None:
    """What a hand formula leaves out, or None where it is right or nothing simple explains it.

    hand, exact: the claim's measure by its formula and in the network, in the measure's unit
    The network is changed as designers idealise it (stages parted by buffers, no load, an ideal source, a
    part less), and related measures are taken; told is the change after which the exact measure lies nearest
    to the hand value, if it closes at least 80 % of the gap and leaves less than 2 %. Changes that agree to
    a thousandth count as equally near, and the simplest is told. Networks of more than 60 parts are left
    alone.
    """
    if len(circuit.network) > MOST_PARTS or not (math.isfinite(hand) and math.isfinite(exact)):
        return None
    gap = Gap(claim.measure.name, hand, exact)
    if gap.left(exact) <= _SAME:
        return None
    return _Search(circuit, claim, gap).reason()


class _Search:
    """Everything that is tried for one claim."""

    def __init__(self, circuit: Circuit, claim: Claim, gap: Gap) -> None:
        self.network, self.claim, self.gap = circuit.network, claim, gap
        self.options = options_at(claim.measure.name, claim.options, circuit.conditions.nominal)
        self.own = str(claim.options.get("part", ""))
        named = claim.hand.names if claim.hand is not None else frozenset()
        # What the formula names it does not leave out.
        self.forgotten = [
            part for part in self.network.parts if part.kind in "RCL" and part.name not in {*named, self.own}
        ]
        self.targets = claim.of or (self.network.part(self.own).nodes if self.own else ())
        self.effort = _EFFORT * min(1.0, _USUAL / max(len(self.network), 1))

    def reason(self) -> Reason | None:
        """The best explanation: first those of one change, then those of two at once."""
        changed = [*self._tried(self._simple()), *self._tried(self._single_parts())]
        found = [hit for hit in changed if self._explains(hit, _LEAVES)]
        # What explains everything to a thousandth needs no rival of another kind.
        if not found or self._left(self._best(found)) > _SAME:
            found += [hit for hit in self._related(None) if self._explains(hit, _LEAVES_RELATED)]
        if not found:
            simple = [hit.change for hit in changed if hit.change is not None and hit.change.kind != "part"]
            both = [hit for change in simple for hit in self._related(change)]
            both += self._tried(self._pairs(changed))
            found = [hit for hit in both if self._explains(hit, _LEAVES_TWICE)]
        if not found:
            return None
        best = self._best(found)
        nodes, parts = (best.change.nodes, best.change.parts) if best.change is not None else ((), ())
        words = Words(self.network, self.claim, self.options, self.gap, [each.node for each in self.stages])
        return Reason(words.says(best), best.kind, nodes, parts, self._left(best))

    def _left(self, hit: Hit) -> float:
        return self.gap.left(hit.value)

    def _best(self, hits: Iterable[Hit]) -> Hit:
        # Of equals `min` takes the first, and the simplest are tried first.
        return min(hits, key=lambda hit: max(self._left(hit), _SAME))

    def _explains(self, hit: Hit, leaves: float) -> bool:
        return self._left(hit) < leaves and self.gap.closed(hit.value) >= _CLOSES

    # ------------------------------------------------------------------ what is tried

    def _tried(self, changes: Iterable[Change]) -> list[Hit]:
        hits = []
        for change in changes:
            if not self._afforded(change.network):
                break
            value = self._value(change.network, change.of)
            self._spend(change.network, change.of)
            if value is not None:
                hits.append(Hit(change, value))
        return hits

    def _afforded(self, network: Network, measures: int = 1) -> bool:
        """True while there is effort left for some measures more, which is then spent."""
        measure, passive = self.claim.measure.name, not set(network.arrays().kinds.tolist()) - {*b"RCVI"}
        cost = 1
        if measure in TIME_MEASURES or measure == "noise":
            cost = _PERIODIC if measure in _PERIODIC_MEASURES else _IN_TIME if passive else _GENERAL_IN_TIME
        self.effort -= measures * cost
        return self.effort >= 0

    def _spend(self, network: Network, of: tuple[str, ...]) -> None:
        """Count what the profile of a response has cost besides: every top of a flat one was looked at."""
        passive = not set(network.arrays().kinds.tolist()) - {*b"RCVI"}
        if passive or self.claim.measure.name not in _PROFILED:
            return
        try:
            level = profile(network, node_pair(network, " ".join(of))).level
        except (RcnetError, np.linalg.LinAlgError):
            return
        inner, left, right = level[1:-1], level[:-2], level[2:]
        tops = (inner >= left) & (inner >= right) & np.isfinite(inner)
        with np.errstate(invalid="ignore"):
            reach = inner + np.maximum(inner - left, inner - right)
        tops &= reach >= inner[tops].max(initial=-math.inf) - _FLAT
        self.effort -= _TOP * max(int(tops.sum()) - 1, 0)

    def _value(self, network: Network, of: tuple[str, ...]) -> float | None:
        try:
            return evaluate(network, self.claim.measure.name, " ".join(of) or None, self.options)
        except (RcnetError, np.linalg.LinAlgError):
            return None

    def _related(self, change: Change | None) -> Iterator[Hit]:
        network, of = (self.network, self.claim.of) if change is None else (change.network, change.of)
        if change is not None and not self._afforded(network, _RELATED):
            return
        for words, value in related(network, self.claim.measure.name, " ".join(of) or None, self.options):
            yield Hit(change, value, words)

    @cached_property
    def stages(self) -> tuple[Split, ...]:
        return splits(self.network, self.targets)

    def _simple(self) -> Iterator[Change]:
        yield from self._sources()
        yield from self._loads()
        if self.stages:
            yield self._buffered(self.stages)
        if 1 < len(self.stages) <= _MOST_SINGLE:
            yield from (self._buffered((stage,)) for stage in self.stages)

    def _buffered(self, stages: tuple[Split, ...]) -> Change:
        network, fresh = buffered(self.network, stages)
        return Change("loading", network, self.claim.of, stages, fresh)

    def _sources(self) -> Iterator[Change]:
        """The driving source's own resistance away: in series with a voltage, beside a current."""
        names = driving_sources(self.network)
        if len(names) != 1:
            return
        source = self.network.sources[names[0]]
        for part in self.forgotten:
            if part.kind != "R":
                continue
            if source.kind == "I" and set(part.nodes) == set(source.nodes):
                yield from self._altered("source", opened=(part,))
            if source.kind == "V" and any(self._alone(node, part, source.name) for node in source.nodes):
                yield from self._altered("source", shorted=(part,))

    def _alone(self, node: str, part: Part, source: str) -> bool:
        """True if nothing but a part and a source meets at a node."""
        if node == GROUND or node not in part.nodes:
            return False
        return {other.name for other in self.network.parts if node in other.nodes} == {part.name, source}

    def _loads(self) -> Iterator[Change]:
        """What stands across the output beside the filter's last section: part by part, then all of it."""
        ends = {GROUND, *self.targets}
        across = [
            part
            for part in self.network.parts
            if part.kind in "RCL" and set(part.nodes) <= ends and len(set(part.nodes)) == 2
        ]
        loads = [part for part in across if part in self.forgotten]
        if len(across) < 2:
            return
        for part in loads:
            yield from self._altered("load", opened=(part,))
        if 1 < len(loads) < len(across):
            yield from self._altered("load", opened=tuple(loads))

    def _single_parts(self) -> Iterator[Change]:
        for part in self.forgotten:
            yield from self._altered("part", opened=(part,))
            yield from self._altered("part", shorted=(part,))

    def _pairs(self, singles: Iterable[Hit]) -> Iterator[Change]:
        """Two changes at once, of the single ones that come nearest: all buffers and one part, two parts."""
        changes = [hit.change for hit in sorted(singles, key=self._left) if hit.change is not None]
        plain = [change for change in changes if len(change.parts) == 1]
        plain = list({(each.opened, each.shorted): each for each in plain}.values())[:_MOST_PAIRED]
        if self.stages:
            base = self._buffered(self.stages)
            for change in plain:
                yield from self._altered("loading", *self._named(change), base=base)
        for first, second in itertools.combinations(plain, 2):
            if first.parts != second.parts:
                kind: Kind = first.kind if first.kind == second.kind else "part"
                (opened, shorted), (opened_too, shorted_too) = self._named(first), self._named(second)
                yield from self._altered(kind, opened + opened_too, shorted + shorted_too)

    def _named(self, change: Change) -> tuple[tuple[Part, ...], tuple[Part, ...]]:
        opened, shorted = (
            tuple(self.network.part(n) for n in names) for names in (change.opened, change.shorted)
        )
        return opened, shorted

    def _altered(
        self,
        kind: Kind,
        opened: tuple[Part, ...] = (),
        shorted: tuple[Part, ...] = (),
        base: Change | None = None,
    ) -> Iterator[Change]:
        """The network, perhaps buffered, with parts taken away and shorted; nothing if no claim is left."""
        gone, joined = (tuple(part.name for part in parts) for parts in (opened, shorted))
        made = altered(self.network if base is None else base.network, gone, joined)
        if made is None:
            return
        network, names = made
        of = tuple(names[node] for node in self.claim.of)
        if len(set(of)) < len(of) or not all(network.has_node(node) for node in of):
            return
        if self.own and self.own not in network:
            return
        stages, fresh = (base.stages, base.fresh) if base is not None else ((), {})
        yield Change(kind, network, of, stages, fresh, gone, joined)


__all__ = ["MOST_PARTS", "Reason", "why_off"]
