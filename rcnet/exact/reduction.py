"""A small model of a large passive network with the same behaviour at its outputs.

Congruence with the solutions at many real frequencies keeps the network passive and its poles real (A.
Odabasioglu, M. Celik, L. Pileggi, IEEE Trans. CAD 17(8):645-654, 1998); the frequencies lie evenly over the
logarithm of the whole span, where rational Krylov spaces converge geometrically for symmetric pencils (V.
Druskin, L. Knizhnerman, M. Zaslavsky, SIAM J. Sci. Comput. 31(5):3760-3780, 2009).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from .branches import Branches, Float
from .passive_modes import PassiveModes, refined_modes, right_vectors, whole_groups
from .solver import Drive, solver_for
from .span import span_of

Complex = npt.NDArray[np.complex128]

PER_DECADE = 8  # solutions per decade of the span, for each source and for each output
_MOST_NUMBERS = 30_000_000  # of node voltages held at once
_INSTANT = 1e3  # times the span's upper end
_CUT = 1e-12  # a solution of which less than this share is new adds nothing
_ORTHOGONAL = 1e-14
_PASSES = 6


def reduced_modes(
    network: Network, branches: Branches, of: Sequence[tuple[int, int]], drives: Sequence[Complex]
) -> PassiveModes:
    """The modes of a model with the network's own responses to `drives`, each (parts,), at `of`.

    The caller compares them with the exact response. Raises UndecidedError where the network is too large to
    hold the solutions.
    """
    span = span_of(network)
    floating = branches.groups(branches.conductance)
    weights = branches.conductance + (span.low if floating else 0.0) * branches.capacitance
    first = whole_groups(branches, floating) / math.sqrt(span.low) if floating else None
    solutions = _solutions(network, branches, of, drives)
    space = _energy_basis(branches, weights, solutions if first is None else np.hstack([first, solutions]))
    own = space[:, len(floating) :]
    stored = branches.across(own) * np.sqrt(branches.capacitance)[:, None]
    triangle = np.asarray(np.linalg.qr(stored, mode="r"), dtype=np.float64)
    right = right_vectors(triangle)
    theta = (np.abs(triangle @ right) ** 2).sum(axis=0)
    # Far above every mode there is only what moves at once.
    modes = len(floating) + int((theta > 1 / (_INSTANT * span.high)).sum())
    return refined_modes(
        branches, weights, np.hstack([space[:, : len(floating)], own @ right]), len(floating), modes
    )


def _solutions(
    network: Network, branches: Branches, of: Sequence[tuple[int, int]], drives: Sequence[Complex]
) -> Float:
    """The inner voltages at real frequencies, fast ones first, for each drive and for a current into each
    output.
    """
    span, solver = span_of(network), solver_for(network)
    decades = math.log10(span.high / span.low) + 2
    points = span.high * 10 / 10 ** np.linspace(0, decades, math.ceil(decades * PER_DECADE) + 1)
    columns = len(points) * (len(drives) + len(of))
    if columns * len(branches.inner) > _MOST_NUMBERS:
        raise UndecidedError(
            f"the network has {len(branches.inner)} inner nodes, too many for its response over time.",
        )
    nodes = network.arrays().node_count
    found = []
    dead = np.zeros(len(network), dtype=np.complex128)
    wanted: list[tuple[Complex, tuple[int, int] | None]] = [(drive, None) for drive in drives]
    for drive, pair in [*wanted, *((dead, pair) for pair in of)]:
        entering = np.zeros((nodes, 1))
        if pair is not None:
            np.add.at(entering, (list(pair), 0), [1.0, -1.0])
        blocks = []
        for start in range(0, len(points), solver.block()):
            part = points[start : start + solver.block()]
            # The solver works in place on the currents it is given.
            currents = None if pair is None else np.repeat(entering, len(part), axis=1)
            blocks.append(solver.solve(part, Drive(drive, currents)).voltages[branches.inner])
        found.append(np.hstack(blocks).real)
    # Side by side by frequency: the solutions at one frequency are of one kind.
    return np.stack(found, axis=2).reshape(len(branches.inner), -1)


def _energy_basis(branches: Branches, weights: Float, solutions: Float) -> Float:
    """A basis of the solutions whose columns dissipate one watt each and share none, faster modes first.

    Gram-Schmidt, repeated until nothing is left to take away; the currents are taken from the voltages anew
    each time, so that neither drifts from the other.
    """
    weight = np.sqrt(weights)

    def flow_of(shape: Float) -> Float:
        return np.asarray(branches.across(shape[:, None])[:, 0] * weight)

    forms, flows = np.empty(solutions.T.shape), np.empty((solutions.shape[1], len(weight)))
    count = 0
    for solution in solutions.T:
        shape = solution
        flow = flow_of(shape)
        size = math.sqrt(float(flow @ flow))
        left = 1.0
        for _ in range(_PASSES):
            if size == 0:
                break
            shape, flow = shape / size, flow / size
            share = flows[:count] @ flow
            if np.abs(share).max(initial=0.0) < _ORTHOGONAL:
                break
            shape = shape - share @ forms[:count]
            flow = flow_of(shape)
            size = math.sqrt(float(flow @ flow))
            left *= size
            if left < _CUT:
                break
        if size > 0 and left >= _CUT and np.abs(flows[:count] @ flow).max(initial=0.0) < _ORTHOGONAL:
            forms[count], flows[count] = shape, flow
            count += 1
    return forms[:count].T


def fixed_potentials(network: Network, drive: Float) -> Float:
    """(nodes,): the potentials of the nodes that voltage sources hold, each at its volts in `drive`,
    (parts,).
    """
    stiff = solver_for(network).stiff
    assert stiff is not None
    potential = np.zeros((network.arrays().node_count, 1, 1))
    stiff.fill(potential, drive)
    return np.asarray(potential[:, 0, 0])
