"""The package's published values, one test each, from the files that ``leachkin verify`` reads."""

import pytest

from leachkin.errors import TableError
from leachkin.published_checks import check, outcomes_table, read_cases
from leachkin.published_checks.cases import read_data
from leachkin.published_checks.quantities import quantity

CASES = read_cases()


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.case.replace(" ", "_"))
def test_published_value(case):
    outcome = check(case)
    assert outcome.computed == pytest.approx(outcome.printed, rel=0, abs=case.tolerance * 1.001)
    assert outcome.ok


def test_every_named_check_is_there():
    """What a release promises to recompute, by source and count."""
    count = {}
    for case in CASES:
        count[case.source] = count.get(case.source, 0) + 1
    at_least = {
        "levenspiel1999": 6,
        "mcmurry_fay": 2,
        "kubilay2008": 1,
        "ashraf_succinic": 3,
        "worked_by_hand": 8,
        "general_chemistry_texts": 3,
        "zumdahl9": 2,
        "gilbert_science_in_context": 1,
        "nbs1982_crc": 6,
        "common_practice": 4,
        "shishkin2018": 3,
        "molar_masses": 24,
        "nist46": 5,
        "korson1969": 5,
        "tanaka2001": 4,
        "levich1962": 1,
        "crc_conductivity": 3,
    }
    assert {source: count.get(source, 0) >= n for source, n in at_least.items()} == dict.fromkeys(
        at_least, True
    )


def test_case_names_are_unique():
    names = [case.case for case in CASES]
    assert len(set(names)) == len(names)


def test_no_check_rests_on_memory_and_facts_of_the_trade_say_so():
    assert all(case.status != "from memory" for case in CASES)
    trade = [case for case in CASES if case.source == "common_practice"]
    assert trade
    assert all(case.status == "common practice" for case in trade)


def test_a_wrong_print_is_found():
    from dataclasses import replace

    case = next(case for case in CASES if case.case == "iron against copper: K")
    wrong = check(replace(case, printed="4.3e26"))
    assert not wrong.ok
    assert "DIFFERS" in outcomes_table((wrong,)).column("verdict")


def test_unknown_quantity_and_data_are_named():
    with pytest.raises(TableError, match="nearest: standard_potential"):
        quantity("standard_potental")
    with pytest.raises(TableError, match="no published data set 'nothing'"):
        read_data("nothing")


def test_inputs_that_are_missing_or_no_number_are_named():
    with pytest.raises(TableError, match="has no input 'pressure'"):
        CASES[0].text("pressure")
    with pytest.raises(TableError, match="input 'law' is not numbers"):
        next(case for case in CASES if "law" in case.inputs).numbers("law")
