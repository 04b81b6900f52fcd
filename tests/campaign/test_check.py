"""A check without a run: how the tests stand, what would run, what to type."""

from pathlib import Path

import pytest

from leachkin.campaign import campaign_file_page, check_campaign

PAGE = Path(__file__).parents[2] / "docs" / "reference" / "campaign_file.md"


@pytest.fixture
def mixed(edit):
    """Two bottles ready, one still running (no residue), one with a reading to explain."""
    edit("closeout.csv", "Q2,residue", "Q1,residue")
    return check_campaign(edit("readings.csv", "P1,1,20,", "P1,1,20,-"))


def test_states_are_counted(mixed):
    assert mixed.counts == {"ready": 2, "running": 1, "waiting for an answer": 1}
    assert mixed.summary.startswith("4 tests: 2 ready, 1 running, 1 need an answer; ")


def test_questions_come_with_the_line_to_type(mixed):
    (question,) = [p for p in mixed.problems if p.level == "ask" and "readings.csv" in p.where]
    assert question.row == 2
    (line,) = [line for line in mixed.paste if line.startswith(question.where)]
    assert 'write "<' in line
    assert [t.name for t in mixed.tables()][-1] == "to_paste"


def test_questions_do_not_keep_the_rest_from_running(mixed):
    assert mixed.stops == 0
    assert mixed.stages[:2] == ("balance", "kinetics")
    assert not {"heap", "tank", "cementation", "budget"} & set(mixed.stages)


def test_a_clean_campaign_asks_nothing(folder):
    outcome = check_campaign(folder / "campaign.toml")
    assert outcome.counts == {"ready": 4}
    assert outcome.paste == ()
    assert "0 stops, 0 questions" in outcome.summary


def test_every_stop_is_found_at_once_and_nothing_would_run(edit):
    edit("campaign.toml", "[precision]", "[precison]")
    outcome = check_campaign(edit("campaign.toml", "format = 1", "format = 2"))
    assert outcome.stops == 2
    assert outcome.stages == ()
    assert [p.level for p in outcome.problems[:2]] == ["stop", "stop"]
    assert {line.split(",")[0] for line in outcome.paste} == {"campaign.toml"}
    assert "nothing would run" in outcome.summary


def test_a_file_that_cannot_be_read_is_a_problem_of_the_check(tmp_path):
    outcome = check_campaign(tmp_path / "campaign.toml")
    assert outcome.stops == 1
    assert outcome.summary.startswith("no tests; 1 stops")


def test_the_reference_page_is_that_of_the_schema():
    assert PAGE.read_text(encoding="utf-8") == campaign_file_page()
