"""Rules that a netlist breaks so badly that it is not read: what the codes of refusals mean."""

from __future__ import annotations

from ..circuit import Circuit
from .finding import Remark, rule

# code -> what it is about, and what a simulator does where that is the reason (measured on ngspice 39).
ABOUT: dict[str, str] = {
    "value-missing": (
        "A part without a value: ngspice 39 takes 1 milliohm for a resistor and 0 for a capacitor, "
        "with exit code 0."
    ),
    "node-missing": (
        "A part with too few nodes: ngspice 39 takes its value for a node's name, with exit code 0."
    ),
    "second-value": (
        "A second number behind a value: ngspice 39 takes the last, so that `1k 5` is 5 and `1k 1%` is 1, "
        "with exit code 0."
    ),
    "not-linear": (
        "A part that is not linear, as a diode or a transistor; the linear part can be read on its own."
    ),
    "not-a-part": (
        'A line that begins no part. One that begins with any of = [ ] ? ( ) & % $ " ! : , ; is passed over '
        "by ngspice 39 with a warning and exit code 0, and what it says is not in the circuit."
    ),
    "name-twice": "Two parts of one name, which is one name whatever its capitals; ngspice refuses them too.",
    "model-unknown": "A model that the netlist does not define, or defines for another kind of part.",
    "pin-count": "An X with more or fewer nodes than its subcircuit has ports; ngspice refuses it too.",
    "parameter-undefined": "A name in an expression that no `.param` defines, often a misspelt one.",
    "parameter-cycle": "Parameters that are defined by one another, so that none of them has a value.",
    "parameter-random": (
        "A random number in an expression (`gauss`, `agauss`, `unif`, `limit`): to ngspice it is another "
        "circuit at each run, so that no two answers are about the same one."
    ),
    "subcircuit-unknown": "An X whose subcircuit is defined nowhere in the netlist or the files it includes.",
    "subcircuit-recursion": "A subcircuit that contains itself, so that the circuit would never end.",
    "subcircuit-open": "A `.subckt` without its `.ends`.",
    "include-outside": (
        "An included file outside the netlist's own folder and the folders granted by `--allow`: ngspice "
        "reads any file, and tells a line of it in its error message."
    ),
    "include-missing": (
        "An included file that is not there, or is no file: ngspice takes a folder for an empty file."
    ),
    "include-recursion": "A file that includes itself, directly or by others: ngspice 39 crashes.",
    "section-missing": "A section of a library (`.lib FILE SECTION`) that the file does not have.",
    "card-unknown": "A line that begins with a dot and a word that rcnet does not know.",
    "analysis-unreadable": "An analysis whose numbers are missing, in excess, or no numbers.",
    "unreadable": "A line that cannot be understood.",
    "limit": (
        "A stated limit is exceeded: of size, length, nesting, expansion or points. It keeps a stranger's "
        "file from taking all memory and time, and can be raised."
    ),
}


def _register(code: str, about: str) -> None:
    def look(_: Circuit) -> tuple[Remark, ...]:
        # The reader refuses such a netlist, so no circuit ever has one.
        return ()

    look.__doc__ = about
    rule(code, "error")(look)


for _code, _about in ABOUT.items():
    _register(_code, _about)
