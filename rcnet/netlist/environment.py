"""What a name means where it stands: parameters of a netlist, of its subcircuits and of their instances."""

from __future__ import annotations

from collections import ChainMap
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from itertools import islice

from ..errors import CircuitError, QuantityError, RcnetError
from ..values import NetlistExpression, NetlistFunction, parse_netlist_expression
from .gather import DefinitionError
from .limits import Limits
from .scopes import Definition, Scope
from .words import bare

Source = str | int  # the name of a top-level parameter, or the number of a joint
NOTHING: frozenset[Source] = frozenset()
TEMPERATURE = "temper"


@dataclass(frozen=True, slots=True)
class Known:
    """A number, and what it depends on: parameters of the top level, joints of several.

    Only the nearest sources are there; `Shared.uses` has what those depend on.
    """

    value: float
    of: frozenset[Source] = NOTHING


@dataclass(slots=True)
class Shared:
    """What all environments of one netlist have in common.

    temperature: degrees Celsius, `temper` in an expression; overrides: top-level parameters set from outside
    """

    temperature: float = 27.0
    overrides: Mapping[str, float] = field(default_factory=dict)
    most_steps: int = Limits().steps
    steps: int = 0
    suggestions: int = 100
    parsed: dict[str, NetlistExpression] = field(default_factory=dict)
    uses: dict[Source, frozenset[Source]] = field(default_factory=dict)
    joints: dict[frozenset[Source], frozenset[Source]] = field(default_factory=dict)
    warm: set[Source] = field(default_factory=lambda: {TEMPERATURE})  # what depends on the temperature

    def parse(self, text: str) -> NetlistExpression:
        """An expression with or without its braces, read once."""
        found = self.parsed.get(text)
        if found is None:
            inner = bare(text)
            found = self.parsed[text] = parse_netlist_expression(text if inner is None else inner)
        return found

    def work(self, steps: int) -> None:
        """Count steps of arithmetic: a short text can ask for very many. Raises CircuitError."""
        self.steps += steps
        if self.steps > self.most_steps:
            raise CircuitError(
                f"the netlist's expressions take more than {self.most_steps} steps of arithmetic.",
                remedy="Simplify them, or raise the limit with --limit steps=NUMBER.",
                code="limit",
            )

    def nearest(self, word: str, known: Iterable[str]) -> str | None:
        """The known word that one resembles; a netlist full of mistakes gets no suggestions in the end."""
        if self.suggestions <= 0 or len(word) > 100:
            return None
        self.suggestions -= 1
        from difflib import get_close_matches

        return next(iter(get_close_matches(word, list(islice(known, 2000)), 1)), None)

    def note(self, source: Source, of: frozenset[Source]) -> None:
        """Keep what a source depends on."""
        self.uses[source] = of
        if not self.warm.isdisjoint(of):
            self.warm.add(source)

    def joined(self, of: frozenset[Source]) -> frozenset[Source]:
        """What a number depends on, several sources made one joint so that such sets stay small."""
        if len(of) <= 3:
            return of
        found = self.joints.get(of)
        if found is None:
            joint = len(self.joints)
            self.note(joint, of)
            found = self.joints[of] = frozenset([joint])
        return found


class Environment:
    """The names known at the top level, or inside one instance of a subcircuit.

    ngspice 39 looks a name up where it stands and then along the instances around it (not the definitions),
    and what an instance is given goes before what its subcircuit sets by `.param` (measured).
    """

    def __init__(
        self,
        scope: Scope,
        shared: Shared,
        outer: Environment | None = None,
        given: Mapping[str, Known] | None = None,
    ) -> None:
        self.scope, self.shared, self.outer = scope, shared, outer
        self.found: dict[str, Known] = dict(given or {})
        self.broken: dict[str, DefinitionError] = {}
        self._all_functions: Mapping[str, NetlistFunction] | None = None
        if outer is None:
            self.found = {name: Known(value, frozenset([name])) for name, value in shared.overrides.items()}

    def evaluate(self, text: str) -> Known:
        """The value of an expression, with or without its braces.

        Raises CircuitError for a name that is undefined or defined in a circle, QuantityError for the rest.
        """
        return self._computed(self.shared.parse(text))

    def _computed(self, expression: NetlistExpression, defining: str = "") -> Known:
        of: set[Source] = set()

        def lookup(name: str) -> float:
            known = self._site(name, defining).known(name)
            of.update(known.of)
            return known.value

        value = expression.evaluate(lookup, self._functions(), self.shared.work)
        return Known(value, self.shared.joined(frozenset(of)) if of else NOTHING)

    def _functions(self) -> Mapping[str, NetlistFunction]:
        if self._all_functions is None:
            own, outer = self.scope.functions, self.outer._functions() if self.outer is not None else {}
            self._all_functions = ChainMap(own, outer) if own and outer else own or outer  # type: ignore[arg-type]
        return self._all_functions

    def known(self, name: str) -> Known:
        """What a name (lower case) means here."""
        if name == TEMPERATURE:
            return Known(self.shared.temperature, frozenset([TEMPERATURE]))
        owner = self._owner(name)
        if owner is None:
            raise CircuitError(
                f"the parameter {name!r} is not defined.",
                remedy=self._nearest(name),
                code="parameter-undefined",
            )
        if name in owner.broken:
            raise DefinitionError.at_line(owner.broken[name], owner.broken[name].definition)
        if name not in owner.found:
            owner._settle(name)
        return owner.found[name]

    def _site(self, name: str, defining: str) -> Environment:
        """Where a name is looked up while one is computed: `r={2*r}` in a subcircuit means the outer r."""
        doubly = name in self.scope.parameters and name in self.scope.defaults
        return self.outer if name == defining and self.outer is not None and not doubly else self

    def is_defined(self, name: str) -> bool:
        """True if a name (lower case) is a parameter here."""
        return self._owner(name) is not None

    def _owner(self, name: str) -> Environment | None:
        here: Environment | None = self
        while here is not None:
            if name in here.found or name in here.scope.parameters or name in here.scope.defaults:
                return here
            here = here.outer
        return None

    def _definition(self, name: str) -> Definition:
        found = self.scope.parameters.get(name)
        return self.scope.defaults[name] if found is None else found

    def _settle(self, name: str) -> None:
        """Compute a parameter and what it rests on; each that cannot be is known from then on as broken."""
        path: dict[tuple[int, str], Environment] = {}
        try:
            self._settle_along(name, path)
        except RcnetError as exc:
            (_, last), owner = next(reversed(path.items()))
            error = exc if isinstance(exc, DefinitionError) else owner._blamed(exc, last)
            for (_, each), owner in path.items():
                owner.broken[each] = error
            raise error from None

    def _settle_along(self, name: str, path: dict[tuple[int, str], Environment]) -> None:
        """Deepest first; chains of thousands need no recursion. path: those waiting for others"""
        waiting: list[tuple[Environment, str]] = [(self, name)]
        while waiting:
            owner, name = waiting[-1]
            key = (id(owner), name)
            if name in owner.found:
                waiting.pop()
                continue
            is_new = key not in path
            path[key] = owner
            expression = owner._parsed(name)
            unsettled = list(owner._unsettled(expression, name)) if is_new else []
            for other, needed in unsettled:
                if needed in other.broken:
                    raise DefinitionError.at_line(other.broken[needed], other.broken[needed].definition)
                if (id(other), needed) in path:
                    raise CircuitError(
                        f"the parameter {needed!r} is defined by itself"
                        + (f", by way of {name!r}." if needed != name else "."),
                        remedy="Break the circle.",
                        code="parameter-cycle",
                    )
            if unsettled:
                waiting.extend(unsettled)
                continue
            owner.found[name] = owner._result(name, expression)
            waiting.pop()
            path.pop(key)

    def _blamed(self, error: RcnetError, name: str) -> DefinitionError:
        return DefinitionError.at_line(error, self._definition(name).line)

    def _parsed(self, name: str) -> NetlistExpression:
        try:
            return self.shared.parse(self._definition(name).text)
        except QuantityError as exc:
            raise QuantityError(
                f"parameter {name}: {exc.message}", remedy=exc.remedy, code=exc.problems[0].code
            ) from exc

    def _unsettled(self, expression: NetlistExpression, defining: str) -> Iterator[tuple[Environment, str]]:
        for needed in sorted(self._names_in(expression)):
            other = self._site(needed, defining)._owner(needed)
            if other is not None and needed not in other.found:
                yield other, needed

    def needed(self, text: str) -> frozenset[str]:
        """The parameters an expression needs, those in the bodies of the functions it calls among them."""
        return self._names_in(self.shared.parse(text))

    def _names_in(self, expression: NetlistExpression) -> frozenset[str]:
        functions = self._functions()
        if not functions:
            return expression.names
        needed, called, waiting = set(expression.names), set[str](), [expression]
        while waiting:
            steps = waiting.pop().steps
            self.shared.work(len(steps))
            for step in steps:
                if step.act == "call" and step.name in functions and step.name not in called:
                    called.add(step.name)
                    function = functions[step.name]
                    needed |= function.body.names.difference(function.arguments)
                    waiting.append(function.body)
        return frozenset(needed)

    def _result(self, name: str, expression: NetlistExpression) -> Known:
        try:
            known = self._computed(expression, name)
        except QuantityError as exc:
            raise QuantityError(f"parameter {name}: {exc.message}", remedy=exc.remedy) from exc
        if self.outer is not None:
            return known
        self.shared.note(name, known.of)
        return Known(known.value, frozenset([name]))

    def _nearest(self, name: str) -> str:
        close = self.shared.nearest(name, self._names())
        if close is not None:
            return f"Did you mean {close!r}?"
        first = ", ".join(islice(self._names(), 8))
        return f"Define it with .param; known are {first}." if first else "Define it with .param."

    def _names(self) -> Iterator[str]:
        here: Environment | None = self
        while here is not None:
            yield from here.scope.parameters
            yield from here.scope.defaults
            here = here.outer
