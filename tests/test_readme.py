"""The README's commands do what it shows: every console block is run, and its Python block too.

To renew the output shown there after a deliberate change: `python tests/test_readme.py`.
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

README = Path(__file__).parents[1] / "README.md"
_CONSOLE = re.compile(r"^```console\n(.*?)^```$", re.DOTALL | re.MULTILINE)
_NETLIST = re.compile(r"^```spice\n(\* (\S+\.cir):.*?)^```$", re.DOTALL | re.MULTILINE)
_PYTHON = re.compile(r"^```python\n(.*?)^```$", re.DOTALL | re.MULTILINE)


def rendered(block: str, folder: Path) -> str:
    """A console block with the output its commands really give, run one after another in one folder.

    The netlists shown lie in that folder, each under the name its title begins with.
    """
    for netlist, name in _NETLIST.findall(README.read_text(encoding="utf-8")):
        (folder / name).write_text(netlist, encoding="utf-8")
    lines = []
    for line in block.splitlines():
        if line.startswith("$ "):
            lines += [line, *_output(line[2:], folder)]
    return "\n".join(lines) + "\n"


def _without_rounding(block: str) -> str:
    """Where the last digits differ most, and by how much, depends on the processor."""
    return re.sub(r"^.*\(rounding\)$", "(rounding)", block, flags=re.MULTILINE)


def _output(command: str, folder: Path) -> list[str]:
    words = command.split()
    assert words[0] == "rcnet", "only rcnet is run from the README"
    environment = {**os.environ, "COLUMNS": "80", "NO_COLOR": "1"}
    done = subprocess.run(
        [sys.executable, "-c", "from rcnet.cli.main import run; run()", *words[1:]],
        cwd=folder,
        env=environment,
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
    )
    return (done.stdout + done.stderr).splitlines()


@pytest.mark.parametrize("number", range(len(_CONSOLE.findall(README.read_text(encoding="utf-8")))))
def test_console_block_shows_what_happens(number: int, tmp_path: Path) -> None:
    """Every command in the README prints what stands below it."""
    block = _CONSOLE.findall(README.read_text(encoding="utf-8"))[number]

    assert _without_rounding(rendered(block, tmp_path)) == _without_rounding(block)


@pytest.mark.parametrize("number", range(len(_PYTHON.findall(README.read_text(encoding="utf-8")))))
def test_python_block_runs(number: int, tmp_path: Path) -> None:
    """Every Python example in the README runs as written."""
    block = _PYTHON.findall(README.read_text(encoding="utf-8"))[number]
    done = subprocess.run(
        [sys.executable, "-c", block], cwd=tmp_path, capture_output=True, text=True, check=False
    )

    assert done.returncode == 0, done.stderr


if __name__ == "__main__":
    import tempfile

    with tempfile.TemporaryDirectory() as scratch:
        text = README.read_text(encoding="utf-8")
        text = _CONSOLE.sub(lambda found: f"```console\n{rendered(found[1], Path(scratch))}```", text)
    README.write_text(text, encoding="utf-8")
