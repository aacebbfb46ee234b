"""Responses with part values in many digits, for derivatives by differences that leave nothing to doubt."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any

import mna_reference as reference
import mpmath

from rcnet.circuit import Network

STEP = mpmath.mpf(10) ** -14  # central differences of 50-digit numbers are then right to 1e-28 relative


@dataclass(frozen=True)
class Scaled:
    """What the reference solver looks at, with some values multiplied."""

    nodes: tuple[str, ...]
    parts: Iterable[Any]


def voltage(
    network: Network, s: Any, of: str, part: str | None = None, factor: Any = 1, driven: str | None = None
) -> Any:
    """The voltage at a node or pair per unit of one source, one part's value multiplied."""
    parts = [replace(p, value=mpmath.mpf(p.value) * (factor if p.name == part else 1)) for p in network.parts]
    drive = {driven or next(name for name, source in network.sources.items() if source.ac): 1}
    found = reference.solve(Scaled(network.nodes, parts), s, drive)  # type: ignore[arg-type]
    first, *second = of.split()
    return found[first] - (found[second[0]] if second else 0)


def by_value(network: Network, s: Any, of: str, part: str) -> Any:
    """dH/d ln value of one part."""
    with mpmath.workdps(reference.DIGITS):
        up, down = (voltage(network, s, of, part, mpmath.exp(step)) for step in (STEP, -STEP))
        return (up - down) / (2 * STEP)
