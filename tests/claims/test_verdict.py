"""Claims held against the exact value, their hand formulas beside them."""

from __future__ import annotations

import math
from dataclasses import FrozenInstanceError

import pytest

from rcnet.check import check
from rcnet.circuit import Circuit, parse_circuit_file
from rcnet.claims import ClaimResult, judge, overall

# 1 kohm and 100 nF: the corner lies at 1/(2 pi RC) = 1591.549430918953 Hz.
CORNER = 1e4 / (2 * math.pi)
HEAD = """
title = "Flow meter: low-pass ahead of the logger"
output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 100n"
[sources.Vin]
nodes = "in 0"
ac = 1
dc = "3 V"
"""
# Two equal sections: by hand often 0.6436 of the corner (as if buffered), really 0.374239154338852 of it.
PAIR = HEAD.replace('R1 = "in out 1k"', 'R1 = "in a 1k"\nR2 = "a out 1k"\nC2 = "a 0 100n"')


def circuit(*claims: str, head: str = HEAD) -> Circuit:
    """A circuit with these claims, each the body of a [[claims]] table."""
    return parse_circuit_file(head + "".join(f"[[claims]]\n{claim}\n" for claim in claims), "flow.rc.toml")


def result(claim: str, head: str = HEAD) -> ClaimResult:
    """What comes of a single claim."""
    return judge(circuit(claim, head=head))[0]


# bound -> verdict, margin in Hz from the corner
BOUNDS = {
    'equals = "1.6 kHz"\nwithin = "1 %"': ("holds", CORNER - 1584),
    'equals = "1.6 kHz"\nwithin = "5 Hz"': ("fails", CORNER - 1595),
    'at_least = "1.5 kHz"': ("holds", CORNER - 1500),
    'at_least = "1.6 kHz"': ("fails", CORNER - 1600),
    'at_most = "1.6 kHz"': ("holds", 1600 - CORNER),
    'at_most = "1.5 kHz"': ("fails", 1500 - CORNER),
    'between = ["1.5 kHz", "1.6 kHz"]': ("holds", 1600 - CORNER),
    'between = ["1.5 kHz", "2.6 kHz"]': ("holds", CORNER - 1500),
    'between = ["1.6 kHz", "2 kHz"]': ("fails", CORNER - 1600),
}


@pytest.mark.parametrize("bound", BOUNDS)
def test_bounds_and_margins(bound: str) -> None:
    """A claim holds inside its bound; the margin is the way to the nearer side, negative outside."""
    verdict, margin = BOUNDS[bound]
    got = result(f'measure = "cutoff"\n{bound}')
    assert got.verdict == verdict
    assert got.exact == pytest.approx(CORNER, rel=1e-12)
    assert got.margin == pytest.approx(margin, rel=1e-9)
    assert (got.method, got.low, got.high, got.why) == ("nominal", None, None, None)


def test_results_stand_in_the_files_order() -> None:
    """One result for each claim, in the order of the file, each with its own claim."""
    found = judge(
        circuit(
            'says = "one"\nmeasure = "cutoff"\nat_least = 1',
            'says = "two"\nmeasure = "gain"\nat = "1 kHz"\nat_least = "-1 dB"',
            'says = "three"\nmeasure = "dc_gain"\nequals = 1\nwithin = 0',
        )
    )
    assert [r.claim.says for r in found] == ["one", "two", "three"]
    assert [r.verdict for r in found] == ["holds", "fails", "holds"]


def test_hand_value_that_is_right() -> None:
    """The hand formula is worked out in base units and stands beside the exact value."""
    got = result('measure = "cutoff"\nat_least = "1 kHz"\nhand = "1/(2*pi*R1*C1)"')
    assert got.hand == pytest.approx(CORNER, rel=1e-14)
    assert not got.hand_misleads


def test_hand_value_that_misleads() -> None:
    """Where the formula lands on the other side of the bound than the network, that is said as a warning."""
    claim = 'measure = "cutoff"\nequals = "1.02 kHz"\nwithin = "2 %"\nhand = "sqrt(sqrt(2)-1)/(2*pi*R1*C1)"'
    got = result(claim, PAIR)
    assert got.hand == pytest.approx(0.643594252905583 * CORNER, rel=1e-12)
    assert got.exact == pytest.approx(0.374239154338852 * CORNER, rel=1e-12)
    assert got.verdict == "fails"
    assert got.hand_misleads
    warnings = check(circuit(claim, head=PAIR)).warnings
    assert [w.code for w in warnings] == ["hand-misleads"]
    assert "1.024 kHz" in warnings[0].message
    assert "595.6 Hz" in warnings[0].message


def test_wrong_hand_value_on_the_right_side_does_not_mislead() -> None:
    """A formula that errs but leads to the same verdict is no warning."""
    claim = 'measure = "cutoff"\nat_most = "2 kHz"\nhand = "1/(2*pi*R1*C1)"'
    assert result(claim, PAIR).verdict == "holds"
    assert check(circuit(claim, head=PAIR)).findings == ()


HAND_ERRORS = {
    "division by zero": "1/(R1-R1)",
    "logarithm of a negative number": "log(0-R1)",
    "overflow": "exp(R1*R1)",
}


@pytest.mark.parametrize("case", HAND_ERRORS)
def test_hand_formula_without_a_number(case: str) -> None:
    """A formula that gives no number leaves the verdict alone and is a warning with its reason."""
    claim = f'measure = "cutoff"\nat_least = "1 kHz"\nhand = "{HAND_ERRORS[case]}"'
    got = result(claim)
    assert (got.verdict, got.hand) == ("holds", None)
    assert got.hand_why
    done = check(circuit(claim))
    assert [w.code for w in done.warnings] == ["hand-fails"]
    assert done.passes()
    assert not done.passes(strict=True)


def test_hand_formula_knows_temperature_and_sources() -> None:
    """In a hand formula T is the temperature in kelvin and a source's name its dc value."""
    warm = HEAD + '[conditions]\ntemperature = "77"\n'
    assert result('measure = "dc_gain"\nequals = 1\nwithin = 0\nhand = "T"', warm).hand == pytest.approx(
        350.15
    )


UNDECIDED = {
    "no such crossing": ('measure = "bandwidth"\nat_least = 1', "no lower cutoff"),
    "nothing at dc": ('measure = "elmore_delay"\nof = "out in"\nat_most = 1', "nothing passes at dc"),
}


@pytest.mark.parametrize("case", UNDECIDED)
def test_undecided(case: str) -> None:
    """What has no exact value has no verdict, no margin and a reason; its hand value is still told."""
    claim, why = UNDECIDED[case]
    got = result(f'{claim}\nhand = "R1"')
    assert (got.verdict, got.exact, got.margin) == ("undecided", None, None)
    assert got.why is not None
    assert why in got.why
    assert got.hand == 1000
    assert not got.hand_misleads
    assert not check(circuit(claim)).passes()


def test_noise_is_that_of_the_circuits_temperature() -> None:
    """All the noise of one RC is sqrt(kT/C) (Nyquist 1928), T the temperature the circuit file names."""
    claim = 'measure = "noise"\nfrom = 0\nto = inf\nat_most = "1 mV"'
    for celsius in (27, 85):
        got = result(claim, head=f"{HEAD}[conditions]\ntemperature = {celsius}\n")
        assert got.exact == pytest.approx(math.sqrt(1.380649e-23 * (celsius + 273.15) / 100e-9), rel=1e-12)


def test_claim_over_tolerances() -> None:
    """Parts without a tolerance do not move: the range is the nominal value, and it is proven."""
    fails = result('measure = "cutoff"\nat_least = "2 kHz"\nover = "tolerance"')
    assert fails.verdict == "fails"
    holds = result('measure = "cutoff"\nat_least = "1 kHz"\nover = "tolerance"')
    assert (holds.verdict, holds.method, holds.why) == ("holds", "proven", None)
    assert holds.low == holds.high == holds.exact


def test_overall() -> None:
    """Failing outweighs undecided, which outweighs holding; nothing claimed holds."""
    holds = 'measure = "cutoff"\nat_least = 1'
    fails = 'measure = "cutoff"\nat_most = 1'
    open_ = 'measure = "bandwidth"\nat_least = 1'
    assert overall(judge(circuit(holds))) == "holds"
    assert overall(judge(circuit(holds, open_))) == "undecided"
    assert overall(judge(circuit(open_, holds, fails))) == "fails"
    assert overall(()) == "holds"


def test_unsolvable_circuit_is_undecided() -> None:
    """A claim about a circuit that has no answer is undecided with the reason, not an exception."""
    loop = HEAD.replace("[sources.Vin]", '[sources.V2]\nnodes = "in 0"\ndc = 1\n[sources.Vin]')
    got = result('measure = "cutoff"\nat_least = 1', loop)
    assert got.verdict == "undecided"
    assert got.why


def test_results_are_frozen() -> None:
    """A result cannot be changed, and judging leaves the circuit as it was."""
    whole = circuit('measure = "cutoff"\nat_least = 1')
    before = tuple(whole.network.parts)
    got = judge(whole)[0]
    with pytest.raises(FrozenInstanceError):
        got.verdict = "fails"  # type: ignore[misc]
    assert tuple(whole.network.parts) == before
