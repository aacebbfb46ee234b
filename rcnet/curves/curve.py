"""A curve: one quantity of one analysis along its axis."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

Analysis = Literal["ac", "transient", "noise", "operating point", "other"]
FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class Curve:
    """One named quantity along frequency or time.

    name: as results files write it, lower case: `v(out)`, `i(v1)`, `onoise_spectrum`
    analysis: which analysis it comes from; `other` for plots rcnet knows of but has no word for
    axis: float64, shape (points,), Hz or seconds, strictly rising; shape (1,) and 0.0 for an operating point
    values: float64 or complex128, shape (points,), in `unit`
    unit: `V`, `A`, `V/sqrt(Hz)`, ... or "" where the file does not say
    resolution: float64, shape (points,): how far a value may lie from what was meant because the file
        writes few digits (same unit as `values`, modulus for complex ones); None for full doubles
    axis_resolution: float64, shape (points,): the same for the axis, Hz or seconds
    """

    name: str
    analysis: Analysis
    axis: FloatArray
    values: FloatArray | ComplexArray
    unit: str = ""
    resolution: FloatArray | None = None
    axis_resolution: FloatArray | None = None

    def __len__(self) -> int:
        return len(self.axis)

    @property
    def is_complex(self) -> bool:
        """True for a phasor along frequency."""
        return bool(np.iscomplexobj(self.values))


@dataclass(frozen=True, slots=True)
class Ports:
    """The ports that scattering parameters are about: the reference resistance of each, ohm."""

    reference: tuple[float, ...]


@dataclass(frozen=True, eq=False)
class Curves:
    """Every curve of one results file, in the file's order.

    source: the file's name, or the word for the solver that made them
    title: what the file calls itself, "" where it says nothing
    remarks: what was passed over while reading, or should make one look twice, one sentence each
    assumed: how the columns of a table were read that does not say it in rcnet's own words, one clause each
    ports: what the curves `s11`, `s21`, ... refer to; None where they are voltages and currents
    """

    source: str
    curves: tuple[Curve, ...]
    title: str = ""
    remarks: tuple[str, ...] = ()
    assumed: tuple[str, ...] = ()
    ports: Ports | None = None

    def __iter__(self) -> Iterator[Curve]:
        return iter(self.curves)

    def __len__(self) -> int:
        return len(self.curves)

    def get(self, name: str, analysis: Analysis | None = None) -> Curve | None:
        """The first curve of that name (case ignored), of that analysis where one is given; else None."""
        wanted = name.lower()
        for curve in self.curves:
            if curve.name.lower() == wanted and analysis in (None, curve.analysis):
                return curve
        return None

    def of(self, analysis: Analysis) -> tuple[Curve, ...]:
        """All curves of one analysis."""
        return tuple(curve for curve in self.curves if curve.analysis == analysis)

    @staticmethod
    def joined(source: str, parts: Iterable[Curves]) -> Curves:
        """Several sets as one, in order."""
        parts = tuple(parts)
        curves = tuple(curve for part in parts for curve in part.curves)
        remarks = tuple(remark for part in parts for remark in part.remarks)
        assumed = tuple(clause for part in parts for clause in part.assumed)
        title = next((part.title for part in parts if part.title), "")
        ports = next((part.ports for part in parts if part.ports is not None), None)
        return Curves(source, curves, title, remarks, assumed, ports)
