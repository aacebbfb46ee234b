"""Running ngspice by hand, as somebody does who was given a netlist."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from rcnet.curves import Curve, Curves
from rcnet.curves.raw import parse_raw
from rcnet.errors import ResultsError

# pytest's importlib mode does not make the modules beside the tests importable.
sys.path.insert(0, str(Path(__file__).parent))

_TROUBLE = re.compile(
    r"^.*\b(?:error|warning|singular|aborted|mOhm|gmin step).*$", re.IGNORECASE | re.MULTILINE
)


@dataclass(frozen=True)
class Ran:
    """What a run left: exit code (None: it did not end), results, everything it said, files in its folder."""

    code: int | None
    curves: Curves | None
    log: str
    files: tuple[str, ...]

    def curve(self, name: str, analysis: str = "ac") -> Curve:
        """One curve, which must be there."""
        assert self.curves is not None, self.log
        found = [curve for curve in self.curves if curve.name == name and curve.analysis == analysis]
        assert found, (name, [curve.name for curve in self.curves])
        return found[0]

    @property
    def trouble(self) -> list[str]:
        """The lines of the log that warn or complain."""
        return _TROUBLE.findall(self.log)


@pytest.fixture
def ngspice(tmp_path: Path) -> Callable[..., Ran]:
    """A function that runs one netlist with `ngspice -b -n -r` in a folder of its own."""
    count = 0

    def run(text: str | bytes, timeout: float = 30) -> Ran:
        nonlocal count
        count += 1
        folder = tmp_path / f"run{count}"
        folder.mkdir()
        (folder / "in.cir").write_bytes(text.encode() if isinstance(text, str) else text)
        argv = [os.environ.get("RCNET_NGSPICE", "ngspice"), "-b", "-n", "-r", "out.raw", "in.cir"]
        environment = {"HOME": str(folder), "PATH": os.environ["PATH"], "LC_ALL": "C"}
        try:
            done = subprocess.run(
                argv,
                cwd=folder,
                env=environment,
                stdin=subprocess.DEVNULL,
                capture_output=True,
                timeout=timeout,
                check=False,
            )
        except subprocess.TimeoutExpired:
            return Ran(None, None, "", tuple(sorted(path.name for path in folder.iterdir())))
        log = (done.stdout + done.stderr).decode("utf-8", "replace")
        curves, raw = None, folder / "out.raw"
        if raw.exists():
            try:
                curves = parse_raw(raw.read_bytes(), "out.raw")
            except ResultsError:
                curves = None
        return Ran(done.returncode, curves, log, tuple(sorted(path.name for path in folder.iterdir())))

    return run
