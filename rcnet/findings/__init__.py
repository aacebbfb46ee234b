"""Findings: rules that look at a circuit or a netlist and report."""

from .finding import RULES, Finding, Remark, Rule, Severity, all_rules, findings, rule

__all__ = ["RULES", "Finding", "Remark", "Rule", "Severity", "all_rules", "findings", "rule"]
