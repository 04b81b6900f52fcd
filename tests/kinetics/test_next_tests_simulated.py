"""What is expected of a test against what it then tells, over simulated campaigns."""

from __future__ import annotations

import numpy as np
import pytest

from leachkin.kinetics import (
    Bottle,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    rank_tests,
    simulate_observed,
)
from leachkin.kinetics.next_tests import Candidate, next_tests
from leachkin.testwork import SizeDistribution

FINE, COARSE = SizeDistribution.single(1.0), SizeDistribution.single(2.0)
HEAD = 6.8


def law(name="chemical", tau=20.0, ultimate=(0.9, 0.85)):
    return RateLaw(
        name,
        (Resistance(name, np.log(tau), 46.0),),
        Reference(298.15, 20.0, 1.0),
        [1.0, 2.0][: len(ultimate)],
        ultimate,
    )


@pytest.mark.slow
def test_expected_intervals_are_those_of_the_refit():
    """Mean ratio of widths with and without each candidate, quantity by quantity."""
    time_h = np.array([0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 24.0])
    reference = Reference(298.15, 20.0, 1.0)
    present = [
        Bottle(f"{t:g} K, {s.mass_mean_mm:g} mm", s, t, 2 * time_h, 20.0)
        for t in (298.15, 318.15)
        for s in (FINE, COARSE)
    ]
    new = [
        Bottle("hot", COARSE, 338.15, time_h, 20.0),
        Bottle("cold", FINE, 278.15, 2 * time_h, 20.0),
        Bottle("long", COARSE, 298.15, 8 * time_h, 20.0),
    ]
    names = ["tau_chemical", "activation_energy_chemical", "ultimate_1_mm", "ultimate_2_mm"]

    def widths(fit):
        found = [fit.parameter(name) for name in names]
        return np.array([p.high - p.low for p in found])

    expected, seen = ({b.name: [] for b in new} for _ in range(2))
    for seed in range(20):
        made = simulate_observed(law(), [*present, *new], head_kg_per_t=HEAD, seed=seed)
        base = made[: len(present)]
        fit = fit_tests(base, "chemical", reference=reference)
        found = next_tests(base, fit, [Candidate(b) for b in new], of=names)
        for bottle, one in zip(new, made[len(present) :], strict=True):
            again = fit_tests([*base, one], "chemical", reference=reference)
            seen[bottle.name].append(widths(again) / widths(fit))
            row = found.row(bottle.name)
            ratio = [o.half_width / found.now(o.target).half_width for o in row.outlooks]
            expected[bottle.name].append(ratio)
    for name in seen:
        np.testing.assert_allclose(
            np.mean(seen[name], axis=0), np.mean(expected[name], axis=0), atol=0.015, err_msg=name
        )
    assert np.mean(expected["cold"], axis=0)[1] < 0.6  # the cold one tells the energy


@pytest.mark.slow
def test_the_chance_to_tell_laws_apart_is_how_often_it_happens():
    """Two early, poorly assayed bottles; film or chemical step true; one more bottle."""
    time_h = np.array([1.0, 2.0, 3.0, 4.5])
    truths = {"chemical": 30.0, "film": 13.0}
    noise = Noise(solution=0.10, tail=0.05, head=0.03)
    present = [Bottle(f"present {i}", FINE, 298.15, time_h, 20.0) for i in range(2)]
    new = [
        Bottle("again", FINE, 298.15, time_h, 20.0),
        Bottle("longer", FINE, 298.15, 4 * time_h, 20.0),
    ]
    expected, seen = ({b.name: [] for b in new} for _ in range(2))
    for seed in range(20):
        for true, tau in truths.items():
            made = simulate_observed(
                law(true, tau, (0.9,)),
                [*present, *new],
                head_kg_per_t=HEAD,
                seed=seed,
                noise=noise,
            )
            ranked = rank_tests(made[:2], list(truths), ultimate=0.9)
            fits = [ranked.fit_of(name) for name in truths]
            found = next_tests(made[:2], fits[0], [Candidate(b) for b in new], rivals=fits[1:])
            assert found.laws == tuple(truths)
            for bottle, one in zip(new, made[2:], strict=True):
                expected[bottle.name].append(found.row(bottle.name).separation.by_truth[true])
                more = rank_tests([*made[:2], one], list(truths), ultimate=0.9)
                seen[bottle.name].append(more.mechanisms == (true,))
    for name in seen:
        chance = np.mean(expected[name])
        spread = np.sqrt(max(chance * (1 - chance), 0.02) / len(seen[name]))
        assert abs(np.mean(seen[name]) - chance) < 3 * spread, name
    assert np.mean(expected["longer"]) > 0.95 > 0.8 > np.mean(expected["again"])
