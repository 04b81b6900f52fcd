from dataclasses import replace

import pytest

from leachkin.campaign import Assumption, LawElsewhere, Quantity
from leachkin.campaign.stage_results import BandPart
from leachkin.report import for_people, stage_tables, worst_assumptions
from leachkin.report.first_page import first_page, rule_words
from leachkin.report.sections import sections
from leachkin.report.words import band_words, celsius, file_word
from leachkin.result_table import Column, ResultTable


def test_long_heap_tables_are_shown_at_round_days():
    columns = (Column("day", "Day", "d"), Column("rules", "What rules"))
    rows = tuple((float(day), "ore") for day in range(1, 121))
    shown = for_people(ResultTable("heap", columns, rows))
    assert shown.column("day") == [10.0 * i for i in range(1, 13)]
    odd = for_people(ResultTable("heap", columns, rows[:47]))
    assert odd.column("day")[-2:] == [45.0, 47.0]


def test_empty_columns_and_rows_beyond_forty_are_not_shown():
    columns = (Column("a", "a"), Column("low", "low"))
    shown = for_people(ResultTable("x", columns, tuple((i, None) for i in range(50)), "Caption"))
    assert [column.key for column in shown.columns] == ["a"]
    assert len(shown.rows) == 40
    assert shown.caption == "Caption (10 more rows in the files)"


@pytest.mark.parametrize("stage", ["extraction", "fit", "heap", "cementation", "budget"])
def test_every_stage_of_the_chain_has_tables(copper, stage):
    names = [table.name for table in stage_tables(copper, stage)]
    assert names
    assert not any(name.startswith(("residuals", "summary")) for name in names)


def test_no_tank_no_tables(copper):
    assert stage_tables(copper, "tank") == ()


def test_the_widest_ranges_are_the_worst_assumptions():
    rows = [
        Assumption("heap.a", 1.0, "", 0.9, 1.1, "near"),
        Assumption("heap.b", 3.0, "d", 2.0, 5.0, "wide"),
        Assumption("heap.c", 2.0, why="no range"),
        Assumption("campaign.reagent", "H2SO4", why="text"),
    ]
    worst = worst_assumptions(rows)
    assert worst == [
        "heap.b = 3 d (2 to 5): wide",
        "heap.a = 1 (0.9 to 1.1): near",
        "heap.c = 2: no range",
    ]


def test_words():
    assert band_words(0.8, ("fit", "scale-up ranges")) == "P10 (low) to P90: fit, scale-up ranges"
    assert band_words(None, ()) == "no band: no draws were made"
    assert celsius(290.15) == "17 \u00b0C"
    assert file_word("ore body/Cu") == "ore_body_Cu"
    assert rule_words("reagent", "H2SO4") == "H2SO4 supply"


def test_the_first_page_says_where_the_plant_leaves_its_tests(copper):
    page = first_page(copper)
    words = "utside the tests in temperature, size and time."
    assert f"O{words}" in page.basis
    assert f"Quantities o{words}" in page.money[0]
    assert page.extrapolated == copper.heap.outside


def test_each_part_of_the_band_alone_stands_on_the_first_page(copper):
    parts = {part.name: part for part in first_page(copper).band}
    alone = {part.cause: part.figure for part in copper.heap.band_parts}
    for cause in ("fit", "scale-up"):
        ends = [100 * end for end in (alone[cause].low, alone[cause].high)]
        assert parts[cause].text.endswith(f"; alone {ends[0]:.1f} to {ends[1]:.1f} %")
        assert parts[cause].inside
    assert parts["law"].text == "one law; no other law is left"


def test_a_law_beside_it_is_in_the_band_and_its_figure_shown(copper):
    other = LawElsewhere("chemical", 0.655, True, 0.3)
    law = BandPart("law", Quantity(0.70, "1", 0.655, 0.70), "both")
    parts = tuple(law if part.cause == "law" else part for part in copper.heap.band_parts)
    verdict = "The choice of law does change your plant figure: both."
    heap = replace(copper.heap, other_laws=(other,), band_parts=parts, law_verdict=verdict)
    page = first_page(replace(copper, heap=heap))
    said = next(part for part in page.band if part.name == "law")
    assert said.inside
    assert said.text == (
        "2 laws by AICc weight; others not rejected: chemical 65.5 %; alone 65.5 to 70.0 %"
    )
    assert page.undecided[-1] == verdict


def test_a_table_stands_in_one_section(copper):
    shown = [table.name for section in sections(copper, ()) for table in section.tables]
    assert len(shown) == len(set(shown))
    by_key = {section.key: section for section in sections(copper, ())}
    names = {table.name for table in by_key["mechanism"].tables}
    assert {"mechanism_oxide_Cu", "tests_of_need_oxide_Cu", "residual_checks_oxide_Cu"} <= names


def test_the_mechanism_opens_with_what_is_known_and_whether_it_matters(copper):
    by_key = {section.key: section for section in sections(copper, ())}
    verdict = copper.kinetics["oxide/Cu"].ranking.verdict
    assert by_key["mechanism"].text[:2] == (f"oxide/Cu: {verdict}", copper.heap.law_verdict)
    said = first_page(copper).undecided[0]
    assert "Evidence undetermined" in said or "Evidence consistent" in said
    assert "activation energy (a hint)" in said


def test_a_chance_near_nothing_is_no_more_than_that():
    columns = (Column("larger", "Larger law"), Column("chance", "Chance"))
    shown = for_people(ResultTable("nested_tests_x", columns, (("a", 3e-160), ("b", 0.56))))
    assert shown.column("chance") == ["< 0.001", 0.56]
