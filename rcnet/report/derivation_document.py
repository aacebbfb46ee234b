"""A derivation as a JSON document: plain dictionaries with the keys that other people's scripts rely on."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from ..derive import Derivation, Number, Result, Root, Written


def derivation_document(done: Derivation) -> dict[str, Any]:
    """The document of `derive`."""
    form, roots = done.function, done.roots
    return {
        "circuit": done.circuit.name,
        "of": done.of,
        "source": done.source,
        "transfer_function": None if form is None else _function_document(form),
        "transfer_function_why": done.function_why,
        "gain": None if roots is None else roots.gain,
        "origin": None if roots is None else roots.origin,
        "poles": None if roots is None else [_root_document(root) for root in roots.poles],
        "poles_left_out": 0 if roots is None else roots.left_out,
        "poles_why": done.roots_why,
        "zeros": None
        if roots is None or roots.zeros is None
        else [_root_document(root) for root in roots.zeros],
        "zeros_why": done.roots_why if roots is None else roots.zeros_why,
        "cancelled": [
            {"pole": _pair(pair.pole), "zero": _pair(pair.zero), "apart": pair.apart}
            for pair in (() if roots is None else roots.cancelled)
        ],
        "hidden": [_root_document(root) for root in (() if roots is None else roots.hidden)],
        "asymptotes": [
            {
                "end": line.end,
                "power": line.power,
                "slope": line.slope,
                "coefficient": line.coefficient,
                "text": line.text,
                "tex": line.tex,
            }
            for line in done.asymptotes
        ],
        "corner": done.corner,
        "approximations": [_result_document(result) for result in done.approximations],
        "rules": [_result_document(result) for result in done.rules],
    }


def _function_document(form: Written) -> dict[str, Any]:
    return {
        "text": form.text,
        "tex": form.tex,
        "origin": form.origin,
        "gain": _number_document(form.gain),
        "numerator": [_number_document(number) for number in form.numerator],
        "denominator": [_number_document(number) for number in form.denominator],
    }


def _number_document(number: Number) -> dict[str, Any]:
    return {
        "name": number.name,
        "text": number.text,
        "tex": number.tex,
        "value": number.value,
        "power": number.power,
    }


def _root_document(root: Root) -> dict[str, Any]:
    return {
        "real": root.s.real,
        "imag": root.s.imag,
        "frequency": root.frequency,
        "time_constant": root.time_constant,
        "q": root.quality,
        "count": root.count,
        "share": root.share,
    }


def _pair(s: complex) -> list[float]:
    return [s.real, s.imag]


def _result_document(result: Result) -> dict[str, Any]:
    return {
        "rule": result.rule,
        "formula": result.formula,
        "tex": result.tex,
        "assumes": result.assumes,
        "holds": result.holds,
        "because": result.because,
        "stands_for": result.stands_for,
        "unit": result.unit,
        "value": result.value,
        "exact": result.exact,
        "error": result.error,
        "error_unit": result.error_unit,
        "why": result.why,
        "source": result.source,
        "where": result.where,
    }
