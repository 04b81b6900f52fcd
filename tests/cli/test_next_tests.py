"""``leachkin next-tests``: what it prints where, JSON, exit codes."""

import json
import re

import pytest


def test_the_answer_comes_before_the_tables(invoke, bench):
    result = invoke("next-tests", bench, "--for", "activation-energy")
    assert result.exit_code == 0
    assert re.match(r"\S.* tells most: it narrows activation_energy_", result.stdout)
    assert "Next test set" in result.stdout
    assert "made from the tests are judged" in result.stderr
    assert "next: leachkin fit" in result.stderr


def test_json_holds_every_interval(invoke, bench):
    data = json.loads(invoke("next-tests", bench, "--for", "constants", "--json").stdout)
    assert data["aim"] == "constants"
    assert {row["candidate"] for row in data["next_tests"]} <= {
        row["candidate"] for row in data["next_test_intervals"]
    }
    assert len(data["next_test_set"]) == 3
    assert data["advice"]


def test_candidates_of_the_campaign_are_judged(invoke, bench):
    bench.write_text(bench.read_text() + '[[candidates]]\ntemperature = "60 degC"\ncost = 5\n')
    result = invoke("next-tests", bench, "--for", "activation-energy", "--count", 0)
    assert result.exit_code == 0
    assert "60 degC" in result.stdout
    assert "Gain per" in result.stdout
    assert "Next test set" not in result.stdout
    assert "made from the tests" not in result.stderr


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (("--for", "haep"), 2, "Did you mean heap"),
        (("--for", "heap"), 1, r"there is no table \[heap\]"),
        (("--for", "stirring"), 1, "no stirring speed is written"),
        (("--count", "21"), 2, "0<=x<=20"),
    ],
)
def test_what_has_no_meaning_stops(invoke, bench, words, code, message):
    result = invoke("next-tests", bench, *words)
    assert result.exit_code == code
    assert "Traceback" not in result.output
    assert result.stdout == ""
    assert re.search(message, result.stderr), result.stderr


def test_wrong_candidates_stop_with_their_line(invoke, bench):
    row = len(bench.read_text().splitlines()) + 2
    bench.write_text(bench.read_text() + '[[candidates]]\nlike = "B3"\n')
    result = invoke("next-tests", bench)
    assert result.exit_code == 1
    assert re.search(rf"row {row}.*unknown test 'B3'.*did you mean B", result.stderr)


def test_help_lists_the_aims(invoke):
    assert "mechanism" in invoke("next-tests", "--help").stdout
    assert "next-tests" in invoke("--help").stdout
