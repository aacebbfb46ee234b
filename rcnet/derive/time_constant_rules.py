"""The method of time constants: cutoffs from what each capacitor sees, the others open or shorted.

P. E. Gray, C. L. Searle, Electronic Principles, 1969; B. L. Cochrun, A. Grabel, IEEE Trans. Circuit Theory
CT-20(1):16-20, 1973.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from ..exact import one_part
from .case import APART, Case, Stated
from .corner_rules import TWO_PI, corner
from .formula import ONE, Formula, name, told, total
from .seen import capacitors, resistance_seen

MOST_TIME_CONSTANTS = 40
CLEAR = 3.0  # impedances this far apart tell a capacitor that conducts from one that insulates


def open_circuit(case: Case) -> Iterator[Stated]:
    """The upper cutoff from the sum of the time constants of capacitors, each alone, the others open."""
    coupling = coupling_capacitors(case)
    if coupling is None or case.edge("upper") is None:
        return
    names = [part.name for part in capacitors(case.network) if part.name not in coupling]
    if len(names) > MOST_TIME_CONSTANTS:
        summed = _summed_modes(case, names) if not coupling else None
    else:
        summed = total([_seen(case, each, coupling) * _named(case, each) for each in names])
    if names and summed is not None:
        holds, because = _shares(case, upper=True)
        yield case.stated(corner(summed), "cutoff", holds, because, edge="upper")


def _summed_modes(case: Case, names: Sequence[str]) -> Formula | None:
    """The sum over many capacitors: that of all natural time constants, for both are the coefficient of s."""
    if case.roots is None or case.roots.left_out:
        return None
    taus = [1 / abs(p) for p in (*case.roots.every_pole, *(root.s for root in case.roots.hidden))]
    return told(f"(sum of R*C over {len(names)} capacitors)", r"\sum_k R_k C_k", math.fsum(taus))


def short_circuit(case: Case) -> Iterator[Stated]:
    """The lower cutoff from the rates of coupling capacitors, each alone, the others shorted."""
    coupling = coupling_capacitors(case)
    if not coupling or case.edge("lower") is None or len(coupling) > MOST_TIME_CONSTANTS:
        return
    rates = []
    for part in capacitors(case.network):
        if part.name in coupling:
            seen = _seen(case, part.name, coupling - {part.name})
            rates.append(ONE / (seen * _named(case, part.name)))
    holds, because = _shares(case, upper=False)
    summed = total(rates)
    formula = rates[0] / TWO_PI if len(rates) == 1 else summed / TWO_PI
    if len(rates) == 1:
        formula = corner(_seen(case, next(iter(coupling)), frozenset()) * _named(case, next(iter(coupling))))
    yield case.stated(formula, "cutoff", holds, because, edge="lower")


def _shares(case: Case, *, upper: bool) -> tuple[bool, str]:
    sizes = case.poles_beyond(upper=upper, faint=0.0)
    apart, because = case.far_apart()
    if not apart:
        return False, because
    if not sizes:
        return False, "there is no such pole."
    if (between := _between(case)) is not None:
        return False, between
    hidden = [abs(r.s) for r in case.roots.hidden if r.s] if case.roots is not None else []
    chief = min(sizes) if upper else max(sizes)
    if any(size < chief if upper else size > chief for size in hidden):
        return False, "a capacitor whose mode the output does not show makes most of the sum."
    sizes += hidden
    if (near := case.zero_near(chief)) is not None:
        return False, near
    if len(sizes) < 2:
        return True, because or "there is one pole."
    share = (1 / chief) / math.fsum(1 / size for size in sizes) if upper else chief / math.fsum(sizes)
    what = "time constant" if upper else "rate"
    return share > 1 - APART, (
        f"the greatest {what} of a pole is {100 * share:.3g} % of their sum; the sum tells the cutoff above"
        f" {100 * (1 - APART):g} %."
    )


def coupling_capacitors(case: Case) -> frozenset[str] | None:
    """The capacitors that conduct in the passband, by name; None where a network has no one passband.

    In the middle of the band they are those whose reactance is below what they see.
    """
    names = [part.name for part in capacitors(case.network)]
    kinds = case.parts_of
    if case.profile is None or not names or "L" in kinds or "K" in kinds:
        return None
    peaks = case.profile.peaks
    if peaks == (0.0,):
        return frozenset()
    if peaks == (math.inf,):
        return frozenset(names)
    lower, upper = case.edge("lower"), case.edge("upper")
    if len(peaks) != 1 or lower is None or upper is None or len(names) > MOST_TIME_CONSTANTS:
        return None
    middle = math.sqrt(lower * upper)
    return frozenset(each for each in names if _conducts(case, each, middle) > 1)


def _conducts(case: Case, capacitor: str, frequency: float) -> float:
    """What a capacitor sees, over its own impedance."""
    part = one_part(case.network, [frequency], case.of, capacitor)
    across = complex(part.coefficient[0] * part.port[0])  # the port's impedance has the part beside it
    return abs(across / (1 - across)) if across != 1 else math.inf


def _between(case: Case) -> str | None:
    """A sentence about a capacitor that in the middle of a band neither conducts nor insulates."""
    lower, upper = case.edge("lower"), case.edge("upper")
    if lower is None or upper is None:
        return None
    for part in capacitors(case.network):
        ratio = _conducts(case, part.name, math.sqrt(lower * upper))
        if 1 / CLEAR < ratio < CLEAR:
            return (
                f"in the middle of the band {part.name} has {1 / ratio:.3g} times the impedance it sees;"
                f" it wants less than {1 / CLEAR:g} or more than {CLEAR:g}."
            )
    return None


def _named(case: Case, capacitor: str) -> Formula:
    return name(capacitor, case.network.part(capacitor).value)


def _seen(case: Case, capacitor: str, shorted: frozenset[str]) -> Formula:
    loop_free = case.chain is not None or not set(case.parts_of) & set("EGFH")
    return resistance_seen(case.network, capacitor, shorted, loop_free=loop_free)
