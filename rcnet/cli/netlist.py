"""`rcnet netlist`: the checked, sealed netlist."""

from __future__ import annotations

import click

from .options import FAILED, OK, anyway_option, file_argument


@click.command("netlist")
@file_argument
@click.option("-o", "--output", type=click.Path(), help="Where to write it; standard output otherwise.")
@anyway_option
def command(file: str, output: str | None, anyway: bool) -> int:
    """Write a circuit as a checked and sealed SPICE netlist.

    \b
    rcnet netlist noise-filter.rc.toml -o noise-filter.cir
    """
    from ..check import check
    from ..confirm import load
    from ..handover import sealed_netlist, with_analyses
    from ..report.terminal import console, show_findings
    from ..system.files import write_file

    circuit = with_analyses(load(file))
    done = check(circuit)
    if done.findings:
        show_findings(done.findings, console(error=True))
    if done.errors and not anyway:
        click.echo("rcnet: no netlist was written. Mend the errors, or write it all the same with --anyway.", err=True)
        return FAILED
    text = sealed_netlist(circuit, done, anyway=anyway).text
    if output is None or output == "-":
        click.echo(text, nl=False)
    else:
        write_file(output, text)
    return OK
