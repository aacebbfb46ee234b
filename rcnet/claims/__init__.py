"""Claims: measures, hand formulas, tolerances and verdicts."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..lazily import hand_out

if TYPE_CHECKING:
    from .box import Box, box_of
    from .envelope import Envelope, response_envelope
    from .measures import COMPUTED, evaluate, measure
    from .profile import HALF_POWER_DB, Profile, decibels, half_power, profile
    from .samples import SampleResult, clopper_pearson, sample
    from .sensitivities import sensitivity
    from .tolerance import ToleranceBounds, bounds
    from .verdict import ClaimResult, Verdict, judge, overall

# Where each name lives.
_HOMES = {
    "Box": "box",
    "COMPUTED": "measures",
    "ClaimResult": "verdict",
    "Envelope": "envelope",
    "HALF_POWER_DB": "profile",
    "Profile": "profile",
    "SampleResult": "samples",
    "ToleranceBounds": "tolerance",
    "Verdict": "verdict",
    "bounds": "tolerance",
    "box_of": "box",
    "clopper_pearson": "samples",
    "decibels": "profile",
    "evaluate": "measures",
    "half_power": "profile",
    "judge": "verdict",
    "measure": "measures",
    "overall": "verdict",
    "profile": "profile",
    "response_envelope": "envelope",
    "sample": "samples",
    "sensitivity": "sensitivities",
}

__all__ = [
    "COMPUTED",
    "HALF_POWER_DB",
    "Box",
    "ClaimResult",
    "Envelope",
    "Profile",
    "SampleResult",
    "ToleranceBounds",
    "Verdict",
    "bounds",
    "box_of",
    "clopper_pearson",
    "decibels",
    "evaluate",
    "half_power",
    "judge",
    "measure",
    "overall",
    "profile",
    "response_envelope",
    "sample",
    "sensitivity",
]

hand_out(__name__, _HOMES)
