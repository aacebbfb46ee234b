"""What share of the circuits built meets a claim: many quasi-random samples of the part values."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from ..circuit import Circuit, Claim, Network
from ..errors import CircuitError, UndecidedError
from ..values import Tolerance
from .box import box_of, drift
from .measures import evaluate
from .question import KELVIN, Question, options_at

Float = npt.NDArray[np.float64]
Distribution = Literal["uniform", "normal"]

SCRAMBLINGS = 16
MOST_SAMPLES = 1 << 24
_CHUNK = 1 << 16
_CUT = 3.0  # standard deviations at which a normal distribution is cut: the tolerance itself
_CONFIDENCE = 0.95


@dataclass(frozen=True)
class SampleResult:
    """What came of sampling.

    count: samples taken, `SCRAMBLINGS` times a power of two; met: how many meet the claim
    values: (count,), the measure of each in its unit, nan where it does not exist; undefined: how many those
        are (they do not meet the claim)
    interval: bounds on the true yield with 95 % confidence, for `count` independent samples (C. Clopper,
        E. Pearson, Biometrika 26:404-413, 1934); quasi-random samples scatter less, so that it is wide
    scatter: the same from how much the independent scramblings differ (Student's t over the means of
        randomised nets, A. Owen, SIAM J. Numer. Anal. 34:1884-1910, 1997); equal to `interval` where they do
        not differ at all, from which nothing can be told
    """

    count: int
    met: int
    undefined: int
    interval: tuple[float, float]
    scatter: tuple[float, float]
    values: Float

    @property
    def yield_(self) -> float:
        """The share of the samples that meets the claim."""
        return self.met / self.count

    def quantile(self, share: float) -> float:
        """The value below which a share of the samples with a number lies. Raises UndecidedError for none."""
        known = self.values[~np.isnan(self.values)]
        if not len(known):
            raise UndecidedError("the measure exists for none of the samples.")
        return float(np.quantile(known, share))


def sample(
    circuit: Circuit,
    claim: Claim,
    count: int = 1 << 16,
    seed: int = 1,
    *,
    distribution: Distribution | Mapping[str, Distribution] = "uniform",
) -> SampleResult:
    """The yield of a claim over the tolerances, by scrambled Sobol points.

    count: how many samples, rounded up to `SCRAMBLINGS` times a power of two; seed: of the scramblings
    distribution: of the values within each tolerance, one for all or by part name (uniform where a part is
        not named). "uniform"; or "normal", of which the tolerance is three standard deviations and beyond
        which it is cut, each side of an unsymmetrical one with its own
    A part drifts with temperature as `box_of` says, evenly within its limits; noise is taken at temperatures
    spread evenly over the circuit's. A sample whose measure does not exist does not meet the claim. Raises
    UndecidedError where the measure does not exist at the nominal values, CircuitError for a wrong count.
    """
    if not 1 <= count <= MOST_SAMPLES:
        raise CircuitError(f"{count!r} samples were asked for.", remedy=f"Ask for 1 to {MOST_SAMPLES}.")
    spreads = _Spreads(circuit, distribution, by_temperature=claim.measure.name == "noise")
    measured = _measured(circuit, claim, spreads)
    each = 1 << max(0, math.ceil(math.log2(count / SCRAMBLINGS)))
    values = np.empty(SCRAMBLINGS * each)
    for number in range(SCRAMBLINGS):
        for start, points in _points(spreads.dimensions, each, (seed, number)):
            place = number * each + start
            values[place : place + len(points)] = measured(points)
    return _result(values, claim)


def _result(values: Float, claim: Claim) -> SampleResult:
    known = ~np.isnan(values)
    meets = known & (values >= claim.bound.low) & (values <= claim.bound.high)
    met = int(meets.sum())
    interval = clopper_pearson(met, len(values))
    scatter = _scatter(meets.reshape(SCRAMBLINGS, -1).mean(axis=1)) or interval
    return SampleResult(len(values), met, int((~known).sum()), interval, scatter, values)


def clopper_pearson(met: int, count: int, confidence: float = _CONFIDENCE) -> tuple[float, float]:
    """The exact interval of a share (C. Clopper, E. Pearson, Biometrika 26:404-413, 1934)."""
    from scipy.special import betaincinv

    tail = (1 - confidence) / 2
    low = 0.0 if met == 0 else float(betaincinv(met, count - met + 1, tail))
    high = 1.0 if met == count else float(betaincinv(met + 1, count - met, 1 - tail))
    return low, high


def _scatter(shares: Float) -> tuple[float, float] | None:
    """Student's interval of the mean of independent estimates; None where they are all alike."""
    from scipy.special import stdtrit

    error = float(shares.std(ddof=1)) / math.sqrt(len(shares))
    if error == 0:
        return None
    reach = float(stdtrit(len(shares) - 1, (1 + _CONFIDENCE) / 2)) * error
    middle = float(shares.mean())
    return max(0.0, middle - reach), min(1.0, middle + reach)


def _points(dimensions: int, count: int, seed: tuple[int, int]) -> Iterator[tuple[int, Float]]:
    """Points of one scrambled Sobol sequence (I. Sobol, 1967; A. Owen, J. Complexity 14:466-489, 1998), piece
    by piece: where a piece starts, and (points, dimensions).
    """
    from scipy.stats import qmc

    generator = np.random.default_rng(seed)
    try:
        sequence = qmc.Sobol(dimensions, scramble=True, rng=generator)
    except TypeError:  # SciPy before 1.15
        sequence = qmc.Sobol(dimensions, scramble=True, seed=generator)
    for start in range(0, count, _CHUNK):
        yield start, sequence.random(min(_CHUNK, count - start))


class _Spreads:
    """How points of the unit cube become part values: a coordinate for each tolerance, drift, temperature."""

    def __init__(
        self,
        circuit: Circuit,
        distribution: Distribution | Mapping[str, Distribution],
        *,
        by_temperature: bool,
    ) -> None:
        conditions = circuit.conditions
        box = box_of(circuit.network, conditions)  # refuses what could fall to zero
        self.shapes = distribution
        self._check(circuit.network)
        self.names, self.nominal = list(box.names), box.nominal
        parts = [circuit.network.part(name) for name in box.names]
        self.tolerances = [(part.name, part.tolerance) for part in parts if part.tolerance is not None]
        moved = [(part.name, drift(part, conditions)) for part in parts]
        self.drifts = [(name, share) for name, share in moved if share > 0]
        self.celsius = (conditions.low, conditions.high) if by_temperature else None
        self.dimensions = max(1, len(self.tolerances) + len(self.drifts) + (self.celsius is not None))

    def _check(self, network: Network) -> None:
        given = [self.shapes] if isinstance(self.shapes, str) else list(self.shapes.values())
        for shape in given:
            if shape not in ("uniform", "normal"):
                raise CircuitError(
                    f"there is no distribution called {shape!r}.", remedy='Write "uniform" or "normal".'
                )
        for name in () if isinstance(self.shapes, str) else self.shapes:
            network.part(name)

    def values(self, points: Float) -> Float:
        """Part values (points, names), base units."""
        factors = np.ones((len(points), len(self.names)))
        column = {name: k for k, name in enumerate(self.names)}
        for k, (name, tolerance) in enumerate(self.tolerances):
            shape = self.shapes if isinstance(self.shapes, str) else self.shapes.get(name, "uniform")
            place = _normal if shape == "normal" else _uniform
            factors[:, column[name]] *= 1 + place(points[:, k], tolerance)
        for k, (name, share) in enumerate(self.drifts, len(self.tolerances)):
            factors[:, column[name]] *= 1 + share * (2 * points[:, k] - 1)
        return np.asarray(self.nominal * factors)

    def warmth(self, points: Float) -> Float | None:
        """Temperatures, (points,), K; None where they do not matter."""
        if self.celsius is None:
            return None
        low, high = self.celsius
        return np.asarray(low + (high - low) * points[:, self.dimensions - 1] + KELVIN)


def _uniform(points: Float, tolerance: Tolerance) -> Float:
    return np.asarray(tolerance.low + (tolerance.high - tolerance.low) * points)


def _normal(points: Float, tolerance: Tolerance) -> Float:
    """Deviations of a normal distribution with its own spread on each side, cut at the tolerance."""
    from scipy.special import ndtr, ndtri

    below, above = -tolerance.low / _CUT, tolerance.high / _CUT
    if below + above == 0:
        return np.zeros(len(points))
    cut, left = float(ndtr(-_CUT)), below / (below + above)
    # The halves join at the same height where each has a share in proportion to its spread.
    under = points < left
    share = np.where(under, points / (left or 1.0), (points - left) / ((1 - left) or 1.0))
    rank = np.where(under, cut + share * (0.5 - cut), 0.5 + share * (0.5 - cut))
    return np.asarray(np.clip(ndtri(rank), -_CUT, _CUT) * np.where(under, below, above))


def _measured(circuit: Circuit, claim: Claim, spreads: _Spreads) -> Callable[[Float], Float]:
    """The measure of each of some points of the unit cube, nan where it does not exist."""
    network, of, measure = circuit.network, " ".join(claim.of) or None, claim.measure.name
    options = options_at(measure, claim.options, circuit.conditions.nominal)
    evaluate(network, measure, of, options)  # refuses what does not exist even at the nominal values

    def one_by_one(values: Float) -> Float:
        found = np.full(len(values), np.nan)
        for k, row in enumerate(values):
            try:
                changed = network.with_values(dict(zip(spreads.names, row.tolist(), strict=True)))
                found[k] = evaluate(changed, measure, of, options)
            except UndecidedError:
                continue
        return found

    together = Question.of(circuit, claim).together

    def measured(points: Float) -> Float:
        found = (together or one_by_one)(spreads.values(points))
        if together is not None:
            unsure = np.isnan(found)
            found[unsure] = one_by_one(spreads.values(points[unsure]))
        warm = spreads.warmth(points)
        return found if warm is None else found * np.sqrt(warm / (circuit.conditions.nominal + KELVIN))

    return measured


__all__ = ["SCRAMBLINGS", "Distribution", "SampleResult", "clopper_pearson", "sample"]
