"""Options that say how FILE is read, and reading it so."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from ..circuit import Circuit

Command = TypeVar("Command", bound=Callable[..., Any])

_KEY = "rcnet.reading"


def _keep(ctx: click.Context, param: click.Parameter, value: Any) -> Any:
    # Every command reads files, and none has anything else to do with these.
    ctx.meta.setdefault(_KEY, {})[param.name] = value
    return value


_OPTIONS = (
    click.option(
        "--allow",
        multiple=True,
        type=click.Path(file_okay=False),
        metavar="DIR",
        expose_value=False,
        callback=_keep,
        help="Let a netlist include files from this folder too; may be given several times.",
    ),
    click.option(
        "--linear-part",
        is_flag=True,
        expose_value=False,
        callback=_keep,
        help="Leave parts of a netlist out that are not linear, and take the rest.",
    ),
    click.option(
        "--limit",
        multiple=True,
        metavar="NAME=NUMBER",
        expose_value=False,
        callback=_keep,
        help="Raise a limit of reading: parts, depth, files, nesting, bytes, line, parameters, steps.",
    ),
)


def reading_options(command: Command) -> Command:
    """`--allow`, `--linear-part` and `--limit`, for every command that takes FILE."""
    for option in reversed(_OPTIONS):
        command = option(command)
    return command


def load_asked(file: str) -> Circuit:
    """The circuit in a file, read as the command line says. Raises InputError."""
    from pathlib import Path

    from ..loading import load

    asked = click.get_current_context().meta.get(_KEY, {})
    if not any(asked.values()):
        return load(file)
    from ..errors import InputError
    from ..netlist import Limits, Reading, raised

    for folder in asked["allow"]:
        if not Path(folder).is_dir():
            raise InputError(f"--allow names {folder!r}, which is no folder.", remedy="Name a folder.")
    limits = raised(Limits(), asked["limit"])
    return load(file, Reading(tuple(Path(folder) for folder in asked["allow"]), asked["linear_part"], limits))


def node_asked(circuit: Circuit, given: str) -> str:
    """Nodes as the circuit calls them: `v(a,b)` is the pair "a b", and netlists know no case."""
    voltage = re.fullmatch(r"\s*v\(([^()]*)\)\s*", given, re.IGNORECASE)
    words = voltage[1].replace(",", " ").split() if voltage else given.split()
    if circuit.origin == "netlist":
        folded = {node.lower(): node for node in circuit.network.nodes}
        words = [word if circuit.network.has_node(word) else folded.get(word.lower(), word) for word in words]
    return " ".join(words) if words else given
