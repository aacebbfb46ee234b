"""Rules about a netlist's text: what a person probably did not mean, and what a simulator silently does."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator

from ..circuit import KINDS, Circuit, Place, Sweep
from ..errors import RcnetError
from ..netlist import digest
from ..values import format_quantity, number_oddity, read_spice_number
from .finding import Remark, Severity, rule

# oddity of a number -> what it is, what to do. Every one is read by ngspice 39 without a word.
_ODDITIES: dict[str, tuple[str, str]] = {
    "milli-not-mega": ("M means milli in SPICE", "Write Meg for a million, or m if milli is meant."),
    "femto-not-farad": ("f means femto in SPICE, not farad", "Leave the F out, or write f if femto is meant."),
    "digits-after-suffix": ("SPICE stops reading at the letter", "Write a decimal point, as 4.7k."),
    "decimal-comma": ("a comma parts words in SPICE, so only what follows it counts", "Write a decimal point."),
    "greek-mu": ("this letter mu (U+03BC) is no prefix to SPICE", "Write u for micro."),
    "mil-by-accident": ("mil means 25.4e-6 in SPICE", "Write m for milli or Meg for a million."),
    "unknown-letters": ("SPICE ignores letters it does not know", "Write one of f p n u m k Meg G T, or no letter."),
    "hexadecimal": ("SPICE reads no hexadecimal", "Write the number in decimal."),
}


@rule("odd-number", "error")
def odd_number(circuit: Circuit) -> Iterator[Remark]:
    """A value that SPICE reads otherwise than a person: `1M` on a resistor, `1F` on a capacitor, `4k7`, `4,7k`."""
    for name, text in circuit.value_texts.items():
        part = circuit.network.part(name)
        oddity = "decimal-comma" if "," in text else _oddity(text, part.kind)
        if oddity is None:
            continue
        what, remedy = _ODDITIES[oddity]
        value = format_quantity(part.value, KINDS[part.kind].unit)
        severity: Severity | None = "warning" if oddity == "unknown-letters" else None
        yield Remark(f"{name} is written {text!r}: {what}, so it is {value}.", remedy, circuit.place_of(name), severity)


def _oddity(text: str, kind: str) -> str | None:
    try:
        return number_oddity(read_spice_number(text), kind)
    except RcnetError:
        return None


@rule("empty-sweep", "error")
def empty_sweep(circuit: Circuit) -> Iterator[Remark]:
    """A sweep without a point: ngspice gives no results with exit code 0, or never ends.

    Often `1M` (milli) stands where `1Meg` was meant.
    """
    sweeps: list[tuple[str, Sweep | None]] = [("ac", circuit.analyses.ac), ("noise", circuit.analyses.noise)]
    for key, sweep in sweeps:
        if sweep is None or _has_points(sweep, key):
            continue
        place = circuit.analysis_places.get(key) or Place(circuit.file or circuit.name, None)
        hint = "M means milli in SPICE; write Meg for a million." if re.search(r"\dM\b", place.text) else ""
        yield Remark(
            f".{key} runs from {sweep.start:g} Hz to {sweep.stop:g} Hz and gives no point there.",
            hint or "Widen the sweep, or raise the number of points.",
            place,
        )


def _has_points(sweep: Sweep, key: str) -> bool:
    if not (math.isfinite(sweep.stop) and sweep.stop >= sweep.start):
        return False
    if sweep.kind == "lin":
        return sweep.start >= 0 and (sweep.points > 2 or (sweep.points == 1 and sweep.start == sweep.stop))
    if sweep.start <= 0 or sweep.stop == sweep.start:
        return False
    ratio = math.log10(sweep.stop / sweep.start) if sweep.kind == "dec" else math.log2(sweep.stop / sweep.start)
    return sweep.kind == "oct" or math.floor(ratio * sweep.points + 1e-9) >= 1


@rule("title-is-part", "warning")
def title_is_part(circuit: Circuit) -> Iterator[Remark]:
    """The first line of a netlist is its title, whatever it holds: a part written there is not in the circuit."""
    if circuit.origin != "netlist" or not circuit.lines:
        return
    words = circuit.lines[0].split()
    if len(words) in (4, 5, 6) and re.match(r"[RCLVIEGFH]\w*\d\w*$|[VI]in$", words[0], re.IGNORECASE):
        if not any(re.match(r"[-+]?\.?\d", word) for word in words[-2:]):
            return
        yield Remark(
            f"the first line looks like the part {words[0]}, but it is the title and no part of the circuit.",
            "Put a title line above it.",
            Place(circuit.file or circuit.name, 1, circuit.lines[0]),
        )


@rule("ground-lookalike", "warning")
def ground_lookalike(circuit: Circuit) -> Iterator[Remark]:
    """Nodes called `00`, `0.0`, `ground` or `gnd!` are ordinary nodes to ngspice, not ground."""
    for node in circuit.network.nodes[1:]:
        if re.fullmatch(r"0[0.]+|ground|gnd!|vss|earth", node, re.IGNORECASE):
            touching = next(part.name for part in circuit.network.parts if node in part.nodes)
            yield Remark(
                f"node {node!r} is not ground to a simulator.", "Write 0 if ground is meant.", circuit.place_of(touching)
            )


@rule("seal-broken", "error")
def seal_broken(circuit: Circuit) -> Iterator[Remark]:
    """The netlist carries a seal, but what it holds is not what was sealed."""
    if circuit.seal is not None and circuit.seal.digest != digest(circuit):
        line = circuit.seal.line
        yield Remark(
            "the netlist was changed after it was sealed: a part, a node, a value, a source or an analysis differs.",
            "Write it again with `rcnet netlist`, or remove the seal's comment lines if the change is meant.",
            Place(circuit.file or circuit.name, line, circuit.lines[line - 1]),
        )


@rule("sealed-despite-errors", "warning")
def sealed_despite_errors(circuit: Circuit) -> Iterator[Remark]:
    """The seal says that the netlist was written although errors had been found."""
    if circuit.seal is not None and circuit.seal.anyway:
        yield Remark(
            "this netlist was written although errors had been found (--anyway).",
            "Ask whoever wrote it, or mend the circuit and write it again.",
            Place(circuit.file or circuit.name, circuit.seal.line),
        )
