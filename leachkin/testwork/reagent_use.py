"""The reagent of a test against time: strength between samples, and what the ore took."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.testwork.records import Array, History, Test
from leachkin.testwork.recursion import FRESH, REPLACED, SolutionLedger, solution_ledger

#: An addition is a step; its two sides stand this far apart in a history.
STEP_h = 1e-6
Additions = Literal["after the titration", "before the titration", "not titrated"]


@dataclass(frozen=True)
class ReagentUse:
    """Reagent taken by the ore of one test.

    Attributes
    ----------
    time_h, taken_kg_per_t, added_kg_per_t : ndarray, shape (m,)
        Taken by each reading, and added by then, the start included [kg per t dry ore]; 100 %
        reagent.
    before_g_per_L, after_g_per_L : ndarray, shape (m,)
        Strength before each sample, and after what was added and made up.
    additions : str
        How the additions were understood. "after the titration": each row's addition follows its
        titration. "before the titration": it held the strength since the row above. "not
        titrated": each addition is taken to bring the strength back to the start, so that the
        additions are the reagent taken. Of the first two, the one that keeps the strength nearer
        the start is chosen.
    """

    time_h: Array
    taken_kg_per_t: Array
    added_kg_per_t: Array
    before_g_per_L: Array
    after_g_per_L: Array
    additions: Additions


def reagent_use(test: Test) -> ReagentUse | None:
    """Return the reagent balance of a test, None where nothing was titrated or added.

    Aliquots take reagent out; make-up brings it in at the starting strength where it is reagent
    solution, and none otherwise. Water that evaporates takes none. Where slurry was sampled, the
    reagent taken is that of the whole charge.
    """
    if test.reagent_g_per_L is None or not test.time_h.size:
        return None
    added = _or_zero(test.reagent_added_g, test.time_h.size)
    free = test.free_reagent_g_per_L
    measured = free is not None and not np.isnan(free).all()
    if not measured and not added.any():
        return None
    ledger = solution_ledger(test)
    fresh_mg = ledger.makeup_mL * _makeup_strength(test)
    kept_mL = ledger.volume_mL - ledger.removed_mL
    after_mL = kept_mL + ledger.makeup_mL
    additions: Additions = "not titrated"
    if measured and free is not None:
        before = _between(test.time_h, free, test.reagent_g_per_L)
        held = (before * kept_mL + fresh_mg) / after_mL
        after = held + 1000.0 * added / after_mL
        additions = "after the titration"
        if _nearer(before, after, test.reagent_g_per_L, added > 0.0):
            after, additions = held, "before the titration"
    else:
        after = np.full(added.size, test.reagent_g_per_L)
        held_mg = np.maximum(after * after_mL - fresh_mg - 1000.0 * added, 0.0)
        before = np.divide(held_mg, kept_mL, out=after.copy(), where=kept_mL > 0.0)
    return _use(test, ledger, (before, after), added, fresh_mg, additions)


def _nearer(one: Array, other: Array, aim: float, where: NDArray[np.bool_]) -> bool:
    """Whether the first strengths lie nearer an aim than the others, over the chosen rows."""
    return bool(np.abs(one - aim)[where].sum() < np.abs(other - aim)[where].sum())


def _use(
    test: Test,
    ledger: SolutionLedger,
    strength: tuple[Array, Array],
    added: Array,
    fresh_mg: Array,
    additions: Additions,
) -> ReagentUse:
    before, after = strength
    start_mg = (test.reagent_g_per_L or 0.0) * ledger.start_mL
    added_by_then = np.cumsum(1000.0 * added)
    in_time = added_by_then if additions == "before the titration" else _earlier(1000.0 * added)
    came_mg = start_mg + _earlier(fresh_mg) + in_time
    left_mg = before * ledger.volume_mL + _earlier(before * ledger.removed_mL)
    taken_mg = np.cumsum(np.diff(came_mg - left_mg, prepend=0.0) / ledger.share[:-1])
    per_t = 1.0 / test.solids_g
    return ReagentUse(
        test.time_h,
        taken_mg * per_t,
        (start_mg + added_by_then) * per_t,
        before,
        after,
        additions,
    )


def history_of(test: Test, temperature_K: Array | None) -> History:
    """Return the conditions of a test against time.

    Parameters
    ----------
    test : Test
    temperature_K : ndarray, shape (m,), or None
        Logged at the readings, NaN where not; None where the test has one temperature.

    Returns
    -------
    History
        From time 0, an addition as two points :data:`STEP_h` apart. The strength stays at the
        start where nothing was titrated or added.
    """
    use = reagent_use(test)
    after_start = test.time_h > 0.0
    time = np.concatenate([[0.0], test.time_h[after_start]])
    reagent = None if test.reagent_g_per_L is None else np.full(time.size, test.reagent_g_per_L)
    if use is not None:
        steps = np.repeat(test.time_h[after_start], 2)
        steps[1::2] += STEP_h
        sides = np.stack([use.before_g_per_L, use.after_g_per_L], axis=-1)[after_start]
        time = np.concatenate([[0.0], steps])
        start = use.after_g_per_L[~after_start][-1:] if (~after_start).any() else None
        first = start if start is not None else np.array([test.reagent_g_per_L])
        reagent = np.concatenate([first, sides.ravel()])
    kelvin = np.full(time.size, test.temperature_K)
    if temperature_K is not None and not np.isnan(temperature_K).all():
        known = ~np.isnan(temperature_K)
        logged = np.interp(time, test.time_h[known], temperature_K[known])
        kelvin = np.where(time < test.time_h[known][0], temperature_K[known][0], logged)
    return History(time, kelvin, reagent, _others(test, time))


def _others(test: Test, time_h: Array) -> dict[str, Array]:
    """Return what else was read in the solution, interpolated; a leached metal starts from 0.

    Before its first reading anything else stands as first read, after the last one as last read.
    """
    found: dict[str, Array] = {}
    read = {name: assays.value for name, assays in test.solution.items()}
    if test.pH is not None:
        read["pH"] = test.pH
    for name, values in read.items():
        known = ~np.isnan(values)
        if not known.any():
            continue
        times, levels = test.time_h[known], values[known]
        if name in test.heads or name in test.start_metal_g_per_L:
            times = np.concatenate([[0.0], times])
            levels = np.concatenate([[test.start_metal_g_per_L.get(name, 0.0)], levels])
        found[name] = np.interp(time_h, times, levels)
    return found


def _makeup_strength(test: Test) -> float:
    policy = test.aliquots or REPLACED[0]
    return (test.reagent_g_per_L or 0.0) if policy in FRESH else 0.0


def _or_zero(values: Array | None, count: int) -> Array:
    return np.zeros(count) if values is None else np.nan_to_num(values)


def _between(time_h: Array, values: Array, start: float) -> Array:
    """Titrations with the missing ones interpolated in time, from the start."""
    known = ~np.isnan(values)
    times = np.concatenate([[0.0], time_h[known]])
    found = np.interp(time_h, times, np.concatenate([[start], values[known]]))
    return np.where(known, values, found)


def _earlier(steps: Array) -> Array:
    """Sum of the steps before each one."""
    return np.concatenate([[0.0], np.cumsum(steps)[:-1]])
