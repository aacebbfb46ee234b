"""The sentence that tells why a hand value is off, with the impedances that make it so."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from functools import cached_property

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, KINDS, Claim, Network, Part
from ..errors import RcnetError
from ..exact import input_impedance, output_impedance
from ..values import format_quantity
from .idealised import Split, altered, buffered
from .measures import evaluate
from .trials import Change, Gap, Hit

Numbers = npt.NDArray[np.complex128]
Impedance = Callable[[npt.NDArray[np.float64]], Numbers]

_SMALLEST_TOLD = 1e-4  # what is left is told as this where it is less
_LITTLE = 10  # ratios of impedances below this are "only" so much


class Words:
    """The words for one claim."""

    def __init__(
        self,
        network: Network,
        claim: Claim,
        options: Mapping[str, float | str],
        gap: Gap,
        nodes: Sequence[str],
    ) -> None:
        self.network, self.claim, self.options, self.gap = network, claim, options, gap
        self.stage_nodes = list(nodes)  # where stages meet, in the signal's order

    def says(self, hit: Hit) -> str:
        """A clause with the cause, what the measure would be without it, and what that leaves."""
        value = format_quantity(hit.value, self.claim.measure.unit)
        what = hit.words or f"the {self.claim.measure.name.replace('_', ' ')}"
        simplified = _simplified(hit.change) if hit.change is not None else ""
        left, closed = max(self.gap.left(hit.value), _SMALLEST_TOLD), self.gap.closed(hit.value)
        return (
            f"{self._head(hit)}; {simplified}{what} {'would be' if simplified else 'is'} {value}, "
            f"which closes {100 * closed:.3g} % of the gap, and the hand value "
            f"{'would be' if simplified else 'is'} right to {100 * left:.2g} %"
        )

    # ------------------------------------------------------------------ the cause

    def _head(self, hit: Hit) -> str:
        change = hit.change
        if change is None:
            return "the formula gives another measure of this network"
        parts = _listed([self._valued(name) for name in change.parts])
        one = len(change.parts) == 1
        if change.stages:
            head = self._loading(change) + (f", and the formula leaves out {parts}" if parts else "")
        elif change.kind == "load" and one:
            words = "it is {} times the output impedance it is connected to"
            head = self._with_ratio(f"the load {parts} counts", words, self._load_ratio(change))
        elif change.kind == "source" and one and change.shorted:
            words = "the input impedance behind it is {} times its own"
            head = self._with_ratio(
                f"{parts} stands in series with the source", words, self._source_ratio(change)
            )
        else:
            head = f"the formula leaves out {parts}"
        return f"{head}, and the formula gives another measure" if hit.words else head

    def _valued(self, name: str) -> str:
        part = self.network.part(name)
        return f"{name} ({format_quantity(part.value, KINDS[part.kind].unit)})"

    def _with_ratio(self, fact: str, words: str, ratio: float | None) -> str:
        if ratio is None or self._where is None:
            return fact
        told = f"{'only ' if ratio < _LITTLE else ''}{ratio:.3g}"
        return f"{fact}: {self._where[1]} {words.format(told)}"

    def _loading(self, change: Change) -> str:
        ratios = [(ratio, stage) for stage in change.stages if (ratio := self._stage_ratio(stage))]
        several = len(change.stages) > 1
        # Where several stages load each other, the one that is loaded most stands for all.
        ratio, stage = min(ratios, key=lambda pair: pair[0], default=(None, change.stages[0]))
        number = self.stage_nodes.index(stage.node) + 1
        if several:
            words = f"stage {number + 1}'s input impedance is {{}} times stage {number}'s output impedance"
            return self._with_ratio("each stage loads the one before it", words, ratio)
        words = f"its input impedance is {{}} times stage {number}'s output impedance"
        return self._with_ratio(f"stage {number + 1} loads stage {number}", words, ratio)

    # ------------------------------------------------------------------ impedances

    def _stage_ratio(self, stage: Split) -> float | None:
        """The impedance into what follows a split over that of what stands before it, sources dead."""
        parted, fresh = buffered(self.network, [stage])
        own = [part.name for part in parted.parts if part.name not in self.network]
        made, after = altered(parted, opened=own), fresh[stage.node]
        if made is None:
            return None
        loose = made[0]
        return self._over(
            lambda omega: output_impedance(loose, omega, _pair(loose, after, GROUND)),
            lambda omega: output_impedance(parted, omega, _pair(parted, stage.node, GROUND)),
        )

    def _load_ratio(self, change: Change) -> float | None:
        """The load's impedance over the output impedance without it."""
        load, rest = self.network.part(change.opened[0]), change.network
        return self._over(
            lambda omega: _impedance(load, omega),
            lambda omega: output_impedance(rest, omega, _pair(rest, *load.nodes)),
        )

    def _source_ratio(self, change: Change) -> float | None:
        """The input impedance behind a part at the source over the part's own."""
        own = self.network.part(change.shorted[0])
        return self._over(
            lambda omega: input_impedance(change.network, omega), lambda omega: _impedance(own, omega)
        )

    def _over(self, above: Impedance, below: Impedance) -> float | None:
        if self._where is None:
            return None
        omega = np.array([2 * math.pi * self._where[0]])
        try:
            with np.errstate(all="ignore"):
                ratio = abs(complex(above(omega)[0])) / abs(complex(below(omega)[0]))
        except (RcnetError, ArithmeticError, np.linalg.LinAlgError):
            return None
        return ratio if math.isfinite(ratio) and ratio > 0 else None

    @cached_property
    def _where(self) -> tuple[float, str] | None:
        """The frequency, Hz, at which impedances are compared, and what it is called."""
        measure, exact = self.claim.measure.name, abs(self.gap.exact)
        if measure == "cutoff":
            return exact, "at the corner"
        if "at" in self.options:
            at = float(self.options["at"])
            return at, f"at {format_quantity(at, 'Hz')}"
        if measure in ("bandwidth", "centre"):
            try:
                centre = evaluate(self.network, "centre", " ".join(self.claim.of) or None, {})
            except RcnetError:
                return None
            return centre, "in the middle of the band"
        if measure in ("dc_gain", "mean", "dissipation", "peak_voltage"):
            return 0.0, "at dc"
        if self.claim.measure.unit == "s" and exact > 0:
            corner = 1 / (2 * math.pi * exact)
            return corner, f"at {format_quantity(corner, 'Hz')}"
        return None


def _simplified(change: Change) -> str:
    words = []
    if change.nodes:
        where = _listed([repr(node) for node in change.nodes])
        words.append(
            f"with an ideal buffer at node {where}"
            if len(change.nodes) == 1
            else f"with ideal buffers at nodes {where}"
        )
    if change.opened:
        words.append(f"without {_listed(change.opened)}")
    if change.shorted:
        words.append(f"with {_listed(change.shorted)} shorted")
    return f"{' and '.join(words)}, "


def _pair(network: Network, a: str, b: str) -> tuple[int, int]:
    return network.node_index(a), network.node_index(b)


def _impedance(part: Part, omega: npt.NDArray[np.float64]) -> Numbers:
    if part.kind == "R":
        return np.full(len(omega), part.value, dtype=np.complex128)
    ohms = omega * part.value if part.kind == "L" else 1 / (omega * part.value)
    return np.asarray(ohms, dtype=np.complex128)


def _listed(words: Sequence[str]) -> str:
    return "".join(words) if len(words) < 2 else f"{', '.join(words[:-1])} and {words[-1]}"


__all__ = ["Words"]
