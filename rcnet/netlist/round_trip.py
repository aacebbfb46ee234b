"""The guard on every netlist handed on: what was written, read back, is the circuit it was written from."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np

from ..circuit import Circuit, Exponential, Network, Points, Source, Step, TransientRun, Waveform
from ..errors import CircuitError, RcnetError
from .names import Names
from .writer import Written, exponential_numbers

DEFECT = "This is a defect of rcnet; please report it with the circuit."


def read_same(written: Written) -> Circuit:
    """The written netlist, read back.

    Raises CircuitError unless it holds the very parts, nodes, values (bit for bit), sources and analyses.
    """
    from .reader import parse_netlist

    try:
        back = parse_netlist(written.text, "")
    except RcnetError as exc:
        raise CircuitError(f"the written netlist cannot be read back: {exc}", remedy=DEFECT) from exc
    for what in differences(written.circuit, written.names, back):
        raise CircuitError(
            f"{what} does not come back from the written netlist as it went in.", remedy=DEFECT
        )
    return back


def differences(circuit: Circuit, names: Names, back: Circuit) -> Iterator[str]:
    """The names of what differs between a circuit (as written, under `names`) and one read back."""
    yield from network_differences(circuit, names, back)
    if replace(circuit.analyses, chosen=False) != back.analyses:
        yield "an analysis"
    if _starting(circuit, names) != _starting(back, None):
        yield "the starting state"
    if [request.word for request in circuit.requests] != [request.word for request in back.requests]:
        yield "a request"


def network_differences(circuit: Circuit, names: Names, back: Circuit) -> Iterator[str]:
    """As `differences`, of the parts, the sources and the temperature alone."""
    if len(circuit.network) != len(back.network):
        yield "the number of parts"
    for name in _suspects(circuit.network, names, back.network):
        if not same_part(circuit, names, back, name):
            yield name
    if circuit.conditions.nominal != back.conditions.nominal:
        yield "the temperature"


def _suspects(want: Network, names: Names, got: Network) -> Iterable[str]:
    """The parts to be compared one by one: all but the R, C and L whose columns are the same bit for bit."""
    ours, theirs = want.arrays(), got.arrays()
    index = {node.lower(): row for row, node in enumerate(got.nodes)}
    rows = np.array([index.get(names.nodes[node].lower(), -2) for node in want.nodes])
    in_order = [names.parts[name] for name in want.names] == list(got.names)
    if not in_order or not np.array_equal(ours.kinds, theirs.kinds):
        return want.names
    same = np.isin(ours.kinds, np.frombuffer(b"RCL", dtype=np.uint8))
    same &= (rows[ours.nodes[:, :2]] == theirs.nodes[:, :2]).all(axis=1)
    same &= ours.values.view(np.int64) == theirs.values.view(np.int64)
    return [want.names[row] for row in np.flatnonzero(~same).tolist()]


def same_part(circuit: Circuit, names: Names, back: Circuit, name: str) -> bool:
    """True if a part came back: its kind, its nodes, its value to the bit, and how it is driven."""
    if names.parts[name] not in back.network:
        return False
    part, twin = circuit.network.part(name), back.network.part(names.parts[name])
    senses = None if part.senses is None else names.parts[part.senses]
    couples = None if part.couples is None else tuple(names.parts[inductor] for inductor in part.couples)
    nodes = [names.nodes[node].lower() for node in part.nodes]
    same = twin.kind == part.kind and twin.senses == senses and twin.couples == couples
    same = same and twin.value.hex() == part.value.hex() and [node.lower() for node in twin.nodes] == nodes
    if not same or name not in circuit.network.sources:
        return same
    drives = circuit.network.sources[name], back.network.sources[twin.name]
    return _same_drive(*drives, circuit.analyses.transient)


def _starting(circuit: Circuit, names: Names | None) -> tuple[dict[str, float], dict[str, float]]:
    nodes = {names.nodes[node] if names else node: volts for node, volts in circuit.initial.nodes.items()}
    parts = {names.parts[part] if names else part: value for part, value in circuit.initial.parts.items()}
    return {node.lower(): volts for node, volts in nodes.items()}, parts


def _same_drive(want: Source, got: Source, run: TransientRun | None) -> bool:
    asked = (want.ac, want.ac_phase, want.operating_value)
    if asked != (got.ac, got.ac_phase, got.operating_value):
        return False
    return _same_waveform(want.waveform, got.waveform, run)


def _same_waveform(want: Waveform | None, got: Waveform | None, run: TransientRun | None) -> bool:
    """Equal, written alike, or points that are those of a step or of a wave repeated over the run."""
    if want == got:
        return True
    if isinstance(want, Exponential) and isinstance(got, Exponential):
        return exponential_numbers(want) == exponential_numbers(got)
    if not isinstance(got, Points):
        return False
    if isinstance(want, Step):
        first, *rest = got.values if want.at > 0 else ((0.0, want.initial), *got.values)
        (at, initial), (end, final) = rest if len(rest) == 2 else ((math.nan, 0.0), (0.0, 0.0))
        same = first == (0.0, want.initial) and (initial, final) == (want.initial, want.final)
        return same and at == want.at and math.isclose(end, want.at + want.rise)
    return isinstance(want, Points) and _repeats(want, got, run)


def _repeats(want: Points, got: Points, run: TransientRun | None) -> bool:
    if want.period is None or run is None:
        return want.values == got.values
    times: dict[float, list[float]] = {}
    for time, value in want.values:
        times.setdefault(value, []).append(time)
    for time, value in got.values:
        turns = [(time - listed) / want.period for listed in times.get(value, ())]
        if not any(abs(turn - round(turn)) < 1e-9 for turn in turns) and (time, value) != (0.0, want.start):
            return False
    whole_turns = math.floor(run.stop / want.period)
    return got.values[-1][0] >= run.stop and len(got.values) >= whole_turns * (len(want.values) - 1)
