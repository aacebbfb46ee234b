"""How far a simulator's noise may lie from the exact one: constants, rounding, its rule for totals."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from ..circuit import Network
from ..exact import BOLTZMANN
from .allowance import DENSE_LIMIT, influence_rounding
from .records import Float

# ngspice 39 has the constant of CODATA 2014, k = 1.38064852e-23 J/K, 3.5e-7 below the exact one of 2019.
CONSTANTS = 2e-7
_LOOSE = 1e-6  # of the density, in a network too large to bound its rounding
_MOST_LOOKS = 64  # frequencies the rounding is bounded at; it is smooth between them
# A gain below 1e-10 counts as 1e-10 where ngspice 39 refers noise to the input.
LEAST_GAIN = 1e-10
_FLAT = 1e-10  # exponents closer to -1 than this give a logarithm


def density_rounding(
    network: Network, frequency: Float, of: tuple[int, int], temperature: float
) -> Callable[[Float], Float]:
    """What rounding may add to a density, as a function of the exact one, (frequencies,), V/sqrt(Hz).

    Each resistor's way to the output is off by the rounding of the transposed solution; what these make add
    up as noise does.
    """
    arrays = network.arrays()
    if arrays.node_count - 1 + len(network.sources) > DENSE_LIMIT:
        return lambda density: _LOOSE * density
    picks = np.unique(np.linspace(0, len(frequency) - 1, min(len(frequency), _MOST_LOOKS)).astype(int))
    bound = influence_rounding(network, 2j * math.pi * frequency[picks], of)
    rows = np.flatnonzero(arrays.kinds == ord("R"))
    a, b = arrays.nodes[rows, 0], arrays.nodes[rows, 1]
    moved = (bound[a] + bound[b]) ** 2 / np.abs(arrays.values[rows])[:, None]
    root = np.sqrt(4 * BOLTZMANN * temperature * moved.sum(axis=0))
    right = np.minimum(np.searchsorted(picks, np.arange(len(frequency))), len(picks) - 1)
    wide = np.maximum(root[right], root[np.maximum(right - 1, 0)])
    return lambda density: np.asarray(2 * wide + 1e-12 * density)


def power_law_area(frequency: Float, density: Float, factor: Float, *, late: bool = False) -> float:
    """The area under density times factor, whose points are joined by powers of frequency.

    late: with the factor of each interval's upper end at both its ends, as ngspice 39 refers noise to the
    input
    """
    a, b = frequency[:-1], frequency[1:]
    low, high = density[:-1] * factor[1 if late else 0 : None if late else -1], density[1:] * factor[1:]
    wide = np.log(np.where(a > 0, b / np.where(a > 0, a, 1.0), 1.0))
    with np.errstate(all="ignore"):
        power = np.log(high / low) / wide + 1
        even = np.abs(power) < _FLAT
        curved = (high * b - low * a) / np.where(even, 1.0, power)
        straight = (low + high) / 2 * (b - a)
        area = np.where(even, low * a * wide, curved)
    usable = (a > 0) & (low > 0) & (high > 0) & np.isfinite(area)
    return float(np.where(usable, area, straight).sum())
