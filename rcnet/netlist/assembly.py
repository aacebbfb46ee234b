"""Putting a netlist's parts in place: instances of subcircuits expanded, names and nodes made whole."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, LeftOut, Network, Part, Place, Source
from ..errors import CircuitError, RcnetError
from ..values import read_spice_number
from .element import NODES, Element, coupled_and_multiplied, read_element
from .environment import Environment, Known, Shared
from .environment import Source as Depended
from .gather import Gathered
from .limits import Reading
from .lines import Line
from .refusals import no_part, unmodelled, unseen_character
from .runs import Run
from .scopes import Defined, Model, Scope
from .words import assignments, split_words


@dataclass(frozen=True, slots=True)
class Setting:
    """What the cards set that parts depend on: temperatures in degrees Celsius; the transient's times, s."""

    temperature: float = 27.0
    tnom: float = 27.0
    step: float | None = None
    stop: float | None = None


class Places(Mapping[str, Place]):
    """Where each part stands, worked out when somebody asks: a million parts have a million places."""

    def __init__(self, gathered: Gathered) -> None:
        self._gathered = gathered
        self._rows: dict[str, int] = {}

    def add(self, name: str, line: Line) -> None:
        """Note where a part stands."""
        self._rows[name] = line.number << 20 | line.file

    def add_run(self, names: list[str], run: Run) -> None:
        """Note where the parts of a run stand."""
        self._rows.update(zip(names, (number << 20 | run.file for number in run.numbers), strict=True))

    def __getitem__(self, name: str) -> Place:
        row = self._rows[name]
        number, file = row >> 20, row & 0xFFFFF
        place = self._gathered.place(Line(number, "", file))
        return place.at(name.rsplit(".", 1)[-1]) if "." in name else place

    def __iter__(self) -> Iterator[str]:
        return iter(self._rows)

    def __len__(self) -> int:
        return len(self._rows)


@dataclass(slots=True)
class Call:
    """An `X` line, read once for all the instances it makes."""

    name: str
    nodes: list[str]
    of: str
    given: list[tuple[str, str]]


@dataclass(slots=True)
class _Plain:
    """A run taken over: its parts' names, and their nodes as first spelt."""

    run: Run
    names: list[str]
    a: list[str]
    b: list[str]
    values: npt.NDArray[np.float64]


class Assembly:
    """The network under construction, and what is known of its parts."""

    def __init__(
        self, defined: Defined, gathered: Gathered, reading: Reading, shared: Shared, setting: Setting
    ) -> None:
        self.defined, self.gathered, self.reading, self.setting = defined, gathered, reading, setting
        self.top = Environment(defined.top, shared)
        self.network = Network()
        # A node's name in lower case, or as written somewhere, -> its first spelling.
        self.spelling: dict[str, str] = {"0": GROUND, "gnd": GROUND}
        self.part_names: dict[str, str] = {}
        self.places = Places(gathered)
        self.value_texts: dict[str, str] = {}
        self.numbers: list[tuple[str, str, Line]] = []
        self.starts: dict[str, float] = {}
        self.depends: dict[Depended, list[str]] = {}
        self.dangling_left: list[tuple[LeftOut, tuple[str, ...]]] = []
        self._records: list[tuple[Line, Part | Source] | _Plain] = []
        self._calls: dict[tuple[int, int], Call] = {}
        self._sizes: dict[int, tuple[int, int]] = {}
        self._failed: set[tuple[int, int]] = set()
        self.unread: set[str] = set()  # parts whose lines could not be read
        self._bad_couplings = 0
        self._multiplied: set[str] = set()  # inductors with an `m=`
        self._noticed: set[tuple[str, int, int, str]] = set()

    def assemble(self) -> Network:
        """Everything put in place. What cannot be is among the gathered problems."""
        if self._fits():
            Instance(self, self.defined.top, self.top, "", {}, None).expand()
        self._build()
        return self.network

    # -- size

    def _fits(self) -> bool:
        """Know the size before anything is expanded: a few lines can ask for millions of parts."""
        most = self.reading.limits.parts
        size, _ = self._size(self.defined.top, [])
        if size <= most:
            return True
        line = next((item for item in self.defined.top.statements if isinstance(item, Line)), Line(1, ""))
        error = CircuitError(
            f"with its subcircuits in place the netlist has {_shown(size)} parts; at most {most} are read.",
            remedy="Split it, or raise the limit with --limit parts=NUMBER.",
            code="limit",
        )
        self.gathered.complain(error, line)
        return False

    def _size(self, scope: Scope, path: list[Scope]) -> tuple[int, int]:
        """How many parts and instances a scope makes, and how deep its subcircuits stand in one another."""
        if id(scope) in self._sizes:
            return self._sizes[id(scope)]
        total = deepest = 0
        for item in scope.statements:
            if isinstance(item, Run):
                total += len(item.rows)
                continue
            total += 1
            if item.text[0] in "xX":
                size, depth = self._size_of_call(item, scope, [*path, scope])
                total, deepest = total + size, max(deepest, depth)
        self._sizes[id(scope)] = total, deepest
        return total, deepest

    def _size_of_call(self, line: Line, scope: Scope, path: list[Scope]) -> tuple[int, int]:
        try:
            call = self.call(line)
            inner = scope.subcircuit(call.of.lower())
            if inner is None:
                return 0, 0
            if any(inner is each for each in path):
                raise CircuitError(
                    f"the subcircuit {call.of!r} contains itself.",
                    remedy="Break the circle.",
                    code="subcircuit-recursion",
                )
            # One that was looked at before is known to be fine at the depth it had then, and no deeper.
            known = self._sizes.get(id(inner), (0, 0))[1]
            if len(path) + known > self.reading.limits.depth:
                raise CircuitError(
                    f"subcircuits stand more than {self.reading.limits.depth} deep within one another.",
                    remedy="Flatten them, or raise the limit with --limit depth=NUMBER.",
                    code="limit",
                )
            size, depth = self._size(inner, path)
            return size, depth + 1
        except RcnetError as exc:
            self.complain(exc, line)
            return 0, 0

    # -- lines

    def call(self, line: Line) -> Call:
        """An `X` line's words."""
        key = (line.file, line.number)
        found = self._calls.get(key)
        if found is None:
            words = split_words(line.text)
            alone, given = assignments(words[1:])
            alone = [word for word in alone if word.lower() != "params:"]
            if not alone:
                raise CircuitError(
                    f"{words[0]} names no subcircuit.",
                    remedy=f"Write {words[0]} node node ... NAME.",
                    code="subcircuit-unknown",
                )
            found = self._calls[key] = Call(words[0], alone[:-1], alone[-1], given)
        return found

    def complain(self, error: RcnetError, line: Line) -> None:
        """Keep what makes a line unreadable, once, however many instances it is read for."""
        if (line.file, line.number) not in self._failed:
            self._failed.add((line.file, line.number))
            self.gathered.complain(error, line)

    def failed(self, line: Line) -> bool:
        """True if a line could not be read before."""
        return (line.file, line.number) in self._failed

    def notice(self, code: str, line: Line, message: str, remedy: str, word: str) -> None:
        """Keep something for a rule, once for each line."""
        key = (code, line.file, line.number, word)
        if key not in self._noticed:
            self._noticed.add(key)
            self.gathered.notice(code, line, message, remedy, word)

    def spelled(self, word: str) -> str:
        """A node's name as it was first written."""
        return self.spelling.setdefault(word.lower(), word)

    # -- records

    def add(self, line: Line, element: Element) -> None:
        """Take a part over."""
        item = element.item
        if item is None:
            return
        name = item.name
        if (other := self.part_names.get(name.lower())) is not None:
            raise CircuitError(
                f"there are two parts called {name!r}; the first is on line {self.places[other].line} (SPICE "
                "ignores case).",
                remedy="Give each part its own name.",
                code="name-twice",
            )
        self.part_names[name.lower()] = name
        self.places.add(name, line)
        if element.text is not None:
            self.value_texts[name] = element.text
        self.numbers += [(name, number, line) for number in element.numbers]
        if element.start is not None:
            self.starts[name] = element.start
        if element.multiplied and isinstance(item, Part) and item.kind == "L":
            self._multiplied.add(name)
        for source in self.top.shared.joined(element.of):
            self.depends.setdefault(source, []).append(name)
        self._records.append((line, item))

    def add_run(self, run: Run, one_by_one: Instance) -> None:
        """Take a run of plain parts over; one by one where something about them is not plain after all."""
        names = [row[0] for row in run.rows]
        lower = list(map(str.lower, names))
        values = _values(run)
        plain = bool(np.isfinite(values).all() and (values > 0).all())
        if not plain or len(set(lower)) != len(names) or not self.part_names.keys().isdisjoint(lower):
            for line in run.lines():
                one_by_one.statement(line)
            return
        self.part_names.update(zip(lower, names, strict=True))
        self.places.add_run(names, run)
        spelling = self.spelling
        ends: list[str] = []
        for _, *nodes, _ in run.rows:
            for word in nodes:
                known = spelling.get(word)
                if known is None:
                    known = spelling[word] = spelling.setdefault(word.lower(), word)
                ends.append(known)
        self._records.append(_Plain(run, names, ends[::2], ends[1::2], values))

    def _build(self) -> None:
        for record in self._records:
            if isinstance(record, _Plain):
                self._build_run(record)
                continue
            line, item = record
            if isinstance(item, Part) and self._senses_what_is_left_out(line, item):
                continue
            try:
                if isinstance(item, Source):
                    self.network.add_source(item)
                else:
                    self.network.add_part(self._linked(item))
            except RcnetError as exc:
                self.complain(exc, line)
        for record in self._records:
            if (
                not isinstance(record, _Plain)
                and isinstance(record[1], Part)
                and record[1].name in self.network
            ):
                self._check_links(record[0], record[1])

    def _build_run(self, plain: _Plain) -> None:
        try:
            self.network.add_passives(plain.names, plain.a, plain.b, plain.values)
            return
        except RcnetError:
            pass  # one of them is wrong; the loop below says which
        rows = zip(plain.run.lines(), plain.names, plain.a, plain.b, plain.values.tolist(), strict=True)
        for line, name, a, b, value in rows:
            try:
                self.network.add_part(Part(name, name[0].upper(), (a, b), value))
            except RcnetError as exc:
                self.complain(exc, line)

    def _senses_what_is_left_out(self, line: Line, part: Part) -> bool:
        """Leave out too what senses the current of a part that was left out."""
        gone = {left.name.lower() for left, _ in self.dangling_left}
        if part.senses is None or part.senses.lower() not in gone:
            return False
        left = LeftOut(part.name, f"controlled by {part.senses}", (), self.gathered.place(line))
        self.dangling_left.append((left, part.nodes))
        return True

    def _linked(self, part: Part) -> Part:
        """The part with the names of others spelt as those are."""
        if part.senses is not None:
            return replace(part, senses=self.part_names.get(part.senses.lower(), part.senses))
        if part.couples is not None:
            first, second = (self.part_names.get(name.lower(), name) for name in part.couples)
            return replace(part, couples=(first, second))
        return part

    def _check_links(self, line: Line, part: Part) -> None:
        if self.gathered.full:
            return
        part = self._linked(part)
        named = part.couples or ((part.senses,) if part.senses is not None else ())
        if not named:
            return
        if any(name.lower() in self.unread for name in named):
            return  # what is named is there, and only wrong itself
        if part.couples is not None and self._bad_couplings >= 20:
            return  # each message would list all inductors, and nobody reads so many
        try:
            row = self.network.part_index(part.name)
            if part.senses is not None:
                self.network.sensed_by(row)
            else:
                self.network.coupled_by(row)
                if not self._multiplied.isdisjoint(named):
                    raise coupled_and_multiplied(part.name)
        except RcnetError as exc:
            self._bad_couplings += part.couples is not None
            self.complain(exc, line)

    def left_out(self) -> tuple[LeftOut, ...]:
        """The parts left out, with those of their nodes that are in the network."""
        found = []
        for left, nodes in self.dangling_left:
            kept = [self.spelling.get(node.lower(), node) for node in nodes]
            there = (node for node in kept if node != GROUND and self.network.has_node(node))
            known = tuple(dict.fromkeys(there))
            found.append(replace(left, nodes=known))
        return tuple(found)


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}{'s' * (count != 1)}"


def _shown(size: int) -> str:
    return str(size) if size < 10**15 else "more than a thousand million million"


def _values(run: Run) -> npt.NDArray[np.float64]:
    """The values of a run; many are the same text."""
    known: dict[str, float] = {}
    values = np.empty(len(run.rows))
    for position, row in enumerate(run.rows):
        text = row[3]
        value = known.get(text)
        if value is None:
            known[text] = value = _value(text)
        values[position] = value
    return values


def _value(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        pass
    try:
        return read_spice_number(text).value
    except RcnetError:  # too large, with a suffix; whoever reads it alone says so
        return float("inf")


@dataclass(slots=True)
class Instance:
    """One subcircuit where it is used, or the top level: the site of its parts."""

    assembly: Assembly
    scope: Scope
    environment: Environment
    path: str
    ports: Mapping[str, str]
    multiplier: Known | None
    line: Line = field(default_factory=lambda: Line(1, ""))

    def expand(self) -> None:
        """Put every part of this scope in place, and of the subcircuits it uses."""
        for item in self.scope.statements:
            if not isinstance(item, Run):
                self.statement(item)
            elif self.path:
                for line in item.lines():
                    self.statement(line)
            else:
                self.assembly.add_run(item, self)

    def statement(self, line: Line) -> None:
        """One line that is no card."""
        if self.assembly.failed(line) or "\r" in line.text:
            return  # it is among the problems already
        self.line = line
        try:
            _require_printable(line)
            # A dotless i is no I, though it becomes one in capitals.
            letter = line.text[0].upper() if line.text[0].isascii() else ""
            if letter == "X":
                self._call(line)
            elif letter in NODES or letter == "K":
                self._element(line)
            elif self.assembly.reading.linear_part and (found := unmodelled(line.text)) is not None:
                self._leave_out(line, *found)
            else:
                raise no_part(line.text)
        except RcnetError as exc:
            self.assembly.unread.add(self.part(line.text.split(" ", 1)[0]).lower())
            self.assembly.complain(exc, line)

    def _element(self, line: Line) -> None:
        try:
            element = read_element(line.text, self)
        except CircuitError as exc:
            if not (self.assembly.reading.linear_part and exc.problems[0].code == "not-linear"):
                raise
            self._leave_out(line, "a part that is not linear", 4 if line.text[0] in "eEgG" else 2)
            return
        self.assembly.add(line, element)

    def _leave_out(self, line: Line, what: str, count: int) -> None:
        words = split_words(line.text)
        nodes = tuple(self.node(word) for word in words[1 : 1 + count] if word != "=")
        left = LeftOut(self.part(words[0]), what, (), self.assembly.gathered.place(line))
        self.assembly.dangling_left.append((left, nodes))

    # -- instances

    def _call(self, line: Line) -> None:
        call = self.assembly.call(line)
        inner = self.scope.subcircuit(call.of.lower())
        if inner is None:
            if any(call.of.lower() in each.broken for each in self.scope.chain()):
                return  # it is among the problems already
            raise self._unknown(call)
        if len(call.nodes) != len(inner.ports):
            raise CircuitError(
                f"{call.name} connects {_counted(len(call.nodes), 'node')}, but the subcircuit "
                f"{call.of!r} has {_counted(len(inner.ports), 'port')} ({' '.join(inner.ports) or 'none'}).",
                remedy="Name one node for each port, in their order.",
                code="pin-count",
            )
        if self.multiplier is not None:
            raise CircuitError(
                f"{call.name} stands inside a subcircuit that is multiplied by m=, which ngspice 39 does not "
                "pass on.",
                remedy="Write the outer subcircuit out as many times as it is there.",
                code="unreadable",
            )
        inner.uses += 1
        given, multiplier = self._given(call, inner, line)
        ports = {port.lower(): self.node(node) for port, node in zip(inner.ports, call.nodes, strict=True)}
        ports = {port: node for port, node in ports.items() if port not in ("0", "gnd")}
        environment = Environment(inner, self.environment.shared, self.environment, given)
        self._require_unambiguous(call, environment)
        path = f"{self.path}{call.name}."
        Instance(self.assembly, inner, environment, path, ports, multiplier).expand()

    def _unknown(self, call: Call) -> CircuitError:
        known = (name for scope in self.scope.chain() for name in scope.subcircuits)
        close = self.environment.shared.nearest(call.of.lower(), known)
        return CircuitError(
            f"{call.name}: there is no subcircuit {call.of!r} here.",
            remedy=f"Did you mean {close!r}?" if close else "Define it with .subckt, or include its file.",
            code="subcircuit-unknown",
        )

    def _given(self, call: Call, inner: Scope, line: Line) -> tuple[dict[str, Known], Known | None]:
        """What an instance sets: parameters, and how many times it is there."""
        given: dict[str, Known] = {}
        multiplier: Known | None = None
        for key, text in call.given:
            if key in inner.defaults or key in inner.parameters:
                given[key] = self.environment.evaluate(text)
            elif key == "m":
                own = self.environment.evaluate(text)
                if not own.value > 0:
                    raise CircuitError(
                        f"{call.name} is there {own.value:g} times.", remedy="Give m= above zero."
                    )
                multiplier = own
            else:
                self.line = line
                self.notice(
                    "unknown-override",
                    f"{call.name} sets {key!r}, which is no parameter of the subcircuit {call.of!r}; a "
                    "simulator passes over it.",
                    f"Its parameters: {', '.join(inner.defaults) or 'none'}.",
                    key,
                )
        return given, multiplier

    def _require_unambiguous(self, call: Call, inside: Environment) -> None:
        """Refuse `r={q}` where q is one thing here and another inside the subcircuit.

        ngspice 39 computes it inside, with whatever is known there by then (measured).
        """
        for key, text in call.given:
            if key != "m" and key not in inside.scope.defaults and key not in inside.scope.parameters:
                continue  # nobody asks for it
            for name in sorted(self.environment.needed(text)) if not text.isdigit() else ():
                if name == key or not (name in inside.scope.defaults or name in inside.scope.parameters):
                    continue
                if self.environment.known(name).value != inside.known(name).value:
                    raise CircuitError(
                        f"{call.name} sets {key}={text}, but {name!r} is one number here and another inside "
                        f"{call.of!r}; which of them ngspice 39 takes depends on their order.",
                        remedy="Give one of the two another name.",
                        code="unreadable",
                    )

    # -- the site of a part

    @property
    def temperature(self) -> float:
        """Of the circuit, degrees Celsius."""
        return self.assembly.setting.temperature

    @property
    def tnom(self) -> float:
        """The temperature at which values are meant, degrees Celsius."""
        return self.assembly.setting.tnom

    @property
    def step(self) -> float | None:
        """The print step of the transient, s."""
        return self.assembly.setting.step

    @property
    def stop(self) -> float | None:
        """The end of the transient, s."""
        return self.assembly.setting.stop

    def node(self, word: str) -> str:
        """A node's name in the whole network."""
        lower = word.lower()
        if lower in self.assembly.defined.global_nodes:
            return self.assembly.spelled(word)
        if lower in self.ports:
            return self.ports[lower]
        if "{" in word or "'" in word or '"' in word:
            raise CircuitError(
                f"{word} stands where a node belongs.", remedy="Name the node.", code="node-missing"
            )
        return self.assembly.spelled(self.path + word)

    def part(self, word: str) -> str:
        """A part's name in the whole network: R1 in X2 is `R.X2.R1`, as ngspice names it."""
        return f"{word[0]}.{self.path}{word}" if self.path else word

    def evaluate(self, text: str) -> Known:
        """The value of an expression."""
        return self.environment.evaluate(text)

    def is_warm(self, of: set[Depended]) -> bool:
        """True if one of these depends on the temperature."""
        return not self.environment.shared.warm.isdisjoint(of)

    def is_parameter(self, name: str) -> bool:
        """True if a bare name is a parameter here."""
        return self.environment.is_defined(name)

    def model(self, name: str) -> Model | None:
        """The model of that name here."""
        return self.scope.model(name)

    def notice(self, code: str, message: str, remedy: str, word: str = "") -> None:
        """Keep something for the rule of that code."""
        self.assembly.notice(code, self.line, message, remedy, word)


def _require_printable(line: Line) -> None:
    if not line.text.isprintable():
        raise unseen_character(line.text)
