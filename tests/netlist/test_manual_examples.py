"""Every example netlist of the ngspice manual: read and compared, or refused for a reason that holds."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from manual_examples import MANUAL, Example, examples

from rcnet.circuit import Circuit, Points
from rcnet.compare import compare
from rcnet.curves import Curves
from rcnet.curves.raw import parse_raw
from rcnet.errors import CircuitError, Problem, ResultsError, UnsolvableError
from rcnet.exact import dc_solvable, require_solvable, transient
from rcnet.netlist import Reading, frequencies, parse_netlist
from rcnet.opinion.ngspice import find_ngspice
from rcnet.system.process import Finished, clean_environment, run_limited

pytestmark = [
    pytest.mark.ngspice,
    pytest.mark.skipif(not MANUAL.exists(), reason="Debian's package ngspice-doc is not installed"),
]

EXAMPLES = examples(MANUAL.read_text(encoding="utf-8")) if MANUAL.exists() else []

READ, NOT_LINEAR, BOTH, EXPLAINED, FAILED = (
    "read and compared",
    "refused, not linear",
    "refused, by ngspice too",
    "refused, for a reason named here",
    "FAILED",
)
# Title -> why it is refused, or even its linear part is, and what the message then says.
REASONS: dict[str, tuple[str, str]] = {
    "white noise, 1/f noise, RTS noise": ("waveforms of random numbers", "waveform that is not read"),
    "Shot noise test with B source, diode": ("a waveform of random numbers", "waveform that is not read"),
    "random number tests": ("random values", "draws a random number"),
    "File: simple-meas-tran.sp": ("a .measure of three points", ".meas cannot be read"),
    "Variable inductor": ("an F senses a source that is not linear", "senses the current of"),
    "netlist for default bipolar transistor": ("nothing is linear", "holds no parts"),
    "Single NMOS Transistor For BSIM3V3.1": ("includes files that are not there", "cannot be included"),
    "Code Model Test: new xxor": ("`DC` without a number", "DC has 0 numbers"),
}

# The letters of what is not linear (ngspice manual, "Basic circuit elements"), and behavioural forms.
_NOT_LINEAR = re.compile(
    r"[abdjmnopqstuwyz]"
    r"|[eg]\S*(?:\s+[^\s,()]+){2,4}\s+(?:poly|vol|cur|value|table)\b"
    r"|[rcl]\S*\s+\S+\s+\S+\s+.*['{].*\b[vi]\(",
    re.IGNORECASE,
)
# Tight enough that what is left is the error of the step (trapezoidal rule, step squared).
_TIGHT = ".options reltol=1e-8 abstol=1e-18 vntol=1e-12 chgtol=1e-20"
_STEPS = 20_000
_FOLLOWS = 1e-5  # of the greatest voltage: at a step of a hundredth of a time constant
_SWEEP = ".ac dec 10 1 1meg"


@dataclass(frozen=True)
class Outcome:
    """What came of one example."""

    example: Example
    kind: str
    says: str = ""


@dataclass(frozen=True)
class Ngspice:
    """ngspice in a folder of its own for each run, held to limits of time, memory and file size."""

    folder: Path

    def __call__(self, deck: str) -> tuple[Finished, Curves | None]:
        """How a deck ended, and its results where it left some."""
        program = find_ngspice()
        assert program is not None
        own = self.folder / str(len(list(self.folder.iterdir())))
        own.mkdir()
        (own / "in.cir").write_text(deck, encoding="utf-8")
        done = run_limited(
            [program, "-b", "-n", "-r", "out.raw", "in.cir"],
            cwd=own,
            env=clean_environment(own),
            timeout=20,
            memory_bytes=2**31,
            file_bytes=2**28,
            cpu_seconds=30,
        )
        try:
            return done, parse_raw((own / "out.raw").read_bytes(), "out.raw")
        except (OSError, ResultsError):
            return done, None

    def refuses(self, deck: str) -> bool:
        """True if there are no results."""
        done, curves = self(deck)
        return done.returncode != 0 or curves is None


def read(example: Example, *, linear_part: bool = False) -> Circuit | tuple[Problem, ...]:
    """The whole text as it stands in the manual, commands and all; or every problem."""
    try:
        return parse_netlist(example.text, "manual.cir", Reading(linear_part=linear_part))
    except CircuitError as exc:
        return exc.problems


def compared(example: Example, circuit: Circuit, ngspice: Ngspice) -> list[str]:
    """What was compared with ngspice's results; an AssertionError tells where they differ."""
    done = []
    if dc_solvable(circuit.network):
        done.append(same_numbers(circuit, ngspice(example.deck(".op"))[1], "operating point"))
    if any(source.ac for source in circuit.network.sources.values()):
        sweep = example.asked("ac") or _SWEEP
        curves = ngspice(example.deck(".options noopac", sweep))[1]
        done.append(same_numbers(circuit, curves, "ac"))
        if curves is not None and circuit.analyses.ac is not None:
            axis = curves.of("ac")[0].axis
            np.testing.assert_allclose(axis, frequencies(circuit.analyses.ac), rtol=1e-12)
    moving = any(source.waveform for source in circuit.network.sources.values())
    own_step = any(each.code == "edge-from-step" for each in circuit.seen)
    if moving and not (circuit.initial or own_step):
        done.append(same_run(example, circuit, ngspice))
    return done


def same_numbers(circuit: Circuit, curves: Curves | None, analysis: str) -> str:
    """Every node's numbers are the exact ones, within what rounding in ngspice explains."""
    assert curves is not None, f"no results of {analysis}"
    found = compare(circuit, curves)
    sampled = any("this large" in each.why for each in found.uncompared)
    nodes = {f"v({node})" for node in circuit.network.nodes[1:]}
    assert sampled or {each.name for each in found.curves} >= nodes
    assert found.verdict == "agree", [(each.name, each.worst) for each in found.curves if each.spans]
    return f"{analysis}: {len(found.curves)} curves of {found.curves[0].points}"


def same_run(example: Example, circuit: Circuit, ngspice: Ngspice) -> str:
    """Every node's voltage over time, at ngspice's own times."""
    stop = span(circuit)
    curves = ngspice(example.deck(_TIGHT, f".tran {stop / _STEPS!r} {stop!r} 0 {stop / _STEPS!r}"))[1]
    assert curves is not None, "no results of the transient"
    axis = curves.of("transient")[0].axis
    nodes = list(circuit.network.nodes[1:])
    exact = transient(circuit.network, axis, nodes)
    for row, node in enumerate(nodes):
        other = curves.get(f"v({node.lower()})", "transient")
        assert other is not None, node
        assert np.abs(other.values - exact[row]).max() <= _FOLLOWS * np.abs(exact).max(), node
    return f"transient: {len(nodes)} curves of {len(axis)}"


def span(circuit: Circuit) -> float:
    """How long to run, s: as asked, or twice as long as the waveforms last."""
    if circuit.analyses.transient is not None:
        return circuit.analyses.transient.stop
    waves = [source.waveform for source in circuit.network.sources.values() if source.waveform]
    return 2 * max(wave.values[-1][0] if isinstance(wave, Points) else wave.repeats or 0.0 for wave in waves)


def driven(example: Example, circuit: Circuit) -> Example:
    """The example with a source and a load, where it has no source at all."""
    if circuit.network.sources:
        return example
    first, second = circuit.network.nodes[1:3]
    title, _, rest = example.text.partition("\n")
    added = f"Vdrive {first} 0 DC 1 AC 1\nRload {second} 0 1k"
    return Example(example.line, f"{title}\n{added}\n{rest}")


def linear_rest(example: Example, circuit: Circuit) -> Example:
    """The example with what was left out of the circuit made comments."""
    lines = example.text.split("\n")
    for left in circuit.left_out:
        assert left.place.line is not None
        row = left.place.line - 1
        lines[row] = "*"
        while row + 1 < len(lines) and lines[row + 1].startswith("+"):
            row += 1
            lines[row] = "*"
    return Example(example.line, "\n".join(lines))


def outcome(example: Example, ngspice: Ngspice) -> Outcome:
    """Read one example, run it, say what it came to."""
    found = read(example)
    if isinstance(found, Circuit):
        example = driven(example, found)
        found = read(example)
        assert isinstance(found, Circuit)
        try:
            return Outcome(example, READ, "; ".join(compared(example, found, ngspice)))
        except AssertionError as exc:
            return Outcome(example, FAILED, str(exc))
    says = found[0].message
    refused = ngspice.refuses(example.deck(".op"))
    if any(each.code == "not-linear" for each in found):
        return Outcome(
            example, NOT_LINEAR, f"{'ngspice refuses it too' if refused else 'ngspice runs it'}; {says}"
        )
    if refused:
        return Outcome(example, BOTH, says)
    why = reason(example, found)
    return Outcome(example, EXPLAINED, why) if why else Outcome(example, FAILED, says)


def reason(example: Example, problems: Iterable[Problem]) -> str:
    """Why an example is refused, where it is named above and is what the messages say; else nothing."""
    why, says = REASONS.get(example.title, ("", ""))
    return why if any(says in each.message for each in problems) else ""


@pytest.fixture(scope="module")
def ngspice(tmp_path_factory: pytest.TempPathFactory) -> Ngspice:
    """ngspice, run by hand as somebody does who was given a netlist."""
    return Ngspice(tmp_path_factory.mktemp("manual"))


@pytest.fixture(scope="module")
def outcomes(ngspice: Ngspice) -> list[Outcome]:
    """What came of every example."""
    return [outcome(example, ngspice) for example in EXAMPLES]


def test_every_example_is_read_and_compared_or_refused_for_a_reason(
    outcomes: list[Outcome], record_property: Callable[[str, object], None]
) -> None:
    """No example fails; the table of all (shown by `-s`) says what came of each."""
    counts = Counter(each.kind for each in outcomes)
    print(f"\n{len(outcomes)} example netlists in the manual")
    for kind, number in counts.most_common():
        record_property(kind, number)
        print(f"{kind}: {number}")
        for each in outcomes:
            if each.kind == kind:
                print(f"    {each.example.name}: {each.says[:120]}")
    assert [(each.example.name, each.says) for each in outcomes if each.kind == FAILED] == []
    # A page marked up in another way would hold no examples, and nothing would be shown.
    assert counts[READ] >= 10
    assert counts[NOT_LINEAR] >= 20
    assert all(each.says for each in outcomes)


def test_what_is_called_not_linear_is_not() -> None:
    """Every line refused as not linear begins with such an element's letter, or has a behavioural form."""
    called = [
        (example, each)
        for example in EXAMPLES
        if not isinstance(found := read(example), Circuit)
        for each in found
        if each.code == "not-linear"
    ]
    assert len(called) >= 50
    for example, each in called:
        assert each.line is not None
        line = example.text.split("\n")[each.line - 1].strip()
        assert _NOT_LINEAR.match(line), (example.name, each)


def test_the_linear_part_of_every_other_example_is_read_and_compared(
    outcomes: list[Outcome], ngspice: Ngspice
) -> None:
    """Without what is not linear, every other example is read; ngspice says the same where it is solvable."""
    done = Counter[str]()
    for example in [each.example for each in outcomes if each.kind == NOT_LINEAR]:
        rest = read(example, linear_part=True)
        if not isinstance(rest, Circuit):
            assert reason(example, rest), (example.name, rest)
            done["refused for a reason"] += 1
            continue
        assert rest.left_out
        done["read"] += 1
        try:
            require_solvable(rest.network)
        except UnsolvableError:
            continue  # what is left hangs on nothing
        said = compared(linear_rest(example, rest), rest, ngspice)
        done["compared"] += bool(said)
        print(f"{example.name}: {'; '.join(said)}")
    print(dict(done))
    assert done["read"] >= 20
    assert done["compared"] >= 10
