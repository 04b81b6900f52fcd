from fractions import Fraction

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import binom

from leachkin.errors import InputProblems
from leachkin.kinetics import RateLaw, Reference, Resistance
from leachkin.kinetics.arrhenius import fit_arrhenius
from leachkin.kinetics.arrhenius_two_step import arrhenius_two_step, curvature_test
from leachkin.kinetics.simulate import Bottle, Noise, simulate_observed
from leachkin.testwork import SizeDistribution

R = 8.31446261815324


def law(energy=46.0):
    return RateLaw(
        "chemical",
        (Resistance("chemical", np.log(60.0), activation_energy_kJ_per_mol=energy),),
        Reference(298.15, 20.0, 5.0),
        [5.0],
        [0.85],
    )


def bottles_at(celsius, noise, seed=4):
    size = SizeDistribution.single(5.0)
    times = np.array([1.0, 3.0, 6.0, 12.0, 24.0, 48.0, 96.0])
    bottles = [
        Bottle(f"T{c}{r}", size, c + 273.15, times, 20.0) for c in celsius for r in ("a", "b")
    ]
    return simulate_observed(law(), bottles, head_kg_per_t=6.8, seed=seed, noise=noise)


QUIET = Noise(solution=0.0, tail=0.0, head=0.0, residue=0.0)


def test_both_ways_find_the_truth_without_noise():
    found = arrhenius_two_step(bottles_at((25, 35, 45, 60), QUIET), "chemical")
    assert found.names == ("tau_chemical",)
    assert_allclose(found.lines[0].activation_energy_kJ_per_mol, 46.0, rtol=1e-3)
    assert_allclose(found.whole.parameter("activation_energy_chemical").value, 46.0, rtol=1e-3)
    assert len(found.fixed_extraction) == 5
    for _, energy in found.fixed_extraction:
        assert_allclose(energy, 46.0, rtol=2e-3)


def test_both_ways_agree_with_noise():
    found = arrhenius_two_step(bottles_at((25, 40, 55), Noise()), "chemical")
    line, shared = found.lines[0], found.whole.parameter("activation_energy_chemical")
    assert abs(shared.value - 46.0) < 4.0 * shared.standard_error
    assert line.degrees_of_freedom == 1
    # Student t with one degree of freedom, 97.5 %: 12.706 (any table)
    half = 0.5 * (line.high - line.low)
    assert_allclose(half / line.standard_error_kJ_per_mol, 12.706, rtol=1e-4)
    assert line.low < 46.0 < line.high
    assert found.curvature[0].words == "3 temperatures: curvature cannot be tested"
    table = found.table()
    assert table.column("way")[:2] == ["all tests together", "a fit a temperature, then a line"]


def test_the_line_is_exact_weighted_least_squares():
    T = [Fraction(298), Fraction(313), Fraction(328), Fraction(343)]
    ln_k = [Fraction(-4), Fraction(-33, 10), Fraction(-26, 10), Fraction(-21, 10)]
    weight = [Fraction(1), Fraction(4), Fraction(2), Fraction(3)]
    x = [1 / t for t in T]
    total = sum(weight)
    mean_x = sum(w * a for w, a in zip(weight, x, strict=True)) / total
    mean_y = sum(w * b for w, b in zip(weight, ln_k, strict=True)) / total
    above = sum(w * (a - mean_x) * (b - mean_y) for w, a, b in zip(weight, x, ln_k, strict=True))
    below = sum(w * (a - mean_x) ** 2 for w, a in zip(weight, x, strict=True))
    k = np.exp([float(value) for value in ln_k])
    error = k / np.sqrt([float(w) for w in weight])
    fit = fit_arrhenius([float(t) for t in T], k, error)
    assert_allclose(fit.activation_energy_kJ_per_mol, -float(above / below) * R / 1e3, rtol=1e-12)


def test_a_bend_is_found_and_a_line_is_not():
    T = np.linspace(290.0, 350.0, 7)
    x = 1.0 / T - np.mean(1.0 / T)
    bent = curvature_test(T, np.exp(-5000.0 * x - 2e7 * x**2 + 1e-3 * np.cos(9.0 * T)))
    assert bent.p_value < 1e-6 and "the line bends" in bent.words
    assert_allclose(bent.bend, -2e7, rtol=0.05)


def test_false_alarms_come_at_their_rate():
    generator = np.random.default_rng(8)
    T = np.array([293.0, 303.0, 313.0, 323.0, 333.0])
    x = 1.0 / T - np.mean(1.0 / T)
    noise = 0.05 * generator.standard_normal((400, 5))
    alarms = sum(curvature_test(T, np.exp(-5000.0 * x + e)).p_value < 0.05 for e in noise)
    low, high = binom.ppf([0.0005, 0.9995], 400, 0.05)
    assert low <= alarms <= high


def test_one_temperature_is_refused():
    with pytest.raises(InputProblems, match="one temperature.*two temperatures or more"):
        arrhenius_two_step(bottles_at((25,), QUIET), "chemical")
