"""Feature Selective Validation against published properties and independently computed cases.

IEEE Std 1597.1; A. P. Duffy et al., IEEE Trans. EMC 48(3):449, 2006, doi 10.1109/TEMC.2006.879358;
A. Duffy, A. Orlandi, H. Sasse, IEEE Trans. EMC 50(2):413-415, 2008; J. Bongiorno, A. Mariscotti,
Electronics 11(16):2532, 2022; 1-D FSV manual, University of L'Aquila, 2009. The numeric cases come from two
implementations written independently of this one, which agreed to 1e-12; the rest follows from the formulas.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.compare.fsv import (
    Fsv,
    bands,
    break_point,
    fsv,
    grade_number,
    histogram,
    histogram_mean,
    spread_number,
    visual,
    word,
)

TOL = 1e-9


def _ripple() -> np.ndarray:
    x = np.arange(201) / 200
    return np.exp(-3 * x) + 0.2 * np.sin(12 * np.pi * x)


def _low_pass(factor: float) -> np.ndarray:
    f = 10 ** (-2 + np.arange(81) / 20)
    return 1 / np.sqrt(1 + (factor * f) ** 2)


def _db(y: np.ndarray) -> np.ndarray:
    return 20 * np.log10(y)


def _swing(delay: float) -> np.ndarray:
    x = np.arange(256) / 255
    return np.exp(-x) * np.sin(10 * np.pi * (x - delay))


PAIRS = {
    "A": (_ripple(), _ripple()),
    "B": (_ripple(), 1.1 * _ripple()),
    "C1": (_low_pass(1), _low_pass(1.1)),
    "C2": (_db(_low_pass(1)), _db(_low_pass(1.1))),
    "C3": (_low_pass(1), _low_pass(2)),
    "C4": (_db(_low_pass(1)), _db(_low_pass(2))),
    "D": (_swing(0), _swing(0.02)),
    "E": (np.ones(64), np.full(64, 1.1)),
    "F": (_ripple(), _ripple() + 0.1),
}
# name: break point, ADM, FDM, GDM, word
TOTALS = {
    "A": (16, 0, 0, 0, "Excellent"),
    "B": (16, 0.0989360812, 0.0767195767, 0.1345558960, "Very good"),
    "C1": (17, 0.0120326705, 0.0034490851, 0.0130527549, "Excellent"),
    "C2": (17, 0.0297830565, 0.0164550638, 0.0371964332, "Excellent"),
    "C3": (17, 0.0951948524, 0.0186001878, 0.0999265622, "Excellent"),
    "C4": (17, 0.2278680211, 0.1112989610, 0.2769701483, "Good"),
    "D": (10, 0.6129499005, 0.3488783175, 0.7489220618, "Fair"),
    "E": (10, 0.0499414784, 0, 0.0499414784, "Excellent"),
    "F": (16, 0.1538626177, 0, 0.1538626177, "Very good"),
}
# case, n: ADM, FDM, GDM
POINTS = {
    ("B", 0): (0.110473981818, 0.318396979361, 0.337018007113),
    ("B", 50): (0.080718191408, 0.072300913456, 0.108364424562),
    ("B", 100): (0.036039266446, 0.051595488533, 0.062935865474),
    ("D", 0): (1.476805938082, 1.022163110409, 1.796043764232),
    ("D", 64): (0.503199011342, 0.345082564262, 0.610156718535),
    ("D", 255): (1.551115026883, 0.703532327807, 1.703207433900),
}
# case: points per class, GRADE, SPREAD
HISTOGRAMS = {
    "B": ((105, 62, 27, 7, 0, 0), 3, 3),
    "C4": ((19, 15, 30, 16, 1, 0), 4, 4),
    "D": ((2, 9, 26, 150, 46, 23), 5, 3),
}


def _fsv(first: np.ndarray, second: np.ndarray) -> Fsv:
    result = fsv(first, second)
    assert result is not None
    return result


@pytest.mark.parametrize("case", TOTALS)
def test_totals(case: str) -> None:
    """Break point, the three totals and the word of the independently computed cases."""
    edge, adm, fdm, gdm, grade = TOTALS[case]
    result = _fsv(*PAIRS[case])
    assert break_point(*PAIRS[case]) == edge
    assert (result.adm, result.fdm, result.gdm) == pytest.approx((adm, fdm, gdm), rel=0, abs=TOL)
    assert result.grade == grade


@pytest.mark.parametrize(("case", "n"), POINTS)
def test_point_values(case: str, n: int) -> None:
    """Single points of the independently computed cases, both ends of the curve included."""
    result = _fsv(*PAIRS[case])
    found = (result.adm_points[n], result.fdm_points[n], result.gdm_points[n])
    assert found == pytest.approx(POINTS[case, n], rel=0, abs=TOL)


@pytest.mark.parametrize("case", HISTOGRAMS)
def test_histogram_grade_and_spread(case: str) -> None:
    """Points per class (one point may lie on a class edge), GRADE and SPREAD."""
    counts, grade, spread = HISTOGRAMS[case]
    result = _fsv(*PAIRS[case])
    assert np.max(np.abs(histogram(result.gdm_points) - counts)) <= 1
    assert (result.grade_number, result.spread_number) == (grade, spread)


def test_bands_of_a_curve() -> None:
    """The three bands at one point of case B, and their sum, which is the curve."""
    first = PAIRS["B"][0]
    parts = bands(first, 16)
    found = (parts.dc[100], parts.low[100], parts.high[100])
    assert found == pytest.approx((0.226581870890, -0.003470623041, 0.000018912299), rel=0, abs=TOL)
    np.testing.assert_allclose(sum(parts), first, rtol=0, atol=1e-14)


# case: mean of the low-band term, mean of the offset term
PARTS = {"B": (1 / 21, 1 / 21), "D": (0.2651710747, 0.2345302256), "F": (0.0, 0.1344555153)}


@pytest.mark.parametrize("case", PARTS)
def test_parts_of_the_amplitude_measure(case: str) -> None:
    """The means of both terms from our bands, and that ADM(n) is low + offset e^offset of them."""
    first, second = PAIRS[case]
    edge = break_point(first, second)
    one, two = bands(first, edge), bands(second, edge)
    low, offset = (
        np.abs(np.abs(a) - np.abs(b)) / np.mean(np.abs(a) + np.abs(b))
        for a, b in ((one.low, two.low), (one.dc, two.dc))
    )
    assert (np.mean(low), np.mean(offset)) == pytest.approx(PARTS[case], rel=0, abs=TOL)
    expected = low + offset * np.exp(offset)
    np.testing.assert_allclose(_fsv(first, second).adm_points, expected, rtol=0, atol=TOL)


def test_an_added_constant_matters() -> None:
    """Case C2 with 100 dB on both curves gives another total: levels must keep their reference."""
    first, second = PAIRS["C2"]
    assert _fsv(first + 100, second + 100).gdm == pytest.approx(0.0226080, rel=0, abs=5e-8)


def test_other_single_figures() -> None:
    """The visual scale of case D's total and the mean of its histogram."""
    result = _fsv(*PAIRS["D"])
    assert visual(result.gdm) == pytest.approx(4.874805, rel=0, abs=5e-7)
    assert histogram_mean(result.gdm_points) == pytest.approx(4.1640625, rel=0, abs=1.5 / 256)


VISUAL = [(0.0, 1), (0.1, 2), (0.2, 3.01), (0.4, 4.005), (0.8, 5.0025), (1.6, 6.00125), (9.0, 6)]
EDGES = [
    (0.0, "Excellent"),
    (0.0999, "Excellent"),
    (0.1, "Very good"),
    (0.2, "Good"),
    (0.4, "Fair"),
    (0.8, "Poor"),
    (1.5999, "Poor"),
    (1.6, "Very poor"),
    (40.0, "Very poor"),
]


@pytest.mark.parametrize(("value", "scale"), VISUAL)
def test_visual_scale(value: float, scale: float) -> None:
    """Each piece of the L'Aquila manual's map, at its upper end."""
    assert visual(value) == pytest.approx(scale, rel=0, abs=1e-12)


@pytest.mark.parametrize(("value", "expected"), EDGES)
def test_words(value: float, expected: str) -> None:
    """A boundary belongs to the class above it (the interpretation table of all the sources)."""
    assert word(value) == expected


def test_grade_and_spread_of_a_two_humped_histogram() -> None:
    """Counts 45, 5, 0, 0, 5, 45 give GRADE 6 and, the fullest class first, SPREAD 2."""
    points = np.repeat([0.05, 0.15, 1.0, 2.0], [45, 5, 5, 45])
    assert (grade_number(points), spread_number(points)) == (6, 2)


def test_exactly_85_percent_is_enough() -> None:
    """At least 85 % means that 85 of 100 points suffice, and 84 do not."""
    assert grade_number(np.repeat([0.05, 0.15], [85, 15])) == 1
    assert grade_number(np.repeat([0.05, 0.15], [84, 16])) == 2


def test_identity_is_exactly_zero() -> None:
    """A curve against itself: every value 0, Excellent, GRADE 1, SPREAD 1."""
    result = _fsv(_ripple(), _ripple())
    assert not result.gdm_points.any()
    assert (result.grade, result.grade_number, result.spread_number) == ("Excellent", 1, 1)


@settings(deadline=None, max_examples=50)
@given(st.floats(0.01, 100.0))
def test_scaling_one_curve(k: float) -> None:
    """y2 = k y1: total FDM is (29/18) q and the offset and low terms average q, q = |k - 1| / (k + 1)."""
    q = abs(k - 1) / (k + 1)
    result = _fsv(_ripple(), k * _ripple())
    parts = bands(_ripple(), 16)
    shares = [np.abs(part) / np.mean(np.abs(part)) * q for part in (parts.low, parts.dc)]
    assert result.fdm == pytest.approx(29 / 18 * q, rel=0, abs=TOL)
    np.testing.assert_allclose(result.adm_points, shares[0] + shares[1] * np.exp(shares[1]), rtol=0, atol=TOL)


@settings(deadline=None, max_examples=50)
@given(st.integers(26, 300), st.integers(0, 2**32 - 1), st.sampled_from([-1e200, 3e-200, 0.3, 7.0]))
def test_sign_exchange_and_common_scale(points: int, seed: int, scale: float) -> None:
    """The measures see neither a sign inversion, nor which curve is first, nor a common factor."""
    one, two = np.random.default_rng(seed).normal(size=(2, points))
    result = _fsv(one, two)
    for other in (_fsv(two, one), _fsv(scale * one, scale * two)):
        np.testing.assert_allclose(other.gdm_points, result.gdm_points, rtol=0, atol=1e-8)
    assert _fsv(one, -one).gdm == 0


def test_constants_and_offsets() -> None:
    """Constants: ADM = q e^q and FDM = 0. An added constant leaves the low and high bands alone."""
    q = 1 / 3
    constants = _fsv(np.full(40, 5.0), np.full(40, 10.0))
    assert (constants.adm, constants.fdm) == pytest.approx((q * np.exp(q), 0), rel=0, abs=TOL)
    assert _fsv(_ripple(), _ripple() + 3.0).fdm == pytest.approx(0, abs=TOL)
    assert _fsv(np.zeros(30), np.zeros(30)).gdm == 0


def test_rounding_stays_rounding() -> None:
    """Relative noise of 1e-12 on a smooth curve stays at that level in the total."""
    first = _low_pass(1)
    noisy = first * (1 + 1e-12 * np.random.default_rng(1).normal(size=len(first)))
    assert 0 < _fsv(first, noisy).gdm < 1e-10


def test_no_answer() -> None:
    """Fewer than 26 points, or a value that is not finite, give None; different shapes are a mistake."""
    assert fsv(np.ones(25), np.ones(25)) is None
    assert fsv(np.ones(26), np.ones(26)) is not None
    assert fsv(np.r_[np.ones(30), -np.inf], np.ones(31)) is None
    assert fsv(np.r_[np.ones(30), np.nan], np.ones(31)) is None
    assert fsv(np.array([]), np.array([])) is None
    with pytest.raises(ValueError, match="one shape"):
        fsv(np.ones(30), np.ones(31))
