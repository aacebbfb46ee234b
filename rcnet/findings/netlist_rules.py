"""Rules about a netlist's text: what a person probably did not mean, what a simulator silently does."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace

from ..circuit import KINDS, Circuit, Place, Sweep
from ..errors import RcnetError
from ..netlist import digest, folded, sweep_fault
from ..netlist.seal import changes
from ..values import SpiceNumber, format_quantity, number_oddity, read_spice_number
from ._telling import at_node, few
from .finding import Remark, rule

# oddity of a number -> what it is, what to do. Every one is read by ngspice 39 without a word.
_ODDITIES: dict[str, tuple[str, str]] = {
    "milli-not-mega": ("M means milli in SPICE", "Write Meg for a million, or m if milli is meant."),
    "femto-not-farad": (
        "f means femto in SPICE, not farad",
        "Leave the F out, or write f if femto is meant.",
    ),
    "digits-after-suffix": ("SPICE stops reading at the letter", "Write a decimal point, as 4.7k."),
    "decimal-comma": (
        "a comma parts words in SPICE, so only what follows it counts",
        "Write a decimal point.",
    ),
    "greek-mu": ("this letter mu (U+03BC) is no prefix to SPICE", "Write u for micro."),
    "mil-by-accident": ("mil means 25.4e-6 in SPICE", "Write m for milli or Meg for a million."),
    "unknown-letters": (
        "SPICE passes over what it does not know",
        "Write one of f p n u m k Meg G T, or no letter.",
    ),
    "hexadecimal": ("SPICE reads no hexadecimal", "Write the number in decimal."),
    "two-numbers": ("of two numbers in one word SPICE takes the last", "Write the number itself."),
}


@rule("odd-number", "error", of_text=True)
def odd_number(circuit: Circuit) -> Iterator[Remark]:
    """A number that SPICE reads otherwise than a person: `1M` on a resistor, `1F` on a capacitor, `4,7k`.

    A warning where only letters are passed over that may be a unit.
    """
    arrays, rows = circuit.network.arrays(), circuit.network
    known: dict[tuple[str, str], bool] = {}  # many instances of one subcircuit have the same text
    for name, text in circuit.value_texts.items():
        if name not in rows:
            continue  # its line is refused for something else
        letter = chr(arrays.kinds[rows.part_index(name)])
        if (odd := known.get((letter, text))) is None:
            odd = known[letter, text] = _oddity(text, letter) is not None
        if odd:
            yield from _remarks(name, text, letter, KINDS[letter].unit, circuit.place_of(name).at(text))
    for owner, text, place in circuit.other_numbers:
        if _oddity(text, "V") is not None:
            yield from _remarks(owner, text, "V", "", place.at(text))
    yield from _of_parameters(circuit)
    yield from _of_magnitudes(circuit)


def _of_parameters(circuit: Circuit) -> Iterator[Remark]:
    """Odd numbers behind `.param`: what is odd depends on the parts they become."""
    for each in circuit.parameters.values():
        if not re.fullmatch(r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)[a-zA-Zµμ]*", each.text):
            continue
        kinds = {circuit.network.part(name).kind for name in each.parts if name in circuit.network}
        kind = kinds.pop() if len(kinds) == 1 else "V"
        oddity = number_oddity(read_spice_number(each.text), kind)
        if oddity in ("milli-not-mega", "femto-not-farad"):
            read_as = format_quantity(each.value, KINDS[kind].unit)
            yield _remark(each.name, each.text, oddity, read_as, each.place.at(each.text))


def _of_magnitudes(circuit: Circuit) -> Iterator[Remark]:
    """`AC 1,5`: not a magnitude of one and a half, but a magnitude and a phase."""
    for name in circuit.network.sources if circuit.origin == "netlist" else ():
        place = circuit.place_of(name)
        if comma := re.search(r"\bac[ =]*([-+]?[0-9.]+,[0-9]\S*)", place.text, re.IGNORECASE):
            remark = _remark(name, comma[1], "decimal-comma", "magnitude and phase", place.at(comma[1]))
            yield replace(remark, severity="warning")


def _number(text: str) -> SpiceNumber:
    try:
        return read_spice_number(text)
    except RcnetError:  # node and value in one word, parted by a comma
        return read_spice_number(text.rpartition(",")[2])


def _oddity(text: str, kind: str) -> str | None:
    return "decimal-comma" if "," in text else number_oddity(_number(text), kind)


def _remarks(name: str, text: str, kind: str, unit: str, place: Place) -> Iterator[Remark]:
    number, oddity = _number(text), _oddity(text, kind)
    if oddity is None:
        return
    if oddity == "unknown-letters" and number.tail and text.startswith(number.tail):
        oddity = "two-numbers"
    remark = _remark(name, text, oddity, format_quantity(number.value, unit), place)
    yield replace(remark, severity="warning") if oddity == "unknown-letters" and _harmless(number) else remark


def _harmless(number: SpiceNumber) -> bool:
    """Whether what is passed over may be a unit; `a` would be atto, digits and signs part of the number."""
    return number.tail.isalpha() and number.tail.lower() != "a"


def _remark(name: str, text: str, oddity: str, read_as: str, place: Place) -> Remark:
    what, remedy = _ODDITIES[oddity]
    if oddity == "digits-after-suffix" and (marked := re.fullmatch(r"([0-9]+)([a-zA-Z]+)([0-9]+)", text)):
        letter = "" if marked[2] in ("R", "r") else marked[2]
        remedy = f"Write a decimal point: {marked[1]}.{marked[3]}{'Meg' if letter == 'M' else letter}."
    return Remark(f"{name}: {text!r} is read as {read_as}: {what}.", remedy, place)


@rule("empty-sweep", "error")
def empty_sweep(circuit: Circuit) -> Iterator[Remark]:
    """A sweep without the points it seems to have: ngspice gives none with exit code 0, or never ends.

    Often `1M` (milli) stands where `1Meg` was meant.
    """
    sweeps: list[tuple[str, Sweep | None]] = [("ac", circuit.analyses.ac), ("noise", circuit.analyses.noise)]
    for key, sweep in sweeps:
        if sweep is None or (fault := sweep_fault(sweep, noise=key == "noise")) is None:
            continue
        place = circuit.analysis_places.get(key) or Place(circuit.file or circuit.name, None)
        milli = circuit.origin == "netlist" and re.search(r"[0-9]m(?:hz)?\b", place.text, re.IGNORECASE)
        yield Remark(
            f"the {key} sweep from {sweep.start:g} Hz to {sweep.stop:g} Hz is no use: {fault}.",
            "M means milli in SPICE; write Meg for a million."
            if milli
            else "Widen the sweep, or raise the number of points.",
            place,
        )


def _reads_as_part(text: str) -> bool:
    from ..netlist import reads_as_part

    return reads_as_part(text)


@rule("title-is-part", "warning", of_text=True)
def title_is_part(circuit: Circuit) -> Iterator[Remark]:
    """The first line of a netlist is its title, whatever it holds: a part there is not in the circuit."""
    title = circuit.lines[0] if circuit.origin == "netlist" and circuit.lines else ""
    name = title.split()[0] if title.strip() else ""
    named_so = re.fullmatch(r"[RCLEGFHVI][0-9]\w*|[VI](in|s|cc|dd|bat)\w*", name, re.IGNORECASE)
    nodes = {node.lower() for node in circuit.network.nodes}
    connected = nodes.issuperset(word.lower() for word in title.split()[1:3]) and len(title.split()) == 4
    if (named_so or connected) and _reads_as_part(title):
        yield Remark(
            f"the first line looks like the part {name}, but it is the title and no part.",
            "Put a title line above it.",
            Place(circuit.file or circuit.name, 1, title).at(name),
        )


@rule("ground-lookalike", "warning")
def ground_lookalike(circuit: Circuit) -> Iterator[Remark]:
    """Nodes called `00`, `0.0`, `ground` or `gnd!` are ordinary nodes to ngspice, not ground."""
    lookalike = re.compile(r"0[0.]+|ground|gnd!|vss|earth", re.IGNORECASE)
    nodes = circuit.network.nodes

    def tell(node: int) -> Remark:
        return Remark(
            f"node {nodes[node]!r} is not ground to a simulator.",
            "Write 0 if ground is meant.",
            at_node(circuit, node),
        )

    found = [node for node in range(1, len(nodes)) if lookalike.fullmatch(nodes[node])]
    yield from few(found, tell, "nodes are called like ground and are not")


@rule("names-merge", "error")
def names_merge(circuit: Circuit) -> Iterator[Remark]:
    """Two nodes of a netlist that ngspice takes for one.

    ngspice 39 keeps every byte outside ASCII as `_`, so that `né` and `nü` are one node; the micro sign it
    keeps as `u`.
    """
    nodes = circuit.network.nodes
    if circuit.origin != "netlist" or "".join(nodes).isascii():
        return
    first: dict[str, int] = {}
    pairs = [(first.setdefault(folded(name), node), node) for node, name in enumerate(nodes)]

    def tell(pair: tuple[int, int]) -> Remark:
        other, node = pair
        return Remark(
            f"the nodes {nodes[other]!r} and {nodes[node]!r} are one node to ngspice.",
            "Name them with the letters a to z, digits and _.",
            at_node(circuit, node),
        )

    merged = [pair for pair in pairs if pair[0] != pair[1]]
    yield from few(merged, tell, "nodes are one with another to ngspice")


@rule("seal-broken", "error")
def seal_broken(circuit: Circuit) -> Iterator[Remark]:
    """The netlist carries a seal, but what it holds is not what was sealed."""
    if circuit.seal is None or circuit.seal.digest == digest(circuit):
        return
    line = circuit.seal.line
    differing = changes(circuit)
    what = "a part, a node, a value, a source, an analysis, an option or the output differs"
    if differing is not None:
        what = "; ".join(differing) or "nothing that the seal lists differs, but its digest does"
    yield Remark(
        f"the netlist was changed after it was sealed: {what}."
        if circuit.seal.digest
        else "the netlist's seal has lost its digest.",
        "Write it again with `rcnet netlist`, or remove the seal's comment lines if the change is meant.",
        Place(circuit.file or circuit.name, line, circuit.lines[line - 1]).at("digest"),
    )


@rule("sealed-despite-errors", "warning")
def sealed_despite_errors(circuit: Circuit) -> Iterator[Remark]:
    """The seal says that the netlist was written although errors had been found."""
    if circuit.seal is not None and circuit.seal.anyway:
        line = circuit.seal.line
        yield Remark(
            "this netlist was written although errors had been found (--anyway).",
            "Ask whoever wrote it, or mend the circuit and write it again.",
            Place(circuit.file or circuit.name, line, circuit.lines[line - 1]),
        )
