import json
import math

import pytest

from leachkin.campaign import read_campaign, run_campaign, what_if
from leachkin.errors import InputProblems

CEMENTATION = """format = 1
[campaign]
title = "Liquor alone"
metals = ["Cu"]
reagent = "H2SO4"
[cementation]
precipitant = "scrap iron"
flow = "100 m3/h"
metals = { Cu = "2 g/L" }
ferric = "1 g/L"
acid_taken = "0.7 g/L"
dissolved_oxygen = "0 mg/L"
recovery = "95 %"
purity = "100 %"
fines = "0 %"
"""


def numbers(tree):
    if isinstance(tree, dict):
        for value in tree.values():
            yield from numbers(value)
    elif isinstance(tree, list):
        for value in tree:
            yield from numbers(value)
    elif isinstance(tree, float):
        yield tree


@pytest.fixture
def bottles(folder):
    return run_campaign(read_campaign(folder / "campaign.toml"), draws=20)


def test_bottles_alone_give_no_plant_and_no_money(bottles):
    result = bottles.to_dict()
    assert set(result["kinetics"]) == set(result["balance"]) == {"oxide/Cu"}
    assert result["heap"] is result["tank"] is result["cementation"] is result["budget"] is None
    assert bottles.kinetics["oxide/Cu"].fit.law.name == "ash_layer"


def test_the_result_is_plain_json_without_nan(bottles):
    result = bottles.to_dict()
    assert json.loads(json.dumps(result, allow_nan=False)) == result
    assert all(math.isfinite(number) for number in numbers(result))
    assert result["schema"] == 1


def test_the_same_seed_gives_the_same_result(folder, bottles):
    again = run_campaign(read_campaign(folder / "campaign.toml"), draws=20)
    assert again.to_dict() == bottles.to_dict()


def test_a_missing_tail_is_provisional_on_the_assay_head(edit):
    path = edit("closeout.csv", "Q2,residue", "Q1,residue")
    result = run_campaign(read_campaign(path), "balance")
    rows = {row.test: row for row in result.balances["oxide/Cu"]}
    assert rows["Q2"].provisional and not rows["P1"].provisional
    assert rows["Q2"].final_on_calculated_head is None
    assert 0.7 < rows["Q2"].final_on_assay_head < 1.0


def test_more_than_the_head_is_a_note_with_causes(edit):
    path = edit("heads.csv", "0.68", "0.48")
    result = run_campaign(read_campaign(path), "balance")
    notes = [str(p) for p in result.problems if "of the assay head in solution" in p.found]
    assert notes and "a head assay that reads low" in notes[0]
    assert all(p.level == "note" for p in result.problems if "assay head in" in p.found)


def test_cementation_alone(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(CEMENTATION)
    stage = run_campaign(read_campaign(path), draws=0).cementation
    # practice of the trade, by stoichiometry: 0.879 + (0.5 * 1 + 0.569 * 0.7)/1.9
    assert stage.net_kg_per_kg.value == pytest.approx(1.35, abs=0.005)


def test_a_stage_without_its_table_stops_with_the_reason(folder):
    with pytest.raises(InputProblems, match=r"there is no table \[heap\]"):
        run_campaign(read_campaign(folder / "campaign.toml"), "heap")
    with pytest.raises(InputProblems, match="unknown stage 'heep'.*did you mean heap"):
        run_campaign(read_campaign(folder / "campaign.toml"), "heep")


def test_one_row_a_value_and_one_column_a_key(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(CEMENTATION)
    table = what_if(path, "cementation", vary={"ferric": ["0", "1", "4 g/L"]}, draws=0)
    factors = table.column("precipitant_net")
    assert len(factors) == 3 and factors[0] < factors[1] < factors[2]
    with pytest.raises(InputProblems, match="did you mean"):
        what_if(path, "cementation", vary={"feric": ["1 g/L"]}, draws=0)
    with pytest.raises(InputProblems, match="343 combinations"):
        seven = [f"{i} g/L" for i in range(1, 8)]
        what_if(
            path,
            "cementation",
            vary={"ferric": seven, "acid_taken": seven, "dissolved_oxygen": seven},
            draws=0,
        )
