"""The bottle of a case as a test of the program."""

from __future__ import annotations

import numpy as np

from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.published_checks.cases import Case
from leachkin.testwork import Assays, History, MetalBalance, Product, Test, metal_balance

_ANALYTE = "Au"


def bottle_balance(case: Case) -> MetalBalance:
    """Return the metal balance of the bottle that a case describes.

    The samples are replaced by fresh solution; the residue is the charge, its tail in g/t.
    """
    time_h = np.array(case.numbers("time_h"))
    assay = np.array(case.numbers("assay_mg_per_L")) / 1e3
    none = np.zeros(len(time_h))
    aliquot = np.full(len(time_h), case.number("aliquot_mL"))
    tail = (case.number("tail_g_per_t") / 1e3, 0.0, 1)
    solids = case.number("solids_g")
    test = Test(
        name="bottle",
        domain="ore",
        kind="bottle roll",
        solids_g=solids,
        solution_mL=case.number("solution_mL"),
        sizes=None,
        temperature_K=STANDARD_TEMPERATURE_K,
        reagent_g_per_L=None,
        stirring_rpm=None,
        history=History(np.array([0.0]), np.array([STANDARD_TEMPERATURE_K])),
        aliquots="replaced by reagent solution",
        time_h=time_h,
        aliquot_mL=aliquot,
        makeup_mL=aliquot,
        solution={_ANALYTE: Assays(assay, none, np.zeros(len(time_h), dtype=np.int64))},
        products=(Product("residue", False, solids, {_ANALYTE: tail}),),
    )
    return metal_balance(test, _ANALYTE)
