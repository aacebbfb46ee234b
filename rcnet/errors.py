"""The errors rcnet raises: what went wrong, where, and what to do about it.

RcnetError
├── InputError           a file, an option or a value from outside is wrong
│   ├── QuantityError    a number with a prefix and a unit cannot be read
│   ├── CircuitError     a circuit file, a netlist or a call describes no valid circuit
│   └── ResultsError     a results file cannot be read, or is not about this circuit
├── UnsolvableError      the network has no unique solution
├── UndecidedError       a measure does not exist for this network
├── SimulatorError       a simulator is missing, failed, or did something else than asked
└── OutputError          a result cannot be written
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing wrong, with its place and its remedy.

    `line` counts from 1 and is None where no line can be named. `remedy` is a sentence saying what to do.
    code: the name of the rule that was broken, where it has one
    text: the line itself; column, width: where on it the trouble stands, from 1, None where that is not known
    """

    message: str
    file: str | None = None
    line: int | None = None
    remedy: str | None = None
    code: str | None = None
    text: str = ""
    column: int | None = None
    width: int = 1

    def __str__(self) -> str:
        place = ""
        if self.file is not None:
            place = f"{self.file}:{self.line}: " if self.line is not None else f"{self.file}: "
        elif self.line is not None:
            place = f"line {self.line}: "
        tail = f" {self.remedy}" if self.remedy else ""
        return f"{place}{self.message}{tail}"


class RcnetError(Exception):
    """The root of everything rcnet raises on purpose.

    Parameters
      message: what is wrong, a full sentence with its stop
      file, line: the place, where there is one
      remedy: what to do, a full sentence
      code: the name of the rule that was broken, where it has one
      problems: several problems found at once; the first one fills the four fields above
    """

    def __init__(
        self,
        message: str = "",
        *,
        file: str | None = None,
        line: int | None = None,
        remedy: str | None = None,
        code: str | None = None,
        problems: Iterable[Problem] = (),
    ) -> None:
        self.problems: tuple[Problem, ...] = tuple(problems) or (Problem(message, file, line, remedy, code),)
        first = self.problems[0]
        self.message, self.file, self.line, self.remedy = first.message, first.file, first.line, first.remedy
        super().__init__("\n".join(str(problem) for problem in self.problems))

    def __reduce__(self) -> tuple[object, ...]:
        # Errors cross process borders (the library opinion runs in a child), so they must pickle whole.
        return (_rebuild, (type(self), self.problems))

    def at(self, file: str | None = None, line: int | None = None) -> RcnetError:
        """The same error with a place filled in wherever a problem has none yet."""
        placed = (
            replace(
                p,
                file=p.file if p.file is not None else file,
                line=p.line if p.line is not None else line,
            )
            for p in self.problems
        )
        error = type(self)(problems=placed)
        error.__dict__.update({key: value for key, value in self.__dict__.items() if key == "partial"})
        return error


def _rebuild(kind: type[RcnetError], problems: tuple[Problem, ...]) -> RcnetError:
    return kind(problems=problems)


class InputError(RcnetError):
    """A file, an option or a value from outside is wrong."""


class QuantityError(InputError):
    """A number with a prefix and a unit cannot be read."""


class CircuitError(InputError):
    """A circuit file, a netlist or a call describes no valid circuit.

    partial: a Circuit of what could be read of a netlist all the same, or None
    """

    partial: Any = None


class ResultsError(InputError):
    """A results file cannot be read, or is not about this circuit."""


class UnsolvableError(RcnetError):
    """The network has no unique solution, and the parts and nodes to blame are named."""


class UndecidedError(RcnetError):
    """A measure does not exist for this network (no such crossing, no dc gain), or cannot be computed yet."""


class SimulatorError(RcnetError):
    """A simulator is missing, failed, or did something else than it was asked."""


class OutputError(RcnetError):
    """A result cannot be written."""
