"""Strangers' files are read with care, our own are written whole or not at all."""

from __future__ import annotations

import errno
import os
import socket
import sys
from pathlib import Path

import pytest

from rcnet.errors import InputError, OutputError
from rcnet.system.files import make_folder, read_bytes, read_text, remove_file, write_file

posix_only = pytest.mark.skipif(os.name != "posix", reason="pipes and devices as files are a POSIX matter")


def names(folder: Path) -> list[str]:
    """What a folder holds."""
    return sorted(path.name for path in folder.iterdir())


def test_an_ordinary_file_is_read_whole(tmp_path: Path) -> None:
    """Every byte of an ordinary file comes back."""
    path = tmp_path / "gauge.raw"
    path.write_bytes(bytes(range(256)) * 1000)
    assert read_bytes(path) == bytes(range(256)) * 1000


@pytest.mark.parametrize("reader", [read_bytes, read_text])
def test_a_missing_file_is_named(tmp_path: Path, reader: object) -> None:
    """The error of a missing file carries its name and a remedy."""
    with pytest.raises(InputError, match="there is no such file") as caught:
        reader(tmp_path / "none.cir")  # type: ignore[operator]
    assert caught.value.file == str(tmp_path / "none.cir")
    assert caught.value.remedy


def test_a_folder_is_no_file(tmp_path: Path) -> None:
    """A folder is refused in words."""
    with pytest.raises(InputError, match=r"folder, not a file|may not be read"):
        read_bytes(tmp_path)


def test_a_name_with_nul_is_refused(tmp_path: Path) -> None:
    """A name no system can open is an error of ours, not a ValueError."""
    with pytest.raises(InputError):
        read_bytes(str(tmp_path / "a\0b"))
    with pytest.raises(OutputError):
        write_file(str(tmp_path / "a\0b"), "x")


@posix_only
def test_a_pipe_is_refused_without_waiting_for_a_writer(tmp_path: Path) -> None:
    """A named pipe nobody writes to does not hang the reader."""
    path = tmp_path / "pipe"
    os.mkfifo(path)
    with pytest.raises(InputError, match="device, a pipe or a socket"):
        read_bytes(path)


@posix_only
def test_a_device_is_refused() -> None:
    """A device that never ends is not read."""
    with pytest.raises(InputError, match="device, a pipe or a socket"):
        read_bytes("/dev/zero")


@posix_only
def test_a_socket_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A socket is not read."""
    monkeypatch.chdir(tmp_path)  # the names of sockets may not be long
    with socket.socket(socket.AF_UNIX) as server:
        server.bind("socket")
        with pytest.raises(InputError):
            read_bytes("socket")


def test_a_file_beyond_the_limit_is_refused_unread(tmp_path: Path) -> None:
    """The limit is on the size of the file, and both numbers are said."""
    path = tmp_path / "long.cir"
    path.write_bytes(b"x" * 101)
    assert read_bytes(path, 101) == b"x" * 101
    with pytest.raises(InputError, match="101 bytes; at most 100"):
        read_bytes(path, 100)


@pytest.mark.parametrize(
    ("data", "message", "line"),
    [
        pytest.param(b"* gauge\nR1 a b\0 1k\n", "NUL byte", 2, id="NUL"),
        pytest.param(b"* gauge\n\n* Z\xfcrich\n", "byte 0xfc is not UTF-8", 3, id="Latin-1"),
        pytest.param(b"* gauge\xff", "byte 0xff is not UTF-8", 1, id="never UTF-8"),
        pytest.param(b"\xff\xfe*\0", "NUL byte", 1, id="UTF-16"),
    ],
)
def test_what_is_not_utf8_text_is_refused_with_its_line(
    tmp_path: Path, data: bytes, message: str, line: int
) -> None:
    """Binary contents and other encodings are named with the line they stand in."""
    path = tmp_path / "gauge.cir"
    path.write_bytes(data)
    with pytest.raises(InputError, match=message) as caught:
        read_text(path)
    assert caught.value.line == line


def test_a_byte_order_mark_is_dropped(tmp_path: Path) -> None:
    """Text saved with a byte-order mark reads as if without."""
    path = tmp_path / "gauge.cir"
    path.write_bytes(b"\xef\xbb\xbf* 4k7 \xc2\xb5\n")
    assert read_text(path) == "* 4k7 µ\n"


@pytest.mark.parametrize("data", ["* pump station µ\n", b"\x00\xff\n", ""])
def test_what_is_written_is_read_back(tmp_path: Path, data: str | bytes) -> None:
    """Text goes out as UTF-8 with its line ends as they are, bytes as they are."""
    path = tmp_path / "out.bin"
    write_file(path, data)
    assert path.read_bytes() == (data.encode("utf-8") if isinstance(data, str) else data)
    assert names(tmp_path) == ["out.bin"]


@pytest.mark.parametrize(
    ("code", "message"),
    [
        pytest.param(errno.ENOSPC, "the disk is full", id="disk full"),
        pytest.param(errno.EIO, "cannot be written", id="input/output error"),
        pytest.param(errno.EROFS, "may not be written to", id="read-only file system"),
    ],
)
def test_a_failed_write_leaves_the_old_file_and_no_scratch(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, code: int, message: str
) -> None:
    """When the disk refuses, the file that stood there is untouched and nothing else is left."""
    path = tmp_path / "report.html"
    path.write_text("old")

    def refuse(descriptor: int) -> None:
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(os, "fsync", refuse)
    with pytest.raises(OutputError, match=message) as caught:
        write_file(path, "new")
    assert caught.value.file == str(path)
    assert path.read_text() == "old"
    assert names(tmp_path) == ["report.html"]


def test_an_interrupted_write_leaves_the_old_file_and_no_scratch(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Ctrl-C in the middle of a write passes through and harms nothing."""
    path = tmp_path / "report.html"
    path.write_text("old")

    def interrupt(descriptor: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_file(path, "new")
    assert path.read_text() == "old"
    assert names(tmp_path) == ["report.html"]


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no device that is always full")
def test_a_full_device_is_noticed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A write the system itself refuses for want of space is named so."""
    real_open = Path.open

    def open_full(self: Path, *arguments: object) -> object:
        self.touch()
        return real_open(Path("/dev/full"), "wb")

    monkeypatch.setattr(Path, "open", open_full)
    with pytest.raises(OutputError, match="the disk is full"):
        write_file(tmp_path / "report.html", "new")
    assert names(tmp_path) == []


@pytest.mark.skipif(
    os.name != "posix" or os.geteuid() == 0,
    reason="the superuser may write everywhere, Windows has other rights",
)
def test_a_read_only_folder_is_named(tmp_path: Path) -> None:
    """A folder that may not be written to is an error in words."""
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(OutputError, match="may not be written to"):
            write_file(tmp_path / "report.html", "new")
    finally:
        tmp_path.chmod(0o700)


def test_places_that_cannot_hold_a_file_are_named(tmp_path: Path) -> None:
    """A missing folder, a file where a folder is needed and the reverse are told apart."""
    (tmp_path / "taken").write_text("x")
    (tmp_path / "folder").mkdir()
    with pytest.raises(OutputError, match="the folder for it does not exist"):
        write_file(tmp_path / "none" / "report.html", "new")
    with pytest.raises(OutputError, match=r"file stands where a folder|does not exist"):
        write_file(tmp_path / "taken" / "report.html", "new")
    with pytest.raises(OutputError, match=r"a folder of that name|may not be written to"):
        write_file(tmp_path / "folder", "new")
    assert names(tmp_path) == ["folder", "taken"]


def test_a_long_name_is_refused_in_words(tmp_path: Path) -> None:
    """A name longer than the system takes is an error of ours."""
    with pytest.raises(OutputError):
        write_file(tmp_path / ("x" * 300), "new")
    assert names(tmp_path) == []


def test_folders_are_made_with_those_above(tmp_path: Path) -> None:
    """Making a folder twice is no error; making one where a file stands is."""
    folder = make_folder(tmp_path / "out" / "gauge")
    assert make_folder(folder).is_dir()
    write_file(folder / "x", "")
    with pytest.raises(OutputError, match="a file stands where a folder is needed"):
        make_folder(folder / "x")


def test_files_are_removed_once(tmp_path: Path) -> None:
    """Removing what is not there is no error; removing a folder is."""
    write_file(tmp_path / "x", "")
    remove_file(tmp_path / "x")
    remove_file(tmp_path / "x")
    assert names(tmp_path) == []
    with pytest.raises(OutputError):
        remove_file(tmp_path)


@pytest.mark.skipif(sys.platform != "linux", reason="links are followed the same way, tested once")
def test_a_link_to_a_device_is_no_way_around(tmp_path: Path) -> None:
    """What counts is the file itself, not the name of a link to it."""
    (tmp_path / "gauge.cir").symlink_to("/dev/zero")
    with pytest.raises(InputError, match="device, a pipe or a socket"):
        read_text(tmp_path / "gauge.cir")
