"""`rcnet derive`: the transfer function in part names, poles and zeros, rules of thumb and their errors."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from ..errors import InputError
from .options import OK, examples, file_argument, json_option, print_json, quiet_option, spare
from .reading import load_asked, node_asked, reading_options

if TYPE_CHECKING:
    from collections.abc import Callable

    from ..derive import Derivation


@click.command(
    "derive",
    epilog=examples(
        "rcnet derive noise-filter.rc.toml",
        "rcnet derive noise-filter.rc.toml --of a --json",
        "rcnet derive band-pass.rc.toml -o band-pass.md",
    ),
)
@file_argument
@json_option
@reading_options
@quiet_option
@click.option("--of", "node", metavar="NODE", help='The output: a node, a pair "a b" or "v(a,b)".')
@click.option(
    "-o", "--output", type=click.Path(), help="Write to a file; its suffix (.json, .md, .tex) says how."
)
def command(file: str, as_json: bool, quiet: bool, node: str | None, output: str | None) -> int:
    """Derive the transfer function; hold rules of thumb against it."""
    from ..derive import derive
    from ..report.derivation import show_derivation
    from ..report.derivation_document import derivation_document
    from ..report.terminal import console
    from ..system.files import write_file

    as_text = None if output is None else _writer(output)
    spare(output, file)
    circuit = load_asked(file)
    done = derive(circuit, None if node is None else node_asked(circuit, node))
    if output is not None and as_text is not None:
        write_file(output, as_text(done))
    if as_json:
        print_json(derivation_document(done))
    elif output is None or quiet:
        show_derivation(done, console(), quiet=quiet)
    return OK


def _writer(output: str) -> Callable[[Derivation], str]:
    """How a derivation is written, as the file's suffix says."""
    from ..report.derivation_document import derivation_document
    from ..report.derivation_paper import latex, markdown
    from ..report.document import to_json

    suffix = Path(output).suffix.lower()
    known: dict[str, Callable[[Derivation], str]] = {
        ".json": lambda done: to_json(derivation_document(done)),
        ".md": markdown,
        ".tex": latex,
    }
    if suffix in known:
        return known[suffix]
    what = f"a derivation is not written as {suffix!r}." if suffix else "the file's name has no suffix."
    raise InputError(what, file=output, remedy="Let the name end in .json, .md or .tex.")
