"""A comparison with the causes of its differences."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ..circuit import Circuit, Network
from ..netlist import as_written
from ..values import format_quantity
from .cause_words import said_of_curves, unexplained_said
from .causes import ENOUGH, Cause, find_causes
from .evidence import Evidence, Observed, evidence_of
from .records import Comparison, CurveComparison
from .trials import within

_ZERO_CELSIUS = 273.15
_HOTTEST = 1500.0  # K


def explained(comparison: Comparison) -> Comparison:
    """The same comparison with its causes; () where it agrees, and where transients alone differ.

    Causes are looked for in ac curves and operating points, and where they agree, in the noise spectra.
    """
    circuit = as_written(comparison.circuit)
    steady = _observed(circuit.network, comparison, ("ac", "operating point"))
    if any(curve.differs for curve in steady):
        return replace(comparison, causes=find_causes(circuit, steady))
    noise = _observed(circuit.network, comparison, ("noise",))
    if any(curve.differs for curve in noise):
        return replace(comparison, causes=noise_causes(circuit, noise))
    return comparison


def _observed(network: Network, comparison: Comparison, analyses: tuple[str, ...]) -> list[Observed]:
    found = (curve for curve in comparison.curves if curve.analysis in analyses)
    return [seen for curve in found if (seen := _of(network, curve)) is not None]


def _of(network: Network, curve: CurveComparison) -> Observed | None:
    numbers = curve.held
    if numbers is None or (curve.analysis == "noise" and curve.single):
        return None
    if curve.analysis != "noise" and numbers.source is None and numbers.nodes[0] == numbers.nodes[1]:
        return None  # neither a voltage nor a current of the network, as an S-parameter
    source = None if numbers.source is None else network.names[numbers.source]
    nodes = () if source is not None else tuple(network.nodes[node] for node in numbers.nodes)
    return Observed(
        curve.name, curve.analysis, numbers.axis, nodes, source, numbers.exact, numbers.other, numbers.allowed
    )


def noise_causes(circuit: Circuit, observed: list[Observed]) -> tuple[Cause, ...]:
    """Why noise spectra differ: another temperature, which scales all alike, or densities squared.

    All resistors share a temperature T, so each spectrum goes with sqrt(T) (H. Nyquist, Phys. Rev. 32:110,
    1928).
    """
    evidence = evidence_of(observed)
    exact, other = evidence.exact.real, evidence.other.real
    scale = float(np.sum(evidence.weight * exact * other) / np.sum(evidence.weight * exact**2))
    sound = circuit.conditions.nominal + _ZERO_CELSIUS
    kelvin = sound * scale**2
    what = (
        f"The noise is that of resistors at {kelvin - _ZERO_CELSIUS:.4g} degrees Celsius; those of the "
        f"circuit are at {format_quantity(circuit.conditions.nominal)}."
    )
    squared = "Every spectrum is the square of the exact one: a density in V^2/Hz where V/sqrt(Hz) is meant."
    found = [_judged(evidence, Cause("units", None, None, squared, 0.0), exact**2)]
    if scale > 0 and kelvin < _HOTTEST:
        cause = Cause("temperature", None, None, what, 0.0, amount=kelvin - sound, unit="K")
        found.append(_judged(evidence, cause, scale * exact))
    best = max(found, key=lambda cause: (cause.fits, cause.explains))
    if best.fits or best.explains >= ENOUGH:
        return (best,)
    says = unexplained_said(best.explains, everywhere=True)
    return (Cause("unexplained", None, None, says, best.explains),)


def _judged(
    evidence: Evidence, cause: Cause, predicted: np.ndarray[tuple[int], np.dtype[np.float64]]
) -> Cause:
    curves = predicted.astype(np.complex128)
    explains = evidence.explained(curves)
    _, fits = within(np.abs(evidence.other - curves), evidence.allowed)
    return replace(
        cause, explains=explains, fits=fits, says=f"{cause.says} {said_of_curves(explains, fits=fits)}"
    )
