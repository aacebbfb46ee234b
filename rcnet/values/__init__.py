"""Numbers as people, data sheets, netlists and hand formulas write them."""

from __future__ import annotations

from .expression import Expression, parse_expression
from .quantity import format_quantity, parse_quantity, write_quantity
from .spice_number import SpiceNumber, number_oddity, read_spice_number, write_spice_number
from .tolerance import Tolerance, classify_extra, parse_rating, parse_tempco, parse_tolerance

__all__ = [
    "Expression",
    "SpiceNumber",
    "Tolerance",
    "classify_extra",
    "format_quantity",
    "number_oddity",
    "parse_expression",
    "parse_quantity",
    "parse_rating",
    "parse_tempco",
    "parse_tolerance",
    "read_spice_number",
    "write_quantity",
    "write_spice_number",
]
