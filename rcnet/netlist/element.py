"""One part of a netlist from the words of its line."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field, replace
from typing import Protocol

from ..circuit import Part, Source
from ..errors import CircuitError
from ..values import read_spice_number
from .environment import NOTHING, Known
from .environment import Source as Depended
from .names import KEYWORDS
from .refusals import non_linear, reason_behind_value
from .scopes import MODEL_KINDS, Model
from .source_line import read_drive, scaled
from .words import Pair, assignments, bare, split_words

NODES = {"R": 2, "C": 2, "L": 2, "E": 4, "G": 4, "F": 2, "H": 2, "V": 2, "I": 2}
_VALUE_KEYS = {
    "R": ("r", "resistance"),
    "C": ("c", "cap", "capacitance"),
    "L": ("l", "inductance"),
    "E": ("gain",),
    "G": ("gain",),
    "F": ("gain",),
    "H": ("gain",),
}
# The same in a model (measured: not all names of the one are names of the other).
_MODEL_VALUE_KEYS = {
    "R": ("r", "res", "resistance"),
    "C": ("cap", "capacitance"),
    "L": ("ind", "inductance"),
}
_DEFAULT_SIZE = 10e-6  # m: width of R and C, length of R, where neither part nor model states one (measured)
# ngspice 39 stamps `m=` on these only; on the others it refuses the word (measured).
_MULTIPLIED = "RCLGFI"
_DECIMAL_COMMA = re.compile(r"[ =(]([-+]?[0-9]+,[0-9][^\s,]*)$")
_VARYING = re.compile(r"\b[vi]\s*\(|\btime\b|\bhertz\b", re.IGNORECASE)
_NUMBER = re.compile(r"[-+]?\.?[0-9]")
_NOMINAL = 27.0  # degrees Celsius: the temperature at which values are meant, unless `tnom` says otherwise


class Site(Protocol):
    """Where a part stands: what names, nodes and models mean there."""

    multiplier: Known | None  # where it stands inside a subcircuit that is there `m=` times

    @property
    def temperature(self) -> float:
        """Of the circuit, degrees Celsius."""
        ...

    @property
    def tnom(self) -> float:
        """The temperature at which values are meant, degrees Celsius."""
        ...

    @property
    def step(self) -> float | None:
        """The print step of the transient, s."""
        ...

    @property
    def stop(self) -> float | None:
        """The end of the transient, s."""
        ...

    def node(self, word: str) -> str:
        """A node's name in the whole network."""
        ...

    def part(self, word: str) -> str:
        """A part's name in the whole network."""
        ...

    def evaluate(self, text: str) -> Known:
        """The value of an expression."""
        ...

    def is_warm(self, of: set[Depended]) -> bool:
        """True if one of these depends on the temperature."""
        ...

    def is_parameter(self, name: str) -> bool:
        """True if a bare name is a parameter."""
        ...

    def model(self, name: str) -> Model | None:
        """The model of that name."""
        ...

    def notice(self, code: str, message: str, remedy: str, word: str = "") -> None:
        """Keep something for the rule of that code."""
        ...


@dataclass(slots=True)
class Element:
    """A part or a source, the parameters its value depends on, its value as written, where it starts.

    numbers: other numbers on its line, as written; start: `ic=`; multiplied: by an `m=` that is not 1
    """

    item: Part | Source | None
    of: frozenset[Depended] = NOTHING
    text: str | None = None
    numbers: list[str] = field(default_factory=list)
    start: float | None = None
    multiplied: bool = False


@dataclass(slots=True)
class _Line:
    """The words of a part's line: those that stand alone, and the pairs."""

    name: str
    letter: str
    nodes: tuple[str, ...]
    alone: list[str]
    pairs: dict[str, str]
    text: str
    of: set[Depended] = field(default_factory=set)
    numbers: list[str] = field(default_factory=list)


def read_element(text: str, site: Site) -> Element:
    """The part on a logical line that begins with one of R C L E F G H V I K.

    Raises CircuitError or QuantityError.
    """
    words = split_words(text)
    name, letter = words[0], words[0][0].upper()
    if letter == "R":
        words = _both_coefficients(words)
    if letter == "K":
        return _coupling(words, site)
    count = NODES[letter]
    _require_linear(name, letter, words)
    if len(words) < 1 + count or "=" in words[: 2 + count - 1]:
        raise CircuitError(
            f"{name} names fewer than {count} nodes.", remedy="Name all its nodes.", code="node-missing"
        )
    if letter in "VI":
        return _source(name, words, text, site)
    found = words[1 : 1 + count]
    for word in found if letter in "EG" else words[3:4] if letter in "FH" else ():
        if word.lower() in KEYWORDS:
            raise _misplaced(name, word)
    alone, pairs = assignments(words[1 + count :])
    line = _Line(name, letter, tuple(site.node(word) for word in found), alone, _once(name, pairs), text)
    return _valued(line, site)


def _both_coefficients(words: list[str]) -> list[str]:
    """`tc=0.01 0.001` as `tc1=0.01 tc2=0.001`, which is what it means."""
    for at in range(1, len(words) - 2):
        if words[at].lower() == "tc" and words[at + 1] == "=":
            second = words[at + 3 : at + 4]
            follows = bool(second) and words[at + 4 : at + 5] != ["="] and _is_value(second[0])
            more = ["tc2", "=", second[0]] if follows else []
            return [*words[:at], "tc1", "=", words[at + 2], *more, *words[at + 3 + follows :]]
    return words


def _is_value(word: str) -> bool:
    return _NUMBER.match(word) is not None or bare(word) is not None


def _misplaced(name: str, word: str) -> CircuitError:
    return CircuitError(
        f"{name}: {word!r} stands where a name belongs.",
        remedy="Name what is missing, or rename the node.",
        code="node-missing",
    )


def _require_linear(name: str, letter: str, words: list[str]) -> None:
    """Refuse what is behavioural: polynomials, tables, expressions of voltages."""
    for word in words[3:6] if letter in "EGFH" else ():
        if word.lower() in ("poly", "value", "vol", "cur", "table", "laplace", "freq"):
            what = "a polynomial source" if word.lower() == "poly" else "a behavioural source"
            raise non_linear(name, what)
    for word in words[3:] if letter not in "VI" else ():
        if _VARYING.search(bare(word) or ""):
            raise non_linear(name, "a part whose value depends on voltages, currents or time")


def _once(name: str, pairs: list[Pair]) -> dict[str, str]:
    found: dict[str, str] = {}
    for key, text in pairs:
        if key in found:
            raise CircuitError(
                f"{name} has two {key}= entries.",
                remedy="Keep one; SPICE takes the last.",
                code="second-value",
            )
        found[key] = text
    return found


# ---------------------------------------------------------------------- values


def _number(line: _Line, text: str, site: Site, *, note: bool = True) -> float:
    """A value as written: a number, an expression, or the bare name of a parameter."""
    if _NUMBER.match(text):
        if note:
            line.numbers.append(text)
        return read_spice_number(text).value
    inner = bare(text)
    if inner is None and not site.is_parameter(text.lower()):
        return read_spice_number(text).value  # says that it is no number
    if inner is None:
        site.notice(
            "bare-parameter",
            f"{line.name}: the parameter {text!r} stands without braces; ngspice takes it, with a warning.",
            f"Write {{{text}}}.",
            text,
        )
    known = site.evaluate(text)
    line.of.update(known.of)
    return known.value


def _valued(line: _Line, site: Site) -> Element:
    """R C L E F G H: value, model and settings, in the ways SPICE allows them."""
    sensed = None
    if line.letter in "FH":
        if len(line.alone) + bool(line.pairs) < 2:
            raise CircuitError(
                f"{line.name} lacks its sensed source or its gain.",
                remedy=f"Write {line.name} a b Vsense gain.",
                code="value-missing",
            )
        sensed = site.part(line.alone.pop(0))
    model, text = _model_and_value(line, site)
    settings = _Settings(line, site, model)
    base = settings.from_model() if text is None else _written_value(line, text, site)
    if text is not None and site.is_warm(line.of):
        _require_cold(line, model, settings)
    if line.letter == "R" and base == 0:
        base = _least_resistance(line, site)
    value = _at_temperature(line, base, settings) if line.letter in "RCL" else base
    factor = settings.number("m") if line.letter in _MULTIPLIED else None
    value = _multiplied(line, value * settings.scale(), factor, site)
    start = settings.number("ic") if line.letter in "CL" else None
    settings.require_all_read()
    part = _part(line, value, sensed, site)
    shown = _shown_value(line, text)
    line.numbers[:] = [number for number in line.numbers if number != text]
    multiplied = (factor is not None and factor != 1) or site.multiplier is not None
    return Element(part, frozenset(line.of) or NOTHING, shown, line.numbers, start, multiplied)


def _require_cold(line: _Line, model: Model | None, settings: _Settings) -> None:
    """Refuse what ngspice 39 forgets about a part with `temper` in its value, a source inside (measured)."""
    forgotten = "it has no current in ac" if line.letter == "C" else ""
    if line.letter in "RL" and (model is not None or "scale" in settings.unread):
        forgotten = "its model and scale= do not count"
    if forgotten:
        raise CircuitError(
            f"{line.name} has temper in its value; in ngspice 39 {forgotten}, without a word.",
            remedy="Give it tc1 and tc2 instead.",
            code="unreadable",
        )


def _least_resistance(line: _Line, site: Site) -> float:
    site.notice(
        "zero-resistance",
        f"{line.name} has 0 ohm, which ngspice silently makes 1 milliohm; so it is read here.",
        "Write the resistance of the link, or give both its ends one node name.",
    )
    return 1e-3


def _part(line: _Line, value: float, sensed: str | None, site: Site) -> Part | None:
    if line.letter == "C" and value == 0:
        site.notice(
            "zero-capacitance",
            f"{line.name} has 0 farad, so it is no part at all.",
            "Give it its value, or remove it.",
        )
        return None
    return Part(site.part(line.name), line.letter, line.nodes, value, senses=sensed)


def _shown_value(line: _Line, text: str | None) -> str | None:
    # A comma is a blank to SPICE and the last number wins; a rule reports it (decimal comma).
    comma = _DECIMAL_COMMA.search(line.text)
    if comma and text is not None and comma[1].endswith(text):
        return comma[1]
    return text if text is not None and _NUMBER.match(text) else None


def _model_and_value(line: _Line, site: Site) -> tuple[Model | None, str | None]:
    """The model named and the value's text, whichever way round they stand."""
    given = [
        line.pairs.pop(key)
        for key in _VALUE_KEYS[line.letter]
        if key in line.pairs and not _is_length(line, key)
    ]
    model: Model | None = None
    values: list[str] = []
    for word in line.alone:
        named = not _is_value(word) and not site.is_parameter(word.lower())
        found = site.model(word.lower()) if named else None
        if found is not None and model is None and MODEL_KINDS.get(found.kind) == line.letter:
            if line.letter != "R" and values:
                raise CircuitError(
                    f"{line.name}: such a part's model stands before its value.",
                    remedy=f"Write {line.name} a b {word} {values[0]}.",
                    code="unreadable",
                )
            model = found
        else:
            values.append(word)
    values += given
    if not values and model is None:
        raise CircuitError(
            f"{line.name} has no value, or lacks a node.",
            remedy="Add it; ngspice would take 1 milliohm for a resistor and nothing for a capacitor.",
            code="value-missing",
        )
    return model, _one_value(line, values)


def _is_length(line: _Line, key: str) -> bool:
    # `l=` on a resistor or capacitor is its length; on an inductor ngspice knows no length.
    return key == "l" and line.letter != "L"


def _one_value(line: _Line, values: list[str]) -> str | None:
    if not values:
        return None
    if len(values) == 1:
        return values[0]
    comma = _DECIMAL_COMMA.search(line.text)
    if len(values) == 2 and comma and comma[1] == f"{values[0]},{values[1]}":
        last = read_spice_number(values[1]).value
        if last <= 0 and line.letter in "RCL":
            raise CircuitError(
                f"{line.name} is written {comma[1]!r}: a comma parts words in SPICE, so it is {last:g}.",
                remedy="Write a decimal point, or leave out what marks the thousands.",
                code="second-value",
            )
        return values[1]
    message, remedy, code = reason_behind_value(line.name, values[0], values[1])
    raise CircuitError(message, remedy=remedy, code=code)


def _written_value(line: _Line, text: str, site: Site) -> float:
    if not _NUMBER.match(text) and bare(text) is None and not site.is_parameter(text.lower()):
        if site.model(text.lower()) is not None:
            raise CircuitError(
                f"{line.name}: the model {text!r} is no model of such a part.",
                remedy="Give the part a value, or a model of its own kind.",
                code="model-unknown",
            )
        if re.fullmatch(r"[A-Za-z_]\w*", text):
            raise CircuitError(
                f"{line.name}: {text!r} is neither a number nor a parameter nor a model.",
                remedy="Write the value, or define the name with .param or .model.",
                code="model-unknown",
            )
    return _number(line, text, site, note=False)


class _Settings:
    """The settings of a part, its own before its model's; every one is read or refused."""

    def __init__(self, line: _Line, site: Site, model: Model | None) -> None:
        self.line, self.site, self.model = line, site, model
        self.unread = dict(line.pairs)

    def number(self, key: str) -> float | None:
        """A setting on the part's own line."""
        text = self.unread.pop(key, None)
        return None if text is None else _number(self.line, text, self.site)

    def of_model(self, *keys: str) -> float | None:
        """A setting of the model; the first of several names it may have."""
        for key in keys:
            if self.model is not None and key in self.model.settings:
                return _number(self.line, self.model.settings[key], self.site, note=False)
        return None

    def either(self, key: str) -> float | None:
        """A setting of the part, else of its model."""
        own = self.number(key)
        return self.of_model(key) if own is None else own

    def from_model(self) -> float:
        """The value where none is written: the model's own, or from length and width."""
        letter = self.line.letter
        written = self.of_model(*_MODEL_VALUE_KEYS[letter])
        sized = None if letter == "L" else self._from_size(letter)
        # Where a model gives both, ngspice 39 takes the sheet of a resistor, but the value of a capacitor.
        found = written if sized is None or (letter == "C" and written is not None) else sized
        if found is None:
            assert self.model is not None
            raise CircuitError(
                f"{self.line.name} has no value, and its model gives none.",
                remedy="Add it; ngspice would take 1 milliohm for a resistor and nothing for a capacitor.",
                code="value-missing",
            )
        return found

    def _from_size(self, letter: str) -> float | None:
        """Ngspice manual, "Semiconductor Resistor Model" and "Semiconductor Capacitor Model"."""
        narrow, short = self.of_model("narrow") or 0.0, self.of_model("short") or 0.0
        length, width = self.number("l"), self.number("w")
        if width is None:
            width = self.of_model("defw", "w")
            width = _DEFAULT_SIZE if width is None else width
        if letter == "R":
            length = self.of_model("l") if length is None else length
            length = _DEFAULT_SIZE if length is None else length
            sheet = self.of_model("rsh")
            if not (sheet and length and width):
                return None
            # ngspice 39 takes both reductions twice on a resistor, once on a capacitor (measured).
            return _quotient(self.line, sheet * (length - 2 * short), width - 2 * narrow)
        area, edge = self.of_model("cj"), self.of_model("cjsw") or 0.0
        if area is None or length is None:
            return None
        length, width = length - short, width - narrow
        return area * length * width + 2 * edge * (length + width)

    def scale(self) -> float:
        """`scale=` of the part or its model."""
        found = self.either("scale") if self.line.letter in "RCL" else None
        return 1.0 if found is None else found

    def require_all_read(self) -> None:
        for key, text in self.unread.items():
            if key in ("l", "w"):
                continue  # a size beside a value says nothing
            message, remedy, code = reason_behind_value(self.line.name, key, f"{key}={text}")
            raise CircuitError(message, remedy=remedy, code=code)
        if self.line.letter == "R" and self.of_model("kf"):
            raise CircuitError(
                f"the model of {self.line.name} has flicker noise (kf), which is not computed.",
                remedy="Take kf out of the model.",
                code="unreadable",
            )


def _quotient(line: _Line, above: float, below: float) -> float:
    if not below:
        raise CircuitError(
            f"{line.name}: its model makes it 0 m wide.", remedy="Mind `narrow`, which counts twice."
        )
    return above / below


def _at_temperature(line: _Line, base: float, settings: _Settings) -> float:
    """R(T) = R (1 + tc1 dT + tc2 dT^2), dT from the nominal temperature (ngspice manual, "Resistors").

    Or R 1.01^(tce dT), which goes before that.
    """
    site = settings.site
    first, second = settings.either("tc1"), settings.either("tc2")
    power = settings.either("tce") if line.letter == "R" else None
    own, more = settings.either("temp"), settings.either("dtemp")
    tnom = settings.of_model("tnom")
    warmer = (site.temperature + (more or 0.0) if own is None else own) - (
        site.tnom if tnom is None else tnom
    )
    if not warmer:
        return base
    if power is not None:
        try:
            return float(base * 1.01 ** (power * warmer))
        except OverflowError:
            return math.inf
    return base * (1.0 + (first or 0.0) * warmer + (second or 0.0) * warmer * warmer)


def _multiplied(line: _Line, value: float, factor: float | None, site: Site) -> float:
    """`m=` parts side by side: its own, or that of the subcircuit it stands in."""
    if site.multiplier is not None:
        line.of.update(site.multiplier.of)
        if factor is not None:
            raise _multiplied_twice(line.name)
        if line.letter in "FH" and site.multiplier.value != 1.0:
            raise CircuitError(
                f"{line.name} senses a current inside a subcircuit that is multiplied by m=.",
                remedy="Write the subcircuit out as many times as it is there.",
                code="unreadable",
            )
        factor = site.multiplier.value
    if factor is None or line.letter not in _MULTIPLIED:
        return value
    if not factor > 0:
        raise CircuitError(f"{line.name} is there {factor:g} times.", remedy="Give m= a number above zero.")
    return value * factor if line.letter in "CGF" else value / factor


def _multiplied_twice(name: str) -> CircuitError:
    return CircuitError(
        f"{name} has m= inside a subcircuit that has m= as well; ngspice 39 forgets the inner one.",
        remedy="Multiply one of the two, or write the part out as many times as it is there.",
        code="unreadable",
    )


# ---------------------------------------------------------------------- sources and couplings


def _source(name: str, words: list[str], text: str, site: Site) -> Element:
    nodes = words[1:3]
    for word in nodes:
        if word.lower() in KEYWORDS:
            raise _misplaced(name, word)
    numbers: list[str] = []
    of: set[Depended] = set()

    def number(word: str) -> float | None:
        """The number a word stands for; None for a word that is none."""
        if _NUMBER.match(word):
            numbers.append(word)
            return read_spice_number(word).value
        if bare(word) is None and not site.is_parameter(word.lower()):
            return None
        known = site.evaluate(word)
        of.update(known.of)
        return known.value

    rest = [word for word in words[3:] if word != "="]
    multiplier = 1.0
    lower = [word.lower() for word in rest]
    if "m" in lower and name[0] in "Ii" and lower.index("m") + 1 < len(rest):
        at = lower.index("m")
        found = number(rest[at + 1])
        if found is None:
            raise CircuitError(
                f"{name}: m={rest[at + 1]} is no number.", remedy="Write m=2.", code="unreadable"
            )
        if site.multiplier is not None:
            raise _multiplied_twice(name)
        multiplier = found
        del rest[at : at + 2]
    drive = read_drive(name, (site.node(nodes[0]), site.node(nodes[1])), rest, number, site)
    drive = replace(drive, name=site.part(name))
    if name[0] in "Ii" and site.multiplier is not None:
        multiplier = site.multiplier.value
        of.update(site.multiplier.of)
    if multiplier != 1.0:
        drive = scaled(drive, multiplier)
    return Element(drive, frozenset(of) or NOTHING, None, numbers)


def _coupling(words: list[str], site: Site) -> Element:
    alone, pairs = assignments(words)
    if len(alone) + len(pairs) != 4 or (pairs and pairs[0][0] not in ("k", "coefficient")):
        raise CircuitError(
            f"{words[0]} does not name two inductors and a coefficient.",
            remedy=f"Write {words[0]} L1 L2 0.98.",
            code="unreadable",
        )
    name, first, second = alone[:3]
    text = pairs[0][1] if pairs else alone[3]
    line = _Line(name, "K", (), [], {}, " ".join(words))
    if site.multiplier is not None and site.multiplier.value != 1.0:
        raise coupled_and_multiplied(name)
    value = _number(line, text, site, note=False)
    part = Part(site.part(name), "K", (), value, couples=(site.part(first), site.part(second)))
    return Element(part, frozenset(line.of) or NOTHING, text if _NUMBER.match(text) else None)


def coupled_and_multiplied(name: str) -> CircuitError:
    """The error for a coupling of inductors with an `m=`."""
    return CircuitError(
        f"{name} couples inductors that are multiplied by m=; ngspice 39 couples them more than fully.",
        remedy="Write the inductors without m=.",
        code="unreadable",
    )
