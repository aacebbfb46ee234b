"""A simulator's rule of integration, replayed at the steps it took, mode by mode.

Between two steps a simulator does not know the waveform; it takes x' = p x + u by a rule: backward Euler just
after a corner, else the trapezoidal rule or Gear's of second order (L. Nagel, SPICE2, UCB/ERL M520, 1975, on
changes of order T. Quarles, UCB/ERL M89/42, 1989). A linear network falls apart into its modes under these
rules as it does under the true equations, so that the values they lead to are known beforehand: those of
ngspice 39 come out to rounding.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from .drivers import Wave
from .records import Float, Numbers

Flags = npt.NDArray[np.bool_]
Method = Literal["trapezoidal", "gear", "euler"]

_GROWS = 1.05  # a step this much longer than the last shows that the order has been raised
_SHRINKS = 0.3  # a step this much shorter than the last may have been one behind a stop of its own
_EVEN = 1e-3  # relative: steps as alike as this are as long as each other
_CLOSE = 1e-9  # relative: a point this near a stop is the stop
_LONGEST_EULER = 8  # steps after a corner; a simulator that has not raised the order by then has no low one
_SHORT = 3000  # steps up to which a plain loop is quick enough
_BLOCK = 4_000_000  # numbers held at once: steps by modes


def method_of(options: Mapping[str, str]) -> Method:
    """The rule that a circuit's simulator options ask for."""
    if options.get("maxord", "").strip() in ("1", "1.0"):
        return "euler"
    return "gear" if options.get("method", "").strip().lower() == "gear" else "trapezoidal"


@dataclass(frozen=True)
class Steps:
    """The steps of a run from t = 0.

    time: (points,), rising from 0; euler: (points - 1,), True for steps of first order
    others: other steps that may have been of first order, as far as can be told; none where all is clear
    """

    time: Float
    euler: Flags
    restart: Flags
    method: Method
    others: tuple[Flags, ...] = ()

    @property
    def length(self) -> Float:
        """How long each step is, s."""
        return np.diff(self.time)


def steps_at(time: Float, waves: Sequence[Wave], method: Method, stops: Sequence[float] = ()) -> Steps:
    """The steps between some points, each with its order.

    stops: times beside the waves' corners at which the simulator begins anew
    Order one until a step has grown after the last corner: by that a simulator of the Berkeley family shows
    that it has raised the order. The second step of all is of order one too, since the first is not judged.
    """
    length = np.diff(time)
    corner = np.zeros(len(time), dtype=bool)
    corner[0] = True
    for wave in waves:
        # Over the beginning of a sine or an exponential ngspice 39 steps as if nothing were there.
        if wave.pieces is not None:
            corner |= _nearest(wave.from_corner(time), wave.at_corner(time))
    for stop in stops:
        corner |= np.abs(time - stop) <= _CLOSE * stop
    every = corner[:-1]
    even = np.zeros(len(length), dtype=bool)
    even[1:] = np.abs(length[1:] / length[:-1] - 1) < _EVEN
    # Behind a corner that was seen the step is cut; one that a point has hit by chance is stepped over.
    restart = every & ~even
    # Nor is it certain that it was seen where the step before it was not cut to end there.
    certain = restart.copy()
    certain[1:] &= ~even[:-1]
    if method == "euler":
        return Steps(time, np.ones_like(restart), restart, method)
    euler = _first_order(length, restart)
    shorter = restart.copy()
    shorter[1:] |= length[1:] < _SHRINKS * length[:-1]
    sure = restart.copy()
    sure[1:2] = True
    ways = (euler & sure, *(_first_order(length, some) for some in (shorter, every, certain)))
    others = [other for other in ways if (other != euler).any()]
    return Steps(time, euler, restart, method, tuple(others))


def _nearest(distance: Float, near: Flags) -> Flags:
    """Of points in a row that all are near a corner, the nearest: the step behind a corner may be tiny."""
    answer = np.zeros(len(near), dtype=bool)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], near, [False]]).astype(np.int8)))
    for begin, end in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
        answer[begin + int(np.argmin(distance[begin:end]))] = True
    return answer


def _first_order(length: Float, restart: Flags) -> Flags:
    """Which steps are of first order, given those that begin anew."""
    grown = np.zeros(len(length), dtype=bool)
    grown[1:] = (length[1:] > _GROWS * length[:-1]) & ~restart[1:]
    number = np.arange(len(length))
    last_restart = np.maximum.accumulate(np.where(restart, number, -1))
    last_growth = np.maximum.accumulate(np.where(grown, number, -1))
    euler = (last_growth <= last_restart) & (number - last_restart < _LONGEST_EULER)
    euler[1:2] = True
    return np.asarray(euler)


@dataclass(frozen=True)
class Replayed:
    """What the rule makes of one wave: (points,) and (points, modes), at every point of the steps.

    lag: the e of each mode; rate: the wave's rate of change as the rule has it
    """

    lag: Numbers
    rate: Float


def replayed(steps: Steps, wave: Wave, poles: Numbers) -> Replayed:
    """The rule under one wave, every mode at rest before t = 0; poles at zero have no place here."""
    value = wave.value(steps.time)
    first = np.full(len(poles), wave.start - value[0], dtype=poles.dtype)
    return Replayed(_lags(steps, np.diff(value), poles, first), rates(steps, value))


def decayed(steps: Steps, poles: Numbers) -> Numbers:
    """What the rule makes of each mode that an impulse has set to 1 at t = 0: (points, modes)."""
    nothing = np.zeros(len(steps.time) - 1)
    return _lags(steps, nothing, poles, np.ones(len(poles), dtype=poles.dtype))


def _lags(steps: Steps, rise: Float, poles: Numbers, first: Numbers) -> Numbers:
    """E' = p e - u' by the rule; with e = -(p x + u) both rules keep to e at the points alone."""
    if steps.method == "gear":
        return _gear(steps, rise, poles, first)
    answer = np.empty((len(steps.time), len(poles)), dtype=poles.dtype)
    answer[0] = first
    size = max(1, _BLOCK // max(len(poles), 1))
    length, state = steps.length, first
    for start in range(0, len(rise), size):
        part = slice(start, start + size)
        share = np.where(steps.euler[part], 1.0, 0.5)[:, None]
        turned = np.outer(length[part], poles)
        below = 1 - share * turned
        kept = (1 + (1 - share) * turned) / below
        answer[start + 1 : start + 1 + len(kept)] = _scan(kept, -rise[part, None] / below, state)
        state = answer[start + len(kept)]
    return answer


def _scan(kept: Numbers, added: Numbers, state: Numbers) -> Numbers:
    """X <- kept x + added, step by step: every x, (steps, modes)."""
    count = len(kept)
    answer = np.empty_like(added)
    if count <= _SHORT:
        for number in range(count):
            state = kept[number] * state + added[number]
            answer[number] = state
        return answer
    # Many stretches side by side, each as if it began at zero; then what each leaves for the next.
    length = int(np.sqrt(count))
    stretches = count // length
    whole = stretches * length
    a = kept[:whole].reshape(stretches, length, -1)
    b = added[:whole].reshape(stretches, length, -1)
    out, decay = answer[:whole].reshape(b.shape), np.empty_like(a)
    own, gone = np.zeros_like(b[:, 0]), np.ones_like(a[:, 0])
    with np.errstate(under="ignore"):
        for step in range(length):
            own = a[:, step] * own + b[:, step]
            gone = gone * a[:, step]
            out[:, step], decay[:, step] = own, gone
        for stretch in range(stretches):
            out[stretch] += decay[stretch] * state
            state = out[stretch, -1]
    answer[whole:] = _scan(kept[whole:], added[whole:], state)
    return answer


def _gear(steps: Steps, rise: Float, poles: Numbers, first: Numbers) -> Numbers:
    """Gear's rule of second order at uneven steps; backward Euler where the order is one.

    With w = h/h_before: x' at the end is (x - x1)/h + w/(1 + w) ((x - x1)/h - (x1 - x2)/h_before), and so is
    u'; e = -(p x + u) then obeys the same rule with -u' for its drive.
    """
    answer = np.empty((len(steps.time), len(poles)), dtype=poles.dtype)
    answer[0] = first
    length, euler = steps.length.tolist(), steps.euler.tolist()
    for n, (h, low) in enumerate(zip(length, euler, strict=True)):
        if low or n == 0:
            answer[n + 1] = (answer[n] - rise[n]) / (1 - h * poles)
            continue
        share = length[n] / (length[n] + length[n - 1])
        ratio = h / length[n - 1]
        before = answer[n] - answer[n - 1] + rise[n - 1]
        known = (1 + share) * (answer[n] - rise[n]) + share * ratio * before
        answer[n + 1] = known / (1 + share - h * poles)
    return answer


def rates(steps: Steps, value: Float) -> Float:
    """The rate of change of a quantity by the rule, zero before t = 0: (points,).

    Behind a jump or a corner that a step goes over, the trapezoidal rule swings about the true rate.
    """
    length, quotient = steps.length, np.diff(value) / steps.length
    answer = np.zeros(len(value))
    if steps.method == "gear":
        answer[1:] = quotient
        if len(quotient) > 1:
            share = length[1:] / (length[1:] + length[:-1])
            high = ~steps.euler[1:]
            answer[2:][high] += (share * (quotient[1:] - quotient[:-1]))[high]
        return answer
    kept = np.where(steps.euler, 0.0, -1.0)[:, None]
    added = np.where(steps.euler, quotient, 2 * quotient)[:, None]
    answer[1:] = _scan(kept, added, np.zeros(1))[:, 0]
    return answer


def areas(steps: Steps, wave: Wave) -> Float:
    """The integral of a wave by the rule less the true one, up to each point: (points,)."""
    value, length = wave.value(steps.time), steps.length
    middle = wave.value(steps.time[:-1] + length / 2)
    true = (value[:-1] + 4 * middle + value[1:]) / 6
    rule = np.where(steps.euler, value[1:], (value[:-1] + value[1:]) / 2)
    return np.concatenate([[0.0], np.cumsum(length * (rule - true))])
