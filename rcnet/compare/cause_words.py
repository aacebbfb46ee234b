"""The sentences that tell a cause: what, by how much, what it may come from, and what it explains."""

from __future__ import annotations

import math

from ..circuit import KINDS, Network, Part
from ..values import format_quantity
from .changes import LONGEST_SHORT
from .misreadings import AXES, MISREADINGS
from .suspicion import Suspicion
from .telling_apart import Measurement

_SURE = 0.01  # a factor whose ln is known worse than this is not named
_CLOSE = 1e-6
_RESOLVED = 1e-9  # shares of a difference left below this are told as all of it

# Factors that a slip of the pen or of a program makes; the first that is near enough is named.
_FACTORS: tuple[tuple[float, str], ...] = (
    (1e3, "one SI prefix off (n for p, u for n, k for none, M for k)"),
    (1e6, "two SI prefixes off (u for p, m for n, M for none)"),
    (1e9, "three SI prefixes off, as mega is from milli: to SPICE `M` is milli, and mega is `MEG`"),
    (1e12, "four SI prefixes off, as a plain number is from pico"),
    (1e15, "a unit letter read as a prefix: to SPICE `1F` is a femtofarad"),
    (10.0, "one decade off, as when a digit or a multiplier is misread"),
    (100.0, "two decades off, as when digits or a multiplier are misread"),
    (1e4, "four decades off, as when a multiplier is misread"),
    (1e5, "five decades off, as when a multiplier is misread"),
    (2.54e-2, "a thousandth of an inch: to SPICE `milliohm` and `million` are read as `mil`, 25.4e-6"),
    (25.4e-6, "a thousandth of an inch: to SPICE `mil` is 25.4e-6"),
    (2 * math.pi, "off by 2 pi, as when rad/s and hertz are mixed up"),
    (2.0, "off by two, as are peak and peak-to-peak, or one part and two of them"),
    (math.sqrt(2), "off by the root of two, as are a peak and an rms value"),
    (2 * math.sqrt(2), "off by twice the root of two, as are a peak-to-peak and an rms value"),
)


def named_factor(suspicion: Suspicion, slack: float) -> str:
    """What a factor may come from, "" where nothing usual has it. slack: how far its ln may lie off."""
    factor = suspicion.amount or 0.0
    if factor <= 0 or slack > _SURE:
        return ""
    for known, words in _FACTORS:
        for value in (known, 1 / known):
            if abs(math.log(factor / value)) <= max(3 * slack, _CLOSE):
                return words
    return ""


def said(network: Network, suspicion: Suspicion, slack: float, explains: float, *, fits: bool) -> str:
    """The sentence of a cause and what it explains."""
    return f"{_what(network, suspicion, slack)} {said_of_curves(explains, fits=fits)}"


def unexplained_said(reached: float, *, everywhere: bool) -> str:
    """The sentence for a difference that no single cause explains. everywhere: all parts were tried."""
    text = (
        "No single change of a part, a source, a node or the results explains the difference; several things "
        "may be wrong at once, or the results belong to another circuit."
        if everywhere
        else "None of the changes tried explains the difference; of so many parts not all were tried."
    )
    if reached <= 0:
        return text
    return f"{text} The change that comes nearest takes {_percent(reached)} of the squared difference away."


def tie_said(number: int, many: int, shown: int, telling: Measurement | None) -> str:
    """What is added to a cause that others match: which measurement tells them apart."""
    others = "another cause" if many == 2 else f"{many - 1} other causes"
    if many > shown:
        others += f" ({shown} in all are listed)"
    text = f"The results cannot tell it from {others}"
    if telling is None:
        return f"{text}, nor would any node voltage measured as finely: look at the parts themselves."
    where = "at dc" if telling.frequency is None else f"at {format_quantity(telling.frequency, 'Hz')}"
    here = _volts(telling.predicted[number])
    return f"{text}; v({telling.node}) {where} would tell: with this cause it is {here}."


def _volts(value: complex | float) -> str:
    if not isinstance(value, complex):
        return format_quantity(value, "V")
    angle = round(math.degrees(math.atan2(value.imag, value.real)), 1) + 0.0
    return f"{format_quantity(abs(value), 'V')} at {angle:g} degrees"


def said_of_curves(explains: float, *, fits: bool) -> str:
    """The sentence on what a cause takes away of the difference."""
    if fits:
        return "With this change the results agree within what is allowed."
    return (
        f"This takes {_percent(explains)} of the squared difference away; what is left is more than allowed."
    )


def _percent(share: float) -> str:
    """A share as percent with as many nines as it takes."""
    left = 1 - share
    if left <= _RESOLVED:
        return "all"
    digits = max(0, min(8, -math.floor(math.log10(left)) - 1))
    return f"{math.floor(share * 10 ** (digits + 2)) / 10**digits:.{digits}f} %"


# ---------------------------------------------------------------------- one kind after another


def _what(network: Network, suspicion: Suspicion, slack: float) -> str:
    teller = {
        "part-value": _value,
        "part-missing": _missing,
        "part-shorted": _shorted,
        "parts-exchanged": _exchanged,
        "part-extra": _extra,
        "load": _extra,
        "source-scale": _scale,
        "source-impedance": _impedance,
        "temperature": _temperature,
        "simulator": _simulator,
    }.get(suspicion.kind)
    return _misread(suspicion) if teller is None else teller(network, suspicion, slack)


def _value(network: Network, suspicion: Suspicion, slack: float) -> str:
    part, factor = network.part(suspicion.parts[0]), suspicion.amount or 0.0
    unit = KINDS[part.kind].unit
    named = named_factor(suspicion, slack) or _cut_short(part, factor)
    tail = f": {named}." if named else _within_tolerance(part, factor)
    return (
        f"{part.name} acts as {_quantity(part.value * factor, unit, slack, factor)} where the circuit has "
        f"{_quantity(part.value, unit)}, {_times(factor, slack)} as much{tail}"
    )


def _within_tolerance(part: Part, factor: float) -> str:
    if part.tolerance is None:
        return "."
    within = part.tolerance.low <= factor - 1 <= part.tolerance.high
    return f", {'within' if within else 'outside'} its tolerance."


def _cut_short(part: Part, factor: float) -> str:
    """`4k7` and `4,7k` as SPICE reads them: what follows the letter is lost, what precedes the comma too."""
    text = format_quantity(part.value, "ohm").split()[0]
    whole, _, rest = text.partition(".")
    if not rest:
        return ""
    if abs(factor * float(text) / float(whole) - 1) < _CLOSE if float(whole) else False:
        return f"SPICE reads the digits behind a letter in {whole}k{rest} (or the like) as nothing"
    if abs(factor * float(text) / float(rest) - 1) < _CLOSE if float(rest) else False:
        return f"SPICE reads a decimal comma as a blank, so {whole},{rest} is {rest}"
    return ""


def _missing(network: Network, suspicion: Suspicion, slack: float) -> str:
    part = network.part(suspicion.parts[0])
    return f"{_named(part)} is missing, or open: nothing joins {_ends(part)} there."


def _shorted(network: Network, suspicion: Suspicion, slack: float) -> str:
    part = network.part(suspicion.parts[0])
    silent = " (to ngspice a resistor of 0 ohm is 1 mohm, without a word)" if part.kind == "R" else ""
    link = format_quantity(suspicion.amount or 0.0, "ohm")
    return f"{_named(part)} is shorted: {_ends(part)} are joined by {link}{silent}."


def _exchanged(network: Network, suspicion: Suspicion, slack: float) -> str:
    first, second = (network.part(name) for name in suspicion.parts)
    return f"{_named(first)} and {_named(second)} are exchanged: each stands in the other's place."


def _extra(network: Network, suspicion: Suspicion, slack: float) -> str:
    if suspicion.letter == "R" and (suspicion.amount or 0.0) <= LONGEST_SHORT:
        return f"{suspicion.nodes[0]} is shorted to {_node(suspicion.nodes[1])}."
    unit, a, b = ("ohm", "F")[suspicion.letter == "C"], *suspicion.nodes
    what = _quantity(suspicion.amount or 0.0, unit, slack)
    where = f"from {a} to {_node(b)}"
    if suspicion.kind == "load":
        likely = (
            "a cable or a probe" if suspicion.letter == "C" else "an instrument's input or the next stage"
        )
        return f"The output is loaded with {what} {where} that the circuit does not have, as by {likely}."
    return f"There are {what} {where} that the circuit does not have."


def _scale(network: Network, suspicion: Suspicion, slack: float) -> str:
    factor = suspicion.amount or 0.0
    who = suspicion.parts[0] if suspicion.parts else "every source"
    if abs(factor) < _CLOSE:
        return f"{who} drives nothing: its value for this analysis is missing."
    named = named_factor(suspicion, slack)
    turned = ", turned round," if factor < 0 else ""
    return (
        f"{who}{turned} drives {_times(abs(factor), slack)} as much as in the circuit"
        f"{f': {named}' if named else ''}."
    )


def _impedance(network: Network, suspicion: Suspicion, slack: float) -> str:
    unit = ("ohm", "F")[suspicion.letter == "C"]
    what = _quantity(suspicion.amount or 0.0, unit, slack)
    return f"{suspicion.parts[0]} has {what} in series that the circuit does not have."


def _temperature(network: Network, suspicion: Suspicion, slack: float) -> str:
    heat = suspicion.amount or 0.0
    warmer = "warmer" if heat > 0 else "colder"
    return f"The parts with a temperature coefficient are {abs(heat):.4g} K {warmer} than in the circuit."


def _simulator(network: Network, suspicion: Suspicion, slack: float) -> str:
    unit, option = (("ohm", "rshunt"), ("F", "cshunt"))[suspicion.letter == "C"]
    amount = suspicion.amount or 0.0
    what = _quantity(amount, unit, slack)
    return f"The simulator puts {what} from every node to ground, as its option {option}={amount:.4g} does."


def _misread(suspicion: Suspicion) -> str:
    if suspicion.kind == "node":
        pairs = [
            f"{name} is {'zero' if node == '0' else f'the voltage of {node}'}"
            for name, node in suspicion.renamed
        ]
        return f"In the results {_listed(pairs)}: another node was saved."
    if suspicion.word in AXES:
        return f"The frequencies of the results are not in hertz: {AXES[suspicion.word][1]}."
    who = _listed(list(suspicion.curves)) if suspicion.curves else "Every curve"
    verb = "are each" if len(suspicion.curves) > 1 else "is"
    return f"{who} {verb} {MISREADINGS[suspicion.word].says}."


# ---------------------------------------------------------------------- pieces


def _ends(part: Part) -> str:
    return " and ".join(_node(node) for node in part.nodes[:2])


def _named(part: Part) -> str:
    return f"{part.name} ({format_quantity(part.value, KINDS[part.kind].unit)})"


def _node(name: str) -> str:
    return "ground" if name == "0" else name


def _listed(items: list[str]) -> str:
    if len(items) > 6:
        items = [*items[:6], f"{len(items) - 6} more"]
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} and {items[-1]}"


def _quantity(value: float, unit: str, slack: float = 0.0, factor: float = 0.0) -> str:
    return format_quantity(value, unit, _digits(slack, factor))


def _times(factor: float, slack: float) -> str:
    return f"{factor:.{_digits(slack, factor)}g} times"


def _digits(slack: float, factor: float = 0.0) -> int:
    """As many digits as the data tell, two to five; and as it takes to tell a factor from one."""
    known = math.floor(-math.log10(slack)) if 0 < slack < 1 else (2 if slack else 5)
    beside_one = math.ceil(-math.log10(abs(factor - 1))) + 1 if factor != 1 else 5
    return max(2, min(5, max(known, beside_one if factor else 0)))
