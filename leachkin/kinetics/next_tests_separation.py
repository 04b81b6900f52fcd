"""Whether a further test would tell apart laws that the present tests do not.

One law is taken as true and what a candidate would read is drawn from it, its own uncertainty and
the assay errors included. Each other law is fitted again, linearised, to the present and the new
values together, and judged by the rule of the ranking. The mean squared standardised difference
that is left is the measure of [box1967, atkinson1975].
"""

from __future__ import annotations

import zlib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import akaike_weights, corrected_aic
from leachkin.kinetics.next_tests_candidate import Candidate
from leachkin.kinetics.next_tests_information import SINGULAR_FLOOR, Known
from leachkin.kinetics.next_tests_result import Separation
from leachkin.kinetics.rank import PART_CHANCE, contains

Array = NDArray[np.float64]

#: Laws this far behind in AICc are rejected, as in the ranking.
REJECTED_BEHIND = 2.0
#: Outcomes of a candidate that are drawn for each law taken as true.
OUTCOMES = 2000


@dataclass(frozen=True)
class _Readings:
    """What a candidate would read under one law, all its bottles, shape (n,) or (n, q)."""

    expected: Array
    sd: Array
    slopes: Array
    heads: Array
    head_relative: float


def separation_of(
    candidate: Candidate, laws: Sequence[Known], seed: int, within: float = REJECTED_BEHIND
) -> Separation:
    """Return whether a candidate would leave the true one of some laws alone.

    Parameters
    ----------
    candidate : Candidate
    laws : sequence of Known
        Of the same tests, one for each law.
    seed : int
        The draws depend on it and on the candidate's name only.
    within : float
        A law further behind the true one in AICc is rejected.

    Returns
    -------
    Separation
    """
    read = [_readings(known, candidate) for known in laws]
    weights = akaike_weights([known.fit.aicc for known in laws])
    generator = np.random.default_rng([seed, zlib.crc32(candidate.name.encode())])
    n = read[0].expected.size
    normal = generator.standard_normal((OUTCOMES, 2 * n))
    by_truth: dict[str, float] = {}
    leads = []
    for i, known in enumerate(laws):
        left, lead = _left_alone(i, laws, read, normal, within)
        by_truth[known.fit.law_name] = left
        leads.append(lead)
    chance = float(weights @ np.array(list(by_truth.values())))
    return Separation(chance, float(weights @ np.array(leads)), by_truth)


def _readings(known: Known, candidate: Candidate) -> _Readings:
    one, r = known.rows_of(candidate), candidate.repeats
    n = one.expected.size
    heads = np.zeros((r * n, r if one.head is not None else 0))
    if one.head is not None:
        for bottle in range(r):
            heads[bottle * n : (bottle + 1) * n, bottle] = one.head
    return _Readings(
        np.tile(one.expected, r),
        np.tile(one.sd, r),
        np.tile(one.slopes, (r, 1)),
        heads,
        one.head_relative,
    )


def _left_alone(
    truth: int,
    laws: Sequence[Known],
    read: Sequence[_Readings],
    normal: Array,
    within: float,
) -> tuple[float, float]:
    """Return how often every other law is rejected if one is true, and its expected lead."""
    known, own = laws[truth], read[truth]
    errors = _errors(known, own, normal)
    squares = {}
    for i, (other, its) in enumerate(zip(laws, read, strict=True)):
        apart = (its.expected - own.expected) / own.sd
        left = _unexplained(other, its, own.sd)
        moved = apart + errors
        squares[i] = other.fit.sum_of_squares + np.sum((moved @ left) * moved, axis=1)
    alone = np.ones(len(errors), dtype=bool)
    nearest = np.full(len(errors), np.inf)
    for i, other in enumerate(laws):
        if i == truth:
            continue
        lead = _lead(known, other, squares[truth], squares[i], own)
        alone &= _rejected(known, other, squares[truth], squares[i], own, lead > within)
        nearest = np.minimum(nearest, lead)
    return float(alone.mean()), float(nearest.mean())


def _errors(known: Known, own: _Readings, normal: Array) -> Array:
    """Return draws of what is read less what the true law expects, over standard deviations."""
    n = own.expected.size
    slopes = own.slopes[:, known.active]
    covariance = slopes @ _told_covariance(known.rows[:, known.active]) @ slopes.T
    covariance += own.heads @ own.heads.T * own.head_relative**2
    values, vectors = np.linalg.eigh(covariance)
    root = vectors * np.sqrt(np.clip(values, 0.0, None))
    return np.asarray(known.sd * (normal[:, :n] + normal[:, n:] @ root.T))


def _told_covariance(rows: Array) -> Array:
    """Return the covariance of what rows tell; nothing of what they do not."""
    norms = np.linalg.norm(rows, axis=0)
    scale = np.where(norms > 0.0, norms, 1.0)
    _, singular, axes = np.linalg.svd(rows / scale, full_matrices=False)
    told = singular > SINGULAR_FLOOR * singular.max(initial=0.0)
    kept = axes[told] / singular[told, None] / scale
    return np.asarray(kept.T @ kept)


def _unexplained(known: Known, its: _Readings, sd: Array) -> Array:
    """Return the matrix of the squares that a law cannot fit away, present rows kept in sight."""
    slopes = its.slopes[:, known.active] * (its.sd / sd)[:, None]
    heads = its.heads * (its.sd / sd)[:, None]
    new = np.hstack([slopes, heads])
    present = known.rows[:, known.active]
    h = heads.shape[1]
    before = np.zeros((present.shape[0] + h, new.shape[1]))
    before[: present.shape[0], : present.shape[1]] = present
    if h:
        before[present.shape[0] :, present.shape[1] :] = np.eye(h) / its.head_relative
    both = np.vstack([before, new])
    norms = np.linalg.norm(both, axis=0)
    basis, singular, _ = np.linalg.svd(both / np.where(norms > 0, norms, 1.0), full_matrices=False)
    basis = basis[:, singular > SINGULAR_FLOOR * singular.max(initial=0.0)]
    fitted = basis[before.shape[0] :]
    return np.asarray(np.eye(new.shape[0]) - fitted @ fitted.T)


def _counts(known: Known, own: _Readings) -> tuple[int, float]:
    """Return the residuals and the quantities of a fit with the candidate, as AICc counts them."""
    fit = known.fit
    more = own.heads.shape[1]
    freed = len(known.columns) - len(fit.names)
    quantities = fit.criterion_quantities + more + freed
    return fit.criterion_points + own.expected.size + more, quantities


def _lead(known: Known, other: Known, own_squares: Array, squares: Array, own: _Readings) -> Array:
    """Return how far another law lies behind the true one in AICc, by outcome."""
    points, fitted = _counts(known, own)
    _, others = _counts(other, own)
    penalty = corrected_aic(points, points, others) - corrected_aic(points, points, fitted)
    return np.asarray(points * np.log(squares / own_squares) + penalty)


def _rejected(
    known: Known,
    other: Known,
    own_squares: Array,
    squares: Array,
    own: _Readings,
    behind: NDArray[np.bool_],
) -> NDArray[np.bool_]:
    """Return whether another law would no longer be named: the nested test where one holds it."""
    if contains(other.fit.law_name, known.fit.law_name):
        return _chance(other, known, squares, own_squares, own) > PART_CHANCE
    if contains(known.fit.law_name, other.fit.law_name):
        return _chance(known, other, own_squares, squares, own) <= PART_CHANCE
    return behind


def _chance(
    larger: Known, smaller: Known, large_squares: Array, small_squares: Array, own: _Readings
) -> Array:
    """Return how often chance gives the gain of the larger law, by outcome; see ``nested_test``."""
    from scipy.special import chdtrc, fdtrc

    extra = len(larger.columns) - len(smaller.columns)
    if extra < 1:
        return np.ones(large_squares.shape)
    fall = np.maximum(small_squares - large_squares, 0.0)
    estimate = larger.fit.estimate
    if estimate.stated and estimate.widening == 1.0:
        return np.asarray(chdtrc(extra, fall))
    freedom = max(larger.fit.degrees_of_freedom + own.expected.size, 1)
    return np.asarray(fdtrc(extra, freedom, fall / extra / (large_squares / freedom)))
