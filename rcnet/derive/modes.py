"""Every pole of a network too large for symbols, and its share in the output.

Up to a few hundred nodes these are the modes of the exact room, each with its own digits. Beyond, one
symmetric eigenproblem C v = theta (G + a C) v gives them in seconds; a time constant is then good to about
1e-13 of the longest one, and those of which no six digits are left are not listed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import UndecidedError
from ..exact import modes, natural_rates, span_of
from ..exact.branches import Branches, branches_of
from ..exact.reduction import fixed_potentials

Numbers = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]

FINE_NODES = 250  # inner nodes up to which every pole has its own digits
MOST_NODES = 2000  # beyond, the matrices take too long
_KEPT = 1e-9  # of the longest time constant: shorter ones have fewer than about five digits


@dataclass(frozen=True)
class Natural:
    """The natural frequencies, rad/s, (modes,), and their shares in the output.

    shares: (modes,), what each contributes to the response at rest: residue over pole; None where poles that
    lie together have none
    left_out: how many faster ones are not listed
    """

    poles: Numbers
    shares: Numbers | None
    left_out: int = 0


def natural_frequencies(network: Network) -> Numbers:
    """The natural frequencies, rad/s, (modes,), sources dead. Raises UndecidedError where not all are had."""
    branches = branches_of(network)
    if branches is None or len(branches.inner) <= FINE_NODES:
        return np.asarray(natural_rates(network), dtype=np.complex128)
    _require_moderate(branches)
    rates, _, _, missing = _eigenpairs(network, branches)
    if missing:
        raise UndecidedError(f"{missing} natural frequencies are too fast to be told beside the slowest one.")
    return np.asarray(-rates, dtype=np.complex128)


def natural_modes(network: Network, of: str, pair: tuple[int, int], source: str) -> Natural:
    """All natural frequencies with what each does to an output. Raises UndecidedError for too large ones."""
    branches = branches_of(network)
    if branches is not None and len(branches.inner) > FINE_NODES:
        _require_moderate(branches)
        return _of_large(network, branches, pair, source)
    try:
        found = modes(network, of, source)
    except UndecidedError:
        return Natural(np.asarray(natural_rates(network), dtype=np.complex128), None)
    poles = np.asarray(found.poles, dtype=np.complex128)
    moving = poles != 0
    shares = np.where(moving, found.residues, 0) / np.where(moving, -poles, 1)
    return Natural(poles, np.asarray(shares, dtype=np.complex128))


def _require_moderate(branches: Branches) -> None:
    if len(branches.inner) > MOST_NODES:
        raise UndecidedError(
            f"the network has {len(branches.inner)} inner nodes; poles are listed up to {MOST_NODES}.",
            remedy="Ask for a smaller piece of it.",
        )


def _eigenpairs(network: Network, branches: Branches) -> tuple[Float, Float, Float, int]:
    """Rates, rising, theta and shapes, V^T (G + a C) V = 1, of the modes whose digits can be trusted.

    Last, how many others there are.
    """
    import scipy.linalg

    shift = span_of(network).low
    across = branches.across(np.eye(len(branches.inner)))
    stored = across.T @ (branches.capacitance[:, None] * across)
    conducting = across.T @ (branches.conductance[:, None] * across)
    theta, shapes = scipy.linalg.eigh(stored, conducting + shift * stored)
    kept = theta > _KEPT * theta.max(initial=0.0)
    theta, shapes = theta[kept][::-1], shapes[:, kept][:, ::-1]
    rates = np.maximum(1 / theta - shift, 0.0)
    rates[rates < 1e-9 * shift] = 0.0
    in_all = len(branches.inner) - len(branches.groups(branches.capacitance))
    return rates, theta, shapes, max(in_all - len(rates), 0)


def _of_large(network: Network, branches: Branches, pair: tuple[int, int], source: str) -> Natural:
    rates, theta, shapes, missing = _eigenpairs(network, branches)
    row = np.full(network.arrays().node_count, -1)
    row[branches.inner] = np.arange(len(branches.inner))
    padded = np.vstack([shapes, np.zeros((1, shapes.shape[1]))])
    seen = padded[row[pair[0]]] - padded[row[pair[1]]]
    residues = seen * _driven(network, branches, shapes, rates, row, source) / theta
    shares = np.where(rates > 0, residues / np.where(rates > 0, rates, 1), 0.0)
    return Natural(np.asarray(-rates, dtype=np.complex128), np.asarray(shares, dtype=np.complex128), missing)


def _driven(
    network: Network,
    branches: Branches,
    shapes: Float,
    rates: Float,
    row: npt.NDArray[np.int64],
    source: str,
) -> Float:
    """v_k . (b_G - rate_k b_C + j): how strongly a unit of the source drives each mode."""
    drive = np.zeros(len(network))
    index = network.part_index(source)
    drive[index] = 1.0
    if network.sources[source].kind == "I":
        ends = row[network.arrays().nodes[index, :2]]
        padded = np.vstack([shapes, np.zeros((1, shapes.shape[1]))])
        return np.asarray(padded[ends[1]] - padded[ends[0]])
    level = fixed_potentials(network, drive)[branches.held] * (branches.held >= 0)
    inside = shapes[branches.ends.max(axis=1)] * level[:, None]
    return np.asarray(
        (branches.conductance[:, None] * inside).sum(axis=0)
        - rates * (branches.capacitance[:, None] * inside).sum(axis=0)
    )
