"""Reading a circuit from a file, whichever kind of file it is."""

from __future__ import annotations

import re
from pathlib import Path
from typing import TYPE_CHECKING

from .circuit import SUFFIX, Circuit, load_circuit_file
from .errors import CircuitError

if TYPE_CHECKING:
    from .netlist import Reading

# How a circuit file begins, comments aside.
_CIRCUIT_FILE = re.compile(
    r"(?:[ \t]*+(?:#[^\n]*+)?\n)*+[ \t]*+"
    r"(?:(?:title|output|silence)[ \t]*+=|\[\[?(?:parts|ladder|sources|analysis|conditions|claims)\b)"
)


def load(path: str | Path, reading: Reading | None = None) -> Circuit:
    """Read a circuit file (`*.rc.toml`, or any `.toml`), else a SPICE netlist.

    reading: for a netlist, which folders it may include from, its limits, whether only its linear part counts
    Raises InputError or CircuitError.
    """
    name = str(path)
    if name.lower().endswith((SUFFIX, ".toml")):
        return load_circuit_file(name)
    from .netlist import read_netlist

    try:
        return read_netlist(name, reading)
    except CircuitError as exc:
        lines = exc.partial.lines if exc.partial is not None else ()
        if _CIRCUIT_FILE.match("\n".join(lines[:200]) + "\n") is None:
            raise
        raise CircuitError(
            "this looks like a circuit file, but its name makes it a netlist.",
            file=name,
            remedy=f"Let its name end in {SUFFIX}.",
        ) from exc
