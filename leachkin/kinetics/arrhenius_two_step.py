"""Activation energy in two steps beside the global one: a fit a temperature, then a line.

The two-step way loses what temperatures share (an ultimate extraction, a law) and keeps few degrees
of freedom; it is shown because readers expect it, and because a bend of its line is a warning.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.arrhenius import ArrheniusFit, fit_arrhenius
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.resistance import Reference
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed, SizeDistribution

Array = NDArray[np.float64]

#: Temperatures closer than this are one [K].
SAME_TEMPERATURE_K = 0.5
#: Extractions at which the energy is read off without a law, as shares of the least ultimate.
SHARES = (0.2, 0.4, 0.6, 0.8, 0.9)


@dataclass(frozen=True)
class CurvatureTest:
    """Whether an Arrhenius line bends.

    Attributes
    ----------
    p_value : float or None
        Chance of so large a quadratic term on a straight line; None where it cannot be tested.
    bend : float or None
        Coefficient of the squared centred 1/T [K^2].
    words : str
    """

    p_value: float | None
    bend: float | None
    words: str


@dataclass(frozen=True)
class TwoStepArrhenius:
    """Activation energies by a fit a temperature and a line, beside those of the global fit.

    Attributes
    ----------
    names : tuple of str
        Parameters whose rate is followed, as "tau_chemical" or "k".
    temperature_K : ndarray, shape (n,)
    fits : tuple of FitResult
        One a temperature, at that temperature.
    lines : tuple of ArrheniusFit
        One a name.
    curvature : tuple of CurvatureTest
    whole : FitResult
        All temperatures together.
    fixed_extraction : tuple of (float, float)
        Extraction, and the activation energy [kJ/mol] of the time to reach it at the reference
        size. Read off fitted curves, so that it has no interval of its own.
    warnings : tuple of str
    """

    names: tuple[str, ...]
    temperature_K: Array
    fits: tuple[FitResult, ...]
    lines: tuple[ArrheniusFit, ...]
    curvature: tuple[CurvatureTest, ...]
    whole: FitResult
    fixed_extraction: tuple[tuple[float, float], ...]
    warnings: tuple[str, ...] = ()

    def table(self) -> ResultTable:
        """Return the energies side by side, with degrees of freedom and the curvature."""
        columns = (
            Column("of", "Of"),
            Column("way", "Way"),
            Column("energy", "Activation energy", "kJ/mol"),
            Column("standard_error", "Standard error", "kJ/mol", 2),
            Column("low", f"Low, {100 * self.whole.level:g} %", "kJ/mol"),
            Column("high", f"High, {100 * self.whole.level:g} %", "kJ/mol"),
            Column("degrees_of_freedom", "Degrees of freedom"),
            Column("remark", "Remark"),
        )
        return ResultTable.from_records("arrhenius_two_ways", columns, self._records())

    def _records(self) -> list[dict[str, Any]]:
        records = []
        for name, line, bend in zip(self.names, self.lines, self.curvature, strict=True):
            shared = self.whole.parameter(_energy_name(name, self.whole))
            records.append(
                {
                    "of": name,
                    "way": "all tests together",
                    "energy": shared.value,
                    "standard_error": shared.standard_error,
                    "low": shared.low,
                    "high": shared.high,
                    "degrees_of_freedom": self.whole.degrees_of_freedom,
                    "remark": shared.why_no_interval,
                }
            )
            records.append(_line_record(name, "a fit a temperature, then a line", line, bend.words))
        for extraction, energy in self.fixed_extraction:
            records.append(
                {
                    "of": f"{100 * extraction:.3g} % extraction",
                    "way": "time to reach it",
                    "energy": energy,
                    "remark": "read off the fitted curves: no interval of its own",
                }
            )
        return records


def _line_record(of: str, way: str, line: ArrheniusFit, remark: str) -> dict[str, Any]:
    return {
        "of": of,
        "way": way,
        "energy": line.activation_energy_kJ_per_mol,
        "standard_error": line.standard_error_kJ_per_mol,
        "low": line.low,
        "high": line.high,
        "degrees_of_freedom": line.degrees_of_freedom,
        "remark": remark,
    }


def _energy_name(name: str, whole: FitResult) -> str:
    plain, kind = "activation_energy", name.removeprefix("tau_")
    names = {parameter.name for parameter in whole.parameters}
    return f"{plain}_{kind}" if f"{plain}_{kind}" in names else plain


def curvature_test(
    temperature_K: ArrayLike, rate_constant: ArrayLike, standard_error: ArrayLike | None = None
) -> CurvatureTest:
    """Return whether ln k against 1/T bends, by the F test of a quadratic term.

    Parameters
    ----------
    temperature_K, rate_constant : array_like, shape (n,)
    standard_error : array_like, shape (n,), optional
        Of each rate constant; weighs ln k by (k/standard_error)^2.

    Returns
    -------
    CurvatureTest
        Not tested with fewer than four temperatures: a parabola passes through three.
    """
    T, k = (np.asarray(a, dtype=np.float64) for a in (temperature_K, rate_constant))
    n = len(np.unique(T))
    if n < 4:
        return CurvatureTest(None, None, f"{n} temperatures: curvature cannot be tested")
    sd = np.ones_like(k) if standard_error is None else np.asarray(standard_error) / k
    x = 1.0 / T - np.mean(1.0 / T)
    scale = float(np.abs(x).max())
    design = np.stack([np.ones_like(x), x / scale, (x / scale) ** 2], axis=1) / sd[:, None]
    target = np.log(k) / sd
    straight = _squares(design[:, :2], target)
    solution, bent = _solution(design, target), _squares(design, target)
    freedom = len(k) - 3
    p = _f_upper_tail(max(straight - bent, 0.0) / max(bent / freedom, 1e-300), freedom)
    words = f"curvature: p = {p:.2g} on 1 and {freedom} degrees of freedom"
    if p < 0.05:
        words += "; the line bends: the control may change over these temperatures"
    return CurvatureTest(p, float(solution[2]) / scale**2, words)


def _solution(design: Array, target: Array) -> Array:
    return np.asarray(np.linalg.lstsq(design, target, rcond=None)[0])


def _squares(design: Array, target: Array) -> float:
    return float(np.sum((target - design @ _solution(design, target)) ** 2))


def _f_upper_tail(ratio: float, freedom: int) -> float:
    from scipy.stats import f

    return float(f.sf(ratio, 1, freedom))


def arrhenius_two_step(
    observed: Sequence[Observed],
    law: str,
    *,
    level: float = 0.95,
    whole: FitResult | None = None,
    **options: Any,
) -> TwoStepArrhenius:
    """Return activation energies by a fit a temperature and a line, beside the global fit.

    Parameters
    ----------
    observed : sequence of Observed
        Tests of one ore and one metal at two temperatures or more.
    law : str
    level : float
    whole : FitResult, optional
        The fit of all tests together, where it is there already.
    options
        Of :func:`fit_tests`, used for every fit.

    Returns
    -------
    TwoStepArrhenius

    Raises
    ------
    InputProblems
        If there is one temperature only, or a fit has no meaning.

    Notes
    -----
    The line through ``ln k``, k the inverse time or the rate constant, is weighted by the standard
    errors of the fits; its interval is Student's t with temperatures less two degrees of freedom.
    A temperature whose time has no standard error is left out of the line, and named.
    """
    groups = _by_temperature(observed)
    if len(groups) < 2:
        raise argument_error(
            "observed", "tests at one temperature", "two temperatures or more",
            "give the activation energy from print as an assumed value",
        )  # fmt: skip
    if whole is None:
        whole = fit_tests(observed, law, level=level, **options)
    reference = whole.law.reference
    fits = tuple(
        fit_tests(
            tests,
            law,
            level=level,
            **{**options, "reference": replace(reference, temperature_K=temperature)},
        )
        for temperature, tests in groups
    )
    temperatures = np.array([temperature for temperature, _ in groups])
    names = tuple(p.name for p in fits[0].parameters if p.name.startswith(("tau_", "k")))
    lines, bends, kept, warnings = [], [], [], []
    for name in names:
        T, k, error, left_out = _rates(name, temperatures, fits)
        warnings += [f"{name} at {t - 273.15:.4g} degC is not held: left out" for t in left_out]
        if T.size < 2:
            warnings.append(f"{name}: fewer than two temperatures hold it, no line")
            continue
        kept.append(name)
        lines.append(fit_arrhenius(T, k, error, level))
        bends.append(curvature_test(T, k, error))
    return TwoStepArrhenius(
        tuple(kept),
        temperatures,
        fits,
        tuple(lines),
        tuple(bends),
        whole,
        _at_fixed_extraction(temperatures, fits, reference),
        tuple(warnings),
    )


def _by_temperature(observed: Sequence[Observed]) -> list[tuple[float, list[Observed]]]:
    """Return the tests of each temperature, rising; those within half a kelvin are one."""
    groups: dict[float, list[Observed]] = defaultdict(list)
    for test in sorted(observed, key=lambda o: o.temperature_K):
        near = [t for t in groups if abs(t - test.temperature_K) <= SAME_TEMPERATURE_K]
        groups[near[0] if near else test.temperature_K].append(test)
    return sorted(groups.items())


def _rates(
    name: str, temperatures: Array, fits: Sequence[FitResult]
) -> tuple[Array, Array, Array, list[float]]:
    """Temperatures, rate constants and standard errors that the fits hold, and what is left out."""
    rows, left_out = [], []
    for temperature, fit in zip(temperatures, fits, strict=True):
        found = fit.parameter(name)
        if not found.standard_error or found.value <= 0.0:
            left_out.append(float(temperature))
            continue
        rate = 1.0 / found.value if name.startswith("tau_") else found.value
        rows.append((float(temperature), rate, rate * found.standard_error / found.value))
    T, k, error = np.array(rows).reshape(-1, 3).T
    return T, k, error, left_out


def _at_fixed_extraction(
    temperatures: Array, fits: Sequence[FitResult], reference: Reference
) -> tuple[tuple[float, float], ...]:
    one = SizeDistribution.single(reference.size_mm)
    curves = [fit.law.ore_curve(one) for fit in fits]
    least = min(float(curve.ultimate) for curve in curves)
    found = []
    for share in SHARES:
        hours = np.array([_time_to(curve, share * least) for curve in curves])
        line = fit_arrhenius(temperatures, 1.0 / hours)
        found.append((share * least, line.activation_energy_kJ_per_mol))
    return tuple(found)


def _time_to(curve: Any, extraction: float) -> float:
    from scipy.optimize import brentq

    return float(
        brentq(lambda s: float(curve(s)) - extraction, 0.0, curve.end_h, xtol=1e-12 * curve.end_h)
    )
