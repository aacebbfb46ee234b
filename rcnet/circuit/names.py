"""What a part, a source and a node may be called."""

from __future__ import annotations

from ..errors import CircuitError
from .shown import shown

MAX_NAME = 200  # characters; longer names are nobody's


def check_name(name: str, what: str) -> None:
    """Raise CircuitError unless `name` is printable text without blanks, of sensible length."""
    if not isinstance(name, str):
        raise CircuitError(f"the {what} {shown(name)} is not text.", remedy="Write it in quotes.")
    if not name:
        raise CircuitError(f"a {what} is empty.", remedy="Give it a name.")
    if len(name) > MAX_NAME:
        raise CircuitError(
            f"the {what} {name[:40]!r}... has {len(name)} characters.", remedy=f"Use at most {MAX_NAME}."
        )
    if not name.isprintable() or " " in name:
        raise CircuitError(
            f"the {what} {shown(name)} holds a blank or a control character.",
            remedy="Use letters and digits.",
        )


def check_node(name: str) -> None:
    """Raise CircuitError unless `name` can be a node; `gnd` cannot, because simulators take it for ground."""
    check_name(name, "node name")
    if name.lower() == "gnd":
        raise CircuitError(
            f"the node name {shown(name)} means ground to a simulator.", remedy="Write 0 for ground."
        )
