"""Noise held against the exact density, at the simulator's own frequencies, and its totals in a band."""

from __future__ import annotations

import contextlib
import math
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit
from ..curves import Curve, Curves
from ..errors import ResultsError, UndecidedError, UnsolvableError
from ..exact import Drive, noise, noise_shares, require_solvable, solver_for, total_noise
from .allowance import rounding_allowance
from .granted import NOTHING, Grant
from .judging import judged
from .noise_allowance import CONSTANTS, LEAST_GAIN, density_rounding, power_law_area
from .records import CurveComparison, Float, Uncompared
from .targets import TOTALS, Target

Pair = tuple[Curve, Target]

KELVIN = 273.15
_MOST_SHARED = 20_000_000  # numbers: frequencies by resistors
_GAUSS, _MOST_GAUSSED = 10, 4000  # points in each interval of a band, and intervals that get as many


def compared_noise(
    circuit: Circuit, group: Sequence[Pair], curves: Curves, grant: Grant = NOTHING
) -> tuple[list[CurveComparison], list[Uncompared]]:
    """Spectra at the same frequencies, or totals, and what has no exact counterpart."""
    require_solvable(circuit.network)
    network_noise = _Noise(circuit, curves)
    found: list[CurveComparison] = []
    left: list[Uncompared] = []
    for curve, target in group:
        try:
            found.append(network_noise.compared(curve, target, grant))
        except (UndecidedError, UnsolvableError) as exc:
            left.append(Uncompared(curve.name, "noise", exc.problems[0].message))
    return found, left


class _Noise:
    """The noise of one circuit, with what was computed for one set of frequencies kept for the next curve."""

    def __init__(self, circuit: Circuit, curves: Curves) -> None:
        self.network = circuit.network
        self.source = curves.source
        self.temperature = circuit.conditions.nominal + KELVIN
        self.of = " ".join(circuit.output)
        self.spectrum = next((c for c in curves.of("noise") if len(c) > 1), None)
        self.driving = [name for name, source in self.network.sources.items() if source.ac]
        self._shares: tuple[bytes, dict[str, Float]] | None = None
        self._density: tuple[bytes, Float] | None = None

    def compared(self, curve: Curve, target: Target, grant: Grant) -> CurveComparison:
        """One curve. Raises UndecidedError where there is no exact one."""
        if target.kind in TOTALS:
            return self._total(curve, target, grant)
        exact_at = self._exact_at(target)
        exact = exact_at(curve.axis)
        allowed = CONSTANTS * exact + self._rounding(curve.axis, target)
        values, slack = self._densities(curve)
        if slack is not None:
            allowed = allowed + 2 * slack
        if curve.axis_resolution is not None:
            ends = [
                np.maximum(curve.axis - curve.axis_resolution, curve.axis * 1e-3),
                curve.axis + curve.axis_resolution,
            ]
            allowed = allowed + np.maximum(*(np.abs(exact_at(end) - exact) for end in ends))
        unit = self._input_unit() if target.kind == "input noise" else "V/sqrt(Hz)"
        return judged(
            target, "noise", curve.axis, exact, values, allowed, unit=unit, grant=grant, exact_at=exact_at
        )

    def _densities(self, curve: Curve) -> tuple[Float, Float | None]:
        """The file's values as densities: the root where its unit is a power's. Raises ResultsError."""
        values, slack = np.asarray(curve.values.real, dtype=np.float64), curve.resolution
        if (values < 0).any():
            raise ResultsError(
                f"{curve.name} holds a noise below zero, {values[values < 0][0]:g}.",
                file=self.source,
                remedy="Run the simulation again; its results are not to be believed.",
            )
        if "^2" not in curve.unit:
            return values, slack
        root = np.sqrt(values)
        if slack is not None:
            slack = np.sqrt(values + slack) - root
        return root, slack

    # ------------------------------------------------------------------ exact densities

    def _exact_at(self, target: Target) -> Callable[[Float], Float]:
        if target.kind == "share":
            assert target.source is not None
            name = self.network.names[target.source]
            return lambda f: np.sqrt(self._shares_at(f)[name])
        if target.kind == "input noise":
            self._require_one_source()
            return lambda f: self._through(self._output(f), f)
        return self._output

    def _output(self, frequency: Float) -> Float:
        mark = frequency.tobytes()
        if self._density is None or self._density[0] != mark:
            found = noise(self.network, frequency, self.of, temperature=self.temperature)
            self._density = mark, found
        return self._density[1]

    def _shares_at(self, frequency: Float) -> dict[str, Float]:
        mark = frequency.tobytes()
        if self._shares is None or self._shares[0] != mark:
            resistors = sum(part.kind == "R" for part in self.network.parts)
            if resistors * len(frequency) > _MOST_SHARED:
                raise UndecidedError("so many resistors have no shares compared at so many frequencies.")
            found = noise_shares(self.network, frequency, self.of, temperature=self.temperature)
            self._shares = mark, found
        return self._shares[1]

    def _require_one_source(self) -> None:
        if len(self.driving) != 1:
            raise UndecidedError(
                "not just one source carries ac, so where the noise is referred to is not known."
            )

    def _input_unit(self) -> str:
        return "A/sqrt(Hz)" if self.driving[0][:1].upper() == "I" else "V/sqrt(Hz)"

    def _gain(self, frequency: Float) -> Float:
        """The magnitude of the output per unit of the one source that carries ac, (frequencies,)."""
        drive = self._drive()
        solver = solver_for(self.network)
        step, ends = solver.block(), [self.network.node_index(node) for node in self.of.split()]
        answer = np.empty(len(frequency))
        for start in range(0, len(frequency), step):
            part = slice(start, start + step)
            voltages = solver.solve(2j * math.pi * frequency[part], Drive(drive)).voltages
            answer[part] = np.abs(voltages[ends[0]] - (voltages[ends[1]] if len(ends) > 1 else 0.0))
        return answer

    def _drive(self) -> npt.NDArray[np.complex128]:
        drive = np.zeros(len(self.network), dtype=np.complex128)
        drive[self.network.part_index(self.driving[0])] = 1.0
        return drive

    def _through(self, density: Float, frequency: Float) -> Float:
        gain = self._gain(frequency)
        if not gain.all():
            raise UndecidedError("the source does not reach the output, so no noise can be referred to it.")
        return np.asarray(density / gain)

    # ------------------------------------------------------------------ allowances

    def _rounding(self, frequency: Float, target: Target) -> Float:
        ends = [self.network.node_index(node) for node in self.of.split()]
        moved = density_rounding(
            self.network, frequency, (ends[0], ends[1] if len(ends) > 1 else 0), self.temperature
        )
        if target.kind != "input noise":
            return moved(self._output(frequency))
        gain, output = self._gain(frequency), self._output(frequency)
        share = self._gain_rounding(frequency, (ends[0], ends[1] if len(ends) > 1 else 0)) / gain
        with np.errstate(divide="ignore", invalid="ignore"):
            off = np.where(share < 1, share / (1 - share), np.inf)
        held = np.where(gain < LEAST_GAIN, output / gain - output / LEAST_GAIN, 0.0)
        return np.asarray(moved(output) / gain + off * output / gain + held)

    def _gain_rounding(self, frequency: Float, ends: tuple[int, int]) -> Float:
        rows = [node - 1 for node in ends if node]
        bound = rounding_allowance(self.network, 2j * math.pi * frequency, self._drive(), rows)
        return np.asarray(bound.sum(axis=0))

    # ------------------------------------------------------------------ totals

    def _total(self, curve: Curve, target: Target, grant: Grant) -> CurveComparison:
        if self.spectrum is None:
            raise UndecidedError("the results hold no spectrum that would tell the band of the total.")
        axis = self.spectrum.axis
        referred = target.kind == "input total"
        if referred:
            self._require_one_source()
        exact = math.sqrt(self._input_area(axis)) if referred else self._band(axis)
        predicted = self._predicted(axis, referred=referred)
        allowed = CONSTANTS * exact + 1.25 * max(abs(each - exact) for each in predicted) + 1e-9 * exact
        values, slack = self._densities(_as_power(curve, self.spectrum))
        if slack is not None:
            allowed += 2 * float(slack[0])
        return judged(
            target,
            "noise",
            np.zeros(1),
            np.array([exact]),
            values,
            np.array([allowed]),
            unit=self._input_unit().partition("/")[0] if referred else "V",
            grant=grant,
        )

    def _band(self, axis: Float) -> float:
        band = float(axis[0]), float(axis[-1])
        return total_noise(self.network, self.of, *band, temperature=self.temperature)

    def _input_area(self, axis: Float) -> float:
        """The area under the squared density referred to the input, by Gauss's rule in each interval."""
        count = _GAUSS if len(axis) <= _MOST_GAUSSED else 2
        place, weight = np.polynomial.legendre.leggauss(count)
        middle, half = (axis[1:] + axis[:-1]) / 2, np.diff(axis) / 2
        points = (middle[:, None] + half[:, None] * place).ravel()
        square = self._through(self._output(points), points) ** 2
        return float((half[:, None] * weight * square.reshape(-1, count)).sum())

    def _predicted(self, axis: Float, *, referred: bool) -> list[float]:
        """The totals where points are joined by powers of frequency: as a whole, and by resistor."""
        factor = np.ones(len(axis))
        if referred:
            factor = 1 / np.maximum(self._gain(axis), LEAST_GAIN) ** 2
        densities = [[self._output(axis) ** 2]]
        with contextlib.suppress(UndecidedError):
            densities.append(list(self._shares_at(axis).values()))
        return [
            math.sqrt(sum(power_law_area(axis, density, factor, late=late) for density in each))
            for each in densities
            for late in ((False, True) if referred else (False,))
        ]


def _as_power(curve: Curve, spectrum: Curve) -> Curve:
    """A total without a unit, as ngspice writes squares, beside a spectrum that is one."""
    return replace(curve, unit="V^2") if "^2" in spectrum.unit and not curve.unit else curve
