"""Netlist expressions: what stands in braces or quotes in a netlist, with the meaning ngspice gives it."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Final, NoReturn

from ..errors import QuantityError
from ._decimals import shown
from .expression import Step

LONGEST_NETLIST_EXPRESSION: Final = 2000  # characters
DEEPEST_NETLIST_EXPRESSION: Final = 100  # brackets and calls within one another
MOST_STEPS: Final = 100_000  # in one evaluation, the bodies of .func counted at every call

# ngspice-39 manual, section 2.9.5 "Syntax of expressions", for the names; argument counts where the manual
# leaves them open, angles (radians) and `log` (natural) as measured.
_FUNCTIONS: Final[Mapping[str, tuple[Callable[..., float], int]]] = {
    "sqrt": (math.sqrt, 1),
    "sqr": (lambda x: x * x, 1),
    "exp": (math.exp, 1),
    "ln": (math.log, 1),
    "log": (math.log, 1),
    "log10": (math.log10, 1),
    "sin": (math.sin, 1),
    "cos": (math.cos, 1),
    "tan": (math.tan, 1),
    "asin": (math.asin, 1),
    "acos": (math.acos, 1),
    "atan": (math.atan, 1),
    "arctan": (math.atan, 1),
    "sinh": (math.sinh, 1),
    "cosh": (math.cosh, 1),
    "tanh": (math.tanh, 1),
    "asinh": (math.asinh, 1),
    "acosh": (math.acosh, 1),
    "atanh": (math.atanh, 1),
    "abs": (math.fabs, 1),
    "sgn": (lambda x: float(x > 0) - float(x < 0), 1),
    "int": (lambda x: float(math.trunc(x)), 1),
    "nint": (lambda x: float(round(x)), 1),
    "floor": (lambda x: float(math.floor(x)), 1),
    "ceil": (lambda x: float(math.ceil(x)), 1),
    "min": (min, 2),
    "max": (max, 2),
    "pow": (math.pow, 2),
    "pwr": (lambda x, y: math.pow(math.fabs(x), y), 2),
    "ternary_fcn": (lambda x, y, z: y if x != 0 else z, 3),
}
_RANDOM: Final = frozenset(["gauss", "agauss", "unif", "aunif", "limit"])
_HOW_TO_CHOOSE: Final = "A choice is written 'condition ? one : other'"
_COUNTS: Final = ("no argument", "one argument", "two arguments", "three arguments")

_OPERATORS: Final[Mapping[str, Callable[[float, float], float]]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    # Not fmod: ngspice rounds the quotient, so that 7%0.1 is 0.
    "%": lambda a, b: a - b * math.trunc(a / b),
    "\\": lambda a, b: float(math.trunc(math.fabs(a / b))),
    # The base loses its sign: (-8)^3 is 512.
    "^": lambda a, b: math.pow(math.fabs(a), b),
    "==": lambda a, b: float(a == b),
    "!=": lambda a, b: float(a != b),
    "<": lambda a, b: float(a < b),
    ">": lambda a, b: float(a > b),
    "<=": lambda a, b: float(a <= b),
    ">=": lambda a, b: float(a >= b),
}
# How tightly each operator binds; all of them, powers too, group from the left.
_BINDING: Final[Mapping[str, int]] = {
    "^": 7,
    **dict.fromkeys(["*", "/", "%", "\\"], 6),
    **dict.fromkeys(["+", "-"], 5),
    **dict.fromkeys(["==", "!=", "<", ">", "<=", ">="], 4),
    "&&": 3,
    "||": 2,
    **dict.fromkeys(["?", ":", "?:"], 1),
}
_CHOICE: Final = _BINDING["?"]
_ALIASES: Final = {"**": "^", "<>": "!="}
# Directly behind these, ngspice 39 does not see that a name is a .func.
_HIDING: Final = frozenset(["%", "&&", "!", "?"])
# An argument of a .func with none of these is copied into the body as it stands, even if it holds "==".
_GUARDING: Final = re.compile(r"[-+*/^%\\<>!?:&|()]")

_NAME: Final = r"[A-Za-z_][A-Za-z0-9_.\[\]]*"
_TOKEN: Final = re.compile(
    r"[ \t]*(?:(?P<number>0[xX](?:[0-9A-Fa-f]+\.?[0-9A-Fa-f]*|\.[0-9A-Fa-f]+)(?:[pP][+-]?[0-9]+)?"
    r"|(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    rf"|(?P<name>{_NAME})"
    r"|(?P<mark>\*[ \t]*\*|<[ \t]*[=>]|[>=!][ \t]*=|&[ \t]*&|\|[ \t]*\||[-+*/%\\^<>!?:(),])"
    r"|(?P<end>\Z))"
)
# ngspice passes over any character beyond ASCII; only those that people write as units are let through here.
_LETTERS: Final = re.compile("[A-Za-z_µ\u2126\u03a9]*")
_SCALES: Final = {
    "t": 1e12,
    "g": 1e9,
    "k": 1e3,
    "m": 1e-3,
    "u": 1e-6,
    "µ": 1e-6,
    "n": 1e-9,
    "p": 1e-12,
    "f": 1e-15,
}
_FUNCTION: Final = re.compile(rf"({_NAME})[ \t]*\(([^()]*)\)[ \t]*=?[ \t]*(.*)", re.DOTALL)


@dataclass(frozen=True, slots=True)
class _Call(Step):
    """A function call, with what matters only if the function is a .func, because ngspice replaces its text.

    behind: the operator before it that hides it from ngspice, or ""
    bare: an argument that ngspice copies without brackets around it, or ""
    """

    behind: str = ""
    bare: str = ""


@dataclass(frozen=True, slots=True)
class _Failure:
    """A value that does not exist; it is an error only if it is needed."""

    message: str
    remedy: str


_Value = float | _Failure


@dataclass(frozen=True, slots=True)
class NetlistExpression:
    """A parsed netlist expression.

    text: as written, without the braces or quotes around it
    steps: the expression in postfix order
    names: the parameters it needs, in lower case; those a .func needs in its body are not among them
    """

    text: str
    steps: tuple[Step, ...] = field(repr=False)
    names: frozenset[str]

    def evaluate(
        self,
        names: Callable[[str], float],
        functions: Mapping[str, NetlistFunction] = MappingProxyType({}),
        work: Callable[[int], None] | None = None,
    ) -> float:
        """The value ngspice 39 computes, a finite float.

        names: gives the value of a parameter by its lower-case name; what it raises passes through
        functions: every .func by its lower-case name; one named as a built-in function takes its place
        work: is told how many steps are about to be taken; what it raises passes through

        A value that does not exist (division by zero, overflow, root of a negative number) is an error unless
        a choice `?:`, an `&&` or an `||` is decided without it. Raises QuantityError, with the place, for
        that, for unknown functions, random ones and those that call themselves, and beyond 100 000 steps.
        """
        value = _Evaluation(names, functions, work).value(self, {})
        if isinstance(value, _Failure):
            raise QuantityError(value.message, remedy=value.remedy)
        return value


@dataclass(frozen=True, slots=True)
class NetlistFunction:
    """A `.func`: `name` and `arguments` in lower case; the arguments are among the names of `body`."""

    name: str
    arguments: tuple[str, ...]
    body: NetlistExpression


class _Evaluation:
    """One evaluation, with what its steps share: the parameters, the functions, the steps left."""

    def __init__(
        self,
        names: Callable[[str], float],
        functions: Mapping[str, NetlistFunction],
        work: Callable[[int], None] | None,
    ) -> None:
        self.names = names
        self.functions = functions
        self.work = work
        self.left = MOST_STEPS
        self.active: list[str] = []  # the functions whose bodies are being computed

    def value(self, expression: NetlistExpression, bound: Mapping[str, _Value]) -> _Value:
        if self.work is not None:
            self.work(len(expression.steps))
        self.left -= len(expression.steps)
        if self.left < 0:
            raise QuantityError(
                f"the functions in expression {shown(expression.text)} call one another more than"
                f" {MOST_STEPS} steps long.",
                remedy="Write the functions in simpler terms.",
            )
        stack: list[_Value] = []
        for step in expression.steps:
            if step.act == "number":
                stack.append(step.value)
            elif step.act == "name":
                inside = step.name in bound
                stack.append(bound[step.name] if inside else self.parameter(expression.text, step))
            else:
                first = len(stack) - step.count
                taken = stack[first:]
                del stack[first:]
                act = self.call if step.act == "call" else _operate
                stack.append(act(expression.text, step, taken))
        return stack[0]

    def parameter(self, text: str, step: Step) -> _Value:
        given = self.names(step.name)
        try:
            value = float(given)
        except (OverflowError, TypeError, ValueError):
            value = math.nan
        if math.isfinite(value):
            return value
        says = f"the parameter {step.name!r} is {shown(given)}, not a finite number"
        return _Failure(_message(text, step.at, says), "Give it a finite value.")

    def call(self, text: str, step: Step, taken: list[_Value]) -> _Value:
        function = self.functions.get(step.name)
        if function is None:
            return _built_in(text, step, taken)
        _check_replaced(text, step)
        _count(text, step, len(function.arguments))
        if step.name in self.active:
            says = f"the function {step.name!r} calls itself"
            _fail(text, step.at, says, "Define it without itself; ngspice would never end.")
        if len(self.active) >= DEEPEST_NETLIST_EXPRESSION:
            says = f"functions call one another more than {DEEPEST_NETLIST_EXPRESSION} levels deep"
            _fail(text, step.at, says, "Write the functions in simpler terms.")
        self.active.append(step.name)
        value = self.value(function.body, dict(zip(function.arguments, taken, strict=True)))
        self.active.pop()
        return value


def _check_replaced(text: str, step: Step) -> None:
    if isinstance(step, _Call) and step.behind:
        says = f"ngspice does not see the function {step.name!r} directly behind {step.behind!r}"
        _fail(text, step.at, says, f"Put brackets around it: '({step.name}(...))'.")
    if isinstance(step, _Call) and step.bare:
        says = f"ngspice copies the argument {step.bare!r} into the function {step.name!r} without brackets"
        _fail(text, step.at, says, f"Put brackets around it: '({step.bare})'.")


def _operate(text: str, step: Step, taken: Sequence[_Value]) -> _Value:
    if step.act in ("&&", "||"):
        deciding = step.act == "||"  # the truth that settles it, whatever the other side is
        if any(not isinstance(value, _Failure) and (value != 0) == deciding for value in taken):
            return float(deciding)
        return next((value for value in taken if isinstance(value, _Failure)), float(not deciding))
    if step.act == "?:":
        return _choose(taken)
    if step.act == "!":
        return taken[0] if isinstance(taken[0], _Failure) else float(taken[0] == 0)
    return _compute(text, step, _OPERATORS[step.act], taken)


def _choose(taken: Sequence[_Value]) -> _Value:
    condition, true, false = taken
    if isinstance(condition, _Failure):
        return condition
    return true if condition != 0 else false


def _built_in(text: str, step: Step, taken: Sequence[_Value]) -> _Value:
    if step.name in _RANDOM:
        says = f"{step.name}() draws a random number, so that every run differs"
        _fail(text, step.at, says, "Write the nominal value instead.", "parameter-random")
    if step.name not in _FUNCTIONS:
        known = f"Known functions: {', '.join(sorted(_FUNCTIONS))}."
        _fail(text, step.at, f"{step.name!r} is no function", f"{known} Others need a .func line.")
    function, wanted = _FUNCTIONS[step.name]
    _count(text, step, wanted)
    return _choose(taken) if step.name == "ternary_fcn" else _compute(text, step, function, taken)


def _count(text: str, step: Step, wanted: int) -> None:
    if step.count == wanted:
        return
    takes = _COUNTS[wanted] if wanted < len(_COUNTS) else f"{wanted} arguments"
    given = _COUNTS[step.count] if step.count < len(_COUNTS) else f"{step.count} arguments"
    _fail(text, step.at, f"{step.name} has {given}", f"It takes {takes}.")


def _compute(text: str, step: Step, function: Callable[..., float], taken: Sequence[_Value]) -> _Value:
    numbers: list[float] = []
    for value in taken:
        if isinstance(value, _Failure):
            return value
        numbers.append(value)
    try:
        result = function(*numbers)
    except OverflowError:
        result = math.inf
    except (ValueError, ZeroDivisionError):
        result = math.nan
    if math.isfinite(result):
        return result
    says = _why_not_finite(step, numbers, result)
    return _Failure(_message(text, step.at, says), "Check the expression and the values in it.")


def _why_not_finite(step: Step, taken: Sequence[float], result: float) -> str:
    called = step.name or step.act
    if math.isinf(result):
        return f"{called!r} gives a number beyond 1.8e308"
    if called in ("/", "%", "\\"):
        return f"{called!r} divides by zero"
    if called in ("^", "pow", "pwr") and taken[0] == 0:
        return f"0 to the power {taken[1]!r} divides by zero"
    return f"{called}({', '.join(map(repr, taken))}) has no finite real value"


def _message(text: str, at: int, says: str) -> str:
    return f"expression {shown(text)}, at character {at}: {says}."


def _fail(text: str, at: int, says: str, remedy: str, code: str | None = None) -> NoReturn:
    raise QuantityError(_message(text, at, says), remedy=remedy, code=code)


def parse_netlist_expression(text: str) -> NetlistExpression:
    r"""What stands within braces or quotes in a netlist, as a `NetlistExpression`.

    Operators from the tightest: `!`, `^` or `**`, `* / % \`, `+ -`, comparisons (1 or 0), `&&`, `||`, `?:`.
    All but `?:` group from the left (2^3^2 is 64). A sign that begins the text, a bracket or an argument
    binds as in a sum (-2^2 is -4); a minus behind an operator belongs to its number (2*-3^2 is 18). `^` drops
    the sign of its base, `\` that of its quotient. Numbers are decimal or 0x..., with the suffixes
    T G MEG K M U N P F in any case; letters behind are passed over (1mil is 0.001).
    Source: ngspice-39 manual, section 2.9.5, and where it is silent what ngspice 39 computes.

    Refused is what ngspice refuses, and what it accepts but computes as nobody reads it: an operator at the
    start, `2*-(3)`, a choice within a choice without brackets, a comma outside a call. Raises QuantityError,
    with the place, for these and beyond 2000 characters or 100 levels.
    """
    _check_text(text, "expression")
    if not text.strip():
        raise QuantityError(f"expression {shown(text)} is empty.", remedy="Write it as '2*r0'.")
    parser = _Parser(text)
    parser.whole(0)
    if parser.kind != "end":
        parser.unexpected()
    steps = tuple(parser.steps)
    return NetlistExpression(text, steps, frozenset(step.name for step in steps if step.act == "name"))


def parse_netlist_function(text: str) -> NetlistFunction:
    """The text behind `.func`, as a `NetlistFunction`: `f(a,b) {a*b}`, or with `=` before the body.

    The body may also stand in quotes, or bare.

    Raises QuantityError for what is no such text, and for arguments that are named twice or as a function.
    """
    _check_text(text, "function")
    match = _FUNCTION.fullmatch(text.strip())
    if match is None:
        raise QuantityError(
            f"function {shown(text)} has no name with its arguments in brackets.",
            remedy="Write it as 'f(a,b) {a*b}'.",
        )
    name, listed, body = match.groups()
    arguments = tuple(argument.strip().lower() for argument in listed.split(",")) if listed.strip() else ()
    for place, argument in enumerate(arguments):
        if not re.fullmatch(_NAME, argument):
            says, remedy = "is no name", "Write names such as a or r0, with commas between."
        elif argument in arguments[:place]:
            says, remedy = "stands there twice", "Give every argument its own name."
        elif argument in _FUNCTIONS or argument in _RANDOM:
            says, remedy = "is the name of a function", "Choose another name."
        else:
            continue
        raise QuantityError(f"function {shown(text)}: the argument {shown(argument)} {says}.", remedy=remedy)
    if len(body) > 1 and body[0] + body[-1] in ("{}", "''"):
        body = body[1:-1]
    if not body.strip():
        raise QuantityError(f"function {shown(text)} has no body.", remedy="Write it as 'f(a,b) {a*b}'.")
    return NetlistFunction(name.lower(), arguments, parse_netlist_expression(body))


def _check_text(text: object, what: str) -> None:
    if not isinstance(text, str):
        raise QuantityError(f"{what} {shown(text)} is not text.", remedy="Give the text from the netlist.")
    if len(text) > LONGEST_NETLIST_EXPRESSION:
        raise QuantityError(
            f"{what} {shown(text)} is longer than {LONGEST_NETLIST_EXPRESSION} characters.",
            remedy="Divide it among several .param lines.",
        )


def _tokens(text: str) -> Iterator[tuple[str, str, int, float]]:
    """Kind ("number", "name", "mark", "end"), text, place (from 1) and value of each token up to the end."""
    position = 0
    while True:
        match = _TOKEN.match(text, position)
        if match is None:
            position += len(text[position:]) - len(text[position:].lstrip(" \t"))
            character = text[position]
            says = f"{character!r} has no meaning in a netlist expression"
            _fail(text, position + 1, says, _instead(character))
        kind = str(match.lastgroup)
        found, start, position, value = match.group(kind), match.start(kind), match.end(), 0.0
        if kind == "number":
            value, position = _number(text, start, position)
        elif kind == "name":
            _no_glue(text, start, position)
        elif kind == "mark":
            found = re.sub("[ \t]", "", found)
            found = _ALIASES.get(found, found)
        yield kind, found, start + 1, value
        if kind == "end":
            return


def _instead(character: str) -> str:
    if character in "×·":
        return "Multiply with '*'."
    if character in "−–":
        return "Subtract with '-'."
    if character in "[]{}":
        return "Use round brackets."
    if character in "=&|#":
        return "Compare with '==' or '!=', combine with '&&' or '||'."
    return "Use numbers, parameter names, functions, operators and round brackets."


def _no_glue(text: str, start: int, end: int) -> None:
    if end < len(text) and (text[end].isalnum() or text[end] in "_.[]"):
        rest = re.match(r"[\w.\[\]]*", text[end:])
        glued = text[start:end] + (rest.group() if rest else "")
        says = f"{glued!r} is neither a number nor a name"
        _fail(text, start + 1, says, "A number has one point and its suffix at the end, as in '4.7k'.")


def _number(text: str, start: int, end: int) -> tuple[float, int]:
    """The number at `start` whose digits end at `end`, and where the letters behind it end."""
    digits = text[start:end].lower()
    letters = _LETTERS.match(text, end)
    suffix, stop = (letters.group().lower(), letters.end()) if letters else ("", end)
    _no_glue(text, start, stop)
    hexadecimal = digits.startswith("0x")
    mark, sample = ("p", "0x1p3") if hexadecimal else ("e", "1e3")
    # Behind an exponent's letter ngspice swallows a sign even if no digit follows: 1e+a would be 1.
    if suffix.startswith(mark) and mark not in digits[2 * hexadecimal :]:
        _fail(
            text,
            start + 1,
            f"the exponent of {text[start:stop]!r} has no digits",
            f"Write one as in '{sample}'.",
        )
    if digits == "0" and suffix.startswith("x"):
        _fail(text, start + 1, f"{text[start:stop]!r} has no hexadecimal digits", "Write it as '0x1f'.")
    # A product of two doubles, not the double nearest to what is written, because ngspice has it so.
    scale = 1e6 if suffix.startswith("meg") else _SCALES.get(suffix[:1], 1.0)
    try:
        value = (float.fromhex(digits) if hexadecimal else float(digits)) * scale
    except OverflowError:
        value = math.inf
    mantissa = digits[2:].partition("p")[0] if hexadecimal else digits.partition("e")[0]
    if math.isinf(value):
        _fail(text, start + 1, f"{shown(text[start:stop])} is beyond 1.8e308", "Check the exponent.")
    if value == 0 and mantissa.strip("0."):
        _fail(text, start + 1, f"{shown(text[start:stop])} is below 4.9e-324", "Check the exponent.")
    return value, stop


class _Parser:
    """From tokens to postfix steps, with the operators of a bracket on a stack (Dijkstra 1961)."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.steps: list[Step] = []
        self._tokens = _tokens(text)
        self.before = ""  # the token before this one
        self.kind, self.found, self.at, self.value = next(self._tokens)

    def advance(self) -> None:
        self.before = self.found
        self.kind, self.found, self.at, self.value = next(self._tokens)

    def unexpected(self) -> NoReturn:
        if self.kind == "end":
            _fail(self.text, self.at, "the expression ends too early", "Add what is missing.")
        remedies = {
            ")": "Remove the bracket, or open one before.",
            ",": "Only functions take commas; a number has a point.",
            ":": f"{_HOW_TO_CHOOSE}; put brackets around one within another.",
            "?": f"{_HOW_TO_CHOOSE}; put brackets around one within another.",
            "+": "Put brackets around the signed operand, or drop the plus.",
            "-": "Put brackets around the signed operand.",
        }
        remedy = remedies.get(self.found, "An operator or an operand is missing before it.")
        _fail(self.text, self.at, f"{self.found!r} does not belong here", remedy)

    def whole(self, depth: int) -> None:
        """All of the text, of a bracket or of an argument: here alone a sign binds as in a sum."""
        if depth > DEEPEST_NETLIST_EXPRESSION:
            says = f"more than {DEEPEST_NETLIST_EXPRESSION} levels within one another"
            _fail(self.text, self.at, says, "Divide it among several .param lines.")
        pending: list[Step] = []  # operators that wait for their right operand, the tightest last
        if self.kind == "mark" and self.found in ("+", "-"):
            self.steps.append(Step("number", self.at, value=0.0))
            pending.append(Step(self.found, self.at, count=2))
            self.advance()
        self.operand(depth)
        while self.kind == "mark" and self.found in _BINDING:
            self.operator(pending)
            self.advance()
            self.operand(depth)
        self.settle(pending, 0)

    def operator(self, pending: list[Step]) -> None:
        binding = _BINDING[self.found]
        if binding > _CHOICE:
            self.settle(pending, binding - 1)
            pending.append(Step(self.found, self.at, count=2))
            return
        self.settle(pending, _CHOICE)
        undecided = bool(pending) and pending[-1].act == "?"
        if undecided == (self.found == "?"):
            self.unexpected()
        if undecided:
            pending[-1] = Step("?:", pending[-1].at, count=3)
        else:
            pending.append(Step("?", self.at))

    def settle(self, pending: list[Step], weakest: int) -> None:
        """Move the pending operators that bind more tightly than `weakest` to the steps."""
        while pending and _BINDING[pending[-1].act] > weakest:
            step = pending.pop()
            if step.act == "?":
                _fail(self.text, step.at, "this '?' has no ':'", f"{_HOW_TO_CHOOSE}.")
            self.steps.append(step)

    def operand(self, depth: int) -> None:
        negations: list[int] = []
        while self.found == "!":
            negations.append(self.at)
            self.advance()
        kind, found, at, value, before = self.kind, self.found, self.at, self.value, self.before
        if kind == "end" or (kind == "mark" and found != "(" and (found != "-" or negations)):
            self.unexpected()
        self.advance()
        if kind == "number":
            self.steps.append(Step("number", at, value=value))
        elif kind == "name" and self.found == "(":
            self.call(found.lower(), at, depth, before)
        elif kind == "name":
            self.parameter(found.lower(), at)
        elif found == "(":
            self.whole(depth + 1)
            self.close(at)
        else:
            self.negative_number(at)
        self.steps.extend(Step("!", place, count=1) for place in reversed(negations))

    def negative_number(self, at: int) -> None:
        # ngspice gives this sign to the next number wherever it stands: 2*-(1)^2 would be 2*1^-2.
        if self.kind != "number":
            says = "ngspice applies a minus behind an operator to nothing but a number"
            _fail(self.text, at, says, "Put brackets around it and its operand: '2*(-a)'.")
        self.steps.append(Step("number", at, value=-self.value))
        self.advance()

    def parameter(self, name: str, at: int) -> None:
        if name in _FUNCTIONS or name in _RANDOM:
            remedy = f"Write '{name}(...)'; a parameter cannot have this name."
            _fail(self.text, at, f"the function {name} needs its arguments in brackets", remedy)
        self.steps.append(Step("name", at, name=name))

    def call(self, name: str, at: int, depth: int, before: str) -> None:
        opened, count, bare = self.at, 0, ""
        self.advance()
        while self.found != ")" or count:
            begin = self.at - 1
            self.whole(depth + 1)
            count += 1
            argument = self.text[begin : self.at - 1].strip()
            bare = argument if "=" in argument and not _GUARDING.search(argument) else bare
            if self.found != ",":
                break
            self.advance()
        self.close(opened)
        behind = before if before in _HIDING else ""
        self.steps.append(_Call("call", at, name=name, count=count, behind=behind, bare=bare))

    def close(self, opened: int) -> None:
        if self.kind == "end":
            _fail(self.text, opened, "this bracket is never closed", "Add a ')'.")
        if self.found != ")":
            self.unexpected()
        self.advance()
