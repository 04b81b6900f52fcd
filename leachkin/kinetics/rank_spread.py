"""Ranking of laws where only the 80 % size of each test is known: the spread is fitted as well."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from leachkin.errors import InputProblems
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_terms import SIZE_FAMILIES
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.rank import Ranking, rank_by
from leachkin.problems import argument_error
from leachkin.testwork import Observed, SizeDistribution


def rank_tests_by_p80(
    observed: Sequence[Observed],
    p80_mm: Sequence[float],
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    families: Sequence[str] = tuple(SIZE_FAMILIES),
    **same: Any,
) -> Ranking:
    """Return laws ranked on all tests, one spread of sizes in every test fitted with each law.

    A spread held at a wrong value looks like another mechanism, and so does a distribution of a
    wrong family: both are fitted with each law. The spread costs one quantity. Sieve if you can.

    Parameters
    ----------
    observed : sequence of Observed
        Their own sizes are not used.
    p80_mm : sequence of float
        Size that 80 % of the mass of each test passes [mm].
    laws, within, **same
        As in ``rank_tests``.
    families : sequence of str
        Log-normal, Gates-Gaudin-Schuhmann and Rosin-Rammler; the best of them stands for a law.

    Returns
    -------
    Ranking
        The warnings of each fit name the family and the spread found.
    """
    sizes = np.asarray(p80_mm, dtype=float)
    if sizes.shape != (len(observed),) or not (np.isfinite(sizes).all() and (sizes > 0).all()):
        raise argument_error("p80_mm", repr(list(p80_mm)), "one finite size above 0 for each test")
    if not families:
        raise argument_error("families", "none", ", ".join(SIZE_FAMILIES))
    tests = [
        replace(o, sizes=SizeDistribution.single(p80))
        for o, p80 in zip(observed, sizes.tolist(), strict=True)
    ]

    def fit(law: str) -> FitResult:
        return _best_family(tests, law, families, same)

    return rank_by(fit, laws, within)


def _best_family(
    tests: Sequence[Observed], law: str, families: Sequence[str], same: dict[str, Any]
) -> FitResult:
    """Return the fit of the family of sizes that describes the tests best."""
    found: list[tuple[str, FitResult]] = []
    errors: list[InputProblems] = []
    for family in families:
        try:
            fit = fit_tests(tests, law, spread="free", size_family=family, **same)
        except InputProblems as error:
            errors.append(error)
            continue
        found.append((family, fit))
    if not found:
        raise errors[0]
    family, best = min(found, key=lambda pair: (not pair[1].converged, pair[1].sum_of_squares))
    name = SIZE_FAMILIES[family][0]
    value = best.parameter(name).value
    said = f"sizes within a test, fitted: {family.replace('_', ' ')}, {name} {value:.2g}"
    return replace(best, warnings=(*best.warnings, said))
