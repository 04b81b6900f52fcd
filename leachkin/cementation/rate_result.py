"""What a fit of cementation tests gives: constants with intervals, residuals, draws."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.cementation.rate_law import CementationLaw
from leachkin.cementation.rate_tests import CementationTest
from leachkin.errors import InputProblems
from leachkin.inference import Estimate, LeastSquaresProblem, draw_vectors
from leachkin.kinetics import Parameter
from leachkin.problems import unknown_name
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

#: Apparent activation energy of transport in water over 10 to 60 degC, by D^(2/3) nu^(-1/6) and
#: by Sh = 2 [kJ/mol].
TRANSPORT_ENERGIES = (15.05, 18.6)
#: Power of the stirring speed for a disc and for a cylinder.
TRANSPORT_POWERS = (0.5, 0.7)


@dataclass(frozen=True)
class RateResidual:
    """One reading beside what the fitted law expects.

    ``in_sd`` is (expected - measured) in standard deviations, or plain where none were stated; for
    a limit it is the root of minus twice the log likelihood.
    """

    test: str
    time_h: float
    measured: float
    expected: float
    sd: float | None
    bound: int
    in_sd: float


@dataclass(frozen=True)
class CementationFit:
    """A fitted law of cementation.

    Attributes
    ----------
    law : CementationLaw
    parameters : tuple of Parameter
    tests : tuple of CementationTest
    problem : LeastSquaresProblem
    estimate : Estimate
    law_of : callable
        Vector or batch of vectors to law.
    residuals : tuple of RateResidual
    aicc, bic : float
    n_points : int
    level : float
    """

    law: CementationLaw
    parameters: tuple[Parameter, ...]
    tests: tuple[CementationTest, ...]
    problem: LeastSquaresProblem
    estimate: Estimate
    law_of: Callable[[Array], CementationLaw]
    residuals: tuple[RateResidual, ...]
    aicc: float
    bic: float
    n_points: int
    level: float

    @property
    def law_name(self) -> str:
        """Name of the law."""
        return self.law.name

    @property
    def converged(self) -> bool:
        """Whether a minimum was reached."""
        return self.estimate.converged

    @property
    def message(self) -> str:
        """Why not, "" where it was."""
        return self.estimate.message

    @property
    def sum_of_squares(self) -> float:
        """Of the residuals."""
        return self.estimate.sum_of_squares

    @property
    def degrees_of_freedom(self) -> int:
        """Readings less fitted quantities."""
        return self.estimate.degrees_of_freedom

    @property
    def residual_sd(self) -> float:
        """Scatter of the residuals: in stated standard deviations, or in the unit of the data."""
        return float(np.sqrt(self.sum_of_squares / max(self.degrees_of_freedom, 1)))

    def parameter(self, name: str) -> Parameter:
        """Return a parameter by name.

        Raises
        ------
        InputProblems
            With the nearest names, if there is none such.
        """
        for parameter in self.parameters:
            if parameter.name == name:
                return parameter
        raise InputProblems([unknown_name("parameter", name, [p.name for p in self.parameters])])

    def draw(self, n: int, seed: int) -> CementationLaw:
        """Return the law with a batch of n draws of its constants together, shape (n,)."""
        freedom = self.estimate.student_degrees
        degrees = None if freedom is None else max(freedom, 1)
        estimate = self.estimate
        drawn = draw_vectors(estimate.vector, estimate.covariance, n, seed, degrees)
        return self.law_of(np.clip(drawn, self.problem.low, self.problem.high))

    @property
    def control(self) -> tuple[str, ...]:
        """What temperature and stirring say of the control, in sentences."""
        said = []
        names = {parameter.name: parameter for parameter in self.parameters}
        if "activation_energy" in names:
            said.append(_energy_words(names["activation_energy"]))
        else:
            said.append("one temperature: the control cannot be judged by an activation energy")
        if "stirring_power" in names:
            said.append(_stirring_words(names["stirring_power"]))
        else:
            said.append("one stirring speed: transfer through the film cannot be excluded")
        return tuple(said)

    def parameter_table(self) -> ResultTable:
        """Return the parameters with intervals, or the reason why there is none."""
        columns = (
            Column("parameter", "Parameter"),
            Column("value", "Value"),
            Column("unit", "Unit"),
            Column("standard_error", "Standard error", digits=2),
            Column("low", f"Low, {100 * self.level:g} %"),
            Column("high", f"High, {100 * self.level:g} %"),
            Column("method", "Interval"),
            Column("why_no_interval", "Remark"),
        )
        records = [{"parameter": p.name, **vars(p)} for p in self.parameters]
        caption = (
            f"{self.law_name}, at {self.law.reference_temperature_K - 273.15:.4g} degC"
            f"{_speed_words(self.law)}; {len(self.tests)} tests, {self.n_points} readings"
        )
        return ResultTable.from_records("cementation_rate", columns, records, caption)

    def residual_table(self) -> ResultTable:
        """Return every reading beside the fitted one."""
        columns = (
            Column("test", "Test"),
            Column("time_h", "Time", "h"),
            Column("measured", "Measured"),
            Column("expected", "Fitted"),
            Column("sd", "Standard deviation", digits=2),
            Column("bound", "Limit"),
            Column("in_sd", "Residual", digits=3),
        )
        return ResultTable.from_records(
            "cementation_rate_residuals", columns, [vars(r) for r in self.residuals]
        )


def rate_parameters(
    names: Sequence[str], intervals: Sequence[Any], by_area: bool, level: float
) -> tuple[Parameter, ...]:
    """Return the fitted quantities as parameters; the break as the share removed there."""
    units = {
        "k": "m/s" if by_area else "1/h",
        "activation_energy": "kJ/mol",
        "back": "of k",
        "fade": "of k",
    }
    return tuple(
        _break_parameter(found, level)
        if name == "break"
        else Parameter(
            name,
            found.value,
            units.get(name, ""),
            found.standard_error,
            found.low,
            found.high,
            level,
            found.method,
            found.why_not,
        )
        for name, found in zip(names, intervals, strict=True)
    )


def _break_parameter(found: Any, level: float) -> Parameter:
    """Share removed at the break: one less e to the minus of its clock reading."""

    def removed(theta: float | None) -> float | None:
        return None if theta is None else float(-np.expm1(-theta))

    error = None
    if found.standard_error is not None:
        error = found.standard_error * float(np.exp(-found.value))
    return Parameter(
        "removed_at_break",
        float(-np.expm1(-found.value)),
        "",
        error,
        removed(found.low),
        removed(found.high),
        level,
        found.method,
        found.why_not,
    )


def _speed_words(law: CementationLaw) -> str:
    return "" if law.reference_rpm is None else f" and {law.reference_rpm:.4g} rpm"


def _energy_words(energy: Parameter) -> str:
    low, high = TRANSPORT_ENERGIES
    text = f"activation energy {energy.value:.3g} kJ/mol"
    if energy.low is None or energy.high is None:
        return f"{text}, no interval: nothing follows from it"
    text += f" ({energy.low:.3g} to {energy.high:.3g})"
    if energy.low <= high and energy.high >= low:
        return f"{text}: as transport through liquid has it ({low:g} to {high:g})"
    if energy.low > high:
        return f"{text}: more than transport has ({low:g} to {high:g}); a surface step takes part"
    return f"{text}: less than transport has ({low:g} to {high:g}); look at area and depletion"


def _stirring_words(power: Parameter) -> str:
    low, high = TRANSPORT_POWERS
    text = f"stirring power {power.value:.2g}"
    if power.low is None or power.high is None:
        return f"{text}, no interval: nothing follows from it"
    text += f" ({power.low:.2g} to {power.high:.2g})"
    if power.low <= 0.0:
        return f"{text}: stirring shows no effect"
    if power.low <= high and power.high >= low:
        return f"{text}: as transfer to a moving surface has it ({low:g} to {high:g})"
    return (
        f"{text}: stirring speeds it, by another power than a disc or cylinder ({low:g}, {high:g})"
    )
