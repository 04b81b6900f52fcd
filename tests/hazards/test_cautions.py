"""Cautions: three states, number, limit, source, who decides; and what is never said."""

import dataclasses
import itertools

import chemicals
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import Precipitant, Solution, cementation_demand
from leachkin.errors import InputProblems
from leachkin.hazards import (
    GENERAL_CAUTION,
    RULES,
    Facts,
    ammonia_share,
    carbon_dioxide_L,
    cautions,
    cautions_table,
    facts_with_cementation,
    gas_reagents,
    limit_value,
    limits_of,
    sulphur_dioxide_share,
)
from leachkin.tables import sources

COPPER = Facts(
    acid=True, heap=True, acid_g_per_L=20.0, precipitant="iron", hydrogen_Nm3_per_h=128.0,
    arsenic_mg_per_kg=45.0, carbonate_share=0.009, bottle_solids_g=500.0, lift_m=6.0,
    solution_m3_per_h=797.0,
)  # fmt: skip
GOLD = Facts(cyanide=True, cyanide_g_per_L=0.5, pH=10.0, precipitant="zinc")


def by_name(facts):
    return {caution.name: caution for caution in cautions(facts)}


#   hazard, facts, state
STATES = [
    ("hydrogen cyanide", Facts(cyanide=True, pH=10.4), "present"),
    ("hydrogen cyanide", Facts(cyanide=True), "not measured"),
    ("hydrogen cyanide", Facts(cyanide=True, pH=10.5), "below limit"),
    ("arsine", Facts(acid=True, precipitant="iron", arsenic_mg_per_L=2.0), "present"),
    ("arsine", Facts(acid=True, precipitant="iron", arsenic_mg_per_kg=45.0), "not measured"),
    ("arsine", Facts(acid=True, precipitant="zinc", arsenic_mg_per_L=0.01,
                     below_detection={"arsenic_mg_per_L"}), "below limit"),
    ("stibine", Facts(acid=True, precipitant="zinc", antimony_mg_per_L=0.2), "present"),
    ("stibine", Facts(acid=True, precipitant="zinc"), "not measured"),
    ("stibine", Facts(acid=True, precipitant="zinc", antimony_mg_per_L=0.0), "below limit"),
    ("hydrogen", Facts(acid=True, precipitant="iron", hydrogen_Nm3_per_h=10.0), "present"),
    ("hydrogen", Facts(acid=True, precipitant="iron"), "not measured"),
    ("hydrogen", Facts(acid=True, precipitant="iron", hydrogen_Nm3_per_h=0.0), "below limit"),
    ("sulphuric acid", Facts(acid=True, acid_g_per_L=20.0), "present"),
    ("sulphuric acid", Facts(acid=True), "not measured"),
    ("sulphuric acid", Facts(acid=True, acid_g_per_L=0.0), "below limit"),
    ("carbon dioxide in a closed bottle",
     Facts(acid=True, bottle_solids_g=500.0, carbonate_share=0.009), "present"),
    ("carbon dioxide in a closed bottle", Facts(acid=True, bottle_solids_g=500.0), "not measured"),
    ("carbon dioxide in a closed bottle",
     Facts(acid=True, bottle_solids_g=500.0, carbonate_share=0.0), "below limit"),
    ("hydrogen sulphide", Facts(acid=True, sulphide_share=0.004), "present"),
    ("hydrogen sulphide", Facts(acid=True), "not measured"),
    ("hydrogen sulphide", Facts(acid=True, sulphide_share=0.0), "below limit"),
    ("mercury", Facts(cyanide=True, mercury_mg_per_kg=0.8), "present"),
    ("mercury", Facts(cyanide=True), "not measured"),
    ("mercury", Facts(cyanide=True, mercury_mg_per_L=0.001,
                      below_detection={"mercury_mg_per_L"}), "below limit"),
    ("cyanide at open water", Facts(cyanide=True, wad_cyanide_mg_per_L=80.0), "present"),
    ("cyanide at open water", Facts(cyanide=True), "not measured"),
    ("cyanide at open water", Facts(cyanide=True, wad_cyanide_mg_per_L=20.0), "below limit"),
    ("heap stability", Facts(heap=True, lift_m=6.0), "present"),
    ("heap stability", Facts(heap=True), "not measured"),
    ("containment", Facts(heap=True, solution_m3_per_h=797.0), "present"),
    ("containment", Facts(heap=True), "not measured"),
    ("zinc dust", Facts(cyanide=True, precipitant="zinc"), "present"),
    ("ammonia", Facts(reagents={"NH3"}, solution_pH=10.0), "present"),
    ("ammonia", Facts(reagents={"(NH4)2SO4"}), "not measured"),
    ("ammonia", Facts(ammonia_g_per_L=0.01, below_detection={"ammonia_g_per_L"}), "below limit"),
    ("sulphur dioxide", Facts(acid=True, reagents={"Na2S2O5"}, solution_pH=2.0), "present"),
    ("sulphur dioxide", Facts(reagents={"SO2"}), "not measured"),
    ("sulphur dioxide", Facts(cyanide=True, reagents={"SO2"}, solution_pH=9.0), "below limit"),
    ("chlorine", Facts(acid=True, reagents={"NaClO"}), "present"),
    ("chlorine", Facts(acid=True, reagents={"MnO2"}, chloride_g_per_L=2.0), "present"),
    ("chlorine", Facts(acid=True, reagents={"NaClO3", "HCl"}), "present"),
    ("chlorine", Facts(acid=True, reagents={"NaClO3"}), "not measured"),
    ("chlorine", Facts(cyanide=True, reagents={"NaClO"}), "not measured"),
    ("chlorine", Facts(acid=True, reagents={"KMnO4"}, chloride_g_per_L=0.0), "below limit"),
    ("chlorine", Facts(cyanide=True, reagents={"Ca(ClO)2"}, solution_pH=11.0), "below limit"),
]  # fmt: skip


@pytest.mark.parametrize(("name", "facts", "state"), STATES)
def test_states(name, facts, state):
    assert by_name(facts)[name].state == state


def test_hazards_with_no_part_in_the_circuit_are_left_out():
    assert cautions(Facts()) == ()
    assert "hydrogen cyanide" not in by_name(COPPER)
    assert "sulphuric acid" not in by_name(GOLD)
    assert "arsine" not in by_name(Facts(acid=True, precipitant="copper"))


def test_hydrogen_number_and_the_air_that_dilutes_it():
    caution = by_name(COPPER)["hydrogen"]
    assert caution.number == 128.0
    assert "12,800 Nm3/h of air" in caution.text
    assert "75 %" in caution.limit


def test_share_and_headspace_stand_beside_the_pH():
    """14 % of the cyanide is HCN at pH 10; 0.5 g/L NaCN comes to 158 ppm in a closed space."""
    text = by_name(GOLD)["hydrogen cyanide"].text
    assert "14 % of the free cyanide is HCN" in text
    assert "158 ppm" in text


def test_arsenic_in_the_ore_asks_for_the_solution_to_be_measured():
    text = by_name(COPPER)["arsine"].text
    assert "measure it before metal meets acid" in text
    assert "the ore holds 45 mg/kg" in text


def test_arsine_from_a_cyanide_precipitate_comes_with_its_acid_treatment():
    assert "when the precipitate meets acid" in by_name(GOLD)["arsine"].text


def test_carbon_dioxide_of_a_bottle():
    """500 g at 0.9 % CaCO3 gives 1.1 L."""
    assert_allclose(carbon_dioxide_L(500.0, 0.009), 1.1, rtol=0, atol=0.05)
    assert_allclose(by_name(COPPER)["carbon dioxide in a closed bottle"].number, 1.1, atol=0.05)


def test_limits_that_an_independent_library_prints():
    """``chemicals`` carries the limits of Ontario."""
    numbers = {"NH3": "7664-41-7", "SO2": "7446-09-5", "Cl2": "7782-50-5", "CO2": "124-38-9"}
    for substance, registry in numbers.items():
        value, unit = chemicals.TWA(registry)
        assert unit == "ppm"
        assert limit_value(substance, "Ontario TWA") == value
    mercury_ppm, _ = chemicals.TWA("7439-97-6")
    assert_allclose(limit_value("Hg", "Ontario TWA") / 200.59 * 24.465, mercury_ppm, rtol=1e-3)


def test_shares_of_gas_turn_at_their_pKa():
    assert_allclose(ammonia_share(9.25), 0.5, rtol=1e-12)
    assert_allclose(sulphur_dioxide_share(1.85), 0.5, rtol=1e-12)
    assert ammonia_share(11.0) > ammonia_share(8.0)
    assert sulphur_dioxide_share(1.0) > sulphur_dioxide_share(4.0)
    assert (
        "85 % of the ammonia is NH3 at pH 10"
        in by_name(Facts(reagents={"NH3"}, solution_pH=10.0))["ammonia"].text
    )


def test_reagents_are_known_by_formula_and_by_name():
    found = gas_reagents(["sodium metabisulphite", "NACLO3", "H2SO4", "scrap iron"])
    assert found == {"Na2S2O5", "NaClO3"}


def test_hypochlorite_and_cyanide_carry_a_word_of_their_own():
    text = by_name(Facts(cyanide=True, reagents={"NaClO"}, solution_pH=11.0))["chlorine"].text
    assert "cyanogen chloride" in text


def test_oxidants_without_acid_raise_no_chlorine():
    assert "chlorine" not in by_name(Facts(cyanide=True, reagents={"KMnO4"}, solution_pH=10.5))


def test_limits_in_print():
    assert limit_value("HCN", "NIOSH REL STEL") == 4.7
    assert limit_value("AsH3", "OSHA PEL TWA") == 0.05
    assert limit_value("AsH3", "NIOSH REL ceiling") == 0.002
    text, keys = limits_of("AsH3")
    assert "0.005 ppm" in text
    assert "from_memory" not in keys


def test_what_is_printed_from_memory_is_no_limit():
    text, keys = limits_of("SbH3")
    assert text == "Ontario TWA 0.1 ppm"
    assert keys == ("ontario_oel",)


def all_facts():
    readings = (None, 0.0, 3.0)
    for acid, cyanide, heap in itertools.product((True, False), repeat=3):
        for precipitant, value in itertools.product((None, "iron", "zinc"), readings):
            yield Facts(
                acid=acid, cyanide=cyanide, heap=heap, precipitant=precipitant,
                acid_g_per_L=value, cyanide_g_per_L=value, pH=None if value is None else value + 8,
                hydrogen_Nm3_per_h=value, arsenic_mg_per_L=value, antimony_mg_per_L=value,
                arsenic_mg_per_kg=value, mercury_mg_per_L=value, wad_cyanide_mg_per_L=value,
                sulphide_share=None if value is None else value / 10,
                carbonate_share=None if value is None else value / 10,
                bottle_solids_g=500.0, lift_m=value, solution_m3_per_h=value,
                reagents={"NH3", "SO2", "NaClO", "MnO2"}, chloride_g_per_L=value,
                solution_pH=None if value is None else value + 6,
            )  # fmt: skip


def test_no_caution_gives_an_all_clear_and_each_says_who_decides():
    states = set()
    for facts in all_facts():
        for caution in cautions(facts):
            words = " ".join(str(part) for part in dataclasses.astuple(caution)).casefold()
            assert "safe" not in words
            assert caution.defer_to
            assert all(key.strip() in sources() for key in caution.source.split(","))
            states.add(caution.state)
    assert states == {"present", "not measured", "below limit"}
    assert "safe" not in GENERAL_CAUTION.casefold()


def test_present_comes_first_and_the_table_stands_under_the_general_line():
    found = cautions(COPPER)
    order = ["present", "not measured", "below limit"]
    assert [order.index(caution.state) for caution in found] == sorted(
        order.index(caution.state) for caution in found
    )
    table = cautions_table(found)
    assert table.caption == GENERAL_CAUTION
    assert table.column("name") == [caution.name for caution in found]


def test_facts_take_what_cementation_knows():
    solution = Solution(
        {"Cu": 2.036}, flow_m3_per_h=797.0, ferric_g_per_L=0.9, oxygen_mg_per_L=6.0,
        arsenic_mg_per_L=3.0,
    )  # fmt: skip
    demand = cementation_demand(
        solution, Precipitant("iron", 0.96, 0.05), recovery=0.95, acid_taken_g_per_L=0.7
    )
    facts = facts_with_cementation(Facts(acid=True, solution_m3_per_h=900.0), demand)
    assert facts.precipitant == "iron"
    assert_allclose(facts.hydrogen_Nm3_per_h, 128, rtol=5e-3)
    assert facts.arsenic_mg_per_L == 3.0
    assert facts.antimony_mg_per_L is None
    assert facts.solution_m3_per_h == 900.0
    unknown = cementation_demand(solution, Precipitant("iron"), recovery=0.95)
    assert facts_with_cementation(Facts(), unknown).hydrogen_Nm3_per_h is None


@pytest.mark.parametrize(
    ("changes", "message"),
    [({"pH": 15.0}, "pH: 15"), ({"arsenic_mg_per_L": -1.0}, "arsenic_mg_per_L: -1.0"),
     ({"carbonate_share": 9.0}, "write 0.9 % as 0.009"),
     ({"temperature_K": 25.0}, "temperature_K"),
     ({"below_detection": {"arsenic"}}, "unknown fact 'arsenic'.*arsenic_mg_per_L")],
)  # fmt: skip
def test_facts_without_meaning_are_refused(changes, message):
    with pytest.raises(InputProblems, match=message):
        Facts(**changes)


def test_every_rule_is_raised_by_some_facts():
    raised = {caution.name for facts in all_facts() for caution in cautions(facts)}
    assert len(raised) == len(RULES)
