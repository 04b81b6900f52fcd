"""The reagent balance of a test against time: gross, net, bound by the metals, taken by gangue."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from leachkin.errors import InputProblems
from leachkin.result_table import Column, ResultTable
from leachkin.testwork.balance import metal_balance
from leachkin.testwork.reagent_use import ReagentUse, reagent_use
from leachkin.testwork.records import Array, Test
from leachkin.testwork.recursion import FRESH, REPLACED, solution_ledger


@dataclass(frozen=True)
class ReagentLedger:
    """The balance of one reagent in one test, all of it per tonne of dry charge and 100 % reagent.

    gross = in solution + left with samples + net; net = bound by the metals + gangue.

    Attributes
    ----------
    test, reagent : str
    time_h : ndarray, shape (m,)
    gross_kg_per_t : ndarray, shape (m,)
        Put in by each reading: at the start, added, and with make-up of reagent solution.
    in_solution_kg_per_t : ndarray, shape (m,)
        In the vessel before each sample.
    with_samples_kg_per_t : ndarray, shape (m,)
        Gone with earlier aliquots and solution poured off.
    net_kg_per_t : ndarray, shape (m,)
        Taken by the ore.
    bound_kg_per_t : mapping of metal to ndarray, shape (m,)
        What each metal that dissolved has bound.
    strength_g_per_L : ndarray, shape (m,)
        Before each sample.
    titrated : bool
        False where nothing was titrated: then what was added counts as taken.
    """

    test: str
    reagent: str
    time_h: Array
    gross_kg_per_t: Array
    in_solution_kg_per_t: Array
    with_samples_kg_per_t: Array
    net_kg_per_t: Array
    bound_kg_per_t: Mapping[str, Array] = field(default_factory=dict)
    strength_g_per_L: Array = field(default_factory=lambda: np.zeros(0))
    titrated: bool = True

    @property
    def gangue_kg_per_t(self) -> Array:
        """Taken by what is not the metals, shape (m,); NaN where a metal was not assayed."""
        return np.asarray(self.net_kg_per_t - sum(self.bound_kg_per_t.values(), np.zeros(1)))


def reagents_of(test: Test) -> tuple[str, ...]:
    """Return the reagents that a test has a balance of, the campaign's first."""
    named = [test.reagent, *test.added_g, *test.free_g_per_L, *test.start_g_per_L]
    return tuple(name for name in dict.fromkeys(named) if name)


def reagent_ledger(
    test: Test,
    reagent: str | None = None,
    per_metal_kg_per_kg: Mapping[str, float] | None = None,
) -> ReagentLedger | None:
    """Return the balance of a reagent; None where nothing was added or titrated.

    Parameters
    ----------
    test : Test
    reagent : str, optional
        By formula; the campaign's where not given.
    per_metal_kg_per_kg : mapping of metal to float, optional
        Reagent that a kilogram of each metal binds.

    Returns
    -------
    ReagentLedger or None
    """
    name = reagent or test.reagent or ""
    of_one = _of_reagent(test, name)
    use = reagent_use(of_one)
    if use is None:
        return None
    bound = _bound(test, per_metal_kg_per_kg or {})
    if use.additions == "not titrated" and not of_one.reagent_g_per_L:
        return _spent_at_once(of_one, name, bound)
    ledger = solution_ledger(test)
    per_t = 1.0 / test.solids_g
    share = ledger.share[:-1]
    in_solution = use.before_g_per_L * ledger.volume_mL * per_t
    gone = _earlier(use.before_g_per_L * ledger.removed_mL) * per_t
    fresh = of_one.reagent_g_per_L if (test.aliquots or REPLACED[0]) in FRESH else 0.0
    made_up = _earlier(ledger.makeup_mL * (fresh or 0.0)) * per_t
    gross = _put_in(use, of_one) + made_up
    if not (share == 1.0).all():
        gross = use.taken_kg_per_t + in_solution + gone
    return ReagentLedger(
        test.name,
        name,
        test.time_h,
        gross,
        in_solution,
        gone,
        use.taken_kg_per_t,
        bound,
        use.before_g_per_L,
        use.additions != "not titrated",
    )


def _spent_at_once(test: Test, name: str, bound: Mapping[str, Array]) -> ReagentLedger:
    """What is added and not titrated, lime to hold a pH: all of it counts as taken."""
    added = np.zeros(test.time_h.size)
    if test.reagent_added_g is not None:
        added = np.nan_to_num(test.reagent_added_g)
    taken, nothing = np.cumsum(added) * 1000.0 / test.solids_g, np.zeros(added.size)
    return ReagentLedger(
        test.name, name, test.time_h, taken, nothing, nothing, taken, bound, nothing, False
    )


def _of_reagent(test: Test, name: str) -> Test:
    """The test as if this were its reagent."""
    if name == test.reagent:
        return test
    return replace(
        test,
        reagent=name,
        reagent_g_per_L=test.start_g_per_L.get(name, 0.0),
        reagent_added_g=test.added_g.get(name),
        free_reagent_g_per_L=test.free_g_per_L.get(name),
    )


def _put_in(use: ReagentUse, test: Test) -> Array:
    """Put in by the titration of each reading: its own addition only where that came before."""
    if use.additions == "before the titration":
        return use.added_kg_per_t
    added = np.zeros(use.time_h.size)
    if test.reagent_added_g is not None:
        added = np.nan_to_num(test.reagent_added_g)
    return np.asarray(use.added_kg_per_t - 1000.0 * added / test.solids_g)


def _earlier(steps: Array) -> Array:
    return np.concatenate([[0.0], np.cumsum(steps)[:-1]])


def _bound(test: Test, per_metal: Mapping[str, float]) -> dict[str, Array]:
    found = {}
    for metal, kg_per_kg in per_metal.items():
        if metal not in test.solution:
            continue
        try:
            dissolved_g = metal_balance(test, metal).dissolved_g
        except InputProblems:
            dissolved_g = np.full(test.time_h.size, np.nan)
        found[metal] = kg_per_kg * dissolved_g * 1000.0 / test.solids_g
    return found


def reagent_table(ledgers: Iterable[ReagentLedger]) -> ResultTable:
    """Return one row a test and reagent: gross, net, bound and gangue at its last reading."""
    columns = (
        Column("test", "Test"),
        Column("reagent", "Reagent"),
        Column("time_h", "At", "h"),
        Column("gross", "Gross, put in", "kg/t"),
        Column("in_solution", "Left in solution", "kg/t"),
        Column("with_samples", "Gone with samples", "kg/t"),
        Column("net", "Net, taken", "kg/t"),
        Column("bound", "Bound by metals", "kg/t"),
        Column("gangue", "Taken by gangue", "kg/t"),
        Column("strength", "Strength", "g/L"),
        Column("titrated", "Titrated"),
    )
    records = [_record(ledger, ledger.time_h.size - 1) for ledger in ledgers]
    caption = "Per dry tonne, 100 % reagent. Gross = left in solution + gone with samples + net."
    return ResultTable.from_records("reagent_balance", columns, records, caption)


def reagent_by_time_table(ledgers: Iterable[ReagentLedger]) -> ResultTable:
    """Return one row a reading of each test and reagent."""
    columns = (
        Column("test", "Test"),
        Column("reagent", "Reagent"),
        Column("time_h", "Time", "h"),
        Column("strength", "Strength", "g/L"),
        Column("gross", "Gross, put in", "kg/t"),
        Column("in_solution", "In solution", "kg/t"),
        Column("with_samples", "Gone with samples", "kg/t"),
        Column("net", "Net, taken", "kg/t"),
        Column("bound", "Bound by metals", "kg/t"),
        Column("gangue", "Taken by gangue", "kg/t"),
    )
    records = [_record(ledger, i) for ledger in ledgers for i in range(ledger.time_h.size)]
    return ResultTable.from_records("reagent_by_time", columns, records)


def _record(ledger: ReagentLedger, i: int) -> dict[str, Any]:
    bound = sum((float(values[i]) for values in ledger.bound_kg_per_t.values()), 0.0)
    known = bool(ledger.bound_kg_per_t) and np.isfinite(bound)
    return {
        "test": ledger.test,
        "reagent": ledger.reagent,
        "time_h": float(ledger.time_h[i]),
        "gross": float(ledger.gross_kg_per_t[i]),
        "in_solution": float(ledger.in_solution_kg_per_t[i]),
        "with_samples": float(ledger.with_samples_kg_per_t[i]),
        "net": float(ledger.net_kg_per_t[i]),
        "bound": bound if known else None,
        "gangue": float(ledger.net_kg_per_t[i]) - bound if known else None,
        "strength": float(ledger.strength_g_per_L[i]) if ledger.titrated else None,
        "titrated": ledger.titrated,
    }
