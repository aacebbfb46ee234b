"""`rcnet new`: starter circuits to begin from."""

from __future__ import annotations

import difflib
import os
from pathlib import Path

import click

from ..errors import InputError, OutputError
from .options import OK, examples, json_option, print_json


@click.command("new", epilog=examples("rcnet new", "rcnet new noise-filter -o float-gauge.rc.toml"))
@click.argument("starter", required=False, metavar="[STARTER]")
@json_option
@click.option("-o", "--output", type=click.Path(), help="The file to make; STARTER.rc.toml here otherwise.")
@click.option("--quiet", is_flag=True, help="Print names only.")
def command(starter: str | None, output: str | None, as_json: bool, quiet: bool) -> int:
    """List the starter circuits, or copy one to begin from."""
    from ..resources import starters

    found = starters()
    if starter is None:
        _list(found, as_json=as_json, quiet=quiet)
        return OK
    if starter not in found:
        near = difflib.get_close_matches(starter, found, n=1)
        hint = f"Did you mean {near[0]!r}?" if near else "List them with `rcnet new`."
        raise InputError(f"there is no starter called {starter!r}.", remedy=hint)
    target = _copy(starter, found[starter], output)
    if as_json:
        print_json({"name": starter, "file": str(target)})
    elif quiet:
        click.echo(target)
    else:
        click.echo(f"{target} is yours to edit; then: rcnet confirm {target}")
    return OK


def _list(found: dict[str, Path], *, as_json: bool, quiet: bool) -> None:
    if quiet and not as_json:
        click.echo("\n".join(found))
        return
    from ..circuit import load_circuit_file

    titles = {name: load_circuit_file(path).title for name, path in found.items()}
    if as_json:
        print_json([{"name": name, "title": title} for name, title in titles.items()])
        return
    width = max((len(name) for name in titles), default=0) + 2
    for name, title in titles.items():
        click.echo(click.wrap_text(f"{name:<{width}}{title}", 80, "", " " * width))


def _copy(starter: str, source: Path, output: str | None) -> Path:
    from ..circuit import SUFFIX
    from ..system.files import read_text, write_file

    target = Path(output or f"{starter}{SUFFIX}")
    # The methods of Path raise where a name is too long; writing it tells that in words.
    if os.path.isdir(target):  # noqa: PTH112
        target /= f"{starter}{SUFFIX}"
    if not target.name.lower().endswith(".toml"):
        raise InputError(
            f"a circuit file is not called {target.name!r}: its name would make it a netlist.",
            remedy=f"Let the name end in {SUFFIX}, as {target.stem}{SUFFIX}.",
        )
    if os.path.lexists(target):
        raise OutputError(
            "a file of that name is there already.", file=str(target), remedy="Name another with --output."
        )
    write_file(target, read_text(source))
    return target
