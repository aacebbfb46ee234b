"""What a netlist defines, before anything is put in place: subcircuits, parameters, models, functions."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from ..errors import CircuitError, RcnetError
from ..values import NetlistFunction, parse_netlist_function
from .gather import Gathered
from .limits import Limits
from .lines import Line
from .refusals import unseen_character
from .runs import Run
from .words import assignments, parameter_pairs, split_words

Statement = Line | Run


@dataclass(slots=True)
class Definition:
    """A parameter as it is defined: its text behind the `=`, as written, and its line."""

    text: str
    line: Line
    used: bool = False


@dataclass(slots=True)
class Model:
    """A `.model`: its type and its parameters as written, names in lower case."""

    kind: str
    settings: Mapping[str, str]
    line: Line


@dataclass(slots=True)
class Scope:
    """A netlist's top level, or one subcircuit.

    ports, defaults: of a subcircuit; statements: its parts and instances; cards: the other dot lines
    parent: where it is defined
    """

    name: str = ""
    line: Line | None = None
    parent: Scope | None = None
    ports: tuple[str, ...] = ()
    defaults: dict[str, Definition] = field(default_factory=dict)
    parameters: dict[str, Definition] = field(default_factory=dict)
    functions: dict[str, NetlistFunction] = field(default_factory=dict)
    models: dict[str, Model] = field(default_factory=dict)
    subcircuits: dict[str, Scope] = field(default_factory=dict)
    broken: set[str] = field(default_factory=set)  # subcircuits whose first line cannot be read
    statements: list[Statement] = field(default_factory=list)
    cards: list[Line] = field(default_factory=list)
    uses: int = 0

    def chain(self) -> Iterator[Scope]:
        """The scope and those around it, innermost first."""
        scope: Scope | None = self
        while scope is not None:
            yield scope
            scope = scope.parent

    def subcircuit(self, name: str) -> Scope | None:
        """The subcircuit that a name means here."""
        return next(
            (found for each in self.chain() if (found := each.subcircuits.get(name)) is not None), None
        )

    def model(self, name: str) -> Model | None:
        """The model that a name means here."""
        return next((found for each in self.chain() if (found := each.models.get(name)) is not None), None)


@dataclass(slots=True)
class Defined:
    """Everything a netlist defines: its top level, and the nodes that are the same everywhere."""

    top: Scope
    global_nodes: set[str]


def scopes_of(gathered: Gathered, limits: Limits) -> Defined:
    """Sort a netlist's lines into what they define. What cannot be read is among the gathered problems."""
    builder = _Builder(gathered, limits)
    for item in gathered.items:
        if isinstance(item, Run):
            if not builder.conditions and not builder.skipped:
                builder.here.statements.append(item)
            continue
        try:
            builder.line(item)
        except RcnetError as exc:
            gathered.complain(exc, item)
        if builder.kept > limits.parameters:
            return Defined(builder.top, builder.global_nodes)
    builder.close()
    return Defined(builder.top, builder.global_nodes)


class _Builder:
    def __init__(self, gathered: Gathered, limits: Limits) -> None:
        self.gathered, self.limits = gathered, limits
        self.top = Scope()
        self.here = self.top
        self.global_nodes: set[str] = {"0", "gnd"}
        self.kept = 0
        self.conditions = 0  # how deep inside `.if`
        self.skipped = 0  # how deep inside a subcircuit whose first line cannot be read

    def line(self, line: Line) -> None:
        if len(line.text) > self.limits.line:
            raise CircuitError(
                f"the line, with what continues it, has {len(line.text)} characters; at most "
                f"{self.limits.line} are read.",
                remedy="Break it up, or raise the limit with --limit line=NUMBER.",
                code="limit",
            )
        word = line.text.split(" ", 1)[0].lower()
        if self.conditions or word == ".if":
            self.condition(word)
            return
        if self.skipped:
            self.skipped += (word in _OPENING) - (word in _CLOSING)
            return
        if line.text[0] != ".":
            self.here.statements.append(line)
            return
        if "\r" in line.text:
            return  # it is among the problems already
        if not line.text.isprintable():
            raise unseen_character(line.text)
        reader = _CARDS.get(word)
        if reader is not None:
            reader(self, line)
        elif self.here is self.top:
            self.top.cards.append(line)
        else:
            raise CircuitError(
                f"{word!r} stands inside the subcircuit {self.here.name!r}.",
                remedy="Move it out; inside belong parts, .param, .model and .subckt.",
                code="unreadable",
            )

    def condition(self, word: str) -> None:
        """Pass over what stands inside `.if`: one mistake, not one for every line in it."""
        self.conditions += (word == ".if") - (word == ".endif")
        if word == ".if" and self.conditions == 1:
            raise CircuitError(
                "'.if' is not read.",
                remedy="Keep the branch that is meant, without the condition.",
                code="card-unknown",
            )

    def keep_one_more(self) -> None:
        self.kept += 1
        if self.kept > self.limits.parameters:
            raise CircuitError(
                f"the netlist defines more than {self.limits.parameters} parameters, models and subcircuits.",
                remedy="Raise the limit with --limit parameters=NUMBER.",
                code="limit",
            )

    # -- subcircuits

    def subcircuit(self, line: Line) -> None:
        try:
            self.begin(line)
        except RcnetError:
            # What stands inside goes with it, and so does what uses it: one mistake, one message.
            self.skipped = 1
            if name := line.text.split()[1:2]:
                self.here.broken.add(name[0].lower())
            raise

    def begin(self, line: Line) -> None:
        words = split_words(line.text)
        positional, defaults = assignments(words[1:])
        if not positional:
            raise CircuitError(
                ".subckt has no name.", remedy="Write .subckt NAME node node ...", code="unreadable"
            )
        name, *ports = (word for word in positional if word.lower() != "params:")
        self.keep_one_more()
        depth = sum(1 for _ in self.here.chain())
        if depth > self.limits.depth:
            raise CircuitError(
                f"subcircuits are defined more than {self.limits.depth} deep within one another.",
                remedy="Flatten them, or raise the limit with --limit depth=NUMBER.",
                code="limit",
            )
        if defaults and line.text[:6].lower() == ".macro":
            raise CircuitError(
                ".macro takes no parameters; ngspice 39 takes them for nodes.",
                remedy="Write .subckt and .ends.",
                code="unreadable",
            )
        scope = Scope(name, line, self.here, tuple(ports))
        for key, text in defaults:
            _require_free(key)
            scope.defaults[key] = Definition(text, line)
        self._look_at_ports(scope, line)
        first = self.here.subcircuits.get(name.lower())
        if first is None:
            self.here.subcircuits[name.lower()] = scope
        else:
            assert first.line is not None
            self.gathered.notice(
                "duplicate-subcircuit",
                line,
                f"the subcircuit {name!r} is defined a second time; this one is passed over, the one on line "
                f"{first.line.number} counts.",
                "Give it another name, or remove one of the two.",
                name,
            )
        self.here = scope

    def _look_at_ports(self, scope: Scope, line: Line) -> None:
        counts = Counter(port.lower() for port in scope.ports)
        twice = next((port for port in scope.ports if counts[port.lower()] > 1), None)
        if twice is not None:
            raise CircuitError(
                f"the subcircuit {scope.name!r} names the port {twice!r} twice.",
                remedy="Give each port its own name.",
                code="unreadable",
            )
        ground = next((port for port in scope.ports if port.lower() in ("0", "gnd")), None)
        if ground is not None:
            self.gathered.notice(
                "subcircuit-ground",
                line,
                f"the port {ground!r} of subcircuit {scope.name!r} is ground itself; what is connected there "
                "is not.",
                "Give the port another name.",
                ground,
            )

    def ends(self, line: Line) -> None:
        if self.here.parent is None:
            raise CircuitError(".ends closes nothing.", remedy="Remove it.", code="unreadable")
        closes, self.here = self.here, self.here.parent
        assert closes.line is not None
        words = line.text.split()
        if (words[0].lower() == ".eom") != (closes.line.text[:6].lower() == ".macro"):
            raise CircuitError(
                f"{words[0]} does not close what line {closes.line.number} begins.",
                remedy="Write .subckt with .ends.",
                code="unreadable",
            )
        if len(words) > 1 and words[1].lower() != closes.name.lower():
            self.gathered.notice(
                "ends-name",
                line,
                f"{words[0]} names {words[1]!r}, but the subcircuit it closes is {closes.name!r}.",
                "Let them agree; a simulator does not look at the name.",
                words[1],
            )

    def close(self) -> None:
        while self.here.parent is not None:
            assert self.here.line is not None
            error = CircuitError(
                f"the subcircuit {self.here.name!r} is never closed.",
                remedy="Add .ends behind its last part.",
                code="subcircuit-open",
            )
            self.gathered.complain(error, self.here.line)
            self.here = self.here.parent

    # -- definitions

    def parameters(self, line: Line) -> None:
        body = line.text.split(" ", 1)[1] if " " in line.text else ""
        found = parameter_pairs(body)
        if not found:
            raise CircuitError(
                ".param defines nothing.", remedy="Write .param NAME=VALUE.", code="unreadable"
            )
        for key, text in found:
            self.define(key, text, line)

    def define(self, key: str, text: str, line: Line) -> None:
        self.keep_one_more()
        if (call := re.match(r"(\w+)\((.*)\)$", key)) is not None:
            self.here.functions[call[1]] = parse_netlist_function(f"{key} {text}")
            return
        _require_free(key)
        if (first := self.here.parameters.get(key)) is not None:
            self.gathered.notice(
                "duplicate-parameter",
                line,
                f"the parameter {key!r} is defined a second time; this one counts, not the one on line "
                f"{first.line.number}.",
                "Keep one of the two.",
                key,
            )
        self.here.parameters[key] = Definition(text, line)

    def function(self, line: Line) -> None:
        body = line.text.split(" ", 1)[1] if " " in line.text else ""
        self.keep_one_more()
        found = parse_netlist_function(body)
        self.here.functions[found.name] = found

    def model(self, line: Line) -> None:
        words = split_words(line.text)
        positional, settings = assignments(words[1:])
        if len(positional) < 2:
            raise CircuitError(
                ".model lacks its name or its type.",
                remedy="Write .model NAME R(tc1=0.001).",
                code="unreadable",
            )
        self.keep_one_more()
        name, kind, *rest = positional
        if rest and kind.lower() in MODEL_KINDS:
            raise CircuitError(
                f"the model {name!r} holds {rest[0]!r}, which is no NAME=VALUE.",
                remedy="Write .model NAME R(tc1=0.001).",
                code="unreadable",
            )
        if (first := self.here.models.get(name.lower())) is not None:
            self.gathered.notice(
                "duplicate-model",
                line,
                f"the model {name!r} is defined a second time; ngspice takes the first, on line "
                f"{first.line.number}, without a word.",
                "Keep one of the two.",
                name,
            )
            return
        self.here.models[name.lower()] = Model(kind.lower(), dict(settings), line)

    def globals(self, line: Line) -> None:
        self.global_nodes.update(word.lower() for word in split_words(line.text)[1:])


def _require_free(key: str) -> None:
    if key == "temper":
        raise CircuitError(
            "the parameter 'temper' is the circuit's temperature, whatever is written for it.",
            remedy="Choose another name, or write .temp.",
            code="unreadable",
        )


# Model types that belong to linear parts -> the part's letter (measured: `cap` and `ind` are none).
MODEL_KINDS = {"r": "R", "res": "R", "c": "C", "capacitor": "C", "l": "L", "inductor": "L"}

_OPENING, _CLOSING = (".subckt", ".macro"), (".ends", ".eom")
_CARDS: dict[str, Callable[[_Builder, Line], None]] = {
    ".subckt": _Builder.subcircuit,
    ".macro": _Builder.subcircuit,
    ".ends": _Builder.ends,
    ".eom": _Builder.ends,
    ".param": _Builder.parameters,
    ".params": _Builder.parameters,
    ".func": _Builder.function,
    ".model": _Builder.model,
    ".global": _Builder.globals,
    ".csparam": lambda _builder, _line: None,  # for commands, which are left out
}
