"""A suspicion: one change to the circuit, the simulation or the results file, not yet believed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

CauseKind = Literal[
    "part-value",
    "part-missing",
    "part-shorted",
    "part-extra",
    "parts-exchanged",
    "load",
    "source-scale",
    "source-impedance",
    "node",
    "sign",
    "units",
    "temperature",
    "simulator",
    "unexplained",
]

OF_RESULTS: frozenset[CauseKind] = frozenset({"node", "sign", "units"})


@dataclass(frozen=True)
class Suspicion:
    """What might have been done.

    parts: the parts or the source it is about; nodes: between which a part is put; letter: its kind, R or C
    amount: factor of a value or of a source; ohm or farad of what is added; kelvin; siemens or farad of what
        a simulator puts at every node; ohm of a short; None where nothing is to be chosen
    word: which misreading; curves: the names of the curves it befell; () for all
    renamed: curve -> the node whose voltage it is in truth
    """

    kind: CauseKind
    parts: tuple[str, ...] = ()
    nodes: tuple[str, ...] = ()
    letter: str = ""
    amount: float | None = None
    word: str = ""
    curves: tuple[str, ...] = ()
    renamed: tuple[tuple[str, str], ...] = ()

    def with_amount(self, amount: float) -> Suspicion:
        """The same with another amount."""
        return replace(self, amount=amount)

    @property
    def rank(self) -> int:
        """How readily it is believed where the data tell nothing: what chooses least comes first."""
        if self.renamed:
            to_ground = any(node == "0" for _, node in self.renamed)
            taken = {name for name, _ in self.renamed} == {f"v({node})" for _, node in self.renamed}
            return (0 if taken else len(self.renamed) - 1) + 4 * to_ground
        chooses = 0 if self.amount is None or self.kind == "part-shorted" else 2
        late = {"load": 1, "source-impedance": 1, "part-extra": 2, "simulator": 3, "temperature": 1}
        return chooses + late.get(self.kind, 0)
