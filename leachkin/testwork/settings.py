"""What testwork needs to be told: metals, reagent, precision, limits, exclusions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from leachkin.errors import UnitError
from leachkin.problems import argument_error
from leachkin.testwork.answers import Answers
from leachkin.testwork.records import Array, Exclusion
from leachkin.units import parse_quantity

PRECISION_KINDS = ("solution", "tail", "head", "residue")


@dataclass(frozen=True)
class BalanceLimits:
    """Where a balance earns a remark (common practice; the campaign may set its own).

    Attributes
    ----------
    closure : mapping of analyte to (low, high)
        Calculated head over assay head; "" is for every analyte not named.
    over_extraction : float
        Extraction on the assay head above which the likely causes are named.
    most_mass_loss : float
        Share of the charge that a residue which was not weighed may have lost.
    """

    closure: Mapping[str, tuple[float, float]] = field(
        default_factory=lambda: {"": (0.90, 1.10), "Au": (0.85, 1.15)}
    )
    over_extraction: float = 1.05
    most_mass_loss: float = 0.10

    def closure_of(self, analyte: str) -> tuple[float, float]:
        """Return the limits of closure for an analyte."""
        return self.closure.get(analyte) or self.closure.get("", (0.90, 1.10))


@dataclass(frozen=True)
class TestworkSettings:
    """What the sheets are read with.

    Attributes
    ----------
    metals : tuple of str
        The metals of the campaign; the first one weights sieve fractions.
    reagent : str or None
        Formula of the campaign's reagent, as in the headings.
    precision : mapping of str to (floor, proportional)
        For "solution" [g/L], "tail" [kg/t], "head" [kg/t] and "residue" [g]; the standard
        deviation is floor + proportional * value. A key such as "solution/Au" is for one analyte.
        The proportional part of "head" is also the scatter of one charge's head about the mean.
    exclusions : tuple of Exclusion
    limits : BalanceLimits
    answers : Answers
        What the user has answered about how the sheets are written.
    """

    __test__ = False  # not a test case for pytest

    metals: tuple[str, ...]
    reagent: str | None
    precision: Mapping[str, tuple[float, float]]
    exclusions: tuple[Exclusion, ...] = ()
    limits: BalanceLimits = field(default_factory=BalanceLimits)
    answers: Answers = field(default_factory=Answers)

    def __post_init__(self) -> None:
        for kind in PRECISION_KINDS:
            floor, proportional = self.precision_of(kind)
            if not (floor >= 0.0 and proportional >= 0.0 and 0.0 < floor + proportional < np.inf):
                found = f"{kind}: floor {floor}, proportional {proportional}"
                raise argument_error("precision", found, "one of them above 0, none below")

    def precision_of(self, kind: str, analyte: str = "") -> tuple[float, float]:
        """Return floor and proportional part for a kind of assay of an analyte.

        Raises
        ------
        InputProblems
            If the kind has no precision.
        """
        for key in (f"{kind}/{analyte}", kind):
            if key in self.precision:
                return self.precision[key]
        raise argument_error("precision", f"nothing for {kind!r}", ", ".join(PRECISION_KINDS))

    def sd(self, kind: str, value: Array | float, analyte: str = "") -> Array:
        """Return the standard deviation of assays of a kind."""
        floor, proportional = self.precision_of(kind, analyte)
        return np.asarray(floor + proportional * np.abs(value), dtype=np.float64)


def read_precision(text: str, unit: str) -> tuple[float, float]:
    """Return floor and proportional part of a precision written as text.

    Parameters
    ----------
    text : str
        ``"1.5 %"``, ``"0.002 g/L"`` or ``"1.5 % + 0.002 g/L"``, in either order.
    unit : str
        Unit of the floor in the result.

    Returns
    -------
    floor, proportional : float

    Raises
    ------
    UnitError
        If a part cannot be read, there are two of a kind, or one is negative.

    Examples
    --------
    >>> read_precision("1.5 % + 2 mg/L", "g/L")
    (0.002, 0.015)
    """
    floor = proportional = None
    for part in text.split("+"):
        if part.strip().endswith("%") and proportional is None:
            proportional = parse_quantity(part, "1")
        elif not part.strip().endswith("%") and floor is None:
            floor = parse_quantity(part, unit)
        else:
            raise _bad_precision(text, unit)
    if (floor or 0.0) < 0.0 or (proportional or 0.0) < 0.0:
        raise _bad_precision(text, unit)
    return floor or 0.0, proportional or 0.0


def _bad_precision(text: str, unit: str) -> UnitError:
    return UnitError(
        f"{text!r} is not a precision",
        "one percentage, one floor with a unit, or both with a plus between",
        f'write "1.5 %" or "1.5 % + 0.002 {unit}"',
    )
