"""Shared by the tests of rules: circuits from a few lines, the findings of one rule, ngspice by hand."""

from __future__ import annotations

import os
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

from rcnet.curves import Curves
from rcnet.curves.raw import parse_raw


@pytest.fixture
def ngspice(tmp_path: Path) -> Callable[[str], Curves]:
    """A function that runs one netlist with `ngspice -b -n -r`; exit code 0 is demanded."""

    def run(text: str) -> Curves:
        (tmp_path / "in.cir").write_text(text, encoding="utf-8")
        done = subprocess.run(
            [os.environ.get("RCNET_NGSPICE", "ngspice"), "-b", "-n", "-r", "out.raw", "in.cir"],
            cwd=tmp_path,
            env={"HOME": str(tmp_path), "PATH": os.environ["PATH"], "LC_ALL": "C"},
            stdin=subprocess.DEVNULL,
            capture_output=True,
            timeout=60,
            check=False,
        )
        assert done.returncode == 0, done.stderr
        return parse_raw((tmp_path / "out.raw").read_bytes(), "out.raw")

    return run
