"""The read-back: the written text read again and solved by full modified nodal analysis with pivoting."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Sweep
from ..curves import Curve, Curves
from ..exact import nodal
from ..netlist import frequencies, parse_netlist

SOURCE = "read-back"


def read_back(text: str, file: str) -> Curves:
    """What the netlist `text` does, by a reader and a solver other than those of the exact curve.

    AC analysis and operating point; other analyses are named in the remarks. Raises CircuitError where the
    text cannot be read, UnsolvableError where it has no unique solution.
    """
    circuit = parse_netlist(text, file)
    curves: list[Curve] = []
    remarks: list[str] = []
    if circuit.analyses.operating_point:
        curves += _operating_point(circuit)
    if circuit.analyses.ac is not None:
        curves += _ac(circuit, circuit.analyses.ac)
    for name, wanted in (("transient", circuit.analyses.transient), ("noise", circuit.analyses.noise)):
        if wanted is not None:
            remarks.append(f"the read-back gives no {name} results; ngspice does.")
    return Curves(SOURCE, tuple(curves), circuit.title, tuple(remarks))


def _operating_point(circuit: Circuit) -> list[Curve]:
    network = circuit.network
    eqs = nodal.equations(network, plain=True)
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        drive[network.part_index(name)] = source.operating_value
    rhs = nodal.right_hand_side(network, eqs, drive, None, 1)
    answer = nodal.solve(eqs, np.zeros(1), rhs)
    return [
        Curve(name, "operating point", np.zeros(1), np.asarray(answer[unknown].real), unit)
        for name, unknown, unit in _unknowns(circuit, eqs)
    ]


def _ac(circuit: Circuit, sweep: Sweep) -> list[Curve]:
    network = circuit.network
    axis = frequencies(sweep)
    eqs = nodal.equations(network, plain=True)
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        drive[network.part_index(name)] = source.phasor
    rhs = nodal.right_hand_side(network, eqs, drive, None, len(axis))
    answer: npt.NDArray[np.complex128] = nodal.solve(eqs, 2j * math.pi * axis, rhs)
    return [Curve(name, "ac", axis, answer[unknown], unit) for name, unknown, unit in _unknowns(circuit, eqs)]


def _unknowns(circuit: Circuit, eqs: nodal.Equations) -> list[tuple[str, int, str]]:
    """(curve name, row of the answer, unit) of node voltages and source currents, named as in raw files."""
    network = circuit.network
    nodes = [(f"v({node.lower()})", k, "V") for k, node in enumerate(network.nodes[1:])]
    return nodes + [
        (f"i({network.names[row].lower()})", unknown, "A")
        for row, unknown in eqs.branch_of.items()
        if network.names[row] in network.sources
    ]
