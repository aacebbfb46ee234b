"""The circuit at its ports: exact S-parameters, and what measured ones say of its response.

Port 1 is where the one driving source stands, port 2 the circuit's output. Each port is closed with its
reference resistance, and S follows from the voltages: with an emf of 1 V behind the resistance of port j,
S_jj = 2 V_j - 1 and S_ij = 2 V_i sqrt(R_j/R_i). Unlike impedances these exist for every network, a resistor
between the ports included. K. Kurokawa, IEEE Trans. MTT 13:194-202, 1965.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Network
from ..circuit.parts import Source
from ..curves import Curve, Curves
from ..errors import ResultsError
from ..exact import dc_solvable, driving_sources, response, span_of
from .allowance import FLOOR, rounding_allowance

Float = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Numbers = npt.NDArray[Any]

S_NAMES = ("s11", "s21", "s12", "s22")


@dataclass(frozen=True, slots=True)
class PortPair:
    """Where the ports of a circuit are.

    driving: the source at port 1; one, two: the nodes of each port, the hot one first; two is None for a
    circuit without an output
    sign: of the voltage at port 1, or of the current into it, when the source's own value is positive
    """

    driving: Source
    one: tuple[str, str]
    two: tuple[str, str] | None
    sign: int


def ports_of(circuit: Circuit) -> PortPair:
    """Where the circuit's ports are. The hot node of a port is the one that is not ground.

    Raises ResultsError unless one source drives the circuit.
    """
    network = circuit.network
    names = driving_sources(network) or tuple(network.sources)
    if len(names) != 1:
        found = ", ".join(names[:6]) or "none"
        raise ResultsError(
            f"port 1 is where the one driving source stands, and the circuit's are: {found}.",
            remedy="Give ac to one source, or compare voltages.",
        )
    driving = network.sources[names[0]]
    hot, cold = driving.nodes
    sign = 1 if driving.kind == "V" else -1
    if hot == "0":
        hot, cold, sign = cold, hot, -sign
    output = circuit.output
    two = (output[0], output[1] if len(output) > 1 else "0") if output else None
    if two is not None and two[0] == "0":
        two = two[1], two[0]
    return PortPair(driving, (hot, cold), two, sign)


def exact_ports(circuit: Circuit, frequency: npt.ArrayLike, reference: Sequence[float]) -> dict[str, Complex]:
    """The circuit's exact S-parameters: `s11`, and with two references `s21`, `s12`, `s22` as well.

    frequency: Hz, (frequencies,), zero meaning the limit; reference: ohm, one for each port
    Returns (frequencies,) for each. All other independent sources are dead. Raises ResultsError where the
    circuit has no such ports, UnsolvableError where the closed network has no unique solution.
    """
    found: dict[str, Complex] = {}
    for driven in range(len(reference)):
        closed = _closed(circuit, reference, driven)
        voltages = closed.sign * response(
            closed.network, frequency, [" ".join(pair) for pair in closed.pairs]
        )
        for port, voltage in enumerate(voltages):
            turn = np.sqrt(reference[driven] / reference[port])
            found[f"s{port + 1}{driven + 1}"] = 2 * voltage - 1 if port == driven else 2 * turn * voltage
    return {name: found[name] for name in S_NAMES if name in found}


def measured_at_ports(circuit: Circuit, curves: Curves) -> list[Curve]:
    """The circuit's exact S-parameters for each curve `s11`, `s21`, ... of a file, at its own frequencies.

    The curves come in the file's order; all others are left out. Raises ResultsError where `curves` says
    nothing of ports, and what `exact_ports` raises.
    """
    reference = _reference(curves)
    names = S_NAMES if len(reference) == 2 else S_NAMES[:1]
    wanted = [curve for curve in curves if curve.name in names and curve.analysis == "ac"]
    answer = []
    exact: dict[int, dict[str, Complex]] = {}
    for curve in wanted:
        if id(curve.axis) not in exact:
            exact[id(curve.axis)] = exact_ports(circuit, curve.axis, reference)
        answer.append(Curve(curve.name, "ac", curve.axis, exact[id(curve.axis)][curve.name]))
    return answer


def allowance_at_ports(circuit: Circuit, curve: Curve, reference: Sequence[float]) -> Float:
    """How far a measured S-parameter may lie from the exact one before it counts as different: (points,).

    Rounding as in `rounding_allowance`, the digits of the values twice over, and those of the frequencies.
    """
    driven, port = int(curve.name[2]) - 1, int(curve.name[1]) - 1
    closed = _closed(circuit, reference, driven)
    network = closed.network
    drive = np.zeros(len(network), dtype=np.complex128)
    for name, source in network.sources.items():
        drive[network.part_index(name)] = source.phasor
    rows = [network.node_index(node) - 1 for node in closed.pairs[port] if node != "0"]
    bound = rounding_allowance(network, _s(network, curve.axis), drive, rows).sum(axis=0)
    allowed = 2 * np.sqrt(reference[driven] / reference[port]) * bound + FLOOR
    if curve.resolution is not None:
        allowed = allowed + 2 * curve.resolution
    if curve.axis_resolution is not None:
        ends = (
            np.maximum(curve.axis - curve.axis_resolution, curve.axis * 1e-3),
            curve.axis + curve.axis_resolution,
        )
        here, *there = (exact_ports(circuit, axis, reference)[curve.name] for axis in (curve.axis, *ends))
        allowed = allowed + np.maximum(*(np.abs(moved - here) for moved in there))
    return np.asarray(allowed)


def gain_from_ports(circuit: Circuit, curves: Curves) -> Curve:
    """The response of the circuit, output left open, that measured S-parameters imply, as a curve `v(out)`.

    Per unit of the driving source: V2/V1 = Z21/Z11 = 2 S21 sqrt(R2/R1) / ((1 + S11)(1 - S22) + S12 S21) for
    a voltage source, Z21 = 2 S21 sqrt(R1 R2) / ((1 - S11)(1 - S22) - S12 S21) for a current source. The
    errors of the four add up in its `resolution`, and grow where the denominator is small.
    Raises ResultsError where the file does not hold two ports, or the response is not finite.
    """
    ports, reference = ports_of(circuit), _reference(curves)
    found = [curves.get(name, "ac") for name in S_NAMES]
    if len(reference) != 2 or None in found:
        raise ResultsError(
            "the response of an open output follows from all four S-parameters of two ports.",
            file=curves.source,
            remedy="Measure s11, s21, s12 and s22.",
        )
    if ports.two is None:
        raise _no_output(curves.source)
    four = [curve for curve in found if curve is not None]
    values, slack = _open_gain(four, reference, ports)
    if not np.isfinite(values).all():
        at = float(four[0].axis[np.flatnonzero(~np.isfinite(values))[0]])
        message = f"the S-parameters at {at:.6g} Hz leave the response of an open output without bound."
        raise ResultsError(message, file=curves.source, remedy="Compare the S-parameters themselves.")
    hot, cold = ports.two
    name = f"v({hot})" if cold == "0" else f"v({hot},{cold})"
    return replace(four[0], name=name, values=values, unit="V", resolution=slack if slack.any() else None)


def _open_gain(four: Sequence[Curve], reference: Sequence[float], ports: PortPair) -> tuple[Complex, Float]:
    """The response of the open output by the four curves of S, and how far off it may be."""
    s11, s21, s12, s22 = (np.asarray(curve.values, np.complex128) for curve in four)
    r1, r2 = reference
    is_voltage = ports.driving.kind == "V"
    up = 2 * ports.sign * (np.sqrt(r2 / r1) if is_voltage else np.sqrt(r1 * r2))
    turn = 1 if is_voltage else -1
    with np.errstate(all="ignore"):
        below = (1 + turn * s11) * (1 - s22) + turn * s12 * s21
        gain = up * s21 / below
        slopes = (
            -turn * gain * (1 - s22) / below,
            (up - turn * gain * s12) / below,
            -turn * gain * s21 / below,
            gain * (1 + turn * s11) / below,
        )
    slack = np.zeros(len(gain))
    for slope, curve in zip(slopes, four, strict=True):
        if curve.resolution is not None:
            slack += np.abs(slope) * curve.resolution
    return gain, slack


def _reference(curves: Curves) -> tuple[float, ...]:
    if curves.ports is None:
        raise ResultsError(
            "the results say nothing of ports and their reference resistances.",
            file=curves.source,
            remedy="Give a Touchstone file.",
        )
    return curves.ports.reference


def _no_output(source: str | None = None) -> ResultsError:
    return ResultsError(
        "port 2 is the circuit's output, and the circuit names none.",
        file=source,
        remedy="Name the output in the circuit, or measure one port.",
    )


@dataclass(frozen=True, slots=True)
class _Closed:
    """A network whose ports are closed; `pairs` are its ports, `sign` that of the emf at the driven one."""

    network: Network
    pairs: list[tuple[str, str]]
    sign: int


def _closed(circuit: Circuit, reference: Sequence[float], driven: int) -> _Closed:
    """The network with each port closed by an emf behind its resistance, 1 V at port `driven`.

    The driving source itself becomes the emf of port 1 where it is a voltage source, for others may be
    controlled by its current. All other independent sources are dead.
    """
    ports, network = ports_of(circuit), circuit.network
    if len(reference) > 1 and ports.two is None:
        raise _no_output()
    pairs = [pair for pair in (ports.one, ports.two)[: len(reference)] if pair is not None]
    closed = Network(network.title)
    for part in network.parts:
        if part.name in network.sources:
            if part.name != ports.driving.name:
                closed.add_source(replace(network.sources[part.name], ac=None))
        else:
            closed.add_part(part)
    taken = {*network.nodes, *network.names}
    is_own = ports.driving.kind == "V"
    for port, ((hot, cold), ohms) in enumerate(zip(pairs, reference, strict=True)):
        inner, resistor, emf = (_fresh(f"{letter}port{port + 1}", taken) for letter in ("", "R", "V"))
        closed.add_resistor(resistor, inner, hot, ohms)
        own = port == 0 and is_own
        nodes = (cold, inner) if own and ports.sign < 0 else (inner, cold)
        name = ports.driving.name if own else emf
        closed.add_source(Source(name, nodes, ac=1.0 if port == driven else None))
    return _Closed(closed, pairs, ports.sign if driven == 0 and is_own else 1)


def _fresh(name: str, taken: set[str]) -> str:
    while name in taken:
        name += "_"
    taken.add(name)
    return name


def _s(network: Network, frequency: Float) -> Complex:
    s = np.asarray(2j * np.pi * frequency, np.complex128)
    if not frequency.all() and not dc_solvable(network):
        s[frequency == 0] = span_of(network).far_below
    return s
