"""Values known beforehand, carried into a fit as rows of their own."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from leachkin.errors import InputProblems
from leachkin.kinetics import ParticleLaw, fit_tests, nested_test, rank_tests
from leachkin.testwork import Observed, SizeDistribution, observed_from_extraction

TIME_H = np.array([1.0, 2.0, 4.0, 8.0, 16.0, 24.0])


def bench(seed: int = 0, noise: float = 0.01, kelvin: tuple[float, ...] = (298.15,)):
    generator = np.random.default_rng(seed)
    found: list[Observed] = []
    for temperature in kelvin:
        for size in (1.0, 2.0):
            slower = np.exp(46.0e3 / 8.314462618 * (1 / temperature - 1 / 298.15))
            law = ParticleLaw(chemical=20.0 * size * slower)
            E = 0.9 * law.conversion(TIME_H) + noise * generator.standard_normal(TIME_H.size)
            found.append(
                observed_from_extraction(
                    TIME_H,
                    E,
                    noise,
                    test=f"{temperature:g} K, {size:g} mm",
                    sizes=SizeDistribution.single(size),
                    temperature_K=temperature,
                )
            )
    return found


def test_what_the_tests_do_not_tell_keeps_the_interval_of_the_prior():
    fit = fit_tests(
        bench(), "chemical", priors={"activation_energy_chemical": (45.0, 8.0)}, ultimate="one"
    )
    energy = fit.parameter("activation_energy_chemical")
    assert energy.value == pytest.approx(45.0, abs=1e-9)
    assert energy.standard_error == pytest.approx(8.0, rel=1e-9)
    assert energy.method.endswith("with a prior")
    assert not [said for said in fit.warnings if "one temperature was tested" in said]
    drawn = fit.draw(4000, 1).resistances[0].activation_energy_kJ_per_mol
    assert np.std(drawn) == pytest.approx(8.0, rel=0.05)


def test_precisions_add():
    """The reciprocal variances of independent knowledge add, up to the bend of the model."""
    tests = bench(kelvin=(288.15, 298.15, 318.15))
    alone = fit_tests(tests, "chemical", ultimate="one").parameter("activation_energy_chemical")
    wide = fit_tests(
        tests, "chemical", ultimate="one", priors={"activation_energy_chemical": (alone.value, 0.4)}
    ).parameter("activation_energy_chemical")
    both = 1.0 / alone.standard_error**2 + 1.0 / 0.4**2
    assert wide.standard_error == pytest.approx(both**-0.5, rel=1e-6)
    assert wide.value == pytest.approx(alone.value, rel=1e-8)


def test_a_prior_pulls_by_its_weight():
    tests = bench(kelvin=(288.15, 298.15, 318.15))
    alone = fit_tests(tests, "chemical", ultimate="one").parameter("activation_energy_chemical")
    prior, sd = alone.value + 2.0, 0.5
    pulled = fit_tests(
        tests, "chemical", ultimate="one", priors={"activation_energy_chemical": (prior, sd)}
    ).parameter("activation_energy_chemical")
    weights = np.array([alone.standard_error**-2, sd**-2])
    mean = weights @ [alone.value, prior] / weights.sum()
    assert pulled.value == pytest.approx(mean, abs=0.02)


def test_an_ultimate_has_its_prior_on_its_own_scale():
    fit = fit_tests(bench(), "chemical", priors={"ultimate": (0.88, 1e-5)}, ultimate="one")
    ultimate = fit.parameter("ultimate")
    assert ultimate.value == pytest.approx(0.88, abs=1e-5)
    assert ultimate.standard_error == pytest.approx(1e-5, rel=1e-2)


def test_scatter_above_the_stated_widens_the_readings_and_not_the_prior():
    tests = [replace(o, sd=o.sd / 3) for o in bench()]
    fit = fit_tests(
        tests, "chemical", priors={"activation_energy_chemical": (45.0, 8.0)}, ultimate="one"
    )
    assert fit.parameter("activation_energy_chemical").standard_error == pytest.approx(8.0)
    assert any("were weighed so against the priors" in said for said in fit.warnings)


def test_without_stated_precision_the_scatter_weighs_against_the_prior():
    tests = [replace(o, sd=np.ones(TIME_H.size), sd_given=False) for o in bench()]
    fit = fit_tests(tests, "chemical", priors={"ultimate": (0.90, 0.005)}, ultimate="one")
    stated = fit_tests(bench(), "chemical", priors={"ultimate": (0.90, 0.005)}, ultimate="one")
    found, beside = (one.parameter("ultimate") for one in (fit, stated))
    assert found.value == pytest.approx(beside.value, abs=0.003)
    assert 0.5 < found.standard_error / beside.standard_error < 2.0


@pytest.mark.parametrize(
    ("priors", "message"),
    [
        ({"activation_energy_chemical": (45.0, 0.0)}, "a prior of standard deviation 0"),
        ({"ultimate": (1.5, 0.1)}, "a prior about 1.5"),
        ({"activation_enrgy_chemical": (45.0, 8.0)}, "activation_energy_chemical"),
    ],
)
def test_wrong_priors_stop(priors, message):
    with pytest.raises(InputProblems, match=message):
        fit_tests(bench(), "chemical", priors=priors, ultimate="one")


def test_fixed_and_prior_exclude_each_other():
    with pytest.raises(InputProblems, match="both fixed and with a prior"):
        fit_tests(
            bench(),
            "chemical",
            ultimate="one",
            fixed={"ultimate": 0.9},
            priors={"ultimate": (0.9, 0.1)},
        )


def test_what_is_assumed_and_not_tested_does_not_move_the_ranking():
    """A prior that the tests tell nothing of is a held value: neither a row nor a quantity."""
    name = "activation_energy_chemical"
    prior = fit_tests(bench(), "chemical", priors={name: (45.0, 8.0)}, ultimate="one")
    held = fit_tests(bench(), "chemical", fixed={name: 45.0}, ultimate="one")
    assert prior.aicc == pytest.approx(held.aicc, abs=1e-9)
    assert prior.bic == pytest.approx(held.bic, abs=1e-9)
    plain = rank_tests(bench(), ("chemical", "ash_layer"), ultimate="one")
    ranked = rank_tests(
        bench(), ("chemical", "ash_layer"), ultimate="one", priors={name: (45.0, 8.0)}
    )
    for law in ("chemical", "ash_layer"):
        assert ranked.fit_of(law).aicc == pytest.approx(plain.fit_of(law).aicc, abs=1e-6)


def test_a_prior_that_hardly_counts_leaves_a_quantity_whole():
    tests = bench(kelvin=(288.15, 298.15, 318.15))
    free = fit_tests(tests, "chemical", ultimate="one")
    wide = fit_tests(
        tests, "chemical", ultimate="one", priors={"activation_energy_chemical": (46.0, 1e4)}
    )
    assert wide.aicc == pytest.approx(free.aicc, abs=1e-4)
    error = free.parameter("activation_energy_chemical").standard_error
    half = fit_tests(
        tests, "chemical", ultimate="one", priors={"activation_energy_chemical": (46.0, error)}
    )
    assert free.informed - half.informed == pytest.approx(0.5, abs=0.02)


def test_a_further_part_that_is_known_beforehand_costs_its_time_alone():
    names = {"activation_energy_chemical": (45.0, 8.0), "activation_energy_ash_layer": (20.0, 5.0)}
    tests = bench()
    larger = fit_tests(tests, "ash_layer+chemical", ultimate="one", priors=names)
    smaller = fit_tests(
        tests, "ash_layer", ultimate="one", priors={"activation_energy_ash_layer": (20.0, 5.0)}
    )
    assert nested_test(larger, smaller).extra == (0 if larger.not_needed else 1)
