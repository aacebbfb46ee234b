"""The room's public names are the ones it lists."""

from __future__ import annotations

import types

import rcnet.values


def test_all_is_sorted_and_complete() -> None:
    """`__all__` holds every public name but modules: constants, classes, functions, each in order."""
    public = [
        name
        for name in dir(rcnet.values)
        if not name.startswith("_")
        and not isinstance(getattr(rcnet.values, name), types.ModuleType)
        and name not in ("annotations", "TYPE_CHECKING", "hand_out")
    ]
    in_order = sorted(public, key=lambda name: (not name.isupper(), not name[0].isupper(), name))
    assert rcnet.values.__all__ == in_order
