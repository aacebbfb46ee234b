"""Files: strangers' ones read with care, our own written whole or not at all."""

from __future__ import annotations

import contextlib
import errno
import os
import secrets
import stat
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from ..errors import InputError, OutputError

# Limits on what is read, stated in the README. Text beyond the first is no circuit or netlist a person wrote;
# results beyond the second do not fit the memory this tool promises to stay in.
MAX_TEXT_BYTES = 256 * 1024 * 1024
MAX_RESULTS_BYTES = 2 * 1024 * 1024 * 1024


def read_bytes(path: str | os.PathLike[str], limit: int = MAX_RESULTS_BYTES) -> bytes:
    """The contents of a regular file.

    Folders, devices, pipes and sockets are refused (a pipe would wait for ever), and so is anything larger
    than `limit` bytes. Raises InputError.
    """
    name = os.fspath(path)
    flags = (
        os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0) | getattr(os, "O_CLOEXEC", 0)
    )
    try:
        descriptor = os.open(name, flags)
    except (OSError, ValueError) as exc:
        raise InputError(_why_unreadable(exc), file=name, remedy=_remedy_unreadable(exc)) from exc
    status = os.fstat(descriptor)
    if not stat.S_ISREG(status.st_mode):
        os.close(descriptor)
        if stat.S_ISDIR(status.st_mode):
            raise InputError("this is a folder, not a file.", file=name, remedy="Name a file inside it.")
        raise InputError(
            "this is a device, a pipe or a socket.", file=name, remedy="Only ordinary files are read."
        )
    with os.fdopen(descriptor, "rb") as handle:
        if status.st_size > limit:
            raise InputError(
                f"the file has {status.st_size} bytes; at most {limit} are read.",
                file=name,
                remedy="Split it, or keep only what is needed.",
            )
        try:
            return handle.read(limit + 1)[:limit]
        except OSError as exc:
            raise InputError(_why_unreadable(exc), file=name, remedy=_remedy_unreadable(exc)) from exc


def read_text(path: str | os.PathLike[str], limit: int = MAX_TEXT_BYTES) -> str:
    """A regular file as UTF-8 text, a byte-order mark dropped.

    Raises InputError for binary contents or another encoding, naming the line.
    """
    name = os.fspath(path)
    data = read_bytes(name, limit)
    if b"\0" in data:
        line = data.count(b"\n", 0, data.index(b"\0")) + 1
        raise InputError(
            "the file holds a NUL byte, so it is not text.",
            file=name,
            line=line,
            remedy="Save it as UTF-8 text.",
        )
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as exc:
        line = data.count(b"\n", 0, exc.start) + 1
        raise InputError(
            f"byte 0x{data[exc.start]:02x} is not UTF-8.",
            file=name,
            line=line,
            remedy="Save the file as UTF-8 text.",
        ) from exc


def _why_unreadable(exc: Exception) -> str:
    if isinstance(exc, FileNotFoundError):
        return "there is no such file."
    if isinstance(exc, IsADirectoryError):
        return "this is a folder, not a file."
    if isinstance(exc, PermissionError):
        return "the file may not be read."
    reason = exc.strerror if isinstance(exc, OSError) and exc.strerror else str(exc)
    return f"the file cannot be read: {reason}."


def _remedy_unreadable(exc: Exception) -> str:
    if isinstance(exc, FileNotFoundError):
        return "Check the name and the folder."
    if isinstance(exc, PermissionError):
        return "Give yourself read permission."
    return "Name an ordinary file."


def write_file(path: str | os.PathLike[str], data: str | bytes) -> None:
    """Write a file whole or not at all, over whatever stood there.

    The bytes go to a hidden file beside the target, reach the disk, and take its name in one step; an
    interruption or a full disk leaves the old file untouched. Text is written as UTF-8 with LF ends.
    Raises OutputError.
    """
    target = Path(path)
    if os.path.isdir(target):  # noqa: PTH112 - the method raises where a name is too long
        raise OutputError(
            "a folder of that name stands there.",
            file=os.fspath(path),
            remedy="Name a file inside it, or choose another place.",
        )
    payload = data.encode("utf-8") if isinstance(data, str) else data
    try:
        with _scratch_beside(target) as scratch:
            with scratch.open("xb") as handle:
                handle.write(payload)
                handle.flush()
                os.fsync(handle.fileno())
            scratch.replace(target)
    except (OSError, ValueError) as exc:
        raise OutputError(_why_unwritable(exc), file=os.fspath(path), remedy=_remedy_unwritable(exc)) from exc


@contextmanager
def _scratch_beside(target: Path) -> Iterator[Path]:
    scratch = target.with_name(f".{target.name[:64]}.{secrets.token_hex(6)}.part")
    try:
        yield scratch
    finally:
        with contextlib.suppress(OSError, ValueError):
            scratch.unlink(missing_ok=True)


def make_folder(path: str | os.PathLike[str]) -> Path:
    """Make a folder and those above it; no harm if it is there. Raises OutputError."""
    folder = Path(path)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except (OSError, ValueError) as exc:
        raise OutputError(_why_unwritable(exc), file=os.fspath(path), remedy=_remedy_unwritable(exc)) from exc
    return folder


def remove_file(path: str | os.PathLike[str]) -> None:
    """Remove a file that an earlier run left; no harm if there is none. Raises OutputError."""
    try:
        Path(path).unlink(missing_ok=True)
    except OSError as exc:
        raise OutputError(_why_unwritable(exc), file=os.fspath(path), remedy=_remedy_unwritable(exc)) from exc


def _why_unwritable(exc: Exception) -> str:
    if isinstance(exc, OSError) and exc.errno in (errno.ENOSPC, getattr(errno, "EDQUOT", -1)):
        return "the disk is full; nothing was written."
    if isinstance(exc, OSError) and exc.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        return "this place may not be written to."
    if isinstance(exc, FileNotFoundError):
        return "the folder for it does not exist."
    if isinstance(exc, (NotADirectoryError, FileExistsError)):
        return "a file stands where a folder is needed."
    if isinstance(exc, IsADirectoryError):
        return "a folder of that name stands there."
    reason = exc.strerror if isinstance(exc, OSError) and exc.strerror else str(exc)
    return f"the file cannot be written: {reason}."


def _remedy_unwritable(exc: Exception) -> str:
    if isinstance(exc, OSError) and exc.errno in (errno.ENOSPC, getattr(errno, "EDQUOT", -1)):
        return "Free some space and run again."
    return "Choose another place."
