"""Models and temperatures of R, C and L: what a part's value becomes, in ac, where all three show."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from beside_ngspice import AC, OP, both

from rcnet.circuit import Circuit
from rcnet.errors import CircuitError
from rcnet.netlist import parse_netlist

V = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1k\nC1 out 0 100n\n"
RM = ".model rm r(tc1=0.01 tc2=1e-4)\n"
SHEET = ".model rm r(rsh=50 narrow=0.1u short=0.2u)\n"
FILM = ".model cm c(cj=1e-3 cjsw=1e-6 narrow=0.1u short=0.2u)\n"

SAME: dict[str, str] = {
    # -- temperature
    "tc1": "R2 out 0 1k tc1=0.01\n.temp 47\n",
    "tc1 and tc2": "R2 out 0 1k tc1=0.01 tc2=-1e-4\n.temp 47\n",
    "tc of one": "R2 out 0 1k tc=0.01\n.temp 47\n",
    "tc of two": "R2 out 0 1k tc=0.01 0.001\n.temp 47\n",
    "tc of two expressions": "R2 out 0 1k tc={0.01} '0.001'\n.temp 47\n",
    "tce": "R2 out 0 1k tce=1\n.temp 47\n",
    "tce before tc1": "R2 out 0 1k tce=1 tc1=0.3\n.temp 47\n",
    "its own temperature": "R2 out 0 1k tc1=0.01 temp=60\n.temp 47\n",
    "warmer": "R2 out 0 1k tc1=0.01 dtemp=7\n.temp 47\n",
    "own temperature and warmer": "R2 out 0 1k tc1=0.01 temp=60 dtemp=7\n",
    "colder": "R2 out 0 1k tc1=0.001\n.temp -40\n",
    "capacitor": "C2 out 0 1u tc1=0.01 tc2=1e-4\n.temp 47\n",
    "capacitor, own temperature": "C2 out 0 1u tc1=0.01 temp=60\n",
    "capacitor, warmer": "C2 out 0 1u tc1=0.01 dtemp=7\n.temp 47\n",
    "inductor": "L2 out 0 10m tc1=0.01 tc2=1e-4\n.temp 47\n",
    "inductor, own temperature": "L2 out 0 10m tc1=0.01 temp=60\n",
    "inductor, warmer": "L2 out 0 10m tc1=0.01 dtemp=7\n.temp 47\n",
    "coupled inductors": "L2 out 0 10m tc1=0.1\nL3 x 0 20m tc1=0.1\nK1 L2 L3 0.5\nR3 x 0 10\n.temp 47\n",
    "nominal temperature": "R2 out 0 1k tc1=0.01\nC2 out 0 1u tc1=0.01\n.options tnom=37\n.temp 47\n",
    "option": "R2 out 0 1k tc1=0.01\n.options temp=47\n",
    "last option": "R2 out 0 1k tc1=0.01\n.options temp=37\n.options temp=47\n",
    "first of two on a line": "R2 out 0 1k tc1=0.01\n.options temp=37 temp=47\n",
    "card before option": "R2 out 0 1k tc1=0.01\n.temp 47\n.options temp=37\n",
    "card behind option": "R2 out 0 1k tc1=0.01\n.options temp=37\n.temp 47\n",
    "last card": "R2 out 0 1k tc1=0.01\n.temp 37\n.temp 47\n",
    "two temperatures on a card": "R2 out 0 1k tc1=0.01\n.temp 37 47\n",
    "two temperatures and an option": "R2 out 0 1k tc1=0.01\n.temp 37 47\n.options temp=57\n",
    # -- models
    "model before the value": RM + "R2 out 0 rm 1k\n.temp 47\n",
    "model behind the value": RM + "R2 out 0 1k rm\n.temp 47\n",
    "model and a key": RM + "R2 out 0 rm r=1k\n.temp 47\n",
    "model and an expression": RM + "R2 out 0 rm {2*500}\n.temp 47\n",
    "model behind its use": "R2 out 0 rm 1k\n.temp 47\n" + RM,
    "the part's own goes before": RM + "R2 out 0 rm 1k tc1=0.02\n.temp 47\n",
    "res": ".model rm res(r=7k)\nR2 out 0 rm\n",
    "without brackets": ".model rm r tc1=0.01 tc2 = 1e-3\nR2 out 0 rm 1k\n.temp 47\n",
    "over lines, with commas": ".model rm r (\n+ tc1 = 0.01,\n+ tc2 = 1e-3 )\nR2 out 0 rm 1k\n.temp 47\n",
    "expression in it": ".param k=0.02\n.model rm r(tc1={k/2} tc2='k/100')\nR2 out 0 rm 1k\n.temp 47\n",
    "last of a setting": ".model rm r(tc1=0.01 tc1=0.02)\nR2 out 0 rm 1k\n.temp 47\n",
    "its own tnom": ".model rm r(tc1=0.01 tnom=17)\nR2 out 0 rm 1k\nR3 out 0 rm 1k dtemp=5\n"
    ".options tnom=40\n",
    "tce in it": ".model rm r(tce=1 tc1=0.3)\nR2 out 0 rm 1k\n.temp 47\n",
    "temperature in it": ".model rm r(tc1=0.01 temp=60)\nR2 out 0 rm 1k\nR3 out 0 rm 1k temp=20\n",
    "warmer in it": ".model rm r(tc1=0.01 dtemp=9)\nR2 out 0 rm 1k\n",
    "scale in it": ".model rm r(scale=2)\nR2 out 0 rm 1k\nR3 out 0 rm 1k scale=5\n",
    "unknown setting": ".model rm r(tc1=0.01 level=3)\nR2 out 0 rm 1k\n.temp 47\n",
    "the first of two": ".model rm r(r=1k)\n.model rm r(r=7k)\nR2 out 0 rm\n",
    "unused, of another kind": ".model d1 d(is=1e-14)\nR2 out 0 1k\n",
    "m and scale": RM + "R2 out 0 rm 1k m=2 scale=3\nC2 out 0 1u m=2 scale=3\nL2 out 0 10m m=2 scale=3\n"
    ".temp 47\n",
    "model and m": ".model rm r(r=2k)\nR2 out 0 rm m=2\n",
    # -- values from models
    "resistance": ".model rm r(r=7k)\nR2 out 0 rm\n",
    "resistance by other names": ".model r1 r(res=7k)\n.model r2 r(resistance=5k)\nR2 out 0 r1\n"
    "R3 out 0 r2\n",
    "capacitance": ".model cm c(cap=2u tc1=0.01)\nC2 out 0 cm\n.temp 47\n",
    "capacitance by its long names": ".model cm capacitor(capacitance=2u)\nC2 out 0 cm\n",
    "capacitor's model and value": ".model cm c(cap=2u tc1=0.01)\nC2 out 0 cm 1u\nC3 out 0 cm c=3u\n"
    ".temp 47\n",
    "inductance": ".model lm l(ind=2m tc1=0.01)\nL2 out 0 lm\n.temp 47\n",
    "inductance by its long names": ".model lm inductor(inductance=2m)\nL2 out 0 lm\n",
    "inductor's model and value": ".model lm l(ind=2m tc1=0.01)\nL2 out 0 lm 3m\n.temp 47\n",
    "coupled by models": ".model lm l(ind=2m)\nL2 out 0 lm\nL3 x 0 lm\nK1 L2 L3 0.5\nR3 x 0 10\n",
    # -- sizes
    "sheet": SHEET + "R2 out 0 rm l=20u w=3u\n",
    "sheet, length alone": SHEET + "R2 out 0 rm l=20u\n",
    "sheet, width alone": SHEET + "R2 out 0 rm w=3u\n",
    "sheet alone": SHEET + "R2 out 0 rm\n",
    "sheet, default width": ".model rm r(rsh=50 defw=4u)\nR2 out 0 rm l=20u\nR3 out 0 rm\n",
    "sheet, default size": ".model rm r(rsh=50 l=40u w=5u)\nR2 out 0 rm\n",
    "sheet before resistance": ".model rm r(rsh=50 r=7k)\nR2 out 0 rm\n",
    "no sheet, but resistance": ".model rm r(r=7k)\nR2 out 0 rm l=20u w=3u\n",
    "no length, but resistance": ".model rm r(rsh=50 r=3k)\nR2 out 0 rm l=0\nR3 out 0 rm w=0\n",
    "size beside a value": ".model rm r(rsh=50)\nR2 out 0 rm 3k l=20u w=3u\nR3 out 0 5k l=1u w=1u\n",
    "sheet by expressions": ".param w=3u\n.model rm r(rsh={w*1e7})\nR2 out 0 rm l={2*w} w={w}\n",
    "film": FILM + "C2 out 0 cm l=200u w=30u\n",
    "film, default width": FILM.replace("cj=", "defw=20u cj=") + "C2 out 0 cm l=200u\n",
    "film, width unsaid": FILM + "C2 out 0 cm l=200u\n",
    "capacitance before film": FILM.replace("cj=", "cap=2u cj=") + "C2 out 0 cm l=200u w=30u\n",
    "film beside a value": FILM + "C2 out 0 cm 1u l=200u w=30u\n",
    # -- the temperature in a value
    "temper in a resistor": "R2 out 0 {temper*100} m=2 tc1=0.01\n.temp 37\n",
    "temper by a parameter": ".param a={temper*100}\nR2 out 0 {a} dtemp=5\nR3 out 0 {a*2} temp=60\n"
    ".temp 37\n",
    "temper in a model": ".model rm r(r={temper*100} tc1=0.01)\nR2 out 0 rm scale=2\n.temp 37\n",
    # -- nothing at all
    "zero ohm": "R2 out x 0\nR3 x 0 1k\n",
    "zero ohm by an expression": "R2 out x {1-1}\nR3 x 0 1k\n",
    "zero ohm, warmed, multiplied, scaled": "R2 out x 0 tc1=0.1 m=2 scale=3\nR3 x 0 1k\n.temp 47\n",
    "zero ohm by a model": ".model rm r(r=0)\nR2 out x rm\nR3 x 0 1k\n",
    "zero farad": "C2 out 0 0\nR3 out 0 1k\n",
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", SAME)
def test_the_answer_is_that_of_ngspice(tmp_path: Path, name: str) -> None:
    """The same voltages at all nodes and frequencies."""
    both(tmp_path, V + SAME[name] + AC).require_same()


REFUSED_BY_BOTH: dict[str, tuple[str, str]] = {
    "unknown model": ("R2 out 0 rm 1k\n", "'1k' behind the value 'rm'"),
    "capacitor's model on a resistor": (
        ".model cm c(cap=1u)\nR2 out 0 cm\n",
        "'cm' is no model of such a part",
    ),
    "resistor's model on a capacitor": (
        ".model rm r(r=1k)\nC2 out 0 rm\n",
        "'rm' is no model of such a part",
    ),
    "value before a capacitor's model": (
        ".model cm c(cap=1u)\nC2 out 0 1u cm\n",
        "model stands before its value",
    ),
    "value before an inductor's model": (
        ".model lm l(ind=1m)\nL2 out 0 1m lm\n",
        "model stands before its value",
    ),
    "cap is no type": (".model cm cap(cap=1u)\nC2 out 0 cm\n", "'cm' is no model of such a part"),
    "ind is no type": (".model lm ind(ind=1m)\nL2 out 0 lm\n", "'lm' is no model of such a part"),
    "ind is no key of a part": ("L2 out 0 ind=1m\n", "L2 has no value"),
    "nominal temperature of a part": ("R2 out 0 1k tnom=17\n", "'tnom=17' behind the value"),
    "tc of a capacitor": ("C2 out 0 1u tc=0.01\n", "'tc=0.01' behind the value"),
    "no type": (".model rm\nR2 out 0 rm\n", "lacks its name or its type"),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", REFUSED_BY_BOTH)
def test_what_ngspice_refuses_is_refused(tmp_path: Path, name: str) -> None:
    """With a message about the part."""
    body, says = REFUSED_BY_BOTH[name]
    pair = both(tmp_path, V + body + OP)
    pair.require_refused_by_both()
    assert re.search(says, pair.refusal), pair.refusal


# What ngspice forgets where `temper` makes a source inside of a part, the voltage at `out` without it.
FORGOTTEN: dict[str, tuple[str, complex]] = {
    "scale of a resistor": ("R2 out 0 {temper*100} scale=2", 3700 / 4700),
    "scale by a parameter": (".param a={temper*100}\nR2 out 0 {a} scale=2", 3700 / 4700),
    "model of a resistor": (".model rm r(tc1=0.1)\nR2 out 0 rm {temper*100}", 3700 / 4700),
    "a capacitor in ac": ("C2 out 0 {temper*1u}\nR2 out 0 1k", 0.5),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", FORGOTTEN)
def test_what_ngspice_forgets_is_refused(tmp_path: Path, name: str) -> None:
    """It says nothing about it, so rcnet does."""
    body, volts = FORGOTTEN[name]
    text = f"* gauge\nV1 in 0 DC 0 AC 1\nR1 in out 1k\n{body}\n.temp 37\n.ac lin 1 1k 1k\n.end\n"
    pair = both(tmp_path, text)
    assert pair.curves is not None
    (found,) = (curve.values[0] for curve in pair.curves if curve.name == "v(out)")
    assert found == pytest.approx(volts, rel=1e-9)
    assert "has temper in its value" in pair.refusal


def read(body: str) -> Circuit:
    """A netlist about a resistor R1."""
    return parse_netlist("* gauge\nV1 in 0 AC 1\n" + body, "gauge.cir")


REFUSED: dict[str, tuple[str, str]] = {
    "no value in the model": (RM + "R1 in 0 rm\n", "R1 has no value, and its model gives none"),
    "no sheet": (".model rm r(defw=1u)\nR1 in 0 rm l=1u\n", "its model gives none"),
    "narrowed to nothing": (".model rm r(rsh=50 narrow=1u)\nR1 in 0 rm l=9u w=2u\n", "makes it 0 m wide"),
    "narrowed beyond nothing": (
        ".model rm r(rsh=50 narrow=2u)\nR1 in 0 rm l=9u w=2u\n",
        "R1 has the value -225",
    ),
    "warmed beyond nothing": ("R1 in 0 1k tc1=-0.1\n.temp 47\n", "R1 has the value -1000"),
    "warmed beyond the numbers": ("R1 in 0 1k tce=1e6\n.temp 1000\n", "R1 has the value inf"),
    "flicker noise": (".model rm r(kf=1e-12)\nR1 in 0 rm 1k\n", "flicker noise"),
    "a word that is no setting": (".model rm r(fast tc1=1)\nR1 in 0 rm 1k\n", "'rm' holds 'fast'"),
    "setting without a value": (".model rm r(tc1=)\nR1 in 0 rm 1k\n", "tc1= has nothing behind it"),
    "undefined in a model": (".model rm r(tc1={nope})\nR1 in 0 rm 1k\n", "'nope' is not defined"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_makes_no_value_is_refused(name: str) -> None:
    """Ngspice takes one of them for 1 milliohm, and says nothing to the others."""
    body, says = REFUSED[name]
    with pytest.raises(CircuitError) as caught:
        read(body)
    assert re.search(says, str(caught.value)), str(caught.value)


def test_a_model_defined_twice_is_noticed() -> None:
    """The first counts; its line is named."""
    (seen,) = read("R1 in 0 rm\n.model rm r(r=1k)\n.model RM r(r=2k)\n").seen
    assert (seen.code, seen.place.line, seen.place.column) == ("duplicate-model", 5, 8)
    assert "on line 4" in seen.message


def test_nothing_for_a_value_is_noticed() -> None:
    """A resistor of 0 ohm becomes one of 1 milliohm; a capacitor of 0 farad is none."""
    circuit = read("R1 in a 0\nR2 a 0 {1-1}\nC1 a 0 0\nR3 a 0 1k\n")
    assert [(each.code, each.place.line) for each in circuit.seen] == [
        ("zero-resistance", 3),
        ("zero-resistance", 4),
        ("zero-capacitance", 5),
    ]
    assert circuit.network.names == ("V1", "R1", "R2", "R3")
    assert circuit.network.part("R1").value == 1e-3


@pytest.mark.parametrize(
    ("card", "celsius"),
    [
        (".temp 47", 47),
        (".options temp=47", 47),
        (".temp 47\n.options temp=37", 47),
        (".temp 37 47", 27),
        ("", 27),
    ],
)
def test_the_circuit_works_at_its_temperature(card: str, celsius: float) -> None:
    """What noise and tolerances are told is what the parts were computed with."""
    conditions = read(f"R1 in 0 1k\n{card}\n").conditions
    assert (conditions.low, conditions.nominal, conditions.high) == (celsius,) * 3
