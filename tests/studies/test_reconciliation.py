"""Coverage of reconciled extractions and power of the tests of gross errors."""

import csv

import pytest
from scipy.stats import binom

from tests.studies.reconciliation import BOTTLES, CASES, RESULTS, SEED, run

#: Least share found (and, of a pair, named) by case.
FOUND = {
    "one of two tails 15 % high": 0.80,
    "one of two tails 15 % low": 0.80,
    "one of a final pair 15 % high": 0.90,
    "one of a final pair 15 % low": 0.90,
}


def test_recorded_study_reaches_what_it_should():
    with RESULTS.open(encoding="utf-8", newline="") as handle:
        rows = {row["case"]: row for row in csv.DictReader(handle)}
    assert set(rows) == {case.name for case in CASES}
    for case in CASES:
        row = rows[case.name]
        assert int(row["bottles"]) == BOTTLES
        if not case.wrong:
            assert 0.92 <= float(row["covered"]) <= 0.98, case.name
            assert float(row["found"]) <= 0.07, case.name
        if case.name in FOUND:
            assert float(row["found"]) >= FOUND[case.name], case.name
            assert float(row["group_named_alone"]) >= FOUND[case.name] - 0.02, case.name


@pytest.mark.study
@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_a_tenth_on_fresh_bottles_agrees(case):
    n = BOTTLES // 10
    record = run(case, n, SEED + 1)
    if not case.wrong:
        assert binom.ppf(1e-4, n, 0.95) <= record["covered"] * n
        assert record["found"] * n <= binom.ppf(1 - 1e-4, n, 0.05)
        assert abs(record["mean_error"]) < 4.5 * record["scatter"] / n**0.5
    if case.name in FOUND:
        assert record["found"] * n >= binom.ppf(1e-4, n, FOUND[case.name])
