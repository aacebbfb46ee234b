"""Findings: rules that look at a circuit or a netlist and report."""

from .finding import (
    RULES,
    Finding,
    Remark,
    Rule,
    Severity,
    all_rules,
    findings,
    found,
    found_in_text,
    in_order,
    rule,
)
from .silence import UNSILENCEABLE_BY_FILE, Silences, sifted, unknown_code, with_silence

__all__ = [
    "RULES",
    "UNSILENCEABLE_BY_FILE",
    "Finding",
    "Remark",
    "Rule",
    "Severity",
    "Silences",
    "all_rules",
    "findings",
    "found",
    "found_in_text",
    "in_order",
    "rule",
    "sifted",
    "unknown_code",
    "with_silence",
]
