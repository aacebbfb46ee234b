"""Finding the files that are shipped with rcnet: starter circuits and templates."""

from __future__ import annotations

from pathlib import Path

from .circuit import SUFFIX
from .errors import InputError


def templates() -> Path:
    """The folder of shipped templates: inside the package when installed, beside it in a working copy."""
    package = Path(__file__).resolve().parent
    for folder in (package / "templates", package.parent / "templates"):
        if folder.is_dir():
            return folder
    raise InputError("the shipped templates are not where they should be.", remedy="Install rcnet again.")


def starters() -> dict[str, Path]:
    """The starter circuits by name, in alphabetical order."""
    found = sorted((templates() / "circuits").glob(f"*{SUFFIX}"))
    return {path.name[: -len(SUFFIX)]: path for path in found}


def netlist_templates() -> Path:
    """The folder of the templates from which decks are made."""
    return templates() / "netlists"
