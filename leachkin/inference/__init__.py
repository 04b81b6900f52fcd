"""Least squares, intervals, ranking and draws. Knows no law of leaching."""

from leachkin.inference.bootstrap import LEAST_GROUPS, Bootstrap, bootstrap_intervals
from leachkin.inference.covariance import Held, held_covariance, one_sided_reach
from leachkin.inference.criteria import akaike_weights, corrected_aic, schwarz_bic
from leachkin.inference.distributions import (
    chi_square_upper_tail,
    normal_multiplier,
    student_multiplier,
)
from leachkin.inference.draws import draw_vectors
from leachkin.inference.estimate import Estimate, Interval
from leachkin.inference.least_squares import LeastSquaresProblem, least_squares
from leachkin.inference.leverage import (
    correlation_matrix,
    leverage_of,
    standardised_residuals,
)
from leachkin.inference.limits import below_limit_residual
from leachkin.inference.posterior import Posterior, sample_posterior
from leachkin.inference.profile import profile_interval, refit_by_solver, refit_held
from leachkin.inference.reconciliation import (
    Constraints,
    Reconciled,
    linear_constraints,
    reconcile,
)
from leachkin.inference.scales import Scale, from_natural, natural_slope, to_natural
from leachkin.inference.straight_line import StraightLine, weighted_line

__all__ = [
    "LEAST_GROUPS",
    "Bootstrap",
    "Constraints",
    "Estimate",
    "Held",
    "Interval",
    "LeastSquaresProblem",
    "Posterior",
    "Reconciled",
    "Scale",
    "StraightLine",
    "akaike_weights",
    "below_limit_residual",
    "bootstrap_intervals",
    "chi_square_upper_tail",
    "correlation_matrix",
    "corrected_aic",
    "draw_vectors",
    "from_natural",
    "held_covariance",
    "least_squares",
    "leverage_of",
    "linear_constraints",
    "natural_slope",
    "normal_multiplier",
    "one_sided_reach",
    "profile_interval",
    "reconcile",
    "refit_by_solver",
    "refit_held",
    "sample_posterior",
    "schwarz_bic",
    "standardised_residuals",
    "student_multiplier",
    "to_natural",
    "weighted_line",
]
