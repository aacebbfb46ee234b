"""The zeros of a network too large for symbols.

The numerator is a sum over forests that join the source with the output (G. Kirchhoff, Ann. Phys. Chem.
72:497-508, 1847), so it falls apart at every node that all ways from the source to the output pass: what
hangs on such a node gives its own natural frequencies with that node grounded, and each piece between two of
them the zeros of its own small transfer function. Only those pieces need numbers: a generalised eigenproblem
tells candidates, Newton's iteration on the exact response settles which are zeros. Nothing is said unless as
many are found as the response's slopes at both ends ask for.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable

import numpy as np

from ..circuit import Network, Part, Source
from ..errors import RcnetError, UndecidedError
from ..exact import nodal, solver_for, span_of, transfer_function
from ..exact.modes import sampled
from . import polynomials as poly
from .modes import natural_frequencies, natural_modes

Pair = tuple[int, int]

MOST_UNKNOWNS = 160  # of one piece with several ways through it
_SETTLED = 1e-8  # relative step of Newton's iteration at which a zero is one
_FAR = 1e8
_TOO_SMALL = 1e-9  # volts per unit of the source about a zero


def zeros(network: Network, driver: str, of: Pair) -> tuple[list[complex], bool]:
    """The finite zeros, rad/s, as often as they occur, and whether hidden modes are among them.

    A mode that the source does not reach or the output does not see is then a pole and a zero alike. Raises
    UndecidedError where the zeros cannot all be found.
    """
    if all(part.kind in "RCVI" for part in network.parts) and of[1] == 0:
        pieces = _pieces(network, driver, of[0])
        if pieces is not None:
            hanging, through = pieces
            found = [complex(pole) for piece in hanging for pole in natural_frequencies(piece)]
            return found + [zero for piece in through for zero in _of_step(piece)], True
    return _of_piece(network, driver, of, hidden=False), False


# ---------------------------------------------------------------------- falling apart


def _pieces(network: Network, driver: str, output: int) -> tuple[list[Network], list[Network]] | None:
    """What hangs on the way, its foot grounded, and what the way leads through, driven at one end.

    None where a source floats between two nodes.
    """
    import networkx

    label = _grounded(network, driver)
    if label is None:
        return None
    parts = [part for part in network.parts if part.kind in "RC"]
    ends = [tuple(label[network.node_index(node)] for node in part.nodes) for part in parts]
    graph = networkx.Graph((a, b) for a, b in ends if a and b and a != b)
    source = network.part(driver)
    entry = max(label[network.node_index(node)] for node in source.nodes)
    output = label[output]
    if output not in graph or entry not in graph or not networkx.has_path(graph, entry, output):
        return None
    way = _way(graph, entry, output)
    known = list(zip(parts, ends, strict=True))
    hanging, through = _around(graph, way)
    hung = [_cut(known, nodes, {foot: 0}) for foot, nodes in hanging]
    steps = enumerate(itertools.pairwise(way))
    return hung, [_cut(known, through[k], {a: 1, b: 2}, driven=True) for k, (a, b) in steps]


def _grounded(network: Network, driver: str) -> list[int] | None:
    """For each node itself, or 0 where a dead source holds it; None for a source between two other nodes."""
    label = list(range(len(network.nodes)))
    for part in network.parts:
        if part.kind not in "VI":
            continue
        ends = [network.node_index(node) for node in part.nodes]
        if part.kind == "V" and part.name != driver:
            if 0 not in ends:
                return None
            label[max(ends)] = 0
        if part.name == driver and (0 not in ends or ends[0] == ends[1]):
            return None
    return label


def _way(graph: object, entry: int, output: int) -> list[int]:
    """The nodes that every way from entry to output passes, in order."""
    import networkx

    assert isinstance(graph, networkx.Graph)
    path = networkx.shortest_path(graph, entry, output)
    block = {}
    for number, edges in enumerate(networkx.biconnected_component_edges(graph)):
        block.update({frozenset(edge): number for edge in edges})
    along = [block[frozenset(edge)] for edge in itertools.pairwise(path)]
    turns = [path[k] for k in range(1, len(path) - 1) if along[k - 1] != along[k]]
    return [entry, *turns, output] if entry != output else [entry]


def _around(graph: object, way: list[int]) -> tuple[list[tuple[int, set[int]]], list[set[int]]]:
    """What hangs on each node of the way, and what lies between each two of them, as sets of nodes."""
    import networkx

    assert isinstance(graph, networkx.Graph)
    place = {node: k for k, node in enumerate(way)}
    rest = graph.copy()
    rest.remove_nodes_from(way)
    hanging: list[tuple[int, set[int]]] = []
    through: list[set[int]] = [set() for _ in way[1:]]
    for nodes in networkx.connected_components(rest):
        touched = {other for node in nodes for other in graph[node] if other in place}
        if len(touched) < 2:  # none at all: joined with the rest through ground only
            hanging.append((touched.pop() if touched else 0, nodes))
        else:
            through[min(place[node] for node in touched)] |= nodes
    return hanging, through


def _cut(
    parts: Iterable[tuple[Part, tuple[int, ...]]],
    nodes: set[int],
    renamed: dict[int, int],
    *,
    driven: bool = False,
) -> Network:
    """The parts that touch `nodes`, those of `renamed` under another name; with a source of 1 V at node 1."""
    piece = Network()
    if driven:
        piece.add_source(Source("V", ("1", "0"), ac=1.0))
    for part, (a, b) in parts:
        inside = a in nodes or b in nodes or (driven and {a, b} == set(renamed))
        if inside and a != b:
            ends = tuple(str(renamed.get(node, node + 3 if node else 0)) for node in (a, b))
            if ends[0] != ends[1]:
                piece.add_part(Part(part.name, part.kind, ends, part.value))
    if driven:
        # What loads the far end moves the poles only; a load like the parts keeps all numbers of one size.
        sizes = [math.log(part.value) for part in piece.parts if part.kind == "R"]
        piece.add_part(Part("R", "R", ("2", "0"), math.exp(sum(sizes) / len(sizes)) if sizes else 1e3))
    return piece


# ---------------------------------------------------------------------- one piece


def _of_step(piece: Network) -> list[complex]:
    """The zeros of what lies between two nodes of the way."""
    if len(piece.nodes) > 3:  # ground and the two ends
        found = _by_symbols(piece)
        return _of_piece(piece, "V", (piece.node_index("2"), 0), hidden=True) if found is None else found
    along = [part for part in piece.parts if part.nodes in (("1", "2"), ("2", "1"))]
    conductance = sum(1 / part.value for part in along if part.kind == "R")
    capacitance = sum(part.value for part in along if part.kind == "C")
    return [complex(-conductance / capacitance)] if capacitance else []


def _by_symbols(piece: Network) -> list[complex] | None:
    """The zeros of a piece few of whose parts make its transfer function, with its hidden modes."""
    try:
        function = transfer_function(piece, "2")
    except UndecidedError:
        return None
    values = dict(function.values)
    above, below = (poly.numbers(side, values) for side in (function.numerator, function.denominator))
    if not above:
        return None
    zeros = [s for s, count in poly.roots(above) for _ in range(count)]
    # What the two had in common in symbols is no longer in the denominator, but still a natural mode.
    left = [complex(s) for s in natural_frequencies(piece)]
    for pole, count in poly.roots(below):
        for _ in range(count):
            left.remove(min(left, key=lambda s: abs(s - pole)))
    return zeros + left


def _of_piece(network: Network, driver: str, of: Pair, *, hidden: bool) -> list[complex]:
    """The zeros of one transfer function, those at zero too.

    hidden: with the modes that its output does not show, which its numerator has in common with its
    denominator
    """
    eqs = nodal.equations(network)
    if eqs.size > MOST_UNKNOWNS:
        raise UndecidedError(
            f"the signal has more than one way through a piece of {eqs.size} unknowns; zeros are computed"
            f" up to {MOST_UNKNOWNS} in one piece."
        )
    at_origin, below = _slopes(network, driver, of)
    natural = natural_modes(network, _text(network, of), of, driver)
    listed = [complex(pole) for pole in natural.poles]
    silent: list[complex] = []
    if natural.shares is not None:
        size = np.abs(natural.shares)
        least = 1e-12 * size.max(initial=0.0)
        silent = [s for s, own in zip(listed, size.tolist(), strict=True) if own <= least]
    settled: list[complex] = []
    for candidate in _candidates(network, eqs, driver, of):
        zero = _newton(network, driver, of, candidate)
        if zero is not None and not _among(zero, settled) and not _among(zero, silent):
            settled.append(zero)
    wanted = len(listed) + natural.left_out - len(silent) + below - at_origin
    if len(settled) != wanted:
        raise UndecidedError(
            f"of {wanted} zeros of a piece of the network {len(settled)} are found with certainty."
        )
    return [0j] * at_origin + settled + (silent if hidden else [])


def _among(zero: complex, others: list[complex]) -> bool:
    return any(abs(zero - other) <= 1e-6 * abs(zero) for other in others)


def _text(network: Network, of: Pair) -> str:
    names = network.nodes
    return names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"


def _slopes(network: Network, driver: str, of: Pair) -> tuple[int, int]:
    """The power of s that the response follows at the lowest frequencies, and at the highest."""
    span = span_of(network)
    high = span.high * 100
    points = np.array([span.far_below, span.far_below / _FAR, high, high * 10], dtype=np.complex128)
    values = np.abs(sampled(network, [of], [driver], points)[0, 0])
    if (values == 0).any():
        raise UndecidedError("far out the response is smaller than a double can hold.")
    low = round(math.log(values[0] / values[1]) / math.log(_FAR))
    return low, round(math.log(values[3] / values[2]) / math.log(10))


def _candidates(network: Network, eqs: nodal.Equations, driver: str, of: Pair) -> list[complex]:
    """Where (A0 + s A1) x = b u with a silent output has a solution."""
    import scipy.linalg

    drive = np.zeros(len(network), dtype=np.complex128)
    drive[network.part_index(driver)] = 1.0
    size, scale = eqs.size, span_of(network).middle
    constant, slope = np.zeros((size + 1, size + 1)), np.zeros((size + 1, size + 1))
    constant[:size, :size], slope[:size, :size] = eqs.dense(eqs.constant), eqs.dense(eqs.slope) * scale
    constant[:size, size] = -nodal.right_hand_side(network, eqs, drive, None, 1)[:, 0].real
    for node, sign in zip(of, (1.0, -1.0), strict=True):
        if node:
            constant[size, node - 1] = sign
    for axis in (1, 0):
        largest = np.maximum(np.abs(constant).max(axis=axis), np.abs(slope).max(axis=axis))
        by = 1 / np.where(largest > 0, largest, 1.0)
        by = by[:, None] if axis == 1 else by
        constant, slope = constant * by, slope * by
    with np.errstate(all="ignore"):
        found = [scipy.linalg.eigvals(constant, -slope) * scale]
        # Zeros far from the middle keep their digits near a shift of their own size.
        span = span_of(network)
        decades = math.log10(span.high / span.low)
        for shift in np.geomspace(span.low, span.high, max(2, math.ceil(decades / 2))) / scale:
            try:
                inverse = np.linalg.eigvals(np.linalg.solve(constant + shift * slope, slope))
            except np.linalg.LinAlgError:
                continue
            found.append((shift - 1 / inverse) * scale)
    return [complex(value) for value in np.concatenate(found) if np.isfinite(value)]


def _newton(network: Network, driver: str, of: Pair, start: complex) -> complex | None:
    """The zero of the exact response next to a candidate; None where there is none."""
    here = start
    # Pivoting leaves rounding of the greatest voltage in the smallest ones; their zeros would be its.
    least = 0.0 if solver_for(network).eliminates else 2e-5 * _TOO_SMALL
    for _ in range(40):
        if not 0 < abs(here) < math.inf:
            return None
        points = here * np.array([1, 1 + 1e-5, 1 - 1e-5])
        try:
            value, ahead, behind = sampled(network, [of], [driver], points)[0, 0].tolist()
        except RcnetError:
            return None
        if ahead == behind or abs(ahead - behind) < least:
            return None
        if value == 0:
            return here
        step = value / (ahead - behind) * 2e-5 * here
        here -= step
        if abs(here - start) > 0.1 * abs(start):
            return None  # it ran away: where the response has no zero it falls everywhere alike
        if abs(step) < _SETTLED * abs(here):
            return complex(here.real, 0.0) if abs(here.imag) < 1e-9 * abs(here) else here
    return None
