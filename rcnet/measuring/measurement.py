"""One `.meas` line, and what every kind of them shares."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from ..circuit import Circuit
from ..errors import UndecidedError
from ..netlist import Names

# A name that is still free, made of the one that is wanted.
Namer = Callable[[str], str]


@dataclass(frozen=True)
class Measurement:
    """One `.meas` line with what it should give.

    name: of the result, in lower case; text: what stands behind the name
    exact: in `unit`; seen: what is read off, by a straight line, between the two nearest points of the sweep
    remark: a word on the number
    """

    name: str
    text: str
    exact: float
    unit: str
    seen: float | None = None
    remark: str = ""

    @property
    def expectation(self) -> str:
        """What the line should give, in words."""
        words = [self.remark] if self.remark else []
        if self.seen is not None and not math.isclose(self.seen, self.exact, rel_tol=1e-6):
            words.append(f"{self.seen:.10g} read off between this sweep's points")
        more = f" ({'; '.join(words)})" if words else ""
        return f"expect {self.name} = {self.exact:.10g} {self.unit}{more}"


def node_of(circuit: Circuit, names: Names, of: tuple[str, ...]) -> tuple[str, str]:
    """A claim's node, under its own name and under the netlist's. Raises UndecidedError for a pair."""
    of = of or circuit.output
    if len(of) != 1 or of[0] not in names.nodes:
        raise UndecidedError("ngspice measures the voltage of one node, and no difference of two.")
    return of[0], names.nodes[of[0]]
