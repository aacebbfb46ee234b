"""Transients held against exact waveforms: what steps, corners and starting states do to a simulator."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from rcnet import Curve, Curves, Network, ResultsError
from rcnet.circuit import Analyses, Circuit, StartingState, TransientRun
from rcnet.compare import Comparison, CurveComparison, compare
from rcnet.curves import parse_csv, parse_raw
from rcnet.netlist import deck, write
from rcnet.opinion import find_ngspice
from rcnet.opinion.ngspice import Expected, run_deck

Float = npt.NDArray[np.float64]
R, C = 1e4, 1e-8
TAU = R * C
RISE = 1e-6  # of the length of the run: what a vertical step becomes in a netlist


def low_pass(**drive: Any) -> Network:
    """One RC section behind a source."""
    net = Network("Float gauge filter")
    net.add_voltage_source("Vin", "in", "0", **(drive or {"step": {"from": 0, "to": 1}}))
    net.add_resistor("R1", "in", "out", R)
    net.add_capacitor("C1", "out", "0", C)
    return net


def circuit(network: Network | None = None, *, stop: float = 8 * TAU, **more: Any) -> Circuit:
    """A circuit that asks for a transient."""
    run = more.pop("run", TransientRun(stop, stop / 100))
    made = network or low_pass()
    return Circuit(made, "float-gauge", output=("out",), analyses=Analyses(transient=run), **more)


def curve(time: Float, values: Any, name: str = "v(out)", **more: Any) -> Curve:
    """A curve over time."""
    return Curve(name, "transient", np.asarray(time, float), np.asarray(values, float), "V", **more)


def held(*curves: Curve, against: Circuit | None = None) -> Comparison:
    """The comparison of these curves with the low-pass."""
    return compare(against or circuit(), Curves("bench.raw", curves))


def the_one(found: Comparison) -> CurveComparison:
    """The only curve compared."""
    (only,) = found.curves
    return only


def risen(time: Float, tau: float = TAU, *, rise: float = RISE * 8 * TAU) -> Float:
    """The textbook answer of the section to a step that takes `rise`: 1 - exp(-t/tau), edge and all."""
    ramp = np.clip(time, 0, rise)
    late = np.maximum(time - rise, 0.0)
    edge = (ramp - tau * -np.expm1(-ramp / tau)) / rise
    return np.where(time <= rise, edge, 1 - (1 - edge) * np.exp(-late / tau))


def uneven() -> Float:
    """Points at no rule, dense at the beginning."""
    return np.concatenate([[0.0], np.geomspace(RISE * 8 * TAU, 8 * TAU, 300)])


# ---------------------------------------------------------------------- agreeing, differing


def test_the_textbook_waveform_agrees() -> None:
    """The closed form at uneven points agrees, to rounding."""
    found = the_one(held(curve(uneven(), risen(uneven()))))
    assert (found.verdict, found.spans, found.points) == ("agree", (), 301)
    assert found.worst.relative < 1e-11
    assert (found.worst.db, found.worst.deg) == (None, None)


@pytest.mark.parametrize("factor", [0.99, 1.01])
def test_a_time_constant_off_by_a_hundredth_differs(factor: float) -> None:
    """The closed form of a part off by 1 % differs by 1/e % of the step, most at t = tau."""
    found = the_one(held(curve(uneven(), risen(uneven(), factor * TAU))))
    assert found.verdict == "differ"
    assert found.worst.relative == pytest.approx(0.01 / math.e, rel=0.02)
    assert found.worst.at == pytest.approx(TAU, rel=0.05)


def test_the_source_current() -> None:
    """The current of a source is the sum through R and C at its node; in SPICE it is negative."""
    net = low_pass(sine={"amplitude": 1, "frequency": 1e3})
    net.add_capacitor("C2", "in", "0", 1e-9)
    time = np.linspace(0, 8 * TAU, 3001)
    w, p = 2e3 * math.pi, -1 / TAU
    h = 1 / (1 + 1j * w * TAU)
    out = (h * np.exp(1j * w * time)).imag + w * TAU / (1 + (w * TAU) ** 2) * np.exp(p * time)
    current = -(np.sin(w * time) - out) / R - 1e-9 * w * np.cos(w * time)
    found = held(curve(time, out), curve(time, current, "i(vin)"), against=circuit(net))
    assert found.verdict == "agree"
    assert [each.unit for each in found.curves] == ["V", "A"]
    without = held(curve(time, out), curve(time, current * 1.001, "i(vin)"), against=circuit(net))
    assert [each.verdict for each in without.curves] == ["agree", "differ"]


def test_a_current_that_is_not_followed() -> None:
    """Two voltage sources share a current in a way that is not followed over time; that is told."""
    net = low_pass()
    net.add_voltage_controlled_voltage_source("E1", "in2", "in", "out", "0", 1.0)
    net.add_resistor("R2", "in2", "0", 1e4)
    found = held(curve(uneven(), risen(uneven())), curve(uneven(), uneven(), "i(vin)"), against=circuit(net))
    assert [each.name for each in found.curves] == ["v(out)"]
    assert [(left.name, "followed" in left.why) for left in found.uncompared] == [("i(vin)", True)]


def test_only_from_zero_on() -> None:
    """Before t = 0 there is no exact waveform."""
    with pytest.raises(ResultsError, match="begins below zero"):
        held(curve(np.array([-1e-3, 0.0, 1e-3]), [0, 0, 1]))


def test_edges_go_by_the_length_of_the_results() -> None:
    """Where the circuit asks for no transient, a vertical edge is a millionth of the results' length."""
    bare = Circuit(low_pass(), "bare", output=("out",))
    assert held(curve(uneven(), risen(uneven())), against=bare).verdict == "agree"


# ---------------------------------------------------------------------- rules of integration


OPTIONS: dict[str, dict[str, str]] = {
    "trapezoidal": {},
    "gear": {"method": "gear"},
    "euler": {"maxord": "1"},
}
# The greatest error after a step over its height, in (h/tau)^2 or h/tau: reference on numerical methods, 9.
LAWS: dict[str, Callable[[float], float]] = {
    "trapezoidal": lambda h: h * h / (12 * math.e),
    "gear": lambda h: h * h / (3 * math.e),
    "euler": lambda h: h / (2 * math.e),
}


@pytest.mark.parametrize("rule", OPTIONS)
def test_what_a_rule_makes_of_a_step_is_allowed(rule: str) -> None:
    """Values by the rule the options name agree at the points it took; the opposite error differs."""
    ramp = {"values": [[0, 0], [TAU / 50, 1]]}
    for share in (20, 100):
        time = np.arange(8 * share + 1) * TAU / share
        own = circuit(low_pass(points=ramp), options=OPTIONS[rule])
        h = TAU / share
        exact = risen(time, rise=TAU / 50)
        other = _by_rule(time, ramp, rule)
        found = the_one(held(curve(time, other), against=own))
        assert found.verdict == "agree", found.worst
        mirrored = the_one(held(curve(time, 2 * exact - other), against=own))
        assert mirrored.verdict == "differ"
        assert h > 0


def _by_rule(time: Float, ramp: dict[str, Any], rule: str) -> Float:
    corners = np.array(ramp["values"])
    drive, h, answer = np.interp(time, *corners.T), time[1], [0.0]
    for n in range(1, len(time)):
        last, u = answer[-1], drive[n]
        if rule == "gear" and n > 2:
            answer.append((4 * last - answer[-2] + 2 * h / TAU * u) / (3 + 2 * h / TAU))
        elif rule == "trapezoidal" and n > 2:
            answer.append((last * (1 - h / 2 / TAU) + h / 2 / TAU * (drive[n - 1] + u)) / (1 + h / 2 / TAU))
        else:
            answer.append((last + h / TAU * u) / (1 + h / TAU))
    return np.array(answer)


@pytest.mark.parametrize("rule", LAWS)
def test_the_foreseen_error_follows_the_law(rule: str) -> None:
    """The allowance for a decay from a given state is the published error of the rule, and a quarter more."""
    net = low_pass(dc=0.0)
    state = StartingState({"out": 1.0})
    run = TransientRun(8 * TAU, TAU, use_initial=True)
    for share in (50, 200):
        # Two short steps come first, as simulators make them, so that first order does no harm.
        first = np.array([0.0, 1e-6, 2e-6, 4e-6])
        time = np.concatenate([first, 1e-5 + np.arange(8 * share) / share]) * TAU
        own = circuit(net, run=run, initial=state, options=OPTIONS[rule])
        exact, foreseen = np.exp(-time / TAU), 0.0
        for side in (-2e-11, 2e-11):
            found = the_one(held(curve(time, exact + side), against=own))
            assert found.verdict == "agree"
            assert found.held is not None
            near = np.abs(found.held.axis - TAU) < TAU / 4
            foreseen = max(foreseen, float(found.held.allowed[near].max()) / 1.25)
        assert foreseen == pytest.approx(LAWS[rule](1 / share), rel=0.05)


# ---------------------------------------------------------------------- files with few digits, looks


def test_files_with_few_digits() -> None:
    """What few digits can do to values and times is allowed; a shift of 0.5 % is seen in the same file."""
    time = np.linspace(0, 8 * TAU, 400)
    for factor, verdict in ((1.0, "agree"), (1.005, "differ")):
        rows = [f"{t:.5g},{v:.4g}" for t, v in zip(time, factor * risen(time), strict=True)]
        text = "\n".join(["time,v(out)", *rows]) + "\n"
        assert compare(circuit(), parse_csv(text, "bench.csv")).verdict == verdict


def test_how_alike_two_waveforms_look() -> None:
    """FSV is told for transients at even steps, whatever the points: nothing for one curve, more for two."""
    same = the_one(held(curve(uneven(), risen(uneven()))))
    assert same.fsv is not None
    # The other is known at its points only, with straight lines between them.
    assert (same.fsv.grade, same.fsv.gdm < 0.01) == ("Excellent", True)
    off = the_one(held(curve(uneven(), risen(uneven(), 2 * TAU))))
    assert off.fsv is not None
    assert off.fsv.gdm > 10 * same.fsv.gdm


# ---------------------------------------------------------------------- the real simulator


def simulated(text: str, tmp_path: Any) -> Curves:
    """What ngspice makes of a deck."""
    program = find_ngspice()
    assert program is not None
    return parse_raw(
        run_deck(text, Expected("Transient Analysis", ()), executable=program).raw, "results.raw"
    )


DECKS: dict[str, Circuit] = {
    "from a voltage given": circuit(low_pass(dc=1.0), initial=StartingState({"out": 0.2})),
    "told to use a state": circuit(
        low_pass(dc=1.0),
        run=TransientRun(8 * TAU, TAU / 10, use_initial=True),
        initial=StartingState({}, {"C1": 0.2}),
    ),
    "a late start": circuit(
        low_pass(square={"low": 0, "high": 1, "frequency": 1e3}), run=TransientRun(5e-3, 1e-5, start=2e-3)
    ),
    "a pulse begun at a point of the grid": circuit(
        low_pass(square={"low": 0, "high": 1, "frequency": 1e3}), run=TransientRun(1e-2, 1e-5)
    ),
    "an exponential that is stepped over": circuit(
        low_pass(exponential={"from": 0, "to": 1, "at": "123.456 us", "time_constant": "10 us"}), stop=1e-2
    ),
    "gear": circuit(low_pass(sine={"amplitude": 1, "frequency": 2e3}), options={"method": "gear"}),
    "backward Euler": circuit(low_pass(sine={"amplitude": 1, "frequency": 2e3}), options={"maxord": "1"}),
    "coarse steps": circuit(low_pass(), run=TransientRun(50 * TAU, 10 * TAU)),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("case", DECKS)
def test_ngspice_agrees_and_a_wrong_part_differs(case: str, tmp_path: Any) -> None:
    """Ngspice at its default settings agrees, however it steps; with a part off by 3 % it differs."""
    whole = DECKS[case]
    written = write(whole)
    found = compare(whole, simulated(deck(written.circuit, written.names, "transient"), tmp_path))
    assert found.verdict == "agree", found.curves
    assert {each.name for each in found.curves} == {"v(in)", "v(out)", "i(Vin)"}
    wrong = write(whole.with_network(whole.network.with_values({"R1": 1.03 * R})))
    other = compare(whole, simulated(deck(wrong.circuit, wrong.names, "transient"), tmp_path))
    assert other.verdict == "differ"


@pytest.mark.ngspice
def test_the_point_at_zero_of_a_given_state_is_passed_over(tmp_path: Any) -> None:
    """At t = 0 ngspice shows the state as asked for; the comparison begins at the first step."""
    whole = DECKS["from a voltage given"]
    written = write(whole)
    curves = simulated(deck(written.circuit, written.names, "transient"), tmp_path)
    found = compare(whole, curves)
    assert curves.curves[0].axis[0] == 0
    assert all(each.points == len(curves.curves[0]) - 1 for each in found.curves)
