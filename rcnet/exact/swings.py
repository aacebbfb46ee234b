"""Exponentials and damped sines as swings that die away, and what a mode does under them.

A mode with the pole p, under exp(s t) from t = 0 on, does (exp(s t) - exp(p t)) / (s - p): a divided
difference of the exponential, which keeps its digits by other formulas where s and p lie near each other
(A. McCurdy, K. Ng, B. Parlett, Math. Comp. 43(168):501-528, 1984).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Exponential, Sine
from .modes import ModalSystem
from .twofold import two_product

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Numbers = npt.NDArray[Any]  # float64 where every pole is real, else complex128

_FASTEST = 1e300  # 1/s
_NOTHING = 1e-30  # exp(z) - 1 is z, and a division of smaller numbers is not to be trusted
_TERMS = 20  # of a series in numbers below one: 21/22! is below the last digit


@dataclass(frozen=True)
class Swing:
    """From `begin` on, Re(amplitude (exp(rate (t - begin)) - 1)); zero before.

    begin: s; amplitude: V or A, complex; rate = -damping + 2 pi j frequency, 1/s, not zero
    """

    begin: float
    amplitude: complex
    damping: float
    frequency: float = 0.0

    @property
    def rate(self) -> complex:
        """The exponential's own rate, 1/s."""
        return complex(-self.damping, 2 * math.pi * self.frequency)

    def turned(self, since: Float) -> Numbers:
        """exp(rate t) at times (times,), its angle to the last digit however many turns it has made."""
        size = np.exp(-self.damping * since)
        return size * np.exp(2j * math.pi * turns_of(self.frequency, since)) if self.frequency else size

    def moved(self, since: Float) -> Float:
        """What is added to the value at rest, (times,)."""
        near = np.abs(self.rate) * since < 1
        early = np.expm1(np.where(near, self.rate * since, 0.0))
        return np.asarray(np.real(self.amplitude * np.where(near, early, self.turned(since) - 1)))


def swings_of(wave: Exponential | Sine) -> list[Swing]:
    """The swings whose sum, added to the waveform's first value, is the waveform."""
    if isinstance(wave, Sine):
        phasor = wave.amplitude * np.exp(1j * math.radians(wave.phase))
        return [Swing(wave.delay, complex(-1j * phasor), wave.damping, wave.frequency)]
    change = wave.final - wave.initial
    there = Swing(wave.rise_delay, -change, min(1 / wave.rise_time_constant, _FASTEST))
    if not wave.falls:
        return [there]
    return [there, Swing(wave.fall_delay, change, min(1 / wave.fall_time_constant, _FASTEST))]


def turns_of(frequency: float, since: Float) -> Float:
    """The part of a turn, in [-1/2, 1/2], that frequency times seconds leaves beyond whole turns."""
    whole, missing = two_product(np.full_like(since, frequency), since)
    return np.asarray((whole - np.rint(whole)) + missing)


def swung(system: ModalSystem, number: int, swing: Swing, since: Float) -> Float:
    """What a swing of source `number` adds to each output `since` seconds after it began, (outputs, times).

    Modes faster than the swing follow it with a lag (e' = p e - u', as `Followed` has it); slower ones add it
    up (x' = p x + u), so that neither way takes the difference of two great numbers.
    """
    slow = np.abs(system.poles) <= abs(swing.rate)
    lags, sums = system.weights[number][:, ~slow], system.residues[number][:, slow]
    level = system.direct[number] + np.real(lags).sum(axis=-1) if slow.any() else system.static[number]
    answer = level[:, None] * swing.moved(since)
    answer -= np.real(_terms(_first, swing, system.poles[~slow], since) @ lags.T).T
    answer += np.real(_terms(_second, swing, system.poles[slow], since) @ sums.T).T
    return np.asarray(answer)


def _terms(
    difference: Callable[[complex, Numbers, Numbers, Float], Numbers],
    swing: Swing,
    poles: Numbers,
    since: Float,
) -> Numbers:
    """The terms under the swing, a real one: half of it and half of its conjugate. (times, terms)."""
    turned = swing.turned(since)
    terms = swing.amplitude * difference(swing.rate, turned, poles, since)
    if swing.frequency:
        other = difference(swing.rate.conjugate(), np.conj(turned), poles, since)
        terms = (terms + swing.amplitude.conjugate() * other) / 2
    return np.asarray(terms)


def _first(rate: complex, turned: Numbers, poles: Numbers, since: Float) -> Numbers:
    """The rate times (exp(rate t) - exp(p t)) / (rate - p), which is t exp(p t) where the two are equal."""
    return np.asarray(rate * _difference(rate, turned, poles, since))


def _difference(rate: complex, turned: Numbers, poles: Numbers, since: Float) -> Numbers:
    apart = poles - rate
    arguments = np.outer(since, apart)
    near = np.abs(arguments) < 1
    held = np.where(near, arguments, 0.0)
    zero = np.abs(held) < _NOTHING
    growth = np.where(zero, 1.0, np.expm1(held) / np.where(zero, 1.0, held))
    with np.errstate(all="ignore"):
        far = (np.exp(np.outer(since, poles)) - turned[:, None]) / np.where(apart == 0, 1.0, apart)
    return np.asarray(np.where(near, since[:, None] * turned[:, None] * growth, far))


def _second(rate: complex, turned: Numbers, poles: Numbers, since: Float) -> Numbers:
    """The rate times the second divided difference of exp(. t) at 0, rate and p, where |p| <= |rate|."""
    near = np.abs(rate) * since < 1
    answer = np.empty((len(since), len(poles)), dtype=np.complex128)
    late = since[~near]
    steady = _difference(0j, np.ones(len(late)), poles, late)
    answer[~near] = _difference(rate, turned[~near], poles, late) - steady
    early = since[near]
    a, b = (rate * early)[:, None], np.outer(early, poles)
    term, power, total = np.ones_like(b) + 0j, np.ones_like(b), np.full(b.shape, 0.5 + 0j)
    for k in range(1, _TERMS + 1):  # sum of h_k(a, b) / (k + 2)!, h_k the complete homogeneous polynomials
        power = power * b
        term = a * term + power
        total += term / math.factorial(k + 2)
    answer[near] = early[:, None] * a * total
    return answer
