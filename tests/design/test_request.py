"""What is asked for: every wrong wish is one sentence that names the option and the way out."""

from __future__ import annotations

import math

import pytest

from rcnet.design import read_target
from rcnet.errors import InputError
from rcnet.values import Tolerance

LOW = {"cutoff": "1k"}
SMOOTH = {"ripple": "10m", "settling": "20m", "carrier": "20k", "supply": "5"}
BOUNCE = {"bounce": "5m", "supply": "3.3", "thresholds": "0.8,2"}


def test_what_is_taken_where_nothing_is_said() -> None:
    """E24 at 5 % and E12 at 10 %, no source resistance, no load."""
    target = read_target("lowpass", {"cutoff": "1.59 kHz", "load": None})
    assert target.cutoff == 1590.0
    assert (target.resistors.series, target.capacitors.series) == ("E24", "E12")
    assert target.resistors.tolerance == Tolerance(-0.05, 0.05)
    assert target.capacitors.tolerance == Tolerance(-0.1, 0.1)
    assert (target.source, target.load) == (0.0, math.inf)
    assert target.down == pytest.approx(0.95 * 0.9)
    assert target.up == pytest.approx(1.05 * 1.1)


def test_every_spelling_of_values() -> None:
    """Values as the circuit file has them; a bare tolerance is in per cent."""
    given = {"cutoff": "1k59", "source": "600 ohm", "load": "inf", "series": "e96", "tolerance": "1"}
    given |= {"capacitor_tolerance": "+80/-20%", "resistors": "4k7, 1M", "capacitors": "1 nF,0.1uF"}
    target = read_target("highpass", given)
    assert (target.cutoff, target.source, target.load) == (1590.0, 600.0, math.inf)
    assert target.resistors.tolerance == Tolerance(-0.01, 0.01)
    assert target.capacitors.tolerance == Tolerance(-0.2, 0.8)
    assert (target.resistors.low, target.capacitors.high) == (4700.0, 1e-7)
    debounced = read_target("debounce", BOUNCE)
    assert (debounced.low, debounced.high, debounced.bounce) == (0.8, 2.0, 5e-3)


WRONG = {
    "no such kind": ("notch", LOW, "'notch' is no kind.*lowpass, highpass"),
    "nothing asked": ("lowpass", {}, "lowpass needs --cutoff.*--attenuation"),
    "half a point": ("lowpass", {"cutoff": "1k", "at": "10k"}, "--attenuation and --at go together"),
    "another kind's": ("lowpass", {"cutoff": "1k", "ripple": "1m"}, "--ripple does not go with lowpass"),
    "one edge": ("bandpass", {"lower": "1k"}, "bandpass needs --upper"),
    "no supply": ("smoothing", {**SMOOTH, "supply": None}, "smoothing needs --supply"),
    "no thresholds": ("debounce", {**BOUNCE, "thresholds": None}, "debounce needs --thresholds"),
    "cutoff of zero": ("lowpass", {"cutoff": "0"}, "--cutoff is '0'.*Give 1 nHz"),
    "cutoff below zero": ("lowpass", {"cutoff": "-1k"}, "--cutoff is '-1k'"),
    "endless cutoff": ("lowpass", {"cutoff": "inf"}, "--cutoff is 'inf'"),
    "no number": ("lowpass", {"cutoff": "fast"}, "--cutoff 'fast' does not begin with a number"),
    "wrong unit": ("lowpass", {"cutoff": "1 ms"}, "is in s, but Hz is expected"),
    "not a number": ("lowpass", {"cutoff": "nan"}, "is not a number"),
    "negative attenuation": ("lowpass", {**LOW, "attenuation": "-40", "at": "9k"}, "--attenuation is '-40'"),
    "in the passband": ("lowpass", {**LOW, "attenuation": "40", "at": "900"}, "--at 900 Hz is not above"),
    "in a high-pass' one": ("highpass", {**LOW, "attenuation": "40", "at": "2k"}, "is not below"),
    "edges exchanged": ("bandpass", {"lower": "10k", "upper": "100"}, "is not below --upper.*Exchange"),
    "unknown series": ("lowpass", {**LOW, "series": "E25"}, "--series is 'E25'.*E24"),
    "no such capacitors": ("lowpass", {**LOW, "capacitor_series": "X7R"}, "--capacitor-series is 'X7R'"),
    "no sections": ("lowpass", {**LOW, "sections": "0"}, "--sections is '0'.*1 to 6"),
    "too many sections": ("lowpass", {**LOW, "sections": "7"}, "--sections is '7'.*1 to 6"),
    "half a section": ("lowpass", {**LOW, "sections": "1.5"}, "--sections is '1.5'.*whole number"),
    "odd digits": ("lowpass", {**LOW, "sections": "\u00b2"}, "--sections is"),
    "sections of a band": ("bandpass", {"lower": "1", "upper": "99", "sections": "3"}, "a band-pass has two"),
    "keep nothing": ("lowpass", {**LOW, "keep": "0"}, "--keep is '0'"),
    "keep all": ("lowpass", {**LOW, "keep": "101"}, "--keep is '101'.*1 to 100"),
    "no load at all": ("lowpass", {**LOW, "load": "0"}, "--load is '0'"),
    "negative source": ("lowpass", {**LOW, "source": "-1"}, "--source is '-1'.*Give 0, or"),
    "a tolerance of all": ("lowpass", {**LOW, "tolerance": "100%"}, "100 % downwards"),
    "one sided": ("lowpass", {**LOW, "tolerance": "+5%"}, "names one side only"),
    "one end": ("lowpass", {**LOW, "resistors": "1k"}, "--resistors is '1k'.*LOW,HIGH"),
    "ends exchanged": ("lowpass", {**LOW, "resistors": "1M,1k"}, "from 1 Mohm to 1 kohm.*lower end first"),
    "an empty range": ("lowpass", {**LOW, "resistors": "1.21k,1.22k"}, "E24 has 0 values"),
    "far too much": (
        "lowpass",
        {**LOW, "capacitor_series": "E192", "capacitors": "1f,1k"},
        "values from 1 fF",
    ),
    "thresholds exchanged": ("debounce", {**BOUNCE, "thresholds": "2,0.8"}, "0 < LOW < HIGH < supply"),
    "beyond the supply": ("debounce", {**BOUNCE, "thresholds": "0.8,5"}, "--supply 3.3 V do not fit"),
    "a threshold at ground": ("debounce", {**BOUNCE, "thresholds": "0,2"}, "0 < LOW < HIGH < supply"),
    "more ripple than signal": ("smoothing", {**SMOOTH, "ripple": "6"}, "--ripple 6 V is no less than"),
}


@pytest.mark.parametrize(("kind", "given", "says"), WRONG.values(), ids=WRONG)
def test_wrong_wishes(kind: str, given: dict[str, str | None], says: str) -> None:
    """One sentence, and a remedy."""
    with pytest.raises(InputError, match=f"(?s){says}") as caught:
        read_target(kind, given)
    assert caught.value.remedy
    assert "\n" not in str(caught.value)
