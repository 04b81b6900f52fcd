"""Tables of tests, balances and readings."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.result_table import Column, ResultTable
from leachkin.testwork.records import MetalBalance, Test

#: Metals whose grades people read in g/t.
_IN_G_PER_T = frozenset({"Au", "Ag", "Pt", "Pd", "Rh", "Ru", "Ir", "Os"})


def balance_table(balances: Iterable[MetalBalance]) -> ResultTable:
    """Return one row a balance: heads, tail, closure, three extractions with their sd, correction.

    The correction is what aliquots and make-up add to the last reading, in points on the best head
    there is.
    """
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("analyte", "Analyte"),
        Column("on_calculated_head", "Extraction, solution / calculated head", "%"),
        Column("on_calculated_head_sd", "sd", "points", 2),
        Column("on_assay_head", "Extraction, solution / assay head", "%"),
        Column("on_assay_head_sd", "sd (assay head)", "points", 2),
        Column("by_tail", "Extraction, assay head less tail", "%"),
        Column("by_tail_sd", "sd (tail)", "points", 2),
        Column("head_assay", "Assay head"),
        Column("head_calculated", "Calculated head"),
        Column("tail", "Tail"),
        Column("grade_unit", "Unit of grades"),
        Column("closure", "Closure, calculated / assay head"),
        Column("residue_g", "Residue", "g"),
        Column("correction", "Correction for aliquots", "points", 2),
        Column("provisional", "Provisional"),
        Column("remarks", "Remarks"),
    )
    return ResultTable.from_records("metal balance", columns, map(_balance_record, balances))


def _balance_record(balance: MetalBalance) -> dict[str, Any]:
    factor, unit = (1000.0, "g/t") if balance.analyte in _IN_G_PER_T else (0.1, "%")
    record: dict[str, Any] = {
        "test": balance.test,
        "domain": balance.key.rsplit("/", 1)[0],
        "analyte": balance.analyte,
        "head_assay": _times(balance.head_assay_kg_per_t, factor),
        "head_calculated": _times(balance.head_calculated_kg_per_t, factor),
        "tail": _times(balance.tail_kg_per_t, factor),
        "grade_unit": unit,
        "closure": balance.closure,
        "residue_g": balance.residue_g,
        "correction": _correction_points(balance),
        "provisional": balance.provisional,
        "remarks": len(balance.problems),
    }
    for name in ("on_calculated_head", "on_assay_head"):
        record[name] = _times(getattr(balance, f"final_{name}"), 100.0)
        record[f"{name}_sd"] = _times(balance.sd.get(f"final_{name}"), 100.0)
    record["by_tail"] = _times(balance.final_by_tail, 100.0)
    record["by_tail_sd"] = _times(balance.sd.get("final_by_tail"), 100.0)
    return record


def _times(value: float | None, factor: float) -> float | None:
    return None if value is None else factor * value


def _correction_points(balance: MetalBalance) -> float | None:
    for extraction in (balance.extraction_on_calculated_head, balance.extraction_on_assay_head):
        known = np.flatnonzero(~np.isnan(extraction))
        if known.size and balance.dissolved_g[known[-1]] > 0.0:
            last = known[-1]
            share = balance.correction_g[last] / balance.dissolved_g[last]
            return float(100.0 * extraction[last] * share)
    return None


def extraction_table(balances: Iterable[MetalBalance]) -> ResultTable:
    """Return one row a reading: metal dissolved and the extraction on both heads."""
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("analyte", "Analyte"),
        Column("time_h", "Time", "h"),
        Column("dissolved_g", "Dissolved", "g"),
        Column("uncorrected_g", "Concentration x starting volume", "g"),
        Column("on_calculated_head", "Extraction, calculated head", "%"),
        Column("on_assay_head", "Extraction, assay head", "%"),
    )
    records = (
        {
            "test": balance.test,
            "domain": balance.key.rsplit("/", 1)[0],
            "analyte": balance.analyte,
            "time_h": balance.time_h[i],
            "dissolved_g": balance.dissolved_g[i],
            "uncorrected_g": balance.uncorrected_g[i],
            "on_calculated_head": _percent(balance.extraction_on_calculated_head[i]),
            "on_assay_head": _percent(balance.extraction_on_assay_head[i]),
        }
        for balance in balances
        for i in np.flatnonzero(~np.isnan(balance.dissolved_g))
    )
    return ResultTable.from_records("extraction by reading", columns, records)


def _percent(fraction: float) -> float | None:
    return None if np.isnan(fraction) else 100.0 * float(fraction)


def test_inventory(tests: Sequence[Test]) -> ResultTable:
    """Return one row a test, those that are running or excluded too, with its state."""
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("kind", "Kind"),
        Column("solids_g", "Dry solids", "g"),
        Column("solution_mL", "Solution", "mL"),
        Column("size_mm", "Mean size", "mm"),
        Column("temperature_degC", "Temperature", "degC"),
        Column("reagent", "Reagent"),
        Column("reagent_g_per_L", "Reagent at the start", "g/L"),
        Column("aliquots", "Aliquots"),
        Column("readings", "Readings"),
        Column("last_h", "Last reading", "h"),
        Column("analytes", "Analytes"),
        Column("state", "State"),
        Column("remarks", "Remarks"),
    )
    return ResultTable.from_records("tests", columns, map(_test_record, tests))


test_inventory.__test__ = False  # type: ignore[attr-defined]  # not a test case for pytest


def _test_record(test: Test) -> dict[str, Any]:
    return {
        "test": test.name,
        "domain": test.domain,
        "kind": test.kind,
        "solids_g": test.solids_g,
        "solution_mL": test.solution_mL,
        "size_mm": test.sizes.mass_mean_mm if test.sizes is not None else None,
        "temperature_degC": round(test.temperature_K - ZERO_CELSIUS_K, 6),
        "reagent": test.reagent,
        "reagent_g_per_L": test.reagent_g_per_L,
        "aliquots": test.aliquots or "not written",
        "readings": int(test.time_h.size),
        "last_h": float(test.time_h[-1]) if test.time_h.size else None,
        "analytes": ", ".join(test.solution),
        "state": test.state,
        "remarks": len(test.problems),
    }
