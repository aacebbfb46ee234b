"""Why a line of a netlist is not read: what it is, and what to write instead."""

from __future__ import annotations

import re
from collections.abc import Iterable

from ..errors import CircuitError

# The first letters that SPICE knows and rcnet does not model (ngspice manual, "Basic circuit elements"):
# what it is, how many nodes it has, what to do.
_ELEMENTS = {
    "A": ("a code model", 0, "Take it out; it can read files and run code."),
    "B": ("a behavioural source", 2, "Write it as E, G, F or H with a plain number."),
    "D": ("a diode", 2, "Take it out, or put its resistance at the working point in its place."),
    "J": ("a junction transistor", 3, "Take it out, or model it with E, G, F, H and resistors."),
    "M": ("a field-effect transistor", 4, "Take it out, or model it with E, G, F, H and resistors."),
    "N": ("a compiled device", 0, "Take it out, or model it with E, G, F, H and resistors."),
    "O": ("a lossy line", 4, "Write it as a ladder of R, L and C."),
    "P": ("a coupled line", 0, "Write it as a ladder of R, L and C."),
    "Q": ("a bipolar transistor", 3, "Take it out, or model it with E, G, F, H and resistors."),
    "S": ("a switch", 4, "Put a resistor in its place, or leave it open."),
    "T": ("a transmission line", 4, "Write it as a ladder of L and C."),
    "U": ("a distributed RC line", 3, "Write it as a ladder of R and C."),
    "W": ("a switch", 2, "Put a resistor in its place, or leave it open."),
    "Y": ("a lossy line", 4, "Write it as a ladder of R, L and C."),
    "Z": ("a field-effect transistor", 3, "Take it out, or model it with E, G, F, H and resistors."),
}
_UNREAD = '=[]?()&%$"!:,;'  # first characters for which ngspice 39 drops the line with a warning
_LINEAR_PART = "Or analyse the linear rest with --linear-part."

_CARD_REMEDIES = {
    (".if", ".elseif", ".else", ".endif"): "Keep the branch that is meant, without the condition.",
    (".data", ".step", ".alter"): "Write a netlist for each case.",
}

_BEHIND_VALUE = (
    (
        r"ac(=.*)?",
        "is a value of its own for the ac analysis",
        "Remove it; one circuit has one value.",
        "unreadable",
    ),
    (r"noisy(=.*)?", "turns its noise off", "Remove it.", "unreadable"),
    (r"ic(=.*)?", "is an initial condition", "Only capacitors and inductors have one.", "unreadable"),
    (r"m(=.*)?", "multiplies the part", "Write the part as often as it is there.", "unreadable"),
    (
        r"[-+.\d]+%|tol\w*(=.*)?",
        "is a tolerance",
        "Remove it; ngspice takes `1k 1%` for 1. A circuit file can state one.",
        "second-value",
    ),
    (r"[-+]?\.?\d.*", "is a second value, and ngspice takes the last", "Keep one.", "second-value"),
    (
        r"(meg|[tgkmunpf])?(ohms?|Ω|f|h)?",
        "is a unit by itself",
        "Write it against the number, as 1k or 100n.",
        "second-value",
    ),
)


def non_linear(name: str, what: str) -> CircuitError:
    """The error for a part that is not linear, or not made of lumped parts."""
    return CircuitError(
        f"{name[:40]!r} is {what}; read are the linear parts R C L K E F G H V I and subcircuits of them.",
        remedy=f"Take it out, or put a linear part in its place. {_LINEAR_PART}",
        code="not-linear",
    )


def unseen_character(text: str) -> CircuitError:
    """The error for a line that holds a character nobody sees."""
    odd = next(character for character in text if not character.isprintable())
    return CircuitError(
        f"the line holds the character {odd!r}, which is not seen.",
        remedy="Type the line anew.",
        code="unreadable",
    )


def unmodelled(text: str) -> tuple[str, int] | None:
    """What a line is that SPICE knows and rcnet does not model, and its count of nodes; None for others."""
    found = _ELEMENTS.get(text[0].upper())
    return None if found is None else found[:2]


def no_part(text: str) -> CircuitError:
    """The error for a line that begins no part that rcnet reads and no dot line."""
    name, first = text.split(" ", 1)[0], text[0]
    if first == "+":
        return CircuitError(
            "the line continues nothing.", remedy="Remove the +, or put a line before it.", code="not-a-part"
        )
    if first.upper() in _ELEMENTS:
        what, _, remedy = _ELEMENTS[first.upper()]
        return CircuitError(
            f"{name[:40]!r} is {what}; only R C L K E F G H V I and X are read.",
            remedy=f"{remedy} {_LINEAR_PART}",
            code="not-linear",
        )
    passed_over = "; ngspice passes over such a line with a warning" if first in _UNREAD else ""
    return CircuitError(
        f"the line begins with {first!r}, which begins no part and no command{passed_over}.",
        remedy="Make it a comment with *, or mend it.",
        code="not-a-part",
    )


def card_remedy(word: str, known: Iterable[str], nearest: str | None) -> str:
    """What to do about a dot line that is not read. nearest: the known word it resembles, if any"""
    for words, remedy in _CARD_REMEDIES.items():
        if word in words:
            return remedy
    if nearest is not None:
        return f"Did you mean {nearest}?"
    return f"Read are {' '.join(sorted(known))}; take the line out, or write what it stands for."


def reason_behind_value(name: str, value: str, word: str) -> tuple[str, str, str]:
    """Message, remedy and code for a word behind a part's value."""
    for pattern, what, remedy, code in _BEHIND_VALUE:
        if re.fullmatch(pattern, word, re.IGNORECASE):
            return f"{name}: {word[:40]!r} behind the value {value!r} {what}.", remedy, code
    return (
        f"{name}: {word[:40]!r} behind the value {value!r} is not read.",
        "Keep to NAME NODES VALUE.",
        "second-value",
    )
