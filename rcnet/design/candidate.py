"""A candidate held against the exact engine: its measures, its claims, its score."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from ..circuit import Circuit, Claim, Network, parse_circuit_file
from ..claims import evaluate
from ..claims.tolerance import bounds, options_at
from ..errors import UndecidedError
from .edge import NEPER
from .search import Hits
from .target import Target
from .written import Wanted, circuit_text, part_rows, value_text

Claims = Callable[[list[float], list[float]], Sequence[Wanted]]  # what is claimed of resistors, capacitors
Asked = Mapping[str, tuple[str, Mapping[str, float | str]]]  # key -> measure and its options


@dataclass(frozen=True, slots=True)
class Held:
    """One claim of a candidate: its value, its range over the tolerances, and the margin.

    margin: the factor, less one, by which the worst value could still be worse; negative where it fails
    """

    key: str
    claim: Claim
    exact: float
    low: float
    high: float
    margin: float


@dataclass(frozen=True, slots=True)
class Candidate:
    """Parts that meet a target.

    parts: the chosen ones, as text; measures: of the exact network at nominal values, in the units of the
    measures table; score: the least margin of its claims, as far as it counts; spread: the greatest ratio
    between two resistors, or two capacitors; circuit, text: the complete circuit file
    """

    parts: Mapping[str, str]
    measures: Mapping[str, float]
    held: tuple[Held, ...]
    score: float
    spread: float
    circuit: Circuit
    text: str


def candidates(
    target: Target, title: str, hits: Hits, claims: Claims, asked: Asked, enough: float
) -> tuple[Candidate, ...]:
    """The best of what a search found, each with exact numbers, in order of rank; none that fails."""
    found: list[tuple[tuple[float, ...], Candidate]] = []
    ranked = hits.best(len(hits))
    for r, c, keys in zip(ranked.r.tolist(), ranked.c.tolist(), ranked.keys.tolist(), strict=True):
        made = _candidate(target, title, (r, c), claims(r, c), asked, enough)
        if made.score >= 0:
            found.append(((-round(made.score, 9), *keys[1:]), made))
        if len(found) == target.keep:
            break
    return tuple(made for _, made in sorted(found, key=lambda pair: pair[0]))


def _candidate(
    target: Target,
    title: str,
    values: tuple[list[float], list[float]],
    wanted: Sequence[Wanted],
    asked: Asked,
    enough: float,
) -> Candidate:
    rows = part_rows(target, *values)
    text = circuit_text(target, title, rows, wanted)
    circuit = parse_circuit_file(text, "candidate.rc.toml")
    held = tuple(_held(circuit, want, claim) for want, claim in zip(wanted, circuit.claims, strict=True))
    measures = {each.key: each.exact for each in held}
    measures |= {key: found for key, ask in asked.items() if (found := _measured(circuit, *ask)) is not None}
    least = min(math.log1p(each.margin) if each.margin > -1 else -math.inf for each in held)
    r, c = values
    return Candidate(
        {name: value_text(row[2]) for name, row in rows.items() if name not in ("Rsource", "Rload")},
        measures,
        held,
        round(math.expm1(min(least, enough)), 9),  # what differs by rounding only ties
        max(max(r) / min(r), max(c) / min(c)),
        circuit,
        text,
    )


def _measured(circuit: Circuit, measure: str, options: Mapping[str, float | str]) -> float | None:
    try:
        return evaluate(circuit.network, measure, "out", options_at(measure, options, 27.0))
    except UndecidedError:
        return None


def _held(circuit: Circuit, want: Wanted, claim: Claim) -> Held:
    exact = _value(circuit.network, claim)
    network = circuit.network
    if want.ends is not None:
        values = [_value(_moved(network, upper), claim) for upper in want.ends]
    elif want.against is not None:
        all_others = frozenset(part.name for part in network.parts) - want.against
        values = [_value(_moved(network, upper), claim) for upper in (want.against, all_others)]
    else:
        found = bounds(circuit, claim)
        values = [found.low, found.high]
    low, high = min(values), max(values)
    return Held(want.key, claim, exact, low, high, _margin(claim, low, high))


def _value(network: Network, claim: Claim) -> float:
    return evaluate(network, claim.measure.name, " ".join(claim.of), claim.options)


def _moved(network: Network, upper: frozenset[str]) -> Network:
    """The network with the parts named at the upper end of their tolerance, all others at the lower."""
    values = {}
    for part in network.parts:
        if part.tolerance is not None:
            end = part.tolerance.high if part.name in upper else part.tolerance.low
            values[part.name] = part.value * (1 + end)
    return network.with_values(values)


def _margin(claim: Claim, low: float, high: float) -> float:
    """How far the worse end lies inside the bound, as a factor less one; of decibels, of the amplitude."""
    bound = claim.bound
    if claim.measure.unit == "dB":
        return math.expm1(min(low - bound.low, bound.high - high) / NEPER)
    below = low / bound.low - 1 if bound.low > 0 else math.inf
    above = bound.high / high - 1 if high > 0 else math.inf
    return min(below, above)


__all__ = ["Asked", "Candidate", "Claims", "Held", "candidates"]
