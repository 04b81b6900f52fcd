"""Rate constants against temperature: activation energy with the true degrees of freedom.

``ln k = ln A - Ea/(R T)``, fitted centred about the weighted mean of 1/T.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.inference import StraightLine, normal_multiplier, student_multiplier, weighted_line
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

#: Below this a temperature was surely given in degrees Celsius.
LEAST_TEMPERATURE_K = 200.0


@dataclass(frozen=True)
class ArrheniusFit:
    """An Arrhenius line.

    Attributes
    ----------
    activation_energy_kJ_per_mol : float
    standard_error_kJ_per_mol, low, high : float or None
        None where there is nothing to judge by; ``why_no_interval`` says why.
    level : float
        Of the interval.
    ln_prefactor : float
        ln A, A in the unit of the rate constant.
    ln_prefactor_standard_error : float or None
    degrees_of_freedom : int
        Temperatures less two.
    mean_temperature_K : float
        Where the line is best known: 1 / weighted mean of 1/T.
    ln_rate_at_mean : float
    method, why_no_interval : str
    temperature_K, rate_constant, fitted : ndarray, shape (n,)
    warnings : tuple of str
    """

    activation_energy_kJ_per_mol: float
    standard_error_kJ_per_mol: float | None
    low: float | None
    high: float | None
    level: float
    ln_prefactor: float
    ln_prefactor_standard_error: float | None
    degrees_of_freedom: int
    mean_temperature_K: float
    ln_rate_at_mean: float
    method: str
    why_no_interval: str
    temperature_K: Array
    rate_constant: Array
    fitted: Array
    warnings: tuple[str, ...] = ()

    def rate_at(self, temperature_K: ArrayLike) -> Array:
        """Return the rate constant at temperatures [K]."""
        return _rate(self.ln_rate_at_mean, self.mean_temperature_K, self._slope_K, temperature_K)

    @property
    def _slope_K(self) -> float:
        return -1000.0 * self.activation_energy_kJ_per_mol / GAS_CONSTANT_J_per_mol_K

    def table(self) -> ResultTable:
        """Return the points beside the line."""
        columns = (
            Column("temperature_K", "Temperature", "K", 5),
            Column("rate_constant", "Rate constant"),
            Column("fitted", "Line"),
            Column("ratio", "Rate constant over line"),
        )
        records = [
            {"temperature_K": t, "rate_constant": k, "fitted": f, "ratio": k / f}
            for t, k, f in zip(
                self.temperature_K.tolist(),
                self.rate_constant.tolist(),
                self.fitted.tolist(),
                strict=True,
            )
        ]
        return ResultTable.from_records("arrhenius", columns, records)


def activation_energy_of_slope(slope_K: float) -> float:
    """Return the activation energy [kJ/mol] of a slope of -ln k against 1/T [K].

    Examples
    --------
    >>> round(activation_energy_of_slope(4938.7), 2)
    41.06
    """
    return slope_K * GAS_CONSTANT_J_per_mol_K / 1000.0


def arrhenius_rate_constant(
    temperature_K: ArrayLike,
    prefactor: float,
    activation_energy_kJ_per_mol: float,
    gas_constant_J_per_mol_K: float = GAS_CONSTANT_J_per_mol_K,
) -> Array:
    """Return A exp(-Ea/(R T)), in the unit of the prefactor.

    Parameters
    ----------
    temperature_K : array_like
    prefactor, activation_energy_kJ_per_mol : float
    gas_constant_J_per_mol_K : float
        The exact one; printed constants may have been made with 8.314.
    """
    T = np.asarray(temperature_K, dtype=np.float64)
    exponent = -1000.0 * activation_energy_kJ_per_mol / (gas_constant_J_per_mol_K * T)
    return np.asarray(prefactor * np.exp(exponent))


def fit_arrhenius(
    temperature_K: ArrayLike,
    rate_constant: ArrayLike,
    standard_error: ArrayLike | None = None,
    level: float = 0.95,
) -> ArrheniusFit:
    """Return the activation energy of rate constants measured at several temperatures.

    Parameters
    ----------
    temperature_K : array_like, shape (n,)
    rate_constant : array_like, shape (n,)
        In any one unit, above 0. Times for complete conversion enter as 1/tau.
    standard_error : array_like, shape (n,), optional
        Of each rate constant; weights ln k by (k/standard_error)^2.
    level : float
        Of the interval.

    Returns
    -------
    ArrheniusFit
        The interval is Student's t on the scatter about the line with n - 2 degrees of freedom:
        three temperatures give t = 12.7 at 95 %. With two there is none, unless standard errors
        are given: then it is normal and rests on them alone.

    Raises
    ------
    InputProblems
        With fewer than two temperatures, or values that are not above 0.

    Examples
    --------
    >>> fit = fit_arrhenius([298.15, 313.15, 328.15], [0.10, 0.21, 0.42])
    >>> fit.degrees_of_freedom
    1
    """
    T, k = _positive("temperature_K", temperature_K), _positive("rate_constant", rate_constant)
    _check(T, k)
    weights = None
    if standard_error is not None:
        error = _positive("standard_error", standard_error)
        if error.shape != k.shape:
            raise argument_error("standard_error", f"{error.size} values", f"{k.size}, one each")
        weights = ((k / error) ** 2).tolist()
    line = weighted_line((1.0 / T).tolist(), [math.log(v) for v in k.tolist()], weights)
    return _fit(T, k, line, weights is not None, level)


def _fit(T: Array, k: Array, line: StraightLine, weighted: bool, level: float) -> ArrheniusFit:
    per_slope = -GAS_CONSTANT_J_per_mol_K / 1000.0
    energy = per_slope * line.slope
    error, ln_error, half, method, why = _uncertainty(line, weighted, level)
    scaled = None if error is None else abs(per_slope) * error
    width = None if half is None else abs(per_slope) * half
    mean_T = 1.0 / line.mean_x
    return ArrheniusFit(
        activation_energy_kJ_per_mol=energy,
        standard_error_kJ_per_mol=scaled,
        low=None if width is None else energy - width,
        high=None if width is None else energy + width,
        level=level,
        ln_prefactor=line.intercept,
        ln_prefactor_standard_error=ln_error,
        degrees_of_freedom=line.degrees_of_freedom,
        mean_temperature_K=mean_T,
        ln_rate_at_mean=line.mean_y,
        method=method,
        why_no_interval=why,
        temperature_K=T,
        rate_constant=k,
        fitted=_rate(line.mean_y, mean_T, line.slope, T),
        warnings=_warnings(line, width),
    )


def _uncertainty(
    line: StraightLine, weighted: bool, level: float
) -> tuple[float | None, float | None, float | None, str, str]:
    """Return errors of slope and intercept, half-width of the slope, method, why none."""
    freedom = line.degrees_of_freedom
    if freedom > 0 and line.slope_standard_error is not None:
        half = student_multiplier(level, freedom) * line.slope_standard_error
        method = f"Student t with {freedom} degrees of freedom"
        return line.slope_standard_error, line.intercept_standard_error, half, method, ""
    if weighted:
        error = math.sqrt(1.0 / line.spread)
        at_zero = math.hypot(math.sqrt(1.0 / line.weight_sum), error * line.mean_x)
        half = normal_multiplier(level) * error
        return error, at_zero, half, "normal, from the standard errors given", ""
    why = "two temperatures: a line passes through both, there is no scatter to judge by"
    return None, None, None, "none", why


def _warnings(line: StraightLine, half_width: float | None) -> tuple[str, ...]:
    if half_width is None:
        return ("two temperatures give no interval: add a third and a repeat",)
    if line.degrees_of_freedom == 1:
        return (
            f"three temperatures leave one degree of freedom: within {half_width:.2g} kJ/mol "
            "either way; a fourth temperature would tell most",
        )
    return ()


def _rate(ln_rate: float, mean_K: float, slope_K: float, temperature_K: ArrayLike) -> Array:
    T = np.asarray(temperature_K, dtype=np.float64)
    return np.asarray(np.exp(ln_rate + slope_K * (1.0 / T - 1.0 / mean_K)))


def _positive(name: str, values: ArrayLike) -> Array:
    array = np.atleast_1d(np.asarray(values, dtype=np.float64))
    if array.ndim != 1 or not (np.isfinite(array).all() and (array > 0).all()):
        raise argument_error(name, f"{array.tolist()}", "finite numbers above 0")
    return array


def _check(T: Array, k: Array) -> None:
    if T.shape != k.shape:
        raise argument_error("rate_constant", f"{k.size} values", f"{T.size}, one a temperature")
    if np.unique(T).size < 2:
        raise argument_error(
            "temperature_K", f"{np.unique(T).size} different temperature", "two or more"
        )
    if T.min() < LEAST_TEMPERATURE_K:
        raise argument_error(
            "temperature_K", f"{T.min():g} K", "kelvin", "add 273.15 to degrees Celsius"
        )
