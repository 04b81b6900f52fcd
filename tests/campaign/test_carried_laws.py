"""Every law that the data do not reject, carried to the plant; what is assumed, in the fit."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign
from leachkin.campaign.campaign import read_leniently
from leachkin.campaign.carried_laws import one_batch
from leachkin.kinetics import ParticleLaw, RateLaw, Reference, Resistance
from leachkin.testwork import SizeDistribution

TIME_H = np.array([2.0, 6.0, 12.0, 24.0, 48.0, 96.0])
#: All bottles read once, at the same time: any law of one time fits them alike.
ONE_TIME = np.array([24.0])
ORE = SizeDistribution.from_classes([1.0, 4.0, 12.0], [0.5, 0.5])
HEAP = """
[heap]
ore_rate = "100000 t/month"
lift_height = "6 m"
bulk_density = "1.65 t/m3"
irrigation = "8 L/h/m2"
cycle = "60 d"
temperature = "25 degC"
feed_reagent = "10 g/L"
cure = "1 kg/t"
moisture = "0.09 m3/t"
contacted_fraction = { value = 0.85, low = 0.8, high = 0.9, source = "judgement", by = "T. Ester" }
delivery_factor = 2
[heap.sizes]
class_edges_mm = [1, 4, 12]
mass_shares = [0.5, 0.5]
"""
TANK = """
[tank]
residence_times = ["6 h", "6 h"]
temperature = "TEMPERATURE"
[tank.sizes]
single = "2.83 mm"
"""


def bottles(folder: Path, more: str, *, laws: str, times: np.ndarray = TIME_H) -> Path:
    """Five bottles of one size and temperature, chemical control, 2 % noise."""
    generator = np.random.default_rng(3)
    tests = [
        "test,domain,kind,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
        "temperature (degC),start H2SO4 (g/L),aliquots"
    ]
    readings = ["test,time (h),aliquot (mL),Cu (g/L)"]
    for i in range(5):
        tests.append(f"B{i},pit,bottle roll,500,1000,2,4,25,10,returned")
        E = 0.85 * ParticleLaw(chemical=150.0).conversion(times)
        found = 6.0 * 0.5 * E * (1 + 0.02 * generator.standard_normal(times.size))
        readings += [f"B{i},{t:g},20,{c:.5f}" for t, c in zip(times, found, strict=True)]
    (folder / "tests.csv").write_text("\n".join(tests) + "\n")
    (folder / "readings.csv").write_text("\n".join(readings) + "\n")
    (folder / "heads.csv").write_text("domain,Cu (%)\npit,0.6\n")
    (folder / "campaign.toml").write_text(
        f"""format = 1
[campaign]
title = "bottles"
metals = ["Cu"]
[tables]
tests = "tests.csv"
readings = "readings.csv"
heads = "heads.csv"
[precision]
solution = "2 %"
head = "2 %"
[fit]
laws = {laws}
ultimate = 0.85
{more}"""
    )
    return folder / "campaign.toml"


def laws(n: int = 4) -> list[RateLaw]:
    generator = np.random.default_rng(1)

    def some(middle: float) -> np.ndarray:
        return middle + 0.1 * generator.standard_normal(n)

    reference, knots = Reference(size_mm=2.0), [2.0]
    chemical = (Resistance("chemical", some(3.0), some(46.0)),)
    both = (Resistance("ash_layer", some(2.5), some(19.0)), Resistance("chemical", some(2.0), 46.0))
    return [
        RateLaw("chemical", chemical, reference, knots, 0.8 + 0.01 * generator.random((n, 1))),
        RateLaw("ash_layer+chemical", both, reference, knots, np.full((n, 1), 0.85)),
        RateLaw("ash_layer", both[:1], reference, knots, np.full((n, 1), 0.9)),
    ]


def test_one_batch_is_each_law_where_it_was_drawn():
    which = np.array([0, 1, 2, 1])
    batch = one_batch(laws(), which)
    for kelvin in (298.15, 330.0):
        found = batch.extraction(TIME_H, ORE, kelvin)
        for j, law in enumerate(which):
            own = laws()[law].select(j).extraction(TIME_H, ORE, kelvin)
            assert_allclose(found[j], own, rtol=1e-12)
    curve = batch.ore_curve(ORE)
    for j, law in enumerate(which):
        own = laws()[law].select(j).extraction(TIME_H, ORE)
        assert_allclose(curve(TIME_H)[j], own, atol=1e-4)


@pytest.mark.slow
def test_laws_that_cannot_be_told_apart_widen_the_band_and_are_named(tmp_path):
    """One size and one time were tested: the laws part company at others."""
    path = bottles(tmp_path, HEAP, times=ONE_TIME, laws='["chemical", "ash_layer"]')
    result = run_campaign(read_campaign(path), draws=200)
    stage, heap = result.kinetics["pit/Cu"], result.heap
    assert set(stage.ranking.indistinguishable) == {"chemical", "ash_layer"}
    assert heap is not None
    other = heap.other_laws[0]
    assert other.changes_the_figure
    assert 0.0 < other.weight < 1.0
    assert heap.law_verdict.startswith("The choice of law does change your plant figure: the 2")
    parts = {one.cause: one.figure for one in heap.band_parts}
    low, high = sorted((heap.extracted.at(-1).value, other.extraction))
    assert_allclose([parts["law"].low, parts["law"].high], [low, high], rtol=1e-12)
    together = parts["all together"]
    assert together.low <= low + 0.01
    assert together.high >= high - 0.01
    assert any("2 laws not rejected, by AICc weight" in held for held in heap.contains)
    alone = run_campaign(read_campaign(path, {"fit.laws": "chemical"}), draws=200).heap
    width = together.high - together.low
    assert width > 1.3 * (alone.extracted.at(-1).high - alone.extracted.at(-1).low)
    assert alone.law_verdict == "No other law is left that could change your plant figure."
    tables = {table.name for table in result.tables()}
    assert {"heap_band", "heap_other_laws"} <= tables
    assert "nested_tests_pit_Cu" not in tables  # neither law contains the other


def test_an_empirical_law_that_is_not_rejected_is_said_and_not_carried(tmp_path):
    path = bottles(tmp_path, HEAP, times=ONE_TIME, laws='["chemical", "first_order"]')
    heap = run_campaign(read_campaign(path), draws=0).heap
    assert heap is not None
    assert not heap.other_laws
    assert "without a theory that carries it to a plant: first_order" in heap.law_verdict


ASSUMED = """
[[assumed]]
parameter = "activation_energy_chemical"
value = "45 kJ/mol"
low = "30 kJ/mol"
high = "60 kJ/mol"
source = "print"
by = "T. Ester"
"""


def test_an_assumed_energy_is_a_prior_of_the_fit_and_in_the_band(tmp_path):
    """One temperature was tested: the energy and its range are those of the row."""
    tank = TANK.replace("TEMPERATURE", "45 degC")
    path = bottles(tmp_path, tank + ASSUMED, laws='["chemical"]')
    result = run_campaign(read_campaign(path), draws=2000)
    energy = result.kinetics["pit/Cu"].fit.parameter("activation_energy_chemical")
    assert energy.value == pytest.approx(45.0, abs=1e-6)
    # a triangle of half-width 15 about its peak: 15/sqrt(6)
    assert energy.standard_error == pytest.approx(15.0 / 6.0**0.5, rel=1e-6)
    out = result.tank.extraction.at(-1)
    at_25 = run_campaign(read_campaign(path, {"tank.temperature": "25 degC"}), draws=2000)
    narrow = at_25.tank.extraction.at(-1)
    assert out.value > narrow.value + 0.05
    assert (out.high - out.low) > 3.0 * (narrow.high - narrow.low)
    assert any("assumed ranges of activation_energy_chemical" in c for c in result.tank.contains)
    row = next(row for row in result.assumed if row.key == "activation_energy_chemical")
    assert row.in_band


def test_an_ultimate_from_sequential_assays_bounds_the_fit(tmp_path):
    rows = """
[[assumed]]
parameter = "ultimate"
value = 0.80
low = 0.79
high = 0.81
source = "sequential assays"
by = "T. Ester"
"""
    path = bottles(tmp_path, rows, laws='["chemical"]')
    free = {"fit.ultimate": "one"}
    bounded = run_campaign(read_campaign(path, free), "fit").kinetics["pit/Cu"].fit
    found = bounded.parameter("ultimate")
    assert found.method.endswith("with a prior")
    assert abs(found.value - 0.80) < 0.02


def test_rows_of_assumed_values_are_checked(tmp_path):
    def found(old: str, new: str) -> list:
        row = ASSUMED.replace(old, new)
        path = bottles(tmp_path, row, laws='["chemical"]')
        return [p.found for p in read_leniently(path).problems]

    assert any("activation_energy_chemcal" in f for f in found("y_chemical", "y_chemcal"))
    assert any("low, value, high" in f for f in found('low = "30', 'low = "50'))
    assert any("45 has no unit" in f for f in found('"45 kJ/mol"', '"45"'))


def test_the_order_reaches_the_tanks_and_not_the_heap(tmp_path):
    order = """
[[assumed]]
parameter = "reagent_order"
value = 1.0
low = 0.7
high = 1.2
source = "one strength"
by = "T. Ester"
"""
    tank = TANK.replace("TEMPERATURE", "25 degC").replace(
        "[tank.sizes]", 'feed_reagent = "5 g/L"\nsolids = "100 kg/m3"\n[tank.sizes]'
    )
    path = bottles(tmp_path, tank + order, laws='["chemical"]')
    campaign = read_campaign(path)
    assert not [p for p in campaign.problems if "not in the bands" in p.found]
    fit = run_campaign(campaign, "fit").kinetics["pit/Cu"].fit
    assert fit.parameter("reagent_order").standard_error == pytest.approx(0.103, abs=0.001)
    path = bottles(tmp_path, HEAP + order, laws='["chemical"]')
    campaign = read_campaign(path)
    assert [p for p in campaign.problems if "not in the bands" in p.found]
    assert run_campaign(campaign, draws=50).heap is not None


def test_what_speaks_for_a_law_is_in_the_tables_and_the_numbers():
    copper = Path(__file__).parents[2] / "example_runs" / "copper_heap" / "campaign.toml"
    result = run_campaign(read_campaign(copper), "fit")
    names = {table.name for table in result.tables()}
    for name in ("mechanism", "nested_tests", "left_out", "tests_of_need", "residual_checks"):
        assert f"{name}_oxide_Cu" in names
    evidence = result.to_dict()["kinetics"]["oxide/Cu"]["evidence"]
    assert evidence["mechanism"][0]["score"] == "consistent"
    assert {row["term"] for row in evidence["tests_of_need"]} >= {"lag", "fade", "loss"}
    assert not any(row["needed"] for row in evidence["tests_of_need"])
    best = evidence["left_out"][0]
    assert best["law"] == "ash_layer+chemical"
    assert 0.7 < best["error"] < 1.5


def test_a_length_factor_acts_on_the_laws_that_have_an_ash_layer(tmp_path):
    """The chemical law beside it knows no length: it stays, and the heap is still done."""
    longer = HEAP.replace("delivery_factor = 2", "delivery_factor = 2\nlength_factor = 2")
    both = '["chemical", "ash_layer"]'
    found = {}
    for name, heap_text in (("own", HEAP), ("longer", longer)):
        path = bottles(tmp_path, heap_text, times=ONE_TIME, laws=both)
        result = run_campaign(read_campaign(path), draws=50)
        names = [table.name for table in result.tables()]
        assert len(names) == len(set(names))
        carried = result.heap.other_laws[0]
        values = {carried.law: carried.extraction}
        values[result.kinetics["pit/Cu"].law.name] = result.heap.extracted.at(-1).value
        found[name] = values
    assert found["longer"]["chemical"] == pytest.approx(found["own"]["chemical"], rel=1e-9)
    assert found["longer"]["ash_layer"] < found["own"]["ash_layer"] - 0.05


def test_a_length_factor_without_an_ash_layer_is_said_to_do_nothing(tmp_path):
    longer = HEAP.replace("delivery_factor = 2", "delivery_factor = 2\nlength_factor = 2")
    path = bottles(tmp_path, longer, times=ONE_TIME, laws='["chemical"]')
    heap = run_campaign(read_campaign(path), draws=0).heap
    assert any("length_factor has no effect: chemical has no ash layer" in n for n in heap.notes)


def test_a_law_that_does_not_describe_the_tests_is_said_to_carry_the_plant(tmp_path):
    """Half of the metal fast, half slow: no shrinking core, whatever rules it."""
    path = bottles(tmp_path, HEAP, laws='["film", "chemical"]')
    E = 0.85 * (1.0 - 0.5 * np.exp(-TIME_H / 1.0) - 0.5 * np.exp(-TIME_H / 200.0))
    rows = [f"B{i},{t:g},20,{3 * e:.5f}" for i in range(5) for t, e in zip(TIME_H, E, strict=True)]
    (tmp_path / "readings.csv").write_text(
        "test,time (h),aliquot (mL),Cu (g/L)\n" + "\n".join(rows)
    )
    result = run_campaign(read_campaign(path), draws=50)
    assert not result.kinetics["pit/Cu"].ranking.mechanisms
    verdict = result.heap.law_verdict
    assert verdict.startswith("No law that can be carried to a plant describes these tests")
    law = result.kinetics["pit/Cu"].law.name
    assert f"rests on {law}, for want of a better one" in verdict
    assert verdict in result.headline()


def test_what_is_assumed_of_one_law_does_not_name_the_other(tmp_path):
    """One temperature: an energy from print tells nothing of which law it is."""
    both = '["chemical", "ash_layer"]'
    path = bottles(tmp_path, HEAP + ASSUMED, times=ONE_TIME, laws=both)
    result = run_campaign(read_campaign(path), draws=50)
    rows = result.kinetics["pit/Cu"].ranking.rows
    assert [row.weight for row in rows] == pytest.approx([0.5, 0.5], abs=1e-6)
    assert result.heap.other_laws
