"""The network and what is asked of it: parts, nodes, sources, waveforms, topology, the circuit file."""

from .circuit import (
    Analyses,
    Bound,
    Circuit,
    Claim,
    Conditions,
    Place,
    SealNote,
    Sweep,
    TransientRun,
)
from .circuit_file import SUFFIX, circuit_name, load_circuit_file, parse_circuit_file
from .measure_table import MEASURES, MeasureSpec, measure_spec, parse_options
from .network import GROUND, Network, PartArrays
from .parts import KINDS, Kind, Part, Source
from .topology import Trouble, explain, floating_nodes, loose_groups, stiff_loops, troubles
from .waveform import EDGE_SHARE, Points, Sine, Square, Step, Waveform

__all__ = [
    "EDGE_SHARE",
    "GROUND",
    "KINDS",
    "MEASURES",
    "SUFFIX",
    "Analyses",
    "Bound",
    "Circuit",
    "Claim",
    "Conditions",
    "Kind",
    "MeasureSpec",
    "Network",
    "Part",
    "PartArrays",
    "Place",
    "Points",
    "SealNote",
    "Sine",
    "Source",
    "Square",
    "Step",
    "Sweep",
    "TransientRun",
    "Trouble",
    "Waveform",
    "circuit_name",
    "explain",
    "floating_nodes",
    "load_circuit_file",
    "loose_groups",
    "measure_spec",
    "parse_circuit_file",
    "parse_options",
    "stiff_loops",
    "troubles",
]
