"""Circuits to and from users of PySpice."""

from __future__ import annotations

import builtins
import logging
import os
import subprocess
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import rcnet
from rcnet.curves import parse_raw

pytest.importorskip("PySpice", reason="the extra pyspice is not installed")

FREQUENCY = [10.0, 1e3, 1e5]


@pytest.fixture(autouse=True)
def quiet() -> None:
    """PySpice logs a warning about node names that are Python keywords, such as `in`."""
    logging.getLogger("PySpice").setLevel(logging.CRITICAL)


def every_kind() -> rcnet.Network:
    """A pump station's filter with one part of each kind."""
    net = rcnet.Network("Pump station: pressure filter")
    wave = {"low": 0, "high": 5, "frequency": "1.2 kHz", "rise": "1us", "fall": "2us"}
    net.add_voltage_source("Vin", "in", "0", ac=1, dc=2.5, square=wave)
    net.add_voltage_source("Vsense", "a", "b", dc=0)
    net.add_current_source("Ibias", "0", "b", dc=1e-3, sine={"amplitude": 1e-3, "frequency": 50})
    net.add_resistor("R1", "in", "a", 0.1 + 0.2)
    net.add_capacitor("C1", "b", "0", 100e-9 / 3)
    net.add_inductor("L1", "b", "c", "10 mH")
    net.add_resistor("R2", "c", "0", "4k7")
    net.add_voltage_controlled_voltage_source("E1", "d", "0", "c", "0", 2)
    net.add_voltage_controlled_current_source("G1", "0", "e", "d", "c", 1e-3)
    net.add_resistor("R3", "e", "0", "1k")
    net.add_current_controlled_current_source("F1", "0", "out", "Vsense", 0.5)
    net.add_resistor("R4", "out", "0", "2k2")
    net.add_current_controlled_voltage_source("H1", "h", "0", "Vsense", 100)
    net.add_resistor("R5", "h", "out", "10k")
    return net


def test_there_and_back() -> None:
    """Every part comes back with its nodes and its very value, every source with its drive."""
    net = every_kind()
    back = rcnet.Network.from_pyspice(net.to_pyspice())

    assert back.names == net.names
    for part in net.parts:
        twin = back.part(part.name)
        assert (twin.kind, twin.nodes, twin.value.hex(), twin.senses) == (
            part.kind,
            part.nodes,
            part.value.hex(),
            part.senses,
        )
    assert back.sources == net.sources


@pytest.mark.ngspice
def test_ngspice_on_pyspices_text_gives_our_response(tmp_path: Path) -> None:
    """The text PySpice makes of the circuit, run by ngspice, has the network's response."""
    net = every_kind()
    deck = f"{net.to_pyspice()}\n.options noopac\n.ac dec 1 10 100k\n.end\n"
    (tmp_path / "in.cir").write_text(deck)
    subprocess.run(
        [os.environ.get("RCNET_NGSPICE", "ngspice"), "-b", "-n", "-r", "out.raw", "-o", "out.log", "in.cir"],
        cwd=tmp_path,
        env={"HOME": str(tmp_path), "PATH": os.environ["PATH"]},
        stdin=subprocess.DEVNULL,
        check=True,
    )
    curve = parse_raw((tmp_path / "out.raw").read_bytes(), "out.raw").get("v(out)", "ac")
    assert curve is not None
    np.testing.assert_allclose(curve.values, net.response(curve.axis, "out"), rtol=1e-9)


def test_pyspices_own_circuits_are_read() -> None:
    """Units and source classes of PySpice are read; the corner of 1 kohm and 1 uF is 1/(2 pi RC)."""
    from PySpice.Spice.Netlist import Circuit
    from PySpice.Unit import u_kOhm, u_uF

    circuit = Circuit("Level gauge")
    circuit.SinusoidalVoltageSource("in", "in", circuit.gnd, amplitude=1, frequency=50)
    circuit.R("1", "in", "out", u_kOhm(1))
    circuit.C("1", "out", circuit.gnd, u_uF(1))
    net = rcnet.Network.from_pyspice(circuit)

    assert net.measure("cutoff") == pytest.approx(1 / (2 * np.pi * 1e-3), rel=1e-12)


def test_what_is_not_linear_is_refused() -> None:
    """A diode is named with its line."""
    from PySpice.Spice.Netlist import Circuit

    circuit = Circuit("Valve")
    circuit.R("1", "in", circuit.gnd, 1e3)
    circuit.D("1", "in", circuit.gnd, model="D1N4148")
    with pytest.raises(rcnet.CircuitError, match="D1"):
        rcnet.Network.from_pyspice(circuit)
    with pytest.raises(rcnet.CircuitError, match="no PySpice circuit"):
        rcnet.Network.from_pyspice("R1 in 0 1k")


def test_missing_package_names_its_command(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without PySpice the error says how to install it."""
    real = builtins.__import__

    def blocked(name: str, *rest: Any, **more: Any) -> Any:
        if name.startswith("PySpice"):
            raise ImportError(name)
        return real(name, *rest, **more)

    monkeypatch.setattr(builtins, "__import__", blocked)
    with pytest.raises(rcnet.CircuitError, match="PySpice is not installed") as caught:
        every_kind().to_pyspice()
    assert caught.value.remedy == 'Run: pip install "rcnet[pyspice]"'
