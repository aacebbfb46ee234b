"""Rules about how a netlist is put together: its files, subcircuits, parameters and cards."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator

from ..circuit import Circuit, Parameter, Seen, Subcircuit
from ._telling import few
from .finding import Remark, rule


def _seen(circuit: Circuit, code: str, more: str) -> Iterator[Remark]:
    """What was noticed under a code while the netlist was read. more: see `few`."""

    def tell(each: Seen) -> Remark:
        return Remark(each.message, each.remedy, each.place, each.severity)

    return few([each for each in circuit.seen if each.code == code], tell, more)


# ---------------------------------------------------------------------- commands


@rule("commands-dropped", "warning", of_text=True)
def commands_dropped(circuit: Circuit) -> Iterator[Remark]:
    """A `.control` section was left out: nothing in a netlist is executed.

    An error where it would reach outside the simulation: a shell command, a file written, code loaded.
    """
    yield from _seen(circuit, "commands-dropped", ".control sections were left out")


@rule("hidden-command", "error", of_text=True)
def hidden_command(circuit: Circuit) -> Iterator[Remark]:
    """A line that looks like a comment or a title and is a command: `*#shell ...`, `*ng_script`.

    ngspice carries it out, with the rights of whoever runs it.
    """
    yield from _seen(circuit, "hidden-command", "comments are commands to ngspice")


# ---------------------------------------------------------------------- lines that are not what they seem


@rule("text-behind-end", "warning", of_text=True)
def text_behind_end(circuit: Circuit) -> Iterator[Remark]:
    """Lines behind `.end`: it ends nothing in ngspice 39, and parts there are in the circuit."""
    yield from _seen(circuit, "text-behind-end", "lines stand behind .end")


@rule("include-end", "warning", of_text=True)
def include_end(circuit: Circuit) -> Iterator[Remark]:
    """Lines behind the `.end` of an included file: ngspice 39 reads them all the same."""
    yield from _seen(circuit, "include-end", "lines stand behind the .end of an included file")


@rule("ends-name", "note", of_text=True)
def ends_name(circuit: Circuit) -> Iterator[Remark]:
    """The name behind `.ends` is not that of the subcircuit it closes; ngspice 39 does not look at it."""
    yield from _seen(circuit, "ends-name", "names behind .ends differ")


@rule("encoding", "warning", of_text=True)
def encoding(circuit: Circuit) -> Iterator[Remark]:
    """A file that is no UTF-8 text: its letters outside ASCII may not be the ones that were meant."""
    yield from _seen(circuit, "encoding", "files are not UTF-8")


@rule("include-ambiguous", "warning", of_text=True)
def include_ambiguous(circuit: Circuit) -> Iterator[Remark]:
    """An included file that is there twice: ngspice looks first in the folder that it is started in."""
    yield from _seen(circuit, "include-ambiguous", "included files are there twice")


# ---------------------------------------------------------------------- defined twice, or never used


@rule("duplicate-subcircuit", "error", of_text=True)
def duplicate_subcircuit(circuit: Circuit) -> Iterator[Remark]:
    """A subcircuit that is defined twice: ngspice 39 takes the first, and only its log says so."""
    yield from _seen(circuit, "duplicate-subcircuit", "subcircuits are defined twice")


@rule("duplicate-model", "error", of_text=True)
def duplicate_model(circuit: Circuit) -> Iterator[Remark]:
    """A model that is defined twice: ngspice 39 takes the first without a word."""
    yield from _seen(circuit, "duplicate-model", "models are defined twice")


@rule("duplicate-parameter", "warning", of_text=True)
def duplicate_parameter(circuit: Circuit) -> Iterator[Remark]:
    """A parameter that is defined twice: the last definition wins, and ngspice 39 says nothing."""
    yield from _seen(circuit, "duplicate-parameter", "parameters are defined twice")


@rule("unknown-override", "warning", of_text=True)
def unknown_override(circuit: Circuit) -> Iterator[Remark]:
    """An X gives its subcircuit a parameter that it does not have, maybe misspelt; ngspice 39 ignores it."""
    yield from _seen(circuit, "unknown-override", "parameters are given to subcircuits that do not have them")


@rule("subcircuit-ground", "note", of_text=True)
def subcircuit_ground(circuit: Circuit) -> Iterator[Remark]:
    """A port called `0` or `gnd` is ground inside the subcircuit, whatever the X connects there."""
    yield from _seen(circuit, "subcircuit-ground", "ports are called like ground")


@rule("unused-subcircuit", "warning")
def unused_subcircuit(circuit: Circuit) -> Iterator[Remark]:
    """A subcircuit that no X uses: nothing of it is in the circuit."""

    def tell(each: Subcircuit) -> Remark:
        return Remark(
            f"the subcircuit {each.name!r} is never used, so nothing of it is in the circuit.",
            f"Use it, as X1 {' '.join(each.ports[:8])} {each.name}, or remove it.",
            each.place.at(each.name),
        )

    # A library that is included serves other netlists too.
    own = [
        each
        for each in circuit.subcircuits
        if each.uses == 0 and each.place.file in (circuit.file, circuit.name)
    ]
    yield from few(own, tell, "subcircuits are never used")


@rule("unused-parameter", "note")
def unused_parameter(circuit: Circuit) -> Iterator[Remark]:
    """A parameter on which nothing depends."""
    idle = [each for each in circuit.parameters.values() if not each.parts]
    if not idle:
        return
    # It may serve on the line of a source or of an analysis, or in another parameter.
    text = "\n".join(line for line in circuit.lines if not line.lstrip().startswith("*"))
    words = Counter(re.findall(r"[a-z_]\w*", text.lower()))

    def tell(each: Parameter) -> Remark:
        return Remark(
            f"nothing depends on the parameter {each.name!r}.",
            "Remove it, or write it in braces where its value is meant.",
            each.place.at(each.name),
        )

    own = [each for each in idle if each.place.file in (circuit.file, circuit.name)]
    yield from few([each for each in own if words[each.name] <= 1], tell, "parameters are never used")


# ---------------------------------------------------------------------- values and waveforms


@rule("bare-parameter", "note", of_text=True)
def bare_parameter(circuit: Circuit) -> Iterator[Remark]:
    """A parameter without braces where a value stands: ngspice 39 takes it, and warns of a lacking model."""
    yield from _seen(circuit, "bare-parameter", "parameters stand without braces")


@rule("zero-resistance", "warning", of_text=True)
def zero_resistance(circuit: Circuit) -> Iterator[Remark]:
    """A resistor of 0 ohm: ngspice 39 makes it 1 milliohm without a word."""
    yield from _seen(circuit, "zero-resistance", "resistors have 0 ohm")


@rule("zero-capacitance", "warning", of_text=True)
def zero_capacitance(circuit: Circuit) -> Iterator[Remark]:
    """A capacitor of 0 farad does nothing; ngspice 39 takes it so."""
    yield from _seen(circuit, "zero-capacitance", "capacitors have 0 farad")


@rule("edge-from-step", "warning", of_text=True)
def edge_from_step(circuit: Circuit) -> Iterator[Remark]:
    """A waveform that leaves numbers out: the edges of a `PULSE` without rise and fall last a print step.

    ngspice 39 takes what is missing from the `.tran` line, so another `.tran` makes another waveform.
    """
    yield from _seen(circuit, "edge-from-step", "waveforms take numbers from the .tran line")


@rule("waveform-unknown", "warning", of_text=True)
def waveform_unknown(circuit: Circuit) -> Iterator[Remark]:
    """A waveform that leaves numbers out which only a `.tran` line could fill in, and there is none."""
    yield from _seen(circuit, "waveform-unknown", "waveforms lack numbers")


# ---------------------------------------------------------------------- analyses, options, cards


@rule("second-analysis", "warning", of_text=True)
def second_analysis(circuit: Circuit) -> Iterator[Remark]:
    """A second analysis of one kind: only the first is computed and compared.

    ngspice 39 runs both, and writes the later one first.
    """
    yield from _seen(circuit, "second-analysis", "analyses are not the first of their kind")


@rule("several-temperatures", "warning", of_text=True)
def several_temperatures(circuit: Circuit) -> Iterator[Remark]:
    """Several temperatures on one `.temp` line: ngspice 39 takes none of them, but 27 degrees Celsius."""
    yield from _seen(circuit, "several-temperatures", ".temp lines name several temperatures")


@rule("start-of-no-node", "warning", of_text=True)
def start_of_no_node(circuit: Circuit) -> Iterator[Remark]:
    """A starting voltage (`.ic`) for a node that is not there, often a misspelt one."""
    yield from _seen(circuit, "start-of-no-node", "starting voltages are for nodes that are not there")


@rule("option-changes-circuit", "warning", of_text=True)
def option_changes_circuit(circuit: Circuit) -> Iterator[Remark]:
    """An option that puts parts into the circuit or changes them: `rshunt` adds a resistor to every node.

    A simulator given the netlist as it stands computes another circuit than the one written down.
    """
    yield from _seen(circuit, "option-changes-circuit", "options change the circuit")


@rule("card-kept", "note", of_text=True)
def card_kept(circuit: Circuit) -> Iterator[Remark]:
    """A line such as `.dc`, `.tf` or `.four` that is handed on to a simulator and not computed here."""
    yield from _seen(circuit, "card-kept", "lines are handed on and not computed")


@rule("card-ignored", "note", of_text=True)
def card_ignored(circuit: Circuit) -> Iterator[Remark]:
    """A line such as `.sens` or `.nodeset` that is neither computed nor handed on."""
    yield from _seen(circuit, "card-ignored", "lines are neither computed nor handed on")


@rule("dc-without-number", "warning", of_text=True)
def dc_without_number(circuit: Circuit) -> Iterator[Remark]:
    """The word DC without a number: ngspice 39 takes 0 for the operating point, whatever waveform follows."""
    yield from _seen(circuit, "dc-without-number", "sources say DC and no number")
