"""What a further test may be asked to tell: quantities of a law, or a prediction from it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.errors import InputProblems, LeachkinError
from leachkin.inference import Scale, to_natural
from leachkin.kinetics.fit_layout import Quantity
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.next_tests_information import Known
from leachkin.kinetics.next_tests_layout import STIRRING
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error, unknown_name

Array = NDArray[np.float64]
Prediction = Callable[[RateLaw], ArrayLike]

#: Words for groups of quantities, and their role in a fit.
GROUPS = {
    "activation energy": "activation_energy",
    "ultimate": "ultimate",
    "times": "time",
    "order": "order",
    "size exponent": "size_exponent",
    "stirring": "stirring",
}
DEFAULT_GROUPS = ("activation energy", "times", "ultimate")

#: Step of a central difference: this share of the standard deviation, within limits.
STEP_SHARE = 0.2
STEP_LIMITS = {"log": (1e-4, 0.1), "logit": (1e-4, 0.1), "linear": (1e-4, 2.0)}
#: Roles that no prediction depends on.
OF_THE_TESTS = ("head",)


@dataclass(frozen=True)
class Target:
    """A quantity that a test is to tell.

    Attributes
    ----------
    name, unit : str
    scale : "linear", "log", "logit"
        On which its interval is symmetric.
    centre : float
        On that scale.
    gradient : ndarray, shape (P,)
        By the quantities of the rows.
    widest : float
        Half-width on its scale that stands for "not known at all".
    """

    name: str
    unit: str
    scale: Scale
    centre: float
    gradient: Array
    widest: float

    @property
    def value(self) -> float:
        """On its natural scale."""
        return float(to_natural(self.scale, self.centre))

    def ends(self, half: float) -> tuple[float | None, float | None]:
        """Return the natural ends of an interval; None where it is not told."""
        if not np.isfinite(half) or half >= self.widest:
            return None, None
        low, high = to_natural(self.scale, self.centre + half * np.array([-1.0, 1.0]))
        return float(low), float(high)


def chosen_quantities(fit: FitResult, of: str | Sequence[str] | None) -> tuple[Quantity, ...]:
    """Return the quantities of a fit that words ask for, held ones too.

    Raises
    ------
    InputProblems
        For a word that is neither a group nor the name of a quantity, with the nearest.
    """
    words = DEFAULT_GROUPS if of is None else (of,) if isinstance(of, str) else tuple(of)
    there = [q for q in fit.layout.quantities if q.role != "head" and q.which not in fit.not_needed]
    found: list[Quantity] = []
    for word in words:
        role = GROUPS.get(word.replace("_", " "))
        if role is not None:
            found += [q for q in there if q.role == role and _worth(q, role, of is None)]
            continue
        named = [q for q in there if q.name == word]
        if not named:
            known = [*GROUPS, *(q.name for q in there)]
            raise InputProblems([unknown_name("quantity", word, known, column="of")])
        found += named
    return tuple(dict.fromkeys(found))


def _worth(quantity: Quantity, role: str, by_default: bool) -> bool:
    """An ultimate held at a number was given: no test is asked for it."""
    return quantity.free or (role not in ("ultimate", "time", "stirring") and not by_default)


def quantity_targets(known: Known, names: Sequence[str], stirring: bool) -> list[Target]:
    """Return the targets of quantities by name, in the order of the rows."""
    found = []
    for j, q in enumerate(known.columns):
        if not known.active[j] or not (q.name in names or (stirring and q.name == STIRRING)):
            continue
        gradient = np.zeros(len(known.columns))
        gradient[j] = 1.0
        centre = float(known.extended[j])
        found.append(Target(q.name, q.unit, q.scale, centre, gradient, 0.5 * (q.high - q.low)))
    return found


def prediction_targets(
    known: Known, prediction: Prediction, names: Sequence[str], unit: str
) -> tuple[list[Target], list[str]]:
    """Return the targets of a prediction, and the quantities that it takes no other value of.

    The derivative is by central differences of the laws of shifted vectors, all in one batch where
    the prediction takes a batch.
    """
    centre = np.asarray(prediction(known.law(known.extended)), dtype=np.float64)
    values = np.atleast_1d(centre)
    if values.ndim > 1 or not values.size or not np.isfinite(values).all():
        raise argument_error("prediction", f"shape {centre.shape}", "a number or a row of them")
    labels = list(names) or ["prediction"]
    if len(labels) == 1 and values.size > 1:
        labels = [f"{labels[0]} {i + 1}" for i in range(values.size)]
    if len(labels) != values.size:
        found = f"{len(labels)} names for {values.size} values"
        raise argument_error("prediction_names", found, "one for each")
    steps = _steps(known)
    moving = np.flatnonzero(steps)
    shifts = np.zeros((2 * moving.size, steps.size))
    shifts[np.arange(moving.size), moving] = steps[moving]
    shifts[moving.size + np.arange(moving.size), moving] = -steps[moving]
    moved, refused = _values(known, prediction, known.extended + shifts, values.size)
    slopes = (moved[: moving.size] - moved[moving.size :]) / (2.0 * steps[moving][:, None])
    gradient = np.zeros((values.size, steps.size))
    gradient[:, moving] = np.where(np.isfinite(slopes), slopes, 0.0).T
    targets = [
        Target(label, unit, "linear", float(v), g, max(1.0, abs(float(v))))
        for label, v, g in zip(labels, values, gradient, strict=True)
    ]
    return targets, sorted({known.columns[int(moving[i % moving.size])].name for i in refused})


def _steps(known: Known) -> Array:
    """Return the step of each quantity, 0 for those that no prediction depends on."""
    sd = known.root_variances(known.rows, np.eye(len(known.columns)))
    steps = np.zeros(sd.size)
    for j, q in enumerate(known.columns):
        if q.role not in OF_THE_TESTS and q.name != STIRRING and known.active[j]:
            low, high = STEP_LIMITS[q.scale]
            steps[j] = np.clip(STEP_SHARE * sd[j], low, high)
    return steps


def _values(
    known: Known, prediction: Prediction, vectors: Array, size: int
) -> tuple[Array, list[int]]:
    """Return the prediction of each vector, shape (n, size), and which it refused."""
    if not len(vectors):
        return np.zeros((0, size)), []
    try:
        whole = np.asarray(prediction(known.law(vectors)), dtype=np.float64)
        if whole.shape in ((len(vectors),), (len(vectors), size)):
            return whole.reshape(len(vectors), size), []
    except (LeachkinError, ValueError, TypeError, IndexError):
        pass  # the prediction takes one law at a time, or not every law
    moved = np.full((len(vectors), size), np.nan)
    refused = []
    for i, vector in enumerate(vectors):
        try:
            moved[i] = np.atleast_1d(np.asarray(prediction(known.law(vector)), dtype=np.float64))
        except LeachkinError:
            refused.append(i)
    return moved, refused
