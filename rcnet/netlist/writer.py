"""Writing a circuit as a SPICE netlist in standard Berkeley syntax."""

from __future__ import annotations

import itertools
import math
import re
import textwrap
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ..circuit import (
    NEVER,
    Circuit,
    Exponential,
    Network,
    Part,
    Place,
    Points,
    Request,
    Sine,
    Source,
    Square,
    Step,
    Sweep,
    TransientRun,
    Waveform,
)
from ..errors import CircuitError
from ..values import write_spice_number
from .names import USUAL, Names, safe_names
from .portable import NAMES as PORTABLE_NAMES
from .portable import as_portable, ascii_text
from .requests import respelled

WIDTH = 79
MAX_PAIRS = 20_000  # points of a repeated piecewise-linear waveform; more belongs in another form
_SOON = 1e-30  # s, before every time that a run looks at
WIDTH_SHARE = 1e-9  # of the period: how wide a pulse without width is written
_MANY = 1000  # parts; as many and more are written column by column

AnalysisName = Literal["ac", "transient", "noise", "operating point"]


@dataclass(frozen=True)
class Written:
    """A netlist as text, the names it uses, and the circuit it holds (vertical edges given a slope)."""

    text: str
    names: Names
    circuit: Circuit

    def with_comments(self, comments: Iterable[str]) -> Written:
        """The same netlist with these texts under its title, each made a comment."""
        lines = [line for text in comments for line in comment_lines(text)]
        if not lines:
            return self
        title, _, rest = self.text.partition("\n")
        return replace(self, text="\n".join([title, *lines, rest]))


@dataclass(frozen=True)
class Sheet:
    """A netlist in its sections, each a list of lines (a long one holds line ends).

    title: the first line; remarks: comments about names and about what was left out
    body: parts, sources, settings and starting state; saved: what a simulator is to keep
    names, circuit: as in `Written`
    """

    title: str
    remarks: list[str]
    body: list[str]
    saved: list[str]
    analyses: list[str]
    names: Names
    circuit: Circuit

    def written(self, measures: Sequence[str] = ()) -> Written:
        """The whole netlist. measures: lines that go before `.end`."""
        lines = [self.title, *self.remarks, *self.body, *self.saved, *self.analyses, *measures, ".end", ""]
        added = tuple(
            Request(".meas", line, Place("", None)) for line in measures if line.startswith(".meas")
        )
        return Written(
            "\n".join(lines), self.names, replace(self.circuit, requests=self.circuit.requests + added)
        )


def as_written(circuit: Circuit) -> Circuit:
    """The circuit a netlist can hold: edges a millionth of the period long, and no pulse without width."""
    network = circuit.network
    for source in network.sources.values():
        if source.waveform is not None:
            edged = replace(source, waveform=_with_width(source.waveform.with_edges(_span(circuit))))
            if edged != source:
                network = network.with_source(edged)
    return circuit.with_network(network)


def _with_width(wave: Waveform) -> Waveform:
    # To ngspice 39 a width of 0 is one that was left out, and the pulse lasts until the run ends.
    if not isinstance(wave, Square) or wave.width:
        return wave
    width = min(WIDTH_SHARE * wave.period, wave.fall / 2)
    return replace(wave, width=width, fall=wave.fall - width)


def _span(circuit: Circuit) -> float:
    return circuit.analyses.transient.stop if circuit.analyses.transient else 1.0


def write(circuit: Circuit, comments: Iterable[str] = (), *, portable: bool = False) -> Written:
    """The whole netlist: title, comments, parts, sources, analyses, `.end`.

    comments: lines put under the title, each made a comment; portable: keep to what every simulator descended
    from Berkeley's reads (see `rcnet.netlist.portable`). Raises CircuitError where a waveform, an analysis or
    a request cannot be written.
    """
    texts = [ascii_text(text) if portable else text for text in comments]
    return sheet(circuit, portable=portable).written().with_comments(texts)


def sheet(circuit: Circuit, *, portable: bool = False, measured: bool = False) -> Sheet:
    """The sections of a netlist; as `write`. measured: `.meas` lines are going to be added."""
    held = as_written(circuit)
    left_out: list[str] = []
    if portable:
        held, left_out = as_portable(held)
        left_out += [_RAW_ONLY] if _save_all(held, measured=measured) else []
    names = safe_names(held.network, PORTABLE_NAMES if portable else USUAL)
    analyses: list[str] = []
    for name in requested(held):
        analyses += asked_lines(held, names, name, portable=portable)
    analyses += request_lines(held, names)
    spelt = ascii_text if portable else str
    return Sheet(
        title_line(spelt(held.title or held.name)),
        [line for text in [*renamed_remarks(names), *left_out] for line in comment_lines(spelt(text))],
        [*body(held, names), *starting_lines(held, names)],
        [] if portable else _save_all(held, measured=measured),
        analyses,
        names,
        held,
    )


_RAW_ONLY = "Give ngspice a raw file to write (-r): without one it keeps the first analysis only."


def _save_all(circuit: Circuit, *, measured: bool) -> list[str]:
    """`.save all` where ngspice 39, run by hand without a raw file, would keep nothing of an analysis.

    It saves a voltage printed for several analyses in one of them only, the noise spectrum never, and for
    `.meas` nothing that is not printed.
    """
    measured = measured or any(request.word == ".meas" for request in circuit.requests)
    several = len(requested(circuit)) > 1
    return [".save all"] if circuit.analyses.noise or several or measured else []


def deck(circuit: Circuit, names: Names, analysis: AnalysisName) -> str:
    """What one run of ngspice is given: the parts of `circuit` (as written) and one analysis.

    Without an operating point first, networks whose nodes have no dc path run clean and every warning means
    something (`.options noopac`, ngspice manual).
    """
    lines = [title_line(circuit.title or circuit.name), *body(circuit, names)]
    if analysis == "ac":
        lines.append(".options noopac")
    if analysis == "transient":
        lines += starting_lines(circuit, names)
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


def title_line(text: str) -> str:
    """The first line: a comment in which nothing is left that a simulator could obey."""
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


def renamed_remarks(names: Names) -> list[str]:
    """Texts that tell which names are others than in the circuit; none where all are the same."""
    changed = [f'  {what} {new} is "{old}"' for what, old, new in names.renamed]
    return ["Renamed, so that every simulator reads them alike:", *changed] if changed else []


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
    """Parts, sources and settings; everything but the analyses. A long line holds its own line ends."""
    if len(circuit.network) >= _MANY:
        lines = _many_parts(circuit, names)
    else:
        lines = [line for part in circuit.network.parts for line in wrap(part_line(part, names, circuit))]
    return [*lines, *setting_lines(circuit)]


def setting_lines(circuit: Circuit) -> list[str]:
    """`.options` with the settings kept for a simulator, and the temperature where it is not 27."""
    settings = [f"{key}={value}" if value else key for key, value in circuit.options.items()]
    if circuit.conditions.nominal != 27.0:
        settings.append(f"temp={write_spice_number(circuit.conditions.nominal)}")
    return wrap(f".options {' '.join(settings)}") if settings else []


def part_line(part: Part, names: Names, circuit: Circuit) -> str:
    """A part's or a source's line with its starting value; not yet wrapped."""
    source = circuit.network.sources.get(part.name)
    line = _part_line(part, names) if source is None else source_line(source, names, circuit)
    if part.name in circuit.initial.parts:
        line = f"{line} ic={write_spice_number(circuit.initial.parts[part.name])}"
    return line


def _many_parts(circuit: Circuit, names: Names) -> list[str]:
    """The lines of all parts, R, C and L made column by column; a record for each would take ten times."""
    network = circuit.network
    rows = network.arrays()
    nodes = [names.nodes[node] for node in network.nodes]
    first, second = ([nodes[k] for k in column] for column in rows.nodes[:, :2].T.tolist())
    columns = zip(names.parts.values(), first, second, _numbers(rows.values.tolist()), strict=True)
    lines = [" ".join(words) for words in columns]
    if max(map(len, lines)) > WIDTH:
        lines = ["\n".join(wrap(line)) for line in lines]
    plain = np.isin(rows.kinds, np.frombuffer(b"RCL", dtype=np.uint8))
    plain[[network.part_index(name) for name in circuit.initial.parts]] = False
    for row in np.flatnonzero(~plain).tolist():
        part = network.part(network.names[row])
        lines[row] = "\n".join(wrap(part_line(part, names, circuit)))
    return lines


def _numbers(values: list[float]) -> Iterator[str]:
    """Each number as `write_spice_number` has it; one that stands there often is written once."""
    distinct = set(values)
    if len(distinct) > len(values) // 2:
        return (text.removesuffix(".0") for text in map(repr, values))
    known = {value: write_spice_number(value) for value in distinct}
    return (known[value] for value in values)


def starting_lines(circuit: Circuit, names: Names) -> list[str]:
    """`.ic` for the nodes whose voltage at the start of a transient is given."""
    words = [
        f"v({names.nodes[node]})={write_spice_number(volts)}" for node, volts in circuit.initial.nodes.items()
    ]
    return wrap(f".ic {' '.join(words)}") if words else []


def _part_line(part: Part, names: Names) -> str:
    words = [names.parts[part.name], *(names.nodes[node] for node in part.nodes)]
    for named in part.couples or ((part.senses,) if part.senses is not None else ()):
        if named not in names.parts:
            raise CircuitError(
                f"{part.name} names {named}, which is no part here.", remedy="Add it, or name another."
            )
        words.append(names.parts[named])
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
        numbers = [wave.offset, wave.amplitude, wave.frequency, wave.delay, wave.damping, wave.phase]
        last = max(k for k in range(6) if k < 3 or numbers[k])
        return _call("SIN", *numbers[: last + 1])
    if isinstance(wave, Exponential):
        return _call("EXP", *exponential_numbers(wave))
    pairs = _step(wave) if isinstance(wave, Step) else _points(wave, source.name, circuit)
    return _call("PWL", *(number for pair in pairs for number in pair))


def exponential_numbers(wave: Exponential) -> tuple[float, ...]:
    """The six numbers of EXP: ngspice 39 takes its print step for a delay of 0 and for any left out."""
    fall = (wave.fall_delay or _SOON, wave.fall_time_constant) if wave.falls else (NEVER, 1.0)
    return (wave.initial, wave.final, wave.rise_delay or _SOON, wave.rise_time_constant, *fall)


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


def asked_lines(
    circuit: Circuit, names: Names, analysis: AnalysisName, *, portable: bool = False
) -> list[str]:
    """The lines that ask for one analysis and for the output to be printed."""
    return [
        *analysis_lines(circuit, names, analysis),
        *_print_lines(circuit, names, analysis, portable=portable),
    ]


def _print_lines(
    circuit: Circuit, names: Names, analysis: AnalysisName, *, portable: bool = False
) -> list[str]:
    # The first voltage printed tells a reader which node is the output.
    word = {"ac": "ac", "transient": "tran", "operating point": "op", "noise": "noise"}[analysis]
    if portable and word in ("op", "noise"):
        return []  # Berkeley's print an operating point unasked, and name the noise each in its own way
    if analysis == "noise":
        return [".print noise onoise_spectrum"]
    if not circuit.output or not all(node in names.nodes for node in circuit.output):
        return []
    return wrap(f".print {word} {voltage(circuit.output, names)}")


_REQUEST = re.compile(r"[ !-:<-_a-~]*")  # printable ASCII without `;` and the backquote


def request_lines(circuit: Circuit, names: Names) -> list[str]:
    """The lines kept for a simulator (`.dc`, `.tf`, `.four`, `.meas`), under the names of the netlist."""
    if not circuit.requests:
        return []
    nodes = {old.lower(): new for old, new in names.nodes.items()}
    parts = {old.lower(): new for old, new in names.parts.items()}

    def part(word: str) -> str:
        return parts.get(word.lower(), word)

    lines: list[str] = []
    for request in circuit.requests:
        text = request.text.strip()
        if not re.fullmatch(r"\.[a-z]+", request.word) or not _REQUEST.fullmatch(text) or "//" in text:
            raise CircuitError(
                f"{request.word} {text!r} holds characters that are not written into a netlist.",
                file=request.place.file,
                line=request.place.line,
                remedy="Keep to ASCII, and leave out comments behind the line.",
            )
        words = respelled(text, lambda word: nodes.get(word.lower(), word), part).split(" ")
        if request.word in (".dc", ".tf"):  # sources stand there by their bare names
            words = [part(word) for word in words]
        lines += wrap(" ".join([request.word, *words]))
    return lines


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
