"""The comparison: exact curves and another solver's, point by point, and a verdict."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from ..circuit import Circuit, TransientRun
from ..curves import Analysis, Curve, Curves
from ..errors import ResultsError, UndecidedError, UnsolvableError
from ..exact import dc_solvable
from ..netlist import Names, as_written, safe_names
from ..values import format_quantity
from .allowance import DENSE_LIMIT
from .granted import NOTHING, Grant
from .judging import judged
from .noise_curves import compared_noise
from .over_time import compared_over_time
from .records import Comparison, CurveComparison, Difference, Held, Span, Uncompared, Verdict
from .steady import Pair, compared_steady
from .targets import TOTALS, UNNAMED, Target, Targets, bare

__all__ = [
    "UNNAMED",
    "Comparison",
    "CurveComparison",
    "Difference",
    "Held",
    "Span",
    "Uncompared",
    "Verdict",
    "compare",
]

MOST_PARTS_EXPLAINED = 5000  # causes of differences in larger networks take minutes to find
MOST_NODES_IN_LARGE = 16  # of a network too large to bound every node, this many are compared
_ORDER: tuple[Analysis, ...] = ("ac", "transient", "noise", "operating point")
_CALLED = {"ac": "ac analysis", "transient": "transient", "noise": "noise analysis"}


def compare(
    circuit: Circuit,
    curves: Curves,
    names: Names | None = None,
    who: str | None = None,
    *,
    may_be_empty: bool = False,
    grant: Grant = NOTHING,
) -> Comparison:
    """Hold results against the exact curves, at the results' own points.

    names: the names used in the netlist the results come from; by default those `write` gives
    who: what the results are called in reports; by default where they come from
    may_be_empty: accept results of which nothing can be compared; they are listed as such
    grant: how far the two may lie apart beyond what is predicted
    Where results differ, but agree per unit of the one source carrying ac (as rcnet writes responses), a
    remark says so. S-parameters of a network analyser are held against the circuit's own between its driving
    source and its output. Where something differs, causes are looked for; not in networks of more than
    MOST_PARTS_EXPLAINED parts. Raises ResultsError where nothing in the results is about this circuit,
    UnsolvableError where the circuit has no solution to compare with.
    """
    if curves.ports is not None:
        found = _compared_at_ports(circuit, curves, curves.ports.reference, who, grant)
    else:
        found = _compared_as_driven(circuit, curves, names, who, may_be_empty, grant)
    found = replace(found, remarks=(*found.remarks, *curves.assumed))
    if found.verdict == "agree" or len(circuit.network) > MOST_PARTS_EXPLAINED:
        return found
    from .explained import explained

    return explained(found)


def _compared_at_ports(
    circuit: Circuit, curves: Curves, reference: Sequence[float], who: str | None, grant: Grant
) -> Comparison:
    """The S-parameters of a file against the circuit's own."""
    from .ports import allowance_at_ports, measured_at_ports

    others = {curve.name: curve for curve in curves}
    compared = tuple(
        judged(
            Target(name=exact.name),
            "ac",
            exact.axis,
            exact.values,
            others[exact.name].values,
            allowance_at_ports(circuit, others[exact.name], reference),
            grant=grant,
        )
        for exact in measured_at_ports(circuit, curves)
    )
    return Comparison(circuit, who or curves.source, compared, (), curves.remarks)


def _compared_as_driven(
    circuit: Circuit,
    curves: Curves,
    names: Names | None,
    who: str | None,
    may_be_empty: bool,
    grant: Grant,
) -> Comparison:
    driven = _compared(circuit, curves, names, who, may_be_empty, grant)
    unit = _unit(circuit)
    differing = {curve.analysis for curve in driven.curves if curve.verdict == "differ"}
    if unit is None or differing != {"ac"}:
        return driven
    name, phasor = unit
    if _compared(circuit, _times(curves, phasor), names, who, may_be_empty, grant).verdict == "differ":
        return driven
    remark = f"with an ac value of 1 for {name}, as results per unit of the source have it, the two agree."
    return replace(driven, remarks=(*driven.remarks, remark))


def _unit(circuit: Circuit) -> tuple[str, complex] | None:
    """The one source carrying ac and its phasor, where that is not simply one."""
    driving = [source for source in circuit.network.sources.values() if source.ac]
    return (driving[0].name, driving[0].phasor) if len(driving) == 1 and driving[0].phasor != 1 else None


def _times(curves: Curves, factor: complex) -> Curves:
    return replace(curves, curves=tuple(_scaled(curve, factor) for curve in curves.of("ac")))


def _scaled(curve: Curve, factor: complex) -> Curve:
    values = np.asarray(curve.values * factor, dtype=np.complex128)
    slack = None if curve.resolution is None else curve.resolution * abs(factor)
    return replace(curve, values=values, resolution=slack)


def _compared(
    circuit: Circuit,
    curves: Curves,
    names: Names | None,
    who: str | None,
    may_be_empty: bool,
    grant: Grant,
) -> Comparison:
    held = as_written(_with_length(circuit, curves))
    chosen, uncompared = _sorted_out(
        curves, Targets(held.network, names or safe_names(held.network), circuit.output)
    )
    known = any(curve.analysis in ("ac", "operating point") for curve in curves)
    if may_be_empty and not chosen and not known:
        return Comparison(circuit, who or curves.source, (), tuple(uncompared), curves.remarks)
    _require_about(held, curves, chosen)
    compared: list[CurveComparison] = []
    for (analysis, _), group in _grouped(chosen).items():
        kept, dropped = _affordable(held, group)
        uncompared += dropped
        try:
            found = _group(held, analysis, kept, curves, grant)
        except (UndecidedError, UnsolvableError) as exc:
            if analysis in ("ac", "operating point"):
                raise
            found = exc.problems[0].message
        if isinstance(found, str):
            uncompared += [Uncompared(curve.name, analysis, found) for curve, _ in kept]
        else:
            compared += found[0]
            uncompared += found[1]
    if not compared and not may_be_empty:
        raise _nothing(uncompared, curves)
    remarks = (*curves.remarks, *_coarse_remarks(compared))
    return Comparison(circuit, who or curves.source, tuple(compared), tuple(uncompared), remarks)


def _nothing(uncompared: Sequence[Uncompared], curves: Curves) -> ResultsError:
    why = next((left.why for left in uncompared if left.why), "")
    return ResultsError(
        f"nothing in the results can be compared: {why}",
        file=curves.source,
        remedy="Give results of an analysis that the circuit has an exact answer to.",
    )


def _with_length(circuit: Circuit, curves: Curves) -> Circuit:
    """The circuit with a transient as long as the results' where it asks for none: edges go by its length."""
    ends = [float(curve.axis[-1]) for curve in curves.of("transient") if len(curve) and curve.axis[-1] > 0]
    if circuit.analyses.transient is not None or not ends:
        return circuit
    run = TransientRun(max(ends), max(ends))
    return replace(circuit, analyses=replace(circuit.analyses, transient=run))


def _grouped(chosen: Sequence[Pair]) -> dict[tuple[Analysis, bytes], list[Pair]]:
    """Curves of one analysis at the same points, together; totals with the spectra they belong to."""
    groups: dict[tuple[Analysis, bytes], list[Pair]] = {}
    for curve, target in chosen:
        single = target.kind in TOTALS
        key: tuple[Analysis, bytes] = ("noise", b"") if single else (curve.analysis, curve.axis.tobytes())
        groups.setdefault(key, []).append((curve, target))
    return groups


def _group(
    circuit: Circuit, analysis: Analysis, group: list[Pair], curves: Curves, grant: Grant
) -> tuple[list[CurveComparison], list[Uncompared]] | str:
    """Curves of one analysis at one set of points and those without an exact one; or why none has one."""
    if analysis == "transient":
        return compared_over_time(circuit, group, grant)
    if analysis == "noise":
        return compared_noise(circuit, group, curves, grant)
    at_zero = analysis == "operating point" or not group[0][0].axis.all()
    if at_zero and not dc_solvable(circuit.network):
        return "the circuit has no one answer at dc: a node has no path to ground, or sources form a loop."
    return compared_steady(circuit.network, analysis, group, grant), []


def _coarse_remarks(compared: Sequence[CurveComparison]) -> list[str]:
    """What the verdict leaves out: where an allowance is so wide that small differences cannot show."""
    remarks = []
    for timed, what in (
        (False, "rounding, or the few digits of the results, may move a value by more than 0.01 dB"),
        (True, "the simulator's own time steps may move a value by more than 0.1 % of the greatest"),
    ):
        some = [curve for curve in compared if (curve.analysis == "transient") == timed]
        wide = [(curve.name, *curve.coarse) for curve in some if curve.coarse is not None]
        if wide:
            names = ", ".join(dict.fromkeys(name for name, _, _ in wide[:4]))
            others = " and others" if len(wide) > 4 else ""
            low, high = min(start for _, start, _ in wide), max(stop for _, _, stop in wide)
            unit = "s" if timed else "Hz"
            between = f"{format_quantity(low, unit)} and {format_quantity(high, unit)}"
            where = f" between {between}" if high else ""
            remarks.append(
                f"{names}{others}: in places{where} {what}, so smaller differences do not count there."
            )
    return remarks


def _sorted_out(curves: Curves, targets: Targets) -> tuple[list[Pair], list[Uncompared]]:
    """Which curves can be compared, with what they are, and which cannot. Raises ResultsError."""
    chosen: list[Pair] = []
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


def _require_about(circuit: Circuit, curves: Curves, chosen: Sequence[Pair]) -> None:
    """Raise ResultsError unless the results are about this circuit and its output."""
    if all(curve.analysis == "other" and bare(curve.name) == curve.name.lower() for curve in curves):
        raise ResultsError(
            "the results hold no analysis that is compared.",
            file=curves.source,
            remedy="Give those of an ac analysis, a transient, a noise analysis or an operating point.",
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
    main = next((each for each in _ORDER if any(curve.analysis == each for curve, _ in chosen)), "noise")
    held = {node for curve, target in chosen if curve.analysis == main for node in target.nodes}
    for node in circuit.output if main != "noise" else ():
        if circuit.network.node_index(node) not in held | {0}:
            raise ResultsError(
                f"the results of the {_CALLED.get(main, main)} hold no voltage of the output {node!r}.",
                file=curves.source,
                remedy=f"Save v({node}) too, or name another output in the circuit.",
            )


def _affordable(circuit: Circuit, group: list[Pair]) -> tuple[list[Pair], list[Uncompared]]:
    """All curves of a network of ordinary size; of a very large one the output and a sample of the others."""
    if circuit.network.arrays().node_count + len(circuit.network.sources) <= DENSE_LIMIT:
        return group, []
    outputs = {circuit.network.node_index(node) for node in circuit.output}
    first = [pair for pair in group if outputs.intersection(pair[1].nodes) and pair[1].kind != "current"]
    rest = [pair for pair in group if not any(pair is other for other in first)]
    step = max(1, math.ceil(len(rest) / MOST_NODES_IN_LARGE))
    kept = [*first, *rest[::step]]
    why = "in a network this large the output and a sample of the other curves are compared."
    left = [curve for number, (curve, _) in enumerate(rest) if number % step]
    return kept, [Uncompared(curve.name, curve.analysis, why) for curve in left]
