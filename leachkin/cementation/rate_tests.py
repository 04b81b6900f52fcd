"""Concentration against time over a precipitant: one test, checked at the door."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.problems import argument_error

Array = NDArray[np.float64]


@dataclass(frozen=True)
class CementationTest:
    """One test of a metal on a precipitant.

    Attributes
    ----------
    time_h : ndarray, shape (m,)
        From 0 on, rising; a reading at 0 is a measured start.
    concentration : ndarray, shape (m,)
        In any one unit, not negative.
    name : str
    start : float or None
        Concentration at time 0 where it is known without error; None where it is fitted.
    bound : ndarray of int, shape (m,)
        -1 where the value is a limit that the reading lies below, else 0.
    sd : ndarray, shape (m,), or None
        One standard deviation each; None where no precision is stated.
    temperature_K : float
    stirring_rpm : float or None
    area_m2_per_m3 : float or None
        Surface of the precipitant over the volume of liquor.
    metal, unit : str
    """

    time_h: Array
    concentration: Array
    name: str = "test"
    start: float | None = None
    bound: Array | None = None
    sd: Array | None = None
    temperature_K: float = STANDARD_TEMPERATURE_K
    stirring_rpm: float | None = None
    area_m2_per_m3: float | None = None
    metal: str = ""
    unit: str = ""

    def __post_init__(self) -> None:
        time = _numbers("time_h", self.time_h)
        left = _numbers("concentration", self.concentration)
        object.__setattr__(self, "time_h", time)
        object.__setattr__(self, "concentration", left)
        if time.ndim != 1 or time.shape != left.shape or time.size == 0:
            raise argument_error(
                "concentration",
                f"shape {left.shape} for times of shape {time.shape}",
                "one value for each time",
            )
        if (time < 0.0).any() or (np.diff(time) <= 0.0).any():
            raise argument_error(
                "time_h", f"{self.name}: times that do not rise", "0 h and later, in order"
            )
        if (left < 0.0).any():
            raise argument_error(
                "concentration",
                f"{self.name}: {left.min():g}",
                "0 or more",
                "is it a code for below limit? then give it as a limit",
            )
        bound = np.zeros(time.shape) if self.bound is None else np.asarray(self.bound)
        object.__setattr__(self, "bound", bound.astype(np.float64))
        if self.sd is not None:
            sd = np.broadcast_to(np.asarray(self.sd, dtype=np.float64), time.shape)
            _above("sd", sd)
            object.__setattr__(self, "sd", sd.copy())
        elif (bound != 0).any():
            raise argument_error(
                "bound", f"{self.name}: a reading below a limit and no precision", "errors too"
            )
        self._check_conditions()

    def _check_conditions(self) -> None:
        check_temperature(self.temperature_K)
        for name in ("start", "stirring_rpm", "area_m2_per_m3"):
            value = getattr(self, name)
            if value is not None:
                _above(name, value)
        if self.start is None and not self.starts_measured and self.time_h.size < 2:
            raise argument_error(
                "start",
                f"{self.name}: one reading and no start",
                "a start, or a reading at 0 h",
                "start=1.0 where the reading is the share left",
            )

    @property
    def starts_measured(self) -> bool:
        """True where there is a reading at time 0."""
        return bool(self.time_h[0] == 0.0)

    @property
    def start_guess(self) -> float:
        """Something near the concentration at time 0."""
        if self.start is not None:
            return self.start
        return float(max(self.concentration.max(), 1e-12))


def cementation_test(
    time_h: ArrayLike,
    concentration: ArrayLike,
    *,
    errors: ArrayLike | None = None,
    errors_are: str = "absolute",
    **given: object,
) -> CementationTest:
    """Return a test, its errors as standard deviations.

    Parameters
    ----------
    time_h, concentration : array_like, shape (m,)
    errors : array_like, shape () or (m,), optional
        One standard deviation each.
    errors_are : "absolute" or "relative"
        Relative: a share of the reading (at least a thousandth of the largest one).
    **given
        As the fields of :class:`CementationTest`.

    Returns
    -------
    CementationTest

    Raises
    ------
    InputProblems
        If a value has no meaning.
    """
    left = np.atleast_1d(np.asarray(concentration, dtype=np.float64))
    sd = None
    if errors is not None:
        if errors_are not in ("absolute", "relative"):
            raise argument_error("errors_are", repr(errors_are), "'absolute' or 'relative'")
        sd = np.broadcast_to(np.asarray(errors, dtype=np.float64), left.shape).copy()
        if errors_are == "relative":
            sd = sd * np.maximum(np.abs(left), 1e-3 * np.abs(left).max(initial=0.0))
    time = np.atleast_1d(np.asarray(time_h, dtype=np.float64))
    return CementationTest(time, left, sd=sd, **given)  # type: ignore[arg-type]


def check_tests(tests: Sequence[CementationTest]) -> tuple[CementationTest, ...]:
    """Return tests that may be fitted together.

    Raises
    ------
    InputProblems
        If there are none, two have one name, or area or precision is known for some only.
    """
    listed = tuple(tests)
    if not listed:
        raise argument_error("tests", "no test", "one or more")
    names = [test.name for test in listed]
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise argument_error("tests", f"two tests named {twice!r}", "a name for each")
    for field, words in (("area_m2_per_m3", "area"), ("sd", "precision")):
        known = [getattr(test, field) is not None for test in listed]
        if any(known) and not all(known):
            lacking = names[known.index(False)]
            raise argument_error(
                field, f"{words} of some tests only", f"for all or for none: {lacking} has none"
            )
    return listed


def _numbers(name: str, values: ArrayLike) -> Array:
    array = np.atleast_1d(np.asarray(values, dtype=np.float64))
    if not np.isfinite(array).all():
        raise argument_error(name, "a value that is not a finite number", "finite numbers")
    return array


def _above(name: str, values: ArrayLike) -> None:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(name, f"{array.min():g}", "above 0", "leave it out if it is not known")
