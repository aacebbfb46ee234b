"""One netlist from its file and the files it includes: where they may lie, and what is left out of them."""

from __future__ import annotations

import os
import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path

from ..circuit import Place, Seen, Silence
from ..errors import CircuitError, InputError, Problem, RcnetError
from ..system.files import read_bytes
from .limits import Reading
from .lines import Line, physical_lines
from .refusals import unseen_character
from .runs import Run, lines_and_runs

KEPT_PROBLEMS = 1000  # of more than these only the number is kept
# ngspice 39 obeys these even in the line that is the title.
_COMMAND_TITLE = re.compile(r"\s*(\*#|\*ng_script|\.control|\.inc|\.lib)", re.IGNORECASE)
# Commands of ngspice that reach beyond the simulation: other programs (`jobs` and the two that end in spice
# start simulators elsewhere), other files, native code. See its manual, "Interactive Interpreter".
_REACHING = re.compile(
    r"^\s*(?:\*#\s*)?(?:shell|system|codemodel|pre_\w+|use|cd|chdir|source|load|write\w*|wr\w+|hardcopy|snsave|snload|"
    r"set\s+\w*(?:path|dir|shell|unixcom|editor)\w*|osdi|edit|alias|[ar]spice|jobs)\b"
    r"|^\s*!|[>`|]",
    re.IGNORECASE,
)
_SILENCE = re.compile(r"rcnet:\s*silence\b[\s:=]*([\w ,-]*)", re.IGNORECASE)
_SECTION_WORDS = (".control", ".endc", ".include", ".inc", ".lib", ".endl", ".end")


@dataclass(slots=True)
class Gathered:
    """A netlist's lines in the order a simulator would read them, and what was noticed on the way.

    files: their names; texts: their physical lines; items: logical lines, and runs of plain ones
    """

    files: list[str] = field(default_factory=list)
    texts: list[list[str]] = field(default_factory=list)
    items: list[Line | Run] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)
    more_problems: int = 0
    blamed: set[tuple[int, int, str]] = field(default_factory=set)  # definitions already told to be wrong
    seen: list[Seen] = field(default_factory=list)
    silenced: list[Silence] = field(default_factory=list)

    def place(self, line: Line) -> Place:
        """Where a logical line stands."""
        return Place(self.files[line.file], line.number, self.texts[line.file][line.number - 1])

    @property
    def full(self) -> bool:
        """True where nobody will read more problems than there are: no care is spent on further ones."""
        return len(self.problems) >= KEPT_PROBLEMS

    def notice(self, code: str, line: Line, message: str, remedy: str, word: str = "") -> None:
        """Keep something for the rule of that code."""
        self.seen.append(Seen(code, message, remedy, self.place(line).at(word)))

    def complain(self, error: RcnetError, line: Line) -> None:
        """Keep what makes a line unreadable, with its place."""
        if isinstance(error, DefinitionError):
            line = error.definition
            if (blame := (line.file, line.number, error.message)) in self.blamed:
                return
            self.blamed.add(blame)
        place = self.place(line)
        for problem in error.at(place.file, place.line).problems:
            here = problem.line == place.line and problem.file == place.file and not problem.text
            self.keep(_pointed(problem, place) if here and not self.full else problem)

    def keep(self, problem: Problem) -> None:
        """Keep a problem that has its place."""
        if self.full:
            self.more_problems += 1
        else:
            self.problems.append(problem)


class DefinitionError(CircuitError):
    """A parameter cannot be computed; the mistake is where it is defined, not where it is used.

    definition: the line of its definition
    """

    definition: Line = Line(1, "")

    @classmethod
    def at_line(cls, error: RcnetError, definition: Line) -> DefinitionError:
        """The error, blamed on a definition."""
        blamed = cls(problems=error.problems)
        blamed.definition = definition
        return blamed


def _pointed(problem: Problem, place: Place) -> Problem:
    """The problem with its line shown, pointing at the first quoted word of the message that stands there."""
    for quoted in re.findall(r"'([^']+)'", problem.message):
        found = place.at(quoted)
        if found.column is not None:
            return replace(problem, text=place.text, column=found.column, width=found.width)
    return replace(problem, text=place.text)


def decoded(path: str, limit: int) -> tuple[str, int | None]:
    """A netlist file as text, and the first line that is not UTF-8 (then it is taken for Latin-1).

    Old netlists hold a micro or degree sign in one byte, mostly in comments. Raises InputError for anything
    that is no text.
    """
    data = read_bytes(path, limit)
    if b"\0" in data:
        line = data.count(b"\n", 0, data.index(b"\0")) + 1
        raise InputError(
            "the file holds a NUL byte, so it is not text.",
            file=path,
            line=line,
            remedy="Save it as UTF-8 text.",
            code="encoding",
        )
    try:
        return data.decode("utf-8-sig"), None
    except UnicodeDecodeError as exc:
        return data.decode("latin-1"), data.count(b"\n", 0, exc.start) + 1


def gather(
    text: str, file: str, reading: Reading, folder: Path | None, odd_line: int | None = None
) -> Gathered:
    """Everything a netlist holds.

    folder: where it lies, for what it includes; None where it is only text
    odd_line: the first line that is not UTF-8, where there is one
    """
    reader = _Gatherer(reading, folder)
    reader.bytes = len(text)
    lines = physical_lines(text)
    reader.add_file(file, lines, odd_line)
    reader.title()
    stack = ((os.path.realpath(file), "") if folder is not None else ("", ""),)
    reader.read(lines_and_runs(lines, title=True, file=0), folder, stack)
    return reader.found


Stack = tuple[tuple[str, str], ...]


class _Gatherer:
    def __init__(self, reading: Reading, folder: Path | None) -> None:
        self.reading = reading
        self.main_folder = folder
        self.found = Gathered()
        self.bytes = 0
        self.ended = False  # the main file's `.end` has been seen
        self.roots = [
            os.path.realpath(root)
            for root in ((folder,) if folder is not None else ()) + tuple(reading.allow)
        ]

    # -- files

    def add_file(self, name: str, lines: list[str], odd_line: int | None) -> int:
        found = self.found
        found.files.append(name)
        found.texts.append(lines)
        index = len(found.files) - 1
        self._look_at_text(name, lines, odd_line)
        return index

    def _look_at_text(self, name: str, lines: list[str], odd_line: int | None) -> None:
        found, longest = self.found, self.reading.limits.line
        if odd_line is not None:
            place = Place(name, odd_line, lines[odd_line - 1] if odd_line <= len(lines) else "")
            message = "the file is not UTF-8; it is read as Latin-1."
            found.seen.append(Seen("encoding", message, "Save it as UTF-8 text.", place))
        for number, line in enumerate(lines, start=1):
            if len(line) > longest:
                found.keep(
                    Problem(
                        f"the line has {len(line)} characters; at most {longest} are read.",
                        name,
                        number,
                        "Break it up with + lines, or raise the limit with --limit line=NUMBER.",
                        "limit",
                    )
                )
            if "\r" in line:
                message = "a carriage return stands alone; ngspice does not end a line there."
                remedy = "Save the file with LF or CRLF line ends."
                found.keep(Problem(message, name, number, remedy, "unreadable"))
            if "rcnet:" in line:
                self._silence(name, number, lines)

    def _silence(self, name: str, number: int, lines: list[str]) -> None:
        line = lines[number - 1]
        match = _SILENCE.search(line)
        if match is None:
            return
        alone = line.lstrip()[:1] in ("*", ";", "$") or line.lstrip()[:2] == "//"
        if not alone and not re.search(r";|//|\$", line[: match.start()]):
            return
        place = Place(name, number, line)
        # A finding names the first of several lines that continue one another.
        while not alone and number > 1 and lines[number - 1].lstrip()[:1] == "+":
            number -= 1
            while number > 1 and lines[number - 1].strip()[:1] in ("", "*"):
                number -= 1
        for code in re.findall(r"[\w-]+", match[1]):
            silence = Silence(code.lower(), place=place.at(code))
            self.found.silenced.append(silence if alone else replace(silence, file=name, line=number))

    def title(self) -> None:
        lines = self.found.texts[0]
        if match := _COMMAND_TITLE.match(lines[0]):
            message = f"the title begins with {match[1]!r}, which is a command to ngspice."
            file = self.found.files[0]
            remedy = "Give the netlist a title of plain words."
            self.found.problems.append(Problem(message, file, 1, remedy, "hidden-command", lines[0]))

    # -- lines

    def read(self, items: Iterable[Line | Run], folder: Path | None, stack: Stack) -> None:
        """Take lines over, follow what they include, leave commands and library sections out."""
        source = iter(items)
        after_end: Line | None = None
        for item in source:
            if isinstance(item, Run):
                self.found.items.append(item)
                if after_end is not None:
                    self._behind_end(after_end, next(item.lines()), stack)
                    after_end = None
                continue
            word = item.text.split(" ", 1)[0].lower() if item.text[0] == "." else ""
            # ngspice 39 looks at no more than these letters (measured).
            word = next((each for each in (".control", ".endc") if word.startswith(each)), word)
            if word in _SECTION_WORDS:
                try:
                    self.section(word, item, source, folder, stack)
                except RcnetError as exc:
                    self.found.complain(exc, item)
                if word == ".end" and after_end is None:
                    after_end = item
            elif item.text[0] == "*":
                self._hidden(item)
            else:
                self.found.items.append(item)
                if after_end is not None:
                    self._behind_end(after_end, item, stack)
                    after_end = None

    def _behind_end(self, end: Line, line: Line, stack: Stack) -> None:
        message = (
            f"this line stands behind the .end of line {end.number}, where nothing ends: ngspice reads on."
        )
        remedy = "Move it above .end, or make it a comment."
        self.found.notice("text-behind-end" if len(stack) == 1 else "include-end", line, message, remedy)

    def _hidden(self, line: Line) -> None:
        command = line.text.split()[0]
        self.found.notice(
            "hidden-command",
            line,
            f"{command[:40]!r} is a command to ngspice, hidden in a comment; it was left out.",
            "Remove the line; rcnet executes nothing and passes no command on.",
        )

    def section(
        self, word: str, line: Line, source: Iterator[Line | Run], folder: Path | None, stack: Stack
    ) -> None:
        if word == ".control":
            self.commands(line, source)
        elif not line.text.isprintable():
            raise unseen_character(line.text)
        elif word in (".include", ".inc"):
            self.include(line, folder, stack)
        elif word == ".lib":
            self.library(line, source, folder, stack)
        elif word in (".endc", ".endl"):
            raise CircuitError(f"{word} closes nothing.", remedy="Remove it.", code="unreadable")

    def commands(self, line: Line, source: Iterator[Line | Run]) -> None:
        """Leave a `.control` section out, and say what was in it."""
        commands: list[Line] = []
        for item in source:
            inside = list(item.lines()) if isinstance(item, Run) else [item]
            if inside[0].text[:5].lower() == ".endc":
                break
            commands += inside
        reaching = next((each for each in commands if _REACHING.search(each.text)), None)
        place = self.found.place(line)
        if reaching is None:
            first = [word[:20].lower() for each in commands[:8] for word in each.text.split()[:1]]
            named = ", ".join(word for word in dict.fromkeys(first) if word.isprintable()) or "nothing"
            message = f"the commands of this .control section ({named}) were left out."
            remedy = "Ask for analyses with .ac, .tran, .op and .noise lines; rcnet executes nothing."
            self.found.seen.append(Seen("commands-dropped", message, remedy, place))
            return
        message = (
            f"this .control section would have a simulator do {reaching.text[:50]!r} "
            f"(line {reaching.number}); it was left out."
        )
        remedy = "Remove the section, and ask whoever wrote it what it is for."
        self.found.seen.append(Seen("commands-dropped", message, remedy, place, "error"))

    # -- includes

    def include(self, line: Line, folder: Path | None, stack: Stack) -> None:
        words = _quoted_words(line.text)
        if len(words) != 2:
            raise CircuitError(
                ".include names no single file.",
                remedy='Write .include "file.inc"; quote a name with blanks.',
                code="include-missing",
            )
        path = self.path_of(words[1], line, folder)
        self.require_new(path, "", stack)
        index, lines = self.text_of(path, words[1])
        inside = lines_and_runs(lines, title=False, file=index)
        self.read(inside, Path(path).parent, (*stack, (path, "")))

    def library(self, line: Line, source: Iterator[Line | Run], folder: Path | None, stack: Stack) -> None:
        words = _quoted_words(line.text)
        if len(words) == 2:
            # Perhaps a section's own beginning, in a file that is not read as a library.
            for item in source:
                if isinstance(item, Line) and item.text.split(" ", 1)[0].lower() == ".endl":
                    break
            raise CircuitError(
                f".lib {words[1]!r} names no section.",
                remedy=f'Write .lib "{words[1]}" SECTION, or .include "{words[1]}".',
                code="section-missing",
            )
        if len(words) != 3:
            raise CircuitError(
                ".lib cannot be read.", remedy='Write .lib "file.lib" SECTION.', code="section-missing"
            )
        path, section = self.path_of(words[1], line, folder), words[2].lower()
        self.require_new(path, section, stack)
        index, lines = self.text_of(path, words[1])
        inside = _of_section(lines_and_runs(lines, title=False, file=index), section)
        if inside is None:
            raise CircuitError(
                f"the library {words[1]!r} has no section {words[2]!r}.",
                remedy="Check the name of the section.",
                code="section-missing",
            )
        self.read(inside, Path(path).parent, (*stack, (path, section)))

    def require_new(self, path: str, section: str, stack: Stack) -> None:
        if (path, section) in stack or (not section and any(path == each for each, _ in stack)):
            raise CircuitError(
                f"{Path(path).name!r} includes itself.",
                remedy="Take the circle out.",
                code="include-recursion",
            )
        if len(stack) > self.reading.limits.nesting:
            raise CircuitError(
                f"files include one another more than {self.reading.limits.nesting} deep.",
                remedy="Flatten them, or raise the limit with --limit nesting=NUMBER.",
                code="limit",
            )

    def path_of(self, name: str, line: Line, folder: Path | None) -> str:
        """The real path of an included file, found as ngspice finds it, and known to lie where it may."""
        if folder is None or self.main_folder is None:
            raise CircuitError(
                f"{name!r} cannot be included: this netlist is text and lies in no folder.",
                remedy="Save it as a file, or copy the parts in.",
                code="include-outside",
            )
        tried = dict.fromkeys(os.path.realpath(base / name) for base in (self.main_folder, folder))
        there = [path for path in tried if self.allowed(path) and os.path.lexists(path)]
        if not there:
            if not any(self.allowed(path) for path in tried):
                raise CircuitError(
                    f"{name!r} lies outside the netlist's own folder.",
                    remedy="Copy it there, or grant its folder with --allow DIR.",
                    code="include-outside",
                )
            raise CircuitError(
                f"there is no file {name!r} to include.",
                remedy="Check the name; it is looked for beside the netlist and beside the including file.",
                code="include-missing",
            )
        if len(there) > 1:
            self.found.notice(
                "include-ambiguous",
                line,
                f"{name!r} is there twice, beside the netlist and beside what includes it; the first counts.",
                "Give the two different names; ngspice takes the one in the folder it is started in.",
                name,
            )
        return there[0]

    def allowed(self, path: str) -> bool:
        return any(path == root or path.startswith(root.rstrip(os.sep) + os.sep) for root in self.roots)

    def text_of(self, path: str, name: str) -> tuple[int, list[str]]:
        limits = self.reading.limits
        if len(self.found.files) >= limits.files:
            raise CircuitError(
                f"more than {limits.files} files are included.",
                remedy="Join them, or raise the limit with --limit files=NUMBER.",
                code="limit",
            )
        try:
            text, odd_line = decoded(path, max(limits.bytes - self.bytes, 0))
        except InputError as exc:
            first = exc.problems[0]
            where = "" if first.line is None else f", line {first.line}"
            raise CircuitError(
                f"the included file {name!r}{where}: {first.message}",
                remedy=first.remedy,
                code="include-missing",
            ) from exc
        self.bytes += len(text)
        lines = physical_lines(text)
        return self.add_file(self.shown(path), lines, odd_line), lines

    def shown(self, path: str) -> str:
        """An included file's name as a person would write it: as the netlist's own is written."""
        assert self.main_folder is not None
        real = os.path.realpath(self.main_folder)
        if path.startswith(real + os.sep):
            return str(self.main_folder / os.path.relpath(path, real))
        return path


def _quoted_words(text: str) -> list[str]:
    found = re.findall(r"\"([^\"]*)\"|'([^']*)'|(\S+)", text)
    return [double or single or bare for double, single, bare in found]


def _of_section(items: Iterator[Line | Run], section: str) -> list[Line | Run] | None:
    """What stands between `.lib section` and its `.endl`; None where there is no such section."""
    inside: list[Line | Run] | None = None
    for item in items:
        words = (item.text.split() if isinstance(item, Line) else []) or [""]
        word = words[0].lower()
        if inside is None:
            if word == ".lib" and len(words) == 2 and words[1].lower().strip("'\"") == section:
                inside = []
        elif word == ".endl":
            return inside
        else:
            inside.append(item)
    if inside is not None:
        raise CircuitError(
            f"the section {section!r} of the library is never closed.",
            remedy="Add .endl behind its last line.",
            code="section-missing",
        )
    return None
