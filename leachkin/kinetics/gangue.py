"""Reagent taken by gangue against time: a fast part and a slow part that has an activation energy.

``taken = fast (1 - exp(-t/fast_h)) + slow (1 - exp(-t/slow_h(T)))`` [kg/t]
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.inference import (
    Estimate,
    LeastSquaresProblem,
    Scale,
    draw_vectors,
    least_squares,
)
from leachkin.kinetics.demand import ReagentDemand
from leachkin.kinetics.fit_elements import thermal_covariate
from leachkin.kinetics.fit_result import Parameter
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

NAMES = ("fast", "fast_h", "slow", "slow_h", "activation_energy")
UNITS = ("kg/t", "h", "kg/t", "h", "kJ/mol")
SCALES: tuple[Scale, ...] = ("log", "log", "log", "log", "linear")


@dataclass(frozen=True)
class GangueLaw:
    """The two parts of gangue consumption; every field but the reference may have shape B.

    Attributes
    ----------
    fast_kg_per_t, fast_h : float or ndarray
    slow_kg_per_t, slow_h : float or ndarray
        slow_h at the reference temperature.
    activation_energy_kJ_per_mol : float or ndarray
        Of the slow part.
    reference_temperature_K : float
    """

    fast_kg_per_t: Array | float
    fast_h: Array | float
    slow_kg_per_t: Array | float
    slow_h: Array | float
    activation_energy_kJ_per_mol: Array | float
    reference_temperature_K: float = STANDARD_TEMPERATURE_K

    def slow_h_at(self, temperature_K: float) -> Array:
        """Return the time constant of the slow part at a temperature [h], shape B."""
        thermal = thermal_covariate(temperature_K, self.reference_temperature_K)
        return np.asarray(self.slow_h * np.exp(self.activation_energy_kJ_per_mol * thermal))

    def taken_kg_per_t(self, time_h: ArrayLike, temperature_K: float) -> Array:
        """Return the reagent taken by gangue [kg/t], shape B + (t,)."""
        t = np.asarray(time_h, dtype=np.float64)
        fast, fast_h, slow, slow_h = (
            np.asarray(v)[..., None]
            for v in (
                self.fast_kg_per_t,
                self.fast_h,
                self.slow_kg_per_t,
                self.slow_h_at(temperature_K),
            )
        )
        return np.asarray(-fast * np.expm1(-t / fast_h) - slow * np.expm1(-t / slow_h))

    def demand(
        self,
        temperature_K: float,
        per_metal_kg_per_kg: Array | float,
        head_kg_per_t: Array | float,
    ) -> ReagentDemand:
        """Return the reagent demand of the ore at a temperature: metal and gangue together."""
        return ReagentDemand(
            per_metal_kg_per_kg=per_metal_kg_per_kg,
            head_kg_per_t=head_kg_per_t,
            fast_kg_per_t=self.fast_kg_per_t,
            fast_h=self.fast_h,
            slow_kg_per_t=self.slow_kg_per_t,
            slow_h=self.slow_h_at(temperature_K),
        )


@dataclass(frozen=True)
class GangueReadings:
    """Reagent taken by gangue in one test, net of what the metal took.

    Attributes
    ----------
    test : str
    time_h, taken_kg_per_t : ndarray, shape (m,)
        Cumulative.
    temperature_K : float
    sd_kg_per_t : ndarray, shape (m,), or None
        One standard deviation each; None weighs all readings alike.
    """

    test: str
    time_h: Array
    taken_kg_per_t: Array
    temperature_K: float
    sd_kg_per_t: Array | None = None


@dataclass(frozen=True)
class GangueFit:
    """Gangue consumption fitted to all bottles together."""

    law: GangueLaw
    parameters: tuple[Parameter, ...]
    vector: Array
    covariance: Array
    sum_of_squares: float
    degrees_of_freedom: int
    n_tests: int
    n_points: int
    converged: bool
    message: str
    warnings: tuple[str, ...]
    estimate: Estimate
    energy_known: bool
    bounds: tuple[Array, Array]

    def parameter(self, name: str) -> Parameter:
        """Return a parameter by name: fast, fast_h, slow, slow_h, activation_energy."""
        for parameter in self.parameters:
            if parameter.name == name:
                return parameter
        raise argument_error("name", repr(name), ", ".join(NAMES))

    def demand(
        self, temperature_K: float, per_metal_kg_per_kg: float, head_kg_per_t: float
    ) -> ReagentDemand:
        """Return the reagent demand of the ore at a temperature."""
        return self.law.demand(temperature_K, per_metal_kg_per_kg, head_kg_per_t)

    def draw(self, n: int, seed: int) -> GangueLaw:
        """Return the law with a batch of n seeded draws of its five parameters."""
        freedom = self.estimate.student_degrees
        draws = draw_vectors(
            self.vector,
            self.covariance,
            n,
            seed,
            None if freedom is None else max(freedom, 1),
        )
        low, high = self.bounds  # what the readings do not hold would run to any power of ten
        draws = np.clip(draws, low, high)
        return _law(draws, self.law.reference_temperature_K, self.law.activation_energy_kJ_per_mol)

    def table(self) -> ResultTable:
        """Return the parameters with intervals."""
        columns = (
            Column("name", "Parameter"),
            Column("value", "Value"),
            Column("unit", "Unit"),
            Column("standard_error", "Standard error", digits=2),
            Column("low", "Low"),
            Column("high", "High"),
            Column("why_no_interval", "Remark"),
        )
        return ResultTable.from_records("gangue", columns, [vars(p) for p in self.parameters])


def fit_gangue(
    readings: Sequence[GangueReadings],
    *,
    reference_temperature_K: float = STANDARD_TEMPERATURE_K,
    activation_energy_kJ_per_mol: float | None = None,
    level: float = 0.95,
) -> GangueFit:
    """Return gangue consumption fitted to all bottles together.

    Parameters
    ----------
    readings : sequence of GangueReadings
    reference_temperature_K : float
        Temperature that ``slow_h`` refers to.
    activation_energy_kJ_per_mol : float, optional
        Held at this value; fitted where left out and two temperatures were tested, else 0.
    level : float

    Returns
    -------
    GangueFit

    Raises
    ------
    InputProblems
        For no readings, fewer readings than parameters, or values that are not finite.
    """
    tests = tuple(readings)
    _check(tests)
    arrays = _Arrays.of(tests, reference_temperature_K)
    several = np.ptp(arrays.temperature_K) > 1e-3 * arrays.temperature_K.mean()
    fitted = bool(several and activation_energy_kJ_per_mol is None)
    held = 0.0 if activation_energy_kJ_per_mol is None else float(activation_energy_kJ_per_mol)
    found = _best(arrays, fitted, held)
    law = _law(found.vector, reference_temperature_K, held)
    return GangueFit(
        law=law,
        parameters=_parameters(found, level, fitted, held),
        vector=found.vector,
        covariance=found.covariance,
        sum_of_squares=found.sum_of_squares,
        degrees_of_freedom=found.degrees_of_freedom,
        n_tests=len(tests),
        n_points=arrays.time_h.size,
        converged=found.converged,
        message=found.message,
        warnings=_warnings(arrays, found, fitted, activation_energy_kJ_per_mol),
        estimate=found,
        energy_known=fitted or activation_energy_kJ_per_mol is not None,
        bounds=_bounds(arrays, fitted),
    )


@dataclass(frozen=True)
class _Arrays:
    time_h: Array
    taken: Array
    sd: Array
    temperature_K: Array
    thermal: Array
    stated: bool

    @classmethod
    def of(cls, tests: tuple[GangueReadings, ...], reference_K: float) -> _Arrays:
        temperature = np.concatenate([np.full(t.time_h.size, t.temperature_K) for t in tests])
        stated = all(t.sd_kg_per_t is not None for t in tests)
        sd = [
            t.sd_kg_per_t if stated and t.sd_kg_per_t is not None else np.ones(t.time_h.size)
            for t in tests
        ]
        return cls(
            np.concatenate([t.time_h for t in tests]).astype(np.float64),
            np.concatenate([t.taken_kg_per_t for t in tests]).astype(np.float64),
            np.concatenate(sd).astype(np.float64),
            temperature,
            thermal_covariate(temperature, reference_K),
            stated,
        )

    def residuals_and_jacobian(self, vector: Array, held_energy: float) -> tuple[Array, Array]:
        fast, fast_h, slow, slow_h = np.exp(vector[:4])
        energy = vector[4] if vector.size == 5 else held_energy
        u = self.time_h / fast_h
        v = self.time_h / (slow_h * np.exp(energy * self.thermal))
        early, late = -fast * np.expm1(-u), -slow * np.expm1(-v)
        by_fast_h, by_slow_h = -fast * u * np.exp(-u), -slow * v * np.exp(-v)
        columns = [early, by_fast_h, late, by_slow_h, by_slow_h * self.thermal][: vector.size]
        residuals = (early + late - self.taken) / self.sd
        return residuals, np.stack(columns, axis=1) / self.sd[:, None]


def _bounds(arrays: _Arrays, fitted: bool) -> tuple[Array, Array]:
    """Return the bounds of the fitted quantities, from what was taken and when."""
    top = max(float(arrays.taken.max()), 1e-6)
    first, last = arrays.time_h[arrays.time_h > 0].min(), arrays.time_h.max()
    low = np.log([1e-4 * top, first / 100, 1e-4 * top, first / 2])
    high = np.log([5 * top, last / 2, 50 * top, last * 1000])
    ends = (np.array([-50.0]), np.array([200.0])) if fitted else (np.zeros(0), np.zeros(0))
    return np.concatenate([low, ends[0]]), np.concatenate([high, ends[1]])


def _best(arrays: _Arrays, fitted: bool, held: float) -> Estimate:
    """Return the best estimate over a grid of starts taken from the data."""
    top = max(float(arrays.taken.max()), 1e-6)
    times = np.sort(arrays.time_h[arrays.time_h > 0])
    starts = [
        np.concatenate([np.log([s * top, f, (1 - s) * top * 1.2, g]), [30.0] if fitted else []])
        for s in (0.2, 0.5)
        for f in (times[0] / 3, times[0] * 3)
        for g in (times[-1] / 8, times[-1])
    ]

    def evaluate(vector: Array) -> tuple[Array, Array]:
        return arrays.residuals_and_jacobian(vector, held)

    starts.sort(key=lambda v: float(np.sum(evaluate(v)[0] ** 2)))
    p = starts[0].size
    found = [
        least_squares(
            LeastSquaresProblem(
                NAMES[:p],
                start,
                *_bounds(arrays, fitted),
                evaluate,
                SCALES[:p],
                arrays.stated,
            )
        )
        for start in starts[:2]
    ]
    return min(found, key=lambda e: e.sum_of_squares)


def _law(vector: Array, reference_K: float, held: Array | float) -> GangueLaw:
    fast, fast_h, slow, slow_h = (np.exp(vector[..., j]) for j in range(4))
    energy = vector[..., 4] if vector.shape[-1] == 5 else np.full(vector.shape[:-1], held)
    return GangueLaw(fast, fast_h, slow, slow_h, energy, reference_K)


def _parameters(found: Estimate, level: float, fitted: bool, held: float) -> tuple[Parameter, ...]:
    listed = []
    for j in range(len(found.names)):
        i = found.interval(j, level)
        listed.append(
            Parameter(
                NAMES[j],
                i.value,
                UNITS[j],
                i.standard_error,
                i.low,
                i.high,
                level,
                i.method,
                i.why_not,
            )
        )
    if not fitted:
        listed.append(Parameter(NAMES[4], held, UNITS[4], None, None, None, level, "held", "held"))
    return tuple(listed)


def _warnings(
    arrays: _Arrays, found: Estimate, fitted: bool, given: float | None
) -> tuple[str, ...]:
    said = []
    if not fitted and given is None:
        said.append("one temperature was tested: the slow part's activation energy is held at 0")
    fast_h, slow_h = np.exp(found.vector[1]), np.exp(found.vector[3])
    first = float(arrays.time_h[arrays.time_h > 0].min())
    if first > 3 * fast_h:
        said.append(f"the fast part was over before the first reading at {first:g} h")
    last = float(arrays.time_h.max())
    if last < slow_h:
        said.append(
            f"the slow part (time constant {slow_h:.3g} h) was not seen to end by {last:g} h: its "
            "amount is extrapolated"
        )
    if found.widening > 1:
        said.append(f"the scatter is {found.widening:.2g} times the stated precision")
    said += [f"{n}: {r}" for n, r in zip(found.names, found.reasons, strict=True) if r]
    return tuple(said)


def _check(tests: tuple[GangueReadings, ...]) -> None:
    if not tests:
        raise argument_error("readings", "none", "one bottle or more")
    count = 0
    for t in tests:
        shapes = {np.shape(t.time_h), np.shape(t.taken_kg_per_t)}
        finite = np.isfinite(t.time_h).all() and np.isfinite(t.taken_kg_per_t).all()
        if len(shapes) > 1 or not finite or (np.asarray(t.time_h) < 0).any():
            raise argument_error(
                f"test {t.test}", "times or amounts that do not fit together", "finite, one each"
            )
        count += int(np.size(t.time_h))
    if count < 5:
        raise argument_error("readings", f"{count} readings", "5 or more for five parameters")
