"""The table of the rules of thumb: to add one, write what it states and add one entry here."""

from __future__ import annotations

from . import band_rules as bands
from . import corner_rules as corners
from . import level_rules as levels
from . import time_constant_rules as method
from . import time_rules as times
from .rule import Rule

RULES: tuple[Rule, ...] = (
    # ------------------------------------------------------------------ corners
    Rule(
        "corner of one section",
        "one capacitor and the resistance it sees, source and load counted",
        corners.one_corner,
    ),
    Rule(
        "corner by R and C alone",
        "source and load do not matter",
        corners.bare_corner,
    ),
    Rule(
        "n equal sections, isolated",
        "no section loads the one before it, and all have one time constant",
        corners.equal_isolated,
    ),
    Rule(
        "sections multiplied",
        "no section loads the one before it",
        corners.unequal_isolated,
    ),
    Rule(
        "n equal sections in a ladder",
        "equal parts, an ideal source, an open output",
        corners.equal_ladder,
        "A. M. Morgan-Voyce, Proc. IRE 47:321-322, 1959",
    ),
    Rule(
        "corner of a distributed line",
        "resistance and capacitance spread evenly, an ideal source, an open end",
        corners.line_corner,
        "W. Thomson, Proc. Royal Soc. 7:382-399, 1855",
    ),
    Rule(
        "open-circuit time constants",
        "one pole makes the upper cutoff, and the sum stands for it",
        method.open_circuit,
        "P. E. Gray, C. L. Searle, Electronic Principles, 1969; B. L. Cochrun, A. Grabel, IEEE Trans. Circuit"
        " Theory 20:16-20, 1973",
    ),
    Rule(
        "short-circuit time constants",
        "one pole makes the lower cutoff, and the sum of the rates stands for it",
        method.short_circuit,
        "P. E. Gray, C. L. Searle, Electronic Principles, 1969",
    ),
    Rule(
        "each edge by its own section",
        "the two sections do not load each other, and their corners lie far apart",
        bands.section_edges,
    ),
    Rule(
        "centre of the band",
        "two capacitors, one zero at zero frequency",
        bands.band_centre,
    ),
    Rule(
        "gain in the middle of the band",
        "an ideal source and an open output",
        bands.band_gain,
    ),
    Rule(
        "notch of a twin-T",
        "R, R and R/2, C, C and 2 C, an ideal source, an open output",
        bands.twin_notch,
    ),
    Rule(
        "dip of a bridged T",
        "equal arms along the way, an ideal source, an open output",
        bands.bridged_notch,
    ),
    Rule(
        "half a turn of equal sections",
        "equal parts, an ideal source, an open output",
        bands.half_turn,
    ),
    Rule(
        "zero and pole of a lead or lag",
        "an ideal source, an open output",
        bands.arm_corners,
    ),
    Rule(
        "20 dB a decade for each section",
        "every corner lies well inside",
        corners.slopes,
    ),
    # ------------------------------------------------------------------ time
    Rule(
        "Elmore's sum",
        "only capacitors lead to ground",
        times.elmore,
        "W. C. Elmore, J. Appl. Phys. 19:55-63, 1948",
    ),
    Rule(
        "half of a step after ln 2 tau",
        "one pole rules",
        times.half_delay,
    ),
    Rule(
        "rise time 0.35 / bandwidth",
        "one pole rules",
        times.edge_of_bandwidth,
    ),
    Rule(
        "rise times add in squares",
        "no section loads the one before it",
        times.edges_in_squares,
    ),
    Rule(
        "times of a distributed line",
        "resistance and capacitance spread evenly, an ideal source, an open end",
        times.line_times,
        "W. Thomson, Proc. Royal Soc. 7:382-399, 1855",
    ),
    Rule(
        "charged after 3 tau, 5 tau",
        "one pole rules",
        times.charge,
    ),
    Rule(
        "half a converter's step",
        "one pole rules",
        times.half_a_bit,
    ),
    Rule(
        "time to a threshold",
        "one section, and the output goes all the way",
        times.threshold_time,
    ),
    Rule(
        "discharge R C ln(V0/V)",
        "one capacitor, charged to the source's level",
        times.discharge,
    ),
    Rule(
        "droop of a coupled pulse",
        "one section, an edge that takes no time",
        times.droop,
    ),
    # ------------------------------------------------------------------ levels
    Rule(
        "divider at rest",
        "one resistance to ground",
        levels.divider_at_rest,
    ),
    Rule(
        "capacitive divider far up",
        "capacitors alone matter far up",
        levels.divider_far_up,
    ),
    Rule(
        "compensated divider",
        "both halves have one time constant",
        levels.compensated,
    ),
    Rule(
        "ripple of one section",
        "the period is short beside the time constant",
        levels.ripple,
    ),
    Rule(
        "worst ripple of one section",
        "the period is short beside the time constant, and the duty one half",
        levels.worst_ripple,
    ),
    Rule(
        "ripple of two sections",
        "the period is short beside both time constants, and none loads the other",
        levels.ripple_of_two,
    ),
    Rule(
        "noise of a capacitor, kT/C",
        "resistors at one temperature, and no other capacitor or buffer at the output",
        levels.noise_of_capacitor,
    ),
)
