"""Measurements in a sweep over frequency."""

from __future__ import annotations

import cmath
import math
from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Claim
from ..claims import half_power, profile
from ..claims.profile import HALF_POWER_DB, Profile, decibels
from ..errors import CircuitError, RcnetError, UndecidedError
from ..exact import driving_sources, node_pair, response
from ..netlist import Names, frequencies
from ..values import format_quantity, write_spice_number
from .measurement import Measurement, Namer, node_of

# ngspice finds nothing at the last point of a sweep, where rounding leaves it short of the end.
_SHORT_OF_THE_END = 1 - 1e-9


class AcMeter:
    """What a sweep can tell, each with its exact value.

    A simulator shows a voltage, and a response is per unit of a lone source: `scale` lies between the two.
    """

    measures = frozenset(["gain", "attenuation", "phase", "cutoff", "bandwidth", "centre"])
    word = "ac"

    def __init__(self, circuit: Circuit, names: Names) -> None:
        sweep = circuit.analyses.ac
        if sweep is None:
            raise CircuitError("there is no ac sweep to measure in.", remedy="Add one under [analysis].")
        self.circuit, self.names = circuit, names
        self.grid = frequencies(sweep)
        driving = driving_sources(circuit.network)
        self.scale = circuit.network.sources[driving[0]].phasor if len(driving) == 1 else 1.0 + 0j
        self.offset = float(decibels(abs(self.scale)))
        self.found: set[tuple[str, str]] = set()  # the cutoffs that a claim is about

    def of_claim(self, claim: Claim, name: Namer) -> Iterator[Measurement]:
        """The lines for one claim. Raises RcnetError with the reason where it cannot be measured."""
        node, written = node_of(self.circuit, self.names, claim.of)
        measure, edge = claim.measure.name, claim.options.get("edge")
        if measure == "cutoff":
            side = str(edge or self._only_edge(node))
            own = name("cutoff" if edge is None else f"cutoff_{edge}")
            yield self._cutoff(node, written, side, own)
            self.found.add((node, side))
        elif measure == "bandwidth":
            yield self._bandwidth(node, written, name("bandwidth"))
        elif measure == "centre":
            yield from self._centre(node, written, name)
        else:
            yield from self._at(node, written, measure, float(claim.options["at"]), name)

    def unasked(self, name: Namer) -> Iterator[Measurement]:
        """The cutoffs and the greatest level at the output, of which there need not be any claim."""
        try:
            node, written = node_of(self.circuit, self.names, self.circuit.output)
            found = [edge for edge in ("lower", "upper") if self._half_power(node, edge) is not None]
        except RcnetError:
            return
        for edge in found:
            if (node, edge) in self.found:
                continue
            try:
                yield self._cutoff(
                    node, written, edge, name(f"cutoff_{edge}" if len(found) > 1 else "cutoff")
                )
            except UndecidedError:
                continue
        level = decibels(self._values(node)).max()
        if math.isfinite(level):
            remark = "the greatest at the sweep's own points"
            yield Measurement(name("peak_level"), f"max vdb({written})", float(level), "dB", None, remark)

    # -- what they are made of

    def _values(self, node: str) -> npt.NDArray[np.complex128]:
        return response(self.circuit.network, self.grid, node) * self.scale

    def _profile(self, node: str) -> Profile:
        return profile(self.circuit.network, node_pair(self.circuit.network, node))

    def _half_power(self, node: str, edge: str) -> float | None:
        return half_power(self._profile(node), edge)

    def _only_edge(self, node: str) -> str:
        found = [edge for edge in ("lower", "upper") if self._half_power(node, edge) is not None]
        if len(found) != 1:
            raise UndecidedError("there is no cutoff." if not found else "there are two cutoffs.")
        return found[0]

    def _threshold(self, node: str) -> str:
        return write_spice_number(self._profile(node).peak + self.offset - HALF_POWER_DB)

    def _crossing(self, node: str, edge: str) -> tuple[float, float, str]:
        """A cutoff, Hz; what a straight line makes of it; how ngspice counts up to it (`rise=1`, `fall=2`).

        Raises UndecidedError where the sweep does not show it.
        """
        where = self._half_power(node, edge)
        if where is None:
            raise UndecidedError(f"there is no {edge} cutoff.")
        self._require_inside(where)
        levels, threshold = decibels(self._values(node)), float(self._threshold(node))
        above = levels > threshold
        after = int(np.searchsorted(self.grid, where))
        for word, turned in (("rise", ~above[:-1] & above[1:]), ("fall", above[:-1] & ~above[1:])):
            if turned[after - 1]:
                share = (threshold - levels[after - 1]) / (levels[after] - levels[after - 1])
                seen = self.grid[after - 1] + share * (self.grid[after] - self.grid[after - 1])
                return where, float(seen), f"{word}={int(turned[:after].sum())}"
        raise UndecidedError("between two points of the sweep the level goes there and back.")

    def _require_inside(self, frequency: float) -> None:
        if not len(self.grid) or not self.grid[0] <= frequency <= self.grid[-1] * (1 + 1e-12):
            raise UndecidedError(f"{format_quantity(frequency, 'Hz', 6)} lies outside the sweep.")

    def _cutoff(self, node: str, written: str, edge: str, name: str) -> Measurement:
        where, seen, count = self._crossing(node, edge)
        return Measurement(name, f"when vdb({written})={self._threshold(node)} {count}", where, "Hz", seen)

    def _bandwidth(self, node: str, written: str, name: str) -> Measurement:
        low, low_seen, first = self._crossing(node, "lower")
        high, high_seen, last = self._crossing(node, "upper")
        level = f"vdb({written}) val={self._threshold(node)}"
        text = f"trig {level} {first} targ {level} {last}"
        return Measurement(name, text, high - low, "Hz", high_seen - low_seen)

    def _centre(self, node: str, written: str, name: Namer) -> Iterator[Measurement]:
        own = name("centre")
        edges = [self._cutoff(node, written, edge, name(f"{own}_{edge}")) for edge in ("lower", "upper")]
        yield from edges
        text = f"param='sqrt({edges[0].name}*{edges[1].name})'"
        exact = math.prod(math.sqrt(edge.exact) for edge in edges)
        seen = math.prod(math.sqrt(edge.seen or edge.exact) for edge in edges)
        yield Measurement(own, text, exact, "Hz", seen)

    def _at(self, node: str, written: str, measure: str, at: float, name: Namer) -> Iterator[Measurement]:
        """Gain, attenuation or phase at one frequency."""
        self._require_inside(at)
        value = complex(response(self.circuit.network, [at], node)[0]) * self.scale
        if value == 0:
            raise UndecidedError("nothing arrives there.")
        where = f"at={write_spice_number(min(at, float(self.grid[-1]) * _SHORT_OF_THE_END))}"
        own = name(measure)
        if measure == "phase":
            self._require_no_jump(node, at)
            seen = float(np.interp(at, self.grid, np.angle(self._values(node))))
            remark = f"{math.degrees(cmath.phase(value)):.9g} deg"
            yield Measurement(own, f"find vp({written}) {where}", cmath.phase(value), "rad", seen, remark)
            return
        level, seen = (
            float(decibels(abs(value))),
            float(np.interp(at, self.grid, decibels(self._values(node)))),
        )
        if measure == "gain":
            remark = f"the source's {self.offset:.9g} dB included" if self.offset else ""
            yield Measurement(own, f"find vdb({written}) {where}", level, "dB", seen, remark)
            return
        peak = self._profile(node).peak + self.offset
        helper = Measurement(name(f"{own}_level"), f"find vdb({written}) {where}", level, "dB", seen)
        yield helper
        text = f"param='{write_spice_number(peak)}-({helper.name})'"
        yield Measurement(own, text, peak - level, "dB", peak - seen)

    def _require_no_jump(self, node: str, at: float) -> None:
        """Between the two points that ngspice interpolates the phase must not wrap around."""
        after = min(max(int(np.searchsorted(self.grid, at)), 1), len(self.grid) - 1)
        angles = np.angle(self._values(node)[after - 1 : after + 1])
        if np.ptp(angles) > math.pi:
            raise UndecidedError("the phase wraps around between two points of the sweep.")
