"""Checking one circuit: its findings and the verdicts on its claims."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from .circuit import Circuit, Network, Place, Seen
from .claims import ClaimResult, Verdict, judge, overall
from .findings import Finding, found, in_order, sifted
from .netlist import network_of
from .values import format_quantity


@dataclass(frozen=True)
class Check:
    """What a check found. verdict: of all claims, and `fails` wherever a finding is an error.

    silenced: the findings that are not to be told; they count nowhere else
    """

    circuit: Circuit
    findings: tuple[Finding, ...]
    claims: tuple[ClaimResult, ...]
    silenced: tuple[Finding, ...] = ()

    @cached_property
    def errors(self) -> tuple[Finding, ...]:
        """The findings of severity `error`."""
        return tuple(finding for finding in self.findings if finding.severity == "error")

    @cached_property
    def warnings(self) -> tuple[Finding, ...]:
        """The findings of severity `warning`."""
        return tuple(finding for finding in self.findings if finding.severity == "warning")

    @property
    def verdict(self) -> Verdict:
        """`holds`, `fails` or `undecided`."""
        return "fails" if self.errors else overall(self.claims)

    def passes(self, *, strict: bool = False) -> bool:
        """True if every claim holds and nothing is an error (nor, where strict, a warning)."""
        return self.verdict == "holds" and not (strict and self.warnings)


def check(circuit: Circuit | Network, *, samples: int | None = None, seed: int = 1) -> Check:
    """Findings and verdicts of a circuit. Nothing is written and no simulator is asked.

    samples, seed: for claims over tolerances whose extremes are not proven; see `rcnet.claims.judge`
    """
    whole = network_of(circuit)
    results = judge(whole, samples=samples, seed=seed)
    about_hands = (remark for result in results for remark in _about_hand(whole, result))
    told, silenced = sifted(whole, in_order([*found(whole), *about_hands, *_about_parts(whole)]))
    return Check(whole, told, results, silenced)


def _about_hand(circuit: Circuit, result: ClaimResult) -> list[Finding]:
    """A warning where the hand formula leads to another verdict than the network does."""
    claim = result.claim
    place = claim.hand_place or claim.place or Place(circuit.file or circuit.name, None)
    if result.hand_why is not None:
        message = f"{claim.says!r}: the hand formula gives no number: {result.hand_why}"
        return [_warning("hand-fails", message, "Mend the formula.", place)]
    if not result.hand_misleads:
        return []
    assert result.hand is not None and result.exact is not None
    unit = claim.measure.unit
    message = (
        f"{claim.says!r}: by hand {format_quantity(result.hand, unit)}, in the real network "
        f"{format_quantity(result.exact, unit)}."
    )
    return [_warning("hand-misleads", message, _what_hand_misses(circuit, result), place)]


def _what_hand_misses(circuit: Circuit, result: ClaimResult) -> str:
    from .claims.reasons import why_off

    assert result.hand is not None and result.exact is not None
    reason = why_off(circuit, result.claim, result.hand, result.exact)
    if reason is None:
        return "Trust the exact value; the formula leaves out something this network does."
    return f"Trust the exact value: {reason.says}."


def _about_parts(circuit: Circuit) -> list[Finding]:
    """Ratings that are exceeded or nearly so, and what is dangerous to touch."""
    from .claims.caution import caution_findings
    from .claims.ratings import rating_findings

    return [_found(seen) for seen in (*rating_findings(circuit), *caution_findings(circuit))]


def _found(seen: Seen) -> Finding:
    place = seen.place
    return Finding(
        seen.code,
        seen.severity or "warning",
        seen.message,
        place.file,
        place.line,
        seen.remedy,
        place.text,
        place.column,
        place.width,
    )


def _warning(code: str, message: str, remedy: str, place: Place) -> Finding:
    return Finding(
        code, "warning", message, place.file, place.line, remedy, place.text, place.column, place.width
    )
