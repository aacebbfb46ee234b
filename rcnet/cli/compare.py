"""`rcnet compare`: a results file held against the exact curves."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from .granting import asked_grant, granting_options
from .options import FAILED, OK, examples, file_argument, json_option, print_json, quiet_option, spare
from .reading import load_asked, reading_options

if TYPE_CHECKING:
    from ..compare import Comparison
    from ..report.comparison_picture import Kind

_PICTURES: dict[str, Kind] = {".png": "png", ".svg": "svg", ".pdf": "pdf"}


@click.command(
    "compare",
    epilog=examples(
        "ngspice -b -r results.raw noise-filter.cir", "rcnet compare noise-filter.rc.toml results.raw"
    ),
)
@file_argument
@click.argument("results", type=click.Path(), metavar="RESULTS")
@json_option
@reading_options
@granting_options
@quiet_option
@click.option(
    "-o",
    "--output",
    type=click.Path(),
    help="Write the comparison there as JSON; to a name in .png, .svg or .pdf, a picture of it.",
)
def command(file: str, results: str, as_json: bool, quiet: bool, output: str | None) -> int:
    """Hold a results file (.raw, .csv) against the exact curves.

    Tells where the two differ, and by how much; what the simulator's own steps, constants and rounding make
    of a sound circuit is foreseen and is no difference.
    """
    from ..compare import compare
    from ..curves import read_results
    from ..report.document import comparison_document
    from ..report.terminal import console, show_comparison
    from ..system.files import write_file

    spare(output, file, results)
    grant = asked_grant()
    comparison = compare(load_asked(file), read_results(results), who=Path(results).name, grant=grant)
    if output is not None:
        write_file(output, _written(comparison, output))
    if as_json:
        print_json(comparison_document(comparison))
    else:
        show_comparison(comparison, console(), quiet=quiet)
    return OK if comparison.verdict == "agree" else FAILED


def _written(comparison: Comparison, output: str) -> str | bytes:
    """What goes into a file of that name: a picture or a JSON document."""
    from ..report.comparison_picture import comparison_picture
    from ..report.document import comparison_document, to_json

    kind = _PICTURES.get(Path(output).suffix.lower())
    if kind is None:
        return to_json(comparison_document(comparison))
    return comparison_picture(comparison, kind)
