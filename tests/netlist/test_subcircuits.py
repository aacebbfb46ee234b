"""Subcircuits: put in place as ngspice does, with its names; every way in which they cannot be is told."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from beside_ngspice import AC, OP, both

from rcnet.circuit import Circuit
from rcnet.errors import CircuitError
from rcnet.netlist import parse_netlist

V = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1k\n"
CELL = ".subckt cell a b r=1k c=1u\nR1 a mid {r}\nC1 mid b {c}\n.ends\n"


def read(body: str) -> Circuit:
    """A netlist with a title line above the body."""
    return parse_netlist("* gauge\n" + body, "gauge.cir")


# ---------------------------------------------------------------------- as ngspice has them

# Body behind a source and 1 kohm from `in` to `out`; ngspice gives the voltage of every node, inner ones too.
SAME: dict[str, str] = {
    "once": CELL + "X1 out 0 cell\n",
    "defined behind its use": "X1 out 0 cell\n" + CELL,
    "twice": CELL + "X1 out 0 cell\nX2 out 0 cell\n",
    "on one node": CELL + "X1 out out cell\nX2 out 0 cell\n",
    "number given": CELL + "X1 out 0 cell r=2k\n",
    "both given": CELL + "X1 out 0 cell c=10n r=2k\n",
    "blanks about the sign": CELL + "X1 out 0 cell r = 2k c= 10n\n",
    "expression given": CELL + ".param q=3k\nX1 out 0 cell r={q*2}\n",
    "quoted expression given": CELL + ".param q=3k\nX1 out 0 cell r='q/2 + 1k'\n",
    "bare name given": CELL + ".param q=3k\nX1 out 0 cell r=q\n",
    "the same name given": CELL + ".param r=3k\nX1 out 0 cell r={r}\nX2 out 0 cell r={r*2}\n",
    "params: on both": CELL.replace("r=1k", "params: r=1k") + "X1 out 0 cell params: r=2k\n",
    "given twice": CELL + "X1 out 0 cell r=2k r=5k\n",
    "default in an expression": ".subckt s a b r=1k q={2*r}\nR1 a b {q}\nC1 a b 1u\n.ends\nX1 out 0 s r=2k\n",
    "default behind its use": ".subckt s a b q={2*r} r=1k\nR1 a b {q}\nC1 a b 1u\n.ends\nX1 out 0 s\n"
    "X2 out 0 s r=3k\n",
    "default of the same name": ".param r=3k\n.subckt s a b r={r}\nR1 a b {r}\nC1 a b 1u\n.ends\n"
    "X1 out 0 s\n",
    "default of a global": ".subckt s a b q={g}\nR1 a b {q}\nC1 a b 1u\n.ends\nX1 out 0 s\n.param g=4k\n",
    "global seen inside": ".param g=2k\n.subckt s a b\nR1 a b {g}\nC1 a b 1u\n.ends\nX1 out 0 s\n",
    "local shadows a global": ".param g=2k\n.subckt s a b\n.param g=5k\nR1 a b {g}\n.ends\nX1 out 0 s\n"
    "R9 out 0 {g}\n",
    "local of its own name": ".param g=2k\n.subckt s a b\n.param g={g*3}\nR1 a b {g}\n.ends\nX1 out 0 s\n",
    "local from an argument": ".subckt s a b r=1k\n.param q={2*r}\nR1 a b {q}\n.ends\nX1 out 0 s\n"
    "X2 out 0 s r=7k\n",
    "local behind its use": ".subckt s a b\nR1 a b {q}\n.param q={z*2} z=2k\n.ends\nX1 out 0 s\n",
    "local overridden": ".subckt s a b\n.param q=2k\nR1 a b {q}\n.ends\nX1 out 0 s q=9k\n",
    "the caller's parameter": (
        ".subckt s a b\nR1 a b {z}\n.ends\n.subckt t a b z=9k\nX1 a b s\n.ends\nX1 out 0 t z=3k\n"
    ),
    "three deep": (
        CELL + ".subckt pair a b r=1k\nX1 a m cell r={r*3}\nX2 m b cell r=2k\n.ends\n"
        ".subckt four a b\nX1 a x pair\nXb x b pair r=5k\n.ends\nX9 out 0 four\n"
    ),
    "defined inside": ".subckt t a b\n.subckt s a b\nR1 a b 4k\n.ends s\nX1 a b s\nC1 a b 1u\n.ends t\n"
    "X1 out 0 t\n",
    "inner shadows outer": (
        ".subckt s a b\nR1 a b 1k\n.ends\n.subckt t a b\n.subckt s a b\nR1 a b 4k\n.ends s\nX1 a b s\n.ends\n"
        "X1 out 0 t\nX2 out 0 s\n"
    ),
    "times three": CELL + "X1 out 0 cell m=3\n",
    "times an expression": CELL + ".param n=2\nX1 out 0 cell m={n+1} r=2k\n",
    "times, all kinds": (
        ".subckt s a b\nR1 a c 1k\nC1 a b 1u\nL1 c b 1m\nG1 a b a b 1m\nE1 e b a b 0.5\nR2 e a 3k\n"
        "I1 a b AC 1m\nV2 f b AC 2\nR3 f a 5k\n.ends\nX1 out 0 s m=4\n"
    ),
    "m as a parameter": ".subckt s a b m=3\nR1 a b {1k*m}\nC1 a b 1u\n.ends\nX1 out 0 s m=2\n",
    "ground inside": ".subckt s a\nR1 a gnd 1k\nC1 a 0 1u\n.ends\nX1 out s\n",
    "lookalikes of ground inside": ".subckt s a\nR1 a gnd! 1k\nC1 gnd! 0 1u\n.ends\nX1 out s\n",
    "port called 0": ".subckt s a 0\nR1 a 0 1k\nC1 a 0 1u\n.ends\nX1 out in s\n",
    "global node": ".global rail\nR5 rail 0 1k\n.subckt s a b\nR1 a rail 1k\nC1 a b 1u\n.ends\nX1 out 0 s\n",
    "global named later": ".subckt s a b\nR1 a rail 1k\nC1 a b 1u\n.ends\nX1 out 0 s\nR5 rail 0 1k\n"
    ".global rail\n",
    "global before port": ".global a\nR5 a 0 1k\n.subckt s a b\nR1 a b 1k\nC1 a b 1u\n.ends\n"
    "X1 out 0 s\nR6 out 0 1k\n",
    "inner node called like an outer": ".subckt s a b\nR1 a in 1k\nR2 in b 1k\n.ends\nX1 out 0 s\n",
    "inner node by its path": CELL + "X1 out 0 cell\nR9 x1.mid 0 1k\n",
    "no ports": ".subckt s\nR1 0 q 1k\nV1 q 0 AC 1\n.ends\nX1 s\nR2 out 0 1k\n",
    "senses its own source": ".subckt s a b\nV1 a c 0\nR1 c b 1k\nF1 a b V1 2\nH1 d b V1 500\n"
    "R2 d a 1k\n.ends\nX1 out 0 s\n",
    "coupled inside": ".subckt s a b\nL1 a b 1m\nL2 c b 1m\nK1 L1 L2 0.9\nR2 c b 1\n.ends\nX1 out 0 s\n"
    "X2 out 0 s\n",
    "capitals": CELL.upper().replace("=1K", "=1k").replace("=1U", "=1u") + "x1 OUT 0 Cell R=2k\n",
    "name with a dot and digits": ".subckt rc-1.5k a b\nR1 a b 1k\n.ends\nX1 out 0 rc-1.5k\n",
    "instance name with a dot": CELL + "X.1 out 0 cell\n",
    "name of a parameter": ".subckt r a b r=2k\nR1 a b {r}\n.ends\nX1 out 0 r\n",
    "macro": ".macro s a b\nR1 a b 1k\nC1 a b 1u\n.eom\nX1 out 0 s\n",
    "another name behind .ends": CELL.replace(".ends", ".ends other") + "X1 out 0 cell\n",
    "continued": ".subckt s a\n+ b\n+ r=1k\nR1 a b {r}\n.ends\nX1 out\n+ 0 s\n+ r=3k\n",
    "brackets and commas": CELL + "X1 (out, 0) cell r=3k\n",
    "function inside": ".subckt s a b\n.func f(x) {x*2}\nR1 a b {f(1k)}\n.ends\n.func f(x) {x*5}\n"
    "X1 out 0 s\nR9 out 0 {f(1k)}\n",
    "function from outside": ".func f(x) {x*k}\n.param k=3\n.subckt s a b k=5\nR1 a b {f(1k)}\n.ends\n"
    "X1 out 0 s\n",
    "model inside": (
        ".model rm r(r=7k)\n.subckt s a b t=1\n.model rm r(r={2k*t})\nR1 a b rm\n.ends\nX1 out 0 s t=2\n"
        "X2 out 0 s t=3\nR2 out 0 rm\n"
    ),
    "includes in its middle": ".subckt s a b\nR1 a m 1k\nC1 m b 1u\n.end\n.ends\nX1 out 0 s\n",
    "unused one with a mistake in a value": ".subckt s a b\nR1 a b {nope}\n.ends\nR2 out 0 1k\n",
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", SAME)
def test_the_answer_is_that_of_ngspice(tmp_path: Path, name: str) -> None:
    """The voltages of all nodes, by the names that ngspice gives them."""
    both(tmp_path, V + SAME[name] + AC).require_same()


REFUSED_BY_BOTH: dict[str, tuple[str, str, str]] = {
    "too few nodes": (CELL + "X1 out cell\n", "X1 connects 1 node, but .* 'cell' has 2 ports", "pin-count"),
    "too many nodes": (CELL + "X1 out 0 0 cell\n", "X1 connects 3 nodes, but .* has 2", "pin-count"),
    "unknown": (CELL + "X1 out 0 cel\n", "there is no subcircuit 'cel' here", "subcircuit-unknown"),
    "seen only inside": (
        ".subckt t a b\n.subckt s a b\nR1 a b 4k\n.ends s\nX1 a b s\n.ends\nX1 out 0 s\n",
        "there is no subcircuit 's' here",
        "subcircuit-unknown",
    ),
    "itself": (".subckt s a b\nX1 a b s\n.ends\nX1 out 0 s\n", "'s' contains itself", "subcircuit-recursion"),
    "one another": (
        ".subckt s a b\nX1 a b t\n.ends\n.subckt t a b\nX1 a b s\n.ends\nX1 out 0 s\n",
        "contains itself",
        "subcircuit-recursion",
    ),
    "never closed": (".subckt s a b\nR1 a b 1k\n", "'s' is never closed", "subcircuit-open"),
    "closed by .eom": (".subckt s a b\nR1 a b 1k\n.eom\nX1 out 0 s\n", "does not close", "unreadable"),
    "macro with parameters": (
        ".macro s a b r=1k\nR1 a b {r}\n.eom\nX1 out 0 s\n",
        "takes no parameters",
        "unreadable",
    ),
    "parameter of nobody": (
        CELL + "X1 out 0 cell r={nope}\n",
        "'nope' is not defined",
        "parameter-undefined",
    ),
    "value of nobody": (
        ".subckt s a b\nR1 a b {r}\n.ends\nX1 out 0 s r=2k\n",
        "'r' is not defined",
        "parameter-undefined",
    ),
    "parameters in a circle": (
        ".subckt s a b p={q} q={p}\nR1 a b {p}\n.ends\nX1 out 0 s\n",
        "is defined by itself, by way of",
        "parameter-cycle",
    ),
    "its model outside": (
        ".subckt s a b\n.model rm r(r=1k)\nR1 a b rm\n.ends\nX1 out 0 s\nR2 out 0 rm\n",
        "'rm' is neither a number nor a parameter nor a model",
        "model-unknown",
    ),
    "its function outside": (
        ".subckt s a b\n.func f(x) {x}\nR1 a b {f(1k)}\n.ends\nX1 out 0 s\nR2 out 0 {f(1k)}\n",
        "'f' is no function",
        "",
    ),
    "a source outside": (
        "V2 out z 0\nR2 z 0 1k\n.subckt s a b\nF1 a b V2 1\n.ends\nX1 out 0 s\n",
        "F.X1.F1 senses the current of 'V.X1.V2'",
        "",
    ),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", REFUSED_BY_BOTH)
def test_what_ngspice_refuses_is_refused(tmp_path: Path, name: str) -> None:
    """With a message that names the trouble, and the name of the rule that is broken."""
    body, says, code = REFUSED_BY_BOTH[name]
    pair = both(tmp_path, V + body + OP)
    pair.require_refused_by_both()
    assert re.search(says, pair.refusal), pair.refusal
    assert isinstance(pair.read, CircuitError)
    assert (pair.read.problems[0].code or "") == code


# Body, words of the refusal, and what ngspice makes of it: the resistance between `q` and ground, in ohms.
# It differs from what is written, or depends on the order in which things are written.
CELL_OF_ONE = ".subckt s a b\nR1 a b 1k\n.ends\n"
MISLEADING: dict[str, tuple[str, str, float]] = {
    "times two of times three": (
        CELL_OF_ONE + ".subckt t a b\nX1 a b s m=2\n.ends\nX1 q 0 t m=3\n",
        "X1 stands inside a subcircuit that is multiplied",
        1000 / 3,
    ),
    "times one of times three": (
        CELL_OF_ONE + ".subckt t a b\nX1 a b s m=3\n.ends\nX1 q 0 t m=1\n",
        "X1 stands inside a subcircuit that is multiplied",
        1000,
    ),
    "part of its own number": (
        ".subckt s a b\nR1 a b 1k m=2\n.ends\nX1 q 0 s m=3\n",
        "R1 has m= inside a subcircuit that has m= as well",
        1000 / 3,
    ),
    "sensed current multiplied": (
        ".subckt s a b\nV1 a c 0\nR1 c b 1k\nF1 a b V1 2\n.ends\nX1 q 0 s m=3\n",
        "F1 senses a current inside a subcircuit that is multiplied",
        1000 / 21,
    ),
    "given by the name of another": (
        ".param q=7k\n.subckt s a b q=2k r=1k\nR1 a b {r}\n.ends\nX1 q 0 s r={q}\n",
        "'q' is one number here and another inside 's'",
        2000,
    ),
    "given by the names of one another": (
        ".param q=7k r=3k\n.subckt s a b q=2k r=1k\nR1 a b {r}\n.ends\nX1 q 0 s r={q} q={r}\n",
        "'q' is one number here and another inside 's'",
        3000,
    ),
    "given by the names of one another, defined the other way round": (
        ".param q=7k r=3k\n.subckt s a b r=1k q=2k\nR1 a b {r}\n.ends\nX1 q 0 s r={q} q={r}\n",
        "'q' is one number here and another inside 's'",
        7000,
    ),
    "times the name of a parameter inside": (
        ".param n=2\n.subckt s a b n=4\nR1 a b 1k\n.ends\nX1 q 0 s m={n}\n",
        "'n' is one number here and another inside 's'",
        250,
    ),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", MISLEADING)
def test_what_ngspice_reads_otherwise_is_refused(tmp_path: Path, name: str) -> None:
    """Where its silence would mislead, there is a message, and no other number."""
    body, says, ohms = MISLEADING[name]
    pair = both(tmp_path, f"* gauge\nI1 0 q DC 1\n{body}{OP}")
    assert pair.curves is not None
    (volts,) = (curve.values[0] for curve in pair.curves if curve.name == "v(q)")
    assert volts == pytest.approx(ohms, rel=1e-9)
    assert re.search(says, pair.refusal), pair.refusal


@pytest.mark.ngspice
def test_the_same_number_by_either_name_is_read(tmp_path: Path) -> None:
    """A name that means the same inside as outside misleads nobody."""
    body = ".subckt s a b w=1k r=1k\nR1 a b {w+r}\n.ends\n.param w=3k\nX1 out 0 s w={w} r={w/2}\n"
    both(tmp_path, V + body + AC).require_same()


@pytest.mark.ngspice
def test_an_override_that_nobody_asks_for_misleads_nobody(tmp_path: Path) -> None:
    """Whatever it is made of, it is only noticed."""
    body = ".subckt s a b r=1k\nR1 a b {r}\n.ends\n.param r=3k\nX1 out 0 s rr={r}\n"
    pair = both(tmp_path, V + body + AC)
    pair.require_same()
    assert pair.seen == ["unknown-override"]


# ---------------------------------------------------------------------- defined twice


@pytest.mark.ngspice
@pytest.mark.parametrize("order", [(1000, 2000), (2000, 1000)])
@pytest.mark.parametrize("use", ["first", "between", "last"])
def test_the_first_of_two_definitions_counts(tmp_path: Path, order: tuple[int, int], use: str) -> None:
    """Wherever it is used; the second is passed over, which is told with its line."""
    one, two = (f".subckt s a b\nR1 a b {ohms}\n.ends\n" for ohms in order)
    x = "X1 out 0 s\n"
    body = {"first": x + one + two, "between": one + x + two, "last": one + two + x}[use]
    pair = both(tmp_path, V + body + AC)
    pair.require_same()
    assert pair.circuit.network.part("R.X1.R1").value == order[0]
    (seen,) = pair.circuit.seen
    assert (seen.code, seen.place.line) == ("duplicate-subcircuit", body.count("\n", 0, body.index(two)) + 4)


NOTICED: dict[str, tuple[str, str, int]] = {
    "unknown override": (CELL + "X1 out 0 cell rr=2k\n", "unknown-override", 6),
    "port called like ground": (".subckt s a gnd\nR1 a gnd 1k\n.ends\nX1 out 0 s\n", "subcircuit-ground", 2),
    "another name behind .ends": (CELL.replace(".ends", ".ends rc") + "X1 out 0 cell\n", "ends-name", 5),
}


@pytest.mark.parametrize("name", NOTICED)
def test_what_is_noticed(name: str) -> None:
    """Once, on its line, however often the subcircuit is used."""
    body, code, line = NOTICED[name]
    circuit = read(body + "X8 out 0 s\nX9 out 0 s\n" if "subckt s" in body else body)
    assert [(each.code, each.place.line) for each in circuit.seen] == [(code, line)]


# ---------------------------------------------------------------------- names, places, uses


def test_parts_and_nodes_have_their_paths() -> None:
    """`R.X1.X2.R1` and `X1.X2.mid`, spelt as written."""
    body = CELL + ".subckt Pair a b\nX2 a M cell\nX3 m b cell\n.ends\nV1 in 0 1\nX1 in 0 pair\n"
    network = read(body).network
    assert network.names == ("V1", "R.X1.X2.R1", "C.X1.X2.C1", "R.X1.X3.R1", "C.X1.X3.C1")
    assert network.nodes == ("0", "in", "X1.X2.mid", "X1.M", "X1.X3.mid")
    assert network.part("C.X1.X3.C1").nodes == ("X1.X3.mid", "0")


def test_a_part_inside_clashes_with_one_of_its_name() -> None:
    """A part written with a path in its name is that part."""
    with pytest.raises(CircuitError, match=r"two parts called 'R\.X1\.R1'") as caught:
        read("V1 in 0 1\nR.X1.R1 in 0 1k\n" + CELL + "X1 in 0 cell\n")
    assert caught.value.line == 5


def test_a_part_stands_where_its_subcircuit_has_it() -> None:
    """Its place is its line in the definition, also in a mistake, which is told once."""
    circuit = read("V1 in 0 1\n" + CELL + "X1 in 0 cell\nX2 in 0 cell\n")
    for name in ("R.X1.R1", "R.X2.R1"):
        place = circuit.place_of(name)
        assert (place.file, place.line, place.text, place.column) == ("gauge.cir", 4, "R1 a mid {r}", 1)
    with pytest.raises(CircuitError, match="R1 has no value") as caught:
        read("V1 in 0 1\n" + CELL.replace("{r}", "") + "X1 in 0 cell\nX2 in 0 cell\n")
    assert [problem.line for problem in caught.value.problems] == [4]


def test_what_a_netlist_defines_is_known() -> None:
    """Name, ports, parameters, how often it is used and where it stands; nested ones among them."""
    body = (
        CELL + ".subckt Pair a b\n.subckt inner x\nR1 x 0 1k\n.ends\nX1 a m cell\nX2 m b cell\nX3 m inner\n"
        ".ends\nV1 in 0 1\nX1 in 0 pair\nX2 in 0 pair\n.subckt idle a\n.ends\n"
    )
    known = {each.name: each for each in read(body).subcircuits}
    assert {name: each.uses for name, each in known.items()} == {"cell": 4, "pair": 2, "inner": 2, "idle": 0}
    assert (known["cell"].ports, known["cell"].parameters) == (("a", "b"), ("r", "c"))
    assert (known["pair"].place.line, known["pair"].place.column) == (6, 9)


def test_ports_twice_are_refused() -> None:
    """Of two ports of one name, one could not be connected."""
    with pytest.raises(CircuitError, match="'s' names the port 'A' twice"):
        read("V1 in 0 1\n.subckt s A a\nR1 a 0 1k\n.ends\nX1 in 0 s\n")


@pytest.mark.parametrize(
    "card", [".ac dec 1 1 10", ".tran 1u 1m", ".temp 37", ".options temp=37", ".ic v(a)=1"]
)
def test_cards_inside_are_refused(card: str) -> None:
    """What is about the whole netlist stands outside."""
    with pytest.raises(CircuitError, match="stands inside the subcircuit 's'"):
        read(f"V1 in 0 1\n.subckt s a\nR1 a 0 1k\n{card}\n.ends\nX1 in s\n")


def test_only_definitions_are_no_netlist() -> None:
    """A library file read by itself says what it lacks."""
    with pytest.raises(CircuitError, match=r"only defines subcircuits \(cell\) and uses none"):
        read(CELL)
