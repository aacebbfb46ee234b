"""SPICE netlists: written from a circuit, read into one, sealed."""

from .names import Names, safe_names
from .reader import parse_netlist, read_netlist
from .seal import digest, find_seal, seal_comments
from .sweep import frequencies
from .writer import Written, analysis_lines, as_written, deck, network_of, requested, voltage, write

__all__ = [
    "Names",
    "Written",
    "analysis_lines",
    "as_written",
    "deck",
    "digest",
    "find_seal",
    "frequencies",
    "network_of",
    "parse_netlist",
    "read_netlist",
    "requested",
    "safe_names",
    "seal_comments",
    "voltage",
    "write",
]
