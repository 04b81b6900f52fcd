"""Which further terms the data ask for."""

from __future__ import annotations

import numpy as np
import pytest

from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw, Reference, Resistance, need_table
from leachkin.kinetics import tests_of_need as needs_of
from leachkin.testwork import SizeDistribution, observed_from_extraction

TIME_H = np.geomspace(0.3, 60.0, 12)
ORE = SizeDistribution.from_classes([0.5, 1.0, 2.0, 4.0], [0.3, 0.4, 0.3])


def bench(seed: int = 0, **terms):
    law = RateLaw(
        "chemical", (Resistance("chemical", np.log(12.0)),), Reference(), [1.0], [0.85], **terms
    )
    generator = np.random.default_rng(seed)
    found = []
    for strength in (5.0, 20.0):
        E = law.extraction(TIME_H * strength / 10.0, ORE)
        noisy = E + 0.004 * generator.standard_normal(TIME_H.size)
        found.append(
            observed_from_extraction(
                TIME_H, noisy, 0.004, test=f"{strength:g}", sizes=ORE, reagent_g_per_L=strength
            )
        )
    return found


@pytest.mark.parametrize(
    ("term", "truth"),
    [
        ("lag", {"lag_h": 0.5}),
        ("soluble", {"soluble_share": 0.08}),
        ("fade", {"fade_per_h": 0.05}),
        (
            "slow fraction",
            {
                "slow": RateLaw(
                    "chemical", (Resistance("chemical", 5.0),), Reference(), [1.0], [1.0]
                ),
                "slow_share": 0.3,
            },
        ),
    ],
)
def test_a_term_that_is_there_is_asked_for(term, truth):
    found = {one.term: one for one in needs_of(bench(**truth), "chemical", ultimate="one")}
    assert found[term].needed
    assert found[term].test.chance < 1e-6
    gains = {name: one.aicc_gain for name, one in found.items() if one.test is not None}
    assert max(gains, key=gains.get) == term


@pytest.mark.slow
def test_how_often_a_term_that_is_not_there_is_asked_for():
    """Once in 100 or less often, as the rule says: 60 campaigns of 5 terms."""
    from scipy.stats import binom

    terms = ("lag", "soluble", "fade", "slow fraction", "reagent order")
    asked = dict.fromkeys(terms, 0)
    for seed in range(60):
        for one in needs_of(bench(100 + seed), "chemical", terms, ultimate="one"):
            asked[one.term] += one.needed
    most = int(binom.ppf(0.999, 60, 0.015))
    assert max(asked.values()) <= most, asked


def test_the_table_says_what_each_term_would_mean():
    table = need_table(needs_of(bench(), "chemical", ("lag", "loss"), ultimate="one"))
    rows = table.to_records()
    assert [row["term"] for row in rows] == ["lag", "loss"]
    assert "precipitation" in rows[1]["meaning"]
    assert all(0.0 <= row["chance"] <= 1.0 for row in rows)


def test_what_cannot_be_tried_says_why():
    tests = [one for one in bench() if one.test == "5"]
    order, there, unknown = (
        needs_of(tests, "chemical", [term], ultimate="one", **same)[0]
        for term, same in (
            ("reagent order", {}),
            ("lag", {"terms": ("lag",)}),
            ("size exponents", {}),
        )
    )
    assert order.note == "the tests do not vary what it needs"
    assert there.note == "already in the law"
    assert not unknown.needed
    with pytest.raises(InputProblems, match="unknown term 'lags'.*did you mean lag"):
        needs_of(tests, "chemical", ["lags"])
