"""A way to call a command, and small campaigns to call it on."""

import pytest
from click.testing import CliRunner

from leachkin.cli.main import main

ZINC = """
format = 1
[campaign]
title = "Brindlemoor zinc calcine"
metals = ["Zn"]
reagent = "H2SO4"
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
BENCH = {
    "campaign.toml": """
format = 1
[campaign]
title = "Two bottles"
metals = ["Cu"]
[tables]
tests = "tests.csv"
readings = "readings.csv"
heads = "heads.csv"
closeout = "closeout.csv"
[fit]
laws = ["chemical", "ash_layer"]
""",
    "tests.csv": "test,domain,kind,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
    "temperature (degC),start H2SO4 (g/L),aliquots\n"
    "B1,oxide,bottle roll,500,1000,4.75,6.7,25,20,replaced by reagent solution\n"
    "B2,oxide,bottle roll,500,1000,4.75,6.7,40,20,replaced by reagent solution\n",
    "readings.csv": "test,time (h),aliquot (mL),make-up (mL),Cu (g/L)\n"
    + "".join(
        f"{test},{time},20,20,{copper}\n"
        for test, values in (("B1", (0.5, 0.9, 1.5, 2.1, 2.4)), ("B2", (0.7, 1.2, 1.8, 2.4, 2.5)))
        for time, copper in zip((2, 6, 24, 72, 168), values, strict=True)
    ),
    "heads.csv": "domain,replicate,Cu (%)\noxide,1,0.68\noxide,2,0.69\n",
    "closeout.csv": "test,product,mass (g),Cu (%)\nB1,residue,485,0.15\nB2,residue,485,0.12\n",
}


@pytest.fixture
def invoke():
    return lambda *words: CliRunner().invoke(main, [str(word) for word in words])


@pytest.fixture
def zinc(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(ZINC, encoding="utf-8")
    return path


@pytest.fixture
def bench(tmp_path):
    for name, text in BENCH.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    return tmp_path / "campaign.toml"
