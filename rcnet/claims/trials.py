"""What is tried to explain a hand value: a simplified network, and what a measure comes to in it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from ..circuit import Network
from .idealised import Split

Kind = Literal["loading", "load", "source", "part", "other-measure"]


@dataclass(frozen=True, slots=True)
class Gap:
    """The distance between a hand value and the exact one, both in the measure's unit."""

    measure: str
    hand: float
    exact: float

    def left(self, value: float) -> float:
        """How far the hand value lies from a value: a fraction of it, of the amplitude for dB, or radians."""
        apart = abs(value - self.hand)
        if self.measure in ("gain", "attenuation"):
            return math.expm1(min(apart, 1000.0) * math.log(10) / 20)
        if self.measure == "phase":
            return math.radians(apart)
        return apart / abs(value) if value else math.inf

    def closed(self, value: float) -> float:
        """Which share of the gap a value closes."""
        return 1 - abs(value - self.hand) / abs(self.exact - self.hand)


@dataclass(frozen=True)
class Change:
    """A simplified network and what was done to it.

    of: what the claim's nodes are called there; stages, fresh: where buffers stand, and the node behind each
    opened, shorted: the parts taken away and shorted
    """

    kind: Kind
    network: Network
    of: tuple[str, ...]
    stages: tuple[Split, ...] = ()
    fresh: Mapping[str, str] = field(default_factory=dict)
    opened: tuple[str, ...] = ()
    shorted: tuple[str, ...] = ()

    @property
    def nodes(self) -> tuple[str, ...]:
        """Where buffers stand."""
        return tuple(stage.node for stage in self.stages)

    @property
    def parts(self) -> tuple[str, ...]:
        """What was taken away or shorted."""
        return (*self.opened, *self.shorted)


@dataclass(frozen=True)
class Hit:
    """A change (None: the network as it is), a value there, and what it measures if not what is claimed."""

    change: Change | None
    value: float
    words: str = ""

    @property
    def kind(self) -> Kind:
        """What the formula leaves out."""
        return self.change.kind if self.change is not None else "other-measure"


__all__ = ["Change", "Gap", "Hit", "Kind"]
