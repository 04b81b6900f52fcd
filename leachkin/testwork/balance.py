"""The metal balance of a test: three extraction figures, calculated head, closure, all with
standard deviations."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from leachkin.errors import nearest_names
from leachkin.problems import Problem, argument_error
from leachkin.testwork.balance_notes import balance_notes, policy_note, unused_wash
from leachkin.testwork.records import Array, Assays, Head, MetalBalance, Product, Test
from leachkin.testwork.recursion import (
    assays_for_balance,
    brought_mg,
    metal_out_mg,
    solution_ledger,
    weights_mL,
)
from leachkin.testwork.settings import BalanceLimits


@dataclass(frozen=True)
class Amount:
    """A mass of metal [g] and its standard deviation."""

    value_g: float
    sd_g: float


@dataclass(frozen=True)
class Leached:
    """What came into solution.

    Attributes
    ----------
    dissolved_g, uncorrected_g : ndarray, shape (m,)
        NaN where there is no assay.
    final : Amount or None
        At close-out: by the filtrate and all other solutions where there is a filtrate, else by
        the last reading.
    by_filtrate : bool
    """

    dissolved_g: Array
    uncorrected_g: Array
    final: Amount | None
    by_filtrate: bool


@dataclass(frozen=True)
class Undissolved:
    """What stayed in solids.

    Attributes
    ----------
    metal : Amount
    mass_g : float
    mass_is_known : bool
        False where the charge stands for a residue that was not weighed.
    """

    metal: Amount
    mass_g: float
    mass_is_known: bool

    @property
    def grade_kg_per_t(self) -> float:
        """Metal over mass."""
        return 1000.0 * self.metal.value_g / self.mass_g


def metal_balance(test: Test, analyte: str, *, limits: BalanceLimits | None = None) -> MetalBalance:
    """Return the metal balance of one analyte in one test.

    Parameters
    ----------
    test : Test
    analyte : str
        As in the headings of its sheets.
    limits : BalanceLimits, optional
        Where a remark is due.

    Returns
    -------
    MetalBalance
        Provisional where the tail or the aliquot policy is missing. Standard deviations follow
        from those of the assays, of the residue mass and of the head, taken as independent;
        volumes and the charge are taken as exact.

    Raises
    ------
    InputProblems
        If the test has no such analyte in a solution, a product or a head.
    """
    _check_analyte(test, analyte)
    leached, solids = leached_metal(test, analyte), undissolved_metal(test, analyte)
    balance = _balance(test, analyte, leached, solids)
    problems = [*_missing_assays(test, analyte), *unused_wash(test, analyte, leached.by_filtrate)]
    if test.aliquots is None and np.isnan(test.makeup_mL).any() and test.aliquot_mL.any():
        other = replace(test, aliquots="not replaced")
        unreplaced = _balance(other, analyte, leached_metal(other, analyte), solids)
        problems += policy_note(test, balance, unreplaced)
        balance = replace(balance, provisional=True)
    problems += balance_notes(test, balance, solids.mass_is_known if solids else True, limits)
    return replace(balance, problems=tuple(problems))


def leached_metal(test: Test, analyte: str) -> Leached:
    """Return what came into solution by each reading and at close-out."""
    ledger = solution_ledger(test)
    brought = brought_mg(test, analyte, ledger)
    if analyte not in test.solution or not test.time_h.size:
        nothing = np.full(test.time_h.size, np.nan)
        empty = Assays(np.zeros(0), np.zeros(0), np.zeros(0, dtype=np.int64))
        final = _by_products(test, analyte, empty, np.zeros(0), float(brought[-1]))
        return Leached(nothing, nothing, final, final is not None)
    used = assays_for_balance(test, analyte)
    missing = np.isnan(test.solution[analyte].value)
    dissolved = (metal_out_mg(ledger, used.value) - brought[:-1]) / 1000.0
    uncorrected = used.value * ledger.start_mL / 1000.0
    by_products = _by_products(test, analyte, used, ledger.removed_mL, float(brought[-1]))
    final = by_products
    if final is None and not missing.all():
        last = int(np.flatnonzero(~missing)[-1])
        sd_g = float(np.linalg.norm(weights_mL(ledger, last) * used.sd)) / 1000.0
        final = _sum([Amount(float(dissolved[last]), sd_g), *_on_carbon(test, analyte)])
    dissolved[missing], uncorrected[missing] = np.nan, np.nan
    return Leached(dissolved, uncorrected, final, by_products is not None)


def undissolved_metal(test: Test, analyte: str) -> Undissolved | None:
    """Return what stayed in solids, None where no solid product was assayed for the analyte."""
    solids = [p for p in test.products if not p.is_dissolved_metal and analyte in p.grade]
    if not solids:
        return None
    weighed = sum(p.amount for p in solids if p.amount is not None)
    unweighed = [p for p in solids if p.amount is None]
    rest = max(test.solids_g - weighed, 0.0) / max(len(unweighed), 1)
    solids = [replace(p, amount=rest) if p.amount is None else p for p in solids]
    mass = sum(p.amount for p in solids if p.amount is not None)
    if mass <= 0.0:
        return None
    metals = [_metal_in(p, analyte, test.residue_mass_sd_relative) for p in solids]
    return Undissolved(_sum(metals), mass, not unweighed)


def _check_analyte(test: Test, analyte: str) -> None:
    known = {*test.solution, *test.heads, *(a for p in test.products for a in p.grade)}
    if analyte not in known:
        near = " or ".join(nearest_names(analyte, known)) or "an assay of it in the sheets"
        raise argument_error(
            "analyte", f"{test.name} has no {analyte!r}", ", ".join(sorted(known)), near
        )


def _metal_in(product: Product, analyte: str, mass_sd_relative: float) -> Amount:
    """Metal in a product; "<x" stands as x/2 with the sd of a value anywhere below x."""
    value, sd, _ = product.grade[analyte]
    if product.bound.get(analyte, 0) < 0:
        value, sd = 0.5 * value, value / np.sqrt(12.0)
    amount = product.amount or 0.0
    spread = 0.0 if product.is_solution else mass_sd_relative
    return Amount(value * amount / 1000.0, float(np.hypot(sd, value * spread)) * amount / 1000.0)


def _sum(amounts: list[Amount]) -> Amount:
    value = sum(a.value_g for a in amounts)
    return Amount(value, float(np.linalg.norm([a.sd_g for a in amounts])))


def _on_carbon(test: Test, analyte: str) -> list[Amount]:
    return [
        _metal_in(p, analyte, test.residue_mass_sd_relative)
        for p in test.products
        if p.is_dissolved_metal and not p.is_solution and analyte in p.grade and p.amount
    ]


def _by_products(
    test: Test, analyte: str, used: Assays, removed_mL: Array, brought: float
) -> Amount | None:
    """Dissolved metal by the products; None without a filtrate with volume and assay."""
    solutions = [
        p for p in test.products if p.is_solution and analyte in p.grade and p.amount is not None
    ]
    if not any("filtrate" in p.name.casefold() for p in solutions):
        return None
    amounts = [_metal_in(p, analyte, 0.0) for p in solutions] + _on_carbon(test, analyte)
    taken = Amount(
        float(used.value @ removed_mL) / 1000.0,
        float(np.linalg.norm(used.sd * removed_mL)) / 1000.0,
    )
    return _sum([*amounts, taken, Amount(-brought / 1000.0, 0.0)])


def _balance(
    test: Test, analyte: str, leached: Leached, solids: Undissolved | None
) -> MetalBalance:
    head = test.heads.get(analyte)
    final, tail = leached.final, solids.metal if solids is not None else None
    total = None if final is None or tail is None else final.value_g + tail.value_g
    figures, sd = _figures(test, head, final, solids)
    no_head = np.full(test.time_h.size, np.nan)
    assay_g = test.solids_g * head.value_kg_per_t / 1000.0 if head is not None else None
    return MetalBalance(
        test=test.name,
        key=f"{test.domain}/{analyte}",
        analyte=analyte,
        time_h=test.time_h,
        dissolved_g=leached.dissolved_g,
        uncorrected_g=leached.uncorrected_g,
        extraction_on_assay_head=leached.dissolved_g / assay_g if assay_g else no_head,
        extraction_on_calculated_head=leached.dissolved_g / total if total else no_head,
        final_on_assay_head=figures.get("final_on_assay_head"),
        final_on_calculated_head=figures.get("final_on_calculated_head"),
        final_by_tail=figures.get("final_by_tail"),
        head_assay_kg_per_t=head.value_kg_per_t if head is not None else None,
        head_calculated_kg_per_t=figures.get("head_calculated_kg_per_t"),
        closure=figures.get("closure"),
        tail_kg_per_t=solids.grade_kg_per_t if solids is not None else None,
        residue_g=solids.mass_g if solids is not None and solids.mass_is_known else None,
        sd=sd,
        provisional=solids is None or not solids.mass_is_known,
        final_dissolved_g=final.value_g if final is not None else None,
        final_undissolved_g=tail.value_g if tail is not None else None,
    )


def _figures(
    test: Test, head: Head | None, final: Amount | None, solids: Undissolved | None
) -> tuple[dict[str, float], dict[str, float]]:
    """The final figures that can be had, and their standard deviations, by field name."""
    figures: dict[str, float] = {}
    sd: dict[str, float] = {}
    kg_per_t = 1000.0 / test.solids_g
    if head is not None:
        sd["head_assay_kg_per_t"] = head.sd_kg_per_t
        assay = Amount(head.value_kg_per_t / kg_per_t, head.charge_sd_kg_per_t / kg_per_t)
    if solids is not None:
        sd["tail_kg_per_t"] = 1000.0 * solids.metal.sd_g / solids.mass_g
    if head is not None and final is not None:
        figures["final_on_assay_head"], sd["final_on_assay_head"] = ratio(final, assay)
    if head is not None and solids is not None:
        left, sd["final_by_tail"] = ratio(solids.metal, assay)
        figures["final_by_tail"] = 1.0 - left
    if final is not None and solids is not None:
        total = _sum([final, solids.metal])
        if total.value_g > 0.0:
            figures["final_on_calculated_head"] = final.value_g / total.value_g
            sd["final_on_calculated_head"] = share_sd(final, solids.metal)
            figures["head_calculated_kg_per_t"] = total.value_g * kg_per_t
            sd["head_calculated_kg_per_t"] = total.sd_g * kg_per_t
            if head is not None:
                figures["closure"], sd["closure"] = ratio(total, assay)
    return figures, sd


def ratio(above: Amount, below: Amount) -> tuple[float, float]:
    """Return the ratio of two independent amounts and its standard deviation."""
    value = above.value_g / below.value_g
    return value, float(np.hypot(above.sd_g, value * below.sd_g)) / below.value_g


def share_sd(one: Amount, other: Amount) -> float:
    """Return the standard deviation of one / (one + other), the two independent."""
    total = one.value_g + other.value_g
    parts = np.hypot(other.value_g * one.sd_g, one.value_g * other.sd_g)
    return float(parts) / total**2


def _missing_assays(test: Test, analyte: str) -> list[Problem]:
    assays = test.solution.get(analyte)
    if assays is None:
        return []
    missing = np.flatnonzero(np.isnan(assays.value) & (test.aliquot_mL > 0.0))
    if not missing.size or missing[0] > np.flatnonzero(~np.isnan(assays.value))[-1]:
        return []
    times = ", ".join(f"{test.time_h[i]:g} h" for i in missing)
    row = assays.rows[missing[0]] if assays.rows else None
    return [
        Problem(
            test.files.get("readings", ""),
            row,
            analyte,
            "note",
            f"test {test.name} has no {analyte} assay at {times}; the metal in those aliquots "
            f"is interpolated between the neighbours",
        )
    ]
