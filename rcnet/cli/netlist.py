"""`rcnet netlist`: the checked, sealed netlist, in the form that is wanted."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from .options import (
    FAILED,
    OK,
    anyway_option,
    examples,
    json_option,
    print_json,
    silence_option,
    spare,
)
from .reading import load_asked, reading_options

if TYPE_CHECKING:
    from ..check import Check
    from ..circuit import Circuit

_LIST = "list"
_SAMPLED = "tolerance-samples"
# Two options that cannot go together, with the reason.
_APART = (
    ("measures", "portable", ".meas is ngspice's own; without --portable it can be written."),
    ("as_subcircuit", "template", "a subcircuit holds no analysis, and a deck is made of analyses."),
    ("as_subcircuit", "measures", "a subcircuit holds no analysis to measure in."),
    ("samples", "measures", "measurements are about one circuit."),
    ("samples", "portable", "copies with parameters of their own are beyond what every simulator reads."),
)
_NEEDED = (
    ("templates", "template", "it names the folder in which a template is looked for."),
    ("samples", "template", f"copies go into a deck, as --template {_SAMPLED}."),
    ("ports", "as_subcircuit", "only a subcircuit has ports."),
)


@click.command(
    "netlist",
    epilog=examples(
        "rcnet netlist noise-filter.rc.toml -o noise-filter.cir",
        "rcnet netlist --measures noise-filter.rc.toml",
        "rcnet netlist --template list",
        "rcnet netlist --template transient level-sender.rc.toml",
        "rcnet netlist --template tolerance-samples --samples 50 band-pass.rc.toml",
        "rcnet netlist --as-subcircuit noise_filter noise-filter.rc.toml",
        "rcnet netlist --portable noise-filter.rc.toml",
    ),
)
@click.argument("file", required=False, type=click.Path(), metavar="FILE")
@json_option
@reading_options
@click.option("--quiet", is_flag=True, help="Show only findings that are errors.")
@click.option("-o", "--output", type=click.Path(), help="Where to write it; standard output otherwise.")
@click.option(
    "--template", metavar="NAME", help="Make a deck through a template; `list` tells what there are."
)
@click.option(
    "--templates",
    type=click.Path(),
    metavar="DIR",
    help="A folder of your own templates (NAME.cir.j2), looked at first.",
)
@click.option(
    "--samples",
    type=click.IntRange(1, 10_000),
    metavar="N",
    help=f"Copies with values within the tolerances, for {_SAMPLED} (20).",
)
@click.option("--measures", is_flag=True, help="Add .meas lines, the exact value beside each.")
@click.option("--as-subcircuit", metavar="NAME", help="Write a .subckt for a library, without sources.")
@click.option("--ports", metavar='"NODE ..."', help="Its ports in order; else those of sources, then output.")
@click.option("--portable", is_flag=True, help="Keep to what every simulator from Berkeley's line reads.")
@anyway_option
@silence_option
def command(
    file: str | None,
    as_json: bool,
    quiet: bool,
    output: str | None,
    anyway: bool,
    silence: tuple[str, ...],
    **form: Any,
) -> int:
    """Write a circuit as a checked and sealed SPICE netlist."""
    _require_sense(form)
    if form["template"] == _LIST:
        return _list_templates(form, as_json=as_json)
    if file is None:
        raise click.UsageError("Missing argument 'FILE'.")
    from ..check import check
    from ..findings import with_silence
    from ..handover import with_analyses
    from ..report.document import netlist_document
    from ..report.terminal import console, show_findings
    from ..system.files import write_file

    to_file = output not in (None, "-")
    spare(output if to_file else None, file)
    read = with_silence(load_asked(file), silence)
    done = check(with_analyses(read))
    refused = bool(done.errors) and not anyway
    show_findings(done.errors if quiet else done.findings, console(error=True))
    if refused:
        click.echo(
            "rcnet: no netlist was written. Mend the errors, or write it all the same with --anyway.",
            err=True,
        )
    text = None if refused else _text(read, done, form, anyway=anyway)
    if text is not None and to_file:
        write_file(str(output), text)
    if as_json:
        print_json(netlist_document(done, text))
    elif text is not None and not to_file:
        click.echo(text, nl=False)
    return FAILED if refused else OK


def _text(circuit: Circuit, done: Check, form: Mapping[str, Any], *, anyway: bool) -> str:
    """The netlist in the form that is asked for."""
    how = {"anyway": anyway, "portable": form["portable"]}
    if form["as_subcircuit"] is not None:
        from ..forms import sealed_subcircuit

        ports = None if form["ports"] is None else form["ports"].replace(",", " ").split()
        return sealed_subcircuit(circuit, form["as_subcircuit"], done, ports=ports, **how)
    how["measures"] = form["measures"]
    if form["template"] is None:
        from ..handover import sealed_netlist

        return sealed_netlist(circuit, done, **how).text
    from ..forms import sealed_deck

    count = form["samples"] or (20 if form["template"] == _SAMPLED else None)
    return sealed_deck(circuit, form["template"], done, folders=_folders(form), sample_count=count, **how)


def _require_sense(form: Mapping[str, Any]) -> None:
    """Refuse options that cannot be meant together."""
    given = {name for name, value in form.items() if value not in (None, False)}
    if form["template"] == _SAMPLED:
        given.add("samples")
    for one, other, why in _APART:
        if {one, other} <= given:
            raise click.UsageError(f"{_spelt(one, form)} and {_spelt(other, form)} do not go together: {why}")
    for one, other, why in _NEEDED:
        if one in given and other not in given:
            raise click.UsageError(f"{_spelt(one, form)} needs {_spelt(other, form)}: {why}")
    if form["ports"] is not None and not form["ports"].replace(",", " ").split():
        raise click.UsageError('--ports names no node; write it as --ports "in out".')


def _spelt(name: str, form: Mapping[str, Any]) -> str:
    if name == "samples" and form["samples"] is None:
        return f"--template {_SAMPLED}"
    return f"--{name.replace('_', '-')}"


def _folders(form: Mapping[str, Any]) -> list[Path]:
    return [] if form["templates"] is None else [Path(form["templates"])]


def _list_templates(form: Mapping[str, Any], *, as_json: bool) -> int:
    from ..forms import deck_templates

    found = deck_templates(_folders(form))
    if as_json:
        print_json([{"name": name, "says": says} for name, says in found.items()])
        return OK
    width = max(map(len, found), default=0) + 2
    for name, says in found.items():
        click.echo(click.wrap_text(f"{name:<{width}}{says}", 80, "", " " * width))
    return OK
