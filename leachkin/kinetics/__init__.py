"""Kinetics: particle laws, the rate law of an ore, its curve against equivalent leach time."""

from leachkin.kinetics.arrhenius import (
    ArrheniusFit,
    activation_energy_of_slope,
    arrhenius_rate_constant,
    fit_arrhenius,
)
from leachkin.kinetics.arrhenius_two_step import (
    CurvatureTest,
    TwoStepArrhenius,
    arrhenius_two_step,
    curvature_test,
)
from leachkin.kinetics.box import DataBox
from leachkin.kinetics.demand import ReagentDemand
from leachkin.kinetics.diagnostics import (
    ArrheniusPanel,
    KineticDiagnostics,
    RatePlot,
    RowChecks,
    kinetic_diagnostics,
)
from leachkin.kinetics.drive import DRIVES, Drive, DriveForm, ln_drive
from leachkin.kinetics.drive import READS as DRIVE_READS
from leachkin.kinetics.evidence import Evidence, EvidenceLine, gather_evidence, stirring_power
from leachkin.kinetics.fit_curve import fit_curve, straightened_time
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_result import FitResult, Parameter, Residual
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.gangue import GangueFit, GangueLaw, GangueReadings, fit_gangue
from leachkin.kinetics.grain_path import extraction_along
from leachkin.kinetics.interval_methods import (
    INTERVAL_METHODS,
    fit_with_intervals,
    intervals_differ,
)
from leachkin.kinetics.intervals import fit_problem, profile_intervals
from leachkin.kinetics.leave_out import LeftOut, leave_one_out, left_out_table
from leachkin.kinetics.need import TERM_OPTIONS, TermTest, need_table, tests_of_need
from leachkin.kinetics.nested import NestedTest, nested_test
from leachkin.kinetics.next_tests import Candidate, NextTests, next_tests
from leachkin.kinetics.next_tests_result import CandidateGain, Outlook, Separation, Step
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
from leachkin.kinetics.posterior import FitPosterior, posterior_tests
from leachkin.kinetics.rank import (
    DEFAULT_LAWS,
    RankedLaw,
    Ranking,
    contains,
    in_words,
    options_of_law,
    rank_laws,
    rank_tests,
)
from leachkin.kinetics.rank_spread import rank_tests_by_p80
from leachkin.kinetics.rate_law import RateLaw, knot_weights
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.kinetics.resampled import bootstrap_fit, bootstrap_parameter, bootstrap_tests
from leachkin.kinetics.residual_checks import (
    ResidualChecks,
    RunsTest,
    residual_checks,
    runs_test,
)
from leachkin.kinetics.resistance import Reference, Resistance
from leachkin.kinetics.simulate import (
    Bottle,
    Noise,
    SimulatedTest,
    observed_of,
    simulate_observed,
    simulate_tests,
    solution_operator,
    true_extraction,
)
from leachkin.kinetics.simulate_sheets import simulated_sheets, write_simulated
from leachkin.kinetics.straightened import StraightenedTest, straightened
from leachkin.kinetics.time_factors import TimeFactor, time_factors, total_time

__all__ = [
    "ArrheniusPanel",
    "KineticDiagnostics",
    "RatePlot",
    "RowChecks",
    "StraightenedTest",
    "TimeFactor",
    "kinetic_diagnostics",
    "straightened",
    "time_factors",
    "total_time",
    "CurvatureTest",
    "TwoStepArrhenius",
    "arrhenius_two_step",
    "curvature_test",
    "ArrheniusFit",
    "activation_energy_of_slope",
    "arrhenius_rate_constant",
    "fit_arrhenius",
    "fit_curve",
    "straightened_time",
    "Layout",
    "Quantity",
    "FitPosterior",
    "FitResult",
    "Parameter",
    "Residual",
    "fit_tests",
    "INTERVAL_METHODS",
    "fit_with_intervals",
    "intervals_differ",
    "bootstrap_fit",
    "bootstrap_parameter",
    "bootstrap_tests",
    "fit_problem",
    "posterior_tests",
    "profile_intervals",
    "GangueFit",
    "GangueLaw",
    "GangueReadings",
    "fit_gangue",
    "DEFAULT_LAWS",
    "DRIVES",
    "DRIVE_READS",
    "Drive",
    "DriveForm",
    "ln_drive",
    "Evidence",
    "EvidenceLine",
    "gather_evidence",
    "stirring_power",
    "LeftOut",
    "leave_one_out",
    "left_out_table",
    "ResidualChecks",
    "RunsTest",
    "residual_checks",
    "runs_test",
    "NestedTest",
    "ReagentBalance",
    "TERM_OPTIONS",
    "TermTest",
    "need_table",
    "tests_of_need",
    "nested_test",
    "rank_tests_by_p80",
    "RankedLaw",
    "Ranking",
    "contains",
    "in_words",
    "options_of_law",
    "rank_laws",
    "rank_tests",
    "Candidate",
    "CandidateGain",
    "NextTests",
    "Outlook",
    "Separation",
    "Step",
    "next_tests",
    "Bottle",
    "Noise",
    "SimulatedTest",
    "observed_of",
    "simulate_observed",
    "simulate_tests",
    "simulated_sheets",
    "true_extraction",
    "write_simulated",
    "solution_operator",
    "CLOCK_LAWS",
    "LAW_NAMES",
    "MECHANISTIC",
    "NO_ULTIMATE",
    "SHAPE_PARAMETERS",
    "THEORY_SIZE_EXPONENT",
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
