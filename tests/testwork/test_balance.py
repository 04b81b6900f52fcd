"""Metal balances: hand-worked bottles, known errors of practice, conservation."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from leachkin.errors import InputProblems
from leachkin.testwork import (
    Assays,
    BalanceLimits,
    Head,
    History,
    Product,
    Test,
    metal_balance,
    observe,
    observed_from_extraction,
)

POLICIES = ["replaced by reagent solution", "replaced by water", "not replaced", "returned"]


def bottle(time_h, grade, analyte="Cu", **changes):
    """A bottle of 500 g in 1 L with 20 mL aliquots replaced, unless changed."""
    time_h, grade = np.asarray(time_h, float), np.asarray(grade, float)
    sd = changes.pop("sd", np.full(time_h.size, 1e-6))
    bound = changes.pop("bound", np.zeros(time_h.size, dtype=np.int64))
    fields = {
        "name": "B1",
        "domain": "oxide",
        "kind": "bottle roll",
        "solids_g": 500.0,
        "solution_mL": 1000.0,
        "sizes": None,
        "temperature_K": 298.15,
        "reagent_g_per_L": None,
        "stirring_rpm": None,
        "history": History(np.zeros(1), np.full(1, 298.15)),
        "aliquots": "replaced by reagent solution",
        "time_h": time_h,
        "aliquot_mL": np.full(time_h.size, 20.0),
        "makeup_mL": np.full(time_h.size, np.nan),
        "solution": {analyte: Assays(grade, np.asarray(sd), bound)},
        "residue_mass_sd_relative": 0.0,
    }
    return Test(**(fields | changes))


def solid(mass_g, kg_per_t, sd=1e-9, name="residue", analyte="Cu"):
    return Product(name, False, mass_g, {analyte: (kg_per_t, sd, 1)})


def liquid(volume_mL, g_per_L, sd=1e-9, name="filtrate", analyte="Cu"):
    return Product(name, True, volume_mL, {analyte: (g_per_L, sd, 1)})


def leach(extraction, head, policy, solids, volume, aliquot, makeup, strength, start):
    """Concentrations of a leach, metal followed through the vessel drop by drop."""
    metal, dissolved, grades = start * volume, 0.0, []
    for share, taken, came, brought in zip(extraction, aliquot, makeup, strength, strict=True):
        metal += solids * head * share - dissolved
        dissolved = solids * head * share
        grades.append(metal / volume)
        if policy != "returned":
            metal -= grades[-1] * taken
            volume -= taken
        in_mL = came if not np.isnan(came) else (taken if policy.startswith("replaced") else 0.0)
        metal += brought * in_mL
        volume += in_mL
    return np.array(grades)


def test_gold_bottle_worked_by_hand():
    # 1000 g, 1500 mL, 20 mL replaced, 0.60/0.90/1.10 mg/L, tail 0.55 g/t: after three samples
    # 1.10 x 1.5 + 0.02 x (0.60 + 0.90) = 1.68 mg; head (1.68 + 0.55) / 1 kg = 2.230 g/t
    test = bottle(
        [2, 6, 24],
        np.array([0.60, 0.90, 1.10]) / 1000,
        "Au",
        solids_g=1000.0,
        solution_mL=1500.0,
        products=(solid(1000.0, 0.55e-3, analyte="Au"),),
    )
    balance = metal_balance(test, "Au")
    assert_allclose(balance.head_calculated_kg_per_t, 2.230e-3, rtol=0, atol=5e-7)
    assert_allclose(
        balance.extraction_on_calculated_head, [0.4036, 0.6108, 0.7534], rtol=0, atol=5e-5
    )
    assert balance.final_on_calculated_head == balance.extraction_on_calculated_head[-1]
    assert balance.key == "oxide/Au"
    assert balance.head_assay_kg_per_t is None
    assert balance.final_on_assay_head is None


@pytest.mark.parametrize(
    ("policy", "uncorrected"), [("not replaced", 0.907), ("replaced by reagent solution", 0.716)]
)
def test_aliquots_left_out_misread_eighty_per_cent(policy, uncorrected):
    # 1.0 L, ten aliquots of 25 mL, linear leaching to 80 %: concentration times starting volume
    # reads 90.7 % where aliquots are not replaced and 71.6 % where they are
    extraction = 0.08 * np.arange(1, 11)
    aliquot, unwritten = np.full(10, 25.0), np.full(10, np.nan)
    grades = leach(extraction, 6.8, policy, 500.0, 1000.0, aliquot, unwritten, np.zeros(10), 0.0)
    test = bottle(
        np.arange(1.0, 11.0),
        grades,
        aliquots=policy,
        aliquot_mL=aliquot,
        makeup_mL=unwritten,
        heads={"Cu": Head(6.8, 0.1)},
    )
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.uncorrected_g[-1] / (0.5 * 6.8), uncorrected, rtol=0, atol=5e-4)
    assert_allclose(balance.extraction_on_assay_head, extraction, rtol=1e-12)
    assert_allclose(balance.correction_g[-1] / (0.5 * 6.8), 0.8 - uncorrected, rtol=0, atol=5e-4)


def test_small_vessel_with_many_aliquots():
    # 250 mL, eight aliquots of 10 mL made up, X = 0.8 (1 - exp(-i/1.5)): 62.5 % for 79.6 %
    extraction = 0.8 * -np.expm1(-np.arange(1, 9) / 1.5)
    aliquot = np.full(8, 10.0)
    grades = leach(extraction, 6.8, POLICIES[0], 100.0, 250.0, aliquot, aliquot, np.zeros(8), 0.0)
    test = bottle(
        np.arange(1.0, 9.0),
        grades,
        solids_g=100.0,
        solution_mL=250.0,
        aliquot_mL=aliquot,
        heads={"Cu": Head(6.8, 0.1)},
    )
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.uncorrected_g[-1] / 0.68, 0.625, rtol=0, atol=5e-4)
    assert_allclose(balance.final_on_assay_head, 0.796, rtol=0, atol=5e-4)


def test_three_figures_and_their_errors():
    # solution 1.22 +- 0.03, tail 0.25 +- 0.03, assay head 1.70 +- 0.17 g/t
    test = bottle(
        [24.0],
        [1.22e-3],
        "Au",
        sd=[0.03e-3],
        solids_g=1000.0,
        products=(solid(1000.0, 0.25e-3, 0.03e-3, analyte="Au"),),
        heads={"Au": Head(1.70e-3, 0.17e-3)},
    )
    balance = metal_balance(test, "Au")
    for name, value, sd in (
        ("final_on_assay_head", 71.8, 7.4),
        ("final_on_calculated_head", 83.0, 1.7),
        ("final_by_tail", 85.3, 2.3),
    ):
        assert_allclose(100 * getattr(balance, name), value, rtol=0, atol=0.05, err_msg=name)
        assert_allclose(100 * balance.sd[name], sd, rtol=0, atol=0.05, err_msg=name)
    assert_allclose(balance.closure, 1.47 / 1.70, rtol=1e-12)


def test_errors_against_drawn_assays():
    # the standard deviations of propagation against those of 40,000 redrawn bottles; their own
    # relative error is 0.4 %, the second-order terms left out are (5 %)^2
    generator = np.random.default_rng(5)
    n, grades, sd = 40_000, np.array([1.0, 1.8, 2.4]), np.array([0.02, 0.03, 0.05])
    tail, tail_sd, head, head_sd, mass_sd = 2.0, 0.08, 7.0, 0.2, 0.01
    test = bottle(
        [2, 6, 24],
        grades,
        sd=sd,
        products=(solid(485.0, tail, tail_sd),),
        heads={"Cu": Head(head, 0.6 * head_sd, 3, 0.8 * head_sd)},
        residue_mass_sd_relative=mass_sd,
    )
    drawn = grades + sd * generator.standard_normal((n, 3))
    dissolved = drawn @ [0.02, 0.02, 1.0]
    left = (tail + tail_sd * generator.standard_normal(n)) * 0.485
    left *= 1.0 + mass_sd * generator.standard_normal(n)
    head_g = 0.5 * (head + head_sd * generator.standard_normal(n))
    balance = metal_balance(test, "Cu")
    for name, values in (
        ("final_on_calculated_head", dissolved / (dissolved + left)),
        ("final_on_assay_head", dissolved / head_g),
        ("final_by_tail", 1.0 - left / head_g),
        ("closure", (dissolved + left) / head_g),
        ("head_calculated_kg_per_t", (dissolved + left) / 0.5),
    ):
        assert_allclose(balance.sd[name], values.std(), rtol=0.02, err_msg=name)


def unit(low, high, m):
    return st.lists(st.floats(low, high), min_size=m, max_size=m).map(np.array)


@st.composite
def charges(draw):
    m = draw(st.integers(1, 8))
    extraction = np.minimum.accumulate(draw(unit(0.01, 0.99, m))[::-1])[::-1]
    written = draw(unit(0.0, 30.0, m))
    unwritten = np.array(draw(st.lists(st.booleans(), min_size=m, max_size=m)))
    return {
        "policy": draw(st.sampled_from(POLICIES)),
        "extraction": extraction,
        "aliquot": draw(unit(0.0, 60.0, m)),
        "makeup": np.where(unwritten, np.nan, written),
        "strength": draw(unit(0.0, 0.5, m)),
        "start": draw(st.floats(0.0, 0.5)),
        "solids": draw(st.floats(50.0, 1000.0)),
        "volume": draw(st.floats(600.0, 3000.0)),
        "head": draw(st.floats(0.5, 20.0)),
        "loss": draw(st.floats(0.0, 0.3)),
    }


@settings(max_examples=60, deadline=None, derandomize=True)
@given(charge=charges())
def test_noise_free_readings_return_the_extraction(charge):
    """Under every policy: the balance gives E back, and the operator gives the readings."""
    E, head, solids = charge["extraction"], charge["head"], charge["solids"]
    grades = leach(
        E,
        head,
        charge["policy"],
        solids,
        charge["volume"],
        charge["aliquot"],
        charge["makeup"],
        charge["strength"],
        charge["start"],
    )
    residue = solids * (1.0 - charge["loss"])
    tail = head * solids * (1.0 - E[-1]) / residue
    test = bottle(
        np.arange(1.0, E.size + 1.0),
        grades,
        solids_g=solids,
        solution_mL=charge["volume"],
        aliquots=charge["policy"],
        aliquot_mL=charge["aliquot"],
        makeup_mL=charge["makeup"],
        products=(solid(residue, tail),),
        heads={"Cu": Head(head, 0.01 * head)},
        start_metal_g_per_L={"Cu": charge["start"]},
        makeup_metal_g_per_L={"Cu": charge["strength"]},
    )
    balance = metal_balance(test, "Cu")
    # metal that was there at the start is subtracted: rounding grows with its share of the whole
    brought = charge["start"] * charge["volume"] + 30.0 * E.size
    atol = 1e-14 * (1.0 + brought / (solids * head * E[0]))
    assert_allclose(balance.extraction_on_assay_head, E, rtol=1e-12, atol=atol)
    assert_allclose(balance.extraction_on_calculated_head, E, rtol=1e-12, atol=atol)
    assert_allclose(balance.closure, 1.0, rtol=1e-12, atol=atol)
    observed = observe(test, "Cu")
    assert observed.row_kind == ("solution",) * E.size + ("tail",)
    assert_allclose(observed.expected(E), observed.value, rtol=1e-12, atol=1e-14)
    assert_allclose(
        observed.expected(np.stack([E, 0.5 * E]))[0], observed.value, rtol=1e-12, atol=1e-14
    )


def test_filtrate_wash_and_carbon_count_as_dissolved():
    # 2.0 g/L x 950 mL + 0.2 x 300 + aliquots 0.02 x (1 + 2) + carbon 10 g x 5 kg/t = 2.07 g
    products = (
        liquid(950.0, 2.0),
        liquid(300.0, 0.2, name="wash"),
        solid(10.0, 5.0, name="loaded carbon"),
        solid(480.0, 1.0),
    )
    balance = metal_balance(bottle([2, 24], [1.0, 2.0], products=products), "Cu")
    assert_allclose(balance.final_dissolved_g, 1.9 + 0.06 + 0.06 + 0.05, rtol=1e-12)
    assert_allclose(balance.final_undissolved_g, 0.48, rtol=1e-12)
    assert_allclose(balance.tail_kg_per_t, 1.0, rtol=1e-12)
    without = metal_balance(bottle([2, 24], [1.0, 2.0], products=products[2:]), "Cu")
    assert_allclose(without.final_dissolved_g, 2.0 + 0.02 + 0.05, rtol=1e-12)


def test_a_test_still_running_is_provisional_on_the_assay_head():
    test = bottle([2, 24], [1.0, 2.0], heads={"Cu": Head(6.8, 0.1)})
    balance = metal_balance(test, "Cu")
    assert balance.provisional
    assert test.state == "running"
    assert_allclose(balance.final_on_assay_head, 2.02 / 3.4, rtol=1e-12)
    assert balance.final_on_calculated_head is None
    assert np.isnan(balance.extraction_on_calculated_head).all()
    texts = [p.found for p in balance.problems]
    assert texts == ["test B1 is not closed out for Cu: 59.4 % on the assay head, provisional"]


def test_neither_head_nor_tail():
    balance = metal_balance(bottle([2, 24], [1.0, 2.0]), "Cu")
    assert balance.final_on_assay_head is None
    assert_allclose(balance.dissolved_g, [1.0, 2.02], rtol=1e-12)
    assert any("no extraction can be had" in p.found for p in balance.problems)
    with pytest.raises(InputProblems, match="neither a Cu head assay nor a calculated head"):
        observe(bottle([2, 24], [1.0, 2.0]), "Cu")


def test_more_than_the_head_in_solution_names_the_causes():
    test = bottle([2, 24], [1.0, 4.4], heads={"Cu": Head(6.2, 0.1)})
    problem = next(
        p for p in metal_balance(test, "Cu").problems if "142.6 % of the assay head in" in p.found
    )
    assert problem.level == "note"
    assert "an assay in mg/L under g/L, a dilution applied twice" in problem.try_this


@pytest.mark.parametrize(
    ("analyte", "closure", "told"),
    [("Cu", 0.89, True), ("Cu", 0.91, False), ("Au", 0.86, False), ("Au", 1.16, True)],
)
def test_closure_limits_by_analyte(analyte, closure, told):
    test = bottle(
        [24.0],
        [1.0],
        analyte,
        products=(solid(500.0, 1.0, analyte=analyte),),
        heads={analyte: Head(3.0 / closure, 0.1)},
    )
    found = [p for p in metal_balance(test, analyte).problems if "closes at" in p.found]
    assert bool(found) == told
    wide = BalanceLimits(closure={"": (0.5, 1.5)})
    assert not metal_balance(test, analyte, limits=wide).problems


@pytest.mark.parametrize(
    ("last", "words"),
    [
        (0.98 * 2.0, "accounts for 2.0 %, the rest is within the precision"),
        (1.5, "accounts for 2.0 %, the rest may be precipitation"),
    ],
)
def test_a_fall_is_set_against_dilution(last, words):
    test = bottle([2, 24, 48], [1.0, 2.0, last], sd=[0.005] * 3, heads={"Cu": Head(6.8, 0.1)})
    texts = [p.found for p in metal_balance(test, "Cu").problems]
    assert any(words in text for text in texts), texts


def test_below_a_limit_is_anywhere_below_it():
    bound = np.array([-1, 0])
    test = bottle([2, 24], [0.01, 2.0], bound=bound, heads={"Cu": Head(6.8, 0.1)})
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.dissolved_g, [0.005, 2.0 + 0.02 * 0.005], rtol=1e-12)
    observed = observe(test, "Cu")
    assert observed.bound.tolist() == [-1, 0]
    assert_allclose(observed.value, [0.01, 2.0], rtol=1e-12)


def test_above_a_range_is_a_lower_bound():
    bound = np.array([0, 1])
    test = bottle([2, 24], [1.0, 2.0], bound=bound, heads={"Cu": Head(6.8, 0.1)})
    texts = [p.found for p in metal_balance(test, "Cu").problems]
    assert any("above 2 g/L at 24 h: its extraction is a lower bound" in t for t in texts)


def test_a_missing_assay_is_interpolated_and_told():
    test = bottle([2, 6, 10], [1.0, np.nan, 2.0], heads={"Cu": Head(6.8, 0.1)})
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.dissolved_g, [1.0, np.nan, 2.0 + 0.02 * (1.0 + 1.5)], rtol=1e-12)
    assert any("no Cu assay at 6 h" in p.found for p in balance.problems)
    observed = observe(test, "Cu")
    assert observed.row_time_h.tolist() == [2.0, 10.0]
    assert observed.operator.shape == (2, 3)


def test_a_residue_below_its_limit_is_a_bound():
    product = Product("residue", False, 480.0, {"Cu": (0.1, 0.01, 2)}, {"Cu": -1})
    test = bottle([24.0], [2.0], products=(product,), heads={"Cu": Head(6.8, 0.1)})
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.final_undissolved_g, 0.48 * 0.05, rtol=1e-12)
    assert_allclose(balance.sd["tail_kg_per_t"], 0.1 / np.sqrt(12), rtol=1e-12)
    observed = observe(test, "Cu")
    assert observed.bound.tolist() == [0, -1]
    assert observed.value[-1] == 0.1


def test_points_kept_out_of_a_fit():
    test = bottle(
        [2, 6, 24],
        [1.0, 1.5, 2.0],
        products=(solid(485.0, 2.0),),
        heads={"Cu": Head(6.8, 0.03, 3, 0.04)},
    )
    assert_allclose(observe(test, "Cu").head_sd_kg_per_t, 0.05, rtol=1e-12)
    kept = observe(test, "Cu", exclude=(6.0, "tail"))
    assert kept.row_kind == ("solution",) * 2
    assert kept.row_time_h.tolist() == [2.0, 24.0]
    assert kept.provisional
    whole = observe(test, "Cu")
    assert_allclose(kept.operator, whole.operator[[0, 2]], rtol=0, atol=0)
    assert observe(test, "Cu", exclude=("all",)).value.size == 0
    with pytest.raises(InputProblems, match="has no reading at 7 h. Allowed: 2, 6, 24 h"):
        observe(test, "Cu", exclude=(7.0,))


def test_without_a_head_assay_the_calculated_one_is_next_to_no_prior():
    test = bottle([24.0], [2.0], products=(solid(500.0, 2.0),))
    observed = observe(test, "Cu")
    assert_allclose(observed.head_kg_per_t, 6.0, rtol=1e-12)
    assert observed.head_sd_kg_per_t == observed.head_kg_per_t


def test_a_log_of_many_readings_is_balanced_and_not_fitted():
    count = 100_000
    test = bottle(
        np.arange(1.0, count + 1.0),
        np.full(count, 1.0),
        aliquot_mL=np.full(count, 0.001),
        heads={"Cu": Head(6.8, 0.1)},
    )
    assert_allclose(metal_balance(test, "Cu").dissolved_g[-1], 1.0 + 0.099999, rtol=1e-9)
    with pytest.raises(InputProblems, match="B1 has 100000 readings. Allowed: at most 2000"):
        observe(test, "Cu")


def test_unknown_analytes_name_the_nearest():
    test = bottle([24.0], [2.0])
    with pytest.raises(InputProblems, match="B1 has no 'CU'. Allowed: Cu. Try: Cu"):
        metal_balance(test, "CU")
    with pytest.raises(InputProblems, match="no readings of 'Zn'"):
        observe(test, "Zn")


def test_extraction_alone_is_the_identity():
    observed = observed_from_extraction([1.0, 2.0], [0.3, 0.5], 0.01, test="A")
    assert_allclose(observed.expected(np.array([0.3, 0.5])), observed.value, rtol=0, atol=0)
    assert_allclose(observed.sd, 0.01, rtol=0, atol=0)
    assert (observed.head_kg_per_t, observed.head_sd_kg_per_t) == (1.0, 0.0)
    assert observed.row_kind == ("extraction", "extraction")
    plain = observed_from_extraction([1.0, 2.0], [0.3, 0.5])
    assert not plain.sd_given
    assert plain.sd.tolist() == [1.0, 1.0]


@pytest.mark.parametrize(
    ("time", "extraction", "sd", "message"),
    [
        ([2.0, 1.0], [0.1, 0.2], None, "time_h: a time that is negative or goes back"),
        ([-1.0, 1.0], [0.1, 0.2], None, "time_h: a time that is negative or goes back"),
        ([1.0], [0.1, 0.2], None, "one extraction a time"),
        ([], [], None, "one extraction a time"),
        ([1.0, 2.0], [0.1, np.nan], None, "extraction: a value that is not finite"),
        ([1.0, np.inf], [0.1, 0.2], None, "time_h: a value that is not finite"),
        ([1.0, 2.0], [0.1, 0.2], 0.0, "sd: 0. Allowed: above 0"),
    ],
)
def test_extractions_without_a_meaning(time, extraction, sd, message):
    with pytest.raises(InputProblems, match=message):
        observed_from_extraction(time, extraction, sd)
