"""A derivation as a paper to keep: Markdown with TeX formulas, or a whole LaTeX document."""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING

from ..derive.formula import name_tex
from ..values import format_quantity
from .derivation import error_text, power_of_seconds
from .plain import printable

if TYPE_CHECKING:
    from ..derive import Derivation, Number, Result, Root, Written

_MARKDOWN = re.compile(r"([\\`*_{}\[\]<>#|$~])")
_TEX = {
    "\\": r"\textbackslash{}",
    "{": r"\{",
    "}": r"\}",
    "$": r"\$",
    "&": r"\&",
    "#": r"\#",
    "%": r"\%",
    "_": r"\_",
    "^": r"\textasciicircum{}",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
}


def _of(done: Derivation) -> str:
    nodes = ", ".join(done.of.split())
    return f"v({nodes}) per unit of {done.source}"


def _normalised_tex(form: Written) -> str:
    lead = ["K"] if form.gain.text != "1" else []
    if form.origin:
        lead.append("s" if form.origin == 1 else f"s^{{{form.origin}}}")
    above, below = _series_tex(form.numerator), _series_tex(form.denominator)
    if above != "1":
        lead.append(rf"\left({above}\right)" if lead else above)
    text = r" \, ".join(lead) or "1"
    return text if below == "1" else rf"\frac{{{text}}}{{{below}}}"


def _series_tex(numbers: Sequence[Number]) -> str:
    terms = ["1"]
    for number in numbers:
        s = "s" if number.power == 1 else f"s^{{{number.power}}}"
        terms.append(f"{_index(number)} \\, {s}")
    return " + ".join(terms)


def _index(number: Number) -> str:
    return "K" if number.name == "K" else name_tex(number.name)


def _coefficients(form: Written) -> list[tuple[str, str]]:
    """TeX and value of every coefficient that is not simply 1."""
    numbers = (form.gain, *form.numerator, *form.denominator)
    return [(f"{_index(n)} = {n.tex}", power_of_seconds(n)) for n in numbers if n.text != "1"]


def _roots(done: Derivation) -> list[tuple[str, Sequence[Root] | None, str | None]]:
    if done.roots is None:
        return [("Poles and zeros", None, done.roots_why)]
    return [
        ("Poles", done.roots.poles, None),
        ("Zeros", done.roots.zeros, done.roots.zeros_why),
    ]


def _root_cells(root: Root) -> list[str]:
    s = f"{root.s.real:.6g}" + (f" {root.s.imag:+.6g}j" if root.s.imag else "")
    tau = "" if root.time_constant is None else format_quantity(root.time_constant, "s")
    quality = "" if root.quality is None else f"{root.quality:.4g}"
    return [s, format_quantity(root.frequency, "Hz"), tau, quality, str(root.count)]


_ROOT_HEADS = ["s in rad/s", "frequency", "time constant", "Q", "times"]
_RULE_HEADS = ["rule", "stands for", "formula", "value", "exact", "error", "holds", "because"]


def _rule_cells(result: Result) -> list[str]:
    exact = "none" if result.exact is None else _amount(result.exact, result.unit)
    return [
        result.rule,
        result.stands_for.replace("_", " "),
        result.tex,
        _amount(result.value, result.unit),
        exact,
        error_text(result),
        "yes" if result.holds else "no",
        f"assumes {result.assumes}; {result.because}",
    ]


def _amount(value: float, unit: str) -> str:
    return format_quantity(value, "" if unit == "1" else unit, 5)


# ---------------------------------------------------------------------- Markdown


def markdown(done: Derivation) -> str:
    """A Markdown document; formulas stand between dollar signs."""
    lines = [f"# {_plain(done.circuit.title or done.circuit.name)}", "", _plain(_of(done)), ""]
    lines += ["## Transfer function", ""]
    if done.function is None:
        lines += [_plain(f"Not in part names: {done.function_why}"), ""]
    else:
        lines += ["$$", f"H(s) = {done.function.tex} = {_normalised_tex(done.function)}", "$$", ""]
        lines += [f"- ${tex}$ = {_plain(value)}" for tex, value in _coefficients(done.function)] + [""]
    for title, roots, why in _roots(done):
        lines += [f"## {title}", ""]
        if roots is None:
            lines += [_plain(f"Not known: {why}"), ""]
        elif roots:
            lines += _markdown_table(_ROOT_HEADS, [[_plain(c) for c in _root_cells(root)] for root in roots])
        else:
            lines += ["None.", ""]
    for title, results in (("Approximations", done.approximations), ("Rules of thumb", done.rules)):
        lines += [f"## {title}", ""]
        rows = [_markdown_rule(result) for result in results]
        lines += _markdown_table(_RULE_HEADS, rows) if rows else ["None fits.", ""]
    return "\n".join(lines).rstrip() + "\n"


def _markdown_rule(result: Result) -> list[str]:
    cells = _rule_cells(result)
    return [f"${cell}$" if k == 2 else _plain(cell) for k, cell in enumerate(cells)]


def _markdown_table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    return [
        "| " + " | ".join(heads) + " |",
        "|" + " --- |" * len(heads),
        *("| " + " | ".join(row) + " |" for row in rows),
        "",
    ]


def _plain(text: str) -> str:
    return _MARKDOWN.sub(r"\\\1", printable(text))


# ---------------------------------------------------------------------- LaTeX


def latex(done: Derivation) -> str:
    """A LaTeX document that needs no package but what every distribution has."""
    lines = [
        r"\documentclass{article}",
        r"\usepackage[T1]{fontenc}",
        r"\usepackage[utf8]{inputenc}",
        r"\usepackage{amsmath}",
        r"\usepackage[margin=2cm]{geometry}",
        r"\begin{document}",
        rf"\section*{{{_tex(done.circuit.title or done.circuit.name)}}}",
        _tex(_of(done)),
        r"\subsection*{Transfer function}",
    ]
    if done.function is None:
        lines.append(_tex(f"Not in part names: {done.function_why}"))
    else:
        lines += [
            r"\[",
            f"H(s) = {done.function.tex}",
            r"\]",
            r"\[",
            f"= {_normalised_tex(done.function)}",
            r"\]",
        ]
        coefficients = _coefficients(done.function)
        if coefficients:
            items = [rf"\item ${tex}$ = {_tex(value)}" for tex, value in coefficients]
            lines += [r"\begin{itemize}", *items, r"\end{itemize}"]
    for title, roots, why in _roots(done):
        lines.append(rf"\subsection*{{{title}}}")
        if roots is None:
            lines.append(_tex(f"Not known: {why}"))
        elif roots:
            lines += _latex_table(_ROOT_HEADS, [_root_cells(root) for root in roots[:_MOST_ROWS]])
        else:
            lines.append("None.")
    for title, results in (("Approximations", done.approximations), ("Rules of thumb", done.rules)):
        lines += [rf"\subsection*{{{title}}}", *_latex_rules(results)]
    return "\n".join([*lines, r"\end{document}", ""])


_MOST_ROWS = 40  # a tabular does not break across pages


def _latex_rules(results: Sequence[Result]) -> list[str]:
    if not results:
        return ["None fits."]
    lines = [r"\begin{description}"]
    for result in results:
        rule, stands, tex, value, exact, error, holds, because = _rule_cells(result)
        lines += [
            rf"\item[{{{_tex(rule)}}}] ({_tex(stands)}) $\displaystyle {tex}$\\",
            _tex(f"value {value}, exact {exact}, error {error or 'unknown'}; holds here: {holds}; {because}"),
        ]
    return [*lines, r"\end{description}"]


def _latex_table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    body = [" & ".join(_tex(cell) for cell in row) + r" \\" for row in rows]
    return [
        rf"\begin{{tabular}}{{{'r' * len(heads)}}}",
        " & ".join(heads) + r" \\ \hline",
        *body,
        r"\end{tabular}",
    ]


def _tex(text: str) -> str:
    return "".join(_TEX.get(c, c) for c in printable(text))


__all__ = ["latex", "markdown"]
