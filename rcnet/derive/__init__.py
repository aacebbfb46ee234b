"""What paper says about a network: its transfer function in part names, rules of thumb and their errors."""

from .approximations import Asymptote
from .derivation import Derivation, derive
from .formula import Formula
from .roots import Cancelled, Root, Roots
from .rule import Result, Rule
from .thumb_table import RULES
from .written import Number, Written

__all__ = [
    "RULES",
    "Asymptote",
    "Cancelled",
    "Derivation",
    "Formula",
    "Number",
    "Result",
    "Root",
    "Roots",
    "Rule",
    "Written",
    "derive",
]
