"""The comparison: exact curves and another solver's, point by point, and a verdict."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..circuit import Circuit, Network
from ..curves import Analysis, Curve, Curves
from ..errors import ResultsError, RcnetError
from ..exact import Drive, dc_solvable, require_solvable, response_and_slope, solver_for
from ..netlist import Names, as_written, safe_names
from .allowance import Float, Numbers, axis_allowance, rounding_allowance
from .fsv import Fsv, fsv

Verdict = Literal["agree", "differ"]
MOST_NODES_IN_LARGE = 16  # of a network too large to bound every node, this many are compared


@dataclass(frozen=True, slots=True)
class Difference:
    """How far apart two values are at one place.

    at: Hz, or 0 for an operating point; exact, other: V or A; db: 20 log10 |other/exact|, deg: the phase between
    them (None where a value is zero, or the curve is real); relative: |other - exact| / |exact|, or over the
    curve's greatest exact value where the exact one is zero
    allowed: how far the other may lie from the exact value here, V or A
    """

    at: float
    exact: complex | float
    other: complex | float
    db: float | None
    deg: float | None
    relative: float
    allowed: float


@dataclass(frozen=True, slots=True)
class Span:
    """An interval over which two curves differ by more than allowed, and its worst place."""

    start: float
    stop: float
    worst: Difference


@dataclass(frozen=True)
class CurveComparison:
    """One curve compared: its verdict, its worst place, its spans, and how alike the two look (FSV)."""

    name: str
    analysis: Analysis
    points: int
    verdict: Verdict
    worst: Difference
    spans: tuple[Span, ...]
    fsv: Fsv | None


@dataclass(frozen=True, slots=True)
class Uncompared:
    """A curve of the results that was not compared, and why."""

    name: str
    analysis: Analysis
    why: str


@dataclass(frozen=True)
class Comparison:
    """Every curve of a second opinion held against the exact one."""

    circuit: Circuit
    second_opinion: str
    curves: tuple[CurveComparison, ...]
    uncompared: tuple[Uncompared, ...] = ()
    remarks: tuple[str, ...] = ()

    @property
    def verdict(self) -> Verdict:
        """`agree` if every curve compared agrees."""
        return "differ" if any(curve.verdict == "differ" for curve in self.curves) else "agree"


def compare(circuit: Circuit, curves: Curves, names: Names | None = None, who: str | None = None) -> Comparison:
    """Hold results against the exact curves, at the results' own points.

    names: the names used in the netlist the results come from; by default those `write` gives
    Raises ResultsError where nothing in the results is about this circuit, UnsolvableError where the circuit
    has no solution to compare with.
    """
    held = as_written(circuit)
    targets = _Targets(held.network, names or safe_names(held.network))
    uncompared: list[Uncompared] = []
    chosen: dict[tuple[Analysis, bytes], list[tuple[Curve, _Target]]] = {}
    for curve in curves:
        target, why = targets.of(curve)
        if target is None:
            uncompared.append(Uncompared(curve.name, curve.analysis, why))
        else:
            chosen.setdefault((curve.analysis, curve.axis.tobytes()), []).append((curve, target))
    _require_about(held, curves, [curve for group in chosen.values() for curve, _ in group])
    compared: list[CurveComparison] = []
    for (analysis, _), group in chosen.items():
        kept, dropped = _affordable(held, group)
        uncompared += dropped
        if analysis == "operating point" and not dc_solvable(held.network):
            why = "the circuit has no operating point: a node has no path to ground for dc."
            uncompared += [Uncompared(curve.name, analysis, why) for curve, _ in kept]
            continue
        compared += _group(held.network, analysis, kept)
    if not compared:
        raise ResultsError(
            f"nothing in the results can be compared: {uncompared[0].why if uncompared else 'they hold no curve'}",
            file=curves.source,
            remedy="Give the results of an ac analysis or an operating point.",
        )
    return Comparison(circuit, who or curves.source, tuple(compared), tuple(uncompared), curves.remarks)


# ---------------------------------------------------------------------- which curve is what


@dataclass(frozen=True, slots=True)
class _Target:
    """What a curve is: the voltage between two nodes, or the current of a source (its part row)."""

    nodes: tuple[int, int] = (0, 0)
    source: int | None = None
    name: str = ""


class _Targets:
    """Finds what a curve's name means: a node by the netlist's name or the circuit's own, case ignored."""

    def __init__(self, network: Network, names: Names) -> None:
        self.network = network
        self.nodes = _lookup(names.nodes)
        self.parts = _lookup(names.parts)

    def of(self, curve: Curve) -> tuple[_Target | None, str]:
        if curve.analysis not in ("ac", "operating point"):
            why = {
                "transient": "transients are not compared yet.",
                "noise": "noise is not compared yet.",
            }.get(curve.analysis, "this kind of plot is not compared.")
            return None, why
        letter, _, inside = curve.name.lower().partition("(")
        words = [word.strip() for word in inside.rstrip(")").split(",")]
        if letter == "i" and len(words) == 1:
            return self.current(words[0])
        if letter != "v" or len(words) > 2:
            return None, "only voltages v(...) and source currents i(v...) are compared."
        found = [0 if word in ("0", "gnd") else self.nodes.get(word) for word in words]
        for word, node in zip(words, found, strict=True):
            if node is None:
                return None, f"the circuit has no node {word!r}."
        first, second = found[0] or 0, (found[1] or 0) if len(found) > 1 else 0
        label = ",".join(self.network.nodes[node or 0] for node in found)
        return _Target((first, second), name=f"v({label})"), ""

    def current(self, name: str) -> tuple[_Target | None, str]:
        row = self.parts.get(name)
        # Only parts that fix a voltage have a current of their own in a simulator's results.
        if row is None or chr(self.network.arrays().kinds[row]) not in "VEHL":
            return None, f"the circuit has no source {name!r} whose current is known."
        return _Target(source=row, name=f"i({self.network.names[row]})"), ""


def _lookup(table: Mapping[str, str]) -> dict[str, int]:
    """Index by lower-case name: the netlist's names first, the circuit's own where they are free."""
    found = {new.lower(): index for index, new in enumerate(table.values())}
    for index, old in enumerate(table):
        found.setdefault(old.lower(), index)
    return found


def _require_about(circuit: Circuit, curves: Curves, chosen: Sequence[Curve]) -> None:
    if not chosen:
        some = ", ".join(curve.name for curve in curves.curves[:6]) or "none"
        known = ", ".join(f"v({node})" for node in circuit.network.nodes[1:7])
        if all(curve.analysis not in ("ac", "operating point") for curve in curves):
            raise ResultsError(
                "the results hold neither an ac analysis nor an operating point.",
                file=curves.source,
                remedy="Those two are compared now; transients and noise come later.",
            )
        raise ResultsError(
            f"the results are not about this circuit: they hold {some}.",
            file=curves.source,
            remedy=f"The circuit's voltages are {known}.",
        )
    names = {name for curve in chosen for name in curve.name.lower()[2:-1].split(",")}
    for node in circuit.output:
        safe = safe_names(circuit.network).nodes[node].lower()
        if node.lower() not in names and safe not in names:
            raise ResultsError(
                f"the results hold no voltage of the output {node!r}.",
                file=curves.source,
                remedy=f"Save v({node}) too, or name another output in the circuit.",
            )


def _affordable(
    circuit: Circuit, group: list[tuple[Curve, _Target]]
) -> tuple[list[tuple[Curve, _Target]], list[Uncompared]]:
    """All curves of a network of ordinary size; of a very large one the output and a sample of the others."""
    from .allowance import DENSE_LIMIT

    if circuit.network.arrays().node_count + len(circuit.network.sources) <= DENSE_LIMIT:
        return group, []
    outputs = {circuit.network.node_index(node) for node in circuit.output}
    first = [pair for pair in group if outputs.intersection(pair[1].nodes) and pair[1].source is None]
    rest = [pair for pair in group if pair not in first]
    step = max(1, math.ceil(len(rest) / MOST_NODES_IN_LARGE))
    kept = [*first, *rest[::step]]
    why = "in a network this large the output and a sample of the other curves are compared."
    return kept, [Uncompared(curve.name, curve.analysis, why) for curve, target in rest if (curve, target) not in kept]


# ---------------------------------------------------------------------- one analysis at one set of points


def _group(network: Network, analysis: Analysis, group: list[tuple[Curve, _Target]]) -> list[CurveComparison]:
    axis = group[0][0].axis
    dc = analysis == "operating point"
    require_solvable(network, dc=dc)
    s: Numbers = np.zeros(1) if dc else 2j * math.pi * axis
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        drive[network.part_index(name)] = source.operating_value if dc else source.phasor
    targets = [target for _, target in group]
    exact = _exact(network, s, drive, targets)
    rows = _unknown_rows(network, targets)
    bound, _ = rounding_allowance(network, s, drive, sorted({row for pair in rows for row in pair}))
    index = {row: k for k, row in enumerate(sorted({row for pair in rows for row in pair}))}
    result = []
    for number, (curve, target) in enumerate(group):
        allowed = sum((bound[index[row]] for row in rows[number]), start=np.zeros(len(axis)))
        if curve.resolution is not None:
            allowed = allowed + 2 * curve.resolution
        if curve.axis_resolution is not None and not dc and target.source is None:
            allowed = allowed + axis_allowance(curve.axis_resolution, _slope(network, axis, target, drive))
        result.append(_judged(target.name, analysis, axis, exact[number], curve.values, allowed))
    return result


def _exact(network: Network, s: Numbers, drive: Numbers, targets: Sequence[_Target]) -> Numbers:
    solver = solver_for(network)
    step = solver.block()
    answer = np.empty((len(targets), len(s)), dtype=np.complex128 if np.iscomplexobj(s) else np.float64)
    for start in range(0, len(s), step):
        part = slice(start, start + step)
        solution = solver.solve(s[part], Drive(drive), currents_too=any(t.source is not None for t in targets))
        for row, target in enumerate(targets):
            if target.source is None:
                value = solution.voltages[target.nodes[0]] - solution.voltages[target.nodes[1]]
            else:
                assert solution.source_currents is not None
                value = solution.source_currents[target.source]
            answer[row, part] = value
    return answer


def _unknown_rows(network: Network, targets: Sequence[_Target]) -> list[list[int]]:
    from ..exact import nodal

    branch_of = nodal.equations(network).branch_of
    return [
        [branch_of[target.source]] if target.source is not None else [node - 1 for node in target.nodes if node]
        for target in targets
    ]


def _slope(network: Network, axis: Float, target: _Target, drive: Numbers) -> Numbers | None:
    try:
        _, slope = response_and_slope(network, 2 * math.pi * axis, target.nodes)
    except RcnetError:
        return None
    driven = [value for value in drive if value]
    return slope * driven[0] if len(driven) == 1 else slope


def _judged(
    name: str, analysis: Analysis, axis: Float, exact: Numbers, other: Numbers, allowed: Float
) -> CurveComparison:
    distance = np.abs(other - exact)
    beyond = distance > allowed
    sizes = np.abs(exact)
    scale = np.where(sizes > 0, sizes, max(float(sizes.max(initial=0.0)), np.finfo(float).tiny))
    relative = distance / scale

    def difference(k: int) -> Difference:
        return _difference(float(axis[k]), exact[k], other[k], float(relative[k]), float(allowed[k]))

    spans = tuple(
        Span(float(axis[a]), float(axis[b - 1]), difference(a + int(np.argmax(relative[a:b]))))
        for a, b in _runs(beyond)
    )
    worst = int(np.argmax(np.where(beyond, relative, -1.0) if beyond.any() else relative))
    look = _alike(axis, exact, other) if analysis == "ac" else None
    return CurveComparison(
        name, analysis, len(axis), "differ" if spans else "agree", difference(worst), spans, look
    )


def _difference(at: float, exact: Numbers, other: Numbers, relative: float, allowed: float) -> Difference:
    if not np.iscomplexobj(exact) and not np.iscomplexobj(other):
        db = 20 * math.log10(abs(other / exact)) if exact and other else None
        return Difference(at, float(exact), float(other), db, None, relative, allowed)
    a, b = complex(exact), complex(other)
    if a == 0 or b == 0:
        return Difference(at, a, b, None, None, relative, allowed)
    db = 20 * (math.log10(abs(b)) - math.log10(abs(a)))
    turned = math.atan2((b * a.conjugate()).imag, (b * a.conjugate()).real) if b * a.conjugate() != 0 else 0.0
    return Difference(at, a, b, db, math.degrees(turned), relative, allowed)


def _runs(flags: np.ndarray[tuple[int], np.dtype[np.bool_]]) -> list[tuple[int, int]]:
    """The runs of True as half-open index pairs."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], flags, [False]]).astype(np.int8)))
    return list(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))


def _alike(axis: Float, exact: Numbers, other: Numbers) -> Fsv | None:
    """FSV of magnitude (dB) and of phase (deg), the worse of the two; None off an even grid or at a zero."""
    if len(axis) < 3 or (np.abs(exact) == 0).any() or (np.abs(other) == 0).any() or axis[0] <= 0:
        return None
    steps = np.diff(np.log(axis))
    if steps.max() > steps.min() * (1 + 1e-6):
        return None
    looks = [
        fsv(20 * np.log10(np.abs(exact)), 20 * np.log10(np.abs(other))),
        fsv(np.degrees(np.unwrap(np.angle(exact))), np.degrees(np.unwrap(np.angle(other)))),
    ]
    found = [look for look in looks if look is not None]
    return max(found, key=lambda look: look.gdm) if found else None
