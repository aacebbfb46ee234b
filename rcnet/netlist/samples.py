"""A circuit many times over in one deck, its part values drawn within their tolerances."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from ..circuit import GROUND, Circuit, Network, Part, Source
from ..errors import CircuitError
from ..values import write_spice_number
from .names import Names
from .round_trip import same_part
from .subcircuit import drives, instance_differences, without
from .writer import part_line, source_line, wrap

Outer = list[dict[str, str]]
NAME = "sample"  # of the subcircuit
DEFAULT_COUNT = 20
MAX_COUNT = 10_000
_SEED = 20_240_501  # any fixed number: the same circuit gives the same samples on every machine
_DIGITS = 7  # of a sampled value: far finer than any tolerance, and short enough to be read


@dataclass(frozen=True)
class Samples:
    """A circuit as a subcircuit with a parameter for each part that has a tolerance, and its instances.

    Instance 0 has the nominal values. definition: `.subckt` to `.ends`; sources: lines of what feeds all;
    instances: one line each; outputs: the nodes of each instance's output; values: part -> value of each
    inside: the network in the subcircuit; outer: for each instance, port -> the node it leads to
    """

    definition: list[str]
    sources: list[str]
    instances: list[str]
    outputs: list[tuple[str, ...]]
    values: list[dict[str, float]]
    inside: Network
    outer: Outer


def sample_values(network: Network, count: int) -> list[dict[str, float]]:
    """`count` sets of values of the parts with a tolerance, even within it, in base units.

    Quasi-random: a Sobol sequence with the scrambling of A. B. Owen (J. Complexity 14:466-489, 1998) and a
    fixed seed, so that few samples cover the tolerances evenly. Raises CircuitError where no part has one.
    """
    from scipy.stats import qmc

    if not 1 <= count <= MAX_COUNT:
        raise CircuitError(f"{count} samples cannot be drawn.", remedy=f"Ask for 1 to {MAX_COUNT}.")
    parts = [part for part in network.parts if part.tolerance is not None and any(_spread(part))]
    if not parts:
        raise CircuitError(
            "no part has a tolerance, so there is nothing to draw from.",
            remedy='Give the parts one in the circuit file, as R1 = "in out 10k 1%".',
        )
    if len(parts) > qmc.Sobol.MAXDIM:
        raise CircuitError(
            f"{len(parts)} parts have a tolerance; at most {qmc.Sobol.MAXDIM} can be drawn together.",
            remedy="Leave out tolerances that hardly matter.",
        )
    # The sequence is even over powers of two; the first `count` points of the next one are nearly so.
    drawn = qmc.Sobol(len(parts), seed=_SEED).random_base2(max(math.ceil(math.log2(count)), 1))[:count]
    return [
        {part.name: _drawn(part, share) for part, share in zip(parts, row, strict=True)}
        for row in drawn.tolist()
    ]


def _spread(part: Part) -> tuple[float, float]:
    """How far a part's value may lie below and above its nominal one, in its unit."""
    assert part.tolerance is not None
    return part.value * part.tolerance.low, part.value * part.tolerance.high


def _drawn(part: Part, share: float) -> float:
    below, above = _spread(part)
    low, high = part.value + below, part.value + above
    value = low + share * (high - low)
    short = float(f"{value:.{_DIGITS}g}")
    return short if low <= short <= high else value


def samples(circuit: Circuit, names: Names, count: int = DEFAULT_COUNT) -> Samples:
    """The circuit `count` times, and once with its nominal values, fed by the same sources.

    circuit: as written, under `names`. Raises CircuitError for one without an output or without tolerances.
    """
    network = circuit.network
    if not circuit.output or not all(network.has_node(node) for node in circuit.output):
        raise CircuitError("samples are looked at at an output.", remedy='Add output = "out" to the circuit.')
    shared = _shared(network)
    inside = without(network, {source.name for source in shared})
    fed = [node for source in shared for node in source.nodes if node != GROUND and inside.has_node(node)]
    own = [node for node in circuit.output if node not in fed and node != GROUND]
    ports = tuple(dict.fromkeys([*fed, *own]))
    values = sample_values(network, count)
    nominal = {part: network.part(part).value for part in values[0]}
    outer = _outside(network, ports, own, names, count)
    return Samples(
        list(_definition(circuit.with_network(inside), names, ports, nominal)),
        [line for source in shared for line in wrap(source_line(source, names, circuit))],
        [
            "\n".join(wrap(_instance(*each, names)))
            for each in enumerate(zip(outer, [{}, *values], strict=True))
        ],
        [tuple(nodes.get(node, node) for node in circuit.output) for nodes in outer],
        [nominal, *values],
        inside,
        outer,
    )


def _outside(network: Network, ports: Sequence[str], own: Sequence[str], names: Names, count: int) -> Outer:
    """Where each port of each instance leads: the nodes that are fed to one node, each output to its own."""
    taken = {names.nodes[node].lower() for node in network.nodes}
    stems = {}
    for port in own:
        stems[port] = f"{names.nodes[port]}_"
        # Inside, a name of the same spelling would be another node, which only a simulator cannot confuse.
        while any(f"{stems[port]}{number}".lower() in taken for number in range(count + 1)):
            stems[port] += "x"
    return [
        {port: f"{stems[port]}{number}" if port in stems else names.nodes[port] for port in ports}
        for number in range(count + 1)
    ]


def _instance(number: int, each: tuple[dict[str, str], dict[str, float]], names: Names) -> str:
    nodes, drawn = each
    words = [f"{_parameter(names, part)}={write_spice_number(value)}" for part, value in drawn.items()]
    return " ".join([f"X{number}", *nodes.values(), NAME, *words])


def _shared(network: Network) -> list[Source]:
    """The sources that can feed all instances at once: grounded voltages whose current nothing senses.

    A current would divide among the instances, and a voltage between two of their nodes tie them together.
    """
    sensed = {part.senses for part in network.parts}
    return [
        source
        for source in network.sources.values()
        if source.kind == "V" and GROUND in source.nodes and source.name not in sensed and drives(source)
    ]


def _parameter(names: Names, part: str) -> str:
    return f"{names.parts[part].lower()}_"


def _definition(
    inside: Circuit, names: Names, ports: Sequence[str], nominal: Mapping[str, float]
) -> Iterator[str]:
    words = [".subckt", NAME, *(names.nodes[port] for port in ports)]
    words += [f"{_parameter(names, part)}={write_spice_number(value)}" for part, value in nominal.items()]
    yield from wrap(" ".join(words))
    for part in inside.network.parts:
        words = part_line(part, names, inside).split(" ")
        if part.name in nominal:  # behind its value stands at most `ic=`
            words[-2 if "=" in words[-1] else -1] = f"{{{_parameter(names, part.name)}}}"
        yield from wrap(" ".join(words))
    yield f".ends {NAME}"


def sample_differences(made: Samples, circuit: Circuit, names: Names, back: Circuit) -> Iterator[str]:
    """What differs between the samples and a deck of them read back, subcircuits put in place."""
    shared = [name for name in circuit.network.sources if name not in made.inside]
    if len(back.network) != len(shared) + len(made.values) * len(made.inside):
        yield "the number of parts"
    for name in shared:
        if not same_part(circuit, names, back, name):
            yield name
    for number, (values, outer) in enumerate(zip(made.values, made.outer, strict=True)):
        inner = circuit.with_network(made.inside.with_values(values))
        for part in instance_differences(inner, names, f"X{number}", outer, back):
            yield f"{part} of sample {number}"
