"""The circuit file: what every line of it means, and what is said about every line that is wrong."""

from __future__ import annotations

import math
import time
import tomllib
from pathlib import Path
from typing import NamedTuple

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.circuit import (
    Analyses,
    Bound,
    Circuit,
    Conditions,
    Part,
    Place,
    Points,
    Sine,
    Square,
    Step,
    Sweep,
    TransientRun,
    circuit_name,
    load_circuit_file,
    parse_circuit_file,
)
from rcnet.circuit.circuit_file import MAX_PROBLEMS
from rcnet.circuit.toml_lines import line_table
from rcnet.errors import CircuitError, InputError, RcnetError
from rcnet.values import Tolerance

# The example of the interface, some of its comments shortened.
EXAMPLE = """\
title  = "Float gauge: noise filter ahead of the logger"
output = "out"                    # the node a claim is about unless it says otherwise

[parts]                           # NAME = "node node value [tolerance] [rating] [tempco]"; first letter: kind
R1 = "in  a    4k7  1%  0.1W  100ppm"
C1 = "a   0    10n  5%  25V"
E1 = "b   0  a 0  1"              # R C L, and the controlled sources E G F H; ground is 0

[ladder]                          # or, instead of [parts] or beside it: sections from one node to another
path     = "b -> out"
sections = ["series R2 10k 1%", "shunt C2 4n7 5%", "series R3 10k 1%", "shunt C3 4n7 5%"]

[sources.Vin]                     # V... or I...; any of ac, dc and one waveform
nodes  = "in 0"
ac     = 1
dc     = "2.5 V"
square = { low = 0, high = 5, frequency = "1.2 kHz", duty = 0.5, rise = "1us", fall = "1us" }
# sine = { amplitude, frequency, offset, phase, delay }   step = { from, to, at, rise }
# points = { values = [[t, v], ...], period = "1 ms" }     piecewise linear; with a period it repeats

[analysis]                        # what a netlist asks the simulator for; sensible ones where it is absent
ac        = { from = "10", to = "1 MHz", per_decade = 20 }
transient = { stop = "5 ms" }
noise     = { from = "10", to = "1 MHz", per_decade = 10 }
operating_point = true

[conditions]
temperature = "27"                # degrees Celsius; or { from = -40, to = 85 } for tolerance claims

[[claims]]
says    = "Corner at 1 kHz"       # free text, for people
measure = "cutoff"                # section 4
equals  = "1 kHz"                 # one of: equals + within, at_least, at_most, between = [a, b]
within  = "5 %"
hand    = "1/(2*pi*R1*C1)"        # optional: the designer's own formula, in part names
over    = "tolerance"             # optional: must hold over every part tolerance (default: nominal values)
"""

# The least there is to a circuit; lines are added to it.
PLAIN = """\
output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
[sources.Vin]
nodes = "in 0"
ac = 1
"""
CLAIM = PLAIN + '[[claims]]\nmeasure = "cutoff"\n'  # a claim's further lines begin on line 10


def read(text: str) -> Circuit:
    """The circuit of a text, under the name `gauge.rc.toml`."""
    return parse_circuit_file(text, "gauge.rc.toml")


# ---------------------------------------------------------------------- the example, field by field


@pytest.fixture(scope="module")
def example(tmp_path_factory: pytest.TempPathFactory) -> Circuit:
    """The example, read from a file."""
    path = tmp_path_factory.mktemp("circuits") / "float-gauge.rc.toml"
    path.write_text(EXAMPLE, encoding="utf-8")
    return load_circuit_file(path)


def test_the_example_has_its_name_title_and_output(example: Circuit) -> None:
    """The name is the file's without its suffixes; the title and the output are as written."""
    assert (example.name, example.origin) == ("float-gauge", "circuit file")
    assert example.title == example.network.title == "Float gauge: noise filter ahead of the logger"
    assert example.output == ("out",)
    assert example.file is not None
    assert example.file.endswith("float-gauge.rc.toml")
    assert example.lines == tuple(EXAMPLE.splitlines())


def test_the_example_has_its_parts(example: Circuit) -> None:
    """Everything in base units; the ladder's inner node is named after its end."""
    one, five = Tolerance(-0.01, 0.01), Tolerance(-0.05, 0.05)
    assert list(example.network.parts) == [
        Part("R1", "R", ("in", "a"), 4700.0, None, one, (0.1, "W"), 1e-4),
        Part("C1", "C", ("a", "0"), 10e-9, None, five, (25.0, "V")),
        Part("E1", "E", ("b", "0", "a", "0"), 1.0),
        Part("R2", "R", ("b", "out_1"), 10e3, None, one),
        Part("C2", "C", ("out_1", "0"), 4.7e-9, None, five),
        Part("R3", "R", ("out_1", "out"), 10e3, None, one),
        Part("C3", "C", ("out", "0"), 4.7e-9, None, five),
        Part("Vin", "V", ("in", "0"), 2.5),
    ]


def test_the_example_has_its_source(example: Circuit) -> None:
    """ac, dc and the square wave, whose width is duty/frequency less half of both edges."""
    source = example.network.sources["Vin"]
    assert (source.nodes, source.ac, source.ac_phase, source.dc) == (("in", "0"), 1.0, 0.0, 2.5)
    wave = source.waveform
    assert isinstance(wave, Square)
    assert (wave.low, wave.high, wave.rise, wave.fall, wave.delay) == (0.0, 5.0, 1e-6, 1e-6, 0.0)
    assert wave.period == pytest.approx(1 / 1200, rel=1e-15)
    assert wave.width == pytest.approx(0.5 / 1200 - 1e-6, rel=1e-14)


def test_the_example_has_its_analyses(example: Circuit) -> None:
    """Sweeps in hertz, the transient's step a five-hundredth of its stop, nothing chosen by rcnet."""
    assert example.analyses == Analyses(
        ac=Sweep(10.0, 1e6, 20, "dec"),
        transient=TransientRun(5e-3, 1e-5),
        noise=Sweep(10.0, 1e6, 10, "dec"),
        operating_point=True,
        chosen=False,
    )
    assert example.conditions == Conditions(27.0, 27.0, 27.0)
    lines = {key: place.line for key, place in example.analysis_places.items()}
    assert lines == {"ac": 22, "transient": 23, "noise": 24, "operating point": 25}


def test_the_example_has_its_claim(example: Circuit) -> None:
    """The bound is 1 kHz less and plus 5 %; the claim is about the output; the formula knows its parts."""
    (claim,) = example.claims
    assert (claim.says, claim.measure.name, claim.measure.unit) == ("Corner at 1 kHz", "cutoff", "Hz")
    assert (claim.of, dict(claim.options), claim.over_tolerance) == (("out",), {}, True)
    assert (claim.bound.low, claim.bound.high) == (950.0, 1050.0)
    assert claim.hand is not None
    assert claim.hand.names == {"R1", "C1"}
    assert claim.hand.evaluate({"R1": 4700.0, "C1": 10e-9}) == pytest.approx(1 / (2 * math.pi * 4.7e-5))
    assert claim.place is not None
    assert (claim.place.line, claim.place.text) == (30, "[[claims]]")


def test_the_example_knows_where_everything_stands(example: Circuit) -> None:
    """Each part and source has its line, a ladder's parts that of their section."""
    lines = {name: place.line for name, place in example.places.items()}
    assert lines == {"R1": 5, "C1": 6, "E1": 7, "R2": 11, "C2": 11, "R3": 11, "C3": 11, "Vin": 13}
    assert example.place_of("C1") == Place(str(example.file), 6, 'C1 = "a   0    10n  5%  25V"')
    assert example.place_of("R99").line is None


# ---------------------------------------------------------------------- what else a file may say


def test_what_is_left_out_has_its_default() -> None:
    """No analysis, claim, condition or title; the output is the node `out` where there is one."""
    circuit = read(PLAIN.replace('output = "out"\n', ""))
    assert circuit.output == ("out",)
    assert (circuit.title, circuit.claims, circuit.conditions) == ("", (), Conditions())
    assert not circuit.analyses
    assert read(PLAIN.replace("out", "x").replace('xput = "x"\n', "")).output == ()


@pytest.mark.parametrize(
    ("text", "output"), [("out", ("out",)), ("in out", ("in", "out")), ("out 0", ("out",))]
)
def test_an_output_is_a_node_or_a_pair(text: str, output: tuple[str, ...]) -> None:
    """A pair with ground is the node alone."""
    assert read(PLAIN.replace('output = "out"', f'output = "{text}"')).output == output


WAVES = {
    'sine = { amplitude = "2 V", frequency = "1 kHz", offset = 1, phase = "90 deg", delay = "1 ms" }': Sine(
        2.0, 1000.0, 1.0, 90.0, 1e-3
    ),
    "sine = { amplitude = 2, frequency = 50 }": Sine(2.0, 50.0),
    'step = { from = "-1 V", to = 3.5, at = "2 ms", rise = "1 us" }': Step(-1.0, 3.5, 2e-3, 1e-6),
    "step = { from = 0, to = 5 }": Step(0.0, 5.0),
    'points = { values = [[0, 0], ["1 ms", "5 V"], [0.002, -1]], period = "4 ms" }': Points(
        ((0.0, 0.0), (1e-3, 5.0), (2e-3, -1.0)), 4e-3
    ),
    "points = { values = [[0, 1]] }": Points(((0.0, 1.0),)),
    "square = { low = -1, high = 1, frequency = 4, duty = 0.25 }": Square(-1.0, 1.0, 0.25, 0.0625),
}


@pytest.mark.parametrize("text", WAVES)
def test_every_waveform_is_read(text: str) -> None:
    """Quantities in text or as bare numbers, defaults where keys are left out."""
    assert read(PLAIN + text).network.sources["Vin"].waveform == WAVES[text]


BOUNDS = {
    'at_least = "900 Hz"': Bound(900.0, math.inf, "at least 900 Hz"),
    "at_most = 1.1e3": Bound(-math.inf, 1100.0, "at most 1100.0"),
    'between = ["0.9 kHz", 1100]': Bound(900.0, 1100.0, "between 0.9 kHz and 1100"),
    'equals = "1 kHz"\nwithin = "50 Hz"': Bound(950.0, 1050.0, "1 kHz ± 50 Hz"),
    "equals = 1000\nwithin = 0": Bound(1000.0, 1000.0, "1000 ± 0"),
}


@pytest.mark.parametrize("text", BOUNDS)
def test_every_form_of_bound_is_read(text: str) -> None:
    """Low and high in the measure's unit, open sides infinite, the text for people."""
    (claim,) = read(CLAIM + text).claims
    assert claim.bound == BOUNDS[text]
    assert claim.says == f"cutoff {BOUNDS[text].text}"


OPTIONS = {
    'measure = "gain"\nat = "1 kHz"\nat_least = "-3.1 dB"': {"at": 1000.0},
    'measure = "cutoff"\nedge = "upper"\nat_least = 900': {"edge": "upper"},
    'measure = "noise"\nfrom = 0\nto = inf\nat_most = "10 uV"': {"from": 0.0, "to": math.inf},
    'measure = "settling_time"\nband = "1 %"\nat_most = "5 ms"': {"band": 0.01},
    'measure = "harmonic"\norder = 3\nat_most = "1 mV"': {"order": 3.0},
    'measure = "dissipation"\npart = "R1"\nat_most = "0.1 W"': {"part": "R1"},
    'measure = "discharge_time"\npart = "C1"\nto = "1 V"\nat_most = "1 s"': {"part": "C1", "to": 1.0},
}


@pytest.mark.parametrize("text", OPTIONS)
def test_options_of_measures_are_read(text: str) -> None:
    """Frequencies in hertz, bands as shares, a discharge's end in volts, parts by name."""
    (claim,) = read(PLAIN + "[[claims]]\n" + text).claims
    assert dict(claim.options) == OPTIONS[text]


def test_claims_stand_in_the_files_order() -> None:
    """Three claims, each with its own line and pair of nodes."""
    text = PLAIN + "".join(
        f'[[claims]]\nsays = "{says}"\nmeasure = "dc_gain"\nof = "{of}"\nat_most = 2\n'
        for says, of in (("one", "in"), ("two", "out in"), ("three", "out 0"))
    )
    claims = read(text).claims
    assert [claim.says for claim in claims] == ["one", "two", "three"]
    assert [claim.of for claim in claims] == [("in",), ("out", "in"), ("out",)]
    assert [claim.place.line for claim in claims if claim.place] == [8, 13, 18]


TEMPERATURES = {
    '"85"': Conditions(85.0, 85.0, 85.0),
    '"-40 degC"': Conditions(-40.0, -40.0, -40.0),
    "{ from = -40, to = 85 }": Conditions(27.0, -40.0, 85.0),
    '{ from = "40 °C", to = 85 }': Conditions(40.0, 40.0, 85.0),
    "{ from = -40, to = 0 }": Conditions(0.0, -40.0, 0.0),
}


@pytest.mark.parametrize("text", TEMPERATURES)
def test_temperatures_are_read(text: str) -> None:
    """One temperature, or a range whose nominal is 27 or the end nearest to it."""
    assert read(PLAIN + f"[conditions]\ntemperature = {text}").conditions == TEMPERATURES[text]


def test_a_transient_may_say_everything() -> None:
    """Stop, step, start and largest step, in seconds."""
    text = PLAIN + '[analysis.transient]\nstop = "5 ms"\nstep = "1 us"\nstart = "1 ms"\nmax_step = "0.5 us"'
    assert read(text).analyses.transient == TransientRun(5e-3, 1e-6, 1e-3, 0.5e-6)


def test_several_ladders_may_stand_beside_parts() -> None:
    """[[ladder]] twice: the second finds its inner node's name free."""
    text = PLAIN + (
        '[[ladder]]\npath = "out -> far"\nsections = ["series R2 1k", "series R3 2k", "shunt C2 1n"]\n'
        '[[ladder]]\npath = "far->end"\nsections = [\n  "series R4 4.7 kohm 1%",\n  \'shunt C3 10 nF\',\n]\n'
    )
    circuit = read(text)
    assert circuit.network.part("R2").nodes == ("out", "far_1")
    assert circuit.network.part("R3").nodes == ("far_1", "far")
    assert circuit.network.part("R4") == Part("R4", "R", ("far", "end"), 4700.0, None, Tolerance(-0.01, 0.01))
    assert [circuit.place_of(name).line for name in ("C2", "R4", "C3")] == [10, 14, 15]


@pytest.mark.parametrize(
    ("path", "name"),
    [
        ("a/float-gauge.rc.toml", "float-gauge"),
        ("x.cir", "x"),
        (".rc.toml", ".rc"),
        ("plain", "plain"),
        ("a.b.rc.toml", "a.b"),
    ],
)
def test_a_circuit_is_called_after_its_file(path: str, name: str) -> None:
    """Without `.rc.toml`, else without the last suffix, and never nothing."""
    assert circuit_name(path) == name


def test_windows_line_ends_and_a_byte_order_mark_are_read(tmp_path: Path) -> None:
    """The same circuit and the same lines as with plain line feeds."""
    path = tmp_path / "a.rc.toml"
    path.write_bytes(b"\xef\xbb\xbf" + EXAMPLE.replace("\n", "\r\n").encode())
    circuit = load_circuit_file(path)
    assert circuit.place_of("Vin").line == 13
    assert circuit.lines == tuple(EXAMPLE.splitlines())


# ---------------------------------------------------------------------- what is wrong, and where


class Bad(NamedTuple):
    """A wrong text, the line it must be told of, words of the message, words of the remedy."""

    text: str
    line: int | None
    message: str
    remedy: str


def plain(old: str, new: str) -> str:
    """The plain circuit with something else in its place."""
    assert old in PLAIN
    return PLAIN.replace(old, new)


BAD: dict[str, Bad] = {
    # the file as a whole
    "empty": Bad("", None, "empty", "rcnet new"),
    "blank": Bad(" \n\t\n", None, "empty", "rcnet new"),
    "TOML syntax": Bad(PLAIN + "x = [1,\n", 8, "not valid TOML", "Mend"),
    "TOML syntax in the middle": Bad(plain('R1 = "in', "R1 = in"), 3, "not valid TOML", "Mend"),
    "TOML duplicate key": Bad(plain("C1 =", "R1 ="), 4, "not valid TOML", "Mend"),
    "TOML duplicate table": Bad(PLAIN + "[parts]\n", 8, "not valid TOML", "Mend"),
    "number of thousands of digits": Bad(
        PLAIN + f"[conditions]\ntemperature = {'9' * 5000}\n", None, "number", "Shorten"
    ),
    "nesting": Bad(PLAIN + "x = " + "[" * 5000 + "]" * 5000, None, "nests too deeply", "Flatten"),
    "key of many dots": Bad(PLAIN + ".".join("a" * 30_000) + " = 1", 8, "forty dots", "Shorten"),
    # keys
    "unknown key at the top": Bad("titel = 1\n" + PLAIN, 1, "unknown key 'titel'", "Did you mean 'title'?"),
    "unknown table": Bad(PLAIN + "[wires]\na = 1\n", 8, "unknown key 'wires'", "Known here: "),
    "unknown key in a claim": Bad(
        CLAIM + "at_lest = 1\nat_most = 2", 10, "unknown key 'at_lest'", "'at_least'"
    ),
    "unknown key in a ladder": Bad(
        PLAIN + '[ladder]\npaths = 1\npath = "out -> x"\nsections = ["series R2 1k"]', 9, "'paths'", "'path'"
    ),
    "unknown key in analysis": Bad(PLAIN + "[analysis]\nacc = {}", 9, "unknown key 'acc'", "'ac'"),
    "unknown key in a sweep": Bad(
        PLAIN + "[analysis]\nac = { from = 1, to = 10, per_decad = 3 }", 9, "'per_decad'", "'per_decade'"
    ),
    "unknown key in a transient": Bad(
        PLAIN + "[analysis]\ntransient = { stopp = 1 }", 9, "'stopp'", "'stop'"
    ),
    "unknown key in conditions": Bad(
        PLAIN + "[conditions]\ntemprature = 27", 9, "'temprature'", "'temperature'"
    ),
    "unknown key in a source": Bad(PLAIN + "acc = 1", 8, "unknown key 'acc'", "'ac'"),
    "unknown key in a waveform": Bad(
        PLAIN + "sine = { amplitude = 1, freqency = 1 }", 8, "sine: unknown key 'freqency'", "'frequency'"
    ),
    # types
    "title a number": Bad("title = 5\n" + PLAIN, 1, "title is not text", "title ="),
    "parts no table": Bad("parts = 3\n", 1, "'parts' is 3, not a table", "[parts]"),
    "part a number": Bad(plain('C1 = "out 0 1u"', "C1 = 5"), 4, "C1 is 5, not text", "C1 ="),
    "claims one table": Bad(
        PLAIN + "[claims]\nsays = 1", 8, "claims are not written as tables", "[[claims]]"
    ),
    "ladder a text": Bad("ladder = 'x'\n" + PLAIN, 1, "ladder is 'x', not a table", "[ladder]"),
    "source no table": Bad(
        plain('[sources.Vin]\nnodes = "in 0"\nac = 1', "[sources]\nVin = 3"), 6, "Vin is 3", "[sources.Vin]"
    ),
    "operating point in words": Bad(
        PLAIN + "[analysis]\noperating_point = 'yes'", 9, "'yes'", "true or false"
    ),
    "huge integer": Bad(
        PLAIN + f"[analysis]\noperating_point = 0x{'f' * 5000}", 9, "thousands of digits", "true"
    ),
    "sweep no table": Bad(PLAIN + "[analysis]\nac = 'all'", 9, "ac is 'all'", "from ="),
    "transient no table": Bad(PLAIN + "[analysis]\ntransient = 1", 9, "transient is 1", "stop ="),
    "claim's says a number": Bad(CLAIM + "at_most = 1\nsays = 3", 11, "says is 3", "says ="),
    "hand a number": Bad(CLAIM + "at_most = 1\nhand = 3", 11, "hand is 3", "hand ="),
    "waveform no table": Bad(PLAIN + "square = 5", 8, "square is 5", "square ="),
    # parts
    "bad value": Bad(plain("1k", "1x"), 3, "R1 '1x'", "ohm"),
    "unit that does not fit": Bad(plain("1k", "1nF"), 3, "'1nF'", "ohm"),
    "comma": Bad(plain("1k", "1,5k"), 3, "comma", "point"),
    "zero resistance": Bad(plain("1k", "0"), 3, "R1 has the value 0.0 ohm", "Leave the part out"),
    "negative capacitance": Bad(plain("1u", "-1u"), 4, "C1 has the value -1e-06 F", "Leave the part out"),
    "endless resistance": Bad(plain("1k", "inf"), 3, "R1 has the value inf", "finite"),
    "too few words": Bad(
        plain("in out 1k", "in 1k"), 3, "R1 = 'in 1k' is too short for a resistor", "node node value"
    ),
    "E with two nodes": Bad(
        PLAIN.replace("R1 =", 'E1 = "x 0 2"\nR1 ='), 3, "too short", "control_a control_b"
    ),
    "unknown kind": Bad(plain("C1 =", "Q1 ="), 4, "'Q1' cannot stand in [parts]", "R C L"),
    "source among the parts": Bad(plain("C1 =", "V1 ="), 4, "'V1' cannot stand in [parts]", "[sources.NAME]"),
    "tolerance twice": Bad(plain("1k", "1k 1% 5%"), 3, "R1 has a second tolerance, '5%'", "a tolerance"),
    "word behind the value": Bad(plain("1k", "1k blue"), 3, "'blue'", "tolerance"),
    "gnd as a node": Bad(plain("out 0 1u", "out GND 1u"), 4, "'GND' means ground", "Write 0"),
    "no ground": Bad(
        plain("out 0", "out x").replace('"in 0"', '"in x"'),
        2,
        "nothing is connected to ground",
        "Call one node 0",
    ),
    "blank in a name": Bad(plain("R1 =", '"R 1" ='), 3, "'R 1' holds a blank", "letters and digits"),
    "endless name": Bad(plain("R1 =", f"R{'1' * 300} ="), 3, "301 characters", "200"),
    "F that senses nothing": Bad(
        PLAIN.replace("R1 =", 'F1 = "out 0 Vx 2"\nR1 ='), 3, "'Vx'", "voltage source"
    ),
    "H that senses a resistor": Bad(
        PLAIN.replace("R1 =", 'H1 = "x 0 R1 2"\nR1 ='), 3, "'R1'", "voltage source"
    ),
    # ladders
    "ladder without an arrow": Bad(
        PLAIN + '[ladder]\npath = "out x"\nsections = ["series R2 1k"]', 9, "path is 'out x'", "in -> out"
    ),
    "ladder without a path": Bad(PLAIN + '[ladder]\nsections = ["series R2 1k"]', 8, "no path", "in -> out"),
    "ladder without sections": Bad(
        PLAIN + '[ladder]\npath = "out -> x"', 8, "sections are missing", "series R1"
    ),
    "sections of numbers": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = [1]', 10, "not a list of texts", "series R1"
    ),
    "ladder without a series part": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = ["shunt C2 1n"]', 10, "no series part", "series R1"
    ),
    "section of another word": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = [\n  "series R2 1k",\n  "parallel C2 1n",\n]',
        12,
        "'parallel C2 1n' cannot be read",
        "shunt C2",
    ),
    "section with a source": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = ["series V2 1"]', 10, "no R, C or L", "Only those"
    ),
    "section reusing a part's name": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = [\n  "series R2 1k",\n  "shunt C1 1n",\n]',
        12,
        "two parts called 'C1'",
        "own name",
    ),
    "section with a bad value": Bad(
        PLAIN + '[ladder]\npath = "out -> x"\nsections = [\n  "series R2 1k",\n  "shunt C2 1 kohm",\n]',
        12,
        "C2 '1 kohm' is in ohm, but F",
        "nF",
    ),
    # sources
    "no source": Bad(
        plain('[sources.Vin]\nnodes = "in 0"\nac = 1\n', ""), None, "no source", "[sources.Vin]"
    ),
    "source of another letter": Bad(plain("sources.Vin", "sources.Xin"), 5, "'Xin'", "V or I"),
    "source without nodes": Bad(plain('nodes = "in 0"\n', ""), 5, "'nodes' is missing", 'nodes = "in 0"'),
    "source with three nodes": Bad(plain('"in 0"', '"in 0 x"'), 6, "nodes is 'in 0 x'", 'nodes = "in 0"'),
    "source on gnd": Bad(plain('"in 0"', '"in gnd"'), 5, "'gnd' means ground", "Write 0"),
    "source in another unit": Bad(plain("ac = 1", 'ac = "1 A"'), 7, "'1 A' is in A, but V", "V"),
    "source's ac endless": Bad(plain("ac = 1", "ac = inf"), 7, "ac is inf", "finite"),
    "two waveforms": Bad(
        PLAIN + "step = { from = 0, to = 1 }\nsine = { amplitude = 1, frequency = 1 }",
        5,
        "two waveforms",
        "Keep one",
    ),
    "waveform without a key": Bad(
        PLAIN + "sine = { amplitude = 1 }", 8, "sine: 'frequency' is missing", "Add it"
    ),
    "edges that do not fit": Bad(
        PLAIN + 'square = { low = 0, high = 1, frequency = "1 kHz", rise = "0.6 ms", fall = "0.6 ms" }',
        8,
        "edges do not fit",
        "Shorten",
    ),
    "edges longer than the high time": Bad(
        PLAIN + 'square = { low = 0, high = 1, frequency = "1 kHz", duty = 0.1, rise = "0.3 ms" }',
        8,
        "never gets to stay",
        "duty",
    ),
    "duty of one": Bad(
        PLAIN + "square = { low = 0, high = 1, frequency = 1, duty = 1 }", 8, "duty of 1.0", "0.25"
    ),
    "frequency of zero": Bad(
        PLAIN + "square = { low = 0, high = 1, frequency = 0 }", 8, "frequency of 0.0", "above"
    ),
    "negative delay": Bad(
        PLAIN + "sine = { amplitude = 1, frequency = 1, delay = -1 }", 8, "delay is -1.0", "zero"
    ),
    "points going back": Bad(
        PLAIN + "points = { values = [[0, 0], [2, 1], [1, 0]] }", 8, "1.0 s does not come", "rise"
    ),
    "points before zero": Bad(
        PLAIN + "points = { values = [[-1, 0]] }", 8, "-1.0 s lies before", "zero or later"
    ),
    "no points": Bad(PLAIN + "points = { values = [] }", 8, "empty", "pair"),
    "points without values": Bad(
        PLAIN + "points = { period = 1 }", 8, "'values' is missing", "[[time, value]"
    ),
    "point of three": Bad(PLAIN + "points = { values = [[0, 1, 2]] }", 8, "no pair", "[time, value]"),
    "period shorter than the points": Bad(
        PLAIN + "points = { values = [[0, 0], [2, 1]], period = 1 }", 8, "period 1.0 s is shorter", "covers"
    ),
    # what is asked
    "output nowhere": Bad(plain('"out"\n', '"nowhere"\n'), 1, "no node called 'nowhere'", "Nodes here"),
    "output of three nodes": Bad(plain('"out"\n', '"a b c"\n'), 1, "output is 'a b c'", "pair"),
    "output gnd": Bad(plain('"out"\n', '"gnd"\n'), 1, "'gnd' means ground", "Write 0"),
    "sweep reversed": Bad(
        PLAIN + '[analysis]\nac = { from = "1 MHz", to = "10 Hz" }',
        9,
        "from 1000000.0 Hz to 10.0 Hz",
        "higher",
    ),
    "sweep from zero": Bad(
        PLAIN + "[analysis]\nnoise = { from = 0, to = 10 }", 9, "noise runs from 0.0", "above zero"
    ),
    "sweep without a step": Bad(
        PLAIN + "[analysis]\nac = { from = 10, to = 10.5, per_decade = 10 }", 9, "less than one step", "Widen"
    ),
    "sweep without an end": Bad(PLAIN + "[analysis]\nac = { from = 10 }", 9, "'to' is missing", "to ="),
    "sweep of half points": Bad(
        PLAIN + "[analysis]\nac = { from = 1, to = 10, per_decade = 2.5 }", 9, "per_decade is 2.5", "whole"
    ),
    "sweep in volts": Bad(PLAIN + '[analysis]\nac = { from = "1 V", to = 10 }', 9, "'1 V'", "kHz"),
    "transient without a stop": Bad(
        PLAIN + "[analysis]\ntransient = { step = 1 }", 9, "'stop' is missing", "stop ="
    ),
    "transient backwards": Bad(
        PLAIN + "[analysis]\ntransient = { stop = 1, start = 2 }", 9, "no run over time", "start before stop"
    ),
    "below absolute zero": Bad(
        PLAIN + "[conditions]\ntemperature = -300", 9, "temperature is -300", "lower one first"
    ),
    "temperatures reversed": Bad(
        PLAIN + "[conditions]\ntemperature = { from = 85, to = -40 }",
        9,
        "temperature is {",
        "lower one first",
    ),
    "half a temperature range": Bad(
        PLAIN + "[conditions]\ntemperature = { from = 85 }", 9, "temperature is {", "to = 85"
    ),
    # claims
    "claim without a measure": Bad(PLAIN + "[[claims]]\nat_most = 1", 8, "names no measure", "measure ="),
    "unknown measure": Bad(PLAIN + '[[claims]]\nmeasure = "cutof"\nat_most = 1', 9, "'cutof'", "cutoff"),
    "claim without a bound": Bad(CLAIM + 'says = "x"', 8, "no bound", "exactly one"),
    "claim with two bounds": Bad(
        CLAIM + "at_least = 1\nat_most = 2", 8, "at_least and at_most", "exactly one"
    ),
    "equals without within": Bad(CLAIM + "equals = 1", 10, "without within", "within ="),
    "within beside at_most": Bad(
        CLAIM + 'at_most = 1\nwithin = "1 %"', 11, "within does not go with at_most", "equals"
    ),
    "within below zero": Bad(CLAIM + 'equals = 1\nwithin = "-1 %"', 11, "within is '-1 %'", "zero or more"),
    "bound in another unit": Bad(CLAIM + 'at_most = "40 ohm"', 10, "'40 ohm' is in ohm, but Hz", "kHz"),
    "between reversed": Bad(CLAIM + "between = [2, 1]", 10, "from 2 down to 1", "lower one first"),
    "between of one": Bad(CLAIM + "between = [2]", 10, "between is [2]", "[low, high]"),
    "claim about an unknown node": Bad(CLAIM + 'at_most = 1\nof = "nowhere"', 11, "'nowhere'", "Nodes here"),
    "claim about no node": Bad(
        CLAIM.replace('output = "out"\n', "").replace("out", "x") + "at_most = 1", 7, "about no node", "of ="
    ),
    "hand naming an unknown part": Bad(CLAIM + 'at_most = 1\nhand = "1/(R9*C1)"', 11, "'R9'", "Parts here"),
    "hand that is no formula": Bad(CLAIM + 'at_most = 1\nhand = "1/(R1"', 11, "", ""),
    "missing option": Bad(
        PLAIN + '[[claims]]\nmeasure = "gain"\nat_least = 1', 8, "gain needs 'at'", "Add at"
    ),
    "option of another measure": Bad(CLAIM + 'at_most = 1\nat = "1 kHz"', 11, "unknown key 'at'", ""),
    "option in another unit": Bad(
        PLAIN + '[[claims]]\nmeasure = "gain"\nat_least = 1\nat = "3 V"', 11, "'3 V' is in V, but Hz", "kHz"
    ),
    "option endless": Bad(
        PLAIN + '[[claims]]\nmeasure = "gain"\nat_least = 1\nat = inf', 11, "at is inf", "finite"
    ),
    "option below zero": Bad(
        PLAIN + '[[claims]]\nmeasure = "gain"\nat_least = 1\nat = -1', 11, "below zero", "zero"
    ),
    "edge of a third kind": Bad(CLAIM + 'at_most = 1\nedge = "left"', 11, "edge is 'left'", '"lower"'),
    "harmonic one and a half": Bad(
        PLAIN + '[[claims]]\nmeasure = "harmonic"\nat_most = 1\norder = 1.5', 11, "order is 1.5", "whole"
    ),
    "band of all": Bad(
        PLAIN + '[[claims]]\nmeasure = "settling_time"\nat_most = 1\nband = 1',
        11,
        "band is 1.0",
        "between 0 and 1",
    ),
    "noise band reversed": Bad(
        PLAIN + '[[claims]]\nmeasure = "noise"\nat_most = 1\nfrom = 9\nto = 3', 12, "from is 9.0 Hz", "lower"
    ),
    "claim about an unknown part": Bad(
        PLAIN + '[[claims]]\nmeasure = "dissipation"\nat_most = 1\npart = "R7"', 11, "'R7'", "Parts here"
    ),
    "over something else": Bad(CLAIM + 'at_most = 1\nover = "night"', 11, "over is 'night'", "tolerance"),
}


@pytest.mark.parametrize("name", BAD)
def test_a_mistake_is_told_once_with_its_line_and_remedy(name: str) -> None:
    """One problem: the file, the line, what is wrong, what to do."""
    bad = BAD[name]
    with pytest.raises(CircuitError) as caught:
        read(bad.text)
    (problem,) = caught.value.problems
    assert (problem.file, problem.line) == ("gauge.rc.toml", bad.line)
    assert bad.message in problem.message
    assert problem.remedy is not None
    assert bad.remedy in problem.remedy
    assert len(str(problem)) < 1000


def test_every_mistake_of_a_file_is_told_in_order() -> None:
    """Thirteen mistakes in thirteen places come at once, sorted by line, each with its own."""
    text = """\
titel = "x"
output = "nowhere"
[parts]
R1 = "in out 1x"
C1 = "out 0 1n 5% 5%"
R2 = "out gnd 1k"
[ladder]
path = "out -> far"
sections = [
    "series R3 1k",
    "shunt C3 1 ohm",
    "shunt R1x",
]
[sources.Vin]
nodes = "in 0"
ac = "1 A"
dcc = 1
[[claims]]
measure = "cutof"
at_most = 1
[[claims]]
measure = "gain"
at_least = "1 V"
hand = "R9"
"""
    with pytest.raises(CircuitError) as caught:
        read(text)
    assert [problem.line for problem in caught.value.problems] == [
        1,
        2,
        4,
        5,
        6,
        11,
        12,
        16,
        17,
        19,
        21,
        23,
        24,
    ]
    assert all(problem.file == "gauge.rc.toml" and problem.remedy for problem in caught.value.problems)
    assert caught.value.line == 1
    assert str(caught.value).count("\n") == 12


def test_a_mistake_hides_no_other() -> None:
    """A wrong path hides no wrong section, wrong nodes no wrong drive, a wrong part no unknown node."""
    text = """\
title = "Leak listener"
output = "outt"
[parts]
R1 = "in a 1k"
R2 = "a b 4,7k"
[ladder]
path = "a out"
sections = ["series R7 1x", "shunt C7 1n"]
[sources.Vin]
nodes = "in"
ac = "1 ohm"
dc = "x"
[[claims]]
measure = "gain"
at = 1
at_most = 1
of = "b"
hand = "R9 + R7 + C7"
"""
    with pytest.raises(CircuitError) as caught:
        read(text)
    # Not line 17: node b is named by R2, which cannot be read.
    assert [problem.line for problem in caught.value.problems] == [2, 5, 7, 8, 10, 11, 12, 18]
    assert caught.value.problems[-1].remedy == "Check its spelling."


def test_a_part_that_cannot_be_read_draws_no_further_complaints() -> None:
    """Formulas, claims and outputs that lean on a wrong part are not complained about too."""
    text = CLAIM.replace("1k", "1x").replace("1u", "1y") + 'at_most = 1\nhand = "R1*C1"\nof = "out"'
    with pytest.raises(CircuitError) as caught:
        read(text)
    assert [problem.line for problem in caught.value.problems] == [3, 4]


def test_a_flood_of_mistakes_is_cut_short() -> None:
    """A thousand wrong parts: the first fifty, and how many more."""
    text = "[parts]\n" + "".join(f'R{k} = "a b 1x"\n' for k in range(1000))
    with pytest.raises(CircuitError) as caught:
        read(text)
    assert len(caught.value.problems) == MAX_PROBLEMS + 1
    assert caught.value.problems[-1].message == f"and {1000 - MAX_PROBLEMS} more problems."


FILES: dict[str, tuple[bytes, int | None, str]] = {
    "binary": (b'title = "x"\nR = "\x00\x01"\n', 2, "NUL byte"),
    "not UTF-8": (b'title = "x"\n# \xe9\n', 2, "0xe9 is not UTF-8"),
    "empty": (b"", None, "empty"),
}


@pytest.mark.parametrize("name", FILES)
def test_a_file_that_is_no_text_is_told(tmp_path: Path, name: str) -> None:
    """InputError with the file, the line where there is one, and a remedy."""
    contents, line, words = FILES[name]
    path = tmp_path / "a.rc.toml"
    path.write_bytes(contents)
    with pytest.raises(InputError, match=words) as caught:
        load_circuit_file(path)
    assert (caught.value.file, caught.value.line) == (str(path), line)
    assert caught.value.remedy


def test_a_folder_and_a_missing_file_are_told(tmp_path: Path) -> None:
    """InputError naming the path."""
    with pytest.raises(InputError, match="folder") as caught:
        load_circuit_file(tmp_path)
    assert caught.value.file == str(tmp_path)
    with pytest.raises(InputError, match="no such file") as caught:
        load_circuit_file(tmp_path / "none.rc.toml")
    assert caught.value.file == str(tmp_path / "none.rc.toml")


def test_a_long_ladder_is_read_in_a_blink() -> None:
    """Twenty thousand sections on lines of their own, each with its line, in far less than ten seconds."""
    count = 10_000
    lines = [f'"series R{k} 1k", \n"shunt C{k} 1n",' for k in range(2, count)]
    start = time.perf_counter()
    circuit = read(PLAIN + '[ladder]\npath = "out -> end"\nsections = [\n' + "\n".join(lines) + "\n]")
    assert time.perf_counter() - start < 10
    assert circuit.place_of("R2").line == 11
    assert circuit.place_of(f"C{count - 1}").line == 11 + 2 * (count - 3) + 1


# ---------------------------------------------------------------------- anything else: never a traceback

_SNIPPETS = (
    *("[", "]", "[[", "{", "}", '"', "'", '"""', "=", ",", "#", "\n", "->", "%", "k"),
    *("\u00b5", "\u2028", "\x85", "\x00", "\\u0000", "a" * 5000, "a.b.c.d", "1979-05-27", "true"),
    *("0", "-1", "1e400", "inf", "nan", "0x" + "f" * 5000, "9" * 5000, "series", "shunt"),
    *("R1", "C1", "Vin", "gnd", "[[claims]]", "[parts]", "[ladder]", "equals", "of = 3"),
)  # fmt: skip


@st.composite
def mutated(draw: st.DrawFn) -> str:
    """The example with pieces deleted, repeated, exchanged, or replaced by others."""
    text = EXAMPLE
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        stop = min(len(text), start + draw(st.integers(0, 12)))
        piece = draw(
            st.one_of(st.sampled_from(_SNIPPETS), st.text(max_size=4), st.just(text[start:stop] * 2))
        )
        text = text[:start] + piece + text[stop:]
    return text


@settings(max_examples=400, deadline=None)
@given(mutated())
def test_no_mutation_of_the_example_escapes(text: str) -> None:
    """A circuit, or a CircuitError whose every problem is a sentence in the file, with a line that exists."""
    try:
        circuit = read(text)
    except RcnetError as error:
        for problem in error.problems:
            assert problem.message.endswith((".", "?"))
            assert problem.file == "gauge.rc.toml"
            assert problem.line is None or 1 <= problem.line <= text.count("\n") + 1
            assert len(str(problem)) < 1500
    else:
        assert len(circuit.network) > 0
        assert set(circuit.places) == set(circuit.network.names)


_SCALARS = st.one_of(
    st.integers(),
    st.floats(),
    st.booleans(),
    st.text(max_size=12),
    st.just([]),
    st.just({}),
    st.just([[0, 1]]),
)


@settings(max_examples=200, deadline=None)
@given(
    st.lists(
        st.tuples(
            st.sampled_from(
                [line.split("=")[0].strip() for line in EXAMPLE.splitlines() if "=" in line[:12]]
            ),
            _SCALARS,
        ),
        max_size=3,
    )
)
def test_no_type_in_any_place_escapes(changes: list[tuple[str, object]]) -> None:
    """Keys of the example with values of any type: a circuit or a CircuitError."""
    lines = EXAMPLE.splitlines()
    for key, value in changes:
        for number, line in enumerate(lines):
            if line.split("=")[0].strip() == key:
                lines[number] = f"{key} = {_toml(value)}"
                break
    try:
        read("\n".join(lines))
    except CircuitError as error:
        assert all(problem.remedy for problem in error.problems)


def _toml(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return '"' + "".join(f"\\U{ord(character):08x}" for character in value) + '"'
    return repr(value) if not isinstance(value, dict) else "{}"


# ---------------------------------------------------------------------- lines of keys

LINES: dict[str, tuple[str, dict[tuple[str | int, ...], int]]] = {
    "dotted keys": (
        "a.b = 1\na . c = 2\n[t]\nx.y.z = 3",
        {("a",): 1, ("a", "b"): 1, ("a", "c"): 2, ("t",): 3, ("t", "x"): 4, ("t", "x", "y", "z"): 4},
    ),
    "quoted keys": (
        "\"a b\" = 1\n'c.d' = 2\n\"e\\\"f\" = 3\n[t.'u v']\n\"w\".x = 4\n\"# no\" = 5",
        {
            ("a b",): 1, ("c.d",): 2, ('e"f',): 3, ("t", "u v"): 4, ("t", "u v", "w", "x"): 5,
            ("t", "u v", "# no"): 6,
        },
    ),
    "arrays of tables": (
        "[[c]]\na = 1\n[[c]]\n\na = 2\n[c.d]\ne = 3\n[[c.f]]\ng = 4\n[[ c ]] # third\na = 5",
        {
            ("c",): 1, ("c", 0): 1, ("c", 0, "a"): 2, ("c", 1): 3, ("c", 1, "a"): 5, ("c", 1, "d"): 6,
            ("c", 1, "d", "e"): 7, ("c", 1, "f", 0, "g"): 9, ("c", 2): 10, ("c", 2, "a"): 11,
        },
    ),
    "arrays over several lines": (
        "a = [\n  [0, 1],\n  [2, 3]\n]\nb = [ # ]\n\"]\", '[',\n]\nc = 1",
        {("a",): 1, ("b",): 5, ("c",): 8},
    ),
    "texts over several lines": (
        'a = """\n[not.a.table]\nx = 1\n\\""" still\n"""\nb = \'\'\'\ny = 2 "\'\'\'\nc = """one line"""\n'
        'd = ""\ne = """"q""""\nf = 1',
        {("a",): 1, ("b",): 6, ("c",): 8, ("d",): 9, ("e",): 10, ("f",): 11},
    ),
    "brackets in texts and comments": (
        "a = \"[[\" # {\nb = '}' # \"\"\"\n# [c]\n[d] # ]\ne = 'its'\n",
        {("a",): 1, ("b",): 2, ("d",): 4, ("d", "e"): 5},
    ),
    "inline tables": ("a = { b = 1, c = [\n1, 2] }\nd = 2", {("a",): 1, ("d",): 3}),
    "other line separators": ("a = '\u2028\x85'\nb = 2 # \u2029\nc = 3", {("a",): 1, ("b",): 2, ("c",): 3}),
    "windows line ends": (
        'a = """\r\nx\r\n"""\r\nb = 2\r\n[c]\r\nd = 3',
        {("a",): 1, ("b",): 4, ("c",): 5, ("c", "d"): 6},
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", LINES)
def test_keys_are_found_on_their_lines(name: str) -> None:
    """Every key that is listed stands on its line, and nothing within a value is taken for a key."""
    text, expected = LINES[name]
    tomllib.loads(text)
    table = line_table(text)
    assert {key: table.get(key) for key in expected} == expected
    tops = {key[0] for key in table if key}
    assert tops == {key[0] for key in expected}


_KEYS = st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=6)


@settings(max_examples=150, deadline=None)
@given(
    st.lists(
        st.tuples(_KEYS, st.integers(0, 3)),
        min_size=1,
        max_size=8,
        unique_by=lambda pair: pair[0],
    )
)
def test_any_key_is_found(pairs: list[tuple[str, int]]) -> None:
    """Random keys, quoted as TOML asks, with values over 1 to 4 lines: each on the line it was written on."""
    text, expected, line = "", {}, 1
    for key, extra in pairs:
        quoted = "".join(f"\\U{ord(letter):08x}" for letter in key)
        expected[(key,)] = line
        text += f'"{quoted}" = [{chr(10) * extra}"]"]\n'
        line += extra + 1
    table = line_table(text)
    assert {path: table.get(path) for path in expected} == expected
