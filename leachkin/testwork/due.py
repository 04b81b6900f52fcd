"""Tests that are still running: where they stand, and what is due next at the bench."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import timedelta
from typing import Any

import numpy as np

from leachkin.errors import InputProblems
from leachkin.result_table import Column, ResultTable
from leachkin.testwork.balance import metal_balance
from leachkin.testwork.clock import read_stamp
from leachkin.testwork.reagent_use import reagent_use
from leachkin.testwork.records import Test
from leachkin.testwork.recursion import solution_ledger
from leachkin.testwork.titration import grams_to_set_point, stock_to_set_point_mL

#: A strength this near its set-point needs nothing.
_NEAR = 0.005
_SAME_H = 1e-6


@dataclass(frozen=True)
class Addition:
    """What brings the reagent of a running test back to its set-point.

    Attributes
    ----------
    reagent : str
    set_point_g_per_L, found_g_per_L : float
        Found by the last titration, after what was added and made up with it.
    titrated_h : float
        When that was.
    volume_mL : float
        Solution in the vessel.
    grams : float
        Of 100 % reagent.
    stock_mL : float or None
        Of the stock solution, its own volume counted; None where its strength is not known, or
        not above the set-point.
    """

    reagent: str
    set_point_g_per_L: float
    found_g_per_L: float
    titrated_h: float
    volume_mL: float
    grams: float
    stock_mL: float | None = None

    @property
    def text(self) -> str:
        """In words, as it goes on the bench list."""
        stock = f" or {self.stock_mL:.3g} mL of stock" if self.stock_mL is not None else ""
        return (
            f"{self.grams:.3g} g of {self.reagent} (100 %){stock}: {self.found_g_per_L:.3g} g/L "
            f"found at {self.titrated_h:g} h, set-point {self.set_point_g_per_L:.3g} g/L, "
            f"{self.volume_mL:.4g} mL"
        )


@dataclass(frozen=True)
class Due:
    """What is due at one running test.

    Attributes
    ----------
    test : str
    last_h : float or None
        Last reading; None before the first.
    extraction : mapping of analyte to (value, sd)
        Provisional, on the assay head; only where there is a head.
    next_h : float or None
        Next sample, in hours since the start; None where the plan is at its end.
    next_moment : str
        Its date and time, "" where the start is not written as a date.
    why : str
        Where that time comes from.
    addition : Addition or None
    close_out : tuple of str
        What a close-out still needs; all of it while samples are to come.
    """

    test: str
    last_h: float | None
    extraction: Mapping[str, tuple[float, float]]
    next_h: float | None
    next_moment: str
    why: str
    addition: Addition | None
    close_out: tuple[str, ...]


def due_list(
    tests: Sequence[Test],
    usual_h: Sequence[float],
    stock_g_per_L: Mapping[str, float] | None = None,
    day_first: bool = True,
) -> tuple[Due, ...]:
    """Return what is due at every test that is not closed out, in the order of the tests.

    Parameters
    ----------
    tests : sequence of Test
    usual_h : sequence of float
        Times at which samples are taken where neither a plan nor a longer test of the same kind
        and domain says so.
    stock_g_per_L : mapping of reagent to float, optional
        Strengths of stock solutions.
    day_first : bool
        For starts such as 03/04/2026.

    Returns
    -------
    tuple of Due
    """
    running = [t for t in tests if not t.is_closed_out and not t.is_excluded]
    return tuple(_due(t, tests, usual_h, stock_g_per_L or {}, day_first) for t in running)


def _due(
    test: Test,
    tests: Sequence[Test],
    usual_h: Sequence[float],
    stock: Mapping[str, float],
    day_first: bool,
) -> Due:
    last = float(test.time_h[-1]) if test.time_h.size else None
    next_h, why = _next_sample(test, tests, usual_h, -1.0 if last is None else last)
    return Due(
        test.name,
        last,
        _extractions(test),
        next_h,
        _moment(test.started, next_h, day_first),
        why,
        addition_to_set_point(test, stock.get(test.reagent or "")),
        tuple(_close_out(test)),
    )


def _next_sample(
    test: Test, tests: Sequence[Test], usual_h: Sequence[float], last_h: float
) -> tuple[float | None, str]:
    if test.planned_h:
        later = [t for t in test.planned_h if t > last_h + _SAME_H]
        return (later[0], "planned") if later else (None, "the plan is at its end: close out")
    alike = [
        other
        for other in tests
        if other is not test and other.kind == test.kind and other.domain == test.domain
    ]
    for other in sorted(alike, key=lambda o: -float(o.time_h[-1]) if o.time_h.size else 0.0):
        later = [float(t) for t in other.time_h if t > last_h + _SAME_H]
        if later:
            return later[0], f"as test {other.name}"
    if any(other.is_closed_out for other in alike):
        return None, "as long as the longest of its kind: close out"
    later = [float(t) for t in usual_h if t > last_h + _SAME_H]
    return (later[0], "usual times") if later else (None, "past the usual times: close out")


def _moment(started: str, next_h: float | None, day_first: bool) -> str:
    stamp = read_stamp(started, day_first) if started and next_h is not None else None
    if stamp is None or stamp.moment is None or next_h is None:
        return ""
    return (stamp.moment + timedelta(hours=next_h)).strftime("%Y-%m-%d %H:%M")


def _extractions(test: Test) -> dict[str, tuple[float, float]]:
    found = {}
    for analyte in test.solution:
        try:
            balance = metal_balance(test, analyte)
        except InputProblems:
            continue
        value = balance.final_on_assay_head
        if value is not None:
            found[analyte] = (value, balance.sd["final_on_assay_head"])
    return found


def _close_out(test: Test) -> list[str]:
    solids = [p for p in test.products if p.is_undissolved_metal]
    needed = []
    if not solids or all(p.amount is None for p in solids):
        needed.append("residue mass")
    needed.append("two tail assays")
    if test.vessel.carbon_g > 0.0 and not any(p.is_carbon for p in test.products):
        needed.append("carbon mass and assay")
    return needed


def addition_to_set_point(test: Test, stock_g_per_L: float | None = None) -> Addition | None:
    """Return what brings the reagent of a test back to its set-point; None where nothing is due.

    Parameters
    ----------
    test : Test
        The set-point is its own, or else its starting strength.
    stock_g_per_L : float, optional
        Strength of the stock solution.

    Returns
    -------
    Addition or None
        None also where nothing was titrated: an addition cannot be worked out from a pH.
    """
    use, free = reagent_use(test), test.free_reagent_g_per_L
    target = test.set_point_g_per_L or test.reagent_g_per_L
    if use is None or free is None or np.isnan(free).all() or not target:
        return None
    at = int(np.flatnonzero(~np.isnan(free))[-1])
    ledger = solution_ledger(test)
    volume = float(ledger.end_mL if at == free.size - 1 else ledger.volume_mL[at + 1])
    found = float(use.after_g_per_L[at])
    if found >= (1.0 - _NEAR) * target or volume <= 0.0:
        return None
    stock = None
    if stock_g_per_L is not None:
        stock = stock_to_set_point_mL(found, target, volume, stock_g_per_L)
    grams = grams_to_set_point(found, target, volume)
    time_h = float(test.time_h[at])
    return Addition(test.reagent or "", target, found, time_h, volume, grams, stock)


def due_table(due: Iterable[Due]) -> ResultTable:
    """Return one row a running test: next sample, what to add, extraction so far."""
    columns = (
        Column("test", "Test"),
        Column("last_h", "Last reading", "h"),
        Column("next_h", "Next sample", "h"),
        Column("next_moment", "That is"),
        Column("why", "Because"),
        Column("add", "To add now"),
        Column("extraction", "So far, on the assay head"),
        Column("close_out", "A close-out needs"),
    )
    records = (_record(one) for one in due)
    caption = "Provisional: tests still running. Hours since the start of each test."
    return ResultTable.from_records("due", columns, records, caption)


def _record(one: Due) -> dict[str, Any]:
    so_far = "; ".join(
        f"{analyte} {100 * value:.1f} +- {100 * sd:.2g} %"
        for analyte, (value, sd) in one.extraction.items()
    )
    return {
        "test": one.test,
        "last_h": one.last_h,
        "next_h": one.next_h,
        "next_moment": one.next_moment,
        "why": one.why,
        "add": one.addition.text if one.addition is not None else "",
        "extraction": so_far,
        "close_out": ", ".join(one.close_out),
    }
