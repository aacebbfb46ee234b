"""Waveforms: what they start from, what they refuse, and what happens to vertical edges."""

from __future__ import annotations

import math

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from rcnet.circuit import (
    EDGE_SHARE,
    NEVER,
    Exponential,
    Network,
    Points,
    Sine,
    Square,
    Step,
    Waveform,
    parse_circuit_file,
)
from rcnet.errors import CircuitError


def value_at(wave: Square, time: float) -> float:
    """A square's value as SPICE's PULSE has it: rise, width, fall, then low until the period ends."""
    if time < wave.delay:
        return wave.low
    phase = math.fmod(time - wave.delay, wave.period)
    swing = wave.high - wave.low
    if phase < wave.rise:
        return wave.low + swing * phase / wave.rise
    if phase < wave.rise + wave.width:
        return wave.high
    if phase < wave.rise + wave.width + wave.fall:
        return wave.high - swing * (phase - wave.rise - wave.width) / wave.fall
    return wave.low


def half_way(wave: Square) -> tuple[float, float]:
    """The two times, from the start of a period, at which the edges are half-way."""
    return wave.rise / 2, wave.rise + wave.width + wave.fall / 2


STARTS: dict[str, tuple[Waveform, float]] = {
    "square": (Square(-1.0, 5.0, 1.0, 0.5), -1.0),
    "square with a delay": (Square(2.0, 5.0, 1.0, 0.5, delay=3.0), 2.0),
    "sine": (Sine(2.0, 50.0), 0.0),
    "sine with offset": (Sine(2.0, 50.0, 1.5), 1.5),
    "sine from its crest": (Sine(2.0, 50.0, 1.0, 90.0), 3.0),
    "sine held until its delay": (Sine(2.0, 50.0, 1.0, -90.0, delay=1.0), -1.0),
    "step": (Step(1.0, 4.0), 1.0),
    "step later": (Step(1.0, 4.0, at=2.0, rise=1.0), 1.0),
    "damped sine": (Sine(2.0, 50.0, 1.0, 90.0, 0.1, 30.0), 3.0),
    "exponential": (Exponential(1.5, 4.0, 0.0, 1.0, 2.0, 3.0), 1.5),
    "points": (Points(((0.0, 3.0), (1.0, 5.0))), 3.0),
    "points that begin later": (Points(((0.5, 3.0), (1.0, 5.0))), 3.0),
    "points that repeat": (Points(((0.0, 3.0), (1.0, 5.0)), 2.0), 3.0),
    # From (1, 5) the line runs to (2 + 0.5, 3): at the period's end, 2, it is at 5 - 2 * 1/1.5.
    "points that repeat and begin later": (Points(((0.5, 3.0), (1.0, 5.0)), 2.0), 5.0 - 2.0 / 1.5),
}


@pytest.mark.parametrize("name", STARTS)
def test_a_waveform_starts_from(name: str) -> None:
    """The value at t = 0."""
    wave, expected = STARTS[name]
    assert wave.start == pytest.approx(expected, rel=1e-15)


@pytest.mark.parametrize(
    ("wave", "period"),
    [
        (Square(0, 1, 0.25, 0.1), 0.25),
        (Sine(1, 50), 0.02),
        (Sine(1, 50, damping=1e-9), None),
        (Step(0, 1), None),
        (Exponential(0, 1, 0, 1), None),
        (Points(((0, 0),)), None),
        (Points(((0, 0), (1, 1)), 4), 4),
    ],
)
def test_a_waveform_repeats_after(wave: Waveform, period: float | None) -> None:
    """The period in seconds, None for what happens once."""
    assert wave.repeats == period


@settings(max_examples=200, deadline=None)
@given(st.floats(1e-3, 1e9), st.floats(0.05, 0.95), st.floats(0, 0.04), st.floats(0, 0.04))
def test_duty_is_between_the_half_way_points(frequency: float, duty: float, rise: float, fall: float) -> None:
    """The interface's definition: time between the half-way points of the two edges over the period."""
    wave = Square.from_duty(0.0, 1.0, frequency, duty, rise=rise / frequency, fall=fall / frequency)
    up, down = half_way(wave)
    assert (down - up) / wave.period == pytest.approx(duty, rel=1e-12)
    assert wave.period == 1 / frequency
    assert (wave.rise, wave.fall, wave.delay) == (rise / frequency, fall / frequency, 0.0)


@settings(max_examples=300, deadline=None)
@given(
    st.floats(1e-9, 1e3),
    st.floats(1e-9, 1 - 1e-9),
    st.sampled_from([0.0, 1e-8, 0.01]),
    st.sampled_from([0.0, 1e-8, 0.01]),
)
def test_edges_keep_the_half_way_points(period: float, duty: float, rise: float, fall: float) -> None:
    """A vertical edge gets a millionth of the period, less where the pulse or the gap is shorter than that.

    The two half-way points keep their distance, sloping edges are left alone, and the wave still fits its
    period.
    """
    try:
        wave = Square.from_duty(-1.0, 2.0, 1 / period, duty, rise=rise * period, fall=fall * period)
    except CircuitError:
        assume(False)
    edged = wave.with_edges(1.0)
    (up, down), (new_up, new_down) = half_way(wave), half_way(edged)
    assert min(edged.rise, edged.fall) > 0
    assert edged.rise <= max(wave.rise, EDGE_SHARE * wave.period)
    assert edged.fall <= max(wave.fall, EDGE_SHARE * wave.period)
    gap = wave.period - wave.rise - wave.width - wave.fall
    if min(wave.width, gap) > 1e-12 * wave.period:
        assert new_down - new_up == pytest.approx(down - up, abs=1e-12 * wave.period)
        for old, new in ((wave.rise, edged.rise), (wave.fall, edged.fall)):
            assert new == old if old > 0 else new > 0
    if min(wave.width, gap) > 2 * EDGE_SHARE * wave.period:
        assert edged.rise == (wave.rise or EDGE_SHARE * wave.period)
        assert edged.fall == (wave.fall or EDGE_SHARE * wave.period)
    assert edged.rise + edged.width + edged.fall <= wave.period * (1 + 1e-9)
    assert (edged.low, edged.high, edged.period, edged.delay) == (
        wave.low,
        wave.high,
        wave.period,
        wave.delay,
    )


def test_a_plain_square_gets_a_millionth() -> None:
    """1 ms, half and half: edges of 1 ns, high for 0.499999 ms, half-way at half a nanosecond."""
    edged = Square.from_duty(0.0, 5.0, 1e3).with_edges(1.0)
    assert (edged.rise, edged.fall) == (1e-9, 1e-9)
    assert edged.width == pytest.approx(0.499999e-3, rel=1e-12)
    assert [value_at(edged, t) for t in (0.0, 0.5e-9, 0.25e-3, 0.75e-3)] == pytest.approx([0, 2.5, 5, 0])


def test_a_sawtooth_of_a_square_keeps_its_period() -> None:
    """Rising all the period, falling at once: the fall takes its millionth from the rise."""
    edged = Square.from_duty(0.0, 1.0, 1.0, 0.5, rise=1.0).with_edges(1.0)
    assert edged.fall == EDGE_SHARE
    assert edged.rise == pytest.approx(1 - EDGE_SHARE, rel=1e-12)
    assert edged.rise + edged.width + edged.fall <= 1


def test_a_vertical_step_gets_a_millionth_of_the_span() -> None:
    """And a sloping one stays; without a span a microsecond has to do."""
    assert Step(0, 1, 2.0).with_edges(5e-3) == Step(0, 1, 2.0, 5e-3 * EDGE_SHARE)
    assert Step(0, 1, 2.0, 0.1).with_edges(5e-3) == Step(0, 1, 2.0, 0.1)
    assert Step(0, 1).with_edges(0.0).rise == EDGE_SHARE


def test_points_that_jump_where_they_repeat_get_an_edge() -> None:
    """A sawtooth of points: cut a millionth before the period's end, on the line it was on."""
    edged = Points(((0.0, 0.0), (1.0, 4.0)), 1.0).with_edges(9.0)
    assert edged.period == 1.0
    assert edged.values[0] == (0.0, 0.0)
    time, value = edged.values[-1]
    assert time == pytest.approx(1 - EDGE_SHARE, rel=1e-15)
    assert value == pytest.approx(4 * (1 - EDGE_SHARE), rel=1e-15)


@pytest.mark.parametrize(
    "wave",
    [
        Sine(1.0, 50.0),
        Sine(1.0, 50.0, damping=5.0),
        Exponential(0.0, 1.0, 0.0, 1e-15, 0.0, 1e-15),
        Points(((0.0, 0.0), (1.0, 4.0))),
        Points(((0.0, 0.0), (1.0, 4.0)), 2.0),
        Points(((0.0, 4.0), (0.5, 0.0), (1.0, 4.0)), 1.0),
        Points(((0.2, 0.0), (1.0, 4.0)), 1.0),
        Points(((0.0, 1.0),), 1.0),
        Square(0.0, 1.0, 1.0, 0.4, 0.01, 0.02),
    ],
)
def test_what_has_no_vertical_edge_stays(wave: Waveform) -> None:
    """Edges are for vertical ones."""
    assert wave.with_edges(1.0) == wave


REFUSED: dict[str, tuple[type[Waveform], tuple[object, ...], str]] = {
    "square without a period": (Square, (0, 1, 0.0, 0.0), "period of 0.0 s"),
    "square of endless level": (Square, (0, math.inf, 1.0, 0.5), "high is inf"),
    "square with a negative rise": (Square, (0, 1, 1.0, 0.5, -0.1), "rise is -0.1 s"),
    "square with a nan fall": (Square, (0, 1, 1.0, 0.5, 0.0, math.nan), "fall is nan s"),
    "square with a negative delay": (Square, (0, 1, 1.0, 0.5, 0.0, 0.0, -1.0), "delay is -1.0 s"),
    "square with a negative width": (Square, (0, 1, 1.0, -0.5), "never gets to stay"),
    "square too long": (Square, (0, 1, 1.0, 0.9, 0.1, 0.1), "last longer than the period"),
    "sine without a frequency": (Sine, (1, 0.0), "frequency of 0.0 Hz"),
    "sine of endless frequency": (Sine, (1, math.inf), "frequency is inf"),
    "sine of nan phase": (Sine, (1, 1.0, 0.0, math.nan), "phase is nan"),
    "step to nowhere": (Step, (0, math.nan), "to is nan"),
    "step from nowhere": (Step, (math.inf, 0), "from is inf"),
    "step before zero": (Step, (0, 1, -1.0), "at is -1.0 s"),
    "step of endless rise": (Step, (0, 1, 0.0, math.inf), "rise is inf s"),
    "sine that grows": (Sine, (1, 1.0, 0.0, 0.0, 0.0, -1.0), "damping is -1.0 1/s"),
    "sine of nan damping": (Sine, (1, 1.0, 0.0, 0.0, 0.0, math.nan), "damping is nan 1/s"),
    "sine that dies at once": (Sine, (1, 1.0, 0.0, 0.0, 0.0, math.inf), "damping is inf 1/s"),
    "exponential to nowhere": (Exponential, (0, math.inf, 0.0, 1.0), "to is inf"),
    "exponential before zero": (Exponential, (0, 1, -1.0, 1.0), "at is -1.0 s"),
    "exponential that never begins": (Exponential, (0, 1, math.inf, 1.0), "at is inf s"),
    "exponential of no duration": (Exponential, (0, 1, 0.0, 0.0), "time_constant is 0.0 s"),
    "exponential for ever": (Exponential, (0, 1, 0.0, math.inf), "time_constant is inf s"),
    "exponential back before it begins": (
        Exponential,
        (0, 1, 2.0, 1.0, 1.0, 1.0),
        "way back begins at 1.0 s",
    ),
    "exponential back at no time": (Exponential, (0, 1, 2.0, 1.0, math.nan, 1.0), "way back begins at nan s"),
    "exponential back at once": (Exponential, (0, 1, 0.0, 1.0, 1.0, 0.0), "back_time_constant is 0.0 s"),
    "exponential back for ever": (Exponential, (0, 1, 0.0, 1.0, 1.0), "back_time_constant is inf s"),
    "points at one time": (Points, (((1.0, 0.0), (1.0, 1.0)),), "1.0 s does not come after 1.0 s"),
    "points of endless value": (Points, (((0.0, math.inf),),), "value is inf"),
    "points of endless time": (Points, (((math.inf, 0.0),),), "time is inf"),
    "points of endless period": (Points, (((0.0, 0.0),), math.inf), "period inf s"),
    "points of no period": (Points, (((0.0, 0.0),), 0.0), "period 0.0 s"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_wrong_waveform_is_a_sentence(name: str) -> None:
    """CircuitError naming the number, with a remedy."""
    kind, arguments, words = REFUSED[name]
    with pytest.raises(CircuitError) as caught:
        kind(*arguments)
    assert words in caught.value.message
    assert caught.value.remedy


@pytest.mark.parametrize("duty", [0.0, 1.0, -0.1, math.nan, 2.0])
def test_a_duty_lies_between_zero_and_one(duty: float) -> None:
    """Both ends excluded."""
    with pytest.raises(CircuitError, match="not between 0 and 1"):
        Square.from_duty(0, 1, 1.0, duty)


def test_an_exponential_that_falls_at_the_end_of_all_time_never_falls() -> None:
    """SPICE's EXP has no other word for it; the time constant of that fall does not matter."""
    assert not Exponential(0, 1, 0, 1).falls
    assert not Exponential(0, 1, 0, 1, NEVER, 1.0).falls
    assert Exponential(0, 1, 0, 1, 1e29, 1.0).falls


FILE = """
title = "Leak listener: what a closing valve sends down the main"
output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
[sources.Vin]
nodes = "in 0"
WAVE
"""

WRITTEN: dict[str, tuple[str, Waveform]] = {
    "damped sine": (
        'sine = { amplitude = "2 V", frequency = "1 kHz", delay = "1 ms", damping = "250" }',
        Sine(2.0, 1e3, 0.0, 0.0, 1e-3, 250.0),
    ),
    "there": (
        'exponential = { from = 0, to = "5 V", time_constant = "2 ms" }',
        Exponential(0.0, 5.0, 0.0, 2e-3),
    ),
    "there and back": (
        'exponential = { from = 1, to = 5, at = "1 ms", time_constant = "2 ms", back_at = "8 ms", '
        'back_time_constant = "3 ms" }',
        Exponential(1.0, 5.0, 1e-3, 2e-3, 8e-3, 3e-3),
    ),
}


@pytest.mark.parametrize("name", WRITTEN)
def test_a_circuit_file_holds(name: str) -> None:
    """The waveform as its keys say it."""
    text, wave = WRITTEN[name]
    circuit = parse_circuit_file(FILE.replace("WAVE", text), "listener.rc.toml")
    assert circuit.network.sources["Vin"].waveform == wave


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("exponential = { from = 0, to = 1 }", "Vin: exponential: 'time_constant' is missing"),
        (
            "exponential = { from = 0, to = 1, time_constant = 1, back_at = 2 }",
            "'back_time_constant' is missing",
        ),
        (
            "exponential = { from = 0, to = 1, time_constant = 1, back_time_constant = 2 }",
            "'back_at' is missing",
        ),
        ("exponential = { from = 0, to = 1, time_constant = 1, after = 2 }", "unknown key 'after'"),
        ('exponential = { from = 0, to = 1, time_constant = "0 s" }', "time_constant is 0.0 s"),
        ('sine = { amplitude = 1, frequency = 1, damping = "3 s" }', "Vin: sine: damping"),
        ("sine = { amplitude = 1, frequency = 1, damping = -3 }", "damping is -3.0 1/s"),
    ],
)
def test_a_wrong_wave_in_a_circuit_file_is_told_with_its_line(text: str, words: str) -> None:
    """The file, the line of the source's waveform, and what is wrong with it."""
    with pytest.raises(CircuitError) as caught:
        parse_circuit_file(FILE.replace("WAVE", text), "listener.rc.toml")
    assert words in str(caught.value)
    assert str(caught.value).startswith("listener.rc.toml:9")


def test_a_network_takes_an_exponential_by_keyword_or_as_an_object() -> None:
    """Both ways give the same source; what is no waveform is refused."""
    table = {"from": 0, "to": 1, "time_constant": 1}
    one, two = Network(), Network()
    one.add_voltage_source("V1", "a", "0", exponential=table)
    two.add_voltage_source("V1", "a", "0", waveform=Exponential(0.0, 1.0, 0.0, 1.0))
    assert one.sources == two.sources
    with pytest.raises(CircuitError, match="waveform is 3") as caught:
        Network().add_voltage_source("V1", "a", "0", waveform=3)
    assert "Exponential" in str(caught.value)
