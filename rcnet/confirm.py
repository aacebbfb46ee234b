"""The main job: one circuit checked, written, given to another solver, and compared."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from .check import Check, check
from .circuit import Circuit
from .compare import Grant, compare
from .confirmation import Confirmation
from .curves import Curves, write_csv
from .handover import sealed_netlist, with_analyses
from .loading import load
from .netlist import Written
from .opinion import LibraryRunner, Opinion, RunFailed, Which, ask
from .system.files import make_folder, remove_file, write_file

__all__ = ["RESULT_FILES", "Confirmation", "confirm", "forget", "load", "simulate"]

RESULT_FILES = (
    "netlist.cir",
    "results.raw",
    "simulator.log",
    "read-back.csv",
    "comparison.json",
    "report.html",
)


def confirm(
    circuit: Circuit,
    folder: Path | None,
    *,
    which: Which = "auto",
    timeout: float = 60.0,
    anyway: bool = False,
    runner: LibraryRunner | None = None,
    grant: Grant | None = None,
) -> Confirmation:
    """Check a circuit, write its netlist, get a second opinion, compare; keep the files in `folder`.

    grant: how far the second opinion may lie off beyond what is predicted
    Files of an earlier run that this one does not write again are removed, so that a folder never tells two
    stories. Raises RcnetError: UnsolvableError, SimulatorError (netlist and log are kept), OutputError.
    """
    whole = with_analyses(circuit)
    with _kept_in(folder) as kept:
        done, written = _checked_and_written(whole, kept, anyway=anyway)
        if written is None:
            return Confirmation(done, None, None, None, None)
        opinion = _asked(written, kept, which, timeout, runner)
        comparison = None
        if opinion is not None:
            from .report.document import comparison_document, to_json

            comparison = compare(
                whole,
                opinion.curves,
                written.names,
                opinion.who,
                may_be_empty=True,
                grant=grant or Grant(),
            )
            kept.keep("comparison.json", to_json(comparison_document(comparison)))
        return Confirmation(done, written, opinion, comparison, kept.path, tuple(kept.names))


def simulate(
    circuit: Circuit, folder: Path, *, which: Which, timeout: float = 60.0, anyway: bool = False
) -> Confirmation:
    """Check a circuit, write its netlist, have a simulator run it, keep its results; nothing is compared.

    Raises as `confirm` does.
    """
    whole = with_analyses(circuit)
    with _kept_in(folder) as kept:
        done, written = _checked_and_written(whole, kept, anyway=anyway)
        if written is None:
            return Confirmation(done, None, None, None, None)
        opinion = _asked(written, kept, which, timeout, None)
        return Confirmation(done, written, opinion, None, kept.path, tuple(kept.names))


def forget(folder: Path) -> None:
    """Remove what an earlier run left in a results folder, if there is one."""
    if folder.is_dir():
        for name in RESULT_FILES:
            remove_file(folder / name)


def _checked_and_written(whole: Circuit, kept: _Folder, *, anyway: bool) -> tuple[Check, Written | None]:
    """What was found, and the netlist, kept; None for it where errors forbid it."""
    done = check(whole)
    if done.errors and not anyway:
        return done, None
    written = sealed_netlist(whole, done, anyway=anyway)
    kept.keep("netlist.cir", written.text)
    return done, written


def _asked(
    written: Written, kept: _Folder, which: Which, timeout: float, runner: LibraryRunner | None
) -> Opinion | None:
    """The second opinion, its results and its log kept; the log also where the run failed."""
    try:
        opinion = ask(written, which, timeout=timeout, runner=runner)
    except RunFailed as exc:
        kept.keep("simulator.log", exc.log)
        raise
    if opinion is None:
        return None
    if opinion.raw is not None:
        kept.keep("results.raw", opinion.raw)
        kept.keep("simulator.log", opinion.log)
    elif ac := opinion.curves.of("ac"):
        kept.keep("read-back.csv", write_csv(Curves(opinion.curves.source, ac)))
    return opinion


@contextmanager
def _kept_in(path: Path | None) -> Iterator[_Folder]:
    """A results folder for one run; whatever ends the run, nothing of an earlier one is left in it."""
    kept = _Folder(path)
    try:
        yield kept
    finally:
        kept.close()


class _Folder:
    """The files of one run, each written whole; the folder is made when the first is."""

    def __init__(self, path: Path | None) -> None:
        self.path = path
        self.names: list[str] = []
        if path is not None and path.is_dir():
            # The verdict of an earlier run must not stand beside a netlist that it is not about.
            remove_file(path / "comparison.json")

    def keep(self, name: str, data: str | bytes) -> None:
        if self.path is not None:
            make_folder(self.path)
            write_file(self.path / name, data)
            self.names.append(name)

    def close(self) -> None:
        if self.path is not None and self.path.is_dir():
            for name in RESULT_FILES:
                if name not in self.names:
                    remove_file(self.path / name)
