"""Fit the mixed potential to a barren of the site: only then may it stand behind a demand."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.course import MixedCourse, mixed_course
from leachkin.cementation.electrode import ElectrodeKinetics
from leachkin.cementation.liquor_state import liquor_state
from leachkin.cementation.mixed_potential import Transport, transport_of, usual_kinetics
from leachkin.cementation.solution import Precipitant, Solution
from leachkin.inference import Estimate, LeastSquaresProblem, least_squares
from leachkin.kinetics import Parameter
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

#: Precision of a site's readings where none is stated.
RELATIVE_ERROR = 0.05
#: Factors on hydrogen and on the transfer of ferric iron that a fit looks through.
HYDROGEN_RANGE = (1e-4, 1e5)
FERRIC_RANGE = (0.05, 20.0)
_STEP = 1e-4
_STEPS = 40


@dataclass(frozen=True)
class SiteBarren:
    """What a site measured at the end of its vessels; medians of some weeks.

    Attributes
    ----------
    metals_g_per_L : mapping of str to float
        One metal: it ends the way.
    ferric_g_per_L : float or None
        Ferric iron left.
    iron_gain_g_per_L : float or None
        Precipitant gained from the metal added: all iron out less all iron in.
    acid_taken_g_per_L : float or None
        Free acid in less out.
    relative_error : float
        One standard deviation of each.
    """

    metals_g_per_L: Mapping[str, float]
    ferric_g_per_L: float | None = None
    iron_gain_g_per_L: float | None = None
    acid_taken_g_per_L: float | None = None
    relative_error: float = RELATIVE_ERROR

    def __post_init__(self) -> None:
        for name in ("ferric_g_per_L", "iron_gain_g_per_L", "acid_taken_g_per_L"):
            value = getattr(self, name)
            if value is not None and not (np.isfinite(value) and value > 0.0):
                raise argument_error(name, f"{value:g} g/L", "above 0 g/L", "leave it out")
        if not 0.0 < self.relative_error < 1.0:
            raise argument_error("relative_error", f"{self.relative_error:g}", "0 to 1")


@dataclass(frozen=True)
class SiteFit:
    """A course fitted to a barren.

    Attributes
    ----------
    course : MixedCourse
        ``.fitted`` is True where hydrogen was fitted.
    parameters : tuple of Parameter
    estimate : Estimate or None
        None where nothing was measured that a fit could use.
    text : str
        What was fitted to what, and what it may be used for.
    """

    course: MixedCourse
    parameters: tuple[Parameter, ...]
    estimate: Estimate | None
    text: str

    def table(self) -> ResultTable:
        """Return the factors that the site's barren sets."""
        columns = (
            Column("name", "Factor on the figures of the table"),
            Column("value", "Value"),
            Column("low", "Low"),
            Column("high", "High"),
            Column("why_no_interval", "Remark"),
        )
        records = [vars(parameter) for parameter in self.parameters]
        return ResultTable.from_records("cementation_site_fit", columns, records, self.text)


def fit_to_barren(
    solution: Solution,
    precipitant: Precipitant,
    transport_m_per_s: Transport,
    barren: SiteBarren,
    kinetics: ElectrodeKinetics | None = None,
    level: float = 0.95,
) -> SiteFit:
    """Return the mixed potential fitted to what a site's barren shows.

    Parameters
    ----------
    solution : Solution
        The feed, single numbers.
    precipitant : Precipitant
    transport_m_per_s : array_like or mapping
        As in :func:`mixed_potential`.
    barren : SiteBarren
        Iron gained or acid taken sets how fast hydrogen is; ferric iron left sets its transfer.
    kinetics : ElectrodeKinetics, optional
    level : float

    Returns
    -------
    SiteFit
        With the metal alone nothing is fitted, and the text says so.

    Raises
    ------
    InputProblems
        If a number has no meaning, or as :func:`mixed_course`.
    """
    held = kinetics or usual_kinetics(solution, precipitant)
    state = liquor_state(solution, precipitant)
    speeds = transport_of(state, transport_m_per_s)
    task = _Task(solution, precipitant, speeds, barren, held)
    if not task.names:
        course = mixed_course(solution, precipitant, speeds, barren.metals_g_per_L, held)
        return SiteFit(course, (), None, f"Nothing but the metal was measured. {course.remark}")
    low, high = zip(*(task.ranges[name] for name in task.names), strict=True)
    problem = LeastSquaresProblem(
        task.names,
        np.zeros(len(task.names)),
        np.log(low),
        np.log(high),
        task.residuals_and_jacobian,
        tuple("log" for _ in task.names),
        stated=True,
    )
    estimate = least_squares(problem, max_evaluations=60)
    course = replace(task.course(estimate.vector), fitted=_hydrogen_was_fitted(task, estimate))
    parameters = tuple(_parameter(estimate, j, level) for j in range(len(task.names)))
    return SiteFit(course, parameters, estimate, _words(task, estimate, course))


class _Task:
    """Readings of a site, and what the profile along the vessel says of them."""

    def __init__(
        self,
        solution: Solution,
        precipitant: Precipitant,
        speeds: Mapping[str, Array],
        barren: SiteBarren,
        kinetics: ElectrodeKinetics,
    ) -> None:
        self.solution, self.precipitant = solution, precipitant
        self.speeds, self.barren, self.kinetics = speeds, barren, kinetics
        has_ferric = solution.ferric_g_per_L is not None and np.any(solution.ferric_g_per_L)
        self.readings = {
            name: value
            for name, value in (
                ("iron_gain", barren.iron_gain_g_per_L),
                ("acid_taken", barren.acid_taken_g_per_L),
                ("ferric", barren.ferric_g_per_L if has_ferric else None),
            )
            if value is not None
        }
        self.ranges = {"hydrogen": HYDROGEN_RANGE, "ferric transfer": FERRIC_RANGE}
        names = []
        if {"iron_gain", "acid_taken"} & set(self.readings):
            names.append("hydrogen")
        if "ferric" in self.readings:
            names.append("ferric transfer")
        self.names = tuple(names)

    def course(self, vectors: Array) -> MixedCourse:
        """The way with the factors of a vector, or of a batch of them, shape B + (p,)."""
        at = {name: np.exp(vectors[..., j]) for j, name in enumerate(self.names)}
        kinetics, speeds = self.kinetics, dict(self.speeds)
        if "hydrogen" in at:
            factor = np.asarray(kinetics.hydrogen_factor) * at["hydrogen"]
            kinetics = replace(kinetics, hydrogen_factor=factor)
        if "ferric transfer" in at:
            speeds["Fe3+"] = speeds["Fe3+"] * at["ferric transfer"]
        return mixed_course(
            self.solution,
            self.precipitant,
            speeds,
            self.barren.metals_g_per_L,
            kinetics,
            steps=_STEPS,
        )

    def residuals_and_jacobian(self, vector: Array) -> tuple[Array, Array]:
        """Residuals in standard deviations, and their slopes by one batch of small steps."""
        p = vector.size
        batch = np.concatenate([vector[None], vector + _STEP * np.eye(p)])
        expected = self._expected(self.course(batch))
        measured = np.array(list(self.readings.values()))
        residuals = (expected - measured) / (self.barren.relative_error * measured)
        return residuals[0], ((residuals[1:] - residuals[0]) / _STEP).T

    def _expected(self, course: MixedCourse) -> Array:
        made: dict[str, ArrayLike] = {
            "iron_gain": course.net_kg_per_m3,
            "acid_taken": course.acid_taken_g_per_L[..., -1],
            "ferric": course.ferric_g_per_L[..., -1],
        }
        columns = [np.asarray(made[name], dtype=np.float64) for name in self.readings]
        return np.stack(np.broadcast_arrays(*columns), axis=-1)


def _hydrogen_was_fitted(task: _Task, estimate: Estimate) -> bool:
    if "hydrogen" not in task.names or not estimate.converged:
        return False
    return estimate.states[task.names.index("hydrogen")] == "free"


def _parameter(estimate: Estimate, j: int, level: float) -> Parameter:
    found = estimate.interval(j, level)
    return Parameter(
        estimate.names[j],
        found.value,
        "times",
        found.standard_error,
        found.low,
        found.high,
        level,
        found.method,
        found.why_not,
    )


def _words(task: _Task, estimate: Estimate, course: MixedCourse) -> str:
    read = ", ".join(f"{name.replace('_', ' ')} {v:.3g} g/L" for name, v in task.readings.items())
    if not estimate.converged:
        return f"The fit to {read} did not end: {estimate.message}. {course.remark}"
    worst = float(np.abs(estimate.residuals).max())
    text = f"Fitted to {read}. {course.remark}"
    if worst > 3.0:
        text += (
            f" It misses one of them by {worst:.1f} standard deviations: something that is not in "
            "it takes part (corrosion at standstill, precipitation, air on the way)."
        )
    return text
