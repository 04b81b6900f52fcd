"""A budget without any metal, ends of a range from the command line, sulphide in the heads."""

from __future__ import annotations

import pytest

from leachkin.campaign import read_campaign, run_campaign
from leachkin.errors import InputProblems

BUDGET = """format = 1
[campaign]
title = "Reagents of next month"
[budget]
currency = "USD"
ore_rate = "1000 t/month"
[budget.consumption]
CaO = "2 kg/t"
[budget.prices.CaO]
purity = "90 %"
price = 150
per = "t"
date = "2026-11-30"
delivered = true
"""
CEMENTATION = """
[cementation]
precipitant = "zinc"
flow = "10 m3/h"
recovery = "99 %"
[cementation.metals]
Au = "2 mg/L"
"""


def test_a_budget_alone_names_no_metal(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(BUDGET)
    stage = run_campaign(read_campaign(path)).budget
    # 2 kg/t of 100 % CaO is 2/0.9 kg/t as received, 1000 t of ore, 150 a tonne
    assert stage.cost_per_month.value == pytest.approx(2 / 0.9 * 150)
    assert stage.cost_per_kg_metal.value is None


@pytest.mark.parametrize("table", ["heap", "tank", "rate_law", "tables"])
def test_what_speaks_of_a_metal_asks_for_it(tmp_path, table):
    path = tmp_path / "campaign.toml"
    path.write_text(f"{BUDGET}\n[{table}]\n")
    with pytest.raises(InputProblems, match=rf"row 2.*metals is missing, and there is \[{table}\]"):
        read_campaign(path)


@pytest.mark.parametrize(
    ("key", "text", "message"),
    [
        ("low", "0.9", r"--set, heap\.contacted_fraction: low 0\.9, value 0\.85, high 0\.95"),
        ("value", "abc", r"--set, heap\.contacted_fraction: 'abc' is not a number"),
    ],
)
def test_an_end_of_a_range_from_the_command_line_is_said_to_be(
    folder, heap_text, key, text, message
):
    with_range = "contacted_fraction = { value = 0.85, low = 0.75, high = 0.95 }\n[heap.sizes]"
    path = folder / "campaign.toml"
    path.write_text(path.read_text() + heap_text.replace("[heap.sizes]", with_range))
    with pytest.raises(InputProblems, match=message):
        read_campaign(path, {f"heap.contacted_fraction.{key}": text})
    changed = read_campaign(path, {"heap.contacted_fraction.low": "0.8"}).settings
    assert changed.values["heap.contacted_fraction"].low == 0.8
    assert changed.values["heap.contacted_fraction"].high == 0.95


@pytest.mark.parametrize("heading", ["sulphide S (%)", "sulfide S (%)"])
def test_sulphide_of_the_heads_reaches_the_caution(folder, heading):
    (folder / "heads.csv").write_text(f"domain,Cu (%),{heading}\noxide,0.68,0.25\n")
    cautions = run_campaign(read_campaign(folder), draws=0).cautions
    caution = next(c for c in cautions if c.name == "hydrogen sulphide")
    assert (caution.state, caution.unit) == ("present", "% S2-")
    assert caution.number == pytest.approx(0.25)


def test_total_sulphur_is_not_taken_for_sulphide(folder):
    (folder / "heads.csv").write_text("domain,Cu (%),total S (%)\noxide,0.68,0.25\n")
    cautions = run_campaign(read_campaign(folder), draws=0).cautions
    assert next(c for c in cautions if c.name == "hydrogen sulphide").state == "not measured"
