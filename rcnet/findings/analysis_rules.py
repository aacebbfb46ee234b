"""Rules about the analyses asked for: whether they show what there is to see."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Place, Sine, Sweep, TransientRun
from ..circuit.circuit_file import LOWEST_FREQUENCY
from ..errors import RcnetError
from ..exact import driving_sources, natural_frequencies, response, solver_for, span_of
from ..netlist import frequencies, sweep_fault
from ..values import format_quantity, write_quantity, write_spice_number
from ._excitation import Excitation, begins, excitation
from ._telling import few, whole
from .finding import Remark, rule

Float = npt.NDArray[np.float64]

_MOST_PARTS = 5000  # up to here a look at all frequencies takes a moment only
_MOST_WORK = 1_000_000  # parts times frequencies: a second at most
_SLOWER = 5  # where a network is not solved by elimination
_PER_DECADE = 20  # of the look at all frequencies
_HALF_POWER_DB = 10 * math.log10(2)
_OFF_DB = 0.5  # what reading between the points of a sweep may be off
# Below the peak. A single corner read between points is off by 0.5 dB at two points a decade; further down,
# the depths of notches would ask for sweeps that nobody needs.
_LOOKED_AT_DB = 20.0
_MOST_CUTOFFS = 64
_NOISE_PER_DECADE = 5
_LASTS = 0.01  # what makes less of the response than this need not settle
_SHOWS = 0.1  # what makes less need not be followed: a step as long gets 1 % of it wrong
_MOST_STEPS = 1_000_000
_SETTLED = 3  # time constants: 5 % are left


# ---------------------------------------------------------------------- sweeps


@dataclass(frozen=True)
class _Look:
    """The response at the output, looked at before it is judged."""

    circuit: Circuit
    sweep: Sweep
    of: str

    def level(self, frequency: Float) -> Float:
        """dB, (frequencies,); a response of nothing is far down."""
        magnitude = np.abs(response(self.circuit.network, frequency, self.of))
        return np.asarray(20 * np.log10(np.maximum(magnitude, 1e-300)))

    def affords(self, points: int) -> bool:
        network = self.circuit.network
        work = points * len(network) * (1 if solver_for(network).eliminates else _SLOWER)
        return work <= _MOST_WORK


def _look(circuit: Circuit) -> _Look | None:
    """The ac sweep that the circuit asks for; None where it asks for none, or there is nothing to see."""
    network, sweep = circuit.network, circuit.analyses.ac
    if sweep is None or circuit.analyses.chosen or len(network) > _MOST_PARTS:
        return None
    if not circuit.output or not all(network.has_node(node) for node in circuit.output):
        return None
    if sweep_fault(sweep) is not None or not driving_sources(network) or sweep.start == sweep.stop:
        return None
    return _Look(circuit, sweep, " ".join(circuit.output))


@rule("sweep-misses-corner", "warning")
def sweep_misses_corner(circuit: Circuit) -> Iterator[Remark]:
    """The ac sweep does not reach the output's cutoff, or ends less than an octave beyond it.

    A note where a cutoff lies within the sweep all the same, and for linear sweeps, which often look at one
    place on purpose.
    """
    look = _look(circuit)
    if look is None:
        return
    try:
        cutoffs = _cutoffs(look)
    except RcnetError:  # no response to look at: other rules say why
        return
    sweep = look.sweep
    minor = sweep.kind == "lin" or any(sweep.start <= f <= sweep.stop for f in cutoffs)
    yield from few(
        [f for f in cutoffs if not 2 * sweep.start <= f <= sweep.stop / 2],
        lambda f: _missed(circuit, sweep, f, minor),
        "cutoffs of the output lie outside the ac sweep or at its ends",
    )


def _missed(circuit: Circuit, sweep: Sweep, cutoff: float, minor: bool) -> Remark:
    low = cutoff < 2 * sweep.start
    end = f"{'start' if low else 'end'} at {format_quantity(sweep.start if low else sweep.stop, 'Hz')}"
    if sweep.start <= cutoff <= sweep.stop:
        where = f"less than an octave from the ac sweep's {end}"
    else:
        where = f"{'below' if low else 'beyond'} the ac sweep's {end}"
    start = min(sweep.start, float(f"1e{math.floor(math.log10(cutoff / 2))}"))
    stop = max(sweep.stop, float(f"1e{math.ceil(math.log10(cutoff * 2))}"))
    return Remark(
        f"the output has a cutoff at {format_quantity(cutoff, 'Hz')}, {where}.",
        f"Sweep from {format_quantity(start, 'Hz')} to {format_quantity(stop, 'Hz')}.",
        _sweep_place(circuit, "ac", "from" if low else "to"),
        "note" if minor else None,
    )


@np.errstate(all="ignore")  # values near the ends of what a double holds
def _cutoffs(look: _Look) -> list[float]:
    """Where power crosses half its greatest value, Hz, rising; over all frequencies that matter."""
    network, sweep = look.circuit.network, look.sweep
    span = span_of(network)
    low = min(span.low / (2 * math.pi) / 100, max(sweep.start, LOWEST_FREQUENCY))
    high = max(span.high / (2 * math.pi) * 100, sweep.stop)
    count = math.ceil(math.log10(high / low) * _PER_DECADE) + 1
    if not look.affords(count):
        return []
    grid = np.unique(np.concatenate([np.geomspace(low, high, count), _resonances(look, low, high)]))
    level = look.level(grid)
    half = float(level.max()) - _HALF_POWER_DB
    turns = np.flatnonzero((level[1:] >= half) != (level[:-1] >= half))
    found = []
    for turn in turns[:_MOST_CUTOFFS].tolist():
        # Read between points this close, a crossing is right to five digits.
        fine = np.geomspace(grid[turn], grid[turn + 1], 33)
        above = look.level(fine) - half
        k = int(np.argmax((above[1:] >= 0) != (above[:-1] >= 0)))
        share = above[k] / (above[k] - above[k + 1])
        found.append(float(fine[k] * (fine[k + 1] / fine[k]) ** share))
    return found


def _resonances(look: _Look, low: float, high: float) -> Float:
    """Frequencies, Hz, at which poles off the real axis may make a peak of their own."""
    if not np.isin(look.circuit.network.arrays().kinds, [*b"LKEFGH"]).any():
        return np.empty(0)
    poles = natural_frequencies(look.circuit.network)
    found = np.abs(poles[np.abs(poles.imag) > 1e-6 * np.abs(poles)].imag) / (2 * math.pi)
    return np.asarray(found[(found > low) & (found < high)])


@rule("sweep-too-coarse", "warning")
def sweep_too_coarse(circuit: Circuit) -> Iterator[Remark]:
    """Between the points of the ac sweep lies a peak or a corner: read there, it is off by more than 0.5 dB.

    Looked at within 20 dB of the greatest response. A note up to 3 dB, and for a noise sweep with fewer than
    five points a decade, whose total ngspice 39 gets wrong by half a per cent and more.
    """
    yield from _coarse_ac(circuit)
    noise = circuit.analyses.noise
    if noise is None or circuit.analyses.chosen or noise.kind == "lin":
        return
    per_decade = noise.points * (1 if noise.kind == "dec" else math.log2(10))
    if per_decade < _NOISE_PER_DECADE:
        yield Remark(
            f"the noise sweep has {noise.points} point{'s' if noise.points > 1 else ''} "
            f"{'a decade' if noise.kind == 'dec' else 'an octave'}, too few to integrate it.",
            "Ask for 10 points a decade or more.",
            _sweep_place(circuit, "noise", "points"),
            "note",
        )


def _coarse_ac(circuit: Circuit) -> Iterator[Remark]:
    look = _look(circuit)
    if look is None:
        return
    try:
        found = _worst(look, look.sweep)
        if found is None or not found[1] > _OFF_DB:
            return
        remedy = _finer(look)
    except RcnetError:
        return
    at, off = found
    yield Remark(
        f"read between the points of the ac sweep, the response is off by {format_quantity(off, 'dB', 2)} "
        f"near {format_quantity(at, 'Hz')}.",
        remedy,
        _sweep_place(circuit, "ac", "points"),
        None if off > 3 else "note",
    )


@np.errstate(all="ignore")
def _worst(look: _Look, sweep: Sweep) -> tuple[float, float] | None:
    """Where reading between the points of a sweep is off most, Hz, and how much, dB; None for no look."""
    grid = frequencies(sweep)
    if sweep.kind == "lin":
        grid = grid[grid > 0]
    if len(grid) < 2 or not look.affords(4 * len(grid)):
        return None
    scale = (lambda f: f) if sweep.kind == "lin" else np.log
    place = scale(grid)
    between = np.concatenate([place[:-1] + share * np.diff(place) for share in (0.25, 0.5, 0.75)])
    inner = between if sweep.kind == "lin" else np.exp(between)
    inner = np.concatenate([inner, _resonances(look, float(grid[0]), float(grid[-1]))])
    known, level = look.level(grid), look.level(inner)
    read = np.interp(scale(inner), place, known)
    floor = max(known.max(), level.max()) - _LOOKED_AT_DB
    off = np.where(np.maximum(read, level) > floor, np.abs(read - level), 0.0)
    worst = int(np.argmax(off))
    return float(inner[worst]), float(off[worst])


def _finer(look: _Look) -> str:
    sweep = look.sweep
    for factor in (2, 4, 8, 16, 32, 64):
        finer = replace(sweep, points=sweep.points * factor)
        found = _worst(look, finer)
        if found is None:
            break
        if found[1] <= _OFF_DB:
            each = {"dec": " a decade", "oct": " an octave", "lin": ""}[sweep.kind]
            return f"Ask for {finer.points} points{each}."
    return "Ask for a second, finer sweep around that frequency."


def _sweep_place(circuit: Circuit, key: str, what: str) -> Place:
    """Where a sweep stands, pointing at its start (`from`), its end (`to`) or its number of points."""
    place = circuit.analysis_places.get(key) or whole(circuit)
    number, key_word = {"points": (0, "per_decade"), "from": (1, "from"), "to": (2, "to")}[what]
    spice = re.search(r"\b(?:dec|oct|lin)\s+(\S+)\s+(\S+)\s+(\S+)", place.text, re.IGNORECASE)
    toml = re.search(rf"\b{key}\s*=.*?\b{key_word}\s*=\s*\"?([^\",}}]*[^\",}}\s])", place.text)
    start, end = spice.span(number + 1) if spice else toml.span(1) if toml else (0, 0)
    return replace(place, column=start + 1, width=end - start) if end else place


# ---------------------------------------------------------------------- runs over time


@rule("step-too-long", "warning")
def step_too_long(circuit: Circuit) -> Iterator[Remark]:
    """The time step is longer than a mode that the waveforms set off, or than a tenth of a sine's period.

    Where no greatest step is given, ngspice 39 takes the printed step or a fiftieth of the run, whichever is
    less. A single time constant as long as the step comes out wrong by 1 %, one of ten steps by 0.04 %.
    """
    run = circuit.analyses.transient
    if run is None or circuit.analyses.chosen:
        return
    step = _step(run)
    fastest, what = _fastest(circuit)
    if step <= fastest:
        return
    wanted = _rounded(min(fastest, step) / 10)
    yield Remark(
        f"the time step may grow to {format_quantity(step, 's')}, longer than {what}.",
        _with_step(circuit, run, wanted),
        circuit.analysis_places.get("transient") or whole(circuit),
    )


def _step(run: TransientRun) -> float:
    return run.max_step if run.max_step is not None else min(run.step, (run.stop - run.start) / 50)


def _fastest(circuit: Circuit) -> tuple[float, str]:
    """The longest step that still shows the fastest thing that happens, s, and what that is."""
    found: list[tuple[float, str]] = []
    for source in circuit.network.sources.values():
        if isinstance(source.waveform, Sine):
            period = 1 / source.waveform.frequency
            found.append(
                (period / 10, f"a tenth of the period of {source.name}, {format_quantity(period, 's')}")
            )
    set_off = _set_off(circuit)
    if set_off is not None:
        so_far = np.abs(np.cumsum(set_off.shares))
        if (so_far > _SHOWS).any():
            mode = int(np.argmax(so_far > _SHOWS))
            constant = float(1 / np.abs(set_off.poles[mode]))
            share = format_quantity(100 * so_far[mode], "%", 2)
            what = f"the time constant of {format_quantity(constant, 's')}; what is as fast makes {share} of"
            found.append((constant, f"{what} the response"))
    return min(found, default=(math.inf, ""))


def _set_off(circuit: Circuit) -> Excitation | None:
    try:
        return excitation(circuit)
    except (RcnetError, ArithmeticError, ValueError):
        # No modes to tell, or values at the ends of what a double holds: the run itself will say so.
        return None


def _with_step(circuit: Circuit, run: TransientRun, step: float) -> str:
    if run.stop / step > _MOST_STEPS:
        return f"Look at it in a shorter run of its own, with steps of {format_quantity(step, 's')}."
    if circuit.origin == "netlist":
        words = [_spice_time(value) for value in (run.step, run.stop, run.start, step)]
        return f"Write .tran {' '.join(words)}{' uic' if run.use_initial else ''}."
    return f'Write max_step = "{write_quantity(step, "s")}".'


def _spice_time(value: float) -> str:
    return write_quantity(value) if value < 1e6 else write_spice_number(value)  # M would be milli


def _rounded(value: float) -> float:
    """The greatest of 1, 2 and 5 times a power of ten that is not above a value."""
    power = math.floor(math.log10(value))
    return max(each for k in (power - 1, power) for m in (1, 2, 5) if (each := float(f"{m}e{k}")) <= value)


@rule("run-too-short", "note")
def run_too_short(circuit: Circuit) -> Iterator[Remark]:
    """The run over time is shorter than a period, or than three time constants of what waveforms set off."""
    run = circuit.analyses.transient
    waves = [source.waveform for source in circuit.network.sources.values() if source.waveform is not None]
    if run is None or circuit.analyses.chosen or not waves:
        return
    needed = [
        (begins(wave) + wave.repeats, f"one period of {format_quantity(wave.repeats, 's')}")
        for wave in waves
        if wave.repeats is not None
    ]
    set_off = _set_off(circuit)
    if set_off is not None:
        rates = -set_off.poles.real[np.abs(set_off.shares) > _LASTS]
        if len(rates) and rates.min() > 0:  # else something never settles
            slowest = float(1 / rates.min())
            needed.append(
                (
                    min(begins(wave) for wave in waves) + _SETTLED * slowest,
                    f"{_SETTLED} time constants of {format_quantity(slowest, 's')}",
                )
            )
    until, what = max(needed, default=(0.0, ""))
    # Rounding of times like 1/f must not decide.
    if until > run.stop * (1 + 1e-9):
        yield Remark(
            f"the run ends at {format_quantity(run.stop, 's')}; {what} would take until "
            f"{format_quantity(until, 's')}.",
            f"Let it run to {format_quantity(_upwards(until), 's')}.",
            circuit.analysis_places.get("transient") or whole(circuit),
        )


def _upwards(value: float) -> float:
    """The least of 1, 2 and 5 times a power of ten that is not below a value."""
    power = math.floor(math.log10(value))
    return min(each for k in (power, power + 1) for m in (1, 2, 5) if (each := float(f"{m}e{k}")) >= value)


@rule("start-ignored", "warning")
def start_ignored(circuit: Circuit) -> Iterator[Remark]:
    """A starting value that counts for nothing: `ic=` on a part where the `.tran` line does not say `uic`.

    ngspice 39 passes over it without a word and starts from the operating point. So it is with any starting
    value where no run over time is asked for.
    """
    run = circuit.analyses.transient
    if run is None:
        named = [*circuit.initial.parts, *circuit.initial.nodes]
        why, remedy = "no run over time is asked for", "Add a .tran line, or take the starting value out."
    elif run.use_initial:
        return
    else:
        named = list(circuit.initial.parts)
        why, remedy = "the .tran line does not say uic", "Write uic at the end of the .tran line."

    def tell(name: str) -> Remark:
        place = circuit.place_of(name)
        found = re.search(r"\bic\s*=\s*[^\s,]+", place.text, re.IGNORECASE)
        if found is not None:
            place = replace(place, column=found.start() + 1, width=len(found[0]))
        return Remark(f"the starting value of {name} is not used: {why}.", remedy, place)

    yield from few(named, tell, "starting values are not used")
