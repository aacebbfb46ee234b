"""SPICE netlists: written from a circuit, read into one, sealed."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..lazily import hand_out
from .names import Names, folded, safe_names
from .round_trip import differences, read_same
from .seal import DESPITE_ERRORS, digest, find_seal, seal_comments
from .sweep import frequencies, sweep_fault
from .writer import Written, analysis_lines, as_written, deck, network_of, requested, voltage, write

if TYPE_CHECKING:
    from .limits import Limits, Reading, raised
    from .reader import parse_netlist, read_netlist, reads_as_part, with_parameters

# The reader is loaded when it is first used: checking a circuit file has no need of it.
_LATE = {
    "Limits": "limits",
    "Reading": "limits",
    "parse_netlist": "reader",
    "raised": "limits",
    "read_netlist": "reader",
    "reads_as_part": "reader",
    "with_parameters": "reader",
}

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


hand_out(__name__, _LATE)
