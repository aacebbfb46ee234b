"""One measure of one circuit over the box of its tolerances: both ends, and the part behind them."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
import numpy.typing as npt

from ..circuit import KINDS, Bound, Circuit, Claim, Conditions
from ..errors import UndecidedError
from ..values import format_quantity
from .box import Box, box_of
from .many import Measured, many
from .measures import COMPUTED, evaluate
from .monotone import Directions, directions
from .search import Effort, Extremes, extremes, spread
from .sensitivities import sensitivity

Float = npt.NDArray[np.float64]
Options = Mapping[str, float | str]
About = Claim | tuple[str, str | None, Options]

KELVIN = 273.15
# A measure of many samples at once costs microseconds apiece, one by one some milliseconds.
_TOGETHER = Effort(corners=10, samples=2048, climbers=4, rounds=100)
_ONE_BY_ONE = Effort(corners=4, samples=96, climbers=1, rounds=12)
_MOST_SEARCHED = 200  # parts that are moved one at a time; beyond, the slopes alone lead
_AGREES = 1e-6  # how near the measures of many must lie to the exact one
_CHECKED = 6  # samples at which that is looked at
_MOST_UNSURE = 64  # samples without a number that are asked for one by one
_SLOPE_STEPS = 6
_MOST_BLAMED = 24  # parts of which it is asked one by one what they contribute


def options_at(measure: str, options: Options, celsius: float) -> Options:
    """A measure's options at a temperature; only noise asks for one, in kelvin."""
    return {**options, "temperature": celsius + KELVIN} if measure == "noise" else options


def values_text(circuit: Circuit, values: Mapping[str, float], most: int = 8) -> str:
    """Part values for people: `R1 = 4.747 kohm, C1 = 9.5 nF`; of many parts the first few."""
    told = []
    for name, value in list(values.items())[:most]:
        if name == "temperature":
            told.append(f"{value:g} °C")
        else:
            told.append(f"{name} = {format_quantity(value, KINDS[circuit.network.part(name).kind].unit)}")
    more = len(values) - most
    return ", ".join(told) + (f" and {more} more" if more > 0 else "")


@dataclass(frozen=True, slots=True)
class Ends:
    """Both ends with their places in the box."""

    low: float
    high: float
    low_at: Float
    high_at: Float
    method: Literal["proven", "searched"]

    def margin(self, bound: Bound) -> float:
        """How far inside a bound the worse end lies; negative outside."""
        return min(self.low - bound.low, bound.high - self.high)


@dataclass(frozen=True)
class Question:
    """One measure of one circuit over one box."""

    circuit: Circuit
    measure: str
    output: str | None
    options: Options
    box: Box
    conditions: Conditions

    @classmethod
    def of(cls, circuit: Circuit, about: About) -> Question:
        """The question a claim asks, or a measure's name, output and options."""
        if isinstance(about, Claim):
            measure, output, options = about.measure.name, " ".join(about.of) or None, about.options
        else:
            measure, output, options = about
        box = box_of(circuit.network, circuit.conditions)
        return cls(circuit, measure, output, options, box, circuit.conditions)

    def narrowed(self, part: str, share: float) -> Question:
        """The same with only a share of one part's tolerance."""
        box = box_of(self.circuit.network, self.conditions, {part: share})
        return Question(self.circuit, self.measure, self.output, self.options, box, self.conditions)

    @property
    def celsius(self) -> tuple[float, float]:
        """The temperatures at which the least and the greatest value are taken."""
        if self.measure != "noise":
            return self.conditions.nominal, self.conditions.nominal
        # Every resistor is as warm as the others: with its values kept, noise grows as the root of T.
        return self.conditions.low, self.conditions.high

    def told(self, place: Float, celsius: float) -> dict[str, float]:
        """Part values at a place, and the temperature where it matters."""
        values = self.box.named(place)
        return {**values, "temperature": celsius} if self.measure == "noise" else values

    def exact(self, place: Float, celsius: float | None = None) -> float:
        """The measure at one place. Raises UndecidedError with the part values where it does not exist."""
        warm = self.conditions.nominal if celsius is None else celsius
        network = self.circuit.network.with_values(self.box.named(place))
        try:
            return evaluate(network, self.measure, self.output, options_at(self.measure, self.options, warm))
        except UndecidedError as exc:
            if np.array_equal(place, self.box.home):
                raise
            raise UndecidedError(
                f"within the tolerances, at {self.described(place)}: {exc.message}", remedy=exc.remedy
            ) from exc

    def described(self, place: Float) -> str:
        """Part values for people."""
        return values_text(self.circuit, self.box.named(place))

    # ------------------------------------------------------------------ the ends

    def answer(self) -> Ends:
        """Both ends, proven where possible."""
        home = self.box.home
        nominal = self.exact(home)
        if not len(self.box):
            return self._at_temperatures(home, home, "proven")
        signs = self.proof
        if signs is not None:
            up, down = (self._corner(signs, sign) for sign in (1, -1))
            low, high = (down, up) if self.exact(down) <= self.exact(up) else (up, down)
            return self._at_temperatures(low, high, "proven")
        found = self._searched(nominal)
        low_at = found.low_at if found.low <= nominal else home
        high_at = found.high_at if found.high >= nominal else home
        return self._at_temperatures(low_at, high_at, "searched")

    def _at_temperatures(self, low_at: Float, high_at: Float, method: Literal["proven", "searched"]) -> Ends:
        cold, warm = self.celsius
        return Ends(self.exact(low_at, cold), self.exact(high_at, warm), low_at, high_at, method)

    @cached_property
    def proof(self) -> Directions | None:
        """Which way each part moves the measure, where that is proven of all parts that have a tolerance."""
        network = self.circuit.network
        if any(network.part(name).kind not in "RC" for name in self.box.names):
            return None
        return directions(network, self.measure, self.output, self.options)

    def _corner(self, signs: Directions, direction: int) -> Float:
        turned = np.array([direction * signs.get(name, 0) for name in self.box.names])
        return np.where(turned > 0, 1.0, np.where(turned < 0, 0.0, self.box.home))

    # ------------------------------------------------------------------ the search

    def _searched(self, nominal: float) -> Extremes:
        if len(self.box) > _MOST_SEARCHED:
            return self._along_slopes(nominal)
        effort = _ONE_BY_ONE if self.together is None else _TOGETHER
        home, moving = self.box.home, self._moving()

        def whole(places: Float) -> Float:
            every = np.repeat(home[None], len(places), axis=0)
            every[:, moving] = places
            return every

        found = extremes(lambda places: self._values(whole(places)), home[moving], effort)
        low_at, high_at = whole(found.low_at[None])[0], whole(found.high_at[None])[0]
        return Extremes(self.exact(low_at), self.exact(high_at), low_at, high_at)

    @cached_property
    def together(self) -> Measured | None:
        """The measure of many samples at once, where there is such a way and it agrees with the exact one."""
        network, box = self.circuit.network, self.box
        options = options_at(self.measure, self.options, self.conditions.nominal)
        found = many(network, self.measure, self.output, options, box.names)
        if found is None:
            return None
        places = np.concatenate([box.home[None], spread(_CHECKED, len(box))])
        quick = found(box.values(places))
        exact = np.array([self._exact_or_nan(place) for place in places])
        scale = 1.0 if self.measure in ("gain", "attenuation", "phase") else np.nanmax(np.abs(exact))
        apart = np.abs(quick - exact) > _AGREES * scale
        return None if (apart | (np.isnan(quick) & ~np.isnan(exact))).any() else found

    def _exact_or_nan(self, place: Float) -> float:
        try:
            return self.exact(place)
        except UndecidedError:
            return math.nan

    def _values(self, places: Float) -> Float:
        """The measure at places (points, parts). Raises UndecidedError where one of them has none."""
        if self.together is None:
            return np.array([self.exact(place) for place in places])
        found = self.together(self.box.values(places))
        unsure = np.flatnonzero(np.isnan(found))
        if len(unsure) > _MOST_UNSURE:
            return np.array([self.exact(place) for place in places])
        for k in unsure.tolist():
            found[k] = self.exact(places[k])
        return found

    def _moving(self) -> list[int]:
        """The parts that move the measure at all, seen from a place where nothing balances."""
        count = len(self.box)
        sides = np.repeat(spread(1, count), 2 * count, axis=0)
        sides[range(count), range(count)] = 0.0
        sides[range(count, 2 * count), range(count)] = 1.0
        values = self._values(sides)
        moves = np.abs(values[:count] - values[count:]) > 1e-12 * np.abs(values).max()
        return [int(k) for k in np.flatnonzero(moves)]

    def _along_slopes(self, nominal: float) -> Extremes:
        """Where there are too many parts to move each: the corner the slopes point to, until they stay."""
        if not self._has_slopes:
            raise UndecidedError(
                f"{len(self.box)} parts have a tolerance, too many to search for this measure.",
                remedy=f"Give tolerances to {_MOST_SEARCHED} parts at most.",
            )
        ends = []
        for direction in (-1, 1):
            best, at = nominal, self.box.home
            place = at
            for _ in range(_SLOPE_STEPS):
                slopes = self._slopes(place)
                place = np.where(direction * slopes > 0, 1.0, np.where(slopes == 0, self.box.home, 0.0))
                value = self.exact(place)
                if not direction * value > direction * best:
                    break
                best, at = value, place
            ends.append((best, at))
        return Extremes(ends[0][0], ends[1][0], ends[0][1], ends[1][1])

    @property
    def _has_slopes(self) -> bool:
        """True where all sensitivities come from one or two solutions."""
        return self.measure in COMPUTED or self.measure == "time_constant"

    def _slopes(self, place: Float) -> Float:
        network = self.circuit.network.with_values(self.box.named(place))
        keywords = {f"{key}_" if key == "from" else key: value for key, value in self.options.items()}
        found = sensitivity(network, self.measure, self.output, **keywords)
        sign = 1.0
        if self.measure not in ("gain", "attenuation", "phase"):
            sign = math.copysign(1.0, self.exact(place))
        return sign * np.array([found[name] for name in self.box.names])

    # ------------------------------------------------------------------ who is to blame

    def limiting(self, found: Ends, bound: Bound | None) -> str | None:
        """The part without whose tolerance the worse end would lie furthest back."""
        worse_low = (
            found.low - bound.low < bound.high - found.high
            if bound is not None
            else abs(found.low - self.exact(self.box.home)) > abs(found.high - self.exact(self.box.home))
        )
        at, celsius = (found.low_at, self.celsius[0]) if worse_low else (found.high_at, self.celsius[1])
        end, sign = (found.low, 1.0) if worse_low else (found.high, -1.0)
        back = np.zeros(len(self.box))
        for k in self._suspects(at).tolist():
            place = at.copy()
            place[k] = self.box.home[k]
            back[k] = sign * (self.exact(place, celsius) - end)
        if not len(back) or back.max() <= 0:
            return None
        return self.box.names[int(back.argmax())]

    def _suspects(self, at: Float) -> npt.NDArray[np.int64]:
        """The parts away from their nominal values; of very many those whose slopes say they matter most."""
        away = np.flatnonzero(at != self.box.home)
        if len(away) <= _MOST_BLAMED or not self._has_slopes:
            return away
        moved = np.abs(self._slopes(at) * np.log(self.box.factors(at)))
        return np.argsort(-moved, kind="stable")[:_MOST_BLAMED]


__all__ = ["KELVIN", "About", "Ends", "Question", "options_at", "values_text"]
