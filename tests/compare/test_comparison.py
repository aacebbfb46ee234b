"""Results held against the exact curves: what agrees, what differs, where and by how much."""

from __future__ import annotations

import json
import math
import random
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import rcnet
from rcnet import Curve, Curves, Network, ResultsError
from rcnet.circuit import Analyses, Circuit, Sweep
from rcnet.compare import Comparison, CurveComparison, compare
from rcnet.curves import read_results
from rcnet.netlist import write
from rcnet.opinion import ask
from rcnet.report.document import comparison_document, to_json

R, C = 1e4, 1e-8
GRID = np.geomspace(10, 1e6, 101)


def low_pass(r: float = R, c: float = C, *, dc: float = 2.5) -> Network:
    """One RC section, 1 V ac and some dc."""
    net = Network("Float gauge filter")
    net.add_voltage_source("Vin", "in", "0", ac=1, dc=dc)
    net.add_resistor("R1", "in", "out", r)
    net.add_capacitor("C1", "out", "0", c)
    return net


def circuit(network: Network | None = None, *output: str) -> Circuit:
    """A circuit that asks for an ac analysis and an operating point."""
    analyses = Analyses(ac=Sweep(10, 1e6, 20), operating_point=True)
    return Circuit(network or low_pass(), "float-gauge", output=output or ("out",), analyses=analyses)


def h(frequency: Any = GRID, r: float = R, c: float = C) -> np.ndarray[Any, Any]:
    """The textbook response of the section, 1/(1 + j omega RC)."""
    return np.asarray(1 / (1 + 2j * np.pi * np.asarray(frequency) * r * c))


def ac(values: Any, name: str = "v(out)", frequency: Any = GRID, **more: Any) -> Curve:
    """An ac curve."""
    return Curve(name, "ac", np.asarray(frequency, float), np.asarray(values, complex), "V", **more)


def held(*curves: Curve, against: Circuit | None = None) -> Comparison:
    """The comparison of these curves with the low-pass."""
    return compare(against or circuit(), Curves("bench.raw", curves))


def the_one(comparison: Comparison) -> CurveComparison:
    """The only curve compared."""
    (curve,) = comparison.curves
    return curve


# ---------------------------------------------------------------------- agreeing, differing


def test_the_textbook_curve_agrees() -> None:
    """The closed form of the response agrees to rounding, at the results' own points."""
    found = held(ac(h()))
    assert found.verdict == "agree"
    curve = the_one(found)
    assert (curve.name, curve.analysis, curve.points, curve.verdict, curve.spans) == (
        "v(out)",
        "ac",
        101,
        "agree",
        (),
    )
    assert curve.worst.relative < 1e-14
    assert (found.uncompared, found.remarks) == ((), ())


@pytest.mark.parametrize("part", ["R1", "C1", "R2", "C2"])
def test_a_part_off_by_a_hundredth_of_a_decibel_differs(part: str) -> None:
    """Any part scaled by 1.0012 (0.01 dB) differs, most where it matters: in the stopband."""
    net = low_pass()
    net.add_resistor("R2", "out", "end", 2 * R)
    net.add_capacitor("C2", "end", "0", C / 3)
    changed = net.with_values({part: net.part(part).value * 1.0012})
    values = changed.response(GRID, "end")
    found = held(ac(values, "v(end)"), against=circuit(net, "end"))
    curve = the_one(found)
    assert found.verdict == "differ"
    assert abs(curve.worst.db or 0) == pytest.approx(20 * math.log10(1.0012), rel=0.02)
    assert curve.worst.at > 1e5
    assert curve.spans[-1].stop == GRID[-1]


def test_span_and_worst_place() -> None:
    """A dip is one span around its points and short of its neighbours, its worst place the deepest point."""
    values = h()
    values[40:50] *= 0.99
    values[44] *= 0.5
    curve = the_one(held(ac(values)))
    (span,) = curve.spans
    assert GRID[39] < span.start <= GRID[40]
    assert GRID[49] <= span.stop < GRID[50]
    assert span.worst.at == GRID[44]
    assert span.worst.db == pytest.approx(20 * math.log10(0.495), rel=1e-9)
    assert span.worst.relative == pytest.approx(1 - 0.495, rel=1e-9)
    assert curve.worst == span.worst


def test_several_spans() -> None:
    """Two places that differ are two spans, even of one point; the curve's worst is the worse of them."""
    values = h()
    values[[3, 4, 80]] *= [1.01, 1.01, 1.1]
    curve = the_one(held(ac(values)))
    for span, first, last in zip(curve.spans, (3, 80), (4, 80), strict=True):
        assert GRID[first - 1] < span.start <= GRID[first]
        assert GRID[last] <= span.stop < GRID[last + 1]
    assert curve.worst.at == GRID[80]


SIGNS = {
    "greater": (1.05, 20 * math.log10(1.05), 0.0),
    "smaller": (0.9, 20 * math.log10(0.9), 0.0),
    "ahead": (complex(math.cos(0.1), math.sin(0.1)), 0.0, math.degrees(0.1)),
    "behind": (complex(math.cos(0.1), -math.sin(0.1)), 0.0, -math.degrees(0.1)),
    "ten times and turned": (-10j, 20.0, -90.0),
    "upside down": (-1.0, 0.0, 180.0),
    "a hair greater": (1 + 1e-9, 20 / math.log(10) * 1e-9, 0.0),
}


@pytest.mark.parametrize("case", SIGNS)
def test_signs_of_the_difference(case: str) -> None:
    """The decibels are positive where the other is greater, degrees positive where it is ahead."""
    factor, db, deg = SIGNS[case]
    worst = the_one(held(ac(h() * factor))).worst
    assert worst.db == pytest.approx(db, rel=1e-6, abs=1e-9)
    assert worst.deg is not None
    assert (worst.deg - deg) % 360 == pytest.approx(0, abs=1e-6) or (deg - worst.deg) % 360 < 1e-6
    assert worst.relative == pytest.approx(abs(factor - 1), rel=1e-6)


def test_zero_in_the_results() -> None:
    """Where the other value is exactly zero there are no decibels and degrees; the whole is missing."""
    values = h()
    values[7] = 0
    curve = the_one(held(ac(values)))
    (span,) = curve.spans
    assert (span.worst.db, span.worst.deg, span.worst.relative) == (None, None, 1.0)


def test_zero_in_the_exact_curve() -> None:
    """Where nothing should arrive, what arrives differs, told over its own greatest value."""
    net = Network("bridge")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    for name, r in (("a", 1e3), ("b", 2e3)):
        net.add_resistor(f"R{name}1", "in", name, r)
        net.add_resistor(f"R{name}2", name, "0", r)
    found = held(ac(np.full(101, 1e-3), "v(a,b)"), against=circuit(net, "a", "b"))
    curve = the_one(found)
    assert (curve.verdict, curve.worst.relative) == ("differ", 1.0)


@pytest.mark.parametrize("bad", [math.nan, math.inf, complex(1, math.nan)])
def test_what_is_no_number_is_refused(bad: complex) -> None:
    """A result that is no finite number is an error, never an agreement."""
    values = h()
    values[5] = bad
    with pytest.raises(ResultsError, match="no finite number"):
        held(ac(values))


# ---------------------------------------------------------------------- names


def test_renamed_nodes_map_back() -> None:
    """Nodes that a netlist cannot spell come back under the circuit's own names."""
    net = Network("names")
    net.add_voltage_source("Vin", "pump+", "0", ac=1)
    net.add_resistor("R1", "pump+", "Ausgang/ä", R)
    net.add_capacitor("C1", "Ausgang/ä", "0", C)
    written = write(circuit(net, "Ausgang/ä"))
    new = written.names.nodes["Ausgang/ä"]
    assert new != "Ausgang/ä"
    found = held(ac(h(), f"v({new.lower()})"), against=circuit(net, "Ausgang/ä"))
    assert the_one(found).name == "v(Ausgang/ä)"
    assert found.verdict == "agree"


def test_case_does_not_matter_unless_it_tells_nodes_apart() -> None:
    """`v(OUT)` is the node `out`; nodes `A` and `a` are told apart by the names the netlist gave them."""
    assert the_one(held(ac(h(), "V(OUT)"))).name == "v(out)"
    net = Network("case")
    net.add_voltage_source("Vin", "A", "0", ac=1)
    net.add_resistor("R1", "A", "a", R)
    net.add_capacitor("C1", "a", "0", C)
    whole = circuit(net, "a")
    names = write(whole).names.nodes
    curves = [ac(np.ones(101), f"v({names['A'].lower()})"), ac(h(), f"v({names['a'].lower()})")]
    assert held(*curves, against=whole).verdict == "agree"


def test_differences_and_currents() -> None:
    """`v(in,out)` and `i(vin)` are compared; in SPICE a battery that delivers has a negative current."""
    across = ac(1 - h(), "v(in,out)")
    current = ac(-(1 - h()) / R, "i(vin)")
    found = held(ac(h()), across, current)
    assert {curve.name: curve.verdict for curve in found.curves} == {
        "v(out)": "agree",
        "v(in,out)": "agree",
        "i(Vin)": "agree",
    }
    wrong = held(ac(h()), ac((1 - h()) / R, "i(vin)"))
    assert [curve.verdict for curve in wrong.curves] == ["agree", "differ"]


def test_source_of_another_amplitude() -> None:
    """Results are in volts: with a source of 3 V at 40 degrees they hold three times the response, turned."""
    net = Network("louder")
    net.add_voltage_source("Vin", "in", "0", ac=3, ac_phase=40)
    net.add_resistor("R1", "in", "out", R)
    net.add_capacitor("C1", "out", "0", C)
    phasor = 3 * np.exp(1j * np.radians(40))
    assert held(ac(h() * phasor), against=circuit(net)).verdict == "agree"
    per_unit = held(ac(h()), against=circuit(net))
    assert per_unit.verdict == "differ"
    assert any("ac value of 1 for Vin" in remark for remark in per_unit.remarks)
    assert held(ac(2 * h()), against=circuit(net)).remarks == ()


def test_a_trace_without_a_name_is_the_outputs() -> None:
    """Bench instruments name no node: such a trace is held against the circuit's output."""
    (found,) = held(ac(h(), "response")).curves
    assert (found.name, found.verdict) == ("v(out)", "agree")
    (found,) = held(ac(1.01 * h(), "response")).curves
    assert found.verdict == "differ"


def test_results_that_are_not_compared_may_be_all_there_is() -> None:
    """The main job lists what is not compared where a circuit asks for nothing else."""
    other = Curve("v(out)", "other", np.array([0.0, 1e-3]), np.array([0.0, 1.0]), "V")
    found = compare(circuit(), Curves("results.raw", (other,)), may_be_empty=True)
    assert (found.verdict, found.curves) == ("agree", ())
    assert [left.name for left in found.uncompared] == ["v(out)"]


def test_what_cannot_be_compared_is_told() -> None:
    """Curves of other kinds, and of nodes there are none of, are listed with the reason and spoil nothing."""
    early = Curve("v(out)", "transient", np.array([-1e-3, 1e-3]), np.array([0.0, 1.0]), "V")
    loud = Curve("onoise_r9", "noise", GRID, np.abs(h()), "V/sqrt(Hz)")
    sweep = Curve("v(out)", "other", np.array([0.0, 1.0]), np.array([0.0, 1.0]), "V")
    found = held(ac(h()), ac(h(), "v(elsewhere)"), ac(h(), "i(r1)"), ac(h(), "power"), early, loud, sweep)
    assert found.verdict == "agree"
    why = {curve.name + " " + curve.analysis: curve.why for curve in found.uncompared}
    assert "no node 'elsewhere'" in why["v(elsewhere) ac"]
    assert "no source 'r1'" in why["i(r1) ac"]
    assert "only voltages" in why["power ac"]
    assert "time begins below zero" in why["v(out) transient"]
    assert "of noise the spectra" in why["onoise_r9 noise"]
    assert "kind of plot" in why["v(out) other"]


# ---------------------------------------------------------------------- operating points


def point(value: float, name: str = "v(out)") -> Curve:
    """An operating point."""
    return Curve(name, "operating point", np.zeros(1), np.array([value]), "V")


def test_operating_point() -> None:
    """At dc the section passes all; a wrong value differs, with decibels and without degrees."""
    found = held(point(2.5), point(2.5, "v(in)"), point(0.0, "i(vin)"))
    assert [(curve.name, curve.verdict) for curve in found.curves] == [
        ("v(out)", "agree"),
        ("v(in)", "agree"),
        ("i(Vin)", "agree"),
    ]
    curve = the_one(held(point(2.4)))
    assert curve.verdict == "differ"
    assert curve.worst.db == pytest.approx(20 * math.log10(2.4 / 2.5), rel=1e-9)
    assert (curve.worst.deg, curve.worst.at, curve.fsv) == (None, 0.0, None)
    assert (curve.worst.exact, curve.worst.other) == (2.5, 2.4)


def test_operating_point_that_does_not_exist() -> None:
    """Without a dc path there is no exact operating point; the ac curves are compared all the same."""
    net = Network("coupled")
    net.add_voltage_source("Vin", "in", "0", ac=1)
    net.add_capacitor("C1", "in", "out", 1e-9)
    net.add_capacitor("C2", "out", "0", 3e-9)
    found = held(ac(np.full(101, 0.25)), point(0.7), against=circuit(net))
    assert found.verdict == "agree"
    assert [curve.analysis for curve in found.curves] == ["ac"]
    assert "no one answer at dc" in found.uncompared[0].why
    with pytest.raises(ResultsError, match="nothing in the results can be compared"):
        held(point(0.7), against=circuit(net))


# ---------------------------------------------------------------------- files with few digits


def csv(values: Any, digits: int, frequency: Any = GRID, axis_digits: int = 17) -> str:
    """A results file with so many digits, as an instrument writes it."""
    rows = [
        f"{f:.{axis_digits}g},{v.real:.{digits - 1}e},{v.imag:.{digits - 1}e}"
        for f, v in zip(frequency, values, strict=True)
    ]
    return "\n".join(["frequency,v(out).real,v(out).imag", *rows]) + "\n"


def csv_decibels(values: Any) -> str:
    """The same with decibels to two places and degrees to one."""
    rows = [
        f"{f:.17g},{20 * math.log10(abs(v)):.2f},{math.degrees(np.angle(v)):.1f}"
        for f, v in zip(GRID, values, strict=True)
    ]
    return "\n".join(["frequency,v(out).db,v(out).deg", *rows]) + "\n"


SHIFT = 10 ** (0.05 / 20)
FILES: dict[str, Callable[[Any], str]] = {
    "4 digits": lambda values: csv(values, 4),
    "4 digits, 5 in the frequency": lambda values: csv(values, 4, axis_digits=5),
    "12 digits, 4 in the frequency": lambda values: csv(values, 12, axis_digits=4),
    "decibels and degrees": csv_decibels,
}


@pytest.mark.parametrize("case", FILES)
def test_files_with_few_digits(case: str, tmp_path: Path) -> None:
    """What few digits can do is allowed; a shift of 0.05 dB in the same file is seen."""
    for factor, verdict in ((1.0, "agree"), (SHIFT, "differ")):
        path = tmp_path / f"bench-{verdict}.csv"
        path.write_text(FILES[case](h() * factor), encoding="utf-8")
        found = compare(circuit(), read_results(path))
        assert found.verdict == verdict, found.curves


def test_current_with_a_coarse_frequency(tmp_path: Path) -> None:
    """Few digits in the frequency move currents too."""
    current = -(1 - h()) / R
    rows = [
        f"{f:.4g},{v.real:.15e},{v.imag:.15e},{i.real:.15e},{i.imag:.15e}"
        for f, v, i in zip(GRID, h(), current, strict=True)
    ]
    head = "frequency,v(out).real,v(out).imag,i(vin).real,i(vin).imag"
    path = tmp_path / "bench.csv"
    path.write_text("\n".join([head, *rows]) + "\n", encoding="utf-8")
    found = compare(circuit(), read_results(path))
    assert found.verdict == "agree", found.curves
    assert any("0.01 dB" in remark for remark in found.remarks) == (found.curves[1].coarse is not None)


# ---------------------------------------------------------------------- what is no result of this circuit


def test_results_of_another_circuit() -> None:
    """Results that name no node of the circuit are refused, naming what they hold and what was looked for."""
    with pytest.raises(ResultsError, match="not about this circuit") as caught:
        held(ac(h(), "v(x)"), ac(h(), "v(y)"))
    assert "v(x), v(y)" in caught.value.message
    assert caught.value.remedy is not None
    assert "v(out)" in caught.value.remedy
    assert caught.value.file == "bench.raw"


def test_results_without_the_output() -> None:
    """The output must be among the ac curves: agreement elsewhere says nothing about it."""
    with pytest.raises(ResultsError, match="no voltage of the output 'out'"):
        held(ac(np.ones(101), "v(in)"))
    with pytest.raises(ResultsError, match="no voltage of the output 'out'"):
        held(ac(np.ones(101), "v(in)"), point(2.5))


def test_nothing_that_is_compared() -> None:
    """Results of a sweep alone, or none at all, cannot be compared, and that is said."""
    sweep = Curve("v(out)", "other", np.array([0.0, 1.0]), np.array([0.0, 1.0]), "V")
    with pytest.raises(ResultsError, match="no analysis that is compared"):
        held(sweep)
    with pytest.raises(ResultsError, match="no analysis that is compared"):
        compare(circuit(), Curves("empty.raw", ()))


# ---------------------------------------------------------------------- the document

REQUIRED = {
    "document": {"circuit", "second_opinion", "verdict", "curves", "causes"},
    "curve": {"name", "analysis", "points", "verdict", "worst", "spans", "fsv"},
    "worst": {"at", "exact", "other", "db", "deg", "relative"},
    "span": {"from", "to", "worst_at", "db", "deg", "relative"},
    "fsv": {"adm", "fdm", "gdm", "grade"},
}
ADDED = {
    "document": {"not_compared", "remarks"},
    "curve": {"unit"},
    "worst": {"allowed"},
    "span": {"shape"},
}


def keys(what: str, table: dict[str, Any]) -> None:
    """Fail unless a table has the keys of the interface, and none but those added to it on purpose."""
    assert set(table) == REQUIRED[what] | ADDED.get(what, set())


def test_document() -> None:
    """The JSON document has the interface's keys, is valid JSON, and holds the comparison's numbers."""
    values = h()
    values[40:50] *= 0.99
    values[7] = 0
    found = held(ac(values), point(2.4))
    text = to_json(comparison_document(found))
    document = json.loads(text, parse_constant=lambda word: pytest.fail(f"{word} is no JSON"))
    keys("document", document)
    assert (document["circuit"], document["second_opinion"]) == ("float-gauge", "bench.raw")
    assert document["verdict"] == "differ"
    # One point gone and a hundredth missing over a stretch: no one change of the circuit does that.
    assert [cause["kind"] for cause in document["causes"]] == ["unexplained"]
    assert set(document["causes"][0]) == {"kind", "part", "factor", "says", "explains"}
    curve, at_dc = document["curves"]
    for table in (curve, at_dc):
        keys("curve", table)
        keys("worst", table["worst"])
    assert (curve["name"], curve["analysis"], curve["points"]) == ("v(out)", "ac", 101)
    keys("fsv", _fsv_of(h() * 1.01))
    assert curve["spans"][0]["worst_at"] == GRID[7]
    assert GRID[39] < curve["spans"][1]["from"] <= GRID[40]
    for span in curve["spans"]:
        keys("span", span)
    worst = curve["worst"]
    assert (worst["at"], worst["db"], worst["deg"], worst["relative"]) == (GRID[7], None, None, 1.0)
    assert worst["other"] == [0.0, 0.0]
    textbook = complex(h(GRID[7]))
    assert worst["exact"] == pytest.approx([textbook.real, textbook.imag], rel=1e-12)
    assert at_dc["analysis"] == "operating point"
    assert (at_dc["worst"]["exact"], at_dc["worst"]["other"], at_dc["fsv"]) == (2.5, 2.4, None)


def _fsv_of(values: Any) -> dict[str, Any]:
    table = comparison_document(held(ac(values)))["curves"][0]["fsv"]
    assert isinstance(table, dict)
    return table


def test_fsv_needs_an_even_grid() -> None:
    """FSV is told for curves of enough points at even steps, and null for others."""
    assert _fsv_of(h())["gdm"] == pytest.approx(0, abs=1e-9)
    uneven = np.unique(np.concatenate([GRID, [777.0]]))
    assert the_one(held(ac(h(uneven), frequency=uneven))).fsv is None
    assert the_one(held(ac(h(GRID[:5]), frequency=GRID[:5]))).fsv is None


def test_public_compare_takes_a_network() -> None:
    """`rcnet.compare` takes a bare network and names the second opinion after the file."""
    found = rcnet.compare(low_pass(), Curves("a/b/bench.raw", (ac(h()),)))
    assert (found.verdict, found.second_opinion) == ("agree", "bench.raw")


# ---------------------------------------------------------------------- size, and the real simulator


def mesh(side: int) -> Network:
    """A square mesh of resistors with a capacitor at every node, driven in one corner."""
    rng, net = random.Random(1), Network("mesh")
    net.add_voltage_source("Vin", "n0_0", "0", ac=1, dc=1)
    for i in range(side):
        for j in range(side):
            here = f"n{i}_{j}"
            net.add_capacitor(f"C{i}_{j}", here, "0", 1e-9 * rng.uniform(0.5, 2))
            if i + 1 < side:
                net.add_resistor(f"Ra{i}_{j}", here, f"n{i + 1}_{j}", 1e3 * rng.uniform(0.5, 2))
            if j + 1 < side:
                net.add_resistor(f"Rb{i}_{j}", here, f"n{i}_{j + 1}", 1e3 * rng.uniform(0.5, 2))
    return net


def ladder(sections: int) -> Network:
    """A long ladder."""
    net, last = Network("line"), "n0"
    net.add_voltage_source("Vin", "n0", "0", ac=1, dc=1)
    for number in range(1, sections + 1):
        net.add_resistor(f"R{number}", last, f"n{number}", 100)
        net.add_capacitor(f"C{number}", f"n{number}", "0", 1e-9)
        last = f"n{number}"
    return net


LARGE = {"a ladder of 200 sections": (ladder(200), "n200"), "a mesh of 30 by 30": (mesh(30), "n29_29")}


@pytest.mark.ngspice
@pytest.mark.parametrize("case", LARGE)
def test_large_networks_take_seconds(case: str) -> None:
    """Large networks are compared within seconds: the output always, a sample of the others."""
    network, output = LARGE[case]
    analyses = Analyses(ac=Sweep(100, 1e6, 10), operating_point=True)
    whole = Circuit(network, "large", output=(output,), analyses=analyses)
    opinion = ask(write(whole), "ngspice")
    assert opinion is not None
    begun = time.process_time()
    found = compare(whole, opinion.curves)
    assert time.process_time() - begun < 20
    assert found.verdict == "agree"
    assert f"v({output})" in {curve.name for curve in found.curves if curve.analysis == "ac"}
    assert len(found.curves) + len(found.uncompared) == len(opinion.curves)
    assert all("sample" in curve.why for curve in found.uncompared)


@pytest.mark.ngspice
@pytest.mark.parametrize("part", ["R1", "C1"])
def test_ngspice_with_another_part_differs(part: str) -> None:
    """What ngspice says of a circuit with one part off by 0.012 % differs from the circuit as meant."""
    wrong = low_pass().with_values({part: low_pass().part(part).value * 1.00012})
    opinion = ask(write(circuit(wrong)), "ngspice")
    assert opinion is not None
    found = compare(circuit(), opinion.curves)
    assert {curve.name for curve in found.curves if curve.verdict == "differ"} == {"v(out)", "i(Vin)"}
    assert {curve.analysis for curve in found.curves if curve.verdict == "differ"} == {"ac"}
