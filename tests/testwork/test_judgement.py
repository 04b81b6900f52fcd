"""Judgement of tests: every reason for and against, and how often sound bottles are called so."""

import dataclasses

import numpy as np
import pytest

from leachkin.testwork import (
    BalanceLimits,
    Exclusion,
    Head,
    JudgementLimits,
    Product,
    judge_tests,
    judgement_table,
    mix_ups,
)
from tests.testwork.test_balance import bottle, solid
from tests.testwork.test_reconcile import copper, heads, replicates

LIMITS = JudgementLimits(
    balance=BalanceLimits({"": (0.90, 1.10), "Au": (0.85, 1.15)}),
    closure_remark={"": (0.95, 1.05), "Au": (0.90, 1.10)},
    head_spread={"": 0.05, "Au": 0.15},
    starved_share=0.02,
    low_reagent_share=0.5,
    unexplained_fall=0.10,
    copied_rows=3,
)


def judged(test, limits=LIMITS):
    (one,) = judge_tests([test], limits)
    return one


def reasons(test):
    return {(reason.code, reason.level) for reason in judged(test).reasons}


def test_a_sound_bottle_is_accepted():
    one = judged(copper())
    assert (one.verdict, one.reasons, one.repeats) == ("accept", (), ())
    assert one.key == "oxide/Cu"
    record = judgement_table([one]).to_records()[0]
    assert record["verdict"] == "accept"
    assert record["low"] < record["extraction"] < record["high"]


@pytest.mark.parametrize(
    ("head", "verdict"),
    [((6.9,) * 3, "accept"), ((7.4,) * 3, "accept with remarks"), ((8.0,) * 3, "repeat")],
)
def test_closure_is_held_against_the_limits_of_its_analyte(head, verdict):
    one = judged(copper(head=head))
    assert one.verdict == verdict
    if verdict == "repeat":
        first = one.reasons[0]
        assert (first.code, first.limit) == ("closure", "0.90 to 1.10")
        assert "0.8" in first.text
        assert first.repeat.startswith("last solution first (it has no replicate)")


def gold(head, tails=(0.60, 0.60)):
    """1000 g in 1500 mL, 1.6 mg/L at the end: 2.4 mg dissolved beside 0.6 mg."""
    grades = np.array([0.8, 1.2, 1.6]) / 1000
    return bottle(
        [2, 6, 24],
        grades,
        "Au",
        sd=0.03 * grades,
        solids_g=1000.0,
        solution_mL=1500.0,
        aliquot_mL=np.zeros(3),
        heads={"Au": Head(1e-3 * head, 0.1e-3, 1, 0.1e-3)},
        products=(replicates("residue", 990.0, tuple(1e-3 * t for t in tails), 0.1, analyte="Au"),),
    )


@pytest.mark.parametrize(
    ("head", "verdict"), [(3.0, "accept"), (3.4, "accept with remarks"), (3.6, "repeat")]
)
def test_gold_has_wider_limits(head, verdict):
    # calculated 2.994 g/t: closures 0.998, 0.881, 0.832
    assert judged(gold(head)).verdict == verdict


CASES = {
    "over extraction": (copper(head=(4.5, 4.5, 4.5)), "repeat"),
    "head spread": (copper(heads=heads((6.0, 6.8, 7.6), 0.12, 0.02)), "remark"),
    "starved": (
        copper(
            reagent="H2SO4",
            reagent_g_per_L=20.0,
            free_reagent_g_per_L=np.array([5.0, 0.1, 0.1]),
        ),
        "remark",
    ),
    "low reagent": (
        copper(
            reagent="H2SO4",
            reagent_g_per_L=20.0,
            free_reagent_g_per_L=np.array([15.0, 12.0, 9.0]),
        ),
        "remark",
    ),
    "residue mass": (copper(products=(replicates("residue", 520.0, (1.9, 1.9), 0.03),)), "repeat"),
    "aliquots": (copper(aliquots=None), "remark"),
    "no closure": (copper(heads={}), "remark"),
    "gross error": (copper(tails=(1.6, 2.5)), "repeat"),
}


@pytest.mark.parametrize("code", CASES)
def test_every_reason(code):
    test, level = CASES[code]
    assert (code, level) in reasons(test)
    assert judged(test).verdict == ("repeat" if level == "repeat" else "accept with remarks")


def test_a_starved_test_says_what_its_plateau_is_not():
    (reason,) = judged(CASES["starved"][0]).reasons
    assert reason.text == (
        "H2SO4 0.1 g/L at 6 h, 0.5 % of its start: starved, so that a plateau is not the ultimate "
        "extraction"
    )
    assert reason.limit == "2 % of the start"


def test_a_residue_that_was_not_weighed_gives_bounds():
    unweighed = dataclasses.replace(replicates("residue", 1.0, (2.04, 2.04), 0.03), amount=None)
    one = judged(copper(products=(unweighed,)))
    assert ("residue mass", "remark") in reasons(copper(products=(unweighed,)))
    text = next(r.text for r in one.reasons if r.code == "residue mass")
    assert text == "the residue was not weighed: 70.7 to 72.8 % extracted"


@pytest.mark.parametrize(
    ("last", "level", "words"),
    [
        (2.4 * 0.98, None, ""),
        (2.4 * 0.91, "remark", "falls by 9.0 % from 6 h to 24 h, dilution is 2.0 %"),
        (2.4 * 0.80, "repeat", "falls by 20.0 % from 6 h to 24 h, dilution is 2.0 %"),
    ],
)
def test_a_fall_beyond_dilution(last, level, words):
    tail = (6.8 * 500 - 1000 * 2.4 - 20 * 1.8) / 485
    test = copper(solution=(1.8, 2.4, last), tails=(tail, tail), head=(6.8, 6.8, 6.8))
    found = [r for r in judged(test).reasons if r.code == "fall"]
    assert [r.level for r in found] == ([] if level is None else [level])
    if level is not None:
        assert found[0].text.startswith(words)


def test_all_of_it_at_the_first_reading():
    tail = (6.8 * 500 - 1000 * 2.45 - 20 * 4.82) / 485
    test = copper(solution=(2.40, 2.42, 2.45), tails=(tail, tail))
    assert ("no rate", "remark") in reasons(test)
    two = bottle([2, 24], [1.0, 2.0], heads={"Cu": Head(6.8, 0.1)})
    assert ("no rate", "remark") in reasons(two)


def test_running_and_excluded_tests():
    running = judged(copper(products=()))
    assert running.verdict == "running"
    exclusion = Exclusion("B1", None, "bottle cracked", "A. B.")
    one = judged(copper(head=(8.4,) * 3, exclusions=(exclusion,)))
    assert one.verdict == "excluded"
    assert one.reasons[0].text == "bottle cracked (A. B.)"
    late = Exclusion("B1", 24.0, "sampled twice", "A. B.")
    assert judged(copper(exclusions=(late,))).verdict == "accept"


def test_judgements_of_chosen_analytes():
    assert judge_tests([copper()], LIMITS, ["Zn"]) == ()
    assert [j.analyte for j in judge_tests([copper()], LIMITS, ["Cu"])] == ["Cu"]


def named(name, **changes):
    return dataclasses.replace(copper(**changes), name=name)


def test_copied_rows():
    one, other = named("B7"), named("B8")
    (found,) = mix_ups([one, other], 3)
    assert (found.kind, found.tests) == ("copied rows", ("B7", "B8"))
    assert found.text == "3 readings of B7 and B8 are the same in every analyte (2, 6, 24 h)"
    assert mix_ups([one, other], 4) == ()
    changed = named("B8", solution=(1.0, 1.81, 2.4))
    assert mix_ups([one, changed], 3) == ()
    judgements = judge_tests([one, other], LIMITS)
    assert [j.verdict for j in judgements] == ["repeat", "repeat"]
    assert judgements[0].repeats == ("look at the certificates first",)


def of_extraction(name, share, tail_of=None):
    """A bottle of 6.8 kg/t extracted to a share, with the residue of another share."""
    metal = 3.4 * share
    solution = np.array([0.4, 0.7, 1.0]) * metal
    solution[2] = metal - 0.02 * solution[:2].sum()
    left = 3.4 * (1.0 - (share if tail_of is None else tail_of))
    tail = 1000.0 * left / 485.0
    return named(name, solution=solution, tails=(tail, 1.01 * tail))


def test_residues_exchanged():
    tests = [
        of_extraction("B1", 0.85, tail_of=0.55),
        of_extraction("B2", 0.55, tail_of=0.85),
        of_extraction("B3", 0.70),
        of_extraction("B4", 0.80),
    ]
    (found,) = mix_ups(tests, 3)
    assert (found.kind, found.tests) == ("residues exchanged", ("B1", "B2"))
    assert "and close with each other's residue" in found.text
    verdicts = {j.test: j.verdict for j in judge_tests(tests, LIMITS)}
    assert (verdicts["B1"], verdicts["B2"], verdicts["B3"]) == ("repeat", "repeat", "accept")
    assert mix_ups([of_extraction("B1", 0.85), of_extraction("B2", 0.55)], 3) == ()


def curve(name, level, exchanged=None, at=2):
    grades = level * np.array([0.3, 0.5, 0.65, 0.78, 0.85])
    if exchanged is not None:
        grades[at] = exchanged * np.array([0.3, 0.5, 0.65, 0.78, 0.85])[at]
    return dataclasses.replace(
        bottle([2, 6, 24, 48, 96], grades, sd=0.015 * grades, heads={"Cu": Head(6.8, 0.1)}),
        name=name,
    )


@pytest.mark.parametrize("at", [1, 2, 3])
def test_samples_exchanged(at):
    one, other = curve("B1", 1.0, 3.0, at), curve("B2", 3.0, 1.0, at)
    (found,) = mix_ups([one, other, curve("B3", 2.0)], 3)
    assert (found.kind, found.tests) == ("samples exchanged", ("B1", "B2"))
    assert found.text.startswith(f"Cu at {[2, 6, 24, 48, 96][at]} h is out of line in B1 and in B2")
    assert mix_ups([curve("B1", 1.0), curve("B2", 3.0)], 3) == ()
    # a low reading alone, without its partner, is no exchange
    assert mix_ups([curve("B1", 1.0), other], 3) == ()


def drawn(generator, extraction, exchange=False):
    tests = []
    for n, share in enumerate(extraction):
        test = of_extraction(f"B{n}", share)
        noisy = test.solution["Cu"].value * (1.0 + 0.015 * generator.standard_normal(3))
        charge = 1.0 + 0.02 * generator.standard_normal()
        (residue,) = test.products
        tails = tuple(
            residue.values["Cu"][0] * charge * (1.0 + 0.03 * generator.standard_normal(2))
        )
        heads = tuple(6.8 * (1.0 + 0.02 * generator.standard_normal(3)))
        tests.append(named(f"B{n}", solution=charge * noisy, tails=tails, head=heads))
    if exchange:
        first, second = tests[0].products, tests[1].products
        tests[0] = dataclasses.replace(tests[0], products=second)
        tests[1] = dataclasses.replace(tests[1], products=first)
    return tests


def test_how_often_sound_bottles_are_called_sound():
    generator = np.random.default_rng(12)
    shares = np.linspace(0.5, 0.9, 8)
    verdicts, mixed = [], 0
    for _ in range(25):
        tests = drawn(generator, shares)
        mixed += len(mix_ups(tests, 3))
        verdicts += [j.verdict for j in judge_tests(tests, LIMITS)]
    assert np.mean([v == "repeat" for v in verdicts]) < 0.04
    assert np.mean([v == "accept" for v in verdicts]) > 0.70
    assert mixed == 0


def test_how_often_exchanged_residues_are_found():
    generator = np.random.default_rng(13)
    hits = 0
    for _ in range(60):
        found = mix_ups(drawn(generator, [0.85, 0.55, 0.70, 0.75], exchange=True), 3)
        hits += [one.tests for one in found] == [("B0", "B1")]
    assert hits >= 50  # charges scatter by 2 %: a pair that closes poorly on its own hides it


def test_several_analytes_are_judged_apart():
    test = copper()
    iron = dataclasses.replace(test.solution["Cu"], value=np.array([0.1, 0.2, 0.3]))
    two = dataclasses.replace(test, solution={**test.solution, "Fe": iron})
    judgements = judge_tests([two], LIMITS)
    assert [j.analyte for j in judgements] == ["Cu", "Fe"]
    assert judgements[0].verdict == "accept"
    assert {r.code for r in judgements[1].reasons} == {"no closure"}


def test_gravity_concentrates_do_not_stand_for_a_residue():
    concentrate = Product("gravity concentrate", False, 5.0, {"Cu": (20.0, 0.5, 1)})
    assert judged(copper(products=(concentrate,))).verdict == "running"
    both = copper(products=(concentrate, solid(480.0, 1.86, 0.05)))
    assert judged(both).verdict == "accept"
