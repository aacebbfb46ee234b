"""The sandbox in which a deck's template runs; it is loaded only where a deck is made.

On top of Jinja's own sandbox, which keeps a template away from Python's insides: what is made is counted as
it is made, loops are counted turn by turn, and what could blow up between is no part of the language.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from types import TracebackType
from typing import Any

from jinja2 import BaseLoader, StrictUndefined, Template, TemplateError, TemplateSyntaxError, Undefined, nodes
from jinja2.exceptions import SecurityError, TemplateNotFound
from jinja2.sandbox import ImmutableSandboxedEnvironment

from ..errors import InputError, RcnetError

MAX_DECK_CHARACTERS = 64 * 1024 * 1024
MAX_STEPS = 20_000_000  # turns of all loops together
MAX_TEMPLATES = 100  # loaded for one deck, each counted as often as it is included
MAX_SECONDS = 60.0
LARGEST = 1e15  # beyond it whole numbers only take memory

# What a template may be made of. No macro, no assignment of a block, no joining of texts by `~`: with those a
# few lines could double a text thousands of times before a character of it is counted.
_ALLOWED = frozenset(
    """Template Output TemplateData Name Const Getattr Getitem Filter Test For If CondExpr Compare Operand And
    Or Not Neg Pos Add Sub Mul Div FloorDiv Mod Assign Include Extends Block Keyword""".split()  # noqa: SIM905
)
_SPELT = {
    "AssignBlock": "a set block",
    "CallBlock": "a call block",
    "Concat": "joining texts with ~",
    "Dict": "making a dict",
    "FilterBlock": "a filter block",
    "FromImport": "importing",
    "Import": "importing",
    "List": "making a list",
    "Macro": "a macro",
    "Pow": "raising to a power",
    "Slice": "cutting a slice",
    "With": "a with block",
}
_CALLED = frozenset(["range", "super"])
_FILTERS = ("default", "first", "last", "length", "lower", "upper")
_TESTS = ("defined", "undefined", "none", "even", "odd", "eq", "ne", "lt", "gt", "le", "ge")


class Limits:
    """What one deck may still use up: characters, steps, templates, time. Each method raises InputError."""

    def __init__(self) -> None:
        self.characters, self.steps, self.templates = MAX_DECK_CHARACTERS, MAX_STEPS, MAX_TEMPLATES
        self.deadline = time.monotonic() + MAX_SECONDS

    def take(self, characters: int) -> None:
        """Count text that was made."""
        self.characters -= characters
        if self.characters < 0:
            raise InputError(
                f"the deck is longer than {MAX_DECK_CHARACTERS} characters.", remedy="Let it write less."
            )
        self._look_at_the_clock()

    def counted(self, items: Iterable[Any]) -> Iterator[Any]:
        """The items one by one, each a step."""
        for item in items:
            self.steps -= 1
            if self.steps < 0:
                raise InputError(
                    f"the loops take more than {MAX_STEPS} turns.", remedy="Do not nest them so deep."
                )
            self._look_at_the_clock()
            yield item

    def joined(self, items: Iterable[Any], between: str = "") -> str:
        """The items as one text; counted before it is made."""
        texts = [str(printed(item)) for item in items]
        self.take(sum(map(len, texts)) + len(str(between)) * len(texts))
        return str(between).join(texts)

    def one_more_template(self) -> None:
        """Count a template that is loaded or included."""
        self.templates -= 1
        if self.templates < 0:
            raise InputError(
                f"more than {MAX_TEMPLATES} templates are included.", remedy="Does one include itself?"
            )

    def _look_at_the_clock(self) -> None:
        if time.monotonic() > self.deadline:
            raise InputError(f"it is not done after {MAX_SECONDS:g} s.", remedy="Let it do less.")


def printed(value: Any) -> Any:
    """The value, if it may be written into a deck: a text or a number. Raises InputError."""
    if isinstance(value, (str, int, float)):
        return value
    if isinstance(value, Undefined):
        str(value)  # raises, naming what is not defined
    raise InputError(
        f"a {type(value).__name__} cannot be printed as it is.", remedy="Loop over what it holds."
    )


class Sandbox(ImmutableSandboxedEnvironment):
    """Jinja with less in it; see the module.

    source: name -> text and path of a template; raises InputError, or TemplateNotFound
    """

    intercepted_binops = frozenset(["+", "-", "*", "/", "//", "%"])

    def __init__(self, source: Callable[[str], tuple[str, str]], limits: Limits) -> None:
        super().__init__(
            loader=_Loader(source),
            undefined=StrictUndefined,
            finalize=printed,
            trim_blocks=True,
            lstrip_blocks=True,
            keep_trailing_newline=True,
            auto_reload=False,
        )
        self.limits = limits
        self.filters = {name: self.filters[name] for name in _FILTERS}
        self.filters.update(counted=limits.counted, join=limits.joined)
        self.tests = {name: self.tests[name] for name in _TESTS}
        self.globals = {"range": self.globals["range"]}

    def compile(self, source: Any, name: Any = None, filename: Any = None, *rest: Any) -> Any:
        """A template as code, once nothing in it is forbidden, and its loops are counted."""
        tree = self.parse(source, name, filename) if isinstance(source, str) else source
        _require_allowed(tree, name, filename)
        for loop in list(tree.find_all(nodes.For)):
            counted = nodes.Filter(loop.iter, "counted", [], [], None, None, lineno=loop.lineno)
            counted.set_environment(self)
            loop.iter = counted
        return super().compile(tree, name, filename, *rest)

    def get_template(self, name: Any, *rest: Any, **more: Any) -> Template:
        """A template by name, counted."""
        self.limits.one_more_template()
        return super().get_template(name, *rest, **more)

    def call_binop(self, context: Any, operator: str, left: Any, right: Any) -> Any:
        """Arithmetic on numbers of ordinary size."""
        for side in (left, right):
            if isinstance(side, Undefined):
                str(side)
            if not isinstance(side, (int, float)) or abs(side) > LARGEST:
                raise InputError(
                    f"{operator!r} reckons with numbers up to {LARGEST:g} only.",
                    remedy="Print texts one after the other instead of adding them up.",
                )
        return super().call_binop(context, operator, left, right)


class _Loader(BaseLoader):
    def __init__(self, source: Callable[[str], tuple[str, str]]) -> None:
        self.source = source

    def get_source(self, environment: Any, template: str) -> tuple[str, str, Callable[[], bool]]:
        text, path = self.source(template)
        return text, path, lambda: True


def _require_allowed(tree: nodes.Template, name: str | None, filename: str | None) -> None:
    def refuse(node: nodes.Node, what: str) -> None:
        raise TemplateSyntaxError(f"{what} is not allowed in a deck's template", node.lineno, name, filename)

    for node in (tree, *tree.find_all(nodes.Node)):
        kind = type(node).__name__
        if isinstance(node, nodes.Call):
            called = node.node.name if isinstance(node.node, nodes.Name) else ""
            if called not in _CALLED or node.dyn_args or node.dyn_kwargs:
                refuse(node, "calling anything but range() and super()")
        elif isinstance(node, nodes.For) and node.recursive:
            refuse(node, "a recursive loop")
        elif isinstance(node, nodes.Tuple):
            if node.ctx == "load":
                refuse(node, "making a tuple")
        elif kind not in _ALLOWED:
            refuse(node, _SPELT.get(kind, f"{kind!r}"))


@contextmanager
def told(suffix: str, known: Callable[[], str]) -> Iterator[None]:
    """What goes wrong in a template, as an InputError with the template's file and line.

    suffix: by which a template's file is known in a traceback; known: what templates there are
    """
    try:
        yield
    except RcnetError as exc:
        raise exc.at(*_place(exc.__traceback__, suffix)) from exc
    except (TemplateError, TypeError, ValueError, ArithmeticError, LookupError, RecursionError) as exc:
        file, line = _place(exc.__traceback__, suffix)
        if isinstance(exc, TemplateSyntaxError):
            file, line = exc.filename or file, exc.lineno
        message, remedy = _words(exc, known)
        raise InputError(f"the template fails: {message}.", file=file, line=line, remedy=remedy) from exc


def _words(exc: Exception, known: Callable[[], str]) -> tuple[str, str]:
    message = " ".join((getattr(exc, "message", None) or str(exc) or type(exc).__name__).split()).rstrip(".")
    if isinstance(exc, TemplateNotFound):
        return f"there is no template called {str(exc.name)[:80]!r}", f"Templates: {known()}."
    if isinstance(exc, SecurityError):
        return message[:300], "A template only puts together the text it is given."
    if isinstance(exc, RecursionError):
        return "it includes itself, or is nested too deep", "Mend the template."
    return message[:300], "Mend the template."


def _place(trace: TracebackType | None, suffix: str) -> tuple[str | None, int | None]:
    """The innermost place in a template that a traceback passes."""
    found: tuple[str | None, int | None] = (None, None)
    while trace is not None:
        if trace.tb_frame.f_code.co_filename.endswith(suffix):
            found = (trace.tb_frame.f_code.co_filename, trace.tb_lineno)
        trace = trace.tb_next
    return found
