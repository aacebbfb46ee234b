"""The room's public names are the ones it lists."""

from __future__ import annotations

import types

import rcnet.values


def test_all_is_sorted_and_complete() -> None:
    """`__all__` holds every public name that is not a module, in order."""
    public = [
        name
        for name, value in vars(rcnet.values).items()
        if not name.startswith("_") and not isinstance(value, types.ModuleType) and name != "annotations"
    ]
    assert sorted(public) == rcnet.values.__all__ == sorted(rcnet.values.__all__)
