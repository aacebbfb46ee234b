"""What the user grants beside the predicted allowance."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ..errors import InputError
from ..values import parse_quantity
from .records import Float, Numbers


@dataclass(frozen=True, slots=True)
class Grant:
    """How far a second opinion may lie from the exact curve beyond what is predicted.

    db, deg: in magnitude and in phase, each on its own: where one alone is granted, the other is held to the
        prediction
    relative: of the exact value, in a transient of the curve's greatest one
    volts, amperes: whatever the value; densities of noise know no floor
    """

    db: float = 0.0
    deg: float = 0.0
    relative: float = 0.0
    volts: float = 0.0
    amperes: float = 0.0

    def __bool__(self) -> bool:
        return self != NOTHING

    def floor(self, unit: str) -> float:
        """The floor for curves of this unit."""
        return {"V": self.volts, "A": self.amperes}.get(unit, 0.0)


NOTHING = Grant()
_EXAMPLES = {"dB": "0.1 dB", "deg": "2 deg", "1": "1 %", "V": "10 uV", "A": "1 nA"}


def parse_grant(
    db: str | None = None, deg: str | None = None, relative: str | None = None, floor: str | None = None
) -> Grant:
    """A grant from what a person writes: `0.1 dB`, `2 deg`, `1 %`, `10 uV` (`1 nA`; a bare number is both).

    Raises QuantityError or InputError, one sentence, for what is no finite number of zero or more.
    """
    volts, amperes = _floor(floor)
    return Grant(
        _number(db, "dB", "--allow-db"),
        _number(deg, "deg", "--allow-deg"),
        _number(relative, "1", "--allow-relative"),
        volts,
        amperes,
    )


def _floor(text: str | None) -> tuple[float, float]:
    bare = text is not None and not text.strip().endswith(("V", "A", "v", "a"))
    in_amperes = text is not None and text.strip().endswith("A")
    volts = 0.0 if in_amperes else _number(text, "V", "--floor")
    amperes = _number(text, "A", "--floor") if in_amperes or bare else 0.0
    return volts, amperes


def _number(text: str | None, unit: str, option: str) -> float:
    if text is None:
        return 0.0
    number = parse_quantity(text, unit, option)
    if not (math.isfinite(number) and number >= 0):
        raise InputError(
            f"{option} is {text!r}, and what is granted must be finite and not below zero.",
            remedy=f"Write it like {option} '{_EXAMPLES[unit]}'.",
        )
    return number


def nearest_granted(exact: Numbers, other: Numbers, grant: Grant) -> Numbers:
    """For each value of `other` the nearest that db and deg grant around the exact one, (points,).

    db and deg span a sector around a phasor; a real value has its sign and may be longer or shorter.
    """
    if not (grant.db or grant.deg):
        return exact
    size, wanted = np.abs(exact), np.abs(other)
    most = 10 ** (grant.db / 20)
    with np.errstate(over="ignore"):
        length = np.clip(wanted, size / most, size * most)
    if not (np.iscomplexobj(exact) or np.iscomplexobj(other)):
        return np.asarray(np.copysign(length, exact))
    with np.errstate(all="ignore"):
        turn = np.angle(np.where((size > 0) & (wanted > 0), other / np.where(size > 0, exact, 1.0), 1.0))
        way = np.where(size > 0, exact / np.where(size > 0, size, 1.0), 0.0)
    limit = min(math.radians(grant.deg), math.pi)
    near = np.clip(turn, -limit, limit)
    # The nearest place on a ray is the foot of the perpendicular, not the point as far from the origin.
    if grant.db:
        length = np.clip(wanted * np.maximum(np.cos(turn - near), 0.0), size / most, size * most)
    else:
        length = size
    return np.asarray(way * length * np.exp(1j * near))


def share_used(exact: Numbers, other: Numbers, distance: Float, allowed: Float, grant: Grant) -> Float:
    """About how much of what is allowed a difference uses up, one at the limit, (points,).

    distance, allowed: from the nearest value that db and deg grant, and what is allowed beside them
    """
    with np.errstate(all="ignore"):
        if not (grant.db or grant.deg):
            return np.asarray(distance / np.where(allowed > 0, allowed, np.nan))
        slack, ratio = allowed / np.abs(exact), other / exact
        size = np.abs(np.log(np.abs(ratio))) / (grant.db * math.log(10) / 20 + slack)
        turn = np.abs(np.angle(ratio)) / (math.radians(grant.deg) + slack)
    return np.asarray(np.maximum(size, turn))


def granted_slack(exact: Numbers, grant: Grant, unit: str, *, of_greatest: bool) -> Float:
    """What `relative` and the floor add to the allowance, (points,)."""
    size = np.abs(exact)
    if of_greatest:
        size = np.full(len(size), size.max(initial=0.0))
    return np.asarray(grant.relative * size + grant.floor(unit))
