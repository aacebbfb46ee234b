"""How far a simulator's transient lies from the exact waveform, as its own steps let it be foreseen.

What the rule of integration makes of every mode at the steps that were taken (see `replay`) is set against
the mode's true course. The difference has a sign: towards it a second opinion may go that far and a quarter
further, the other way by a tenth. To this come the rounding of each step, of a solution whose capacitors have
become conductances 2C/h, and what the last digit of the time does on a steep edge.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..circuit import Circuit, Network, TransientRun
from ..errors import RcnetError
from ..exact import modal_system, nodal, transient
from .allowance import DENSE_LIMIT, rounding_of, ties_nodes
from .drivers import Driven, Wave, drivers_of, waves
from .reaches import Reach, given_of, pairs_of, reach_of, sudden_of
from .records import Float, Numbers
from .replay import Steps, areas, decayed, method_of, replayed, steps_at
from .source_currents import current_sums
from .targets import Target

BEYOND = 1.25  # times what is foreseen, towards where it is foreseen
UNSEEN = 10.0  # times the greatest foreseen so far, either way, where steps had to be supposed
AGAINST = 0.1  # of what is foreseen nearby, the other way
EXACTNESS = 1e-10  # of the greatest value: what a sum over modes may lack
_EDGE_DIGITS = 32 * 2.0**-53  # of the time: how far off a point on an edge may be
_FLUX_DIGITS = 512 * 2.0**-53  # of an inductor's flux
_LATELY = 12  # steps for which that is remembered
_NEARBY = 3  # points to either side
_BLOCK = 4_000_000  # numbers held at once: points by modes
_STEP_KINDS = 8  # lengths of steps the rounding is computed for
_RESTING = 1e-9  # of the longest step's rate: as good as the operating point
_SHORTEST = 1e-7  # of the longest step: what a step behind a corner that was not seen may have been
_TIED = 32.0  # times more where inductors or controlled sources stand: their equations lose more digits
_LOOKS = 48  # times at which the greatest voltages are looked for
_LINGERS = 100  # steps before the first point whose swinging may last until there
_MOST_HIDDEN = 100_000  # steps supposed before a file's first point


@dataclass(frozen=True)
class Bound:
    """What is foreseen for one curve at each point of its file, (points,).

    apart: the simulator's value less the exact one, with its sign; where steps had to be supposed, the
        greatest so far without it; floor: what may come to it either way
    both_ways: True where the steps were not all seen, so that neither sign nor place can be relied on
    """

    apart: Float
    floor: Float
    both_ways: bool

    def allowed(self, seen: Float, part: slice) -> Float:
        """The allowance for differences as seen, at some of the points."""
        apart = self.apart[part]
        size = np.abs(apart)
        if self.both_ways:
            return np.asarray(UNSEEN * size + self.floor[part])
        against = np.maximum(AGAINST * _greatest_nearby(size), (BEYOND - 1) * size)
        towards = np.where(seen * apart >= 0, np.maximum(BEYOND * size, against), against)
        return np.asarray(towards + self.floor[part])


def _greatest_nearby(size: Float) -> Float:
    padded = np.pad(size, _NEARBY)
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * _NEARBY + 1)
    return np.asarray(windows.max(axis=1))


@dataclass(frozen=True)
class Followed:
    """A network whose transient is followed mode by mode to some curves.

    reaches: by driver, then by target; given: by target, the current sources that add to a source's current
    sudden: by target, the charge that a source's current moves at t = 0 at once
    """

    network: Network
    run: TransientRun | None
    uses_initial: bool
    options: dict[str, str]
    targets: Sequence[Target]
    driven: Sequence[Driven]
    poles: Numbers
    reaches: Sequence[Sequence[Reach]]
    given: Sequence[Sequence[tuple[float, Wave]]]
    sudden: Sequence[float]

    def values(self, target: Target, time: Float) -> Float:
        """The exact waveform of one target, (times,), just after a corner."""
        number = self.targets.index(target)
        if any(reaches[number].drift for reaches in self.reaches):
            names = self.network.nodes
            return transient(self.network, time, f"{names[target.nodes[0]]} {names[target.nodes[1]]}")
        total = np.zeros(len(time))
        for factor, wave in self.given[number]:
            total += factor * wave.value(time)
        for each, reaches in zip(self.driven, self.reaches, strict=True):
            total += _exact(each.wave, reaches[number], self.poles, time)
        return total

    def bounds(self, axis: Float) -> list[Bound]:
        """What is foreseen for every target at a file's points, (points,)."""
        own = waves(self.driven)
        before, hidden = self._before(axis, own)
        time = np.concatenate([before[0], axis])
        steps = self._steps(time, own)
        skip = len(time) - len(axis)
        apart = self._apart(steps, axis, skip)
        floors = self._floors(steps, axis, skip, hidden=hidden)
        if hidden:
            apart = self._greatest_apart([np.concatenate([each, axis]) for each in before], len(axis))
        for other in steps.others:
            floors += np.abs(self._apart(replace(steps, euler=other), axis, skip) - apart)
        return [Bound(one, floor, hidden) for one, floor in zip(apart, floors, strict=True)]

    # ------------------------------------------------------------------ steps

    @property
    def _stops(self) -> list[float]:
        # Told to use a given state, ngspice 39 stops at its print step, too.
        return [self.run.step] if self.run is not None and self.uses_initial else []

    def _steps(self, time: Float, own: Sequence[Wave]) -> Steps:
        return steps_at(time, own, method_of(self.options), self._stops)

    def _before(self, axis: Float, own: Sequence[Wave]) -> tuple[list[Float], bool]:
        """The points from t = 0 up to the file's first, and True where they are several suppositions."""
        if axis[0] == 0:
            return [np.zeros(0)], False
        longest = float(np.diff(axis).max(initial=0.0)) or float(axis[0])
        if self.run is not None:
            asked = min(self.run.step, (self.run.stop - self.run.start) / 50) or longest
            longest = max(longest, min(self.run.max_step or asked, asked))
        late = self.run is not None and self.run.start > 0
        if self.uses_initial and not late and axis[0] <= longest:
            return [np.zeros(1)], False
        ways = ((longest, 10.0), (longest, 1e4), (longest, 1e8), (longest / 4, 10.0))
        first = float(axis[0])
        marks = [0.0, *self._stops]
        for wave in own:
            if wave.pieces is not None:
                marks += wave.corners(first, _MOST_HIDDEN // 64).tolist()
        corners = [*sorted({mark for mark in marks if mark < first}), first]
        return [_supposed(corners, step, ratio) for step, ratio in ways], True

    def _greatest_apart(self, ways: Sequence[Float], points: int) -> Float:
        """The greatest foreseen so far, from a few steps before the first point, whichever way it was."""
        most = np.zeros((len(self.targets), points))
        own = waves(self.driven)
        for time in ways:
            steps = self._steps(time, own)
            skip = max(len(time) - points - _LINGERS, 0)
            size = np.abs(self._apart(steps, time[skip:], skip))
            most = np.maximum(most, np.maximum.accumulate(size, axis=1)[:, -points:])
        return most

    # ------------------------------------------------------------------ truncation

    def _apart(self, steps: Steps, axis: Float, skip: int) -> Float:
        """What the rule makes of every target less the truth: (targets, points)."""
        total = np.zeros((len(self.targets), len(axis)))
        for each, reaches in zip(self.driven, self.reaches, strict=True):
            wave = each.wave
            if wave is not None and wave.pieces is None and not wave.swings:
                continue
            size = max(1, _BLOCK // len(steps.time))
            for start in range(0, len(self.poles), size):
                part = slice(start, start + size)
                weights = np.array([reach.weights[part] for reach in reaches])
                if wave is None:
                    lag = decayed(steps, self.poles[part])[skip:]
                    lag -= np.exp(np.outer(axis, self.poles[part]))
                else:
                    lag = replayed(steps, wave, self.poles[part]).lag[skip:]
                    lag -= wave.lags(axis, self.poles[part])
                total += np.real(weights @ lag.T)
            if wave is not None:
                total += self._of_rates(steps, wave, reaches, axis, skip)
        return total

    def _of_rates(self, steps: Steps, wave: Wave, reaches: Sequence[Reach], axis: Float, skip: int) -> Float:
        total = np.zeros((len(reaches), len(axis)))
        beta = np.array([reach.beta for reach in reaches])
        if beta.any():
            nothing = np.zeros(0)
            rate = replayed(steps, wave, nothing).rate[skip:] - wave.slope(axis)
            total += beta[:, None] * rate
        drift = np.array([reach.drift for reach in reaches])
        if drift.any():
            total += drift[:, None] * areas(steps, wave)[skip:]
        return total

    # ------------------------------------------------------------------ rounding

    def _floors(self, steps: Steps, axis: Float, skip: int, *, hidden: bool) -> Float:
        """What may come to every target whatever the rule: (targets, points)."""
        greatest = self._greatest(axis)
        rounding = self._rounding(steps, greatest, hidden=hidden)
        shaken, jumps = self._edges(steps)
        floors = rounding + shaken
        for number, target in enumerate(self.targets):
            least = EXACTNESS * greatest.max(initial=0.0)
            if target.source is not None:
                # By the trapezoidal rule a current off its course swings about it until the next corner.
                floors[number] = _kept_until(floors[number], steps) + jumps[number]
                least *= sum(
                    abs(reaches[number].alpha) + abs(reaches[number].weights).sum()
                    for reaches in self.reaches
                )
            floors[number] += least
        if skip <= 1 and len(steps.time) > 1:
            floors[:, 1] += BEYOND * np.array(self.sudden) / steps.time[1]
        return floors[:, skip:]

    def _rounding(self, steps: Steps, greatest: Float, *, hidden: bool) -> Float:
        """What rounding may do at each step: (targets, points of the steps)."""
        length = np.maximum(steps.length, np.finfo(float).tiny)
        if not len(length):
            length = np.ones(1)
        shortest = min(length.min(), length.max() * (_SHORTEST if hidden else 1.0))
        kinds = np.geomspace(length.max(), shortest, _STEP_KINDS)
        s = np.concatenate([[_RESTING / kinds[0]], 2 / kinds])
        eqs = nodal.equations(self.network, plain=True)
        rows = [
            [eqs.branch_of[target.source]]
            if target.source is not None
            else [node - 1 for node in target.nodes if node]
            for target in self.targets
        ]
        wanted = sorted({row for own in rows for row in own})
        bound = rounding_of(self.network, s, _unknown_sizes(eqs, s, greatest), wanted, good_pivots=True)
        if ties_nodes(self.network):
            bound = _TIED * bound
        index = {row: k for k, row in enumerate(wanted)}
        ahead = np.concatenate([[length[0]], length])[: len(steps.time)]
        place = np.clip(np.searchsorted(s, 2 / ahead), 1, len(s) - 1)
        floors = np.zeros((len(self.targets), len(steps.time)))
        floors += _of_inductors(self.network, eqs, s, greatest) / _shortest_lately(ahead)
        for number, (target, own) in enumerate(zip(self.targets, rows, strict=True)):
            for row in own:
                values = bound[index[row]]
                # Charges keep what rounding has done to them.
                if target.source is None or hidden:
                    floors[number] += values.max()
                else:
                    floors[number] += np.maximum(values[place], values[place - 1])
        return floors

    def _greatest(self, axis: Float) -> Float:
        """About the greatest magnitude of every node's voltage, ground left out, (nodes,)."""
        network = self.network
        looks = np.unique(axis[np.linspace(0, len(axis) - 1, min(len(axis), _LOOKS)).astype(int)])
        most = max((float(np.abs(wave.value(looks)).max()) for wave in waves(self.driven)), default=0.0)
        names = network.nodes[1:]
        if len(names) > DENSE_LIMIT:
            return np.full(len(names), most or 1.0)
        try:
            return np.asarray(np.abs(transient(network, looks, list(names))).max(axis=1))
        except RcnetError:
            return np.full(len(names), most or 1.0)

    def _edges(self, steps: Steps) -> tuple[Float, Float]:
        """What a digit of the time does where a wave is steep; jumps of slopes: each (targets, points)."""
        total = np.zeros((len(self.targets), len(steps.time)))
        jumps = np.zeros_like(total)
        for each, reaches in zip(self.driven, self.reaches, strict=True):
            wave = each.wave
            if wave is None or not len(steps.length):
                continue
            beta = np.abs([reach.beta for reach in reaches])
            jump = _jumps(wave, steps.time)
            jumps += beta[:, None] * jump
            if wave.pieces is None:
                continue
            steep = np.abs(np.diff(wave.value(steps.time))) / steps.length
            around = np.maximum(np.append(steep, 0.0), np.concatenate([[0.0], steep])) + jump
            off = _EDGE_DIGITS * steps.time * around
            through = np.array([max(abs(r.alpha), abs(r.alpha + np.real(r.weights.sum()))) for r in reaches])
            total += through[:, None] * off
            if beta.any():
                shaken = np.concatenate([[0.0], 2 * np.maximum(off[1:], off[:-1]) / steps.length])
                total += beta[:, None] * shaken
        return total, jumps


def _jumps(wave: Wave, axis: Float) -> Float:
    """How far the slope jumps at a point that is a corner: there a simulator shows the slope before it."""
    jump = np.zeros(len(axis))
    at = wave.at_corner(axis)
    before = wave.slope(np.maximum(axis[at] * (1 - 1e-9) - 1e-300, 0.0))
    after = wave.slope(axis[at] * (1 + 1e-9))
    jump[at] = np.abs(after - before)
    return jump


def _kept_until(values: Float, steps: Steps) -> Float:
    """The greatest value since the last restart, (points,); the point of a restart ends what was before."""
    answer = np.empty(len(values))
    begins = [0, *(np.flatnonzero(steps.restart[1:]) + 2).tolist(), len(values)]
    for begin, end in itertools.pairwise(begins):
        answer[begin:end] = np.maximum.accumulate(values[begin:end])
    return answer


def _exact(wave: Wave | None, reach: Reach, poles: Numbers, time: Float) -> Float:
    """What one driver adds to one curve, (times,)."""
    total = np.zeros(len(time))
    if wave is not None:
        total += reach.alpha * wave.value(time)
        if reach.beta:
            total += reach.beta * wave.slope(time)
    used = np.flatnonzero(reach.weights)
    size = max(1, _BLOCK // max(len(time), 1))
    for start in range(0, len(used), size):
        part = used[start : start + size]
        lag = np.exp(np.outer(time, poles[part])) if wave is None else wave.lags(time, poles[part])
        total += np.real(lag @ reach.weights[part])
    return total


def _supposed(corners: Sequence[float], longest: float, ratio: float) -> Float:
    """Steps that may have been taken up to the last corner: to each, doubling behind it, else the longest."""
    longest = max(longest, corners[-1] * 64 / _MOST_HIDDEN)
    points: list[float] = []
    for corner, end in itertools.pairwise(corners):
        time, step = corner, min(longest, end - corner) / ratio
        while time < end - 1e-9 * longest:
            points.append(time)
            time, step = time + step, min(2 * step, longest)
    return np.array(points)


def _shortest_lately(length: Float) -> Float:
    """The shortest of the last steps, up to each point."""
    windows = np.lib.stride_tricks.sliding_window_view(np.pad(length, (_LATELY, 0), "edge"), _LATELY + 1)
    return np.asarray(windows.min(axis=1))


def _of_inductors(network: Network, eqs: nodal.Equations, s: Float, greatest: Float) -> float:
    """What rounding does to the voltage that an inductor 2 L/h takes up, V s: units of the last place."""
    arrays = network.arrays()
    flux = 0.0
    sizes = _unknown_sizes(eqs, s[:1], greatest)[:, 0]
    for row, unknown in eqs.branch_of.items():
        if arrays.kinds[row] == ord("L"):
            flux = max(flux, float(arrays.values[row]) * float(sizes[unknown]))
    return _FLUX_DIGITS * flux


def _unknown_sizes(eqs: nodal.Equations, s: Float, greatest: Float) -> Float:
    """How great each unknown may be: nodes as given, a branch's current as the greatest at its ends."""
    nodes = eqs.node_count - 1
    answer = np.zeros((eqs.size, len(s)))
    answer[:nodes] = greatest[:, None]
    by_node = (eqs.rows < nodes) & (eqs.columns < nodes)
    ends = (eqs.rows < nodes) & (eqs.columns >= nodes)
    for number, point in enumerate(s):
        sizes = np.abs(eqs.constant) + point * np.abs(eqs.slope)
        load = np.bincount(
            eqs.rows[by_node], (sizes * answer[eqs.columns, number])[by_node], minlength=max(nodes, 1)
        )
        np.maximum.at(answer[:, number], eqs.columns[ends], load[eqs.rows[ends]])
    return answer


# ---------------------------------------------------------------------- how drivers reach curves


def followed_network(
    circuit: Circuit, network: Network, targets: Sequence[Target]
) -> tuple[Followed, dict[int, str]]:
    """The network followed to those targets it can be followed to, and why not to the others (by place).

    network: the circuit's own, or the one that starts from its state. Raises UndecidedError where the modes
    cannot be had.
    """
    sums = current_sums(network, {t.source for t in targets if t.source is not None})
    kept = [t for t in targets if t.source is None or sums[t.source] is not None]
    why = "its current is shared with other parts whose currents are not followed over time."
    left = {k: why for k, t in enumerate(targets) if t not in kept}
    driven = drivers_of(network)
    pairs = sorted({pair for target in kept for pair in pairs_of(target, sums)})
    run = circuit.analyses.transient
    used = run is not None and run.use_initial
    options = dict(circuit.options)
    given = [given_of(network, target, sums) for target in kept]
    if not driven or not pairs:
        nothing = np.zeros(0)
        reaches = [[Reach(0.0, 0.0, nothing) for _ in kept] for _ in driven]
        still = [0.0] * len(kept)
        return Followed(network, run, used, options, kept, driven, nothing, reaches, given, still), left
    system = modal_system(network, pairs, [each.driver for each in driven])
    index = {pair: k for k, pair in enumerate(pairs)}
    reaches = [
        [reach_of(system, number, target, sums, index, each.wave is None) for target in kept]
        for number, each in enumerate(driven)
    ]
    moving = system.poles != 0
    poles = system.poles[moving]
    reaches = [[replace(one, weights=one.weights[moving]) for one in row] for row in reaches]
    sudden = [sudden_of(circuit, network, target, sums) if used else 0.0 for target in kept]
    return Followed(network, run, used, options, kept, driven, poles, reaches, given, sudden), left
