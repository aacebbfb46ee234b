"""Quantities are read exactly, refused with a remedy, and written so that they read back."""

from __future__ import annotations

import math
import struct
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.errors import QuantityError
from rcnet.values import format_quantity, parse_quantity, write_quantity

# Text, unit, the decimal it stands for.
READ = {
    # ISO 80000-1, SI prefixes: k is 1e3, m is 1e-3, M is 1e6, u (for µ) 1e-6.
    "blank before the unit": ("4.7 kohm", "ohm", "4.7e3"),
    "no blank": ("4.7kohm", "ohm", "4.7e3"),
    "no unit": ("4.7k", "ohm", "4.7e3"),
    "prefix after a blank, no unit": ("4.7 k", "ohm", "4.7e3"),
    "plain": ("4.7e3", "ohm", "4.7e3"),
    "plain with unit": ("4.7e3 ohm", "ohm", "4.7e3"),
    "signed exponent": ("1E-8F", "F", "1e-8"),
    "point first": (".5 V", "V", "0.5"),
    "point last": ("5. V", "V", "5"),
    "negative": ("-5 V", "V", "-5"),
    "plus": ("+5 mV", "V", "5e-3"),
    "ohm sign U+2126": ("10 M\u2126", "ohm", "1e7"),
    "omega U+03A9": ("10 M\u03a9", "ohm", "1e7"),
    "meg": ("10meg", "ohm", "1e7"),
    "Meg": ("10 Megohm", "ohm", "1e7"),
    "MEG": ("10 MEGHz", "Hz", "1e7"),
    "nano": ("10 nF", "F", "1e-8"),
    "micro as u": ("1u", "F", "1e-6"),
    "micro U+00B5": ("1 \u00b5F", "F", "1e-6"),
    "micro U+03BC": ("1 \u03bcF", "F", "1e-6"),
    "pico": ("33p", "F", "33e-12"),
    "femto": ("10 fF", "F", "10e-15"),
    "farad is not femto": ("10 F", "F", "10"),
    "milli": ("10 mohm", "ohm", "10e-3"),
    "giga": ("1 Gohm", "ohm", "1e9"),
    "tera": ("1 T", "ohm", "1e12"),
    "kilohertz": ("1.59 kHz", "Hz", "1590"),
    "milliseconds": ("5 ms", "s", "5e-3"),
    "henry": ("10 mH", "H", "10e-3"),
    "siemens": ("2 mS", "S", "2e-3"),
    "noise density": ("4 nV/sqrt(Hz)", "V/sqrt(Hz)", "4e-9"),
    "decibel": ("40 dB", "dB", "40"),
    "degrees": ("-45 deg", "deg", "-45"),
    "degree sign": ("-45°", "deg", "-45"),
    "Celsius": ("27 °C", "degC", "27"),
    "Celsius, letter": ("-40C", "degC", "-40"),
    "per cent": ("5 %", "%", "5"),
    "per cent of one": ("5 %", "1", "0.05"),
    "pure number": ("0.5", "1", "0.5"),
    # IEC 60062:2016, resistors.
    "R47": ("R47", "ohm", "0.47"),
    "4R7": ("4R7", "ohm", "4.7"),
    "470R": ("470R", "ohm", "470"),
    "4K7": ("4K7", "ohm", "4700"),
    "4k7": ("4k7", "ohm", "4700"),
    "47K": ("47K", "ohm", "47000"),
    "47K3": ("47K3", "ohm", "47300"),
    "1M0": ("1M0", "ohm", "1e6"),
    "M47": ("M47", "ohm", "0.47e6"),
    "10G": ("10G", "ohm", "10e9"),
    "4L7": ("4L7", "ohm", "4.7e-3"),
    # IEC 60062:2016, capacitors.
    "4p7": ("4p7", "F", "4.7e-12"),
    "p33": ("p33", "F", "0.33e-12"),
    "2n2": ("2n2", "F", "2.2e-9"),
    "100n": ("100n", "F", "100e-9"),
    "u1": ("u1", "F", "0.1e-6"),
    "U+00B5 1": ("\u00b51", "F", "0.1e-6"),
    "U+03BC 1": ("\u03bc1", "F", "0.1e-6"),
    "10u": ("10u", "F", "10e-6"),
    "4m7": ("4m7", "F", "4.7e-3"),
    "1F0": ("1F0", "F", "1"),
    # The same habit elsewhere.
    "inductor": ("4u7", "H", "4.7e-6"),
    "frequency": ("1k5", "Hz", "1500"),
    "time": ("1m5", "s", "1.5e-3"),
    "voltage": ("3m3", "V", "3.3e-3"),
}


@pytest.mark.parametrize(("text", "unit", "decimal"), READ.values(), ids=READ.keys())
def test_text_is_read_as_the_standards_say(text: str, unit: str, decimal: str) -> None:
    """Every spelling gives the double nearest to the decimal it stands for."""
    assert parse_quantity(text, unit) == float(Fraction(decimal))


# Text, unit, a piece of the message, a piece of the remedy.
REFUSED = {
    "unit of a capacitor on a resistor": ("10 nF", "ohm", "is in F, but ohm is expected", "4.7 kohm"),
    "unit on a pure number": ("5 V", "1", "is in V, but a plain number is expected", "0.5"),
    "per cent on ohms": ("5 %", "ohm", "is in %, but ohm is expected", ""),
    "radians only for degrees": ("1 rad", "dB", "is in rad, but dB is expected", ""),
    "capacitor's letter on a resistor": ("2n2", "ohm", "'n'", "2.2 nohm"),
    "milli in a resistor's marking": ("4m7", "ohm", "'m'", "For mega write '4M7'"),
    "mega in a capacitor's marking": ("4M7", "F", "'M'", "For milli write '4m7'"),
    "resistor's letter on a capacitor": ("4R7", "F", "'R'", "p n u"),
    "R on an inductor": ("4R7", "H", "'R'", "n u"),
    "two sides to no letter": ("4k7", "dB", "marking", "40 dB"),
    "marking without digits": ("K", "ohm", "does not begin with a number", ""),
    "marking with a sign": ("-4k7", "ohm", "sign", ""),
    "marking with a point": ("4.7k7", "ohm", "point", ""),
    "marking with a unit": ("4k7ohm", "ohm", "more letters", ""),
    "R behind a point": ("4.7R", "ohm", "'R'", ""),
    "decimal comma": ("4,7k", "ohm", "comma", "Write a decimal point"),
    "capital kilo": ("4.7K", "ohm", "capital K", "Kilo is written k"),
    "capital kilo with unit": ("10 KHz", "Hz", "capital K", "'10 kHz'"),
    "small hertz": ("10 khz", "Hz", "capital and small", "'10 kHz'"),
    "mega or milli unclear": ("10 MHZ", "Hz", "capital and small", "'10 MHz' or '10 mHz'"),
    "prefix on decibels": ("4 mdB", "dB", "takes none", ""),
    "prefix on a pure number": ("1k", "1", "takes none", ""),
    "kelvin": ("300 K", "degC", "'K'", ""),
    "empty": ("", "ohm", "is empty", ""),
    "blank": (" \t", "ohm", "is empty", ""),
    "long": ("1" * 101, "ohm", "longer than 100", ""),
    "not a number": ("nan", "ohm", "is not a number", ""),
    "word": ("big", "ohm", "does not begin with a number", ""),
    "unknown tail": ("10 furlong", "ohm", "'furlong'", ""),
    "too large": ("1e400", "ohm", "too large", ""),
    "too large by its prefix": ("1e300 Tohm", "ohm", "too large", ""),
    "huge exponent": ("1e" + "9" * 90, "ohm", "too large", ""),
    "vanishing": ("1e-400", "ohm", "too small", ""),
    "digits of another script": ("١٢", "ohm", "does not begin", ""),
    "underscore": ("1_000", "ohm", "'_000'", ""),
    "hexadecimal": ("0x10", "ohm", "'x'", ""),
    "infinite in another unit": ("inf F", "ohm", "is in F", ""),
}


@pytest.mark.parametrize(("text", "unit", "message", "remedy"), REFUSED.values(), ids=REFUSED.keys())
def test_a_slip_is_refused_with_its_remedy(text: str, unit: str, message: str, remedy: str) -> None:
    """The error shows the text, says what is wrong and what to write."""
    with pytest.raises(QuantityError) as caught:
        parse_quantity(text, unit, "resistance of R1")
    assert message in caught.value.message
    assert caught.value.message.startswith(f"resistance of R1 {text!r}"[:60])
    assert caught.value.remedy
    assert remedy in caught.value.remedy


@pytest.mark.parametrize(
    "value", [True, False, None, [], b"1", 10**400, pytest.param(10**5000, id="5001 digits"), math.nan, 1j]
)
def test_what_is_no_real_number_is_refused(value: object) -> None:
    """Truth values, other types, nan and integers beyond a double never become a value."""
    with pytest.raises(QuantityError) as caught:
        parse_quantity(value, "ohm")  # type: ignore[arg-type]
    assert caught.value.remedy


def test_an_unknown_unit_is_refused() -> None:
    """A unit no quantity has is an error that lists the known ones."""
    with pytest.raises(QuantityError, match="rad/s"):
        parse_quantity("1", "rad/s")


@pytest.mark.parametrize("value", [4700, 4700.0, 0, -1.5, math.inf])
def test_a_number_is_in_base_units_already(value: float) -> None:
    """A bare number passes unchanged, infinity included."""
    assert parse_quantity(value, "ohm") == value
    assert isinstance(parse_quantity(value, "ohm"), float)


@pytest.mark.parametrize(
    ("text", "value"), [("inf", math.inf), ("-inf V", -math.inf), ("+Infinity", math.inf)]
)
def test_infinity_may_be_written(text: str, value: float) -> None:
    """Whether infinity makes sense is the caller's question."""
    assert parse_quantity(text, "V") == value


def test_radians_become_degrees() -> None:
    """Pi radians are 180 degrees (ISO 80000-3)."""
    assert parse_quantity("3.141592653589793 rad", "deg") == pytest.approx(180, rel=1e-15)


# ISO 80000-1, powers of ten of the prefixes.
PREFIXES = {"T": 12, "G": 9, "M": 6, "k": 3, "": 0, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15}


@settings(deadline=None, max_examples=300)
@given(
    st.integers(-(10**17), 10**17),
    st.integers(0, 16),
    st.integers(-250, 250),
    st.sampled_from(sorted(PREFIXES)),
    st.sampled_from(["", "Hz"]),
)
def test_reading_rounds_once(digits: int, places: int, power: int, prefix: str, unit: str) -> None:
    """The result is the double nearest to the exact rational number that was written."""
    exact = Fraction(digits) / 10**places * Fraction(10) ** (power + PREFIXES[prefix])
    body = f"{abs(digits):0{places + 1}d}"
    written = f"{'-' if digits < 0 else ''}{body[: len(body) - places]}.{body[len(body) - places :]}"
    assert parse_quantity(f"{written}e{power} {prefix}{unit}", "Hz") == float(exact)


@settings(deadline=None, max_examples=500)
@given(
    st.text(max_size=20) | st.from_regex(r"[0-9.,eEkKMmunpR%Ω +-]{1,8}", fullmatch=True),
    st.sampled_from(["ohm", "F", "H", "Hz", "dB", "deg", "degC", "%", "1", "V/sqrt(Hz)"]),
)
def test_any_text_is_read_or_refused(text: str, unit: str) -> None:
    """No text brings anything but a number or a QuantityError with a remedy."""
    try:
        assert not math.isnan(parse_quantity(text, unit))
    except QuantityError as error:
        assert error.remedy


FORMATTED = {
    "corner": ((1591.549, "Hz"), "1.592 kHz"),
    "resistor": ((4700.0, "ohm"), "4.7 kohm"),
    "capacitor": ((1.5924e-7, "F"), "159.2 nF"),
    "three digits": ((1591.549, "Hz", 3), "1.59 kHz"),
    "zeros that count": ((159e-9, "F", 2), "160 nF"),
    "carried over": ((999.96, "ohm"), "1 kohm"),
    "not carried over": ((999.94, "ohm"), "999.9 ohm"),
    "decibels": ((-3.0103, "dB"), "-3.01 dB"),
    "degrees": ((-45.0, "deg"), "-45 deg"),
    "per cent": ((0.05, "%"), "0.05 %"),
    "pure": ((0.95, "1"), "0.95"),
    "no unit": ((0.0123456,), "0.01235"),
    "zero": ((0.0, "V"), "0 V"),
    "negative zero": ((-0.0, "V"), "0 V"),
    "negative": ((-0.0025, "A"), "-2.5 mA"),
    "infinite": ((math.inf, "Hz"), "inf"),
    "minus infinite": ((-math.inf, "dB"), "-inf"),
    "not a number": ((math.nan, "V"), "not a number"),
    "beyond tera": ((1e20, "ohm"), "1e+20 ohm"),
    "carried beyond tera": ((999.96e12, "Hz"), "1e+15 Hz"),
    "below femto": ((1.23456e-18, "F"), "1.235e-18 F"),
    "small pure": ((1e-9, "1"), "1e-09"),
    "large pure": ((123456.7, "1"), "123500"),
    "noise": ((4.07e-9, "V/sqrt(Hz)"), "4.07 nV/sqrt(Hz)"),
}


@pytest.mark.parametrize(("arguments", "text"), FORMATTED.values(), ids=FORMATTED.keys())
def test_people_get_engineering_notation(arguments: tuple[float, str], text: str) -> None:
    """SI prefixes with one to three digits before the point (ISO 80000-1); no zeros at the end."""
    assert format_quantity(*arguments) == text


@settings(deadline=None, max_examples=300)
@given(st.floats(1e-15, 9e14), st.integers(1, 17))
def test_a_formatted_quantity_is_near(value: float, digits: int) -> None:
    """What people read lies within half a unit of the last digit they asked for."""
    text = format_quantity(value, "Hz", digits)
    exponent = int(f"{value:.16e}".partition("e")[2])
    error = abs(Fraction(parse_quantity(text, "Hz")) - Fraction(value))
    assert error <= Fraction(10) ** (exponent - digits + 1) / 2 + Fraction(math.ulp(value))


WRITTEN = [
    (4700.0, "ohm", "4.7 kohm"),
    (4700.0, "", "4.7k"),
    (1e-7, "F", "100 nF"),
    (-3.0103, "dB", "-3.0103 dB"),
    (0.5, "1", "0.5"),
    (5.0, "%", "5 %"),
    (0.0, "V", "0 V"),
    (1e20, "ohm", "1e+20 ohm"),
    (math.inf, "Hz", "inf"),
]


@pytest.mark.parametrize(("value", "unit", "text"), WRITTEN)
def test_written_quantities_are_short(value: float, unit: str, text: str) -> None:
    """Prefix and unit where they fit, the plain number elsewhere."""
    assert write_quantity(value, unit) == text


@settings(deadline=None, max_examples=1000)
@given(
    st.floats(allow_nan=False, allow_infinity=False) | st.floats(1e-16, 1e16) | st.floats(-1e16, -1e-16),
    st.sampled_from(
        ["", "ohm", "F", "H", "V", "A", "W", "Hz", "s", "S", "V/sqrt(Hz)", "dB", "deg", "degC", "%", "1"]
    ),
)
def test_written_quantities_read_back_bit_for_bit(value: float, unit: str) -> None:
    """write_quantity then parse_quantity gives the same 64 bits; a bare token under any prefixed unit."""
    text = write_quantity(value, unit)
    for read_as in [unit] if unit else ["ohm", "F", "H", "Hz", "s", "V"]:
        assert struct.pack("d", parse_quantity(text, read_as)) == struct.pack("d", value)


def test_nan_and_unknown_units_are_not_written() -> None:
    """What could not be read back is refused."""
    with pytest.raises(QuantityError, match="nan"):
        write_quantity(math.nan, "ohm")
    with pytest.raises(QuantityError, match="furlong"):
        write_quantity(1.0, "furlong")
