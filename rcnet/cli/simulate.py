"""`rcnet simulate`: ngspice on the netlist, its results kept."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from .options import FAILED, OK, anyway_option, file_argument, folder_names, json_option, print_json, timeout_option


@click.command("simulate")
@file_argument
@json_option
@click.option(
    "--second-opinion",
    type=click.Choice(["ngspice", "ngspice-library"]),
    default="ngspice",
    show_default=True,
    help="Run ngspice as a program or as a library.",
)
@timeout_option
@anyway_option
@click.option("-o", "--output", type=click.Path(), default="out", show_default=True, help="Folder for the results.")
def command(file: str, as_json: bool, second_opinion: Any, timeout: float, anyway: bool, output: str) -> int:
    """Run ngspice on a circuit's netlist and keep its results in out/NAME/.

    \b
    rcnet simulate noise-filter.rc.toml
    """
    from ..check import check
    from ..confirm import load, simulate
    from ..handover import with_analyses
    from ..report.terminal import console, show_findings

    circuit = with_analyses(load(file))
    done = check(circuit)
    if done.errors and not anyway:
        show_findings(done.errors, console(error=True))
        click.echo("rcnet: nothing was simulated. Mend the errors, or go on all the same with --anyway.", err=True)
        return FAILED
    folder = Path(output) / folder_names([file])[file]
    result = simulate(circuit, folder, which=second_opinion, timeout=timeout, anyway=anyway)
    assert result.opinion is not None
    curves = [
        {"name": curve.name, "analysis": curve.analysis, "points": len(curve)} for curve in result.opinion.curves
    ]
    if as_json:
        document = {"circuit": circuit.name, "simulator": result.opinion.who, "folder": str(folder)}
        print_json({**document, "files": list(result.files), "curves": curves})
        return OK
    out = console()
    out.print(f"{circuit.name}: {result.opinion.who} ran in {result.opinion.seconds:.2f} s")
    for analysis in dict.fromkeys(curve.analysis for curve in result.opinion.curves):
        group = result.opinion.curves.of(analysis)
        out.print(f"  {analysis}: {len(group)} curves of {len(group[0])} points")
    out.print(f"  kept in {folder}/: {', '.join(result.files)}")
    return OK
