"""Polynomials in which no product names a symbol twice: whole numbers times sets of symbols.

A set of symbols is a bit mask, a polynomial a dict from mask to coefficient. The determinant of a network is
one: each part enters the equations as a matrix of rank one, so by Cauchy and Binet's formula every minor is a
sum of products of distinct parts, and products with a repeated part, which must cancel, need never be formed.
"""

from __future__ import annotations

import math
import random
from collections.abc import Iterable, Mapping, Sequence

from ..errors import UndecidedError

Polynomial = dict[int, int]
Entry = tuple[int, int, int]  # column, mask of one symbol or 0, coefficient

_PRIME = (1 << 61) - 1  # Mersenne's; a false identity slips through once in 1e16


def determinant(rows: Sequence[Sequence[Entry]], most_terms: int) -> Polynomial:
    """The determinant of a square matrix of sums of symbols, row by row over the sets of columns taken.

    Raises UndecidedError beyond `most_terms` products at one stage.
    """
    order, sign = _order(rows)
    last = {column: step for step, row in enumerate(order) for column, _, _ in rows[row]}
    minors: dict[int, Polynomial] = {0: {0: sign}}
    for step, row in enumerate(order):
        # A column that no later row can take must be taken by now.
        due = sum(1 << column for column, at in last.items() if at == step)
        grown: dict[int, Polynomial] = {}
        for taken, minor in minors.items():
            for column, mask, coefficient in rows[row]:
                after = taken | 1 << column
                if taken >> column & 1 or due & ~after:
                    continue
                odd = (taken >> column).bit_count() & 1
                _add(grown.setdefault(after, {}), minor, mask, -coefficient if odd else coefficient)
        minors = grown
        if sum(map(len, minors.values())) > most_terms:
            raise UndecidedError(
                f"the transfer function has more than {most_terms} products of parts on the way.",
                remedy="Ask for the numbers instead, or for a smaller piece of the network.",
            )
    return minors.get((1 << len(rows)) - 1, {})


def _add(total: Polynomial, minor: Polynomial, mask: int, coefficient: int) -> None:
    for symbols, count in minor.items():
        if symbols & mask:
            continue
        key = symbols | mask
        value = total.get(key, 0) + coefficient * count
        if value:
            total[key] = value
        else:
            total.pop(key, None)


def _order(rows: Sequence[Sequence[Entry]]) -> tuple[list[int], int]:
    """An order of the rows that keeps few columns half done, and the sign of that permutation."""
    left, seen, order = set(range(len(rows))), set[int](), []
    while left:
        row = min(left, key=lambda k: (len({c for c, _, _ in rows[k]} - seen), k))
        left.remove(row)
        seen.update(column for column, _, _ in rows[row])
        order.append(row)
    swaps = sum(a > b for k, a in enumerate(order) for b in order[k + 1 :])
    return order, -1 if swaps & 1 else 1


def factors(polynomial: Polynomial) -> tuple[int, list[Polynomial]]:
    """The polynomial as a whole number times irreducible factors, no two of which share a symbol.

    Symbols x and y stand in one factor if and only if P11 P00 differs from P10 P01, where P11 are the terms
    with both, P10 those with x only, and so on (A. Shpilka, I. Volkovich, ICALP 2010, Lecture Notes in
    Computer Science 6198:408-419). That is tested at a random point modulo a prime.
    """
    if not polynomial:
        return 0, []
    groups = _groups(polynomial)
    first = max(polynomial)
    found = []
    for group in groups:
        rest = first & ~group
        piece = {mask & group: count for mask, count in polynomial.items() if mask & ~group == rest}
        content = math.gcd(*piece.values()) * (1 if piece[max(piece)] > 0 else -1)
        found.append({mask: count // content for mask, count in piece.items()})
    whole = polynomial[first]
    for piece in found:
        whole //= piece[max(piece)]
    return whole, sorted(found, key=lambda piece: (len(piece), max(piece)))


def _groups(polynomial: Polynomial) -> list[int]:
    """The masks of the symbols that stand in one factor together."""
    used = 0
    for mask in polynomial:
        used |= mask
    bits = [k for k in range(used.bit_length()) if used >> k & 1]
    rng = random.Random(1)
    point = {k: rng.randrange(1, _PRIME) for k in bits}
    values = {mask: count * _product(point, mask) % _PRIME for mask, count in polynomial.items()}
    group = {k: 1 << k for k in bits}
    for i, x in enumerate(bits):
        for y in bits[i + 1 :]:
            if group[x] >> y & 1:
                continue
            part = [0, 0, 0, 0]
            for mask, value in values.items():
                part[(mask >> x & 1) * 2 + (mask >> y & 1)] += value
            if (part[3] * part[0] - part[2] * part[1]) % _PRIME:
                joined = group[x] | group[y]
                for k in bits:
                    if joined >> k & 1:
                        group[k] = joined
    return sorted(set(group.values()))


def _product(point: Mapping[int, int], mask: int) -> int:
    product = 1
    for k, value in point.items():
        if mask >> k & 1:
            product = product * value % _PRIME
    return product


def product(whole: int, pieces: Iterable[Polynomial]) -> Polynomial:
    """A whole number times polynomials that share no symbol."""
    total: Polynomial = {0: whole}
    for piece in pieces:
        total = {a | b: x * y for a, x in total.items() for b, y in piece.items()}
    return total
