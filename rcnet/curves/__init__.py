"""Curves, and the files that hold them."""

from __future__ import annotations

import os
import re
from pathlib import Path

from ..errors import ResultsError
from ..system.files import read_bytes, read_text
from .csv_file import parse_csv, write_csv
from .curve import Analysis, Curve, Curves
from .raw import parse_raw, write_raw

__all__ = [
    "Analysis",
    "Curve",
    "Curves",
    "parse_csv",
    "parse_raw",
    "read_results",
    "write_csv",
    "write_raw",
]

_READ = "Berkeley raw files (.raw) and CSV (.csv) are read."


def read_results(path: str | os.PathLike[str]) -> Curves:
    """The curves of a results file, its kind told by its suffix, else by its first line.

    Raises ResultsError for what cannot be read, InputError where the file cannot be opened.
    """
    name = os.fspath(path)
    suffix = Path(name).suffix.lower()
    if suffix == ".csv":
        return parse_csv(read_text(name), name)
    if re.fullmatch(r"\.(s[0-9]+p|ts)", suffix):
        raise ResultsError("Touchstone files are not read yet.", file=name, remedy=_READ)
    data = read_bytes(name)
    if suffix == ".raw" or data[:6].lower() == b"title:":
        return parse_raw(data, name)
    raise ResultsError(f"{suffix!r} is no suffix of a results file that is read.", file=name, remedy=_READ)
