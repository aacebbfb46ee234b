"""rcnet: resistor-capacitor networks held to one exact answer.

Everyday names
  Network               a network built part by part; its methods answer for it
  load                  read a circuit file or a netlist
  check                 findings and verdicts
  derive                the transfer function, poles and zeros, and what rules of thumb make of them
  write_netlist, read_netlist, read_results, compare
Building blocks
  Circuit               a network with what is asked and claimed of it
  Comparison, Curve, Curves, Derivation, Finding
Errors
  RcnetError and its kinds, see `rcnet.errors`
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from .lazily import hand_out

if TYPE_CHECKING:
    from .api import compare, write_netlist
    from .check import check
    from .circuit import Circuit, Network
    from .compare import Comparison
    from .curves import Curve, Curves, read_results
    from .derive import Derivation, derive
    from .errors import (
        CircuitError,
        InputError,
        OutputError,
        QuantityError,
        RcnetError,
        ResultsError,
        SimulatorError,
        UndecidedError,
        UnsolvableError,
    )
    from .findings import Finding
    from .loading import load
    from .netlist import read_netlist

# Where each public name lives; a room is loaded when one of its names is first used.
_HOMES = {
    "Circuit": "circuit",
    "CircuitError": "errors",
    "Comparison": "compare",
    "Curve": "curves",
    "Curves": "curves",
    "Derivation": "derive",
    "Finding": "findings",
    "InputError": "errors",
    "Network": "circuit",
    "OutputError": "errors",
    "QuantityError": "errors",
    "RcnetError": "errors",
    "ResultsError": "errors",
    "SimulatorError": "errors",
    "UndecidedError": "errors",
    "UnsolvableError": "errors",
    "check": "check",
    "compare": "api",
    "derive": "derive",
    "load": "loading",
    "read_netlist": "netlist",
    "read_results": "curves",
    "write_netlist": "api",
}

__all__ = [
    "Circuit",
    "CircuitError",
    "Comparison",
    "Curve",
    "Curves",
    "Derivation",
    "Finding",
    "InputError",
    "Network",
    "OutputError",
    "QuantityError",
    "RcnetError",
    "ResultsError",
    "SimulatorError",
    "UndecidedError",
    "UnsolvableError",
    "check",
    "compare",
    "derive",
    "load",
    "read_netlist",
    "read_results",
    "write_netlist",
]


hand_out(__name__, _HOMES)
