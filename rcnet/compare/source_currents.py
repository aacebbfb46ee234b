"""The current of a voltage source over time, as a sum over the parts at one of its ends."""

from __future__ import annotations

from dataclasses import dataclass, field

from ..circuit import GROUND, Network
from ..exact.rest import Impulse

Pair = tuple[int, int]


@dataclass(frozen=True)
class CurrentSum:
    """A source's current as a sum: conductances and capacitances times voltages, and other sources' currents.

    conductance: (siemens, pair), capacitance: (farads, pair), by the current they add per volt across the
    pair and per volt per second; capacitors: the latter's names; given: (factor, name) of current sources
    """

    conductance: list[tuple[float, Pair]] = field(default_factory=list)
    capacitance: list[tuple[float, Pair]] = field(default_factory=list)
    capacitors: list[str] = field(default_factory=list)
    given: list[tuple[float, str]] = field(default_factory=list)

    @property
    def pairs(self) -> list[Pair]:
        """Every pair whose voltage counts."""
        return [pair for _, pair in (*self.conductance, *self.capacitance)]


def current_sums(network: Network, rows: set[int]) -> dict[int, CurrentSum | None]:
    """Each source's current (by part row); None where both its ends lead into parts with unknown currents."""
    wanted = {network.names[row]: row for row in rows}
    ends = {node for name in wanted for node in network.part(name).nodes[:2]} - {GROUND}
    at: dict[str, list[str]] = {node: [] for node in ends}
    coupled = any(part.kind == "K" for part in network.parts)
    for part in network.parts:
        for node in set(part.nodes[:2]) & ends if part.kind != "K" else ():
            at[node].append(part.name)
    found: dict[int, CurrentSum | None] = {}
    for name, row in wanted.items():
        plus, minus = network.part(name).nodes[:2]
        sums = (
            _leaving(network, node, at[node], name, sign)
            for node, sign in ((plus, -1.0), (minus, 1.0))
            if node != GROUND and plus != minus
        )
        found[row] = None if coupled else next((each for each in sums if each is not None), None)
    return found


def _leaving(network: Network, node: str, parts: list[str], but: str, sign: float) -> CurrentSum | None:
    """The currents that leave a node through its parts but one, times sign."""
    total = CurrentSum()
    for name in parts:
        part = network.part(name)
        if name == but or part.nodes[0] == part.nodes[1]:
            continue
        way = sign if part.nodes[0] == node else -sign
        pair = network.node_index(part.nodes[0]), network.node_index(part.nodes[1])
        if part.kind == "R":
            total.conductance.append((way / part.value, pair))
        elif part.kind == "C":
            total.capacitance.append((way * part.value, pair))
            total.capacitors.append(name)
        elif part.kind == "G":
            control = network.node_index(part.nodes[2]), network.node_index(part.nodes[3])
            total.conductance.append((way * part.value, control))
        elif part.kind == "I":
            if not isinstance(network.sources[name].waveform, Impulse):
                total.given.append((way, name))
        else:
            return None
    return total
