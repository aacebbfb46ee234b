"""The preferred series: the values of the standard, the nearest by ratio, exactly rounded."""

from __future__ import annotations

import math
from fractions import Fraction
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.errors import QuantityError
from rcnet.values import SERIES, above, below, customary_series, in_series, nearest, values_between

# IEC 60063:2015, as public lists of it have them; E192 is E96 with the values of BETWEEN in its gaps.
E48 = """
100 105 110 115 121 127 133 140 147 154 162 169 178 187 196 205 215 226 237 249 261 274 287 301
316 332 348 365 383 402 422 442 464 487 511 536 562 590 619 649 681 715 750 787 825 866 909 953
"""
E96 = """
100 102 105 107 110 113 115 118 121 124 127 130 133 137 140 143 147 150 154 158 162 165 169 174
178 182 187 191 196 200 205 210 215 221 226 232 237 243 249 255 261 267 274 280 287 294 301 309
316 324 332 340 348 357 365 374 383 392 402 412 422 432 442 453 464 475 487 499 511 523 536 549
562 576 590 604 619 634 649 665 681 698 715 732 750 768 787 806 825 845 866 887 909 931 953 976
"""
BETWEEN = """
101 104 106 109 111 114 117 120 123 126 129 132 135 138 142 145 149 152 156 160 164 167 172 176
180 184 189 193 198 203 208 213 218 223 229 234 240 246 252 258 264 271 277 284 291 298 305 312
320 328 336 344 352 361 370 379 388 397 407 417 427 437 448 459 470 481 493 505 517 530 542 556
569 583 597 612 626 642 657 673 690 706 723 741 759 777 796 816 835 856 876 898 920 942 965 988
"""
LISTS = {
    "E3": "10 22 47",
    "E6": "10 15 22 33 47 68",
    "E12": "10 12 15 18 22 27 33 39 47 56 68 82",
    "E24": "10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91",
    "E48": E48,
    "E96": E96,
    "E192": f"{E96} {BETWEEN}",
}
SUMS = {"E3": 79, "E6": 195, "E12": 429, "E24": 901, "E48": 18313, "E96": 37070, "E192": 74599}


@pytest.mark.parametrize("name", LISTS)
def test_a_series_is_that_of_the_standard(name: str) -> None:
    """Value by value as listed, as many as its name says, with the list's check sum."""
    listed = sorted(int(word) for word in LISTS[name].split())
    assert list(SERIES[name]) == listed
    assert len(listed) == int(name[1:])
    assert sum(listed) == SUMS[name]


def test_the_series_are_those_of_the_standard_and_cannot_be_changed() -> None:
    """Seven of them, in the standard's order; the table is read-only."""
    assert list(SERIES) == list(LISTS)
    with pytest.raises(TypeError):
        SERIES["E3"] = (1,)  # type: ignore[index]


# The furthest a value can lie from its series, in ratio: half-way (geometrically) in the widest gap.
FURTHEST = {
    "E3": (10, 22, 0.4832),
    "E6": (10, 15, 0.2247),
    "E12": (12, 15, 0.1180),
    "E24": (13, 15, 0.0742),
    "E48": (169, 178, 0.0263),
    "E96": (133, 137, 0.0149),
    "E192": (102, 104, 0.0098),
}


@pytest.mark.parametrize("name", FURTHEST)
def test_the_widest_gap_is_where_it_should_be(name: str) -> None:
    """Just below the geometric middle of the widest gap the lower value is nearest, just above the upper."""
    low, high, ratio = FURTHEST[name]
    middle = math.sqrt(low * high)
    assert nearest(middle * (1 - 1e-9), name) == low
    assert nearest(middle * (1 + 1e-9), name) == high
    assert middle / low - 1 == pytest.approx(ratio, abs=5e-5)
    values = [*SERIES[name], 10 ** len(str(SERIES[name][0]))]
    assert max(math.sqrt(b / a) for a, b in pairwise(values)) == pytest.approx(middle / low, rel=1e-12)


NEAREST = {
    "itself": (4.7e-9, "E12", 4.7e-9),
    "by ratio and not by difference": (15.0, "E3", 22.0),  # 14.8324 is the middle, 16 the arithmetic one
    "into the decade above": (9.7, "E24", 10.0),
    "into the decade below": (1.04, "E24", 1.0),
    "from the decade above": (9.95e-8, "E3", 1e-7),
    "a common slip": (5000.0, "E96", 4990.0),
    "the exception of E192": (919.0, "E192", 920.0),
    "a power of ten that is none in binary": (1e-7, "E6", 1e-7),
    "no power of ten of a logarithm that is off": (1000.0, "E3", 1000.0),
    "the least double": (5e-324, "E24", 5e-324),
    "near the greatest double": (1.79e308, "E24", 1.6e308),
}


@pytest.mark.parametrize(("value", "name", "wanted"), NEAREST.values(), ids=NEAREST)
def test_the_nearest_value(value: float, name: str, wanted: float) -> None:
    """The double nearest to the decimal value of the series that is nearest by ratio."""
    assert nearest(value, name) == wanted


@settings(deadline=None, max_examples=150)
@given(st.floats(1e-290, 1e290), st.sampled_from(list(SERIES)))
def test_nothing_is_nearer_than_the_nearest(value: float, name: str) -> None:
    """No neighbour in the series is nearer in ratio, in exact fractions; it has three digits at most."""
    found = nearest(value, name)
    ratio = max(Fraction(value) / Fraction(found), Fraction(found) / Fraction(value))
    for other in (below(found, name), above(found, name)):
        assert ratio <= max(Fraction(value) / Fraction(other), Fraction(other) / Fraction(value))
    assert float(f"{found:.2e}") == found
    assert in_series(found, name)


def test_neighbours() -> None:
    """The next value down and up; a value off by rounding alone is not its own neighbour."""
    assert (below(4700, "E24"), above(4700, "E24")) == (4300, 5100)
    assert (below(5000, "E24"), above(5000, "E24")) == (4700, 5100)
    assert (below(1e-6, "E3"), above(4.7e-6, "E3")) == (4.7e-7, 1e-5)
    computed = 0.1 + 0.2  # one unit above 0.3
    assert computed != 0.3
    assert (below(computed, "E24"), above(computed, "E24")) == (0.27, 0.33)


def test_whether_a_value_is_in_a_series() -> None:
    """Rounding of decimal text does not count, anything more does."""
    assert in_series(0.1 + 0.2, "E24")
    assert in_series(4.7e-9 * (1 + 1e-10), "E3")
    assert not in_series(4.7e-9 * (1 + 1e-8), "E3")
    assert in_series(4990.0, "E96")
    assert not in_series(4990.0, "E24")
    assert not in_series(9.19, "E192")


def test_values_between() -> None:
    """Rising, both ends in, across decades, each the double nearest to its decimal."""
    assert values_between(1000, 10_000, "E6") == [1000, 1500, 2200, 3300, 4700, 6800, 10_000]
    assert values_between(0.5e-9, 5e-9, "E3") == [1e-9, 2.2e-9, 4.7e-9]
    assert values_between(4.7e-9, 4.7e-9, "E3") == [4.7e-9]
    assert values_between(2, 1, "E3") == values_between(1.1, 1.4, "E6") == []
    many = values_between(1e-12, 1e-6, "E192")
    assert len(many) == 6 * 192 + 1
    assert many == sorted(many)
    assert all(value == float(f"{value:.2e}") for value in many)


CUSTOMARY = {
    0.3: ("E3",),
    0.2: ("E6",),
    0.1: ("E12",),
    0.05: ("E24",),
    0.03: ("E24",),
    0.02: ("E48", "E24"),
    0.01: ("E96", "E24"),
    0.005: ("E192", "E24"),
    0.001: ("E192", "E24"),
    0.0: ("E192", "E24"),
    0.1 + 1e-17: ("E12",),
}


@pytest.mark.parametrize(("tolerance", "names"), CUSTOMARY.items())
def test_the_customary_series_of_a_tolerance(tolerance: float, names: tuple[str, ...]) -> None:
    """As sold: 10 % goes with E12, 5 % with E24, 1 % with E96 or E24."""
    assert customary_series(tolerance) == names


@pytest.mark.parametrize("value", [0.0, -1.0, math.inf, math.nan])
def test_what_has_no_preferred_value(value: float) -> None:
    """Zero, negative and not finite: an error that shows the value."""
    for ask in (nearest, in_series, below, above):
        with pytest.raises(QuantityError, match=f"^{value!r} has no preferred value"):
            ask(value, "E24")
    with pytest.raises(QuantityError, match="has no preferred value"):
        values_between(1, value, "E24")


def test_errors_name_the_remedy() -> None:
    """A series that does not exist; a negative tolerance; no double left above or below."""
    with pytest.raises(QuantityError, match="'E25' is no series") as caught:
        nearest(1, "E25")
    assert caught.value.remedy == "Known: E3, E6, E12, E24, E48, E96, E192."
    with pytest.raises(QuantityError, match=r"a tolerance of -0\.1"):
        customary_series(-0.1)
    with pytest.raises(QuantityError, match="a tolerance of nan"):
        customary_series(math.nan)
    with pytest.raises(QuantityError, match="no value above"):
        above(1.7e308, "E3")
    with pytest.raises(QuantityError, match="no value below"):
        below(5e-324, "E3")
