"""The guard on every netlist handed on: what was written, read back, is the circuit it was written from."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

from ..circuit import Circuit, Points, Source, Step, TransientRun, Waveform
from ..errors import CircuitError, RcnetError
from .names import Names
from .reader import parse_netlist
from .writer import Written

_REMEDY = "This is a defect of rcnet; please report it with the circuit."


def read_same(written: Written) -> Circuit:
    """The written netlist, read back.

    Raises CircuitError unless it holds the very parts, nodes, values (bit for bit), sources and analyses.
    """
    try:
        back = parse_netlist(written.text, "")
    except RcnetError as exc:
        raise CircuitError(f"the written netlist cannot be read back: {exc}", remedy=_REMEDY) from exc
    for what in differences(written.circuit, written.names, back):
        raise CircuitError(
            f"{what} does not come back from the written netlist as it went in.", remedy=_REMEDY
        )
    return back


def differences(circuit: Circuit, names: Names, back: Circuit) -> Iterator[str]:
    """The names of what differs between a circuit (as written, under `names`) and one read back."""
    want, got = circuit.network, back.network
    nodes = {node: name.lower() for node, name in names.nodes.items()}
    if len(want) != len(got):
        yield "the number of parts"
    for part in want.parts:
        name = names.parts[part.name]
        if name not in got:
            yield part.name
            continue
        twin = got.part(name)
        senses = None if part.senses is None else names.parts[part.senses]
        same = twin.kind == part.kind and twin.senses == senses and twin.value.hex() == part.value.hex()
        same = same and [node.lower() for node in twin.nodes] == [nodes[node] for node in part.nodes]
        if same and part.name in want.sources:
            same = _same_drive(want.sources[part.name], got.sources[name], circuit.analyses.transient)
        if not same:
            yield part.name
    if replace(circuit.analyses, chosen=False) != back.analyses:
        yield "an analysis"
    if circuit.conditions.nominal != back.conditions.nominal:
        yield "the temperature"


def _same_drive(want: Source, got: Source, run: TransientRun | None) -> bool:
    asked = (want.ac, want.ac_phase, want.operating_value)
    if asked != (got.ac, got.ac_phase, got.operating_value):
        return False
    return _same_waveform(want.waveform, got.waveform, run)


def _same_waveform(want: Waveform | None, got: Waveform | None, run: TransientRun | None) -> bool:
    """Equal, or points that are the points of a step or of a wave repeated over the run."""
    if want == got:
        return True
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
