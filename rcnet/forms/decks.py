"""Decks: a circuit put into a template, checked and sealed."""

from __future__ import annotations

import itertools
import re
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from ..check import Check, check
from ..circuit import Analyses, Circuit, Network, Sweep
from ..errors import CircuitError, InputError, RcnetError
from ..exact import dc_solvable
from ..handover import (
    chosen_sweep,
    chosen_transient,
    facts,
    header,
    one_measured,
    require_sound,
    with_analyses,
)
from ..measuring import measure_lines
from ..netlist import Names, Written, find_seal, network_of, parse_netlist, seal_comments
from ..netlist.decks import render_deck, template_names, template_path, used_variables
from ..netlist.portable import ascii_text
from ..netlist.round_trip import network_differences
from ..netlist.samples import Samples, sample_differences, samples
from ..netlist.writer import AnalysisName, Sheet, asked_lines, comment_lines, setting_lines, sheet, wrap
from ..resources import netlist_templates

# A template's variable, which is a field of `Analyses` -> the analysis it holds, and what that is called.
_ASKED: dict[str, tuple[AnalysisName, str]] = {
    "ac": ("ac", "ac sweep"),
    "transient": ("transient", "transient"),
    "noise": ("noise", "noise analysis"),
    "operating_point": ("operating point", "operating point"),
}
_NOISE_PER_DECADE = 10


def deck_templates(folders: Sequence[Path] = ()) -> dict[str, str]:
    """What templates there are, one's own before the shipped ones, each with what it says of itself."""
    return template_names([*folders, netlist_templates()])


def sealed_deck(
    circuit: Circuit | Network,
    template: str,
    done: Check | None = None,
    *,
    folders: Sequence[Path] = (),
    sample_count: int | None = None,
    anyway: bool = False,
    portable: bool = False,
    measures: bool = False,
) -> str:
    """The checked deck that a template makes of a circuit, with its seal.

    folders: of one's own templates, looked at before the shipped ones; sample_count: how many copies with
    values within the tolerances the deck is to hold, None for the circuit itself; else as `sealed_netlist`
    Raises InputError for a template that cannot be read or fails, and where its deck, read back, does not
    hold the circuit bit for bit; CircuitError for a circuit that lacks what the template needs.
    """
    places = [*folders, netlist_templates()]
    path = template_path(template, places)
    used = used_variables(template, places)
    whole, notes, missing = _asked_for(network_of(circuit), used, measures=measures)
    done = done or check(with_analyses(circuit))
    require_sound(done, anyway=anyway)
    made = sheet(whole, portable=portable, measured=measures)
    drawn = None if sample_count is None else samples(made.circuit, made.names, sample_count)
    names = made.names if drawn is None else _of_the_first(made.names, made.circuit, drawn)
    about = [*header(whole, Written("", made.names, made.circuit)), *notes]
    values = _values(made, about, used, drawn, portable=portable, measures=measures)
    try:
        text = render_deck(template, places, values)
    except InputError as exc:
        raise _why_missing(exc, missing) from exc
    back = _read_back(text, path, made, drawn)
    comments = seal_comments(back, facts(whole, done, names))
    return _with_seal(text, [ascii_text(each) if portable else each for each in comments], path)


def _asked_for(
    circuit: Circuit, used: set[str], *, measures: bool
) -> tuple[Circuit, list[str], dict[str, str]]:
    """The circuit with the analyses a template prints; what was chosen; why others cannot be had."""
    wanted = with_analyses(circuit).analyses if "analyses" in used else Analyses()
    notes = ["The analyses were chosen by rcnet."] if wanted.chosen else []
    missing: dict[str, str] = {}
    for variable, (_, said) in _ASKED.items():
        if variable not in used or getattr(wanted, variable):
            continue
        value = getattr(circuit.analyses, variable)
        if not value:
            try:
                value = _chosen(circuit, variable)
            except CircuitError as exc:
                missing[variable] = exc.message
                continue
            notes.append(f"The circuit asks for no {said}; the one below was chosen by rcnet.")
        wanted = replace(wanted, **{variable: value})
    asked = replace(circuit, analyses=replace(wanted, chosen=False))
    if "analyses" not in used:
        asked = replace(asked, requests=())
    return (one_measured(asked) if measures else asked), notes, missing


def _chosen(circuit: Circuit, variable: str) -> Any:
    """An analysis for a circuit that asks for none of that kind. Raises CircuitError where it has none."""
    sources = circuit.network.sources.values()
    if variable in ("ac", "noise"):
        if not any(source.ac for source in sources):
            raise CircuitError("no source carries ac")
        sweep = circuit.analyses.ac or chosen_sweep(circuit)
        return sweep if variable == "ac" else Sweep(sweep.start, sweep.stop, _NOISE_PER_DECADE)
    if variable == "transient" and all(source.waveform is None for source in sources):
        raise CircuitError("no source has a waveform")
    if not dc_solvable(circuit.network):
        raise CircuitError("the circuit has no steady state to start from")
    return chosen_transient(circuit.network) if variable == "transient" else True


def _why_missing(error: InputError, missing: dict[str, str]) -> InputError:
    """The error of a template that uses an analysis the circuit cannot have, told in terms of the circuit."""
    found = re.search(r"'(\w+)' is undefined", error.message)
    if found is None or found[1] not in missing:
        return error
    return CircuitError(
        f"the template asks for the {_ASKED[found[1]][1]}, but {missing[found[1]]}.",
        file=error.file,
        line=error.line,
        remedy="Choose another template, or add to the circuit what is missing.",
    )


def _values(
    made: Sheet, about: list[str], used: set[str], drawn: Samples | None, *, portable: bool, measures: bool
) -> dict[str, Any]:
    """What a template can print: checked text, and tuples of it."""
    held, names = made.circuit, made.names
    texts = [ascii_text(text) if portable else text for text in about]
    values: dict[str, Any] = {
        "title": made.title,
        "header": (*(line for text in texts for line in comment_lines(text)), *made.remarks),
        "body": tuple(made.body),
        "settings": tuple(setting_lines(held)),
        "saved": tuple(made.saved),
        "analyses": tuple(made.analyses),
        "measures": tuple(measure_lines(held, names)) if measures else (),
        "output": tuple(names.nodes[node] for node in held.output if node in names.nodes),
        "nodes": tuple(names.nodes.values()),
        "parts": tuple(names.parts.values()),
        "portable": portable,
        "samples": (),
    }
    for variable, (analysis, _) in _ASKED.items():
        if variable in used and getattr(held.analyses, variable):
            values[variable] = tuple(asked_lines(held, names, analysis, portable=portable))
    if drawn is not None:
        values |= {
            "definition": tuple(drawn.definition),
            "sources": tuple(drawn.sources),
            "samples": tuple(drawn.instances),
        }
        if "ac" in values:
            values["ac"] = tuple(_sampled_sweep(made, drawn))
    return values


def _sampled_sweep(made: Sheet, drawn: Samples) -> list[str]:
    """The sweep, with every copy's output saved and printed."""
    sweep = [line for line in asked_lines(made.circuit, made.names, "ac") if not line.startswith(".print")]
    shown = [f"v({','.join(nodes)})" for nodes in drawn.outputs]
    saved = dict.fromkeys(f"v({node})" for nodes in drawn.outputs for node in nodes)
    return [*sweep, *wrap(f".save {' '.join(saved)}"), *wrap(f".print ac {' '.join(shown)}")]


def _of_the_first(names: Names, circuit: Circuit, drawn: Samples) -> Names:
    """The names as they are for the copy with the nominal values."""
    return Names({**names.nodes, **dict(zip(circuit.output, drawn.outputs[0], strict=True))}, names.parts)


def _read_back(text: str, path: Path, made: Sheet, drawn: Samples | None) -> Circuit:
    """A template's deck, read. Raises InputError unless it holds the circuit."""
    if find_seal(text.split("\n")) is not None:
        raise InputError("the template writes a seal of its own.", file=str(path), remedy="Take it out.")
    try:
        back = parse_netlist(text, "the deck")
    except RcnetError as exc:
        raise InputError(
            f"what the template makes cannot be read: {exc.problems[0].message}",
            file=str(path),
            remedy=exc.remedy,
        ) from exc
    found = (
        network_differences(made.circuit, made.names, back)
        if drawn is None
        else sample_differences(drawn, made.circuit, made.names, back)
    )
    for what in itertools.islice(found, 1):
        raise InputError(
            f"the template alters the circuit: {what} is not in its deck as it should be.",
            file=str(path),
            remedy="Print the lines of `body`, all of them and nothing between that is a part or a setting.",
        )
    return back


def _with_seal(text: str, comments: Sequence[str], path: Path) -> str:
    """The deck with its seal behind the comments under its title."""
    lines = text.split("\n")
    first = next((k for k, line in enumerate(lines) if k and not line.startswith("*")), len(lines))
    if lines[first].startswith("+"):
        raise InputError(
            "the deck goes on behind its title.", file=str(path), remedy="Begin a line of its own."
        )
    seal = [line for comment in comments for line in comment_lines(comment)]
    return "\n".join([*lines[:first], *seal, *lines[first:]])
