"""One command that times rcnet beside ngspice and SciPy on the same networks and prints a table of ratios.

    python tests/benchmarks/run.py [--quick] [--only WORD]

Every number is measured in this run, on this machine. rcnet's time is that of the second call, the best of
three; ngspice's is the "Total analysis time" it reports, which leaves out reading the netlist; SciPy's is
that of `splu` and one solution per frequency, for a few frequencies. More rows: functions in `ROWS`.
"""

from __future__ import annotations

import argparse
import json
import os
import re
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent))

from networks import Case, matrices, mesh, netlist, network, tree

from rcnet.circuit import Network
from rcnet.exact import response

SPLU_POINTS = 3


@dataclass(frozen=True)
class Row:
    """One line of the table: what was done, in what units, and what the target says."""

    work: str
    rcnet: str
    ngspice: str = "-"
    scipy: str = "-"
    target: str = "-"
    met: bool | None = None


def main() -> int:
    """Measure and print; 1 if a target was missed."""
    parser = argparse.ArgumentParser(description="Times rcnet beside ngspice and SciPy on the same networks.")
    parser.add_argument("--quick", action="store_true", help="smaller networks, for a look in seconds")
    parser.add_argument("--only", default="", help="only rows whose name holds this word")
    parser.add_argument("--child", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.child:
        print(json.dumps(_child(int(options.child))))
        return 0
    print(f"{os.cpu_count()} processors; {sys.platform}; {_ngspice_version()}")
    missed = False
    for name, measured in ROWS.items():
        if options.only in name:
            for row in measured(options.quick):
                missed |= row.met is False
                _print(row)
    return 1 if missed else 0


def _print(row: Row) -> None:
    verdict = {None: "", True: "met", False: "MISSED"}[row.met]
    print(
        f"{row.work:<52} rcnet {row.rcnet:<16} ngspice {row.ngspice:<22} splu {row.scipy:<20}"
        f" target {row.target:<14} {verdict}",
        flush=True,
    )


# ---------------------------------------------------------------------- the others


def _ngspice_version() -> str:
    program = _program()
    if program is None:
        return "no ngspice"
    said = subprocess.run([program, "--version"], capture_output=True, text=True, check=False).stdout
    found = re.search(r"ngspice-\S+", said)
    return found.group() if found else "ngspice"


def _program() -> str | None:
    return os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice")


def _ngspice(text: str) -> tuple[float, float] | None:
    """Seconds of analysis as ngspice says, and of the whole process; None without ngspice."""
    program = _program()
    if program is None:
        return None
    with tempfile.TemporaryDirectory() as folder:
        (Path(folder) / "deck.cir").write_text(text, encoding="utf-8")
        begun = time.perf_counter()
        done = subprocess.run(
            [program, "-b", "-n", "-r", "deck.raw", "deck.cir"],
            cwd=folder,
            env={**os.environ, "HOME": folder},
            capture_output=True,
            text=True,
            check=True,
        )
        wall = time.perf_counter() - begun
    found = re.search(r"Total analysis time \(seconds\) = (\S+)", done.stdout + done.stderr)
    return (float(found.group(1)) if found else wall, wall)


def _splu_seconds(case: Case) -> tuple[float, list[complex]]:
    """Seconds per frequency of a sparse factorisation and solution, and the answers at those frequencies."""
    import scipy.sparse.linalg

    conductance, capacitance, driven = matrices(case)
    options = {"permc_spec": "MMD_AT_PLUS_A", "diag_pivot_thresh": 0.0, "options": {"SymmetricMode": True}}
    spent, answers = 0.0, []
    for frequency in case.frequency[:: max(1, case.points // SPLU_POINTS)][:SPLU_POINTS]:
        matrix = (conductance + 2j * np.pi * frequency * capacitance).tocsc()
        begun = time.perf_counter()
        solved = scipy.sparse.linalg.splu(matrix, **options).solve(driven.astype(complex))
        spent += time.perf_counter() - begun
        answers.append(solved[case.output - 2])
    return spent / len(answers), answers


def _second_call(work: Callable[[], object]) -> float:
    """Seconds of the best of three calls after the first."""
    work()
    best = np.inf
    for _ in range(3):
        begun = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - begun)
    return best


# ---------------------------------------------------------------------- rows


def _sweep(case: Case, target: float) -> Row:
    made = network(case)
    seconds = _second_call(lambda: response(made, case.frequency, f"n{case.output}"))
    each, answers = _splu_seconds(case)
    mine = response(made, case.frequency, f"n{case.output}")
    mine = mine[:: max(1, case.points // SPLU_POINTS)][:SPLU_POINTS]
    assert np.abs(mine - answers).max() <= 1e-9 * max(1e-12, np.abs(answers).max()), "the answers differ"
    other = _ngspice(netlist(case))
    ratio = None if other is None else other[0] / seconds
    return Row(
        f"{case.name} x {case.points} frequencies",
        f"{seconds * 1e3:.0f} ms",
        "-" if other is None or ratio is None else f"{other[0]:.2f} s, {ratio:.0f} times",
        f"{each * case.points:.2f} s, {each * case.points / seconds:.0f} times",
        f">= {target:.0f} times",
        None if ratio is None else ratio >= target,
    )


def big_tree(quick: bool) -> Iterator[Row]:
    """A random tree against both."""
    yield _sweep(tree(20_000 if quick else 100_000, 201), 50)


def big_mesh(quick: bool) -> Iterator[Row]:
    """A mesh against both."""
    yield _sweep(mesh(60 if quick else 100, 41), 50)


def million(quick: bool) -> Iterator[Row]:
    """A tree of a million nodes in a process of its own, its memory watched."""
    nodes = 200_000 if quick else 1_000_000
    said = subprocess.run(
        [sys.executable, __file__, "--child", str(nodes)], capture_output=True, text=True, check=True
    ).stdout
    result = json.loads(said)
    yield Row(
        f"random tree, {nodes} nodes x 50 frequencies",
        f"{result['seconds'] * 1e3:.0f} ms",
        target="< 4 GiB",
        scipy=f"built in {result['build']:.1f} s, first {result['first']:.1f} s, {result['gib']:.2f} GiB",
        met=result["gib"] < 4,
    )


def _child(nodes: int) -> dict[str, float]:
    begun = time.perf_counter()
    case = tree(nodes, 50)
    made = network(case)
    build = time.perf_counter() - begun
    begun = time.perf_counter()
    response(made, case.frequency, f"n{case.output}")
    first = time.perf_counter() - begun
    seconds = _second_call(lambda: response(made, case.frequency, f"n{case.output}"))
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    unit = 1 if sys.platform == "darwin" else 1024
    return {"seconds": seconds, "first": first, "build": build, "gib": most * unit / 2**30}


def samples(quick: bool) -> Iterator[Row]:
    """Many samples of a small ladder, beside one iteration of an `alter` loop inside one ngspice process."""
    count = 20_000 if quick else 100_000
    made, rng = Network(), np.random.default_rng(1)
    made.add_voltage_source("Vin", "in", "0", ac=1)
    for k, (here, there) in enumerate((("in", "a"), ("a", "b"), ("b", "out")), 1):
        made.add_resistor(f"R{k}", here, there, 10e3)
        made.add_capacitor(f"C{k}", there, "0", 1e-9)
    values = {name: value * rng.uniform(0.95, 1.05, count) for name, value in made.values.items()}
    frequency = np.logspace(2, 6, 61)
    seconds = _second_call(lambda: response(made, frequency, "out", values=values)) / count
    each = _alter_seconds(1000 if quick else 3000)
    ratio = None if each is None else each / seconds
    yield Row(
        f"3-section ladder, {count} samples x 61 frequencies",
        f"{seconds * 1e6:.2f} us each",
        "-" if each is None or ratio is None else f"{each * 1e6:.0f} us, {ratio:.0f} times",
        target=">= 100 times",
        met=None if ratio is None else ratio >= 100,
    )


def _alter_seconds(loops: int) -> float | None:
    """Seconds of one iteration: the difference between a long loop and one of a single iteration."""

    def whole(count: int) -> float | None:
        done = _ngspice(
            "\n".join(
                [
                    "* ladder",
                    "Vin in 0 dc 0 ac 1",
                    "R1 in a 10k\nC1 a 0 1n\nR2 a b 10k\nC2 b 0 1n\nR3 b out 10k\nC3 out 0 1n",
                    ".options noopac",
                    ".save v(out)",
                    ".control",
                    f"repeat {count}",
                    "alter r1 = 9.5k",
                    "ac dec 15 100 1meg",
                    "destroy all",  # without it the plots pile up, and each iteration takes ten times as long
                    "end",
                    "quit",
                    ".endc",
                    ".end",
                    "",
                ]
            )
        )
        return None if done is None else done[1]

    long, short = whole(loops + 1), whole(1)
    return None if long is None or short is None else (long - short) / loops


def growth(quick: bool) -> Iterator[Row]:
    """Time per node and frequency as trees grow, the work kept alike."""
    sizes = (1_000, 10_000, 100_000) if quick else (1_000, 10_000, 100_000, 1_000_000)
    costs = []
    for nodes in sizes:
        case = tree(nodes, max(64, 12_800_000 // nodes // 16 * 16))
        made = network(case)
        seconds = _second_call(lambda: response(made, case.frequency, f"n{case.output}"))  # noqa: B023
        costs.append(seconds / nodes / case.points * 1e9)
        yield Row(f"{case.name} x {case.points} frequencies", f"{costs[-1]:.2f} ns each")
    spread = max(costs) / min(costs)
    yield Row("cost per node and frequency, most over least", f"{spread:.2f}", target="<= 2", met=spread <= 2)


# Another row is another function here: whether `quick`, and its rows in return.
ROWS: dict[str, Callable[[bool], Iterator[Row]]] = {
    "tree": big_tree,
    "mesh": big_mesh,
    "million": million,
    "samples": samples,
    "growth": growth,
}

if __name__ == "__main__":
    sys.exit(main())
