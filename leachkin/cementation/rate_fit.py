"""Fit a cementation law to concentration-time tests, all tests together."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.rate_law import CementationLaw
from leachkin.cementation.rate_laws import RateForm, Shapes, rate_form
from leachkin.cementation.rate_result import CementationFit, RateResidual, rate_parameters
from leachkin.cementation.rate_tests import CementationTest, cementation_test, check_tests
from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.inference import (
    Estimate,
    LeastSquaresProblem,
    Scale,
    below_limit_residual,
    corrected_aic,
    least_squares,
    profile_interval,
    schwarz_bic,
    to_natural,
)
from leachkin.problems import argument_error

Array = NDArray[np.float64]

_S_PER_H = 3600.0
#: An activation energy is looked for between these [kJ/mol].
ENERGY_RANGE = (-50.0, 250.0)
#: A power of the stirring speed between these.
STIRRING_RANGE = (-1.0, 3.0)
INTERVALS = ("linearised", "profile")
#: Factors on the first guess of k that a fit is started from.
_STARTS = (1.0, 0.3)
_LARGEST_MOVE = 12.0
_OFF = -0.2


@dataclass(frozen=True)
class Reference:
    """What the constants refer to."""

    temperature_K: float
    stirring_rpm: float | None
    by_area: bool
    has_energy: bool
    has_stirring: bool


@dataclass(frozen=True)
class RateProblem:
    """The residuals of all tests as a function of the fitted vector.

    The vector holds ln k, the activation energy [kJ/mol], the stirring power, the shapes of the
    law, and the logarithms of the starts that are fitted.
    """

    form: RateForm
    tests: tuple[CementationTest, ...]
    reference: Reference

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the fitted vector."""
        names = ["k"]
        names += ["activation_energy"] if self.reference.has_energy else []
        names += ["stirring_power"] if self.reference.has_stirring else []
        names += [shape.name for shape in self.form.shapes]
        return (*names, *(f"start {test.name}" for test in self.fitted_starts))

    @property
    def scales(self) -> tuple[Scale, ...]:
        """Scales of the fitted vector."""
        linear = ("activation_energy", "stirring_power")
        shapes = {shape.name: shape.scale for shape in self.form.shapes}
        return tuple("linear" if name in linear else shapes.get(name, "log") for name in self.names)

    @property
    def fitted_starts(self) -> tuple[CementationTest, ...]:
        """Tests whose start is fitted."""
        return tuple(test for test in self.tests if test.start is None)

    def residuals_and_jacobian(self, vector: Array) -> tuple[Array, Array]:
        """Return residuals in standard deviations (or plain) and their derivatives."""
        parts = [self._test(test, vector) for test in self.tests]
        return np.concatenate([r for r, _ in parts]), np.concatenate([j for _, j in parts])

    def expected(self, test: CementationTest, vector: Array) -> tuple[Array, Array]:
        """Return the concentrations expected in a test, and their derivatives (m, p)."""
        names = self.names
        factor, sensitivity = self._clock(test, vector)
        theta = factor * test.time_h
        shapes = self._shapes(vector)
        left, slope, by_shape = self.form.left(theta, shapes)
        jacobian = np.zeros((theta.size, len(names)))
        for name, share in sensitivity.items():
            jacobian[:, names.index(name)] = slope * theta * share
        for one in self.form.shapes:
            scale = shapes[one.name] if one.scale == "log" else 1.0
            jacobian[:, names.index(one.name)] = by_shape[one.name] * scale
        start = test.start
        if start is None:
            position = names.index(f"start {test.name}")
            start = float(np.exp(vector[position]))
            jacobian[:, position] = left
        return start * left, start * jacobian

    def _test(self, test: CementationTest, vector: Array) -> tuple[Array, Array]:
        expected, jacobian = self.expected(test, vector)
        sd = np.ones_like(expected) if test.sd is None else test.sd
        residual = (expected - test.concentration) / sd
        rows = jacobian / sd[:, None]
        censored = test.bound != 0 if test.bound is not None else np.zeros(sd.shape, dtype=bool)
        if censored.any():
            limited, slope = below_limit_residual(-residual[censored])
            residual[censored] = limited
            rows[censored] *= -slope[:, None]
        return residual, rows

    def _clock(self, test: CementationTest, vector: Array) -> tuple[float, dict[str, float]]:
        """k of a test [1/h], and d ln k / d quantity."""
        names, reference = self.names, self.reference
        log_k, sensitivity = float(vector[0]), {"k": 1.0}
        if reference.has_energy:
            inverse = 1.0 / test.temperature_K - 1.0 / reference.temperature_K
            sensitivity["activation_energy"] = -1e3 * inverse / GAS_CONSTANT_J_per_mol_K
        if reference.has_stirring and test.stirring_rpm and reference.stirring_rpm:
            sensitivity["stirring_power"] = float(
                np.log(test.stirring_rpm / reference.stirring_rpm)
            )
        for name in ("activation_energy", "stirring_power"):
            if name in sensitivity:
                log_k += sensitivity[name] * float(vector[names.index(name)])
        if reference.by_area and test.area_m2_per_m3 is not None:
            log_k += float(np.log(_S_PER_H * test.area_m2_per_m3))
        return float(np.exp(min(log_k, 600.0))), sensitivity

    def _shapes(self, vector: Array) -> Shapes:
        return {
            shape.name: np.asarray(to_natural(shape.scale, vector[self.names.index(shape.name)]))
            for shape in self.form.shapes
        }

    def law(self, vectors: Array) -> CementationLaw:
        """Return the law of a vector or of a batch of them, shape B + (p,)."""
        names = self.names
        at = {name: np.asarray(vectors)[..., j] for j, name in enumerate(names)}
        k = np.exp(at["k"])
        none = np.zeros(k.shape)
        kelvins = [test.temperature_K for test in self.tests]
        return CementationLaw(
            self.form.name,
            k,
            "m/s" if self.reference.by_area else "1/h",
            {s.name: np.asarray(to_natural(s.scale, at[s.name])) for s in self.form.shapes},
            self.reference.temperature_K,
            at.get("activation_energy", none),
            self.reference.stirring_rpm,
            at.get("stirring_power", none),
            (min(kelvins), max(kelvins)),
        )


def fit_cementation(
    time_h: ArrayLike,
    concentration: ArrayLike,
    law: str = "first_order",
    *,
    start: float | None = None,
    errors: ArrayLike | None = None,
    errors_are: str = "absolute",
    level: float = 0.95,
    intervals: str = "linearised",
    area_m2_per_m3: float | None = None,
) -> CementationFit:
    """Return a law fitted to one curve of concentration against time.

    Parameters
    ----------
    time_h : array_like, shape (m,)
        Rising; a reading at 0 h is a measured start.
    concentration : array_like, shape (m,)
        In any one unit.
    law : str
        "first_order", "two_stage", "growing_area", "back_dissolution" or
        "back_dissolution+fade".
    start : float, optional
        Concentration at time 0, known without error; fitted where left out.
    errors : array_like, shape () or (m,), optional
        One standard deviation each. Without them all readings weigh the same and intervals use
        Student's t on the scatter found.
    errors_are : "absolute" or "relative"
    level : float
    intervals : "linearised" or "profile"
    area_m2_per_m3 : float, optional
        Surface of the precipitant over the volume: k is then a transfer coefficient [m/s].

    Returns
    -------
    CementationFit
        Not converged: ``.converged`` False, no intervals, the reason in ``.message``.

    Raises
    ------
    InputProblems
        If a value has no meaning, the law is unknown, or there are fewer readings than quantities.

    Examples
    --------
    90 % gone after five minutes:

    >>> fit = fit_cementation([5 / 60], [0.10], start=1.0)
    >>> round(fit.parameter("k").value / 60, 3)
    0.461
    """
    test = cementation_test(
        time_h,
        concentration,
        errors=errors,
        errors_are=errors_are,
        start=start,
        area_m2_per_m3=area_m2_per_m3,
    )
    return fit_cementation_tests([test], law, level=level, intervals=intervals)


def fit_cementation_tests(
    tests: Sequence[CementationTest],
    law: str = "first_order",
    *,
    level: float = 0.95,
    intervals: str = "linearised",
    reference_temperature_K: float | None = None,
) -> CementationFit:
    """Return a law fitted to all tests together.

    Several temperatures give an activation energy, several stirring speeds a power of the speed;
    where the areas of all tests are known k is a transfer coefficient [m/s].

    Parameters
    ----------
    tests : sequence of CementationTest
    law : str
        As in :func:`fit_cementation`.
    level : float
    intervals : "linearised" or "profile"
    reference_temperature_K : float, optional
        The mean of the tests where left out.

    Returns
    -------
    CementationFit

    Raises
    ------
    InputProblems
        As :func:`fit_cementation`.
    """
    listed = check_tests(tests)
    if intervals not in INTERVALS:
        raise argument_error("intervals", repr(intervals), " or ".join(INTERVALS))
    problem = RateProblem(rate_form(law), listed, _reference(listed, reference_temperature_K))
    points = sum(test.time_h.size for test in listed)
    if points < len(problem.names):
        raise argument_error(
            "law",
            f"{problem.form.name} has {len(problem.names)} quantities for {points} readings",
            "at least as many readings as quantities",
            "give the start, or take a smaller law",
        )
    to_fit = _least_squares_problem(problem)
    estimate = _best(problem, to_fit)
    return _result(problem, to_fit, estimate, level, intervals, points)


def _reference(tests: tuple[CementationTest, ...], temperature_K: float | None) -> Reference:
    kelvins = [test.temperature_K for test in tests]
    speeds = [test.stirring_rpm for test in tests if test.stirring_rpm is not None]
    distinct = len(set(speeds)) > 1 and len(speeds) == len(tests)
    middle = float(np.exp(np.mean(np.log(speeds)))) if speeds else None
    mean = float(1.0 / np.mean(1.0 / np.asarray(kelvins)))
    return Reference(
        temperature_K if temperature_K is not None else mean,
        middle,
        all(test.area_m2_per_m3 is not None for test in tests),
        max(kelvins) - min(kelvins) > 0.5,
        distinct,
    )


def _least_squares_problem(problem: RateProblem) -> LeastSquaresProblem:
    first = _guess_ln_k(problem)
    # a little off, so that the fall of the sum of squares shows even where the guess is exact
    starts, low, high = [first + _OFF], [first - _LARGEST_MOVE], [first + _LARGEST_MOVE]
    if problem.reference.has_energy:
        starts, low, high = [*starts, 20.0], [*low, ENERGY_RANGE[0]], [*high, ENERGY_RANGE[1]]
    if problem.reference.has_stirring:
        starts, low, high = [*starts, 0.5], [*low, STIRRING_RANGE[0]], [*high, STIRRING_RANGE[1]]
    for shape in problem.form.shapes:
        ends = (shape.starts[0], shape.low, shape.high)
        value, least, most = (np.log(v) if shape.scale == "log" else v for v in ends)
        starts, low, high = [*starts, value], [*low, least], [*high, most]
    for test in problem.fitted_starts:
        value = float(np.log(test.start_guess))
        starts, low, high = [*starts, value], [*low, value - 3.0], [*high, value + 3.0]
    return LeastSquaresProblem(
        problem.names,
        np.array(starts),
        np.array(low),
        np.array(high),
        problem.residuals_and_jacobian,
        problem.scales,
        stated=all(test.sd is not None for test in problem.tests),
    )


def _guess_ln_k(problem: RateProblem) -> float:
    """A first k from the logarithms of the readings, as a straight line would have it."""
    slopes = []
    for test in problem.tests:
        fallen = (test.time_h > 0.0) & (test.concentration > 0.0)
        fallen &= test.concentration < test.start_guess
        depth = np.log(test.start_guess / np.where(fallen, test.concentration, 1.0))
        rates = depth[fallen] / test.time_h[fallen]
        if problem.reference.by_area and test.area_m2_per_m3 is not None:
            rates = rates / (_S_PER_H * test.area_m2_per_m3)
        slopes.extend(rates.tolist())
    if slopes:
        return float(np.log(np.median(slopes)))
    longest = max(float(test.time_h.max()) for test in problem.tests)
    return float(-np.log(max(longest, 1e-6)))


def _best(problem: RateProblem, to_fit: LeastSquaresProblem) -> Estimate:
    """The lowest minimum from several starts: a break and a floor have more than one."""
    found = [least_squares(one) for one in _started(problem, to_fit)]
    converged = [one for one in found if one.converged] or found
    return min(converged, key=lambda one: one.sum_of_squares)


def _started(problem: RateProblem, to_fit: LeastSquaresProblem) -> Iterator[LeastSquaresProblem]:
    shapes = problem.form.shapes
    if not shapes:
        yield to_fit
        return
    factors = _STARTS if len(shapes) == 1 else _STARTS[:1]
    for factor, *values in itertools.product(factors, *(shape.starts for shape in shapes)):
        start = to_fit.start.copy()
        start[0] += np.log(factor)
        for shape, value in zip(shapes, values, strict=True):
            position = problem.names.index(shape.name)
            start[position] = np.log(value) if shape.scale == "log" else value
        yield replace(to_fit, start=start)


def _result(
    problem: RateProblem,
    to_fit: LeastSquaresProblem,
    estimate: Estimate,
    level: float,
    intervals: str,
    points: int,
) -> CementationFit:
    def interval(j: int) -> object:
        if intervals == "profile" and estimate.converged:
            return profile_interval(to_fit, estimate, j, level)
        return estimate.interval(j, level)

    found = [interval(j) for j in range(len(problem.names))]
    fitted = sum(state == "free" for state in estimate.states)
    return CementationFit(
        law=problem.law(estimate.vector),
        parameters=rate_parameters(problem.names, found, problem.reference.by_area, level),
        tests=problem.tests,
        problem=to_fit,
        estimate=estimate,
        law_of=problem.law,
        residuals=tuple(_residuals(problem, estimate)),
        aicc=corrected_aic(estimate.sum_of_squares, points, fitted),
        bic=schwarz_bic(estimate.sum_of_squares, points, fitted),
        n_points=points,
        level=level,
    )


def _residuals(problem: RateProblem, estimate: Estimate) -> Iterator[RateResidual]:
    position = 0
    for test in problem.tests:
        expected, _ = problem.expected(test, estimate.vector)
        bound = test.bound if test.bound is not None else np.zeros(expected.shape)
        for i in range(expected.size):
            yield RateResidual(
                test.name,
                float(test.time_h[i]),
                float(test.concentration[i]),
                float(expected[i]),
                None if test.sd is None else float(test.sd[i]),
                int(bound[i]),
                float(estimate.residuals[position]),
            )
            position += 1
