"""Rules about a netlist's text: what a person probably did not mean, what a simulator silently does."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace

from ..circuit import KINDS, Circuit, Place, Sweep
from ..errors import RcnetError
from ..netlist import digest, folded, logical_lines, reads_as_part, sweep_fault, words_of
from ..values import SpiceNumber, format_quantity, number_oddity, read_spice_number
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


@rule("odd-number", "error")
def odd_number(circuit: Circuit) -> Iterator[Remark]:
    """A number that SPICE reads otherwise than a person: `1M` on a resistor, `1F` on a capacitor, `4,7k`.

    A warning where only letters are passed over that may be a unit.
    """
    for name, text in circuit.value_texts.items():
        kind = KINDS[circuit.network.part(name).kind]
        yield from _remarks(name, text, kind.letter, kind.unit, circuit.place_of(name))
    if circuit.origin == "netlist":
        yield from _elsewhere(circuit)


def _elsewhere(circuit: Circuit) -> Iterator[Remark]:
    """Odd numbers on the lines of sources and analyses."""
    for line in logical_lines(circuit.lines):
        words = words_of(line.text)
        if words and (line.text[0] in "VvIi" or words[0].lower() in (".ac", ".tran", ".noise", ".temp")):
            place = Place(circuit.file or circuit.name, line.number, circuit.lines[line.number - 1])
            for word in words[3:] if line.text[0] != "." else words[1:]:
                if re.match(r"[-+]?\.?[0-9]", word):
                    yield from _remarks(words[0], word, "V", "", place)
            if comma := re.search(r"\bac[ =]*([-+]?[0-9.]+,[0-9]\S*)", line.text, re.IGNORECASE):
                remark = _remark(words[0], comma[1], "decimal-comma", "magnitude and phase", place)
                yield replace(remark, severity="warning")


def _remarks(name: str, text: str, kind: str, unit: str, place: Place) -> Iterator[Remark]:
    try:
        number = read_spice_number(text)
    except RcnetError:  # node and value in one word, parted by a comma
        number = read_spice_number(text.rpartition(",")[2])
    oddity = "decimal-comma" if "," in text else number_oddity(number, kind)
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


@rule("title-is-part", "warning")
def title_is_part(circuit: Circuit) -> Iterator[Remark]:
    """The first line of a netlist is its title, whatever it holds: a part there is not in the circuit."""
    title = circuit.lines[0] if circuit.origin == "netlist" and circuit.lines else ""
    name = title.split()[0] if title.strip() else ""
    named_so = re.fullmatch(r"[RCLEGFHVI][0-9]\w*|[VI](in|s|cc|dd|bat)\w*", name, re.IGNORECASE)
    if named_so and reads_as_part(title):
        yield Remark(
            f"the first line looks like the part {name}, but it is the title and no part.",
            "Put a title line above it.",
            Place(circuit.file or circuit.name, 1, title),
        )


@rule("ground-lookalike", "warning")
def ground_lookalike(circuit: Circuit) -> Iterator[Remark]:
    """Nodes called `00`, `0.0`, `ground` or `gnd!` are ordinary nodes to ngspice, not ground."""
    lookalike = re.compile(r"0[0.]+|ground|gnd!|vss|earth", re.IGNORECASE)
    found = {node for node in circuit.network.nodes[1:] if lookalike.fullmatch(node)}
    for part in circuit.network.parts if found else ():
        for node in found.intersection(part.nodes):
            found.remove(node)
            yield Remark(
                f"node {node!r} is not ground to a simulator.",
                "Write 0 if ground is meant.",
                circuit.place_of(part.name),
            )


@rule("names-merge", "error")
def names_merge(circuit: Circuit) -> Iterator[Remark]:
    """Two nodes of a netlist that ngspice takes for one.

    ngspice 39 keeps every byte outside ASCII as `_`, so that `né` and `nü` are one node; the micro sign it
    keeps as `u`.
    """
    if circuit.origin != "netlist":
        return
    first: dict[str, str] = {}
    seen: set[str] = set()
    for part in circuit.network.parts:
        for node in part.nodes:
            if node in seen:
                continue
            seen.add(node)
            other = first.setdefault(folded(node), node)
            if other != node:
                yield Remark(
                    f"the nodes {other!r} and {node!r} are one node to ngspice.",
                    "Name them with the letters a to z, digits and _.",
                    circuit.place_of(part.name),
                )


@rule("seal-broken", "error")
def seal_broken(circuit: Circuit) -> Iterator[Remark]:
    """The netlist carries a seal, but what it holds is not what was sealed."""
    if circuit.seal is not None and circuit.seal.digest != digest(circuit):
        line = circuit.seal.line
        what = (
            "the netlist was changed after it was sealed: a part, a node, a value, a source, an analysis, an "
            "option or the output differs."
        )
        yield Remark(
            what if circuit.seal.digest else "the netlist's seal has lost its digest.",
            "Write it again with `rcnet netlist`, or remove the seal's comment lines if the change is meant.",
            Place(circuit.file or circuit.name, line, circuit.lines[line - 1]),
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
