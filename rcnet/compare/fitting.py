"""One number fitted at each of many places: the amount by which something there would have to be off.

From one curve and a suspected place the closed form gives the coefficient at each point; for the right place
it is one number (J. Bandler, A. Salama, Proc. IEEE 73:1279-1325, 1985, fault verification). From there, and
from decades tried, Gauss-Newton goes on for all places at once.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from .evidence import Complex, Evidence, Float
from .places import Places, joined

_GREAT = 1e30  # stands for an infinite admittance
_GRID = np.arange(-12.0, 12.25, 0.5)  # decades of a value tried before refining
_STEPS = 14
_FURTHEST = 60.0  # of ln g from where a search began
_STRIDE = 2.5  # of ln g in one step
_TELLS = 1e-6  # of the greatest weighted difference: what is needed to solve for a coefficient


@dataclass(frozen=True, eq=False)
class Suspects:
    """Places with what may change there: the coefficient is (g - offset) x base, g above zero.

    base: (places, points); offset: (places,), 1 where g scales what is there, 0 where it is put there
    start: (places,), a g from which decades are tried
    """

    places: Places
    base: Complex
    offset: Float
    start: Float

    def __len__(self) -> int:
        return len(self.offset)

    def __getitem__(self, which: Any) -> Suspects:
        return Suspects(self.places[which], self.base[which], self.offset[which], self.start[which])

    def moved(self, g: Float, at: npt.NDArray[np.int64]) -> Complex:
        """How far the curves move at these g (places,), (places, values)."""
        return self.places.moved(self._change(g), at)

    def _change(self, g: Float) -> Complex:
        change = (g - self.offset)[:, None] * self.base
        return np.asarray(np.where(np.isfinite(change), change, _GREAT))

    def slope(self, g: Float, at: npt.NDArray[np.int64]) -> Complex:
        """The derivative of `moved` by ln g, (places, values)."""
        change = self._change(g)
        bent = g[:, None] * self.base * self.places.across / (1 + change * self.places.port) ** 2
        return np.asarray(-self.places.reach * np.where(np.isfinite(bent), bent, 0)[:, at])


def joined_suspects(parts: Sequence[Suspects]) -> Suspects:
    """Several sets of suspects as one."""
    return Suspects(
        joined([part.places for part in parts]),
        np.concatenate([part.base for part in parts]),
        np.concatenate([part.offset for part in parts]),
        np.concatenate([part.start for part in parts]),
    )


def fitted(suspects: Suspects, evidence: Evidence, g: Float | None = None) -> tuple[Float, Float]:
    """The g of each suspect that leaves least, and the weighted squares it leaves; both (places,).

    g: where to begin; by default decades are tried, and what the curves themselves give
    """
    with np.errstate(all="ignore"):
        begun = _started(suspects, evidence) if g is None else g
        return _refined(suspects, evidence, begun)


def _left(suspects: Suspects, evidence: Evidence, g: Float) -> Float:
    apart = evidence.other - evidence.exact
    left = np.sum(evidence.weight * np.abs(apart - suspects.moved(g, evidence.at)) ** 2, axis=1)
    return np.asarray(np.where(np.isfinite(left), left, np.inf))


def _started(suspects: Suspects, evidence: Evidence) -> Float:
    tries = [suspects.start * 10**k for k in _GRID]
    apart = evidence.other - evidence.exact
    found = suspects.places.change_for(apart, evidence.at) / suspects.base[:, evidence.at]
    solved = found.real + suspects.offset[:, None]
    telling = evidence.weight * np.abs(apart) ** 2
    usable = np.isfinite(solved) & (solved > 0) & (telling > _TELLS * telling.max(initial=0.0))
    solved = np.where(usable, solved, np.nan)
    none = ~usable.any(axis=1)
    solved[none] = suspects.start[none, None]
    tries += list(np.nanquantile(solved, (0.1, 0.3, 0.5, 0.7, 0.9), axis=1))
    left = np.stack([_left(suspects, evidence, g) for g in tries])
    return np.asarray(np.stack(tries)[np.argmin(left, axis=0), np.arange(len(suspects))])


def _refined(suspects: Suspects, evidence: Evidence, begun: Float) -> tuple[Float, Float]:
    """Gauss-Newton in ln g for all suspects at once; a step that does not help is shortened."""
    origin = np.log(begun)
    theta, left = origin.copy(), _left(suspects, evidence, begun)
    damping = np.ones(len(suspects))
    apart = evidence.other - evidence.exact
    for _ in range(_STEPS):
        g = np.exp(theta)
        missing = apart - suspects.moved(g, evidence.at)
        slope = suspects.slope(g, evidence.at)
        bottom = np.sum(evidence.weight * np.abs(slope) ** 2, axis=1)
        top = np.sum(evidence.weight * (slope.conj() * missing).real, axis=1)
        step = np.where(bottom > 0, top / np.where(bottom > 0, bottom, 1.0), 0.0)
        step = np.clip(np.nan_to_num(step), -_STRIDE, _STRIDE) * damping
        new = np.clip(theta + step, origin - _FURTHEST, origin + _FURTHEST)
        tried = _left(suspects, evidence, np.exp(new))
        better = tried < left
        theta, left = np.where(better, new, theta), np.where(better, tried, left)
        damping = np.where(better, np.minimum(1.0, 2 * damping), damping / 4)
    return np.exp(theta), left
