"""Why a line of a netlist is not read: what it is, and what to write instead."""

from __future__ import annotations

import re
from collections.abc import Iterable

from ..errors import CircuitError

# The first letters that SPICE knows and rcnet does not model (ngspice manual, "Basic circuit elements").
_ELEMENTS = {
    "A": ("a code model", "Take it out; it can read files and run code."),
    "B": ("a behavioural source", "Write it as E, G, F or H with a plain number."),
    "D": ("a diode", "Take it out, or put its resistance at the working point in its place."),
    "J": ("a junction transistor", "Take it out, or model it with E, G, F, H and resistors."),
    "K": ("a coupling of inductors", "Take it out, or write the coupled inductors as uncoupled ones."),
    "M": ("a field-effect transistor", "Take it out, or model it with E, G, F, H and resistors."),
    "O": ("a lossy line", "Write it as a ladder of R, L and C."),
    "P": ("a coupled line", "Write it as a ladder of R, L and C."),
    "Q": ("a bipolar transistor", "Take it out, or model it with E, G, F, H and resistors."),
    "S": ("a switch", "Put a resistor in its place, or leave it open."),
    "T": ("a transmission line", "Write it as a ladder of L and C."),
    "U": ("a distributed RC line", "Write it as a ladder of R and C."),
    "W": ("a switch", "Put a resistor in its place, or leave it open."),
    "X": ("a subcircuit", "Write the subcircuit's own parts in its place."),
    "Y": ("a lossy line", "Write it as a ladder of R, L and C."),
    "Z": ("a field-effect transistor", "Take it out, or model it with E, G, F, H and resistors."),
}
_UNREAD = '=[]?()&%$"!:,;'  # first characters for which ngspice 39 drops the line with a warning

_CARD_REMEDIES = {
    (".control", ".endc"): "Remove the section; rcnet executes nothing and passes no command on.",
    (".subckt", ".ends"): "Write the subcircuit's own parts where it is used.",
    (".param", ".func", ".csparam"): "Write the numbers themselves where the names stand.",
    (".include", ".inc", ".lib"): "Copy the parts in; no other file is read.",
    (".model",): "Give each part its value on its own line.",
    (".ic", ".nodeset"): "Remove it; a transient starts from the operating point.",
    (".meas", ".measure", ".four"): "Remove it; state what is measured as a claim in a circuit file.",
    (
        ".dc",
        ".tf",
        ".pz",
        ".sens",
        ".disto",
        ".pss",
        ".sp",
    ): "Remove it; read are .ac, .tran, .noise and .op.",
}

_BEHIND_VALUE = (
    (r"tc[12]?|temp|dtemp", "is a temperature setting", "Remove it; a circuit file can state a tempco."),
    (r"ic", "is an initial condition", "Remove it; a transient starts from the operating point."),
    (
        r"[-+.\d]+%|tol\w*",
        "is a tolerance",
        "Remove it; ngspice takes `1k 1%` for 1. A circuit file can state one.",
    ),
    (r"[-+]?\.?\d.*", "is a second value, and ngspice takes the last", "Keep one."),
    (
        r"(meg|[tgkmunpf])?(ohms?|Ω|f|h)?",
        "is a unit by itself",
        "Write it against the number, as 1k or 100n.",
    ),
)


def no_part(text: str) -> CircuitError:
    """The error for a line that begins no part that rcnet reads and no dot line."""
    name, first = text.split(" ", 1)[0], text[0]
    if first == "*":
        return CircuitError(
            f"{name[:40]!r} is a command to a simulator, hidden in a comment.",
            remedy="Remove the line; rcnet executes nothing and passes no command on.",
        )
    if first == "+":
        return CircuitError("the line continues nothing.", remedy="Remove the +, or put a line before it.")
    if first.upper() in _ELEMENTS:
        what, remedy = _ELEMENTS[first.upper()]
        return CircuitError(f"{name[:40]!r} is {what}; only R C L E G F H V I are read.", remedy=remedy)
    passed_over = "; ngspice passes over such a line with a warning" if first in _UNREAD else ""
    return CircuitError(
        f"the line begins with {first!r}, which begins no part and no command{passed_over}.",
        remedy="Make it a comment with *, or mend it.",
    )


def card_remedy(word: str, known: Iterable[str]) -> str:
    """What to do about a dot line that is not read."""
    for words, remedy in _CARD_REMEDIES.items():
        if word in words:
            return remedy
    return f"Read are {' '.join(sorted(known))}; take the line out, or write what it stands for."


def reason_behind_value(name: str, value: str, word: str) -> tuple[str, str]:
    """Message and remedy for a word behind a part's value."""
    for pattern, what, remedy in _BEHIND_VALUE:
        if re.fullmatch(pattern, word, re.IGNORECASE):
            return f"{name}: {word[:40]!r} behind the value {value!r} {what}.", remedy
    return f"{name}: {word[:40]!r} behind the value {value!r} is not read.", "Keep to NAME NODES VALUE."
