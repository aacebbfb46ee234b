"""The command line as a test meets it: run in this process, or as a program of its own."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from rcnet.cli.main import run

# 10 kohm and 10 nF: corner 1/(2 pi RC) = 1591.549 Hz.
FILTER = """\
title = "Float gauge: noise filter ahead of the logger"
output = "out"
[parts]
R1 = "in out 10k 1%"
C1 = "out 0 10n 5%"
[sources.Vin]
nodes = "in 0"
ac = 1
dc = "2.5 V"
[analysis]
ac = { from = "10", to = "1 MHz", per_decade = 10 }
operating_point = true
"""
HOLDS = '[[claims]]\nsays = "Corner"\nmeasure = "cutoff"\nequals = "1.59 kHz"\nwithin = "1 %"\n'
FAILS = '[[claims]]\nsays = "Corner"\nmeasure = "cutoff"\nat_least = "2 kHz"\n'
OPEN = '[[claims]]\nsays = "Band"\nmeasure = "bandwidth"\nat_least = "2 kHz"\n'
# A formula that leads to another verdict than the network is a warning.
WARNS = HOLDS + 'hand = "1/(R1*C1)"\n'
# A capacitor whose other end nothing touches, and a node without a path to ground: an error.
BROKEN = FILTER.replace('C1 = "out 0 10n 5%"', 'C1 = "out 0 10n"\nR2 = "x y 1k"')


@dataclass(frozen=True)
class Ended:
    """How a command ended: its exit code, and what it said."""

    code: int
    out: str
    err: str


@pytest.fixture(autouse=True)
def _elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Every test works in an empty folder of its own, in a plain terminal."""
    monkeypatch.chdir(tmp_path)
    for name in ("RCNET_DEBUG", "COLUMNS", "FORCE_COLOR", "TTY_COMPATIBLE"):
        monkeypatch.delenv(name, raising=False)


@pytest.fixture
def rcnet(capsys: pytest.CaptureFixture[str]) -> Callable[..., Ended]:
    """Run the command line in this process."""

    def call(*arguments: str) -> Ended:
        capsys.readouterr()
        with pytest.raises(SystemExit) as ended:
            run([*arguments])
        said = capsys.readouterr()
        code = ended.value.code
        assert isinstance(code, int)
        return Ended(code, said.out, said.err)

    return call


@pytest.fixture
def without_ngspice(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine on which no ngspice is found."""
    monkeypatch.setenv("PATH", str(tmp_path_factory.mktemp("nothing")))
    monkeypatch.delenv("RCNET_NGSPICE", raising=False)


def program(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    """Run the command line as a program of its own."""
    return subprocess.run(
        [sys.executable, "-m", "rcnet", *arguments],
        capture_output=True,
        text=True,
        encoding="utf-8",
        env={**os.environ, **environment},
        check=False,
        timeout=120,
    )


def circuit(name: str = "float-gauge.rc.toml", *claims: str, text: str = FILTER) -> str:
    """Write a circuit file into the working folder; its path as given to a command."""
    path = Path(name)
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text + "".join(claims), encoding="utf-8")
    return name
