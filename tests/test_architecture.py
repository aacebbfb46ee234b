"""The direction of the arrows: imports only ever point down the house."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "rcnet"

# A room may import rooms of a lower rank, and itself. DEVELOPERS.md draws the picture.
RANKS = {
    "errors": 0,
    "lazily": 0,
    "system": 1,
    "values": 2,
    "curves": 2,
    "circuit": 3,
    "resources": 4,
    "exact": 4,
    "netlist": 4,
    "loading": 5,
    "findings": 5,
    "claims": 5,
    "compare": 5,
    "opinion": 5,
    "check": 6,
    "derive": 6,
    "measuring": 6,
    "handover": 7,
    "answers": 8,
    "forms": 8,
    "confirmation": 8,
    "design": 8,
    "report": 9,
    "confirm": 10,
    "api": 11,
    "cli": 12,
    "__main__": 13,
}


def _room(path: Path) -> str:
    first = path.relative_to(PACKAGE).parts[0]
    return first.removesuffix(".py")


def _imported_rooms(path: Path) -> set[str]:
    """The rooms of rcnet that a module imports, wherever in it the import stands."""
    depth = len(path.relative_to(PACKAGE).parts)
    rooms = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.level == depth:
            names = [node.module.split(".")[0]] if node.module else [alias.name for alias in node.names]
            rooms.update(names)
        elif (
            isinstance(node, ast.ImportFrom) and node.level == 0 and (node.module or "").startswith("rcnet.")
        ):
            rooms.add((node.module or "").split(".")[1])
    return rooms


MODULES = sorted(path for path in PACKAGE.rglob("*.py") if path != PACKAGE / "__init__.py")


@pytest.mark.parametrize("path", MODULES, ids=lambda path: path.relative_to(PACKAGE).as_posix())
def test_imports_point_down(path: Path) -> None:
    """A module imports only its own room and rooms below it."""
    room = _room(path)
    above = {other for other in _imported_rooms(path) - {room} if RANKS[other] >= RANKS[room]}

    assert not above, f"{room} imports {sorted(above)}"
