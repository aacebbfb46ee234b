"""Names in a written netlist: safe, unique without regard to case, kept where they are safe."""

from __future__ import annotations

import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.circuit import Network
from rcnet.netlist import folded, safe_names
from rcnet.netlist.names import MAX_NAME

# Printable, no blanks: what a network takes.
ANY_NAME = st.text(
    st.characters(exclude_categories=("C", "Z")) | st.sampled_from("AaBb01._-"), min_size=1, max_size=60
).filter(lambda name: name.isprintable() and name.lower() not in ("gnd", "0"))


def network(nodes: list[str], parts: list[str] | None = None) -> Network:
    """Resistors from each node to ground."""
    made = Network("level gauge")
    names = parts or [f"R{number}" for number in range(len(nodes))]
    for name, node in zip(names, nodes, strict=True):
        made.add_resistor(name, node, "0", 1.0)
    return made


NODES = {
    "plain": ("out", "out"),
    "digits": ("12", "12"),
    "dot": ("x.1", "x.1"),
    "value-like": ("1k", "1k"),
    "micro": ("µ1", "n__1"),
    "accent": ("né", "n_"),
    "sign": ("in+", "in_"),
    "hash": ("v1#branch", "v1_branch"),
    "two zeros": ("00", "n_00"),
    "zero point zero": ("0.0", "n_0.0"),
    "time": ("Time", "n_Time"),
    "frequency": ("frequency", "n_frequency"),
    "gnd!": ("gnd!", "gnd_"),
    "ground": ("GROUND", "n_GROUND"),
    "drive word": ("dc", "n_dc"),
    "expression word": ("POLY", "n_POLY"),
    "leading underscore": ("_a", "n__a"),
    "dollar": ("$a", "n__a"),
    "braces": ("{a}", "n__a_"),
    "Chinese": ("水", "n__"),
}


@pytest.mark.parametrize(("node", "expected"), NODES.values(), ids=NODES)
def test_a_node_gets_a_safe_name(node: str, expected: str) -> None:
    """Letters, digits, `_` and `.` stay; words of a simulator and what looks like ground are prefixed."""
    assert safe_names(network([node])).nodes[node] == expected


def test_names_that_are_safe_keep_themselves_whatever_comes_first() -> None:
    """An unsafe name makes way for a safe one, also where it is mentioned earlier."""
    names = safe_names(network(["a+", "a_", "a-"])).nodes
    assert names["a_"] == "a_"
    assert len({name.lower() for name in names.values()}) == 4


def test_case_only_differences_get_numbers() -> None:
    """SPICE ignores case, so the second spelling gets another name."""
    names = safe_names(network(["out", "OUT", "Out"], ["R1", "r1", "R1_2"]))
    assert names.nodes["out"] == "out"
    assert len({name.lower() for name in names.nodes.values()}) == 4
    assert names.parts["R1"] == "R1"
    assert names.parts["R1_2"] == "R1_2"
    assert names.parts["r1"].lower() not in ("r1", "r1_2")


def test_renamed_lists_what_differs() -> None:
    """Every renaming, and nothing else, is listed for the netlist's comments."""
    assert safe_names(network(["in", "µ"], ["R1", "R-2"])).renamed == [
        ("node", "µ", "n__"),
        ("part", "R-2", "R_2"),
    ]


@settings(deadline=None, max_examples=150)
@given(st.lists(ANY_NAME, min_size=1, max_size=12, unique=True), st.lists(ANY_NAME, max_size=12, unique=True))
def test_any_names_come_out_safe_and_unique(nodes: list[str], tails: list[str]) -> None:
    """Whatever the names: ASCII, bounded, unique without regard to case, the part's letter first."""
    made = network(nodes)
    for tail in tails:
        made.add_capacitor(f"C{tail}", nodes[0], "0", 1.0)
    names = safe_names(made)
    for table, pattern in ((names.nodes, r"[A-Za-z0-9][A-Za-z0-9_.]*"), (names.parts, r"[RC]\w*")):
        given_names = list(table.values())
        assert all(re.fullmatch(pattern, name, re.ASCII) and len(name) <= MAX_NAME for name in given_names)
        assert len({name.lower() for name in given_names}) == len(given_names)
    assert names.nodes["0"] == "0"


def test_many_names_with_one_stem_take_no_time() -> None:
    """Thirty thousand nodes that all become `_` are numbered without a search through all numbers each."""
    nodes = [chr(0x4E00 + k % 20000) + chr(0x4E00 + k // 20000) for k in range(30_000)]
    assert len(set(safe_names(network(nodes)).nodes.values())) == 30_001


FOLDED = {"É": "__", "né": "n__", "nü": "n__", "µ1": "u1", "μ1": "__1", "OUT": "out", "a-b": "a-b"}


@pytest.mark.ngspice
@pytest.mark.parametrize(("node", "expected"), FOLDED.items(), ids=FOLDED)
def test_names_fold_as_ngspice_folds_them(ngspice, node: str, expected: str) -> None:  # type: ignore[no-untyped-def]
    """The name ngspice gives a node in its results is the folded one."""
    assert folded(node) == expected
    ran = ngspice(f"* t\nV1 {node} 0 DC 0 AC 1\nR1 {node} 0 1k\n.options noopac\n.ac lin 1 1 1\n.end\n")
    assert ran.curve(f"v({expected})").values[0] == 1


# Names that could mean something else to a simulator's results, command language or element lines.
TEMPTING = ["e", "i", "pi", "c", "yes", "v", "all1", "none", "temp", "hertz", "x1.y", "a.b.c", "V1", "r1"]
TEMPTING += ["not", "and", "gt", "end", "0x", "1e3", "error", "Warning", "n_time", "model", "time1", "m.1"]


@pytest.mark.ngspice
@pytest.mark.parametrize("node", TEMPTING)
def test_a_name_that_is_kept_is_harmless_in_ngspice(ngspice, node: str) -> None:  # type: ignore[no-untyped-def]
    """A divider whose middle bears the name gives one half there."""
    assert safe_names(network([node])).nodes[node] == node
    ran = ngspice(
        f"* t\nVs top 0 DC 0 AC 1\nRa top {node} 1k\nRb {node} 0 1k\n.options noopac\n"
        f".ac lin 1 1 1\n.print ac v({node})\n.end\n"
    )
    assert ran.code == 0
    assert ran.curve(f"v({node.lower()})").values[0] == pytest.approx(0.5, rel=1e-12)
