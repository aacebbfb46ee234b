"""Debouncing a contact: the plan from a target to candidates."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from ..errors import InputError
from ..values import format_quantity, write_quantity
from .account import account, counted
from .candidate import Asked, candidates
from .design import Design
from .edge import SETTLED
from .passing import WIDTHS
from .search import Hits, Tally, ranked
from .stock import Stock
from .target import Target
from .written import Wanted, rounded

Float = npt.NDArray[np.float64]


def debounce(target: Target) -> Design:
    """One resistor and one capacitor that outlast the bounce, and no more of a delay than that takes.

    While the contact bounces the output may run for as long as the bounce lasts. From the supply down to LOW
    that takes t ln(V/LOW), from 0 V up to HIGH t ln(V/(V - HIGH)), with t = RC: the shorter of both, at the
    worst of tolerances, has to be longer than the bounce. Source resistance and load change t and V.
    """
    found = _Sections(target)
    found.refuse_low()
    for width in WIDTHS:
        hits, tally = found.met(width)
        if len(hits) and (done := found.designed(width, hits, tally)).candidates:
            return done
    raise found.nothing()


class _Sections:
    """Every pair of a resistor and a capacitor in stock, at once."""

    def __init__(self, target: Target) -> None:
        self.target = target
        resistors, capacitors = Stock.of(target.resistors).values, Stock.of(target.capacitors).values
        self.r, self.c = (grid.ravel() for grid in np.meshgrid(resistors, capacitors, indexing="ij"))
        assert target.supply is not None and target.low is not None and target.high is not None
        ends = target.resistors.tolerance
        series, load = target.source + self.r, target.load
        self.gain = 1 / (1 + series / load)
        self.least_gain = 1 / (1 + series * (1 + ends.high) / (load * (1 + ends.low)))
        self.most_gain = 1 / (1 + series * (1 + ends.low) / (load * (1 + ends.high)))
        self.constant = series * self.gain * self.c
        with np.errstate(all="ignore"):
            # What is left of the way when the threshold is met, at the level that makes it soonest.
            self.down = target.low / (self.least_gain * target.supply)
            self.up = 1 - target.high / (self.most_gain * target.supply)
            times = np.minimum(-np.log(self.down), -np.log(self.up))
            works = (self.least_gain * target.supply > target.high) & (self.down < 1) & (self.up > 0)
            self.nominal = np.where(works, times * self.constant, 0.0)

    def refuse_low(self) -> None:
        """Raise InputError where the load keeps the output from ever reaching HIGH."""
        if self.nominal.any():
            return
        target = self.target
        assert target.supply is not None and target.high is not None
        level = format_quantity(float(self.least_gain.max()) * target.supply, "V")
        raise InputError(
            f"a load of {format_quantity(target.load, 'ohm')} keeps the output at {level} at most, below the "
            f"threshold of {format_quantity(target.high, 'V')}.",
            remedy="Allow smaller resistors with --resistors, or lower the thresholds.",
        )

    def met(self, width: float) -> tuple[Hits, Tally]:
        """Those that outlast the bounce with at most `width` twice to spare."""
        target, enough = self.target, math.log1p(width) - SETTLED
        assert target.bounce is not None
        with np.errstate(divide="ignore"):
            off = np.log(self.nominal * target.down / (target.bounce * (1 + width)))
        margin = math.log1p(width) - np.abs(off)
        ok = np.flatnonzero(margin >= 0)
        r, c, margin = self.r[ok, None], self.c[ok, None], margin[ok]
        hits = Hits(r, c, margin, ranked(r, c, margin, enough, -c[:, 0]))
        count = len(self.r)
        return hits, Tally(count, count, computed=count, met=len(ok), solved=count)

    def nothing(self) -> InputError:
        """Why none fits."""
        target = self.target
        assert target.bounce is not None
        times = self.nominal[self.nominal > 0] * target.down
        low, high = (format_quantity(float(each), "s") for each in (times.min(), times.max()))
        if times.min() <= target.bounce <= times.max():
            what = (
                f"none of the {counted(len(self.r))} combinations comes within {100 * WIDTHS[-1]:g} % of it"
            )
        else:
            what = f"the parts allowed outlast {low} to {high}"
        return InputError(
            f"--bounce is {format_quantity(target.bounce, 's')}, and {what}.",
            remedy="Allow other parts with --resistors and --capacitors, or a finer series.",
        )

    # ------------------------------------------------------------------ what is told

    def designed(self, width: float, hits: Hits, tally: Tally) -> Design:
        """The candidates with their claims."""
        target = self.target
        assert target.bounce is not None and target.supply is not None
        assert target.low is not None and target.high is not None
        enough = math.log1p(width) - SETTLED
        low, high = (format_quantity(each, "V") for each in (target.low, target.high))
        title = (
            f"Debouncing {format_quantity(target.bounce, 's')} at {format_quantity(target.supply, 'V')}: "
            f"thresholds {low} and {high}"
        )
        asked: Asked = {name: (name, {}) for name in ("time_constant", "delay", "dc_gain")}
        asked = {**asked, "noise": ("noise", {"from": 0.0, "to": math.inf})}

        def claims(r: list[float], c: list[float]) -> list[Wanted]:
            return self._claims(r[0], c[0], width)

        made = candidates(target, title, hits, claims, asked, enough)
        return Design(
            target,
            title,
            1,
            width,
            math.expm1(enough),
            made,
            tally,
            {"bounce": target.bounce, "supply": target.supply, "thresholds": [target.low, target.high]},
            account(tally, len(made), f"{100 * math.expm1(enough):.3g} %", "", ""),
        )

    def _claims(self, r: float, c: float, width: float) -> list[Wanted]:
        """The claims of one candidate: with a load, its thresholds are other shares of its own level."""
        target = self.target
        assert target.bounce is not None and target.supply is not None
        assert target.low is not None and target.high is not None
        row = int(np.flatnonzero((self.r == r) & (self.c == c))[0])
        bounce = write_quantity(target.bounce, "s")
        latest = target.bounce * target.up / target.down * (1 + width) ** 2
        bands = {"fall": float(self.down[row]), "rise": float(self.up[row])}
        soonest = max(bands, key=lambda way: bands[way])
        made = []
        for way, goes in (
            ("fall", f"from the level down to {format_quantity(target.low, 'V')}"),
            ("rise", f"from 0 V up to {format_quantity(target.high, 'V')}"),
        ):
            band = {"band": rounded(bands[way], "1", up=True)}
            says = f"The way {goes} outlasts the bounce"
            made.append(Wanted(f"{way}_time", says, "settling_time", band, {"at_least": bounce}))
            if way == soonest:
                most = {"at_most": rounded(latest, "s", up=True)}
                says = f"The way {goes} takes no longer than it must"
                made.append(Wanted(f"{way}_time", says, "settling_time", band, most))
        if math.isfinite(target.load):
            says = f"The level lies above {format_quantity(target.high, 'V')}"
            bound = {"at_least": write_quantity(target.high / target.supply, "1")}
            made.append(Wanted("dc_gain", says, "dc_gain", {}, bound, frozenset({"Rload"})))
        return made


__all__ = ["debounce"]
