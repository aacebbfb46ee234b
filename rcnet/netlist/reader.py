"""Reading a SPICE netlist of linear parts into a Circuit; whatever else it holds is refused with its line."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

from ..circuit import (
    GROUND,
    Analyses,
    Circuit,
    Conditions,
    Network,
    Part,
    Place,
    Points,
    Sine,
    Source,
    Square,
    Sweep,
    TransientRun,
    Waveform,
    circuit_name,
)
from ..errors import CircuitError, Problem, RcnetError
from ..system.files import read_text
from ..values import read_spice_number
from .seal import find_seal

MAX_PROBLEMS = 50
_SPLIT = re.compile(r"[\s,()=]+")
_NODES = {"R": 2, "C": 2, "L": 2, "E": 4, "G": 4, "F": 2, "H": 2, "V": 2, "I": 2}
_WAVES = {"PULSE", "SIN", "PWL"}
# Settings of the simulator's own arithmetic; they change no circuit and are kept.
_HARMLESS = {
    "reltol", "abstol", "vntol", "chgtol", "trtol", "pivtol", "pivrel", "method", "maxord", "itl1", "itl2", "itl4",
    "numdgt", "noopac", "noacct", "nopage", "nomod", "noinit", "acct", "list", "node", "opts", "nopr",
}  # fmt: skip
_VOLTAGE = re.compile(r"^v(?:db|m|p|r|i)?\(([^(),]+)(?:,([^(),]+))?\)$", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class _Line:
    """A logical line: continuations joined, comments gone; `number` is that of its first physical line."""

    number: int
    text: str


def read_netlist(path: str | Path) -> Circuit:
    """Read a netlist file. Raises InputError, or CircuitError carrying every line that cannot be read."""
    return parse_netlist(read_text(path), str(path))


def parse_netlist(text: str, file: str) -> Circuit:
    """A netlist given as text; `file` is its name in messages. Raises CircuitError with every bad line."""
    if not text.strip():
        raise CircuitError("the netlist is empty.", file=file, remedy="Write a title line, parts and .end.")
    lines = text.splitlines()
    return _Reader(lines, file).circuit()


def logical_lines(lines: Sequence[str]) -> Iterator[_Line]:
    """Everything below the title as logical lines.

    `*` first and `//`, `;` or ` $` anywhere begin a comment; `+` continues the line before, across comments
    and blank lines, and never joins two words into one.
    """
    number, parts = 0, []
    for count, raw in enumerate(lines[1:], start=2):
        line = _uncommented(raw)
        if not line:
            continue
        if line.startswith("+"):
            if not parts:
                number = count
            parts.append(line[1:].strip())
        else:
            if parts:
                yield _Line(number, " ".join(parts))
            number, parts = count, [line]
    if parts:
        yield _Line(number, " ".join(parts))


def _uncommented(raw: str) -> str:
    line = raw.strip()
    if line.startswith("*"):
        # Comments can be commands to ngspice; those are not passed over in silence.
        return line if re.match(r"\*(#|ng_script)", line, re.IGNORECASE) else ""
    for mark in (r"//.*", r";.*", r"(?:^|\s)\$.*"):
        line = re.sub(mark, "", line)
    return line.strip()


class _Reader:
    """Reads the logical lines one after another, collecting problems."""

    def __init__(self, lines: list[str], file: str) -> None:
        self.lines, self.file = lines, file
        self.network = Network(re.sub(r"^\*\s*", "", lines[0].strip()) if lines else "")
        self.problems: list[Problem] = []
        self.spelling: dict[str, str] = {"0": GROUND, "gnd": GROUND}  # lower-case node name -> first spelling
        self.part_names: dict[str, str] = {}
        self.places: dict[str, Place] = {}
        self.value_texts: dict[str, str] = {}
        self.analysis_places: dict[str, Place] = {}
        self.options: dict[str, str] = {}
        self.analyses = Analyses()
        self.nominal = 27.0
        self.outputs: list[tuple[str, ...]] = []
        self.sensing: list[tuple[_Line, Part]] = []

    def circuit(self) -> Circuit:
        for line in logical_lines(self.lines):
            with self.catching(line):
                self.line(line)
        for line, part in self.sensing:
            with self.catching(line):
                sensed = self.part_names.get((part.senses or "").lower(), part.senses or "")
                self.network.add_part(replace(part, senses=sensed))
                self.network.sensed_by(self.network.part_index(part.name))
        if not self.problems and not len(self.network):
            self.problems.append(Problem("the netlist holds no parts.", self.file, None, "Add some below the title."))
        if self.problems:
            raise CircuitError(problems=self.ordered())
        return Circuit(
            self.network,
            circuit_name(self.file),
            self.file,
            "netlist",
            self.output(),
            self.analyses,
            Conditions(self.nominal, self.nominal, self.nominal),
            places=self.places,
            value_texts=self.value_texts,
            analysis_places=self.analysis_places,
            options=self.options,
            seal=find_seal(self.lines),
            lines=tuple(self.lines),
        )

    def ordered(self) -> list[Problem]:
        found = sorted(self.problems, key=lambda problem: problem.line or 0)
        if len(found) > MAX_PROBLEMS:
            more = len(found) - MAX_PROBLEMS
            found = found[:MAX_PROBLEMS] + [Problem(f"and {more} more lines that cannot be read.", self.file)]
        return found

    @contextmanager
    def catching(self, line: _Line) -> Iterator[None]:
        try:
            yield
        except RcnetError as exc:
            self.problems.extend(exc.at(self.file, line.number).problems)

    def place(self, line: _Line) -> Place:
        return Place(self.file, line.number, self.lines[line.number - 1])

    def output(self) -> tuple[str, ...]:
        for nodes in self.outputs:
            known = [self.spelling.get(node.lower(), node) for node in nodes]
            return tuple(known[:1] if known[1:] == [GROUND] else known)
        return ("out",) if self.network.has_node("out") else self._spelled("out")

    def _spelled(self, name: str) -> tuple[str, ...]:
        return (self.spelling[name],) if name in self.spelling else ()

    # -- one line

    def line(self, line: _Line) -> None:
        first = line.text[0]
        if line.text.startswith("."):
            self.card(line)
        elif first.upper() in _NODES:
            self.part(line)
        elif first == "*":
            raise CircuitError(
                f"{line.text.split()[0]!r} is a command to a simulator, hidden in a comment.",
                remedy="Remove the line; rcnet executes nothing and passes no command on.",
            )
        elif first.isalpha():
            name = line.text.split()[0]
            raise CircuitError(
                f"{name!r} is no linear part that rcnet reads.",
                remedy=f"First letters read: {' '.join(_NODES)}. Take the part out, or model it with those.",
            )
        else:
            raise CircuitError(
                f"the line begins with {first!r}, which ngspice passes over with a warning.",
                remedy="Make it a comment with * or mend it.",
            )

    def part(self, line: _Line) -> None:
        words = [word for word in _SPLIT.split(line.text) if word]
        name, kind = words[0], words[0][0].upper()
        if name.lower() in self.part_names:
            raise CircuitError(
                f"there are two parts called {name!r} (SPICE ignores case).", remedy="Give each part its own name."
            )
        count = _NODES[kind]
        if len(words) < 1 + count:
            raise CircuitError(f"{name} names fewer than {count} nodes.", remedy="Name all its nodes.")
        nodes = tuple(self.node(word) for word in words[1 : 1 + count])
        self.part_names[name.lower()] = name
        self.places[name] = self.place(line)
        rest = words[1 + count :]
        if kind in "VI":
            self.network.add_source(self.source(name, (nodes[0], nodes[1]), rest))
        elif kind in "FH":
            if len(rest) < 2:
                raise CircuitError(f"{name} lacks its sensed source or its gain.", remedy=f"{name} a b Vsense gain.")
            self.sensing.append((line, Part(name, kind, nodes, self.value(name, rest[1:], line), senses=rest[0])))
        else:
            self.network.add_part(Part(name, kind, nodes, self.value(name, rest, line)))

    def node(self, word: str) -> str:
        return self.spelling.setdefault(word.lower(), word)

    def value(self, name: str, words: list[str], line: _Line) -> float:
        if not words:
            raise CircuitError(
                f"{name} has no value.",
                remedy="Add it; ngspice would take 1 milliohm for a resistor and nothing for a capacitor.",
            )
        number = read_spice_number(words[0])
        self.value_texts[name] = words[0]
        comma = re.search(r"\d,\d\S*", line.text)
        if len(words) == 2 and comma is not None and f"{words[0]},{words[1]}" in line.text:
            # A comma is a blank to SPICE and the last number wins; a rule reports it (decimal comma).
            self.value_texts[name] = f"{words[0]},{words[1]}"
            return read_spice_number(words[1]).value
        if len(words) > 1:
            raise CircuitError(
                f"{name}: {words[1]!r} after the value is not read.", remedy="Keep to NAME NODES VALUE on this line."
            )
        return number.value

    # -- sources

    def source(self, name: str, nodes: tuple[str, str], words: list[str]) -> Source:
        source = Source(name, nodes)
        position = 0
        while position < len(words):
            word = words[position].upper()
            numbers = _numbers(words[position + 1 :])
            if word == "DC":
                self._count(name, word, numbers, 1, 1)
                source, used = replace(source, dc=numbers[0]), 1
            elif word == "AC":
                numbers = numbers[:2]
                source = replace(source, ac=numbers[0] if numbers else 1.0, ac_phase=(*numbers, 0.0, 0.0)[1])
                used = len(numbers)
            elif word in _WAVES:
                if source.waveform is not None:
                    raise CircuitError(f"{name} has two waveforms.", remedy="Keep one.")
                source, used = replace(source, waveform=self.wave(name, word, numbers)), len(numbers)
            elif position == 0:
                source, used = replace(source, dc=read_spice_number(words[0]).value), 0
            else:
                raise CircuitError(
                    f"{name}: {words[position]!r} is not read.", remedy="Sources read: DC, AC, PULSE, SIN and PWL."
                )
            position += 1 + used
        return source

    def wave(self, name: str, word: str, numbers: list[float]) -> Waveform:
        if word == "SIN":
            self._count(name, word, numbers, 3, 6)
            offset, amplitude, frequency, delay, damping, phase = (*numbers, 0.0, 0.0, 0.0)[:6]
            if damping:
                raise CircuitError(f"{name}: a damped sine is not read.", remedy="Let its fifth number be 0.")
            return Sine(amplitude, frequency, offset, phase, delay)
        if word == "PULSE":
            self._count(name, word, numbers, 7, 7)
            low, high, delay, rise, fall, width, period = numbers
            if rise <= 0 or fall <= 0:
                raise CircuitError(
                    f"{name}: a pulse edge of {min(rise, fall)!r} s is not what it seems.",
                    remedy="Write the edge out; for 0 a simulator takes its print step.",
                )
            return Square(low, high, period, width, rise, fall, delay)
        if len(numbers) < 2 or len(numbers) % 2:
            raise CircuitError(f"{name}: PWL has {len(numbers)} numbers.", remedy="Give pairs of time and value.")
        return Points(tuple(zip(numbers[::2], numbers[1::2], strict=True)))

    def _count(self, name: str, word: str, numbers: list[float], least: int, most: int) -> None:
        if not least <= len(numbers) <= most:
            wanted = str(least) if least == most else f"{least} to {most}"
            raise CircuitError(
                f"{name}: {word} has {len(numbers)} numbers; {wanted} are needed.",
                remedy="Write them all; what is left out a simulator fills in from its print step and stop time.",
            )

    # -- cards

    def card(self, line: _Line) -> None:
        words = line.text.split()
        reader = _CARDS.get(words[0].lower())
        if reader is None:
            raise CircuitError(f"{words[0]!r} is not read.", remedy=_card_remedy(words[0].lower()))
        reader(self, line, words[1:])

    def _once(self, line: _Line, key: str) -> None:
        if key in self.analysis_places:
            raise CircuitError(
                f"a second {line.text.split()[0]} stands here.",
                remedy=f"Keep one; the first is on line {self.analysis_places[key].line}.",
            )
        self.analysis_places[key] = self.place(line)

    def ac(self, line: _Line, words: list[str]) -> None:
        self._once(line, "ac")
        self.analyses = replace(self.analyses, ac=_sweep(".ac", words))

    def noise(self, line: _Line, words: list[str]) -> None:
        self._once(line, "noise")
        match = _VOLTAGE.match(words[0]) if words else None
        if match is None or len(words) not in (6, 7):
            raise CircuitError(".noise cannot be read.", remedy="Write .noise v(out) Vin dec 10 10 1meg.")
        self.outputs.append(tuple(node for node in match.groups() if node))
        self.analyses = replace(self.analyses, noise=_sweep(".noise", words[2:6]))

    def transient(self, line: _Line, words: list[str]) -> None:
        self._once(line, "transient")
        uic = bool(words) and words[-1].lower() == "uic"
        numbers = [read_spice_number(word).value for word in (words[:-1] if uic else words)]
        if not 2 <= len(numbers) <= 4:
            raise CircuitError(".tran cannot be read.", remedy="Write .tran step stop [start [max_step]].")
        start = numbers[2] if len(numbers) > 2 else 0.0
        run = TransientRun(numbers[1], numbers[0], start, numbers[3] if len(numbers) > 3 else None, uic)
        if not (run.step > 0 and run.stop > run.start >= 0 and (run.max_step is None or run.max_step > 0)):
            raise CircuitError(".tran has a step or a stop that is not positive.", remedy="Let 0 < step and start < stop.")
        self.analyses = replace(self.analyses, transient=run)

    def operating_point(self, line: _Line, words: list[str]) -> None:
        self._once(line, "operating point")
        self.analyses = replace(self.analyses, operating_point=True)

    def printed(self, line: _Line, words: list[str]) -> None:
        for nodes in re.findall(r"\bv(?:db|m|p|r|i)?\s*\(\s*([^(),\s]+)\s*(?:,\s*([^(),\s]+)\s*)?\)", line.text, re.I):
            self.outputs.append(tuple(node for node in nodes if node))

    def set_options(self, line: _Line, words: list[str]) -> None:
        for key, value in _settings(words):
            if key == "temp":
                self.nominal = read_spice_number(value).value
            elif key in _HARMLESS:
                self.options[key] = value
            else:
                raise CircuitError(
                    f"the option {key!r} is not read; it may change what the simulator solves.", remedy="Remove it."
                )

    def temperature(self, line: _Line, words: list[str]) -> None:
        if len(words) != 1:
            raise CircuitError(".temp names no single temperature.", remedy="Give one; ngspice takes 27 otherwise.")
        self.nominal = read_spice_number(words[0]).value

    def title(self, line: _Line, words: list[str]) -> None:
        self.network.title = " ".join(words)

    def end(self, line: _Line, words: list[str]) -> None:
        """ngspice reads on behind .end, so what follows is read here too."""


_CARDS: dict[str, Callable[[_Reader, _Line, list[str]], None]] = {
    ".ac": _Reader.ac,
    ".noise": _Reader.noise,
    ".tran": _Reader.transient,
    ".op": _Reader.operating_point,
    ".print": _Reader.printed,
    ".plot": _Reader.printed,
    ".save": _Reader.printed,
    ".options": _Reader.set_options,
    ".option": _Reader.set_options,
    ".opt": _Reader.set_options,
    ".temp": _Reader.temperature,
    ".title": _Reader.title,
    ".end": _Reader.end,
}


def _card_remedy(word: str) -> str:
    if word in (".control", ".endc"):
        return "Remove the section; rcnet executes nothing and passes no command on."
    return f"Read are {' '.join(sorted(_CARDS))}; take the line out or write what it stands for."


def _settings(words: list[str]) -> Iterator[tuple[str, str]]:
    text = re.sub(r"\s*=\s*", "=", " ".join(words))
    for word in text.split():
        key, _, value = word.partition("=")
        yield key.lower(), value


def _sweep(card: str, words: list[str]) -> Sweep:
    kinds: dict[str, Literal["dec", "oct", "lin"]] = {"dec": "dec", "oct": "oct", "lin": "lin"}
    kind = kinds.get(words[0].lower()) if words else None
    if kind is None or len(words) != 4:
        raise CircuitError(f"{card} cannot be read.", remedy=f"Write {card} ... dec 20 10 1meg.")
    points, start, stop = (read_spice_number(word).value for word in words[1:])
    if points < 1 or points != int(points):
        raise CircuitError(f"{card} asks for {words[1]!r} points.", remedy="Give a whole number from 1 on.")
    return Sweep(start, stop, int(points), kind)


def _numbers(words: list[str]) -> list[float]:
    numbers = []
    for word in words:
        if not re.match(r"[-+]?\.?\d", word):
            break
        numbers.append(read_spice_number(word).value)
    return numbers
