"""Comparison: where two accounts of one circuit differ, by how much, and by how much they may."""

from .comparison import Comparison, CurveComparison, Difference, Held, Span, Uncompared, compare
from .fsv import Fsv, fsv
from .granted import Grant, parse_grant

__all__ = [
    "Comparison",
    "CurveComparison",
    "Difference",
    "Fsv",
    "Grant",
    "Held",
    "Span",
    "Uncompared",
    "compare",
    "fsv",
    "parse_grant",
]
