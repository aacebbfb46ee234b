"""Elimination of one small network for many samples of its part values, a block of frequencies at a time.

The star-mesh transformation of `elimination`, its pattern read as a list of instructions: the same products,
quotients and sums in the same order, for each sample and block of frequencies in turn.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from .compiled import compiled, run_blocks
from .elimination import Pattern
from .inner import Complex, Float, Indices, Numbers

BLOCK = 64  # frequencies that share one pass, at most
_NEAREST = 24 * 1024  # bytes that should stay in the fastest memory: larger networks get shorter blocks
_SAMPLES = 512  # samples that one task of a thread works on


@dataclass(frozen=True)
class Program:
    """A pattern as flat lists.

    node: (steps,); start: (steps + 1,) into neighbour, slot
    pair_start: (steps + 1,) into first, second, fill; see `elimination`
    part_slot: (admittances,); opens: (admittances,), True for the first part of a slot; slots: how many
    blank: the slots without a part of their own
    Slots between kept nodes are left out: no voltage depends on them.
    """

    node: Indices
    start: Indices
    neighbour: Indices
    slot: Indices
    pair_start: Indices
    first: Indices
    second: Indices
    fill: Indices
    part_slot: Indices
    opens: npt.NDArray[np.bool_]
    blank: Indices
    slots: int


def program(pattern: Pattern) -> Program:
    """The pattern's steps one after another."""
    steps, slots = pattern.steps, len(pattern.slot_ends)
    idle = np.zeros(slots, dtype=bool)
    idle[np.flatnonzero(np.isin(pattern.slot_ends, pattern.kept).all(axis=1))] = True
    used = [np.flatnonzero(~idle[step.fill]) for step in steps]
    part_slot = pattern.part_slots.copy()
    part_slot[idle[part_slot] & (part_slot >= 0)] = -1
    opens = np.zeros(len(part_slot), dtype=bool)
    opens[np.unique(part_slot, return_index=True)[1]] = True

    def joined(lists: Iterable[Indices]) -> Indices:
        return np.concatenate([np.empty(0, dtype=np.int64), *lists])

    def starts(lists: Iterable[Indices]) -> Indices:
        return np.cumsum([0, *(len(one) for one in lists)], dtype=np.int64)

    return Program(
        np.array([step.node for step in steps], dtype=np.int64),
        starts(step.neighbours for step in steps),
        joined(step.neighbours for step in steps),
        joined(step.slots for step in steps),
        starts(used),
        joined(step.first[which] for step, which in zip(steps, used, strict=True)),
        joined(step.second[which] for step, which in zip(steps, used, strict=True)),
        joined(step.fill[which] for step, which in zip(steps, used, strict=True)),
        part_slot,
        opens & (part_slot >= 0),
        np.setdiff1d(np.arange(slots), part_slot),
        slots,
    )


def solve(
    steps: Program,
    is_resistor: npt.NDArray[np.bool_],
    values: Float,
    s: Complex,
    potentials: Complex,
    currents: Complex,
    wanted: Sequence[int],
    answer: Complex,
) -> bool:
    """Fill `answer`, (wanted, columns, samples, points), volts, for part values (admittances, samples).

    s: (points,); potentials: (nodes, columns), volts, of the fixed nodes; currents: (nodes, columns), amperes
    put in. False if a number in the answer is not finite.
    """
    columns, samples = potentials.shape[1], values.shape[1]
    grid = _grid(s, 16 * (steps.slots + len(steps.slot) + columns * len(potentials)))
    lists = (steps.node, steps.start, steps.neighbour, steps.slot, steps.pair_start)
    pairs = (steps.first, steps.second, steps.fill, steps.part_slot, steps.opens, steps.blank, steps.slots)
    fed = bool(currents.any())
    seen = np.array(wanted, dtype=np.int64)
    bad: list[int] = []

    def work(start: int) -> None:
        part = slice(start, min(start + _SAMPLES, samples))
        chosen = np.ascontiguousarray(values[:, part].T)
        chosen[:, is_resistor] = 1.0 / chosen[:, is_resistor]
        _run(
            lists,
            pairs,
            is_resistor,
            chosen,
            grid.real.copy(),
            grid.imag.copy(),
            potentials,
            currents,
            fed,
            seen,
            answer[:, :, part],
        )
        if not np.isfinite(answer[:, :, part]).all():
            bad.append(start)

    run_blocks(work, range(0, samples, _SAMPLES))
    return not bad


def _grid(s: Complex, size: int) -> Complex:
    """The points in rows of equal length, the last one repeated; `size` bytes belong to each point."""
    width = 8 * max(1, min(BLOCK, _NEAREST // size) // 8)
    blocks = -(-len(s) // width)
    width = 8 * -(-len(s) // (8 * blocks))
    points = np.full(blocks * width, s[-1])
    points[: len(s)] = s
    return points.reshape(blocks, width)


@compiled
def _run(
    lists: Any,
    pairs: Any,
    is_resistor: Any,
    values: Float,
    re: Float,
    im: Float,
    potentials: Complex,
    currents: Complex,
    fed: bool,
    wanted: Indices,
    answer: Numbers,
) -> None:
    """Every sample at every point.

    Longer than a screen, because loops over f become vector instructions only where the compiler sees the
    arrays they write being made.
    """
    node, start, neighbour, slot, pair_start = lists
    first, second, fill, part_slot, opens, blank, slots = pairs
    nodes, columns = potentials.shape
    width = re.shape[1]
    y = np.empty((slots, 2, width))
    share = np.empty((len(neighbour), 2, width))
    inverse = np.empty((len(node), 2, width))
    v = np.empty((nodes * columns, 2, width))
    j = np.empty((nodes * columns, 2, width))
    work = np.empty((2, width))
    _spread(potentials, v)
    for sample in range(values.shape[0]):
        for block in range(re.shape[0]):
            for own in blank:
                y[own] = 0.0
            for k in range(len(part_slot)):
                if part_slot[k] < 0:
                    continue
                own = np.uint64(part_slot[k])
                value = values[sample, k]
                if opens[k] and is_resistor[k]:
                    for f in range(width):
                        y[own, 0, f] = value
                        y[own, 1, f] = 0.0
                elif opens[k]:
                    for f in range(width):
                        y[own, 0, f] = value * re[block, f]
                        y[own, 1, f] = value * im[block, f]
                elif is_resistor[k]:
                    for f in range(width):
                        y[own, 0, f] += value
                else:
                    for f in range(width):
                        y[own, 0, f] += value * re[block, f]
                        y[own, 1, f] += value * im[block, f]
            if fed:
                _spread(currents, j)
            for step in range(len(node)):
                own = np.uint64(slot[start[step]])
                for f in range(width):
                    work[0, f] = y[own, 0, f]
                    work[1, f] = y[own, 1, f]
                for k in range(start[step] + 1, start[step + 1]):
                    own = np.uint64(slot[k])
                    for f in range(width):
                        work[0, f] += y[own, 0, f]
                        work[1, f] += y[own, 1, f]
                here = np.uint64(step)
                for f in range(width):
                    scale = 1.0 / (work[0, f] * work[0, f] + work[1, f] * work[1, f])
                    inverse[here, 0, f] = work[0, f] * scale
                    inverse[here, 1, f] = -work[1, f] * scale
                # Ground's voltage is zero and it is never the second of a pair, so its share is not needed.
                for k in range(start[step], start[step + 1]):
                    if neighbour[k] == 0:
                        continue
                    own = np.uint64(slot[k])
                    to = np.uint64(k)
                    for f in range(width):
                        a, b = y[own, 0, f], y[own, 1, f]
                        share[to, 0, f] = a * inverse[here, 0, f] - b * inverse[here, 1, f]
                        share[to, 1, f] = a * inverse[here, 1, f] + b * inverse[here, 0, f]
                for k in range(pair_start[step], pair_start[step + 1]):
                    own = np.uint64(slot[start[step] + first[k]])
                    by = np.uint64(start[step] + second[k])
                    to = np.uint64(fill[k])
                    for f in range(width):
                        work[0, f] = y[own, 0, f] * share[by, 0, f] - y[own, 1, f] * share[by, 1, f]
                        work[1, f] = y[own, 0, f] * share[by, 1, f] + y[own, 1, f] * share[by, 0, f]
                    for f in range(width):
                        y[to, 0, f] += work[0, f]
                        y[to, 1, f] += work[1, f]
                for k in range(start[step], start[step + 1] if fed else 0):
                    if neighbour[k] == 0:
                        continue
                    by = np.uint64(k)
                    for c in range(columns):
                        own = np.uint64(node[step] * columns + c)
                        to = np.uint64(neighbour[k] * columns + c)
                        for f in range(width):
                            work[0, f] = share[by, 0, f] * j[own, 0, f] - share[by, 1, f] * j[own, 1, f]
                            work[1, f] = share[by, 0, f] * j[own, 1, f] + share[by, 1, f] * j[own, 0, f]
                        for f in range(width):
                            j[to, 0, f] += work[0, f]
                            j[to, 1, f] += work[1, f]
            for step in range(len(node) - 1, -1, -1):
                here = np.uint64(step)
                for c in range(columns):
                    to = np.uint64(node[step] * columns + c)
                    for f in range(width):
                        work[0, f] = 0.0
                        work[1, f] = 0.0
                    if fed:
                        for f in range(width):
                            work[0, f] = inverse[here, 0, f] * j[to, 0, f] - inverse[here, 1, f] * j[to, 1, f]
                            work[1, f] = inverse[here, 0, f] * j[to, 1, f] + inverse[here, 1, f] * j[to, 0, f]
                    for k in range(start[step], start[step + 1]):
                        if neighbour[k] == 0:
                            continue
                        by = np.uint64(k)
                        own = np.uint64(neighbour[k] * columns + c)
                        for f in range(width):
                            work[0, f] += share[by, 0, f] * v[own, 0, f] - share[by, 1, f] * v[own, 1, f]
                            work[1, f] += share[by, 0, f] * v[own, 1, f] + share[by, 1, f] * v[own, 0, f]
                    for f in range(width):
                        v[to, 0, f] = work[0, f]
                        v[to, 1, f] = work[1, f]
            low = block * width
            for row in range(len(wanted)):
                for c in range(columns):
                    own = np.uint64(wanted[row] * columns + c)
                    for f in range(min(width, answer.shape[3] - low)):
                        answer[row, c, sample, low + f] = complex(v[own, 0, f], v[own, 1, f])


@compiled
def _spread(numbers: Complex, into: Float) -> None:
    """The same complex (nodes, columns) at every point, to (nodes x columns, 2, width)."""
    nodes, columns = numbers.shape
    for n in range(nodes):
        for c in range(columns):
            into[n * columns + c, 0] = numbers[n, c].real
            into[n * columns + c, 1] = numbers[n, c].imag
