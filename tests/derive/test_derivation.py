"""Derivations as a whole: the normalised form, asymptotes, every starter, and what cannot be derived."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from typing import Any

import jsonschema
import pytest
import sympy

import rcnet
from rcnet.circuit import Network
from rcnet.derive import Derivation, derive
from rcnet.errors import CircuitError, UnsolvableError
from rcnet.report.derivation import derivation_lines
from rcnet.report.derivation_document import derivation_document
from rcnet.report.document import to_json
from rcnet.resources import starters
from rcnet.values import parse_expression

Build = Callable[..., Network]
STARTERS = starters()

ROOT = {
    "type": "object",
    "required": ["real", "imag", "frequency", "time_constant", "q", "count", "share"],
    "additionalProperties": False,
    "properties": {
        "real": {"type": "number"},
        "imag": {"type": "number"},
        "frequency": {"type": "number"},
        "time_constant": {"type": ["number", "null"]},
        "q": {"type": ["number", "null"]},
        "count": {"type": "integer", "minimum": 1},
        "share": {"type": ["number", "null"]},
    },
}
NUMBER = {
    "type": "object",
    "required": ["name", "text", "tex", "value", "power"],
    "additionalProperties": False,
    "properties": {
        "name": {"type": "string"},
        "text": {"type": "string"},
        "tex": {"type": "string"},
        "value": {"type": ["number", "null"]},
        "power": {"type": "integer"},
    },
}
RESULT = {
    "type": "object",
    "required": [
        *("rule", "formula", "tex", "assumes", "holds", "because", "stands_for", "unit", "value", "exact"),
        *("error", "error_unit", "why", "source", "where"),
    ],
    "additionalProperties": False,
    "properties": {
        **{
            key: {"type": "string"}
            for key in ("rule", "formula", "tex", "assumes", "because", "stands_for", "source", "where")
        },
        "holds": {"type": "boolean"},
        "unit": {"enum": ["Hz", "s", "V", "1", "dB"]},
        "value": {"type": "number"},
        "exact": {"type": ["number", "null"]},
        "error": {"type": ["number", "null"]},
        "error_unit": {"enum": ["%", "dB"]},
        "why": {"type": ["string", "null"]},
    },
}
SCHEMA = {
    "type": "object",
    "additionalProperties": False,
    "required": [
        *("circuit", "of", "source", "transfer_function", "transfer_function_why", "gain", "origin", "poles"),
        *("poles_left_out", "poles_why", "zeros", "zeros_why", "cancelled", "hidden", "asymptotes", "corner"),
        *("approximations", "rules"),
    ],
    "properties": {
        "circuit": {"type": "string"},
        "of": {"type": "string"},
        "source": {"type": "string"},
        "transfer_function": {
            "oneOf": [
                {"type": "null"},
                {
                    "type": "object",
                    "required": ["text", "tex", "origin", "gain", "numerator", "denominator"],
                    "additionalProperties": False,
                    "properties": {
                        "text": {"type": "string"},
                        "tex": {"type": "string"},
                        "origin": {"type": "integer"},
                        "gain": NUMBER,
                        "numerator": {"type": "array", "items": NUMBER},
                        "denominator": {"type": "array", "items": NUMBER},
                    },
                },
            ]
        },
        "transfer_function_why": {"type": ["string", "null"]},
        "gain": {"type": ["number", "null"]},
        "origin": {"type": ["integer", "null"]},
        "poles": {"oneOf": [{"type": "null"}, {"type": "array", "items": ROOT}]},
        "poles_left_out": {"type": "integer"},
        "poles_why": {"type": ["string", "null"]},
        "zeros": {"oneOf": [{"type": "null"}, {"type": "array", "items": ROOT}]},
        "zeros_why": {"type": ["string", "null"]},
        "cancelled": {
            "type": "array",
            "items": {"type": "object", "required": ["pole", "zero", "apart"], "additionalProperties": True},
        },
        "hidden": {"type": "array", "items": ROOT},
        "asymptotes": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["end", "power", "slope", "coefficient", "text", "tex"],
                "properties": {"end": {"enum": ["low", "high"]}},
            },
        },
        "corner": {"type": ["number", "null"]},
        "approximations": {"type": "array", "items": RESULT},
        "rules": {"type": "array", "items": RESULT},
    },
}


@pytest.fixture(scope="module")
def done() -> dict[str, Derivation]:
    """Every starter derived once."""
    return {name: derive(rcnet.load(path)) for name, path in STARTERS.items()}


@pytest.mark.parametrize("name", sorted(STARTERS))
def test_documents_follow_the_schema(done: dict[str, Derivation], name: str) -> None:
    """The JSON of every starter has just the keys it promises."""
    document = json.loads(to_json(derivation_document(done[name])))

    jsonschema.Draft202012Validator(SCHEMA).validate(document)
    assert document["rules"]


@pytest.mark.parametrize("name", sorted(STARTERS))
@pytest.mark.parametrize("width", [80, 60])
def test_lines_fit(done: dict[str, Derivation], name: str, width: int) -> None:
    """Every line fits, and none ends in a blank."""
    lines = [text for text, _ in derivation_lines(done[name], width)]

    assert [line for line in lines if len(line) > width] == []
    assert all(line == line.rstrip() for line in lines)


@pytest.mark.parametrize("name", sorted(STARTERS))
def test_formulas_are_hand_formulas(done: dict[str, Derivation], name: str) -> None:
    """What a rule writes in part names can be put behind `hand =` in the file, and gives its value."""
    network = done[name].circuit.network
    known = {**network.values, "T": done[name].circuit.conditions.nominal + 273.15}
    read = 0
    for result in done[name].rules:
        if "..." in result.formula or "half power" in result.formula or " over " in result.formula:
            continue
        if result.where:
            continue
        read += 1
        assert parse_expression(result.formula).evaluate(known) == pytest.approx(result.value, rel=1e-9)
    assert read


@pytest.mark.parametrize("name", sorted(STARTERS))
def test_errors_are_those_of_the_values(done: dict[str, Derivation], name: str) -> None:
    """An error is (value - exact)/exact in per cent, or the difference in decibels."""
    for result in (*done[name].rules, *done[name].approximations):
        if result.exact:
            wanted = (
                result.value - result.exact
                if result.unit == "dB"
                else 100 * (result.value - result.exact) / abs(result.exact)
            )
            assert result.error == pytest.approx(wanted, rel=1e-12, abs=1e-12)
        assert result.because.endswith(".")


def names_of(network: Network) -> dict[str, sympy.Symbol]:
    """The parts as sympy's symbols."""
    return {name: sympy.Symbol(name, positive=True) for name in network.values}


SMALL = {
    "loaded": ["R1 in out 4k7", "C1 out 0 10n", "Rload out 0 100k"],
    "ladder": ["R1 in a 4k7", "C1 a 0 10n", "R2 a out 10k", "C2 out 0 4n7"],
    "band": ["C1 in a 100n", "R1 a 0 15k", "R2 a out 10k", "C2 out 0 10n"],
    "lead": ["R1 in out 10k", "C1 in out 1n", "R2 out 0 1k"],
    "bridged": ["R1 in a 1k", "R2 a out 2k", "C2 a 0 1u", "C1 in out 3n"],
}


@pytest.mark.parametrize("which", SMALL)
def test_normalised_form(network: Build, which: str) -> None:
    """The normalised form is sympy's solution of the nodal equations, in names and in numbers."""
    made = network(*SMALL[which])
    form = derive(made).function
    assert form is not None
    symbols = names_of(made)
    s = sympy.Symbol("s")

    def written(number: Any) -> Any:
        return sympy.sympify(number.text, locals=symbols)

    def series(numbers: Any) -> Any:
        return 1 + sum((written(n) * s**n.power for n in numbers), sympy.Integer(0))

    ours = written(form.gain) * s**form.origin * series(form.numerator) / series(form.denominator)
    assert sympy.simplify(ours - by_sympy(made, symbols, s)) == 0
    for number in (form.gain, *form.numerator, *form.denominator):
        value = written(number).subs({symbols[n]: sympy.Rational(v) for n, v in made.values.items()})
        assert number.value == pytest.approx(float(value), rel=1e-12)


def by_sympy(network: Network, symbols: dict[str, sympy.Symbol], s: sympy.Symbol) -> Any:
    """v(out) for one volt at `in`, from Kirchhoff's current law."""
    free = {node: sympy.Symbol(f"v_{node}") for node in network.nodes if node not in ("0", "in")}
    volts = {"0": sympy.Integer(0), "in": sympy.Integer(1), **free}
    balance = dict.fromkeys(free, sympy.Integer(0))
    for part in network.parts:
        if part.kind in "RC":
            y = 1 / symbols[part.name] if part.kind == "R" else s * symbols[part.name]
            a, b = part.nodes
            for here, there in ((a, b), (b, a)):
                if here in balance:
                    balance[here] += y * (volts[here] - volts[there])
    return sympy.solve(list(balance.values()), list(free.values()), dict=True)[0][free["out"]]


@pytest.mark.parametrize("which", SMALL)
def test_tex_names_every_part(network: Build, which: str) -> None:
    """The TeX has balanced braces and as many powers of s as the text."""
    form = derive(network(*SMALL[which])).function
    assert form is not None

    for tex in (form.tex, *(n.tex for n in (form.gain, *form.numerator, *form.denominator))):
        depth = 0
        for c in re.sub(r"\\[{}]", "", tex):
            depth += {"{": 1, "}": -1}.get(c, 0)
            assert depth >= 0
        assert depth == 0
        assert tex.count(r"\left(") == tex.count(r"\right)")


def test_asymptotes(network: Build) -> None:
    """Far down and far up a band follows C1 R1 omega and 1/(omega R2 C2); they meet at the centre."""
    done = derive(network(*SMALL["band"]))
    low, high = done.asymptotes

    assert (low.slope, high.slope) == (20, -20)
    assert low.coefficient == pytest.approx(15e3 * 100e-9, rel=1e-12)
    assert high.coefficient == pytest.approx(1 / (10e3 * 10e-9), rel=1e-12)
    assert (low.text, high.text) == ("C1*R1", "1/(C2*R2)")
    # C1 R1 w = 1/(C2 R2 w)
    assert done.corner == pytest.approx((15e3 * 100e-9 * 10e3 * 10e-9) ** -0.5 / 6.283185307179586, rel=1e-12)


def test_level_lines_do_not_meet(network: Build) -> None:
    """A lead is level at both ends: no corner of the lines."""
    done = derive(network(*SMALL["lead"]))

    assert [line.slope for line in done.asymptotes] == [0, 0]
    assert done.corner is None


def test_pair_as_output(network: Build) -> None:
    """A lattice between two nodes: (1 - x)/(1 + x), an all-pass with a zero in the right half plane."""
    made = network("R1 in p 1k", "C1 p 0 1u", "C2 in n 1u", "R2 n 0 1k")
    done = derive(made, "p n")

    assert done.of == "p n"
    assert done.roots is not None
    assert done.roots.zeros is not None
    assert [root.s.real for root in done.roots.zeros] == [pytest.approx(1000, rel=1e-12)]
    assert [root.s.real for root in done.roots.poles] == [pytest.approx(-1000, rel=1e-12)]
    assert done.roots.cancelled[0].pole == pytest.approx(-1000, rel=1e-9)


def test_beyond_the_symbols(network: Build) -> None:
    """Beyond the limit of parts the reason is told; poles, zeros and rules are there all the same."""
    made = network()
    made.add_ladder("in", "out", [t for k in range(15) for t in (f"series R{k} 1k", f"shunt C{k} 1n")])
    done = derive(made)

    assert done.function is None
    assert "30 parts" in (done.function_why or "")
    assert done.roots is not None
    assert len(done.roots.poles) == 15
    assert done.rules


def test_sources_without_ac(network: Build) -> None:
    """A waveform, or else being the only source, is enough to be the driving one."""
    stepped = network("R1 in out 1k", "C1 out 0 1u", ac=None, step={"from": 0, "to": 1})
    plain = network("R1 in out 1k", "C1 out 0 1u", ac=None, dc=5)

    for made in (stepped, plain):
        assert derive(made).source == "Vgauge"


def test_what_cannot_be_derived(network: Build) -> None:
    """No source, two sources, no output, unknown nodes, ground as output: one sentence each."""
    quiet = Network()
    quiet.add_resistor("R1", "out", "0", 1)
    two = network("R1 in out 1k", "C1 out 0 1u")
    two.add_voltage_source("Vpump", "out", "0", ac=1)
    cases = [
        (quiet, None, "no source"),
        (two, None, "2 sources carry ac: Vgauge, Vpump"),
        (network("R1 in a 1k", "C1 a 0 1u"), None, "names no output"),
        (network("R1 in out 1k", "C1 out 0 1u"), "nowhere", "no node called 'nowhere'"),
        (network("R1 in out 1k", "C1 out 0 1u"), "0", "always at zero volts"),
    ]
    for made, of, says in cases:
        with pytest.raises(CircuitError, match=says) as caught:
            derive(made, of)
        assert caught.value.remedy


def test_unsolvable(network: Build) -> None:
    """A node that nothing ties to ground is refused as everywhere."""
    with pytest.raises(UnsolvableError):
        derive(network("R1 in out 1k", "C1 out 0 1u", "R2 x y 1"))


def test_silent_output(network: Build) -> None:
    """Where nothing of the source arrives there is nothing to derive, and that is told."""
    done = derive(network("R1 in a 1k", "C1 a 0 1u", "R2 out 0 1k", "C2 out 0 1u"))

    assert "nothing of the source arrives" in (done.function_why or "")
    assert done.rules == ()
    assert list(derivation_lines(done, 80))


def test_growing_response(network: Build) -> None:
    """A current into a capacitor has a pole at zero: no rule about a passband, no crash."""
    done = derive(network("C1 out 0 1u", drive=("0", "out"), kind="I"))

    assert done.roots is not None
    assert done.roots.origin == -1
    assert list(derivation_lines(done, 80))


def test_extreme_values(network: Build) -> None:
    """Parts at the ends of what a double holds end in numbers or sentences, never in a traceback."""
    for r, c in ((1e-300, 1e-300), (1e300, 1e300), (1e300, 1e-300)):
        made = network("R1 in a 1k", "C1 a 0 1u")
        made.add_resistor("R2", "a", "out", r)
        made.add_capacitor("C2", "out", "0", c)
        done = derive(made)
        assert json.loads(to_json(derivation_document(done)))
        assert list(derivation_lines(done, 80))


def test_long_names_wrap(network: Build) -> None:
    """Formulas of long part names break behind a sign, so that lines fit."""
    long = "Rfloat_gauge_of_the_upper_reservoir"
    made = network(
        f"{long}1 in a 1k", "C1 a 0 1u", f"{long}2 a out 1k", "Cfloat_gauge_of_the_reservoir out 0 1u"
    )

    assert max(len(text) for text, _ in derivation_lines(derive(made), 80)) <= 80
