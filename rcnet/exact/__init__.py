"""The response of a network by nodal analysis, right to the last digits whatever the spread of values."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..lazily import hand_out

if TYPE_CHECKING:
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
        response_chunks,
    )
    from .initial import started, transient_from
    from .modes import ModalSystem, Modes, modal_system, modes, natural_rates
    from .noise import BOLTZMANN, noise, noise_shares, total_noise
    from .one_part import OnePart, between, every_part, one_part
    from .operating_point import operating_point, solve_operating_point, source_currents
    from .periodic import Periodic, periodic, periodic_pairs
    from .sensitivity import response_sensitivity
    from .solver import Drive, Solution, Solver, require_solvable, solver_for
    from .span import Span, span_of
    from .step import discharge, step_response
    from .symbols import Coefficient, Term, TransferFunction, transfer_function
    from .transient import transient

# Where each name lives.
_HOMES = {
    "BOLTZMANN": "noise",
    "Coefficient": "symbols",
    "Drive": "solver",
    "ModalSystem": "modes",
    "Modes": "modes",
    "OnePart": "one_part",
    "Periodic": "periodic",
    "Solution": "solver",
    "Solver": "solver",
    "Span": "span",
    "Term": "symbols",
    "TransferFunction": "symbols",
    "ac_drive": "ac",
    "between": "one_part",
    "dc_solvable": "ac",
    "discharge": "step",
    "driving_sources": "ac",
    "every_part": "one_part",
    "input_impedance": "ac",
    "limit": "ac",
    "modal_system": "modes",
    "modes": "modes",
    "natural_frequencies": "ac",
    "natural_rates": "modes",
    "node_pair": "ac",
    "noise": "noise",
    "noise_shares": "noise",
    "one_part": "one_part",
    "operating_point": "operating_point",
    "output_impedance": "ac",
    "periodic": "periodic",
    "periodic_pairs": "periodic",
    "require_solvable": "solver",
    "response": "ac",
    "response_and_slope": "ac",
    "response_chunks": "ac",
    "response_sensitivity": "sensitivity",
    "solve_operating_point": "operating_point",
    "solver_for": "solver",
    "source_currents": "operating_point",
    "span_of": "span",
    "started": "initial",
    "step_response": "step",
    "total_noise": "noise",
    "transfer_function": "symbols",
    "transient": "transient",
    "transient_from": "initial",
}

__all__ = [
    "BOLTZMANN",
    "Coefficient",
    "Drive",
    "ModalSystem",
    "Modes",
    "OnePart",
    "Periodic",
    "Solution",
    "Solver",
    "Span",
    "Term",
    "TransferFunction",
    "ac_drive",
    "between",
    "dc_solvable",
    "discharge",
    "driving_sources",
    "every_part",
    "input_impedance",
    "limit",
    "modal_system",
    "modes",
    "natural_frequencies",
    "natural_rates",
    "node_pair",
    "noise",
    "noise_shares",
    "one_part",
    "operating_point",
    "output_impedance",
    "periodic",
    "periodic_pairs",
    "require_solvable",
    "response",
    "response_and_slope",
    "response_chunks",
    "response_sensitivity",
    "solve_operating_point",
    "solver_for",
    "source_currents",
    "span_of",
    "started",
    "step_response",
    "total_noise",
    "transfer_function",
    "transient",
    "transient_from",
]

hand_out(__name__, _HOMES)
