"""The response of a network by nodal analysis, right to the last digits whatever the spread of values."""

from .ac import (
    ac_drive,
    dc_solvable,
    driving_sources,
    input_impedance,
    limit,
    natural_frequencies,
    node_pair,
    output_impedance,
    response,
    response_and_slope,
)
from .operating_point import operating_point, solve_operating_point, source_currents
from .solver import Drive, Solution, Solver, require_solvable, solver_for
from .span import Span, span_of

__all__ = [
    "Drive",
    "Solution",
    "Solver",
    "Span",
    "ac_drive",
    "dc_solvable",
    "driving_sources",
    "input_impedance",
    "limit",
    "natural_frequencies",
    "node_pair",
    "operating_point",
    "output_impedance",
    "require_solvable",
    "response",
    "response_and_slope",
    "solve_operating_point",
    "solver_for",
    "source_currents",
    "span_of",
]
