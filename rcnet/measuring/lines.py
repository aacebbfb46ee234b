"""The list of `.meas` lines for one analysis, with comments that say what each should give."""

from __future__ import annotations

import itertools
from collections.abc import Sequence

from ..circuit import Circuit
from ..errors import RcnetError
from ..netlist import Names
from ..netlist.writer import comment_lines, wrap
from .ac import AcMeter
from .measurement import Measurement, Namer
from .transient import TransientMeter


def measure_lines(circuit: Circuit, names: Names) -> list[str]:
    """The lines for a circuit that asks for an ac sweep or a transient, as written under `names`.

    All claims that ngspice can measure there; in ac the cutoffs and the greatest level at the output too. A
    claim that is not measured is named in a comment, with the reason where it lies in the circuit. Of several
    analyses in one netlist, run as a batch, ngspice 39 measures in the last it runs only.
    """
    meter = AcMeter(circuit, names) if circuit.analyses.ac else TransientMeter(circuit, names)
    lines: list[str] = []
    taken = {request.text.split()[1].lower() for request in circuit.requests if request.word == ".meas"}
    namer, skipped = _namer(taken), []
    for claim in circuit.claims:
        about = f"not measured ({claim.measure.name}): {claim.says}"
        if claim.measure.name not in meter.measures:
            skipped.append(about)
            continue
        try:
            found = list(meter.of_claim(claim, namer))
        except RcnetError as exc:
            skipped.append(f"{about}: {exc.message}")
            continue
        lines += [*comment_lines(f"{claim.says}:"), *_written(found, meter.word)]
    lines += _written(list(meter.unasked(namer)), meter.word)
    return [*lines, *(line for text in skipped for line in comment_lines(text))]


def _namer(taken: set[str]) -> Namer:
    def free(wanted: str) -> str:
        tries = itertools.chain([wanted], (f"{wanted}_{number}" for number in itertools.count(2)))
        name = next(name for name in tries if name not in taken)
        taken.add(name)
        return name

    return free


def _written(found: Sequence[Measurement], word: str) -> list[str]:
    return [line for each in found for line in _lines_of(each, word)]


def _lines_of(each: Measurement, word: str) -> list[str]:
    return [*wrap(f".meas {word} {each.name} {each.text}"), *comment_lines(each.expectation)]
