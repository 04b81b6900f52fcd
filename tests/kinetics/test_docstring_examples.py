"""The examples in the docstrings of the laws and sizes give what they say."""

import doctest
import importlib

import pytest

MODULES = (
    "testwork.sizes",
    *(f"kinetics.{m}" for m in ("particle_law", "other_laws", "rate_law", "box")),
)


@pytest.mark.parametrize("module", MODULES)
def test_examples_run(module):
    outcome = doctest.testmod(importlib.import_module(f"leachkin.{module}"))
    assert outcome.attempted > 0
    assert outcome.failed == 0
