"""Hand formulas: arithmetic over part names, parsed and computed here, never executed as code."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Final, NoReturn

from ..errors import QuantityError
from ._decimals import shown

LONGEST_FORMULA: Final = 2000  # characters
DEEPEST: Final = 100  # brackets, powers and signs within one another

# Boltzmann's constant in J/K is exact since the SI of 2019 (BIPM, SI Brochure, 9th edition).
CONSTANTS: Final[Mapping[str, float]] = {"pi": math.pi, "k_B": 1.380649e-23}


def _parallel(*values: float) -> float:
    # Taken relative to the smallest, so that no reciprocal overflows.
    smallest = min(values, key=abs)
    return smallest / math.fsum(smallest / value for value in values)


def _decibel(value: float) -> float:
    return 20.0 * math.log10(abs(value))


# Name: the function, its least and its greatest number of arguments (None: any number).
_FUNCTIONS: Final[Mapping[str, tuple[Callable[..., float], int, int | None]]] = {
    "sqrt": (math.sqrt, 1, 1),
    "log": (math.log, 1, 1),
    "log10": (math.log10, 1, 1),
    "exp": (math.exp, 1, 1),
    "sin": (math.sin, 1, 1),
    "cos": (math.cos, 1, 1),
    "tan": (math.tan, 1, 1),
    "atan": (math.atan, 1, 1),
    "abs": (math.fabs, 1, 1),
    "min": (lambda *values: min(values), 1, None),
    "max": (lambda *values: max(values), 1, None),
    "parallel": (_parallel, 1, None),
    "dB": (_decibel, 1, 1),
}
FUNCTIONS: Final = tuple(_FUNCTIONS)

_OPERATORS: Final[Mapping[str, Callable[..., float]]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "^": math.pow,
    "negative": lambda a: -a,
}

# How tightly each operator binds, to the left and to the right; a sign binds between product and power.
_BINDING: Final = {"+": (1, 2), "-": (1, 2), "*": (3, 4), "/": (3, 4), "^": (8, 7)}
_SIGN: Final = 5

_TOKEN: Final = re.compile(
    r"\s*(?:(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z0-9_.]*)|(?P<mark>\*\*|[-+*/^(),])|(?P<end>\Z))"
)
_UNIT: Final = r"(?:[Oo]hm|\u2126|\u03a9|Hz|[FHVAWsS])?"
_MARKING: Final = re.compile(rf"(meg|Meg|MEG|[TGMKkRmuµμnpf])([0-9]*){_UNIT}(?![A-Za-z0-9_.(])")
_POWERS: Final = {
    "T": 12,
    "G": 9,
    "M": 6,
    "meg": 6,
    "K": 3,
    "k": 3,
    "R": 0,
    "m": -3,
    "n": -9,
    "p": -12,
    "f": -15,
}


@dataclass(frozen=True, slots=True)
class Step:
    """One step of a formula in postfix order: what to do with the values computed so far.

    act: "number", "name", "call", or an operator
    at: the character of the formula it stands at, from 1
    value: of a number; name: of a name or a function; count: how many values a step takes
    """

    act: str
    at: int
    value: float = 0.0
    name: str = ""
    count: int = 0


@dataclass(frozen=True, slots=True)
class Expression:
    """A parsed hand formula.

    text: as written
    steps: the formula in postfix order, so that evaluating needs no recursion
    names: what must be given to `evaluate`: the names that are neither constants nor functions
    """

    text: str
    steps: tuple[Step, ...] = field(repr=False)
    names: frozenset[str]

    def evaluate(self, names: Mapping[str, float]) -> float:
        """The formula's value, a finite float, with `names` in base units.

        Raises QuantityError, with the place, for a name that is not given, a division by zero, overflow, and
        a logarithm, root or power that has no real value.
        """
        stack: list[float] = []
        for step in self.steps:
            if step.act == "number":
                stack.append(step.value)
            elif step.act == "name":
                stack.append(self._lookup(step, names))
            else:
                taken = stack[len(stack) - step.count :]
                del stack[len(stack) - step.count :]
                stack.append(self._apply(step, taken))
        return stack[0]

    def _lookup(self, step: Step, names: Mapping[str, float]) -> float:
        if step.name in CONSTANTS:
            return CONSTANTS[step.name]
        if step.name not in names:
            _fail(self.text, step.at, f"the name {step.name!r} is not known", _nearest(step.name, names))
        try:
            value = float(names[step.name])
        except (OverflowError, TypeError, ValueError):
            value = math.nan
        if not math.isfinite(value):
            given = shown(names[step.name])
            _fail(
                self.text,
                step.at,
                f"{step.name!r} is {given}, not a finite number",
                "Give it a finite value.",
            )
        return value

    def _apply(self, step: Step, taken: list[float]) -> float:
        function = _FUNCTIONS[step.name][0] if step.act == "call" else _OPERATORS[step.act]
        try:
            value = function(*taken)
        except OverflowError:
            value = math.inf
        except (ValueError, ZeroDivisionError):
            value = math.nan
        if not math.isfinite(value):
            _fail(
                self.text,
                step.at,
                _why_not_finite(step, taken, value),
                "Check the formula and the values in it.",
            )
        return value


def _why_not_finite(step: Step, taken: list[float], value: float) -> str:
    called = step.name if step.act == "call" else step.act
    if math.isinf(value):
        return f"{called!r} gives a number beyond 1.8e308"
    if called == "^":
        base, power = taken
        if base == 0:
            return f"0 to the power {power!r} divides by zero"
        return f"{base!r} to the power {power!r} is no real number"
    if called in ("/", "parallel"):
        return f"{called!r} divides by zero"
    return f"{called}({', '.join(map(repr, taken))}) has no finite real value"


def _nearest(name: str, names: Mapping[str, float]) -> str:
    if name in _FUNCTIONS:
        return f"The function {name} needs its arguments in brackets: '{name}(...)'."
    alike = [known for known in names if known.casefold() == name.casefold()]
    if alike:
        return f"Did you mean {alike[0]!r}?"
    known = sorted(names)
    more = f" and {len(known) - 20} more" if len(known) > 20 else ""
    return f"Known names: {', '.join(known[:20])}{more}." if known else "No names are known here."


def _fail(text: str, at: int, says: str, remedy: str) -> NoReturn:
    raise QuantityError(f"formula {shown(text)}, at character {at}: {says}.", remedy=remedy)


def parse_expression(text: str) -> Expression:
    """A hand formula as an `Expression`.

    Numbers, names, `pi` and `k_B`, + - * /, brackets, powers as ** or ^ (from the right, and tighter than a
    sign: -2^2 is -4), and the functions sqrt log log10 exp sin cos tan atan abs min max parallel dB; `log` is
    the natural one, angles are in radians. Raises QuantityError, with the place, for anything else and beyond
    2000 characters or 100 levels.
    """
    if not isinstance(text, str):
        raise QuantityError(f"formula {shown(text)} is not text.", remedy="Write it as '1/(2*pi*R1*C1)'.")
    if len(text) > LONGEST_FORMULA:
        raise QuantityError(
            f"formula {shown(text)} is longer than {LONGEST_FORMULA} characters.", remedy="Write it shorter."
        )
    if not text.strip():
        raise QuantityError(f"formula {shown(text)} is empty.", remedy="Write it as '1/(2*pi*R1*C1)'.")
    parser = _Parser(text)
    parser.operation(0, 0)
    if parser.kind != "end":
        parser.unexpected()
    steps = tuple(parser.steps)
    names = frozenset(step.name for step in steps if step.act == "name" and step.name not in CONSTANTS)
    return Expression(text, steps, names)


def _tokens(text: str) -> Iterator[tuple[str, str, int]]:
    """Kind ("number", "name", "mark", "end"), text and place (from 1) of each token; the last is the end."""
    position = 0
    while True:
        match = _TOKEN.match(text, position)
        if match is None:
            position += len(text[position:]) - len(text[position:].lstrip())
            _fail(
                text,
                position + 1,
                f"{text[position]!r} has no meaning in a formula",
                _instead(text[position]),
            )
        kind = str(match.lastgroup)
        found, start, position = match.group(kind), match.start(kind), match.end()
        if kind == "number" and re.match(r"[A-Za-z0-9_.µμ]", text[position:]):
            _glued(text, found, start, position)
        yield kind, found, start + 1
        if kind == "end":
            return


def _instead(character: str) -> str:
    if character in "×·":
        return "Multiply with '*'."
    if character in "−–":
        return "Subtract with '-'."
    if character in "[]{}":
        return "Use round brackets."
    return "Use numbers, part names, + - * / ^ and round brackets."


def _glued(text: str, number: str, start: int, position: int) -> NoReturn:
    """Say what to write instead of `4k7`, `10n` or `2pi`."""
    marking = _MARKING.match(text, position)
    rest = re.match(r"[\w.]+", text[position:])
    glued = rest.group() if rest else ""
    if marking is None or (marking.group(2) and not number.isdigit()):
        says = f"{number + glued!r} is neither a number nor a name"
        product = f"Write '{number}*{glued}'."
        _fail(text, start + 1, says, "A number has one point." if "." in glued[:1] else product)
    letter, fraction = marking.groups()
    power = _POWERS.get(letter, _POWERS.get(letter.lower(), -6))
    mantissa = f"{number}.{fraction}" if fraction else number
    plain = mantissa if power == 0 else f"{mantissa}e{power}"
    wanted = f"'{plain}'" if "e" not in mantissa.lower() else f"'{mantissa}*1e{power}'"
    remedy = f"Write {wanted} or, for a product, '{number}*{glued}'."
    _fail(text, start + 1, f"{number + glued!r} is no plain number", remedy)


class _Parser:
    """Operator precedence parsing (Pratt 1973) into postfix steps."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.steps: list[Step] = []
        self._tokens = _tokens(text)
        self.kind, self.found, self.at = next(self._tokens)

    def advance(self) -> None:
        self.kind, self.found, self.at = next(self._tokens)

    def unexpected(self) -> NoReturn:
        if self.kind == "end":
            _fail(self.text, self.at, "the formula ends too early", "Add what is missing.")
        remedy = {
            ")": "Remove the bracket, or open one before.",
            ",": "Only functions take commas; a number has a point.",
        }
        what = f"{self.found!r} does not belong here"
        _fail(
            self.text,
            self.at,
            what,
            remedy.get(self.found, "An operator or an operand is missing before it."),
        )

    def operation(self, weakest: int, depth: int) -> None:
        """An operand and all operators behind it that bind more tightly than `weakest`."""
        self.operand(depth)
        while self.kind == "mark":
            operator, at = self.found.replace("**", "^"), self.at
            left, right = _BINDING.get(operator, (0, 0))
            if left <= weakest:
                return
            self.advance()
            # Only powers nest without end to the right; the other operators come back to this loop.
            self.operation(right, depth + (operator == "^"))
            self.steps.append(Step(operator, at, count=2))

    def operand(self, depth: int) -> None:
        if depth > DEEPEST:
            _fail(
                self.text,
                self.at,
                f"more than {DEEPEST} levels within one another",
                "Write it in simpler terms.",
            )
        kind, found, at = self.kind, self.found, self.at
        if kind == "end" or (kind == "mark" and found not in ("+", "-", "(")):
            self.unexpected()
        self.advance()
        if kind == "number":
            value = float(found)
            if math.isinf(value):
                _fail(self.text, at, f"{found!r} is beyond 1.8e308", "Check the exponent.")
            self.steps.append(Step("number", at, value=value))
        elif kind == "name" and self.found == "(":
            self.call(found, at, depth)
        elif kind == "name":
            self.steps.append(Step("name", at, name=found))
        elif found == "(":
            self.operation(0, depth + 1)
            self.close(at)
        else:
            self.operation(_SIGN, depth + 1)
            if found == "-":
                self.steps.append(Step("negative", at, count=1))

    def call(self, name: str, at: int, depth: int) -> None:
        if name not in _FUNCTIONS:
            known = f"Known functions: {', '.join(sorted(FUNCTIONS, key=str.lower))}. Multiply with '*'."
            _fail(self.text, at, f"{name!r} is no function", known)
        opened, count = self.at, 0
        self.advance()
        if self.found != ")":
            self.operation(0, depth + 1)
            count = 1
        while self.found == ",":
            self.advance()
            self.operation(0, depth + 1)
            count += 1
        self.close(opened)
        _, least, most = _FUNCTIONS[name]
        if count < least or (most is not None and count > most):
            wanted = "one argument" if most == 1 else "at least one argument"
            _fail(self.text, at, f"{name} has {count} arguments", f"It takes {wanted}.")
        self.steps.append(Step("call", at, name=name, count=count))

    def close(self, opened: int) -> None:
        if self.kind == "end":
            _fail(self.text, opened, "this bracket is never closed", "Add a ')'.")
        if self.found != ")":
            self.unexpected()
        self.advance()
