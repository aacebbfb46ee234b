"""The measures that are easily taken for one another, each with what it is called."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping

import numpy as np

from ..circuit import Network
from ..errors import RcnetError
from ..exact import input_impedance, node_pair, output_impedance, response, span_of
from ..exact.modes import natural_rates
from .measures import evaluate

Options = Mapping[str, float | str]
Named = tuple[str, float]

_MOST_MODES = 6
_FAR = 1e6  # times the span of the modes: how far out a response is its asymptote, to six digits


def related(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    """(what it is, its value) of every measure a formula for `measure` may have meant instead.

    Values are in the unit of `measure`; what does not exist for this network is left out.
    """
    for family in _FAMILIES.get(measure, ()):
        found: list[Named] = []
        try:
            # What stands before a measure that does not exist is kept.
            for named in family(network, measure, of, options):
                found.append(named)
        except (RcnetError, ArithmeticError, np.linalg.LinAlgError):
            pass
        yield from (named for named in found if math.isfinite(named[1]))


def _at(options: Options) -> float:
    return float(options["at"])


# ---------------------------------------------------------------------- frequencies and times


def _modes(network: Network) -> list[float]:
    """The slowest natural frequencies, rad/s, slowest first; nothing where one does not die away."""
    rates = natural_rates(network)
    if not len(rates) or (rates.real >= 0).any():
        return []
    return [float(rate) for rate in np.sort(np.abs(rates))[:_MOST_MODES]]


def _mode_frequencies(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    rates = [rate / (2 * math.pi) for rate in _modes(network)]
    if measure == "centre" and len(rates) > 1:
        yield "the geometric mean of two natural frequencies", math.sqrt(rates[0] * rates[1])
    if measure == "bandwidth" and len(rates) > 1:
        yield "the distance between two natural frequencies", rates[1] - rates[0]
        yield "the sum of two natural frequencies", rates[1] + rates[0]
    for number, rate in enumerate(rates):
        which = "slowest" if number == 0 else "fastest" if number == len(rates) - 1 else f"{number + 1}."
        only = "one natural mode" if len(rates) == 1 else f"{which} natural mode"
        yield f"the frequency of the {only}, 1/(2 pi times its time constant)", rate


def _frequencies_of_delays(
    network: Network, measure: str, of: str | None, options: Options
) -> Iterator[Named]:
    yield (
        "1/(2 pi times the Elmore delay)",
        1 / (2 * math.pi * abs(evaluate(network, "elmore_delay", of, {}))),
    )
    if not set(network.arrays().kinds.tolist()) - {*b"RCVI"}:  # elsewhere its modes take long
        rise = evaluate(network, "rise_time", of, {})
        yield "0.35 over the rise time", math.log(9) / (2 * math.pi) / rise


def _cutoffs(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    edge = options.get("edge")
    for other, words in (("lower", "the lower cutoff"), ("upper", "the upper cutoff")):
        if not (measure == "cutoff" and edge in (None, other)):
            yield words, evaluate(network, "cutoff", of, {"edge": other})


def _bands(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    for other, words in (("centre", "the centre of the band"), ("bandwidth", "the bandwidth")):
        if other != measure:
            yield words, evaluate(network, other, of, {})


_FACTORS: dict[str, tuple[str, Callable[[Options], float]]] = {
    "rise_time": ("ln 9 (2.2) times ", lambda options: math.log(9)),
    "delay": ("ln 2 (0.69) times ", lambda options: math.log(2)),
    "settling_time": ("ln(1/band) times ", lambda options: -math.log(float(options["band"]))),
}


def _times(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    words, of_options = _FACTORS.get(measure, ("", None))
    times = of_options(options) if of_options else 1.0
    if (words or measure != "time_constant") and (rates := _modes(network)):
        yield f"{words}the slowest time constant", times / rates[0]
    if words or measure != "elmore_delay":
        elmore = evaluate(network, "elmore_delay", of, {})
        yield f"{words}the Elmore delay", times * elmore
        if words:
            yield "the Elmore delay", elmore


def _other_times(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    words, of_options = _FACTORS.get(measure, ("", None))
    times = of_options(options) if of_options else 1.0
    cutoff = evaluate(network, "cutoff", of, {})
    yield f"{words}1/(2 pi times the cutoff)", times / (2 * math.pi * cutoff)
    for number, rate in enumerate(_modes(network)[1:]):
        yield f"{words}the time constant of the {number + 2}. natural mode", times / rate


# ---------------------------------------------------------------------- levels, phases, impedances


def _levels(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    at = {"at": _at(options)}
    if measure == "gain":
        yield "the gain below the greatest there is", -evaluate(network, "attenuation", of, at)
        yield "the attenuation", evaluate(network, "attenuation", of, at)
    else:
        yield "the attenuation below a gain of one", -evaluate(network, "gain", of, at)
        yield "the gain", evaluate(network, "gain", of, at)


def _asymptotes(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    span, at = span_of(network), _at(options)
    gain = evaluate(network, "gain", of, {"at": at})
    top = gain + evaluate(network, "attenuation", of, {"at": at}) if measure == "attenuation" else 0.0
    for edge, factor, words in (
        (span.high * _FAR, 10.0, "high"),
        (span.low / _FAR, 0.1, "low"),
    ):
        near, further = np.abs(
            response(network, np.array([edge, edge * factor]) / (2 * math.pi), of or "out")
        )
        power = round(math.log10(further / near) / math.log10(factor))
        level = 20 * math.log10(near) + 20 * power * math.log10(2 * math.pi * at / edge)
        yield (
            f"the straight line the response nears at {words} frequencies",
            top - level if measure == "attenuation" else level,
        )


def _turns(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    phase = evaluate(network, "phase", of, options)
    for turn in (-360.0, 360.0, 180.0, -180.0):
        words = (
            "the same angle counted from another turn"
            if abs(turn) == 360
            else "the phase of the inverted output"
        )
        yield words, phase + turn
    yield "the phase lag, its sign turned", -phase


def _ends(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    span = span_of(network)
    high = response(network, [span.high * _FAR / (2 * math.pi)], of or "out")[0]
    yield "the gain at high frequencies", float(high.real)
    yield "the gain with its sign turned", -evaluate(network, "dc_gain", of, {})


def _impedances(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    def impedance(omega: float) -> complex:
        at = np.array([omega])
        if measure == "input_impedance":
            return complex(input_impedance(network, at)[0])
        return complex(output_impedance(network, at, node_pair(network, of or "out"))[0])

    here = impedance(2 * math.pi * _at(options))
    yield "the resistive part of the impedance", here.real
    yield "the reactive part of the impedance", abs(here.imag)
    yield "the impedance at high frequencies", abs(impedance(span_of(network).high * _FAR))
    yield "the impedance at dc", abs(impedance(0.0))


# ---------------------------------------------------------------------- periodic state, noise, parts


def _swings(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    ripple = evaluate(network, "ripple", of, {})
    if measure == "harmonic":
        yield "the harmonic's rms", evaluate(network, "harmonic", of, options) / math.sqrt(2)
        yield "half the ripple", ripple / 2
        return
    mean, rms = evaluate(network, "mean", of, {}), evaluate(network, "rms", of, {})
    yield "the rms of what varies, the mean left out", math.sqrt(max(rms**2 - mean**2, 0.0))
    yield "half the ripple, from its middle to its peak", ripple / 2
    if measure in ("rms", "mean"):
        yield ("the mean", mean) if measure == "rms" else ("the rms", rms)
    first = evaluate(network, "harmonic", of, {"order": 1.0})
    yield "the fundamental's amplitude", first
    if measure == "ripple":
        yield "the ripple of the fundamental alone", 2 * first
    else:
        yield "the fundamental's rms", first / math.sqrt(2)


def _noises(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    everything = {**options, "from": 0.0, "to": math.inf}
    if everything != dict(options):
        yield "the noise of all frequencies", evaluate(network, "noise", of, everything)


def _of_parts(network: Network, measure: str, of: str | None, options: Options) -> Iterator[Named]:
    pair = of if "part" not in options else " ".join(network.part(str(options["part"])).nodes[:2])
    mean, rms = evaluate(network, "mean", pair, {}), evaluate(network, "rms", pair, {})
    peak = evaluate(network, "peak_voltage", pair, {})
    if measure == "peak_voltage":
        yield "the mean", abs(mean)
        yield "the rms", rms
    else:
        resistance = network.part(str(options["part"])).value
        yield "the power of the mean voltage", mean**2 / resistance
        yield "the greatest power at any moment", peak**2 / resistance


_IN_TIME = (_times, _other_times)
_IN_FREQUENCY = (_mode_frequencies, _cutoffs, _frequencies_of_delays)
_FAMILIES: dict[str, tuple[Callable[[Network, str, str | None, Options], Iterator[Named]], ...]] = {
    "cutoff": (*_IN_FREQUENCY, _bands),
    "bandwidth": (*_IN_FREQUENCY, _bands),
    "centre": (*_IN_FREQUENCY, _bands),
    "time_constant": _IN_TIME,
    "elmore_delay": _IN_TIME,
    "rise_time": _IN_TIME,
    "delay": _IN_TIME,
    "settling_time": _IN_TIME,
    "group_delay": _IN_TIME,
    "gain": (_levels, _asymptotes),
    "attenuation": (_levels, _asymptotes),
    "phase": (_turns,),
    "dc_gain": (_ends,),
    "input_impedance": (_impedances,),
    "output_impedance": (_impedances,),
    "ripple": (_swings,),
    "rms": (_swings,),
    "mean": (_swings,),
    "harmonic": (_swings,),
    "noise": (_noises,),
    "dissipation": (_of_parts,),
    "peak_voltage": (_of_parts,),
}
