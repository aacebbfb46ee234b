"""The JSON documents: plain dictionaries with the keys that other people's scripts rely on."""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from ..check import Check
    from ..circuit import Circuit
    from ..claims import ClaimResult
    from ..compare import Comparison, CurveComparison, Difference
    from ..confirmation import Confirmation
    from ..curves import Curve
    from ..findings import Finding


def to_json(document: Any, *, ascii_only: bool = False) -> str:
    """A document as text, always valid JSON: a number that JSON cannot hold becomes null."""
    text = _dumped(document, ascii_only)
    # The name of a file need not be text; escaped it can be written all the same.
    return text if ascii_only or text.isascii() or _encodable(text) else _dumped(document, True)


def _dumped(document: Any, ascii_only: bool) -> str:
    return json.dumps(_finite(document), indent=2, ensure_ascii=ascii_only, allow_nan=False) + "\n"


def _encodable(text: str) -> bool:
    try:
        text.encode()
    except UnicodeEncodeError:
        return False
    return True


def _finite(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_finite(item) for item in value]
    return value


def check_document(check: Check) -> dict[str, Any]:
    """The document of `check` for one circuit."""
    return {
        "circuit": check.circuit.name,
        "verdict": check.verdict,
        **left_out_document(check.circuit),
        "findings": [finding_document(finding) for finding in check.findings],
        "claims": [claim_document(result) for result in check.claims],
        "silenced": len(check.silenced),
    }


def left_out_document(circuit: Circuit) -> dict[str, Any]:
    """The parts left out as not linear and the nodes where they were connected; {} where there are none."""
    if not circuit.left_out:
        return {}
    parts = [
        {
            "name": left.name,
            "kind": left.kind,
            "nodes": list(left.nodes),
            "file": left.place.file,
            "line": left.place.line,
        }
        for left in circuit.left_out
    ]
    boundary = list(dict.fromkeys(node for left in circuit.left_out for node in left.nodes))
    return {"left_out": parts, "boundary": boundary}


def finding_document(finding: Finding) -> dict[str, Any]:
    """One finding."""
    return {
        "code": finding.code,
        "severity": finding.severity,
        "message": finding.message,
        "file": finding.file,
        "line": finding.line,
        "remedy": finding.remedy,
        "column": finding.column,
        "width": finding.width,
    }


def claim_document(result: ClaimResult) -> dict[str, Any]:
    """One claim with what came of it."""
    return {
        "says": result.claim.says,
        "measure": result.claim.measure.name,
        "of": " ".join(result.claim.of),
        "unit": result.claim.measure.unit,
        "exact": result.exact,
        "hand": result.hand,
        "low": result.low,
        "high": result.high,
        "method": result.method,
        "margin": result.margin,
        "verdict": result.verdict,
        "why": result.why,
        "limiting": result.limiting,
        "needed": result.needed,
    }


def comparison_document(comparison: Comparison) -> dict[str, Any]:
    """The document of `compare`, also `comparison.json`."""
    return {
        "circuit": comparison.circuit.name,
        "second_opinion": comparison.second_opinion,
        "verdict": comparison.verdict,
        "curves": [_curve(curve) for curve in comparison.curves],
        "not_compared": [
            {"name": curve.name, "analysis": curve.analysis, "why": curve.why}
            for curve in comparison.uncompared
        ],
        "remarks": list(comparison.remarks),
        "causes": [_cause(cause) for cause in comparison.causes],
    }


def _cause(cause: Any) -> dict[str, Any]:
    return {
        "kind": cause.kind,
        "part": cause.part,
        "factor": cause.factor,
        "says": cause.says,
        "explains": cause.explains,
    }


def _curve(curve: CurveComparison) -> dict[str, Any]:
    look = curve.fsv
    return {
        "name": curve.name,
        "analysis": curve.analysis,
        "unit": curve.unit,
        "points": curve.points,
        "verdict": curve.verdict,
        "worst": _worst(curve.worst),
        "spans": [
            {
                "from": span.start,
                "to": span.stop,
                "worst_at": span.worst.at,
                "db": span.worst.db,
                "deg": span.worst.deg,
                "relative": span.worst.relative,
                "shape": span.shape,
            }
            for span in curve.spans
        ],
        "fsv": None
        if look is None
        else {"adm": look.adm, "fdm": look.fdm, "gdm": look.gdm, "grade": look.grade},
    }


def _worst(worst: Difference) -> dict[str, Any]:
    return {
        "at": worst.at,
        "exact": _number(worst.exact),
        "other": _number(worst.other),
        "db": worst.db,
        "deg": worst.deg,
        "relative": worst.relative,
        "allowed": worst.allowed,
    }


def _number(value: complex | float) -> Any:
    return [value.real, value.imag] if isinstance(value, complex) else value


def response_document(curves: list[Curve]) -> dict[str, Any]:
    """The document of `response`: curves of one axis, frequency or time."""
    if curves and curves[0].analysis == "transient":
        return {"time": curves[0].axis.tolist(), "curves": {c.name: c.values.tolist() for c in curves}}
    values = {
        curve.name: {"real": curve.values.real.tolist(), "imag": curve.values.imag.tolist()}
        for curve in curves
    }
    return {"frequency": curves[0].axis.tolist() if curves else [], "curves": values}


def confirmation_document(done: Confirmation, *, strict: bool = False) -> dict[str, Any]:
    """The document of `confirm` for one circuit: its check, its comparison, and where the files stand."""
    return {
        "circuit": done.check.circuit.name,
        "verdict": done.verdict(strict=strict),
        "check": check_document(done.check),
        "comparison": None if done.comparison is None else comparison_document(done.comparison),
        "folder": None if done.folder is None else str(done.folder),
        "files": list(done.files),
    }


def simulation_document(done: Confirmation) -> dict[str, Any]:
    """The document of `simulate`: who ran, what came of it, and where the files stand."""
    curves = () if done.opinion is None else done.opinion.curves.curves
    return {
        "circuit": done.check.circuit.name,
        "simulator": None if done.opinion is None else done.opinion.who,
        "findings": [finding_document(finding) for finding in done.check.findings],
        "silenced": len(done.check.silenced),
        "curves": [{"name": c.name, "analysis": c.analysis, "points": len(c)} for c in curves],
        "folder": None if done.folder is None else str(done.folder),
        "files": list(done.files),
    }


def netlist_document(check: Check, text: str | None) -> dict[str, Any]:
    """The document of `netlist`: the findings and the text, null where errors kept it from being written."""
    return {
        "circuit": check.circuit.name,
        "findings": [finding_document(finding) for finding in check.findings],
        "silenced": len(check.silenced),
        "netlist": text,
    }
