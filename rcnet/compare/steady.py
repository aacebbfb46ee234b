"""Responses and operating points held against the exact ones, at the results' own frequencies."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np

from ..circuit import Network
from ..curves import Analysis, Curve
from ..exact import Drive, nodal, require_solvable, solver_for
from .allowance import rounding_allowance
from .granted import NOTHING, Grant
from .judging import judged
from .records import CurveComparison, Float, Numbers
from .targets import Target

Pair = tuple[Curve, Target]


def compared_steady(
    network: Network, analysis: Analysis, group: Sequence[Pair], grant: Grant = NOTHING
) -> list[CurveComparison]:
    """Curves of one ac analysis or operating point, all at the same points."""
    axis = group[0][0].axis
    dc = analysis == "operating point"
    require_solvable(network, dc=dc)
    s: Numbers = np.zeros(1) if dc else 2j * math.pi * axis
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        drive[network.part_index(name)] = source.operating_value if dc else source.phasor
    targets = [target for _, target in group]
    exact = exact_values(network, s, drive, targets)
    rows = unknown_rows(network, targets)
    wanted = sorted({row for own in rows for row in own})
    index = {row: k for k, row in enumerate(wanted)}
    bound = rounding_allowance(network, s, drive, wanted)
    result = []
    for number, (curve, target) in enumerate(group):
        allowed = np.zeros(len(axis))
        for row in rows[number]:
            allowed += bound[index[row]]
        at = None if dc else _elsewhere(network, drive, target)
        if curve.resolution is not None:
            allowed += 2 * curve.resolution
        if curve.axis_resolution is not None and at is not None:
            ends = [np.maximum(axis - curve.axis_resolution, axis * 1e-3), axis + curve.axis_resolution]
            allowed += np.maximum(*(np.abs(at(end) - exact[number]) for end in ends))
        unit = "V" if target.source is None else "A"
        values = (target, analysis, axis, exact[number], curve.values, allowed)
        result.append(judged(*values, unit=unit, grant=grant, exact_at=at))
    return result


def _elsewhere(network: Network, drive: Numbers, target: Target) -> Callable[[Float], Numbers]:
    return lambda frequency: np.asarray(exact_values(network, 2j * math.pi * frequency, drive, [target])[0])


def exact_values(network: Network, s: Numbers, drive: Numbers, targets: Sequence[Target]) -> Numbers:
    """The exact voltages and currents at each s: (targets, points)."""
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


def unknown_rows(network: Network, targets: Sequence[Target]) -> list[list[int]]:
    """Which unknowns of the plain modified nodal equations each target is made of."""
    branch_of = nodal.equations(network, plain=True).branch_of
    return [
        [branch_of[target.source]]
        if target.source is not None
        else [node - 1 for node in target.nodes if node]
        for target in targets
    ]
