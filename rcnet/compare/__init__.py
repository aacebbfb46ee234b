"""Comparison: where two accounts of one circuit differ, by how much, and by how much they may."""

from .comparison import Comparison, CurveComparison, Difference, Span, Uncompared, compare
from .fsv import Fsv, fsv

__all__ = ["Comparison", "CurveComparison", "Difference", "Fsv", "Span", "Uncompared", "compare", "fsv"]
