"""Volumes as laboratories keep them: every way of weighing a vessel gives the extraction back."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from leachkin.testwork import (
    Assays,
    Head,
    Product,
    VesselLog,
    metal_balance,
    observe,
    reagent_use,
)
from leachkin.testwork.recursion import solution_ledger
from tests.testwork.test_balance import bottle, liquid, solid

POLICIES = [
    "replaced by reagent solution",
    "replaced by water",
    "not replaced",
    "returned",
    "made up with reagent solution",
    "made up with water",
]


@dataclasses.dataclass
class Vessel:
    """A vessel followed drop by drop and grain by grain; nothing of the program is used."""

    solids: float
    volume: float
    head: float
    left: float  #: dry mass over charge once it has lost what it loses
    metal: float
    start: float

    def __post_init__(self):
        self.charge, self.extracted, self.mark = self.solids, 0.0, self.volume
        self.solids *= self.left

    def leach(self, extraction):
        """Grains in the vessel leach to an extraction; those taken out do not."""
        per_gram = self.head / self.left
        self.metal += self.solids * per_gram * (extraction - self.extracted)
        self.extracted = extraction

    def sample(self, taken, poured, back, solids):
        grade = self.metal / self.volume
        grain = self.head * (1.0 - self.extracted) / self.left
        self.metal -= grade * (taken + poured - back)
        self.volume -= taken + poured - back
        self.solids -= solids
        return grade, grain

    def add(self, volume, strength):
        self.volume += volume
        self.metal += volume * strength


def run(case):
    """Readings of a test and the test as the bench would write it down."""
    m = case["extraction"].size
    vessel = Vessel(
        case["solids"],
        case["volume"],
        case["head"],
        case["left"],
        case["start"] * case["volume"],
        case["start"],
    )
    policy = case["policy"]
    grades, grains, volumes = np.zeros(m), np.zeros(m), np.zeros(m)
    for i in range(m):
        vessel.volume -= case["lost"][i]
        vessel.leach(case["extraction"][i])
        volumes[i] = vessel.volume
        back = case["aliquot"][i] if policy == "returned" else case["returned"][i]
        grades[i], grains[i] = vessel.sample(
            case["aliquot"][i], case["poured"][i], back, case["slurry"][i]
        )
        gone = case["aliquot"][i] - back + case["poured"][i]
        comes = case["makeup"][i]
        if np.isnan(comes):
            comes = {"re": gone if policy.startswith("replaced") else 0.0, "no": 0.0}.get(
                policy[:2], max(vessel.mark - vessel.volume, 0.0)
            )
        vessel.add(comes, case["strength"][i])
    return grades, grains, volumes, vessel


def as_written(case, grades, grains, volumes, vessel, evaporation):
    """The test: evaporation as it was written, or as the volumes that were measured."""
    m = grades.size
    bounds = np.zeros(m, dtype=np.int64)
    log = VesselLog(
        volume_mL=volumes if evaporation == "measured" else None,
        evaporated_mL=case["lost"] if evaporation == "written" else None,
        returned_mL=None if case["policy"] == "returned" else case["returned"],
        decanted_mL=case["poured"],
        solids_g=case["slurry"],
        solids_assays={"Cu": Assays(grains, np.full(m, 1e-6), bounds)},
    )
    tail = case["head"] * (1.0 - case["extraction"][-1]) / case["left"]
    return bottle(
        np.arange(1.0, m + 1.0),
        grades,
        solids_g=case["solids"],
        solution_mL=case["volume"],
        aliquots=case["policy"],
        aliquot_mL=case["aliquot"],
        makeup_mL=case["makeup"],
        products=(solid(vessel.solids, tail),),
        heads={"Cu": Head(case["head"], 0.01)},
        start_metal_g_per_L={"Cu": case["start"]},
        makeup_metal_g_per_L={"Cu": case["strength"]},
        vessel=log,
    )


def unit(low, high, m):
    return st.lists(st.floats(low, high), min_size=m, max_size=m).map(np.array)


@st.composite
def cases(draw):
    m = draw(st.integers(1, 7))
    extraction = np.minimum.accumulate(draw(unit(0.05, 0.99, m))[::-1])[::-1]
    aliquot = draw(unit(0.0, 40.0, m))
    unwritten = np.array(draw(st.lists(st.booleans(), min_size=m, max_size=m)))
    slurry = draw(st.booleans())
    return {
        "policy": draw(st.sampled_from(POLICIES)),
        "extraction": extraction,
        "aliquot": aliquot,
        "returned": aliquot * draw(unit(0.0, 1.0, m)),
        "poured": draw(unit(0.0, 1.0, m)) * draw(st.sampled_from([0.0, 20.0])),
        "lost": draw(unit(0.0, 15.0, m)),
        "makeup": np.where(unwritten, np.nan, draw(unit(0.0, 30.0, m))),
        "strength": draw(unit(0.0, 0.5, m)),
        "slurry": draw(unit(0.0, 5.0, m)) if slurry else np.zeros(m),
        "start": draw(st.floats(0.0, 0.5)),
        "solids": draw(st.floats(100.0, 1000.0)),
        "volume": draw(st.floats(800.0, 3000.0)),
        "head": draw(st.floats(0.5, 20.0)),
        "left": 1.0 - draw(st.floats(0.0, 0.3)),
    }


@settings(max_examples=120, deadline=None, derandomize=True)
@given(case=cases(), evaporation=st.sampled_from(["measured", "written"]))
def test_every_way_to_keep_volumes_returns_the_extraction(case, evaporation):
    grades, grains, volumes, vessel = run(case)
    test = as_written(case, grades, grains, volumes, vessel, evaporation)
    E, charge_g = case["extraction"], case["solids"] * case["head"] / 1000.0
    brought = (case["start"] * case["volume"] + 30.0 * E.size) / 1000.0
    atol = 1e-13 * (1.0 + brought / charge_g)
    assert_allclose(solution_ledger(test).volume_mL, volumes, rtol=1e-12)
    balance = metal_balance(test, "Cu")
    assert_allclose(balance.extraction_on_assay_head, E, rtol=1e-11, atol=atol)
    assert_allclose(balance.extraction_on_calculated_head, E, rtol=1e-11, atol=atol)
    assert_allclose(balance.closure, 1.0, rtol=1e-11, atol=atol)
    assert balance.residue_g == vessel.solids
    observed = observe(test, "Cu")
    assert observed.row_kind == ("solution",) * E.size + ("tail",) * (E.size + 1)
    assert_allclose(observed.expected(E), observed.value, rtol=1e-11, atol=1e-13)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(case=cases())
def test_a_filtrate_of_all_that_is_left_says_the_same_as_the_last_reading(case):
    grades, grains, volumes, vessel = run(case)
    test = as_written(case, grades, grains, volumes, vessel, "measured")
    drained = liquid(vessel.volume, vessel.metal / vessel.volume)
    by_filtrate = dataclasses.replace(test, products=(*test.products, drained))
    found, other = metal_balance(by_filtrate, "Cu"), metal_balance(test, "Cu")
    atol = 1e-12 * (1.0 + case["start"] * case["volume"] / 1000.0)
    assert_allclose(found.final_dissolved_g, other.final_dissolved_g, rtol=1e-10, atol=atol)
    assert_allclose(found.closure, 1.0, rtol=1e-10, atol=atol)


def test_full_change_of_solution():
    # 500 g at 6.8 kg/t; all 1000 mL poured off at 1.36 g/L (40 %) and fresh solution put in;
    # the next reading has what leached since alone: 0.68 g more, 60 % in all
    log = VesselLog(decanted_mL=np.array([980.0, 0.0]))
    test = bottle([24.0, 48.0], [1.36, 0.68], heads={"Cu": Head(6.8, 0.1)}, vessel=log)
    ledger = solution_ledger(test)
    assert ledger.removed_mL.tolist() == [1000.0, 20.0]
    assert ledger.volume_mL.tolist() == [1000.0, 1000.0]
    assert_allclose(metal_balance(test, "Cu").extraction_on_assay_head, [0.4, 0.6], rtol=1e-12)
    assert_allclose(observe(test, "Cu").expected(np.array([0.4, 0.6])), [1.36, 0.68], rtol=1e-12)


def test_half_of_an_aliquot_put_back():
    # 20 mL taken, 15 mL of it returned after assay: 5 mL x 1.0 g/L left with the sample
    log = VesselLog(returned_mL=np.array([15.0, 15.0]))
    test = bottle([2.0, 24.0], [1.0, 2.0], heads={"Cu": Head(6.8, 0.1)}, vessel=log)
    assert_allclose(metal_balance(test, "Cu").dissolved_g, [1.0, 2.005], rtol=1e-12)


def test_what_evaporates_concentrates_the_solution():
    # 100 mL of water lost in a day: 2.0 g/L in 880 mL after one aliquot, not in 980 mL
    log = VesselLog(evaporated_mL=np.array([0.0, 100.0]))
    test = bottle(
        [2.0, 24.0], [1.0, 2.0], aliquots="not replaced", heads={"Cu": Head(6.8, 0.1)}, vessel=log
    )
    assert_allclose(metal_balance(test, "Cu").dissolved_g, [1.0, 0.88 * 2.0 + 0.02], rtol=1e-12)


def test_carbon_in_the_bottle_leaves_close_out_alone():
    # 20 g of carbon at 45 g/t Au, 0.02 mg/L left in 980 mL, 20 mL samples: readings say little
    gold = np.array([0.05e-3, 0.03e-3, 0.02e-3])
    products = (
        solid(20.0, 0.045, 0.001, name="loaded carbon", analyte="Au"),
        solid(990.0, 0.10e-3, 0.005e-3, analyte="Au"),
    )
    test = bottle(
        [2, 6, 24],
        gold,
        "Au",
        solids_g=1000.0,
        sd=[1e-6] * 3,
        products=products,
        heads={"Au": Head(1.0e-3, 0.05e-3)},
    )
    balance = metal_balance(test, "Au")
    dissolved_mg = 0.9 + 0.02 + 0.02 * (0.05 + 0.03)
    assert_allclose(balance.final_dissolved_g, dissolved_mg / 1000.0, rtol=1e-12)
    assert np.isnan(balance.extraction_on_assay_head).all()
    assert any("carbon" in p.found for p in balance.problems)
    observed = observe(test, "Au")
    assert observed.row_kind == ("solution", "tail")
    assert_allclose(observed.value[0], dissolved_mg / 1000.0, rtol=1e-12)
    E = np.array([0.3, 0.6, dissolved_mg])  # of a head of 1 mg: the last one alone is seen
    assert_allclose(observed.expected(E)[0], observed.value[0], rtol=1e-12)


def test_carbon_that_is_not_assayed_yet_gives_no_extraction():
    test = bottle(
        [2, 24], [1.0, 0.2], vessel=VesselLog(carbon_g=20.0), heads={"Cu": Head(6.8, 0.1)}
    )
    balance = metal_balance(test, "Cu")
    assert balance.final_dissolved_g is None
    assert balance.final_on_assay_head is None
    assert any("carbon is in the vessel and not assayed" in p.found for p in balance.problems)
    assert observe(test, "Cu").value.size == 0


def test_gravity_concentrate_is_part_of_the_head_and_not_of_the_leach():
    # 1000 g at 4.0 g/t: 10 g of concentrate at 100 g/t takes 1.0 mg; 2.4 mg dissolves, 0.6 stays
    products = (
        solid(10.0, 0.100, 0.002, name="gravity concentrate", analyte="Au"),
        solid(990.0, 0.6 / 990.0, 0.01e-3, analyte="Au"),
    )
    test = bottle(
        [24.0],
        [2.4e-3],
        "Au",
        sd=[0.03e-3],
        solids_g=1000.0,
        products=products,
        heads={"Au": Head(4.0e-3, 0.2e-3)},
    )
    balance = metal_balance(test, "Au")
    assert_allclose(balance.head_calculated_kg_per_t, 4.0e-3, rtol=1e-12)
    assert_allclose(balance.closure, 1.0, rtol=1e-12)
    assert_allclose(balance.final_on_calculated_head, 0.8, rtol=1e-12)
    assert_allclose(balance.final_on_assay_head, 0.8, rtol=1e-12)
    assert_allclose(balance.final_by_tail, 0.8, rtol=1e-12)
    assert_allclose(balance.final_with_gravity, 0.85, rtol=1e-12)
    observed = observe(test, "Au")
    assert_allclose(observed.head_kg_per_t, 3.0e-3, rtol=1e-12)
    assert_allclose(observed.expected(np.array([0.8])), observed.value, rtol=1e-12)
    panned = dataclasses.replace(products[0], name="gravity concentrate of tail")
    assert panned.is_undissolved_metal


def test_reagent_of_a_vessel_that_evaporates_and_is_changed():
    # 10 g/L at the start; at 24 h 8 g/L in 900 mL (100 mL of water lost): 10 - 7.2 = 2.8 g taken;
    # poured off and 1000 mL of fresh put in; at 48 h 9 g/L in 1000 mL: 1.0 g more
    log = VesselLog(volume_mL=np.array([900.0, 1000.0]), decanted_mL=np.array([880.0, 0.0]))
    test = bottle(
        [24.0, 48.0],
        [1.0, 0.5],
        aliquots="made up with reagent solution",
        reagent_g_per_L=10.0,
        free_reagent_g_per_L=np.array([8.0, 9.0]),
        reagent="H2SO4",
        vessel=log,
    )
    assert solution_ledger(test).makeup_mL[0] == 1000.0
    use = reagent_use(test)
    assert_allclose(use.taken_kg_per_t, np.array([2.8, 3.8]) / 0.5, rtol=1e-12)


TESTS = "test,dry solids (g),solution (mL),temperature (degC),aliquots,{}\nB1,500,1000,25,{},{}\n"


def read_one(read_texts, columns, cells, readings, policy="not replaced", **more):
    text = TESTS.format(columns, policy, cells)
    tests, problems = read_texts(tests=text, readings=readings, **more)
    return tests["B1"], problems


@pytest.mark.parametrize(
    ("columns", "cells"),
    [("bottle mass at start (g)", "1900"), ("bottle tare (g)", "400"), ("note", "")],
)
def test_volumes_by_the_mass_of_the_bottle(read_texts, columns, cells):
    # 400 g bottle, 500 g ore, 1000 mL water; 30 g lost in a day, 20 mL sampled, 40 g more lost
    readings = "test,time (h),aliquot (mL),bottle mass (g),Cu (g/L)\n"
    readings += "B1,0,0,1900,0\nB1,24,20,1870,1.0\nB1,48,20,1810,2.0\n"
    test, problems = read_one(read_texts, columns, cells, readings)
    assert_allclose(solution_ledger(test).volume_mL, [1000.0, 970.0, 910.0], rtol=1e-12)
    assert_allclose(solution_ledger(test).evaporated_mL, [0.0, 30.0, 40.0], atol=1e-9)
    assert not any(p.level == "ask" for p in problems)


def test_bottles_made_up_to_their_gross_mass(read_texts):
    # weighed before the sample and brought to 1900 g after it, by 1.05 g/mL solution
    readings = "test,time (h),aliquot (mL),bottle mass (g),bottle mass after (g),Cu (g/L)\n"
    readings += "B1,24,20,1879,1900,1.0\nB1,48,20,1868.5,1900,2.0\n"
    columns = "bottle mass at start (g),solution density (g/mL)"
    test, _ = read_one(read_texts, columns, "1900,1.05", readings)
    assert_allclose(solution_ledger(test).volume_mL, [980.0, 970.0], rtol=1e-12)
    assert_allclose(solution_ledger(test).makeup_mL, [40.0, 50.0], rtol=1e-12)


def test_masses_without_a_tare_are_asked(read_texts):
    readings = "test,time (h),aliquot (mL),bottle mass (g),Cu (g/L)\nB1,24,20,1870,1.0\n"
    test, problems = read_one(read_texts, "note", "", readings)
    assert test.vessel.volume_mL is None
    assert any("neither its tare nor its mass at the start" in p.found for p in problems)


@pytest.mark.parametrize(
    ("columns", "cells", "solution_mL", "words"),
    [
        ("pulp mass (g)", "1500", 1000.0, "the mass of the pulp"),
        ("pulp volume (mL),pulp density (g/mL)", "1185.2,1.2656", 1000.0, "volume and density"),
        ("pulp density (g/mL),solids density (g/mL)", "1.265625,2.7", 1000.0, "33.33 % solids"),
        ("solids (%),solution density (g/mL)", "40,1.25", 600.0, "40 % solids"),
    ],
)
def test_solution_by_what_is_known_of_the_pulp(read_texts, columns, cells, solution_mL, words):
    # 500 g of 2.7 g/mL in 1000 mL: 1185.185 mL of pulp at 1500/1185.185 = 1.265625 g/mL
    text = f"test,dry solids (g),temperature (degC),{columns}\nB1,500,25,{cells}\n"
    tests, problems = read_texts(tests=text)
    assert_allclose(tests["B1"].solution_mL, solution_mL, rtol=1e-4)
    assert any(words in p.found for p in problems)


def test_a_pulp_lighter_than_its_solids_stops(read_texts):
    tests, problems = read_texts(tests="test,dry solids (g),pulp mass (g)\nB1,500,400\n")
    assert not tests
    assert any("the mass of the pulp leaves -100 mL" in p.found for p in problems)


def test_slurry_samples_as_they_are_written(read_texts):
    # 30 g of slurry with 10 g of dry solids: 20 mL of solution left with it
    readings = (
        "test,time (h),slurry sample (g),sampled solids (g),Cu (g/L),Cu in sampled solids (%)\n"
    )
    readings += "B1,24,30,10,1.0,0.5\nB1,48,30,,2.0,\n"
    closeout = "test,product,mass (g),Cu (%)\nB1,residue,480,0.2\n"
    test, problems = read_one(read_texts, "note", "", readings, closeout=closeout)
    assert test.aliquot_mL.tolist() == [20.0, 20.0]
    assert test.vessel.solids_g.tolist() == [10.0, 10.0]
    assert any("33.3 % solids taken, as in the pulp at the start" in p.found for p in problems)
    assert_allclose(test.vessel.solids_assays["Cu"].value, [5.0, np.nan])
    assert_allclose(solution_ledger(test).share, [1.0, 0.98, 0.96], rtol=1e-12)
    # 1000 mL x 1.0, then (980 x 2.0 + 20 - 1000) / 0.98 more, of the whole charge
    assert_allclose(metal_balance(test, "Cu").dissolved_g, [1.0, 1.0 + 0.98 / 0.98], rtol=1e-12)


def test_more_slurry_than_charge_stops(read_texts):
    readings = "test,time (h),aliquot (mL),sampled solids (g),Cu (g/L)\nB1,24,20,600,1.0\n"
    test, problems = read_one(read_texts, "note", "", readings)
    assert any("hold more solids than the charge" in p.found for p in problems)
    assert test.vessel.solids_g is None


def test_all_of_the_solution_may_leave_where_as_much_comes(read_texts):
    readings = "test,time (h),aliquot (mL),decanted (mL),make-up (mL),Cu (g/L)\n"
    readings += "B1,24,20,980,1000,1.36\nB1,48,20,0,0,0.68\n"
    test, problems = read_one(read_texts, "note", "", readings)
    assert not any(p.level == "stop" for p in problems)
    assert_allclose(metal_balance(test, "Cu").dissolved_g, [1.36, 2.04], rtol=1e-12)
    drained = readings.replace("1000,1.36", "0,1.36")
    _, problems = read_one(read_texts, "note", "", drained)
    assert any("1000 mL are taken out of the 1000 mL" in p.found for p in problems)


def test_screen_assay_of_a_head(read_texts, settings):
    # 22.5 g at 48.0 g/t stays on the screen; 977.5 g passes, 1.10 and 1.30 g/t:
    # (22.5 x 48 + 977.5 x 1.20) / 1000 = 2.253 g/t
    heads = "domain,screen fraction,fraction mass (g),Au (g/t)\n"
    heads += "ore,plus,22.5,48.0\nore,minus,977.5,1.10\nore,minus,977.5,1.30\n"
    tests, problems = read_texts(
        tests="test,dry solids (g),solution (mL),temperature (degC)\nB1,500,1000,25\n", heads=heads
    )
    head = tests["B1"].heads["Au"]
    assert_allclose(head.value_kg_per_t, 2.253e-3, rtol=1e-12)
    coarse, fine = 22.5 * 48.0 * 0.02, 977.5 * 0.1  # stated 2 %, and the spread of two over root 2
    assert_allclose(head.sd_kg_per_t, np.hypot(coarse, fine) * 1e-6, rtol=1e-12)
    assert not problems or all(p.level == "note" for p in problems)


def test_a_screen_assay_without_its_coarse_part_is_asked(read_texts):
    heads = "domain,screen fraction,fraction mass (g),Au (g/t)\nore,minus,977.5,1.1\n"
    tests, problems = read_texts(
        tests="test,dry solids (g),solution (mL),temperature (degC)\nB1,500,1000,25\n", heads=heads
    )
    assert "Au" not in tests["B1"].heads
    assert any("has no coarse fraction with mass and Au" in p.found for p in problems)


def test_replicates_keep_their_values_and_rows(read_texts):
    closeout = "test,product,mass (g),Cu (%),replicate\n"
    closeout += "B1,residue,480,0.20,1\nB1,residue,,0.22,2\n"
    heads = "domain,Cu (%)\nore,0.68\nore,0.70\n"
    tests, _ = read_texts(
        tests="test,dry solids (g),solution (mL),temperature (degC)\nB1,500,1000,25\n",
        heads=heads,
        closeout=closeout,
    )
    (residue,) = tests["B1"].products
    assert_allclose(residue.values["Cu"], [2.0, 2.2])
    assert residue.rows["Cu"] == (2, 3)
    head = tests["B1"].heads["Cu"]
    assert_allclose(head.values_kg_per_t, [6.8, 7.0])
    assert_allclose(head.sds_kg_per_t, [0.136, 0.14])
    assert head.rows == (2, 3)


def test_plans_and_set_points(read_texts):
    text = "test,dry solids (g),solution (mL),temperature (degC),start H2SO4 (g/L),"
    text += "set-point H2SO4 (g/L),planned samples (h)\nB1,500,1000,25,20,15,2; 6; 24\n"
    tests, problems = read_texts(tests=text)
    assert tests["B1"].planned_h == (2.0, 6.0, 24.0)
    assert tests["B1"].set_point_g_per_L == 15.0
    assert tests["B1"].start_g_per_L == {"H2SO4": 20.0}
    _, problems = read_texts(tests=text.replace("2; 6; 24", "soon"))
    assert any("'soon' is no list of times" in p.found for p in problems)


def test_products_take_their_names(read_texts):
    assert Product("Loaded carbon", False, 1.0, {}).is_carbon
    assert Product("gravity conc", False, 1.0, {}).is_before_leach
    assert Product("residue", False, 1.0, {}).is_undissolved_metal
