"""The measures taken in time: natural modes, step response, periodic steady state, discharge."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping

import numpy as np

from ..circuit import Network
from ..errors import CircuitError, UndecidedError
from ..exact.decay import Decay
from ..exact.modes import natural_rates
from ..exact.periodic import Periodic, periodic_pairs, repeats, settled_values
from ..exact.step import discharge, step_response

Options = Mapping[str, float | str]
Pair = tuple[int, int]


def time_constant(network: Network, of: Pair, options: Options) -> float:
    """The slowest natural mode, s: -1 / Re(p) of the natural frequency p nearest the imaginary axis.

    It belongs to the network with its sources dead, whatever the output. Raises UndecidedError where there is
    no mode, and where one never dies away (charge that nothing drains, an unstable circuit).
    """
    poles = natural_rates(network)
    if not len(poles):
        raise UndecidedError("the network has no natural mode: nothing in it stores energy.")
    slowest = float(poles.real.max())
    if (poles == 0).any():
        raise UndecidedError(
            "charge that nothing drains stays for ever, so the slowest mode has no time constant."
        )
    if slowest >= 0:
        raise UndecidedError("a natural mode does not die away, so the circuit has no time constant.")
    return -1.0 / slowest


# ---------------------------------------------------------------------- step response


def _settling_step(network: Network, of: Pair) -> Decay:
    """The unit step response over its final value. Raises UndecidedError where that is zero."""
    response = step_response(network, of)
    if response.base == 0:
        raise UndecidedError("the step response settles at zero, so there is no final value to compare with.")
    return Decay(1.0, response.poles, response.weights / response.base)


def _first_reaching(response: Decay, share: float) -> float:
    """When the response first reaches a share of its final value, s; 0 where the step itself takes
    it there.
    """
    above = response.lifted(share)
    if above(np.zeros(1))[0] >= 0:
        return 0.0
    times = above.crossings()
    if not len(times):
        raise UndecidedError(f"the step response does not reach {share:.0%} of its final value.")
    return float(times[0])


def rise_time(network: Network, of: Pair, options: Options) -> float:
    """From first reaching 10 % to first reaching 90 % of the final value of the unit step response, s.

    The step is one of the source that carries ac, else of the one that has a waveform; the network is at rest
    before. Raises UndecidedError where the final value is zero.
    """
    response = _settling_step(network, of)
    return _first_reaching(response, 0.9) - _first_reaching(response, 0.1)


def delay(network: Network, of: Pair, options: Options) -> float:
    """From the step to first reaching 50 % of the final value of the unit step response, s."""
    return _first_reaching(_settling_step(network, of), 0.5)


def settling_time(network: Network, of: Pair, options: Options) -> float:
    """From the step to the last entry into the band around the final value, s.

    `band` is a share of the final value, to either side. Zero where the response is never outside.
    """
    band = float(options["band"])
    response = _settling_step(network, of)
    missing = Decay(0.0, response.poles, response.weights)  # what is left to go, which has all its digits
    last = 0.0
    for level in (-band, band):
        times = missing.lifted(level).crossings()
        last = max(last, float(times[-1]) if len(times) else 0.0)
    return last


# ---------------------------------------------------------------------- periodic steady state


def _periodic(network: Network, of: Pair) -> Periodic:
    return periodic_pairs(network, [of])[0]


def mean(network: Network, of: Pair, options: Options) -> float:
    """The mean of the periodic steady state, V."""
    return float(_periodic(network, of).mean)


def rms(network: Network, of: Pair, options: Options) -> float:
    """The root mean square of the periodic steady state, its mean included, V."""
    return float(_periodic(network, of).rms)


def ripple(network: Network, of: Pair, options: Options) -> float:
    """Peak to peak of the periodic steady state, V."""
    return float(_periodic(network, of).ripple)


def harmonic(network: Network, of: Pair, options: Options) -> float:
    """The peak amplitude of harmonic `order` of the common period in the periodic steady state, V."""
    return float(_periodic(network, of).harmonic(int(options["order"])))


def thd(network: Network, of: Pair, options: Options) -> float:
    """The root of the summed squares of harmonics 2 and up over the first, %, all of them in the sum."""
    return 100 * float(_periodic(network, of).thd)


# ---------------------------------------------------------------------- parts


def ends_of(network: Network, part: str) -> Pair:
    """The nodes a part's voltage is taken between, its first less its second."""
    nodes = network.part(part).nodes
    return network.node_index(nodes[0]), network.node_index(nodes[1])


def peak_voltage(network: Network, of: Pair, options: Options) -> float:
    """The greatest magnitude of a voltage in the periodic steady state, or the dc one where no source
    repeats, V.

    The voltage is that across `part`, or of a node or a pair.
    """
    pair = ends_of(network, str(options["part"])) if "part" in options else of
    if repeats(network):
        return float(_periodic(network, pair).peak)
    return abs(float(settled_values(network, [pair])[0]))


def dissipation(network: Network, of: Pair, options: Options) -> float:
    """The mean power a resistor turns into heat in the periodic steady state, or the dc one, W."""
    name = str(options["part"])
    part = network.part(name)
    if part.kind != "R":
        raise CircuitError(f"{name} is no resistor, so it dissipates nothing.", remedy="Name a resistor.")
    pair = ends_of(network, name)
    if repeats(network):
        state = _periodic(network, pair)
        return float((state.mean**2 + state.alternating_square) / part.value)
    return float(settled_values(network, [pair])[0]) ** 2 / part.value


def discharge_time(network: Network, of: Pair, options: Options) -> float:
    """From the moment every source is disconnected until the voltage of a capacitor has first fallen to `to`,
    s.

    Disconnected sources are open circuits. Before, the network is in its dc steady state, or, where a source
    repeats, in the periodic one at the moment when the magnitude of this capacitor's voltage is greatest.
    Zero where it is not above `to` even then. Raises UndecidedError where it stays above for ever.
    """
    name, target = str(options["part"]), float(options["to"])
    if network.part(name).kind != "C":
        raise CircuitError(f"{name} is no capacitor, so it holds no charge.", remedy="Name a capacitor.")
    if target <= 0:
        raise UndecidedError("a capacitor's voltage comes ever nearer to zero and never arrives.")
    decay = discharge(network, name, _charged(network, name))
    start = float(decay(np.zeros(1))[0])
    if abs(start) <= target:
        return 0.0
    times = decay.lifted(math.copysign(target, start)).crossings()
    if not len(times):
        raise UndecidedError(
            f"{name} keeps {abs(decay.base):.6g} V: once the sources are gone"
            f" nothing takes it down to {target:.6g} V."
        )
    return float(times[0])


def _charged(network: Network, name: str) -> dict[str, float]:
    """The voltage of every capacitor at the moment the sources are disconnected."""
    capacitors = [part.name for part in network.parts if part.kind == "C" and part.nodes[0] != part.nodes[1]]
    if name not in capacitors:
        raise CircuitError(f"{name} has both ends on one node.", remedy="Name another capacitor.")
    pairs = [ends_of(network, each) for each in capacitors]
    if not repeats(network):
        return dict(zip(capacitors, settled_values(network, pairs).tolist(), strict=True))
    states = periodic_pairs(network, pairs)
    middle, time = states[capacitors.index(name)].peak_moment
    return {
        each: state.mean + float(state.alternating(np.array([middle]), np.array([time]))[0])
        for each, state in zip(capacitors, states, strict=True)
    }


# Each is entered under its name in the table of all measures.
TIME_MEASURES: dict[str, Callable[[Network, Pair, Options], float]] = {
    "time_constant": time_constant,
    "rise_time": rise_time,
    "delay": delay,
    "settling_time": settling_time,
    "mean": mean,
    "rms": rms,
    "ripple": ripple,
    "harmonic": harmonic,
    "thd": thd,
    "dissipation": dissipation,
    "peak_voltage": peak_voltage,
    "discharge_time": discharge_time,
}

__all__ = ["TIME_MEASURES", "ends_of"]
