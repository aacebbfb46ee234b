"""Programs run within limits and leave nothing behind."""

from __future__ import annotations

import os
import signal
import sys
import time
from pathlib import Path

import pytest

from rcnet.system import process
from rcnet.system.process import Finished, clean_environment, describe_exit, run_limited

posix_only = pytest.mark.skipif(os.name != "posix", reason="process groups are a POSIX matter")
linux_only = pytest.mark.skipif(sys.platform != "linux", reason="limits are set on Linux only")

GENEROUS = {"memory_bytes": 2 * 1024**3, "file_bytes": 10**8, "cpu_seconds": 60}


def run_python(folder: Path, code: str, *, timeout: float = 30, **limits: int) -> Finished:
    """Run Python code under limits."""
    argv = [sys.executable, "-I", "-S", "-c", code]
    return run_limited(
        argv, cwd=folder, env=clean_environment(folder), timeout=timeout, **{**GENEROUS, **limits}
    )


def run_shell(folder: Path, code: str, *, timeout: float = 30, **limits: int) -> Finished:
    """Run shell code under limits."""
    argv = ["/bin/sh", "-c", code]
    return run_limited(
        argv, cwd=folder, env=clean_environment(folder), timeout=timeout, **{**GENEROUS, **limits}
    )


def is_alive(pid: int) -> bool:
    """Whether a process still runs; one that is dead but not yet reaped by its parent does not."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    status = Path(f"/proc/{pid}/stat")
    return not status.exists() or status.read_text().rpartition(")")[2].split()[0] != "Z"


def gone_soon(pid: int) -> bool:
    """Whether a process is gone within five seconds."""
    deadline = time.monotonic() + 5
    while time.monotonic() < deadline:
        if not is_alive(pid):
            return True
        time.sleep(0.02)
    return False


def test_a_program_that_ends_gives_its_code_and_both_its_outputs(tmp_path: Path) -> None:
    """The exit code, standard output, standard error and the time come back as they were."""
    code = "import sys; print('level 3.2 m'); print('pump off', file=sys.stderr); sys.exit(7)"
    finished = run_python(tmp_path, code)
    assert (finished.returncode, finished.stdout.split(), finished.stderr.split(), finished.timed_out) == (
        7,
        [b"level", b"3.2", b"m"],
        [b"pump", b"off"],
        False,
    )
    assert 0 < finished.seconds < 30


def test_there_is_nothing_to_read_on_standard_input(tmp_path: Path) -> None:
    """A program that reads its standard input meets the end of it instead of waiting."""
    assert run_python(tmp_path, "import sys; print(repr(sys.stdin.read()))").stdout.strip() == b"''"


def test_the_environment_holds_what_it_must_and_nothing_else(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Variables of the caller, SPICE_SCRIPTS for one, do not reach the program."""
    monkeypatch.setenv("SPICE_SCRIPTS", "elsewhere")
    finished = run_python(tmp_path, "import os; print(sorted(os.environ), os.environ['HOME'], os.getcwd())")
    names, _, rest = finished.stdout.decode().partition("] ")
    expected = {"HOME", "LC_ALL", "PATH"} | ({"SYSTEMROOT", "TEMP"} if sys.platform == "win32" else set())
    assert {name.strip(" '[") for name in names.split(",")} == expected
    assert str(tmp_path) in rest


def test_output_without_end_is_cut_and_does_not_block(tmp_path: Path) -> None:
    """A program that prints 20 MB on each output finishes, and 1 MB of each is kept."""
    code = "import os\nfor _ in range(320):\n os.write(1, b'x' * 65536); os.write(2, b'y' * 65536)"
    finished = run_python(tmp_path, code)
    assert finished.returncode == 0
    assert finished.stdout == b"x" * process.MAX_OUTPUT_BYTES
    assert finished.stderr == b"y" * process.MAX_OUTPUT_BYTES


def test_a_program_that_is_not_there_raises_oserror(tmp_path: Path) -> None:
    """A missing program is the caller's to explain."""
    with pytest.raises(OSError, match=r"No such file|cannot find"):
        run_limited([str(tmp_path / "none")], cwd=tmp_path, env={}, timeout=1, **GENEROUS)


@posix_only
def test_the_program_leads_a_session_of_its_own(tmp_path: Path) -> None:
    """Ctrl-C in the terminal reaches rcnet, which ends the program in its own way."""
    session, own = run_python(tmp_path, "import os; print(os.getsid(0), os.getpid())").stdout.split()
    assert session == own


@posix_only
def test_a_timeout_kills_grandchildren_too(tmp_path: Path) -> None:
    """When the time is up the whole process group dies, not only the program that was started."""
    began = time.monotonic()
    finished = run_shell(tmp_path, "sleep 300 & echo $! $$; trap '' TERM INT; wait", timeout=0.4)
    assert finished.timed_out
    assert finished.returncode == -signal.SIGKILL
    assert time.monotonic() - began < 10
    pids = [int(word) for word in finished.stdout.split()]
    assert len(pids) == 2
    assert all(gone_soon(pid) for pid in pids)


@posix_only
def test_what_a_program_leaves_running_is_killed_when_it_ends(tmp_path: Path) -> None:
    """A background process that keeps the outputs open neither delays the end nor outlives it."""
    began = time.monotonic()
    finished = run_shell(tmp_path, "sleep 300 & echo $!; exit 0", timeout=60)
    assert (finished.returncode, finished.timed_out) == (0, False)
    assert time.monotonic() - began < 10
    assert gone_soon(int(finished.stdout))


@posix_only
def test_a_descendant_that_left_the_group_cannot_hold_the_call(tmp_path: Path) -> None:
    """An output kept open by a process of another session is given up after a moment."""
    code = (
        "import os, subprocess, sys\n"
        "child = subprocess.Popen(['sleep', '20'], start_new_session=True)\n"
        "print(child.pid, flush=True); os._exit(0)"
    )
    began = time.monotonic()
    finished = run_python(tmp_path, code)
    assert time.monotonic() - began < 15
    os.kill(int(finished.stdout), signal.SIGKILL)


@posix_only
@pytest.mark.parametrize("error", [KeyboardInterrupt, MemoryError])
def test_an_interruption_kills_the_program(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: type[BaseException]
) -> None:
    """Ctrl-C, or any other exception while waiting, ends the program before it reaches the caller."""
    seen: list[int] = []

    def interrupted(running: object, timeout: float) -> bool:
        seen.append(running.pid)  # type: ignore[attr-defined]
        raise error

    monkeypatch.setattr(process, "_wait", interrupted)
    with pytest.raises(error):
        run_shell(tmp_path, "sleep 300")
    assert not is_alive(seen[0])


@posix_only
def test_waiting_works_without_process_descriptors(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the system has no pidfd_open, ends and timeouts are still noticed."""

    def missing(pid: int) -> int:
        raise OSError(38, "Function not implemented")

    monkeypatch.setattr(os, "pidfd_open", missing, raising=False)
    assert run_shell(tmp_path, "exit 5").returncode == 5
    assert run_shell(tmp_path, "sleep 300", timeout=0.2).timed_out


@linux_only
def test_a_file_beyond_its_limit_stops_the_program(tmp_path: Path) -> None:
    """A program may not fill the disk: SIGXFSZ ends it at the limit."""
    finished = run_shell(tmp_path, "sleep 0.2; exec head -c 3000000 /dev/zero > big", file_bytes=1_000_000)
    assert finished.returncode == -signal.SIGXFSZ
    assert (tmp_path / "big").stat().st_size == 1_000_000


@linux_only
def test_processor_time_beyond_its_limit_stops_the_program(tmp_path: Path) -> None:
    """A program that only computes is ended by SIGXCPU even where nobody watches the clock."""
    assert run_shell(tmp_path, "while :; do :; done", cpu_seconds=1).returncode == -signal.SIGXCPU


@linux_only
def test_memory_beyond_its_limit_is_refused(tmp_path: Path) -> None:
    """A program that asks for 2 GB under a limit of 512 MB does not get it."""
    code = "import time; time.sleep(0.2); bytearray(2 * 1024**3)"
    assert b"MemoryError" in run_python(tmp_path, code, memory_bytes=512 * 1024**2).stderr


@linux_only
def test_no_core_is_dumped(tmp_path: Path) -> None:
    """The limit on core files is zero, soft and hard."""
    code = "import time, resource; time.sleep(0.2); print(resource.getrlimit(resource.RLIMIT_CORE))"
    argv = [sys.executable, "-I", "-c", code]
    finished = run_limited(argv, cwd=tmp_path, env=clean_environment(tmp_path), timeout=30, **GENEROUS)
    assert finished.stdout.strip() == b"(0, 0)"


@posix_only
@pytest.mark.parametrize(
    ("returncode", "words"),
    [
        pytest.param(0, "ended with exit code 0", id="success"),
        pytest.param(3, "ended with exit code 3", id="exit code"),
        pytest.param(-signal.SIGSEGV, "crashed (segmentation fault)", id="SIGSEGV"),
        pytest.param(-signal.SIGABRT, "gave up (it aborted itself)", id="SIGABRT"),
        pytest.param(-signal.SIGKILL, "was killed from outside", id="SIGKILL"),
        pytest.param(-signal.SIGUSR1, "was stopped by signal SIGUSR1", id="a signal without words"),
        pytest.param(-250, "was stopped by signal 250", id="an unknown signal"),
    ],
)
def test_endings_are_named_in_plain_words(returncode: int, words: str) -> None:
    """A person reads how a program ended, not a number."""
    assert describe_exit(returncode).startswith(words)
