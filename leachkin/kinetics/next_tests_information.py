"""What the tests of a fit tell, and what a candidate would add: rows of derivatives.

A row is the derivative of a measured value over its standard deviation by every quantity. The
precision of any combination of the quantities follows from the rows alone, so that a candidate can
be judged before it is run [fedorov1972].
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import natural_slope
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.next_tests_candidate import (
    Candidate,
    Precision,
    observed_of_candidate,
)
from leachkin.kinetics.next_tests_layout import (
    STIRRING,
    Assumed,
    freed_by_temperature,
    freed_layout,
    held_with_a_range,
    knot_of,
    new_knots,
    same,
    stirring_quantity,
    with_head,
    with_knot,
)
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: A direction whose singular value is smaller than this share of the largest is not told at all.
SINGULAR_FLOOR = 1e-8
#: A target has no variance where more than this share of it lies in directions not told.
SHARE_NOT_TOLD = 1e-6


def root_variances(rows: Array, targets: Array) -> Array:
    """Return the standard deviation of linear targets for rows of unit variance.

    Parameters
    ----------
    rows : ndarray, shape (n, p)
    targets : ndarray, shape (k, p)
        Derivative of each target by the quantities.

    Returns
    -------
    ndarray, shape (k,)
        Infinite where the rows do not tell the target.

    Examples
    --------
    >>> root_variances(np.array([[2.0, 0.0]]), np.eye(2)).tolist()
    [0.5, inf]
    """
    norms = np.linalg.norm(rows, axis=0)
    alive = norms > 0.0
    scale = np.where(alive, norms, 1.0)
    asked = targets / scale
    _, singular, axes = np.linalg.svd(rows / scale, full_matrices=True)
    size = np.zeros(rows.shape[1])
    size[: singular.size] = singular
    told = size > SINGULAR_FLOOR * size.max(initial=0.0)
    along = asked @ axes.T
    missing = np.sum(along[:, ~told] ** 2, axis=1)
    whole = np.sum(along**2, axis=1)
    found = np.sqrt(np.sum((along[:, told] / size[told]) ** 2, axis=1))
    return np.where(missing > SHARE_NOT_TOLD**2 * whole, np.inf, found)


def reduced(rows: Array) -> Array:
    """Return as few rows as tell the same."""
    triangle: Array = np.linalg.qr(rows)[1]
    return triangle


@dataclass(frozen=True)
class Rows:
    """What one bottle of a candidate would give.

    Attributes
    ----------
    expected, sd : ndarray, shape (n,)
    slopes : ndarray, shape (n, P)
        By the quantities that the tests share, over the standard deviations.
    head : ndarray, shape (n,), or None
        By the logarithm of its own head; None where heads are held.
    head_relative : float
        Standard deviation of that logarithm beforehand.
    """

    expected: Array
    sd: Array
    slopes: Array
    head: Array | None
    head_relative: float

    @property
    def shared(self) -> Array:
        """The rows once its own head has been fitted, shape (n or n + 1, P)."""
        if self.head is None:
            return self.slopes
        whole = np.append(self.head, 1.0 / self.head_relative)
        slopes = np.vstack([self.slopes, np.zeros(self.slopes.shape[1])])
        return np.asarray(slopes - np.outer(whole, whole @ slopes) / (whole @ whole))


@dataclass(frozen=True)
class Known:
    """What the tests of a fit tell of its quantities, those that candidates set free included.

    Attributes
    ----------
    fit : FitResult
    tests : tuple of Observed
    layout : Layout
        With the quantities set free.
    vector : ndarray, shape (p,)
        Free values of that layout, where everything is linearised.
    columns : tuple of Quantity
        The P quantities of the rows: the free ones, ultimates of new sizes, stirring.
    active : ndarray of bool, shape (P,)
        False for quantities at a bound: held there.
    rows : ndarray, shape (r, P)
        The present rows, reduced to as few as tell the same.
    precision : Precision
    """

    fit: FitResult
    tests: tuple[Observed, ...]
    layout: Layout
    vector: Array
    columns: tuple[Quantity, ...]
    active: NDArray[np.bool_]
    rows: Array
    precision: Precision

    @property
    def sd(self) -> float:
        """Standard deviation of one residual, as the intervals of the fit use it."""
        return float(np.sqrt(self.fit.estimate.scatter_variance))

    @property
    def knots(self) -> tuple[Quantity, ...]:
        """Ultimate extractions at sizes or temperatures that only candidates have."""
        return tuple(q for q in self.columns[self.vector.size :] if q.role == "ultimate")

    @property
    def extended(self) -> Array:
        """The vector with the values of the new columns, shape (P,)."""
        return np.append(self.vector, [q.start for q in self.columns[self.vector.size :]])

    def root_variances(self, rows: Array, targets: Array) -> Array:
        """Return the standard deviation of targets (k, P) told by rows (r, P)."""
        return self.sd * root_variances(rows[:, self.active], targets[:, self.active])

    def law(self, vectors: Array) -> RateLaw:
        """Return the law of vectors of shape B + (P,), ultimates of new sizes put in."""
        law = self.layout.law(vectors[..., : self.vector.size])
        for j, quantity in enumerate(self.columns):
            if j >= self.vector.size and quantity.role == "ultimate":
                odds = vectors[..., j]
                law = with_knot(law, float(quantity.which), 0.5 * (1.0 + np.tanh(0.5 * odds)))
        return law

    def rows_of(self, candidate: Candidate) -> Rows:
        """Return what one bottle of a candidate would give, at the present estimate."""
        observed = observed_of_candidate(candidate, self.tests, self.precision)
        layout = with_head(self.layout, observed)
        free_head = layout.quantities[-1].free
        vector = (
            np.append(self.vector, np.log(observed.head_kg_per_t)) if free_head else self.vector
        )
        design = FitDesign.of(layout, [observed])
        residuals, jacobian = design.residuals_and_jacobian(vector)
        n = observed.value.size
        expected = residuals[:n]
        sd = self.precision.sd(expected, observed.row_kind)
        raw = jacobian[:n] / sd[:, None]
        slopes = self._extended_slopes(raw[:, : self.vector.size], candidate, observed)
        relative = self.precision.head_relative
        return Rows(expected, sd, slopes, raw[:, -1] if free_head else None, relative)

    def _extended_slopes(self, raw: Array, candidate: Candidate, observed: Observed) -> Array:
        p = self.vector.size
        slopes = np.zeros((raw.shape[0], len(self.columns)))
        slopes[:, :p] = raw
        for j, quantity in enumerate(self.columns[p:], start=p):
            if quantity.name == STIRRING:
                slopes[:, j] = _by_stirring(raw, self.columns, quantity, observed.stirring_rpm)
            elif same(knot_of(self.layout, candidate), float(quantity.which)):
                own = [i for i, q in enumerate(self.columns[:p]) if q.role == "ultimate"]
                scales = [natural_slope(self.columns[i].scale, self.vector[i]).item() for i in own]
                slope = natural_slope(quantity.scale, np.asarray(quantity.start)).item()
                slopes[:, j] = np.sum(raw[:, own] / np.array(scales), axis=1) * slope
                slopes[:, own] = 0.0
        return slopes


def known_of(
    fit: FitResult,
    tests: Sequence[Observed],
    candidates: Sequence[Candidate],
    free: Sequence[str],
    assumed: Assumed,
    ultimate: Literal["by size", "one"],
    stirring: bool,
) -> Known:
    """Return what the tests tell, with everything free that candidates could tell.

    Parameters
    ----------
    fit : FitResult
        Of the tests, converged, with its design.
    tests : sequence of Observed
    candidates : sequence of Candidate
    free : sequence of str
        Held quantities that are asked for.
    assumed : mapping of name to (value, standard deviation or None)
        Of quantities that the tests do not tell, natural scale.
    ultimate : "by size" or "one"
        Whether a new size has an ultimate of its own, where one size was tested.
    stirring : bool
        Whether the power of the stirring speed is asked for.
    """
    if fit.design is None or not fit.converged or not fit.layout.free:
        why = f": {fit.message}" if fit.message else ""
        raise argument_error("fit", f"a fit that did not converge{why}", "a converged fit of tests")
    names = {*free, *freed_by_temperature(fit, tests, candidates), *held_with_a_range(fit, assumed)}
    layout, vector = freed_layout(fit, names, assumed)
    design = replace(fit.design, layout=layout)
    _, jacobian = design.residuals_and_jacobian(vector)
    columns = list(layout.free)
    columns += new_knots(layout, vector, tests, candidates, assumed, ultimate)
    if stirring and not any(q.role == "stirring" for q in columns):
        columns.append(stirring_quantity(tests, candidates))
    rows = np.zeros((jacobian.shape[0], len(columns)))
    rows[:, : vector.size] = jacobian
    if columns[-1].name == STIRRING:
        rows[:, -1] = _present_stirring(design, jacobian, columns, tests)
    sd = float(np.sqrt(fit.estimate.scatter_variance))
    rows = np.vstack([rows, _assumed_rows(columns, assumed, sd)])
    return Known(
        fit=fit,
        tests=tuple(tests),
        layout=layout,
        vector=vector,
        columns=tuple(columns),
        active=_active(fit, columns),
        rows=reduced(rows),
        precision=Precision.of(fit, tests),
    )


def _by_stirring(
    slopes: Array, columns: Sequence[Quantity], stirring: Quantity, speed_rpm: float | None
) -> Array:
    """Return derivatives by the power of the speed in the whole rate: all times at once."""
    found = np.zeros(slopes.shape[0])
    if not speed_rpm:
        return found
    for j in range(slopes.shape[1]):
        if columns[j].role == "time":
            clock = columns[j].which.endswith("clock")
            found = found - (-1.0 if clock else 1.0) * slopes[:, j]
    return found * float(np.log(speed_rpm / float(stirring.which)))


def _present_stirring(
    design: FitDesign, jacobian: Array, columns: Sequence[Quantity], tests: Sequence[Observed]
) -> Array:
    found = np.zeros(jacobian.shape[0])
    speed = {o.test: o.stirring_rpm for o in tests}
    for part in design.slices:
        found[part.rows] = _by_stirring(
            jacobian[part.rows], columns, columns[-1], speed.get(part.test)
        )
    return found


def _assumed_rows(columns: Sequence[Quantity], assumed: Assumed, sd: float) -> Array:
    """Return one row for each quantity with an assumed range."""
    found = []
    for j, q in enumerate(columns):
        width = assumed[q.name][1] if q.name in assumed else None
        if width is None or q.prior_sd is not None:
            continue
        if not (np.isfinite(width) and width > 0.0):
            raise argument_error(
                f"assumed {q.name}", f"a standard deviation of {width:g}", "above 0"
            )
        row = np.zeros(len(columns))
        row[j] = sd * natural_slope(q.scale, np.asarray(q.start)).item() / width
        found.append(row)
    return np.array(found).reshape(len(found), len(columns))


def _active(fit: FitResult, columns: Sequence[Quantity]) -> NDArray[np.bool_]:
    at_bound = {
        name
        for name, state in zip(fit.names, fit.estimate.states, strict=True)
        if state.startswith("at its")
    }
    return np.array([q.name not in at_bound for q in columns])
