"""Analyses and measurements that a netlist asks for and are handed on: `.dc`, `.tf`, `.four`, `.meas`."""

from __future__ import annotations

import math
import re
from collections.abc import Callable

from ..circuit import Network, Place, Request
from ..errors import CircuitError
from ..values import read_spice_number, write_spice_number
from .lines import words_of
from .sweep import MAX_POINTS

_VOLTAGE = r"v\s*\(\s*[^(),\s]+\s*(?:,\s*[^(),\s]+\s*)?\)"
_OUTPUT = re.compile(rf"({_VOLTAGE}|i\s*\(\s*[^(),\s]+\s*\))", re.IGNORECASE)
_MEASURED = frozenset(["ac", "tran", "dc", "op", "noise", "sp"])
# Words, numbers, names, brackets and arithmetic; nothing that a simulator could take for a command.
_HARMLESS = re.compile(r"[A-Za-z0-9_.()=+\-*/^, '<>&|!?:#@\[\]]*")
_KINDS = re.compile(
    r"\b(v(?:db|m|p|ph|r|i)?|i)\s*\(\s*([^(),\s]+)\s*(?:,\s*([^(),\s]+)\s*)?\)", re.IGNORECASE
)

Spelled = Callable[[str], str]


def read_request(word: str, text: str, place: Place) -> Request:
    """A `.dc`, `.tf`, `.four` or `.meas` line, every number of it read.

    Raises CircuitError or QuantityError.
    """
    body = text.split(" ", 1)[1] if " " in text else ""
    return Request(word, _READERS[word](body), place)


def _dc(body: str) -> str:
    words = words_of(body)
    if len(words) not in (4, 8):
        raise CircuitError(".dc cannot be read.", remedy="Write .dc Vin 0 5 0.1.", code="analysis-unreadable")
    out: list[str] = []
    for first in range(0, len(words), 4):
        name, *texts = words[first : first + 4]
        start, stop, step = (read_spice_number(text).value for text in texts)
        if step == 0 or (stop - start) / step < 0 or abs((stop - start) / step) > MAX_POINTS:
            raise CircuitError(
                f".dc goes from {start:g} to {stop:g} by steps of {step:g}.",
                remedy=f"Let the step lead from one to the other, in at most {MAX_POINTS} points.",
                code="analysis-unreadable",
            )
        out += [name, *(write_spice_number(number) for number in (start, stop, step))]
    return " ".join(out)


def _tf(body: str) -> str:
    match = re.fullmatch(rf"\s*({_OUTPUT.pattern})\s*,?\s*(\S+)\s*", body, re.IGNORECASE)
    if match is None:
        raise CircuitError(".tf cannot be read.", remedy="Write .tf v(out) Vin.", code="analysis-unreadable")
    return f"{_tight(match[1])} {match[3]}"


def _four(body: str) -> str:
    words = body.split(None, 1)
    outputs = [_tight(found) for found in _OUTPUT.findall(words[1])] if len(words) == 2 else []
    rest = _OUTPUT.sub("", words[1]).replace(",", " ").strip() if len(words) == 2 else ""
    if not outputs or rest:
        raise CircuitError(
            ".four cannot be read.", remedy="Write .four 1k v(out).", code="analysis-unreadable"
        )
    frequency = read_spice_number(words[0]).value
    if not (frequency > 0 and math.isfinite(frequency)):
        raise CircuitError(
            f".four has the frequency {frequency!r} Hz.",
            remedy="Give one above zero.",
            code="analysis-unreadable",
        )
    return " ".join([write_spice_number(frequency), *outputs])


def _meas(body: str) -> str:
    words = body.split()
    if len(words) < 3 or words[0].lower() not in _MEASURED or not re.fullmatch(r"[A-Za-z_]\w*", words[1]):
        raise CircuitError(
            ".meas cannot be read.",
            remedy="Write .meas ac NAME when vdb(out)=-3, or take it out.",
            code="analysis-unreadable",
        )
    if not _HARMLESS.fullmatch(body) or any(len(word) > 200 for word in words):
        raise CircuitError(
            ".meas holds a character that belongs in no measurement.",
            remedy="Take it out.",
            code="analysis-unreadable",
        )
    return " ".join(body.split())


def _tight(text: str) -> str:
    return "".join(text.split())


_READERS: dict[str, Callable[[str], str]] = {".dc": _dc, ".tf": _tf, ".four": _four, ".meas": _meas}


def require_there(request: Request, network: Network, part_named: Spelled) -> None:
    """Raise CircuitError where a request names a source or a node that the network does not have."""
    words = request.text.split()
    named = [words[k] for k in range(0, len(words), 4)] if request.word == ".dc" else []
    if request.word == ".tf":
        named = words[-1:]
    for name in named:
        if name.lower() != "temp" and part_named(name) not in network:
            raise CircuitError(
                f"{request.word} names {name!r}, which is no part here.",
                remedy="Name a source of the circuit.",
                code="analysis-unreadable",
            )


def respelled(text: str, node: Spelled, part: Spelled) -> str:
    """The text with the names inside `v(...)` and `i(...)` changed."""

    def change(match: re.Match[str]) -> str:
        kind, first, second = match[1], match[2], match[3]
        if kind.lower() == "i":
            return f"{kind}({part(first)})"
        return f"{kind}({node(first)})" if second is None else f"{kind}({node(first)},{node(second)})"

    return _KINDS.sub(change, text)
