"""Running another program within limits, whatever the operating system."""

from __future__ import annotations

import contextlib
import math
import os
import select
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import IO

# A program that prints more than this has said what it has to say; the rest is read and dropped.
MAX_OUTPUT_BYTES = 1_000_000

_ENDINGS = {
    "SIGSEGV": "crashed (segmentation fault)",
    "SIGBUS": "crashed (bus error)",
    "SIGILL": "crashed (illegal instruction)",
    "SIGFPE": "crashed (arithmetic fault)",
    "SIGABRT": "gave up (it aborted itself)",
    "SIGXCPU": "used up its processor time and was stopped",
    "SIGXFSZ": "wrote more than it may and was stopped",
    "SIGKILL": "was killed from outside, as systems do when memory runs out",
    "SIGTERM": "was ended from outside",
    "SIGINT": "was interrupted",
}


@dataclass(frozen=True)
class Finished:
    """How a program ended.

    returncode: its exit code, or minus the signal's number on POSIX
    stdout, stderr: what it printed, each cut after MAX_OUTPUT_BYTES
    timed_out: True where it was stopped for taking too long
    seconds: wall-clock time it ran
    """

    returncode: int
    stdout: bytes
    stderr: bytes
    timed_out: bool
    seconds: float


def describe_exit(returncode: int) -> str:
    """How a program ended, as words that follow its name: `crashed (segmentation fault)`."""
    if returncode >= 0:
        return f"ended with exit code {returncode}"
    try:
        name = signal.Signals(-returncode).name
    except ValueError:
        return f"was stopped by signal {-returncode}"
    return _ENDINGS.get(name, f"was stopped by signal {name}")


def clean_environment(home: Path) -> dict[str, str]:
    """An environment that holds the search path, a home folder and the C locale, nothing else."""
    environment = {"PATH": os.environ.get("PATH", os.defpath), "HOME": os.fspath(home), "LC_ALL": "C"}
    if sys.platform == "win32":
        # Without these two, system libraries and temporary files are not found on Windows.
        environment["SYSTEMROOT"] = os.environ.get("SYSTEMROOT", r"C:\Windows")
        environment["TEMP"] = os.fspath(home)
    return environment


def run_limited(
    argv: Sequence[str],
    *,
    cwd: Path,
    env: Mapping[str, str],
    timeout: float,
    memory_bytes: int,
    file_bytes: int,
    cpu_seconds: int,
) -> Finished:
    """Run a program to its end, or to the end of its time.

    It has no standard input and a process group of its own, which is killed whole when the program ends,
    when `timeout` seconds have passed, and on any exception here, KeyboardInterrupt included: nothing it
    started in that group outlives the call. Memory, the size of any file and processor time are limited
    on Linux; elsewhere only `timeout` holds. Raises OSError where the program cannot be started.
    """
    begun = time.monotonic()
    process = launch(
        argv,
        cwd=cwd,
        env=env,
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        memory_bytes=memory_bytes,
        file_bytes=file_bytes,
        cpu_seconds=cpu_seconds,
    )
    try:
        outputs = [_Drain(stream) for stream in (process.stdout, process.stderr) if stream is not None]
        ended = _wait(process, timeout)
    finally:
        end_group(process)
    stdout, stderr = (output.kept() for output in outputs)
    return Finished(process.returncode, stdout, stderr, not ended, time.monotonic() - begun)


def launch(
    argv: Sequence[str],
    *,
    cwd: Path,
    env: Mapping[str, str],
    stdin: int | IO[bytes],
    stdout: int | IO[bytes],
    stderr: int | IO[bytes],
    memory_bytes: int,
    file_bytes: int,
    cpu_seconds: int | None,
) -> subprocess.Popen[bytes]:
    """Start a program in a process group of its own and under limits; end it with `end_group`.

    Raises OSError where it cannot be started.
    """
    if sys.platform == "win32":
        flags, session = subprocess.CREATE_NEW_PROCESS_GROUP, False
    else:
        flags, session = 0, True
    process = subprocess.Popen(
        list(argv),
        cwd=cwd,
        env=dict(env),
        stdin=stdin,
        stdout=stdout,
        stderr=stderr,
        creationflags=flags,
        start_new_session=session,
    )
    try:
        _limit(process.pid, memory_bytes, file_bytes, cpu_seconds)
    except BaseException:
        end_group(process)
        raise
    return process


def end_group(process: subprocess.Popen[bytes]) -> None:
    """Kill a program started by `launch` together with all it started, and reap it."""
    if sys.platform == "win32":
        if process.poll() is None:
            subprocess.run(
                ["taskkill", "/T", "/F", "/PID", str(process.pid)], capture_output=True, check=False
            )
            process.kill()
    else:
        # macOS answers EPERM for a group of which only the unreaped leader is left.
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(process.pid, signal.SIGKILL)
    process.wait()


def _limit(pid: int, memory_bytes: int, file_bytes: int, cpu_seconds: int | None) -> None:
    # Set from outside right after the start: a hook between fork and exec can deadlock where threads run.
    if sys.platform != "linux":
        return
    import resource

    wanted = [
        (resource.RLIMIT_AS, memory_bytes, 0),
        (resource.RLIMIT_FSIZE, file_bytes, 0),
        (resource.RLIMIT_CORE, 0, 0),
    ]
    if cpu_seconds is not None:
        # At the soft limit comes SIGXCPU, which says why; at the hard one SIGKILL, which does not.
        wanted.append((resource.RLIMIT_CPU, cpu_seconds, 5))
    for which, value, grace in wanted:
        hard = resource.getrlimit(which)[1]
        top = value + grace if hard == resource.RLIM_INFINITY else min(value + grace, hard)
        # It may be gone already; and where a sandbox forbids limits, the timeout still holds.
        with contextlib.suppress(ProcessLookupError, PermissionError):
            resource.prlimit(pid, which, (min(value, top), top))


def _wait(process: subprocess.Popen[bytes], timeout: float) -> bool:
    """Wait until the program has ended (True) or the time is up (False)."""
    if sys.platform == "linux":
        # Popen.wait polls with sleeps of up to 50 ms, and reaps: then the group's number could be someone
        # else's when it is killed. A process descriptor wakes at once and leaves the reaping to end_group.
        with contextlib.suppress(OSError):
            descriptor = os.pidfd_open(process.pid)
            try:
                poll = select.poll()
                poll.register(descriptor, select.POLLIN)
                return bool(poll.poll(min(math.ceil(timeout * 1000), 2**31 - 1)))
            finally:
                os.close(descriptor)
    try:
        process.wait(timeout)
    except subprocess.TimeoutExpired:
        return False
    return True


class _Drain:
    """Reads a stream to its end in the background and keeps its beginning."""

    def __init__(self, stream: IO[bytes]) -> None:
        self._stream = stream
        self._chunks: list[bytes] = []
        self._thread = threading.Thread(target=self._read, daemon=True)
        self._thread.start()

    def _read(self) -> None:
        left = MAX_OUTPUT_BYTES
        with self._stream:
            while chunk := os.read(self._stream.fileno(), 65536):
                if left > 0:
                    self._chunks.append(chunk[:left])
                    left -= len(chunk)

    def kept(self) -> bytes:
        # A descendant that left the group may hold the pipe open for ever; what came so far must do then.
        self._thread.join(timeout=2)
        return b"".join(self._chunks)
