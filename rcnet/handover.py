"""The netlist that is handed on: analyses chosen where the file is silent, checked, sealed, read back."""

from __future__ import annotations

import math
from dataclasses import replace
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

import numpy as np

from .check import Check, check
from .circuit import Analyses, Circuit, Network, Sweep, TransientRun
from .claims import half_power, profile
from .errors import CircuitError, RcnetError
from .exact import dc_solvable, natural_frequencies, node_pair, response, span_of
from .netlist import Written, frequencies, network_of, parse_netlist, seal_comments, write
from .values import format_quantity

_POINTS_PER_DECADE = 20
_MOST_DECADES = 12


def package_version() -> str:
    """The version of rcnet that is running."""
    try:
        return version("rcnet")
    except PackageNotFoundError:  # pragma: no cover - only from a folder that was never installed
        return "unknown"


def with_analyses(circuit: Circuit | Network) -> Circuit:
    """The circuit with sensible analyses where it asks for none: ac around the corners, dc, one look at the waveform."""
    whole = network_of(circuit)
    if whole.analyses:
        return whole
    sources = whole.network.sources.values()
    chosen = Analyses(chosen=True)
    if any(source.ac for source in sources):
        chosen = replace(chosen, ac=_sweep(whole))
    if any(source.operating_value for source in sources) and dc_solvable(whole.network):
        chosen = replace(chosen, operating_point=True)
    if any(source.waveform is not None for source in sources) and dc_solvable(whole.network):
        chosen = replace(chosen, transient=_transient(whole))
    return replace(whole, analyses=chosen)


def _sweep(circuit: Circuit) -> Sweep:
    """Two decades to either side of the corners, whole decades, at most twelve."""
    network = circuit.network
    span = span_of(network)
    corners = [span.low / (2 * math.pi), span.high / (2 * math.pi)]
    try:
        found = profile(network, node_pair(network, " ".join(circuit.output or network.nodes[1:2])))
        corners = [f for edge in ("lower", "upper") if (f := half_power(found, edge)) is not None] or corners
    except RcnetError:
        pass  # no response at the output: the bounds on the modes serve
    low, high = math.floor(math.log10(min(corners))) - 2, math.ceil(math.log10(max(corners))) + 2
    excess = max(0, high - low - _MOST_DECADES)
    low, high = low + (excess + 1) // 2, high - excess // 2
    return Sweep(10.0**low, 10.0**high, _POINTS_PER_DECADE)


def _transient(circuit: Circuit) -> TransientRun:
    """Ten periods of the slowest wave, or a single event and eight of the slowest time constants behind it."""
    periods, events = [], []
    for source in circuit.network.sources.values():
        if source.waveform is None:
            continue
        if (period := source.waveform.repeats) is not None:
            periods.append(period)
        else:
            events.append(getattr(source.waveform, "at", 0.0) + getattr(source.waveform, "rise", 0.0))
    poles = natural_frequencies(circuit.network)
    slowest = 1 / np.abs(poles).min() if len(poles) else 1 / span_of(circuit.network).low
    stop = 10 * max(periods) if periods else max(events, default=0.0) + 8 * float(slowest)
    return TransientRun(stop, stop / 500)


def sealed_netlist(circuit: Circuit | Network, done: Check | None = None, *, anyway: bool = False) -> Written:
    """The checked netlist with its seal.

    Raises CircuitError where a finding is an error and `anyway` is not given (then the seal says so), or where
    the text, read back, is not the circuit bit for bit.
    """
    whole = with_analyses(circuit)
    done = done or check(whole)
    if done.errors and not anyway:
        raise CircuitError(
            f"{len(done.errors)} finding{'s' if len(done.errors) > 1 else ''} of severity error; the first: "
            f"{done.errors[0].message}",
            file=done.errors[0].file,
            line=done.errors[0].line,
            remedy="Mend the circuit, or write the netlist all the same with --anyway.",
        )
    bare = write(whole)
    _require_same(bare, parse_netlist(bare.text, whole.file or whole.name))
    return write(whole, [*header(whole), *seal_comments(parse_netlist(bare.text, ""), _facts(whole, done))])


def header(circuit: Circuit) -> list[str]:
    """The comment lines under the title."""
    # The file's own name: the folder it lies in is nobody else's business.
    origin = Path(circuit.file).name if circuit.file else "a network built in Python"
    lines = [f"Netlist written by rcnet {package_version()} from {origin}."]
    if circuit.analyses.chosen:
        lines.append("The circuit asks for no analysis; those below were chosen by rcnet.")
    edges = [s.name for s in circuit.network.sources.values() if s.waveform and s.waveform.with_edges(1.0) != s.waveform]
    if edges:
        lines.append(f"Vertical edges of {', '.join(edges)} are written as a millionth of the period long.")
    return lines


def _facts(circuit: Circuit, done: Check) -> list[str]:
    counts = {severity: sum(f.severity == severity for f in done.findings) for severity in ("error", "warning", "note")}
    verdicts = {word: sum(r.verdict == word for r in done.claims) for word in ("holds", "fails", "undecided")}
    lines = []
    if done.errors:
        lines.append("written despite errors (--anyway):")
        lines += [f"  {finding.message}" for finding in done.errors]
    lines.append(f"checked: {counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes")
    if done.claims:
        lines.append(
            f"claims: {verdicts['holds']} hold, {verdicts['fails']} fail, {verdicts['undecided']} undecided"
        )
    return lines + _expectations(circuit)


def _expectations(circuit: Circuit) -> list[str]:
    """What a recipient should see: the cutoffs and the exact gain at a few frequencies, to ten digits."""
    if circuit.analyses.ac is None or not circuit.output:
        return []
    name = f"v({','.join(circuit.output)})"
    try:
        pair = node_pair(circuit.network, " ".join(circuit.output))
        found = profile(circuit.network, pair)
        cutoffs = {edge: half_power(found, edge) for edge in ("lower", "upper")}
        grid = frequencies(circuit.analyses.ac)
        picks = grid[np.unique(np.linspace(0, len(grid) - 1, 5).astype(int))]
        values = response(circuit.network, picks, " ".join(circuit.output))
    except RcnetError:
        return []
    lines = [f"expect {name}: {edge} cutoff {f:.10g} Hz" for edge, f in cutoffs.items() if f is not None]
    for frequency, value in zip(picks.tolist(), values.tolist(), strict=True):
        if value:
            level, angle = 20 * math.log10(abs(value)), math.degrees(math.atan2(value.imag, value.real))
            lines.append(f"expect {name} at {format_quantity(frequency, 'Hz', 6)}: {level:.9g} dB, {angle:.9g} deg")
    return lines


def _require_same(written: Written, back: Circuit) -> None:
    """Raise CircuitError unless the netlist, read back, holds the very parts, nodes, values and sources."""
    names, want, got = written.names, written.circuit.network, back.network
    for part in want.parts:
        twin = got.part(names.parts[part.name])
        same = (
            [node.lower() for node in twin.nodes] == [names.nodes[node].lower() for node in part.nodes]
            and twin.kind == part.kind
            and (part.name in want.sources or twin.value.hex() == part.value.hex())
        )
        if not same:
            raise CircuitError(
                f"{part.name} does not come back from the written netlist as it went in.",
                remedy="This is a defect of rcnet; please report it with the circuit.",
            )
    if len(want) != len(got):
        raise CircuitError("the written netlist holds other parts.", remedy="This is a defect of rcnet; report it.")
