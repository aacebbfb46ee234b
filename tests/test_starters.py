"""The starter circuits do what they say.

Every expected number comes from outside rcnet: two-port chain matrices, nodal equations and closed forms
written down here by hand and evaluated with mpmath, published values, and ngspice run by hand.
"""

from __future__ import annotations

import os
import re
import subprocess
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import reduce
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

Values = Mapping[str, float]
Function = Callable[[Any, Values], Any]  # of s in rad/s and the parts' values


@dataclass(frozen=True)
class Outside:
    """What a starter does, by hand.

    gain, drive, back: response, impedance at the source, impedance at the output, at s
    peak: where the response is greatest, rad/s; 0 and inf stand for the limits
    edges: an interval in Hz that holds each half-power frequency; part: one whose change shows
    seen: the voltage compared with ngspice where it is not the output, and its name
    """

    values: Values
    gain: Function
    drive: Function
    back: Function
    peak: Callable[[Values], Any]
    edges: Mapping[str, tuple[float, float]]
    part: str
    seen: tuple[str, Function] | None = None


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
        (p["R1"], p["R2"], 1 / (s * p["C3"])),
        (1 / (s * p["C1"]), 1 / (s * p["C2"]), p["R3"]),
    ]
    for a, b, c in tees:
        d = a * b + a * c + b * c
        total = [x + y for x, y in zip(total, ((b + c) / d, -c / d, (a + c) / d), strict=True)]
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


CABLE = {f"R{k}": 8.2 for k in range(1, 51)} | {f"C{k}": 4.7e-9 for k in range(1, 51)}
THREE = {"R1": 1e4, "C1": 15e-9, "R2": 1e4, "C2": 15e-9, "R3": 1e4, "C3": 15e-9}

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
    ),
    "valve-positioner": Outside(
        {"R1": 4.7e3, "C1": 1e-6, "R2": 47e3, "C2": 100e-9, "Rload": 1e6},
        **chain(
            lambda s, p: [*rc_sections(("R1", "C1"), ("R2", "C2"))(s, p), shunt(1 / mpmath.mpf(p["Rload"]))]
        ),
        peak=lambda p: 0,
        edges={"upper": (0.1, 1e4)},
        part="R2",
    ),
    "reed-debounce": Outside(
        {"Rpull": 22e3, "R1": 1e3, "C1": 100e-9, "Rin": 10e6},
        **chain(lambda s, p: [series(p["Rpull"] + p["R1"]), shunt(s * p["C1"] + 1 / mpmath.mpf(p["Rin"]))]),
        peak=lambda p: 0,
        edges={"upper": (1, 1e4)},
        part="C1",
    ),
    "leak-microphone": Outside(
        {"Rmic": 2.2e3, "C1": 22e-9, "Rup": 220e3, "Rdown": 220e3, "R1": 10e3, "C2": 1e-9},
        **chain(leak_chain),
        peak=leak_peak,
        edges={"lower": (1, 800), "upper": (1100, 1e6)},
        part="Rdown",
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
    ),
    "buffered-cascade": Outside(
        THREE,
        gain=buffered,
        drive=lambda s, p: p["R1"] + 1 / (s * p["C1"]),
        back=lambda s, p: par(p["R3"], 1 / (s * p["C3"])),
        peak=lambda p: 0,
        edges={"upper": (10, 1e4)},
        part="R2",
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

    def measure(self, name: str, options: Mapping[str, Any]) -> float:
        """Any measure the starters claim."""
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
        """Three to six claims, all hold; the only findings are the hand formulas meant to mislead."""
        circuit = rcnet.load(STARTERS[name])
        done = rcnet.check(circuit)
        assert 3 <= len(done.claims) <= 6
        assert [result.verdict for result in done.claims] == ["holds"] * len(done.claims)
        assert [finding.code for finding in done.findings] == ["hand-misleads"] * (name in MISLEADING)
        assert all(MISLEADING[name] in finding.message for finding in done.findings)

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
LINE = 50 * 8.2 * 50 * 4.7e-9  # total R times total C of the cable, s
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
    "Elmore delay of fifty lengths": ("instrument-cable", "elmore_delay", {}, LINE * 51 / 100, 1e-12),
    # W. Thomson 1855: the evenly distributed line, 0.387125842/(R C); fifty lengths are 2 % below.
    "distributed line": (
        "instrument-cable",
        "cutoff",
        {},
        0.387125842025788656 / LINE,
        0.025,
    ),
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
    assert rcnet.check(back).findings == ()


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
