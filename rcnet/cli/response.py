"""`rcnet response`: the exact curves as a table, CSV or JSON."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError
from .options import OK, examples, file_argument, json_option, print_json, spare
from .reading import load_asked, node_asked, reading_options

if TYPE_CHECKING:
    from collections.abc import Callable

    from ..circuit import Circuit
    from ..curves import Curves
    from ..report.envelope import Envelopes


@click.command(
    "response",
    epilog=examples(
        "rcnet response noise-filter.rc.toml --at '1 kHz' --at '50 Hz'",
        "rcnet response noise-filter.rc.toml --from 10 --to '1 MHz' -o response.csv",
        "rcnet response valve-positioner.rc.toml --until '50 ms' --points 11",
    ),
)
@file_argument
@json_option
@reading_options
@click.option("--quiet", is_flag=True, help="Leave out the headings of the table.")
@click.option("--csv", "as_csv", is_flag=True, help="Print CSV.")
@click.option("-o", "--output", type=click.Path(), help="Write to a file; its suffix (.csv, .json) says how.")
@click.option(
    "--of", "nodes", multiple=True, metavar="NODE", help='A node, a pair "a b" or "v(a,b)"; may be repeated.'
)
@click.option("--from", "start", metavar="F", help="Lowest frequency, as 10 or '1 kHz'.")
@click.option("--to", "stop", metavar="F", help="Highest frequency.")
@click.option("--per-decade", type=click.IntRange(1, 100_000), help="Points a decade.")
@click.option("--at", "at", multiple=True, metavar="F", help="A single frequency; may be repeated.")
@click.option("--until", metavar="T", help="Give the waveform from t = 0 to this time, as '5 ms'.")
@click.option("--points", type=click.IntRange(2), help="How many times, evenly spaced.  [default: 201]")
@click.option("--tolerance", is_flag=True, help="Add the least and the greatest gain over the tolerances.")
def command(
    file: str,
    as_json: bool,
    quiet: bool,
    as_csv: bool,
    output: str | None,
    nodes: tuple[str, ...],
    tolerance: bool,
    **wanted: Any,
) -> int:
    """Give the exact response of a circuit, or its waveforms."""
    from ..report.terminal import console, show_response
    from ..system.files import write_file

    if as_json and as_csv:
        raise click.UsageError("--json does not go with --csv.")
    as_text = None if output is None else _writer(output)
    spare(output, file)
    circuit = load_asked(file)
    named = [node_asked(circuit, node) for node in nodes]
    curves = _asked(circuit, named, **wanted)
    envelopes = _envelopes(circuit, named, curves) if tolerance else None
    if output is not None and as_text is not None:
        write_file(output, as_text(curves, envelopes))
    if as_json:
        print_json(_document(curves, envelopes))
    elif as_csv:
        click.echo(_csv(curves, envelopes), nl=False)
    elif output is None:
        show_response(curves.curves, console(), quiet=quiet, envelopes=envelopes)
    return OK


def _envelopes(circuit: Circuit, nodes: list[str], curves: Curves) -> Envelopes:
    from ..answers import response_envelopes

    if curves.curves[0].analysis != "ac":
        raise InputError("--tolerance is about the response over frequency.", remedy="Leave --until out.")
    return response_envelopes(circuit, nodes, curves.curves[0].axis.tolist())


def _document(curves: Curves, envelopes: Envelopes | None) -> dict[str, Any]:
    from ..report.document import response_document
    from ..report.envelope import envelope_document

    return (
        response_document(list(curves)) if envelopes is None else envelope_document(list(curves), envelopes)
    )


def _csv(curves: Curves, envelopes: Envelopes | None) -> str:
    from ..curves import write_csv
    from ..report.envelope import envelope_csv

    return write_csv(curves) if envelopes is None else envelope_csv(list(curves), envelopes)


def _writer(output: str) -> Callable[[Curves, Envelopes | None], str]:
    """How a response is written, as the file's suffix says."""
    from ..report.document import to_json

    suffix = Path(output).suffix.lower()
    if suffix == ".csv":
        return _csv
    if suffix == ".json":
        return lambda curves, envelopes: to_json(_document(curves, envelopes))
    what = f"a response is not written as {suffix!r}." if suffix else "the file's name has no suffix."
    raise InputError(what, file=output, remedy="Let the name end in .csv or .json.")


def _asked(
    circuit: Circuit,
    nodes: list[str],
    *,
    start: str | None,
    stop: str | None,
    per_decade: int | None,
    at: tuple[str, ...],
    until: str | None,
    points: int | None,
) -> Curves:
    """The curves along time where times are asked for, else along frequency."""
    from .. import answers

    timed = bool(until or points)
    kinds = {"--at": bool(at), "--from, --to or --per-decade": bool(start or stop or per_decade)}
    given = [name for name, present in {**kinds, "--until or --points": timed}.items() if present]
    if len(given) > 1:
        raise InputError(f"{given[0]} does not go with {given[1]}.", remedy="Give one or the other.")
    if timed:
        return answers.time_curves(circuit, nodes, answers.even_times(until, points or 201))
    if at:
        return answers.response_curves(circuit, nodes, _in_range(answers.listed_frequencies(at)))
    axis = answers.swept_frequencies(circuit, start, stop, per_decade)
    if not axis:
        raise _no_points(circuit)
    return answers.response_curves(circuit, nodes, axis)


def _in_range(points: list[float]) -> list[float]:
    from ..circuit.circuit_file import HIGHEST_FREQUENCY, LOWEST_FREQUENCY

    for point in points:
        if point and not LOWEST_FREQUENCY <= point <= HIGHEST_FREQUENCY:
            raise InputError(
                f"--at is {point!r} Hz.",
                remedy=f"Give zero, or {LOWEST_FREQUENCY:g} Hz to {HIGHEST_FREQUENCY:g} Hz.",
            )
    return points


def _no_points(circuit: Circuit) -> InputError:
    from ..netlist import sweep_fault

    sweep = circuit.analyses.ac
    fault = sweep_fault(sweep) if sweep is not None else None
    return InputError(
        f"the circuit's own ac sweep has no points{f': {fault}' if fault else ''}.",
        file=circuit.file,
        remedy="Mend it, or give --from and --to.",
    )
