"""What is loaded when, and what the package exposes."""

from __future__ import annotations

import inspect
import json
import subprocess
import sys
from pathlib import Path
from types import FunctionType

import pytest

import rcnet
from rcnet import errors

HEAVY = ("scipy", "networkx", "matplotlib", "plotly", "PySpice", "rich", "numba", "sympy", "jinja2", "dask")
CIRCUIT = """
title = "Float gauge filter"
output = "out"
[parts]
R1 = "in out 10k"
C1 = "out 0 10n"
[sources.Vin]
nodes = "in 0"
ac = 1
[[claims]]
says = "Corner"
measure = "cutoff"
equals = "1.59 kHz"
within = "1 %"
hand = "1/(2*pi*R1*C1)"
"""


def loaded(code: str) -> set[str]:
    """The packages loaded once `code` has run in an interpreter of its own."""
    program = f"import json, sys\n{code}\nprint('\\n' + json.dumps(sorted(sys.modules)))"
    ended = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, timeout=120
    )
    return {name.partition(".")[0] for name in json.loads(ended.stdout.splitlines()[-1])}


def verb(*arguments: str) -> str:
    """Code that runs the command line and goes on behind it."""
    return f"from rcnet.cli.main import run\ntry: run({list(arguments)!r})\nexcept SystemExit: pass"


QUICK = {
    "import rcnet": "import rcnet",
    "--help": verb("--help"),
    "help of a verb": verb("confirm", "--help"),
    "--version": verb("--version"),
}


@pytest.mark.parametrize("case", QUICK)
def test_what_must_start_quickly_loads_nothing_heavy(case: str) -> None:
    """`import rcnet` and the helps load neither scipy nor networkx nor anything that draws or compiles."""
    assert loaded(QUICK[case]) & set(HEAVY) == set()


def test_check_loads_no_scipy(tmp_path: Path) -> None:
    """`rcnet check` of an ordinary circuit works with numpy alone."""
    file = tmp_path / "gauge.rc.toml"
    file.write_text(CIRCUIT, encoding="utf-8")
    found = loaded(verb("check", str(file)))
    assert "numpy" in found
    assert found & (set(HEAVY) - {"rich"}) == set()


def test_all_is_what_is_exposed() -> None:
    """`__all__` is sorted, holds no name twice, and each name in it can be had."""
    assert list(rcnet.__all__) == sorted(set(rcnet.__all__))
    for name in rcnet.__all__:
        assert getattr(rcnet, name) is not None
        assert name in dir(rcnet)
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = rcnet.nothing  # type: ignore[attr-defined]


def test_names_of_the_interface() -> None:
    """The names that other people's scripts rely on are there."""
    assert {
        *("Network", "load", "check", "write_netlist", "read_netlist", "read_results", "compare"),
        *("Circuit", "Comparison", "RcnetError"),
    } <= set(rcnet.__all__)


def test_every_public_name_stands_under_one_heading() -> None:
    """The package's docstring names every function and class it exposes, once; the errors have a line."""
    words = (rcnet.__doc__ or "").replace(",", " ").split()
    for name in rcnet.__all__:
        if not name.endswith("Error"):
            assert words.count(name) == 1, name


ORDERS = {
    "function first": "rcnet.check, rcnet.compare",
    "load first": "rcnet.load",
    "rooms first": "rcnet.Comparison, rcnet.Finding",
    "by import": "__import__('rcnet.check'), __import__('rcnet.compare.fsv')",
    "command line first": "__import__('rcnet.cli.confirm'), __import__('rcnet.confirm')",
}


@pytest.mark.parametrize("case", ORDERS)
def test_functions_are_not_hidden_by_rooms_of_their_name(case: str) -> None:
    """`rcnet.check` and `rcnet.compare` are the functions, whatever was imported before and however often."""
    code = (
        f"import rcnet\n{ORDERS[case]}\n"
        "for _ in range(2):\n"
        "    assert type(rcnet.check).__name__ == type(rcnet.compare).__name__ == 'function'\n"
        "from rcnet import check, compare\n"
        "assert callable(check) and callable(compare)\n"
        "from rcnet.compare import Comparison\n"
        "from rcnet.check import Check\n"
    )
    loaded(code)


def test_functions_in_this_process() -> None:
    """The same holds here, where the tests have loaded every room."""
    assert isinstance(rcnet.check, FunctionType)
    assert isinstance(rcnet.compare, FunctionType)


def test_every_error_is_in_the_tree() -> None:
    """Every error class derives from RcnetError and is drawn in its module's docstring."""
    kinds = [
        value
        for _, value in inspect.getmembers(errors, inspect.isclass)
        if issubclass(value, BaseException) and value.__module__ == errors.__name__
    ]
    assert len(kinds) > 5
    for kind in kinds:
        assert issubclass(kind, errors.RcnetError)
        assert kind.__name__ in (errors.__doc__ or "")
        assert kind.__name__ in rcnet.__all__
        assert kind.__doc__


def test_module_runs() -> None:
    """`python -m rcnet` is the command line."""
    ended = subprocess.run(
        [sys.executable, "-m", "rcnet", "--version"], capture_output=True, text=True, check=True, timeout=60
    )
    assert ended.stdout.startswith("rcnet ")
