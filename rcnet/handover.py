"""The netlist that is handed on: analyses chosen where the file is silent, checked, sealed, read back."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np

from .check import Check, check
from .circuit import (
    Analyses,
    Circuit,
    Exponential,
    Network,
    Points,
    Sine,
    Square,
    Step,
    Sweep,
    TransientRun,
    Waveform,
)
from .claims import half_power, profile
from .errors import CircuitError, RcnetError
from .exact import dc_solvable, driving_sources, natural_frequencies, node_pair, response, span_of
from .measuring import measure_lines
from .netlist import (
    DESPITE_ERRORS,
    Names,
    Written,
    frequencies,
    network_of,
    read_same,
    seal_comments,
    voltage,
)
from .netlist.portable import ascii_text
from .netlist.writer import sheet
from .values import format_quantity

_POINTS_PER_DECADE = 20
_MOST_DECADES = 12
_PERIODS = 10
_TIME_CONSTANTS = 8
_STEPS = 500
_MOST_STEPS = 20_000
_MOST_PARTS = 5000  # up to here a look at all frequencies takes a moment only


def package_version() -> str:
    """The version of rcnet that is running."""
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("rcnet")
    except PackageNotFoundError:  # pragma: no cover - only from a folder that was never installed
        return "unknown"


# ---------------------------------------------------------------------- analyses where the file is silent


def with_analyses(circuit: Circuit | Network) -> Circuit:
    """The circuit with sensible analyses where it asks for none.

    An ac sweep around the corners, the operating point where it is defined, one look at the waveform.
    """
    whole = network_of(circuit)
    if whole.analyses:
        return whole
    sources = whole.network.sources.values()
    chosen = Analyses(chosen=True)
    if any(source.ac for source in sources):
        chosen = replace(chosen, ac=chosen_sweep(whole))
    if dc_solvable(whole.network):
        if any(source.operating_value for source in sources):
            chosen = replace(chosen, operating_point=True)
        if any(source.waveform is not None for source in sources):
            chosen = replace(chosen, transient=chosen_transient(whole.network))
    return replace(whole, analyses=chosen)


def chosen_sweep(circuit: Circuit) -> Sweep:
    """Whole decades, two to either side of the corners; one, where two would make more than twelve in all."""
    network = circuit.network
    span = span_of(network)
    bounds = [span.low / (2 * math.pi), span.high / (2 * math.pi)]
    corners = list(_cutoffs(network, " ".join(circuit.output or network.nodes[1:2])).values())
    first = math.floor(math.log10(min(corners or bounds)))
    last = math.ceil(math.log10(max(corners or bounds)))
    margin = 2 if last - first + 4 <= _MOST_DECADES else 1
    low, high = first - margin, last + margin
    if not corners:  # bounds may lie far outside the modes themselves
        excess = max(0, high - low - _MOST_DECADES)
        low, high = low + (excess + 1) // 2, high - excess // 2
    return Sweep(float(f"1e{low}"), float(f"1e{high}"), _POINTS_PER_DECADE)


def _cutoffs(network: Network, of: str) -> dict[str, float]:
    """The half-power frequencies by edge, Hz; none where there is no response, or the network is large."""
    if len(network) > _MOST_PARTS:
        return {}
    try:
        found = profile(network, node_pair(network, of))
        return {edge: f for edge in ("lower", "upper") if (f := half_power(found, edge)) is not None}
    except RcnetError:
        return {}


def chosen_transient(network: Network) -> TransientRun:
    """Ten periods of the slowest wave, and every single event with eight of the slowest time constants."""
    waves = [source.waveform for source in network.sources.values() if source.waveform is not None]
    ends = [
        getattr(wave, "delay", 0.0) + _PERIODS * wave.repeats for wave in waves if wave.repeats is not None
    ]
    events = [_last_event(wave) for wave in waves if wave.repeats is None]
    if events:
        poles = natural_frequencies(network)
        slowest = 1 / np.abs(poles).min() if len(poles) else 1 / span_of(network).low
        ends.append(max(events) + _TIME_CONSTANTS * float(slowest))
    stop = max(ends)
    # A simulator's longest step follows from this one; longer than a swing, it would miss it.
    swings = [1 / wave.frequency for wave in waves if isinstance(wave, Sine) and wave.damping]
    step = max(min([stop / _STEPS, *(swing / _STEPS * _PERIODS for swing in swings)]), stop / _MOST_STEPS)
    return TransientRun(stop, step)


def _last_event(wave: Waveform) -> float:
    if isinstance(wave, Points):
        return wave.values[-1][0]
    if isinstance(wave, Exponential):
        there = wave.rise_delay + _TIME_CONSTANTS * wave.rise_time_constant
        if not wave.falls:
            return there
        return max(there, wave.fall_delay + _TIME_CONSTANTS * wave.fall_time_constant)
    if isinstance(wave, Sine):  # a damped one; ten turns show it as well as ten of one that repeats
        return wave.delay + min(_PERIODS / wave.frequency, _TIME_CONSTANTS / wave.damping)
    assert isinstance(wave, Step)
    return wave.at + wave.rise


# ---------------------------------------------------------------------- the sealed netlist


def sealed_netlist(
    circuit: Circuit | Network,
    done: Check | None = None,
    *,
    anyway: bool = False,
    portable: bool = False,
    measures: bool = False,
) -> Written:
    """The checked netlist with its seal.

    portable: keep to what every simulator descended from Berkeley's reads; measures: add `.meas` lines, each
    with the exact value it should give, and ask for one analysis alone, because ngspice measures in one only
    Raises CircuitError where a finding is an error and `anyway` is not given (then the seal says so), or
    where the text, read back, is not the circuit bit for bit.
    """
    whole = with_analyses(circuit)
    done = done or check(whole)
    require_sound(done, anyway=anyway)
    asked = one_measured(whole) if measures else whole
    made = sheet(asked, portable=portable, measured=measures)
    bare = made.written(measure_lines(made.circuit, made.names) if measures else [])
    back = read_same(bare)
    notes = [] if asked is whole else [_ONE_ANALYSIS]
    texts = [*header(asked, bare), *notes, *seal_comments(back, facts(asked, done, bare.names))]
    return bare.with_comments(ascii_text(text) if portable else text for text in texts)


_ONE_ANALYSIS = "ngspice measures in the analysis it runs last, and only there, so this netlist asks for one."


def require_sound(done: Check, *, anyway: bool) -> None:
    """Raise CircuitError where a finding is an error, unless it is to be written anyway."""
    if done.errors and not anyway:
        raise CircuitError(
            f"{len(done.errors)} finding{'s' if len(done.errors) > 1 else ''} of severity error; the first: "
            f"{done.errors[0].message}",
            file=done.errors[0].file,
            line=done.errors[0].line,
            remedy="Mend the circuit, or write the netlist all the same with --anyway.",
        )


def one_measured(circuit: Circuit) -> Circuit:
    """The circuit asking for the one analysis that can be measured in. Raises CircuitError for none."""
    wanted = circuit.analyses
    kept = Analyses(ac=wanted.ac, transient=None if wanted.ac else wanted.transient, chosen=wanted.chosen)
    if not kept:
        raise CircuitError(
            "there is nothing to measure in: the circuit asks for neither an ac sweep nor a transient.",
            remedy="Add one under [analysis].",
        )
    word = "ac" if kept.ac else "tran"
    requests = tuple(
        request
        for request in circuit.requests
        if request.word == ".meas" and request.text.split()[0].lower() == word
    )
    if replace(kept, chosen=False) == replace(wanted, chosen=False) and requests == circuit.requests:
        return circuit
    return replace(circuit, analyses=kept, requests=requests)


def header(circuit: Circuit, written: Written) -> list[str]:
    """The comment lines under the title."""
    # The file's own name: the folder it lies in is nobody else's business.
    origin = Path(circuit.file).name if circuit.file else "a network built in Python"
    lines = [f"Netlist written by rcnet {package_version()} from {origin}."]
    if circuit.left_out:
        named = ", ".join(left.name for left in circuit.left_out[:20])
        more = f" and {len(circuit.left_out) - 20} more" if len(circuit.left_out) > 20 else ""
        lines.append(f"Only the linear part of it; left out as not linear: {named}{more}.")
    if circuit.analyses.chosen:
        lines.append("The circuit asks for no analysis; those below were chosen by rcnet.")
    held, names = written.circuit.network.sources, written.names.parts
    changed = {
        name: (source.waveform, held[name].waveform)
        for name, source in circuit.network.sources.items()
        if source != held[name]
    }
    flat = [name for name, (wave, _) in changed.items() if isinstance(wave, Square) and not wave.width]
    edged = [name for name in changed if name not in flat]
    if edged:
        named = ", ".join(names[name] for name in edged)
        lines.append(f"Vertical edges of {named} are written as a millionth of the period (or the run) long.")
    if flat:
        named = ", ".join(names[name] for name in flat)
        lines.append(f"Pulses of {named}, which have no width, are written with a billionth of the period.")
    return lines


def facts(circuit: Circuit, done: Check, names: Names) -> list[str]:
    """What a seal says of a circuit: what was found, what was claimed, what a simulator should show."""
    return [*findings_told(done), *_expectations(circuit, names)]


def findings_told(done: Check) -> list[str]:
    """How many findings there are of each severity, and how many claims are true."""
    lines = []
    if done.errors:
        lines.append(DESPITE_ERRORS)
        lines += [f"  {finding.message}" for finding in done.errors]
    severities = [finding.severity for finding in done.findings]
    counted = ", ".join(_counted(severities.count(word), word) for word in ("error", "warning", "note"))
    lines.append(f"checked: {counted}")
    if done.silenced:  # whoever is handed the netlist should know what was not told
        codes = ", ".join(sorted({finding.code for finding in done.silenced}))
        lines.append(f"silenced: {_counted(len(done.silenced), 'finding')} ({codes})")
    if done.claims:
        verdicts = [result.verdict for result in done.claims]
        hold, fail, open_ = (verdicts.count(word) for word in ("holds", "fails", "undecided"))
        lines.append(f"{_counted(len(verdicts), 'claim')}: {hold} true, {fail} false, {open_} undecided")
    return lines


def _counted(count: int, word: str) -> str:
    return f"{count} {word}{'' if count == 1 else 's'}"


def _expectations(circuit: Circuit, names: Names) -> list[str]:
    """What a simulator should show: the cutoffs, and the output at a few frequencies to nine digits."""
    network, sweep = circuit.network, circuit.analyses.ac
    if sweep is None or not circuit.output:
        return []
    of = " ".join(circuit.output)
    try:
        grid = frequencies(sweep)
        picks = grid[np.unique(np.linspace(0, len(grid) - 1, 5).astype(int))] if len(grid) else grid
        # The rounded frequencies, because the reader will look there.
        points = [float(f"{pick:.6g}") for pick in picks]
        values = response(network, points, of)
    except RcnetError:
        return []
    # A response is per unit of a lone source; a simulator shows what that source's ac value makes of it.
    driving = driving_sources(network)
    if len(driving) == 1:
        values = values * network.sources[driving[0]].phasor
    name = voltage(circuit.output, names)
    lines = [f"expect {name}: {edge} cutoff {f:.10g} Hz" for edge, f in _cutoffs(network, of).items()]
    for frequency, value in zip(points, values.tolist(), strict=True):
        if value:
            level, angle = 20 * math.log10(abs(value)), math.degrees(math.atan2(value.imag, value.real))
            where = format_quantity(frequency, "Hz", 6)
            lines.append(f"expect {name} at {where}: {level:.9g} dB, {angle:.9g} deg")
    return lines
