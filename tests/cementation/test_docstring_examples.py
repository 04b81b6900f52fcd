"""The examples in the docstrings of chemistry and cementation give what they say."""

import doctest
import importlib

import pytest

MODULES = (
    *(f"chemistry.{m}" for m in ("activity", "aqueous_constants", "complexes", "diffusion",
                                 "liquors", "mass_balances", "speciation", "transport", "water")),
    *(f"cementation.{m}" for m in ("barren", "charge", "course", "demand", "electrode",
                                   "feasibility", "liquor_state", "middle", "mixed_potential",
                                   "order", "rate_fit", "rate_laws", "zinc_practice")),
    *(f"hazards.{m}" for m in ("cautions", "gas_rules", "reagent_rules")),
)  # fmt: skip


@pytest.mark.parametrize("module", MODULES)
def test_examples_run(module):
    outcome = doctest.testmod(importlib.import_module(f"leachkin.{module}"))
    assert outcome.attempted > 0
    assert outcome.failed == 0
