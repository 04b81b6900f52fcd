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
    SolutionLedger,
    assays_for_balance,
    brought_of_whole_charge_mg,
    dissolved_mg,
    solution_ledger,
    weights_at_close_out_mL,
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
        Of the whole charge, where samples of slurry took part of it out.
    mass_g : float
        As weighed.
    mass_is_known : bool
        False where the charge stands for a residue that was not weighed.
    share : float
        Of the charge, that the mass is of.
    """

    metal: Amount
    mass_g: float
    mass_is_known: bool
    share: float = 1.0

    @property
    def whole_mass_g(self) -> float:
        """What the whole charge would have come to."""
        return self.mass_g / self.share

    @property
    def grade_kg_per_t(self) -> float:
        """Metal over mass."""
        return 1000.0 * self.metal.value_g / self.whole_mass_g

    @property
    def grade_sd_kg_per_t(self) -> float:
        """Standard deviation of the grade, that of the mass included."""
        return 1000.0 * self.metal.sd_g / self.whole_mass_g


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
    """Return what came into solution by each reading and at close-out.

    With carbon in the vessel a reading says what is in solution and no more: it has no figure.
    """
    ledger = solution_ledger(test)
    nothing = np.full(test.time_h.size, np.nan)
    if analyte not in test.solution or not test.time_h.size:
        empty = Assays(np.zeros(0), np.zeros(0), np.zeros(0, dtype=np.int64))
        final = _by_products(test, analyte, empty, ledger)
        return Leached(nothing, nothing, final, final is not None)
    used = assays_for_balance(test, analyte)
    missing = np.isnan(test.solution[analyte].value)
    dissolved = dissolved_mg(test, analyte, ledger, used.value) / 1000.0
    uncorrected = used.value * ledger.start_mL / 1000.0
    by_products = _by_products(test, analyte, used, ledger)
    final = by_products
    carbon = _on_carbon(test, analyte)
    if final is None and not missing.all() and bool(carbon) == test.has_carbon(analyte):
        last = int(np.flatnonzero(~missing)[-1])
        sd_g = float(np.linalg.norm(weights_mL(ledger, last) * used.sd)) / 1000.0
        final = _sum([Amount(float(dissolved[last]), sd_g), *carbon])
    if test.has_carbon(analyte):
        return Leached(nothing, nothing, final, by_products is not None)
    dissolved[missing], uncorrected[missing] = np.nan, np.nan
    return Leached(dissolved, uncorrected, final, by_products is not None)


def undissolved_metal(test: Test, analyte: str) -> Undissolved | None:
    """Return what stayed in solids, None where no solid product was assayed for the analyte."""
    solids = [p for p in test.products if p.is_undissolved_metal and analyte in p.grade]
    if not solids:
        return None
    share = float(solution_ledger(test).share[-1])
    weighed = sum(p.amount for p in solids if p.amount is not None)
    unweighed = [p for p in solids if p.amount is None]
    rest = max(test.solids_g * share - weighed, 0.0) / max(len(unweighed), 1)
    solids = [replace(p, amount=rest) if p.amount is None else p for p in solids]
    mass = sum(p.amount for p in solids if p.amount is not None)
    if mass <= 0.0:
        return None
    metal = _sum([_metal_in(p, analyte, test.residue_mass_sd_relative) for p in solids])
    whole = Amount(metal.value_g / share, metal.sd_g / share)
    return Undissolved(whole, mass, not unweighed, share)


def metal_before_leach(test: Test, analyte: str) -> Amount | None:
    """Return what a gravity concentrate took out before the leach, None where there is none."""
    before = [p for p in test.products if p.is_before_leach and analyte in p.grade and p.amount]
    if not before:
        return None
    return _sum([_metal_in(p, analyte, test.residue_mass_sd_relative) for p in before])


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
        if p.is_carbon and analyte in p.grade and p.amount
    ]


def _by_products(test: Test, analyte: str, used: Assays, ledger: SolutionLedger) -> Amount | None:
    """Dissolved metal by the products; None without a filtrate with volume and assay."""
    solutions = [
        p for p in test.products if p.is_solution and analyte in p.grade and p.amount is not None
    ]
    carbon = _on_carbon(test, analyte)
    if not any("filtrate" in p.name.casefold() for p in solutions):
        return None
    if test.has_carbon(analyte) and not carbon:
        return None
    amounts = [*(_metal_in(p, analyte, 0.0) for p in solutions), *carbon]
    weights, factor = weights_at_close_out_mL(ledger)
    weights = weights[: used.value.size]
    taken = Amount(
        float(used.value @ weights) / 1000.0, float(np.linalg.norm(used.sd * weights)) / 1000.0
    )
    brought = float(brought_of_whole_charge_mg(test, analyte, ledger)[-1])
    whole = [Amount(factor * a.value_g, factor * a.sd_g) for a in amounts]
    return _sum([*whole, taken, Amount(-brought / 1000.0, 0.0)])


def _balance(
    test: Test, analyte: str, leached: Leached, solids: Undissolved | None
) -> MetalBalance:
    head = test.heads.get(analyte)
    before = metal_before_leach(test, analyte)
    final, tail = leached.final, solids.metal if solids is not None else None
    total = None if final is None or tail is None else final.value_g + tail.value_g
    figures, sd = _figures(test, head, final, solids, before)
    no_head = np.full(test.time_h.size, np.nan)
    assay_g = test.solids_g * head.value_kg_per_t / 1000.0 if head is not None else None
    fed_g = assay_g - before.value_g if assay_g and before is not None else assay_g
    return MetalBalance(
        test=test.name,
        key=f"{test.domain}/{analyte}",
        analyte=analyte,
        time_h=test.time_h,
        dissolved_g=leached.dissolved_g,
        uncorrected_g=leached.uncorrected_g,
        extraction_on_assay_head=_over(leached.dissolved_g, fed_g, no_head),
        extraction_on_calculated_head=_over(leached.dissolved_g, total, no_head),
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
        before_leach_g=before.value_g if before is not None else None,
        final_with_gravity=figures.get("final_with_gravity"),
    )


def _over(amount_g: Array, head_g: float | None, without: Array) -> Array:
    return amount_g / head_g if head_g is not None and head_g > 0.0 else without


def _figures(
    test: Test,
    head: Head | None,
    final: Amount | None,
    solids: Undissolved | None,
    before: Amount | None,
) -> tuple[dict[str, float], dict[str, float]]:
    """The final figures that can be had, and their standard deviations, by field name."""
    figures: dict[str, float] = {}
    sd: dict[str, float] = {}
    kg_per_t = 1000.0 / test.solids_g
    gravity = before or Amount(0.0, 0.0)
    fed: Amount | None = None
    if head is not None:
        sd["head_assay_kg_per_t"] = head.sd_kg_per_t
        assay = Amount(head.value_kg_per_t / kg_per_t, head.charge_sd_kg_per_t / kg_per_t)
        left = assay.value_g - gravity.value_g
        fed = Amount(left, float(np.hypot(assay.sd_g, gravity.sd_g))) if left > 0.0 else None
    if solids is not None:
        sd["tail_kg_per_t"] = solids.grade_sd_kg_per_t
    if fed is not None and final is not None:
        figures["final_on_assay_head"], sd["final_on_assay_head"] = ratio(final, fed)
    if fed is not None and solids is not None:
        undissolved, sd["final_by_tail"] = ratio(solids.metal, fed)
        figures["final_by_tail"] = 1.0 - undissolved
    if final is not None and solids is not None:
        total = _sum([final, solids.metal, gravity])
        if total.value_g > gravity.value_g:
            leached = final.value_g / (total.value_g - gravity.value_g)
            figures["final_on_calculated_head"] = leached
            sd["final_on_calculated_head"] = share_sd(final, solids.metal)
            figures["head_calculated_kg_per_t"] = total.value_g * kg_per_t
            sd["head_calculated_kg_per_t"] = total.sd_g * kg_per_t
            if head is not None:
                figures["closure"], sd["closure"] = ratio(total, assay)
            if before is not None:
                both = _sum([final, before])
                figures["final_with_gravity"] = both.value_g / total.value_g
                sd["final_with_gravity"] = share_sd(both, solids.metal)
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
