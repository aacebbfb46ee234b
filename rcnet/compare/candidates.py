"""Every suspicion worth a trial: the parts and nodes of a network gone through in closed form."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from ..circuit import GROUND, Network
from .changes import LEAST_SHORT, LONGEST_SHORT, SILENT_SHORT
from .evidence import Complex, Evidence, Observed, evidence_of, thinned
from .fitting import Suspects, fitted, joined_suspects
from .narrowing import TAKEN, Neighbours, driven_nodes, most_telling, nodes_of
from .places import Places, between_nodes, in_gains, in_series_with_sources
from .suspicion import CauseKind, Suspicion

MOST_PLACES = 600  # parts and nodes gone through one by one
CENTRES = 5  # best suspicions around which a large network is gone through more closely
MOST_EXCHANGED = 70  # parts of which all pairs are gone through
SMALLEST, LARGEST = 1e-9, 1e18  # ohm
SMALLEST_C, LARGEST_C = 1e-24, 1e3  # farad
SCAN_CURVES = 8
SCAN_POINTS = 24


@dataclass(frozen=True)
class Lead:
    """A suspicion and what it leaves of the weighted squares of the evidence it was looked for in.

    g: the fitted number as `Suspects` has it, None where there is none
    """

    suspicion: Suspicion
    left: float
    g: float | None = None


def for_scanning(evidence: Evidence, share: int = 1) -> Evidence:
    """Few curves and points that stand for all: the most and the least differing, evenly between.

    share: how many times fewer than for a network of ordinary size
    """
    curves: list[Observed] = []
    for block in evidence.blocks:
        ranked = sorted(block.curves, key=_apart, reverse=True)
        most = min(len(ranked), SCAN_CURVES // share)
        picks = np.unique(np.linspace(0, len(ranked) - 1, most).astype(int))
        curves += [thinned(ranked[k], SCAN_POINTS // share) for k in picks]
    return evidence_of(curves)


def _apart(curve: Observed) -> float:
    sizes = np.abs(curve.exact) + np.abs(curve.other) + curve.allowed
    with np.errstate(invalid="ignore"):
        return float(np.nansum(np.abs(curve.other - curve.exact) / np.where(sizes > 0, sizes, 1.0)))


def leads(network: Network, evidence: Evidence, output: Sequence[str]) -> list[Lead]:
    """Every suspicion about the network with its best amount, looked for in (few points of) the evidence.

    Of a large network the parts and nodes around what fits best, found in ever smaller steps.
    """
    if not is_large(network):
        return _gone_through(network, evidence, output, uncoupled(network), list(network.nodes[1:]))
    neighbours = Neighbours(network)
    found: list[Lead] = []
    reach = len(network.nodes)
    starts = driven_nodes(network)
    telling = most_telling(network, for_scanning(evidence, 2))
    nodes = list(dict.fromkeys([*neighbours.spread(starts, reach), *telling]))
    seen: set[int] = set()
    while nodes:
        seen.update(nodes)
        names = [network.nodes[node] for node in nodes]
        parts = neighbours.parts_at(nodes)
        found += _gone_through(network, evidence, output, parts, names, sources_too=not found)
        if reach <= TAKEN:
            break
        reach = max(TAKEN, reach // 8)
        best = sorted(found, key=lambda lead: lead.left)[:CENTRES]
        centres = [node for lead in best for node in _touched(network, lead.suspicion)]
        nodes = [node for node in neighbours.spread(centres, reach) if node not in seen]
    return found


def is_large(network: Network) -> bool:
    """True for a network of which not every part and node is gone through."""
    return len(network) + len(network.nodes) > MOST_PLACES


def _touched(network: Network, suspicion: Suspicion) -> list[int]:
    if suspicion.nodes:
        return [node for name in suspicion.nodes if (node := network.node_index(name))]
    return nodes_of(network, suspicion.parts)


def _gone_through(
    network: Network,
    evidence: Evidence,
    output: Sequence[str],
    parts: list[str],
    nodes: list[str],
    *,
    sources_too: bool = True,
) -> list[Lead]:
    templates = _templates(network, output, parts, nodes)
    if sources_too:
        templates += _at_sources(network)
    suspects = suspects_for(network, evidence, templates)
    g, left = fitted(suspects, evidence)
    found = [
        Lead(suspicion, float(left[k]), float(g[k]))
        for k, template in enumerate(templates)
        if is_sane(network, suspicion := with_g(network, template, float(g[k])))
    ]
    found += _taken_out(templates, suspects, evidence)
    rows = [k for k, template in enumerate(templates) if _passive(template)]
    if len(rows) > MOST_EXCHANGED:
        rows = sorted(rows, key=lambda k: float(left[k]))[:MOST_EXCHANGED]
    return found + _exchanges(network, evidence, [templates[k] for k in rows], suspects[rows])


def _passive(template: Suspicion) -> bool:
    return template.kind == "part-value" and template.letter in "RC"


# ---------------------------------------------------------------------- what may change


def _templates(
    network: Network, output: Sequence[str], parts: list[str], nodes: list[str]
) -> list[Suspicion]:
    found = [Suspicion("part-value", (name,), letter=network.part(name).kind) for name in parts]
    found += [
        Suspicion("part-shorted", (name,), letter="R") for name in parts if network.part(name).kind in "RC"
    ]
    for node in nodes:
        found += [_extra((node, GROUND), output, letter) for letter in "RC"]
    if len(output) == 2 and GROUND not in output:
        found += [Suspicion("load", nodes=(output[0], output[1]), letter=letter) for letter in "RC"]
    return found


def _at_sources(network: Network) -> list[Suspicion]:
    return [
        Suspicion("source-impedance", (name,), letter=letter)
        for name, source in network.sources.items()
        if source.kind == "V" and (source.phasor or source.operating_value)
        for letter in "RC"
    ]


def _extra(nodes: tuple[str, str], output: Sequence[str], letter: str) -> Suspicion:
    kind: CauseKind = "load" if nodes[0] in output else "part-extra"
    return Suspicion(kind, nodes=nodes, letter=letter)


def uncoupled(network: Network) -> list[str]:
    """All parts but sources, couplings and coupled inductors, which change more than one coefficient."""
    coupled = {network.names[row] for k in network.couplings for row in (k, *network.coupled_by(k))}
    return [name for name in network.values if name not in coupled]


# ---------------------------------------------------------------------- suspects in closed form


def suspects_for(network: Network, evidence: Evidence, templates: Sequence[Suspicion]) -> Suspects:
    """The closed forms of suspicions with an amount, in their order."""
    groups: dict[str, list[int]] = {}
    for k, template in enumerate(templates):
        groups.setdefault(_way(template), []).append(k)
    found = []
    for way, members in groups.items():
        some = [templates[k] for k in members]
        if way == "source":
            places = in_series_with_sources(network, evidence, [t.parts[0] for t in some])
        elif way == "gain":
            places = in_gains(network, evidence, [t.parts[0] for t in some])
        else:
            ends = {_ends(network, t): None for t in some}
            index = {pair: k for k, pair in enumerate(ends)}
            every = between_nodes(network, evidence, np.array(list(ends), dtype=np.int64))
            places = every[[index[_ends(network, t)] for t in some]]
        found.append(_suspects(network, evidence, some, places))
    order = np.argsort(np.concatenate([np.array(members) for members in groups.values()]))
    return joined_suspects(found)[order]


def _way(template: Suspicion) -> str:
    if template.kind == "source-impedance":
        return "source"
    return "gain" if template.kind == "part-value" and template.letter not in "RC" else "nodes"


def _ends(network: Network, template: Suspicion) -> tuple[int, int]:
    nodes = network.part(template.parts[0]).nodes[:2] if template.parts else template.nodes
    return network.node_index(nodes[0]), network.node_index(nodes[1])


def _suspects(
    network: Network, evidence: Evidence, templates: Sequence[Suspicion], places: Places
) -> Suspects:
    s = evidence.point_row(lambda block: block.s)
    base = np.stack([_base(network, template, s) for template in templates])
    offset = np.array([1.0 if template.kind == "part-value" else 0.0 for template in templates])
    with np.errstate(all="ignore"):
        natural = 1 / np.abs(places.port * base)
    natural[~np.isfinite(natural) | (natural == 0)] = np.nan
    natural[np.isnan(natural).all(axis=1)] = 1.0
    start = np.where(offset == 1, 1.0, np.nanmedian(natural, axis=1))
    return Suspects(places, base, offset, start)


def _base(network: Network, template: Suspicion, s: Complex) -> Complex:
    """The coefficient for g = 1."""
    one = np.ones(len(s), dtype=np.complex128)
    letter = template.letter
    if template.kind == "part-value":
        value = network.part(template.parts[0]).value
        return {"R": one / value, "C": s * value}.get(letter, one)
    if template.kind == "source-impedance" and letter == "C":
        with np.errstate(all="ignore"):
            return np.asarray(np.where(s != 0, 1 / np.where(s != 0, s, 1), np.inf))
    return one if letter == "R" else s


def with_g(network: Network, template: Suspicion, g: float) -> Suspicion:
    """A suspicion with its amount, from the number that was fitted."""
    if template.kind == "part-value":
        inverse = template.letter in "RL"
    elif template.kind == "source-impedance":
        inverse = template.letter == "C"
    else:
        inverse = template.letter == "R"
    return template.with_amount(1 / g if inverse else g)


def is_sane(network: Network, suspicion: Suspicion) -> bool:
    """False for an amount that no part has, or that another suspicion stands for."""
    amount, letter = suspicion.amount or 0.0, suspicion.letter
    if suspicion.kind == "part-value":
        amount *= network.part(suspicion.parts[0]).value
        if letter not in "RC":
            return True
    low, high = {"R": (SMALLEST, LARGEST), "C": (SMALLEST_C, LARGEST_C)}[letter]
    return low <= amount <= (LONGEST_SHORT if suspicion.kind == "part-shorted" else high)


def _taken_out(templates: Sequence[Suspicion], suspects: Suspects, evidence: Evidence) -> list[Lead]:
    """Parts left out, and parts shorted by what a simulator makes of 0 ohm or by less."""
    rows = [k for k, template in enumerate(templates) if template.kind == "part-value"]
    if not rows:
        return []
    apart = evidence.other - evidence.exact
    with np.errstate(all="ignore"):
        gone = apart - suspects[rows].moved(np.zeros(len(rows)), evidence.at)
        short = apart - suspects[rows].places.moved_to_short(evidence.at)
    found = []
    for number, k in enumerate(rows):
        found.append(Lead(Suspicion("part-missing", templates[k].parts), _squares(evidence, gone[number])))
        if templates[k].letter in "RC":
            left = _squares(evidence, short[number])
            found += [
                Lead(Suspicion("part-shorted", templates[k].parts, letter="R", amount=amount), left)
                for amount in (SILENT_SHORT, LEAST_SHORT)
            ]
    return found


def _squares(evidence: Evidence, missing: Complex) -> float:
    with np.errstate(all="ignore"):
        left = float(np.sum(evidence.weight * np.abs(missing) ** 2))
    return left if np.isfinite(left) else np.inf


# ---------------------------------------------------------------------- parts exchanged


def _exchanges(
    network: Network, evidence: Evidence, templates: Sequence[Suspicion], suspects: Suspects
) -> list[Lead]:
    """All pairs of resistors and capacitors, each in the other's place: a change of rank two."""
    count = len(templates)
    if count < 2:
        return []
    ends = np.array([_ends(network, template) for template in templates])
    cross = _cross(network, evidence, ends)
    y, u, z = suspects.base, suspects.places.across, suspects.places.port
    apart = evidence.other - evidence.exact
    found = []
    for p in range(count - 1):
        q = np.arange(p + 1, count)
        up, down = y[q] - y[p], y[p] - y[q]
        first, second = 1 + up * z[p], 1 + down * z[q]
        # cross[a, b]: what an ampere through place a does across place b
        with np.errstate(all="ignore"):
            det = first * second - up * down * cross[p, q] * cross[q, p]
            here = up * (u[p] * second - cross[q, p] * down * u[q]) / det
            there = down * (u[q] * first - cross[p, q] * up * u[p]) / det
            moved = suspects.places.reach[p] * here[:, evidence.at]
            moved = moved + suspects.places.reach[q] * there[:, evidence.at]
            left = np.sum(evidence.weight * np.abs(apart + moved) ** 2, axis=1)
        for k, other in enumerate(q.tolist()):
            alike = templates[p].letter == templates[other].letter and bool((up[k] == 0).all())
            together = set(ends[p].tolist()) == set(ends[other].tolist())
            if np.isfinite(left[k]) and not alike and not together:
                pair = (templates[p].parts[0], templates[other].parts[0])
                found.append(Lead(Suspicion("parts-exchanged", pair), float(left[k])))
    return found


def _cross(network: Network, evidence: Evidence, ends: npt.NDArray[np.int64]) -> Complex:
    """What an ampere through each place does across each place, (places, places, points)."""
    nodes = network.nodes
    blocks = []
    for block in evidence.blocks:
        zeros = np.zeros(len(block.axis))
        watched = tuple(
            Observed("", block.analysis, block.axis, (nodes[a], nodes[b]), None, zeros, zeros, zeros)
            for a, b in ends.tolist()
        )
        blocks.append(replace(block, curves=watched))
    reach = between_nodes(network, Evidence(tuple(blocks), evidence.points), ends).reach
    found, start = [], 0
    for block in blocks:
        stop = start + len(ends) * len(block.axis)
        found.append(reach[:, start:stop].reshape(len(ends), len(ends), -1))
        start = stop
    return np.concatenate(found, axis=2)
