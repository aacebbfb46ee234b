"""Curves, and the files that hold them."""

from __future__ import annotations

import os
from pathlib import Path

from ..errors import ResultsError
from ..system.files import MAX_TEXT_BYTES, read_bytes, read_text
from ._touchstone_head import is_touchstone
from .csv_file import parse_csv, write_csv
from .curve import Analysis, Curve, Curves, Ports
from .raw import parse_raw, write_raw
from .touchstone import parse_touchstone

__all__ = [
    "Analysis",
    "Curve",
    "Curves",
    "Ports",
    "parse_csv",
    "parse_raw",
    "parse_touchstone",
    "read_results",
    "write_csv",
    "write_raw",
]

_READ = "Berkeley raw files (.raw), tables (.csv, .tsv, .txt, .dat) and Touchstone (.s1p, .s2p) are read."
_TABLES = (".csv", ".tsv", ".txt", ".dat", ".data")
# What older instruments write outside ASCII: the signs of degree, micro and ohm's square, in Latin-1.
_INSTRUMENT_SIGNS = frozenset("\xb0\xb5\xb2\xba")


def read_results(path: str | os.PathLike[str]) -> Curves:
    """The curves of a results file, its kind told by its suffix, else by its first line.

    Raises ResultsError for what cannot be read, InputError where the file cannot be opened.
    """
    name = os.fspath(path)
    suffix = Path(name).suffix.lower()
    if is_touchstone(suffix):
        # Comments may be in any encoding; the rest is ASCII, and what is not is no number.
        return parse_touchstone(_bytes_of_text(name).decode("latin-1"), name)
    if suffix == ".csv":
        return parse_csv(_text(name), name)
    data = read_bytes(name)
    if suffix == ".raw" or data[:6].lower() == b"title:":
        return parse_raw(data, name)
    if suffix in _TABLES:
        return parse_csv(_text(name), name)
    raise ResultsError(f"{suffix!r} is no suffix of a results file that is read.", file=name, remedy=_READ)


def _bytes_of_text(name: str) -> bytes:
    data = read_bytes(name, MAX_TEXT_BYTES)
    if b"\0" in data:
        line = data.count(b"\n", 0, data.index(b"\0")) + 1
        message = "the file holds a NUL byte, so it is not text."
        raise ResultsError(message, file=name, line=line, remedy="Save it as plain text.")
    return data.removeprefix(b"\xef\xbb\xbf")


def _text(name: str) -> str:
    """A table's text: UTF-8, UTF-16 with its mark, or Latin-1 whose only signs beyond ASCII are units'."""
    data = read_bytes(name, MAX_TEXT_BYTES)
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        try:
            return data.decode("utf-16")
        except UnicodeDecodeError as exc:
            message = "the file begins as UTF-16, but is not."
            raise ResultsError(message, file=name, remedy="Save the file as UTF-8 text.") from exc
    if b"\0" not in data and not data.isascii():
        signs = set(data.decode("latin-1")) - set(map(chr, range(128)))
        if signs <= _INSTRUMENT_SIGNS:
            return data.decode("latin-1")
    return read_text(name)
