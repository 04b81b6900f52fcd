"""Control charts, limits of detection and precision: against print, limits, and known truth."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.files import grid_of
from leachkin.testwork import (
    TestworkSettings,
    charts_of_standards,
    detection_limit,
    individuals_chart,
    precision_by_analyte,
    precision_of_groups,
    quality_tables,
    range_chart,
    read_quality,
    zone_signals,
)
from leachkin.testwork.control_chart import BEYOND, EIGHT, FOUR_OF_FIVE, TWO_OF_THREE, d2, d3

#: Montgomery, Introduction to Statistical Quality Control, 6th ed., example 6.5 (costs of loans).
LOANS = [310, 288, 297, 298, 307, 303, 294, 297, 308, 306, 294, 299, 297, 299, 314, 295, 293, 306,
         301, 304]  # fmt: skip
#: NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.2 (flow rates).
FLOWS = [49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1]


@pytest.mark.parametrize(
    ("values", "centre", "low", "high", "digits"),
    [(LOANS, 300.5, 279.78, 321.22, 0.5e-2), (FLOWS, 50.81, 45.8159, 55.8041, 0.5e-4)],
)
def test_charts_of_print(values, centre, low, high, digits):
    chart = individuals_chart(values)
    assert_allclose(chart.centre, centre, rtol=0, atol=1e-9)
    printed_sd = chart.sd * d2 / 1.128  # print divides by 1.128, the program by 1.12838
    ends = (centre - 3.0 * printed_sd, centre + 3.0 * printed_sd)
    assert_allclose(ends, (low, high), rtol=0, atol=digits)
    assert_allclose(chart.action, (low, high), rtol=1e-4)
    assert set(chart.signals) == {""} or values is FLOWS


def test_factors_of_pairs():
    # as tabled for subgroups of two: d2 1.128, d3 0.853, D4 3.267
    assert_allclose([d2, d3, 1.0 + 3.0 * d3 / d2], [1.128, 0.853, 3.267], rtol=0, atol=5e-4)
    first = np.array([1.00, 2.00, 4.00, 1.0])
    chart = range_chart(first, first * [1.02, 1.0, 0.98, 1.3])
    ranges = np.array([0.02 / 1.01, 0.0, 0.02 / 0.99, 0.3 / 1.15])
    assert_allclose(chart.relative_range, ranges, rtol=1e-12)
    assert_allclose(chart.action, 3.267 * ranges.mean(), rtol=2e-4)
    assert chart.signals == ("", "", "", BEYOND)
    many = range_chart(np.ones(20), np.append(np.full(19, 1.01), 1.2))
    assert many.signals[-1] == BEYOND
    assert range_chart([1.0, 2.0], [1.0, 2.0]) is None


def test_the_range_gives_the_spread_of_one_assay():
    generator = np.random.default_rng(2)
    pairs = 5.0 * (1.0 + 0.02 * generator.standard_normal((4000, 2)))
    assert_allclose(range_chart(*pairs.T).relative_sd, 0.02, rtol=0.04)
    assert_allclose(individuals_chart(pairs.ravel()).sd, 0.1, rtol=0.04)


@pytest.mark.parametrize(
    ("values", "signal"),
    [
        ([0.0, 3.2], BEYOND),
        ([0.0, -3.2], BEYOND),
        ([2.1, 0.5, 2.2], TWO_OF_THREE),
        ([2.1, -0.5, -2.2], ""),
        ([1.2, 1.3, 0.2, 1.1, 1.4], FOUR_OF_FIVE),
        ([0.2] * 8, EIGHT),
        ([0.2] * 7, ""),
        ([-0.1] + [0.2] * 7, ""),
    ],
)
def test_signals_of_the_zones(values, signal):
    assert zone_signals(values)[-1] == signal


def test_how_often_a_chart_in_control_cries():
    # one point beyond 3 sd: 0.27 %; the zone rules together about one point in 90
    generator = np.random.default_rng(4)
    signals = zone_signals(generator.standard_normal(60_000))
    assert_allclose(np.mean([s == BEYOND for s in signals]), 0.0027, rtol=0.25)
    assert 1 / 110 < np.mean([s != "" for s in signals]) < 1 / 40


def test_charts_that_cannot_be_made():
    assert individuals_chart([1.0]) is None
    assert individuals_chart([1.0, 1.0]) is None
    assert individuals_chart([1.0, 1.0], 1.0, 0.1).signals == ("", "")
    with pytest.raises(InputProblems, match="values: a value that is not finite"):
        individuals_chart([1.0, np.nan])
    with pytest.raises(InputProblems, match="sd: 0. Allowed: above 0"):
        individuals_chart([1.0, 2.0], 1.0, 0.0)


def test_limits_of_detection_come_to_the_known_multiples():
    # Currie (1968): 1.645 and 3.29 standard deviations where these are known
    generator = np.random.default_rng(6)
    many = detection_limit(generator.standard_normal(200_000))
    assert_allclose(many.critical / many.sd, 1.645, rtol=0.01)
    assert_allclose(many.detection / many.sd, 3.29, rtol=0.01)
    # ten blanks: t of one side with nine degrees of freedom is 1.833 (tables)
    ten = detection_limit(np.arange(10.0))
    assert_allclose((ten.critical - ten.mean) / ten.sd, 1.833 * np.sqrt(1.1), rtol=3e-4)


def test_a_blank_is_rarely_called_metal():
    generator = np.random.default_rng(7)
    n, hits = 4000, 0
    for _ in range(n):
        found = detection_limit(generator.standard_normal(6))
        hits += generator.standard_normal() > found.critical
    assert abs(hits / n - 0.05) < 4.0 * np.sqrt(0.05 * 0.95 / n)


def test_blanks_that_tell_nothing():
    assert detection_limit([]) is None
    assert detection_limit([0.1]) is None
    assert detection_limit([0.1, 0.1]) is None


@pytest.mark.parametrize(("floor", "part"), [(0.0, 0.02), (0.05, 0.01), (0.02, 0.0)])
def test_floor_and_part_from_pairs_standards_and_blanks(floor, part):
    generator = np.random.default_rng(9)

    def assays(level, count):
        return level + (floor + part * level) * generator.standard_normal(count)

    groups = [assays(level, 2) for level in generator.uniform(0.5, 20.0, 150)]
    groups += [assays(2.0, 60), assays(15.0, 60)]
    groups += [assays(0.0, 40)] if floor else []
    found = precision_of_groups(groups)
    assert found.pairs == 150 + 2 * 59 + (39 if floor else 0)
    assert_allclose(found.floor, floor, rtol=0.25, atol=0.006)
    assert_allclose(found.proportional, part, rtol=0.15, atol=0.001)
    assert_allclose(found.relative_error, 1.0 / np.sqrt(2.0 * found.pairs), rtol=1e-12)


def test_levels_that_are_alike_tell_no_floor():
    generator = np.random.default_rng(10)
    groups = [5.0 * (1.0 + 0.02 * generator.standard_normal(2)) for _ in range(40)]
    assert precision_of_groups(groups).floor == 0.0
    assert precision_of_groups([[1.0, 1.0], [2.0, 2.0]]) is None
    assert precision_of_groups([[1.0, 1.1]]) is None


JOBS = "job,date,sample,analyte,value,qualifier,unit,type,expected\n"
JOBS += "".join(
    f"J{n},2026-01-{n + 1:02d},house standard A,Cu,{value},,%,standard,0.50\n"
    for n, value in enumerate((0.50, 0.51, 0.49, 0.50, 0.51, 0.50, 0.49, 0.50, 0.58), start=1)
)
JOBS += "".join(f"J{n},2026-01-05,blank,Cu,{v},,mg/L,,\n" for n, v in enumerate((0.1, 0.2, 0.3)))
JOBS += "J4,2026-01-05,blank,Cu,0.1,<,mg/L,,\n"
JOBS += "".join(
    f"J{n},2026-01-05,X{n} 24 h,Cu,{v},,g/L,,\nJ{n},2026-01-05,X{n} 24 h dup,Cu,{w},,g/L,,\n"
    for n, (v, w) in enumerate(((1.0, 1.02), (2.0, 1.97), (4.0, 4.1), (0.5, 0.51)))
)
JOBS += "J1,2026-01-05,Z residue,Cu,0.20,,%,,\nJ1,2026-01-05,Z residue,Cu,0.21,,%,,\n"


def of_jobs():
    rows = [(n, line.split(",")) for n, line in enumerate(JOBS.strip().split("\n"), start=1)]
    settings = TestworkSettings(
        ("Cu",), "H2SO4", dict.fromkeys(("solution", "tail", "head", "residue"), (0.0, 0.02))
    )
    problems = []
    return (*read_quality(grid_of("jobs.csv", rows, b""), settings, problems), problems)


def test_checks_of_many_jobs():
    records, pairs, problems = of_jobs()
    assert problems == []
    assert [p.kind for p in pairs] == ["solution"] * 4 + ["tail"]
    ((ordered, chart),) = charts_of_standards(records)
    assert chart.centre == 0.50
    assert [r.job for r in ordered][-1] == "J9"
    # moving ranges 1, 2, 1, 1, 1, 1, 1, 8 hundredths: mean 0.02, sd 0.02/1.128 = 0.0177
    assert_allclose(chart.sd, 0.02 / 1.12838, rtol=1e-5)
    assert chart.signals[-1] == BEYOND
    tables = {table.name: table for table in quality_tables(records, pairs)}
    assert list(tables) == [
        "assay_precision", "control_chart_standards", "control_chart_duplicates",
        "detection_limits",
    ]  # fmt: skip
    blanks = tables["detection_limits"].to_records()[0]
    assert (blanks["blanks"], blanks["below"]) == (3, 1)
    # 0.2 + 2.920 x 0.1 x sqrt(4/3) mg/L, t of two degrees of freedom
    assert_allclose(blanks["critical"], 0.2 + 0.2920 * np.sqrt(4 / 3), rtol=1e-3)
    precision = precision_by_analyte(records, pairs)
    assert set(precision) == {("solution", "Cu"), ("tail", "Cu")}
    assert precision["tail", "Cu"].pairs == 1 + 8  # one pair, and nine assays of the standard
    line = tables["assay_precision"].column("line")[0]
    assert line.startswith('precision.analyte.Cu.solution = "')


def test_blanks_alone():
    records, _, _ = of_jobs()
    blanks = [r for r in records if r.kind == "blank"]
    assert [table.name for table in quality_tables(blanks, [])] == ["detection_limits"]
