"""Sound circuits run through ngspice: not one may come out as different; faults of 1 % must.

A tenth runs always. All 1000 take about two minutes:

    RCNET_FULL=1 python -m pytest -q tests/compare -k fault_free
"""

from __future__ import annotations

import math
import os
import random
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import pytest

from rcnet import Network
from rcnet.circuit import Analyses, Circuit, StartingState, Sweep, TransientRun
from rcnet.compare import Comparison, compare
from rcnet.curves import Curves
from rcnet.curves.raw import parse_raw
from rcnet.netlist import deck, write
from rcnet.opinion import find_ngspice
from rcnet.opinion.ngspice import Expected, RunFailed, run_deck

pytestmark = pytest.mark.ngspice

FULL = bool(os.environ.get("RCNET_FULL"))
RUNS = 1000 if FULL else 100
FAULTS = 400 if FULL else 60
PLOTS: dict[Any, str] = {
    "ac": "AC Analysis",
    "transient": "Transient Analysis",
    "noise": "Noise Spectral Density Curves",
    "operating point": "Operating Point",
}
KINDS = ("ac", "operating point", "noise", "step", "square", "sine", "begun", "general", "general", "square")
TIGHT = {"reltol": "1e-6", "vntol": "1e-9", "trtol": "1"}


@dataclass
class Draw:
    """One random circuit, everything about it drawn from its number."""

    seed: int
    rng: random.Random = field(init=False)
    tau: float = field(init=False)  # s, about the time constants of what is not drawn widely

    def __post_init__(self) -> None:
        self.rng = random.Random(f"sound {self.seed}")
        self.tau = 10 ** self.rng.uniform(-7, -2)

    def value(self, low: float, high: float) -> float:
        """A value drawn evenly in its logarithm."""
        return math.exp(self.rng.uniform(math.log(low), math.log(high)))

    def circuit(self) -> tuple[Circuit, Any]:
        """The circuit and the name of its one analysis."""
        kind = KINDS[self.seed % len(KINDS)]
        if kind == "general":
            network, wide = self.general(), False
        else:
            wave = kind if kind in WAVES else self.rng.choice(["step", "square", "sine"])
            wide = self.rng.random() < 0.5
            network = self.passive(wave, wide=wide)
        tight = self.rng.random() < 0.5
        options = dict(TIGHT) if tight else {}
        made = Circuit(network, f"sound-{self.seed}", output=("out",), options=options)
        if kind == "ac":
            span = Sweep(1e-2 / self.tau, 1e3 / self.tau, self.rng.choice([5, 20]))
            return replace(made, analyses=Analyses(ac=span)), "ac"
        if kind == "noise":
            span = Sweep(1e-2 / self.tau, 1e2 / self.tau, self.rng.choice([2, 5, 10]))
            return replace(made, analyses=Analyses(noise=span)), "noise"
        if kind == "operating point":
            return replace(made, analyses=Analyses(operating_point=True)), "operating point"
        return self.over_time(made, begun=kind == "begun", tight=tight), "transient"

    def over_time(self, made: Circuit, *, begun: bool, tight: bool) -> Circuit:
        """The circuit with a transient: at times short steps, a late start, Gear's rule, a given state."""
        rng = self.rng
        stop = self.tau * rng.choice([3, 10, 40])
        late = rng.random() < 0.1
        run = TransientRun(
            stop,
            stop / rng.choice([20, 100, 1000]),
            0.3 * stop if late else 0.0,
            stop / 2000 if tight and rng.random() < 0.5 else None,
        )
        initial = StartingState()
        if begun and rng.random() < 0.5:
            initial = StartingState({"out": 1.5})
        elif begun:
            run = replace(run, use_initial=True)
            parts = {p.name: rng.uniform(-1, 1) for p in made.network.parts if p.kind == "C"}
            initial = StartingState({"out": 1.5} if rng.random() < 0.5 else {}, parts)
        options = {**made.options, **({"method": "gear"} if rng.random() < 0.15 else {})}
        return replace(made, analyses=Analyses(transient=run), initial=initial, options=options)

    def passive(self, wave: str, *, wide: bool) -> Network:
        """A ladder, tree or mesh of R and C; wide: 1 ohm to 100 Mohm and 0.1 pF to 1 uF."""
        rng, net = self.rng, Network("level gauge")
        net.add_voltage_source("Vin", "in", "0", ac=1, **WAVES[wave](self))
        shape, names = rng.choice(["ladder", "tree", "mesh"]), ["in"]
        count = rng.randint(1, 7)
        for number in range(count):
            node = "out" if number == count - 1 else f"n{number}"
            at = names[-1] if shape == "ladder" else rng.choice(names)
            ohm = self.value(1, 1e8) if wide else self.value(1e3, 1e5)
            net.add_resistor(f"R{number}", at, node, ohm)
            if rng.random() < 0.9:
                farad = self.value(1e-13, 1e-6) if wide else self.tau / ohm * self.value(0.1, 10)
                net.add_capacitor(f"C{number}", node, "0", farad)
            names.append(node)
        for number in range(count if shape == "mesh" else 0):
            a, b = rng.sample([*names, "0"], 2)
            if rng.random() < 0.5:
                net.add_resistor(f"Rx{number}", a, b, self.value(1, 1e8) if wide else self.value(1e3, 1e5))
            else:
                farad = self.value(1e-13, 1e-6) if wide else self.tau / 1e4 * self.value(0.1, 10)
                net.add_capacitor(f"Cx{number}", a, b, farad)
        return net

    def general(self) -> Network:
        """Sections with inductors and followers, several sources, waveforms of every kind."""
        rng, net, last = self.rng, Network("leak listener"), "in"
        wave: Callable[[Draw], dict[str, Any]] = rng.choice(list(WAVES.values()))
        net.add_voltage_source("Vin", "in", "0", ac=1, **wave(self))
        count = rng.randint(1, 4)
        for number in range(count):
            node = "out" if number == count - 1 else f"n{number}"
            ohm = self.value(1e2, 1e6)
            if rng.random() < 0.3:
                net.add_inductor(f"L{number}", last, f"m{number}", ohm * self.tau * rng.uniform(0.01, 1))
                last = f"m{number}"
            net.add_resistor(f"R{number}", last, node, ohm)
            net.add_capacitor(f"C{number}", node, "0", self.tau / ohm * self.value(0.1, 3))
            last = node
            if rng.random() < 0.3 and node != "out":
                gain = rng.uniform(0.5, 2)
                net.add_voltage_controlled_voltage_source(f"E{number}", f"b{number}", "0", node, "0", gain)
                last = f"b{number}"
        net.add_resistor("Rload", "out", "0", self.value(1e3, 1e6))
        if rng.random() < 0.4:
            sine = {"amplitude": 1e-4, "frequency": 1.3 / self.tau}
            net.add_current_source(
                "I1", "0", "out", **({"sine": sine} if rng.random() < 0.5 else {"dc": 1e-4})
            )
        if rng.random() < 0.4:
            net.add_voltage_source("V2", "x", "out", **rng.choice(list(WAVES.values()))(self))
            net.add_resistor("Rx", "x", "0", self.value(1e3, 1e6))
        return net


def _step(draw: Draw) -> dict[str, Any]:
    at = draw.rng.choice([0, 0.3 * draw.tau])
    return {"step": {"from": draw.rng.choice([0, 1, -2]), "to": 5, "at": at}}


def _square(draw: Draw) -> dict[str, Any]:
    edges = {"rise": draw.tau * 0.02, "fall": draw.tau * 0.03} if draw.rng.random() < 0.5 else {}
    frequency = 1 / (draw.tau * draw.rng.uniform(0.5, 20))
    return {
        "square": {"low": 0, "high": 3.3, "frequency": frequency, "duty": draw.rng.uniform(0.2, 0.8), **edges}
    }


def _sine(draw: Draw) -> dict[str, Any]:
    delay = draw.rng.choice([0, 0.5 * draw.tau])
    damping = draw.rng.choice([0, 0, 0.4 / draw.tau])
    frequency = draw.rng.uniform(0.03, 3) / draw.tau
    return {"sine": {"amplitude": 2, "frequency": frequency, "offset": 1, "delay": delay, "damping": damping}}


def _points(draw: Draw) -> dict[str, Any]:
    tau = draw.tau
    period = {"period": 1.7 * tau} if draw.rng.random() < 0.5 else {}
    return {"points": {"values": [[0, 0], [0.3 * tau, 1], [1.1 * tau, -1]], **period}}


def _exponential(draw: Draw) -> dict[str, Any]:
    back = {"back_at": 2 * draw.tau, "back_time_constant": 0.4 * draw.tau}
    there = {"from": 0, "to": 1, "at": 0.2 * draw.tau, "time_constant": 0.3 * draw.tau}
    return {"exponential": {**there, **(back if draw.rng.random() < 0.5 else {})}}


WAVES: dict[str, Callable[[Draw], dict[str, Any]]] = {
    "step": _step,
    "square": _square,
    "sine": _sine,
    "points": _points,
    "exponential": _exponential,
}


def simulated(circuit: Circuit, analysis: Any) -> Curves:
    """What ngspice makes of a circuit under the circuit's own settings."""
    written, program = write(circuit), find_ngspice()
    assert program is not None
    wanted = ("onoise_spectrum",) if analysis == "noise" else ()
    text = deck(written.circuit, written.names, analysis)
    run = run_deck(text, Expected(PLOTS[analysis], wanted), executable=program)
    return parse_raw(run.raw, "results.raw")


def worst_of(found: Comparison) -> list[Any]:
    """What a failing test should show."""
    return [(curve.name, len(curve.spans), curve.worst) for curve in found.curves if curve.spans]


@pytest.mark.parametrize("seed", range(RUNS))
def test_fault_free(seed: int) -> None:
    """Ngspice agrees with every exact curve of a sound circuit, whatever the analysis and the settings."""
    circuit, analysis = Draw(seed).circuit()
    try:
        curves = simulated(circuit, analysis)
    except RunFailed as exc:
        assert "Timestep too small" in exc.message  # ngspice gives up one tight run in a hundred
        return
    found = compare(circuit, curves)
    assert found.verdict == "agree", worst_of(found)
    assert {curve.analysis for curve in found.curves} == {analysis}
    assert any(curve.name in ("v(out)", "onoise_spectrum") for curve in found.curves)


def _apart(one: Curves, other: Curves, analysis: Any) -> float:
    """How far two runs of ngspice lie apart in a voltage: relative, in a transient to its greatest value."""
    greatest = 0.0
    for curve in one.of(analysis):
        mate = other.get(curve.name, analysis)
        if mate is None or not curve.name.startswith("v("):
            continue
        if analysis == "ac":
            size = np.abs(curve.values)
            share = np.abs(mate.values - curve.values) / np.where(size > 0, size, np.inf)
        else:
            share = np.abs(np.interp(curve.axis, mate.axis, mate.values) - curve.values)
            share = share / (np.abs(curve.values).max() or np.inf)
        greatest = max(greatest, float(share.max()))
    return greatest


def _caught(kind: str, least: float) -> tuple[int, int]:
    """How many faults of 1 % were caught, of how many that changed a voltage by more than `least`."""
    caught = shown = 0
    for seed in range(FAULTS):
        draw = Draw(seed * len(KINDS) + KINDS.index(kind))
        circuit, analysis = draw.circuit()
        run = circuit.analyses.transient
        if run is not None:
            fine = replace(run, start=0.0, max_step=run.stop / 2000)
            options = {**circuit.options, "reltol": "1e-5"}
            circuit = replace(circuit, analyses=Analyses(transient=fine), options=options)
        part = draw.rng.choice([p for p in circuit.network.parts if p.kind in "RC"])
        values = circuit.network.with_values({part.name: part.value * 1.01})
        try:
            wrong = simulated(circuit.with_network(values), analysis)
            right = simulated(circuit, analysis)
        except RunFailed:
            continue
        if _apart(right, wrong, analysis) > least:
            shown += 1
            caught += compare(circuit, wrong).verdict == "differ"
    return caught, shown


@pytest.mark.parametrize(("kind", "least"), [("ac", 1e-4), ("square", 1e-3), ("sine", 1e-3)])
def test_a_part_off_by_a_hundredth_is_caught(kind: str, least: float) -> None:
    """Of single parts off by 1 % that show in a voltage, 95 % are caught, over time with short steps too."""
    caught, shown = _caught(kind, least)
    assert shown > FAULTS / 5
    assert caught >= 0.95 * shown
