"""What scripts call: the library's jobs as plain functions."""

from __future__ import annotations

import os
from pathlib import Path

from .circuit import Circuit, Network
from .compare import Comparison
from .compare import compare as _compare
from .curves import Curves
from .errors import InputError
from .handover import sealed_netlist
from .netlist import network_of, parse_netlist
from .system.files import write_file


def write_netlist(
    circuit: Circuit | Network, path: str | os.PathLike[str], *, anyway: bool = False
) -> Circuit:
    """Check a circuit, write its sealed netlist to `path`, and return it as the netlist holds it.

    anyway: write although a finding is an error; the seal then says so. Raises CircuitError for such a
    finding otherwise, UnsolvableError, and OutputError where the file cannot be written.
    """
    written = sealed_netlist(circuit, anyway=anyway)
    write_file(path, written.text)
    return parse_netlist(written.text, os.fspath(path))


def compare(circuit: Circuit | Network, curves: Curves) -> Comparison:
    """Hold results against the exact curves of a circuit, at the results' own points.

    Raises ResultsError where nothing in the results is about this circuit.
    """
    if not isinstance(circuit, (Circuit, Network)) or not isinstance(curves, Curves):
        raise InputError(
            "compare takes a circuit and curves.",
            remedy="Read them with rcnet.load and rcnet.read_results first.",
        )
    return _compare(network_of(circuit), curves, who=Path(curves.source).name)
