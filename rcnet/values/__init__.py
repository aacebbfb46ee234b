"""Numbers as people, data sheets, netlists and hand formulas write them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..lazily import hand_out
from .expression import Expression, parse_expression
from .quantity import format_quantity, parse_quantity, write_quantity
from .spice_number import SpiceNumber, number_oddity, read_spice_number, write_spice_number
from .tolerance import Tolerance, classify_extra, parse_rating, parse_tempco, parse_tolerance

if TYPE_CHECKING:
    from .netlist_expression import (
        NetlistExpression,
        NetlistFunction,
        parse_netlist_expression,
        parse_netlist_function,
    )
    from .series import SERIES, above, below, customary_series, in_series, nearest, values_between

# What most circuits need none of is loaded when it is first used.
_LATE = {
    **dict.fromkeys(
        ("NetlistExpression", "NetlistFunction", "parse_netlist_expression", "parse_netlist_function"),
        "netlist_expression",
    ),
    **dict.fromkeys(
        ("SERIES", "above", "below", "customary_series", "in_series", "nearest", "values_between"), "series"
    ),
}

__all__ = [
    "SERIES",
    "Expression",
    "NetlistExpression",
    "NetlistFunction",
    "SpiceNumber",
    "Tolerance",
    "above",
    "below",
    "classify_extra",
    "customary_series",
    "format_quantity",
    "in_series",
    "nearest",
    "number_oddity",
    "parse_expression",
    "parse_netlist_expression",
    "parse_netlist_function",
    "parse_quantity",
    "parse_rating",
    "parse_tempco",
    "parse_tolerance",
    "read_spice_number",
    "values_between",
    "write_quantity",
    "write_spice_number",
]

hand_out(__name__, _LATE)
