"""The solution of a test from sample to sample: volumes, what was taken out, what came in.

With V_i the volume before sample i, v_j and u_j the volumes taken out and made up, and c_j the
metal in the make-up, the metal dissolved by reading i is

    m_i = C_i V_i + sum_{j<i} C_j v_j - sum_{j<i} c_j u_j - C_start V_start

which is linear in the concentrations, so that the concentrations are linear in the extraction.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leachkin.testwork.records import AliquotPolicy, Array, Assays, Test

REPLACED: tuple[AliquotPolicy, ...] = ("replaced by reagent solution", "replaced by water")


@dataclass(frozen=True)
class SolutionLedger:
    """Volumes of a test.

    Attributes
    ----------
    volume_mL : ndarray, shape (m,)
        Before each sample.
    removed_mL, makeup_mL : ndarray, shape (m,)
        Taken out for good at each sample, and made up after it.
    start_mL, end_mL : float
        At the start, and after the last make-up.
    """

    volume_mL: Array
    removed_mL: Array
    makeup_mL: Array
    start_mL: float
    end_mL: float


def solution_ledger(test: Test) -> SolutionLedger:
    """Return the volumes of a test under its aliquot policy.

    Where the policy is not known, aliquots count as replaced.
    """
    policy = test.aliquots or REPLACED[0]
    removed = np.zeros_like(test.aliquot_mL) if policy == "returned" else test.aliquot_mL
    unwritten = test.aliquot_mL if policy in REPLACED else np.zeros_like(test.aliquot_mL)
    makeup = np.where(np.isnan(test.makeup_mL), unwritten, test.makeup_mL)
    after = test.solution_mL + np.cumsum(makeup - removed)
    before = np.concatenate([[test.solution_mL], after[:-1]])[: after.size]
    end = float(after[-1]) if after.size else test.solution_mL
    return SolutionLedger(before, removed, makeup, test.solution_mL, end)


def brought_mg(test: Test, analyte: str, ledger: SolutionLedger) -> Array:
    """Return the metal that was not leached, brought in before each reading [mg], shape (m + 1,).

    The last one is after the last make-up.
    """
    start = test.start_metal_g_per_L.get(analyte, 0.0) * ledger.start_mL
    strength = test.makeup_metal_g_per_L.get(analyte)
    if strength is None:
        return np.full(test.time_h.size + 1, start)
    steps = np.nan_to_num(strength) * ledger.makeup_mL
    return start + np.concatenate([[0.0], np.cumsum(steps)])


def balance_matrix(ledger: SolutionLedger) -> Array:
    """Return the matrix that takes concentrations [g/L] to metal in and out of the vessel [mg].

    Returns
    -------
    ndarray, shape (m, m)
        Lower triangular: volumes on the diagonal, earlier aliquots below it.
    """
    count = ledger.volume_mL.size
    taken = np.tril(np.broadcast_to(ledger.removed_mL, (count, count)), -1)
    return np.asarray(taken + np.diag(ledger.volume_mL))


def metal_out_mg(ledger: SolutionLedger, concentration: Array) -> Array:
    """Return metal in the vessel before each sample and in earlier aliquots [mg], shape (m,)."""
    taken = np.cumsum(concentration * ledger.removed_mL)
    earlier = np.concatenate([[0.0], taken[:-1]])[: taken.size]
    return np.asarray(concentration * ledger.volume_mL + earlier)


def weights_mL(ledger: SolutionLedger, reading: int) -> Array:
    """Return the volume that each concentration counts with up to one reading, shape (m,)."""
    weights = np.where(np.arange(ledger.removed_mL.size) < reading, ledger.removed_mL, 0.0)
    weights[reading] = ledger.volume_mL[reading]
    return np.asarray(weights)


def assays_for_balance(test: Test, analyte: str) -> Assays:
    """Return assays that a balance can use: a number at every reading.

    "<x" stands as x/2 with the standard deviation x/sqrt(12) of a value that may lie anywhere
    below x; a missing one is interpolated in time between its neighbours, from the starting
    solution and to the last assay.
    """
    given = test.solution[analyte]
    below = given.bound < 0
    value = np.where(below, 0.5 * given.value, given.value)
    sd = np.where(below, given.value / np.sqrt(12.0), given.sd)
    known = ~np.isnan(value)
    if not known.all():
        start = test.start_metal_g_per_L.get(analyte, 0.0)
        times = np.concatenate([[0.0], test.time_h[known]])
        value = np.interp(test.time_h, times, np.concatenate([[start], value[known]]))
        first = sd[known][:1] if known.any() else np.zeros(1)
        sd = np.interp(test.time_h, times, np.concatenate([first, sd[known]]))
    return Assays(value, sd, given.bound, given.rows)
