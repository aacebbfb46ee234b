"""Verdicts: each claim held against the exact value, its hand formula beside it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

from ..circuit import Circuit, Claim
from ..errors import RcnetError, UndecidedError
from ..values import Tolerance, format_quantity
from .measures import evaluate

if TYPE_CHECKING:
    from .samples import SampleResult
    from .tolerance import ToleranceBounds

Verdict = Literal["holds", "fails", "undecided"]


@dataclass(frozen=True, slots=True)
class ClaimResult:
    """One claim with what came of it.

    exact, hand: in the measure's unit, at the nominal values; None where they could not be had
    low, high: the least and the greatest value over the tolerances, None where the claim does not ask for
        them; method: how they were found, "nominal" without them
    margin: how far inside the bound the exact value lies, or the worse of low and high; negative outside;
        None without either
    why: the reason of an undecided claim, of one that fails over the tolerances, and of one that was
        sampled; else None
    hand_why: why the hand formula gave no number
    limiting: the part whose tolerance moves the measure most towards the bound; needed: the tolerance, as a
        fraction, with which it alone would make a failing claim hold; None where they do not apply
    """

    claim: Claim
    exact: float | None
    hand: float | None
    verdict: Verdict
    margin: float | None = None
    low: float | None = None
    high: float | None = None
    method: Literal["nominal", "proven", "searched", "sampled"] = "nominal"
    why: str | None = None
    hand_why: str | None = None
    limiting: str | None = None
    needed: float | None = None

    @property
    def hand_misleads(self) -> bool:
        """True where the hand value and the exact one fall on different sides of the claim's bound."""
        if self.exact is None or self.hand is None:
            return False
        return self.claim.bound.holds(self.exact) != self.claim.bound.holds(self.hand)


def judge(circuit: Circuit, *, samples: int | None = None, seed: int = 1) -> tuple[ClaimResult, ...]:
    """A result for every claim of the circuit, in the file's order.

    samples: where given, claims over tolerances are sampled instead of searched for their extremes (those
        that are proven stay proven, which is better and quicker). Then low and high are the least and the
        greatest value among the samples, the claim holds where every sample meets it, and `why` tells the
        yield. seed: of the samples
    """
    return tuple(_judge(circuit, claim, samples, seed) for claim in circuit.claims)


def _judge(circuit: Circuit, claim: Claim, samples: int | None, seed: int) -> ClaimResult:
    hand, hand_why = _hand(circuit, claim)
    options = _options(circuit, claim)
    exact = None
    try:
        exact = evaluate(circuit.network, claim.measure.name, " ".join(claim.of) or None, options)
        if claim.over_tolerance:
            found = _over_tolerance(circuit, claim, exact, samples, seed)
            return replace(found, hand=hand, hand_why=hand_why)
    except UndecidedError as exc:
        why = f"{exc.message} {exc.remedy}" if exc.remedy else exc.message
    except RcnetError as exc:
        why = exc.message
    else:
        verdict: Verdict = "holds" if claim.bound.holds(exact) else "fails"
        return ClaimResult(claim, exact, hand, verdict, claim.bound.margin(exact), hand_why=hand_why)
    if exact is None or claim.bound.holds(exact):
        margin = None if exact is None else claim.bound.margin(exact)
        return ClaimResult(claim, exact, hand, "undecided", margin, why=why, hand_why=hand_why)
    # What fails at the nominal values fails over the tolerances, whatever else there is to say about them.
    return ClaimResult(claim, exact, hand, "fails", claim.bound.margin(exact), why=why, hand_why=hand_why)


def _options(circuit: Circuit, claim: Claim) -> Mapping[str, float | str]:
    """The claim's options; thermal noise is that of the circuit's own temperature."""
    if claim.measure.name != "noise":
        return claim.options
    from .question import options_at

    return options_at(claim.measure.name, claim.options, circuit.conditions.nominal)


# ---------------------------------------------------------------------- over the tolerances


def _over_tolerance(
    circuit: Circuit, claim: Claim, exact: float, samples: int | None, seed: int
) -> ClaimResult:
    # The search and the proofs load where a claim asks for them.
    from .tolerance import bounds, is_proven

    if samples is not None and not is_proven(circuit, claim):
        return _sampled(circuit, claim, exact, samples, seed)
    found = bounds(circuit, claim)
    margin = found.margin(claim.bound)
    verdict: Verdict = "holds" if margin >= 0 else "fails"
    why = [] if verdict == "holds" else [_why(circuit, claim, found)]
    if samples is not None:
        from .samples import sample

        why.append(_yield_told(sample(circuit, claim, samples, seed), claim.measure.unit))
    return ClaimResult(
        claim,
        exact,
        None,
        verdict,
        margin,
        found.low,
        found.high,
        found.method,
        " ".join(why) or None,
        limiting=found.limiting,
        needed=found.needed,
    )


def _why(circuit: Circuit, claim: Claim, found: ToleranceBounds) -> str:
    """The worst corner of a claim that fails, the part that limits it, and what that would have to be."""
    below = found.low - claim.bound.low < claim.bound.high - found.high
    worst, at = (found.low, found.low_at) if below else (found.high, found.high_at)
    text = f"{'Down' if below else 'Up'} to {format_quantity(worst, claim.measure.unit)}"
    if at:
        from .question import values_text

        text += f" at {values_text(circuit, at)}"
    if found.limiting is None:
        return f"{text}."
    tolerance = circuit.network.part(found.limiting).tolerance
    if tolerance is None:
        return f"{text}. The temperature coefficient of {found.limiting} limits it."
    if found.needed is None:
        return f"{text}. {found.limiting} limits it, but no tolerance of that part alone would do."
    share = found.needed / max(tolerance.high, -tolerance.low)
    enough = Tolerance(share * tolerance.low, share * tolerance.high)
    return (
        f"{text}. {found.limiting} limits it: with {_percent(enough)} instead of {_percent(tolerance)}"
        " it would hold."
    )


def _sampled(circuit: Circuit, claim: Claim, exact: float, count: int, seed: int) -> ClaimResult:
    # SciPy, which it needs, should load only where samples are asked for.
    from .samples import sample

    found = sample(circuit, claim, count, seed)
    low, high = found.quantile(0.0), found.quantile(1.0)
    verdict: Verdict = "holds" if found.met == found.count else "fails"
    margin = min(claim.bound.margin(low), claim.bound.margin(high))
    told = _yield_told(found, claim.measure.unit)
    return ClaimResult(claim, exact, None, verdict, margin, low, high, "sampled", told)


def _yield_told(found: SampleResult, unit: str) -> str:
    """The yield of samples, how sure it is, and where most of them lie."""
    sure = found.interval
    why = (
        f"{found.met} of {found.count} samples meet it: a yield of {_share(found.yield_)},"
        f" with 95 % confidence {_share(sure[0])} to {_share(sure[1])};"
        f" 99 % of them lie between {format_quantity(found.quantile(0.005), unit)}"
        f" and {format_quantity(found.quantile(0.995), unit)}."
    )
    if found.undefined:
        why += f" For {found.undefined} of them the measure does not exist."
    return why


def _share(share: float) -> str:
    """A share in per cent that does not round up to all of it."""
    text = f"{100 * share:.2f}"
    return f"{text if share == 1 or text != '100.00' else f'{math.floor(1e6 * share) / 1e4:g}'} %"


def _percent(tolerance: Tolerance) -> str:
    if tolerance.high == -tolerance.low:
        return f"{100 * tolerance.high:.3g} %"
    return f"+{100 * tolerance.high:.3g}/-{-100 * tolerance.low:.3g} %"


def _hand(circuit: Circuit, claim: Claim) -> tuple[float | None, str | None]:
    if claim.hand is None:
        return None, None
    names = {**circuit.network.values, "T": circuit.conditions.nominal + 273.15}
    for name, source in circuit.network.sources.items():
        names[name] = source.operating_value
    try:
        return claim.hand.evaluate(names), None
    except RcnetError as exc:
        return None, exc.message


def overall(results: tuple[ClaimResult, ...]) -> Verdict:
    """The verdict of all claims together: one that fails outweighs one that is undecided."""
    verdicts = {result.verdict for result in results}
    if "fails" in verdicts:
        return "fails"
    return "undecided" if "undecided" in verdicts else "holds"
