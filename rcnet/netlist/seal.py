"""The seal: comment lines that say what was checked, and a digest by which a later change is noticed."""

from __future__ import annotations

import hashlib
import json
import re
import textwrap
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import fields, is_dataclass
from typing import Any

from ..circuit import Circuit, Network, SealNote

DESPITE_ERRORS = "written despite errors (--anyway):"
_MARK = "Sealed by rcnet."
# Fields that came later: where they say nothing, a netlist sealed before keeps its digest.
_LATER = frozenset([("Sine", "damping")])
_DIGEST = re.compile(r"\*\s*digest ([0-9a-f]{64})")
MOST_LISTED = 500  # parts; a longer list would bury the netlist under it
_DIGITS = 4  # of each part's own digest: one change in 65 536 is seen, but not named
_WIDTH = 65  # of the words in a line of the list
_WORD = re.compile(r"[^\s:]{1,60}")  # a name that the list can hold
_DETAIL = re.compile(rf"\*\s*(parts|asked|options)((?: [^\s:]+:[0-9a-f]{{{_DIGITS}}})+)")
_NAMED = {
    "ac": "ac analysis",
    "transient": "run over time",
    "noise": "noise analysis",
    "operating-point": "operating point",
    "start": "starting state",
    "requests": "list of what is handed on",
}

Details = dict[str, dict[str, tuple[str, str]]]  # kind -> name in lower case -> short digest, name as spelled


def digest(circuit: Circuit) -> str:
    """The digest of what a netlist holds, 64 hex digits (SHA-256).

    It covers parts, nodes, exact values, sources, analyses, output, options, temperature, starting state and
    what is handed on. Names are taken without regard to case, as SPICE does; comments, order and layout do
    not count.
    """
    network, asked = circuit.network, _asked(circuit)
    table = [
        sorted(_part_rows(network)),
        sorted(_source_rows(network)),
        [asked["ac"], asked["transient"], asked["noise"], asked["operating-point"]],
        asked["output"],
        sorted([key, value] for key, value in circuit.options.items()),
        asked["temperature"],
    ]
    # What came later and is empty is left out, so that a netlist sealed before keeps its digest.
    table += [[key, asked[key]] for key in ("start", "requests") if asked[key]]
    return _hash(table)


def _hash(table: Any) -> str:
    return hashlib.sha256(json.dumps(table, separators=(",", ":")).encode()).hexdigest()


def _source_rows(network: Network) -> Iterator[list[Any]]:
    """Name, nodes, ac, operating value and waveform of every source."""
    for source in network.sources.values():
        nodes = [node.lower() for node in source.nodes]
        drive = (source.ac, source.ac_phase, source.operating_value, source.waveform)
        yield [source.name.lower(), *nodes, *(_plain(each) for each in drive)]


def _asked(circuit: Circuit) -> dict[str, Any]:
    """What is asked of a simulator, and under which conditions, by one word each."""
    wanted, start = circuit.analyses, circuit.initial
    starts = [
        sorted((name.lower(), value.hex()) for name, value in known.items())
        for known in (start.nodes, start.parts)
    ]
    return {
        "ac": _plain(wanted.ac),
        "transient": _plain(wanted.transient),
        "noise": _plain(wanted.noise),
        "operating-point": wanted.operating_point,
        "output": [node.lower() for node in circuit.output],
        "temperature": _plain(circuit.conditions.nominal),
        "start": starts if start else [],
        "requests": [[request.word, request.text.lower()] for request in circuit.requests],
    }


def _part_rows(network: Network) -> Iterator[list[str]]:
    """Name, nodes, what it senses or couples, and exact value of every part that is no source."""
    sources, rows = network.sources, network.arrays()
    nodes = [node.lower() for node in network.nodes]
    first, second = (column.tolist() for column in rows.nodes[:, :2].T)
    kinds, values = rows.kinds.tobytes(), rows.values.tolist()
    for row, name in enumerate(network.names):
        if kinds[row] in b"RCL":  # most of a large network; a record for each would take ten times as long
            yield [name.lower(), nodes[first[row]], nodes[second[row]], "", values[row].hex()]
        elif name not in sources:
            part = network.part(name)
            coupled = sorted(other.lower() for other in part.couples or ())
            ends = [node.lower() for node in part.nodes]
            yield [name.lower(), *ends, (part.senses or "").lower(), *coupled, part.value.hex()]


def _plain(record: Any) -> Any:
    """A number, a waveform or an analysis as nested lists of exact numbers."""
    if isinstance(record, float):
        return record.hex()
    if isinstance(record, (tuple, list)):
        return [_plain(item) for item in record]
    if is_dataclass(record):
        kind = type(record).__name__
        held = [(field.name, getattr(record, field.name)) for field in fields(record)]
        return [kind, *(_plain(value) for name, value in held if value or (kind, name) not in _LATER)]
    return record


# ---------------------------------------------------------------------- what was changed


def changes(circuit: Circuit) -> list[str] | None:
    """What differs from what was sealed, in words; None where the seal lists nothing.

    A seal lists up to MOST_LISTED parts, each with the first digits of a digest of its own.
    """
    sealed, now = _listed(circuit.lines), _details(circuit)
    if not sealed["parts"]:
        return None
    parts = sealed["parts"], now["parts"]
    said = [
        *_said([now[1] for key, now in parts[1].items() if parts[0].get(key, now)[0] != now[0]], "differ"),
        *_said([now[1] for key, now in parts[1].items() if key not in parts[0]], "were added"),
        *_said([then[1] for key, then in parts[0].items() if key not in parts[1]], "are gone"),
    ]
    for kind, words in (("asked", "the {} differs"), ("options", "the option {} differs")):
        for key in {**sealed[kind], **now[kind]}:
            if sealed[kind].get(key, ("",))[0] != now[kind].get(key, ("",))[0]:
                said.append(words.format(_NAMED.get(key, key)))
    return said


def _said(names: list[str], verb: str) -> list[str]:
    if not names:
        return []
    one = {"differ": "differs", "were added": "was added", "are gone": "is gone"}
    more = f" and {len(names) - 8} more" if len(names) > 8 else ""
    return [f"{', '.join(names[:8])}{more} {verb if len(names) > 1 else one[verb]}"]


def _details(circuit: Circuit) -> Details:
    """A short digest of every part and source, of what is asked for and of every option."""
    spelled = {name.lower(): name for name in circuit.network.names}
    rows = [*_part_rows(circuit.network), *_source_rows(circuit.network)]
    tables: dict[str, dict[str, Any]] = {
        "parts": {spelled[row[0]]: row for row in rows},
        "asked": {key: value for key, value in _asked(circuit).items() if value},
        "options": dict(circuit.options),
    }
    return {
        kind: {
            name.lower(): (_hash(value)[:_DIGITS], name)
            for name, value in table.items()
            if _WORD.fullmatch(name)
        }
        for kind, table in tables.items()
    }


def _detail_lines(circuit: Circuit) -> Iterator[str]:
    if len(circuit.network) > MOST_LISTED:
        return
    for kind, found in _details(circuit).items():
        words = " ".join(f"{name}:{short}" for short, name in found.values())
        for line in textwrap.wrap(words, _WIDTH, break_long_words=False, break_on_hyphens=False):
            yield f"  {kind} {line}"


def _listed(lines: Sequence[str]) -> Details:
    """What the last seal among a netlist's lines lists."""
    listed: Details = {"parts": {}, "asked": {}, "options": {}}
    for raw in lines:
        line = raw.strip()
        if line.startswith("*") and line[1:].strip() == _MARK:
            listed = {"parts": {}, "asked": {}, "options": {}}
        elif match := _DETAIL.fullmatch(line):
            for word in match[2].split():
                name, _, short = word.rpartition(":")
                listed[match[1]][name.lower()] = (short, name)
    return listed


# ---------------------------------------------------------------------- the comment lines


def seal_comments(circuit: Circuit, facts: Iterable[str]) -> list[str]:
    """The comment texts of a seal. circuit: what the netlist holds, read back; facts: one line each."""
    return [
        _MARK,
        *(f"  {fact}" for fact in facts),
        f"  digest {digest(circuit)}",
        *_detail_lines(circuit),
    ]


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
