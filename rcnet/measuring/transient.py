"""Measurements in a run over time."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import cached_property

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Claim, Points, Source, Square, Step
from ..claims.profile import root
from ..errors import CircuitError, UndecidedError
from ..exact import driving_sources, natural_rates, operating_point, transient
from ..exact.periodic import common_period
from ..netlist import Names
from ..values import format_quantity, write_spice_number
from .measurement import Measurement, Namer, node_of

Float = npt.NDArray[np.float64]
_AT_STEP = frozenset(["rise_time", "delay", "settling_time"])
_WORDS = {"mean": "avg", "rms": "rms", "ripple": "pp"}
_MOST_PARTS = 500  # the exact run of larger networks takes long
_FINEST = 40  # halvings towards a corner
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)


class TransientMeter:
    """What a run can tell, each with the exact value for this very run, its edges and its start included."""

    measures = frozenset([*_AT_STEP, *_WORDS])
    word = "tran"

    def __init__(self, circuit: Circuit, names: Names) -> None:
        run = circuit.analyses.transient
        if run is None:
            raise CircuitError("there is no transient to measure in.", remedy="Add one under [analysis].")
        self.circuit, self.names, self.run = circuit, names, run
        self.waved = [source for source in circuit.network.sources.values() if source.waveform is not None]

    def of_claim(self, claim: Claim, name: Namer) -> Iterator[Measurement]:
        """The lines for one claim. Raises RcnetError with the reason where it cannot be measured."""
        self._require_plain()
        node, written = node_of(self.circuit, self.names, claim.of)
        measure = claim.measure.name
        if measure in _AT_STEP:
            yield self._at_step(node, written, measure, claim, name(measure))
        else:
            yield self._over_period(node, written, measure, name(measure))

    def unasked(self, name: Namer) -> Iterator[Measurement]:
        """Nothing: what is worth measuring over time depends on the circuit."""
        yield from ()

    def _require_plain(self) -> None:
        if self.run.use_initial or self.circuit.initial:
            raise UndecidedError("the run starts from given voltages.")
        if len(self.circuit.network) > _MOST_PARTS:
            raise UndecidedError(f"the network has more than {_MOST_PARTS} parts.")

    # -- the exact run

    def _exact(self, node: str) -> Callable[[Float], Float]:
        network = self.circuit.network
        return lambda times: transient(network, times, node)

    @cached_property
    def _fastest(self) -> float:
        """The fastest natural rate, 1/s; 0 where nothing stores energy."""
        return float(np.abs(natural_rates(self.circuit.network)).max(initial=0.0))

    def _corners(self, start: float, stop: float) -> list[float]:
        """The ends of an interval and every corner of a waveform between them, s, rising."""
        found = {start, stop}
        for source in self.waved:
            found |= {time for time in _corners(source, stop) if start < time < stop}
        return sorted(found)

    def _mesh(self, start: float, stop: float) -> Float:
        """Times between which the run is smooth: denser behind each corner, where fast modes die away."""
        pieces = [np.array([start])]
        for low, high in itertools.pairwise(self._corners(start, stop)):
            even = np.linspace(low, high, 33)[1:]
            halvings = math.ceil(math.log2(max((even[0] - low) * self._fastest, 1.0))) + 2
            pieces += [low + (even[0] - low) * 0.5 ** np.arange(min(halvings, _FINEST), 0, -1), even]
        return np.unique(np.concatenate(pieces))

    # -- the kinds of measurement

    def _the_step(self) -> tuple[Source, Step]:
        if len(self.waved) != 1 or not isinstance(self.waved[0].waveform, Step):
            raise UndecidedError("the run holds no single step.")
        source, step = self.waved[0], self.waved[0].waveform
        if set(driving_sources(self.circuit.network)) - {source.name}:
            raise UndecidedError("the step is another source's than the one the claim is about.")
        if step.initial == step.final or step.at + step.rise >= self.run.stop:
            raise UndecidedError("the step does not happen within the run.")
        return source, step

    def _at_step(self, node: str, written: str, measure: str, claim: Claim, name: str) -> Measurement:
        source, step = self._the_step()
        first = float(self._exact(node)(np.zeros(1))[0])
        settled = self.circuit.network.with_source(replace(source, dc=step.final, waveform=None))
        last = operating_point(settled)[node]
        if first == last:
            raise UndecidedError("the output ends where it began.")
        edge = _Edge(self._exact(node), self._mesh(step.at, self.run.stop))
        since, turn = f"trig at={write_spice_number(step.at)}", "rise=1" if last > first else "fall=1"

        def reaches(share: float) -> tuple[float, str]:
            level = first + share * (last - first)
            return edge.crossing(level), f"v({written}) val={write_spice_number(level)} {turn}"

        if measure == "settling_time":
            when, level = edge.settled(last, abs(float(claim.options["band"]) * (last - first)))
            text = f"{since} targ v({written}) val={write_spice_number(level)} cross=last"
            return Measurement(name, text, when - step.at, "s")
        if measure == "delay":
            when, there = reaches(0.5)
            return Measurement(name, f"{since} targ {there}", when - step.at, "s")
        (begins, low), (ends, high) = reaches(0.1), reaches(0.9)
        return Measurement(name, f"trig {low} targ {high}", ends - begins, "s")

    def _over_period(self, node: str, written: str, measure: str, name: str) -> Measurement:
        """Mean, rms or ripple over the last whole period of the run."""
        periods = {
            source.name: source.waveform.repeats for source in self.waved if source.waveform is not None
        }
        repeating = {source: period for source, period in periods.items() if period is not None}
        if not repeating:
            raise UndecidedError("no source repeats in the run.")
        start = self.run.stop - common_period(repeating)[0]
        if start < self.run.start:
            raise UndecidedError("the run is shorter than a period.")
        exact, mesh = self._exact(node), self._mesh(start, self.run.stop)
        value = (
            _peak_to_peak(exact, mesh) if measure == "ripple" else _mean(exact, mesh, square=measure == "rms")
        )
        where = f"from={write_spice_number(start)} to={write_spice_number(self.run.stop)}"
        remark = f"over the run's last {format_quantity(self.run.stop - start, 's', 6)}, settled or not"
        return Measurement(name, f"{_WORDS[measure]} v({written}) {where}", value, "V", None, remark)


class _Edge:
    """The exact run behind a step, where it crosses levels."""

    def __init__(self, exact: Callable[[Float], Float], mesh: Float) -> None:
        self.exact, self.mesh, self.values = exact, mesh, exact(mesh)

    def crossing(self, level: float, *, final: bool = False) -> float:
        """The first or the last time the run crosses a level, s. Raises UndecidedError."""
        turned = np.flatnonzero((self.values[:-1] < level) != (self.values[1:] < level))
        if not len(turned):
            raise UndecidedError("the output does not get there within the run.")
        k = int(turned[-1 if final else 0])
        low, high = max(float(self.mesh[k]), 1e-300), float(self.mesh[k + 1])
        return root(lambda time: float(self.exact(np.array([time]))[0]) - level, low, high)

    def settled(self, last: float, band: float) -> tuple[float, float]:
        """The last entry into the band around the final value, s, and the level crossed there."""
        outside = np.abs(self.values - last) > band
        if outside[-1] or not outside.any():
            raise UndecidedError("the output does not enter the band within the run.")
        level = last + math.copysign(band, self.values[np.flatnonzero(outside)[-1]] - last)
        return self.crossing(level, final=True), level


def _corners(source: Source, stop: float) -> Iterator[float]:
    """The times up to `stop` at which a source's waveform has a corner, s."""
    wave = source.waveform
    own: list[float] = []
    if isinstance(wave, Square):
        own = [0.0, wave.rise, wave.rise + wave.width, wave.rise + wave.width + wave.fall]
        own = [wave.delay + time for time in own]
    elif isinstance(wave, Points):
        own = [time for time, _ in wave.values]
    elif isinstance(wave, Step):
        own = [wave.at, wave.at + wave.rise]
    elif wave is not None:
        own = [
            getattr(wave, "delay", 0.0),
            getattr(wave, "rise_delay", 0.0),
            getattr(wave, "fall_delay", 0.0),
        ]
    period = None if wave is None or not isinstance(wave, (Square, Points)) else wave.repeats
    for time in own:
        yield time
        if period is not None:
            yield from (
                time + turn * period for turn in range(1, math.floor(min((stop - time) / period, 1e5)) + 1)
            )


def _mean(exact: Callable[[Float], Float], mesh: Float, *, square: bool) -> float:
    """The mean of the run over the mesh, or its root mean square: a Gauss rule between every two times."""
    half, middle = np.diff(mesh) / 2, (mesh[:-1] + mesh[1:]) / 2
    values = exact((middle[:, None] + half[:, None] * _NODES).ravel()).reshape(len(half), -1)
    mean = float(half @ ((values**2 if square else values) @ _WEIGHTS)) / float(mesh[-1] - mesh[0])
    return math.sqrt(mean) if square else mean


def _peak_to_peak(exact: Callable[[Float], Float], mesh: Float) -> float:
    """Greatest less least of the run, looked at closely around both."""
    times = np.unique(np.concatenate([mesh, (mesh[:-1] + mesh[1:]) / 2]))
    values = exact(times)
    ends = []
    for sign in (1.0, -1.0):
        k = int(np.argmax(sign * values))
        low, high = times[max(k - 1, 0)], times[min(k + 1, len(times) - 1)]
        for _ in range(3):
            close = np.linspace(low, high, 201)
            k = int(np.argmax(sign * exact(close)))
            low, high = close[max(k - 1, 0)], close[min(k + 1, 200)]
        ends.append(float((sign * exact(np.array([low, (low + high) / 2, high]))).max()))
    return sum(ends)
