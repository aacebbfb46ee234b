"""Exponentials and damped sines in netlists: written for ngspice as they are meant, read back, sealed."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from rcnet.circuit import Analyses, Circuit, Exponential, Network, Sine, Source, TransientRun, Waveform
from rcnet.handover import sealed_netlist, with_analyses
from rcnet.netlist import digest, parse_netlist, read_same, write

WRITTEN: dict[str, tuple[Waveform, str]] = {
    "damped sine": (Sine(2.0, 1e3, 0.5, damping=300.0), "SIN(0.5 2 1000 0 300)"),
    "damped and turned": (Sine(2.0, 1e3, 0.5, 30.0, 1e-3, 300.0), "SIN(0.5 2 1000 0.001 300 30)"),
    "turned": (Sine(2.0, 1e3, 0.5, 30.0), "SIN(0.5 2 1000 0 0 30)"),
    "late": (Sine(2.0, 1e3, 0.5, 0.0, 1e-3), "SIN(0.5 2 1000 0.001)"),
    "there and back": (Exponential(1.0, 5.0, 2e-3, 1e-3, 6e-3, 3e-3), "EXP(1 5 0.002 0.001 0.006 0.003)"),
    # ngspice 39 takes its print step for a delay of 0, and lets the wave fall where no time is written.
    "at once, for good": (Exponential(1.0, 5.0, 0.0, 1e-3), "EXP(1 5 1e-30 0.001 1e+30 1)"),
    "at once and back": (Exponential(1.0, 5.0, 0.0, 1e-3, 0.0, 3e-3), "EXP(1 5 1e-30 0.001 1e-30 0.003)"),
}


def filtered(wave: Waveform) -> Circuit:
    """One RC behind a source, looked at for 10 ms."""
    network = Network("flow meter")
    network.add_source(Source("Vin", ("in", "0"), waveform=wave))
    network.add_resistor("R1", "in", "out", 1e3)
    network.add_capacitor("C1", "out", "0", 1e-6)
    run = TransientRun(10e-3, 10e-3 / 500)
    return Circuit(network, name="meter", output=("out",), analyses=Analyses(transient=run))


@pytest.mark.parametrize("name", WRITTEN)
def test_a_wave_is_written_and_comes_back(name: str) -> None:
    """The words on the source's line, and the guard against a netlist that says something else."""
    wave, words = WRITTEN[name]
    written = write(filtered(wave))
    assert f" {words}\n" in written.text
    back = read_same(written).network.sources["Vin"].waveform
    if isinstance(wave, Sine) or wave.rise_delay:
        assert back == wave
    else:
        assert isinstance(back, Exponential)
        assert (back.rise_delay, back.falls) == (1e-30, wave.falls)


@pytest.mark.ngspice
@pytest.mark.parametrize("name", WRITTEN)
def test_ngspice_makes_of_what_is_written_what_is_meant(name: str, ngspice: Callable[..., Any]) -> None:
    """The source's own voltage, at ngspice's own times, to rounding."""
    wave, _ = WRITTEN[name]
    circuit = filtered(wave)
    ran = ngspice(write(circuit).text)
    assert not ran.trouble
    curve = ran.curve("v(in)", "transient")
    exact = circuit.network.transient(curve.axis, "in")
    assert np.abs(curve.values.real - exact).max() <= 1e-12


@pytest.mark.parametrize(
    ("wave", "stop"),
    [
        # The last event, and eight time constants of 1 ms after it.
        (Exponential(0.0, 1.0, 2e-3, 1e-3), 2e-3 + 8e-3 + 8e-3),
        (Exponential(0.0, 1.0, 0.0, 1e-3, 5e-3, 2e-3), 5e-3 + 16e-3 + 8e-3),
        (Sine(1.0, 1e3, damping=1e5), 8e-5 + 8e-3),
        (Sine(1.0, 1e3, 0.0, 0.0, 1e-3, 1e-3), 1e-3 + 10e-3 + 8e-3),
    ],
)
def test_a_look_at_a_wave_lasts_until_it_has_gone(wave: Waveform, stop: float) -> None:
    """Where the circuit asks for no run; its step is never longer than a fiftieth of a swing."""
    run = with_analyses(dataclasses.replace(filtered(wave), analyses=Analyses())).analyses.transient
    assert run is not None
    assert run.stop == pytest.approx(stop, rel=1e-9)
    assert run.step == pytest.approx(min(stop / 500, 1e-3 / 50 if isinstance(wave, Sine) else 1.0), rel=1e-9)


# Written and sealed when a sine had no damping.
SEALED = """\
* Level gauge with a test tone
* Netlist written by rcnet 0.1.0 from gauge.rc.toml.
* The circuit asks for no analysis; those below were chosen by rcnet.
* Sealed by rcnet.
*   checked: 0 errors, 0 warnings, 0 notes
*   expect v(out): upper cutoff 159.1549431 Hz
*   expect v(out) at 1 Hz: -0.000171449205 dB, -0.359995263 deg
*   expect v(out) at 17.7828 Hz: -0.0538824615 dB, -6.37536535 deg
*   expect v(out) at 316.228 Hz: -6.94416315 dB, -63.2842649 deg
*   expect v(out) at 5.62341 kHz: -30.9670697 dB, -88.3788355 deg
*   expect v(out) at 100 kHz: -55.9636084 dB, -89.908811 deg
*   digest 10da7ee403cdc931c6920972b8bdcea06041ba73b9943b38fd2dce0156d2954c
R1 in out 1000
C1 out 0 1e-06
Vin in 0 DC 1 AC 1 SIN(1 2 440 0.001)
.save all
.op
.print op v(out)
.ac dec 20 1 100000
.print ac v(out)
.tran 4.745454545454546e-05 0.02372727272727273
.print tran v(out)
.end
"""


def test_a_seal_from_before_there_was_damping_still_holds() -> None:
    """A sine without damping has the digest it always had; one with damping another."""
    circuit = parse_netlist(SEALED, "gauge.cir")
    assert circuit.seal is not None
    assert circuit.seal.digest == digest(circuit)
    damped = parse_netlist(SEALED.replace("440 0.001)", "440 0.001 3)"), "gauge.cir")
    assert damped.seal is not None
    assert damped.seal.digest != digest(damped)


@pytest.mark.parametrize("name", WRITTEN)
def test_a_sealed_wave_keeps_its_seal(name: str) -> None:
    """What is read back has the digest that was written."""
    back = parse_netlist(sealed_netlist(filtered(WRITTEN[name][0])).text, "meter.cir")
    assert back.seal is not None
    assert back.seal.digest == digest(back)
