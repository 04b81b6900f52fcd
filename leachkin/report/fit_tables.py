"""Tables of a fit for people: an Arrhenius line, and straightened lines as a diagnostic."""

from __future__ import annotations

import numpy as np

from leachkin.campaign import KineticsStage
from leachkin.kinetics import ArrheniusFit, FitResult, straightened_time
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed

_SINGLE = ("film", "ash_layer", "chemical")


def arrhenius_table(fit: ArrheniusFit) -> ResultTable:
    """Return the activation energy with its interval and what it rests on.

    Parameters
    ----------
    fit : ArrheniusFit

    Returns
    -------
    ResultTable
    """
    level = f"{100 * fit.level:g} %"
    columns = (
        Column("quantity", "Quantity"),
        Column("value", "Value"),
        Column("standard_error", "Standard error", digits=2),
        Column("low", f"Low, {level}"),
        Column("high", f"High, {level}"),
        Column("unit", "Unit"),
        Column("remark", "Remark"),
    )
    remark = fit.why_no_interval or f"{fit.degrees_of_freedom} degrees of freedom; {fit.method}"
    records = [
        {
            "quantity": "activation energy",
            "value": fit.activation_energy_kJ_per_mol,
            "standard_error": fit.standard_error_kJ_per_mol,
            "low": fit.low,
            "high": fit.high,
            "unit": "kJ/mol",
            "remark": remark,
        },
        {
            "quantity": "ln of the prefactor",
            "value": fit.ln_prefactor,
            "standard_error": fit.ln_prefactor_standard_error,
            "remark": "in the unit of the rate constant; moves together with the energy",
        },
    ]
    caption = f"Arrhenius line through {len(fit.temperature_K)} temperatures"
    return ResultTable.from_records("activation_energy", columns, records, caption)


def straightened_table(stage: KineticsStage) -> ResultTable | None:
    """Return times from straightened lines beside the fitted ones, for one curve only.

    Parameters
    ----------
    stage : KineticsStage

    Returns
    -------
    ResultTable or None
        None where more than one test, or no law with a single resistance, was fitted. The
        straightened values are a diagnostic: straightening bends the errors.
    """
    if len(stage.observed) != 1 or stage.ranking is None:
        return None
    one = stage.observed[0]
    if set(one.row_kind) != {"extraction"}:
        return None
    records = [
        _straightened(one, row.law, row.fit)
        for row in stage.ranking.rows
        if row.fit is not None and row.law in _SINGLE
    ]
    if not records:
        return None
    columns = (
        Column("law", "Law"),
        Column("fitted", "Time for complete conversion, fitted", "h"),
        Column("ultimate", "Ultimate extraction of the fit"),
        Column("straightened", "The same by the straightened line", "h"),
        Column("remark", "Remark"),
    )
    caption = (
        "DIAGNOSTIC ONLY: the line through the origin of g(X) against time, ultimate extraction "
        "as fitted. It weights the points wrongly; use the fitted time."
    )
    return ResultTable.from_records("straightened", columns, records, caption)


def _straightened(one: Observed, law: str, fit: FitResult) -> dict[str, object]:
    ultimate = float(np.max(fit.law.ultimate))
    share = one.value / ultimate
    inside = (share >= 0) & (share < 1)
    record: dict[str, object] = {
        "law": law,
        "fitted": fit.parameter(f"tau_{law}").value,
        "ultimate": ultimate,
    }
    if inside.sum() < 2:
        return record | {"remark": "fewer than two points below the ultimate extraction"}
    left_out = int((~inside).sum())
    note = f"{left_out} points at or above the ultimate left out" if left_out else ""
    time = straightened_time(one.row_time_h[inside], share[inside], law)
    return record | {"straightened": float(time), "remark": note}
