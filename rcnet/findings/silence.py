"""Silencing: findings that somebody does not want to be told."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator
from dataclasses import replace
from functools import cache
from itertools import islice

from ..circuit import Circuit, Place, Silence
from ..errors import InputError
from .finding import Finding, Remark, all_rules, rule

# These protect a reader from the file itself, so only the reader may silence them.
UNSILENCEABLE_BY_FILE = frozenset(
    {"seal-broken", "sealed-despite-errors", "commands-dropped", "hidden-command"}
)
_MOST_UNKNOWN = 50  # a stranger's file may name thousands, and looking for the nearest rule is slow
_LISTED = "`rcnet check --rules` lists the rules."


class Silences:
    """What a circuit silences, looked up by finding."""

    def __init__(self, circuit: Circuit) -> None:
        self._by: dict[tuple[str, int | None], list[Silence]] = {}
        for silence in circuit.silenced:
            if silence.trusted or silence.code not in UNSILENCEABLE_BY_FILE:
                self._by.setdefault((silence.code, silence.line), []).append(silence)

    def of(self, finding: Finding) -> tuple[Silence, ...]:
        """Those that silence a finding: they name its code, and its file and line or the whole circuit."""
        whole = self._by.get((finding.code, None), ())
        if finding.line is None:
            return tuple(whole)
        here = self._by.get((finding.code, finding.line), ())
        return (*whole, *(silence for silence in here if silence.file in (None, finding.file)))


def sifted(circuit: Circuit, several: Iterable[Finding]) -> tuple[tuple[Finding, ...], tuple[Finding, ...]]:
    """The findings that are told, and those that the circuit silences."""
    silences = Silences(circuit)
    told: list[Finding] = []
    silenced: list[Finding] = []
    for finding in several:
        (silenced if silences.of(finding) else told).append(finding)
    return tuple(told), tuple(silenced)


def with_silence(circuit: Circuit, codes: Iterable[str]) -> Circuit:
    """The circuit with findings of these codes silenced by its reader, not by its file.

    Raises InputError for a code that no rule has.
    """
    added = tuple(Silence(code, trusted=True) for code in codes)
    for silence in added:
        if (message := unknown_code(silence.code)) is not None:
            raise InputError(message, remedy=_LISTED)
    return replace(circuit, silenced=circuit.silenced + added) if added else circuit


def unknown_code(code: str) -> str | None:
    """Why a code is not that of a rule, a sentence that names the nearest one; None where it is one."""
    codes = [each.code for each in all_rules()]
    if code in codes:
        return None
    near = difflib.get_close_matches(code[:40], codes, n=1)
    short = code if len(code) <= 40 else f"{code[:40]}..."
    return f"No rule is called {short!r}" + (f"; did you mean {near[0]!r}?" if near else ".")


@rule("unknown-silence", "warning")
def unknown_silence(circuit: Circuit) -> Iterator[Remark]:
    """A rule that is to be silenced and does not exist, often a slip of the pen: nothing is silenced."""
    why = cache(unknown_code)
    known = {each.code for each in all_rules()}
    unknown = (silence for silence in circuit.silenced if silence.code not in known)
    for silence in islice(unknown, _MOST_UNKNOWN):
        place = silence.place or Place(silence.file or circuit.file or circuit.name, silence.line)
        yield Remark(why(silence.code) or "", _LISTED, place)
