"""Silencing: who may silence what, and what is told of a silence that silences nothing."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from rcnet.check import check
from rcnet.circuit import Circuit, Network, Place, Silence, parse_circuit_file
from rcnet.errors import CircuitError, InputError
from rcnet.findings import UNSILENCEABLE_BY_FILE, all_rules, findings, unknown_code, with_silence
from rcnet.handover import sealed_netlist
from rcnet.netlist import parse_netlist

# Two nodes that one part alone touches, at lines 4 and 5.
DANGLING = "* Leak listener\nV1 in 0 AC 1\nR1 in out 1k\nR2 out uot 1k\nR3 out utt 1k\nC1 out 0 1u\n.end\n"
# A group without a path to ground: an error.
FLOATING = "* Pump station\nV1 in 0 AC 1\nR1 in out 1k\nC1 out 0 1u\nR2 x y 1k\nR3 x y 1k\n.end\n"
FILTER = """\
title = "Level gauge: noise filter"
output = "out"
{silence}
[parts]
R1 = "in out 1k"
C1 = "out 0 1u"
R2 = "out uot 1k"
[sources.Vin]
nodes = "in 0"
ac = 1
[[claims]]
says = "Corner"
measure = "cutoff"
equals = "159.15 Hz"
within = "1 %"
hand = "1/(R1*C1)"
"""


def silenced(text: str, *silences: Silence) -> Circuit:
    """A netlist whose comments silence something."""
    return replace(parse_netlist(text, "leak.cir"), silenced=silences)


def filtered(silence: str) -> Circuit:
    """A circuit file with a dangling node and a hand formula that misleads."""
    return parse_circuit_file(FILTER.format(silence=silence), "gauge.rc.toml")


# what is silenced -> the lines of the findings told, and of those silenced
REACH: dict[str, tuple[Silence, list[int | None], list[int | None]]] = {
    "the whole circuit": (Silence("dangling", "leak.cir"), [], [4, 5]),
    "the whole circuit, from another file": (Silence("dangling", "part.inc"), [], [4, 5]),
    "one line": (Silence("dangling", "leak.cir", 4), [5], [4]),
    "one line of whichever file": (Silence("dangling", None, 5), [4], [5]),
    "another line": (Silence("dangling", "leak.cir", 3), [4, 5], []),
    "that line of another file": (Silence("dangling", "part.inc", 4), [4, 5], []),
    "another rule": (Silence("floating", "leak.cir"), [4, 5], []),
    "from the command line": (Silence("dangling", trusted=True), [], [4, 5]),
}


@pytest.mark.parametrize("case", REACH)
def test_what_a_silence_reaches(case: str) -> None:
    """Its own code, in the whole circuit or at its file and line; none where nothing is found."""
    silence, told, hushed = REACH[case]
    circuit = silenced(DANGLING, silence)
    done = check(circuit)
    assert [finding.line for finding in done.findings] == told
    assert [finding.line for finding in done.silenced] == hushed
    assert findings(circuit) == done.findings
    assert {finding.code for finding in (*done.findings, *done.silenced)} == {"dangling"}


def test_a_silenced_error_no_longer_counts() -> None:
    """Verdict and strictness are those of what is told."""
    loud, quiet = check(silenced(FLOATING)), check(silenced(FLOATING, Silence("floating", "leak.cir")))
    assert (loud.verdict, len(loud.errors), loud.silenced) == ("fails", 1, ())
    assert (quiet.verdict, quiet.errors, len(quiet.silenced)) == ("holds", (), 1)
    dangling = check(silenced(DANGLING, Silence("dangling", "leak.cir")))
    assert dangling.passes(strict=True)
    assert not check(silenced(DANGLING)).passes(strict=True)


def test_findings_about_hand_formulas_are_silenced_too() -> None:
    """Those that are made where claims are judged obey like every other."""
    assert [finding.code for finding in check(filtered("")).findings] == ["dangling", "hand-misleads"]
    done = check(filtered('silence = ["hand-misleads"]'))
    assert [finding.code for finding in done.findings] == ["dangling"]
    assert [finding.code for finding in done.silenced] == ["hand-misleads"]


# ---------------------------------------------------------------------- a file against its reader


def broken_seal() -> str:
    """A sealed netlist that was changed behind its seal."""
    network = Network("Flow meter")
    network.add_voltage_source("V1", "in", "0", ac=1)
    network.add_resistor("R1", "in", "out", "1k")
    network.add_capacitor("C1", "out", "0", "1u")
    text = sealed_netlist(Circuit(network, output=("out",))).text
    assert "R1 in out 1000" in text
    return text.replace("R1 in out 1000", "R1 in out 1001")


def test_what_protects_the_reader_no_file_can_silence() -> None:
    """A file that says its broken seal is of no interest is told of all the same; its reader may say so."""
    assert {"seal-broken", "sealed-despite-errors", "commands-dropped", "hidden-command"} == (
        UNSILENCEABLE_BY_FILE
    )
    own = silenced(broken_seal(), Silence("seal-broken", "leak.cir"), Silence("seal-broken", "leak.cir", 9))
    assert [finding.code for finding in check(own).errors] == ["seal-broken"]
    assert check(own).silenced == ()
    trusted = check(with_silence(own, ["seal-broken"]))
    assert (trusted.errors, [finding.code for finding in trusted.silenced]) == ((), ["seal-broken"])


# ---------------------------------------------------------------------- rules that there are not


def test_a_silence_of_no_rule_is_a_warning_at_its_place() -> None:
    """A slip of the pen would silence nothing without a word; the nearest rule is named."""
    place = Place("leak.cir", 4, "R2 out uot 1k ; rcnet: silence dangle", 32, 6)
    found = check(silenced(DANGLING, Silence("dangle", "leak.cir", 4, place=place))).findings
    (finding,) = [each for each in found if each.code == "unknown-silence"]
    assert finding.severity == "warning"
    assert finding.message == "No rule is called 'dangle'; did you mean 'dangling'?"
    assert (finding.file, finding.line, finding.text) == ("leak.cir", 4, place.text)
    assert (finding.column, finding.width) == (32, 6)
    assert len(found) == 3


def test_a_word_that_is_like_no_rule() -> None:
    """No rule is proposed where none is near, however long the word."""
    assert unknown_code("dangling") is None
    assert unknown_code("qqq") == "No rule is called 'qqq'."
    assert len(unknown_code("q" * 10_000) or "") < 100


def test_thousands_of_unknown_rules_take_no_time() -> None:
    """A stranger's file may name any number of them; the first fifty are told."""
    done = check(silenced(DANGLING, *(Silence(f"dangle-{number}", "leak.cir") for number in range(20_000))))
    assert sum(finding.code == "unknown-silence" for finding in done.findings) == 50


@pytest.mark.parametrize("code", ["hand-misleads", "hand-fails", "unknown-silence"])
def test_findings_made_elsewhere_are_rules_too(code: str) -> None:
    """Whatever may be found is listed among the rules, and so can be silenced."""
    assert code in {each.code for each in all_rules()}


# ---------------------------------------------------------------------- from the command line


def test_with_silence() -> None:
    """The reader's silences are added, trusted; the circuit given is not changed."""
    circuit = silenced(DANGLING, Silence("floating", "leak.cir"))
    more = with_silence(circuit, ["dangling", "seal-broken"])
    assert [(each.code, each.trusted) for each in more.silenced] == [
        ("floating", False),
        ("dangling", True),
        ("seal-broken", True),
    ]
    assert len(circuit.silenced) == 1
    assert with_silence(circuit, []) is circuit
    with pytest.raises(InputError, match="did you mean 'dangling'") as caught:
        with_silence(circuit, ["dangle"])
    assert "--rules" in (caught.value.remedy or "")


# ---------------------------------------------------------------------- from the circuit file


def test_the_circuit_file_names_rules() -> None:
    """`silence` holds for the whole circuit and is not trusted; each code knows where it stands."""
    circuit = filtered('silence = ["dangling",\n  "off-by-one"]')
    first, second = circuit.silenced
    assert first == Silence(
        "dangling", "gauge.rc.toml", place=Place("gauge.rc.toml", 3, 'silence = ["dangling",', 13, 8)
    )
    assert second.place == Place("gauge.rc.toml", 4, '  "off-by-one"]', 4, 10)
    done = check(circuit)
    assert [finding.code for finding in done.findings] == ["unknown-silence", "hand-misleads"]
    assert [finding.code for finding in done.silenced] == ["dangling"]
    assert filtered("").silenced == filtered("silence = []").silenced == ()


BAD = {
    "a word": ('silence = "dangling"', r"silence is 'dangling', not a list of texts\."),
    "a number among words": ('silence = ["dangling", 1]', r"silence is \['dangling', 1\], not a list"),
    "true": ("silence = true", r"silence is True, not a list of texts\."),
    "a table": ("silence = { dangling = true }", r"silence is \{'dangling': True\}, not a list"),
}


@pytest.mark.parametrize("case", BAD)
def test_a_silence_that_is_no_list(case: str) -> None:
    """One message with the line and what to write."""
    text, says = BAD[case]
    with pytest.raises(CircuitError) as caught:
        filtered(text)
    (problem,) = caught.value.problems
    assert re.match(says, problem.message)
    assert (problem.file, problem.line) == ("gauge.rc.toml", 3)
    assert 'silence = ["dangling"]' in (problem.remedy or "")
