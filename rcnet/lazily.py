"""Names of a package that are loaded when they are first used, so that a command starts quickly."""

from __future__ import annotations

import importlib
import sys
from collections.abc import Mapping
from types import ModuleType
from typing import Any


def hand_out(package: str, homes: Mapping[str, str]) -> None:
    """Let a package give each name from the module it lives in, its home, once somebody asks for it.

    homes: name -> module, relative to the package. A function may be called like its module.
    """

    class _Package(ModuleType):
        """The package, in which a public name stays what it is though a module is called the same."""

        def __setattr__(self, name: str, value: Any) -> None:
            # Python puts a module into its package under its own name once anything has imported it.
            if name not in homes or not isinstance(value, ModuleType):
                super().__setattr__(name, value)

        def __getattr__(self, name: str) -> Any:
            home = homes.get(name)
            if home is None:
                raise AttributeError(f"module {package!r} has no attribute {name!r}")
            value = getattr(importlib.import_module(f".{home}", package), name)
            self.__dict__[name] = value
            return value

        def __dir__(self) -> list[str]:
            return sorted({*self.__dict__, *homes})

    sys.modules[package].__class__ = _Package
