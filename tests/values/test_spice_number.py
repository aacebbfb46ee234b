"""Netlist numbers are read as SPICE reads them, and what was not meant is noticed."""

from __future__ import annotations

import math
import os
import random
import shutil
import struct
import subprocess
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.errors import QuantityError
from rcnet.values import number_oddity, read_spice_number, write_spice_number

# ngspice manual, "Numbers": the scale factors.
SCALES = {
    "": Fraction(1),
    "t": Fraction(10) ** 12,
    "g": Fraction(10) ** 9,
    "meg": Fraction(10) ** 6,
    "k": Fraction(10) ** 3,
    "mil": Fraction(254, 10**7),
    "m": Fraction(1, 10**3),
    "u": Fraction(1, 10**6),
    "n": Fraction(1, 10**9),
    "p": Fraction(1, 10**12),
    "f": Fraction(1, 10**15),
}

# Token, suffix, tail; the value is checked against ngspice below.
ODD = {
    "kilo": ("1k", "k", ""),
    "kilo-ohm": ("1kOhm", "k", "Ohm"),
    "mega": ("1MEG", "MEG", ""),
    "mega with unit": ("1megohm", "meg", "ohm"),
    "exponent": ("1e3", "", ""),
    "signed exponent": ("1E+3", "", ""),
    "exponent with d": ("1d3", "", ""),
    "point first": (".5k", "k", ""),
    "point last": ("5.", "", ""),
    "plus": ("+1k", "k", ""),
    "minus": ("-1k", "k", ""),
    "microfarad": ("1uF", "u", "F"),
    "micro U+00B5": ("1\u00b5", "\u00b5", ""),
    "micro U+00B5 with unit": ("1\u00b5F", "\u00b5", "F"),
    "Greek mu U+03BC": ("1\u03bc", "", "\u03bc"),
    "capital M is milli": ("1M", "M", ""),
    "femto": ("1F", "F", ""),
    "femto after an exponent": ("1e-9F", "F", ""),
    "mil in milli": ("1milliohm", "mil", "liohm"),
    "mil in million": ("1million", "mil", "lion"),
    "no atto": ("1a", "", "a"),
    "4k7": ("4k7", "k", "7"),
    "4R7": ("4R7", "", "R7"),
    "2n2": ("2n2", "n", "2"),
    "1M5": ("1M5", "M", "5"),
    "decimal comma": ("4,7k", "k", "4"),
    "thousands comma": ("1,500", "", "1"),
    "comma behind": ("5,", "", ""),
    "sum": ("1k+2", "", "1k"),
    "difference": ("1k-2", "", "1k"),
    "signed exponent with d": ("1d-3", "", "1d"),
    "exponent after letters": ("1k5e-3", "", "1k5e"),
    "second exponent": ("1e2e-3", "", "1e2e"),
    "exponent without digits": ("1ek", "k", "e"),
    "signed exponent without digits": ("1e-k", "k", "e-"),
    "broken exponent": ("1e3.5", "", ".5"),
    "two points": ("1.5.2k", "", ".2k"),
    "two points, then an exponent": ("1.5.2e-3", "", ".2e-3"),
    "underscore": ("1_000", "", "_000"),
    "exponent, then suffix": ("1e3k", "k", ""),
    "me is milli": ("1me", "m", "e"),
    "kelvin sign": ("1\u212a", "", "\u212a"),
    "brackets": ("1k(2)", "", "1k"),
    "per cent": ("1k%", "k", "%"),
    "long": ("123456789012345678901234567890k", "k", ""),
}
# ngspice takes a resistor of nothing as 1 mohm, so these are compared with 1e-3.
ZEROS = ["0x10", "0R5", "0", "-0"]


@pytest.mark.parametrize(("text", "suffix", "tail"), ODD.values(), ids=ODD.keys())
def test_suffix_and_tail_are_kept_apart(text: str, suffix: str, tail: str) -> None:
    """The scale factor counts, the letters behind it are kept for whoever wants to warn."""
    number = read_spice_number(text)
    assert (number.text, number.suffix, number.tail) == (text, suffix, tail)


def _read_by_ngspice(texts: list[str], folder: Path) -> list[float]:
    """What ngspice takes each text for: the voltage of 1 A through a resistor of that value.

    At one frequency and without an operating point, where ngspice only solves the linear equations.
    """
    lines = ["* odd numbers"]
    for index, text in enumerate(texts):
        lines += [f"I{index} 0 n{index} AC 1", f"R{index} n{index} 0 {text}"]
    (folder / "deck.cir").write_text(
        "\n".join([*lines, ".options noopac pivtol=1e-60", ".ac lin 1 1 1", ".end", ""]), encoding="utf-8"
    )
    program = os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice") or "ngspice"
    subprocess.run(
        [program, "-b", "-n", "-r", "deck.raw", "-o", "deck.log", "deck.cir"],
        cwd=folder,
        env={"PATH": os.environ.get("PATH", ""), "HOME": str(folder), "LC_ALL": "C"},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=60,
        check=True,
    )
    head, data = (folder / "deck.raw").read_bytes().split(b"Binary:\n")
    names = [line.split()[1].decode() for line in head.split(b"\nVariables:\n")[1].splitlines()]
    real_parts = struct.unpack(f"={2 * len(names)}d", data)[::2]
    volts = dict(zip(names, real_parts, strict=True))
    return [volts[f"v(n{index})"] for index in range(len(texts))]


@pytest.mark.ngspice
def test_odd_texts_are_read_as_ngspice_reads_them(tmp_path: Path) -> None:
    """Every odd spelling has the value ngspice gives it."""
    texts = [text for text, _, _ in ODD.values()]
    for text, volts in zip(texts, _read_by_ngspice(texts, tmp_path), strict=True):
        assert read_spice_number(text).value == pytest.approx(volts, rel=1e-15), text
    assert _read_by_ngspice(ZEROS, tmp_path) == pytest.approx([1e-3] * len(ZEROS), rel=1e-15)
    assert [read_spice_number(text).value for text in ZEROS] == [0.0] * len(ZEROS)


@pytest.mark.ngspice
def test_random_texts_are_read_as_ngspice_reads_them(tmp_path: Path) -> None:
    """A thousand made-up spellings have the values ngspice gives them."""
    dice = random.Random(60062)
    texts = []
    for _ in range(1000):
        suffix = "".join(dice.choice((letter, letter.upper())) for letter in dice.choice(sorted(SCALES)))
        # Digits or an exponent right behind the number would be part of it, and could grow beyond a double.
        first = "abdefgiklmnprsuxz0123456789_.%" if suffix else "abcghijloqrsvwyz_%"
        tail = dice.choice(["", dice.choice(first) + dice.choice(["", "h", "ohm", "7", ".5", "e2"])])
        power = dice.choice(
            ["", "", f"e{dice.randrange(-9, 10)}", f"E+{dice.randrange(9)}", f"d{dice.randrange(9)}", "e"]
        )
        mantissa = dice.choice([f"{dice.randrange(1, 1000)}", f"{dice.uniform(0.1, 100):.6f}", ".25", "7."])
        texts.append(f"{dice.choice(['', '', '+', '-'])}{mantissa}{power}{suffix}{tail}")
    for text, volts in zip(texts, _read_by_ngspice(texts, tmp_path), strict=True):
        assert read_spice_number(text).value == pytest.approx(volts, rel=1e-15), text


@pytest.mark.ngspice
def test_written_numbers_reach_ngspice(tmp_path: Path) -> None:
    """What rcnet writes is read by ngspice to within its own rounding."""
    dice = random.Random(39)
    values = [math.copysign(10 ** dice.uniform(-18, 18), dice.uniform(-1, 1)) for _ in range(300)]
    texts = [write_spice_number(value) for value in values]
    assert _read_by_ngspice(texts, tmp_path) == pytest.approx(values, rel=1e-15)


@settings(deadline=None, max_examples=300)
@given(
    st.integers(0, 10**18),
    st.integers(0, 17),
    st.integers(-200, 200),
    st.sampled_from(sorted(SCALES)),
    st.booleans(),
)
def test_reading_rounds_once(digits: int, places: int, power: int, suffix: str, capitals: bool) -> None:
    """The result is the double nearest to the exact rational number that was written, mils included."""
    body = f"{digits:0{places + 1}d}"
    suffixed = suffix.upper() if capitals else suffix
    text = f"{body[: len(body) - places]}.{body[len(body) - places :]}e{power}{suffixed}"
    exact = Fraction(digits, 10**places) * Fraction(10) ** power * SCALES[suffix]
    assert read_spice_number(text).value == float(exact)


NO_NUMBERS = [
    *("", " ", ".", ".k", "R5", "inf", "nan", "k", "-", "--5", "+-5", "e3", "1 k", "1-", "1k+", "1k-x"),
    *("4,7,9", "1k+2+3", "1k*2", "1k/2", "1k^2", "{1k}", "'1k'", "\u0661", "1\x00", "1" * 201),
    *("1e400", "-1e300t", "1e" + "9" * 100),
]


@pytest.mark.parametrize("text", NO_NUMBERS)
def test_what_is_no_number_is_refused(text: str) -> None:
    """What ngspice refuses, what has no digits and what no double holds is an error with a remedy."""
    with pytest.raises(QuantityError) as caught:
        read_spice_number(text)
    assert caught.value.remedy


@pytest.mark.ngspice
@pytest.mark.parametrize("text", ["R5", "inf", "1 k", "4,7,9", "1k*2", "1k+2+3", "1k-x", "+-5"])
def test_ngspice_refuses_it_too(text: str, tmp_path: Path) -> None:
    """The refusals are not stricter than ngspice where a value could be read."""
    with pytest.raises(subprocess.CalledProcessError):
        _read_by_ngspice([text], tmp_path)


ODDITIES = {
    "capital M on a resistor": ("1M", "R", "milli-not-mega"),
    "capital M with unit on a resistor": ("1MOhm", "R", "milli-not-mega"),
    "small m on a resistor": ("1m", "R", None),
    "meg on a resistor": ("1MEG", "R", None),
    "capital M on a capacitor": ("1M", "C", None),
    "farad that is femto": ("1F", "C", "femto-not-farad"),
    "nanofarad that is not": ("1e-9F", "C", "femto-not-farad"),
    "small f": ("5f", "C", "femto-not-farad"),
    "the whole word": ("1farad", "C", "femto-not-farad"),
    "femtofarad said in full": ("5fF", "C", None),
    "nanofarad": ("1nF", "C", None),
    "marking on a resistor": ("4k7", "R", "digits-after-suffix"),
    "marking on a capacitor": ("2n2", "C", "digits-after-suffix"),
    "marking with R": ("0R5", "R", "digits-after-suffix"),
    "marking with M": ("1M5", "R", "digits-after-suffix"),
    "decimal comma": ("4,7k", "R", "decimal-comma"),
    "comma behind": ("5,", "R", None),
    "Greek mu": ("1\u03bcF", "C", "greek-mu"),
    "micro sign": ("1\u00b5F", "C", None),
    "milliohm": ("1milliohm", "R", "mil-by-accident"),
    "million": ("1million", "R", "mil-by-accident"),
    "hexadecimal": ("0x10", "R", "hexadecimal"),
    "signed hexadecimal": ("-0XfF", "R", "hexadecimal"),
    "atto": ("1a", "C", "unknown-letters"),
    "amperes": ("1a", "I", None),
    "letters": ("1kfoo", "R", "unknown-letters"),
    "underscore": ("1_000", "R", "unknown-letters"),
    "broken exponent": ("1e3.5", "R", "unknown-letters"),
    "exponent without digits": ("1e", "R", "unknown-letters"),
    "two numbers": ("1k+2", "R", "unknown-letters"),
    "signed exponent with d": ("1d-3", "R", "unknown-letters"),
    "plain": ("4700", "R", None),
    "kilo": ("10k", "R", None),
    "capital kilo": ("10K", "R", None),
    "R": ("10R", "R", None),
    "kiloohm": ("10kOhm", "R", None),
    "ohm sign U+2126": ("10k\u2126", "R", None),
    "omega U+03A9": ("10k\u03a9", "R", None),
    "volts": ("5V", "V", None),
    "millihenry": ("5mH", "L", None),
}


@pytest.mark.parametrize(("text", "kind", "key"), ODDITIES.values(), ids=ODDITIES.keys())
def test_what_was_hardly_meant_is_noticed(text: str, kind: str, key: str | None) -> None:
    """A reading a person did not mean has a key; an ordinary one has none."""
    assert number_oddity(read_spice_number(text), kind) == key


@settings(deadline=None, max_examples=1000)
@given(st.floats(allow_nan=False, allow_infinity=False))
def test_written_numbers_read_back_bit_for_bit(value: float) -> None:
    """write_spice_number then read_spice_number gives the same 64 bits, in at most 24 plain characters."""
    text = write_spice_number(value)
    number = read_spice_number(text)
    assert struct.pack("d", number.value) == struct.pack("d", value)
    assert (number.suffix, number.tail, number_oddity(number, "R")) == ("", "", None)
    assert len(text) <= 24


@pytest.mark.parametrize(
    ("value", "text"), [(4700.0, "4700"), (1.2e-7, "1.2e-07"), (1e300, "1e+300"), (-0.5, "-0.5")]
)
def test_written_numbers_are_plain(value: float, text: str) -> None:
    """No unit letters, the shortest digits."""
    assert write_spice_number(value) == text


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_nothing_but_finite_numbers_is_written(value: float) -> None:
    """A netlist never holds nan or infinity."""
    with pytest.raises(QuantityError):
        write_spice_number(value)


@settings(deadline=None, max_examples=500)
@given(st.text(max_size=12) | st.from_regex(r"[0-9.,eEdDkKMmunpfgilxR%µμ+-]{1,9}", fullmatch=True))
def test_any_text_is_read_or_refused(text: str) -> None:
    """No token brings anything but a finite number or a QuantityError."""
    try:
        number = read_spice_number(text)
    except QuantityError as error:
        assert error.remedy
    else:
        assert math.isfinite(number.value)
        for kind in "RCLVI":
            number_oddity(number, kind)
