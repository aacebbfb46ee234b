"""The kinds of part a network is made of, and what one part or source carries."""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

from ..errors import CircuitError
from ..values import Tolerance
from .waveform import Waveform


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of part: its letter, its name, the unit of its value, and how many nodes it has.

    `senses_branch` is True where the part is controlled by the current through a named voltage source,
    `couples` where it has no nodes and couples two named inductors.
    """

    letter: str
    name: str
    unit: str
    nodes: int
    senses_branch: bool = False
    couples: bool = False

    @property
    def is_source(self) -> bool:
        """True for the independent sources."""
        return self.letter in "VI"

    @property
    def is_passive(self) -> bool:
        """True where the value must be positive."""
        return self.letter in "RCL"


# To add a kind: one line here, its stamp in exact/, its line in netlist/.
KINDS: dict[str, Kind] = {
    kind.letter: kind
    for kind in (
        Kind("R", "resistor", "ohm", 2),
        Kind("C", "capacitor", "F", 2),
        Kind("L", "inductor", "H", 2),
        Kind("E", "voltage-controlled voltage source", "1", 4),
        Kind("G", "voltage-controlled current source", "S", 4),
        Kind("F", "current-controlled current source", "1", 2, senses_branch=True),
        Kind("H", "current-controlled voltage source", "ohm", 2, senses_branch=True),
        Kind("K", "coupling of inductors", "1", 0, couples=True),
        Kind("V", "voltage source", "V", 2),
        Kind("I", "current source", "A", 2),
    )
}


@dataclass(frozen=True, slots=True)
class Part:
    """One part as a record: a view made on demand from the network's arrays.

    nodes: two names, four for E and G (output pair, then controlling pair), none for K
    value: in the kind's base unit; for an independent source its dc value, zero where it has none
    senses: the voltage source whose current controls an F or H, else None
    rating: value and unit (`W`, `V` or `A`); tempco: 1/K
    couples: the two inductors that a K couples, else None; the first node of each carries its dot
    """

    name: str
    kind: str
    nodes: tuple[str, ...]
    value: float
    senses: str | None = None
    tolerance: Tolerance | None = None
    rating: tuple[float, str] | None = None
    tempco: float | None = None
    couples: tuple[str, str] | None = None


@dataclass(frozen=True, slots=True)
class Source:
    """An independent source: any of ac, dc and one waveform.

    ac: magnitude in V or A, None for a source that is dead in an ac analysis; ac_phase: degrees
    dc: V or A, None where the waveform's value at t = 0 stands for it
    """

    name: str
    nodes: tuple[str, str]
    ac: float | None = None
    ac_phase: float = 0.0
    dc: float | None = None
    waveform: Waveform | None = None

    def __post_init__(self) -> None:
        for word, number in (("ac", self.ac), ("ac phase", self.ac_phase), ("dc", self.dc)):
            if number is not None and not math.isfinite(number):
                raise CircuitError(f"{self.name}: {word} is {number!r}.", remedy="Give a finite number.")

    @property
    def kind(self) -> str:
        """`V` or `I`."""
        return self.name[0].upper()

    @property
    def phasor(self) -> complex:
        """The ac value as a complex number; quarter turns come out exact."""
        magnitude = self.ac or 0.0
        quarter, rest = divmod(self.ac_phase, 90.0)
        turned = magnitude * (1, 1j, -1, -1j)[int(quarter) % 4]
        return turned * cmath.exp(1j * math.radians(rest)) if rest else complex(turned)

    @property
    def operating_value(self) -> float:
        """What the source gives in the operating point: dc, else the waveform at t = 0, else nothing."""
        if self.dc is not None:
            return self.dc
        return self.waveform.start if self.waveform is not None else 0.0
