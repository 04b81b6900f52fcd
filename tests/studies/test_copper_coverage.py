import csv

import pytest
from scipy.stats import binom

from tests.studies.copper_coverage import FIRST_SEED, LEVEL, RESULTS, SEEDS, run


def test_recorded_study_covers_as_it_says():
    with RESULTS.open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    assert len(rows) == 9 and all(int(row["campaigns"]) == SEEDS for row in rows)
    for row in rows:
        assert 0.91 <= float(row["covered"]) <= 0.98, row["quantity"]
        assert abs(float(row["mean_error"])) < 0.25 * float(row["scatter"]), row["quantity"]


@pytest.mark.study
def test_a_tenth_of_the_study_agrees():
    n = SEEDS // 10
    least = binom.ppf(1e-4, n, LEVEL)
    for record in run(n, FIRST_SEED + SEEDS):
        assert record["covered"] * n >= least, record["quantity"]
        assert 0.5 < record["mean_standard_error"] / record["scatter"] < 2.0, record["quantity"]
