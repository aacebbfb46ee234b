"""The natural modes of a passive network, each to its own digits whatever the spread of values.

With P = A^T (g + a c) A (see `branches`) the modes solve C v = theta P v, theta = 1/(a + rate). P = L D L^T
comes from the star-mesh transformation, which subtracts nothing (see `elimination`), so X = c^(1/2) A L^-T
D^-1/2 has the right columns, and theta are the squares of its singular values. One-sided Jacobi gives those
to high relative accuracy for a matrix scaled from both sides: Z. Drmac, K. Veselic, SIAM J. Matrix Anal.
Appl. 29(4):1322-1362, 2008 (LAPACK's xGEJSV). That every theta is well determined follows from Courant and
Fischer: it is the stationary value of a quotient of two sums of positive terms, each proportional to one
part.

The shapes are then refined with products in twice the working precision, which leaves no trace of one mode in
another however far apart their rates lie: T. Ogita, K. Aishima, Japan J. Indust. Appl. Math. 35:1007-1035,
2018, here for the pencil (C, P).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..errors import UndecidedError
from . import twofold
from .branches import Branches, Float, Indices
from .twofold import Twofold

_SMALL = 48  # nodes up to which an ordinary singular value decomposition is tried first
_CLUSTER = 1e-5  # modes closer than this, relatively, are rotated into place together
_MOST_REFINEMENTS = 12
_SETTLED = 1e-11  # a correction of this size leaves one of about its square


@dataclass(frozen=True)
class PassiveModes:
    """The modes of a network at rest.

    rates: (modes,), 1/s, rising; charges that nothing drains have exactly 0
    shapes: (inner, modes), twofold, with V^T (g + a c) V = 1; stored: (modes,), V^T C V
    """

    rates: Float
    shapes: Twofold
    stored: Float


def passive_modes(branches: Branches, slowest: float) -> PassiveModes:
    """Every mode with a finite or an infinite time constant.

    slowest: 1/s, a lower bound of the rates that are not zero
    """
    count = len(branches.inner)
    floating = branches.groups(branches.conductance)
    instant = branches.groups(branches.capacitance)
    modes = count - len(instant)
    if modes == 0:
        return PassiveModes(np.empty(0), (np.empty((count, 0)), np.empty((count, 0))), np.empty(0))
    shift = slowest if floating else 0.0
    weights = branches.conductance + shift * branches.capacitance
    basis = _inverse_factor(branches, weights)

    def from_(shapes: Float) -> PassiveModes:
        if instant:  # what no capacitor sees is constant over each group that capacitors join
            for rows in instant:
                shapes[rows, modes:] = shapes[rows[0], modes:]
            shapes[:, modes:] *= _tied(branches, instant)[:, None]
        if floating:
            shapes[:, : len(floating)] = whole_groups(branches, floating) / np.sqrt(shift)
        return refined_modes(branches, weights, shapes, len(floating), modes)

    held = branches.capacitance > 0
    across = branches.across(basis)[held] * np.sqrt(branches.capacitance[held])[:, None]
    if count <= _SMALL:
        try:
            return from_(basis @ _quick_right_vectors(across))
        except UndecidedError:
            pass  # the better approximation may do
    return from_(basis @ right_vectors(across))


def refined_modes(
    branches: Branches, weights: Float, shapes: Float, floating: int, modes: int
) -> PassiveModes:
    """The modes in the span of approximate ones.

    weights: (branches,), g + a c; shapes: (inner, columns), the first `floating` the exact motions of what
    floats at dc, those from `modes` on motions that no capacitor sees
    """
    refined = _refined(branches, weights, shapes, floating, modes)
    return _sorted(branches, (refined[0][:, :modes], refined[1][:, :modes]), floating)


def _tied(branches: Branches, instant: list[Indices]) -> Float:
    """One for nodes that move without any capacitor's voltage changing, zero for the others."""
    mask = np.zeros(len(branches.inner))
    for rows in instant:
        mask[rows] = 1.0
    return mask


def whole_groups(branches: Branches, floating: list[Indices]) -> Float:
    """Each floating group moving as a whole, combined so that V^T C V = 1."""
    whole = np.zeros((len(branches.inner), len(floating)))
    for column, rows in enumerate(floating):
        whole[rows, column] = 1.0
    moved = branches.across(whole) * np.sqrt(branches.capacitance)[:, None]
    return np.asarray(np.linalg.solve(np.linalg.cholesky(moved.T @ moved), whole.T).T)


def _sorted(branches: Branches, shapes: Twofold, floating: int) -> PassiveModes:
    """The rates as Rayleigh quotients, slowest first."""
    across = _across(branches, shapes)[0]
    stored = (branches.capacitance[:, None] * across**2).sum(axis=0)
    rates = (branches.conductance[:, None] * across**2).sum(axis=0) / stored
    rates[:floating] = 0.0
    order = np.argsort(rates, kind="stable")
    return PassiveModes(rates[order], (shapes[0][:, order], shapes[1][:, order]), stored[order])


# ---------------------------------------------------------------------- first approximation


def _inverse_factor(branches: Branches, weights: Float) -> Float:
    """L^-T D^-1/2 of A^T w A = L D L^T, pivots taken largest first; nothing is subtracted.

    Rows are in the order of the nodes, columns in the order of the pivots.
    """
    count = len(branches.inner)
    mesh = np.zeros((count + 1, count + 1))  # the last row is all that is fixed
    diagonal = mesh.reshape(-1)[:: count + 2]
    np.add.at(mesh, (branches.ends, branches.ends[:, ::-1]), weights[:, None])
    diagonal[:] = 0.0
    order = np.arange(count)
    shares = np.zeros((count, count))  # row k: what each later pivot contributes to pivot k's voltage
    totals = np.zeros(count)
    for k in range(count):
        sums = mesh[k:count, k:].sum(axis=1)
        best = k + int(np.argmax(sums))
        if best != k:
            for table in (mesh, mesh.T, shares.T):
                table[[k, best]] = table[[best, k]]
            order[[k, best]] = order[[best, k]]
        own, totals[k] = mesh[k, k + 1 :], sums[best - k]
        share = own / totals[k]
        shares[k, k + 1 :] = share[:-1]
        rest = mesh[k + 1 :, k + 1 :]
        rest += own[:, None] * share
        diagonal[k + 1 :] = 0.0
    basis = np.eye(count)
    for k in range(count - 2, -1, -1):
        basis[k, k + 1 :] += shares[k, k + 1 :] @ basis[k + 1 :, k + 1 :]
    placed = np.empty_like(basis)
    placed[order] = basis / np.sqrt(totals)
    return placed


def _quick_right_vectors(matrix: Float) -> Float:
    """As `right_vectors`, at a fraction of its start-up; columns in falling order help a graded matrix."""
    order = np.argsort(-(matrix**2).sum(axis=0), kind="stable")
    right = np.empty((len(order), len(order)))
    right[order] = np.linalg.svd(matrix[:, order], full_matrices=True)[2].T
    return right


def right_vectors(matrix: Float) -> Float:
    """The right singular vectors, largest singular value first."""
    from scipy.linalg.lapack import dgejsv

    rows, columns = matrix.shape
    if rows <= columns:  # a square matrix might be transposed on the way
        matrix = np.vstack([matrix, np.zeros((columns + 1 - rows, columns))])
    # joba = 2: both sides may be badly scaled; jobu = 3: no left vectors; jobr = 0: nothing is cut off as
    # small.
    values, _, right, _, _, info = dgejsv(matrix, joba=2, jobu=3, jobv=0, jobr=0, jobt=1, jobp=1)
    if info != 0 or not np.isfinite(right).all():
        raise UndecidedError("the natural modes do not come out of the singular value iteration.")
    return np.asarray(right[:, np.argsort(-values, kind="stable")])


# ---------------------------------------------------------------------- refinement


def _refined(branches: Branches, weights: Float, start: Float, floating: int, modes: int) -> Twofold:
    """All shapes with V^T P V = 1 and V^T C V diagonal to twice the working precision.

    The first `floating` columns are exact and stay; the columns from `modes` on are those no capacitor sees.
    """
    shapes: Twofold = (start, np.zeros_like(start))
    roots = _roots([branches.capacitance, weights])
    for attempt in range(_MOST_REFINEMENTS):
        across = _across(branches, shapes)
        stored, driven = _forms(roots, across)
        theta = _quotients(stored, driven, modes)
        if attempt < 2 and (turned := _turned(shapes, stored, driven, theta, floating, modes)) is not None:
            shapes = turned
            continue
        correction = _correction(stored, driven, theta)
        correction[:, :floating] = 0.0
        size = float(np.abs(correction).max(initial=0.0))
        if not size < 0.5:
            break
        shapes = twofold.add(shapes, (shapes[0] @ correction, np.zeros_like(start)))
        if size <= _SETTLED:
            return shapes
    raise UndecidedError(
        "the natural modes of the network do not separate in double precision.",
    )


def _across(branches: Branches, shapes: Twofold) -> Twofold:
    padded = [np.vstack([part, np.zeros((1, part.shape[1]))]) for part in shapes]
    a, b = branches.ends.T
    return twofold.subtract((padded[0][a], padded[1][a]), (padded[0][b], padded[1][b]))


def _roots(weights: Sequence[Float]) -> tuple[Indices, Twofold]:
    """The branches of each set of weights that are not zero, and their square roots: (sets, most of any set).

    Where a set has fewer, zeros fill its rows up.
    """
    used = [np.flatnonzero(numbers) for numbers in weights]
    shape = (len(weights), max(len(rows) for rows in used))
    branch, high, low = np.zeros(shape, dtype=np.int64), np.zeros(shape), np.zeros(shape)
    for number, rows in enumerate(used):
        branch[number, : len(rows)] = rows
        high[number, : len(rows)], low[number, : len(rows)] = twofold.square_root(weights[number][rows])
    return branch, (high[..., None], low[..., None])


def _forms(roots: tuple[Indices, Twofold], across: Twofold) -> list[Twofold]:
    """(A V)^T w (A V) for each set of weights w."""
    branch, root = roots
    high, low = twofold.gram(twofold.product((across[0][branch], across[1][branch]), root))
    return list(zip(high, low, strict=True))


def _quotients(stored: Twofold, driven: Twofold, modes: int) -> Twofold:
    """The quotients V^T C V / V^T P V of each column, twofold; exactly zero from column `modes` on."""
    top: Twofold = (np.diag(stored[0]).copy(), np.diag(stored[1]).copy())
    bottom: Twofold = (np.diag(driven[0]), np.diag(driven[1]))
    high = top[0] / bottom[0]
    rest = twofold.subtract(top, twofold.times(bottom, high))
    low = rest[0] / bottom[0]
    high[modes:] = low[modes:] = 0.0
    return high, low


def _correction(stored: Twofold, driven: Twofold, theta: Twofold) -> Float:
    """E such that V (1 + E) is right to second order; modes too close to tell apart are only made
    orthogonal.
    """
    gap = (theta[0] - theta[0][:, None]) + (theta[1] - theta[1][:, None])  # theta_j - theta_i at (i, j)
    with np.errstate(all="ignore"):
        correction = (stored[0] - theta[0] * driven[0]) / gap
    half = -driven[0] / 2
    near = np.abs(gap) <= _CLUSTER * np.maximum(theta[0], theta[0][:, None])
    unclear = ~np.isfinite(correction) | (near & (np.abs(correction) > 1e-3))
    correction = np.where(unclear, half, correction)
    np.fill_diagonal(correction, -((np.diag(driven[0]) - 1.0) + np.diag(driven[1])) / 2)
    return np.asarray(correction)


def _turned(
    shapes: Twofold, stored: Twofold, driven: Twofold, theta: Twofold, floating: int, modes: int
) -> Twofold | None:
    """The shapes with each cluster of close modes turned into its own eigenvectors; None where none
    is close.
    """
    order = floating + np.argsort(-theta[0][floating:modes], kind="stable")
    ordered = theta[0][order]
    cuts = np.flatnonzero(ordered[:-1] - ordered[1:] > _CLUSTER * ordered[:-1]) + 1
    if len(cuts) >= len(order) - 1:
        return None
    high, low = shapes[0].copy(), shapes[1].copy()
    for cluster in np.split(order, cuts):
        if len(cluster) < 2:
            continue
        block = np.ix_(cluster, cluster)
        common = np.full((len(cluster), len(cluster)), theta[0][cluster[0]])
        difference = twofold.subtract(
            (stored[0][block], stored[1][block]), twofold.times((driven[0][block], driven[1][block]), common)
        )[0]
        _, turn = np.linalg.eigh(difference + difference.T)
        total: Twofold = (np.zeros((len(high), len(cluster))), np.zeros((len(high), len(cluster))))
        for k, column in enumerate(cluster):
            part = (
                np.repeat(shapes[0][:, [column]], len(cluster), 1),
                np.repeat(shapes[1][:, [column]], len(cluster), 1),
            )
            total = twofold.add(total, twofold.times(part, np.broadcast_to(turn[k], part[0].shape)))
        high[:, cluster], low[:, cluster] = total
    return high, low
