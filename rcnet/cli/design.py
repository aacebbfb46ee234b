"""`rcnet design`: parts that meet a target."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ..errors import InputError, OutputError
from .options import OK, examples, json_option, print_json, quiet_option

if TYPE_CHECKING:
    from ..design import Design

# name, what stands for its value, help
_OPTIONS = (
    ("--cutoff", "F", "lowpass, highpass: where power is halved."),
    ("--attenuation", "A", "lowpass, highpass: dB below the passband ..."),
    ("--at", "F", "... at this frequency."),
    ("--lower", "F", "bandpass: the lower cutoff."),
    ("--upper", "F", "bandpass: the upper cutoff."),
    ("--ripple", "V", "smoothing: the greatest ripple, peak to peak."),
    ("--settling", "T", "smoothing: how soon the level is half the ripple from its end."),
    ("--carrier", "F", "smoothing: frequency of the pulse-width signal."),
    ("--supply", "V", "smoothing, debounce: the signal runs from 0 V to this."),
    ("--bounce", "T", "debounce: how long the contact bounces."),
    ("--thresholds", "LOW,HIGH", "debounce: where the input behind switches."),
    ("--sections", "N", "How many sections.  [default: as few as will do]"),
    ("--source", "R", "Resistance of the source.  [default: 0]"),
    ("--load", "R", "Resistance across the output.  [default: none]"),
    ("--series", "NAME", "Series of the resistors (IEC 60063).  [default: E24]"),
    ("--capacitor-series", "NAME", "Series of the capacitors.  [default: E12]"),
    ("--tolerance", "T", "Of resistors, source and load.  [default: customary for the series]"),
    ("--capacitor-tolerance", "T", "Of capacitors.  [default: customary for the series]"),
    ("--resistors", "LOW,HIGH", "Range of resistors.  [default: 1k,1M]"),
    ("--capacitors", "LOW,HIGH", "Range of capacitors.  [default: 100p,10u]"),
    ("--keep", "N", "How many candidates.  [default: 5]"),
)


def _target_options(function: Callable[..., Any]) -> Callable[..., Any]:
    for name, metavar, about in reversed(_OPTIONS):
        function = click.option(name, metavar=metavar, help=about)(function)
    return function


@click.command(
    "design",
    epilog=examples(
        "rcnet design lowpass --cutoff 1k --sections 3 --source 600 --load 100k",
        "rcnet design lowpass --cutoff 1k --attenuation 20 --at 10k --tolerance 1%",
        "rcnet design bandpass --lower 100 --upper 2k -o leak-listener",
        "rcnet design smoothing --ripple 10m --settling 20m --carrier 20k --supply 5",
        "rcnet design debounce --bounce 5m --thresholds 0.8,2 --supply 3.3",
    ),
)
@click.argument("kind", metavar="KIND")
@_target_options
@json_option
@quiet_option
@click.option(
    "-o",
    "--output",
    type=click.Path(),
    help="A folder for every candidate as a circuit file, or NAME.rc.toml for the best one.",
)
def command(kind: str, as_json: bool, quiet: bool, output: str | None, **given: Any) -> int:
    """Choose parts that meet a target in the real network.

    Their values are preferred ones; the source, the load and all tolerances are counted in. KIND is lowpass,
    highpass, bandpass, smoothing (a pulse-width signal to a level) or debounce.
    """
    from ..design import design, read_target
    from ..report.candidates import design_document, show_design
    from ..report.terminal import console

    target = read_target(kind, given)
    places = None if output is None else _places(output)
    done = design(target)
    if places is not None:
        _write(places(done))
    if as_json:
        print_json(design_document(done))
    else:
        show_design(done, console(), quiet=quiet)
    return OK


Texts = dict[Path, str]


def _places(output: str) -> Callable[[Design], Texts]:
    """Where the candidates go, looked at before the search rather than after it."""
    from ..circuit import SUFFIX

    place = Path(output)
    if place.name.lower().endswith(SUFFIX):
        _refuse_taken(place)
        return lambda done: {place: done.candidates[0].text}
    if place.suffix.lower() in (".toml", ".cir", ".net", ".sp", ".json", ".csv"):
        raise InputError(
            f"candidates are written as circuit files, not as {place.suffix!r}.",
            file=output,
            remedy=f"Name a folder, or a file that ends in {SUFFIX}.",
        )
    if os.path.isdir(place):  # noqa: PTH112 - the method raises where a name is too long
        for taken in sorted(place.glob(f"candidate-*{SUFFIX}")):
            _refuse_taken(taken)
    elif os.path.lexists(place):
        raise OutputError(
            "a file of that name stands where a folder is needed.", file=output, remedy="Name another place."
        )
    return lambda done: {
        place / f"candidate-{number}{SUFFIX}": candidate.text
        for number, candidate in enumerate(done.candidates, 1)
    }


def _refuse_taken(place: Path) -> None:
    if os.path.lexists(place):
        raise OutputError(
            "a file of that name is there already.",
            file=str(place),
            remedy="Name another place with --output.",
        )


def _write(texts: Texts) -> None:
    """Write all files or none."""
    from ..system.files import make_folder, remove_file, write_file

    folder = next(iter(texts)).parent
    there = folder.is_dir()
    if next(iter(texts)).name.startswith("candidate-"):
        make_folder(folder)
    written: list[Path] = []
    try:
        for path, text in texts.items():
            write_file(path, text)
            written.append(path)
    except OutputError:
        for path in written:
            remove_file(path)
        if not there:
            with contextlib.suppress(OSError):
                folder.rmdir()
        raise
