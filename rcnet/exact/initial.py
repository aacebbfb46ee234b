"""A network that starts from a given state, as a network at rest whose sources begin at t = 0.

From t = 0 on, a capacitor charged to v0 is an uncharged one beside a current source that puts the charge C v0
into it at once, and an inductor that carries i0 one without current beside a source that steps from 0 to i0
(C. Desoer, E. Kuh, Basic Circuit Theory, 1969, chapter 2). No node is added, and a passive network stays one.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, Network, Source, StartingState, Step
from ..errors import CircuitError, UndecidedError
from .ac import dc_solvable
from .rest import FromRest, Impulse
from .solver import Drive, require_solvable, solver_for
from .transient import starting_value, transient

Float = npt.NDArray[np.float64]
Values = dict[str, float]

_AGREES = 1e-9  # relative: a node that is held already may be asked to start where it is


def transient_from(
    network: Network, time: npt.ArrayLike, of: str | Sequence[str], initial: StartingState, use_initial: bool
) -> Float:
    """The exact response at times in seconds, volts, from a starting state; else as `transient`.

    use_initial: start as a simulator does with `uic`; without it `initial.nodes` alone counts (see `started`)
    At t = 0 the value is the one just after the start: where capacitors and sources contradict each other,
    charge has flowed at once. Errors as for `transient` and `started`.
    """
    if not use_initial and not initial.nodes:
        return transient(network, time, of)
    return transient(started(network, initial.nodes, initial.parts, use_initial=use_initial), time, of)


def started(
    network: Network, nodes: Mapping[str, float], parts: Mapping[str, float], *, use_initial: bool
) -> Network:
    """The network whose `transient` from t = 0 on is that of this one from a given state, as ngspice has it.

    nodes: node -> volts (`.ic`); parts: capacitor -> volts, inductor -> amperes (`ic=`)
    use_initial: with it, nothing is computed first: capacitors start at their volts, or else at the
        difference of their nodes', inductors at their amperes, all the others at zero. Without it, `parts`
        does not count: the operating point, every source at its value at t = 0 and the given nodes held at
        their volts, leaves capacitors and inductors as it has them; sources hold their own nodes.
    Nodes and parts are the same, with a current source more for each part with a state; `transient` alone
    knows what these do. Raises CircuitError for names that are not there or values that are not finite,
    UnsolvableError and UndecidedError where there is no such operating point.
    """
    _check(network, nodes, parts)
    held = _as_told(network, nodes, parts) if use_initial else _as_computed(network, nodes)
    made, fresh = Network(network.title), _Fresh(network)
    for part in network.parts:
        if part.kind in "VI":
            made.add_source(_from_rest(network.sources[part.name]))
            continue
        made.add_part(part)
        value = held.get(part.name, 0.0)
        if value and part.nodes[0] != part.nodes[1]:
            a, b = part.nodes
            # A current source's current flows from its first node through it to its second.
            late: Any = Impulse(part.value * value) if part.kind == "C" else Step(0.0, value)
            ends = (b, a) if part.kind == "C" else (a, b)
            made.add_source(Source(fresh.part("I"), ends, waveform=late))
    return made


def _check(network: Network, nodes: Mapping[str, float], parts: Mapping[str, float]) -> None:
    for node, volts in nodes.items():
        network.node_index(node)
        _finite(f"the starting voltage of node {node!r}", volts)
    for name, value in parts.items():
        if network.part(name).kind not in "CL":
            raise CircuitError(
                f"{name} is neither a capacitor nor an inductor, so it has no state to start from.",
                remedy="Leave its starting value out.",
            )
        _finite(f"the starting value of {name}", value)


def _finite(what: str, value: float) -> None:
    if not math.isfinite(value):
        raise CircuitError(f"{what} is {value!r}.", remedy="Give a finite number.")


# ---------------------------------------------------------------------- the state at t = 0


def _as_told(network: Network, nodes: Mapping[str, float], parts: Mapping[str, float]) -> Values:
    """Volts of capacitors and amperes of inductors where nothing is computed first."""
    held: Values = {}
    for part in network.parts:
        if part.kind == "C":
            a, b = (0.0 if node == GROUND else nodes.get(node, 0.0) for node in part.nodes)
            held[part.name] = parts.get(part.name, a - b)
        elif part.kind == "L":
            held[part.name] = parts.get(part.name, 0.0)
    return held


def _as_computed(network: Network, nodes: Mapping[str, float]) -> Values:
    """Volts of capacitors and amperes of inductors in the operating point with the given nodes held."""
    forced, free = _forced(network, nodes)
    volts, amperes = _operating_state(forced)
    for node in free:
        found = volts[node]
        if abs(found - nodes[node]) > _AGREES * max(abs(found), abs(nodes[node])):
            raise UndecidedError(
                f"node {node!r} cannot start at {nodes[node]:g} V: inductors, or sources from other nodes"
                f" that are held, keep it at {found:g} V while the operating point is computed.",
                remedy="Start from ic= of capacitors and inductors, with uic behind .tran.",
            )
    held: Values = {}
    for part in network.parts:
        if part.kind == "C":
            held[part.name] = volts[part.nodes[0]] - volts[part.nodes[1]]
        elif part.kind == "L":
            held[part.name] = amperes[part.name]
    return held


def _forced(network: Network, nodes: Mapping[str, float]) -> tuple[Network, list[str]]:
    """The network at t = 0 with ideal sources that hold nodes, and the nodes that something else holds.

    A node that voltage sources tie to ground is theirs, whatever it was to be, as in ngspice.
    """
    forced = Network(network.title)
    ties = {"VEH": _Ties(), "VEHL": _Ties()}
    for part in network.parts:
        if part.kind in "VI":
            source = network.sources[part.name]
            forced.add_source(Source(source.name, source.nodes, dc=starting_value(source)))
        else:
            forced.add_part(part)
        for kinds, tied in ties.items():
            if part.kind in kinds:
                tied.join(part.nodes[0], part.nodes[1])
    own, free = ties["VEH"].together(GROUND, nodes), []
    fresh = _Fresh(network)
    for node, volts in nodes.items():
        if node in own:
            continue
        if ties["VEHL"].find(node) == ties["VEHL"].find(GROUND):
            free.append(node)
            continue
        ties["VEHL"].join(node, GROUND)
        forced.add_source(Source(fresh.part("V"), (node, GROUND), dc=volts))
    return forced, free


class _Ties:
    """Which nodes some parts tie together."""

    def __init__(self) -> None:
        self._above: dict[str, str] = {}

    def find(self, node: str) -> str:
        """The node that stands for all those tied to this one."""
        while node in self._above:
            node = self._above[node]
        return node

    def join(self, a: str, b: str) -> None:
        """Tie two nodes."""
        first, second = self.find(a), self.find(b)
        if first != second:
            self._above[second] = first

    def together(self, node: str, others: Mapping[str, float]) -> set[str]:
        """Those of `others` that are tied to a node."""
        root = self.find(node)
        return {other for other in others if self.find(other) == root}


def _operating_state(network: Network) -> tuple[Values, Values]:
    """Every node's voltage, ground too, and every inductor's current, at dc or as the limit towards it."""
    require_solvable(network)
    solver, low = solver_for(network), solver_for(network).span.far_below
    points = np.zeros(1) if dc_solvable(network) else np.array([low, max(low * 1e-8, 1e-158)])
    sources = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        sources[network.part_index(name)] = source.operating_value
    inductors = [part.name for part in network.parts if part.kind == "L"]
    solution = solver.solve(points, Drive(sources), currents_too=bool(inductors))
    groups = [solution.voltages.real]
    if inductors:
        assert solution.source_currents is not None
        groups.append(solution.source_currents.real[[network.part_index(name) for name in inductors]])
    for found in groups:
        sizes = np.abs(found).max(axis=0, initial=0.0)
        if sizes[-1] > 1e4 * sizes[0] or not np.isfinite(sizes).all():
            raise UndecidedError(
                "there is no operating point to start from: a source charges nodes that nothing drains,"
                " or drives a current that nothing limits.",
                remedy="Start from ic= of capacitors and inductors, with uic behind .tran.",
            )
    volts, amperes = groups[0][:, 0].tolist(), groups[-1][:, 0].tolist() if inductors else []
    return dict(zip(network.nodes, volts, strict=True)), dict(zip(inductors, amperes, strict=True))


# ---------------------------------------------------------------------- the network that starts there


class _Fresh:
    """Names that a network does not have yet."""

    def __init__(self, network: Network) -> None:
        self._network, self._count = network, 0

    def part(self, letter: str) -> str:
        """A name for a source."""
        while True:
            self._count += 1
            if (name := f"{letter}start{self._count}") not in self._network:
                return name


def _from_rest(source: Source) -> Source:
    """A source that gives nothing before t = 0, and the same from then on."""
    start, wave = starting_value(source), source.waveform
    if not start:
        return source
    late: Any = Step(0.0, start) if wave is None else FromRest(wave)
    return replace(source, dc=None, waveform=late)
