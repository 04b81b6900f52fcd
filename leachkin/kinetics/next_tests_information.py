"""What the tests of a fit tell, and what a candidate would add: rows of derivatives.

A row is the derivative of a measured value over its standard deviation by every quantity. The
precision of any combination of the quantities follows from the rows alone, so that a candidate can
be judged before it is run [fedorov1972].
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import LeastSquaresProblem, from_natural, least_squares, natural_slope
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.next_tests_candidate import (
    Candidate,
    Precision,
    observed_of_candidate,
)
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Conditions closer than this, relative, are the same.
SAME = 1e-3
#: A direction whose singular value is smaller than this share of the largest is not told at all.
SINGULAR_FLOOR = 1e-8
#: A target has no variance where more than this share of it lies in directions not told.
SHARE_NOT_TOLD = 1e-6
#: Margin of the logarithm of a head, as in a fit.
LN_HEAD_MARGIN = 1.0
STIRRING = "stirring_power"
#: Powers of the stirring speed in the rate that are thought of.
STIRRING_RANGE = (-1.0, 2.0)


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
        return slopes - np.outer(whole, whole @ slopes) / (whole @ whole)


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
                law = _with_knot(law, float(quantity.which), 0.5 * (1.0 + np.tanh(0.5 * odds)))
        return law

    def rows_of(self, candidate: Candidate) -> Rows:
        """Return what one bottle of a candidate would give, at the present estimate."""
        observed = observed_of_candidate(candidate, self.tests, self.precision)
        layout = _with_head(self.layout, observed)
        free_head = layout.quantities[-1].free
        vector = np.append(self.vector, np.log(observed.head_kg_per_t)) if free_head else self.vector
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
            elif _same(knot_of(self.layout, candidate), float(quantity.which)):
                own = [i for i, q in enumerate(self.columns[:p]) if q.role == "ultimate"]
                scales = [
                    natural_slope(self.columns[i].scale, self.vector[i]).item() for i in own
                ]
                slope = natural_slope(quantity.scale, np.asarray(quantity.start)).item()
                slopes[:, j] = np.sum(raw[:, own] / np.array(scales), axis=1) * slope
                slopes[:, own] = 0.0
        return slopes


def known_of(
    fit: FitResult,
    tests: Sequence[Observed],
    candidates: Sequence[Candidate],
    free: Sequence[str],
    assumed: Mapping[str, tuple[float, float | None]],
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
    stirring : bool
        Whether the power of the stirring speed is asked for.
    """
    if fit.design is None or not fit.converged or not fit.layout.free:
        raise argument_error("fit", "a fit that did not converge", "a converged fit with its data")
    names = {*free, *_freed_by_temperature(fit, tests, candidates), *_held(fit, assumed)}
    layout, vector = _freed(fit, names, assumed)
    design = replace(fit.design, layout=layout)
    _, jacobian = design.residuals_and_jacobian(vector)
    columns = list(layout.free)
    columns += _new_knots(fit, layout, vector, tests, candidates, assumed)
    if stirring and not any(q.role == "stirring" for q in columns):
        columns.append(_stirring_quantity(tests, candidates))
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
        rows=np.linalg.qr(rows, mode="r"),
        precision=Precision.of(fit, tests),
    )


def _freed_by_temperature(
    fit: FitResult, tests: Sequence[Observed], candidates: Sequence[Candidate]
) -> list[str]:
    """Activation energies that one temperature could not tell and another one would."""
    tested = {o.temperature_K for o in tests}
    if max(tested) > min(tested) * (1.0 + SAME):
        return []
    if all(_same(c.bottle.temperature_K, max(tested)) for c in candidates):
        return []
    return [
        q.name
        for q in fit.layout.quantities
        if q.role == "activation_energy" and not q.free and q.which not in fit.not_needed
    ]


def _held(fit: FitResult, assumed: Mapping[str, object]) -> list[str]:
    """Held quantities of the layout that a range is assumed for."""
    return [
        q.name
        for q in fit.layout.quantities
        if q.name in assumed and not q.free and q.which not in fit.not_needed
    ]


def _freed(
    fit: FitResult, names: set[str], assumed: Mapping[str, tuple[float, float | None]]
) -> tuple[Layout, Array]:
    """Return the layout with quantities set free, and its vector at the present estimate.

    Where an assumed value differs from the one that the fit held, the rest is fitted again.
    """
    full = fit.layout.expand(fit.vector)
    moved = False
    quantities = []
    for i, q in enumerate(fit.layout.quantities):
        if q.name in names and q.name in assumed:
            start = float(from_natural(q.scale, assumed[q.name][0]))
            if not q.low <= start <= q.high:
                raise argument_error(f"assumed {q.name}", f"{assumed[q.name][0]:g}", "in its range")
            moved |= abs(start - full[i]) > 1e-12
            q = replace(q, start=start)
        quantities.append(q)
    held = replace(fit.layout, quantities=tuple(quantities))
    vector = _refitted(fit, held) if moved else fit.vector
    full = held.expand(vector)
    freed = tuple(
        replace(q, free=True, start=float(full[i])) if q.name in names else q
        for i, q in enumerate(held.quantities)
    )
    layout = replace(held, quantities=freed)
    return layout, full[layout.free_index]


def _refitted(fit: FitResult, layout: Layout) -> Array:
    """Return the fitted vector with other values held."""
    if fit.design is None:
        return fit.vector
    free = layout.free
    again = least_squares(
        LeastSquaresProblem(
            names=tuple(q.name for q in free),
            start=fit.vector,
            low=np.array([q.low for q in free]),
            high=np.array([q.high for q in free]),
            residuals_and_jacobian=replace(fit.design, layout=layout).residuals_and_jacobian,
            scales=tuple(q.scale for q in free),
            stated=fit.estimate.stated,
        )
    )
    return again.vector


def knot_of(layout: Layout, candidate: Candidate) -> float:
    """Return the size [mm], or the temperature [K], that the ultimate of a candidate goes by."""
    if layout.knot_temperature_K is not None:
        return float(candidate.bottle.temperature_K)
    return candidate.bottle.sizes.mass_mean_mm


def new_knot_name(layout: Layout, at: float) -> str:
    """Return the name of the ultimate extraction at a size or temperature, as a fit names it."""
    if layout.knot_temperature_K is not None:
        return f"ultimate_{at:.4g}_K"
    return f"ultimate_{at:.4g}_mm"


def _new_knots(
    fit: FitResult,
    layout: Layout,
    vector: Array,
    tests: Sequence[Observed],
    candidates: Sequence[Candidate],
    assumed: Mapping[str, tuple[float, float | None]],
) -> list[Quantity]:
    """Return the ultimates that a fit of the candidates too would have more, in rising order."""
    if layout.knot_temperature_K is not None:
        present = [float(t) for t in layout.knot_temperature_K]
        tested = [o.temperature_K for o in tests]
    else:
        present = [float(d) for d in layout.knot_size_mm]
        tested = [o.sizes.mass_mean_mm for o in tests if o.sizes is not None]
    by_condition = len(present) > 1 or bool(tested and _same(min(tested), max(tested)))
    if not by_condition or not any(q.role == "ultimate" for q in layout.free):
        return []
    asked = sorted(knot_of(layout, c) for c in candidates)
    new: list[float] = []
    for at in asked:
        if not any(_same(at, other) for other in (*present, *tested, *new)):
            new.append(at)
    return [_knot(layout, vector, at, assumed) for at in new]


def _knot(
    layout: Layout,
    vector: Array,
    at: float,
    assumed: Mapping[str, tuple[float, float | None]],
) -> Quantity:
    name = new_knot_name(layout, at)
    law = layout.law(vector)
    by_temperature = layout.knot_temperature_K is not None
    where = (law.reference.size_mm, at) if by_temperature else (at, None)
    value = assumed[name][0] if name in assumed else float(law.ultimate_at(*where)[..., 0])
    like = next(q for q in layout.free if q.role == "ultimate")
    start = float(np.clip(from_natural("logit", value), like.low, like.high))
    return Quantity(name, "ultimate", repr(at), "logit", start, like.low, like.high)


def _with_knot(law: RateLaw, at: float, value: Array) -> RateLaw:
    """Return a law with one more ultimate extraction among its sizes or temperatures."""
    by_temperature = law.ultimate_temperature_K is not None
    knots = law.ultimate_temperature_K if by_temperature else law.ultimate_size_mm
    knots = np.asarray(knots, dtype=np.float64)
    place = int(np.searchsorted(knots, at))
    more = np.insert(knots, place, at)
    batch = np.broadcast_shapes(law.ultimate.shape[:-1], value.shape)
    own = np.broadcast_to(law.ultimate, (*batch, knots.size))
    ultimate = np.insert(own, place, np.broadcast_to(value, batch), axis=-1)
    if by_temperature:
        return replace(law, ultimate=ultimate, ultimate_temperature_K=more)
    return replace(law, ultimate=ultimate, ultimate_size_mm=more)


def _with_head(layout: Layout, observed: Observed) -> Layout:
    """Return the layout with the head of one more test, last among its quantities."""
    ln_head = float(np.log(observed.head_kg_per_t))
    relative = observed.head_sd_kg_per_t / observed.head_kg_per_t
    head = Quantity(
        f"head_{observed.test}",
        "head",
        observed.test,
        "log",
        ln_head,
        ln_head - LN_HEAD_MARGIN,
        ln_head + LN_HEAD_MARGIN,
        "kg/t",
        free=relative > 0.0,
        prior_sd=relative if relative > 0.0 else None,
    )
    return replace(layout, quantities=(*layout.quantities, head))


def _stirring_quantity(tests: Sequence[Observed], candidates: Sequence[Candidate]) -> Quantity:
    speeds = [o.stirring_rpm for o in tests if o.stirring_rpm]
    speeds = speeds or [c.stirring_rpm for c in candidates if c.stirring_rpm]
    if not speeds:
        raise argument_error(
            "of",
            "stirring, and no test or candidate has a stirring speed",
            "tests with a stirring speed",
            "write the speed of each test",
        )
    middle = float(np.exp(np.mean(np.log(speeds))))
    return Quantity(STIRRING, "stirring", repr(middle), "linear", 0.0, *STIRRING_RANGE)


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


def _assumed_rows(
    columns: Sequence[Quantity], assumed: Mapping[str, tuple[float, float | None]], sd: float
) -> Array:
    """Return one row for each quantity with an assumed range."""
    found = []
    for j, q in enumerate(columns):
        width = assumed[q.name][1] if q.name in assumed else None
        if width is None or q.prior_sd is not None:
            continue
        if not (np.isfinite(width) and width > 0.0):
            raise argument_error(f"assumed {q.name}", f"a standard deviation of {width:g}", "above 0")
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


def _same(one: float, other: float) -> bool:
    return abs(one - other) <= SAME * abs(other)
