"""Everything that paper would say about a network, beside what it really does."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from ..circuit import Circuit, Network
from ..errors import CircuitError, UndecidedError, UnsolvableError
from ..exact import TransferFunction, node_pair, require_solvable, transfer_function
from .approximations import APPROXIMATIONS, Asymptote, asymptotes, meeting
from .case import Case
from .polynomials import numbers
from .roots import Roots, roots_of
from .rule import Result, apply
from .thumb_table import RULES
from .written import Written, written


@dataclass(frozen=True)
class Derivation:
    """The transfer function of one output, and the shorter ways to it.

    of: the output; source: what the response is per unit of, and its kind, V or I
    function: in part names, None where `function_why` says why; roots: None where `roots_why` says why
    asymptotes: far down and far up, none where the zeros are not known; corner: where the two meet, Hz
    approximations, rules: each with its error here
    """

    circuit: Circuit
    of: str
    source: str
    function: Written | None
    roots: Roots | None
    asymptotes: tuple[Asymptote, ...]
    corner: float | None
    approximations: tuple[Result, ...]
    rules: tuple[Result, ...]
    function_why: str | None = None
    roots_why: str | None = None


def derive(circuit: Circuit | Network, of: str | None = None) -> Derivation:
    """The transfer function in part names, poles and zeros, and every rule of thumb that fits.

    of: a node or a pair `"a b"`; by default the circuit's output, else the node `out`
    The response is per unit of the one source that carries ac; where none does, of the only one that has a
    waveform, else of the only source there is. Raises CircuitError where there is not one such source or no
    output, UnsolvableError where the network has no unique solution.
    """
    whole = _whole(circuit)
    output = of if of is not None else _output(whole)
    network, driver = _driven(whole)
    pair = node_pair(network, output)
    if pair[0] == pair[1]:
        raise CircuitError(
            f"{output!r} is always at zero volts, so nothing is to be derived.", remedy="Name another node."
        )
    output = " ".join(output.split())
    require_solvable(network)
    function, function_why = _function(network, output)
    roots, roots_why = _roots(network, output, pair, driver, function)
    form = None if function is None else written(function)
    if function is not None and form is None:
        function_why = "nothing of the source arrives at this output at any frequency."
    case = Case(replace(whole, network=network), network, driver, output, pair, roots)
    lines = asymptotes(case, form)
    return Derivation(
        whole,
        output,
        driver,
        form,
        roots,
        lines,
        meeting(lines),
        apply(APPROXIMATIONS, case),
        apply(RULES, case),
        function_why,
        roots_why,
    )


def _whole(circuit: Circuit | Network) -> Circuit:
    if isinstance(circuit, Circuit):
        return circuit
    return Circuit(circuit, name=circuit.title or "circuit")


def _output(circuit: Circuit) -> str:
    if circuit.output:
        return " ".join(circuit.output)
    if circuit.network.has_node("out"):
        return "out"
    names: Sequence[str] = circuit.network.nodes[1:13]
    raise CircuitError(
        "the circuit names no output, and it has no node called 'out'.",
        file=circuit.file,
        remedy=f"Name one with --of (or of=): {', '.join(names) or 'there is no node'}.",
    )


def _driven(circuit: Circuit) -> tuple[Network, str]:
    """The network with one source carrying ac, and that source's name."""
    network, sources = circuit.network, circuit.network.sources
    for what, names in (
        ("carry ac", [name for name, source in sources.items() if source.ac]),
        ("have a waveform", [name for name, source in sources.items() if source.waveform is not None]),
        ("drive the circuit", list(sources)),
    ):
        if len(names) > 1:
            raise CircuitError(
                f"{len(names)} sources {what}: {', '.join(names[:8])}; a transfer function has one.",
                file=circuit.file,
                remedy="Give ac to one source alone.",
            )
        if names:
            source = sources[names[0]]
            return (network if source.ac else network.with_source(replace(source, ac=1.0))), names[0]
    raise CircuitError(
        "the circuit has no source, so there is no transfer function.",
        file=circuit.file,
        remedy="Add one, as [sources.Vin] with ac = 1.",
    )


def _function(network: Network, of: str) -> tuple[TransferFunction | None, str | None]:
    try:
        function = transfer_function(network, of)
    except UndecidedError as exc:
        return None, exc.message
    if not numbers(function.denominator, dict(function.values)):
        raise UnsolvableError(
            "the network has no unique solution for these values of its parts.",
            remedy="Look for a controlled source that controls itself.",
        )
    return function, None


def _roots(
    network: Network, of: str, pair: tuple[int, int], driver: str, function: TransferFunction | None
) -> tuple[Roots | None, str | None]:
    try:
        return roots_of(network, of, pair, driver, function), None
    except UndecidedError as exc:
        return None, exc.message
    except OverflowError:
        return None, "they lie beyond the numbers double precision holds."
