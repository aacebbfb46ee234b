"""`rcnet response` along time."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path

import pytest

from .conftest import FILTER, Ended

Rcnet = Callable[..., Ended]

# 10 kohm and 10 nF: RC = 100 us; a step of 5 V at t = 0.
STEP = FILTER.replace('dc = "2.5 V"', "step = { from = 0, to = 5 }")


@pytest.fixture(autouse=True)
def _file() -> None:
    Path("step.rc.toml").write_text(STEP, encoding="utf-8")


def test_json_holds_the_exact_step_response(rcnet: Rcnet) -> None:
    """Times and volts, 5 (1 - exp(-t/RC)) of a single section."""
    done = rcnet("response", "step.rc.toml", "--until", "500 us", "--points", "6", "--json")
    document = json.loads(done.out)

    assert done.code == 0
    assert list(document) == ["time", "curves"]
    assert document["time"] == pytest.approx([0, 1e-4, 2e-4, 3e-4, 4e-4, 5e-4])
    exact = [5 * -math.expm1(-time / 1e-4) for time in document["time"]]
    assert document["curves"]["v(out)"] == pytest.approx(exact, rel=1e-12)


def test_table_and_csv(rcnet: Rcnet) -> None:
    """The table is in engineering notation; CSV has a time column and a real one for each node."""
    table = rcnet(
        "response", "step.rc.toml", "--until", "100 us", "--points", "2", "--of", "in", "--of", "out"
    )
    assert table.out.splitlines()[0].split() == ["time", "v(in)", "v(out)"]
    assert "3.1606 V" in table.out  # 5 (1 - 1/e)
    lines = rcnet("response", "step.rc.toml", "--until", "100 us", "--points", "2", "--csv").out.splitlines()
    assert lines[0] == "time,v(out)"
    assert float(lines[2].split(",")[1]) == pytest.approx(5 * -math.expm1(-1), rel=1e-12)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--points", "4"], "--until"),
        (["--until", "-1 ms"], "above zero"),
        (["--until", "1 kHz"], "s"),
        (["--until", "1 ms", "--at", "50"], "--at does not go with --until"),
        (["--until", "1 ms", "--points", "2000000"], "1000000"),
    ],
)
def test_what_cannot_be_asked(rcnet: Rcnet, options: list[str], words: str) -> None:
    """Each wrong wish gives one sentence and exit code 2."""
    done = rcnet("response", "step.rc.toml", *options)

    assert done.code == 2
    assert words in done.err
    assert "Traceback" not in done.err
