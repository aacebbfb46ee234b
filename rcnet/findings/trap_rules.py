"""Rules about what ngspice 39 does without a word: lines that a simulator obeys otherwise than they read."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import cached_property

from ..circuit import Circuit, Place, Sweep
from ..circuit.topology import touches
from ..errors import RcnetError
from ..netlist import frequencies, sweep_fault
from ..netlist.lines import Line, logical_lines
from ._telling import few, whole
from .finding import Remark, rule

_LONGEST_TITLE = 500  # bytes; from 505 on ngspice 39 overruns a buffer
_TAKEN = re.compile(r"\b(v|i)(m|p|r|i|db|ph)?\s*\(([^()]*)\)", re.IGNORECASE)
_OF_PART = re.compile(r"@([^\s\[\]]+)\[(\w+)\]")
_EXPRESSION = re.compile(r"\{[^{}]*\}|'[^']*'")


def _lines(circuit: Circuit, wanted: Callable[[str], bool]) -> Iterator[Line]:
    """The netlist's own logical lines of which a physical line is `wanted`; a million others cost little."""
    lines = circuit.lines if circuit.origin == "netlist" else ()
    done = 0
    for number, raw in enumerate(lines):
        if number == 0 or number < done or not wanted(raw):
            continue
        start = number
        while start > 1 and _goes_on(lines[start]):
            start -= 1
        done = number + 1
        while done < len(lines) and _goes_on(lines[done]):
            done += 1
        for line in logical_lines(lines[start:done], title=False):
            yield line._replace(number=line.number + start)


def _goes_on(raw: str) -> bool:
    return raw.lstrip()[:1] in ("", "+", "*")


def _cards(circuit: Circuit, *words: str) -> Iterator[tuple[str, str, Place]]:
    """The dot lines that begin with one of some words: the word, the rest, the place."""
    for line in _lines(circuit, lambda raw: raw.lstrip()[:1] == "."):
        word, _, rest = line.text.partition(" ")
        if word.lower() in words:
            yield word.lower(), rest, _place(circuit, line)


def _place(circuit: Circuit, line: Line) -> Place:
    return Place(circuit.file or circuit.name, line.number, circuit.lines[line.number - 1])


# ---------------------------------------------------------------------- the netlist as a whole


@rule("title-too-long", "warning", of_text=True)
def title_too_long(circuit: Circuit) -> Iterator[Remark]:
    """A title of more than 500 bytes: asked for a results file, ngspice 39 overruns a buffer and aborts."""
    title = circuit.lines[0] if circuit.origin == "netlist" and circuit.lines else ""
    size = len(title.encode("utf-8", "replace"))
    if size > _LONGEST_TITLE:
        yield Remark(
            f"the title has {size} bytes, on which ngspice 39 aborts.",
            f"Shorten it to {_LONGEST_TITLE} bytes.",
            Place(circuit.file or circuit.name, 1, title),
        )


@rule("no-analysis", "warning")
def no_analysis(circuit: Circuit) -> Iterator[Remark]:
    """Something is printed, saved or measured, but no analysis is asked for.

    ngspice 39 then ends with exit code 0 and no results. rcnet chooses analyses for a netlist without any.
    """
    asked = circuit.analyses and not circuit.analyses.chosen
    if asked or any(request.word in (".ac", ".dc", ".tf") for request in circuit.requests):
        return
    if not all(circuit.network.has_node(node) for node in circuit.output):
        return  # an error of its own
    for word, _, place in _cards(circuit, ".print", ".plot", ".save", ".meas", ".measure", ".four"):
        yield Remark(
            f"{word} stands here, but no analysis is asked for: a simulator ends without any results.",
            "Add .ac, .op, .tran or .noise.",
            place,
        )
        return


@rule("sweep-ends-early", "note")
def sweep_ends_early(circuit: Circuit) -> Iterator[Remark]:
    """A sweep whose last point falls short of its end.

    ngspice 39 stretches the steps of an ac sweep by decades so that the end is reached; not those of a sweep
    by octaves, nor those of a noise sweep.
    """
    for key, sweep in (("ac", circuit.analyses.ac), ("noise", circuit.analyses.noise)):
        if sweep is None or circuit.analyses.chosen or sweep_fault(sweep, noise=key == "noise") is not None:
            continue
        last = _last_point(sweep, stretched=key == "ac" and sweep.kind == "dec")
        if last < sweep.stop * (1 - 1e-9):
            yield Remark(
                f"the last point of the {key} sweep is {last:.5g} Hz, short of its end, {sweep.stop:.5g} Hz.",
                "Let the ends be whole steps apart, or go one step further.",
                circuit.analysis_places.get(key) or whole(circuit),
            )


def _last_point(sweep: Sweep, *, stretched: bool) -> float:
    if stretched or sweep.kind == "lin" or sweep.start == sweep.stop:
        return sweep.stop
    if sweep.kind == "oct":
        try:
            return float(frequencies(sweep)[-1])
        except RcnetError:  # too many points, which others tell
            return sweep.stop
    steps = math.log10(sweep.stop / sweep.start) * sweep.points
    return sweep.start * 10 ** (math.floor(steps + 1e-9) / sweep.points)


# ---------------------------------------------------------------------- names


@rule("vanishing-name", "warning")
def vanishing_name(circuit: Circuit) -> Iterator[Remark]:
    """A node that ngspice 39 does not show under its name, or at all.

    `time` is missing in the results of a transient, `frequency` in those of an ac or noise analysis, and
    `x#branch` is shown as the current `i(x)`. On a node called `temper` ngspice 39 crashes.
    """
    if circuit.origin != "netlist":
        return
    asked = circuit.analyses
    hidden = {"time": asked.transient, "frequency": asked.ac or asked.noise}
    for node in circuit.network.nodes[1:]:
        lower = node.lower()
        crashes = lower.rpartition(".")[2] == "temper"
        if hidden.get(lower) or lower.endswith("#branch") or crashes:
            part = next(part for part in circuit.network.parts if node in part.nodes)
            yield Remark(
                f"ngspice 39 crashes on the node {node!r}."
                if crashes
                else f"the node {node!r} is not among a simulator's results under that name.",
                "Give it another name.",
                circuit.place_of(part.name).at(node.rpartition(".")[2] if crashes else node),
                "error" if crashes else None,
            )


@rule("inner-node", "note")
def inner_node(circuit: Circuit) -> Iterator[Remark]:
    """A node written with a dot that is one inside a subcircuit: `X1.mid` is the node `mid` within X1."""
    if not any(each.uses for each in circuit.subcircuits):
        return
    dotted = {node.lower() for node in circuit.network.nodes if "." in node}
    calls: set[str] = set()
    found: list[tuple[str, Place]] = []
    depth = 0
    for line in _lines(circuit, lambda raw: "." in raw or raw.lstrip()[:1] in ("x", "X")):
        words = line.text.split()
        if words[0][0] == ".":
            opened = words[0].lower() in (".subckt", ".macro")
            depth += opened - (words[0].lower() in (".ends", ".eom"))
        elif depth == 0:
            calls |= {words[0].lower()} if words[0][0] in "xX" else set()
            found += [(word, _place(circuit, line).at(word)) for word in words[1:] if word.lower() in dotted]
    yield from few(
        [each for each in found if each[0].partition(".")[0].lower() in calls],
        lambda each: Remark(
            f"the node {each[0]!r} is the one inside the subcircuit {each[0].partition('.')[0]}.",
            "Give the node another name if that is not meant, or lead it out by a port.",
            each[1],
        ),
        "nodes are inside subcircuits",
    )


@rule("source-without-node", "warning")
def source_without_node(circuit: Circuit) -> Iterator[Remark]:
    """A source without a value whose second node is called like a number: one of its nodes is missing."""
    if circuit.origin != "netlist":
        return
    count, _ = touches(circuit.network)
    for source in circuit.network.sources.values():
        second = source.nodes[1]
        idle = source.dc is None and source.ac is None and source.waveform is None
        alone = count[circuit.network.node_index(second)] == 1
        if idle and alone and second != "0" and re.fullmatch(r"[-+]?[0-9.]+[a-zA-Z]*", second):
            yield Remark(
                f"{source.name} has no value, and its second node is called {second!r}.",
                f"Name both its nodes, as {source.name} {source.nodes[0]} 0 {second}.",
                circuit.place_of(source.name).at(second),
            )


# ---------------------------------------------------------------------- numbers


@rule("capital-m", "warning", of_text=True)
def capital_m(circuit: Circuit) -> Iterator[Remark]:
    """A capital M behind a number of a source or an analysis: it means milli, as in `SIN(0 1 1M)`.

    Not told where the line is in capitals throughout, or has other prefixes in capitals: whoever writes 5US
    for microseconds writes 5MS for milliseconds.
    """
    number = re.compile(r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)M(?:Hz|V|A)?")
    others = re.compile(r"[0-9](?:[UNPKF]|MEG|M(?:S|V|A|HZ)|[NUP](?:S|V|A))\b")
    for owner, text, place in circuit.other_numbers:
        if number.fullmatch(text) and not place.text.isupper() and not others.search(place.text):
            yield _milli(owner, text, place.at(text))


def _milli(owner: str, text: str, place: Place) -> Remark:
    return Remark(
        f"{owner}: the M in {text!r} means milli in SPICE.",
        "Write Meg for a million, or m if milli is meant.",
        place,
    )


# What stands in an expression -> what is odd about it, what to do, how grave it is.
_ODD = (
    (
        re.compile(r"(?<![\w.])[0-9]*\.?[0-9]+M(?![A-Za-z])"),
        "means milli in SPICE",
        "Write Meg for a million, or m if milli is meant.",
        None,
    ),
    (
        re.compile(r"(?<![\w.])[0-9]*\.?[0-9]+mil[a-z]*", re.IGNORECASE),
        "is 0.001 here, and 25.4e-6 outside an expression",
        "Write m for milli.",
        None,
    ),
    (
        re.compile(r"[\w.]+\s*\^\s*[\w.]+\s*\^\s*[\w.]+"),
        "is worked out from the left in ngspice 39: 2^3^2 is 64",
        "Put brackets.",
        None,
    ),
    (
        re.compile(r"\blog\s*\(", re.IGNORECASE),
        "is the natural logarithm in ngspice 39",
        "Write log10( or ln(.",
        "note",
    ),
)


@rule("odd-expression", "warning", of_text=True)
def odd_expression(circuit: Circuit) -> Iterator[Remark]:
    """An expression that ngspice 39 works out otherwise than a person, as `{2*1M}` and `{1mil}`.

    So too `{2^3^2}`, which is 64, and `{log(x)}`, which is the natural logarithm. An M is passed over on
    capacitors and inductors, which have no millions of their units.
    """
    found: list[Remark] = []
    for line in _lines(circuit, lambda raw: "{" in raw or "'" in raw):
        for expression in _EXPRESSION.findall(line.text):
            found += _oddities(expression[1:-1], line.text[0], _place(circuit, line))
    for each in circuit.parameters.values():
        if each.text and not _EXPRESSION.search(each.text) and not re.fullmatch(r"[-+\w.]*", each.text):
            found += _oddities(each.text, ".", each.place)
    yield from few(found, lambda remark: remark, "expressions are odd")


def _oddities(expression: str, letter: str, place: Place) -> Iterator[Remark]:
    for number, (pattern, what, remedy, severity) in enumerate(_ODD):
        match = pattern.search(expression)
        if match is None or (number == 0 and letter in "cClL"):
            continue
        start = place.text.find(match[0])
        here = replace(place, column=start + 1, width=len(match[0])) if start >= 0 else place
        yield Remark(f"{match[0]!r} in an expression {what}.", remedy, here, "note" if severity else None)


@rule("card-comma", "error", of_text=True)
def card_comma(circuit: Circuit) -> Iterator[Remark]:
    """A decimal comma on an analysis or in a waveform: `.tran 10u 1,5m` runs for a second, from 5 ms on.

    A warning in a waveform, whose numbers may be parted by commas on purpose.
    """
    decimal = re.compile(r"(?<!\S)[-+]?[0-9]+,[0-9]+[a-zA-Z]*(?!\S)")
    for word, rest, place in _cards(circuit, ".ac", ".tran", ".noise", ".dc"):
        if " " in rest.strip() and (match := decimal.search(rest)):
            yield _comma(word, match[0], place)
    for owner, text, place in circuit.other_numbers:
        wave = re.search(r"\b(?:sin|sine|pulse|exp)\s*\(\s*([^()]*)\)", place.text, re.IGNORECASE)
        match = decimal.search(wave[1]) if wave and " " in wave[1].strip() else None
        if match and text == match[0].split(",")[0]:
            yield replace(_comma(owner, match[0], place), severity="warning")


def _comma(owner: str, text: str, place: Place) -> Remark:
    return Remark(
        f"{owner}: {text!r} is two numbers: a comma parts words in SPICE.",
        "Write a decimal point; part numbers by blanks.",
        place.at(text),
    )


# ---------------------------------------------------------------------- what is printed and measured


class _Known:
    """Which nodes and parts there are, their case ignored; looked at where a name is asked for."""

    def __init__(self, circuit: Circuit) -> None:
        self.network = circuit.network

    @cached_property
    def _nodes(self) -> set[str]:
        return {node.lower() for node in self.network.nodes} | {"gnd"}

    @cached_property
    def _parts(self) -> dict[str, str]:
        return {name.lower(): name for name in self.network.names}

    def node(self, name: str) -> bool:
        return self.network.has_node(name) or name.lower() in self._nodes

    def part(self, name: str) -> str | None:
        return name if name in self.network else self._parts.get(name.lower())


@rule("printed-absent", "warning")
def printed_absent(circuit: Circuit) -> Iterator[Remark]:
    """A voltage or current that is printed or saved and does not exist: ngspice 39 silently leaves it out.

    So too the current of a resistor (`.save i(r1)`), and `@r1[i]`, which is zero throughout an ac analysis.
    """
    cards = list(_cards(circuit, ".print", ".plot", ".save", ".probe"))
    if not cards or circuit.left_out:
        return
    known = _Known(circuit)
    for word, rest, place in cards:
        for kind, _, inside in _TAKEN.findall(rest):
            for name in re.split(r"[\s,]+", inside.strip()):
                if kind in "vV" and not known.node(name) and name not in circuit.output:
                    yield _absent(word, f"v({name})", "there is no such node", place.at(name))
                elif kind in "iI" and (why := _no_current(circuit, known.part(name), word)):
                    yield _absent(word, f"i({name})", why, place.at(name))
        if word == ".save" and circuit.analyses.ac and (match := _OF_PART.search(rest)):
            yield Remark(
                f".save {match[0]}: in an ac analysis ngspice 39 gives zeros for it.",
                "Put a voltage source of 0 V in series, and take its current.",
                place.at(match[0]),
            )


def _no_current(circuit: Circuit, name: str | None, word: str) -> str:
    if name is None:
        return "there is no such part"
    if word == ".probe" or circuit.network.part(name).kind in "VEHL":
        return ""
    return "a simulator keeps the currents of V, E, H and L alone"


def _absent(word: str, what: str, why: str, place: Place) -> Remark:
    return Remark(
        f"{word} {what}: {why}, so nothing is kept under that name.", "Correct the name, or remove it.", place
    )


_NOT_DONE = re.compile(r"\bderiv\b|\bv\s*\([^(),]+,[^()]*\)", re.IGNORECASE)


@rule("measure-fails", "warning")
def measure_fails(circuit: Circuit) -> Iterator[Remark]:
    """A `.meas` that ngspice 39 cannot do, with exit code 0 all the same.

    A node that is not there makes a crossing come out as 0; for `.meas op` and `.meas noise`, `deriv`,
    `v(a,b)`, or an analysis that is not asked for, no result is printed.
    """
    known = _Known(circuit)
    for kind, text, place in _measures(circuit):
        missing = [
            f"{letter}({name})"
            for letter, _, inside in _TAKEN.findall(text)
            for name in re.split(r"[\s,]+", inside.strip())
            if not (circuit.left_out or (known.node(name) if letter in "vV" else known.part(name)))
        ]
        why = f"there is no {missing[0]}, which may come out as 0" if missing else ""
        if not why and (match := _NOT_DONE.search(text)):
            why = f"ngspice 39 does not know {match[0]} there"
        if not why and not _asked_for(circuit, kind):
            why = (
                f"no {kind} analysis is asked for" if kind in ("ac", "tran", "dc") else f"it knows no {kind}"
            )
        if why:
            yield Remark(f"this .meas gives no result to rely on: {why}.", "Mend it, or remove it.", place)


@rule("measure-real-part", "warning")
def measure_real_part(circuit: Circuit) -> Iterator[Remark]:
    """A `.meas ac` of `v(out)`: ngspice 39 takes the real part, not the magnitude, which is `vm(out)`."""
    for kind, text, place in _measures(circuit):
        match = re.search(r"(?<![\w@])[vi]\s*\([^()]*\)", text, re.IGNORECASE)
        if kind == "ac" and match:
            meant = match[0][0] + "m" + match[0][1:]
            yield Remark(
                f"in ac {match[0]} is the real part of it, not the magnitude.", f"Write {meant}.", place
            )


@rule("measure-radians", "warning")
def measure_radians(circuit: Circuit) -> Iterator[Remark]:
    """A phase of more than half a turn in a `.meas`: ngspice 39 has phases in radians, from -pi to pi."""
    for kind, text, place in _measures(circuit):
        match = re.search(r"\b[vi](?:p|ph)\s*\([^()]*\)\s*=\s*'?([-+]?[0-9]*\.?[0-9]+)", text, re.IGNORECASE)
        if kind == "ac" and match and abs(float(match[1])) > math.pi:
            yield Remark(
                f"the phase never is {match[1]}: it is in radians, from -pi to pi.",
                f"Write {math.radians(float(match[1])):.6g} for {match[1]} degrees.",
                place.at(match[1]),
            )


def _measures(circuit: Circuit) -> Iterator[tuple[str, str, Place]]:
    """The `.meas` lines: the analysis, the whole text, the place."""
    for request in circuit.requests:
        if request.word == ".meas":
            yield request.text.split()[0].lower(), request.text, request.place


def _asked_for(circuit: Circuit, kind: str) -> bool:
    asked = circuit.analyses
    if kind == "dc":
        return any(request.word == ".dc" for request in circuit.requests)
    return bool({"ac": asked.ac, "tran": asked.transient}.get(kind))
