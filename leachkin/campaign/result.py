"""The result of a run: every stage that was done, what was assumed, what should be known."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from leachkin.campaign.settings import Assumption
from leachkin.campaign.stage_cementation_more import CementationMore
from leachkin.campaign.stage_results import (
    BudgetStage,
    CementationStage,
    GangueStage,
    HeapStage,
    KineticsStage,
    TankStage,
)
from leachkin.hazards import Caution
from leachkin.problems import Problem
from leachkin.result_table import ResultTable
from leachkin.run_record import RunRecord
from leachkin.testwork import MetalBalance, Test

#: Version of the layout of results.json.
SCHEMA_VERSION = 1


@dataclass(frozen=True)
class CampaignResult:
    """What a run found; absent stages are None or empty.

    Attributes
    ----------
    title : str
    about : mapping of str to str
        prepared_by, checked_by, status, revision, metals, reagent.
    run : RunRecord
    tests : tuple of Test
    balances : mapping of "domain/analyte" to tuple of MetalBalance
    kinetics : mapping of "domain/metal" to KineticsStage
    gangue : GangueStage or None
    tank : TankStage or None
    heap : HeapStage or None
    cementation : CementationStage or None
    budget : BudgetStage or None
    cautions : tuple of Caution
    assumed : tuple of Assumption
        Defaults used, values assumed, ranges stated.
    excluded : tuple of str
        Readings that the user kept out of the fits.
    problems : tuple of Problem
        Questions and notes, with file and row.
    notes : tuple of str
        What should be known about the figures.
    level : float
        Level of the bands.
    next_test : tuple of str
        What further tests would tell, in sentences; empty where only some stages were run.
    cementation_more : CementationMore or None
        Order of potentials, rates, vessel, mixed potential, barren and site.
    """

    title: str
    about: Mapping[str, str]
    run: RunRecord
    tests: tuple[Test, ...] = ()
    balances: Mapping[str, tuple[MetalBalance, ...]] = field(default_factory=dict)
    kinetics: Mapping[str, KineticsStage] = field(default_factory=dict)
    gangue: GangueStage | None = None
    tank: TankStage | None = None
    heap: HeapStage | None = None
    cementation: CementationStage | None = None
    budget: BudgetStage | None = None
    cautions: tuple[Caution, ...] = ()
    assumed: tuple[Assumption, ...] = ()
    excluded: tuple[str, ...] = ()
    problems: tuple[Problem, ...] = ()
    notes: tuple[str, ...] = ()
    level: float = 0.95
    next_test: tuple[str, ...] = ()
    cementation_more: CementationMore | None = None

    def headline(self) -> tuple[str, ...]:
        """Return the first page in sentences: the answer, what rules, reagents, what is assumed."""
        from leachkin.campaign.headline import headline

        return headline(self)

    def tables(self) -> tuple[ResultTable, ...]:
        """Return every table of the result, in reading order."""
        from leachkin.campaign.result_tables import result_tables

        return result_tables(self)

    def to_dict(self) -> dict[str, Any]:
        """Return the result as plain types for results.json; what is not finite is null."""
        from leachkin.campaign.result_dict import result_dict

        return result_dict(self)
