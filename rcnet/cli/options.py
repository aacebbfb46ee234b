"""Options that several commands share, and how a command speaks."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any, TypeVar

import click

from ..errors import OutputError, Problem, RcnetError

Command = TypeVar("Command", bound=Callable[..., Any])

OK, FAILED, IMPOSSIBLE, INTERRUPTED, TERMINATED = 0, 1, 2, 130, 143
_JSON = "rcnet.json"


def examples(*lines: str) -> str:
    """How a command is used, as the end of its help; the mark in front keeps click from joining the lines."""
    return "\b\n" + "\n".join(["Examples:", *(f"  {line}" for line in lines)])


def _note_json(ctx: click.Context, _: click.Parameter, wanted: bool) -> bool:
    # Whoever reports an error must know that standard output belongs to one JSON document.
    ctx.meta[_JSON] = wanted
    return wanted


def _known_rules(ctx: click.Context, param: click.Parameter, codes: tuple[str, ...]) -> tuple[str, ...]:
    if codes:
        from ..findings import unknown_code

        for code in codes:
            if (message := unknown_code(code)) is not None:
                raise click.BadParameter(message, ctx, param)
    return codes


files_argument = click.argument("files", nargs=-1, required=True, type=click.Path(), metavar="FILE...")
file_argument = click.argument("file", type=click.Path(), metavar="FILE")
json_option = click.option(
    "--json",
    "as_json",
    is_flag=True,
    is_eager=True,
    callback=_note_json,
    help="Print one JSON document and nothing else.",
)
quiet_option = click.option("--quiet", is_flag=True, help="Print one line for each circuit.")
strict_option = click.option("--strict", is_flag=True, help="Let warnings count as failures.")
anyway_option = click.option("--anyway", is_flag=True, help="Write the netlist although findings are errors.")
silence_option = click.option(
    "--silence",
    multiple=True,
    metavar="CODE",
    callback=_known_rules,
    help="Do not tell findings of this rule, nor let them count; may be given several times.",
)
folder_option = click.option(
    "-o", "--output", type=click.Path(), default="out", show_default=True, help="Folder for the results."
)
timeout_option = click.option(
    "--timeout",
    type=click.FloatRange(min=0, min_open=True),
    default=60.0,
    show_default=True,
    metavar="SECONDS",
    help="Time limit for each run of a simulator.",
)


def opinion_option(*choices: str, default: str, about: str) -> Callable[[Command], Command]:
    """`--second-opinion`; the choices are written out so that `--help` loads no simulator code."""
    return click.option(
        "--second-opinion", type=click.Choice(choices), default=default, show_default=True, help=about
    )


def print_json(document: Any) -> None:
    """One JSON document on standard output."""
    from ..report.document import to_json

    encoding = (getattr(sys.stdout, "encoding", None) or "ascii").lower().replace("-", "")
    click.echo(to_json(document, ascii_only=encoding != "utf8"), nl=False)


def complain(error: RcnetError, *, as_json: bool = False, codes: bool = False) -> None:
    """An error on standard error, one line for each problem; where JSON was asked for, as that too.

    Where a problem is known to stand somewhere on its line, the line follows with carets beneath. codes: the
    names of the broken rules are told too.
    """
    from ..report.plain import printable

    for problem in error.problems:
        code = f" [{problem.code}]" if codes and problem.code else ""
        click.echo(f"rcnet: {printable(str(problem) + code)}", err=True)
        if problem.text and problem.column is not None:
            _point(problem)
    if as_json:
        print_json(error_document(error))


def _point(problem: Problem) -> None:
    from ..report.excerpt import excerpt

    lines = excerpt(problem.text, problem.column, problem.width, room=76)
    for mark, line in zip("| ", lines, strict=False):
        click.echo(f"  {mark} {line}", err=True)


def json_wanted(ctx: click.Context) -> bool:
    """True if the command that ran under this context was asked for JSON."""
    return bool(ctx.meta.get(_JSON))


def error_document(error: RcnetError) -> dict[str, Any]:
    """An error as a JSON document."""
    return {
        "errors": [
            {
                "message": p.message,
                "file": p.file,
                "line": p.line,
                "remedy": p.remedy,
                "code": p.code,
                "column": p.column,
            }
            for p in error.problems
        ]
    }


def listed_error_document(error: RcnetError, file: str, files: Iterable[str]) -> dict[str, Any]:
    """An error as an element of the list for several files; as a document of its own for one file."""
    from ..circuit import circuit_name

    alone = len(list(files)) == 1
    named: dict[str, Any] = {} if alone else {"circuit": circuit_name(file), "verdict": None}
    return {**named, **error_document(error)}


def spare(output: str | None, *inputs: str, option: str = "--output") -> None:
    """Refuse an output that would replace an input, however its path is spelt. Raises OutputError."""
    if output is None:
        return
    for given in inputs:
        try:
            same = Path(output).samefile(given)
        except (OSError, ValueError):
            continue  # one of the two is not there; whoever reads or writes it says so
        if same:
            raise OutputError(
                f"this would overwrite the input {given!r}.",
                file=output,
                remedy=f"Choose another place with {option}.",
            )


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
    plain = [_safe(circuit_name(file)) for file in listed]
    names: dict[str, str] = {}
    for file, name in zip(listed, plain, strict=True):
        clashes = sum(other.lower() == name.lower() for other in plain) > 1
        wanted = f"{Path(os.path.abspath(file)).parent.name}-{name}" if clashes else name  # noqa: PTH100
        number, unique = 1, wanted
        while unique.lower() in {taken.lower() for taken in names.values()}:
            number += 1
            unique = f"{wanted}-{number}"
        names[file] = unique
    return names


def _safe(name: str) -> str:
    # A file called `...rc.toml` must not send its results to the folder above.
    return name if name.strip(". ") else "circuit"
