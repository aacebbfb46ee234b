"""ngspice as a library answers as the program does, and what happens to it stays in its child process."""

from __future__ import annotations

import ctypes.util
import importlib.util
import io
import os
import signal
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rcnet.curves.raw import parse_raw
from rcnet.errors import SimulatorError
from rcnet.opinion import _frames, ngspice_library
from rcnet.opinion.ngspice import Expected, RunFailed, find_ngspice, run_deck
from rcnet.opinion.ngspice_library import LibraryRunner, find_library

HEAD = "* leak listener\nV1 in 0 DC 0 AC 1\n"
FILTER = HEAD + "R1 in out 1k\nC1 out 0 1u\n"
QUIET = ".options noopac\n"
SWEEP = ".ac dec 10 1 1e6\n.end\n"
AC = Expected("AC Analysis", ("v(out)",), 61)
OP = Expected("Operating Point", ("v(out)",), 1)
TRAN = Expected("Transient Analysis", ("v(out)",))
NOISE = Expected("Noise Spectral Density Curves", ("onoise_spectrum",))
ENDLESS = FILTER + ".tran 10n 1\n.end\n"


@pytest.fixture(scope="module")
def runner() -> Iterator[LibraryRunner]:
    """One warm runner for all decks here, as a library of circuits would use it."""
    with LibraryRunner() as warm:
        yield warm


def child_pid(runner: LibraryRunner) -> int:
    """The process id of the child that would get the next deck."""
    assert runner.version
    assert runner._child is not None
    return runner._child._process.pid


def is_gone(pid: int) -> bool:
    """Whether no process has this number any more."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return True
    return False


# ---------------------------------------------------------------------------------------------- good runs


@pytest.mark.ngspice_library
def test_a_good_run_has_the_values_of_the_closed_form(runner: LibraryRunner) -> None:
    """H = 1/(1 + j omega R C) for one RC section, at ngspice's own frequencies, to 1e-12."""
    curves, log = runner.run(FILTER + QUIET + SWEEP, AC, 30)
    curve = curves.get("v(out)", "ac")
    assert curve is not None
    assert (curve.axis.dtype, curve.values.dtype, curve.unit) == (np.float64, np.complex128, "V")
    np.testing.assert_allclose(curve.values, 1 / (1 + 2j * np.pi * curve.axis * 1e-3), rtol=1e-12)
    assert "No. of Data Rows : 61" in log
    assert runner.version.startswith("ngspice-")


ODD_NODES = ("1", "a-b", "a+1", "a/b", "a.b", "a:b", "A_b")

GOOD = [
    pytest.param(FILTER + QUIET + SWEEP, AC, id="ac"),
    pytest.param(FILTER + ".op\n.end\n", OP, id="operating point"),
    pytest.param(FILTER.replace("DC 0", "DC 0 SIN(0 1 1k)") + ".tran 10u 1m\n.end\n", TRAN, id="transient"),
    pytest.param(FILTER + ".noise v(out) V1 dec 10 1 1e4\n.end\n", NOISE, id="noise"),
    pytest.param(FILTER + QUIET + SWEEP.replace(".end\n", ""), AC, id="without .end"),
    pytest.param(FILTER.replace("DC 0 ", "") + QUIET + SWEEP, AC, id="harmless note: no value"),
    pytest.param(
        FILTER.replace("DC 0", "DC 0 SIN(1 1 1k)") + ".tran 10u 1m\n", TRAN, id="harmless note: dc value"
    ),
    pytest.param("* Error: aborted\n" + FILTER + QUIET + SWEEP, AC, id="title that speaks of errors"),
    pytest.param(
        HEAD + "R1 in error 1k\nC1 error 0 1u\n.tran 10u 1m\n",
        Expected("Transient Analysis", ("v(error)",)),
        id="node called error",
    ),
    pytest.param(
        HEAD + "".join(f"R{i} in {n} 1k\nC{i} {n} 0 1u\n" for i, n in enumerate(ODD_NODES)),
        None,
        id="nodes with signs and digits",
    ),
]


@pytest.mark.ngspice
@pytest.mark.ngspice_library
@pytest.mark.parametrize(("deck", "expected"), GOOD)
def test_the_library_gives_what_the_program_writes(
    runner: LibraryRunner, deck: str, expected: Expected | None
) -> None:
    """Names, units, axes and values are those of the program's raw file, bit for bit."""
    if expected is None:
        deck, expected = deck + QUIET + SWEEP, Expected("AC Analysis", ("v(1)", "v(a-b)", "v(a_b)"), 61)
    executable = find_ngspice()
    assert executable is not None
    theirs = parse_raw(run_deck(deck, expected, executable=executable).raw, "results.raw")
    ours, _ = runner.run(deck, expected, 30)
    compared = 0
    for curve in theirs:
        same = ours.get(curve.name, curve.analysis)
        assert same is not None, curve.name
        assert np.array_equal(same.axis, curve.axis)
        assert np.array_equal(same.values, curve.values)
        assert same.unit == curve.unit
        compared += 1
    assert compared == len(ours) > 0


@pytest.mark.ngspice_library
def test_one_child_serves_many_decks_without_mixing_them(runner: LibraryRunner) -> None:
    """Vectors saved, options set and results of one deck do not reach the next."""
    pid = child_pid(runner)
    for resistance in (1e3, 2e3, 5e3):
        deck = FILTER.replace("1k", f"{resistance:g}")
        few, _ = runner.run(deck + QUIET + ".save v(out)\n.options temp=50\n" + SWEEP, AC, 30)
        assert [curve.name for curve in few] == ["v(out)"]
        everything, _ = runner.run(deck + QUIET + SWEEP, AC, 30)
        assert [curve.name for curve in everything] == ["v(in)", "v(out)", "i(v1)"]
        curve = everything.get("v(out)")
        assert curve is not None
        exact = 1 / (1 + 2j * np.pi * curve.axis * resistance * 1e-6)
        np.testing.assert_allclose(curve.values, exact, rtol=1e-12)
    assert child_pid(runner) == pid


@pytest.mark.ngspice_library
def test_threads_take_turns(runner: LibraryRunner) -> None:
    """Decks handed in from several threads at once are all answered rightly."""
    wrong: list[float] = []

    def work(resistance: float) -> None:
        for _ in range(5):
            curves, _ = runner.run(FILTER.replace("1k", f"{resistance:g}") + QUIET + SWEEP, AC, 30)
            curve = curves.curves[1]
            if not np.allclose(
                curve.values, 1 / (1 + 2j * np.pi * curve.axis * resistance * 1e-6), rtol=1e-9
            ):
                wrong.append(resistance)

    threads = [threading.Thread(target=work, args=(value,)) for value in (1e3, 3e3, 1e4, 3e4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert wrong == []


# --------------------------------------------------------------------------- runs that must not be believed


@pytest.mark.ngspice_library
@pytest.mark.parametrize(
    ("deck", "expected", "kind", "message"),
    [
        pytest.param(
            FILTER + "R9 a b 1k\n" + QUIET + SWEEP, AC, RunFailed, "matrix is singular", id="floating"
        ),
        pytest.param(
            FILTER + "R1 in 0 1k\n" + QUIET + SWEEP, AC, RunFailed, "already exists", id="duplicate"
        ),
        pytest.param(
            FILTER + "X1 in out foo\n" + QUIET + SWEEP, AC, RunFailed, "unknown subckt", id="subckt"
        ),
        pytest.param(FILTER + "R2 in 0 {rr}\n" + QUIET + SWEEP, AC, RunFailed, "Undefined", id="undefined"),
        pytest.param(
            FILTER + ".subckt x a b\n" + QUIET + SWEEP, AC, RunFailed, "ngspice library", id="no .ends"
        ),
        pytest.param(FILTER + ".foo\n" + QUIET + SWEEP, AC, RunFailed, "ngspice library", id="unknown card"),
        pytest.param(FILTER + ".end\n", AC, RunFailed, "No job", id="no analysis"),
        pytest.param(FILTER + QUIET + ".ac dec 11 1 1e6\n", AC, RunFailed, "67 points where 61", id="grid"),
        pytest.param(FILTER + ".op\n", AC, RunFailed, "'Operating Point' where 'AC Analysis'", id="analysis"),
        pytest.param(
            FILTER + QUIET + ".save v(in)\n" + SWEEP, AC, RunFailed, r"lack 'v\(out\)'", id="vector"
        ),
        pytest.param(
            HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n" + SWEEP,
            AC,
            RunFailed,
            "singular matrix",
            id="no path",
        ),
        pytest.param(
            HEAD + "R1 in out 1k\nC1 out x 1u\nC2 x 0 1u\n.op\n",
            OP,
            RunFailed,
            "singular matrix",
            id="no path, .op",
        ),
        pytest.param(
            HEAD + "R1 in out 1e-320\nC1 out 0 1e300\n" + QUIET + SWEEP,
            AC,
            RunFailed,
            "no numbers",
            id="not finite",
        ),
        pytest.param(HEAD + "R1 in out\n" + QUIET + SWEEP, AC, SimulatorError, "lacks", id="no value"),
        pytest.param(FILTER + ".control\nquit\n.endc\n", AC, SimulatorError, "begins with", id=".control"),
        pytest.param(FILTER + ".ac dec 10 10 11\n", AC, SimulatorError, "never ends", id="endless grid"),
        pytest.param(
            "* x\u2028*#shell date\n" + FILTER + SWEEP, AC, SimulatorError, "control", id="hidden line"
        ),
    ],
)
def test_a_bad_deck_is_refused_and_the_next_one_runs(
    runner: LibraryRunner, deck: str, expected: Expected, kind: type, message: str
) -> None:
    """What the library gets wrong is an error in one sentence, and does not spoil the run after it."""
    with pytest.raises(SimulatorError, match=message) as caught:
        runner.run(deck, expected, 30)
    assert type(caught.value) is kind
    assert caught.value.remedy
    assert len(runner.run(FILTER + QUIET + SWEEP, AC, 30)[0]) == 3


@pytest.mark.ngspice_library
def test_an_abort_inside_ngspice_is_named_and_survived(runner: LibraryRunner) -> None:
    """An assertion in ngspice's sparse solver ends the child only; its words are in the error."""
    before = child_pid(runner)
    with pytest.raises(RunFailed, match=r"aborted itself.*Assertion"):
        runner.run(FILTER + "R9 a b 1k\n.noise v(out) V1 dec 10 1 1e4\n", NOISE, 30)
    assert child_pid(runner) != before
    assert len(runner.run(FILTER + QUIET + SWEEP, AC, 30)[0]) == 3


@pytest.mark.ngspice_library
def test_a_run_that_takes_too_long_is_stopped() -> None:
    """A library cannot be interrupted: the child is killed, and the next deck gets another."""
    with LibraryRunner() as runner:
        pid = child_pid(runner)
        began = time.monotonic()
        with pytest.raises(RunFailed, match=r"not done after 0\.5 s"):
            runner.run(ENDLESS, TRAN, 0.5)
        assert time.monotonic() - began < 10
        assert is_gone(pid)
        assert len(runner.run(FILTER + QUIET + SWEEP, AC, 30)[0]) == 3


@pytest.mark.ngspice_library
@pytest.mark.skipif(os.name != "posix", reason="signals are a POSIX matter")
@pytest.mark.parametrize(
    ("number", "words"),
    [
        pytest.param("SIGKILL", "was killed from outside", id="killed"),
        pytest.param("SIGSEGV", r"crashed \(segmentation fault\)", id="segmentation fault"),
    ],
)
def test_a_child_that_dies_is_named(number: str, words: str) -> None:
    """A child that is killed or crashes in the middle of a run is an ordinary failed opinion."""
    with LibraryRunner() as runner:
        pid = child_pid(runner)
        killer = threading.Timer(0.3, os.kill, (pid, getattr(signal, number)))
        killer.start()
        with pytest.raises(RunFailed, match=words):
            runner.run(ENDLESS, TRAN, 60)
        killer.join()
        assert child_pid(runner) != pid


@pytest.mark.ngspice_library
@pytest.mark.skipif(os.name != "posix", reason="signals are a POSIX matter")
def test_a_child_that_died_between_runs_is_noticed() -> None:
    """A child that has gone in the meantime fails that run and not the one after."""
    with LibraryRunner() as runner:
        os.kill(child_pid(runner), signal.SIGKILL)
        with pytest.raises(RunFailed, match="was killed from outside"):
            runner.run(FILTER + QUIET + SWEEP, AC, 30)
        assert len(runner.run(FILTER + QUIET + SWEEP, AC, 30)[0]) == 3


@pytest.mark.ngspice_library
def test_ctrl_c_ends_the_child_and_passes_through(monkeypatch: pytest.MonkeyPatch) -> None:
    """KeyboardInterrupt while waiting for an answer reaches the caller, and no child is left."""
    with LibraryRunner() as runner:
        pid = child_pid(runner)

        def interrupt(stream: object) -> None:
            raise KeyboardInterrupt

        with monkeypatch.context() as patch:
            patch.setattr(ngspice_library, "read_json", interrupt)
            with pytest.raises(KeyboardInterrupt):
                runner.run(ENDLESS, TRAN, 30)
        assert is_gone(pid)


@pytest.mark.ngspice_library
def test_closing_ends_the_child_and_its_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """After the context neither the process nor its private folder is left; closing twice is no error."""
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    with LibraryRunner() as runner:
        pid = child_pid(runner)
        assert len(list(tmp_path.iterdir())) == 1
    runner.close()
    assert is_gone(pid)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.ngspice_library
@pytest.mark.parametrize("timeout", [0, -1, float("nan"), float("inf")])
def test_a_time_limit_must_be_a_time(runner: LibraryRunner, timeout: float) -> None:
    """A limit that is none is refused before anything is started."""
    with pytest.raises(SimulatorError, match="time limit"):
        runner.run(FILTER + QUIET + SWEEP, AC, timeout)


@pytest.mark.ngspice_library
@pytest.mark.parametrize("name", ["no-library.so", "odd {0} name.so"])
def test_a_library_that_is_none_is_named(tmp_path: Path, name: str) -> None:
    """A file that cannot be loaded is named, with how to install the real one."""
    path = tmp_path / name
    path.write_text("hello")
    with (
        LibraryRunner(str(path)) as runner,
        pytest.raises(SimulatorError, match="cannot be loaded") as caught,
    ):
        runner.run(FILTER + QUIET + SWEEP, AC, 30)
    assert str(path) in caught.value.message
    assert "libngspice0" in (caught.value.remedy or "")


# -------------------------------------------------------------------------------------------- finding it


def test_missing_pyspice_is_answered_with_the_exact_command(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without PySpice the error says which command installs it."""
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None)
    with pytest.raises(SimulatorError, match="needs PySpice") as caught:
        LibraryRunner("libngspice.so.0")
    assert caught.value.remedy == 'Run: pip install "rcnet[pyspice]"'


def test_a_missing_library_is_answered_with_how_to_install_it(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without the library the error names the packages, and the option that does without."""

    def missing(name: str) -> None:
        raise OSError(name)

    monkeypatch.delenv("NGSPICE_LIBRARY_PATH", raising=False)
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: object())
    monkeypatch.setattr(ctypes.util, "find_library", lambda name: None)
    monkeypatch.setattr(ctypes, "CDLL", missing)
    assert find_library() is None
    with pytest.raises(SimulatorError, match="not on this machine") as caught:
        LibraryRunner()
    remedy = caught.value.remedy or ""
    assert all(
        word in remedy for word in ("apt install libngspice0", "brew install libngspice", "--second-opinion")
    )


def test_the_environment_names_the_library(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """NGSPICE_LIBRARY_PATH comes first; a path in it must lead to a file."""
    path = tmp_path / "libngspice.so.0"
    monkeypatch.setenv("NGSPICE_LIBRARY_PATH", str(path))
    with pytest.raises(SimulatorError, match="NGSPICE_LIBRARY_PATH"):
        find_library()
    path.write_text("x")
    assert find_library() == str(path)
    monkeypatch.setenv("NGSPICE_LIBRARY_PATH", "libngspice.so.0")
    assert find_library() == "libngspice.so.0"


# ----------------------------------------------------------------------------------------------- messages


@settings(deadline=None, max_examples=50)
@given(
    st.dictionaries(st.text(), st.text() | st.booleans() | st.lists(st.integers())), st.binary(max_size=50)
)
def test_messages_arrive_as_they_were_sent(message: dict[str, object], rest: bytes) -> None:
    """JSON and arrays, NaN and signed zeros included, come out of a stream as they went in."""
    stream = io.BytesIO()
    array = np.array([[0.0, -0.0, np.nan], [np.inf, 5e-324, -1.5]]) + 1j
    _frames.write_json(stream, message)
    _frames.write_array(stream, array)
    stream.write(rest)
    stream.seek(0)
    assert _frames.read_json(stream) == message
    assert _frames.read_array(stream).tobytes() == array.tobytes()
    assert stream.read() == rest


@settings(deadline=None, max_examples=100)
@given(st.binary(max_size=60))
def test_nonsense_is_an_error_and_never_executed(data: bytes) -> None:
    """Bytes that are no message raise what the caller expects, whatever length they claim."""
    for reader in (_frames.read_json, _frames.read_array):
        with pytest.raises((EOFError, ValueError)):
            reader(io.BytesIO(data))


def test_a_pickle_is_no_array() -> None:
    """An array of objects, which only a pickle could hold, is refused."""
    buffer = io.BytesIO()
    np.save(buffer, np.array([{}], dtype=object), allow_pickle=True)
    framed = io.BytesIO(len(buffer.getvalue()).to_bytes(8, "little") + buffer.getvalue())
    with pytest.raises(ValueError, match="allow_pickle"):
        _frames.read_array(framed)
