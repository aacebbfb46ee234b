"""The circuit: a network with what is asked of it and what is claimed of it."""

from __future__ import annotations

import importlib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Literal

from ..values import Expression
from .measure_table import MeasureSpec
from .network import Network

LONGEST_POINTED = 10_000  # characters
_PARTING = frozenset(" \t\r\n\v\f,()='\"{}")


def _whole_word(text: str, word: str) -> int:
    """Where a whole word first stands, whatever its case; else where the same letters do; else -1."""
    lower, wanted = text.lower(), word.lower()
    if len(lower) != len(text) or len(wanted) != len(word):
        return text.find(word)
    start = lower.find(wanted)
    while start >= 0:
        end = start + len(wanted)
        if (start == 0 or text[start - 1] in _PARTING) and (end == len(text) or text[end] in _PARTING):
            return start
        start = lower.find(wanted, start + 1)
    return text.find(word)


@dataclass(frozen=True, slots=True)
class Place:
    """Where something stands: the file, the line from 1, and the text there.

    column, width: which characters of the text are meant, from 1; None where the whole line is
    """

    file: str
    line: int | None
    text: str = ""
    column: int | None = None
    width: int = 1

    def at(self, word: str) -> Place:
        """The same place, pointing at the first whole `word` on its line; unchanged where it is not there.

        On a line of more than 10 000 characters nobody looks for it.
        """
        if not word or len(self.text) > LONGEST_POINTED:
            return self
        start = _whole_word(self.text, word)
        return self if start < 0 else replace(self, column=start + 1, width=len(word))


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


@dataclass(frozen=True, slots=True)
class Request:
    """An analysis or a measurement that a netlist asks of a simulator and that rcnet hands on unchanged.

    word: `.dc`, `.tf`, `.four` or `.meas`; text: the rest of the line, node names as in the network
    """

    word: str
    text: str
    place: Place


@dataclass(frozen=True, slots=True)
class StartingState:
    """Where a transient starts other than in the steady state.

    nodes: node -> volts (`.ic`); parts: capacitor -> volts, inductor -> amperes (`ic=`), which count only
    where the run uses them (`uic`)
    """

    nodes: Mapping[str, float] = field(default_factory=dict)
    parts: Mapping[str, float] = field(default_factory=dict)

    def __bool__(self) -> bool:
        return bool(self.nodes or self.parts)


@dataclass(frozen=True, slots=True)
class Parameter:
    """A named number of a netlist (`.param`).

    name: in lower case; text: as written behind the `=`; parts: the parts whose values depend on it
    """

    name: str
    value: float
    text: str
    place: Place
    parts: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Subcircuit:
    """A `.subckt` of a netlist: its name in lower case, its ports, its parameters, how often it is used."""

    name: str
    ports: tuple[str, ...]
    parameters: tuple[str, ...]
    uses: int
    place: Place


@dataclass(frozen=True, slots=True)
class LeftOut:
    """A part of a netlist that is not linear and was left out on demand.

    kind: what it is, as `a diode`; nodes: those it touches that are still in the network (its boundary)
    """

    name: str
    kind: str
    nodes: tuple[str, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Seen:
    """Something that was noticed while a netlist was read; a rule of that code reports it."""

    code: str
    message: str
    remedy: str
    place: Place
    severity: Literal["error", "warning", "note"] | None = None


@dataclass(frozen=True, slots=True)
class Silence:
    """A finding that is not to be told: its code, and the line for which, or None for the whole circuit.

    trusted: from the command line, and not from the file that is looked at itself
    """

    code: str
    file: str | None = None
    line: int | None = None
    trusted: bool = False
    place: Place | None = None


@dataclass(frozen=True)
class Circuit:
    """A network with its output, analyses, conditions and claims, and where each thing stands.

    output: one node, a pair, or () where every node is looked at
    places: where each part and source stands, by name
    value_texts: the value of each part as written in a netlist, by name (for rules about spelling)
    options: simulator options found in a netlist, lower-case names
    requests, initial, parameters, subcircuits, left_out: what else a netlist holds
    other_numbers: (owner, text, place) of each number on the lines of sources and cards, as written
    seen: what the reader noticed; silenced: what is not to be told
    files: the files a netlist was read from, itself first; definition: the netlist before its subcircuits
    were put in place, for `with_parameters`
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
    requests: tuple[Request, ...] = ()
    initial: StartingState = field(default_factory=StartingState)
    parameters: Mapping[str, Parameter] = field(default_factory=dict)
    subcircuits: tuple[Subcircuit, ...] = ()
    left_out: tuple[LeftOut, ...] = ()
    seen: tuple[Seen, ...] = ()
    silenced: tuple[Silence, ...] = ()
    files: tuple[str, ...] = ()
    other_numbers: tuple[tuple[str, str, Place], ...] = ()
    definition: Any = field(default=None, compare=False, repr=False)

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

    def with_parameters(self, values: Mapping[str, str | float]) -> Circuit:
        """The same netlist with some of its `.param` values changed: `{"rload": "4.7k"}`.

        Everything that depends on them follows. Raises CircuitError for a name that is no parameter.
        """
        # The netlist room lies above this one; it is looked up when called.
        changed: Circuit = importlib.import_module("rcnet.netlist").with_parameters(self, values)
        return changed

    def place_of(self, name: str) -> Place:
        """Where a part stands; the file without a line where that is not known."""
        return self.places.get(name) or Place(self.file or self.name, None)
