"""The example netlists of the ngspice manual, as Debian's package `ngspice-doc` installs it."""

from __future__ import annotations

import html
import re
from dataclasses import dataclass
from pathlib import Path

MANUAL = Path("/usr/share/doc/ngspice-doc/html/manual.html")

_LISTING = re.compile(r"<pre[^>]*>(.*?)</pre>", re.DOTALL)
_TAG = re.compile(r"<[^>]+>")
_CONTINUED = re.compile(r"(?=.*\bcontinue).{0,60}", re.IGNORECASE)
_PRINTED = str.maketrans("‘’“”–—−\N{NO-BREAK SPACE}", "''\"\"--- ")
_PART = re.compile(r"[ \t]*[a-z]\w*[ \t]+\S+[ \t]+\S+", re.IGNORECASE)
_ASKED = re.compile(r"[ \t]*\.(?:ac|dc|end|noise|op|tf|tran)\b", re.IGNORECASE)
# Of a `.control` section, the commands that are analyses of a kind that is compared.
_COMMAND = re.compile(r"[ \t]*((?:ac|op|tran)\b.*)", re.IGNORECASE)
_ANALYSIS = re.compile(
    r"[ \t]*\.(?:ac|dc|disto|four|meas\w*|noise|op|plot|print|probe|pz|save|sens|tf|tran)\b", re.IGNORECASE
)
# Files that a device would write, and commands hidden in comments.
_REACHES = re.compile(r".*\brootfile\b|[ \t]*(?:\*#|\*ng_script|\.?(?:write|wrdata|shell)\b)", re.IGNORECASE)


@dataclass(frozen=True)
class Example:
    """A netlist of the manual: its text, and the line of the page where it begins."""

    line: int
    text: str

    @property
    def title(self) -> str:
        """The first line that says something, without stars."""
        return next(line for line in self.text.split("\n") if line.strip()).strip("* \t")

    @property
    def name(self) -> str:
        """Title and place."""
        return f"{self.title} (line {self.line})"

    def deck(self, *cards: str) -> str:
        """The parts, models and options, then these cards; no commands, and nothing that writes files."""
        lines = [line for line in split(self.text)[0] if not _dropped(line)]
        return "\n".join([*lines, *cards, ".end", ""])

    def asked(self, word: str) -> str | None:
        """The first analysis of a kind (`ac`, `tran`), be it a line or a command; None for none."""
        body, commands = split(self.text)
        for line in [*body, *(f".{found[1]}" for each in commands if (found := _COMMAND.match(each)))]:
            if re.match(rf"[ \t]*\.{word}\b", line, re.IGNORECASE):
                return line.partition("$")[0].strip()
        return None


def examples(page: str) -> list[Example]:
    """Every complete netlist of the manual: a listing with parts, and an analysis or an `.end`."""
    return [each for each in _listings(page) if _complete(each.text)]


def split(text: str) -> tuple[list[str], list[str]]:
    """The lines outside `.control` sections, and those inside; the words that fence them are in neither."""
    body: list[str] = []
    commands: list[str] = []
    inside = False
    for line in text.split("\n"):
        word = line.split()[0].lower() if line.split() else ""
        if word in (".control", ".endc"):
            inside = word == ".control"
        else:
            (commands if inside else body).append(line)
    return body, commands


def _listings(page: str) -> list[Example]:
    """Every listing; one that goes on in the next, as the words between them say, is joined to it."""
    found: list[Example] = []
    end, line = 0, 1
    for match in _LISTING.finditer(page):
        text = html.unescape(_TAG.sub("", match[1])).translate(_PRINTED)
        between = html.unescape(_TAG.sub("", page[end : match.start()])).strip()
        if found and _CONTINUED.fullmatch(between):
            found[-1] = Example(found[-1].line, f"{found[-1].text}\n{text}")
        else:
            found.append(Example(line + page.count("\n", end, match.start()), text))
        line, end = line + page.count("\n", end, match.end()), match.end()
    return found


def _complete(text: str) -> bool:
    body, commands = split(text)
    asked = any(map(_ASKED.match, body)) or any(map(_COMMAND.match, commands))
    return asked and any(map(_PART.match, body[1:]))


def _dropped(line: str) -> bool:
    return bool(_ANALYSIS.match(line) or _REACHES.match(line)) or line.strip().lower() == ".end"
