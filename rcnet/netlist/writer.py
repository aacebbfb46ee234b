"""Writing a circuit as a SPICE netlist in standard Berkeley syntax."""

from __future__ import annotations

import itertools
import math
import textwrap
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

from ..circuit import Circuit, Network, Part, Points, Sine, Source, Square, Step, Sweep, TransientRun
from ..errors import CircuitError
from ..values import write_spice_number
from .names import Names, safe_names

WIDTH = 79
MAX_PAIRS = 20_000  # points of a repeated piecewise-linear waveform; more belongs in another form

AnalysisName = Literal["ac", "transient", "noise", "operating point"]


@dataclass(frozen=True)
class Written:
    """A netlist as text, the names it uses, and the circuit it holds (vertical edges given a slope)."""

    text: str
    names: Names
    circuit: Circuit


def as_written(circuit: Circuit) -> Circuit:
    """The circuit a netlist can hold: every vertical edge a millionth of its period long."""
    network = circuit.network
    for source in network.sources.values():
        if source.waveform is not None:
            edged = replace(source, waveform=source.waveform.with_edges(_span(circuit)))
            if edged != source:
                network = network.with_source(edged)
    return circuit.with_network(network)


def _span(circuit: Circuit) -> float:
    return circuit.analyses.transient.stop if circuit.analyses.transient else 1.0


def write(circuit: Circuit, comments: Iterable[str] = ()) -> Written:
    """The whole netlist: title, comments, parts, sources, analyses, `.end`.

    comments: lines put under the title, each made a comment. Raises CircuitError where a waveform or an
    analysis cannot be written.
    """
    held = as_written(circuit)
    names = safe_names(held.network)
    lines = [_title(circuit.title or circuit.name)]
    lines += [comment for text in comments for comment in comment_lines(text)]
    lines += _renamed(names)
    lines += body(held, names)
    lines += _save_all(held)
    for name in requested(held):
        lines += [*analysis_lines(held, names, name), *_print_lines(held, names, name)]
    lines.append(".end")
    return Written("\n".join(lines) + "\n", names, held)


def _save_all(circuit: Circuit) -> list[str]:
    """`.save all` where ngspice 39, run by hand without a raw file, would keep nothing of an analysis.

    It saves a voltage printed for several analyses in one of them only, and the noise spectrum never.
    """
    return [".save all"] if circuit.analyses.noise or len(requested(circuit)) > 1 else []


def deck(circuit: Circuit, names: Names, analysis: AnalysisName) -> str:
    """What one run of ngspice is given: the parts of `circuit` (as written) and one analysis.

    Without an operating point first, networks whose nodes have no dc path run clean and every warning means
    something (`.options noopac`, ngspice manual).
    """
    lines = [_title(circuit.title or circuit.name), *body(circuit, names)]
    if analysis == "ac":
        lines.append(".options noopac")
    lines += [*analysis_lines(circuit, names, analysis), ".end"]
    return "\n".join(lines) + "\n"


def requested(circuit: Circuit) -> list[AnalysisName]:
    """The analyses a circuit asks for, in the order they are written."""
    wanted = circuit.analyses
    both: list[tuple[AnalysisName, object]] = [
        ("operating point", wanted.operating_point),
        ("ac", wanted.ac),
        ("transient", wanted.transient),
        ("noise", wanted.noise),
    ]
    return [name for name, present in both if present]


# ---------------------------------------------------------------------- lines


def _title(text: str) -> str:
    # The first line is the title whatever it holds. As a comment it stays harmless if the file is included
    # elsewhere; `*#` and `*ng_script` would be commands to ngspice.
    shown = " ".join(_printable(text).split()).lstrip("#*. ") or "circuit"
    return _unjoined(f"* {shown}"[:WIDTH].rstrip())


def _printable(text: str) -> str:
    return "".join(character if character.isprintable() else " " for character in text)


def _unjoined(line: str) -> str:
    # Some readers take a backslash at the end for a continuation, which would swallow the line after.
    kept = line.rstrip("\\")
    return kept + "/" * (len(line) - len(kept))


def comment_lines(text: str) -> list[str]:
    """A comment of any length as lines under 80 columns."""
    clean = _printable(text)
    indent = min(len(clean) - len(clean.lstrip()), 8)
    wrapped = textwrap.wrap(clean.strip(), WIDTH - 2 - indent, subsequent_indent="  ", break_on_hyphens=False)
    return [_unjoined(f"* {' ' * indent}{line}") for line in wrapped] or ["*"]


def _renamed(names: Names) -> list[str]:
    changed = names.renamed
    if not changed:
        return []
    lines = comment_lines("Renamed, so that every simulator reads them alike:")
    for what, old, new in changed:
        lines += comment_lines(f'  {what} {new} is "{old}"')
    return lines


def wrap(line: str) -> list[str]:
    """A netlist line under 80 columns, continued with `+` between words."""
    words = line.split(" ")
    lines, current = [], words[0]
    for word in words[1:]:
        if len(current) + 1 + len(word) > WIDTH:
            lines.append(current)
            current = f"+ {word}"
        else:
            current = f"{current} {word}"
    return [*lines, current]


def body(circuit: Circuit, names: Names) -> list[str]:
    """Parts, sources and settings; everything but the analyses."""
    network = circuit.network
    lines: list[str] = []
    for part in network.parts:
        source = network.sources.get(part.name)
        lines += wrap(_part_line(part, names) if source is None else source_line(source, names, circuit))
    settings = [f"{key}={value}" if value else key for key, value in circuit.options.items()]
    if circuit.conditions.nominal != 27.0:
        settings.append(f"temp={write_spice_number(circuit.conditions.nominal)}")
    if settings:
        lines += wrap(f".options {' '.join(settings)}")
    return lines


def _part_line(part: Part, names: Names) -> str:
    words = [names.parts[part.name], *(names.nodes[node] for node in part.nodes)]
    if part.senses is not None:
        words.append(names.parts[part.senses])
    return " ".join([*words, write_spice_number(part.value)])


def source_line(source: Source, names: Names, circuit: Circuit) -> str:
    """An independent source's line: name, nodes, DC, AC, waveform; not yet wrapped."""
    words = [names.parts[source.name], *(names.nodes[node] for node in source.nodes)]
    words += ["DC", write_spice_number(source.operating_value)]
    if source.ac is not None:
        words += ["AC", write_spice_number(source.ac)]
        if source.ac_phase:
            words.append(write_spice_number(source.ac_phase))
    if source.waveform is not None:
        words.append(_waveform(source, circuit))
    return " ".join(words)


def _waveform(source: Source, circuit: Circuit) -> str:
    wave = source.waveform
    assert wave is not None
    if isinstance(wave, Square):
        return _call("PULSE", wave.low, wave.high, wave.delay, wave.rise, wave.fall, wave.width, wave.period)
    if isinstance(wave, Sine):
        numbers = [wave.offset, wave.amplitude, wave.frequency, wave.delay, 0.0, wave.phase]
        return _call("SIN", *(numbers if wave.phase else numbers[:4] if wave.delay else numbers[:3]))
    pairs = _step(wave) if isinstance(wave, Step) else _points(wave, source.name, circuit)
    return _call("PWL", *(number for pair in pairs for number in pair))


def _call(word: str, *numbers: float) -> str:
    return f"{word}({' '.join(write_spice_number(number) for number in numbers)})"


def _step(wave: Step) -> list[tuple[float, float]]:
    start = [(0.0, wave.initial)] if wave.at > 0 else []
    end = max(wave.at + wave.rise, math.nextafter(wave.at, math.inf))  # times must rise
    return [*start, (wave.at, wave.initial), (end, wave.final)]


def _points(wave: Points, name: str, circuit: Circuit) -> Sequence[tuple[float, float]]:
    """Periodic points written out until the transient ends; standard PWL cannot repeat."""
    run = circuit.analyses.transient
    if wave.period is None or run is None:
        return wave.values
    turns = math.floor(min(run.stop / wave.period, 1e15)) + 1
    if turns * len(wave.values) > MAX_PAIRS:
        raise CircuitError(
            f"{name}: its waveform repeats {turns} times in the transient, "
            f"{turns * len(wave.values)} points.",
            remedy=f"Shorten the transient; at most {MAX_PAIRS} points are written.",
        )
    return list(_repeated(wave, wave.period, run.stop))


def _repeated(wave: Points, period: float, stop: float) -> Iterator[tuple[float, float]]:
    """The points turn after turn, up to and with the first at `stop` or later."""
    last = -1.0
    if wave.values[0][0] > 0:
        last = 0.0
        yield 0.0, wave.start
    for turn in itertools.count():
        for time, value in wave.values:
            now = turn * period + time
            if now > last:  # the last point of a turn may be the first of the next
                last = now
                yield now, value
            if now >= stop:
                return


# ---------------------------------------------------------------------- analyses


def analysis_lines(circuit: Circuit, names: Names, analysis: AnalysisName) -> list[str]:
    """The line that asks for one analysis. Raises CircuitError where it lacks an output or a source."""
    wanted = circuit.analyses
    if analysis == "operating point":
        return [".op"]
    if analysis == "ac" and wanted.ac is not None:
        return wrap(f".ac {_sweep(wanted.ac)}")
    if analysis == "transient" and wanted.transient is not None:
        return wrap(f".tran {_run(wanted.transient)}")
    if analysis == "noise" and wanted.noise is not None:
        output = voltage(_output(circuit), names)
        return wrap(f".noise {output} {_driver(circuit, names)} {_sweep(wanted.noise)}")
    raise CircuitError(f"the circuit asks for no {analysis} analysis.", remedy="Add it under [analysis].")


def _print_lines(circuit: Circuit, names: Names, analysis: AnalysisName) -> list[str]:
    # The first voltage printed tells a reader which node is the output.
    word = {"ac": "ac", "transient": "tran", "operating point": "op", "noise": "noise"}[analysis]
    if analysis == "noise":
        return [".print noise onoise_spectrum"]
    if not circuit.output or not all(node in names.nodes for node in circuit.output):
        return []
    return wrap(f".print {word} {voltage(circuit.output, names)}")


def voltage(nodes: Sequence[str], names: Names) -> str:
    """`v(a)` or `v(a,b)`."""
    return f"v({','.join(names.nodes[node] for node in nodes)})"


def _output(circuit: Circuit) -> tuple[str, ...]:
    if not circuit.output or not all(circuit.network.has_node(node) for node in circuit.output):
        raise CircuitError(
            "a noise analysis needs an output node.", remedy='Add output = "out" to the circuit.'
        )
    return circuit.output


def _driver(circuit: Circuit, names: Names) -> str:
    for source in circuit.network.sources.values():
        if source.ac:
            return names.parts[source.name]
    raise CircuitError("a noise analysis needs a source with an ac value.", remedy="Give one source ac = 1.")


def _sweep(sweep: Sweep) -> str:
    return f"{sweep.kind} {sweep.points} {write_spice_number(sweep.start)} {write_spice_number(sweep.stop)}"


def _run(run: TransientRun) -> str:
    words = [write_spice_number(run.step), write_spice_number(run.stop)]
    if run.start or run.max_step is not None:
        words.append(write_spice_number(run.start))
    if run.max_step is not None:
        words.append(write_spice_number(run.max_step))
    return " ".join([*words, *(["uic"] if run.use_initial else [])])


def network_of(circuit: Circuit | Network) -> Circuit:
    """A bare network as a circuit, so that either can be written."""
    if isinstance(circuit, Circuit):
        return circuit
    output = ("out",) if circuit.has_node("out") else ()
    return Circuit(circuit, name=circuit.title or "circuit", output=output)
