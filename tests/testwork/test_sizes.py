"""Size distributions: worked values, either direction, limits, refusals."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.tables import read_table
from leachkin.testwork import SizeDistribution
from leachkin.testwork.sizes import default_edges

EDGES = [19, 12.5, 9.5, 6.7, 4.75, 2.36, 1.18, 0.6, 0.3, 0.05]


def test_classes_are_geometric_means():
    ore = SizeDistribution.from_classes([12.5, 9.5, 6.7], [0.25, 0.75])
    assert_allclose(ore.size_mm, np.sqrt([12.5 * 9.5, 9.5 * 6.7]), rtol=1e-15)
    assert_allclose(ore.metal_share, [0.25, 0.75])
    assert_allclose(ore.mass_mean_mm, 0.25 * ore.size_mm[0] + 0.75 * ore.size_mm[1])


def test_gates_gaudin_schuhmann_by_hand():
    """Ten classes: between the edges, and what is finer than the last at the last."""
    ore = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, EDGES)
    assert ore.classes == 10
    assert_allclose(ore.size_mm[[0, -2, -1]], np.sqrt([19 * 12.5, 0.3 * 0.05, 0.05**2]))
    assert_allclose(ore.mass_share[0], 1 - (12.5 / 19) ** 0.65, rtol=1e-14)
    assert_allclose(ore.mass_share[-1], (0.05 / 19) ** 0.65, rtol=1e-14)
    assert_allclose(ore.p80_mm, 19 * 0.8 ** (1 / 0.65), rtol=1e-12)


def test_direction_of_the_edges_does_not_matter():
    down = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, EDGES)
    up = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, EDGES[::-1])
    assert_allclose(up.size_mm, down.size_mm)
    rising = SizeDistribution.from_classes([6.7, 9.5, 12.5], [0.75, 0.25])
    falling = SizeDistribution.from_classes([12.5, 9.5, 6.7], [0.25, 0.75])
    assert_allclose(rising.p80_mm, falling.p80_mm)


def test_default_edges_are_standard_sieves():
    edges = default_edges(19.0)
    series = [row.number("aperture_mm") for row in read_table("sieve_series").rows]
    assert edges[0] == 19.0
    assert len(set(edges[1:20]) & set(series)) == 19
    assert np.all(edges[1:] <= 0.75 * edges[:-1])
    assert default_edges(0.06).size == edges.size


def test_sieve_series_keeps_its_provenance():
    rows = read_table("sieve_series").rows
    assert {row.text("status") for row in rows} == {"printed", "from memory"}
    assert read_table("sieve_series").first("us_designation", "No. 4").number("aperture_mm") == 4.75


@pytest.mark.parametrize("slope", [0.7, 1.2])
@pytest.mark.parametrize("d63", [0.08, 8.0])
def test_rosin_rammler_passing(d63, slope):
    ore = SizeDistribution.rosin_rammler(d63, slope)
    passing = np.concatenate([np.cumsum(ore.mass_share[::-1])[::-1]])
    wanted = 1 - np.exp(-((ore.edges_mm[1:-1] / d63) ** slope))
    assert_allclose(passing[1:], wanted, rtol=1e-12)
    assert_allclose(ore.p80_mm, d63 * np.log(5.0) ** (1 / slope), rtol=0.02)


def test_log_normal_mean_and_extraction():
    """The mass mean is median * sqrt(1 + cv^2). Chemical control over a median of 5.5 h and CV
    0.9 agrees with a fine quadrature."""
    ore = SizeDistribution.log_normal(5.5, 0.9)
    assert ore.classes == 15
    assert_allclose(ore.mass_mean_mm, 5.5 * np.sqrt(1.81), rtol=1e-14)
    deviate = np.linspace(-8, 8, 20001)
    weight = np.exp(-0.5 * deviate**2)
    fine = 5.5 * np.exp(np.sqrt(np.log(1.81)) * deviate)
    for time in (1.0, 4.0, 12.0, 48.0):
        wanted = np.average(1 - np.maximum(1 - time / fine, 0) ** 3, weights=weight)
        found = ore.mass_share @ (1 - np.maximum(1 - time / ore.size_mm, 0) ** 3)
        assert_allclose(found, wanted, atol=2e-4)


def test_sieve_table_in_either_direction():
    down = SizeDistribution.from_sieves([12.5, 9.5, 6.7], [0, 40, 50, 10], pan_mm=3.0)
    assert_allclose(down.size_mm, [np.sqrt(12.5 * 9.5), np.sqrt(9.5 * 6.7), 3.0])
    assert_allclose(down.mass_share, [0.4, 0.5, 0.1])
    up = SizeDistribution.from_sieves([6.7, 9.5, 12.5], [10, 50, 40, 0], pan_mm=3.0)
    assert_allclose(up.size_mm, down.size_mm)
    assert_allclose(up.mass_share, down.mass_share)
    zero = SizeDistribution.from_sieves([12.5, 9.5, 6.7, 0], [0, 40, 50, 10], pan_mm=3.0)
    assert_allclose(zero.mass_share, down.mass_share)


def test_sieve_table_without_pan_size_is_on_the_slow_side():
    ore = SizeDistribution.from_sieves([12.5, 9.5], [0, 40, 60])
    assert_allclose(ore.size_mm, [np.sqrt(12.5 * 9.5), 9.5])


def test_assays_by_size_give_metal_shares():
    ore = SizeDistribution.from_sieves([12.5, 9.5, 6.7], [0, 40, 60], grade=[0, 0.5, 1.0])
    assert_allclose(ore.metal_share, [20 / 80, 60 / 80])
    assert_allclose(ore.mass_share, [0.4, 0.6])


def test_rounded_shares_are_made_to_sum():
    ore = SizeDistribution.from_classes([3, 2, 1], [0.3333333, 0.6666664])
    assert_allclose(ore.mass_share.sum(), 1.0, rtol=1e-15)


def test_p80_where_it_is_not_defined():
    assert SizeDistribution.single(3.0).p80_mm is None
    assert SizeDistribution.log_normal(1.0, 0.5).p80_mm is None
    assert SizeDistribution.from_sieves([12.5, 9.5], [0, 10, 90]).p80_mm is None


@pytest.mark.parametrize(
    "make, message",
    [
        (lambda: SizeDistribution.single(0.0), "size_mm: .* above 0 mm"),
        (lambda: SizeDistribution.single(float("nan")), "size_mm"),
        (lambda: SizeDistribution.from_classes([3, 2, 1], [30, 70]), "shares sum to 100.*percent"),
        (lambda: SizeDistribution.from_classes([3, 2, 1], [1.1, -0.1]), "none below 0"),
        (lambda: SizeDistribution.from_classes([3, 2, 1], [1.0]), "1 shares for 3 edges"),
        (lambda: SizeDistribution.from_classes([3, 1, 2], [0.5, 0.5]), "edges in one direction"),
        (
            lambda: SizeDistribution.from_sieves([12.5, 9.5], [5, 40, 60]),
            "5 g stays on the coarsest sieve, 12.5 mm.*add a coarser sieve",
        ),
        (lambda: SizeDistribution.from_sieves([12.5, 9.5, 10], [0, 1, 1]), "in one direction"),
        (lambda: SizeDistribution.from_sieves([12.5, 9.5], [0, 1, 1, 1]), "4 masses for 2"),
        (lambda: SizeDistribution.from_sieves([12.5, 9.5], [0, 0, 0]), "0 g in all"),
        (lambda: SizeDistribution.from_sieves([12.5, 9.5], [0, -1, 2]), "none below 0"),
        (
            lambda: SizeDistribution.from_sieves([12.5, 9.5], [0, 1, 1], grade=[0, 0, 0]),
            "no metal in any fraction",
        ),
        (
            lambda: SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65, [12.5, 1.0]),
            "% of the mass is coarser than the top edge.*add a coarser edge",
        ),
        (lambda: SizeDistribution.gates_gaudin_schuhmann(-1.0, 0.65), "top_mm: -1"),
        (lambda: SizeDistribution.rosin_rammler(1.0, 0.0), "slope: 0"),
        (lambda: SizeDistribution.log_normal(1.0, -0.5), "cv: -0.5"),
        (lambda: SizeDistribution.log_normal(1.0, 0.5, 3), "classes: 3. Allowed: at least 5"),
    ],
)
def test_what_has_no_meaning_is_refused(make, message):
    with pytest.raises(InputProblems, match=message):
        make()
