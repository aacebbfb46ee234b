"""The circuit: a network with what is asked of it and what is claimed of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Literal

from ..values import Expression
from .measure_table import MeasureSpec
from .network import Network


@dataclass(frozen=True, slots=True)
class Place:
    """Where something stands: the file, the line from 1, and the text there."""

    file: str
    line: int | None
    text: str = ""


@dataclass(frozen=True, slots=True)
class Sweep:
    """A frequency sweep as a simulator takes it.

    start, stop: Hz; kind: `dec` and `oct` take `points` a decade or octave, `lin` takes `points` in all
    """

    start: float
    stop: float
    points: int
    kind: Literal["dec", "oct", "lin"] = "dec"


@dataclass(frozen=True, slots=True)
class TransientRun:
    """A run over time, all in seconds. step: as printed; max_step: None leaves it to the simulator."""

    stop: float
    step: float
    start: float = 0.0
    max_step: float | None = None
    use_initial: bool = False


@dataclass(frozen=True, slots=True)
class Analyses:
    """What a netlist asks the simulator for; `chosen` is True where rcnet chose, the file being silent."""

    ac: Sweep | None = None
    transient: TransientRun | None = None
    noise: Sweep | None = None
    operating_point: bool = False
    chosen: bool = False

    def __bool__(self) -> bool:
        return bool(self.ac or self.transient or self.noise or self.operating_point)


@dataclass(frozen=True, slots=True)
class Conditions:
    """The temperatures a circuit works at, degrees Celsius. `nominal` lies within low..high."""

    nominal: float = 27.0
    low: float = 27.0
    high: float = 27.0


@dataclass(frozen=True, slots=True)
class Bound:
    """What a claim demands: low <= value <= high, either side infinite where it is open."""

    low: float
    high: float
    text: str

    def margin(self, value: float) -> float:
        """How far inside the bound a value lies, in its unit; negative outside."""
        return min(value - self.low, self.high - value)

    def holds(self, value: float) -> bool:
        """True if the value meets the bound."""
        return self.low <= value <= self.high


@dataclass(frozen=True, slots=True)
class Claim:
    """One thing the designer says is true of the circuit.

    of: one node or a pair; options: the measure's options by name, base units
    place, hand_place: where the claim and its hand formula stand
    """

    says: str
    measure: MeasureSpec
    of: tuple[str, ...]
    options: Mapping[str, float | str]
    bound: Bound
    hand: Expression | None = None
    over_tolerance: bool = False
    place: Place | None = None
    hand_place: Place | None = None


@dataclass(frozen=True, slots=True)
class SealNote:
    """What the seal found in a netlist says: the digest, and whether it was written despite errors."""

    digest: str
    line: int
    anyway: bool = False


@dataclass(frozen=True)
class Circuit:
    """A network with its output, analyses, conditions and claims, and where each thing stands.

    output: one node, a pair, or () where every node is looked at
    places: where each part and source stands, by name
    value_texts: the value of each part as written in a netlist, by name (for rules about spelling)
    options: simulator options found in a netlist, lower-case names
    """

    network: Network
    name: str = "circuit"
    file: str | None = None
    origin: Literal["circuit file", "netlist", "python"] = "python"
    output: tuple[str, ...] = ()
    analyses: Analyses = field(default_factory=Analyses)
    conditions: Conditions = field(default_factory=Conditions)
    claims: tuple[Claim, ...] = ()
    places: Mapping[str, Place] = field(default_factory=dict)
    value_texts: Mapping[str, str] = field(default_factory=dict)
    analysis_places: Mapping[str, Place] = field(default_factory=dict)
    options: Mapping[str, str] = field(default_factory=dict)
    seal: SealNote | None = None
    lines: tuple[str, ...] = ()

    @property
    def analysis(self) -> Analyses:
        """What is asked of a simulator; the same as `analyses`, by the name of the circuit file's table."""
        return self.analyses

    @property
    def title(self) -> str:
        """The network's title."""
        return self.network.title

    def with_network(self, network: Network) -> Circuit:
        """The same circuit about a changed network."""
        return replace(self, network=network)

    def place_of(self, name: str) -> Place:
        """Where a part stands; the file without a line where that is not known."""
        return self.places.get(name) or Place(self.file or self.name, None)
