"""How much of a stranger's netlist is read: limits that are stated, and can be raised."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, fields, replace
from pathlib import Path

from ..errors import InputError


@dataclass(frozen=True, slots=True)
class Limits:
    """The limits of reading one netlist with everything it includes.

    parts: after all subcircuits are put in place; depth: subcircuits within one another
    files, nesting: files read, and how deep they include one another; bytes: of all of them together
    line: characters of a logical line; parameters: definitions kept (of subcircuits and models too)
    steps: of arithmetic in all its expressions
    """

    parts: int = 5_000_000
    depth: int = 40
    files: int = 500
    nesting: int = 20
    bytes: int = 256 * 1024 * 1024
    line: int = 1_000_000
    parameters: int = 100_000
    steps: int = 20_000_000


@dataclass(frozen=True, slots=True)
class Reading:
    """How a netlist is read.

    allow: folders beside the netlist's own from which files may be included
    linear_part: leave parts out that are not linear, instead of refusing them
    """

    allow: tuple[Path, ...] = ()
    linear_part: bool = False
    limits: Limits = field(default_factory=Limits)


# What is one within another takes stack as well as memory; this much there always is.
_MOST = {"depth": 150, "nesting": 150}


def raised(limits: Limits, settings: Iterable[str]) -> Limits:
    """The limits with some set anew, each as `parts=10000000`. Raises InputError."""
    known = {each.name for each in fields(Limits)}
    for setting in settings:
        key, _, number = setting.partition("=")
        if key not in known or not number.isascii() or not number.isdigit() or not 0 < int(number) < 10**12:
            raise InputError(
                f"the limit {setting!r} cannot be read.",
                remedy=f"Write NAME=NUMBER; names are {', '.join(sorted(known))}.",
            )
        if int(number) > _MOST.get(key, int(number)):
            raise InputError(
                f"the limit {setting!r} is too high.", remedy=f"Give {key} at most {_MOST[key]}."
            )
        limits = replace(limits, **{key: int(number)})
    return limits
