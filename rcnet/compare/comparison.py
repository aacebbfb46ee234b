"""The comparison: exact curves and another solver's, point by point, and a verdict."""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ..circuit import Circuit, Network
from ..curves import Analysis, Curve, Curves
from ..errors import ResultsError
from ..exact import Drive, dc_solvable, require_solvable, solver_for
from ..netlist import Names, as_written, safe_names
from ..values import format_quantity
from .allowance import DENSE_LIMIT, Float, Numbers, rounding_allowance
from .fsv import Fsv, fsv

Verdict = Literal["agree", "differ"]
UNNAMED = "response"  # what a trace is called whose file names no node
MOST_NODES_IN_LARGE = 16  # of a network too large to bound every node, this many are compared
COARSE = 1e-3  # an allowance above this share of a value, a hundredth of a decibel, is worth telling


@dataclass(frozen=True, slots=True)
class Difference:
    """How far apart two values are at one place.

    at: Hz, or 0 for an operating point; exact, other: V or A
    db: 20 log10 |other/exact|, deg: phase of other less that of exact; None where a value is zero, and deg
        also where the curve is real
    relative: |other - exact| / |exact|; where the exact value is zero, over the curve's greatest exact value,
        and where all are zero, over the greatest of the other
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
    """One curve compared: its verdict, its worst place, its spans, and how alike the two look (FSV).

    coarse: from where to where, Hz, the allowance is more than a hundredth of a decibel; None for nowhere
    """

    name: str
    analysis: Analysis
    points: int
    verdict: Verdict
    worst: Difference
    spans: tuple[Span, ...]
    fsv: Fsv | None
    coarse: tuple[float, float] | None = None


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
        """`agree` if every curve compared agrees; so too where there was none to compare."""
        return "differ" if any(curve.verdict == "differ" for curve in self.curves) else "agree"


def compare(
    circuit: Circuit,
    curves: Curves,
    names: Names | None = None,
    who: str | None = None,
    *,
    may_be_empty: bool = False,
) -> Comparison:
    """Hold results against the exact curves, at the results' own points.

    names: the names used in the netlist the results come from; by default those `write` gives
    who: what the results are called in reports; by default where they come from
    may_be_empty: accept results of analyses that are not compared yet; they are listed as such
    Where results differ, but agree per unit of the one source carrying ac (as rcnet writes responses), a
    remark says so. Raises ResultsError where nothing in the results is about this circuit, UnsolvableError
    where the circuit has no solution to compare with.
    """
    driven = _compared(circuit, curves, names, who, may_be_empty)
    unit = _unit(circuit)
    if driven.verdict == "agree" or unit is None:
        return driven
    name, phasor = unit
    if _compared(circuit, _times(curves, phasor), names, who, may_be_empty).verdict == "differ":
        return driven
    remark = f"with an ac value of 1 for {name}, as results per unit of the source have it, the two agree."
    return replace(driven, remarks=(*driven.remarks, remark))


def _unit(circuit: Circuit) -> tuple[str, complex] | None:
    """The one source carrying ac and its phasor, where that is not simply one."""
    driving = [source for source in circuit.network.sources.values() if source.ac]
    return (driving[0].name, driving[0].phasor) if len(driving) == 1 and driving[0].phasor != 1 else None


def _times(curves: Curves, factor: complex) -> Curves:
    return replace(curves, curves=tuple(_scaled(curve, factor) for curve in curves))


def _scaled(curve: Curve, factor: complex) -> Curve:
    if curve.analysis != "ac":
        return curve
    values = np.asarray(curve.values * factor, dtype=np.complex128)
    slack = None if curve.resolution is None else curve.resolution * abs(factor)
    return replace(curve, values=values, resolution=slack)


def _compared(
    circuit: Circuit, curves: Curves, names: Names | None, who: str | None, may_be_empty: bool
) -> Comparison:
    held = as_written(circuit)
    targets = _Targets(held.network, names or safe_names(held.network), circuit.output)
    chosen, uncompared = _sorted_out(curves, targets)
    if may_be_empty and all(curve.analysis not in ("ac", "operating point") for curve in curves):
        return Comparison(circuit, who or curves.source, (), tuple(uncompared), curves.remarks)
    _require_about(held, curves, chosen)
    groups: dict[tuple[Analysis, bytes], list[_Pair]] = {}
    for pair in chosen:
        groups.setdefault((pair[0].analysis, pair[0].axis.tobytes()), []).append(pair)
    compared: list[CurveComparison] = []
    for (analysis, _), group in groups.items():
        kept, dropped = _affordable(held, group)
        uncompared += dropped
        if (why := _no_exact_curve(held, analysis, kept)) is not None:
            uncompared += [Uncompared(curve.name, analysis, why) for curve, _ in kept]
        else:
            compared += _group(held.network, analysis, kept)
    if not compared and not may_be_empty:
        raise ResultsError(
            f"nothing in the results can be compared: {uncompared[0].why}",
            file=curves.source,
            remedy="Give the results of an ac analysis or an operating point.",
        )
    remarks = (*curves.remarks, *_coarse_remarks(compared))
    return Comparison(circuit, who or curves.source, tuple(compared), tuple(uncompared), remarks)


def _no_exact_curve(circuit: Circuit, analysis: Analysis, group: Sequence[_Pair]) -> str | None:
    """Why there is no exact curve to hold these against, where that is so."""
    at_zero = analysis == "operating point" or not group[0][0].axis.all()
    if at_zero and not dc_solvable(circuit.network):
        return "the circuit has no one answer at dc: a node has no path to ground, or sources form a loop."
    return None


def _coarse_remarks(compared: Sequence[CurveComparison]) -> list[str]:
    """What the verdict leaves out: where an allowance is so wide that small differences cannot show."""
    wide = [(curve.name, *curve.coarse) for curve in compared if curve.coarse is not None]
    if not wide:
        return []
    names = ", ".join(dict.fromkeys(name for name, _, _ in wide[:4])) + (
        " and others" if len(wide) > 4 else ""
    )
    low, high = min(start for _, start, _ in wide), max(stop for _, _, stop in wide)
    where = f" between {format_quantity(low, 'Hz')} and {format_quantity(high, 'Hz')}" if high else ""
    return [
        f"{names}: in places{where} rounding, or the few digits of the results, may move a value by more "
        "than 0.01 dB, so smaller differences do not count there."
    ]


# ---------------------------------------------------------------------- which curve is what


@dataclass(frozen=True, slots=True)
class _Target:
    """What a curve is: the voltage between two nodes, or the current of a source (its part row)."""

    nodes: tuple[int, int] = (0, 0)
    source: int | None = None
    name: str = ""


_Pair = tuple[Curve, _Target]


class _Targets:
    """Finds what a curve's name means: a node by the netlist's name or the circuit's own, case ignored."""

    def __init__(self, network: Network, names: Names, output: Sequence[str]) -> None:
        self.network = network
        self.output = output
        self.nodes = _lookup(names.nodes)
        self.parts = _lookup(names.parts)

    def of(self, curve: Curve) -> tuple[_Target | None, str]:
        if curve.analysis not in ("ac", "operating point"):
            why = {
                "transient": "transients are not compared yet.",
                "noise": "noise is not compared yet.",
            }.get(curve.analysis, "this kind of plot is not compared.")
            return None, why
        if curve.name == UNNAMED:
            return self.unnamed()
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

    def unnamed(self) -> tuple[_Target | None, str]:
        """A bench instrument's trace names no node; it is the output's."""
        if not self.output:
            return None, "the trace names no node, and the circuit no output."
        ends = [self.network.node_index(node) for node in self.output]
        return _Target((ends[0], ends[1] if len(ends) > 1 else 0), name=f"v({','.join(self.output)})"), ""

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


def _sorted_out(curves: Curves, targets: _Targets) -> tuple[list[_Pair], list[Uncompared]]:
    """Which curves can be compared, with what they are, and which cannot. Raises ResultsError."""
    chosen: list[_Pair] = []
    others: list[Uncompared] = []
    for curve in curves:
        target, why = targets.of(curve)
        if target is None:
            others.append(Uncompared(curve.name, curve.analysis, why))
            continue
        if not (np.isfinite(curve.values).all() and np.isfinite(curve.axis).all()):
            raise ResultsError(
                f"{curve.name} holds a value that is no finite number.",
                file=curves.source,
                remedy="Run the simulation again; its results are not to be believed.",
            )
        if len(curve):
            chosen.append((curve, target))
        else:
            others.append(Uncompared(curve.name, curve.analysis, "it holds no point."))
    return chosen, others


def _require_about(circuit: Circuit, curves: Curves, chosen: Sequence[_Pair]) -> None:
    """Raise ResultsError unless the results are about this circuit and its output."""
    if all(curve.analysis not in ("ac", "operating point") for curve in curves):
        raise ResultsError(
            "the results hold neither an ac analysis nor an operating point.",
            file=curves.source,
            remedy="Those two are compared now; transients and noise come later.",
        )
    if not chosen:
        some = ", ".join(curve.name for curve in curves.curves[:6])
        known = ", ".join(f"v({node})" for node in circuit.network.nodes[1:7])
        raise ResultsError(
            f"the results are not about this circuit: they hold {some}.",
            file=curves.source,
            remedy=f"The circuit's voltages are {known}.",
        )
    # The output at dc says little: where there are ac curves, they must hold it.
    main = "ac" if any(curve.analysis == "ac" for curve, _ in chosen) else "operating point"
    held = {node for curve, target in chosen if curve.analysis == main for node in target.nodes}
    for node in circuit.output:
        if circuit.network.node_index(node) not in held | {0}:
            raise ResultsError(
                f"the results of the {'ac analysis' if main == 'ac' else main} hold no voltage of the output "
                f"{node!r}.",
                file=curves.source,
                remedy=f"Save v({node}) too, or name another output in the circuit.",
            )


def _affordable(circuit: Circuit, group: list[_Pair]) -> tuple[list[_Pair], list[Uncompared]]:
    """All curves of a network of ordinary size; of a very large one the output and a sample of the others."""
    if circuit.network.arrays().node_count + len(circuit.network.sources) <= DENSE_LIMIT:
        return group, []
    outputs = {circuit.network.node_index(node) for node in circuit.output}
    first = [pair for pair in group if outputs.intersection(pair[1].nodes) and pair[1].source is None]
    rest = [pair for pair in group if not any(pair is other for other in first)]
    step = max(1, math.ceil(len(rest) / MOST_NODES_IN_LARGE))
    kept = [*first, *rest[::step]]
    why = "in a network this large the output and a sample of the other curves are compared."
    left = [curve for number, (curve, _) in enumerate(rest) if number % step]
    return kept, [Uncompared(curve.name, curve.analysis, why) for curve in left]


# ---------------------------------------------------------------------- one analysis at one set of points


def _group(network: Network, analysis: Analysis, group: list[_Pair]) -> list[CurveComparison]:
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
    wanted = sorted({row for own in rows for row in own})
    index = {row: k for k, row in enumerate(wanted)}
    bound = rounding_allowance(network, s, drive, wanted)
    result = []
    for number, (curve, target) in enumerate(group):
        allowed = sum((bound[index[row]] for row in rows[number]), start=np.zeros(len(axis)))
        if curve.resolution is not None:
            allowed = allowed + 2 * curve.resolution
        if curve.axis_resolution is not None and not dc:
            moved = _moved(network, axis, curve.axis_resolution, drive, target)
            allowed = allowed + np.abs(moved - exact[number]).max(axis=0)
        result.append(_judged((target.name, analysis), axis, exact[number], curve.values, allowed))
    return result


def _exact(network: Network, s: Numbers, drive: Numbers, targets: Sequence[_Target]) -> Numbers:
    solver = solver_for(network)
    step = solver.block()
    answer = np.empty((len(targets), len(s)), dtype=np.complex128 if np.iscomplexobj(s) else np.float64)
    for start in range(0, len(s), step):
        part = slice(start, start + step)
        solution = solver.solve(
            s[part], Drive(drive), currents_too=any(t.source is not None for t in targets)
        )
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
        [branch_of[target.source]]
        if target.source is not None
        else [node - 1 for node in target.nodes if node]
        for target in targets
    ]


def _moved(network: Network, axis: Float, slack: Float, drive: Numbers, target: _Target) -> Numbers:
    """The exact curve at both ends of what each frequency, written with few digits, may mean: (2, points)."""
    ends = [np.maximum(axis - slack, axis * 1e-3), axis + slack]
    return np.stack([_exact(network, 2j * math.pi * end, drive, [target])[0] for end in ends])


def _judged(
    what: tuple[str, Analysis], axis: Float, exact: Numbers, other: Numbers, allowed: Float
) -> CurveComparison:
    distance = np.abs(other - exact)
    # Written so that an allowance that is no number counts as none.
    beyond = ~(distance <= allowed)
    sizes = np.abs(exact)
    greatest = sizes.max(initial=0.0) or np.abs(other).max(initial=0.0) or 1.0
    scale = np.where(sizes > 0, sizes, greatest)
    with np.errstate(over="ignore"):
        relative = np.minimum(distance / scale, np.finfo(float).max)
    # Rounding beside an exact zero is no share of anything.
    relative[(sizes == 0) & ~beyond] = 0.0

    def difference(k: int) -> Difference:
        return _difference(float(axis[k]), exact[k], other[k], float(relative[k]), float(allowed[k]))

    spans = tuple(
        Span(float(axis[a]), float(axis[b - 1]), difference(a + int(np.argmax(relative[a:b]))))
        for a, b in _runs(beyond)
    )
    worst = int(np.argmax(np.where(beyond, relative, -1.0) if beyond.any() else relative))
    look = _alike(axis, exact, other) if what[1] == "ac" else None
    wide = axis[allowed > COARSE * sizes]
    coarse = (float(wide[0]), float(wide[-1])) if len(wide) and sizes.any() else None
    verdict: Verdict = "differ" if spans else "agree"
    return CurveComparison(*what, len(axis), verdict, difference(worst), spans, look, coarse)


def _difference(at: float, exact: Numbers, other: Numbers, relative: float, allowed: float) -> Difference:
    real = not np.iscomplexobj(exact) and not np.iscomplexobj(other)
    a, b = complex(exact), complex(other)
    db, deg = _apart(a, b) if a and b else (None, None)
    if real:
        return Difference(at, a.real, b.real, db, None, relative, allowed)
    return Difference(at, a, b, db, deg, relative, allowed)


def _apart(a: complex, b: complex) -> tuple[float, float]:
    """How far b lies from a: dB and deg. Close ones are told by their difference, or rounding would show."""
    if abs(b - a) < abs(a) / 2:
        share = (b - a) / a
        db = 10 / math.log(10) * math.log1p(2 * share.real + abs(share) ** 2)
        return db, math.degrees(math.atan2(share.imag, 1 + share.real))
    turned = math.remainder(cmath.phase(b) - cmath.phase(a), 2 * math.pi)
    return 20 * (math.log10(abs(b)) - math.log10(abs(a))), math.degrees(turned)


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
