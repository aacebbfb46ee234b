"""What a curve of a results file is, by its name."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from ..circuit import Network
from ..curves import Curve
from ..netlist import Names

UNNAMED = "response"  # what a trace is called whose file names no node
Kind = Literal["voltage", "current", "output noise", "input noise", "share", "output total", "input total"]


@dataclass(frozen=True, slots=True)
class Target:
    """What a curve is: the voltage between two nodes, the current of a source (its part row), or noise.

    source: for a `share` of the noise the row of its resistor
    """

    nodes: tuple[int, int] = (0, 0)
    source: int | None = None
    name: str = ""
    kind: Kind = "voltage"


TOTALS: tuple[Kind, ...] = ("output total", "input total")
_TOTALS: dict[str, Kind] = {"onoise_total": "output total", "inoise_total": "input total"}
_SPECTRA: dict[str, Kind] = {"onoise_spectrum": "output noise", "inoise_spectrum": "input noise"}


class Targets:
    """Finds what a curve's name means: a node by the netlist's name or the circuit's own, case ignored."""

    def __init__(self, network: Network, names: Names, output: Sequence[str]) -> None:
        self.network = network
        self.output = output
        self.nodes = _lookup(names.nodes)
        self.parts = _lookup(names.parts)

    def of(self, curve: Curve) -> tuple[Target | None, str]:
        """The target, or None and the reason."""
        if curve.analysis == "noise" or bare(curve.name) in _TOTALS:
            return self.noise(bare(curve.name))
        if curve.analysis == "other":
            return None, "this kind of plot is not compared."
        if curve.name == UNNAMED:
            return self.unnamed()
        letter, _, inside = curve.name.lower().partition("(")
        words = [word.strip() for word in inside.rstrip(")").split(",")]
        if letter == "i" and len(words) == 1:
            return self.current(words[0], curve)
        if letter != "v" or len(words) > 2:
            return None, "only voltages v(...) and source currents i(v...) are compared."
        found = [0 if word in ("0", "gnd") else self.nodes.get(word) for word in words]
        for word, node in zip(words, found, strict=True):
            if node is None:
                return None, f"the circuit has no node {word!r}."
        first, second = found[0] or 0, (found[1] or 0) if len(found) > 1 else 0
        label = ",".join(self.network.nodes[node or 0] for node in found)
        return Target((first, second), name=f"v({label})"), ""

    def unnamed(self) -> tuple[Target | None, str]:
        """A bench instrument's trace names no node; it is the output's."""
        if not self.output:
            return None, "the trace names no node, and the circuit no output."
        return Target(self.ends(), name=f"v({','.join(self.output)})"), ""

    def ends(self) -> tuple[int, int]:
        """The two nodes of the output."""
        found = [self.network.node_index(node) for node in self.output]
        return found[0], found[1] if len(found) > 1 else 0

    def current(self, name: str, curve: Curve) -> tuple[Target | None, str]:
        """The current of a part."""
        row = self.parts.get(name)
        # Only parts that fix a voltage have a current of their own in a simulator's results.
        kinds = "V" if curve.analysis == "transient" else "VEHL"
        if row is None or chr(self.network.arrays().kinds[row]) not in kinds:
            return None, f"the circuit has no source {name!r} whose current is known."
        return Target(source=row, name=f"i({self.network.names[row]})", kind="current"), ""

    def noise(self, name: str) -> tuple[Target | None, str]:
        """Noise at the output or referred to the input, a resistor's share, or a total."""
        if not self.output:
            return None, "the circuit names no output whose noise it could be."
        kind = _SPECTRA.get(name) or _TOTALS.get(name)
        if kind is not None:
            return Target(self.ends(), name=name, kind=kind), ""
        part = name.removeprefix("onoise_")
        for text in (part, part.removesuffix("_thermal")):
            row = self.parts.get(text)
            if (
                name.startswith("onoise_")
                and row is not None
                and self.network.arrays().kinds[row] == ord("R")
            ):
                label = f"onoise({self.network.names[row]})"
                return Target(self.ends(), row, label, "share"), ""
        return None, "of noise the spectra, their totals and the resistors' shares are compared."


def bare(name: str) -> str:
    """A vector's name without the `v(...)` or `i(...)` that raw files put around the totals of noise."""
    lower = name.lower()
    inside = lower[2:-1] if lower.startswith(("v(", "i(")) and lower.endswith(")") else lower
    return inside if inside in _TOTALS else lower


def _lookup(table: Mapping[str, str]) -> dict[str, int]:
    """Index by lower-case name: the netlist's names first, the circuit's own where they are free."""
    found = {new.lower(): index for index, new in enumerate(table.values())}
    for index, old in enumerate(table):
        found.setdefault(old.lower(), index)
    return found
