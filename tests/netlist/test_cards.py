"""The other dot lines of a netlist: computed, handed on, or told that they are not."""

from __future__ import annotations

from pathlib import Path

import pytest
from beside_ngspice import TIGHT, both

from rcnet.circuit import Circuit, Sweep, TransientRun
from rcnet.errors import CircuitError
from rcnet.findings import findings
from rcnet.netlist import parse_netlist, write

RC = "V1 in 0 DC 1 AC 1\nR1 in out 1k\nC1 out 0 1u\n"


def read(cards: str) -> Circuit:
    """A low-pass filter with some dot lines; the first stands on line 5."""
    return parse_netlist(f"* gauge\n{RC}{cards}\n.end\n", "gauge.cir")


def refusal(cards: str) -> CircuitError:
    """Why it is refused."""
    with pytest.raises(CircuitError) as caught:
        read(cards)
    return caught.value


def seen(circuit: Circuit) -> list[tuple[str, int | None]]:
    """What was noticed, and on which line."""
    return [(each.code, each.place.line) for each in circuit.seen]


# ---------------------------------------------------------------------- handed on

# Lines -> the words and texts handed on; node names as in the network, numbers as they were meant.
KEPT: dict[str, tuple[str, list[tuple[str, str]]]] = {
    "dc": (".dc V1 0 5 0.1", [(".dc", "V1 0 5 0.1")]),
    "dc with prefixes": (".DC v1 0 5k 100m", [(".dc", "v1 0 5000 0.1")]),
    "dc of two": (".dc V1 0 1 0.5 R1 1k 2k 500", [(".dc", "V1 0 1 0.5 R1 1000 2000 500")]),
    "dc downwards": (".dc V1 5 0 -1", [(".dc", "V1 5 0 -1")]),
    "dc of the temperature": (".dc TEMP 0 50 10", [(".dc", "TEMP 0 50 10")]),
    "dc of a parameter": (".param top=5\n.dc V1 0 {top} '0.5/5'", [(".dc", "V1 0 5 0.1")]),
    "tf": (".tf V(OUT) V1", [(".tf", "V(out) V1")]),
    "tf of a difference": (".tf v( In , Out ) V1", [(".tf", "v(in,out) V1")]),
    "tf of a current": (".tf i(v1) V1", [(".tf", "i(V1) V1")]),
    "four": (".four 1k v(out) v(IN)", [(".four", "1000 v(out) v(in)")]),
    "fourier": (".fourier {500*2} v(out)", [(".four", "1000 v(out)")]),
    "meas": (".meas ac f3 when vdb(OUT)=-3", [(".meas", "ac f3 when vdb(out)=-3")]),
    "measure": (
        ".MEASURE tran t1 trig v(out) val=0.1 rise=1 targ v(Out) val=0.9 rise=1",
        [(".meas", "tran t1 trig v(out) val=0.1 rise=1 targ v(out) val=0.9 rise=1")],
    ),
    "meas with a parameter": (
        ".param level=-3\n.meas ac f3 when vdb(out)={level*2}",
        [(".meas", "ac f3 when vdb(out)=-6")],
    ),
    "meas with a quoted formula": (".meas ac d param='f3*2'", [(".meas", "ac d param='f3*2'")]),
    "second ac": (".ac dec 10 1 1k\n.ac lin 5 1k 2MEG", [(".ac", "lin 5 1000 2000000")]),
}


@pytest.mark.parametrize("name", KEPT)
def test_a_line_is_handed_on(name: str) -> None:
    """With its place, and in what is written."""
    cards, expected = KEPT[name]
    circuit = read(cards)
    assert [(request.word, request.text) for request in circuit.requests] == expected
    line = 5 + cards.count("\n")
    assert [request.place.line for request in circuit.requests] == [line]
    told = {".meas": [], ".ac": [("second-analysis", line)]}.get(expected[0][0], [("card-kept", line)])
    assert seen(circuit) == told


def test_inner_names_are_handed_on() -> None:
    """A node or a source inside a subcircuit has its path, in the case in which it was written."""
    inner = ".subckt s a\nR1 a Mid 1k\nV1 Mid 0 1\n.ends\nX1 out s\n"
    body = f"{inner}.meas ac m find v(x1.mid) at=1k\n.tf i(v.x1.v1) V1"
    circuit = read(body)
    assert [request.text for request in circuit.requests] == ["ac m find v(X1.Mid) at=1k", "i(V.X1.V1) V1"]


REFUSED: dict[str, tuple[str, str]] = {
    "dc of nobody": (".dc V9 0 1 0.1", ".dc names 'V9', which is no part here"),
    "dc of three": (".dc V1 0 1", ".dc cannot be read"),
    "dc by nothing": (".dc V1 0 1 0", "by steps of 0"),
    "dc backwards": (".dc V1 0 1 -0.1", "by steps of -0.1"),
    "dc of too many": (".dc V1 0 1 1e-12", "by steps of 1e-12"),
    "dc of no number": (".dc V1 0 one 0.1", "'one' is not a number"),
    "tf of nobody": (".tf v(out) V9", ".tf names 'V9'"),
    "tf of nothing": (".tf V1", ".tf cannot be read"),
    "tf of a word more": (".tf v(out) V1 now", ".tf cannot be read"),
    "four of nothing": (".four 1k", ".four cannot be read"),
    "four of a word": (".four 1k out", ".four cannot be read"),
    "four at nothing": (".four 0 v(out)", "the frequency 0.0 Hz"),
    "meas of nothing": (".meas ac f3", ".meas cannot be read"),
    "meas of another analysis": (".meas sens f3 max v(out)", ".meas cannot be read"),
    "meas with a command": (".meas ac f3 max `touch x`", "a character that belongs in no measurement"),
    "meas with a comment sign": (".meas ac f3 max v(out) \\", "a character that belongs in no measurement"),
    "ic of nothing": (".ic", ".ic cannot be read"),
    "ic without a value": (".ic v(out)", ".ic cannot be read"),
    "ic of a word more": (".ic v(out)=1 now", ".ic cannot be read"),
    "ic of no number": (".ic v(out)=one", "'one' is not a number"),
    "ic of a difference": (".ic v(in,out)=1", ".ic cannot be read"),
    "second ac, unreadable": (".ac dec 10 1 1k\n.ac dec 10 1", ".ac cannot be read"),
    "sweep by an undefined parameter": (".ac dec 10 1 {nope}", "'nope' is not defined"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_a_line_is_refused(name: str) -> None:
    """It would be refused by a simulator, or pass unnoticed; here it has one message and a remedy."""
    cards, says = REFUSED[name]
    error = refusal(cards)
    assert [problem.line for problem in error.problems] == [5 + cards.count("\n")]
    assert says in error.message
    assert error.remedy


IGNORED = [
    ".sens v(out)",
    ".pz in 0 out 0 vol pz",
    ".disto dec 10 1 1k",
    ".sp dec 10 1 1k",
    ".pss 1k 1u out 10 5 1n",
]


@pytest.mark.parametrize("card", IGNORED)
def test_a_line_that_nothing_comes_of_is_noticed(card: str) -> None:
    """It is neither computed nor handed on."""
    circuit = read(card)
    assert seen(circuit) == [("card-ignored", 5)]
    assert circuit.requests == ()
    assert card.split(maxsplit=1)[0] not in write(circuit).text


@pytest.mark.parametrize(
    "card", [".width out=80", ".nodeset v(out)=1", ".end", ".csparam a={1}", ".probe i(R1)", ".save all"]
)
def test_a_line_that_does_not_matter_is_passed_over(card: str) -> None:
    """Print layout, a first guess, what to keep: no word about it."""
    circuit = read(card)
    assert (seen(circuit), circuit.requests) == ([], ())


# ---------------------------------------------------------------------- analyses


@pytest.mark.parametrize(
    ("card", "code_key"),
    [(".ac dec 10 1 1k", "ac"), (".tran 1u 1m", "transient"), (".noise v(out) V1 dec 10 1 1k", "noise")],
)
def test_of_two_analyses_the_first_counts(card: str, code_key: str) -> None:
    """The second is told with the line of the first; a second `.op` is the same again."""
    circuit = read(f"{card}\n* again\n{card.replace('1m', '9m').replace('1k', '9k')}")
    assert seen(circuit) == [("second-analysis", 7)]
    assert "on line 5" in circuit.seen[0].message
    assert circuit.analysis_places[code_key].line == 5
    ac, run, noise = circuit.analyses.ac, circuit.analyses.transient, circuit.analyses.noise
    assert (ac or noise or run) in (Sweep(1.0, 1e3, 10), TransientRun(1e-3, 1e-6))
    assert read(".op\n.op").seen == ()


def test_the_output_is_the_first_voltage_printed() -> None:
    """Also by `.probe`; an inner node by its path."""
    assert read(".probe v(in)\n.print ac v(out)").output == ("in",)
    body = ".subckt s a\nR1 a Mid 1k\nR2 Mid 0 1k\n.ends\nX1 out s\n.print ac v(x1.mid)"
    assert read(body).output == ("X1.Mid",)


# ---------------------------------------------------------------------- options

OPTIONS: dict[str, tuple[str, dict[str, str], list[str]]] = {
    "of the arithmetic": ("reltol=1e-6 method=GEAR noopac maxord=4", {}, []),
    "of models that are not read": ("defl=1u defw=2u badmos3 gmin=1e-12 gminsteps=10 itl5=0", {}, []),
    "of printing": ("acct nopage numdgt=7 list node opts ingold=2", {}, []),
    "resistor at every node": ("rshunt=1e12", {}, ["option-changes-circuit"]),
    "others at every node": ("gshunt=1n cshunt=1p", {}, ["option-changes-circuit"] * 2),
    "resistor at every inductor": ("rseries=1", {}, ["option-changes-circuit"]),
    "broken results": ("interp", {}, ["option-changes-circuit"]),
    "unknown": ("frobnicate=3", {}, ["option-changes-circuit"]),
    "by a parameter": ("reltol={1m/10}", {}, []),
}


@pytest.mark.parametrize("name", OPTIONS)
def test_an_option_is_kept_or_told(name: str) -> None:
    """What changes the circuit is told; what steers the arithmetic is kept; the rest is passed over."""
    text, _, codes = OPTIONS[name]
    circuit = read(f".options {text}")
    assert [code for code, _ in seen(circuit)] == codes
    kept = {key: circuit.options.get(key) for key in ("reltol", "method", "noopac", "maxord")}
    expected = {
        "of the arithmetic": {"reltol": "1e-06", "method": "gear", "noopac": "", "maxord": "4"},
        "by a parameter": {"reltol": "0.0001", "method": None, "noopac": None, "maxord": None},
    }
    assert kept == expected.get(name, dict.fromkeys(kept))
    assert set(circuit.options) <= set(kept)


@pytest.mark.parametrize(
    "text", ["reltol=-1", "reltol=0", "abstol=x", "method=euler", "noopac=1", "temp=-300", "tnom=cold"]
)
def test_an_option_without_sense_is_refused(text: str) -> None:
    """A number that is none, or not above zero."""
    assert refusal(f".options {text}").line == 5


# ---------------------------------------------------------------------- where a transient starts


@pytest.mark.ngspice
@pytest.mark.parametrize(
    "cards",
    [
        pytest.param(".ic v(out)=0.2\n", id="node"),
        pytest.param(".ic V(OUT) = 0.2 , v(x1.mid)=0.1\n", id="two nodes"),
        pytest.param(".param v0=0.2\n.ic v(out)={v0*2}\n", id="parameter"),
        pytest.param("", id="nothing"),
    ],
)
@pytest.mark.parametrize("uic", ["", " uic"])
def test_a_transient_starts_where_ngspice_has_it(tmp_path: Path, cards: str, uic: str) -> None:
    """With `.ic` and with `ic=` on parts, inside subcircuits too, with and without `uic`."""
    body = ".subckt s a\nR1 a mid 1k\nC1 mid 0 200n ic=0.3\n.ends\nX1 out s\n"
    text = f"* gauge\n{RC.replace('1u', '100n ic=0.5')}{body}{cards}{TIGHT}.tran 1u 500u 0 50n{uic}\n.end\n"
    circuit = both(tmp_path, text).require_same(1e-5)
    assert dict(circuit.initial.parts) == {"C1": 0.5, "C.X1.C1": 0.3}


def test_starts_are_read() -> None:
    """Nodes in the network's spelling, capacitors and inductors; a node that is not there is noticed."""
    circuit = read(".ic v(OUT)=1 v(gone)=2\n.ic v(in)=3\nL9 out 0 1m ic=2m\n")
    assert dict(circuit.initial.nodes) == {"out": 1.0, "in": 3.0}
    assert dict(circuit.initial.parts) == {"L9": 2e-3}
    assert seen(circuit) == [("start-of-no-node", 5)]
    assert "'gone'" in circuit.seen[0].message


# ---------------------------------------------------------------------- commands

COMMANDS: dict[str, tuple[str, str | None]] = {
    "plots": ("run\nplot v(out)\nlet x = 2*v(out)\nmeas ac f3 when vdb(out)=-3\nquit", None),
    "nothing": ("", None),
    "what is printed": ("echo done\nprint all\nrusage", None),
    "loop": ("foreach r 1k 2k\nalter r1 = $r\nrun\nend", None),
    "shell": ("shell touch x", "error"),
    "shell in a loop": ("run\nwhile 1\n  SHELL touch x\nend", "error"),
    "exclamation": ("!touch x", "error"),
    "exclamation apart": ("  ! touch x", "error"),
    "backquotes": ("set x = `touch x`", "error"),
    "pipe": ("print all | sh", "error"),
    "redirection": ("echo x > file", "error"),
    "redirection of a plot": ("listing >> file", "error"),
    "write": ("write out.raw v(out)", "error"),
    "wrdata": ("wrdata out v(out)", "error"),
    "wrs2p": ("wrs2p out.s2p", "error"),
    "hardcopy": ("hardcopy out.ps v(out)", "error"),
    "native code": ("codemodel evil.cm", "error"),
    "native code before": ("pre_codemodel evil.cm", "error"),
    "osdi": ("pre_osdi evil.osdi", "error"),
    "another script": ("source evil.sp", "error"),
    "another file": ("load old.raw", "error"),
    "another folder": ("cd /tmp", "error"),
    "another search path": ("set sourcepath = ( / )", "error"),
    "another program": ("aspice in.cir", "error"),
    "any word is a program": ("set unixcom\ntouch x", "error"),
    "another name for it": ("alias go shell touch x\ngo", "error"),
    "editor": ("set editor = touch\nedit x", "error"),
    "behind a command comment": ("*#shell touch x", "error"),
}


@pytest.mark.parametrize("name", COMMANDS)
@pytest.mark.parametrize("where", [".control\n{}\n.endc", "  .CONTROL\n{}\n.ENDC", ".controls\n{}\n.endco"])
def test_commands_are_left_out(name: str, where: str) -> None:
    """A warning names them; one that reaches beyond the simulation is an error. None is ever written."""
    commands, severity = COMMANDS[name]
    circuit = read(where.format(commands))
    assert [(each.code, each.severity, each.place.line) for each in circuit.seen] == [
        ("commands-dropped", severity, 5)
    ]
    written = write(circuit).text
    assert not any(line.strip() in written.split("\n") for line in commands.split("\n") if line.strip())
    assert ".control" not in written.lower()
    told = [each.severity for each in findings(circuit) if each.code == "commands-dropped"]
    assert told == [severity or "warning"]


def test_commands_without_an_end_take_the_rest() -> None:
    """As in ngspice, where the rest of the netlist is commands then, behind `.end` too."""
    circuit = read(".end\n.control\nrun\nR9 out 0 1k\n.tran 1u 1m")
    assert circuit.network.names == ("V1", "R1", "C1")
    assert circuit.analyses.transient is None
    assert seen(circuit)[-1] == ("commands-dropped", 6)


def test_commands_in_the_middle_leave_the_rest_alone() -> None:
    """What stands before and behind is read, its lines keep their numbers."""
    circuit = read(".control\nR8 out 0 1k\n* R7 out 0 1k\n.endc\nR9 out 0 1k")
    assert circuit.network.names == ("V1", "R1", "C1", "R9")
    assert circuit.place_of("R9").line == 9


HIDDEN = ["*#shell touch x", "   *#quit", "*#", "*ng_script", "*NG_SCRIPT_WITH_PARAMS"]


@pytest.mark.parametrize("line", HIDDEN)
def test_a_hidden_command_is_left_out(line: str) -> None:
    """It is an error that says where it stands, wherever in the netlist that is."""
    circuit = read(f"{line}\nR9 out 0 1k")
    assert seen(circuit) == [("hidden-command", 5)]
    assert line.strip() not in write(circuit).text
    assert [each.severity for each in findings(circuit) if each.code == "hidden-command"] == ["error"]


@pytest.mark.ngspice
def test_a_hidden_command_does_not_end_a_line(tmp_path: Path) -> None:
    """What continues a line goes on behind it, as behind any comment."""
    text = (
        f"* gauge\n{RC}R2 out 0 1k\n*#nothing\n* nor this\n+ m=3\nR3 out 0\n*#nothing\n\n+ 1k\n"
        ".ac dec 3 1 1k\n.end\n"
    )
    circuit = both(tmp_path, text).require_same()
    assert seen(circuit) == [("hidden-command", 6), ("hidden-command", 10)]


# ---------------------------------------------------------------------- silence


def codes(circuit: Circuit) -> list[tuple[str, int | None]]:
    """The findings that are told."""
    return [(each.code, each.line) for each in findings(circuit) if each.code == "zero-resistance"]


ZERO = "R2 out a 0{}\nR3 a b 0{}\nR4 b 0 1k\n{}"


def test_a_comment_silences_a_whole_netlist() -> None:
    """`* rcnet: silence CODE`, wherever it stands, several codes on it, in any case."""
    assert len(codes(read(ZERO.format("", "", "")))) >= 1
    for comment in (
        "* rcnet: silence zero-resistance",
        "*RCNET: Silence other, zero-resistance".lower(),
        "; rcnet: silence zero-resistance",
    ):
        circuit = read(ZERO.format("", "", comment))
        assert codes(circuit) == []
        assert {each.line for each in circuit.silenced} == {None}


def test_a_comment_at_the_end_of_a_line_silences_that_line() -> None:
    """`; rcnet: silence CODE`, or behind `$` or `//`; also where the line goes on over several."""
    for sign in (";", "$", "//"):
        circuit = read(ZERO.format(f" {sign} rcnet: silence zero-resistance", "", ""))
        assert [(each.code, each.line) for each in circuit.silenced] == [("zero-resistance", 5)]
        assert 6 in {line for _, line in codes(circuit)}
    circuit = read("R2 out\n* why\n+ a 0 ; rcnet: silence zero-resistance\nR4 a 0 1k\n")
    assert [(each.code, each.line) for each in circuit.silenced] == [("zero-resistance", 5)]
    assert codes(circuit) == []


def test_only_a_comment_silences() -> None:
    """The same words in a title or a name are words."""
    circuit = parse_netlist(f"rcnet: silence zero-resistance\n{RC}", "gauge.cir")
    assert circuit.silenced == ()
