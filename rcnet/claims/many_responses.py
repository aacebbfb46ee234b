"""Measures of the response, of many samples of one network at once, good enough to guide a search."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from ..circuit import Network, Source
from ..errors import UndecidedError
from ..exact import ac_drive, node_pair, response, solver_for
from .measures import evaluate
from .profile import HALF_POWER_DB, decibels, profile
from .sensitivities import _driven_by_current
from .sums import Sampler, Sums

Float = npt.NDArray[np.float64]
Options = Mapping[str, float | str]
Measured = Callable[[Float], Float]  # part values (samples, parts) -> the measure (samples,), nan where none
Maker = Callable[[Network, Sequence[str], str, Options], Measured]  # parts by name, output

_TIE_DB = 1e-9  # as in the profile


def response_of(
    network: Network, names: Sequence[str], of: str
) -> Callable[[Float, Float], npt.NDArray[np.complex128]]:
    """The response as a function of part values (samples, names) and frequencies in Hz: (samples, points)."""
    if solver_for(network).eliminates:

        def eliminated(values: Float, frequency: Float) -> npt.NDArray[np.complex128]:
            given = dict(zip(names, np.ascontiguousarray(values.T), strict=True))
            return (
                response(network, frequency, of, values=given)
                if given
                else np.repeat(response(network, frequency, of)[None], len(values), axis=0)
            )

        return eliminated
    sampler = response_sampler(network, names, of)

    def summed(values: Float, frequency: Float) -> npt.NDArray[np.complex128]:
        return np.asarray(sampler(values).at(2j * math.pi * frequency), dtype=np.complex128)

    return summed


def response_sampler(network: Network, names: Sequence[str], of: str) -> Sampler:
    """What makes the sums of the response to the ac drive, for parts by name."""
    return Sampler(network, names, node_pair(network, of), ac_drive(network).sources)


# ---------------------------------------------------------------------- at one frequency


def _gain(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    answer, point = response_of(network, names, of), np.array([float(options["at"])])
    return lambda values: decibels(answer(values, point)[:, 0])


def _dc_gain(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    answer = response_of(network, names, of)
    return lambda values: answer(values, np.zeros(1))[:, 0].real


def _phase(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    # Which turn it is on only following it from low frequencies can tell; near by it is the nominal one.
    answer, point = response_of(network, names, of), np.array([float(options["at"])])
    nominal = evaluate(network, "phase", of, options)

    def measured(values: Float) -> Float:
        own = np.degrees(np.angle(answer(values, point)[:, 0]))
        return own + 360 * np.round((nominal - own) / 360)

    return measured


def _group_delay(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    sampler = response_sampler(network, names, of)
    s = np.array([2j * math.pi * float(options.get("at", 0.0))])

    def measured(values: Float) -> Float:
        sums = sampler(values)
        return -(sums.derivative(s) / sums.at(s))[:, 0].real

    return measured


def _input_impedance(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    return _magnitude(*_driven_by_current(network), names, options)


def _output_impedance(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    return _magnitude(*output_port(network, of), names, options)


def output_port(network: Network, of: str) -> tuple[Network, tuple[str, str]]:
    """The network driven by an ampere into its output alone, and the ends of that."""
    port, name, (a, b) = network.copy(), "Iport", node_pair(network, of)
    for source in network.sources.values():
        port = port.with_source(replace(source, ac=None))
    while name in network:
        name += "_"
    ends = network.nodes[a], network.nodes[b]
    port.add_source(Source(name, (ends[1], ends[0]), ac=1.0))
    return port, ends


def _magnitude(port: Network, ends: tuple[str, str], names: Sequence[str], options: Options) -> Measured:
    answer, point = response_of(port, names, " ".join(ends)), np.array([float(options["at"])])
    return lambda values: np.abs(answer(values, point)[:, 0])


def _harmonic(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    wave = next(iter(network.sources.values())).waveform
    if len(network.sources) != 1 or wave is None or wave.repeats is None:
        raise UndecidedError("several sources add up, or none repeats.")
    return _scaled(network, names, of, "harmonic", options, float(options["order"]) / wave.repeats)


def _mean(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    if len(network.sources) != 1:
        raise UndecidedError("several sources add up.")
    return _scaled(network, names, of, "mean", options, 0.0)


def _scaled(
    network: Network, names: Sequence[str], of: str, measure: str, options: Options, frequency: float
) -> Measured:
    """A measure in proportion to the response at one frequency."""
    answer, point = response_of(network, names, of), np.array([frequency])
    nominal = evaluate(network, measure, of, options)
    part = np.real if measure == "mean" else np.abs
    unit = float(part(response(network, point, of)[0]))
    if unit == 0 or nominal == 0:
        raise UndecidedError("it is zero.")
    return lambda values: nominal / unit * part(answer(values, point)[:, 0])


# ---------------------------------------------------------------------- over all frequencies


class _Edges:
    """The greatest level and both half-power frequencies of many samples."""

    def __init__(self, network: Network, names: Sequence[str], of: str) -> None:
        self.sampler = response_sampler(network, names, of)
        omega = profile(network, node_pair(network, of)).omega
        if self.sampler.passive:
            omega = omega[::2]  # real poles only: no turn of the magnitude is so narrow
        self.omega = np.concatenate([[0.0], omega, [omega[-1] * 1e7]])

    def __call__(self, values: Float) -> tuple[Sums, Float, Float, Float]:
        """The sums, the peak in dB, and the lower and the upper cutoff in Hz, nan where there is none."""
        sums = self.sampler(values)
        level = decibels(sums.at(1j * self.omega))
        inner = level[:, 1:-1].argmax(axis=1) + 1
        top, where = self._refined(sums, inner)
        zero, infinity = level[:, 0], level[:, -1]
        peak = np.maximum(np.maximum(zero, infinity), top)
        at_zero, at_infinity = zero >= peak - _TIE_DB, infinity >= peak - _TIE_DB
        place = np.where(at_zero, 0.0, np.where(at_infinity, np.inf, where))
        stop = at_zero & at_infinity
        below = level < (peak - HALF_POWER_DB)[:, None]
        upward = self._crossing(sums, below, peak, place, True)
        downward = self._crossing(sums, below, peak, np.where(stop, np.inf, place), False)
        return sums, peak, np.where(stop, upward, downward), np.where(stop, downward, upward)

    def _refined(self, sums: Sums, inner: npt.NDArray[np.int64]) -> tuple[Float, Float]:
        """The highest point on the grid, refined by parabolas in ln omega: its height, and where it is."""
        middle = np.log(self.omega[np.clip(inner, 2, len(self.omega) - 3)])
        width = np.log(self.omega[3] / self.omega[2]) * np.ones(len(middle))
        for _ in range(4):
            around = middle[:, None] + width[:, None] * np.array([-1.0, 0.0, 1.0])
            a, b, c = decibels(sums.at(1j * np.exp(around))).T
            bend = 2 * b - a - c
            move = np.where(bend > 0, (c - a) / (2 * np.where(bend > 0, bend, 1.0)), np.sign(c - a))
            middle, width = middle + width * np.clip(move, -1, 1), width / 8
        where = np.exp(middle)
        return decibels(sums.at(1j * where[:, None]))[:, 0], where

    def _crossing(
        self, sums: Sums, below: npt.NDArray[np.bool_], peak: Float, place: Float, upward: bool
    ) -> Float:
        """The first crossing of half power on one side of the peak, Hz."""
        omega = self.omega
        beyond = below & (omega > place[:, None] if upward else omega < place[:, None])
        beyond[:, 0] = beyond[:, -1] = False
        outer = beyond.argmax(axis=1) if upward else len(omega) - 1 - beyond[:, ::-1].argmax(axis=1)
        found = beyond.any(axis=1)
        outer = np.where(found, outer, 1)
        start = omega[outer - 1] if upward else omega[np.minimum(outer + 1, len(omega) - 1)]
        inside = (place > 0) & np.isfinite(place)
        start = np.where(inside & (upward == (start < place)), place, start)
        start = np.where(start == 0, omega[outer] * 1e-12, start)

        def above(x: Float) -> Float:
            return decibels(sums.at(1j * np.exp(x)[:, None]))[:, 0] - (peak - HALF_POWER_DB)

        where = np.exp(roots(above, np.log(start), np.log(omega[outer])))
        return np.where(found, where / (2 * math.pi), np.nan)


def roots(function: Callable[[Float], Float], a: Float, b: Float) -> Float:
    """The zero of each of many functions between two points where it differs in sign, to 1e-13.

    The Illinois rule of false position (M. Dowell, P. Jarratt, BIT 11:168-174, 1971), side by side.
    """
    fa, fb = function(a), function(b)
    a, b = a.copy(), b.copy()
    for _ in range(60):
        span = fb - fa
        x = np.where(span != 0, b - fb * (b - a) / np.where(span != 0, span, 1.0), (a + b) / 2)
        x = np.where((x - a) * (x - b) <= 0, x, (a + b) / 2)
        fx = function(x)
        crossed = np.sign(fx) != np.sign(fb)
        a, fa = np.where(crossed, b, a), np.where(crossed, fb, fa / 2)
        done = np.abs(x - b) <= 1e-13 * np.maximum(1.0, np.abs(x))
        b, fb = x, fx
        if (done | (fx == 0)).all():
            break
    return b


def _cutoff(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    edges, edge = _Edges(network, names, of), options.get("edge")

    def measured(values: Float) -> Float:
        _, _, lower, upper = edges(values)
        if edge is not None:
            return lower if edge == "lower" else upper
        two = np.isfinite(lower) & np.isfinite(upper)
        return np.where(two, np.nan, np.where(np.isfinite(upper), upper, lower))

    return measured


def _bandwidth(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    edges = _Edges(network, names, of)

    def measured(values: Float) -> Float:
        _, _, lower, upper = edges(values)
        return np.abs(upper - lower)

    return measured


def _centre(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    edges = _Edges(network, names, of)

    def measured(values: Float) -> Float:
        _, _, lower, upper = edges(values)
        return np.sqrt(lower) * np.sqrt(upper)

    return measured


def _attenuation(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    edges, s = _Edges(network, names, of), np.array([2j * math.pi * float(options["at"])])

    def measured(values: Float) -> Float:
        sums, peak, _, _ = edges(values)
        return np.maximum(peak - decibels(sums.at(s))[:, 0], 0.0)

    return measured


RESPONSE_MAKERS: dict[str, Maker] = {
    "gain": _gain,
    "dc_gain": _dc_gain,
    "phase": _phase,
    "group_delay": _group_delay,
    "elmore_delay": _group_delay,
    "input_impedance": _input_impedance,
    "output_impedance": _output_impedance,
    "harmonic": _harmonic,
    "mean": _mean,
    "cutoff": _cutoff,
    "bandwidth": _bandwidth,
    "centre": _centre,
    "attenuation": _attenuation,
}

__all__ = ["RESPONSE_MAKERS", "Maker", "Measured", "output_port", "response_of", "response_sampler", "roots"]
