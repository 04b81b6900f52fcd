"""One bottle's arithmetic, line by line, with the numbers put in."""

from __future__ import annotations

import numpy as np

from leachkin.testwork.balance import leached_metal, metal_balance, undissolved_metal
from leachkin.testwork.reconcile import reconcile_balance
from leachkin.testwork.reconciliation_words import reconciliation_lines
from leachkin.testwork.records import MetalBalance, Test
from leachkin.testwork.recursion import (
    assays_for_balance,
    brought_of_whole_charge_mg,
    solution_ledger,
)
from leachkin.testwork.settings import BalanceLimits

_SHOWN_TERMS = 12
#: Share of the starting solution below which a loss of water is rounding.
_SHOWN_LOSS = 1e-6


def explain_balance(test: Test, analyte: str, *, limits: BalanceLimits | None = None) -> list[str]:
    """Return the arithmetic of a metal balance as lines of text.

    Parameters
    ----------
    test : Test
    analyte : str
    limits : BalanceLimits, optional

    Returns
    -------
    list of str
        About a dozen lines, each a formula with its numbers and units, then what each measurement
        is adjusted by where the balance is reconciled; what is missing is said.

    Raises
    ------
    InputProblems
        If the test has no such analyte.
    """
    balance = metal_balance(test, analyte, limits=limits)
    lines = [_charge(test, analyte), *_volumes(test)]
    lines += _solution(test, analyte, balance)
    lines += _solids(test, analyte, balance)
    lines += _final(test, balance)
    lines += _by_reading(balance)
    reconciled = reconcile_balance(test, analyte, limits=limits)
    return lines if reconciled is None else [*lines, *reconciliation_lines(reconciled)]


def _charge(test: Test, analyte: str) -> str:
    return (
        f"{test.name}, {analyte}: {test.kind}, domain {test.domain}, {test.solids_g:g} g dry "
        f"solids in {test.solution_mL:g} mL"
    )


def _volumes(test: Test) -> list[str]:
    if not test.time_h.size:
        return ["No readings."]
    ledger = solution_ledger(test)
    policy = test.aliquots or "policy not written, replaced taken meanwhile"
    low, high = ledger.volume_mL.min(), ledger.volume_mL.max()
    span = f"{low:.6g} mL" if low == high else f"{low:.6g} to {high:.6g} mL"
    lines = [f"Aliquots: {policy}; volume before each sample {span}"]
    lost = float(ledger.evaporated_mL.sum())
    if abs(lost) > _SHOWN_LOSS * ledger.start_mL:
        lines.append(f"Water lost to the air by the volumes measured: {lost:.4g} mL in all")
    if ledger.share[-1] < 1.0:
        lines.append(
            f"Slurry samples leave {100 * ledger.share[-1]:.4g} % of the charge in the vessel; "
            "metal is that of the whole charge"
        )
    return lines


def _solution(test: Test, analyte: str, balance: MetalBalance) -> list[str]:
    if analyte not in test.solution or np.isnan(test.solution[analyte].value).all():
        return [f"No {analyte} readings."]
    if np.isnan(balance.dissolved_g).all():
        words = f"Carbon holds {analyte}: readings give no extraction by time."
        return [words, *_filtrate(test, analyte, balance)]
    ledger, used = solution_ledger(test), assays_for_balance(test, analyte)
    last = int(np.flatnonzero(~np.isnan(balance.dissolved_g))[-1])
    brought = brought_of_whole_charge_mg(test, analyte, ledger)
    weights = ledger.whole_charge_weights_mL[:last]
    removed_g = float(weights @ used.value[:last]) / 1000.0
    now_mL = float(ledger.volume_mL[last] / ledger.share[last])
    in_vessel_g = now_mL * float(used.value[last]) / 1000.0
    lines = [
        f"Taken out before {test.time_h[last]:g} h: "
        f"{_terms(used.value[:last], weights)} = {removed_g:.4g} g {analyte}",
        f"In the vessel at {test.time_h[last]:g} h: {used.value[last]:.4g} g/L x "
        f"{now_mL:.6g} mL / 1000 = {in_vessel_g:.4g} g",
    ]
    minus = f" - {brought[last] / 1000.0:.4g} g brought in" if brought[last] else ""
    lines.append(
        f"Dissolved by {test.time_h[last]:g} h: {in_vessel_g:.4g} g + {removed_g:.4g} g{minus} = "
        f"{balance.dissolved_g[last]:.4g} g (without correction {used.value[last]:.4g} g/L x "
        f"{ledger.start_mL:g} mL / 1000 = {balance.uncorrected_g[last]:.4g} g)"
    )
    return lines + _filtrate(test, analyte, balance)


def _terms(concentrations: np.ndarray, volumes: np.ndarray) -> str:
    """Sum of concentration times volume, written out."""
    terms = [f"{c:.4g}" for c in concentrations[:_SHOWN_TERMS]]
    if not terms or not volumes.any():
        return "nothing"
    if concentrations.size > _SHOWN_TERMS:
        terms.append("...")
    if np.unique(volumes).size == 1:
        return f"({' + '.join(terms)}) g/L x {volumes[0]:g} mL / 1000"
    pairs = [
        f"{c:.4g} x {v:.6g}"
        for c, v in zip(concentrations[:_SHOWN_TERMS], volumes[:_SHOWN_TERMS], strict=True)
    ]
    return f"({' + '.join(pairs)}{' + ...' if len(terms) > _SHOWN_TERMS else ''}) g/L mL / 1000"


def _filtrate(test: Test, analyte: str, balance: MetalBalance) -> list[str]:
    if not leached_metal(test, analyte).by_filtrate:
        carbon = [p for p in test.products if p.is_carbon]
        if not any(analyte in p.grade for p in carbon):
            return []
    parts = [
        f"{p.name} {p.grade[analyte][0]:.4g} {'g/L' if p.is_solution else 'kg/t'} x "
        f"{p.amount:g} {'mL' if p.is_solution else 'g'} / 1000"
        for p in test.products
        if p.is_dissolved_metal and analyte in p.grade and p.amount is not None
    ]
    return [
        f"Dissolved at close-out, with all aliquots: {' + '.join(parts)} -> "
        f"{balance.final_dissolved_g:.4g} g"
    ]


def _solids(test: Test, analyte: str, balance: MetalBalance) -> list[str]:
    solids = undissolved_metal(test, analyte)
    if solids is None:
        return [f"No {analyte} tail: the figures are provisional, on the assay head."]
    mass = f"{solids.whole_mass_g:.6g} g"
    if not solids.mass_is_known:
        mass += " (the charge)"
    elif solids.share < 1.0:
        mass += f" ({solids.mass_g:g} g weighed / {solids.share:.4g})"
    lines = [
        f"Left in the residue: {mass} x {solids.grade_kg_per_t:.4g} kg/t / 1000 = "
        f"{solids.metal.value_g:.4g} g"
    ]
    gravity = balance.before_leach_g or 0.0
    plus = f" + {gravity:.4g} g in the gravity concentrate" if gravity else ""
    if balance.head_calculated_kg_per_t is not None and balance.final_dissolved_g is not None:
        lines.append(
            f"Calculated head: ({balance.final_dissolved_g:.4g} g + {solids.metal.value_g:.4g} "
            f"g{plus}) "
            f"/ {test.solids_g:g} g x 1000 = {balance.head_calculated_kg_per_t:.4g} "
            f"{_give_or_take(balance, 'head_calculated_kg_per_t', 1.0)} kg/t"
        )
    return lines


def _final(test: Test, balance: MetalBalance) -> list[str]:
    lines = []
    dissolved, left = balance.final_dissolved_g, balance.final_undissolved_g
    head, gravity = balance.head_assay_kg_per_t, balance.before_leach_g
    less = f" - {gravity:.4g} g" if gravity else ""
    if balance.final_on_calculated_head is not None:
        lines.append(
            f"Extraction, solution over calculated head: {dissolved:.4g} g / ({dissolved:.4g} g + "
            f"{left:.4g} g) = {_figure(balance, 'final_on_calculated_head')}"
        )
    if balance.final_on_assay_head is not None and head is not None:
        lines.append(
            f"Extraction, solution over assay head: {dissolved:.4g} g / ({test.solids_g:g} g x "
            f"{head:.4g} kg/t / 1000{less}) = {_figure(balance, 'final_on_assay_head')}"
        )
    if balance.final_by_tail is not None and head is not None:
        lines.append(
            f"Extraction, assay head less tail: 1 - {left:.4g} g / ({test.solids_g:g} g x "
            f"{head:.4g} kg/t / 1000{less}) = {_figure(balance, 'final_by_tail')}"
        )
    if balance.final_with_gravity is not None:
        lines.append(
            f"Gravity concentrate and solution together, over the calculated head: "
            f"{_figure(balance, 'final_with_gravity')}"
        )
    if balance.closure is not None and head is not None:
        lines.append(
            f"Closure, calculated over assay head: {balance.head_calculated_kg_per_t:.4g} / "
            f"{head:.4g} = {balance.closure:.3f} {_give_or_take(balance, 'closure', 1.0)}"
        )
    return lines


def _figure(balance: MetalBalance, name: str) -> str:
    return f"{100.0 * getattr(balance, name):.2f} {_give_or_take(balance, name, 100.0)} %"


def _give_or_take(balance: MetalBalance, name: str, factor: float) -> str:
    return f"+- {factor * balance.sd[name]:.2g}"


def _by_reading(balance: MetalBalance) -> list[str]:
    for extraction, basis in (
        (balance.extraction_on_calculated_head, "calculated head"),
        (balance.extraction_on_assay_head, "assay head"),
    ):
        known = ~np.isnan(extraction)
        if known.any():
            points = ", ".join(
                f"{t:g} h {100.0 * x:.2f} %"
                for t, x in zip(balance.time_h[known], extraction[known], strict=True)
            )
            return [f"By reading, on the {basis}: {points}"]
    return []
