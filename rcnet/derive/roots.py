"""Poles and zeros of a response: where they lie, which of them cancel, and which modes it does not show."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from ..circuit import Network
from ..errors import UndecidedError
from ..exact import TransferFunction, natural_rates, span_of
from ..exact.modes import sampled
from . import polynomials as poly
from .modes import natural_modes
from .zeros import zeros as zeros_of

Pair = tuple[int, int]

NEAR = 0.1  # a pole and a zero closer than this, relatively, nearly cancel
_GIVEN = 1e-6  # how well poles and zeros must give the response to be told
_SAME = 1e-6  # poles or zeros closer than this are taken for one that occurs twice
_COINCIDE = 1e-10  # a zero this close to a mode of no share takes it away altogether


@dataclass(frozen=True, slots=True)
class Root:
    """A pole or a zero.

    s: rad/s; count: how many times it occurs
    share: of a pole, its part of what all poles contribute to the output at rest, 0 to 1; None where it has
        none of its own, and for zeros
    """

    s: complex
    count: int = 1
    share: float | None = None

    @property
    def frequency(self) -> float:
        """|s| / 2 pi, Hz."""
        return abs(self.s) / (2 * math.pi)

    @property
    def time_constant(self) -> float | None:
        """-1 / Re s, seconds; None on the imaginary axis."""
        return -1 / self.s.real if self.s.real else None

    @property
    def quality(self) -> float | None:
        """|s| / (2 |Re s|) of a complex pair, else None; infinite on the imaginary axis."""
        if not self.s.imag:
            return None
        return abs(self.s) / (2 * abs(self.s.real)) if self.s.real else math.inf


@dataclass(frozen=True, slots=True)
class Cancelled:
    """A pole and a zero that (nearly) cancel. apart: their distance over the pole's size, 0 for the same."""

    pole: complex
    zero: complex
    apart: float


@dataclass(frozen=True)
class Roots:
    """H(s) = gain s^origin prod(1 - s/zero) / prod(1 - s/pole), over zeros and poles that are not 0.

    gain: of the response where origin is 0 its dc gain; None where the zeros are not known
    origin: zeros at s = 0 less poles there
    poles: by size, exact cancellations taken out; zeros: the same, None where `zeros_why` says why
    cancelled: pairs that coincide or nearly do; hidden: natural modes the output does not show
    left_out: how many poles faster than those listed there are
    """

    gain: float | None
    origin: int
    poles: tuple[Root, ...]
    zeros: tuple[Root, ...] | None
    cancelled: tuple[Cancelled, ...] = ()
    hidden: tuple[Root, ...] = ()
    zeros_why: str | None = None
    left_out: int = 0

    @cached_property
    def every_pole(self) -> list[complex]:
        """The poles as often as they occur, those at 0 left out."""
        return [root.s for root in self.poles for _ in range(root.count) if root.s]

    def log_response(self, s: complex) -> complex:
        """The logarithm of H at s, of any branch. Only where the zeros and the gain are known."""
        assert self.gain is not None and self.zeros is not None
        total = cmath.log(self.gain) + self.origin * cmath.log(s)
        total += sum((root.count * cmath.log(1 - s / root.s) for root in self.zeros if root.s), 0j)
        return total - sum((root.count * cmath.log(1 - s / root.s) for root in self.poles if root.s), 0j)

    @property
    def high(self) -> tuple[float, int] | None:
        """The logarithm of |H / s^n| and n, far above poles and zeros; None where the zeros are not known."""
        if self.gain is None or self.zeros is None or self.left_out:
            return None
        above = [root.s for root in self.zeros for _ in range(root.count) if root.s]
        size = math.log(abs(self.gain))
        size += math.fsum(math.log(abs(p)) for p in self.every_pole)
        size -= math.fsum(math.log(abs(z)) for z in above)
        return size, self.origin + len(above) - len(self.every_pole)


def roots_of(network: Network, of: str, pair: Pair, driver: str, function: TransferFunction | None) -> Roots:
    """The poles and zeros, from the transfer function where it is known in symbols, else from the network.

    Raises UndecidedError where not even the poles can be had.
    """
    if function is not None and function.numerator:
        return _from_symbols(network, function)
    return _from_numbers(network, of, pair, driver)


# ---------------------------------------------------------------------- from symbols


def _from_symbols(network: Network, function: TransferFunction) -> Roots:
    values = dict(function.values)
    above, below = (poly.numbers(side, values) for side in (function.numerator, function.denominator))
    if not above:
        raise UndecidedError("nothing of the source arrives at this output at any frequency.")
    zeros_at_0, poles_at_0 = poly.power_of_s(above), poly.power_of_s(below)
    above, below = above[zeros_at_0:], below[poles_at_0:]
    shared = poly.common(above, below)
    same = poly.roots(shared)
    above, below = poly.divided(above, shared)[0], poly.divided(below, shared)[0]
    origin = zeros_at_0 - poles_at_0
    poles = _shared(poly.roots(below), above, below, origin)
    zeros = [Root(s, count) for s, count in poly.roots(above)]
    at_0 = [Root(0j, abs(origin))] if origin else []
    found = Roots(
        float(above[0] / below[0]),
        origin,
        tuple((at_0 if origin < 0 else []) + poles),
        tuple((at_0 if origin > 0 else []) + zeros),
        _pairs(poles, zeros, [s for s, count in same for _ in range(count)]),
    )
    return replace(found, hidden=_hidden(network, found, same))


def _shared(
    found: Sequence[tuple[complex, int]], above: poly.Polynomial, below: poly.Polynomial, origin: int
) -> list[Root]:
    """The poles with their shares, by the residues N(p) / D'(p) of the simple ones."""
    if any(count > 1 for _, count in found) or not found:
        return [Root(s, count) for s, count in found]
    n = [float(value / above[0]) for value in above]
    sizes = []
    for k, (pole, _) in enumerate(found):
        others = np.prod([1 - pole / other for j, (other, _) in enumerate(found) if j != k] or [1.0])
        powers = [pole**power * value for power, value in enumerate(n)]
        sizes.append(float(abs(sum(powers) * (pole**origin if origin else 1.0) / others)))
    return _with_shares(found, sizes)


def _with_shares(found: Sequence[tuple[complex, int]], sizes: Sequence[float]) -> list[Root]:
    whole = math.fsum(sizes)
    if not math.isfinite(whole) or whole == 0:
        return [Root(s, count) for s, count in found]
    return [Root(s, count, size / whole) for (s, count), size in zip(found, sizes, strict=True)]


def _hidden(network: Network, found: Roots, same: Sequence[tuple[complex, int]]) -> tuple[Root, ...]:
    """The natural frequencies that are neither poles of the response nor told as cancelled."""
    try:
        left = [complex(rate) for rate in natural_rates(network)]
    except UndecidedError:
        return ()
    shown = [root.s for root in found.poles for _ in range(root.count)]
    shown += [s for s, count in same for _ in range(count)]
    for pole in shown:
        # Poles that lie together are known to a few digits only, and single ones of a pair are listed once.
        near = [rate for rate in left if abs(rate - pole) <= 1e-3 * abs(pole)]
        if near:
            left.remove(min(near, key=lambda rate: abs(rate - pole)))
    clear = [s for s in left if all(abs(s - pole) > 1e-3 * abs(pole) for pole in shown if pole)]
    return tuple(Root(s) for s in sorted(clear, key=abs) if s.imag >= 0)


def _pairs(poles: Sequence[Root], zeros: Sequence[Root], same: Sequence[complex]) -> tuple[Cancelled, ...]:
    pairs = [Cancelled(s, s, 0.0) for s in same]
    free = [zero.s for zero in zeros if zero.s]
    for pole in poles:
        if not pole.s or not free:
            continue
        near = min(free, key=lambda zero: abs(zero - pole.s))
        if (apart := abs(near - pole.s) / abs(pole.s)) < NEAR:
            free.remove(near)
            pairs.append(Cancelled(pole.s, near, apart))
    return tuple(pairs)


# ---------------------------------------------------------------------- from numbers


def _from_numbers(network: Network, of: str, pair: Pair, driver: str) -> Roots:
    natural = natural_modes(network, of, pair, driver)
    listed = [complex(pole) for pole in natural.poles]
    sizes = None if natural.shares is None else [abs(share) for share in natural.shares.tolist()]
    zeros: list[complex] | None = None
    why = None
    hidden = _silent(listed, sizes, 1e-12)
    try:
        zeros, with_hidden = zeros_of(network, driver, pair)
        if with_hidden:
            hidden, zeros = _matched(listed, sizes, zeros)
    except UndecidedError as exc:
        why = exc.message
    shown = [k for k in range(len(listed)) if k not in hidden]
    if sizes is None:
        poles = _counted([listed[k] for k in shown])
    else:
        poles = _with_shares([(listed[k], 1) for k in shown], [sizes[k] for k in shown])
    poles = sorted(poles, key=lambda root: (abs(root.s), root.s.imag))
    found = Roots(
        None,
        0,
        tuple(poles),
        None,
        hidden=tuple(Root(listed[k]) for k in sorted(hidden) if listed[k].imag >= 0),
        zeros_why=why,
        left_out=natural.left_out,
    )
    return found if zeros is None else _with_zeros(network, pair, driver, found, zeros)


def _with_zeros(network: Network, pair: Pair, driver: str, found: Roots, zeros: list[complex]) -> Roots:
    roots = _counted(sorted(zeros, key=lambda s: (abs(s), s.imag)))
    origin = sum(root.count for root in roots if not root.s)
    origin -= sum(root.count for root in found.poles if not root.s)
    gain = None if found.left_out else _gain(network, pair, driver, found.poles, roots, origin)
    pairs = _pairs(found.poles, roots, ())
    whole = replace(found, gain=gain, origin=origin, zeros=tuple(roots), cancelled=pairs)
    if gain is not None and not _agrees(network, pair, driver, whole):
        return replace(found, zeros_why="those that are found do not give the exact response.")
    return whole


def _agrees(network: Network, pair: Pair, driver: str, found: Roots) -> bool:
    """True if poles and zeros give the exact response over the whole span of poles."""
    sizes = [abs(s) for s in found.every_pole] or [1.0]
    points = np.asarray(1j * np.geomspace(min(sizes) / 10, max(sizes) * 10, 13), dtype=np.complex128)
    exact = sampled(network, [pair], [driver], points)[0, 0]
    for s, value in zip(points.tolist(), exact.tolist(), strict=True):
        if abs(value) < 1e-290:
            continue  # too small for all its digits
        own = found.log_response(s)
        if abs(cmath.exp(own - cmath.log(value)) - 1) > _GIVEN:
            return False
    return True


def _silent(listed: Sequence[complex], sizes: Sequence[float] | None, share: float) -> set[int]:
    """The modes whose share in the output is no more than that of the greatest."""
    if sizes is None:
        return set()
    least = share * max(sizes, default=0.0)
    return {k for k, size in enumerate(sizes) if size <= least and listed[k]}


def _matched(
    listed: Sequence[complex], sizes: Sequence[float] | None, zeros: Sequence[complex]
) -> tuple[set[int], list[complex]]:
    """The modes that a zero takes off the output altogether, and the zeros that are left."""
    left, hidden = list(zeros), set[int]()
    slowest = min((abs(s) for s in listed if s), default=1.0)
    for k in sorted(_silent(listed, sizes, 1e-10)):
        # Of a large network fast modes are known to a share of the slowest time constant only.
        digits = _COINCIDE * max(1.0, 1e-5 * abs(listed[k]) / slowest)
        near = [zero for zero in left if abs(zero - listed[k]) <= digits * abs(listed[k])]
        if near:
            left.remove(near[0])
            hidden.add(k)
    return hidden, left


def _counted(found: Sequence[complex]) -> list[Root]:
    counted: list[Root] = []
    for s in found:
        last = counted[-1] if counted else None
        if last is not None and abs(last.s - s) <= _SAME * abs(s):
            counted[-1] = Root(last.s, last.count + 1)
        else:
            counted.append(Root(s))
    return counted


def _gain(
    network: Network, pair: Pair, driver: str, poles: Sequence[Root], zeros: Sequence[Root], origin: int
) -> float | None:
    """What stands in front of the factors, from the exact response at one real point."""
    point = span_of(network).low
    value = complex(sampled(network, [pair], [driver], np.array([point], dtype=np.complex128))[0, 0, 0])
    if value == 0:
        return None
    size = cmath.log(value) - origin * math.log(point)
    size -= sum((cmath.log(1 - point / z.s) * z.count for z in zeros if z.s), 0j)
    size += sum((cmath.log(1 - point / p.s) * p.count for p in poles if p.s), 0j)
    return float(cmath.exp(size).real) if size.real < 700 else None
