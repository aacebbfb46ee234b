"""The exact curves a person asks for: along frequency or along time."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from .circuit import Circuit, Sweep
from .circuit.circuit_file import checked_sweep
from .curves import Analysis, Curve, Curves
from .errors import InputError
from .exact import transient_from
from .handover import with_analyses
from .netlist import frequencies
from .values import parse_quantity

if TYPE_CHECKING:
    from .claims import Envelope

Values = npt.NDArray[np.complex128] | npt.NDArray[np.float64]

MOST_TIMES = 1_000_000


def listed_frequencies(texts: Sequence[str]) -> list[float]:
    """Single frequencies, Hz, rising. Raises InputError or QuantityError."""
    points = sorted({parse_quantity(text, "Hz", "--at") for text in texts})
    if points[0] < 0 or not math.isfinite(points[-1]):
        raise InputError("--at is no finite frequency from zero up.", remedy="Give hertz, as 1 kHz.")
    return points


def swept_frequencies(
    circuit: Circuit, start: str | None, stop: str | None, per_decade: int | None
) -> list[float]:
    """The frequencies asked for, Hz; what is left open is as in the circuit's own ac analysis."""
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


def even_times(until: str | None, points: int) -> list[float]:
    """Evenly spaced times from zero, s. Raises InputError or QuantityError."""
    if until is None:
        raise InputError("--points stands without --until.", remedy="Say until when, as --until '5 ms'.")
    stop = parse_quantity(until, "s", "--until")
    if not (0 < stop < math.inf) or points > MOST_TIMES:
        raise InputError(
            f"--until is {until!r} and --points {points}.",
            remedy=f"Give a time above zero and at most {MOST_TIMES} points.",
        )
    return [float(time) for time in np.linspace(0.0, stop, points)]


def response_curves(circuit: Circuit, nodes: Sequence[str], axis: Sequence[float]) -> Curves:
    """The exact response at `axis` (Hz) of some nodes or pairs, else of the output, else of every node."""
    named = _named(circuit, nodes)
    return _curves(circuit, "ac", "1", named, axis, circuit.network.response(axis, named))


def response_envelopes(circuit: Circuit, nodes: Sequence[str], axis: Sequence[float]) -> dict[str, Envelope]:
    """The least and the greatest gain over the tolerances at `axis` (Hz), by the name of the same curves."""
    from .claims import response_envelope

    return {
        f"v({','.join(name.split())})": response_envelope(circuit.network, axis, name, circuit.conditions)
        for name in _named(circuit, nodes)
    }


def time_curves(circuit: Circuit, nodes: Sequence[str], axis: Sequence[float]) -> Curves:
    """The exact voltages at `axis` (s) under the sources' waveforms, of the same nodes.

    They start where the circuit says: in the steady state, or in its starting state as ngspice takes it.
    """
    named, run = _named(circuit, nodes), circuit.analyses.transient
    values = transient_from(
        circuit.network, axis, named, circuit.initial, run is not None and run.use_initial
    )
    return _curves(circuit, "transient", "V", named, axis, values)


def _named(circuit: Circuit, nodes: Sequence[str]) -> list[str]:
    if nodes:
        return list(nodes)
    return [" ".join(circuit.output)] if circuit.output else list(circuit.network.nodes[1:])


def _curves(
    circuit: Circuit, analysis: Analysis, unit: str, named: list[str], axis: Sequence[float], values: Values
) -> Curves:
    curves = [
        Curve(f"v({','.join(name.split())})", analysis, np.asarray(axis), values[row], unit)
        for row, name in enumerate(named)
    ]
    return Curves("exact", tuple(curves), circuit.title)
