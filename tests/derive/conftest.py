"""Networks and their derivations as the tests of this folder meet them."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from rcnet.circuit import Network
from rcnet.derive import Derivation, Result, derive

Build = Callable[..., Network]


@pytest.fixture
def network() -> Build:
    """A network from lines as `R1 in out 10k`, driven by 1 V ac at `in`; keywords are the source's."""

    def build(*lines: str, drive: tuple[str, str] = ("in", "0"), kind: str = "V", **waveform: Any) -> Network:
        made = Network("Float gauge")
        add = made.add_voltage_source if kind == "V" else made.add_current_source
        add(f"{kind}gauge", *drive, **{"ac": 1, **waveform})
        for line in lines:
            name, *nodes, value = line.split()
            if name[0] == "E":
                made.add_voltage_controlled_voltage_source(name, *nodes, value)
            elif name[0] == "L":
                made.add_inductor(name, *nodes, value)
            else:
                (made.add_resistor if name[0] == "R" else made.add_capacitor)(name, *nodes, value)
        return made

    return build


@pytest.fixture
def rules() -> Callable[..., dict[tuple[str, str], Result]]:
    """What every rule and approximation states, by rule and by what it stands for."""

    def stated(of: Any, node: str | None = None) -> dict[tuple[str, str], Result]:
        done = of if isinstance(of, Derivation) else derive(of, node)
        return {(r.rule, r.stands_for): r for r in (*done.approximations, *done.rules)}

    return stated
