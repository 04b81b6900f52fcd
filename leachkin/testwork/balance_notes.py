"""What a chemist would remark about a metal balance."""

from __future__ import annotations

from typing import get_args

import numpy as np

from leachkin.problems import Problem
from leachkin.testwork.falls import fall_of
from leachkin.testwork.records import AliquotPolicy, MetalBalance, Test
from leachkin.testwork.settings import BalanceLimits

#: Difference of two extractions that nobody would ask about.
_SMALL_DIFFERENCE = 0.0005


def balance_notes(
    test: Test, balance: MetalBalance, mass_is_known: bool, limits: BalanceLimits | None = None
) -> list[Problem]:
    """Return the remarks about a balance, most important first."""
    chosen = limits or BalanceLimits()
    return [
        *_no_tail(test, balance),
        *_no_head(test, balance),
        *_carbon(test, balance),
        *_gravity(test, balance),
        *_over_extraction(test, balance, chosen),
        *_closure(test, balance, chosen),
        *_residue_mass(test, balance, mass_is_known, chosen.most_mass_loss),
        *_fall(test, balance),
        *_bounded(test, balance),
    ]


def policy_note(test: Test, replaced: MetalBalance, unreplaced: MetalBalance) -> list[Problem]:
    """Return how much a blank aliquot policy matters, where it matters."""
    for name in ("final_on_calculated_head", "final_on_assay_head"):
        one, other = getattr(replaced, name), getattr(unreplaced, name)
        if one is not None and other is not None:
            break
    else:
        return []
    if abs(one - other) < _SMALL_DIFFERENCE:
        return []
    found = (
        f"test {test.name} does not say whether aliquots were replaced: the final "
        f"{replaced.analyte} extraction is {_percent(one)} if they were and {_percent(other)} if "
        f"not, {100.0 * abs(one - other):.1f} points apart; the first is taken meanwhile"
    )
    allowed = " / ".join(get_args(AliquotPolicy))
    return [
        _note(
            test, "tests", "aliquots", found, allowed, "write one of these in the column aliquots"
        )
    ]


def unused_wash(test: Test, analyte: str, by_filtrate: bool) -> list[Problem]:
    """Return a note where solutions were assayed and there is no filtrate to go with them."""
    names = [p.name for p in test.products if p.is_solution and analyte in p.grade]
    if by_filtrate or not names:
        return []
    return [
        _note(
            test,
            "closeout",
            "product",
            f"test {test.name} has no filtrate with a volume and a {analyte} assay: "
            f"{', '.join(names)} not counted, the last reading stands for all the solution",
            "a filtrate row with a volume and an assay",
            "add it, and the metal is summed over all solutions",
        )
    ]


def _note(
    test: Test,
    sheet: str,
    column: str,
    found: str,
    allowed: str = "",
    try_this: str = "",
    row: int | None = None,
) -> Problem:
    file = test.files.get(sheet, "")
    if row is None and sheet == "tests" and test.rows.get(file):
        row = test.rows[file][0]
    return Problem(file, row, column, "note", found, allowed, try_this)


def _percent(fraction: float) -> str:
    return f"{100.0 * fraction:.1f} %"


def _no_tail(test: Test, balance: MetalBalance) -> list[Problem]:
    if balance.tail_kg_per_t is not None:
        return []
    state = "is not closed out" if not test.is_closed_out else "has no tail assay"
    figure = "no extraction"
    if balance.final_on_assay_head is not None:
        figure = f"{_percent(balance.final_on_assay_head)} on the assay head"
    found = f"test {test.name} {state} for {balance.analyte}: {figure}, provisional"
    try_this = "add its residue to the close-out sheet when it is assayed"
    return [_note(test, "closeout", "", found, "a residue mass and assay", try_this)]


def _no_head(test: Test, balance: MetalBalance) -> list[Problem]:
    if balance.head_assay_kg_per_t is not None:
        return []
    found = f"there is no {balance.analyte} head assay for test {test.name} ({test.domain})"
    if balance.head_calculated_kg_per_t is None:
        found += ", nor a calculated head: no extraction can be had"
    return [
        _note(
            test, "heads", "", found, "a head for its domain or size", "add it to the heads sheet"
        )
    ]


def _carbon(test: Test, balance: MetalBalance) -> list[Problem]:
    """Say what readings mean where carbon takes the metal out of the solution."""
    if not test.has_carbon(balance.analyte):
        return []
    if balance.final_dissolved_g is None:
        found = (
            f"carbon is in the vessel and not assayed in test {test.name}: no {balance.analyte} "
            "extraction before it is"
        )
        try_this = "add the carbon to the close-out sheet with its mass and assay"
        return [_note(test, "closeout", "", found, "a carbon with mass and assay", try_this)]
    found = (
        f"carbon took {balance.analyte} out of the solution in test {test.name}: its readings give "
        "no extraction by time, the close-out does"
    )
    return [_note(test, "readings", balance.analyte, found)]


def _gravity(test: Test, balance: MetalBalance) -> list[Problem]:
    """Say what the extractions are of where a gravity concentrate was taken out first."""
    if not balance.before_leach_g:
        return []
    found = (
        f"{balance.before_leach_g:.4g} g of {balance.analyte} in a gravity concentrate before the "
        f"leach of test {test.name}: extractions are of what the leach was fed"
    )
    if balance.final_with_gravity is not None:
        found += f"; with the concentrate {_percent(balance.final_with_gravity)} of the head"
    return [_note(test, "closeout", "", found)]


def _over_extraction(test: Test, balance: MetalBalance, limits: BalanceLimits) -> list[Problem]:
    extraction = balance.extraction_on_assay_head
    high = np.flatnonzero(np.nan_to_num(extraction) > limits.over_extraction)
    if not high.size:
        return []
    i = int(high[np.argmax(extraction[high])])
    assays = test.solution[balance.analyte]
    return [
        _note(
            test,
            "readings",
            balance.analyte,
            f"test {test.name} has {_percent(float(extraction[i]))} of the assay head in solution "
            f"at {balance.time_h[i]:g} h",
            f"up to about {_percent(limits.over_extraction)}",
            "a head assay that reads low, an assay in mg/L under g/L, a dilution applied twice, "
            "an aliquot counted twice, a wrong solids mass",
            row=assays.rows[i] if assays.rows else None,
        )
    ]


def _closure(test: Test, balance: MetalBalance, limits: BalanceLimits) -> list[Problem]:
    low, high = limits.closure_of(balance.analyte)
    if balance.closure is None or low <= balance.closure <= high:
        return []
    three = ", ".join(
        f"{_percent(value)} {name}"
        for value, name in (
            (balance.final_on_assay_head, "on the assay head"),
            (balance.final_on_calculated_head, "on the calculated head"),
            (balance.final_by_tail, "by the tail"),
        )
        if value is not None
    )
    return [
        _note(
            test,
            "closeout",
            balance.analyte,
            f"test {test.name} closes at {balance.closure:.3f} (calculated over assay head); the "
            f"basis matters: {three}",
            f"{low:.2f} to {high:.2f}",
            "repeat the head assay, the tail assay or the last solution; the balance alone does "
            "not say which",
        )
    ]


def _residue_mass(
    test: Test, balance: MetalBalance, mass_is_known: bool, most_mass_loss: float
) -> list[Problem]:
    solids = [p for p in test.products if p.is_undissolved_metal and p.amount is not None]
    mass = sum(p.amount or 0.0 for p in solids)
    if mass > test.solids_g * (1.0 + 2.0 * test.residue_mass_sd_relative):
        found = f"test {test.name} has {mass:g} g of residue from a charge of {test.solids_g:g} g"
        try_this = "was it dry? Salts left in it, or a filter paper, also weigh"
        return [_note(test, "closeout", "mass (g)", found, "up to the charge", try_this)]
    dissolved, left = balance.final_dissolved_g, balance.final_undissolved_g
    if mass_is_known or not dissolved or left is None:
        return []
    lighter = dissolved / (dissolved + left * (1.0 - most_mass_loss))
    found = (
        f"the residue of test {test.name} was not weighed: "
        f"{_percent(dissolved / (dissolved + left))} without a loss of mass, {_percent(lighter)} "
        f"with a loss of {100 * most_mass_loss:.0f} %"
    )
    return [_note(test, "closeout", "mass (g)", found, "a dry mass", "weigh the residue")]


def _fall(test: Test, balance: MetalBalance) -> list[Problem]:
    """Say how much of a falling concentration is dilution by make-up."""
    fall = fall_of(test, balance.analyte)
    if fall is None:
        return []
    words = "the rest is within the precision of the assays"
    if fall.was_still_leaching:
        words = "so it was still leaching"
    elif not fall.is_explained:
        words = "the rest may be precipitation, or an assay"
    found = (
        f"{balance.analyte} in test {test.name} falls by {100.0 * fall.share:.1f} % from "
        f"{fall.from_h:g} h to {fall.to_h:g} h; dilution at the aliquots "
        f"accounts for {100.0 * fall.by_dilution:.1f} %, {words}"
    )
    return [_note(test, "readings", balance.analyte, found, row=fall.row)]


def _bounded(test: Test, balance: MetalBalance) -> list[Problem]:
    """Say where an assay above a limit makes the figures lower bounds."""
    assays = test.solution.get(balance.analyte)
    if assays is None or not (assays.bound > 0).any():
        return []
    i = int(np.flatnonzero(assays.bound > 0)[-1])
    return [
        _note(
            test,
            "readings",
            balance.analyte,
            f"{balance.analyte} in test {test.name} is above {assays.value[i]:g} g/L at "
            f"{test.time_h[i]:g} h: its extraction is a lower bound",
            "an assay in range",
            "dilute and repeat it",
            row=assays.rows[i] if assays.rows else None,
        )
    ]
