import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from leachkin.errors import InputProblems
from leachkin.kinetics import OreCurve, ParticleLaw, RateLaw, ReagentDemand, Reference, Resistance
from leachkin.scaleup import batch_leach, tank_train
from leachkin.testwork import SizeDistribution

#: Zinc calcine: chemical control, order 0.8, times at 50 degC and 55 g/L.
ULTIMATE = (58.0 - 9.5 * 65.38 / (2 * 55.845) - 0.6) / 58.0


def zinc_law(tau_h=13.0 / 60.0):
    return RateLaw(
        "chemical",
        (Resistance("chemical", np.log(tau_h), activation_energy_kJ_per_mol=28.0, order=0.8),),
        Reference(323.15, 55.0, 0.0892),
        [0.0892],
        [ULTIMATE],
    )


def zinc_train(hours, tau_h=13.0 / 60.0):
    return tank_train(
        zinc_law(tau_h),
        hours,
        ReagentDemand(1.5, 580.0),
        55.0,
        solids_kg_per_m3=60.0,
        sizes=SizeDistribution.single(0.0892),
        temperature_K=323.15,
    )


@pytest.mark.parametrize(
    ("law", "printed"), [({"chemical": 20.0}, 0.078), ({"ash_layer": 20.0}, 0.062)]
)
def test_mixed_flow_of_one_size(law, printed):
    """Levenspiel, Chemical Reaction Engineering, 3rd ed., example 26.2."""
    train = tank_train(ParticleLaw(**law), [60.0])
    assert_allclose(1.0 - train.extraction[0], printed, rtol=0, atol=5e-4)


@pytest.mark.parametrize(
    ("tanks", "computed"), [(1, 0.207277), (2, 0.109009), (3, 0.070968), (4, 0.051288)]
)
def test_equal_tanks(tanks, computed):
    """Chemical control, tau the total mean time; by the gamma distribution of residence times."""
    train = tank_train(ParticleLaw(chemical=1.0), np.full(tanks, 1.0 / tanks))
    assert_allclose(1.0 - train.extraction[-1], computed, rtol=0, atol=5e-7)


@pytest.mark.parametrize("kind", ["film", "ash_layer", "chemical"])
@pytest.mark.parametrize("ratio", [0.05, 1.0, 20.0])
def test_one_tank_against_quadrature(kind, ratio):
    law = ParticleLaw(**{kind: ratio})
    left = quad(lambda t: float((1.0 - law.conversion(t)) * np.exp(-t)), 0.0, ratio, epsabs=1e-13)
    train = tank_train(law, [1.0])
    assert_allclose(1.0 - train.extraction[0], left[0], rtol=0, atol=1e-9)


def test_unequal_tanks_against_seeded_draws():
    generator = np.random.default_rng(11)
    means = np.array([0.3, 1.1, 0.05])
    times = (generator.exponential(size=(200_000, 3)) * means).cumsum(axis=1)
    law = ParticleLaw(chemical=1.3, ash_layer=0.8)
    X = law.conversion(times.T)
    train = tank_train(law, means)
    error = X.std(axis=1) / np.sqrt(times.shape[0])
    assert (np.abs(train.extraction - X.mean(axis=1)) < 4.5 * error).all()


def test_nearly_equal_tanks_join_equal_ones():
    law = ParticleLaw(ash_layer=2.0)
    equal = tank_train(law, [0.5, 0.5, 0.5]).extraction
    near = tank_train(law, [0.5, 0.5 * (1 + 1e-9), 0.5 * (1 - 1e-9)]).extraction
    assert_allclose(near, equal, rtol=0, atol=1e-9)


def test_zinc_calcine_in_four_tanks():
    """Reference answer by survival of the summed exposure."""
    train = zinc_train(np.full(4, 0.25))
    assert_allclose(train.extraction, [0.6100, 0.7883, 0.8527, 0.8780], rtol=0, atol=5e-5)
    assert_allclose(train.reagent_g_per_L, [23.16, 13.85, 10.49, 9.17], rtol=0, atol=0.01)
    one = zinc_train([1.0])
    assert_allclose(one.extraction, 0.7707, rtol=0, atol=5e-5)
    assert_allclose(one.reagent_g_per_L, 14.77, rtol=0, atol=0.01)


def test_zinc_calcine_in_a_batch():
    curve = zinc_law().ore_curve(SizeDistribution.single(0.0892), 323.15)
    batch = batch_leach(curve, [1.0], ReagentDemand(1.5, 580.0), 55.0, solids_kg_per_m3=60.0)
    assert_allclose(batch.extraction, 0.894, rtol=0, atol=5e-4)


def test_reagent_balance_closes():
    train = zinc_train([0.1, 0.4, 0.2])
    taken = 55.0 - train.reagent_g_per_L
    assert_allclose(taken, 0.06 * 1.5 * 580.0 * train.extraction, rtol=1e-12)
    assert_allclose(train.taken_kg_per_t * 0.06, taken, rtol=1e-12)


def test_a_batch_of_draws_is_each_alone():
    ln_tau = np.log(np.array([9.0, 13.0, 18.0]) / 60.0)
    law = RateLaw(
        "chemical",
        (Resistance("chemical", ln_tau, activation_energy_kJ_per_mol=28.0, order=0.8),),
        Reference(323.15, 55.0, 0.0892),
        [0.0892],
        [ULTIMATE],
    )
    whole = tank_train(
        law,
        [0.25, 0.25],
        ReagentDemand(1.5, 580.0),
        55.0,
        solids_kg_per_m3=60.0,
        sizes=SizeDistribution.single(0.0892),
        temperature_K=323.15,
    )
    assert whole.extraction.shape == (3, 2)
    for i, tau in enumerate(np.exp(ln_tau)):
        assert_allclose(whole.extraction[i], zinc_train([0.25, 0.25], tau).extraction, rtol=1e-10)


def test_more_tanks_of_one_volume_extract_more():
    last = [
        tank_train(ParticleLaw(chemical=1.0), np.full(n, 2.0 / n)).extraction[-1]
        for n in range(1, 9)
    ]
    assert (np.diff(last) > 0).all() and last[-1] < 1.0


def test_a_starved_tank_is_named():
    train = tank_train(
        zinc_law(),
        [2.0, 2.0, 8.0, 30.0],
        ReagentDemand(1.5, 580.0),
        30.0,
        solids_kg_per_m3=60.0,
        sizes=SizeDistribution.single(0.0892),
        temperature_K=338.15,
    )
    assert train.starved[-1]
    assert any("reagent" in words for words in train.warnings)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"residence_times_h": [0.0, 1.0]}, "residence_times_h.*above 0"),
        ({"residence_times_h": []}, "residence_times_h"),
        ({"residence_times_h": [np.nan]}, "residence_times_h"),
        ({"residence_times_h": [1.0], "ultimate": 1.2}, "ultimate"),
        ({"residence_times_h": [1.0], "reagent_order": -1.0}, "reagent_order"),
    ],
)
def test_refusals(arguments, message):
    with pytest.raises(InputProblems, match=message):
        tank_train(ParticleLaw(chemical=1.0), **arguments)


def test_two_energies_at_two_temperatures_have_no_clock():
    law = RateLaw(
        "ash_layer+chemical",
        (
            Resistance("ash_layer", 0.0, activation_energy_kJ_per_mol=19.0),
            Resistance("chemical", 0.0, activation_energy_kJ_per_mol=46.0),
        ),
        Reference(),
        [1.0],
        [1.0],
    )
    with pytest.raises(InputProblems, match="clock|temperature"):
        tank_train(
            law, [1.0, 1.0], sizes=SizeDistribution.single(1.0), temperature_K=[300.0, 320.0]
        )


BALANCE = {"demand": ReagentDemand(1.5, 580.0), "feed_g_per_L": 55.0, "solids_kg_per_m3": 60.0}


@pytest.mark.parametrize("missing", list(BALANCE))
def test_a_balance_needs_all_its_parts(missing):
    part = {name: value for name, value in BALANCE.items() if name != missing}
    with pytest.raises(InputProblems, match=f"{missing}: not given.*together"):
        tank_train(ParticleLaw(chemical=1.0), [1.0], **part)


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"feed_g_per_L": -1.0}, "feed_g_per_L: -1 g/L.*at least 0"),
        ({"feed_g_per_L": np.inf}, "feed_g_per_L: inf.*finite"),
        ({"solids_kg_per_m3": 0.0}, "solids_kg_per_m3: 0 kg/m3.*above 0"),
        ({"feed_g_per_L": np.ones(3), "solids_kg_per_m3": np.ones(2)}, "batch: .*n the same for"),
        ({"sizes": SizeDistribution.single(1.0)}, "sizes: given.*only with a RateLaw"),
        ({"temperature_K": 300.0}, "temperature_K: given.*only with a RateLaw"),
    ],
)
def test_refusals_of_a_balance(changed, message):
    with pytest.raises(InputProblems, match=message):
        tank_train(ParticleLaw(chemical=1.0), [1.0], **(BALANCE | changed))


def test_draws_of_the_plant_are_each_alone():
    hours = np.array([[0.1, 0.3], [0.3, 0.1], [2.0, 2.0]])
    feed, solids = np.array([40.0, 55.0, 70.0]), np.array([50.0, 60.0, 80.0])
    law, demand = ParticleLaw(chemical=0.2), ReagentDemand(1.5, 580.0, 4.0, 0.1)
    many = tank_train(law, hours, demand, feed, solids_kg_per_m3=solids)
    for i in range(3):
        one = tank_train(law, hours[i], demand, feed[i], solids_kg_per_m3=solids[i])
        assert_allclose(many.extraction[i], one.extraction, rtol=1e-11)
        assert_allclose(many.reagent_g_per_L[i], one.reagent_g_per_L, rtol=1e-9)


def test_metal_that_dissolves_at_once_takes_its_reagent_in_the_first_tank():
    hours = np.linspace(0.0, 3.0, 40) ** 2
    curve = OreCurve(hours, 0.2 + 0.7 * (1.0 - np.exp(-hours)), 0.9, 298.15, 50.0)
    train = tank_train(curve, [0.4, 0.4], ReagentDemand(1.5, 500.0), 50.0, solids_kg_per_m3=40.0)
    assert train.extraction[0] > 0.2
    assert_allclose(train.taken_kg_per_t, 750.0 * train.extraction, rtol=1e-11)
    assert_allclose(50.0 - train.reagent_g_per_L, 0.04 * train.taken_kg_per_t, rtol=1e-11)
