"""`rcnet new`: starter circuits to begin from."""

from __future__ import annotations

import difflib
from pathlib import Path

import click

from ..errors import InputError, OutputError
from .options import OK, json_option, print_json


@click.command("new")
@click.argument("starter", required=False, metavar="[STARTER]")
@click.option("-o", "--output", type=click.Path(), help="The file to make; STARTER.rc.toml here otherwise.")
@json_option
def command(starter: str | None, output: str | None, as_json: bool) -> int:
    """List the starter circuits, or copy one to begin from.

    \b
    rcnet new
    rcnet new noise-filter -o float-gauge.rc.toml
    """
    from ..circuit import SUFFIX, load_circuit_file
    from ..resources import starters
    from ..system.files import read_text, write_file

    found = starters()
    if starter is None:
        titles = {name: load_circuit_file(path).title for name, path in found.items()}
        if as_json:
            print_json([{"name": name, "title": title} for name, title in titles.items()])
        else:
            width = max(len(name) for name in titles)
            for name, title in titles.items():
                click.echo(f"{name:<{width}}  {title}")
        return OK
    if starter not in found:
        near = difflib.get_close_matches(starter, found, n=1)
        hint = f"Did you mean {near[0]!r}?" if near else "List them with `rcnet new`."
        raise InputError(f"there is no starter called {starter!r}.", remedy=hint)
    target = Path(output or f"{starter}{SUFFIX}")
    if target.exists():
        raise OutputError("this file exists already.", file=str(target), remedy="Name another with --output.")
    write_file(target, read_text(found[starter]))
    if as_json:
        print_json({"name": starter, "file": str(target)})
    else:
        click.echo(f"{target} is yours to edit; then: rcnet confirm {target}")
    return OK
