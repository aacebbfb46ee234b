"""Sources and controlled sources on their lines: waveforms over time, values at dc and ac, gains."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from beside_ngspice import AC, OP, TIGHT, both

from rcnet.circuit import Circuit, Exponential, Points, Sine, Square, Step
from rcnet.errors import CircuitError
from rcnet.netlist import parse_netlist

RUNS = (".tran 1u 100u", ".tran 2u 100u 30u", ".tran 0.5u 80u 0 3u")

# A source straight across a resistor: what ngspice writes is the waveform itself.
WAVES: tuple[str, ...] = (
    "PULSE(0 5)",
    "PULSE(0 5 10u)",
    "PULSE(0 5 10u 1u)",
    "PULSE(0 5 10u 1u 2u)",
    "PULSE(0 5 10u 1u 2u 20u)",
    "PULSE(0 5 10u 1u 2u 20u 40u)",
    "PULSE(0 5 10u 0 0 20u 40u)",
    "PULSE(0 5 0 0 2u 10u 40u)",
    "PULSE(0 5 0 2u 0 10u 40u)",
    "PULSE(0 5 5u 2u 1u 10u 0)",
    "PULSE(0 5 0 1u 2u 99u)",
    "PULSE(0 5 0 1u 2u 100u)",
    "PULSE(0 5 0 1u 2u 101u)",
    "PULSE(0 5 0 1u 2u 0 200u)",
    "PULSE(5 0 200u 1u 2u 10u 40u)",
    "PULSE(5 0 0 60u 60u 10u 140u)",
    "PULSE(2 2 0 1u 1u 1u 5u)",
    "PULSE 0 5 10u 1u 1u 20u 40u",
    "pulse ( 0 , 5 , 10u , 1u 1u 20u 40u )",
    "SIN(0 1)",
    "SIN(0 1 0)",
    "SIN(1 2 10k)",
    "SINE(1 2 10k 20u)",
    "SIN(1 2 10k 20u 1e4)",
    "SIN(1 2 10k 20u 1e4 30)",
    "SIN(0 1 10k 0 0 90)",
    "EXP(0 5)",
    "EXP(0 5 0)",
    "EXP(0 5 1u)",
    "EXP(0 5 1u 2u)",
    "EXP(0 5 1u 2u 50u)",
    "EXP(0 5 1u 2u 50u 3u)",
    "EXP(0 5 1u 0 50u 3u)",
    "EXP(0 5 0 2u 50u 0)",
    "EXP(0 5 0 2u 0 3u)",
    "EXP(0 5 200u 2u 250u 3u)",
    "EXP(1 5 10u 2u 10u 3u)",
    "PWL(0 0 10u 1 20u 0)",
    "PWL(10u 1 20u 0)",
    "PWL(0 1)",
    "PWL(5u 1)",
    "PWL(0 0, 10u 1)",
    "PWL(0 0 200u 1)",
    "PWL 0 0 10u 1",
    "PWL(0 0 10u 1 20u 0) r=0",
    "PWL(0 1 10u 3 20u 1) r 0",
    "PULSE(0 {p} 10u 1u '1u' 20u 40u)",
    "PULSE(0 p 10u 1u 1u 20u 40u)",
    "SIN(0 {p} {1/100u})",
    "PWL(0 0 {t} {p} {2*t} 0)",
    "DC 3 PULSE(0 5 10u 1u 1u 20u 40u) AC 1 45",
    "3 PULSE(0 5 10u 1u 1u 20u 40u)",
    "PULSE(0 5 10u 1u 1u 20u 40u) DC=3",
    "DC {p}",
    "'p*2'",
    "p",
)


@pytest.mark.ngspice
@pytest.mark.parametrize("wave", WAVES)
@pytest.mark.parametrize("run", RUNS)
def test_a_waveform_is_that_of_ngspice(tmp_path: Path, wave: str, run: str) -> None:
    """At every point of a transient, numbers left out being filled in from its line."""
    both(tmp_path, f"* gauge\n.param p=3 t=10u\nV1 a 0 {wave}\nR1 a 0 1k\n{run}\n.end\n").require_same(1e-7)


@pytest.mark.ngspice
@pytest.mark.parametrize(
    "wave", ["PULSE(0 5)", "PULSE(0 5 10u 0 0 20u 50u)", "EXP(0 5 10u)", "SIN(0 1)", "PWL(0 0 9u 1)"]
)
def test_a_filter_follows_as_in_ngspice(tmp_path: Path, wave: str) -> None:
    """Behind 1 kohm and 10 nF, multiplied, as a current and inside a subcircuit, at a tight tolerance."""
    text = (
        f"* gauge\n.subckt s a\nI1 0 a {wave} m=2\nR1 a 0 1k\nC1 a 0 10n\n.ends\nV1 in 0 {wave}\n"
        f"R1 in out 1k\n"
        f"C1 out 0 10n\nX1 b s\n{TIGHT}.tran 0.5u 100u 0 10n\n.end\n"
    )
    both(tmp_path, text).require_same(3e-5)  # the kinks of EXP; 2e-6 for the others


REFUSED_BY_BOTH: dict[str, str] = {
    "PULSE(0)": "PULSE has 1 numbers",
    "PULSE": "PULSE has 0 numbers",
    "PULSE(0 5 0 -1u 2u 10u 40u)": "PULSE has a rise of -1e-06 s",
    "SIN(1)": "SIN has 1 numbers",
    "PWL(10u 1 20u 0) r=0": "Only r=0 of points from time 0",
    "5 3": "'3' is not read",
    "5 foo": "'foo' is not read",
    "DC {nope}": "'nope' is not defined",
    "DC 1 m=2": "'m' is not read",
}


@pytest.mark.ngspice
@pytest.mark.parametrize("wave", REFUSED_BY_BOTH)
def test_what_ngspice_refuses_is_refused(tmp_path: Path, wave: str) -> None:
    """With a message about the source."""
    pair = both(tmp_path, f"* gauge\nV1 a 0 {wave}\nR1 a 0 1k\n.tran 1u 100u\n.end\n")
    pair.require_refused_by_both()
    assert re.search(REFUSED_BY_BOTH[wave], pair.refusal), pair.refusal


def source(line: str, cards: str = "") -> Circuit:
    """A netlist about one source."""
    return parse_netlist(f"* gauge\nV1 a 0 {line}\nR1 a 0 1k\n{cards}\n", "gauge.cir")


REFUSED: dict[str, str] = {
    "PULSE(0 5 0 1u 2u -10u 40u)": "a width of -1e-05 s",
    "PULSE(0 5 0 1u 2u 10u -40u)": "a period of -4e-05 s",
    "PULSE(0 5 0 1u 2u 0 40u)": "repeats after 4e-05 s, before it is over",
    "PULSE(0 5 0 1u 2u 50u 40u)": "the edges do not fit",
    "PULSE(0 5 -5u 1u 2u 10u 40u)": "delay is -5e-06 s",
    "PULSE(0 5 0 1u 1u 10u 40u 2)": "PULSE has 8 numbers",
    "EXP(0 5 60u 2u 50u 3u)": "the way back begins",
    "EXP(0 5 1u -2u 50u 3u)": "time_constant is -2e-06 s",
    "SIN(1 2 -10k)": "not positive",
    "SIN(1 2 10k 0 -1e4)": "damping",
    "PWL(0 0 10u 1 20u)": "PWL has 3 numbers|PWL has 5 numbers",
    "PWL(0 0 10u 1 10u 2)": "does not come after",
    "PWL(0 0 10u 1 20u 0) r=10u": "PWL repeats from 1e-05 s",
    "PWL(0 0 10u 1) td=5u": "'td' is not read",
    "PULSE(0 1 0 1u 1u 1u 5u) SIN(0 1 1k)": "two waveform entries",
    "DC 1 DC 2": "two DC entries",
}


@pytest.mark.parametrize("line", REFUSED)
def test_what_is_no_waveform_here_is_refused(line: str) -> None:
    """Ngspice makes something of each: nothing that a person would have meant, or nothing rcnet computes."""
    with pytest.raises(CircuitError, match=REFUSED[line]):
        source(line, ".tran 1u 100u")


FILLED: dict[str, object] = {
    "PULSE(1 5)": Step(1.0, 5.0, 0.0, 1e-6),
    "PULSE(1 5 10u 0 0 20u)": Square(1.0, 5.0, 122e-6, 20e-6, 1e-6, 1e-6, 10e-6),
    "SIN(0 1)": Sine(1.0, 1e4),
    "EXP(1 5)": Exponential(1.0, 5.0, 1e-6, 1e-6, 2e-6, 1e-6),
}


@pytest.mark.parametrize("line", FILLED)
def test_numbers_from_the_transient_are_noticed(line: str) -> None:
    """They are the netlist's own as long as its `.tran` stays; the finding names step and stop."""
    circuit = source(line, ".tran 1u 100u")
    waveform, expected = circuit.network.sources["V1"].waveform, FILLED[line]
    assert type(waveform) is type(expected)
    if not isinstance(waveform, Square):  # its period lies beyond the run, wherever exactly
        assert waveform == expected
    (seen,) = circuit.seen
    assert (seen.code, seen.place.line, seen.place.column) == ("edge-from-step", 2, 8)
    assert "step 1e-06 s, stop 0.0001 s" in seen.message


@pytest.mark.parametrize("line", FILLED)
def test_numbers_that_nothing_gives_are_noticed(line: str) -> None:
    """Without `.tran` the waveform is left out, and its first value stays for the operating point."""
    circuit = source(line)
    drive = circuit.network.sources["V1"]
    assert (drive.waveform, drive.dc) == (None, float(line[line.index("(") + 1]))
    assert [each.code for each in circuit.seen] == ["waveform-unknown"]
    assert source("DC 7 " + line).network.sources["V1"].dc == 7


@pytest.mark.parametrize(
    "line", ["SFFM(0 1 1k 5 1k)", "AM(1 1 1k 10k)", "TRNOISE(1 1u 0 0)", "TRRANDOM(2 1m 0 1)"]
)
def test_a_waveform_that_is_not_computed_is_left_out(line: str) -> None:
    """The rest of the source counts, and a finding says that nothing is true over time."""
    circuit = source("DC 2 AC 3 " + line, ".tran 1u 1m")
    drive = circuit.network.sources["V1"]
    assert (drive.dc, drive.ac, drive.waveform) == (2, 3, None)
    assert [(each.code, each.place.line) for each in circuit.seen] == [("waveform-unknown", 2)]


def test_a_whole_waveform_needs_no_transient() -> None:
    """Nothing is noticed where nothing is missing."""
    for line in ("PULSE(0 5 0 1u 1u 10u 40u)", "SIN(0 1 1k)", "EXP(0 5 1u 2u 50u 3u)", "PWL(0 0 1u 1) r=0"):
        circuit = source(line)
        assert circuit.seen == ()
        assert circuit.network.sources["V1"].waveform is not None
    assert source("PWL(0 0 1u 1) r=0").network.sources["V1"].waveform == Points(
        ((0.0, 0.0), (1e-6, 1.0)), 1e-6
    )


# ---------------------------------------------------------------------- ac, dc, gains

V = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1k\nC1 out 0 100n\n"
SAME: dict[str, str] = {
    "current": "I2 0 out DC 1m AC 2m 30\n",
    "current, multiplied": "I2 0 out AC 1m m=3\n",
    "current, multiplied by an expression": ".param n=2\nI2 0 out AC 1m m={n+1}\n",
    "current, multiplied by less than nothing": "I2 0 out AC 1m m=-1\n",
    "current, multiplied by nothing": "I2 0 out AC 1m m=0\nR2 out 0 1k\n",
    "current, multiplied first": "I2 0 out m=2 AC 1m\n",
    "ac of magnitude alone": "V2 b 0 AC\nR2 b out 1k\n",
    "ac behind a comma": "V2 b 0 AC 2,90\nR2 b out 1k\n",
    "voltage-controlled voltage": "E2 b 0 out in 2\nR2 b out 1k\n",
    "voltage-controlled current": "G2 out 0 in 0 1m\n",
    "voltage-controlled current, multiplied": "G2 out 0 in 0 1m m=3\n",
    "current-controlled current": "F2 out 0 V1 0.5\n",
    "current-controlled current, multiplied": "F2 out 0 V1 0.5 m=3\n",
    "current-controlled voltage": "H2 b 0 V1 500\nR2 b out 1k\n",
    "nothing gained": "E2 b 0 in 0 0\nR2 b out 1k\nG2 out 0 in 0 0\n",
    "coupled": "L1 out 0 1m\nL2 c 0 4m\nK1 L1 L2 0.9\nR2 c 0 10\n",
    "coupled the other way round": "K1 L1 L2 -0.9\nL1 out 0 1m\nL2 c 0 4m\nR2 c 0 10\n",
    "coupled by k=": "L1 out 0 1m\nL2 c 0 4m\nK1 L1 L2 k=0.9\nR2 c 0 10\n",
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", SAME)
def test_the_answer_is_that_of_ngspice(tmp_path: Path, name: str) -> None:
    """The same voltages at all nodes and frequencies."""
    both(tmp_path, V + SAME[name] + AC).require_same()


@pytest.mark.ngspice
@pytest.mark.parametrize(
    "line",
    [
        "DC 2",
        "2",
        "DC 2 AC 1",
        "PULSE(2 5 0 1u 1u 1u 5u)",
        "DC 3 SIN(1 1 1k)",
        "SIN(2 1 1k 0 0 30)",
        "EXP(2 3 1u 1u 9u 1u)",
    ],
)
def test_the_operating_point_is_that_of_ngspice(tmp_path: Path, line: str) -> None:
    """What a source gives before anything moves: its dc, else its waveform's first value."""
    both(tmp_path, f"* gauge\nV1 a 0 {line}\nR1 a b 1k\nR2 b 0 1k\n{OP}").require_same()


@pytest.mark.parametrize(
    "line",
    [
        "E1 b 0 POLY(1) a 0 0 2",
        "G1 b 0 poly(2) a 0 b 0 0 1 1",
        "F1 b 0 POLY(1) V1 0 2",
        "H1 b 0 poly(1) V1 0 2",
        "E1 b 0 value={2*v(a)}",
        "E1 b 0 vol='2*v(a)'",
        "G1 b 0 cur={v(a)/1k}",
        "E1 b 0 table {v(a)} = (0,0) (1,1)",
        "E1 b 0 laplace {v(a)} {1/(1+s)}",
        "G1 b 0 a 0 {1m*v(a)}",
        "R2 b 0 {1k*(1+v(a))}",
        "R2 b 0 r='1k+i(V1)'",
        "C2 b 0 c='1u*(1+time)'",
        "C2 b 0 q='1u*v(a)'",
        "L2 b 0 {1m*hertz}",
        "B1 b 0 v=v(a)^2",
    ],
)
def test_what_depends_on_voltages_is_not_linear(line: str) -> None:
    """The message says so, and that the rest can be analysed without it."""
    with pytest.raises(CircuitError) as caught:
        source("1", f"R9 b 0 1k\n{line}")
    (problem,) = caught.value.problems
    assert (problem.code, problem.line) == ("not-linear", 5)
    assert "--linear-part" in (problem.remedy or "")
