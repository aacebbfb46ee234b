"""`rcnet simulate`: ngspice on the netlist, its results kept."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from .options import (
    FAILED,
    OK,
    anyway_option,
    examples,
    file_argument,
    folder_names,
    folder_option,
    json_option,
    opinion_option,
    print_json,
    quiet_option,
    silence_option,
    timeout_option,
)
from .reading import load_asked, reading_options


@click.command("simulate", epilog=examples("rcnet simulate noise-filter.rc.toml"))
@file_argument
@json_option
@reading_options
@quiet_option
@silence_option
@opinion_option(
    "ngspice", "ngspice-library", default="ngspice", about="Run ngspice as a program or as a library."
)
@timeout_option
@anyway_option
@folder_option
def command(
    file: str,
    as_json: bool,
    quiet: bool,
    output: str,
    silence: tuple[str, ...],
    second_opinion: Any,
    **how: Any,
) -> int:
    """Run ngspice on the netlist; keep its results in out/NAME/."""
    from ..confirm import simulate
    from ..findings import with_silence
    from ..report.document import simulation_document
    from ..report.terminal import console, show_findings, show_simulation

    folder = Path(output) / folder_names([file])[file]
    done = simulate(with_silence(load_asked(file), silence), folder, which=second_opinion, **how)
    if done.opinion is None:
        show_findings(done.check.errors, console(error=True))
        click.echo(
            "rcnet: nothing was simulated. Mend the errors, or go on all the same with --anyway.", err=True
        )
    if as_json:
        print_json(simulation_document(done))
    elif done.opinion is not None:
        show_simulation(done, console(), quiet=quiet)
    return FAILED if done.opinion is None else OK
