"""Reading a circuit from a file, whichever kind of file it is."""

from __future__ import annotations

from pathlib import Path

from .circuit import SUFFIX, Circuit, load_circuit_file


def load(path: str | Path) -> Circuit:
    """Read a circuit file (`*.rc.toml`, or any `.toml`), else a SPICE netlist.

    Raises InputError or CircuitError.
    """
    name = str(path)
    if name.lower().endswith((SUFFIX, ".toml")):
        return load_circuit_file(name)
    from .netlist import read_netlist

    return read_netlist(name)
