"""Claims: measures, hand formulas, tolerances and verdicts."""

from .box import Box, box_of
from .envelope import Envelope, response_envelope
from .measures import COMPUTED, evaluate, measure
from .profile import HALF_POWER_DB, Profile, decibels, half_power, profile
from .samples import SampleResult, clopper_pearson, sample
from .sensitivities import sensitivity
from .tolerance import ToleranceBounds, bounds
from .verdict import ClaimResult, Verdict, judge, overall

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
