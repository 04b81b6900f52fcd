import pytest

from leachkin.campaign import Assumption
from leachkin.report import for_people, stage_tables, worst_assumptions
from leachkin.report.first_page import rule_words
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
