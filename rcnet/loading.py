"""Reading a circuit from a file, whichever kind of file it is."""

from __future__ import annotations

import re
from pathlib import Path

from .circuit import SUFFIX, Circuit, load_circuit_file
from .errors import CircuitError
from .system.files import read_text

# How a circuit file begins, comments aside.
_CIRCUIT_FILE = re.compile(
    r"(?:[ \t]*+(?:#[^\n]*+)?\n)*+[ \t]*+"
    r"(?:(?:title|output)[ \t]*+=|\[\[?(?:parts|ladder|sources|analysis|conditions|claims)\b)"
)


def load(path: str | Path) -> Circuit:
    """Read a circuit file (`*.rc.toml`, or any `.toml`), else a SPICE netlist.

    Raises InputError or CircuitError.
    """
    name = str(path)
    if name.lower().endswith((SUFFIX, ".toml")):
        return load_circuit_file(name)
    from .netlist import parse_netlist

    text = read_text(name)
    try:
        return parse_netlist(text, name)
    except CircuitError as exc:
        if _CIRCUIT_FILE.match(text.replace("\r\n", "\n")) is None:
            raise
        raise CircuitError(
            "this looks like a circuit file, but its name makes it a netlist.",
            file=name,
            remedy=f"Let its name end in {SUFFIX}.",
        ) from exc
