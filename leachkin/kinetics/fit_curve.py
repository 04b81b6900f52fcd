"""Fit a law to one curve of extraction against time, in any one unit of time."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.fit_options import FitOptions
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_tests import fit_with_options
from leachkin.kinetics.resistance import Reference
from leachkin.problems import argument_error
from leachkin.testwork import SizeDistribution, observed_from_extraction

Array = NDArray[np.float64]

#: Above this the extraction was surely typed in percent.
PERCENT_ABOVE = 1.5
#: Below this it is no assay error any more.
LEAST_EXTRACTION = -0.25
#: A relative error is a share of the extraction, or of this where the extraction is less.
LEAST_FOR_RELATIVE_ERROR = 0.01


def fit_curve(
    time: ArrayLike,
    extraction: ArrayLike,
    law: str,
    ultimate: float | Literal["free"] = "free",
    *,
    sizes: SizeDistribution | None = None,
    errors: ArrayLike | None = None,
    errors_are: Literal["absolute", "relative"] = "absolute",
    level: float = 0.95,
    reference_size: float | None = None,
) -> FitResult:
    """Return a law fitted to one curve of extraction against time.

    Parameters
    ----------
    time : array_like, shape (m,)
        In any one unit; times and rate constants of the result are in it.
    extraction : array_like, shape (m,)
        Fraction of all the metal; a little below 0 or above 1 is data. A point (0, 0) is left
        out: every law starts there.
    law : str
        A law name, as in ``fit_tests``.
    ultimate : "free" or float
        Ultimate extraction.
    sizes : SizeDistribution, optional
        Integrated over its classes; times then refer to the mass-mean size, or to
        ``reference_size`` [mm].
    errors : array_like, shape () or (m,), optional
        One standard deviation each. Without them all points weigh the same and intervals use
        Student's t on the scatter found.
    errors_are : "absolute" or "relative"
        Relative: a share of the extraction (at least 0.01).
    level : float

    Returns
    -------
    FitResult
        ``.sum_of_squares`` is that of the weighted residuals where errors are given. Not
        converged: ``.converged`` False, no intervals, the reason in ``.message``.

    Raises
    ------
    InputProblems
        For values that are not numbers, percent instead of fractions, fewer points than
        parameters, an unknown law.

    Examples
    --------
    >>> time = [1, 2, 4, 8, 16, 32]
    >>> fit = fit_curve(time, [0.21, 0.36, 0.53, 0.68, 0.74, 0.75], "first_order")
    >>> round(fit.parameter("ultimate").value, 2)
    0.74
    """
    t, E = _checked(time, extraction)
    sd = _standard_deviations(E, errors, errors_are)
    told = (t > 0) | (E != 0)  # nothing dissolved at time 0 is the start and no measurement
    t, E, sd = t[told], E[told], sd[told]
    size = reference_size or (sizes.mass_mean_mm if sizes is not None else 1.0)
    options = FitOptions(
        law=law,
        ultimate="one" if ultimate == "free" else ultimate,
        reference=Reference(size_mm=size),
        level=level,
        time_unit="",
        one_curve=True,
    )
    observed = observed_from_extraction(
        t, E, None if errors is None else sd, test="curve", sizes=sizes
    )
    return fit_with_options((observed,), options)


def straightened_time(time: ArrayLike, extraction: ArrayLike, law: str) -> float:
    """Return the full-conversion time by the straightened line through the origin.

    A diagnostic only: straightening bends the errors, so its answer differs from the fit.

    Parameters
    ----------
    time, extraction : array_like, shape (m,)
        Extraction below 1, its ultimate taken as 1.
    law : "film", "ash_layer", "chemical"

    Returns
    -------
    float
        1/slope of g(X) against time, least squares through the origin.
    """
    from leachkin.kinetics.particle_law import ParticleLaw

    t, E = _checked(time, extraction)
    names = ("film", "ash_layer", "chemical")
    if law not in names:
        raise argument_error("law", law, ", ".join(names))
    if (E > 1.0).any() or (E < 0.0).any():
        raise argument_error("extraction", "a value outside 0 to 1", "0 to 1 for a straight line")
    film, ash_layer, chemical = (float(law == name) for name in names)
    g = np.asarray(ParticleLaw(film, ash_layer, chemical).time(E))
    return float((t @ t) / (t @ g))


def _checked(time: ArrayLike, extraction: ArrayLike) -> tuple[Array, Array]:
    t = np.atleast_1d(np.asarray(time, dtype=np.float64))
    E = np.atleast_1d(np.asarray(extraction, dtype=np.float64))
    if t.ndim != 1 or t.shape != E.shape:
        raise argument_error(
            "extraction", f"shape {E.shape} for times of shape {t.shape}", "one value for each time"
        )
    for name, values in (("time", t), ("extraction", E)):
        bad = np.flatnonzero(~np.isfinite(values))
        if bad.size:
            raise argument_error(
                name, f"value {bad[0] + 1} is {values[bad[0]]}", "finite numbers", "leave it out"
            )
    if (t < 0).any() or not (t > 0).any():
        raise argument_error("time", f"from {t.min():g} to {t.max():g}", "0 and above, one above 0")
    if (np.diff(t) < 0).any():
        raise argument_error("time", "times that run backwards", "times in order")
    if E.max() > PERCENT_ABOVE:
        raise argument_error(
            "extraction",
            f"up to {E.max():g}",
            "a fraction (0 to 1, a little outside is data)",
            "divide by 100 if these are percent",
        )
    if E.min() < LEAST_EXTRACTION:
        raise argument_error("extraction", f"down to {E.min():g}", f"{LEAST_EXTRACTION} or more")
    return t, E


def _standard_deviations(extraction: Array, errors: ArrayLike | None, errors_are: str) -> Array:
    if errors is None:
        return np.ones_like(extraction)
    if errors_are not in ("absolute", "relative"):
        raise argument_error("errors_are", repr(errors_are), "'absolute' or 'relative'")
    given = np.asarray(errors, dtype=np.float64)
    if given.shape not in ((), extraction.shape):
        raise argument_error("errors", f"shape {given.shape}", "one number, or one a point")
    if not (np.isfinite(given).all() and (given > 0).all()):
        raise argument_error("errors", "one that is not above 0", "standard deviations above 0")
    sd = np.broadcast_to(given, extraction.shape).astype(np.float64)
    if errors_are == "relative":
        sd = sd * np.maximum(np.abs(extraction), LEAST_FOR_RELATIVE_ERROR)
    return np.asarray(sd)
