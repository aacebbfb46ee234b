"""Thermal noise: its density at an output, each resistor's share, and its rms value in a band.

Every resistor at temperature T carries a noise current of density 4 k T / R (H. Nyquist, Phys. Rev.
32:110-113, 1928). One solution of the transposed equations gives the way of all of them to the output (R.
Rohrer, L. Nagel, R. Meyer, L. Weber, IEEE J. Solid-State Circuits SC-6(4):204-213, 1971).
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from ..circuit import Network
from ..errors import CircuitError, UndecidedError
from .ac import dc_solvable, natural_frequencies, node_pair
from .adjoint import Equations, block_of, unit_output
from .quadrature import Panel, integrate
from .solver import require_solvable
from .span import Span, span_of

BOLTZMANN = 1.380649e-23  # J/K, exact (BIPM, The International System of Units, 9th edition, 2019)
ROOM = 300.15  # K, 27 degrees Celsius

Float = npt.NDArray[np.float64]
Pair = tuple[int, int]


def noise(
    network: Network, frequency: npt.ArrayLike, of: str, *, temperature: float = ROOM
) -> npt.NDArray[np.float64]:
    """The density of the thermal noise voltage at a node or a pair `"a b"`, V/sqrt(Hz), (frequencies,).

    frequency: Hz; zero means the limit; temperature: kelvin. All independent sources are dead. Raises
    UndecidedError where the density is infinite at zero frequency.
    """
    pair, omega = _prepared(network, frequency, of, temperature)
    shares = _resistances(network, omega, pair).sum(axis=0)
    return np.asarray(np.sqrt(4 * BOLTZMANN * temperature * shares))


def noise_shares(
    network: Network, frequency: npt.ArrayLike, of: str, *, temperature: float = ROOM
) -> dict[str, npt.NDArray[np.float64]]:
    """What each resistor contributes to the square of the noise density, V^2/Hz, (frequencies,) by name."""
    pair, omega = _prepared(network, frequency, of, temperature)
    shares = 4 * BOLTZMANN * temperature * _resistances(network, omega, pair)
    names = network.names
    return {names[row]: shares[k] for k, row in enumerate(_resistors(network))}


def total_noise(
    network: Network, of: str, start: float = 0.0, stop: float = math.inf, *, temperature: float = ROOM
) -> float:
    """The rms thermal noise voltage in a band, V; start and stop in Hz, zero and `inf` allowed.

    The whole band of an RC network has a closed form: k T (lim s Z at infinity - lim s Z at zero), Z the
    impedance at the output (H. W. Bode, Network Analysis and Feedback Amplifier Design, 1945, resistance
    integral). Else the density is integrated to about 1e-11. Raises UndecidedError where the noise is
    infinite: a resistive output up to infinite frequency, a pole at zero, a network that is not stable.
    """
    pair, _ = _prepared(network, 1.0, of, temperature)
    if not 0 <= start < stop:
        raise CircuitError(
            f"the noise band from {start!r} Hz to {stop!r} Hz is empty.",
            remedy="Give two frequencies from zero up, the lower one first.",
        )
    area = _closed(network, pair) if start == 0 and stop == math.inf else None
    if area is None:
        area = _integral(network, pair, 2 * math.pi * start, 2 * math.pi * stop) / (2 * math.pi)
    return math.sqrt(4 * BOLTZMANN * temperature * area)


def _prepared(network: Network, frequency: npt.ArrayLike, of: str, temperature: float) -> tuple[Pair, Float]:
    require_solvable(network)
    if not 0 <= temperature < math.inf:
        raise CircuitError(f"the temperature is {temperature!r} K.", remedy="Give kelvin, zero or more.")
    try:
        points = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
    except (TypeError, ValueError) as exc:
        raise CircuitError(f"the frequencies are not numbers: {exc}.", remedy="Give hertz.") from exc
    if points.ndim != 1 or not np.isfinite(points).all() or (points < 0).any():
        raise CircuitError(
            "the frequencies are no list of finite numbers from zero up.", remedy="Give hertz."
        )
    pair = node_pair(network, of)
    omega = 2 * math.pi * points
    if not omega.all() and not dc_solvable(network):
        _refuse_infinite_at_zero(network, pair)
        # The density is even in omega: so far below every mode it is the limit to 1e-18.
        omega = np.maximum(omega, 1e-9 * span_of(network).low)
    return pair, omega


def _resistors(network: Network) -> list[int]:
    return [int(row) for row in np.flatnonzero(network.arrays().kinds == ord("R"))]


def _resistances(network: Network, omega: Float, of: Pair, *, cut: bool = False) -> Float:
    """Each resistor's noise as the resistance at the output that makes as much, ohm, (resistors, points).

    With `cut`, what may be nothing but the rounding of two equal voltages counts as zero.
    """
    arrays, rows = network.arrays(), _resistors(network)
    answer = np.zeros((len(rows), len(omega)))
    step = block_of(network)
    for start in range(0, len(omega) if rows else 0, step):
        s = np.asarray(1j * omega[start : start + step], dtype=np.complex128)
        field = Equations(network, s).transposed(unit_output(network, of, len(s)))
        ends = arrays.nodes[rows, 0], arrays.nodes[rows, 1]
        across = np.abs(field.across(*ends))
        if cut:
            across[across <= 64 * np.finfo(float).eps * field.size(*ends)] = 0.0
        answer[:, start : start + step] = across**2 / arrays.values[rows][:, None]
    return answer


# ---------------------------------------------------------------------- bands


def _closed(network: Network, of: Pair) -> float | None:
    """The whole band's area, ohm hertz, of an RC network; None where it has no closed form good enough."""
    if set(network.arrays().kinds.tolist()) - {ord(letter) for letter in "RCVI"}:
        return None
    span = span_of(network)
    s = np.array([span.far_below, span.far_above, 1e4 * span.far_above], dtype=np.complex128)
    output = unit_output(network, of, len(s))
    impedance = Equations(network, s).transposed(output).across(of[0], of[1]).real
    at_zero, near, far = (impedance * s.real).tolist()
    if far > 10 * near:
        raise _infinite_above()
    # With nearly all of it kept from dc by capacitors, the difference has few digits left.
    return (near - at_zero) / 4 if near - at_zero > 1e-3 * near else None


def _integral(network: Network, of: Pair, low: float, high: float) -> float:
    """The area under the noise resistance between two angular frequencies, ohm rad/s."""
    if not _resistors(network):
        return 0.0
    _refuse_unstable(network)
    span = span_of(network)
    below, above = span.low / 2, 2 * span.high
    if low == 0:
        _refuse_infinite_at_zero(network, of)
    if high == math.inf:
        _refuse_infinite_above(network, of, span)

    def direct(omega: Float) -> Float:
        return np.asarray(_resistances(network, omega, of).sum(axis=0))

    def tail(omega: Float) -> Float:
        return np.asarray(_resistances(network, omega, of, cut=True).sum(axis=0))

    panels = [Panel(direct, low, min(high, below))] if low < below else []
    bottom, top = max(low, below), min(high, above)
    if bottom < top:
        edges = _edges(network, math.log(bottom), math.log(top))
        log_area = _in_logarithm(direct)
        panels += [Panel(log_area, a, b) for a, b in itertools.pairwise(edges)]
    if high > above:
        panels.append(Panel(_in_reciprocal(tail), 1 / high, 1 / max(low, above)))
    return integrate(panels, "the noise")


def _in_logarithm(density: Callable[[Float], Float]) -> Callable[[Float], Float]:
    return lambda x: np.asarray(density(np.exp(x)) * np.exp(x))


def _in_reciprocal(density: Callable[[Float], Float]) -> Callable[[Float], Float]:
    """The tail to infinity over u = 1/omega, where the density is a power series in u^2."""
    return lambda u: np.asarray(density(1 / u) / u**2)


def _edges(network: Network, low: float, high: float) -> list[float]:
    """Where panels meet, in ln omega: once a decade, and at every resonance."""
    count = max(1, math.ceil((high - low) / math.log(10)))
    edges = set(np.linspace(low, high, count + 1).tolist())
    if set(network.arrays().kinds.tolist()) & {ord(letter) for letter in "LEGFH"}:
        for pole in natural_frequencies(network):
            if abs(pole.imag) > 1e-3 * abs(pole):
                edges |= {math.log(abs(pole.imag) * (1 + k * abs(pole.real / pole.imag))) for k in (0.0, 3.0)}
                edges.add(math.log(abs(pole.imag)) - 3 * abs(pole.real / pole.imag))
    return [low, *sorted(x for x in edges if low < x < high), high]


def _refuse_unstable(network: Network) -> None:
    if not set(network.arrays().kinds.tolist()) & {ord(letter) for letter in "EGFH"}:
        return
    for pole in natural_frequencies(network):
        if pole.real > 1e-6 * abs(pole):
            raise UndecidedError("the network is not stable, so its noise grows without end.")


def _refuse_infinite_at_zero(network: Network, of: Pair) -> None:
    """Raise UndecidedError where the density has a pole at zero."""
    low = span_of(network).low
    near, further = _resistances(network, np.array([1e-3 * low, 1e-5 * low]), of).sum(axis=0).tolist()
    if further > 100 * near > 0:
        raise UndecidedError(
            "the noise density grows without bound towards zero frequency.",
            remedy="Let the band begin above zero.",
        )


def _refuse_infinite_above(network: Network, of: Pair, span: Span) -> None:
    points = np.array([1e3 * span.high, 1e5 * span.high])
    near, further = _resistances(network, points, of, cut=True).sum(axis=0).tolist()
    if further > 0.01 * near > 0:
        raise _infinite_above()


def _infinite_above() -> UndecidedError:
    return UndecidedError(
        "the output stays resistive however high the frequency, so its noise up to infinity is infinite.",
        remedy="Let the band end at a finite frequency, or add the capacitance the output really has.",
    )
