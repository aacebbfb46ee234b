"""`rcnet response`: the exact curves as a table, CSV or JSON."""

from __future__ import annotations

import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError
from .options import OK, examples, file_argument, json_option, print_json

if TYPE_CHECKING:
    from collections.abc import Callable

    from ..circuit import Circuit
    from ..curves import Curves


@click.command(
    "response",
    epilog=examples(
        "rcnet response noise-filter.rc.toml --at '1 kHz' --at '50 Hz'",
        "rcnet response noise-filter.rc.toml --from 10 --to '1 MHz' -o response.csv",
    ),
)
@file_argument
@json_option
@click.option("--csv", "as_csv", is_flag=True, help="Print CSV.")
@click.option("-o", "--output", type=click.Path(), help="Write to a file; its suffix (.csv, .json) says how.")
@click.option(
    "--of", "nodes", multiple=True, metavar="NODE", help='A node, or a pair "a b"; may be repeated.'
)
@click.option("--from", "start", metavar="F", help="Lowest frequency, as 10 or '1 kHz'.")
@click.option("--to", "stop", metavar="F", help="Highest frequency.")
@click.option("--per-decade", type=click.IntRange(1, 100_000), help="Points a decade.")
@click.option("--at", "at", multiple=True, metavar="F", help="A single frequency; may be repeated.")
def command(
    file: str, as_json: bool, as_csv: bool, output: str | None, nodes: tuple[str, ...], **sweep: Any
) -> int:
    """Give the exact response of a circuit, per unit of its source."""
    from ..curves import write_csv
    from ..loading import load
    from ..report.document import response_document
    from ..report.terminal import console, show_response
    from ..system.files import write_file

    if as_json and as_csv:
        raise click.UsageError("--json does not go with --csv.")
    as_text = None if output is None else _writer(output)
    circuit = load(file)
    curves = _curves(circuit, nodes, _axis(circuit, **sweep))
    if output is not None and as_text is not None:
        write_file(output, as_text(curves))
    if as_json:
        print_json(response_document(list(curves)))
    elif as_csv:
        click.echo(write_csv(curves), nl=False)
    elif output is None:
        show_response(curves.curves, console())
    return OK


def _writer(output: str) -> Callable[[Curves], str]:
    """How a response is written, as the file's suffix says."""
    from ..curves import write_csv
    from ..report.document import response_document, to_json

    suffix = Path(output).suffix.lower()
    if suffix == ".csv":
        return write_csv
    if suffix == ".json":
        return lambda curves: to_json(response_document(list(curves)))
    what = f"a response is not written as {suffix!r}." if suffix else "the file's name has no suffix."
    raise InputError(what, file=output, remedy="Let the name end in .csv or .json.")


def _axis(
    circuit: Circuit, start: str | None, stop: str | None, per_decade: int | None, at: tuple[str, ...]
) -> list[float]:
    from ..values import parse_quantity

    if not at:
        return _sweep(circuit, start, stop, per_decade)
    if start or stop or per_decade:
        raise InputError(
            "--at does not go with --from, --to or --per-decade.", remedy="Give one or the other."
        )
    points = sorted({parse_quantity(text, "Hz", "--at") for text in at})
    if points[0] < 0 or not math.isfinite(points[-1]):
        raise InputError("--at is no finite frequency from zero up.", remedy="Give hertz, as 1 kHz.")
    return points


def _sweep(circuit: Circuit, start: str | None, stop: str | None, per_decade: int | None) -> list[float]:
    """The frequencies asked for; what the options leave open is as in the circuit's own ac analysis."""
    from ..circuit import Sweep
    from ..circuit.circuit_file import checked_sweep
    from ..handover import with_analyses
    from ..netlist import frequencies
    from ..values import parse_quantity

    own = with_analyses(circuit).analyses.ac
    if own is None and not (start and stop):
        raise InputError("the circuit asks for no ac analysis.", remedy="Give --from and --to.")
    sweep = own or Sweep(1.0, 1.0, 20)
    if start or stop or per_decade:
        sweep = Sweep(
            parse_quantity(start, "Hz", "--from") if start else sweep.start,
            parse_quantity(stop, "Hz", "--to") if stop else sweep.stop,
            per_decade or (sweep.points if sweep.kind == "dec" else 20),
        )
        sweep = checked_sweep(sweep, "the sweep")
    return [float(point) for point in frequencies(sweep)]


def _curves(circuit: Circuit, nodes: tuple[str, ...], axis: list[float]) -> Curves:
    import numpy as np

    from ..curves import Curve, Curves

    named = list(nodes) or ([" ".join(circuit.output)] if circuit.output else list(circuit.network.nodes[1:]))
    values = circuit.network.response(axis, named)
    curves = [
        Curve(f"v({','.join(name.split())})", "ac", np.asarray(axis), values[row], "1")
        for row, name in enumerate(named)
    ]
    return Curves("exact", tuple(curves), circuit.title)
