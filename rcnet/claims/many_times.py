"""Measures in time, of many samples of one network at once, good enough to guide a search."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from ..exact import node_pair
from ..exact.modes import step_source
from ..exact.noise import BOLTZMANN
from .cycle import cycles, pieces_spectrum
from .many_responses import Maker, Measured, output_port, response_sampler, roots
from .measures import evaluate
from .sums import Sampler

Float = npt.NDArray[np.float64]
Options = Mapping[str, float | str]
Pair = tuple[int, int]

_PER_DECADE = 24  # points of time
_GONE = 40.0  # time constants


# ---------------------------------------------------------------------- after a step


class _Step:
    """The unit step response of many samples over its final value: 1 - sum share exp(-t rate)."""

    def __init__(self, network: Network, names: Sequence[str], of: str) -> None:
        sources = np.zeros(len(network), dtype=np.complex128)
        sources[network.part_index(step_source(network))] = 1.0
        self.sampler = Sampler(network, names, node_pair(network, of), sources)
        if self.sampler.centre:
            raise UndecidedError("the network has no dc solution.")

    def __call__(self, values: Float) -> tuple[Float, Float, Float]:
        """The shares and rates, (samples, modes), and times for all, (times,), s."""
        sums = self.sampler(values)
        if np.iscomplexobj(sums.mu) and np.abs(sums.mu.imag).max() > 1e-9 * np.abs(sums.mu).max():
            raise np.linalg.LinAlgError("ringing modes are not followed here")
        mu, constant, slope = sums.mu.real, np.real(sums.constant), np.real(sums.slope)
        final = constant.sum(axis=1) + sums.rest
        moving = mu > 1e-14 * mu.max(axis=1, keepdims=True)
        tau = np.where(moving, mu, 1.0)
        share = np.where(moving, constant - slope / tau, 0.0) / final[:, None]
        reach = np.where(moving & (np.abs(share) > 1e-12), mu, np.nan)
        first, last = 1e-4 * float(np.nanmin(reach)), _GONE * float(np.nanmax(reach))
        points = math.ceil(math.log10(last / first) * _PER_DECADE)
        return share, 1 / tau, np.concatenate([[0.0], np.geomspace(first, last, points)])

    @staticmethod
    def missing(share: Float, rate: Float, time: Float) -> Float:
        """What the response lacks at times (samples, times), or (times,) for all."""
        return np.asarray(np.einsum("sk,stk->st", share, np.exp(-time[..., None] * rate[:, None])))


def _first_reaching(step: tuple[Float, Float, Float], level: float) -> Float:
    share, rate, time = step
    lacks = _Step.missing(share, rate, np.broadcast_to(time, (len(share), len(time))))
    reached = np.asarray(lacks <= 1 - level)
    ever: npt.NDArray[np.bool_] = np.asarray(reached.any(axis=1))
    return _between(step, reached.argmax(axis=1), ever, lambda left: left - (1 - level))


def _between(
    step: tuple[Float, Float, Float],
    index: npt.NDArray[np.int64],
    found: npt.NDArray[np.bool_],
    function: Callable[[Float], Float],
) -> Float:
    """Where a function of what is missing changes sign before the point of time `index`; 0 for the first."""
    share, rate, time = step
    late = np.maximum(index, 1)

    def value(x: Float) -> Float:
        return function(_Step.missing(share, rate, x[:, None])[:, 0])

    where = np.where(index == 0, 0.0, roots(value, time[late - 1], time[late]))
    return np.where(found, where, np.nan)


def _delay(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    step = _Step(network, names, of)
    return lambda values: _first_reaching(step(values), 0.5)


def _rise_time(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    step = _Step(network, names, of)

    def measured(values: Float) -> Float:
        made = step(values)
        return _first_reaching(made, 0.9) - _first_reaching(made, 0.1)

    return measured


def _settling_time(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    step, band = _Step(network, names, of), float(options["band"])

    def measured(values: Float) -> Float:
        made = share, rate, time = step(values)
        outside = np.abs(_Step.missing(share, rate, np.broadcast_to(time, (len(share), len(time))))) > band
        last = np.where(outside.any(axis=1), len(time) - outside[:, ::-1].argmax(axis=1), 0)
        settles: npt.NDArray[np.bool_] = np.asarray(last < len(time))
        return _between(made, last, settles, lambda left: np.abs(left) - band)

    return measured


def _time_constant(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    sampler = response_sampler(network, names, of)
    if sampler.centre:
        raise UndecidedError("the network has no dc solution.")
    return lambda values: np.real(sampler(values).mu).max(axis=1)


# ---------------------------------------------------------------------- periodic steady state, noise


def _rms(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    made, _ = cycles(network, names, node_pair(network, of))

    def measured(values: Float) -> Float:
        state = made(values)
        return np.hypot(state.mean, np.sqrt(state.alternating_square()))

    return measured


def _ripple(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    made, _ = cycles(network, names, node_pair(network, of))

    def measured(values: Float) -> Float:
        state = made(values)
        return state.greatest(1.0) - state.greatest(-1.0)

    return measured


_SMALL_THD = 1.0  # per cent, below which the difference of two squares has lost too many digits
_HARMONICS = 64


def _thd(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    made, pieces = cycles(network, names, node_pair(network, of))
    order = np.arange(1, _HARMONICS + 1) / pieces.lengths.sum()
    given, s = np.abs(pieces_spectrum(pieces, order)), 2j * math.pi * order
    small = evaluate(network, "thd", of, options) < _SMALL_THD

    def measured(values: Float) -> Float:
        state = made(values)
        if small:
            amplitude = given * np.abs(state.sums.at(s))
            return np.asarray(100 * np.sqrt((amplitude[:, 1:] ** 2).sum(axis=1)) / amplitude[:, 0])
        fundamental = given[0] * np.abs(state.sums.at(s[:1])[:, 0])
        moving = 2 * state.alternating_square() / fundamental**2
        return np.asarray(100 * np.sqrt(np.maximum(moving - 1, 0.0)))

    return measured


def _ends_of(network: Network, of: str | None, options: Options) -> Pair:
    if "part" not in options:
        return node_pair(network, of or "")
    a, b = network.part(str(options["part"])).nodes[:2]
    return network.node_index(a), network.node_index(b)


def _peak_voltage(network: Network, names: Sequence[str], of: str | None, options: Options) -> Measured:
    made, _ = cycles(network, names, _ends_of(network, of, options))

    def measured(values: Float) -> Float:
        state = made(values)
        return np.maximum(state.greatest(1.0), -state.greatest(-1.0))

    return measured


def _dissipation(network: Network, names: Sequence[str], of: str | None, options: Options) -> Measured:
    name = str(options["part"])
    made, _ = cycles(network, names, _ends_of(network, of, options))
    column, nominal = list(names).index(name) if name in names else None, network.part(name).value

    def measured(values: Float) -> Float:
        ohms = nominal if column is None else values[:, column]
        state = made(values)
        return np.asarray((state.mean**2 + state.alternating_square()) / ohms)

    return measured


def _noise(network: Network, names: Sequence[str], of: str, options: Options) -> Measured:
    """4 k T times the integral of Re Z (H. Nyquist, 1928), of which each mode's share has a closed form."""
    port, ends = output_port(network, of)
    sampler = response_sampler(port, names, " ".join(ends))
    if not sampler.passive or sampler.centre:
        raise UndecidedError("only resistors at one temperature have such a closed form.")
    low, high = (2 * math.pi * float(options[key]) for key in ("from", "to"))
    kelvin = float(options["temperature"])

    def measured(values: Float) -> Float:
        sums = sampler(values)
        tau = np.where(sums.mu > 0, sums.mu, 1.0)
        share = np.where(sums.mu > 0, (np.arctan(high * tau) - np.arctan(low * tau)) / tau, high - low)
        area = (sums.constant * np.where(sums.constant == 0, 0.0, share)).sum(axis=1) / (2 * math.pi)
        return np.asarray(np.sqrt(4 * BOLTZMANN * kelvin * area))

    return measured


TIME_MAKERS: dict[str, Maker] = {
    "delay": _delay,
    "rise_time": _rise_time,
    "settling_time": _settling_time,
    "time_constant": _time_constant,
    "rms": _rms,
    "ripple": _ripple,
    "thd": _thd,
    "noise": _noise,
}
# Measures that may be of a part and not of an output.
PART_MAKERS: dict[str, Callable[[Network, Sequence[str], str | None, Options], Measured]] = {
    "peak_voltage": _peak_voltage,
    "dissipation": _dissipation,
}

__all__ = ["PART_MAKERS", "TIME_MAKERS"]
