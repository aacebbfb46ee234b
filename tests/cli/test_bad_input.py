"""Bad inputs and bad luck: each is one clear sentence, the right exit code, and nothing half-written."""

from __future__ import annotations

import errno
import os
import re
import signal
import stat
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from .conftest import BROKEN, FILTER, HOLDS, Ended, circuit

Rcnet = Callable[..., Ended]
posix = pytest.mark.skipif(os.name != "posix", reason="scripts, signals and pipes as POSIX has them")


def clear(ended: Ended, says: str, code: int = 2, *, lines: int = 1) -> None:
    """Fail unless the command ended with that code and one sentence (or so many lines) that says so."""
    assert ended.code == code
    assert "Traceback" not in ended.err
    assert "defect of rcnet" not in ended.err
    assert re.search(says, ended.err), ended.err
    # The line that is meant may follow, indented, with carets beneath.
    sentences = [line for line in ended.err.splitlines() if not line.startswith("  ")]
    assert len(sentences) == lines, ended.err
    assert sentences[-1].endswith((".", "?")), ended.err


def left() -> set[str]:
    """Every file below the working folder but the inputs, hidden ones too."""
    inputs = {"gauge.rc.toml", "gauge.cir", "sim"}
    return {str(path) for path in Path().rglob("*") if path.is_file() and path.name not in inputs}


# ---------------------------------------------------------------------- files that are no circuit


def _missing() -> None:
    """Write nothing."""


def _folder() -> None:
    Path("gauge.rc.toml").mkdir()


def _written(text: str | bytes) -> Callable[[], None]:
    def write() -> None:
        Path("gauge.rc.toml").write_bytes(text if isinstance(text, bytes) else text.encode())

    return write


def _changed(old: str, new: str) -> Callable[[], None]:
    assert old in FILTER
    return _written(FILTER.replace(old, new))


CIRCUITS: dict[str, tuple[Callable[[], None], str]] = {
    "missing file": (_missing, r"^rcnet: gauge.rc.toml: there is no such file\."),
    "a folder": (_folder, r"gauge.rc.toml: this is a folder, not a file\."),
    "empty": (_written(""), r"gauge.rc.toml: the file is empty\."),
    "blank": (_written("\n \n\t\n"), r"gauge.rc.toml: the file is empty\."),
    "binary": (_written(b"\x7fELF\0\0\1\2"), r"gauge.rc.toml:1: the file holds a NUL byte"),
    "another encoding": (_written(b"title = 'Pegel f\xfcr'\n"), r"gauge.rc.toml:1: byte 0xfc is not UTF-8"),
    "not TOML": (_written("title = \n"), r"gauge.rc.toml:1: this is not valid TOML"),
    "cut off": (_written('[parts]\nR1 = "in out'), r"gauge.rc.toml:2: this is not valid TOML"),
    "a netlist": (_written("* netlist\nR1 a b 1k\n"), r"gauge.rc.toml:1: this is not valid TOML"),
    "unknown node": (_changed('output = "out"', 'output = "otu"'), r"gauge.rc.toml:2: .*'otu'"),
    "unknown key": (
        _changed("title", "titel"),
        r"gauge.rc.toml:1: unknown key 'titel'\. Did you mean 'title'",
    ),
    "the same name twice": (
        _changed('C1 = "out', 'R1 = "out'),
        r"gauge.rc.toml:5: .* the key 'R1' stands here for the second time\.",
    ),
    "a sweep from next to nothing": (
        _changed('from = "10"', 'from = "1e-320 Hz"'),
        r"gauge.rc.toml:11: ac runs from 1e-320 Hz .* between 1e-30 Hz and 1e\+30 Hz",
    ),
    "a sweep to the end of numbers": (
        _changed('to = "1 MHz"', "to = 1e308"),
        r"gauge.rc.toml:11: ac runs .* to 1e\+308 Hz\. Keep it between",
    ),
    "a value that is none": (_changed("10k 1%", "10q"), r"gauge.rc.toml:4: .*10q"),
    "no source": (_written('[parts]\nR1 = "in 0 1k"\n'), r"gauge.rc.toml: the circuit has no source"),
    "no ground": (
        _written(FILTER.replace('"out 0 10n 5%"', '"out x 10n"').replace('"in 0"', '"in x"')),
        r"gauge.rc.toml:\d+: nothing is connected to ground",
    ),
    "wrong unit": (_changed('dc = "2.5 V"', 'dc = "2.5 Hz"'), r"gauge.rc.toml:9: .*2.5 Hz"),
}


@pytest.mark.parametrize("verb", ["check", "confirm", "response", "netlist", "simulate"])
@pytest.mark.parametrize("case", CIRCUITS)
def test_files_that_are_no_circuit(rcnet: Rcnet, case: str, verb: str) -> None:
    """Every verb refuses what is no circuit with file, line and what is wrong, and writes nothing."""
    prepare, says = CIRCUITS[case]
    prepare()
    ended = rcnet(verb, "gauge.rc.toml")
    clear(ended, says)
    assert left() == set()
    assert not Path("out").exists()


def test_many_mistakes_are_told_at_once(rcnet: Rcnet) -> None:
    """Each mistake of a file has a line of its own, in the file's order."""
    text = FILTER.replace("10k 1%", "10q").replace('"in 0"', '"in"').replace("10n 5%", "10n 5")
    ended = rcnet("check", circuit("gauge.rc.toml", text=text))
    assert ended.code == 2
    places = re.findall(r"^rcnet: gauge.rc.toml:(\d+): ", ended.err, re.MULTILINE)
    assert len(places) == 3
    assert places == sorted(places, key=int)


NETLISTS = {
    "empty": ("", r"gauge.cir: the file is empty|gauge.cir"),
    "title only": ("* title\n", r"gauge.cir"),
    "a line that is none": ("* t\nR1 a\n.end\n", r"gauge.cir:2"),
    "the same part twice": ("* t\nV1 a 0 1\nR1 a 0 1k\nR1 a 0 2k\n.end\n", r"gauge.cir:4"),
    "a device of another kind": ("* t\nV1 a 0 1\nQ1 a 0 0 npn\n.end\n", r"gauge.cir:3"),
    "binary": ("* t\0\n", r"gauge.cir:1: the file holds a NUL byte"),
}


@pytest.mark.parametrize("case", NETLISTS)
def test_netlists_that_are_none(rcnet: Rcnet, case: str) -> None:
    """A netlist that cannot be read is told with its line; nothing is written."""
    text, says = NETLISTS[case]
    Path("gauge.cir").write_text(text, encoding="utf-8")
    ended = rcnet("confirm", "gauge.cir")
    assert ended.code in (1, 2)
    if ended.code == 2:
        clear(ended, says)
    assert left() == set()


def test_netlist_with_commands(rcnet: Rcnet, tmp_path: Path) -> None:
    """Commands in a stranger's netlist are never obeyed."""
    text = (
        "* t\n.control\nshell touch owned\nwrite owned.raw\n.endc\n*ng_script\n*#shell touch owned\n"
        "V1 in 0 AC 1\nR1 in out 1k\nC1 out 0 1u\n.ac dec 5 1 1k\n.print ac v(out)\n.end\n"
    )
    Path("gauge.cir").write_text(text, encoding="utf-8")
    ended = rcnet("confirm", "gauge.cir")
    assert (ended.code, ended.err) == (1, "")
    assert "commands-dropped" in ended.out
    assert "hidden-command" in ended.out
    assert not any("owned" in path for path in left())


@posix
@pytest.mark.parametrize("verb", [["check"], ["confirm"], ["compare", "circuit.rc.toml"]])
def test_pipe_as_a_file(rcnet: Rcnet, verb: list[str]) -> None:
    """A pipe is refused at once instead of waited for."""
    os.mkfifo("pipe.rc.toml")
    os.mkfifo("pipe.raw")
    circuit("circuit.rc.toml")
    begun = time.monotonic()
    clear(rcnet(*verb, "pipe.raw" if "compare" in verb else "pipe.rc.toml"), "a device, a pipe or a socket")
    assert time.monotonic() - begun < 10


@posix
def test_device_as_a_file(rcnet: Rcnet) -> None:
    """An endless device is refused."""
    clear(rcnet("check", "/dev/zero"), "/dev/zero: this is a device")


# ---------------------------------------------------------------------- results


RESULTS: dict[str, tuple[str, str | bytes, str]] = {
    "another circuit": (
        "r.csv",
        "frequency,v(x).real,v(x).imag\n1,1,0\n2,1,0\n",
        r"r.csv: the results are not about this circuit: they hold v\(x\)",
    ),
    "no output": (
        "r.csv",
        "frequency,v(in).real,v(in).imag\n1,1,0\n2,1,0\n",
        r"r.csv: the results of the ac analysis hold no voltage of the output 'out'",
    ),
    "empty": ("r.csv", "", r"r.csv"),
    "no number": ("r.csv", "frequency,v(out).real,v(out).imag\n1,one,0\n", r"r.csv:2"),
    "not a number": ("r.csv", "frequency,v(out).real,v(out).imag\n1,nan,0\n2,1,0\n", r"r.csv"),
    "no raw file": ("r.raw", b"\0\1\2\3", r"r.raw"),
    "another suffix": ("r.xls", "a,b\n", r"r.xls: '.xls' is no suffix of a results file"),
}


@pytest.mark.parametrize("case", RESULTS)
def test_results_that_are_none(rcnet: Rcnet, case: str) -> None:
    """Results that cannot be used are told with their file, and nothing is written."""
    name, contents, says = RESULTS[case]
    Path(name).write_bytes(contents if isinstance(contents, bytes) else contents.encode())
    clear(rcnet("compare", circuit("gauge.rc.toml"), name, "-o", "comparison.json"), says)
    assert left() == {name}


@pytest.mark.ngspice
@pytest.mark.parametrize("share", [0.3, 0.7, 0.99])
def test_truncated_raw_file(rcnet: Rcnet, share: float) -> None:
    """A raw file cut short, as a full disk leaves it, is refused."""
    file = circuit("gauge.rc.toml", HOLDS)
    assert rcnet("simulate", file).code == 0
    whole = Path("out/gauge/results.raw").read_bytes()
    Path("cut.raw").write_bytes(whole[: int(share * len(whole))])
    clear(rcnet("compare", file, "cut.raw"), r"cut.raw")


# ---------------------------------------------------------------------- simulators that misbehave


def simulator(body: str) -> str:
    """A stand-in for ngspice: a script that says a version and then does as told."""
    path = Path("sim").absolute()
    path.write_text(
        f"#!/bin/sh\necho '** ngspice-39 : Circuit level simulation program'\n{body}\n", encoding="utf-8"
    )
    path.chmod(path.stat().st_mode | stat.S_IXUSR)
    return str(path)


SIMULATORS = {
    "killed": ("kill -KILL $$", "was killed from outside"),
    "crashed": ("kill -SEGV $$", "crashed"),
    "failing": ("exit 3", "exit code 3"),
    "silent": ("exit 0", "without writing any results"),
    "cut short": ("printf 'Title: x\\nDate: x\\n' > out.raw", "reported success, but its results"),
    "complaining": ("echo 'Error: no such device' > out.log; exit 1", "no such device"),
}


@posix
@pytest.mark.parametrize("verb", ["confirm", "simulate"])
@pytest.mark.parametrize("case", SIMULATORS)
def test_simulators_that_fail(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch, case: str, verb: str) -> None:
    """A simulator that fails is 2 with how it ended; netlist and log are kept, results are not invented."""
    body, says = SIMULATORS[case]
    monkeypatch.setenv("RCNET_NGSPICE", simulator(body))
    clear(rcnet(verb, circuit("gauge.rc.toml", HOLDS)), says)
    assert left() == {str(Path("out/gauge", name)) for name in ("netlist.cir", "simulator.log")}


@posix
def test_simulator_that_hangs(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """A simulator that hangs is stopped after --timeout, and what it started with it."""
    child = Path("child").absolute()
    monkeypatch.setenv("RCNET_NGSPICE", simulator(f"sleep 611 & echo $! > {child}; wait"))
    begun = time.monotonic()
    ended = rcnet("confirm", "--timeout", "1", circuit("gauge.rc.toml", HOLDS))
    assert time.monotonic() - begun < 20
    clear(ended, r"not done after 1 s and was stopped\. .*--timeout")
    assert gone(int(child.read_text(encoding="utf-8")))


def gone(pid: int, patience: float = 10.0) -> bool:
    """True once a process has ended."""
    until = time.monotonic() + patience
    while time.monotonic() < until:
        try:
            os.kill(pid, 0)
        except ProcessLookupError:
            return True
        # One that has ended and that nobody has asked about yet still has a number.
        state = Path(f"/proc/{pid}/stat")
        if state.exists() and state.read_text(encoding="utf-8").rpartition(")")[2].split()[0] == "Z":
            return True
        time.sleep(0.05)
    return False


@posix
def test_simulator_that_is_none(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch) -> None:
    """RCNET_NGSPICE naming nothing that can be run is told, and not passed over in silence."""
    monkeypatch.setenv("RCNET_NGSPICE", "/nowhere/ngspice")
    clear(rcnet("confirm", circuit("gauge.rc.toml", HOLDS)), "RCNET_NGSPICE is '/nowhere/ngspice'")


@posix
@pytest.mark.skipif(sys.platform != "linux", reason="the stand-in's children are looked up in /proc")
@pytest.mark.parametrize(
    ("number", "code", "says"),
    [(signal.SIGINT, 130, "rcnet: interrupted."), (signal.SIGTERM, 143, "rcnet: terminated.")],
    ids=["interrupted", "terminated"],
)
def test_interrupt(tmp_path: Path, number: signal.Signals, code: int, says: str) -> None:
    """Told to end while the simulator runs: one word, no child or scratch folder left, old files gone."""
    scratch = tmp_path / "scratch"
    scratch.mkdir()
    file = circuit("gauge.rc.toml", HOLDS)
    pids = Path("pids").absolute()
    hang = simulator(f"echo $$ > {pids}; sleep 611 & echo $! >> {pids}; wait")
    stale = Path("out/gauge/results.raw")
    stale.parent.mkdir(parents=True)
    stale.write_text("old", encoding="utf-8")
    with subprocess.Popen(
        [sys.executable, "-m", "rcnet", "confirm", file],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, "RCNET_NGSPICE": hang, "TMPDIR": str(scratch)},
    ) as process:
        until = time.monotonic() + 30
        while time.monotonic() < until and not (pids.exists() and pids.read_text().count("\n") == 2):
            time.sleep(0.02)
        assert any(scratch.iterdir())
        process.send_signal(number)
        out, err = process.communicate(timeout=30)
    assert (process.returncode, out) == (code, "")
    assert err.strip() == says
    assert not any(scratch.iterdir())
    assert all(gone(int(pid)) for pid in pids.read_text().split())
    assert left() == {"pids", str(Path("out/gauge/netlist.cir"))}


# ---------------------------------------------------------------------- places that cannot be written

WRITERS = {
    "confirm": ["confirm", "--second-opinion", "read-back", "gauge.rc.toml", "-o", "taken"],
    "response": ["response", "gauge.rc.toml", "-o", "taken/r.csv"],
    "netlist": ["netlist", "gauge.rc.toml", "-o", "taken/n.cir"],
}


@pytest.mark.parametrize("verb", WRITERS)
def test_file_where_a_folder_is_needed(rcnet: Rcnet, verb: str) -> None:
    """A file in the way of a folder is told, and left as it was."""
    circuit("gauge.rc.toml", HOLDS)
    Path("taken").write_text("mine", encoding="utf-8")
    clear(rcnet(*WRITERS[verb]), "taken.*: a file stands where a folder is needed")
    assert left() == {"taken"}
    assert Path("taken").read_text(encoding="utf-8") == "mine"


@pytest.mark.parametrize("verb", ["response", "netlist"])
def test_folder_that_does_not_exist(rcnet: Rcnet, verb: str) -> None:
    """A result is not written into a folder that is not there; its name may be a slip."""
    circuit("gauge.rc.toml", HOLDS)
    clear(rcnet(*WRITERS[verb]), "the folder for it does not exist")
    assert left() == set()


@posix
@pytest.mark.skipif(os.name == "posix" and os.geteuid() == 0, reason="root may write anywhere")
def test_folder_without_permission(rcnet: Rcnet) -> None:
    """A folder that may not be written to is told."""
    circuit("gauge.rc.toml", HOLDS)
    Path("taken").mkdir(mode=0o500)
    clear(rcnet(*WRITERS["confirm"]), "may not be written to")


@pytest.mark.parametrize("after", [0, 1, 2])
def test_full_disk(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch, after: int) -> None:
    """A disk that fills up at any file is told; no file is half-written, no verdict without its proof."""
    circuit("gauge.rc.toml", HOLDS)
    calls = []

    def fsync(descriptor: int) -> None:
        calls.append(descriptor)
        if len(calls) > after:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr("rcnet.system.files.os.fsync", fsync)
    clear(rcnet(*WRITERS["confirm"]), r"the disk is full; nothing was written\. Free some space")
    kept = {str(Path("taken/gauge", name)) for name in ("netlist.cir", "read-back.csv")[:after]}
    assert left() == kept


@pytest.mark.parametrize("verb", ["response", "netlist"])
def test_full_disk_keeps_the_old_file(rcnet: Rcnet, monkeypatch: pytest.MonkeyPatch, verb: str) -> None:
    """A file that cannot be written whole stays as it was before."""
    circuit("gauge.rc.toml", HOLDS)
    arguments = WRITERS[verb]
    Path("taken").mkdir()
    Path(arguments[-1]).write_text("old", encoding="utf-8")

    def fsync(_: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr("rcnet.system.files.os.fsync", fsync)
    clear(rcnet(*arguments), "the disk is full")
    assert left() == {str(Path(arguments[-1]))}
    assert Path(arguments[-1]).read_text(encoding="utf-8") == "old"


@posix
@pytest.mark.parametrize("unbuffered", ["", "1"])
@pytest.mark.parametrize(
    ("where", "says"),
    [
        (">/dev/full", "rcnet: standard output cannot be written: no space left on device."),
        (">&-", "rcnet: standard output cannot be written: it is closed."),
    ],
)
@pytest.mark.parametrize("verb", ["check", "check --json", "netlist", "response --csv", "--help"])
def test_output_that_takes_nothing(verb: str, where: str, says: str, unbuffered: str) -> None:
    """Standard output that is closed or full is told in one sentence, whatever was to be printed."""
    if where.endswith("full") and not Path("/dev/full").exists():
        pytest.skip("no device that is always full")
    circuit("gauge.rc.toml", HOLDS)
    file = "" if verb == "--help" else "gauge.rc.toml"
    ended = subprocess.run(
        ["/bin/sh", "-c", f'exec "$0" -m rcnet {verb} {file} {where}', sys.executable],
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, "PYTHONUNBUFFERED": unbuffered},
        check=False,
        timeout=60,
    )
    assert ended.returncode == 2
    assert ended.stderr.startswith(says)
    assert ended.stderr.count("\n") == 1


NETLIST = "* gauge\nV1 in 0 AC 1\nR1 in out 10k\nC1 out 0 10n\n.ac dec 10 10 1meg\n.end\n"


@pytest.mark.parametrize("spelt", ["gauge.cir", "./gauge.cir", "folder/../gauge.cir", "link.cir"])
def test_netlist_over_its_own_input(rcnet: Rcnet, spelt: str) -> None:
    """A netlist never replaces the file it is made of, however the path is spelt."""
    Path("gauge.cir").write_text(NETLIST, encoding="utf-8")
    Path("folder").mkdir()
    Path("link.cir").symlink_to("gauge.cir")
    clear(rcnet("netlist", "gauge.cir", "-o", spelt), "this would overwrite the input 'gauge.cir'")
    assert Path("gauge.cir").read_text(encoding="utf-8") == NETLIST


def test_comparison_over_the_results(rcnet: Rcnet) -> None:
    """A comparison never replaces the results it is about."""
    file = circuit("gauge.rc.toml", HOLDS)
    assert rcnet("response", file, "-o", "r.csv").code == 0
    before = Path("r.csv").read_bytes()
    clear(rcnet("compare", file, "r.csv", "-o", "./r.csv"), "this would overwrite the input 'r.csv'")
    assert Path("r.csv").read_bytes() == before


@pytest.mark.parametrize("folder", [".", "..", "folder"])
def test_folder_where_a_file_is_wanted(rcnet: Rcnet, folder: str) -> None:
    """A folder named as the file to write is told as one."""
    Path("folder").mkdir()
    circuit("gauge.rc.toml", HOLDS)
    clear(rcnet("netlist", "gauge.rc.toml", "-o", folder), "a folder of that name stands there")
    assert left() == set()


@pytest.mark.parametrize("verb", ["check", "confirm", "response", "netlist", "simulate"])
@pytest.mark.parametrize(
    "text",
    [FILTER, "# gauge\n\n" + FILTER, FILTER[FILTER.index("[parts]") :], FILTER.replace("\n", "\r\n")],
    ids=["title", "comment", "table", "crlf"],
)
def test_circuit_file_called_a_netlist(rcnet: Rcnet, text: str, verb: str) -> None:
    """A circuit file under a netlist's name is one sentence, not a complaint about every line."""
    Path("gauge.cir").write_bytes(text.encode())
    clear(rcnet(verb, "gauge.cir"), r"gauge.cir: this looks like a circuit file.* end in \.rc\.toml\.$")


SWEEPS = {"next to nothing": "1e-320 1k", "the end of numbers": "1 1e308", "backwards": "1k 10"}


@pytest.mark.parametrize("case", SWEEPS)
def test_netlists_whose_sweep_is_no_use(rcnet: Rcnet, case: str) -> None:
    """Such a sweep is a finding, and a response over it one sentence."""
    text = NETLIST.replace("10 1meg", SWEEPS[case])
    Path("gauge.cir").write_text(text, encoding="utf-8")
    found = rcnet("check", "gauge.cir")
    assert (found.code, found.err) == (1, "")
    assert "empty-sweep" in found.out
    clear(rcnet("response", "gauge.cir"), "the circuit's own ac sweep has no points: ")
    written = rcnet("netlist", "gauge.cir", "--anyway")
    assert written.code == 0
    assert "Warning" not in written.err


# ---------------------------------------------------------------------- circuits without an answer


def test_circuit_without_an_answer(rcnet: Rcnet) -> None:
    """What has no response is told by the parts and nodes at fault."""
    file = circuit("gauge.rc.toml", text=BROKEN)
    clear(rcnet("response", file), "R2|x|y")


def test_circuit_without_ac(rcnet: Rcnet) -> None:
    """Without a source that carries ac there is no response to give."""
    file = circuit("gauge.rc.toml", text=FILTER.replace("ac = 1\n", ""))
    clear(rcnet("response", file), "no source carries ac")
