"""The measures: numbers with an exact meaning, computed from the exact response."""

from __future__ import annotations

import cmath
import itertools
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import MEASURES, Network, measure_spec, parse_options
from ..errors import UndecidedError
from ..exact import (
    dc_solvable,
    input_impedance,
    limit,
    node_pair,
    output_impedance,
    response,
    response_and_slope,
    solver_for,
    span_of,
)
from .profile import NOTHING_ARRIVES, PER_DECADE, decibels, half_power, profile

Options = Mapping[str, float | str]
Pair = tuple[int, int]
Numbers = npt.NDArray[Any]


def measure(network: Network, name: str, of: str | None = None, **options: Any) -> float:
    """One measure of a network, in the unit of the measures table.

    name: a measure; of: a node or a pair `"a b"`, by default `out`
    options: as the measure needs them, in base units or as text (`at="1 kHz"`); a trailing underscore is
        dropped, so that `from_=20` can be written
    Raises UndecidedError where the measure does not exist for this network, CircuitError for wrong names.
    """
    spec = measure_spec(name)
    parsed = parse_options(spec, {key.rstrip("_"): value for key, value in options.items()})
    if of is None and "part" not in parsed:
        of = "out"
    return evaluate(network, name, of, parsed)


def evaluate(network: Network, name: str, of: str | None, options: Options) -> float:
    """A measure with options already read; `of` may be None only for measures of a part."""
    spec = MEASURES[name]
    function = COMPUTED.get(name) or _in_other_rooms()[name]
    pair = node_pair(network, of) if of is not None else (0, 0)
    _reachable(name, options)
    try:
        with np.errstate(over="raise", invalid="raise", divide="raise"):
            value = float(function(network, pair, options))
    except (FloatingPointError, OverflowError, ZeroDivisionError):
        raise UndecidedError(
            f"{spec.name} leads beyond the numbers double precision holds here.",
            remedy="Check the values for a slip of many powers of ten.",
        ) from None
    if not math.isfinite(value):
        raise UndecidedError(f"{spec.name} is not a finite number here.")
    return value


def _reachable(name: str, options: Options) -> None:
    """Raises UndecidedError for a frequency whose omega is no finite double; noise may go up to infinity."""
    for key in ("at", "from", "to") if name == "noise" else ("at",):
        value = float(options.get(key, 0))
        if not math.isfinite(2 * math.pi * value) and not (key == "to" and value == math.inf):
            raise UndecidedError(
                f"{key} = {value:.6g} Hz is beyond the frequencies double precision can reckon with.",
                remedy="Name a lower frequency.",
            )


def _in_other_rooms() -> Mapping[str, Callable[[Network, Pair, Options], float]]:
    # They need modes and quadratures, which a claim about the response should not wait for at start-up.
    from .noise_measures import NOISE_MEASURES
    from .time_measures import TIME_MEASURES

    return {**TIME_MEASURES, **NOISE_MEASURES}


def _at(options: Options) -> float:
    return float(options["at"])


def _omega(options: Options) -> float:
    return 2 * math.pi * _at(options)


def _name(network: Network, of: Pair) -> str:
    names = network.nodes
    return names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"


_NULL = 1e-8  # magnitudes below this are looked at twice


def _level(network: Network, of: Pair, frequency: float) -> float:
    if frequency == 0:
        value: complex = limit(network, of, high=False)
    else:
        value = complex(response(network, [frequency], _name(network, of))[0])
        if abs(value) < _NULL and _is_null(network, of, 2 * math.pi * frequency):
            value = 0
    if value == 0:
        _refuse_silence(network, of)
        raise UndecidedError(
            f"nothing arrives at the output at {frequency:.6g} Hz: its gain is no number of dB."
        )
    return float(decibels(abs(value)))


def _refuse_silence(network: Network, of: Pair) -> None:
    """Raises UndecidedError where the response is zero at every frequency, not only at one."""
    span = span_of(network)
    frequencies = np.geomspace(span.low / 100, span.high * 100, 9) / (2 * math.pi)
    if not np.any(response(network, frequencies, _name(network, of))):
        raise UndecidedError(NOTHING_ARRIVES)


def _refuse_underflow(value: Numbers) -> None:
    """Raises UndecidedError where a response is so small that a double no longer holds all its digits."""
    magnitude = np.abs(value)
    if ((magnitude > 0) & (magnitude < np.finfo(float).tiny)).any():
        raise UndecidedError(
            "the response is smaller than double precision can hold with all its digits.",
            remedy="Check the gains of the controlled sources.",
        )


def _is_null(network: Network, of: Pair, omega: float) -> bool:
    """True if the response vanishes so close to omega that no double can tell the two apart.

    What is left of it there is the rounding of its terms, not an answer; likewise of
    two voltages that are equal.
    """
    if of[1]:
        a, b = response(network, [omega / (2 * math.pi)], [network.nodes[node] for node in of])[:, 0].tolist()
        if abs(a - b) <= 64 * np.finfo(float).eps * min(abs(a), abs(b)):
            return True
    return bool(_vanishes(*response_and_slope(network, np.array([omega]), of), omega).any())


def _vanishes(value: Numbers, slope: Numbers, omega: Numbers | float) -> npt.NDArray[np.bool_]:
    """True where a response is zero, or so near one of its zeros that a double of omega cannot tell."""
    return np.asarray(np.abs(value) <= 4 * np.finfo(float).eps * omega * np.abs(slope))


def gain(network: Network, of: Pair, options: Options) -> float:
    """20 log10 of the response's magnitude at a frequency, dB."""
    return _level(network, of, _at(options))


def attenuation(network: Network, of: Pair, options: Options) -> float:
    """The greatest gain over all frequencies, limits included, minus the gain at a frequency, dB."""
    level = _level(network, of, _at(options))
    return max(profile(network, of).peak - level, 0.0)


def phase(network: Network, of: Pair, options: Options) -> float:
    """The response's phase at a frequency, deg, followed without a jump from the lowest frequencies.

    There it lies in (-180, 180]. Raises UndecidedError where the response vanishes on the way: the phase then
    jumps by 180 degrees, up or down alike.
    """
    target, lowest = _omega(options), span_of(network).low * 1e-6
    points = [lowest]
    if target > lowest:
        steps = math.ceil((math.log10(target) - math.log10(lowest)) * PER_DECADE) + 1
        points = [*np.geomspace(lowest, target, steps)[:-1].tolist(), target]
    stations = _stations(network, of, points)
    start = cmath.phase(stations[0].value)
    if start < -math.pi * (1 - 1e-5):  # a hair's breadth above the axis at -180: the limit itself is +180
        start += 2 * math.pi
    if target <= lowest:
        # So far down the phase is its limit, a multiple of 90 degrees, less what it has turned since.
        limiting = math.pi / 2 * round(start / (math.pi / 2))
        return math.degrees(limiting + (start - limiting) * target / lowest)
    turned = sum(_turn(network, of, a, b, 48) for a, b in itertools.pairwise(stations))
    # The sum only tells the number of whole turns; the digits come from the response itself.
    own = cmath.phase(stations[-1].value)
    return math.degrees(own + 2 * math.pi * round((start + turned - own) / (2 * math.pi)))


@dataclass(frozen=True, slots=True)
class _Station:
    """The response at one omega, rad/s: its value, and the phase it turns per e-fold of omega there, rad."""

    omega: float
    value: complex
    rate: float


def _stations(network: Network, of: Pair, points: Sequence[float]) -> list[_Station]:
    omega = np.array(points)
    step = solver_for(network).block()
    parts = [response_and_slope(network, omega[k : k + step], of) for k in range(0, len(omega), step)]
    value, slope = (np.concatenate(pieces) for pieces in zip(*parts, strict=True))
    _refuse_underflow(value)
    lost = np.flatnonzero(_vanishes(value, slope, omega))
    if len(lost):
        _refuse_silence(network, of)
        where = omega[lost[0]] / (2 * math.pi)
        raise UndecidedError(f"the response vanishes at {where:.6g} Hz, where its phase jumps.")
    rate = omega * (slope / value).real
    return [_Station(*triple) for triple in zip(points, value.tolist(), rate.tolist(), strict=True)]


def _turn(network: Network, of: Pair, a: _Station, b: _Station, depth: int) -> float:
    """The phase turned between two frequencies, rad.

    Values alone tell it only up to whole turns, and a long ladder turns more than once between two points;
    the slopes tell how often. Where the two do not agree the interval is halved.
    """
    expected = (a.rate + b.rate) / 2 * math.log(b.omega / a.omega)
    step = cmath.phase(b.value / a.value)
    step += 2 * math.pi * round((expected - step) / (2 * math.pi))
    if abs(step - expected) < 0.5 and abs(expected) < 8:
        return step
    if depth == 0:
        where = a.omega / (2 * math.pi)
        raise UndecidedError(f"the response vanishes near {where:.6g} Hz, where its phase jumps.")
    middle = _stations(network, of, [math.sqrt(a.omega) * math.sqrt(b.omega)])[0]
    return _turn(network, of, a, middle, depth - 1) + _turn(network, of, middle, b, depth - 1)


def group_delay(network: Network, of: Pair, options: Options) -> float:
    """-d(phase)/d(omega) at a frequency, s: -Re(H'/H) with H' = dH/ds."""
    omega, lowest = _omega(options), span_of(network).low * 1e-5
    if omega < lowest and limit(network, of, high=False) == 0:
        # A response that vanishes at zero keeps a delay there. So far below every corner that is it, to ten
        # digits; further down, rounding would take more than the limit gives.
        omega = lowest
    value, slope = response_and_slope(network, np.array([omega]), of)
    _refuse_underflow(value)
    if _vanishes(value, slope, omega).any():
        _refuse_silence(network, of)
        raise UndecidedError("the response vanishes there, so it has no phase.")
    return -float((slope[0] / value[0]).real)


def _edges(network: Network, of: Pair) -> tuple[float | None, float | None]:
    found = profile(network, of)
    return half_power(found, "lower"), half_power(found, "upper")


def cutoff(network: Network, of: Pair, options: Options) -> float:
    """Where power is half the passband's greatest, nearest the peak, Hz.

    Where a lower and an upper one exist `edge` says which. Raises UndecidedError where there is none.
    """
    lower, upper = _edges(network, of)
    edge = options.get("edge")
    if edge is None:
        if lower is not None and upper is not None:
            raise UndecidedError(
                f"there are two cutoffs, {lower:.6g} Hz and {upper:.6g} Hz.",
                remedy='Add edge = "lower" or "upper".',
            )
        found = upper if upper is not None else lower
    else:
        found = lower if edge == "lower" else upper
    if found is None:
        which, side = {"lower": ("lower ", " below"), "upper": ("upper ", " above")}.get(str(edge), ("", ""))
        raise UndecidedError(f"the response has no {which}cutoff: it stays within 3.01 dB of its peak{side}.")
    return found


def _both_edges(network: Network, of: Pair) -> tuple[float, float]:
    lower, upper = _edges(network, of)
    if lower is None or upper is None:
        missing = "lower" if lower is None else "upper"
        raise UndecidedError(f"the response has no {missing} cutoff, so there is no band between two.")
    return lower, upper


def bandwidth(network: Network, of: Pair, options: Options) -> float:
    """The distance between the two cutoffs, Hz."""
    lower, upper = _both_edges(network, of)
    return abs(upper - lower)


def centre(network: Network, of: Pair, options: Options) -> float:
    """The geometric mean of the two cutoffs, Hz."""
    lower, upper = _both_edges(network, of)
    return math.sqrt(lower) * math.sqrt(upper)


def dc_gain(network: Network, of: Pair, options: Options) -> float:
    """The response at zero frequency, signed, 1."""
    return limit(network, of, high=False)


def input_impedance_at(network: Network, of: Pair, options: Options) -> float:
    """The magnitude of the impedance the driving source sees, ohm."""
    return abs(complex(input_impedance(network, np.array([_omega(options)]))[0]))


def output_impedance_at(network: Network, of: Pair, options: Options) -> float:
    """The magnitude of the impedance at the output with every source dead, ohm."""
    return abs(complex(output_impedance(network, np.array([_omega(options)]), of)[0]))


def elmore_delay(network: Network, of: Pair, options: Options) -> float:
    """The first moment of the impulse response over its area, -H'(0)/H(0), s.

    W. C. Elmore, J. Appl. Phys. 19:55-63, 1948.
    """
    if limit(network, of, high=False) == 0:
        _refuse_silence(network, of)
        raise UndecidedError("nothing passes at dc, so the impulse response has no area to divide by.")
    if ord("I") in network.arrays().kinds and not dc_solvable(network):
        return _delay_near_zero(network, of)
    value, slope = response_and_slope(network, np.zeros(1), of)
    _refuse_underflow(value)
    return -float((slope[0] / value[0]).real)


def _delay_near_zero(network: Network, of: Pair) -> float:
    """The delay where some voltage grows without bound towards dc, from two frequencies far below the modes.

    At zero itself the slope would be the small difference of such voltages. -Re H'/H is even in frequency,
    so that its value at zero follows from two others (Richardson 1911).
    """
    omega = span_of(network).low * np.array([1e-3, 1e-4])
    value, slope = response_and_slope(network, omega, of)
    _refuse_underflow(value)
    far, near = (-(slope / value).real).tolist()
    delay = float(near + (near - far) / 99)
    if abs(near - far) > 1e-4 * abs(delay):
        raise UndecidedError("the delay cannot be told from the voltages that grow without bound at dc.")
    return delay


# To add a measure: its line in circuit/measure_table.py, a function here (or in time_measures.py or
# noise_measures.py), and its name below (or at the end there).
COMPUTED: dict[str, Callable[[Network, Pair, Options], float]] = {
    "gain": gain,
    "attenuation": attenuation,
    "phase": phase,
    "group_delay": group_delay,
    "cutoff": cutoff,
    "bandwidth": bandwidth,
    "centre": centre,
    "dc_gain": dc_gain,
    "input_impedance": input_impedance_at,
    "output_impedance": output_impedance_at,
    "elmore_delay": elmore_delay,
}

__all__ = ["COMPUTED", "evaluate", "measure"]
