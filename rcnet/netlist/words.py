"""The words of a line that may hold expressions: `{...}`, `'...'`, and `key=value` pairs."""

from __future__ import annotations

import re

from ..errors import CircuitError

Pair = tuple[str, str]

# An expression, a quoted word, a sign of equality, or a plain word.
_WORD = re.compile(
    r"""\{(?:[^{}]|\{[^{}]*\})*\} | '[^']*' | "[^"]*" | = | [^\s,()={}'"]+ | [,()\s]+""", re.VERBOSE
)
_ODD = frozenset("{}'\"=")


def split_words(text: str) -> list[str]:
    """The words of a line, `=` among them; blanks, commas and brackets part them.

    An expression in braces or quotes is one word, braces and quotes kept. Raises CircuitError for a brace or
    a quote that is never closed, and for one that stands against a word.
    """
    if _ODD.isdisjoint(text):
        return re.sub(r"[,()]", " ", text).split()
    words: list[str] = []
    position = 0
    glued = False
    while position < len(text):
        match = _WORD.match(text, position)
        if match is None:
            raise CircuitError(
                f"the {text[position]!r} at character {position + 1} is never closed, or closes nothing.",
                remedy="Put expressions in {braces} or 'quotes', both ends of them.",
                code="unreadable",
            )
        word, position = match[0], match.end()
        if word[0] in " ,()\t":
            glued = False
            continue
        if word != "=" and glued:
            raise CircuitError(
                f"{words[-1]}{word} is a word and an expression in one.",
                remedy="Put a blank between them, or write the whole as one expression.",
                code="unreadable",
            )
        glued = word != "="
        words.append(word)
    return words


def assignments(words: list[str]) -> tuple[list[str], list[Pair]]:
    """The words that stand alone, and the (key, text) pairs of `key = value`, keys in lower case.

    Raises CircuitError for a `=` without both sides.
    """
    alone: list[str] = []
    pairs: list[Pair] = []
    position = 0
    while position < len(words):
        word = words[position]
        if word == "=":
            raise CircuitError("a = has nothing before it.", remedy="Write NAME=VALUE.", code="unreadable")
        if position + 1 < len(words) and words[position + 1] == "=":
            if position + 2 >= len(words) or words[position + 2] == "=":
                raise CircuitError(
                    f"{word}= has nothing behind it.", remedy="Write NAME=VALUE.", code="unreadable"
                )
            pairs.append((word.lower(), words[position + 2]))
            position += 3
        else:
            alone.append(word)
            position += 1
    return alone, pairs


_PARAMETER = re.compile(
    r"""\s* ([A-Za-z_][\w.]*(?:\s*\([^()]*\))?) \s*=\s*
    (\{(?:[^{}]|\{[^{}]*\})*\} | '[^']*' | "[^"]*" | [^\s{}'"=]+)""",
    re.VERBOSE,
)


def parameter_pairs(body: str) -> list[Pair]:
    """The (name, text) pairs of a `.param` line, names in lower case.

    A value without braces ends at the first blank, as ngspice has it. Raises CircuitError.
    """
    body = body.strip()
    pairs: list[Pair] = []
    position = 0
    while body[position : position + 1]:
        match = _PARAMETER.match(body, position)
        if match is None:
            rest = body[position:].strip().split()[0]
            cut = (
                "; ngspice takes only what stands before the first blank"
                if pairs and rest[0] in "+-*/^("
                else ""
            )
            raise CircuitError(
                f".param holds {rest[:40]!r}, which is no NAME=VALUE{cut}.",
                remedy="Write .param NAME=VALUE, an expression in braces: .param rload={2*r1}.",
                code="unreadable",
            )
        name, text = match[1], match[2]
        position = match.end()
        while body[position : position + 1].isspace():
            position += 1
        if text.endswith(",") or body[position : position + 1] == ",":
            raise CircuitError(
                ".param holds a comma between parameters, on which ngspice 39 never ends.",
                remedy="Part the parameters with blanks.",
                code="unreadable",
            )
        pairs.append(("".join(name.lower().split()), text))
    return pairs


def bare(word: str) -> str | None:
    """What stands inside an expression's braces or quotes; None for a word without them."""
    if word[:1] == "{" or (word[:1] == "'" and len(word) > 1):
        # A brace within braces is a bracket.
        return word[1:-1].replace("{", "(").replace("}", ")")
    return None
