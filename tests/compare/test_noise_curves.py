"""Noise held against the exact densities: spectra, shares of resistors, totals, units and constants."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from rcnet import Curve, Curves, Network, ResultsError
from rcnet.circuit import Analyses, Circuit, Conditions, Sweep
from rcnet.compare import Comparison, compare
from rcnet.curves import parse_raw
from rcnet.netlist import deck, write
from rcnet.opinion import find_ngspice
from rcnet.opinion.ngspice import Expected, run_deck

R1, R2, C = 1e3, 3e3, 1e-6
GRID = np.geomspace(1, 1e6, 61)
K2014 = 1.38064852e-23  # J/K, CODATA 2014, as in ngspice 39
K2019 = 1.380649e-23  # J/K, exact


def divider(**more: Any) -> Network:
    """Two resistors and a capacitor across the lower one."""
    net = Network("Level gauge divider")
    net.add_voltage_source("V1", "in", "0", ac=1, **more)
    net.add_resistor("R1", "in", "out", R1)
    net.add_resistor("R2", "out", "0", R2)
    net.add_capacitor("C1", "out", "0", C)
    return net


def circuit(network: Network | None = None, **more: Any) -> Circuit:
    """A circuit that asks for a noise analysis."""
    noise = more.pop("noise", Sweep(1, 1e6, 10))
    return Circuit(network or divider(), "gauge", output=("out",), analyses=Analyses(noise=noise), **more)


def density(frequency: Any = GRID, k: float = K2014, kelvin: float = 300.15) -> Any:
    """The textbook density: sqrt(4 k T R) of the two in parallel, through their pole."""
    parallel = R1 * R2 / (R1 + R2)
    pole = 2 * np.pi * np.asarray(frequency) * parallel * C
    return np.sqrt(4 * k * kelvin * parallel / (1 + pole**2))


def spectrum(values: Any, name: str = "onoise_spectrum", unit: str = "V/sqrt(Hz)", **more: Any) -> Curve:
    """A curve of noise."""
    return Curve(name, "noise", GRID, np.asarray(values, float), unit, **more)


def held(*curves: Curve, against: Circuit | None = None) -> Comparison:
    """The comparison of these curves with the divider."""
    return compare(against or circuit(), Curves("bench.raw", curves))


def verdicts(found: Comparison) -> dict[str, str]:
    """Name to verdict."""
    return {curve.name: curve.verdict for curve in found.curves}


def test_either_constant_agrees_and_a_hundredth_of_a_decibel_differs() -> None:
    """Boltzmann's constant of 2014 is allowed beside the exact one; a density off by 1e-3 is not."""
    for k in (K2014, K2019):
        assert held(spectrum(density(k=k))).verdict == "agree"
    (curve,) = held(spectrum(1.001 * density())).curves
    assert (curve.verdict, curve.unit) == ("differ", "V/sqrt(Hz)")
    assert curve.worst.db == pytest.approx(20 * math.log10(1.001), rel=1e-3)
    assert curve.worst.deg is None


def test_powers_are_told_by_their_unit() -> None:
    """A file in V^2/Hz is held against the square of the density."""
    assert held(spectrum(density() ** 2, unit="V^2/Hz")).verdict == "agree"
    assert held(spectrum(density() ** 2)).verdict == "differ"


def test_the_temperature_counts() -> None:
    """The noise is that of the circuit's own temperature."""
    cold = circuit(conditions=Conditions(-40.0, -40.0, -40.0))
    assert held(spectrum(density(kelvin=233.15)), against=cold).verdict == "agree"
    assert held(spectrum(density()), against=cold).verdict == "differ"


def test_shares_of_resistors() -> None:
    """A resistor's share is sqrt(4 k T / R) over the parallel impedance, by either of its names."""
    gain = 1 / (R1 + R2) / np.sqrt(1 + (2 * np.pi * GRID * R1 * R2 / (R1 + R2) * C) ** 2)
    of_r1 = np.sqrt(4 * K2014 * 300.15 * R1) * R2 * gain
    of_r2 = np.sqrt(4 * K2014 * 300.15 * R2) * R1 * gain
    curves = (spectrum(of_r1, "onoise_r1"), spectrum(of_r2, "onoise_r2_thermal"))
    assert verdicts(held(*curves)) == {"onoise(R1)": "agree", "onoise(R2)": "agree"}
    assert verdicts(held(spectrum(of_r2, "onoise_r1"))) == {"onoise(R1)": "differ"}


def test_noise_below_zero_is_refused() -> None:
    """A density below zero is an error, never a difference."""
    values = density()
    values[3] *= -1
    with pytest.raises(ResultsError, match="noise below zero"):
        held(spectrum(values))


def test_totals_need_the_band_that_a_spectrum_tells() -> None:
    """A total is compared over the band of the spectrum beside it; alone it is not."""
    parallel = R1 * R2 / (R1 + R2)
    pole = 1 / (2 * np.pi * parallel * C)
    area = 4 * K2019 * 300.15 * parallel * pole * (np.arctan(1e6 / pole) - np.arctan(1 / pole))
    total = Curve("v(onoise_total)", "other", np.zeros(1), np.array([math.sqrt(area)]), "V")
    found = held(spectrum(density()), total)
    assert verdicts(found) == {"onoise_spectrum": "agree", "onoise_total": "agree"}
    assert found.curves[1].worst.exact == pytest.approx(math.sqrt(area), rel=1e-9)
    assert found.curves[1].single
    off = Curve("v(onoise_total)", "other", np.zeros(1), np.array([1.02 * math.sqrt(area)]), "V")
    assert verdicts(held(spectrum(density()), off))["onoise_total"] == "differ"
    with pytest.raises(ResultsError, match="no spectrum"):
        held(total)


def test_two_sources_refer_the_noise_to_neither() -> None:
    """With two sources that carry ac, what the input is cannot be told; the output is compared."""
    net = divider()
    net.add_voltage_source("V2", "x", "0", ac=1)
    net.add_resistor("R3", "x", "out", 1e12)
    found = held(spectrum(density()), spectrum(density(), "inoise_spectrum"), against=circuit(net))
    assert [curve.name for curve in found.curves] == ["onoise_spectrum"]
    assert "not just one source" in found.uncompared[0].why


def test_without_an_output_there_is_no_noise() -> None:
    """Which node a spectrum belongs to stands in no results file."""
    with pytest.raises(ResultsError, match="not about this circuit"):
        compare(Circuit(divider(), "gauge"), Curves("bench.raw", (spectrum(density()),)))


# ---------------------------------------------------------------------- the real simulator


def simulated(whole: Circuit, *, by_part: bool = False, powers: bool = False) -> Curves:
    """What ngspice makes of a circuit's noise analysis."""
    program, written = find_ngspice(), write(whole)
    assert program is not None
    text = deck(written.circuit, written.names, "noise")
    if by_part:
        text = "\n".join(f"{line} 1" if line.startswith(".noise") else line for line in text.split("\n"))
    if powers:
        text = text.replace("\n.noise", "\n.options sqrnoise\n.noise")
    expected = Expected("Noise Spectral Density Curves", ("onoise_spectrum",))
    return parse_raw(run_deck(text, expected, executable=program).raw, "results.raw")


@pytest.mark.ngspice
@pytest.mark.parametrize("powers", [False, True])
@pytest.mark.parametrize("per_decade", [2, 5, 20])
def test_ngspice_agrees(per_decade: int, powers: bool) -> None:
    """Spectra, shares and both totals of ngspice agree, densities or powers, however few the points."""
    whole = circuit(noise=Sweep(1, 1e6, per_decade))
    found = compare(whole, simulated(whole, by_part=True, powers=powers))
    assert found.verdict == "agree", [(curve.name, curve.worst) for curve in found.curves if curve.spans]
    names = {curve.name for curve in found.curves}
    assert names >= {"onoise_spectrum", "inoise_spectrum", "onoise_total", "inoise_total", "onoise(R1)"}
    # Its total is off by what its points are apart, 2.6 % at two a decade (reference on ngspice, 10).
    total = next(curve for curve in found.curves if curve.name == "onoise_total")
    apart = {2: 0.02, 5: 0.002, 20: 1e-4}[per_decade]
    assert apart < total.worst.relative < 4 * apart


@pytest.mark.ngspice
@pytest.mark.parametrize("part", ["R1", "R2", "C1"])
def test_ngspice_with_another_part_differs(part: str) -> None:
    """A part off by 1 % makes another noise."""
    wrong = circuit(divider().with_values({part: divider().part(part).value * 1.01}))
    found = compare(circuit(), simulated(wrong))
    assert verdicts(found)["onoise_spectrum"] == "differ"


@pytest.mark.ngspice
def test_noise_of_a_current_source_is_referred_in_amperes() -> None:
    """Behind a current source the noise at the input is a current."""
    net = Network("Level sender")
    net.add_current_source("I1", "0", "out", ac=1)
    net.add_resistor("R1", "out", "0", R1)
    net.add_capacitor("C1", "out", "0", C)
    whole = circuit(net)
    found = compare(whole, simulated(whole))
    assert found.verdict == "agree"
    units = {curve.name: curve.unit for curve in found.curves}
    assert (units["inoise_spectrum"], units["inoise_total"]) == ("A/sqrt(Hz)", "A")
