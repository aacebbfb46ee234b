"""`rcnet netlist`: the checked, sealed netlist."""

from __future__ import annotations

import click

from .options import FAILED, OK, anyway_option, examples, file_argument, json_option, print_json, spare


@click.command("netlist", epilog=examples("rcnet netlist noise-filter.rc.toml -o noise-filter.cir"))
@file_argument
@json_option
@click.option("--quiet", is_flag=True, help="Show only findings that are errors.")
@click.option("-o", "--output", type=click.Path(), help="Where to write it; standard output otherwise.")
@anyway_option
def command(file: str, as_json: bool, quiet: bool, output: str | None, anyway: bool) -> int:
    """Write a circuit as a checked and sealed SPICE netlist."""
    from ..check import check
    from ..handover import sealed_netlist, with_analyses
    from ..loading import load
    from ..report.document import netlist_document
    from ..report.terminal import console, show_findings
    from ..system.files import write_file

    to_file = output not in (None, "-")
    spare(output if to_file else None, file)
    circuit = with_analyses(load(file))
    done = check(circuit)
    refused = bool(done.errors) and not anyway
    show_findings(done.errors if quiet else done.findings, console(error=True))
    if refused:
        click.echo(
            "rcnet: no netlist was written. Mend the errors, or write it all the same with --anyway.",
            err=True,
        )
    text = None if refused else sealed_netlist(circuit, done, anyway=anyway).text
    if text is not None and to_file:
        write_file(str(output), text)
    if as_json:
        print_json(netlist_document(done, text))
    elif text is not None and not to_file:
        click.echo(text, nl=False)
    return FAILED if refused else OK
