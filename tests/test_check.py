"""Checking one circuit: findings, claims, and hand formulas that mislead."""

from __future__ import annotations

import math

import pytest

from rcnet.check import Check, check
from rcnet.circuit import Network, parse_circuit_file

FILTER = """
title  = "Level gauge: noise filter"
output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
[sources.Vin]
nodes = "in 0"
ac = 1
"""


def claim(says: str, measure: str, bound: str, more: str = "") -> str:
    """A claim's table."""
    return f'[[claims]]\nsays = "{says}"\nmeasure = "{measure}"\n{bound}\n{more}\n'


CORNER = claim("Corner at 159 Hz", "cutoff", 'equals = "159.15 Hz"\nwithin = "1%"')
TOO_HIGH = claim("Corner above 1 kHz", "cutoff", 'at_least = "1 kHz"')
NOWHERE = claim("A lower corner", "cutoff", 'at_least = "1 Hz"', 'edge = "lower"')


def checked(*claims: str, text: str = FILTER) -> Check:
    """The check of the filter with some claims."""
    return check(parse_circuit_file(text + "".join(claims), "gauge.rc.toml"))


def test_a_sound_circuit_passes() -> None:
    """No finding, the claim holds: 1/(2 pi 1 kohm 1 uF) is 159.15 Hz."""
    done = checked(CORNER)
    assert (done.findings, done.verdict) == ((), "holds")
    assert done.claims[0].exact == pytest.approx(1 / (2 * math.pi * 1e-3), rel=1e-12)
    assert done.passes()
    assert done.passes(strict=True)


@pytest.mark.parametrize(
    ("claims", "verdict"),
    [
        ([], "holds"),
        ([CORNER], "holds"),
        ([CORNER, TOO_HIGH], "fails"),
        ([CORNER, NOWHERE], "undecided"),
        ([NOWHERE, TOO_HIGH], "fails"),
    ],
    ids=["none", "holds", "fails", "undecided", "both"],
)
def test_the_verdict_is_the_worst_of_the_claims(claims: list[str], verdict: str) -> None:
    """One that fails outweighs one that is undecided; claims stand in the file's order."""
    done = checked(*claims)
    assert done.verdict == verdict
    assert done.passes() is (verdict == "holds")
    assert [result.claim.says for result in done.claims] == [text.split('"')[1] for text in claims]


def test_an_error_fails_a_circuit_whose_claims_hold() -> None:
    """A finding of severity error decides the verdict."""
    done = checked(CORNER, text=FILTER.replace('C1 = "out 0 1u"', 'C1 = "out 0 1u"\nR2 = "x y 1k"'))
    assert [finding.code for finding in done.errors] == ["floating"]
    assert done.verdict == "fails"
    assert not done.passes()


def test_a_warning_counts_where_strict() -> None:
    """Warnings change nothing unless they are asked to."""
    done = checked(CORNER, text=FILTER.replace('C1 = "out 0 1u"', 'C1 = "out 0 1u"\nR2 = "out uot 1k"'))
    assert [finding.code for finding in done.warnings] == ["dangling"]
    assert done.errors == ()
    assert done.passes()
    assert not done.passes(strict=True)


def test_a_hand_formula_that_misleads_is_a_warning() -> None:
    """Two unbuffered sections: by hand 159 Hz, in truth less; the warning stands at the formula."""
    text = FILTER.replace('C1 = "out 0 1u"', 'C1 = "out 0 1u"\nR2 = "out b 1k"\nC2 = "b 0 1u"')
    text = text.replace('output = "out"', 'output = "b"')
    by_hand = claim("Corner above 100 Hz", "cutoff", 'at_least = "100 Hz"', 'hand = "1/(2*pi*R1*C1)"')
    done = checked(by_hand, text=text)
    (finding,) = done.findings
    assert (finding.code, finding.severity, finding.file) == ("hand-misleads", "warning", "gauge.rc.toml")
    whole = (text + by_hand).splitlines()
    assert whole[(finding.line or 0) - 1].startswith("hand")
    # |H|^2 = 1/2 for 1/(1 + 3x + x^2), x = jwRC: (1 - u)^2 + 9u = 2 with u = (wRC)^2, u = (sqrt(53) - 7)/2.
    corner = math.sqrt((math.sqrt(53) - 7) / 2) / (2 * math.pi * 1e-3)
    assert "by hand 159.2 Hz, in the real network" in finding.message
    assert f"{corner:.2f} Hz" in finding.message


def test_a_hand_formula_on_the_right_side_is_left_alone() -> None:
    """A formula may be off as long as it leads to the same verdict."""
    assert checked(claim("Corner", "cutoff", 'at_least = "1 Hz"', 'hand = "1/(R1*C1)"')).findings == ()


def test_a_hand_formula_without_a_number_is_a_warning() -> None:
    """A division by zero is named with the claim."""
    done = checked(claim("Corner", "cutoff", 'at_least = "1 Hz"', 'hand = "1/(R1-R1)"'))
    (finding,) = done.findings
    assert (finding.code, finding.severity) == ("hand-fails", "warning")
    assert finding.message.startswith("'Corner': the hand formula gives no number")
    assert done.verdict == "holds"


def test_findings_of_rules_and_claims_are_sorted_together() -> None:
    """Errors first, then warnings, each by line."""
    text = FILTER.replace('C1 = "out 0 1u"', 'C1 = "out 0 1u"\nR2 = "out uot 1k"\nR3 = "x y 1k"')
    done = checked(claim("Corner", "cutoff", 'at_least = "1 Hz"', 'hand = "1/(R1-R1)"'), text=text)
    assert [(finding.code, finding.severity) for finding in done.findings] == [
        ("floating", "error"),
        ("dangling", "warning"),
        ("hand-fails", "warning"),
    ]
    lines = [finding.line or 0 for finding in done.findings]
    assert lines[1] < lines[2]


def test_a_bare_network_can_be_checked() -> None:
    """A network built in Python has findings without lines."""
    network = Network("Pump")
    network.add_resistor("R1", "in", "0", "1k")
    done = check(network)
    assert [(finding.code, finding.file, finding.line) for finding in done.errors] == [
        ("no-source", "Pump", None)
    ]
    assert done.circuit.network is network
