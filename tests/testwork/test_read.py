"""Sheets become tests: units, replicates, sizes, heads, exclusions, and the row of everything."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems, UnitError
from leachkin.files import read_sheet
from leachkin.testwork import (
    Exclusion,
    TestworkSettings,
    balance_table,
    domain_heads,
    explain_balance,
    extraction_table,
    metal_balance,
    read_precision,
    read_tests,
    test_inventory,
)

TESTS = "test,dry solids (g),solution (mL),temperature (degC),aliquots\nB1,500,1000,25,returned\n"
READINGS = "test,time (h),aliquot (mL),Cu (g/L)\nB1,2,20,1\nB1,24,20,2\n"


def test_the_good_sheets_give_no_problem(read_with):
    tests, problems = read_with()
    assert problems == []
    one, other = tests["B1"], tests["B2"]
    assert (one.domain, one.kind, one.solids_g, one.solution_mL) == (
        "oxide",
        "bottle roll",
        500,
        1000,
    )
    assert_allclose(one.temperature_K, 298.15, rtol=1e-12)
    assert (one.reagent, one.reagent_g_per_L, one.stirring_rpm) == ("H2SO4", 20.0, None)
    assert_allclose(one.solution["Cu"].value, [0.674, 1.118, 1.988], rtol=1e-12)
    assert_allclose(one.solution["Cu"].sd, 0.015 * one.solution["Cu"].value, rtol=1e-12)
    assert one.solution["Cu"].rows == (2, 3, 4)
    assert set(one.solution) == {"Cu", "Fe"}
    assert set(other.solution) == {"Cu"}
    assert other.pH is not None
    assert np.isnan(other.pH).all()
    assert one.rows == {"tests.csv": (2,), "readings.csv": (2, 3, 4), "closeout.csv": (2, 3)}
    assert (one.state, other.state) == ("ready", "running")


def test_replicates_of_heads_and_tails_are_averaged(read_with):
    tests, _ = read_with()
    head = tests["B1"].heads["Cu"]
    assert_allclose(head.value_kg_per_t, 6.8, rtol=1e-12)
    assert head.replicates == 3
    assert_allclose(head.sd_kg_per_t, 0.1 / np.sqrt(3), rtol=1e-12)  # 6.7, 6.8, 6.9
    assert_allclose(head.scatter_kg_per_t, 0.02 * 6.8, rtol=1e-12)
    assert_allclose(head.charge_sd_kg_per_t, np.hypot(0.1 / np.sqrt(3), 0.136), rtol=1e-12)
    single = tests["B1"].heads["CaCO3"]
    assert_allclose([single.value_kg_per_t, single.sd_kg_per_t], [9.0, 0.18], rtol=1e-12)
    assert_allclose(tests["B1"].heads["As"].value_kg_per_t, 0.045, rtol=1e-12)
    (residue,) = tests["B1"].products
    assert residue.amount == 485.0
    value, sd, count = residue.grade["Cu"]
    assert_allclose([value, sd], [2.6, 0.03 * 2.6 / np.sqrt(2)], rtol=1e-12)
    assert count == 2


def test_sizes_from_the_pair_or_the_sieves(read_with):
    tests, _ = read_with()
    assert_allclose(tests["B1"].sizes.size_mm, [np.sqrt(4.75 * 6.7)], rtol=1e-12)
    sieved = tests["B2"].sizes
    assert_allclose(sieved.size_mm, np.sqrt([6.7 * 4.75, 4.75 * 2.36]), rtol=1e-12)
    assert_allclose(sieved.mass_share, [0.6, 0.4], rtol=1e-12)
    assert_allclose(sieved.metal_share, np.array([0.42, 0.32]) / 0.74, rtol=1e-12)


@pytest.mark.parametrize("missing", ["readings", "heads", "closeout", "sieves"])
def test_each_sheet_may_be_absent(read_with, missing):
    tests, problems = read_with(without=(missing,))
    assert problems == []
    assert list(tests) == ["B1", "B2"]
    if missing == "readings":
        assert tests["B1"].state == "no readings"
        assert metal_balance(tests["B1"], "Cu").final_by_tail is not None


def test_readings_need_the_tests_sheet(read_with):
    tests, problems = read_with(without=("tests",))
    assert tests == {}
    assert [p.level for p in problems] == ["stop"]
    assert "there is no tests sheet" in problems[0].found
    assert read_tests({}, None) == ((), ())


def test_columns_in_any_order_and_unit(read_texts):
    tests, problems = read_texts(
        tests="Aliquots;Temperature (K);SOLUTION (L);dry_solids (kg);Test\n"
        "not replaced;298,15;1;0,5;B1\n",
        readings="note 1;Cu (kg/m3);aliquot (L);time (min);test;Comment\nx;0,5;0,02;120;B1;y\n",
        heads="Cu (kg/t);Au (g/t)\n6,8;1,5\n",
    )
    assert problems == []
    test = tests["B1"]
    assert_allclose([test.solids_g, test.solution_mL, test.temperature_K], [500, 1000, 298.15])
    assert_allclose([test.time_h[0], test.aliquot_mL[0]], [2.0, 20.0], rtol=1e-12)
    assert_allclose(test.solution["Cu"].value, [0.5], rtol=1e-12)
    assert_allclose([test.heads[a].value_kg_per_t for a in ("Cu", "Au")], [6.8, 0.0015], rtol=1e-12)


def test_units_in_cells_and_ions_and_other_reagents(read_texts):
    tests, problems = read_texts(
        tests=TESTS,
        readings="test,time (h),aliquot (mL),Fe2+ (g/L),CaO added (g),H2SO4 added (g)\n"
        "B1,2,20 mL,0.4 g/L,0.5,1\n",
    )
    assert problems == []
    assert_allclose(tests["B1"].solution["Fe2+"].value, [0.4], rtol=1e-12)
    assert tests["B1"].added_g["CaO"].tolist() == [0.5]
    assert tests["B1"].reagent_added_g.tolist() == [1.0]


def test_the_narrowest_head_applies(read_texts):
    tests, problems = read_texts(
        tests="test,domain,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
        "temperature (degC),aliquots\nB1,oxide,500,1000,1,2,25,returned\n"
        "B2,oxide,500,1000,2,4,25,returned\nB3,mixed,500,1000,2,4,25,returned\n"
        "B4,oxide,500,1000,1,2,25,returned\n",
        heads="test,domain,size lower (mm),size upper (mm),Cu (%),Fe (%)\n"
        ",,,,0.1,1\n,oxide,,,0.2,\n,oxide,1,2,0.3,\nB4,,,,0.4,\n",
    )
    assert problems == []
    copper = [tests[n].heads["Cu"].value_kg_per_t for n in ("B1", "B2", "B3", "B4")]
    assert_allclose(copper, [3.0, 2.0, 1.0, 4.0], rtol=1e-12)
    assert all(test.heads["Fe"].value_kg_per_t == 10.0 for test in tests.values())


def test_heads_of_a_domain_without_tests(tmp_path, settings):
    (tmp_path / "heads.csv").write_text("domain,Cu (%)\noxide,0.68\nmixed,0.5\n")
    heads, problems = domain_heads(read_sheet("heads.csv", tmp_path), settings, "oxide")
    assert problems == ()
    assert_allclose(heads["Cu"].value_kg_per_t, 6.8, rtol=1e-12)


def test_slurry_becomes_solids_and_solution(read_texts):
    tests, problems = read_texts(
        tests=TESTS,
        readings=READINGS,
        closeout="test,product,mass (g),volume (mL),Cu (%),Cu (g/L)\n"
        "B1,slurry sample,20,40,0.2,2\nB1,residue,465,,0.2,\nB1,filtrate,,900,,2\n"
        "B1,wash,,200,,0.2\nB1,wash,,100,,0.1\n",
    )
    assert problems == []
    names = [(p.name, p.is_solution, p.amount) for p in tests["B1"].products]
    assert names == [
        ("slurry sample solids", False, 20.0),
        ("slurry sample solution", True, 40.0),
        ("residue", False, 465.0),
        ("filtrate", True, 900.0),
        ("wash", True, 200.0),
        ("wash", True, 100.0),
    ]
    balance = metal_balance(tests["B1"], "Cu")
    assert_allclose(balance.final_dissolved_g, 0.08 + 1.8 + 0.04 + 0.01, rtol=1e-12)
    assert_allclose(balance.final_undissolved_g, 0.97, rtol=1e-12)


def test_logged_temperature_and_titration_at_the_start(read_texts):
    tests, problems = read_texts(
        tests="test,dry solids (g),solution (mL),aliquots\nB1,500,1000,returned\n",
        readings="test,time (h),aliquot (mL),Cu (g/L),temperature (degC),free H2SO4 (g/L)\n"
        "B1,0,0,0,20,19\nB1,2,20,1,30,10\nB1,4,20,2,,8\n",
    )
    assert problems == []
    test = tests["B1"]
    assert_allclose(test.temperature_K, 298.15, rtol=1e-12)
    assert test.reagent_g_per_L == 19.0
    history = test.history
    assert_allclose(np.interp([0, 1, 2, 4], history.time_h, history.temperature_K) - 273.15,
                    [20, 25, 30, 30], rtol=1e-12)  # fmt: skip
    assert_allclose(
        np.interp([0, 1, 2, 3, 4], history.time_h, history.reagent_g_per_L),
        [19, 14.5, 10, 9, 8],
        rtol=1e-6,
    )


def test_exclusions_name_a_test_and_a_time(read_with, settings):
    exclusions = (
        Exclusion("B1", 6.0, "lid off", "a chemist"),
        Exclusion("B2", None, "leaked", "a chemist"),
        Exclusion("B1", 7.0, "no such time", "a chemist"),
        Exclusion("B12", 6.0, "no such test", "a chemist"),
    )
    tests, problems = read_with(used=replace(settings, exclusions=exclusions))
    assert tests["B2"].state == "excluded"
    assert tests["B1"].exclusions == (exclusions[0], exclusions[2])
    texts = [str(p) for p in problems]
    assert texts[0] == "exclude[2].time: test B1 has no reading at 7 h. Allowed: 2, 6, 24 h"
    assert "exclude[3].test: unknown test 'B12'" in texts[1]


def test_many_bad_cells_are_counted_not_listed(read_texts):
    rows = "".join(f"B1,{i},20,bad\n" for i in range(1, 101))
    _, problems = read_texts(tests=TESTS, readings=READINGS.split("\n")[0] + "\n" + rows)
    stops = [p for p in problems if p.level == "stop"]
    assert len(stops) == 13
    assert "as in 88 rows from here on" in stops[-1].found


def test_precision_as_text():
    assert read_precision("1.5 %", "g/L") == (0.0, 0.015)
    assert read_precision("0.02 g/t", "kg/t") == (2e-5, 0.0)
    assert read_precision("2 mg/L + 1.5 %", "g/L") == (0.002, 0.015)
    for text in ("1 % + 2 %", "1 g/L + 2 g/L", "-1 %"):
        with pytest.raises(UnitError, match="is not a precision"):
            read_precision(text, "g/L")


def test_precision_must_be_stated_and_above_zero():
    good = dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
    used = TestworkSettings(("Au",), "NaCN", {**good, "solution/Au": (1e-6, 0.03)})
    assert_allclose(used.sd("solution", np.array([1e-3]), "Au"), [3.1e-5], rtol=1e-12)
    assert_allclose(used.sd("solution", 1e-3, "Ag"), 2e-5, rtol=1e-12)
    with pytest.raises(InputProblems, match="precision: nothing for 'tail'"):
        TestworkSettings(("Au",), None, {k: v for k, v in good.items() if k != "tail"})
    with pytest.raises(InputProblems, match="head: floor 0.0, proportional 0.0"):
        TestworkSettings(("Au",), None, good | {"head": (0.0, 0.0)})


def test_explained_line_by_line(read_with):
    # by hand: 1.988 + 0.02 (0.674 + 1.118) = 2.024 g; residue 485 x 2.6 / 1000 = 1.261 g;
    # head 3.285 / 0.5 = 6.570 kg/t; 61.61 %, 2.024 / 3.4 = 59.52 %, 1 - 1.261 / 3.4 = 62.91 %
    tests, _ = read_with()
    lines = explain_balance(tests["B1"], "Cu")
    plain = [n for n, line in enumerate(lines) if line.startswith("Reconciled extraction")]
    assert 10 <= plain[0] <= 13
    assert len(lines) <= 24
    text = "\n".join(lines)
    for part in (
        "B1, Cu: bottle roll, domain oxide, 500 g dry solids in 1000 mL",
        "Aliquots: replaced by reagent solution; volume before each sample 1000 mL",
        "Taken out before 24 h: (0.674 + 1.118) g/L x 20 mL / 1000 = 0.03584 g Cu",
        "In the vessel at 24 h: 1.988 g/L x 1000 mL / 1000 = 1.988 g",
        "1.988 g + 0.03584 g = 2.024 g",
        "Left in the residue: 485 g x 2.6 kg/t / 1000 = 1.261 g",
        "(2.024 g + 1.261 g) / 500 g x 1000 = 6.57 ",
        "= 61.61 +-",
        "= 59.52 +-",
        "= 62.91 +-",
        "Closure, calculated over assay head: 6.57 / 6.8 = 0.966",
        "By reading, on the calculated head: 2 h 20.52 %, 6 h 34.45 %, 24 h 61.61 %",
    ):
        assert part in text, part
    running = "\n".join(explain_balance(tests["B2"], "Cu"))
    assert "volume before each sample 980 to 1000 mL" in running
    assert "No Cu tail: the figures are provisional, on the assay head." in running


def test_explained_with_filtrate_make_up_and_nothing(read_texts):
    tests, _ = read_texts(
        tests=TESTS.replace("aliquots", "Cu in start solution (g/L),aliquots").replace(
            "25,", "25,0.1,"
        ),
        readings=READINGS,
        closeout="test,product,volume (mL),Cu (g/L)\nB1,filtrate,950,2\n",
    )
    text = "\n".join(explain_balance(tests["B1"], "Cu"))
    assert "- 0.1 g brought in = 1.9 g" in text
    assert (
        "Dissolved at close-out, with all aliquots: filtrate 2 g/L x 950 mL / 1000 -> 1.8 g" in text
    )
    tests, _ = read_texts(tests=TESTS, heads="Cu (%)\n0.68\n")
    assert "No readings." in explain_balance(tests["B1"], "Cu")


def test_tables(read_with):
    tests, _ = read_with()
    balances = [metal_balance(test, "Cu") for test in tests.values()]
    first, second = balance_table(balances).to_records()
    assert_allclose(first["on_calculated_head"], 61.61, rtol=0, atol=0.005)
    assert_allclose(first["head_calculated"], 0.6570, rtol=0, atol=5e-5)
    assert_allclose(first["correction"], 100 * 0.03584 / 3.28484, rtol=1e-4)
    assert (first["grade_unit"], first["provisional"], second["provisional"]) == ("%", False, True)
    assert second["on_calculated_head"] is None
    assert second["on_assay_head"] > 0
    long = extraction_table(balances)
    assert long.column("time_h") == [2.0, 6.0, 24.0, 120.0, 360.0]
    assert long.column("on_calculated_head")[3:] == [None, None]
    inventory = test_inventory(list(tests.values()))
    assert inventory.column("state") == ["ready", "running"]
    assert inventory.column("readings") == [3, 2]
    assert inventory.column("temperature_degC") == [25.0, 40.0]


def test_gold_is_shown_in_g_per_t(read_texts):
    tests, problems = read_texts(
        tests=TESTS,
        readings=READINGS.replace("Cu (g/L)", "Au (mg/L)"),
        heads="Au (g/t)\n4.4\n",
    )
    assert problems == []
    (record,) = balance_table([metal_balance(tests["B1"], "Au")]).to_records()
    assert record["grade_unit"] == "g/t"
    assert_allclose(record["head_assay"], 4.4, rtol=1e-12)
