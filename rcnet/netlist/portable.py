"""The part of the language that every simulator descended from Berkeley's reads.

The floor is SPICE3f5 (T. Quarles, A. R. Newton, D. O. Pederson, A. Sangiovanni-Vincentelli, SPICE3 Version 3f
User's Manual, 1993), and SPICE2G6 (A. Vladimirescu et al., SPICE Version 2G User's Guide, 1981) where that
costs nothing. What is kept to, and why:

- lines of at most 79 columns, continued with `+` in the first column: SPICE2 reads cards of 80;
- comments are whole lines that begin with `*`: `$`, `;` and `//` behind a line are later inventions;
- ASCII only, titles and comments transliterated: each program makes something else of other bytes;
- names of letters, digits and `_`, at most eight characters: SPICE2 takes no more. Nodes begin with a letter
  or a digit; words for nodes are SPICE3's, SPICE2 has numbers alone;
- plain decimal numbers without suffixes, so that no simulator takes `M` for mega or milli;
- E, G, F and H linear; PULSE with all seven numbers, because the defaults of those left out differ;
- no phase in SIN: SPICE3f5 has five numbers there and would start the wave elsewhere without a word;
- `.print` of voltages, in ac, dc and transient only; no `.save`, no `.meas`; of `.options` those of SPICE3f5;
- `.end` in the last line.
"""

from __future__ import annotations

import unicodedata
from dataclasses import replace

from ..circuit import Circuit, Sine
from ..errors import CircuitError
from .names import Alphabet

NAMES = Alphabet(nodes="_", parts="_", longest=8)
# SPICE3 Version 3f User's Manual, section `.OPTIONS`.
_OPTIONS = frozenset(
    """abstol acct badmos3 chgtol defad defas defl defw gmin itl1 itl2 itl3 itl4 itl5 keepopinfo list method
    node nomod nopage opts pivrel pivtol reltol temp tnom trtol trytocompact vntol""".split()  # noqa: SIM905
)
_REQUESTS = frozenset([".dc", ".tf", ".four"])
_SPELT = str.maketrans(
    {
        "µ": "u", "μ": "u", "Ω": "ohm", "\N{OHM SIGN}": "ohm", "°": " deg ", "±": "+/-", "×": "x", "·": "*",
        "–": "-", "—": "-", "−": "-", "‘": "'", "’": "'", "“": '"', "”": '"', "…": "...",
        "ß": "ss", "æ": "ae", "Æ": "AE", "ø": "o", "Ø": "O", "ł": "l", "Ł": "L", "đ": "d", "Đ": "D",
    }
)  # fmt: skip


def as_portable(circuit: Circuit) -> tuple[Circuit, list[str]]:
    """The circuit without what only later simulators know, and a sentence for each thing left out.

    Raises CircuitError for what cannot be left out without changing the circuit: a sine with a phase.
    """
    for source in circuit.network.sources.values():
        if isinstance(source.waveform, Sine) and source.waveform.phase:
            raise CircuitError(
                f"{source.name}: its sine starts at {source.waveform.phase:g} degrees, and SPICE3 knows no "
                "phase there.",
                remedy="Leave --portable out, or give the wave as points.",
            )
    options = {key: text for key, text in circuit.options.items() if key.lower() in _OPTIONS}
    requests = tuple(request for request in circuit.requests if request.word.lower() in _REQUESTS)
    dropped = [f".options {key}" for key in circuit.options if key not in options]
    dropped += [f"{request.word} {request.text}" for request in circuit.requests if request not in requests]
    notes = [f"Left out, since not every simulator knows it: {what}" for what in dropped]
    return replace(circuit, options=options, requests=requests), notes


def ascii_text(text: str) -> str:
    """The text in ASCII: letters without their accents, signs spelt out, `?` for what has no such form."""
    if text.isascii():
        return text
    plain = unicodedata.normalize("NFKD", text.translate(_SPELT))
    kept = "".join(character for character in plain if not unicodedata.combining(character))
    return kept.encode("ascii", "replace").decode("ascii")
