"""Options that several commands share, and how a command ends."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any, TypeVar

import click

from ..errors import RcnetError

Command = TypeVar("Command", bound=Callable[..., Any])

OK, FAILED, IMPOSSIBLE, INTERRUPTED = 0, 1, 2, 130

files_argument = click.argument("files", nargs=-1, required=True, type=click.Path(), metavar="FILE...")
file_argument = click.argument("file", type=click.Path(), metavar="FILE")
json_option = click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
quiet_option = click.option("--quiet", is_flag=True, help="Print one line for each circuit.")
strict_option = click.option("--strict", is_flag=True, help="Let warnings count as failures.")
anyway_option = click.option("--anyway", is_flag=True, help="Write the netlist although findings are errors.")
timeout_option = click.option(
    "--timeout",
    type=click.FloatRange(min=0, min_open=True),
    default=60.0,
    show_default=True,
    metavar="SECONDS",
    help="Time limit for each run of a simulator.",
)


def opinion_option(default: str) -> Callable[[Command], Command]:
    """`--second-opinion`; the choices are written out so that `--help` loads no simulator code."""
    return click.option(
        "--second-opinion",
        type=click.Choice(["auto", "ngspice", "ngspice-library", "read-back", "none"]),
        default=default,
        show_default=True,
        help="Who else is asked; auto is ngspice where it is installed, else the read-back.",
    )


def print_json(document: Any) -> None:
    """One JSON document on standard output."""
    from ..report.document import to_json

    click.echo(to_json(document), nl=False)


def complain(error: RcnetError) -> None:
    """An error on standard error, one line for each problem."""
    click.echo(f"rcnet: {error}" if len(error.problems) == 1 else str(error), err=True)


def error_document(error: RcnetError) -> dict[str, Any]:
    """An error as a JSON document."""
    return {
        "errors": [
            {"message": p.message, "file": p.file, "line": p.line, "remedy": p.remedy} for p in error.problems
        ]
    }


def with_progress(items: Iterable[Any], count: int, *, hidden: bool) -> Iterable[Any]:
    """The items one by one; where a person watches and there are many, with a bar on standard error."""
    if hidden or count < 5 or not sys.stderr.isatty():
        yield from items
        return
    from rich.progress import track

    from ..report.terminal import console

    yield from track(items, total=count, console=console(error=True), transient=True, description="circuits")


def folder_names(files: Iterable[str]) -> dict[str, str]:
    """Each file's NAME for its results folder; the folder's name goes before it where two would clash."""
    from ..circuit import circuit_name

    listed = list(dict.fromkeys(files))
    plain = [circuit_name(file) for file in listed]
    names: dict[str, str] = {}
    for file, name in zip(listed, plain, strict=True):
        clashes = sum(other.lower() == name.lower() for other in plain) > 1
        wanted = f"{Path(file).resolve().parent.name}-{name}" if clashes else name
        number, unique = 1, wanted
        while unique.lower() in {taken.lower() for taken in names.values()}:
            number += 1
            unique = f"{wanted}-{number}"
        names[file] = unique
    return names
