"""Choosing parts of preferred values that meet a target in the real, loaded network."""

from .account import counted
from .candidate import Candidate, Held
from .design import Design, design
from .request import read_target
from .target import CAPACITORS, KEEP, KINDS, RESISTORS, Target

__all__ = [
    "CAPACITORS",
    "KEEP",
    "KINDS",
    "RESISTORS",
    "Candidate",
    "Design",
    "Held",
    "Target",
    "counted",
    "design",
    "read_target",
]
