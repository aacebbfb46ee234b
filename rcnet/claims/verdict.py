"""Verdicts: each claim held against the exact value, its hand formula beside it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from ..circuit import Circuit, Claim
from ..errors import RcnetError, UndecidedError
from .measures import evaluate

Verdict = Literal["holds", "fails", "undecided"]


@dataclass(frozen=True, slots=True)
class ClaimResult:
    """One claim with what came of it.

    exact, hand: in the measure's unit, None where they could not be had
    low, high: bounds of the measure over the tolerances, None where the claim does not ask for them
    margin: how far inside the bound the exact value lies, negative outside; None without an exact value
    why: the reason of an undecided claim, else None; hand_why: why the hand formula gave no number
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

    @property
    def hand_misleads(self) -> bool:
        """True where the hand value and the exact one fall on different sides of the claim's bound."""
        if self.exact is None or self.hand is None:
            return False
        return self.claim.bound.holds(self.exact) != self.claim.bound.holds(self.hand)


def judge(circuit: Circuit) -> tuple[ClaimResult, ...]:
    """A result for every claim of the circuit, in the file's order."""
    return tuple(_judge(circuit, claim) for claim in circuit.claims)


def _judge(circuit: Circuit, claim: Claim) -> ClaimResult:
    hand, hand_why = _hand(circuit, claim)
    try:
        exact = evaluate(
            circuit.network, claim.measure.name, " ".join(claim.of) or None, _options(circuit, claim)
        )
    except UndecidedError as exc:
        why = f"{exc.message} {exc.remedy}" if exc.remedy else exc.message
        return ClaimResult(claim, None, hand, "undecided", why=why, hand_why=hand_why)
    except RcnetError as exc:
        return ClaimResult(claim, None, hand, "undecided", why=exc.message, hand_why=hand_why)
    margin = claim.bound.margin(exact)
    if claim.over_tolerance and claim.bound.holds(exact):
        # A claim that fails at the nominal values fails over the tolerances too; one that holds is open.
        why = "it holds at the nominal values; what the tolerances do to it is not computed yet."
        return ClaimResult(claim, exact, hand, "undecided", margin, why=why, hand_why=hand_why)
    verdict: Verdict = "holds" if claim.bound.holds(exact) else "fails"
    return ClaimResult(claim, exact, hand, verdict, margin, hand_why=hand_why)


def _options(circuit: Circuit, claim: Claim) -> Mapping[str, float | str]:
    """The claim's options; thermal noise is that of the circuit's own temperature, in kelvin."""
    if claim.measure.name != "noise":
        return claim.options
    return {**claim.options, "temperature": circuit.conditions.nominal + 273.15}


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
