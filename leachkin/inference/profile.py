"""Profile likelihood intervals: how far a quantity may move while all others are fitted again.

An end is where the sum of squares has risen by what the level allows: the normal or Student
multiplier squared times the variance of one residual, as for one quantity by likelihood ratio
[bates1988]. Unlike a linearised interval it follows the curvature of the model.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from leachkin.inference.estimate import Estimate, Interval
from leachkin.inference.least_squares import LeastSquaresProblem, least_squares
from leachkin.inference.scales import to_natural
from leachkin.problems import argument_error

Array = NDArray[np.float64]

#: An end is found when the rise is within this share of the allowed one.
RISE_TOLERANCE = 1e-9
#: Within this share it is taken where the others cannot be fitted again any closer.
GOOD_ENOUGH = 1e-4
#: A re-fit ends when a further step promises less than this share of the allowed rise.
REFIT_TOLERANCE = 1e-11
#: A fall by more than this share of the allowed rise: the minimum was not the lowest one.
BETTER_SHARE = 1e-3
REFIT_STEPS = 60
SEARCH_STEPS = 60
RECHECKS = 6
#: Doublings of the first step after which a side without a bound is called open.
DOUBLINGS = 30
#: The first step, in linearised half widths.
FIRST_STEP = 0.5
#: Points tried on the way of a later step that ends inside: a rise may lie between.
PROBES = 9
#: Eigenvalues of the scaled normal matrix below this share of the largest carry nothing.
EIGENVALUE_FLOOR = 1e-14
LARGEST_DAMPING = 1e8

OPEN = "the data allow it as far as the end of its range"
OPEN_WITHOUT_BOUND = "the data allow it as far as was looked"
NOT_LOWEST = "with it held elsewhere the others fit better: the fit is not at the lowest minimum"
NO_END = "no end was found: the others could not be fitted again on the way"


class _SearchStoppedError(Exception):
    """No end on this side; the text says why."""


@dataclass(frozen=True)
class _Point:
    """The others fitted again with the quantity held at ``at``."""

    at: float
    vector: Array
    tangent: Array
    height: float  # signed root of the rise over the allowed one, less 1: nearly straight in at


@dataclass(frozen=True)
class _Profile:
    """One quantity j of a problem, its minimum and the rise allowed."""

    problem: LeastSquaresProblem
    estimate: Estimate
    j: int
    allowance: float

    def point(self, at: float, *near: _Point) -> _Point:
        """Return the point at a value, started from the first of the near ones that serves."""
        vector, squares = np.empty(0), np.inf
        for one in near:
            vector, squares = self._from(one, at)
            if np.isfinite(squares):
                break
        rise = (squares - self.estimate.sum_of_squares) / self.allowance
        if not np.isfinite(rise):
            raise _SearchStoppedError(NO_END)
        if rise < -BETTER_SHARE:
            raise _SearchStoppedError(NOT_LOWEST)
        tangent = _tangent(self.problem, vector, self.j)
        return _Point(at, vector, tangent, float(np.sqrt(max(rise, 0.0))) - 1.0)

    def _from(self, near: _Point, at: float) -> tuple[Array, float]:
        """Return the others fitted again, started along the tangent of a near point."""
        start = near.vector + near.tangent * (at - near.at)
        start = np.clip(start, self.problem.low, self.problem.high)
        return refit_held(self.problem, self.j, at, start, REFIT_TOLERANCE * self.allowance)

    def minimum(self) -> _Point:
        """Return the minimum itself as a point."""
        vector = self.estimate.vector
        return _Point(
            float(vector[self.j]), vector, _tangent(self.problem, vector, self.j), height=-1.0
        )

    def end(self, direction: float) -> float:
        """Return the end of the interval on one side, on the fitted scale.

        The others may have more than one minimum, so an end is tried again from the fit itself;
        where that serves better the end lies further out.
        """
        inner = self.minimum()
        for _ in range(RECHECKS):
            found = self._root(*self._bracket(inner, direction))
            inner = self._again(found)
            if inner.height >= -GOOD_ENOUGH:
                return found.at
        raise _SearchStoppedError(NO_END)

    def _again(self, found: _Point) -> _Point:
        """Return an end with the others started as they are at the minimum, if that works."""
        try:
            return self.point(
                found.at, replace(self.minimum(), tangent=np.zeros(found.vector.size))
            )
        except _SearchStoppedError as stopped:
            if str(stopped) == NOT_LOWEST:
                raise
            return found

    def _root(self, inner: _Point, outer: _Point) -> _Point:
        """Return the point of the allowed rise within a bracket."""
        last, before = outer, inner
        for _ in range(SEARCH_STEPS):
            if abs(last.height) <= RISE_TOLERANCE:
                return last
            at = _secant(last, before, inner, outer)
            if at in (inner.at, outer.at):
                return last
            near = sorted((inner, outer), key=lambda one: abs(at - one.at))
            try:
                last, before = self.point(at, *near), last
            except _SearchStoppedError:
                if abs(last.height) <= GOOD_ENOUGH:
                    return last
                raise
            inner, outer = (last, outer) if last.height < 0 else (inner, last)
        raise _SearchStoppedError(NO_END)

    def _bracket(self, inner: _Point, direction: float) -> tuple[_Point, _Point]:
        """Return a point inside and one outside, by steps that double."""
        bound = float((self.problem.high if direction > 0 else self.problem.low)[self.j])
        step = self._first_step(inner, bound)
        for doubling in range(DOUBLINGS):
            at = inner.at + direction * step
            at = min(at, bound) if direction > 0 else max(at, bound)
            outer = self.point(at, inner)
            if outer.height >= 0:
                return inner, outer
            found = self._jumped(inner, outer) if doubling else None
            if found is not None:
                return found
            if at == bound:
                raise _SearchStoppedError(OPEN)
            inner, step = outer, 2.0 * step
        raise _SearchStoppedError(OPEN_WITHOUT_BOUND)

    def _jumped(self, inner: _Point, outer: _Point) -> tuple[_Point, _Point] | None:
        """Return a bracket on the way of a step that rose less than a straight model would."""
        last = inner
        for at in np.linspace(inner.at, outer.at, PROBES + 2)[1:-1].tolist():
            probe = self.point(at, last)
            if probe.height >= 0:
                return last, probe
            last = probe
        return None

    def _first_step(self, here: _Point, bound: float) -> float:
        """Return half the linearised half width, or a share of the way to the bound without one."""
        _, jacobian = self.problem.residuals_and_jacobian(here.vector)
        curvature = float(np.sum((jacobian @ here.tangent) ** 2))
        room = abs(bound - here.at)
        if curvature > 0.0:
            return min(FIRST_STEP * float(np.sqrt(self.allowance / curvature)), room)
        return 0.01 * room if np.isfinite(room) else max(abs(here.at), 1.0)


def _secant(last: _Point, before: _Point, inner: _Point, outer: _Point) -> float:
    """Return the next value: by the secant if it lies well inside the bracket, else halfway."""
    low, high = sorted((inner.at, outer.at))
    slope = last.height - before.height
    if slope != 0.0:
        at = last.at - last.height * (last.at - before.at) / slope
        if low < at < high:
            return at
    return 0.5 * (low + high)


def profile_interval(
    problem: LeastSquaresProblem, estimate: Estimate, j: int, level: float = 0.95
) -> Interval:
    """Return the profile likelihood interval of one quantity.

    Parameters
    ----------
    problem : LeastSquaresProblem
    estimate : Estimate
        Its minimum, as :func:`least_squares` returned it.
    j : int
        Position of the quantity.
    level : float

    Returns
    -------
    Interval
        On the natural scale. An end is None where the data leave that side open, ``why_not`` says
        so; at a bound the interval is one-sided; neither end without a converged fit, or for a
        quantity that the data do not hold.

    Raises
    ------
    InputProblems
        For a position that does not exist, or a level outside 0 to 1.
    """
    if not 0 <= j < len(problem.names):
        raise argument_error("j", str(j), f"0 to {len(problem.names) - 1}")
    value = estimate.natural(j)
    why = _why_none(estimate, j)
    if why:
        return Interval(value, None, None, None, level, "none", why)
    at_bound = estimate.states[j] != "free"
    allowance = estimate.multiplier(level, sides=1 if at_bound else 2) ** 2
    allowance *= estimate.scatter_variance
    profile = _Profile(problem, estimate, j, allowance)
    ends: dict[float, float | None] = {-1.0: None, 1.0: None}
    reasons = [estimate.reasons[j]] if at_bound else []
    for direction in _directions(estimate, j):
        try:
            found = profile.end(direction)
        except _SearchStoppedError as stopped:
            reasons.append(str(stopped))
        else:
            ends[direction] = float(to_natural(estimate.scales[j], found))
    return _in_words(estimate, j, level, (ends[-1.0], ends[1.0]), reasons)


def _why_none(estimate: Estimate, j: int) -> str:
    if not estimate.converged:
        return "the fit did not converge"
    if estimate.states[j] == "not held":
        return estimate.reasons[j]
    if estimate.degrees_of_freedom < 1:
        return "as many quantities as points: no scatter to judge by"
    if not estimate.scatter_variance > 0.0:
        return "no scatter to judge by: the fit is exact"
    return ""


def _directions(estimate: Estimate, j: int) -> tuple[float, ...]:
    if estimate.states[j] == "at its low bound":
        return (1.0,)
    return (-1.0,) if estimate.states[j] == "at its high bound" else (-1.0, 1.0)


def _in_words(
    estimate: Estimate,
    j: int,
    level: float,
    ends: tuple[float | None, float | None],
    reasons: list[str],
) -> Interval:
    missing = sum(end is None for end in ends)
    method = ("profile likelihood", "one-sided, profile likelihood", "none")[missing]
    error = estimate.standard_error(j) if missing == 0 else None
    why = "; ".join(dict.fromkeys(reasons))
    return Interval(estimate.natural(j), error, *ends, level, method, why)


def refit_held(
    problem: LeastSquaresProblem, j: int, value: float, start: Array, tolerance: float
) -> tuple[Array, float]:
    """Return the best vector with one quantity held, and its sum of squares.

    Damped Gauss-Newton steps within the bounds from a near start; where they get stuck, the
    solver of :func:`least_squares` takes over.

    Parameters
    ----------
    problem : LeastSquaresProblem
    j : int
        The quantity held.
    value : float
        Where, on the fitted scale.
    start : ndarray, shape (p,)
    tolerance : float
        Gain of the sum of squares not worth a further step.

    Returns
    -------
    vector : ndarray, shape (p,)
    squares : float
        Infinite where no start gives finite residuals.
    """
    vector = np.array(start, dtype=np.float64)
    vector[j] = value
    found = _damped_steps(problem, j, vector, tolerance)
    return found if found is not None else refit_by_solver(problem, j, value, vector)


def refit_by_solver(
    problem: LeastSquaresProblem, j: int, value: float, start: Array
) -> tuple[Array, float]:
    """Return the best vector with one quantity held by :func:`least_squares` on the others."""
    others = np.delete(np.arange(start.size), j)

    def whole(part: Array) -> Array:
        return np.insert(part, j, value)

    def evaluate(part: Array) -> tuple[Array, Array]:
        residuals, jacobian = problem.residuals_and_jacobian(whole(part))
        return residuals, jacobian[:, others]

    if not np.isfinite(evaluate(start[others])[0]).all():
        return whole(start[others]), np.inf
    found = least_squares(
        LeastSquaresProblem(
            tuple(problem.names[i] for i in others),
            start[others],
            problem.low[others],
            problem.high[others],
            evaluate,
            tuple(problem.scales[i] for i in others),
            problem.stated,
        )
    )
    return whole(found.vector), found.sum_of_squares if found.converged else np.inf


def _damped_steps(
    problem: LeastSquaresProblem, j: int, vector: Array, tolerance: float
) -> tuple[Array, float] | None:
    """Return the minimum over the others, or None where the steps get stuck."""
    evaluate = problem.residuals_and_jacobian
    residuals, jacobian = evaluate(vector)
    squares = _squares(residuals)
    damping = 0.0
    for _ in range(REFIT_STEPS):
        if not np.isfinite(squares) or damping > LARGEST_DAMPING:
            return None
        free = _movable(problem, j, vector, jacobian.T @ residuals)
        step, gain = _damped(jacobian, residuals, free, damping)
        if damping == 0.0 and gain <= tolerance:
            return vector, squares
        trial = np.clip(vector + step, problem.low, problem.high)
        new, slopes = evaluate(trial)
        trial_squares = _squares(new)
        if trial_squares < squares:
            vector, residuals, jacobian, squares = trial, new, slopes, trial_squares
            damping = 0.0 if damping < 1e-4 else 0.1 * damping
        elif gain <= 1e-13 * squares:  # rounding of the sum of squares
            return vector, squares
        else:
            damping = max(10.0 * damping, 1e-4)
    return None


def _squares(residuals: Array) -> float:
    with np.errstate(over="ignore", invalid="ignore"):
        squares = float(residuals @ residuals)
    return squares if np.isfinite(squares) else np.inf


def _movable(
    problem: LeastSquaresProblem, j: int, vector: Array, gradient: Array
) -> NDArray[np.bool_]:
    """Return which quantities may move: not the held one, none that is pushed at its bound."""
    stuck = (vector <= problem.low) & (gradient >= 0)
    stuck |= (vector >= problem.high) & (gradient <= 0)
    stuck[j] = True
    return np.asarray(~stuck)


def _damped(
    jacobian: Array, residuals: Array, free: NDArray[np.bool_], damping: float
) -> tuple[Array, float]:
    """Return the damped step of the quantities that may move, and the gain it promises."""
    step = np.zeros(free.size)
    part = jacobian[:, free]
    values, solve = _normal(part)
    gradient = part.T @ residuals
    step[free] = -solve(gradient, damping)
    return step, float(-step[free] @ gradient) if values else 0.0


def _normal(part: Array) -> tuple[bool, Callable[[Array, float], Array]]:
    """Return whether there is anything to solve, and the solver of the scaled normal matrix."""
    norms = np.linalg.norm(part, axis=0)
    scale = np.where(norms > 0.0, norms, 1.0)
    scaled = part / scale
    values, vectors = np.linalg.eigh(scaled.T @ scaled)
    kept = values > EIGENVALUE_FLOOR * values.max(initial=0.0)

    def solve(right: Array, damping: float) -> Array:
        inside = vectors[:, kept].T @ (right / scale)
        return np.asarray(vectors[:, kept] @ (inside / (values[kept] + damping)) / scale)

    return bool(kept.any()), solve


def _tangent(problem: LeastSquaresProblem, vector: Array, j: int) -> Array:
    """Return how all quantities move for a unit move of quantity j, linearised."""
    residuals, jacobian = problem.residuals_and_jacobian(vector)
    free = _movable(problem, j, vector, jacobian.T @ residuals)
    tangent = np.zeros(vector.size)
    tangent[j] = 1.0
    tangent[free] = -_normal(jacobian[:, free])[1](jacobian[:, free].T @ jacobian[:, j], 0.0)
    return tangent
