"""Asking another solver about a written netlist: ngspice as a program, as a library, or the read-back."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Literal

from ..curves import Curves, write_raw
from ..curves.raw import parse_raw
from ..errors import SimulatorError
from ..netlist import Written, deck, frequencies, requested
from ..netlist.writer import AnalysisName
from .ngspice import Expected, find_ngspice, install_hint, joined_raw, run_deck
from .ngspice_library import LibraryRunner
from .read_back import SOURCE, read_back
from .sharpening import sharpened

Which = Literal["auto", "ngspice", "ngspice-library", "read-back", "none"]
CHOICES: tuple[Which, ...] = ("auto", "ngspice", "ngspice-library", "read-back", "none")

_PLOTNAMES: dict[AnalysisName, str] = {
    "ac": "AC Analysis",
    "operating point": "Operating Point",
    "transient": "Transient Analysis",
    "noise": "Noise Spectral Density Curves",
}


@dataclass(frozen=True)
class Opinion:
    """What another solver says.

    who: `ngspice-39`, `ngspice-39 library` or `read-back`; raw: a Berkeley raw file, None for the read-back
    log: what the simulator said; seconds: how long it took
    """

    who: str
    curves: Curves
    raw: bytes | None
    log: str
    seconds: float


def ask(
    written: Written, which: Which = "auto", *, timeout: float = 60.0, runner: LibraryRunner | None = None
) -> Opinion | None:
    """A second opinion about a written netlist; None for `none`.

    auto: ngspice where it is installed, else the read-back. runner: a warm library to use for
    `ngspice-library`. Raises SimulatorError where the one demanded is missing or fails.
    """
    if which == "none":
        return None
    program = find_ngspice() if which in ("auto", "ngspice") else None
    if which == "ngspice" and program is None:
        raise SimulatorError(
            "ngspice is not installed here (not on PATH, and RCNET_NGSPICE is not set).",
            remedy=install_hint(),
        )
    if which == "ngspice-library":
        return _library(written, timeout, runner)
    return _read_back(written) if program is None else _program(written, program, timeout)


def _read_back(written: Written) -> Opinion:
    start = time.perf_counter()
    curves = read_back(written.text, written.circuit.file or written.circuit.name)
    return Opinion(SOURCE, curves, None, "", time.perf_counter() - start)


def _program(written: Written, program: str, timeout: float) -> Opinion:
    """One analysis a run: several in one deck come out in another order, or spoil each other."""
    runs, log = [], []
    for name in _analyses(written):
        run = run_deck(
            _deck(written, name),
            _expected(written, name),
            executable=program,
            timeout=timeout,
        )
        runs.append(run)
        log.append(f"---- {name} ----\n{run.log.rstrip()}\n")
    raw = joined_raw(runs)
    curves = parse_raw(raw, "results.raw")
    return Opinion(runs[0].version, curves, raw, "\n".join(log), sum(run.seconds for run in runs))


def _library(written: Written, timeout: float, runner: LibraryRunner | None) -> Opinion:
    if runner is None:
        with LibraryRunner() as own:
            return _library(written, timeout, own)
    start = time.perf_counter()
    answers: list[Curves] = []
    log: list[str] = []
    for name in _analyses(written):
        curves, said = runner.run(_deck(written, name), _expected(written, name), timeout)
        answers.append(curves)
        log.append(f"---- {name} ----\n{said.rstrip()}\n")
    joined = Curves.joined("results.raw", answers)
    who = f"{runner.version} library"
    raw = write_raw(joined, title=written.circuit.title or written.circuit.name)
    return Opinion(who, joined, raw, "\n".join(log), time.perf_counter() - start)


def _deck(written: Written, name: AnalysisName) -> str:
    circuit = sharpened(written.circuit) if name == "transient" else written.circuit
    return deck(circuit, written.names, name)


def _analyses(written: Written) -> list[AnalysisName]:
    names = requested(written.circuit)
    if not names:
        raise SimulatorError(
            "the circuit asks for no analysis, so a simulator has nothing to do.",
            remedy="Add an [analysis] table, or give one source ac = 1.",
        )
    return names


def _expected(written: Written, name: AnalysisName) -> Expected:
    circuit, names = written.circuit, written.names
    if name == "noise":
        return Expected(_PLOTNAMES[name], ("onoise_spectrum",))
    nodes = tuple(f"v({names.nodes[node].lower()})" for node in circuit.network.nodes[1:])
    points = len(frequencies(circuit.analyses.ac)) if name == "ac" and circuit.analyses.ac else None
    return Expected(_PLOTNAMES[name], nodes, 1 if name == "operating point" else points)
