"""ngspice as a shared library through PySpice, kept in a warm child process.

A crash, a run that never ends, a spoilt instance or a leak stays in the child; the next deck gets a new one.
"""

from __future__ import annotations

import contextlib
import ctypes
import ctypes.util
import importlib.util
import math
import os
import re
import subprocess
import sys
import tempfile
import threading
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from ..curves.curve import Analysis, Curve, Curves
from ..errors import SimulatorError
from ..system.process import clean_environment, describe_exit, end_group, launch
from ._acceptance import NOISE_SPECTRUM, NOISE_TOTALS, Expected, Plot, fault_of, plot_of, telling_line
from ._frames import read_array, read_json, write_json
from .ngspice import RunFailed, failure, guard_deck

__all__ = ["LibraryRunner", "find_library"]

START_SECONDS = 60.0
# Address space, most of it never touched: numpy's threads and the loader reserve some of it.
MAX_MEMORY_BYTES = 8 * 1024**3
MAX_FILE_BYTES = 64 * 1024**2

_SONAMES = ("libngspice.so.0", "libngspice.0.dylib", "ngspice.dll")
_HOW_TO_INSTALL = (
    "Install it (Debian or Ubuntu: apt install libngspice0; macOS: brew install libngspice), name it in "
    "NGSPICE_LIBRARY_PATH, or use `--second-opinion ngspice`."
)

_PLOTS: dict[str, tuple[str, Analysis]] = {
    "ac": ("AC Analysis", "ac"),
    "tran": ("Transient Analysis", "transient"),
    "op": ("Operating Point", "operating point"),
    "dc": ("DC transfer characteristic", "other"),
    "tf": ("Transfer Function", "other"),
    "noise": (NOISE_SPECTRUM, "noise"),
}
_UNITS = {"voltage": "V", "current": "A", "voltage_density": "V/sqrt(Hz)", "current_density": "A/sqrt(Hz)"}


def find_library() -> str | None:
    """The ngspice library: the one NGSPICE_LIBRARY_PATH names, else the one the loader finds; None if none.

    Raises SimulatorError where NGSPICE_LIBRARY_PATH is a path at which there is no file.
    """
    named = os.environ.get("NGSPICE_LIBRARY_PATH")
    if named:
        if Path(named).name != named and not Path(named).is_file():
            remedy = "Set it to the ngspice library, or unset it."
            raise SimulatorError(f"NGSPICE_LIBRARY_PATH is {named!r}, which is no file.", remedy=remedy)
        return named
    found = ctypes.util.find_library("ngspice")
    if found:
        return found
    # find_library needs ldconfig or a compiler, which small systems lack.
    for soname in _SONAMES:
        with contextlib.suppress(OSError):
            ctypes.CDLL(soname)
            return soname
    return None


class LibraryRunner:
    """Runs decks through the ngspice library, one at a time; a context manager.

    library: path or name of the library; None to look for it. The child starts with the first deck.
    Raises SimulatorError where PySpice or the library is missing.
    """

    def __init__(self, library: str | None = None) -> None:
        if importlib.util.find_spec("PySpice") is None:
            raise SimulatorError(
                "the second opinion ngspice-library needs PySpice, which is not installed.",
                remedy='Run: pip install "rcnet[pyspice]"',
            )
        found = library or find_library()
        if found is None:
            raise SimulatorError("the ngspice library is not on this machine.", remedy=_HOW_TO_INSTALL)
        self._library = found
        self._child: _Child | None = None
        # Two decks at once in one instance crash it.
        self._turn = threading.Lock()

    def __enter__(self) -> LibraryRunner:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @property
    def version(self) -> str:
        """The library's version, as in `ngspice-39`. Raises SimulatorError where it cannot be loaded."""
        with self._turn:
            return self._ready().version

    def close(self) -> None:
        """End the child; a later run would start another."""
        child, self._child = self._child, None
        if child is not None:
            child.close()

    def run(self, deck: str, expected: Expected, timeout: float = 60) -> tuple[Curves, str]:
        """Run one deck with one analysis; the curves, named as in raw files, and the log.

        timeout: seconds, after which the child is killed
        Raises SimulatorError where the deck is unsafe or the library cannot be loaded, and RunFailed where
        the run must not be believed; the next run is not affected.
        """
        guard_deck(deck)
        if not (math.isfinite(timeout) and timeout > 0):
            raise SimulatorError(
                f"a time limit of {timeout!r} s cannot be kept.", remedy="Give seconds above zero."
            )
        title, _, body = deck.partition("\n")
        with self._turn:
            child = self._ready()
            try:
                # A title of ours: PySpice takes a title with the word "error" in it for one.
                answer = child.ask("* rcnet\n" + _ended(body), timeout)
            except BaseException:
                self.close()
                raise
            if answer["spoilt"]:
                self.close()
        return _judged(answer, expected, title), answer["log"]

    def _ready(self) -> _Child:
        if self._child is None:
            self._child = _Child(self._library)
        return self._child


def _ended(body: str) -> str:
    """A deck's text with a last line `.end`: without one nothing is loaded."""
    if re.search(r"^[ \t]*\.end[ \t]*$", body, re.IGNORECASE | re.MULTILINE):
        return body
    return body.rstrip("\n") + "\n.end\n"


class _Child:
    """One child process with ngspice in it."""

    def __init__(self, library: str) -> None:
        self._files = contextlib.ExitStack()
        try:
            self._start(library)
        except BaseException:
            self.close()
            raise

    def _start(self, library: str) -> None:
        try:
            folder = Path(self._files.enter_context(tempfile.TemporaryDirectory(prefix="rcnet-")))
            self._said = self._files.enter_context(tempfile.TemporaryFile())  # noqa: SIM115 - the stack does
            self._process = launch(
                [sys.executable, "-m", "rcnet.opinion._library_worker", _absolute(library)],
                cwd=folder,
                env=_environment(folder),
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                stderr=self._said,
                memory_bytes=MAX_MEMORY_BYTES,
                file_bytes=MAX_FILE_BYTES,
                cpu_seconds=None,
            )
        except OSError as exc:
            raise SimulatorError(f"the process for ngspice cannot be started: {exc.strerror}.") from exc
        self._files.callback(self._end)
        with self._deadline(START_SECONDS):
            hello = self._receive()
        if "failed" in hello:
            raise SimulatorError(
                f"the ngspice library {library!r} cannot be loaded: {hello['failed']}.",
                remedy=_HOW_TO_INSTALL,
            )
        self.version = str(hello["version"])

    def ask(self, deck: str, timeout: float) -> dict[str, Any]:
        """The answer to a deck, each of its plots with `values` added: a list of arrays. Raises RunFailed."""
        with self._deadline(timeout):
            if self._process.stdin is None:
                raise EOFError
            write_json(self._process.stdin, {"deck": deck})
            answer = self._receive()
            for plot in answer["plots"]:
                plot["values"] = [read_array(self._answers()) for _ in plot["vectors"]]
        return answer

    def close(self) -> None:
        self._files.close()

    def _end(self) -> None:
        if self._process.returncode is None:  # once reaped, its number may be someone else's
            end_group(self._process)
        for stream in (self._process.stdin, self._process.stdout):
            if stream is not None:
                with contextlib.suppress(OSError):  # what was not sent yet has nobody to go to
                    stream.close()

    def _answers(self) -> Any:
        return self._process.stdout

    def _receive(self) -> dict[str, Any]:
        return read_json(self._answers())

    @contextlib.contextmanager
    def _deadline(self, seconds: float) -> Iterator[None]:
        """Kill the child when the time is up; say how it died where it did not survive the block."""
        expired = threading.Event()

        def expire() -> None:
            expired.set()
            end_group(self._process)

        timer = threading.Timer(seconds, expire)
        timer.daemon = True
        timer.start()
        try:
            yield
        except (OSError, EOFError, ValueError) as exc:
            timer.cancel()
            raise self._death(expired.is_set(), seconds) from exc
        finally:
            timer.cancel()
            timer.join()

    def _death(self, expired: bool, seconds: float) -> RunFailed:
        try:
            returncode = self._process.wait(timeout=2)
        except subprocess.TimeoutExpired:
            return failure("the process with the ngspice library sent nonsense", "")
        self._said.seek(0)
        said = self._said.read(1_000_000).decode("utf-8", "replace")
        if expired:
            return RunFailed(
                f"the ngspice library was not done after {seconds:g} s and was stopped.",
                remedy="Allow more with --timeout, or ask for fewer points.",
                log=said,
            )
        return failure(f"the ngspice library {describe_exit(returncode)}", said)


def _absolute(library: str) -> str:
    """A bare name is for the loader to find; a path must hold in another folder."""
    return library if Path(library).name == library else str(Path(library).absolute())


def _environment(folder: Path) -> dict[str, str]:
    # The child must find the same packages, this one among them, from its own folder.
    root = Path(__file__).absolute().parents[2]
    places = [str(root), *(str(Path(place).absolute()) for place in sys.path)]
    alone = {"OPENBLAS_NUM_THREADS": "1", "PYTHONDONTWRITEBYTECODE": "1", "PYTHONWARNINGS": "ignore"}
    return {**clean_environment(folder), **alone, "PYTHONPATH": os.pathsep.join(dict.fromkeys(places))}


def _judged(answer: dict[str, Any], expected: Expected, title: str) -> Curves:
    log = str(answer["log"])
    if telling_line(log) is not None:
        raise failure("the ngspice library gave results that must not be trusted", log)
    plots, curves = [], []
    for described in answer["plots"]:
        plot, found = _plot_and_curves(described)
        plots.append(plot)
        curves += found
    fault = fault_of(plots, expected) if plots else "are missing"
    if fault is not None:
        raise failure(f"the ngspice library reported success, but its results {fault}", log)
    return Curves("ngspice-library", tuple(curves), title.lstrip("* "))


def _plot_and_curves(described: dict[str, Any]) -> tuple[Plot, list[Curve]]:
    # The library lists vectors newest first; files hold the axis first.
    content = [
        (_file_name(name, kind), kind, values)
        for (name, kind), values in zip(described["vectors"], described["values"], strict=True)
    ][::-1]
    names = [name for name, _, _ in content]
    plotname, analysis = _PLOTS.get(described["name"].rstrip("0123456789"), (described["name"], "other"))
    if analysis == "noise" and "frequency" not in names:
        plotname, analysis = NOISE_TOTALS, "other"
    content.sort(key=lambda vector: vector[0] not in ("frequency", "time"))
    arrays = [values for _, _, values in content]
    plot = _facts(plotname, [name for name, _, _ in content], arrays)
    has_axis = bool(content) and content[0][0] in ("frequency", "time")
    axis = np.ascontiguousarray(arrays[0].real) if has_axis else np.zeros(plot.points)
    curves = [
        Curve(name, analysis, axis, values, _UNITS.get(kind, "")) for name, kind, values in content[has_axis:]
    ]
    return plot, curves


def _facts(plotname: str, names: Sequence[str], arrays: Sequence[Any]) -> Plot:
    lengths = {len(array) for array in arrays}
    if len(lengths) != 1:
        return Plot(plotname, tuple(names), 0, finite=False, rising=False)
    table = np.stack([np.stack([array.real, array.imag], axis=-1) for array in arrays], axis=1)
    return plot_of(plotname, names, table)


def _file_name(name: str, kind: str) -> str:
    """A vector's name in memory as raw files write it: `out` is `v(out)`, `v1#branch` is `i(v1)`."""
    lower = name.lower()
    if lower.endswith("#branch"):
        return f"i({lower.removesuffix('#branch')})"
    if kind in ("voltage", "current") and "(" not in lower and not lower.endswith("_spectrum"):
        return f"{'v' if kind == 'voltage' else 'i'}({lower})"
    return lower
