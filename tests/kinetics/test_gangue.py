import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import GangueLaw, GangueReadings, fit_gangue

HOURS = np.array([0.5, 1, 2, 6, 12, 24, 48, 72, 120, 168, 240.0])
TRUTH = GangueLaw(9.0, 0.8, 14.0, 1 / 0.006, 35.0)
TRUE_VALUES = {
    "fast": 9.0,
    "fast_h": 0.8,
    "slow": 14.0,
    "slow_h": 1 / 0.006,
    "activation_energy": 35.0,
}


def readings(seed=None, sd=0.015, temperatures=(298.15, 313.15, 328.15), hours=HOURS):
    rng = np.random.default_rng(seed)
    made = []
    for kelvin in temperatures:
        taken = TRUTH.taken_kg_per_t(hours, kelvin)
        if seed is not None:
            taken = taken * (1 + sd * rng.standard_normal(hours.size))
        made.append(GangueReadings(f"G{kelvin:g}", hours, taken, kelvin, sd * taken))
    return made


def test_law_by_hand():
    # at the reference temperature after one time constant of the slow part
    taken = TRUTH.taken_kg_per_t([1 / 0.006], 298.15)
    assert_allclose(taken, 9.0 + 14.0 * (1 - np.exp(-1)), rtol=1e-12)
    # 35 kJ/mol from 25 to 17 degC: exp(-35000/8.314 (1/290.15 - 1/298.15)) = 0.6776
    assert_allclose(TRUTH.slow_h_at(298.15) / TRUTH.slow_h_at(290.15), 0.6776, atol=5e-4)


def test_exact_readings_give_the_truth_back():
    fit = fit_gangue(readings())
    for name, value in TRUE_VALUES.items():
        assert_allclose(fit.parameter(name).value, value, rtol=1e-6)


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("stated", [True, False])
def test_noisy_readings_recover(seed, stated):
    made = readings(seed)
    if not stated:
        made = [GangueReadings(g.test, g.time_h, g.taken_kg_per_t, g.temperature_K) for g in made]
    fit = fit_gangue(made)
    assert fit.converged
    for name, value in TRUE_VALUES.items():
        parameter = fit.parameter(name)
        assert abs(parameter.value - value) < 4 * parameter.standard_error, name


def test_one_temperature_holds_the_activation_energy():
    fit = fit_gangue(readings(1, temperatures=(298.15,)))
    assert fit.parameter("activation_energy").method == "held"
    assert any("one temperature" in w for w in fit.warnings) and not fit.energy_known
    given = fit_gangue(readings(1, temperatures=(298.15,)), activation_energy_kJ_per_mol=35.0)
    assert given.energy_known and not any("one temperature" in w for w in given.warnings)
    assert given.draw(4, 1).slow_h_at(290.15).shape == (4,)


def test_what_the_readings_do_not_see_is_said():
    late = fit_gangue(readings(1, hours=np.array([24.0, 48, 72, 96, 120])))
    assert any("fast part was over before" in w for w in late.warnings) or any(
        p.why_no_interval for p in late.parameters
    )
    short = fit_gangue(readings(1, hours=HOURS[:7], temperatures=(298.15, 303.15)))
    assert any("not seen to end" in w for w in short.warnings)


def test_demand_and_draws_carry_the_parameters():
    fit = fit_gangue(readings(1))
    demand = fit.demand(290.15, 1.543, 6.8)
    assert_allclose(demand.slow_h, fit.law.slow_h_at(290.15))
    law = fit.draw(2000, seed=4)
    assert law.fast_kg_per_t.shape == (2000,)
    j = fit.estimate.names.index("slow")
    assert_allclose(np.std(np.log(law.slow_kg_per_t)), np.sqrt(fit.covariance[j, j]), rtol=0.1)
    assert law.demand(290.15, 1.543, 6.8).gangue_kg_per_t(HOURS).shape == (2000, HOURS.size)
    assert fit.table().column("name")[0] == "fast"


def test_bad_readings_are_refused():
    with pytest.raises(InputProblems, match="one bottle or more"):
        fit_gangue([])
    with pytest.raises(InputProblems, match="5 or more"):
        fit_gangue([GangueReadings("G", HOURS[:3], HOURS[:3], 298.15)])
    with pytest.raises(InputProblems, match="do not fit together"):
        fit_gangue([GangueReadings("G", HOURS, HOURS * np.nan, 298.15)])


def test_draws_of_what_the_readings_do_not_hold_stay_within_reach():
    """Ore without gangue: the times of its two parts may be anything, the draws may not."""
    generator = np.random.default_rng(0)
    hours = np.array([1.0, 2.0, 4.0, 8.0, 24.0, 48.0])
    readings = [
        GangueReadings(f"t{i}", hours, 1e-3 * np.abs(generator.standard_normal(6)), 298.15)
        for i in range(3)
    ]
    fit = fit_gangue(readings)
    drawn = fit.draw(500, 1)
    taken = drawn.taken_kg_per_t(np.array([48.0]), 298.15)
    assert np.isfinite(taken).all()
    top = max(float(r.taken_kg_per_t.max()) for r in readings)
    assert float(taken.max()) < 56.0 * top
