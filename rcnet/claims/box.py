"""The box of part values that tolerances and temperature allow."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Conditions, Network, Part
from ..errors import CircuitError

Float = npt.NDArray[np.float64]

# Where a part has its nominal value, degrees Celsius: 300.15 K, SPICE's TNOM.
REFERENCE = 27.0


@dataclass(frozen=True)
class Box:
    """Parts whose values may lie apart from their nominal ones, each within its own limits.

    names: of the parts, in the network's order; nominal: (parts,), base units
    low, high: (parts,), the least and the greatest value over the nominal one, 0 < low <= 1 <= high
    A point of the box is given as a place in the unit cube, (..., parts): 0 is `low`, 1 is `high`, and
    between them the logarithm of the value runs evenly.
    """

    names: tuple[str, ...]
    nominal: Float
    low: Float
    high: Float

    def __len__(self) -> int:
        return len(self.names)

    @property
    def home(self) -> Float:
        """The place of the nominal values, (parts,)."""
        below, above = np.log(self.low), np.log(self.high)
        return np.asarray(below / (below - above))

    def factors(self, places: Float) -> Float:
        """Values over nominal ones at places (..., parts); exact at both ends and at home."""
        inside = np.exp((1 - places) * np.log(self.low) + places * np.log(self.high))
        ends = np.where(places <= 0, self.low, np.where(places >= 1, self.high, inside))
        return np.asarray(np.where((places == self.home) & (places > 0) & (places < 1), 1.0, ends))

    def values(self, places: Float) -> Float:
        """Part values at places (..., parts), base units."""
        return np.asarray(self.nominal * self.factors(places))

    def named(self, place: Float) -> dict[str, float]:
        """The part values at one place (parts,), by name."""
        return dict(zip(self.names, self.values(place).tolist(), strict=True))

    def only(self, kept: Sequence[int]) -> Box:
        """The box of some of its parts."""
        chosen = list(kept)
        names = tuple(self.names[k] for k in chosen)
        return Box(names, self.nominal[chosen], self.low[chosen], self.high[chosen])


def box_of(
    network: Network, conditions: Conditions | None = None, shares: Mapping[str, float] | None = None
) -> Box:
    """The box of a network's tolerances, widened by what temperature does.

    A part's value is nominal (1 + t) (1 + d): t within its tolerance, d within plus or minus its temperature
    coefficient times the greatest distance of the conditions from 27 degrees Celsius. The coefficient is a
    limit (IEC 60062), and each part drifts on its own.
    shares: how much of a part's tolerance counts, by name, 0 to 1; all of it where a part is not named
    Raises CircuitError where a value could fall to zero or leave the numbers a double holds.
    """
    away = _distance(conditions or Conditions())
    found = []
    for part in _movable(network):
        low, high = limits(part, away, (shares or {}).get(part.name, 1.0))
        if low < 1 or high > 1:
            found.append((part.name, part.value, low, high))
    columns = [np.array([row[k] for row in found], dtype=np.float64) for k in (1, 2, 3)]
    return Box(tuple(row[0] for row in found), columns[0], columns[1], columns[2])


def _movable(network: Network) -> list[Part]:
    return [
        part
        for part in network.parts
        if part.kind not in "VI" and (part.tolerance is not None or part.tempco) and part.value != 0
    ]


def _distance(conditions: Conditions) -> float:
    return max(abs(conditions.low - REFERENCE), abs(conditions.high - REFERENCE))


def drift(part: Part, conditions: Conditions) -> float:
    """How far temperature may take a part's value either way, as a fraction of it."""
    return abs(part.tempco or 0.0) * _distance(conditions)


def limits(part: Part, away: float, share: float = 1.0) -> tuple[float, float]:
    """The least and the greatest value of a part over its nominal one.

    away: the greatest distance from the reference temperature, K; share: of the tolerance, 0 to 1
    """
    moved = abs(part.tempco or 0.0) * away
    down, up = (part.tolerance.low, part.tolerance.high) if part.tolerance is not None else (0.0, 0.0)
    low, high = (1 + share * down) * (1 - moved), (1 + share * up) * (1 + moved)
    if low <= 0 or moved >= 1:
        raise CircuitError(
            f"{part.name}: its tolerance and temperature coefficient let the value fall to zero.",
            remedy=f"{away:g} K away from 27 °C the coefficient alone is {100 * moved:.4g} %: state less.",
        )
    if not math.isfinite(part.value * high) or part.value * low == 0:
        raise CircuitError(
            f"{part.name}: its tolerance takes the value {part.value!r} beyond what double precision holds.",
            remedy="Check the value for a slip of many powers of ten.",
        )
    return low, high


__all__ = ["REFERENCE", "Box", "box_of", "drift", "limits"]
