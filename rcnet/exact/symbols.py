"""The transfer function in part names: a ratio of polynomials in s whose coefficients are sums of products.

The determinant of the equations is expanded over the parts (for R and C alone these are the spanning trees of
G. Kirchhoff, Ann. Phys. Chem. 72:497-508, 1847), common factors are cancelled, and the lowest coefficient of
the denominator is made 1 where it is a single product.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import CircuitError, UndecidedError, UnsolvableError
from .ac import driving_sources, node_pair
from .multilinear import Entry, Polynomial, determinant, factors, product
from .solver import require_solvable

MOST_PARTS = 20
MOST_TERMS = 100_000

Complex = npt.NDArray[np.complex128]


@dataclass(frozen=True)
class Term:
    """A whole number times part values over part values: sign and size, names above, names below the line."""

    count: int
    above: tuple[str, ...]
    below: tuple[str, ...] = ()

    @property
    def is_one(self) -> bool:
        """True for 1 and -1."""
        return abs(self.count) == 1 and not self.above and not self.below

    def __str__(self) -> str:
        names = list(self.above)
        if abs(self.count) != 1 or not names:
            names.insert(0, str(abs(self.count)))
        text = "*".join(names)
        if self.below:
            below = "*".join(self.below)
            text += f"/{below}" if len(self.below) == 1 else f"/({below})"
        return text


@dataclass(frozen=True)
class Coefficient:
    """A sum of terms, the coefficient of one power of s. Empty for zero.

    factored: the same as a product, a tuple of terms for each factor: one term, which carries the sign, and
    then
        sums; or only one sum where it does not fall apart
    """

    terms: tuple[Term, ...]
    factored: tuple[tuple[Term, ...], ...]

    def __str__(self) -> str:
        if not self.terms:
            return "0"
        if len(self.factored) == 1:
            return _sum_text(self.factored[0])
        lead = self.factored[0][0]
        sums = [f"({_sum_text(piece)})" for piece in self.factored[1:]]
        return ("-" if lead.count < 0 else "") + "*".join(sums if lead.is_one else [str(lead), *sums])

    @property
    def is_sum(self) -> bool:
        """True where it needs brackets in a product."""
        return len(self.factored) == 1 and len(self.terms) > 1


def _sum_text(terms: tuple[Term, ...]) -> str:
    text = ""
    for k, term in enumerate(terms):
        joint = ("-" if term.count < 0 else "") if k == 0 else (" - " if term.count < 0 else " + ")
        text += joint + str(term)
    return text


@dataclass(frozen=True)
class TransferFunction:
    """A ratio of polynomials in s; volts per unit of the source.

    numerator, denominator: one Coefficient for each power of s, from s^0 up; an empty numerator is zero
    values: the network's part values by name, base units
    """

    numerator: tuple[Coefficient, ...]
    denominator: tuple[Coefficient, ...]
    values: Mapping[str, float]

    def __str__(self) -> str:
        return f"({_polynomial_text(self.numerator)}) / ({_polynomial_text(self.denominator)})"

    def evaluate(self, s: npt.ArrayLike, values: Mapping[str, float] | None = None) -> Complex:
        """The response at each s, rad/s, (points,); `values` stand in for some or all of the network's own.

        Raises CircuitError for a value that is missing or no number.
        """
        points = np.atleast_1d(np.asarray(s, dtype=np.complex128))
        numbers = self._numbers(values)
        above, above_exponent = _evaluated(self.numerator, points, numbers)
        below, below_exponent = _evaluated(self.denominator, points, numbers)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore", under="ignore"):
            shift = np.clip(above_exponent - below_exponent, -2200, 2200)
            half = shift // 2
            ratio = above / below * np.exp2(half) * np.exp2(shift - half)
        if not np.isfinite(ratio).all():
            raise UnsolvableError("the response is infinite at one of the points, a pole of the network.")
        return np.asarray(ratio)

    def _numbers(self, values: Mapping[str, float] | None) -> dict[str, float]:
        given = dict(values or {})
        for name in given:
            if name not in self.values:
                raise CircuitError(f"there is no part called {name!r}.", remedy="Name the network's parts.")
        numbers = {**self.values, **given}
        for name, number in numbers.items():
            if not isinstance(number, (int, float)) or not math.isfinite(number):
                raise CircuitError(f"{name} has the value {number!r}.", remedy="Give a finite number.")
        return {name: float(number) for name, number in numbers.items()}

    def to_sympy(self) -> Any:
        """The same as a sympy expression in `s` and the part names; R, C and L are positive symbols."""
        import sympy

        symbols = {
            name: sympy.Symbol(name, positive=True)
            if name[0].upper() in "RCL"
            else sympy.Symbol(name, real=True)
            for name in self.values
        }
        s = sympy.Symbol("s")

        def polynomial(coefficients: tuple[Coefficient, ...]) -> Any:
            terms = [
                term.count
                * s**power
                * sympy.Mul(*[symbols[name] for name in term.above])
                / sympy.Mul(*[symbols[name] for name in term.below])
                for power, coefficient in enumerate(coefficients)
                for term in coefficient.terms
            ]
            return sympy.Add(*terms)

        return polynomial(self.numerator) / polynomial(self.denominator)


def _polynomial_text(coefficients: tuple[Coefficient, ...]) -> str:
    text = ""
    for power, coefficient in enumerate(coefficients):
        if not coefficient.terms:
            continue
        body = str(coefficient)
        if power:
            s = "s" if power == 1 else f"s^{power}"
            if body in ("1", "-1"):
                body = body[:-1] + s
            elif coefficient.is_sum:
                body = f"{s}*({body})"
            else:
                body = f"-{s}*{body[1:]}" if body.startswith("-") else f"{s}*{body}"
        if not text:
            text = body
        else:
            text += f" - {body[1:]}" if body.startswith("-") and not coefficient.is_sum else f" + {body}"
    return text or "0"


# ---------------------------------------------------------------------- numbers


def _evaluated(
    coefficients: tuple[Coefficient, ...], s: Complex, values: Mapping[str, float]
) -> tuple[Complex, npt.NDArray[np.float64]]:
    """A polynomial at each s as mantissa and binary exponent, (points,): long products leave the range."""
    mantissas, exponents = [], []
    for coefficient in coefficients:
        parts = [_term_value(term, values) for term in coefficient.terms]
        most = max((exponent for _, exponent in parts), default=0)
        mantissas.append(math.fsum(math.ldexp(m, max(e - most, -2000)) for m, e in parts))
        exponents.append(most)
    if not mantissas:
        return np.zeros_like(s), np.zeros(len(s))
    scale = np.frexp(np.maximum(np.abs(s.real), np.abs(s.imag)))[1].astype(np.float64)
    unit = s * np.exp2(-scale)
    powers = np.cumprod(np.vstack([np.ones_like(s), *[unit] * (len(mantissas) - 1)]), axis=0)
    height = np.array(exponents, dtype=np.float64)[:, None] + np.arange(len(mantissas))[:, None] * scale
    present = np.array([m != 0 for m in mantissas])[:, None]
    top = np.where(present, height, -np.inf).max(axis=0)
    top = np.where(np.isfinite(top), top, 0.0)
    shares = np.exp2(np.clip(height - top, -1100, 0)) * np.array(mantissas)[:, None] * powers
    return np.asarray(np.where(present, shares, 0).sum(axis=0)), top


def _term_value(term: Term, values: Mapping[str, float]) -> tuple[float, int]:
    mantissa, exponent = math.frexp(term.count)
    for name in term.above:
        m, e = math.frexp(values[name])
        mantissa, exponent = mantissa * m, exponent + e
    for name in term.below:
        m, e = math.frexp(values[name])
        if m == 0:
            raise CircuitError(
                f"{name} is zero, and the transfer function divides by it.", remedy="Change it."
            )
        mantissa, exponent = mantissa / m, exponent - e
    m, e = math.frexp(mantissa)
    return m, exponent + e


# ---------------------------------------------------------------------- derivation


def transfer_function(network: Network, of: str) -> TransferFunction:
    """The response at a node or a pair `"a b"`, per unit of the one driving source, in part names.

    Raises UndecidedError for more than MOST_PARTS parts or MOST_TERMS products and for coupled inductors,
    CircuitError unless one source carries ac, UnsolvableError where the network has no unique solution.
    """
    require_solvable(network)
    pair = node_pair(network, of)
    driving = driving_sources(network)
    if len(driving) != 1:
        raise CircuitError(
            f"{len(driving)} sources carry ac; a transfer function has one.", remedy="Give ac to one source."
        )
    if network.couplings:
        raise UndecidedError(
            f"{network.names[network.couplings[0]]} couples inductors, and a mutual inductance, the root of "
            "a product of two parts, has no place in a transfer function in part names.",
            remedy="Ask for its numbers, poles and zeros instead.",
        )
    values = network.values
    if len(values) > MOST_PARTS:
        raise UndecidedError(
            f"the network has {len(values)} parts; a transfer function in part names is given up to "
            f"{MOST_PARTS}, for beyond that nobody can read it.",
            remedy="Ask for its numbers, poles and zeros instead, or for a smaller piece of the network.",
        )
    matrix = _Matrix(network, driving[0])
    below = matrix.cleared(determinant(matrix.rows, MOST_TERMS))
    if not below:
        raise UnsolvableError(
            "the network has no unique solution for any values of its parts.",
            remedy="Look for a controlled source that controls itself.",
        )
    above = matrix.cleared(determinant(matrix.bordered(pair), MOST_TERMS))
    return matrix.written(*_cancelled(above, below))


class _Matrix:
    """The equations of Ho, Ruehli and Brennan (1975) in symbols, one bit for each part.

    Resistors enter as conductances g and inductors as 1/(s L); afterwards all is multiplied by every R and s
    L, which turns a product that holds g into one that does not name R, and one that lacks it into one that
    does.
    """

    def __init__(self, network: Network, driving: str) -> None:
        self.network = network
        self.names = list(network.values)
        self.bit = {name: 1 << k for k, name in enumerate(self.names)}
        self.inverted = sum(self.bit[name] for name in self.names if name[0].upper() in "RL")
        self.reactive = sum(self.bit[name] for name in self.names if name[0].upper() in "CL")
        self.count = len(network.nodes) - 1
        parts = list(network.parts)
        branches = [part.name for part in parts if part.kind in "VEH"]
        self.unknown = {name: self.count + k for k, name in enumerate(branches)}
        self.size = self.count + len(branches)
        self.sums: list[dict[tuple[int, int], int]] = [{} for _ in range(self.size)]
        self.right: dict[int, int] = {}
        for part in parts:
            self._stamp(
                part.kind, part.name, [network.node_index(node) - 1 for node in part.nodes], part.senses
            )
        source = network.part(driving)
        a, b = (network.node_index(node) - 1 for node in source.nodes)
        if source.kind == "V":
            self.right[self.unknown[driving]] = 1
        elif a != b:
            self.right.update({node: sign for node, sign in ((a, -1), (b, 1)) if node >= 0})

    @property
    def rows(self) -> list[list[Entry]]:
        """The matrix, row by row."""
        return [
            [(column, mask, count) for (column, mask), count in row.items() if count] for row in self.sums
        ]

    def bordered(self, pair: tuple[int, int]) -> list[list[Entry]]:
        """The matrix with the sources beside it and the output below it: its determinant is the numerator."""
        rows = self.rows
        for row, count in self.right.items():
            rows[row].append((self.size, 0, -count))
        last = {node - 1: sign for node, sign in ((pair[0], 1), (pair[1], -1)) if node > 0}
        return [*rows, [(column, 0, sign) for column, sign in last.items()] if pair[0] != pair[1] else []]

    def _add(self, row: int, column: int, mask: int, count: int) -> None:
        if row >= 0 and column >= 0:
            key = (column, mask)
            self.sums[row][key] = self.sums[row].get(key, 0) + count

    def _stamp(self, kind: str, name: str, n: list[int], senses: str | None) -> None:
        mask = self.bit.get(name, 0)
        if kind in "RCL":
            for row, column, sign in ((0, 0, 1), (1, 1, 1), (0, 1, -1), (1, 0, -1)):
                self._add(n[row], n[column], mask, sign)
        elif kind == "G":
            for row, column, sign in ((0, 2, 1), (0, 3, -1), (1, 2, -1), (1, 3, 1)):
                self._add(n[row], n[column], mask, sign)
        elif kind == "F":
            sensed = self.unknown[str(senses)]
            self._add(n[0], sensed, mask, 1)
            self._add(n[1], sensed, mask, -1)
        elif kind in "VEH":
            own = self.unknown[name]
            for node, sign in ((n[0], 1), (n[1], -1)):
                self._add(node, own, 0, sign)
                self._add(own, node, 0, sign)
            if kind == "E":
                self._add(own, n[2], mask, -1)
                self._add(own, n[3], mask, 1)
            elif kind == "H":
                self._add(own, self.unknown[str(senses)], mask, -1)

    def written(self, above: Polynomial, below: Polynomial) -> TransferFunction:
        """The ratio of two polynomials in R, s C, s L and gains, written as coefficients of powers of s."""
        numerator, denominator = self._powers(above), self._powers(below)
        shift = min([*numerator, *denominator])
        lowest = denominator[min(denominator)]
        unit, sign = 0, 1
        if len(lowest) == 1:
            ((mask, count),) = lowest.items()
            unit, sign = mask, count if abs(count) == 1 else 1
        elif lowest[max(lowest)] < 0:
            sign = -1
        return TransferFunction(
            self._coefficients(numerator, shift, unit, sign),
            self._coefficients(denominator, shift, unit, sign),
            self.network.values,
        )

    def _powers(self, polynomial: Polynomial) -> dict[int, Polynomial]:
        powers: dict[int, Polynomial] = {}
        for mask, count in polynomial.items():
            powers.setdefault((mask & self.reactive).bit_count(), {})[mask] = count
        return powers

    def _coefficients(
        self, powers: dict[int, Polynomial], shift: int, unit: int, sign: int
    ) -> tuple[Coefficient, ...]:
        top = max(powers, default=shift - 1)
        return tuple(self._coefficient(powers.get(k, {}), unit, sign) for k in range(shift, top + 1))

    def _coefficient(self, polynomial: Polynomial, unit: int, sign: int) -> Coefficient:
        if not polynomial:
            return Coefficient((), ())
        signed = {mask: sign * count for mask, count in polynomial.items()}
        terms = self._sorted(signed, unit)
        whole, pieces = factors(signed)
        common = sum(next(iter(piece)) for piece in pieces if len(piece) == 1)
        sums = [piece for piece in pieces if len(piece) > 1]
        (lead,) = self._sorted({common: whole}, unit)
        falls_apart = len(sums) > 1 or (sums and not lead.is_one)
        if not falls_apart or unit & ~common:
            return Coefficient(terms, (terms,))
        return Coefficient(terms, ((lead,), *(self._sorted(piece, 0) for piece in sums)))

    def _sorted(self, polynomial: Polynomial, unit: int) -> tuple[Term, ...]:
        terms = [
            Term(count, self._named(mask & ~unit), self._named(unit & ~mask))
            for mask, count in polynomial.items()
        ]
        return tuple(sorted(terms, key=_place))

    def _named(self, mask: int) -> tuple[str, ...]:
        return tuple(sorted((name for name, bit in self.bit.items() if mask & bit), key=_natural))

    def cleared(self, polynomial: Polynomial) -> Polynomial:
        """The polynomial multiplied by every R and s L."""
        return {mask ^ self.inverted: count for mask, count in polynomial.items()}


def _place(term: Term) -> tuple[Any, ...]:
    """What sorts terms: positive ones first, then by name."""
    return term.count < 0, [*map(_natural, term.below)], [*map(_natural, term.above)]


def _natural(name: str) -> list[tuple[int, str]]:
    """A key that sorts R2 before R10."""
    return [(int(piece), "") if piece.isdecimal() else (0, piece) for piece in re.split(r"([0-9]+)", name)]


def _cancelled(above: Polynomial, below: Polynomial) -> tuple[Polynomial, Polynomial]:
    """Both without their common factors."""
    whole_above, pieces_above = factors(above)
    whole_below, pieces_below = factors(below)
    kept_above = [piece for piece in pieces_above if piece not in pieces_below]
    kept_below = [piece for piece in pieces_below if piece not in pieces_above] if whole_above else []
    common = math.gcd(whole_above, whole_below)
    return (
        product(whole_above // common, kept_above) if whole_above else {},
        product(whole_below // common, kept_below),
    )
