"""Settings of the fit: drives, terms, a reagent by balance, from sheets on disk."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from leachkin.campaign import read_campaign, run_campaign
from leachkin.errors import InputProblems
from leachkin.kinetics import Drive, ParticleLaw

TIME_H = np.array([1.0, 2.0, 4.0, 8.0, 12.0, 24.0, 36.0, 48.0])
TESTS = (
    "test,domain,kind,dry solids (g),solution (mL),size lower (mm),size upper (mm),"
    "temperature (degC),start NaCN (g/L),aliquots"
)
TOML = """format = 1
[campaign]
title = "two reagents"
metals = ["Au"]
reagent = "NaCN"
[tables]
tests = "tests.csv"
readings = "readings.csv"
heads = "heads.csv"
[precision]
solution = "2 %"
head = "2 %"
[fit]
laws = ["chemical"]
ultimate = "one"
"""


def write(folder: Path, more: str, *, titrated: bool = True, oxygen: bool = True) -> Path:
    """Bottles of gold in cyanide and oxygen, the scarcer one ruling; preference 2 at 0.5 g/L."""
    generator = np.random.default_rng(4)
    drive = Drive("either", {"reagent": 0.5, "second": 0.008}, {"preference": 2.0})
    tests, readings = [TESTS], []
    for i, (cyanide, oxygen_mg) in enumerate((c, o) for c in (0.25, 0.5, 2.0) for o in (4, 16)):
        pace = float(drive.rate({"reagent": cyanide, "second": oxygen_mg / 1000.0}))
        E = 0.9 * ParticleLaw(chemical=12.0).conversion(pace * TIME_H)
        tests.append(f"G{i},pit,bottle roll,1000,1500,0.075,0.106,25,{cyanide},returned")
        found = 2.0 * E / 1.5 * (1 + 0.02 * generator.standard_normal(TIME_H.size))
        for time, gold in zip(TIME_H, found, strict=True):
            row = [f"G{i}", f"{time:g}", "20", f"{gold:.4f}"]
            row += [f"{cyanide}"] if titrated else []
            readings.append(",".join(row + ([f"{oxygen_mg}"] if oxygen else [])))
    heading = ["test", "time (h)", "aliquot (mL)", "Au (mg/L)"]
    heading += ["free NaCN (g/L)"] if titrated else []
    heading += ["O2 (mg/L)"] if oxygen else []
    (folder / "tests.csv").write_text("\n".join(tests) + "\n")
    (folder / "readings.csv").write_text("\n".join([",".join(heading), *readings]) + "\n")
    (folder / "heads.csv").write_text("domain,Au (g/t)\npit,2.0\n")
    (folder / "campaign.toml").write_text(TOML + more)
    return folder / "campaign.toml"


def fitted(path: Path):
    return run_campaign(read_campaign(path), upto="kinetics").kinetics["pit/Au"]


def test_a_drive_of_two_reagents_from_the_sheets(tmp_path):
    stage = fitted(write(tmp_path, 'drive = "either"\n'))
    found = stage.fit.parameter("preference")
    reference = stage.law.drive.reference
    truth = 2.0 * (reference["second"] / 0.008) / (reference["reagent"] / 0.5)
    assert abs(np.log(found.value / truth)) < 3.5 * found.standard_error / found.value


def test_the_table_names_the_whole_reference_solution(tmp_path):
    result = run_campaign(read_campaign(write(tmp_path, 'drive = "either"\n')), upto="kinetics")
    notes = [table.caption for table in result.tables() if table.name.startswith("parameters")]
    assert any("drive either at second 0.008" in note for note in notes)


def test_a_species_that_was_not_read_is_asked_for(tmp_path):
    path = write(tmp_path, 'drive = "either"\n', oxygen=False)
    result = run_campaign(read_campaign(path), upto="kinetics")
    assert not result.kinetics
    assert any("a column O2 in the readings" in p.allowed for p in result.problems)


def test_terms_and_their_names_are_checked(tmp_path):
    stage = fitted(write(tmp_path, 'terms = ["lag"]\nreagent_order = "free"\n'))
    assert stage.fit.parameter("lag").unit == "h"
    with pytest.raises(InputProblems, match="did you mean 'lag'"):
        read_campaign(write(tmp_path, 'terms = ["lagg"]\n'))
    with pytest.raises(InputProblems, match="did you mean 'either'"):
        read_campaign(write(tmp_path, 'drive = "eiter"\n'))


def test_orders_by_resistance(tmp_path):
    stage = fitted(write(tmp_path, 'order_chemical = "free"\n'))
    assert stage.fit.parameter("order_chemical").standard_error > 0


@pytest.mark.slow
def test_the_reagent_by_balance_where_nobody_titrated(tmp_path):
    """Cyanide that the gold takes is far below what was added: nearly the law that is held."""
    held = fitted(write(tmp_path, "", titrated=False))
    by_balance = fitted(write(tmp_path, 'reagent_history = "balance"\n', titrated=False))
    assert by_balance.fit.parameter("tau_chemical").value == pytest.approx(
        held.fit.parameter("tau_chemical").value, rel=0.01
    )
    assert (
        by_balance.fit.parameter("tau_chemical").value != held.fit.parameter("tau_chemical").value
    )


TANK = """
[tank]
residence_times = ["6 h", "6 h", "6 h"]
temperature = "25 degC"
"""


def test_a_plant_says_what_its_solution_holds(tmp_path):
    """The scarcer reagent rules: less oxygen, less gold; without a word, it is asked for."""
    asked = run_campaign(read_campaign(write(tmp_path, 'drive = "either"\n' + TANK)), draws=0)
    assert asked.tank is None
    assert any("does not say reagent, second" in p.found for p in asked.problems)

    def gold(oxygen: str) -> float:
        held = f'[tank.solution]\nreagent = "0.5 g/L"\nsecond = "{oxygen}"\n'
        path = write(tmp_path, 'drive = "either"\n' + TANK + held)
        result = run_campaign(read_campaign(path), draws=20)
        assert result.tank is not None, result.problems
        assert any("held as [tank.solution] says" in note for note in result.tank.notes)
        return result.tank.extraction.at(-1).value

    poor, rich = gold("2 mg/L"), gold("16 mg/L")
    assert rich > poor + 0.05
    # by hand: one resistance, the pace is the drive at that solution
    drive = Drive("either", {"reagent": 0.5, "second": 0.008}, {"preference": 2.0})
    nodes, weights = np.polynomial.laguerre.laggauss(80)
    pace = float(drive.rate({"second": 0.002}))
    law = ParticleLaw(chemical=12.0)
    # three tanks of 6 h: gamma-distributed hours, by the law of one tank convolved three times
    hours = 6.0 * nodes
    three = weights * nodes**2 / 2.0
    assert poor == pytest.approx(0.9 * three @ law.conversion(pace * hours), abs=0.02)


def test_an_order_is_kept_where_the_rest_of_the_solution_is_held(tmp_path):
    plant = (
        TANK.replace("temperature", 'feed_reagent = "1 g/L"\nsolids = "500 kg/m3"\ntemperature')
        + '[tank.solution]\nsecond = "8 mg/L"\n'
    )
    path = write(tmp_path, 'drive = "two_reagents"\nreagent_order = "free"\n' + plant)
    tank = run_campaign(read_campaign(path), draws=20).tank
    assert tank is not None
    assert tank.reagent_g_per_L is not None
