"""Decks made through templates: a file of text with places where parts, analyses and measures go.

A template comes from a stranger as likely as a netlist does. It sees text, numbers and tuples of them, calls
nothing, reads no file but templates of the same folders, and is held to limits of size, steps and time.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

from ..errors import InputError
from ..system.files import read_text

SUFFIX = ".cir.j2"
MAX_TEMPLATE_BYTES = 256 * 1024

_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}")
_DESCRIPTION = re.compile(r"\{#-?\s*(.*?)\s*-?#\}", re.DOTALL)
# Lines that a deck may hold. Whatever else there is in SPICE reads files, runs programs, or is not read back.
_CARD = re.compile(
    r"\.(ac|tran|noise|op|dc|tf|four|meas|measure|print|plot|save|probe|options?|opt|temp|ic|param|model|subckt|ends|end)\b",
    re.IGNORECASE,
)
_PART = re.compile(r"[rclkegfhvix][a-z0-9_.]*\s", re.IGNORECASE)
_COMMAND = re.compile(r"\*\s*(#|ng_script)", re.IGNORECASE)

Value = str | float | bool | tuple[Any, ...]


def template_names(folders: Iterable[Path]) -> dict[str, str]:
    """The templates in these folders with what each says of itself in its first comment, by name.

    Of two alike the one in the earlier folder counts. Raises InputError for a folder that is not there.
    """
    found: dict[str, str] = {}
    for folder in folders:
        _require_folder(folder)
        for path in sorted(folder.glob(f"*{SUFFIX}")):
            name = path.name.removesuffix(SUFFIX)
            if _NAME.fullmatch(name) and name not in found:
                found[name] = _description(folder, path)
    return dict(sorted(found.items()))


def _description(folder: Path, path: Path) -> str:
    try:
        said = _DESCRIPTION.match(_source(folder, path))
    except InputError:
        return "(cannot be read)"
    text = " ".join(said[1].split()) if said else ""
    return "".join(each if each.isprintable() else "?" for each in text[:200])


def template_path(name: str, folders: Sequence[Path]) -> Path:
    """The file of a template. Raises InputError where there is none, or where it lies outside its folder."""
    if not _NAME.fullmatch(name):
        raise InputError(
            f"a template is not called {name[:80]!r}.",
            remedy=f"Give its name alone: that of the file without {SUFFIX}, and no path.",
        )
    for folder in folders:
        _require_folder(folder)
        path = folder / f"{name}{SUFFIX}"
        if path.is_symlink() or path.exists():
            _require_inside(folder, path)
            return path
    raise InputError(f"there is no template called {name!r}.", remedy=f"Templates: {_listed(folders)}.")


def used_variables(name: str, folders: Sequence[Path]) -> set[str]:
    """The names a template looks up, with those of every template it includes or extends by name.

    Raises InputError for one that cannot be read.
    """
    from jinja2 import meta

    from .sandbox import Limits, Sandbox, told

    environment = Sandbox(lambda each: _found(each, folders), Limits())
    found, waiting, seen = set[str](), [name], set[str]()
    with told(SUFFIX, lambda: _listed(folders)):
        while waiting:
            if (each := waiting.pop()) in seen:
                continue
            seen.add(each)
            source, path = _found(each, folders)
            environment.compile(source, each, path)  # what is not allowed is told with its line
            tree = environment.parse(source, each, path)
            found |= meta.find_undeclared_variables(tree)
            named = (other for other in meta.find_referenced_templates(tree) if other is not None)
            waiting += [
                other for other in named if _is_there(other, folders)
            ]  # rendering tells which are not
    return found


def _is_there(name: str, folders: Sequence[Path]) -> bool:
    return bool(_NAME.fullmatch(name)) and any((folder / f"{name}{SUFFIX}").exists() for folder in folders)


def render_deck(name: str, folders: Sequence[Path], values: Mapping[str, Value]) -> str:
    """The text a template makes of these values, ended by a line end.

    folders: where templates are looked for, first to last; nothing else is read
    Raises InputError, with the template's file and line where they are known, for what is not allowed, goes
    wrong or has no end, and for lines that could do more than be simulated.
    """
    from .sandbox import Limits, Sandbox, told

    limits = Limits()
    environment = Sandbox(lambda each: _found(each, folders), limits)
    path, pieces = template_path(name, folders), list[str]()
    try:
        with told(SUFFIX, lambda: _listed(folders)):
            for piece in environment.get_template(name).generate(**values):
                limits.take(len(piece))
                pieces.append(piece)
    except InputError as exc:
        raise exc.at(str(path)) from exc
    text = "".join(pieces).strip("\n") + "\n"
    _require_harmless(text, path)
    return text


def _require_harmless(text: str, path: Path) -> None:
    title, *lines = text.removesuffix("\n").split("\n")
    if not title.startswith("* "):
        raise InputError(
            f"the deck begins with {title[:60]!r}, which is no title.",
            file=str(path),
            remedy="Print {{ title }} first.",
        )
    for number, line in enumerate((title, *lines), start=1):
        words = line.lstrip()
        known = _PART.match(words) or _CARD.match(words) or words.startswith("+")
        comment = words.startswith("*") and not _COMMAND.match(words)
        harmless = not words or comment or (known and line.isascii())
        if not harmless or not line.replace("\t", " ").isprintable():
            raise InputError(
                f"line {number} of the deck is {line[:60]!r}, which no deck may hold.",
                file=str(path),
                remedy="Keep to parts, analyses, .print, .save, .meas, .subckt and comments.",
            )


# ---------------------------------------------------------------------- files


def _found(name: str, folders: Sequence[Path]) -> tuple[str, str]:
    path = template_path(name, folders)
    return _source(path.parent, path), str(path)


def _listed(folders: Sequence[Path]) -> str:
    names = list(template_names(folders))
    return ", ".join([*names[:20], *(["..."] if len(names) > 20 else [])]) or "none"


def _require_folder(folder: Path) -> None:
    if not folder.is_dir():
        raise InputError(
            "there is no such folder of templates.",
            file=str(folder),
            remedy=f"Name one that holds *{SUFFIX}.",
        )


def _require_inside(folder: Path, path: Path) -> None:
    if not path.resolve().is_relative_to(folder.resolve()):
        raise InputError(
            "this template is a link that leads out of its folder.",
            file=str(path),
            remedy="Put a copy of the file there.",
        )


def _source(folder: Path, path: Path) -> str:
    _require_inside(folder, path)
    return read_text(path, MAX_TEMPLATE_BYTES)
