"""The ore curve: against the law, ends, slopes, batch."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.kinetics import SHAPE_PARAMETERS, OreCurve, RateLaw, Reference, Resistance
from leachkin.testwork import SizeDistribution

ORE = SizeDistribution.gates_gaudin_schuhmann(
    19.0, 0.65, [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]
)
PARTS = {
    "film": (Resistance("film", 1.0),),
    "ash_layer": (Resistance("ash_layer", 2.0),),
    "chemical": (Resistance("chemical", 2.0),),
    "series": tuple(Resistance(k, 1.0) for k in ("film", "ash_layer", "chemical")),
}
SHAPES = {"fast_share": 0.4, "ratio": 20.0, "n": 0.6, "slope": 0.15}


def copper_law(n=None):
    rng = np.random.default_rng(5)
    shift = 0.0 if n is None else rng.normal(0.0, 0.1, n)
    chemical = Resistance("chemical", np.log(3.0) + shift, 46.0)
    ash = Resistance("ash_layer", np.log(7.0), 19.0)
    knots, ultimate = [1.416, 5.641, 10.90, 15.4], [0.88, 0.84, 0.79, 0.77]
    reference = Reference(298.15, 20.0, 1.416)
    return RateLaw("ash_layer+chemical", (chemical, ash), reference, knots, ultimate)


def law_of(name):
    if name in PARTS:
        return RateLaw(name, PARTS[name], Reference(), [1.0], [0.9])
    shapes = {key: SHAPES[key] for key in SHAPE_PARAMETERS[name]}
    return RateLaw(name, (Resistance("clock", 1.0),), Reference(), [1.0], [0.9], shapes)


def places(curve, count=4001):
    spread = np.geomspace(1e-9 * curve.end_h, curve.end_h, count)
    return np.concatenate([[0.0], spread, np.linspace(0.0, curve.end_h, count)[1:]])


@pytest.mark.parametrize(
    "name, atol",
    [
        ("ash_layer", 5e-5),
        ("chemical", 3e-7),
        ("series", 6e-6),
        ("film", 4e-4),  # a film alone ends each class in a corner
        ("shrinking_film", 1e-4),
        ("two_rate", 1e-7),
        ("avrami", 1e-6),
        ("second_order", 1e-6),
        ("elovich", 1e-7),
    ],
)
def test_table_against_the_law(name, atol):
    law = law_of(name)
    curve = law.ore_curve(ORE)
    s = places(curve)
    assert_allclose(curve(s), law.extraction(s, ORE), rtol=0, atol=atol)


def test_copper_ore_in_the_heap():
    """Fine to a few millionths on the ore it serves most."""
    law = copper_law()
    curve = law.ore_curve(ORE, 290.15)
    s = places(curve)
    assert_allclose(curve(s), law.extraction(s, ORE, 290.15), rtol=0, atol=5e-6)


@pytest.mark.parametrize("name", ["ash_layer", "chemical", "film", "avrami", "elovich"])
def test_never_falls_and_stays_below_the_ultimate(name):
    curve = law_of(name).ore_curve(ORE)
    values = curve(np.linspace(0.0, 1.1 * curve.end_h, 20001))
    assert values[0] == 0.0
    assert np.all(np.diff(values) >= -2e-16)
    assert np.all(values <= curve.ultimate + 1e-15)


def test_flat_beyond_the_end():
    curve = copper_law().ore_curve(ORE)
    assert_allclose(curve([curve.end_h, 10 * curve.end_h]), curve.ultimate, rtol=1e-12)
    assert_allclose(curve.derivative([curve.end_h, 10 * curve.end_h]), 0.0)
    assert curve.equivalent_h.size == 257


def test_exact_at_the_nodes():
    law = copper_law()
    curve = law.ore_curve(ORE, 290.15)
    exact = law.extraction(curve.equivalent_h, ORE, 290.15)
    assert_allclose(curve(curve.equivalent_h), exact, rtol=0, atol=2e-16)


def test_derivative_is_the_slope_of_the_call():
    curve = copper_law().ore_curve(ORE)
    s = np.geomspace(1e-4, 0.9, 40) * curve.end_h
    h = 1e-6 * s
    assert_allclose(curve.derivative(s), (curve(s + h) - curve(s - h)) / (2 * h), rtol=1e-6)


def test_derivative_at_the_start():
    """Chemical control starts at 3/tau; an ash layer without bound, given large and finite."""
    one = SizeDistribution.single(1.0)
    chemical = RateLaw("chemical", (Resistance("chemical", np.log(10.0)),), Reference(), [1], [1])
    assert_allclose(chemical.ore_curve(one).derivative(0.0), 0.3, rtol=1e-6)
    ash = RateLaw("ash_layer", (Resistance("ash_layer", np.log(10.0)),), Reference(), [1], [1])
    assert 1e3 < ash.ore_curve(one).derivative(0.0) < np.inf


def test_temperature_of_the_curve():
    law = copper_law()
    curve = law.ore_curve(ORE, 290.15)
    assert curve.temperature_K == 290.15
    assert curve.reagent_g_per_L == 20.0
    assert_allclose(curve.drive([10.0, 20.0, 0.0]), [0.5, 1.0, 0.0])
    assert_allclose(curve(100.0), law.extraction(100.0, ORE, 290.15), atol=5e-6)


def test_batch_is_the_loop():
    law = copper_law(3)
    curve = law.ore_curve(ORE)
    s = np.linspace(0.0, 500.0, 11)
    assert curve.batch_shape == (3,)
    assert curve(s).shape == (3, 11)
    assert curve(5.0).shape == (3,)
    assert curve.derivative(np.tile(s, (3, 1))).shape == (3, 11)
    assert_allclose(curve(np.tile(s, (3, 1))), curve(s), atol=0)
    for i in range(3):
        assert_allclose(curve.select(i)(s), curve(s)[i], atol=0)
        assert_allclose(law.select(i).ore_curve(ORE)(s), curve(s)[i], atol=1e-5)


def test_from_points_alone():
    """A curve of measured points, without slopes: through the points and monotone."""
    s = np.array([0.0, 1.0, 4.0, 9.0, 100.0])
    E = np.array([0.0, 0.3, 0.31, 0.7, 0.8])
    curve = OreCurve(s, E, np.asarray(0.8), 298.15, 1.0)
    assert_allclose(curve(s), E, atol=1e-15)
    assert np.all(np.diff(curve(np.linspace(0, 120, 5001))) >= -1e-15)


@pytest.mark.parametrize("s", [-1.0, float("nan"), [1.0, float("inf")]])
def test_times_without_meaning_are_refused(s):
    curve = copper_law().ore_curve(ORE)
    for ask in (curve, curve.derivative):
        with pytest.raises(InputProblems, match="equivalent_h: a time below 0 or not finite"):
            ask(s)


@pytest.mark.parametrize(
    "nodes, values, message",
    [
        ([0.0, 2.0, 1.0], [0.0, 0.1, 0.2], "times that do not rise from 0"),
        ([1.0, 2.0], [0.0, 0.1], "times that do not rise from 0"),
        ([0.0, 1.0], [0.0, float("nan")], "extraction: shape"),
        ([0.0, 1.0], [0.0, 0.1, 0.2], "last axis 2 long"),
    ],
)
def test_tables_without_meaning_are_refused(nodes, values, message):
    with pytest.raises(InputProblems, match=message):
        OreCurve(np.array(nodes), np.array(values), np.asarray(1.0), 298.15, 1.0)
