"""The starter circuits do what they say.

Every expected number comes from outside rcnet: two-port chain matrices, nodal equations and closed forms
written down here by hand and evaluated with mpmath, published values, and ngspice run by hand.
"""

from __future__ import annotations

import os
import re
import subprocess
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import partial, reduce
from itertools import pairwise
from pathlib import Path
from typing import Any

import mpmath
import numpy as np
import pytest

import rcnet
from rcnet.cli.main import run
from rcnet.confirm import confirm
from rcnet.handover import sealed_netlist
from rcnet.opinion import LibraryRunner, find_ngspice
from rcnet.resources import starters

STARTERS = starters()
NAMES = sorted(STARTERS)
MISLEADING = {
    "band-pass": "Wide enough for two speeds of the pump",
    "level-sender": "Corner at 4 Hz, below the ripples of a filling tank",
    "unbuffered-cascade": "Corner at 200 Hz",
}

# The dc link of a drive is at lethal voltage, and rcnet says so.
DESERVED = {"compensated-divider": ["hazardous-voltage"]}

Values = Mapping[str, float]
Function = Callable[[Any, Values], Any]  # of s in rad/s and the parts' values


@dataclass(frozen=True)
class Outside:
    """What a starter does, by hand.

    gain, drive, back: response, impedance at the source, impedance at the output, at s
    peak: where the response is greatest, rad/s; 0 and inf stand for the limits
    edges: an interval in Hz that holds each half-power frequency; part: one whose change shows
    seen: the voltage compared with ngspice where it is not the output, and its name
    kelvin: the temperature of its resistors; step: its step response over the final value, where that has a
        closed form; more: measures that need more than the response, by name
    """

    values: Values
    gain: Function
    drive: Function
    back: Function
    peak: Callable[[Values], Any]
    edges: Mapping[str, tuple[float, float]]
    part: str
    seen: tuple[str, Function] | None = None
    kelvin: str = "300.15"
    step: Callable[[Any], Any] | None = None
    more: Mapping[str, Callable[[Values, Mapping[str, Any]], Any]] = field(default_factory=dict)


# ---------------------------------------------------------------------- two-port chains
# A series impedance Z is [[1, Z], [0, 1]] and a shunt admittance Y [[1, 0], [Y, 1]]; a chain is their product
# [[A, B], [C, D]]. Open output, ideal source: gain 1/A, seen by the source A/C, seen from the output B/A.
# (E. A. Guillemin, Communication Networks II, 1935.)


def series(z: Any) -> Any:
    """The chain matrix of a series impedance."""
    return mpmath.matrix([[1, z], [0, 1]])


def shunt(y: Any) -> Any:
    """The chain matrix of a shunt admittance."""
    return mpmath.matrix([[1, 0], [y, 1]])


def par(*z: Any) -> Any:
    """Impedances in parallel."""
    return 1 / sum(1 / each for each in z)


def chain(links: Callable[[Any, Values], list[Any]]) -> dict[str, Any]:
    """Gain and both impedances of a chain of two-ports."""

    def product(s: Any, p: Values) -> Any:
        return reduce(lambda a, b: a * b, links(s, p))

    return {
        "gain": lambda s, p: 1 / product(s, p)[0, 0],
        "drive": lambda s, p: (m := product(s, p))[0, 0] / m[1, 0],
        "back": lambda s, p: (m := product(s, p))[0, 1] / m[0, 0],
    }


def rc_sections(*pairs: tuple[str, str]) -> Callable[[Any, Values], list[Any]]:
    """Series R, shunt C, over and over."""
    return lambda s, p: [link for r, c in pairs for link in (series(p[r]), shunt(s * p[c]))]


def buffered(s: Any, p: Values) -> Any:
    """Three first-order sections that do not load one another."""
    return 1 / ((1 + s * p["R1"] * p["C1"]) * (1 + s * p["R2"] * p["C2"]) * (1 + s * p["R3"] * p["C3"]))


def twin_t(s: Any, p: Values) -> tuple[Any, Any, Any]:
    """y11, y21 and y22 of the twin-T: two tees in parallel, whose admittances add."""
    total = [mpmath.mpf(0)] * 3
    tees = [
        (1 / mpmath.mpf(p["R1"]), 1 / mpmath.mpf(p["R2"]), s * p["C3"]),
        (s * p["C1"], s * p["C2"], 1 / mpmath.mpf(p["R3"])),
    ]
    for a, b, c in tees:
        star = a + b + c
        delta = a * (b + c) / star, -a * b / star, b * (a + c) / star
        total = [x + y for x, y in zip(total, delta, strict=True)]
    return total[0], total[1], total[2]


def twin_t_drive(s: Any, p: Values) -> Any:
    """What the source sees of the twin-T with nothing at its output."""
    y11, y21, y22 = twin_t(s, p)
    return 1 / (y11 - y21**2 / y22)


def shunt_filter(s: Any, p: Values, into: tuple[int, int, int]) -> Any:
    """The voltages of hi, p and n for currents into them: nodal equations, solved by mpmath's LU."""
    g = {name: 1 / mpmath.mpf(p[name]) for name in ("Rshunt", "R1", "R2", "Ramp")}
    between = s * p["C1"] + g["Ramp"]
    matrix = mpmath.matrix(
        [
            [g["Rshunt"] + g["R1"], -g["R1"], 0],
            [-g["R1"], g["R1"] + between + s * p["C2"], -between],
            [0, -between, g["R2"] + between + s * p["C3"]],
        ]
    )
    return mpmath.lu_solve(matrix, mpmath.matrix(into))


def across(v: Any) -> Any:
    """The voltage from p to n."""
    return v[1] - v[2]


def leak_chain(s: Any, p: Values) -> list[Any]:
    """Capsule and coupling capacitor, both bias resistors side by side, stopper, input capacitor."""
    bias = par(p["Rup"], p["Rdown"])
    return [series(p["Rmic"] + 1 / (s * p["C1"])), shunt(1 / bias), series(p["R1"]), shunt(s * p["C2"])]


def leak_peak(p: Values) -> Any:
    """Where s b/(1 + s a1 + s^2 a2) is greatest: 1/sqrt(a2), written out."""
    bias = par(p["Rup"], p["Rdown"])
    return 1 / mpmath.sqrt(p["C1"] * p["C2"] * (p["R1"] * (p["Rmic"] + bias) + p["Rmic"] * bias))


# ---------------------------------------------------------------------- noise, waveforms, discharge

BOLTZMANN = mpmath.mpf("1.380649e-23")  # J/K, exact (SI, 2019)
LINE = 50 * 8.2 * 50 * 4.7e-9  # total R times total C of the cable, s


def nyquist(back: Function, p: Values, kelvin: Any, low: Any, high: Any) -> Any:
    """Rms noise of a passive port, 4kT times the area under Re Z (H. Nyquist, Phys. Rev. 32:110-113, 1928).

    Integrated in the logarithm of the frequency, by Gauss's rule in pieces no wider than two. Zero and
    infinity are put where 1e-13 of the area is beyond them.
    """
    begin = mpmath.log(low) if low else mpmath.mpf(-24)
    end = mpmath.log(high) if high != mpmath.inf else mpmath.mpf(40)
    edges = mpmath.linspace(begin, end, int(mpmath.ceil((end - begin) / 2)) + 1)
    with mpmath.workdps(20):
        area = mpmath.quad(
            lambda x: mpmath.re(back(2j * mpmath.pi * mpmath.exp(x), p)) * mpmath.exp(x),
            edges,
            method="gauss-legendre",
            maxdegree=4,
        )
    return mpmath.sqrt(4 * BOLTZMANN * kelvin * area)


def buffered_noise(p: Values, options: Mapping[str, Any]) -> Any:
    """Each section's k T/C, less what the sections after it take away.

    The areas under 1/(1 + x^2)^n, n = 1, 2, 3, are to one another as 1, 1/2 and 3/8.
    """
    assert (options["from"], options["to"]) == (0.0, np.inf)
    return mpmath.sqrt(mpmath.mpf(15) / 8 * BOLTZMANN * mpmath.mpf("300.15") / p["C3"])


def band_pass_slowest(p: Values, options: Mapping[str, Any]) -> Any:
    """The greater root of tau^2 - (R1 C1 + R2 C2 + R1 C2) tau + R1 C1 R2 C2."""
    one, two = p["R1"] * p["C1"], p["R2"] * p["C2"]
    total = one + two + p["R1"] * p["C2"]
    return (total + mpmath.sqrt(mpmath.mpf(total) ** 2 - 4 * one * two)) / 2


def cable_step(time: Any) -> Any:
    """The step response of fifty equal sections (A. M. Morgan-Voyce, IRE Trans. CT-6:279-296, 1959)."""
    n, rc, missing = 50, mpmath.mpf(LINE) / 2500, mpmath.mpf(0)
    for k in range(1, n + 1):
        half = (2 * k - 1) * mpmath.pi / (2 * n + 1) / 2
        decay = mpmath.exp(-4 * mpmath.sin(half) ** 2 * time / rc)
        missing -= (-1) ** k * 2 * mpmath.cos(half) ** 2 / ((2 * n + 1) * mpmath.sin(half)) * decay
    return 1 - missing


class Square:
    """The steady state of dx/dt = A x + b u, y = c x + d u, under a square wave with sloping edges.

    In each of four stretches u runs straight, and (x, u, du/dt) is carried on by a matrix exponential.
    """

    def __init__(self, a: Any, b: Any, *wave: str) -> None:
        """wave: low, high, frequency, duty, and the length of either edge, in decimal."""
        low, high, hertz, duty, edge = map(mpmath.mpf, wave)
        self.period = 1 / hertz
        top = duty * self.period - edge
        rate = (high - low) / edge
        rest = self.period - 2 * edge - top
        stretches = [(edge, low, rate), (top, high, 0), (edge, high, -rate), (rest, low, 0)]
        n = a.rows
        self.matrix = mpmath.zeros(n + 2)
        for row in range(n):
            for column in range(n):
                self.matrix[row, column] = a[row, column]
            self.matrix[row, n] = b[row]
        self.matrix[n, n + 1] = 1
        free, once = mpmath.zeros(n, 1), mpmath.eye(n)
        for length, u, slope in stretches:
            free = self.on(free, u, slope, length)[:n, 0]
            once = mpmath.expm(a * length) * once
        x = mpmath.lu_solve(mpmath.eye(n) - once, free)
        self.stretches = []
        for length, u, slope in stretches:
            self.stretches.append((length, self.on(x, u, slope, 0)))
            x = self.on(x, u, slope, length)[:n, 0]

    def on(self, x: Any, u: Any, slope: Any, time: Any) -> Any:
        """(x, u, du/dt) after some time."""
        return mpmath.expm(self.matrix * time) * mpmath.matrix([*x, u, slope])

    def extremes(self, c: Any) -> tuple[Any, Any]:
        """The least and the greatest of y = c (x, u, 0): at a corner, or where y turns between two."""
        found: list[Any] = []

        def rate(t: Any, z: Any) -> Any:
            return (c * self.matrix * mpmath.expm(self.matrix * t) * z)[0]

        for length, z in self.stretches:
            ends = [mpmath.mpf(0), length]
            if rate(ends[0], z) * rate(ends[1], z) < 0:
                turn = mpmath.findroot(partial(rate, z=z), tuple(ends), solver="anderson", tol=1e-30)
                ends.append(turn)
            found.extend((c * mpmath.expm(self.matrix * t) * z)[0] for t in ends)
        return min(found), max(found)

    def mean_square(self, c: Any) -> Any:
        """The mean of y^2, from one exponential a stretch (C. F. Van Loan, IEEE AC-23:395-404, 1978)."""
        n, total = self.matrix.rows, mpmath.mpf(0)
        square = c.T * c
        for length, z in self.stretches:
            block = mpmath.zeros(2 * n)
            for row in range(n):
                for column in range(n):
                    block[row, column] = -self.matrix[column, row]
                    block[row, n + column] = square[row, column]
                    block[n + row, n + column] = self.matrix[row, column]
            grown = mpmath.expm(block * length)
            total += (z.T * grown[n:, n:].T * grown[:n, n:] * z)[0]
        return total / self.period


def valve_ripple(p: Values, options: Mapping[str, Any]) -> Any:
    """Peak to peak at the positioner: the states are the voltages of C1 and C2."""
    g1, g2, load = (1 / mpmath.mpf(p[name]) for name in ("R1", "R2", "Rload"))
    a = mpmath.matrix(
        [[-(g1 + g2) / p["C1"], g2 / p["C1"]], [g2 / p["C2"], -(g2 + load) / p["C2"]]],
    )
    wave = Square(a, mpmath.matrix([g1 / p["C1"], 0]), "0", "3.3", "1e3", "0.4", "1e-6")
    least, greatest = wave.extremes(mpmath.matrix([[0, 1, 0, 0]]))
    return greatest - least


def reed_discharge(p: Values, options: Mapping[str, Any]) -> Any:
    """From the greatest voltage that C1 reaches, through Rin alone: R C ln(V0/V)."""
    assert options["part"] == "C1"
    source, leak = p["Rpull"] + p["R1"], p["Rin"]
    a = mpmath.matrix([[-(1 / mpmath.mpf(source) + 1 / mpmath.mpf(leak)) / p["C1"]]])
    wave = Square(a, mpmath.matrix([1 / (source * p["C1"])]), "0", "3.3", "25", "0.5", "10e-6")
    return leak * p["C1"] * mpmath.log(wave.extremes(mpmath.matrix([[1, 0, 0]]))[1] / options["to"])


def sender_discharge(p: Values, options: Mapping[str, Any]) -> Any:
    """From the level after the step, 7 V, through Rload alone."""
    assert options["part"] == "C1"
    start = 7 * mpmath.mpf(p["Rload"]) / (p["Rsender"] + p["R1"] + p["Rload"])
    return p["Rload"] * (p["C1"] + p["Cload"]) * mpmath.log(start / options["to"])


def shunt_wave(p: Values) -> tuple[Square, Any]:
    """The shunt's filter at 20 kHz, its states the voltages of p and n, and the row that gives that of hi."""
    g = {name: 1 / mpmath.mpf(p[name]) for name in ("Rshunt", "R1", "R2", "Ramp")}
    c1, c2, c3 = (mpmath.mpf(p[name]) for name in ("C1", "C2", "C3"))
    at_hi = g["Rshunt"] + g["R1"]  # hi = (u + g1 p)/at_hi
    into_p = g["R1"] - g["R1"] ** 2 / at_hi
    storing = mpmath.matrix([[c1 + c2, -c1], [-c1, c1 + c3]]) ** -1
    leading = mpmath.matrix([[into_p + g["Ramp"], -g["Ramp"]], [-g["Ramp"], g["R2"] + g["Ramp"]]])
    driven = mpmath.matrix([g["R1"] / at_hi, 0])
    wave = Square(-storing * leading, storing * driven, "0.9", "1.5", "20e3", "0.5", "1e-6")
    return wave, mpmath.matrix([[g["R1"] / at_hi, 0, 1 / at_hi, 0]])


def shunt_ripple(p: Values, options: Mapping[str, Any]) -> Any:
    """Peak to peak from p to n."""
    least, greatest = shunt_wave(p)[0].extremes(mpmath.matrix([[1, -1, 0, 0]]))
    return greatest - least


def shunt_heat(p: Values, options: Mapping[str, Any]) -> Any:
    """The mean square of hi over Rshunt."""
    assert options["part"] == "Rshunt"
    wave, hi = shunt_wave(p)
    return wave.mean_square(hi) / p["Rshunt"]


def divider_voltage(p: Values, options: Mapping[str, Any]) -> Any:
    """What R1 has of the link's 325 V."""
    assert options["part"] == "R1"
    return 325 * p["R1"] / (p["R1"] + par(mpmath.mpf(p["R2"]), p["Rlogger"]))


CABLE = {f"R{k}": 8.2 for k in range(1, 51)} | {f"C{k}": 4.7e-9 for k in range(1, 51)}
THREE = {"R1": 1e4, "C1": 15e-9, "R2": 1e4, "C2": 15e-9, "R3": 1e4, "C3": 15e-9}

LEAK = chain(leak_chain)

OUTSIDE: dict[str, Outside] = {
    "noise-filter": Outside(
        {"R1": 4.7e3, "C1": 10e-9, "R2": 10e3, "C2": 4.7e-9, "R3": 22e3, "C3": 2.2e-9},
        **chain(rc_sections(("R1", "C1"), ("R2", "C2"), ("R3", "C3"))),
        peak=lambda p: 0,
        edges={"upper": (10, 1e5)},
        part="C2",
    ),
    "level-sender": Outside(
        {"Rsender": 2.2e3, "R1": 10e3, "C1": 3.3e-6, "Rload": 1e6, "Cload": 100e-12},
        **chain(
            lambda s, p: [
                series(p["Rsender"] + p["R1"]),
                shunt(s * (p["C1"] + p["Cload"]) + 1 / mpmath.mpf(p["Rload"])),
            ]
        ),
        peak=lambda p: 0,
        edges={"upper": (0.1, 1e3)},
        part="Rsender",
        more={"discharge_time": sender_discharge},
    ),
    "valve-positioner": Outside(
        {"R1": 4.7e3, "C1": 1e-6, "R2": 47e3, "C2": 100e-9, "Rload": 1e6},
        **chain(
            lambda s, p: [*rc_sections(("R1", "C1"), ("R2", "C2"))(s, p), shunt(1 / mpmath.mpf(p["Rload"]))]
        ),
        peak=lambda p: 0,
        edges={"upper": (0.1, 1e4)},
        part="R2",
        more={"ripple": valve_ripple},
    ),
    "reed-debounce": Outside(
        {"Rpull": 22e3, "R1": 1e3, "C1": 100e-9, "Rin": 10e6},
        **chain(lambda s, p: [series(p["Rpull"] + p["R1"]), shunt(s * p["C1"] + 1 / mpmath.mpf(p["Rin"]))]),
        peak=lambda p: 0,
        edges={"upper": (1, 1e4)},
        part="C1",
        more={"discharge_time": reed_discharge},
    ),
    "leak-microphone": Outside(
        {"Rmic": 2.2e3, "C1": 22e-9, "Rup": 220e3, "Rdown": 220e3, "R1": 10e3, "C2": 1e-9},
        **LEAK,
        peak=leak_peak,
        edges={"lower": (1, 800), "upper": (1100, 1e6)},
        part="Rdown",
        kelvin="283.15",
        more={
            # 5 mV at 700 Hz on the capsule; C1 keeps its resting level off the output.
            "harmonic": lambda p, options: abs(LEAK["gain"](1400j * mpmath.pi, p)) / 200,
            "mean": lambda p, options: mpmath.mpf("3.3") * p["Rdown"] / (p["Rup"] + p["Rdown"]),
        },
    ),
    "band-pass": Outside(
        {"C1": 100e-9, "R1": 15e3, "R2": 10e3, "C2": 10e-9},
        **chain(
            lambda s, p: [
                series(1 / (s * p["C1"])),
                shunt(1 / mpmath.mpf(p["R1"])),
                series(p["R2"]),
                shunt(s * p["C2"]),
            ]
        ),
        peak=lambda p: 1 / mpmath.sqrt(p["C1"] * p["R1"] * p["C2"] * p["R2"]),
        edges={"lower": (1, 400), "upper": (420, 1e5)},
        part="R1",
        more={"time_constant": band_pass_slowest},
    ),
    "buffered-cascade": Outside(
        THREE,
        gain=buffered,
        drive=lambda s, p: p["R1"] + 1 / (s * p["C1"]),
        back=lambda s, p: par(p["R3"], 1 / (s * p["C3"])),
        peak=lambda p: 0,
        edges={"upper": (10, 1e4)},
        part="R2",
        more={"noise": buffered_noise},
    ),
    "unbuffered-cascade": Outside(
        THREE,
        **chain(rc_sections(("R1", "C1"), ("R2", "C2"), ("R3", "C3"))),
        peak=lambda p: 0,
        edges={"upper": (10, 1e4)},
        part="R2",
    ),
    "hum-notch": Outside(
        {"R1": 68e3, "R2": 68e3, "C3": 100e-9, "C1": 47e-9, "C2": 47e-9, "R3": 36e3},
        gain=lambda s, p: -(y := twin_t(s, p))[1] / y[2],
        drive=twin_t_drive,
        back=lambda s, p: 1 / twin_t(s, p)[2],
        peak=lambda p: 0,
        edges={"lower": (0.5, 45), "upper": (55, 5e3)},
        part="R3",
    ),
    "phase-shift": Outside(
        {
            "C1": 10e-9, "R1": 6.8e3, "C2": 10e-9, "R2": 6.8e3, "C3": 10e-9, "R3": 6.8e3,
            "Rin": 1e6, "Cin": 10e-12,
        },
        **chain(
            lambda s, p: [
                series(1 / (s * p["C1"])),
                shunt(1 / mpmath.mpf(p["R1"])),
                series(1 / (s * p["C2"])),
                shunt(1 / mpmath.mpf(p["R2"])),
                series(1 / (s * p["C3"])),
                shunt(1 / par(p["R3"], p["Rin"]) + s * p["Cin"]),
            ]
        ),
        peak=lambda p: mpmath.inf,
        edges={"lower": (1e3, 1e6)},
        part="C3",
    ),
    "instrument-cable": Outside(
        CABLE,
        **chain(rc_sections(*((f"R{k}", f"C{k}") for k in range(1, 51)))),
        peak=lambda p: 0,
        edges={"upper": (10, 1e5)},
        part="C25",
        step=cable_step,
    ),
    "compensated-divider": Outside(
        {"R1": 8.2e6, "C1": 22e-12, "R2": 1e6, "C2": 98e-12, "Rlogger": 10e6, "Clogger": 100e-12},
        **chain(
            lambda s, p: [
                series(1 / (1 / mpmath.mpf(p["R1"]) + s * p["C1"])),
                shunt(1 / par(p["R2"], p["Rlogger"]) + s * (p["C2"] + p["Clogger"])),
            ]
        ),
        peak=lambda p: mpmath.inf,
        edges={},
        part="C2",
        more={
            "peak_voltage": divider_voltage,
            "dissipation": lambda p, options: divider_voltage(p, options) ** 2 / p["R1"],
        },
    ),
    "pump-current": Outside(
        {"Rshunt": 0.05, "R1": 1e3, "R2": 1e3, "C1": 100e-9, "C2": 10e-9, "C3": 10e-9, "Ramp": 200e3},
        gain=lambda s, p: across(shunt_filter(s, p, (1, 0, 0))),
        drive=lambda s, p: shunt_filter(s, p, (1, 0, 0))[0],
        back=lambda s, p: across(shunt_filter(s, p, (0, 1, -1))),
        peak=lambda p: 0,
        edges={"upper": (10, 1e5)},
        part="C1",
        seen=("v(p)", lambda s, p: shunt_filter(s, p, (1, 0, 0))[1]),
        more={"ripple": shunt_ripple, "dissipation": shunt_heat},
    ),
}  # fmt: skip


# ---------------------------------------------------------------------- the measures, in 40 digits


@pytest.fixture(autouse=True)
def _forty_digits() -> Iterator[None]:
    with mpmath.workdps(40):
        yield


class ByHand:
    """The measures of one starter from its hand-derived functions."""

    def __init__(self, outside: Outside) -> None:
        self.o, self.p = outside, outside.values

    def at(self, frequency: Any) -> Any:
        """The response at a frequency in Hz."""
        return self.o.gain(2j * mpmath.pi * frequency, self.p)

    def db(self, frequency: Any) -> Any:
        """Its magnitude in dB."""
        return 20 * mpmath.log10(abs(self.at(frequency)))

    def peak(self) -> Any:
        """The greatest magnitude in dB; a limit is taken twenty decades away."""
        where = self.o.peak(self.p)
        omega = {0: mpmath.mpf("1e-20"), mpmath.inf: mpmath.mpf("1e30")}.get(where, where)
        return self.db(omega / (2 * mpmath.pi))

    def cutoff(self, edge: str | None) -> Any:
        """Half power, by bisection in the interval that holds it."""
        low, high = self.o.edges[edge or next(iter(self.o.edges))]
        level = self.peak() - 10 * mpmath.log10(2)
        return mpmath.exp(
            mpmath.findroot(
                lambda x: self.db(mpmath.exp(x)) - level,
                (mpmath.log(low), mpmath.log(high)),
                solver="anderson",
                tol=1e-40,
            )
        )

    def phase(self, frequency: float) -> Any:
        """The phase in degrees, followed in small steps from where it begins."""
        points = [mpmath.mpf(frequency) * mpmath.mpf(10) ** (mpmath.mpf(k) / 16 - 8) for k in range(129)]
        values = [self.at(point) for point in points]
        turned = mpmath.arg(values[0]) + sum(mpmath.arg(b / a) for a, b in pairwise(values))
        return mpmath.degrees(turned)

    def slope(self, s: Any) -> Any:
        """-H'/H at s; its real part is the group delay, and at zero the Elmore delay."""
        return -mpmath.diff(lambda x: self.o.gain(x, self.p), s) / self.o.gain(s, self.p)

    def step(self, time: Any) -> Any:
        """The step response over its final value: a closed form, or Laplace's inversion by Talbot's contour
        (A. Talbot, J. Inst. Maths Applics 23:97-120, 1979).
        """
        if self.o.step is not None:
            return self.o.step(time)
        final = self.o.gain(mpmath.mpf(0), self.p)
        return mpmath.invertlaplace(lambda s: self.o.gain(s, self.p) / s, time, method="talbot") / final

    def reached(self, share: Any) -> Any:
        """When the step response reaches a share of its final value.

        Without zeros and with real poles it rises all the way (W. C. Elmore, J. Appl. Phys. 19:55-63, 1948).
        The notch's dips, and passes each share above a half once on its way back, after its Elmore delay.
        """
        elmore = mpmath.re(self.slope(mpmath.mpf(0)))
        between = (elmore * (1 if share > 0.8 else 0.01), 20 * elmore)
        with mpmath.workdps(25):
            # In the logarithm what is missing falls nearly straight.
            return mpmath.findroot(
                lambda t: mpmath.log((1 - self.step(t)) / (1 - share)),
                between,
                solver="anderson",
                tol=1e-30,
                maxsteps=60,
            )

    def noise(self, low: float, high: float) -> Any:
        """The rms noise of the output, all resistors at one temperature."""
        return nyquist(self.o.back, self.p, mpmath.mpf(self.o.kelvin), low, high)

    def measure(self, name: str, options: Mapping[str, Any]) -> float:
        """Any measure the starters claim."""
        if name in self.o.more:
            return float(self.o.more[name](self.p, options))
        at = mpmath.mpf(options.get("at", 0.0))
        s = 2j * mpmath.pi * at
        found = {
            "gain": lambda: self.db(at),
            "attenuation": lambda: self.peak() - self.db(at),
            "phase": lambda: self.phase(at),
            "group_delay": lambda: self.slope(s).real,
            "cutoff": lambda: self.cutoff(options.get("edge")),
            "bandwidth": lambda: abs(self.cutoff("upper") - self.cutoff("lower")),
            "centre": lambda: mpmath.sqrt(self.cutoff("upper") * self.cutoff("lower")),
            "dc_gain": lambda: mpmath.re(self.o.gain(mpmath.mpf(0), self.p)),
            "input_impedance": lambda: abs(self.o.drive(s, self.p)),
            "output_impedance": lambda: abs(self.o.back(s, self.p)),
            "elmore_delay": lambda: mpmath.re(self.slope(mpmath.mpf(0))),
            "delay": lambda: self.reached(mpmath.mpf("0.5")),
            "rise_time": lambda: self.reached(mpmath.mpf("0.9")) - self.reached(mpmath.mpf("0.1")),
            "settling_time": lambda: self.reached(1 - mpmath.mpf(options["band"])),
            "noise": lambda: self.noise(options["from"], options["to"]),
        }[name]()
        return float(found)


# ---------------------------------------------------------------------- the files themselves


def test_every_starter_shipped_is_tested_here() -> None:
    """A starter without an outside computation does not ship."""
    assert sorted(OUTSIDE) == NAMES


@pytest.mark.parametrize("name", NAMES)
class TestFile:
    """What each file promises before anything is simulated."""

    def test_holds_the_parts_meant(self, name: str) -> None:
        """The file reads as the parts the outside computation takes, to the double."""
        network = rcnet.load(STARTERS[name]).network
        passive = {part.name: part.value for part in network.parts if part.kind in "RCL"}
        assert passive == dict(OUTSIDE[name].values)

    def test_every_claim_holds_without_errors(self, name: str) -> None:
        """Four to seven claims, all hold; the only findings are the hand formulas meant to mislead."""
        circuit = rcnet.load(STARTERS[name])
        done = rcnet.check(circuit)
        assert 4 <= len(done.claims) <= 7
        assert [result.verdict for result in done.claims] == ["holds"] * len(done.claims)
        others = DESERVED.get(name, [])
        found = [finding for finding in done.findings if finding.code not in others]
        assert [finding.code for finding in found] == ["hand-misleads"] * (name in MISLEADING)
        assert all(MISLEADING[name] in finding.message for finding in found)
        assert len(done.findings) == len(found) + len(others)

    def test_introduces_itself(self, name: str) -> None:
        """Two to six comment lines on top say what to change first, and own up to a misleading formula."""
        text = STARTERS[name].read_text("utf-8")
        header = re.match(r"(?:# .*\n)+", text)
        assert header is not None
        assert 2 <= header[0].count("\n") <= 6
        assert "Change first:" in header[0]
        assert ("misleads on purpose" in header[0]) == (name in MISLEADING)
        assert rcnet.load(STARTERS[name]).title

    def test_every_part_has_a_tolerance(self, name: str) -> None:
        """No passive part is written as if it were perfect, and the hand formulas give numbers."""
        circuit = rcnet.load(STARTERS[name])
        assert all(part.tolerance is not None for part in circuit.network.parts if part.kind in "RCL")
        assert all(result.hand_why is None for result in rcnet.check(circuit).claims)

    def test_the_sweep_shows_the_corners(self, name: str) -> None:
        """The ac sweep asked for reaches half a decade beyond every cutoff."""
        sweep = rcnet.load(STARTERS[name]).analyses.ac
        assert sweep is not None
        for edge in OUTSIDE[name].edges:
            corner = float(ByHand(OUTSIDE[name]).cutoff(edge))
            assert sweep.start * 3 < corner < sweep.stop / 3

    def test_every_claimed_value_is_what_hand_derivation_gives(self, name: str) -> None:
        """The exact value of each claim agrees with the two-port, nodal or closed form above to 9 digits."""
        by_hand = ByHand(OUTSIDE[name])
        for result in rcnet.check(rcnet.load(STARTERS[name])).claims:
            claim = result.claim
            expected = by_hand.measure(claim.measure.name, claim.options)
            assert result.exact == pytest.approx(expected, rel=1e-9), claim.says

    def test_every_cutoff_is_what_hand_derivation_gives(self, name: str) -> None:
        """The cutoffs, claimed or not, agree to 9 digits; the flat divider has none."""
        circuit, by_hand = rcnet.load(STARTERS[name]), ByHand(OUTSIDE[name])
        of = " ".join(circuit.output)
        for edge in OUTSIDE[name].edges:
            found = circuit.network.measure("cutoff", of=of, edge=edge)
            assert found == pytest.approx(float(by_hand.cutoff(edge)), rel=1e-9)
        if not OUTSIDE[name].edges:
            with pytest.raises(rcnet.UndecidedError, match="no cutoff"):
                circuit.network.measure("cutoff", of=of)

    def test_the_curve_is_what_hand_derivation_gives(self, name: str) -> None:
        """The response over the whole sweep agrees with the hand-derived one to 12 digits of its size."""
        circuit, by_hand = rcnet.load(STARTERS[name]), ByHand(OUTSIDE[name])
        sweep = circuit.analyses.ac
        assert sweep is not None
        points = np.geomspace(sweep.start, sweep.stop, 13)
        exact = circuit.network.response(points, " ".join(circuit.output))
        expected = np.array([complex(by_hand.at(mpmath.mpf(f))) for f in points.tolist()])
        assert np.abs(exact - expected) == pytest.approx(0, abs=1e-12 * np.abs(expected).max())
        # Nor are digits lost deep in a stopband or in a notch, where terms cancel.
        assert np.abs(exact / expected - 1).max() < 1e-9


# name: the starter, the measure and its options, the published value, relative tolerance.
F1 = 1 / (2 * np.pi * 1e4 * 15e-9)  # of one section of the two cascades
PUBLISHED: dict[str, tuple[str, str, dict[str, Any], float, float]] = {
    # Isolated equal sections: sqrt(2^(1/3) - 1) f1.
    "three sections apart": ("buffered-cascade", "cutoff", {}, 0.509824528533959 * F1, 1e-12),
    # Ladder of equal sections, 1/b_3 (A. M. Morgan-Voyce, IRE Trans. CT-6, 1959).
    "three sections in a ladder": ("unbuffered-cascade", "cutoff", {}, 0.194286000459512 * F1, 1e-12),
    "Elmore delay of n sections, n(n+1)/2 RC": ("unbuffered-cascade", "elmore_delay", {}, 6 * 1.5e-4, 1e-12),
    # 50 lumped sections of a line: omega RC = 2500 times the root of |b_50| = sqrt 2.
    "fifty lengths": (
        "instrument-cable",
        "cutoff",
        {},
        2.38418346515 / (2 * np.pi * LINE),
        1e-11,
    ),
    "10-90 % rise of three sections in a ladder": (
        "unbuffered-cascade",
        "rise_time",
        {},
        11.2775661424191 * 1.5e-4,
        1e-12,
    ),
    "noise of three sections in a ladder, sqrt(kT/C)": (
        "unbuffered-cascade",
        "noise",
        {"from_": 0, "to": np.inf},
        np.sqrt(1.380649e-23 * 300.15 / 15e-9),
        1e-12,
    ),
    "Elmore delay of fifty lengths": ("instrument-cable", "elmore_delay", {}, LINE * 51 / 100, 1e-12),
    # W. Thomson 1855: the evenly distributed line, 0.387125842/(R C); fifty lengths are 2 % below.
    "distributed line": (
        "instrument-cable",
        "cutoff",
        {},
        0.387125842025788656 / LINE,
        0.025,
    ),
    "half of a step on the line": ("instrument-cable", "delay", {}, 0.378747838271396 * LINE, 0.025),
    "10-90 % rise on the line": ("instrument-cable", "rise_time", {}, 0.900946091804982 * LINE, 0.025),
    # Unloaded CR network: H = -1/29 at 0.0649747334361397/(RC) = 955.5 Hz; here 1 Mohm loads it.
    "a factor of 29": ("phase-shift", "attenuation", {"at": 955.5}, 29.2479599579791, 2e-3),
    "half a turn": ("phase-shift", "phase", {"at": 955.5}, -180.0, 2e-3),
    # Loaded high-pass/low-pass pair: the centre stays at the geometric mean of the separate corners.
    "centre of the band-pass": ("band-pass", "centre", {}, 1 / (2 * np.pi * np.sqrt(1.5e-7)), 1e-12),
    "bandwidth of the band-pass": ("band-pass", "bandwidth", {}, 1.75e-3 / 1.5e-7 / (2 * np.pi), 1e-12),
    # Compensated divider: dc limit by the resistors, high-frequency limit C1/(C1 + C2).
    "divider at high frequencies": (
        "compensated-divider",
        "gain",
        {"at": 1e7},
        20 * np.log10(22 / 220),
        1e-8,
    ),
}


@pytest.mark.parametrize("case", PUBLISHED)
def test_published_values_come_out(case: str) -> None:
    """Starters that are textbook networks give the textbook's number."""
    name, measure, options, expected, within = PUBLISHED[case]
    circuit = rcnet.load(STARTERS[name])
    assert circuit.network.measure(measure, **options) == pytest.approx(expected, rel=within)


def test_the_notch_is_deep_but_has_a_floor() -> None:
    """The twin-T nulls only if R3 (C1 + C2)(R1 + R2) = C3 R1 R2; half a per cent off, it does not."""
    p, derived = OUTSIDE["hum-notch"].values, ByHand(OUTSIDE["hum-notch"])
    ratio = p["R3"] * (p["C1"] + p["C2"]) * (p["R1"] + p["R2"]) / (p["C3"] * p["R1"] * p["R2"])
    assert ratio == pytest.approx(0.995, abs=0.001)
    # Where the true null would lie: omega^2 = 1/(C1 C2 R3 (R1 + R2)).
    null = 1 / (2 * np.pi * np.sqrt(p["C1"] * p["C2"] * p["R3"] * (p["R1"] + p["R2"])))
    depth = rcnet.load(STARTERS["hum-notch"]).network.measure("attenuation", at=null)
    assert depth == pytest.approx(float(-derived.db(null)), rel=1e-9)
    assert 50 < depth < 80


# ---------------------------------------------------------------------- second opinions


@pytest.mark.parametrize("name", NAMES)
def test_the_read_back_agrees(name: str) -> None:
    """The written netlist, read again and solved another way, gives the same curves."""
    done = confirm(rcnet.load(STARTERS[name]), None, which="read-back")
    assert done.comparison is not None
    assert done.comparison.verdict == "agree"
    assert done.passes()


@pytest.mark.ngspice
@pytest.mark.parametrize("name", NAMES)
def test_ngspice_agrees(name: str) -> None:
    """Ngspice gives the same curves, in every analysis that is compared."""
    circuit = rcnet.load(STARTERS[name])
    done = confirm(circuit, None, which="ngspice")
    assert done.comparison is not None
    assert done.comparison.verdict == "agree"
    assert done.passes()
    compared = {curve.analysis for curve in done.comparison.curves}
    assert compared >= {"ac", "operating point"}
    left_out = {curve.analysis for curve in done.comparison.uncompared} - {"other"}
    wanted = {"transient": circuit.analyses.transient, "noise": circuit.analyses.noise}
    assert compared | left_out == {"ac", "operating point"} | {key for key, run in wanted.items() if run}


@pytest.fixture(scope="module")
def library() -> Iterator[LibraryRunner]:
    """One warm ngspice library for all starters."""
    with LibraryRunner() as runner:
        yield runner


@pytest.mark.ngspice_library
@pytest.mark.parametrize("name", NAMES)
def test_the_ngspice_library_agrees(name: str, library: LibraryRunner) -> None:
    """Ngspice as a library gives the same curves."""
    done = confirm(rcnet.load(STARTERS[name]), None, which="ngspice-library", runner=library)
    assert done.comparison is not None
    assert done.comparison.verdict == "agree"
    assert done.passes()


def test_one_call_confirms_them_all(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """`rcnet confirm` over the whole folder ends with exit code 0 and names every starter."""
    arguments = [
        "confirm",
        *map(str, STARTERS.values()),
        "-o",
        str(tmp_path),
        "--second-opinion",
        "read-back",
    ]
    with pytest.raises(SystemExit) as ended:
        run(arguments)
    assert ended.value.code == 0
    shown = capsys.readouterr().out
    assert all(name in shown and (tmp_path / name / "netlist.cir").is_file() for name in NAMES)


# ---------------------------------------------------------------------- the netlist, by hand


def plain_ngspice(netlist: str, folder: Path, *options: str) -> subprocess.CompletedProcess[str]:
    """Plain ngspice on a netlist given on standard input, as somebody without rcnet would run it."""
    program = find_ngspice()
    assert program is not None
    environment = {"PATH": os.environ.get("PATH", ""), "HOME": str(folder)}
    return subprocess.run(
        [program, "-b", *options],
        input=netlist,
        cwd=folder,
        env=environment,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


@pytest.mark.parametrize("name", NAMES)
def test_the_seal_verifies(name: str, tmp_path: Path) -> None:
    """The netlist, read back from its file, carries an unbroken seal and no finding."""
    rcnet.write_netlist(rcnet.load(STARTERS[name]), tmp_path / "netlist.cir")
    back = rcnet.read_netlist(tmp_path / "netlist.cir")
    assert back.seal is not None
    assert not back.seal.anyway
    assert [finding.code for finding in rcnet.check(back).findings] == DESERVED.get(name, [])


@pytest.mark.ngspice
@pytest.mark.parametrize("name", NAMES)
def test_the_netlist_runs_in_plain_ngspice(
    name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """`rcnet netlist FILE | ngspice -b` ends with 0 and prints every analysis asked for."""
    with pytest.raises(SystemExit) as ended:
        run(["netlist", str(STARTERS[name])])
    assert ended.value.code == 0
    done = plain_ngspice(capsys.readouterr().out, tmp_path)
    assert done.returncode == 0, done.stderr
    assert "analysis not run" not in done.stdout + done.stderr
    wanted = rcnet.load(STARTERS[name]).analyses
    tables = {
        "AC Analysis": wanted.ac,
        "Transient Analysis": wanted.transient,
        "Noise Spectral Density": wanted.noise,
    }
    for title, asked in tables.items():
        assert (title in done.stdout) == bool(asked)


def changed(text: str, part: str, factor: float) -> str:
    """The netlist with one part's value multiplied."""
    pattern = re.compile(rf"^({part} \S+ \S+ )(\S+)$", re.MULTILINE)
    assert len(pattern.findall(text)) == 1
    return pattern.sub(lambda match: f"{match[1]}{float(match[2]) * factor!r}", text)


def simulated(text: str, folder: Path) -> rcnet.Curves:
    """What ngspice, run by hand, makes of a netlist."""
    done = plain_ngspice(text, folder, "-n", "-r", "results.raw")
    assert done.returncode == 0, done.stderr
    return rcnet.read_results(folder / "results.raw")


@pytest.mark.ngspice
@pytest.mark.parametrize("name", NAMES)
class TestChangedPart:
    """Results of a netlist in which somebody changed one part."""

    def test_unchanged_agrees(self, name: str, tmp_path: Path) -> None:
        """The netlist as written, run by hand with all its analyses at once, agrees."""
        circuit = rcnet.load(STARTERS[name])
        curves = simulated(sealed_netlist(circuit).text, tmp_path)
        assert rcnet.compare(circuit, curves).verdict == "agree"

    def test_twenty_per_cent_differ_where_the_part_matters(self, name: str, tmp_path: Path) -> None:
        """The spans cover the frequencies where the hand-derived curves part, and nothing else.

        The worst relative difference is that between the two hand-derived curves, to 6 digits.
        """
        outside, circuit = OUTSIDE[name], rcnet.load(STARTERS[name])
        curves = simulated(changed(sealed_netlist(circuit).text, outside.part, 1.2), tmp_path)
        comparison = rcnet.compare(circuit, curves)
        assert comparison.verdict == "differ"
        label, function = outside.seen or ("v(out)", outside.gain)
        curve = next(each for each in comparison.curves if each.name == label and each.analysis == "ac")
        axis = next(each.axis for each in curves if each.name == label and each.analysis == "ac")
        other = {**outside.values, outside.part: outside.values[outside.part] * 1.2}
        points = [2j * mpmath.pi * mpmath.mpf(f) for f in axis.tolist()]
        apart = np.array([float(abs(function(s, other) / function(s, outside.values) - 1)) for s in points])
        inside = np.zeros(len(axis), dtype=bool)
        for span in curve.spans:
            inside |= (axis >= span.start) & (axis <= span.stop)
        assert inside[apart > 1e-9].all()
        assert (apart[inside] > 1e-14).all()
        assert curve.worst.relative == pytest.approx(apart.max(), rel=1e-6)
        assert apart[axis == curve.worst.at] == pytest.approx(apart.max(), rel=1e-6)
        # What was changed shows where the starter does its work: at a corner, or at its loudest.
        assert any(span.start <= corner <= span.stop for corner in _corners(outside) for span in curve.spans)

    def test_the_seal_notices(self, name: str, tmp_path: Path) -> None:
        """The same change in the file breaks the seal."""
        text = changed(sealed_netlist(rcnet.load(STARTERS[name])).text, OUTSIDE[name].part, 1.2)
        path = tmp_path / "netlist.cir"
        path.write_text(text, "utf-8")
        assert "seal-broken" in [finding.code for finding in rcnet.check(rcnet.read_netlist(path)).findings]


def _corners(outside: Outside) -> list[float]:
    """The cutoffs; for a flat circuit the crossover from resistors to capacitors, 1/(2 pi R1 C1)."""
    found = [float(ByHand(outside).cutoff(edge)) for edge in outside.edges]
    p = outside.values
    return found or [1 / (2 * np.pi * p["R1"] * p["C1"])]
