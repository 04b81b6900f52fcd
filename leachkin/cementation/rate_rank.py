"""Which law describes a cementation test, and which cannot be told apart."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from numpy.typing import ArrayLike

from leachkin.cementation.rate_fit import fit_cementation, fit_cementation_tests
from leachkin.cementation.rate_laws import CONTAINED, FORMS, rate_form
from leachkin.cementation.rate_result import CementationFit
from leachkin.cementation.rate_tests import CementationTest
from leachkin.errors import InputProblems
from leachkin.inference import akaike_weights, chi_square_upper_tail
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

DEFAULT_LAWS = tuple(FORMS)
#: A larger law is named only where chance gives its gain less often than this.
PART_CHANCE = 0.01
#: A law does not describe the data where the scatter is this many stated deviations and chance
#: does not explain it, or this share of the largest reading.
MISFIT_DEVIATIONS, MISFIT_CHANCE, MISFIT_SHARE = 2.0, 0.01, 0.1


@dataclass(frozen=True)
class RankedRate:
    """One law in a ranking; ``fit`` is None where it could not be fitted, ``note`` says why."""

    law: str
    fit: CementationFit | None
    aicc: float
    delta: float
    weight: float
    note: str = ""


@dataclass(frozen=True)
class CementationRanking:
    """Laws by AICc, best first.

    Attributes
    ----------
    rows : tuple of RankedRate
    verdict : str
    indistinguishable : tuple of str
        Laws within ``within`` of the best AICc, the one to use first; a larger law only where
        chance gives its gain over the smaller one less than once in 100.
    within : float
    """

    rows: tuple[RankedRate, ...]
    verdict: str
    indistinguishable: tuple[str, ...]
    within: float

    @property
    def best(self) -> CementationFit:
        """The fit to use: the first of ``indistinguishable``."""
        for row in self.rows:
            if row.law == self.indistinguishable[0] and row.fit is not None:
                return row.fit
        raise argument_error("laws", "none could be fitted", "a law the readings can hold")

    def table(self) -> ResultTable:
        """Return the ranking as a table."""
        columns = (
            Column("law", "Law"),
            Column("fitted", "Fitted"),
            Column("sum_of_squares", "Sum of squares"),
            Column("aicc", "AICc", digits=5),
            Column("delta", "Behind the best", digits=3),
            Column("weight", "Weight", digits=2),
            Column("note", "Note"),
        )
        records = [_record(row) for row in self.rows]
        return ResultTable.from_records("cementation_rate_ranking", columns, records, self.verdict)


def rank_cementation(
    time_h: ArrayLike,
    concentration: ArrayLike,
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    **same: Any,
) -> CementationRanking:
    """Return laws ranked on one curve; ``same`` as in :func:`fit_cementation`."""
    names = laws or DEFAULT_LAWS
    return _ranked(names, lambda law: fit_cementation(time_h, concentration, law, **same), within)


def rank_cementation_tests(
    tests: Sequence[CementationTest],
    laws: Sequence[str] | None = None,
    within: float = 2.0,
    **same: Any,
) -> CementationRanking:
    """Return laws ranked on all tests together; ``same`` as in :func:`fit_cementation_tests`."""
    names = laws or DEFAULT_LAWS
    return _ranked(names, lambda law: fit_cementation_tests(tests, law, **same), within)


def _ranked(laws: Sequence[str], fit: Any, within: float) -> CementationRanking:
    names = list(dict.fromkeys(rate_form(law).name for law in laws))
    tried = [_tried(fit, name) for name in names]
    if all(found is None for found, _ in tried):
        raise InputProblems([p for _, error in tried if error for p in error.problems])
    values = [
        found.aicc if found is not None and found.converged else math.inf for found, _ in tried
    ]
    # where no criterion can be had for lack of readings the smallest law stands alone
    if not any(math.isfinite(value) for value in values):
        values = [
            float(len(rate_form(name).shapes)) if found is not None and found.converged else value
            for name, (found, _), value in zip(names, tried, values, strict=True)
        ]
    least = min(values)
    weights = akaike_weights(values)
    rows = sorted(
        (
            RankedRate(
                name,
                found,
                math.inf if found is None else found.aicc,
                value - least if math.isfinite(value) else math.inf,
                float(weight),
                _note(found, error),
            )
            for name, (found, error), value, weight in zip(
                names, tried, values, weights, strict=True
            )
        ),
        key=lambda row: row.delta,
    )
    verdict, near = _verdict(tuple(rows), within)
    return CementationRanking(tuple(rows), verdict, near, within)


def _tried(fit: Any, law: str) -> tuple[CementationFit | None, InputProblems | None]:
    try:
        return fit(law), None
    except InputProblems as error:
        return None, error


def _note(found: CementationFit | None, error: InputProblems | None) -> str:
    if found is None:
        return str(error)
    if not found.converged:
        return f"not converged: {found.message}"
    if not math.isfinite(found.aicc):
        return "too few readings to judge so many quantities"
    return ""


def _verdict(rows: tuple[RankedRate, ...], within: float) -> tuple[str, tuple[str, ...]]:
    judged = [row for row in rows if math.isfinite(row.delta) and row.fit is not None]
    if not judged:
        return "No law could be fitted to these readings.", (rows[0].law,)
    first = _smallest(judged[0], judged)
    near = [
        row
        for row in judged
        if row.delta - first.delta <= within
        and (row is first or (first.law, row.law) not in CONTAINED or _gains(row, first))
    ]
    near.sort(key=lambda row: row is not first)
    names = tuple(row.law for row in near)
    why = _misfit(first)
    if why:
        return f"None of the laws describes these readings: {why}.", names
    if len(near) > 1:
        return f"These cannot be told apart: {', '.join(map(_words, names))}.", names
    text = f"{_words(first.law).capitalize()} describes the readings"
    if first is not judged[0]:
        text += (
            f"; {_words(judged[0].law)} gains no more than chance would "
            f"({_chance(judged[0], first):.2g})"
        )
    rest = [r for r in judged if r not in near and (first.law, r.law) not in CONTAINED]
    if rest:
        behind = rest[0].delta - first.delta
        text += f"; the next, {_words(rest[0].law)}, is {behind:.1f} behind in AICc"
    return f"{text}.", names


def _words(law: str) -> str:
    return FORMS[law].words


def _smallest(row: RankedRate, judged: Sequence[RankedRate]) -> RankedRate:
    """The law itself, or a smaller one in it to which the readings ask for nothing more."""
    enough = [
        other for other in judged if (other.law, row.law) in CONTAINED and not _gains(row, other)
    ]
    return _smallest(enough[0], judged) if enough else row


def _gains(larger: RankedRate, smaller: RankedRate) -> bool:
    return _chance(larger, smaller) <= PART_CHANCE


def _chance(larger: RankedRate, smaller: RankedRate) -> float:
    """How often chance alone would give the gain of a larger law: F test, or chi-square."""
    big, small = larger.fit, smaller.fit
    if big is None or small is None:
        return 1.0
    more = len(big.problem.names) - len(small.problem.names)
    gain = small.sum_of_squares - big.sum_of_squares
    freedom = big.degrees_of_freedom
    if more < 1 or gain <= 0.0 or freedom < 1:
        return 1.0
    if big.estimate.student_degrees is None:
        return float(chi_square_upper_tail(gain, more))
    from scipy.stats import f as f_distribution

    ratio = gain / more / max(big.sum_of_squares / freedom, 1e-300)
    return float(f_distribution.sf(ratio, more, freedom))


def _misfit(row: RankedRate) -> str:
    fit = row.fit
    if fit is None or fit.degrees_of_freedom < 1:
        return ""
    scatter = fit.residual_sd
    if fit.estimate.stated:
        chance = chi_square_upper_tail(fit.sum_of_squares, fit.degrees_of_freedom)
        if scatter > MISFIT_DEVIATIONS and chance < MISFIT_CHANCE:
            return f"the scatter about the best ({row.law}) is {scatter:.2g} times that stated"
        return ""
    largest = max(residual.measured for residual in fit.residuals)
    if scatter > MISFIT_SHARE * largest:
        return f"the scatter about the best ({row.law}) is {100 * scatter / largest:.0f} %"
    return ""


def _record(row: RankedRate) -> dict[str, Any]:
    def finite(value: float) -> float | None:
        return value if math.isfinite(value) else None

    return {
        "law": row.law,
        "fitted": None if row.fit is None else len(row.fit.problem.names),
        "sum_of_squares": None if row.fit is None else row.fit.sum_of_squares,
        "aicc": finite(row.aicc),
        "delta": finite(row.delta),
        "weight": row.weight,
        "note": row.note,
    }
