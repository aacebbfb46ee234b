"""Reading a SPICE netlist of linear parts into a Circuit; whatever else it holds is refused with its line."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from ..circuit import (
    GROUND,
    KINDS,
    Analyses,
    Circuit,
    Conditions,
    Parameter,
    Place,
    Request,
    StartingState,
    Subcircuit,
    circuit_name,
)
from ..errors import CircuitError, Problem, QuantityError, RcnetError
from ..values import parse_quantity, read_spice_number, write_spice_number
from .assembly import Assembly, Setting
from .cards import (
    NoiseCard,
    printed_voltages,
    read_noise,
    read_options,
    read_starts,
    read_sweep,
    read_temperature,
    read_transient,
)
from .dependence import parts_of
from .environment import Environment, Shared
from .environment import Source as Depended
from .gather import Gathered, decoded, gather
from .limits import Reading
from .lines import Line, words_of
from .refusals import card_remedy, unseen_character
from .requests import read_request, require_there, respelled
from .scopes import Defined, Scope, scopes_of
from .seal import find_seal

MAX_PROBLEMS = 50
_BRACED = re.compile(r"\{(?:[^{}]|\{[^{}]*\})*\}")
_EXPRESSION = re.compile(rf"{_BRACED.pattern}|'[^']*'")
# Cards whose numbers may be expressions; a title may hold an apostrophe.
_COMPUTED = frozenset(
    [".ac", ".tran", ".noise", ".dc", ".four", ".fourier", ".temp", ".options", ".option", ".opt", ".ic"]
)


def read_netlist(path: str | Path, reading: Reading | None = None) -> Circuit:
    """Read a netlist file, and the files it includes from its own folder or below.

    reading: folders beside its own that may be read, limits, and whether non-linear parts are left out
    Raises InputError, or CircuitError carrying every line that cannot be read; its `partial` attribute then
    holds a Circuit of what could be read, for rules about the text.
    """
    asked = reading or Reading()
    text, odd_line = decoded(str(path), asked.limits.bytes)
    return parse_netlist(text, str(path), asked, Path(path).parent, odd_line)


def parse_netlist(
    text: str,
    file: str,
    reading: Reading | None = None,
    folder: Path | None = None,
    odd_line: int | None = None,
) -> Circuit:
    """A netlist given as text; `file` is its name in messages. Raises CircuitError with every bad line.

    folder: where what it includes is looked for; without one nothing can be included
    """
    if not text.strip():
        raise CircuitError("the netlist is empty.", file=file, remedy="Write a title line, parts and .end.")
    asked = reading or Reading()
    gathered = gather(text.removeprefix("\ufeff"), file, asked, folder, odd_line)
    defined = scopes_of(gathered, asked.limits)
    return _Reader(Deck(gathered, defined, asked, file), {}).circuit()


@dataclass(frozen=True, slots=True)
class Deck:
    """A netlist before its subcircuits are put in place: what `with_parameters` begins from."""

    gathered: Gathered
    defined: Defined
    reading: Reading
    file: str


def with_parameters(circuit: Circuit, values: Mapping[str, str | float]) -> Circuit:
    """The circuit with some `.param` values changed; see `Circuit.with_parameters`."""
    overrides: dict[str, float] = {}
    for name, value in values.items():
        known = circuit.parameters.get(name.lower())
        if known is None or not isinstance(circuit.definition, Deck):
            raise CircuitError(
                f"there is no parameter called {name!r}.",
                remedy=f"Parameters here: {', '.join(circuit.parameters) or 'none'}.",
            )
        overrides[name.lower()] = _new_value(circuit, known, value)
    deck = circuit.definition
    changed = _Reader(deck, {**_overridden(circuit), **overrides}).circuit()
    # What was added to the circuit after it was read stays.
    return replace(changed, claims=circuit.claims, silenced=circuit.silenced, name=circuit.name)


def _overridden(circuit: Circuit) -> dict[str, float]:
    """The parameters that were changed before."""
    return {name: each.value for name, each in circuit.parameters.items() if each.text == ""}


def _new_value(circuit: Circuit, parameter: Parameter, value: str | float) -> float:
    """A number with the prefix and the unit of one of the parts that follow the parameter, or neither."""
    units = {
        KINDS[circuit.network.part(name).kind].unit for name in parameter.parts if name in circuit.network
    } - {"1"}
    found = None
    for unit in (*sorted(units), "1"):
        try:
            found = parse_quantity(value, unit, parameter.name)
            break
        except QuantityError:
            if unit == "1":
                raise
    if found is None or not math.isfinite(found):
        raise CircuitError(f"{parameter.name} is {value!r}.", remedy="Give a finite number.")
    return found


def reads_as_part(text: str) -> bool:
    """True if a line would be read as a part or a source, were it not the title."""
    if not text.strip() or "\n" in text:
        return False
    gathered = gather(f"\n{text}", "", Reading(), None)
    assembly = Assembly(
        scopes_of(gathered, Reading().limits), gathered, Reading(), Shared(), Setting(step=1.0, stop=1.0)
    )
    network = assembly.assemble()
    return len(network) > 0 and not gathered.problems


class _Reader:
    """Reads the cards, puts the parts in place, and makes a Circuit of them."""

    def __init__(self, deck: Deck, overrides: Mapping[str, float]) -> None:
        kept = deck.gathered
        # The deck may be read again with other parameters, so what is noted now goes into copies.
        self.gathered = replace(
            kept, problems=list(kept.problems), seen=list(kept.seen), blamed=set(kept.blamed)
        )
        self.deck, self.file = deck, deck.file
        for scope in _scopes(deck.defined.top):
            scope.uses = 0
        self.shared = Shared(overrides=overrides, most_steps=deck.reading.limits.steps)
        self.setting = Setting()
        self.title = _title(kept.texts[0][0])
        self.analysis_places: dict[str, Place] = {}
        self.options: dict[str, str] = {}
        self.analyses = Analyses()
        self.outputs: list[tuple[str, ...]] = []
        self.noise_card: tuple[Line, NoiseCard] | None = None
        self.requests: list[tuple[Line, Request]] = []
        self.node_starts: list[tuple[Line, dict[str, float]]] = []
        self.card_numbers: list[tuple[str, str, Line]] = []
        self.has_temperature = False
        self.card_parameters: set[Depended] = set()
        self.environment = Environment(deck.defined.top, self.shared)
        self.assembly = Assembly(deck.defined, self.gathered, deck.reading, self.shared, self.setting)

    def circuit(self) -> Circuit:
        self.read_cards()
        self.assembly = Assembly(
            self.deck.defined, self.gathered, self.deck.reading, self.shared, self.setting
        )
        network = self.assembly.assemble()
        self.environment = self.assembly.top  # what is known there need not be computed again
        network.title = self.title
        parameters = self.parameters()
        self.check_requests()
        self.check_noise()
        if not self.gathered.problems and not len(network):
            self.gathered.problems.append(self.no_parts())
        circuit = self.made(parameters)
        if self.gathered.problems:
            error = CircuitError(problems=self.ordered())
            error.partial = circuit
            raise error
        return circuit

    def made(self, parameters: Mapping[str, Parameter]) -> Circuit:
        assembly, nominal = self.assembly, self.setting.temperature
        initial = StartingState(self.starting_nodes(), assembly.starts)
        known = {name.lower(): name for name in assembly.network.nodes}
        parts = assembly.part_names
        return Circuit(
            assembly.network,
            circuit_name(self.file),
            self.file,
            "netlist",
            self.output(),
            self.analyses,
            Conditions(nominal, nominal, nominal),
            places=assembly.places,
            value_texts=assembly.value_texts,
            analysis_places=self.analysis_places,
            options=self.options,
            seal=find_seal(self.gathered.texts[0]),
            lines=tuple(self.gathered.texts[0]),
            requests=tuple(
                replace(
                    request,
                    text=respelled(
                        request.text, lambda n: known.get(n.lower(), n), lambda n: parts.get(n.lower(), n)
                    ),
                )
                for _, request in self.requests
            ),
            initial=initial,
            parameters=parameters,
            subcircuits=tuple(_told(scope, self.gathered) for scope in _scopes(self.deck.defined.top)[1:]),
            left_out=assembly.left_out(),
            seen=tuple(self.gathered.seen),
            silenced=tuple(self.gathered.silenced),
            files=tuple(self.gathered.files),
            other_numbers=tuple(
                (owner, text, self.gathered.place(line))
                for owner, text, line in [*assembly.numbers, *self.card_numbers]
            ),
            definition=self.deck if self.deck.defined.top.parameters else None,
        )

    def no_parts(self) -> Problem:
        names = list(self.deck.defined.top.subcircuits)
        if names:
            return Problem(
                f"the netlist only defines subcircuits ({', '.join(names[:8])}) and uses none.",
                self.file,
                None,
                f"Add a source and a line that uses one, as X1 in out {names[0]}.",
            )
        return Problem("the netlist holds no parts.", self.file, None, "Add some below the title.")

    def ordered(self) -> list[Problem]:
        order = {file: k for k, file in enumerate(self.gathered.files)}
        found = sorted(self.gathered.problems, key=lambda p: (order.get(p.file or "", 0), p.line or 0))
        if len(found) > MAX_PROBLEMS:
            count = len(found) - MAX_PROBLEMS + self.gathered.more_problems
            more = f"and {count} more lines that cannot be read."
            found = [*found[:MAX_PROBLEMS], Problem(more, self.file)]
        return found

    # -- the whole

    def parameters(self) -> dict[str, Parameter]:
        """Every parameter of the top level with its value, used or not: ngspice computes them all."""
        found: dict[str, Parameter] = {}
        for name, definition in self.deck.defined.top.parameters.items():
            try:
                value = self.environment.known(name).value
            except RcnetError as exc:
                self.assembly.complain(exc, definition.line)
                continue
            text = "" if name in self.shared.overrides else definition.text
            place = self.gathered.place(definition.line)
            found[name] = Parameter(name, value, text, place.at(name))
        uses = self.uses()
        used = parts_of(uses, self.assembly.depends)
        on_cards = parts_of(uses, dict.fromkeys(self.card_parameters, (".cards",)))
        for name, each in found.items():
            found[name] = replace(each, parts=used.get(name) or on_cards.get(name, ()))
        return found

    def uses(self) -> dict[Depended, frozenset[Depended]]:
        """What each parameter depends on; one set from outside as it would without that."""
        top = self.deck.defined.top.parameters
        uses = dict(self.shared.uses)
        for name in self.shared.overrides:
            names = self.environment.needed(top[name].text)
            uses[name] = frozenset(each for each in names if each in top)
        return uses

    def check_requests(self) -> None:
        if self.gathered.problems:
            return
        for line, request in self.requests:
            try:
                require_there(
                    request,
                    self.assembly.network,
                    lambda name: self.assembly.part_names.get(name.lower(), name),
                )
            except RcnetError as exc:
                self.gathered.complain(exc, line)

    def check_noise(self) -> None:
        if self.noise_card is None or self.gathered.problems:
            return
        line, card = self.noise_card
        network = self.assembly.network
        try:
            source = network.sources.get(self.assembly.part_names.get(card.source.lower(), card.source))
            if source is None or not source.ac:
                what = "no source here" if source is None else "a source without ac"
                raise CircuitError(
                    f".noise refers to {card.source!r}, which is {what}.",
                    remedy="Name the source that carries AC 1.",
                    code="analysis-unreadable",
                )
            if self.known(card.nodes) != self.output():
                raise CircuitError(
                    f".noise is about v({','.join(card.nodes)}), but v({','.join(self.output())}) is printed "
                    "before it, and that is the output.",
                    remedy="Let both name the same, or use two netlists.",
                    code="analysis-unreadable",
                )
        except RcnetError as exc:
            self.gathered.complain(exc, line)

    def known(self, nodes: tuple[str, ...]) -> tuple[str, ...]:
        """A node or a pair in the network's spelling, a pair with ground or with itself as one node."""
        known = tuple(self.assembly.spelling.get(node.lower(), node) for node in nodes)
        return known[:1] if known[1:] in ((GROUND,), known[:1]) else known

    def output(self) -> tuple[str, ...]:
        """The first voltage printed that is not ground's own, else the node `out`, else nothing."""
        for nodes in self.outputs:
            if (known := self.known(nodes)) != (GROUND,):
                return known
        return (self.assembly.spelling["out"],) if "out" in self.assembly.spelling else ()

    def starting_nodes(self) -> dict[str, float]:
        found: dict[str, float] = {}
        for line, starts in self.node_starts:
            for node, value in starts.items():
                known = self.known((node,))[0]
                if self.assembly.network.has_node(known):
                    found[known] = value
                else:
                    self.gathered.notice(
                        "start-of-no-node",
                        line,
                        f".ic names the node {node!r}, which is not there; a simulator passes over it.",
                        "Check the name.",
                        node,
                    )
        return found

    # -- cards

    def read_cards(self) -> None:
        cards = self.deck.defined.top.cards
        # Temperatures first: an expression on another card may hold `temper`.
        early = (".temp", ".options", ".option", ".opt")
        for line in sorted(cards, key=lambda card: card.text.split(" ", 1)[0].lower() not in early):
            try:
                self.card(line)
            except RcnetError as exc:
                self.gathered.complain(exc, line)
        run = self.analyses.transient
        if run is not None:
            self.setting = replace(self.setting, step=run.step, stop=run.stop)

    def card(self, line: Line) -> None:
        word = line.text.split(" ", 1)[0].lower()
        if "\r" in line.text:
            return  # it is among the problems already
        if not line.text.isprintable():
            raise unseen_character(line.text)
        line = line._replace(text=re.sub(" +", " ", line.text))
        reader = _CARDS.get(word)
        if reader is None:
            raise CircuitError(
                f"{word[:40]!r} is not read.",
                remedy=card_remedy(word, _CARDS, self.shared.nearest(word, _CARDS)),
                code="card-unknown",
            )
        if word in _COMPUTED or (word in (".meas", ".measure") and "{" in line.text):
            line = line._replace(
                text=self.substituted(line.text, _EXPRESSION if word in _COMPUTED else _BRACED)
            )
        if word in (".ac", ".tran", ".noise", ".temp", ".dc", ".four"):
            texts = [each for each in words_of(line.text)[1:] if re.match(r"[-+]?\.?[0-9]", each)]
            self.card_numbers += [(word, text, line) for text in texts]
        reader(self, line)

    def substituted(self, text: str, pattern: re.Pattern[str]) -> str:
        """A card with its expressions computed."""

        def computed(match: re.Match[str]) -> str:
            known = self.environment.evaluate(match[0])
            self.card_parameters |= known.of
            return write_spice_number(known.value)

        return pattern.sub(computed, text)

    def _first(self, line: Line, key: str) -> bool:
        """True for the first line of its kind; a later one is handed on, and not computed."""
        if key not in self.analysis_places:
            self.analysis_places[key] = self.gathered.place(line)
            return True
        word = line.text.split()[0]
        self.gathered.notice(
            "second-analysis",
            line,
            f"a second {word} stands here; only the first, on line {self.analysis_places[key].line}, is "
            "computed and compared.",
            "Keep one, or use a netlist for each.",
            word,
        )
        return False

    def _request(self, line: Line, word: str, text: str) -> None:
        self.requests.append((line, Request(word, text, self.gathered.place(line))))

    def ac(self, line: Line) -> None:
        sweep = read_sweep(".ac", words_of(line.text)[1:])
        if self._first(line, "ac"):
            self.analyses = replace(self.analyses, ac=sweep)
        else:
            self._request(line, ".ac", _sweep_text(line.text, 1))

    def noise(self, line: Line) -> None:
        found = read_noise(line.text)
        if self._first(line, "noise"):
            self.outputs.append(found.nodes)
            self.analysis_places.setdefault("output", self.gathered.place(line))
            self.noise_card = (line, found)
            self.analyses = replace(self.analyses, noise=found.sweep)

    def transient(self, line: Line) -> None:
        found = read_transient(words_of(line.text)[1:])
        if self._first(line, "transient"):
            self.analyses = replace(self.analyses, transient=found)

    def operating_point(self, line: Line) -> None:
        if "operating point" not in self.analysis_places:
            self._first(line, "operating point")
        self.analyses = replace(self.analyses, operating_point=True)

    def printed(self, line: Line) -> None:
        if voltages := printed_voltages(line.text):
            self.outputs.extend(voltages)
            self.analysis_places.setdefault("output", self.gathered.place(line))

    def set_options(self, line: Line) -> None:
        found, passed_over = read_options(line.text)
        if "temp" in found:
            celsius = float(found.pop("temp"))
            if not self.has_temperature:
                self.set_temperature(celsius)
        if "tnom" in found:
            self.setting = replace(self.setting, tnom=float(found.pop("tnom")))
        self.options.update(found)
        for key, message, remedy in passed_over:
            self.gathered.notice("option-changes-circuit", line, message, remedy, key)

    def temperature(self, line: Line) -> None:
        self.has_temperature = True  # .temp goes before .options temp=, wherever the two stand (measured)
        words = words_of(line.text)[1:]
        if not words:
            raise CircuitError(".temp names no temperature.", remedy="Give one; ngspice takes 27 otherwise.")
        if len(words) > 1:
            self.gathered.notice(
                "several-temperatures",
                line,
                f".temp names {len(words)} temperatures; ngspice 39 then takes 27, and so is it read here.",
                "Give one; use a netlist for each temperature.",
            )
            self.set_temperature(27.0)
            return
        self.set_temperature(read_temperature(words[0]))

    def set_temperature(self, celsius: float) -> None:
        self.setting = replace(self.setting, temperature=celsius)
        self.shared.temperature = celsius

    def set_title(self, line: Line) -> None:
        self.title = " ".join(line.text.split()[1:])

    def keep(self, line: Line) -> None:
        word = _SAME.get(line.text.split(" ", 1)[0].lower(), line.text.split(" ", 1)[0].lower())
        request = read_request(word, line.text, self.gathered.place(line))
        self.requests.append((line, request))
        if word != ".meas":
            self.gathered.notice(
                "card-kept",
                line,
                f"{word} is handed on as it is; rcnet does not compute it.",
                "Nothing to do.",
                word,
            )

    def starts(self, line: Line) -> None:
        self.node_starts.append((line, read_starts(line.text)))

    def pass_over(self, line: Line) -> None:
        word = line.text.split(" ", 1)[0]
        if word.lower() in _NO_MATTER:
            return
        self.gathered.notice(
            "card-ignored",
            line,
            f"{word} is not computed, and not handed on.",
            "Remove it, or keep it in a netlist of its own.",
            word,
        )


def _sweep_text(text: str, first: int) -> str:
    kind, points, *ends = words_of(text)[first:]
    return " ".join(
        [kind.lower(), points, *(write_spice_number(read_spice_number(end).value) for end in ends)]
    )


def _scopes(top: Scope) -> list[Scope]:
    """The top level and every subcircuit below it."""
    found, waiting = list[Scope](), [top]
    while waiting:
        scope = waiting.pop()
        found.append(scope)
        waiting.extend(reversed(scope.subcircuits.values()))
    return found


def _told(scope: Scope, gathered: Gathered) -> Subcircuit:
    assert scope.line is not None
    place = gathered.place(scope.line).at(scope.name)
    return Subcircuit(scope.name.lower(), scope.ports, tuple(scope.defaults), scope.uses, place)


_SAME = {".measure": ".meas", ".fourier": ".four"}
_NO_MATTER = frozenset([".width", ".nodeset", ".end"])  # print layout; a first guess for an iteration

_CARDS: dict[str, Callable[[_Reader, Line], None]] = {
    ".ac": _Reader.ac,
    ".noise": _Reader.noise,
    ".tran": _Reader.transient,
    ".op": _Reader.operating_point,
    **dict.fromkeys([".print", ".plot", ".save", ".probe"], _Reader.printed),
    **dict.fromkeys([".options", ".option", ".opt"], _Reader.set_options),
    ".temp": _Reader.temperature,
    ".title": _Reader.set_title,
    ".ic": _Reader.starts,
    **dict.fromkeys([".dc", ".tf", ".four", ".fourier", ".meas", ".measure"], _Reader.keep),
    **dict.fromkeys(
        [".sens", ".pz", ".disto", ".sp", ".pss", ".hb", ".width", ".nodeset", ".end"], _Reader.pass_over
    ),
}


def _title(line: str) -> str:
    text = re.sub(r"^\*\s*", "", line.strip())
    return "".join(character if character.isprintable() else " " for character in text)
