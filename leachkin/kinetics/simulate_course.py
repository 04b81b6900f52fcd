"""The extraction of a bottle under any law, along whatever its conditions do."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.drive import READS, USUAL_SPECIES
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.simulate_design import Bottle, course_of
from leachkin.problems import argument_error
from leachkin.testwork import History

Array = NDArray[np.float64]
#: Steps between readings where the grains are followed, and Gauss nodes on a straight piece.
HISTORY_STEPS, GAUSS_NODES = 40, 4


def true_extraction(law: RateLaw, bottle: Bottle) -> Array:
    """Return the extraction of a bottle under a law, shape (m,), along its history if it has one.

    Any law: film, ash layer, chemical step, one clock, with a lag, a fade, a soluble share, a
    second fraction or a drive of its own. A lag counts equivalent hours at the temperature of the
    bottle, as a fit counts them.

    Parameters
    ----------
    law : RateLaw
        Of one set of parameters.
    bottle : Bottle
        What a drive reads beside the reagent stands in ``history.others``, by its name in the
        readings; it stands at the reference of the law where it is not there.

    Raises
    ------
    InputProblems
        For a lag or a fade where no one clock serves the resistances under a history; for a metal
        near its solubility, which would have to be followed, without a history of it.
    """
    course = course_of(bottle)
    _check_solubility(law, course)
    if course is None and not (np.any(law.lag_h) or np.any(law.fade_per_h)):
        conditions = (bottle.temperature_K, bottle.reagent_g_per_L, bottle.stirring_rpm)
        return np.asarray(law.extraction(bottle.time_h, bottle.sizes, *conditions))
    if course is None:
        course = History(
            np.zeros(1), np.full(1, bottle.temperature_K), np.full(1, bottle.reagent_g_per_L)
        )
    warmed = bool(np.ptp(course.temperature_K) > 0.0)
    if law.shared_clock(one_temperature=not warmed):
        hours = _equivalent_hours(law, bottle, course, warmed)
        X = law.conversion(
            hours, bottle.sizes.size_mm, bottle.temperature_K, None, bottle.stirring_rpm
        )
        weight = law.class_weights(bottle.sizes, bottle.temperature_K)
        return np.asarray(weight @ X)
    return _by_grains(law, bottle, course)


def _equivalent_hours(law: RateLaw, bottle: Bottle, course: History, warmed: bool) -> Array:
    """Hours at the temperature of the bottle and the reference solution, by each reading."""
    readings = bottle.time_h
    edges = np.union1d(
        np.concatenate([[0.0], readings]), course.time_h[course.time_h < readings[-1]]
    )
    abscissae, weights = np.polynomial.legendre.leggauss(GAUSS_NODES)
    half = 0.5 * np.diff(edges)
    at = (edges[:-1] + half)[:, None] + half[:, None] * abscissae
    pace = _pace(law, course, at)
    if warmed:
        kelvin = np.interp(at, course.time_h, course.temperature_K)
        pace = pace * law.clock_rate(kelvin) / law.clock_rate(bottle.temperature_K)
    passed = np.concatenate([[0.0], np.cumsum(half * (pace @ weights))])
    return np.asarray(passed[np.searchsorted(edges, readings)])


def _pace(law: RateLaw, course: History, at: Array) -> Array:
    """Equivalent hours an hour in the solution of the moment."""
    if law.drive is None:
        return law.clock_rate(None, _solution(law, course, at)["reagent"])
    return law.drive.rate(_solution(law, course, at))


def _solution(law: RateLaw, course: History, at: Array) -> dict[str, Array]:
    """What the law reads of a solution at given times, by role."""
    found: dict[str, Array] = {}
    for role in ("reagent",) if law.drive is None else READS[law.drive.kind]:
        values = course.reagent_g_per_L if role == "reagent" else _other(course, role)
        if values is not None:
            found[role] = np.interp(at, course.time_h, values)
    return found


def _other(course: History, role: str) -> Array | None:
    return course.others.get(USUAL_SPECIES[role] or role)


def _by_grains(law: RateLaw, bottle: Bottle, course: History) -> Array:
    """Grains stepped along the history, the conditions of the middle held in each step."""
    depth, now = law.initial_depth(bottle.sizes), 0.0
    found = np.empty(bottle.time_h.size)
    for j, until in enumerate(bottle.time_h.tolist()):
        step = (until - now) / HISTORY_STEPS
        for i in range(HISTORY_STEPS if step > 0.0 else 0):
            at = np.asarray(now + (i + 0.5) * step)
            kelvin = float(np.interp(at, course.time_h, course.temperature_K))
            held = law.held_at(_solution(law, course, at))
            depth = held.advance(
                depth, step, bottle.sizes, kelvin, stirring_rpm=bottle.stirring_rpm
            )
        now = until
        found[j] = law.extraction_of_depth(depth, bottle.sizes, bottle.temperature_K)
    return found


def _check_solubility(law: RateLaw, course: History | None) -> None:
    near = law.drive is not None and law.drive.kind == "solubility"
    if near and (course is None or _other(course, "metal") is None):
        raise argument_error(
            "law",
            "a metal near its solubility, and no history of the metal",
            'a history with "metal" among its others',
        )
