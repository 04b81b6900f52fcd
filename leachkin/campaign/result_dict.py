"""A result as plain types: the layout of results.json, version 1. What is not finite is null."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import asdict
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.bands import Band, Quantity, plain_number
from leachkin.campaign.diagnostics_dict import diagnostics_dict, posterior_dict
from leachkin.campaign.evidence_tables import evidence_tables
from leachkin.campaign.result import SCHEMA_VERSION, CampaignResult
from leachkin.campaign.stage_cementation_more import CementationMore
from leachkin.campaign.stage_results import (
    BudgetStage,
    CementationStage,
    GangueStage,
    HeapStage,
    KineticsStage,
    TankStage,
)
from leachkin.problems import Problem
from leachkin.reagents import budget_tables
from leachkin.result_table import ResultTable
from leachkin.testwork import MetalBalance, SizeDistribution


def result_dict(result: CampaignResult) -> dict[str, Any]:
    """Return a result as plain types for JSON; absent stages are null."""
    return {
        "schema": SCHEMA_VERSION,
        "run": result.run.to_dict(),
        "title": result.title,
        "about": dict(result.about),
        "headline": list(result.headline()),
        "balance": {key: [_balance(b) for b in rows] for key, rows in result.balances.items()},
        "kinetics": {key: _kinetics(stage) for key, stage in result.kinetics.items()},
        "gangue": _or_none(result.gangue, _gangue),
        "tank": _or_none(result.tank, _tank),
        "heap": _or_none(result.heap, _heap),
        "cementation": _or_none(result.cementation, _cementation),
        "cementation_more": _or_none(result.cementation_more, _cementation_more),
        "budget": _or_none(result.budget, _budget),
        "cautions": [_plain(asdict(caution)) for caution in result.cautions],
        "assumed": [_plain(asdict(row)) for row in result.assumed],
        "excluded": list(result.excluded),
        "problems": [_problem(problem) for problem in result.problems],
        "notes": list(result.notes),
    }


def _or_none(stage: Any, convert: Any) -> dict[str, Any] | None:
    return None if stage is None else convert(stage)


def _problem(problem: Problem) -> dict[str, Any]:
    return asdict(problem)


def _numbers(values: NDArray[np.float64] | Iterable[float] | None) -> list[float | None] | None:
    return None if values is None else [plain_number(value) for value in np.ravel(list(values))]


def _band(band: Band | None) -> dict[str, Any] | None:
    if band is None:
        return None
    return {
        "value": _numbers(band.value),
        "unit": band.unit,
        "low": _numbers(band.low),
        "high": _numbers(band.high),
        "level": band.level,
    }


def _quantity(quantity: Quantity | None) -> dict[str, Any] | None:
    return None if quantity is None else quantity.to_dict()


def _sizes(sizes: SizeDistribution) -> dict[str, Any]:
    return {
        "size_mm": _numbers(sizes.size_mm),
        "mass_share": _numbers(sizes.mass_share),
        "metal_share": _numbers(sizes.metal_share),
    }


def _balance(balance: MetalBalance) -> dict[str, Any]:
    names = (
        "final_on_assay_head",
        "final_on_calculated_head",
        "final_by_tail",
        "head_assay_kg_per_t",
        "head_calculated_kg_per_t",
        "closure",
        "tail_kg_per_t",
        "residue_g",
    )
    curves = (
        "time_h",
        "dissolved_g",
        "uncorrected_g",
        "extraction_on_assay_head",
        "extraction_on_calculated_head",
    )
    return {
        "test": balance.test,
        "analyte": balance.analyte,
        **{name: plain_number(getattr(balance, name)) for name in names},
        **{name: _numbers(getattr(balance, name)) for name in curves},
        "sd": {name: plain_number(value) for name, value in balance.sd.items()},
        "provisional": balance.provisional,
        "problems": [_problem(problem) for problem in balance.problems],
    }


def _kinetics(stage: KineticsStage) -> dict[str, Any]:
    fit, ranking, reference = stage.fit, stage.ranking, stage.law.reference
    key = stage.key
    return {
        "law": stage.law.name,
        "source": stage.source,
        "reference": {
            "temperature_K": reference.temperature_K,
            "size_mm": reference.size_mm,
            "reagent_g_per_L": reference.reagent_g_per_L,
        },
        "ultimate": {
            "size_mm": _numbers(stage.law.ultimate_size_mm),
            "value": _numbers(stage.law.ultimate),
        },
        "intervals": stage.intervals or None,
        "parameters": [] if fit is None else [_parameter(p) for p in fit.parameters],
        "posterior": None if fit is None else posterior_dict(fit.sampled),
        "alternatives": [
            {"law": one.law.name, "parameters": [_parameter(p) for p in one.parameters]}
            for one in stage.alternatives
        ],
        "diagnostics": diagnostics_dict(stage.diagnostics),
        "n_tests": None if fit is None else fit.n_tests,
        "n_points": None if fit is None else fit.n_points,
        "degrees_of_freedom": None if fit is None else fit.degrees_of_freedom,
        "sum_of_squares": None if fit is None else plain_number(fit.sum_of_squares),
        "converged": None if fit is None else fit.converged,
        "warnings": [] if fit is None else list(fit.warnings),
        "ranking": [] if ranking is None else _records(ranking.table()),
        "verdict": None if ranking is None else ranking.verdict,
        "indistinguishable": [] if ranking is None else list(ranking.indistinguishable),
        "evidence": {
            table.name.removesuffix(f"_{key}"): _records(table)
            for table in evidence_tables(stage, key)
        },
        "tests": [one.test for one in stage.observed],
        "excluded": list(stage.excluded),
        "notes": list(stage.notes),
    }


def _parameter(parameter: Any) -> dict[str, Any]:
    return {
        "name": parameter.name,
        "value": plain_number(parameter.value),
        "unit": parameter.unit,
        "standard_error": plain_number(parameter.standard_error),
        "low": plain_number(parameter.low),
        "high": plain_number(parameter.high),
        "level": parameter.level,
        "method": parameter.method,
        "why_no_interval": parameter.why_no_interval,
        "remark": parameter.remark,
    }


def _records(table: ResultTable) -> list[dict[str, Any]]:
    return [{key: _plain(cell) for key, cell in row.items()} for row in table.to_records()]


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, np.ndarray):
        return _numbers(value)
    if isinstance(value, bool | str | int) or value is None:
        return value
    return plain_number(value)


def _gangue(stage: GangueStage) -> dict[str, Any]:
    law = stage.law
    names = (
        "fast_kg_per_t",
        "fast_h",
        "slow_kg_per_t",
        "slow_h",
        "activation_energy_kJ_per_mol",
        "reference_temperature_K",
    )
    return {
        "source": stage.source,
        **{name: plain_number(getattr(law, name)) for name in names},
        "parameters": [] if stage.fit is None else [_parameter(p) for p in stage.fit.parameters],
        "n_tests": len(stage.readings),
        "notes": list(stage.notes),
    }


def _tank(stage: TankStage) -> dict[str, Any]:
    return {
        "key": stage.key,
        "grade": stage.grade,
        "residence_times_h": _numbers(stage.residence_times_h),
        "extraction": _band(stage.extraction),
        "reagent_g_per_L": _band(stage.reagent_g_per_L),
        "sizes": _sizes(stage.sizes),
        "temperature_K": stage.temperature_K,
        "head_kg_per_t": stage.head_kg_per_t,
        "solids_kg_per_m3": stage.solids_kg_per_m3,
        "flow_m3_per_h": stage.flow_m3_per_h,
        "ore_rate_t_per_month": stage.ore_rate_t_per_month,
        "metal_taken_kg_per_t": _quantity(stage.metal_taken_kg_per_t),
        "gangue_taken_kg_per_t": _quantity(stage.gangue_taken_kg_per_t),
        **_laws(stage),
        "band_holds": list(stage.contains),
        "outside_the_data": list(stage.outside),
        "notes": list(stage.notes),
    }


def _laws(stage: TankStage | HeapStage) -> dict[str, Any]:
    """The other laws not rejected, what they change, and what makes the band wide."""
    return {
        "other_laws": [asdict(one) for one in stage.other_laws],
        "law_verdict": stage.law_verdict,
        "band_parts": [
            {"cause": one.cause, "figure": _quantity(one.figure), "holds": one.holds}
            for one in stage.band_parts
        ],
    }


def _heap(stage: HeapStage) -> dict[str, Any]:
    curves = (
        "extracted",
        "ore_limited",
        "particles_alone",
        "recovered",
        "in_solution",
        "supplied_kg_per_t",
        "taken_kg_per_t",
        "pls_g_per_L",
    )
    figures = (
        "metal_taken_kg_per_t",
        "gangue_taken_kg_per_t",
        "metal_extracted_kg_per_t",
        "mean_pls_g_per_L",
    )
    plain = (
        "ore_rate_t_per_month",
        "area_m2",
        "flow_m3_per_h",
        "cycle_d",
        "head_kg_per_t",
        "temperature_K",
        "cure_kg_per_t",
    )
    return {
        "key": stage.key,
        "grade": stage.grade,
        "days": _numbers(stage.days),
        "m3_per_t": _numbers(stage.m3_per_t),
        **{name: _band(getattr(stage, name)) for name in curves},
        **{name: _quantity(getattr(stage, name)) for name in figures},
        **{name: plain_number(getattr(stage, name)) for name in plain},
        "rules": list(stage.result.rules),
        "first_solution_day": plain_number(stage.result.first_solution_day),
        "sizes": _sizes(stage.sizes),
        **_laws(stage),
        "band_holds": list(stage.contains),
        "outside_the_data": list(stage.outside),
        "notes": list(stage.notes),
    }


def _cementation(stage: CementationStage) -> dict[str, Any]:
    quantities = (
        "net_kg_per_m3",
        "net_kg_per_kg",
        "gross_kg_per_kg",
        "recovered_kg_per_t",
        "precipitant_kg_per_t",
        "acid_taken_kg_per_t",
    )
    demand = stage.demand
    hydrogen = demand.hydrogen_Nm3_per_h
    return {
        "precipitant": stage.precipitant.kind,
        "recovery": stage.recovery,
        "basis": stage.basis,
        "flow_m3_per_h": stage.flow_m3_per_h,
        "solution_m3_per_t": stage.solution_m3_per_t,
        "solution_g_per_L": {m: plain_number(g) for m, g in stage.solution.metals.items()},
        **{name: _quantity(getattr(stage, name)) for name in quantities},
        "hydrogen_Nm3_per_h": None if hydrogen is None else plain_number(hydrogen),
        "provisional": demand.provisional,
        "sinks": _records(demand.table()),
        "band_holds": list(stage.contains),
        "notes": list(stage.notes),
    }


def _cementation_more(found: CementationMore) -> dict[str, Any]:
    course = found.course
    return {
        "rates": {
            metal: {
                "law": ranking.best.law_name,
                "parameters": [_parameter(p) for p in ranking.best.parameters],
                "converged": ranking.best.converged,
                "verdict": ranking.verdict,
                "indistinguishable": list(ranking.indistinguishable),
                "control": list(ranking.best.control),
            }
            for metal, ranking in found.rankings.items()
        },
        "mixed_potential": None
        if course is None
        else {
            "fitted": course.fitted,
            "remark": course.remark,
            "factor_kg_per_kg": plain_number(course.factor_kg_per_kg),
            "shares": {name: plain_number(share) for name, share in course.shares.items()},
        },
        "tables": {table.name: _records(table) for table in found.tables()},
        "notes": list(found.notes),
    }


def _budget(stage: BudgetStage) -> dict[str, Any]:
    return {
        "currency": stage.currency,
        "allowance": stage.allowance,
        "cost_per_month": _quantity(stage.cost_per_month),
        "cost_per_t_ore": _quantity(stage.cost_per_t_ore),
        "cost_per_kg_metal": _quantity(stage.cost_per_kg_metal),
        "tables": {
            table.name: _records(table) for table in budget_tables(stage.budget, stage.drawn)
        },
        "basis": list(stage.basis),
        "band_holds": list(stage.contains),
        "outside_the_data": list(stage.outside),
        "notes": list(stage.notes),
    }
