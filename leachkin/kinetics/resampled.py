"""Bootstrap by bottle: whole tests drawn again with replacement, and the law fitted again.

A test that is drawn k times counts k times, its head with it, which is the same as k bottles with
heads of their own. Every refit starts from the fit of the tests as they are.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import (
    LEAST_GROUPS,
    Bootstrap,
    Interval,
    LeastSquaresProblem,
    bootstrap_intervals,
    from_natural,
    least_squares,
)
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.fit_values import held_values, quantity_names, with_interval
from leachkin.kinetics.intervals import design_of
from leachkin.testwork import Observed

Array = NDArray[np.float64]
Progress = Callable[[int, int], None]

#: Share of the resamples that must end at the end of a range for that side to be open.
PILED_SHARE = 0.02
#: A test tells of a quantity where its readings weigh so much of those of the test that tells most.
TELLS_SHARE = 0.01
#: A value closer to its bound than this, on the fitted scale and of the range, is at it.
AT_BOUND = 1e-4


def bootstrap_tests(
    observed: Sequence[Observed], law: str, *, n: int, seed: int, **options: Any
) -> Bootstrap:
    """Return fits of tests drawn again with replacement, all at the reference of the first fit.

    Parameters
    ----------
    observed : sequence of Observed
        Tests (bottles) of one ore and one metal.
    law : str
    n, seed : int
        Resamples, and their seed.
    **options
        As in ``fit_tests``.

    Returns
    -------
    Bootstrap
        See :func:`bootstrap_fit`.

    Raises
    ------
    InputProblems
        As ``fit_tests``, or where the tests as they are do not converge.
    """
    return bootstrap_fit(fit_tests(observed, law, **options), n=n, seed=seed)


def bootstrap_fit(
    fit: FitResult, *, n: int, seed: int, progress: Progress | None = None
) -> Bootstrap:
    """Return refits of the tests of a fit, drawn again with replacement.

    Parameters
    ----------
    fit : FitResult
        Of ``fit_tests``.
    n, seed : int
        Resamples, and their seed.
    progress : callable, optional
        Called with (resamples done, all).

    Returns
    -------
    Bootstrap
        Of all fitted parameters but the heads; ``.interval(name)`` gives the percentile interval.
        A resample that lacks a size or a temperature does not give the parameters that need it.

    Raises
    ------
    InputProblems
        For a fit that does not carry its design, or did not converge.
    """
    design = design_of(fit)
    rows, groups = rows_by_test(design), len(design.slices)
    done = 0

    def refit(picked: tuple[int, ...]) -> Mapping[str, float] | None:
        nonlocal done
        done += 1
        if progress is not None and done > 1:
            progress(done - 1, n)
        if picked == tuple(range(groups)):
            return held_values(fit.layout, fit.estimate, fit.vector) if fit.converged else None
        counts = np.bincount(picked, minlength=groups)
        return refit_counted(fit, rows, counts)

    return bootstrap_intervals(refit, groups, n, seed)


def rows_by_test(design: FitDesign) -> NDArray[np.intp]:
    """Return which test each residual belongs to, shape (n,); -1 for what is known of the law."""
    places = {part.test: i for i, part in enumerate(design.slices)}
    measured = np.empty(design.value.size, dtype=np.intp)
    for i, part in enumerate(design.slices):
        measured[part.rows] = i
    priors = [
        places[q.which] if q.role == "head" else -1
        for q in design.layout.free
        if q.prior_sd is not None
    ]
    return np.concatenate([measured, np.array(priors, dtype=np.intp)])


def refit_counted(
    fit: FitResult, rows: NDArray[np.intp], counts: NDArray[np.intp]
) -> Mapping[str, float] | None:
    """Return the values of a fit in which each test counts so many times, None where it fails.

    Parameters
    ----------
    fit : FitResult
        With its design; the refit starts from it.
    rows : ndarray of int, shape (n,)
        From :func:`rows_by_test`.
    counts : ndarray of int, shape (tests,)
        A test that counts 0 times is left out with its head.
    """
    design = design_of(fit)
    absent = {part.test for part, k in zip(design.slices, counts, strict=True) if k == 0}
    free = fit.layout.free
    columns = np.flatnonzero([not (q.role == "head" and q.which in absent) for q in free])
    root = np.sqrt(np.where(rows < 0, 1, counts[rows]).astype(np.float64))
    if int((root > 0.0).sum()) <= columns.size:
        return None
    problem = _counted_problem(fit, columns, root)
    found = least_squares(problem)
    if not found.converged:
        return None
    vector = fit.vector.copy()
    vector[columns] = found.vector
    return held_values(fit.layout, found, vector)


def _counted_problem(fit: FitResult, columns: NDArray[np.intp], root: Array) -> LeastSquaresProblem:
    """Return the problem of some quantities, each residual weighed by the root of its count."""
    design, used = design_of(fit), np.flatnonzero(root > 0.0)
    weight = root[used]

    def evaluate(part: Array) -> tuple[Array, Array]:
        vector = fit.vector.copy()
        vector[columns] = part
        residuals, jacobian = design.residuals_and_jacobian(vector)
        return weight * residuals[used], weight[:, None] * jacobian[np.ix_(used, columns)]

    chosen = [fit.layout.free[j] for j in columns]
    return LeastSquaresProblem(
        names=tuple(q.name for q in chosen),
        start=fit.vector[columns],
        low=np.array([q.low for q in chosen]),
        high=np.array([q.high for q in chosen]),
        residuals_and_jacobian=evaluate,
        scales=tuple(q.scale for q in chosen),
        stated=fit.estimate.stated,
    )


def bootstrap_parameter(
    fit: FitResult, drawn: Bootstrap, name: str, level: float | None = None
) -> Parameter:
    """Return a parameter of a fit with its percentile interval, one-sided at the end of a range.

    Parameters
    ----------
    fit : FitResult
    drawn : Bootstrap
        Of that fit.
    name : str
        One that was not fitted itself comes back as it stands in the fit.
    level : float, optional
        That of the fit where left out.
    """
    parameter = fit.parameter(name)
    if name not in drawn.names:
        return parameter
    asked = fit.level if level is None else level
    open_low, open_high, why = _open_ends(fit, drawn, name)
    told_by = telling_tests(fit, name)
    if told_by < LEAST_GROUPS:
        why = f"{told_by} tests tell it: {LEAST_GROUPS} or more are needed to draw again"
        interval = Interval(parameter.value, None, None, None, asked, "none", why)
    elif open_low and open_high:
        interval = Interval(parameter.value, None, None, None, asked, "none", why)
    elif open_low or open_high:
        interval = _one_sided(fit, drawn, name, asked, (open_low, open_high), why)
    else:
        interval = drawn.interval(name, asked)
    return with_interval(parameter, interval)


def _one_sided(
    fit: FitResult,
    drawn: Bootstrap,
    name: str,
    level: float,
    opened: tuple[bool, bool],
    why: str,
) -> Interval:
    """Return the interval with an end on one side only, none where that end is no end either."""
    one = drawn.interval(name, 2.0 * level - 1.0)  # the tail on the side that is closed
    ends = (None if opened[0] else one.low, None if opened[1] else one.high)
    value = fit.parameter(name).value
    at = quantity_names(fit.layout).get(name)
    end = next((e for e in ends if e is not None), None)
    if at is not None and end is not None and max(_shares_at_bounds(fit, at, np.array([end]))) > 0:
        return Interval(value, None, None, None, level, "none", why)
    if one.method == "none":
        return Interval(value, None, None, None, level, "none", one.why_not)
    return Interval(value, None, *ends, level, f"one-sided, {one.method}", why)


def telling_tests(fit: FitResult, name: str) -> int:
    """Return how many tests depend on a fitted quantity; all of them for one made of others."""
    design = design_of(fit)
    at = quantity_names(fit.layout).get(name)
    if at is None:
        return len(design.slices)
    column = fit.estimate.jacobian[: design.value.size, at]
    weight = np.array([float(np.sum(column[part.rows] ** 2)) for part in design.slices])
    return int(np.sum(weight > TELLS_SHARE * weight.max(initial=0.0)))


def _open_ends(fit: FitResult, drawn: Bootstrap, name: str) -> tuple[bool, bool, str]:
    """Return whether the low and the high side are open, and why.

    Resamples that pile up at a bound say so; a side that the fit found open stays open, because
    drawing the same readings again does not tell what longer tests would have told.
    """
    parameter = fit.parameter(name)
    one_sided = parameter.method.startswith("one-sided")
    low = one_sided and parameter.low is None
    high = one_sided and parameter.high is None
    reasons = [parameter.why_no_interval] if low or high else []
    at = quantity_names(fit.layout).get(name)
    if at is not None:
        column = drawn.draws[:, drawn.names.index(name)]
        column = column[np.isfinite(column)]
        for_low, for_high = _shares_at_bounds(fit, at, column)
        low, high = low or for_low > PILED_SHARE, high or for_high > PILED_SHARE
        for share in (for_low, for_high):
            if share > PILED_SHARE:
                reasons.append(f"{100 * share:.0f} % of the resamples end at the end of its range")
    return low, high, "; ".join(reasons)


def _shares_at_bounds(fit: FitResult, at: int, column: Array) -> tuple[float, float]:
    quantity = fit.layout.free[at]
    if not column.size:
        return 0.0, 0.0
    fitted = from_natural(quantity.scale, column)
    near = AT_BOUND * (quantity.high - quantity.low)
    at_low = float(np.mean(fitted <= quantity.low + near))
    return at_low, float(np.mean(fitted >= quantity.high - near))
