"""SPICE netlists: written from a circuit, read into one, sealed."""

from .lines import Line, logical_lines, words_of
from .names import Names, folded, safe_names
from .reader import parse_netlist, read_netlist, reads_as_part
from .round_trip import differences, read_same
from .seal import DESPITE_ERRORS, digest, find_seal, seal_comments
from .sweep import frequencies, sweep_fault
from .writer import Written, analysis_lines, as_written, deck, network_of, requested, voltage, write

__all__ = [
    "DESPITE_ERRORS",
    "Line",
    "Names",
    "Written",
    "analysis_lines",
    "as_written",
    "deck",
    "differences",
    "digest",
    "find_seal",
    "folded",
    "frequencies",
    "logical_lines",
    "network_of",
    "parse_netlist",
    "read_netlist",
    "read_same",
    "reads_as_part",
    "requested",
    "safe_names",
    "seal_comments",
    "sweep_fault",
    "voltage",
    "words_of",
    "write",
]
