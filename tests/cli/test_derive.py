"""`rcnet derive`: what it prints, what it writes, how it ends."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from pathlib import Path

import pytest

from rcnet.resources import starters

from .conftest import FILTER, Ended, circuit

Rcnet = Callable[..., Ended]


def test_derives_a_circuit_file(rcnet: Rcnet) -> None:
    """One section: formula, pole and the corner of paper, 1/(2 pi 10 kohm 10 nF) = 1591.549 Hz."""
    ended = rcnet("derive", circuit())

    assert (ended.code, ended.err) == (0, "")
    assert "float-gauge: v(out) per volt of Vin" in ended.out
    assert "H = (1) / (1 + s*C1*R1)" in ended.out
    assert "a1 = C1*R1 = 100 us" in ended.out
    assert "= 1/(2*pi*R1*C1)" in ended.out
    assert "1.592 kHz" in ended.out
    assert all(len(line) <= 80 and line == line.rstrip() for line in ended.out.splitlines())
    assert "\x1b" not in ended.out


def test_json(rcnet: Rcnet) -> None:
    """With --json standard output is one document, of the same content."""
    ended = rcnet("derive", "--json", circuit())
    document = json.loads(ended.out)

    assert ended.code == 0
    assert document["transfer_function"]["tex"] == r"\frac{1}{1 + C_{1} \, R_{1} s}"
    assert document["poles"][0]["real"] == pytest.approx(-1e4, rel=1e-12)
    (corner,) = [r for r in document["rules"] if r["rule"] == "corner of one section"]
    assert corner["value"] == pytest.approx(1591.5494309189535, rel=1e-12)
    assert corner["holds"] is True


def test_quiet(rcnet: Rcnet) -> None:
    """With --quiet there is one line."""
    ended = rcnet("derive", "--quiet", circuit())

    assert ended.code == 0
    assert re.fullmatch(r"float-gauge: 1 pole, 0 zeros; \d+ of \d+ rules of thumb hold\n", ended.out)


@pytest.mark.parametrize("suffix", [".json", ".md", ".tex"])
def test_output(rcnet: Rcnet, suffix: str) -> None:
    """-o writes a document of the kind its suffix names, and then prints nothing."""
    ended = rcnet("derive", circuit(), "-o", f"paper{suffix}")
    text = Path(f"paper{suffix}").read_text(encoding="utf-8")

    assert (ended.code, ended.out, ended.err) == (0, "", "")
    if suffix == ".json":
        assert json.loads(text)["source"] == "Vin"
    else:
        assert r"\frac{1}{1 + a_{1} \, s}" in text
        assert "corner of one section" in text
    if suffix == ".tex":
        assert text.count(r"\begin{") == text.count(r"\end{")
    if suffix == ".md":
        rows = [line for line in text.splitlines() if line.startswith("|")]
        assert rows
        assert {len(re.findall(r"(?<!\\)\|", row)) for row in rows} <= {6, 9}


def test_other_output_node(rcnet: Rcnet) -> None:
    """--of names another output, also as v(a) and in any case in a netlist."""
    Path("gauge.cir").write_text(
        "* gauge\nVin in 0 ac 1\nR1 in a 1k\nC1 a 0 1u\nR2 a out 1k\nC2 out 0 1u\n.print ac v(out)\n.end\n",
        encoding="utf-8",
    )
    for name in ("a", "v(A)"):
        document = json.loads(rcnet("derive", "--json", "--of", name, "gauge.cir").out)
        assert document["of"] == "a"
        assert len(document["zeros"]) == 1


STRANGE = FILTER.replace("title = ", 'title = "a_b | $c$ & \\\\d{e}" #')


def test_titles_cannot_break_the_paper(rcnet: Rcnet) -> None:
    """What a stranger's title holds is written as text, not as Markdown or TeX."""
    name = circuit("strange.rc.toml", text=STRANGE)

    assert rcnet("derive", name, "-o", "paper.tex").code == 0
    assert r"\section*{a\_b \textbar{} \$c\$ \& \textbackslash{}d\{e\}}" in Path("paper.tex").read_text()
    assert rcnet("derive", name, "-o", "paper.md").code == 0
    assert Path("paper.md").read_text().startswith(r"# a\_b \| \$c\$ & \\d\{e\}")


NO_SOURCE = FILTER.split("[sources.Vin]")[0].replace('R1 = "in out 10k 1%"', 'R1 = "0 out 10k 1%"')
TWO = FILTER + '[sources.Vpump]\nnodes = "x 0"\nac = 1\n'
TWO = TWO.replace('C1 = "out 0 10n 5%"', 'C1 = "out 0 10n 5%"\nR2 = "x out 1k"')

BAD = {
    "no source": (NO_SOURCE, (), "no source"),
    "two sources": (TWO, (), "2 sources carry ac"),
    "unknown node": (FILTER, ("--of", "nowhere"), "no node called 'nowhere'"),
    "ground": (FILTER, ("--of", "0"), "always at zero volts"),
    "unknown suffix": (FILTER, ("-o", "paper.pdf"), "not written as '.pdf'"),
}


@pytest.mark.parametrize("which", BAD)
def test_bad_input(rcnet: Rcnet, which: str) -> None:
    """What cannot be derived is one sentence and exit code 2."""
    text, options, says = BAD[which]
    ended = rcnet("derive", circuit(text=text), *options)

    assert ended.code == 2
    assert ended.out == ""
    assert says in ended.err
    assert ended.err.startswith("rcnet: ")
    assert len(ended.err.strip().splitlines()) == 1


def test_no_output(rcnet: Rcnet) -> None:
    """A netlist that names no output and has no node `out` asks for --of."""
    Path("gauge.cir").write_text("* gauge\nVin in 0 ac 1\nR1 in a 1k\nC1 a 0 1u\n.end\n", encoding="utf-8")
    ended = rcnet("derive", "gauge.cir")

    assert ended.code == 2
    assert "--of" in ended.err


def test_missing_file(rcnet: Rcnet) -> None:
    """A file that is not there is one sentence, in JSON too."""
    ended = rcnet("derive", "--json", "nothing.rc.toml")

    assert ended.code == 2
    assert json.loads(ended.out)["errors"]


@pytest.mark.parametrize("name", sorted(starters()))
def test_starters(rcnet: Rcnet, name: str) -> None:
    """Every starter is derived within 80 columns."""
    ended = rcnet("derive", str(starters()[name]))

    assert (ended.code, ended.err) == (0, "")
    assert "rules of thumb" in ended.out
    assert max(len(line) for line in ended.out.splitlines()) <= 80
