"""`rcnet response`: the exact curves as a table, CSV or JSON."""

from __future__ import annotations

import math
from pathlib import Path
from typing import TYPE_CHECKING

import click

from ..errors import InputError
from .options import OK, file_argument, json_option, print_json

if TYPE_CHECKING:
    from ..circuit import Circuit
    from ..curves import Curve, Curves


@click.command("response")
@file_argument
@json_option
@click.option("--csv", "as_csv", is_flag=True, help="Print CSV.")
@click.option("-o", "--output", type=click.Path(), help="Write to a file; its suffix (.csv, .json) says how.")
@click.option("--of", "nodes", multiple=True, metavar="NODE", help='A node, or a pair "a b"; may be repeated.')
@click.option("--from", "start", metavar="F", help="Lowest frequency, as 10 or '1 kHz'.")
@click.option("--to", "stop", metavar="F", help="Highest frequency.")
@click.option("--per-decade", type=click.IntRange(1, 100_000), help="Points a decade.")
@click.option("--at", "at", multiple=True, metavar="F", help="A single frequency; may be repeated.")
def command(
    file: str,
    as_json: bool,
    as_csv: bool,
    output: str | None,
    nodes: tuple[str, ...],
    start: str | None,
    stop: str | None,
    per_decade: int | None,
    at: tuple[str, ...],
) -> int:
    """The exact response of a circuit, per unit of its source.

    \b
    rcnet response noise-filter.rc.toml --at '1 kHz' --at '50 Hz'
    rcnet response noise-filter.rc.toml --from 10 --to '1 MHz' -o response.csv
    """
    from ..confirm import load
    from ..curves import write_csv
    from ..report.document import response_document, to_json
    from ..system.files import write_file

    circuit = load(file)
    curves = _curves(circuit, nodes, _axis(circuit, start, stop, per_decade, at))
    if output is not None:
        suffix = Path(output).suffix.lower()
        if suffix not in (".csv", ".json"):
            raise InputError(f"a response is not written as {suffix or 'a file without suffix'!r}.", file=output, remedy="Use .csv or .json.")
        write_file(output, write_csv(curves) if suffix == ".csv" else to_json(response_document(list(curves))))
    if as_json:
        print_json(response_document(list(curves)))
    elif as_csv:
        click.echo(write_csv(curves), nl=False)
    elif output is None:
        _show(circuit, curves.curves)
    return OK


def _axis(
    circuit: Circuit, start: str | None, stop: str | None, per_decade: int | None, at: tuple[str, ...]
) -> list[float]:
    from dataclasses import replace

    from ..circuit.circuit_file import checked_sweep
    from ..handover import with_analyses
    from ..netlist import frequencies
    from ..values import parse_quantity

    if at:
        if start or stop or per_decade:
            raise InputError("--at does not go with --from, --to or --per-decade.", remedy="Give one or the other.")
        points = sorted({parse_quantity(text, "Hz", "--at") for text in at})
        if points[0] < 0 or not math.isfinite(points[-1]):
            raise InputError("--at is no finite frequency from zero up.", remedy="Give hertz, as 1 kHz.")
        return points
    sweep = with_analyses(circuit).analyses.ac
    if sweep is None:
        from ..exact import ac_drive

        ac_drive(circuit.network)  # says why: no source carries ac
        raise InputError("the circuit asks for no ac analysis.", remedy="Give --from and --to.")
    if start or stop or per_decade:
        sweep = replace(
            sweep,
            kind="dec",
            start=parse_quantity(start, "Hz", "--from") if start else sweep.start,
            stop=parse_quantity(stop, "Hz", "--to") if stop else sweep.stop,
            points=per_decade or (sweep.points if sweep.kind == "dec" else 20),
        )
    return [float(point) for point in frequencies(checked_sweep(sweep, "the sweep"))]


def _curves(circuit: Circuit, nodes: tuple[str, ...], axis: list[float]) -> Curves:
    import numpy as np

    from ..curves import Curve, Curves

    named = list(nodes) or ([" ".join(circuit.output)] if circuit.output else list(circuit.network.nodes[1:]))
    values = circuit.network.response(axis, named)
    curves = [
        Curve(f"v({','.join(name.split())})", "ac", np.asarray(axis), values[row], "1") for row, name in enumerate(named)
    ]
    return Curves("exact", tuple(curves), circuit.title)


def _show(circuit: Circuit, curves: tuple[Curve, ...]) -> None:
    from rich.table import Table

    from ..report.terminal import console
    from ..values import format_quantity

    table = Table(box=None, padding=(0, 2, 0, 0), header_style="dim")
    table.add_column("frequency", justify="right")
    for curve in curves:
        table.add_column(f"{curve.name} dB", justify="right")
        table.add_column("deg", justify="right")
    for k, frequency in enumerate(curves[0].axis.tolist()):
        row = [format_quantity(frequency, "Hz", 6)]
        for curve in curves:
            value = complex(curve.values[k])
            level = f"{20 * math.log10(abs(value)):.4f}" if value else "-inf"
            row += [level, f"{math.degrees(math.atan2(value.imag, value.real)):.3f}" if value else "-"]
        table.add_row(*row)
    console().print(table)
