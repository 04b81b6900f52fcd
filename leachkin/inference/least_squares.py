"""Bounded nonlinear least squares through lmfit, with an exact Jacobian."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.inference.covariance import Held, held_covariance
from leachkin.inference.distributions import chi_square_upper_tail
from leachkin.inference.estimate import Estimate, State
from leachkin.inference.scales import Scale
from leachkin.problems import argument_error

Array = NDArray[np.float64]
Evaluation = tuple[Array, Array]

#: A fit has converged when a further step would move no quantity by more than this many
#: standard errors, taken together.
STEP_IN_STANDARD_ERRORS = 0.01
#: Chance below which the scatter counts as larger than the stated precision.
WIDEN_BELOW_CHANCE = 0.01
#: A quantity closer to its bound than this share of the range, and pushed there, is at it.
BOUND_SHARE = 1e-5
#: Gauss-Newton steps at most after the solver has stopped.
POLISHING_STEPS = 40
#: A step that promises no more than this share of the sum of squares is rounding.
NEGLIGIBLE_GAIN = 1e-20
#: Residuals above this count as infinite: their squares would be.
LARGEST_RESIDUAL = 1e140


@dataclass(frozen=True)
class LeastSquaresProblem:
    """What to fit.

    Attributes
    ----------
    names : tuple of str
    start, low, high : ndarray, shape (p,)
        On the fitted scales.
    residuals_and_jacobian : callable
        vector (p,) -> residuals (n,), Jacobian (n, p).
    scales : tuple of "linear", "log", "logit"
        How each fitted quantity becomes a natural one; linear where left out.
    stated : bool
        True where residuals are divided by stated standard deviations.
    """

    names: tuple[str, ...]
    start: Array
    low: Array
    high: Array
    residuals_and_jacobian: Callable[[Array], Evaluation]
    scales: tuple[Scale, ...] = ()
    stated: bool = False

    def __post_init__(self) -> None:
        p = len(self.names)
        for name in ("start", "low", "high"):
            values = np.asarray(getattr(self, name), dtype=np.float64)
            if values.shape != (p,) or np.isnan(values).any():
                raise argument_error(name, f"shape {values.shape}", f"{p} numbers")
        if not (self.low < self.high).all():
            raise argument_error("low", "a low bound not below the high one", "low < high")
        if not self.scales:
            object.__setattr__(self, "scales", ("linear",) * p)


class _Remembered:
    """The last evaluations: solver, Jacobian and polishing ask for the same vector."""

    def __init__(self, function: Callable[[Array], Evaluation]) -> None:
        self.function = function
        self.seen: dict[bytes, Evaluation] = {}
        self.count = 0

    def __call__(self, vector: Array) -> Evaluation:
        key = vector.tobytes()
        if key not in self.seen:
            if len(self.seen) > 4:
                self.seen.pop(next(iter(self.seen)))
            self.seen[key] = self.function(vector)
            self.count += 1
        return self.seen[key]


def least_squares(problem: LeastSquaresProblem, max_evaluations: int = 300) -> Estimate:
    """Return the least-squares estimate of a problem.

    The solver is the bounded trust-region method behind lmfit's ``least_squares``; a few
    Gauss-Newton steps finish it. A quantity at a bound is held there while the others are judged.

    Parameters
    ----------
    problem : LeastSquaresProblem
    max_evaluations : int

    Returns
    -------
    Estimate
        ``converged`` is False, and ``message`` says why, where no minimum was reached.
    """
    evaluate = _Remembered(problem.residuals_and_jacobian)
    start = np.clip(problem.start, *_inside(problem))
    first = evaluate(start)[0]
    if not np.isfinite(first).all():
        raise argument_error("start", "start values that give no finite residual", "finite")
    vector, message = _solve(problem, evaluate, start, max_evaluations)
    vector = _polish(problem, evaluate, vector)
    return _judge(problem, evaluate, vector, message, float(first @ first))


def _inside(problem: LeastSquaresProblem) -> tuple[Array, Array]:
    """Return bounds a little inside the true ones, for a start the solver accepts."""
    width = np.where(np.isfinite(problem.high - problem.low), problem.high - problem.low, 0.0)
    return problem.low + 1e-4 * width, problem.high - 1e-4 * width


def _squarable(residuals: Array) -> Array:
    """Return residuals whose squares can be summed, else infinite ones: out of reach."""
    reachable = np.abs(residuals).max(initial=0.0) < LARGEST_RESIDUAL
    return residuals if reachable else np.full_like(residuals, np.inf)


def _solve(
    problem: LeastSquaresProblem, evaluate: _Remembered, start: Array, max_evaluations: int
) -> tuple[Array, str]:
    import lmfit

    parameters = lmfit.Parameters()
    keys = [f"p{i}" for i in range(start.size)]  # lmfit's names must be Python names
    for key, value, low, high in zip(keys, start, problem.low, problem.high, strict=True):
        parameters.add(key, value=float(value), min=float(low), max=float(high))

    def vector_of(given: Any) -> Array:
        return np.array([given[key].value for key in keys])

    # a trial step without finite residuals is no error: the solver takes a shorter one
    minimizer = lmfit.Minimizer(
        lambda given: _squarable(evaluate(vector_of(given))[0]),
        parameters,
        nan_policy="propagate",
        calc_covar=False,
    )
    # lmfit inverts an unscaled J'J on the way out; that covariance is not used here
    with np.errstate(invalid="ignore", divide="ignore"):
        outcome = minimizer.least_squares(
            max_nfev=max_evaluations,
            jac=lambda given, **_: evaluate(vector_of(given))[1],
            x_scale="jac",
            ftol=1e-10,
            xtol=1e-10,
            gtol=1e-12,
        )
    if outcome.aborted or not getattr(outcome, "success", False):
        return vector_of(outcome.params), f"no minimum within {max_evaluations} evaluations"
    return vector_of(outcome.params), ""


def _pushed_to_bound(problem: LeastSquaresProblem, vector: Array, gradient: Array) -> Array:
    """Return -1, 0 or +1: at the low bound, free, at the high one."""
    width = problem.high - problem.low
    near = BOUND_SHARE * np.where(np.isfinite(width), width, 1.0)
    at_low = (vector - problem.low <= near) & (gradient >= 0)
    at_high = (problem.high - vector <= near) & (gradient <= 0)
    return np.asarray(at_high.astype(float) - at_low.astype(float))


def _step(
    problem: LeastSquaresProblem, evaluate: _Remembered, vector: Array
) -> tuple[Array, float]:
    """Return the Gauss-Newton step of the quantities that are free, and the gain it promises."""
    residuals, jacobian = evaluate(vector)
    gradient = jacobian.T @ residuals
    free = _pushed_to_bound(problem, vector, gradient) == 0
    found = held_covariance(jacobian[:, free])
    step = np.zeros_like(vector)
    step[free] = -found.covariance @ gradient[free]
    return step, float(-step @ gradient)


def _polish(problem: LeastSquaresProblem, evaluate: _Remembered, vector: Array) -> Array:
    """Return the vector after a few Gauss-Newton steps.

    Near the minimum the sum of squares no longer shows progress; the promised gain still does.
    Where residuals stay large the steps shrink by a steady factor only, so several may be needed.
    """
    step, gain = _step(problem, evaluate, vector)
    squares = _squares(evaluate, vector)
    for _ in range(POLISHING_STEPS):
        if gain <= NEGLIGIBLE_GAIN * squares:
            break
        trial = np.clip(vector + step, problem.low, problem.high)
        trial_squares = _squares(evaluate, trial)
        if not trial_squares <= squares * (1.0 + 1e-12):
            break
        trial_step, trial_gain = _step(problem, evaluate, trial)
        if trial_squares >= squares and trial_gain >= gain:
            break
        vector, step, gain, squares = trial, trial_step, trial_gain, trial_squares
    return vector


def _squares(evaluate: _Remembered, vector: Array) -> float:
    residuals = _squarable(evaluate(vector)[0])
    return float(residuals @ residuals)


def _judge(
    problem: LeastSquaresProblem,
    evaluate: _Remembered,
    vector: Array,
    message: str,
    start_squares: float,
) -> Estimate:
    residuals, jacobian = evaluate(vector)
    gradient = jacobian.T @ residuals
    side = _pushed_to_bound(problem, vector, gradient)
    found = held_covariance(jacobian[:, side == 0])
    states, reasons = _states(problem, side, found)
    squares = float(residuals @ residuals)
    freedom = residuals.size - sum(state == "free" for state in states)
    widening = _widening(problem, squares, freedom)
    covariance = _full_covariance(found, side, squares, freedom, problem.stated, widening)
    if not message:
        message = _unfinished(residuals, gradient[side == 0], found, freedom, start_squares)
    return Estimate(
        names=problem.names,
        scales=problem.scales,
        vector=vector,
        covariance=covariance,
        states=states,
        reasons=reasons,
        residuals=residuals,
        jacobian=jacobian,
        sum_of_squares=squares,
        degrees_of_freedom=freedom,
        stated=problem.stated,
        widening=widening,
        converged=not message,
        message=message,
        evaluations=evaluate.count,
    )


def _widening(problem: LeastSquaresProblem, squares: float, freedom: int) -> float:
    if not problem.stated or freedom < 1:
        return 1.0
    if chi_square_upper_tail(squares, freedom) >= WIDEN_BELOW_CHANCE:
        return 1.0
    return float(np.sqrt(squares / freedom))


def _full_covariance(
    found: Held, side: Array, squares: float, freedom: int, stated: bool, widening: float
) -> Array:
    variance = widening**2 if stated else squares / max(freedom, 1)
    covariance = np.zeros((side.size, side.size))
    free = np.flatnonzero(side == 0)
    covariance[np.ix_(free, free)] = found.covariance * variance
    return covariance


def _states(
    problem: LeastSquaresProblem, side: Array, found: Held
) -> tuple[tuple[State, ...], tuple[str, ...]]:
    free = np.flatnonzero(side == 0)
    states: list[State] = []
    reasons: list[str] = []
    for j in range(side.size):
        if side[j] != 0:
            states.append("at its low bound" if side[j] < 0 else "at its high bound")
            reasons.append("the best value lies at the end of its range")
            continue
        position = int(np.flatnonzero(free == j)[0])
        if found.held[position]:
            states.append("free")
            reasons.append("")
        else:
            states.append("not held")
            reasons.append(_not_held(problem.names, free, found.partners[position]))
    return tuple(states), tuple(reasons)


def _not_held(names: tuple[str, ...], free: NDArray[np.intp], partners: tuple[int, ...]) -> str:
    if not partners:
        return "the data do not depend on it"
    others = ", ".join(names[int(free[i])] for i in partners)
    return f"the data hold it only together with {others}"


def _unfinished(
    residuals: Array, gradient: Array, found: Held, freedom: int, start_squares: float
) -> str:
    """Return "" at a minimum, else how far the fit is from one."""
    squares = float(residuals @ residuals)
    gain = float(gradient @ found.covariance @ gradient)
    variance = squares / max(freedom, 1)
    if gain <= STEP_IN_STANDARD_ERRORS**2 * variance or squares <= 1e-16 * start_squares:
        return ""
    moves = np.sqrt(gain / variance) if variance > 0 else np.inf
    return f"a further step would still move the fit by {moves:.2g} standard errors"
