"""Which further tests would tell most: expected intervals, by candidate and as a set.

A candidate is judged before it is run: what it would read follows from the present law, how well
from the precision of the present tests, and what that tells of a quantity from the derivatives
[fedorov1972]. Its own head is one more thing not known.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.inference import normal_multiplier, student_multiplier
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.next_tests_candidate import Candidate
from leachkin.kinetics.next_tests_information import Known, known_of, reduced
from leachkin.kinetics.next_tests_result import CandidateGain, NextTests, Outlook, Step
from leachkin.kinetics.next_tests_separation import separation_of
from leachkin.kinetics.next_tests_targets import (
    Prediction,
    Target,
    chosen_quantities,
    prediction_targets,
    quantity_targets,
)
from leachkin.kinetics.next_tests_words import remarks_of
from leachkin.problems import argument_error, unknown_name
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Multiples of a candidate's bottles that are looked at.
MULTIPLES = (2, 4)
Assumed = Mapping[str, tuple[float, float | None]]


def next_tests(
    observed: Sequence[Observed],
    fit: FitResult,
    candidates: Sequence[Candidate],
    *,
    of: str | Sequence[str] | None = None,
    prediction: Prediction | None = None,
    prediction_names: Sequence[str] = (),
    prediction_unit: str = "",
    rivals: Sequence[FitResult] = (),
    assumed: Assumed | None = None,
    ultimate: Literal["by size", "one"] = "by size",
    count: int = 0,
    level: float | None = None,
    seed: int = 1,
) -> NextTests:
    """Return what candidate tests would tell, best first.

    Parameters
    ----------
    observed : sequence of Observed
        The present tests.
    fit : FitResult
        Their fit by ``fit_tests``.
    candidates : sequence of Candidate
    of : str or sequence of str, optional
        "activation energy", "ultimate", "times", "order", "size exponent", "stirring", or names of
        parameters. Activation energies, times and ultimates where neither this nor a prediction is
        given.
    prediction : callable, optional
        From a rate law to a number, or a row of them; called with a law of batch shape (n,) if it
        takes one, and gives (n,) or (n, k) then.
    prediction_names : sequence of str
    prediction_unit : str
    rivals : sequence of FitResult
        Fits of the same tests by other laws that cannot be told apart from this one.
    assumed : mapping of name to (value, standard deviation or None), optional
        What is thought of quantities that the tests do not tell: a prior where a deviation is
        given, else the value at which a candidate is judged.
    ultimate : "by size" or "one"
        As in the fit; it matters where the tests are all of one size and a candidate is not.
    count : int
        Size of a set to choose, one test after the other; a candidate may come twice.
    level : float, optional
        That of the fit where left out.
    seed : int
        Of the draws behind the separation of laws.

    Returns
    -------
    NextTests
        Ranked by the mean logarithm of the ratios of the widths, over cost where every candidate
        has one; by the chance to leave one law where only rivals are given.

    Raises
    ------
    InputProblems
        For no candidates, two of one name, an unknown name, or a fit that did not converge.

    Notes
    -----
    Linearised at the estimate: a first test at a second temperature, or one that would move the
    estimate far, is judged at the present or the assumed values.
    """
    _check(observed, fit, candidates, count)
    ask = _Question(
        tuple(observed),
        tuple(candidates),
        dict(assumed or {}),
        ultimate,
        level or fit.level,
        count,
        seed,
    )
    only_rivals = bool(rivals) and of is None and prediction is None
    chosen = chosen_quantities(fit, () if (of is None and prediction) or only_rivals else of)
    stirring = of is not None and "stirring" in ([of] if isinstance(of, str) else list(of))
    held = [q.name for q in chosen if not q.free and q.role != "activation_energy"]
    known = known_of(fit, observed, candidates, held, ask.assumed, ultimate, stirring)
    _check_assumed(known, rivals, ask.assumed)
    targets = quantity_targets(known, [q.name for q in chosen], stirring)
    left_out: list[str] = []
    if prediction is not None:
        more, left_out = prediction_targets(known, prediction, prediction_names, prediction_unit)
        targets += more
    if not targets and not rivals:
        raise argument_error("of", "quantities that this fit holds", "a quantity that is fitted")
    return _answer(ask, known, targets, rivals, left_out)


@dataclass(frozen=True)
class _Question:
    """What was asked, beside the fit."""

    tests: tuple[Observed, ...]
    candidates: tuple[Candidate, ...]
    assumed: dict[str, tuple[float, float | None]]
    ultimate: Literal["by size", "one"]
    level: float
    count: int
    seed: int


def _check(
    observed: Sequence[Observed], fit: FitResult, candidates: Sequence[Candidate], count: int
) -> None:
    if not candidates:
        raise argument_error("candidates", "no candidates", "one or more")
    names = [c.name for c in candidates]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise argument_error("candidates", f"two named {twice[0]}", "a name of its own for each")
    fitted = {r.test for r in fit.residuals}
    given = {o.test for o in observed if o.value.size}
    if given != fitted:
        odd = ", ".join(sorted(given ^ fitted))
        raise argument_error("observed", f"not the tests of the fit: {odd}", "the tests of the fit")
    if isinstance(count, bool) or count < 0:
        raise argument_error("count", f"{count}", "0 or more tests")


def _check_assumed(known: Known, rivals: Sequence[FitResult], assumed: Assumed) -> None:
    every = [*known.columns, *(q for f in (known.fit, *rivals) for q in f.layout.quantities)]
    names = list(dict.fromkeys(q.name for q in every if q.role != "head"))
    unknown = [name for name in assumed if name not in names]
    if unknown:
        raise InputProblems(
            [unknown_name("quantity", name, names, column="assumed") for name in unknown]
        )


def _answer(
    ask: _Question,
    known: Known,
    targets: Sequence[Target],
    rivals: Sequence[FitResult],
    left_out: Sequence[str],
) -> NextTests:
    judge = _Judge(known, tuple(targets), ask.level)
    shared = {c.name: known.rows_of(c).shared for c in ask.candidates}
    rows = [_gain(judge, c, shared[c.name]) for c in ask.candidates]
    laws: list[Known] = []
    if rivals:
        laws = [known, *(_rival(fit, ask) for fit in rivals)]
        rows = [
            replace(row, separation=separation_of(row.candidate, laws, ask.seed)) for row in rows
        ]
    priced = all(c.cost is not None for c in ask.candidates)
    rows = [_priced(row, priced, bool(targets)) for row in rows]
    ranked = tuple(sorted(rows, key=lambda row: _order(row, bool(targets))))
    found = NextTests(
        law=known.fit.law_name,
        level=ask.level,
        present=judge.present,
        rows=ranked,
        steps=_steps(judge, ask, shared, priced) if ask.count and targets else (),
        laws=tuple(one.fit.law_name for one in laws),
        left_out=tuple(left_out),
    )
    return replace(found, remarks=remarks_of(found, known))


def _rival(fit: FitResult, ask: _Question) -> Known:
    """Return what the tests tell of a rival law."""
    return known_of(fit, ask.tests, ask.candidates, (), ask.assumed, ask.ultimate, False)


@dataclass(frozen=True)
class _Judge:
    """Expected intervals of some targets."""

    known: Known
    targets: tuple[Target, ...]
    level: float

    @property
    def gradients(self) -> Array:
        """Derivatives of the targets, shape (k, P)."""
        columns = len(self.known.columns)
        return np.array([t.gradient for t in self.targets]).reshape(len(self.targets), columns)

    def halves(self, rows: Array, added: int) -> Array:
        """Return the half-widths of the targets told by rows, on their scales, shape (k,)."""
        sd = self.known.root_variances(rows, self.gradients)
        return np.asarray(sd * self._multiplier(added))

    def _multiplier(self, added: int) -> float:
        estimate = self.known.fit.estimate
        if estimate.student_degrees is None:
            return normal_multiplier(self.level)
        return student_multiplier(self.level, max(estimate.degrees_of_freedom + added, 1))

    @property
    def now(self) -> Array:
        """The half-widths at present."""
        return self.halves(self.known.rows, 0)

    @property
    def present(self) -> tuple[Outlook, ...]:
        """The targets at present."""
        return self.outlooks(self.now)

    def with_more(self, rows: Array, more: Array, added: int) -> Array:
        """Return the half-widths with further rows."""
        return self.halves(np.vstack([rows, more]), added)

    def outlooks(self, halves: Array) -> tuple[Outlook, ...]:
        """Return the outlooks of half-widths, beside the present ones."""
        found = []
        for target, half, now in zip(self.targets, halves, self.now, strict=True):
            low, high = target.ends(float(half))
            before, after = min(now, target.widest), min(half, target.widest)
            opened = low is not None and target.ends(float(now))[0] is None
            shrink = 1.0 if opened else max(0.0, 1.0 - float(after / before)) if before else 0.0
            untold = self._untold(target) if low is None else ()
            found.append(
                Outlook(target.name, target.unit, target.value, low, high, shrink, opened, untold)
            )
        return tuple(found)

    def _untold(self, target: Target) -> tuple[str, ...]:
        """Return the quantities of a target that the present tests do not tell."""
        known = self.known
        sd = known.root_variances(known.rows, np.eye(len(known.columns)))
        return tuple(
            q.name
            for q, own, slope in zip(known.columns, sd, target.gradient, strict=True)
            if not np.isfinite(own) and slope != 0.0
        )

    def information(self, halves: Array, before: Array) -> float:
        """Return the mean logarithm of the ratios of the widths, 0 or more."""
        if not self.targets:
            return 0.0
        widest = np.array([t.widest for t in self.targets])
        after, now = np.minimum(halves, widest), np.minimum(before, widest)
        ratio = np.where(after > 0.0, now / np.where(after > 0.0, after, 1.0), 1.0)
        return float(np.mean(np.log(np.maximum(ratio, 1.0))))


def _shrink(outlooks: Sequence[Outlook]) -> float:
    return float(np.mean([o.shrink for o in outlooks])) if outlooks else 0.0


def _gain(judge: _Judge, candidate: Candidate, shared: Array) -> CandidateGain:
    rows = judge.known.rows
    readings = len(shared)

    def halves(bottles: int) -> Array:
        return judge.with_more(rows, np.sqrt(bottles) * shared, bottles * readings)

    own = halves(candidate.repeats)
    outlooks = judge.outlooks(own)
    more = {k: _shrink(judge.outlooks(halves(k * candidate.repeats))) for k in MULTIPLES}
    information = judge.information(own, judge.now)
    return CandidateGain(candidate, outlooks, _shrink(outlooks), information, more)


def _priced(row: CandidateGain, priced: bool, with_targets: bool) -> CandidateGain:
    cost = row.candidate.total_cost
    if not priced or cost is None:
        return row
    chance = 0.0 if row.separation is None else row.separation.chance
    return replace(row, per_cost=(row.information if with_targets else chance) / cost)


def _order(row: CandidateGain, with_targets: bool) -> tuple[float, float, str]:
    chance = 0.0 if row.separation is None else row.separation.chance
    measure = row.information if with_targets else chance
    first = measure if row.per_cost is None else row.per_cost
    return -round(first, 12), -round(chance, 12), row.name


def _steps(
    judge: _Judge, ask: _Question, shared: Mapping[str, Array], priced: bool
) -> tuple[Step, ...]:
    """Return a set of tests: each adds most, over its cost, to those before it."""
    rows, added, spent = judge.known.rows, 0, 0.0
    found: list[Step] = []
    for _ in range(ask.count):
        before = judge.halves(rows, added)
        offers = []
        for candidate in ask.candidates:
            more = np.sqrt(candidate.repeats) * shared[candidate.name]
            halves = judge.with_more(rows, more, added + len(more) * candidate.repeats)
            gain = judge.information(halves, before)
            offers.append((-gain / ((candidate.total_cost or 1.0) if priced else 1.0), candidate))
        best = min(offers, key=lambda offer: (round(offer[0], 12), offer[1].name))[1]
        more = np.sqrt(best.repeats) * shared[best.name]
        rows = reduced(np.vstack([rows, more]))
        added += len(more) * best.repeats
        spent += best.total_cost or 0.0
        outlooks = judge.outlooks(judge.halves(rows, added))
        cost = spent if priced else None
        found.append(Step(best.name, best.repeats, outlooks, _shrink(outlooks), cost))
    return tuple(found)


__all__ = ["Candidate", "NextTests", "next_tests"]
