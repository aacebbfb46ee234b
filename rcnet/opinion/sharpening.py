"""Settings under which a simulator's transient says more: many steps, and little error allowed in each."""

from __future__ import annotations

import math
from dataclasses import replace

from ..circuit import Circuit, Square, TransientRun, Waveform
from ..errors import QuantityError
from ..values import read_spice_number

STEPS = 2000  # of a run at least: an error below 1e-6 for time constants of an eightieth of the run
RELTOL = 1e-5  # tighter with tighter abstol and chgtol, ngspice 39 gives up one run in a hundred
MOST_EVENTS = 120  # corners and turns, each some hundred steps; with more a run keeps its own settings
MOST_NODES = 2000


def sharpened(circuit: Circuit) -> Circuit:
    """The circuit with its transient taken in short steps from t = 0; the same where that would take long.

    Nothing that was asked for more strictly is loosened.
    """
    run = circuit.analyses.transient
    nodes = circuit.network.arrays().node_count
    if run is None or nodes > MOST_NODES or _events(circuit, run) > MOST_EVENTS:
        return circuit
    longest = run.stop / STEPS
    # Without a beginning of its own the results hold every step that was taken.
    finer = replace(run, start=0.0, max_step=longest if run.max_step is None else min(run.max_step, longest))
    options = {**circuit.options, "reltol": repr(min(RELTOL, _number(circuit.options.get("reltol"))))}
    return replace(circuit, options=options, analyses=replace(circuit.analyses, transient=finer))


def _number(text: str | None) -> float:
    try:
        number = read_spice_number(text or "").value
    except QuantityError:
        return RELTOL
    return number if math.isfinite(number) and number > 0 else RELTOL


def _events(circuit: Circuit, run: TransientRun) -> float:
    waves = [source.waveform for source in circuit.network.sources.values() if source.waveform is not None]
    return sum(_corners(wave, run.stop) for wave in waves)


def _corners(wave: Waveform, stop: float) -> float:
    each = 4 if isinstance(wave, Square) else len(getattr(wave, "values", "four"))
    return each * (1 if wave.repeats is None else max(stop / wave.repeats, 1.0))
