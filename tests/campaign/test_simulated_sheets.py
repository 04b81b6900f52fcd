"""Simulate, write as sheets, read the sheets as a campaign, fit: the law comes back."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    Bottle,
    GangueLaw,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    simulate_tests,
    simulated_sheets,
    write_simulated,
)
from leachkin.testwork import History, SizeDistribution, observe

HOURS = np.array([1.0, 3.0, 8.0, 20.0, 45.0, 90.0])
SIEVED = SizeDistribution.gates_gaudin_schuhmann(6.0, 0.7, [6.0, 4.0, 2.0, 1.0, 0.5])
LOG_NORMAL = SizeDistribution.log_normal(1.5, 0.9, 9)
EXACT = Noise(solution=0, tail=0, head=0, residue=0, titration=0)


def law(name="chemical", **more):
    kinds = ("clock",) if name == "first_order" else tuple(name.split("+"))
    values = {"ash_layer": (40.0, 20.0), "chemical": (30.0, 45.0), "clock": (25.0, 35.0)}
    parts = tuple(Resistance(kind, np.log(values[kind][0]), values[kind][1]) for kind in kinds)
    return RateLaw(name, parts, Reference(298.15, 20.0, 2.0), [2.0], [0.85], **more)


def held(sizes, **more):
    return [
        Bottle(f"B{celsius}", sizes, 273.15 + celsius, HOURS, 20.0, **more)
        for celsius in (25, 35, 45)
    ]


def running_down(sizes):
    """Temperature and strength that change, straight between the readings."""
    at = np.concatenate([[0.0], HOURS])
    strength = 20.0 - 12.0 * (1.0 - np.exp(-at / 30.0))
    return [
        Bottle(
            f"B{celsius}",
            sizes,
            273.15 + celsius,
            HOURS,
            20.0,
            history=History(at, 273.15 + celsius + 5.0 * np.tanh(at / 20.0), strength),
        )
        for celsius in (25, 35, 45)
    ]


def observed_in(folder):
    campaign = read_campaign(folder)
    return [observe(test, "Cu") for test in run_campaign(campaign, upto="extraction").tests]


@pytest.mark.parametrize(
    ("name", "bottles"),
    [
        ("chemical", held(SIEVED)),
        ("chemical", held(LOG_NORMAL, aliquots="replaced by water")),
        ("first_order", held(SizeDistribution.single(2.0), aliquots="not replaced")),
        ("chemical", running_down(SIEVED)),
        ("first_order", running_down(SizeDistribution.single(2.0))),
    ],
    ids=["sieved", "log-normal", "first order", "running down", "first order, running down"],
)
def test_constants_come_back_from_written_sheets(tmp_path, name, bottles):
    truth = law(name)
    gangue = GangueLaw(6.0, 1.0, 8.0, 100.0, 30.0)
    tests = simulate_tests(
        truth, bottles, head_kg_per_t=6.8, seed=4, per_metal_kg_per_kg=1.543, gangue=gangue
    )
    assert write_simulated(tests, tmp_path / "made") == tmp_path / "made" / "campaign.toml"
    observed = observed_in(tmp_path / "made")
    fit = fit_tests(observed, name, reference=truth.reference, ultimate="one")
    resistance = truth.resistances[0]
    kind = resistance.kind
    values = {"ultimate": 0.85}
    if kind == "clock":
        values |= {"k": 1.0 / 25.0, "activation_energy": 35.0}
    else:
        values |= {f"tau_{kind}": 30.0, f"activation_energy_{kind}": 45.0}
    for parameter, value in values.items():
        found = fit.parameter(parameter)
        assert abs(found.value - value) < 3.5 * found.standard_error, found
        assert found.standard_error < 0.1 * value


def test_what_is_read_is_what_was_simulated(tmp_path):
    bottles = running_down(SIEVED)
    tests = simulate_tests(law(), bottles, head_kg_per_t=6.8, seed=1, noise=EXACT)
    write_simulated(tests, tmp_path / "made", noise=EXACT)
    for made, read in zip(tests, observed_in(tmp_path / "made"), strict=True):
        assert read.test == made.bottle.name
        assert_allclose(read.sizes.size_mm, made.bottle.sizes.size_mm, rtol=1e-12)
        assert_allclose(read.sizes.mass_share, made.bottle.sizes.mass_share, rtol=1e-9)
        assert_allclose(read.expected(made.extraction_true), read.value, rtol=2e-5)
        at = np.linspace(0.1, 89.0, 300)
        strength = np.interp(at, read.history.time_h, read.history.reagent_g_per_L)
        true = np.interp(at, made.history.time_h, made.history.reagent_g_per_L)
        assert_allclose(strength, true, rtol=2e-5)
        later = at > HOURS[0]  # the log has nothing before the first reading
        kelvin = np.interp(at, read.history.time_h, read.history.temperature_K)
        true = np.interp(at, made.history.time_h, made.history.temperature_K)
        assert_allclose(kelvin[later], true[later], atol=1e-3)


def test_evenly_spaced_sizes_without_edges_get_them(tmp_path):
    tests = simulate_tests(law(), held(LOG_NORMAL), head_kg_per_t=6.8, seed=1)
    write_simulated(tests, tmp_path / "made")
    read = observed_in(tmp_path / "made")[0]
    coarse_first = LOG_NORMAL.size_mm[::-1]
    assert_allclose(read.sizes.size_mm, coarse_first, rtol=1e-9)
    assert_allclose(read.sizes.mass_share, LOG_NORMAL.mass_share[::-1], rtol=1e-9)
    uneven = SizeDistribution(np.array([4.0, 1.0, 0.9]), np.array([0.3, 0.3, 0.4]))
    tests = simulate_tests(law(), held(uneven), head_kg_per_t=6.8, seed=1)
    with pytest.raises(InputProblems, match="classes without edges"):
        simulated_sheets(tests)


def test_metal_by_size_is_written_as_assays_of_the_fractions(tmp_path):
    edges, mass, metal = [4.0, 2.0, 1.0, 0.5], [0.5, 0.3, 0.2], [0.3, 0.4, 0.3]
    ore = SizeDistribution.from_classes(edges, mass, metal)
    tests = simulate_tests(law(), held(ore), head_kg_per_t=6.8, seed=1)
    grade = simulated_sheets(tests)["sieves"].column("grade")
    assert_allclose(grade[1:4], 0.68 * np.array([0.6, 4 / 3, 1.5]))
    write_simulated(tests, tmp_path / "made")
    assert_allclose(observed_in(tmp_path / "made")[0].sizes.metal_share, metal, rtol=1e-9)


def test_a_campaign_without_reagent_and_with_other_species():
    at = np.array([0.0, 90.0])
    history = History(at, np.full(2, 298.15), None, {"O2": np.array([0.008, 0.006])})
    bottle = Bottle(
        "one",
        SizeDistribution.single(2.0),
        298.15,
        HOURS,
        20.0,
        history=history,
        stirring_rpm=300.0,
    )
    tests = simulate_tests(law(), [bottle], head_kg_per_t=6.8, seed=1)
    sheets = simulated_sheets(tests, "Au", reagent=None)
    headings = {name: [c.title for c in sheet.columns] for name, sheet in sheets.items()}
    assert "O2 (g/L)" in headings["readings"] and "Au (g/L)" in headings["readings"]
    assert not any("H2SO4" in title or "None" in title for t in headings.values() for title in t)
    assert "stirring (rpm)" in headings["tests"] and "sieves" not in sheets


def test_an_earlier_campaign_is_replaced_only_when_asked(tmp_path):
    tests = simulate_tests(law(), held(SIEVED), head_kg_per_t=6.8, seed=1)
    write_simulated(tests, tmp_path / "made")
    with pytest.raises(InputProblems, match="not empty"):
        write_simulated(tests, tmp_path / "made")
    write_simulated(tests, tmp_path / "made", title='a "quoted" title', overwrite=True)
    assert read_campaign(tmp_path / "made").title == "a 'quoted' title"


def test_no_tests_no_sheets():
    with pytest.raises(InputProblems, match="at least one simulated test"):
        simulated_sheets([])
