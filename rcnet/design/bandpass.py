"""Band-pass filters: the plan from a target to candidates."""

from __future__ import annotations

import itertools
import math

from ..errors import InputError
from ..values import format_quantity, write_quantity
from .account import account, counted
from .band import Band
from .candidate import Asked, candidates
from .design import Design
from .edge import NEPER
from .limits import greatest_band_gain, least_edge_ratio
from .passing import WIDTHS, allowed
from .search import Hits, Tally, search
from .stock import Stock
from .target import Target
from .written import Wanted, rounded

LOSSES = (3.0, 6.0, 10.0, 20.0)  # dB that loading may cost beyond what isolated sections lose


def bandpass(target: Target) -> Design:
    """A high-pass section and a low-pass one after it."""
    assert target.lower is not None and target.upper is not None
    ratio = target.upper / target.lower
    _refuse_too_close(target, ratio)
    tally = None
    for width, loss in itertools.product(WIDTHS, LOSSES):
        band = Band(
            Stock.of(target.resistors),
            Stock.of(target.capacitors),
            target,
            2 * math.pi * target.lower,
            2 * math.pi * target.upper,
            math.log1p(width),
            greatest_band_gain(ratio) * 10 ** (-loss / 20),
        )
        hits, tally = search(band, target.keep)
        # The search over tolerances may find a worse place than the corners that were looked at.
        if len(hits) and (done := _designed(band, hits, tally)).candidates:
            return done
    assert tally is not None
    raise InputError(
        f"none of the {counted(tally.combinations)} combinations puts both cutoffs within "
        f"{100 * WIDTHS[-1]:g} % of where they are asked for and loses less than {LOSSES[-1]:g} dB more than "
        "it must.",
        remedy="Allow wider ranges of parts with --resistors and --capacitors, or a lighter load.",
    )


def _refuse_too_close(target: Target, ratio: float) -> None:
    """Raise InputError for cutoffs that no two sections have, nor any with some loading between them."""
    least = least_edge_ratio(1)
    if ratio > least:
        return
    assert target.lower is not None and target.upper is not None
    raise InputError(
        f"a band-pass of one high-pass and one low-pass section cannot have its cutoffs as near as "
        f"{format_quantity(target.lower, 'Hz')} and {format_quantity(target.upper, 'Hz')}: their ratio is "
        f"{ratio:.4g}, the least is 3 + 2 sqrt 2 = {least:.4g} (a Q of 1/2, half the signal lost), and only "
        "isolated sections would reach it.",
        remedy=f"Let the upper one be above {format_quantity(least * target.lower, 'Hz')}.",
    )


def _designed(band: Band, hits: Hits, tally: Tally) -> Design:
    target, width = band.target, math.expm1(band.width)
    assert target.lower is not None and target.upper is not None

    def claims(r: list[float], c: list[float]) -> list[Wanted]:
        return _claims(band, width, r, c)

    low, high = (format_quantity(each, "Hz") for each in (target.lower, target.upper))
    title = f"Band-pass of two sections: {low} to {high}"
    asked: Asked = {name: (name, {}) for name in ("centre", "bandwidth")}
    asked = {**asked, "noise": ("noise", {"from": 0.0, "to": math.inf})}
    found = candidates(target, title, hits, claims, asked, band.enough)
    return Design(
        target,
        title,
        2,
        width,
        math.expm1(band.enough),
        found,
        tally,
        {"lower": target.lower, "upper": target.upper},
        account(
            tally,
            len(found),
            f"{100 * math.expm1(band.enough):.3g} %",
            "",
            "because the peak falls as the last resistor grows",
        ),
    )


def _claims(band: Band, width: float, r: list[float], c: list[float]) -> list[Wanted]:
    target = band.target
    assert target.lower is not None and target.upper is not None
    wanted = []
    extremes = band.extremes(r, c)
    for edge, aim in (("lower", target.lower), ("upper", target.upper)):
        says = f"{edge.capitalize()} cutoff {format_quantity(aim, 'Hz')}, {allowed(width)}"
        between = [
            rounded(aim / (1 + width) / target.up, "Hz", up=False),
            rounded(aim * (1 + width) / target.down, "Hz", up=True),
        ]
        bound, options = {"between": between}, {"edge": edge}
        wanted.append(Wanted(f"cutoff_{edge}", says, "cutoff", options, bound, ends=extremes[edge]))
    loss = -NEPER * math.log(band.least_gain)
    middle = write_quantity(float(f"{band.middle / (2 * math.pi):.6g}"), "Hz")
    says = f"No more than {loss:.3g} dB lost in the middle"
    least = rounded(-loss - 1e-3, "dB", up=False)
    wanted.append(Wanted("gain", says, "gain", {"at": middle}, {"at_least": least}, None))
    return wanted


__all__ = ["bandpass"]
