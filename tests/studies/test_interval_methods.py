import csv

import pytest
from scipy.stats import binom

from tests.studies.interval_methods import CAMPAIGNS, FIRST_SEED, LEVEL, RESULTS, run


def recorded():
    with RESULTS.open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def test_the_recorded_profiles_cover_as_they_say():
    rows = [row for row in recorded() if row["method"] == "profile"]
    assert len(rows) == 8
    for row in rows:
        n = int(row["intervals"])
        assert n == CAMPAIGNS["profile"], row
        ends = binom.ppf([1e-4, 1 - 1e-4], n, LEVEL) / n
        assert ends[0] <= float(row["covered"]) <= ends[1], row


def test_the_linearised_interval_is_short_where_the_ultimate_was_not_reached():
    """What the page says of it, from the same file."""
    by = {(row["design"], row["method"], row["quantity"]): row for row in recorded()}
    short = by["curve to 30 %", "linearised", "ultimate"]
    assert float(short["covered"]) < 0.93
    assert float(by["curve to 30 %", "profile", "ultimate"]["covered"]) > float(short["covered"])


@pytest.mark.study
def test_a_tenth_of_the_study_agrees():
    first = FIRST_SEED + max(CAMPAIGNS.values())
    for row in run(0.1, first, ("profile",)):
        n = row["intervals"]
        assert n == row["campaigns"]
        assert row["covered"] * n >= binom.ppf(1e-4, n, LEVEL), row
