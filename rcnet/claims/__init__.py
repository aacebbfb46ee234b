"""Claims: measures, hand formulas and verdicts."""

from .measures import COMPUTED, evaluate, measure
from .profile import HALF_POWER_DB, Profile, decibels, half_power, profile
from .sensitivities import sensitivity
from .verdict import ClaimResult, Verdict, judge, overall

__all__ = [
    "COMPUTED",
    "HALF_POWER_DB",
    "ClaimResult",
    "Profile",
    "Verdict",
    "decibels",
    "evaluate",
    "half_power",
    "judge",
    "measure",
    "overall",
    "profile",
    "sensitivity",
]
