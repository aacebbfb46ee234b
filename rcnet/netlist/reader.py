"""Reading a SPICE netlist of linear parts into a Circuit; whatever else it holds is refused with its line."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path

from ..circuit import GROUND, Analyses, Circuit, Conditions, Network, Part, Place, Source, circuit_name
from ..errors import CircuitError, Problem, RcnetError
from ..system.files import read_text
from ..values import read_spice_number
from .cards import (
    NoiseCard,
    printed_voltages,
    read_noise,
    read_options,
    read_sweep,
    read_temperature,
    read_transient,
)
from .lines import Line, logical_lines, physical_lines, words_of
from .names import KEYWORDS
from .refusals import card_remedy, no_part, reason_behind_value
from .seal import find_seal
from .source_line import read_drive

MAX_PROBLEMS = 50
_NODES = {"R": 2, "C": 2, "L": 2, "E": 4, "G": 4, "F": 2, "H": 2, "V": 2, "I": 2}
_VALUE_WORDS = {"R": ("r", "resistance"), "C": ("c", "capacitance"), "L": ("l", "inductance")}
_DECIMAL_COMMA = re.compile(r"[ =(]([-+]?[0-9]+,[0-9][^\s,]*)$")
# Sections that are one mistake, not one for every line in them.
_SECTIONS = {".control": ".endc", ".subckt": ".ends", ".if": ".endif"}
# ngspice 39 obeys these even in the line that is the title.
_COMMAND_TITLE = re.compile(r"\s*(\*#|\*ng_script|\.control|\.inc|\.lib)", re.IGNORECASE)


def read_netlist(path: str | Path) -> Circuit:
    """Read a netlist file. Raises InputError, or CircuitError carrying every line that cannot be read."""
    return parse_netlist(read_text(path), str(path))


def parse_netlist(text: str, file: str) -> Circuit:
    """A netlist given as text; `file` is its name in messages. Raises CircuitError with every bad line."""
    if not text.strip():
        raise CircuitError("the netlist is empty.", file=file, remedy="Write a title line, parts and .end.")
    return _Reader(physical_lines(text.removeprefix("\ufeff")), file).circuit()


def reads_as_part(text: str) -> bool:
    """True if a line would be read as a part or a source, were it not the title."""
    line = Line(1, " ".join(words_of(text)))
    if not line.text:
        return False
    reader = _Reader(["", text], "")
    with reader.catching(line):
        reader.line(line)
    return bool(reader.items) and not reader.problems


class _Reader:
    """Reads the logical lines one after another, collecting problems instead of stopping at the first."""

    def __init__(self, lines: list[str], file: str) -> None:
        self.lines, self.file = lines, file
        self.network = Network(_title(lines[0]))
        self.problems: list[Problem] = []
        self.section_end: str | None = None
        self.items: list[tuple[Line, Part | Source]] = []
        self.spelling: dict[str, str] = {"0": GROUND, "gnd": GROUND}  # lower-case node name -> first spelling
        self.part_names: dict[str, str] = {}
        self.places: dict[str, Place] = {}
        self.value_texts: dict[str, str] = {}
        self.analysis_places: dict[str, Place] = {}
        self.options: dict[str, str] = {}
        self.analyses = Analyses()
        self.nominal = 27.0
        self.outputs: list[tuple[str, ...]] = []
        self.noise_card: tuple[Line, NoiseCard] | None = None

    def circuit(self) -> Circuit:
        self.title_and_ends()
        for line in logical_lines(self.lines):
            with self.catching(line):
                self.line(line)
        self.add_items()
        self.check_noise()
        if not self.problems and not len(self.network):
            self.problems.append(
                Problem("the netlist holds no parts.", self.file, None, "Add some below the title.")
            )
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
            more = f"and {len(found) - MAX_PROBLEMS} more lines that cannot be read."
            found = [*found[:MAX_PROBLEMS], Problem(more, self.file)]
        return found

    @contextmanager
    def catching(self, line: Line) -> Iterator[None]:
        try:
            yield
        except RcnetError as exc:
            self.problems.extend(exc.at(self.file, line.number).problems)

    def place(self, line: Line) -> Place:
        return Place(self.file, line.number, self.lines[line.number - 1])

    # -- the whole

    def title_and_ends(self) -> None:
        if match := _COMMAND_TITLE.match(self.lines[0]):
            message = f"the title begins with {match[1]!r}, which is a command to ngspice."
            self.problems.append(Problem(message, self.file, 1, "Give the netlist a title of plain words."))
        for number, line in enumerate(self.lines, start=1):
            if "\r" in line:
                message = "a carriage return stands alone; ngspice does not end a line there."
                remedy = "Save the file with LF or CRLF line ends."
                self.problems.append(Problem(message, self.file, number, remedy))

    def add_items(self) -> None:
        for line, item in self.items:
            with self.catching(line):
                if isinstance(item, Source):
                    self.network.add_source(item)
                elif item.senses is None:
                    self.network.add_part(item)
                else:
                    sensed = self.part_names.get(item.senses.lower(), item.senses)
                    self.network.add_part(replace(item, senses=sensed))
        for line, item in self.items:
            if isinstance(item, Part) and item.senses is not None and item.name in self.network:
                if item.senses.lower() in self.part_names and self.problems:
                    continue  # the sensed source may be there, and only be wrong itself
                with self.catching(line):
                    self.network.sensed_by(self.network.part_index(item.name))

    def check_noise(self) -> None:
        if self.noise_card is None or self.problems:
            return
        line, card = self.noise_card
        with self.catching(line):
            source = self.network.sources.get(self.part_names.get(card.source.lower(), card.source))
            if source is None or not source.ac:
                what = "no source here" if source is None else "a source without ac"
                raise CircuitError(
                    f".noise refers to {card.source!r}, which is {what}.",
                    remedy="Name the source that carries AC 1.",
                )
            if self.known(card.nodes) != self.output():
                raise CircuitError(
                    f".noise is about v({','.join(card.nodes)}), but v({','.join(self.output())}) is printed "
                    "before it, and that is the output.",
                    remedy="Let both name the same, or use two netlists.",
                )

    def known(self, nodes: tuple[str, ...]) -> tuple[str, ...]:
        """A node or a pair in the network's spelling, a pair with ground or with itself as one node."""
        known = tuple(self.spelling.get(node.lower(), node) for node in nodes)
        return known[:1] if known[1:] in ((GROUND,), known[:1]) else known

    def output(self) -> tuple[str, ...]:
        """The first voltage printed that is not ground's own, else the node `out`, else nothing."""
        for nodes in self.outputs:
            if (known := self.known(nodes)) != (GROUND,):
                return known
        return (self.spelling["out"],) if "out" in self.spelling else ()

    # -- one line

    def line(self, line: Line) -> None:
        first = line.text[0]
        if self.section_end is not None:
            if line.text.split(" ", 1)[0].lower() == self.section_end:
                self.section_end = None
            return
        if "\r" in line.text:
            return  # it is among the problems already
        if not line.text.isprintable():
            odd = next(character for character in line.text if not character.isprintable())
            raise CircuitError(
                f"the line holds the character {odd!r}, which is not seen.", remedy="Type the line anew."
            )
        if first == ".":
            self.card(line)
        elif first.isascii() and first.upper() in _NODES:
            self.items.append((line, self.part(line)))
        else:
            raise no_part(line.text)

    def part(self, line: Line) -> Part | Source:
        words = words_of(line.text)
        name, kind = words[0], words[0][0].upper()
        if (other := self.part_names.get(name.lower())) is not None:
            first = self.places[other].line
            raise CircuitError(
                f"there are two parts called {name!r}; the first is on line {first} (SPICE ignores case).",
                remedy="Give each part its own name.",
            )
        self.part_names[name.lower()] = name
        self.places[name] = self.place(line)
        nodes = self.nodes(name, kind, words, line)
        rest = words[1 + len(nodes) :]
        if kind in "VI":
            return read_drive(name, (nodes[0], nodes[1]), rest)
        if kind in "FH":
            if len(rest) < 2:
                raise CircuitError(
                    f"{name} lacks its sensed source or its gain.", remedy=f"Write {name} a b Vsense gain."
                )
            return Part(name, kind, nodes, self.value(name, kind, rest[1:], line), senses=rest[0])
        return Part(name, kind, nodes, self.value(name, kind, rest, line))

    def nodes(self, name: str, kind: str, words: list[str], line: Line) -> tuple[str, ...]:
        if re.search(r"[{}'\"]", line.text):
            raise CircuitError(
                f"{name}: expressions and quoted words are not read.", remedy="Write the number itself."
            )
        count = _NODES[kind]
        if len(words) < 1 + count:
            raise CircuitError(f"{name} names fewer than {count} nodes.", remedy="Name all its nodes.")
        found = words[1 : 1 + count]
        for word in found if kind in "EGVI" else words[3:4] if kind in "FH" else ():
            if word.lower() in KEYWORDS:
                raise CircuitError(
                    f"{name}: {word!r} stands where a name belongs.",
                    remedy="Name what is missing, or rename the node; polynomials are not read.",
                )
        return tuple(self.spelling.setdefault(word.lower(), word) for word in found)

    def value(self, name: str, kind: str, words: list[str], line: Line) -> float:
        if words and "=" in line.text and words[0].lower() in _VALUE_WORDS.get(kind, ()):
            words = words[1:]
        if not words:
            raise CircuitError(
                f"{name} has no value, or lacks a node.",
                remedy="Add it; ngspice would take 1 milliohm for a resistor and nothing for a capacitor.",
            )
        number = read_spice_number(words[0])
        # A comma is a blank to SPICE and the last number wins; a rule reports it (decimal comma).
        comma = _DECIMAL_COMMA.search(line.text)
        self.value_texts[name] = comma[1] if comma else words[0]
        if len(words) == 1:
            return number.value
        if len(words) == 2 and comma and comma[1] == f"{words[0]},{words[1]}":
            last = read_spice_number(words[1]).value
            if last <= 0 and kind in "RCL":
                raise CircuitError(
                    f"{name} is written {comma[1]!r}: a comma parts words in SPICE, so it is {last:g}.",
                    remedy="Write a decimal point, or leave out what marks the thousands.",
                )
            return last
        message, remedy = reason_behind_value(name, words[0], words[1])
        raise CircuitError(message, remedy=remedy)

    # -- cards

    def card(self, line: Line) -> None:
        word = line.text.split(" ", 1)[0].lower()
        reader = _CARDS.get(word)
        if reader is None:
            self.section_end = _SECTIONS.get(word)
            raise CircuitError(f"{word!r} is not read.", remedy=card_remedy(word, _CARDS))
        reader(self, line)

    def _once(self, line: Line, key: str) -> None:
        if key in self.analysis_places:
            raise CircuitError(
                f"a second {line.text.split()[0]} stands here.",
                remedy=f"Keep one; the first is on line {self.analysis_places[key].line}.",
            )
        self.analysis_places[key] = self.place(line)

    def ac(self, line: Line) -> None:
        self._once(line, "ac")
        self.analyses = replace(self.analyses, ac=read_sweep(".ac", words_of(line.text)[1:]))

    def noise(self, line: Line) -> None:
        self._once(line, "noise")
        found = read_noise(line.text)
        self.outputs.append(found.nodes)
        self.analysis_places.setdefault("output", self.place(line))
        self.noise_card = (line, found)
        self.analyses = replace(self.analyses, noise=found.sweep)

    def transient(self, line: Line) -> None:
        self._once(line, "transient")
        self.analyses = replace(self.analyses, transient=read_transient(words_of(line.text)[1:]))

    def operating_point(self, line: Line) -> None:
        self._once(line, "operating point")
        self.analyses = replace(self.analyses, operating_point=True)

    def printed(self, line: Line) -> None:
        if voltages := printed_voltages(line.text):
            self.outputs.extend(voltages)
            self.analysis_places.setdefault("output", self.place(line))

    def set_options(self, line: Line) -> None:
        found = read_options(line.text)
        if "temp" in found:
            self.nominal = float(found.pop("temp"))
        self.options.update(found)

    def temperature(self, line: Line) -> None:
        words = words_of(line.text)[1:]
        if len(words) != 1:
            raise CircuitError(
                ".temp names no single temperature.", remedy="Give one; ngspice takes 27 otherwise."
            )
        self.nominal = read_temperature(words[0])

    def title(self, line: Line) -> None:
        self.network.title = " ".join(line.text.split()[1:])

    def end(self, line: Line) -> None:
        """Nothing ends here: ngspice reads on behind `.end`, so what follows is read here too."""


_CARDS: dict[str, Callable[[_Reader, Line], None]] = {
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


def _title(line: str) -> str:
    text = re.sub(r"^\*\s*", "", line.strip())
    return "".join(character if character.isprintable() else " " for character in text)
