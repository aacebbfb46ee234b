"""Which way a measure moves with each part, where the shape of the network proves it for all part values.

The argument. Y = G + sC is the nodal matrix; with w the solution for an ampere into the output and the source
dead, an admittance y between nodes a and b gives dH/dy = -(w_a - w_b)(v_a - v_b).

Low-pass ladder: series R, shunts of C and of R, a grounded voltage source at one end, the output at the
other. H = (product of the series conductances)/det Y has no finite zero. At j omega the impedance z between
the ends of a branch of conductance g has Re 1/z >= g and Im z <= 0, from which

    d ln|H|/d ln R_series = Re z/R - 1 <= 0,   d ln|H|/d ln C = omega C Im z <= 0,
    d ln|H|/d ln R_shunt = Re z/R >= 0.

And H = H(0) prod 1/(1 + s tau_k), tau_k >= 0 the eigenvalues of G^-1 C. Every one of them rises with every R
and every C, series or shunt, because x'Cx/x'Gx does (Courant and Fischer). Hence with each part |H/H(0)| and
the phase fall at every frequency, the cutoff falls, and the Elmore delay, the sum of the tau_k, rises. The
step response over its final value is the distribution of a sum of independent exponential times of means
tau_k: each of its quantiles rises, and so does the distance between two (dispersive order, closed under
adding log-concave variables: T. Lewis, J. Thompson, J. Appl. Probab. 18:76-90, 1981).

High-pass ladder: series C, shunts of R and of C. With all impedances times s it is a low-pass ladder in 1/s
with resistors 1/C and capacitors 1/R, so everything above holds with the parts' directions reversed.

Stages one after another, each fed by a grounded voltage-controlled voltage source that senses the end of the
one before and takes no current from it, multiply: logarithms, phases, tau_k and exponential times join.

At dc capacitors carry nothing, and resistors hanging at one end only carry nothing either. If what is left
is a ladder, the output anywhere on it, then v falls from the source outward and w falls away from the output
to both sides, so that |H(0)| falls with a series R before the output, and rises with every shunt R and with
every series R beyond the output.

Any network of R, C and independent sources: the slowest time constant is the greatest x'Cx/x'Gx over the
voltages x that the dead sources allow: it rises with every R and C. The resistance of a port at dc rises with
every R (Rayleigh's monotonicity law; P. Doyle, J. Snell, Random Walks and Electric Networks, 1984, ch. 4).

RC trees (resistors in a tree from a grounded voltage source, capacitors to ground): the Elmore delay is
sum R_ke C_k, R_ke the resistance the ways from the source to k and to the output share (W. C. Elmore, 1948;
J. Rubinstein, P. Penfield, M. Horowitz, IEEE TCAD 2:202-211, 1983): it rises with every part.

None of this holds for a response with a side branch: |H| may rise with the branch's resistor and fall again.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass

from ..circuit import Network
from ..exact import driving_sources, node_pair

Options = Mapping[str, float | str]
Directions = dict[str, int]
Edge = tuple[str, str, int, int]  # name, kind, node, node


@dataclass(frozen=True)
class _Stage:
    """One ladder between a driven node and the node where its output is taken.

    low: True with series resistors, False with series capacitors; root: the driven node
    """

    low: bool
    root: int
    series: tuple[str, ...]
    shunt_resistors: tuple[str, ...]
    shunt_capacitors: tuple[str, ...]

    def magnitude(self) -> Directions:
        """Which way |H| moves at every frequency."""
        along = -1 if self.low else 1
        return {
            **dict.fromkeys(self.series, along),
            **dict.fromkeys(self.shunt_capacitors, -1),
            **dict.fromkeys(self.shunt_resistors, 1),
        }

    def alike(self, direction: int) -> Directions:
        """Every part the same way."""
        return dict.fromkeys((*self.series, *self.shunt_resistors, *self.shunt_capacitors), direction)


def directions(network: Network, measure: str, of: str | None, options: Options) -> Directions | None:
    """+1 or -1 for each part with which a measure rises or falls, whatever the values; None without a proof.

    Parts not named do not move it. For `dc_gain`, `mean` and `phase` the signs hold up to one common sign, so
    that the least and the greatest value lie at the two opposite corners either way.
    """
    rule = _RULES.get(measure)
    return None if rule is None else rule(_Shape(network), of, options)


# ---------------------------------------------------------------------- the shape


class _Shape:
    """What the rules ask of a network."""

    def __init__(self, network: Network) -> None:
        arrays = network.arrays()
        self.network = network
        self.kinds = {chr(code) for code in set(arrays.kinds.tolist())}
        self.edges: list[Edge] = [
            (name, chr(code), a, b)
            for name, code, (a, b) in zip(
                network.names, arrays.kinds.tolist(), arrays.nodes[:, :2].tolist(), strict=True
            )
            if chr(code) in "RC" and a != b
        ]
        self.driven = self._driven()

    def _driven(self) -> dict[int, int | None] | None:
        """Each driven node with the node that controls it, None for the one source; None if not so simple."""
        sources = self.network.sources
        if len(sources) != 1 or not self.kinds <= set("RCVE"):
            return None
        found: dict[int, int | None] = {}
        for part in self.network.parts:
            if part.kind not in "VE":
                continue
            nodes = [self.network.node_index(node) for node in part.nodes]
            ends, control = [n for n in nodes[:2] if n], [n for n in nodes[2:] if n]
            if len(ends) != 1 or ends[0] in found or (part.kind == "E" and len(control) != 1):
                return None
            found[ends[0]] = control[0] if part.kind == "E" else None
        return found

    def output(self, of: str | None) -> int | None:
        """The output's node where it is one node against ground, else None."""
        if of is None:
            return None
        a, b = node_pair(self.network, of)
        return a if b == 0 and a != 0 else None

    def chain(self, of: str | None, piece: Callable[[_Shape, int], _Stage | None]) -> list[_Stage] | None:
        """The stages from the output back to the source; None where one of them has no such shape."""
        node, found, seen = self.output(of), list[_Stage](), set[int]()
        while node is not None and node not in seen and self.driven is not None:
            seen.add(node)
            if node in self.driven:
                control = self.driven[node]
                if control is None:
                    return found
                node = control
                continue
            stage = piece(self, node)
            if stage is None:
                return None
            found.append(stage)
            node = stage.root
        return None

    def around(self, node: int, edges: Iterable[Edge]) -> tuple[set[int], list[Edge]]:
        """The nodes that edges join to a node without passing ground or a driven node, and those edges."""
        fixed = {0, *(self.driven or ())}
        by_node: dict[int, list[Edge]] = {}
        for edge in edges:
            for end in edge[2:]:
                by_node.setdefault(end, []).append(edge)
        nodes, waiting, found = {node}, [node], dict[str, Edge]()
        while waiting:
            for edge in by_node.get(waiting.pop(), ()):
                found[edge[0]] = edge
                for end in edge[2:]:
                    if end not in fixed and end not in nodes:
                        nodes.add(end)
                        waiting.append(end)
        return nodes, list(found.values())


def _path(root: int, nodes: set[int], edges: Iterable[Edge]) -> list[int] | None:
    """The nodes in order from the root, where edges join them in a line that touches nothing else."""
    beside: dict[int, set[int]] = {}
    for _, _, a, b in edges:
        beside.setdefault(a, set()).add(b)
        beside.setdefault(b, set()).add(a)
    line, before = [root], -1
    while following := beside.get(line[-1], set()) - {before}:
        if len(following) > 1 or len(line) > len(nodes):
            return None
        before = line[-1]
        line.extend(following)
    return line if set(line) == nodes | {root} else None


def _ladder(shape: _Shape, output: int) -> _Stage | None:
    """The ladder that ends at the output."""
    nodes, edges = shape.around(output, shape.edges)
    series = [edge for edge in edges if 0 not in edge[2:]]
    roots = {end for edge in series for end in edge[2:]} - nodes
    kinds = {kind for _, kind, _, _ in series}
    if len(roots) != 1 or len(kinds) != 1:
        return None
    (root,) = roots
    line = _path(root, nodes, series)
    if line is None or line[-1] != output:
        return None
    shunts = [edge for edge in edges if 0 in edge[2:]]
    return _Stage(kinds == {"R"}, root, _named(series, "RC"), _named(shunts, "R"), _named(shunts, "C"))


def _named(edges: Iterable[Edge], kinds: str) -> tuple[str, ...]:
    return tuple(name for name, kind, _, _ in edges if kind in kinds)


def _dc_ladder(shape: _Shape, output: int) -> _Stage | None:
    """The ladder of resistors left at dc, as a stage: what lies beyond the output is a shunt."""
    nodes, edges = shape.around(output, [edge for edge in shape.edges if edge[1] == "R"])
    nodes, edges = _without_dead_ends(nodes, edges, output)
    series = [edge for edge in edges if 0 not in edge[2:]]
    roots = {end for edge in series for end in edge[2:]} - nodes
    if len(roots) != 1:
        return None
    (root,) = roots
    line = _path(root, nodes, series)
    if line is None:
        return None
    before = set(line[: line.index(output) + 1])
    inner = [edge for edge in series if set(edge[2:]) <= before]
    shunts = [edge for edge in edges if edge not in inner]
    return _Stage(True, root, _named(inner, "R"), _named(shunts, "R"), ())


def _without_dead_ends(nodes: set[int], edges: list[Edge], output: int) -> tuple[set[int], list[Edge]]:
    nodes = set(nodes)
    while True:
        beside: dict[int, set[int]] = {node: set() for node in nodes}
        for _, _, a, b in edges:
            for end, other in ((a, b), (b, a)):
                if end in beside:
                    beside[end].add(other)
        dead = {node for node, others in beside.items() if len(others) < 2 and node != output}
        if not dead:
            return nodes, edges
        nodes -= dead
        edges = [edge for edge in edges if not dead & set(edge[2:])]


def _is_tree(shape: _Shape, output: int) -> Directions | None:
    """The parts of the RC tree the output lies in, where it is one."""
    nodes, edges = shape.around(output, shape.edges)
    wires = {frozenset(edge[2:]) for edge in edges if edge[1] == "R"}
    touched = {end for wire in wires for end in wire}
    capacitors_to_ground = all(0 in edge[2:] for edge in edges if edge[1] == "C")
    roots = touched - nodes
    if 0 in touched or len(roots) != 1 or not capacitors_to_ground or len(wires) != len(nodes):
        return None
    (root,) = roots
    assert shape.driven is not None
    # As many wires as nodes besides the root, all joined: a tree.
    return dict.fromkeys((edge[0] for edge in edges), 1) if shape.driven[root] is None else None


# ---------------------------------------------------------------------- the rules

Rule = Callable[[_Shape, str | None, Options], Directions | None]


def _joined(parts: Iterable[Directions]) -> Directions:
    return {name: sign for part in parts for name, sign in part.items()}


def _magnitude(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    stages = shape.chain(of, _ladder)
    return None if stages is None else _joined(stage.magnitude() for stage in stages)


def _gain(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    return _at_dc(shape, of, options) if options.get("at") == 0 else _magnitude(shape, of, options)


def _at_dc(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    stages = shape.chain(of, _dc_ladder)
    return None if stages is None else _joined(stage.magnitude() for stage in stages)


def _one_kind(low: int, high: int | None) -> Rule:
    """All parts alike: one sign where every stage is a low-pass, another where every one is a high-pass."""

    def rule(shape: _Shape, of: str | None, options: Options) -> Directions | None:
        stages = shape.chain(of, _ladder)
        if stages is None or len({stage.low for stage in stages}) != 1:
            return None
        sign = low if stages[0].low else high
        return None if sign is None else _joined(stage.alike(sign) for stage in stages)

    return rule


def _phase(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    stages = shape.chain(of, _ladder)
    return None if stages is None else _joined(stage.alike(-1) for stage in stages)


def _elmore(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    found = _one_kind(1, None)(shape, of, options)
    output = shape.output(of)
    if found is not None or output is None or shape.driven is None or output in shape.driven:
        return found
    return _is_tree(shape, output)


def _slowest_mode(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    if not shape.kinds <= set("RCVI"):
        return None
    return dict.fromkeys((edge[0] for edge in shape.edges), 1)


def _port(shape: _Shape, of: str | None, options: Options) -> Directions | None:
    if options.get("at") != 0 or not shape.kinds <= set("RCVI") or len(driving_sources(shape.network)) > 1:
        return None
    return dict.fromkeys((edge[0] for edge in shape.edges if edge[1] == "R"), 1)


_RULES: dict[str, Rule] = {
    "gain": _gain,
    "harmonic": _magnitude,
    "rms": _magnitude,  # the root of a sum of squares of harmonics, each of which moves the same way
    "attenuation": _one_kind(1, -1),
    "cutoff": _one_kind(-1, -1),
    "phase": _phase,
    "dc_gain": _at_dc,
    "mean": _at_dc,
    "elmore_delay": _elmore,
    "delay": _one_kind(1, None),
    "rise_time": _one_kind(1, None),
    "settling_time": _one_kind(1, None),
    "time_constant": _slowest_mode,
    "input_impedance": _port,
    "output_impedance": _port,
}

__all__ = ["directions"]
