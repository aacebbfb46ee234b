"""Circuits to and from users of PySpice (GPLv3, and only imported here when asked for)."""

from __future__ import annotations

from typing import Any

from ..circuit import Circuit, Network
from ..errors import CircuitError
from .names import safe_names
from .reader import parse_netlist
from .writer import as_written, network_of, source_line

# Our letter -> PySpice's method.
_METHODS = {"R": "R", "C": "C", "L": "L", "E": "VCVS", "G": "VCCS", "F": "CCCS", "H": "CCVS", "K": "K"}


def to_pyspice(network: Network) -> Any:
    """The network as a `PySpice.Spice.Netlist.Circuit`: plain elements with exact float values.

    Names are those of a written netlist; vertical edges get a slope as there. Raises CircuitError where
    PySpice is not installed, with the command that installs it.
    """
    kind = _pyspice_circuit()
    circuit = as_written(network_of(network))
    names = safe_names(circuit.network)
    result = kind(network.title or "rcnet")
    # PySpice looks for the inductors of a K among the elements it has already.
    for part in sorted(circuit.network.parts, key=lambda part: part.kind == "K"):
        name = names.parts[part.name]
        nodes = [names.nodes[node] for node in part.nodes]
        source = circuit.network.sources.get(part.name)
        if source is not None:
            # One word for dc, ac and waveform together: PySpice's own source classes drop some of them.
            words = source_line(source, names, circuit).split(" ", 3)[3]
            getattr(result, part.kind)(name[1:], *nodes, words)
        else:
            named = [names.parts[part.senses]] if part.senses is not None else []
            if part.couples is not None:
                inductors = circuit.network.coupled_by(circuit.network.part_index(part.name))
                # Its names begin with its own capital letter.
                named = [f"L{names.parts[circuit.network.names[row]][1:]}" for row in inductors]
            # PySpice's two-port elements take the output pair first, as SPICE does.
            getattr(result, _METHODS[part.kind])(name[1:], *nodes, *named, part.value)
    return result


def from_pyspice(circuit: Any) -> Network:
    """A network from a PySpice circuit, by way of the text PySpice makes of it.

    Whatever the netlist reader does not read (non-linear elements, subcircuits) is refused with its line of
    that text. Raises CircuitError.
    """
    if not hasattr(circuit, "elements"):
        raise CircuitError("this is no PySpice circuit.", remedy="Give a PySpice.Spice.Netlist.Circuit.")
    title = getattr(circuit, "title", "") or "PySpice circuit"
    read: Circuit = parse_netlist(f"* {title}\n{circuit}\n.end\n", "the PySpice circuit")
    return read.network


def _pyspice_circuit() -> Any:
    try:
        from PySpice.Spice.Netlist import Circuit as PySpiceCircuit
    except ImportError as exc:
        raise CircuitError("PySpice is not installed.", remedy='Run: pip install "rcnet[pyspice]"') from exc
    return PySpiceCircuit
