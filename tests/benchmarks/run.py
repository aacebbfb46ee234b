"""One command that times rcnet beside ngspice and SciPy on the same networks and prints a Markdown table.

    python tests/benchmarks/run.py [--quick] [--only WORD]

Every number is measured in this run, on this machine; `x` says how many times rcnet's time. rcnet's time is
that of the second call, the best of three, unless the row says otherwise; ngspice's is the "Total analysis
time" that one run reports, which leaves out reading the netlist, or, where that is too short to be read off,
what one more analysis adds to a process that makes many, the best of three; SciPy's is that of `splu` and one
solution at the best of a few frequencies, times their number. Without ngspice there is a dash in its column.
More rows: functions in `ROWS`.
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
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

sys.path.insert(0, str(Path(__file__).parent))

import check_start
import ladder
from networks import Case, matrices, mesh, netlist, network, tree

from rcnet.circuit import Network
from rcnet.curves import read_results
from rcnet.exact import response

SPLU_POINTS = 3
WIDTHS = (33, 8, 13, 13, 8, 6)  # of the columns: 100 characters a line
HEADS = ("work", "rcnet", "ngspice", "splu", "target", "result")


@dataclass(frozen=True)
class Row:
    """One line of the table: what was done, what it took each, and whether that meets the target."""

    work: str
    rcnet: str
    ngspice: str = "-"
    splu: str = "-"
    target: str = "-"
    met: bool | None = None


def main() -> int:
    """Measure and print; 1 if a target was missed."""
    parser = argparse.ArgumentParser(description="Times rcnet beside ngspice and SciPy on the same networks.")
    parser.add_argument("--quick", action="store_true", help="smaller networks, for a look in seconds")
    parser.add_argument("--only", default="", help=f"only rows whose name holds this word: {', '.join(ROWS)}")
    parser.add_argument("--child", help=argparse.SUPPRESS)
    parser.add_argument("--read", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.child:
        print(json.dumps(_child(int(options.child))))
        return 0
    if options.read:
        print(json.dumps(_read(options.read)))
        return 0
    print(f"{os.cpu_count()} processors; {sys.platform}; {_ngspice_version()}\n")
    _print(HEADS)
    _print(["-" * width for width in WIDTHS])
    missed = False
    for name, measured in ROWS.items():
        if options.only in name:
            for row in measured(options.quick):
                missed |= row.met is False
                result = {None: "-", True: "met", False: "MISSED"}[row.met]
                _print((row.work, row.rcnet, row.ngspice, row.splu, row.target, result))
    return 1 if missed else 0


def _print(cells: Sequence[str]) -> None:
    padded = (f"{cell:<{width}}" for cell, width in zip(cells, WIDTHS, strict=True))
    print(f"| {' | '.join(padded)} |", flush=True)


def _duration(seconds: float) -> str:
    """Two digits or three, in the unit that suits."""
    for unit, size in (("s", 1.0), ("ms", 1e-3), ("us", 1e-6), ("ns", 1e-9)):
        if seconds >= size or unit == "ns":
            return f"{seconds / size:.{int(seconds < 10 * size)}f} {unit}"
    raise AssertionError


def _times(seconds: float | None, mine: float) -> str:
    """Another's time, and how many times rcnet's it is."""
    if seconds is None:
        return "-"
    ratio = seconds / mine
    return f"{_duration(seconds)}, {ratio:.{int(ratio < 10)}f} x"


def _faster(seconds: float | None, mine: float, target: float) -> bool | None:
    return None if seconds is None else seconds >= target * mine


# ---------------------------------------------------------------------- the others


def _ngspice_version() -> str:
    program = _program()
    if program is None:
        return "no ngspice"
    said = subprocess.run([program, "--version"], capture_output=True, text=True, check=False).stdout
    found = re.search(r"ngspice-\S+", said)
    return found.group() if found else "ngspice"


def _program() -> str | None:
    return shutil.which(os.environ.get("RCNET_NGSPICE") or "ngspice")


@dataclass(frozen=True)
class _Ran:
    """analysis: seconds as ngspice says; wall: of the whole process; raw: where its results were, if any."""

    analysis: float
    wall: float
    time: npt.NDArray[np.float64] | None = None
    values: npt.NDArray[np.float64] | None = None


def _ngspice(text: str, curve: str = "") -> _Ran | None:
    """A run of ngspice, with the curve named; None without ngspice."""
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
        found = read_results(Path(folder) / "deck.raw").get(curve) if curve else None
    said = re.search(r"Total analysis time \(seconds\) = (\S+)", done.stdout + done.stderr)
    analysis = float(said.group(1)) if said else wall
    return _Ran(analysis, wall) if found is None else _Ran(analysis, wall, found.axis, found.values.real)


def _one_more(lines: Sequence[str], commands: Sequence[str], loops: int) -> float | None:
    """Seconds that `commands` take in a loop inside one ngspice process: of a long loop less a short one."""

    def whole(count: int) -> float | None:
        # Without `destroy all` the plots pile up, and each turn takes ten times as long.
        control = [".control", f"repeat {count}", *commands, "destroy all", "end", "quit", ".endc"]
        ran = _ngspice("\n".join([*lines, *control, ".end", ""]))
        return None if ran is None else ran.wall

    best = np.inf
    for _ in range(3):
        long, short = whole(loops + 1), whole(1)
        if long is None or short is None:
            return None
        best = min(best, (long - short) / loops)
    return float(best)


def _splu_seconds(case: Case) -> tuple[float, list[complex]]:
    """Seconds of a sparse factorisation and solution at one frequency, the best of a few, and the answers."""
    import scipy.sparse.linalg

    conductance, capacitance, driven = matrices(case)
    options = {"permc_spec": "MMD_AT_PLUS_A", "diag_pivot_thresh": 0.0, "options": {"SymmetricMode": True}}
    best, answers = np.inf, []
    for frequency in case.frequency[:: max(1, case.points // SPLU_POINTS)][:SPLU_POINTS]:
        matrix = (conductance + 2j * np.pi * frequency * capacitance).tocsc()
        begun = time.perf_counter()
        solved = scipy.sparse.linalg.splu(matrix, **options).solve(driven.astype(complex))
        best = min(best, time.perf_counter() - begun)
        answers.append(solved[case.output - 2])
    return best, answers


def _second_call(work: Callable[[], object]) -> float:
    """Seconds of the best of three calls after the first."""
    work()
    return min(_seconds(work) for _ in range(3))


def _seconds(work: Callable[[], object]) -> float:
    begun = time.perf_counter()
    work()
    return time.perf_counter() - begun


# ---------------------------------------------------------------------- rows


def _sweep(kind: str, case: Case, target: float | None) -> Row:
    made = network(case)
    seconds = _second_call(lambda: response(made, case.frequency, f"n{case.output}"))
    each, answers = _splu_seconds(case)
    mine = response(made, case.frequency, f"n{case.output}")
    mine = mine[:: max(1, case.points // SPLU_POINTS)][:SPLU_POINTS]
    assert np.abs(mine - answers).max() <= 1e-9 * max(1e-12, np.abs(answers).max()), "the answers differ"
    ran = _ngspice(netlist(case))
    other = None if ran is None else ran.analysis
    return Row(
        f"{kind}, {case.nodes:,} nodes x {case.points} points",
        _duration(seconds),
        _times(other, seconds),
        _times(each * case.points, seconds),
        "-" if target is None else f">= {target:g} x",
        None if target is None else _faster(other, seconds, target),
    )


def big_tree(quick: bool) -> Iterator[Row]:
    """A random tree against both."""
    yield _sweep("tree", tree(20_000 if quick else 100_000, 201), None if quick else 50)


def big_mesh(quick: bool) -> Iterator[Row]:
    """A mesh against both."""
    yield _sweep("mesh", mesh(60 if quick else 100, 41), None if quick else 50)


def million(quick: bool) -> Iterator[Row]:
    """A tree of a million nodes in a process of its own, its memory watched."""
    nodes = 200_000 if quick else 1_000_000
    said = subprocess.run(
        [sys.executable, __file__, "--child", str(nodes)], capture_output=True, text=True, check=True
    ).stdout
    result = json.loads(said)
    yield Row(f"tree, {nodes:,} nodes x 50 points", _duration(result["seconds"]))
    yield Row("  the network put together", _duration(result["build"]))
    yield Row("  the first call", _duration(result["first"]))
    yield Row("  memory in all", f"{result['gib']:.2f} GiB", target="< 4 GiB", met=result["gib"] < 4)


def _child(nodes: int) -> dict[str, float]:
    begun = time.perf_counter()
    case = tree(nodes, 50)
    made = network(case)
    build = time.perf_counter() - begun

    def work() -> object:
        return response(made, case.frequency, f"n{case.output}")

    first = _seconds(work)
    seconds = _second_call(work)
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    unit = 1 if sys.platform == "darwin" else 1024
    return {"seconds": seconds, "first": first, "build": build, "gib": most * unit / 2**30}


def large_netlist(quick: bool) -> Iterator[Row]:
    """A flat netlist of a million parts read and written, beside ngspice, which reads it for one point."""
    parts = 100_000 if quick else 1_000_000
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "district.cir"
        path.write_text(_flat(parts), encoding="utf-8")
        said = subprocess.run(
            [sys.executable, __file__, "--read", str(path)], capture_output=True, text=True, check=True
        ).stdout
        ran = _ngspice(path.read_text(encoding="utf-8"))
    result = json.loads(said)
    # What is not analysis is reading: the row of one point takes ngspice next to no time.
    other = None if ran is None else ran.wall - ran.analysis
    yield Row(
        f"netlist of {parts:,} parts read",
        _duration(result["read"]),
        _times(other, result["read"]),
        target=">= 0.5 x",
        met=_faster(other, result["read"], 0.5),
    )
    yield Row("  written", _duration(result["write"]), target="< read", met=result["write"] < result["read"])
    yield Row("  memory in all", f"{result['gib']:.2f} GiB", target="< 4 GiB", met=result["gib"] < 4)


def _flat(parts: int) -> str:
    """A ladder with values of every digit, as a netlist."""
    rng = np.random.default_rng(1)
    lines = ["* district line", "V1 n0 0 DC 0 AC 1"]
    for k, (ohms, farads) in enumerate(10 ** rng.uniform((2, -12), (5, -6), (parts // 2, 2))):
        lines += [f"R{k} n{k} n{k + 1} {float(ohms)!r}", f"C{k} n{k + 1} 0 {float(farads)!r}"]
    return "\n".join([*lines, ".options noopac", ".save v(n9)", ".ac lin 1 1k 1k", ".end", ""])


def _read(path: str) -> dict[str, float]:
    from rcnet.netlist import read_netlist, write

    begun = time.perf_counter()
    circuit = read_netlist(path)
    read = time.perf_counter() - begun
    written = _seconds(lambda: write(circuit))
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    unit = 1 if sys.platform == "darwin" else 1024
    return {"read": read, "write": written, "gib": most * unit / 2**30}


def samples(quick: bool) -> Iterator[Row]:
    """Many samples of a small ladder, beside one iteration of an `alter` loop inside one ngspice process."""
    count = 100_000
    made, rng = Network(), np.random.default_rng(1)
    made.add_voltage_source("Vin", "in", "0", ac=1)
    for k, (here, there) in enumerate((("in", "a"), ("a", "b"), ("b", "out")), 1):
        made.add_resistor(f"R{k}", here, there, 10e3)
        made.add_capacitor(f"C{k}", there, "0", 1e-9)
    values = {name: value * rng.uniform(0.95, 1.05, count) for name, value in made.values.items()}
    frequency = np.logspace(2, 6, 61)
    seconds = _second_call(lambda: response(made, frequency, "out", values=values)) / count
    lines = ["* ladder", "Vin in 0 dc 0 ac 1"]
    lines += ["R1 in a 10k", "C1 a 0 1n", "R2 a b 10k", "C2 b 0 1n", "R3 b out 10k", "C3 out 0 1n"]
    lines += [".options noopac", ".save v(out)"]
    each = _one_more(lines, ["alter r1 = 9.5k", "ac dec 15 100 1meg"], 1000 if quick else 3000)
    yield Row(
        f"6 parts x 61 points, 1 of {count:,}",
        _duration(seconds),
        _times(each, seconds),
        target=">= 100 x",
        met=_faster(each, seconds, 100),
    )


def transient(quick: bool) -> Iterator[Row]:
    """A ladder over a period of a square wave at the times ngspice chooses, and how far both are off."""
    loops = 60 if quick else 200
    analysis = f"tran {ladder.STEP!r} {ladder.STOP!r}"
    ran = _ngspice("\n".join([*ladder.lines(), f".{analysis}", ".end", ""]), "v(out)")
    chosen = np.linspace(0, ladder.STOP, 1024) if ran is None or ran.time is None else ran.time
    each = _one_more(ladder.lines(), [analysis], loops)
    mine = ladder.network().transient(chosen, "out")  # imports are made by now

    def ask(networks: list[Network]) -> float:
        """Seconds each, in a loop as ngspice's."""
        return _seconds(lambda: [one.transient(chosen, "out") for one in networks]) / loops

    batches = [[ladder.network() for _ in range(loops)] for _ in range(3)]
    new, again = (min(ask(batch) for batch in batches) for _ in range(2))
    work = f"ladder of {ladder.SECTIONS} x {len(chosen):,} times"
    for text, seconds in ((f"{work}, new", new), ("  asked again", again)):
        yield Row(
            text,
            _duration(seconds),
            _times(each, seconds),
            target="> 1 x",
            met=_faster(each, seconds, 1),
        )
    truth = ladder.exact(chosen)
    full = max(abs(value) for value in truth)
    error = float(max(abs(a - b) for a, b in zip(truth, mine.tolist(), strict=True)) / full)
    other = "-"
    if ran is not None and ran.values is not None:
        far = max(abs(a - b) for a, b in zip(truth, ran.values.tolist(), strict=True))
        other = f"{float(far / full):.0e}"
    yield Row("  worst error, of full scale", f"{error:.0e}", other, "-", "<= 1e-10", error <= 1e-10)


def growth(quick: bool) -> Iterator[Row]:
    """Time per node and frequency as trees grow, the work kept alike."""
    sizes = (1_000, 10_000, 100_000) if quick else (1_000, 10_000, 100_000, 1_000_000)
    costs = []
    for nodes in sizes:
        case = tree(nodes, max(64, 12_800_000 // nodes // 16 * 16))
        made = network(case)
        seconds = _second_call(lambda: response(made, case.frequency, f"n{case.output}"))  # noqa: B023
        costs.append(seconds / nodes / case.points)
        yield Row(f"1 point at 1 of {nodes:,} nodes", _duration(costs[-1]))
    spread = max(costs) / min(costs)
    yield Row("  the most over the least", f"{spread:.2f}", target="<= 2", met=spread <= 2)


def check(quick: bool) -> Iterator[Row]:
    """A run of `rcnet check` beside one of Python that only imports numpy."""
    mine, bare = check_start.measured(runs=5 if quick else check_start.RUNS)
    yield Row("`rcnet check`, the whole process", _duration(mine))
    ratio, target = mine / bare, check_start.TARGET
    yield Row("  over `import numpy`", f"{ratio:.2f} x", target=f"<= {target:g} x", met=ratio <= target)


# Another row is another function here: whether `quick`, and its rows in return.
ROWS: dict[str, Callable[[bool], Iterator[Row]]] = {
    "tree": big_tree,
    "mesh": big_mesh,
    "million": million,
    "netlist": large_netlist,
    "samples": samples,
    "transient": transient,
    "growth": growth,
    "check": check,
}

if __name__ == "__main__":
    sys.exit(main())
