"""Couplings of inductors in written netlists: the line, the seal, the way back, ngspice and PySpice."""

from __future__ import annotations

import hashlib
import logging
import math
from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rcnet.circuit import Analyses, Circuit, Network, Part, Sweep
from rcnet.errors import CircuitError
from rcnet.netlist import Names, differences, digest, parse_netlist, read_same, write


def transformer(
    *, coefficient: float = 0.98, first: str = "L1", second: str = "L2", k: str = "K1"
) -> Circuit:
    """A leak listener's isolation transformer, its coupling ahead of its inductors."""
    net = Network("Leak listener: isolation transformer")
    net.add_voltage_source("Vpipe", "in", "0", ac=1)
    net.add_coupling(k, first, second, coefficient)
    net.add_resistor("R1", "in", "p", 50)
    net.add_inductor(first, "p", "0", "1 mH")
    net.add_inductor(second, "out", "0", "4 mH")
    net.add_resistor("R2", "out", "0", 600)
    sweep = Sweep(10.0, 1e7, 10)
    return Circuit(net, "leak-listener", output=("out",), analyses=Analyses(ac=sweep))


def line_of(text: str, name: str) -> str:
    """The netlist line that begins with a name."""
    (line,) = (line for line in text.split("\n") if line.split(" ")[0] == name)
    return line


def test_the_line_names_both_inductors_and_the_coefficient() -> None:
    """`K1 L1 L2 0.98`, where it was added."""
    assert line_of(write(transformer()).text, "K1") == "K1 L1 L2 0.98"


def test_renamed_inductors_are_named_anew() -> None:
    """The line holds the netlist's names where the network's are not safe, or differ only in case."""
    circuit = transformer(first="Lträger", second="Llog;1", k="K/é")
    written = write(circuit)

    name, first, second, coefficient = line_of(written.text, written.names.parts["K/é"]).split()
    assert (name, coefficient) == (written.names.parts["K/é"], "0.98")
    assert (first, second) == (written.names.parts["Lträger"], written.names.parts["Llog;1"])
    assert line_of(written.text, name).isascii()


@pytest.mark.parametrize("kind", ["F", "K"])
def test_a_part_that_names_what_is_not_there_is_refused(kind: str) -> None:
    """One sentence, not a traceback."""
    net = transformer().network
    if kind == "K":
        net.add_coupling("K2", "L1", "Lgone", 0.5)
    else:
        net.add_current_controlled_current_source("F1", "out", "0", "Vgone", 2.0)
    with pytest.raises(CircuitError, match=f"{'K2' if kind == 'K' else 'F1'} names [LV]gone") as caught:
        write(Circuit(net, "leak-listener"))
    assert caught.value.remedy


# ---------------------------------------------------------------------- the seal

# The table whose SHA-256 a seal is, as it was before there were couplings: parts by name (nodes, what is
# sensed, value), sources, analyses, output, options, temperature; numbers as C99 writes them in hexadecimal.
SEALED = (
    '[[["f1","out","0","v1","0x1.0000000000000p-1"],'
    '["l1","out","0","","0x1.0624dd2f1a9fcp-10"],'
    '["r1","in","out","","0x1.f400000000000p+9"]],'
    '[["v1","in","0","0x1.0000000000000p+0","0x0.0p+0","0x0.0p+0",null]],'
    '[null,null,null,false],["out"],[],"0x1.b000000000000p+4"]'
)


CHANGES: dict[str, tuple[Circuit, bool]] = {
    "other coefficient": (transformer(coefficient=math.nextafter(0.98, 1)), True),
    "other sign": (transformer(coefficient=-0.98), True),
    "other name": (transformer(k="K2"), True),
    "case": (transformer(first="l1", k="k1"), False),
}


@pytest.mark.parametrize(("circuit", "changed"), CHANGES.values(), ids=CHANGES.keys())
def test_the_digest_covers_the_coupling(circuit: Circuit, changed: bool) -> None:
    """Its name, its coefficient bit for bit, and both inductors, case apart."""
    assert (digest(circuit) != digest(transformer())) is changed


def test_the_digest_covers_which_inductors_are_coupled() -> None:
    """The same coupling between two others of three breaks the seal; the order of the two does not count."""

    def coupled(*pair: str) -> Circuit:
        net = Network()
        for name in ("L1", "L2", "L3"):
            net.add_inductor(name, "a", "0", 1e-3)
        net.add_coupling("K1", *pair, 0.5)
        return Circuit(net, "leak-listener")

    assert digest(coupled("L1", "L2")) != digest(coupled("L1", "L3"))
    assert digest(coupled("L1", "L2")) == digest(coupled("L2", "L1"))


def test_a_netlist_sealed_before_couplings_keeps_its_digest() -> None:
    """The digest of a network without K, as it was written when only R, C, L and controlled sources were."""
    net = Network()
    net.add_voltage_source("V1", "in", "0", ac=1)
    net.add_resistor("R1", "in", "out", 1000.0)
    net.add_inductor("L1", "out", "0", 0.001)
    net.add_current_controlled_current_source("F1", "out", "0", "V1", 0.5)
    assert digest(Circuit(net, "gauge", output=("out",))) == hashlib.sha256(SEALED.encode()).hexdigest()


# ---------------------------------------------------------------------- there and back


def altered(circuit: Circuit, change: Callable[[Part], Part]) -> Circuit:
    """The circuit with its K changed."""
    net = Network(circuit.network.title)
    for part in circuit.network.parts:
        if part.name in circuit.network.sources:
            net.add_source(circuit.network.sources[part.name])
        else:
            net.add_part(change(part) if part.kind == "K" else part)
    return circuit.with_network(net)


WAYS_TO_DIFFER: dict[str, Callable[[Part], Part]] = {
    "other pair": lambda part: replace(part, couples=("L1", "L3")),
    "turned round": lambda part: replace(part, couples=("L2", "L1")),
    "other coefficient": lambda part: replace(part, value=-part.value),
}


@pytest.mark.parametrize("change", WAYS_TO_DIFFER.values(), ids=WAYS_TO_DIFFER.keys())
def test_what_comes_back_otherwise_is_named(change: Callable[[Part], Part]) -> None:
    """The comparison after writing looks at the pair and the coefficient."""
    circuit = transformer()
    circuit.network.add_inductor("L3", "out", "0", 1e-3)
    names = Names(
        {node: node for node in circuit.network.nodes}, {name: name for name in circuit.network.names}
    )

    assert list(differences(circuit, names, altered(circuit, lambda part: part))) == []
    assert list(differences(circuit, names, altered(circuit, change))) == ["K1"]


@pytest.mark.parametrize("circuit", [transformer(), transformer(first="Lträger", second="LTRÄGER", k="K/1")])
def test_a_written_netlist_comes_back_as_it_went_in(circuit: Circuit) -> None:
    """Written and read: the same pair, the same coefficient to the bit."""
    back = read_same(write(circuit))

    (row,) = back.network.couplings
    first, second = back.network.coupled_by(row)
    values = back.network.arrays().values
    assert (values[row], values[first], values[second]) == (0.98, 1e-3, 4e-3)


@pytest.mark.ngspice
@pytest.mark.parametrize("coefficient", [0.98, 1.0, -0.5])
def test_ngspice_reads_the_written_netlist_as_we_mean_it(
    ngspice: Callable[..., Any], coefficient: float
) -> None:
    """The written netlist runs without a word of complaint and gives the exact response."""
    circuit = transformer(coefficient=coefficient)
    ran = ngspice(write(circuit).text)

    assert (ran.code, ran.trouble) == (0, [])
    assert "Inductive System" not in ran.log
    curve = ran.curve("v(out)")
    exact = circuit.network.response(curve.axis, "out")
    assert np.abs(curve.values - exact).max() <= 1e-10 * np.abs(exact).max()


ODDITIES = {
    "beyond one": ("K1 L1 L2 1.5", "not positive definite"),
    "a pair twice": ("K1 L1 L2 0.3\nK2 L2 L1 0.4", "duplicate K instances"),
    "contradictory": ("L3 c 0 1m\nR3 c 0 50\nK1 L1 L2 0.9\nK2 L2 L3 0.9\nK3 L1 L3 -0.9", "not positive"),
}


@pytest.mark.ngspice
@pytest.mark.parametrize(("lines", "says"), ODDITIES.values(), ids=ODDITIES.keys())
def test_what_is_refused_here_ngspice_only_mentions(
    ngspice: Callable[..., Any], lines: str, says: str
) -> None:
    """Ngspice 39 simulates such couplings with exit code 0 and a line in its log; we refuse them."""
    text = (
        f"* t\nV1 a 0 AC 1\nR1 a b 50\nL1 b 0 1m\nL2 out 0 4m\nR2 out 0 600\n{lines}\n.ac lin 1 1k 1k\n.end\n"
    )
    ran = ngspice(text)
    assert ran.code == 0
    assert says in ran.log
    with pytest.raises(CircuitError):
        parse_netlist(text, "odd.cir").network.response([1e3], "out")


# ---------------------------------------------------------------------- PySpice


@pytest.fixture
def quiet() -> Iterator[None]:
    """PySpice logs a warning about node names that are Python keywords, such as `in`."""
    pytest.importorskip("PySpice", reason="the extra pyspice is not installed")
    logging.getLogger("PySpice").setLevel(logging.CRITICAL)
    yield


@pytest.mark.usefixtures("quiet")
def test_pyspice_gets_the_coupling_after_its_inductors() -> None:
    """PySpice looks the inductors up as it takes a K, by names that begin with a capital."""
    text = str(transformer(first="l1").network.to_pyspice())

    assert line_of(text, "K1").split() == ["K1", "L1", "L2", "0.98"]
    assert text.index("K1 ") > max(text.index("L1 p"), text.index("L2 out"))


@pytest.mark.usefixtures("quiet")
def test_pyspice_there_and_back() -> None:
    """The coupling comes back with its pair and its very coefficient."""
    net = transformer(coefficient=0.1 + 0.2).network
    back = Network.from_pyspice(net.to_pyspice())

    assert back.part("K1") == net.part("K1")


@pytest.mark.usefixtures("quiet")
def test_pyspice_is_not_asked_for_an_inductor_that_is_not_there() -> None:
    """One sentence of ours in place of an error of PySpice's."""
    net = transformer().network
    net.add_coupling("K2", "L1", "Lgone", 0.5)
    with pytest.raises(CircuitError, match="K2 couples 'Lgone'"):
        net.to_pyspice()
