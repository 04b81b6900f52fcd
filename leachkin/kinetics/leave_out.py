"""Prediction of each test by the others: a check of a law that owes nothing to a criterion."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.other_laws import canonical_law
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Tests below which leaving one out says little.
LEAST_TESTS = 3


@dataclass(frozen=True)
class LeftOut:
    """Prediction errors of one law, each test predicted by a fit of the others.

    Attributes
    ----------
    law : str
    error : float
        Root mean square of measured less predicted, in standard deviations of a reading and of a
        head together: 1 where prediction is as good as the assays. Of plain values where no
        precision was stated.
    by_test : tuple of (str, float)
        The same for each test, in their order.
    failed : tuple of str
        Tests that the others could not predict because their fit failed.
    """

    law: str
    error: float
    by_test: tuple[tuple[str, float], ...]
    failed: tuple[str, ...] = ()

    @property
    def worst(self) -> str:
        """The test that is predicted worst."""
        return max(self.by_test, key=lambda pair: pair[1])[0]


def predicted_rows(
    fit: FitResult, observed: Observed, balance: ReagentBalance | None = None
) -> Array:
    """Return the expected value of every row of a test, with its assay head and its own history.

    The test need not be among those that were fitted; its reagent may follow from a balance.
    """
    balances = {} if balance is None else {observed.test: balance}
    design = FitDesign.of(fit.layout, (observed,), balances)
    return observed.expected(design.extractions(fit.vector)[0])


def leave_one_out(observed: Sequence[Observed], law: str, **same: Any) -> LeftOut:
    """Return how well a law predicts each test from the others.

    Parameters
    ----------
    observed : sequence of Observed
        Three tests or more.
    law : str
    **same
        As in ``fit_tests``.

    Returns
    -------
    LeftOut

    Raises
    ------
    InputProblems
        For fewer than three tests, or where no test could be predicted.
    """
    if len(observed) < LEAST_TESTS:
        raise argument_error("observed", f"{len(observed)} tests", f"{LEAST_TESTS} or more")
    squares: list[Array] = []
    by_test: list[tuple[str, float]] = []
    failed: list[str] = []
    for i, left in enumerate(observed):
        others = [o for j, o in enumerate(observed) if j != i]
        found = _squares(others, left, law, same)
        if found is None:
            failed.append(left.test)
            continue
        squares.append(found)
        by_test.append((left.test, float(np.sqrt(found.mean()))))
    if not squares:
        raise argument_error("law", law, "a law that can be fitted without one of the tests")
    error = float(np.sqrt(np.concatenate(squares).mean()))
    return LeftOut(canonical_law(law), error, tuple(by_test), tuple(failed))


def _squares(
    others: list[Observed], left: Observed, law: str, same: dict[str, Any]
) -> Array | None:
    """Return the squared errors of a test left out; None where nothing can be compared."""
    try:
        fit = fit_tests(others, law, **same)
    except InputProblems:
        return None
    values = left.bound == 0
    if not fit.converged or not values.any():
        return None
    balance = same.get("balances", {}).get(left.test)
    expected = predicted_rows(fit, left, balance)[values]
    head = left.head_sd_kg_per_t / left.head_kg_per_t * (expected - left.brought[values])
    sd = np.hypot(left.sd[values], head)
    return np.asarray(((left.value[values] - expected) / sd) ** 2)


def left_out_table(found: Sequence[LeftOut]) -> ResultTable:
    """Return laws by their prediction error, best first."""
    columns = (
        Column("law", "Law"),
        Column("error", "Prediction error in standard deviations", digits=3),
        Column("worst", "Worst test"),
        Column("worst_error", "Error there", digits=3),
        Column("failed", "Not predicted"),
    )
    records = [
        {
            "law": one.law,
            "error": one.error,
            "worst": one.worst,
            "worst_error": dict(one.by_test)[one.worst],
            "failed": ", ".join(one.failed),
        }
        for one in sorted(found, key=lambda one: one.error)
    ]
    return ResultTable.from_records("left_out", columns, records)
