"""The compiled kernel of a large network between fixed potentials: which one, when it pays, what it is given."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from functools import partial

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
    """

    inner: Inner
    is_resistor: npt.NDArray[np.bool_]
    own: Float
    run: Callable[[Sums, Complex, Load, Indices], Complex]
    _sums: Sums | None = field(default=None, repr=False)

    def solve(
        self,
        s: Complex,
        potentials: Complex,
        injected: dict[int, complex],
        given: Numbers | None,
        wanted: Sequence[int],
        values: Float | None = None,
    ) -> Complex:
        """Voltages (wanted, columns, points); wanted nodes may be fixed. See `inner.load` for the arguments."""
        numbers = self.own if values is None else values
        conductance = np.where(self.is_resistor, 1.0 / numbers, 0.0)
        capacitance = np.where(self.is_resistor, 0.0, numbers)
        if values is not None or self._sums is None:
            added = sums(self.inner, conductance, capacitance)
            self._sums = added if values is None else self._sums
        else:
            added = self._sums
        driven = load(self.inner, conductance, capacitance, potentials, injected, given)
        places = self.inner.index[list(wanted)]
        answer = np.empty((len(places), potentials.shape[1], len(s)), dtype=np.complex128)
        answer[places < 0] = potentials[list(wanted)][places < 0][:, :, None]
        answer[places >= 0] = self.run(added, s, driven, places[places >= 0])
        return answer


def pays(inner_nodes: int, inner_parts: int, points: int) -> bool:
    """True if the compiled kernel is worth loading for a network of that size at so many frequencies."""
    if inner_parts > inner_nodes + inner_nodes // 8 and inner_nodes >= _MESH_NODES:
        return True
    return inner_nodes * (_NODE_SECONDS + _POINT_SECONDS * points) >= _PAYS


def samples_pay(steps: int, samples: int, points: int) -> bool:
    """True if the compiled kernel is worth loading for so many samples of a network of `steps` inner nodes."""
    return steps * samples * points >= _SAMPLE_PRODUCTS


def in_range(is_resistor: npt.NDArray[np.bool_], values: Float, s: Numbers) -> bool:
    """True if the kernels hold: no square or product of the admittances leaves a double's range.

    values: (admittances, ...); s: in the first quadrant, or the kernels do not apply
    """
    sizes = np.abs(s)[s != 0]
    if not len(values) or not len(s) or (s.real < 0).any() or (s.imag < 0).any():
        return False
    resistances, capacitances = values[is_resistor], values[~is_resistor]
    ends = [1 / resistances.max(), 1 / resistances.min()] if resistances.size else []
    if capacitances.size and sizes.size:
        ends += [capacitances.min() * sizes.min(), capacitances.max() * sizes.max()]
    return not ends or bool(min(ends) >= _LEAST and max(ends) <= _GREATEST)


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
        return LargeKernel(inner, is_resistor, values, partial(tree_kernel.solve, tree_kernel.plan(inner)))
    from . import ldl_analysis, ldl_kernel

    return LargeKernel(inner, is_resistor, values, partial(ldl_kernel.solve, ldl_analysis.analyse(inner)))
