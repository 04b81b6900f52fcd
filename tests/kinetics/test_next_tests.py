"""Expected intervals of tests not yet run: closed forms, limits, what must not matter, messages."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from leachkin.errors import InputProblems
from leachkin.inference import normal_multiplier, student_multiplier
from leachkin.kinetics import (
    Bottle,
    Noise,
    ParticleLaw,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    simulate_observed,
)
from leachkin.kinetics.next_tests import Candidate, next_tests
from leachkin.kinetics.next_tests_information import root_variances
from leachkin.testwork import SizeDistribution, observed_from_extraction

TIME_H = np.array([0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 24.0])
GAS = 8.314462618e-3  # kJ/(mol K), CODATA 2018, exact in the SI
FINE, COARSE = SizeDistribution.single(1.0), SizeDistribution.single(2.0)
SD = 0.01


def curve(kelvin=298.15, sizes=FINE, name="", tau=20.0, energy=46.0, time_h=TIME_H, sd=SD):
    """A noise-free curve: what it tells follows from the law alone."""
    slower = np.exp(energy / GAS * (1 / kelvin - 1 / 298.15))
    E = ParticleLaw(chemical=tau * sizes.mass_mean_mm * slower).conversion(time_h)
    return observed_from_extraction(
        time_h,
        E,
        sd,
        test=name or f"{kelvin:g} K, {sizes.mass_mean_mm:g} mm",
        sizes=sizes,
        temperature_K=kelvin,
        reagent_g_per_L=20.0,
    )


def candidate(name="more", kelvin=298.15, sizes=FINE, time_h=TIME_H, reagent=20.0, **more):
    return Candidate(Bottle(name, sizes, kelvin, np.asarray(time_h), reagent), **more)


def information(tau, time_h=TIME_H, sd=SD):
    """Reciprocal variance of ln(tau) told by one curve of known ultimate: sum of (dE/d ln tau)^2.

    dE/d ln tau of a chemically controlled sphere is -3 (1-X)^(2/3) t/tau, from t/tau =
    1 - (1-X)^(1/3) [levenspiel1999].
    """
    theta = np.minimum(time_h / tau, 1.0)
    slope = -3.0 * (1.0 - theta) ** 2 * theta
    return float(np.sum((slope / sd) ** 2))


def only_tau(tests, **more):
    return fit_tests(tests, "chemical", ultimate=1.0, **more)


def bench(seed=3, kelvin=(298.15, 318.15), sizes=(FINE, COARSE), law=None, noise=None):
    """Bottles with assays, tails and heads, made by the simulation."""
    truth = law or RateLaw(
        "chemical",
        (Resistance("chemical", np.log(20.0), 46.0),),
        Reference(298.15, 20.0, 1.0),
        [1.0, 2.0],
        [0.9, 0.85],
    )
    bottles = [
        Bottle(f"{t:g} K, {s.mass_mean_mm:g} mm", s, t, 2.0 * TIME_H, 20.0)
        for t in kelvin
        for s in sizes
    ]
    return simulate_observed(truth, bottles, head_kg_per_t=6.8, seed=seed, noise=noise)


# closed forms


def test_a_duplicate_halves_the_variance_of_the_only_information():
    tests = [curve()]
    found = next_tests(tests, only_tau(tests), [candidate()], of="tau_chemical")
    half = normal_multiplier(0.95) * information(20.0) ** -0.5
    now, after = found.now("tau_chemical"), found.best.outlook("tau_chemical")
    assert np.log(now.high / now.low) / 2 == pytest.approx(half, rel=1e-6)
    assert np.log(after.high / after.low) / 2 == pytest.approx(half / np.sqrt(2), rel=1e-6)
    assert found.best.shrink == pytest.approx(1 - 1 / np.sqrt(2), rel=1e-6)
    assert found.best.by_multiple[2] == pytest.approx(1 - 1 / np.sqrt(3), rel=1e-6)
    assert found.best.by_multiple[4] == pytest.approx(1 - 1 / np.sqrt(5), rel=1e-6)


@pytest.mark.parametrize("kelvin", [313.15, 333.15])
def test_one_more_temperature_gives_the_energy_its_first_interval(kelvin):
    """Two independent ln(tau) over a known step of 1/T: the variances add."""
    tests = [curve()]
    fit = only_tau(tests)
    assert not [q for q in fit.layout.free if q.role == "activation_energy"]
    found = next_tests(
        tests,
        fit,
        [candidate(kelvin=kelvin)],
        of="activation energy",
        assumed={"activation_energy_chemical": (46.0, None)},
    )
    now = found.now("activation_energy_chemical")
    assert (now.low, now.high) == (None, None)
    step = (1 / kelvin - 1 / 298.15) / GAS
    other = information(20.0 * np.exp(46.0 * step))
    half = normal_multiplier(0.95) * np.sqrt(1 / information(20.0) + 1 / other) / abs(step)
    after = found.best.outlook("activation_energy_chemical")
    assert after.opened
    assert after.half_width == pytest.approx(half, rel=1e-6)
    assert after.value == pytest.approx(46.0)
    assert any(
        "no test tells it now; candidates are judged at 46 kJ/mol" in s for s in found.remarks
    )


def test_an_assumed_range_is_the_present_interval_and_precisions_add():
    tests = [curve()]
    ask = {"of": "activation energy", "assumed": {"activation_energy_chemical": (46.0, 5.0)}}
    found = next_tests(tests, only_tau(tests), [candidate(kelvin=333.15)], **ask)
    z = normal_multiplier(0.95)
    assert found.now("activation_energy_chemical").half_width == pytest.approx(5.0 * z, rel=1e-6)
    alone = next_tests(
        tests,
        only_tau(tests),
        [candidate(kelvin=333.15)],
        of="activation energy",
        assumed={"activation_energy_chemical": (46.0, None)},
    ).best.outlook("activation_energy_chemical")
    both = (1 / 5.0**2 + (z / alone.half_width) ** 2) ** -0.5
    outlook = found.best.outlook("activation_energy_chemical")
    assert outlook.half_width == pytest.approx(z * both, rel=1e-6)
    assert not outlook.opened


def test_the_scatter_of_few_readings_has_students_t():
    """No precision stated: more readings also tell the scatter, and t falls to normal."""
    tests = [replace(curve(), sd=np.ones(TIME_H.size), sd_given=False)]
    noisy = replace(tests[0], value=tests[0].value + SD * np.cos(np.arange(TIME_H.size) * 2.3))
    fit = only_tau([noisy])
    found = next_tests([noisy], fit, [candidate()], of="times")
    ratio = student_multiplier(0.95, 13) / student_multiplier(0.95, 6) / np.sqrt(2)
    assert found.best.shrink == pytest.approx(1 - ratio, rel=1e-3)


def test_directions_that_rows_do_not_tell_are_infinite():
    rows = np.array([[1.0, 1.0, 0.0], [2.0, 2.0, 0.0]])
    targets = np.array([[1.0, 0.0, 0.0], [1.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
    found = root_variances(rows, targets)
    assert np.isinf(found[[0, 2]]).all()
    assert found[1] == pytest.approx(5**-0.5)


# limits, and what must not matter


def test_a_candidate_without_information_changes_nothing():
    """All its readings lie after the end of the reaction, and the ultimate is known."""
    tests = [curve()]
    found = next_tests(tests, only_tau(tests), [candidate(time_h=[30.0, 60.0])], of="times")
    assert found.best.shrink == 0.0
    assert found.best.outlook("tau_chemical").low == found.now("tau_chemical").low
    assert any("nothing here helps much" in said for said in found.remarks)


def test_no_candidate_widens_and_more_bottles_tell_more():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    many = [
        candidate("cold", 283.15),
        candidate("hot", 338.15, COARSE),
        candidate("long", time_h=4.0 * TIME_H),
        candidate("coarser", sizes=SizeDistribution.single(4.0)),
        candidate("strong", reagent=40.0),
    ]
    found = next_tests(tests, fit, many)
    for row in found.rows:
        assert 0.0 <= row.shrink <= row.by_multiple[2] <= row.by_multiple[4] < 1.0
        for outlook in row.outlooks:
            assert outlook.half_width <= found.now(outlook.target).half_width * (1 + 1e-9)
    information_first = [row.information for row in found.rows]
    assert information_first == sorted(information_first, reverse=True)


def test_repeats_are_so_many_bottles():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    once = next_tests(tests, fit, [candidate(kelvin=338.15)]).best
    twice = next_tests(tests, fit, [candidate(kelvin=338.15, repeats=2)]).best
    assert twice.shrink == pytest.approx(once.by_multiple[2], rel=1e-12)
    assert twice.by_multiple[2] == pytest.approx(once.by_multiple[4], rel=1e-12)


def test_the_order_of_tests_and_candidates_does_not_matter():
    tests = list(bench())
    many = [candidate("b", 283.15), candidate("a", 338.15, COARSE), candidate("c")]
    forward = next_tests(tests, fit_tests(tests, "chemical"), many, count=3)
    tests.reverse()
    back = next_tests(tests, fit_tests(tests, "chemical"), many[::-1], count=3)
    assert [r.name for r in forward.rows] == [r.name for r in back.rows]
    assert [s.name for s in forward.steps] == [s.name for s in back.steps]
    for one, other in zip(forward.rows, back.rows, strict=True):
        for a, b in zip(one.outlooks, other.outlooks, strict=True):
            assert a.shrink == pytest.approx(b.shrink, rel=1e-5, abs=1e-9)


def test_the_present_intervals_are_those_of_the_fit():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    found = next_tests(tests, fit, [candidate()])
    assert [o.target for o in found.present] == [
        "tau_chemical",
        "activation_energy_chemical",
        "ultimate_1_mm",
        "ultimate_2_mm",
    ]
    for outlook in found.present:
        parameter = fit.parameter(outlook.target)
        assert outlook.low == pytest.approx(parameter.low, rel=1e-6)
        assert outlook.high == pytest.approx(parameter.high, rel=1e-6)


def test_a_new_size_tells_its_own_ultimate_and_not_its_neighbours():
    """A fit of it too would have one more ultimate, so the nearest one gains little."""
    tests = bench()
    fit = fit_tests(tests, "chemical")
    late = 8.0 * TIME_H
    found = next_tests(
        tests,
        fit,
        [
            candidate("again", sizes=COARSE, time_h=late),
            candidate("coarser", sizes=SizeDistribution.single(4.0), time_h=late),
        ],
        of="ultimate_2_mm",
    )
    assert 0.0 <= found.row("coarser").shrink < 0.1 * found.row("again").shrink


def test_an_assumed_ultimate_at_a_new_size_is_in_a_prediction():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    far = SizeDistribution.single(4.0)
    ask = {
        "prediction": lambda law: law.extraction(1e4, far),
        "assumed": {"ultimate_4_mm": (0.8, 0.03)},
    }
    found = next_tests(
        tests, fit, [candidate("coarser", sizes=far, time_h=8 * TIME_H), candidate("again")], **ask
    )
    now = found.present[0]
    assert now.value == pytest.approx(0.8)
    assert now.half_width == pytest.approx(1.96 * 0.03, rel=0.02)
    assert found.row("coarser").shrink > 0.5
    assert found.row("again").shrink < 1e-6


# predictions


def test_a_prediction_has_the_interval_that_its_derivatives_give():
    """ln(tau) at 10 degC is linear in the fitted quantities: variance by hand."""
    tests = bench()
    fit = fit_tests(tests, "chemical")
    step = (1 / 283.15 - 1 / fit.layout.reference.temperature_K) / GAS

    def ln_time(law):
        one = law.resistances[0]
        return one.ln_tau + one.activation_energy_kJ_per_mol * step

    found = next_tests(tests, fit, [candidate()], prediction=ln_time, prediction_names=["ln tau"])
    weight = np.array([1.0, step])
    use = [fit.names.index(n) for n in ("tau_chemical", "activation_energy_chemical")]
    sd = np.sqrt(weight @ fit.covariance[np.ix_(use, use)] @ weight)
    assert found.now("ln tau").half_width == pytest.approx(normal_multiplier(0.95) * sd, rel=1e-6)


def test_a_prediction_may_take_one_law_at_a_time():
    tests = bench()
    fit = fit_tests(tests, "chemical")

    def in_batch(law):
        return law.extraction([5.0, 50.0], FINE, 290.0)

    def one_by_one(law):
        if law.batch_shape:
            raise ValueError("one law at a time")
        return law.extraction([5.0, 50.0], FINE, 290.0)

    both = [
        next_tests(tests, fit, [candidate(kelvin=338.15)], prediction=of)
        for of in (in_batch, one_by_one)
    ]
    assert [o.target for o in both[0].present] == ["prediction 1", "prediction 2"]
    for a, b in zip(both[0].best.outlooks, both[1].best.outlooks, strict=True):
        assert a.half_width == pytest.approx(b.half_width, rel=1e-9)


def test_what_a_prediction_refuses_is_said_and_left_out():
    tests = [curve(), curve(kelvin=318.15)]

    def first_order_only(law):
        if not np.allclose(law.order, 1.0):
            raise InputProblems([])
        return law.extraction(5.0, FINE)

    found = next_tests(
        tests,
        only_tau(tests),
        [candidate("strong", reagent=40.0), candidate("again")],
        prediction=first_order_only,
        assumed={"reagent_order": (1.0, 0.1)},
    )
    assert any("takes no other reagent_order" in said for said in found.remarks)
    assert found.row("strong").shrink < found.row("again").shrink


def test_a_second_strength_tells_the_order():
    tests = [curve(), curve(kelvin=318.15)]
    found = next_tests(
        tests,
        only_tau(tests),
        [candidate("strong", reagent=40.0), candidate("again")],
        of="order",
    )
    assert found.best.name == "strong"
    assert found.best.outlook("reagent_order").opened
    assert found.row("again").outlook("reagent_order").low is None


def test_stirring_tells_the_power_of_the_speed():
    """Both curves tell ln(tau): the power is their difference over ln 3."""
    tests = [replace(curve(), stirring_rpm=200.0)]
    found = next_tests(
        tests, only_tau(tests), [candidate(stirring_rpm=600.0), candidate("slow")], of="stirring"
    )
    half = normal_multiplier(0.95) * np.sqrt(2 / information(20.0)) / np.log(3.0)
    assert found.best.name == "more"
    assert found.best.outlook("stirring_power").half_width == pytest.approx(half, rel=1e-6)
    assert found.row("slow").outlook("stirring_power").low is None
    assert any("a film that controls gives 0.2 or more" in said for said in found.remarks)


# cost and sets


def test_cost_ranks_by_gain_over_cost():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    hot, cold = candidate("hot", 338.15, COARSE), candidate("cold", 283.15, COARSE)
    free = next_tests(tests, fit, [hot, cold], of="activation energy")
    best, other = free.rows
    dear = best.information / other.information * 1.01
    priced = next_tests(
        tests,
        fit,
        [replace(best.candidate, cost=100.0 * dear), replace(other.candidate, cost=100.0)],
        of="activation energy",
    )
    assert [row.name for row in priced.rows] == [other.name, best.name]
    assert priced.rows[0].per_cost == pytest.approx(other.information / 100.0, rel=1e-9)
    half = next_tests(tests, fit, [replace(hot, cost=5.0), cold], of="activation energy")
    assert [row.per_cost for row in half.rows] == [None, None]


def test_a_set_is_as_good_as_its_tests_together():
    tests = bench()
    fit = fit_tests(tests, "chemical")
    many = [candidate("hot", 338.15, COARSE, cost=2.0), candidate("cold", 283.15, cost=3.0)]
    found = next_tests(tests, fit, many, of="activation energy", count=4)
    assert found.steps[0].name == found.best.name
    shrinks = [step.shrink for step in found.steps]
    assert shrinks == sorted(shrinks)
    prices = {c.name: c.cost for c in many}
    assert found.steps[-1].cost == pytest.approx(sum(prices[s.name] for s in found.steps))
    if [s.name for s in found.steps[:2]] == ["hot", "hot"]:
        assert found.steps[1].shrink == pytest.approx(found.row("hot").by_multiple[2])


def test_tables_hold_every_candidate():
    tests = bench()
    found = next_tests(
        tests, fit_tests(tests, "chemical"), [candidate("hot", 338.15, cost=2.0)], count=1
    )
    names = [table.name for table in found.tables()]
    assert names == ["next_tests", "next_test_intervals", "next_test_set"]
    row = found.ranking_table().to_records()[0]
    assert row["candidate"] == "hot"
    assert row["temperature"] == pytest.approx(65.0)
    assert row["per_cost"] == pytest.approx(100.0)
    assert len(found.interval_table().rows) == 2 * len(found.present)


# messages


@pytest.mark.parametrize(
    ("more", "message"),
    [
        ({"time_h": [2.0, 1.0]}, r"candidate more: times 2, 1 h.*above 0 and rising"),
        ({"time_h": [0.0, 1.0]}, "above 0 and rising"),
        ({"time_h": []}, "one or more finite times"),
        ({"kelvin": -3.0}, "temperature_K -3"),
        ({"reagent": 0.0}, "reagent_g_per_L 0"),
        ({"repeats": 0}, "0 repeats"),
        ({"cost": -1.0}, "a cost of -1"),
        ({"stirring_rpm": -1.0}, "stirring -1 rpm"),
    ],
)
def test_a_candidate_without_meaning_stops(more, message):
    with pytest.raises(InputProblems, match=message):
        candidate(**more)


@pytest.mark.parametrize(
    ("candidates", "more", "message"),
    [
        ([], {}, "no candidates"),
        ([candidate(), candidate()], {}, "two named more"),
        ([candidate()], {"of": "activation enrgy"}, "unknown quantity.*did you mean activation"),
        ([candidate()], {"of": "tau_chemcal"}, "did you mean tau_chemical"),
        ([candidate()], {"of": "stirring"}, "no test or candidate has a stirring speed"),
        ([candidate()], {"assumed": {"ultimate_9_mm": (0.8, 0.1)}}, "unknown quantity"),
        ([candidate()], {"count": -1}, "-1"),
        ([candidate()], {"prediction": lambda law: np.nan}, "prediction"),
        (
            [candidate()],
            {"prediction": lambda law: law.ultimate[..., 0], "prediction_names": ["a", "b"]},
            "2 names for 1 values",
        ),
    ],
)
def test_a_question_without_meaning_stops(candidates, more, message):
    tests = [curve()]
    with pytest.raises(InputProblems, match=message):
        next_tests(tests, only_tau(tests), candidates, **more)


def test_the_tests_of_the_fit_are_asked_for():
    tests = [curve(), curve(kelvin=318.15)]
    with pytest.raises(InputProblems, match="not the tests of the fit: 318.15 K, 1 mm"):
        next_tests(tests[:1], only_tau(tests), [candidate()])


def test_noise_of_the_bench_is_the_precision_of_a_candidate():
    """Floor and part come back from the stated deviations of the rows."""
    from leachkin.kinetics.next_tests_candidate import Precision

    tests = [
        replace(o, sd=np.where([k == "tail" for k in o.row_kind], o.sd, 0.002 + 0.015 * o.value))
        for o in bench(noise=Noise(solution=0.01))
    ]
    found = Precision.of(fit_tests(tests, "chemical"), tests)
    assert found.reading == pytest.approx((0.002, 0.015), rel=1e-6)
    assert found.tail == pytest.approx((0.0, np.hypot(0.03, 0.003)), abs=1e-6)
    assert found.head_relative == pytest.approx(0.02, rel=1e-9)
