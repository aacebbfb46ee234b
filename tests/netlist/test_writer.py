"""Written netlists: they come back as they went in, and a simulator reads them the same way."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from networkx.utils import graphs_equal

from rcnet.circuit import (
    GROUND,
    KINDS,
    Analyses,
    Circuit,
    Conditions,
    Network,
    Part,
    Points,
    Sine,
    Source,
    Square,
    Step,
    Sweep,
    TransientRun,
    Waveform,
)
from rcnet.errors import CircuitError
from rcnet.netlist import deck, digest, parse_netlist, read_same, write

# ------------------------------------------------------------------------------------- networks of any kind

ODD = ["out", "OUT", "Out", "00", "0.0", "time", "frequency", "gnd!", "x.1", "né", "nü", "µ1", "μ1", "水位"]
ODD += ["dc", "poly", "a+b", "v(1)", "*#shell", ".control", "$x", "{x}", "'q'", "a;b", "a//b", "1k", "back\\"]
ODD += ["n" * 200, "µ" * 200, "time\u0301", "-", "=", "_", "all"]
NODES = st.sampled_from(ODD) | st.text(
    st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=8
).filter(lambda name: name.isprintable() and name.lower() != "gnd")
TAILS = st.sampled_from(["", "1", "2", "a", "A", "é", ".x", "+", "µ", "x" * 199]) | st.text(
    st.characters(exclude_categories=("C", "Z")), max_size=4
).filter(str.isprintable)
SIZES = st.floats(1e-300, 1e300) | st.sampled_from(
    [5e-324, 0.1, 4700.0, 1e-7, 0.7, 1 / 3, 1.7976931348623157e308]
)
SIGNED = st.floats(-1e300, 1e300) | st.just(-0.0)
LEVELS = st.floats(-1e6, 1e6)
TIMES = st.floats(1e-9, 1e3)


@st.composite
def squares(draw: st.DrawFn) -> Square:
    """Any square that fits its period, vertical edges among them."""
    period = draw(TIMES)
    rise, width, fall = (draw(st.sampled_from([0.0, 0.1, 0.25, 0.3])) * period for _ in range(3))
    return Square(draw(LEVELS), draw(LEVELS), period, width, rise, fall, draw(st.just(0.0) | TIMES))


@st.composite
def points(draw: st.DrawFn) -> Points:
    """Points with and without a period."""
    steps = draw(st.lists(st.floats(1e-3, 1.0), min_size=1, max_size=5))
    times = np.cumsum([draw(st.sampled_from([0.0, 0.5])), *steps[1:]]).tolist()
    period = draw(st.none() | st.floats(1.01, 3.0).map(lambda share: share * max(times[-1], 0.1)))
    return Points(tuple((time, draw(LEVELS)) for time in times), period)


SINES = st.builds(Sine, LEVELS, TIMES, LEVELS, st.just(0.0) | st.floats(-360, 360), st.just(0.0) | TIMES)
STEPS = st.builds(Step, LEVELS, LEVELS, st.just(0.0) | TIMES, st.just(0.0) | TIMES)
WAVES = st.none() | squares() | SINES | STEPS | points()


@st.composite
def networks(draw: st.DrawFn) -> Network:
    """A network of all kinds of part between oddly named nodes; it need not have a solution."""
    network = Network(draw(st.text(max_size=30)))
    nodes = [GROUND, *draw(st.lists(NODES, min_size=2, max_size=6, unique=True))]
    nodes = list(dict.fromkeys(nodes))

    def node() -> str:
        return draw(st.sampled_from(nodes))

    def name(letter: str) -> str:
        stem = draw(st.sampled_from([letter, letter.lower()]))
        tail = draw(TAILS)
        while stem + tail in network:
            tail += draw(st.sampled_from("xyX"))
        return (stem + tail)[:200] if (stem + tail)[:200] not in network else f"{letter}{len(network)}"

    for _ in range(draw(st.integers(1, 3))):
        letter = draw(st.sampled_from("VI"))
        ac, phase = draw(st.none() | LEVELS), draw(st.just(0.0) | st.floats(-360, 360))
        source = Source(name(letter), (node(), node()), ac, phase if ac is not None else 0.0)
        network.add_source(replace(source, dc=draw(st.none() | LEVELS), waveform=draw(WAVES)))
    sensed = [source.name for source in network.sources.values() if source.kind == "V"]
    kinds = "RCLEGFH" if sensed else "RCLEG"
    for letter in draw(st.lists(st.sampled_from(kinds), min_size=1, max_size=10)):
        kind = KINDS[letter]
        value = draw(SIZES if kind.is_passive else SIGNED)
        ends = tuple(node() for _ in range(kind.nodes))
        senses = draw(st.sampled_from(sensed)) if kind.senses_branch else None
        network.add_part(Part(name(letter), letter, ends, value, senses))
    return network


SWEEPS = st.builds(
    Sweep,
    st.floats(1e-3, 1e3),
    st.floats(1e4, 1e9),
    st.integers(1, 500),
    st.sampled_from(["dec", "oct", "lin"]),
)
RUNS = st.builds(
    TransientRun,
    st.floats(1.0, 20.0),
    st.floats(1e-6, 1e-2),
    st.just(0.0) | st.floats(0.0, 0.9),
    st.none() | st.floats(1e-6, 1e-2),
    st.booleans(),
)


@st.composite
def circuits(draw: st.DrawFn) -> Circuit:
    """A network with any analyses, an output, options and a temperature."""
    network = draw(networks())
    output = tuple(draw(st.lists(st.sampled_from(network.nodes[1:] or ("x",)), max_size=2, unique=True)))
    output = tuple(node for node in output if network.has_node(node))
    driven = any(source.ac for source in network.sources.values())
    noise = draw(st.none() | SWEEPS) if driven and output else None
    analyses = Analyses(draw(st.none() | SWEEPS), draw(st.none() | RUNS), noise, draw(st.booleans()))
    options = draw(st.sampled_from([{}, {"reltol": "1e-06"}, {"method": "gear", "noopac": ""}]))
    warmth = draw(st.just(27.0) | st.floats(-200, 200))
    return Circuit(
        network,
        draw(st.text(max_size=20)),
        output=output,
        analyses=analyses,
        conditions=Conditions(warmth, warmth, warmth),
        options=options,
    )


def renamed_graph(network: Network, nodes: dict[str, str], parts: dict[str, str]) -> nx.MultiGraph:
    """The network's graph under other names; directions and drives among the edges' data."""
    graph = nx.MultiGraph()
    graph.add_nodes_from(nodes[node] for node in network.nodes)
    for part in network.parts:
        ends = [nodes[node] for node in part.nodes]
        source = network.sources.get(part.name)
        drive = None if source is None else (source.ac, source.ac_phase, source.operating_value)
        senses = None if part.senses is None else parts[part.senses]
        graph.add_edge(
            ends[0],
            ends[1],
            key=parts[part.name],
            kind=part.kind,
            ends=tuple(ends),
            value=part.value.hex(),
            senses=senses,
            drive=drive,
        )
    return graph


def sampled(wave: Points, time: float) -> float:
    """The value of straight lines between points, the ends held."""
    return float(np.interp(time, *np.transpose(wave.values)))


def same_waveform(edged: Waveform | None, back: Waveform | None, run: TransientRun | None) -> bool:
    """What SPICE's PULSE, SIN and PWL make of a waveform, by their definitions in the ngspice manual."""
    if edged is None or isinstance(edged, (Square, Sine)):
        return back == edged
    assert isinstance(back, Points)
    if isinstance(edged, Step):
        probes = {0.0: edged.initial, edged.at: edged.initial, edged.at + edged.rise: edged.final}
        probes[(edged.at + edged.rise) * 2] = edged.final
        return all(sampled(back, time) == value for time, value in probes.items())
    if edged.period is None or run is None:
        return back.values == edged.values
    times = np.linspace(0, run.stop, 301)
    expected = np.interp(times, *np.transpose(edged.values), period=edged.period)
    size = max(abs(value) for _, value in edged.values)
    steepest = max(
        (abs(b[1] - a[1]) / (b[0] - a[0]) for a, b in zip(edged.values, edged.values[1:], strict=False)),
        default=0.0,
    )
    gap = edged.period - edged.values[-1][0] + edged.values[0][0]
    steepest = max(steepest, abs(edged.values[0][1] - edged.values[-1][1]) / gap if gap else 0.0)
    slack = 1e-12 * size + 1e-13 * run.stop * steepest
    return bool(np.all(np.abs([sampled(back, time) for time in times] - expected) <= slack))


@settings(deadline=None, max_examples=200)
@given(circuits())
def test_what_is_written_comes_back(circuit: Circuit) -> None:
    """Parts, nodes, values to the bit, drives, waveforms with their edges, analyses, output, temperature."""
    written = write(circuit)
    back = read_same(written)
    nodes = {old: new.lower() for old, new in written.names.nodes.items()}
    parts = dict(written.names.parts)
    want = renamed_graph(written.circuit.network, nodes, parts)
    got = renamed_graph(
        back.network, {n: n.lower() for n in back.network.nodes}, {n: n for n in back.network.names}
    )
    assert graphs_equal(want, got)
    run = circuit.analyses.transient
    for name, source in circuit.network.sources.items():
        edged = source.waveform and source.waveform.with_edges(run.stop if run else 1.0)
        if isinstance(edged, Square) and not edged.width:  # 0 is no width to a simulator, but none given
            edged = replace(edged, width=1e-9 * edged.period, fall=edged.fall - 1e-9 * edged.period)
        assert same_waveform(edged, back.network.sources[parts[name]].waveform, run)
    assert back.analyses == circuit.analyses
    assert back.options == circuit.options
    assert back.conditions.nominal == circuit.conditions.nominal
    if circuit.output and circuit.analyses:
        assert [n.lower() for n in back.output] == [nodes[node] for node in circuit.output]


@settings(deadline=None, max_examples=100)
@given(circuits())
def test_a_netlist_read_and_written_again_holds_the_same(circuit: Circuit) -> None:
    """Writing what was read gives the same digest, the same names and the same parts in the same order."""
    once = parse_netlist(write(circuit).text, "x.cir")
    again = write(once)
    twice = parse_netlist(again.text, "x.cir")
    assert digest(twice) == digest(once)
    assert twice.network.names == once.network.names
    assert not again.names.renamed
    assert read_same(again)


@settings(deadline=None, max_examples=100)
@given(circuits(), st.lists(st.text(max_size=200), max_size=3))
def test_every_line_is_short_safe_and_known(circuit: Circuit, comments: list[str]) -> None:
    """Under 80 columns, nothing but ASCII outside comments, no command, `.end` at the end."""
    written = write(circuit, comments)
    assert written.text.endswith("\n.end\n")
    lines = written.text.removesuffix("\n").split("\n")
    for line in lines:
        assert len(line) < 80
        assert line.isprintable()
        assert not line.endswith("\\")
        assert re.match(
            r"\* |\*$|[RCLEGFHVI+]|\.(op|ac|tran|noise|print|save|options|end)\b", line, re.IGNORECASE
        )
        assert line.startswith("*") or line.isascii()
    assert lines[0].startswith("* ")
    names = [name.lower() for name in written.names.parts.values()]
    assert len(set(names)) == len(names)
    # A long name may be broken over lines, and one that breaks behind a backslash shows a slash there.
    said = "".join(
        line.removeprefix("*").replace(" ", "").replace("\\", "/") for line in lines if line[0] == "*"
    )
    for what, old, new in written.names.renamed:
        assert f'{what}{new}is"{old}"'.replace("\\", "/") in said


TITLES = {
    "command comment": "*#shell touch x",
    "command comment, blank": "* #shell touch x",
    "script": "*ng_script",
    "control": ".control",
    "include": ".include /etc/hostname",
    "control behind stars": "**.control",
    "newline": "pump\n.control\nshell touch x\n.endc",
    "carriage return": "pump\r.control",
    "line separator": "pump\u2028.control",
    "long": "level " * 100,
    "long of wide characters": "水" * 600,
    "backslash": "pump \\",
    "escape": "\x1b[31mred\x07",
    "surrogate": "\ud800",
    "empty": "",
    "part": "R1 in out 1k",
}


def filter_circuit(title: str = "Flow meter") -> Circuit:
    """R = 1 kohm into C = 1 uF."""
    network = Network(title)
    network.add_voltage_source("Vin", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    return Circuit(network, output=("out",), analyses=Analyses(ac=Sweep(10.0, 1e4, 10)))


@pytest.mark.parametrize("title", TITLES.values(), ids=TITLES)
def test_a_title_is_one_harmless_comment(title: str) -> None:
    """Whatever the title, the first line is a comment that is no command, and one line only."""
    text = write(filter_circuit(title)).text
    first, rest = text.split("\n", 1)
    assert re.fullmatch(r"\* [^#*. ][^\r\n\x00-\x1f\u2028]{0,76}", first)
    assert rest == write(filter_circuit()).text.split("\n", 1)[1]


@pytest.mark.ngspice
@pytest.mark.parametrize("title", TITLES.values(), ids=TITLES)
def test_no_title_is_obeyed_by_ngspice(ngspice: Callable[..., Any], title: str) -> None:
    """The netlist runs clean, gives the filter's answer, and leaves nothing but its results."""
    circuit = filter_circuit(title)
    for text in (write(circuit).text, deck(write(circuit).circuit, write(circuit).names, "ac")):
        ran = ngspice(text.encode("utf-8", "replace"))
        assert (ran.code, ran.files, ran.trouble) == (0, ("in.cir", "out.raw"), [])
        out = ran.curve("v(out)")
        assert np.allclose(out.values, 1 / (1 + 2e-3j * math.pi * out.axis), rtol=1e-12)


# ------------------------------------------------------------------------------------------ periodic points


def written_points(wave: Waveform, stop: float | None) -> tuple[tuple[float, float], ...]:
    """The pairs of the PWL in the written netlist."""
    network = Network("ramp")
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_resistor("R1", "in", "0", 1.0)
    run = None if stop is None else TransientRun(stop, stop / 100)
    text = write(Circuit(network, analyses=Analyses(transient=run))).text
    numbers = re.search(r"PWL\(([^)]*)\)", text.replace("\n+ ", " "))
    assert numbers is not None
    values = [float(word) for word in numbers[1].split()]
    return tuple(zip(values[::2], values[1::2], strict=True))


PWL = {
    "held": (Points(((0.0, 1.0), (1.0, 2.0))), 5.0, ((0, 1), (1, 2))),
    "late start": (Points(((1.0, 1.0), (2.0, 2.0))), 5.0, ((1, 1), (2, 2))),
    "triangle": (
        Points(((0.0, 0.0), (1.0, 2.0)), 2.0),
        4.0,
        ((0, 0), (1, 2), (2, 0), (3, 2), (4, 0)),
    ),
    "ends on its first value": (
        Points(((0.0, 0.0), (1.0, 2.0), (2.0, 0.0)), 2.0),
        4.0,
        ((0, 0), (1, 2), (2, 0), (3, 2), (4, 0)),
    ),
    "starts late": (
        Points(((1.0, 0.0), (3.0, 4.0)), 4.0),
        4.0,
        # Between 3 s and 5 s the wave falls from 4 to 0; at 4 s, and so at 0 s, it is half-way.
        ((0, 2), (1, 0), (3, 4), (5, 0)),
    ),
    "no transient": (Points(((0.0, 0.0), (1.0, 2.0)), 2.0), None, ((0, 0), (1, 2))),
    "step": (Step(1.0, 2.0, 0.5, 0.25), 1.0, ((0, 1), (0.5, 1), (0.75, 2))),
    "vertical step at once": (Step(1.0, 2.0), 1.0, ((0, 1), (1e-6, 2))),
    "vertical step, no transient": (Step(1.0, 2.0), None, ((0, 1), (1e-6, 2))),
    "edge lost in rounding": (
        Step(1.0, 2.0, 1e12, 1e-9),
        1.0,
        ((0, 1), (1e12, 1), (math.nextafter(1e12, math.inf), 2)),
    ),
    "single point": (Points(((0.0, 3.0),)), 1.0, ((0, 3),)),
}


@pytest.mark.parametrize(("wave", "stop", "expected"), PWL.values(), ids=PWL)
def test_points_are_written_out(
    wave: Waveform, stop: float | None, expected: tuple[tuple[float, float], ...]
) -> None:
    """Standard PWL neither repeats nor takes two values at one time."""
    assert written_points(wave, stop) == expected


def test_a_vertical_end_of_a_period_gets_a_slope() -> None:
    """A sawtooth falls within the last millionth of its period."""
    pairs = written_points(Points(((0.0, 0.0), (1.0, 1.0)), 1.0), 1.0)
    times, values = zip(*pairs, strict=True)
    assert times == pytest.approx((0, 1 - 1e-6, 1), abs=1e-15)
    assert values == pytest.approx((0, 1 - 1e-6, 0), abs=1e-15)


@pytest.mark.parametrize("period", [1e-3, 1e-310], ids=["short", "beyond all counting"])
def test_too_many_repeats_are_refused(period: float) -> None:
    """More points than a simulator should be given are named with what to do."""
    with pytest.raises(CircuitError, match=r"V1: its waveform repeats \d+ times") as caught:
        written_points(Points(((0.0, 0.0), (period / 2, 1.0)), period), 1e6)
    assert "at most 20000 points" in (caught.value.remedy or "")


# ---------------------------------------------------------------------------------- what cannot be written


def test_noise_needs_an_output() -> None:
    """A noise analysis without an output node, or with an absent one, is refused."""
    circuit = replace(filter_circuit(), analyses=Analyses(noise=Sweep(1.0, 10.0, 10)))
    for output in ((), ("nowhere",)):
        with pytest.raises(CircuitError, match="needs an output node"):
            write(replace(circuit, output=output))


def test_noise_needs_a_source_with_ac() -> None:
    """A noise analysis refers to a source, and the source needs an ac value."""
    network = Network("x")
    network.add_voltage_source("Vin", "out", "0", dc=1)
    network.add_resistor("R1", "out", "0", 1e3)
    with pytest.raises(CircuitError, match="needs a source with an ac value"):
        write(Circuit(network, output=("out",), analyses=Analyses(noise=Sweep(1.0, 10.0, 10))))


def test_a_deck_holds_one_analysis_that_was_asked_for() -> None:
    """Another than those asked for is refused."""
    written = write(filter_circuit())
    assert deck(written.circuit, written.names, "ac").count("\n.") == 3  # .options, .ac, .end
    with pytest.raises(CircuitError, match="asks for no transient"):
        deck(written.circuit, written.names, "transient")


def test_an_output_that_is_no_node_is_not_printed() -> None:
    """A circuit written in spite of its errors still is a netlist that can be read."""
    text = write(replace(filter_circuit(), output=("nowhere",))).text
    assert ".print" not in text
    assert parse_netlist(text, "x").output == ("out",)


# ------------------------------------------------------------------------------------------------- ngspice


def solvable(seed: int) -> Network:
    """A connected, well-scaled network of every kind of part, with odd names; any seed, always solvable."""
    rng = np.random.default_rng(seed)
    nodes = [GROUND, *rng.choice([n for n in ODD if n.lower() != "gnd"], size=7, replace=False).tolist()]
    network = Network(f"pump station {seed}")
    network.add_voltage_source("Vin", nodes[1], GROUND, ac=1.5, ac_phase=30, dc=2)
    for k in range(2, len(nodes)):
        network.add_resistor(f"R{k}", nodes[k], nodes[int(rng.integers(k))], float(rng.uniform(500, 5e3)))
        network.add_capacitor(f"C{k}", nodes[k], nodes[int(rng.integers(k))], float(rng.uniform(1e-8, 1e-6)))
    end, *middle = nodes[-1], *nodes[2:5]
    network.add_resistor("Rload", end, GROUND, 2e3)
    network.add_part(Part("L1", "L", (end, "coil"), float(rng.uniform(1e-3, 1e-1))))
    network.add_resistor("Rcoil", "coil", GROUND, 100.0)
    network.add_part(Part("E1", "E", ("e", GROUND, middle[0], middle[1]), float(rng.uniform(-2, 2))))
    network.add_resistor("Re", "e", middle[2], 3e3)
    network.add_part(Part("G1", "G", (middle[1], GROUND, middle[0], GROUND), float(rng.uniform(0, 1e-4))))
    network.add_voltage_source("Vsense", "s", GROUND, dc=0)
    network.add_resistor("Rs", middle[0], "s", 1e3)
    network.add_part(Part("F1", "F", (GROUND, middle[2]), float(rng.uniform(-0.3, 0.3)), "Vsense"))
    network.add_part(Part("H1", "H", ("h", GROUND), float(rng.uniform(-300, 300)), "Vsense"))
    network.add_resistor("Rh", "h", end, 2e3)
    network.add_current_source("Iac", middle[0], GROUND, ac=1e-3, ac_phase=-90, dc=1e-4)
    return network


@pytest.mark.ngspice
@pytest.mark.parametrize("seed", range(30))
def test_ngspice_gives_our_answer_for_a_written_network(ngspice: Callable[..., Any], seed: int) -> None:
    """Run by hand, the netlist is clean; every node's ac response and operating point agree to 1e-9."""
    network = solvable(seed)
    analyses = Analyses(ac=Sweep(10.0, 1e5, 5), operating_point=True)
    written = write(Circuit(network, output=(network.nodes[3],), analyses=analyses))
    ran = ngspice(written.text)
    assert (ran.code, ran.trouble) == (0, [])
    back = read_same(written)
    settled = back.network.operating_point()
    for node in back.network.nodes[1:]:
        curve = ran.curve(f"v({node.lower()})")
        ours = back.network.response(curve.axis, node)
        assert np.abs(ours - curve.values).max() <= 1e-9 * max(np.abs(curve.values).max(), 1e-3)
        rest = ran.curve(f"v({node.lower()})", "operating point").values[0]
        assert settled[node] == pytest.approx(rest, rel=1e-9, abs=1e-9)


@pytest.mark.ngspice
def test_ngspice_runs_all_four_analyses_of_one_netlist(ngspice: Callable[..., Any]) -> None:
    """Operating point, ac, transient and noise come out of one file, with the values of an RC filter."""
    network = filter_circuit().network.with_source(
        Source("Vin", ("in", "0"), ac=1.0, waveform=Step(1.0, 3.0, 1e-3))
    )
    sweep, run = Sweep(10.0, 1e4, 10), TransientRun(6e-3, 1e-5, 0.0, 1e-5)
    text = write(Circuit(network, output=("out",), analyses=Analyses(sweep, run, sweep, True))).text
    ran = ngspice(text)
    assert (ran.code, ran.trouble) == (0, [])
    assert ran.curve("v(out)", "operating point").values[0] == pytest.approx(1, rel=1e-9)
    time = ran.curve("v(out)", "transient")
    expected = np.where(time.axis < 1e-3, 1.0, 3 - 2 * np.exp(-(np.maximum(time.axis - 1e-3, 0)) / 1e-3))
    assert np.abs(time.values - expected).max() < 2e-3
    noise = ran.curve("onoise_spectrum", "noise")
    assert len(noise.axis) == 31
    # Johnson noise 4kTR through 1/(1+jwRC), with the k and T of ngspice 39.
    density = np.sqrt(4 * 1.38064852e-23 * 300.15 * 1e3) / np.sqrt(1 + (2e-3 * np.pi * noise.axis) ** 2)
    assert np.allclose(noise.values, density, rtol=1e-6)


WAVES_RUN = {
    "triangle": Points(((0.0, 0.0), (1e-3, 1.0)), 2e-3),
    "late periodic points": Points(((0.5e-3, 0.0), (1e-3, 1.0)), 2e-3),
    "sawtooth": Points(((0.0, 0.0), (2e-3, 1.0)), 2e-3),
    "points": Points(((1e-3, 0.5), (2e-3, 1.0), (4e-3, -1.0))),
    "step": Step(0.0, 1.0, 3e-3),
    "square": Square(0.0, 1.0, 2e-3, 1e-3),
    "sine": Sine(1.0, 500.0, 0.5, 90.0, 1e-3),
}


def ideal(wave: Waveform, time: float) -> float:
    """The waveform as the circuit file's page defines it, away from vertical edges."""
    if isinstance(wave, Points):
        if wave.period is None:
            return sampled(wave, time)
        turns = [(t + turn * wave.period, v) for turn in (-1, 0, 1) for t, v in wave.values]
        return float(np.interp(time % wave.period, *np.transpose(turns)))
    if isinstance(wave, Step):
        return wave.initial if time <= wave.at else wave.final
    if isinstance(wave, Sine):
        angle = 2 * math.pi * wave.frequency * max(time - wave.delay, 0) + math.radians(wave.phase)
        return wave.offset + wave.amplitude * math.sin(angle)
    return wave.high if time % wave.period < wave.width else wave.low


@pytest.mark.ngspice
@pytest.mark.parametrize("wave", WAVES_RUN.values(), ids=WAVES_RUN)
def test_ngspice_makes_the_waveform_that_was_meant(ngspice: Callable[..., Any], wave: Waveform) -> None:
    """In a transient the source follows the waveform, at every point away from vertical edges."""
    network = Network("level")
    network.add_voltage_source("V1", "in", "0", waveform=wave)
    network.add_resistor("R1", "in", "0", 1e3)
    run = TransientRun(9.5e-3, 1e-5, 0.0, 1e-5)
    ran = ngspice(write(Circuit(network, analyses=Analyses(transient=run))).text)
    assert (ran.code, ran.trouble) == (0, [])
    curve = ran.curve("v(in)", "transient")
    assert curve.axis[-1] == pytest.approx(run.stop)
    away = [time for time in curve.axis if abs(time - round(time / 1e-3) * 1e-3) > 2e-8]
    assert len(away) > 900
    values = dict(zip(curve.axis.tolist(), curve.values.tolist(), strict=True))
    assert all(values[time] == pytest.approx(ideal(wave, time), abs=1e-6) for time in away)
