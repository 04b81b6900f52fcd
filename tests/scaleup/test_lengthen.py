import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import ParticleLaw, RateLaw, Reference, Resistance
from leachkin.scaleup import lengthen
from leachkin.testwork import SizeDistribution


def law_of(name, *resistances):
    return RateLaw(name, resistances, Reference(298.15, 20.0, 1.0), [1.0], [0.9])


def test_ash_alone_slows_with_the_square_of_the_length():
    law = ParticleLaw(ash_layer=5.0)
    hours = np.linspace(0.0, 5.0, 11)
    assert_allclose(
        lengthen(law, 3.0).conversion(9.0 * hours), law.conversion(hours), rtol=0, atol=1e-13
    )


def test_the_size_exponent_does_not_matter():
    """Twice the length is four times the time, whatever power of the grain size was fitted."""
    fitted = Resistance("ash_layer", np.log(5.0), size_exponent=1.3)
    law = law_of("ash_layer", fitted)
    sizes = SizeDistribution.single(4.0)
    assert_allclose(
        lengthen(law, 2.0).extraction([4.0, 40.0], sizes),
        law.extraction([1.0, 10.0], sizes),
        rtol=1e-12,
    )


def test_film_and_chemical_steps_keep_their_times():
    law = law_of(
        "series", Resistance("film", 0.1), Resistance("ash_layer", 0.2), Resistance("chemical", 0.3)
    )
    longer = {r.kind: r for r in lengthen(law, 10.0).resistances}
    assert longer["film"] == law.resistances[0] and longer["chemical"] == law.resistances[2]
    assert_allclose(longer["ash_layer"].ln_tau, 0.2 + 2.0 * np.log(10.0), rtol=1e-14)


def test_one_after_another_is_the_product_and_back_is_the_start():
    law = ParticleLaw(ash_layer=5.0, chemical=1.0)
    twice = lengthen(lengthen(law, 2.0), 1.5)
    assert_allclose(twice.ash_layer, lengthen(law, 3.0).ash_layer, rtol=1e-14)
    assert_allclose(lengthen(twice, 1.0 / 3.0).ash_layer, 5.0, rtol=1e-14)


def test_draws_of_the_factor_and_of_the_law():
    factors = np.array([1.0, 2.0, 4.0])
    law = law_of("ash_layer", Resistance("ash_layer", np.log([3.0, 5.0, 7.0])))
    sizes = SizeDistribution.single(1.0)
    many = lengthen(law, factors)
    assert many.batch_shape == (3,)
    for i, factor in enumerate(factors):
        alone = lengthen(law.select(i), factor)
        assert_allclose(many.select(i).extraction([9.0], sizes), alone.extraction([9.0], sizes))


def test_a_factor_of_one_is_the_law():
    law = law_of("chemical", Resistance("chemical", 0.0))
    assert lengthen(law, 1.0) is law
    assert lengthen(law, np.ones(3)) is law


@pytest.mark.parametrize("factor", [0.0, -2.0, np.nan, np.inf])
def test_factors_without_meaning_are_refused(factor):
    with pytest.raises(InputProblems, match=f"length_factor: {factor:g}"):
        lengthen(ParticleLaw(ash_layer=5.0), factor)


def test_a_law_without_ash_is_refused_by_name():
    with pytest.raises(InputProblems, match=r"without an ash layer \(chemical\).*delivery_factor"):
        lengthen(law_of("chemical", Resistance("chemical", 0.0)), 2.0)
