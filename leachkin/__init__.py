"""leachkin: leach test sheets to extraction, kinetics, plant, cementation and a reagent budget.

sheets -> tests -> metal balance -> observed extraction -> fitted rate law -> ore curve ->
tanks, heap -> solution -> cementation -> reagents and budget -> report

Public names are served on first use, so that importing the package costs nothing.
"""

from __future__ import annotations

import importlib
from typing import Any

_HOME_OF = {
    "LeachkinError": "leachkin.errors",
    "InputProblems": "leachkin.errors",
    "TableError": "leachkin.errors",
    "UnitError": "leachkin.errors",
    "MissingExtraError": "leachkin.errors",
    "LeachkinWarning": "leachkin.errors",
    "Problem": "leachkin.problems",
    "ResultTable": "leachkin.result_table",
    "SizeDistribution": "leachkin.testwork",
    "Test": "leachkin.testwork",
    "Observed": "leachkin.testwork",
    "MetalBalance": "leachkin.testwork",
    "metal_balance": "leachkin.testwork",
    "observe": "leachkin.testwork",
    "History": "leachkin.testwork",
    "observed_from_extraction": "leachkin.testwork",
    "ParticleLaw": "leachkin.kinetics",
    "RateLaw": "leachkin.kinetics",
    "Resistance": "leachkin.kinetics",
    "Reference": "leachkin.kinetics",
    "OreCurve": "leachkin.kinetics",
    "ReagentDemand": "leachkin.kinetics",
    "FitResult": "leachkin.kinetics",
    "fit_curve": "leachkin.kinetics",
    "rank_laws": "leachkin.kinetics",
    "fit_tests": "leachkin.kinetics",
    "rank_tests": "leachkin.kinetics",
    "rank_tests_by_p80": "leachkin.kinetics",
    "Ranking": "leachkin.kinetics",
    "nested_test": "leachkin.kinetics",
    "gather_evidence": "leachkin.kinetics",
    "Evidence": "leachkin.kinetics",
    "leave_one_out": "leachkin.kinetics",
    "residual_checks": "leachkin.kinetics",
    "next_tests": "leachkin.kinetics",
    "NextTests": "leachkin.kinetics",
    "Candidate": "leachkin.kinetics",
    "Bottle": "leachkin.kinetics",
    "Noise": "leachkin.kinetics",
    "simulate_tests": "leachkin.kinetics",
    "simulate_observed": "leachkin.kinetics",
    "write_simulated": "leachkin.kinetics",
    "fit_arrhenius": "leachkin.kinetics",
    "arrhenius_two_step": "leachkin.kinetics",
    "Drive": "leachkin.kinetics",
    "DriveForm": "leachkin.kinetics",
    "ReagentBalance": "leachkin.kinetics",
    "need_table": "leachkin.kinetics",
    "tests_of_need": "leachkin.kinetics",
    "profile_intervals": "leachkin.kinetics",
    "bootstrap_tests": "leachkin.kinetics",
    "fit_with_intervals": "leachkin.kinetics",
    "posterior_tests": "leachkin.kinetics",
    "batch_leach": "leachkin.scaleup",
    "tank_train": "leachkin.scaleup",
    "heap": "leachkin.scaleup",
    "standard_potential": "leachkin.chemistry",
    "cell": "leachkin.chemistry",
    "complexed_potential": "leachkin.chemistry",
    "speciate": "leachkin.chemistry",
    "free_cyanide": "leachkin.chemistry",
    "Solution": "leachkin.cementation",
    "Precipitant": "leachkin.cementation",
    "cementation_demand": "leachkin.cementation",
    "solution_order": "leachkin.cementation",
    "mixed_potential": "leachkin.cementation",
    "mixed_course": "leachkin.cementation",
    "fit_to_barren": "leachkin.cementation",
    "SiteBarren": "leachkin.cementation",
    "CementationTest": "leachkin.cementation",
    "fit_cementation": "leachkin.cementation",
    "fit_cementation_tests": "leachkin.cementation",
    "rank_cementation": "leachkin.cementation",
    "launder": "leachkin.cementation",
    "bed": "leachkin.cementation",
    "stirred_tanks": "leachkin.cementation",
    "dust_and_filter": "leachkin.cementation",
    "barren_drift": "leachkin.cementation",
    "reconcile_factor": "leachkin.cementation",
    "cyanide_window": "leachkin.cementation",
    "deaeration_table": "leachkin.cementation",
    "Facts": "leachkin.hazards",
    "cautions": "leachkin.hazards",
    "reagent_budget": "leachkin.reagents",
    "read_campaign": "leachkin.campaign",
    "check_campaign": "leachkin.campaign",
    "write_template_workbook": "leachkin.campaign",
    "run_campaign": "leachkin.campaign",
    "write_report": "leachkin.report",
    "read_results": "leachkin.report",
    "verify": "leachkin.published_checks",
}

__all__ = sorted([*_HOME_OF, "__version__"])


def __getattr__(name: str) -> Any:
    if name == "__version__":
        from leachkin.run_record import program_version

        return program_version()
    if name in _HOME_OF:
        return getattr(importlib.import_module(_HOME_OF[name]), name)
    raise AttributeError(f"module 'leachkin' has no attribute {name!r}")


def __dir__() -> list[str]:
    return __all__
