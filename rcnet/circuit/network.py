"""The network: parts between nodes, held as plain arrays with a table of names."""

from __future__ import annotations

import importlib
import math
from array import array
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import chain
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from ..errors import CircuitError
from ..values import Tolerance, parse_quantity, parse_rating, parse_tempco, parse_tolerance
from .ladder import parse_section
from .names import check_name, check_node
from .parts import KINDS, Kind, Part, Source
from .shown import shown
from .waveform import Waveform

if TYPE_CHECKING:
    import networkx

GROUND = "0"


@dataclass(frozen=True)
class PartArrays:
    """The network as arrays; row k is part k.

    kinds: uint8 (parts,), the ASCII code of the kind's letter
    nodes: int64 (parts, 4), node indices, -1 where a kind has fewer than four (K has none); ground is 0
    values: float64 (parts,), base units; for sources their operating value
    node_count: int, ground included
    """

    kinds: npt.NDArray[np.uint8]
    nodes: npt.NDArray[np.int64]
    values: npt.NDArray[np.float64]
    node_count: int


@dataclass(frozen=True, slots=True)
class _Extras:
    tolerance: Tolerance | None = None
    rating: tuple[float, str] | None = None
    tempco: float | None = None


class Network:
    """A network of resistors, capacitors, inductors (coupled ones too), controlled and independent sources.

    Parts are added one after another; analyses never change a network, and `with_values` gives a changed
    copy. Node and part names are case-sensitive text without blanks; ground is `"0"`.
    """

    def __init__(self, title: str = "") -> None:
        self.title = title
        self._names: list[str] = []
        self._index: dict[str, int] = {}
        self._kinds = bytearray()
        self._nodes = array("q")
        self._values = array("d")
        self._node_names: list[str] = [GROUND]
        self._node_index: dict[str, int] = {GROUND: 0}
        self._extras: dict[int, _Extras] = {}
        self._senses: dict[int, str] = {}
        self._couples: dict[int, tuple[str, str]] = {}
        self._coupled: dict[frozenset[str], str] = {}  # each pair of inductors -> the K that couples it
        self._sources: dict[str, Source] = {}
        self._arrays: PartArrays | None = None

    # ------------------------------------------------------------------ building

    def add_resistor(self, name: str, a: str, b: str, value: str | float, **extras: Any) -> None:
        """Add a resistor between nodes a and b; value in ohm, or text as `"4k7"`.

        Options: tolerance (`"1%"`, 0.01), rating (`"0.1W"`), tempco (`"100ppm"`, in 1/K as a number).
        """
        self._add_valued("R", name, (a, b), value, extras)

    def add_capacitor(self, name: str, a: str, b: str, value: str | float, **extras: Any) -> None:
        """Add a capacitor; value in farad, or text as `"10 nF"`. Options as for a resistor."""
        self._add_valued("C", name, (a, b), value, extras)

    def add_resistors(
        self, names: Iterable[str], a: Iterable[str], b: Iterable[str], values: npt.ArrayLike
    ) -> None:
        """Add many resistors at once, the k-th between the k-th of `a` and of `b`; values (parts,), ohm.

        For networks of many thousand parts. Raises CircuitError, with nothing added, where one is not right.
        """
        listed = list(names)
        self._add_many("R" * len(listed), listed, list(a), list(b), values)

    def add_capacitors(
        self, names: Iterable[str], a: Iterable[str], b: Iterable[str], values: npt.ArrayLike
    ) -> None:
        """Add many capacitors at once, values (parts,) in farad; see `add_resistors`."""
        listed = list(names)
        self._add_many("C" * len(listed), listed, list(a), list(b), values)

    def add_passives(
        self, names: Iterable[str], a: Iterable[str], b: Iterable[str], values: npt.ArrayLike
    ) -> None:
        """Add many resistors and capacitors at once, in any order; the first letter says which it is.

        See `add_resistors`.
        """
        listed = list(names)
        letters = "".join([name[:1] for name in listed]).upper()
        self._add_many(letters, listed, list(a), list(b), values)

    def add_inductor(self, name: str, a: str, b: str, value: str | float, **extras: Any) -> None:
        """Add an inductor; value in henry. Options as for a resistor."""
        self._add_valued("L", name, (a, b), value, extras)

    def add_coupling(self, name: str, first: str, second: str, coefficient: str | float) -> None:
        """Add a K: two inductors, named in any order and before or after this, share a magnetic field.

        coefficient: from -1 to 1; the mutual inductance is coefficient sqrt(L1 L2). The first node of each
        inductor carries its dot: current into both dots magnetises alike where the coefficient is positive.
        Raises CircuitError for a coefficient beyond one, one inductor twice, or a pair coupled already.
        """
        self._add_valued("K", name, (), coefficient, {}, couples=(first, second))

    def add_voltage_controlled_voltage_source(
        self, name: str, a: str, b: str, control_a: str, control_b: str, gain: str | float
    ) -> None:
        """Add an E source: v(a) - v(b) = gain (v(control_a) - v(control_b))."""
        self._add_valued("E", name, (a, b, control_a, control_b), gain, {})

    def add_voltage_controlled_current_source(
        self, name: str, a: str, b: str, control_a: str, control_b: str, transconductance: str | float
    ) -> None:
        """Add a G source: transconductance (v(control_a) - v(control_b)) flows from a through it to b."""
        self._add_valued("G", name, (a, b, control_a, control_b), transconductance, {})

    def add_current_controlled_current_source(
        self, name: str, a: str, b: str, sensed: str, gain: str | float
    ) -> None:
        """Add an F source: gain times the current through voltage source `sensed`, from a through it to b."""
        self._add_valued("F", name, (a, b), gain, {}, senses=sensed)

    def add_current_controlled_voltage_source(
        self, name: str, a: str, b: str, sensed: str, transresistance: str | float
    ) -> None:
        """Add an H source: v(a) - v(b) = transresistance times the current through the source `sensed`."""
        self._add_valued("H", name, (a, b), transresistance, {}, senses=sensed)

    def add_voltage_source(self, name: str, a: str, b: str, **drive: Any) -> None:
        """Add a voltage source, v(a) - v(b); drive: ac, ac_phase, dc and a waveform: square, sine, step,
        exponential or points.

        A waveform is a dict with the keys of the circuit file, or a Waveform object as `waveform=`.
        """
        self.add_source(_source("V", name, a, b, drive))

    def add_current_source(self, name: str, a: str, b: str, **drive: Any) -> None:
        """Add a current source, its current flowing from a through it to b; drive as for a voltage source."""
        self.add_source(_source("I", name, a, b, drive))

    def add_source(self, source: Source) -> None:
        """Add an independent source given as a record."""
        check_name(source.name, "source name")
        if source.kind not in "VI":
            raise CircuitError(
                f"the source is called {source.name!r}.", remedy="Let its name begin with V or I, as Vin."
            )
        self._append(source.kind, source.name, source.nodes, source.operating_value)
        self._sources[source.name] = source

    def add_part(self, part: Part) -> None:
        """Add a part given as a record."""
        if part.kind in KINDS and KINDS[part.kind].is_source:
            raise CircuitError(f"{part.name} is a source.", remedy="Add it with add_source.")
        row = self._append(part.kind, part.name, part.nodes, part.value, part.senses, part.couples)
        if part.tolerance is not None or part.rating is not None or part.tempco is not None:
            self._extras[row] = _Extras(part.tolerance, part.rating, part.tempco)

    def add_ladder(self, start: str, end: str, sections: Iterable[str]) -> None:
        """Add sections from one node to another.

        `"series R2 10k 1%"` stands along the way, `"shunt C2 4n7"` from there to ground. Nodes between are
        named after the end: `end_1`, `end_2`, ... Raises CircuitError for a section that cannot be read, and
        for a path without a series part.
        """
        for part in self.ladder_parts(start, end, sections):
            self.add_part(part)

    def ladder_parts(self, start: str, end: str, sections: Iterable[str]) -> list[Part]:
        """The parts `add_ladder` would add, in order; nothing is changed."""
        parsed = [parse_section(text) for text in sections]
        steps = sum(1 for section in parsed if section.series)
        if steps == 0:
            raise CircuitError(
                f"the ladder from {shown(start)} to {shown(end)} has no series part.",
                remedy='Add at least one, as "series R1 10k".',
            )
        names = self._between(end, steps - 1)
        path = [start, *names, end]
        here, parts = 0, []
        for section in parsed:
            nodes = (path[here], path[here + 1]) if section.series else (path[here], GROUND)
            here += section.series
            parts.append(replace(section.part, nodes=nodes))
        return parts

    def _between(self, end: str, count: int) -> list[str]:
        names: list[str] = []
        number = 0
        while len(names) < count:
            number += 1
            if (name := f"{end}_{number}") not in self._node_index:
                names.append(name)
        return names

    def _add_valued(
        self,
        letter: str,
        name: str,
        nodes: tuple[str, ...],
        value: str | float,
        extras: dict[str, Any],
        *,
        senses: str | None = None,
        couples: tuple[str, str] | None = None,
    ) -> None:
        kind = KINDS[letter]
        check_name(name, "part name")
        if name[0].upper() != letter:
            raise CircuitError(
                f"the {kind.name} is called {shown(name)}.",
                remedy=f"Let its name begin with {letter}, as {letter}1.",
            )
        number = parse_quantity(value, kind.unit, name)
        self.add_part(_with_extras(Part(name, letter, nodes, number, senses, couples=couples), extras))

    def _add_many(
        self, letters: str, names: list[str], a: list[str], b: list[str], values: npt.ArrayLike
    ) -> None:
        numbers = _many_values(letters, names, a, b, values)
        for node in chain(a, b):
            if not isinstance(node, str):
                check_node(node)
        index = self._node_index
        mentioned = dict.fromkeys(chain.from_iterable(zip(a, b, strict=True)))
        fresh = [node for node in mentioned if node not in index]
        if len(set(names)) != len(names) or not self._index.keys().isdisjoint(names):
            counts = Counter(chain(self._index, names))
            twice = next(name for name in names if counts[name] > 1)
            raise CircuitError(
                f"there are two parts called {shown(twice)}.", remedy="Give each part its own name."
            )
        for node in fresh:
            check_node(node)
        index.update(zip(fresh, range(len(index), len(index) + len(fresh)), strict=True))
        self._node_names.extend(fresh)
        nodes = np.full((len(names), 4), -1, dtype=np.int64)
        nodes[:, 0], nodes[:, 1] = [index[node] for node in a], [index[node] for node in b]
        self._nodes.frombytes(nodes.tobytes())
        self._index.update(zip(names, range(len(self._names), len(self._names) + len(names)), strict=True))
        self._names.extend(names)
        self._kinds.extend(letters.encode())
        self._values.frombytes(numbers.tobytes())
        self._arrays = None

    def _append(
        self,
        letter: str,
        name: str,
        nodes: Sequence[str],
        value: float,
        senses: str | None = None,
        couples: tuple[str, str] | None = None,
    ) -> int:
        kind = KINDS.get(letter)
        if kind is None:
            raise CircuitError(
                f"{shown(name)} begins with no known kind of part.",
                remedy=f"Known first letters: {' '.join(KINDS)}.",
            )
        check_name(name, "part name")
        if name in self._index:
            raise CircuitError(
                f"there are two parts called {shown(name)}.", remedy="Give each part its own name."
            )
        if len(nodes) != kind.nodes:
            raise CircuitError(
                f"{name} has {len(nodes)} nodes; a {kind.name} needs {kind.nodes}.", remedy="Name them all."
            )
        _check_value(kind, name, value)
        if kind.senses_branch and not senses:
            raise CircuitError(f"{name} names no voltage source to sense.", remedy="Name one, as Vsense.")
        for node in nodes:
            check_node(node)
        pair = self._checked_pair(name, couples) if kind.couples else None
        return self._store(letter, name, nodes, value, senses, pair)

    def _checked_pair(self, name: str, couples: Sequence[str] | None) -> tuple[str, str]:
        """The two inductors a K names. Raises CircuitError unless they are two, and no other K's."""
        if couples is None or len(couples) != 2 or not all(couples):
            raise CircuitError(
                f"{name} names {len(couples or ())} inductors; a coupling joins two.",
                remedy="Name both, as L1 L2; three windings take a K for each pair.",
            )
        first, second = couples
        if first == second:
            raise CircuitError(
                f"{name} couples {shown(first)} with itself.", remedy="Name two different inductors."
            )
        # ngspice 39 adds the coefficients up with a line in its log; nobody means that.
        if (other := self._coupled.get(frozenset(couples))) is not None:
            raise CircuitError(
                f"{name} couples {shown(first)} and {shown(second)}, as {other} does already.",
                remedy="Keep one of the two, with the coefficient that is meant.",
            )
        return first, second

    def _store(
        self,
        letter: str,
        name: str,
        nodes: Sequence[str],
        value: float,
        senses: str | None,
        couples: tuple[str, str] | None,
    ) -> int:
        row = len(self._names)
        for node in nodes:
            if node not in self._node_index:
                self._node_index[node] = len(self._node_names)
                self._node_names.append(node)
            self._nodes.append(self._node_index[node])
        self._nodes.extend([-1] * (4 - len(nodes)))
        self._names.append(name)
        self._index[name] = row
        self._kinds.append(ord(letter))
        self._values.append(value)
        if senses:
            self._senses[row] = senses
        if couples is not None:
            self._couples[row] = couples
            self._coupled[frozenset(couples)] = name
        self._arrays = None
        return row

    # ------------------------------------------------------------------ looking

    def __len__(self) -> int:
        return len(self._names)

    def __contains__(self, name: object) -> bool:
        return name in self._index

    @property
    def nodes(self) -> tuple[str, ...]:
        """Every node name, ground first, then in order of first mention: the row order of all arrays."""
        return tuple(self._node_names)

    @property
    def names(self) -> tuple[str, ...]:
        """Every part name, sources included, in the order added."""
        return tuple(self._names)

    @property
    def sources(self) -> Mapping[str, Source]:
        """The independent sources by name."""
        return dict(self._sources)

    @property
    def parts(self) -> Iterator[Part]:
        """Every part in the order added, sources included."""
        return (self._part(row) for row in range(len(self._names)))

    def part(self, name: str) -> Part:
        """One part by name. Raises CircuitError."""
        if name not in self._index:
            raise CircuitError(f"there is no part called {shown(name)}.", remedy=_known("Parts", self._names))
        return self._part(self._index[name])

    def _part(self, row: int) -> Part:
        letter = chr(self._kinds[row])
        count = KINDS[letter].nodes
        nodes = tuple(self._node_names[k] for k in self._nodes[4 * row : 4 * row + count])
        extras = self._extras.get(row, _Extras())
        return Part(
            self._names[row],
            letter,
            nodes,
            self._values[row],
            self._senses.get(row),
            extras.tolerance,
            extras.rating,
            extras.tempco,
            self._couples.get(row),
        )

    def has_node(self, name: str) -> bool:
        """True if a part touches a node of that name."""
        return name in self._node_index

    def node_index(self, name: str) -> int:
        """The index of a node in `nodes`. Raises CircuitError."""
        if name not in self._node_index:
            raise CircuitError(
                f"there is no node called {shown(name)}.", remedy=_known("Nodes", self._node_names)
            )
        return self._node_index[name]

    def part_index(self, name: str) -> int:
        """The row of a part in `arrays`. Raises CircuitError."""
        if name not in self._index:
            raise CircuitError(f"there is no part called {shown(name)}.", remedy=_known("Parts", self._names))
        return self._index[name]

    def sensed_by(self, row: int) -> int:
        """The row of the voltage source that an F or H in `row` senses. Raises CircuitError."""
        name, sensed = self._names[row], self._senses[row]
        if sensed not in self._index or chr(self._kinds[self._index[sensed]]) != "V":
            raise CircuitError(
                f"{name} senses the current of {shown(sensed)}, which is no voltage source here.",
                remedy="Name a voltage source; one of dc = 0 serves as an ammeter.",
            )
        return self._index[sensed]

    def coupled_by(self, row: int) -> tuple[int, int]:
        """The rows of the two inductors that a K in `row` couples, as named. Raises CircuitError."""
        name, pair = self._names[row], self._couples[row]
        first, second = (self._inductor(name, inductor) for inductor in pair)
        return first, second

    def _inductor(self, coupling: str, name: str) -> int:
        row = self._index.get(name)
        if row is None or chr(self._kinds[row]) != "L":
            what = "of which there is none here" if row is None else "which is no inductor"
            raise CircuitError(
                f"{coupling} couples {shown(name)}, {what}.",
                remedy=_known("Inductors", (part.name for part in self.parts if part.kind == "L")),
            )
        return row

    @property
    def couplings(self) -> tuple[int, ...]:
        """The rows of all K, in the order added."""
        return tuple(self._couples)

    @property
    def values(self) -> dict[str, float]:
        """The value of every part that is not an independent source, by name, in base units."""
        return {name: self._values[row] for row, name in enumerate(self._names) if name not in self._sources}

    def arrays(self) -> PartArrays:
        """The network as arrays (shared and read-only; copy before changing)."""
        if self._arrays is None:
            kinds = np.frombuffer(bytes(self._kinds), dtype=np.uint8)
            nodes = np.array(self._nodes, dtype=np.int64).reshape(-1, 4)
            values = np.array(self._values, dtype=np.float64)
            for column in (nodes, values):
                column.setflags(write=False)
            self._arrays = PartArrays(kinds, nodes, values, len(self._node_names))
        return self._arrays

    @property
    def graph(self) -> networkx.MultiGraph:
        """The network as a `networkx.MultiGraph`: nodes are net names, edges are parts keyed by name.

        Edge data: `kind` (letter) and `value` (base unit); E and G join their output nodes and carry
        `control`, F and H carry `senses`. A K is no edge: the graph's own attribute `couplings` holds its
        two inductors and its coefficient by its name. Built anew at each call.
        """
        import networkx

        couplings: dict[str, tuple[str, str, float]] = {}
        graph = networkx.MultiGraph(title=self.title, couplings=couplings)
        graph.add_nodes_from(self._node_names)
        for part in self.parts:
            if part.couples is not None:
                couplings[part.name] = (*part.couples, part.value)
                continue
            data: dict[str, Any] = {"kind": part.kind, "value": part.value}
            if len(part.nodes) == 4:
                data["control"] = part.nodes[2:]
            if part.senses is not None:
                data["senses"] = part.senses
            graph.add_edge(part.nodes[0], part.nodes[1], key=part.name, **data)
        return graph

    # ------------------------------------------------------------------ changed copies

    def copy(self) -> Network:
        """An independent copy."""
        twin = Network(self.title)
        twin._names, twin._index = list(self._names), dict(self._index)
        twin._kinds, twin._nodes, twin._values = (
            bytearray(self._kinds),
            array("q", self._nodes),
            array("d", self._values),
        )
        twin._node_names, twin._node_index = list(self._node_names), dict(self._node_index)
        twin._extras, twin._senses, twin._sources = (
            dict(self._extras),
            dict(self._senses),
            dict(self._sources),
        )
        twin._couples, twin._coupled = dict(self._couples), dict(self._coupled)
        return twin

    def with_values(self, values: Mapping[str, str | float]) -> Network:
        """A copy with some part values changed: `{"R1": "5.1k"}`. Sources are changed with `with_source`."""
        twin = self.copy()
        for name, value in values.items():
            part = self.part(name)
            if part.name in self._sources:
                raise CircuitError(f"{name} is a source.", remedy="Change it with with_source.")
            number = parse_quantity(value, KINDS[part.kind].unit, name)
            if KINDS[part.kind].is_passive and not (number > 0 and math.isfinite(number)):
                raise CircuitError(f"{name} has the value {number!r}.", remedy="Give a positive one.")
            _check_value(KINDS[part.kind], name, number)
            twin._values[self._index[name]] = number
        return twin

    def with_source(self, source: Source) -> Network:
        """A copy with the source of that name (same nodes) driven differently."""
        if source.name not in self._sources:
            raise CircuitError(
                f"there is no source called {source.name!r}.", remedy=_known("Sources", self._sources)
            )
        if source.nodes != self._sources[source.name].nodes:
            raise CircuitError(f"{source.name} stands between other nodes.", remedy="Keep its nodes.")
        twin = self.copy()
        twin._sources[source.name] = source
        twin._values[self._index[source.name]] = source.operating_value
        return twin

    # ------------------------------------------------------------------ analyses

    def response(
        self, frequency: npt.ArrayLike, of: str | Sequence[str], **options: Any
    ) -> npt.NDArray[np.complex128]:
        """The exact response at frequencies in Hz; see `rcnet.exact.response`."""
        return _analysis("rcnet.exact", "response")(self, frequency, of, **options)  # type: ignore[no-any-return]

    def noise(self, frequency: npt.ArrayLike, of: str, **options: Any) -> npt.NDArray[np.float64]:
        """The density of the thermal noise at frequencies in Hz, V/sqrt(Hz); see `rcnet.exact.noise`."""
        return _analysis("rcnet.exact", "noise")(self, frequency, of, **options)  # type: ignore[no-any-return]

    def transient(self, time: npt.ArrayLike, of: str | Sequence[str]) -> npt.NDArray[np.float64]:
        """The exact response over time, in volts, at times in seconds; see `rcnet.exact.transient`."""
        return _analysis("rcnet.exact", "transient")(self, time, of)  # type: ignore[no-any-return]

    def modes(self, of: str, source: str | None = None) -> Any:
        """Poles in rad/s, residues and the direct term of an output, a `rcnet.exact.Modes`."""
        return _analysis("rcnet.exact", "modes")(self, of, source)

    def operating_point(self) -> dict[str, float]:
        """Node voltages with every source at its dc value; see `rcnet.exact.operating_point`."""
        return _analysis("rcnet.exact", "operating_point")(self)  # type: ignore[no-any-return]

    def measure(self, name: str, of: str | None = None, **options: Any) -> float:
        """One measure, a float in the unit of the measures table; see `rcnet.claims.measure`."""
        return _analysis("rcnet.claims", "measure")(self, name, of, **options)  # type: ignore[no-any-return]

    # ------------------------------------------------------------------ users of PySpice

    def to_pyspice(self) -> Any:
        """The network as a PySpice `Circuit`; see `rcnet.netlist.pyspice.to_pyspice`."""
        return _analysis("rcnet.netlist.pyspice", "to_pyspice")(self)

    @classmethod
    def from_pyspice(cls, circuit: Any) -> Network:
        """A network from a PySpice `Circuit`; see `rcnet.netlist.pyspice.from_pyspice`."""
        return _analysis("rcnet.netlist.pyspice", "from_pyspice")(circuit)  # type: ignore[no-any-return]


def _analysis(room: str, name: str) -> Any:
    # The analyses live in rooms above this one. A method looks its own up when called, so that no import
    # of this room points upward and a network can be built without loading any of them.
    return getattr(importlib.import_module(room), name)


def _check_value(kind: Kind, name: str, value: float) -> None:
    if not math.isfinite(value):
        raise CircuitError(f"{name} has the value {value!r}.", remedy="Give a finite number.")
    if kind.is_passive and value <= 0:
        raise CircuitError(
            f"{name} has the value {value!r} {kind.unit}; a {kind.name} needs a positive one.",
            remedy="Leave the part out, or give both its ends one node name for a link.",
        )
    if kind.couples and abs(value) > 1:
        raise CircuitError(
            f"{name} has the coefficient {value!r}; two inductors share at most all of their field.",
            remedy="Give a number from -1 to 1: the mutual inductance over sqrt(L1 L2).",
        )


def _many_values(
    letters: str, names: list[str], a: list[str], b: list[str], values: npt.ArrayLike
) -> npt.NDArray[np.float64]:
    """The values of many resistors and capacitors as an array, names and values known to be right."""
    try:
        numbers = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError) as exc:
        raise CircuitError(f"the values are not numbers: {exc}.", remedy="Give base units.") from exc
    if not len(names) == len(a) == len(b) == len(letters) or numbers.shape != (len(names),):
        raise CircuitError(
            f"{len(names)} names, {len(a)} and {len(b)} nodes, values of shape {numbers.shape} do not match.",
            remedy="Give as many of each, in lists of one dimension.",
        )
    for name, letter in zip(names, letters, strict=True):
        check_name(name, "part name")
        if name[0].upper() != letter or letter not in "RC":
            kind = KINDS["C" if letter == "C" else "R"]
            raise CircuitError(
                f"the {kind.name} is called {shown(name)}.",
                remedy=f"Let its name begin with {kind.letter}, as {kind.letter}1.",
            )
    wrong = np.flatnonzero(~(np.isfinite(numbers) & (numbers > 0)))
    if len(wrong):
        kind = KINDS[letters[wrong[0]]]
        raise CircuitError(
            f"{names[wrong[0]]} has the value {float(numbers[wrong[0]])!r} {kind.unit}; "
            f"a {kind.name} needs a finite, positive one.",
            remedy="Leave the part out, or give both its ends one node name for a link.",
        )
    return numbers


def _known(what: str, names: Iterable[str]) -> str:
    listed = list(names)
    shown = ", ".join(listed[:12]) + (", ..." if len(listed) > 12 else "")
    return f"{what} here: {shown or 'none'}."


def _with_extras(part: Part, extras: dict[str, Any]) -> Part:
    unknown = set(extras) - {"tolerance", "rating", "tempco"}
    if unknown:
        raise CircuitError(
            f"{part.name}: unknown option {sorted(unknown)[0]!r}.", remedy="Known: tolerance, rating, tempco."
        )
    tolerance, rating, tempco = extras.get("tolerance"), extras.get("rating"), extras.get("tempco")
    if tolerance is not None and not isinstance(tolerance, Tolerance):
        tolerance = parse_tolerance(tolerance, kind=part.kind, nominal=part.value)
    if isinstance(rating, str):
        rating = parse_rating(rating)
    return replace(
        part, tolerance=tolerance, rating=rating, tempco=None if tempco is None else parse_tempco(tempco)
    )


def _source(letter: str, name: str, a: str, b: str, drive: dict[str, Any]) -> Source:
    from .drive import parse_drive

    check_name(name, "source name")
    if name[0].upper() != letter:
        raise CircuitError(
            f"the {KINDS[letter].name} is called {shown(name)}.",
            remedy=f"Let its name begin with {letter}, as {letter}in.",
        )
    waveform = drive.pop("waveform", None)
    if waveform is not None and not isinstance(waveform, Waveform):
        raise CircuitError(
            f"{name}: waveform is {shown(waveform)}.",
            remedy="Give a Square, Sine, Step, Exponential or Points.",
        )
    parsed = parse_drive(name, (a, b), drive)
    return parsed if waveform is None else replace(parsed, waveform=_only(waveform, parsed))


def _only(waveform: Waveform, parsed: Source) -> Waveform:
    if parsed.waveform is not None:
        raise CircuitError(f"{parsed.name} has two waveforms.", remedy="Give one.")
    return waveform
