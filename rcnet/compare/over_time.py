"""Transients held against the exact waveforms, at the simulator's own points in time."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from ..circuit import Circuit, Network
from ..curves import Curve
from ..exact import require_solvable, started, transient
from .drivers import waves
from .granted import NOTHING, Grant
from .judging import judged
from .records import CurveComparison, Float, Uncompared
from .targets import Target
from .time_allowance import Followed, followed_network

Pair = tuple[Curve, Target]

_JUST_BEFORE = 1e-11  # relative: as good as the corner, and on its other side
_MOST_HELD = 20_000_000  # numbers: curves by points compared at once


def compared_over_time(
    circuit: Circuit, group: Sequence[Pair], grant: Grant = NOTHING
) -> tuple[list[CurveComparison], list[Uncompared]]:
    """Transients at the same points, and those that have no exact curve.

    Raises UndecidedError and UnsolvableError where there is no exact waveform.
    """
    axis, begun = group[0][0].axis, _is_started(circuit)
    if axis[0] < 0:
        return [], _left(group, "its time begins below zero, where there is no exact waveform.")
    # The point at t = 0 of a run from a given state is the state as it was asked for.
    first = int(begun and axis[0] == 0)
    if len(axis) <= first:
        return [], _left(group, "it holds no point after the start.")
    require_solvable(circuit.network)
    network = circuit.network
    if begun:
        initial, uic = circuit.initial, _uses_initial(circuit)
        network = started(network, initial.nodes, initial.parts, use_initial=uic)
    size = max(1, _MOST_HELD // len(axis))
    found: list[CurveComparison] = []
    left: list[Uncompared] = []
    for start in range(0, len(group), size):
        some, others = _block(circuit, network, group[start : start + size], first, grant)
        found += some
        left += others
    return found, left


def _left(group: Sequence[Pair], why: str) -> list[Uncompared]:
    return [Uncompared(curve.name, "transient", why) for curve, _ in group]


def _uses_initial(circuit: Circuit) -> bool:
    run = circuit.analyses.transient
    return run is not None and run.use_initial


def _is_started(circuit: Circuit) -> bool:
    return _uses_initial(circuit) or bool(circuit.initial.nodes)


def _block(
    circuit: Circuit, network: Network, group: Sequence[Pair], first: int, grant: Grant
) -> tuple[list[CurveComparison], list[Uncompared]]:
    axis = group[0][0].axis
    followed, left = followed_network(circuit, network, [target for _, target in group])
    kept = [pair for number, pair in enumerate(group) if number not in left]
    dropped = [Uncompared(group[k][0].name, "transient", why) for k, why in left.items()]
    if not kept:
        return [], dropped
    exact = _exact(network, followed, axis[first:])
    bounds = followed.bounds(axis)
    found = []
    for number, (curve, target) in enumerate(kept):
        at = _elsewhere(followed, target)
        other, values = curve.values[first:].real, exact[number]
        allowed = bounds[number].allowed(other - values, slice(first, None))
        if target.source is not None:
            values = _either_side(followed, target, axis[first:], values, other)
        if curve.resolution is not None:
            allowed += 2 * curve.resolution[first:]
        if curve.axis_resolution is not None:
            slack = curve.axis_resolution[first:]
            ends = (at(np.maximum(axis[first:] - slack, 0.0)), at(axis[first:] + slack))
            allowed += np.maximum(*(np.abs(end - values) for end in ends))
        what = (axis[first:], values, other, allowed)
        unit = "V" if target.source is None else "A"
        found.append(judged(target, "transient", *what, unit=unit, grant=grant, exact_at=at))
    return found, dropped


def _either_side(followed: Followed, target: Target, time: Float, exact: Float, other: Float) -> Float:
    """The exact values with those just before a corner at corners where the other lies nearer to them.

    A current jumps where a source has a corner, and a simulator's point there belongs to the step before.
    """
    corner = np.zeros(len(time), dtype=bool)
    for wave in waves(followed.driven):
        corner |= wave.at_corner(time)
    at = np.flatnonzero(corner)
    if not len(at):
        return exact
    before = followed.values(target, time[at] * (1 - _JUST_BEFORE))
    answer = exact.copy()
    nearer = np.abs(other[at] - before) < np.abs(other[at] - exact[at])
    answer[at[nearer]] = before[nearer]
    return answer


def _elsewhere(followed: Followed, target: Target) -> Callable[[Float], Float]:
    return lambda time: followed.values(target, time)


def _exact(network: Network, followed: Followed, time: Float) -> Float:
    """The exact waveforms, (targets, times): voltages as `rcnet.exact.transient` has them, and currents."""
    targets = followed.targets
    answer = np.empty((len(targets), len(time)))
    volts = [k for k, target in enumerate(targets) if target.source is None]
    names = [" ".join(network.nodes[node] for node in targets[k].nodes) for k in volts]
    if volts:
        answer[volts] = transient(network, time, names)
    for number, target in enumerate(targets):
        if target.source is not None:
            answer[number] = followed.values(target, time)
    return answer
