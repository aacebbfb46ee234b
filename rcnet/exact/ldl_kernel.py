"""Elimination of sparse networks in dense fronts, sixteen frequencies at a time.

G + sC of a passive network is complex symmetric with positive semidefinite parts, so that LDL^T without
pivoting is stable in any order (N. Higham, Math. Comp. 67(224):1591-1599, 1998). Diagonals are never stored
but formed as sums of the admittances still there, those to fixed nodes kept apart (W. Grassmann, M. Taksar,
D. Heyman, Oper. Res. 33(5):1107-1116, 1985), so that widely spread values keep their digits. Fronts: J. Liu,
SIAM Rev. 34:82-109, 1992.

A front of m nodes holds the admittances between them, the strict lower triangle by columns: that of row i and
column j < i is entry j (m - 1) - j (j - 1)/2 + i - j - 1. Each entry is (2, BLOCK): real and imaginary parts.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from .compiled import compiled, run_blocks
from .inner import Complex, Float, Indices, Load, Sums
from .ldl_analysis import LdlPlan

BLOCK = 16  # frequencies that share one pass over the fronts


def prepare(plan: LdlPlan, numbers: Sums) -> tuple[Float, ...]:
    """The links in the order of fronts, and the shunts in the order of nodes: g, c, g, c."""
    to_fixed_g, to_fixed_c = np.empty_like(numbers.shunt_g), np.empty_like(numbers.shunt_c)
    to_fixed_g[plan.place], to_fixed_c[plan.place] = numbers.shunt_g, numbers.shunt_c
    return numbers.link_g[plan.link], numbers.link_c[plan.link], to_fixed_g, to_fixed_c


def solve(plan: LdlPlan, prepared: tuple[Float, ...], s: Complex, load: Load, wanted: Indices) -> Complex:
    """Voltages of the inner nodes `wanted` at each s, (wanted, columns, points); Re s and Im s >= 0."""
    values, (to_fixed_g, to_fixed_c) = prepared[:2], prepared[2:]
    starts, ends = plan.place[load.nodes], plan.place[wanted]
    carry, _ = _mark(plan.parent, plan.node_front[starts])
    keep, factor_start = _kept(plan.parent, plan.node_front[ends], plan.first, plan.row_start)
    lists = (plan.first, plan.row_start, plan.rows, plan.seat, plan.parent, plan.link_start, plan.link_seat)
    answer = np.empty((len(wanted), load.columns, len(s)), dtype=np.complex128)

    def work(start: int) -> None:
        points = slice(start, min(start + BLOCK, len(s)))
        size = points.stop - start
        here = np.full(BLOCK, s[points][-1])  # the last point fills an incomplete block
        here[:size] = s[points]
        re, im = here.real.copy(), here.imag.copy()
        currents = np.zeros((len(plan.place), load.columns, 2, BLOCK))
        flow = load.at(s[points], points)
        currents[starts, :, 0, :size] = flow.real
        currents[starts, :, 1, :size] = flow.imag
        to_fixed = np.empty((len(plan.place), 2, BLOCK))
        to_fixed[:, 0] = to_fixed_g[:, None] + to_fixed_c[:, None] * re
        to_fixed[:, 1] = to_fixed_c[:, None] * im
        factors = np.empty((factor_start[-1], 2, BLOCK))
        room = (np.empty((plan.largest, 2, BLOCK)), np.empty((plan.stack, 2, BLOCK)))
        _factorise(lists, values, re, im, to_fixed, currents, (keep, carry, factor_start), factors, room)
        _back(lists, keep, factor_start, factors, currents)
        found = currents[ends]
        answer[:, :, points] = found[:, :, 0, :size] + 1j * found[:, :, 1, :size]

    run_blocks(work, range(0, len(s), BLOCK))
    return answer


@compiled
def _mark(parent: Indices, starts: Indices) -> tuple[Any, int]:
    """True for the fronts `starts` and all above them, and how many those are."""
    marked = np.zeros(len(parent), np.bool_)
    count = 0
    for start in starts:
        k = start
        while k >= 0 and not marked[k]:
            marked[k] = True
            count += 1
            k = parent[k]
    return marked, count


@compiled
def _kept(parent: Indices, starts: Indices, first: Indices, row_start: Indices) -> tuple[Any, Indices]:
    """The fronts whose factors the wanted voltages need, and where each one's factor begins."""
    marked, _ = _mark(parent, starts)
    begin = np.zeros(len(parent) + 1, np.int64)
    for front in range(len(parent)):
        wide = first[front + 1] - first[front]
        below = row_start[front + 1] - row_start[front]
        begin[front + 1] = begin[front] + (wide * (wide - 1) // 2 + wide * below if marked[front] else 0)
    return marked, begin


@compiled
def _factorise(
    lists: Any,
    values: Any,
    re: Float,
    im: Float,
    to_fixed: Float,
    currents: Float,
    marks: Any,
    factors: Float,
    room: Any,
) -> None:
    """Eliminate every node. Where currents arrive, `currents` becomes J/d at each node."""
    first, row_start, rows, seat, parent, link_start, link_seat = lists
    link_g, link_c = values
    keep, carry, factor_start = marks
    front, stack = room
    fronts = len(parent)
    top = 0
    waiting = np.full(fronts, -1, np.int64)  # the child on top of the stack
    under = np.full(fronts, -1, np.int64)
    scaled = np.empty((_widest(first, row_start), 2, BLOCK))
    for now in range(fronts):
        wide = first[now + 1] - first[now]
        own = rows[row_start[now] : row_start[now + 1]]
        size = wide + len(own)
        front[: size * (size - 1) // 2] = 0.0
        for k in range(link_start[now], link_start[now + 1]):
            entry = front[link_seat[k]]
            for f in range(BLOCK):
                entry[0, f] += link_g[k] + re[f] * link_c[k]
                entry[1, f] += im[f] * link_c[k]
        child = waiting[now]
        while child >= 0:
            seats = seat[row_start[child] : row_start[child + 1]]
            top -= len(seats) * (len(seats) - 1) // 2
            _extend(front, size, stack, top, seats)
            child = under[child]
        used = scaled[: wide * size]
        for p in range(wide):
            _pivot(front, size, used, p, first[now], own, wide, to_fixed, currents, carry[now])
        if keep[now]:
            begin = factor_start[now]
            for p in range(wide):
                for i in range(p + 1, size):
                    factors[begin] = used[p * size + i]
                    begin += 1
        _update(front, size, used, wide, stack, top)
        top += len(own) * (len(own) - 1) // 2
        if parent[now] >= 0:
            under[now] = waiting[parent[now]]
            waiting[parent[now]] = now


@compiled
def _widest(first: Indices, row_start: Indices) -> int:
    most = 1
    for front in range(len(first) - 1):
        wide = first[front + 1] - first[front]
        most = max(most, wide * (wide + row_start[front + 1] - row_start[front]))
    return most


@compiled
def _extend(front: Float, size: int, stack: Float, begin: int, seats: Indices) -> None:
    """Add a child's update, which begins at entry `begin` of the stack, to its parent's front."""
    k = begin
    for j in range(len(seats)):
        column = seats[j]
        base = column * (size - 1) - column * (column - 1) // 2 - column - 1
        for i in range(j + 1, len(seats)):
            into = front[base + seats[i]]
            update = stack[k]
            for part in range(2):
                for f in range(BLOCK):
                    into[part, f] += update[part, f]
            k += 1


@compiled
def _pivot(
    front: Float,
    size: int,
    scaled: Float,
    p: int,
    begin: int,
    own: Indices,
    wide: int,
    to_fixed: Float,
    currents: Float,
    carried: bool,
) -> None:
    """Column p brought up to date, its sum d, its shares y/d in `scaled`; what node p hands on to the others.

    Results go through small arrays made here: only then does the compiler know that no argument overlaps them
    and makes vector instructions of the loops over f.
    """
    base = p * (size - 1) - p * (p - 1) // 2
    node = begin + p
    total, inverse, share = np.empty((2, BLOCK)), np.empty((2, BLOCK)), np.empty((2, BLOCK))
    _add_up(front, size, scaled, p, p, front, base)
    for f in range(BLOCK):
        total[0, f] = to_fixed[node, 0, f]
        total[1, f] = to_fixed[node, 1, f]
    for i in range(size - p - 1):
        entry = front[np.uint64(base + i)]
        for f in range(BLOCK):
            total[0, f] += entry[0, f]
            total[1, f] += entry[1, f]
    for f in range(BLOCK):
        scale = 1.0 / (total[0, f] * total[0, f] + total[1, f] * total[1, f])
        inverse[0, f] = total[0, f] * scale
        inverse[1, f] = -total[1, f] * scale
    for i in range(size - p - 1):
        entry = front[np.uint64(base + i)]
        for f in range(BLOCK):
            share[0, f] = entry[0, f] * inverse[0, f] - entry[1, f] * inverse[1, f]
            share[1, f] = entry[0, f] * inverse[1, f] + entry[1, f] * inverse[0, f]
        place = np.uint64(p * size + p + 1 + i)
        for f in range(BLOCK):
            scaled[place, 0, f] = share[0, f]
            scaled[place, 1, f] = share[1, f]
    _hand_on(scaled, p * size, p, begin, own, wide, to_fixed)
    if carried:
        for column in range(currents.shape[1]):
            _hand_on(scaled, p * size, p, begin, own, wide, currents[:, column])
            product = np.zeros((2, BLOCK))
            _add_product(inverse, currents[node, column], product)
            currents[node, column] = product


@compiled
def _hand_on(scaled: Float, base: int, p: int, begin: int, own: Indices, wide: int, numbers: Float) -> None:
    """Each other node's number grows by its share of node p's; `numbers` is (nodes, 2, BLOCK)."""
    given, new = np.empty((2, BLOCK)), np.empty((2, BLOCK))
    for f in range(BLOCK):
        given[0, f] = numbers[begin + p, 0, f]
        given[1, f] = numbers[begin + p, 1, f]
    for i in range(p + 1, wide + len(own)):
        share = scaled[np.uint64(base + i)]
        other = np.uint64(begin + i if i < wide else own[i - wide])
        for f in range(BLOCK):
            new[0, f] = numbers[other, 0, f] + (share[0, f] * given[0, f] - share[1, f] * given[1, f])
            new[1, f] = numbers[other, 1, f] + (share[0, f] * given[1, f] + share[1, f] * given[0, f])
        for f in range(BLOCK):
            numbers[other, 0, f] = new[0, f]
            numbers[other, 1, f] = new[1, f]


@compiled
def _add_product(first: Float, second: Float, into: Float) -> None:
    """Add first x second, complex, to `into`; each (2, BLOCK)."""
    for f in range(BLOCK):
        re = first[0, f] * second[0, f] - first[1, f] * second[1, f]
        im = first[0, f] * second[1, f] + first[1, f] * second[0, f]
        into[0, f] += re
        into[1, f] += im


@compiled
def _add_up(front: Float, size: int, scaled: Float, j: int, pivots: int, into: Float, begin: int) -> None:
    """Column j plus the sum over the first `pivots` columns q of y_iq (y_jq/d_q), to entries of `into`.

    Two rows at a time, so that one waits for its sums while the other is worked on.
    """
    base = j * (size - 1) - j * (j - 1) // 2
    rows = size - j - 1
    total = np.empty((4, BLOCK))
    for i in range(0, rows, 2):
        second = 1 if i + 1 < rows else 0
        for f in range(BLOCK):
            total[0, f] = front[np.uint64(base + i), 0, f]
            total[1, f] = front[np.uint64(base + i), 1, f]
            total[2, f] = front[np.uint64(base + i + second), 0, f]
            total[3, f] = front[np.uint64(base + i + second), 1, f]
        entry = j + i
        for q in range(pivots):
            by, one, two = np.uint64(q * size + j), np.uint64(entry), np.uint64(entry + second)
            for f in range(BLOCK):
                re = scaled[by, 0, f]
                im = scaled[by, 1, f]
                total[0, f] += front[one, 0, f] * re - front[one, 1, f] * im
                total[1, f] += front[one, 0, f] * im + front[one, 1, f] * re
                total[2, f] += front[two, 0, f] * re - front[two, 1, f] * im
                total[3, f] += front[two, 0, f] * im + front[two, 1, f] * re
            entry += size - q - 2
        for f in range(BLOCK):
            into[np.uint64(begin + i), 0, f] = total[0, f]
            into[np.uint64(begin + i), 1, f] = total[1, f]
            into[np.uint64(begin + i + second), 0, f] = total[2 * second, f]
            into[np.uint64(begin + i + second), 1, f] = total[2 * second + 1, f]


@compiled
def _update(front: Float, size: int, scaled: Float, wide: int, stack: Float, begin: int) -> None:
    """What the front's own nodes leave behind between the others, onto the stack."""
    for j in range(wide, size):
        _add_up(front, size, scaled, j, wide, stack, begin)
        begin += size - j - 1


@compiled
def _back(lists: Any, keep: Any, factor_start: Indices, factors: Float, currents: Float) -> None:
    """Voltages in place of J/d, from the last node down, in the fronts that are kept."""
    first, row_start, rows = lists[0], lists[1], lists[2]
    for now in range(len(keep) - 1, -1, -1):
        if not keep[now]:
            continue
        own = rows[row_start[now] : row_start[now + 1]]
        wide = first[now + 1] - first[now]
        size = wide + len(own)
        entry = factor_start[now + 1]
        for p in range(wide - 1, -1, -1):
            entry -= size - p - 1
            for i in range(p + 1, size):
                other = first[now] + i if i < wide else own[i - wide]
                for column in range(currents.shape[1]):
                    _add_product(
                        factors[entry + i - p - 1], currents[other, column], currents[first[now] + p, column]
                    )
