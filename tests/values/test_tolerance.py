"""Tolerances, ratings and temperature coefficients mean what the data sheets say."""

from __future__ import annotations

import dataclasses
import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from rcnet.errors import QuantityError
from rcnet.values import Tolerance, classify_extra, parse_rating, parse_tempco, parse_tolerance

# Per cent, both ways, IEC 60062:2016.
LETTERS = {
    "E": 0.005, "L": 0.01, "P": 0.02, "W": 0.05, "B": 0.1, "C": 0.25, "D": 0.5, "F": 1, "G": 2, "H": 3,
    "J": 5, "K": 10, "M": 20, "N": 30,
}  # fmt: skip


@pytest.mark.parametrize(("letter", "percent"), LETTERS.items())
def test_letters_of_resistors(letter: str, percent: float) -> None:
    """Each letter of IEC 60062 is its per cent, both ways."""
    tolerance = parse_tolerance(letter)
    assert tolerance.high == pytest.approx(percent / 100, rel=1e-15)
    assert tolerance.low == -tolerance.high


@pytest.mark.parametrize(
    ("letter", "low", "high"), [("Q", 10, 30), ("S", 20, 50), ("T", 10, 50), ("Z", 20, 80)]
)
def test_unsymmetrical_letters_are_for_capacitors(letter: str, low: float, high: float) -> None:
    """Q S T Z of IEC 60062 hold on capacitors and are refused elsewhere."""
    assert parse_tolerance(letter, kind="C", nominal=1e-6) == Tolerance(-low / 100, high / 100)
    for kind in ("R", "L"):
        with pytest.raises(QuantityError, match="capacitors only"):
            parse_tolerance(letter, kind=kind)


# Picofarads below 10 pF, IEC 60062:2016.
@pytest.mark.parametrize(("letter", "picofarads"), [("B", 0.1), ("C", 0.25), ("D", 0.5), ("F", 1), ("G", 2)])
def test_letters_of_small_capacitors_are_picofarads(letter: str, picofarads: float) -> None:
    """Below 10 pF the letters are absolute; from 10 pF on, and on resistors, they are per cent."""
    small = parse_tolerance(letter, kind="C", nominal=4.7e-12)
    assert small.high * 4.7 == pytest.approx(picofarads, rel=1e-14)
    assert small.low == -small.high
    assert parse_tolerance(letter, kind="C", nominal=10e-12) == parse_tolerance(letter)
    assert parse_tolerance(letter, kind="R", nominal=4.7e-12) == parse_tolerance(letter)
    assert parse_tolerance(letter, kind="C") == parse_tolerance(letter)


def test_a_small_capacitor_cannot_vanish() -> None:
    """2 pF either way of 1 pF is refused."""
    with pytest.raises(QuantityError, match="2 pF"):
        parse_tolerance("G", kind="C", nominal=1e-12)


@pytest.mark.parametrize("letter", ["P", "V", "Y", "R"])
def test_letters_that_lists_contradict_are_refused(letter: str) -> None:
    """Where public lists disagree about a capacitor's letter, none of the meanings is taken."""
    with pytest.raises(QuantityError, match="different things"):
        parse_tolerance(letter, kind="C", nominal=1e-6)


WRITTEN = {
    "per cent": ("1%", -0.01, 0.01),
    "blank": ("0.5 %", -0.005, 0.005),
    "plus-minus": ("±1%", -0.01, 0.01),
    "plus-minus in ASCII": ("+/-1%", -0.01, 0.01),
    "two sides": ("+20/-80%", -0.8, 0.2),
    "two sides, low first": ("-20/+80%", -0.2, 0.8),
    "two per cent signs": ("-20%/+80%", -0.2, 0.8),
    "more than double": ("+150/-20%", -0.2, 1.5),
    "one side": ("+5/-0%", 0.0, 0.05),
    "fraction": (0.05, -0.05, 0.05),
    "fraction in words": ("0.05", -0.05, 0.05),
    "none": (0, 0.0, 0.0),
}


@pytest.mark.parametrize(("text", "low", "high"), WRITTEN.values(), ids=WRITTEN.keys())
def test_per_cent_and_fractions(text: str | float, low: float, high: float) -> None:
    """Per cent are hundredths, exactly; bare numbers are fractions."""
    assert parse_tolerance(text) == Tolerance(low, high)


REFUSED = {
    "per cent without the sign": ("5", "'5%'"),
    "number of per cent": (5, "'5%'"),
    "negative": (-0.1, "5%"),
    "small letter": ("j", "'J'"),
    "no letter": ("x", "IEC 60062"),
    "one side only": ("+5%", "±5%"),
    "same sign twice": ("+20/+80%", "one"),
    "comma": ("1,5%", "decimal point"),
    "vanishing part": ("100%", "-100 %"),
    "empty": ("", "5%"),
    "long": ("1" * 200 + "%", "5%"),
    "truth": (True, ""),
    "nan": (math.nan, ""),
    "infinite": (math.inf, ""),
    "overflow": ("+1e999/-5%", ""),
    "word": ("five", "5%"),
}


@pytest.mark.parametrize(("text", "remedy"), REFUSED.values(), ids=REFUSED.keys())
def test_what_is_no_tolerance_is_refused(text: str | float, remedy: str) -> None:
    """Each slip gets a remedy."""
    with pytest.raises(QuantityError) as caught:
        parse_tolerance(text)
    assert remedy in (caught.value.remedy or "")
    assert caught.value.remedy


@pytest.mark.parametrize(
    ("low", "high"), [(0.1, 0.2), (-0.1, -0.05), (-1.0, 0.0), (-2.0, 0.0), (math.nan, 0.1), (-0.1, math.inf)]
)
def test_a_tolerance_lies_about_zero(low: float, high: float) -> None:
    """Ends on the wrong side of zero, nan, infinity and a part that vanishes are refused."""
    with pytest.raises(QuantityError):
        Tolerance(low, high)


def test_a_tolerance_is_frozen() -> None:
    """A tolerance is a value."""
    with pytest.raises(dataclasses.FrozenInstanceError):
        parse_tolerance("J").low = 0.0  # type: ignore[misc]


@pytest.mark.parametrize(("text", "again"), [("1%", "1%"), ("J", "5%"), ("-80/+20%", "+20/-80%"), (0, "0%")])
def test_tolerances_write_themselves(text: str | float, again: str) -> None:
    """str() is what a data sheet would say."""
    assert str(parse_tolerance(text)) == again


@settings(deadline=None)
@given(st.floats(0, 1, exclude_max=True), st.floats(0, 1e6) | st.none())
def test_tolerances_read_back_the_same(low: float, high: float | None) -> None:
    """Every tolerance's text is read as the same fractions."""
    assume(low == 0 or low > 1e-300)
    assume(not high or high > 1e-300)
    tolerance = Tolerance(-low, low if high is None else high)
    assert parse_tolerance(str(tolerance)) == tolerance


@pytest.mark.parametrize(
    ("text", "per_kelvin"),
    [
        ("100ppm", 100e-6),
        ("100 ppm/K", 100e-6),
        ("-750ppm", -750e-6),
        ("+50ppm/°C", 50e-6),
        ("1e-4", 1e-4),
        (-2e-3, -2e-3),
    ],
)
def test_temperature_coefficients(text: str | float, per_kelvin: float) -> None:
    """Parts per million are 1e-6 per kelvin; a bare number is per kelvin."""
    assert parse_tempco(text) == per_kelvin


@pytest.mark.parametrize(
    "text", ["100", 100, "±100ppm", "100pm", "", "ppm", math.nan, math.inf, "1e999ppm", "1,5ppm"]
)
def test_what_is_no_temperature_coefficient_is_refused(text: str | float) -> None:
    """A bare 100 was meant as ppm; a limit has no sign to compute with."""
    with pytest.raises(QuantityError) as caught:
        parse_tempco(text)
    assert caught.value.remedy


@pytest.mark.parametrize(
    ("text", "rating"),
    [
        ("0.1W", (0.1, "W")),
        ("1/4W", (0.25, "W")),
        ("1/8 W", (0.125, "W")),
        ("250 mW", (0.25, "W")),
        ("25 V", (25.0, "V")),
        ("1kV", (1000.0, "V")),
        ("0.5A", (0.5, "A")),
    ],
)
def test_ratings(text: str, rating: tuple[float, str]) -> None:
    """A rating has a value in base units, and a unit."""
    assert parse_rating(text) == rating


@pytest.mark.parametrize("text", ["5", "1/4", "1/0W", "0W", "-5V", "5 ohm", "", "W", "1e999V", "infW", 0.1])
def test_what_is_no_rating_is_refused(text: str) -> None:
    """No unit, nothing, less than nothing and too much are refused."""
    with pytest.raises(QuantityError) as caught:
        parse_rating(text)
    assert caught.value.remedy


KINDS = {
    "tolerance": ["1%", "±1%", "+20/-80%", "-20%/+80%", "J", "W", "j", "1,5%"],
    "rating": ["0.1W", "25V", "1/4W", "250mW", "0.5A", ".1W"],
    "tempco": ["100ppm", "-750ppm", "100ppm/K", "±100ppm", "1e-4/K"],
}


@pytest.mark.parametrize(
    ("kind", "token"), [(kind, token) for kind, tokens in KINDS.items() for token in tokens]
)
def test_extras_are_told_apart_by_shape(kind: str, token: str) -> None:
    """What follows a part's value is a tolerance, a rating or a temperature coefficient."""
    assert classify_extra(token) == kind


@pytest.mark.parametrize("token", ["0.05", "5", "foo", "4k7", "", "%", "ppm", "1" * 200 + "%"])
def test_other_extras_are_refused(token: str) -> None:
    """A bare number could be any of the three, so it is named and refused."""
    with pytest.raises(QuantityError) as caught:
        classify_extra(token)
    assert repr(token)[:50] in caught.value.message
