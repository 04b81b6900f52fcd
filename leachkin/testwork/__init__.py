"""Testwork: sheets become tests, metal balances and observed values."""

from leachkin.testwork.answers import Answers
from leachkin.testwork.balance import metal_balance
from leachkin.testwork.bench_form import is_bench_sheet, tables_of_bench_sheet, test_names
from leachkin.testwork.column_log import extraction_of_column_log, is_column_log
from leachkin.testwork.control_chart import (
    ControlChart,
    RangeChart,
    individuals_chart,
    range_chart,
    zone_signals,
)
from leachkin.testwork.detection_limit import DetectionLimit, detection_limit
from leachkin.testwork.due import Addition, Due, addition_to_set_point, due_list, due_table
from leachkin.testwork.explain import explain_balance
from leachkin.testwork.judgement import (
    Judgement,
    JudgementLimits,
    Reason,
    judge_tests,
    judgement_table,
)
from leachkin.testwork.lab_export import is_lab_export, read_lab_export, read_quality
from leachkin.testwork.mixed_up import MixUp, mix_ups
from leachkin.testwork.names import EXAMPLE
from leachkin.testwork.observe import observe, observed_from_extraction
from leachkin.testwork.precision_estimate import DuplicatePrecision, precision_of_groups
from leachkin.testwork.quality import (
    DuplicatePair,
    QualityRecord,
    pair_values,
    precision_of_pairs,
)
from leachkin.testwork.quality_tables import (
    charts_of_standards,
    precision_by_analyte,
    quality_tables,
)
from leachkin.testwork.read import domain_heads, read_tests
from leachkin.testwork.reagent_ledger import (
    ReagentLedger,
    reagent_by_time_table,
    reagent_ledger,
    reagent_table,
    reagents_of,
)
from leachkin.testwork.reagent_use import ReagentUse, reagent_use
from leachkin.testwork.reconcile import (
    Adjustment,
    Candidate,
    GroupTest,
    Reconciliation,
    reconcile_balance,
)
from leachkin.testwork.reconciliation_words import (
    reconciled_table,
    reconciliation_lines,
    reconciliation_table,
    repeat_of,
    verdict_of,
)
from leachkin.testwork.records import (
    AliquotPolicy,
    Assays,
    Exclusion,
    Head,
    History,
    MetalBalance,
    Observed,
    Product,
    Test,
    VesselLog,
)
from leachkin.testwork.result_tables import balance_table, extraction_table, test_inventory
from leachkin.testwork.settings import BalanceLimits, TestworkSettings, read_precision
from leachkin.testwork.sizes import SizeDistribution
from leachkin.testwork.titration import (
    grams_to_set_point,
    stock_strength_g_per_L,
    stock_to_set_point_mL,
    strength_by_titration_g_per_L,
)

__all__ = [
    "EXAMPLE",
    "Addition",
    "Adjustment",
    "AliquotPolicy",
    "Answers",
    "Assays",
    "BalanceLimits",
    "Candidate",
    "ControlChart",
    "DetectionLimit",
    "Due",
    "DuplicatePair",
    "DuplicatePrecision",
    "Exclusion",
    "GroupTest",
    "Head",
    "History",
    "Judgement",
    "JudgementLimits",
    "MetalBalance",
    "MixUp",
    "Observed",
    "Product",
    "QualityRecord",
    "RangeChart",
    "ReagentLedger",
    "ReagentUse",
    "Reason",
    "Reconciliation",
    "SizeDistribution",
    "Test",
    "TestworkSettings",
    "VesselLog",
    "addition_to_set_point",
    "balance_table",
    "charts_of_standards",
    "detection_limit",
    "domain_heads",
    "due_list",
    "due_table",
    "explain_balance",
    "extraction_of_column_log",
    "extraction_table",
    "grams_to_set_point",
    "individuals_chart",
    "is_bench_sheet",
    "is_column_log",
    "is_lab_export",
    "judge_tests",
    "judgement_table",
    "metal_balance",
    "mix_ups",
    "observe",
    "observed_from_extraction",
    "pair_values",
    "precision_by_analyte",
    "precision_of_groups",
    "precision_of_pairs",
    "quality_tables",
    "range_chart",
    "read_lab_export",
    "read_precision",
    "read_quality",
    "read_tests",
    "reagent_by_time_table",
    "reagent_ledger",
    "reagent_table",
    "reagent_use",
    "reagents_of",
    "reconcile_balance",
    "reconciled_table",
    "reconciliation_lines",
    "reconciliation_table",
    "repeat_of",
    "stock_strength_g_per_L",
    "stock_to_set_point_mL",
    "strength_by_titration_g_per_L",
    "tables_of_bench_sheet",
    "test_inventory",
    "test_names",
    "verdict_of",
    "zone_signals",
]
