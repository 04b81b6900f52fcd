"""Judgement of a test: accept, accept with remarks, or repeat, each with its reasons and limits."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from leachkin.errors import InputProblems
from leachkin.result_table import Column, ResultTable
from leachkin.testwork.balance import metal_balance
from leachkin.testwork.falls import fall_of
from leachkin.testwork.mixed_up import MixUp, mix_ups
from leachkin.testwork.reagent_use import reagent_use
from leachkin.testwork.reconcile import CLOSURE, Reconciliation, reconcile_balance
from leachkin.testwork.reconciliation_words import repeat_of, verdict_of
from leachkin.testwork.records import MetalBalance, Test
from leachkin.testwork.settings import BalanceLimits

Verdict = Literal["accept", "accept with remarks", "repeat", "running", "excluded"]
Level = Literal["remark", "repeat"]
#: Share of the final extraction that is there at the first reading and leaves no rate to find.
_ALL_AT_ONCE = 0.9
_FEWEST_READINGS = 3
#: Replicates that disagree by less likely a chance than this are assayed again.
_REPEAT_CHANCE = 0.01


@dataclass(frozen=True)
class JudgementLimits:
    """Where a test earns a remark, and where a repeat.

    Attributes
    ----------
    balance : BalanceLimits
        Closure outside it asks for a repeat; extraction above ``over_extraction`` too.
    closure_remark : mapping of analyte to (low, high)
        Closure outside it earns a remark; "" is for every analyte not named.
    head_spread : mapping of analyte to float
        Relative standard deviation of head replicates above which they are too far apart.
    starved_share : float
        Free reagent at or below this share of the start: the test was starved.
    low_reagent_share : float
        Reagent at the end below this share of the start earns a remark.
    unexplained_fall : float
        Share by which a concentration may fall beyond dilution before a repeat is due.
    copied_rows : int
        Readings alike in every analyte from which two tests look copied.
    """

    balance: BalanceLimits
    closure_remark: Mapping[str, tuple[float, float]]
    head_spread: Mapping[str, float]
    starved_share: float
    low_reagent_share: float
    unexplained_fall: float
    copied_rows: int

    def remark_of(self, analyte: str) -> tuple[float, float]:
        """Return the closure outside which a remark is due."""
        return self.closure_remark.get(analyte) or self.closure_remark[""]

    def spread_of(self, analyte: str) -> float:
        """Return the largest spread of head replicates."""
        return self.head_spread.get(analyte, self.head_spread[""])


@dataclass(frozen=True)
class Reason:
    """One reason of a judgement.

    Attributes
    ----------
    code : str
        closure, head spread, gross error, over extraction, starved, low reagent, fall, copied rows,
        residues exchanged, samples exchanged, residue mass, aliquots, no rate, no closure.
    text : str
        What was found.
    level : "remark" or "repeat"
    limit : str
        What it was held against, "" where it is no number.
    repeat : str
        What to do again, "" for a remark.
    """

    code: str
    text: str
    level: Level
    limit: str = ""
    repeat: str = ""


@dataclass(frozen=True)
class Judgement:
    """The judgement of one analyte in one test.

    Attributes
    ----------
    test, key, analyte : str
    verdict : str
        "accept", "accept with remarks", "repeat"; "running" before its close-out; "excluded" where
        the user keeps the whole test out. A repeat that is asked for leaves the test in the fits.
    reasons : tuple of Reason
        Repeats first.
    balance : MetalBalance
    reconciliation : Reconciliation or None
    """

    test: str
    key: str
    analyte: str
    verdict: Verdict
    reasons: tuple[Reason, ...]
    balance: MetalBalance
    reconciliation: Reconciliation | None = field(default=None, repr=False)

    @property
    def repeats(self) -> tuple[str, ...]:
        """What is to be done again."""
        return tuple(dict.fromkeys(r.repeat for r in self.reasons if r.repeat))


def judge_tests(
    tests: Sequence[Test],
    limits: JudgementLimits,
    analytes: Sequence[str] = (),
    level: float = 0.95,
) -> tuple[Judgement, ...]:
    """Return a judgement of every analyte of every test.

    Parameters
    ----------
    tests : sequence of Test
    limits : JudgementLimits
    analytes : sequence of str
        Those that are judged; every one that has a balance where empty.
    level : float
        Of the reconciled intervals.

    Returns
    -------
    tuple of Judgement
        In the order of the tests. Nothing is left out of anything: only the user excludes.
    """
    mixed = mix_ups(tests, limits.copied_rows)
    found = []
    for test in tests:
        for analyte in analytes or test.solution:
            if analyte in test.solution:
                judged = _judged(test, analyte, limits, mixed, level)
                found += [] if judged is None else [judged]
    return tuple(found)


def _judged(
    test: Test, analyte: str, limits: JudgementLimits, mixed: Sequence[MixUp], level: float
) -> Judgement | None:
    try:
        balance = metal_balance(test, analyte, limits=limits.balance)
    except InputProblems:
        return None
    reconciled = reconcile_balance(test, analyte, limits=limits.balance, level=level)
    reasons = [
        *_closure(balance, reconciled, limits),
        *_gross_errors(reconciled),
        *_over_extraction(balance, limits),
        *_head_spread(test, analyte, limits),
        *_mixed_up(test, mixed),
        *_residue(test, reconciled),
        *_fallen(test, analyte, limits),
        *_reagent(test, limits),
        *_aliquots(test),
        *_no_rate(balance),
        *_no_closure(test, balance),
    ]
    reasons = sorted(dict.fromkeys(reasons), key=lambda reason: reason.level != "repeat")
    verdict = _verdict(test, balance, reasons)
    key = f"{test.domain}/{analyte}"
    if test.is_excluded:
        reasons = [*_exclusions(test), *reasons]
    return Judgement(test.name, key, analyte, verdict, tuple(reasons), balance, reconciled)


def _verdict(test: Test, balance: MetalBalance, reasons: Sequence[Reason]) -> Verdict:
    if test.is_excluded:
        return "excluded"
    if any(reason.level == "repeat" for reason in reasons):
        return "repeat"
    if balance.tail_kg_per_t is None and not test.is_closed_out:
        return "running"
    return "accept with remarks" if reasons else "accept"


def _exclusions(test: Test) -> Iterator[Reason]:
    for one in test.exclusions:
        if one.time_h is None:
            yield Reason("excluded", f"{one.reason} ({one.by})", "remark")


def _closure(
    balance: MetalBalance, reconciled: Reconciliation | None, limits: JudgementLimits
) -> Iterator[Reason]:
    closure = balance.closure
    if closure is None:
        return
    low, high = limits.balance.closure_of(balance.analyte)
    sd = balance.sd.get("closure", 0.0)
    text = f"closes at {closure:.3f} +- {sd:.2g}"
    if not low <= closure <= high:
        repeat = repeat_of(reconciled) if reconciled is not None else ""
        yield Reason(
            "closure",
            text,
            "repeat",
            f"{low:.2f} to {high:.2f}",
            repeat or "the assay of the last solution, of the residue and of the head",
        )
        return
    near, far = limits.remark_of(balance.analyte)
    if not near <= closure <= far:
        yield Reason("closure", text, "remark", f"{near:.2f} to {far:.2f}")


def _gross_errors(reconciled: Reconciliation | None) -> Iterator[Reason]:
    if reconciled is None:
        return
    texts = verdict_of(reconciled)
    for test, text in zip(reconciled.found, texts, strict=False):
        limit = f"chance {100 * _REPEAT_CHANCE:g} %"
        if test.group == CLOSURE or test.chance > _REPEAT_CHANCE:
            yield Reason("gross error", text, "remark", limit)
        else:
            yield Reason("gross error", text, "repeat", limit, repeat_of(reconciled))


def _over_extraction(balance: MetalBalance, limits: JudgementLimits) -> Iterator[Reason]:
    extraction = balance.extraction_on_assay_head
    highest = float(np.nanmax(extraction)) if (~np.isnan(extraction)).any() else 0.0
    highest = max(highest, balance.final_on_assay_head or 0.0)
    limit = limits.balance.over_extraction
    if highest > limit:
        yield Reason(
            "over extraction",
            f"{100 * highest:.1f} % of the assay head in solution",
            "repeat",
            f"{100 * limit:.0f} %",
            "the head assay; look for a dilution applied twice and for the solids mass",
        )


def _head_spread(test: Test, analyte: str, limits: JudgementLimits) -> Iterator[Reason]:
    head = test.heads.get(analyte)
    if head is None or len(head.values_kg_per_t) < 2:
        return
    values = np.array(head.values_kg_per_t)
    spread = float(values.std(ddof=1) / values.mean())
    limit = limits.spread_of(analyte)
    if spread > limit:
        text = f"{values.size} heads scatter by {100 * spread:.2g} % of their mean"
        yield Reason("head spread", text, "remark", f"{100 * limit:.3g} %")


def _mixed_up(test: Test, mixed: Sequence[MixUp]) -> Iterator[Reason]:
    for one in mixed:
        if test.name in one.tests:
            yield Reason(one.kind, one.text, "repeat", "", "look at the certificates first")


def _residue(test: Test, reconciled: Reconciliation | None) -> Iterator[Reason]:
    solids = [p for p in test.products if p.is_undissolved_metal]
    mass = sum(p.amount for p in solids if p.amount is not None)
    taken = test.vessel.solids_g
    mass += 0.0 if taken is None else float(np.nansum(taken))
    if mass > test.solids_g * (1.0 + 2.0 * test.residue_mass_sd_relative):
        text = f"{mass:g} g of residue from a charge of {test.solids_g:g} g"
        yield Reason("residue mass", text, "repeat", "the charge", "dry and weigh the residue")
    elif any(p.amount is None for p in solids):
        bounds = reconciled.mass_bounds if reconciled is not None else None
        between = f": {100 * bounds[0]:.1f} to {100 * bounds[1]:.1f} % extracted" if bounds else ""
        yield Reason("residue mass", f"the residue was not weighed{between}", "remark")


def _fallen(test: Test, analyte: str, limits: JudgementLimits) -> Iterator[Reason]:
    fall = fall_of(test, analyte)
    if fall is None or fall.is_explained:
        return
    text = (
        f"falls by {100 * fall.share:.1f} % from {fall.from_h:g} h to {fall.to_h:g} h, dilution is "
        f"{100 * fall.by_dilution:.1f} %"
    )
    limit = f"{100 * limits.unexplained_fall:.3g} % beyond dilution"
    if fall.unexplained > limits.unexplained_fall:
        repeat = "the last solution assay; if it stands, look for precipitation or preg-robbing"
        yield Reason("fall", text, "repeat", limit, repeat)
    else:
        yield Reason("fall", f"{text}: precipitation, or an assay", "remark", limit)


def _reagent(test: Test, limits: JudgementLimits) -> Iterator[Reason]:
    use, free = reagent_use(test), test.free_reagent_g_per_L
    start = test.reagent_g_per_L
    if use is None or free is None or np.isnan(free).all() or not start:
        return
    share = free / start
    empty = np.flatnonzero(np.nan_to_num(share, nan=1.0) <= limits.starved_share)
    if empty.size:
        i = int(empty[0])
        text = (
            f"{test.reagent} {free[i]:.2g} g/L at {test.time_h[i]:g} h, {100 * share[i]:.2g} % of "
            "its start: starved, so that a plateau is not the ultimate extraction"
        )
        yield Reason("starved", text, "remark", f"{100 * limits.starved_share:.3g} % of the start")
        return
    last = int(np.flatnonzero(~np.isnan(free))[-1])
    if share[last] < limits.low_reagent_share:
        text = f"{test.reagent} down to {100 * share[last]:.2g} % of its start at the end"
        limit = f"{100 * limits.low_reagent_share:.3g} % of the start"
        yield Reason("low reagent", text, "remark", limit)


def _aliquots(test: Test) -> Iterator[Reason]:
    unknown = test.aliquots is None and bool(np.isnan(test.makeup_mL).any())
    if unknown and bool(test.aliquot_mL.any()):
        yield Reason("aliquots", "what happened after a sample was taken is not written", "remark")


def _no_rate(balance: MetalBalance) -> Iterator[Reason]:
    dissolved = balance.dissolved_g[~np.isnan(balance.dissolved_g)]
    if dissolved.size and dissolved.size < _FEWEST_READINGS:
        yield Reason("no rate", f"{dissolved.size} readings: little to find a rate by", "remark")
    elif dissolved.size and dissolved[0] > _ALL_AT_ONCE * dissolved.max() > 0.0:
        share = 100.0 * dissolved[0] / dissolved.max()
        text = f"{share:.0f} % of what dissolves is there at the first reading: no rate to find"
        yield Reason("no rate", text, "remark", f"{100 * _ALL_AT_ONCE:.0f} %")


def _no_closure(test: Test, balance: MetalBalance) -> Iterator[Reason]:
    if balance.closure is not None or not test.is_closed_out:
        return
    missing = [
        name
        for name, value in (
            ("head assay", balance.head_assay_kg_per_t),
            ("tail assay", balance.tail_kg_per_t),
            ("dissolved metal", balance.final_dissolved_g),
        )
        if value is None
    ]
    yield Reason("no closure", f"no {' and no '.join(missing)}: nothing checks it", "remark")


def judgement_table(judgements: Iterable[Judgement]) -> ResultTable:
    """Return one row a test and analyte: verdict, extraction, reasons, what to repeat."""
    columns = (
        Column("test", "Test"),
        Column("domain", "Domain"),
        Column("analyte", "Analyte"),
        Column("verdict", "Judgement"),
        Column("extraction", "Extraction, reconciled", "%"),
        Column("low", "Low", "%"),
        Column("high", "High", "%"),
        Column("closure", "Closure"),
        Column("reasons", "Reasons (limit)"),
        Column("repeat", "To repeat"),
    )
    records = (_record(one) for one in judgements)
    caption = (
        "A repeat that is asked for leaves the test in tables and fits; only the user excludes, "
        "with a reason and a name."
    )
    return ResultTable.from_records("judgement", columns, records, caption)


def _record(one: Judgement) -> dict[str, Any]:
    found = one.reconciliation
    return {
        "test": one.test,
        "domain": one.key.rpartition("/")[0],
        "analyte": one.analyte,
        "verdict": one.verdict,
        "extraction": None if found is None else 100.0 * found.extraction,
        "low": None if found is None else 100.0 * found.low,
        "high": None if found is None else 100.0 * found.high,
        "closure": one.balance.closure,
        "reasons": "; ".join(
            f"{reason.text} ({reason.limit})" if reason.limit else reason.text
            for reason in one.reasons
        ),
        "repeat": "; ".join(one.repeats),
    }
