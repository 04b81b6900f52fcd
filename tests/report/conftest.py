"""Results to write reports of: the copper example with one law, its bottles alone, zinc tanks."""

from pathlib import Path

import pytest

from leachkin.campaign import read_campaign, run_campaign

COPPER = Path(__file__).parents[2] / "example_runs" / "copper_heap" / "campaign.toml"
ZINC = """
format = 1
[campaign]
title = "Brindlemoor <script>alert(1)</script> & sons"
metals = ["Zn"]
reagent = "H2SO4"
prepared_by = "bench chemist (invented)"
[rate_law]
law = "chemical"
domain = "calcine"
metal = "Zn"
head = "58 %"
tau_chemical = "13 min"
activation_energy_chemical = "28 kJ/mol"
reagent_order = 0.8
reference_temperature = "50 degC"
reference_reagent = "55 g/L"
reference_size = "0.0892 mm"
ultimate = 0.8938
source = "stated"
[tank]
residence_times = ["15 min", "15 min", "15 min", "15 min"]
solids = "60 kg/m3"
temperature = "50 degC"
feed_reagent = "55 g/L"
demand = "1.5 kg/kg"
"""
ONE_LAW = {"fit.laws": "ash_layer+chemical"}


@pytest.fixture(scope="session")
def copper():
    return run_campaign(read_campaign(COPPER, ONE_LAW), draws=16)


@pytest.fixture(scope="session")
def bottles():
    return run_campaign(read_campaign(COPPER, ONE_LAW), "fit")


@pytest.fixture(scope="session")
def zinc(tmp_path_factory):
    path = tmp_path_factory.mktemp("zinc") / "campaign.toml"
    path.write_text(ZINC, encoding="utf-8")
    return run_campaign(read_campaign(path), draws=0)


@pytest.fixture(scope="session")
def copper_figures(copper):
    from leachkin.report.chosen_figures import report_figures

    return report_figures(copper)
