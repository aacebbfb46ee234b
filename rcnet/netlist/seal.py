"""The seal: comment lines that say what was checked, and a digest by which a later change is noticed."""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Iterable, Sequence
from dataclasses import fields, is_dataclass
from typing import Any

from ..circuit import Circuit, SealNote

DESPITE_ERRORS = "written despite errors (--anyway):"
_MARK = "Sealed by rcnet."
_DIGEST = re.compile(r"\*\s*digest ([0-9a-f]{64})")


def digest(circuit: Circuit) -> str:
    """The digest of what a netlist holds, 64 hex digits (SHA-256).

    It covers parts, nodes, exact values, sources, analyses, output, options and temperature. Names are taken
    without regard to case, as SPICE does; comments, order and layout do not count.
    """
    network = circuit.network
    parts = sorted(
        [
            part.name.lower(),
            *(node.lower() for node in part.nodes),
            (part.senses or "").lower(),
            part.value.hex(),
        ]
        for part in network.parts
        if part.name not in network.sources
    )
    sources = sorted(
        [
            source.name.lower(),
            *(node.lower() for node in source.nodes),
            _plain(source.ac),
            _plain(source.ac_phase),
            _plain(source.operating_value),
            _plain(source.waveform),
        ]
        for source in network.sources.values()
    )
    wanted = circuit.analyses
    asked = [_plain(wanted.ac), _plain(wanted.transient), _plain(wanted.noise), wanted.operating_point]
    output = [node.lower() for node in circuit.output]
    options = sorted([key, value] for key, value in circuit.options.items())
    table = [parts, sources, asked, output, options, _plain(circuit.conditions.nominal)]
    return hashlib.sha256(json.dumps(table, separators=(",", ":")).encode()).hexdigest()


def _plain(record: Any) -> Any:
    """A number, a waveform or an analysis as nested lists of exact numbers."""
    if isinstance(record, float):
        return record.hex()
    if isinstance(record, (tuple, list)):
        return [_plain(item) for item in record]
    if is_dataclass(record):
        return [type(record).__name__, *(_plain(getattr(record, field.name)) for field in fields(record))]
    return record


def seal_comments(circuit: Circuit, facts: Iterable[str]) -> list[str]:
    """The comment texts of a seal. circuit: what the netlist holds, read back; facts: one line each."""
    return [_MARK, *(f"  {fact}" for fact in facts), f"  digest {digest(circuit)}"]


def find_seal(lines: Sequence[str]) -> SealNote | None:
    """The last seal among a netlist's lines, or None. A seal whose digest is gone has the digest `""`."""
    found: SealNote | None = None
    for number, raw in enumerate(lines, start=1):
        line = raw.strip()
        if not line.startswith("*"):
            continue
        text = line[1:].strip()
        if text == _MARK:
            found = SealNote("", number)
        elif found is not None and text == DESPITE_ERRORS:
            found = SealNote(found.digest, found.line, anyway=True)
        elif found is not None and (match := _DIGEST.fullmatch(line)):
            found = SealNote(match[1], number, found.anyway)
    return found
