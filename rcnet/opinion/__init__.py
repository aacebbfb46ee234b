"""Second opinions: who else can answer for a netlist."""

from .ngspice import RunFailed, find_ngspice, install_hint
from .ngspice_library import LibraryRunner, find_library
from .read_back import read_back
from .second_opinion import CHOICES, Opinion, Which, ask

__all__ = [
    "CHOICES",
    "LibraryRunner",
    "Opinion",
    "RunFailed",
    "Which",
    "ask",
    "find_library",
    "find_ngspice",
    "install_hint",
    "read_back",
]
