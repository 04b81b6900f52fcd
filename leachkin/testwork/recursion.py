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
#: After each sample the vessel is filled to its starting volume, whatever was lost.
MADE_UP: tuple[AliquotPolicy, ...] = ("made up with reagent solution", "made up with water")
#: What comes in is solution of the starting strength.
FRESH: tuple[AliquotPolicy, ...] = (REPLACED[0], MADE_UP[0])
_DRAINED = 1e-9  #: share of the start below which a vessel is empty


@dataclass(frozen=True)
class SolutionLedger:
    """Volumes of a test, and how much of the charge is in the vessel.

    Attributes
    ----------
    volume_mL : ndarray, shape (m,)
        Before each sample.
    removed_mL, makeup_mL : ndarray, shape (m,)
        Taken out for good at each sample, and made up after it.
    start_mL, end_mL : float
        At the start, and after the last make-up.
    evaporated_mL : ndarray, shape (m,)
        Lost as water before each sample, as written or as the measured volume says.
    share : ndarray, shape (m + 1,)
        Of the charge, in the vessel before each sample and at the end: below 1 once slurry was
        sampled.
    """

    volume_mL: Array
    removed_mL: Array
    makeup_mL: Array
    start_mL: float
    end_mL: float
    evaporated_mL: Array
    share: Array

    @property
    def whole_charge_weights_mL(self) -> Array:
        """What each concentration counts with in the metal dissolved by later readings.

        Shape (m,). The volume taken out where no solids leave; where they do, of the whole charge.
        """
        before, after = self.share[:-1], self.share[1:]
        return self.removed_mL / after + self.volume_mL * (1.0 / before - 1.0 / after)


def solution_ledger(test: Test) -> SolutionLedger:
    """Return the volumes of a test under its aliquot policy.

    Where the policy is not known, aliquots count as replaced.
    """
    removed = removed_mL(test)
    before, makeup, lost, end = _volumes(test, removed)
    return SolutionLedger(before, removed, makeup, test.solution_mL, end, lost, solid_share(test))


def removed_mL(test: Test) -> Array:
    """Return the solution taken out for good at each sample [mL], shape (m,).

    The aliquot less what was put back, and what was poured off beside it.
    """
    vessel = test.vessel
    back = np.zeros_like(test.aliquot_mL)
    if vessel.returned_mL is not None:
        back = np.nan_to_num(vessel.returned_mL, nan=0.0)
    if test.aliquots == "returned":
        all_of_it = np.full_like(test.aliquot_mL, np.nan)
        given = all_of_it if vessel.returned_mL is None else vessel.returned_mL
        back = np.where(np.isnan(given), test.aliquot_mL, given)
    poured = 0.0 if vessel.decanted_mL is None else np.nan_to_num(vessel.decanted_mL)
    return np.asarray(test.aliquot_mL - back + poured)


def _volumes(test: Test, removed: Array) -> tuple[Array, Array, Array, float]:
    """Volume before each sample, make-up after it, water lost before it, volume at the end."""
    count, vessel = removed.size, test.vessel
    missing = np.full(count, np.nan)
    measured = missing if vessel.volume_mL is None else vessel.volume_mL
    lost = np.zeros(count) if vessel.evaporated_mL is None else np.nan_to_num(vessel.evaporated_mL)
    if test.aliquots not in MADE_UP and np.isnan(measured).all():
        unwritten = removed if (test.aliquots or REPLACED[0]) in REPLACED else np.zeros(count)
        makeup = np.where(np.isnan(test.makeup_mL), unwritten, test.makeup_mL)
        after = test.solution_mL + np.cumsum(makeup - removed - lost)
        first = test.solution_mL - (lost[0] if count else 0.0)
        before = np.concatenate([[first], after[:-1] - lost[1:]])[:count]
        return before, makeup, lost, float(after[-1]) if count else test.solution_mL
    return _step_by_step(test, removed, measured, lost)


def _step_by_step(
    test: Test, removed: Array, measured: Array, lost: Array
) -> tuple[Array, Array, Array, float]:
    """The volumes where one of them was measured, or is brought back to the mark."""
    policy = test.aliquots or REPLACED[0]
    before, makeup, gone = np.zeros_like(lost), np.zeros_like(lost), lost.copy()
    volume = test.solution_mL
    for i in range(lost.size):
        before[i] = volume - lost[i]
        if not np.isnan(measured[i]):
            before[i], gone[i] = measured[i], volume - measured[i]
        makeup[i] = test.makeup_mL[i]
        if np.isnan(makeup[i]):
            to_the_mark = test.solution_mL - before[i] + removed[i]
            makeup[i] = removed[i] if policy in REPLACED else 0.0
            makeup[i] = max(to_the_mark, 0.0) if policy in MADE_UP else makeup[i]
        volume = before[i] - removed[i] + makeup[i]
    return before, makeup, gone, volume


def solid_share(test: Test) -> Array:
    """Return the share of the charge in the vessel before each sample and at the end, (m + 1,).

    By the dry masses of the samples over those of samples and residue together: exact where the
    mass that a leach loses is lost before the first sample. Without a residue, over the charge.
    """
    taken = test.vessel.solids_g
    if taken is None or not np.nan_to_num(taken).any():
        return np.ones(test.aliquot_mL.size + 1)
    gone = np.concatenate([[0.0], np.cumsum(np.nan_to_num(taken))])
    return np.asarray(1.0 - gone / solids_left_g(test))


def solids_left_g(test: Test) -> float:
    """Return the dry mass that the whole charge has come to [g]: residue and slurry samples."""
    solids = [p.amount for p in test.products if p.is_undissolved_metal]
    taken = 0.0 if test.vessel.solids_g is None else float(np.nansum(test.vessel.solids_g))
    if not solids or any(amount is None for amount in solids):
        return test.solids_g
    return sum(amount for amount in solids if amount is not None) + taken


def is_drained(ledger: SolutionLedger) -> bool:
    """Return True where more is taken out than there is, of solution or of solids."""
    left = ledger.volume_mL - ledger.removed_mL
    after = left + ledger.makeup_mL
    least = _DRAINED * ledger.start_mL
    if not left.size:
        return False
    solution = left.min() < -least or after.min() <= least or ledger.volume_mL.min() <= least
    return bool(solution or ledger.share.min() <= 0.0)


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


def brought_of_whole_charge_mg(test: Test, analyte: str, ledger: SolutionLedger) -> Array:
    """Return what is taken off the metal dissolved by each reading [mg], shape (m + 1,).

    What was brought in, raised to the whole charge where slurry was sampled.
    """
    brought = brought_mg(test, analyte, ledger)
    last = max(ledger.share.size - 2, 0)
    share = np.append(ledger.share[:-1], ledger.share[last])
    steps = np.diff(brought, prepend=0.0) / share
    return np.asarray(np.cumsum(steps))


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


def leach_matrix(ledger: SolutionLedger) -> Array:
    """Return the matrix that takes extractions to metal leached in the vessel over the head.

    Returns
    -------
    ndarray, shape (m, m)
        The identity where no solids leave. Between two readings the share of the charge that is in
        the vessel leaches: ``sum_k share_k (E_k - E_{k-1})``.
    """
    share = ledger.share[:-1]
    count = share.size
    drops = np.append(share[:-1] - share[1:], 0.0)
    return np.asarray(np.tril(np.broadcast_to(drops, (count, count)), -1) + np.diag(share))


def dissolved_mg(test: Test, analyte: str, ledger: SolutionLedger, concentration: Array) -> Array:
    """Return the metal dissolved by each reading [mg], shape (m,).

    Of the whole charge: what slurry samples took out is taken to leach like the rest.
    """
    later = np.cumsum(concentration * ledger.whole_charge_weights_mL)
    earlier = np.concatenate([[0.0], later[:-1]])[: later.size]
    now = concentration * ledger.volume_mL / ledger.share[:-1]
    return np.asarray(now + earlier - brought_of_whole_charge_mg(test, analyte, ledger)[:-1])


def weights_mL(ledger: SolutionLedger, reading: int) -> Array:
    """Return the volume that each concentration counts with up to one reading, shape (m,)."""
    later = np.arange(ledger.removed_mL.size) < reading
    weights = np.where(later, ledger.whole_charge_weights_mL, 0.0)
    weights[reading] = ledger.volume_mL[reading] / ledger.share[reading]
    return np.asarray(weights)


def weights_at_close_out_mL(ledger: SolutionLedger) -> tuple[Array, float]:
    """Return what concentrations and what products of the close-out count with.

    Returns
    -------
    weights_mL : ndarray, shape (m,)
        For the metal that samples took out.
    factor : float
        For the metal in filtrate, wash and carbon: 1 where no solids left.
    """
    share = ledger.share[:-1]
    if not share.size:
        return np.zeros(0), 1.0
    weights = ledger.whole_charge_weights_mL
    weights[-1] = ledger.removed_mL[-1] / share[-1]
    return weights, float(1.0 / share[-1])


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
