"""Netlists of subcircuits at random: their answers are those of ngspice, and those of flat netlists."""

from __future__ import annotations

import random
from itertools import pairwise
from pathlib import Path

import pytest
from beside_ngspice import both

from rcnet.netlist import parse_netlist, write

DECKS = 25


class Maker:
    """A netlist with parameters, functions, models and subcircuits within one another."""

    def __init__(self, seed: int) -> None:
        self.chance = random.Random(seed)
        self.resistances: list[str] = []
        self.capacitances: list[str] = []
        # Name -> ports, parameters that may be given, all parameters it has.
        self.cells: dict[str, tuple[int, list[str], set[str]]] = {}

    def number(self) -> str:
        """A value without its prefix."""
        return str(self.chance.choice([1, 2.2, 3.3, 4.7, 6.8]))

    def value(self, names: list[str], prefix: str) -> str:
        """A number, a bare name, or an expression, in braces or quotes."""
        number = self.number() + prefix
        if not names or self.chance.random() < 0.35:
            return number
        a, b = self.chance.choice(names), self.chance.choice(names)
        written = [
            "{%s}",
            "'%s'",
            "%s",
            "{%s*1.5}",
            "{f(%s)}",
            "'(%s+X)/2'",
            "{max(%s,X)}",
            "{%s>X ? %s : X}",
            "{%s+%s}",
        ]
        text = self.chance.choice(written).replace("X", number)
        return text.replace("%s", a, 1).replace("%s", b)

    def netlist(self) -> str:
        """The whole of it, its blocks in any order."""
        for k in range(self.chance.randint(1, 5)):
            self.resistances.append(f"p{k}")
        for k in range(self.chance.randint(1, 3)):
            self.capacitances.append(f"c{k}")
        parameters = [
            f".param {p}={self.value(self.resistances[:k], 'k')}" for k, p in enumerate(self.resistances)
        ]
        parameters += [
            f".param {c}={self.value(self.capacitances[:k], 'n')}" for k, c in enumerate(self.capacitances)
        ]
        self.chance.shuffle(parameters)
        definitions = [self.definition(0, []) for _ in range(self.chance.randint(1, 4))]
        blocks = [*definitions, parameters, self.body(["n0", "n1", "n2"], self.resistances, list(self.cells))]
        self.chance.shuffle(blocks)
        lines = [line for block in blocks for line in block]
        head = "* gauges\nV1 n0 0 DC 0 AC 1\n.func f(x) {x*2+x/4}\n.model rm r(tc1=1e-3 tc2=1e-5)\n"
        head += f".temp {self.chance.choice([27, 47, -10, 85])}\n"
        text = head + "\n".join(lines) + "\n.options noopac\n.ac dec 2 10 1meg\n.end\n"
        return text.upper() if self.chance.random() < 0.2 else text

    def definition(self, level: int, outer: list[str]) -> list[str]:
        """A subcircuit, perhaps with another inside."""
        name = f"s{level}{len(self.cells)}{self.chance.randrange(1000)}"
        ports = [f"a{k}" for k in range(self.chance.randint(1, 3))]
        given = [f"r{k}" for k in range(self.chance.randint(0, 2))]
        defaults = " ".join(f"{each}={self.number()}k" for each in given)
        names, inner, local = [*self.resistances, *given, *given], list[str](), list[str]()
        if self.chance.random() < 0.4:
            local = [f".param q={self.value(names, 'k')}"]
        usable = list(self.cells) if level == 0 else outer
        before = set(self.cells)
        if level < 2 and self.chance.random() < 0.4:
            inner = self.definition(level + 1, usable)
        nested = [cell for cell in self.cells if cell not in before]
        body = self.body(ports, [*names, *(["q"] if local else [])], [*usable, *nested][-3:])
        for cell in nested:
            del self.cells[cell]
        self.cells[name] = (len(ports), given, {*given, *(["q"] if local else [])})
        ends = f".ends {name}" if self.chance.random() < 0.5 else ".ends"
        return [f".subckt {name} {' '.join(ports)} {defaults}", *local, *inner, *body, ends]

    def body(self, ports: list[str], names: list[str], cells: list[str]) -> list[str]:
        """Parts that hold all nodes together, and some more; instances."""
        chance = self.chance
        nodes = [*ports, *(f"m{k}" for k in range(chance.randint(0, 2)))]
        parts: list[str] = []
        for a, b in pairwise(nodes):
            more = chance.choice(["", "", "", " m=2", " tc1=2e-3", " tc1={1m} tc2=1e-6"])
            model = "rm " if chance.random() < 0.15 else ""
            parts.append(f"R# {a} {b} {model}{self.value(names, 'k')}{more}")
        for _ in range(chance.randint(1, 3)):
            other = chance.choice([*nodes, "0", "gnd"])
            parts.append(f"C# {chance.choice(nodes)} {other} {self.value(self.capacitances, 'n')}")
        if chance.random() < 0.3:
            parts.append(f"G# {chance.choice(nodes)} 0 {chance.choice(nodes)} 0 {{{self.number()}u}}")
        if chance.random() < 0.2:
            parts.append(f"L# {chance.choice(nodes)} 0 {self.number()}m")
        if chance.random() < 0.2:
            parts += [f"E# e 0 {chance.choice(nodes)} 0 .5", f"R# e {chance.choice(nodes)} 1k"]
        parts += [self.instance(cell, nodes, names) for cell in cells if chance.random() < 0.7]
        return [part.replace("#", str(k), 1) for k, part in enumerate(parts)]

    def instance(self, cell: str, nodes: list[str], names: list[str]) -> str:
        """A use of a subcircuit; no name in what it is given means another thing inside."""
        ports, given, own = self.cells[cell]
        pairs = []
        for key in given:
            clear = [name for name in names if name == key or name not in own]
            if self.chance.random() < 0.6:
                pairs.append(f"{key}={self.value(clear, 'k')}")
        word = "params: " if pairs and self.chance.random() < 0.2 else ""
        return (
            f"X# {' '.join(self.chance.choice(nodes) for _ in range(ports))} {cell} {word}{' '.join(pairs)}"
        )


@pytest.mark.ngspice
@pytest.mark.parametrize("seed", range(DECKS))
def test_the_answer_is_that_of_ngspice(tmp_path: Path, seed: int) -> None:
    """Every node inside every instance has the voltage that ngspice finds, at its name."""
    both(tmp_path, Maker(seed).netlist()).require_same()


@pytest.mark.parametrize("seed", range(DECKS, DECKS + 10))
def test_the_answer_is_that_of_the_flat_netlist(seed: int) -> None:
    """Written out part by part and read again, it is the same network."""
    circuit = parse_netlist(Maker(seed).netlist(), "gauges.cir")
    written = write(circuit)
    flat = parse_netlist(written.text, "flat.cir")
    assert not flat.subcircuits
    assert len(flat.network) == len(circuit.network)
    for part in circuit.network.parts:
        if part.name not in circuit.network.sources:
            assert flat.network.part(written.names.parts[part.name]).value == part.value
    frequencies = [10.0, 1e3, 1e5]
    nodes = circuit.network.nodes[1:]
    here = circuit.network.response(frequencies, list(nodes))
    there = flat.network.response(frequencies, [written.names.nodes[node] for node in nodes])
    assert abs(here - there).max() <= 1e-12
