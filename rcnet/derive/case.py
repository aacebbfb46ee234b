"""One network as the rules see it: its shape, its poles, and exact measures computed when first asked for."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, TypeVar

from ..circuit import MEASURES, Circuit, Network, Source
from ..claims import Profile, evaluate, half_power, profile
from ..errors import RcnetError, UndecidedError
from ..values import format_quantity
from .formula import Formula
from .roots import Roots
from .shape import Chain, Shape, shape_of

Pair = tuple[int, int]
T = TypeVar("T")


@dataclass(frozen=True)
class Stated:
    """What a rule says about one network.

    formula: its value in the unit; stands_for: the measure it stands for, with what tells it apart from
    others
    of the same name; unit: `Hz`, `s`, `V`, `1` or `dB`; exact: gives the measure, or raises UndecidedError
    holds: whether what the rule assumes is true here; because: the number that says so, a sentence
    """

    formula: Formula
    stands_for: str
    unit: str
    exact: Callable[[], float]
    holds: bool
    because: str


@dataclass
class Case:
    """What rules ask about.

    network: with the driving source carrying ac; driver: its name; of, pair: the output; roots: None where
    the poles could not be had
    symbols: what short names in formulas stand for, as text
    """

    circuit: Circuit
    network: Network
    driver: str
    of: str
    pair: Pair
    roots: Roots | None
    symbols: dict[str, str] = field(default_factory=dict)
    _known: dict[Any, float | UndecidedError] = field(default_factory=dict)
    _kept: dict[str, Any] = field(default_factory=dict)

    @cached_property
    def shape(self) -> Shape:
        """What the network was recognised as."""
        return shape_of(self.network, self.driver, self.pair)

    @property
    def chain(self) -> Chain | None:
        """The chain of sections, where it is one."""
        return self.shape.chain

    @cached_property
    def profile(self) -> Profile | None:
        """The magnitude over all frequencies; None where it grows without bound or is zero."""
        try:
            return profile(self.network, self.pair)
        except RcnetError:
            return None

    @property
    def source(self) -> Source:
        """The driving source."""
        return self.network.sources[self.driver]

    @property
    def parts_of(self) -> dict[str, list[str]]:
        """The names of the parts by their kind's letter."""
        names: dict[str, list[str]] = {}
        for part in self.network.parts:
            names.setdefault(part.kind, []).append(part.name)
        return names

    # ------------------------------------------------------------------ exact values

    def measure(self, name: str, **options: float | str) -> float:
        """A measure of the output. Raises UndecidedError where it does not exist."""
        given = {key.rstrip("_"): value for key, value in options.items()}
        return self.once((name, *sorted(given.items())), lambda: evaluate(self.network, name, self.of, given))

    def once(self, key: Any, compute: Callable[[], float]) -> float:
        """A number computed when first asked for; an error is kept as well."""
        if key not in self._known:
            try:
                self._known[key] = compute()
            except UndecidedError as exc:
                self._known[key] = exc
            except RcnetError as exc:
                self._known[key] = UndecidedError(exc.message)
        known = self._known[key]
        if isinstance(known, UndecidedError):
            raise known
        return known

    def kept(self, key: str, compute: Callable[[], T]) -> T:
        """Anything else that several rules ask for, computed once."""
        if key not in self._kept:
            self._kept[key] = compute()
        found: T = self._kept[key]
        return found

    def symbol(self, text: str, tex: str, value: float, unit: str) -> Formula:
        """A quantity that formulas call by a short name, and that is told beside them."""
        self.symbols[text] = format_quantity(value, unit)
        return Formula(text, tex, value)

    def edge(self, which: str) -> float | None:
        """The lower or upper cutoff, Hz; None where there is none."""
        try:
            return None if self.profile is None else half_power(self.profile, which)
        except UndecidedError:
            return None

    def stated(
        self,
        formula: Formula,
        measure: str,
        holds: bool,
        because: str,
        **options: float | str,
    ) -> Stated:
        """A statement about one of the measures of claims."""
        told = ", ".join(_TOLD[key] + _shown(key, value) for key, value in options.items() if key in _TOLD)
        return Stated(
            formula,
            f"{measure} ({told})" if told else measure,
            MEASURES[measure].unit,
            lambda: self.measure(measure, **options),
            holds,
            because,
        )

    # ------------------------------------------------------------------ what assumptions ask

    @cached_property
    def edges(self) -> list[float]:
        """The frequencies at which loading is judged, rad/s: the cutoffs, and between two their middle."""
        found = [f for which in ("lower", "upper") if (f := self.edge(which))]
        if len(found) == 2:
            found.append(math.sqrt(found[0] * found[1]))
        if found:
            return [2 * math.pi * f for f in found]
        sizes = [abs(p) for p in (self.roots.every_pole if self.roots is not None else [])]
        return [min(sizes, default=1.0)]

    def far_apart(self) -> tuple[bool, str]:
        """Whether a band's two cutoffs lie far enough apart to be reckoned one by one; true without two."""
        lower, upper = self.edge("lower"), self.edge("upper")
        if lower is None or upper is None:
            return True, ""
        return upper > WIDE * lower, (
            f"the cutoffs lie {upper / lower:.3g} to 1 apart; to be reckoned one by one they want more than"
            f" {WIDE:g} to 1."
        )

    def isolation(self) -> tuple[bool, str]:
        """Whether no section loads the one before it, and the least ratio of impedances."""
        assert self.chain is not None
        ratios = [pair for omega in self.edges for pair in self.chain.loads(omega)]
        if not ratios:
            return True, "a buffer stands between the sections."
        number, ratio = min(ratios, key=lambda pair: pair[1])
        return ratio > ISOLATED, (
            f"section {number + 1} takes {ratio:.3g} times the impedance that section {number} gives (at a"
            f" cutoff or between); isolated sections want more than {ISOLATED:g}."
        )

    def one_pole(self, *, upper: bool = True, faint: float = 1e-3) -> tuple[bool, str]:
        """Whether one pole makes an edge, and how near the next pole or a zero is.

        faint: poles of a share below this do not count
        """
        apart, because = self.far_apart()
        if not apart:
            return False, because
        poles = self.poles_beyond(upper=upper, faint=faint)
        if not poles:
            return False, "there is no such pole."
        ratio = 0.0 if len(poles) < 2 else poles[0] / poles[1] if upper else poles[-2] / poles[-1]
        if ratio > APART:
            return False, self._next_pole(ratio, upper=upper)
        near = self.zero_near(poles[0] if upper else poles[-1])
        if near is not None:
            return False, near
        if not ratio:
            return True, because or "there is one pole that counts."
        return True, self._next_pole(ratio, upper=upper)

    def _next_pole(self, ratio: float, *, upper: bool) -> str:
        if upper:
            return (
                f"the next pole lies at {1 / ratio:.3g} times the frequency of the first;"
                f" one alone wants more than {1 / APART:g}."
            )
        return (
            f"the next pole lies at {ratio:.3g} of the last one's frequency;"
            f" one alone wants less than {APART:g}."
        )

    def zero_near(self, size: float) -> str | None:
        """A sentence about a zero within a decade of a pole that it does not cancel; None without one."""
        if self.roots is None or self.roots.zeros is None:
            return None
        gone = {pair.zero for pair in self.roots.cancelled if abs(abs(pair.pole) / size - 1) > _SAME}
        ratios = [abs(z.s) / size for z in self.roots.zeros if z.s and z.s not in gone]
        ratio = min(ratios, key=lambda r: abs(math.log(r)), default=math.inf)
        if APART < ratio < 1 / APART:
            return (
                f"a zero lies at {ratio:.3g} times the frequency of the pole; one alone wants none within"
                f" {1 / APART:g} times either way."
            )
        return None

    def poles_beyond(self, *, upper: bool, faint: float = 1e-3) -> list[float]:
        """The sizes of the poles above the response's peak, or below it, rad/s, rising.

        Those whose share in the output is below `faint` do not count.
        """
        if self.roots is None or self.profile is None or len(self.profile.peaks) != 1:
            return []
        peak = self.profile.peaks[0]
        sizes = [
            abs(root.s)
            for root in self.roots.poles
            for _ in range(root.count)
            if root.s and (root.share is None or root.share > faint)
        ]
        return sorted(size for size in sizes if (size > peak) == upper)


ISOLATED = 10.0  # an impedance this many times another one does not load it
WIDE = 30.0  # cutoffs this far from each other shift one another by a few per cent at most
APART = 0.1  # one pole alone makes an edge if the next is further than this
_SAME = 1e-9  # sizes of one and the same pole

# The options that tell one statement from another; a rule about noise has but one band and temperature.
_TOLD = {"edge": "", "at": "at ", "band": "within ", "part": ""}


def _shown(key: str, value: float | str) -> str:
    if isinstance(value, str):
        return value
    return f"{100 * value:.4g} %" if key == "band" else format_quantity(value, "Hz")
