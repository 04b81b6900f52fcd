import csv

import pytest
from scipy.stats import binom

from tests.studies.coverage import CAMPAIGNS, DESIGNS, FIRST_SEED, LEVEL, RESULTS, WORKERS, run


def test_recorded_study_covers_as_it_says():
    with RESULTS.open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    asked = sum(len(one["values"]) + len(one["figures"]) for one in DESIGNS.values())
    assert len(rows) == asked
    for row in rows:
        assert int(row["campaigns"]) == CAMPAIGNS
        assert 0.92 <= float(row["covered"]) <= 0.98, row
        assert abs(float(row["mean_error"])) < 0.25 * float(row["scatter"]), row


@pytest.mark.study
def test_a_tenth_of_the_study_agrees():
    n = CAMPAIGNS // 10
    least, most = binom.ppf([1e-4, 1 - 1e-4], n, LEVEL)
    for each in run(n, FIRST_SEED + CAMPAIGNS, WORKERS):
        assert least <= each["covered"] * n <= most, each
        assert 0.7 < each["mean_standard_error"] / each["scatter"] < 1.4, each
