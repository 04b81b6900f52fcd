"""A heap's tables by day; over draws, medians with the band of the main numbers."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from leachkin.result_table import Column, ResultTable
from leachkin.scaleup.bands import bands

if TYPE_CHECKING:
    from leachkin.scaleup.heap import HeapResult

Array = NDArray[np.float64]
PERCENT = 100.0

_DAY = Column("day", "Day", "d")
_VOLUME = Column("m3_per_t", "Solution applied", "m3/t")
_OF_METAL = "% of all the metal"


def heap_tables(result: HeapResult, level: float = 0.8) -> tuple[ResultTable, ...]:
    """Return the tables of a heap: extraction, supply against demand, solution.

    Parameters
    ----------
    result : HeapResult
    level : float
        Share of the draws in the bands.

    Returns
    -------
    tuple of ResultTable
    """
    return (_extraction(result, level), _supply(result), _solution(result, level))


def _extraction(result: HeapResult, level: float) -> ResultTable:
    columns = [
        _DAY,
        _VOLUME,
        Column("particles_alone", "Particles alone, reagent everywhere", _OF_METAL),
        Column("ore_limited", "Ore-limited: reagent never short", _OF_METAL),
        Column("extracted", "Extracted by the solution applied", _OF_METAL),
        *_band_columns(result, level, "extracted", "Extracted", _OF_METAL),
        Column("recovered", "Recovered to date", _OF_METAL),
        *_band_columns(result, level, "recovered", "Recovered", _OF_METAL),
        Column("in_solution", "Dissolved, still in the bed", _OF_METAL),
        Column("rules", "What rules"),
    ]
    names = ("particles_alone", "ore_limited", "extracted", "recovered", "in_solution")
    values: dict[str, Any] = {name: PERCENT * middle(getattr(result, name)) for name in names}
    values |= _bands_of(result, level, "extracted", PERCENT)
    values |= _bands_of(result, level, "recovered", PERCENT)
    values["rules"] = np.array(result.rules, dtype=object)
    caption = (
        "Applied: what the solution put on by that day does on its whole way through the bed. "
        "Recovered and still in the bed: by the clock."
    )
    return _table("heap_extraction", columns, result, values, caption)


def _supply(result: HeapResult) -> ResultTable:
    columns = [
        _DAY,
        _VOLUME,
        Column("supplied_kg_per_t", "Brought by irrigation", "kg/t"),
        Column("wanted_kg_per_t", "Taken if never short, with the cure", "kg/t"),
        Column("taken_kg_per_t", "Taken, with the cure", "kg/t"),
        Column("reagent_rules", "Reagent rules in", "% of draws"),
        Column("rules", "What rules"),
    ]
    names = ("supplied_kg_per_t", "wanted_kg_per_t", "taken_kg_per_t")
    values: dict[str, Any] = {name: middle(getattr(result, name)) for name in names}
    ruled = np.atleast_2d(result.reagent_rules).mean(axis=0)
    values["reagent_rules"] = PERCENT * ruled
    values["rules"] = np.array(result.rules, dtype=object)
    return _table("heap_supply", columns, result, values, "Reagent brought against reagent taken.")


def _solution(result: HeapResult, level: float) -> ResultTable:
    columns = [
        _DAY,
        _VOLUME,
        Column("pls_g_per_L", "Metal in the solution that leaves", "g/L"),
        *_band_columns(result, level, "pls_g_per_L", "Metal that day", "g/L"),
        Column("pls_reagent_g_per_L", "Reagent in the solution that leaves", "g/L"),
        Column("mean_pls_g_per_L", "Mean metal: recovered over solution out", "g/L"),
        Column("drained_pls_g_per_L", "Mean metal when all solution is out", "g/L"),
        Column("metal_kg_per_t", "Metal extracted by the solution applied", "kg/t"),
    ]
    names = [column.key for column in columns[2:] if not column.key.endswith(("_low", "_high"))]
    values: dict[str, Any] = {name: middle(getattr(result, name)) for name in names}
    values |= _bands_of(result, level, "pls_g_per_L", 1.0)
    first = float(np.median(result.first_solution_day))
    caption = (
        f"First solution on day {first:.3g}. The metal of the cure leaves with the first bed "
        "volume of solution."
    )
    return _table("heap_solution", columns, result, values, caption)


def middle(values: Array) -> Array:
    """Return the median over draws, or the values where there is one set."""
    return np.asarray(np.median(values, axis=0) if np.ndim(values) > 1 else values)


def _has_draws(result: HeapResult) -> bool:
    return bool(result.batch_shape) and result.batch_shape[0] > 1


def _band_columns(
    result: HeapResult, level: float, key: str, heading: str, unit: str
) -> list[Column]:
    if not _has_draws(result):
        return []
    band = bands(getattr(result, key), level)
    return [
        Column(f"{key}_low", f"{heading}, {band.low_name}", unit),
        Column(f"{key}_high", f"{heading}, {band.high_name}", unit),
    ]


def _bands_of(result: HeapResult, level: float, key: str, factor: float) -> dict[str, Array]:
    if not _has_draws(result):
        return {}
    band = bands(getattr(result, key), level)
    return {f"{key}_low": factor * band.low, f"{key}_high": factor * band.high}


def _table(
    name: str, columns: list[Column], result: HeapResult, values: dict[str, Any], caption: str
) -> ResultTable:
    shared = {"day": result.days, "m3_per_t": middle(result.m3_per_t)}
    records = [
        {key: column[row] for key, column in (shared | values).items()}
        for row in range(len(result.days))
    ]
    return ResultTable.from_records(name, columns, records, caption)
