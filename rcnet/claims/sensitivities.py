"""How far a measure moves with each part: adjoint where it has a formula, differences elsewhere."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import MEASURES, Network, Source, measure_spec, parse_options
from ..errors import UndecidedError
from ..exact import dc_solvable, driving_sources, node_pair, span_of
from ..exact.sensitivity import Derivatives, derivatives, derivatives_at_zero, slowest_mode_sensitivity
from .measures import evaluate
from .profile import profile, root

Options = Mapping[str, float | str]
Pair = tuple[int, int]
Float = npt.NDArray[np.float64]

_DB = 20 / math.log(10)
_STEPS = 0.08 * 0.5 ** np.arange(4)  # in the logarithm of a value
_ROUGH = 1e-5  # differences that agree no better than this belong to a measure with a corner or a jump


def sensitivity(network: Network, measure: str, of: str | None = None, **options: Any) -> dict[str, float]:
    """How a measure moves with each part's value, by part name; sources are left out.

    Relative, d ln(measure)/d ln(value), so that 1 means one per cent for one per cent; for measures in dB and
    degrees d(measure)/d ln(value), so that a hundredth of it is what one per cent does. `of` and the options
    are those of `measure`. Raises UndecidedError where the measure does not exist, is zero, or has no
    derivative.
    """
    spec = measure_spec(measure)
    parsed = parse_options(spec, {key.rstrip("_"): value for key, value in options.items()})
    if of is None and "part" not in parsed:
        of = "out"
    formula = _FORMULAS.get(spec.name)
    value = 1.0 if formula is _time_constant else evaluate(network, spec.name, of, parsed)
    if formula is None:
        found = {name: moved for name, (moved, _) in by_differences(network, spec.name, of, parsed).items()}
    else:
        found = formula(network, node_pair(network, of) if of is not None else (0, 0), parsed, value)
    if not all(math.isfinite(moved) for moved in found.values()):
        raise UndecidedError(f"{spec.name} has no derivative by the part values here.")
    return found


# ---------------------------------------------------------------------- response measures


def _at_frequency(network: Network, of: Pair, omega: float, *, slope: bool = False) -> Derivatives:
    """The derivatives at j omega; at zero and infinity those of the limits."""
    span = span_of(network)
    if omega == 0 and dc_solvable(network):
        return derivatives_at_zero(network, of) if slope else derivatives(network, np.zeros(1, complex), of)
    point = span.far_below if omega == 0 else span.far_above if omega == math.inf else 1j * omega
    return derivatives(network, np.array([point], dtype=np.complex128), of, slope=slope)


def _log(found: Derivatives) -> npt.NDArray[np.complex128]:
    """The relative sensitivity of the response, d ln H / d ln value, (parts,)."""
    if found.response[0] == 0:
        raise UndecidedError("the response is zero there, so its logarithm has no derivative.")
    return np.asarray(found.by_part[:, 0] / found.response[0], dtype=np.complex128)


def _named(found: Derivatives, numbers: Float) -> dict[str, float]:
    return dict(zip(found.names, numbers.tolist(), strict=True))


def _omega(options: Options) -> float:
    return 2 * math.pi * float(options["at"])


def _gain(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    found = _at_frequency(network, of, _omega(options))
    return _named(found, _DB * _log(found).real)


def _attenuation(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    found = _at_frequency(network, of, _omega(options))
    return _named(found, _DB * (_peak(network, of) - _log(found).real))


def _phase(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    found = _at_frequency(network, of, _omega(options))
    return _named(found, np.degrees(_log(found).imag))


def _slope_of_log(found: Derivatives) -> npt.NDArray[np.complex128]:
    """The derivative of (dH/ds)/H by ln value, (parts,)."""
    assert found.slope is not None
    assert found.slope_by_part is not None
    h, slope = found.response[0], found.slope[0]
    return np.asarray(
        found.slope_by_part[:, 0] / h - slope / h * (found.by_part[:, 0] / h), dtype=np.complex128
    )


def _delay(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    """Group delay is -Re (dH/ds)/H at j omega, the Elmore delay the same at zero."""
    found = _at_frequency(network, of, _omega(options) if "at" in options else 0.0, slope=True)
    return _named(found, -_slope_of_log(found).real / _nonzero(value))


def _dc_gain(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    _nonzero(value)
    found = _at_frequency(network, of, 0.0)
    return _named(found, _log(found).real)


def _nonzero(value: float) -> float:
    if value == 0:
        raise UndecidedError("the measure is zero, so it has no relative sensitivity.")
    return value


# ---------------------------------------------------------------------- cutoffs


def _peak(network: Network, of: Pair) -> Float:
    """What ln of the greatest magnitude does, (parts,); that the peak moves makes no first-order change."""
    moved = []
    for omega in profile(network, of).peaks:
        at = omega if omega in (0.0, math.inf) else _polished(network, of, omega)
        moved.append(_log(_at_frequency(network, of, at)).real)
    first = moved[0]
    if any(np.abs(other - first).max(initial=0) > 1e-7 for other in moved[1:]):
        raise UndecidedError(
            "two peaks are equally high and move apart, so the greatest gain has a corner here."
        )
    return np.asarray(first)


def _polished(network: Network, of: Pair, omega: float) -> float:
    """The peak to the last digits: the magnitude itself is too flat there to show where it is."""
    for wide in (1e-6, 1e-4, 1e-2):
        try:
            return root(
                lambda w: _steepness(_at_frequency(network, of, w, slope=True), w),
                omega / (1 + wide),
                omega * (1 + wide),
            )
        except UndecidedError:
            continue
    return omega


def _steepness(found: Derivatives, omega: float) -> float:
    """The slope of ln|H| over ln omega."""
    assert found.slope is not None
    return float((1j * omega * found.slope[0] / found.response[0]).real)


def _edge(network: Network, of: Pair, frequency: float) -> tuple[Derivatives, Float]:
    """What ln of a cutoff does, (parts,), so that |H| there stays at half power below the peak."""
    omega = 2 * math.pi * frequency
    found = _at_frequency(network, of, omega, slope=True)
    steepness = _steepness(found, omega)
    if abs(steepness) < 1e-9:
        raise UndecidedError("the response only touches half power, so the cutoff has no derivative.")
    return found, (_peak(network, of) - _log(found).real) / steepness


def _cutoff(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    return _named(*_edge(network, of, value))


def _band(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    (low, found, lower), (high, _, upper) = _both(network, of)
    return _named(found, (high * upper - low * lower) / (high - low))


def _centre(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    (_, found, lower), (_, _, upper) = _both(network, of)
    return _named(found, (lower + upper) / 2)


def _both(network: Network, of: Pair) -> list[tuple[float, Derivatives, Float]]:
    names = network.nodes
    text = names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"
    edges = sorted(evaluate(network, "cutoff", text, {"edge": edge}) for edge in ("lower", "upper"))
    return [(frequency, *_edge(network, of, frequency)) for frequency in edges]


# ---------------------------------------------------------------------- impedances, the slowest mode


def _input_impedance(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    return _of_port(*_driven_by_current(network), options)


def _output_impedance(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    port, names = network.copy(), network.nodes
    for source in network.sources.values():
        port = port.with_source(replace(source, ac=None))
    port.add_source(Source(_unused(network, "Iport"), (names[of[1]], names[of[0]]), ac=1.0))
    return _of_port(port, (names[of[0]], names[of[1]]), options)


def _of_port(port: Network, nodes: tuple[str, str], options: Options) -> dict[str, float]:
    """An ampere into a port makes its impedance a response."""
    found = _at_frequency(port, (port.node_index(nodes[0]), port.node_index(nodes[1])), _omega(options))
    return _named(found, _log(found).real)


def _driven_by_current(network: Network) -> tuple[Network, tuple[str, str]]:
    """The network with a current source for its driving voltage source, and the port from + to -.

    A driving source whose current is sensed stays in series as a dead ammeter.
    """
    (name,) = driving_sources(network)
    source = network.sources[name]
    a, b = source.nodes
    if source.kind == "I":
        return network, (b, a)
    port, inner = Network(network.title), a
    for part in network.parts:
        if part.name == name:
            if any(other.senses == name for other in network.parts):
                inner = _unused_node(network)
                port.add_source(Source(name, (a, inner)))
            port.add_source(Source(_unused(network, "Iport"), (b, inner), ac=1.0))
        elif part.name in network.sources:
            port.add_source(replace(network.sources[part.name], ac=None))
        else:
            port.add_part(part)
    return port, (a, b)


def _unused(network: Network, name: str) -> str:
    while name in network:
        name += "_"
    return name


def _unused_node(network: Network) -> str:
    name = "port"
    while network.has_node(name):
        name += "_"
    return name


def _time_constant(network: Network, of: Pair, options: Options, value: float) -> dict[str, float]:
    pole, moved = slowest_mode_sensitivity(network)
    return {name: -derivative.real / pole.real for name, derivative in moved.items()}


_FORMULAS: dict[str, Callable[[Network, Pair, Options, float], dict[str, float]]] = {
    "gain": _gain,
    "attenuation": _attenuation,
    "phase": _phase,
    "group_delay": _delay,
    "cutoff": _cutoff,
    "bandwidth": _band,
    "centre": _centre,
    "dc_gain": _dc_gain,
    "input_impedance": _input_impedance,
    "output_impedance": _output_impedance,
    "time_constant": _time_constant,
    "elmore_delay": _delay,
}


# ---------------------------------------------------------------------- differences


def by_differences(
    network: Network, measure: str, of: str | None, options: Options
) -> dict[str, tuple[float, float]]:
    """The sensitivity of any measure with an estimate of its error, by name.

    Central differences in the logarithm of each value, their steps halved and extrapolated (L. F. Richardson,
    Phil. Trans. A 210:307-357, 1911); the error is how much the last extrapolation changed. Raises
    UndecidedError where that is more than 1e-5, as at a corner or a jump of the measure.
    """
    spec = MEASURES[measure]
    absolute = spec.unit in ("dB", "deg")
    if not absolute:
        _nonzero(evaluate(network, measure, of, options))
    found = {}
    for name, nominal in network.values.items():
        if network.part(name).couples is not None:
            continue  # a coupling near one has no room for the steps, and no tolerance

        def at(step: float, name: str = name, nominal: float = nominal) -> float:
            changed = network.with_values({name: nominal * math.exp(step)})
            value = evaluate(changed, measure, of, options)
            return value if absolute else math.log(abs(_nonzero(value)))

        found[name] = moved, error = _extrapolated([(at(h) - at(-h)) / (2 * h) for h in _STEPS.tolist()])
        if error > _ROUGH * max(1.0, abs(moved)):
            raise UndecidedError(
                f"{measure} does not move smoothly with {name}, so it has no derivative that can be trusted."
            )
    return found


def _extrapolated(differences: list[float]) -> tuple[float, float]:
    column, before = differences, differences[-1]
    for power in range(1, len(differences)):
        before = column[-1]
        column = [fine + (fine - coarse) / (4**power - 1) for coarse, fine in itertools.pairwise(column)]
    return column[0], abs(column[0] - before)


__all__ = ["by_differences", "sensitivity"]
