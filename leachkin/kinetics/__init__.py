"""Kinetics: particle laws, the rate law of an ore, its curve against equivalent leach time."""

from leachkin.kinetics.box import DataBox
from leachkin.kinetics.demand import ReagentDemand
from leachkin.kinetics.grain_path import extraction_along
from leachkin.kinetics.ore_curve import OreCurve
from leachkin.kinetics.other_laws import (
    CLOCK_LAWS,
    LAW_NAMES,
    MECHANISTIC,
    NO_ULTIMATE,
    SHAPE_PARAMETERS,
    THEORY_SIZE_EXPONENT,
    ClockLaw,
    canonical_law,
    clock_conversion_and_sensitivities,
    clock_of_conversion,
    conversion_of_clock,
    law_terms,
)
from leachkin.kinetics.particle_law import (
    ParticleLaw,
    conversion_and_log_sensitivities,
    particle_conversion,
)
from leachkin.kinetics.rate_law import RateLaw, knot_weights
from leachkin.kinetics.resistance import ClassConversions, Reference, Resistance

__all__ = [
    "CLOCK_LAWS",
    "LAW_NAMES",
    "MECHANISTIC",
    "NO_ULTIMATE",
    "SHAPE_PARAMETERS",
    "THEORY_SIZE_EXPONENT",
    "ClassConversions",
    "ClockLaw",
    "DataBox",
    "OreCurve",
    "ParticleLaw",
    "RateLaw",
    "ReagentDemand",
    "Reference",
    "Resistance",
    "canonical_law",
    "clock_conversion_and_sensitivities",
    "clock_of_conversion",
    "conversion_and_log_sensitivities",
    "conversion_of_clock",
    "extraction_along",
    "knot_weights",
    "law_terms",
    "particle_conversion",
]
