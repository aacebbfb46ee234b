"""ngspice as a program: finding it, running a deck through it, believing the results or not."""

from __future__ import annotations

import math
import os
import re
import shutil
import tempfile
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ..errors import InputError, Problem, SimulatorError
from ..system.files import MAX_RESULTS_BYTES, MAX_TEXT_BYTES, read_bytes
from ..system.process import Finished, clean_environment, describe_exit, run_limited
from ._acceptance import BadRawError, Expected, fault_of, remedy_for, scan_raw, telling_line
from ._guard import guard_deck

__all__ = [
    "Expected",
    "Run",
    "RunFailed",
    "find_ngspice",
    "guard_deck",
    "install_hint",
    "joined_raw",
    "ngspice_version",
    "run_deck",
]

# A million parts take 1 GB of ngspice; four times that is for the networks whose equations fill in.
MAX_MEMORY_BYTES = 4 * 1024**3


class RunFailed(SimulatorError):  # noqa: N818 - what happened, in the words its callers use
    """A simulator ran and its results must not be believed.

    log: everything it said, "" where it said nothing
    """

    def __init__(self, message: str = "", *, log: str = "", **place: Any) -> None:
        super().__init__(message, **place)
        self.log = log

    def __reduce__(self) -> tuple[object, ...]:
        return (_rebuild, (self.problems, self.log))

    def at(self, file: str | None = None, line: int | None = None) -> RunFailed:
        """The same failure with a place filled in wherever a problem has none yet."""
        return RunFailed(problems=super().at(file, line).problems, log=self.log)


def _rebuild(problems: tuple[Problem, ...], log: str) -> RunFailed:
    return RunFailed(problems=problems, log=log)


@dataclass(frozen=True)
class Run:
    """A run that passed the acceptance test.

    raw: the binary raw file as ngspice wrote it; log: what it said
    version: `ngspice-39`; seconds: wall-clock time
    """

    raw: bytes
    log: str
    version: str
    seconds: float


def install_hint() -> str:
    """Where ngspice comes from, and what to do where it cannot be had."""
    return (
        "Install ngspice (Debian or Ubuntu: apt install ngspice; macOS: brew install ngspice; Windows: "
        "unpack the archive from the ngspice project's download page, put its bin folder on PATH), or "
        "simulate the netlist elsewhere and give the results file to `rcnet compare`."
    )


def find_ngspice() -> str | None:
    """The ngspice program: the one RCNET_NGSPICE names, else the first on PATH; None where there is none.

    Raises SimulatorError where RCNET_NGSPICE is set to something that cannot be run.
    """
    named = os.environ.get("RCNET_NGSPICE")
    found = shutil.which(named or "ngspice")
    if named and found is None:
        remedy = "Set it to the ngspice program, or unset it."
        raise SimulatorError(
            f"RCNET_NGSPICE is {named!r}, which is no program that can be run.", remedy=remedy
        )
    # The program is started in another folder, where a relative path would mean something else.
    return None if found is None else str(Path(found).absolute())


def ngspice_version(path: str) -> str:
    """The version a program reports, as in `ngspice-39`. Raises SimulatorError where it reports none."""
    finished = _start([path, "--version"], None, 20.0)
    version = _version_in(finished.stdout)
    if version is None:
        raise SimulatorError(f"{path!r} does not say which ngspice it is.", remedy=install_hint())
    return version


def run_deck(deck: str, expected: Expected, *, executable: str, timeout: float = 60) -> Run:
    """Run one deck with one analysis in a folder and an environment of its own, and judge the outcome.

    deck: a netlist written by rcnet, title first; it is refused unread where it could do more than simulate
    timeout: seconds, after which ngspice and all it started are killed

    Raises SimulatorError where the deck is unsafe or ngspice cannot be started, and RunFailed where the
    run must not be believed: any sign of trouble in exit code, log or results counts.
    """
    guard_deck(deck)
    if not (math.isfinite(timeout) and timeout > 0):
        raise SimulatorError(
            f"a time limit of {timeout!r} s cannot be kept.", remedy="Give seconds above zero."
        )
    with _workshop() as scratch:
        folder = Path(scratch)
        _write_deck(folder / "in.cir", deck)
        argv = [str(Path(executable).absolute()), "-b", "-n", "-r", "out.raw", "-o", "out.log", "in.cir"]
        finished = _start(argv, folder, timeout)
        log = _read(folder / "out.log", MAX_TEXT_BYTES).decode("utf-8", "replace")
        log = "\n".join(part for part in (log, finished.stderr.decode("utf-8", "replace")) if part)
        _judge_process(finished, timeout, log)
        raw = _read(folder / "out.raw", MAX_RESULTS_BYTES)
    _judge_results(raw, expected, log)
    return Run(raw, log, _version_in(finished.stdout) or "ngspice", finished.seconds)


def joined_raw(runs: Sequence[Run]) -> bytes:
    """The raw files of several runs as one: raw files may hold plots one after another."""
    return b"".join(run.raw for run in runs)


def _workshop() -> tempfile.TemporaryDirectory[str]:
    try:
        return tempfile.TemporaryDirectory(prefix="rcnet-", ignore_cleanup_errors=True)
    except OSError as exc:
        raise _no_workshop(exc) from exc


def _no_workshop(exc: OSError) -> SimulatorError:
    return SimulatorError(
        f"the folder for temporary files cannot be written to: {exc.strerror}.",
        remedy="Free some space there, or set TMPDIR to another folder.",
    )


def _write_deck(path: Path, deck: str) -> None:
    try:
        path.write_bytes(deck.encode("utf-8"))
    except OSError as exc:
        raise _no_workshop(exc) from exc


def _read(path: Path, limit: int) -> bytes:
    """A file the simulator wrote; b"" where it wrote none."""
    if not path.exists():
        return b""
    try:
        return read_bytes(path, limit)
    except InputError as exc:
        raise RunFailed(
            f"what ngspice wrote to {path.name} cannot be used: {exc.message}", remedy=exc.remedy
        ) from exc


def _start(argv: Sequence[str], folder: Path | None, timeout: float) -> Finished:
    if folder is None:
        with _workshop() as scratch:
            return _start(argv, Path(scratch), timeout)
    try:
        return run_limited(
            argv,
            cwd=folder,
            env=clean_environment(folder),
            timeout=timeout,
            memory_bytes=MAX_MEMORY_BYTES,
            file_bytes=MAX_RESULTS_BYTES,
            # Only for the case that this process dies and can keep no time any more: threads count each.
            cpu_seconds=math.ceil(timeout * (os.cpu_count() or 1)) + 5,
        )
    except (OSError, ValueError) as exc:
        reason = exc.strerror if isinstance(exc, OSError) else str(exc)
        raise SimulatorError(f"{argv[0]!r} cannot be started: {reason}.", remedy=install_hint()) from exc


def _version_in(banner: bytes) -> str | None:
    match = re.search(rb"^\*\* (ngspice-[0-9A-Za-z.+-]+)", banner, re.MULTILINE)
    return match[1].decode() if match else None


def _judge_process(finished: Finished, timeout: float, log: str) -> None:
    if finished.timed_out:
        raise RunFailed(
            f"ngspice was not done after {timeout:g} s and was stopped.",
            remedy="Allow more with --timeout, or ask for fewer points.",
            log=log,
        )
    if finished.returncode != 0:
        raise failure(f"ngspice {describe_exit(finished.returncode)}", log)
    if telling_line(log) is not None:
        raise failure("ngspice gave results that must not be trusted", log)


def _judge_results(raw: bytes, expected: Expected, log: str) -> None:
    if not raw:
        raise failure("ngspice ended without writing any results", log)
    try:
        fault = fault_of(scan_raw(raw), expected)
    except BadRawError as exc:
        fault = str(exc)
    if fault is not None:
        raise failure(f"ngspice reported success, but its results {fault}", log)


def failure(what: str, log: str) -> RunFailed:
    """The error for a run that must not be believed: what happened, the simulator's own words, a remedy."""
    line = telling_line(log)
    said = f', saying "{line}"' if line else ""
    return RunFailed(f"{what}{said}.", remedy=remedy_for(line), log=log)
