"""Which laws describe the data, which cannot be told apart, and what may be said of a mechanism."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from numpy.typing import ArrayLike

from leachkin.errors import InputProblems
from leachkin.inference import akaike_weights, chi_square_upper_tail
from leachkin.kinetics.fit_curve import fit_curve
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.nested import nested_test
from leachkin.kinetics.other_laws import MECHANISTIC, canonical_law, law_terms
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed

DEFAULT_LAWS = (*MECHANISTIC, "first_order", "two_rate")

#: A law does not describe the data when its scatter exceeds this many stated standard deviations
#: (and chance does not explain it), or, with none stated, this share of the largest extraction.
MISFIT_DEVIATIONS = 2.0
MISFIT_CHANCE = 0.01
MISFIT_SHARE = 0.05
#: Nor when another law is this much better in AICc with less than half the scatter.
MISFIT_BEHIND = 10.0
MISFIT_RATIO = 2.0

#: A further part is named only where chance gives its gain less often than this.
PART_CHANCE = 0.01

#: Empirical laws that become the smaller one for a value of their extra parameter.
CONTAINED = {("first_order", "two_rate"), ("first_order", "avrami")}

WORDS = {
    "film": "transfer through the liquid film",
    "ash_layer": "diffusion through the ash (product) layer",
    "chemical": "chemical reaction at the core",
    "shrinking_film": "transfer through the film of a shrinking grain",
}


@dataclass(frozen=True)
class RankedLaw:
    """One law in a ranking; ``fit`` is None where it could not be fitted, ``note`` says why."""

    law: str
    fit: FitResult | None
    aicc: float
    delta: float
    weight: float
    bic: float
    mechanistic: bool
    note: str = ""


@dataclass(frozen=True)
class Ranking:
    """Laws by AICc, best first.

    Attributes
    ----------
    rows : tuple of RankedLaw
    verdict : str
        What may be said, in words.
    indistinguishable : tuple of str
        Laws within ``within`` of the best AICc, best first, leaving out a larger law that
        contains the best one; and those that may be named.
    mechanisms : tuple of str
        Mechanistic laws that may be named: one, several that cannot be told apart, or none. A
        further part is named only where chance gives its gain less than once in 100.
    within : float
    """

    rows: tuple[RankedLaw, ...]
    verdict: str
    indistinguishable: tuple[str, ...]
    mechanisms: tuple[str, ...]
    within: float

    @property
    def best(self) -> FitResult:
        """The fit with the lowest AICc."""
        fit = self.rows[0].fit
        if fit is None:
            raise argument_error("laws", "none could be fitted", "a law the data can hold")
        return fit

    def fit_of(self, law: str) -> FitResult | None:
        """Return the fit of a law, None where it could not be fitted."""
        name = canonical_law(law)
        for row in self.rows:
            if row.law == name:
                return row.fit
        raise argument_error("law", repr(law), ", ".join(row.law for row in self.rows))

    def table(self) -> ResultTable:
        """Return the ranking as a table."""
        columns = (
            Column("law", "Law"),
            Column("mechanistic", "Mechanism"),
            Column("fitted", "Fitted"),
            Column("sum_of_squares", "Sum of squares"),
            Column("aicc", "AICc", digits=5),
            Column("delta", "Behind the best", digits=3),
            Column("weight", "Weight", digits=2),
            Column("bic", "BIC", digits=5),
            Column("note", "Note"),
        )
        return ResultTable.from_records("ranking", columns, map(_record, self.rows), self.verdict)


def _record(row: RankedLaw) -> dict[str, Any]:
    def finite(value: float) -> float | None:
        return value if math.isfinite(value) else None

    return {
        "law": row.law,
        "mechanistic": row.mechanistic,
        "fitted": None if row.fit is None else len(row.fit.names),
        "sum_of_squares": None if row.fit is None else row.fit.sum_of_squares,
        "aicc": finite(row.aicc),
        "delta": finite(row.delta),
        "weight": row.weight,
        "bic": finite(row.bic),
        "note": row.note,
    }


def rank_laws(
    time: ArrayLike,
    extraction: ArrayLike,
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    **same: Any,
) -> Ranking:
    """Return laws ranked on one curve.

    Parameters
    ----------
    time, extraction : array_like, shape (m,)
    laws : sequence of str, optional
        The mechanistic ones, ``first_order`` and ``two_rate`` where left out.
    within : float
        Laws this close in AICc cannot be told apart.
    **same
        As in ``fit_curve``.

    Returns
    -------
    Ranking
    """
    return rank_by(lambda law: fit_curve(time, extraction, law, **same), laws, within)


def rank_tests(
    observed: Sequence[Observed],
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    **same: Any,
) -> Ranking:
    """Return laws ranked on all tests together; ``same`` as in ``fit_tests``.

    A prior on a resistance that a law does not have is left out there.
    """
    return rank_by(lambda law: fit_tests(observed, law, **options_of_law(law, same)), laws, within)


def options_of_law(law: str, same: Mapping[str, Any]) -> dict[str, Any]:
    """Return the options of a fit with the priors that one law among several has.

    Examples
    --------
    >>> both = {"priors": {"activation_energy_film": (15.0, 5.0), "ultimate": (0.9, 0.01)}}
    >>> options_of_law("chemical", both)
    {'priors': {'ultimate': (0.9, 0.01)}}
    """
    kinds = set(law_terms(canonical_law(law)))
    absent = {"film", "ash_layer", "chemical"} - kinds

    def is_own(name: str) -> bool:
        slow = name.startswith("slow_")
        if not slow and name == "activation_energy":
            return "clock" in kinds
        return slow or not any(name.endswith(f"_{kind}") for kind in absent)

    priors = {n: value for n, value in dict(same.get("priors") or {}).items() if is_own(n)}
    rest = {name: value for name, value in same.items() if name != "priors"}
    return {**rest, "priors": priors} if priors else rest


def rank_by(fit: Callable[[str], FitResult], laws: Sequence[str] | None, within: float) -> Ranking:
    """Return laws ranked by any function that fits one of them."""
    names = list(dict.fromkeys(canonical_law(law) for law in laws or DEFAULT_LAWS))
    tried = [_tried(fit, name) for name in names]
    if all(found is None for found, _ in tried):
        raise InputProblems([p for _, error in tried if error for p in error.problems])
    rows = _rows(names, tried)
    best = rows[0]
    near = tuple(
        row.law
        for row in rows
        if row.delta <= within and (row is best or not contains(row.law, best.law))
    )
    verdict, mechanisms = _verdict(rows, within)
    near += tuple(law for law in mechanisms if law not in near)
    return Ranking(rows, verdict, near, mechanisms, within)


def contains(larger: str, smaller: str) -> bool:
    """Return whether a law becomes another one when a part of it vanishes.

    Examples
    --------
    >>> contains("series", "chemical"), contains("chemical", "chemical")
    (True, False)
    """
    if (smaller, larger) in CONTAINED:
        return True
    large, small = set(law_terms(larger)), set(law_terms(smaller))
    return "clock" not in large and small < large


def _tried(
    fit: Callable[[str], FitResult], law: str
) -> tuple[FitResult | None, InputProblems | None]:
    try:
        return fit(law), None
    except InputProblems as error:
        return None, error


def _rows(
    names: list[str], tried: list[tuple[FitResult | None, InputProblems | None]]
) -> tuple[RankedLaw, ...]:
    def criterion(found: FitResult | None) -> float:
        return found.aicc if found is not None and found.converged else math.inf

    values = [criterion(found) for found, _ in tried]
    best = min(values)
    weights = akaike_weights(values)
    rows = [
        RankedLaw(
            law=name,
            fit=found,
            aicc=value,
            delta=value - best if math.isfinite(value) else math.inf,
            weight=float(weight),
            bic=math.inf if found is None else found.bic,
            mechanistic=name in MECHANISTIC,
            note=_note(found, error),
        )
        for name, (found, error), value, weight in zip(names, tried, values, weights, strict=True)
    ]
    return tuple(sorted(rows, key=lambda row: (row.aicc, row.bic)))


def _note(found: FitResult | None, error: InputProblems | None) -> str:
    if found is None:
        return str(error)
    if not found.converged:
        return f"not converged: {found.message}"
    if not math.isfinite(found.aicc):
        return "too few points to judge so many parameters"
    if found.not_needed:
        return f"not needed: {', '.join(found.not_needed)}"
    return ""


def _verdict(rows: tuple[RankedLaw, ...], within: float) -> tuple[str, tuple[str, ...]]:
    judged = [row for row in rows if math.isfinite(row.aicc) and row.fit is not None]
    particle = [row for row in judged if row.mechanistic]
    if not particle:
        return "No mechanistic law could be judged on these data.", ()
    first = particle[0]
    why = _misfit(first, judged)
    if why:
        return f"None of the particle laws describes these data: {why}.", ()
    first = _smallest(first, particle)
    behind = [row for row in particle if row.aicc - first.aicc <= within]
    named = [
        row
        for row in behind
        if row is first or not (contains(row.law, first.law) and _chance(row, first) > PART_CHANCE)
    ]
    named.sort(key=lambda row: row is not first)
    mechanisms = tuple(row.law for row in named)
    if not judged[0].mechanistic and particle[0].delta > within:
        text = (
            f"The empirical law {judged[0].law} describes the data better than any mechanism "
            f"(by {particle[0].delta:.1f} in AICc): the mechanism is not settled. Nearest: "
            f"{_listed(mechanisms)}."
        )
        return text, ()
    if len(named) > 1:
        return f"These cannot be told apart: {_listed(mechanisms)}.", mechanisms
    rest = [r for r in particle if r not in behind and not contains(r.law, first.law)]
    more = (
        f" The next mechanism is {rest[0].delta - first.delta:.1f} behind in AICc." if rest else ""
    )
    if first is not particle[0]:
        chance = _chance(particle[0], first)
        more += (
            f" A further part ({particle[0].law}) gains no more than chance would ({chance:.2g})."
        )
    equal = [r.law for r in judged if not r.mechanistic and abs(r.aicc - first.aicc) <= within]
    if equal:
        more += f" Without any mechanism {' and '.join(equal)} does as well."
    return f"{in_words(first.law).capitalize()}: {first.law}.{more}", mechanisms


def _chance(larger: RankedLaw, smaller: RankedLaw) -> float:
    """Return how often chance alone would give the gain of the larger law."""
    if larger.fit is None or smaller.fit is None:
        return 1.0
    return nested_test(larger.fit, smaller.fit).chance


def _smallest(row: RankedLaw, particle: list[RankedLaw]) -> RankedLaw:
    """Return the law itself, or a smaller one in it to which the data ask for no further part."""
    enough = [
        other
        for other in particle
        if contains(row.law, other.law) and _chance(row, other) > PART_CHANCE
    ]
    return _smallest(enough[0], particle) if enough else row


def _misfit(row: RankedLaw, judged: list[RankedLaw]) -> str:
    """Return why a law does not describe the data, "" if it does; see MISFIT_* for the rule."""
    fit = row.fit
    if fit is None:
        return "it could not be fitted"
    scatter = fit.residual_sd
    if fit.estimate.stated:
        chance = chi_square_upper_tail(fit.sum_of_squares, max(fit.degrees_of_freedom, 1))
        if scatter > MISFIT_DEVIATIONS and chance < MISFIT_CHANCE:
            return f"the scatter about the best ({row.law}) is {scatter:.2g} times that stated"
        explained = chance >= MISFIT_CHANCE
    else:
        largest = max(abs(r.measured) for r in fit.residuals)
        if scatter > MISFIT_SHARE * largest:
            share = 100 * scatter / largest
            return f"the scatter about the best ({row.law}) is {share:.0f} % of the extraction"
        explained = False
    better = judged[0]
    if better.fit is None or explained or better is row:
        return ""
    if row.delta > MISFIT_BEHIND and scatter > MISFIT_RATIO * better.fit.residual_sd:
        return (
            f"the scatter about the best of them ({row.law}) is "
            f"{scatter / better.fit.residual_sd:.2g} times that about {better.law}"
        )
    return ""


def in_words(law: str) -> str:
    """Return a mechanistic law in words.

    Examples
    --------
    >>> in_words("chemical")
    'chemical reaction at the core'
    """
    terms = law_terms(law)
    if terms == ("clock",):
        return WORDS.get(law, law)
    words = [WORDS[term] for term in terms]
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]} in series"


def _listed(laws: tuple[str, ...]) -> str:
    return "; ".join(f"{in_words(law)} ({law})" for law in laws)
