"""A circuit as a subcircuit for a library, checked and sealed."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from ..check import Check, check
from ..circuit import Circuit, Network
from ..handover import findings_told, package_version, require_sound, with_analyses
from ..netlist import Names, digest, network_of
from ..netlist.portable import ascii_text
from ..netlist.subcircuit import library


def sealed_subcircuit(
    circuit: Circuit | Network,
    name: str,
    done: Check | None = None,
    *,
    ports: Sequence[str] | None = None,
    anyway: bool = False,
    portable: bool = False,
) -> str:
    """The checked circuit as a subcircuit for a library file, with a seal about what stands inside.

    ports: node names in the order wanted; by default those of the sources, then those of the output
    Raises as `sealed_netlist`, and InputError for a name that a simulator may not take.
    """
    whole = network_of(circuit)
    done = done or check(with_analyses(whole))
    require_sound(done, anyway=anyway)
    made = library(whole, name, ports, portable=portable)
    back = made.read_back()
    origin = Path(whole.file).name if whole.file else "a network built in Python"
    left_out = [source for source in whole.network.sources if source not in made.inside.circuit.network]
    ports_told = [_port(whole, made.inside.names, port, left_out) for port in made.ports]
    texts = [
        f"Subcircuit written by rcnet {package_version()} from {origin}.",
        f"Ports, in order: {', '.join(ports_told)}.",
        "Ground is node 0 inside as outside.",
        *([f"Left out: {', '.join(left_out)}."] if left_out else []),
        "To use it, include this file and write a line such as",
        f"  {made.instance}",
        "Sealed by rcnet as a subcircuit.",
        *(f"  {fact}" for fact in findings_told(done)),
        "  digest of what stands inside:",
        f"  {digest(back)}",
    ]
    return made.text(ascii_text(text) if portable else text for text in texts)


def _port(circuit: Circuit, names: Names, port: str, left_out: Sequence[str]) -> str:
    """A port's name with what it is for."""
    sources = circuit.network.sources
    uses = [f"fed by {name}" for name in left_out if port in sources[name].nodes]
    uses += (
        ["the output"]
        if circuit.output == (port,)
        else ["an end of the output"]
        if port in circuit.output
        else []
    )
    return f"{names.nodes[port]} ({', '.join(uses)})" if uses else names.nodes[port]
