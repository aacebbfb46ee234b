"""Shared test set-up: what may be skipped where ngspice is absent, and what may not in CI."""

from __future__ import annotations

import ctypes.util
import importlib.util
import os
import shutil

import pytest

HAVE_NGSPICE = bool(os.environ.get("RCNET_NGSPICE") or shutil.which("ngspice"))
HAVE_LIBRARY = bool(ctypes.util.find_library("ngspice")) and importlib.util.find_spec("PySpice") is not None


def pytest_runtest_setup(item: pytest.Item) -> None:
    """Skip what needs ngspice where it is absent; in CI its absence is a failure."""
    for marker, present in (("ngspice", HAVE_NGSPICE), ("ngspice_library", HAVE_LIBRARY)):
        if item.get_closest_marker(marker) and not present:
            if os.environ.get("CI"):
                pytest.fail(f"CI must have what the marker {marker!r} stands for", pytrace=False)
            pytest.skip(f"{marker} is not installed here")
