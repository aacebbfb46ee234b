"""The main job: one circuit checked, written, given to another solver, and compared."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from .check import Check, check
from .circuit import SUFFIX, Circuit, load_circuit_file
from .compare import Comparison, compare
from .curves import write_csv
from .errors import RcnetError
from .handover import sealed_netlist, with_analyses
from .netlist import Written, read_netlist
from .opinion import LibraryRunner, Opinion, RunFailed, Which, ask
from .system.files import make_folder, remove_file, write_file


@dataclass(frozen=True)
class Confirmation:
    """What came of the main job.

    written: the sealed netlist, None where errors kept it from being written
    opinion, comparison: None where no second opinion was wanted or no netlist was written
    folder: where the files stand, None where nothing was written; files: their names
    """

    check: Check
    written: Written | None
    opinion: Opinion | None
    comparison: Comparison | None
    folder: Path | None
    files: tuple[str, ...] = ()

    def passes(self, *, strict: bool = False) -> bool:
        """True if the circuit checks out and the second opinion agrees (or none was wanted)."""
        agrees = self.comparison is None or self.comparison.verdict == "agree"
        return self.check.passes(strict=strict) and self.written is not None and agrees


def load(path: str | Path) -> Circuit:
    """Read a circuit file (`*.rc.toml`, or any `.toml`) or a SPICE netlist. Raises InputError or CircuitError."""
    name = str(path)
    return load_circuit_file(path) if name.endswith((SUFFIX, ".toml")) else read_netlist(path)


def confirm(
    circuit: Circuit,
    folder: Path | None,
    *,
    which: Which = "auto",
    timeout: float = 60.0,
    anyway: bool = False,
    runner: LibraryRunner | None = None,
) -> Confirmation:
    """Check a circuit, write its netlist, get a second opinion, compare; keep the files in `folder`.

    Files of an earlier run that this one does not write again are removed, so that a folder never tells two
    stories. Raises RcnetError: UnsolvableError, SimulatorError (the netlist and the log are kept), OutputError.
    """
    whole = with_analyses(circuit)
    done = check(whole)
    kept = _Folder(folder)
    if done.errors and not anyway:
        kept.close()
        return Confirmation(done, None, None, None, None)
    written = sealed_netlist(whole, done, anyway=anyway)
    kept.keep("netlist.cir", written.text)
    try:
        opinion = ask(written, which, timeout=timeout, runner=runner)
        comparison = None if opinion is None else _compared(whole, written, opinion)
    except RunFailed as exc:
        kept.keep("simulator.log", exc.log)
        kept.close()
        raise
    except RcnetError:
        kept.close()
        raise
    if opinion is not None:
        keep_results(kept, opinion)
    if comparison is not None:
        from .report.document import comparison_document, to_json

        kept.keep("comparison.json", to_json(comparison_document(comparison)))
    kept.close()
    return Confirmation(done, written, opinion, comparison, kept.path, tuple(kept.names))


def _compared(circuit: Circuit, written: Written, opinion: Opinion) -> Comparison:
    return compare(circuit, opinion.curves, written.names, opinion.who)


RESULT_FILES = ("netlist.cir", "results.raw", "simulator.log", "read-back.csv", "comparison.json", "report.html")


class _Folder:
    """The files of one run: each is written whole, and what an earlier run left over is removed at the end."""

    def __init__(self, path: Path | None) -> None:
        self.path = path
        self.names: list[str] = []
        if path is not None:
            make_folder(path)
            # The verdict of an earlier run must not stand beside a netlist that it is not about.
            remove_file(path / "comparison.json")

    def keep(self, name: str, data: str | bytes) -> None:
        if self.path is not None:
            write_file(self.path / name, data)
            self.names.append(name)

    def close(self) -> None:
        if self.path is not None:
            for name in RESULT_FILES:
                if name not in self.names:
                    remove_file(self.path / name)


def keep_results(kept: _Folder, opinion: Opinion) -> None:
    """The results and the log of a second opinion."""
    if opinion.raw is not None:
        kept.keep("results.raw", opinion.raw)
        kept.keep("simulator.log", opinion.log)
        return
    ac = opinion.curves.of("ac")
    if ac:
        kept.keep("read-back.csv", write_csv(type(opinion.curves)(opinion.curves.source, ac)))


def simulate(circuit: Circuit, folder: Path, *, which: Which, timeout: float, anyway: bool = False) -> Confirmation:
    """Write the netlist, have a simulator run it, keep its results; nothing is compared. Raises as `confirm`."""
    whole = with_analyses(circuit)
    done = check(whole)
    written = sealed_netlist(whole, done, anyway=anyway)
    kept = _Folder(folder)
    kept.keep("netlist.cir", written.text)
    try:
        opinion = ask(written, which, timeout=timeout)
    except RunFailed as exc:
        kept.keep("simulator.log", exc.log)
        kept.close()
        raise
    if opinion is not None:
        keep_results(kept, opinion)
    kept.close()
    return Confirmation(done, written, opinion, None, kept.path, tuple(kept.names))
