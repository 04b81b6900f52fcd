"""What the ore took of the reagent, and the strength in between."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.testwork import reagent_use

TESTS = (
    "test,dry solids (g),solution (mL),temperature (degC),start H2SO4 (g/L),aliquots\n"
    "B1,500,1000,25,20,{policy}\n"
)
HEADER = "test,time (h),aliquot (mL),Cu (g/L),"
STRENGTH = {"replaced by reagent solution": 20.0, "replaced by water": 0.0}


def bench_log(taken_kg_per_t, policy, addition):
    """Titrations and additions of a bottle whose ore took so much, followed step by step [g]."""
    volume, acid, before, rows = 1.0, 20.0, 0.0, []
    for taken in taken_kg_per_t:
        acid -= 0.5 * (taken - before)
        before = taken
        added = 0.0
        if addition == "before":  # acid was dosed all along; the titration finds it held
            added = 20.0 * volume - acid
            acid += added
        free = acid / volume
        acid -= 0.02 * free
        acid += 0.02 * STRENGTH[policy]
        if addition == "after":
            added = 20.0 * volume - acid
            acid += added
        rows.append((free, added))
    return rows


@pytest.mark.parametrize("policy", list(STRENGTH))
@pytest.mark.parametrize("addition", ["after", "before", "none"])
def test_a_bench_log_gives_back_what_was_taken(read_texts, policy, addition):
    taken = [4.0, 9.0, 13.0, 14.5]
    rows = bench_log(taken, policy, addition)
    text = "".join(f"B1,{2 * i + 2},20,1,{f!r},{a!r}\n" for i, (f, a) in enumerate(rows))
    tests, problems = read_texts(
        tests=TESTS.format(policy=policy),
        readings=HEADER + "free H2SO4 (g/L),H2SO4 added (g)\n" + text,
    )
    assert problems == []
    use = reagent_use(tests["B1"])
    assert_allclose(use.taken_kg_per_t, taken, rtol=1e-12)
    if addition != "none":
        assert use.additions == f"{addition} the titration"
    history = tests["B1"].history
    assert (np.diff(history.time_h) > 0).all()
    aim = history.reagent_g_per_L[2::2]
    if addition == "after":
        assert_allclose(aim, 20.0, rtol=1e-12)
        assert_allclose(history.reagent_g_per_L[1], 18.0, rtol=1e-12)  # 20 - 0.5 x 4


def test_additions_alone_bring_the_strength_back(read_texts):
    rows = bench_log([4.0, 9.0], "replaced by reagent solution", "after")
    text = "".join(f"B1,{2 * i + 2},20,1,{a!r}\n" for i, (_, a) in enumerate(rows))
    tests, _ = read_texts(
        tests=TESTS.format(policy="replaced by reagent solution"),
        readings=HEADER + "H2SO4 added (g)\n" + text,
    )
    use = reagent_use(tests["B1"])
    assert use.additions == "not titrated"
    assert_allclose(use.taken_kg_per_t, [4.0, 9.0], rtol=1e-12)
    assert_allclose(use.before_g_per_L, [f for f, _ in rows], rtol=1e-12)
    assert_allclose(use.added_kg_per_t[-1], (20.0 + sum(a for _, a in rows)) / 0.5, rtol=1e-12)


def test_nothing_known_is_none_and_a_constant_history(read_texts):
    tests, _ = read_texts(
        tests=TESTS.format(policy="returned"), readings=HEADER[:-1] + "\nB1,2,20,1\n"
    )
    assert reagent_use(tests["B1"]) is None
    assert tests["B1"].history.reagent_g_per_L.tolist() == [20.0, 20.0]


def test_titrations_without_a_start_are_asked_about(read_texts):
    tests, problems = read_texts(
        tests="test,dry solids (g),solution (mL),temperature (degC),aliquots\n"
        "B1,500,1000,25,returned\n",
        readings=HEADER + "free H2SO4 (g/L)\nB1,2,20,1,15\n",
    )
    assert [p.level for p in problems] == ["ask"]
    assert "no starting strength" in problems[0].found
    assert reagent_use(tests["B1"]) is None
