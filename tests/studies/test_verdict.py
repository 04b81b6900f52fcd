import csv
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.stats import binom

from leachkin.kinetics import RankedLaw, Ranking
from tests.studies.verdict import (
    CAMPAIGNS,
    FIRST_SEED,
    HOURS,
    RESULTS,
    RUN_DOWN,
    TRUTHS,
    ULTIMATE,
    WAYS,
    WORKERS,
    START_g_per_L,
    campaign,
    judged,
    p80_mm,
    run,
    shares,
)

#: Shares of wrong and undecided verdicts that the program has to stay below.
LIMITS = {"sizes known": (0.03, 0.20), "p80 known": (0.05, 0.35)}


def recorded():
    with RESULTS.open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


@pytest.mark.parametrize("way", LIMITS)
def test_recorded_verdicts_stay_within_limits(way):
    total, wrong, undecided = shares(recorded(), way)
    assert all(int(row["campaigns"]) == CAMPAIGNS for row in recorded())
    assert total >= 2 * len(TRUTHS)
    assert wrong < LIMITS[way][0] and undecided < LIMITS[way][1]


def test_straight_lines_name_ash_layer_for_every_chemical_bottle():
    rows = [row for row in recorded() if row["way"] == "straight line"]
    chemical = [row for row in rows if row["truth"] == "chemical"]
    assert len(chemical) == 2 and all(int(row["right"]) == 0 for row in chemical)


def test_a_wrong_spread_held_names_nothing_rather_than_the_wrong_law():
    _, wrong, undecided = shares(recorded(), "p80 and slope")
    assert wrong < 0.2 < undecided


def test_without_heads_of_their_own_more_verdicts_are_wrong():
    wrong = {way: shares(recorded(), way)[1] for way in WAYS}
    assert wrong["sizes known"] < wrong["no head of its own"] <= wrong["no head, best AICc"]


def ranked(named, not_needed=()):
    fit = SimpleNamespace(not_needed=not_needed)
    rows = tuple(RankedLaw(law, fit, 0.0, 0.0, 1.0, 0.0, True) for law in named)
    return Ranking(rows, "", named, named, 2.0)


def test_outcomes():
    assert judged(ranked(("chemical",)), "chemical") == "right"
    assert judged(ranked(("chemical",)), "film") == "wrong"
    assert judged(ranked(()), "film") == "undecided"
    assert judged(ranked(("film", "chemical")), "film") == "undecided"
    assert judged(ranked(("series",), ("film",)), "ash_layer+chemical") == "right"
    assert judged(ranked(("series",)), "ash_layer+chemical") == "wrong"


def test_simulated_bottles_run_down_as_they_say():
    tests = campaign("chemical", 0.5, 1)
    assert len(tests) == 12 and len({o.test for o in tests}) == 12
    fastest = next(o for o in tests if o.test == "1mm55")
    strength = fastest.history.reagent_g_per_L
    assert strength[0] == START_g_per_L
    np.testing.assert_allclose(strength[-1], START_g_per_L * (1 - RUN_DOWN), rtol=1e-9)
    assert abs(fastest.value[-1] / ULTIMATE - 1) < 5 * np.hypot(0.02, 0.02)
    # size that 80 % passes, log-normal about a mean of 1 mm: median exp(0.8416 width)
    width = np.sqrt(np.log1p(0.25))
    expected = np.exp(0.8416 * width) / np.sqrt(1.25)
    np.testing.assert_allclose(p80_mm(fastest.sizes), expected, rtol=0.005)
    np.testing.assert_array_equal(fastest.time_h, HOURS)


@pytest.mark.study
def test_a_tenth_of_the_study_agrees():
    n = max(CAMPAIGNS // 10, 2)
    records = run(n, FIRST_SEED + CAMPAIGNS, WORKERS, ("sizes known",))
    records += run(1, FIRST_SEED + CAMPAIGNS + 1, WORKERS, ("p80 known",))
    for way, limits in LIMITS.items():
        total, *found = shares(records, way)
        assert total >= 2 * len(TRUTHS)
        for share, limit in zip(found, limits, strict=True):
            assert share * total <= binom.ppf(1 - 1e-4, total, limit), way
    lines = [r for r in records if r["way"] == "straight line" and r["truth"] == "chemical"]
    assert all(record["right"] == 0 for record in lines)
