"""A candidate as a circuit file: its parts, its source, what is claimed of it."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from ..values import Tolerance, customary_series, in_series, write_quantity
from .target import Target

Row = Sequence[float]
PartRow = tuple[str, str, float, Tolerance]  # both nodes, value, tolerance


@dataclass(frozen=True, slots=True)
class Wanted:
    """One claim made of every candidate of a design.

    key: what its value is called among a candidate's measures
    options, bound: as a circuit file has them, text and lists of text
    against: the parts whose growth moves the measure the other way than that of all the others does; None
        where that is not known of every part
    ends: the parts that are at the upper end of their tolerance where the measure has one extreme, and where
        it has the other, all others being at the lower end; instead of `against`
    """

    key: str
    says: str
    measure: str
    options: Mapping[str, str]
    bound: Mapping[str, str | list[str]]
    against: frozenset[str] | None = frozenset()
    ends: tuple[frozenset[str], frozenset[str]] | None = None


def value_text(value: float) -> str:
    """A part's value as in a circuit file, read back to the same double: `4.7k`."""
    return write_quantity(value)


def rounded(value: float, unit: str, *, up: bool) -> str:
    """A bound of a claim to six digits, rounded so that the claim gets wider."""
    digits = 5 - math.floor(math.log10(abs(value)))
    shifted = value * 10.0**digits
    whole = round(shifted)
    # What is six digits long already stays: 1 kHz is not 1.00001 kHz.
    if abs(whole - shifted) > 1e-7:
        whole = math.ceil(shifted) if up else math.floor(shifted)
    return write_quantity(float(f"{whole}e{-digits}"), unit)


def part_rows(target: Target, r: Row, c: Row) -> dict[str, PartRow]:
    """Each part of a candidate: its nodes, its value, its tolerance; r, c: from the input on."""
    on_r, on_c = target.resistors.tolerance, target.capacitors.tolerance
    rows: dict[str, PartRow] = {}
    node = "in"
    if target.source:
        rows["Rsource"] = (node, "n0", target.source, on_r)
        node = "n0"
    for k, (resistor, capacitor) in enumerate(zip(r, c, strict=True), 1):
        end = "out" if k == len(r) else f"n{k}"
        resistive = {"lowpass": True, "highpass": False, "bandpass": k == 2}.get(target.kind, True)
        if resistive:
            rows[f"R{k}"], rows[f"C{k}"] = (node, end, resistor, on_r), (end, "0", capacitor, on_c)
        else:
            rows[f"C{k}"], rows[f"R{k}"] = (node, end, capacitor, on_c), (end, "0", resistor, on_r)
        node = end
    if math.isfinite(target.load):
        rows["Rload"] = ("out", "0", target.load, on_r)
    return rows


def circuit_text(
    target: Target,
    title: str,
    rows: Mapping[str, tuple[str, str, float, Tolerance]],
    wanted: Sequence[Wanted],
) -> str:
    """The circuit file of one candidate."""
    lines = [f"title  = {_quoted(title)}", 'output = "out"']
    if any(name in ("Rsource", "Rload") and _off_series(row[2], row[3]) for name, row in rows.items()):
        lines.append('silence = ["off-series"]  # nobody buys the source resistance, or the load')
    lines += ["", "[parts]"]
    width = max(len(name) for name in rows)
    for name, (a, b, value, tolerance) in rows.items():
        shown = f" {tolerance}" if tolerance.low or tolerance.high else ""
        lines.append(f'{name:<{width}} = "{a} {b} {value_text(value)}{shown}"')
    lines += ["", "[sources.Vin]", 'nodes = "in 0"', "ac = 1", *_waveform(target)]
    for claim in wanted:
        lines += ["", "[[claims]]", f"says = {_quoted(claim.says)}", f'measure = "{claim.measure}"']
        lines += [f"{key} = {_quoted(text)}" for key, text in claim.options.items()]
        for key, bound in claim.bound.items():
            shown = _quoted(bound) if isinstance(bound, str) else f"[{', '.join(map(_quoted, bound))}]"
            lines.append(f"{key} = {shown}")
        lines.append('over = "tolerance"')
    return "\n".join(lines) + "\n"


def _off_series(value: float, tolerance: Tolerance) -> bool:
    series = customary_series(max(tolerance.high, -tolerance.low))
    return not any(in_series(value, each) for each in series)


def _quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=False)


def _waveform(target: Target) -> list[str]:
    if target.supply is None:
        return []
    high = _quoted(write_quantity(target.supply, "V"))
    if target.carrier is not None:
        carrier = _quoted(write_quantity(target.carrier, "Hz"))
        return [f"square = {{ low = 0, high = {high}, frequency = {carrier}, duty = 0.5 }}"]
    return [f"step = {{ from = 0, to = {high}, at = 0 }}"]


__all__ = ["Wanted", "circuit_text", "part_rows", "rounded", "value_text"]
