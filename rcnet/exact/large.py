"""The compiled kernel of a large network between fixed potentials: which, and when it pays."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property, partial
from typing import Any

import numpy as np
import numpy.typing as npt

from .inner import Complex, Float, Indices, Inner, Load, Numbers, Sums, inner_network, load, sums

MOST_COLUMNS = 4  # right-hand sides that share a pass; a network with more E sources goes another way
_MESH_NODES = 3000  # from here on the order of a mesh alone costs the uncompiled way a second
# The uncompiled way takes about so many seconds for a node, and for a node and frequency.
_NODE_SECONDS = 4e-5
_POINT_SECONDS = 5e-8
_PAYS = 0.4  # seconds; loading the compiler and what it kept on disk takes about as long
_SAMPLE_PRODUCTS = 10_000_000  # products, of all samples and frequencies, from which on compiling pays
# Squares and products of three admittances stay within what a double holds.
_LEAST, _GREATEST = 1e-75, 1e75


@dataclass
class LargeKernel:
    """The kernel for one network.

    is_resistor: (admittances,); own: (admittances,), the network's values, base units
    prepare: turns sums of admittances into what `run` takes, which gives (wanted, columns, points)
    """

    inner: Inner
    is_resistor: npt.NDArray[np.bool_]
    own: Float
    prepare: Callable[[Sums], Any]
    run: Callable[[Any, Complex, Load, Indices], Complex]

    def solve(
        self,
        s: Complex,
        potentials: Complex,
        injected: dict[int, complex],
        given: Numbers | None,
        wanted: Sequence[int],
        values: Float | None = None,
    ) -> Complex:
        """Voltages (wanted, columns, points); wanted nodes may be fixed. Arguments as for `inner.load`."""
        conductance, capacitance, prepared = self._own if values is None else self._prepared(values)
        driven = load(self.inner, conductance, capacitance, potentials, injected, given)
        places = self.inner.index[list(wanted)]
        answer = np.empty((len(places), potentials.shape[1], len(s)), dtype=np.complex128)
        answer[places < 0] = potentials[list(wanted)][places < 0][:, :, None]
        answer[places >= 0] = self.run(prepared, s, driven, places[places >= 0])
        return answer

    @cached_property
    def _own(self) -> tuple[Float, Float, Any]:
        return self._prepared(self.own)

    def _prepared(self, values: Float) -> tuple[Float, Float, Any]:
        conductance = np.where(self.is_resistor, 1.0 / values, 0.0)
        capacitance = np.where(self.is_resistor, 0.0, values)
        return conductance, capacitance, self.prepare(sums(self.inner, conductance, capacitance))


@dataclass(frozen=True)
class Extent:
    """The least and greatest conductance, siemens, and capacitance, farad; (inf, 0) where there is none."""

    conductance: tuple[float, float]
    capacitance: tuple[float, float]


def extent(is_resistor: npt.NDArray[np.bool_], values: Float) -> Extent:
    """The extent of `values`, (admittances, ...), base units."""
    resistances, capacitances = values[is_resistor], values[~is_resistor]
    none = (math.inf, 0.0)
    return Extent(
        (float(1 / resistances.max()), float(1 / resistances.min())) if resistances.size else none,
        (float(capacitances.min()), float(capacitances.max())) if capacitances.size else none,
    )


def pays(inner_nodes: int, inner_parts: int, points: int) -> bool:
    """True if the compiled kernel is worth loading for a network of that size at so many frequencies."""
    if inner_parts > inner_nodes + inner_nodes // 8 and inner_nodes >= _MESH_NODES:
        return True
    return inner_nodes * (_NODE_SECONDS + _POINT_SECONDS * points) >= _PAYS


def samples_pay(steps: int, samples: int, points: int) -> bool:
    """True if the compiled kernel is worth loading for so many samples of `steps` inner nodes."""
    return steps * samples * points >= _SAMPLE_PRODUCTS


def in_range(values: Extent, s: Numbers) -> bool:
    """True if the kernels hold: no square or product of the admittances leaves a double's range.

    s: in the first quadrant, or the kernels do not apply
    """
    if not len(s) or (s.real < 0).any() or (s.imag < 0).any():
        return False
    sizes = np.abs(s)[s != 0]
    least, greatest = values.conductance
    if sizes.size:
        least = min(least, values.capacitance[0] * float(sizes.min()))
        greatest = max(greatest, values.capacitance[1] * float(sizes.max()))
    return least >= _LEAST and greatest <= _GREATEST


def kernel_for(
    node_count: int, ends: Indices, is_resistor: npt.NDArray[np.bool_], values: Float, fixed: Sequence[int]
) -> LargeKernel | None:
    """The kernel for admittances between `ends`, (admittances, 2); None where numba is not installed."""
    try:
        from . import tree_kernel
    except ImportError:
        return None
    inner = inner_network(node_count, ends, fixed)
    if inner.is_forest:
        tree = tree_kernel.plan(inner)
        solved = partial(tree_kernel.solve, tree)
        return LargeKernel(inner, is_resistor, values, partial(tree_kernel.prepare, tree), solved)
    from . import ldl_analysis, ldl_kernel

    fronts = ldl_analysis.analyse(inner)
    solved = partial(ldl_kernel.solve, fronts)
    return LargeKernel(inner, is_resistor, values, partial(ldl_kernel.prepare, fronts), solved)
