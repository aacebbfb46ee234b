"""The circuit file: a TOML text read into a Circuit, every mistake reported with its line."""

from __future__ import annotations

import bisect
import math
import re
import tomllib
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

from ..errors import CircuitError, Problem, RcnetError
from ..system.files import read_text
from ..values import Expression, parse_expression, parse_quantity
from .circuit import Analyses, Bound, Circuit, Claim, Conditions, Place, Silence, Sweep, TransientRun
from .drive import parse_drive
from .ladder import parse_part, parse_section
from .measure_table import MeasureSpec, check_band, measure_spec, parse_options
from .names import check_name, check_node
from .network import GROUND, Network
from .shown import nearest, shown
from .toml_lines import Path as KeyPath
from .toml_lines import line_table

SUFFIX = ".rc.toml"
MAX_FILE_BYTES = 16 * 1024 * 1024
MAX_PROBLEMS = 50
# Hz, stated in messages. Beyond them s or 1/s times a part value may leave the range of doubles.
LOWEST_FREQUENCY, HIGHEST_FREQUENCY = 1e-30, 1e30

# The library's reader takes time in the square of a key's dots.
_DEEP_KEY = re.compile(r"""(?<![\w-])(?:(?:[\w-]++|"[^"\n]*"|'[^'\n]*')[ \t]*+\.[ \t]*+){40}""")
_TOP = ("title", "output", "silence", "parts", "ladder", "sources", "analysis", "conditions", "claims")
_STRING = re.compile(r""" "([^"\\]*)" | '([^']*)' """, re.VERBOSE)
_SWEEP = ("from", "to", "per_decade")
_RUN = ("stop", "step", "start", "max_step")
_FORMS = ("equals", "at_least", "at_most", "between")
_CLAIM = ("says", "measure", "of", *_FORMS, "within", "hand", "over")


def load_circuit_file(path: str | Path) -> Circuit:
    """Read a circuit file. Raises InputError, or CircuitError carrying every mistake found."""
    return parse_circuit_file(read_text(path, MAX_FILE_BYTES), str(path))


def circuit_name(path: str | Path) -> str:
    """The file's name without its suffixes: `float-gauge.rc.toml` is `float-gauge`."""
    name = Path(path).name
    return name[: -len(SUFFIX)] if name.endswith(SUFFIX) and name != SUFFIX else Path(name).stem or name


def parse_circuit_file(text: str, file: str) -> Circuit:
    """A circuit file given as text, called `file` in messages. Raises CircuitError with every mistake."""
    if not text.strip():
        raise CircuitError(
            "the file is empty.", file=file, remedy="Copy a starter with `rcnet new` and edit it."
        )
    if deep := _DEEP_KEY.search(text):
        line = text.count("\n", 0, deep.start()) + 1
        raise CircuitError("a key has forty dots and more.", file=file, line=line, remedy="Shorten the key.")
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as exc:
        raise _syntax_error(exc, text, file) from exc
    except RecursionError as exc:
        raise CircuitError("the file nests too deeply.", file=file, remedy="Flatten it.") from exc
    except ValueError as exc:  # a number of thousands of digits
        raise CircuitError(f"a number cannot be read: {exc}.", file=file, remedy="Shorten it.") from exc
    return _Reader(table, text, file).circuit()


def _syntax_error(exc: tomllib.TOMLDecodeError, text: str, file: str) -> CircuitError:
    found = re.search(r"\(at line (\d+), column (\d+)\)", str(exc))
    line = int(found[1]) if found else len(text.rstrip().split("\n"))
    why = re.sub(r"\s*\(at .*\)$", "", str(exc))
    key, sign, _ = text.split("\n")[line - 1].partition("=")
    if why == "Cannot overwrite a value" and sign:
        return CircuitError(
            f"this is not valid TOML: the key {shown(key.strip())} stands here for the second time.",
            file=file,
            line=line,
            remedy="Mend this line: give it another name, or take it out.",
        )
    return CircuitError(
        f"this is not valid TOML: {why[:1].lower()}{why[1:]}.", file=file, line=line, remedy="Mend this line."
    )


class _Reader:
    """Reads one file's tables, collecting problems instead of stopping at the first."""

    def __init__(self, table: dict[str, Any], text: str, file: str) -> None:
        self.table, self.file = table, file
        self.source_lines = text.replace("\r\n", "\n").removesuffix("\n").split("\n")
        self.lines = line_table(text)
        self.begins = sorted(set(self.lines.values()))
        self.problems: list[Problem] = []
        title = table.get("title", "")
        self.network = Network(title if isinstance(title, str) else "")
        self.places: dict[str, Place] = {}
        self.analysis_places: dict[str, Place] = {}
        self.failed: set[str] = set()  # parts that could not be read: no follow-up complaints about them

    # -- places and problems

    def line(self, *path: str | int) -> int | None:
        """The line of a key, or of the nearest table around it."""
        for depth in range(len(path), -1, -1):
            if (line := self.lines.get(path[:depth])) is not None:
                return line if depth or not path else None
        return None

    def complain(self, path: KeyPath, message: str, remedy: str) -> None:
        self.problems.append(Problem(message, self.file, self.line(*path), remedy))

    @contextmanager
    def catching(self, *path: str | int, also: str | None = None) -> Iterator[None]:
        try:
            yield
        except RcnetError as exc:
            placed = exc.at(self.file, self.line(*path))
            self.problems.extend(placed.problems)
            if also is not None:
                self.failed.add(also)

    def known(self, table: Mapping[str, Any], allowed: Iterable[str], *path: str | int) -> None:
        allowed = tuple(allowed)
        for key in table:
            if key not in allowed:
                # Looking for the nearest word is slow, and past the limit nobody reads it.
                remedy = nearest(key, allowed) if len(self.problems) < MAX_PROBLEMS else ""
                self.complain((*path, key), f"unknown key {shown(key)}.", remedy)

    def sub(self, key: str) -> dict[str, Any]:
        """A table of that name; {} where there is none."""
        value = self.table.get(key, {})
        if isinstance(value, dict):
            return value
        self.complain((key,), f"{shown(key)} is {shown(value)}, not a table.", f"Write it as [{key}].")
        return {}

    # -- the whole

    def circuit(self) -> Circuit:
        self.known(self.table, _TOP)
        if not isinstance(self.table.get("title", ""), str):
            self.complain(("title",), "the title is not text.", 'Write title = "...".')
        self.parts()
        self.ladders()
        self.sources()
        self.named_parts()
        output = self.output()
        self.grounded()
        analyses = self.analyses()
        conditions = self.conditions()
        claims = self.claims(output)
        silenced = self.silenced()
        if self.problems:
            raise CircuitError(problems=self.ordered())
        return Circuit(
            self.network,
            circuit_name(self.file),
            self.file,
            "circuit file",
            output,
            analyses,
            conditions,
            claims,
            self.places,
            analysis_places=self.analysis_places,
            lines=tuple(self.source_lines),
            silenced=silenced,
        )

    def ordered(self) -> list[Problem]:
        found = sorted(self.problems, key=lambda problem: problem.line or 0)
        if len(found) > MAX_PROBLEMS:
            more = len(found) - MAX_PROBLEMS
            found = [*found[:MAX_PROBLEMS], Problem(f"and {more} more problems.", self.file)]
        return found

    # -- the network

    def place(self, *path: str | int) -> Place:
        line = self.line(*path)
        return Place(self.file, line, self.source_lines[line - 1] if line is not None else "")

    def parts(self) -> None:
        for name, text in self.sub("parts").items():
            with self.catching("parts", name, also=name):
                check_name(name, "part name")
                if not isinstance(text, str):
                    raise CircuitError(
                        f"{name} is {shown(text)}, not text.", remedy=f'Write {name} = "node node value".'
                    )
                self.network.add_part(parse_part(name, text))
                self.places[name] = self.place("parts", name)

    def ladders(self) -> None:
        value = self.table.get("ladder")
        if value is None:
            return
        tables: list[tuple[KeyPath, Any]] = [(("ladder",), value)]
        if isinstance(value, list):
            tables = [(("ladder", number), item) for number, item in enumerate(value)]
        for path, table in tables:
            if not isinstance(table, dict):
                self.complain(path, f"the ladder is {shown(table)}, not a table.", "Write it as [ladder].")
                continue
            self.known(table, ("path", "sections"), *path)
            with self.catching(*path, "sections"):
                self.ladder(path, table)

    def ladder(self, path: KeyPath, table: dict[str, Any]) -> None:
        ends = table.get("path", "").split("->") if isinstance(table.get("path"), str) else []
        ends = [end.strip() for end in ends]
        if len(ends) != 2 or not all(ends):
            self.complain(
                (*path, "path"),
                f"the ladder's path is {shown(table['path'])}."
                if "path" in table
                else "the ladder has no path.",
                'Write path = "in -> out".',
            )
            ends = []
        sections = table.get("sections")
        if not isinstance(sections, list) or not all(isinstance(text, str) for text in sections):
            self.complain(
                (*path, "sections"),
                f"the ladder's sections are {'not a list of texts' if 'sections' in table else 'missing'}.",
                'Write sections = ["series R1 1k", "shunt C1 1n"].',
            )
            return
        places = self.section_lines((*path, "sections"), sections)
        good = [number for number, text in enumerate(sections) if self.readable(text, places[number])]
        if not ends:
            self.failed.update(sections[number].split()[1] for number in good)
            return
        if len(good) < len(sections) and not any(sections[number].split()[0] == "series" for number in good):
            return  # the series part missing now is one that could not be read
        parts = self.network.ladder_parts(ends[0], ends[1], [sections[number] for number in good])
        for part, line in zip(parts, (places[number] for number in good), strict=True):
            try:
                self.network.add_part(part)
                self.places[part.name] = Place(self.file, line, self.source_lines[line - 1])
            except RcnetError as exc:
                self.problems.extend(exc.at(self.file, line).problems)
                self.failed.add(part.name)

    def readable(self, text: str, line: int) -> bool:
        """True for a section that can be read; a complaint on its line for another one."""
        try:
            parse_section(text)
        except RcnetError as exc:
            self.problems.extend(exc.at(self.file, line).problems)
            self.failed.update(text.split()[1:2])
            return False
        return True

    def section_lines(self, path: KeyPath, sections: list[str]) -> list[int]:
        """The line of each section; that of the key where a section's text is written with escapes."""
        start = self.line(*path) or 1
        after = bisect.bisect_right(self.begins, start)
        end = self.begins[after] if after < len(self.begins) else len(self.source_lines) + 1
        found: dict[str, deque[int]] = {}
        for number in range(start, end):
            for match in _STRING.finditer(self.source_lines[number - 1]):
                found.setdefault(match[1] if match[1] is not None else match[2], deque()).append(number)
        return [found[text].popleft() if found.get(text) else start for text in sections]

    def sources(self) -> None:
        tables = self.sub("sources")
        if not tables and not self.problems:
            self.complain(("sources",), "the circuit has no source.", "Add one, as [sources.Vin].")
        for name, drive in tables.items():
            with self.catching("sources", name, also=name):
                check_name(name, "source name")
                if not isinstance(drive, dict):
                    raise CircuitError(
                        f"the source {name} is {shown(drive)}.", remedy=f"Write it as [sources.{name}]."
                    )
                self.source(name, drive)

    def source(self, name: str, drive: dict[str, Any]) -> None:
        nodes = drive.get("nodes")
        words = nodes.split() if isinstance(nodes, str) else []
        if len(words) != 2:
            what = f"nodes is {shown(nodes)}." if "nodes" in drive else "'nodes' is missing."
            self.complain(("sources", name, "nodes"), f"{name}: {what}", 'Write nodes = "in 0".')
            self.failed.add(name)
            words = [GROUND, GROUND]  # to read on: what drives the source has mistakes of its own
        a, b = words
        rest = {key: value for key, value in drive.items() if key != "nodes"}
        parse_drive(name, (a, b), {})
        # Each key is read alone first, so that every wrong one is told on its own line.
        for key, value in rest.items():
            with self.catching("sources", name, key, also=name):
                parse_drive(name, (a, b), {key: value})
        if name not in self.failed:
            self.network.add_source(parse_drive(name, (a, b), rest))
            self.places[name] = self.place("sources", name)

    def named_parts(self) -> None:
        """Complain about an F, H or K that names a part which is not there or not of its kind."""
        for part in list(self.network.parts):
            row = self.network.part_index(part.name)
            if part.senses is not None and part.senses not in self.failed:
                with self.catching("parts", part.name):
                    self.network.sensed_by(row)
            if part.couples is not None and self.failed.isdisjoint(part.couples):
                with self.catching("parts", part.name):
                    self.network.coupled_by(row)

    def output(self) -> tuple[str, ...]:
        value = self.table.get("output")
        if value is None:
            return ("out",) if self.network.has_node("out") else ()
        with self.catching("output"):
            return self.node_or_pair(value, "output")
        return ()

    def node_or_pair(self, value: Any, what: str) -> tuple[str, ...]:
        words = value.split() if isinstance(value, str) else []
        if len(words) not in (1, 2):
            raise CircuitError(
                f"{what} is {shown(value)}.", remedy='Name one node, as "out", or a pair, as "a b".'
            )
        for word in words:
            check_node(word)
            if not self.network.has_node(word) and not self.may_be_touched(word):
                self.must_be_there(self.network.node_index, word)
        return tuple(words) if len(words) == 1 or words[1] != GROUND else (words[0],)

    def may_be_touched(self, node: str) -> bool:
        """True if what could not be read may be what touches a node; then that message is enough."""
        if not self.failed:
            return False
        if "ladder" in self.table and re.fullmatch(r".+_\d+", node):
            return True  # a ladder names the nodes between its ends itself
        return node in self.unread_words()

    def must_be_there(self, find: Callable[[str], object], name: str) -> None:
        """Raise CircuitError unless the network has a part or node of that name."""
        try:
            find(name)
        except CircuitError as exc:
            if not self.failed:
                raise
            # The names listed would be those that could be read, as if there were no others.
            raise CircuitError(exc.message, remedy="Check its spelling.") from exc

    def unread_words(self) -> set[str]:
        """The words of the parts, ladders and sources among which something could not be read."""
        ladders = self.table.get("ladder", [])
        texts = [self.sub_text("parts", name) for name in self.failed]
        texts += [self.sub_text("sources", name, "nodes") for name in self.failed]
        texts += [
            str(table.get("path", "")).replace("->", " ")
            for table in (ladders if isinstance(ladders, list) else [ladders])
            if isinstance(table, dict)
        ]
        return {word for text in texts for word in text.split()}

    def sub_text(self, *path: str) -> str:
        """The text at a path of keys; "" where there is none."""
        value: Any = self.table
        for key in path:
            value = value.get(key) if isinstance(value, dict) else None
        return value if isinstance(value, str) else ""

    def grounded(self) -> None:
        if self.failed or not len(self.network):
            return
        if not (self.network.arrays().nodes == 0).any():
            self.complain(("parts",), "nothing is connected to ground.", "Call one node 0.")

    # -- what is asked

    def analyses(self) -> Analyses:
        table = self.sub("analysis")
        self.known(table, ("ac", "transient", "noise", "operating_point"), "analysis")
        # Named as the netlist reader names them, where the word has a blank.
        self.analysis_places = {key.replace("_", " "): self.place("analysis", key) for key in table}
        result = Analyses()
        if "ac" in table:
            with self.catching("analysis", "ac"):
                result = replace(result, ac=_sweep("ac", table["ac"], 20))
        if "noise" in table:
            with self.catching("analysis", "noise"):
                result = replace(result, noise=_sweep("noise", table["noise"], 10))
        if "transient" in table:
            with self.catching("analysis", "transient"):
                result = replace(result, transient=_transient(table["transient"]))
        point = table.get("operating_point", False)
        if not isinstance(point, bool):
            self.complain(
                ("analysis", "operating_point"), f"operating_point is {shown(point)}.", "Write true or false."
            )
        return replace(result, operating_point=point is True)

    def conditions(self) -> Conditions:
        table = self.sub("conditions")
        self.known(table, ("temperature",), "conditions")
        result = Conditions()
        if "temperature" in table:
            with self.catching("conditions", "temperature"):
                result = _temperature(table["temperature"])
        return result

    def silenced(self) -> tuple[Silence, ...]:
        codes = self.table.get("silence", [])
        if not isinstance(codes, list) or not all(isinstance(code, str) for code in codes):
            self.complain(
                ("silence",),
                f"silence is {shown(codes)}, not a list of texts.",
                'Name rules, as silence = ["dangling"]; `rcnet check --rules` lists them.',
            )
            return ()
        lines = self.section_lines(("silence",), codes)
        places = [Place(self.file, line, self.source_lines[line - 1]) for line in lines]
        return tuple(
            Silence(code, self.file, place=place.at(code)) for code, place in zip(codes, places, strict=True)
        )

    # -- claims

    def claims(self, output: tuple[str, ...]) -> tuple[Claim, ...]:
        tables = self.table.get("claims", [])
        if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
            self.complain(
                ("claims",), "claims are not written as tables.", "Begin each claim with [[claims]]."
            )
            return ()
        claims = []
        for number, table in enumerate(tables):
            with self.catching("claims", number):
                if (claim := self.claim(number, table, output)) is not None:
                    claims.append(claim)
        return tuple(claims)

    def claim(self, number: int, table: dict[str, Any], output: tuple[str, ...]) -> Claim | None:
        before = len(self.problems)
        path = ("claims", number)
        spec = None
        with self.catching(*path, "measure"):
            if "measure" not in table:
                raise CircuitError("the claim names no measure.", remedy='Add measure = "cutoff" or another.')
            spec = measure_spec(table["measure"])
        if spec is None:
            return None
        self.known(table, (*_CLAIM, *spec.needs, *spec.may), *path)
        options: dict[str, float | str] = {}
        for key in (*spec.needs, *spec.may):
            with self.catching(*path, key):
                options |= self.option(spec, key, table)
        with self.catching(*path, "to"):
            check_band(spec, options)
        of = output
        if "of" in table:
            with self.catching(*path, "of"):
                of = self.node_or_pair(table["of"], "of")
        elif not output and "part" not in options and not self.failed:
            self.complain(
                path, "the claim is about no node.", 'Add of = "out", or output = "out" at the top.'
            )
        bound, hand = self.bound(path, spec, table), None
        if "hand" in table:
            with self.catching(*path, "hand"):
                hand = self.hand(table["hand"])
        over = table.get("over")
        if over not in (None, "tolerance"):
            self.complain(
                (*path, "over"), f"over is {shown(over)}.", 'Write over = "tolerance", or leave it out.'
            )
        says = table.get("says", "")
        if not isinstance(says, str):
            self.complain((*path, "says"), f"says is {shown(says)}, not text.", 'Write says = "...".')
        if len(self.problems) > before or bound is None:
            return None
        return Claim(
            says or _plain(spec, options, bound),
            spec,
            of,
            options,
            bound,
            hand,
            over is not None,
            self.place(*path),
            self.place(*path, "hand") if hand is not None else None,
        )

    def bound(self, path: KeyPath, spec: MeasureSpec, table: dict[str, Any]) -> Bound | None:
        forms = [key for key in _FORMS if key in table]
        if len(forms) != 1:
            self.complain(
                path,
                f"the claim has {' and '.join(forms) or 'no bound'}.",
                "Give exactly one of equals (with within), at_least, at_most, between.",
            )
            return None
        if "within" in table and forms[0] != "equals":
            self.complain(
                (*path, "within"), f"within does not go with {forms[0]}.", "Use it with equals only."
            )
            return None
        with self.catching(*path, forms[0]):
            if forms[0] != "equals":
                return _bound(spec, forms[0], table[forms[0]])
            if "within" not in table:
                raise CircuitError(
                    "equals stands without within.",
                    remedy='Say how close is close enough, as within = "1 %".',
                )
            target = parse_quantity(table["equals"], spec.unit, "equals")
            with self.catching(*path, "within"):
                return _around(spec, target, table)
        return None

    def option(self, spec: MeasureSpec, key: str, table: dict[str, Any]) -> dict[str, float | str]:
        if key not in table:
            if key in spec.needs:
                raise CircuitError(
                    f"{spec.name} needs {shown(key)}.", remedy=f"Add {key} = ... to the claim."
                )
            return {}
        only = replace(spec, needs=(key,), may=())
        options = parse_options(only, {key: table[key]})
        if key == "part" and options["part"] not in self.failed:
            self.must_be_there(self.network.part, str(options["part"]))
        return options

    def hand(self, text: Any) -> Expression:
        if not isinstance(text, str):
            raise CircuitError(f"hand is {shown(text)}, not text.", remedy='Write hand = "1/(2*pi*R1*C1)".')
        formula = parse_expression(text)
        for name in sorted(formula.names - {"T"} - self.failed):
            self.must_be_there(self.network.part, name)
        return formula


def _plain(spec: MeasureSpec, options: Mapping[str, float | str], bound: Bound) -> str:
    return f"{spec.name} {bound.text}"


def _bound(spec: MeasureSpec, form: str, given: Any) -> Bound:
    if form == "between":
        if not isinstance(given, list) or len(given) != 2:
            raise CircuitError(f"between is {shown(given)}.", remedy="Write between = [low, high].")
        low, high = (parse_quantity(value, spec.unit, "between") for value in given)
        if not low <= high:
            raise CircuitError(
                f"between runs from {shown(given[0])} down to {shown(given[1])}.",
                remedy="Put the lower one first.",
            )
        return Bound(low, high, f"between {given[0]} and {given[1]}")
    value = parse_quantity(given, spec.unit, form)
    if form == "at_least":
        return Bound(value, math.inf, f"at least {given}")
    return Bound(-math.inf, value, f"at most {given}")


def _around(spec: MeasureSpec, target: float, table: Mapping[str, Any]) -> Bound:
    within = table["within"]
    if isinstance(within, str) and within.strip().endswith("%"):
        spread = abs(target) * parse_quantity(within, "%", "within") / 100
    else:
        spread = parse_quantity(within, spec.unit, "within")
    if not (spread >= 0 and math.isfinite(target)):
        raise CircuitError(
            f"within is {shown(within)} around {shown(table['equals'])}.", remedy="Give zero or more, finite."
        )
    return Bound(target - spread, target + spread, f"{table['equals']} ± {within}")


def _sweep(name: str, table: Any, per_decade: int) -> Sweep:
    if not isinstance(table, dict):
        raise CircuitError(
            f"{name} is {shown(table)}.", remedy=f'Write {name} = {{ from = "10", to = "1 MHz" }}.'
        )
    for key in table:
        if key not in _SWEEP:
            raise CircuitError(f"{name}: unknown key {shown(key)}.", remedy=nearest(key, _SWEEP))
    for key in ("from", "to"):
        if key not in table:
            raise CircuitError(
                f"{name}: {shown(key)} is missing.", remedy=f'Add {key} = "1 kHz" or the like.'
            )
    start, stop = (parse_quantity(table[key], "Hz", f"{name}: {key}") for key in ("from", "to"))
    points = table.get("per_decade", per_decade)
    if not isinstance(points, int) or isinstance(points, bool) or not 1 <= points <= 10_000:
        raise CircuitError(
            f"{name}: per_decade is {shown(points)}.", remedy="Give a whole number from 1 to 10000."
        )
    return checked_sweep(Sweep(start, stop, points), name)


def checked_sweep(sweep: Sweep, name: str) -> Sweep:
    """The sweep, if it has a step: ngspice never ends on one that rounds to none. Raises CircuitError."""
    if not (0 < sweep.start < sweep.stop < math.inf):
        raise CircuitError(
            f"{name} runs from {sweep.start!r} Hz to {sweep.stop!r} Hz.",
            remedy="Start above zero and end higher than the start.",
        )
    if sweep.start < LOWEST_FREQUENCY or sweep.stop > HIGHEST_FREQUENCY:
        raise CircuitError(
            f"{name} runs from {sweep.start!r} Hz to {sweep.stop!r} Hz.",
            remedy=f"Keep it between {LOWEST_FREQUENCY:g} Hz and {HIGHEST_FREQUENCY:g} Hz.",
        )
    steps = math.log10(sweep.stop / sweep.start) * sweep.points
    if math.floor(steps) < 1:
        raise CircuitError(
            f"{name} covers less than one step between {sweep.start!r} Hz and {sweep.stop!r} Hz.",
            remedy="Widen it, or raise the points per decade.",
        )
    if steps > 1_000_000:
        raise CircuitError(f"{name} has {steps:.0f} points.", remedy="Ask for at most a million.")
    return sweep


def _transient(table: Any) -> TransientRun:
    if not isinstance(table, dict):
        raise CircuitError(f"transient is {shown(table)}.", remedy='Write transient = { stop = "5 ms" }.')
    for key in table:
        if key not in _RUN:
            raise CircuitError(f"transient: unknown key {shown(key)}.", remedy=nearest(key, _RUN))
    if "stop" not in table:
        raise CircuitError("transient: 'stop' is missing.", remedy='Add stop = "5 ms" or the like.')
    read = {key: parse_quantity(value, "s", f"transient: {key}") for key, value in table.items()}
    stop = read["stop"]
    run = TransientRun(stop, read.get("step", stop / 500), read.get("start", 0.0), read.get("max_step"))
    positive = [run.stop, run.step, *([run.max_step] if run.max_step is not None else [])]
    if not all(0 < value < math.inf for value in positive) or not 0 <= run.start < run.stop:
        raise CircuitError(
            f"transient: {shown(table)} is no run over time.",
            remedy="Let stop, step and max_step be above zero and start before stop.",
        )
    return run


def _temperature(value: Any) -> Conditions:
    if not isinstance(value, dict):
        nominal = parse_quantity(value, "degC", "temperature")
        limits = (nominal, nominal)
    else:
        if set(value) != {"from", "to"}:
            raise CircuitError(f"temperature is {shown(value)}.", remedy="Write { from = -40, to = 85 }.")
        limits = (
            parse_quantity(value["from"], "degC", "temperature: from"),
            parse_quantity(value["to"], "degC", "temperature: to"),
        )
        # 27 degrees is what simulators take unless told (TNOM); outside the range its nearer end stands in.
        nominal = min(max(27.0, limits[0]), limits[1])
    if not (-273.15 < limits[0] <= limits[1] < 1000):
        raise CircuitError(
            f"temperature is {shown(value)}.", remedy="Give degrees Celsius, the lower one first."
        )
    return Conditions(nominal, *limits)
