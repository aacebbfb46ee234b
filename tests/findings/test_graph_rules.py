"""The rules about the graph, about names and about reach: each fires where it should, points at the word, and
leaves sound circuits alone.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

import numpy as np
import pytest

from rcnet.circuit import (
    Analyses,
    Circuit,
    LeftOut,
    Network,
    Part,
    Place,
    Request,
    Source,
    Sweep,
    parse_circuit_file,
)
from rcnet.circuit.topology import blocks, cut_set, influenced, joined, touches
from rcnet.curves import Curves
from rcnet.findings import Finding, findings

RC = ("V1 in 0 AC 1", "R1 in out 1k", "C1 out 0 1u")
UNITS = {"R": 1e3, "C": 1e-6, "L": 1e-3, "E": 1.0, "G": 1e-3, "F": 1.0, "H": 1.0}


def built(parts: Iterable[str], output: str = "out", **more: object) -> Circuit:
    """A circuit whose parts are given as `NAME nodes`; what stands behind the nodes does not count."""
    network = Network("Pump")
    for line in parts:
        name, *words = line.split()
        if name[0] in "VI":
            network.add_source(Source(name, (words[0], words[1]), ac=1.0 if "AC" in words else None))
        else:
            count = 4 if name[0] in "EG" else 2
            senses = words[2] if name[0] in "FH" else None
            network.add_part(Part(name, name[0], tuple(words[:count]), UNITS[name[0]], senses))
    return Circuit(network, "pump", output=tuple(output.split()), **more)  # type: ignore[arg-type]


def told(circuit: Circuit, *codes: str) -> list[Finding]:
    """The findings of some rules."""
    return [finding for finding in findings(circuit) if finding.code in codes]


def one(circuit: Circuit, code: str) -> Finding:
    """The finding of one rule, which must be alone of its kind."""
    (finding,) = told(circuit, code)
    return finding


# ------------------------------------------------------------------------------------------------ no dc path


@dataclass(frozen=True)
class Held:
    """Parts beside an RC filter, and who is said to hold the nodes without a path for dc."""

    parts: tuple[str, ...]
    says: str


HELD = {
    "one node": Held(
        ("C2 out x", "C3 x 0"),
        "node 'x' has no path to ground for dc: only the capacitors C2, C3 lead there.",
    ),
    "one capacitor": Held(
        ("C2 out x", "R2 x y", "R3 x y"),
        "nodes x, y have no path to ground for dc: only the capacitor C2 leads there.",
    ),
    "parts inside are not named": Held(
        ("C2 out x", "R2 x y", "C3 x y", "C4 y 0"),
        "nodes x, y have no path to ground for dc: only the capacitors C2, C4 lead there.",
    ),
    "a current source too": Held(
        ("C2 out x", "G1 x 0 in 0", "I1 x 0"),
        "node 'x' has no path to ground for dc: only the capacitor C2 and the current sources G1, I1 lead "
        "there.",
    ),
}


@pytest.mark.parametrize("held", HELD.values(), ids=HELD)
def test_what_hangs_on_capacitors_is_told_with_those_capacitors(held: Held) -> None:
    """The message names the cut-set: exactly the parts that join the nodes to the rest."""
    assert one(built((*RC, *held.parts)), "no-dc-path").message == held.says


def test_the_cut_set_is_the_parts_with_one_end_inside() -> None:
    """By definition: one end among the nodes, one not; sensing does not count."""
    network = built((*RC, "R2 out x", "R3 x y", "C3 y 0", "E1 z 0 x 0", "R4 z x")).network
    assert cut_set(network, ["x", "y"]) == ("R2", "C3", "R4")
    assert cut_set(network, ["in", "out", "x", "y", "z"]) == ("V1", "C1", "C3", "E1")


# ------------------------------------------------------------------------------------------------ look-alike


@dataclass(frozen=True)
class Looks:
    """Parts beside an RC filter, and what is said of the node that looks like another one."""

    parts: tuple[str, ...]
    says: str
    severity: str


SECOND = ("R2 out n1", "C2 n1 0", "R3 n1 x", "C3 x 0")
LOOKS = {
    "zero for o": Looks(("R2 in 0ut", "C2 0ut 0"), "node '0ut' looks like node 'out'", "note"),
    "alone with it": Looks(("R2 in 0ut",), "node '0ut' looks like node 'out'", "warning"),
    "l for one": Looks((*SECOND, "R4 nl in", "R5 nl 0"), "node 'nl' looks like node 'n1'", "note"),
    "I for one": Looks((*SECOND, "R4 nI in"), "node 'nI' looks like node 'n1'", "warning"),
    "underscore behind": Looks(("R2 out_ in",), "node 'out_' looks like node 'out'", "warning"),
    "underscore between": Looks((*SECOND, "R4 n_1 in"), "node 'n_1' looks like node 'n1'", "warning"),
    "other separators": Looks(
        ("R2 out a_b", "C2 a_b 0", "R3 a_b x", "C3 x 0", "R4 a-b in"),
        "node 'a-b' looks like node 'a_b'",
        "warning",
    ),
    "O for ground": Looks(("R2 out O", "R3 O in"), "node 'O' looks like ground", "warning"),
}


@pytest.mark.parametrize("case", LOOKS.values(), ids=LOOKS)
def test_nodes_that_look_alike(case: Looks) -> None:
    """A note, and a warning where a single part is there or ground is meant; it does not dangle as well."""
    finding = one(built((*RC, *case.parts)), "look-alike")
    assert finding.message.startswith(case.says)
    assert finding.severity == case.severity
    assert told(built((*RC, *case.parts)), "dangling") == []


UNLIKE = {
    "numbers": tuple(f"R{k} n{k} n{k + 1}" for k in range(10, 120)),
    "a mesh": tuple(f"R{i}_{j} n{i}_{j} n{i}_{j + 1}" for i in range(1, 13) for j in range(1, 13)),
    "both in use": ("R2 out n1", "R3 n1 x", "C2 n1 0", "R4 out nl", "R5 nl x", "C3 nl 0"),
    "plus and minus": ("R2 in+ in", "R3 in- in", "R4 in+ in-", "R5 in+ 0", "R6 in- 0"),
    "capitals alone": ("R2 OUT in", "R3 OUT 0"),
}


@pytest.mark.parametrize("parts", UNLIKE.values(), ids=UNLIKE)
def test_names_that_are_meant_as_they_are(parts: tuple[str, ...]) -> None:
    """Rows of numbers, two nodes both in use, differential pairs: no finding."""
    assert told(built((*RC, *parts)), "look-alike") == []


def test_a_node_that_is_looked_at_is_not_suspect() -> None:
    """The output may have a single part without being a slip of the pen."""
    assert one(built((*RC, "R2 in 0ut"), "0ut"), "look-alike").severity == "note"


@pytest.mark.ngspice
def test_ngspice_says_nothing_of_a_node_that_looks_alike(ngspice: Callable[[str], Curves]) -> None:
    """With `0ut` for `out` the load is not on the output: 1 V instead of 0.5 V, exit code 0."""
    curves = ngspice("* t\nV1 in 0 1\nR1 in out 1k\nR2 0ut 0 1k\nR3 in 0ut 1\n.op\n.end\n")
    (curve,) = [curve for curve in curves if curve.name == "v(out)"]
    assert curve.values[0] == pytest.approx(1.0)


# ------------------------------------------------------------------------------------------------ loose parts


@dataclass(frozen=True)
class Loose:
    """Parts beside an RC filter, and what is said of the loose ones."""

    parts: tuple[str, ...]
    says: str
    severity: str = "note"


LOOSE = {
    "no source": Loose(("R2 x 0", "C2 x 0"), "no source reaches R2, C2, so nothing ever happens there."),
    "a source that gives nothing": Loose(
        ("V2 x 0", "R2 x y", "C2 y 0"), "no source reaches V2, R2, C2, so nothing ever happens there."
    ),
    "only its output is sensed": Loose(
        ("R2 x 0", "C2 x 0", "E1 y 0 x 0", "R3 y out"),
        "no source reaches R2, C2, so nothing ever happens there.",
    ),
    "a circuit of its own": Loose(
        ("V2 x 0 AC", "R2 x y", "C2 y 0"), "V2, R2, C2 are not connected to what is looked at."
    ),
}


@pytest.mark.parametrize("case", LOOSE.values(), ids=LOOSE)
def test_loose_parts(case: Loose) -> None:
    """What no source reaches, and what has nothing to do with the output."""
    finding = one(built((*RC, *case.parts)), "loose-part")
    assert (finding.message, finding.severity) == (case.says, case.severity)


def test_an_output_that_no_source_reaches_is_a_warning() -> None:
    """The filter is cut through: what is read at its end is zero."""
    finding = one(built(("V1 in 0 AC", "R1 in 0", "R2 a out", "C1 out 0", "R3 a 0")), "loose-part")
    assert finding.message == "no source reaches R2, C1, R3, so nothing arrives at 'out'."
    assert finding.severity == "warning"


NOT_LOOSE = {
    "a buffer beside the output": ("E1 y 0 out 0", "R2 y 0", "C2 y 0"),
    "driven by a current that is sensed": ("F1 y 0 V1", "R2 y 0", "C2 y 0", "E1 z 0 y 0", "R3 z out"),
    "loads on the source": ("R2 in 0", "C2 in 0"),
    "what floats is another rule's": ("R2 x y", "C2 x y"),
    "one part is another rule's": ("R2 x 0",),
}


@pytest.mark.parametrize("parts", NOT_LOOSE.values(), ids=NOT_LOOSE)
def test_what_is_not_loose(parts: tuple[str, ...]) -> None:
    """Controlled sources lead on; a buffer that nobody reads is still part of the circuit."""
    assert told(built((*RC, *parts)), "loose-part") == []


def test_without_an_output_everything_is_looked_at() -> None:
    """Then only what no source reaches is loose."""
    apart = (*RC, "V2 x 0 AC", "R2 x y", "C2 y 0")
    assert told(built(apart, ""), "loose-part") == []
    assert told(built((*RC, "R2 x 0", "C2 x 0"), ""), "loose-part") != []


def test_noise_needs_no_source() -> None:
    """A resistor makes noise by itself: a network without a source that leads to the output is not loose."""
    parts = ("V1 in 0 AC", "R1 in 0", "R2 out 0", "C2 out 0")
    noise = Analyses(noise=Sweep(1.0, 1e3, 10))
    assert "nothing arrives" in one(built(parts), "loose-part").message
    assert one(built(parts, analyses=noise), "loose-part").message == (
        "V1, R1 are not connected to what is looked at."
    )


def test_what_is_swept_and_what_is_left_out_count() -> None:
    """A source that `.dc` sweeps drives its block; a diode that was left out joins the nodes it touches."""
    circuit = built((*RC, "V2 x 0", "R2 x y", "R3 y 0"), "")
    assert told(circuit, "loose-part") != []
    swept = replace(circuit, requests=(Request(".dc", "V2 0 5 0.1", Place("a.cir", 3)),))
    assert told(swept, "loose-part") == []
    diode = replace(circuit, left_out=(LeftOut("D1", "a diode", ("out", "x"), Place("a.cir", 4)),))
    assert told(diode, "loose-part") == []


NETLIST = (".print ac v(out)", ".plot ac", "+ v(other)", ".end")


@pytest.mark.parametrize(
    ("lines", "loose"),
    [(NETLIST[:1], True), (NETLIST, False), ((), False), ((".save all",), False), (NETLIST[1:], False)],
    ids=["first print only", "every print counts", "nothing printed", "all saved", "continued"],
)
def test_a_netlist_looks_at_whatever_it_prints(lines: tuple[str, ...], loose: bool) -> None:
    """The output is the first voltage printed; the others are looked at too."""
    circuit = built((*RC, "V2 x 0 AC", "R2 x other", "C2 other 0"), origin="netlist", lines=("* t", *lines))
    assert bool(told(circuit, "loose-part")) is loose


# -------------------------------------------------------------------------------------------- graph questions


def test_touches_counts_parts_and_not_ends() -> None:
    """A part with both ends on a node, or that senses where it drives, touches it once."""
    network = built(("V1 in 0 AC", "R1 in in", "E1 x 0 x in", "R2 x 0")).network
    count, last = touches(network)
    assert dict(zip(network.nodes, count.tolist(), strict=True)) == {"0": 3, "in": 3, "x": 2}
    assert [network.names[row] for row in last] == ["R2", "E1", "R2"]


@pytest.mark.parametrize("many", [100, 30_000], ids=["few", "many"])
def test_joined_finds_the_components(many: int) -> None:
    """By both methods: a chain cut in two, and nodes alone."""
    a = np.arange(many)
    a = a[a != many // 2]
    label = joined(many + 3, a, a + 1)
    assert len(set(label[: many // 2 + 1])) == len(set(label[many // 2 + 1 : many + 1])) == 1
    assert len(set(label.tolist())) == 4


def test_coupled_inductors_join_and_controlled_sources_lead_one_way() -> None:
    """A transformer's two sides are one block; what E senses changes what it drives, and not the reverse."""
    circuit = built((*RC, "L1 out 0", "L2 x 0", "R2 x 0", "E1 y 0 x 0", "R3 y 0"))
    network = circuit.network
    network.add_coupling("K1", "L1", "L2", 0.5)
    label = blocks(network)
    index = network.node_index
    assert label[index("x")] == label[index("in")] != label[index("y")]
    on, back, both = (
        influenced(network, label, [index(node)], way)
        for node, way in (("out", "on"), ("out", "back"), ("y", "both"))
    )
    assert [on[index(node)] for node in ("in", "x", "y", "0")] == [True, True, True, False]
    assert not back[index("y")]
    assert both[index("in")]


# ------------------------------------------------------------------------------------------- many, and where


MANY = {
    "dangling": "nodes are touched by one part alone",
    "floating": "groups of nodes have no connection to ground",
    "no-dc-path": "groups of nodes have no path to ground for dc",
    "one-node-part": "parts have both ends on one node",
    "case-only": "names of nodes differ from another one only in case",
    "look-alike": "nodes look like another one",
    "loose-part": "groups of parts are reached by no source or not connected to what is looked at",
    "voltage-loop": None,
    "ground-lookalike": "nodes are called like ground and are not",
}
FLOODS: dict[str, Callable[[int], tuple[str, ...]]] = {
    "dangling": lambda k: (f"R{k}a out x{k}",),
    "floating": lambda k: (f"R{k}a x{k} y{k}", f"R{k}b x{k} y{k}"),
    "no-dc-path": lambda k: (f"C{k}a out x{k}", f"C{k}b x{k} 0"),
    "one-node-part": lambda k: (f"R{k}a out out",),
    "case-only": lambda k: (f"R{k}a x{k} out", f"R{k}b x{k} 0", f"R{k}c X{k} 0", f"R{k}d X{k} out"),
    "look-alike": lambda k: (f"R{k}a x{k} out", f"R{k}b x{k} 0", f"R{k}c x_{k} 0", f"R{k}d x_{k} out"),
    "loose-part": lambda k: (f"R{k}a x{k} 0", f"C{k}b x{k} 0"),
    "voltage-loop": lambda k: (f"V{k}a in 0",),
    "ground-lookalike": lambda k: (f"R{k}a {'0' * (k + 2)} 0", f"R{k}b {'0' * (k + 2)} out"),
}


@pytest.mark.parametrize("code", FLOODS)
def test_no_rule_floods(code: str) -> None:
    """Of fifty cases twenty are told one by one; the last remark says how many more there are."""
    found = told(built([*RC, *(line for k in range(50) for line in FLOODS[code](k))]), code)
    assert len(found) == 20
    if MANY[code]:
        assert [finding.message for finding in found][-1] == f"31 more {MANY[code]}."


FILE = """output = "out"
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
R2 = "out uot 1k"
C2 = "out x 1n"
C3 = "x 0 1n"
R3 = "same same 1k"
R4 = "same 0ut 1k"
R5 = "0ut 0 1k"
R6 = "in same 1k"
R7 = "0.0 in 1k"
R8 = "0.0 out 1k"
[sources.Vin]
nodes = "in 0"
ac = 1
"""
POINTED = {
    "dangling": (5, "uot"),
    "no-dc-path": (6, "x"),
    "one-node-part": (8, "same"),
    "look-alike": (10, "0ut"),
    "ground-lookalike": (12, "0.0"),
}


@pytest.mark.parametrize("code", POINTED)
def test_a_finding_points_at_the_word(code: str) -> None:
    """Line, column and width of the node's name in the circuit file."""
    finding = one(parse_circuit_file(FILE, "a.rc.toml"), code)
    line, word = POINTED[code]
    assert finding.line == line
    assert finding.column is not None
    assert finding.text[finding.column - 1 :][: finding.width] == word


def test_two_hundred_thousand_parts_take_no_time() -> None:
    """Every rule together looks at a ladder of 200 000 parts in seconds."""
    count = 100_000
    network = Network("Long pipe")
    network.add_voltage_source("Vin", "n0", "0", ac=1)
    here, there = [f"n{k}" for k in range(count)], [f"n{k + 1}" for k in range(count)]
    network.add_resistors([f"R{k}" for k in range(count)], here, there, np.full(count, 1e3))
    network.add_capacitors([f"C{k}" for k in range(count)], there, ["0"] * count, np.full(count, 1e-9))
    circuit = Circuit(network, output=(f"n{count}",), analyses=Analyses(ac=Sweep(1.0, 1e3, 10)))
    findings(Circuit(network.copy()))  # loads what it needs
    began = time.process_time()
    assert findings(circuit) == ()
    assert time.process_time() - began < 5


# ------------------------------------------------------------------------------------------ couplings


def test_windings_that_contradict_one_another() -> None:
    """Three windings whose coefficients allow a stored energy below zero; two of 0.9 and one of 0.7 do not.

    The matrix of the coefficients has to be positive semidefinite: 1 + 2abc - a^2 - b^2 - c^2 >= 0.
    """
    windings = ("V1 in 0 AC 1", "R1 in a", "L1 a 0", "L2 b 0", "R2 b 0", "L3 out 0", "R3 out 0")
    for third, fires in ((0.7, False), (-0.9, True)):
        made = built(windings)
        for name, pair, k in (("K1", "L1 L2", 0.9), ("K2", "L2 L3", 0.9), ("K3", "L1 L3", third)):
            made.network.add_coupling(name, *pair.split(), k)
        assert (1 + 2 * 0.81 * third - 2 * 0.81 - third**2 < 0) == fires
        assert bool(told(made, "contradictory-couplings")) == fires
