"""A response with its envelope over the tolerances, as a table, as JSON and as CSV."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from .document import response_document

if TYPE_CHECKING:
    from ..claims import Envelope
    from ..curves import Curve

Envelopes = Mapping[str, "Envelope"]


def envelope_document(curves: Sequence[Curve], envelopes: Envelopes) -> dict[str, Any]:
    """The document of `response --tolerance`: each curve has `low_db`, `high_db` and the `method` as well."""
    document = response_document(list(curves))
    for name, envelope in envelopes.items():
        document["curves"][name] |= {
            "low_db": envelope.lower.tolist(),
            "high_db": envelope.upper.tolist(),
            "method": envelope.method,
        }
    return document


def envelope_csv(curves: Sequence[Curve], envelopes: Envelopes) -> str:
    """CSV as `write_csv` has it, with `NAME.db.low` and `NAME.db.high` behind each curve; lines end CRLF."""
    header, columns = ["frequency"], [curves[0].axis.tolist()]
    for curve in curves:
        envelope = envelopes[curve.name]
        header += [f"{curve.name}.{end}" for end in ("real", "imag", "db.low", "db.high")]
        columns += [curve.values.real.tolist(), curve.values.imag.tolist()]
        columns += [envelope.lower.tolist(), envelope.upper.tolist()]
    out = io.StringIO()
    writer = csv.writer(out)
    writer.writerow(header)
    writer.writerows([repr(number) for number in row] for row in zip(*columns, strict=True))
    return out.getvalue()


def envelope_columns(curve: Curve, envelope: Envelope) -> list[tuple[str, list[str]]]:
    """The headings and cells of one curve: nominal, least and greatest gain in dB."""
    nominal = [20 * math.log10(abs(value)) if value else -math.inf for value in curve.values.tolist()]
    named = (
        (f"{curve.name} dB", nominal),
        ("least", envelope.lower.tolist()),
        ("most", envelope.upper.tolist()),
    )
    return [(heading, [_decibels(number) for number in numbers]) for heading, numbers in named]


def _decibels(number: float) -> str:
    text = f"{number:.4f}"
    return text if not math.isfinite(number) or float(text) else text.removeprefix("-")
