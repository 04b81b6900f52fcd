"""Reconciliation of a balance: every measurement adjusted by as much as its precision allows.

Weighted least squares until the balance closes, with the size of each adjustment, tests of gross
errors by group, and the group and the repeat named where one is found.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from leachkin.inference import Reconciled, chi_square_upper_tail, normal_multiplier, reconcile
from leachkin.testwork.measured_items import (
    BalanceItems,
    Item,
    measured_items,
    residue_of_closure_g,
)
from leachkin.testwork.records import Array, Test
from leachkin.testwork.recursion import assays_for_balance, dissolved_mg, solution_ledger
from leachkin.testwork.settings import BalanceLimits

CLOSURE = "closure"
TIE = "last reading and filtrate"
#: Chance of calling a sound balance unsound, all tests of one balance together.
FALSE_ALARM = 0.05
#: A group that scatters more than its precision says, by this chance, is given its own scatter.
_WIDEN = 0.01
#: Power at which an error counts as one that would be found.
_POWER = 0.80
#: Groups that no repeat settles: they have no assay of their own, or hardly count.
_NOT_REPEATED = ("this charge", "aliquots")


@dataclass(frozen=True)
class Adjustment:
    """One measurement and what it became.

    Attributes
    ----------
    group, label, unit, place : str
        ``place`` is file and row.
    measured, sd, adjusted : float
    in_sd : float
        Adjustment over the standard deviation of the measurement.
    statistic : float or None
        Measurement test: adjustment over its own standard deviation; None where nothing checks it.
    detectable : float or None
        Smallest relative error that would be found in 80 of 100 cases; None where none would be.
    suspect : bool
        True where the gross error that was found may be in it.
    """

    group: str
    label: str
    unit: str
    place: str
    measured: float
    sd: float
    adjusted: float
    in_sd: float
    statistic: float | None
    detectable: float | None
    suspect: bool = False


@dataclass(frozen=True)
class GroupTest:
    """One test of a gross error: replicates of a group, or the closure of all groups.

    Attributes
    ----------
    group : str
    chi_square : float
    degrees_of_freedom : int
    chance : float
        Of as large a value without a gross error.
    found : bool
    """

    group: str
    chi_square: float
    degrees_of_freedom: int
    chance: float
    found: bool


@dataclass(frozen=True)
class Candidate:
    """A group that the closure error may be in, and how wrong it would have to be.

    Attributes
    ----------
    group : str
    relative_error : float
        Of the mean of the group, as measured over true, less 1.
    in_sd : float
        The same in standard deviations of that mean.
    assays : int
    """

    group: str
    relative_error: float
    in_sd: float
    assays: int


@dataclass(frozen=True)
class Reconciliation:
    """A reconciled balance. What cannot be had is None.

    Attributes
    ----------
    test, key, analyte : str
    extraction, sd, low, high : float
        Of what the leach was fed, after reconciliation, and the ends of its interval.
    level : float
    head_kg_per_t, head_sd_kg_per_t : float or None
        Of this charge, a gravity concentrate taken off.
    curve : ndarray, shape (m,)
        Extraction by reading, with the adjusted assays and head.
    adjustments : tuple of Adjustment
    chi_square, chance : float
        Global test.
    degrees_of_freedom : int
    tests : tuple of GroupTest
    candidates : tuple of Candidate
        Where the closure is off: what to repeat first comes first.
    widened : mapping of group to float
        Factor on the precision of groups that scatter more than stated.
    residue_by_closure_g : (mass, sd) or None
        What a residue that was not weighed would have to weigh.
    mass_bounds : (float, float) or None
        Extraction without a loss of mass and with the largest one, where the residue was not
        weighed.
    closes : bool
        False where head, solution or residue is missing: then nothing checks the others.
    """

    test: str
    key: str
    analyte: str
    extraction: float
    sd: float
    low: float
    high: float
    level: float
    head_kg_per_t: float | None
    head_sd_kg_per_t: float | None
    curve: Array
    adjustments: tuple[Adjustment, ...]
    chi_square: float
    degrees_of_freedom: int
    chance: float
    tests: tuple[GroupTest, ...]
    candidates: tuple[Candidate, ...] = ()
    widened: Mapping[str, float] = field(default_factory=dict)
    residue_by_closure_g: tuple[float, float] | None = None
    mass_bounds: tuple[float, float] | None = None
    closes: bool = True

    @property
    def found(self) -> tuple[GroupTest, ...]:
        """The tests that found a gross error, surest first."""
        return tuple(sorted((t for t in self.tests if t.found), key=lambda t: t.chance))

    @property
    def suspects(self) -> tuple[Adjustment, ...]:
        """The measurements that the gross error may be in, likeliest first."""
        some = [a for a in self.adjustments if a.suspect]
        return tuple(sorted(some, key=lambda a: -abs(a.statistic or 0.0)))


def reconcile_balance(
    test: Test,
    analyte: str,
    *,
    limits: BalanceLimits | None = None,
    level: float = 0.95,
    false_alarm: float = FALSE_ALARM,
) -> Reconciliation | None:
    """Return the reconciled balance of one analyte in one test.

    Parameters
    ----------
    test : Test
    analyte : str
    limits : BalanceLimits, optional
        For the largest loss of mass where a residue was not weighed.
    level : float
        Of the interval.
    false_alarm : float
        Chance of a gross error being found where there is none.

    Returns
    -------
    Reconciliation or None
        None where no extraction can be had.

    Raises
    ------
    InputProblems
        If a level has no meaning.
    """
    chosen = limits or BalanceLimits()
    gathered = measured_items(test, analyte, chosen.most_mass_loss)
    if not _has_extraction(gathered):
        return None
    tests = _group_tests(gathered, false_alarm)
    widened = {t.group: _birge(t) for t in tests if t.chance < _WIDEN}
    plain = _solved(gathered)
    wide = _solved(_with_widened(gathered, widened)) if widened else plain
    suspects = _suspects(gathered, plain, tests)
    extraction, slopes = _extraction(gathered, wide.adjusted)
    sd = _spread(slopes, wide)
    low, high = _interval(extraction, sd, level)
    head, head_sd = _head(gathered, wide)
    missing = any(item.assumed for item in gathered.items)
    return Reconciliation(
        test=test.name,
        key=f"{test.domain}/{analyte}",
        analyte=analyte,
        extraction=extraction,
        sd=sd,
        low=low,
        high=high,
        level=level,
        head_kg_per_t=head,
        head_sd_kg_per_t=head_sd,
        curve=_curve(test, analyte, gathered, wide, head),
        adjustments=tuple(_adjustments(gathered, plain, wide, suspects, len(tests), false_alarm)),
        chi_square=plain.chi_square,
        degrees_of_freedom=plain.degrees_of_freedom,
        chance=plain.chance,
        tests=tests,
        candidates=tuple(_candidates(gathered)) if _failed(tests, CLOSURE) else (),
        widened=widened,
        residue_by_closure_g=residue_of_closure_g(gathered, test) if missing else None,
        mass_bounds=_mass_bounds(gathered, chosen.most_mass_loss) if missing else None,
        closes=gathered.closes,
    )


def _has_extraction(found: BalanceItems) -> bool:
    if not found.items:
        return False
    x = found.group_means()[0]
    amounts = (
        found.head_of(x) if found.has_head else 0.0,
        found.dissolved_of(x) if found.has_dissolved else 0.0,
        found.undissolved_of(x),
    )
    return sum(amount > 0.0 for amount in amounts) >= 2


def _solved(found: BalanceItems) -> Reconciled:
    values = [item.value for item in found.items]
    return reconcile(values, [item.sd for item in found.items], found.constraints())


def _failed(tests: tuple[GroupTest, ...], group: str) -> bool:
    return any(t.found and t.group == group for t in tests)


def _group_tests(found: BalanceItems, false_alarm: float) -> tuple[GroupTest, ...]:
    """Chi-square of each group of replicates, of the tie, and of the closure at group means."""
    raw: list[tuple[str, float, int]] = []
    mean, variance = found.group_means()
    for group in found.replicates:
        items = [found.items[i] for i in group]
        if len(items) > 1:
            spread = sum(((i.value - mean[group[0]]) / i.sd) ** 2 for i in items)
            raw.append((items[0].group, float(spread), len(items) - 1))
    for name, there, of in (
        (TIE, found.tie is not None, found.tie_of),
        (CLOSURE, found.closes, found.gap_of),
    ):
        if there:
            gap, slopes = of(mean)
            raw.append((name, gap**2 / float(slopes**2 @ variance), 1))
    each = 1.0 - (1.0 - false_alarm) ** (1.0 / max(len(raw), 1))
    return tuple(
        GroupTest(name, value, degrees, chance, chance < each)
        for name, value, degrees in raw
        for chance in [chi_square_upper_tail(value, degrees)]
    )


def _birge(test: GroupTest) -> float:
    """Ratio of external to internal error (Birge 1932, Phys. Rev. 40, 207)."""
    return float(np.sqrt(test.chi_square / test.degrees_of_freedom))


def _with_widened(found: BalanceItems, widened: Mapping[str, float]) -> BalanceItems:
    """The items with the precision of scattering groups widened; all of them for the closure."""
    every = widened.get(CLOSURE, 1.0)
    tied = set() if found.tie is None else set(found.tie[:2])
    items: list[Item] = []
    for place, item in enumerate(found.items):
        factor = widened.get(item.group, 1.0)
        factor = max(factor, widened.get(TIE, 1.0)) if place in tied else factor
        items.append(replace(item, sd=item.sd * max(factor, every)))
    return replace(found, items=items)


def _extraction(found: BalanceItems, x: Array) -> tuple[float, Array]:
    """Extraction at given values and its slopes, (n,)."""
    head, dissolved, undissolved = found.slopes(x)
    h, d, u = found.head_of(x), found.dissolved_of(x), found.undissolved_of(x)
    if found.has_dissolved and found.undissolved:
        total = d + u
        return d / total, np.asarray((u * dissolved - d * undissolved) / total**2)
    if found.has_dissolved:
        return d / h, np.asarray((dissolved - d / h * head) / h)
    return 1.0 - u / h, np.asarray((u / h * head - undissolved) / h)


def _spread(slopes: Array, solved: Reconciled) -> float:
    variance = float(slopes @ solved.covariance @ slopes)
    return float(np.sqrt(max(variance, 0.0)))


def _interval(extraction: float, sd: float, level: float) -> tuple[float, float]:
    """Interval on the log of dissolved over undissolved, which stays between 0 and 1."""
    reach = normal_multiplier(level) * sd
    if not 0.0 < extraction < 1.0:
        return extraction - reach, extraction + reach
    step = float(np.exp(min(reach / (extraction * (1.0 - extraction)), 500.0)))
    ratio = (1.0 - extraction) / extraction
    return 1.0 / (1.0 + ratio * step), 1.0 / (1.0 + ratio / step)


def _head(found: BalanceItems, solved: Reconciled) -> tuple[float | None, float | None]:
    x = solved.adjusted
    head, dissolved, undissolved = found.slopes(x)
    if found.has_dissolved and found.undissolved:
        value, slopes = found.dissolved_of(x) + found.undissolved_of(x), dissolved + undissolved
    elif found.has_head:
        value, slopes = found.head_of(x), head
    else:
        return None, None
    return value, _spread(slopes, solved)


def _curve(
    test: Test, analyte: str, found: BalanceItems, solved: Reconciled, head: float | None
) -> Array:
    nothing = np.full(test.time_h.size, np.nan)
    if head is None or analyte not in test.solution or test.has_carbon(analyte):
        return nothing
    used = assays_for_balance(test, analyte).value.copy()
    for reading, place in found.readings.items():
        used[reading] = solved.adjusted[place]
    dissolved = dissolved_mg(test, analyte, solution_ledger(test), used)
    missing = np.isnan(test.solution[analyte].value)
    return np.where(missing, np.nan, dissolved / (test.solids_g * head))


def _suspects(
    found: BalanceItems, solved: Reconciled, tests: tuple[GroupTest, ...]
) -> frozenset[int]:
    """Measurements that one gross error may be in; none where no test found one.

    Within the groups that failed, those that the likelihood does not rule out; where the closure
    alone failed, everything in it.
    """
    failed = {t.group for t in tests if t.found}
    tied = set() if found.tie is None or TIE not in failed else set(found.tie[:2])
    own = {i for i, item in enumerate(found.items) if item.group in failed} | tied
    if not own and CLOSURE in failed:
        slopes = found.gap_of(solved.adjusted)[1]
        return frozenset(
            i
            for group in found.replicates
            for i in group
            if slopes[group[0]] != 0.0 and found.items[i].group not in _NOT_REPEATED
        )
    return frozenset(own & set(solved.suspects()) or own)


def _adjustments(
    found: BalanceItems,
    plain: Reconciled,
    wide: Reconciled,
    suspects: frozenset[int],
    tests: int,
    false_alarm: float,
) -> list[Adjustment]:
    each = 1.0 - (1.0 - false_alarm) ** (1.0 / max(tests, 1))
    needed = normal_multiplier(1.0 - each) + normal_multiplier(_POWER, sides=1)
    rows = []
    for i, item in enumerate(found.items):
        statistic = None if np.isnan(plain.statistic[i]) else float(plain.statistic[i])
        least = None
        if statistic is not None and item.value != 0.0:
            least = float(needed * item.sd / np.sqrt(plain.redundancy[i]) / abs(item.value))
        rows.append(
            Adjustment(
                item.group,
                item.label,
                item.unit,
                item.place,
                item.value,
                float(wide.sd[i]),
                float(wide.adjusted[i]),
                float(wide.in_sd[i]),
                statistic,
                least,
                i in suspects,
            )
        )
    return rows


def _candidates(found: BalanceItems) -> list[Candidate]:
    """Groups that could explain the closure alone; those without a replicate come first."""
    mean, variance = found.group_means()
    gap, slopes = found.gap_of(mean)
    made = []
    for group in found.replicates:
        first = group[0]
        item = found.items[first]
        if slopes[first] == 0.0 or item.group in _NOT_REPEATED or item.assumed:
            continue
        error = gap / slopes[first]
        true = mean[first] - error
        relative = float(error / true) if true > 0.0 else float("inf")
        in_sd = float(abs(error) / np.sqrt(variance[first]))
        made.append(Candidate(item.group, relative, in_sd, len(group)))
    return sorted(made, key=lambda c: (c.assays > 1, not np.isfinite(c.relative_error), c.in_sd))


def _mass_bounds(found: BalanceItems, most_mass_loss: float) -> tuple[float, float] | None:
    """Extraction without a loss of mass and with the largest one; None where nothing dissolved."""
    if not found.has_dissolved or not found.undissolved:
        return None
    ends = []
    for loss in (0.0, most_mass_loss):
        at = found.group_means()[0]
        for _, place in found.undissolved:
            if found.items[place].assumed:
                at[place] *= (1.0 - loss) / (1.0 - 0.5 * most_mass_loss)
        ends.append(_extraction(found, at)[0])
    return ends[0], ends[1]
