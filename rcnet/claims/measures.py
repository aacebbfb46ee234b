"""The measures: numbers with an exact meaning, computed from the exact response."""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

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
    span_of,
)
from .profile import PER_DECADE, decibels, half_power, profile

Options = Mapping[str, float | str]
Pair = tuple[int, int]


def measure(network: Network, name: str, of: str | None = None, **options: Any) -> float:
    """One measure of a network, in the unit of the measures table.

    name: a measure; of: a node or a pair `"a b"`, by default `out`; options: as the measure needs them, in base
    units or as text (`at="1 kHz"`); a trailing underscore is dropped, so that `from_=20` can be written.
    Raises UndecidedError where the measure does not exist for this network, CircuitError for wrong names.
    """
    spec = measure_spec(name)
    given = {key.rstrip("_"): value for key, value in options.items()}
    parsed = parse_options(spec, given)
    if of is None and "part" not in parsed:
        of = "out"
    return evaluate(network, name, None if of is None else of, parsed)


def evaluate(network: Network, name: str, of: str | None, options: Options) -> float:
    """A measure with options already read; `of` may be None only for measures of a part."""
    function = COMPUTED.get(name)
    if function is None:
        raise UndecidedError(f"{MEASURES[name].name} is not computed yet.", remedy="It comes with a later version.")
    pair = node_pair(network, of) if of is not None else (0, 0)
    value = function(network, pair, options)
    if not math.isfinite(value):
        raise UndecidedError(f"{name} is not a finite number here.")
    return value


def _at(options: Options) -> float:
    return float(options["at"])


def _omega(options: Options) -> float:
    frequency = _at(options)
    if not 0 < frequency < math.inf:
        raise UndecidedError(f"this measure is taken at a finite frequency above zero, not at {frequency!r} Hz.")
    return 2 * math.pi * frequency


def _name(network: Network, of: Pair) -> str:
    names = network.nodes
    return names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"


def _level(network: Network, of: Pair, frequency: float) -> float:
    if frequency in (0.0, math.inf):
        value: complex = limit(network, of, high=frequency > 0)
    else:
        value = complex(response(network, [frequency], _name(network, of))[0])
    if value == 0:
        raise UndecidedError(f"nothing arrives at the output at {frequency!r} Hz, so the gain is no finite number of dB.")
    return float(decibels(abs(value)))


def gain(network: Network, of: Pair, options: Options) -> float:
    """20 log10 of the response's magnitude at a frequency, dB."""
    return _level(network, of, _at(options))


def attenuation(network: Network, of: Pair, options: Options) -> float:
    """The greatest gain over all frequencies, limits included, minus the gain at a frequency, dB."""
    return profile(network, of).peak - _level(network, of, _at(options))


def phase(network: Network, of: Pair, options: Options) -> float:
    """The response's phase at a frequency, deg, followed without a jump from the lowest frequencies.

    There it lies in (-180, 180]. Raises UndecidedError where the response vanishes on the way: the phase then
    jumps by 180 degrees, up or down alike.
    """
    omega, name = _omega(options), _name(network, of)
    start = min(span_of(network).low * 1e-6, omega)
    steps = max(2, math.ceil(math.log10(omega / start) * PER_DECADE) + 1)
    points = np.geomspace(start, omega, steps)
    points[-1] = omega
    values = response(network, points / (2 * math.pi), name)
    first = cmath.phase(complex(values[0]))
    if first < -math.pi * (1 - 1e-5):  # a hair's breadth above the axis at -180: the limit itself is +180
        first += 2 * math.pi
    turned = sum(
        _turn(network, name, (w0, h0), (w1, h1), 40)
        for w0, h0, w1, h1 in zip(
            points[:-1].tolist(), values[:-1].tolist(), points[1:].tolist(), values[1:].tolist(), strict=True
        )
    )
    # The sum only tells the number of whole turns; the digits come from the response itself.
    own = cmath.phase(complex(values[-1]))
    return math.degrees(own + 2 * math.pi * round((first + turned - own) / (2 * math.pi)))


Point = tuple[float, complex]


def _turn(network: Network, name: str, a: Point, b: Point, depth: int) -> float:
    """The phase turned between two frequencies, rad, halving until each step is well under a quarter turn."""
    if a[1] != 0 and b[1] != 0:
        step = cmath.phase(b[1] / a[1])
        if abs(step) < 1.0:
            return step
    if depth == 0 or a[1] == 0 or b[1] == 0:
        raise UndecidedError(f"the response vanishes near {a[0] / (2 * math.pi):.6g} Hz, where its phase jumps.")
    middle = math.sqrt(a[0] * b[0])
    between = (middle, complex(response(network, [middle / (2 * math.pi)], name)[0]))
    return _turn(network, name, a, between, depth - 1) + _turn(network, name, between, b, depth - 1)


def group_delay(network: Network, of: Pair, options: Options) -> float:
    """-d(phase)/d(omega) at a frequency, s: -Re(H'/H) with H' = dH/ds."""
    value, slope = response_and_slope(network, np.array([_omega(options)]), of)
    if value[0] == 0:
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
                f"there are two cutoffs, {lower:.6g} Hz and {upper:.6g} Hz.", remedy='Add edge = "lower" or "upper".'
            )
        found = upper if upper is not None else lower
    else:
        found = lower if edge == "lower" else upper
    if found is None:
        which = f"{edge} " if edge else ""
        raise UndecidedError(f"the response has no {which}cutoff: it stays within 3.01 dB of its greatest value.")
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
    """The first moment of the impulse response over its area, -H'(0)/H(0), s (W. C. Elmore, J. Appl. Phys. 19, 1948)."""
    if not dc_solvable(network):
        raise UndecidedError("a node has no dc path, so the impulse response has no area to divide by.")
    value, slope = response_and_slope(network, np.zeros(1), of)
    if abs(value[0]) == 0:
        raise UndecidedError("nothing passes at dc, so the impulse response has no area to divide by.")
    return -float((slope[0] / value[0]).real)


# To add a measure: its line in circuit/measure_table.py, a function here, and its name below.
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
