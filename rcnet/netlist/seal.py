"""The seal: comment lines that say what was checked, and a digest by which a later change is noticed."""

from __future__ import annotations

import hashlib
import json
import re
from typing import Any

from ..circuit import Circuit, SealNote

_MARK = "Sealed by rcnet"
_DIGEST = re.compile(r"^\*\s*digest ([0-9a-f]{64})\s*$")


def digest(circuit: Circuit) -> str:
    """The digest of what a netlist holds: parts, nodes, exact values, sources and analyses; 64 hex digits (SHA-256).

    Names are taken without regard to case, as SPICE does; comments, order and layout do not count.
    """
    network = circuit.network
    parts = sorted(
        [part.name.lower(), *(node.lower() for node in part.nodes), (part.senses or "").lower(), part.value.hex()]
        for part in network.parts
        if part.name not in network.sources
    )
    sources = sorted(
        [
            source.name.lower(),
            *(node.lower() for node in source.nodes),
            _hex(source.ac),
            source.ac_phase.hex(),
            source.operating_value.hex(),
            _plain(source.waveform),
        ]
        for source in network.sources.values()
    )
    wanted = circuit.analyses
    asked = [_plain(wanted.ac), _plain(wanted.transient), _plain(wanted.noise), wanted.operating_point]
    output = [node.lower() for node in circuit.output]
    options = sorted([key, value] for key, value in circuit.options.items())
    table = [parts, sources, asked, output, options, circuit.conditions.nominal.hex()]
    return hashlib.sha256(json.dumps(table, separators=(",", ":")).encode()).hexdigest()


def _hex(value: float | None) -> str | None:
    return None if value is None else value.hex()


def _plain(record: Any) -> Any:
    """A waveform or an analysis as lists of exact numbers."""
    if record is None or isinstance(record, (str, int)):
        return record
    if isinstance(record, float):
        return record.hex()
    if isinstance(record, (tuple, list)):
        return [_plain(item) for item in record]
    return [type(record).__name__, *(_plain(getattr(record, name)) for name in record.__slots__)]


def seal_comments(circuit: Circuit, facts: list[str]) -> list[str]:
    """The comment texts of a seal. `circuit` is what the netlist holds once read back; facts: one line each."""
    return [f"{_MARK}.", *(f"  {fact}" for fact in facts), f"  digest {digest(circuit)}"]


def find_seal(lines: list[str]) -> SealNote | None:
    """The last seal among a netlist's lines, or None."""
    found = None
    sealed, anyway = False, False
    for number, line in enumerate(lines, start=1):
        if not line.startswith("*"):
            continue
        if _MARK in line:
            sealed, anyway = True, False
        if sealed and "despite" in line:
            anyway = True
        if sealed and (match := _DIGEST.match(line)):
            found = SealNote(match[1], number, anyway)
            sealed = False
    return found
