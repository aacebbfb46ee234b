"""What came of the main job, as one record."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from .check import Check
from .compare import Comparison
from .netlist import Written
from .opinion import Opinion


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

    def verdict(self, *, strict: bool = False) -> Literal["passes", "fails", "undecided"]:
        """Of all that was done: `passes` where every claim holds and the second opinion, if any, agrees."""
        agrees = self.comparison is None or self.comparison.verdict == "agree"
        if self.written is None or not agrees or (strict and self.check.warnings):
            return "fails"
        words: dict[str, Literal["passes", "fails", "undecided"]] = {
            "holds": "passes",
            "fails": "fails",
            "undecided": "undecided",
        }
        return words[self.check.verdict]

    def passes(self, *, strict: bool = False) -> bool:
        """True if the circuit checks out and the second opinion agrees (or none was wanted)."""
        return self.verdict(strict=strict) == "passes"
