"""SPICE netlists: written from a circuit, read into one, sealed."""

from .limits import Limits, Reading, raised
from .names import Names, folded, safe_names
from .reader import parse_netlist, read_netlist, reads_as_part, with_parameters
from .round_trip import differences, read_same
from .seal import DESPITE_ERRORS, digest, find_seal, seal_comments
from .sweep import frequencies, sweep_fault
from .writer import Written, analysis_lines, as_written, deck, network_of, requested, voltage, write

__all__ = [
    "DESPITE_ERRORS",
    "Limits",
    "Names",
    "Reading",
    "Written",
    "analysis_lines",
    "as_written",
    "deck",
    "differences",
    "digest",
    "find_seal",
    "folded",
    "frequencies",
    "network_of",
    "parse_netlist",
    "raised",
    "read_netlist",
    "read_same",
    "reads_as_part",
    "requested",
    "safe_names",
    "seal_comments",
    "sweep_fault",
    "voltage",
    "with_parameters",
    "write",
]
